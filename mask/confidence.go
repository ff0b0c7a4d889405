package mask

import (
	"math"
	"math/rand/v2"

	"foldshade/geometry"
)

// This file asks how likely a site is open when the heights have an error. It
// draws errors along the range line, adds them to its spots and judges again.
// Method, sources and limits stand in docs/confidence.md.

// draws keeps the room that simulated errors take.
type draws struct {
	rows []errorRow
	e    []float64 // one draw, by row
	line line      // the perturbed line
}

// errorRow is how the error at a row crossing of the range line follows from
// that at the one before: e = carry before + fresh z, z a standard normal.
type errorRow struct{ carry, fresh float64 }

// surelyWithin is the number of standard deviations within which a Gaussian
// error counts as certain to be: beyond it lie 6e-7 of all errors.
const surelyWithin = 5

// negligible is the probability below which a simulation is spared.
const negligible = 1e-4

// chance fills the probabilities of a result whose line is traced.
func (w *sitesWorker) chance(i, k int, facet geometry.Facet, res *SiteResult) {
	e, s, d := &w.job.DEMError, &w.job.Sites[i], &w.draws
	first := d.chain(w, e)
	f := w.judge.of(&w.line, s.Height, w.field.ln.cos)
	m := f.lane(&w.field, w.sites[i].z, w.sites[i].z+s.Height)
	if m.raw() == Open && !facet.ActiveLayover() && w.surelyOpen(s.Height, facet, e.Sigma) {
		res.Chance = Chance{Open: 1}
		return
	}
	if w.surelyHidden(s.Height, e.Sigma) {
		res.Chance = Chance{Hidden: 1}
		return
	}
	rng := rand.New(rand.NewPCG(e.Seed^math.Float64bits(w.sites[i].row)*0x9e3779b97f4a7c15^math.Float64bits(w.sites[i].col), uint64(k)))
	res.Chance = d.simulate(w, rng, first, e.Draws, s.Height, facet)
}

// simulate returns the shares of the draws by what the site is.
func (d *draws) simulate(w *sitesWorker, rng *rand.Rand, first, n int, height float64, facet geometry.Facet) Chance {
	var open, folded, hidden, unknown float64
	for range n {
		d.draw(rng)
		d.disturb(&w.line, first, w.field.ln.cos)
		slope := d.slope(&w.line, first)
		f := w.judge.of(&d.line, height, w.field.ln.cos)
		m := lane{float32(f.clear), float32(f.near), float32(f.far), float32(f.clearU), float32(f.nearU), float32(f.farU)}
		turns := 0
		if facet.Above-slope*w.field.ln.cos <= 0 {
			turns = turnLayover
		}
		switch layoverClass(m.raw(), turns).Kind() {
		case 1:
			open++
		case 3:
			folded++
		case 4:
			hidden++
		default:
			unknown++
		}
	}
	all := float64(n)
	p := open / all
	return Chance{p, folded / all, hidden / all, unknown / all, math.Sqrt(p * (1 - p) / all)}
}

// chain lays out the rows that the line's spots lie between and how the error
// goes from one to the next, from near range to far range. It returns the
// first row.
//
// The error at a row crossing is that of the bilinear surface: a mixture of the
// errors at the two cells beside it, with the variance that this leaves, and
// with the exact covariance of one crossing and the next. Beyond that the
// chain is Markov, as the exponential covariance is along a line.
func (d *draws) chain(w *sitesWorker, e *DEMError) (first int) {
	l, o := &w.line, w.field.ln.orient
	first, last := int(math.Floor(l.here.u)), int(math.Ceil(l.here.u))
	for i := range l.near {
		first = min(first, int(math.Floor(l.near[i].u)))
	}
	for i := range l.far {
		last = max(last, int(math.Ceil(l.far[i].u)))
	}
	first, last = max(first-1, 0), min(last+1, o.u-1) // a row more for the slope
	if last == first {
		first--
	}
	ue, un, ve, vn := o.step(w.grid, l.here.u, l.here.v)
	// corr is the correlation of the errors of two cells.
	corr := func(du, dv float64) float64 {
		if du == 0 && dv == 0 {
			return 1
		}
		if e.Correlation == 0 {
			return 0
		}
		return math.Exp(-math.Hypot(du*ue+dv*ve, du*un+dv*vn) / e.Correlation)
	}
	d.rows = resize(d.rows, last-first+1)
	side := corr(0, 1)
	var beforeC, beforeX, beforeSD float64
	for j := range d.rows {
		v, _ := l.y.at(first + j)
		c := math.Floor(v)
		x := v - c
		sd := math.Sqrt((1-x)*(1-x) + x*x + 2*x*(1-x)*side)
		r := errorRow{0, sd}
		if j > 0 {
			g := c - beforeC
			cov := (1-x)*(1-beforeX)*corr(1, g) + (1-x)*beforeX*corr(1, g-1) +
				x*(1-beforeX)*corr(1, g+1) + x*beforeX*corr(1, g)
			r.carry = cov / (beforeSD * beforeSD)
			r.fresh = math.Sqrt(max(sd*sd-cov*r.carry, 0))
		}
		r.fresh *= e.Sigma
		d.rows[j] = r
		beforeC, beforeX, beforeSD = c, x, sd
	}
	return first
}

// draw fills the errors of the rows.
func (d *draws) draw(rng *rand.Rand) {
	d.e = resize(d.e, len(d.rows))
	e := 0.0
	for j, r := range d.rows {
		e = r.carry*e + r.fresh*rng.NormFloat64()
		d.e[j] = e
	}
}

// at returns the error at a fractional row, straight between two rows.
func (d *draws) at(first int, u float64) float64 {
	j := min(max(int(u)-first, 0), len(d.e)-2)
	return d.e[j] + (u-float64(first+j))*(d.e[j+1]-d.e[j])
}

// disturb fills d.line with the line and the errors.
func (d *draws) disturb(l *line, first int, cos float64) {
	move := func(to []spot, from []spot) []spot {
		to = append(to[:0], from...)
		for i := range to {
			if q := &to[i]; !q.unknown {
				e := d.at(first, q.u)
				q.h, q.m, q.r = q.h+e, q.m+e, q.r-cos*e
			}
		}
		return to
	}
	d.line.near, d.line.far = move(d.line.near, l.near), move(d.line.far, l.far)
	e := d.at(first, l.here.u)
	d.line.here = l.here
	d.line.here.h, d.line.here.m, d.line.here.r = l.here.h+e, l.here.m+e, l.here.r-cos*e
}

// slope returns the error of the slope along the line by central differences
// over a row each way, one-sided at the edge of the DEM.
func (d *draws) slope(l *line, first int) float64 {
	ua := max(l.here.u-1, float64(first))
	ub := min(l.here.u+1, float64(first+len(d.e)-1))
	s := func(u float64) float64 {
		i := math.Floor(u)
		_, a := l.y.at(int(i))
		if i == u {
			return a
		}
		_, b := l.y.at(int(i) + 1)
		return a + (u-i)*(b-a)
	}
	return (d.at(first, ub) - d.at(first, ua)) / (s(ub) - s(ua))
}

// surelyOpen reports whether the probability of a fold or a shadow is
// negligible by the union bound: the sum of the probabilities that one spot
// alone makes one, whatever the others do. The difference of two errors has at
// most sqrt 2 times the standard deviation of one, and within the first row
// the part of that of the first row.
func (w *sitesWorker) surelyOpen(height float64, facet geometry.Facet, sigma float64) bool {
	l, cos := &w.line, w.field.ln.cos
	m, r := l.here.m+height, l.here.r-height*cos
	sum := 0.0
	add := func(q *spot, gap float64) bool {
		sd := sigma * math.Sqrt2
		if t := math.Abs(q.u - l.here.u); t < 1 && !q.unknown {
			sd *= t
		}
		sum += tail(gap / sd)
		return sum < negligible
	}
	for i := range l.near {
		q := &l.near[i]
		if !add(q, m-q.m) || !(height > 0 && q.r >= r) && !add(q, (r-q.r)/cos) {
			return false
		}
	}
	for i := range l.far {
		if q := &l.far[i]; !add(q, (q.r-r)/cos) {
			return false
		}
	}
	return sum+tail(facet.Above/cos*w.field.ln.minDS/(sigma*math.Sqrt2)) < negligible
}

// surelyHidden reports whether one spot alone hides the target but for a
// negligible probability.
func (w *sitesWorker) surelyHidden(height, sigma float64) bool {
	m := w.line.here.m + height
	for i := range w.line.near {
		if q := &w.line.near[i]; !q.unknown && tail((q.m-m)/(sigma*math.Sqrt2)) < negligible {
			return true
		}
	}
	return false
}

// tail returns the probability that a standard normal exceeds x.
func tail(x float64) float64 { return math.Erfc(x/math.Sqrt2) / 2 }
