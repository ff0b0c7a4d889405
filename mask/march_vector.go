//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"

	"simd/archsimd"
)

// The marches of a plane wave on vectors of four lanes: what the loops of march.go
// do where all lanes lie in the DEM and no height is missing. Max and Min are for
// numbers only: what they make of NaN is not defined.

func lanes4(a *byLane, k int) archsimd.Float64x4 { return archsimd.LoadFloat64x4((*[4]float64)(a[k:])) }

func put4(a *byLane, k int, x archsimd.Float64x4) { x.Store((*[4]float64)(a[k:])) }

func put4as32(a *byLane32, k int, x archsimd.Float64x4) {
	x.ConvertToFloat32().Store((*[4]float32)(a[k:]))
}

// heightsVector is heightsAt for all lanes: z holds the heights before them, next
// those beyond.
func heightsVector(h *byLane, z, next *heightRun, rest float64) {
	part := four(rest)
	for k := 0; k < marchVectors; k += 4 {
		p := archsimd.LoadFloat32x4((*[4]float32)(z[k:])).ConvertToFloat64()
		q := archsimd.LoadFloat32x4((*[4]float32)(next[k:])).ConvertToFloat64()
		put4(h, k, p.Add(part.Mul(q.Sub(p))))
	}
	archsimd.ClearAVXUpperBits()
}

// spreadVector fills h with the heights at columns v, v + dv and so on of z, as
// lerp finds them. Where dv is about one, the columns of neighbouring lanes follow
// each other: those of lanes from turn on are shift off.
func spreadVector(h *byLane, z []float32, v, dv float64, turn, shift int) {
	first, step := four(v), four(dv)
	nearly, close := fourOf(1-onColumn), fourOf(onColumn)
	before := int(v)
	number := archsimd.LoadInt32x4((*[4]int32)(numbers8[:]))
	for k := 0; k < marchVectors; k += 4 {
		i := before + k
		if k >= turn {
			i += shift
		}
		at := first.Add(step.Mul(lanes4(&laneNumbers, k)))
		rest := at.Sub(archsimd.BroadcastInt32x4(int32(i)).Add(number).ConvertToFloat64())
		p := archsimd.LoadFloat32x4((*[4]float32)(z[i:])).ConvertToFloat64()
		q := archsimd.LoadFloat32x4((*[4]float32)(z[i+1:])).ConvertToFloat64()
		x := p.Add(rest.Mul(q.Sub(p)))
		x = p.Merge(x, rest.Less(close))
		put4(h, k, q.Merge(x, rest.Greater(nearly)))
	}
	archsimd.ClearAVXUpperBits()
}

// viewVector is strip.viewWave.
func viewVector(p *strip, m0, dm, r0, dr, cos float64) {
	vm0, vdm, vr0, vdr, vcos := four(m0), four(dm), four(r0), four(dr), four(cos)
	for k := 0; k < marchVectors; k += 4 {
		h, n := lanes4(p.h, k), lanes4(&laneNumbers, k)
		put4(&p.m, k, h.Add(vm0.Add(vdm.Mul(n))))
		put4(&p.r, k, vr0.Add(vdr.Mul(n)).Sub(vcos.Mul(h)))
	}
	archsimd.ClearAVXUpperBits()
}

// forwardVector is strip.forwardSure.
func forwardVector(p *strip, row *lines, minShade, maxNearer, perCos float64) {
	st := &p.fwd
	lowest, highest, per := four(minShade), four(maxNearer), four(perCos)
	none, zero := fourOf(math.NaN()), zero4()
	for k := 0; k < marchVectors; k += 4 {
		h, m, r := lanes4(p.h, k), lanes4(&p.m, k), lanes4(&p.r, k)
		top, most := lanes4(&st.top, k), lanes4(&st.most, k)
		put4as32(&row.shade, k, h.Add(top.Sub(m)).Max(lowest))
		put4as32(&row.nearer, k, h.Add(r.Sub(most).Mul(per)).Min(highest))
		hidden := m.LessEqual(top)
		bm := lanes4(&st.m, k)
		dip, best := zero, r
		if bm.Equal(bm).ToBits()&^hidden.ToBits() != 0 {
			// Where ground comes out of the shadow, its edge counts.
			br := lanes4(&st.r, k)
			edge := br.Add(top.Sub(bm).Div(m.Sub(bm)).Mul(r.Sub(br)))
			dip = r.Sub(edge).Merge(zero, edge.LessEqual(r))
			best = edge.Merge(r, edge.Greater(r))
		}
		put4as32(&row.dip, k, none.Merge(dip, hidden))
		put4(&st.most, k, most.Merge(best.Max(most), hidden))
		put4(&st.top, k, top.Merge(m, hidden))
		put4(&st.m, k, m.Merge(none, hidden))
		put4(&st.r, k, r)
	}
	archsimd.ClearAVXUpperBits()
}

// backwardVector is strip.backwardSure.
func backwardVector(p *strip, row *lines, minFarther, perCos float64) {
	lowest, per := four(minFarther), four(perCos)
	for k := 0; k < marchVectors; k += 4 {
		farther := lanes4(p.h, k).Sub(lanes4(&p.bwd.least, k).Sub(lanes4(&p.r, k)).Mul(per))
		put4as32(&row.farther, k, farther.Max(lowest))
	}
	archsimd.ClearAVXUpperBits()
}

// backwardMoveVector is strip.backwardMove where no unknown terrain hides anything.
func backwardMoveVector(p *strip, row *lines) {
	st := &p.bwd
	for k := 0; k < marchVectors; k += 4 {
		dip := archsimd.LoadFloat32x4((*[4]float32)(row.dip[k:])).ConvertToFloat64()
		begin := lanes4(&p.r, k).Sub(dip)
		least, leastU := lanes4(&st.least, k), lanes4(&st.leastU, k)
		put4(&st.least, k, begin.Merge(least, begin.Less(least)))
		put4(&st.leastU, k, begin.Merge(leastU, begin.Less(leastU)))
	}
	archsimd.ClearAVXUpperBits()
}
