package dem

import (
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// TestLatticeStaysOnTheGrid: the locator is asked for nothing beyond the outer
// edges, so a grid that ends near a pole or at the edge of a projection is not
// refused for ground it does not have. Sizes straddle the lattice step.
func TestLatticeStaysOnTheGrid(t *testing.T) {
	for _, size := range [][2]int{{2, 3}, {3, 2}, {31, 32}, {32, 33}, {33, 34}, {64, 65}, {65, 66}, {7, 200}} {
		t.Run(fmt.Sprint(size), func(t *testing.T) {
			rows, cols := size[0], size[1]
			north := 89.9999
			d := 1e-3
			locate := func(x, y []float64) error {
				for i := range x {
					assert.True(t, x[i] > 11-1e-9 && x[i] < 11+float64(cols)*d+1e-9, "x %v", x[i])
					assert.True(t, y[i] < north+1e-9 && y[i] > north-float64(rows)*d-1e-9, "y %v", y[i])
				}
				return nil
			}
			g, err := NewGrid(rows, cols, [6]float64{11, d, 0, north, 0, -d}, "", locate)
			require.NoError(t, err)
			// Longitude and latitude are linear in a geographic grid.
			l := g.At(float64(rows-1), 0.5)
			assert.InDelta(t, north-(float64(rows)-0.5)*d, l.Lat.Degrees(), 1e-12)
			assert.InDelta(t, 11+d, l.Lon.Degrees(), 1e-12)
		})
	}
}

// TestLatticeIsBounded: a grid of a million cells a side has no more nodes than
// one of 16,000, and still tells where its cells are.
func TestLatticeIsBounded(t *testing.T) {
	const n, d = 1_000_000, 1e-6
	points := 0
	g, err := NewGrid(n, n, [6]float64{10, d, 0, 46, 0, -d}, "", func(x, y []float64) error {
		points = len(x)
		return nil
	})
	require.NoError(t, err)
	assert.LessOrEqual(t, points, 5*maxNodes)
	l := g.At(123456, 654321)
	assert.InDelta(t, 46-123456.5*d, l.Lat.Degrees(), 1e-11)
	assert.InDelta(t, 10+654321.5*d, l.Lon.Degrees(), 1e-11)
	// Snyder 1987, eq. 4-18: a degree of latitude at 45.9 N is 111.149 km
	// (closed form below, axes of WGS84).
	const a, e2 = 6378137.0, 0.00669437999014
	s := math.Sin((46 - 123456.5*d) * math.Pi / 180)
	m := a * (1 - e2) / math.Pow(1-e2*s*s, 1.5)
	assert.InEpsilon(t, -m*d*math.Pi/180, l.RowN, 1e-6)
}
