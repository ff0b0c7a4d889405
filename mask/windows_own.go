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
// with sign -1, in the rows from near to far and about them. dir is that from
// the cell to them.
func (o *ownLine) search(near, far, dir int, sign float32, most *float32) {
	near, far = near-dir, far+dir
	if d := (near - o.i) * dir; d < 2 {
		near = o.i + 2*dir
	}
	far = min(max(far, 0), o.p.rows-1)
	best, top, at := -1, 0., 1.
	for r := near; (far-r)*dir >= 0; r += dir {
		h, s := o.height(r)
		rise, d := float64(sign)*(h-o.h), math.Abs(s-o.s)
		if best < 0 && rise == rise || float64(rise*at) > float64(top*d) {
			best, top, at = r, rise, d
		}
	}
	if best < 0 {
		return
	}
	m := top / at
	m = max(m, float64(*most))
	if best != o.i+dir {
		o.between(best, best-dir, float64(sign), &m)
	}
	if r := best + dir; r >= 0 && r < o.p.rows {
		o.between(best, r, float64(sign), &m)
	}
	*most = float32(m)
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
