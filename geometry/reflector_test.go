package geometry

import (
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"gonum.org/v1/gonum/spatial/r3"
)

// The table was computed from the formula of Ruck 1970 and Garthwaite et al.,
// Geoscience Australia Record 2015/03, in another program, dBsm.
func TestTriangularTrihedralTable(t *testing.T) {
	legs := []float64{0.5, 0.7, 1.0, 1.5, 2.5}
	for ghz, want := range map[float64][]float64{
		1.27:  {6.72, 12.56, 18.76, 25.80, 34.68},
		3.2:   {14.75, 20.59, 26.79, 33.83, 42.71},
		5.405: {19.30, 25.14, 31.34, 38.38, 47.26},
		9.65:  {24.33, 30.18, 36.38, 43.42, 52.29},
	} {
		for i, leg := range legs {
			got := Decibels(TriangularTrihedral(leg, WavelengthOf(ghz*1e9)))
			assert.InDelta(t, want[i], got, 0.005001, "%v GHz, leg %v m", ghz, leg)
		}
	}
}

// aperture integrates the effective aperture of a trihedral along its axis: the
// points of the silhouette whose mirror image through the apex, seen along the
// axis, lies on the silhouette too. A trihedral sends back what enters at one
// point at its mirror image. outline says which points of the plate of axes a
// and b, given as parts of the leg, belong to it.
func aperture(outline func(a, b float64) bool) float64 {
	axis := r3.Unit(r3.Vec{X: 1, Y: 1, Z: 1})
	right := r3.Unit(r3.Vec{X: 1, Y: -1})
	up := r3.Cross(axis, right)
	hit := func(p, q float64) bool {
		at := r3.Add(r3.Scale(p, right), r3.Scale(q, up))
		// The ray meets the plate on which the smallest coordinate becomes 0.
		c := []float64{at.X, at.Y, at.Z}
		least := min(c[0], c[1], c[2])
		var ab []float64
		for _, x := range c {
			if x-least > 0 {
				ab = append(ab, x-least)
			}
		}
		for len(ab) < 2 {
			ab = append(ab, 0)
		}
		return outline(ab[0], ab[1])
	}
	const n, half = 1200, 1.25
	count := 0
	for i := range n {
		for j := range n {
			p, q := half*(2*(float64(i)+0.5)/n-1), half*(2*(float64(j)+0.5)/n-1)
			if hit(p, q) && hit(-p, -q) {
				count++
			}
		}
	}
	return float64(count) * (2 * half / n) * (2 * half / n)
}

// The three coefficients of peak cross-section are 4 pi times the squared
// effective aperture. The sums have steps of 0.002; areas with outlines of about
// 4 are good to the same, as half a step beside the outline averages out.
func TestTrihedralApertures(t *testing.T) {
	for _, c := range []struct {
		name    string
		outline func(a, b float64) bool
		rcs     func(leg, wavelength float64) float64
		rounded float64 // as the literature rounds the coefficient
	}{
		{"triangular", func(a, b float64) bool { return a+b <= 1 }, TriangularTrihedral, 4.19},
		{"quarter disc", func(a, b float64) bool { return a*a+b*b <= 1 }, DiscTrihedral, 15.6},
		{"square", func(a, b float64) bool { return a <= 1 && b <= 1 }, SquareTrihedral, 37.7},
	} {
		a := aperture(c.outline)
		assert.InDelta(t, a, math.Sqrt(c.rcs(1, 1)/(4*math.Pi)), 0.002, c.name)
		assert.InDelta(t, c.rounded, c.rcs(1, 1), 0.05, c.name)
		// a^4 / lambda^2: twice the leg is 16 times, half the wavelength 4 times.
		assert.InEpsilon(t, 16*c.rcs(1, 1), c.rcs(2, 1), 1e-12, c.name)
		assert.InEpsilon(t, 4*c.rcs(1, 1), c.rcs(1, 0.5), 1e-12, c.name)
	}
}

// A plate of 0.3 m x 0.3 m at a wavelength of 3 cm has 4 pi 0.0081 / 0.0009 =
// 113.10 m^2; two of them as a dihedral, seen along the halving plane, have the
// projected area sqrt 2 F, hence twice as much.
func TestPlates(t *testing.T) {
	assert.InDelta(t, 113.097, FlatPlate(0.09, 0.03), 1e-3)
	assert.InEpsilon(t, FlatPlate(math.Sqrt2*0.09, 0.03), Dihedral(0.3, 0.3, 0.03), 1e-12)
	assert.InEpsilon(t, 2*FlatPlate(0.09, 0.03), Dihedral(0.9, 0.1, 0.03), 1e-12)
}

// Boresight: 35.264 degrees above the base plate, 54.736 from each normal. The
// tilts are those of the incidences in the published aiming rule, worked out in
// another program.
func TestAim(t *testing.T) {
	assert.InDelta(t, 35.264, TrihedralBoresight.Degrees(), 5e-4)
	assert.InDelta(t, 54.736, Angle(math.Acos(1/math.Sqrt(3))).Degrees(), 5e-4)
	assert.InDelta(t, 90, (TrihedralBoresight + Angle(math.Acos(1/math.Sqrt(3)))).Degrees(), 1e-9)
	for incidence, tilt := range map[Angle]float64{20: 34.74, 23: 31.74, 30: 24.74, 35: 19.74, 39: 15.74, 45: 9.74} {
		for _, azimuth := range []Angle{0, 77, 190, 283.5, 359} {
			aim := AimAt(LineOfSight(incidence*Degree, azimuth*Degree))
			where := fmt.Sprintf("incidence %v, azimuth %v", float64(incidence), float64(azimuth))
			assert.InDelta(t, tilt, aim.BaseTilt.Degrees(), 0.005, where)
			back := (aim.Azimuth - azimuth*Degree).Turn().Degrees()
			assert.InDelta(t, 180, back, 1e-9, where)
		}
	}
	assert.InDelta(t, 0, AimAt(LineOfSight(54.7356*Degree, 0)).BaseTilt.Degrees(), 1e-4)
	assert.Negative(t, float64(AimAt(LineOfSight(60*Degree, 0)).BaseTilt))
	// Turned by the tilt about its horizontal edge, the axis meets the radar.
	los := LineOfSight(39*Degree, 77*Degree)
	aim := AimAt(los)
	sin, cos := (aim.BaseTilt + TrihedralBoresight).Sin(), (aim.BaseTilt + TrihedralBoresight).Cos()
	axis := ENU{cos * aim.Azimuth.Sin(), cos * aim.Azimuth.Cos(), sin}
	assert.InDelta(t, 1, axis.Dot(los), 1e-12)
}

// Phase noise, displacement error and amplitude error against signal to
// clutter: formulas of Freeman 1992 and Ferretti et al. 2007, worked out in
// another program.
func TestSignalToClutterTable(t *testing.T) {
	for _, c := range []struct{ db, phase, c, x, l, amplitude float64 }{
		{10, 0.22361, 0.9870, 0.5528, 4.2004, 2.387},
		{15, 0.12574, 0.5550, 0.3109, 2.3621, 1.422},
		{20, 0.07071, 0.3121, 0.1748, 1.3283, 0.828},
		{25, 0.03976, 0.1755, 0.0983, 0.7470, 0.475},
		{30, 0.02236, 0.0987, 0.0553, 0.4200, 0.270},
	} {
		scr := FromDecibels(c.db)
		assert.InDelta(t, c.phase, PhaseNoise(scr), 5.001e-6, "%v dB", c.db)
		assert.InDelta(t, c.amplitude, AmplitudeError(scr), 5.001e-4, "%v dB", c.db)
		for ghz, want := range map[float64]float64{5.405: c.c, 9.65: c.x, 1.27: c.l} {
			wavelength := WavelengthOf(ghz * 1e9)
			mm := 1000 * LineOfSightError(scr, wavelength)
			assert.InDelta(t, want, mm, 5.001e-5, "%v dB, %v GHz", c.db, ghz)
			assert.InEpsilon(t, scr, RatioForError(mm/1000, wavelength), 1e-12, "%v dB, %v GHz", c.db, ghz)
		}
	}
}

// Clutter of -10 dB over a cell of 4 m x 12 m is 4.8 m^2; a leg that stands out
// by 20 dB has 480 m^2. At 5.405 GHz that is a = (3 lambda^2 480 / 4 pi)^(1/4) =
// 0.7708 m, worked by hand with lambda^2 = 0.0030765.
func TestLegForRatio(t *testing.T) {
	wavelength := WavelengthOf(5.405e9)
	clutter := Clutter(FromDecibels(-10), 4, 12)
	assert.InDelta(t, 4.8, clutter, 1e-12)
	leg := LegForRatio(100, clutter, wavelength)
	assert.InDelta(t, 0.7708, leg, 5e-4)
	assert.InEpsilon(t, 480, TriangularTrihedral(leg, wavelength), 1e-12)
	assert.InDelta(t, 20, Decibels(TriangularTrihedral(leg, wavelength)/clutter), 1e-9)
}
