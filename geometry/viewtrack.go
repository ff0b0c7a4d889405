package geometry

import (
	"math"
	"slices"
	"sort"
)

// sample is a state of a platform at a parameter: seconds, or metres along a
// line.
type sample struct {
	t        float64
	pos, vel ECEF // metres, and metres per unit of t
}

// motion is a state with its acceleration, metres per unit of t squared.
type motion struct{ pos, vel, acc ECEF }

// track is a curve in earth-fixed space, one polynomial in Newton's form an
// interval between samples.
type track struct {
	knots []float64 // ends of the intervals
	inv   float64   // intervals per unit of t, were they all alike
	terms int       // coefficients of one polynomial
	// nodes, pos and vel hold terms values an interval. vel is empty where
	// velocity is the derivative of position.
	nodes    []float64
	pos, vel []ECEF

	first, middle, last motion
	start               float64 // parameter of middle
}

// scheme is how a track runs between its samples.
type scheme struct {
	hermite bool // positions and velocities in one polynomial, or each in its own
	degree  int
}

// points returns how many samples one polynomial needs, at least the two ends
// of its interval. A Hermite polynomial has odd degree; an even one is raised.
func (s scheme) points() int {
	if s.hermite {
		return max(2, (s.degree+2)/2)
	}
	return max(2, s.degree+1)
}

// newTrack interpolates samples over the intervals [from, to), each by the
// nearest samples in number as the scheme needs. The samples must be in
// ascending order of t and at least scheme.points() and two.
func newTrack(samples []sample, how scheme, from, to int) track {
	tr := track{terms: how.points()}
	if how.hermite {
		tr.terms *= 2
	}
	for i := from; i <= to; i++ {
		tr.knots = append(tr.knots, samples[i].t)
	}
	n := to - from
	tr.inv = float64(n) / (tr.knots[n] - tr.knots[0])
	window := make([]sample, how.points())
	for i := from; i < to; i++ {
		w := min(max(i+1-len(window)/2, 0), len(samples)-len(window))
		copy(window, samples[w:])
		tr.add(window, (samples[i].t+samples[i+1].t)/2, how.hermite)
	}
	tr.start = (tr.knots[0] + tr.knots[n]) / 2
	tr.first, tr.middle, tr.last = tr.at(tr.knots[0]), tr.at(tr.start), tr.at(tr.knots[n])
	return tr
}

// add appends the polynomial of one interval. The nodes nearest its middle
// come first, so that the later terms are corrections and little is lost to
// rounding.
func (tr *track) add(window []sample, middle float64, hermite bool) {
	slices.SortStableFunc(window, func(a, b sample) int {
		d := math.Abs(a.t-middle) - math.Abs(b.t-middle)
		switch {
		case d < 0:
			return -1
		case d > 0:
			return 1
		}
		return 0
	})
	nodes := make([]float64, 0, tr.terms)
	pos, vel := make([]ECEF, 0, tr.terms), make([]ECEF, 0, tr.terms)
	for _, s := range window {
		nodes, pos, vel = append(nodes, s.t), append(pos, s.pos), append(vel, s.vel)
		if hermite { // a double node
			nodes, pos, vel = append(nodes, s.t), append(pos, s.pos), append(vel, s.vel)
		}
	}
	tr.nodes = append(tr.nodes, nodes...)
	tr.pos = append(tr.pos, dividedDifferences(nodes, pos, vel)...)
	if !hermite {
		tr.vel = append(tr.vel, dividedDifferences(nodes, vel, nil)...)
	}
}

// dividedDifferences returns the coefficients of Newton's form; where two
// neighbouring nodes are equal the first difference is the given slope.
// Source: Burden & Faires, Numerical Analysis, sections 3.3 and 3.4 (from
// memory).
func dividedDifferences(nodes []float64, values, slopes []ECEF) []ECEF {
	c := slices.Clone(values)
	for order := 1; order < len(c); order++ {
		for i := len(c) - 1; i >= order; i-- {
			d := nodes[i] - nodes[i-order]
			if d == 0 {
				c[i] = slopes[i]
				continue
			}
			c[i] = c[i].Sub(c[i-1]).Scale(1 / d)
		}
	}
	return c
}

func (tr *track) span() (from, to float64) { return tr.knots[0], tr.knots[len(tr.knots)-1] }

// interval returns the index of the interval that holds t, the nearest one
// where none does.
func (tr *track) interval(t float64) int {
	n := len(tr.knots) - 1
	i := min(max(int((t-tr.knots[0])*tr.inv), 0), n-1)
	if tr.knots[i] <= t && t <= tr.knots[i+1] {
		return i
	}
	return min(max(sort.SearchFloat64s(tr.knots, t)-1, 0), n-1)
}

// at evaluates the track; outside its span it stays at the end.
func (tr *track) at(t float64) motion {
	t = min(max(t, tr.knots[0]), tr.knots[len(tr.knots)-1])
	i := tr.interval(t) * tr.terms
	m := horner(t, tr.nodes[i:i+tr.terms], tr.pos[i:i+tr.terms])
	if len(tr.vel) > 0 {
		v := horner(t, tr.nodes[i:i+tr.terms], tr.vel[i:i+tr.terms])
		m.vel, m.acc = v.pos, v.vel
	}
	return m
}

// horner evaluates Newton's form and its first two derivatives.
func horner(t float64, nodes []float64, c []ECEF) (m motion) {
	n := len(c) - 1
	nodes = nodes[:n]
	p, v, a := c[n], ECEF{}, ECEF{}
	for k := n - 1; k >= 0; k-- {
		x, q := t-nodes[k], &c[k]
		a.X, a.Y, a.Z = a.X*x+2*v.X, a.Y*x+2*v.Y, a.Z*x+2*v.Z
		v.X, v.Y, v.Z = v.X*x+p.X, v.Y*x+p.Y, v.Z*x+p.Z
		p.X, p.Y, p.Z = p.X*x+q.X, p.Y*x+q.Y, p.Z*x+q.Z
	}
	return motion{p, v, a}
}

// ahead returns the zero-Doppler function of a state, (p - pos) . vel, which
// is positive while the point lies ahead, and its derivative by t.
func (m *motion) ahead(p ECEF) (f, slope float64) {
	d := p.Sub(m.pos)
	return d.Dot(m.vel), d.Dot(m.acc) - m.vel.Dot(m.vel)
}

// abreastWithin is the distance along the track, metres, at which the search
// for zero Doppler stops. Newton's next step would be smaller by orders of
// magnitude, and slant range depends on the square of it.
const abreastWithin = 1e-4

// abreast returns the parameter at which the track is abreast of a point, and
// the state there. Where it never is, miss is the distance along the track,
// metres, by which the point lies before its first end (negative) or beyond
// its last (positive), and t that end; NaN for a point of NaN.
//
// The search is Newton's, started from the middle of the track and kept inside
// a bracket by bisection.
func (tr *track) abreast(p ECEF) (t float64, m motion, miss float64) {
	lo, hi := tr.span()
	if f, _ := tr.first.ahead(p); !(f >= 0) {
		return lo, tr.first, f / tr.first.vel.Norm()
	}
	if f, _ := tr.last.ahead(p); f > 0 {
		return hi, tr.last, f / tr.last.vel.Norm()
	}
	t, m = tr.start, tr.middle
	for range 100 {
		f, slope := m.ahead(p)
		if f > 0 {
			lo = t
		} else {
			hi = t
		}
		next := t - f/slope
		if !(next >= lo && next <= hi) {
			next = (lo + hi) / 2
		}
		step := next - t
		t, m = next, tr.at(next)
		if step*step*m.vel.Dot(m.vel) < abreastWithin*abreastWithin {
			break
		}
	}
	return t, m, 0
}
