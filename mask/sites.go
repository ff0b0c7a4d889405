package mask

import (
	"foldshade/dem"
	"foldshade/geometry"
)

// Site is a place that a campaign wants to measure: a target at some height
// over the bilinear surface between the cell centres.
type Site struct {
	Name string
	// Row and Col are the place on the grid, fractional, counted from the
	// centre of the first cell as in dem.Grid.
	Row, Col float64
	// Height is that of the target above the ground, metres, 0 or more: the
	// mast.
	Height float64
	// Footprint is the radius around the place over which Shares are taken,
	// metres on the ground; 0 for the place alone.
	Footprint float64
	// Cells, when there are any, are what Shares are taken over in place of a
	// footprint: the cells of a line or a polygon. Each gets what the verdict
	// layer writes there; the height does not count for them.
	Cells []Cell
}

// Cell is a cell of the grid.
type Cell struct{ Row, Col int }

// DEMError describes the vertical error of the heights: Gaussian, of mean
// zero, with the covariance Sigma^2 exp(-d / Correlation) over the ground
// distance d. See docs/confidence.md.
type DEMError struct {
	Sigma       float64 // standard deviation, metres; 0 for none given
	Correlation float64 // correlation length, metres; 0 for errors that are independent from cell to cell
	Draws       int     // simulated profiles a pair; 0 for DefaultDraws
	Seed        uint64
}

// DefaultDraws is the number of simulated profiles of a site and look. The
// standard error of a probability is then at most 0.016, 0.007 at 0.05 or 0.95.
const DefaultDraws = 1000

// SitesJob is one evaluation of sites under looks.
type SitesJob struct {
	Source dem.Source
	Range  dem.Range // from dem.Scan over the same source
	Looks  []geometry.Look
	Sites  []Site
	// Options as in a Run. Tile does not matter here.
	Options  Options
	DEMError DEMError
	// Progress, when not nil, is told of finished pairs out of all pairs. It is
	// called from several goroutines, never twice at once.
	Progress func(done, all int64)
}

// Verdict says whether a site can be measured by a look.
type Verdict string

// The verdicts. A site whose class is open is usable, one that is compressed
// or is open in a part of its footprint or cells only is marginal, one that is
// folded or hidden is unusable. Where the DEM's error is given, a probability
// of being open between UnusableBelow and UsableFrom makes any of them
// marginal.
const (
	Usable            Verdict = "usable"
	Marginal          Verdict = "marginal"
	Unusable          Verdict = "unusable"
	UndeterminedThere Verdict = "undetermined" // no height there, or it depends on terrain that the DEM does not show
	NotSeen           Verdict = "not-seen"     // outside what the look measures
)

// Verdicts lists the verdicts from best to worst.
var Verdicts = []Verdict{Usable, Marginal, Unusable, UndeterminedThere, NotSeen}

// Where says whether a site has ground under it.
type Where uint8

// The answers of Where.
const (
	OnGround   Where = 0
	OutsideDEM Where = 1 // beyond the outermost cell centres
	OnHole     Where = 2 // a height that counts is missing
)

// Terrain is a place of the range line through a site that decides something.
type Terrain struct {
	Row, Col float64
	Place    geometry.Place
	Height   float64 // of the surface, metres
	// Distance is that from the site along the ground, metres: positive away
	// from the radar, negative towards it. NaN where there is no such terrain.
	Distance float64
}

// Found reports whether there is such terrain.
func (t *Terrain) Found() bool { return t.Distance == t.Distance }

// Shares are the parts of a site's footprint or cells by kind of class, the
// tens digit of the code: [0] no data, [1] open, [2] compressed, [3] layover,
// [4] shadow, [5] undetermined. They sum to 1.
type Shares [6]float64

// Chance is what simulated errors of the heights make of a site. All NaN where
// no error was given.
type Chance struct {
	// Open, Folded, Hidden and Undetermined are probabilities that sum to 1.
	// Open includes compressed.
	Open, Folded, Hidden, Undetermined float64
	StdErr                             float64 // of Open
}

// SiteResult is one site under one look. A quantity that the look lacks
// something for, or that the site has no ground for, is NaN.
type SiteResult struct {
	Site, Look int // indices into the job

	Where Where
	Seen  geometry.Seen
	// Class, Layover and Shadow are as in the layers of these names; Class is
	// that of the verdict layer.
	Class, Layover, Shadow Class
	Verdict                Verdict
	Reason                 string // one plain sentence

	// Ground is the height of the surface under the target.
	Ground float64
	// Clearance and FoldMargin are those of the target, as in the layers,
	// metres: of height above the shadow boundary, and of slant range to the
	// nearest overlap. A hidden target has no fold margin.
	Clearance, FoldMargin float64
	// Blocker is the terrain towards the radar that hides the target or comes
	// nearest to hiding it; Partner is the lit terrain that shares its slant
	// range or comes nearest to it.
	Blocker, Partner Terrain
	// MastToClear is the least height above ground at which a target would be
	// neither hidden nor folded, metres: 0 where it needs none, NaN where
	// raising it does not help.
	MastToClear float64

	Incidence, LocalIncidence, RangeIncidence geometry.Angle
	LookAzimuth                               geometry.Angle // radar to ground, true north
	// ToRadar is the azimuth from the site to the radar from true north,
	// GridToRadar the same from grid north, the direction of the map's Y axis;
	// Elevation is the angle to the radar above the horizon.
	ToRadar, GridToRadar, Elevation geometry.Angle
	LineOfSight                     geometry.ENU // unit vector, ground to radar
	SlantRange                      float64      // metres; without a reference range as in the layer
	Foreshortening                  float64
	GroundResolution                float64 // metres
	AreaFactor                      float64
	Downslope                       float64
	CriticalBaseline                float64 // metres
	AmbiguityHeight                 float64 // metres
	// Fringe is the displacement along the line of sight that makes one fringe,
	// FringeDownslope the same down the slope, metres.
	Fringe, FringeDownslope float64

	Shares Shares
	Chance Chance
}
