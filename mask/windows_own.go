package mask

import "math"

// ownLine is the range line through one cell.
type ownLine struct {
	p       *windowStrip
	i       int
	k, s, h float64
}

// cross returns where the line crosses a row: the column, that before it, the
// ground distance, and the height.
func (o *ownLine) cross(row int) (v float64, c int, s float64, h float32) {
	st := &o.p.at[row]
	v, s = st.place(o.k)
	f := math.Floor(v)
	c = int(f)
	return v, c, s, float32(lerp(o.p.f.z[st.base+c:], v-f))
}

// find returns the row about which the line's ground is seen at the largest
// slope, down with sign -1, between two rows that a guide points to; -1 for none.
func (o *ownLine) find(lane, near, far, dir int, sign float32) int {
	near, far = near-dir, far+dir
	if (near-o.i)*dir < guideRows {
		near = o.i + guideRows*dir
	}
	far = min(max(far, 0), o.p.rows-1)
	switch n := (far-near)*dir + 1; {
	case n > 3:
		return o.steepest(lane, min(near, far), n, sign)
	case n > 0:
		return near + n/2*dir
	}
	return -1
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
	if r := q.search(n); r >= 0 {
		return from + r
	}
	return -1
}

// steepness is what steepest looks at: heights of two lanes, and distances.
type steepness struct {
	a, b, s           []float32
	mix, h0, s0, sign float32
}

// search returns the row of the first n at which the slope is largest, -1 where
// there is none.
func (q *steepness) search(n int) int {
	if vectors {
		return q.searchVector(n)
	}
	best, row := float32(math.Inf(-1)), -1
	for r := range n {
		m := q.at(r)
		// Of equal ones the vectors' first.
		if m > best || m == best && r%vectorWidth < row%vectorWidth {
			best, row = m, r
		}
	}
	return row
}

func (q *steepness) at(r int) float32 {
	h := q.a[r] + float32(q.mix*(q.b[r]-q.a[r]))
	d := q.s[r] - q.s0
	if d < 0 {
		d = -d
	}
	return float32(q.sign*(h-q.h0)) / d
}

// summits are places of lines about which the largest slopes are sought, several
// at a time: rises less the cell's height, down with sign -1, and distances from
// the cell. By place.
type summits struct {
	n     int
	of    [summitCount]summit
	least bySummit
	// The row itself, and on both sides the column that the line crosses on the
	// way to the next row, and the next row.
	rise, away [summitPoints]bySummit
	// The ground on the way: parabolas on both sides of that column.
	arc [summitArcs]arcs
}

const (
	summitCount  = vectorWidth
	summitPoints = 5
	summitArcs   = 4
)

type bySummit = [summitCount]float32

// summit is a place at a row of a line, and the slope that it may raise. moved
// says that it was another row's neighbour.
type summit struct {
	o     ownLine
	row   int
	sign  float32
	most  *float32
	moved bool
}

// arcs are parabolas h + t (r + t d), t from t0 to t1, at distances away + t step
// from the cells.
type arcs struct{ h, r, d, t0, t1, away, step bySummit }

// next returns room for a place, for add to take.
func (q *summits) next() *summit { return &q.of[q.n] }

// add takes the next place. It is looked at when there are enough of them, or by
// flush.
func (q *summits) add() {
	i := q.n
	s := &q.of[i]
	o := &s.o
	v, c, at, h := o.cross(s.row)
	h0, away := float32(o.h), float32(math.Abs(at-o.s))
	q.rise[0][i], q.away[0][i] = s.sign*(h-h0), away
	for side := range 2 {
		row := s.row - 1 + 2*side
		if row < 0 || row >= o.p.rows {
			row = s.row // says nothing new
		}
		q.addSide(i, 1+2*side, 2*side, s, row, v, c, away, h0)
	}
	if q.n++; q.n == summitCount {
		q.flush()
	}
}

// addSide takes the way to a row: points from point on, arcs from arc on.
func (q *summits) addSide(i, point, arc int, s *summit, row int, v float64, c int, away, h0 float32) {
	o := &s.o
	w, e, to, h := o.cross(row)
	end := float32(math.Abs(to - o.s))
	base, next := o.p.at[s.row].base, o.p.at[row].base
	z := o.p.f.z
	// The column that is crossed, or the way's end.
	column, t := max(c, e), float32(1)
	if c != e {
		t = float32((float64(column) - v) / (w - v))
	}
	a, b := z[base+column], z[next+column]
	q.rise[point][i], q.away[point][i] = s.sign*(a+float32(t*(b-a))-h0), away+float32(t*(end-away))
	if c == e {
		q.rise[point][i] = s.sign * (h - h0)
	}
	q.rise[point+1][i], q.away[point+1][i] = s.sign*(h-h0), end
	dx := float32(w - v)
	for k, c := range [2]int{c, e} {
		p, g := z[base+c:][:2], z[next+c:][:2]
		x := float32(v - float64(c))
		slope := p[1] - p[0]
		twist := (g[1] - g[0]) - slope
		r := &q.arc[arc+k]
		r.h[i] = s.sign * (p[0] + float32(slope*x) - h0)
		r.r[i] = s.sign * ((g[0] - p[0]) + float32(slope*dx) + float32(twist*x))
		r.d[i] = s.sign * float32(twist*dx)
		r.away[i], r.step[i] = away, end-away
		r.t0[i], r.t1[i] = 0, t
		if k == 1 {
			r.t0[i], r.t1[i] = t, 1
		}
	}
}

// flush looks at the places.
func (q *summits) flush() {
	n := q.n
	for i := range n {
		q.least[i] = *q.of[i].most
	}
	q.raiseAll(n)
	q.n = 0
	for i := range n {
		s := &q.of[i]
		if q.least[i] > *s.most {
			*s.most = q.least[i]
		}
		if q.moveOn(s, i) {
			q.of[q.n] = *s
			q.add()
		}
	}
}

// finish looks at all places that are left.
func (q *summits) finish() {
	for q.n > 0 {
		q.flush()
	}
}

// moveOn moves a place to the row beside it that is seen at a larger slope.
func (q *summits) moveOn(s *summit, i int) bool {
	steeper := func(a, b int) bool { return q.rise[a][i]*q.away[b][i] > q.rise[b][i]*q.away[a][i] }
	if s.moved {
		return false
	}
	s.moved = true
	switch {
	case steeper(2, 0) && !steeper(4, 2):
		s.row--
	case steeper(4, 0):
		s.row++
	default:
		return false
	}
	return s.row > s.o.i+1 || s.row < s.o.i-1
}

// raiseAll raises least to the largest slopes of n places.
func (q *summits) raiseAll(n int) {
	if vectors {
		q.raiseVector()
		return
	}
	for i := range n {
		q.raise(i)
	}
}

// raise raises least to the largest slope of a place.
func (q *summits) raise(i int) {
	m := q.least[i]
	for k := range q.rise {
		m = higher(q.rise[k][i]/q.away[k][i], m)
	}
	for k := range q.arc {
		a := &q.arc[k]
		// The ground farthest above the steepest line so far.
		t := (float32(m*a.step[i]) - a.r[i]) / (2 * a.d[i])
		if a.d[i] < 0 && t > a.t0[i] && t < a.t1[i] {
			h := a.h[i] + float32(t*(a.r[i]+float32(t*a.d[i])))
			m = higher(h/(a.away[i]+float32(t*a.step[i])), m)
		}
	}
	q.least[i] = m
}
