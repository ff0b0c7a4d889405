package mask

import (
	"math"

	"foldshade/dem"
)

// field is the part of the DEM that the cells [u0, u1) x [v0, v1) of one look
// depend on, in the marching frame, and what the march finds there.
//
// Heights are stored sheared: row u keeps the columns from at[u-ua] on, so
// that a lane stays in about the same stored column all the way and no room is
// spent on the corners of a slanting strip.
type field struct {
	ln             *lanes
	lim            limits
	u0, u1, v0, v1 int // the cells
	ua, ub         int // rows with heights: the cells' and the halo
	k0, nk         int // lanes k0 ... k0+nk-1

	width int       // stored columns a row
	at    []int     // first stored column of each row
	z     []float32 // heights, NaN where there is none
	tops  tops

	// By row from u0 to ub and lane: slant range, what to subtract from it
	// where the lit ground begins between the samples, and what is known.
	r    []float64
	dip  []float32
	seen []uint8
	// By row of the cells and lane: the margins. The march writes them for
	// the lanes; the cells interpolate.
	clear, near, far    []float32
	clearU, nearU, farU []float32 // counting terrain that the DEM does not show
	sure                bool      // no unknown terrain within reach: the U margins are not kept

	c    crossing
	h, s []float64
	m    []float64
	rr   []float64
	fwd  forwardState
	bwd  backwardState
	row  []float32 // scratch for reading
}

// limits is what a look may meet where the DEM shows nothing, and the DEM's
// own extremes.
type limits struct {
	low, high  float64 // the DEM's own lowest and highest height
	ceiling    float64 // highest terrain that unknown ground may carry
	openEdge   bool
	holeHeight float64 // NaN when holes are unknown
}

// reach returns how many rows towards the radar and away from it can matter
// to a cell: terrain nearer than relief tan(i) may hide it, terrain within
// relief cot(i) either way may share its slant range, and may itself be
// hidden.
func (ln *lanes) reach(lim limits) (near, far int) {
	relief := math.Max(lim.high, lim.ceiling) - lim.low
	rows := func(metres float64) int {
		return int(math.Min(metres/ln.minDS, float64(ln.orient.u))) + 2
	}
	return rows(relief * (ln.cot + ln.tan)), rows(relief * ln.cot)
}

// What is known of a sample.
const (
	unseen uint8 = iota // outside the DEM, in a hole, or hidden
	maybe               // lit unless unknown terrain hides it
	lit
)

// setUp sizes the field for a rectangle of cells.
func (f *field) setUp(ln *lanes, lim limits, u0, u1, v0, v1 int) {
	f.ln, f.lim = ln, lim
	f.u0, f.u1, f.v0, f.v1 = u0, u1, v0, v1
	near, far := ln.reach(lim)
	f.ua, f.ub = max(u0-near, 0), min(u1+far, ln.orient.u)
	lo, hi := math.Inf(1), math.Inf(-1)
	for u := u0; u < u1; u++ {
		if ln.uniform && u > u0 && u < u1-1 {
			continue
		}
		ln.cross(u, &f.c)
		lo = math.Min(lo, ln.laneOf(&f.c, float64(v0)))
		hi = math.Max(hi, ln.laneOf(&f.c, float64(v1-1)))
	}
	f.k0 = int(math.Floor(lo))
	f.nk = int(math.Floor(hi)) + 2 - f.k0
	rows := f.ub - f.ua
	f.at = resize(f.at, rows)
	f.width = 0
	for i := range rows {
		u := float64(f.ua + i)
		f.at[i] = int(math.Floor(ln.vAt(u, float64(f.k0)))) - 1
		end := int(math.Floor(ln.vAt(u, float64(f.k0+f.nk-1)))) + 3
		f.width = max(f.width, end-f.at[i])
	}
	f.z = resize(f.z, rows*f.width)
	f.h, f.s = resize(f.h, f.nk), resize(f.s, f.nk)
	f.m, f.rr = resize(f.m, f.nk), resize(f.rr, f.nk)
}

// resize returns a slice of length n, reusing a's memory when it can. The
// contents are arbitrary.
func resize[T any](a []T, n int) []T {
	if cap(a) < n {
		return make([]T, n)
	}
	return a[:n]
}

// bytesPerCell is the memory a field takes for each stored height.
const bytesPerCell = 4 + 8 + 4 + 1 + 6*4

// load reads the heights, a chunk of rows at a time, and notes whether any
// unknown terrain is among them.
func (f *field) load(src dem.Source) error {
	const chunk = 64
	o := f.ln.orient
	none := float32(nan)
	f.sure = f.lim.openEdge || f.ua > 0 && f.ub < o.u
	for a := f.ua; a < f.ub; a += chunk {
		b := min(a+chunk, f.ub)
		lo, hi := o.v, 0
		for u := a; u < b; u++ {
			lo, hi = min(lo, f.at[u-f.ua]), max(hi, f.at[u-f.ua]+f.width)
		}
		if !f.lim.openEdge && (lo < 0 || hi > o.v) {
			f.sure = false
		}
		lo, hi = max(lo, 0), min(hi, o.v)
		if lo >= hi {
			fillWith(f.z[(a-f.ua)*f.width:(b-f.ua)*f.width], none)
			continue
		}
		w := o.grid(a, b, lo, hi)
		f.row = resize(f.row, w.Rows*w.Cols)
		if err := src.Read(w, f.row); err != nil {
			return err
		}
		f.fillHoles(f.row)
		for u := a; u < b; u++ {
			f.place(u, a, b, lo, hi, none)
		}
	}
	f.tops.build(f)
	return nil
}

func fillWith(a []float32, x float32) {
	for i := range a {
		a[i] = x
	}
}

// fillHoles puts the hole height where the user gave one.
func (f *field) fillHoles(z []float32) {
	hole := float32(f.lim.holeHeight)
	for i, h := range z {
		if h != h {
			z[i] = hole
			if hole != hole {
				f.sure = false
			}
		}
	}
}

// place copies marching row u out of the chunk [a, b) x [lo, hi) just read.
func (f *field) place(u, a, b, lo, hi int, none float32) {
	dst := f.z[(u-f.ua)*f.width : (u-f.ua+1)*f.width]
	at := f.at[u-f.ua]
	from, to := max(at, lo), min(at+f.width, hi)
	fillWith(dst[:min(max(from-at, 0), len(dst))], none)
	fillWith(dst[min(max(to-at, 0), len(dst)):], none)
	if from >= to {
		return
	}
	o := f.ln.orient
	i := u - a
	if o.flip {
		i = b - 1 - u
	}
	if !o.transposed {
		copy(dst[from-at:to-at], f.row[i*(hi-lo)+from-lo:i*(hi-lo)+to-lo])
		return
	}
	stride := b - a
	for v := from; v < to; v++ {
		dst[v-at] = f.row[(v-lo)*stride+i]
	}
}

// sample fills f.h with the heights and f.s with the ground distances of the
// lanes at row u, then f.m and f.rr.
func (f *field) sample(u int) {
	ln := f.ln
	ln.cross(u, &f.c)
	z := f.z[(u-f.ua)*f.width : (u-f.ua+1)*f.width]
	at := f.at[u-f.ua]
	h := f.h
	if ln.uniform {
		v := float64(f.k0) + float64(ln.slope*float64(u))
		i := math.Floor(v)
		rest := v - i
		z = z[int(i)-at:]
		if rest == 0 {
			for k := range h {
				h[k] = float64(z[k])
			}
		} else {
			z = z[:len(h)+1]
			p := float64(z[0])
			for k := range h {
				q := float64(z[k+1])
				h[k] = p + float64(rest*(q-p))
				p = q
			}
		}
	}
	for k := 0; k < f.nk; {
		j := (f.k0 + k - ln.first) / laneStep
		kb := ln.first + laneStep*j
		end := min(f.nk, kb+laneStep-f.k0)
		s0, ds := f.c.s[j], (f.c.s[j+1]-f.c.s[j])/laneStep
		if ln.uniform {
			for ; k < end; k++ {
				f.s[k] = s0 + float64(ds*float64(f.k0+k-kb))
			}
			continue
		}
		v0, dv := f.c.v[j], (f.c.v[j+1]-f.c.v[j])/laneStep
		for ; k < end; k++ {
			t := float64(f.k0 + k - kb)
			f.s[k] = s0 + float64(ds*t)
			h[k] = lerp(z, v0+float64(dv*t)-float64(at))
		}
	}
	m, r := f.m[:len(h)], f.rr[:len(h)]
	s := f.s[:len(h)]
	cot, sin, cos := ln.cot, ln.sin, ln.cos
	for k, h := range h {
		m[k] = h + float64(cot*s[k])
		r[k] = float64(sin*s[k]) - float64(cos*h)
	}
}

// lerp returns the height at the fractional index x of a row, NaN where a
// height that counts is missing.
func lerp(z []float32, x float64) float64 {
	i := int(x)
	rest := x - float64(i)
	if rest == 0 {
		return float64(z[i])
	}
	p, q := float64(z[i]), float64(z[i+1])
	return p + float64(rest*(q-p))
}

// inside reports whether lane k's column at row u lies in the DEM.
func (f *field) inside(u, k int) bool {
	v := f.ln.vAt(float64(u), float64(f.k0+k))
	return v >= 0 && v <= float64(f.ln.orient.v-1)
}

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

func (st *forwardState) reset(n int, unknown bool) {
	for _, a := range []*[]float64{&st.top, &st.topU, &st.most, &st.mostU, &st.m, &st.r} {
		*a = resize(*a, n)
		for i := range *a {
			(*a)[i] = math.Inf(-1)
		}
	}
	st.hid, st.unknown = resize(st.hid, n), resize(st.unknown, n)
	for i := range n {
		st.hid[i], st.unknown[i] = false, unknown
	}
}

// march runs both passes and leaves the lanes' margins.
func (f *field) march() {
	n := (f.ub - f.u0) * f.nk
	f.r, f.dip, f.seen = resize(f.r, n), resize(f.dip, n), resize(f.seen, n)
	n = (f.u1 - f.u0) * f.nk
	f.clear, f.near, f.far = resize(f.clear, n), resize(f.near, n), resize(f.far, n)
	if !f.sure {
		f.clearU, f.nearU, f.farU = resize(f.clearU, n), resize(f.nearU, n), resize(f.farU, n)
	}
	f.forward()
	f.backward()
}

// forward walks from near range to far range. The margins are capped at what
// terrain at the edge of the reach could leave, so that they do not depend on
// how much farther the field happens to extend. A tie counts against the point:
// a look angle equal to the largest so far is hidden, an equal slant range is
// folded.
func (f *field) forward() {
	st := &f.fwd
	st.reset(f.nk, f.ua == 0 && !f.lim.openEdge)
	for u := f.ua; u < f.ub; u++ {
		f.sample(u)
		if f.sure {
			f.forwardSure(u)
		} else {
			f.forwardRow(u)
		}
		st.m, f.m = f.m, st.m
		st.r, f.rr = f.rr, st.r
	}
}

// forwardSure is forwardRow where no unknown terrain is within reach. Only
// lanes outside an open DEM may lack heights.
func (f *field) forwardSure(u int) {
	st, ln := &f.fwd, f.ln
	n := f.nk
	h, m, r := f.h[:n], f.m[:n], f.rr[:n]
	top, most, pm, pr, hid := st.top[:n], st.most[:n], st.m[:n], st.r[:n], st.hid[:n]
	keep, cells := u >= f.u0, u >= f.u0 && u < f.u1
	at := (u - f.u0) * n
	low, high, cos := f.lim.low, f.lim.high, ln.cos
	for k, mk := range m {
		if mk != mk {
			if keep {
				f.r[at+k], f.seen[at+k] = nan, unseen
			}
			if cells {
				f.clear[at+k], f.near[at+k] = float32(nan), float32(nan)
			}
			hid[k] = false
			continue
		}
		tk, rk := top[k], r[k]
		if cells {
			f.clear[at+k] = float32(min(mk-tk, h[k]-low))
			f.near[at+k] = float32(min(rk-most[k], (high-h[k])*cos))
			f.far[at+k] = float32((h[k] - low) * cos)
		}
		state, dip := unseen, 0.0
		if mk > tk {
			state = lit
			best := rk
			if hid[k] {
				edge := pr[k] + (tk-pm[k])/(mk-pm[k])*(rk-pr[k])
				dip = max(rk-edge, 0)
				best = max(rk, edge)
			}
			top[k] = mk
			if best > most[k] {
				most[k] = best
			}
		}
		hid[k] = state == unseen
		if keep {
			f.r[at+k], f.dip[at+k], f.seen[at+k] = rk, float32(dip), state
		}
	}
}

func (f *field) forwardRow(u int) {
	st := &f.fwd
	keep, cells := u >= f.u0, u >= f.u0 && u < f.u1
	at := (u - f.u0) * f.nk
	ln, lim := f.ln, f.lim
	for k, mk := range f.m[:f.nk] {
		if mk != mk {
			st.unknown[k] = !lim.openEdge || f.inside(u, k)
			st.hid[k] = false
			if keep {
				f.r[at+k], f.seen[at+k] = nan, unseen
			}
			if cells {
				f.clear[at+k], f.near[at+k] = float32(nan), float32(nan)
				f.clearU[at+k], f.nearU[at+k] = float32(nan), float32(nan)
			}
			continue
		}
		h, rk := f.h[k], f.rr[k]
		if st.unknown[k] {
			// Unknown terrain ends somewhere between the rows: at worst here.
			st.unknown[k] = false
			st.topU[k] = max(st.topU[k], mk+(lim.ceiling-h))
			st.mostU[k] = max(st.mostU[k], rk+(h-lim.low)*ln.cos)
		}
		tk := st.top[k]
		if cells {
			above, below := (lim.high-h)*ln.cos, (h-lim.low)*ln.cos
			f.clear[at+k] = float32(min(mk-tk, h-lim.low))
			f.clearU[at+k] = float32(min(mk-st.topU[k], h-lim.low))
			f.near[at+k] = float32(min(rk-st.most[k], above))
			f.nearU[at+k] = float32(min(rk-st.mostU[k], above))
			f.far[at+k], f.farU[at+k] = float32(below), float32(below)
		}
		state, dip := unseen, 0.0
		if mk > tk {
			state = maybe
			best := rk
			if st.hid[k] {
				edge := st.r[k] + (tk-st.m[k])/(mk-st.m[k])*(rk-st.r[k])
				dip = max(rk-edge, 0)
				best = max(rk, edge)
			}
			st.top[k] = mk
			st.mostU[k] = max(st.mostU[k], best)
			if mk > st.topU[k] {
				state = lit
				st.most[k] = max(st.most[k], best)
			}
		}
		st.hid[k] = state == unseen
		if keep {
			f.r[at+k], f.dip[at+k], f.seen[at+k] = rk, float32(dip), state
		}
	}
}

// backwardState is the march towards the radar, by lane.
type backwardState struct {
	least, leastU []float64 // smallest slant range of lit ground so far
	unknown       []bool
}

// backward walks from far range to near range over what forward left.
func (f *field) backward() {
	st := &f.bwd
	n := f.nk
	st.least, st.leastU, st.unknown = resize(st.least, n), resize(st.leastU, n), resize(st.unknown, n)
	edge := f.ub == f.ln.orient.u && !f.lim.openEdge
	for k := range n {
		st.least[k], st.leastU[k], st.unknown[k] = math.Inf(1), math.Inf(1), edge
	}
	for u := f.ub - 1; u >= f.u0; u-- {
		if f.sure {
			f.backwardSure(u)
		} else {
			f.backwardRow(u)
		}
	}
}

func (f *field) backwardSure(u int) {
	n := f.nk
	at := (u - f.u0) * n
	least := f.bwd.least[:n]
	r, dip, seen := f.r[at:at+n], f.dip[at:at+n], f.seen[at:at+n]
	if u < f.u1 {
		far := f.far[at : at+n]
		for k, rk := range r {
			far[k] = min(far[k], float32(least[k]-rk))
		}
	}
	for k, rk := range r {
		if seen[k] == lit {
			if e := rk - float64(dip[k]); e < least[k] {
				least[k] = e
			}
		}
	}
}

func (f *field) backwardRow(u int) {
	st := &f.bwd
	at := (u - f.u0) * f.nk
	ln, lim := f.ln, f.lim
	var heights bool
	for k := range f.nk {
		rk := f.r[at+k]
		if rk != rk {
			st.unknown[k] = !lim.openEdge || f.inside(u, k)
			if u < f.u1 {
				f.far[at+k], f.farU[at+k] = float32(nan), float32(nan)
			}
			continue
		}
		if st.unknown[k] {
			st.unknown[k] = false
			if !heights {
				f.sample(u)
				heights = true
			}
			st.leastU[k] = min(st.leastU[k], rk-(lim.ceiling-f.h[k])*ln.cos)
		}
		if u < f.u1 {
			f.far[at+k] = min(f.far[at+k], float32(st.least[k]-rk))
			f.farU[at+k] = min(f.farU[at+k], float32(st.leastU[k]-rk))
		}
		if f.seen[at+k] != unseen {
			e := rk - float64(f.dip[at+k])
			st.leastU[k] = min(st.leastU[k], e)
			if f.seen[at+k] == lit {
				st.least[k] = min(st.least[k], e)
			}
		}
	}
}
