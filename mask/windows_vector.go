//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"
	"simd/archsimd"
)

type float32x8 = archsimd.Float32x8

func load(s []float32, at int) float32x8 {
	return archsimd.LoadFloat32x8((*[vectorWidth]float32)(s[at:]))
}

func store(x float32x8, s []float32, at int) { x.Store((*[vectorWidth]float32)(s[at:])) }

// higherOf and lowerOf are higher and lower. The vectors' own largest and smallest
// do not say which one they take of two when one is NaN.
func higherOf(a, b float32x8) float32x8 { return a.Merge(b, a.Greater(b)) }
func lowerOf(a, b float32x8) float32x8  { return a.Merge(b, a.Less(b)) }

// ascending holds 0, 1, 2, ...
var ascending = [vectorWidth]float32{0, 1, 2, 3, 4, 5, 6, 7}

// spread returns the line at columns j, j+1, ...
func (q *linear) spread(j int) float32x8 {
	at := whole8(j).Add(archsimd.LoadFloat32x8(&ascending))
	return eightAt(&q.a).Add(eightAt(&q.b).Mul(at))
}

func heightsBetweenVector(h, z []float32, rest *linear, from int) (k int) {
	for ; k+vectorWidth <= len(h); k += vectorWidth {
		a := load(z, k)
		store(a.Add(rest.spread(from+k).Mul(load(z, k+1).Sub(a))), h, k)
	}
	archsimd.ClearAVXUpperBits()
	return k
}

func (g *guide) advanceVector(h *laneRow, d *linear, row float32) {
	sign, rows := eightAt(&g.sign), eight(row)
	for k := 0; k < guideLanes; k += vectorWidth {
		z, away := load(h[:], k).Mul(sign), d.spread(k)
		for l := range g.slopes {
			top, held := g.top[l][k:], g.row[l][k:]
			t := load(top, 0).Sub(away.Mul(eightAt(&g.slopes[l])))
			store(rows.Merge(load(held, 0), z.GreaterEqual(t)), held, 0)
			store(higherOf(z, t), top, 0)
		}
	}
	archsimd.ClearAVXUpperBits()
}

func (g *guide) seesVector(lane int, on bool, h0, most []float32, d *linear, j, n int) (out uint64) {
	other := lane + 1
	if on {
		other = lane
	}
	sign := eightAt(&g.sign)
	for c := 0; c < n; c += vectorWidth {
		z, away := load(h0, c).Mul(sign), d.spread(j+c)
		var zero, above, below, low float32x8
		high := eightOf(float32(math.Inf(1)))
		up := zero.Equal(zero)
		for l := range g.slopes {
			m := eightAt(&g.slopes[l])
			t := higherOf(load(g.top[l][lane+c:], 0), load(g.top[l][other+c:], 0))
			x := t.Sub(z.Add(away.Mul(m)))
			before := up
			up = up.And(x.Greater(zero))
			above, low = x.Merge(above, up), m.Merge(low, up)
			ends := before.ToInt32x8().AndNot(up.ToInt32x8()).ToMask()
			below, high = x.Merge(below, ends), m.Merge(high, ends)
			if up.ToBits() == 0 {
				break
			}
		}
		m := low.Add(high.Sub(low).Mul(above.Div(above.Sub(below))))
		seen := load(most, c)
		larger := m.Greater(seen).Or(seen.Equal(eightAt(&g.bound)))
		out |= uint64(above.Greater(zero).And(larger).ToBits()) << c
	}
	archsimd.ClearAVXUpperBits()
	return out & uint64(1<<n-1)
}

func (b *besideLine) slopesVector(j int, up, down []float32) int {
	one, own := eightOf(1), eightOf(ownGround)
	c := 0
	for ; c+vectorWidth <= len(up); c += vectorWidth {
		h, a := load(b.here, c), b.across.spread(j+c)
		q := load(b.first, c).Sub(h)
		turn := load(b.firstA, c).Sub(h).Sub(q)
		side := load(b.aside, c).Sub(h)
		end := q.Add(a.Mul(turn))
		start := q.Add(a.Mul(side)).Add(own.Mul(a.Mul(turn.Sub(side))))
		d := one.Div(b.firstD.spread(j + c))
		high, low := higherOf(start, end).Mul(d), lowerOf(start, end).Mul(d)
		for k := range b.points {
			p := &b.points[k]
			if p.a == nil {
				continue
			}
			q := load(p.a, c).Sub(h)
			m := q.Add(p.part.spread(j + c).Mul(load(p.b, c).Sub(h).Sub(q))).Div(p.distance.spread(j + c))
			high, low = higherOf(m, high), lowerOf(m, low)
		}
		store(higherOf(high, load(up, c)), up, c)
		if down != nil {
			store(higherOf(zero8().Sub(low), load(down, c)), down, c)
		}
	}
	archsimd.ClearAVXUpperBits()
	return c
}

func (q *steepness) searchVector(n int) int {
	mix, h0, s0, sign := eightAt(&q.mix), eightAt(&q.h0), eightAt(&q.s0), eightAt(&q.sign)
	best := eightOf(float32(math.Inf(-1)))
	row, at := eightOf(-1), archsimd.LoadFloat32x8(&ascending)
	last := whole8(n)
	for r := 0; r < n; r += vectorWidth {
		a := load(q.a, r)
		h := a.Add(mix.Mul(load(q.b, r).Sub(a)))
		d := load(q.s, r).Sub(s0)
		d = higherOf(d, s0.Sub(load(q.s, r)))
		m := sign.Mul(h.Sub(h0)).Div(d)
		larger := m.Greater(best).And(last.Greater(at))
		best, row = m.Merge(best, larger), at.Merge(row, larger)
		at = at.Add(eightOf(vectorWidth))
	}
	var m, rows [vectorWidth]float32
	best.Store(&m)
	row.Store(&rows)
	archsimd.ClearAVXUpperBits()
	return int(rows[firstLargest(&m)])
}

// firstLargest returns the first place of the largest number.
//
//go:noinline
func firstLargest(m *[vectorWidth]float32) (at int) {
	for k := range m {
		if m[k] > m[at] {
			at = k
		}
	}
	return at
}

func alongLineVector(out, zc, zr []float32, c, r *linear, from int) (j int) {
	for ; j+vectorWidth <= len(out); j += vectorWidth {
		store(load(zc, j).Mul(c.spread(from+j)).Add(load(zr, j).Mul(r.spread(from+j))), out, j)
	}
	archsimd.ClearAVXUpperBits()
	return j
}

func (e *endsBlock) fillVector(s *steps, x *windower, rise []float32, at int) bool {
	any := e.fill8(s, x, rise, at)
	archsimd.ClearAVXUpperBits()
	return any
}

//go:noinline
func (e *endsBlock) fill8(s *steps, x *windower, rise []float32, at int) bool {
	var differ archsimd.Int32x8
	n := archsimd.BroadcastInt32x8(int32(s.n))
	for k := 0; k < len(e[0]); k += vectorWidth {
		r := load(rise, at+k)
		fold := higherOf(r, load(x.fold, at+k))
		hide := n.Sub(s.cot.upToVector(load(x.shade, at+k)))
		folded := s.tan.upToVector(fold)
		open, mayFold := hide, folded
		if !x.sure {
			open = n.Sub(s.cot.upToVector(load(x.shadeU, at+k))).Min(hide)
			mayFold = s.tan.upToVector(higherOf(r, load(x.foldU, at+k))).Max(folded)
		}
		folded, mayFold = folded.Min(open), mayFold.Min(open)
		compressed := s.few.belowVector(r).Max(mayFold).Min(open)
		for end, v := range [endCount]archsimd.Int32x8{folded, mayFold, compressed, open, hide} {
			v.Store((*[vectorWidth]int32)(e[end][k:]))
		}
		differ = differ.Or(compressed).Or(n.Sub(open)).Or(n.Sub(hide)).Or(mayFold)
	}
	return !differ.IsZero()
}

func (l *ladder) upToVector(x float32x8) (n archsimd.Int32x8) {
	if x.GreaterEqual(eightAt(&l.low)).ToBits() == 0 {
		return n
	}
	for i := range l.rungs {
		n = n.Sub(x.GreaterEqual(eightAt(&l.rungs[i])).ToInt32x8())
	}
	return n
}

func (l *ladder) belowVector(x float32x8) (n archsimd.Int32x8) {
	if x.Greater(eightAt(&l.low)).ToBits() == 0 {
		return n
	}
	for i := range l.rungs {
		n = n.Sub(x.Greater(eightAt(&l.rungs[i])).ToInt32x8())
	}
	return n
}

func (q *summits) raiseVector() {
	m := archsimd.LoadFloat32x8(&q.least)
	for k := range q.rise {
		m = higherOf(archsimd.LoadFloat32x8(&q.rise[k]).Div(archsimd.LoadFloat32x8(&q.away[k])), m)
	}
	var zero float32x8
	two := eightOf(2)
	for k := range q.arc {
		a := &q.arc[k]
		r, d, step := archsimd.LoadFloat32x8(&a.r), archsimd.LoadFloat32x8(&a.d), archsimd.LoadFloat32x8(&a.step)
		t := m.Mul(step).Sub(r).Div(two.Mul(d))
		ok := d.Less(zero).And(t.Greater(archsimd.LoadFloat32x8(&a.t0))).And(t.Less(archsimd.LoadFloat32x8(&a.t1)))
		h := archsimd.LoadFloat32x8(&a.h).Add(t.Mul(r.Add(t.Mul(d))))
		x := h.Div(archsimd.LoadFloat32x8(&a.away).Add(t.Mul(step)))
		m = x.Merge(m, ok.And(x.Greater(m)))
	}
	m.Store(&q.least)
	archsimd.ClearAVXUpperBits()
}
