package geometry

import (
	"encoding/csv"
	"math"
	"slices"
	"strings"
)

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

// Kinds lists the five kinds in the order of the docs.
var Kinds = []Kind{Fixed, Orbit, Ephemeris, Flight, Tripod}

// DrivenKinds lists the kinds that the program computes today. The looks of
// the others are read and checked, then refused by whoever cannot drive them.
var DrivenKinds = []Kind{Fixed, Orbit, Ephemeris, Flight, Tripod}

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

	// Band is the IEEE Std 521 letter when the user gave nothing closer;
	// Wavelength is then that of the band's centre.
	Band       string
	Wavelength float64 // metres
	Bandwidth  float64 // hertz
	Baseline   float64 // perpendicular baseline, metres
}

// NewLook returns a look with nothing given.
func NewLook() Look {
	nan, nowhere := math.NaN(), Place{NotGiven, NotGiven}
	return Look{
		Incidence: NotGiven, Azimuth: NotGiven, Heading: NotGiven, SlantRange: nan,
		Altitude: nan, Inclination: NotGiven, Anchor: nowhere,
		NearIncidence: NotGiven, FarIncidence: NotGiven,
		Start: nowhere, End: nowhere, Height: nan, HeightAboveGround: nan,
		Position: nowhere, Antenna: nan, SectorFrom: NotGiven, SectorTo: NotGiven,
		MinRange: nan, MaxRange: nan,
		Wavelength: nan, Bandwidth: nan, Baseline: nan,
	}
}

// Driven reports whether the program computes looks of this kind.
func (l Look) Driven() bool { return slices.Contains(DrivenKinds, l.Kind) }

// Frequency returns the centre frequency in hertz, NaN when neither band nor
// frequency nor wavelength was given.
func (l Look) Frequency() float64 { return FrequencyOf(l.Wavelength) }

// Pairs returns the look as keys and values in the order of KeyTable, as a
// user would write them: BuildLook of them is the same look, bit for bit,
// for every look that came from BuildLook.
func (l Look) Pairs() []Pair {
	var pairs []Pair
	for _, k := range KeyTable {
		if v := k.write(&l); v != "" {
			pairs = append(pairs, Pair{Key: k.Name, Value: v})
		}
	}
	return pairs
}

// String returns the look in the form of the --look flag: key=value pairs
// with commas between them, a pair that holds a comma or a quote in quotes as
// in CSV.
func (l Look) String() string {
	pairs := l.Pairs()
	fields := make([]string, len(pairs))
	for i, p := range pairs {
		fields[i] = p.Key + "=" + p.Value
	}
	var text strings.Builder
	w := csv.NewWriter(&text)
	_ = w.Write(fields) // a strings.Builder does not fail
	w.Flush()
	return strings.TrimSuffix(text.String(), "\n")
}
