package mask

import (
	"context"
	"fmt"
	"math"
	"slices"

	"foldshade/geometry"
)

// ProfilePoint is a point of the surface on the range line through a site.
type ProfilePoint struct {
	Distance float64 // along the ground from the site, metres, negative towards the radar
	Row, Col float64
	Height   float64 // metres, NaN where the DEM shows none
	// Class is Open, ActiveLayover, LayoverNearer, LayoverFarther, LayoverBoth,
	// SelfShadow, CastShadow, Undetermined or NoData, for this profile alone: its
	// slopes are those from point to point. It is that of the ground, also under
	// a mast.
	Class Class
}

// Profile is the terrain along the range line through a site, from near range
// to far range.
type Profile struct {
	Points []ProfilePoint
	Site   int // index of the point under the site
	// Incidence and LookAzimuth are those at the site.
	Incidence, LookAzimuth geometry.Angle
}

// SiteProfile returns the profile of one site under one look of a job, over at
// least the given distance both ways, metres, where the DEM has it, and as far
// as the terrain that decides the site's class. A site without ground is an
// error, and so are those of EvaluateSites.
func SiteProfile(ctx context.Context, job SitesJob, site, look int, distance float64) (*Profile, error) {
	s := job.Sites[site]
	s.Footprint, s.Cells = 0, nil
	job.Sites, job.Looks, job.DEMError = []Site{s}, job.Looks[look:look+1], DEMError{}
	r, err := newSitesRunner(job)
	if err != nil {
		return nil, err
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if r.sites[0].where != OnGround {
		return nil, fmt.Errorf("site %q has no ground under it, so there is no profile", s.Name)
	}
	return r.newSitesWorker().profile(distance)
}

// profile is SiteProfile for the only site and look of the job.
func (w *sitesWorker) profile(distance float64) (*Profile, error) {
	out := make([]SiteResult, 1)
	if err := w.bundle(context.Background(), []int{0}, out); err != nil {
		return nil, err
	}
	for _, t := range []Terrain{out[0].Blocker, out[0].Partner} {
		if d := math.Abs(t.Distance) * 1.05; d > distance {
			distance = d
		}
	}
	p := &w.sites[0]
	ln, ok := w.side(0, p)
	if !ok {
		return nil, fmt.Errorf("site %q stands right at the radar, so there is no profile", w.job.Sites[0].Name)
	}
	_, places, extra := w.windows([]int{0})
	// Every point of the profile needs a reach of its own.
	if err := w.load(ln, places, distance/ln.cotMost+extra); err != nil {
		return nil, err
	}
	if !w.trace(p.row, p.col) {
		return nil, fmt.Errorf("site %q has no height, so there is no profile", w.job.Sites[0].Name)
	}
	spots, site := w.line.all()
	classes := w.profileClasses(spots)
	prof := &Profile{Incidence: out[0].Incidence, LookAzimuth: out[0].LookAzimuth}
	for i := range spots {
		q := &spots[i]
		d := q.s - w.line.here.s
		if math.Abs(d) > distance+ln.minDS {
			continue
		}
		if i == site {
			prof.Site = len(prof.Points)
		}
		t := w.line.terrain(w.grid, q)
		if q.unknown {
			t.Height = nan
		}
		prof.Points = append(prof.Points, ProfilePoint{d, t.Row, t.Col, t.Height, classes[i]})
	}
	return prof, nil
}

// all returns the spots of a line from near range to far range, and the index
// of the point itself.
func (l *line) all() (spots []spot, here int) {
	spots = slices.Clone(l.near)
	slices.Reverse(spots)
	here = len(spots)
	return append(append(spots, l.here), l.far...), here
}

// profileClasses classifies the spots of a profile against each other.
func (w *sitesWorker) profileClasses(spots []spot) []Class {
	inf := math.Inf(1)
	out := make([]Class, len(spots))
	marks := make([]lane, len(spots)) // margins, signs only
	top, topU, most, mostU := -inf, -inf, -inf, -inf
	for i := range spots {
		q := &spots[i]
		if q.unknown {
			topU, mostU = max(topU, q.m), max(mostU, q.r)
			continue
		}
		marks[i] = lane{clear: float32(sign(q.m - top)), clearU: float32(sign(q.m - topU)),
			near: float32(sign(q.r - most)), nearU: float32(sign(q.r - max(most, mostU)))}
		if q.m > top {
			top = q.m
			if q.m > topU {
				most = max(most, q.r)
			}
			mostU = max(mostU, q.r)
		}
	}
	least, leastU := inf, inf
	for i := len(spots) - 1; i >= 0; i-- {
		q, m := &spots[i], &marks[i]
		if q.unknown {
			leastU = min(leastU, w.unknownFar(q))
			continue
		}
		m.far, m.farU = float32(sign(least-q.r)), float32(sign(min(least, leastU)-q.r))
		if m.clear > 0 {
			if m.clearU > 0 {
				least = min(least, q.r)
			}
			leastU = min(leastU, q.r)
		}
		out[i] = layoverClass(m.raw(), spotTurns(spots, i))
	}
	return out
}

// unknownFar returns the least slant range that terrain at an unknown spot can
// have.
func (w *sitesWorker) unknownFar(q *spot) float64 {
	if math.IsInf(q.m, -1) {
		return math.Inf(1)
	}
	_, r := w.line.y.see(q.s, w.field.lim.ceiling)
	return r
}

// spotTurns returns how the ground turns from the spot before i to it.
func spotTurns(spots []spot, i int) (turns int) {
	if i == 0 || spots[i-1].unknown {
		return 0
	}
	if spots[i].r <= spots[i-1].r {
		turns |= turnLayover
	}
	if spots[i].m <= spots[i-1].m {
		turns |= turnShadow
	}
	return turns
}

func sign(x float64) float64 {
	switch {
	case x > 0:
		return 1
	case x < 0:
		return -1
	}
	return 0
}
