package geometry

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// The lines of Vincenty 1975, table II, and the worked example of the
// Geocentric Datum of Australia Technical Manual, Flinders Peak to Buninyong
// (both from memory). Half a unit of the last printed place, 0.00001" or 1 mm,
// and for the antipodal lines Vincenty's own 0.5 mm.
func TestGeodesicPublished(t *testing.T) {
	bessel := spheroid{6377397.155, 1 / 299.1528128}
	international := spheroid{6378388, 1.0 / 297}
	grs80 := spheroid{6378137, 1 / 298.257222101}
	rows := []struct {
		name       string
		e          spheroid
		lat1, a1   Angle
		lat2, lon  Angle
		a2         Angle
		s          float64
		arcSeconds float64
	}{
		{"a", bessel, dms(55, 45, 0), dms(96, 36, 8.79960), dms(-33, 26, 0), dms(108, 13, 0), dms(137, 52, 22.01454), 14110526.170, 2e-5},
		{"b", international, dms(37, 19, 54.95367), dms(95, 27, 59.63089), dms(26, 7, 42.83946), dms(41, 28, 35.50729), dms(118, 5, 58.96161), 4085966.703, 2e-5},
		{"c", international, dms(35, 16, 11.24862), dms(15, 44, 23.74850), dms(67, 22, 14.77638), dms(137, 47, 28.31435), dms(144, 55, 39.92147), 8084823.839, 2e-5},
		{"flinders", grs80, dms(-37, 57, 3.72030), dms(306, 52, 5.37), dms(-37, 39, 10.15610), dms(143, 55, 35.38390) - dms(144, 25, 29.52440), dms(307, 10, 25.07), 54972.271, 6e-3},
	}
	second := float64(Degree) / 3600
	for _, r := range rows {
		t.Run(r.name, func(t *testing.T) {
			from, to := Place{0, r.lat1}, Place{r.lon, r.lat2}
			s, a1, a2, err := r.e.inverse(from, to)
			require.NoError(t, err)
			assert.InDelta(t, r.s, s, 1e-3)
			assert.InDelta(t, 0, float64(a1-r.a1)/second, r.arcSeconds)
			assert.InDelta(t, 0, float64(a2-r.a2)/second, r.arcSeconds)
			got, end := r.e.direct(from, a1, s)
			assert.InDelta(t, 0, float64(got.Lat-r.lat2)/second, 2e-5)
			assert.InDelta(t, 0, float64(got.Lon-r.lon)/second, 2e-5)
			assert.InDelta(t, 0, float64(end-r.a2)/second, r.arcSeconds)
		})
	}
}

// PROJ 9.1 geod, +ellps=WGS84, -I -F "%.4f": an independent solution
// (Karney's).
func TestGeodesicAgainstPROJ(t *testing.T) {
	rows := []struct{ lat1, lon1, lat2, lon2, a1, a2, s float64 }{
		{46, 7.5, 46.3, 8.1, 54.052295847, 54.484992803, 57100.54031},
		{0, 10, 0.5, 10.2, 21.933892685, 21.934765356, 59601.49192},
		{70, 20, 69.5, 24, 107.958412193, 111.711395971, 164294.08377},
		{-33.2, 151, -34.9, 138.6, 257.202224239, 264.164687428, 1159533.21678},
		{10, -60, 55, 20, 35.677460162, 87.733273804, 8465041.88520},
		{88, 10, 87, -120, 329.650303412, 199.690438151, 508311.96420},
	}
	for _, r := range rows {
		s, a1, a2, err := Inverse(place(r.lon1, r.lat1), place(r.lon2, r.lat2))
		require.NoError(t, err)
		assert.InDelta(t, r.s, s, 1.5e-4, "%+v", r)
		assert.InDelta(t, 0, math.Remainder(r.a1-a1.Degrees(), 360), 1e-7, "%+v", r)
		assert.InDelta(t, 0, math.Remainder(r.a2-a2.Degrees(), 360), 1e-7, "%+v", r)
	}
}

func TestGeodesicSpecial(t *testing.T) {
	s, _, _, err := Inverse(place(8, 46), place(8, 46))
	require.NoError(t, err)
	assert.Zero(t, s)
	_, _, _, err = Inverse(place(0, 0), place(179.7, 0.1))
	assert.ErrorIs(t, err, errAntipodal)
	// A quarter of the equator is a circle.
	s, a1, a2, err := Inverse(place(-10, 0), place(80, 0))
	require.NoError(t, err)
	assert.InDelta(t, SemiMajor*math.Pi/2, s, 1e-4)
	assert.InDelta(t, 90, a1.Degrees(), 1e-12)
	assert.InDelta(t, 90, a2.Degrees(), 1e-12)
	// Across the antimeridian the short way.
	s, _, _, err = Inverse(place(179.9, 0), place(-179.9, 0))
	require.NoError(t, err)
	assert.InDelta(t, SemiMajor*0.2*math.Pi/180, s, 1e-4)
	const seed = 5
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 9))
	for range 2000 {
		from := place(360*rnd.Float64()-180, 176*rnd.Float64()-88)
		a, d := Angle(rnd.Float64()*360)*Degree, 3e6*rnd.Float64()
		to, end := Direct(from, a, d)
		s, a1, a2, err := Inverse(from, to)
		require.NoError(t, err)
		require.InDelta(t, d, s, 1e-4)
		// An azimuth is only as sure as 0.1 mm across the line's length.
		tol := 1e-10 + 1e-4/max(d, 1)
		require.InDelta(t, 0, math.Remainder(float64(a1-a), 2*math.Pi), tol)
		require.InDelta(t, 0, math.Remainder(float64(a2-end), 2*math.Pi), 10*tol)
	}
}
