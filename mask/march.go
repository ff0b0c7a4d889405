package mask

import "math"

// strip is a bundle of neighbouring lanes of a field that are marched together:
// few enough that all it touches stays in a processor's cache, also while
// single cells are settled. It takes one column of the lane lattice, so its
// lanes are first ... first+laneStep, the last shared with the next strip.
type strip struct {
	f      *field
	j      int // column of the lattice
	k0     int // first lane
	ua, ub int // rows that are marched
	u0, u1 int // rows with cells

	// At the row that is sampled: column and ground distance of lane k0, and
	// their change for one lane.
	v0, dv, s0, ds float64
	h, m, r        [stripLanes]float64

	// By row from u0 to ub and lane: NaN where the lane is hidden or has no
	// height; else how much less slant range than the sample's own the lit
	// ground begins with, and negative, -0 included, where unknown terrain may
	// hide it.
	dip []float32
	// By row of the cells and lane: the margins that the forward march finds;
	// those ending in U count terrain that the DEM does not show.
	clear, near, clearU, nearU []float32
	// The margins that the backward march finds, of the row it stands at.
	far, farU [stripLanes]float32

	fwd forwardState
	bwd backwardState
}

const stripLanes = laneStep + 1

// span is a range of lanes [a, b) of a strip.
type span struct{ a, b int }

// setUp makes the strip of lattice column j; it returns false when no cell of
// the field lies between its lanes.
func (p *strip) setUp(f *field, j int) bool {
	p.f, p.j, p.k0 = f, j, f.ln.first+laneStep*j
	p.u0, p.u1 = f.u1, f.u0
	for u := f.u0; u < f.u1; u++ {
		if va, vb := p.cells(u); va < vb {
			p.u0, p.u1 = min(p.u0, u), u+1
		}
	}
	if p.u0 >= p.u1 {
		return false
	}
	p.ua, p.ub = max(p.u0-f.near, f.ua), min(p.u1+f.far, f.ub)
	p.dip = resize(p.dip, (p.ub-p.u0)*stripLanes)
	n := (p.u1 - p.u0) * stripLanes
	p.clear, p.near = resize(p.clear, n), resize(p.near, n)
	if !f.sure {
		p.clearU, p.nearU = resize(p.clearU, n), resize(p.nearU, n)
	}
	return true
}

// cells stands at row u and returns the columns [va, vb) of the field's cells
// that lie between the strip's lanes.
func (p *strip) cells(u int) (va, vb int) {
	p.stand(u)
	va = int(math.Ceil(p.v0))
	vb = int(math.Ceil(p.v0 + float64(p.dv*laneStep)))
	return max(va, p.f.v0), min(vb, p.f.v1)
}

// stand takes columns and distances of the lanes at row u from the lattice.
func (p *strip) stand(u int) {
	ln := p.f.ln
	i := min(u/laneStep, ln.nu-2)
	q := float64(u-laneStep*i) / laneStep
	n := i*ln.nk + p.j
	at := func(a []float64, n int) float64 { return a[n] + float64(q*(a[n+ln.nk]-a[n])) }
	p.s0 = at(ln.s, n)
	p.ds = (at(ln.s, n+1) - p.s0) / laneStep
	if ln.uniform {
		p.v0, p.dv = float64(p.k0)+float64(ln.slope*float64(u)), 1
		return
	}
	p.v0 = at(ln.v, n)
	p.dv = (at(ln.v, n+1) - p.v0) / laneStep
}

// inDEM returns the lanes whose column at the row where the strip stands lies
// in the DEM.
func (p *strip) inDEM() span {
	last := float64(p.f.ln.orient.v - 1)
	v := func(k int) float64 { return p.v0 + float64(p.dv*float64(k)) }
	l := span{0, stripLanes}
	if v(0) < 0 {
		l.a = min(int(math.Ceil(-p.v0/p.dv)), stripLanes)
		for l.a > 0 && v(l.a-1) >= 0 {
			l.a--
		}
		for l.a < stripLanes && v(l.a) < 0 {
			l.a++
		}
	}
	if v(stripLanes-1) > last {
		l.b = max(int((last-p.v0)/p.dv)+1, 0)
		for l.b < stripLanes && v(l.b) <= last {
			l.b++
		}
		for l.b > 0 && v(l.b-1) > last {
			l.b--
		}
	}
	l.b = max(l.a, l.b)
	return l
}

// sample stands at row u and fills h, m and r for the lanes in the DEM, which
// it returns.
func (p *strip) sample(u int) span {
	p.stand(u)
	l := p.inDEM()
	f, ln := p.f, p.f.ln
	z, at := f.z[(u-f.ua)*f.width:(u-f.ua+1)*f.width], f.at[u-f.ua]
	h := p.h[l.a:l.b]
	if ln.uniform && len(h) > 0 {
		v := p.v0 + float64(l.a)
		i := math.Floor(v)
		heightsAt(h, z[int(i)-at:], v-i)
	} else {
		v := p.v0 - float64(at)
		for i := range h {
			h[i] = lerp(z, v+float64(p.dv*float64(l.a+i)))
		}
	}
	m, r := p.m[l.a:l.b], p.r[l.a:l.b]
	sin, cos, cot := ln.sin, ln.cos, ln.cot
	for k, h := range h {
		s := p.s0 + float64(p.ds*float64(l.a+k))
		m[k] = h + float64(cot*s)
		r[k] = float64(sin*s) - float64(cos*h)
	}
	return l
}

// forwardState is the march away from the radar, by lane.
type forwardState struct {
	top     [stripLanes]float64 // largest m so far
	topU    [stripLanes]float64 // the same of unknown terrain at the ceiling
	most    [stripLanes]float64 // largest slant range of surely lit ground so far
	mostU   [stripLanes]float64 // the same of all ground that may be lit
	m, r    [stripLanes]float64 // the row before, where it was hidden
	hid     [stripLanes]bool    // the row before was hidden
	unknown [stripLanes]bool    // the row before was unknown terrain
}

func (st *forwardState) reset() {
	*st = forwardState{}
	for k := range stripLanes {
		st.top[k], st.topU[k] = math.Inf(-1), math.Inf(-1)
		st.most[k], st.mostU[k] = math.Inf(-1), math.Inf(-1)
	}
}

// entering marks the lanes that are in the DEM at row u, where they are l, but
// not one row back in direction dir, where the strip is made to stand.
func (p *strip) entering(l span, u, dir int, unknown *[stripLanes]bool) {
	before := span{}
	if back := u + dir; back >= 0 && back < p.f.ln.orient.u {
		p.stand(back)
		before = p.inDEM()
	}
	for k := l.a; k < l.b; k++ {
		if k < before.a || k >= before.b {
			unknown[k] = true
		}
	}
}

// forward walks from near range to far range. The margins are capped at what
// terrain at the edge of the reach could leave, so that they do not depend on
// how much farther the field happens to extend. A tie counts against the point:
// a look angle equal to the largest so far is hidden, an equal slant range is
// folded.
func (p *strip) forward() {
	f := p.f
	p.fwd.reset()
	for u := p.ua; u < p.ub; u++ {
		l := p.sample(u)
		if !f.sure && !f.lim.openEdge && (l.a > 0 || l.b < stripLanes || u == p.ua) {
			p.entering(l, u, -1, &p.fwd.unknown)
		}
		var r forwardRow
		if u >= p.u0 {
			at := (u - p.u0) * stripLanes
			r.dip = p.dip[at : at+stripLanes]
			if u < p.u1 {
				r.clear, r.near = p.clear[at:at+stripLanes], p.near[at:at+stripLanes]
				if !f.sure {
					r.clearU, r.nearU = p.clearU[at:at+stripLanes], p.nearU[at:at+stripLanes]
				}
			}
			r.blank(l)
		}
		if f.sure {
			p.forwardSure(&r, l)
		} else {
			p.forwardUnsure(&r, l)
		}
	}
}

// forwardRow is where the forward march leaves what it finds; nil for what is
// not kept.
type forwardRow struct{ dip, clear, near, clearU, nearU []float32 }

// blank says of the lanes outside the span that nothing is known.
func (r *forwardRow) blank(l span) {
	if l.a == 0 && l.b == stripLanes {
		return
	}
	for _, a := range [][]float32{r.dip, r.clear, r.near, r.clearU, r.nearU} {
		if a != nil {
			fillWith(a[:l.a], float32(nan))
			fillWith(a[l.b:], float32(nan))
		}
	}
}

// caps are the largest margins that the field can vouch for: a row's worth of
// ground more than terrain at the edge of the reach can leave.
func (f *field) caps(h float64) (clear, near, far float64) {
	ln := f.ln
	return h - f.lim.low + ln.rowM, (f.lim.high-h)*ln.cos + ln.rowR, (h-f.lim.low)*ln.cos + ln.rowR
}

// forwardSure marches one row where no unknown terrain is within reach and no
// height is missing.
func (p *strip) forwardSure(row *forwardRow, l span) {
	st, f := &p.fwd, p.f
	if row.clear != nil {
		for k := l.a; k < l.b; k++ {
			c, a, _ := f.caps(p.h[k])
			row.clear[k] = float32(lesser(p.m[k]-st.top[k], c))
			row.near[k] = float32(lesser(p.r[k]-st.most[k], a))
		}
	}
	for k := l.a; k < l.b; k++ {
		mk, rk, tk := p.m[k], p.r[k], st.top[k]
		if mk <= tk {
			st.hid[k] = true
			st.m[k], st.r[k] = mk, rk
			if row.dip != nil {
				row.dip[k] = float32(nan)
			}
			continue
		}
		best, d := rk, 0.0
		if st.hid[k] {
			best, d = st.edge(k, mk, rk)
		}
		st.top[k] = mk
		if best > st.most[k] {
			st.most[k] = best
		}
		if row.dip != nil {
			row.dip[k] = float32(d)
		}
	}
}

// edge returns, for lane k that was hidden at the row before and is lit at m,
// r, the largest slant range of the lit ground between the two rows, and how
// much below r the smallest lies.
func (st *forwardState) edge(k int, m, r float64) (best, dip float64) {
	st.hid[k] = false
	edge := st.r[k] + (st.top[k]-st.m[k])/(m-st.m[k])*(r-st.r[k])
	if edge > r {
		return edge, 0
	}
	return r, r - edge
}

// forwardUnsure marches one row where terrain may be unknown.
func (p *strip) forwardUnsure(row *forwardRow, l span) {
	st, f, lim := &p.fwd, p.f, &p.f.lim
	cos := f.ln.cos
	for k := l.a; k < l.b; k++ {
		mk, h, rk := p.m[k], p.h[k], p.r[k]
		if mk != mk {
			st.unknown[k], st.hid[k] = true, false
			row.blank1(k)
			continue
		}
		if st.unknown[k] {
			// Unknown terrain ends somewhere between the rows: at worst here.
			st.unknown[k] = false
			st.topU[k] = max(st.topU[k], mk+(lim.ceiling-h))
			st.mostU[k] = max(st.mostU[k], rk+(h-lim.low)*cos)
		}
		tk := st.top[k]
		if row.clear != nil {
			c, a, _ := f.caps(h)
			row.clear[k] = float32(lesser(mk-tk, c))
			row.near[k] = float32(lesser(rk-st.most[k], a))
			row.clearU[k] = float32(lesser(mk-st.topU[k], c))
			row.nearU[k] = float32(lesser(rk-st.mostU[k], a))
		}
		if mk <= tk {
			st.hid[k] = true
			st.m[k], st.r[k] = mk, rk
			if row.dip != nil {
				row.dip[k] = float32(nan)
			}
			continue
		}
		best, d := rk, 0.0
		if st.hid[k] {
			best, d = st.edge(k, mk, rk)
		}
		st.top[k] = mk
		st.mostU[k] = max(st.mostU[k], best)
		if mk > st.topU[k] {
			st.most[k] = max(st.most[k], best)
		} else {
			d = math.Copysign(d, -1)
		}
		if row.dip != nil {
			row.dip[k] = float32(d)
		}
	}
}

// blank1 says of lane k that nothing is known.
func (r *forwardRow) blank1(k int) {
	for _, a := range [5][]float32{r.dip, r.clear, r.near, r.clearU, r.nearU} {
		if a != nil {
			a[k] = float32(nan)
		}
	}
}

// lesser is min for numbers that are not NaN, in fewer instructions.
func lesser(a, b float64) float64 {
	if a > b {
		return b
	}
	return a
}

// backwardState is the march towards the radar, by lane.
type backwardState struct {
	least, leastU [stripLanes]float64 // smallest slant range of lit ground so far
	unknown       [stripLanes]bool
}

// backward walks from far range to near range over what forward left. When it
// has reached a row of cells, with the margins to the ground farther away, it
// hands the row to cells.
func (p *strip) backward(cells func(u int)) {
	f, st := p.f, &p.bwd
	*st = backwardState{}
	for k := range stripLanes {
		st.least[k], st.leastU[k] = math.Inf(1), math.Inf(1)
	}
	for u := p.ub - 1; u >= p.u0; u-- {
		l := p.sample(u)
		if !f.sure && !f.lim.openEdge && (l.a > 0 || l.b < stripLanes || u == p.ub-1) {
			p.entering(l, u, 1, &st.unknown)
		}
		if u < p.u1 && (l.a > 0 || l.b < stripLanes) {
			for k := range stripLanes {
				p.far[k], p.farU[k] = float32(nan), float32(nan)
			}
		}
		at := (u - p.u0) * stripLanes
		dip := p.dip[at : at+stripLanes]
		if f.sure {
			p.backwardSure(u, l, dip, cells)
		} else {
			p.backwardUnsure(u, l, dip, cells)
		}
	}
}

func (p *strip) backwardSure(u int, l span, dip []float32, cells func(u int)) {
	st := &p.bwd
	if u < p.u1 {
		for k := l.a; k < l.b; k++ {
			_, _, far := p.f.caps(p.h[k])
			p.far[k] = float32(lesser(st.least[k]-p.r[k], far))
		}
		cells(u)
	}
	for k := l.a; k < l.b; k++ {
		if d := dip[k]; d == d {
			if e := p.r[k] - float64(d); e < st.least[k] {
				st.least[k] = e
			}
		}
	}
}

func (p *strip) backwardUnsure(u int, l span, dip []float32, cells func(u int)) {
	st, f, lim := &p.bwd, p.f, &p.f.lim
	for k := l.a; k < l.b; k++ {
		rk, h := p.r[k], p.h[k]
		if rk != rk {
			st.unknown[k] = true
			p.far[k], p.farU[k] = float32(nan), float32(nan)
			continue
		}
		if st.unknown[k] {
			st.unknown[k] = false
			st.leastU[k] = min(st.leastU[k], rk-(lim.ceiling-h)*f.ln.cos)
		}
		_, _, far := f.caps(h)
		p.far[k] = float32(lesser(st.least[k]-rk, far))
		p.farU[k] = float32(lesser(st.leastU[k]-rk, far))
	}
	if u < p.u1 {
		cells(u)
	}
	for k := l.a; k < l.b; k++ {
		d := dip[k]
		if d != d {
			continue
		}
		e := p.r[k] - math.Abs(float64(d))
		st.leastU[k] = min(st.leastU[k], e)
		if !math.Signbit(float64(d)) {
			st.least[k] = min(st.least[k], e)
		}
	}
}
