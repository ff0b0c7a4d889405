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
	seen      uint64 // gaps in which all ground of the row is surely lit
	dawn      uint64 // see findDawn
	at        int
}

// jagLines are the limits that jagged ground may set at the samples of a row, as
// lines are, for the lanes with a bit set; the others bound nothing.
type jagLines struct {
	shadeOn, nearerOn, fartherOn uint64
	shade, nearer, farther       byLane32
	least                        assured
	dim                          uint64 // lanes whose sample may be lit or not
}

// assured is what ground near jagged ground sets as a limit for all range lines
// between a lane and the next: the m that it reaches, and the slant ranges of lit
// ground, nearer and farther. Infinite where it sets none.
type assured struct{ shade, nearer, farther byLane }

// reset says that no ground sets a limit.
func (x *assured) reset() {
	for k := range padLanes {
		x.shade[k], x.nearer[k], x.farther[k] = math.Inf(-1), math.Inf(-1), math.Inf(1)
	}
}

// noJags are limits that bound nothing.
var noJags = func() (x jagLines) {
	fillWith(x.shade[:], -noLimit)
	fillWith(x.nearer[:], noLimit)
	fillWith(x.farther[:], -noLimit)
	x.least.reset()
	return x
}()

// jagState is what marches know of jagged ground, by lane: the largest m and slant
// range of such ground so far, the smallest slant range of it on the way back, and
// for which lanes they may set a limit.
type jagState struct {
	m, most, least       byLane
	mOn, mostOn, leastOn uint64
	sure                 assured
	jagLimits
}

// jagLimits are the least bends that count, for what hides and for what folds, metres,
// and a quarter of a row's worth of m and of slant range.
type jagLimits struct {
	bendLit, bendFold, any float32
	slackM, slackR         float64
}

// resetJags makes ready for the march of a strip. Lanes that run through the cells
// have nothing between them.
func (p *strip) resetJags() {
	ln := p.f.ln
	st := &p.jag
	st.mOn, st.mostOn, st.leastOn = 0, 0, 0
	st.sure.reset()
	if ln.places == nil {
		st.jagLimits = jagLimitsOf(ln, ln.sin, ln.cos, 1)
		if ln.uniform && ln.slope == 0 {
			st.noBends()
		}
	}
	p.jags = resize(p.jags, p.ub-p.ua)
	p.jagLines = p.jagLines[:0]
}

// jagLimitsOf returns the limits for an incidence of a sine and cosine, where a metre
// of height is worth gain of m.
func jagLimitsOf(ln *lanes, sin, cos, gain float64) (l jagLimits) {
	row := ln.minDS
	l.bendLit, l.bendFold = float32(jagShare*row*cos/sin), float32(jagShare*row*sin/cos)
	l.any = min(l.bendLit, l.bendFold)
	l.slackM, l.slackR = settleShare*row*cos/sin*gain, settleShare*row*sin
	return l
}

// noBends says that no bend counts.
func (l *jagLimits) noBends() {
	l.bendLit, l.bendFold = float32(math.Inf(1)), float32(math.Inf(1))
	l.any = l.bendLit
}

// limitJags finds the limits of a track for the row where the strip stands: the
// least bends and the largest slacks of those at the lanes at its edges that are in
// the DEM, and at the lowest and the highest ground. Jagged ground is not looked for where all those lie under the
// track or above the antenna.
func (p *strip) limitJags() {
	ln, lim, st := p.f.ln, &p.f.lim, &p.jag
	if ln.places == nil || ln.fan != nil {
		return
	}
	st.noBends()
	st.slackM, st.slackR = 0, 0
	if p.in.a == p.in.b {
		return
	}
	for _, k := range [2]int{p.in.a, p.in.b - 1} {
		q := p.placeOf(k)
		for _, h := range [2]float64{lim.low, lim.high} {
			sin, cos := ln.angle(&q, h)
			if !(q.x > 0 && cos > 0) {
				continue
			}
			l := jagLimitsOf(ln, sin, cos, ln.viewM(&q, h+1)-ln.viewM(&q, h))
			st.bendLit, st.bendFold, st.any = min(st.bendLit, l.bendLit), min(st.bendFold, l.bendFold), min(st.any, l.any)
			st.slackM, st.slackR = max(st.slackM, l.slackM), max(st.slackR, l.slackR)
		}
	}
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
	for on := p.lanesOver(u-1, g.base, ^g.rises); on != 0; on &= on - 1 {
		if k := bits.TrailingZeros64(on); dip[k] != dip[k] {
			lanes |= 1 << k
		}
	}
	p.jags[u-p.ua].dawn = lanes
}

// findJags finds the jagged ground of row u, of which a are the heights, and between
// it and the next one, of which b are.
func (p *strip) findJags(u int, a, b *patchRow) {
	j := &p.jags[u-p.ua]
	j.columns, j.twisted = bends(a, b, p.jag.any)
}

// bends returns at which heights of row a, but the first and the last, it bends by
// more than a limit, and which of the patches between it and row b twist by more
// than half as much. A height beside a missing one may bend by any amount.
func bends(a, b *patchRow, limit float32) (columns, twisted uint64) {
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
	m, r := p.seenAt(x, float64(z[1]))
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
			if m, r := p.seenFrom(w, x, float64(z[i])); !math.IsInf(m, -1) {
				j.m, j.low, j.far = max(j.m, m), min(j.low, r), max(j.far, r)
			}
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
	beside := p.followTwists(u, l)
	if st.mOn, st.mostOn = l.inside(st.mOn), l.inside(st.mostOn); st.mOn|st.mostOn != 0 {
		p.putForwardJags(u)
	}
	beside |= p.followBends(u, l)
	for gaps := l.gaps(beside | beside>>1); gaps != 0; gaps &= gaps - 1 {
		p.assure(u, bits.TrailingZeros64(gaps))
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

// followTwists has the march know of the twisted patches before row u, and returns
// the lanes that touch them.
func (p *strip) followTwists(u int, l span) (beside uint64) {
	if u == p.ua {
		return 0
	}
	st := &p.jag
	before, j := &p.jags[u-1-p.ua], &p.jags[u-p.ua]
	for c := before.twisted; c != 0; c &= c - 1 {
		lanes, x := p.twistAt(u-1, bits.TrailingZeros64(c), u, l)
		beside |= lanes
		for on := lanes; on != 0; on &= on - 1 {
			k := bits.TrailingZeros64(on)
			keepMost(&st.m, &st.mOn, k, x.m)
			keepMost(&st.most, &st.mostOn, k, x.far)
		}
	}
	j.lit, j.fold = j.lit|beside, j.fold|beside
	before.lit, before.fold = before.lit|beside, before.fold|beside
	return beside
}

// followBends is followTwists for the bends of row u, and returns the lanes beside
// them.
func (p *strip) followBends(u int, l span) (beside uint64) {
	st := &p.jag
	j := &p.jags[u-p.ua]
	for c := j.columns; c != 0; c &= c - 1 {
		x, ok := p.jagAt(u, bits.TrailingZeros64(c), l)
		if !ok {
			continue
		}
		both := uint64(3) << x.k
		beside |= both
		if !(x.bend <= st.bendLit) {
			j.lit |= both
		}
		if !(x.bend <= st.bendFold) {
			j.fold |= both
		}
		for k := x.k; k <= x.k+1; k++ {
			keepMost(&st.m, &st.mOn, k, x.m)
			keepMost(&st.most, &st.mostOn, k, x.far)
		}
	}
	return beside
}

// gaps returns the bits of the gaps between two lanes of a span.
func (l span) gaps(lanes uint64) uint64 { return lanes & (1<<max(l.b-1, l.a) - 1<<l.a) }

// extremes returns the least m and the smallest and largest slant range of the ground
// of the row where the strip stands between lane k and the next; false where a height
// is missing.
func (p *strip) extremes(u, k int) (m, low, far float64, ok bool) {
	f := p.f
	m, low, far = min(p.m[k], p.m[k+1]), min(p.r[k], p.r[k+1]), max(p.r[k], p.r[k+1])
	base := (u-f.ua)*f.width - f.at[u-f.ua]
	last := int(p.column(float64(k + 1)))
	for c := int(p.column(float64(k))) + 1; c <= last; c++ {
		x := (float64(c) - p.v0) / p.dv
		n, r := p.seenAt(x, float64(f.z[base+c]))
		m, low, far = min(m, n), min(low, r), max(far, r)
	}
	return m, low, far, m == m && far == far
}

// assure has what follows know of the limits that the ground of row u surely sets in
// gap k.
func (p *strip) assure(u, k int) {
	m, low, _, ok := p.extremes(u, k)
	if !ok {
		return
	}
	st := &p.jag.sure
	st.shade[k] = max(st.shade[k], m)
	if p.sure[u-p.ua]&1 != 0 && m > p.highest(u, k) {
		st.nearer[k] = max(st.nearer[k], low)
		p.jags[u-p.ua].seen |= 1 << k
	}
}

// highest returns the largest m that hides ground at row u in gap k, or more, but for
// the slack: a line may cross a bend up to a row after the row at which it counts.
func (p *strip) highest(u, k int) float64 {
	row := p.row(u)
	a, _ := p.seen(k, float64(row.shade[k]))
	b, _ := p.seen(k+1, float64(row.shade[k+1]))
	x := around(a, b, settleShare/p.jag.slackM).high
	if j := p.jagsOf(u); j != nil {
		for i := k; i <= k+1; i++ {
			if j.shadeOn>>i&1 != 0 {
				m, _ := p.seen(i, float64(j.shade[i]))
				x = max(x, m)
			}
		}
	}
	return x + (1/settleShare-1)*p.jag.slackM
}

// putForwardJags puts the limits of row u that jagged ground before it may set. A
// sample that jagged ground may hide counts as such from here on.
func (p *strip) putForwardJags(u int) {
	st := &p.jag
	x := p.newJags(u)
	for gaps := st.mOn | st.mostOn | (st.mOn|st.mostOn)>>1; gaps != 0; gaps &= gaps - 1 {
		k := bits.TrailingZeros64(gaps)
		x.least.shade[k], x.least.nearer[k] = st.sure.shade[k], st.sure.nearer[k]
	}
	minShade, maxNearer, _ := p.f.limitLines()
	for on := st.mostOn; on != 0; on &= on - 1 {
		k := bits.TrailingZeros64(on)
		if h := p.equalRange(k, st.most[k]); h < maxNearer {
			x.nearer[k], x.nearerOn = float32(h), x.nearerOn|1<<k
		}
	}
	for on := st.mOn; on != 0; on &= on - 1 {
		k := bits.TrailingZeros64(on)
		h := p.shade(k, st.m[k])
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
	for gaps := st.leastOn | st.leastOn>>1; gaps != 0; gaps &= gaps - 1 {
		k := bits.TrailingZeros64(gaps)
		x.least.farther[k] = st.sure.farther[k]
	}
	_, _, minFarther := p.f.limitLines()
	for on := st.leastOn; on != 0; on &= on - 1 {
		k := bits.TrailingZeros64(on)
		if h := p.equalRange(k, st.least[k]); h > minFarther {
			x.farther[k], x.fartherOn = float32(h), x.fartherOn|1<<k
		}
	}
}

// backwardJags follows jagged ground towards the radar, as forwardJags.
func (p *strip) backwardJags(u int, l span) {
	p.limitJags()
	st := &p.jag
	j := &p.jags[u-p.ua]
	for c := j.columns; c != 0; c &= c - 1 {
		x, ok := p.jagAt(u, bits.TrailingZeros64(c), l)
		if ok {
			keepLeast(&st.least, &st.leastOn, x.k, x.low)
			keepLeast(&st.least, &st.leastOn, x.k+1, x.low)
		}
	}
	for gaps := j.seen; gaps != 0; gaps &= gaps - 1 {
		k := bits.TrailingZeros64(gaps)
		if _, _, far, ok := p.extremes(u, k); ok {
			st.sure.farther[k] = min(st.sure.farther[k], far)
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

// roughenJags widens the slack of cells between lanes where jagged ground may set the
// limit, by as much as that may lie beside what the lanes say, and makes that of cells
// beside jagged ground itself infinite, and of all these where terrain may be unknown
// and for platforms.
func (r *laneMargins) roughenJags(p *strip, u int) {
	j := &p.jags[u-p.ua]
	r.jagged = gapsBeside(j.lit | j.fold)
	r.roughM[0], r.roughN[0], r.roughF[0] = 0, 0, 0
	x := p.jagsOf(u)
	if x != nil {
		r.jagged |= gapsBeside(x.shadeOn | x.nearerOn | x.fartherOn)
	}
	bounded := r.sure && p.f.ln.places == nil
	if x != nil && bounded {
		row, per := p.row(u), 1/p.f.ln.cos
		minShade, maxNearer, minFarther := p.f.limitLines()
		if x.shadeOn != 0 {
			r.widen(p, &r.clear, &r.roughM, &jagSide{x.shadeOn, &row.shade, &x.shade, &x.least.shade, &p.m, -1, 1, 1, float32(minShade)})
		}
		if x.nearerOn != 0 {
			r.widen(p, &r.near, &r.roughN, &jagSide{x.nearerOn, &row.nearer, &x.nearer, &x.least.nearer, &p.r, per, -1, r.cos, float32(maxNearer)})
		}
		if x.fartherOn != 0 {
			r.widen(p, &r.far, &r.roughF, &jagSide{x.fartherOn, &row.farther, &x.farther, &x.least.farther, &p.r, per, 1, r.cos, float32(minFarther)})
		}
	}
	unseen := p.beyondPatches(u)
	r.jagged |= gapsBeside(unseen)
	lit, near, far := j.lit|unseen, j.fold|unseen, j.fold|unseen
	if x != nil && !bounded { // the lines with unknown terrain may lie elsewhere
		lit, near, far = lit|x.shadeOn, near|x.nearerOn, far|x.fartherOn
	}
	roughen(&r.roughM, lit)
	roughen(&r.roughN, near)
	roughen(&r.roughF, far)
}

// beyondPatches returns the lanes of row u beyond the columns in which jagged ground is
// looked for: none but where lanes spread by a tenth, on wide grids near a pole.
func (p *strip) beyondPatches(u int) (lanes uint64) {
	last := float64(p.gentle[u-p.ua].base + patches - 1)
	for k := marchLanes - 1; k > 0 && p.column(float64(k)) > last; k-- {
		lanes |= 1 << k
	}
	return lanes
}

// jagSide is one of the limits of a row where jagged ground may set it for the lanes
// on: the lanes' own line, that of jagged ground, and what is assured of a gap, in the
// measure at of the lanes' ground, of which a metre of height is worth -1 / per.
type jagSide struct {
	on          uint64
	line, jag   *byLane32
	least, at   *byLane
	per         float64
	sign, scale float32 // 1 where ground counts that is higher, else -1; metres of margin for one of height
	end         float32 // see limitLines
}

// widen makes rough at least what the margins between lanes may be wrong by.
func (r *laneMargins) widen(p *strip, margin, rough *byLane32, x *jagSide) {
	for gaps := gapsBeside(x.on); gaps != 0; gaps &= gaps - 1 {
		k := bits.TrailingZeros64(gaps)
		below, above := r.sides(margin, k)
		d := rough[k]
		for i := k; i <= k+1; i++ {
			if below {
				least := float32(p.h[i] + float64((x.at[i]-x.least[k])*x.per))
				d = max(d, min((x.line[i]-least)*x.sign, (x.line[i]-x.end)*x.sign)*x.scale)
			}
			if above && x.on>>i&1 != 0 {
				d = max(d, (x.jag[i]-x.line[i])*x.sign*x.scale)
			}
		}
		rough[k] = d
	}
}

// gapsBeside returns the gaps on both sides of lanes.
func gapsBeside(lanes uint64) uint64 { return (lanes | lanes>>1) & (1<<(laneStep+1) - 1) }

// sides reports whether margins between lane k and the next may be negative, and
// whether they may be positive.
func (r *laneMargins) sides(a *byLane32, k int) (below, above bool) {
	return !(a[k] > 0 && a[k+1] > 0), !(a[k] < 0 && a[k+1] < 0)
}

// roughen makes the slack infinite in the gaps on both sides of lanes.
func roughen(rough *byLane32, lanes uint64) {
	for gaps := gapsBeside(lanes); gaps != 0; gaps &= gaps - 1 {
		rough[bits.TrailingZeros64(gaps)] = float32(math.Inf(1))
	}
}

// besideLane reports whether lane k or the one after it is among lanes.
func besideLane(lanes uint64, k, next int) bool { return lanes>>k&1|lanes>>next&1 != 0 }
