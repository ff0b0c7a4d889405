package geometry

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// pairsOf splits "key=value key=value" at the spaces; ~ stands for a space.
func pairsOf(text string) []Pair {
	var pairs []Pair
	for _, f := range strings.Fields(text) {
		k, v, _ := strings.Cut(f, "=")
		r := strings.NewReplacer("~", " ")
		pairs = append(pairs, Pair{Key: r.Replace(k), Value: r.Replace(v)})
	}
	return pairs
}

// must builds a look that the test takes for good.
func must(t *testing.T, text string) Look {
	t.Helper()
	l, err := BuildLook(pairsOf(text))
	require.NoError(t, err, text)
	return l
}

// same compares all bits of two looks but the sign of NaN: %v prints the
// shortest number that tells a float64 from every other.
func same(t *testing.T, want, got Look, about string) {
	t.Helper()
	assert.Equal(t, fmt.Sprintf("%+v", fields(want)), fmt.Sprintf("%+v", fields(got)), about)
}

// fields is a Look without its String method.
type fields Look

func TestNewLookHoldsNothing(t *testing.T) {
	l := NewLook()
	var walk func(v reflect.Value, name string)
	walk = func(v reflect.Value, name string) {
		switch v.Kind() {
		case reflect.Struct:
			for i := range v.NumField() {
				walk(v.Field(i), name+"."+v.Type().Field(i).Name)
			}
		case reflect.Float64:
			assert.True(t, math.IsNaN(v.Float()), name)
		case reflect.String:
			assert.Empty(t, v.String(), name)
		default:
			t.Errorf("%s is of a kind this test does not know", name)
		}
	}
	walk(reflect.ValueOf(l), "Look")
	assert.Empty(t, l.Pairs())
	assert.True(t, math.IsNaN(l.Frequency()))
}

// One look of each kind, every field checked in SI units; the right-hand
// sides are the definitions of the units, not the parser's arithmetic.
func TestBuildLookFields(t *testing.T) {
	deg := func(d float64) Angle { return Angle(d * math.Pi / 180) }
	const ulps = 1e-15 // relative: one or two roundings in the conversion
	near := func(want, got float64, what string) {
		t.Helper()
		if want == 0 {
			assert.Zero(t, got, what)
			return
		}
		assert.InEpsilon(t, want, got, ulps, what)
	}
	angle := func(want float64, got Angle, what string) { t.Helper(); near(float64(deg(want)), float64(got), what) }

	l := must(t, "name=a.1_b-c incidence=38.5 azimuth=77 slant_range_km=850.25 band=c bandwidth_mhz=42.8 baseline=120")
	assert.Equal(t, "a.1_b-c", l.Name)
	assert.Equal(t, Fixed, l.Kind)
	angle(38.5, l.Incidence, "incidence")
	angle(77, l.Azimuth, "azimuth")
	assert.False(t, l.Heading.Given())
	near(850250, l.SlantRange, "slant range")
	assert.Equal(t, "C", l.Band)
	near(6e9, l.Frequency(), "the middle of 4 to 8 GHz")
	near(42.8e6, l.Bandwidth, "bandwidth")
	near(120, l.Baseline, "baseline")

	l = must(t, "kind=orbit incidence=38 altitude_km=620 inclination=97.9 pass=Descending side=LEFT anchor=-10.5/46.2 near_incidence=0 far_incidence=90 frequency_ghz=5.405")
	assert.Equal(t, []any{Orbit, Descending, Left}, []any{l.Kind, l.Pass, l.Side})
	near(620e3, l.Altitude, "altitude")
	angle(97.9, l.Inclination, "inclination")
	angle(-10.5, l.Anchor.Lon, "longitude")
	angle(46.2, l.Anchor.Lat, "latitude")
	angle(0, l.NearIncidence, "near")
	angle(90, l.FarIncidence, "far")
	near(5.405e9, l.Frequency(), "frequency")
	assert.Empty(t, l.Band)
	assert.False(t, l.Azimuth.Given())

	l = must(t, "kind=orbit incidence=38 altitude_km=35786 heading=360 side=right")
	assert.Zero(t, float64(l.Heading), "360 is 0")

	l = must(t, "kind=ephemeris oem=my~orbit,2.oem side=right")
	assert.Equal(t, "my orbit,2.oem", l.OEM)

	l = must(t, "kind=flight start=10.4/46.1 end=-180/-90 height=-12.5 side=left wavelength_m=0.24")
	angle(10.4, l.Start.Lon, "start")
	angle(46.1, l.Start.Lat, "start")
	angle(-180, l.End.Lon, "end")
	angle(-90, l.End.Lat, "end")
	near(-12.5, l.Height, "height")
	assert.True(t, math.IsNaN(l.HeightAboveGround))
	near(0.24, l.Wavelength, "wavelength")

	l = must(t, "kind=flight start=10.4/46.1 end=10.5/46.1 height_above_ground=1500 side=left")
	near(1500, l.HeightAboveGround, "height above ground")

	l = must(t, "kind=tripod position=10.48/46.21 antenna=2.5 sector=300/40 min_range=0 max_range=4e3")
	angle(10.48, l.Position.Lon, "position")
	angle(46.21, l.Position.Lat, "position")
	near(2.5, l.Antenna, "antenna")
	angle(300, l.SectorFrom, "sector")
	angle(40, l.SectorTo, "sector")
	near(0, l.MinRange, "near range")
	near(4000, l.MaxRange, "far range")

	l = must(t, "kind=tripod position=10.48/46.21 antenna=2.5 sector=0/360")
	assert.False(t, l.SectorFrom.Given(), "0/360 is all around")
}

// Right-looking azimuth = heading + 90, left-looking = heading - 90, in
// [0, 360): the zero-Doppler relation for a yaw-steered radar. Headings such
// as 347.979 are those of a sun-synchronous orbit at the equator.
func TestAzimuthFromHeading(t *testing.T) {
	for _, row := range []struct {
		heading     string
		right, left float64
	}{
		{"0", 90, 270}, {"90", 180, 0}, {"180", 270, 90}, {"270", 0, 180}, {"360", 90, 270},
		{"347.979", 77.979, 257.979}, {"192.021", 282.021, 102.021}, {"359.999", 89.999, 269.999}, {"0.001", 90.001, 270.001},
	} {
		right := must(t, "incidence=38 side=right heading="+row.heading).Azimuth
		left := must(t, "incidence=38 side=left heading="+row.heading).Azimuth
		const ulps = 1e-13 // degrees: two roundings below 360
		assert.InDelta(t, row.right, right.Degrees(), ulps, row.heading)
		assert.InDelta(t, row.left, left.Degrees(), ulps, row.heading)
		for _, a := range []Angle{right, left} {
			assert.True(t, a >= 0 && a < 360*Degree, "%v of heading %s", a, row.heading)
		}
	}
}

// Values on and beside the limits, written by hand from the looks reference.
func TestLimits(t *testing.T) {
	base := map[string]string{
		"fixed":  "incidence=38 azimuth=77",
		"orbit":  "kind=orbit incidence=38 altitude_km=620 inclination=97 pass=ascending side=right",
		"flight": "kind=flight start=10.4/46.1 end=10.5/46.1 height=5000 side=left",
		"above":  "kind=flight start=10.4/46.1 end=10.5/46.1 height_above_ground=5000 side=left",
		"tripod": "kind=tripod position=10.4/46.1 antenna=2",
	}
	for _, row := range []struct{ look, key, good, bad string }{
		{"fixed", "incidence", "0.001 89.999 45", "0 90 -1 90.001 180"},
		{"fixed", "azimuth", "0 360 359.999", "-0.001 360.001 -90 720"},
		{"fixed", "slant_range_km", "0.001 100000", "0 -1 100000.1"},
		{"orbit", "incidence", "0.001 89.999", "0 90"},
		{"orbit", "altitude_km", "100 50000", "99.9 50001 620000"},
		{"orbit", "inclination", "0.1 90 179.9", "0 180 -1 181"},
		{"orbit", "anchor", "-180/-90 180/90 0/0", "-180.1/0 0/90.1 0/-91 200/0"},
		{"orbit", "near_incidence", "0 89.9", "-1 90"},
		{"orbit", "far_incidence", "0.1 90", "0 90.1"},
		{"flight", "height", "-500 0 100000", "-500.1 100001"},
		{"above", "height_above_ground", "0.1 100000", "0 -1 100001"},
		{"tripod", "antenna", "0.1 1000", "0 -2 1001"},
		{"tripod", "sector", "0/1 359/0 300/40", "5/5 360/0 -1/5 0/361"},
		{"tripod", "min_range", "0 1000000", "-1 1000001"},
		{"tripod", "max_range", "1 1000000", "0 1000001"},
		{"fixed", "frequency_ghz", "0.3 300 5.405", "0.2999 300.1 0 -5 5405"},
		{"fixed", "wavelength_m", "0.001 0.9993", "0.000999 0.9994 0 1"},
		{"fixed", "bandwidth_mhz", "0.001 100000", "0 -1 100001"},
		{"fixed", "baseline", "0.1 100000", "0 -120 100001"},
	} {
		build := func(value string) error {
			var pairs []Pair
			for _, p := range pairsOf(base[row.look]) {
				if p.Key != row.key {
					pairs = append(pairs, p)
				}
			}
			_, err := BuildLook(append(pairs, Pair{Key: row.key, Value: value}))
			return err
		}
		for _, v := range strings.Fields(row.good) {
			assert.NoError(t, build(v), "%s %s", row.key, v)
		}
		for _, v := range strings.Fields(row.bad + " NaN Inf -inf +Infinity 0x1p3 1_0 1e999 ١ 3,5") {
			if err := build(v); assert.Error(t, err, "%s %s", row.key, v) {
				assert.Contains(t, err.Error(), row.key+" \""+v+"\"")
				assert.Contains(t, err.Error(), "accepted: ")
			}
		}
	}
}

// What a refused look says. Each row holds the parts that the message must
// have, with a stroke between them.
var refused = []struct{ look, says string }{
	{"", "a look without any key|name=north,incidence=38"},
	// Missing keys.
	{"name=a", `look "a" of kind fixed lacks incidence, azimuth (or heading with side)|incidence=38`},
	{"incidence=38", "lacks azimuth (or heading with side)"},
	{"azimuth=38", "lacks incidence"},
	{"kind=orbit", "lacks incidence, altitude_km, heading (or inclination with pass), side|kind=orbit,incidence=38"},
	{"kind=ephemeris", "lacks oem, side|kind=ephemeris,oem=track.oem"},
	{"kind=flight", "lacks start, end, height (or height_above_ground), side|kind=flight,start="},
	{"kind=tripod", "lacks position, antenna|kind=tripod,position="},
	{"kind=orbit incidence=38 altitude_km=620 heading=347", "lacks side"},
	// Where the look points.
	{"incidence=38 azimuth=77 heading=347 side=right", `heading "347" is given beside azimuth "77"|keep`},
	{"incidence=38 azimuth=77 side=right", `side "right" says nothing beside an azimuth|drop it`},
	{"incidence=38 heading=347", `heading "347" needs a side|side=right or side=left`},
	{"incidence=38 side=left", `side "left" needs a heading|heading=347`},
	{"kind=orbit incidence=38 altitude_km=620 side=right heading=347 inclination=98 pass=ascending", `heading "347" is given beside inclination or pass`},
	{"kind=orbit incidence=38 altitude_km=620 side=right heading=347 pass=ascending", `heading "347" is given beside inclination or pass`},
	{"kind=orbit incidence=38 altitude_km=620 side=right inclination=98", `inclination "98" needs a pass|pass=ascending`},
	{"kind=orbit incidence=38 altitude_km=620 side=right pass=ascending", `pass "ascending" needs an inclination`},
	{"kind=flight start=1/2 end=1/3 height=5000 height_above_ground=100 side=left", `height_above_ground "100" is given beside height "5000"|keep one`},
	{"kind=flight start=1/2 end=1.0/2.0 height=5000 side=left", `end "1.0/2.0" is the same place as the start`},
	// Unknown keys.
	{"incidence=38 azimut=77", `unknown key "azimut"; did you mean azimuth?`},
	{"Incidence=38 azimuth=77", `unknown key "Incidence"; did you mean incidence?`},
	{"incidence=38 azimuth=77 slant-range-km=800", `unknown key "slant-range-km"; did you mean slant_range_km?`},
	{"altitude=620", "did you mean altitude_km?"},
	{"incidence_angle=38", "did you mean incidence?"},
	{"freq=5", "did you mean frequency_ghz?"},
	{"haeding=5", "did you mean heading?"},
	{"colour=red", `unknown key "colour"; known keys: name kind incidence`},
	{"=5", `value "5" without a key`},
	{strings.Repeat("k", 400) + "=5", "known keys|kkk..."},
	// Keys of another kind.
	{"incidence=38 azimuth=77 altitude_km=620", `altitude_km "620" belongs to kind orbit|fixed when it gives no kind|add kind=orbit`},
	{"kind=fixed incidence=38 azimuth=77 antenna=2", `antenna "2" belongs to kind tripod, not to fixed`},
	{"kind=tripod position=1/2 antenna=2 side=left", `side "left" belongs to kind fixed or orbit or ephemeris or flight, not to tripod`},
	{"kind=tripod position=1/2 antenna=2 incidence=40", "belongs to kind fixed or orbit, not to tripod"},
	{"kind=orbit incidence=38 altitude_km=620 azimuth=77 side=right", `azimuth "77" belongs to kind fixed, not to orbit`},
	{"kind=flight start=1/2 end=1/3 height=5000 side=left heading=3", `heading "3" belongs to kind fixed or orbit, not to flight`},
	{"kind=ephemeris oem=a side=left altitude_km=620", "belongs to kind orbit, not to ephemeris"},
	// Keys twice.
	{"incidence=38 azimuth=77 incidence=39", `incidence "39" is given twice, before as "38"`},
	{"name=a name=a", "given twice"},
	// Empty and unprintable values.
	{"incidence= azimuth=77", `incidence "" has no value|accepted: above 0 and below 90 degrees`},
	{"name=~~", "has no value"},
	{"incidence=3\x008 azimuth=77", "control character"},
	{"incidence=\xff azimuth=77", "UTF-8"},
	{"kind=ephemeris side=left oem=a\x1bb", "control character"},
	// Numbers.
	{"incidence=thirty azimuth=77", `incidence "thirty" is not a plain decimal number`},
	{"incidence=38deg azimuth=77", "has a unit behind the number; write 38 alone"},
	{"incidence=38° azimuth=77", "has a unit behind the number; write 38 alone"},
	{"incidence=38,5 azimuth=77", "has a decimal comma; write 38.5 with a point"},
	{"incidence=0x26 azimuth=77", "not a plain decimal number"},
	{"incidence=NaN azimuth=77", "not a plain decimal number"},
	{"incidence=Inf azimuth=77", "not a plain decimal number"},
	{"incidence=1e400 azimuth=77", "too large a number"},
	{"incidence=3e azimuth=77", "not a plain decimal number"},
	{"incidence=1.2.3 azimuth=77", "not a plain decimal number"},
	{"incidence=- azimuth=77", "not a plain decimal number"},
	{"incidence=0 azimuth=77", "at 0 the radar looks straight down|accepted: above 0 and below 90 degrees"},
	{"incidence=90 azimuth=77", "at 90 the wave only grazes level ground|accepted: above 0 and below 90 degrees"},
	{"incidence=95 azimuth=77", `incidence "95" is out of range|below 90 degrees, such as incidence=38`},
	{"incidence=38 azimuth=-13", "out of range; write 347 for it"},
	{"kind=orbit incidence=38 altitude_km=620000 heading=3 side=left", "altitude_km|100 to 50000 km"},
	{"kind=orbit incidence=38 altitude_km=620 inclination=0 pass=ascending side=left", "an orbit along the equator has no passes"},
	{"kind=orbit incidence=38 altitude_km=620 heading=3 side=left near_incidence=40 far_incidence=30", `near_incidence "40" is not below far_incidence "30"`},
	{"kind=orbit incidence=38 altitude_km=620 heading=3 side=left near_incidence=40 far_incidence=40", "is not below"},
	{"kind=tripod position=1/2 antenna=2 min_range=50 max_range=50", `min_range "50" is not below max_range "50"`},
	// Words.
	{"kind=satellite", `kind "satellite" is unknown; accepted: fixed, orbit, ephemeris, flight, tripod`},
	{"kind=orbital", "did you mean orbit?"},
	{"incidence=38 heading=3 side=rigth", "did you mean right?|accepted: left, right"},
	{"incidence=38 heading=3 side=up", `side "up" is unknown`},
	{"kind=orbit incidence=38 altitude_km=620 inclination=98 pass=asc side=left", "did you mean ascending?"},
	// Places.
	{"kind=tripod position=46.2/110.5 antenna=2", "latitude 110.5, outside -90 to 90; longitude comes first: did you mean 110.5/46.2?"},
	{"kind=tripod position=200/10 antenna=2", "longitude 200, outside -180 to 180; write -160/10"},
	{"kind=tripod position=-200/10 antenna=2", "longitude -200, outside -180 to 180"},
	{"kind=tripod position=120/120 antenna=2", "latitude 120, outside -90 to 90"},
	{"kind=tripod position=10.5 antenna=2", `position "10.5" has no slash|LON/LAT in degrees`},
	{"kind=tripod position=10/46/3 antenna=2", "more than one slash"},
	{"kind=tripod position=/46 antenna=2", `has "" before the slash, which is not a plain decimal number`},
	{"kind=tripod position=10/46N antenna=2", `has "46N" behind the slash, which has a unit`},
	{"kind=tripod position=NaN/46 antenna=2", "not a plain decimal number"},
	{"kind=tripod position=10,5/46,2 antenna=2", "decimal comma; write 10.5"},
	{"kind=tripod position=10/46 antenna=2 sector=300-40", "has no slash|FROM/TO, each 0 to 360 degrees"},
	{"kind=tripod position=10/46 antenna=2 sector=-60/40", "first azimuth that is out of range; write 300 for it"},
	{"kind=tripod position=10/46 antenna=2 sector=40/400", "second azimuth that is out of range"},
	{"kind=tripod position=10/46 antenna=2 sector=40/40", "has no width; leave the key out"},
	// Radio.
	{"incidence=38 azimuth=7 band=C frequency_ghz=5.4", `frequency_ghz "5.4" is given beside band "C"|keep one`},
	{"incidence=38 azimuth=7 frequency_ghz=5.4 wavelength_m=0.05", "given beside frequency_ghz"},
	{"incidence=38 azimuth=7 wavelength_m=0.05 band=C", `wavelength_m "0.05" is given beside band`},
	{"incidence=38 azimuth=7 band=P", "no letter of IEEE Std 521|UHF from 0.3 to 1 GHz"},
	{"incidence=38 azimuth=7 band=VHF", "lies below 0.3 GHz"},
	{"incidence=38 azimuth=7 band=Q", "no letter of IEEE Std 521; accepted: UHF, L, S, C, X, Ku, K, Ka, V, W, mm"},
	{"incidence=38 azimuth=7 frequency_ghz=5405", "if it is in megahertz, write 5.405|0.3 to 300 GHz"},
	{"incidence=38 azimuth=7 frequency_ghz=5405000000", "if it is in hertz, write 5.405"},
	{"incidence=38 azimuth=7 wavelength_m=5.6", "if it is in centimetres, write 0.056"},
	{"incidence=38 azimuth=7 wavelength_m=240", "if it is in millimetres, write 0.24"},
	{"incidence=38 azimuth=7 frequency_ghz=0.4 bandwidth_mhz=800", `bandwidth_mhz "800" is not below twice the centre frequency of 0.4 GHz`},
	{"incidence=38 azimuth=7 baseline=0", "a pair without a baseline measures no height"},
	// Names.
	{"name=a/b incidence=38 azimuth=7", `name "a/b" holds '/' at character 2|letters`},
	{"name=.a", `holds '.' at character 1`},
	{"name=-a", `holds '-' at character 1`},
	{"name=..", `holds '.'`},
	{"name=a~b", `holds ' ' at character 2`},
	{"name=über", `holds 'ü' at character 1`},
	{"name=a.", "ends in a point"},
	{"name=NUL", "name of a device"},
	{"name=com1.x", "name of a device"},
	{"name=" + strings.Repeat("a", 65), "too long, 65 bytes"},
}

func TestRefused(t *testing.T) {
	require.GreaterOrEqual(t, len(refused), 60)
	for _, row := range refused {
		got, err := BuildLook(pairsOf(row.look))
		if !assert.Error(t, err, row.look) {
			continue
		}
		assert.Equal(t, Look{}, got, "an error comes with an empty look")
		for part := range strings.SplitSeq(row.says, "|") {
			assert.Contains(t, err.Error(), part, row.look)
		}
		assert.NotContains(t, err.Error(), "\n", row.look)
	}
}

// Errors name the place, and the look once its name is known.
func TestRefusedPlace(t *testing.T) {
	_, err := BuildLook([]Pair{{"azimuth", "400", "line 4"}, {"name", "far", "line 3"}, {"incidence", "38", "line 5"}})
	assert.EqualError(t, err, `line 4: look "far": azimuth "400" is out of range; accepted: 0 to 360 degrees, such as azimuth=77`)
	_, err = BuildLook([]Pair{{"name", "far", "line 3, column name"}})
	assert.ErrorContains(t, err, `line 3: look "far" of kind fixed lacks incidence`)
	_, err = BuildLook([]Pair{{"band", "C", "line 3"}, {"band", "C", "line 9"}})
	assert.ErrorContains(t, err, `line 9: band "C" is given twice (first at line 3)`)
}

// What is printed reads back as the same look.
func roundTrip(t *testing.T, l Look) {
	t.Helper()
	again, err := BuildLook(l.Pairs())
	require.NoError(t, err, "%v", l)
	same(t, l, again, l.String())
}

// A look prints as it was written when it was written in the shortest form.
func TestPrintsAsWritten(t *testing.T) {
	for _, text := range []string{
		"name=a kind=fixed incidence=38.1 azimuth=77.7 slant_range_km=850.3 band=Ku bandwidth_mhz=42.8 baseline=0.1",
		"kind=fixed incidence=0.1 heading=347.9 side=left frequency_ghz=5.405",
		"kind=orbit incidence=38 heading=0.3 side=right altitude_km=620.7 anchor=-10.1/46.9 near_incidence=29.9 far_incidence=46.1 wavelength_m=0.0555",
		"kind=orbit incidence=38 side=right altitude_km=620.7 inclination=97.44 pass=ascending",
		"kind=ephemeris side=left oem=a/b.oem",
		"kind=flight side=left start=10.42/46.15 end=10.58/46.15 height=5200.5",
		"kind=flight side=left start=10.42/46.15 end=10.58/46.15 height_above_ground=1500.1",
		"kind=tripod position=10.48/46.21 antenna=2.3 sector=300.3/40.7 min_range=50.1 max_range=4000",
	} {
		l := must(t, text)
		assert.Equal(t, strings.ReplaceAll(text, " ", ","), l.String())
		roundTrip(t, l)
	}
	assert.Equal(t, `kind=ephemeris,side=left,"oem=a, ""b"".oem"`, must(t, `kind=ephemeris side=left oem=a,~"b".oem`).String())
}

// Numbers of every length survive printing; the seed is in the message.
func TestRoundTripRandom(t *testing.T) {
	seed := rand.Uint64()
	r := rand.New(rand.NewPCG(seed, 0))
	number := func(lo, hi float64) string {
		return fmt.Sprintf("%.*f", 1+r.IntN(17), lo+(hi-lo)*r.Float64())
	}
	for range 2000 {
		look := fmt.Sprintf("incidence=%s heading=%s side=left slant_range_km=%s wavelength_m=%s bandwidth_mhz=%s",
			number(2, 88), number(0, 360), number(1, 9000), number(0.3, 0.5), number(1, 500))
		if r.IntN(2) == 0 {
			look = fmt.Sprintf("kind=orbit incidence=%s altitude_km=%s inclination=%s pass=ascending side=left anchor=%s/%s frequency_ghz=%s",
				number(2, 88), number(100, 40000), number(1, 179), number(-180, 180), number(-90, 90), number(1, 300))
		}
		l, err := BuildLook(pairsOf(look))
		require.NoError(t, err, "seed %d: %s", seed, look)
		again, err := BuildLook(l.Pairs())
		require.NoError(t, err, "seed %d: %s", seed, look)
		same(t, l, again, fmt.Sprintf("seed %d: %s", seed, look))
	}
}

func TestKeyTable(t *testing.T) {
	seen := map[string]bool{}
	for _, k := range KeyTable {
		assert.False(t, seen[k.Name], k.Name)
		seen[k.Name] = true
		l := NewLook()
		assert.NoError(t, k.read(k.Example, &l), k.Name)
		assert.Equal(t, k.Example, k.write(&l), "%s prints its example", k.Name)
		assert.NotEmpty(t, k.Meaning, k.Name)
		assert.NotEmpty(t, k.Accepts(), k.Name)
		assert.Contains(t, KeyHelp(), "  "+k.Name+" ")
	}
	assert.Contains(t, KeyHelp(Tripod), "sector")
	assert.NotContains(t, KeyHelp(Tripod), "heading")
	for _, kind := range Kinds {
		l := must(t, strings.ReplaceAll(Examples[kind], ",", " "))
		assert.Equal(t, kind, l.Kind)
		roundTrip(t, l)
	}
}

func TestNameLooks(t *testing.T) {
	names := func(given ...string) []Look {
		looks := make([]Look, len(given))
		for i, n := range given {
			looks[i] = NewLook()
			looks[i].Name = n
		}
		return looks
	}
	for _, row := range []struct{ given, want []string }{
		{nil, nil},
		{[]string{"", ""}, []string{"look-1", "look-2"}},
		{[]string{"a", "", "b", ""}, []string{"a", "look-2", "b", "look-4"}},
		{[]string{"", "LOOK-1", ""}, []string{"look-2", "LOOK-1", "look-3"}},
		{[]string{"", "look-1", "look-2", ""}, []string{"look-3", "look-1", "look-2", "look-4"}},
	} {
		looks := names(row.given...)
		require.NoError(t, NameLooks(looks))
		for i := range looks {
			assert.Equal(t, row.want[i], looks[i].Name, "%v", row.given)
		}
	}
	looks := names("", "a", "A")
	assert.ErrorContains(t, NameLooks(looks), `look names "a" and "A" differ in nothing but case`)
	assert.Empty(t, looks[0].Name, "nothing changes with an error")
	assert.ErrorContains(t, NameLooks(names("a", "a")), `two looks have the name "a"`)
}

// Distances by hand; the first is the example that papers and textbooks use.
func TestEditDistance(t *testing.T) {
	for _, row := range []struct {
		a, b string
		d    int
	}{{"kitten", "sitting", 3}, {"", "abc", 3}, {"abc", "", 3}, {"same", "same", 0}, {"flaw", "lawn", 2}, {"ab", "ba", 2}} {
		assert.Equal(t, row.d, EditDistance(row.a, row.b), "%s %s", row.a, row.b)
		assert.Equal(t, row.d, EditDistance(row.b, row.a), "%s %s", row.b, row.a)
	}
}
