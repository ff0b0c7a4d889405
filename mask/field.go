package mask

import (
	"math"

	"foldshade/dem"
)

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
	return rows(relief * (ln.cotMost + ln.tanMost)), rows(relief * ln.cotMost)
}

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
	near, far      int // reach towards the radar and away from it, rows
	ua, ub         int // rows with heights: the cells' and the halo
	first, strips  int // columns of the lane lattice that the cells lie in
	k0             int // lane of the first of these columns

	width int       // stored columns a row
	at    []int     // first stored column of each row
	z     []float32 // heights, NaN where there is none
	sure  bool      // no unknown terrain within reach: the U margins are not kept

	row []float32 // scratch for reading
}

// setUp sizes the field for a rectangle of cells.
func (f *field) setUp(ln *lanes, lim limits, u0, u1, v0, v1 int) {
	f.ln, f.lim = ln, lim
	f.u0, f.u1, f.v0, f.v1 = u0, u1, v0, v1
	f.near, f.far = ln.reach(lim)
	f.ua, f.ub = max(u0-f.near, ln.firstRow()), min(u1+f.far, ln.orient.u)
	a, b := math.Inf(1), math.Inf(-1)
	for _, u := range [2]int{u0, u1 - 1} { // a lane drifts one way only
		a = math.Min(a, ln.lane(float64(u), float64(v0)))
		b = math.Max(b, ln.lane(float64(u), float64(v1-1)))
	}
	if ln.places != nil { // lanes of a track may bend on the way
		for u := u0 + 1; u < u1-1; u++ {
			a = math.Min(a, ln.lane(float64(u), float64(v0)))
			b = math.Max(b, ln.lane(float64(u), float64(v1-1)))
		}
	}
	// A cell on the line between two strips may fall to either by rounding.
	f.first = (int(math.Floor(a-1e-6)) - ln.first) / laneStep
	f.strips = (int(math.Floor(b+1e-6))-ln.first)/laneStep + 1 - f.first
	last := min(f.first+f.strips, ln.nk-1) // fans have no lanes outside their quarter
	f.first = max(f.first, 0)
	f.strips = max(last-f.first, 0)
	f.k0 = ln.first + laneStep*f.first
	k0, k1 := f.k0-1, f.k0+laneStep*f.strips+1
	rows := f.ub - f.ua
	f.at = resize(f.at, rows)
	f.width = 0
	for i := range rows {
		u := float64(f.ua + i)
		f.at[i] = int(math.Floor(ln.vAt(u, float64(k0)))) - 2
		end := int(math.Floor(ln.vAt(u, float64(k1)))) + 4
		f.width = max(f.width, end-f.at[i])
	}
	f.z = resize(f.z, rows*f.width)
}

// resize returns a slice of length n, reusing a's memory when it can. The
// contents are arbitrary.
func resize[T any](a []T, n int) []T {
	if cap(a) < n {
		return make([]T, n)
	}
	return a[:n]
}

// chunkCells is about how many heights are read at once: few enough that they
// are still in a processor's cache when they are put in their rows.
const chunkCells = 96 << 10

// load reads the heights, a chunk of rows at a time, and notes whether any
// unknown terrain is among them.
func (f *field) load(src dem.Source) error {
	o := f.ln.orient
	chunk := max(chunkCells/max(f.width, 1)&^7, 32)
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
			fillWith(f.z[(a-f.ua)*f.width:(b-f.ua)*f.width], float32(nan))
			continue
		}
		w := o.grid(a, b, lo, hi)
		f.row = resize(f.row, w.Rows*w.Cols)
		if err := src.Read(w, f.row); err != nil {
			return err
		}
		if !complete(f.row) {
			f.fillHoles(f.row)
		}
		f.place(a, b, lo, hi)
	}
	return nil
}

// complete reports whether no height is missing.
func complete(z []float32) bool {
	if vectors {
		return completeVector(z)
	}
	return completeScalar(z)
}

func completeScalar(z []float32) bool {
	for _, h := range z {
		if h != h {
			return false
		}
	}
	return true
}

func fillWith(a []float32, x float32) {
	if len(a) > 0 {
		a[0] = x
	}
	for n := 1; n < len(a); n *= 2 { // copying beats storing one by one
		copy(a[n:], a[:n])
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

// place copies the chunk [a, b) x [lo, hi) just read to its rows.
func (f *field) place(a, b, lo, hi int) {
	o := f.ln.orient
	for u := a; u < b; u++ {
		dst := f.z[(u-f.ua)*f.width : (u-f.ua+1)*f.width]
		at := f.at[u-f.ua]
		from, to := f.stored(u, lo, hi)
		fillWith(dst[:min(from-at, len(dst))], float32(nan))
		fillWith(dst[max(to-at, 0):], float32(nan))
		if from >= to || o.transposed {
			continue
		}
		i := u - a
		if o.flip {
			i = b - 1 - u
		}
		copy(dst[from-at:to-at], f.row[i*(hi-lo)+from-lo:i*(hi-lo)+to-lo])
	}
	if o.transposed {
		for i := 0; i < b-a; i += 8 {
			f.turn(a, b, lo, hi, i)
		}
	}
}

// stored returns the columns of [lo, hi) that row u stores.
func (f *field) stored(u, lo, hi int) (from, to int) {
	at := f.at[u-f.ua]
	return max(at, lo), min(at+f.width, hi)
}

// turn copies the columns i to i+7 of a transposed chunk to their rows: eight
// heights of each at a time where all of them are stored.
func (f *field) turn(a, b, lo, hi, i int) {
	n, m := b-a, min(8, b-a-i)
	var rows [8]int // index of column 0 in f.z
	row := func(k int) int {
		if f.ln.orient.flip {
			return b - 1 - i - k
		}
		return a + i + k
	}
	va, vb := lo, hi
	for k := range m {
		u := row(k)
		from, to := f.stored(u, lo, hi)
		rows[k] = (u-f.ua)*f.width - f.at[u-f.ua]
		va, vb = max(va, from), min(vb, to)
	}
	if m < 8 || !vectors {
		vb = va
	}
	vb = va + max(vb-va, 0)&^7
	if va < vb {
		turnVector(f.z, &rows, f.row[i:], n, lo, va, vb)
	}
	for k := range m {
		from, to := f.stored(row(k), lo, hi)
		for v := from; v < to; v++ {
			if v == va {
				if v = max(vb, v); v >= to {
					break
				}
			}
			f.z[rows[k]+v] = f.row[(v-lo)*n+i+k]
		}
	}
}

// onColumn is the distance from a column, in columns, that is taken for none:
// rounding must not let a missing neighbour count.
const onColumn = 1e-9

// heightsAt fills h with the heights at the same fraction of every step of z.
func heightsAt(h []float64, z []float32, rest float64) {
	if rest > 1-onColumn {
		z, rest = z[1:], 0
	}
	if rest < onColumn {
		for k := range h {
			h[k] = float64(z[k])
		}
		return
	}
	z = z[:len(h)+1]
	p := float64(z[0])
	for k := range h {
		q := float64(z[k+1])
		h[k] = p + float64(rest*(q-p))
		p = q
	}
}

// lerp returns the height at the fractional index x of a row, NaN where a
// height that counts is missing.
func lerp(z []float32, x float64) float64 {
	i := int(x)
	rest := x - float64(i)
	if rest < onColumn {
		return float64(z[i])
	}
	if rest > 1-onColumn {
		return float64(z[i+1])
	}
	p, q := float64(z[i]), float64(z[i+1])
	return p + float64(rest*(q-p))
}
