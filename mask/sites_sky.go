package mask

import (
	"context"
	"math"

	"foldshade/geometry"
)

// SkyRay is what a plane wave from one azimuth can do at a site: it is open to
// every incidence above Low and below High, folded from Low down and hidden
// from High up. Where High <= Low no incidence serves.
//
// An incidence range is all that there is to say: terrain hides the site from
// an incidence upwards. Lit terrain that can share its slant range does so from
// an incidence downwards, and lower incidences hide less of it.
type SkyRay struct {
	Azimuth   geometry.Angle // look azimuth: radar to ground, true north
	Low, High geometry.Angle // within SkyLow and SkyHigh
	// LowSure and HighSure are the same when terrain that the DEM does not show
	// counts at its worst: between Low and LowSure, and between HighSure and
	// High, the answer is undetermined.
	LowSure, HighSure geometry.Angle
}

// The incidences between which the sky is searched: the distances at which
// terrain can matter grow without bound beyond.
const (
	SkyLow  = 10 * geometry.Degree
	SkyHigh = 80 * geometry.Degree
)

// SkyOfLooks returns for every site of the job, in their order, one ray for
// every look azimuth given. A site without ground has NaN angles. The job's
// looks, and the sites' footprints and cells, do not matter.
func SkyOfLooks(ctx context.Context, job SitesJob, azimuths []geometry.Angle) ([][]SkyRay, error) {
	sky := job
	sky.DEMError, sky.Looks, sky.Sites = DEMError{}, nil, make([]Site, len(job.Sites))
	for i, s := range job.Sites {
		s.Footprint, s.Cells = 0, nil
		sky.Sites[i] = s
	}
	for _, a := range azimuths {
		look := geometry.NewLook()
		look.Kind, look.Azimuth, look.Incidence = geometry.Fixed, a.Turn(), 45*geometry.Degree
		sky.Looks = append(sky.Looks, look)
	}
	r, err := newSitesRunner(sky)
	if err != nil {
		return nil, err
	}
	r.all = int64(len(sky.Sites) * len(azimuths))
	out := make([][]SkyRay, len(sky.Sites))
	for i := range out {
		out[i] = make([]SkyRay, len(azimuths))
	}
	err = r.each(ctx, func(w *sitesWorker, sites []int) error { return w.skies(ctx, sites, out) })
	return out, err
}

// skies fills the rays of a bundle of sites.
func (w *sitesWorker) skies(ctx context.Context, sites []int, out [][]SkyRay) error {
	_, places, extra := w.windows(sites)
	relief := max(w.lim.high, w.lim.ceiling) - w.lim.low
	// The looks stand at 45 degrees, where a field reaches the relief far.
	extra += (1/SkyLow.Tan() - 1) * (relief + extra)
	for k := range w.looks {
		if err := ctx.Err(); err != nil {
			return err
		}
		if places.Rows > 0 {
			if err := w.load(w.looks[k], places, extra); err != nil {
				return err
			}
		}
		for _, i := range sites {
			n := geometry.NotGiven
			out[i][k] = SkyRay{Azimuth: w.runner.job.Looks[k].Azimuth, Low: n, High: n, LowSure: n, HighSure: n}
			if w.sites[i].where == OnGround {
				w.ray(i, k, &out[i][k])
			}
		}
		w.tell(len(sites))
	}
	return nil
}

// ray fills one ray of the sky. With D the slope from a spot down to the target
// or up from it, and T the steepest slope up from a point towards the radar:
//
//	hidden  cot i <= T
//	folded  tan i <= D, and the spot lit: cot i > T of the spot
func (w *sitesWorker) ray(i, k int, out *SkyRay) {
	p, s := &w.sites[i], &w.job.Sites[i]
	w.trace(p.row, p.col)
	facet := w.look(k, p, 0).facet
	slope := (facet.Along - facet.Above) / (facet.Along + facet.Above) // at 45 degrees
	spots, here := w.line.all()
	lit := litBelow(spots)
	t := skyTarget{spots: spots, lit: lit, s: w.line.here.s, h: p.z + s.Height}
	low, high, unknownLow, unknownHigh := math.Atan(slope), math.Pi, 0.0, math.Pi
	front := math.Inf(1) // least D between a spot and the target
	for j := here - 1; j >= 0; j-- {
		q := &spots[j]
		if q.unknown {
			if !math.IsInf(q.m, -1) {
				unknownHigh = min(unknownHigh, math.Atan2(t.s-q.s, w.lim.ceiling-t.h))
				unknownLow = max(unknownLow, math.Atan2(t.h-w.lim.low, t.s-q.s))
			}
			continue
		}
		high = min(high, math.Atan2(t.s-q.s, q.h-t.h))
		fold := t.fold(q.s, q.h)
		if end := min(fold, lit[j].below); s.Height > 0 && end <= front { // its own surroundings do not count
			front = min(front, fold)
			low = max(low, min(math.Atan2(p.z-q.h, t.s-q.s), lit[j].below))
			continue
		}
		low = max(low, t.partner(j, -1))
	}
	for j := here + 1; j < len(spots); j++ {
		q := &spots[j]
		if q.unknown {
			if !math.IsInf(q.m, -1) {
				unknownLow = max(unknownLow, t.fold(q.s, w.lim.ceiling))
			}
			continue
		}
		low = max(low, t.partner(j, 1))
	}
	within := func(a float64) geometry.Angle { return min(max(geometry.Angle(a), SkyLow), SkyHigh) }
	out.Low, out.High = within(low), within(high)
	out.LowSure, out.HighSure = max(out.Low, within(unknownLow)), min(out.High, within(unknownHigh))
}

// skyTarget is a target and the spots of its line.
type skyTarget struct {
	spots []spot
	lit   []litSpot
	s, h  float64
}

// litSpot says below which incidence a spot is lit, radians, and which spot
// hides it above, -1 for none.
type litSpot struct {
	below float64
	crest int
}

// fold returns the incidence up to which ground shares the target's slant range
// or, farther on its own side, has passed it.
func (t *skyTarget) fold(s, h float64) float64 {
	if s < t.s {
		return math.Atan2(t.h-h, t.s-s)
	}
	return math.Atan2(h-t.h, s-t.s)
}

// partner returns the incidence up to which spot j, or ground between it and
// the next one away from the target, is lit and folds over the target. Between
// two spots one limit may rise and the other fall: the largest incidence is
// then where they meet.
func (t *skyTarget) partner(j, dir int) float64 {
	q, lit := &t.spots[j], t.lit[j]
	fold := t.fold(q.s, q.h)
	best := min(fold, lit.below)
	n := j + dir
	if n < 0 || n >= len(t.spots) || t.spots[n].unknown {
		return best
	}
	next := &t.spots[n]
	over := fold > lit.below
	if over == (t.fold(next.s, next.h) > t.lit[n].below) || t.lit[max(j, n)].crest == min(j, n) {
		return best // a slope behind its own top has one limit all along
	}
	at := func(f float64) (fold, below float64) {
		s, h := q.s+f*(next.s-q.s), q.h+f*(next.h-q.h)
		below = math.Pi
		for _, c := range [2]int{lit.crest, t.lit[n].crest} {
			if c >= 0 {
				below = min(below, math.Atan2(s-t.spots[c].s, t.spots[c].h-h))
			}
		}
		return t.fold(s, h), below
	}
	a, b := 0.0, 1.0
	for range 30 {
		m := (a + b) / 2
		if f, below := at(m); (f > below) == over {
			a = m
		} else {
			b = m
		}
	}
	f, below := at(a)
	return max(best, min(f, below))
}

// litBelow returns for every known spot the incidence below which it is lit:
// the complement of its horizon towards the radar. The spots nearer
// to the radar are kept as their upper convex hull: the tangent from the next
// spot drops those that no later one can meet, so that each costs its part of
// one pass. Source: Dozier, Bruno & Downey, Computers & Geosciences 7, 1981,
// 145-151 (from memory), with the hull in place of their chain.
func litBelow(spots []spot) []litSpot {
	out := make([]litSpot, len(spots))
	var hull []int
	angle := func(i, j int) float64 { // incidence at which j stands right in front of i
		return math.Atan2(spots[i].s-spots[j].s, spots[j].h-spots[i].h)
	}
	for i := range spots {
		out[i] = litSpot{math.Pi, -1}
		if spots[i].unknown {
			continue
		}
		for n := len(hull); n >= 2 && angle(i, hull[n-2]) <= angle(i, hull[n-1]); n-- {
			hull = hull[:n-1]
		}
		if n := len(hull); n > 0 {
			out[i] = litSpot{angle(i, hull[n-1]), hull[n-1]}
		}
		hull = append(hull, i)
	}
	return out
}
