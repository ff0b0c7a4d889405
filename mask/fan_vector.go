//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// markFanVector is the loop of strip.markFan on vectors of eight patches.
func markFanVector(a, b *byLane41, g *fanGrade) (rises, lit uint64) {
	rise, fall, per := eight(g.rise), eight(g.fall), eight(g.perHeight)
	drop := eight(0).Sub(rise)
	least, most := eight(g.drift[0]), eight(g.drift[1])
	load := func(z *byLane41, k int) archsimd.Float32x8 { return archsimd.LoadFloat32x8((*[8]float32)(z[k:])) }
	for k := 0; k < patches; k += 8 {
		a0, a1, b0, b1 := load(a, k), load(a, k+1), load(b, k), load(b, k+1)
		e0, e1 := b0.Sub(a0), b1.Sub(a1)
		da, db := a1.Sub(a0), b1.Sub(b0)
		s, t, x, y := da.Mul(least), da.Mul(most), db.Mul(least), db.Mul(most)
		lo := e0.Min(e1).Add(s.Min(t).Min(x.Min(y)))
		hi := e0.Max(e1).Add(s.Max(t).Max(x.Max(y)))
		// A missing corner shows in both sums of all four, whatever Min makes of it.
		sum := e0.Add(e1)
		known := sum.Equal(sum)
		top := a0.Max(a1).Max(b0.Max(b1))
		rises |= uint64(hi.Less(rise).And(lo.Greater(drop)).And(known).ToBits()) << k
		lit |= uint64(lo.Greater(fall.Add(per.Mul(top))).And(known).ToBits()) << k
	}
	archsimd.ClearAVXUpperBits()
	return rises, lit
}

// spreadNarrowVector is strip.spread where lanes are so close that those of a
// vector lie within eight columns.
func spreadNarrowVector(h *byLane, z []float32, v, dv float64) {
	var from [marchVectors / 4]int
	for i := range from {
		from[i] = int(v + float64(dv*float64(4*i)))
	}
	nearly, close := four(1-onColumn), four(onColumn)
	var none archsimd.Uint32x8
	one := archsimd.BroadcastUint32x8(1)
	for i, first := range from {
		k := 4 * i
		at := between4(v, dv, k)
		whole := at.ConvertToInt32()
		rest := at.Sub(whole.ConvertToFloat64())
		pick := none.SetLo(whole.Sub(archsimd.BroadcastInt32x4(int32(first))).AsUint32x4())
		row := archsimd.LoadFloat32x8((*[8]float32)(z[first:]))
		p := row.Permute(pick).GetLo().ConvertToFloat64()
		q := row.Permute(pick.Add(one)).GetLo().ConvertToFloat64()
		x := p.Add(rest.Mul(q.Sub(p)))
		x = p.Merge(x, rest.Less(close))
		put4(h, k, q.Merge(x, rest.Greater(nearly)))
	}
	archsimd.ClearAVXUpperBits()
}
