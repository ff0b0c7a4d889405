package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// spot is one sample of the range line through a site, or unknown terrain: its
// m and r are then those of unknown terrain at its worst.
type spot struct {
	u, v    float64 // marching position
	s, h    float64 // ground distance of the lanes, height
	m, r    float64
	unknown bool
}

// line is the range line through a point of the bilinear surface: samples at
// the crossings of the grid and at the vertices of m and r between them, where
// a parabola has its extremes. It is what walker visits from a cell's centre,
// from any place, and kept.
type line struct {
	f         *field
	y         ray
	here      spot
	near, far []spot // from the point outwards, towards the radar and away
	ts        []float64
}

// trace lays the line through (u, v) over the field, at most reach rows each
// way. ok is false where the surface has no value there.
func (l *line) trace(f *field, u, v float64, nearRows, farRows int) (ok bool) {
	if u < float64(f.ua) { // before the first row of a fan
		return false
	}
	l.f = f
	l.y = f.ln.rayAt(u, v)
	i := min(math.Floor(u), float64(f.ub-2))
	h := f.surface(u, v)
	_, s0 := l.y.at(int(i))
	_, s1 := l.y.at(int(i) + 1)
	s := s0 + float64((u-i)*(s1-s0))
	l.near, l.far = l.near[:0], l.far[:0]
	l.here = l.spot(u, v, s, h)
	if h != h {
		return false
	}
	l.walk(-1, max(int(math.Ceil(u))-nearRows, f.ua))
	l.walk(1, min(int(math.Floor(u))+farRows, f.ub-1))
	return true
}

// surface returns the bilinear height at a marching position of the field, NaN
// where a height that counts is missing.
func (f *field) surface(u, v float64) float64 {
	i := math.Floor(u)
	h := f.between(int(i), v)
	if rest := u - i; rest > 0 {
		h += float64(rest * (f.between(int(i)+1, v) - h))
	}
	return h
}

// between returns the height at column v of row u. The rest of v is taken
// before the row's first stored column, on which it must not depend.
func (f *field) between(u int, v float64) float64 {
	c := math.Floor(v)
	z := f.z[(u-f.ua)*f.width+int(c)-f.at[u-f.ua]:]
	h, rest := float64(z[0]), v-c
	if rest > 0 {
		h += float64(rest * (float64(z[1]) - h))
	}
	return h
}

func (l *line) spot(u, v, s, h float64) spot {
	m, r := l.y.see(s, h)
	return spot{u: u, v: v, s: s, h: h, m: m, r: r}
}

// walk fills one side of the line as far as row end.
func (l *line) walk(dir, end int) {
	f := l.f
	out := &l.near
	next := int(math.Ceil(l.here.u)) - 1
	if dir > 0 {
		out, next = &l.far, int(math.Floor(l.here.u))+1
	}
	ua, va, sa := l.here.u, l.here.v, l.here.s
	for ; (end-next)*dir >= 0; next += dir {
		vb, sb := l.y.at(next)
		*out = l.step(*out, dir, ua, va, sa, float64(next), vb, sb)
		ua, va, sa = float64(next), vb, sb
		if vb < 0 || vb > float64(f.ln.orient.v-1) {
			return // it has left the DEM for good: range lines drift one way only
		}
	}
	edge := 0
	if dir > 0 {
		edge = f.ln.orient.u - 1
	}
	if end == edge && !f.lim.openEdge {
		*out = append(*out, l.unknown(dir, ua, va, sa, sa))
	}
}

// unknown returns what may stand from ground distance sa to sb at its worst.
func (l *line) unknown(dir int, u, v, sa, sb float64) spot {
	lim := &l.f.lim
	q := spot{u: u, v: v, s: sa, h: lim.ceiling, unknown: true}
	if dir < 0 {
		q.m, _ = l.y.see(sa, lim.ceiling)
		_, q.r = l.y.see(sa, lim.low)
		return q
	}
	q.m, _ = l.y.see(sb, lim.ceiling)
	_, q.r = l.y.see(sa, lim.ceiling)
	return q
}

// step appends the samples from a place, excluded, to the next row, included.
// Ground within ownGround rows of the point counts as the point itself; where
// it ends and where a whole row ends there are samples too.
func (l *line) step(out []spot, dir int, ua, va, sa, ub, vb, sb float64) []spot {
	ts := l.ts[:0]
	a, b := math.Floor(min(va, vb)), math.Ceil(max(va, vb))
	for c := a + 1; c < b; c++ {
		if t := (c - va) / (vb - va); t > 0 && t < 1 {
			ts = append(ts, t)
		}
	}
	if va > vb {
		for i, j := 0, len(ts)-1; i < j; i, j = i+1, j-1 {
			ts[i], ts[j] = ts[j], ts[i]
		}
	}
	length := math.Abs(ub - ua)
	done := math.Abs(ua - l.here.u)
	if done < 1 {
		ts = insert(insert(ts, (ownGround-done)/length), (1-done)/length)
	}
	ts = append(ts, 1)
	l.ts = ts
	own := (ownGround - done) / length
	t0 := 0.0
	for _, t1 := range ts {
		out = l.piece(out, dir, ua, va, sa, ub, vb, sb, t0, t1, own)
		t0 = t1
	}
	return out
}

// insert puts a fraction strictly between 0 and 1 into its place.
func insert(ts []float64, t float64) []float64 {
	if !(t > 0 && t < 1) {
		return ts
	}
	ts = append(ts, t)
	for i := len(ts) - 1; i > 0 && ts[i-1] > ts[i]; i-- {
		ts[i-1], ts[i] = ts[i], ts[i-1]
	}
	return ts
}

// piece appends the samples of one stretch within a cell, t0 excluded and t1
// included, t counting from a to b. The point's own ground, up to own, has no
// sample but its end.
func (l *line) piece(out []spot, dir int, ua, va, sa, ub, vb, sb, t0, t1, own float64) []spot {
	f := l.f
	tm := (t0 + t1) / 2
	du, dv, ds := ub-ua, vb-va, sb-sa
	row, c := math.Floor(ua+tm*du), math.Floor(va+tm*dv)
	z0 := f.z[(int(row)-f.ua)*f.width+int(c)-f.at[int(row)-f.ua]:]
	z1 := f.z[(int(row)+1-f.ua)*f.width+int(c)-f.at[int(row)+1-f.ua]:]
	h00, h10 := float64(z0[0]), float64(z1[0])
	h01, h11 := h00, h10
	if va != c || vb != c { // not along the column itself
		h01, h11 = float64(z0[1]), float64(z1[1])
	}
	if sum := h00 + h01 + h10 + h11; sum != sum {
		return l.missing(out, dir, ua, va, sa, ub, vb, sb, t0, t1)
	}
	if t1 < own {
		return out
	}
	// h(t) = a + b t + d t^2 over the place in the cell, x = x0 + t dv and
	// y = y0 + t du.
	x0, y0 := va-c, ua-row
	p, q, w := h01-h00, h10-h00, h11-h01-h10+h00
	a := h00 + p*x0 + q*y0 + w*x0*y0
	b := p*dv + q*du + w*(x0*du+y0*dv)
	d := w * du * dv
	emit := func(t float64) {
		u, v, s := ua+t*du, va+t*dv, sa+t*ds
		if t == 1 {
			u, v, s = ub, vb, sb
		}
		out = append(out, l.spot(u, v, s, a+t*(b+t*d)))
	}
	if d != 0 && t1 > own {
		// The vertices: m' = b + 2 d t + cot ds = 0, r' = sin ds - cos (b + 2 d t) = 0.
		worthM, worthR := l.y.worth(sa, sb, a)
		tv, tr := -(b+worthM)/(2*d), (worthR-b)/(2*d)
		if tr < tv {
			tv, tr = tr, tv
		}
		if tv > t0 && tv < t1 {
			emit(tv)
		}
		if tr > t0 && tr < t1 {
			emit(tr)
		}
	}
	emit(t1)
	return out
}

// missing appends what may stand on a stretch where the surface has no value,
// and the sample at the row at its end when there is one. Outside an open edge
// nothing stands: the gap remains, but it decides nothing.
func (l *line) missing(out []spot, dir int, ua, va, sa, ub, vb, sb, t0, t1 float64) []spot {
	f := l.f
	mid := va + (t0+t1)/2*(vb-va)
	q := l.unknown(dir, ua+t0*(ub-ua), va+t0*(vb-va), sa+t0*(sb-sa), sa+t1*(sb-sa))
	if f.lim.openEdge && (mid < 0 || mid > float64(f.ln.orient.v-1)) {
		q.m, q.r = math.Inf(-1), math.Inf(dir)
	}
	out = append(out, q)
	if t1 == 1 {
		if h := f.between(int(ub), vb); h == h {
			out = append(out, l.spot(ub, vb, sb, h))
		}
	}
	return out
}

// terrain describes a spot of the line.
func (l *line) terrain(g *dem.Grid, q *spot) Terrain {
	row, col := l.f.ln.cell(q.u, q.v)
	at := g.At(row, col)
	return Terrain{Row: row, Col: col, Place: geometry.Place{Lon: at.Lon, Lat: at.Lat}, Height: q.h, Distance: q.s - l.here.s}
}

var noTerrain = Terrain{nan, nan, geometry.Place{Lon: geometry.NotGiven, Lat: geometry.NotGiven}, nan, nan}
