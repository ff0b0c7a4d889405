package mask_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// ray walks from a tripod to a cell in steps of a tenth of a cell on the
// bilinear surface, over the curved earth: hidden when ground on the way stands
// at least as high in the radar's eye as the cell.
func rayHides(t testing.TB, m *dem.Memory, p geometry.Platform, row, col, r0, c0 float64) (hidden, known bool, margin float64) {
	t.Helper()
	g := m.Frame
	angle := func(r, c float64) float64 {
		i, j := min(int(r), g.Rows-2), min(int(c), g.Cols-2)
		u, v := r-float64(i), c-float64(j)
		at := func(a, b int) float64 { return float64(m.Heights[(i+a)*g.Cols+j+b]) }
		mix := func(a, b, w float64) float64 {
			if w == 0 {
				return a
			}
			return a + w*(b-a)
		}
		h := mix(mix(at(0, 0), at(0, 1), v), mix(at(1, 0), at(1, 1), v), u)
		if h != h {
			return math.NaN()
		}
		l := g.At(r, c)
		v2, _ := p.View(geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: h})
		return float64(v2.LookAngle)
	}
	own := angle(row, col)
	if own != own {
		return false, false, 0
	}
	dr, dc := row-r0, col-c0
	steps := math.Max(math.Abs(dr), math.Abs(dc))
	top := math.Inf(-1)
	for k := 1.0; ; k++ {
		f := 1 - k*0.1/steps
		if f*steps < 1 { // the radar's own near field
			break
		}
		a := angle(r0+f*dr, c0+f*dc)
		if a != a {
			return false, false, 0
		}
		top = math.Max(top, a)
	}
	return top >= own, true, own - top
}

// TestTripodSees compares a ground-based radar on the mountain with rays from
// the antenna to a sample of cells: shadow in all directions.
func TestTripodSees(t *testing.T) {
	m := mountain(t)
	g := m.Frame
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	rng := rand.New(rand.NewPCG(*walkSeed, 77))
	for _, at := range [][2]float64{{240.3, 160.7}, {120, 90}, {390.5, 250.25}} {
		l := g.At(at[0], at[1])
		look := geometry.NewLook()
		look.Name, look.Kind = "t", geometry.Tripod
		look.Position, look.Antenna = geometry.Place{Lon: l.Lon, Lat: l.Lat}, 25
		p, err := mask.PlatformOf(m, look)
		require.NoError(t, err)
		options := mask.DefaultOptions()
		options.OpenEdge = true
		got := march(t, m, g.Whole(), marginLayers, options, look)
		cells, differ, hidden := 0, 0, 0
		_ = span
		for range 1500 {
			row, col := rng.IntN(g.Rows), rng.IntN(g.Cols)
			if math.Hypot(float64(row)-at[0], float64(col)-at[1]) < 3 {
				continue
			}
			hides, known, margin := rayHides(t, m, p, float64(row), float64(col), at[0], at[1])
			k := got[0].kind(mask.ShadowLayer, row, col)
			if !known || k == kindUnsure || k == kindNone {
				continue
			}
			cells++
			if hides {
				hidden++
			}
			if hides != (k == kindHidden) {
				differ++
				if differ < 6 {
					t.Logf("row %d, column %d: kind %d, ray hides %v by %.3g", row, col, k, hides, margin)
				}
			}
		}
		t.Logf("at %v: %d cells, %d hidden, %d differ", at, cells, hidden, differ)
		assert.Greater(t, cells, 500)
		assert.LessOrEqual(t, differ, cells/200)
	}
}
