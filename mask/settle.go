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

// ray is the range line through one point: at row u it is at column v and
// ground distance s, both straight between two rows of the lattice.
type ray struct {
	ln             *lanes
	k              float64
	j              int     // column of the lattice
	u0, v0         int     // the point itself, met without rounding
	from, to       int     // the rows for which the following hold
	va, dv, sa, ds float64 // at row from, and the change for one row
	pa, dp         place   // of a platform, the same
	perDS          float64 // rows a metre
}

func newRay(ln *lanes, u, v int) ray {
	y := ln.rayAt(float64(u), float64(v))
	y.u0, y.v0 = u, v
	return y
}

// rayAt is newRay for any place.
func (ln *lanes) rayAt(u, v float64) ray {
	k := ln.lane(u, v)
	j := min(max((int(math.Floor(k))-ln.first)/laneStep, 0), ln.nk-2)
	return ray{ln: ln, k: k, j: j, u0: -1, from: -1, to: -2}
}

// aim is newRay for a cell between the lanes of a strip, on its lane x.
func (y *ray) aim(p *strip, u, v int, x float64) {
	y.ln, y.k, y.j = p.f.ln, float64(p.k0)+x, p.j
	y.u0, y.v0, y.from, y.to = u, v, -1, -2
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
	q := (y.k - float64(ln.first+laneStep*y.j)) / laneStep
	n := i*ln.nk + y.j
	at := func(a []float64, n int) float64 { return a[n] + float64(q*(a[n+1]-a[n])) }
	y.sa, y.va = at(ln.s, n), at(ln.v, n)
	y.ds, y.dv = (at(ln.s, n+ln.nk)-y.sa)/laneStep, (at(ln.v, n+ln.nk)-y.va)/laneStep
	if ln.places != nil {
		node := func(n int) place { return ln.places[n].plus(ln.places[n+1].minus(ln.places[n]), q) }
		y.pa = node(n)
		y.dp = place{}.plus(node(n+ln.nk).minus(y.pa), 1./laneStep)
		y.perDS = 1 / y.ds
	}
	if ln.uniform {
		y.va, y.dv = y.k+float64(ln.slope*(float64(y.from)-ln.mid)), ln.slope
	}
}

// see returns m and r of a height at ground distance s on the ray.
func (y *ray) see(s, h float64) (m, r float64) {
	if y.ln.places == nil {
		return y.ln.at(s, h)
	}
	p := y.place(s)
	return y.ln.view(&p, h)
}

// underTrack is the least level distance from the antenna, metres, that a cell
// itself is given: whether one under the track counts is not for the walk to say.
const underTrack = 1e-3

// own is see for the point itself.
func (y *ray) own(s, h float64) (m, r float64) {
	m, r = y.see(s, h)
	if y.ln.places != nil && math.IsInf(m, -1) {
		p := y.place(s)
		up := p.y + (h-y.ln.datum)*p.ny
		m, r = y.ln.scale*up/underTrack, math.Abs(up)
	}
	return m, r
}

// seeM and seeR are the halves of see.
func (y *ray) seeM(s, h float64) float64 {
	if y.ln.places == nil {
		m, _ := y.ln.at(s, h)
		return m
	}
	p := y.place(s)
	return y.ln.viewM(&p, h)
}

func (y *ray) seeR(s, h float64) float64 {
	if y.ln.places == nil {
		_, r := y.ln.at(s, h)
		return r
	}
	p := y.place(s)
	return y.ln.viewR(&p, h)
}

// bothM and bothR are seeM and seeR of two heights at one place.
func (y *ray) bothM(s, a, b float64) (ma, mb float64) {
	ln := y.ln
	if ln.places == nil {
		far := float64(ln.cot * s)
		return a + far, b + far
	}
	p := y.place(s)
	return ln.viewM(&p, a), ln.viewM(&p, b)
}

func (y *ray) bothR(s, a, b float64) (ra, rb float64) {
	ln := y.ln
	if ln.places == nil {
		far := float64(ln.sin * s)
		return far - float64(ln.cos*a), far - float64(ln.cos*b)
	}
	p := y.place(s)
	return ln.viewR(&p, a), ln.viewR(&p, b)
}

// place returns the place at ground distance s.
func (y *ray) place(s float64) place {
	d := (s - y.sa) * y.perDS
	for range 2 { // s may lie between other rows of the lattice than before
		u := y.from + int(math.Floor(d))
		if d >= 0 && u <= y.to || u < 0 || u/laneStep >= y.ln.nu-1 {
			break
		}
		y.enter(u)
		d = (s - y.sa) * y.perDS
	}
	return y.pa.plus(y.dp, d)
}

// worth returns what the way from ground distance sa to sb is worth: metres of
// height at equal m, and at equal r.
func (y *ray) worth(sa, sb, h float64) (m, r float64) {
	if y.ln.places == nil {
		return y.ln.cot * (sb - sa), y.ln.tan * (sb - sa)
	}
	// With X, Y of lens.view at sa and their change to sb: the change of Y / X,
	// and of X^2 + Y^2, over that for a metre of height.
	p, q := y.place(sa), y.place(sb)
	h -= y.ln.datum
	x0, y0 := p.x+float64(h*p.nx), p.y+float64(h*p.ny)
	dx, dy := q.x+float64(h*q.nx)-x0, q.y+float64(h*q.ny)-y0
	m = (float64(dy*x0) - float64(y0*dx)) / (float64(p.ny*x0) - float64(p.nx*y0))
	return m, -(float64(x0*dx) + float64(y0*dy)) / (float64(x0*p.nx) + float64(y0*p.ny))
}

// gain returns the change of m for a metre of height.
func (y *ray) gain(s, h float64) float64 {
	if y.ln.places == nil {
		return 1
	}
	p := y.place(s)
	h -= y.ln.datum
	x, up := max(p.x+float64(h*p.nx), underTrack), p.y+float64(h*p.ny)
	return y.ln.scale * (float64(p.ny*x) - float64(p.nx*up)) / (x * x)
}

// point is a point of the surface on a range line, or unknown terrain.
type point struct {
	m, r    float64
	s, h    float64 // ground distance and height
	unknown bool    // m, r are then those of unknown terrain at its worst
	unsure  bool    // lit unless unknown terrain hides it
	close   bool    // less than a row away
	// Half way from the sample before, the surface lies this much below the straight
	// line between the two, metres.
	sag float64
}

// rise returns the slant range where m comes up to top on the way from sample a to
// b, or from b to a, between which the surface sags.
func (y *ray) rise(a, b *point, sag, top float64) float64 {
	m, _ := y.see((a.s+b.s)/2, (a.h+b.h)/2-sag)
	t := passes(a.m, m, b.m, top)
	_, r := y.see(a.s+float64(t*(b.s-a.s)), a.h+float64(t*(b.h-a.h))-float64(4*sag*t*(1-t)))
	return min(max(r, min(a.r, b.r)), max(a.r, b.r)) // one way only between two samples
}

// passes returns which part of the way a parabola takes from a, by mid half way, to
// reach x, when it ends at b and neither rises nor falls on the whole way.
func passes(a, mid, b, x float64) float64 {
	if x == a {
		return 0
	}
	bend := 4 * (mid - (a+b)/2)
	slope := b - a + bend
	root := math.Sqrt(max(float64(slope*slope)-float64(4*bend*(x-a)), 0))
	return min(max(2*(x-a)/(slope+math.Copysign(root, b-a)), 0), 1)
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
	cuts   []cut   // the same in a quick walk
}

// settle returns the exact margins of the cell (u, v), as far as the field's
// rows reach. The cell must have a height. A hidden cell has no margins of
// range.
func (w *walker) settle(f *field, u, v int) margins {
	w.f = f
	w.y = newRay(f.ln, u, v)
	_, s := w.y.at(u)
	h := float64(f.z[(u-f.ua)*f.width+v-f.at[u-f.ua]])
	m, r := w.y.own(s, h)
	x := w.towards(u, point{m: m, r: r, s: s, h: h})
	gain := w.y.gain(s, h)
	x.clear, x.clearU = x.clear/gain, x.clearU/gain
	x.far, x.farU = math.Inf(1), math.Inf(1)
	if x.clear > 0 {
		x.far, x.farU = w.away(u, m, r)
	}
	return x
}

// height returns the bilinear height at a column of row u.
func (f *field) height(u int, v float64) float64 {
	return lerp(f.z[(u-f.ua)*f.width:(u-f.ua+1)*f.width], v-float64(f.at[u-f.ua]))
}

// towards walks from row u0 towards the radar.
func (w *walker) towards(u0 int, own point) margins {
	m, r := own.m, own.r
	f, lim := w.f, w.f.lim
	w.seq, w.stack = w.seq[:0], w.stack[:0]
	topClose, topFar, topU := math.Inf(-1), math.Inf(-1), math.Inf(-1)
	mostU := math.Inf(-1)
	for u := u0; u > f.ua; u-- {
		va, sa := w.y.at(u)
		vb, sb := w.y.at(u - 1)
		w.step(u, -1, va, vb, sa, sb)
		if u == u0 && len(w.pieces) > 0 && !w.pieces[0].unknown {
			g := &w.pieces[0]
			if x, deep := w.deep(&own, g.s, g.h, g.sag); deep {
				w.push(x)
			}
		}
		for _, q := range w.pieces {
			q.close = q.close && u == u0
			switch {
			case q.unknown:
				topU, mostU = max(topU, q.m), max(mostU, q.r)
				w.doubt(q.m)
				w.seq = append(w.seq, point{m: math.Inf(-1), r: math.Inf(-1), unknown: true})
				continue
			case q.close:
				topClose = max(topClose, q.m)
			default:
				topFar = max(topFar, q.m)
			}
			w.push(q)
		}
		if w.outside(vb) {
			break
		}
	}
	if f.ua == 0 && !lim.openEdge { // no worse than where the walk left the DEM
		_, s := w.y.at(0)
		um, _ := w.y.see(s, lim.ceiling)
		_, ur := w.y.see(s, lim.low)
		topU, mostU = max(topU, um), max(mostU, ur)
		w.doubt(um)
	}
	out := margins{clear: m - topFar, clearU: m - topU}
	if topClose >= m {
		out.clear = m - max(topClose, topFar)
	}
	out.near, out.nearU = w.nearest(r, mostU)
	return out
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
		if n+1 < len(w.stack) && w.stack[n+1] != i+1 && !w.seq[i+1].unknown && w.seq[i+1].m > math.Inf(-1) {
			next, top := w.seq[i+1], w.seq[w.stack[n+1]].m
			best = max(best, w.y.rise(&q, &next, next.sag, top))
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

// outside reports whether column v lies outside the DEM: a walk that gets there
// does not come back, since range lines drift one way only.
func (w *walker) outside(v float64) bool {
	return v < 0 || v > float64(w.f.ln.orient.v-1)
}

// away walks from row u0 away from the radar and returns the margins to the lit
// ground there.
func (w *walker) away(u0 int, m, r float64) (sure, possible float64) {
	f, lim, ln := w.f, w.f.lim, w.f.ln
	top, topU := m, math.Inf(-1)
	closeR, farR, any := math.Inf(1), math.Inf(1), math.Inf(1)
	prev, hidden := point{m: m, r: r}, false
	for u := u0; u < f.ub-1; u++ {
		va, sa := w.y.at(u)
		vb, sb := w.y.at(u + 1)
		w.step(u, 1, va, vb, sa, sb)
		for _, q := range w.pieces {
			q.close = q.close && u == u0
			if q.unknown {
				topU, any = max(topU, q.m), min(any, q.r)
				prev, hidden = point{unknown: true}, false
				continue
			}
			if q.m <= top {
				prev, hidden = q, true
				continue
			}
			best := q.r
			if hidden && !prev.unknown && prev.m > math.Inf(-1) {
				best = min(best, w.y.rise(&prev, &q, q.sag, top))
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
			top, prev, hidden = q.m, q, false
		}
		if w.outside(vb) {
			break
		}
	}
	if f.ub == ln.orient.u && !lim.openEdge {
		_, s := w.y.at(f.ub - 1)
		_, ur := w.y.see(s, lim.ceiling)
		any = min(any, ur)
	}
	if closeR <= r {
		farR = min(farR, closeR)
	}
	return farR - r, any - r
}

// ownGround is the part of a cell next to a point that counts as the point
// itself: on curved ground an overlap or a shadow may begin right at the point,
// millimetres deep, which no DEM can tell. Of sites and windows it is the part of a
// row.
const ownGround = 0.1

// ownDepth is the overlap with its own ground, in rows' worths of ground, that counts
// all the same: a five hundredth, which is centimetres.
const ownDepth = 1. / 500

// deep looks half way along a point's own ground, which ends at ground distance s and
// height h, towards the radar: whether it overlaps the point by more than ownDepth.
func (w *walker) deep(own *point, s, h, sag float64) (x point, yes bool) {
	x = point{s: (own.s + s) / 2, h: (own.h+h)/2 - sag, close: true}
	x.m, x.r = w.y.see(x.s, x.h)
	return x, x.r >= own.r+ownDepth*w.f.ln.rowR
}

// step fills w.pieces with the samples between row u, excluded, and the next
// row in direction dir, included, in the order of the walk.
func (w *walker) step(u, dir int, va, vb, sa, sb float64) {
	w.pieces = w.pieces[:0]
	a, b := math.Floor(va), math.Floor(vb)
	f, t0 := w.f, 0.0
	if u == w.y.u0 {
		// Ground this close counts as the point itself.
		t0 = f.ln.own
		w.piece(u, dir, va, vb, sa, sb, t0, t0)
	}
	if a == b || va == vb {
		w.piece(u, dir, va, vb, sa, sb, t0, 1)
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
	f := w.f
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
	ds, before := sb-sa, t0
	if t0 == t1 { // the end of the point's own ground
		before = 0
	}
	emit := func(t float64) {
		q := point{s: sa + t*ds, h: a + t*(b+t*d), close: t < 1, sag: d * (t - before) * (t - before) / 4}
		before = t
		q.m, q.r = w.y.see(q.s, q.h)
		w.pieces = append(w.pieces, q)
	}
	// The vertices: m' = b + 2 d t + cot ds = 0, r' = sin ds - cos (b + 2 d t) = 0.
	tv, tr := math.Inf(1), math.Inf(1)
	if d != 0 {
		worthM, worthR := w.y.worth(sa, sb, a)
		tv = -(b + worthM) / (2 * d)
		tr = (worthR - b) / (2 * d)
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
		q.m, _ = w.y.see(s, f.lim.ceiling)
		if dir < 0 {
			_, q.r = w.y.see(s, f.lim.low)
		} else {
			// The largest m that may hide is at the far end of the stretch.
			q.m, _ = w.y.see(sa+t1*(sb-sa), f.lim.ceiling)
			_, q.r = w.y.see(s, f.lim.ceiling)
		}
		w.pieces = append(w.pieces, q)
	} else {
		w.pieces = append(w.pieces, point{unknown: true, m: math.Inf(-1), r: math.Inf(dir)})
	}
	if t1 == 1 {
		if h := f.height(u+dir, vb); h == h {
			m, r := w.y.see(sb, h)
			w.pieces = append(w.pieces, point{m: m, r: r, s: sb, h: h})
		}
	}
}
