package mask

import (
	"errors"
	"fmt"
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// place is a point of the ground in its range plane, seen from the antenna: x
// metres of level distance on the side where the radar looks, y metres up, at
// the height of reference; nx, ny are what a metre of height adds.
type place struct{ x, y, nx, ny float64 }

func (a place) plus(b place, t float64) place {
	return place{a.x + float64(t*b.x), a.y + float64(t*b.y), a.nx + float64(t*b.nx), a.ny + float64(t*b.ny)}
}

func (a place) minus(b place) place {
	return place{a.x - b.x, a.y - b.y, a.nx - b.nx, a.ny - b.ny}
}

// view is lens.at for a platform: with h counted from the height of reference
//
//	X = x + h nx,  Y = y + h ny,  m = scale Y / X,  r = sqrt(X^2 + Y^2)
//
// m is the tangent of the elevation at the antenna, which grows with the look
// angle, in metres of height at the middle of the DEM.
func (l *lens) view(p *place, h float64) (m, r float64) {
	h -= l.datum
	x, y := p.x+float64(h*p.nx), p.y+float64(h*p.ny)
	if x <= 0 { // under the track or beyond it: none of the look's ground
		return math.Inf(-1), math.Inf(-1)
	}
	return l.scale * y / x, math.Sqrt(float64(x*x) + float64(y*y))
}

// viewM and viewR are the halves of view.
func (l *lens) viewM(p *place, h float64) float64 {
	h -= l.datum
	x := p.x + float64(h*p.nx)
	if x <= 0 {
		return math.Inf(-1)
	}
	return l.scale * (p.y + float64(h*p.ny)) / x
}

func (l *lens) viewR(p *place, h float64) float64 {
	h -= l.datum
	x, y := p.x+float64(h*p.nx), p.y+float64(h*p.ny)
	if x <= 0 {
		return math.Inf(-1)
	}
	return math.Sqrt(float64(x*x) + float64(y*y))
}

// shadeHeight returns the height at which a place has the given m.
func (l *lens) shadeHeight(p *place, m float64) float64 {
	return l.datum + (float64(m*p.x)-float64(l.scale*p.y))/(float64(l.scale*p.ny)-float64(m*p.nx))
}

// rangeHeight returns the height below the antenna at which a place has slant
// range r; where it has none, the height of its least slant range.
func (l *lens) rangeHeight(p *place, r float64) float64 {
	n := float64(p.nx*p.nx) + float64(p.ny*p.ny)
	b := float64(p.x*p.nx) + float64(p.y*p.ny)
	c := float64(p.x*p.x) + float64(p.y*p.y) - float64(r*r)
	return l.datum - (b+math.Sqrt(max(float64(b*b)-float64(n*c), 0)))/n
}

// angle returns sine and cosine of the incidence at a place and height.
func (l *lens) angle(p *place, h float64) (sin, cos float64) {
	h -= l.datum
	x, y := p.x+h*p.nx, p.y+h*p.ny
	cos = -(x*p.nx + y*p.ny) / math.Sqrt((x*x+y*y)*(p.nx*p.nx+p.ny*p.ny))
	return math.Sqrt(max(1-cos*cos, 0)), cos
}

// trackLanes lays out the range lines of a platform on a track: lane k is where
// the range plane through column k of the middle row meets the ground.
func trackLanes(g *dem.Grid, look geometry.Look, p geometry.Platform, lim dem.Range) (*lanes, error) {
	far, err := extended(g, look, p)
	if err != nil {
		return nil, err
	}
	tr := tracker{g: g, p: far, datum: (lim.Min + lim.Max) / 2, left: look.Side == geometry.Left}
	ln := &lanes{lens: lens{datum: tr.datum, scale: 1}, platform: p}
	cr, cc := float64(g.Rows-1)/2, float64(g.Cols-1)/2
	v, ok := tr.view(cr, cc)
	if !ok {
		return nil, fmt.Errorf("look %q: the track does not come abreast of the DEM's centre; choose a DEM along the track", look.Name)
	}
	// Level at right angles to the travel, to the side of the look: also where
	// the centre lies on the other side or under the track.
	azimuth := geometry.Angle(math.Atan2(v.Travel.East, v.Travel.North)) + 90*geometry.Degree
	if tr.left {
		azimuth -= 180 * geometry.Degree
	}
	dr, dc := indexDirection(g.At(cr, cc), azimuth)
	if math.Abs(dr) >= math.Abs(dc)*(1-1e-6) {
		ln.orient = newOrient(g, false, dr < 0)
	} else {
		ln.orient = newOrient(g, true, dc < 0)
	}
	tr.ln = ln
	if err := tr.layOut(dr, dc); err != nil {
		return nil, fmt.Errorf("look %q: %w", look.Name, err)
	}
	tr.bound(lim)
	tr.ln.ownRow(tr.g, tr.maxDS)
	ln.sights = newSights(g, look, p, ln.datum)
	return ln, nil
}

// tracker builds the lanes of a platform.
type tracker struct {
	g     *dem.Grid
	p     geometry.Platform
	ln    *lanes
	datum float64
	left  bool
	maxDS float64 // the largest ground distance of one row
}

// point returns the earth-centred point at a grid position and the height of
// reference.
func (tr *tracker) point(row, col float64) geometry.Geodetic {
	l := tr.g.At(row, col)
	return geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: tr.datum}
}

func (tr *tracker) view(row, col float64) (geometry.View, bool) {
	v, _ := tr.p.View(tr.point(row, col))
	return v, v.T == v.T
}

// abreast returns the parameter of the range plane through a marching position.
func (tr *tracker) abreast(u, v float64) (t float64, ok bool) {
	return tr.p.ZeroDoppler(tr.point(tr.ln.cell(u, v)).ECEF())
}

var errShortTrack = errors.New("the track does not come abreast of all of the DEM and some 100 cells around it; a longer track or a smaller DEM is needed")

// layOut finds where the range plane of each node lane crosses each node row,
// and the places there.
func (tr *tracker) layOut(dr, dc float64) error {
	ln := tr.ln
	ln.nu = (ln.orient.u-1)/laneStep + 2
	ln.mid = float64(ln.orient.u-1) / 2
	du, dv := dr, dc
	if ln.transposed {
		du, dv = dc, dr
	}
	drift := dv / math.Abs(du)
	lo, hi, err := tr.meet(drift)
	if err != nil {
		return err
	}
	ln.first = laneStep * (int(math.Floor(lo/laneStep)) - 1)
	ln.nk = (int(math.Ceil(hi))-ln.first)/laneStep + 3
	n := ln.nu * ln.nk
	ln.v, ln.s, ln.places = make([]float64, n), make([]float64, n), make([]place, n)
	for j := range ln.nk {
		k := float64(ln.first + laneStep*j)
		t, ok := tr.abreast(ln.mid, k)
		if !ok {
			return errShortTrack
		}
		pos, vel := tr.p.State(t)
		plane := newRangePlane(pos, vel, tr.left)
		middle := int(ln.mid) / laneStep
		if err := tr.trace(j, k, t, drift, &plane, middle, -1); err != nil {
			return err
		}
		if err := tr.trace(j, k, t, drift, &plane, middle+1, 1); err != nil {
			return err
		}
		tr.measure(j)
	}
	return nil
}

// meet returns the least and largest lane that the DEM meets, from where the
// range planes through its first and last column cross the middle row.
func (tr *tracker) meet(drift float64) (lo, hi float64, err error) {
	ln := tr.ln
	lo, hi = 0, float64(ln.orient.v-1)
	for i := range ln.nu {
		u := float64(laneStep * i)
		for _, v := range [2]float64{0, float64(ln.orient.v - 1)} {
			t, ok := tr.abreast(u, v)
			k, found := tr.cross(ln.mid, v+drift*(ln.mid-u), t)
			if !ok || !found {
				return 0, 0, errShortTrack
			}
			lo, hi = min(lo, k), max(hi, k)
		}
	}
	return lo, hi, nil
}

// cross finds the column at which a range plane crosses row u by the secant
// method, starting from a guess.
func (tr *tracker) cross(u, v, t float64) (float64, bool) {
	ta, ok := tr.abreast(u, v)
	tb, okB := tr.abreast(u, v+1)
	for range 6 { // t is all but linear in the column
		if !ok || !okB {
			return 0, false
		}
		step := (t - ta) / (tb - ta)
		v += step
		if math.Abs(step) < 1e-7 {
			break
		}
		slope := tb - ta
		ta, ok = tr.abreast(u, v)
		tb = ta + slope
	}
	return v, true
}

// trace follows one lane from the middle row to the first or the last.
func (tr *tracker) trace(j int, k, t, drift float64, plane *rangePlane, from, dir int) error {
	ln := tr.ln
	v, u := k, ln.mid
	for i := from; i >= 0 && i < ln.nu; i += dir {
		to := float64(laneStep * i)
		a, ok := tr.cross(to, v+drift*(to-u), t)
		if !ok {
			return errShortTrack
		}
		if to != u {
			drift = (a - v) / (to - u)
		}
		u, v = to, a
		n := i*ln.nk + j
		ln.v[n] = v
		ln.places[n] = plane.place(tr.point(ln.cell(u, v)))
	}
	return nil
}

// rangePlane is the frame of a range plane at the antenna.
type rangePlane struct {
	origin, level, up geometry.ECEF
}

// newRangePlane takes the plane at right angles to the earth-fixed velocity; the
// level axis points to the side of the look.
func newRangePlane(pos, vel geometry.ECEF, left bool) rangePlane {
	out := pos.Scale(1 / pos.Norm())
	along := vel.Scale(1 / vel.Norm())
	level := along.Cross(out)
	level = level.Scale(1 / level.Norm())
	up := level.Cross(along)
	if left {
		level = level.Scale(-1)
	}
	return rangePlane{pos, level, up}
}

// place resolves a ground point in the plane.
func (r *rangePlane) place(g geometry.Geodetic) place {
	d := g.ECEF().Sub(r.origin)
	n := g.FromENU(geometry.ENU{Up: 1})
	return place{d.Dot(r.level), d.Dot(r.up), n.Dot(r.level), n.Dot(r.up)}
}

// measure fills the ground distances along one lane, from its first row.
func (tr *tracker) measure(j int) {
	ln := tr.ln
	if j == 0 {
		ln.minDS, tr.maxDS = math.Inf(1), 0
	}
	for i := 1; i < ln.nu; i++ {
		n := i*ln.nk + j
		u, v := float64(laneStep*i)-laneStep/2, (ln.v[n]+ln.v[n-ln.nk])/2
		ue, un, ve, vn := ln.step(tr.g, u, v)
		b := (ln.v[n] - ln.v[n-ln.nk]) / laneStep
		ds := math.Hypot(ue+b*ve, un+b*vn)
		ln.minDS, tr.maxDS = math.Min(ln.minDS, ds), math.Max(tr.maxDS, ds)
		ln.s[n] = ln.s[n-ln.nk] + laneStep*ds
	}
}

// bound finds the extremes of the incidence over the DEM that the reach and
// the least worth of a row come from, and the scale of m.
func (tr *tracker) bound(lim dem.Range) {
	ln := tr.ln
	minCos, maxCos := 1.0, -1.0
	var middle place
	for i := range ln.nu {
		for j := range ln.nk {
			n := i*ln.nk + j
			if v := ln.v[n]; v < -laneStep || v > float64(ln.orient.v+laneStep) {
				continue
			}
			p := &ln.places[n]
			if p.x <= 0 { // none of the look's ground
				minCos, maxCos = min(minCos, 1), max(maxCos, 1)
				continue
			}
			for _, h := range [2]float64{lim.Min, lim.Max} {
				_, cos := ln.angle(p, h)
				minCos, maxCos = min(minCos, cos), max(maxCos, cos)
			}
		}
	}
	i, j, p, q := ln.locate(ln.mid, float64(ln.orient.v-1)/2)
	n := i*ln.nk + j
	top := ln.places[n].plus(ln.places[n+ln.nk].minus(ln.places[n]), p)
	end := ln.places[n+1].plus(ln.places[n+1+ln.nk].minus(ln.places[n+1]), p)
	middle = top.plus(end.minus(top), q)
	// dm/dh = scale (ny x - nx y) / x^2 is made one there, unless the middle lies
	// under the track or beyond it.
	x := max(math.Abs(middle.x), math.Abs(middle.y)/8)
	ln.scale = x * x / (middle.ny*x + math.Abs(middle.nx*middle.y))
	ln.sin, ln.cos = ln.angle(&middle, tr.datum)
	ln.cot, ln.tan = ln.cos/ln.sin, ln.sin/ln.cos
	sinOf := func(cos float64) float64 { return math.Sqrt(max(1-cos*cos, 1e-12)) }
	ln.cotMost = max(maxCos, 0) / sinOf(maxCos)
	ln.tanMost = math.Inf(1)
	if minCos > 1e-3 {
		ln.tanMost = sinOf(minCos) / minCos
	}
	ln.rowM = ln.minDS * max(minCos, 0.01) / sinOf(max(minCos, 0))
	ln.rowR = ln.minDS * sinOf(maxCos)
	ln.rowH = ln.minDS / ln.cotMost
}

// see takes the places of the lanes at row u from the lattice.
func (p *strip) see(u int) { p.p0, p.dp = p.placesOf(u) }

// placesOf returns the place of lane 0 at row u, and the change for one lane.
func (p *strip) placesOf(u int) (p0, dp place) {
	ln := p.f.ln
	i := min(u/laneStep, ln.nu-2)
	n, q := i*ln.nk+p.j, float64(u-laneStep*i)/laneStep
	mix := func(a, b *place) place {
		of := func(a, b float64) float64 { return a + float64(q*(b-a)) }
		return place{of(a.x, b.x), of(a.y, b.y), of(a.nx, b.nx), of(a.ny, b.ny)}
	}
	a, b := mix(&ln.places[n], &ln.places[n+ln.nk]), mix(&ln.places[n+1], &ln.places[n+1+ln.nk])
	d := b.minus(a)
	dp = place{d.x * (1. / laneStep), d.y * (1. / laneStep), d.nx * (1. / laneStep), d.ny * (1. / laneStep)}
	return a.minus(dp), dp
}

// viewLanes fills m and r as a platform sees them and returns the lanes that
// count: ground under the track and beyond it is none of the look's.
func (p *strip) viewLanes(l span) span {
	ln := p.f.ln
	for l.a < l.b && p.placeOf(l.a).x <= 0 {
		l.a++
	}
	for l.a < l.b && p.placeOf(l.b-1).x <= 0 {
		l.b--
	}
	if vectors && l == whole {
		viewTrackVector(p)
		return l
	}
	for k := l.a; k < l.b; k++ {
		q := p.placeOf(k)
		p.m[k], p.r[k] = ln.view(&q, p.h[k])
		if ln.fan != nil {
			p.share[k] = ln.steepness(&q, p.h[k], p.r[k])
		}
	}
	return l
}

// seen returns m and r of a height at lane k of the row that is sampled.
func (p *strip) seen(k int, h float64) (m, r float64) {
	if p.f.ln.places == nil {
		d := h - p.h[k]
		return p.m[k] + d, p.r[k] - float64(d*p.f.ln.cos)
	}
	q := p.placeOf(k)
	return p.f.ln.view(&q, h)
}

// seenAt is seen for a lane that may be fractional, seenFrom the same at row u.
func (p *strip) seenAt(lane, h float64) (m, r float64) {
	return p.f.ln.seenOn(p.footing, &p.p0, &p.dp, lane, h)
}

func (p *strip) seenFrom(u int, lane, h float64) (m, r float64) {
	var p0, dp place
	if p.f.ln.places != nil {
		p0, dp = p.placesOf(u)
	}
	return p.f.ln.seenOn(p.footingOf(u), &p0, &dp, lane, h)
}

// seenOn is seen on a row that lanes cross at a, of a platform with lane 0 at p0 and
// dp from each to the next.
func (ln *lanes) seenOn(a *footing, p0, dp *place, lane, h float64) (m, r float64) {
	if ln.places == nil {
		return ln.at(a.s0+float64(a.ds*lane), h)
	}
	q := p0.plus(*dp, lane)
	return ln.view(&q, h)
}

// shade returns the height at which lane k reaches top.
func (p *strip) shade(k int, top float64) float64 {
	if p.f.ln.places == nil {
		return p.h[k] + (top - p.m[k])
	}
	if math.IsInf(top, -1) {
		return top
	}
	q := p.placeOf(k)
	return p.f.ln.shadeHeight(&q, top)
}

// equalRange returns the height at which lane k has slant range r.
func (p *strip) equalRange(k int, r float64) float64 {
	ln := p.f.ln
	switch {
	case ln.places == nil:
		return p.h[k] + (p.r[k]-r)/ln.cos
	case ln.fan != nil:
		return p.h[k] + (p.r[k]-r)/p.share[k]
	}
	q := p.placeOf(k)
	return ln.rangeHeight(&q, max(r, 0))
}

// forwardTrack marches one row of a platform, all of its ground known.
func (p *strip) forwardTrack(row *lines, l span) {
	minShade, maxNearer, _ := p.f.limitLines()
	if vectors && l == whole {
		forwardTrackVector(p, &p.fwd.top, &p.fwd.most, &row.shade, &row.nearer, minShade, maxNearer)
		forwardMoveVector(p, row)
		return
	}
	for k := l.a; k < l.b; k++ {
		row.shade[k] = float32(max(p.shade(k, p.fwd.top[k]), minShade))
		row.nearer[k] = float32(min(p.equalRange(k, p.fwd.most[k]), maxNearer))
	}
	p.forwardMove(row, l)
}

// forwardTrackUnsure marches one row of a platform of which all ground is known,
// with unknown terrain within reach. It reports whether it has: on vectors only,
// and where no unknown terrain ends at the row.
func (p *strip) forwardTrackUnsure(row *lines, unsure *unsureLines, l span) bool {
	st := &p.fwd
	if !vectors || p.f.ln.places == nil || l != whole || st.unknown != [padLanes]bool{} {
		return false
	}
	minShade, maxNearer, _ := p.f.limitLines()
	forwardTrackVector(p, &st.top, &st.most, &row.shade, &row.nearer, minShade, maxNearer)
	forwardTrackVector(p, &st.topU, &st.mostU, &unsure.shade, &unsure.nearer, minShade, maxNearer)
	forwardMoveUnsureVector(p, row)
	return true
}

// backwardTrackUnsure fills the lines of such a row that the backward march sets.
func (p *strip) backwardTrackUnsure(row *lines, unsure *unsureLines, l span) bool {
	st := &p.bwd
	if !vectors || p.f.ln.places == nil || l != whole || st.unknown != [padLanes]bool{} {
		return false
	}
	_, _, minFarther := p.f.limitLines()
	backwardTrackVector(p, &st.least, &row.farther, minFarther)
	backwardTrackVector(p, &st.leastU, &unsure.farther, minFarther)
	return true
}

// backwardTrack fills the lines of one row of a platform that the backward
// march sets.
func (p *strip) backwardTrack(row *lines, l span) {
	_, _, minFarther := p.f.limitLines()
	if vectors && l == whole {
		backwardTrackVector(p, &p.bwd.least, &row.farther, minFarther)
		return
	}
	for k := l.a; k < l.b; k++ {
		row.farther[k] = float32(max(p.equalRange(k, p.bwd.least[k]), minFarther))
	}
}

// spareRows are the rows' worths of ground by which unknown terrain must be out
// of the way of all lanes to be out of that of the cells between them.
const spareRows = 8

// freeForward reports whether no unknown terrain that the forward march of a
// platform has met matters to the row where it stands, nor to those that follow:
// even the lowest ground is seen above it, and even the highest lies farther away.
// The reach of the field, by which it would be, is that of the worst place.
func (p *strip) freeForward(l span) bool {
	ln, lim, st := p.f.ln, &p.f.lim, &p.fwd
	if ln.places == nil || ln.fan != nil || l != whole {
		return false
	}
	spare := spareRows * ln.minDS
	mid := p.placeOf(marchLanes / 2)
	sin, cos := ln.angle(&mid, lim.low)
	low := lim.low - spare*cos/sin
	for k := range marchLanes {
		q := p.placeOf(k)
		high, r := ln.view(&q, lim.high)
		if st.unknown[k] || !(high < 0) || !(r > st.doubt[k]+spare) || !(ln.viewM(&q, low) > st.topU[k]) {
			return false
		}
	}
	return true
}

// freeBackward is freeForward for the backward march: even the lowest ground, and
// the highest beside a fan's antenna, lies nearer to the radar.
func (p *strip) freeBackward(l span) bool {
	ln, lim, st := p.f.ln, &p.f.lim, &p.bwd
	if ln.places == nil || l != whole {
		return false
	}
	spare := spareRows * ln.minDS
	for k := range marchLanes {
		q := p.placeOf(k)
		r := max(ln.viewR(&q, lim.low), ln.viewR(&q, lim.high))
		if st.unknown[k] || !(r < st.doubt[k]-spare) {
			return false
		}
	}
	return true
}

// fromLines fills the margins of a plane wave of the lanes l in the DEM; the
// others have none.
func (r *laneMargins) fromLines(p *strip, u int, l span, cos float32) {
	row := p.row(u)
	for k := range marchLanes {
		h := float32(p.h[k])
		if k < l.a || k >= l.b {
			h = float32(nan)
		}
		r.h[k] = h
		r.clear[k] = h - row.shade[k]
		r.near[k] = float32((row.nearer[k] - h) * cos)
		r.far[k] = float32((h - row.farther[k]) * cos)
	}
}

// fromTrack is fromLines for a platform, for which slant range is not linear
// in height; the lines of a fan are taken as if it were.
func (r *laneMargins) fromTrack(p *strip, u int, l span) {
	ln, row := p.f.ln, p.row(u)
	if vectors && l == whole {
		trackMarginsVector(r, p, row)
		if ln.fan == nil {
			rangesVector(p, &r.near, &row.nearer, false)
			rangesVector(p, &r.far, &row.farther, true)
		}
		return
	}
	for k := range marchLanes {
		if k < l.a || k >= l.b {
			x := float32(nan)
			r.h[k], r.clear[k], r.near[k], r.far[k] = x, x, x, x
			continue
		}
		h := float32(p.h[k])
		r.h[k], r.clear[k] = h, h-row.shade[k]
		if ln.fan != nil {
			share := float32(p.share[k])
			r.near[k] = float32((row.nearer[k] - h) * share)
			r.far[k] = float32((h - row.farther[k]) * share)
			continue
		}
		q := p.placeOf(k)
		r.near[k] = float32(p.r[k] - ln.viewR(&q, float64(row.nearer[k])))
		r.far[k] = float32(ln.viewR(&q, float64(row.farther[k])) - p.r[k])
	}
}

// trackRangesU is fromTrack with unknown terrain at its worst.
func (r *laneMargins) trackRangesU(p *strip, u int) {
	l := p.in
	bits := p.sure[u-p.ua]
	row := p.unsureRow(u)
	if vectors && l == whole {
		if bits&1 == 0 {
			rangesVector(p, &r.nearU, &row.nearer, false)
		}
		if bits&2 == 0 {
			rangesVector(p, &r.farU, &row.farther, true)
		}
		return
	}
	for k := l.a; k < l.b; k++ {
		q := p.placeOf(k)
		r.nearU[k], r.farU[k] = r.near[k], r.far[k]
		if bits&1 == 0 {
			nearer := p.f.ln.viewR(&q, float64(row.nearer[k]))
			r.nearU[k] = float32(p.r[k] - nearer)
		}
		if bits&2 == 0 {
			farther := p.f.ln.viewR(&q, float64(row.farther[k]))
			r.farU[k] = float32(farther - p.r[k])
		}
	}
}

// seenGrade is grade for a platform. Ground above the antenna must not fall too
// much either for its slant range to grow, and the change above which the look
// angle grows may depend on the height.
type seenGrade struct {
	rise, drop            float32
	fall, dark, perHeight float32 // at height 0: the look angle grows above fall, falls below dark
	drift                 [2]float32
	worthR, worthM, steep float32 // see gentle
	jag                   float32 // see grade
}

// markSeen is the work of strip.mark for a platform, with the heights a and b of
// the two rows.
func (p *strip) markSeen(g *gentle, u int, a, b *patchRow) {
	limits, ok := p.bounds, true
	if p.f.ln.fan != nil {
		limits, ok = p.gradeFan(u)
	} else if i := min(u/laneStep, p.f.ln.nu-2); i != p.graded { // the same for all rows of the lattice's cell
		limits = p.gradeTrack(i)
		p.bounds, p.graded = limits, i
	}
	if !ok {
		return
	}
	g.worthR, g.worthM, g.steep = limits.worthR, limits.worthM, limits.steep
	limits.jag = p.jag.any
	first, last := p.between(g.base, &limits.drift)
	high := float32(math.Inf(-1))
	if vectors {
		var jagged bool
		g.rises, g.lit, g.dark, high, jagged = markSeenVector(a, b, &limits, first, last)
		g.top = p.topOf(u, high)
		if jagged && p.f.ln.fan == nil {
			p.findJags(u, a, b)
		}
		return
	}
	if p.f.ln.fan == nil {
		p.findJags(u, a, b)
	}
	for k := range patches {
		if k >= first && k <= last {
			high = max(high, a[k], a[k+1], b[k], b[k+1])
		}
		lo, hi := changes(a[k], a[k+1], b[k], b[k+1], &limits.drift)
		if hi < limits.rise && lo > limits.drop {
			g.rises |= 1 << k
		}
		if lo > limits.fall+float32(limits.perHeight*max(a[k], a[k+1], b[k], b[k+1])) {
			g.lit |= 1 << k
		}
		if hi < limits.dark+float32(limits.perHeight*min(a[k], a[k+1], b[k], b[k+1])) {
			g.dark |= 1 << k
		}
	}
	g.top = p.topOf(u, high)
}

// between returns the first and the last patch, counted from column base, that lie
// between the lanes at the strip's edges in a row, over which these drift.
func (p *strip) between(base int, drift *[2]float32) (first, last int) {
	a, b := float64(drift[0]), float64(drift[1])
	return int(min(p.edgeA, p.edgeA+a)) - base, int(max(p.edgeB, p.edgeB+b)) - base
}

// topOf returns what m ground of a fan below a height does not exceed between row
// u, where the strip stands, and the next one: m of a height is the ratio of two
// linear functions there.
func (p *strip) topOf(u int, high float32) float64 {
	ln, h := p.f.ln, float64(high)
	top := math.Inf(1)
	if ln.fan == nil || !(h < top) {
		return top
	}
	top = -top
	n := min(u/laneStep, ln.nu-2)*ln.nk + p.j
	for e := range 2 {
		a, d := p.placeOf(1+laneStep*e), place{}.plus(ln.places[n+e+ln.nk].minus(ln.places[n+e]), 1./laneStep)
		next := a.plus(d, 1)
		top = max(top, ln.viewM(&a, h), ln.viewM(&next, h))
	}
	return top + 1e-9*math.Abs(top)
}

// gradeTrack finds the bounds in the cell of the lattice at row i: the strictest of
// those at its corners and at the lowest and the highest ground.
func (p *strip) gradeTrack(i int) seenGrade {
	ln, lim := p.f.ln, &p.f.lim
	inf := math.Inf(1)
	rise, steep, fall, dark := inf, -inf, -inf, inf
	var drift [2]float32
	for e := range 2 {
		n := i*ln.nk + p.j + e
		a, b := ln.places[n], ln.places[n+ln.nk]
		drift[e] = float32((ln.v[n+ln.nk] - ln.v[n]) * (1. / laneStep))
		for _, h := range [2]float64{lim.low - ln.datum, lim.high - ln.datum} {
			dx, dy := b.x+h*b.nx-a.x-h*a.nx, b.y+h*b.ny-a.y-h*a.ny
			for _, q := range [2]place{a, b} {
				x, y := q.x+h*q.nx, q.y+h*q.ny
				if x <= 0 || x*q.nx+y*q.ny >= 0 || q.ny*x-q.nx*y <= 0 { // under the track, above the antenna
					rise, steep, fall, dark = -inf, inf, inf, -inf
					continue
				}
				limit := -(x*dx + y*dy) / (x*q.nx + y*q.ny)
				rise, steep = min(rise, limit), max(steep, limit)
				limit = (y*dx - x*dy) / (q.ny*x - q.nx*y)
				fall, dark = max(fall, limit), min(dark, limit)
			}
		}
	}
	const share = gradeShare / laneStep
	g := seenGrade{rise: float32(rise * share), drop: float32(-inf), fall: float32(fall * share), drift: drift}
	g.dark = float32((dark - (1-gradeShare)*math.Abs(dark)) / laneStep)
	g.worthR, g.worthM, g.steep = g.rise, -g.fall, float32(steep*share*surely)
	return g
}

// shadowed reports whether the ground right before the cell (u, v), which is on lane
// x of the strip, surely hides it: towards the radar it rises above its line of
// sight over the whole row.
func (p *strip) shadowed(u, v int, x float64) bool {
	if u <= p.ua {
		return false
	}
	g := &p.gentle[u-1-p.ua]
	c := g.crossed(p.footingOf(u-1).column(x), float64(v))
	return c != 0 && g.dark&c == c
}
