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
	w.y = p.ray(u, v, x)
	_, s := w.y.at(u)
	h := float64(p.f.z[(u-p.f.ua)*p.f.width+v-p.f.at[u-p.f.ua]])
	q := quickWalk{walker: w, p: p, u: u, k: k, next: next, slackM: slackM * w.y.gain(s, h), slackR: slackR}
	q.m, q.r = w.y.own(s, h)
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

// quickWalk is one cell that is being settled: m and r are the point's own.
type quickWalk struct {
	*walker
	p              *strip
	u, k, next     int
	m, r           float64
	slackM, slackR float64
}

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
	a = q.y.seeM(s, a)
	b = q.y.seeM(s, b)
	return around(a, b, settleShare/q.slackM)
}

// Where one lane has no line, the other stands for both with twice the slack.
func around(a, b, perRow float64) bounds {
	if a != a || b != b {
		alone := 2 * settleShare / perRow
		if a != a {
			a = b
		}
		return bounds{a - alone, a + alone}
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
	return q.ranges(u, a, b, s)
}

// farther is nearer for the ground farther than row u, and for the least slant
// range there.
func (q *quickWalk) farther(u int, s float64, possible bool) bounds {
	row := q.p.row(u)
	a, b := row.farther[q.k], row.farther[q.next]
	if unsure := q.p.unsureRow(u); possible && unsure != nil && q.p.sure[u-q.p.ua]&2 == 0 {
		a, b = unsure.farther[q.k], unsure.farther[q.next]
	}
	return q.ranges(u, a, b, s)
}

func (q *quickWalk) ranges(u int, a, b float32, s float64) bounds {
	if q.f.ln.fan != nil {
		return around(q.laneRange(u, q.k, a), q.laneRange(u, q.next, b), settleShare/q.slackR)
	}
	x := q.y.seeR(s, float64(a))
	y := q.y.seeR(s, float64(b))
	return around(x, y, settleShare/q.slackR)
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

// matters reports whether ground between two heights from distance s on, towards
// the radar, may share the point's slant range or hide ground that reaches best.
func (q *quickWalk) matters(s, low, high, best float64) bool {
	top := q.y.seeM(s, high)
	most := q.y.seeR(s, low)
	return q.overhead(top) || !(most < q.r) || !(top < best) && !math.IsInf(best, -1)
}

// overhead reports whether ground at m stands above the antenna of a platform:
// there slant range grows with height, and the look angle towards the radar.
func (q *quickWalk) overhead(m float64) bool { return q.y.ln.places != nil && m > 0 }

// left reports whether the walk of a platform's range line has left the DEM at
// column v, where one of the lanes beside it may go on.
func (q *quickWalk) left(v float64) bool { return q.y.ln.places != nil && q.outside(v) }

// lit reports whether no ground towards the radar reaches the point's m: none
// that the DEM shows, or no unknown terrain.
func (q *quickWalk) lit(unknown bool) bool {
	reached := q.m // no less than the line's m at row u
	vb, sb := q.y.at(q.u)
	for u := q.u; u > q.p.ua; u-- {
		va, sa := vb, sb
		vb, sb = q.y.at(u - 1)
		if reached <= q.m && q.p.gentle[u-1-q.p.ua].lightening(vb, va) {
			if (q.u-u)%2 == 0 {
				continue
			}
		} else {
			reached = math.Inf(-1)
			_, high := q.between(u, -1, va, vb)
			if top := q.y.seeM(sa, high); !(top < q.m) || q.overhead(top) {
				q.step(u, -1, va, vb, sa, sb)
				for i := range q.pieces {
					g := &q.pieces[i]
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
	return !q.f.lim.openEdge && (u == 0 && q.p.ua == 0 || u > 0 && q.p.ub == q.f.ln.orient.u)
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
	for u := q.u; u > q.p.ua; u-- {
		va, sa := vb, sb
		vb, sb = q.y.at(u - 1)
		if best == none && reached <= q.r && q.p.gentle[u-1-q.p.ua].rising(vb, va) {
			if (q.u-u)%2 == 0 {
				continue
			}
		} else {
			reached = none
			q.pieces = q.pieces[:0]
			if low, high := q.between(u, -1, va, vb); q.matters(sa, low, high, best) {
				q.step(u, -1, va, vb, sa, sb)
			}
			for i := range q.pieces {
				g := &q.pieces[i]
				reached = g.r
				switch {
				case g.unknown && possible:
					if g.r >= q.r {
						return true
					}
				case g.m >= best:
					best = none
					if g.r >= q.r && !g.unknown {
						best = g.m
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

// foldedFarther reports whether lit ground away from the radar comes down to
// the point's slant range; when possible is set, whether ground that may be
// lit, or unknown terrain, does.
func (q *quickWalk) foldedFarther(possible bool) bool {
	top, topU, prev, hidden := q.m, math.Inf(-1), point{m: q.m, r: q.r}, false
	reached := q.r // no more than the line's slant range at row u
	vb, sb := q.y.at(q.u)
	for u := q.u; u < q.p.ub-1; u++ {
		va, sa := vb, sb
		vb, sb = q.y.at(u + 1)
		if reached >= q.r && q.p.gentle[u-q.p.ua].rising(va, vb) {
			if hidden = false; (u-q.u)%2 == 0 {
				continue
			}
		} else {
			reached = math.Inf(1)
			// Ground beyond the point's slant range cannot hide any that is within
			// it: it lies below the line of equal range, the other above.
			q.pieces = q.pieces[:0]
			_, high := q.between(u, 1, va, vb)
			if top, least := q.y.see(sa, high); !(least > q.r) || q.overhead(top) {
				q.step(u, 1, va, vb, sa, sb)
			} else {
				hidden = false
			}
			for i := range q.pieces {
				g := q.pieces[i]
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
					if hidden {
						best = min(best, prev.r+(top-prev.m)/(g.m-prev.m)*(g.r-prev.r))
					}
					if best <= q.r && (possible || g.m > topU) {
						return true
					}
					top = g.m
					hidden = false
				} else {
					hidden = true
				}
				prev = g
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
