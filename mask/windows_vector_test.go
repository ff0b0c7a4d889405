//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/geometry"
)

// TestWindowVectors: vectors and the portable loops give the same bits, missing
// heights included.
func TestWindowVectors(t *testing.T) {
	if !vectors {
		t.Log("this processor has no vectors: the portable loops are compared with themselves")
	}
	have := vectors
	defer func() { vectors = have }()
	const seed = 5
	t.Logf("seed %d", seed)
	for k := range uint64(2000) {
		var got [2][]float32
		for i, v := range []bool{have, false} {
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
	for c := range up {
		if rng.IntN(2) == 0 {
			up[c] = g.bound
		}
	}
	seen := g.sees(lane, rng.IntN(3) == 0, h0, up, line(60, 0.1), 3, n)
	out := []float32{float32(seen & 0xffff), float32(seen >> 16)}
	b := besideLine{
		here: h0, aside: heights(n), first: heights(n), firstA: heights(n),
		across: line(0.3, 0.01), firstD: line(20, 0.01),
	}
	for k := range b.points {
		if rng.IntN(3) > 0 {
			b.points[k] = besidePoint{heights(n), heights(n), line(0.6, 0.01), line(40, 0.01)}
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
	out = append(out, windowSearches(rng, heights)...)
	return append(out, sweepLoops(rng, heights, line)...)
}

// windowSearches returns what the loops along a line say.
func windowSearches(rng *rand.Rand, heights func(n int) []float32) (out []float32) {
	n := 4 + rng.IntN(60)
	q := steepness{a: heights(n), b: heights(n), s: make([]float32, n+vectorSlack), mix: rng.Float32(), h0: 3, s0: -100, sign: -1}
	for i := range q.s {
		q.s[i] = float32(30 * i)
	}
	out = append(out, float32(q.search(n)))
	var p summits
	fill := func(a *bySummit, scale float32) {
		for i, h := range heights(0)[:len(a)] {
			a[i] = scale * h
		}
	}
	fill(&p.least, 0.01)
	for k := range p.rise {
		fill(&p.rise[k], 1)
		fill(&p.away[k], 3)
	}
	for k := range p.arc {
		a := &p.arc[k]
		for _, v := range []*bySummit{&a.h, &a.r, &a.d, &a.away, &a.step} {
			fill(v, 1)
		}
		fill(&a.t0, 0.01)
		fill(&a.t1, 0.02)
	}
	p.raiseAll(len(p.least))
	return append(out, p.least[:]...)
}

// sweepLoops returns what the loops over the cells of a sweep say.
func sweepLoops(rng *rand.Rand, heights func(n int) []float32, line func(a, b float64) linear) []float32 {
	n := 1 + rng.IntN(40)
	lanes, slopes := make([]float32, n), make([]float32, n)
	heightsBetween(lanes, heights(n+1), line(0.3, 0.01), 2)
	alongLine(slopes, heights(n)[:n], heights(n)[:n], line(0.02, 0.01), line(-0.01, 0.01), 5)
	out := append(lanes, slopes...)
	x := windower{sure: rng.IntN(2) == 0}
	rise := heights(32)
	for _, a := range []*[]float32{&x.shade, &x.shadeU, &x.fold, &x.foldU, &rise} {
		*a = heights(32)
		for i := range *a {
			(*a)[i] /= 40
		}
	}
	cells := make([]int32, 32)
	for i := range cells {
		cells[i] = int32(i)
		x.shadeU[i], x.foldU[i] = higher(x.shadeU[i], x.shade[i]), higher(x.foldU[i], x.fold[i])
	}
	if x.sure {
		x.shadeU, x.foldU = x.shade, x.fold
	}
	var incidences []geometry.Angle
	for i := range 1 + rng.IntN(40) {
		incidences = append(incidences, geometry.Angle(15+i)*geometry.Degree)
	}
	s := newSteps(incidences, 0.3)
	var e endsBlock
	if e.fill(&s, &x, rise, cells) {
		out = append(out, 1)
	}
	for _, ends := range e {
		for _, b := range ends {
			out = append(out, float32(b))
		}
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
