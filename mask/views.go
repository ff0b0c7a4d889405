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

// add sets v to a and a part of a difference.
func (v *view) add(a, d *view, t float64) {
	for i := range 3 {
		v.up[i], v.c[i], v.r[i] = a.up[i]+float64(t*d.up[i]), a.c[i]+float64(t*d.c[i]), a.r[i]+float64(t*d.r[i])
	}
	v.east, v.north, v.s = a.east+float64(t*d.east), a.north+float64(t*d.north), a.s+float64(t*d.s)
}

// nodeViews holds the views along one row, viewStep columns apart. They are
// computed at every viewStep-th row of the grid and at its last, and
// interpolated between; distances, which the lattice of the lanes bends
// elsewhere, are not.
type nodeViews struct {
	ln           *lanes
	grid         *dem.Grid
	col, n       int // column of the first, how many
	from, to     int // rows of the two below
	upper, lower []view
	d            []view // their difference
	row          []view // of the row where it stands
	withS        bool
}

// setUp prepares the views of a window.
func (v *nodeViews) setUp(ln *lanes, g *dem.Grid, w dem.Window, withS bool) {
	v.ln, v.grid, v.withS, v.from, v.to = ln, g, withS, -1, -1
	v.col = w.Col / viewStep * viewStep
	v.n = (w.Col+w.Cols-1)/viewStep + 2 - w.Col/viewStep
	v.upper, v.lower, v.d, v.row = resize(v.upper, v.n), resize(v.lower, v.n), resize(v.d, v.n), resize(v.row, v.n)
}

// stand fills the views of a row.
func (v *nodeViews) stand(row int) {
	from := row / viewStep * viewStep
	if from != v.from {
		v.between(from, min(from+viewStep, v.grid.Rows-1))
	}
	t := float64(row-from) / float64(max(v.to-from, 1))
	for i := range v.row {
		v.row[i].add(&v.upper[i], &v.d[i], t)
		if v.withS {
			v.row[i].s = v.ln.distance(v.ln.place(float64(row), float64(v.col+i*viewStep)))
		}
	}
}

// between computes the views of two rows.
func (v *nodeViews) between(from, to int) {
	compute := func(views []view, row int) {
		for i := range views {
			views[i] = v.ln.viewOf(v.grid, float64(row), float64(v.col+i*viewStep), false)
		}
	}
	if v.upper, v.lower = v.lower, v.upper; from != v.to {
		compute(v.upper, from)
	}
	compute(v.lower, to)
	v.from, v.to = from, to
	for i := range v.d {
		v.d[i] = v.lower[i].minus(&v.upper[i])
	}
}
