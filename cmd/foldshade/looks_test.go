package main

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/geometry"
)

// looksJSON runs looks and reads what it prints.
func looksJSON(t *testing.T, args ...string) []lookGeometry {
	t.Helper()
	got := call(t.Context(), append([]string{"looks", "--json"}, args...)...)
	require.Equal(t, exitDone, got.code, got.errOut)
	var all []lookGeometry
	require.NoError(t, json.Unmarshal([]byte(got.out), &all), got.out)
	return all
}

// TestLooksAgainstTables: look angle and slant range for published incidences.
// Source: TX-GS-DD-3302, TerraSAR-X Image Product Guide's basic product
// specification, issue 1.7, 2010, table 2-6: incidence 19.7, 45.5 and 55.2 degrees
// for looks of 18.2, 41.3 and 49.5 from 514.8 km over a sphere of 6371 km; slant
// ranges by the law of sines there.
func TestLooksAgainstTables(t *testing.T) {
	// The geocentric radius of the ellipsoid is 6371 km at this latitude.
	const lat = 35.27
	altitude := 6371 + 514.8 - 6378.137
	for _, c := range []struct{ incidence, look, slant float64 }{{19.7, 18.2, 544.30}, {45.5, 41.3, 708.09}, {55.2, 49.5, 842.38}} {
		l := looksJSON(t, "--at", fmt.Sprintf("10/%v", lat), "--look",
			fmt.Sprintf("kind=orbit,incidence=%v,altitude_km=%v,heading=0,side=right", c.incidence, altitude))[0]
		require.Len(t, l.Spots, 1)
		s := l.Spots[0]
		assert.InDelta(t, c.incidence, *s.Incidence, 1e-3)
		// The table rounds both angles to 0.1 degrees. Looking along the parallel,
		// the tilt of the ellipsoid's normal does not count.
		const angle = 0.1
		assert.InDelta(t, c.look, *s.LookAngle, angle)
		assert.InDelta(t, c.slant*1e3, *s.SlantRange, c.slant*1e3*math.Tan(c.incidence*math.Pi/180)*angle*math.Pi/180)
		assert.InDelta(t, 0, math.Remainder(*l.Heading, 360), 1e-3)
		assert.True(t, s.Seen)
		assert.Nil(t, s.Spacing)
		assert.Nil(t, l.Reach)
	}
}

// TestLooksFixed: the plane wave's own rules over a hill of known relief.
func TestLooksFixed(t *testing.T) {
	name := hill(t, t.TempDir(), 60, 80) // 500 to 800 m, cells of 25 m
	l := looksJSON(t, "--dem", name, "--look", "incidence=35,azimuth=90,slant_range_km=700,bandwidth_mhz=100")[0]
	tan, sin, cos := math.Tan(35*math.Pi/180), math.Sin(35*math.Pi/180), math.Cos(35*math.Pi/180)
	require.NotNil(t, l.Reach)
	relief := l.Reach.Relief
	assert.InDelta(t, 300, relief, 1)
	assert.InDelta(t, relief*tan, *l.Reach.Shadow, 0.1)
	assert.InDelta(t, relief/tan, *l.Reach.Towards, 0.1)
	assert.InDelta(t, relief/tan, *l.Reach.FarSide, 0.1)
	assert.InDelta(t, relief*tan+relief/tan, *l.Reach.NearSide, 0.2)
	require.Len(t, l.Spots, 3)
	near, centre, far := l.Spots[0], l.Spots[1], l.Spots[2]
	assert.Less(t, near.Lon, centre.Lon)
	assert.Less(t, centre.Lon, far.Lon)
	// From edge to edge 79 cells of 25 m, at one height; the map's scale in UTM
	// is within 4e-4 of the ground's.
	assert.InDelta(t, near.Height, far.Height, 2)
	assert.InDelta(t, 79*25*sin, *far.SlantRange-*near.SlantRange, 79*25*sin*5e-4+2)
	assert.InDelta(t, 700e3-centre.Height*cos, *centre.SlantRange, 0.02+12.5)
	// c / 2B / sin(i), IEEE Std 686-2017.
	assert.InDelta(t, 299792458/2e8/sin, *centre.Spacing, 1e-3)
	assert.Nil(t, centre.LookAngle)
}

// sphereRange is the distance from an antenna to a point at a central angle and a
// height, on a sphere: the law of cosines.
func sphereRange(antenna, angle, height float64) float64 {
	a, b := geometry.SemiMajor+antenna, geometry.SemiMajor+height
	return math.Sqrt(a*a + b*b - 2*a*b*math.Cos(angle))
}

// TestReachOfTripod: all ground up to the radar can matter, as far as the farthest
// corner of the DEM; away from it, what sinks by the relief at an equal slant range:
// at most the relief and the antenna, right under it.
func TestReachOfTripod(t *testing.T) {
	const rows, cols, cell = 60, 80, 25. // of hill
	name := hill(t, t.TempDir(), rows, cols)
	centre := looksJSON(t, "--dem", name, "--look", "incidence=35,azimuth=90")[0].Spots[1]
	position := fmt.Sprintf("%v/%v", centre.Lon, centre.Lat)
	l := looksJSON(t, "--dem", name, "--look", "kind=tripod,antenna=5,position="+position)[0]
	require.NotNil(t, l.Reach)
	corner := math.Hypot((rows-1)/2.*cell, (cols-1)/2.*cell)
	// Map metres are true to 1 part in 1000, half a cell is what the centre's
	// rounding to 1e-5 degrees and more may take.
	assert.InDelta(t, corner, *l.Reach.NearSide, corner*1e-3+cell/2)
	assert.Greater(t, *l.Reach.FarSide, 0.)
	assert.LessOrEqual(t, *l.Reach.FarSide, l.Reach.Relief+5)
	shown := call(t.Context(), "looks", "--dem", name, "--look", "kind=tripod,antenna=5,position="+position)
	require.Equal(t, exitDone, shown.code, shown.errOut)
	assert.Contains(t, shown.out, "DEM needed  all between the radar and the area")
}

// TestReachOnASphere: the reach of layover against bisection on a sphere, for
// altitudes from an aircraft to an orbit, and that of shadow at least as long as
// the exact one.
func TestReachOnASphere(t *testing.T) {
	const relief = 1900.0
	for _, altitude := range []float64{5e3, 12e3, 620e3, 2000e3} {
		for _, i := range []float64{20, 35, 50, 70} {
			sin := math.Sin(i * math.Pi / 180)
			look := math.Asin(sin * geometry.SemiMajor / (geometry.SemiMajor + altitude))
			angle := i*math.Pi/180 - look
			var v geometry.View
			v.SlantRange, v.Incidence = sphereRange(altitude, angle, 0), geometry.Angle(i)*geometry.Degree
			o := &geometryOf{platform: standIn{}}
			r := o.reach(&v, relief)
			solve := func(from, to, height, want float64) float64 {
				lo, hi := from, to
				rising := sphereRange(altitude, to, height) > sphereRange(altitude, from, height)
				for range 80 {
					mid := (lo + hi) / 2
					if (sphereRange(altitude, mid, height) < want) == rising {
						lo = mid
					} else {
						hi = mid
					}
				}
				return (lo + hi) / 2
			}
			// The plane under the antenna is flat, the sphere is not: over reaches
			// of d its drop d^2 / 2R is counted twice by half, below a hundredth.
			const tolerance = 0.01
			away := (solve(angle, angle+0.1, relief, v.SlantRange) - angle) * geometry.SemiMajor
			assert.InEpsilon(t, away, r.away, tolerance, "altitude %v, incidence %v", altitude, i)
			if sphereRange(altitude, 0, -relief) < v.SlantRange {
				towards := (angle - solve(0, angle, -relief, v.SlantRange)) * geometry.SemiMajor
				assert.InEpsilon(t, towards, r.towards, tolerance, "altitude %v, incidence %v", altitude, i)
			}
			// The ray from the point rises by s cot(i) + s^2 / 2R over the sphere.
			lo, hi := 0.0, relief*math.Tan(i*math.Pi/180)
			exact := 0.0
			for range 60 {
				exact = (lo + hi) / 2
				if exact/math.Tan(i*math.Pi/180)+exact*exact/(2*geometry.SemiMajor) < relief {
					lo = exact
				} else {
					hi = exact
				}
			}
			assert.GreaterOrEqual(t, r.shadow, min(exact, v.SlantRange*sin)-1e-6)
		}
	}
}

// standIn is a platform that is never asked.
type standIn struct{ geometry.Platform }

// oemOfOrbit writes the track of an orbit over a place as an ephemeris whose
// zero is 2030-01-01T05:00:00 UTC.
func oemOfOrbit(t *testing.T, dir string, look geometry.Look, at geometry.Place) string {
	t.Helper()
	p, err := geometry.NewPlatform(look, geometry.Site{Centre: at})
	require.NoError(t, err)
	epoch := func(s float64) string {
		return time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC).Add(time.Duration(s * 1e9)).Format("2006-01-02T15:04:05.000")
	}
	var b strings.Builder
	fmt.Fprintf(&b, "CCSDS_OEM_VERS = 2.0\nCREATION_DATE = 2029-12-01T00:00:00\nORIGINATOR = PLANNER\n\nMETA_START\nOBJECT_NAME = TALLOW\n"+
		"OBJECT_ID = 2030-001A\nCENTER_NAME = EARTH\nREF_FRAME = ITRF2014\nTIME_SYSTEM = UTC\nSTART_TIME = %s\nSTOP_TIME = %s\n"+
		"INTERPOLATION = HERMITE\nINTERPOLATION_DEGREE = 7\nMETA_STOP\n", epoch(-400), epoch(400))
	for s := -400.0; s <= 400; s += 10 {
		pos, vel := p.State(s)
		fmt.Fprintf(&b, "%s %.9f %.9f %.9f %.12f %.12f %.12f\n", epoch(s), pos.X/1e3, pos.Y/1e3, pos.Z/1e3, vel.X/1e3, vel.Y/1e3, vel.Z/1e3)
	}
	name := filepath.Join(dir, "track.oem")
	require.NoError(t, os.WriteFile(name, []byte(b.String()), 0o600))
	return name
}

const testOrbit = "incidence=38,altitude_km=620,inclination=97.9,pass=descending,side=right"

// TestLooksEphemeris: the ephemeris of an orbit has the orbit's geometry, the
// epoch of the pass, and its local mean solar time, an hour for 15 degrees.
func TestLooksEphemeris(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 60, 80)
	orbit := looksJSON(t, "--dem", name, "--look", "kind=orbit,"+testOrbit)[0]
	at := orbit.Spots[1]
	place := geometry.Place{Lon: geometry.Angle(at.Lon) * geometry.Degree, Lat: geometry.Angle(at.Lat) * geometry.Degree}
	oem := oemOfOrbit(t, dir, oneLook(t, "kind=orbit,"+testOrbit), place)
	track := looksJSON(t, "--dem", name, "--look", "kind=ephemeris,side=right,oem="+oem)[0]
	require.Len(t, track.Spots, 3)
	for i, s := range track.Spots {
		assert.InDelta(t, *orbit.Spots[i].Incidence, *s.Incidence, 0.005, s.Place)
		assert.InDelta(t, *orbit.Spots[i].Azimuth, *s.Azimuth, 0.005, s.Place)
		assert.InDelta(t, *orbit.Spots[i].LookAngle, *s.LookAngle, 0.005, s.Place)
		assert.InDelta(t, *orbit.Spots[i].SlantRange, *s.SlantRange, 0.05, s.Place)
	}
	assert.InDelta(t, *orbit.Heading, *track.Heading, 0.005)
	assert.Empty(t, orbit.UTC)
	utc, err := time.Parse("2006-01-02T15:04:05.000Z", track.UTC)
	require.NoError(t, err)
	// The track is abreast of the centre at 0 on the ellipsoid; at the hill's
	// height the range plane is the same to a fraction of a second.
	assert.InDelta(t, 0, utc.Sub(time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC)).Seconds(), 0.1)
	assert.Equal(t, utc.Add(time.Duration(at.Lon/15*3600*1e9)).Format(time.TimeOnly), track.Local)

	far := call(t.Context(), "looks", "--at", "-100/46", "--look", "kind=ephemeris,side=right,oem="+oem)
	assert.Equal(t, exitInput, far.code)
	assert.Contains(t, far.errOut, "does not pass")
	assert.Regexp(t, `\d km`, far.errOut)
}

// TestLooksMiss: a line that ends short of the place says by how much: half a
// degree of a meridian around 46.25 N, 55.57 km (Snyder 1987, table of lengths of
// a degree: 111.15 km).
func TestLooksMiss(t *testing.T) {
	l := looksJSON(t, "--at", "10.02/46", "--look", "kind=flight,start=10/46.5,end=10/46.6,height=5000,side=right")[0]
	assert.False(t, l.Spots[0].Seen)
	assert.Contains(t, l.Spots[0].Why, "by 55.6 km")
	// 20 degrees off, the known track never comes abreast.
	l = looksJSON(t, "--at", "10.02/26", "--look", "kind=flight,start=10/46.5,end=10/46.6,height=5000,side=right")[0]
	assert.Contains(t, l.Spots[0].Why, "does not come abreast of it, by 2")
	got := call(t.Context(), "looks", "--at", "9.9/46.55", "--look", "kind=flight,start=10/46.5,end=10/46.6,height=5000,side=right")
	assert.Equal(t, exitDone, got.code)
	assert.Contains(t, got.out, "place: not seen, on the other side of the track")
}

// TestLayersOfEveryKind: layers and inspect take what the marching serves, and the
// catalogue entry has the fields of each kind: an orbit state for satellites only,
// angles at the centre of the scene, and the time of an ephemeris.
func TestLayersOfEveryKind(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 60, 80)
	at := looksJSON(t, "--dem", name, "--look", "incidence=38,azimuth=90")[0].Spots[1]
	place := geometry.Place{Lon: geometry.Angle(at.Lon) * geometry.Degree, Lat: geometry.Angle(at.Lat) * geometry.Degree}
	oem := oemOfOrbit(t, dir, oneLook(t, "kind=orbit,"+testOrbit), place)
	looks := map[string]string{
		"orbit":     "name=orbit,kind=orbit," + testOrbit,
		"ephemeris": "name=ephemeris,kind=ephemeris,side=right,oem=" + oem,
		"flight": fmt.Sprintf("name=flight,kind=flight,start=%.4f/%.4f,end=%.4f/%.4f,height_above_ground=4000,side=right",
			at.Lon-0.06, at.Lat-0.05, at.Lon-0.06, at.Lat+0.05),
	}
	for kind, look := range looks {
		t.Run(kind, func(t *testing.T) {
			if kind == "flight" {
				look = strings.Replace(look, "height_above_ground=4000", "height=5000", 1) // west of the hill's DEM
			}
			out := filepath.Join(dir, kind)
			got := call(t.Context(), "layers", name, "--look", look, "--out", out, "--only", "verdict,incidence,slant-range")
			require.Equal(t, exitDone, got.code, got.errOut)
			text, err := os.ReadFile(filepath.Join(out, kind, itemName))
			require.NoError(t, err)
			var item struct {
				Properties map[string]any
				Extensions []string `json:"stac_extensions"`
			}
			require.NoError(t, json.Unmarshal(text, &item))
			shown := looksJSON(t, "--dem", name, "--look", look)[0]
			centre := shown.Spots[1]
			p := item.Properties
			assert.InDelta(t, *centre.Incidence, p["view:incidence_angle"], 1e-3)
			assert.InDelta(t, *centre.Azimuth, p["view:azimuth"], 1e-3)
			assert.InDelta(t, *centre.LookAngle, p["view:off_nadir"], 1e-3)
			assert.Equal(t, "right", p["sar:observation_direction"])
			if kind == "flight" {
				assert.NotContains(t, p, "sat:orbit_state")
				assert.NotContains(t, strings.Join(item.Extensions, " "), "/sat/")
			} else {
				assert.Equal(t, "descending", p["sat:orbit_state"])
				assert.Contains(t, strings.Join(item.Extensions, " "), "/sat/")
			}
			if kind == "ephemeris" {
				assert.Equal(t, "2030-01-01T0", p["datetime"].(string)[:12])
				assert.NotEqual(t, p["datetime"], p["created"])
			}
			got = call(t.Context(), "inspect", name, "--look", look, "--json")
			require.Equal(t, exitDone, got.code, got.errOut)
			var i struct{ Reach []reachRow }
			require.NoError(t, json.Unmarshal([]byte(got.out), &i))
			require.Len(t, i.Reach, 1)
			assert.InDelta(t, *shown.Reach.Shadow, *i.Reach[0].Shadow, 0.1)
			assert.InDelta(t, max(*shown.Reach.Towards, *shown.Reach.Away), *i.Reach[0].Layover, 0.1)
		})
	}
}

// TestGeoidOnTheCommandLine: the undulation shows in the facts and in the slant
// range of a look, shorter by it times the cosine of the incidence.
func TestGeoidOnTheCommandLine(t *testing.T) {
	name := hill(t, t.TempDir(), 60, 80)
	const look = "incidence=39,azimuth=90,slant_range_km=800"
	plain := looksJSON(t, "--dem", name, "--look", look)[0]
	raised := looksJSON(t, "--dem", name, "--look", look, "--geoid", "/usr/share/proj/egm96_15.gtx")[0]
	n := raised.Spots[1].Height - plain.Spots[1].Height
	// EGM96 heights by PROJ; the DEM is float32 and the output has millimetres.
	cmd := exec.Command("gdaltransform", "-s_srs", "EPSG:4326+5773", "-t_srs", "EPSG:4979")
	cmd.Stdin = strings.NewReader(fmt.Sprintf("%v %v 0\n", plain.Spots[1].Lon, plain.Spots[1].Lat))
	want, err := cmd.Output()
	require.NoError(t, err)
	fields := strings.Fields(string(want))
	require.Len(t, fields, 3)
	undulation, err := strconv.ParseFloat(fields[2], 64)
	require.NoError(t, err)
	assert.InDelta(t, undulation, n, 2e-3)
	assert.InDelta(t, -n*math.Cos(39*math.Pi/180), *raised.Spots[1].SlantRange-*plain.Spots[1].SlantRange, 0.03)
	assert.NotEmpty(t, plain.Warnings)
	assert.Empty(t, raised.Warnings)
	got := call(t.Context(), "inspect", name, "--geoid", "/usr/share/proj/egm96_15.gtx")
	assert.Contains(t, got.out, "made ellipsoidal by /usr/share/proj/egm96_15.gtx: +4")
	out := filepath.Join(t.TempDir(), "out")
	got = call(t.Context(), "layers", name, "--look", "name=a,"+look, "--geoid", "/usr/share/proj/egm96_15.gtx", "--only", "slant-range", "--out", out)
	require.Equal(t, exitDone, got.code, got.errOut)
	text, err := exec.Command("gdalinfo", filepath.Join(out, "a", "slant-range.tif")).Output()
	require.NoError(t, err)
	assert.Contains(t, string(text), "heights=made ellipsoidal by /usr/share/proj/egm96_15.gtx")
	got = call(t.Context(), "inspect", name, "--height-offset", "-12.5")
	assert.Contains(t, got.out, "made ellipsoidal by the given offset: -12.50 to -12.50 m")
}
