package mask_test

import (
	"context"
	"flag"
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

var (
	waysScenes = flag.Int("ways.scenes", 60, "random grids of TestEveryWayGivesTheSame")
	waysKind   = flag.String("ways.kind", "", "fixed, track, tripod or polar only")
)

// waysScene draws a grid large enough for bundles of cells, smooth to white, whose
// slopes are about those at which ground folds or hides.
func waysScene(rng *rand.Rand) scene {
	var s scene
	rows, cols := 20+rng.IntN(100), 20+rng.IntN(100)
	cell := 5 * math.Exp2(3*rng.Float64())
	var g *dem.Grid
	switch rng.IntN(4) {
	case 0:
		g, s.name = testterrain.Metric(rows, cols, cell, cell, geometry.Angle(rng.Float64()*2-1)), "turned"
	case 1:
		g, s.name = testterrain.Metric(rows, cols, cell, cell*math.Exp2(rng.Float64()*2-1), 0), "oblong"
	case 2:
		g, s.name = testterrain.Transverse(rows, cols, cell, 300000+400000*rng.Float64(), 6e6*rng.Float64()+1e6, -123), "transverse"
	default:
		deg := cell / 111000 * math.Exp2(4*rng.Float64())
		g, s.name = testterrain.Geographic(rows, cols, deg, deg*math.Exp2(rng.Float64()*2-1), 100*rng.Float64(), 140*rng.Float64()-70), "geographic"
	}
	local := g.At(0, 0)
	cell = min(math.Hypot(local.ColE, local.ColN), math.Hypot(local.RowE, local.RowN))
	smooth := [...]float64{0, 0.5, 0.8, 1}[rng.IntN(4)]
	s.terrain = &dem.Memory{Frame: g, Heights: testterrain.Fractal(rng, rows, cols, cell*math.Exp2(rng.Float64()*4-2+3*smooth), smooth)}
	s.name += fmt.Sprintf(", fractal %v", smooth)
	if rng.IntN(3) == 0 {
		for range 1 + rng.IntN(12) {
			s.terrain.Heights[rng.IntN(rows*cols)] += float32(cell * 4 * rng.Float64())
		}
		s.name += ", walls"
	}
	s.options = mask.DefaultOptions()
	s.options.OpenEdge = rng.IntN(2) > 0
	if rng.IntN(4) == 0 {
		s.drill(rng)
	}
	s.look = randomLook(rng)
	return s
}

// tripod gives a scene a radar on the ground.
func (s scene) tripod(rng *rand.Rand) scene {
	g := s.terrain.Frame
	for {
		row, col := rng.Float64()*float64(g.Rows-1), rng.Float64()*float64(g.Cols-1)
		l := g.At(row, col)
		look := geometry.NewLook()
		look.Name, look.Kind = fmt.Sprintf("tripod at %.2f, %.2f", row, col), geometry.Tripod
		look.Position, look.Antenna = geometry.Place{Lon: l.Lon, Lat: l.Lat}, 2*math.Exp2(7*rng.Float64())
		if h := s.terrain.Heights[int(row)*g.Cols+int(col)] + s.terrain.Heights[(int(row)+1)*g.Cols+int(col)] + s.terrain.Heights[int(row)*g.Cols+int(col)+1] + s.terrain.Heights[(int(row)+1)*g.Cols+int(col)+1]; h != h {
			continue
		}
		s.look = look
		return s
	}
}

// polar puts a scene on large cells near a pole, where lines of one azimuth bend and
// drift apart.
func (s *scene) polar(rng *rand.Rand) {
	old := s.terrain.Frame
	local := old.At(0, 0)
	cell := math.Hypot(local.RowE, local.RowN)
	deg := 0.002 * math.Exp2(4*rng.Float64())
	lat := 60 + 24*rng.Float64()
	if rng.IntN(2) == 0 {
		lat = -lat
	}
	g := testterrain.Geographic(old.Rows, old.Cols, deg*math.Exp2(2*rng.Float64()), deg, 12, lat)
	h := make([]float32, len(s.terrain.Heights))
	for i, z := range s.terrain.Heights {
		h[i] = z * float32(min(deg*111000/cell, 40))
	}
	s.terrain, s.name = &dem.Memory{Frame: g, Heights: h}, s.name+fmt.Sprintf(", polar %.4f at %.2f", deg, lat)
}

// differenceOf returns how many values and classes of two rasters differ, and the
// first of them.
func differenceOf(whole, part *raster) (n, classes int, first string) {
	for i := range part.window.Rows * part.window.Cols {
		row, col := part.window.Row+i/part.window.Cols, part.window.Col+i%part.window.Cols
		j := (row-whole.window.Row)*whole.window.Cols + col - whole.window.Col
		for l, c := range part.classes {
			if a, ok := whole.classes[l]; ok && a[j] != c[i] {
				n++
				classes++
				if classes == 1 {
					first = fmt.Sprintf("%s at %d, %d: %v, %v", l, row, col, mask.Class(a[j]), mask.Class(c[i]))
				}
			}
		}
		for l, bands := range part.values {
			if a, ok := whole.values[l]; ok && differs(a, bands, j, i) {
				if n++; first == "" {
					first = fmt.Sprintf("%s at %d, %d: %v, %v", l, row, col, a[0][j], bands[0][i])
				}
			}
		}
	}
	return n, classes, first
}

// sceneOf draws a scene of a kind.
func sceneOf(seed uint64, k int, kind string) (scene, *rand.Rand) {
	rng := rand.New(rand.NewPCG(seed, uint64(21000+k)))
	s := waysScene(rng)
	switch kind {
	case "track":
		s = s.tracked(rng)
	case "tripod":
		s = s.tripod(rng)
	case "polar":
		s.polar(rng)
	}
	return s, rng
}

// One tile and small ones, some without room for a bundle of eight cells: scenes in
// which they differed.
func TestSmallTilesOfHardScenes(t *testing.T) {
	for _, c := range []struct {
		why  string
		seed uint64
		grid int
		kind string
		tile int
	}{
		{"lanes under the track have no lines", 1, 67, "track", 7},
		{"lines of a row surely fold before those of a later one do not", 11, 7, "polar", 7},
		{"the same, of unknown terrain", 6, 87, "fixed", 7},
		{"cells that are not doubtful in a bundle with some that are open", 5, 45, "fixed", 7},
		{"limits that ground beyond a cell's own reach sets for other cells", 1005, 36, "fixed", 7},
		{"ground that is surely lit, before terrain is unknown", 2021, 33, "track", 9},
	} {
		s, _ := sceneOf(c.seed, c.grid, c.kind)
		g := s.terrain.Frame
		s.options.Threads, s.options.Tile = 1, 4096
		whole := march(t, s.terrain, g.Whole(), marginLayers, s.options, s.look)[0]
		s.options.Tile = c.tile
		n, classes, first := differenceOf(&whole, &march(t, s.terrain, g.Whole(), marginLayers, s.options, s.look)[0])
		assert.Zero(t, n, "%s: %d classes: %s\n%v, %s", c.why, classes, first, s, s.look.Name)
	}
}

// Ground distances of a row differ by several parts in a hundred between the lanes of
// a strip on large cells near a pole: slopes a little below the incidence are no
// layover of their own, and their partners count.
func TestSlopesNearAPole(t *testing.T) {
	s, _ := sceneOf(31, 12, "polar")
	span, err := dem.Scan(context.Background(), s.terrain)
	require.NoError(t, err)
	w := newWalker(s.terrain, span, s.look, s.options)
	got := march(t, s.terrain, s.terrain.Frame.Whole(), marginLayers, s.options, s.look)[0]
	for _, c := range [][2]int{{63, 72}, {18, 87}, {15, 17}, {91, 104}, {21, 16}} {
		want := w.at(c[0], c[1], nil)
		require.Equal(t, kindFolded, want.kind)
		require.Less(t, want.r, -50.)
		assert.Equal(t, kindFolded, got.kind(mask.LayoverLayer, c[0], c[1]), "row %d, column %d: folded by %.0f m", c[0], c[1], -want.r)
	}
}

// differs reports whether a band has other bits; all NaN are alike.
func differs(a, b [][]float32, j, i int) bool {
	for n := range a {
		x, y := a[n][j], b[n][i]
		if math.Float32bits(x) != math.Float32bits(y) && (x == x || y == y) {
			return true
		}
	}
	return false
}

// TestEveryWayGivesTheSame: small tiles, windows, other layers beside, vectors or
// loops, all to the bit.
func TestEveryWayGivesTheSame(t *testing.T) {
	defer mask.SetVectors(true)
	layers := []mask.Layer{mask.VerdictLayer, mask.LayoverLayer, mask.ShadowLayer, mask.Clearance, mask.FoldMargin}
	counts := map[string]int{}
	for k := range *waysScenes {
		kind := [...]string{"fixed", "track", "tripod", "polar"}[k%4]
		if *waysKind != "" {
			kind = *waysKind
		}
		s, rng := sceneOf(*walkSeed, k, kind)
		g := s.terrain.Frame
		s.look.Bandwidth = 20e6
		s.options.Threads = 1
		if s.options.Tile = 4096; rng.IntN(2) == 0 {
			s.options.Tile = 0
		}
		whole := march(t, s.terrain, g.Whole(), layers, s.options, s.look)
		report := func(way string, part *raster) {
			n, classes, first := differenceOf(&whole[0], part)
			if n > 0 {
				counts[kind+" "+way]++
				if classes > 0 {
					counts[kind+" "+way+" classes"]++
				}
				t.Errorf("grid %d, %s: %d differ, %d classes: %s\n%v, %s", k, way, n, classes, first, s, s.look.Name)
			}
		}
		for _, tile := range []int{5, 7, 13 + rng.IntN(30)} {
			o := s.options
			o.Tile = tile
			report(fmt.Sprintf("tile %d", min(tile, 13)), &march(t, s.terrain, g.Whole(), layers, o, s.look)[0])
		}
		more := append(append([]mask.Layer{}, layers...), mask.Returns)
		report("returns", &march(t, s.terrain, g.Whole(), more, s.options, s.look)[0])
		other := fixedLook(33*deg, 10*deg*geometry.Angle(rng.IntN(36)))
		other.Bandwidth = 20e6
		report("looks", &march(t, s.terrain, g.Whole(), layers, s.options, other, s.look)[1])
		mask.SetVectors(false)
		report("loops", &march(t, s.terrain, g.Whole(), layers, s.options, s.look)[0])
		mask.SetVectors(true)
		more = append(more, mask.Share, mask.SlantRange, mask.LocalIncidence)
		if s.look.Kind == geometry.Fixed {
			more = append(more, mask.WindowLow, mask.WindowHigh)
		}
		whole = march(t, s.terrain, g.Whole(), more, s.options, s.look)
		o := s.options
		o.Tile = 3 + rng.IntN(40)
		report("more, tiles", &march(t, s.terrain, g.Whole(), more, o, s.look)[0])
		row, col := rng.IntN(g.Rows), rng.IntN(g.Cols)
		cut := dem.Window{Row: row, Col: col, Rows: 1 + rng.IntN(g.Rows-row), Cols: 1 + rng.IntN(g.Cols-col)}
		report("more, window", &march(t, s.terrain, cut, more, s.options, s.look)[0])
		report("more, looks", &march(t, s.terrain, g.Whole(), more, s.options, other, s.look)[1])
		mask.SetVectors(false)
		report("more, loops", &march(t, s.terrain, g.Whole(), more, s.options, s.look)[0])
		mask.SetVectors(true)
	}
	t.Log(counts)
}

// Beside a hole that is given a height, the slope that the layers have is one-sided
// and without it; the surface that the march folds has it. The cell east of the hole
// is folded by 19.7 m of slant range: the walk says so.
func TestFoldsBesideAHoleOfGivenHeight(t *testing.T) {
	g := testterrain.Metric(5, 10, 10, 10, 0)
	hole := float32(math.NaN())
	m := &dem.Memory{Frame: g, Heights: []float32{
		1, 14, 26, 34, 46, 51, 66, 71, 82, 91,
		6, 14, 24, 35, 42, 53, hole, 74, 84, 91,
		5, 11, 20, 34, 45, 54, 62, 71, 84, 93,
		1, 15, 24, 35, 43, 55, 65, 71, 86, 93,
		3, 16, 26, 32, 45, 54, 60, 72, 81, 92,
	}}
	o := openEdge()
	o.HoleHeight = -27
	look := fixedLook(50*deg, 96*deg)
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	want := newWalker(m, span, look, o).at(1, 7, nil)
	require.Equal(t, kindFolded, want.kind)
	require.Less(t, want.r, -15.)
	got := march(t, m, g.Whole(), marginLayers, o, look)[0]
	require.Equal(t, kindFolded, got.kind(mask.LayoverLayer, 1, 7))
}
