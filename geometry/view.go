package geometry

import (
	"fmt"
	"math"
	"time"
)

// View is how a platform sees one ground point, at the moment it is abreast of
// it (zero Doppler).
type View struct {
	// T is the zero-Doppler parameter, the same for all points of a range
	// plane: seconds for an orbit (from the moment abreast of the anchor) and
	// an ephemeris (from the moment abreast of the DEM centre), metres along
	// the geodesic from the start for a flight, radians of azimuth at the
	// antenna in [0, 2 pi) for a tripod.
	T float64
	// SlantRange is the straight distance from the antenna, metres.
	SlantRange  float64
	Incidence   Angle // against the ellipsoid's normal at the point, [0, 180] degrees
	LookAzimuth Angle // antenna to ground, in the point's local frame
	LookAngle   Angle // at the antenna, from the ellipsoid's downward normal, [0, 180] degrees
	// LineOfSight is the unit vector from the ground to the antenna, and
	// Travel the platform's earth-fixed velocity per unit of T, both east,
	// north, up at the ground point. For a tripod Travel is the horizontal
	// unit vector to the left of the look azimuth.
	LineOfSight, Travel ENU
}

// Sight returns the frame of the line of sight with the true range plane.
func (v *View) Sight() Sight { return SightFrom(v.LineOfSight, v.Travel) }

// Seen says whether a platform sees a point, and why not.
type Seen uint8

// The answers. A point with several reasons has the one that stands first.
const (
	InView         Seen = 0
	OutsideSegment Seen = 1 // the track does not come abreast of the point
	WrongSide      Seen = 2 // the point lies on the other side of the track
	BelowHorizon   Seen = 3 // the ellipsoid is in the way, orbit and ephemeris only
	OutsideSwath   Seen = 4 // incidence outside the near and far limits
	OutsideSector  Seen = 5 // azimuth outside the sector of a tripod
	OutsideRange   Seen = 6 // slant range outside the limits of a tripod
)

// String says the reason in words that complete "not seen: ".
func (s Seen) String() string {
	switch s {
	case InView:
		return "in view"
	case OutsideSegment:
		return "the track does not come abreast of it"
	case WrongSide:
		return "on the other side of the track"
	case BelowHorizon:
		return "below the radar's horizon"
	case OutsideSwath:
		return "outside the swath"
	case OutsideSector:
		return "outside the sector"
	case OutsideRange:
		return "outside the range limits"
	}
	return fmt.Sprintf("seen %d", uint8(s))
}

// Platform is the resolved geometry of a look that is not a plane wave. Its
// methods may be called from several goroutines and depend on nothing but
// their arguments.
type Platform interface {
	// ZeroDoppler returns the parameter at which the platform is abreast of a
	// point; ok is false, and t the nearer end of the track, where it never is.
	ZeroDoppler(p ECEF) (t float64, ok bool)
	// State returns the antenna's position, metres, and its earth-fixed
	// velocity, metres per unit of t. Outside Span it returns the state at the
	// nearer end.
	State(t float64) (pos, vel ECEF)
	// View returns the geometry at a point. It is filled in also where the
	// point is not seen, so that it can be interpolated up to a limit; only a
	// point of which the known track never comes abreast has NaN throughout.
	View(p Geodetic) (View, Seen)
	// Span returns the range of t that the known track covers; points are seen
	// in a part of it. For a tripod it is 0 to 2 pi.
	Span() (from, to float64)
	// Time returns the moment of a parameter in UTC; ok is false for a
	// platform without a calendar, that is all but an ephemeris.
	Time(t float64) (utc time.Time, ok bool)
}

// Site is what a platform needs to know of the ground.
type Site struct {
	// Centre is the place of the DEM's centre.
	Centre Place
	// Ground returns the height above the ellipsoid of the ground at a place,
	// metres, NaN where the DEM has none.
	Ground func(Place) float64
	// Step is the distance at which Ground is sampled under a flight line,
	// metres; 0 for 30 m.
	Step float64
}

// NewPlatform resolves a look of any kind but fixed. Errors name the look and
// the key to change.
func NewPlatform(look Look, site Site) (Platform, error) {
	p, err := resolve(look, site)
	if err != nil {
		return nil, fmt.Errorf("look %q: %w", look.Name, err)
	}
	return p, nil
}

func resolve(look Look, site Site) (Platform, error) {
	if look.Kind == Tripod {
		return newTripod(look, site)
	}
	switch look.Kind {
	case Orbit, Ephemeris, Flight:
	default:
		return nil, fmt.Errorf("kind %q has no platform; kinds with one are orbit, ephemeris, flight and tripod", look.Kind)
	}
	if look.Side != Left && look.Side != Right {
		return nil, fmt.Errorf("side %q is neither left nor right; give side", look.Side)
	}
	if look.NearIncidence >= look.FarIncidence {
		return nil, fmt.Errorf("near_incidence %.4g is not below far_incidence %.4g", look.NearIncidence.Degrees(), look.FarIncidence.Degrees())
	}
	switch look.Kind {
	case Orbit:
		return newOrbit(look, site)
	case Ephemeris:
		return newEphemeris(look, site)
	}
	return newFlight(look, site)
}

// mover is a platform on a track.
type mover struct {
	track     track
	from, to  float64 // the part of the track that measures
	left      bool
	near, far float64 // incidence limits, radians; +-Inf for none
	horizon   bool    // whether the ellipsoid can be in the way
	clock     func(t float64) time.Time
}

func newMover(tr track, look Look) *mover {
	m := &mover{track: tr, left: look.Side == Left, near: math.Inf(-1), far: math.Inf(1)}
	m.from, m.to = tr.span()
	if look.NearIncidence.Given() {
		m.near = float64(look.NearIncidence)
	}
	if look.FarIncidence.Given() {
		m.far = float64(look.FarIncidence)
	}
	return m
}

func (m *mover) ZeroDoppler(p ECEF) (float64, bool) {
	t, _, miss := m.track.abreast(p)
	return t, miss == 0
}

func (m *mover) State(t float64) (pos, vel ECEF) {
	s := m.track.at(t)
	return s.pos, s.vel
}

func (m *mover) Span() (from, to float64) { return m.track.span() }

func (m *mover) Time(t float64) (time.Time, bool) {
	if m.clock == nil {
		return time.Time{}, false
	}
	return m.clock(t), true
}

func (m *mover) View(p Geodetic) (View, Seen) {
	f := newFrame(p)
	t, s, miss := m.track.abreast(f.origin)
	if !(miss == 0) {
		return noView(), OutsideSegment
	}
	up, _ := ellipsoidUp(s.pos)
	v := viewOf(&f, s.pos, s.vel, up)
	v.T = t
	return v, m.judge(&v, f.origin.Sub(s.pos).Dot(s.vel.Cross(up)))
}

// judge says whether a view counts; right is positive for a point to the right
// of the track.
func (m *mover) judge(v *View, right float64) Seen {
	switch i := float64(v.Incidence); {
	case v.T < m.from || v.T > m.to:
		return OutsideSegment
	case m.left != (right < 0):
		return WrongSide
	case m.horizon && i >= math.Pi/2:
		return BelowHorizon
	case i < m.near || i > m.far:
		return OutsideSwath
	}
	return InView
}

// viewOf fills all but T for a ground point, an antenna position with the
// ellipsoid's normal there, and a velocity.
func viewOf(f *frame, antenna, vel, up ECEF) View {
	d := antenna.Sub(f.origin)
	r := d.Norm()
	d = d.Scale(1 / r)
	los := f.local(d)
	side := d.Cross(up)
	return View{
		SlantRange:  r,
		Incidence:   los.Incidence(),
		LookAzimuth: los.LookAzimuth(),
		LookAngle:   Angle(math.Atan2(math.Sqrt(side.Dot(side)), d.Dot(up))),
		LineOfSight: los,
		Travel:      f.local(vel),
	}
}

func noView() View {
	nan := math.NaN()
	n := ENU{nan, nan, nan}
	return View{nan, nan, NotGiven, NotGiven, NotGiven, n, n}
}

// Heading returns the direction of an earth-fixed velocity at a position,
// clockwise from true north.
func Heading(pos, vel ECEF) Angle {
	f := newFrame(pos.Geodetic())
	return Angle(math.Atan2(vel.Dot(f.east), vel.Dot(f.north))).Turn()
}

// LocalTime returns the local mean solar time of a place: UTC plus an hour for
// every 15 degrees of longitude. The result carries it in the clock and date
// fields of a time in UTC. Common practice.
func LocalTime(utc time.Time, lon Angle) time.Time {
	return utc.UTC().Add(time.Duration(lon.Degrees() / 15 * float64(time.Hour)))
}

// Pose is where the antenna is and how it moves at one parameter.
type Pose struct {
	Foot    Geodetic // the place under the antenna and its height above the ellipsoid
	Heading Angle    // direction of travel over the turning earth
	Speed   float64  // metres per unit of T: m/s for an orbit or ephemeris
}

// PoseAt returns the pose of a platform at a parameter. A tripod has the
// heading 90 degrees to the left of its azimuth, and a speed of 1.
func PoseAt(p Platform, t float64) Pose {
	pos, vel := p.State(t)
	return Pose{Foot: pos.Geodetic(), Heading: Heading(pos, vel), Speed: vel.Norm()}
}
