//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// spreadNarrowVector is strip.spread where lanes are so close that those of a
// vector lie within eight columns.
func spreadNarrowVector(h *byLane, z []float32, v, dv float64) {
	var from [marchVectors / 4]int
	for i := range from {
		from[i] = int(v + float64(dv*float64(4*i)))
	}
	nearly, close := fourOf(1-onColumn), fourOf(onColumn)
	var none archsimd.Uint32x8
	one := archsimd.BroadcastUint32x8(1)
	for i := range from {
		first := from[i]
		k := 4 * i
		at := between4(&v, &dv, k)
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
