package mask

import "math"

// ownLine is the range line through one cell.
type ownLine struct {
	p       *windowStrip
	i, v    int
	k, s, h float64
}

// station is where a line crosses a row: the heights from stationMargin columns
// before column c on, the one before the line, and the line's own column,
// distance and height.
type station struct {
	z       []float32
	c       int
	v, s, h float64
}

// stationMargin is the most columns that a line passes between two rows.
const stationMargin = 2

func (o *ownLine) cross(row int) (x station) {
	st := &o.p.at[row]
	x.v, x.s = st.place(o.k)
	c := math.Floor(x.v)
	x.c = int(c)
	x.z = o.p.f.z[st.base+x.c-stationMargin:][:2*stationMargin+2]
	x.h = lerp(x.z[stationMargin:], x.v-c)
	return x
}

// search raises most to the largest slope up to the ground of the line, down
// with sign -1, that lies about the rows from near to far. The lanes beside it
// say where; from there the line itself is followed to where it is steepest.
func (o *ownLine) search(lane, near, far, dir int, sign float64, most *float32) {
	near, far = near-dir, far+dir
	if (near-o.i)*dir < guideRows {
		near = o.i + guideRows*dir
	}
	far = min(max(far, 0), o.p.rows-1)
	n := (far-near)*dir + 1
	row := near + n/2*dir
	if n > 3 {
		row = o.steepest(lane, min(near, far), n, float32(sign))
	}
	if n <= 0 || row < 0 {
		return
	}
	m := slope{float64(*most), sign, o.h, o.s}
	at := o.cross(row)
	m.raise(at.h, at.s)
	m.follow(o, row, -1, at)
	m.follow(o, row, 1, at)
	*most = float32(m.most)
}

// follow looks at the ground from one row to the next, and on as long as that is
// seen at a larger slope.
func (m *slope) follow(o *ownLine, row, dir int, at station) {
	for range guideRows - 1 {
		row += dir
		if row < 0 || row >= o.p.rows {
			return
		}
		next := o.cross(row)
		m.between(&at, &next)
		if !m.above(&next, &at) {
			return
		}
		at = next
	}
}

// steepest returns the row of n from one on at which the ground on the lanes
// beside the line, lane and the next, mixed, has the largest slope up from the
// cell, down with sign -1; -1 where there is none.
func (o *ownLine) steepest(lane, from, n int, sign float32) int {
	p := o.p
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

// slope is the largest slope from a point up to ground, down with sign -1.
type slope struct{ most, sign, h, s float64 }

// above reports whether a place is seen at a larger slope than another.
func (m *slope) above(a, b *station) bool {
	return m.sign*(a.h-m.h)*math.Abs(b.s-m.s) > m.sign*(b.h-m.h)*math.Abs(a.s-m.s)
}

func (m *slope) raise(h, s float64) {
	rise, away := m.sign*(h-m.h), math.Abs(s-m.s)
	if rise > m.most*away {
		m.most = rise / away
	}
}

// between raises the slope to that of the ground from one row to the next. The
// surface is a parabola on each side of the column that the line crosses.
func (m *slope) between(a, b *station) {
	m.raise(b.h, b.s)
	if a.v == b.v { // straight
		return
	}
	if a.c == b.c {
		m.bulge(a, b, a.c, 0, 1)
		return
	}
	c := max(a.c, b.c)
	t := (float64(c) - a.v) / (b.v - a.v)
	p, q := float64(a.z[c-a.c+stationMargin]), float64(b.z[c-b.c+stationMargin])
	m.raise(p+float64(t*(q-p)), a.s+float64(t*(b.s-a.s)))
	m.bulge(a, b, a.c, 0, t)
	m.bulge(a, b, b.c, t, 1)
}

// bulge is between for the ground above the ends of the way from t0 to t1, behind
// column c.
func (m *slope) bulge(a, b *station, c int, t0, t1 float64) {
	p, q := a.z[c-a.c+stationMargin:], b.z[c-b.c+stationMargin:]
	e, g := float64(p[1]-p[0]), float64(q[1]-q[0])
	dx := b.v - a.v
	d := (g - e) * dx
	if m.sign*d >= 0 {
		return
	}
	// Heights along the way: h + t (r + t d).
	x := a.v - float64(c)
	r := float64(q[0]) - float64(p[0]) + float64(e*dx) + float64((g-e)*x)
	ds := b.s - a.s
	away := math.Copysign(ds, ds*(a.s-m.s)) // change of distance to the point for t
	if m.sign*(r+2*t0*d) <= m.most*away {
		return // falls below the steepest line from the beginning
	}
	// The ground farthest above the steepest line so far; twice, since that line
	// is then steeper.
	h := float64(p[0]) + float64(e*x)
	for range 2 {
		t := (m.sign*m.most*away - r) / (2 * d)
		if !(t > t0 && t < t1) {
			return
		}
		m.raise(h+float64(t*(r+float64(t*d))), a.s+float64(t*ds))
	}
}
