package mask_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/mask"
)

// plumb answers for a target over one place by walking its range line in
// tenths of a cell and comparing every pair of samples. It takes from walker
// the surface and the directions only.
type plumb struct {
	*walker
	byRow bool // range lines run nearer to the row axis
}

func newPlumb(w *walker) plumb {
	return plumb{w, math.Abs(w.dRow) >= math.Abs(w.dCol)}
}

// walk returns the samples from a place to where the line leaves the grid.
// rows are rows of the marching axis walked so far.
func (p plumb) walk(row, col, sign float64) (all []sample, rows []float64) {
	g := p.grid
	r, c, s := row, col, 0.0
	for {
		l := g.At(r, c)
		cell := min(math.Hypot(l.ColE, l.ColN), math.Hypot(l.RowE, l.RowN))
		dc, dr := p.dCol, p.dRow
		if p.parallel {
			dc, dr = p.towards(l)
		}
		metre := math.Hypot(dc*l.ColE+dr*l.RowE, dc*l.ColN+dr*l.RowN)
		step := sign * cell / metre / stepsPerCell
		if p.parallel { // half a step on, the direction for the whole
			dc, dr = p.towards(g.At(r+dr*step/2, c+dc*step/2))
		}
		r, c, s = r+dr*step, c+dc*step, s+step*metre
		along := math.Abs(c - col)
		if p.byRow {
			along = math.Abs(r - row)
		}
		rows = append(rows, along)
		if !p.inside(r, c) {
			return append(all, sample{s: s}), rows
		}
		h, ok := p.height(r, c)
		all = append(all, sample{s, h, ok})
	}
}

// plumbLine is what the walk finds: margins as the docs of SiteResult have
// them, by ground a row or more away where they are positive.
type plumbLine struct {
	kind             int
	clear, near, far float64
	clearU, foldU    float64
}

// ownGround is the part of a row within which ground counts as the place itself.
// The walk cannot tell where exactly that is: its answers with it and without
// are both right.
const ownGround = 0.1

// at walks from a place. Ground within own rows does not count.
func (p plumb) at(row, col, mast, own float64) plumbLine {
	inf := math.Inf(1)
	foot, ok := p.height(row, col)
	if !ok {
		return plumbLine{}
	}
	h0 := foot + mast
	m0, r0, rFoot := h0, -h0*p.cos, -foot*p.cos
	near, rows := p.walk(row, col, -1)
	m := func(q sample) float64 { return q.h + q.s*p.cot }
	r := func(q sample) float64 { return q.s*p.sin - q.h*p.cos }
	out := plumbLine{clear: inf, near: inf, far: inf, clearU: inf, foldU: inf}
	// The target's own surroundings: as far as slant range stays above its.
	front, frontRows := 0, 0.0
	for mast > 0 && front < len(near) && near[front].known && r(near[front]) >= r0 {
		front, frontRows = front+1, rows[front]
	}
	topM, unknownM := -inf, -inf
	for k := len(near) - 1; k >= 0; k-- {
		q := near[k]
		if !q.known {
			if k < len(near)-1 || !p.openEdge {
				unknownM = max(unknownM, p.ceiling+q.s*p.cot)
				out.foldU = min(out.foldU, r0-(q.s*p.sin-p.lowest*p.cos))
			}
			continue
		}
		if rows[k] < own {
			continue
		}
		lit := m(q) > topM
		topM = max(topM, m(q))
		if d := m0 - m(q); d < out.clear && (d <= 0 || rows[k] >= 1) {
			out.clear = d
		}
		if !lit || k < front && r(q) < rFoot {
			continue
		}
		if d := r0 - r(q); d <= 0 || rows[k] >= frontRows+1 {
			out.foldU = min(out.foldU, d)
			if m(q) > unknownM && d < out.near {
				out.near = d
			}
		}
	}
	out.clearU = m0 - unknownM
	far, rows := p.walk(row, col, 1)
	top, topU := max(topM, foot), unknownM
	for k, q := range far {
		if !q.known {
			if k < len(far)-1 || !p.openEdge {
				topU = max(topU, p.ceiling+q.s*p.cot)
				out.foldU = min(out.foldU, q.s*p.sin-p.ceiling*p.cos-r0)
			}
			continue
		}
		if m(q) <= top || rows[k] < own {
			continue
		}
		top = m(q)
		if d := r(q) - r0; d <= 0 || rows[k] >= 1 {
			out.foldU = min(out.foldU, d)
			if m(q) > topU {
				out.far = min(out.far, d)
			}
		}
	}
	switch fold := min(out.near, out.far); {
	case out.clear <= 0:
		out.kind = kindHidden
	case out.clearU <= 0:
		out.kind = kindUnsure
	case fold <= 0:
		out.kind = kindFolded
	case out.foldU <= 0:
		out.kind = kindUnsure
	default:
		out.kind = kindOpen
	}
	return out
}

// nearby reports whether some place within a sixth of a cell has a kind in the
// walk, which takes steps of a tenth.
func (p plumb) nearby(row, col, mast float64, kind int) bool {
	const d = 1. / 6
	for a := -d; a <= d; a += d / 2 {
		for b := -d; b <= d; b += d / 2 {
			if p.inside(row+a, col+b) && p.at(row+a, col+b, mast, 0).kind == kind {
				return true
			}
		}
	}
	return false
}

// randomSite draws a place: anywhere, on a row, on a column; now and then with
// a mast of a sixteenth of a cell to four cells.
func randomSite(rng *rand.Rand, g *dem.Grid) mask.Site {
	site := mask.Site{Row: rng.Float64() * float64(g.Rows-1), Col: rng.Float64() * float64(g.Cols-1)}
	switch rng.IntN(6) {
	case 0:
		site.Row = math.Round(site.Row)
	case 1:
		site.Col = math.Round(site.Col)
	}
	if rng.IntN(3) == 0 {
		l := g.At(site.Row, site.Col)
		site.Height = math.Exp2(6*rng.Float64()-4) * math.Hypot(l.RowE, l.RowN)
	}
	return site
}

// The margins of a site may differ from the walk's by what a terrain feature
// hides between two steps, along which a ray rises by cot(i) and the ground by
// its steepest slope. Where an overlap or a shadow
// begins or ends beside such a feature they may jump, but seldom. Margins that
// no terrain can set are not told apart: those above the relief.
const (
	marginSteps = 1. / stepsPerCell
	marginJumps = 0.03
	// loneSites is the share of sites beside an edge or a hole whose last row or
	// column of heights the line meets and the walk steps over.
	loneSites = 0.0001
)

func TestSitesInBetweenAgainstWalk(t *testing.T) {
	t.Logf("seed %d", *walkSeed)
	scenes := 300
	if *walkFull {
		scenes *= 10
	}
	var all tally
	margins, jumps := 0, 0
	for k := range scenes {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(5000+k)))
		s := randomScene(rng)
		s.options.HoleHeight = math.NaN()
		g := s.terrain.Frame
		span, err := dem.Scan(context.Background(), s.terrain)
		require.NoError(t, err)
		p := newPlumb(newWalker(s.terrain, span, s.look, s.options))
		sites := make([]mask.Site, 30)
		for i := range sites {
			sites[i] = randomSite(rng, g)
		}
		for i, r := range evaluate(t, s.terrain, s.options, sites, s.look) {
			site := sites[i]
			want := p.at(site.Row, site.Col, site.Height, 0)
			if w := p.at(site.Row, site.Col, site.Height, ownGround); r.Layover.Kind() == w.kind {
				want = w
			}
			where := fmt.Sprintf("seed %d, grid %d: %v\n%+v\n%+v\n%v, clear %v, fold %v", *walkSeed, k, s, site, want, r.Layover, r.Clearance, r.FoldMargin)
			if want.kind == kindNone {
				require.Equal(t, mask.OnHole, r.Where, where)
				require.Equal(t, mask.NoData, r.Class, where)
				continue
			}
			if r.Layover == mask.ActiveLayover { // by the slope, at which the walk does not look
				continue
			}
			have := r.Layover.Kind()
			all.count(have, want.kind)
			if have != want.kind {
				if have != kindUnsure && want.kind != kindUnsure && !p.nearby(site.Row, site.Col, site.Height, have) {
					all.lone = append(all.lone, where)
				}
				continue
			}
			foot, _ := p.height(site.Row, site.Col)
			step := marginSteps * p.steepness(site.Row, site.Col)
			same := func(want, have, most float64) {
				if want = min(want, most); have != have || want == most && have > most-step {
					return
				}
				margins++
				if !(math.Abs(want-have) < step) {
					jumps++
				}
			}
			same(want.clear, r.Clearance, foot+site.Height-span.Min)
			if have == kindOpen || have == kindFolded {
				same(min(want.near, want.far), r.FoldMargin, min(span.Max-foot, foot+site.Height-span.Min)*p.cos)
			}
		}
	}
	t.Logf("%v; %d margins, %d jumps", all, margins, jumps)
	assert.Less(t, float64(all.differ), randomDiffer*float64(all.determined), "sites of another kind")
	assert.Less(t, float64(all.guessed), randomGuessed*float64(all.cells), "sites undetermined in the walk only")
	assert.Less(t, float64(all.timid), randomTimid*float64(all.cells), "sites undetermined in the engine only")
	assert.Less(t, float64(jumps), marginJumps*float64(margins), "margins that differ")
	assert.LessOrEqual(t, float64(len(all.lone)), loneSites*float64(all.cells), "sites whose kind is nowhere near in the walk: %v", all.lone)
}

// steepness returns the metres that a cell's step along the range line may add
// to a margin: cot(i) and the steepest slope between two cells.
func (p plumb) steepness(row, col float64) float64 {
	l := p.grid.At(row, col)
	cell := max(math.Hypot(l.ColE, l.ColN), math.Hypot(l.RowE, l.RowN))
	rise := 0.0
	most := func(a, b float64) float64 {
		if b = math.Abs(b); b > a { // not for NaN
			return b
		}
		return a
	}
	for i, h := range p.heights {
		if i%p.cols > 0 {
			rise = most(rise, h-p.heights[i-1])
		}
		if i >= p.cols {
			rise = most(rise, h-p.heights[i-p.cols])
		}
	}
	return cell*max(p.cot, 1) + 2*rise
}
