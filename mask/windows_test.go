package mask

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

func TestWindowsQuick(t *testing.T) {
	src := mountainSquare(t, 600)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(t, err)
	for _, az := range []float64{78, 191, 225, 0} {
		var looks []geometry.Look
		for _, inc := range []float64{20, 30, 39, 50, 65} {
			looks = append(looks, fixed(inc, az))
		}
		o := DefaultOptions()
		o.OpenEdge = az != 0
		n := 600 * 600
		sh := make([][]uint8, len(looks))
		ly := make([][]uint8, len(looks))
		low, high := make([]float32, n), make([]float32, n)
		for i := range sh {
			sh[i] = make([]uint8, n)
			ly[i] = make([]uint8, n)
		}
		_, err := Run(context.Background(), Job{Source: src, Range: rng, Looks: looks,
			Layers: []Layer{LayoverLayer, ShadowLayer, WindowLow, WindowHigh}, Window: src.Frame.Whole(), Options: o,
			Emit: func(look int, tile *Tile) error {
				w := tile.Window
				for r := range w.Rows {
					at := (w.Row+r)*600 + w.Col
					copy(sh[look][at:], tile.Classes[ShadowLayer][r*w.Cols:(r+1)*w.Cols])
					copy(ly[look][at:], tile.Classes[LayoverLayer][r*w.Cols:(r+1)*w.Cols])
					copy(low[at:], tile.Values[WindowLow][0][r*w.Cols:(r+1)*w.Cols])
					copy(high[at:], tile.Values[WindowHigh][0][r*w.Cols:(r+1)*w.Cols])
				}
				return nil
			}})
		require.NoError(t, err)
		for i, l := range looks {
			th := float32(l.Incidence.Degrees())
			var nsh, dsh, nly, missing, extra int
			var tol [4]int
			for c := range n {
				k := Class(sh[i][c]).Kind()
				if k == 5 {
					continue
				}
				hid := th >= high[c]
				if k == 4 {
					nsh++
				}
				if hid != (k == 4) {
					dsh++
					d := th - high[c]
					if d < 0 {
						d = -d
					}
					for b, v := range []float32{0.01, 0.1, 0.5, 2} {
						if d > v {
							tol[b]++
						}
					}
				}
				if k == 4 || hid {
					continue
				}
				f := Class(ly[i][c]).Kind() == 3
				if f {
					nly++
				}
				w := th <= low[c]
				if f && !w {
					missing++
				}
				if !f && w {
					extra++
				}
			}
			fmt.Printf("az %v inc %v: shadow %d differ %d %v; layover %d missing %d extra %d\n", az, th, nsh, dsh, tol, nly, missing, extra)
		}
	}
}
