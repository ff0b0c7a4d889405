package testterrain

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"

	"foldshade/geometry"
)

// The grid's inverse against PROJ 9.1, EPSG:32610 to EPSG:4326 with
// gdaltransform. The series ends before (61 + 662 T + 1320 T^2 + 720 T^3) D^7 /
// 5040 / cos(phi): with D = 0.031 at 67.5 degrees, T = tan^2 = 5.8, that is
// 3e-9 radians.
func TestTransverseAgainstPROJ(t *testing.T) {
	const tolerance = 3e-7 // degrees, 3 cm
	for _, row := range []struct{ x, y, lon, lat float64 }{
		{562710, 5114985, -122.187409766494, 46.1855536262813},
		{300000, 7500000, -127.696379477094, 67.5475282086941},
		{700000, 200000, -121.202057246996, 1.80856047826834},
	} {
		lon, lat := transverseInverse(row.x, row.y, -123)
		assert.InDelta(t, row.lon, lon, tolerance, "longitude of %v, %v", row.x, row.y)
		assert.InDelta(t, row.lat, lat, tolerance, "latitude of %v, %v", row.x, row.y)
	}
}

func TestMetricIsMetric(t *testing.T) {
	const turn = 17 * geometry.Degree
	g := Metric(100, 200, 20, 10, turn)
	for _, at := range [][2]float64{{0, 0}, {50, 100}, {99, 199}} {
		l := g.At(at[0], at[1])
		assert.InDelta(t, 20, math.Hypot(l.ColE, l.ColN), 2e-6)
		assert.InDelta(t, 10, math.Hypot(l.RowE, l.RowN), 1e-6)
		assert.InDelta(t, 107, geometry.Angle(math.Atan2(l.ColE, l.ColN)).Degrees(), 1e-5)
		assert.InDelta(t, -163, geometry.Angle(math.Atan2(l.RowE, l.RowN)).Degrees(), 1e-5)
	}
	east, north := Ground(g, 49.5, 99.5)
	assert.Zero(t, east)
	assert.Zero(t, north)
}

// Ridge against the table of the project's reference notes, section 5, whose
// numbers follow from the slant intervals of a crest of 1000 m; its 50/60/35
// row notes that the fold behind the crest lies in shadow.
func TestRidgeAgainstTable(t *testing.T) {
	for _, row := range []struct{ fore, back, incidence, before, behind, shadow float64 }{
		{20, 30, 23, 0, 0, 0},
		{45, 30, 23, 1355.852, 574.477, 0},
		{45, 30, 39, 234.897, 137.129, 0},
		{30, 30, 23, 623.802, 264.306, 0},
		{15, 70, 39, 0, 0, 809.784},
		{30, 60, 45, 0, 0, 1000.000},
		{50, 60, 35, 589.048, 0, 700.208},
	} {
		p := Ridge{Top: 1000, Fore: geometry.Angle(row.fore) * geometry.Degree, Back: geometry.Angle(row.back) * geometry.Degree}
		i := geometry.Angle(row.incidence) * geometry.Degree
		from, to, ok := p.Fold(i)
		assert.Equal(t, row.before > 0, ok, "%v", row)
		if ok {
			assert.InDelta(t, row.before, -1000/p.Fore.Tan()-from, 0.001, "%v", row)
		}
		if ok && row.shadow == 0 {
			assert.InDelta(t, row.behind, to, 0.001, "%v", row)
		}
		assert.InDelta(t, row.shadow, p.Shadow(i), 0.001, "%v", row)
	}
}

// The numbers in the comments of the surfaces.
func TestCommentedBoundaries(t *testing.T) {
	const deg = geometry.Degree
	check := func(name string, kind func(s float64) int, at float64, before, behind int) {
		t.Helper()
		assert.Equal(t, before, kind(at-0.1), "%s: before %v", name, at)
		assert.Equal(t, behind, kind(at+0.1), "%s: behind %v", name, at)
	}
	up, down := Step{Rise: 100}, Step{Rise: -100}
	check("step up", func(s float64) int { return up.Kind(s, 39*deg) }, -123.5, Open, Folded)
	check("step up", func(s float64) int { return up.Kind(s, 39*deg) }, 123.5, Folded, Open)
	check("step down", func(s float64) int { return down.Kind(s, 39*deg) }, 81.0, Hidden, Open)
	ridge := Ridge{Top: 1000, Fore: 45 * deg, Back: 30 * deg}
	check("ridge", func(s float64) int { return ridge.Kind(s, 23*deg) }, -2355.9, Open, Folded)
	check("ridge", func(s float64) int { return ridge.Kind(s, 23*deg) }, 574.5, Folded, Open)
	cone := Cone{Top: 300, Slope: 60 * deg}
	check("cone", func(s float64) int { return cone.Kind(s, 0, 45*deg) }, 300, Hidden, Open)
	check("cone", func(s float64) int { return cone.Kind(s, 0, 45*deg) }, -300, Open, Folded)
	pit := Pit{Depth: 200, Slope: 60 * deg}
	check("pit", func(s float64) int { return pit.Kind(s, 0, 45*deg) }, 30.9, Hidden, Folded)
	check("pit", func(s float64) int { return pit.Kind(s, 0, 45*deg) }, 177.4, Folded, Open)
	for slope, want := range map[geometry.Angle]int{40: Folded, 30: Open, -50: Open, -52: Hidden} {
		p := Plane{Slope: slope * deg, Rise: 77 * deg}
		assert.Equal(t, want, p.Kind(39*deg, 77*deg), "slope %v", float64(slope))
	}
}
