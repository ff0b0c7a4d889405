package main

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// degreeGrid is a geographic grid of cells of a size in degrees, with its
// first corner at 10 degrees east and a northern latitude.
func degreeGrid(t *testing.T, rows, cols int, north, size float64) *dem.Grid {
	t.Helper()
	g, err := dem.NewGrid(rows, cols, [6]float64{10, size, 0, north, 0, -size}, "EPSG:4326",
		func(_, _ []float64) error { return nil })
	require.NoError(t, err)
	return g
}

// randomCodes returns class codes for every cell of a grid.
func randomCodes(t *testing.T, g *dem.Grid, seed uint64) []uint8 {
	t.Helper()
	t.Logf("seed %d", seed)
	random := rand.New(rand.NewPCG(seed, 0))
	codes := make([]uint8, g.Rows*g.Cols)
	for i := range codes {
		codes[i] = uint8(mask.Classes[random.IntN(len(mask.Classes))].Code)
	}
	return codes
}

// TestTallyOfTiles: the sums are the same for every way to cut the grid into
// tiles and for every order of the tiles, to the last bit.
func TestTallyOfTiles(t *testing.T) {
	g := degreeGrid(t, 101, 67, 47, 1.0/3600)
	codes := randomCodes(t, g, 7)
	var whole tally
	whole.add(g, g.Whole(), codes)
	for _, side := range []int{1, 31, 32, 33, 64} {
		var tiles []dem.Window
		for r := 0; r < g.Rows; r += side {
			for c := 0; c < g.Cols; c += side {
				tiles = append(tiles, g.Clip(dem.Window{Row: r, Col: c, Rows: side, Cols: side}))
			}
		}
		rand.New(rand.NewPCG(uint64(side), 1)).Shuffle(len(tiles), func(i, j int) { tiles[i], tiles[j] = tiles[j], tiles[i] })
		var parts tally
		for _, w := range tiles {
			part := make([]uint8, 0, w.Rows*w.Cols)
			for r := range w.Rows {
				at := (w.Row+r)*g.Cols + w.Col
				part = append(part, codes[at:at+w.Cols]...)
			}
			parts.add(g, w, part)
		}
		assert.Equal(t, whole, parts, "tiles of %d", side)
	}
}

// TestTallyCounts compares with a plain loop over the cells, area by the cell
// itself in place of the block's. The bound is that of tallyBlock.
func TestTallyCounts(t *testing.T) {
	g := degreeGrid(t, 101, 67, 47, 1.0/3600)
	codes := randomCodes(t, g, 8)
	var got tally
	got.add(g, g.Whole(), codes)
	var cells [kinds]int64
	var km2 [kinds]float64
	for i, c := range codes {
		k := int(c) / 10
		cells[k]++
		km2[k] += cellArea(g, float64(i/g.Cols), float64(i%g.Cols)) / 1e6
	}
	assert.Equal(t, cells, got.cells)
	for k := range kinds {
		assert.InEpsilon(t, km2[k], got.area(k), 1e-4, "kind %d", k)
	}
}

// TestTallyArea compares the area of a quadrangle with the closed form on the
// ellipsoid,
//
//	A = dlon b^2 / 2 [ sin(lat) / (1 - e^2 sin^2(lat)) + ln((1 + e sin(lat)) / (1 - e sin(lat))) / (2 e) ]
//
// between its parallels. Source: Snyder, Map Projections: A Working Manual,
// USGS Professional Paper 1395, 1987, eq. 3-12 (from memory).
func TestTallyArea(t *testing.T) {
	const e2 = geometry.Flattening * (2 - geometry.Flattening)
	e := math.Sqrt(e2)
	zone := func(lat float64) float64 {
		s := math.Sin(lat * math.Pi / 180)
		b2 := geometry.SemiMajor * geometry.SemiMajor * (1 - e2)
		return b2 / 2 * (s/(1-e2*s*s) + math.Log((1+e*s)/(1-e*s))/(2*e))
	}
	for _, north := range []float64{1, 47, 71} {
		g := degreeGrid(t, 1000, 500, north, 0.001)
		codes := make([]uint8, 1000*500)
		for i := range codes {
			codes[i] = uint8(mask.Open)
		}
		var got tally
		got.add(g, g.Whole(), codes)
		want := 0.5 * math.Pi / 180 * (zone(north) - zone(north-1)) / 1e6
		// The last block of rows has 8 of 32 rows, 12 rows of 111 m from the
		// block's middle: 1.3 km * tan(71 deg) / 6371 km = 6e-4 of 8/1000 of
		// the area is 5e-6.
		assert.InEpsilon(t, want, got.total(), 1e-5, "north %v", north)
		assert.Equal(t, 1.0, got.share(kindOpen))
	}
	var none tally
	assert.True(t, math.IsNaN(none.share(kindOpen)), "no cell has a class")
}
