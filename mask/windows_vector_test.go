//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// TestWindowVectors: vectors and the portable loops give the same bits, missing
// heights included.
func TestWindowVectors(t *testing.T) {
	if !vectors {
		t.Log("this processor has no vectors: the portable loops are compared with themselves")
	}
	defer func(v bool) { vectors = v }(vectors)
	const seed = 5
	t.Logf("seed %d", seed)
	for k := range uint64(2000) {
		var got [2][]float32
		for i, v := range []bool{vectors, false} {
			vectors = v
			got[i] = windowLoops(rand.New(rand.NewPCG(seed, k)))
		}
		require.Equal(t, bitsOf(got[1]), bitsOf(got[0]), "seed %d, %d", seed, k)
	}
}

// windowLoops runs the loops on random heights and returns all they say.
func windowLoops(rng *rand.Rand) []float32 {
	heights := func(n int) []float32 {
		h := make([]float32, n+vectorSlack)
		for i := range h {
			if h[i] = float32(rng.NormFloat64() * 40); rng.IntN(40) == 0 {
				h[i] = float32(nan)
			}
		}
		return h
	}
	line := func(a, b float64) linear { return linear{float32(a), float32(b * rng.Float64())} }
	var g guide
	g.setUp(0.3, 1.5, []float32{1, -1}[rng.IntN(2)])
	g.reset()
	for row := range 5 {
		var h laneRow
		copy(h[:], heights(laneStep+1))
		g.advance(&h, line(20, 0.1), row)
	}
	lane, n := rng.IntN(laneStep), 0
	n = 1 + rng.IntN(laneStep-lane)
	h0, up, down := heights(n), heights(n), heights(n)
	seen := g.sees(lane, rng.IntN(3) == 0, h0, up, line(60, 0.1), 3, n)
	out := []float32{float32(seen & 0xffff), float32(seen >> 16)}
	b := besideLine{
		here: h0, aside: heights(n), first: heights(n), firstA: heights(n),
		across: line(0.3, 0.01), rest: line(0.6, 0.01), part: line(0.5, -0.01),
		firstD: line(20, 0.01), secondD: line(40, 0.01), kinkPlace: line(33, 0.01),
	}
	if rng.IntN(3) > 0 {
		b.second, b.after = heights(n), heights(n)
		if rng.IntN(2) > 0 {
			b.kink, b.kinkEnd = heights(n), heights(n)
		}
	}
	if up, down = up[:n], down[:n]; rng.IntN(2) == 0 {
		down = nil
	}
	b.slopes(3, up, down)
	out = append(append(out, up...), down...)
	for l := range g.top {
		out = append(append(out, g.top[l][:]...), g.row[l][:]...)
	}
	return out
}

// bitsOf makes equal what is not a number.
func bitsOf(a []float32) []uint32 {
	out := make([]uint32, len(a))
	for i, x := range a {
		if out[i] = math.Float32bits(x); x != x {
			out[i] = 1
		}
	}
	return out
}
