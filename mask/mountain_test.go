package mask_test

import (
	"context"
	"fmt"
	"image"
	"image/png"
	"math"
	"os"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// mountain reads the real terrain of testdata: 468 x 327 cells of 30 m, holes
// at the edges, on a transverse Mercator grid like its own. (The file's datum
// is older; on WGS84 the place shifts by about 200 m and the cells by less
// than 1 part in 10^4, which is nothing to this test.)
func mountain(t testing.TB) *dem.Memory {
	heights, rows, cols := pictureHeights(t, "../testdata/sthelens_30m.png")
	return &dem.Memory{Frame: testterrain.Transverse(rows, cols, 30, 557805, 5122005, -123), Heights: heights}
}

// pictureHeights reads heights in whole metres from a 16-bit grey picture, 0
// for no height.
func pictureHeights(t testing.TB, path string) (heights []float32, rows, cols int) {
	f, err := os.Open(path)
	require.NoError(t, err)
	defer f.Close()
	img, err := png.Decode(f)
	require.NoError(t, err)
	grey, ok := img.(*image.Gray16)
	require.True(t, ok, "%s is not a 16-bit grey picture", path)
	rows, cols = grey.Rect.Dy(), grey.Rect.Dx()
	heights = make([]float32, rows*cols)
	for i := range heights {
		heights[i] = float32(grey.Gray16At(i%cols, i/cols).Y)
		if heights[i] == 0 {
			heights[i] = float32(math.NaN())
		}
	}
	return heights, rows, cols
}

// TestMountainFixture: the figures stand in the provenance of the source file.
func TestMountainFixture(t *testing.T) {
	m := mountain(t)
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	assert.Equal(t, [2]int{468, 327}, [2]int{m.Frame.Rows, m.Frame.Cols})
	assert.Equal(t, [2]float64{682, 2543}, [2]float64{span.Min, span.Max})
	assert.InDelta(t, 0.027, float64(span.Missing)/float64(span.Valid+span.Missing), 0.0005)
}

// mountainLooks go all around, with multiples of 45 degrees and without.
var mountainLooks = []struct{ incidence, azimuth geometry.Angle }{
	{20, 77}, {27, 347}, {34, 45}, {38, 193}, {45, 103}, {50, 270}, {56, 311}, {63, 0}, {70, 228}, {41, 151},
}

// The bounds of the project's main requirement: of the determined cells at
// least 99.9 % of the same kind, at every look, no differing cell alone. The
// same share may be determined where the walk is not. On the safe side the
// edge of the undetermined ground may lie a cell farther: it is about as long
// as the grid's outline, 1 % of the cells, and at most half of it is taken.
const (
	mountainDiffer  = 0.001
	mountainGuessed = 0.002 // a range line may cut the corner of a hole between two rows
	mountainTimid   = 0.005
)

// TestMountainAgainstWalk compares one cell in 23 (23 does not divide the
// length of the rows, so all columns are met), or every cell with -walk.full.
func TestMountainAgainstWalk(t *testing.T) {
	m := mountain(t)
	geographic := &dem.Memory{Frame: testterrain.Geographic(468, 327, 1./3600, 1./3600, -122.25, 46.25), Heights: m.Heights}
	open := mask.DefaultOptions()
	open.OpenEdge = true
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	wanted := func(i int) bool { return *walkFull || i%23 == 0 }
	for k, l := range mountainLooks {
		look := fixedLook(l.incidence*deg, l.azimuth*deg)
		options, terrain := mask.DefaultOptions(), m
		if k%2 == 1 {
			options = open
		}
		if k%5 == 4 { // walked slowly: every step asks the grid for the direction
			terrain = geographic
		}
		w := newWalker(terrain, span, look, options)
		got := march(t, terrain, terrain.Frame.Whole(), marginLayers, options, look)
		c := compare(w, &got[0], wanted, w.every(wanted))
		t.Logf("incidence %v, azimuth %v: %v", float64(l.incidence), float64(l.azimuth), c)
		where := fmt.Sprintf("incidence %v, azimuth %v", float64(l.incidence), float64(l.azimuth))
		assert.LessOrEqual(t, float64(c.differ), mountainDiffer*float64(c.determined), "%s: cells of another kind", where)
		assert.LessOrEqual(t, float64(c.guessed), mountainGuessed*float64(c.cells), "%s: cells undetermined in the walk only", where)
		assert.LessOrEqual(t, float64(c.timid), mountainTimid*float64(c.cells), "%s: cells undetermined in the engine only", where)
		assert.Empty(t, c.lone, "%s: differing cells alone", where)
	}
}
