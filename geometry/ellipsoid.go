package geometry

import "math"

// WGS84 defining values: semi-major axis in metres and flattening.
// Source: NIMA TR8350.2, third edition, 2000, table 3.1 (from memory).
const (
	SemiMajor  = 6378137.0
	Flattening = 1 / 298.257223563
)

// eccentricity2 is the first eccentricity squared, e2 = f (2 - f).
const eccentricity2 = Flattening * (2 - Flattening)

// MeridianRadius returns the ellipsoid's radius of curvature along the
// meridian at a latitude, metres:
//
//	M = a (1 - e2) / (1 - e2 sin2(lat))^(3/2)
//
// Source: Snyder, Map Projections: A Working Manual, USGS Professional Paper
// 1395, 1987, eq. 4-18 (from memory).
func MeridianRadius(lat Angle) float64 {
	s := lat.Sin()
	w := 1 - eccentricity2*s*s
	return SemiMajor * (1 - eccentricity2) / (w * math.Sqrt(w))
}

// PrimeVerticalRadius returns the radius of curvature across the meridian at
// a latitude, metres:
//
//	N = a / sqrt(1 - e2 sin2(lat))
//
// Source: Snyder 1987, eq. 4-20 (from memory).
func PrimeVerticalRadius(lat Angle) float64 {
	s := lat.Sin()
	return SemiMajor / math.Sqrt(1-eccentricity2*s*s)
}
