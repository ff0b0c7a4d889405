package mask

import "math"

// Where heights are missing, and what may stand there.

// findMissing notes the rows in which a line of the strip may lack a height.
func (p *windowStrip) findMissing() {
	p.missing = resize(p.missing, p.rows)
	for i := range p.at {
		st := &p.at[i]
		// A lane reaches one column and part of the next on to the rows beside.
		a, b := int(math.Floor(st.v))-1, int(math.Ceil(st.end))+1
		p.missing[i] = a < 0 || float64(b) > p.last
		if !p.missing[i] && p.unknown {
			p.missing[i] = !complete(p.row(i, a)[:b-a+1])
		}
	}
}

// gap reports whether the surface along a lane, which may be fractional, is not
// known somewhere between row ua + i and the next. With an open edge all is
// known outside.
func (p *windowStrip) gap(i int, k float64) bool {
	if !p.missing[i] && !p.missing[i+1] {
		return false
	}
	va, _ := p.at[i].place(k)
	vb, _ := p.at[i+1].place(k)
	lo, hi := min(va, vb), max(va, vb)
	if lo < 0 || hi > p.last {
		if !p.f.lim.openEdge {
			return true
		}
		lo, hi = max(lo, 0), min(hi, p.last)
	}
	c := int(math.Floor(lo))
	n := int(math.Ceil(hi)) - c + 1
	return n > 0 && !(completeScalar(p.row(i, c)[:n]) && completeScalar(p.row(i+1, c)[:n]))
}

// forget starts a march at a row: nothing unknown was passed yet but, with edge,
// what lies outside the DEM.
func (p *windowStrip) forget(i int, edge bool) {
	p.noted = noRow
	for k := range p.places {
		p.places[k] = math.Inf(1)
	}
	if edge && !p.f.lim.openEdge {
		p.noted = i
		for k := range p.places {
			_, p.places[k] = p.at[i].place(float64(k))
		}
	}
}

// noRow is farther away than any reach.
const noRow = math.MinInt / 2

// pass notes, by lane, the distance of unknown terrain between row ua + i and
// the one before. It reaches, at worst, the row itself.
func (p *windowStrip) pass(i, dir int) {
	if r := i - dir; r < 0 || r >= p.rows || !p.missing[i] && !p.missing[r] {
		return
	}
	for k := range p.places {
		if p.gap(min(i, i-dir), float64(k)) {
			_, p.places[k] = p.at[i].place(float64(k))
			p.noted = i
		}
	}
}

// unknownBefore finds, for the cells of a row, the slopes of unknown terrain
// towards the radar. It is called row by row.
func (x *windower) unknownBefore(i int, c *windowCells) {
	p := &x.strip
	if i == p.u0-p.ua {
		for r := range i {
			p.pass(r, 1)
		}
	}
	p.pass(i, 1)
	if i-p.noted > p.f.near {
		return
	}
	x.doubt(i, c)
	lim := &p.f.lim
	p.eachUnknown(i, func(j int, h, d float64) {
		raise(&c.shadeU[j], lim.ceiling-h, d)
		raise(&c.foldU[j], h-lim.low, d)
	})
}

// unknownBehind does the same away from the radar.
func (x *windower) unknownBehind(i int, c *windowCells) {
	p := &x.strip
	if i == p.u1-p.ua-1 {
		for r := p.rows - 1; r > i; r-- {
			p.pass(r, -1)
		}
	}
	p.pass(i, -1)
	if p.noted-i > p.f.far || p.noted == noRow {
		return
	}
	x.doubt(i, c)
	p.eachUnknown(i, func(j int, h, d float64) { raise(&c.foldU[j], p.f.lim.ceiling-h, d) })
}

// doubt prepares a row for which unknown terrain counts.
func (x *windower) doubt(i int, c *windowCells) {
	p := &x.strip
	if row := &p.doubt[p.ua+i-p.u0]; !*row {
		*row = true
		fillWith(c.shadeU[:p.width], float32(x.minShade))
		fillWith(c.foldU[:p.width], float32(x.minFold))
	}
}

// eachUnknown visits the cells of a row with their heights and the distances to
// unknown terrain.
func (p *windowStrip) eachUnknown(i int, visit func(j int, h, d float64)) {
	var away [laneStep + 1]float64
	st := &p.at[i]
	for k := range away {
		_, s := st.place(float64(k))
		away[k] = math.Abs(p.places[k] - s)
	}
	for _, r := range p.runs(i) {
		z := p.row(i, r.v)
		for c := range r.n {
			d := away[r.lane+c]
			if !r.on {
				d = min(d, away[r.lane+c+1])
			}
			visit(r.j+c, float64(z[c]), d)
		}
	}
}

// raiseTo raises slopes to others.
func raiseTo(a, to []float32) {
	for i := range a {
		a[i] = higher(a[i], to[i])
	}
}

// raise raises a slope to rise / distance.
func raise(slope *float32, rise, distance float64) {
	if distance == 0 {
		*slope = float32(math.Inf(1))
	} else if m := float32(rise / distance); m > *slope {
		*slope = m
	}
}

// mend puts right the cells of a row where heights are missing: those that have
// none, and those beside which a lane has none, beside an edge or a hole.
func (x *windower) mend(i int, c *windowCells) {
	p := &x.strip
	p.sample(i)
	var o ownLine
	for _, r := range p.runs(i) {
		for n := range r.n {
			j := r.j + n
			r.line(n, &o)
			if o.h != o.h {
				c.shade[j], c.shadeU[j], c.fold[j], c.foldU[j] = nanCell, nanCell, nanCell, nanCell
				continue
			}
			a, b := p.heights[r.lane+n], p.heights[r.lane+n+1]
			if a != a || !r.on && b != b {
				x.walk(&o, c, j)
			}
		}
	}
}

var nanCell = float32(nan)

// walk finds the slopes of a cell on its own line, row by row.
func (x *windower) walk(o *ownLine, c *windowCells, j int) {
	p := o.p
	lim := &p.f.lim
	shade, fold := float64(c.shade[j]), float64(c.fold[j])
	up, down := max(lim.high, lim.ceiling)-o.h, o.h-lim.low
	// far reports whether nothing counts from a distance on.
	far := func(d float64, dir int) bool {
		if dir < 0 {
			return d*shade > up && d*fold > down
		}
		return d*fold > up
	}
	side := func(dir int, edge bool) (unknown float64) {
		unknown = math.Inf(1)
		last := o.s
		for r := o.i + dir; r >= 0 && r < p.rows; r += dir {
			_, _, s, height := o.cross(r)
			h := float64(height)
			d := math.Abs(s - o.s)
			if p.unknown && p.gap(min(r, r-dir), o.k) {
				unknown = min(unknown, math.Abs(last-o.s))
			}
			if far(d, dir) {
				return unknown
			}
			last = s
			m := (h - o.h) / d
			if dir < 0 {
				if m > shade {
					shade = m
				}
				m = -m
			}
			if m > fold {
				fold = m
			}
		}
		if edge && !lim.openEdge {
			unknown = min(unknown, math.Abs(last-o.s))
		}
		return unknown
	}
	before, behind := side(-1, p.nearEnd), side(1, p.farEnd)
	c.shade[j], c.fold[j] = float32(shade), float32(fold)
	c.shadeU[j], c.foldU[j] = c.shade[j], c.fold[j]
	raise(&c.shadeU[j], lim.ceiling-o.h, before)
	raise(&c.foldU[j], o.h-lim.low, before)
	raise(&c.foldU[j], lim.ceiling-o.h, behind)
}
