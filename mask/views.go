package mask

import (
	"math"

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

// viewOf computes the view at a grid position.
func (ln *lanes) viewOf(g *dem.Grid, row, col float64, cross *crossing) view {
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
	v.s = ln.distance(row, col, cross)
	return v
}

// distance returns the ground distance at a grid position.
func (ln *lanes) distance(row, col float64, c *crossing) float64 {
	u, v := row, col
	if ln.transposed {
		u, v = v, u
	}
	if ln.flip {
		u = float64(ln.orient.u-1) - u
	}
	// Rows of the marching frame may run along the columns of the grid, and
	// places one step beyond the grid are asked for: take whole rows.
	i := min(max(int(math.Floor(u)), 0), ln.orient.u-2)
	ln.cross(i, c)
	a := ln.sOf(c, ln.laneOf(c, v))
	ln.cross(i+1, c)
	b := ln.sOf(c, ln.laneOf(c, v))
	return a + (u-float64(i))*(b-a)
}

// between interpolates two views.
func between(a, b *view, t float64) view {
	m := func(x, y float64) float64 { return x + float64(t*(y-x)) }
	var v view
	for i := range 3 {
		v.up[i], v.c[i], v.r[i] = m(a.up[i], b.up[i]), m(a.c[i], b.c[i]), m(a.r[i], b.r[i])
	}
	v.east, v.north, v.s = m(a.east, b.east), m(a.north, b.north), m(a.s, b.s)
	return v
}

// facet returns the facet of a cell from its differences of height.
func (v *view) facet(zc, zr float64) geometry.Facet {
	return geometry.Facet{
		Along:  v.up[0] + float64(zc*v.c[0]) + float64(zr*v.r[0]),
		Above:  v.up[1] + float64(zc*v.c[1]) + float64(zr*v.r[1]),
		Across: v.up[2] + float64(zc*v.c[2]) + float64(zr*v.r[2]),
	}
}

// sight returns the sight as far as the quantities of a facet need it: the up
// components.
func (v *view) sight() geometry.Sight {
	return geometry.Sight{
		Along:  geometry.ENU{Up: v.up[0]},
		Above:  geometry.ENU{Up: v.up[1]},
		Across: geometry.ENU{Up: v.up[2]},
	}
}
