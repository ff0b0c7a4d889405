package mask

import "math"

// The next two rows on both sides of a cell, on its own range line. For a row of
// cells nearly all is the same: the columns that their lines cross, as steps from
// the cell, and, on parallel lanes, where between them.

// course is how the lines of cells run, in whole columns.
type course struct {
	lane      int  // the lane before a cell less the cell's column, see windowCells
	on        bool // the cells lie on lanes
	near, far sideCourse
}

// sideCourse is a course on one side, in columns from the cell's: the neighbour
// towards which the line runs, 0 for none; the column before the line two rows
// on; and the columns that it crosses between the first and the second row and
// between that and the third, 0 for none.
type sideCourse struct {
	neighbour, second int
	kinks             [2]int
}

// windowRun is a run of cells of one course.
type windowRun struct {
	p    *windowStrip
	i    int // row from ua on
	j, v int // the first cell, by column from the first of the row and of the DEM
	n    int
	lane int // before the first cell
	// Columns and lanes, which may be fractional, of the places 0 and laneStep
	// columns from the first of the row: what lies between is linear.
	places [2]windowPlace
	course
}

type windowPlace struct{ v, k, s float64 }

// findRuns finds the runs of all rows with cells.
func (p *windowStrip) findRuns() {
	p.allRuns, p.runAt = p.allRuns[:0], p.runAt[:0]
	for i := p.u0 - p.ua; i < p.u1-p.ua; i++ {
		st := &p.at[i]
		va, vb := p.columns(st)
		first := st.first()
		r := windowRun{p: p, i: i, v: va, j: va - first}
		for n := range r.places {
			x := &r.places[n]
			x.v = float64(first + n*laneStep)
			x.k = st.lane(x.v)
			_, x.s = st.place(x.k)
		}
		p.runAt = append(p.runAt, len(p.allRuns))
		for end := vb - first; r.j < end; r.j, r.v = r.j+r.n, r.v+r.n {
			r.find(end)
			p.allRuns = append(p.allRuns, r)
		}
	}
	p.runAt = append(p.runAt, len(p.allRuns))
}

// runs returns those of row ua + i.
func (p *windowStrip) runs(i int) []windowRun {
	u := p.ua + i - p.u0
	return p.allRuns[p.runAt[u]:p.runAt[u+1]]
}

// find takes the cells from j on, before the end, that have the course of the
// first: courses change one way only.
func (r *windowRun) find(end int) {
	r.n = end - r.j
	r.course = r.p.course(r.i, r.j)
	r.lane = r.j + r.course.lane
	if r.p.f.ln.uniform {
		return
	}
	for r.n > 1 && r.p.course(r.i, r.j+r.n-1) != r.course {
		r.n = (r.n + 1) / 2
	}
}

// away returns the columns and the ground distance from one of the run's places
// to where its line crosses another row.
func (r *windowRun) away(n, row int) (columns, distance float64) {
	x := &r.places[n]
	v, s := r.p.at[row].place(x.k)
	return v - x.v, math.Abs(s - x.s)
}

// distance returns the ground distance of the cells to another row.
func (r *windowRun) distance(row int) linear {
	_, first := r.away(0, row)
	_, last := r.away(1, row)
	return linearOf(first, last)
}

// line returns the range line of a cell of the run.
func (r *windowRun) line(c int, o *ownLine) {
	a, b, q := &r.places[0], &r.places[1], float64(r.j+c)/laneStep
	o.p, o.i, o.h = r.p, r.i, float64(r.p.row(r.i, r.v)[c])
	o.k, o.s = a.k+float64(q*(b.k-a.k)), a.s+float64(q*(b.s-a.s))
}

func (p *windowStrip) course(i, j int) course {
	st := &p.at[i]
	v := float64(st.first() + j)
	k := st.lane(v)
	lane := min(max(int(math.Floor(k)), 0), laneStep-1)
	return course{lane - j, float64(lane) == k, p.sideCourse(i, v, k, -1), p.sideCourse(i, v, k, 1)}
}

func (p *windowStrip) sideCourse(i int, v, k float64, dir int) (c sideCourse) {
	r := i + dir
	if r < 0 || r >= p.rows {
		return c
	}
	a, _ := p.at[r].place(k)
	a -= v
	switch {
	case a > onColumn:
		c.neighbour = 1
	case a < -onColumn:
		c.neighbour = -1
	}
	if r += dir; r < 0 || r >= p.rows {
		return c
	}
	b, _ := p.at[r].place(k)
	b -= v
	c.second = int(math.Floor(b + onColumn))
	c.kinks[0] = crossed(a, b)
	if r += dir; r < 0 || r >= p.rows {
		return c
	}
	d, _ := p.at[r].place(k)
	c.kinks[1] = crossed(b, d-v)
	return c
}

// crossed returns the last column that a line passes on the way from a to b, 0 for
// none.
func crossed(a, b float64) int {
	if k := int(math.Floor(b - onColumn)); b > 0 && float64(k) > a {
		return k
	}
	if k := int(math.Ceil(b + onColumn)); b < 0 && float64(k) < a {
		return k
	}
	return 0
}

// besideLine is one side of a run: heights by cell, and where the lines cross.
// Slices are nil beyond the DEM and without a kink.
type besideLine struct {
	here, aside   []float32 // the cells and the neighbours towards which the lines run
	first, firstA []float32 // the same in the next row
	across        linear    // the way from first to firstA
	firstD        linear    // ground distance
	// Before and behind the lines in the second row, and at the columns that they
	// cross, in the rows before and behind.
	points [3]besidePoint
}

// besidePoint is a place between two heights, part of the way from one to the
// other, at a ground distance.
type besidePoint struct {
	a, b           []float32
	part, distance linear
}

// beside raises the slopes of a run's cells to those of the next two rows.
func (p *windowStrip) beside(r *windowRun, c *windowCells) {
	near, far := p.besideLine(r, r.near, -1), p.besideLine(r, r.far, 1)
	near.slopes(r.j, c.shade[r.j:][:r.n], c.fold[r.j:][:r.n])
	far.slopes(r.j, c.fold[r.j:][:r.n], nil)
}

func (p *windowStrip) besideLine(r *windowRun, c sideCourse, dir int) (b besideLine) {
	first, second := r.i+dir, r.i+2*dir
	if first < 0 || first >= p.rows {
		return b
	}
	b.here = p.row(r.i, r.v)
	b.aside = p.row(r.i, r.v+c.neighbour)
	b.first, b.firstA = p.row(first, r.v), p.row(first, r.v+c.neighbour)
	a0, d0 := r.away(0, first)
	a1, d1 := r.away(1, first)
	b.across, b.firstD = linearOf(math.Abs(a0), math.Abs(a1)), linearOf(d0, d1)
	if second < 0 || second >= p.rows {
		return b
	}
	q := &b.points[0]
	from := float64(c.second)
	b0, e0 := r.away(0, second)
	b1, e1 := r.away(1, second)
	q.a, q.b = p.row(second, r.v+c.second), p.row(second, r.v+c.second+1)
	q.part, q.distance = linearOf(b0-from, b1-from), linearOf(e0, e1)
	if b0-from < onColumn && p.f.ln.uniform {
		q.b = q.a // no neighbour counts
	}
	for k, column := range c.kinks {
		if column != 0 {
			b.points[1+k] = r.kink(r.i+(1+k)*dir, r.i+(2+k)*dir, column)
		}
	}
	return b
}

// kink returns where the lines cross a column between two rows.
func (r *windowRun) kink(before, behind, column int) (q besidePoint) {
	q.a, q.b = r.p.row(before, r.v+column), r.p.row(behind, r.v+column)
	var t, d [2]float64
	for n := range t {
		va, da := r.away(n, before)
		vb, db := r.away(n, behind)
		t[n] = (float64(column) - va) / (vb - va)
		d[n] = da + t[n]*(db-da)
	}
	q.part, q.distance = linearOf(t[0], t[1]), linearOf(d[0], d[1])
	return q
}

// slopes raises up to the largest slope from the cells up to the ground on the
// line, from ownGround on, and down, when not nil, to the largest one down. j is
// the first cell's column. Between the cell and the next row the surface is a
// parabola that starts in the cell, so that slopes are largest at one of the ends.
func (b *besideLine) slopes(j int, up, down []float32) {
	if b.first == nil {
		return
	}
	c := 0
	if vectors {
		c = b.slopesVector(j, up, down)
	}
	for ; c < len(up); c++ {
		high, low := b.cell(c, j+c)
		if high > up[c] {
			up[c] = high
		}
		if down != nil && -low > down[c] {
			down[c] = -low
		}
	}
}

// cell returns the largest and the smallest slope up from cell c, at column j.
// Where heights are missing the slopes are NaN or leave some ground out.
func (b *besideLine) cell(c, j int) (high, low float32) {
	h, a := b.here[c], b.across.at(j)
	q := b.first[c] - h
	turn := (b.firstA[c] - h) - q
	side := b.aside[c] - h
	end := q + float32(a*turn)
	start := q + float32(a*side) + float32(ownGround*float32(a*(turn-side)))
	d := 1 / b.firstD.at(j)
	high, low = higher(start, end)*d, lower(start, end)*d
	for k := range b.points {
		p := &b.points[k]
		if p.a == nil {
			continue
		}
		q := p.a[c] - h
		m := (q + float32(p.part.at(j)*((p.b[c]-h)-q))) / p.distance.at(j)
		high, low = higher(m, high), lower(m, low)
	}
	return high, low
}

// higher and lower return the second where one is NaN, as vectors do.
func higher(a, b float32) float32 {
	if a > b {
		return a
	}
	return b
}

func lower(a, b float32) float32 {
	if a < b {
		return a
	}
	return b
}
