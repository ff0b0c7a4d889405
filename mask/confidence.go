package mask

import (
	"math"
	"math/rand/v2"
	"sort"

	"foldshade/geometry"
)

// This file asks how likely a site is open when the heights have an error. It
// draws errors along the range line, adds them to its spots and judges again.
// Method, sources and limits stand in docs/confidence.md.

// draws keeps the room that simulated errors take.
type draws struct {
	chain []crossing
	e     []float64    // one draw, by crossing
	near  []chainPlace // where the line's spots lie
	far   []chainPlace
	here  chainPlace
	ahead chainPlace // a row farther than the point, and nearer
	back  chainPlace
	run   float64 // ground distance between the two, metres
	line  line    // the line with the errors
}

// crossing is where the range line crosses a row or a column of cells: its
// error is a mixture of those of the two cells beside it.
type crossing struct {
	at   float64    // row of the marching frame, fractional
	u, v [2]float64 // the cells
	w    [2]float64 // their weights
	// The error follows from that at the crossing before: e = carry before +
	// fresh z, z a standard normal.
	carry, fresh float64
}

// chainPlace is a place of the chain: a part of the way from crossing k to the
// next.
type chainPlace struct {
	k int
	t float64
	// Of a spot there: what a metre of height adds to m, and takes from r.
	gain, drop float64
}

// surelyWithin is the number of standard deviations within which a Gaussian
// error counts as certain to be: beyond it lie 6e-7 of all errors.
const surelyWithin = 5

// negligible is the probability below which a simulation is spared.
const negligible = 1e-4

// chance fills the probabilities of a result whose line is traced.
func (w *sitesWorker) chance(i, k int, facet geometry.Facet, res *SiteResult) {
	e, s, d := &w.job.DEMError, &w.job.Sites[i], &w.draws
	t := w.line.target(s.Height)
	switch f := w.judge.of(&w.line, t); {
	case w.surelyHidden(&t, e.Sigma):
		res.Chance = Chance{Hidden: 1}
		return
	case !(f.clear > 0 && f.clearU > 0):
	case f.near > 0 && f.far > 0 && f.nearU > 0 && f.farU > 0 && w.surelyOpen(&t, facet, e.Sigma):
		res.Chance = Chance{Open: 1}
		return
	case w.surelyFolded(&t, facet, e.Sigma):
		res.Chance = Chance{Folded: 1}
		return
	}
	w.cut(&t, e.Sigma)
	d.layOut(w, e)
	rng := rand.New(rand.NewPCG(e.Seed^math.Float64bits(w.sites[i].row)*0x9e3779b97f4a7c15^math.Float64bits(w.sites[i].col), uint64(k)))
	res.Chance = d.simulate(w, rng, e.Draws, t, facet)
}

// simulate returns the shares of the draws by what the site is.
func (d *draws) simulate(w *sitesWorker, rng *rand.Rand, n int, t target, facet geometry.Facet) Chance {
	var open, folded, shadow, unknown float64
	for range n {
		d.draw(rng)
		at, hidden := d.disturb(&w.line, t)
		if hidden {
			shadow++
			continue
		}
		f := w.judge.of(&d.line, at)
		turns := 0
		if facet.Above-d.slope()*t.drop <= 0 {
			turns = turnLayover
		}
		m := lane{float32(f.clear), float32(f.near), float32(f.far), float32(f.clearU), float32(f.nearU), float32(f.farU)}
		switch layoverClass(m.raw(), turns).Kind() {
		case 1:
			open++
		case 3:
			folded++
		default:
			unknown++
		}
	}
	all := float64(n)
	p := open / all
	return Chance{p, folded / all, shadow / all, unknown / all, math.Sqrt(p * (1 - p) / all)}
}

// cut drops the ends of the line that cannot matter with any error that is
// within surelyWithin: spots towards the radar that neither reach the target's
// look angle nor its slant range nor hide ground that does, and spots away from
// it that do not come down to its slant range.
func (w *sitesWorker) cut(t *target, sigma float64) {
	l := &w.line
	slackM, slackR := surelyWithin*math.Sqrt2*sigma*t.gain, surelyWithin*math.Sqrt2*sigma*t.drop
	last, lowest := -1, math.Inf(1)
	for i := range l.near {
		q := &l.near[i]
		folds := q.r >= t.r-slackR
		if folds && !q.unknown {
			lowest = min(lowest, q.m)
		}
		if folds || q.m >= min(t.m, lowest)-slackM {
			last = i
		}
	}
	l.near = l.near[:last+1]
	last = -1
	for i := range l.far {
		if q := &l.far[i]; q.r <= t.r+slackR {
			last = i
		}
	}
	l.far = l.far[:last+1]
}

// layOut lays out the crossings of the line, and where its spots lie between
// them. A crossing has the variance that mixing two cells leaves and the exact
// covariance with the crossing before; beyond that the chain is Markov, as the
// exponential covariance is along a line.
func (d *draws) layOut(w *sitesWorker, e *DEMError) {
	l, o := &w.line, w.field.ln.orient
	first, last := math.Floor(l.here.u)-1, math.Ceil(l.here.u)+1 // a row each way for the slope
	for i := range l.near {
		first = min(first, math.Floor(l.near[i].u))
	}
	for i := range l.far {
		last = max(last, math.Ceil(l.far[i].u))
	}
	first, last = max(first, 0), min(last, float64(o.u-1))
	d.cross(l, int(first), int(last))
	ue, un, ve, vn := o.step(w.grid, l.here.u, l.here.v)
	d.carry(e, func(du, dv float64) float64 { return math.Hypot(du*ue+dv*ve, du*un+dv*vn) })
	d.near, d.far = d.place(d.near, l, l.near), d.place(d.far, l, l.far)
	d.here = d.placeOf(l, &l.here)
	ahead, back := min(l.here.u+1, last), max(l.here.u-1, first)
	d.ahead, d.back = d.find(ahead), d.find(back)
	d.run = l.distance(ahead) - l.distance(back)
}

// distance returns the ground distance at a fractional row of the line.
func (l *line) distance(u float64) float64 {
	i := math.Floor(u)
	_, a := l.y.at(int(i))
	if i == u {
		return a
	}
	_, b := l.y.at(int(i) + 1)
	return a + (u-i)*(b-a)
}

// cross fills the chain with the crossings from one row to another.
func (d *draws) cross(l *line, first, last int) {
	d.chain = d.chain[:0]
	for u := first; u <= last; u++ {
		v, _ := l.y.at(u)
		c := math.Floor(v)
		row := float64(u)
		d.chain = append(d.chain, crossing{at: row, u: [2]float64{row, row}, v: [2]float64{c, c + 1}, w: [2]float64{1 - (v - c), v - c}})
		if u == last {
			break
		}
		next, _ := l.y.at(u + 1)
		column := func(c float64) {
			t := (c - v) / (next - v)
			d.chain = append(d.chain, crossing{at: row + t, u: [2]float64{row, row + 1}, v: [2]float64{c, c}, w: [2]float64{1 - t, t}})
		}
		for c := math.Floor(v) + 1; c < next; c++ {
			column(c)
		}
		for c := math.Ceil(v) - 1; c > next; c-- {
			column(c)
		}
	}
}

// carry fills how the errors of the chain follow from each other. distance
// returns the metres of a number of rows and columns.
func (d *draws) carry(e *DEMError, distance func(du, dv float64) float64) {
	corr := func(du, dv float64) float64 {
		switch {
		case du == 0 && dv == 0:
			return 1
		case e.Correlation == 0:
			return 0
		}
		return math.Exp(-distance(du, dv) / e.Correlation)
	}
	cov := func(a, b *crossing) (sum float64) {
		for i := range 2 {
			for j := range 2 {
				if w := a.w[i] * b.w[j]; w > 0 {
					sum += w * corr(a.u[i]-b.u[j], a.v[i]-b.v[j])
				}
			}
		}
		return sum
	}
	before := 1.0
	for k := range d.chain {
		c := &d.chain[k]
		variance := cov(c, c)
		c.carry, c.fresh = 0, variance
		if k > 0 {
			with := cov(c, &d.chain[k-1])
			c.carry, c.fresh = with/before, max(variance-with*with/before, 0)
		}
		c.fresh = e.Sigma * math.Sqrt(c.fresh)
		before = variance
	}
}

// find returns the place of a fractional row on the chain.
func (d *draws) find(u float64) chainPlace {
	k := sort.Search(len(d.chain), func(k int) bool { return d.chain[k].at > u }) - 1
	k = min(max(k, 0), len(d.chain)-2)
	a, b := d.chain[k].at, d.chain[k+1].at
	if a == b {
		return chainPlace{k: k}
	}
	return chainPlace{k: k, t: (u - a) / (b - a)}
}

// placeOf returns the place of a spot on the chain.
func (d *draws) placeOf(l *line, q *spot) chainPlace {
	p := d.find(q.u)
	up, nearer := l.y.see(q.s, q.h+1)
	p.gain, p.drop = up-q.m, q.r-nearer
	return p
}

func (d *draws) place(to []chainPlace, l *line, spots []spot) []chainPlace {
	to = to[:0]
	for i := range spots {
		to = append(to, d.placeOf(l, &spots[i]))
	}
	return to
}

// draw fills the errors of the crossings.
func (d *draws) draw(rng *rand.Rand) {
	d.e = resize(d.e, len(d.chain))
	e := 0.0
	for k := range d.chain {
		c := &d.chain[k]
		e = c.carry*e + c.fresh*rng.NormFloat64()
		d.e[k] = e
	}
}

// at returns the error at a place, straight between two crossings.
func (d *draws) at(b chainPlace) float64 { return d.e[b.k] + b.t*(d.e[b.k+1]-d.e[b.k]) }

// disturb fills d.line with the line and the errors and returns the target with
// its own, unless known ground hides it: then hidden is true.
func (d *draws) disturb(l *line, t target) (_ target, hidden bool) {
	lift := func(q *spot, p *chainPlace) {
		e := d.at(*p)
		q.h, q.m, q.r = q.h+e, q.m+p.gain*e, q.r-p.drop*e
	}
	d.line.here = l.here
	lift(&d.line.here, &d.here)
	e := d.at(d.here)
	t.m, t.r = t.m+t.gain*e, t.r-t.drop*e
	d.line.near = append(d.line.near[:0], l.near...)
	for i := range d.line.near {
		q := &d.line.near[i]
		if q.unknown {
			continue
		}
		if lift(q, &d.near[i]); q.m >= t.m {
			return t, true
		}
	}
	d.line.far = append(d.line.far[:0], l.far...)
	for i := range d.line.far {
		if q := &d.line.far[i]; !q.unknown {
			lift(q, &d.far[i])
		}
	}
	return t, false
}

// slope returns the error of the slope along the line by differences over a row
// each way, as far as the DEM goes.
func (d *draws) slope() float64 { return (d.at(d.ahead) - d.at(d.back)) / d.run }

// surelyOpen reports whether the probability of a fold or a shadow is
// negligible by the union bound: the sum of the probabilities that one spot
// alone makes one, whatever the others do. The difference of two errors has at
// most sqrt 2 times the standard deviation of one, and within the first row
// the part of that of the first row.
func (w *sitesWorker) surelyOpen(t *target, facet geometry.Facet, sigma float64) bool {
	l := &w.line
	sum := 0.0
	add := func(q *spot, gap float64) bool {
		sd := sigma * math.Sqrt2
		if rows := math.Abs(q.u - l.here.u); rows < 1 && !q.unknown {
			sd *= rows
		}
		sum += tail(gap / sd)
		return sum < negligible
	}
	for i := range l.near {
		q := &l.near[i]
		if !add(q, (t.m-q.m)/t.gain) || !(t.raised && q.r >= t.r) && !add(q, (t.r-q.r)/t.drop) {
			return false
		}
	}
	for i := range l.far {
		if q := &l.far[i]; !add(q, (q.r-t.r)/t.drop) {
			return false
		}
	}
	return sum+tail(facet.Above/t.drop*w.field.ln.minDS/(sigma*math.Sqrt2)) < negligible
}

// surelyFolded reports whether the target is lit and one lit spot alone folds
// over it, or the slope does, but for a negligible probability.
func (w *sitesWorker) surelyFolded(t *target, facet geometry.Facet, sigma float64) bool {
	l, sdM, sdR := &w.line, sigma*math.Sqrt2*t.gain, sigma*math.Sqrt2*t.drop
	// shaded sums the probabilities that a spot before index from hides m.
	shaded := func(from int, m float64) (sum float64) {
		for i := from; i < len(l.near) && sum < negligible; i++ {
			sum += tail((m - l.near[i].m) / sdM)
		}
		return sum
	}
	hidden := 0.0
	for i := range l.near {
		q := &l.near[i]
		sd := sdM
		if rows := math.Abs(q.u - l.here.u); rows < 1 && !q.unknown {
			sd *= rows
		}
		if hidden += tail((t.m - q.m) / sd); hidden > negligible {
			return false
		}
	}
	if tail(-facet.Above*w.field.ln.minDS/sdR) < negligible {
		return true
	}
	for i := range l.near {
		if q := &l.near[i]; !q.unknown && tail((q.r-l.here.r)/sdR) < negligible && shaded(i+1, q.m) < negligible {
			return true
		}
	}
	top := math.Inf(-1)
	for i := range l.far {
		q := &l.far[i]
		if !q.unknown && tail((t.r-q.r)/sdR) < negligible && tail((q.m-max(top, l.here.m))/sdM) < negligible && shaded(0, q.m) < negligible {
			return true
		}
		top = max(top, q.m)
	}
	return false
}

// surelyHidden reports whether one spot alone hides the target but for a
// negligible probability.
func (w *sitesWorker) surelyHidden(t *target, sigma float64) bool {
	for i := range w.line.near {
		if q := &w.line.near[i]; !q.unknown && tail((q.m-t.m)/(t.gain*sigma*math.Sqrt2)) < negligible {
			return true
		}
	}
	return false
}

// tail returns the probability that a standard normal exceeds x.
func tail(x float64) float64 { return math.Erfc(x/math.Sqrt2) / 2 }
