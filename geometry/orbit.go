package geometry

import (
	"errors"
	"fmt"
	"math"
)

// Constants of the circular orbit. Sources: EGM96 and WGS84, TR8350.2 (from
// memory).
const (
	gravity       = 3.986004418e14 // m3/s2
	earthRotation = 7.2921159e-5   // rad/s, against the stars
	oblateness    = 1.08262668e-3  // J2
)

// Limits and steps of the circular orbit.
const (
	lowestOrbit = 10e3 // metres above the equator's radius; higher than any ground
	// orbitStep is the arc between samples. Cubic Hermite interpolation errs
	// by step^4 r / 384, 2e-7 m, in position and step^3 / 125, 5e-11 radian, in
	// direction of travel: 5e-5 m along the track at 1000 km of range.
	orbitStep = 0.1 * math.Pi / 180
	// orbitArc is how far the track reaches either side of the anchor. The
	// horizon of an orbit at 2000 km lies 40 degrees away.
	orbitArc = 60 * math.Pi / 180
)

// circular is a circular orbit over the turning earth, with the moment t = 0
// at which it is abreast of its anchor:
//
//	s(t) = Rz(-w t) r (P cos nt + Q sin nt)
//
// P and Q are orthonormal, w is the rotation of the earth against the orbit's
// plane.
type circular struct {
	radius, n, w float64
	p, q         ECEF
}

// meanMotion returns sqrt(mu / r^3), rad/s: Kepler's third law.
func meanMotion(radius float64) float64 { return math.Sqrt(gravity / (radius * radius * radius)) }

// planeRotation returns the earth's rotation against the plane of a circular
// orbit, rad/s: the rotation against the stars less the node's drift,
//
//	node = -3/2 n J2 (a/r)^2 cos i
//
// For a sun-synchronous inclination it comes to 2 pi / 86400 s. Source: Wertz,
// Mission Geometry, 2001 (from memory).
func planeRotation(radius, cosInclination float64) float64 {
	k := SemiMajor / radius
	return earthRotation + 1.5*meanMotion(radius)*oblateness*k*k*cosInclination
}

func (o *circular) state(t float64) sample {
	sinN, cosN := math.Sincos(o.n * t)
	sinW, cosW := math.Sincos(-o.w * t)
	turn := func(v ECEF) ECEF {
		return ECEF{cosW*v.X - sinW*v.Y, sinW*v.X + cosW*v.Y, v.Z}
	}
	pos := turn(o.p.Scale(cosN).Add(o.q.Scale(sinN))).Scale(o.radius)
	vel := turn(o.q.Scale(cosN).Sub(o.p.Scale(sinN))).Scale(o.radius * o.n)
	vel.X += o.w * pos.Y // less the earth's own speed, w x s
	vel.Y -= o.w * pos.X
	return sample{t, pos, vel}
}

// course is what the user fixed of an orbit's direction.
type course struct {
	radius     float64
	heading    Angle   // over the turning earth; NaN when the inclination rules
	cosI       float64 // of the inclination
	descending bool
}

// sphere returns east and geocentric north at a direction from the earth's
// centre, and the cosine of the geocentric latitude.
func sphere(dir ECEF) (east, north ECEF, cosLat float64) {
	cosLat = math.Hypot(dir.X, dir.Y)
	if cosLat == 0 {
		east = ECEF{0, 1, 0}
	} else {
		east = ECEF{-dir.Y / cosLat, dir.X / cosLat, 0}
	}
	return east, dir.Cross(east), cosLat
}

// through returns the orbit that passes over a direction from the earth's
// centre at t = 0, and by how much it misses the inclination: 0, or the
// cosine of the latitude less that of the inclination, negative, in which case
// the orbit turns there.
//
// With a given inclination the inertial heading is sin Hi = cos i / cos lat.
// With a heading H over ground it follows from the triangle of the inertial
// speed V, the ground's speed c = w r cos lat to the east and the speed over
// ground -c sin H + sqrt(V^2 - c^2 cos^2 H); NaN when no such orbit exists.
// Source: Capderou, Handbook of
// Satellite Orbits, 2014, ground-track chapter (from memory).
func (c course) through(dir ECEF) (o circular, miss float64) {
	east, north, cosLat := sphere(dir)
	o = circular{radius: c.radius, n: meanMotion(c.radius), p: dir}
	if !c.heading.Given() {
		sin := c.cosI / cosLat
		if math.Abs(sin) > 1 {
			miss, sin = cosLat-math.Abs(c.cosI), math.Copysign(1, sin)
		}
		cos := math.Sqrt(1 - sin*sin)
		if c.descending {
			cos = -cos
		}
		o.q = east.Scale(sin).Add(north.Scale(cos))
		o.w = planeRotation(c.radius, c.cosI)
		return o, miss
	}
	// The heading counts from the ellipsoid's north, which leans from the
	// sphere's by up to 0.2 degrees.
	up, _ := ellipsoidUp(dir.Scale(c.radius))
	h := math.Atan2(c.heading.Sin()*up.Dot(dir), c.heading.Cos())
	sinH, cosH := math.Sincos(h)
	o.w = earthRotation
	for range 3 { // the node's drift depends a little on the result
		v, ground := c.radius*o.n, o.w*c.radius*cosLat
		over := -ground*sinH + math.Sqrt(v*v-ground*ground*cosH*cosH)
		if over <= 0 { // the ground outruns the orbit
			over = math.NaN()
		}
		sin, cos := (over*sinH+ground)/v, over*cosH/v
		o.q = east.Scale(sin).Add(north.Scale(cos))
		o.w = planeRotation(c.radius, sin*cosLat)
	}
	return o, 0
}

// newOrbit anchors a circular orbit at the anchor of the look or at the DEM
// centre, on the ellipsoid.
func newOrbit(look Look, site Site) (Platform, error) {
	c, err := courseOf(look)
	if err != nil {
		return nil, err
	}
	anchor := look.Anchor
	if !anchor.Given() {
		anchor = site.Centre
	}
	if !anchor.Given() {
		return nil, errors.New("neither an anchor nor a DEM centre; give anchor=LON/LAT")
	}
	o, err := c.anchored(Geodetic{anchor, 0}, look.Incidence, look.Side == Left)
	if err != nil {
		return nil, err
	}
	step := orbitStep / o.n
	half := int(math.Round(orbitArc / orbitStep))
	samples := make([]sample, 2*half+1)
	for i := range samples {
		samples[i] = o.state(float64(i-half) * step)
	}
	m := newMover(newTrack(samples, scheme{hermite: true, degree: 3}, 0, len(samples)-1), look)
	m.horizon = true
	return m, nil
}

func courseOf(look Look) (course, error) {
	c := course{radius: SemiMajor + look.Altitude, heading: look.Heading}
	switch {
	case !(look.Altitude > lowestOrbit):
		return c, fmt.Errorf("altitude_km %.6g puts the orbit in the ground or the air; give the orbit radius less 6378.137 km", look.Altitude/1e3)
	case !(look.Incidence > 0 && look.Incidence < 90*Degree):
		return c, fmt.Errorf("incidence %.6g is not between 0 and 90 degrees", look.Incidence.Degrees())
	case look.Heading.Given():
		return c, nil
	case !look.Inclination.Given():
		return c, errors.New("neither heading nor inclination; give heading, or inclination and pass")
	case look.Pass != Ascending && look.Pass != Descending:
		return c, fmt.Errorf("pass %q is neither ascending nor descending; give pass beside inclination", look.Pass)
	}
	c.cosI = look.Inclination.Cos()
	c.descending = look.Pass == Descending
	return c, nil
}

// anchoring is the search for the antenna's place over an anchor.
type anchoring struct {
	course
	at, up              ECEF // the anchor and the ellipsoid's normal there
	centre, east, north ECEF // directions on the sphere at the anchor
	left                bool
}

// aside returns the direction from the earth's centre at an arc and a bearing
// from the anchor, radians.
func (a *anchoring) aside(arc, bearing float64) ECEF {
	sinB, cosB := math.Sincos(bearing)
	sinA, cosA := math.Sincos(arc)
	return a.centre.Scale(cosA).Add(a.east.Scale(sinA * sinB)).Add(a.north.Scale(sinA * cosB))
}

// incidence returns the incidence at the anchor of an antenna over a direction.
func (a *anchoring) incidence(dir ECEF) float64 {
	d := dir.Scale(a.radius).Sub(a.at)
	return math.Atan2(d.Cross(a.up).Norm(), d.Dot(a.up))
}

// ahead returns the cosine of the angle between the velocity of an antenna over
// a direction and the line to the anchor, how far the orbit there misses its
// inclination, and whether it looks to the anchor on its side.
func (a *anchoring) ahead(dir ECEF) (f, miss float64, facing bool) {
	o, miss := a.through(dir)
	s := o.state(0)
	d := a.at.Sub(s.pos)
	return d.Dot(s.vel) / (d.Norm() * s.vel.Norm()), miss, a.left == (d.Dot(s.vel.Cross(s.pos)) < 0)
}

// bearing returns the bearing nearest to another at which the anchor lies
// abreast of an antenna at an arc. The circle is searched in steps, since near
// the poles and near an orbit's turning point there may be several or none. A
// bearing at which the orbit misses its inclination is the last choice.
func (a *anchoring) bearing(arc, near float64) (bearing, miss float64, ok bool) {
	const steps = 180
	f := func(b float64) float64 {
		f, _, _ := a.ahead(a.aside(arc, b))
		return f
	}
	best := math.Inf(1)
	last := f(near - math.Pi)
	for i := range steps {
		b := near + math.Pi*float64(2*i-steps)/steps
		next := b + 2*math.Pi/steps
		value := f(next)
		crosses := last*value <= 0
		last = value
		if !crosses {
			continue
		}
		x, _ := bisect(b, next, f)
		rest, m, facing := a.ahead(a.aside(arc, x))
		cost := math.Abs(x - near)
		if m < 0 {
			cost += 2 * math.Pi
		}
		// A jump over the pole changes sign too, without a root.
		if facing && math.Abs(rest) < abreastCosine && cost < best {
			bearing, miss, best, ok = x, m, cost, true
		}
	}
	return bearing, miss, ok
}

// abreastCosine is the cosine under which a bearing counts as found; bisection
// leaves some 1e-14.
const abreastCosine = 1e-9

// anchored returns the orbit that is abreast of the anchor at t = 0 with the
// given incidence there. Arc and bearing are found in turn, each by bisection;
// incidence hardly depends on the bearing, so that they settle quickly.
func (c course) anchored(anchor Geodetic, incidence Angle, left bool) (circular, error) {
	a := anchoring{course: c, at: anchor.ECEF(), up: newFrame(anchor).up, left: left}
	a.centre = a.at.Scale(1 / a.at.Norm())
	a.east, a.north, _ = sphere(a.centre)
	// The antenna stands to the left of the heading's sense at the anchor when
	// it looks right.
	first, _ := c.through(a.centre)
	v := first.state(0).vel
	bearing := math.Atan2(v.Dot(a.east), v.Dot(a.north)) - math.Pi/2
	if left {
		bearing += math.Pi
	}
	limb := math.Acos(SemiMajor*(1-Flattening)/c.radius) + 0.01
	var miss float64
	for range 100 {
		arc, ok := bisect(1e-6, limb, func(arc float64) float64 {
			return a.incidence(a.aside(arc, bearing)) - float64(incidence)
		})
		var next float64
		if ok {
			next, miss, ok = a.bearing(arc, bearing)
		}
		if !ok {
			break
		}
		settled := math.Abs(next-bearing)*math.Sin(arc) < 1e-13
		bearing = next
		if !settled {
			continue
		}
		dir := a.aside(arc, bearing)
		if miss < 0 {
			return circular{}, c.outOfReach(dir)
		}
		o, _ := c.through(dir)
		return o, nil
	}
	return circular{}, fmt.Errorf("incidence %.6g at the anchor is not reached from %.6g km: no orbit with this course comes abreast of it so; change incidence, course or altitude_km",
		incidence.Degrees(), (c.radius-SemiMajor)/1e3)
}

func (c course) outOfReach(dir ECEF) error {
	inclination := math.Acos(c.cosI) * 180 / math.Pi
	lat := math.Asin(dir.Z) * 180 / math.Pi
	return fmt.Errorf("inclination %.6g never reaches latitude %.4g, over which the antenna would stand (the orbit turns at %.4g); change inclination, side or anchor",
		inclination, lat, min(inclination, 180-inclination))
}

// bisect returns where a continuous function changes sign between two
// arguments, to the last bit; ok is false when it has the same sign at both.
func bisect(a, b float64, f func(float64) float64) (x float64, ok bool) {
	fa, fb := f(a), f(b)
	if !(fa*fb <= 0) {
		return b, false
	}
	for {
		x = a + (b-a)/2
		if x == a || x == b || math.Abs(b-a) < 1e-15 {
			return x, true
		}
		if fx := f(x); (fx < 0) == (fa < 0) && fx != 0 {
			a = x
		} else {
			b = x
		}
	}
}
