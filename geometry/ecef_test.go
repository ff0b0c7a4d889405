package geometry

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// dms returns degrees, minutes and seconds as an Angle.
func dms(d, m, s float64) Angle {
	if math.Signbit(d) {
		return Angle(d-m/60-s/3600) * Degree
	}
	return Angle(d+m/60+s/3600) * Degree
}

func place(lon, lat float64) Place { return Place{Angle(lon) * Degree, Angle(lat) * Degree} }

func TestECEF(t *testing.T) {
	rows := []struct {
		name string
		at   Geodetic
		want ECEF
		tol  float64
	}{
		// EPSG Guidance Note 7-2, geographic/geocentric worked example (from
		// memory); PROJ 9.1 cs2cs gives 3771793.9676, 140253.3419, 5124304.3494.
		{"north sea", Geodetic{Place{dms(2, 7, 46.380), dms(53, 48, 33.820)}, 73}, ECEF{3771793.968, 140253.342, 5124304.349}, 1e-3},
		// Semi-axes of WGS84: 6378137 and 6356752.3142 m, TR8350.2 (from memory).
		{"equator", Geodetic{place(0, 0), 0}, ECEF{6378137, 0, 0}, 1e-9},
		{"east", Geodetic{place(90, 0), 100}, ECEF{0, 6378237, 0}, 1e-9},
		{"pole", Geodetic{place(0, 90), 0}, ECEF{0, 0, 6356752.3142}, 1e-4},
		// PROJ 9.1 cs2cs, longlat to geocent on WGS84.
		{"proj 10.5 0", Geodetic{place(10.5, 0), 2500}, ECEF{6273792.643634, 1162778.736670, 0.000000}, 2e-6},
		{"proj -71.25 46", Geodetic{place(-71.25, 46), 4000}, ECEF{1427544.404082, -4205410.204197, 4568124.900034}, 2e-6},
		{"proj 25.75 70", Geodetic{place(25.75, 70), 1234.5}, ECEF{1971042.877764, 950718.223930, 5972200.057659}, 2e-6},
		{"proj 120.125 -46", Geodetic{place(120.125, -46), 0}, ECEF{-2227540.413103, 3838847.361994, -4565247.540833}, 2e-6},
		{"proj 179.9 88.5", Geodetic{place(179.9, 88.5), -50}, ECEF{-167519.880721, 292.377645, 6354509.358073}, 2e-6},
		{"south pole", Geodetic{place(0, -90), -50}, ECEF{0, 0, -6356702.3142}, 1e-4},
	}
	for _, r := range rows {
		t.Run(r.name, func(t *testing.T) {
			p := r.at.ECEF()
			assert.InDelta(t, r.want.X, p.X, r.tol)
			assert.InDelta(t, r.want.Y, p.Y, r.tol)
			assert.InDelta(t, r.want.Z, p.Z, r.tol)
			back := p.Geodetic()
			assert.InDelta(t, float64(r.at.Lat), float64(back.Lat), 1e-13)
			assert.InDelta(t, r.at.Height, back.Height, 1e-8)
		})
	}
}

// There and back again, from the sea floor to beyond the geostationary ring.
func TestGeodeticRoundTrip(t *testing.T) {
	const seed = 31
	t.Logf("seed %d", seed)
	rnd := rand.New(rand.NewPCG(seed, 1))
	for range 20000 {
		h := []float64{-5e3, 0, 1e3, 9e3, 5e5, 8e5, 4e7, 1e8}[rnd.IntN(8)] * rnd.Float64()
		g := Geodetic{place(360*rnd.Float64()-180, 180*rnd.Float64()-90), h}
		back := g.ECEF().Geodetic()
		require.InDelta(t, float64(g.Lat), float64(back.Lat), 1e-13, "%+v", g)
		require.InDelta(t, float64(g.Lon), float64(back.Lon), 1e-13, "%+v", g)
		require.InDelta(t, g.Height, back.Height, 1e-8*max(1, h/1e7), "%+v", g)
		up, _ := ellipsoidUp(g.ECEF())
		f := newFrame(g)
		require.InDelta(t, 0, up.Sub(f.up).Norm(), 1e-14*10)
	}
}

// The local frame is right-handed; a step east, north or up from the point
// moves its longitude, latitude or height and nothing else.
func TestLocalFrame(t *testing.T) {
	for _, lat := range []float64{-70, -46, 0, 30, 88} {
		g := Geodetic{place(11, lat), 1200}
		f := newFrame(g)
		assert.InDelta(t, 0, f.east.Cross(f.north).Sub(f.up).Norm(), 1e-15)
		for i, v := range []ENU{{1, 0, 0}, {0, 1, 0}, {0, 0, 1}} {
			q := g.ECEF().Add(g.FromENU(v)).Geodetic()
			// The tangent leaves the ellipsoid's ring by 1/2N or 1/2M metres.
			assert.InDelta(t, v.Up, q.Height-g.Height, 1e-6, "%d", i)
			assert.InDelta(t, v.North, float64(q.Lat-g.Lat)*(MeridianRadius(g.Lat)+1200), 1e-5)
			assert.InDelta(t, v.East, float64(q.Lon-g.Lon)*(PrimeVerticalRadius(g.Lat)+1200)*g.Lat.Cos(), 1e-5)
		}
		v := ENU{3, -4, 12}
		assert.InDelta(t, 0, math.Abs(g.ToENU(g.FromENU(v)).East-3)+math.Abs(g.ToENU(g.FromENU(v)).North+4), 1e-12)
	}
}

// MeridianRadius and PrimeVerticalRadius are the derivatives of position.
func TestRadii(t *testing.T) {
	for _, lat := range []float64{0, 30, 45, 70, 89} {
		const d = 1e-4 // radian; the third-order term is d^2/6
		a := Geodetic{Place{0, Angle(lat)*Degree - d}, 0}.ECEF()
		b := Geodetic{Place{0, Angle(lat)*Degree + d}, 0}.ECEF()
		assert.InDelta(t, 1, b.Sub(a).Norm()/(2*d)/MeridianRadius(Angle(lat)*Degree), 1e-8)
		c := Geodetic{Place{d, Angle(lat) * Degree}, 0}.ECEF()
		e := Geodetic{Place{-d, Angle(lat) * Degree}, 0}.ECEF()
		ring := PrimeVerticalRadius(Angle(lat)*Degree) * (Angle(lat) * Degree).Cos()
		assert.InDelta(t, 1, c.Sub(e).Norm()/(2*d)/ring, 1e-8)
	}
}
