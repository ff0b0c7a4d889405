package mask

import (
	"math"
	"math/rand/v2"
	"slices"
	"sort"

	"foldshade/geometry"
)

// This file asks how likely a site is open when the heights have an error. It
// draws errors along the range line, adds them to its spots and judges again.
// Method, sources and limits stand in docs/confidence.md.

// draws keeps the room that simulated errors take.
type draws struct {
	block block
	chain []crossing
	e     []float64 // one draw, by crossing
	// The crossings [ka, kb) lie in the block.
	ka, kb    int
	near, far []errorPlace // where the line's spots lie
	here      errorPlace
	line      line // the line with the errors
}

// blockSide is the number of cells along a side of the block around a place:
// those that its slope is made of.
const blockSide = 4

// block is the cells around the point of a line, whose errors are drawn
// together.
type block struct {
	u, v  float64 // its first cell
	lower [blockSide * blockSide][blockSide * blockSide]float64
	slope [blockSide * blockSide]float64 // what an error adds to the facet's Above
	e     [blockSide * blockSide]float64 // one draw
}

// crossing is where the range line crosses a row or a column of cells: its
// error is a mixture of those of the two cells beside it.
type crossing struct {
	at   float64    // row of the marching frame, fractional
	u, v [2]float64 // the cells
	w    [2]float64 // their weights
	// Outside the block the error follows from that at the crossing nearer to
	// it: e = carry before + fresh z, z a standard normal.
	carry, fresh float64
}

// errorPlace is where a spot takes its error from: a part t of the way from
// crossing k to the next, or a place of the block when k is -1.
type errorPlace struct {
	k    int
	t    float64
	u, v float64
	// What a metre of height adds to m, and takes from r.
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
	d.lean(w, i, k, facet)
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
		if facet.Above+d.slope() <= 0 {
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

// layOut lays out the block and the crossings of the line, and where its spots
// lie. A crossing has the variance that mixing two cells leaves and the exact
// covariance with its neighbour; beyond that the chain is Markov, as the
// exponential covariance is along a line.
func (d *draws) layOut(w *sitesWorker, e *DEMError) {
	l, o := &w.line, w.field.ln.orient
	first, last := math.Floor(l.here.u), math.Floor(l.here.u)+1
	for i := range l.near {
		first = min(first, math.Floor(l.near[i].u))
	}
	for i := range l.far {
		last = max(last, math.Ceil(l.far[i].u))
	}
	d.cross(l, int(first), int(min(last, float64(o.u-1))))
	ue, un, ve, vn := o.step(w.grid, l.here.u, l.here.v)
	corr := func(du, dv float64) float64 {
		switch {
		case du == 0 && dv == 0:
			return 1
		case e.Correlation == 0:
			return 0
		}
		return math.Exp(-math.Hypot(du*ue+dv*ve, du*un+dv*vn) / e.Correlation)
	}
	d.block.layOut(math.Floor(l.here.u)-1, math.Floor(l.here.v)-1, e.Sigma, corr)
	d.carry(e.Sigma, corr)
	d.near, d.far = d.place(d.near, l, l.near), d.place(d.far, l, l.far)
	d.here = d.placeOf(l, &l.here)
}

// layOut places the block and factorizes the covariance of its errors, by
// Cholesky's method.
func (b *block) layOut(u, v, sigma float64, corr func(du, dv float64) float64) {
	b.u, b.v = u, v
	for i := range b.lower {
		for j := range i + 1 {
			sum := corr(float64(i/blockSide-j/blockSide), float64(i%blockSide-j%blockSide)) * sigma * sigma
			for k := range j {
				sum -= b.lower[i][k] * b.lower[j][k]
			}
			if i == j {
				b.lower[i][i] = math.Sqrt(max(sum, 1e-12*sigma*sigma))
			} else {
				b.lower[i][j] = sum / b.lower[j][j]
			}
		}
	}
}

// draw fills the errors of the block.
func (b *block) draw(rng *rand.Rand) {
	var z [blockSide * blockSide]float64
	for i := range z {
		z[i] = rng.NormFloat64()
		e := 0.0
		for k, l := range b.lower[i][:i+1] {
			e += l * z[k]
		}
		b.e[i] = e
	}
}

// holds reports whether a place lies in the block.
func (b *block) holds(u, v float64) bool {
	return u >= b.u && v >= b.v && u <= b.u+blockSide-1 && v <= b.v+blockSide-1
}

// at returns the error of the bilinear surface at a place of the block.
func (b *block) at(u, v float64) float64 {
	u, v = u-b.u, v-b.v
	i, j := min(int(u), blockSide-2), min(int(v), blockSide-2)
	x, y := v-float64(j), u-float64(i)
	e := b.e[i*blockSide+j:]
	top, end := e[0]+x*(e[1]-e[0]), e[blockSide]+x*(e[blockSide+1]-e[blockSide])
	return top + y*(end-top)
}

// lean fills what the errors of the block add to the facet of a site.
func (d *draws) lean(w *sitesWorker, i, k int, facet geometry.Facet) {
	b, g, o := &d.block, w.grid, w.field.ln.orient
	p := w.sites[i]
	byCol, byRow := p, p
	byCol.zc, byRow.zr = p.zc+1, p.zr+1
	perC := w.look(k, &byCol, 0).facet.Above - facet.Above
	perR := w.look(k, &byRow, 0).facet.Above - facet.Above
	b.slope = [blockSide * blockSide]float64{}
	add := func(row, col int, x float64) {
		u, v := o.place(float64(row), float64(col))
		b.slope[int(u-b.u)*blockSide+int(v-b.v)] += x
	}
	for row := int(p.row); row < g.Rows && float64(row) < p.row+1; row++ {
		for col := int(p.col); col < g.Cols && float64(col) < p.col+1; col++ {
			weight := (1 - math.Abs(p.row-float64(row))) * (1 - math.Abs(p.col-float64(col)))
			a, z := max(col-1, 0), min(col+1, g.Cols-1)
			add(row, z, weight*perC/float64(z-a))
			add(row, a, -weight*perC/float64(z-a))
			a, z = max(row-1, 0), min(row+1, g.Rows-1)
			add(z, col, weight*perR/float64(z-a))
			add(a, col, -weight*perR/float64(z-a))
		}
	}
}

// slope returns what a draw adds to the facet's Above.
func (d *draws) slope() (sum float64) {
	for i, x := range d.block.slope {
		sum += x * d.block.e[i]
	}
	return sum
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

// carry finds the crossings in the block and fills how the errors of the others
// follow from each other, outwards from it.
func (d *draws) carry(sigma float64, corr func(du, dv float64) float64) {
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
	inside := func(c *crossing) bool {
		return d.block.holds(c.u[0], c.v[0]) && (c.w[1] == 0 || d.block.holds(c.u[1], c.v[1]))
	}
	d.ka = slices.IndexFunc(d.chain, func(c crossing) bool { return inside(&c) })
	for d.kb = d.ka; d.kb < len(d.chain) && inside(&d.chain[d.kb]); {
		d.kb++
	}
	follow := func(c, before *crossing) {
		with, variance := cov(c, before), cov(before, before)
		c.carry = with / variance
		c.fresh = sigma * math.Sqrt(max(cov(c, c)-with*c.carry, 0))
	}
	for k := d.ka - 1; k >= 0; k-- {
		follow(&d.chain[k], &d.chain[k+1])
	}
	for k := d.kb; k < len(d.chain); k++ {
		follow(&d.chain[k], &d.chain[k-1])
	}
}

// placeOf returns where a spot takes its error from.
func (d *draws) placeOf(l *line, q *spot) errorPlace {
	up, nearer := l.y.see(q.s, q.h+1)
	p := errorPlace{k: -1, u: q.u, v: q.v, gain: up - q.m, drop: q.r - nearer}
	if d.block.holds(q.u, q.v) {
		return p
	}
	p.k = sort.Search(len(d.chain), func(k int) bool { return d.chain[k].at > q.u }) - 1
	p.k = min(max(p.k, 0), len(d.chain)-2)
	if a, b := d.chain[p.k].at, d.chain[p.k+1].at; a != b {
		p.t = (q.u - a) / (b - a)
	}
	return p
}

func (d *draws) place(to []errorPlace, l *line, spots []spot) []errorPlace {
	to = to[:0]
	for i := range spots {
		to = append(to, d.placeOf(l, &spots[i]))
	}
	return to
}

// draw fills the errors of the block and of the crossings.
func (d *draws) draw(rng *rand.Rand) {
	d.block.draw(rng)
	d.e = resize(d.e, len(d.chain))
	for k := d.ka; k < d.kb; k++ {
		c := &d.chain[k]
		d.e[k] = c.w[0] * d.block.at(c.u[0], c.v[0])
		if c.w[1] > 0 {
			d.e[k] += c.w[1] * d.block.at(c.u[1], c.v[1])
		}
	}
	for k := d.ka - 1; k >= 0; k-- {
		d.e[k] = d.chain[k].carry*d.e[k+1] + d.chain[k].fresh*rng.NormFloat64()
	}
	for k := d.kb; k < len(d.chain); k++ {
		d.e[k] = d.chain[k].carry*d.e[k-1] + d.chain[k].fresh*rng.NormFloat64()
	}
}

// at returns the error at a place.
func (d *draws) at(p *errorPlace) float64 {
	if p.k < 0 {
		return d.block.at(p.u, p.v)
	}
	return d.e[p.k] + p.t*(d.e[p.k+1]-d.e[p.k])
}

// disturb fills d.line with the line and the errors and returns the target with
// its own, unless known ground hides it: then hidden is true.
func (d *draws) disturb(l *line, t target) (_ target, hidden bool) {
	lift := func(q *spot, p *errorPlace) {
		e := d.at(p)
		q.h, q.m, q.r = q.h+e, q.m+p.gain*e, q.r-p.drop*e
	}
	d.line.here = l.here
	lift(&d.line.here, &d.here)
	e := d.at(&d.here)
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
