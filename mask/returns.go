package mask

import "math"

// returns finds what shares the slant range of the cell (u, v): the number of
// lit points of its range line at that range, itself included, and the cell's
// own part of the lit ground within bin metres of slant range around it, by
// length of the ground along the line. It walks the whole reach; the cell must
// be lit.
func (w *walker) returns(f *field, u, v int, bin float64) (count int, share float64) {
	w.f = f
	w.y = newRay(f.ln, u, v)
	_, s := w.y.at(u)
	h := float64(f.z[(u-f.ua)*f.width+v-f.at[u-f.ua]])
	own := point{s: s, h: h}
	own.m, own.r = w.y.see(s, h)
	at := w.profile(u, own)
	b := binned{from: own.r - bin/2, to: own.r + bin/2}
	count = 1
	top, lit := math.Inf(-1), false
	for i := range w.seq {
		q := &w.seq[i]
		if q.unknown {
			b.end()
			lit = false
			continue
		}
		was := lit
		if lit = q.m > top; lit {
			if i > 0 && !w.seq[i-1].unknown {
				a := w.seq[i-1]
				if !was { // lit from where the line of sight meets the rise
					b.end()
					a = between2(a, *q, (top-a.m)/(q.m-a.m))
				}
				b.add(a, *q)
				if i != at && i-1 != at && (a.r-own.r)*(q.r-own.r) <= 0 && q.r != own.r {
					count++
				}
			}
			top = q.m
		} else {
			b.end()
		}
		if i == at {
			b.here()
		}
	}
	b.end()
	if b.total <= 0 {
		return count, 1
	}
	return count, min(b.own/b.total, 1)
}

// profile fills w.seq with the samples of the whole range line through a point,
// near range first, and returns the point's own index.
func (w *walker) profile(u0 int, own point) (at int) {
	f := w.f
	w.seq = w.seq[:0]
	for u := u0; u > f.ua; u-- {
		va, sa := w.y.at(u)
		vb, sb := w.y.at(u - 1)
		w.step(u, -1, va, vb, sa, sb)
		w.seq = append(w.seq, w.pieces...)
		if w.outside(vb) {
			break
		}
	}
	for i, j := 0, len(w.seq)-1; i < j; i, j = i+1, j-1 {
		w.seq[i], w.seq[j] = w.seq[j], w.seq[i]
	}
	at = len(w.seq)
	w.seq = append(w.seq, own)
	for u := u0; u < f.ub-1; u++ {
		va, sa := w.y.at(u)
		vb, sb := w.y.at(u + 1)
		w.step(u, 1, va, vb, sa, sb)
		w.seq = append(w.seq, w.pieces...)
		if w.outside(vb) {
			break
		}
	}
	return at
}

// between2 interpolates two samples.
func between2(a, b point, t float64) point {
	mix := func(x, y float64) float64 { return x + t*(y-x) }
	return point{m: mix(a.m, b.m), r: mix(a.r, b.r), s: mix(a.s, b.s), h: mix(a.h, b.h)}
}

// binned adds up the lit ground within a range of slant ranges, stretch by
// stretch.
type binned struct {
	from, to   float64
	total, own float64
	stretch    float64 // of the stretch that is being walked
	mine       bool    // it holds the point itself
}

// add counts the ground from a to b.
func (b *binned) add(p, q point) {
	length := math.Hypot(q.s-p.s, q.h-p.h)
	lo, hi := min(p.r, q.r), max(p.r, q.r)
	part := 1.0
	if hi > lo {
		part = max(min(hi, b.to)-max(lo, b.from), 0) / (hi - lo)
	} else if lo < b.from || lo > b.to {
		part = 0
	}
	b.stretch += part * length
	if q.r < b.from || q.r > b.to {
		b.end() // it leaves the bin
	}
}

func (b *binned) here() { b.mine = true }

// end closes a stretch.
func (b *binned) end() {
	b.total += b.stretch
	if b.mine {
		b.own += b.stretch
	}
	b.stretch, b.mine = 0, false
}
