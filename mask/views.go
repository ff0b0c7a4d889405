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

// between interpolates the line of sight and the distance of two views.
func between(a, b *view, t float64) view {
	m := func(x, y float64) float64 { return x + float64(t*(y-x)) }
	return view{east: m(a.east, b.east), north: m(a.north, b.north), s: m(a.s, b.s)}
}
