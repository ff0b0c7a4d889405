//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// TestTrackVectorsAreTheLoops marches random ground before platforms with vectors
// and without, and compares all that is left, to the bit.
func TestTrackVectorsAreTheLoops(t *testing.T) {
	if !bothWays(t) {
		return
	}
	defer func() { vectors = true }()
	const seed = 20261202
	rng := rand.New(rand.NewPCG(seed, 1))
	src := mountainSquare(t, 90)
	at := func(row, col float64) geometry.Place {
		l := src.Frame.At(row, col)
		return geometry.Place{Lon: l.Lon, Lat: l.Lat}
	}
	for n := range 6 {
		kind, open := []geometry.Kind{geometry.Orbit, geometry.Flight, geometry.Tripod}[n/2], n%2 == 0
		for i := range src.Heights {
			src.Heights[i] += 40 * rng.Float32()
		}
		look := geometry.NewLook()
		look.Name, look.Kind = "look", kind
		switch kind {
		case geometry.Orbit:
			look.Side, look.Pass, look.Altitude = geometry.Right, geometry.Ascending, 693e3
			look.Inclination, look.Incidence = 98.18*geometry.Degree, geometry.Angle(20+30*rng.Float64())*geometry.Degree
		case geometry.Flight: // over a corner of the DEM
			look.Side, look.Start, look.End, look.Height = geometry.Right, at(150, -20), at(-60, 30), 5500
		case geometry.Tripod:
			look.Position, look.Antenna = at(90*rng.Float64()-0.5, 40), 300
		}
		lim := limits{low: 0, high: 3000, ceiling: 3000, openEdge: open, holeHeight: nan}
		ln, err := lanesOf(src, look, dem.Range{Min: lim.low, Max: lim.high})
		require.NoError(t, err)
		for _, ln := range append([]*lanes{ln}, ln.more...) {
			var f field
			f.setUp(ln, lim, 0, ln.orient.u, 0, ln.orient.v)
			require.NoError(t, f.load(src))
			for j := range f.strips {
				vectors = true
				var p strip
				if !p.setUp(&f, f.first+j) {
					continue
				}
				with := marched(&p)
				vectors = false
				var q strip
				q.setUp(&f, f.first+j)
				without := marched(&q)
				require.NotEmpty(t, with)
				for i := range p.lines {
					a, b := &p.lines[i], &q.lines[i]
					for n, pair := range [][2]*byLane32{{&a.shade, &b.shade}, {&a.nearer, &b.nearer}, {&a.farther, &b.farther}, {&a.dip, &b.dip}} {
						require.Equal(t, bits32(pair[1]), bits32(pair[0]), "%v, strip %d, row %d, line %d", kind, j, i, n)
					}
				}
				for i := range p.unsure {
					a, b := &p.unsure[i], &q.unsure[i]
					for n, pair := range [][2]*byLane32{{&a.shade, &b.shade}, {&a.nearer, &b.nearer}, {&a.farther, &b.farther}} {
						require.Equal(t, bits32(pair[1]), bits32(pair[0]), "%v, strip %d, row %d, unsure line %d", kind, j, i, n)
					}
				}
				for i := range with {
					a, b := &with[i], &without[i]
					for n, pair := range [][2]*byLane32{{&a.h, &b.h}, {&a.clear, &b.clear}, {&a.near, &b.near}, {&a.far, &b.far},
						{&a.clearU, &b.clearU}, {&a.nearU, &b.nearU}, {&a.farU, &b.farU}} {
						require.Equal(t, bits32(pair[1]), bits32(pair[0]), "%v, strip %d, %d rows from the end, margin %d", kind, j, i, n)
					}
				}
			}
		}
	}
}

// marched marches a strip and returns the margins of its rows with cells.
func marched(p *strip) (all []laneMargins) {
	p.forward()
	p.backward(func(u int) {
		var r laneMargins
		r.fill(p, u, p.sure[u-p.ua] == 3)
		all = append(all, r)
	})
	return all
}
