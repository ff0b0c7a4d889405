//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// centralVector is centralScalar, eight at a time.
func centralVector(d, before, mid, after []float32) bool {
	n := len(d) &^ 7
	before, mid, after = before[:len(d)], mid[:len(d)], after[:len(d)]
	half := archsimd.BroadcastFloat32x8(0.5)
	ok := half.Equal(half)
	for j := 0; j < n; j += 8 {
		x := archsimd.LoadFloat32x8((*[8]float32)(after[j:])).Sub(archsimd.LoadFloat32x8((*[8]float32)(before[j:]))).Mul(half)
		x.Store((*[8]float32)(d[j:]))
		h := archsimd.LoadFloat32x8((*[8]float32)(mid[j:]))
		ok = ok.And(x.Equal(x)).And(h.Equal(h))
	}
	rest := centralScalar(d[n:], before[n:], mid[n:], after[n:])
	var bits [8]int32
	ok.ToInt32x8().Store(&bits)
	for _, b := range bits {
		rest = rest && b != 0
	}
	return rest
}

// turnsVector fills the turns of a whole block, four cells at a time, as
// seeBlock does: a is the left view, d the difference to the right one.
func turnsVector(turns *[viewStep]uint8, zc, zr *[viewStep]float32, a, d *view, limit float64) {
	all := archsimd.BroadcastFloat64x4
	aUp0, aUp1, dUp0, dUp1 := all(a.up[0]), all(a.up[1]), all(d.up[0]), all(d.up[1])
	aC0, aC1, dC0, dC1 := all(a.c[0]), all(a.c[1]), all(d.c[0]), all(d.c[1])
	aR0, aR1, dR0, dR1 := all(a.r[0]), all(a.r[1]), all(d.r[0]), all(d.r[1])
	lim, zero := all(limit), all(0)
	layover, shadow, compressed := archsimd.BroadcastInt64x4(turnLayover), archsimd.BroadcastInt64x4(turnShadow), archsimd.BroadcastInt64x4(turnCompressed)
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
	}
	pairs := archsimd.LoadInt8x16(&bytePairs)
	lo := sum.GetLo().AsUint8x16().PermuteOrZero(pairs).AsUint16x8()
	hi := sum.GetHi().AsUint8x16().PermuteOrZero(pairs).AsUint16x8()
	lo.InterleaveLo(hi).AsUint8x16().Store((*[16]uint8)(turns[:]))
	lo.InterleaveHi(hi).AsUint8x16().Store((*[16]uint8)(turns[16:]))
}

// bytePairs brings the bytes of two 64-bit numbers side by side.
var bytePairs = [16]int8{0, 8, 1, 9, 2, 10, 3, 11, 4, 12, 5, 13, 6, 14, 7, 15}

// blockParts holds the places of a block's columns between its two views.
var blockParts = func() (t [viewStep]float64) {
	for i := range t {
		t[i] = float64(i) / viewStep
	}
	return t
}()
