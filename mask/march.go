package mask

import "math"

// strip is a bundle of neighbouring lanes of a field that are marched together:
// few enough that all it touches stays in a processor's cache, also while
// single cells are settled. It takes one column of the lane lattice: the cells
// between its lanes 1 and 1+laneStep, and one lane more on each side that shows
// how rough the ground is.
type strip struct {
	f      *field // the panel
	panel  field  // the part of the field that the strip needs, close together
	j      int    // column of the lattice
	k0     int    // lane 0
	ua, ub int    // rows that are marched
	u0, u1 int    // rows with cells

	*footing // of the row where the strip stands
	feet     []footing
	foot     int     // row of the first of them
	p0, dp   place   // of a platform, at the row that is sampled: place of lane 0, change for one lane
	h        *byLane // the row's own of samples
	m, r     byLane
	share    byLane   // of a fan: see lens.steepness
	samples  []byLane // heights of the lanes, by row from ua on

	// What the marches find, by row from ua to ub and lane.
	lines  []lines
	unsure []unsureLines // nil where no unknown terrain is within reach
	// sure says of each row from ua on that no unknown terrain is in reach of
	// it: bit 0 towards the radar, bit 1 away from it.
	sure   []uint8
	gentle []gentle // by row from ua on
	graded int      // of a platform: the row of the lattice that bounds are of
	bounds seenGrade
	fan    fanBounds // the same of a fan

	jag      jagState
	jags     []jags // by row from ua on
	jagLines []jagLines

	fwd forwardState
	bwd backwardState
}

const marchLanes = laneStep + 3

// padLanes is marchLanes and room for whole vectors of eight, marchVectors just whole
// vectors of four.
const (
	padLanes     = laneStep + 8
	marchVectors = (marchLanes + 3) / 4 * 4
)

// heightRun holds neighbouring heights of a row, as many as the lanes.
type heightRun [marchVectors]float32

// byLane holds a number of each lane of a strip, byLane32 a smaller one.
type (
	byLane   [padLanes]float64
	byLane32 [padLanes]float32
)

// lines are the limits that other ground sets at the samples of a row, as
// heights there: ground above shade is lit, ground below nearer shares no slant
// range with lit ground nearer to the radar, ground above farther shares none
// with lit ground farther away.
//
// dip is NaN where the sample is hidden or has no height; else how much less
// slant range than the sample's own the lit ground begins with, and negative,
// -0 included, where unknown terrain may hide it.
type lines struct{ shade, nearer, farther, dip byLane32 }

// unsureLines are the same limits when unknown terrain counts at its worst.
type unsureLines struct{ shade, nearer, farther byLane32 }

// clear says of lane k that it has no lines.
func (l *lines) clear(k int) {
	x := float32(nan)
	l.shade[k], l.nearer[k], l.farther[k], l.dip[k] = x, x, x, x
}

func (l *unsureLines) clear(k int) {
	x := float32(nan)
	l.shade[k], l.nearer[k], l.farther[k] = x, x, x
}

// footing says where the lanes of a strip cross a row: lane k at column v0 + dv k
// and ground distance s0 + ds k.
type footing struct {
	v0, dv, s0, ds float64
	edgeA, edgeB   float64 // columns of lanes 1 and 1+laneStep
	in             span    // lanes in the DEM
	turn, shift    int     // see shiftOf; of the panel's columns
	va, vb         int     // columns of the strip's cells
}

func (a *footing) column(lane float64) float64 { return a.v0 + float64(a.dv*lane) }

// span is a range of lanes [a, b) of a strip.
type span struct{ a, b int }

// setUp makes the strip of lattice column j; it returns false when no cell of
// the field lies between its lanes.
func (p *strip) setUp(f *field, j int) bool {
	p.f, p.j, p.k0 = f, j, f.ln.first+laneStep*j-1
	p.u0, p.u1 = f.u1, f.u0
	p.foot = min(f.ua, f.u0) - 1
	p.feet = resize(p.feet, f.ub+1-p.foot)
	for u := f.u0; u < f.u1; u++ {
		p.place(u)
		p.stand(u)
		if p.va < p.vb {
			p.u0, p.u1 = min(p.u0, u), u+1
		}
	}
	if p.u0 >= p.u1 {
		return false
	}
	p.ua, p.ub = max(p.u0-f.near, f.ua), min(p.u1+f.far, f.ub)
	for u := max(p.ua-1, 0); u < f.u0; u++ {
		p.place(u)
	}
	for u := f.u1; u < min(p.ub+1, f.ln.orient.u); u++ {
		p.place(u)
	}
	p.copyPanel(f)
	n := p.ub - p.ua
	p.lines, p.samples = resize(p.lines, n), resize(p.samples, n)
	p.sure, p.gentle = resize(p.sure, n), resize(p.gentle, n)
	p.resetJags()
	p.unsure = p.unsure[:0]
	if !f.sure {
		p.unsure = resize(p.unsure, n)
	}
	return true
}

// panelColumns is the least number of columns of a panel: room for the corners of
// all patches.
const panelColumns = patches + 8

// copyPanel copies the strip's heights from the field. A strip's rows lie far
// apart there; close together they stay in the cache while it is marched to and
// fro.
func (p *strip) copyPanel(f *field) {
	z, at := p.panel.z, p.panel.at
	feet := p.feet[p.ua-p.foot:]
	p.panel = *f
	q := &p.panel
	p.f = q
	q.ua, q.ub = p.ua, p.ub
	rows := p.ub - p.ua
	q.at = resize(at, rows)
	q.width = panelColumns
	for i := range rows {
		a := &feet[i]
		q.at[i] = int(math.Floor(a.v0)) - 2
		q.width = max(q.width, int(math.Floor(a.column(marchLanes-1)))+4-q.at[i])
		if !f.ln.uniform {
			a.turn, a.shift = shiftOf(a.v0-float64(q.at[i]), a.dv)
		}
	}
	q.z = resize(z, rows*q.width+padLanes) // vectors may read past the last row
	for i := range rows {
		from := q.at[i] - f.at[p.ua-f.ua+i]
		row, to := f.z[(p.ua-f.ua+i)*f.width:][:f.width], q.z[i*q.width:][:q.width]
		for from < 0 { // by rounding
			to[0] = float32(nan)
			to, from = to[1:], from+1
		}
		n := copy(to, row[min(from, f.width):])
		fillWith(to[n:], float32(nan))
	}
}

// row returns the lines of row u.
func (p *strip) row(u int) *lines { return &p.lines[u-p.ua] }

// unsureRow returns the unsure lines of row u, nil where there are none.
func (p *strip) unsureRow(u int) *unsureLines {
	if len(p.unsure) == 0 {
		return nil
	}
	return &p.unsure[u-p.ua]
}

// stand has the strip stand at row u.
func (p *strip) stand(u int) { p.footing = &p.feet[u-p.foot] }

// footingOf returns where the lanes cross row u.
func (p *strip) footingOf(u int) *footing { return &p.feet[u-p.foot] }

// place finds where the lanes cross row u, and which cells of the field lie between
// those of the strip.
func (p *strip) place(u int) {
	p.stand(u)
	p.cross(u)
	p.findDEM()
	p.va, p.vb = int(math.Ceil(p.edgeA)), int(math.Ceil(p.edgeB))
	if q := p.f.ln.fan; q != nil {
		p.va, p.vb = q.clip(u, p.va, p.vb)
	}
	p.va, p.vb = max(p.va, p.f.v0), min(p.vb, p.f.v1)
}

// cross takes columns and distances of the lanes at row u, where the strip stands,
// from the lattice.
func (p *strip) cross(u int) {
	ln := p.f.ln
	i := min(u/laneStep, ln.nu-2)
	q := float64(u-laneStep*i) / laneStep
	n := i*ln.nk + p.j
	at := func(a []float64, n int) float64 { return a[n] + float64(q*(a[n+ln.nk]-a[n])) }
	s := at(ln.s, n)
	p.ds = (at(ln.s, n+1) - s) / laneStep
	p.s0 = s - p.ds
	if ln.uniform {
		drift := float64(ln.slope * (float64(u) - ln.mid))
		p.v0, p.dv = float64(p.k0)+drift, 1
		p.edgeA, p.edgeB = float64(p.k0+1)+drift, float64(p.k0+1+laneStep)+drift
		return
	}
	p.edgeA, p.edgeB = at(ln.v, n), at(ln.v, n+1)
	p.dv = (p.edgeB - p.edgeA) / laneStep
	p.v0 = p.edgeA - p.dv
}

// findDEM finds the lanes whose column at the row where the strip stands lies in
// the DEM.
func (p *strip) findDEM() {
	last := float64(p.f.ln.orient.v - 1)
	v := func(k int) float64 { return p.v0 + float64(p.dv*float64(k)) }
	l := span{0, marchLanes}
	if v(0) < 0 {
		l.a = min(int(math.Ceil(-p.v0/p.dv)), marchLanes)
		for l.a > 0 && v(l.a-1) >= 0 {
			l.a--
		}
		for l.a < marchLanes && v(l.a) < 0 {
			l.a++
		}
	}
	if v(marchLanes-1) > last {
		l.b = max(int((last-p.v0)/p.dv)+1, 0)
		for l.b < marchLanes && v(l.b) <= last {
			l.b++
		}
		for l.b > 0 && v(l.b-1) > last {
			l.b--
		}
	}
	l.b = max(l.a, l.b)
	p.in = l
}

// whole is all lanes of a strip.
var whole = span{0, marchLanes}

// sample stands at row u and fills h, m and r for the lanes in the DEM, which
// it returns.
func (p *strip) sample(u int) span {
	p.stand(u)
	l := p.in
	f, ln := p.f, p.f.ln
	p.h = &p.samples[u-p.ua]
	z, at := f.z[(u-f.ua)*f.width:], f.at[u-f.ua]
	switch {
	case ln.uniform && l == whole:
		i := math.Floor(p.v0)
		p.heights(z[int(i)-at:], p.v0-i)
	case ln.uniform && l.a < l.b:
		v := p.v0 + float64(l.a)
		i := math.Floor(v)
		heightsAt(p.h[l.a:l.b], z[int(i)-at:], v-i)
	default:
		p.spread(z, p.v0-float64(at), l)
	}
	return p.view(u)
}

// view fills m and r at row u, where the strip stands, from its heights, and returns
// the lanes that count.
func (p *strip) view(u int) span {
	if p.f.ln.places != nil {
		p.see(u)
		return p.viewLanes(p.in)
	}
	p.viewWave(p.in)
	return p.in
}

// again is sample where the row has been sampled before.
func (p *strip) again(u int) span {
	p.stand(u)
	p.h = &p.samples[u-p.ua]
	return p.view(u)
}

// spread fills h with the heights of lanes l at columns v, v + dv and so on of z.
func (p *strip) spread(z []float32, v float64, l span) {
	if vectors && l == whole {
		if p.dv > 0 && p.dv < narrow {
			spreadNarrowVector(p.h, z, v, p.dv)
			return
		}
		if turn, shift := p.turn, p.shift; shift*shift <= 1 {
			spreadVector(p.h, z, v, p.dv, turn, shift)
			for k := turn &^ 3; k < min((turn+3)&^3, marchLanes); k++ {
				p.h[k] = lerp(z, v+float64(p.dv*float64(k)))
			}
			return
		}
	}
	for k := l.a; k < l.b; k++ {
		p.h[k] = lerp(z, v+float64(p.dv*float64(k)))
	}
}

// shiftOf returns by how much the whole columns of lanes at v, v + dv and so on
// leave those that follow the first one by one, and from which lane on where that
// is one.
func shiftOf(v, dv float64) (turn, shift int) {
	beside := func(k int) int { return int(v+float64(dv*float64(k))) - k }
	first := int(v)
	if shift = beside(marchLanes-1) - first; shift == 0 {
		return padLanes, 0
	}
	lo, hi := 0, marchLanes-1
	for hi-lo > 1 {
		if mid := (lo + hi) / 2; beside(mid) == first {
			lo = mid
		} else {
			hi = mid
		}
	}
	return hi, shift
}

// heights fills h with the heights at the same fraction of every step of z.
func (p *strip) heights(z []float32, rest float64) {
	if !vectors {
		heightsAt(p.h[:marchLanes], z, rest)
		return
	}
	next := z[1:]
	switch { // a neighbour that does not count may be missing
	case rest < onColumn:
		next = z
	case rest > 1-onColumn:
		z = next
	}
	heightsVector(p.h, (*heightRun)(z), (*heightRun)(next), rest)
}

// viewWave fills m and r of a plane wave from h.
func (p *strip) viewWave(l span) {
	ln := p.f.ln
	m0, dm := float64(ln.cot*p.s0), float64(ln.cot*p.ds)
	r0, dr := float64(ln.sin*p.s0), float64(ln.sin*p.ds)
	if vectors && l == whole {
		viewVector(p, m0, dm, r0, dr, ln.cos)
		return
	}
	m, r, number := p.m[l.a:l.b], p.r[l.a:l.b], laneNumbers[l.a:l.b]
	cos := ln.cos
	for k, h := range p.h[l.a:l.b] {
		m[k] = h + (m0 + float64(dm*number[k]))
		r[k] = (r0 + float64(dr*number[k])) - float64(cos*h)
	}
}

// placeOf returns the place of lane k at the row where the strip stands.
func (p *strip) placeOf(k int) place { return p.p0.plus(p.dp, float64(k)) }

// middleHeight returns a height of the row that is sampled: that of its middle
// lane, or of the datum where that has none.
func (p *strip) middleHeight() float64 {
	l := p.in
	if h := p.h[(l.a+l.b)/2%marchLanes]; l.a < l.b && h == h {
		return h
	}
	return p.f.ln.datum
}

// laneNumbers holds the numbers of the lanes.
var laneNumbers = func() (n byLane) {
	for k := range n {
		n[k] = float64(k)
	}
	return n
}()

// forwardState is the march away from the radar, by lane.
type forwardState struct {
	top     byLane         // largest m so far
	topU    byLane         // the same of unknown terrain at the ceiling
	most    byLane         // largest slant range of surely lit ground so far
	mostU   byLane         // the same of all ground that may be lit
	doubt   byLane         // the same of ground that may be lit or not, or unknown
	m, r    byLane         // the row before where it was hidden, else m is NaN
	unknown [padLanes]bool // the row before was unknown terrain
}

func (st *forwardState) reset() {
	*st = forwardState{}
	for k := range padLanes {
		st.top[k], st.topU[k] = math.Inf(-1), math.Inf(-1)
		st.most[k], st.mostU[k], st.doubt[k] = math.Inf(-1), math.Inf(-1), math.Inf(-1)
		st.m[k] = nan
	}
}

// joinSure is for the first row where terrain may be unknown after rows where none was:
// ground that is surely lit may be lit.
func (st *forwardState) joinSure() {
	for k := range padLanes {
		st.mostU[k] = max(st.mostU[k], st.most[k])
	}
}

// entering marks the lanes that are in the DEM at row u, where they are l, but
// not one row back in direction dir, and reports whether there are any.
func (p *strip) entering(l span, u, dir int, unknown *[padLanes]bool) (any bool) {
	before := span{}
	if back := u + dir; back >= 0 && back < p.f.ln.orient.u {
		before = p.footingOf(back).in
	}
	for k := l.a; k < l.b; k++ {
		if k < before.a || k >= before.b {
			unknown[k], any = true, true
		}
	}
	return any
}

// noLimit is a height beyond any line, small enough to be mixed with others.
const noLimit = 1e5

// limitLines are the lowest shade and farther line and the highest nearer line
// that the field can vouch for: a row's worth of ground beyond what terrain at
// the edge of the reach can set. Lines are brought within them, so that they
// do not depend on how much farther the field happens to extend.
func (f *field) limitLines() (shade, nearer, farther float64) {
	ln := f.ln
	if ln.fan != nil { // the field holds all that counts
		return f.lim.low - ln.rowM, noLimit, -noLimit
	}
	return f.lim.low - ln.rowM, f.lim.high + ln.rowH, f.lim.low - ln.rowH
}

// forward walks from near range to far range. A tie counts against the point:
// a look angle equal to the largest so far is hidden, an equal slant range is
// folded.
func (p *strip) forward() {
	f := p.f
	p.fwd.reset()
	last := p.ua - f.near - 1 // last row at which terrain was unknown
	for u := p.ua; u < p.ub; u++ {
		l := p.sample(u)
		p.mark(u)
		if !f.sure && !f.lim.openEdge && (l.a > 0 || l.b < marchLanes || u == p.ua) {
			if p.entering(l, u, -1, &p.fwd.unknown) {
				last = u
			}
		}
		row, unsure := p.row(u), p.unsureRow(u)
		if l != whole {
			p.clearOutside(row, unsure, l)
		}
		if !f.sure {
			for _, h := range p.h[l.a:l.b] {
				if h != h {
					last = u
				}
			}
		}
		if last < u && u-last <= f.near && p.freeForward(l) {
			last = u - f.near - 1
		}
		if p.sure[u-p.ua] = 0; u-last > f.near {
			p.sure[u-p.ua] = 1
			p.forwardSure(row, l)
		} else {
			if u > p.ua && p.sure[u-1-p.ua]&1 != 0 {
				p.fwd.joinSure()
			}
			if last == u || !p.forwardTrackUnsure(row, unsure, l) {
				p.forwardUnsure(row, unsure, l)
			}
		}
		if u > p.ua && p.gentle[u-1-p.ua].rises != allPatches {
			p.findDawn(u)
		}
		if p.jag.mOn|p.jag.mostOn|p.jags[u-p.ua].columns|p.jags[max(u-1-p.ua, 0)].twisted != 0 {
			p.forwardJags(u, l)
		}
	}
}

// clearOutside says of the lanes outside the DEM that they have no lines.
func (p *strip) clearOutside(row *lines, unsure *unsureLines, l span) {
	for k := range marchLanes {
		if k >= l.a && k < l.b {
			continue
		}
		row.clear(k)
		if unsure != nil {
			unsure.clear(k)
		}
	}
}

// forwardSure marches one row where no unknown terrain is within reach and no
// height is missing.
func (p *strip) forwardSure(row *lines, l span) {
	ln := p.f.ln
	minShade, maxNearer, _ := p.f.limitLines()
	switch {
	case ln.places != nil:
		p.forwardTrack(row, l)
	case vectors && l == whole:
		forwardVector(p, row, minShade, maxNearer, 1/ln.cos)
	default:
		st, perCos := &p.fwd, 1/ln.cos
		for k := l.a; k < l.b; k++ {
			h := p.h[k]
			row.shade[k] = float32(max(h+(st.top[k]-p.m[k]), minShade))
			row.nearer[k] = float32(min(h+float64((p.r[k]-st.most[k])*perCos), maxNearer))
		}
		p.forwardMove(row, l)
	}
}

// forwardMove takes the ground of a row into account, all of it known.
func (p *strip) forwardMove(row *lines, l span) {
	st := &p.fwd
	for k := l.a; k < l.b; k++ {
		m, r := p.m[k], p.r[k]
		if m <= st.top[k] {
			st.m[k], st.r[k] = m, r
			row.dip[k] = float32(nan)
			continue
		}
		best, dip := r, 0.0
		if st.m[k] == st.m[k] {
			best, dip = st.edge(k, m, r)
		}
		st.top[k] = m
		if best > st.most[k] {
			st.most[k] = best
		}
		row.dip[k] = float32(dip)
	}
}

// edge returns, for lane k that was hidden at the row before and is lit at m,
// r, the largest slant range of the lit ground between the two rows, and how
// much below r the smallest lies.
func (st *forwardState) edge(k int, m, r float64) (best, dip float64) {
	edge := st.r[k] + float64((st.top[k]-st.m[k])/(m-st.m[k])*(r-st.r[k]))
	st.m[k] = nan
	switch {
	case edge > r:
		return edge, 0
	case edge <= r:
		return r, r - edge
	}
	return r, 0
}

// forwardUnsure marches one row where terrain may be unknown.
func (p *strip) forwardUnsure(row *lines, unsure *unsureLines, l span) {
	st, f, lim := &p.fwd, p.f, &p.f.lim
	minShade, maxNearer, _ := f.limitLines()
	for k := l.a; k < l.b; k++ {
		mk, rk := p.m[k], p.r[k]
		if mk != mk {
			st.unknown[k], st.m[k] = true, nan
			row.clear(k)
			unsure.clear(k)
			continue
		}
		if st.unknown[k] {
			// Unknown terrain ends somewhere between the rows: at worst here.
			st.unknown[k] = false
			high, _ := p.seen(k, lim.ceiling)
			_, far := p.seen(k, lim.low)
			st.topU[k] = max(st.topU[k], high)
			st.mostU[k], st.doubt[k] = max(st.mostU[k], far), max(st.doubt[k], far)
		}
		tk := st.top[k]
		row.shade[k] = float32(max(p.shade(k, tk), minShade))
		row.nearer[k] = float32(min(p.equalRange(k, st.most[k]), maxNearer))
		unsure.shade[k], unsure.nearer[k] = row.shade[k], row.nearer[k]
		if st.topU[k] != tk {
			unsure.shade[k] = float32(max(p.shade(k, st.topU[k]), minShade))
		}
		if st.mostU[k] != st.most[k] {
			unsure.nearer[k] = float32(min(p.equalRange(k, st.mostU[k]), maxNearer))
		}
		if mk <= tk {
			st.m[k], st.r[k] = mk, rk
			row.dip[k] = float32(nan)
			continue
		}
		best, d := rk, 0.0
		if st.m[k] == st.m[k] {
			best, d = st.edge(k, mk, rk)
		}
		st.top[k] = mk
		st.mostU[k] = max(st.mostU[k], best)
		if mk > st.topU[k] {
			st.most[k] = max(st.most[k], best)
		} else {
			st.doubt[k] = max(st.doubt[k], best)
			d = math.Copysign(d, -1)
		}
		row.dip[k] = float32(d)
	}
}

// backwardState is the march towards the radar, by lane.
type backwardState struct {
	least, leastU byLane // smallest slant range of lit ground so far
	doubt         byLane // the same of ground that may be lit or not, or unknown
	unknown       [padLanes]bool
}

// backward walks from far range to near range over what forward left. When it
// has reached a row of cells, with the line that the ground farther away sets,
// it hands the row to cells.
func (p *strip) backward(cells func(u int)) {
	f, st := p.f, &p.bwd
	*st = backwardState{}
	for k := range padLanes {
		st.least[k], st.leastU[k], st.doubt[k] = math.Inf(1), math.Inf(1), math.Inf(1)
	}
	last := p.ub + f.far + 1 // last row at which terrain was unknown or unsure
	for u := p.ub - 1; u >= p.u0; u-- {
		l := p.again(u)
		if !f.sure && !f.lim.openEdge && (l.a > 0 || l.b < marchLanes || u == p.ub-1) {
			if p.entering(l, u, 1, &st.unknown) {
				last = u
			}
		}
		row := p.row(u)
		if !f.sure {
			for k := l.a; k < l.b; k++ {
				if d := row.dip[k]; p.h[k] != p.h[k] || math.Signbit(float64(d)) && d == d {
					last = u
				}
			}
		}
		if last > u && last-u <= f.far && p.freeBackward(l) {
			last = u + f.far + 1
		}
		if last-u > f.far {
			p.sure[u-p.ua] |= 2
			p.backwardSure(row, l)
		} else {
			if last == u || !p.backwardTrackUnsure(row, p.unsureRow(u), l) {
				p.backwardUnsure(row, p.unsureRow(u), l)
			}
		}
		if p.jag.leastOn|p.jags[u-p.ua].twisted != 0 {
			p.putBackwardJags(u, l)
		}
		if u < p.u1 {
			cells(u)
		}
		p.backwardMove(row, u, l)
		if j := &p.jags[u-p.ua]; p.jag.leastOn|j.columns|j.seen != 0 || j.at > 0 {
			p.backwardJags(u, l)
		}
	}
}

func (p *strip) backwardSure(row *lines, l span) {
	st, ln := &p.bwd, p.f.ln
	_, _, minFarther := p.f.limitLines()
	perCos := 1 / ln.cos
	switch {
	case ln.places != nil:
		p.backwardTrack(row, l)
	case vectors && l == whole:
		backwardVector(p, row, minFarther, perCos)
	default:
		for k := l.a; k < l.b; k++ {
			row.farther[k] = float32(max(p.h[k]-float64((st.least[k]-p.r[k])*perCos), minFarther))
		}
	}
}

// backwardMove takes the lit ground of row u into account.
func (p *strip) backwardMove(row *lines, u int, l span) {
	if vectors && l == whole && p.sure[u-p.ua]&1 != 0 {
		backwardMoveVector(p, row)
		return
	}
	st := &p.bwd
	for k := l.a; k < l.b; k++ {
		d := row.dip[k]
		if d != d {
			continue
		}
		e := p.r[k] - math.Abs(float64(d))
		if e < st.leastU[k] {
			st.leastU[k] = e
		}
		if math.Signbit(float64(d)) {
			st.doubt[k] = min(st.doubt[k], e)
		} else if e < st.least[k] {
			st.least[k] = e
		}
	}
}

func (p *strip) backwardUnsure(row *lines, unsure *unsureLines, l span) {
	st, f, lim := &p.bwd, p.f, &p.f.lim
	_, _, minFarther := f.limitLines()
	for k := l.a; k < l.b; k++ {
		if rk := p.r[k]; rk != rk {
			st.unknown[k] = true
			continue
		}
		if st.unknown[k] {
			st.unknown[k] = false
			_, near := p.seen(k, lim.ceiling)
			st.leastU[k], st.doubt[k] = min(st.leastU[k], near), min(st.doubt[k], near)
		}
		row.farther[k] = float32(max(p.equalRange(k, st.least[k]), minFarther))
		if unsure.farther[k] = row.farther[k]; st.leastU[k] != st.least[k] {
			unsure.farther[k] = float32(max(p.equalRange(k, st.leastU[k]), minFarther))
		}
	}
}
