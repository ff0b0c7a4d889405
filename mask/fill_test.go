package mask

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// The vectors give the bits of the portable loops, also where heights are
// missing. In a build without vectors both sides are the portable loops, and the
// differences are compared with those taken one by one.
func TestVectorsOfFill(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	rng := rand.New(rand.NewPCG(seed, 1))
	fill := func(a []float32, spread float64, holes bool) {
		for i := range a {
			a[i] = float32(spread * rng.NormFloat64())
			if holes && rng.IntN(40) == 0 {
				a[i] = float32(math.NaN())
			}
		}
	}
	for n := range 200 {
		what := fmt.Sprintf("seed %d, case %d", seed, n)
		heights := make([]float32, n+2)
		fill(heights, 100, n%2 == 1)
		got, want := make([]float32, n), make([]float32, n)
		whole := central(got, heights[:n], heights[1:n+1], heights[2:])
		require.Equal(t, centralScalar(want, heights[:n], heights[1:n+1], heights[2:]), whole, what)
		for i := range got {
			require.Equal(t, math.Float32bits(want[i]), math.Float32bits(got[i]), what)
			if whole {
				require.Equal(t, difference(heights[i], heights[i+1], heights[i+2], true, true), got[i], what)
			}
		}

		w := worker{runner: &runner{job: Job{Options: DefaultOptions()}}}
		w.zc, w.zr = make([]float32, viewStep), make([]float32, viewStep)
		fill(w.zc, 1, n%2 == 1)
		fill(w.zr, 1, n%2 == 1)
		var a, b view
		for i := range 3 {
			a.up[i], a.c[i], a.r[i] = rng.Float64(), rng.NormFloat64(), rng.NormFloat64()
			b.up[i], b.c[i], b.r[i] = a.up[i]+0.1*rng.Float64(), a.c[i]+0.1*rng.Float64(), a.r[i]+0.1*rng.Float64()
		}
		w.turns = make([]uint8, viewStep)
		w.wantFacets, w.wantViews = n%3 != 0, n%3 == 2
		w.facets.resize(viewStep)
		w.seeBlock(&a, &b, 0, viewStep, 0)
		turns, facets := append([]uint8{}, w.turns...), fmt.Sprint(w.facets)
		w.seeBlock(&a, &b, 0, 11, 0) // parts of a block take the portable loop
		w.seeBlock(&a, &b, 11, viewStep, 11)
		require.Equal(t, w.turns, turns, what)
		require.Equal(t, fmt.Sprint(w.facets), facets, what)
	}
}

// The vectors of values give the bits of the portable loops.
func TestVectorsOfValues(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	rng := rand.New(rand.NewPCG(seed, 3))
	for n := range 300 {
		var f facetRow
		f.resize(n)
		for j := range n {
			lean := float64(n%2) * 0.1 * rng.NormFloat64()
			f.set(j, geometry.Facet{Along: 0.5 + rng.NormFloat64(), Above: rng.NormFloat64(), Across: rng.NormFloat64()}, rng.Float64(), rng.Float64(), lean)
			if rng.IntN(50) == 0 {
				f.set(j, geometry.Facet{Along: nan, Above: nan, Across: nan}, 1, 1, lean)
			}
		}
		row := func(layer Layer) []float32 {
			w := worker{sheet: sheet{w: dem.Window{Rows: 1, Cols: n}, padded: dem.Window{Rows: 1, Cols: n}, pad: make([]float32, n)}}
			w.facets = f
			out := make([]float32, n)
			w.valueRow(layer, [][]float32{out}, 0, nil, nil)
			return out
		}
		incidence, foreshortening := row(LocalIncidence), row(Foreshortening)
		for j := range n {
			what := fmt.Sprintf("seed %d, row of %d, column %d", seed, n, j)
			want := [2]float64{f.facet(j).LocalIncidence().Degrees(), f.sight(j).Foreshortening(f.facet(j))}
			require.Equal(t, fmt.Sprint(float32(want[0]), float32(want[1])), fmt.Sprint(incidence[j], foreshortening[j]), what)
		}
	}
}

// Classes looked up eight at a time are those looked up one by one, and so are
// the tallies.
func TestClassesOfRows(t *testing.T) {
	seed := uint64(time.Now().UnixNano())
	rng := rand.New(rand.NewPCG(seed, 2))
	codes := []uint8{uint8(NoData), uint8(Open), uint8(LayoverFarther), uint8(LayoverNearer), uint8(LayoverBoth), uint8(CastShadow), uint8(Undetermined), uint8(foldUnknown)}
	for n := range 100 {
		raw, turns, out := make([]uint8, n), make([]uint8, n), make([]uint8, n)
		run, c, d := 0, uint8(0), uint8(0)
		for i := range raw {
			if run--; run < 0 {
				run, c, d = rng.IntN(20), codes[rng.IntN(len(codes))], uint8(rng.IntN(8))
			}
			raw[i], turns[i] = c, d
		}
		classes(out, raw, turns, &verdictOf)
		var got, want [256]int64
		countClasses(&got, out)
		for i, c := range out {
			l := layoverClass(Class(raw[i]), int(turns[i]))
			if l == Open && turns[i]&turnCompressed != 0 {
				l = Compressed
			}
			require.Equal(t, l, Class(c), "seed %d, %d cells", seed, n)
			want[c]++
		}
		require.Equal(t, want, got, "seed %d", seed)
	}
}

// The vectors give the turns of cells abreast of platforms that the portable
// loops give one by one.
func TestVectorsOfSights(t *testing.T) {
	src := mountainSquare(t, 90)
	src.Heights[400] = float32(math.NaN())
	r, err := dem.Scan(context.Background(), src)
	require.NoError(t, err)
	at := func(row, col float64) geometry.Place {
		l := src.Frame.At(row, col)
		return geometry.Place{Lon: l.Lon, Lat: l.Lat}
	}
	look := func(kind geometry.Kind) geometry.Look {
		l := geometry.NewLook()
		l.Name, l.Kind, l.Side = "a", kind, geometry.Right
		return l
	}
	orbit, flight, tripod := look(geometry.Orbit), look(geometry.Flight), look(geometry.Tripod)
	orbit.Pass, orbit.Altitude = geometry.Ascending, 693e3
	orbit.Inclination, orbit.Incidence = 98.18*geometry.Degree, 39*geometry.Degree
	flight.Start, flight.End, flight.Height = at(150, -20), at(-50, -60), 5000
	flight.NearIncidence, flight.FarIncidence = 30*geometry.Degree, 60*geometry.Degree
	tripod.Position, tripod.Antenna, tripod.MaxRange = at(40, 30), 3, 1500
	for _, l := range []geometry.Look{orbit, flight, tripod} {
		run, err := newRunner(Job{Source: src, Range: r, Looks: []geometry.Look{l}, Layers: []Layer{VerdictLayer, LineOfSight},
			Window: src.Frame.Whole(), Options: DefaultOptions()})
		require.NoError(t, err)
		w := run.newWorker()
		require.NoError(t, w.tile(context.Background(), dem.Window{Row: 3, Col: 1, Rows: 80, Cols: 87}))
		seen := 0
		for row := range 80 {
			w.sheet.slopes(row, w.zc, w.zr)
			w.seeAbreast(run.looks[0], &l, row)
			turns, unseen, facets := append([]uint8{}, w.turns...), append([]bool{}, w.unseen...), fmt.Sprint(w.facets)
			s := run.looks[0].sights
			s.row(&w.sights, w.grid, 3+row, 0, s.cols-2)
			c := sightCells{worker: w, ln: run.looks[0], swath: swathOf(&l), row: 3 + row, col: 1, z: w.sheet.heights(row)}
			for j := range turns {
				c.patch = s.patch(&w.sights, s.left(1+j))
				c.seeCell(j)
				if !unseen[j] {
					seen++
				}
			}
			require.Equal(t, w.turns, turns, "%v, row %d", l.Kind, row)
			require.Equal(t, w.unseen, unseen, "%v, row %d", l.Kind, row)
			require.Equal(t, fmt.Sprint(w.facets), facets, "%v, row %d", l.Kind, row)
		}
		require.Greater(t, seen, 1000, "%v", l.Kind)
	}
}
