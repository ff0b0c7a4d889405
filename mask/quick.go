package mask

import "math"

// atLimit is the size of a margin whose sign the lanes had wrong: it is small,
// and no more is known of it. Metres.
const atLimit = 0.001

// quick settles a doubtful cell between lanes k and k+1 of a strip where no
// unknown terrain is in reach. It walks from the cell's own centre over the
// bilinear surface, as settle does, but only as far as the lines of the two
// lanes do not decide the rest with a slack of their own.
func (w *walker) quick(p *strip, u, v, k int, m *lane, doubt doubts) {
	w.f = p.f
	w.y = newRay(p.f.ln, u, v)
	q := quickWalk{walker: w, p: p, u: u, k: k, slackM: settleShare * p.f.ln.rowM, slackR: settleShare * p.f.ln.rowR}
	_, s := w.y.at(u)
	h := float64(p.f.z[(u-p.f.ua)*p.f.width+v-p.f.at[u-p.f.ua]])
	q.m, q.r = p.f.ln.at(s, h)
	sign := func(margin *float32, positive bool) {
		if positive && !(*margin > 0) {
			*margin = atLimit
		} else if !positive && *margin > 0 {
			*margin = -atLimit
		}
	}
	if doubt&doubtClear != 0 {
		sign(&m.clear, q.lit())
	}
	if m.clear > 0 {
		if doubt&doubtNear != 0 {
			sign(&m.near, !q.foldedNearer())
		}
		if doubt&doubtFar != 0 {
			sign(&m.far, !q.foldedFarther())
		}
	}
	m.clearU, m.nearU, m.farU = m.clear, m.near, m.far
}

// quickWalk is one cell that is being settled: m and r are the point's own.
type quickWalk struct {
	*walker
	p              *strip
	u, k           int
	m, r           float64
	slackM, slackR float64
}

// beyond returns, at row u of the walk and ground distance s, the bounds of m
// that the two lanes give for the shade there, and of the slant range for one
// of the fold lines.
func (q *quickWalk) shade(u int, s float64) (low, high float64) {
	row := q.p.row(u)
	a, b := float64(row[q.k].shade), float64(row[q.k+1].shade)
	if a > b {
		a, b = b, a
	}
	low, _ = q.f.ln.at(s, a)
	high, _ = q.f.ln.at(s, b)
	rough := roughShare * (b - a)
	return low - rough, high + rough
}

func (q *quickWalk) fold(a, b, s float64) (low, high float64) {
	if a > b {
		a, b = b, a
	}
	_, high = q.f.ln.at(s, a)
	_, low = q.f.ln.at(s, b)
	rough := roughShare * (high - low)
	return low - rough, high + rough
}

// lit reports whether no ground towards the radar reaches the point's m.
func (q *quickWalk) lit() bool {
	for u := q.u; u > q.p.ua; u-- {
		va, sa := q.y.at(u)
		vb, sb := q.y.at(u - 1)
		if _, high := q.around(u, -1, va, vb); high+q.f.ln.cot*sa >= q.m {
			q.step(u, -1, va, vb, sa, sb)
			for i := range q.pieces {
				if q.pieces[i].m >= q.m {
					return false
				}
			}
		}
		low, high := q.shade(u-1, sb)
		if high < q.m-q.slackM {
			return true
		}
		if low > q.m+q.slackM {
			return false
		}
	}
	return true
}

// foldedNearer reports whether lit ground towards the radar reaches the point's
// slant range. best is the largest m of such ground that nothing hides so far.
func (q *quickWalk) foldedNearer() bool {
	best := math.Inf(-1)
	for u := q.u; u > q.p.ua; u-- {
		va, sa := q.y.at(u)
		vb, sb := q.y.at(u - 1)
		q.step(u, -1, va, vb, sa, sb)
		for i := range q.pieces {
			if g := &q.pieces[i]; g.m >= best {
				best = math.Inf(-1)
				if g.r >= q.r {
					best = g.m
				}
			}
		}
		if !math.IsInf(best, -1) {
			low, high := q.shade(u-1, sb)
			if high < best-q.slackM {
				return true
			}
			if !(low > best+q.slackM) {
				continue
			}
			best = math.Inf(-1)
		}
		row := q.p.row(u - 1)
		low, high := q.fold(float64(row[q.k].nearer), float64(row[q.k+1].nearer), sb)
		if high < q.r-q.slackR {
			return false
		}
		if low > q.r+q.slackR {
			return true
		}
	}
	return !math.IsInf(best, -1)
}

// foldedFarther reports whether lit ground away from the radar comes down to
// the point's slant range.
func (q *quickWalk) foldedFarther() bool {
	top, prev, hidden := q.m, point{m: q.m, r: q.r}, false
	for u := q.u; u < q.p.ub-1; u++ {
		va, sa := q.y.at(u)
		vb, sb := q.y.at(u + 1)
		q.step(u, 1, va, vb, sa, sb)
		for i := range q.pieces {
			g := q.pieces[i]
			if g.m > top {
				best := g.r
				if hidden {
					best = min(best, prev.r+(top-prev.m)/(g.m-prev.m)*(g.r-prev.r))
				}
				if best <= q.r {
					return true
				}
				top, hidden = g.m, false
			} else {
				hidden = true
			}
			prev = g
		}
		row := q.p.row(u + 1)
		low, high := q.fold(float64(row[q.k].farther), float64(row[q.k+1].farther), sb)
		if low > q.r+q.slackR {
			return false
		}
		if high < q.r-q.slackR {
			return true
		}
	}
	return false
}
