//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// sightVector fills the turns of the cells j to j+3 as seeCell does, and marks
// with turnAsk those that need more than their turns: without a height, next
// to a limit of the swath or outside it, and nearly compressed ones.
func sightVector(c *sightCells, j int) {
	all := archsimd.BroadcastFloat64x4
	load := func(a []float32) archsimd.Float64x4 {
		return archsimd.LoadFloat32x4((*[4]float32)(a[j:])).ConvertToFloat64()
	}
	t := all(float64(c.col + j)).Add(archsimd.LoadFloat64x4(&steps4)).Div(all(c.ln.sights.colStep)).Sub(all(float64(c.from)))
	quadratic := func(p, q, r float64) archsimd.Float64x4 { return all(p).Add(t.Mul(all(q).Add(t.Mul(all(r))))) }
	a, b, q := &c.a, &c.b, &c.patch.c
	travelE := quadratic(a.travel.East, b.travel.East, q.travel.East)
	travelN := quadratic(a.travel.North, b.travel.North, q.travel.North)
	travelU := quadratic(a.travel.Up, b.travel.Up, q.travel.Up)
	higher := load(c.z).Sub(all(c.ln.datum))
	later := higher.Mul(travelU)
	wayE := quadratic(a.way.East, b.way.East, q.way.East).Add(later.Mul(travelE))
	wayN := quadratic(a.way.North, b.way.North, q.way.North).Add(later.Mul(travelN))
	wayU := quadratic(a.way.Up, b.way.Up, q.way.Up).Sub(higher).Add(later.Mul(travelU))
	zero := all(0)
	if c.upright {
		travelE, travelN, travelU = wayN, zero.Sub(wayE), zero
	}
	per := func(i int) archsimd.Float64x4 { return all(c.per[i]).Add(t.Mul(all(c.dper[i]))) }
	zc, zr := load(c.zc), load(c.zr)
	gE := per(0).Mul(zc).Add(per(1).Mul(zr))
	gN := per(2).Mul(zc).Add(per(3).Mul(zr))
	aboveE := travelN.Mul(wayU).Sub(travelU.Mul(wayN))
	aboveN := travelU.Mul(wayE).Sub(travelE.Mul(wayU))
	aboveU := travelE.Mul(wayN).Sub(travelN.Mul(wayE))
	down := aboveU.Less(zero)
	upwards := func(x archsimd.Float64x4) archsimd.Float64x4 { return zero.Sub(x).Merge(x, down) }
	aboveE, aboveN, aboveU = upwards(aboveE), upwards(aboveN), upwards(aboveU)
	gain := aboveU.Sub(gE.Mul(aboveE)).Sub(gN.Mul(aboveN))
	level := all(c.job.Options.CompressedBelow).Mul(aboveU)
	one := all(1)
	lean := travelU.Mul(travelU).Mul(one.Add(gE.Mul(gE)).Add(gN.Mul(gN)))
	sure := gain.Greater(level.Mul(all(1 + sureShare))).Or(gain.Less(level.Mul(all(1 - sureShare))))
	sure = sure.And(lean.LessEqual(all(leanMost))).And(level.Greater(zero)).And(c.inside(wayE, wayN, wayU))

	bit := archsimd.BroadcastInt64x4
	turn := wayU.Sub(gE.Mul(wayE)).Sub(gN.Mul(wayN)).LessEqual(zero).ToInt64x4().And(bit(turnShadow))
	turn = turn.Or(gain.LessEqual(zero).ToInt64x4().And(bit(turnLayover)))
	turn = turn.Or(gain.Less(level).ToInt64x4().And(bit(turnCompressed)))
	var turns [4]int64
	turn.Merge(bit(turnAsk), sure).Store(&turns)
	archsimd.ClearAVXUpperBits()
	out := c.turns[j : j+4]
	for i, x := range turns {
		out[i] = uint8(x)
	}
}

// steps4 counts the cells of a vector.
var steps4 = [4]float64{0, 1, 2, 3}

// inside says of which cells it is sure that they lie inside the limits and
// above the horizon: at twice the distance from them at which a cell is close.
func (s *swath) inside(wayE, wayN, wayU archsimd.Float64x4) archsimd.Mask64x4 {
	all := archsimd.BroadcastFloat64x4
	r2 := wayE.Mul(wayE).Add(wayN.Mul(wayN)).Add(wayU.Mul(wayU))
	ok := wayU.Equal(wayU)
	if s.horizontal {
		ok = wayU.Greater(all(0)).And(wayU.Mul(wayU).Greater(all(4 * closeTo * closeTo).Mul(r2)))
	}
	if !s.bounded {
		return ok
	}
	cos := wayU.Div(r2.Sqrt())
	ok = ok.And(cos.Less(all(s.most - 2*closeTo))).And(cos.Greater(all(s.least + 2*closeTo)))
	return ok.And(r2.Mul(all(1 - 2*closeTo)).Greater(all(s.nearest))).And(r2.Mul(all(1 + 2*closeTo)).Less(all(s.farthest)))
}
