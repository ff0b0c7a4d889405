package mask_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// What layers may differ by from the platform's own view of a cell: the project's
// requirement of 0.05 m and 0.005 degrees, and what a float32 rounds.
const (
	layerRange = 0.05
	layerAngle = 0.005
)

var viewLayers = []mask.Layer{mask.VerdictLayer, mask.LayoverLayer, mask.ShadowLayer, mask.SlantRange, mask.Incidence,
	mask.LocalIncidence, mask.LineOfSight, mask.Clearance, mask.FoldMargin}

// viewScene is a grid and the looks at it.
type viewScene struct {
	name  string
	grid  *dem.Grid
	looks []geometry.Look
}

func limited(l geometry.Look, near, far float64) geometry.Look {
	l.Name += fmt.Sprintf(" within %v to %v", near, far)
	l.NearIncidence, l.FarIncidence = geometry.Angle(near)*deg, geometry.Angle(far)*deg
	return l
}

// viewScenes are grids at the equator, 46 and 70 degrees, of one to several
// nodes of the lattice and cells of 30 and 100 m, with lines that cross them or
// end abreast of their middle.
func viewScenes(t *testing.T, rng *rand.Rand) (all []viewScene) {
	for _, s := range []struct {
		name string
		grid *dem.Grid
	}{
		{"equator", testterrain.Geographic(110, 131, 0.00027, 0.00027, -66, 0.01)},
		{"46 degrees", testterrain.Geographic(71, 40, 0.0013, 0.0009, 8, 46.1)},
		{"70 degrees", testterrain.Geographic(160, 90, 0.0008, 0.00027, 21, 70.02)},
		{"few cells", testterrain.Geographic(12, 30, 0.0004, 0.00027, 21, -45.9)},
		{"transverse", testterrain.Transverse(100, 90, 30, 640000, 5.1e6, -123)},
	} {
		g := s.grid
		rows, cols := float64(g.Rows), float64(g.Cols)
		m := &dem.Memory{Frame: g, Heights: testterrain.Fractal(rng, g.Rows, g.Cols, 500, 0.8)}
		looks := []geometry.Look{
			limited(orbitLook(35, geometry.Ascending, geometry.Right), 34.97, 35.06),
			limited(orbitLook(25, geometry.Descending, geometry.Left), 24.95, 89),
			orbitLook(50, geometry.Ascending, geometry.Left),
			limited(ephemerisLook(t, m, orbitLook(41, geometry.Descending, geometry.Right)), 10, 41.03),
			// Over the DEM, and past its side but only up to its middle.
			limited(flightLook(g, [2]float64{-90, cols / 3}, [2]float64{rows + 90, cols / 2}, 6000, geometry.Left), 4, 89),
			flightLook(g, [2]float64{rows + 30, -20}, [2]float64{rows / 2.3, -30}, 5000, geometry.Right),
			limited(flightLook(g, [2]float64{-20, -30}, [2]float64{-25, cols + 30}, 4000, geometry.Right), 15, 40),
		}
		all = append(all, viewScene{s.name, g, looks})
	}
	return all
}

func TestLayersOfPlatformsAgainstViews(t *testing.T) {
	rng := rand.New(rand.NewPCG(*walkSeed, 31))
	t.Logf("seed %d", *walkSeed)
	for _, s := range viewScenes(t, rng) {
		m := &dem.Memory{Frame: s.grid, Heights: testterrain.Fractal(rng, s.grid.Rows, s.grid.Cols, 700, 0.9)}
		for i := range m.Heights {
			m.Heights[i] += 900
		}
		m.Heights[len(m.Heights)/3] = float32(math.NaN())
		got := march(t, m, s.grid.Whole(), viewLayers, mask.DefaultOptions(), s.looks...)
		for k, look := range s.looks {
			p, err := mask.PlatformOf(m, look)
			require.NoError(t, err)
			seen := compareViews(t, m, p, &got[k], s.name+", "+look.Name)
			assert.Greater(t, seen, 0, "%s, %s: no cell is seen", s.name, look.Name)
		}
	}
}

// compareViews holds every cell of a raster against the view of its own point, and
// returns how many are seen.
func compareViews(t *testing.T, m *dem.Memory, p geometry.Platform, got *raster, where string) (seen int) {
	g := m.Frame
	var worstRange, worstAngle float64
	for i, h := range m.Heights {
		row, col := i/g.Cols, i%g.Cols
		l := g.At(float64(row), float64(col))
		v, how := p.View(geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: float64(h)})
		if h != h || how != geometry.InView {
			for layer, c := range got.classes {
				require.Equal(t, mask.NoData, mask.Class(c[i]), "%s of row %d, column %d, %v: %s", layer, row, col, how, where)
			}
			for layer, bands := range got.values {
				for b := range bands {
					require.True(t, bands[b][i] != bands[b][i], "%s of row %d, column %d, %v: %v: %s", layer, row, col, how, bands[b][i], where)
				}
			}
			continue
		}
		seen++
		for layer, c := range got.classes {
			require.NotEqual(t, mask.NoData, mask.Class(c[i]), "%s of row %d, column %d, in view: %s", layer, row, col, where)
		}
		value := func(l mask.Layer, b int) float64 { return float64(got.values[l][b][i]) }
		worstRange = max(worstRange, off(value(mask.SlantRange, 0)-v.SlantRange))
		worstAngle = max(worstAngle, off(value(mask.Incidence, 0)-v.Incidence.Degrees()))
		los := geometry.ENU{East: value(mask.LineOfSight, 0), North: value(mask.LineOfSight, 1), Up: value(mask.LineOfSight, 2)}
		c := los.Cross(v.LineOfSight)
		worstAngle = max(worstAngle, off(geometry.Angle(math.Asin(math.Sqrt(c.Dot(c)))).Degrees()))
		if normal, ok := slopeOf(m, row, col, l); ok {
			c := normal.Cross(v.LineOfSight)
			local := geometry.Angle(math.Atan2(math.Sqrt(c.Dot(c)), normal.Dot(v.LineOfSight))).Degrees()
			worstAngle = max(worstAngle, off(value(mask.LocalIncidence, 0)-local))
		}
	}
	t.Logf("%s: %d of %d cells seen, slant range within %.2g m, angles within %.2g degrees", where, seen, len(m.Heights), worstRange, worstAngle)
	// The largest ranges, 1000 km, are multiples of 1/16 m as float32.
	assert.LessOrEqual(t, worstRange, layerRange, "slant range: %s", where)
	assert.LessOrEqual(t, worstAngle, layerAngle, "angles: %s", where)
	return seen
}

// off is the size of a difference, infinite where there is none.
func off(d float64) float64 {
	if d != d {
		return math.Inf(1)
	}
	return math.Abs(d)
}

// slopeOf returns the unit normal of the terrain by central differences, inside
// the grid and away from holes.
func slopeOf(m *dem.Memory, row, col int, l dem.Local) (normal geometry.ENU, ok bool) {
	g := m.Frame
	if row == 0 || col == 0 || row == g.Rows-1 || col == g.Cols-1 {
		return normal, false
	}
	at := func(r, c int) float64 { return float64(m.Heights[r*g.Cols+c]) }
	along := geometry.ENU{East: 2 * l.ColE, North: 2 * l.ColN, Up: at(row, col+1) - at(row, col-1)}
	down := geometry.ENU{East: 2 * l.RowE, North: 2 * l.RowN, Up: at(row+1, col) - at(row-1, col)}
	normal = along.Cross(down).Unit()
	if normal.Up < 0 {
		normal = geometry.ENU{East: -normal.East, North: -normal.North, Up: -normal.Up}
	}
	return normal, normal.Up == normal.Up
}

// TestPlatformsDoNotDependOnTheCut is TestResultsDoNotDependOnTheCut for moving
// platforms.
func TestPlatformsDoNotDependOnTheCut(t *testing.T) {
	rng := rand.New(rand.NewPCG(*walkSeed, 32))
	const rows, cols = 131, 117
	heights := testterrain.Fractal(rng, rows, cols, 400, 0.8)
	for range 12 {
		r, c := rng.IntN(rows-6), rng.IntN(cols-6)
		for i := range 30 {
			heights[(r+i/6)*cols+c+i%6] = float32(math.NaN())
		}
	}
	for name, g := range map[string]*dem.Grid{
		"projected":  testterrain.Transverse(rows, cols, 20, 690000, 5.1e6, -123),
		"geographic": testterrain.Geographic(rows, cols, 0.0009, 0.0003, 21, 70),
	} {
		m := &dem.Memory{Frame: g, Heights: heights}
		if name == "projected" { // low ground: the reach ends inside the DEM
			m.Heights = make([]float32, len(heights))
			for i, h := range heights {
				m.Heights[i] = h / 8
			}
		}
		looks := []geometry.Look{
			orbitLook(24, geometry.Ascending, geometry.Right),
			limited(orbitLook(47, geometry.Descending, geometry.Right), 46.99, 80),
			ephemerisLook(t, m, orbitLook(36, geometry.Ascending, geometry.Left)),
			flightLook(g, [2]float64{-30, 40}, [2]float64{rows + 30, 60}, 2500, geometry.Left),
			flightLook(g, [2]float64{-25, -30}, [2]float64{-20, 90}, 1800, geometry.Right),
		}
		layers := append(viewLayers, mask.Foreshortening, mask.RangeIncidence)
		for _, open := range []bool{false, true} {
			o := mask.DefaultOptions()
			o.OpenEdge = open
			o.Threads = 1
			whole := march(t, m, g.Whole(), layers, o, looks...)
			for k, cut := range cuts(rng, rows, cols) {
				if k%2 > 0 || open && k%3 > 0 {
					continue
				}
				cut.options.OpenEdge = open
				part := march(t, m, cut.window, layers, cut.options, looks...)
				for l := range looks {
					identical(t, &whole[l], &part[l], fmt.Sprintf("%s, open edge %v, %s, cut %d: %+v %+v", name, open, looks[l].Name, k, cut.window, cut.options))
				}
			}
		}
	}
}

// alpineRidges is a made alpine scene: mountain ridges along the track, up to 65 degrees
// steep, a function of the distance s from the middle along the look, metres.
func alpineRidges(s float64) float64 {
	return 520*math.Sin(2*math.Pi*s/2900) + 210*math.Sin(2*math.Pi*s/1130+1)
}

// ridgeRelief is the most by which two heights of alpineRidges differ, and ridgeHeight
// the largest height.
const ridgeRelief, ridgeHeight = 1460.0, 730.0

// TestAlpineSceneFromOrbit holds 50 km of ridges seen from orbit against plane
// waves. At distance s from the middle of the scene the true incidence is, on a
// sphere of radius R with the antenna at a from its centre,
//
//	th(s) = atan2(a sin g, a cos g - R),  g = th(0) - asin(R sin th(0) / a) + s / R
//
// (plane triangle of the earth's centre, antenna and ground). Around there a plane
// wave of th(s) gives the same answers but for
//
//	c / (2 r) + c / (2 R) + h sin th / r,  c = relief / sin th
//
// radians of incidence: the angle between the spherical wave's tangent and its
// chord of length c, over which two points of the relief share a slant range; the
// earth's curvature over that length; and the height of the ground over that for
// which th(s) holds. The more grazing the wave, the more is hidden and the less is
// folded; so every cell of a stretch of the scene must stand between what plane
// waves of the stretch's least and largest incidence make of it.
func TestAlpineSceneFromOrbit(t *testing.T) {
	const cell, rows, cols, stretch = 50.0, 60, 1000, 40
	orbit := orbitLook(39, geometry.Ascending, geometry.Right)
	azimuth, a := alpineGeometry(t, orbit)
	g := testterrain.Metric(rows, cols, cell, cell, azimuth-90*deg)
	m := &dem.Memory{Frame: g, Heights: make([]float32, rows*cols)}
	for i := range m.Heights {
		m.Heights[i] = float32(alpineRidges((float64(i%cols) - (cols-1)/2.) * cell))
	}
	sin, cos := azimuth.Sin(), azimuth.Cos()
	radius := 1 / (sin*sin/geometry.PrimeVerticalRadius(0) + cos*cos/geometry.MeridianRadius(0)) // Euler's theorem
	th0 := float64(orbit.Incidence)
	triangle := func(s float64) (th, r float64) {
		g := th0 - math.Asin(radius*math.Sin(th0)/a) + s/radius
		th = math.Atan2(a*math.Sin(g), a*math.Cos(g)-radius)
		return th, a * math.Sin(g) / math.Sin(th)
	}
	real := march(t, m, g.Whole(), []mask.Layer{mask.LayoverLayer}, openEdge(), orbit)[0]
	plane := func(th float64, w dem.Window) raster {
		return march(t, m, w, []mask.Layer{mask.LayoverLayer}, openEdge(), fixedLook(geometry.Angle(th), azimuth))[0]
	}
	centre := plane(th0, g.Whole())
	rank := func(r *raster, row, col int) int { // folded, open, hidden: with growing incidence
		return map[int]int{kindFolded: 0, kindOpen: 1, kindHidden: 2}[r.kind(mask.LayoverLayer, row, col)]
	}
	var outside, changed, changedMost, changedLeast, cells int
	for from := 0; from < cols; from += stretch {
		w := dem.Window{Row: rows / 4, Col: from, Rows: rows / 2, Cols: stretch}
		s := func(col int) float64 { return (float64(col) - (cols-1)/2.) * cell }
		lo, r := triangle(s(from))
		hi, _ := triangle(s(from + stretch - 1))
		c := ridgeRelief / math.Sin(lo)
		e := c/(2*r) + c/(2*radius) + ridgeHeight*math.Sin(hi)/r
		least, most := plane(lo-e, w), plane(hi+e, w)
		for row := w.Row; row < w.Row+w.Rows; row++ {
			for col := from; col < from+stretch; col++ {
				x, low, high, mid := rank(&real, row, col), rank(&least, row, col), rank(&most, row, col), rank(&centre, row, col)
				cells++
				if x < low || x > high {
					outside++
					if outside < 10 {
						t.Logf("row %d, column %d: rank %d from orbit, %d at %.4f degrees, %d at %.4f", row, col, x, low, geometry.Angle(lo-e).Degrees(), high, geometry.Angle(hi+e).Degrees())
					}
				}
				if x != mid {
					changed++
				}
				if mid < low || mid > high { // must change
					changedLeast++
				}
				if low != high || mid != low { // may change
					changedMost++
				}
			}
		}
	}
	t.Logf("%d cells: %d outside the bounds; %d differ from the plane wave, %d to %d by theory", cells, outside, changed, changedLeast, changedMost)
	assert.Zero(t, outside, "cells outside the bounds")
	assert.GreaterOrEqual(t, changed, changedLeast)
	assert.LessOrEqual(t, changed, changedMost)
	assert.Greater(t, changedLeast, cells/200, "the scene does not tell an orbit from a plane wave")
}

// alpineGeometry returns the look azimuth where the equator meets Greenwich and
// the antenna's distance from the earth's centre.
func alpineGeometry(t *testing.T, look geometry.Look) (azimuth geometry.Angle, radius float64) {
	p, err := geometry.NewPlatform(look, geometry.Site{Centre: geometry.Place{}})
	require.NoError(t, err)
	v, seen := p.View(geometry.Geodetic{})
	require.Equal(t, geometry.InView, seen)
	pos, _ := p.State(v.T)
	return v.LookAzimuth, pos.Norm()
}
