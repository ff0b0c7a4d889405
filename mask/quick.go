package mask

import "math"

// atLimit is the size, as a part of a row's worth of ground, of a margin whose
// sign the lanes had wrong: it is small, and no more is known of it.
const atLimit = 1. / (1 << 14)

// quick settles a doubtful cell between lanes k and next of a strip, which are
// one where the cell lies on it. It walks
// from the cell's own centre over the bilinear surface, as settle does, but only
// as far as the lines of the two lanes do not decide the rest with a slack of
// their own.
func (w *walker) quick(p *strip, u, v, k, next int, x float64, m *lane, doubt doubts, slackM, slackR float64) {
	w.f = p.f
	w.y.aim(p, u, v, x)
	_, s := w.y.at(u)
	h := float64(p.f.z[(u-p.f.ua)*p.f.width+v-p.f.at[u-p.f.ua]])
	var q quickWalk
	q.walker, q.p, q.u, q.k, q.next = w, p, u, k, next
	q.slackM, q.slackR = slackM*w.y.gain(s, h), slackR
	q.ua, q.ub = max(p.ua, u-p.f.near), min(p.ub, u+1+p.f.far)
	q.s, q.h, q.last = s, h, float64(p.f.ln.orient.v-1)
	q.m, q.r = w.y.own(s, h)
	q.setEnds()
	tinyM, tinyR := float32(atLimit*slackM), float32(atLimit*slackR)
	if doubt&doubtClear != 0 {
		m.clear = signed(m.clear, q.lit(false), tinyM)
	}
	sure := p.sure[u-p.ua]
	switch {
	case sure&1 != 0:
		m.clearU = m.clear
	case doubt&doubtClearU != 0:
		m.clearU = signed(m.clearU, q.lit(true), tinyM)
	}
	if !(m.clear > 0 && m.clearU > 0) {
		return
	}
	if doubt&doubtNear != 0 {
		m.near = signed(m.near, !q.foldedNearer(false), tinyR)
	}
	if doubt&doubtFar != 0 {
		m.far = signed(m.far, !q.foldedFarther(false), tinyR)
	}
	if m.near <= 0 || m.far <= 0 {
		return
	}
	switch {
	case sure&1 != 0:
		m.nearU = m.near
	case doubt&doubtNearU != 0:
		m.nearU = signed(m.nearU, !q.foldedNearer(true), tinyR)
	}
	switch {
	case sure&2 != 0:
		m.farU = m.far
	case doubt&doubtFarU != 0:
		m.farU = signed(m.farU, !q.foldedFarther(true), tinyR)
	}
}

// signed returns the margin with the sign that it must have.
func signed(margin float32, positive bool, tiny float32) float32 {
	switch {
	case positive && !(margin > 0):
		return tiny
	case !positive && margin > 0:
		return -tiny
	}
	return margin
}

// quickWalk is one cell that is being settled: m, r, s and h are the point's own.
type quickWalk struct {
	*walker
	p              *strip
	u, k, next     int
	ua, ub         int // rows within the point's own reach
	m, r, s, h     float64
	slackM, slackR float64
	last           float64 // column of the DEM
	ends           bounds  // the least slant range that ground nearer, and the largest that ground farther may set, see setEnds
	endM           float64 // the same of m
}

// setEnds finds what ground beyond the point's own reach may set as a limit at most. A
// limit is brought up to it, so that it does not depend on how much farther the field
// happens to extend: the walk meets unknown terrain at the same places.
func (q *quickWalk) setEnds() {
	f, ln := q.f, q.f.ln
	high := max(f.lim.high, f.lim.ceiling)
	if ln.places != nil {
		q.setSeenEnds(high)
		return
	}
	relief := high - f.lim.low // see reach, which has a row to spare
	far := float64(relief*ln.cot) + ln.minDS
	q.endM, _ = ln.at(q.s-(far+float64(relief*ln.tan)), high)
	_, q.ends.low = ln.at(q.s-far, f.lim.low)
	_, q.ends.high = ln.at(q.s+far, high)
}

// setSeenEnds is setEnds for platforms. Where no terrain is unknown, it does not
// matter; a tripod's field holds all there is.
func (q *quickWalk) setSeenEnds(high float64) {
	f := q.f
	q.endM, q.ends = math.Inf(-1), bounds{math.Inf(-1), math.Inf(1)}
	if f.sure || f.ln.fan != nil {
		return
	}
	if s, ok := q.seenFrom(q.u - f.near); ok {
		q.endM = min(q.y.seeM(s, high), q.m)
	}
	if s, ok := q.seenFrom(q.u - f.far); ok {
		q.ends.low = min(q.y.seeR(s, f.lim.low), q.r)
	}
	if s, ok := q.seenFrom(q.u + f.far); ok {
		q.ends.high = max(q.y.seeR(s, high), q.r)
	}
}

// seenFrom returns the ground distance at row u, false where no ground of the look's
// lies beyond.
func (q *quickWalk) seenFrom(u int) (s float64, ok bool) {
	if u < 0 || u >= q.f.ln.orient.u {
		return 0, false
	}
	_, s = q.y.at(u)
	p := q.y.place(s)
	return s, p.x > 0
}

// cut is a sample of the surface between two rows.
type cut struct {
	m, r    float64
	s, h    float64 // ground distance and height
	sag     float64 // see point
	unknown bool    // m, r are then those of unknown terrain at its worst
}

func (g *cut) point() point { return point{m: g.m, r: g.r, s: g.s, h: g.h} }

// bounds are what the two lanes say of a line at one place, with a slack for
// the roughness that their difference shows.
type bounds struct{ low, high float64 }

var never = bounds{math.Inf(-1), math.Inf(-1)}

// shade returns bounds of the m that ground nearer than row u reaches; of
// unknown terrain when unknown is set.
func (q *quickWalk) shade(u int, s float64, unknown bool) bounds {
	var a, b float64
	if unknown {
		row := q.p.unsureRow(u)
		if row == nil || q.p.sure[u-q.p.ua]&1 != 0 {
			return never
		}
		a, b = float64(row.shade[q.k]), float64(row.shade[q.next])
	} else {
		row := q.p.row(u)
		a, b = float64(row.shade[q.k]), float64(row.shade[q.next])
	}
	a, b = q.y.bothM(s, a, b)
	x := around(max(a, q.endM), max(b, q.endM), settleShare/q.slackM)
	if j := q.p.jagsOf(u); j != nil && !unknown && besideLane(j.shadeOn, q.k, q.next) {
		x.low = j.least.shade[q.k]
		for _, k := range [2]int{q.k, q.next} {
			if j.shadeOn>>k&1 != 0 {
				x.high = max(x.high, q.y.seeM(s, float64(j.shade[k])))
			}
		}
	}
	return x
}

// Where one lane has no line, the other bounds nothing.
func around(a, b, perRow float64) bounds {
	if a != a || b != b {
		return bounds{math.Inf(-1), math.Inf(1)}
	}
	if a > b {
		a, b = b, a
	}
	rough := (b - a) * (roughShare + roughGrowth*(b-a)*perRow)
	return bounds{a - rough, b + rough}
}

// nearer returns bounds of the slant range that lit ground nearer than row u
// reaches, counting ground that may be lit when possible is set.
func (q *quickWalk) nearer(u int, s float64, possible bool) bounds {
	row := q.p.row(u)
	a, b := row.nearer[q.k], row.nearer[q.next]
	if unsure := q.p.unsureRow(u); possible && unsure != nil && q.p.sure[u-q.p.ua]&1 == 0 {
		a, b = unsure.nearer[q.k], unsure.nearer[q.next]
	}
	ra, rb := q.ranges(u, a, b, s)
	x := around(max(ra, q.ends.low), max(rb, q.ends.low), settleShare/q.slackR)
	if besideLane(q.p.jags[u-q.p.ua].dawn, q.k, q.next) {
		x.high = math.Inf(1)
	}
	if j := q.p.jagsOf(u); j != nil && besideLane(j.nearerOn, q.k, q.next) {
		x.low = j.least.nearer[q.k]
		for _, k := range [2]int{q.k, q.next} {
			if j.nearerOn>>k&1 != 0 {
				x.high = max(x.high, q.y.seeR(s, float64(j.nearer[k])))
			}
		}
	}
	return x
}

// farther is nearer for the ground farther than row u, and for the least slant
// range there.
func (q *quickWalk) farther(u int, s float64, possible bool) bounds {
	row := q.p.row(u)
	a, b := row.farther[q.k], row.farther[q.next]
	if unsure := q.p.unsureRow(u); possible && unsure != nil && q.p.sure[u-q.p.ua]&2 == 0 {
		a, b = unsure.farther[q.k], unsure.farther[q.next]
	}
	ra, rb := q.ranges(u, a, b, s)
	x := around(min(ra, q.ends.high), min(rb, q.ends.high), settleShare/q.slackR)
	if j := q.p.jagsOf(u); j != nil && besideLane(j.fartherOn, q.k, q.next) {
		x.high = j.least.farther[q.k]
		for _, k := range [2]int{q.k, q.next} {
			if j.fartherOn>>k&1 != 0 {
				x.low = min(x.low, q.y.seeR(s, float64(j.farther[k])))
			}
		}
	}
	return x
}

// ranges returns the slant ranges of two lines, at heights a and b of lanes k and next
// of row u.
func (q *quickWalk) ranges(u int, a, b float32, s float64) (ra, rb float64) {
	if q.f.ln.fan != nil {
		return q.laneRange(u, q.k, a), q.laneRange(u, q.next, b)
	}
	return q.y.bothR(s, float64(a), float64(b))
}

// walk fills q.cuts with the samples that walker.step finds between row u,
// excluded, and the next row in direction dir, included: the surface is a parabola
// from one crossing of the grid to the next.
func (q *quickWalk) walk(u, dir int, va, vb, sa, sb float64) {
	f := q.f
	i := u - f.ua
	z0, z1 := f.z[i*f.width:(i+1)*f.width], f.z[(i+dir)*f.width:(i+dir+1)*f.width]
	at0, at1 := f.at[i], f.at[i+dir]
	q.cuts = q.cuts[:0]
	t0 := 0.0
	if u == q.y.u0 {
		t0 = f.ln.own // ground this close counts as the point itself
	}
	c, last := int(math.Floor(va)), int(math.Floor(vb))
	dx, next, turn := vb-va, 1, 1
	if dx < 0 {
		next, turn = 0, -1
	}
	var g arc
	g.sa, g.ds = sa, sb-sa
	for ; ; c += turn {
		t1 := 1.0
		if c != last {
			if t1 = (float64(c+next) - va) / dx; t1 <= t0 {
				continue
			}
			t1 = min(t1, 1)
		}
		p0, q0 := float64(z0[c-at0]), float64(z1[c-at1])
		p1, q1 := p0, q0
		x0 := va - float64(c)
		if x0 != 0 || dx != 0 { // not along the column itself
			p1, q1 = float64(z0[c-at0+1]), float64(z1[c-at1+1])
		}
		if sum := p0 + q0 + p1 + q1; sum != sum {
			q.walkUnknown(u, dir, va, vb, sa, sb)
			return
		}
		ep, eq := p1-p0, q1-q0
		d := (eq - ep) * dx
		g.a, g.b, g.d = p0+ep*x0, (q0-p0)+ep*dx+(eq-ep)*x0, d
		if len(q.cuts) == 0 && t0 > 0 {
			q.emit(&g, 0, t0)
		}
		from := t0
		if d != 0 {
			from = q.vertices(&g, t0, t1)
		}
		q.emit(&g, from, t1)
		if t0 = t1; t1 == 1 {
			return
		}
	}
}

// arc is the surface along a stretch of a line: h = a + b t + d t^2 at ground
// distance sa + ds t.
type arc struct{ sa, ds, a, b, d float64 }

// emit adds the sample at t, which follows the one at from.
func (q *quickWalk) emit(g *arc, from, t float64) {
	x := q.more()
	x.s, x.h, x.sag = g.sa+t*g.ds, g.a+t*(g.b+t*g.d), g.d*(t-from)*(t-from)/4
	x.unknown = false
	if ln := q.y.ln; ln.places == nil { // most often; without a call
		x.m, x.r = ln.at(x.s, x.h)
		return
	}
	x.m, x.r = q.y.see(x.s, x.h)
}

// more returns a new sample at the end of q.cuts, with what is left in it.
func (q *quickWalk) more() *cut {
	n := len(q.cuts)
	if n == cap(q.cuts) {
		q.cuts = append(q.cuts, cut{})
	}
	q.cuts = q.cuts[:n+1]
	return &q.cuts[n]
}

// vertices emits the extremes of m and r between t0 and t1, in order, and returns
// where the last one lies.
func (q *quickWalk) vertices(g *arc, t0, t1 float64) (last float64) {
	worthM, worthR := q.y.worth(g.sa, g.sa+g.ds, g.a)
	a, b := g.b+2*g.d*t0, g.b+2*g.d*t1 // h' at both ends
	tm, tr := math.Inf(1), math.Inf(1)
	if (a+worthM)*(b+worthM) < 0 {
		tm = -(g.b + worthM) / (2 * g.d)
	}
	if (a-worthR)*(b-worthR) < 0 {
		tr = (worthR - g.b) / (2 * g.d)
	}
	if tr < tm {
		tm, tr = tr, tm
	}
	if last = t0; tm < t1 {
		q.emit(g, last, tm)
		last = tm
	}
	if tr < t1 {
		q.emit(g, last, tr)
		last = tr
	}
	return last
}

// walkUnknown is walk where a height is missing.
func (q *quickWalk) walkUnknown(u, dir int, va, vb, sa, sb float64) {
	q.step(u, dir, va, vb, sa, sb)
	q.cuts = q.cuts[:0]
	for i := range q.pieces {
		g := &q.pieces[i]
		x := q.more()
		x.m, x.r, x.s, x.h, x.sag, x.unknown = g.m, g.r, g.s, g.h, g.sag, g.unknown
	}
}

// between returns bounds of the heights on the path from row u, column va, to
// the next row in direction dir, column vb: NaN where one is missing.
func (w *walker) between(u, dir int, va, vb float64) (low, high float64) {
	f := w.f
	if va > vb {
		va, vb = vb, va
	}
	a, b := int(math.Floor(va)), int(math.Ceil(vb))
	i := u - f.ua
	x := f.z[i*f.width+a-f.at[i]:][:b-a+1]
	i += dir
	y := f.z[i*f.width+a-f.at[i]:][:b-a+1]
	lo, hi := x[0], x[0]
	for j := range x {
		lo, hi = min(lo, x[j], y[j]), max(hi, x[j], y[j])
	}
	return float64(lo), float64(hi)
}

// dull reports whether ground between row u and the next one towards the radar can
// neither share the point's slant range nor hide ground that reaches best, by the
// extremes of its heights. For a plane wave the walk costs less than to ask.
func (q *quickWalk) dull(u int, va, vb, sa, best float64) bool {
	if q.y.ln.places == nil {
		return false
	}
	low, high := q.between(u, -1, va, vb)
	top := q.y.seeM(sa, high)
	most := q.y.seeR(sa, low)
	return !q.overhead(top) && most < q.r && (top < best || math.IsInf(best, -1))
}

// below reports whether ground between row u and the next one towards the radar
// lies below the point's line of sight; as dull.
func (q *quickWalk) below(u int, va, vb, sa float64) bool {
	if q.y.ln.places == nil {
		return false
	}
	if q.p.gentle[u-1-q.p.ua].top < q.m {
		return true
	}
	_, high := q.between(u, -1, va, vb)
	top := q.y.seeM(sa, high)
	return top < q.m && !q.overhead(top)
}

// beyond reports whether ground between row u and the next one away from the radar
// lies beyond the point's slant range; as dull. It cannot hide any that is within
// it: it lies below the line of equal range, the other above.
func (q *quickWalk) beyond(u int, va, vb, sa float64) bool {
	if q.y.ln.places == nil {
		return false
	}
	_, high := q.between(u, 1, va, vb)
	top, least := q.y.see(sa, high)
	return least > q.r && !q.overhead(top)
}

// overhead reports whether ground at m stands above the antenna of a platform:
// there slant range grows with height, and the look angle towards the radar.
func (q *quickWalk) overhead(m float64) bool { return q.y.ln.places != nil && m > 0 }

// left reports whether the walk has left the DEM at column v, where one of the lanes
// beside it may go on.
func (q *quickWalk) left(v float64) bool { return v < 0 || v > q.last }

// lit reports whether no ground towards the radar reaches the point's m: none
// that the DEM shows, or no unknown terrain.
func (q *quickWalk) lit(unknown bool) bool {
	reached := q.m // no less than the line's m at row u
	vb, sb := q.y.at(q.u)
	for u := q.u; u > q.ua; u-- {
		va, sa := vb, sb
		vb, sb = q.y.at(u - 1)
		if reached <= q.m && q.p.gentle[u-1-q.p.ua].lightening(vb, va) {
			if (q.u-u)%2 == 0 {
				continue
			}
		} else {
			reached = math.Inf(-1)
			if !q.below(u, va, vb, sa) {
				q.walk(u, -1, va, vb, sa, sb)
				for i := range q.cuts {
					g := &q.cuts[i]
					if g.m >= q.m && g.unknown == unknown {
						return false
					}
					reached = g.m
				}
			}
			if q.left(vb) { // the lanes may go on inside
				return true
			}
		}
		b := q.shade(u-1, sb, unknown)
		if b.high < q.m-q.slackM {
			return true
		}
		if b.low > q.m+q.slackM {
			return false
		}
	}
	return !(unknown && q.edge(0) && q.edgePoint(0, q.f.lim.ceiling).m >= q.m)
}

// edge reports whether unknown terrain lies beyond row u of the DEM.
func (q *quickWalk) edge(u int) bool {
	return !q.f.lim.openEdge && (u == 0 && q.ua == 0 || u > 0 && q.ub == q.f.ln.orient.u)
}

// edgePoint is the walk's point at row u with a height.
func (q *quickWalk) edgePoint(u int, h float64) (g point) {
	_, s := q.y.at(u)
	g.m, g.r = q.y.see(s, h)
	return g
}

// foldedNearer reports whether lit ground towards the radar reaches the point's
// slant range; when possible is set, whether ground that may be lit, or unknown
// terrain, does. best is the largest m of such ground that nothing hides so far.
func (q *quickWalk) foldedNearer(possible bool) bool {
	none := math.Inf(-1)
	best := none
	reached := q.r // no less than the line's slant range at row u
	vb, sb := q.y.at(q.u)
	for u := q.u; u > q.ua; u-- {
		va, sa := vb, sb
		vb, sb = q.y.at(u - 1)
		if best == none && reached <= q.r && q.p.gentle[u-1-q.p.ua].rising(vb, va) {
			if (q.u-u)%2 == 0 {
				continue
			}
		} else {
			reached = none
			q.cuts = q.cuts[:0]
			if !q.dull(u, va, vb, sa, best) {
				q.walk(u, -1, va, vb, sa, sb)
			}
			if u == q.u && len(q.cuts) > 0 {
				if g := &q.cuts[0]; g.r >= q.r && !g.unknown {
					own := point{m: q.m, r: q.r, s: q.s, h: q.h}
					if x, deep := q.deep(&own, g.s, g.h, g.sag); deep {
						best = x.m
					}
				}
			}
			for i := range q.cuts {
				g := &q.cuts[i]
				reached = g.r
				switch {
				case g.unknown && possible:
					if g.r >= q.r {
						return true
					}
				case g.m >= best:
					best = none
					if g.r >= q.r && !g.unknown {
						best = q.highest(i, u, va, sa)
					}
				}
			}
			if q.left(vb) {
				return best != none
			}
		}
		if best != none {
			b := q.shade(u-1, sb, false)
			if !possible {
				c := q.shade(u-1, sb, true)
				b = bounds{max(b.low, c.low), max(b.high, c.high)}
			}
			if b.high < best-q.slackM {
				return true
			}
			if !(b.low > best+q.slackM) {
				continue
			}
			best = none
		}
		b := q.nearer(u-1, sb, possible)
		if b.high < q.r-q.slackR {
			return false
		}
		if b.low > q.r+q.slackR {
			return true
		}
	}
	if q.edge(0) {
		if possible {
			return best != none || q.edgePoint(0, q.f.lim.low).r >= q.r
		}
		return best > q.edgePoint(0, q.f.lim.ceiling).m
	}
	return best != none
}

// highest returns the largest m of the ground with at least the point's slant range
// between sample i of the walk from row u towards the radar and the sample before
// it: that of the sample, or of where slant range comes up to the point's.
func (q *quickWalk) highest(i, u int, va, sa float64) float64 {
	g := &q.cuts[i]
	var before *cut
	switch {
	case i > 0 && !q.cuts[i-1].unknown:
		before = &q.cuts[i-1]
	case i > 0 || u == q.u:
		return g.m
	default:
		before = &cut{s: sa, h: q.f.height(u, va)}
		before.m, before.r = q.y.see(before.s, before.h)
	}
	if !(before.r < q.r && before.m > g.m) {
		return g.m
	}
	_, r := q.y.see((before.s+g.s)/2, (before.h+g.h)/2-g.sag)
	t := passes(before.r, r, g.r, q.r)
	m, _ := q.y.see(before.s+float64(t*(g.s-before.s)), before.h+float64(t*(g.h-before.h))-float64(4*g.sag*t*(1-t)))
	return min(max(m, g.m), before.m)
}

// foldedFarther reports whether lit ground away from the radar comes down to
// the point's slant range; when possible is set, whether ground that may be
// lit, or unknown terrain, does.
func (q *quickWalk) foldedFarther(possible bool) bool {
	top, topU, hidden := q.m, math.Inf(-1), false
	var before point // while hidden
	reached := q.r   // no more than the line's slant range at row u
	vb, sb := q.y.at(q.u)
	for u := q.u; u < q.ub-1; u++ {
		va, sa := vb, sb
		vb, sb = q.y.at(u + 1)
		if reached >= q.r && q.p.gentle[u-q.p.ua].rising(va, vb) {
			if hidden = false; (u-q.u)%2 == 0 {
				continue
			}
		} else {
			reached = math.Inf(1)
			q.cuts = q.cuts[:0]
			if !q.beyond(u, va, vb, sa) {
				q.walk(u, 1, va, vb, sa, sb)
			} else {
				hidden = false
			}
			for i := range q.cuts {
				g := &q.cuts[i]
				reached = g.r
				if g.unknown {
					if possible && g.r <= q.r {
						return true
					}
					topU, hidden = max(topU, g.m), false
					continue
				}
				if g.m > top {
					best := g.r
					if hidden && before.r < best && before.m > math.Inf(-1) {
						x := g.point()
						best = q.y.rise(&before, &x, g.sag, top)
					}
					if best <= q.r && (possible || g.m > topU) {
						return true
					}
					top = g.m
					hidden = false
				} else {
					hidden = true
					before.m, before.r, before.s, before.h = g.m, g.r, g.s, g.h
				}
			}
			if q.left(vb) {
				return false
			}
		}
		b := q.farther(u+1, sb, possible)
		if b.low > q.r+q.slackR {
			return false
		}
		if b.high < q.r-q.slackR {
			return true
		}
	}
	last := q.f.ln.orient.u - 1
	return possible && q.edge(last) && q.edgePoint(last, q.f.lim.ceiling).r <= q.r
}
