package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// settleShare is the part of one row's worth of ground under which a margin is
// doubtful, since lanes sample the surface about once a cell.
const settleShare = 0.25

// roughShare is the part of the difference between two lanes by which the slack
// grows.
const roughShare = 0.5

// foldUnknown is the raw code of a lit cell that is folded or not depending on
// terrain that the DEM does not show. It never leaves the package.
const foldUnknown Class = 51

// sheet is the rectangle of cells that one worker finishes: what all looks
// share, in row-major order of the grid.
type sheet struct {
	w      dem.Window
	z      []float32 // heights
	zc, zr []float32 // change of height for one column more, one row more
	pad    []float32 // the window with a margin of one cell

	raw       []uint8 // class codes before the cells' own slopes are looked at
	clear     []float32
	fold      []float32
	wantClear bool
	wantFold  bool
}

// load reads the heights of the window and their central differences.
func (t *sheet) load(src dem.Source, w dem.Window) error {
	g := src.Grid()
	t.w = w
	n := w.Rows * w.Cols
	t.z, t.zc, t.zr, t.raw = resize(t.z, n), resize(t.zc, n), resize(t.zr, n), resize(t.raw, n)
	p := g.Clip(dem.Window{Row: w.Row - 1, Col: w.Col - 1, Rows: w.Rows + 2, Cols: w.Cols + 2})
	t.pad = resize(t.pad, p.Rows*p.Cols)
	if err := src.Read(p, t.pad); err != nil {
		return err
	}
	for i := range w.Rows {
		r := w.Row + i - p.Row
		from := r*p.Cols + w.Col - p.Col
		row := t.pad[from : from+w.Cols]
		above, below := row, row // itself where there is no row
		if r > 0 {
			above = t.pad[from-p.Cols:][:w.Cols]
		}
		if r < p.Rows-1 {
			below = t.pad[from+p.Cols:][:w.Cols]
		}
		zc, zr := t.zc[i*w.Cols:(i+1)*w.Cols], t.zr[i*w.Cols:(i+1)*w.Cols]
		copy(t.z[i*w.Cols:], row)
		for j := range row {
			zr[j] = difference(above[j], row[j], below[j], r > 0, r < p.Rows-1)
		}
		for j := range row {
			left, right := row[j], row[j]
			hasL, hasR := w.Col+j > 0, w.Col+j < g.Cols-1
			if hasL {
				left = t.pad[from+j-1]
			}
			if hasR {
				right = t.pad[from+j+1]
			}
			zc[j] = difference(left, row[j], right, hasL, hasR)
		}
	}
	return nil
}

// difference returns the change of height over one step at the middle of
// three neighbours: central where both others have a height, one-sided where
// one has, NaN where none has or the middle is missing. Source: Zevenbergen &
// Thorne, Earth Surface Processes and Landforms 12, 1987, 47-56 (from memory).
func difference(a, mid, b float32, hasA, hasB bool) float32 {
	if d := (b - a) / 2; hasA && hasB && d == d {
		if mid != mid {
			return mid
		}
		return d
	}
	if hasA && a == a {
		return mid - a
	}
	if hasB {
		return b - mid
	}
	return float32(nan)
}

// classify marches the field strip by strip, interpolates the lanes' margins to
// the cells, settles the doubtful ones and leaves the raw codes, with the
// margins when they are wanted.
func (t *sheet) classify(f *field, p *strip, wk *walker) {
	n := t.w.Rows * t.w.Cols
	if t.wantClear {
		t.clear = resize(t.clear, n)
	}
	if t.wantFold {
		t.fold = resize(t.fold, n)
	}
	first := (f.k0 - f.ln.first) / laneStep
	for j := range f.strips {
		if p.setUp(f, first+j) {
			p.forward()
			p.backward(func(u int) { t.classifyRow(p, wk, u) })
		}
	}
}

// place returns the index in the sheet of marching position (u, v) and the
// stride of v.
func (t *sheet) place(f *field, u, v int) (at, stride int) {
	o := f.ln.orient
	a := u
	if o.flip {
		a = o.u - 1 - u
	}
	if o.transposed {
		return (v-t.w.Row)*t.w.Cols + a - t.w.Col, t.w.Cols
	}
	return (a-t.w.Row)*t.w.Cols + v - t.w.Col, 1
}

// classifyRow classifies the strip's cells of row u, at which the backward march
// stands.
func (t *sheet) classifyRow(p *strip, wk *walker, u int) {
	f := p.f
	va, vb := p.cells(u)
	if va >= vb {
		return
	}
	at, stride := t.place(f, u, va)
	z := f.z[(u-f.ua)*f.width+va-f.at[u-f.ua]:][:vb-va]
	sure := p.sure[u-p.ua] == 3
	var rows laneMargins
	rows.fill(p, u, sure)
	for j, h := range z {
		i := at + j*stride
		if h != h {
			t.raw[i] = uint8(NoData)
			t.keep(i, float32(nan), float32(nan))
			continue
		}
		x := (float64(va+j) - p.v0) / p.dv
		k := min(int(x), laneStep-1)
		m, doubt := rows.at(k, float32(x-float64(k)))
		if doubt != 0 {
			if sure && m.clear == m.clear && m.near == m.near && m.far == m.far {
				wk.quick(p, u, va+j, k, &m, doubt)
			} else {
				m = t.settle(f, wk, u, va+j, m, doubt)
			}
		}
		t.raw[i] = uint8(m.raw())
		if t.wantClear || t.wantFold {
			fold := float32(nan)
			if m.clear > 0 {
				fold = min(m.near, m.far)
			}
			t.keep(i, m.clear, fold)
		}
	}
}

// laneMargins are the lanes' margins along one row.
type laneMargins struct {
	clear, near, far    [stripLanes]float32
	clearU, nearU, farU [stripLanes]float32
	sure                bool // the U margins are those without
	slackM, slackR      float32
}

// fill takes the margins from the lines and the heights of the row that the
// strip has sampled.
func (r *laneMargins) fill(p *strip, u int, sure bool) {
	ln := p.f.ln
	r.slackM, r.slackR = float32(settleShare*ln.rowM), float32(settleShare*ln.rowR)
	r.sure = sure
	cos := float32(ln.cos)
	l := p.inDEM()
	for k, x := range p.row(u) {
		h := float32(p.h[k])
		if k < l.a || k >= l.b {
			h = float32(nan)
		}
		r.clear[k] = h - x.shade
		r.near[k] = (x.nearer - h) * cos
		r.far[k] = (h - x.farther) * cos
	}
	if sure {
		return
	}
	bits := p.sure[u-p.ua]
	for k, x := range p.unsureRow(u) {
		h := float32(p.h[k])
		r.clearU[k], r.nearU[k], r.farU[k] = r.clear[k], r.near[k], r.far[k]
		if bits&1 == 0 {
			r.clearU[k] = h - x.shade
			r.nearU[k] = (x.nearer - h) * cos
		}
		if bits&2 == 0 {
			r.farU[k] = (h - x.farther) * cos
		}
	}
}

// doubts says which margins are doubtful.
type doubts uint8

const (
	doubtClear doubts = 1 << iota
	doubtNear
	doubtFar
)

// at returns the margins at weight w between lanes k and k+1, and which are
// doubtful: missing, or small against one row's worth of ground and the
// roughness of the ground that decides.
func (r *laneMargins) at(k int, w float32) (m lane, d doubts) {
	var doubt bool
	m.clear, doubt = blend(r.clear[k], r.clear[k+1], w, r.slackM)
	if doubt {
		d = doubtClear
	} else if m.clear < 0 {
		m.clearU = m.clear
		return m, 0
	}
	if m.near, doubt = blend(r.near[k], r.near[k+1], w, r.slackR); doubt {
		d |= doubtNear
	}
	if m.far, doubt = blend(r.far[k], r.far[k+1], w, r.slackR); doubt {
		d |= doubtFar
	}
	m.clearU, m.nearU, m.farU = m.clear, m.near, m.far
	if r.sure {
		return m, d
	}
	if m.clearU, doubt = blend(r.clearU[k], r.clearU[k+1], w, r.slackM); doubt {
		d |= doubtClear
	}
	if m.nearU, doubt = blend(r.nearU[k], r.nearU[k+1], w, r.slackR); doubt {
		d |= doubtNear
	}
	if m.farU, doubt = blend(r.farU[k], r.farU[k+1], w, r.slackR); doubt {
		d |= doubtFar
	}
	return m, d
}

// blend interpolates a margin between two lanes. At weight 0 the second does
// not count, also when it is NaN. The slack grows by the difference of the
// lanes, which shows how rough the ground is that decides.
func blend(x, y, w, slack float32) (m float32, doubt bool) {
	if w == 0 {
		return x, !(x > slack || x < -slack)
	}
	d := y - x
	m = x + w*d
	if d < 0 {
		d = -d
	}
	slack += roughShare * d
	return m, !(m > slack || m < -slack)
}

// lane holds margins as the lanes keep them.
type lane struct{ clear, near, far, clearU, nearU, farU float32 }

// settle replaces doubtful lane margins by those of an exact walk: their signs
// are then the walk's, their sizes the lanes' wherever the signs agree.
func (t *sheet) settle(f *field, wk *walker, u, v int, m lane, d doubts) lane {
	ask := question{
		clear: d&(doubtClear|doubtNear) != 0, near: d&doubtNear != 0, far: d&doubtFar != 0,
		slackM: settleShare * f.ln.rowM, slackR: settleShare * f.ln.rowR, signs: true,
	}
	if sum := m.clear + m.near + m.far + m.clearU + m.nearU + m.farU; sum != sum {
		// No lane margins here: walk the whole reach.
		ask = question{clear: true, near: true, far: true, slackM: math.Inf(1), slackR: math.Inf(1)}
	}
	x := wk.settle(f, u, v, ask)
	h := float64(f.z[(u-f.ua)*f.width+v-f.at[u-f.ua]])
	shade, nearer, farther := f.limitLines()
	most, above, below := h-shade, (nearer-h)*f.ln.cos, (h-farther)*f.ln.cos
	pick := func(asked bool, lane float32, walked, slack, most float64) float32 {
		switch {
		case lane != lane:
			return float32(min(walked, most))
		case !asked || (walked > 0) == (lane > 0):
			return lane
		case walked > slack:
			return float32(slack)
		}
		return float32(walked)
	}
	out := lane{
		clear: pick(ask.clear, m.clear, x.clear, ask.slackM, most),
		near:  pick(ask.near, m.near, x.near, ask.slackR, above),
		far:   pick(ask.far, m.far, x.far, ask.slackR, below),
	}
	out.clearU, out.nearU, out.farU = out.clear, out.near, out.far
	if m.clearU != m.clear || m.nearU != m.near || m.farU != m.far {
		out.clearU = pick(ask.clear, m.clearU, x.clearU, ask.slackM, most)
		out.nearU = pick(ask.near, m.nearU, x.nearU, ask.slackR, above)
		out.farU = pick(ask.far, m.farU, x.farU, ask.slackR, below)
	}
	return out
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

// The three class rasters of a cell, from its raw code and its facet.
func layoverClass(raw Class, f geometry.Facet) Class {
	switch {
	case raw == CastShadow:
		return shadowClass(raw, f)
	case raw == NoData || raw == Undetermined:
		return raw
	case f.ActiveLayover():
		return ActiveLayover
	case raw == foldUnknown:
		return Undetermined
	}
	return raw
}

func shadowClass(raw Class, f geometry.Facet) Class {
	switch {
	case raw == CastShadow && f.SelfShadow():
		return SelfShadow
	case raw == CastShadow || raw == NoData || raw == Undetermined:
		return raw
	}
	return Open
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
