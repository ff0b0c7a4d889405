//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// markVector is the loop of strip.mark on vectors of eight patches.
func markVector(a, b *byLane41, g *grade) (rises, lit uint64) {
	rise, fall := eightAt(&g.rise), eightAt(&g.fall)
	least, most := eightAt(&g.drift[0]), eightAt(&g.drift[1])
	for k := 0; k < patches; k += 8 {
		lo, hi, known := changes8(corner(a, k), corner(a, k+1), corner(b, k), corner(b, k+1), least, most)
		rises |= uint64(hi.Less(rise).And(known).ToBits()) << k
		lit |= uint64(lo.Greater(fall).And(known).ToBits()) << k
	}
	archsimd.ClearAVXUpperBits()
	return rises, lit
}

// corner are the corners of eight patches.
func corner(z *byLane41, k int) archsimd.Float32x8 {
	return archsimd.LoadFloat32x8((*[8]float32)(z[k:]))
}

// changes8 is changes for eight patches; known says which have all their corners.
func changes8(a0, a1, b0, b1, least, most archsimd.Float32x8) (lo, hi archsimd.Float32x8, known archsimd.Mask32x8) {
	e0, e1 := b0.Sub(a0), b1.Sub(a1)
	da, db := a1.Sub(a0), b1.Sub(b0)
	s, t, x, y := da.Mul(least), da.Mul(most), db.Mul(least), db.Mul(most)
	lo = e0.Min(e1).Add(s.Min(t).Min(x.Min(y)))
	hi = e0.Max(e1).Add(s.Max(t).Max(x.Max(y)))
	// A missing corner shows in the sum of all four, whatever Min makes of it.
	sum := e0.Add(e1)
	return lo, hi, sum.Equal(sum)
}

// along returns which of a bundle of cells, a bit each, from column v of row u on,
// have a path over one row, from row a to row b next to it, on which all patches
// are among those given for it. The strip stands at row u.
func (p *strip) along(v, u, a, b int, good uint64) uint8 {
	here, from, to := p.footingOf(u), p.footingOf(a), p.footingOf(b)
	first := (float64(v) - here.v0) / here.dv
	last := first + (bundle-1)/here.dv
	c0, c1 := from.column(first), to.column(first)
	d0, d1 := from.column(last)-(bundle-1), to.column(last)-(bundle-1)
	lo := min(min(c0, c1), min(d0, d1))
	hi := max(max(c0, c1), max(d0, d1))
	if lo < 0 {
		return 0
	}
	base := p.gentle[min(a, b)-p.ua].base
	x, y := int(lo)-base, int(hi)-base
	if x < 0 || y+bundle > patches {
		return 0
	}
	out := good >> x
	for x++; x <= y; x++ {
		out &= good >> x
	}
	return uint8(out)
}
