//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// markVector is the loop of strip.mark on vectors of eight patches. It reports whether
// there may be jagged ground among them: for the largest bend or twist, the bits of
// numbers that are not negative order as the numbers do, and NaN above all.
func markVector(a, b *patchRow, g *grade) (rises, lit uint64, jagged bool) {
	var worst archsimd.Int32x8
	rise, fall := eightAt(&g.rise), eightAt(&g.fall)
	least, most := eightAt(&g.drift[0]), eightAt(&g.drift[1])
	for k := 0; k < patches; k += 8 {
		lo, hi, known := changes8(corner(a, k), corner(a, k+1), corner(b, k), corner(b, k+1), least, most)
		rises |= uint64(hi.Less(rise).And(known).ToBits()) << k
		lit |= uint64(lo.Greater(fall).And(known).ToBits()) << k
		worst = worst.Max(bends8(corner(a, k), corner(a, k+1), corner(a, k+2), corner(b, k), corner(b, k+1)))
	}
	jagged = worst.Greater(eightAt(&g.jag).AsInt32x8()).ToBits() != 0
	archsimd.ClearAVXUpperBits()
	return rises, lit, jagged
}

// bends8 returns the larger of the bends of eight heights a1 of a row and of twice the
// twists of the patches before them, as the bits of numbers that are not negative.
func bends8(a0, a1, a2, b0, b1 archsimd.Float32x8) archsimd.Int32x8 {
	rise := a1.Sub(a0)
	bend, twist := a2.Sub(a1).Sub(rise), b1.Sub(b0).Sub(rise)
	return absolute(bend).AsInt32x8().Max(absolute(twist.Add(twist)).AsInt32x8())
}

// corner are the corners of eight patches.
func corner(z *patchRow, k int) archsimd.Float32x8 {
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

// along returns which of the cells, a bit each, that are asked have a path over one
// row, from row u to row next beside it, on which slant range grows away from the
// radar; with lit, the look angle does.
//
//go:noinline
func (c *mixed) along(u, next int, asked uint8, lit bool) uint8 {
	archsimd.ClearAVXUpperBits()
	first, last := float64(c.k)+float64(c.w[0]), float64(c.k+bundle-1)+float64(c.w[bundle-1])
	from, to := c.footingOf(u), c.footingOf(next)
	c0, c1 := from.column(first), to.column(first)
	d0, d1 := from.column(last)-(bundle-1), to.column(last)-(bundle-1)
	lo := min(min(c0, c1), min(d0, d1))
	hi := max(max(c0, c1), max(d0, d1))
	if lo < 0 {
		return 0
	}
	near := min(u, next)
	g := &c.gentle[near-c.ua]
	x, y := int(lo)-g.base, int(hi)-g.base
	if x < 0 || y+bundle > patches {
		return 0
	}
	good, limit := g.rises, &g.worthR
	if lit {
		good, limit = g.lit, &g.fall
	}
	out := uint8(good >> x)
	for k := x + 1; k <= y; k++ {
		out &= uint8(good >> k)
	}
	if y > x+1 || asked&^out == 0 || c.f.ln.places != nil {
		return out
	}
	f := c.f
	i := near - f.ua
	c.way.lo, c.way.hi = float32(lo-float64(x+g.base)), float32(hi-float64(x+g.base))
	c.way.at = i*f.width + x + g.base - f.at[i]
	c.way.next = (i+1)*f.width + x + g.base - f.at[i+1]
	c.way.drift, c.way.limit = &g.drift, limit
	return out | c.way.within(f.z, y > x, lit)
}

// within is along for the lines of a way instead of all that cross its patches, of
// which there are two side by side or one.
//
//go:noinline
func (w *way) within(z []float32, two, lit bool) uint8 {
	lo, hi := eightAt(&w.lo), eightAt(&w.hi)
	one := eightOf(1)
	last := hi
	if two {
		last = one
	}
	yes := w.patch(z, 0, lo, last, lit)
	if two {
		yes &= w.patch(z, 1, zero8(), hi.Sub(one), lit)
	}
	return yes
}

// patch is within for the patches j beyond those of the way, between two of their
// columns.
func (w *way) patch(z []float32, j int, from, to archsimd.Float32x8, lit bool) uint8 {
	load := func(i int) archsimd.Float32x8 { return archsimd.LoadFloat32x8((*[bundle]float32)(z[i+j:])) }
	a0, a1, b0, b1 := load(w.at), load(w.at+1), load(w.next), load(w.next+1)
	least, most := eightAt(&w.drift[0]), eightAt(&w.drift[1])
	e := b0.Sub(a0)
	turn := b1.Sub(a1).Sub(e)
	e0, e1 := e.Add(from.Mul(turn)), e.Add(to.Mul(turn))
	da, db := a1.Sub(a0), b1.Sub(b0)
	s, t, x, y := da.Mul(least), da.Mul(most), db.Mul(least), db.Mul(most)
	sum := turn.Add(e) // NaN where a corner is missing
	known := sum.Equal(sum)
	if lit {
		lo := e0.Min(e1).Add(s.Min(t).Min(x.Min(y)))
		return lo.Greater(eightAt(w.limit)).And(known).ToBits()
	}
	hi := e0.Max(e1).Add(s.Max(t).Max(x.Max(y)))
	return hi.Less(eightAt(w.limit)).And(known).ToBits()
}
