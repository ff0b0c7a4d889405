package mask

import (
	"bytes"
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// abreast is a platform abreast of one place of the ground at the height of
// reference: what leads from the ground to the antenna, metres, and the unit
// vector of travel, both east, north, up at the ground.
type abreast struct{ way, travel geometry.ENU }

func (a abreast) plus(b abreast, t float64) abreast {
	add := func(x, y geometry.ENU) geometry.ENU {
		return geometry.ENU{East: x.East + float64(t*y.East), North: x.North + float64(t*y.North), Up: x.Up + float64(t*y.Up)}
	}
	return abreast{add(a.way, b.way), add(a.travel, b.travel)}
}

// sights holds a platform abreast of the nodes of the grid's own lattice, three at
// least, where the places of the ground are exact; between them each component is a quadratic
// along rows and columns. Over 64 cells of 100 m, L = 6400 m, what is left of the
// way is below L^3 tan^2 / (9 sqrt 3 R^2) = 3 mm at 70 degrees latitude, where
// straight lines would be wrong by (L/2)^2 tan / (8 R) = 0.6 m.
type sights struct {
	rows, cols       int // nodes
	rowStep, colStep float64
	nodes            []abreast
	state            []nodeState
}

// nodeState says what holds at a node.
type nodeState uint8

const (
	nodeSeen    nodeState = 1 << iota // seen, the limits of the swath aside
	nodeAbreast                       // the track comes abreast of it
)

func newSights(g *dem.Grid, look geometry.Look, p geometry.Platform, datum float64) *sights {
	s := &sights{}
	s.rows, s.cols, s.rowStep, s.colStep = g.Nodes()
	if s.rows == 2 {
		s.rows, s.rowStep = 3, s.rowStep/2
	}
	if s.cols == 2 {
		s.cols, s.colStep = 3, s.colStep/2
	}
	s.nodes, s.state = make([]abreast, s.rows*s.cols), make([]nodeState, s.rows*s.cols)
	for i := range s.nodes {
		row, col := float64(i/s.cols)*s.rowStep, float64(i%s.cols)*s.colStep
		s.nodes[i], s.state[i] = abreastOf(g, p, row, col, datum, 0)
		if look.SectorFrom.Given() { // its limit may pass between nodes
			s.state[i] &^= nodeSeen
		}
	}
	return s
}

// abreastOf solves one position of the grid. The way is that of the height of
// reference, found at a height above it.
func abreastOf(g *dem.Grid, p geometry.Platform, row, col, datum, above float64) (a abreast, state nodeState) {
	l := g.At(row, col)
	at := geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: datum + above}
	ground := at.ECEF()
	t, ok := p.ZeroDoppler(ground)
	if ok {
		state |= nodeAbreast
	}
	if _, seen := p.View(at); seen == geometry.InView || seen == geometry.OutsideSwath || seen == geometry.OutsideRange {
		state |= nodeSeen
	}
	pos, vel := p.State(t)
	a.way, a.travel = at.ToENU(pos.Sub(ground)), at.ToENU(vel).Unit()
	a.way.Up += above
	return a, state
}

// patch is the part of a row between two nodes: quadratics in t, the columns from
// the left one in steps of the lattice.
type patch struct {
	a, b, c       abreast
	seen, abreast bool
	from          int        // node on the left
	per, dper     [4]float64 // perMetre at t = 0, and its change to t = 1
}

// weights returns the first of three nodes for a place between two of n, given in
// steps, and the weights of Lagrange's quadratic.
func weights(x float64, n int) (first int, w [3]float64) {
	first = min(int(x), n-3)
	t := x - float64(first)
	return first, [3]float64{(t - 1) * (t - 2) / 2, t * (2 - t), t * (t - 1) / 2}
}

// sightRow holds a platform abreast of a row of the grid, at columns of nodes.
type sightRow struct {
	first int // node
	nodes []abreast
	state []nodeState  // what holds at all nodes around
	per   [][4]float64 // perMetre, as nodeViews computed at some rows only
	from  int          // the row of the first of two of these
	pers  [2][][4]float64
}

// row prepares what the patches right of nodes j0 to j1 need in a row.
func (s *sights) row(r *sightRow, g *dem.Grid, row, j0, j1 int) {
	first := min(j0, s.cols-3)
	n := min(j1+3, s.cols) - first
	r.nodes, r.state, r.per = resize(r.nodes, n), resize(r.state, n), resize(r.per, n)
	i0, w := weights(float64(row)/s.rowStep, s.rows)
	for q := range n {
		var node abreast
		state := nodeSeen | nodeAbreast
		for k := range 3 {
			i := (i0+k)*s.cols + first + q
			node = node.plus(s.nodes[i], w[k])
			state &= s.state[i]
		}
		r.nodes[q], r.state[q] = node, state
	}
	from := row / viewStep * viewStep
	to := min(from+viewStep, g.Rows-1)
	if from != r.from || first != r.first || n != len(r.pers[0]) {
		for k, row := range [2]int{from, to} {
			r.pers[k] = resize(r.pers[k], n)
			for q := range n {
				r.pers[k][q] = perMetre(g.At(float64(row), float64(first+q)*s.colStep))
			}
		}
	}
	r.first, r.from = first, from
	t := float64(row-from) / float64(max(to-from, 1))
	for q := range n {
		for i, x := range r.pers[0][q] {
			r.per[q][i] = x + float64(t*(r.pers[1][q][i]-x))
		}
	}
}

// left returns the node on the left of a column, the last one but one at most.
func (s *sights) left(col int) int {
	i := int(float64(col) / s.colStep)
	if float64(col) < float64(i)*s.colStep { // the quotient was rounded
		i--
	} else if float64(col) >= float64(i+1)*s.colStep {
		i++
	}
	return min(i, s.cols-2)
}

// patch prepares the columns right of node j.
func (s *sights) patch(r *sightRow, j int) (p patch) {
	q := min(j, s.cols-3) - r.first
	state := r.state[q] & r.state[q+1] & r.state[q+2]
	p.from, p.seen, p.abreast = j, state&nodeSeen != 0, state&nodeAbreast != 0
	j -= r.first
	x, y, z := &r.nodes[q], &r.nodes[q+1], &r.nodes[q+2]
	p.a.way, p.b.way, p.c.way = quadratics(&x.way, &y.way, &z.way, j > q)
	p.a.travel, p.b.travel, p.c.travel = quadratics(&x.travel, &y.travel, &z.travel, j > q)
	p.per = r.per[j]
	for i := range p.per {
		p.dper[i] = r.per[j+1][i] - p.per[i]
	}
	return p
}

// quadratics returns the coefficients of the quadratics through three nodes, a + b t
// + c t^2 with t = 0 at the first of them, or at the second when that is asked.
func quadratics(x, y, z *geometry.ENU, second bool) (a, b, c geometry.ENU) {
	one := func(x, y, z float64) (a, b, c float64) {
		c = 0.5 * (x - float64(2*y) + z)
		a, b = x, y-x-c
		if second {
			a, b = a+b+c, b+float64(2*c)
		}
		return a, b, c
	}
	a.East, b.East, c.East = one(x.East, y.East, z.East)
	a.North, b.North, c.North = one(x.North, y.North, z.North)
	a.Up, b.Up, c.Up = one(x.Up, y.Up, z.Up)
	return a, b, c
}

// perMetre returns the columns and rows of a metre east and of one north.
func perMetre(l dem.Local) [4]float64 {
	det := l.ColE*l.RowN - l.ColN*l.RowE
	return [4]float64{l.RowN / det, -l.ColN / det, -l.RowE / det, l.ColE / det}
}

// at returns the platform abreast of the ground at t and a height above that of
// reference. A higher point is met a little later on the track, by the part of
// its height that lies along it.
func (p *patch) at(t, above float64) (way, travel geometry.ENU) {
	quadratic := func(a, b, c float64) float64 { return a + float64(t*(b+float64(t*c))) }
	travel = geometry.ENU{
		East:  quadratic(p.a.travel.East, p.b.travel.East, p.c.travel.East),
		North: quadratic(p.a.travel.North, p.b.travel.North, p.c.travel.North),
		Up:    quadratic(p.a.travel.Up, p.b.travel.Up, p.c.travel.Up),
	}
	later := float64(above * travel.Up)
	way = geometry.ENU{
		East:  quadratic(p.a.way.East, p.b.way.East, p.c.way.East) + float64(later*travel.East),
		North: quadratic(p.a.way.North, p.b.way.North, p.c.way.North) + float64(later*travel.North),
		Up:    quadratic(p.a.way.Up, p.b.way.Up, p.c.way.Up) - above + float64(later*travel.Up),
	}
	return way, travel
}

// seeAbreast is see for a platform, for row r of the sheet. It also marks the
// cells that the look does not see.
func (w *worker) seeAbreast(ln *lanes, look *geometry.Look, r int) {
	n, row, col := w.sheet.w.Cols, w.sheet.w.Row+r, w.sheet.w.Col
	s := ln.sights
	first := s.left(col)
	s.row(&w.sights, w.grid, row, first, s.left(col+n-1))
	c := sightCells{worker: w, ln: ln, swath: swathOf(look), row: row, col: col, z: w.sheet.heights(r)}
	for i, j := first, 0; j < n; i++ {
		end := n
		if i < s.cols-2 {
			end = min(n, int(math.Ceil(float64(i+1)*s.colStep))-col)
		}
		c.patch = s.patch(&w.sights, i)
		c.see(j, end)
		j = end
	}
}

// sightCells are the cells of a row between two nodes.
type sightCells struct {
	*worker
	ln       *lanes
	row, col int // of the grid, of the first column of the sheet
	z        []float32
	patch
	swath
}

// turnAsk marks a cell of which the vectors leave the answer open.
const turnAsk = 0x80

// see fills the turns of the columns [from, to) of the sheet.
func (c *sightCells) see(from, to int) {
	if !vectors || !c.seen || !c.abreast || to-from < 4 {
		for j := from; j < to; j++ {
			c.seeCell(j)
		}
		return
	}
	clear(c.unseen[from:to])
	for j := from; j < to; j += 4 {
		sightVector(c, min(j, to-4))
	}
	for {
		j := bytes.IndexByte(c.turns[from:to], turnAsk)
		if j < 0 {
			return
		}
		from += j
		c.seeCell(from)
		from++
	}
}

// leanMost is the square of how much a range plane may lean, times the square
// of a facet's normal, up to which foreshortening is the second component of
// the facet over that of level ground to within 4 %: with l the lean and n the
// normal, the divisor that is left out is between 1 - l n and 1 + l n and a part of
// 10^-3, and l n is at most 0.0316. sureShare is a little more.
const (
	leanMost  = 1e-3
	sureShare = 0.06
)

// seeCell fills the turns of one cell, and its facet and view when they are
// wanted.
func (c *sightCells) seeCell(j int) {
	s, col, h := c.ln.sights, c.col+j, float64(c.z[j])
	if h != h {
		c.turns[j], c.unseen[j], c.gaps = 0, true, true
		return
	}
	t := float64(col)/s.colStep - float64(c.from)
	way, travel := c.at(t, h-c.ln.datum)
	if !c.abreast {
		a, _ := abreastOf(c.grid, c.ln.platform, float64(c.row), float64(col), c.ln.datum, h-c.ln.datum)
		way, travel = a.way, a.travel
		way.Up -= h - c.ln.datum
	}
	if c.upright { // a tripod turns; its range planes are upright
		travel = geometry.ENU{East: way.North, North: -way.East}
	}
	r2 := float64(way.East*way.East) + float64(way.North*way.North) + float64(way.Up*way.Up)
	c.unseen[j] = (!c.seen || c.close(way.Up, r2)) && !c.asked(c.ln, c.row, col, h) || c.outside(way.Up, r2)
	c.gaps = c.gaps || c.unseen[j]
	per := func(i int) float64 { return c.per[i] + float64(t*c.dper[i]) }
	zc, zr := float64(c.zc[j]), float64(c.zr[j])
	gE := float64(per(0)*zc) + float64(per(1)*zr)
	gN := float64(per(2)*zc) + float64(per(3)*zr)
	// As geometry.SightFrom and Facet, but for the lengths of the vectors.
	above := geometry.ENU{
		East:  float64(travel.North*way.Up) - float64(travel.Up*way.North),
		North: float64(travel.Up*way.East) - float64(travel.East*way.Up),
		Up:    float64(travel.East*way.North) - float64(travel.North*way.East),
	}
	if above.Up < 0 {
		above = geometry.ENU{East: -above.East, North: -above.North, Up: -above.Up}
	}
	turn := uint8(0)
	if way.Up-float64(gE*way.East)-float64(gN*way.North) <= 0 {
		turn |= turnShadow
	}
	gain := above.Up - float64(gE*above.East) - float64(gN*above.North)
	if gain <= 0 {
		turn |= turnLayover
	}
	limit := c.job.Options.CompressedBelow
	level := float64(limit * above.Up)
	lean := float64(travel.Up*travel.Up) * (1 + float64(gE*gE) + float64(gN*gN))
	maybe := !(gain > float64(level*(1+sureShare))) && !(gain < float64(level*(1-sureShare))) || lean > leanMost || !(limit > 0)
	if gain < level && !maybe {
		turn |= turnCompressed
	}
	if maybe || c.wantFacets {
		r := math.Sqrt(r2)
		los := geometry.ENU{East: way.East / r, North: way.North / r, Up: way.Up / r}
		sight := geometry.SightFrom(los, travel)
		f := sight.Facet(gE, gN)
		if maybe && sight.Foreshortening(f) < limit {
			turn |= turnCompressed
		}
		if c.wantFacets {
			c.facets.set(j, f, los.Up, sight.Above.Up, sight.Across.Up)
		}
		if c.wantViews {
			c.facets.setView(j, los.East, los.North, r)
		}
	}
	c.turns[j] = turn
}

// asked reports whether the platform sees a cell.
func (w *worker) asked(ln *lanes, row, col int, h float64) bool {
	l := w.grid.At(float64(row), float64(col))
	_, seen := ln.platform.View(geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: h})
	return seen == geometry.InView
}

// swath holds the limits that can be told from a cell's own incidence and slant
// range: cosines and squares of ranges, infinite where none was given.
type swath struct {
	most, least         float64 // cosines of the near and far limits
	nearest, farthest   float64
	bounded, horizontal bool
	upright             bool
}

func swathOf(look *geometry.Look) swath {
	s := swath{most: math.Inf(1), least: math.Inf(-1), nearest: math.Inf(-1), farthest: math.Inf(1)}
	if look.NearIncidence.Given() {
		s.most, s.bounded = look.NearIncidence.Cos(), true
	}
	if look.FarIncidence.Given() {
		s.least, s.bounded = look.FarIncidence.Cos(), true
	}
	if look.MinRange == look.MinRange {
		s.nearest, s.bounded = look.MinRange*look.MinRange, true
	}
	if look.MaxRange == look.MaxRange {
		s.farthest, s.bounded = look.MaxRange*look.MaxRange, true
	}
	s.horizontal = look.Kind == geometry.Orbit || look.Kind == geometry.Ephemeris
	s.upright = look.Kind == geometry.Tripod
	return s
}

// closeTo is how near to a limit, as a cosine or a part of the range, a cell is
// asked for on its own.
const closeTo = 1e-5

// close reports whether a cell lies next to a limit or the horizon, from the way
// up to the antenna and the square of the slant range.
func (s *swath) close(up, r2 float64) bool {
	if s.horizontal && up*up < closeTo*closeTo*r2 {
		return true
	}
	if !s.bounded {
		return false
	}
	r := math.Sqrt(r2)
	cos := up / r
	return math.Abs(cos-s.most) < closeTo || math.Abs(cos-s.least) < closeTo ||
		math.Abs(r2-s.nearest) < closeTo*r2 || math.Abs(r2-s.farthest) < closeTo*r2
}

// outside reports whether a cell that is not next to a limit lies outside one.
func (s *swath) outside(up, r2 float64) bool {
	if s.horizontal && up < -closeTo*math.Sqrt(r2) {
		return true
	}
	if !s.bounded || s.close(up, r2) {
		return false
	}
	cos := up / math.Sqrt(r2)
	return cos > s.most || cos < s.least || r2 < s.nearest || r2 > s.farthest
}

// extended returns a platform whose track reaches as far past the DEM as its lanes
// are laid out: a flight line is carried on along its geodesic, at the height that
// p resolved.
func extended(g *dem.Grid, look geometry.Look, p geometry.Platform) (geometry.Platform, error) {
	if look.Kind != geometry.Flight {
		return p, nil
	}
	at := func(row, col float64) geometry.Place {
		l := g.At(row, col)
		return geometry.Place{Lon: l.Lon, Lat: l.Lat}
	}
	corner, opposite := at(0, 0), at(float64(g.Rows-1), float64(g.Cols-1))
	if reaches(p, corner) && reaches(p, opposite) &&
		reaches(p, at(0, float64(g.Cols-1))) && reaches(p, at(float64(g.Rows-1), 0)) {
		return p, nil
	}
	pos, _ := p.State(0)
	look.Height, look.HeightAboveGround = pos.Geodetic().Height, math.NaN()
	reach := 0.0
	for _, end := range []geometry.Place{opposite, look.Start, look.End} {
		if length, _, _, err := geometry.Inverse(corner, end); err == nil {
			reach = max(reach, 2*length)
		}
	}
	_, leave, arrive, err := geometry.Inverse(look.Start, look.End)
	if err != nil {
		return nil, err
	}
	look.Start, _ = geometry.Direct(look.Start, leave+180*geometry.Degree, reach)
	look.End, _ = geometry.Direct(look.End, arrive, reach)
	return geometry.NewPlatform(look, geometry.Site{})
}

// reaches reports whether the known track goes well past a place.
func reaches(p geometry.Platform, at geometry.Place) bool {
	const spare = 50e3 // metres along the line; the lanes spread some 64 cells past the DEM
	from, to := p.Span()
	t, ok := p.ZeroDoppler(geometry.Geodetic{Place: at}.ECEF())
	return ok && t > from+spare && t < to-spare
}
