package geometry

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// kepler is an unperturbed orbit; angles in degrees. The earth turns by
// 7.2921159e-5 rad/s under it, Greenwich at the x axis at time 0.
type kepler struct{ a, e, inclination, node, perigee, anomaly float64 }

// at returns the earth-fixed position at a time in seconds: Kepler's equation
// by bisection, then the rotations by perigee, inclination, node and earth.
// Source: Bate, Mueller & White, Fundamentals of Astrodynamics, 1971 (from
// memory).
func (k kepler) at(t float64) vec {
	mean := k.anomaly*math.Pi/180 + math.Sqrt(3.986004418e14/math.Pow(k.a, 3))*t
	lo, hi := mean-1, mean+1
	for range 60 {
		if mid := (lo + hi) / 2; mid-k.e*math.Sin(mid) < mean {
			lo = mid
		} else {
			hi = mid
		}
	}
	e := (lo + hi) / 2
	p := vec{k.a * (math.Cos(e) - k.e), k.a * math.Sqrt(1-k.e*k.e) * math.Sin(e), 0}
	p = p.rotate(denseAxis, k.perigee*math.Pi/180).rotate(vec{1, 0, 0}, k.inclination*math.Pi/180)
	return p.rotate(denseAxis, k.node*math.Pi/180-7.2921159e-5*t)
}

// velocity is the derivative by Richardson's extrapolation of differences.
func (k kepler) velocity(t float64) vec {
	d := func(h float64) vec { return k.at(t + h).minus(k.at(t - h)).times(1 / (2 * h)) }
	return d(0.5).times(4.0 / 3).minus(d(1).times(1.0 / 3))
}

// oemText writes a message by hand, with nanometres.
func oemText(k kepler, from, to, step float64, extra ...string) string {
	var b strings.Builder
	epoch := func(t float64) string {
		return time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC).Add(time.Duration(math.Round(t * 1e9))).Format("2006-01-02T15:04:05.000")
	}
	fmt.Fprintf(&b, "CCSDS_OEM_VERS = 2.0\nCOMMENT an invented track\nCREATION_DATE = 2030-01-01T00:00:00\nORIGINATOR = PLANNER\n\n")
	fmt.Fprintf(&b, "META_START\nOBJECT_NAME = TALLOW\nOBJECT_ID = 2030-001A\nCENTER_NAME = EARTH\nREF_FRAME = ITRF2014\nTIME_SYSTEM = UTC\n")
	fmt.Fprintf(&b, "START_TIME = %s\nSTOP_TIME = %s\n", epoch(from), epoch(to))
	for _, line := range extra {
		fmt.Fprintln(&b, line)
	}
	fmt.Fprintf(&b, "META_STOP\n")
	for t := from; t <= to+step/2; t += step {
		p, v := k.at(t).times(1e-3), k.velocity(t).times(1e-3)
		fmt.Fprintf(&b, "%s %.12f %.12f %.12f %.15f %.15f %.15f\n", epoch(t), p[0], p[1], p[2], v[0], v[1], v[2])
	}
	return b.String()
}

func ephemerisLook(side Side) Look {
	l := NewLook()
	l.Name, l.Kind, l.Side, l.OEM = "track", Ephemeris, side, "track.oem"
	return l
}

// below returns the longitude and latitude under a track at a time, moved
// across it by an angle in degrees to the right.
func below(k kepler, t, right float64) (lon, lat float64) {
	p, v := k.at(t), k.velocity(t)
	q := p.rotate(v, right*math.Pi/180)
	return math.Atan2(q[1], q[0]) * 180 / math.Pi, math.Asin(q[2]/q.length()) * 180 / math.Pi
}

func TestEphemerisAgainstDenseSolution(t *testing.T) {
	const seed = 2030
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	orbits := []struct {
		name string
		kepler
	}{
		{"circular", kepler{7000e3, 0, 97.9, 20, 0, 0}},
		{"elliptic", kepler{7078e3, 0.001, 98.2, 200, 70, 300}},
		{"eccentric", kepler{7500e3, 0.06, 63, 120, 30, 10}},
	}
	methods := []struct {
		name string
		step float64
		keys []string
	}{
		{"hermite", 30, []string{"INTERPOLATION = HERMITE", "INTERPOLATION_DEGREE = 7"}},
		{"lagrange", 30, []string{"INTERPOLATION = LAGRANGE", "INTERPOLATION_DEGREE = 9"}},
		{"unsaid", 60, nil},
		{"lagrange 27", 60, []string{"INTERPOLATION = LAGRANGE", "INTERPOLATION_DEGREE = 27"}},
		{"hermite 27", 60, []string{"INTERPOLATION = HERMITE", "INTERPOLATION_DEGREE = 27"}},
		// A straight line sags by (n step)^2 r / 8: 0.09 mm in 10 ms.
		{"linear", 0.01, []string{"INTERPOLATION = LINEAR"}},
	}
	for _, orbit := range orbits {
		name, k := orbit.name, orbit.kepler
		for _, m := range methods {
			if m.name == "linear" && name != "circular" {
				continue // thousands of states: once is enough
			}
			var worst differences
			for _, side := range []Side{Left, Right} {
				// Times at the equator, near 46 and near 70 degrees or the
				// orbit's own turning point, on both passes.
				for _, target := range []float64{0, 46, 70} {
					for _, rising := range []bool{true, false} {
						if m.name == "linear" && target != 46 {
							continue
						}
						zero := timeOver(k, target, rising)
						about := fmt.Sprintf("%s %s %s over %g rising %v", name, m.name, side, target, rising)
						right := 4.0
						if side == Left {
							right = -4
						}
						from, to := math.Round(zero)-900, math.Round(zero)+900
						if m.name == "linear" {
							from, to = math.Round(zero)-10, math.Round(zero)+10
						}
						lon, lat := below(k, zero, right)
						oem, err := ReadOEM(strings.NewReader(oemText(k, from, to, m.step, m.keys...)), "track.oem")
						require.NoError(t, err, about)
						p, err := oem.Platform(ephemerisLook(side), Site{Centre: place(lon, lat)})
						require.NoError(t, err, about)
						centre := solveDense(k.at, lon, lat, 0, zero-60, zero+60, 0.05)
						utc, ok := p.Time(0)
						require.True(t, ok)
						wantUTC := time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC).Add(time.Duration(centre.t * 1e9))
						require.InDelta(t, 0, utc.Sub(wantUTC).Seconds(), 1e-5, about)
						for range 2 {
							spread := 0.5
							if m.name == "linear" {
								spread = 0.03
							}
							x, y, h := lon+spread*rnd.NormFloat64(), lat+spread*rnd.NormFloat64(), 4000*rnd.Float64()
							want := solveDense(k.at, x, y, h, zero-100, zero+100, 0.05)
							got, seen := p.View(Geodetic{place(x, y), h})
							require.Equal(t, InView, seen, about)
							got.T += centre.t
							worst.require(t, want, got, 1e-5, about)
						}
					}
				}
			}
			t.Logf("%s, %s every %g s, largest differences: %s", name, m.name, m.step, &worst)
		}
	}
}

// timeOver returns a time within a revolution at which the orbit crosses a
// latitude, at most a degree short of its turning point.
func timeOver(k kepler, lat float64, rising bool) float64 {
	top := k.inclination
	if top > 90 {
		top = 180 - top
	}
	lat = min(lat, top-1)
	z := func(t float64) float64 { p := k.at(t); return math.Asin(p[2]/p.length())*180/math.Pi - lat }
	for t := 0.0; ; t += 20 {
		if a, b := z(t), z(t+20); (a < 0 && b >= 0 && rising) || (a >= 0 && b < 0 && !rising) {
			return t + 20*a/(a-b)
		}
	}
}

// The pass is chosen, and where there is none the error says by how much.
func TestEphemerisPasses(t *testing.T) {
	k := kepler{7000e3, 0, 97.9, 20, 0, 0}
	zero := timeOver(k, 46, true)
	text := oemText(k, 0, 12000, 60) // two revolutions
	lon, lat := below(k, zero, 4)
	oem, err := ReadOEM(strings.NewReader(text), "track.oem")
	require.NoError(t, err)

	p, err := oem.Platform(ephemerisLook(Right), Site{Centre: place(lon, lat)})
	require.NoError(t, err)
	utc, _ := p.Time(0)
	assert.InDelta(t, zero, utc.Sub(time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC)).Seconds(), 30)
	from, to := p.Span()
	assert.InDelta(t, -600, from, 61)
	assert.InDelta(t, 600, to, 61)
	_, seen := p.View(Geodetic{place(lon, lat+60), 0})
	assert.Equal(t, OutsideSegment, seen)

	_, err = oem.Platform(ephemerisLook(Left), Site{Centre: place(lon, lat)})
	assert.ErrorContains(t, err, "track.oem: the track passes the DEM centre on the other side only, nearest at 2030-01-01T0")
	assert.ErrorContains(t, err, "the look is to the left: change side")

	far, farLat := below(k, zero, 70) // the second revolution is nearer
	_, err = oem.Platform(ephemerisLook(Right), Site{Centre: place(far, farLat)})
	require.ErrorContains(t, err, "the track does not pass the DEM: nearest at ")
	var away, under float64
	_, scanErr := fmt.Sscanf(err.Error()[strings.Index(err.Error(), "its foot is"):], "its foot is %f km away and the antenna %f degrees", &away, &under)
	require.NoError(t, scanErr)
	nearest, below90 := math.Inf(1), 0.0
	for at := 0.0; at < 12000; at += 5 { // over the sphere of the geocentric directions
		q, _, _, up := densePoint(far, farLat, 0)
		s := k.at(at)
		if d := s.angle(q) * math.Pi / 180 * 6378.137; d < nearest {
			nearest, below90 = d, s.minus(q).angle(up)-90
		}
	}
	assert.InDelta(t, nearest, away, 10)
	assert.InDelta(t, below90, under, 0.2)

	// Cut 300 s before the pass: it ends so much short of abreast.
	oem, err = ReadOEM(strings.NewReader(oemText(k, zero-1200, zero-300, 60)), "track.oem")
	require.NoError(t, err)
	_, err = oem.Platform(ephemerisLook(Right), Site{Centre: place(lon, lat)})
	require.ErrorContains(t, err, "does not pass the DEM inside its useable times: it comes nearest")
	_, scanErr = fmt.Sscanf(err.Error()[strings.Index(err.Error(), "still"):], "still %f km", &away)
	require.NoError(t, scanErr)
	q, _, _, _ := densePoint(lon, lat, 0)
	v := k.velocity(zero - 300)
	assert.InDelta(t, q.minus(k.at(zero-300)).dot(v)/v.length()/1e3, away, 10)

	// The useable times count, not the states.
	epoch := func(t float64) string {
		return time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC).Add(time.Duration(t * 1e9)).Format("2006-01-02T15:04:05.000")
	}
	oem, err = ReadOEM(strings.NewReader(oemText(k, zero-1200, zero+1200, 60, "USEABLE_STOP_TIME = "+epoch(zero-100))), "track.oem")
	require.NoError(t, err)
	_, err = oem.Platform(ephemerisLook(Right), Site{Centre: place(lon, lat)})
	assert.ErrorContains(t, err, "inside its useable times")
	oem, err = ReadOEM(strings.NewReader(oemText(k, zero-1200, zero+1200, 60, "USEABLE_STOP_TIME = "+epoch(zero+10))), "track.oem")
	require.NoError(t, err)
	p, err = oem.Platform(ephemerisLook(Right), Site{Centre: place(lon, lat)})
	require.NoError(t, err)
	_, seen = p.View(Geodetic{place(lon, lat-1), 0})
	assert.Equal(t, InView, seen)
	_, seen = p.View(Geodetic{place(lon, lat+1), 0}) // 16 s later
	assert.Equal(t, OutsideSegment, seen)

	_, err = oem.Platform(ephemerisLook(Right), Site{Centre: Place{NotGiven, NotGiven}})
	assert.ErrorContains(t, err, "DEM centre")
}

// An orbit look and an ephemeris look of the same orbit give the same views.
func TestEphemerisOfOrbit(t *testing.T) {
	look := NewLook()
	look.Kind, look.Side, look.Incidence, look.Altitude, look.Heading = Orbit, Right, 38*Degree, 620e3, 347*Degree
	site := Site{Centre: place(10.5, 46.2)}
	o, err := NewPlatform(look, site)
	require.NoError(t, err)
	var b strings.Builder
	b.WriteString("CCSDS_OEM_VERS = 3.0\nCREATION_DATE = 2030-001T00:00:00Z\nORIGINATOR = PLANNER\nMETA_START\nOBJECT_NAME = TALLOW\nOBJECT_ID = 2030-001A\nCENTER_NAME = EARTH\nREF_FRAME = ITRF-97\nTIME_SYSTEM = GPS\nSTART_TIME = 2030-060T00:00:00\nSTOP_TIME = 2030-060T00:10:00\nMETA_STOP\n")
	for s := 0.0; s <= 600; s += 20 {
		p, v := o.State(s - 300)
		fmt.Fprintf(&b, "2030-060T00:%02.0f:%06.3f %.9f %.9f %.9f %.12f %.12f %.12f 0 0 0\n", math.Floor(s/60), math.Mod(s, 60), p.X/1e3, p.Y/1e3, p.Z/1e3, v.X/1e3, v.Y/1e3, v.Z/1e3)
	}
	path := filepath.Join(t.TempDir(), "track.oem")
	require.NoError(t, os.WriteFile(path, []byte(b.String()), 0o600))
	l := ephemerisLook(Right)
	l.OEM = path
	e, err := NewPlatform(l, site)
	require.NoError(t, err)
	utc, ok := e.Time(0)
	require.True(t, ok)
	// GPS time is ahead of UTC by the leap seconds since 1980, 18 in number
	// since 2017 (IERS Bulletin C 52, from memory).
	assert.InDelta(t, 0, utc.Sub(time.Date(2030, 3, 1, 0, 4, 42, 0, time.UTC)).Seconds(), 1e-4)
	for _, q := range []Geodetic{{place(10.5, 46.2), 0}, {place(12, 45), 3000}, {place(9, 47.5), 500}} {
		a, _ := o.View(q)
		c, seen := e.View(q)
		assert.Equal(t, InView, seen)
		assert.InDelta(t, a.SlantRange, c.SlantRange, 1e-3)
		assert.InDelta(t, a.Incidence.Degrees(), c.Incidence.Degrees(), 1e-7)
		assert.InDelta(t, a.T, c.T, 1e-4)
	}
	l.OEM = path + ".none"
	_, err = NewPlatform(l, site)
	assert.ErrorContains(t, err, `look "track": oem: open `)
}

func TestLocalTime(t *testing.T) {
	utc := time.Date(2030, 6, 1, 23, 30, 0, 0, time.UTC)
	assert.Equal(t, time.Date(2030, 6, 2, 0, 12, 0, 0, time.UTC), LocalTime(utc, 10.5*Degree).Round(time.Microsecond))
	assert.Equal(t, time.Date(2030, 6, 1, 15, 30, 0, 0, time.UTC), LocalTime(utc, -120*Degree).Round(time.Microsecond))
}

func BenchmarkView(b *testing.B) {
	site := Site{Centre: place(10.5, 46), Ground: func(Place) float64 { return 1800 }}
	orbit := NewLook()
	orbit.Kind, orbit.Side, orbit.Incidence, orbit.Altitude, orbit.Heading = Orbit, Right, 38*Degree, 620e3, 347*Degree
	k := kepler{7000e3, 0, 97.9, 20, 0, 0}
	zero := timeOver(k, 46, true)
	lon, lat := below(k, zero, 4)
	hermite, err := ReadOEM(strings.NewReader(oemText(k, 0, 6000, 30)), "track.oem")
	require.NoError(b, err)
	lagrange, err := ReadOEM(strings.NewReader(oemText(k, 0, 6000, 30, "INTERPOLATION = LAGRANGE", "INTERPOLATION_DEGREE = 9")), "track.oem")
	require.NoError(b, err)
	platform := func(p Platform, err error) Platform {
		require.NoError(b, err)
		return p
	}
	rows := []struct {
		name     string
		p        Platform
		lon, lat float64
	}{
		{"orbit", platform(NewPlatform(orbit, site)), 10.5, 46},
		{"ephemeris-hermite-7", platform(hermite.Platform(ephemerisLook(Right), Site{Centre: place(lon, lat)})), lon, lat},
		{"ephemeris-lagrange-9", platform(lagrange.Platform(ephemerisLook(Right), Site{Centre: place(lon, lat)})), lon, lat},
		{"flight", platform(NewPlatform(flightLook(10.4, 45.9, 10.6, 46.1, 6000, Right), Site{})), 10.52, 45.98},
		{"tripod", platform(NewPlatform(tripodLook(10.5, 46), site)), 10.52, 46.02},
	}
	for _, r := range rows {
		b.Run(r.name, func(b *testing.B) {
			sum, i := 0.0, 0
			for b.Loop() {
				v, _ := r.p.View(Geodetic{place(r.lon+float64(i%100)*1e-3, r.lat-float64(i%37)*1e-3), 500})
				sum += v.SlantRange
				i++
			}
			sink = sum
		})
	}
}
