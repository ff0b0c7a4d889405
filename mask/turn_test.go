package mask

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// TestTurn compares turned arrays with what the indices say, at sizes around
// whole blocks.
func TestTurn(t *testing.T) {
	const seed = 8
	rng := rand.New(rand.NewPCG(seed, seed))
	for _, rows := range []int{1, 7, 8, 9, 24, 37} {
		for _, cols := range []int{1, 8, 15, 16, 33} {
			src, numbers := make([]uint8, rows*cols), make([]float32, rows*cols)
			for i := range src {
				src[i], numbers[i] = uint8(rng.Uint32()), rng.Float32()
			}
			for _, flip := range []bool{false, true} {
				got, gotNumbers := make([]uint8, rows*cols), make([]float32, rows*cols)
				turnBytes(got, src, rows, cols, flip)
				turnNumbers(gotNumbers, numbers, rows, cols, flip)
				for r := range rows {
					for c := range cols {
						from := c
						if flip {
							from = cols - 1 - c
						}
						require.Equal(t, src[from*rows+r], got[r*cols+c], "%d x %d, row %d, column %d", rows, cols, r, c)
						require.Equal(t, numbers[from*rows+r], gotNumbers[r*cols+c], "%d x %d, row %d, column %d", rows, cols, r, c)
					}
				}
			}
		}
	}
}
