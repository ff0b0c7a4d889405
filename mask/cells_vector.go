//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"
	"math/bits"

	"simd/archsimd"
)

// The margins of the lanes and of the cells between them on vectors of eight: what
// the loops of cells.go do.

func eight(x float32) archsimd.Float32x8 { return archsimd.BroadcastFloat32x8(x) }

func lanes8(a *byLane32, k int) archsimd.Float32x8 {
	return archsimd.LoadFloat32x8((*[8]float32)(a[k:]))
}

func put8(a *byLane32, k int, x archsimd.Float32x8) { x.Store((*[8]float32)(a[k:])) }

func absolute(x archsimd.Float32x8) archsimd.Float32x8 {
	return x.AsInt32x8().And(archsimd.BroadcastInt32x8(math.MaxInt32)).AsFloat32x8()
}

// marginsVector is laneMargins.fromLines for a plane wave.
func marginsVector(r *laneMargins, heights *byLane, row *lines, cos float32) {
	c := eight(cos)
	for k := 0; k < marchVectors; k += 4 {
		put4as32(&r.h, k, lanes4(heights, k))
	}
	for k := 0; k < padLanes; k += 8 {
		h := lanes8(&r.h, k)
		put8(&r.clear, k, h.Sub(lanes8(&row.shade, k)))
		put8(&r.near, k, lanes8(&row.nearer, k).Sub(h).Mul(c))
		put8(&r.far, k, h.Sub(lanes8(&row.farther, k)).Mul(c))
	}
}

// roughnessVector is roughness: the bits of numbers that are not negative order as
// the numbers do, and NaN above all.
func roughnessVector(a, rough *byLane32, perRow float32) {
	share, growth, per := eight(roughShare), eight(roughGrowth), eight(perRow)
	gap := func(k int) archsimd.Int32x8 {
		return absolute(lanes8(a, k+1).Sub(lanes8(a, k))).AsInt32x8()
	}
	for k := 1; k <= laneStep; k += 8 {
		d := gap(k - 1).Max(gap(k)).Max(gap(k + 1)).AsFloat32x8()
		put8(rough, k, d.Mul(share.Add(growth.Mul(d).Mul(per))))
	}
}

// rowCells holds the cells of a row of a strip, by the lane before each.
type rowCells struct {
	clear, fold byLane32
	raw         [padLanes]int32
}

// classifyRowVector classifies the cells after lanes ka to kb-1 of row u, where no
// terrain is unknown: those that are not doubtful at once, the others one by one.
func (t *sheet) classifyRowVector(p *strip, wk *walker, u, ka, kb int, w float32) {
	f := p.f
	first := int(math.Ceil(p.edgeA)) - 1 // column of the cell after lane 0
	z := f.z[(u-f.ua)*f.width+first-f.at[u-f.ua]:]
	c := &t.cells
	doubtful := c.fill(&t.margins, (*byLane32)(z), w)
	at, stride := t.place(f, u, first+ka)
	if stride == 1 {
		if t.wantClear {
			copy(t.clear[at:at+kb-ka], c.clear[ka:kb])
		}
		if t.wantFold {
			copy(t.fold[at:at+kb-ka], c.fold[ka:kb])
		}
		raw := t.raw[at : at+kb-ka]
		for j, x := range c.raw[ka:kb] {
			raw[j] = uint8(x)
		}
	} else {
		for k, i := ka, at; k < kb; k, i = k+1, i+stride {
			t.raw[i] = uint8(c.raw[k])
			t.keep(i, c.clear[k], c.fold[k])
		}
	}
	for doubtful &= 1<<kb - 1<<ka; doubtful != 0; doubtful &= doubtful - 1 {
		k := bits.TrailingZeros64(doubtful)
		t.classifyCell(p, wk, u, first+k, k, w, z[k])
	}
}

// fill finds the margins of the cells at weight w after lanes 1 to laneStep from
// the margins of the lanes and the cells' heights z, and the classes. It returns
// the cells that are doubtful, as bits.
func (c *rowCells) fill(r *laneMargins, z *byLane32, w float32) (doubtful uint64) {
	part, zero, none := eight(w), eight(0), eight(float32(nan))
	slackM, slackR := eight(r.slackM), eight(r.slackR)
	code := func(c Class) archsimd.Int32x8 { return archsimd.BroadcastInt32x8(int32(c)) }
	open, folded, hidden := code(Open), code(ActiveLayover), code(CastShadow)
	far, near := code(LayoverFarther-ActiveLayover), code(LayoverNearer-ActiveLayover)
	blend := func(a *byLane32, k int) archsimd.Float32x8 {
		x := lanes8(a, k)
		return x.Add(part.Mul(lanes8(a, k+1).Sub(x)))
	}
	for k := 1; k <= laneStep; k += 8 {
		m, n, g := blend(&r.clear, k), blend(&r.near, k), blend(&r.far, k)
		bump := absolute(lanes8(z, k).Sub(blend(&r.h, k)))
		sM, sN, sG := slackM.Add(bump), slackR.Add(bump), slackR.Add(bump)
		if !r.exact {
			sM, sN, sG = sM.Add(lanes8(&r.roughM, k)), sN.Add(lanes8(&r.roughN, k)), sG.Add(lanes8(&r.roughF, k))
		}
		dark := zero.Sub(sM).Greater(m)
		sureR := absolute(n).Greater(sN).And(absolute(g).Greater(sG))
		sure := dark.Or(m.Greater(sM).And(sureR))
		doubtful |= uint64(^sure.ToBits()) << k

		cause := far.Masked(g.LessEqual(zero)).Or(near.Masked(n.LessEqual(zero)))
		raw := open.Merge(folded.Add(cause), cause.Equal(archsimd.Int32x8{}))
		hidden.Merge(raw, dark).Store((*[8]int32)(c.raw[k:]))
		put8(&c.clear, k, m)
		put8(&c.fold, k, none.Merge(n.Min(g), dark))
	}
	return doubtful
}
