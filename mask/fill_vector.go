//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"
	"simd/archsimd"

	"foldshade/geometry"
)

// Each function of vectors ends with ClearAVXUpperBits: the compiler leaves the
// upper halves of the registers as they are, and the scalar code that follows
// would take twice its time.

// centralVector is centralScalar, eight at a time.
func centralVector(d, before, mid, after []float32) bool {
	n := len(d) &^ 7
	whole := central8(d, before, mid, after, n)
	archsimd.ClearAVXUpperBits()
	return centralScalar(d[n:], before[n:], mid[n:], after[n:]) && whole
}

// central8 is centralVector for the first n, a multiple of eight.
//
//go:noinline
func central8(d, before, mid, after []float32, n int) bool {
	before, mid, after = before[:len(d)], mid[:len(d)], after[:len(d)]
	half := eightOf(0.5)
	ok := half.Equal(half)
	for j := 0; j < n; j += 8 {
		x := archsimd.LoadFloat32x8((*[8]float32)(after[j:])).Sub(archsimd.LoadFloat32x8((*[8]float32)(before[j:]))).Mul(half)
		x.Store((*[8]float32)(d[j:]))
		h := archsimd.LoadFloat32x8((*[8]float32)(mid[j:]))
		ok = ok.And(x.Equal(x)).And(h.Equal(h))
	}
	return ok.ToBits() == 0xff
}

// completeVector is completeScalar, eight at a time.
func completeVector(z []float32) bool {
	n := len(z) &^ 7
	whole := complete8(z, n)
	archsimd.ClearAVXUpperBits()
	return whole && completeScalar(z[n:])
}

// complete8 is completeVector for the first n, a multiple of eight.
//
//go:noinline
func complete8(z []float32, n int) bool {
	one := eightOf(1)
	ok := one.Equal(one)
	for j := 0; j < n; j += 8 {
		h := archsimd.LoadFloat32x8((*[8]float32)(z[j:]))
		ok = ok.And(h.Equal(h))
	}
	return ok.ToBits() == 0xff
}

// turnVector copies eight columns of src, the rows lo and following of which are n
// long, to as many rows of dst, for the rows va to vb of src: a multiple of eight.
// rows says where in dst the row of each column begins, at row 0 of src.
func turnVector(dst []float32, rows *[8]int, src []float32, n, lo, va, vb int) {
	for v := va; v < vb; v += 8 {
		squareVector(dst, rows, v, src, (v-lo)*n, n)
	}
	archsimd.ClearAVXUpperBits()
}

// squareVector writes the columns of eight by eight numbers, whose rows begin at
// first, first + step and so on of src, to dst: column k from rows[k] + at on.
func squareVector(dst []float32, rows *[8]int, at int, src []float32, first, step int) {
	load := func(k int) archsimd.Int32x8 {
		return archsimd.LoadFloat32x8((*[8]float32)(src[first+k*step:])).AsInt32x8()
	}
	store := func(k int, x archsimd.Int32x8) {
		x.AsFloat32x8().Store((*[8]float32)(dst[rows[k]+at:]))
	}
	// Pairs of rows, then fours, by halves of a vector.
	a, b, c, d := fours(load(0), load(1), load(2), load(3))
	e, f, g, h := fours(load(4), load(5), load(6), load(7))
	store(0, a.Select128FromPair(0, 2, e))
	store(1, b.Select128FromPair(0, 2, f))
	store(2, c.Select128FromPair(0, 2, g))
	store(3, d.Select128FromPair(0, 2, h))
	store(4, a.Select128FromPair(1, 3, e))
	store(5, b.Select128FromPair(1, 3, f))
	store(6, c.Select128FromPair(1, 3, g))
	store(7, d.Select128FromPair(1, 3, h))
}

// fours returns the columns of four rows: the first to fourth column in the low
// halves, the fifth to eighth in the high ones.
func fours(p, q, r, s archsimd.Int32x8) (a, b, c, d archsimd.Int32x8) {
	lo, hi := p.InterleaveLoGrouped(q).AsInt64x4(), p.InterleaveHiGrouped(q).AsInt64x4()
	lo2, hi2 := r.InterleaveLoGrouped(s).AsInt64x4(), r.InterleaveHiGrouped(s).AsInt64x4()
	return lo.InterleaveLoGrouped(lo2).AsInt32x8(), lo.InterleaveHiGrouped(lo2).AsInt32x8(),
		hi.InterleaveLoGrouped(hi2).AsInt32x8(), hi.InterleaveHiGrouped(hi2).AsInt32x8()
}

// blockVector is seeBlock for a whole block that begins at a column, four cells
// at a time.
func blockVector(w *worker, a, b *view, from int) {
	zc, zr := (*[viewStep]float32)(w.zc[from:]), (*[viewStep]float32)(w.zr[from:])
	aUp0, aUp1 := fourAt(&a.up[0]), fourAt(&a.up[1])
	dUp0, dUp1 := fourAt(&b.up[0]).Sub(aUp0), fourAt(&b.up[1]).Sub(aUp1)
	aC0, aC1 := fourAt(&a.c[0]), fourAt(&a.c[1])
	dC0, dC1 := fourAt(&b.c[0]).Sub(aC0), fourAt(&b.c[1]).Sub(aC1)
	aR0, aR1 := fourAt(&a.r[0]), fourAt(&a.r[1])
	dR0, dR1 := fourAt(&b.r[0]).Sub(aR0), fourAt(&b.r[1]).Sub(aR1)
	lim, zero := fourAt(&w.job.Options.CompressedBelow), zero4()
	layover, shadow, compressed := archsimd.LoadInt64x4(&layover4), archsimd.LoadInt64x4(&shadow4), archsimd.LoadInt64x4(&compressed4)
	// Lane l collects the turns of the cells l, 4 + l, 8 + l and so on, one a byte.
	var sum archsimd.Int64x4
	for i := viewStep - 4; i >= 0; i -= 4 {
		t := archsimd.LoadFloat64x4((*[4]float64)(blockParts[i:]))
		c := archsimd.LoadFloat32x4((*[4]float32)(zc[i:])).ConvertToFloat64()
		r := archsimd.LoadFloat32x4((*[4]float32)(zr[i:])).ConvertToFloat64()
		up0, up1 := aUp0.Add(t.Mul(dUp0)), aUp1.Add(t.Mul(dUp1))
		along := up0.Add(c.Mul(aC0.Add(t.Mul(dC0)))).Add(r.Mul(aR0.Add(t.Mul(dR0))))
		above := up1.Add(c.Mul(aC1.Add(t.Mul(dC1)))).Add(r.Mul(aR1.Add(t.Mul(dR1))))
		low := above.Less(lim.Mul(up1))
		turn := low.ToInt64x4().And(compressed)
		turn = turn.Or(low.And(above.LessEqual(zero)).ToInt64x4().And(layover))
		turn = turn.Or(along.LessEqual(zero).ToInt64x4().And(shadow))
		sum = sum.ShiftAllLeft(8).Or(turn)
		if !w.wantFacets {
			continue
		}
		part := func(a, b *float64) archsimd.Float64x4 { return fourAt(a).Add(t.Mul(fourAt(b).Sub(fourAt(a)))) }
		up2 := part(&a.up[2], &b.up[2])
		across := up2.Add(c.Mul(part(&a.c[2], &b.c[2]))).Add(r.Mul(part(&a.r[2], &b.r[2])))
		f, j := &w.facets, from+i
		store4(f.along, j, along)
		store4(f.above, j, above)
		store4(f.across, j, across)
		store4(f.up[0], j, up0)
		store4(f.up[1], j, up1)
		store4(f.up[2], j, up2)
		if w.wantViews {
			store4(f.east, j, part(&a.east, &b.east))
			store4(f.north, j, part(&a.north, &b.north))
			store4(f.s, j, part(&a.s, &b.s))
		}
	}
	pairs := archsimd.LoadInt8x16(&bytePairs)
	lo := sum.GetLo().AsUint8x16().PermuteOrZero(pairs).AsUint16x8()
	hi := sum.GetHi().AsUint8x16().PermuteOrZero(pairs).AsUint16x8()
	turns := (*[viewStep]uint8)(w.turns[from:])
	lo.InterleaveLo(hi).AsUint8x16().Store((*[16]uint8)(turns[:]))
	lo.InterleaveHi(hi).AsUint8x16().Store((*[16]uint8)(turns[16:]))
	archsimd.ClearAVXUpperBits()
}

// The turns in all places of a vector.
var (
	layover4    = [4]int64{turnLayover, turnLayover, turnLayover, turnLayover}
	shadow4     = [4]int64{turnShadow, turnShadow, turnShadow, turnShadow}
	compressed4 = [4]int64{turnCompressed, turnCompressed, turnCompressed, turnCompressed}
)

// bytePairs brings the bytes of two 64-bit numbers side by side.
var bytePairs = [16]int8{0, 8, 1, 9, 2, 10, 3, 11, 4, 12, 5, 13, 6, 14, 7, 15}

// blockParts holds the places of a block's columns between its two views.
var blockParts = func() (t [viewStep]float64) {
	for i := range t {
		t[i] = float64(i) / viewStep
	}
	return t
}()

func load4(a []float64, j int) archsimd.Float64x4 {
	return archsimd.LoadFloat64x4((*[4]float64)(a[j:]))
}

func store4(a []float64, j int, x archsimd.Float64x4) { x.Store((*[4]float64)(a[j:])) }

// localIncidencesVector is localIncidences for all columns but the last few, and
// returns how many it filled.
func localIncidencesVector(f *facetRow, a []float32) int {
	odd := func(even, k, y archsimd.Float64x4) archsimd.Float64x4 { return even.Add(k.Mul(y)) }
	one, zero, quarter, perRadian := fourOf(1), zero4(), fourOf(math.Pi/4), fourOf(180/math.Pi)
	n := len(a) &^ 3
	for j := 0; j < n; j += 4 {
		along, above, across := load4(f.along, j), load4(f.above, j), load4(f.across, j)
		side := above.Mul(above).Add(across.Mul(across)).Sqrt()
		x := side.Sub(along).Div(side.Add(along))
		y := x.Mul(x)
		z := y.Mul(y)
		low := odd(one, fourOf(geometry.Arctan3), y).Add(z.Mul(odd(fourOf(geometry.Arctan5), fourOf(geometry.Arctan7), y)))
		high := odd(fourOf(geometry.Arctan9), fourOf(geometry.Arctan11), y).Add(z.Mul(odd(fourOf(geometry.Arctan13), fourOf(geometry.Arctan15), y)))
		z = z.Mul(z)
		angle := quarter.Add(x.Mul(low.Add(z.Mul(high.Add(z.Mul(fourOf(geometry.Arctan17)))))))
		angle.Mul(perRadian).ConvertToFloat32().Store((*[4]float32)(a[j:]))
		if along.Greater(zero).ToBits() != 0xf { // facets that turn their backs
			archsimd.ClearAVXUpperBits()
			f.localIncidences(a[:j+4], j)
		}
	}
	archsimd.ClearAVXUpperBits()
	return n
}

// foreshorteningsVector is foreshortenings for all columns but the last few, and
// returns how many it filled.
func foreshorteningsVector(f *facetRow, a []float32) int {
	one := fourOf(1)
	n := len(a) &^ 3
	for j := 0; j < n; j += 4 {
		gain, level, lean := load4(f.above, j), load4(f.up[1], j), load4(f.up[2], j)
		if !lean.AsInt64x4().IsZero() { // where it is, this would change nothing
			along, across, lean2 := load4(f.along, j), load4(f.across, j), lean.Mul(lean)
			in := along.Mul(along).Add(gain.Mul(gain))
			x := one.Sub(lean.Mul(across))
			gain = gain.Div(x.Mul(x).Add(lean2.Mul(in)).Sqrt())
			level = level.Div(one.Sub(lean2).Sqrt())
		}
		gain.Div(level).ConvertToFloat32().Store((*[4]float32)(a[j:]))
	}
	archsimd.ClearAVXUpperBits()
	return n
}
