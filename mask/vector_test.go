//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math/rand/v2"
	"testing"
	"unsafe"

	"github.com/stretchr/testify/require"
)

// bits32 returns the bits of the lanes of a strip.
func bits32(a *byLane32) []uint32 {
	return (*[padLanes]uint32)(unsafe.Pointer(a))[:marchLanes]
}

// TestVectorsAreTheLoops marches random ground with vectors and without, and
// compares all that is left, to the bit.
func TestVectorsAreTheLoops(t *testing.T) {
	require.True(t, vectors, "the processor has no AVX2")
	defer func() { vectors = true }()
	const seed = 20261201
	rng := rand.New(rand.NewPCG(seed, 1))
	for range 20 {
		src := mountainSquare(t, 90)
		for i := range src.Heights {
			src.Heights[i] += 40 * rng.Float32()
		}
		look := fixed(20+50*rng.Float64(), 360*rng.Float64())
		ln := fixedLanes(src.Frame, look)
		lim := limits{low: 0, high: 3000, ceiling: 3000, openEdge: true, holeHeight: nan}
		var f field
		f.setUp(ln, lim, 0, ln.orient.u, 0, ln.orient.v)
		require.NoError(t, f.load(src))
		var p, q strip
		for j := range f.strips {
			var margins, others []laneMargins
			keep := func(p *strip, to *[]laneMargins) func(int) {
				return func(u int) {
					var r laneMargins
					r.fill(p, u, p.sure[u-p.ua] == 3)
					*to = append(*to, r)
				}
			}
			vectors = true
			if !p.setUp(&f, f.first+j) {
				continue
			}
			p.forward()
			p.backward(keep(&p, &margins))
			vectors = false
			q.setUp(&f, f.first+j)
			q.forward()
			q.backward(keep(&q, &others))
			for i := range p.lines {
				for _, of := range []func(*lines) *byLane32{
					func(l *lines) *byLane32 { return &l.shade },
					func(l *lines) *byLane32 { return &l.nearer },
					func(l *lines) *byLane32 { return &l.dip },
				} {
					require.Equal(t, bits32(of(&q.lines[i])), bits32(of(&p.lines[i])), "strip %d, row %d", j, i)
				}
			}
			for i := range margins {
				for _, of := range []func(*laneMargins) *byLane32{
					func(r *laneMargins) *byLane32 { return &r.h },
					func(r *laneMargins) *byLane32 { return &r.clear },
					func(r *laneMargins) *byLane32 { return &r.near },
					func(r *laneMargins) *byLane32 { return &r.far },
				} {
					require.Equal(t, bits32(of(&others[i])), bits32(of(&margins[i])), "strip %d, %d rows from the end", j, i)
				}
			}
		}
	}
}
