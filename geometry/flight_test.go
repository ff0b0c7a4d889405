package geometry

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func flightLook(startLon, startLat, endLon, endLat, height float64, side Side) Look {
	l := NewLook()
	l.Name, l.Kind, l.Side, l.Height = "line", Flight, side, height
	l.Start, l.End = place(startLon, startLat), place(endLon, endLat)
	return l
}

// denseGeodesic integrates the equations of the geodesic by Runge and Kutta's
// fourth-order method in steps of about 2 km, and returns the positions:
//
//	dlat/ds = cos a / M, dlon/ds = sin a / (N cos lat), da/ds = tan lat sin a / N
//
// Source: Rapp, Geometric Geodesy I, 1991 (from memory).
func denseGeodesic(lon, lat, azimuth, s float64) (lon2, lat2 float64) {
	y := vec{lon * math.Pi / 180, lat * math.Pi / 180, azimuth * math.Pi / 180}
	slope := func(y vec) vec {
		w := 1 - denseE2*math.Pow(math.Sin(y[1]), 2)
		m, n := denseA*(1-denseE2)/math.Pow(w, 1.5), denseA/math.Sqrt(w)
		return vec{math.Sin(y[2]) / (n * math.Cos(y[1])), math.Cos(y[2]) / m, math.Tan(y[1]) * math.Sin(y[2]) / n}
	}
	n := int(math.Abs(s)/2000) + 1
	h := s / float64(n)
	for range n {
		a := slope(y)
		b := slope(y.plus(a.times(h / 2)))
		c := slope(y.plus(b.times(h / 2)))
		d := slope(y.plus(c.times(h)))
		y = y.plus(a.plus(b.times(2)).plus(c.times(2)).plus(d).times(h / 6))
	}
	return y[0] * 180 / math.Pi, y[1] * 180 / math.Pi
}

// shoot finds the azimuth and length of the dense geodesic between two places
// by Newton's method with difference quotients.
func shoot(t *testing.T, lon, lat, lon2, lat2 float64) (azimuth, length float64) {
	azimuth = math.Atan2((lon2-lon)*math.Cos((lat+lat2)/2*math.Pi/180), lat2-lat) * 180 / math.Pi
	length = math.Hypot((lon2-lon)*math.Cos((lat+lat2)/2*math.Pi/180), lat2-lat) * 111e3
	for range 8 {
		x, y := denseGeodesic(lon, lat, azimuth, length)
		xa, ya := denseGeodesic(lon, lat, azimuth+1e-4, length)
		xs, ys := denseGeodesic(lon, lat, azimuth, length+1)
		det := (xa-x)*(ys-y) - (xs-x)*(ya-y)
		azimuth += 1e-4 * ((lon2-x)*(ys-y) - (xs-x)*(lat2-y)) / det
		length += ((xa-x)*(lat2-y) - (lon2-x)*(ya-y)) / det
	}
	x, y := denseGeodesic(lon, lat, azimuth, length)
	require.InDelta(t, lon2, x, 1e-10)
	require.InDelta(t, lat2, y, 1e-10)
	return azimuth, length
}

func TestFlightAgainstDenseSolution(t *testing.T) {
	const seed = 77
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	var worst differences
	for _, lat := range []float64{0, 46, 70, -46} {
		for _, leg := range [][2]float64{{0.6, 0.02}, {-0.4, 0.3}, {0.01, -0.5}} {
			for _, side := range []Side{Left, Right} {
				about := fmt.Sprintf("lat %g leg %v %s", lat, leg, side)
				lon2, lat2 := 10.4+leg[0], lat+leg[1]
				p, err := NewPlatform(flightLook(10.4, lat, lon2, lat2, 6200, side), Site{})
				require.NoError(t, err, about)
				azimuth, length := shoot(t, 10.4, lat, lon2, lat2)
				track := func(s float64) vec {
					x, y := denseGeodesic(10.4, lat, azimuth, s)
					q, _, _, _ := densePoint(x, y, 6200)
					return q
				}
				pos, _ := p.State(length)
				require.InDelta(t, 0, vec{pos.X, pos.Y, pos.Z}.minus(track(length)).length(), 1e-3, about)
				for range 5 {
					s := length * (0.05 + 0.9*rnd.Float64())
					x, y := denseGeodesic(10.4, lat, azimuth, s)
					off := 3e3 + 20e3*rnd.Float64()
					if rnd.IntN(2) == 0 {
						off = -off
					}
					lon := x + off*math.Cos(azimuth*math.Pi/180)/111e3/math.Cos(y*math.Pi/180)
					b := y - off*math.Sin(azimuth*math.Pi/180)/111e3
					h := 3000 * rnd.Float64()
					want := solveDense(track, lon, b, h, s-3e3, s+3e3, 5)
					got, seen := p.View(Geodetic{place(lon, b), h})
					require.Equal(t, (want.right > 0) == (side == Right), seen == InView, about)
					worst.require(t, want, got, 2e-3, about)
				}
			}
		}
	}
	t.Logf("largest differences: %s", &worst)
}

// The track between its samples, over the whole line, is the geodesic at that
// height: position within the bound at flightStep, velocity along it.
func TestFlightTrack(t *testing.T) {
	look := flightLook(-30, 50, -2, 71, 11000, Left)
	p, err := NewPlatform(look, Site{})
	require.NoError(t, err)
	l, err := lineOf(look)
	require.NoError(t, err)
	l.height = 11000
	from, to := p.Span()
	assert.Less(t, from, -190e3)
	assert.Greater(t, to, l.length+190e3)
	for i := range 1000 {
		s := from + (to-from)*float64(i)/999
		want := l.at(s)
		pos, vel := p.State(s)
		require.InDelta(t, 0, pos.Sub(want.pos).Norm(), 1e-4) // Vincenty's own error included
		require.InDelta(t, 0, vel.Sub(want.vel).Norm(), 1e-8)
		require.InDelta(t, 11000, pos.Geodetic().Height, 1e-4)
	}
}

func TestFlightHeights(t *testing.T) {
	ridge := func(p Place) float64 { // 1000 m, with a ridge of 3000 m at 10.5 east; nothing east of 10.55
		switch lon := p.Lon.Degrees(); {
		case lon > 10.55:
			return math.NaN()
		case math.Abs(lon-10.5) < 0.005:
			return 3000
		}
		return 1000
	}
	site := Site{Ground: ridge, Step: 100}
	look := flightLook(10.4, 46, 10.6, 46, math.NaN(), Right)
	look.HeightAboveGround = 1500
	p, err := NewPlatform(look, site)
	require.NoError(t, err)
	pos, vel := p.State(0)
	assert.InDelta(t, 4500, pos.Geodetic().Height, 1e-5)
	assert.InDelta(t, 90, Heading(pos, vel).Degrees(), 0.1)

	refused := func(edit func(*Look), s Site, want ...string) {
		t.Helper()
		l := flightLook(10.4, 46, 10.6, 46, 5000, Right)
		edit(&l)
		p, err := NewPlatform(l, s)
		require.Error(t, err)
		assert.Nil(t, p)
		for _, w := range append(want, `look "line": `) {
			assert.Contains(t, err.Error(), w)
		}
	}
	refused(func(l *Look) { l.Height = 2900 }, site, "height 2900 m", "3000.0 m at 10.49", "km from the start")
	refused(func(l *Look) { l.Height = math.NaN() }, site, "neither height nor")
	refused(func(l *Look) { l.Height, l.HeightAboveGround = math.NaN(), 1500 }, Site{}, "the DEM has none there")
	refused(func(l *Look) { l.Height, l.HeightAboveGround = math.NaN(), -1 }, site, "neither height nor")
	refused(func(l *Look) { l.End = l.Start }, site, "the same place")
	refused(func(l *Look) { l.End = place(100, 20) }, site, "the most is 3000 km")
	refused(func(l *Look) { l.Start, l.End = place(0, 0), place(179.7, 0.1) }, site, "almost opposite")
	refused(func(l *Look) { l.Start = Place{NotGiven, NotGiven} }, site, "start and end")
	refused(func(l *Look) { l.Side = "" }, site, "neither left nor right")
}

func TestFlightSeen(t *testing.T) {
	look := flightLook(10.4, 46, 10.6, 46, 6000, Right) // eastward, looks south
	look.NearIncidence, look.FarIncidence = 30*Degree, 60*Degree
	p, err := NewPlatform(look, Site{})
	require.NoError(t, err)
	rows := []struct {
		lon, lat float64
		want     Seen
	}{
		{10.5, 45.95, InView}, {10.5, 46.05, WrongSide}, {10.5, 45.99, OutsideSwath}, {10.5, 45.8, OutsideSwath},
		{10.39, 45.95, OutsideSegment}, {10.61, 45.95, OutsideSegment}, {20, 45.95, OutsideSegment},
	}
	for _, r := range rows {
		v, seen := p.View(Geodetic{place(r.lon, r.lat), 0})
		assert.Equal(t, r.want, seen, "%+v", r)
		// The geometry goes on for a while beyond the ends.
		assert.Equal(t, r.lon > 15, math.IsNaN(v.SlantRange), "%+v", r)
	}
	// A summit above the line is seen from below.
	v, seen := p.View(Geodetic{place(10.5, 45.9), 7000})
	assert.Equal(t, OutsideSwath, seen)
	assert.Greater(t, v.Incidence.Degrees(), 90.0)
	at, ok := p.ZeroDoppler(Geodetic{place(10.5, 45.95), 0}.ECEF())
	assert.True(t, ok)
	assert.InDelta(t, v.T, at, 100)
}
