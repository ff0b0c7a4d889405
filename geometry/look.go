package geometry

// Kind is the kind of a look; its text is what the user writes.
type Kind string

// The five kinds of look.
const (
	Fixed     Kind = "fixed"     // plane wave over the map plane
	Orbit     Kind = "orbit"     // circular orbit over the turning earth
	Ephemeris Kind = "ephemeris" // state vectors from a CCSDS OEM file
	Flight    Kind = "flight"    // geodesic line at constant height
	Tripod    Kind = "tripod"    // fixed ground-based radar
)

// Side is the side to which the radar looks, seen along the heading.
type Side string

// The two sides; the empty string stands for "not given".
const (
	Left  Side = "left"
	Right Side = "right"
)

// Pass is the half of an orbit: towards the north pole or away from it.
type Pass string

// The two passes; the empty string stands for "not given".
const (
	Ascending  Pass = "ascending"
	Descending Pass = "descending"
)

// Place is a point on the WGS84 ellipsoid, longitude in [-180, 180] degrees
// and latitude in [-90, 90] degrees, as Angles. Two NaN stand for "not given".
type Place struct{ Lon, Lat Angle }

// Given reports whether the place holds values.
func (p Place) Given() bool { return p.Lon.Given() && p.Lat.Given() }

// Look is one radar look as the user gave it, checked and in SI units. A
// parameter that was not given is NaN or empty. NewLook returns one with
// nothing given; the zero value is not useful.
type Look struct {
	Name string
	Kind Kind

	// Incidence is the ellipsoidal incidence: everywhere for a fixed look, at
	// the anchor for an orbit.
	Incidence Angle
	// Azimuth is the look azimuth. For a fixed look it is always resolved,
	// also when the user gave heading and side.
	Azimuth Angle
	Heading Angle
	Side    Side
	// SlantRange is the reference slant range of a fixed look at the DEM
	// centre at height 0, metres.
	SlantRange float64

	Altitude                    float64 // orbit radius less 6378137 m, metres
	Inclination                 Angle
	Pass                        Pass
	Anchor                      Place
	NearIncidence, FarIncidence Angle

	OEM string // path of the ephemeris file

	Start, End        Place
	Height            float64 // above the ellipsoid, metres
	HeightAboveGround float64 // above the highest ground under the line, metres

	Position             Place
	Antenna              float64 // above the ground, metres
	SectorFrom, SectorTo Angle   // clockwise from SectorFrom to SectorTo
	MinRange, MaxRange   float64 // slant range, metres

	Wavelength float64 // metres
	Bandwidth  float64 // hertz
	Baseline   float64 // perpendicular baseline, metres
}
