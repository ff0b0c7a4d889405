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
// All three are tangents from a point to a convex hull, which a march along the
// lanes keeps at a constant cost a sample. The lanes say where the tangents
// touch; the slopes are then taken on the cell's own range line.

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

// guideShare is the part of the bounds that a slope of a lane must pass for the
// cell to look there on its own range line, where it may be steeper.
const guideShare = 0.7

// windower finds the slopes of the cells of one rectangle for one azimuth. The
// slices are row-major over the rectangle, NaN where there is no height; no
// slope is below its bound. Those ending in U count also what may stand where
// the DEM shows nothing.
type windower struct {
	shade, shadeU []float32
	fold, foldU   []float32

	minShade, minFold float64 // the bounds: cot and tan of the limiting incidences
	win               dem.Window
	field             field
	strip             windowStrip
}

// windowLaneCount is the number of lanes of a windowStrip.
const windowLaneCount = laneStep + 1

// windowStripe is the most columns that are held at once. Stripes along the
// lanes cost nothing: the halo lies at their ends.
const windowStripe = 256

// run fills the slices for a window of the grid. The results do not depend on
// the window: heights and distances are rounded so that hulls are exact, slopes
// at the bound are the bound, and ground that is out of reach is below it.
func (x *windower) run(src dem.Source, ln *lanes, lim limits, from, to geometry.Angle, win dem.Window) error {
	n := win.Rows * win.Cols
	x.win = win
	x.minShade, x.minFold = 1/to.Tan(), from.Tan()
	for _, a := range []*[]float32{&x.shade, &x.shadeU, &x.fold, &x.foldU} {
		*a = resize(*a, n)
	}
	x.strip.round(ln, lim)
	u0, u1, v0, v1 := ln.window(win)
	for v := v0; v < v1; v += windowStripe {
		x.field.setUp(ln, lim, u0, u1, v, min(v+windowStripe, v1))
		if err := x.field.load(src); err != nil {
			return err
		}
		for j := range x.field.strips {
			if x.strip.setUp(&x.field, x.field.first+j) {
				x.cells()
			}
		}
	}
	return nil
}

// standing says where a strip's lanes cross a row: lane k of the strip is at
// column v + dv k and ground distance s + ds k. end is where the next strip
// begins, to the last bit.
type standing struct{ v, end, dv, s, ds float64 }

// mark is a sample of a lane: ground distance and height, rounded. The height is
// NaN where there is none, and halfway between rows where it does not matter.
type mark struct{ s, h float64 }

// windowLane is one lane of a strip. Samples stand two a row: the one of row u at
// 2 (u - ua), and the next one halfway to row u + 1. Between its corners the
// surface may bulge, most where a line runs along a diagonal, and the rows alone
// would not show it.
type windowLane struct {
	ground []mark
	// The hulls of what was passed before each sample, itself included, as the
	// next sample on the hull; -1 at its end: upper and lower on the way away
	// from the radar, upper on the way back.
	shade, nearer, farther []int32
	// By row, the most that ground from ownRows on rises above a line at the
	// least slope that shows where to look.
	topShade, topNearer, topFarther []float64
	// Ground distance to the nearest unknown terrain towards the radar and away
	// from it, infinite where there is none, by row.
	before, behind []float32
}

// windowStrip is a bundle of neighbouring lanes, see strip, of which two are
// marched at a time.
type windowStrip struct {
	f               *field
	j, k0           int
	u0, u1, ua, ub  int
	rows            int
	at              []standing    // by row
	lanes           [2]windowLane // lane k is at k % 2
	neg             []mark        // of one lane: heights upside down
	gaps            []bool        // of one lane: the surface is not known between a row and the next
	roundS, roundH  float64
	anyUnknown      bool
	last            float64 // column of the DEM
	nearEnd, farEnd bool    // the strip reaches the DEM's first, last row
}

// The bits that differences of height and of distance may take, so that their
// products are exact in a float64.
const (
	heightBits   = 24
	distanceBits = 29
)

// round chooses the steps to which heights and distances are rounded: powers of
// two, the same for all tiles. For 2000 m of relief that is 0.1 mm.
func (p *windowStrip) round(ln *lanes, lim limits) {
	step := func(extent float64, bits int) float64 {
		return math.Exp2(math.Ceil(math.Log2(math.Max(extent, 1))) - float64(bits))
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, s := range ln.s {
		lo, hi = math.Min(lo, s), math.Max(hi, s)
	}
	// Adding and taking away 1.5 * 2^52 steps rounds to whole steps.
	const magic = 3 << 51
	p.roundS = magic * step(hi-lo, distanceBits)
	p.roundH = magic * step(lim.high-lim.low, heightBits)
}

func (p *windowStrip) setUp(f *field, j int) bool {
	ln := f.ln
	p.f, p.j, p.k0 = f, j, ln.first+laneStep*j
	p.u0, p.u1 = f.u1, f.u0
	for u := f.u0; u < f.u1; u++ {
		st := p.stand(u)
		if va, vb := p.columns(&st); va < vb {
			p.u0, p.u1 = min(p.u0, u), u+1
		}
	}
	if p.u0 >= p.u1 {
		return false
	}
	p.ua, p.ub = max(p.u0-f.near, f.ua), min(p.u1+f.far, f.ub)
	p.rows = p.ub - p.ua
	p.at = resize(p.at, p.rows)
	for i := range p.at {
		p.at[i] = p.stand(p.ua + i)
	}
	p.neg, p.gaps = resize(p.neg, 2*p.rows), resize(p.gaps, p.rows)
	for k := range p.lanes {
		p.lanes[k].resize(p.rows)
	}
	p.last = float64(ln.orient.v - 1)
	p.nearEnd, p.farEnd = p.ua == 0, p.ub == ln.orient.u
	p.anyUnknown = !f.sure
	return true
}

func (l *windowLane) resize(rows int) {
	l.ground = resize(l.ground, 2*rows)
	for _, a := range [3]*[]int32{&l.shade, &l.nearer, &l.farther} {
		*a = resize(*a, 2*rows)
	}
	for _, a := range [3]*[]float64{&l.topShade, &l.topNearer, &l.topFarther} {
		*a = resize(*a, rows)
	}
	l.before, l.behind = resize(l.before, rows), resize(l.behind, rows)
}

// stand takes columns and distances of the lanes at row u from the lattice.
func (p *windowStrip) stand(u int) standing {
	ln := p.f.ln
	i := min(u/laneStep, ln.nu-2)
	q := float64(u-laneStep*i) / laneStep
	n := i*ln.nk + p.j
	at := func(a []float64, n int) float64 { return a[n] + float64(q*(a[n+ln.nk]-a[n])) }
	st := standing{v: ln.vAt(float64(u), float64(p.k0)), end: ln.vAt(float64(u), float64(p.k0+laneStep)), dv: 1}
	if !ln.uniform {
		st.dv = (st.end - st.v) / laneStep
	}
	st.s = at(ln.s, n)
	st.ds = (at(ln.s, n+1) - st.s) / laneStep
	return st
}

// columns returns the columns [va, vb) of the field's cells between the strip's
// lanes.
func (p *windowStrip) columns(st *standing) (va, vb int) {
	return max(int(math.Ceil(st.v)), p.f.v0), min(int(math.Ceil(st.end)), p.f.v1)
}

// between returns those between lane k and the next.
func (p *windowStrip) between(st *standing, k int) (va, vb int) {
	from, to := st.v, st.end
	if k > 0 {
		from = st.v + float64(st.dv*float64(k))
	}
	if k < laneStep-1 {
		to = st.v + float64(st.dv*float64(k+1))
	}
	return max(int(math.Ceil(from)), p.f.v0), min(int(math.Ceil(to)), p.f.v1)
}

// march samples lane k and finds its hulls.
func (p *windowStrip) march(k int, shade, fold float64) {
	l := &p.lanes[k%2]
	p.sample(l.ground, float64(k))
	p.halfway(l.ground, float64(k))
	for i, x := range l.ground {
		p.neg[i] = mark{x.s, -x.h}
	}
	hull(l.ground, 1, l.shade)
	hull(p.neg, 1, l.nearer)
	hull(p.neg, -1, l.farther)
	crests(l.ground, 1, 1, shade, l.topShade)
	crests(l.ground, 1, -1, fold, l.topNearer)
	crests(l.ground, -1, 1, fold, l.topFarther)
	if p.anyUnknown {
		p.unknown(l, float64(k))
	}
}

// heights returns the stored heights of row ua + i and the column of the first.
func (p *windowStrip) heights(i int) (z []float32, at int) {
	f := p.f
	r := p.ua + i - f.ua
	return f.z[r*f.width:][:f.width], f.at[r]
}

// sample takes the heights and distances of a lane at the rows.
func (p *windowStrip) sample(g []mark, k float64) {
	for i := range p.at {
		st := &p.at[i]
		z, at := p.heights(i)
		g[2*i] = mark{
			(st.s + float64(st.ds*k) + p.roundS) - p.roundS,
			(lerp(z, st.v-float64(at)+float64(st.dv*k)) + p.roundH) - p.roundH,
		}
	}
}

// bulgeShare is the part of the ground distance of a row by which the surface
// halfway must leave the straight line to count. The lanes only show where to
// look, so a coarse measure does.
const bulgeShare = 0.03

// halfway takes the heights and distances of a lane between the rows, where the
// surface bulges.
func (p *windowStrip) halfway(g []mark, k float64) {
	g[len(g)-1].h = nan
	for i := range p.rows - 1 {
		a, b := &p.at[i], &p.at[i+1]
		h := nan
		va, vb := a.v+float64(a.dv*k), b.v+float64(b.dv*k)
		f, n := &g[2*i], &g[2*i+2]
		if va != vb { // else the surface is straight
			v := (va + vb) / 2
			c := math.Floor(v)
			za, ca := p.heights(i)
			zb, cb := p.heights(i + 1)
			h = (lerpAt(za, int(c)-ca, v-c) + lerpAt(zb, int(c)-cb, v-c)) / 2
			d, least := h-(f.h+n.h)/2, bulgeShare*(n.s-f.s)
			if !(d > least || d < -least) {
				h = nan
			}
		}
		g[2*i+1] = mark{((f.s+n.s)/2 + p.roundS) - p.roundS, (h + p.roundH) - p.roundH}
	}
}

// lerpAt is lerp for an index that is already parted.
func lerpAt(z []float32, i int, rest float64) float64 {
	a, b := float64(z[i]), float64(z[i+1])
	return a + float64(rest*(b-a))
}

// gap reports whether the surface along a lane, which may be fractional, is not
// known somewhere between row ua + i and the next. With an open edge all is
// known outside.
func (p *windowStrip) gap(i int, k float64) bool {
	za, ca := p.heights(i)
	zb, cb := p.heights(i + 1)
	va, vb := p.at[i].v+float64(p.at[i].dv*k), p.at[i+1].v+float64(p.at[i+1].dv*k)
	lo, hi := min(va, vb), max(va, vb)
	if lo < 0 || hi > p.last {
		if !p.f.lim.openEdge {
			return true
		}
		lo, hi = max(lo, 0), min(hi, p.last)
	}
	for c := int(math.Floor(lo)); c <= int(math.Ceil(hi)); c++ {
		if za[c-ca] != za[c-ca] || zb[c-cb] != zb[c-cb] {
			return true
		}
	}
	return false
}

// hull links every sample of a lane to the next one on the upper hull of what
// the march passed before it, at a constant cost a sample. Backward with heights
// upside down the hull is an upper one again, forward so a lower one. Products
// are exact: no sample is on the hull that does not belong there.
func hull(ground []mark, dir int, link []int32) {
	n := len(ground)
	link = link[:n]
	from, to := 0, n
	if dir < 0 {
		from, to = n-1, -1
	}
	last := int32(-1)
	for i := from; i != to; i += dir {
		g := ground[i]
		if g.h != g.h {
			continue
		}
		j := last
		last = int32(i)
		if j >= 0 {
			f := ground[j]
			for k := link[j]; k >= 0; k = link[j] {
				e := ground[k]
				if float64((f.h-e.h)*(g.s-f.s)) > float64((g.h-f.h)*(f.s-e.s)) {
					break
				}
				j, f = k, e
			}
		}
		link[i] = j
	}
}

// crests fills out, for every row of a lane, with the largest
//
//	sign h + dir least s
//
// of the samples from ownRows on, towards the radar for dir 1 and away from it
// for -1. A point with less of it sees ground at a slope above least.
func crests(ground []mark, dir int, sign, least float64, out []float64) {
	from, to := 0, len(out)
	if dir < 0 {
		from, to = len(out)-1, -1
	}
	top, tilt := math.Inf(-1), float64(dir)*least
	count := func(g mark) {
		if t := float64(sign*g.h) + float64(tilt*g.s); t > top {
			top = t
		}
	}
	for i := from; i != to; i += dir {
		if j := i - ownRows*dir; j >= 0 && j < len(out) {
			// The sample halfway to the row passed before, and the row itself.
			if l := 2*j - dir; l >= 0 && l < len(ground) {
				count(ground[l])
			}
			count(ground[2*j])
		}
		out[i] = top
	}
}

// touch returns the sample at which the tangent from a point over row ua + i of
// lane k, at height h, touches the hull of the lane's ground from ownRows on:
// the sample with the largest
//
//	sign (h[j] - h) / |s[j] - s|
//
// It returns -1 where that is not above least, as crests tells beforehand. Of
// samples at the same slope it is the nearest, so that it does not depend on
// ground out of reach.
func (l *windowLane) touch(link []int32, crests []float64, i, dir int, sign, h, least float64) int {
	ground := l.ground
	s0 := ground[2*i].s
	if !(crests[i] > float64(sign*h)-float64(float64(dir)*least*s0)) {
		return -1
	}
	n := len(ground)
	j := 2 * (i + ownRows*dir)
	for j >= 0 && j < n && ground[j].h != ground[j].h {
		j += dir
	}
	if j < 0 || j >= n {
		return -1
	}
	rise, away := sign*(ground[j].h-h), math.Abs(ground[j].s-s0)
	for m := link[j]; m >= 0; m = link[j] {
		g := &ground[m]
		r, a := sign*(g.h-h), math.Abs(g.s-s0)
		if float64(r*away) <= float64(rise*a) {
			break
		}
		j, rise, away = int(m), r, a
	}
	if rise <= least*away {
		return -1
	}
	return j
}

// unknown fills the distances of lane k to unknown terrain. Where there is some
// between two rows it reaches, at worst, the row itself.
func (p *windowStrip) unknown(l *windowLane, k float64) {
	for i := range p.rows - 1 {
		p.gaps[i] = p.gap(i, k)
	}
	walk := func(out []float32, from, to, dir, gap int, edge bool) {
		place := math.Inf(1)
		edge = edge && !p.f.lim.openEdge
		for i := from; i != to; i += dir {
			s := l.ground[2*i].s
			if i == from && edge || i != from && p.gaps[i+gap] {
				place = s
			}
			out[i] = float32(math.Abs(place - s))
		}
	}
	walk(l.before, 0, p.rows, 1, -1, p.nearEnd)
	walk(l.behind, p.rows-1, -1, -1, 0, p.farEnd)
}

// cells marches the strip and takes the slopes of its cells.
func (x *windower) cells() {
	p := &x.strip
	p.march(0, guideShare*x.minShade, guideShare*x.minFold)
	for k := range laneStep {
		p.march(k+1, guideShare*x.minShade, guideShare*x.minFold)
		for u := p.u0; u < p.u1; u++ {
			st := &p.at[u-p.ua]
			va, vb := p.between(st, k)
			if va >= vb {
				continue
			}
			row, col := p.f.ln.cell(float64(u), float64(va))
			at, stride := (int(row)-x.win.Row)*x.win.Cols+int(col)-x.win.Col, 1
			if p.f.ln.transposed {
				stride = x.win.Cols
			}
			for v := va; v < vb; v, at = v+1, at+stride {
				c := x.cell(u, v, k)
				x.shade[at], x.shadeU[at] = float32(c.shade), float32(c.shadeU)
				x.fold[at], x.foldU[at] = float32(c.fold), float32(c.foldU)
			}
		}
	}
}

// slopes are those of one cell.
type slopes struct{ shade, fold, shadeU, foldU float64 }

// cell finds the slopes of one cell between lanes k and k + 1: on its own range
// line the next row on both sides, and the places where the tangents of the lanes
// touch.
func (x *windower) cell(u, v, k int) slopes {
	p := &x.strip
	i := u - p.ua
	st := &p.at[i]
	own := ownLine{p: p, i: i, k: (float64(v) - st.v) / st.dv, v: v}
	own.s = st.s + float64(st.ds*own.k)
	own.h = float64(p.f.z[(u-p.f.ua)*p.f.width+v-p.f.at[u-p.f.ua]])
	if own.h != own.h {
		return slopes{nan, nan, nan, nan}
	}
	out := slopes{shade: x.minShade, fold: x.minFold}
	a, b := &p.lanes[k%2], &p.lanes[(k+1)%2]
	if float64(k) == own.k {
		b = a
	}
	if a.ground[2*i].h != a.ground[2*i].h || b.ground[2*i].h != b.ground[2*i].h {
		return x.walk(&own)
	}
	own.step(&out)
	own.beyond(&out)
	h := (own.h + p.roundH) - p.roundH
	shade, fold := guideShare*x.minShade, guideShare*x.minFold
	own.see(a.touch(a.shade, a.topShade, i, -1, 1, h, shade), b.touch(b.shade, b.topShade, i, -1, 1, h, shade), 1, &out.shade)
	own.see(a.touch(a.nearer, a.topNearer, i, -1, -1, h, fold), b.touch(b.nearer, b.topNearer, i, -1, -1, h, fold), -1, &out.fold)
	own.see(a.touch(a.farther, a.topFarther, i, 1, 1, h, fold), b.touch(b.farther, b.topFarther, i, 1, 1, h, fold), 1, &out.fold)
	out.shadeU, out.foldU = out.shade, out.fold
	if p.anyUnknown {
		x.worst(&out, own.h, float64(min(a.before[i], b.before[i])), float64(min(a.behind[i], b.behind[i])))
	}
	return out
}

// see counts the ground about two samples of the lanes, -1 for none.
func (o *ownLine) see(a, b int, sign float64, most *float64) {
	if a >= 0 {
		o.around(a, sign, most)
	}
	if b >= 0 && b != a {
		o.around(b, sign, most)
	}
}

// worst counts unknown terrain at distances towards the radar and away from it.
func (x *windower) worst(c *slopes, h, before, behind float64) {
	lim := &x.field.lim
	over := func(rise, distance float64, least *float64) {
		if distance == 0 {
			*least = math.Inf(1)
		} else if m := rise / distance; m > *least {
			*least = m
		}
	}
	over(lim.ceiling-h, before, &c.shadeU)
	over(h-lim.low, before, &c.foldU)
	over(lim.ceiling-h, behind, &c.foldU)
}

// ownLine is the range line through one cell.
type ownLine struct {
	p       *windowStrip
	i, v    int
	k, s, h float64
}

// step counts the ground up to the next row on both sides, from ownGround on.
// Between two rows the surface along the line is a parabola that starts in the
// cell, so the slopes to it are largest at one of the ends.
func (o *ownLine) step(out *slopes) {
	if d, b, ok := o.beside(-1); ok {
		near, end := b+ownGround*d, b+d
		ds := o.s - o.distance(o.i-1)
		if m := max(near, end) / ds; m > out.shade {
			out.shade = m
		}
		if m := -min(near, end) / ds; m > out.fold {
			out.fold = m
		}
	}
	if d, b, ok := o.beside(1); ok {
		if m := max(b+ownGround*d, b+d) / (o.distance(o.i+1) - o.s); m > out.fold {
			out.fold = m
		}
	}
}

// beside returns the surface between the cell and the next row in a direction:
// h + b t + d t^2, t from 0 to 1. ok is false where a height is missing.
func (o *ownLine) beside(dir int) (d, b float64, ok bool) {
	p := o.p
	r := o.i + dir
	if r < 0 || r >= p.rows {
		return 0, 0, false
	}
	f := p.f
	here, next := o.i+p.ua-f.ua, r+p.ua-f.ua
	n := next*f.width + o.v - f.at[next]
	q := float64(f.z[n])
	dx := p.at[r].v + float64(p.at[r].dv*o.k) - float64(o.v)
	b = q - o.h
	if dx != 0 {
		side := 1
		if dx < 0 {
			side, dx = -1, -dx
		}
		rise := float64(f.z[here*f.width+o.v-f.at[here]+side]) - o.h
		b += rise * dx
		d = (float64(f.z[n+side]) - q - rise) * dx
	}
	return d, b, b+d == b+d
}

func (o *ownLine) distance(row int) float64 { return o.p.at[row].s + float64(o.p.at[row].ds*o.k) }

// height returns the height and the distance of the line at a row.
func (o *ownLine) height(row int) (h, s float64) {
	p := o.p
	f := p.f
	st := &p.at[row]
	i := row + p.ua - f.ua
	return lerp(f.z[i*f.width:(i+1)*f.width], st.v+float64(st.dv*o.k)-float64(f.at[i])), st.s + float64(st.ds*o.k)
}

// ownRows is the number of rows on both sides of a cell that are looked at on its
// own range line throughout. Farther away the lanes beside it show where to look:
// there they see the ground under nearly the same angle.
const ownRows = 1

// beyond counts the rows from the second to ownRows on both sides.
func (o *ownLine) beyond(out *slopes) {
	for r := 2; r <= ownRows; r++ {
		if i := o.i - r; i >= 0 {
			h, s := o.height(i)
			m := (h - o.h) / (o.s - s)
			if m > out.shade {
				out.shade = m
			}
			if -m > out.fold {
				out.fold = -m
			}
		}
		if i := o.i + r; i < o.p.rows {
			h, s := o.height(i)
			if m := (h - o.h) / (s - o.s); m > out.fold {
				out.fold = m
			}
		}
	}
}

// around counts the slopes to the line's ground about a sample of a lane: most
// becomes the largest of sign (h - h0) / distance that is above it.
func (o *ownLine) around(sample int, sign float64, most *float64) {
	row := sample / 2
	if sample%2 == 1 {
		o.at(row, sign, most)
		o.at(row+1, sign, most)
		if row != o.i && row+1 != o.i {
			o.between(row, row+1, sign, most)
		}
		return
	}
	o.at(row, sign, most)
	for next := row - 1; next <= row+1; next += 2 {
		if next >= 0 && next < o.p.rows && next != o.i {
			o.between(row, next, sign, most)
		}
	}
}

func (o *ownLine) at(row int, sign float64, most *float64) {
	if row == o.i {
		return
	}
	h, s := o.height(row)
	if m := sign * (h - o.h) / math.Abs(s-o.s); m > *most {
		*most = m
	}
}

// between counts the slopes to the ground between two neighbouring rows. The
// surface is a parabola on each side of the column that the line crosses.
func (o *ownLine) between(row, next int, sign float64, most *float64) {
	p, f := o.p, o.p.f
	va, vb := p.at[row].v+float64(p.at[row].dv*o.k), p.at[next].v+float64(p.at[next].dv*o.k)
	if va == vb {
		return // straight
	}
	ca, cb := math.Floor(va), math.Floor(vb)
	i, j := row+p.ua-f.ua, next+p.ua-f.ua
	za, zb := f.z[i*f.width:], f.z[j*f.width:]
	sa := o.distance(row)
	ds := o.distance(next) - sa
	// On the bilinear surface of the cell from column c on: h = a + b t + d t^2.
	piece := func(c, t0, t1 float64) {
		k, l := int(c)-f.at[i], int(c)-f.at[j]
		p0, q0 := float64(za[k]), float64(zb[l])
		ep, eq := float64(za[k+1])-p0, float64(zb[l+1])-q0
		x, dx := va-c, vb-va
		a, b, d := p0+ep*x, q0-p0+ep*dx+(eq-ep)*x, (eq-ep)*dx
		count := func(t float64) {
			if m := sign * (a + t*(b+t*d) - o.h) / math.Abs(sa+t*ds-o.s); m > *most {
				*most = m
			}
		}
		count(t1)
		if sign*d >= 0 {
			return // no height above the ends
		}
		// The ground farthest above the steepest line so far; twice, since that
		// line is then steeper.
		away := math.Copysign(ds, ds*(sa-o.s)) // change of distance to the cell for t
		for range 2 {
			t := (sign**most*away - b) / (2 * d)
			if !(t > t0 && t < t1) {
				return
			}
			count(t)
		}
	}
	if ca == cb {
		piece(ca, 0, 1)
		return
	}
	c := math.Max(ca, cb)
	t := (c - va) / (vb - va)
	piece(ca, 0, t)
	piece(cb, t, 1)
}

// walk finds the slopes of a cell beside which a lane has no height, beside an
// edge or a hole, row by row.
func (x *windower) walk(o *ownLine) slopes {
	p := o.p
	lim := &p.f.lim
	out := slopes{shade: x.minShade, fold: x.minFold}
	o.step(&out)
	rise := max(lim.high, lim.ceiling) - lim.low
	enough := rise / min(x.minShade, x.minFold) // beyond it nothing counts
	side := func(dir int, edge bool) (unknown float64) {
		unknown = math.Inf(1)
		last := o.s
		for r := o.i + dir; r >= 0 && r < p.rows; r += dir {
			h, s := o.height(r)
			d := math.Abs(s - o.s)
			if d > enough {
				return unknown
			}
			if p.anyUnknown && p.gap(min(r, r-dir), o.k) {
				unknown = min(unknown, math.Abs(last-o.s))
			}
			last = s
			m := (h - o.h) / d
			if dir < 0 {
				if m > out.shade {
					out.shade = m
				}
				m = -m
			}
			if m > out.fold {
				out.fold = m
			}
		}
		if edge && !lim.openEdge {
			unknown = min(unknown, math.Abs(last-o.s))
		}
		return unknown
	}
	before, behind := side(-1, p.nearEnd), side(1, p.farEnd)
	out.shadeU, out.foldU = out.shade, out.fold
	x.worst(&out, o.h, before, behind)
	return out
}
