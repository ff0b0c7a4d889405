package mask

import "math"

// ownLine is the range line through one cell.
type ownLine struct {
	p       *windowStrip
	i, v    int
	k, s, h float64
}

// height returns the height and the distance of the line at a row.
func (o *ownLine) height(row int) (h, s float64) {
	v, s := o.p.at[row].place(o.k)
	c := math.Floor(v)
	return lerp(o.p.row(row, int(c)), v-c), s
}

// search raises most to the largest slope up to the ground of the line, down
// with sign -1, that lies about the rows from near to far. The lanes beside it,
// lane and the next, say where.
func (o *ownLine) search(lane, near, far, dir int, sign float64, most *float32) {
	near, far = near-dir, far+dir
	if (near-o.i)*dir < guideRows {
		near = o.i + guideRows*dir
	}
	far = min(max(far, 0), o.p.rows-1)
	lo, hi := min(near, far), max(near, far)
	row := -1
	if hi-lo < dbgN {
		best, top, at := -1, 0., 1.
		for r := near; (far-r)*dir >= 0; r += dir {
			h, s := o.height(r)
			rise, d := sign*(h-o.h), math.Abs(s-o.s)
			if best < 0 && rise == rise || float64(rise*at) > float64(top*d) {
				best, top, at = r, rise, d
			}
		}
		row = best
	} else {
		row = o.p.steepest(o, lane, lo, hi, float32(sign))
	}
	if row < 0 {
		return
	}
	m := float64(*most)
	h, s := o.height(row)
	if q := sign * (h - o.h) / math.Abs(s-o.s); q > m {
		m = q
	}
	for next := row - 1; next <= row+1; next += 2 {
		if next >= 0 && next < o.p.rows {
			o.between(row, next, sign, &m)
		}
	}
	*most = float32(m)
}

// steepest returns the row of [from, to] at which the ground on the lanes beside
// a line, mixed, has the largest slope up from the line's cell, down with sign
// -1; -1 where there is none.
func (p *windowStrip) steepest(o *ownLine, lane, from, to int, sign float32) int {
	n := to - from + 1
	if n <= 0 {
		return -1
	}
	b := min(lane+1, laneStep)
	q := steepness{
		a: p.lane(lane)[from:], b: p.lane(b)[from:], s: p.along[from:],
		mix: float32(o.k - float64(lane)), h0: float32(o.h), s0: p.along[o.i], sign: sign,
	}
	if q.mix == 0 {
		q.b = q.a
	}
	if vectors {
		if r := q.searchVector(n); r >= 0 {
			return from + r
		}
		return -1
	}
	best, row := float32(math.Inf(-1)), -1
	for r := range n {
		if m := q.at(r); m > best {
			best, row = m, from+r
		}
	}
	return row
}

// steepness is what steepest looks at: heights of two lanes, and distances.
type steepness struct {
	a, b, s           []float32
	mix, h0, s0, sign float32
}

func (q *steepness) at(r int) float32 {
	h := q.a[r] + float32(q.mix*(q.b[r]-q.a[r]))
	d := q.s[r] - q.s0
	if d < 0 {
		d = -d
	}
	return float32(q.sign*(h-q.h0)) / d
}

// between counts the slopes to the ground between two neighbouring rows. The
// surface is a parabola on each side of the column that the line crosses.
func (o *ownLine) between(row, next int, sign float64, most *float64) {
	p, f := o.p, o.p.f
	va, vb := p.at[row].v+float64(p.at[row].dv*o.k), p.at[next].v+float64(p.at[next].dv*o.k)
	if va == vb {
		return // straight
	}
	ca, cb := math.Floor(va), math.Floor(vb)
	i, j := row+p.ua-f.ua, next+p.ua-f.ua
	za, zb := f.z[i*f.width:], f.z[j*f.width:]
	_, sa := p.at[row].place(o.k)
	_, sb := p.at[next].place(o.k)
	ds := sb - sa
	// On the bilinear surface of the cell from column c on: h = a + b t + d t^2.
	piece := func(c, t0, t1 float64) {
		k, l := int(c)-f.at[i], int(c)-f.at[j]
		p0, q0 := float64(za[k]), float64(zb[l])
		ep, eq := float64(za[k+1])-p0, float64(zb[l+1])-q0
		x, dx := va-c, vb-va
		a, b, d := p0+ep*x, q0-p0+ep*dx+(eq-ep)*x, (eq-ep)*dx
		count := func(t float64) {
			if m := sign * (a + t*(b+t*d) - o.h) / math.Abs(sa+t*ds-o.s); m > *most {
				*most = m
			}
		}
		count(t1)
		if sign*d >= 0 {
			return // no height above the ends
		}
		// The ground farthest above the steepest line so far; twice, since that
		// line is then steeper.
		away := math.Copysign(ds, ds*(sa-o.s)) // change of distance to the cell for t
		for range 2 {
			t := (sign**most*away - b) / (2 * d)
			if !(t > t0 && t < t1) {
				return
			}
			count(t)
		}
	}
	if ca == cb {
		piece(ca, 0, 1)
		return
	}
	c := math.Max(ca, cb)
	t := (c - va) / (vb - va)
	piece(ca, 0, t)
	piece(cb, t, 1)
}

const dbgN = 5
