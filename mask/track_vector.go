//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"

	"simd/archsimd"
)

// The marches of a platform on vectors of four lanes: what the loops of track.go do
// where all lanes lie in the DEM and none under the track.

// between4 is a number of lanes k to k+3 that changes by d from each to the next.
func between4(a, d *float64, k int) archsimd.Float64x4 {
	return fourAt(a).Add(fourAt(d).Mul(lanes4(&laneNumbers, k)))
}

func absolute4(x archsimd.Float64x4) archsimd.Float64x4 {
	return x.AsInt64x4().And(archsimd.BroadcastInt64x4(math.MaxInt64)).AsFloat64x4()
}

func lanes4of32(a *byLane32, k int) archsimd.Float64x4 {
	return archsimd.LoadFloat32x4((*[4]float32)(a[k:])).ConvertToFloat64()
}

// viewTrackVector is strip.viewLanes.
func viewTrackVector(p *strip) {
	ln := p.f.ln
	scale, datum, zero := fourAt(&ln.scale), fourAt(&ln.datum), zero4()
	none, least := fourOf(math.Inf(-1)), fourOf(levelShare)
	for k := 0; k < marchVectors; k += 4 {
		nx, ny := between4(&p.p0.nx, &p.dp.nx, k), between4(&p.p0.ny, &p.dp.ny, k)
		h := lanes4(p.h, k).Sub(datum)
		x := between4(&p.p0.x, &p.dp.x, k).Add(h.Mul(nx))
		y := between4(&p.p0.y, &p.dp.y, k).Add(h.Mul(ny))
		r := x.Mul(x).Add(y.Mul(y)).Sqrt()
		under := x.LessEqual(zero)
		put4(&p.m, k, none.Merge(scale.Mul(y).Div(x), under))
		r = none.Merge(r, under)
		put4(&p.r, k, r)
		if ln.fan != nil {
			cos := absolute4(x.Mul(nx).Add(y.Mul(ny))).Div(r)
			put4(&p.share, k, cos.Merge(least, cos.Greater(least)))
		}
	}
	archsimd.ClearAVXUpperBits()
}

// forwardTrackVector finds the lines of strip.forwardTrack from the largest m and
// slant ranges so far.
func forwardTrackVector(p *strip, tops, ranges *byLane, shades, nearers *byLane32, minShade, maxNearer float64) {
	ln := p.f.ln
	scale, datum, lowest, highest := fourAt(&ln.scale), fourAt(&ln.datum), four(minShade), four(maxNearer)
	none, zero := fourOf(math.Inf(-1)), zero4()
	for k := 0; k < marchVectors; k += 4 {
		x, y := between4(&p.p0.x, &p.dp.x, k), between4(&p.p0.y, &p.dp.y, k)
		nx, ny := between4(&p.p0.nx, &p.dp.nx, k), between4(&p.p0.ny, &p.dp.ny, k)
		top, most := lanes4(tops, k), lanes4(ranges, k)
		shade := datum.Add(top.Mul(x).Sub(scale.Mul(y)).Div(scale.Mul(ny).Sub(top.Mul(nx))))
		put4as32(shades, k, shade.Merge(lowest, top.Greater(none)).Max(lowest))
		if ln.fan != nil {
			nearer := lanes4(p.h, k).Add(lanes4(&p.r, k).Sub(most).Div(lanes4(&p.share, k)))
			put4as32(nearers, k, nearer.Min(highest))
			continue
		}
		r := most.Max(zero)
		n, b := nx.Mul(nx).Add(ny.Mul(ny)), x.Mul(nx).Add(y.Mul(ny))
		c := x.Mul(x).Add(y.Mul(y)).Sub(r.Mul(r))
		root := b.Mul(b).Sub(n.Mul(c)).Max(zero).Sqrt()
		put4as32(nearers, k, datum.Sub(b.Add(root).Div(n)).Min(highest))
	}
	archsimd.ClearAVXUpperBits()
}

// forwardMoveVector is strip.forwardMove.
func forwardMoveVector(p *strip, row *lines) {
	st := &p.fwd
	none, zero := fourOf(math.NaN()), zero4()
	for k := 0; k < marchVectors; k += 4 {
		m, r := lanes4(&p.m, k), lanes4(&p.r, k)
		top, most := lanes4(&st.top, k), lanes4(&st.most, k)
		bm, br := lanes4(&st.m, k), lanes4(&st.r, k)
		edge := br.Add(top.Sub(bm).Div(m.Sub(bm)).Mul(r.Sub(br)))
		hidden := m.LessEqual(top)
		dip := r.Sub(edge).Merge(zero, edge.LessEqual(r))
		put4as32(&row.dip, k, none.Merge(dip, hidden))
		best := edge.Merge(r, edge.Greater(r))
		put4(&st.most, k, most.Merge(best.Merge(most, best.Greater(most)), hidden))
		put4(&st.top, k, top.Merge(m, hidden))
		put4(&st.m, k, m.Merge(none, hidden))
		put4(&st.r, k, r)
	}
	archsimd.ClearAVXUpperBits()
}

// forwardMoveUnsureVector is forwardMoveVector where unknown terrain may hide ground,
// as strip.forwardUnsure has it.
func forwardMoveUnsureVector(p *strip, row *lines) {
	st := &p.fwd
	none, zero, minus := fourOf(math.NaN()), zero4(), fourOf(math.Copysign(0, -1)).AsInt64x4()
	for k := 0; k < marchVectors; k += 4 {
		m, r := lanes4(&p.m, k), lanes4(&p.r, k)
		top, most, mostU, doubt := lanes4(&st.top, k), lanes4(&st.most, k), lanes4(&st.mostU, k), lanes4(&st.doubt, k)
		bm, br := lanes4(&st.m, k), lanes4(&st.r, k)
		edge := br.Add(top.Sub(bm).Div(m.Sub(bm)).Mul(r.Sub(br)))
		hidden, lit := m.LessEqual(top), m.Greater(lanes4(&st.topU, k))
		dip := r.Sub(edge).Merge(zero, edge.LessEqual(r))
		dip = dip.Merge(dip.AsInt64x4().Or(minus).AsFloat64x4(), lit)
		put4as32(&row.dip, k, none.Merge(dip, hidden))
		best := edge.Merge(r, edge.Greater(r))
		put4(&st.mostU, k, mostU.Merge(best.Merge(mostU, best.Greater(mostU)), hidden))
		put4(&st.most, k, best.Merge(most, best.Greater(most).And(lit).And(m.Greater(top))))
		doubtful := best.Merge(doubt, best.Greater(doubt).And(m.Greater(top)))
		put4(&st.doubt, k, doubt.Merge(doubtful, lit))
		put4(&st.top, k, top.Merge(m, hidden))
		put4(&st.m, k, m.Merge(none, hidden))
		put4(&st.r, k, r)
	}
	archsimd.ClearAVXUpperBits()
}

// backwardTrackVector finds the lines of strip.backwardTrack from the smallest slant
// ranges so far.
func backwardTrackVector(p *strip, ranges *byLane, farthers *byLane32, minFarther float64) {
	ln := p.f.ln
	datum, lowest, zero := fourAt(&ln.datum), four(minFarther), zero4()
	for k := 0; k < marchVectors; k += 4 {
		r := lanes4(ranges, k)
		if ln.fan != nil {
			farther := lanes4(p.h, k).Add(lanes4(&p.r, k).Sub(r).Div(lanes4(&p.share, k)))
			put4as32(farthers, k, farther.Max(lowest))
			continue
		}
		x, y := between4(&p.p0.x, &p.dp.x, k), between4(&p.p0.y, &p.dp.y, k)
		nx, ny := between4(&p.p0.nx, &p.dp.nx, k), between4(&p.p0.ny, &p.dp.ny, k)
		r = r.Max(zero)
		n, b := nx.Mul(nx).Add(ny.Mul(ny)), x.Mul(nx).Add(y.Mul(ny))
		c := x.Mul(x).Add(y.Mul(y)).Sub(r.Mul(r))
		root := b.Mul(b).Sub(n.Mul(c)).Max(zero).Sqrt()
		put4as32(farthers, k, datum.Sub(b.Add(root).Div(n)).Max(lowest))
	}
	archsimd.ClearAVXUpperBits()
}

// rangesVector finds how much slant range lies between the lanes' own ground and a
// line of heights, and the other way round where the line is that of the ground
// farther away.
func rangesVector(p *strip, margin, line *byLane32, farther bool) {
	datum, zero, none := fourAt(&p.f.ln.datum), zero4(), fourOf(math.Inf(-1))
	for k := 0; k < marchVectors; k += 4 {
		h := lanes4of32(line, k).Sub(datum)
		x := between4(&p.p0.x, &p.dp.x, k).Add(h.Mul(between4(&p.p0.nx, &p.dp.nx, k)))
		y := between4(&p.p0.y, &p.dp.y, k).Add(h.Mul(between4(&p.p0.ny, &p.dp.ny, k)))
		r := none.Merge(x.Mul(x).Add(y.Mul(y)).Sqrt(), x.LessEqual(zero))
		if own := lanes4(&p.r, k); farther {
			r = r.Sub(own)
		} else {
			r = own.Sub(r)
		}
		put4as32(margin, k, r)
	}
	archsimd.ClearAVXUpperBits()
}

// trackMarginsVector is laneMargins.fromTrack; for a track, without the margins of
// range.
func trackMarginsVector(r *laneMargins, p *strip, row *lines) {
	ln := p.f.ln
	var share byLane32
	for k := 0; k < marchVectors; k += 4 {
		put4as32(&r.h, k, lanes4(p.h, k))
		if ln.fan != nil {
			put4as32(&share, k, lanes4(&p.share, k))
		}
	}
	for k := 0; k < padLanes; k += 8 {
		h := lanes8(&r.h, k)
		put8(&r.clear, k, h.Sub(lanes8(&row.shade, k)))
		if ln.fan != nil {
			s := lanes8(&share, k)
			put8(&r.near, k, lanes8(&row.nearer, k).Sub(h).Mul(s))
			put8(&r.far, k, h.Sub(lanes8(&row.farther, k)).Mul(s))
		}
	}
	archsimd.ClearAVXUpperBits()
}

// markSeenVector is the loop of strip.markSeen on vectors of eight patches; jagged as
// markVector has it.
func markSeenVector(a, b *patchRow, g *seenGrade, first, last int) (rises, lit, dark uint64, high float32, jagged bool) {
	var worst archsimd.Int32x8
	low, all := eightOf(float32(math.Inf(-1))), eightOf(float32(math.Inf(1)))
	from, to := archsimd.BroadcastInt32x8(int32(first)), archsimd.BroadcastInt32x8(int32(last))
	number, highest := archsimd.LoadInt32x8(&numbers8), low
	rise, drop, fall, dim, per := eightAt(&g.rise), eightAt(&g.drop), eightAt(&g.fall), eightAt(&g.dark), eightAt(&g.perHeight)
	least, most := eightAt(&g.drift[0]), eightAt(&g.drift[1])
	for k := 0; k < patches; k += 8 {
		a0, a1, b0, b1 := corner(a, k), corner(a, k+1), corner(b, k), corner(b, k+1)
		lo, hi, known := changes8(a0, a1, b0, b1, least, most)
		worst = worst.Max(bends8(a0, a1, corner(a, k+2), b0, b1))
		top, bottom := a0.Max(a1).Max(b0.Max(b1)), a0.Min(a1).Min(b0.Min(b1))
		at := archsimd.BroadcastInt32x8(int32(k)).Add(number)
		outside := at.Greater(to).Or(from.Greater(at))
		highest = highest.Max(low.Merge(top.Merge(all, known), outside))
		rises |= uint64(hi.Less(rise).And(lo.Greater(drop)).And(known).ToBits()) << k
		lit |= uint64(lo.Greater(fall.Add(per.Mul(top))).And(known).ToBits()) << k
		dark |= uint64(hi.Less(dim.Add(per.Mul(bottom))).And(known).ToBits()) << k
	}
	var tops [8]float32
	highest.Store(&tops)
	jagged = worst.Greater(eightAt(&g.jag).AsInt32x8()).ToBits() != 0
	archsimd.ClearAVXUpperBits()
	high = max(tops[0], tops[1], tops[2], tops[3], tops[4], tops[5], tops[6], tops[7])
	return rises, lit, dark, high, jagged
}
