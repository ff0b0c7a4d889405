package mask_test

import (
	"context"
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

// openEdge returns the default options with nothing outside the DEM.
func openEdge() mask.Options {
	o := mask.DefaultOptions()
	o.OpenEdge = true
	return o
}

// A flat DEM under any look is open everywhere when nothing stands outside;
// its margins are one cell's worth at most, and it is never folded or hidden.
func TestFlatIsOpen(t *testing.T) {
	for _, g := range []*dem.Grid{
		testterrain.Metric(37, 23, 10, 10, 0), testterrain.Metric(21, 44, 30, 12, 33*deg),
		testterrain.Geographic(30, 41, 0.0003, 0.0002, 8, 61), testterrain.Transverse(25, 31, 30, 650000, 5.1e6, -123),
		testterrain.Metric(2, 2, 10, 10, 0), testterrain.Metric(2, 17, 10, 10, 0), testterrain.Metric(17, 2, 10, 10, 0),
	} {
		m := testterrain.Sample(g, func(_, _ float64) float64 { return 1234.5 })
		for _, incidence := range []geometry.Angle{20, 38, 70} {
			for _, azimuth := range []geometry.Angle{0, 45, 77, 90, 180, 201, 315, 333} {
				got := march(t, m, g.Whole(), append(marginLayers, mask.VerdictLayer), openEdge(), fixedLook(incidence*deg, azimuth*deg))[0]
				for i, c := range got.classes[mask.VerdictLayer] {
					where := fmt.Sprintf("%d x %d, incidence %v, azimuth %v, cell %d", g.Rows, g.Cols, float64(incidence), float64(azimuth), i)
					require.Equal(t, mask.Open, mask.Class(c), where)
					checkSigns(t, mask.Class(got.classes[mask.LayoverLayer][i]), mask.Class(got.classes[mask.ShadowLayer][i]),
						got.values[mask.Clearance][0][i], got.values[mask.FoldMargin][0][i], where)
				}
			}
		}
	}
}

// invariantScenes draws scenes of at least 3 x 3 cells for the tests below.
func invariantScenes(t *testing.T, stream uint64, visit func(s scene, rng *rand.Rand)) {
	rng := rand.New(rand.NewPCG(*walkSeed, stream))
	t.Logf("seed %d, stream %d", *walkSeed, stream)
	for done := 0; done < 60; {
		s := randomScene(rng)
		if g := s.terrain.Frame; g.Rows >= 3 && g.Cols >= 3 {
			visit(s, rng)
			done++
		}
	}
}

// run returns the default margins of a scene.
func (s scene) run(t testing.TB) raster {
	return march(t, s.terrain, s.terrain.Frame.Whole(), marginLayers, s.options, s.look)[0]
}

// equalClasses compares two class layers through a map of cells.
func equalClasses(t *testing.T, s scene, a, b raster, to func(row, col int) (int, int)) {
	t.Helper()
	for _, l := range []mask.Layer{mask.LayoverLayer, mask.ShadowLayer} {
		for i, have := range a.classes[l] {
			row, col := to(i/a.window.Cols, i%a.window.Cols)
			if other := b.classes[l][row*b.window.Cols+col]; have != other {
				t.Errorf("%v\n%s at row %d, column %d: %v before, %v after", s, l, i/a.window.Cols, i%a.window.Cols, mask.Class(have), mask.Class(other))
				return
			}
		}
	}
}

func sameCell(row, col int) (int, int) { return row, col }

// Adding a constant height to the terrain, its ceiling and its holes changes
// nothing. The heights are multiples of 1/64 m and stay exact.
func TestAddedHeightChangesNothing(t *testing.T) {
	invariantScenes(t, 1, func(s scene, _ *rand.Rand) {
		up := s
		up.terrain = &dem.Memory{Frame: s.terrain.Frame, Heights: make([]float32, len(s.terrain.Heights))}
		for i, h := range s.terrain.Heights {
			s.terrain.Heights[i] = float32(math.Round(float64(h)*64) / 64)
			up.terrain.Heights[i] = s.terrain.Heights[i] + 4096
		}
		s.options.HoleHeight = math.Round(s.options.HoleHeight)
		up.options = s.options
		up.options.HoleHeight += 4096
		up.options.Ceiling += 4096
		equalClasses(t, s, s.run(t), up.run(t), sameCell)
	})
}

// Scaling all three axes changes nothing. The factor is a power of two, which
// float64 multiplies exactly.
func TestScaledAxesChangeNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(*walkSeed, 2))
	for k := range 40 {
		rows, cols, turn := 3+rng.IntN(40), 3+rng.IntN(40), geometry.Angle(rng.Float64())
		small := scene{name: "scaled", options: mask.DefaultOptions(),
			look: fixedLook(geometry.Angle(20+50*rng.Float64())*deg, geometry.Angle(360*rng.Float64())*deg)}
		small.options.OpenEdge = k%2 == 0
		large := small
		small.terrain = &dem.Memory{Frame: testterrain.Metric(rows, cols, 10, 10, turn), Heights: testterrain.Fractal(rng, rows, cols, 40, 0.7)}
		if k%3 == 0 {
			small.terrain.Heights[rng.IntN(rows*cols)] = float32(math.NaN())
		}
		large.terrain = &dem.Memory{Frame: testterrain.Metric(rows, cols, 40, 40, turn), Heights: make([]float32, rows*cols)}
		for i, h := range small.terrain.Heights {
			large.terrain.Heights[i] = 4 * h
		}
		a, b := small.run(t), large.run(t)
		equalClasses(t, small, a, b, sameCell)
		for _, l := range []mask.Layer{mask.Clearance, mask.FoldMargin} {
			for i, v := range a.values[l][0] {
				// One part in 10^4 for the ellipsoid under the larger grid, and
				// a micrometre for numbers near zero.
				if w := b.values[l][0][i]; !(math.Abs(float64(4*v-w)) <= 1e-4*math.Abs(float64(w))+1e-6) && (v == v || w == w) {
					t.Fatalf("%v\n%s of cell %d: %v, four times as large %v", small, l, i, v, w)
				}
			}
		}
	}
}

// turned returns the scene with the grid turned clockwise by 90 degrees and
// the azimuth with it: cell (row, col) goes to (col, rows-1-row).
func (s scene) turned(g *dem.Grid) scene {
	old := s.terrain.Frame
	t := s
	t.terrain = &dem.Memory{Frame: g, Heights: make([]float32, len(s.terrain.Heights))}
	for i, h := range s.terrain.Heights {
		t.terrain.Heights[i%old.Cols*g.Cols+old.Rows-1-i/old.Cols] = h
	}
	t.look = fixedLook(s.look.Incidence, s.look.Azimuth+90*deg)
	return t
}

// mirrored returns the scene with the columns in reverse order and the azimuth
// mirrored at north.
func (s scene) mirrored() scene {
	g := s.terrain.Frame
	t := s
	t.terrain = &dem.Memory{Frame: g, Heights: make([]float32, len(s.terrain.Heights))}
	for i, h := range s.terrain.Heights {
		t.terrain.Heights[i-i%g.Cols+g.Cols-1-i%g.Cols] = h
	}
	t.look = fixedLook(s.look.Incidence, -s.look.Azimuth)
	return t
}

// plainScene is a random scene on north-up metre cells.
func plainScene(rng *rand.Rand) scene {
	s := randomScene(rng)
	cell := 5 * math.Exp2(4*rng.Float64())
	rows, cols := 3+rng.IntN(50), 3+rng.IntN(50)
	s.terrain = &dem.Memory{Frame: testterrain.Metric(rows, cols, cell, cell, 0), Heights: testterrain.Fractal(rng, rows, cols, 3*cell, 0.6)}
	s.name = "plain"
	if rng.IntN(3) == 0 {
		s.drill(rng)
	}
	return s
}

// Turning grid and azimuth by 90 degrees turns the mask; mirroring both
// mirrors it. The lanes turn with the grid, but their places are rounded, and
// so a margin may fall on the other side of the slack: of the cells on this
// rough ground one in ten thousand may be settled in one and not in the other.
func TestTurnedAndMirrored(t *testing.T) {
	rng := rand.New(rand.NewPCG(*walkSeed, 3))
	cells, other := 0, 0
	count := func(s scene, a, b raster, to func(row, col int) (int, int)) {
		for _, l := range []mask.Layer{mask.LayoverLayer, mask.ShadowLayer} {
			for i, have := range a.classes[l] {
				row, col := to(i/a.window.Cols, i%a.window.Cols)
				cells++
				if c := b.classes[l][row*b.window.Cols+col]; have != c {
					other++
					t.Logf("%v\n%s at row %d, column %d: %v before, %v after", s, l, i/a.window.Cols, i%a.window.Cols, mask.Class(have), mask.Class(c))
				}
			}
		}
	}
	for range 100 {
		s := plainScene(rng)
		g := s.terrain.Frame
		before := s.run(t)
		// Along a diagonal rows and columns serve equally well for the march, and
		// turning exchanges them: the lanes are then others.
		if math.Mod(s.look.Azimuth.Degrees()+360, 90) != 45 {
			quarter := s.turned(testterrain.Metric(g.Cols, g.Rows, g.Transform[1], g.Transform[1], 0))
			count(s, before, quarter.run(t), func(row, col int) (int, int) { return col, g.Rows - 1 - row })
		}
		mirror := s.mirrored()
		count(s, before, mirror.run(t), func(row, col int) (int, int) { return row, g.Cols - 1 - col })
	}
	assert.LessOrEqual(t, other, cells/10000, "of %d cells", cells)
}

// A higher ceiling turns undetermined ground into determined ground nowhere but
// on the edge of the undetermined, where other cells are settled: one cell in a
// thousand.
func TestHigherCeilingDeterminesNothing(t *testing.T) {
	cells, turned := 0, 0
	defer func() { assert.LessOrEqual(t, turned, cells/1000, "of %d cells", cells) }()
	invariantScenes(t, 4, func(s scene, rng *rand.Rand) {
		s.drill(rng)
		s.options = mask.DefaultOptions()
		before := s.run(t)
		ceiling := 0.0
		for _, h := range s.terrain.Heights {
			if h == h {
				ceiling = max(ceiling, float64(h))
			}
		}
		for _, more := range []float64{1, 20, 300, 5000} {
			s.options.Ceiling = ceiling + more
			after := s.run(t)
			for _, l := range []mask.Layer{mask.LayoverLayer, mask.ShadowLayer} {
				for i, c := range before.classes[l] {
					cells++
					if mask.Class(c) == mask.Undetermined && mask.Class(after.classes[l][i]) != mask.Undetermined {
						turned++
						t.Logf("%v\n%s of cell %d: undetermined before, %v after", s, l, i, mask.Class(after.classes[l][i]))
					}
				}
			}
			before = after
		}
	})
}

// every layer that needs nothing but incidence and azimuth.
var plainLayers = []mask.Layer{
	mask.LayoverLayer, mask.ShadowLayer, mask.LocalIncidence, mask.SlantRange, mask.Foreshortening, mask.VerdictLayer,
	mask.Incidence, mask.RangeIncidence, mask.Clearance, mask.FoldMargin, mask.LineOfSight, mask.AreaFactor,
	mask.Downslope, mask.OrientationShift,
}

// The verdict is the layover class, or compressed in place of open when the
// foreshortening is below the limit; signs of margins follow the classes.
func TestLayersAgree(t *testing.T) {
	compressed := 0
	invariantScenes(t, 5, func(s scene, _ *rand.Rand) {
		got := march(t, s.terrain, s.terrain.Frame.Whole(), plainLayers, s.options, s.look)[0]
		for i := range s.terrain.Heights {
			layover, verdict := mask.Class(got.classes[mask.LayoverLayer][i]), mask.Class(got.classes[mask.VerdictLayer][i])
			want := layover
			if layover == mask.Open && got.values[mask.Foreshortening][0][i] < 0.3 {
				want = mask.Compressed
				compressed++
			}
			require.Equal(t, want, verdict, "%v, cell %d, foreshortening %v", s, i, got.values[mask.Foreshortening][0][i])
			checkSigns(t, layover, mask.Class(got.classes[mask.ShadowLayer][i]), got.values[mask.Clearance][0][i], got.values[mask.FoldMargin][0][i],
				fmt.Sprintf("%v, cell %d", s, i))
		}
	})
	assert.Greater(t, compressed, 100, "compressed cells met")
}

// TestResultsDoNotDependOnTheCut: bit-identical for every tile size, number
// of threads, memory and output window.
func TestResultsDoNotDependOnTheCut(t *testing.T) {
	rng := rand.New(rand.NewPCG(*walkSeed, 6))
	const rows, cols = 131, 117
	heights := testterrain.Fractal(rng, rows, cols, 400, 0.8)
	for range 12 {
		r, c := rng.IntN(rows-6), rng.IntN(cols-6)
		for i := range 30 {
			heights[(r+i/6)*cols+c+i%6] = float32(math.NaN())
		}
	}
	looks := []geometry.Look{
		fixedLook(23*deg, 12*deg), fixedLook(39*deg, 77*deg), fixedLook(50*deg, 135*deg), fixedLook(61*deg, 270*deg),
	}
	for name, g := range map[string]*dem.Grid{
		"projected":  testterrain.Transverse(rows, cols, 20, 690000, 5.1e6, -123),
		"geographic": testterrain.Geographic(rows, cols, 0.0003, 0.0002, 8, 61),
	} {
		m := &dem.Memory{Frame: g, Heights: heights}
		for _, open := range []bool{false, true} {
			o := mask.DefaultOptions()
			o.OpenEdge = open
			o.Threads = 1
			whole := march(t, m, g.Whole(), plainLayers, o, looks...)
			for k, cut := range cuts(rng, rows, cols) {
				if open && k%3 > 0 {
					continue
				}
				cut.options.OpenEdge = open
				part := march(t, m, cut.window, plainLayers, cut.options, looks...)
				for l := range looks {
					identical(t, &whole[l], &part[l], fmt.Sprintf("%s, open edge %v, look %d, cut %d: %+v %+v", name, open, l, k, cut.window, cut.options))
				}
			}
		}
	}
}

// cut is a way to part the work.
type cut struct {
	window  dem.Window
	options mask.Options
}

// cuts returns tile sizes about a block of views and a strip of lanes, and windows
// anywhere.
func cuts(rng *rand.Rand, rows, cols int) []cut {
	all := []cut{{dem.Window{Rows: rows, Cols: cols}, mask.DefaultOptions()}}
	for _, tile := range []int{4 + rng.IntN(6), 31, 32, 33, 56, 57, 64, 131, 4096} {
		o := mask.DefaultOptions()
		o.Tile, o.Threads = tile, rng.IntN(6)
		all = append(all, cut{dem.Window{Rows: rows, Cols: cols}, o})
		row, col := rng.IntN(rows), rng.IntN(cols)
		all = append(all, cut{dem.Window{Row: row, Col: col, Rows: 1 + rng.IntN(rows-row), Cols: 1 + rng.IntN(cols-col)}, o})
	}
	return append(all,
		cut{dem.Window{Row: rows - 1, Col: cols - 1, Rows: 1, Cols: 1}, mask.DefaultOptions()},
		cut{dem.Window{Row: 40, Rows: 1, Cols: cols}, mask.DefaultOptions()},
		cut{dem.Window{Col: 40, Rows: rows, Cols: 1}, mask.DefaultOptions()})
}

// identical compares a part with the whole bit by bit.
func identical(t *testing.T, whole, part *raster, where string) {
	t.Helper()
	for i := range part.window.Rows * part.window.Cols {
		row, col := part.window.Row+i/part.window.Cols, part.window.Col+i%part.window.Cols
		j := (row-whole.window.Row)*whole.window.Cols + col - whole.window.Col
		for l, c := range part.classes {
			require.Equal(t, mask.Class(whole.classes[l][j]), mask.Class(c[i]), "%s at row %d, column %d: %s", l, row, col, where)
		}
		for l, bands := range part.values {
			for b := range bands {
				if math.Float32bits(whole.values[l][b][j]) != math.Float32bits(bands[b][i]) {
					t.Fatalf("%s band %d at row %d, column %d: %v in the whole, %v in the part: %s",
						l, b, row, col, whole.values[l][b][j], bands[b][i], where)
				}
			}
		}
	}
}

// Two looks just beside a tie fall on either side of it: a slope a little
// less and a little more steep than the incidence, a grazing ray a little
// above and a little below the ground.
func TestBesideTies(t *testing.T) {
	const little = 1e-4 * deg
	g := testterrain.Metric(31, 33, 10, 10, 0)
	look := func(i geometry.Angle) geometry.Look { return fixedLook(i, 90*deg) }
	at := func(p testterrain.Plane, i geometry.Angle) int {
		got := march(t, testterrain.Sample(g, p.Height), g.Whole(), marginLayers, openEdge(), look(i))
		return got[0].kind(mask.LayoverLayer, 15, 16)
	}
	facing, lee := testterrain.Plane{Slope: 35 * deg, Rise: 90 * deg}, testterrain.Plane{Slope: 35 * deg, Rise: 270 * deg}
	assert.Equal(t, kindFolded, at(facing, 35*deg-little))
	assert.Equal(t, kindOpen, at(facing, 35*deg+little))
	assert.Equal(t, kindOpen, at(lee, 55*deg-little))
	assert.Equal(t, kindHidden, at(lee, 55*deg+little))
}

// A grid of one row or column has no bilinear surface: it is refused, and
// nothing is delivered.
func TestSliversAreRefused(t *testing.T) {
	for _, size := range [][2]int{{1, 1}, {1, 2}, {1, 40}, {2, 1}, {40, 1}} {
		m := testterrain.Sample(testterrain.Metric(size[0], size[1], 10, 10, 0), func(_, _ float64) float64 { return 0 })
		_, err := mask.Run(context.Background(), mask.Job{
			Source: m, Range: dem.Range{Valid: int64(size[0] * size[1])}, Looks: []geometry.Look{fixedLook(38*deg, 77*deg)},
			Layers: marginLayers, Window: m.Frame.Whole(), Options: mask.DefaultOptions(),
			Emit: func(int, *mask.Tile) error { t.Error("a tile was delivered"); return nil },
		})
		assert.ErrorContains(t, err, fmt.Sprintf("%d x %d", size[0], size[1]))
	}
}
