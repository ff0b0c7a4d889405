package geometry

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Tables are printed to four or five decimals: half a unit of the last one,
// with a little room for the rounding of the printed inputs.
const (
	fourDecimals = 0.51e-4
	fiveDecimals = 0.51e-5
)

// gradientOf returns the gradient of a slope S whose steepest descent has
// azimuth A, both degrees.
func gradientOf(slope, descent float64) (gE, gN float64) {
	t := math.Tan(slope * math.Pi / 180)
	a := descent * math.Pi / 180
	return -t * math.Sin(a), -t * math.Cos(a)
}

// sightOf returns the sight of an incidence and the azimuth g from the ground
// to the radar, degrees.
func sightOf(incidence, toRadar float64) Sight {
	return NewSight(Angle(incidence)*Degree, Angle(toRadar+180)*Degree)
}

// Local incidence, slope in the range plane and signed range incidence:
// cos LIA = cos th cos S + sin th sin S cos(A - g), tan alpha = tan S cos(A -
// g), evaluated outside this program. Relations: Kropatsch & Strobl 1990 and
// Schreier 1993 (from memory).
func TestFacetAngles(t *testing.T) {
	rows := []struct {
		th, slope, descent, g float64
		lia, alpha, thp       float64
		layover, shadow       bool
	}{
		{39, 20, 270, 270, 19.0000, 20.0000, 19.0000, false, false},
		{39, 20, 90, 270, 59.0000, -20.0000, 59.0000, false, false},
		{39, 20, 0, 270, 43.0903, 0, 39.0000, false, false},
		{39, 20, 315, 270, 28.0575, 14.4328, 24.5672, false, false},
		{35, 30, 300, 260, 21.7052, 23.8587, 11.1413, false, false},
		{45, 45, 315, 270, 31.3997, 35.2644, 9.7356, false, false},
		{23, 30, 270, 270, 7.0000, 30.0000, -7.0000, true, false},
		{30, 35, 250, 280, 16.7100, 31.2325, -1.2325, true, false},
		{39, 55, 90, 270, 94.0000, -55.0000, 94.0000, false, true},
	}
	for _, r := range rows {
		t.Run(fmt.Sprintf("%g_%g_%g_%g", r.th, r.slope, r.descent, r.g), func(t *testing.T) {
			s := sightOf(r.th, r.g)
			f := s.Facet(gradientOf(r.slope, r.descent))
			assert.InDelta(t, r.lia, f.LocalIncidence().Degrees(), fourDecimals)
			assert.InDelta(t, r.alpha, s.RangeSlope(f).Degrees(), fourDecimals)
			assert.InDelta(t, r.thp, f.RangeIncidence().Degrees(), fourDecimals)
			assert.Equal(t, r.layover, f.ActiveLayover())
			assert.Equal(t, r.shadow, f.SelfShadow())
			n := Normal(gradientOf(r.slope, r.descent))
			assert.InDelta(t, r.lia, math.Acos(n.Dot(s.Along))*180/math.Pi, fourDecimals)
		})
	}
}

// Slant ratio to level ground of a two-dimensional fore slope, D / (H cot a sin
// th) with D = H cos th - H cot a sin th; terms of Kropatsch & Strobl 1990
// (from memory).
func TestForeshortening(t *testing.T) {
	rows := []struct{ slope, th, ratio float64 }{
		{20, 23, 0.1425}, {45, 23, -1.3559}, {45, 39, -0.2349}, {30, 23, -0.3602},
		{15, 39, 0.6691}, {30, 45, 0.4226}, {50, 35, -0.7020},
	}
	for _, r := range rows {
		for _, g := range []float64{0, 77, 200, 270} {
			s := sightOf(r.th, g)
			f := s.Facet(gradientOf(r.slope, g))
			assert.InDelta(t, r.ratio, s.Foreshortening(f), fourDecimals, "%+v towards %g", r, g)
			// The slant length from foot to crest over 1000 m of height.
			run := 1000 / math.Tan(r.slope*math.Pi/180)
			want := run*math.Sin(r.th*math.Pi/180) - 1000*math.Cos(r.th*math.Pi/180)
			assert.InDelta(t, want, run*s.SlantPerGround(f), 1e-9)
		}
	}
}

// The slant range of points a metre apart on a tilted plane, seen from an
// antenna far away in the range plane, grows as SlantPerGround says, also when
// the range plane leans.
func TestSlantPerGroundAgainstDistances(t *testing.T) {
	const seed = 20240611
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	for range 200 {
		los := LineOfSight(Angle(15+60*rnd.Float64())*Degree, Angle(360*rnd.Float64())*Degree)
		travel := ENU{rnd.NormFloat64(), rnd.NormFloat64(), 0.02 * rnd.NormFloat64()}
		travel = los.Cross(travel.Cross(los)).Unit() // zero Doppler
		if math.Abs(travel.Up) > 0.3 {
			continue
		}
		s := SightFrom(los, travel)
		gE, gN := 0.5*rnd.NormFloat64(), 0.5*rnd.NormFloat64()
		// The range line on the tilted plane: level ground direction d with
		// travel . (dE, dN, gE dE + gN dN) = 0.
		dE, dN := travel.North+travel.Up*gN, -(travel.East + travel.Up*gE)
		l := math.Hypot(dE, dN)
		if dE*los.East+dN*los.North > 0 {
			l = -l
		}
		dE, dN = dE/l, dN/l
		step := ENU{dE, dN, gE*dE + gN*dN}
		f := s.Facet(gE, gN)
		// Far away, range falls by the step's part along the line of sight.
		assert.InDelta(t, -step.Dot(los), s.SlantPerGround(f), 1e-12)
		level := ENU{travel.North, -travel.East, 0}
		l = math.Hypot(level.East, level.North)
		if level.Dot(los) > 0 {
			l = -l
		}
		assert.InDelta(t, -step.Dot(los)/(-level.Dot(los)/l), s.Foreshortening(f), 1e-10)
		assert.InDelta(t, 5/math.Abs(step.Dot(los)), s.GroundResolution(f, 5), 1e-6*5/math.Abs(step.Dot(los)))
	}
}

// Illuminated area relative to level ground, dB: sin th / cos psi and tan th
// cos LIA / cos psi. Ulander 1996 and Small 2011 (from memory), evaluated
// outside this program.
func TestAreaFactors(t *testing.T) {
	rows := []struct{ th, slope, turn, sigma, gamma float64 }{
		{39, 0, 0, 0, 0},
		{39, 20, 0, 2.862, 3.714},
		{39, 20, 45, 1.931, 2.483},
		{39, 20, 90, 0.270, 0.000},
		{39, 20, 180, -1.342, -3.129},
		{23, 20, 0, 8.731, 9.085},
	}
	for _, r := range rows {
		s := sightOf(r.th, 250)
		f := s.Facet(gradientOf(r.slope, 250+r.turn))
		assert.InDelta(t, r.sigma, 10*math.Log10(s.SigmaArea(f)), 0.51e-3, "%+v", r)
		assert.InDelta(t, r.gamma, 10*math.Log10(s.GammaArea(f)), 0.51e-3, "%+v", r)
	}
	s := sightOf(45, 250)
	limit := Facet{Along: 1, Above: 0, Across: 0}
	assert.True(t, math.IsInf(s.SigmaArea(limit), 1))
	assert.True(t, math.IsInf(s.GroundResolution(limit, 5), 1))
	turned := s.Facet(gradientOf(60, 70))
	assert.Zero(t, s.SigmaArea(turned))
	assert.Zero(t, s.GammaArea(turned))
}

// Two-dimensional values of the same source: cos psi and cos LIA.
func TestFacetComponents(t *testing.T) {
	rows := []struct{ th, slope, turn, psi, lia float64 }{
		{39, 0, 0, 0.62932, 0.77715},
		{39, 20, 0, 0.32557, 0.94552},
		{39, 20, 45, 0.40342, 0.88248},
		{39, 20, 90, 0.59137, 0.73028},
		{39, 20, 180, 0.85717, 0.51504},
		{23, 20, 0, 0.05234, 0.99863},
	}
	for _, r := range rows {
		s := sightOf(r.th, 121)
		f := s.Facet(gradientOf(r.slope, 121+r.turn))
		scale := math.Cos(r.slope * math.Pi / 180)
		assert.InDelta(t, r.psi, f.Above*scale, fiveDecimals)
		assert.InDelta(t, r.lia, f.Along*scale, fiveDecimals)
	}
}

// C = -sin th cos S cos(A - k) - cos th sin S and the sine of the range
// incidence, evaluated outside this program. Notti et al. 2014 (from memory).
func TestDownslope(t *testing.T) {
	rows := []struct{ th, slope, descent, k, share, sinRange float64 }{
		{39, 20, 90, 90, -0.85717, 0.85717},
		{39, 20, 270, 90, 0.32557, 0.32557},
		{39, 20, 0, 90, -0.26580, 0.62932},
		{39, 30, 120, 78, -0.79359, 0.88476},
		{39, 30, 250, 78, 0.15113, 0.16061},
		{23, 25, 258, 78, -0.03490, -0.03490},
	}
	for _, r := range rows {
		s := NewSight(Angle(r.th)*Degree, Angle(r.k)*Degree)
		gE, gN := gradientOf(r.slope, r.descent)
		assert.InDelta(t, r.share, s.Downslope(gE, gN), fiveDecimals, "%+v", r)
		assert.InDelta(t, r.sinRange, s.Facet(gE, gN).RangeIncidence().Sin(), fiveDecimals, "%+v", r)
	}
	s := NewSight(39*Degree, 78*Degree)
	assert.True(t, math.IsNaN(s.Downslope(0, 0)))
	// A slope of a thousandth of a degree keeps its value.
	gE, gN := gradientOf(0.001, 78)
	assert.InDelta(t, -math.Sin((39.001)*math.Pi/180), s.Downslope(gE, gN), 1e-12)
}

// tan POA = tan w / (sin phi - tan gam cos phi); Lee, Schuler & Ainsworth 2000
// (from memory), evaluated outside this program.
func TestOrientationShift(t *testing.T) {
	rows := []struct{ phi, facing, azimuth, poa float64 }{
		{45, 0, 10, 14.0019},
		{23, 0, 10, 24.2884},
		{39, 0, 10, 15.6521},
		{39, 10, 10, 19.7064},
		{39, -10, 10, 12.9574},
		{39, 20, 20, 46.4117},
		{39, -20, 20, 21.7526},
		{39, 38, 10, 82.8409},
	}
	for _, r := range rows {
		for _, heading := range []float64{0, 347, 123} { // right-looking
			k := Angle(heading+90) * Degree
			s := NewSight(Angle(r.phi)*Degree, k)
			up, across := math.Tan(r.facing*math.Pi/180), math.Tan(r.azimuth*math.Pi/180)
			h := Angle(heading) * Degree
			gE := up*k.Sin() + across*h.Sin()
			gN := up*k.Cos() + across*h.Cos()
			assert.InDelta(t, r.poa, s.Facet(gE, gN).OrientationShift().Degrees(), fourDecimals, "%+v", r)
		}
	}
}

// Perpendicular critical baseline, metres; Gatelli et al. 1994 (from memory),
// evaluated outside this program.
func TestCriticalBaseline(t *testing.T) {
	cases := []struct {
		ghz, mhz, km, th float64
		want             map[float64]float64 // by slope in the range plane
	}{
		{5.3, 15.55, 844.5, 23, map[float64]float64{0: 1051.7, 10: 572.0, -10: 1609.1, 20: 129.9}},
		{5.405, 56.5, 800, 33, map[float64]float64{0: 5430.8, 10: 3549.7, -10: 7798.3, 20: 1930.7}},
		{1.27, 28, 859.6, 38.66, map[float64]float64{0: 15161.6, 10: 10358.6, -10: 21542.0, 20: 6400.1}},
		{9.65, 150, 617, 35, map[float64]float64{0: 6715.5, 10: 4472.2, -10: 9590.7, 20: 2569.8}},
	}
	for _, c := range cases {
		for alpha, want := range c.want {
			s := sightOf(c.th, 70)
			f := s.Facet(gradientOf(alpha, 70))
			got := f.CriticalBaseline(SpeedOfLight/(c.ghz*1e9), c.km*1e3, c.mhz*1e6)
			assert.InDelta(t, want, got, 0.051, "%g GHz, alpha %g", c.ghz, alpha)
		}
	}
}

// Height of ambiguity for 100 m of perpendicular baseline, slant resolution
// and its ground projection, one fringe along the line of sight. Ferretti et
// al. 2007 and common practice (from memory), evaluated outside this program;
// the published across-track figure for the first case is at most 26.3 m.
func TestInterferometry(t *testing.T) {
	ha := []struct{ ghz, km, th, want float64 }{
		{5.3, 844.5, 23, 93.3},
		{5.405, 864.71, 39, 150.9},
		{1.27, 859.57, 38.66, 633.8},
		{9.65, 617, 35, 55.0},
	}
	for _, r := range ha {
		got := AmbiguityHeight(SpeedOfLight/(r.ghz*1e9), r.km*1e3, math.Sin(r.th*math.Pi/180), 100)
		assert.InDelta(t, r.want, got, 0.051, "%+v", r)
	}
	assert.InDelta(t, 9393, AmbiguityHeight(SpeedOfLight/5.3e9, 850e3, (23*Degree).Sin(), 1), 0.51)
	fringes := []struct{ ghz, mm float64 }{{5.3, 28.28}, {5.405, 27.73}, {9.65, 15.53}, {1.27, 118.03}}
	for _, r := range fringes {
		assert.InDelta(t, r.mm, 1e3*FringeDisplacement(SpeedOfLight/(r.ghz*1e9), 1), 0.0051)
	}
	assert.InDelta(t, 9.640, SlantResolution(15.55e6), 0.51e-3)
	s := sightOf(23, 10)
	flat := s.Facet(0, 0)
	assert.InDelta(t, 24.67, s.GroundResolution(flat, SlantResolution(15.55e6)), 0.0051)
	assert.Less(t, s.GroundResolution(flat, SlantResolution(15.55e6)), 26.3)
}

// Two right-looking passes, headings 347.2 and 192.8, incidence 39; Wright,
// Parsons & Lu 2004 (from memory), evaluated outside this program.
func TestSolveEastUp(t *testing.T) {
	asc := LineOfSight(39*Degree, 77.2*Degree)
	desc := LineOfSight(39*Degree, 282.8*Degree)
	for i, want := range []ENU{{-0.61368, -0.13942, 0.77715}, {0.61368, -0.13942, 0.77715}} {
		got := []ENU{asc, desc}[i]
		assert.InDelta(t, want.East, got.East, fiveDecimals)
		assert.InDelta(t, want.North, got.North, fiveDecimals)
		assert.InDelta(t, want.Up, got.Up, fiveDecimals)
	}
	move := ENU{20, 0, -10}
	assert.InDelta(t, -20.0451, asc.Dot(move), fourDecimals)
	assert.InDelta(t, 4.5022, desc.Dot(move), fourDecimals)
	s, ok := SolveEastUp(asc, desc)
	require.True(t, ok)
	solve := func(m ENU) (east, up float64) {
		a, b := asc.Dot(m), desc.Dot(m)
		return s.EastA*a + s.EastB*b, s.UpA*a + s.UpB*b
	}
	east, up := solve(move)
	assert.InDelta(t, 20, east, 1e-12)
	assert.InDelta(t, -10, up, 1e-12)
	move.North = 15
	assert.InDelta(t, -22.1365, asc.Dot(move), fourDecimals)
	assert.InDelta(t, 2.4108, desc.Dot(move), fourDecimals)
	east, up = solve(move)
	assert.InDelta(t, 20.000, east, 0.51e-3)
	assert.InDelta(t, -12.691, up, 0.51e-3)
	noiseEast, noiseUp := s.Noise()
	assert.InDelta(t, 1.152, noiseEast, 0.51e-3)
	assert.InDelta(t, 0.910, noiseUp, 0.51e-3)
	// Mirrored looks: the singular values are sqrt 2 times the components.
	assert.InDelta(t, 0.77715/0.61368, s.Condition(), 2e-5)
	_, ok = SolveEastUp(asc, asc)
	assert.False(t, ok)
}

// The three vectors are orthonormal and right-handed however they are made,
// and the three ways agree where the range plane is vertical.
func TestSightFrames(t *testing.T) {
	const seed = 7
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 2))
	const tol = 4e-16 * 8 // a few roundings
	for range 500 {
		th, k := Angle(1+88*rnd.Float64())*Degree, Angle(360*rnd.Float64())*Degree
		a := NewSight(th, k)
		b := SightAlong(a.Along)
		side := float64(1 - 2*rnd.IntN(2))
		c := SightFrom(a.Along, ENU{-7e3 * side * k.Cos(), 7e3 * side * k.Sin(), 0})
		for i, s := range []Sight{a, b, c} {
			for j, v := range [][2]ENU{{a.Along, s.Along}, {a.Above, s.Above}, {a.Across, s.Across}} {
				d := ENU{v[0].East - v[1].East, v[0].North - v[1].North, v[0].Up - v[1].Up}
				// A line close to vertical fixes its plane less well.
				require.InDelta(t, 0, math.Sqrt(d.Dot(d)), 100*tol, "sight %d vector %d", i, j)
			}
			cross := s.Along.Cross(s.Above)
			require.InDelta(t, 1, cross.Dot(s.Across), tol)
		}
		assert.InDelta(t, float64(th), float64(a.Along.Incidence()), 1e-14)
		assert.InDelta(t, 0, math.Remainder(float64(k-a.Along.LookAzimuth()), 2*math.Pi), 1e-13)
	}
}

// The polynomial against the standard library, and both angles against Atan2
// over the whole range of facets.
func TestArctan(t *testing.T) {
	const seed = 11
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 3))
	for i := range 4001 {
		x := float64(i-2000) / 2000
		require.InDelta(t, math.Atan(x), arctan(x), arctanError)
	}
	for range 20000 {
		s := NewSight(Angle(1+88*rnd.Float64())*Degree, Angle(360*rnd.Float64())*Degree)
		f := s.Facet(2*rnd.NormFloat64(), 2*rnd.NormFloat64())
		require.InDelta(t, math.Atan2(math.Hypot(f.Above, f.Across), f.Along), float64(f.LocalIncidence()), arctanError)
		require.InDelta(t, math.Atan2(f.Above, f.Along), float64(f.RangeIncidence()), arctanError)
	}
}

// NaN in gives NaN out, and never a class.
func TestPointNaN(t *testing.T) {
	s := NewSight(39*Degree, 78*Degree)
	f := s.Facet(math.NaN(), 0)
	for name, v := range map[string]float64{
		"local incidence": float64(f.LocalIncidence()), "range incidence": float64(f.RangeIncidence()),
		"range slope": float64(s.RangeSlope(f)), "foreshortening": s.Foreshortening(f),
		"ground resolution": s.GroundResolution(f, 1), "sigma": s.SigmaArea(f), "gamma": s.GammaArea(f),
		"downslope": s.Downslope(math.NaN(), 0), "orientation": float64(f.OrientationShift()),
		"critical baseline": f.CriticalBaseline(1, 1, 1), "ambiguity": AmbiguityHeight(1, math.NaN(), 1, 1),
		"vertical sight": SightAlong(ENU{0, 0, 1}).Above.East,
	} {
		assert.True(t, math.IsNaN(v), name)
	}
	assert.False(t, f.ActiveLayover())
	assert.False(t, f.SelfShadow())
}

// Exact ties, with numbers that binary floating point holds exactly: at 45
// degrees towards the west a slope of 1 lies along the wave front, and a slope
// of -1 along the ray.
func TestPointTies(t *testing.T) {
	r := math.Sqrt2 / 2
	s := SightAlong(ENU{-r, 0, r})
	assert.True(t, s.Facet(1, 0).ActiveLayover())
	assert.False(t, s.Facet(math.Nextafter(1, 0), 0).ActiveLayover())
	assert.True(t, s.Facet(-1, 0).SelfShadow())
	assert.False(t, s.Facet(math.Nextafter(-1, 0), 0).SelfShadow())
}

var sink float64

func BenchmarkFacet(b *testing.B) {
	s := NewSight(39*Degree, 78*Degree)
	grads := make([]float64, 4096)
	rnd := rand.New(rand.NewPCG(1, 1))
	for i := range grads {
		grads[i] = 0.4 * rnd.NormFloat64()
	}
	run := func(name string, f func(gE, gN float64) float64) {
		b.Run(name, func(b *testing.B) {
			i, sum := 0, 0.0
			for b.Loop() {
				sum += f(grads[i], grads[i+1])
				i = (i + 2) & 4095
			}
			sink = sum
		})
	}
	run("facet", func(e, n float64) float64 { f := s.Facet(e, n); return f.Above + f.Along + f.Across })
	run("local-incidence", func(e, n float64) float64 { f := s.Facet(e, n); return float64(f.LocalIncidence()) })
	run("range-incidence", func(e, n float64) float64 { f := s.Facet(e, n); return float64(f.RangeIncidence()) })
	run("foreshortening", func(e, n float64) float64 { f := s.Facet(e, n); return s.Foreshortening(f) })
	run("sigma-area", func(e, n float64) float64 { f := s.Facet(e, n); return s.SigmaArea(f) })
	run("downslope", func(e, n float64) float64 { return s.Downslope(e, n) })
	run("orientation", func(e, n float64) float64 { f := s.Facet(e, n); return float64(f.OrientationShift()) })
	run("critical-baseline", func(e, n float64) float64 { f := s.Facet(e, n); return f.CriticalBaseline(0.05, 8e5, 5e7) })
	run("sight-along", func(e, n float64) float64 { s := SightAlong(ENU{e, n, 0.7}); f := s.Facet(e, n); return f.Above })
	run("sight-from", func(e, n float64) float64 {
		s := SightFrom(ENU{e, n, 0.7}, ENU{n, -e, 0.001})
		f := s.Facet(e, n)
		return f.Above
	})
}
