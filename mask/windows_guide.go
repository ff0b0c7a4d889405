package mask

import (
	"math"
	"math/bits"
)

// guideShare is the part of the bounds that a slope of a lane must pass for a cell
// that has seen none above them to look there on its own range line, where it may
// be steeper.
const guideShare = 0.8

// guideRows is the number of rows from which on a guide sees ground. In those
// between, a cell looks on its own range line throughout, see beside.
const guideRows = 3

// guideStep is about the ratio of two neighbouring slopes of a guide.
const guideStep = 1.4

// laneRow holds a number for every lane of a strip, and fills whole vectors. The
// lanes behind the last are NaN where that matters.
type laneRow [guideLanes]float32

const guideLanes = 64

// guide holds, by lane, the lines that support the ground passed so far at some
// slopes: every line as its height over the row passed last, and the row in which
// it touches. A point below one sees ground at a larger slope, which lies between
// that line's row and that of the first line which the point is not below.
// Rounding to float32 is about a millimetre in the reach: a guide only shows where
// to look.
type guide struct {
	sign   float32   // -1 turns heights upside down
	bound  float32   // slopes that are not larger do not count
	slopes []float32 // ascending
	top    []laneRow // by slope
	row    []laneRow
}

// setUp chooses slopes from what shows where to look to the highest that matters.
func (g *guide) setUp(bound, highest float64, sign float32) {
	low := guideShare * bound
	n := int(math.Ceil(math.Log(highest/low)/math.Log(guideStep))) + 1
	g.sign, g.bound = sign, float32(bound)
	g.slopes = resize(g.slopes, n)
	g.top, g.row = resize(g.top, n), resize(g.row, n)
	for l := range n {
		g.slopes[l] = float32(low * math.Pow(highest/low, float64(l)/float64(n-1)))
	}
}

func (g *guide) reset() {
	for l := range g.top {
		fillWith(g.top[l][:], float32(math.Inf(-1)))
		clear(g.row[l][:])
	}
}

// advance passes a row, d from the one before.
func (g *guide) advance(h *laneRow, d linear, row int) {
	if vectors {
		g.advanceVector(h, &d, float32(row))
		return
	}
	for k := range guideLanes {
		z, d := g.sign*h[k], d.at(k)
		for l, slope := range g.slopes {
			t := g.top[l][k] - float32(d*slope)
			if z >= t {
				g.row[l][k] = float32(row)
			}
			if z > t {
				t = z
			}
			g.top[l][k] = t
		}
	}
}

// sees returns which of the cells from column j on may see ground at a larger
// slope than most, one bit each; where most is the bound, at a share of it. Cell c lies between lanes lane + c and the next,
// or on the former. h0 are the heights, d is the distance of the cells from the
// row passed last.
//
// How far a line is above a point is a convex function of its slope, so its chord
// between two slopes is zero at no less than the largest slope of the ground.
func (g *guide) sees(lane int, on bool, h0, most []float32, d linear, j, n int) uint64 {
	if vectors {
		return g.seesVector(lane, on, h0, most, &d, j, n)
	}
	other := 1
	if on {
		other = 0
	}
	out := uint64(0)
	for c := range n {
		z, d := g.sign*h0[c], d.at(j+c)
		l, above, below := 0, float32(0), float32(0)
		for ; l < len(g.slopes); l++ {
			top := higher(g.top[l][lane+c], g.top[l][lane+c+other])
			if below = top - (z + float32(d*g.slopes[l])); !(below > 0) {
				break
			}
			above = below
		}
		slope := float32(math.Inf(1))
		switch {
		case l == 0:
			continue
		case l < len(g.slopes):
			slope = g.slopes[l-1] + float32((g.slopes[l]-g.slopes[l-1])*(above/(above-below)))
		}
		if slope > most[c] || most[c] == g.bound {
			out |= 1 << c
		}
	}
	return out
}

// between returns the rows between which a point of height h0, d from the row
// passed last, sees the ground at its largest slope along a lane; ok is false
// where that is below all slopes. at is the row passed last.
func (g *guide) between(lane int, h0, d float32, at int) (near, far int, ok bool) {
	z := g.sign * h0
	l := 0
	for ; l < len(g.slopes) && g.top[l][lane] > z+float32(d*g.slopes[l]); l++ {
	}
	if l == 0 {
		return 0, 0, false
	}
	near = at
	if l < len(g.slopes) {
		near = int(g.row[l][lane])
	}
	return near, int(g.row[l-1][lane]), true
}

// seek looks where a guide points, and raises most, by column.
func (x *windower) seek(r *windowRun, g *guide, dir int, most []float32) {
	p := r.p
	at := r.i + guideRows*dir
	if at < 0 || at >= p.rows {
		return
	}
	h0 := p.row(r.i, r.v)
	d := r.distance(at)
	for b := g.sees(r.lane, r.on, h0, most[r.j:], d, r.j, r.n); b != 0; b &= b - 1 {
		c := bits.TrailingZeros64(b)
		s := x.summits.next()
		o := &s.o
		r.line(c, o)
		near, far, ok := g.between(r.lane+c, h0[c], d.at(r.j+c), at)
		if !r.on {
			if a, b, also := g.between(r.lane+c+1, h0[c], d.at(r.j+c), at); ok && also {
				near, far = dir*min(dir*near, dir*a), dir*max(dir*far, dir*b)
			} else if also {
				near, far = a, b
			}
		}
		if row := o.find(r.lane+c, near, far, dir, g.sign); row >= 0 {
			s.row, s.sign, s.most, s.moved = row, g.sign, &most[r.j+c], false
			x.summits.add()
		}
	}
}
