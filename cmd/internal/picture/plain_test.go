package picture

import (
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// The ground alone has the grid's proportions, keeps to the size asked for and
// places map coordinates linearly between its edges, however the raster is
// stored.
func TestDraw(t *testing.T) {
	for _, flip := range [][2]bool{{false, false}, {true, false}, {false, true}, {true, true}} {
		m := sample(t, 60, 80)
		m.Grid = grid(t, 60, 80, flip[0], flip[1])
		p, err := Draw(m, 400, 300)
		require.NoError(t, err)
		size := p.Image.Bounds().Size()
		assert.LessOrEqual(t, size.X, 400)
		assert.LessOrEqual(t, size.Y, 300)
		assert.True(t, size.X == 400 || size.Y == 300, "it fills one side: %v", size)
		// 80 columns of 0.0002 degrees at 47 N: 76.06 km a degree (WGS84, from
		// memory).
		assert.InDelta(t, 80*0.0002*76060/float64(size.X), p.MetresPerPixel, 0.01)
		assert.InDelta(t, 0, p.North, 1e-6)
		west, north := 8.0, 47.0
		for _, place := range [][4]float64{
			{west, north, 0, 0}, {west + 0.016, north - 0.012, 1, 1}, {west + 0.004, north - 0.009, 0.25, 0.75}, {west + 0.032, north, 2, 0},
		} {
			x, y := p.At(place[0], place[1])
			assert.InDelta(t, place[2]*float64(size.X), x, 1e-6)
			assert.InDelta(t, place[3]*float64(size.Y), y, 1e-6)
		}
	}
	m := sample(t, 5, 6)
	m.Heights = m.Heights[1:]
	_, err := Draw(m, 10, 10)
	assert.Error(t, err)
}
