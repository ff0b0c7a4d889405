package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// Incidence windows. For a plane wave of one azimuth, three slopes of a point's
// range line decide every incidence i at once; s is ground distance away from
// the radar, h height, and the point is at s0, h0:
//
//	shade   the largest (h - h0) / (s0 - s) of nearer ground: the tangent of the
//	        horizon towards the radar. Hidden when cot i <= shade.
//	fold    the largest (h0 - h) / (s0 - s) of nearer ground and
//	        (h - h0) / (s - s0) of farther ground: the steepest descent towards
//	        the radar and the horizon away from it. Folded when tan i <= fold.
//
// Here any ground can be a partner; the masks count lit ground only.
//
// All three are tangents from a point to a convex hull. Lanes about a cell apart
// are marched with the hull's support lines at a few slopes, see guide: they say
// between which rows the tangent touches. There the slopes are taken on the
// cell's own range line, as everywhere in the next two rows.

// The incidences outside which the window layers say no more than the bound.
const (
	WindowFrom = 5 * geometry.Degree
	WindowTo   = 85 * geometry.Degree
)

// windowLanes lays out the range lines of an azimuth for windows between two
// incidences.
func windowLanes(g *dem.Grid, azimuth, from, to geometry.Angle) *lanes {
	look := geometry.NewLook()
	look.Kind, look.Incidence, look.Azimuth = geometry.Fixed, 45*geometry.Degree, azimuth
	ln := fixedLanes(g, look)
	// The reach: ground beyond relief / slope cannot have a slope that shows where
	// to look. It takes cot for ground farther away, and cot + tan for nearer
	// ground.
	fold, shade := 1/(guideShare*from.Tan()), to.Tan()/guideShare
	ln.cotMost, ln.tanMost = fold, math.Max(shade-fold, 0)
	return ln
}

// windower finds the slopes of the cells of one rectangle for one azimuth. The
// slices are row-major over the rectangle, NaN where there is no height; no
// slope is below its bound. Those ending in U count also what may stand where
// the DEM shows nothing.
type windower struct {
	shade, shadeU []float32
	fold, foldU   []float32
	sure          bool         // there is no unknown terrain: shadeU is shade, foldU is fold
	own           [2][]float32 // memory for when it is not

	minShade, minFold float64 // the bounds: cot and tan of the limiting incidences
	win               dem.Window
	field             field
	strip             windowStrip

	shadeGuide, nearerGuide, fartherGuide guide
	summits                               summits
}

// windowBand is how many strips share a field. A band follows its lanes all the
// way through the rectangle, so that its halo lies at their ends only.
const windowBand = 8

// run fills the slices for a window of the grid. The results do not depend on
// the window: what is marched is tied to the grid, and ground that is out of
// reach is below every line that counts.
func (x *windower) run(src dem.Source, ln *lanes, lim limits, from, to geometry.Angle, win dem.Window) error {
	n := win.Rows * win.Cols
	x.win = win
	x.minShade, x.minFold = 1/to.Tan(), from.Tan()
	x.shadeGuide.setUp(x.minShade, 1/from.Tan(), 1)
	x.nearerGuide.setUp(x.minFold, to.Tan(), -1)
	x.fartherGuide.setUp(x.minFold, to.Tan(), 1)
	x.shade, x.fold = resize(x.shade, n), resize(x.fold, n)
	x.sure, x.shadeU, x.foldU = true, x.shade, x.fold
	u0, u1, v0, v1 := ln.window(win)
	first, end := ln.strips(u0, u1, v0, v1)
	f := &x.field
	for ; first < end; first += windowBand {
		if !f.band(ln, lim, u0, u1, v0, v1, first, min(first+windowBand, end)) {
			continue
		}
		if err := f.load(src); err != nil {
			return err
		}
		f.z = f.z[:len(f.z)+vectorSlack]
		if x.sure && !f.sure {
			x.part()
		}
		for j := range f.strips {
			if x.strip.setUp(f, f.first+j) {
				x.forward()
				x.summits.finish()
				x.backward()
				x.handOut()
			}
		}
	}
	return nil
}

// strips returns the columns [first, end) of the lane lattice that the cells
// [u0, u1) x [v0, v1) lie in. A cell on the line between two may fall to either.
func (ln *lanes) strips(u0, u1, v0, v1 int) (first, end int) {
	a, b := math.Inf(1), math.Inf(-1)
	for _, u := range [2]int{u0, u1 - 1} { // a lane drifts one way only
		a = math.Min(a, ln.lane(float64(u), float64(v0)))
		b = math.Max(b, ln.lane(float64(u), float64(v1-1)))
	}
	column := func(lane float64) int { return (int(math.Floor(lane)) - ln.first) / laneStep }
	return max(column(a-1e-6), 0), min(column(b+1e-6)+1, ln.nk-1)
}

// band sizes the field for the cells [u0, u1) x [v0, v1) that lie in columns
// [first, end) of the lattice. It returns false when there are none.
func (f *field) band(ln *lanes, lim limits, u0, u1, v0, v1, first, end int) bool {
	f.ln, f.lim = ln, lim
	f.u0, f.u1, f.v0, f.v1 = u1, u0, v0, v1
	f.first, f.strips = first, end-first
	f.k0 = ln.first + laneStep*first
	k0, k1 := float64(f.k0), float64(f.k0+laneStep*f.strips)
	for u := u0; u < u1; u++ {
		if ln.vAt(float64(u), k0) <= float64(v1) && ln.vAt(float64(u), k1) >= float64(v0-1) {
			f.u0, f.u1 = min(f.u0, u), u+1
		}
	}
	if f.u0 >= f.u1 {
		return false
	}
	f.near, f.far = ln.reach(lim)
	f.ua, f.ub = max(f.u0-f.near, 0), min(f.u1+f.far, ln.orient.u)
	rows := f.ub - f.ua
	f.at = resize(f.at, rows)
	f.width = 0
	for i := range rows {
		u := float64(f.ua + i)
		f.at[i] = int(math.Floor(ln.vAt(u, k0))) - bandMargin
		f.width = max(f.width, int(math.Ceil(ln.vAt(u, k1)))+bandMargin+1-f.at[i])
	}
	f.z = resize(f.z, rows*f.width+vectorSlack)[:rows*f.width]
	return true
}

// bandMargin is how many columns beside its lanes a band holds: lines of cells
// run between lanes, and slopes take the columns beside a line.
const bandMargin = 4

// part gives the slopes with unknown terrain their own memory. Until there is
// some they are the others.
func (x *windower) part() {
	for i, a := range [2][]float32{x.shade, x.fold} {
		x.own[i] = resize(x.own[i], len(a))
		copy(x.own[i], a)
	}
	x.sure, x.shadeU, x.foldU = false, x.own[0], x.own[1]
}

// vectorSlack is how many numbers beyond those that are meant vectors may read.
const vectorSlack = 16

// vectorWidth is the number of heights of a vector.
const vectorWidth = 8

// standing says where a strip's lanes cross a row: lane k of the strip is at
// column v + dv k and ground distance s + ds k. end is where the next strip
// begins, to the last bit; base is the index of column 0 in the field's heights.
type standing struct {
	v, end, dv, s, ds float64
	base              int
}

// place returns column and ground distance at lane k, which may be fractional.
func (st *standing) place(k float64) (v, s float64) {
	return st.v + float64(st.dv*k), st.s + float64(st.ds*k)
}

// first returns the first column that the lanes reach.
func (st *standing) first() int { return int(math.Ceil(st.v)) }

// lane returns the lane, which may be fractional, at a column.
func (st *standing) lane(v float64) float64 { return (v - st.v) / st.dv }

// windowStrip is a bundle of neighbouring lanes, see strip.
type windowStrip struct {
	f              *field
	j, k0          int
	u0, u1, ua, ub int
	rows           int
	allAt, at      []standing  // by row, of the field and from ua on
	cells          windowCells // of the rows from u0 on
	cut            windowCells // of one row
	width          int         // cells that are held a row
	heights        laneRow     // of the row that is sampled
	allRuns        []windowRun
	runAt          []int // by row from u0 on: the first run
	// Of the rows that were sampled: heights by lane and row, and the distance of
	// the middle lane.
	tall, along []float32

	doubt           []bool                // by row from u0 on: unknown terrain counts
	missing         []bool                // by row from ua on: heights, or lanes outside the DEM
	unknown         bool                  // what is missing is unknown terrain
	last            float64               // column of the DEM
	nearEnd, farEnd bool                  // the strip reaches the DEM's first, last row
	places          [laneStep + 1]float64 // of the last unknown terrain, by lane
	noted           int                   // row up to which there is one, see unknown
}

// windowCells are the slopes of cells, those of a row or of all rows of a strip,
// by column from the first one that the row's lanes reach. Those ending in U are
// of unknown terrain alone.
type windowCells struct{ shade, fold, shadeU, foldU []float32 }

func (p *windowStrip) setUp(f *field, j int) bool {
	ln := f.ln
	p.f, p.j, p.k0 = f, j, ln.first+laneStep*j
	p.u0, p.u1, p.width = f.u1, f.u0, 0
	p.allAt = resize(p.allAt, f.ub-f.ua)
	for i := range p.allAt {
		st := &p.allAt[i]
		*st = p.stand(f.ua + i)
		st.base = i*f.width - f.at[i]
		u := f.ua + i
		if va, vb := p.columns(st); va < vb && u >= f.u0 && u < f.u1 {
			p.u0, p.u1 = min(p.u0, u), u+1
			p.width = max(p.width, vb-st.first())
		}
	}
	if p.u0 >= p.u1 {
		return false
	}
	p.ua, p.ub = max(p.u0-f.near, f.ua), min(p.u1+f.far, f.ub)
	p.rows = p.ub - p.ua
	p.at = p.allAt[p.ua-f.ua:][:p.rows]
	p.along = resize(p.along, p.rows+vectorSlack)
	for i := range p.at {
		_, s := p.at[i].place(laneStep / 2)
		p.along[i] = float32(s)
	}
	p.tall = resize(p.tall, (laneStep+1)*p.stride())
	n := p.width*(p.u1-p.u0) + vectorSlack
	for _, a := range [4]*[]float32{&p.cells.shade, &p.cells.fold, &p.cells.shadeU, &p.cells.foldU} {
		*a = resize(*a, n)
	}
	p.last = float64(ln.orient.v - 1)
	p.nearEnd, p.farEnd = p.ua == 0, p.ub == ln.orient.u
	p.unknown = !f.sure
	p.doubt = resize(p.doubt, p.u1-p.u0)
	clear(p.doubt)
	p.findMissing()
	p.findRuns()
	return true
}

// stand takes columns and distances of the lanes at row u from the lattice.
func (p *windowStrip) stand(u int) standing {
	ln := p.f.ln
	i := min(u/laneStep, ln.nu-2)
	q := float64(u-laneStep*i) / laneStep
	n := i*ln.nk + p.j
	at := func(a []float64, n int) float64 { return a[n] + float64(q*(a[n+ln.nk]-a[n])) }
	st := standing{s: at(ln.s, n)}
	st.ds = (at(ln.s, n+1) - st.s) / laneStep
	if ln.uniform {
		st.v, st.end, st.dv = ln.vAt(float64(u), float64(p.k0)), ln.vAt(float64(u), float64(p.k0+laneStep)), 1
		return st
	}
	st.v, st.end = at(ln.v, n), at(ln.v, n+1)
	st.dv = (st.end - st.v) / laneStep
	return st
}

// rowCells cuts the cells of row ua + i from those of the strip.
func (p *windowStrip) rowCells(i int, c *windowCells) {
	a := p.width * (p.ua + i - p.u0)
	b := a + p.width + vectorSlack
	all := &p.cells
	c.shade, c.fold, c.shadeU, c.foldU = all.shade[a:b], all.fold[a:b], all.shadeU[a:b], all.foldU[a:b]
}

// columns returns the columns [va, vb) of the field's cells between the strip's
// lanes.
func (p *windowStrip) columns(st *standing) (va, vb int) {
	return max(st.first(), p.f.v0), min(int(math.Ceil(st.end)), p.f.v1)
}

// row returns the stored heights of row ua + i from a column on. They go on
// behind the row's last column.
func (p *windowStrip) row(i, v int) []float32 {
	return p.f.z[p.at[i].base+v:]
}

// lane returns the heights of a lane by row, as far as they were sampled.
func (p *windowStrip) lane(k int) []float32 { return p.tall[k*p.stride():][:p.stride()] }

// stride is odd, so that lanes do not compete for a place in the cache.
func (p *windowStrip) stride() int { return (p.rows + vectorSlack) | 1 }

// sample fills heights with those of the lanes at row ua + i.
func (p *windowStrip) sample(i int) {
	p.sampleRow(i)
	for k, h := range p.heights[:laneStep+1] {
		p.tall[k*p.stride()+i] = h
	}
}

func (p *windowStrip) sampleRow(i int) {
	st := &p.at[i]
	h := p.heights[:laneStep+1]
	column := func(k int) int { return int(math.Floor(st.v+float64(st.dv*float64(k))+onColumn)) - k }
	for from := 0; from < len(h); {
		// The lanes that keep their distance from a column.
		n, c := len(h)-from, column(from)
		for st.dv != 1 && column(from+n-1) != c {
			n = (n + 1) / 2
		}
		z := p.row(i, from+c)
		first := st.v - float64(c)
		if rest := (linear{float32(first), float32(st.dv - 1)}); st.dv == 1 && first < onColumn {
			copy(h[from:from+n], z)
		} else {
			heightsBetween(h[from:from+n], z, rest, from)
		}
		from += n
	}
}

// heightsBetween fills h with heights between every one of z and the next. from
// is the first lane.
func heightsBetween(h, z []float32, rest linear, from int) {
	z = z[:len(h)+1]
	k := 0
	if vectors {
		k = heightsBetweenVector(h, z, &rest, from)
	}
	for ; k < len(h); k++ {
		h[k] = z[k] + float32(rest.at(from+k)*(z[k+1]-z[k]))
	}
}

// linear is a quantity of a row of a strip, by column from the first one on: a +
// b j.
type linear struct{ a, b float32 }

func (q linear) at(j int) float32 { return q.a + float32(q.b*float32(j)) }

// linearOf returns the line through the values at columns 0 and laneStep.
func linearOf(first, last float64) linear {
	return linear{float32(first), float32((last - first) / laneStep)}
}

// forward marches away from the radar: shade, nearer ground, and the next rows
// on both sides.
func (x *windower) forward() {
	p, c := &x.strip, &x.strip.cut
	x.shadeGuide.reset()
	x.nearerGuide.reset()
	p.forget(0, p.nearEnd)
	reached := 0
	for i := p.u0 - p.ua; i < p.u1-p.ua; i++ {
		for ; reached <= i-guideRows; reached++ {
			p.sample(reached)
			d := p.rowDistance(reached, reached-1)
			x.shadeGuide.advance(&p.heights, d, reached)
			x.nearerGuide.advance(&p.heights, d, reached)
		}
		p.rowCells(i, c)
		fillWith(c.shade[:p.width], float32(x.minShade))
		fillWith(c.fold[:p.width], float32(x.minFold))
		for k := range p.runs(i) {
			r := &p.runs(i)[k]
			p.beside(r, c)
			x.seek(r, &x.shadeGuide, -1, c.shade)
			x.seek(r, &x.nearerGuide, -1, c.fold)
		}
		if p.unknown {
			x.unknownBefore(i, c)
		}
	}
}

// backward marches towards the radar: farther ground.
func (x *windower) backward() {
	p, c := &x.strip, &x.strip.cut
	x.fartherGuide.reset()
	p.forget(p.rows-1, p.farEnd)
	reached := p.rows - 1
	for i := p.u1 - p.ua - 1; i >= p.u0-p.ua; i-- {
		for ; reached >= i+guideRows; reached-- {
			p.sample(reached)
			x.fartherGuide.advance(&p.heights, p.rowDistance(reached, reached+1), reached)
		}
		p.rowCells(i, c)
		for k := range p.runs(i) {
			x.seek(&p.runs(i)[k], &x.fartherGuide, 1, c.fold)
		}
		if p.unknown {
			x.unknownBehind(i, c)
		}
	}
}

// rowDistance returns the ground distance of the lanes between two rows, by
// lane; nothing where the second lies outside the strip.
func (p *windowStrip) rowDistance(i, from int) linear {
	if from < 0 || from >= p.rows {
		return linear{}
	}
	a, b := &p.at[i], &p.at[from]
	return linear{float32(math.Abs(a.s - b.s)), float32(math.Copysign(1, a.s-b.s) * (a.ds - b.ds))}
}

// handOut puts the slopes where they belong.
func (x *windower) handOut() {
	x.summits.finish()
	p, c := &x.strip, &x.strip.cut
	for i := p.u0 - p.ua; i < p.u1-p.ua; i++ {
		p.rowCells(i, c)
		x.put(i, c)
	}
}

// put hands out the slopes of a row.
func (x *windower) put(i int, c *windowCells) {
	p := &x.strip
	st := &p.at[i]
	va, vb := p.columns(st)
	if va >= vb {
		return
	}
	j := va - st.first()
	row, col := p.f.ln.cell(float64(p.ua+i), float64(va))
	at, stride := (int(row)-x.win.Row)*x.win.Cols+int(col)-x.win.Col, 1
	if p.f.ln.transposed {
		stride = x.win.Cols
	}
	if p.doubt[p.ua+i-p.u0] {
		raiseTo(c.shadeU[:p.width], c.shade)
		raiseTo(c.foldU[:p.width], c.fold)
	} else if p.missing[i] { // walks need both
		copy(c.shadeU, c.shade[:p.width])
		copy(c.foldU, c.fold[:p.width])
	} else {
		c.shadeU, c.foldU = c.shade, c.fold
	}
	if p.missing[i] {
		x.mend(i, c)
	}
	x.putRow(x.shade, c.shade[j:][:vb-va], at, stride)
	x.putRow(x.fold, c.fold[j:][:vb-va], at, stride)
	if !x.sure {
		x.putRow(x.shadeU, c.shadeU[j:][:vb-va], at, stride)
		x.putRow(x.foldU, c.foldU[j:][:vb-va], at, stride)
	}
}

func (x *windower) putRow(to, from []float32, at, stride int) {
	if stride == 1 {
		copy(to[at:], from)
		return
	}
	for _, m := range from {
		to[at] = m
		at += stride
	}
}
