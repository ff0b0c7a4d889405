package mask_test

import (
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

// column is a profile of the grid along a look to the north: heights from south
// to north, straight between the cells, cut into fine steps.
type column struct{ s, m, r []float64 }

const columnSteps = 400 // a cell

func cutColumn(t *testing.T, m *dem.Memory, col int, cell, incidence float64) (c column, lit []bool) {
	t.Helper()
	rows, cols := m.Frame.Rows, m.Frame.Cols
	sin, cos := math.Sincos(incidence)
	top := math.Inf(-1)
	for k := 0; k <= (rows-1)*columnSteps; k++ {
		x := float64(k) / columnSteps
		i := min(int(x), rows-2)
		at := func(i int) float64 { return float64(m.Heights[(rows-1-i)*cols+col]) }
		h := at(i) + (x-float64(i))*(at(i+1)-at(i))
		s := x * cell
		c.s, c.m, c.r = append(c.s, s), append(c.m, h+s*cos/sin), append(c.r, s*sin-h*cos)
		lit = append(lit, c.m[k] > top)
		top = math.Max(top, c.m[k])
	}
	return c, lit
}

// TestReturnsAndShare compares both layers with fine steps along the columns of
// rolling ground: a lit point of equal slant range is a change of sign between
// two lit steps, the share is the part of the lit steps within the bin that hang
// together with the cell, weighted by their length.
func TestReturnsAndShare(t *testing.T) {
	rng := rand.New(rand.NewPCG(*walkSeed, 31))
	const rows, cols, cell = 90, 12, 20.0
	folded := 0
	for _, degrees := range []float64{22, 31, 44} {
		m := &dem.Memory{Frame: testterrain.Metric(rows, cols, cell, cell, 0), Heights: testterrain.Fractal(rng, rows, cols, 420, 1.3)}
		look := fixedLook(geometry.Angle(degrees)*deg, 0)
		look.Bandwidth = 15e6
		o := mask.DefaultOptions()
		o.OpenEdge = true
		got := march(t, m, m.Frame.Whole(), []mask.Layer{mask.LayoverLayer, mask.Returns, mask.Share}, o, look)[0]
		bin := 299792458.0 / 2 / look.Bandwidth
		differ, cells, far := 0, 0, 0
		for col := range cols {
			c, lit := cutColumn(t, m, col, cell, float64(look.Incidence))
			for i := range rows {
				at := i * columnSteps
				k := (rows-1-i)*cols + col
				have, part := float64(got.values[mask.Returns][0][k]), float64(got.values[mask.Share][0][k])
				if kind := got.kind(mask.LayoverLayer, rows-1-i, col); kind == kindHidden {
					require.True(t, have != have && part != part)
					continue
				}
				want, total, own := 1.0, 0.0, 0.0
				stretch, mine := 0.0, false
				for j := 1; j < len(c.s); j++ {
					both := lit[j] && lit[j-1]
					if both && j != at && j-1 != at && (c.r[j]-c.r[at])*(c.r[j-1]-c.r[at]) < 0 {
						want++
					}
					if both && math.Abs(c.r[j]-c.r[at]) < bin/2 {
						stretch += math.Hypot(c.s[j]-c.s[j-1], (c.m[j]-c.m[j-1])-(c.s[j]-c.s[j-1])/math.Tan(float64(look.Incidence)))
						mine = mine || j == at || j-1 == at
						continue
					}
					total += stretch
					if mine {
						own += stretch
					}
					stretch, mine = 0, false
				}
				total += stretch
				if mine {
					own += stretch
				}
				cells++
				if want > 1 {
					folded++
				}
				if want != have {
					differ++
				}
				if total > 0 && math.Abs(own/total-part) > 0.05 {
					far++
				}
			}
		}
		t.Logf("seed %d, incidence %v: %d cells, returns differ in %d, share by more than 0.05 in %d", *walkSeed, degrees, cells, differ, far)
		assert.LessOrEqual(t, differ, cells/100, "returns")
		assert.LessOrEqual(t, far, cells/50, "share")
	}
	assert.Greater(t, folded, 100, "folded cells met")
}
