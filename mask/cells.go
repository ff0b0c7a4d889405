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

// classify interpolates the lanes' margins to the cells, settles the doubtful
// ones and leaves the raw codes, with the margins when they are wanted.
func (t *sheet) classify(f *field, wk *walker) {
	n := t.w.Rows * t.w.Cols
	if t.wantClear {
		t.clear = resize(t.clear, n)
	}
	if t.wantFold {
		t.fold = resize(t.fold, n)
	}
	for u := f.u0; u < f.u1; u++ {
		t.classifyRow(f, wk, u)
	}
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
	f.ln.cross(u, &f.c)
	if f.ln.uniform {
		k := f.ln.laneOf(&f.c, float64(f.v0))
		whole := math.Floor(k)
		first, rest := int32(int(whole)-f.k0), float32(k-whole)
		for j := range t.lanes {
			t.lanes[j], t.weights[j] = first+int32(j), rest
		}
		return
	}
	for j := range t.lanes {
		k := f.ln.laneOf(&f.c, float64(f.v0+j))
		whole := math.Floor(k)
		t.lanes[j], t.weights[j] = int32(int(whole)-f.k0), float32(k-whole)
	}
}

func (t *sheet) classifyRow(f *field, wk *walker, u int) {
	t.locate(f, u)
	ln := f.ln
	slackM := float32(settleShare * ln.minDS * ln.cot)
	slackR := float32(settleShare * ln.minDS * ln.sin)
	from := (u - f.u0) * f.nk
	clear, near, far := f.clear[from:from+f.nk], f.near[from:from+f.nk], f.far[from:from+f.nk]
	at, stride := t.place(f, u)
	for j, k := range t.lanes {
		w := t.weights[j]
		i := at + j*stride
		z := t.z[i]
		if z != z {
			t.raw[i] = uint8(NoData)
			t.keep(i, float32(nan), float32(nan))
			continue
		}
		c := mix(clear[k], clear[k+1], w)
		a := mix(near[k], near[k+1], w)
		b := mix(far[k], far[k+1], w)
		m := lane{c, a, b, c, a, b}
		if !f.sure {
			m.clearU = mix(f.clearU[from+int(k)], f.clearU[from+int(k)+1], w)
			m.nearU = mix(f.nearU[from+int(k)], f.nearU[from+int(k)+1], w)
			m.farU = mix(f.farU[from+int(k)], f.farU[from+int(k)+1], w)
		}
		if m.doubtful(slackM, slackR, f.sure) || (clear[k] > 0) != (clear[k+1] > 0) ||
			c > 0 && ((near[k] > 0) != (near[k+1] > 0) || (far[k] > 0) != (far[k+1] > 0)) {
			m = t.settle(f, wk, u, f.v0+j, m, slackM, slackR)
		}
		t.raw[i] = uint8(m.raw())
		if m.clear > 0 {
			t.keep(i, m.clear, min(m.near, m.far))
		} else {
			t.keep(i, m.clear, float32(nan))
		}
	}
}

func (t *sheet) keep(i int, clear, fold float32) {
	if t.wantClear {
		t.clear[i] = clear
	}
	if t.wantFold {
		t.fold[i] = fold
	}
}

// mix interpolates between two lanes. At weight 0 the second does not count,
// also when it is NaN.
func mix(a, b, w float32) float32 {
	if w == 0 {
		return a
	}
	return a + w*(b-a)
}

// lane holds margins as the lanes keep them.
type lane struct{ clear, near, far, clearU, nearU, farU float32 }

// doubtful reports whether a margin that decides the cell is small against one
// row's worth of ground, or missing.
func (m *lane) doubtful(slackM, slackR float32, sure bool) bool {
	small := func(x, slack float32) bool { return !(x > slack || x < -slack) }
	if small(m.clear, slackM) {
		return true
	}
	if m.clear < 0 {
		return false
	}
	if small(m.near, slackR) || small(m.far, slackR) {
		return true
	}
	return !sure && (small(m.clearU, slackM) || small(m.nearU, slackR) || small(m.farU, slackR))
}

// settle replaces lane margins by those of an exact walk wherever the walk
// finds them below the slack.
func (t *sheet) settle(f *field, wk *walker, u, v int, m lane, slackM, slackR float32) lane {
	sm, sr := float64(slackM), float64(slackR)
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
