package mask

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// A field holds the height of every cell that its rows reach, and NaN beside
// the DEM, whichever way it is turned.
func TestFieldHoldsTheHeights(t *testing.T) {
	const rows, cols, hole = 211, 173, -1
	g, err := dem.NewGrid(rows, cols, [6]float64{0, 30, 0, rows * 30, 0, -30}, "", flatLocator)
	require.NoError(t, err)
	rng := rand.New(rand.NewPCG(7, 7))
	src := &dem.Memory{Frame: g, Heights: make([]float32, rows*cols)}
	for i := range src.Heights {
		src.Heights[i] = float32(100 * rng.Float64())
	}
	src.Heights[rows*cols/2] = float32(math.NaN())
	r, err := dem.Scan(context.Background(), src)
	require.NoError(t, err)
	for _, az := range []float64{0, 20, 44, 78, 90, 112, 191, 225, 260, 280, 340} {
		var f field
		ln := fixedLanes(g, fixed(40, az))
		for _, w := range []dem.Window{g.Whole(), {Row: 40, Col: 30, Rows: 97, Cols: 65}, {Row: 200, Col: 0, Rows: 11, Cols: 1}} {
			u0, u1, v0, v1 := ln.window(w)
			f.setUp(ln, limits{low: r.Min, high: r.Max, ceiling: r.Max, holeHeight: hole}, u0, u1, v0, v1)
			require.NoError(t, f.load(src))
			for u := f.ua; u < f.ub; u++ {
				for i, h := range f.z[(u-f.ua)*f.width:][:f.width] {
					v := f.at[u-f.ua] + i
					if v < 0 || v >= ln.orient.v {
						require.True(t, h != h, "azimuth %v, u %d, v %d: height %v beside the DEM", az, u, v, h)
						continue
					}
					row, col := ln.cell(float64(u), float64(v))
					want := src.Heights[int(row)*cols+int(col)]
					if want != want {
						want = hole
					}
					require.Equal(t, want, h, "azimuth %v, u %d, v %d", az, u, v)
				}
			}
		}
	}
}
