package geometry

import (
	"fmt"
	"math"
	"os"
	"sort"
	"time"
)

// Bounds of the part of an ephemeris that a look uses, either side of the
// moment abreast of the DEM centre: 10 minutes take a low orbit from horizon
// to horizon.
const (
	passSeconds = 600.0
	passStates  = 8192
)

// pass is a moment at which an ephemeris is abreast of the DEM centre.
type pass struct {
	segment *OEMSegment
	index   int // the sample before
	t       float64
	view    View
	seen    Seen
	ground  float64 // distance of the antenna's foot along the earth, metres
}

func newEphemeris(look Look, site Site) (Platform, error) {
	file, err := os.Open(look.OEM)
	if err != nil {
		return nil, fmt.Errorf("oem: %w", err)
	}
	defer file.Close()
	oem, err := ReadOEM(file, look.OEM)
	if err != nil {
		return nil, err
	}
	return oem.Platform(look, site)
}

// Platform returns the pass of the track over the site. Of several passes it
// takes the one with the shortest slant range among those that see the DEM
// centre on the side of the look and above the horizon, inside the swath
// before outside. It is an error, saying by how much, when there is none.
func (o *OEM) Platform(look Look, site Site) (Platform, error) {
	if !site.Centre.Given() {
		return nil, fmt.Errorf("an ephemeris needs the place of the DEM centre")
	}
	centre := Geodetic{site.Centre, 0}
	passes := o.passes(look, centre)
	best := -1
	for i, p := range passes {
		if (p.seen == InView || p.seen == OutsideSwath) && (best < 0 || p.before(passes[best])) {
			best = i
		}
	}
	if best < 0 {
		return nil, fmt.Errorf("%s: %w", look.OEM, o.noPass(look, centre, passes))
	}
	return o.around(passes[best], look), nil
}

// before ranks usable passes.
func (p pass) before(q pass) bool {
	if p.seen != q.seen {
		return p.seen == InView
	}
	return p.view.SlantRange < q.view.SlantRange
}

// passes lists all moments abreast of a point at which the distance is least.
func (o *OEM) passes(look Look, at Geodetic) []pass {
	var found []pass
	p := at.ECEF()
	for k := range o.Segments {
		s := &o.Segments[k]
		previous := math.NaN()
		for i, state := range s.samples {
			f := p.Sub(state.pos).Dot(state.vel)
			if previous >= 0 && f < 0 {
				m := newMover(newTrack(s.samples, s.how, i-1, i), look)
				m.horizon = true
				m.from, m.to = s.from, s.to
				v, seen := m.View(at)
				pos, _ := m.State(v.T)
				ground := SemiMajor * math.Acos(min(max(pos.Dot(p)/(pos.Norm()*p.Norm()), -1), 1))
				found = append(found, pass{s, i - 1, v.T, v, seen, ground})
			}
			previous = f
		}
	}
	return found
}

// around builds the track of a pass, with t counted from the moment abreast of
// the DEM centre.
func (o *OEM) around(p pass, look Look) *mover {
	s := p.segment
	lo, hi := max(s.from, p.t-passSeconds), min(s.to, p.t+passSeconds)
	times := func(i int) bool { return s.samples[i].t > lo }
	first := max(sort.Search(len(s.samples), times)-1, 0, p.index-passStates)
	last := sort.Search(len(s.samples), func(i int) bool { return s.samples[i].t >= hi })
	last = min(last, len(s.samples)-1, p.index+1+passStates)
	margin := s.how.points()
	from, to := max(first-margin, 0), min(last+margin, len(s.samples)-1)
	near := make([]sample, to-from+1)
	for i := range near {
		near[i] = s.samples[from+i]
		near[i].t -= p.t
	}
	m := newMover(newTrack(near, s.how, first-from, last-from), look)
	m.horizon = true
	m.from, m.to = max(lo-p.t, m.from), min(hi-p.t, m.to)
	zero := o.reference.plus(p.t)
	m.clock = func(t float64) time.Time { return zero.plus(t).utc() }
	return m
}

// noPass says why no pass serves, and by how much.
func (o *OEM) noPass(look Look, centre Geodetic, passes []pass) error {
	nearest := func(want Seen) *pass {
		var best *pass
		for i := range passes {
			if p := &passes[i]; p.seen == want && (best == nil || p.ground < best.ground) {
				best = p
			}
		}
		return best
	}
	when := func(t float64) string { return o.reference.plus(t).utc().Format("2006-01-02T15:04:05Z") }
	if p := nearest(WrongSide); p != nil && p.view.Incidence < 90*Degree {
		return fmt.Errorf("the track passes the DEM centre on the other side only, nearest at %s with a slant range of %.0f km; the look is to the %s: change side", when(p.t), p.view.SlantRange/1e3, look.Side)
	}
	for _, want := range []Seen{BelowHorizon, WrongSide} {
		if p := nearest(want); p != nil {
			return fmt.Errorf("the track does not pass the DEM: nearest at %s, its foot is %.0f km away and the antenna %.1f degrees below the horizon of the DEM centre", when(p.t), p.ground/1e3, p.view.Incidence.Degrees()-90)
		}
	}
	at, miss := o.nearest(centre.ECEF())
	return fmt.Errorf("the track does not pass the DEM inside its useable times: it comes nearest to abreast of the DEM centre at %s, still %.0f km along the track away", when(at), miss/1e3)
}

// nearest returns the end of a segment's useable time that is nearest to
// abreast of a point that no segment passes, and the distance along the track
// in metres: the point lies behind the start or ahead of the end.
func (o *OEM) nearest(p ECEF) (t, miss float64) {
	t, miss = math.NaN(), math.Inf(1)
	for i := range o.Segments {
		s := &o.Segments[i]
		for k, end := range [2]float64{s.from, s.to} {
			m := s.at(end)
			f, _ := m.ahead(p)
			if k == 0 {
				f = -f
			}
			if d := f / m.vel.Norm(); d >= 0 && d < miss {
				t, miss = end, d
			}
		}
	}
	return t, miss
}

// at interpolates the state at a time inside the segment.
func (s *OEMSegment) at(t float64) motion {
	i := sort.Search(len(s.samples), func(i int) bool { return s.samples[i].t >= t })
	i = min(max(i, 1), len(s.samples)-1)
	tr := newTrack(s.samples, s.how, i-1, i)
	return tr.at(t)
}
