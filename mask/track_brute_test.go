package mask_test

import (
	"fmt"
	"math"
	"runtime"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// trackWalker answers for one cell of a look from a moving platform. It follows
// the trace of the cell's own range plane on the bilinear surface over the curved
// earth, every sample at its true height, in steps of a tenth of a cell, and asks
// of every pair of samples what walker asks: now with the angle at the true
// antenna, from the downward vertical, and the true slant range. Of the engine
// it shares nothing; of the platform only where it is abreast of a point.
type trackWalker struct {
	walker   // the surface and its limits
	left     bool
	platform geometry.Platform
}

func newTrackWalker(m *dem.Memory, r dem.Range, look geometry.Look, p geometry.Platform, o mask.Options) *trackWalker {
	w := &trackWalker{left: look.Side == geometry.Left, platform: p}
	g := m.Frame
	w.walker = walker{grid: g, rows: g.Rows, cols: g.Cols, lowest: r.Min, ceiling: r.Max, openEdge: o.OpenEdge, perCell: stepsPerCell}
	if !math.IsNaN(o.Ceiling) {
		w.ceiling = o.Ceiling
	}
	w.heights, w.hole = make([]float64, len(m.Heights)), make([]bool, len(m.Heights))
	for i, h := range m.Heights {
		w.heights[i], w.hole[i] = float64(h), h != h
		if h != h {
			w.heights[i] = o.HoleHeight
		}
	}
	return w
}

func (w *trackWalker) point(row, col, h float64) geometry.Geodetic {
	l := w.grid.At(row, col)
	return geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: h}
}

// antenna is the range plane of one cell: the antenna, the unit vector of
// travel, the downward vertical in the plane and the level direction to the side
// of the look.
type antenna struct{ pos, travel, down, side geometry.ECEF }

func (w *trackWalker) abreast(g geometry.Geodetic) (a antenna, ok bool) {
	t, ok := w.platform.ZeroDoppler(g.ECEF())
	pos, vel := w.platform.State(t)
	travel := vel.Scale(1 / vel.Norm())
	side := travel.Cross(pos)
	side = side.Scale(1 / side.Norm())
	down := side.Cross(travel).Scale(-1)
	if w.left {
		side = side.Scale(-1)
	}
	return antenna{pos, travel, down, side}, ok
}

// see returns the look angle in the plane, radians, and the slant range.
func (a *antenna) see(p geometry.ECEF) (angle, r float64) {
	d := p.Sub(a.pos)
	return math.Atan2(d.Dot(a.side), d.Dot(a.down)), d.Norm()
}

// seenAs is one sample of a trace: look angle and slant range, those of the
// ceiling and the range of the lowest ground where there is no surface. close says
// that it lies less than a row away: the margins count such ground only where it
// hides or folds.
type seenAs struct {
	known, close      bool
	angle, r, lowestR float64
}

// trace appends the samples on one side of a cell, sign 1 away from the radar,
// until the trace leaves the DEM; the first sample outside is the last one. Ground
// under the track and beyond it is none of the look's.
func (w *trackWalker) trace(to []seenAs, a *antenna, row, col int, sign float64) []seenAs {
	here := w.grid.At(float64(row), float64(col))
	cell := min(math.Hypot(here.ColE, here.ColN), math.Hypot(here.RowE, here.RowN))
	r, c := float64(row), float64(col)
	h := w.heights[row*w.cols+col]
	dr, dc := w.rowAndColumn(a, row, col)
	samples := w.perCell / cell / max(math.Abs(dr), math.Abs(dc)) // a row
	for k := 1; ; k++ {
		// A step level and at right angles to the travel, and from there along
		// the travel's level part back into the plane.
		p := w.point(r, c, h)
		v := p.ToENU(a.travel)
		level := math.Hypot(v.East, v.North)
		e, n := v.North/level, -v.East/level
		if w.left {
			e, n = -e, -n
		}
		r, c = w.move(r, c, sign*cell/w.perCell*e, sign*cell/w.perCell*n)
		for range 2 {
			if w.inside(r, c) {
				if next, ok := w.height(r, c); ok {
					h = next
				}
			}
			off := w.point(r, c, h).ECEF().Sub(a.pos).Dot(a.travel)
			r, c = w.move(r, c, -off*v.East/level/level, -off*v.North/level/level)
		}
		inside := w.inside(r, c)
		if inside {
			next, ok := w.height(r, c)
			if ok {
				h = next
				angle, s := a.see(w.point(r, c, h).ECEF())
				if angle <= 0 {
					return to
				}
				to = append(to, seenAs{known: true, close: float64(k) < samples-0.5, angle: angle, r: s})
				continue
			}
		}
		var q seenAs
		q.angle, q.r = a.see(w.point(r, c, w.ceiling).ECEF())
		_, q.lowestR = a.see(w.point(r, c, w.lowest).ECEF())
		if q.angle <= 0 {
			return to
		}
		if !inside {
			if !w.openEdge {
				to = append(to, q)
			}
			return to
		}
		to = append(to, q)
	}
}

// rowAndColumn returns the rows and columns of a metre along the trace.
func (w *trackWalker) rowAndColumn(a *antenna, row, col int) (dr, dc float64) {
	v := w.point(float64(row), float64(col), 0).ToENU(a.travel)
	level := math.Hypot(v.East, v.North)
	r, c := w.move(float64(row), float64(col), v.North/level, -v.East/level)
	return r - float64(row), c - float64(col)
}

// move goes metres east and north.
func (w *trackWalker) move(row, col, e, n float64) (float64, float64) {
	l := w.grid.At(row, col)
	det := l.ColE*l.RowN - l.ColN*l.RowE
	return row + (l.ColE*n-l.ColN*e)/det, col + (e*l.RowN-n*l.RowE)/det
}

// active reports whether slant range falls away from the radar along the trace
// of the range plane on the cell's facet.
func (w *trackWalker) active(a *antenna, row, col int) bool {
	l := w.grid.At(float64(row), float64(col))
	det := l.ColE*l.RowN - l.ColN*l.RowE
	zc, zr := w.difference(row, col, 0, 1), w.difference(row, col, 1, 0)
	gE, gN := (zc*l.RowN-zr*l.ColN)/det, (zr*l.ColE-zc*l.RowE)/det
	p := w.point(float64(row), float64(col), w.heights[row*w.cols+col])
	v := p.ToENU(a.travel)
	e, n := v.North+v.Up*gN, -(v.East + v.Up*gE)
	if w.left {
		e, n = -e, -n
	}
	d := p.ToENU(p.ECEF().Sub(a.pos))
	return d.Dot(geometry.ENU{East: e, North: n, Up: e*gE + n*gN}) < 0
}

// trackAnswer is what the walk finds: margins in metres of height and of slant
// range as in the layers, and the worth of one cell of level ground in both.
type trackAnswer struct {
	answer
	worthM, worthR float64
	angle          float64 // from the downward vertical at the antenna
}

func (w *trackWalker) at(row, col int, buf []seenAs) (out trackAnswer) {
	i := row*w.cols + col
	if w.hole[i] {
		return out
	}
	own := w.point(float64(row), float64(col), w.heights[i])
	view, seen := w.platform.View(own)
	if seen != geometry.InView {
		return out
	}
	a, _ := w.abreast(own)
	inf := math.Inf(1)
	angle0, r0 := a.see(own.ECEF())
	out.angle = angle0
	here := w.grid.At(float64(row), float64(col))
	cell := max(math.Hypot(here.ColE, here.ColN), math.Hypot(here.RowE, here.RowN))
	out.worthM, out.worthR = cell/view.Incidence.Tan(), cell*view.Incidence.Sin()
	near := w.trace(buf[:0], &a, row, col, -1)
	top, unknown := -inf, -inf // running maxima of the look angle
	sure, may := false, false
	topFar, nearFar, nearAny := -inf, -inf, -inf // of ground at least a row away, and of all
	for k := len(near) - 1; k >= 0; k-- {
		q := near[k]
		if !q.known {
			unknown = max(unknown, q.angle)
			may = may || q.lowestR >= r0
			continue
		}
		lit := q.angle > top
		top = max(top, q.angle)
		if !q.close {
			topFar = max(topFar, q.angle)
		}
		if lit {
			nearAny = max(nearAny, q.r)
			if !q.close {
				nearFar = max(nearFar, q.r)
			}
			may = may || q.r >= r0
			sure = sure || q.r >= r0 && q.angle > unknown
		}
	}
	if nearAny < r0 {
		nearAny = nearFar
	}
	if top < angle0 {
		topFar = min(top, topFar)
	} else {
		topFar = top
	}
	out.m, out.r = w.mast(&a, own, topFar), r0-nearAny
	switch {
	case top >= angle0:
		out.kind, out.shadowKind = kindHidden, kindHidden
		return out
	case unknown >= angle0:
		out.kind, out.shadowKind = kindUnsure, kindUnsure
		return out
	}
	out.shadowKind = kindOpen
	top = angle0
	for _, q := range w.trace(near[:0], &a, row, col, 1) {
		if !q.known {
			unknown = max(unknown, q.angle)
			may = may || q.r <= r0
			continue
		}
		if q.angle > top {
			top = q.angle
			if !q.close || q.r <= r0 {
				out.r = min(out.r, q.r-r0)
			}
			may = may || q.r <= r0
			sure = sure || q.r <= r0 && q.angle > unknown
		}
	}
	switch {
	case sure || w.active(&a, row, col):
		out.kind = kindFolded
	case may:
		out.kind = kindUnsure
	default:
		out.kind = kindOpen
	}
	return out
}

// mast returns how far a point stands above the height at which it has a look
// angle, found by bisection.
func (w *trackWalker) mast(a *antenna, own geometry.Geodetic, angle float64) float64 {
	if math.IsInf(angle, -1) {
		return math.Inf(1)
	}
	lo, hi := own.Height-20000, own.Height+20000
	for range 60 {
		mid := own
		mid.Height = (lo + hi) / 2
		if x, _ := a.see(mid.ECEF()); x < angle {
			lo = mid.Height
		} else {
			hi = mid.Height
		}
	}
	return own.Height - hi
}

// every walks the cells for which want is true, on all processors.
func (w *trackWalker) every(want func(i int) bool) map[int]trackAnswer {
	all := map[int]trackAnswer{}
	var lock sync.Mutex
	var wg sync.WaitGroup
	workers := runtime.GOMAXPROCS(0)
	for k := range workers {
		wg.Go(func() {
			var buf [16384]seenAs
			for i := k; i < len(w.heights); i += workers {
				if want(i) {
					a := w.at(i/w.cols, i%w.cols, buf[:])
					lock.Lock()
					all[i] = a
					lock.Unlock()
				}
			}
		})
	}
	wg.Wait()
	return all
}

// compareTrack is compare for a platform: the same counts, and the same rule for
// a differing cell that stands alone.
func compareTrack(t testing.TB, w *trackWalker, got *raster, answers map[int]trackAnswer) tally {
	var c tally
	var buf [16384]seenAs
	fine := *w
	fine.perCell = fineStepsPerCell
	for i, a := range answers {
		row, col := i/w.cols, i%w.cols
		if w.hole[i] {
			continue
		}
		have := answer{kind: got.kind(mask.LayoverLayer, row, col), shadowKind: got.kind(mask.ShadowLayer, row, col)}
		require.Equal(t, a.kind == kindNone, have.kind == kindNone, "row %d, column %d: seen", row, col)
		if a.kind == kindNone {
			continue
		}
		c.count(have.kind, a.kind)
		differ := func(have, want int) bool { return have != want && have != kindUnsure && want != kindUnsure }
		of := func(pick func(a trackAnswer) int) func(j int) int {
			return func(j int) int {
				if b, ok := answers[j]; ok {
					return pick(b)
				}
				return pick(w.at(j/w.cols, j%w.cols, buf[:]))
			}
		}
		if differ(have.kind, a.kind) && !nearby(&w.walker, row, col, have.kind, of(func(a trackAnswer) int { return a.kind })) ||
			differ(have.shadowKind, a.shadowKind) && !nearby(&w.walker, row, col, have.shadowKind, of(func(a trackAnswer) int { return a.shadowKind })) {
			f := fine.at(row, col, nil)
			if f.kind == have.kind && f.shadowKind == have.shadowKind {
				continue
			}
			if f.angle < belowAngle {
				c.below++
			}
			c.lone = append(c.lone, fmt.Sprintf("row %d, column %d: engine %d, shadow layer %d; walk %d, %d (%+.4g m clear, %+.4g m from a fold); walk in thousandths %d, %d (%+.4g, %+.4g)",
				row, col, have.kind, have.shadowKind, a.kind, a.shadowKind, a.m, a.r, f.kind, f.shadowKind, f.m, f.r))
		}
	}
	return c
}

// marginTally counts margins that are held against the walk, and those farther
// from it than a row's worth of level ground.
type marginTally struct{ clear, clearOff, mast, mastOff, fold, foldOff int }

func (c *marginTally) add(o marginTally) {
	c.clear, c.clearOff, c.mast, c.mastOff = c.clear+o.clear, c.clearOff+o.clearOff, c.mast+o.mast, c.mastOff+o.mastOff
	c.fold, c.foldOff = c.fold+o.fold, c.foldOff+o.foldOff
}

func (c marginTally) String() string {
	return fmt.Sprintf("clearance near zero %d, off %d; masts in shadow %d, off %d; fold margin near zero %d, off %d",
		c.clear, c.clearOff, c.mast, c.mastOff, c.fold, c.foldOff)
}

// compareMargins compares clearance where the walk finds it small, within a row's
// worth, or negative, and fold margin where it is small; of cells of which both
// know the kind.
func compareMargins(w *trackWalker, got *raster, answers map[int]trackAnswer) (c marginTally) {
	for i, a := range answers {
		row, col := i/w.cols, i%w.cols
		kind := got.kind(mask.LayoverLayer, row, col)
		if kind == kindUnsure || kind == kindNone || a.kind == kindUnsure || a.kind == kindNone {
			continue
		}
		miss := math.Abs(float64(got.values[mask.Clearance][0][i]) - a.m)
		switch {
		case a.m <= 0:
			c.mast++
			if !(miss <= a.worthM) {
				c.mastOff++
			}
		case a.m < a.worthM:
			c.clear++
			if !(miss <= a.worthM) {
				c.clearOff++
			}
		}
		if a.kind != kindHidden && kind != kindHidden && math.Abs(a.r) < a.worthR {
			c.fold++
			if !(math.Abs(float64(got.values[mask.FoldMargin][0][i])-a.r) <= a.worthR) {
				c.foldOff++
			}
		}
	}
	return c
}
