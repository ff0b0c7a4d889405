package mask

import (
	"fmt"
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// fan is what the lanes of a tripod have beside those of a track: they leave
// the radar in all directions of a quarter of the compass.
type fan struct {
	u, v float64 // marching position of the radar
	last float64 // rows from the radar to the last row
	rows bool    // the quarter holds the diagonals
	pos  geometry.ECEF
}

// fanLanes lays out the range lines of a tripod: four fans, towards and away
// along rows and columns, each of straight lines that stand one column apart
// at its last row. Range planes are the vertical planes through the radar,
// whose traces on the map are straight to within the small arcs that a DEM of a
// tripod's range spans.
func fanLanes(g *dem.Grid, look geometry.Look, p geometry.Platform, lim dem.Range) (*lanes, error) {
	row, col, ok := g.Find(look.Position.Lon, look.Position.Lat)
	if !ok {
		return nil, fmt.Errorf("look %q: position lies outside the DEM", look.Name)
	}
	var fans []*lanes
	for _, transposed := range []bool{false, true} {
		for _, flip := range []bool{false, true} {
			ln := &lanes{lens: lens{datum: (lim.Min + lim.Max) / 2, scale: 1, sin: 1, cos: 1}, platform: p}
			ln.orient = newOrient(g, transposed, flip)
			pos, _ := p.State(0)
			u, v := ln.place(row, col)
			ln.fan = &fan{u: u, v: v, last: float64(ln.orient.u-1) - u, rows: !transposed, pos: pos}
			if ln.fan.last < 1 {
				continue // nothing lies on this side
			}
			tr := tracker{g: g, p: p, ln: ln, datum: ln.datum}
			tr.spread()
			fans = append(fans, ln)
		}
	}
	if len(fans) == 0 {
		return nil, fmt.Errorf("look %q: position leaves no cell of the DEM to look at", look.Name)
	}
	fans[0].more = fans[1:]
	fans[0].sights = newSights(g, look, p, fans[0].datum)
	return fans[0], nil
}

// firstRow returns the first row that the lanes march: the row after the radar.
func (ln *lanes) firstRow() int {
	if ln.fan == nil {
		return 0
	}
	return int(math.Floor(ln.fan.u)) + 1
}

// clip brings the columns [va, vb) of row u within the fan. The diagonals
// belong to the fans that march along rows.
func (q *fan) clip(u, va, vb int) (int, int) {
	d := float64(u) - q.u
	if q.rows {
		return max(va, int(math.Ceil(q.v-d))), min(vb, int(math.Floor(q.v+d))+1)
	}
	return max(va, int(math.Floor(q.v-d))+1), min(vb, int(math.Ceil(q.v+d)))
}

// spread lays out the lanes of a fan, v = radar's v + (u - radar's u) k / K with
// K lanes for a slope of one, which is bilinear in row and lane.
func (tr *tracker) spread() {
	ln, q := tr.ln, tr.ln.fan
	ln.nu = (ln.orient.u-1)/laneStep + 2
	ln.mid = float64(ln.orient.u-1) / 2
	most := math.Ceil(q.last)
	ln.first = laneStep * (int(math.Floor(-most/laneStep)) - 1)
	ln.nk = (int(most)-ln.first)/laneStep + 3
	n := ln.nu * ln.nk
	ln.v, ln.s, ln.places = make([]float64, n), make([]float64, n), make([]place, n)
	home := q.pos.Geodetic()
	up := home.FromENU(geometry.ENU{Up: 1})
	for j := range ln.nk {
		slope := float64(ln.first+laneStep*j) / most
		end := tr.point(ln.cell(q.u+q.last, q.v+q.last*slope)).ECEF().Sub(q.pos)
		level := end.Sub(up.Scale(end.Dot(up)))
		plane := rangePlane{q.pos, level.Scale(1 / level.Norm()), up}
		for i := range ln.nu {
			u := float64(laneStep * i)
			v := q.v + (u-q.u)*slope
			ln.v[i*ln.nk+j] = v
			ln.places[i*ln.nk+j] = plane.place(tr.point(ln.cell(u, v)))
		}
		tr.measure(j)
	}
	// Everything between radar and cell may matter, and everything at its range.
	ln.cotMost, ln.tanMost = 1e9, 1e9
	i, j, a, b := ln.locate(q.u+q.last/2, q.v)
	mid := ln.placeAt(i, j, a, b)
	ln.scale = mid.x * mid.x / (mid.ny*mid.x - mid.nx*mid.y)
	ln.rowM, ln.rowR = ln.minDS, ln.minDS
	ln.ownRow(tr.g, tr.maxDS)
}

// placeAt interpolates the place in a cell of the lattice.
func (ln *lanes) placeAt(i, j int, p, q float64) place {
	n := i*ln.nk + j
	a := ln.places[n].plus(ln.places[n+ln.nk].minus(ln.places[n]), p)
	b := ln.places[n+1].plus(ln.places[n+1+ln.nk].minus(ln.places[n+1]), p)
	return a.plus(b.minus(a), q)
}

// levelShare is the least cosine of the incidence by which ranges are turned
// into heights: ground at the height of the antenna hardly changes its range
// when it rises.
const levelShare = 0.05

// steepness returns by how much a metre of height of a line counts in slant
// range at a place of height h and slant range r, the same for every use of the
// line. Ground above the antenna moves away from it when it rises; the lines turn
// with it. The normal of the ground is taken to lie in the range plane.
func (l *lens) steepness(p *place, h, r float64) float64 {
	h -= l.datum
	x, y := p.x+float64(h*p.nx), p.y+float64(h*p.ny)
	if cos := math.Abs(float64(x*p.nx)+float64(y*p.ny)) / r; cos > levelShare {
		return cos
	}
	return levelShare
}

// laneRange returns the slant range of a line at lane k of row u of a fan.
func (q *quickWalk) laneRange(u, k int, line float32) float64 {
	ln := q.f.ln
	lane := float64(q.p.k0 + k)
	v := ln.vAt(float64(u), lane)
	if v < 0 || v > float64(ln.orient.v-1) {
		return nan
	}
	h := q.f.height(u, v)
	i := min(u/laneStep, ln.nu-2)
	p := ln.placeAt(i, q.p.j, float64(u-laneStep*i)/laneStep, (lane-float64(q.p.k0+1))/laneStep)
	_, r := ln.view(&p, h)
	return r - (float64(line)-h)*ln.steepness(&p, h, r)
}

// fanShare is the part of a row by which the limits are stricter than those at the
// lanes at the edges of the strip, since there is ground between them.
const fanShare = 1e-3

// fanBounds are what the bounds of a row take from the cell of the lattice, by
// lane at its edges and, of two, for the lowest and the highest ground: numbers of
// its first row and by how much they change in a row.
type fanBounds struct {
	turn       [2][2]float64 // X' Y - Y' X of lens.view, the same all along
	gain, more [2][2]float64 // X X' + Y Y'
	span, wide [2]float64    // what a metre of height adds to the look angle, times X^2
	per        float64       // one over the most slant range for a metre of height
	spare      float64
	drift      [2]float32
}

// boundFan finds them for the cell of the lattice at row i.
func (p *strip) boundFan(i int) (b fanBounds) {
	ln, lim := p.f.ln, &p.f.lim
	most, ds := 0.0, 0.0
	for e := range 2 {
		n := i*ln.nk + p.j + e
		m := n + ln.nk
		first, last := ln.places[n], ln.places[m]
		b.drift[e] = float32((ln.v[m] - ln.v[n]) * (1. / laneStep))
		b.span[e] = first.ny*first.x - first.nx*first.y
		b.wide[e] = (last.ny*last.x - last.nx*last.y - b.span[e]) * (1. / laneStep)
		ds = max(ds, (last.x-first.x)*(1./laneStep))
		for k, h := range [2]float64{lim.low - ln.datum, lim.high - ln.datum} {
			x, y := first.x+h*first.nx, first.y+h*first.ny
			x1, y1 := last.x+h*last.nx, last.y+h*last.ny
			dx, dy := (x1-x)*(1./laneStep), (y1-y)*(1./laneStep)
			b.turn[e][k] = dx*y - dy*x
			b.gain[e][k], b.more[e][k] = x*dx+y*dy, dx*dx+dy*dy
			most = max(most, math.Abs(x*first.nx+y*first.ny), math.Abs(x1*last.nx+y1*last.ny))
		}
	}
	b.per, b.spare = gradeShare/most, fanShare*ds
	return b
}

// gradeFan is gradeTrack for a fan. It returns the bounds of the row at which the
// strip stands: those of its outermost lanes with cells between them, at that row
// and the next one, and at the lowest and the highest ground; ok is false next to
// the radar.
func (p *strip) gradeFan(u int) (g seenGrade, ok bool) {
	ln, lim, b := p.f.ln, &p.f.lim, &p.fan
	i := min(u/laneStep, ln.nu-2)
	if i != p.graded { // the same for all rows of the lattice's cell
		*b, p.graded = p.boundFan(i), i
	}
	t := float64(u - laneStep*i)
	rise := math.Inf(1)
	var least, most [2]float64 // rises at which the look angle stays the same
	for e := range 2 {
		span := b.span[e] + t*b.wide[e]
		if !(span > 0 && b.wide[e] > 0) {
			return g, false
		}
		here, next := 1/span, 1/(span+b.wide[e])
		for k, turn := range b.turn[e] {
			x, y := turn*here, turn*next
			if e == 0 {
				least[k], most[k] = min(x, y), max(x, y)
			}
			least[k], most[k] = min(least[k], x, y), max(most[k], x, y)
		}
		rise = min(rise, b.gain[e][0]+t*b.more[e][0], b.gain[e][1]+t*b.more[e][1])
	}
	spare := b.spare + (1-gradeShare)*max(math.Abs(least[0]), math.Abs(most[0]), math.Abs(least[1]), math.Abs(most[1]))
	per := max(most[1]-most[0], 0) / max(lim.high-lim.low, 1)
	g = seenGrade{rise: float32(rise * b.per), perHeight: float32(per), drift: b.drift}
	g.drop = -g.rise
	g.fall = float32(most[0] + spare - per*lim.low)
	g.dark = float32(min(least[0]-per*lim.low, least[1]-per*lim.high) - spare)
	// What a row is worth in height at equal slant range is not said: the lines of a
	// fan do not tell it.
	g.worthR, g.worthM, g.steep = float32(math.Inf(-1)), -float32(most[1]+spare), float32(math.Inf(1))
	return g, rise > 0
}

// narrow is the distance of lanes, in columns, below which their heights are
// picked from those of a few columns.
const narrow = 0.9
