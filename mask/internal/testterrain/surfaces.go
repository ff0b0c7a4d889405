// Package testterrain holds surfaces whose classes are known from a drawing
// on paper, grids to put them on, and random terrain.
//
// Every surface is a height in metres over the ground, given by metres east
// and north of the middle of its grid. Classes are those of a plane wave of
// incidence i that travels towards the azimuth k; s is ground distance along
// it and y across it, both zero in the middle. Two quantities decide them:
//
//	M = h + s cot i          a point is hidden when M was larger or equal nearer
//	R = s sin i - h cos i    slant range, up to a constant
//
// The kinds are the tens digit of the class codes: 1 open, 3 folded, 4 hidden.
package testterrain

import (
	"math"

	"foldshade/geometry"
)

// The kinds a closed form can give.
const (
	Open   = 1
	Folded = 3
	Hidden = 4
)

// Along returns ground distance along the look azimuth and across it,
// positive to the right.
func Along(azimuth geometry.Angle, east, north float64) (s, y float64) {
	sin, cos := azimuth.Sin(), azimuth.Cos()
	return east*sin + north*cos, east*cos - north*sin
}

// Plane is a slope that rises towards an azimuth. It is folded everywhere
// when the slope in the range plane, atan(tan(Slope) cos(Rise - k)), exceeds
// the incidence, hidden everywhere when it is below incidence - 90 degrees,
// and open otherwise: at incidence 39 a slope of 40 degrees that faces the
// radar is folded, one of 50 degrees that falls away is open, one of 52
// hidden. (The first cells in range have nothing nearer: they stay lit.)
type Plane struct{ Slope, Rise geometry.Angle }

// Height is the surface.
func (p Plane) Height(east, north float64) float64 {
	s, _ := Along(p.Rise, east, north)
	return s * p.Slope.Tan()
}

// Kind is the class kind under a look.
func (p Plane) Kind(incidence, azimuth geometry.Angle) int {
	slope := p.Slope.Tan() * (p.Rise - azimuth).Cos()
	switch {
	case slope > incidence.Tan():
		return Folded
	case slope < -1/incidence.Tan():
		return Hidden
	}
	return Open
}

// Step is a cliff along the line s = 0 of the azimuth: level ground at height
// 0 before it, at Rise beyond it.
//
//   - Rise > 0, the cliff faces the radar. Its top has R = -Rise cos i, its
//     foot R = 0: the ground is folded from Rise cot i before the cliff to
//     Rise cot i behind it. 100 m at 39 degrees: 123.5 m both ways.
//   - Rise < 0, the cliff falls away. It hides the ground from 0 to
//     -Rise tan i behind it. 100 m at 39 degrees: 81.0 m.
type Step struct {
	Rise    float64
	Azimuth geometry.Angle
}

// Height is the surface.
func (p Step) Height(east, north float64) float64 {
	if s, _ := Along(p.Azimuth, east, north); s >= 0 {
		return p.Rise
	}
	return 0
}

// Kind is the class kind at s.
func (p Step) Kind(s float64, i geometry.Angle) int {
	switch {
	case p.Rise > 0 && math.Abs(s) <= p.Rise/i.Tan():
		return Folded
	case p.Rise < 0 && s >= 0 && s <= -p.Rise*i.Tan():
		return Hidden
	}
	return Open
}

// Ridge is a crest of height Top across the azimuth, at s = 0: a fore slope
// that faces the radar, a back slope that falls away, level ground at height
// 0 on both sides. With D = Top cos i - Top cot(Fore) sin i, the slant range
// covered twice:
//
//   - D > 0 (Fore > i): folded from D / sin i before the fore foot, over the
//     whole fore slope, to D / (sin i + tan(Back) cos i) behind the crest.
//   - Back > 90 - i: hidden from the crest to Top tan i behind it, which takes
//     the fold behind the crest away.
//
// Example, Top 1000 m, Fore 45, Back 30, i 23: folded from -2355.9 to +574.5 m.
type Ridge struct {
	Top        float64
	Fore, Back geometry.Angle
	Azimuth    geometry.Angle
}

// Height is the surface.
func (p Ridge) Height(east, north float64) float64 {
	s, _ := Along(p.Azimuth, east, north)
	return p.Profile(s)
}

// Profile is the height along the range line.
func (p Ridge) Profile(s float64) float64 {
	return max(0, p.Top+min(s*p.Fore.Tan(), -s*p.Back.Tan()))
}

// Fold returns where the ground is folded, from s to s; ok is false when it
// is nowhere. A part of it may be hidden.
func (p Ridge) Fold(i geometry.Angle) (from, to float64, ok bool) {
	d := p.Top*i.Cos() - p.Top/p.Fore.Tan()*i.Sin()
	return -p.Top/p.Fore.Tan() - d/i.Sin(), d / (i.Sin() + p.Back.Tan()*i.Cos()), d > 0
}

// Shadow returns how far behind the crest the ground is hidden.
func (p Ridge) Shadow(i geometry.Angle) float64 {
	if p.Back.Tan()*i.Tan() <= 1 {
		return 0
	}
	return p.Top * i.Tan()
}

// Kind is the class kind at s.
func (p Ridge) Kind(s float64, i geometry.Angle) int {
	if s > 0 && s < p.Shadow(i) {
		return Hidden
	}
	if from, to, ok := p.Fold(i); ok && s >= from && s <= to {
		return Folded
	}
	return Open
}

// Clearance is the height of the ground above the shadow boundary: below it
// behind the crest, M - M(crest); lit, above the one that the ground at least
// one cell nearer casts, the smaller of M - M(crest) and M - M(one cell
// nearer).
func (p Ridge) Clearance(s, cell float64, i geometry.Angle) float64 {
	m := func(s float64) float64 { return p.Profile(s) + s/i.Tan() }
	c := m(s) - m(s-cell)
	if s >= cell || p.Kind(s, i) == Hidden {
		c = min(c, m(s)-p.Top)
	}
	return c
}

// FoldMargin is the slant range to the nearest overlap with lit ground at
// least one cell away, negative inside it: the smaller of R less the largest
// R nearer and the smallest R farther less R. On the folded ground the first
// is counted from the fore foot, the second to the crest. NaN where hidden.
func (p Ridge) FoldMargin(s, cell float64, i geometry.Angle) float64 {
	if p.Kind(s, i) == Hidden {
		return math.NaN()
	}
	r := func(s float64) float64 { return s*i.Sin() - p.Profile(s)*i.Cos() }
	foot := -p.Top / p.Fore.Tan()
	near, far := r(s)-r(s-cell), r(s+cell)-r(s)
	if p.Kind(s+cell, i) == Hidden {
		far = math.Inf(1)
	}
	if s > foot {
		near = min(near, r(s)-r(foot))
	}
	if s < 0 {
		far = min(far, r(0)-r(s))
	}
	return min(near, far)
}

// Cone is a round hill of height Top in the middle of level ground at height
// 0, its flank of one slope. Its base has the radius r = Top cot(Slope).
// With rho the distance from the axis and phi the angle at the axis:
//
//   - hidden, when Slope > 90 - i: on the flank within phi < acos(cot i /
//     tan Slope) of the far direction; beyond the base inside the two
//     tangents to it from the point s = Top tan i.
//   - folded, when Slope > i: the slope along s exceeds tan i within phi0 =
//     acos(tan i / tan Slope) of the near direction. So on the line y, for
//     |y| <= r sin phi0, R falls from the base at s = -sqrt(r^2 - y^2) to the
//     wedge's edge at s = -|y| / tan phi0, and lit ground is folded where
//     its R lies between the R of these two. The tip of it is s = -Top cot i.
//
// Example, Top 300 m, Slope 60, r 173.2 m: at 45 degrees hidden as far as
// +300 m, folded from -300 m; both wedges are 54.7 degrees to each side.
type Cone struct {
	Top   float64
	Slope geometry.Angle
}

// Height is the surface.
func (p Cone) Height(east, north float64) float64 {
	return max(0, p.Top-p.Slope.Tan()*math.Hypot(east, north))
}

// Kind is the class kind at s, y.
func (p Cone) Kind(s, y float64, i geometry.Angle) int {
	if p.hidden(s, y, i) {
		return Hidden
	}
	a, r := p.Slope.Tan(), p.Top/p.Slope.Tan()
	if a <= i.Tan() {
		return Open
	}
	cos := i.Tan() / a
	sin := math.Sqrt(1 - cos*cos)
	y = math.Abs(y)
	if y > r*sin {
		return Open
	}
	slant := func(s float64) float64 { return s*i.Sin() - p.Height(s, y)*i.Cos() }
	entry, exit := slant(-math.Sqrt(r*r-y*y)), slant(-y*cos/sin)
	if own := slant(s); own >= exit && own <= entry {
		return Folded
	}
	return Open
}

func (p Cone) hidden(s, y float64, i geometry.Angle) bool {
	a, r := p.Slope.Tan(), p.Top/p.Slope.Tan()
	cos := 1 / i.Tan() / a
	if cos >= 1 || s <= 0 {
		return false
	}
	rho := math.Hypot(s, y)
	if rho <= r {
		return s/rho > cos
	}
	// Inside the tangents from (Top tan i, 0): s cos + |y| sin < r.
	return s > r*cos && s*cos+math.Abs(y)*math.Sqrt(1-cos*cos) < r
}

// Pit is a cone upside down: a hole of the given depth in level ground at
// height 0, radius r = Depth cot(Slope). On the line y, |y| < r, it begins and
// ends at s = -w and s = w, w = sqrt(r^2 - y^2):
//
//   - hidden inside where M < M(-w) = -w cot i. M falls from the rim only if
//     the wall there is steeper than 90 - i, and has one minimum.
//   - R is largest where s / rho = tan i / tan Slope, or at the end of the
//     shadow when that lies farther, and smallest behind that at the far rim,
//     R(w) = w sin i. Lit ground with R between these two is folded, when
//     the far wall is steeper than i at all.
//
// Example, Depth 200 m, Slope 60, r 115.5 m, y = 0: at 45 degrees M falls to
// the axis, so the shadow ends on the far wall where -200 + s (tan 60 + 1) =
// -115.5, at s = +30.9 m; R there is 125.9 m against 81.6 m at the far rim, so
// the rest of the wall is folded, and the ground behind it as far as 178.1 m.
type Pit struct {
	Depth float64
	Slope geometry.Angle
}

// Height is the surface.
func (p Pit) Height(east, north float64) float64 {
	return min(0, p.Slope.Tan()*math.Hypot(east, north)-p.Depth)
}

// Kind is the class kind at s, y.
func (p Pit) Kind(s, y float64, i geometry.Angle) int {
	r := p.Depth / p.Slope.Tan()
	y = math.Abs(y)
	if y >= r {
		return Open
	}
	w := math.Sqrt(r*r - y*y)
	if math.Abs(s) < w && p.Height(s, y)+s/i.Tan() < -w/i.Tan() {
		return Hidden
	}
	cos := i.Tan() / p.Slope.Tan()
	if cos >= 1 {
		return Open
	}
	top := max(y*cos/math.Sqrt(1-cos*cos), p.shadowEnd(y, w, i))
	if top >= w {
		return Open
	}
	slant := func(s float64) float64 { return s*i.Sin() - p.Height(s, y)*i.Cos() }
	if own := slant(s); own >= slant(w) && own <= slant(top) {
		return Folded
	}
	return Open
}

// shadowEnd returns where the shadow of the near rim ends on the line y, -w
// when there is none: the other root of
//
//	tan(Slope) sqrt(s^2 + y^2) = Depth - (w + s) cot i
//
// beside s = -w: M is convex on the line, so there is exactly one when M falls
// at the rim. Squared, it is a quadratic in s, the sum of whose roots is
// -2 k cot i / (tan(Slope)^2 - cot(i)^2) with k = Depth - w cot i.
func (p Pit) shadowEnd(y, w float64, i geometry.Angle) float64 {
	t, cot := p.Slope.Tan(), 1/i.Tan()
	if t*w/math.Hypot(w, y) <= cot {
		return -w
	}
	k := p.Depth - w*cot
	return -2*k*cot/(t*t-cot*cot) + w
}
