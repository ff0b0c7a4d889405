package mask

import (
	"context"
	"errors"

	"foldshade/geometry"
)

// ProfilePoint is a point of the surface on the range line through a site.
type ProfilePoint struct {
	Distance float64 // along the ground from the site, metres, negative towards the radar
	Row, Col float64
	Height   float64 // metres, NaN where the DEM shows none
	// Class is Open, ActiveLayover, LayoverNearer, LayoverFarther, LayoverBoth,
	// SelfShadow, CastShadow, Undetermined or NoData, for this profile alone:
	// slopes are those along it.
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
// least the given distance both ways where the DEM has it, and as far as the
// terrain that decides the site's class.
func SiteProfile(ctx context.Context, job SitesJob, site, look int, distance float64) (*Profile, error) {
	return nil, errors.New("the profile is not computed")
}

// SkyRay is what a plane wave from one azimuth can do at a site: it is open to
// every incidence above Low and below High, folded from Low down and hidden
// from High up. Where High <= Low no incidence serves.
type SkyRay struct {
	Azimuth   geometry.Angle // look azimuth: radar to ground, true north
	Low, High geometry.Angle
	// LowSure and HighSure are the same when terrain that the DEM does not show
	// counts at its worst: between Low and LowSure, and between HighSure and
	// High, the answer is undetermined.
	LowSure, HighSure geometry.Angle
}

// SkyOfLooks returns for every site of the job, in their order, one ray for
// every look azimuth given. A site without ground has NaN angles. The job's
// looks do not matter.
func SkyOfLooks(ctx context.Context, job SitesJob, azimuths []geometry.Angle) ([][]SkyRay, error) {
	return nil, errors.New("the sky is not computed")
}
