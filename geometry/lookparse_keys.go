package geometry

import (
	"fmt"
	"slices"
	"strings"
)

// Key describes one key of a look: what validation, help and docs all say.
type Key struct {
	Name    string
	Kinds   []Kind // the kinds that take it, nil for all
	Unit    string // of the value as written; empty for words and places
	Meaning string
	Example string // a value that is accepted
	codec
}

// codec reads and writes the value of a key.
type codec struct {
	accepts string
	// read stores a value; its error says in a few words what is wrong.
	read func(text string, l *Look) error
	// write returns the value, empty when it is not given.
	write func(l *Look) string
}

// Accepts says in words which values the key takes, without the unit.
func (k Key) Accepts() string { return k.accepts }

// For reports whether looks of a kind take the key.
func (k Key) For(kind Kind) bool { return k.Kinds == nil || slices.Contains(k.Kinds, kind) }

// accepted is the end of every error about a value.
func (k Key) accepted() string {
	unit := ""
	if k.Unit != "" {
		unit = " " + k.Unit
	}
	return fmt.Sprintf("accepted: %s%s, such as %s=%s", k.accepts, unit, k.Name, k.Example)
}

// keyNamed returns the key of a name.
func keyNamed(name string) (Key, bool) {
	for _, k := range KeyTable {
		if k.Name == name {
			return k, true
		}
	}
	return Key{}, false
}

// Limits of what a look may give. They keep slips of the unit out (metres for
// kilometres, hertz for gigahertz) and are no statement of what can fly.
const (
	maxSlantRangeKM = 100000  // beyond the distance of a geostationary orbit
	minAltitudeKM   = 100     // below, the air ends an orbit within hours
	maxAltitudeKM   = 50000   // above a geostationary orbit
	minHeight       = -500    // metres; the lowest shore lies about 430 m below the sea
	maxHeight       = 100000  // metres; above, an orbit is meant
	maxAntenna      = 1000    // metres above ground
	maxRange        = 1000000 // metres; beyond any line of sight from the ground
	maxBandwidthMHz = 100000
	maxBaseline     = 100000 // metres
)

// KeyTable lists every key of a look, in the order of the docs and of
// Look.Pairs. Callers must not change it.
var KeyTable = []Key{
	{"name", nil, "", "name of the look and of its output folder; numbered look-1, look-2, ... when left out", "north", nameCodec},
	{"kind", nil, "", "what carries the radar; fixed when left out", "orbit",
		wordCodec([]string{string(Fixed), string(Orbit), string(Ephemeris), string(Flight), string(Tripod)},
			func(l *Look, w string) { l.Kind = Kind(w) }, func(l *Look) string { return string(l.Kind) })},

	{"incidence", []Kind{Fixed, Orbit}, "degrees", "angle between the ellipsoid's vertical and the direction to the antenna: everywhere (fixed), at the anchor (orbit)", "38",
		angleCodec(interval{lo: 0, hi: 90, openLo: true, openHi: true,
			atLo: "at 0 the radar looks straight down, where range tells no ground apart",
			atHi: "at 90 the wave only grazes level ground"}, func(l *Look) *Angle { return &l.Incidence })},
	{"azimuth", []Kind{Fixed}, "degrees", "direction in which the radar looks, from the antenna to the ground, clockwise from true north", "77",
		azimuthCodec(func(l *Look) *Angle { return &l.Azimuth }, func(l *Look) bool { return !l.Heading.Given() })},
	{"heading", []Kind{Fixed, Orbit}, "degrees", "direction of travel, clockwise from true north; at the anchor, over the turning earth (orbit)", "347",
		azimuthCodec(func(l *Look) *Angle { return &l.Heading }, func(*Look) bool { return true })},
	{"side", []Kind{Fixed, Orbit, Ephemeris, Flight}, "", "side to which the radar looks, seen along the heading", "right",
		wordCodec([]string{string(Left), string(Right)},
			func(l *Look, w string) { l.Side = Side(w) }, func(l *Look) string { return string(l.Side) })},
	{"slant_range_km", []Kind{Fixed}, "km", "slant range at the DEM centre at height 0", "850",
		numberCodec(1000, interval{lo: 0, hi: maxSlantRangeKM, openLo: true}, func(l *Look) *float64 { return &l.SlantRange })},

	{"altitude_km", []Kind{Orbit}, "km", "orbit radius less 6378.137 km", "620",
		numberCodec(1000, interval{lo: minAltitudeKM, hi: maxAltitudeKM}, func(l *Look) *float64 { return &l.Altitude })},
	{"inclination", []Kind{Orbit}, "degrees", "inclination of the orbit, above 90 for a retrograde one; with pass, in place of heading", "97.9",
		angleCodec(interval{lo: 0, hi: 180, openLo: true, openHi: true,
			atLo: "an orbit along the equator has no passes", atHi: "an orbit along the equator has no passes"},
			func(l *Look) *Angle { return &l.Inclination })},
	{"pass", []Kind{Orbit}, "", "half of the orbit: northward or southward; with inclination", "ascending",
		wordCodec([]string{string(Ascending), string(Descending)},
			func(l *Look, w string) { l.Pass = Pass(w) }, func(l *Look) string { return string(l.Pass) })},
	{"anchor", []Kind{Orbit}, "", "place at which the incidence holds; the DEM centre when left out", "10.5/46.2",
		placeCodec(func(l *Look) *Place { return &l.Anchor })},
	{"near_incidence", []Kind{Orbit, Ephemeris, Flight}, "degrees", "incidence at the near edge of the swath; ground nearer is not seen", "30",
		angleCodec(interval{lo: 0, hi: 90, openHi: true}, func(l *Look) *Angle { return &l.NearIncidence })},
	{"far_incidence", []Kind{Orbit, Ephemeris, Flight}, "degrees", "incidence at the far edge of the swath; ground farther is not seen", "45",
		angleCodec(interval{lo: 0, hi: 90, openLo: true}, func(l *Look) *Angle { return &l.FarIncidence })},

	{"oem", []Kind{Ephemeris}, "", "orbit ephemeris message, CCSDS 502.0-B in KVN text; relative to the looks file's own folder", "track.oem",
		codec{"path of a file", func(text string, l *Look) error { l.OEM = text; return nil }, func(l *Look) string { return l.OEM }}},

	{"start", []Kind{Flight}, "", "place at which the flight line starts", "10.42/46.15",
		placeCodec(func(l *Look) *Place { return &l.Start })},
	{"end", []Kind{Flight}, "", "place at which the flight line ends", "10.58/46.15",
		placeCodec(func(l *Look) *Place { return &l.End })},
	{"height", []Kind{Flight}, "m", "height of the line above the ellipsoid", "5200",
		numberCodec(1, interval{lo: minHeight, hi: maxHeight}, func(l *Look) *float64 { return &l.Height })},
	{"height_above_ground", []Kind{Flight}, "m", "height of the line above the highest ground under it, in place of height", "1500",
		numberCodec(1, interval{lo: 0, hi: maxHeight, openLo: true}, func(l *Look) *float64 { return &l.HeightAboveGround })},

	{"position", []Kind{Tripod}, "", "place of the antenna", "10.48/46.21",
		placeCodec(func(l *Look) *Place { return &l.Position })},
	{"antenna", []Kind{Tripod}, "m", "height of the antenna above the ground", "2.5",
		numberCodec(1, interval{lo: 0, hi: maxAntenna, openLo: true}, func(l *Look) *float64 { return &l.Antenna })},
	{"sector", []Kind{Tripod}, "degrees", "azimuths that the radar sees, clockwise from the first to the second; all around when left out", "300/40", sectorCodec},
	{"min_range", []Kind{Tripod}, "m", "slant range below which nothing is seen", "50",
		numberCodec(1, interval{lo: 0, hi: maxRange}, func(l *Look) *float64 { return &l.MinRange })},
	{"max_range", []Kind{Tripod}, "m", "slant range beyond which nothing is seen", "4000",
		numberCodec(1, interval{lo: 0, hi: maxRange, openLo: true}, func(l *Look) *float64 { return &l.MaxRange })},

	{"band", nil, "", "IEEE Std 521 letter; the frequency is then the middle of the band, so give the frequency where you know it", "C", bandCodec},
	{"frequency_ghz", nil, "GHz", "centre frequency, in place of band", "5.6", frequencyCodec},
	{"wavelength_m", nil, "m", "wavelength in vacuum, in place of band and frequency", "0.031", wavelengthCodec},
	{"bandwidth_mhz", nil, "MHz", "range bandwidth, below twice the centre frequency", "80",
		numberCodec(1e6, interval{lo: 0, hi: maxBandwidthMHz, openLo: true}, func(l *Look) *float64 { return &l.Bandwidth })},
	{"baseline", nil, "m", "length of the perpendicular baseline of an interferometric pair", "120",
		numberCodec(1, interval{lo: 0, hi: maxBaseline, openLo: true, atLo: "a pair without a baseline measures no height"},
			func(l *Look) *float64 { return &l.Baseline })},
}

// Examples holds one look of each kind, as --look takes it. The platforms and
// places are invented.
var Examples = map[Kind]string{
	Fixed:     "name=north,incidence=38,heading=347,side=right",
	Orbit:     "name=high,kind=orbit,incidence=38,altitude_km=620,inclination=97.9,pass=ascending,side=right",
	Ephemeris: "name=track,kind=ephemeris,oem=track.oem,side=right",
	Flight:    "name=line,kind=flight,start=10.42/46.15,end=10.58/46.15,height=5200,side=left",
	Tripod:    "name=bench,kind=tripod,position=10.48/46.21,antenna=2.5,sector=300/40",
}

// KeyHelp returns the keys that looks of the kinds take, one a line, for help
// texts; every key when no kind is named.
func KeyHelp(kinds ...Kind) string {
	var text strings.Builder
	for _, k := range KeyTable {
		if len(kinds) > 0 && !slices.ContainsFunc(kinds, k.For) {
			continue
		}
		unit := ""
		if k.Unit != "" {
			unit = " " + k.Unit
		}
		fmt.Fprintf(&text, "  %-20s %s (%s%s)\n", k.Name, k.Meaning, k.accepts, unit)
	}
	return text.String()
}
