//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// sightVector fills the turns of the cells j to j+3 as seeCell does, and marks
// with turnAsk those that need more than their turns: without a height, next
// to a limit of the swath or outside it, and nearly compressed ones.
func sightVector(c *sightCells, j int) {
	load := func(a []float32) archsimd.Float64x4 {
		return archsimd.LoadFloat32x4((*[4]float32)(a[j:])).ConvertToFloat64()
	}
	t := whole4(c.col + j).Add(archsimd.LoadFloat64x4(&steps4)).Div(fourAt(&c.ln.sights.colStep)).Sub(whole4(c.from))
	quadratic := func(p, q, r *float64) archsimd.Float64x4 {
		return fourAt(p).Add(t.Mul(fourAt(q).Add(t.Mul(fourAt(r)))))
	}
	a, b, q := &c.a, &c.b, &c.patch.c
	travel := enu4{
		quadratic(&a.travel.East, &b.travel.East, &q.travel.East),
		quadratic(&a.travel.North, &b.travel.North, &q.travel.North),
		quadratic(&a.travel.Up, &b.travel.Up, &q.travel.Up),
	}
	higher := load(c.z).Sub(fourAt(&c.ln.datum))
	later := higher.Mul(travel.u)
	way := enu4{
		quadratic(&a.way.East, &b.way.East, &q.way.East).Add(later.Mul(travel.e)),
		quadratic(&a.way.North, &b.way.North, &q.way.North).Add(later.Mul(travel.n)),
		quadratic(&a.way.Up, &b.way.Up, &q.way.Up).Sub(higher).Add(later.Mul(travel.u)),
	}
	zero, one := zero4(), fourOf(1)
	if c.upright {
		travel = enu4{way.n, fourOf(-1).Mul(way.e), zero}
	}
	per := func(i int) archsimd.Float64x4 { return fourAt(&c.per[i]).Add(t.Mul(fourAt(&c.dper[i]))) }
	zc, zr := load(c.zc), load(c.zr)
	gE := per(0).Mul(zc).Add(per(1).Mul(zr))
	gN := per(2).Mul(zc).Add(per(3).Mul(zr))
	above := travel.cross(way).upwards()
	gain := above.facet(gE, gN)
	level := fourAt(&c.job.Options.CompressedBelow).Mul(above.u)
	lean := travel.u.Mul(travel.u).Mul(one.Add(gE.Mul(gE)).Add(gN.Mul(gN)))
	sure := gain.Greater(level.Mul(fourOf(1 + sureShare))).Or(gain.Less(level.Mul(fourOf(1 - sureShare))))
	sure = sure.And(lean.LessEqual(fourOf(leanMost))).And(level.Greater(zero)).And(c.inside(way))

	bit := archsimd.BroadcastInt64x4
	turn := way.facet(gE, gN).LessEqual(zero).ToInt64x4().And(bit(turnShadow))
	turn = turn.Or(gain.LessEqual(zero).ToInt64x4().And(bit(turnLayover)))
	turn = turn.Or(gain.Less(level).ToInt64x4().And(bit(turnCompressed)))
	var turns [4]int64
	turn.Merge(bit(turnAsk), sure).Store(&turns)
	if c.wantFacets {
		c.setFacets(j, way, travel, gE, gN)
	}
	archsimd.ClearAVXUpperBits()
	out := c.turns[j : j+4]
	for i, x := range turns {
		out[i] = uint8(x)
	}
}

// steps4 counts the cells of a vector.
var steps4 = [4]float64{0, 1, 2, 3}

// setFacets stores the facets of the cells j to j+3 and what belongs to them, as
// geometry's SightFrom and Facet give them.
func (c *sightCells) setFacets(j int, way, travel enu4, gE, gN archsimd.Float64x4) {
	r := way.dot(way).Sqrt()
	along := way.over(r)
	above := travel.cross(along)
	above = above.over(above.dot(above).Sqrt()).upwards()
	across := along.cross(above)
	f := &c.facets
	store4(f.along, j, along.facet(gE, gN))
	store4(f.above, j, above.facet(gE, gN))
	store4(f.across, j, across.facet(gE, gN))
	store4(f.up[0], j, along.u)
	store4(f.up[1], j, above.u)
	store4(f.up[2], j, across.u)
	store4(f.east, j, along.e)
	store4(f.north, j, along.n)
	store4(f.s, j, r)
}

// enu4 is four vectors of the ground, east, north, up.
type enu4 struct{ e, n, u archsimd.Float64x4 }

func (a enu4) cross(b enu4) enu4 {
	return enu4{
		a.n.Mul(b.u).Sub(a.u.Mul(b.n)),
		a.u.Mul(b.e).Sub(a.e.Mul(b.u)),
		a.e.Mul(b.n).Sub(a.n.Mul(b.e)),
	}
}

func (a enu4) dot(b enu4) archsimd.Float64x4 { return a.e.Mul(b.e).Add(a.n.Mul(b.n)).Add(a.u.Mul(b.u)) }

func (a enu4) over(x archsimd.Float64x4) enu4 { return enu4{a.e.Div(x), a.n.Div(x), a.u.Div(x)} }

// upwards turns vectors that point down round.
func (a enu4) upwards() enu4 {
	minus, down := fourOf(-1), a.u.Less(zero4())
	return enu4{minus.Mul(a.e).Merge(a.e, down), minus.Mul(a.n).Merge(a.n, down), minus.Mul(a.u).Merge(a.u, down)}
}

// facet returns the component of a facet of gradient (gE, gN).
func (a enu4) facet(gE, gN archsimd.Float64x4) archsimd.Float64x4 {
	return a.u.Sub(gE.Mul(a.e)).Sub(gN.Mul(a.n))
}

// inside says of which cells it is sure that they lie inside the limits and
// above the horizon: at twice the distance from them at which a cell is close.
func (s *swath) inside(way enu4) archsimd.Mask64x4 {
	r2 := way.dot(way)
	ok := way.u.Equal(way.u)
	if s.horizontal {
		ok = way.u.Greater(zero4()).And(way.u.Mul(way.u).Greater(fourOf(4 * closeTo * closeTo).Mul(r2)))
	}
	if !s.bounded {
		return ok
	}
	cos := way.u.Div(r2.Sqrt())
	ok = ok.And(cos.Less(fourAt(&s.most).Sub(fourOf(2 * closeTo)))).And(cos.Greater(fourAt(&s.least).Add(fourOf(2 * closeTo))))
	return ok.And(r2.Mul(fourOf(1 - 2*closeTo)).Greater(fourAt(&s.nearest))).And(r2.Mul(fourOf(1 + 2*closeTo)).Less(fourAt(&s.farthest)))
}
