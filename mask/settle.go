package mask

import "math"

// margins are the signed distances of one point from the limits. The first
// three count the terrain that the DEM shows; those ending in U also what may
// stand where it shows none. clear is metres of height, the others metres of
// slant range. Positive means lit, or not folded.
type margins struct {
	clear, near, far    float64
	clearU, nearU, farU float64
}

// tops holds the highest and the lowest height of blocks of the field, so that
// a walk can pass over ground that cannot matter. A block spans topStep rows
// and stored columns and shares its last row and column with its neighbour,
// so that it covers the whole bilinear surface between its corners.
type tops struct {
	cols      int
	high, low []float32
}

const topStep = 8

func (t *tops) build(f *field) {
	rows := f.ub - f.ua
	nr := (rows + topStep - 1) / topStep
	t.cols = (f.width + topStep - 1) / topStep
	t.high, t.low = resize(t.high, nr*t.cols), resize(t.low, nr*t.cols)
	inf := float32(math.Inf(1))
	for b := range nr {
		hi, lo := t.high[b*t.cols:(b+1)*t.cols], t.low[b*t.cols:(b+1)*t.cols]
		fillWith(hi, -inf)
		fillWith(lo, inf)
		for i := b * topStep; i < min((b+1)*topStep+1, rows); i++ {
			z := f.z[i*f.width : (i+1)*f.width]
			for c := range t.cols {
				h, l := hi[c], lo[c]
				for _, x := range z[c*topStep : min((c+1)*topStep+1, f.width)] {
					h, l = max(h, x), min(l, x) // NaN stays
				}
				hi[c], lo[c] = h, l
			}
		}
		for c := range hi {
			if hi[c] != hi[c] { // something is missing: never pass over it
				hi[c], lo[c] = inf, -inf
			}
		}
	}
}

// over returns bounds of the heights on a path through block row b whose
// stored columns lie in [x0, x1].
func (t *tops) over(b int, x0, x1 float64) (low, high float64) {
	c0 := max(int(x0)/topStep, 0)
	c1 := min(int(x1)/topStep, t.cols-1)
	high, low = math.Inf(-1), math.Inf(1)
	for i := b*t.cols + c0; i <= b*t.cols+c1; i++ {
		high, low = max(high, float64(t.high[i])), min(low, float64(t.low[i]))
	}
	return low, high
}

// ray is the range line through one point: at row u it is at column v and
// ground distance s, both straight between two rows of the lattice.
type ray struct {
	ln             *lanes
	k              float64
	u0, v0         int     // the point itself, met without rounding
	from, to       int     // the rows for which the following hold
	va, dv, sa, ds float64 // at row from, and the change for one row
}

func newRay(ln *lanes, u, v int) ray {
	return ray{ln: ln, k: ln.lane(float64(u), float64(v)), u0: u, v0: v, from: -1, to: -2}
}

func (y *ray) at(u int) (v, s float64) {
	if u < y.from || u > y.to {
		y.enter(u)
	}
	d := float64(u - y.from)
	v, s = y.va+float64(y.dv*d), y.sa+float64(y.ds*d)
	if u == y.u0 {
		v = float64(y.v0)
	}
	return v, s
}

// enter makes ready for the lattice rows around u.
func (y *ray) enter(u int) {
	ln := y.ln
	i := min(u/laneStep, ln.nu-2)
	y.from, y.to = laneStep*i, laneStep*(i+1)
	j := min(max((int(math.Floor(y.k))-ln.first)/laneStep, 0), ln.nk-2)
	q := (y.k - float64(ln.first+laneStep*j)) / laneStep
	n := i*ln.nk + j
	at := func(a []float64, n int) float64 { return a[n] + float64(q*(a[n+1]-a[n])) }
	y.sa, y.va = at(ln.s, n), at(ln.v, n)
	y.ds, y.dv = (at(ln.s, n+ln.nk)-y.sa)/laneStep, (at(ln.v, n+ln.nk)-y.va)/laneStep
	if ln.uniform {
		y.va, y.dv = y.k+float64(ln.slope*float64(y.from)), ln.slope
	}
}

// point is a point of the surface on a range line, or unknown terrain.
type point struct {
	m, r    float64
	unknown bool // m, r are then those of unknown terrain at its worst
	unsure  bool // lit unless unknown terrain hides it
	close   bool // less than a row away
}

// walker settles points by an exact walk along their own range line over the
// bilinear surface. Along a line the surface is a parabola between two
// crossings of the grid, so the walk visits the crossings and the vertices of
// m and r between them.
type walker struct {
	f      *field
	y      ray
	seq    []point // samples towards the radar, nearest to the point first
	stack  []int   // those that no sample nearer to the radar hides
	pieces []point // the samples of one row step
}

// settle returns the exact margins of the cell (u, v) that are asked for,
// wherever they are below the slacks; larger ones, and those not asked for, may
// come out larger than they are. The cell must have a height. A hidden cell has
// no margins of range.
func (w *walker) settle(f *field, u, v int, ask question) margins {
	w.f = f
	w.y = newRay(f.ln, u, v)
	_, s := w.y.at(u)
	h := float64(f.z[(u-f.ua)*f.width+v-f.at[u-f.ua]])
	m, r := f.ln.at(s, h)
	inf := math.Inf(1)
	x := margins{inf, inf, inf, inf, inf, inf}
	if ask.clear || ask.near {
		x = w.towards(u, m, r, ask)
	}
	x.far, x.farU = inf, inf
	if ask.far && x.clear > 0 {
		x.far, x.farU = w.away(u, m, r, ask)
	}
	return x
}

// question says what a walk is to find out.
type question struct {
	clear, near, far bool
	// slackM and slackR are the margins, metres of height and of range, from
	// which on they need not be exact.
	slackM, slackR float64
	// signs asks for the signs only: the walk ends where the answer is certain.
	signs bool
}

// height returns the bilinear height at a column of row u.
func (f *field) height(u int, v float64) float64 {
	return lerp(f.z[(u-f.ua)*f.width:(u-f.ua+1)*f.width], v-float64(f.at[u-f.ua]))
}

// stretch returns the bounds of heights over the block of rows that the walk
// enters at row u going in direction dir, when u is the block's edge; ok is
// false inside a block. next is the block's other edge.
func (w *walker) stretch(u, dir int) (low, high float64, next int, ok bool) {
	f := w.f
	i := u - f.ua
	if i%topStep != 0 {
		return 0, 0, 0, false
	}
	b := i / topStep
	next = u + topStep
	if dir < 0 {
		b--
		next = u - topStep
	}
	if next < f.ua || next >= f.ub {
		return 0, 0, 0, false
	}
	va, _ := w.y.at(u)
	vb, _ := w.y.at(next)
	xa, xb := va-float64(f.at[i]), vb-float64(f.at[next-f.ua])
	low, high = f.tops.over(b, min(xa, xb)-2, max(xa, xb)+3)
	return low, high, next, true
}

// towards walks from row u0 towards the radar.
func (w *walker) towards(u0 int, m, r float64, ask question) margins {
	f, lim, ln := w.f, w.f.lim, w.f.ln
	w.seq, w.stack = w.seq[:0], w.stack[:0]
	topClose, topFar, topU := math.Inf(-1), math.Inf(-1), math.Inf(-1)
	mostU := math.Inf(-1)
	// Ground matters when it reaches floorM, or slant range floorR.
	floorM, floorR := m-ask.slackM, r-ask.slackR
	if !ask.near {
		floorR = math.Inf(1)
	}
	roof := max(lim.high, lim.ceiling)
	pass := func(s, low, high float64) bool {
		return high+ln.cot*s <= floorM && ln.sin*s-ln.cos*low < floorR
	}
	gap := point{m: math.Inf(-1), r: math.Inf(-1), unknown: true}
	u := u0
	for u > f.ua {
		va, s := w.y.at(u)
		if pass(s, lim.low, roof) {
			break // nothing nearer can matter
		}
		if low, high, next, ok := w.stretch(u, -1); ok && pass(s, low, high) {
			w.seq = append(w.seq, gap)
			u = next
			continue
		}
		vb, sb := w.y.at(u - 1)
		if low, high := w.around(u, -1, va, vb); pass(s, low, high) {
			w.seq = append(w.seq, gap)
			u--
			continue
		}
		w.step(u, -1, va, vb, s, sb)
		for i := range w.pieces {
			q := w.pieces[i]
			q.close = q.close && u == u0
			if q.unknown {
				topU, mostU = max(topU, q.m), max(mostU, q.r)
				w.doubt(q.m)
				w.seq = append(w.seq, gap)
				continue
			}
			if q.close {
				topClose = max(topClose, q.m)
			} else {
				topFar = max(topFar, q.m)
			}
			if ask.near {
				if q.r >= floorR {
					floorM = min(floorM, q.m)
				}
				w.push(q)
			}
		}
		if ask.signs && max(topClose, topFar) >= m {
			return margins{clear: m - max(topClose, topFar), clearU: m - topU, near: math.Inf(1), nearU: math.Inf(1)}
		}
		u--
	}
	if u == 0 && !lim.openEdge {
		_, s := w.y.at(0)
		um, _ := ln.at(s, lim.ceiling)
		_, ur := ln.at(s, lim.low)
		topU, mostU = max(topU, um), max(mostU, ur)
		w.doubt(um)
	}
	out := margins{clear: m - topFar, clearU: m - topU, near: math.Inf(1), nearU: math.Inf(1)}
	if topClose >= m {
		out.clear = m - max(topClose, topFar)
	}
	if ask.near {
		out.near, out.nearU = w.nearest(r, mostU)
	}
	return out
}

// around returns bounds of the heights on the path from row u, column va, to
// the next row in direction dir, column vb: infinite where one is missing.
func (w *walker) around(u, dir int, va, vb float64) (low, high float64) {
	f := w.f
	if va > vb {
		va, vb = vb, va
	}
	a, b := int(math.Floor(va)), int(math.Ceil(vb))
	i := u - f.ua
	x := f.z[i*f.width+a-f.at[i]:][:b-a+1]
	lo, hi := x[0], x[0]
	for _, h := range x[1:] {
		lo, hi = min(lo, h), max(hi, h)
	}
	i += dir
	for _, h := range f.z[i*f.width+a-f.at[i]:][:b-a+1] {
		lo, hi = min(lo, h), max(hi, h)
	}
	if hi != hi {
		return math.Inf(-1), math.Inf(1)
	}
	return float64(lo), float64(hi)
}

// push adds a sample to the sequence and keeps on the stack those that it does
// not hide.
func (w *walker) push(q point) {
	w.seq = append(w.seq, q)
	n := len(w.stack)
	for n > 0 && w.seq[w.stack[n-1]].m <= q.m {
		n--
	}
	w.stack = append(w.stack[:n], len(w.seq)-1)
}

// doubt marks what unknown terrain reaching m may hide.
func (w *walker) doubt(m float64) {
	for n := len(w.stack) - 1; n >= 0 && w.seq[w.stack[n]].m <= m; n-- {
		w.seq[w.stack[n]].unsure = true
	}
}

// nearest returns the margins to the lit ground nearer to the radar, all that
// is left on the stack. Where a lit stretch begins between two samples, its
// beginning counts.
func (w *walker) nearest(r, mostU float64) (sure, possible float64) {
	closeR, farR, any := math.Inf(-1), math.Inf(-1), mostU
	for n, i := range w.stack {
		q := w.seq[i]
		best := q.r
		if n+1 < len(w.stack) && w.stack[n+1] != i+1 && !w.seq[i+1].unknown {
			next, top := w.seq[i+1], w.seq[w.stack[n+1]].m
			best = max(best, q.r+(top-q.m)/(next.m-q.m)*(next.r-q.r))
		}
		if !q.close || best >= r {
			any = max(any, best)
		}
		if q.unsure {
			continue
		}
		if q.close {
			closeR = max(closeR, best)
		} else {
			farR = max(farR, best)
		}
	}
	if closeR >= r {
		farR = max(farR, closeR)
	}
	return r - farR, r - any
}

// away walks from row u away from the radar and returns the margins to the lit
// ground there.
func (w *walker) away(u0 int, m, r float64, ask question) (sure, possible float64) {
	f, lim, ln := w.f, w.f.lim, w.f.ln
	top, topU := m, math.Inf(-1)
	closeR, farR, any := math.Inf(1), math.Inf(1), math.Inf(1)
	prev, hidden := point{m: m, r: r}, false
	limit := r + ask.slackR
	pass := func(s, high float64) bool { return ln.sin*s-ln.cos*high > limit }
	roof := max(lim.high, lim.ceiling)
	u := u0
	for u < f.ub-1 {
		va, s := w.y.at(u)
		if pass(s, roof) {
			break // nothing farther can matter
		}
		// Ground beyond the slack cannot hide any that is within it: it lies
		// below the line of equal range, the other above.
		if _, high, next, ok := w.stretch(u, 1); ok && pass(s, high) {
			u, hidden, prev = next, false, point{unknown: true}
			continue
		}
		vb, sb := w.y.at(u + 1)
		if _, high := w.around(u, 1, va, vb); pass(s, high) {
			u++
			hidden, prev = false, point{unknown: true}
			continue
		}
		w.step(u, 1, va, vb, s, sb)
		for _, q := range w.pieces {
			q.close = q.close && u == u0
			if q.unknown {
				topU, any = max(topU, q.m), min(any, q.r)
				prev, hidden = point{unknown: true}, false
				continue
			}
			if q.m > top {
				best := q.r
				if hidden && !prev.unknown {
					best = min(best, prev.r+(top-prev.m)/(q.m-prev.m)*(q.r-prev.r))
				}
				if !q.close || best <= r {
					any = min(any, best)
				}
				switch {
				case q.m <= topU:
				case q.close:
					closeR = min(closeR, best)
				default:
					farR = min(farR, best)
				}
				top = q.m
				hidden = false
			} else {
				hidden = true
			}
			prev = q
		}
		if ask.signs && min(closeR, farR) <= r {
			break
		}
		u++
	}
	if u == f.ln.orient.u-1 && !lim.openEdge {
		_, s := w.y.at(u)
		_, ur := ln.at(s, lim.ceiling)
		any = min(any, ur)
	}
	if closeR <= r {
		farR = min(farR, closeR)
	}
	return farR - r, any - r
}

// ownGround is the part of a row next to a point that counts as the point
// itself: on curved ground an overlap or a shadow may begin right at the point,
// millimetres deep, which no DEM can tell.
const ownGround = 0.1

// step fills w.pieces with the samples between row u, excluded, and the next
// row in direction dir, included, in the order of the walk.
func (w *walker) step(u, dir int, va, vb, sa, sb float64) {
	w.pieces = w.pieces[:0]
	a, b := math.Floor(va), math.Floor(vb)
	t0 := 0.0
	if u == w.y.u0 {
		// Ground this close counts as the point itself.
		t0 = ownGround
		w.piece(u, dir, va, vb, sa, sb, t0, t0)
	}
	if a == b || va == vb {
		w.piece(u, dir, va, vb, sa, sb, 0, 1)
		return
	}
	if a < b {
		for c := a + 1; c <= b; c++ {
			if t := (c - va) / (vb - va); t > t0 && t < 1 {
				w.piece(u, dir, va, vb, sa, sb, t0, t)
				t0 = t
			}
		}
	} else {
		for c := a; c > b; c-- {
			if t := (c - va) / (vb - va); t > t0 && t < 1 {
				w.piece(u, dir, va, vb, sa, sb, t0, t)
				t0 = t
			}
		}
	}
	w.piece(u, dir, va, vb, sa, sb, t0, 1)
}

// piece adds the samples of one stretch between two crossings of the grid, t0
// excluded and t1 included, t counting from row u to the next.
func (w *walker) piece(u, dir int, va, vb, sa, sb, t0, t1 float64) {
	f, ln := w.f, w.f.ln
	tm := (t0 + t1) / 2
	c := math.Floor(va + tm*(vb-va))
	z0 := f.z[(u-f.ua)*f.width:]
	z1 := f.z[(u+dir-f.ua)*f.width:]
	i, j := int(c)-f.at[u-f.ua], int(c)-f.at[u+dir-f.ua]
	p0, q0 := float64(z0[i]), float64(z1[j])
	p1, q1 := p0, q0
	if va != c || vb != c { // not along the column itself
		p1, q1 = float64(z0[i+1]), float64(z1[j+1])
	}
	if sum := p0 + q0 + p1 + q1; sum != sum {
		w.missing(u, dir, va, vb, sa, sb, t0, t1)
		return
	}
	// h(t) = a + b t + d t^2 with x = va + t (vb-va) - c the place in the cell.
	x0, dx := va-c, vb-va
	ep, eq := p1-p0, q1-q0
	d := (eq - ep) * dx
	b := (q0 - p0) + ep*dx + (eq-ep)*x0
	a := p0 + ep*x0
	ds := sb - sa
	emit := func(t float64) {
		m, r := ln.at(sa+t*ds, a+t*(b+t*d))
		w.pieces = append(w.pieces, point{m: m, r: r, close: t < 1})
	}
	// The vertices: m' = b + 2 d t + cot ds = 0, r' = sin ds - cos (b + 2 d t) = 0.
	tv, tr := math.Inf(1), math.Inf(1)
	if d != 0 {
		tv = -(b + ln.cot*ds) / (2 * d)
		tr = (ln.tan*ds - b) / (2 * d)
	}
	if tr < tv {
		tv, tr = tr, tv
	}
	if tv > t0 && tv < t1 {
		emit(tv)
	}
	if tr > t0 && tr < t1 {
		emit(tr)
	}
	emit(t1)
}

// missing adds what may stand on a stretch where the surface has no value, and
// the sample at its end when there is one.
func (w *walker) missing(u, dir int, va, vb, sa, sb, t0, t1 float64) {
	f, ln := w.f, w.f.ln
	last := float64(ln.orient.v - 1)
	mid := va + (t0+t1)/2*(vb-va)
	if !f.lim.openEdge || mid >= 0 && mid <= last {
		s := sa + t0*(sb-sa)
		q := point{unknown: true}
		q.m, _ = ln.at(s, f.lim.ceiling)
		if dir < 0 {
			_, q.r = ln.at(s, f.lim.low)
		} else {
			// The largest m that may hide is at the far end of the stretch.
			q.m, _ = ln.at(sa+t1*(sb-sa), f.lim.ceiling)
			_, q.r = ln.at(s, f.lim.ceiling)
		}
		w.pieces = append(w.pieces, q)
	} else {
		w.pieces = append(w.pieces, point{unknown: true, m: math.Inf(-1), r: math.Inf(dir)})
	}
	if t1 == 1 {
		if h := f.height(u+dir, vb); h == h {
			m, r := ln.at(sb, h)
			w.pieces = append(w.pieces, point{m: m, r: r})
		}
	}
}
