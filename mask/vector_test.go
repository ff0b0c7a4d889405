//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"unsafe"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// bothWays reports whether the processor can run both: on one without AVX2 there is
// nothing to compare, and the loops are what runs.
func bothWays(t *testing.T) bool {
	if !vectors {
		t.Log("no AVX2: the loops alone run on this processor")
	}
	return vectors
}

// bits32 returns the bits of the lanes of a strip.
func bits32(a *byLane32) []uint32 {
	return (*[padLanes]uint32)(unsafe.Pointer(a))[:marchLanes]
}

// TestVectorsAreTheLoops marches random ground with vectors and without, and
// compares all that is left, to the bit.
func TestVectorsAreTheLoops(t *testing.T) {
	if !bothWays(t) {
		return
	}
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

// TestVectorsGiveTheSameLayers runs looks of several kinds with vectors and
// without, over rough ground with holes, and compares the layers to the bit.
func TestVectorsGiveTheSameLayers(t *testing.T) {
	if !bothWays(t) {
		return
	}
	defer func() { vectors = true }()
	const seed = 20261202
	rng := rand.New(rand.NewPCG(seed, 1))
	for n := range 24 {
		layers := []Layer{VerdictLayer, LayoverLayer, ShadowLayer, Clearance, FoldMargin, LocalIncidence}
		if n%5 == 0 { // which cells one by one
			layers = append(layers, Returns)
		}
		src := mountainSquare(t, 150)
		for i := range src.Heights {
			src.Heights[i] += float32(n) * rng.Float32()
			if n%3 == 0 && rng.IntN(2000) == 0 {
				src.Heights[i] = float32(nan)
			}
		}
		span, err := dem.Scan(context.Background(), src)
		require.NoError(t, err)
		look := fixed(20+50*rng.Float64(), 360*rng.Float64())
		look.Bandwidth = 50e6
		switch n % 4 {
		case 0:
			layers = append(layers, WindowLow, WindowHigh)
		case 1:
			look.Kind, look.Altitude, look.Heading, look.Side = geometry.Orbit, 600e3, look.Azimuth, geometry.Left
			look.Azimuth = geometry.NotGiven
		case 2:
			l := src.Frame.At(149*rng.Float64(), 149*rng.Float64())
			look.Kind, look.Antenna, look.Position = geometry.Tripod, 30, geometry.Place{Lon: l.Lon, Lat: l.Lat}
			look.Azimuth, look.Incidence = geometry.NotGiven, geometry.NotGiven
		}
		run := func(on bool) map[Layer][]uint32 {
			vectors = on
			out := map[Layer][]uint32{}
			o := DefaultOptions()
			o.OpenEdge, o.Tile, o.Threads = n%2 == 0, 97, 1
			_, err := Run(context.Background(), Job{Source: src, Range: span, Looks: []geometry.Look{look}, Layers: layers,
				Window: src.Frame.Whole(), Options: o, Emit: func(_ int, tile *Tile) error {
					for l, a := range tile.Classes {
						for _, x := range a {
							out[l] = append(out[l], uint32(x))
						}
					}
					for l, bands := range tile.Values {
						for _, x := range bands[0] {
							if x != x {
								x = float32(nan)
							}
							out[l] = append(out[l], math.Float32bits(x))
						}
					}
					return nil
				}})
			require.NoError(t, err)
			return out
		}
		with, without := run(true), run(false)
		for _, l := range layers {
			require.Len(t, with[l], len(without[l]))
			for i, x := range without[l] {
				if x != with[l][i] {
					t.Fatalf("seed %d, grid %d, %v, %s: cell %d of the tiles has %d without vectors, %d with them", seed, n, look, l, i, x, with[l][i])
				}
			}
		}
	}
}

// TestWidenedSlacks: vectors and loops widen slacks alike, with lanes that are missing
// and limits that are infinite, and only beside bends.
func TestWidenedSlacks(t *testing.T) {
	if !bothWays(t) {
		return
	}
	defer func() { vectors = true }()
	const seed, perRow = 20261203, 0.1
	rng := rand.New(rand.NewPCG(seed, 5))
	for n := range 200 {
		var a, rough byLane32
		for k := range a {
			a[k], rough[k] = float32(40+3*k), float32(n%7)
			switch {
			case n > 0 && rng.IntN(15) == 0:
				a[k] = float32(nan)
			case n > 0 && rng.IntN(15) == 0:
				a[k] = float32(math.Inf(1 - 2*rng.IntN(2)))
			case n > 0 && rng.IntN(4) == 0:
				a[k] += float32(30 * rng.NormFloat64())
			}
			if rng.IntN(20) == 0 {
				rough[k] = float32([2]float64{nan, math.Inf(1)}[rng.IntN(2)])
			}
		}
		before, loops := rough, rough
		vectors = true
		widenTo(&rough, &a, perRow)
		vectors = false
		widenTo(&loops, &a, perRow)
		for k := 1; k <= laneStep; k++ {
			want := before[k]
			d := max(math.Abs(float64(a[k+1]-2*a[k]+a[k-1])), math.Abs(float64(a[k+2]-2*a[k+1]+a[k])))
			if !(d*perRow <= 1) {
				want = float32(max(float64(want), d*(roughShare+roughGrowth*d*perRow)))
			}
			require.InEpsilon(t, 1+off32(want), 1+off32(loops[k]), 1e-5, "seed %d, round %d, lane %d", seed, n, k)
			require.Equal(t, off32(loops[k]), off32(rough[k]), "seed %d, round %d, lane %d", seed, n, k)
		}
	}
}

// off32 returns a number as one that compares: NaN as -1.5, an infinite one as -2.5.
func off32(x float32) float64 {
	switch {
	case x != x:
		return -1.5
	case math.IsInf(float64(x), 0):
		return -2.5
	}
	return float64(x)
}
