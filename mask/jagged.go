package mask

import (
	"math"
	"math/bits"
)

// Lanes pass between cells. Where the heights of a row bend from one cell to the
// next, the ground between two lanes stands above or below the straight line that
// the lanes take it for: by a quarter of the bend in the middle. The slack of the
// margins takes care of small bends. Where one is as large as jagShare rows' worth
// of ground, the ground is jagged: as far as it may set a limit, the limits of the
// two lanes beside it bound nothing, and cells are settled without them.

// jagShare is the bend, in rows' worths of ground, from which on it is jagged: with
// two, up to half a row's worth may hide between two lanes, and a quarter is what the
// slack of a margin holds at least. With one, about as many cells of random grids are
// alone, and more of a mountain's are walked.
const jagShare = 8 * settleShare

// jags are the jagged places of one row: a bit each of its columns, from the one
// after the base of gentle on, and of the lanes beside those. at counts the limits
// that jagged ground sets at the row, from 1 on; 0 where it sets none.
type jags struct {
	columns   uint64
	twisted   uint64 // patches between the row and the next one, the first at the base
	lit, fold uint64 // lanes beside bends large for what hides, for what folds
	dawn      uint64 // see findDawn
	at        int
}

// jagLines are the limits that jagged ground may set at the samples of a row, as
// lines are, for the lanes with a bit set; the others bound nothing.
type jagLines struct {
	shadeOn, nearerOn, fartherOn uint64
	shade, nearer, farther       byLane32
	dim                          uint64 // lanes whose sample may be lit or not
}

// noJags are limits that bound nothing.
var noJags = func() (x jagLines) {
	fillWith(x.shade[:], -noLimit)
	fillWith(x.nearer[:], noLimit)
	fillWith(x.farther[:], -noLimit)
	return x
}()

// jagState is what marches know of jagged ground, by lane: the largest m and slant
// range of such ground so far, the smallest slant range of it on the way back, and
// for which lanes they may set a limit.
type jagState struct {
	m, most, least         byLane
	mOn, mostOn, leastOn   uint64
	bendLit, bendFold, any float32 // the least bends that count
	slackM, slackR         float64
}

// resetJags makes ready for the march of a strip. Lanes that run through the cells
// have nothing between them.
func (p *strip) resetJags() {
	ln := p.f.ln
	st := &p.jag
	st.mOn, st.mostOn, st.leastOn = 0, 0, 0
	st.bendLit, st.bendFold = float32(math.Inf(1)), float32(math.Inf(1))
	if ln.places == nil && !(ln.uniform && ln.slope == 0) {
		st.bendLit, st.bendFold = float32(jagShare*ln.minDS*ln.cot), float32(jagShare*ln.minDS*ln.tan)
	}
	st.any = min(st.bendLit, st.bendFold)
	st.slackM, st.slackR = settleShare*ln.minDS*ln.cot, settleShare*ln.minDS*ln.sin
	p.jags = resize(p.jags, p.ub-p.ua)
	p.jagLines = p.jagLines[:0]
}

// jagsOf returns the limits of jagged ground at row u, nil where there are none.
func (p *strip) jagsOf(u int) *jagLines {
	if n := p.jags[u-p.ua].at; n > 0 {
		return &p.jagLines[n-1]
	}
	return nil
}

// newJags is jagsOf where limits are to be put.
func (p *strip) newJags(u int) *jagLines {
	x := p.jagsOf(u)
	if x == nil {
		p.jagLines = append(p.jagLines, noJags)
		p.jags[u-p.ua].at = len(p.jagLines)
		x = &p.jagLines[len(p.jagLines)-1]
	}
	return x
}

// findDawn finds the lanes that are hidden at the row before row u, where slant range
// may fall on the way to row u: light that begins there shares its slant range with
// what lies behind it, and no lane says where it begins for a cell. So cells beside
// them are doubtful.
func (p *strip) findDawn(u int) {
	g := &p.gentle[u-1-p.ua]
	dip := &p.row(u - 1).dip
	var lanes uint64
	for on := p.lanesOver(u-1, g.base, ^g.rises&between); on != 0; on &= on - 1 {
		if k := bits.TrailingZeros64(on); dip[k] != dip[k] {
			lanes |= 1 << k
		}
	}
	p.jags[u-p.ua].dawn = lanes
}

// findJags finds the jagged ground of row u, of which a are the heights, and between
// it and the next one, of which b are.
func (p *strip) findJags(u int, a, b *byLane42) {
	j := &p.jags[u-p.ua]
	j.columns, j.twisted = bends(a, b, p.jag.any)
}

// bends returns at which heights of row a, but the first and the last, it bends by
// more than a limit, and which of the patches between it and row b twist by more
// than half as much. A height beside a missing one may bend by any amount.
func bends(a, b *byLane42, limit float32) (columns, twisted uint64) {
	for k := range patches - 1 {
		rise := a[k+1] - a[k]
		if bend := (a[k+2] - a[k+1]) - rise; !(abs32(bend) <= limit) && a[k+1] == a[k+1] {
			columns |= 1 << k
		}
		if twist := (b[k+1] - b[k]) - rise; abs32(twist+twist) > limit {
			twisted |= 1 << k
		}
	}
	return columns, twisted
}

// jagged is a jagged place of the row where the strip stands: lane k is the one
// before it. m and r are the extremes there and on the lanes beside it.
type jagged struct {
	k           int
	bend        float32
	m, low, far float64 // the largest m, the smallest and the largest slant range
}

// jagAt looks at jagged column number n of row u; false where it lies beyond the
// lanes l.
func (p *strip) jagAt(u, n int, l span) (j jagged, ok bool) {
	f := p.f
	c := p.gentle[u-p.ua].base + 1 + n
	x := (float64(c) - p.v0) / p.dv
	j.k = int(math.Floor(x))
	if j.k < l.a || j.k+1 >= l.b {
		return j, false
	}
	z := f.z[(u-f.ua)*f.width+c-f.at[u-f.ua]-1:]
	j.bend = abs32((z[2] - z[1]) - (z[1] - z[0]))
	m, r := f.ln.at(p.s0+float64(p.ds*x), float64(z[1]))
	j.m, j.low, j.far = m, r, r
	for k := j.k; k <= j.k+1; k++ {
		if p.m[k] == p.m[k] {
			j.m, j.low, j.far = max(j.m, p.m[k]), min(j.low, p.r[k]), max(j.far, p.r[k])
		}
	}
	return j, true
}

// twistAt looks at twisted patch number n between row u and the next one: the lanes
// of row u or of that one, as here says, that touch it, and what keepMost and
// keepLeast are to have.
func (p *strip) twistAt(u, n, here int, l span) (lanes uint64, j jagged) {
	f := p.f
	c := p.gentle[u-p.ua].base + n
	j.m, j.low, j.far = math.Inf(-1), math.Inf(1), math.Inf(-1)
	for w := u; w <= u+1; w++ {
		a := p.footingOf(w)
		z := f.z[(w-f.ua)*f.width+c-f.at[w-f.ua]:]
		for i := range 2 {
			x := (float64(c+i) - a.v0) / a.dv
			m, r := f.ln.at(a.s0+float64(a.ds*x), float64(z[i]))
			j.m, j.low, j.far = max(j.m, m), min(j.low, r), max(j.far, r)
		}
	}
	return l.inside(p.lanesOver(here, c, 1)), j
}

// keepMost has lane k know of jagged ground that reaches x, and keepLeast of ground that
// comes down to it.
func keepMost(a *byLane, on *uint64, k int, x float64) {
	if bit := uint64(1) << k; *on&bit == 0 || !(a[k] >= x) {
		a[k], *on = x, *on|bit
	}
}

func keepLeast(a *byLane, on *uint64, k int, x float64) {
	if bit := uint64(1) << k; *on&bit == 0 || !(a[k] <= x) {
		a[k], *on = x, *on|bit
	}
}

// inside returns the bits of lanes that are in a span.
func (l span) inside(lanes uint64) uint64 { return lanes & (1<<l.b - 1<<l.a) }

// forwardJags follows jagged ground away from the radar: at row u, where the march
// stands with the ground of the row taken into account.
func (p *strip) forwardJags(u int, l span) {
	st := &p.jag
	j := &p.jags[u-p.ua]
	var twisted uint64
	if u > p.ua {
		twisted = p.jags[u-1-p.ua].twisted
	}
	for c := twisted; c != 0; c &= c - 1 {
		lanes, x := p.twistAt(u-1, bits.TrailingZeros64(c), u, l)
		j.lit, j.fold = j.lit|lanes, j.fold|lanes
		before := &p.jags[u-1-p.ua]
		before.lit, before.fold = before.lit|lanes, before.fold|lanes
		for on := lanes; on != 0; on &= on - 1 {
			k := bits.TrailingZeros64(on)
			keepMost(&st.m, &st.mOn, k, x.m)
			keepMost(&st.most, &st.mostOn, k, x.far)
		}
	}
	if st.mOn, st.mostOn = l.inside(st.mOn), l.inside(st.mostOn); st.mOn|st.mostOn != 0 {
		p.putForwardJags(u)
	}
	for c := j.columns; c != 0; c &= c - 1 {
		x, ok := p.jagAt(u, bits.TrailingZeros64(c), l)
		if !ok {
			continue
		}
		beside := uint64(3) << x.k
		if !(x.bend <= st.bendLit) {
			j.lit |= beside
		}
		if !(x.bend <= st.bendFold) {
			j.fold |= beside
		}
		for k := x.k; k <= x.k+1; k++ {
			keepMost(&st.m, &st.mOn, k, x.m)
			keepMost(&st.most, &st.mostOn, k, x.far)
		}
	}
	// What lies well below other ground sets no limit.
	for on := st.mOn; on != 0; on &= on - 1 {
		if k := bits.TrailingZeros64(on); !(st.m[k] >= p.fwd.top[k]-st.slackM) {
			st.mOn &^= 1 << k
		}
	}
	for on := st.mostOn; on != 0; on &= on - 1 {
		if k := bits.TrailingZeros64(on); !(st.most[k] >= p.fwd.most[k]-st.slackR) {
			st.mostOn &^= 1 << k
		}
	}
}

// putForwardJags puts the limits of row u that jagged ground before it may set. A
// sample that jagged ground may hide counts as such from here on.
func (p *strip) putForwardJags(u int) {
	st := &p.jag
	x := p.newJags(u)
	minShade, maxNearer, _ := p.f.limitLines()
	for on := st.mostOn; on != 0; on &= on - 1 {
		k := bits.TrailingZeros64(on)
		if h := p.h[k] + (p.r[k]-st.most[k])/p.f.ln.cos; h < maxNearer {
			x.nearer[k], x.nearerOn = float32(h), x.nearerOn|1<<k
		}
	}
	for on := st.mOn; on != 0; on &= on - 1 {
		k := bits.TrailingZeros64(on)
		h := p.h[k] + (st.m[k] - p.m[k])
		if !(h > minShade) {
			continue
		}
		x.shade[k], x.shadeOn = float32(h), x.shadeOn|1<<k
		if p.m[k] <= st.m[k]+st.slackM {
			x.dim |= 1 << k
			keepMost(&st.most, &st.mostOn, k, p.r[k])
		}
	}
}

// putBackwardJags is putForwardJags for the ground farther away.
func (p *strip) putBackwardJags(u int, l span) {
	st := &p.jag
	for c := p.jags[u-p.ua].twisted; c != 0; c &= c - 1 {
		lanes, x := p.twistAt(u, bits.TrailingZeros64(c), u, l)
		for on := lanes; on != 0; on &= on - 1 {
			keepLeast(&st.least, &st.leastOn, bits.TrailingZeros64(on), x.low)
		}
	}
	if st.leastOn = l.inside(st.leastOn); st.leastOn == 0 {
		return
	}
	x := p.newJags(u)
	_, _, minFarther := p.f.limitLines()
	for on := st.leastOn; on != 0; on &= on - 1 {
		k := bits.TrailingZeros64(on)
		if h := p.h[k] - (st.least[k]-p.r[k])/p.f.ln.cos; h > minFarther {
			x.farther[k], x.fartherOn = float32(h), x.fartherOn|1<<k
		}
	}
}

// backwardJags follows jagged ground towards the radar, as forwardJags.
func (p *strip) backwardJags(u int, l span) {
	st := &p.jag
	j := &p.jags[u-p.ua]
	for c := j.columns; c != 0; c &= c - 1 {
		x, ok := p.jagAt(u, bits.TrailingZeros64(c), l)
		if ok {
			keepLeast(&st.least, &st.leastOn, x.k, x.low)
			keepLeast(&st.least, &st.leastOn, x.k+1, x.low)
		}
	}
	if x := p.jagsOf(u); x != nil {
		for on := x.dim; on != 0; on &= on - 1 {
			k := bits.TrailingZeros64(on)
			keepLeast(&st.least, &st.leastOn, k, p.r[k])
		}
	}
	for on := st.leastOn; on != 0; on &= on - 1 {
		if k := bits.TrailingZeros64(on); !(st.least[k] <= p.bwd.least[k]+st.slackR) {
			st.leastOn &^= 1 << k
		}
	}
}

// roughenJags has all cells be doubtful that lie beside lanes where jagged ground may
// set the limit, or beside jagged ground itself.
func (r *laneMargins) roughenJags(p *strip, u int) {
	j := &p.jags[u-p.ua]
	if j.lit|j.fold == 0 && j.at == 0 {
		return
	}
	lit, near, far := j.lit, j.fold, j.fold
	if x := p.jagsOf(u); x != nil {
		lit, near, far = lit|x.shadeOn, near|x.nearerOn, far|x.fartherOn
	}
	roughen(&r.roughM, lit)
	roughen(&r.roughN, near)
	roughen(&r.roughF, far)
}

// roughen makes the slack infinite in the gaps on both sides of lanes.
func roughen(rough *byLane32, lanes uint64) {
	for gaps := (lanes | lanes>>1) & (1<<(laneStep+1) - 2); gaps != 0; gaps &= gaps - 1 {
		rough[bits.TrailingZeros64(gaps)] = float32(math.Inf(1))
	}
}

// besideLane reports whether lane k or the one after it is among lanes.
func besideLane(lanes uint64, k, next int) bool { return lanes>>k&1|lanes>>next&1 != 0 }
