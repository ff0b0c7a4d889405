package mask

import "math"

// forwardState is the march away from the radar, by lane.
type forwardState struct {
	top     []float64 // largest m so far
	topU    []float64 // the same of unknown terrain at the ceiling
	most    []float64 // largest slant range of surely lit ground so far
	mostU   []float64 // the same of all ground that may be lit
	m, r    []float64 // the row before
	hid     []bool    // the row before was hidden
	unknown []bool    // the row before was unknown terrain
}

func (st *forwardState) reset(n int) {
	for _, a := range []*[]float64{&st.top, &st.topU, &st.most, &st.mostU, &st.m, &st.r} {
		*a = resize(*a, n)
		for i := range *a {
			(*a)[i] = math.Inf(-1)
		}
	}
	st.hid, st.unknown = resize(st.hid, n), resize(st.unknown, n)
	for i := range n {
		st.hid[i], st.unknown[i] = false, false
	}
}

// forward walks from near range to far range. The margins are capped at what
// terrain at the edge of the reach could leave, so that they do not depend on
// how much farther the field happens to extend. A tie counts against the point:
// a look angle equal to the largest so far is hidden, an equal slant range is
// folded.
func (f *field) forward() {
	f.dip = resize(f.dip, (f.ub-f.u0)*f.nk)
	n := (f.u1 - f.u0) * f.nk
	f.clear, f.near0 = resize(f.clear, n), resize(f.near0, n)
	if !f.sure {
		f.clearU, f.near0U = resize(f.clearU, n), resize(f.near0U, n)
	}
	st := &f.fwd
	st.reset(f.nk)
	prev := span{f.nk, f.nk}
	for u := f.ua; u < f.ub; u++ {
		l := f.spanAt(u)
		f.sample(u, l, true)
		if !f.sure && !f.lim.openEdge {
			f.enter(l, prev, u, -1, func(k int) { st.unknown[k] = true })
		}
		f.blank(u, l)
		if f.sure {
			f.forwardSure(u, l)
		} else {
			f.forwardRow(u, l)
		}
		st.m, f.m = f.m, st.m
		st.r, f.rr = f.rr, st.r
		prev = l
	}
}

// enter calls mark for each lane of the span l, new since prev, that enters the
// DEM at row u; dir points back along the march.
func (f *field) enter(l, prev span, u, dir int, mark func(k int)) {
	for k := l.a; k < l.b; k++ {
		if k >= prev.a && k < prev.b {
			k = prev.b - 1
		} else if !f.inside(u+dir, k) {
			mark(k)
		}
	}
}

// blank says of the lanes outside the span that nothing is known.
func (f *field) blank(u int, l span) {
	if u < f.u0 {
		return
	}
	at := (u - f.u0) * f.nk
	for _, p := range [2]span{{0, l.a}, {max(l.a, l.b), f.nk}} {
		fillWith(f.dip[at+p.a:at+p.b], float32(nan))
		if u < f.u1 {
			fillWith(f.clear[at+p.a:at+p.b], float32(nan))
			fillWith(f.near0[at+p.a:at+p.b], float32(nan))
			if !f.sure {
				fillWith(f.clearU[at+p.a:at+p.b], float32(nan))
				fillWith(f.near0U[at+p.a:at+p.b], float32(nan))
			}
		}
	}
}

// forwardSure is forwardRow where no unknown terrain is within reach and no
// height is missing.
func (f *field) forwardSure(u int, l span) {
	st := &f.fwd
	n := l.b - l.a
	if n <= 0 {
		return
	}
	h, m, r := f.h[l.a:][:n], f.m[l.a:][:n], f.rr[l.a:][:n]
	top, most, pm, pr, hid := st.top[l.a:][:n], st.most[l.a:][:n], st.m[l.a:][:n], st.r[l.a:][:n], st.hid[l.a:][:n]
	if u >= f.u0 && u < f.u1 {
		at := (u-f.u0)*f.nk + l.a
		clear, near := f.clear[at:][:n], f.near0[at:][:n]
		low, high, cos := f.lim.low, f.lim.high, f.ln.cos
		for k, h := range h {
			c, a := m[k]-top[k], r[k]-most[k]
			if most := h - low; c > most {
				c = most
			}
			if most := (high - h) * cos; a > most {
				a = most
			}
			clear[k], near[k] = float32(c), float32(a)
		}
	}
	var dip []float32
	if u >= f.u0 {
		dip = f.dip[(u-f.u0)*f.nk+l.a:][:n]
	}
	for k, mk := range m {
		tk, rk := top[k], r[k]
		if mk <= tk {
			hid[k] = true
			if dip != nil {
				dip[k] = float32(nan)
			}
			continue
		}
		best, d := rk, 0.0
		if hid[k] {
			edge := pr[k] + (tk-pm[k])/(mk-pm[k])*(rk-pr[k])
			if edge > rk {
				best = edge
			} else {
				d = rk - edge
			}
			hid[k] = false
		}
		top[k] = mk
		if best > most[k] {
			most[k] = best
		}
		if dip != nil {
			dip[k] = float32(d)
		}
	}
}

// forwardRow marches one row where terrain may be unknown.
func (f *field) forwardRow(u int, l span) {
	st, ln, lim := &f.fwd, f.ln, f.lim
	keep, cells := u >= f.u0, u >= f.u0 && u < f.u1
	at := (u - f.u0) * f.nk
	for k := l.a; k < l.b; k++ {
		mk, h, rk := f.m[k], f.h[k], f.rr[k]
		if mk != mk {
			st.unknown[k], st.hid[k] = true, false
			if keep {
				f.dip[at+k] = float32(nan)
			}
			if cells {
				f.clear[at+k], f.near0[at+k] = float32(nan), float32(nan)
				f.clearU[at+k], f.near0U[at+k] = float32(nan), float32(nan)
			}
			continue
		}
		if st.unknown[k] {
			// Unknown terrain ends somewhere between the rows: at worst here.
			st.unknown[k] = false
			st.topU[k] = max(st.topU[k], mk+(lim.ceiling-h))
			st.mostU[k] = max(st.mostU[k], rk+(h-lim.low)*ln.cos)
		}
		tk := st.top[k]
		if cells {
			below, above := h-lim.low, (lim.high-h)*ln.cos
			f.clear[at+k] = float32(lesser(mk-tk, below))
			f.clearU[at+k] = float32(lesser(mk-st.topU[k], below))
			f.near0[at+k] = float32(lesser(rk-st.most[k], above))
			f.near0U[at+k] = float32(lesser(rk-st.mostU[k], above))
		}
		if mk <= tk {
			st.hid[k] = true
			if keep {
				f.dip[at+k] = float32(nan)
			}
			continue
		}
		best, d := rk, 0.0
		if st.hid[k] {
			edge := st.r[k] + (tk-st.m[k])/(mk-st.m[k])*(rk-st.r[k])
			if edge > rk {
				best = edge
			} else {
				d = rk - edge
			}
			st.hid[k] = false
		}
		st.top[k] = mk
		if best > st.mostU[k] {
			st.mostU[k] = best
		}
		if mk > st.topU[k] {
			if best > st.most[k] {
				st.most[k] = best
			}
		} else {
			d = math.Copysign(d, -1)
		}
		if keep {
			f.dip[at+k] = float32(d)
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
	least, leastU []float64 // smallest slant range of lit ground so far
	unknown       []bool
}

// backward walks from far range to near range over what forward left. When it
// has reached a row of cells, with the margins to the ground farther away, it
// hands the row to cells.
func (f *field) backward(cells func(u int)) {
	st := &f.bwd
	n := f.nk
	st.least, st.leastU, st.unknown = resize(st.least, n), resize(st.leastU, n), resize(st.unknown, n)
	f.far0, f.far0U = resize(f.far0, n), resize(f.far0U, n)
	for k := range n {
		st.least[k], st.leastU[k], st.unknown[k] = math.Inf(1), math.Inf(1), false
	}
	prev := span{n, n}
	for u := f.ub - 1; u >= f.u0; u-- {
		l := f.spanAt(u)
		f.sample(u, l, false)
		if !f.sure && !f.lim.openEdge {
			f.enter(l, prev, u, 1, func(k int) { st.unknown[k] = true })
		}
		for _, p := range [2]span{{0, l.a}, {max(l.a, l.b), n}} {
			fillWith(f.far0[p.a:p.b], float32(nan))
			fillWith(f.far0U[p.a:p.b], float32(nan))
		}
		if f.sure {
			f.backwardSure(u, l, cells)
		} else {
			f.backwardRow(u, l, cells)
		}
		prev = l
	}
}

func (f *field) backwardSure(u int, l span, cells func(u int)) {
	n := max(l.b-l.a, 0)
	least := f.bwd.least[l.a:][:n]
	r, h := f.rr[l.a:][:n], f.h[l.a:][:n]
	if u < f.u1 {
		far := f.far0[l.a:][:n]
		low, cos := f.lim.low, f.ln.cos
		for k, rk := range r {
			far[k] = float32(lesser(least[k]-rk, (h[k]-low)*cos))
		}
		cells(u)
	}
	at := (u-f.u0)*f.nk + l.a
	for k, d := range f.dip[at:][:n] {
		if d == d {
			if e := r[k] - float64(d); e < least[k] {
				least[k] = e
			}
		}
	}
}

func (f *field) backwardRow(u int, l span, cells func(u int)) {
	st, ln, lim := &f.bwd, f.ln, f.lim
	at := (u - f.u0) * f.nk
	for k := l.a; k < l.b; k++ {
		rk, h := f.rr[k], f.h[k]
		if rk != rk {
			st.unknown[k] = true
			f.far0[k], f.far0U[k] = float32(nan), float32(nan)
			continue
		}
		if st.unknown[k] {
			st.unknown[k] = false
			st.leastU[k] = min(st.leastU[k], rk-(lim.ceiling-h)*ln.cos)
		}
		below := (h - lim.low) * ln.cos
		f.far0[k] = float32(lesser(st.least[k]-rk, below))
		f.far0U[k] = float32(lesser(st.leastU[k]-rk, below))
	}
	if u < f.u1 {
		cells(u)
	}
	for k := l.a; k < l.b; k++ {
		d := f.dip[at+k]
		if d != d {
			continue
		}
		e := f.rr[k] - math.Abs(float64(d))
		st.leastU[k] = min(st.leastU[k], e)
		if !math.Signbit(float64(d)) {
			st.least[k] = min(st.least[k], e)
		}
	}
}
