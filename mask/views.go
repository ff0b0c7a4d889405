package mask

import (
	"foldshade/dem"
	"foldshade/geometry"
)

// viewStep is the number of columns between two places of a row at which the
// view is computed; between them it is interpolated. The places are anchored
// to the grid.
const viewStep = 32

// view is how the look sees the ground at one place: the components of the
// facet as linear functions of the differences of height, up + zc c + zr r in
// the order along, above, across; the line of sight; and the ground distance.
type view struct {
	up, c, r    [3]float64
	east, north float64
	s           float64
}

// viewOf computes the view at a grid position, with the ground distance when
// it is asked for.
func (ln *lanes) viewOf(g *dem.Grid, row, col float64, withS bool) view {
	l := g.At(row, col)
	e, n := ln.ahead(&l)
	sight := geometry.SightAlong(geometry.ENU{East: -ln.sin * e, North: -ln.sin * n, Up: ln.cos})
	det := l.ColE*l.RowN - l.ColN*l.RowE
	v := view{east: sight.Along.East, north: sight.Along.North}
	for i, a := range [3]geometry.ENU{sight.Along, sight.Above, sight.Across} {
		v.up[i] = a.Up
		v.c[i] = -(a.East*l.RowN - a.North*l.RowE) / det
		v.r[i] = -(a.North*l.ColE - a.East*l.ColN) / det
	}
	if withS {
		v.s = ln.distance(ln.place(row, col))
	}
	return v
}

// minus returns the difference of two views.
func (a *view) minus(b *view) (d view) {
	for i := range 3 {
		d.up[i], d.c[i], d.r[i] = a.up[i]-b.up[i], a.c[i]-b.c[i], a.r[i]-b.r[i]
	}
	d.east, d.north, d.s = a.east-b.east, a.north-b.north, a.s-b.s
	return d
}

// plus returns a and a part of a difference.
func (a *view) plus(d *view, t float64) (v view) {
	for i := range 3 {
		v.up[i], v.c[i], v.r[i] = a.up[i]+float64(t*d.up[i]), a.c[i]+float64(t*d.c[i]), a.r[i]+float64(t*d.r[i])
	}
	v.east, v.north, v.s = a.east+float64(t*d.east), a.north+float64(t*d.north), a.s+float64(t*d.s)
	return v
}

// nodeViews holds the views along one row, viewStep columns apart. They are
// computed at every viewStep-th row of the grid and at its last, and
// interpolated between; distances, which other rows of a lattice bend, are not.
type nodeViews struct {
	ln       *lanes
	grid     *dem.Grid
	first, n int // nodes
	row      int // row of upper
	upper, d []view
	withS    bool
}

// setUp prepares the views of a window.
func (v *nodeViews) setUp(ln *lanes, g *dem.Grid, w dem.Window, withS bool) {
	v.ln, v.grid, v.withS, v.row = ln, g, withS, -1
	v.first = w.Col / viewStep
	v.n = (w.Col+w.Cols-1)/viewStep + 2 - v.first
	v.upper, v.d = resize(v.upper, v.n), resize(v.d, v.n)
}

// at returns the view at node number block of a row.
func (v *nodeViews) at(row, block int) view {
	from := row / viewStep * viewStep
	to := min(from+viewStep, v.grid.Rows-1)
	if from != v.row {
		v.row = from
		for i := range v.n {
			col := float64((v.first + i) * viewStep)
			lower := v.ln.viewOf(v.grid, float64(to), col, false)
			v.upper[i] = v.ln.viewOf(v.grid, float64(from), col, false)
			v.d[i] = lower.minus(&v.upper[i])
		}
	}
	i := block - v.first
	x := v.upper[i].plus(&v.d[i], float64(row-from)/float64(max(to-from, 1)))
	if v.withS {
		x.s = v.ln.distance(v.ln.place(float64(row), float64(block*viewStep)))
	}
	return x
}
