package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// orient maps the grid's rows and columns to the marching frame: u is the
// axis that is marched, growing from near range to far range, v the other.
// A look within 45 degrees of the column axis marches along rows; any other
// marches along columns, on transposed tiles.
type orient struct {
	transposed bool // u runs along the grid's columns
	flip       bool // u falls along its grid axis
	u, v       int  // cells along each axis
}

func newOrient(g *dem.Grid, transposed, flip bool) orient {
	if transposed {
		return orient{transposed, flip, g.Cols, g.Rows}
	}
	return orient{transposed, flip, g.Rows, g.Cols}
}

// cell returns the grid position of a marching position.
func (o orient) cell(u, v float64) (row, col float64) {
	if o.flip {
		u = float64(o.u-1) - u
	}
	if o.transposed {
		return v, u
	}
	return u, v
}

// place is the inverse of cell.
func (o orient) place(row, col float64) (u, v float64) {
	u, v = row, col
	if o.transposed {
		u, v = v, u
	}
	if o.flip {
		u = float64(o.u-1) - u
	}
	return u, v
}

// window returns the marching rectangle [u0, u1) x [v0, v1) of a grid window.
func (o orient) window(w dem.Window) (u0, u1, v0, v1 int) {
	u0, u1, v0, v1 = w.Row, w.Row+w.Rows, w.Col, w.Col+w.Cols
	if o.transposed {
		u0, u1, v0, v1 = v0, v1, u0, u1
	}
	if o.flip {
		u0, u1 = o.u-u1, o.u-u0
	}
	return u0, u1, v0, v1
}

// grid is the inverse of window.
func (o orient) grid(u0, u1, v0, v1 int) dem.Window {
	if o.flip {
		u0, u1 = o.u-u1, o.u-u0
	}
	if o.transposed {
		return dem.Window{Row: v0, Col: u0, Rows: v1 - v0, Cols: u1 - u0}
	}
	return dem.Window{Row: u0, Col: v0, Rows: u1 - u0, Cols: v1 - v0}
}

// step returns the ground vector, metres east and north, of one u and of one
// v at a marching position.
func (o orient) step(g *dem.Grid, u, v float64) (ue, un, ve, vn float64) {
	l := g.At(o.cell(u, v))
	ue, un, ve, vn = l.RowE, l.RowN, l.ColE, l.ColN
	if o.transposed {
		ue, un, ve, vn = ve, vn, ue, un
	}
	if o.flip {
		ue, un = -ue, -un
	}
	return ue, un, ve, vn
}

// laneStep is the number of rows and of lanes between two nodes of a lane
// lattice, and of lanes that are marched together. The lanes of a strip with those
// beside them, and the patches that they cross, have a bit each of 64.
const laneStep = 56

// lanes says where the range lines of one look cross the rows of the marching
// frame. Lane k crosses row u at column v(u, k); s(u, k) is the ground
// distance along it. Both are exact at the nodes of a lattice that covers the
// DEM and is anchored to it and to the look, never to a tile, and bilinear
// between. Lane k passes column k at the middle row, so that a turned or mirrored
// DEM has the turned or mirrored lanes.
type lanes struct {
	orient
	// uniform lanes are straight and parallel: v = k + slope (u - mid), exactly.
	uniform bool
	slope   float64
	mid     float64 // the middle row, a half where their number is even

	first  int // lane of the lattice's first column, a multiple of laneStep
	nu, nk int // nodes along u and along the lanes
	v, s   []float64
	// Of a platform: the places of the nodes in their range planes.
	places   []place
	platform geometry.Platform
	sights   *sights
	fan      *fan     // of a tripod
	more     []*lanes // the other fans of a tripod
	// ahead returns the unit ground vector, east and north, of the range line
	// at a place of the grid, away from the radar.
	ahead func(l *dem.Local) (e, n float64)
	minDS float64 // least ground distance of one row along a lane, metres
	own   float64 // the part of a row next to a point that counts as the point itself
	// rowM, rowR and rowH are what one row of level ground is worth at least:
	// metres of m, of r, and of height at equal r.
	rowM, rowR, rowH float64
	lens
}

// lens turns a position and a height into the two quantities that the march
// compares along a lane: m, which is larger the larger the look angle, and r,
// the slant range up to a constant. For a plane wave at incidence i
//
//	m = h + s cot(i)        r = s sin(i) - h cos(i)
//
// A difference of m is metres of height; a difference of r metres of range. For
// a platform see view; sin, cos, cot and tan are then those at the middle of
// the DEM.
type lens struct {
	sin, cos, cot, tan float64
	cotMost, tanMost   float64 // the largest anywhere
	datum, scale       float64 // of a platform: height of reference, metres of height for one of m
}

func (l *lens) at(s, h float64) (m, r float64) {
	return h + float64(l.cot*s), float64(l.sin*s) - float64(l.cos*h)
}

// fixedLanes lays out the range lines of a plane wave: straight lines in the
// map plane of a projected grid, with the look's true azimuth at the centre of
// the DEM; lines of constant true azimuth on a geographic grid. geographic
// says that rows are parallels.
func fixedLanes(g *dem.Grid, look geometry.Look) *lanes {
	a := look.Azimuth
	cr, cc := float64(g.Rows-1)/2, float64(g.Cols-1)/2
	dr, dc := indexDirection(g.At(cr, cc), a)
	geographic := g.Geographic
	ln := &lanes{lens: lens{sin: look.Incidence.Sin(), cos: look.Incidence.Cos(), cot: 1 / look.Incidence.Tan(), tan: look.Incidence.Tan()}}
	ln.cotMost, ln.tanMost = ln.cot, ln.tan
	if math.Abs(dr) >= math.Abs(dc)*(1-1e-6) { // along a diagonal always the rows
		ln.orient = newOrient(g, false, dr < 0)
	} else {
		ln.orient = newOrient(g, true, dc < 0)
	}
	east, north := a.Sin(), a.Cos()
	// slope returns dv/du of the range line through a marching position.
	slope := func(u, v float64) float64 {
		r, c := dr, dc
		if geographic {
			l := g.At(ln.cell(u, v))
			r, c = indexStep(&l, east, north)
		}
		du, dv := r, c
		if ln.transposed {
			du, dv = c, r
		}
		if math.Abs(dv/du) < flatSlope {
			return 0
		}
		return dv / math.Abs(du)
	}
	ln.ahead = func(l *dem.Local) (e, n float64) {
		if geographic {
			return a.Sin(), a.Cos()
		}
		e, n = dr*l.RowE+dc*l.ColE, dr*l.RowN+dc*l.ColN
		d := math.Hypot(e, n)
		return e / d, n / d
	}
	ln.uniform = !geographic || slope(0, 0) == 0 && slope(float64(ln.orient.u), float64(ln.orient.v)) == 0
	ln.slope = slope(0, 0)
	ln.layOut(slope)
	ln.ownRow(g, ln.measure(g, slope))
	ln.rowM, ln.rowR = ln.minDS*ln.cot, ln.minDS*ln.sin
	ln.rowH = ln.rowR / ln.cos
	return ln
}

// flatSlope is the drift of a lane, columns a row, that is taken for none: over
// 100,000 rows it stays below a ten-thousandth of a cell.
const flatSlope = 1e-9

// indexDirection returns the step in rows and columns that moves one metre
// along an azimuth.
func indexDirection(l dem.Local, azimuth geometry.Angle) (dr, dc float64) {
	return indexStep(&l, azimuth.Sin(), azimuth.Cos())
}

// indexStep is indexDirection for a ground vector east and north.
func indexStep(l *dem.Local, e, n float64) (dr, dc float64) {
	det := l.ColE*l.RowN - l.ColN*l.RowE
	return (l.ColE*n - l.ColN*e) / det, (e*l.RowN - n*l.RowE) / det
}

// layOut finds the lanes' columns at the lattice rows by following dv/du =
// slope(u, v) from the middle row with the classical Runge-Kutta method.
func (ln *lanes) layOut(slope func(u, v float64) float64) {
	ln.nu = (ln.orient.u-1)/laneStep + 2
	ln.mid = float64(ln.orient.u-1) / 2
	last := float64(laneStep * (ln.nu - 1))
	lo, hi := 0.0, float64(ln.orient.v-1)
	for _, v := range [2]float64{lo, hi} {
		for _, u := range [2]float64{0, last} {
			k := ln.trace(slope, u, v, ln.mid)
			lo, hi = math.Min(lo, k), math.Max(hi, k)
		}
	}
	ln.first = laneStep * (int(math.Floor(lo/laneStep)) - 1)
	ln.nk = (int(math.Ceil(hi))-ln.first)/laneStep + 3
	ln.v = make([]float64, ln.nu*ln.nk)
	middle := int(ln.mid) / laneStep
	for j := range ln.nk {
		k := float64(ln.first + laneStep*j)
		u, v := ln.mid, k
		for i := middle; i >= 0; i-- {
			to := float64(laneStep * i)
			v = ln.trace(slope, u, v, to)
			u, ln.v[i*ln.nk+j] = to, v
		}
		u, v = ln.mid, k
		for i := middle + 1; i < ln.nu; i++ {
			to := float64(laneStep * i)
			v = ln.trace(slope, u, v, to)
			u, ln.v[i*ln.nk+j] = to, v
		}
	}
}

// trace follows a range line from a marching position to another row.
func (ln *lanes) trace(slope func(u, v float64) float64, u, v, to float64) float64 {
	if ln.uniform {
		return v + float64(ln.slope*(to-u))
	}
	for math.Abs(to-u) > laneStep {
		step := math.Copysign(laneStep, to-u)
		v = follow(slope, u, v, step)
		u += step
	}
	return follow(slope, u, v, to-u)
}

// follow integrates dv/du = slope(u, v) over a distance in u, of laneStep rows at
// most. Four steps leave less than 1e-5 of a cell where cells are a kilometre, 1e-7
// where they are 100 m.
func follow(slope func(u, v float64) float64, u, v, distance float64) float64 {
	const steps = 4
	h := distance / steps
	for range steps {
		k1 := slope(u, v)
		k2 := slope(u+h/2, v+h/2*k1)
		k3 := slope(u+h/2, v+h/2*k2)
		k4 := slope(u+h, v+h*k3)
		u, v = u+h, v+h/6*(k1+2*k2+2*k3+k4)
	}
	return v
}

// measure fills the ground distances: zero on the wavefront through the
// centre of the DEM, from there along the middle row, and from the middle row
// along each lane, both by Simpson's rule on the local ground vectors. It returns
// the largest distance of one row.
func (ln *lanes) measure(g *dem.Grid, slope func(u, v float64) float64) (most float64) {
	ln.s = make([]float64, len(ln.v))
	ln.minDS = math.Inf(1)
	cu, cv := float64(ln.orient.u-1)/2, float64(ln.orient.v-1)/2
	// ds is the ground distance of one row along the lane, da the part along
	// the look direction of one column.
	ds := func(u, v float64) float64 {
		ue, un, ve, vn := ln.step(g, u, v)
		b := slope(u, v)
		d := math.Hypot(ue+b*ve, un+b*vn)
		ln.minDS, most = math.Min(ln.minDS, d), math.Max(most, d)
		return d
	}
	da := func(u, v float64) float64 {
		ue, un, ve, vn := ln.step(g, u, v)
		b := slope(u, v)
		e, n := ue+b*ve, un+b*vn
		return (e*ve + n*vn) / math.Hypot(e, n)
	}
	simpson := func(f func(t float64) float64, a, b float64) float64 {
		return (b - a) / 6 * (f(a) + 4*f((a+b)/2) + f(b))
	}
	node := func(j int) float64 { return ln.vAt(cu, float64(ln.first+laneStep*j)) }
	// along fills the distances of lane j at the rows i, i + dir and so on up to end,
	// from the middle row on.
	along := func(j, i, end, dir int, s float64) {
		u0, v0 := cu, node(j)
		d0 := ds(u0, v0)
		for ; i != end; i += dir {
			u1, v1 := float64(laneStep*i), ln.v[i*ln.nk+j]
			d1 := ds(u1, v1)
			s += (u1 - u0) / 6 * (d0 + 4*ds((u0+u1)/2, (v0+v1)/2) + d1)
			ln.s[i*ln.nk+j] = s
			u0, v0, d0 = u1, v1, d1
		}
	}
	mid := min(int(cu)/laneStep, ln.nu-2)
	from, prev := cv, 0.0
	// Walk the middle row outwards from the centre, node by node.
	j0 := 0
	for j0 < ln.nk-1 && node(j0) < cv {
		j0++
	}
	start := make([]float64, ln.nk)
	for j := j0; j < ln.nk; j++ {
		to := node(j)
		prev += simpson(func(v float64) float64 { return da(cu, v) }, from, to)
		start[j], from = prev, to
	}
	from, prev = cv, 0.0
	for j := j0 - 1; j >= 0; j-- {
		to := node(j)
		prev += simpson(func(v float64) float64 { return da(cu, v) }, from, to)
		start[j], from = prev, to
	}
	for j := range ln.nk {
		along(j, mid+1, ln.nu, 1, start[j])
		along(j, mid, -1, -1, start[j])
	}
	return most
}

// ownRow finds which part of a row ownGround is, where one takes at most a ground
// distance.
func (ln *lanes) ownRow(g *dem.Grid, most float64) {
	least := math.Inf(1)
	for _, row := range [3]float64{0, float64(g.Rows-1) / 2, float64(g.Rows - 1)} {
		for _, col := range [3]float64{0, float64(g.Cols-1) / 2, float64(g.Cols - 1)} {
			l := g.At(row, col)
			least = min(least, math.Hypot(l.ColE, l.ColN), math.Hypot(l.RowE, l.RowN))
		}
	}
	ln.own = min(ownGround*least/most, ownGround)
}

// vAt returns the column at which lane k, which may be fractional, crosses
// row u, which may be fractional.
func (ln *lanes) vAt(u, k float64) float64 {
	if ln.uniform {
		return k + float64(ln.slope*(u-ln.mid))
	}
	i := min(max(int(u)/laneStep, 0), ln.nu-2)
	j := min(max((int(math.Floor(k))-ln.first)/laneStep, 0), ln.nk-2)
	p := (u - float64(laneStep*i)) / laneStep
	q := (k - float64(ln.first+laneStep*j)) / laneStep
	return bilinear(ln.v[i*ln.nk+j:], ln.nk, p, q)
}

// bilinear mixes a[0], a[1], a[n], a[n+1] by the fractions p (rows) and q.
func bilinear(a []float64, n int, p, q float64) float64 {
	top := a[0] + float64(p*(a[n]-a[0]))
	end := a[1] + float64(p*(a[n+1]-a[1]))
	return top + float64(q*(end-top))
}

// locate returns the lattice cell (i, j) that holds a marching position, which
// may lie a step outside the DEM, and the place in it.
func (ln *lanes) locate(u, v float64) (i, j int, p, q float64) {
	i = min(max(int(math.Floor(u))/laneStep, 0), ln.nu-2)
	p = (u - float64(laneStep*i)) / laneStep
	a, b := ln.v[i*ln.nk:(i+1)*ln.nk], ln.v[(i+1)*ln.nk:(i+2)*ln.nk]
	at := func(j int) float64 { return a[j] + float64(p*(b[j]-a[j])) }
	// The node lanes are nearly equidistant: start from a guess.
	first, last := at(0), at(ln.nk-1)
	j = min(max(int((v-first)/(last-first)*float64(ln.nk-1)), 0), ln.nk-2)
	for j > 0 && at(j) > v {
		j--
	}
	for j < ln.nk-2 && at(j+1) <= v {
		j++
	}
	return i, j, p, (v - at(j)) / (at(j+1) - at(j))
}

// lane returns the fractional lane through a marching position.
func (ln *lanes) lane(u, v float64) float64 {
	if ln.uniform {
		return v - float64(ln.slope*(u-ln.mid))
	}
	_, j, _, q := ln.locate(u, v)
	return float64(ln.first+laneStep*j) + laneStep*q
}

// distance returns the ground distance at a marching position.
func (ln *lanes) distance(u, v float64) float64 {
	i, j, p, q := ln.locate(u, v)
	return bilinear(ln.s[i*ln.nk+j:], ln.nk, p, q)
}
