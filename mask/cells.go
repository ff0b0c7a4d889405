package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// settleShare is the part of one row's worth of ground under which a margin is
// doubtful, since lanes sample the surface about once a cell.
const settleShare = 0.25

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
	lanes     []int32   // lane below each column of one marching row
	weights   []float32 // and the weight of the next
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

// classify marches, interpolates the lanes' margins to the cells, settles the doubtful
// ones and leaves the raw codes, with the margins when they are wanted.
func (t *sheet) classify(f *field, wk *walker) {
	n := t.w.Rows * t.w.Cols
	if t.wantClear {
		t.clear = resize(t.clear, n)
	}
	if t.wantFold {
		t.fold = resize(t.fold, n)
	}
	f.forward()
	f.backward(func(u int) { t.classifyRow(f, wk, u) })
}

// place returns the index in the sheet of marching position (u, v0) and the
// stride of v.
func (t *sheet) place(f *field, u int) (at, stride int) {
	o := f.ln.orient
	a := u
	if o.flip {
		a = o.u - 1 - u
	}
	if o.transposed {
		return (f.v0-t.w.Row)*t.w.Cols + a - t.w.Col, t.w.Cols
	}
	return (a-t.w.Row)*t.w.Cols + f.v0 - t.w.Col, 1
}

// locate fills the lane below each cell of the row and the weight of the next.
func (t *sheet) locate(f *field, u int) {
	n := f.v1 - f.v0
	t.lanes, t.weights = resize(t.lanes, n), resize(t.weights, n)
	for j := range t.lanes {
		k := f.ln.lane(float64(u), float64(f.v0+j))
		whole := math.Floor(k)
		t.lanes[j], t.weights[j] = int32(int(whole)-f.k0), float32(k-whole)
	}
}

// classifyRow classifies the cells of row u, at which the backward march
// stands.
func (t *sheet) classifyRow(f *field, wk *walker, u int) {
	ln := f.ln
	slack := slacks{float32(settleShare * ln.minDS * ln.cot), float32(settleShare * ln.minDS * ln.sin)}
	from := (u - f.u0) * f.nk
	rows := marginRows{clear: f.clear[from : from+f.nk], near: f.near0[from : from+f.nk], far: f.far0[:f.nk]}
	if !f.sure {
		rows.clearU, rows.nearU, rows.farU = f.clearU[from:from+f.nk], f.near0U[from:from+f.nk], f.far0U[:f.nk]
	}
	at, stride := t.place(f, u)
	var first int
	var weight float32
	if ln.uniform {
		k := ln.lane(float64(u), float64(f.v0))
		whole := math.Floor(k)
		first, weight = int(whole)-f.k0, float32(k-whole)
	} else {
		t.locate(f, u)
	}
	z := f.z[(u-f.ua)*f.width+f.v0-f.at[u-f.ua]:]
	for j := range f.v1 - f.v0 {
		k, w := first+j, weight
		if !ln.uniform {
			k, w = int(t.lanes[j]), t.weights[j]
		}
		i := at + j*stride
		if z[j] != z[j] {
			t.raw[i] = uint8(NoData)
			t.keep(i, float32(nan), float32(nan))
			continue
		}
		m, doubt := rows.at(k, w, slack)
		if doubt {
			m = t.settle(f, wk, u, f.v0+j, m, slack)
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

// slacks are the margins, in metres of height and of slant range, under which
// a cell is doubtful.
type slacks struct{ m, r float32 }

// marginRows are the lanes' margins along one row; the U rows are nil where no
// unknown terrain is within reach.
type marginRows struct{ clear, near, far, clearU, nearU, farU []float32 }

// at returns the margins at weight w between lanes k and k+1, and whether they
// are doubtful: a margin that decides is missing or small against one row's
// worth of ground, or the two lanes disagree about it.
func (r *marginRows) at(k int, w float32, slack slacks) (m lane, doubt bool) {
	m.clear, doubt = between2(r.clear, k, w, slack.m)
	m.clearU, m.near, m.far = m.clear, 0, 0
	if m.clear < 0 && !doubt {
		return m, false
	}
	var dn, df bool
	m.near, dn = between2(r.near, k, w, slack.r)
	m.far, df = between2(r.far, k, w, slack.r)
	m.nearU, m.farU = m.near, m.far
	doubt = doubt || dn || df
	if r.clearU != nil {
		var dc bool
		m.clearU, dc = between2(r.clearU, k, w, slack.m)
		m.nearU, dn = between2(r.nearU, k, w, slack.r)
		m.farU, df = between2(r.farU, k, w, slack.r)
		doubt = doubt || dc || dn || df
	}
	return m, doubt
}

// between2 interpolates a margin between two lanes. At weight 0 the second does
// not count, also when it is NaN.
func between2(a []float32, k int, w, slack float32) (x float32, doubt bool) {
	x = a[k]
	if w == 0 {
		return x, !(x > slack || x < -slack)
	}
	y := a[k+1]
	m := x + w*(y-x)
	return m, !(m > slack && x > 0 && y > 0 || m < -slack && x <= 0 && y <= 0)
}

func (t *sheet) keep(i int, clear, fold float32) {
	if t.wantClear {
		t.clear[i] = clear
	}
	if t.wantFold {
		t.fold[i] = fold
	}
}

// lane holds margins as the lanes keep them.
type lane struct{ clear, near, far, clearU, nearU, farU float32 }

// settle replaces lane margins by those of an exact walk wherever the walk
// finds them below the slack.
func (t *sheet) settle(f *field, wk *walker, u, v int, m lane, slack slacks) lane {
	sm, sr := float64(slack.m), float64(slack.r)
	all := m.clear + m.near + m.far
	if !f.sure {
		all += m.clearU + m.nearU + m.farU
	}
	if all != all { // no lane margins: walk the whole reach
		sm, sr = math.Inf(1), math.Inf(1)
	}
	x := wk.settle(f, u, v, sm, sr)
	h := float64(f.z[(u-f.ua)*f.width+v-f.at[u-f.ua]])
	above, below := (f.lim.high-h)*f.ln.cos, (h-f.lim.low)*f.ln.cos
	pick := func(lane float32, walked, slack, most float64) float32 {
		if walked < slack || lane != lane {
			return float32(min(walked, most))
		}
		return max(lane, float32(slack))
	}
	out := lane{
		clear: pick(m.clear, x.clear, sm, h-f.lim.low),
		near:  pick(m.near, x.near, sr, above),
		far:   pick(m.far, x.far, sr, below),
	}
	out.clearU, out.nearU, out.farU = out.clear, out.near, out.far
	if !f.sure {
		out.clearU = pick(m.clearU, x.clearU, sm, h-f.lim.low)
		out.nearU = pick(m.nearU, x.nearU, sr, above)
		out.farU = pick(m.farU, x.farU, sr, below)
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
