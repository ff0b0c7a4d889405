package mask

import "math"

// settleShare is the part of one row's worth of ground under which a margin is
// doubtful, since lanes sample the surface about once a cell.
const settleShare = 0.25

// roughShare is the part of the difference between two lanes by which the slack
// grows at least.
const roughShare = 0.25

// roughGrowth lets that part grow with the difference, counted in rows' worths
// of ground: where neighbouring lanes have little in common, they bound nothing.
const roughGrowth = 1

// foldUnknown is the raw code of a lit cell that is folded or not depending on
// terrain that the DEM does not show. It never leaves the package.
const foldUnknown Class = 51

// classify marches the field strip by strip, interpolates the lanes' margins to
// the cells, settles the doubtful ones and leaves the raw codes, with the
// margins when they are wanted.
func (t *sheet) classify(f *field, p *strip, wk *walker) {
	t.turned = f.ln.transposed && f.ln.fan == nil
	if t.turned { // rows stay together while the strips are marched
		t.findings, t.beside = t.beside, t.findings
		t.raw = resize(t.raw, t.w.Rows*t.w.Cols)
	}
	t.room()
	for j := range f.strips {
		if p.setUp(f, f.first+j) {
			p.forward()
			p.backward(func(u int) { t.classifyRow(p, wk, u) })
		}
	}
	if t.turned {
		t.findings, t.beside = t.beside, t.findings
		t.room()
		t.turn(f.ln.flip)
	}
}

// room makes room for what is wanted beside the raw codes.
func (t *sheet) room() {
	n := t.w.Rows * t.w.Cols
	if t.wantClear {
		t.clear = resize(t.clear, n)
	}
	if t.wantFold {
		t.fold = resize(t.fold, n)
	}
	if t.bin > 0 {
		t.returns, t.share = resize(t.returns, n), resize(t.share, n)
	}
}

// turn brings the findings beside, which are those of transposed rows, to the
// grid's own.
func (t *sheet) turn(flip bool) {
	rows, cols := t.w.Rows, t.w.Cols
	turnBytes(t.raw, t.beside.raw, rows, cols, flip)
	if t.wantClear {
		turnNumbers(t.clear, t.beside.clear, rows, cols, flip)
	}
	if t.wantFold {
		turnNumbers(t.fold, t.beside.fold, rows, cols, flip)
	}
	if t.bin > 0 {
		turnNumbers(t.returns, t.beside.returns, rows, cols, flip)
		turnNumbers(t.share, t.beside.share, rows, cols, flip)
	}
}

// place returns the index in the findings of marching position (u, v) and the
// stride of v.
func (t *sheet) place(f *field, u, v int) (at, stride int) {
	o := f.ln.orient
	a := u
	if o.flip {
		a = o.u - 1 - u
	}
	switch {
	case t.turned && o.flip:
		return (t.w.Cols-1-(a-t.w.Col))*t.w.Rows + v - t.w.Row, 1
	case t.turned:
		return (a-t.w.Col)*t.w.Rows + v - t.w.Row, 1
	case o.transposed:
		return (v-t.w.Row)*t.w.Cols + a - t.w.Col, t.w.Cols
	}
	return (a-t.w.Row)*t.w.Cols + v - t.w.Col, 1
}

// classifyRow classifies the strip's cells of row u, at which the backward march
// stands.
func (t *sheet) classifyRow(p *strip, wk *walker, u int) {
	f := p.f
	p.stand(u)
	va, vb := p.va, p.vb
	if va >= vb {
		return
	}
	z, base := f.z[(u-f.ua)*f.width:], f.at[u-f.ua]
	t.margins.fill(p, u, p.sure[u-p.ua] == 3)
	line := p.line()
	bundles := vectors && t.bin == 0 && vb-va >= bundle
	first, straight := line.follow(va, vb-va)
	if bundles {
		t.mixed.stand(t, p, wk, u, &line)
	}
	for v := va; v < vb; v++ {
		if bundles {
			from := min(v, vb-bundle)
			k, ok := first+from-va, straight
			if !straight {
				k, ok = line.follow(from, bundle)
			}
			if ok {
				t.classifyBundle(from, v-from, k, (*[bundle]float32)(z[from-base:]))
				v = from + bundle - 1
				continue
			}
		}
		k, w := line.at(v)
		if k < 1 || k > laneStep { // by rounding, at the strip's own edge
			k, w = min(max(k, 1), laneStep), float32(k/laneStep)
		}
		t.classifyCell(p, wk, u, v, k, w, z[v-base])
	}
}

// bundle is the number of cells that a vector holds.
const bundle = 8

// mixed is a bundle of cells of a row, the first at (u, v) after lane k: where it
// stands, what the lanes say of its cells, and what is kept for those that are looked
// at by themselves.
type mixed struct {
	*strip
	*laneMargins
	walk                   *walker
	up                     lineUp
	u                      int
	at, stride             int  // index in the findings of column 0 of the row, and for one more
	plain                  bool // where all are open, that is all
	v, k                   int
	z                      *[bundle]float32
	w, clear, near, far    [bundle]float32
	wideM, wideN, wideG    [bundle]float32 // the slacks
	doubtM, doubtN, doubtG uint8           // which margins are doubtful
	scattered              [2][bundle]float32
	way                    way
}

// stand has bundles stand at row u.
func (c *mixed) stand(t *sheet, p *strip, wk *walker, u int, line *lineUp) {
	c.strip, c.laneMargins, c.walk, c.u, c.up = p, &t.margins, wk, u, *line
	c.at, c.stride = t.place(p.f, u, 0)
	c.plain = c.stride == 1 && t.margins.sure && !t.margins.exact
}

// lineUp says where the columns of a row lie between the lanes of a strip: column
// first beyond lane k by w lanes, every next column by a lane and dw more.
type lineUp struct {
	first, k int
	w, dw    float32
}

// line returns the line-up of the row where the strip stands. It does not depend
// on which of its cells are asked for.
func (p *strip) line() lineUp {
	per := 1 / p.dv
	first := int(math.Ceil(p.edgeA))
	x := (float64(first) - p.v0) * per
	k := int(x + onLane)
	return lineUp{first: first, k: k, w: float32(x - float64(k)), dw: float32(per - 1)}
}

// at returns the lane before column v, or under it, and how far, in lanes, the
// column lies beyond it; 0 where it lies on it.
func (l *lineUp) at(v int) (k int, w float32) {
	k = l.k + v - l.first
	w = l.w + float32(l.dw*float32(v-l.first))
	if w < -onLane || w >= 1-onLane {
		n := math.Floor(float64(w) + onLane)
		k, w = k+int(n), w-float32(n)
	}
	if w < onLane {
		w = 0
	}
	return k, w
}

// follow returns the lane before column v, and whether the lanes before it and the
// n - 1 columns after it follow each other and are the strip's own.
func (l *lineUp) follow(v, n int) (k int, ok bool) {
	k, _ = l.at(v)
	last, _ := l.at(v + n - 1)
	return k, last == k+n-1 && k >= 1 && last <= laneStep
}

// mix interpolates between two lanes.
func mix(x, y, w float32) float32 { return x + float32(w*(y-x)) }

func abs32(x float32) float32 { return math.Float32frombits(math.Float32bits(x) &^ (1 << 31)) }

// classifyCell classifies the cell (u, v) of height h between lanes k and k+1.
func (t *sheet) classifyCell(p *strip, wk *walker, u, v, k int, w, h float32) {
	i, _ := t.place(p.f, u, v)
	if h != h {
		t.raw[i] = uint8(NoData)
		t.keep(i, h, h)
		if t.bin > 0 {
			t.returns[i], t.share[i] = h, h
		}
		return
	}
	var m lane
	doubt := t.margins.at(k, w, h, &m)
	folds := doubt&^(doubtClear|doubtClearU) != 0
	if folds && p.steep(u, v) { // layover by its own slope, whatever shares its range
		doubt &= doubtClear | doubtClearU
	}
	if doubt != 0 {
		t.ask(p, wk, u, v, k, w, &m, doubt)
	}
	fold := t.set(i, &m)
	if t.bin > 0 {
		if m.clearU > 0 {
			t.count(p, wk, u, v, i, fold)
		} else {
			t.returns[i], t.share[i] = float32(nan), float32(nan)
		}
	}
}

// set stores what a cell's margins say and returns its fold margin.
func (t *sheet) set(i int, m *lane) (fold float32) {
	t.raw[i] = uint8(m.raw())
	fold = float32(nan)
	if m.clear > 0 {
		fold = min(m.near, m.far)
	}
	t.keep(i, m.clear, fold)
	return fold
}

// ask settles a doubtful cell.
func (t *sheet) ask(p *strip, wk *walker, u, v, k int, w float32, m *lane, doubt doubts) {
	if sum := m.clear + m.near + m.far + m.clearU + m.nearU + m.farU; sum != sum {
		t.settle(p.f, wk, u, v, m)
		return
	}
	next := k + 1
	if w == 0 {
		next = k
	}
	x := (float64(v) - p.v0) / p.dv
	if doubt&doubtClear != 0 && p.shadowed(u, v, x) {
		m.clear = signed(m.clear, false, t.margins.tinyM)
		return
	}
	wk.quick(p, u, v, k, next, x, m, doubt, float64(t.margins.slackM), float64(t.margins.slackR))
}

// count fills what shares the slant range of a cell. Where nothing comes within
// a bin, the cell is alone.
func (t *sheet) count(p *strip, wk *walker, u, v, i int, fold float32) {
	t.returns[i], t.share[i] = 1, 1
	if fold != fold {
		t.returns[i], t.share[i] = fold, fold
	} else if float64(fold) < t.bin || p.steep(u, v) {
		n, share := wk.returns(p.f, u, v, t.bin)
		t.returns[i], t.share[i] = float32(n), float32(share)
	}
}

// laneMargins are the lanes' margins along one row.
type laneMargins struct {
	clear, near, far    byLane32
	clearU, nearU, farU byLane32
	h                   byLane32 // heights
	sure                bool     // the U margins are those without
	exact               bool     // lanes run through cell centres
	of                  *lanes   // the look that the following are of; of a platform: at the row
	// The slack, and how much roughness widens it between a lane and the next.
	slackM, slackR         float32
	perM, perR             float32 // rows a metre
	tinyM, tinyR           float32 // see atLimit
	cos                    float32 // slant range for a metre of height
	roughM, roughN, roughF byLane32
	jagged                 uint64 // gaps beside jagged ground or ground that it sets limits for
}

// fill takes the margins from the lines and the heights of the row that the
// strip has sampled.
func (r *laneMargins) fill(p *strip, u int, sure bool) {
	ln := p.f.ln
	cosine := ln.cos
	switch {
	case ln.places != nil:
		mid := p.placeOf(1 + laneStep/2)
		var sin float64
		sin, cosine = ln.angle(&mid, p.middleHeight())
		r.scale(ln, sin, cosine)
	case r.of != ln:
		r.scale(ln, ln.sin, cosine)
	}
	r.sure = sure
	l := p.in
	switch {
	case ln.places != nil:
		r.fromTrack(p, u, l)
	case vectors && l == whole:
		marginsVector(r, p.h, p.row(u), float32(cosine))
	default:
		r.fromLines(p, u, l, float32(cosine))
	}
	if !r.exact {
		roughness(&r.clear, &r.roughM, r.perM)
		roughness(&r.near, &r.roughN, r.perR)
		roughness(&r.far, &r.roughF, r.perR)
		r.roughenJags(p, u)
	} else {
		r.roughM, r.roughN, r.roughF, r.jagged = byLane32{}, byLane32{}, byLane32{}, 0
	}
	if dawn := p.jags[u-p.ua].dawn; dawn != 0 {
		roughen(&r.roughN, dawn)
		r.jagged |= gapsBeside(dawn)
	}
	if sure {
		return
	}
	bits := p.sure[u-p.ua]
	cos := float32(cosine)
	x := p.unsureRow(u)
	for k := range marchLanes {
		h := float32(p.h[k])
		r.clearU[k], r.nearU[k], r.farU[k] = r.clear[k], r.near[k], r.far[k]
		if ln.fan != nil && h == h {
			cos = float32(p.share[k])
		}
		if bits&1 == 0 {
			r.clearU[k] = h - x.shade[k]
			r.nearU[k] = (x.nearer[k] - h) * cos
		}
		if bits&2 == 0 {
			r.farU[k] = (h - x.farther[k]) * cos
		}
	}
	if ln.places != nil && ln.fan == nil {
		r.trackRangesU(p, u)
	}
	if r.exact {
		return
	}
	if bits&1 == 0 {
		widenTo(&r.roughM, &r.clearU, r.perM)
		widenTo(&r.roughN, &r.nearU, r.perR)
	}
	if bits&2 == 0 {
		widenTo(&r.roughF, &r.farU, r.perR)
	}
}

// unknownBend is the bend, in rows' worths of ground, from which on margins with
// unknown terrain widen the slack.
const unknownBend = 1

// widenTo makes rough as large as the margins with unknown terrain bend from lane to
// lane: it may lie before one and not before the next. Along an edge of the DEM they
// grow evenly, and say what lies between them.
func widenTo(rough, a *byLane32, perRow float32) {
	if vectors {
		widenVector(rough, a, perRow)
		return
	}
	bend := func(k int) float32 { return abs32((a[k+1] - a[k]) - (a[k] - a[k-1])) }
	before := bend(1)
	for k := 1; k <= laneStep; k++ {
		next := bend(k + 1)
		d := max(before, next)
		if before = next; !(d*perRow <= unknownBend) {
			rough[k] = max(rough[k], d*(roughShare+float32(float32(roughGrowth*d)*perRow)))
		}
	}
}

// scale finds what a row is worth where a look has an incidence of a sine and cosine.
func (r *laneMargins) scale(ln *lanes, sin, cosine float64) {
	r.of, r.exact = ln, ln.uniform && ln.slope == 0
	r.slackM = float32(settleShare * ln.minDS * max(math.Abs(cosine)/sin, levelShare))
	r.slackR = float32(settleShare * (ln.minDS * max(sin, levelShare)))
	r.perM, r.perR = settleShare/r.slackM, settleShare/r.slackR
	r.tinyM, r.tinyR = float32(atLimit*float64(r.slackM)), float32(atLimit*float64(r.slackR))
	r.cos = float32(math.Abs(cosine))
}

// roughness fills rough with the largest difference of neighbouring lanes among
// those around each gap: it shows how much the ground that decides varies within
// a cell, and counts for more where it exceeds a row's worth of ground. NaN,
// which a missing lane brings, counts as the largest.
func roughness(a, rough *byLane32, perRow float32) {
	if vectors {
		roughnessVector(a, rough, perRow)
		return
	}
	// The bits of numbers that are not negative order as the numbers do.
	gap := func(k int) uint32 { return math.Float32bits(a[k+1]-a[k]) &^ (1 << 31) }
	before, here := gap(0), gap(1)
	for k := 1; k <= laneStep; k++ {
		next := gap(k + 1)
		d := math.Float32frombits(max(before, here, next))
		rough[k] = d * (roughShare + float32(float32(roughGrowth*d)*perRow))
		before, here = here, next
	}
}

// onLane is the distance from a lane, in lanes, that is taken for none.
const onLane = 1e-6

// doubts says which margins are doubtful.
type doubts uint8

const (
	doubtClear doubts = 1 << iota
	doubtNear
	doubtFar
	doubtClearU
	doubtNearU
	doubtFarU
)

// at finds the margins of a cell of height h at weight w between lanes k and
// k+1, and returns which are doubtful: missing, or small against one row's worth of ground,
// the roughness of the ground that decides, and how far the cell itself lies
// above or below the ground between the lanes.
func (r *laneMargins) at(k int, w, h float32, m *lane) (d doubts) {
	bump := abs32(h - r.h[k])
	if w != 0 {
		bump = abs32(h - mix(r.h[k], r.h[k+1], w))
	}
	blend := func(a, rough *byLane32, base float32, bit doubts) float32 {
		x, slack := a[k], base
		slack += bump
		if w != 0 { // at weight 0 the second does not count, also when it is NaN
			switch y := a[k+1]; {
			case x != x: // a lane outside the DEM: the other stands alone
				x, slack = y, float32(math.Inf(1))
			case y != y:
				slack = float32(math.Inf(1))
			default:
				x = mix(x, y, w)
			}
		}
		switch {
		case w != 0 || r.exact:
			slack += rough[k]
		default: // as much on one side as on the other
			d := max(abs32(a[k]-a[k-1]), abs32(a[k+1]-a[k]))
			d *= roughShare + float32(float32(roughGrowth*d)*(settleShare/base))
			if r.jagged>>(k-1)&3 != 0 {
				d = max(d, rough[k-1], rough[k])
			}
			slack += d
		}
		if !(x > slack || x < -slack) {
			d |= bit
		}
		return x
	}
	m.clear = blend(&r.clear, &r.roughM, r.slackM, doubtClear)
	m.clearU = m.clear
	if m.clear < 0 && d == 0 {
		return 0
	}
	m.near = blend(&r.near, &r.roughN, r.slackR, doubtNear)
	m.far = blend(&r.far, &r.roughF, r.slackR, doubtFar)
	m.nearU, m.farU = m.near, m.far
	if !r.sure {
		m.clearU = blend(&r.clearU, &r.roughM, r.slackM, doubtClearU)
		m.nearU = blend(&r.nearU, &r.roughN, r.slackR, doubtNearU)
		m.farU = blend(&r.farU, &r.roughF, r.slackR, doubtFarU)
	}
	return d
}

// lane holds margins as the lanes keep them.
type lane struct{ clear, near, far, clearU, nearU, farU float32 }

// settle finds the margins of a cell where a lane has none, by a walk over
// the whole reach.
func (t *sheet) settle(f *field, wk *walker, u, v int, m *lane) {
	x := wk.settle(f, u, v)
	h := float64(f.z[(u-f.ua)*f.width+v-f.at[u-f.ua]])
	shade, nearer, farther := f.limitLines()
	most, above, below := h-shade, (nearer-h)*f.ln.cos, (h-farther)*f.ln.cos
	if f.ln.places != nil && f.ln.fan == nil {
		above, below = wk.ranges(u, h, nearer, farther)
	}
	m.clear, m.clearU = float32(min(x.clear, most)), float32(min(x.clearU, most))
	m.near, m.nearU = float32(min(x.near, above)), float32(min(x.nearU, above))
	m.far, m.farU = float32(min(x.far, below)), float32(min(x.farU, below))
}

// ranges returns how much slant range lies between a height at the walk's own
// point and two others there, but no more than the place has.
func (w *walker) ranges(u int, h, nearer, farther float64) (above, below float64) {
	_, s := w.y.at(u)
	p := w.y.place(s)
	r := w.y.ln.viewR(&p, h)
	near := w.y.ln.viewR(&p, min(nearer, w.y.ln.rangeHeight(&p, 0)))
	far := w.y.ln.viewR(&p, farther)
	return r - near, far - r
}

// raw returns the code that the margins give, before the cell's own slope.
func (m *lane) raw() Class {
	switch {
	case !(m.clear > 0):
		return CastShadow
	case !(m.clearU > 0):
		return Undetermined
	case m.near <= 0 && m.far <= 0:
		return LayoverBoth
	case m.near <= 0:
		return LayoverNearer
	case m.far <= 0:
		return LayoverFarther
	case m.nearU <= 0 || m.farU <= 0:
		return foldUnknown
	}
	return Open
}

// layoverClass returns the class in the layover raster, from the raw code and
// the turns of the facet.
func layoverClass(raw Class, turns int) Class {
	switch {
	case raw == CastShadow:
		return shadowClass(raw, turns)
	case raw == NoData || raw == Undetermined:
		return raw
	case turns&turnLayover != 0:
		return ActiveLayover
	case raw == foldUnknown:
		return Undetermined
	}
	return raw
}

// shadowClass is layoverClass for the shadow raster.
func shadowClass(raw Class, turns int) Class {
	switch {
	case raw == CastShadow && turns&turnShadow != 0:
		return SelfShadow
	case raw == CastShadow || raw == NoData || raw == Undetermined:
		return raw
	}
	return Open
}

// blank says of all cells that nothing is known.
func (t *sheet) blank() {
	clear(t.raw)
	t.room()
	if t.wantClear {
		fillWith(t.clear, float32(nan))
	}
	if t.wantFold {
		fillWith(t.fold, float32(nan))
	}
	if t.bin > 0 {
		fillWith(t.returns, float32(nan))
		fillWith(t.share, float32(nan))
	}
}

// keep stores the margins that layers ask for.
func (t *sheet) keep(i int, clear, fold float32) {
	if t.wantClear {
		t.clear[i] = clear
	}
	if t.wantFold {
		t.fold[i] = fold
	}
}
