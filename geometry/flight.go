package geometry

import (
	"errors"
	"fmt"
	"math"
)

// Limits and steps of a flight line, metres.
const (
	shortestLine = 1.0
	longestLine  = 3000e3
	// flightStep is the distance between samples. Cubic Hermite interpolation
	// over an arc of step / R errs by (step/R)^4 R / 384, 2e-6 m, in position
	// and (step/R)^3 / 125, 3e-10 radian, in direction of travel.
	flightStep = 20e3
	// flightBeyond is how far the track is known beyond either end, so that
	// the geometry can be interpolated up to the ends.
	flightBeyond = 200e3
	// groundStep is the sampling of the ground under the line, and
	// mostGround the most samples.
	groundStep = 30.0
	mostGround = 200000
)

// line is a geodesic at constant height above the ellipsoid.
type line struct {
	start  Place
	course Angle
	length float64
	height float64
}

// at returns the state at a distance along the geodesic, measured on the
// ellipsoid, in metres; negative before the start. A metre of it moves the
// platform (M + h) / M metres north or (N + h) / N metres east.
func (l line) at(s float64) sample {
	to, course := Direct(l.start, l.course, s)
	sin, cos := math.Sincos(float64(course))
	f := newFrame(Geodetic{to, l.height})
	vel := ENU{East: sin * (1 + l.height/PrimeVerticalRadius(to.Lat)), North: cos * (1 + l.height/MeridianRadius(to.Lat))}
	return sample{s, f.origin, f.global(vel)}
}

func newFlight(look Look, site Site) (Platform, error) {
	l, err := lineOf(look)
	if err != nil {
		return nil, err
	}
	top, under := l.highest(site)
	switch {
	case !math.IsNaN(look.Height):
		l.height = look.Height
		if top >= l.height {
			to, _ := Direct(l.start, l.course, under)
			return nil, fmt.Errorf("height %.6g m runs the line into the ground: %.1f m at %s, %.2f km from the start; raise height, or give height_above_ground",
				look.Height, top, to.text(), under/1e3)
		}
	case !(look.HeightAboveGround > 0):
		return nil, errors.New("neither height nor a height_above_ground above 0; give one of them")
	case math.IsNaN(top):
		return nil, errors.New("height_above_ground needs ground under the line, and the DEM has none there; give height above the ellipsoid instead")
	default:
		l.height = top + look.HeightAboveGround
	}
	n := int(math.Ceil((l.length + 2*flightBeyond) / flightStep))
	samples := make([]sample, n+1)
	for i := range samples {
		samples[i] = l.at(-flightBeyond + float64(i)*flightStep)
	}
	m := newMover(newTrack(samples, scheme{hermite: true, degree: 3}, 0, n), look)
	m.from, m.to = 0, l.length
	return m, nil
}

func lineOf(look Look) (line, error) {
	if !look.Start.Given() || !look.End.Given() {
		return line{}, errors.New("a flight line needs both ends; give start and end as LON/LAT")
	}
	length, course, _, err := Inverse(look.Start, look.End)
	switch {
	case err != nil:
		return line{}, fmt.Errorf("start %s, end %s: %w", look.Start.text(), look.End.text(), err)
	case length < shortestLine:
		return line{}, fmt.Errorf("start and end %s are the same place; a flight line needs a direction", look.Start.text())
	case length > longestLine:
		return line{}, fmt.Errorf("the line from start to end is %.0f km long; the most is %.0f km", length/1e3, longestLine/1e3)
	}
	return line{start: look.Start, course: course, length: length}, nil
}

// highest returns the height of the highest ground under the line and its
// distance from the start, NaN where the DEM shows none.
func (l line) highest(site Site) (top, under float64) {
	top, under = math.NaN(), math.NaN()
	if site.Ground == nil {
		return top, under
	}
	step := site.Step
	if !(step > 0) {
		step = groundStep
	}
	n := int(min(math.Ceil(l.length/step), mostGround))
	for i := range n + 1 {
		s := l.length * float64(i) / float64(n)
		to, _ := Direct(l.start, l.course, s)
		if h := site.Ground(to); !math.IsNaN(h) && !(h <= top) {
			top, under = h, s
		}
	}
	return top, under
}
