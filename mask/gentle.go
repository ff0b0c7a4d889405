package mask

import (
	"math"
	"math/bits"
)

// gentle says of the surface between a row and the next one where a range line
// cannot be folded or hidden by it: a bit a column of patches, the first at
// column base. A patch is the bilinear surface between four cells.
type gentle struct {
	base       int
	rises, lit uint64  // slant range grows, the look angle grows, away from the radar
	dark       uint64  // of a platform: the look angle falls
	top        float64 // of a fan: the largest m between its lanes, or more
	// What the row is worth, at the least: metres of height at equal slant range,
	// and at an equal look angle.
	worthR, worthM float32
	// Of a plane wave: the rise above which the look angle grows, and by how many
	// columns lines move, as a grade has them.
	fall  float32
	drift [2]float32
	// The rise in a row from which ground is surely layover by its own slope.
	steep float32
}

// grade is a bound on how the height may change along a range line over one row:
// below rise slant range grows, above fall the look angle does. drift are the
// columns that lines move in that row, at the least and at the most.
type grade struct {
	rise, fall float32
	most       float32 // above it slant range surely falls
	jag        float32 // a bend or a twist as large as this makes the ground jagged
	drift      [2]float32
}

// gradeShare is the part of the limits that ground keeps within, since lines are
// not quite as straight as they are taken here.
const gradeShare = 0.99

// patches is the number of patches of a row that lines of a strip may cross.
const patches = padLanes

// gradeOf finds the bounds of a plane wave for the row at which the strip stands.
func (p *strip) gradeOf(u int, g *grade) {
	ln := p.f.ln
	i := min(u/laneStep, ln.nu-2)
	n := i*ln.nk + p.j
	m := n + ln.nk
	drift := func(n, m int) float32 { return float32((ln.v[m] - ln.v[n]) * (1. / laneStep)) }
	a, b := (ln.s[m]-ln.s[n])/laneStep, (ln.s[m+1]-ln.s[n+1])/laneStep
	ds := min(a, b) * gradeShare
	g.drift[0], g.drift[1] = drift(n, m), drift(n+1, m+1)
	g.rise, g.fall = float32(ds*ln.tan), float32(-ds*ln.cot)
	g.most = float32(max(a, b) * surely * ln.tan)
}

// mark finds the gentle patches between row u, where the strip stands, and the
// next one.
func (p *strip) mark(u int) {
	f := p.f
	if u == p.ua {
		p.graded = -1
	}
	g := &p.gentle[u-p.ua]
	*g = gentle{base: int(math.Floor(p.edgeA)) - 1, steep: float32(math.Inf(1)), top: math.Inf(1)}
	p.jags[u-p.ua] = jags{}
	i := u - f.ua
	if u+1 >= p.ub {
		if from := i*f.width + g.base - f.at[i]; from >= 0 && f.ln.fan == nil {
			p.limitJags()
			a := (*patchRow)(f.z[from:])
			p.findJags(u, a, a)
		}
		return
	}
	from, to := i*f.width+g.base-f.at[i], (i+1)*f.width+g.base-f.at[i+1]
	if from < 0 || to < 0 {
		return
	}
	a, b := f.z[from:], f.z[to:]
	p.limitJags()
	if f.ln.places != nil {
		p.markSeen(g, u, (*patchRow)(a), (*patchRow)(b))
		return
	}
	var limits grade
	p.gradeOf(u, &limits)
	g.worthR, g.worthM, g.steep = limits.rise, -limits.fall, limits.most
	g.fall, g.drift = limits.fall, limits.drift
	limits.jag = p.jag.any
	if vectors {
		var jagged bool
		g.rises, g.lit, jagged = markVector((*patchRow)(a), (*patchRow)(b), &limits)
		if jagged {
			p.findJags(u, (*patchRow)(a), (*patchRow)(b))
		}
		return
	}
	p.findJags(u, (*patchRow)(a), (*patchRow)(b))
	for k := range patches {
		lo, hi := changes(a[k], a[k+1], b[k], b[k+1], &limits.drift)
		if hi < limits.rise {
			g.rises |= 1 << k
		}
		if lo > limits.fall {
			g.lit |= 1 << k
		}
	}
}

// patchRow holds the heights of the corners of the patches, and the next one.
type patchRow [patches + 2]float32

// changes returns the least and the most that the height may change along a line
// over the patch between a0, a1 of one row and b0, b1 of the next.
func changes(a0, a1, b0, b1 float32, drift *[2]float32) (lo, hi float32) {
	e0, e1 := b0-a0, b1-a1
	da, db := a1-a0, b1-b0
	s, t := float32(da*drift[0]), float32(da*drift[1])
	x, y := float32(db*drift[0]), float32(db*drift[1])
	lo = min(e0, e1) + min(min(s, t), min(x, y))
	hi = max(e0, e1) + max(max(s, t), max(x, y))
	return lo, hi
}

// crossed returns the bits of the patches that a path from column va to column vb
// crosses, 0 where they are not all known. A path along a column touches those on
// both sides.
func (g *gentle) crossed(va, vb float64) uint64 {
	if va > vb {
		va, vb = vb, va
	}
	a, b := int(va), int(vb) // columns are not negative inside the DEM
	if float64(b) == vb {
		b--
	}
	if b < a {
		a, b = b, a
	}
	a, b = a-g.base, b-g.base
	if a < 0 || b >= patches || va < 0 {
		return 0
	}
	return 1<<(b+1) - 1<<a
}

// rising reports whether slant range grows all along such a path, away from the
// radar.
func (g *gentle) rising(va, vb float64) bool {
	c := g.crossed(va, vb)
	return c != 0 && g.rises&c == c
}

// allPatches are the bits of all patches of a row.
const allPatches = 1<<patches - 1

// lanesOver returns the lanes of row u that touch patches, the first at column base,
// or lie next to them.
func (p *strip) lanesOver(u, base int, patches uint64) (lanes uint64) {
	a := p.footingOf(u)
	if p.f.ln.uniform { // patch n lies between lanes n-1 and n+1
		if n := base - int(math.Floor(a.v0)); n == 0 {
			return (patches>>1 | patches | patches<<1) & (1<<marchLanes - 1)
		}
	}
	per := 1 / a.dv
	for ; patches != 0; patches &= patches - 1 {
		x := float64(base+bits.TrailingZeros64(patches)) - a.v0
		first, last := int(math.Floor(float64(x*per))), int(math.Ceil(float64((x+1)*per)))
		if first < marchLanes && last >= 0 {
			lanes |= 2<<min(last, marchLanes-1) - 1<<max(first, 0)
		}
	}
	return lanes
}

// lightening reports whether the look angle grows all along such a path, away
// from the radar.
func (g *gentle) lightening(va, vb float64) bool {
	c := g.crossed(va, vb)
	return c != 0 && g.lit&c == c
}

// way is the part of the surface between two rows that the range lines of a bundle
// of cells cross: from column lo to column hi, counted from the patch of the first
// cell at index at of the strip's heights, in one of the rows, and next in the other.
// drift and limit are those of a grade.
type way struct {
	lo, hi   float32
	at, next int
	drift    *[2]float32
	limit    *float32
}

// vicinity are the places in a field's heights of a cell and of those before and
// after it, the columns that the strip's first and last lanes move in a row, and the
// rise in a row above which ground is layover by its own slope.
type vicinity struct {
	before, here, after int
	drift               [2]float32
	limit               float32
}

// surely is by how much a slope passes the limit to be layover whatever rounding
// may do.
const surely = 1.02

// vicinity finds the neighbours of the cell (u, v); false where it lies at the end of
// the field, and where holes have been given a height, which the slope of a cell
// does not count.
func (p *strip) vicinity(u, v int, a *vicinity) bool {
	f := p.f
	i := u - f.ua
	if hole := f.lim.holeHeight; u <= p.ua || u >= p.ub-1 || hole == hole {
		return false
	}
	a.before, a.here, a.after = (i-1)*f.width+v-f.at[i-1], i*f.width+v-f.at[i], (i+1)*f.width+v-f.at[i+1]
	n := u - p.ua
	here, next := p.footingOf(u), p.footingOf(u+1)
	a.drift[0] = float32(next.v0 - here.v0)
	a.drift[1] = float32(next.column(marchLanes-1) - here.column(marchLanes-1))
	a.limit = p.gentle[n].steep
	return true
}

// steep reports whether a look has layover at the cell (u, v) by its own
// slope, the central differences.
func (p *strip) steep(u, v int) bool {
	var a vicinity
	if !p.vicinity(u, v, &a) {
		return false
	}
	z := p.f.z
	along := float32(float32(z[a.after]-z[a.before]) * 0.5)
	across := float32(float32(z[a.here+1]-z[a.here-1]) * 0.5)
	return along+min(float32(across*a.drift[0]), float32(across*a.drift[1])) > a.limit
}
