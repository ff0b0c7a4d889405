//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"encoding/binary"
	"math"
	"math/bits"

	"simd/archsimd"
)

// The margins of the lanes and of the cells between them on vectors of eight: what
// the loops of cells.go do.

func lanes8(a *byLane32, k int) archsimd.Float32x8 {
	return archsimd.LoadFloat32x8((*[8]float32)(a[k:]))
}

func put8(a *byLane32, k int, x archsimd.Float32x8) { x.Store((*[8]float32)(a[k:])) }

func absolute(x archsimd.Float32x8) archsimd.Float32x8 {
	return x.AsInt32x8().And(archsimd.BroadcastInt32x8(math.MaxInt32)).AsFloat32x8()
}

// marginsVector is laneMargins.fromLines for a plane wave.
func marginsVector(r *laneMargins, heights *byLane, row *lines, cos float32) {
	c := eight(cos)
	for k := 0; k < marchVectors; k += 4 {
		put4as32(&r.h, k, lanes4(heights, k))
	}
	for k := 0; k < padLanes; k += 8 {
		h := lanes8(&r.h, k)
		put8(&r.clear, k, h.Sub(lanes8(&row.shade, k)))
		put8(&r.near, k, lanes8(&row.nearer, k).Sub(h).Mul(c))
		put8(&r.far, k, h.Sub(lanes8(&row.farther, k)).Mul(c))
	}
	archsimd.ClearAVXUpperBits()
}

// roughnessVector is roughness: the bits of numbers that are not negative order as
// the numbers do, and NaN above all.
func roughnessVector(a, rough *byLane32, perRow float32) {
	share, growth, per := eightOf(roughShare), eightOf(roughGrowth), eight(perRow)
	gap := func(k int) archsimd.Int32x8 {
		return absolute(lanes8(a, k+1).Sub(lanes8(a, k))).AsInt32x8()
	}
	for k := 1; k <= laneStep; k += 8 {
		d := gap(k - 1).Max(gap(k)).Max(gap(k + 1)).AsFloat32x8()
		put8(rough, k, d.Mul(share.Add(growth.Mul(d).Mul(per))))
	}
	archsimd.ClearAVXUpperBits()
}

// widenVector is widenTo, with numbers ordered as in roughnessVector.
func widenVector(rough, a *byLane32, perRow float32) {
	share, growth, per, least := eightOf(roughShare), eightOf(roughGrowth), eight(perRow), eightOf(unknownBend)
	bend := func(k int) archsimd.Int32x8 {
		x := lanes8(a, k)
		return absolute(lanes8(a, k+1).Sub(x).Sub(x.Sub(lanes8(a, k-1)))).AsInt32x8()
	}
	for k := 1; k <= laneStep; k += 8 {
		d := bend(k).Max(bend(k + 1)).AsFloat32x8()
		wide := d.Mul(share.Add(growth.Mul(d).Mul(per))).AsInt32x8()
		r := lanes8(rough, k)
		put8(rough, k, r.Merge(r.AsInt32x8().Max(wide).AsFloat32x8(), d.Mul(per).LessEqual(least)))
	}
	archsimd.ClearAVXUpperBits()
}

// at8 returns how far the cells from column v on lie beyond the lanes before them,
// which follow each other from lane k on.
func (l *lineUp) at8(v, k int) (w archsimd.Float32x8) {
	number := archsimd.LoadInt32x8(&numbers8)
	column := archsimd.BroadcastInt32x8(int32(v - l.first)).Add(number).ConvertToFloat32()
	w = eightAt(&l.w).Add(eightAt(&l.dw).Mul(column))
	turns := archsimd.BroadcastInt32x8(int32(k - l.k - v + l.first)).ConvertToFloat32()
	w = w.Sub(turns)
	return w.Masked(w.GreaterEqual(eightOf(onLane)))
}

// classifyBundle classifies the cells from column v + skip to v + bundle - 1 of a row.
// The lanes before them follow each other from lane k on; z are the heights from
// column v on. Most bundles are open, with all margins wide.
func (t *sheet) classifyBundle(v, skip, k int, z *[bundle]float32) {
	c := &t.mixed
	c.v, c.k, c.z = v, k, z
	if !t.open(c, skip) {
		t.classifyMixed(c, skip)
	}
}

// open finds what the lanes say of the cells of a bundle. It stores it and returns true
// where they are open and nothing else need be asked.
func (t *sheet) open(c *mixed, skip int) bool {
	r, k := c.laneMargins, c.k
	part := c.up.at8(c.v, k)
	part.Store(&c.w)
	m, n, g := blend(&r.clear, k, part), blend(&r.near, k, part), blend(&r.far, k, part)
	bump := absolute(archsimd.LoadFloat32x8(c.z).Sub(blend(&r.h, k, part)))
	slackM := eightAt(&r.slackM).Add(bump).Add(lanes8(&r.roughM, k))
	slack := eightAt(&r.slackR).Add(bump)
	slackN, slackG := slack.Add(lanes8(&r.roughN, k)), slack.Add(lanes8(&r.roughF, k))
	open := m.Greater(slackM).And(n.Greater(slackN)).And(g.Greater(slackG)).And(part.Greater(zero8())).ToBits()
	if i := c.at + c.v*c.stride; open == 0xff && c.plain && skip == 0 {
		binary.LittleEndian.PutUint64(t.raw[i:], allOpen)
		if t.wantClear {
			m.Store((*[bundle]float32)(t.clear[i:]))
		}
		if t.wantFold {
			n.Min(g).Store((*[bundle]float32)(t.fold[i:]))
		}
		archsimd.ClearAVXUpperBits()
		return true
	}
	m.Store(&c.clear)
	n.Store(&c.near)
	g.Store(&c.far)
	slackM.Store(&c.wideM)
	slackN.Store(&c.wideN)
	slackG.Store(&c.wideG)
	archsimd.ClearAVXUpperBits()
	return false
}

// allOpen is a bundle of open cells.
const allOpen = 0x0101010101010101 * uint64(Open)

// classifyMixed is classifyBundle for any cells: those that are not doubtful at
// once, the others one by one.
func (t *sheet) classifyMixed(c *mixed, skip int) {
	i := c.at + c.v*c.stride
	var doubtful, single uint8
	if t.margins.sure {
		doubtful, single = t.mixSure(c, i, skip)
	} else {
		doubtful, single = t.mixUnsure(c, i, skip)
	}
	archsimd.ClearAVXUpperBits()
	for single = single >> skip << skip; single != 0; single &= single - 1 {
		j := bits.TrailingZeros8(single)
		doubtful &^= 1 << j
		t.classifyCell(c.strip, c.walk, c.u, c.v+j, c.k+j, c.w[j], c.z[j])
	}
	var m lane
	for doubtful = doubtful >> skip << skip; doubtful != 0; doubtful &= doubtful - 1 {
		j := bits.TrailingZeros8(doubtful)
		doubt := c.of(j, &m)
		t.ask(c.strip, c.walk, c.u, c.v+j, c.k+j, c.w[j], &m, doubt)
		t.set(i+j*c.stride, &m)
	}
}

// blend returns a lane's numbers for the cells of a bundle that begins after lane k.
func blend(a *byLane32, k int, part archsimd.Float32x8) archsimd.Float32x8 {
	x := lanes8(a, k)
	return x.Add(part.Mul(lanes8(a, k+1).Sub(x)))
}

// mixSure stores what the lanes say of the cells of a bundle, from index i on, and
// returns which of them are doubtful, and which are to be looked at by themselves.
//
//go:noinline
func (t *sheet) mixSure(c *mixed, i, skip int) (doubtful, single uint8) {
	r := c.laneMargins
	m, n, g := archsimd.LoadFloat32x8(&c.clear), archsimd.LoadFloat32x8(&c.near), archsimd.LoadFloat32x8(&c.far)
	slackM, slackN, slackG := archsimd.LoadFloat32x8(&c.wideM), archsimd.LoadFloat32x8(&c.wideN), archsimd.LoadFloat32x8(&c.wideG)
	zero := zero8()
	shadow := zero.Sub(slackM).Greater(m)
	dark, lit := shadow.ToBits(), m.Greater(slackM).ToBits()
	doubtN, doubtG := ^absolute(n).Greater(slackN).ToBits(), ^absolute(g).Greater(slackG).ToBits()
	dim := ^(lit | dark) // doubtful whether lit
	if dim|lit&(doubtN|doubtG) != 0 {
		steep := c.steep8(c.u, c.v)
		doubtN, doubtG = doubtN&^(dark|steep), doubtG&^(dark|steep)
	}
	if dim|doubtN|doubtG != 0 {
		yes := c.lit(dim, false)
		m, lit, dim = positive(m, yes, &r.tinyM), lit|yes, dim&^yes
		yes = c.alone(doubtN&lit, -1, false)
		n, doubtN = positive(n, yes, &r.tinyR), doubtN&^yes
		yes = c.alone(doubtG&lit, 1, false)
		g, doubtG = positive(g, yes, &r.tinyR), doubtG&^yes
	}
	codes := codesOf(dark, 0, 0, n.LessEqual(zero).ToBits(), g.LessEqual(zero).ToBits())
	t.storeBundle(i, c.stride, skip, codes, m, none8().Merge(n.Min(g), shadow))
	c.doubtM, c.doubtN, c.doubtG = dim, doubtN, doubtG
	return dim | lit&(doubtN|doubtG), c.keep(m, n, g)
}

// mixUnsure is mixSure where terrain may be unknown: doubtful cells are looked at
// by themselves.
//
//go:noinline
func (t *sheet) mixUnsure(c *mixed, i, skip int) (doubtful, single uint8) {
	r := c.laneMargins
	part := archsimd.LoadFloat32x8(&c.w)
	m, n, g := archsimd.LoadFloat32x8(&c.clear), archsimd.LoadFloat32x8(&c.near), archsimd.LoadFloat32x8(&c.far)
	mU, nU, gU := blend(&r.clearU, c.k, part), blend(&r.nearU, c.k, part), blend(&r.farU, c.k, part)
	slackM, slackN, slackG := archsimd.LoadFloat32x8(&c.wideM), archsimd.LoadFloat32x8(&c.wideN), archsimd.LoadFloat32x8(&c.wideG)
	zero := zero8()
	shadow := zero.Sub(slackM).Greater(m)
	dark, lit := shadow.ToBits(), m.Greater(slackM).And(absolute(mU).Greater(slackM)).ToBits()
	doubtN := ^absolute(n).Greater(slackN).And(absolute(nU).Greater(slackN)).ToBits()
	doubtG := ^absolute(g).Greater(slackG).And(absolute(gU).Greater(slackG)).ToBits()
	// Undetermined: whether lit, whether folded.
	unlit, unfolded := mU.LessEqual(zero).ToBits(), nU.LessEqual(zero).ToBits()|gU.LessEqual(zero).ToBits()
	dim := ^(lit | dark)
	if dim|lit&(doubtN|doubtG) != 0 {
		steep := c.steep8(c.u, c.v)
		doubtN, doubtG = doubtN&^(dark|steep), doubtG&^(dark|steep)
	}
	doubtful = dim | lit&(doubtN|doubtG)
	if doubtful != 0 {
		open := c.clearly(part, slackM, slackN, slackG)
		m = positive(m, open, &r.tinyM)
		n, g = positive(n, open&doubtN, &r.tinyR), positive(g, open&doubtG, &r.tinyR)
		unlit, unfolded = unlit&^open, unfolded&^open
		doubtful &^= open
	}
	codes := codesOf(dark, unlit, unfolded, n.LessEqual(zero).ToBits(), g.LessEqual(zero).ToBits())
	t.storeBundle(i, c.stride, skip, codes, m, none8().Merge(n.Min(g), shadow))
	return 0, doubtful | c.keep(m, n, g)
}

// storeBundle stores the codes and margins of the cells from skip on of a bundle
// whose first is at index i.
func (t *sheet) storeBundle(i, stride, skip int, codes uint64, clear, fold archsimd.Float32x8) {
	if stride != 1 || skip != 0 {
		clear.Store(&t.mixed.scattered[0])
		fold.Store(&t.mixed.scattered[1])
		t.scatter(i, stride, skip, codes)
		return
	}
	binary.LittleEndian.PutUint64(t.raw[i:], codes)
	if t.wantClear {
		clear.Store((*[bundle]float32)(t.clear[i:]))
	}
	if t.wantFold {
		fold.Store((*[bundle]float32)(t.fold[i:]))
	}
}

// keep keeps margins for cells that are looked at by themselves, and returns those
// that must be: beside a lane without lines, and on a lane, where both sides are to
// be treated alike.
func (c *mixed) keep(m, n, g archsimd.Float32x8) (single uint8) {
	m.Store(&c.clear)
	n.Store(&c.near)
	g.Store(&c.far)
	single = m.Add(n).Add(g).IsNaN().ToBits()
	if !c.exact {
		single |= archsimd.LoadFloat32x8(&c.w).Equal(zero8()).ToBits()
	}
	return single
}

// of finds the margins of cell j where no terrain is unknown, and returns which are
// doubtful.
func (c *mixed) of(j int, m *lane) doubts {
	m.clear, m.near, m.far = c.clear[j], c.near[j], c.far[j]
	m.clearU, m.nearU, m.farU = m.clear, m.near, m.far
	return doubts(c.doubtM>>j&1)*doubtClear | doubts(c.doubtN>>j&1)*doubtNear | doubts(c.doubtG>>j&1)*doubtFar
}

// steep8 is strip.steep for the cells from column v on.
//
//go:noinline
func (p *strip) steep8(u, v int) uint8 {
	archsimd.ClearAVXUpperBits()
	var at vicinity
	if !p.vicinity(u, v, &at) {
		return 0
	}
	z := p.f.z
	load := func(i int) archsimd.Float32x8 { return archsimd.LoadFloat32x8((*[bundle]float32)(z[i:])) }
	half := eightOf(0.5)
	along := load(at.after).Sub(load(at.before)).Mul(half)
	across := load(at.here + 1).Sub(load(at.here - 1)).Mul(half)
	least := across.Mul(eightAt(&at.drift[0])).Min(across.Mul(eightAt(&at.drift[1])))
	return along.Add(least).Greater(eightAt(&at.limit)).ToBits()
}

// early settles cells of a bundle, as quickWalk does, on gentle ground: where the
// lines of limits of a row nearby leave no doubt. What it cannot tell is for
// quickWalk to say; so are cells on which a row has cast doubt from the other side.

// earlyRows is how far lit and alone look.
const earlyRows = 8

// lit returns which of the doubtful cells no ground hides, or no unknown terrain.
func (e *mixed) lit(doubtful uint8, unknown bool) (yes uint8) {
	for u := e.u; doubtful != 0 && u > max(e.u-earlyRows, e.ua); u-- {
		g := &e.gentle[u-1-e.ua]
		doubtful &= e.along(u, u-1, doubtful, true)
		if doubtful != 0 && (e.u-u)%2 == 1 {
			line := &e.row(u - 1).shade
			if unknown {
				unsure := e.unsureRow(u - 1)
				if unsure == nil || e.sureAt(u-1)&1 != 0 {
					return yes | doubtful
				}
				line = &unsure.shade
			}
			j := e.jagsOf(u - 1)
			x, y := lanes8(line, e.k), lanes8(line, e.k+1)
			high := x.Max(y)
			if j != nil && !unknown {
				high = high.Max(lanes8(&j.shade, e.k)).Max(lanes8(&j.shade, e.k+1))
			}
			rise := archsimd.LoadFloat32x8(e.z).Sub(high).Add(e.worth(&g.worthM, e.u-u+1))
			now := clears(rise, absolute(x.Sub(y)), &e.perM, &e.slackM) & doubtful
			yes, doubtful = yes|now, doubtful&^(now|rise.Less(zero8()).ToBits())
		}
	}
	return yes
}

// alone returns which of the doubtful cells have no partner towards the radar, dir
// -1, or away from it, 1; when possible is set, none that may be lit, nor unknown
// terrain.
func (e *mixed) alone(doubtful uint8, dir int, possible bool) (yes uint8) {
	for n := 1; doubtful != 0 && n <= earlyRows; n++ {
		u := e.u + dir*n
		if u < e.ua || u >= e.ub {
			break
		}
		g := &e.gentle[min(u, u-dir)-e.ua]
		doubtful &= e.along(u-dir, u, doubtful, false)
		if doubtful == 0 || n%2 == 1 {
			continue
		}
		if dir < 0 {
			dawn := e.jags[u-e.ua].dawn >> e.k
			doubtful &^= uint8(dawn | dawn>>1)
		}
		j := e.jagsOf(u)
		h := archsimd.LoadFloat32x8(e.z)
		line := e.line(u, dir, possible)
		x, y := lanes8(line, e.k), lanes8(line, e.k+1)
		low, high := x.Min(y), x.Max(y)
		if j != nil {
			low = low.Min(lanes8(&j.nearer, e.k)).Min(lanes8(&j.nearer, e.k+1))
			high = high.Max(lanes8(&j.farther, e.k)).Max(lanes8(&j.farther, e.k+1))
		}
		rise := low.Sub(h)
		if dir > 0 {
			rise = h.Sub(high)
		}
		cos := eightAt(&e.cos)
		rise = rise.Add(e.worth(&g.worthR, n)).Mul(cos)
		now := clears(rise, absolute(x.Sub(y)).Mul(cos), &e.perR, &e.slackR) & doubtful
		yes, doubtful = yes|now, doubtful&^(now|rise.Less(zero8()).ToBits())
	}
	return yes
}

// line returns the line of row u that ground towards the radar or away from it
// sets.
func (e *mixed) line(u, dir int, possible bool) *byLane32 {
	unsure := e.unsureRow(u)
	if possible && unsure != nil {
		switch {
		case dir < 0 && e.sureAt(u)&1 == 0:
			return &unsure.nearer
		case dir > 0 && e.sureAt(u)&2 == 0:
			return &unsure.farther
		}
	}
	if dir < 0 {
		return &e.row(u).nearer
	}
	return &e.row(u).farther
}

func (e *mixed) sureAt(u int) uint8 { return e.strip.sure[u-e.ua] }

// clearly returns which cells are open whatever stands where terrain is unknown; not
// those with a lane that has no margins.
//
//go:noinline
func (e *mixed) clearly(part, slackM, slackN, slackG archsimd.Float32x8) (cells uint8) {
	yes, maybe := e.sides(&e.laneMargins.clear, part, slackM)
	cells = yes | e.lit(maybe, false)
	yes, maybe = e.sides(&e.clearU, part, slackM)
	cells &= yes | e.lit(maybe&cells, true)
	yes, maybe = e.sides(&e.laneMargins.near, part, slackN)
	cells &= yes | e.alone(maybe&cells, -1, false)
	yes, maybe = e.sides(&e.nearU, part, slackN)
	cells &= yes | e.alone(maybe&cells, -1, true)
	yes, maybe = e.sides(&e.laneMargins.far, part, slackG)
	cells &= yes | e.alone(maybe&cells, 1, false)
	yes, maybe = e.sides(&e.farU, part, slackG)
	return cells & (yes | e.alone(maybe&cells, 1, true))
}

// sides returns which of the cells have a margin larger than the slack, and which
// are within it.
func (e *mixed) sides(a *byLane32, part, slack archsimd.Float32x8) (yes, maybe uint8) {
	x := blend(a, e.k, part)
	yes = x.Greater(slack).ToBits()
	return yes, x.Greater(zero8().Sub(slack)).ToBits() &^ yes
}

// worth is what n rows are worth.
func (e *mixed) worth(row *float32, n int) archsimd.Float32x8 {
	return eightAt(row).Mul(whole8(n))
}

// clears returns which margins are larger than the slack, for which the
// difference of the lanes beside them counts as in roughness.
func clears(margin, gap archsimd.Float32x8, perRow, slack *float32) uint8 {
	rough := gap.Mul(eightOf(roughShare).Add(gap.Mul(eightOf(roughGrowth)).Mul(eightAt(perRow))))
	return margin.Sub(rough).Greater(eightAt(slack)).ToBits()
}

// positive returns the margins x, with those of the cells yes positive.
func positive(x archsimd.Float32x8, yes uint8, tiny *float32) archsimd.Float32x8 {
	if yes == 0 {
		return x
	}
	bit := archsimd.LoadInt32x8(&bits8)
	asked := archsimd.BroadcastInt32x8(int32(yes)).And(bit).Equal(bit)
	wrong := asked.And(x.LessEqual(zero8()))
	return eightAt(tiny).Merge(x, wrong)
}

// scatter stores the cells from skip on of a bundle whose first is at index i.
//
//go:noinline
func (t *sheet) scatter(i, stride, skip int, codes uint64) {
	archsimd.ClearAVXUpperBits()
	c := &t.mixed.scattered
	for j := skip; j < bundle; j++ {
		t.raw[i+j*stride] = uint8(codes >> (8 * j))
		t.keep(i+j*stride, c[0][j], c[1][j])
	}
}

// codesOf returns the raw codes of a bundle of cells, a byte each, as lane.raw has
// them, from bits that say which are hidden, which may be, which may be folded,
// and which have partners.
func codesOf(dark, unlit, unfolded, near, far uint8) uint64 {
	unlit &^= dark
	near, far = near&^(dark|unlit), far&^(dark|unlit)
	folded := near | far
	unfolded &^= dark | unlit | folded
	codes := spread[0xff] * uint64(Open)
	codes += spread[dark]*uint64(CastShadow-Open) + spread[unlit]*uint64(Undetermined-Open)
	codes += spread[unfolded]*uint64(foldUnknown-Open) + spread[folded]*uint64(ActiveLayover-Open)
	return codes + spread[far]*uint64(LayoverFarther-ActiveLayover) + spread[near]*uint64(LayoverNearer-ActiveLayover)
}

// spread has bit j of its index in byte j.
var spread = func() (s [256]uint64) {
	for i := range s {
		for j := range 8 {
			s[i] |= uint64(i>>j&1) << (8 * j)
		}
	}
	return s
}()

// turnVectors transposes a stripe of eight rows of src, at first, first + step and
// so on, rows long, to columns of dst.
func turnVectors(dst, src []float32, rows, cols, first, step int) {
	var columns [turnBlock]int
	for k := range columns {
		columns[k] = k * cols
	}
	for r := 0; r < rows; r += turnBlock {
		squareVector(dst, &columns, r*cols, src, first+r, step)
	}
	archsimd.ClearAVXUpperBits()
}

// numbers8 are the numbers of the cells of a bundle, bits8 their bits.
var (
	numbers8 = [bundle]int32{0, 1, 2, 3, 4, 5, 6, 7}
	bits8    = [bundle]int32{1, 2, 4, 8, 16, 32, 64, 128}
)
