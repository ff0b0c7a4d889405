package geometry

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func tripodLook(lon, lat float64) Look {
	l := NewLook()
	l.Name, l.Kind, l.Position, l.Antenna = "mast", Tripod, place(lon, lat), 2.5
	return l
}

func flatGround(h float64) Site { return Site{Ground: func(Place) float64 { return h }} }

func TestTripodAgainstDenseSolution(t *testing.T) {
	const seed = 12
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	var worst differences
	for _, lat := range []float64{0, 46, 70, -46} {
		p, err := NewPlatform(tripodLook(10.5, lat), flatGround(1800))
		require.NoError(t, err)
		antenna, east, north, nadir := densePoint(10.5, lat, 1802.5)
		for range 50 {
			lon := 10.5 + 0.1*rnd.NormFloat64()/math.Cos(lat*math.Pi/180)
			b, h := lat+0.1*rnd.NormFloat64(), 4000*rnd.Float64()
			about := fmt.Sprintf("%g/%g %g", lon, b, h)
			q, qe, qn, up := densePoint(lon, b, h)
			d := antenna.minus(q)
			want := dense{
				t:     math.Mod(math.Atan2(-d.dot(east), -d.dot(north))+2*math.Pi, 2*math.Pi),
				slant: d.length(), incidence: d.angle(up), look: d.angle(nadir),
				azimuth: math.Mod(math.Atan2(-d.dot(qe), -d.dot(qn))*180/math.Pi+360, 360),
				los:     vec{d.dot(qe), d.dot(qn), d.dot(up)}.times(1 / d.length()),
			}
			got, seen := p.View(Geodetic{place(lon, b), h})
			require.Equal(t, InView, seen)
			worst.require(t, want, got, 1e-9, about)
			// Travel is level at the antenna, at right angles to the line of
			// sight and to its left.
			assert.InDelta(t, 0, got.Travel.Dot(got.LineOfSight), 1e-9)
			s := got.Sight()
			assert.InDelta(t, 1, s.Across.Dot(got.Travel.Unit()), 1e-9)
			pos, vel := p.State(got.T)
			assert.InDelta(t, 0, vec{pos.X, pos.Y, pos.Z}.minus(antenna).length(), 1e-6)
			assert.InDelta(t, 0, vel.Dot(ECEF{nadir[0], nadir[1], nadir[2]}), 1e-12)
		}
	}
	t.Logf("largest differences: %s", &worst)
}

func TestTripodSeen(t *testing.T) {
	look := tripodLook(10.5, 46)
	look.SectorFrom, look.SectorTo, look.MinRange, look.MaxRange = 300*Degree, 40*Degree, 50, 4000
	p, err := NewPlatform(look, flatGround(0))
	require.NoError(t, err)
	at := func(azimuth, distance float64) (View, Seen) {
		to, _ := Direct(look.Position, Angle(azimuth)*Degree, distance)
		return p.View(Geodetic{to, 0})
	}
	rows := []struct {
		azimuth, distance float64
		want              Seen
	}{
		{0, 1000, InView}, {359.99, 1000, InView}, {300.01, 1000, InView}, {39.99, 1000, InView}, {299.99, 1000, OutsideSector},
		{40.01, 1000, OutsideSector}, {180, 1000, OutsideSector}, {10, 49, OutsideRange}, {10, 51, InView}, {10, 3999, InView}, {10, 4001, OutsideRange},
	}
	for _, r := range rows {
		v, seen := at(r.azimuth, r.distance)
		assert.Equal(t, r.want, seen, "%+v", r)
		assert.InDelta(t, 0, math.Remainder(Angle(v.T).Degrees()-r.azimuth, 360), 1e-5, "%+v", r)
	}
	// A place of NaN has no plane.
	v, seen := p.View(Geodetic{Place{NotGiven, NotGiven}, 0})
	assert.Equal(t, OutsideRange, seen)
	assert.True(t, math.IsNaN(v.SlantRange))
	from, to := p.Span()
	assert.Equal(t, [2]float64{0, 2 * math.Pi}, [2]float64{from, to})
	_, ok := p.Time(0)
	assert.False(t, ok)
	// All around when no sector is given.
	look.SectorFrom, look.SectorTo = NotGiven, NotGiven
	p, err = NewPlatform(look, flatGround(0))
	require.NoError(t, err)
	_, seen = at(180, 1000)
	assert.Equal(t, InView, seen)
}

func TestTripodRefused(t *testing.T) {
	rows := []struct {
		edit func(*Look)
		site Site
		want string
	}{
		{func(l *Look) { l.Position = Place{NotGiven, NotGiven} }, flatGround(0), "position=LON/LAT"},
		{func(l *Look) { l.Antenna = -1 }, flatGround(0), "antenna -1 m"},
		{func(l *Look) { l.Antenna = math.NaN() }, flatGround(0), "antenna NaN m"},
		{func(*Look) {}, flatGround(math.NaN()), "position 10.5/46 lies outside the DEM or on a hole"},
		{func(*Look) {}, Site{}, "position 10.5/46 lies outside"},
		{func(l *Look) { l.MinRange, l.MaxRange = 500, 400 }, flatGround(0), "min_range 500 m is not below max_range 400 m"},
	}
	for _, r := range rows {
		l := tripodLook(10.5, 46)
		r.edit(&l)
		p, err := NewPlatform(l, r.site)
		require.Error(t, err)
		assert.Nil(t, p)
		assert.Contains(t, err.Error(), `look "mast": `)
		assert.Contains(t, err.Error(), r.want)
	}
}
