package mask_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/bits"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"sync"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// space is a look space over a scene.
type space struct {
	scene
	azimuths, incidences []geometry.Angle
	inside               []bool
	kinds                [][]int // by look and cell; none for cells that do not count
}

// degreesOf turns degrees into angles.
func degreesOf(values ...float64) (out []geometry.Angle) {
	for _, v := range values {
		out = append(out, geometry.Angle(v)*deg)
	}
	return out
}

// newSpace finds the open cells of every look from sweeps of one azimuth: their
// number and their middle say which incidences of a cell are open.
func newSpace(t testing.TB, s scene, azimuths, incidences []geometry.Angle, inside []bool) *space {
	p := &space{scene: s, azimuths: azimuths, incidences: incidences, inside: inside}
	cols := s.terrain.Frame.Cols
	for _, a := range azimuths {
		kinds := make([][]int, len(incidences))
		for i := range kinds {
			kinds[i] = make([]int, len(s.terrain.Heights))
		}
		one := *p
		one.azimuths = []geometry.Angle{a}
		job := one.job(t, 1)
		job.Emit = func(tile *mask.SweepTile) error {
			w := tile.Window
			for k, n := range tile.OpenCount {
				c := (w.Row+k/w.Cols)*cols + w.Col + k%w.Cols
				for from := range incidences {
					to := from + int(n) - 1
					if n > 0 && to < len(incidences) && near(incidences[from].Degrees()+incidences[to].Degrees(), 2*float64(tile.BestIncidence[k])) {
						for i := from; i <= to; i++ {
							kinds[i][c] = kindOpen
						}
					}
				}
			}
			return nil
		}
		_, err := mask.Sweep(context.Background(), job)
		require.NoError(t, err)
		p.kinds = append(p.kinds, kinds...)
	}
	return p
}

func near(a, b float64) bool { return math.Abs(a-b) < 1e-3 }

// byLayers classifies the cells of look i by other ways: the window layers, and
// foreshortening at the incidence.
func (p *space) byLayers(t testing.TB, i int) (n [6]int64) {
	azimuth, incidence := p.look(i)
	m := p.terrain
	win := windowsOf(t, m, p.options, fixedLook(45*deg, azimuth))
	short := march(t, m, m.Frame.Whole(), []mask.Layer{mask.Foreshortening}, p.options, fixedLook(incidence, azimuth))
	for c, h := range m.Heights {
		if h == h && (p.inside == nil || p.inside[c]) {
			n[kindAt(win.at(c), incidence.Degrees(), short[0].values[mask.Foreshortening][0][c])]++
		}
	}
	return n
}

const kindCompressed = 2

func kindAt(w window, incidence float64, foreshortening float32) int {
	switch {
	case hides(w.high, incidence):
		return kindHidden
	case hides(w.highWorst, incidence):
		return kindUnsure
	case folds(w.low, incidence):
		return kindFolded
	case folds(w.lowWorst, incidence):
		return kindUnsure
	case float64(foreshortening) < mask.DefaultOptions().CompressedBelow:
		return kindCompressed
	}
	return kindOpen
}

// job is the sweep of the space.
func (p *space) job(t testing.TB, best int) mask.SweepJob {
	return mask.SweepJob{
		Source: p.terrain, Range: spanOf(t, p.terrain), Azimuths: p.azimuths, Incidences: p.incidences,
		Window: p.terrain.Frame.Whole(), Inside: p.inside, Best: best, Condition: 3, Options: p.options,
	}
}

// served counts the cells that a set of looks serves, by the definition: open in
// one of them, or in two that are apart.
func (p *space) served(set []int, two bool) (n int64) {
	for c := range p.terrain.Heights {
		ok := false
		for i, a := range set {
			if p.kinds[a][c] != kindOpen {
				continue
			}
			ok = ok || !two
			for _, b := range set[:i] {
				ok = ok || two && p.kinds[b][c] == kindOpen && p.apart(a, b)
			}
		}
		if ok {
			n++
		}
	}
	return n
}

func (p *space) look(i int) (azimuth, incidence geometry.Angle) {
	n := len(p.incidences)
	return p.azimuths[i/n], p.incidences[i%n]
}

func (p *space) apart(a, b int) bool {
	sight := func(i int) geometry.ENU {
		azimuth, incidence := p.look(i)
		return geometry.LineOfSight(incidence, azimuth)
	}
	s, ok := geometry.SolveEastUp(sight(a), sight(b))
	return ok && s.Condition() <= 3
}

// exhaust returns the most cells that any set of a size serves.
func (p *space) exhaust(size int, two bool) (most int64) {
	for word := range uint(1) << len(p.kinds) {
		if bits.OnesCount(word) != size {
			continue
		}
		var set []int
		for rest := word; rest != 0; rest &= rest - 1 {
			set = append(set, bits.TrailingZeros(rest))
		}
		most = max(most, p.served(set, two))
	}
	return most
}

// sweepScene draws a scene and a part of it.
func sweepScene(k int) (scene, []bool) {
	rng := rand.New(rand.NewPCG(*walkSeed, uint64(3000+k)))
	s := randomScene(rng)
	var inside []bool
	if k%3 == 0 {
		inside = make([]bool, len(s.terrain.Heights))
		for i := range inside {
			inside[i] = rng.IntN(3) > 0
		}
	}
	return s, inside
}

// layersDiffer is the share of cells that may differ between a sweep and the
// window layers: gentle slopes of the lanes show the layers a few places more to
// look at than a sweep needs. On grids this small three cells are a lot.
const layersDiffer = 0.01

// TestSweepAgainstExhaustion: shares of every look and the best sets of up to
// four, on spaces of twelve looks.
func TestSweepAgainstExhaustion(t *testing.T) {
	for k := range 30 {
		s, inside := sweepScene(k)
		p := newSpace(t, s, degreesOf(13, 100, 265), degreesOf(17, 30, 44, 61), inside)
		got, err := mask.Sweep(context.Background(), p.job(t, 4))
		require.NoError(t, err)
		where := fmt.Sprintf("seed %d, grid %d: %v", *walkSeed, 3000+k, s)
		for i, l := range got.Looks {
			have := [6]int64{0, l.Open, l.Compressed, l.Layover, l.Shadow, l.Undetermined}
			require.Equal(t, got.Cells, l.Open+l.Compressed+l.Layover+l.Shadow+l.Undetermined, where)
			require.Equal(t, p.served([]int{i}, false), l.Open, "%s: look %d", where, i)
			want := p.byLayers(t, i)
			for kind := range have {
				require.InDelta(t, want[kind], have[kind], 3+layersDiffer*float64(got.Cells), "%s: look %d, kind %d", where, i, kind)
			}
		}
		p.checkSets(t, got.Coverage, 1, false, where)
		p.checkSets(t, got.TwoDirections, 2, true, where)
	}
}

// checkSets holds sets against exhaustion. A size that is left out gains nothing.
func (p *space) checkSets(t *testing.T, sets []mask.LookSet, first int, two bool, where string) {
	t.Helper()
	last := int64(0)
	for size := first; size <= 4; size++ {
		most := p.exhaust(size, two)
		if len(sets) > 0 && len(sets[0].Looks) == size {
			require.Equal(t, most, sets[0].Cells, "%s: %d looks, two directions %v", where, size, two)
			require.Equal(t, most, p.served(sets[0].Looks, two), "%s: %v", where, sets[0])
			require.True(t, sets[0].Exact)
			require.Greater(t, most, last)
			last, sets = most, sets[1:]
			continue
		}
		require.Equal(t, last, most, "%s: no set of %d looks, two directions %v", where, size, two)
	}
}

// TestSweepOfManyLooks: above 64 looks, pairs are still exact and larger sets
// greedy. Memory and a file give the same.
func TestSweepOfManyLooks(t *testing.T) {
	for k := range 3 {
		s, inside := sweepScene(k)
		p := newSpace(t, s, degreesOf(0, 40, 95, 160, 215, 270, 330), degreesOf(15, 20, 25, 30, 35, 40, 45, 50, 55, 60), inside)
		job := p.job(t, 4)
		got, err := mask.Sweep(context.Background(), job)
		require.NoError(t, err)
		file, err := os.Create(filepath.Join(t.TempDir(), "scratch"))
		require.NoError(t, err)
		job.Scratch, job.Options.Tile, job.Options.Threads = file, 7, 3
		again, err := mask.Sweep(context.Background(), job)
		require.NoError(t, err)
		require.NoError(t, file.Close())
		assert.Equal(t, got, again)
		where := fmt.Sprintf("seed %d, grid %d: %v", *walkSeed, 3000+k, s)
		var pairs [2]int64
		for a := range p.kinds {
			for b := range a {
				pairs[0] = max(pairs[0], p.served([]int{b, a}, false))
				pairs[1] = max(pairs[1], p.served([]int{b, a}, true))
			}
		}
		if len(got.Coverage) > 1 {
			assert.Equal(t, pairs[0], got.Coverage[1].Cells, where)
		}
		if len(got.TwoDirections) > 0 {
			assert.Equal(t, pairs[1], got.TwoDirections[0].Cells, where)
		} else {
			assert.Zero(t, pairs[1], where)
		}
		for two, sets := range map[bool][]mask.LookSet{false: got.Coverage, true: got.TwoDirections} {
			for n, set := range sets {
				assert.Equal(t, p.served(set.Looks, two), set.Cells, "%s: %v", where, set)
				if len(set.Looks) < 3 {
					continue
				}
				// No look joins the set before to serve more.
				before := sets[n-1].Looks
				for a := range p.kinds {
					with := append(slices.Clone(before), a)
					assert.LessOrEqual(t, p.served(with, two), set.Cells, "%s: %v", where, with)
				}
			}
		}
	}
}

// TestSweepTiles: the cells' own results, and their independence of tiles.
func TestSweepTiles(t *testing.T) {
	s, inside := sweepScene(0)
	p := newSpace(t, s, degreesOf(13, 100, 265), degreesOf(17, 30, 44, 61), inside)
	cols := s.terrain.Frame.Cols
	run := func(tile int) (*mask.SweepResult, [3][]float32) {
		var out [3][]float32
		for i := range out {
			out[i] = make([]float32, len(s.terrain.Heights))
		}
		var mu sync.Mutex
		job := p.job(t, 2)
		job.Options.Tile = tile
		last := int64(0)
		job.Progress = func(done, all int64) {
			assert.Equal(t, last+1, done)
			assert.LessOrEqual(t, done, all)
			last = done
		}
		job.Emit = func(tile *mask.SweepTile) error {
			mu.Lock()
			defer mu.Unlock()
			w := tile.Window
			for k, values := range [][]float32{tile.OpenCount, tile.BestAzimuth, tile.BestIncidence} {
				for r := range w.Rows {
					copy(out[k][(w.Row+r)*cols+w.Col:], values[r*w.Cols:(r+1)*w.Cols])
				}
			}
			return nil
		}
		got, err := mask.Sweep(context.Background(), job)
		require.NoError(t, err)
		return got, out
	}
	got, values := run(0)
	again, tiled := run(9)
	assert.Equal(t, got, again)
	for c := range s.terrain.Heights {
		if h := s.terrain.Heights[c]; h != h || !inside[c] {
			continue
		}
		require.Equal(t, fmt.Sprint(values[0][c], values[1][c], values[2][c]), fmt.Sprint(tiled[0][c], tiled[1][c], tiled[2][c]))
		open, best, most, mid := 0, -1, 0, 0.0
		for a := range p.azimuths {
			n, sum := 0, 0.0
			for i, inc := range p.incidences {
				if p.kinds[a*len(p.incidences)+i][c] == kindOpen {
					n++
					sum += inc.Degrees()
				}
			}
			open += n
			if n > most {
				best, most, mid = a, n, sum
			}
		}
		require.Equal(t, float32(open), values[0][c])
		if best < 0 {
			require.True(t, values[1][c] != values[1][c] && values[2][c] != values[2][c])
			continue
		}
		require.InDelta(t, p.azimuths[best].Degrees(), values[1][c], 1e-4)
		if most <= 2 { // the middle of one or two is their mean
			require.InDelta(t, mid/float64(most), values[2][c], 1e-4)
		}
	}
}

// TestRank: the user's looks by the masks of Run, against exhaustion over the
// verdicts.
func TestRank(t *testing.T) {
	for k := range 10 {
		s, inside := sweepScene(k)
		var looks []geometry.Look
		var sights []geometry.ENU
		p := &space{scene: s, inside: inside, incidences: degreesOf(0)}
		for i, v := range [][2]float64{{30, 13}, {44, 100}, {39, 265}, {52, 282}, {25, 282}} {
			l := fixedLook(geometry.Angle(v[0])*deg, geometry.Angle(v[1])*deg)
			l.Name = fmt.Sprint(i)
			looks = append(looks, l)
			sights = append(sights, geometry.LineOfSight(l.Incidence, l.Azimuth))
			got := march(t, s.terrain, s.terrain.Frame.Whole(), []mask.Layer{mask.VerdictLayer}, s.options, l)
			kinds := make([]int, len(s.terrain.Heights))
			for c, code := range got[0].classes[mask.VerdictLayer] {
				if inside == nil || inside[c] {
					kinds[c] = mask.Class(code).Kind()
				}
			}
			p.kinds = append(p.kinds, kinds)
		}
		res, err := mask.Rank(context.Background(), mask.RankJob{
			Job:    mask.Job{Source: s.terrain, Range: spanOf(t, s.terrain), Looks: looks, Window: s.terrain.Frame.Whole(), Options: s.options},
			Inside: inside, Sights: sights, Best: 4, Condition: 3,
		})
		require.NoError(t, err)
		for i, l := range res.Looks {
			var n [6]int64
			for _, kind := range p.kinds[i] {
				n[kind]++
			}
			require.Equal(t, [6]int64{n[0], l.Open, l.Compressed, l.Layover, l.Shadow, l.Undetermined}, n)
		}
		where := fmt.Sprintf("seed %d, grid %d: %v", *walkSeed, 3000+k, s)
		p.checkRanked(t, res, sights, where)
	}
}

// checkRanked is checkSets for looks that are no grid of angles.
func (p *space) checkRanked(t *testing.T, res *mask.SweepResult, sights []geometry.ENU, where string) {
	t.Helper()
	value := func(set uint, two bool) (n int64) {
		for c := range p.terrain.Heights {
			ok := false
			for a := range p.kinds {
				for b := range p.kinds {
					if set>>a&1 == 0 || set>>b&1 == 0 || p.kinds[a][c] != kindOpen || p.kinds[b][c] != kindOpen {
						continue
					}
					if !two {
						ok = true
					} else if s, apart := geometry.SolveEastUp(sights[a], sights[b]); a != b && apart && s.Condition() <= 3 {
						ok = true
					}
				}
			}
			if ok {
				n++
			}
		}
		return n
	}
	for two, sets := range map[bool][]mask.LookSet{false: res.Coverage, true: res.TwoDirections} {
		for _, set := range sets {
			most := int64(0)
			for word := range uint(1) << len(p.kinds) {
				if bits.OnesCount(word) == len(set.Looks) {
					most = max(most, value(word, two))
				}
			}
			require.Equal(t, most, set.Cells, "%s: %v, two directions %v", where, set, two)
		}
	}
}

func TestSweepRefuses(t *testing.T) {
	s, _ := sweepScene(1)
	p := &space{scene: s, azimuths: degreesOf(0, 90), incidences: degreesOf(30, 40)}
	for name, change := range map[string]func(j *mask.SweepJob){
		"no azimuth":            func(j *mask.SweepJob) { j.Azimuths = nil },
		"no incidence":          func(j *mask.SweepJob) { j.Incidences = nil },
		"incidence below 1":     func(j *mask.SweepJob) { j.Incidences = degreesOf(0.5, 30) },
		"incidence above 89":    func(j *mask.SweepJob) { j.Incidences = degreesOf(30, 89.5) },
		"falling":               func(j *mask.SweepJob) { j.Incidences = degreesOf(40, 30) },
		"twice the same":        func(j *mask.SweepJob) { j.Azimuths = degreesOf(40, 40) },
		"not a number":          func(j *mask.SweepJob) { j.Azimuths = []geometry.Angle{geometry.NotGiven} },
		"no set":                func(j *mask.SweepJob) { j.Best = 0 },
		"too large a set":       func(j *mask.SweepJob) { j.Best = mask.MaxSet + 1 },
		"condition below 1":     func(j *mask.SweepJob) { j.Condition = 0.5 },
		"mask of another size":  func(j *mask.SweepJob) { j.Inside = make([]bool, 1+len(p.terrain.Heights)) },
		"window off the grid":   func(j *mask.SweepJob) { j.Window.Row = -1 },
		"more looks than swept": func(j *mask.SweepJob) { j.Azimuths = manyAngles(2001) },
	} {
		job := p.job(t, 2)
		change(&job)
		_, err := mask.Sweep(context.Background(), job)
		assert.Error(t, err, name)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err := mask.Sweep(ctx, p.job(t, 2))
	assert.ErrorIs(t, err, context.Canceled)
	job := p.job(t, 2)
	broken := errors.New("cannot be read")
	job.Source = failingSource{job.Source, broken}
	_, err = mask.Sweep(context.Background(), job)
	assert.ErrorIs(t, err, broken)
}

func manyAngles(n int) (out []geometry.Angle) {
	for i := range n {
		out = append(out, geometry.Angle(i)*deg/10)
	}
	return out
}

type failingSource struct {
	dem.Source
	err error
}

func (f failingSource) Read(dem.Window, []float32) error { return f.err }
