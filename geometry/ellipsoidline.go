package geometry

import (
	"errors"
	"math"
)

// spheroid is an ellipsoid of revolution by semi-major axis and flattening.
type spheroid struct{ a, f float64 }

var wgs84 = spheroid{SemiMajor, Flattening}

// errAntipodal is returned where the inverse problem does not settle.
var errAntipodal = errors.New("the two places are almost opposite each other on the earth, and no single shortest line joins them")

// Inverse returns the geodesic from one place to another on WGS84: its length
// in metres and its azimuths at both ends, in the direction of travel. Two
// equal places give 0, 0, 0. Places within about half a degree of being
// antipodal give an error. Error below 0.1 mm. Source: Vincenty, Survey Review
// 23(176), 1975, 88-93, eqs. 3 to 21 (from memory).
func Inverse(from, to Place) (length float64, start, end Angle, err error) {
	return wgs84.inverse(from, to)
}

// Direct returns the place at a distance in metres along the geodesic that
// leaves a place at an azimuth on WGS84, and the azimuth there. Error below
// 0.1 mm for lines up to 10,000 km. Source as Inverse.
func Direct(from Place, azimuth Angle, distance float64) (to Place, arrival Angle) {
	return wgs84.direct(from, azimuth, distance)
}

// vincentySettled is the change of arc or longitude, in radians, at which the
// iterations stop: 6 micrometres on the ground.
const vincentySettled = 1e-12

// series returns A and B of eqs. 3 and 4 for u2 = cos2 alpha e'2, and C of eq.
// 10 for cos2 alpha.
func (e spheroid) series(cos2 float64) (a, b, c float64) {
	u2 := cos2 * e.f * (2 - e.f) / ((1 - e.f) * (1 - e.f))
	a = 1 + u2/16384*(4096+u2*(-768+u2*(320-175*u2)))
	b = u2 / 1024 * (256 + u2*(-128+u2*(74-47*u2)))
	c = e.f / 16 * cos2 * (4 + e.f*(4-3*cos2))
	return a, b, c
}

// arcCorrection is eq. 6: the difference between the spherical and the
// ellipsoidal arc.
func arcCorrection(b, sinS, cosS, mid float64) float64 {
	return b * sinS * (mid + b/4*(cosS*(2*mid*mid-1)-b/6*mid*(4*sinS*sinS-3)*(4*mid*mid-3)))
}

// reduced returns sine and cosine of the reduced latitude.
func (e spheroid) reduced(lat Angle) (sin, cos float64) {
	sin, cos = math.Sincos(float64(lat))
	sin *= 1 - e.f
	l := math.Hypot(sin, cos)
	return sin / l, cos / l
}

func (e spheroid) inverse(from, to Place) (length float64, start, end Angle, err error) {
	sin1, cos1 := e.reduced(from.Lat)
	sin2, cos2 := e.reduced(to.Lat)
	lon := math.Remainder(float64(to.Lon-from.Lon), 2*math.Pi)
	lambda := lon
	for range 100 {
		sinL, cosL := math.Sincos(lambda)
		x, y := cos2*sinL, cos1*sin2-sin1*cos2*cosL
		sinS := math.Hypot(x, y)
		if sinS == 0 {
			return 0, 0, 0, nil
		}
		cosS := sin1*sin2 + cos1*cos2*cosL
		sigma := math.Atan2(sinS, cosS)
		sinA := cos1 * cos2 * sinL / sinS
		cosA2 := 1 - sinA*sinA
		mid := 0.0 // cos 2 sigma_m; the equatorial line has no terms in it
		if cosA2 > 1e-15 {
			mid = cosS - 2*sin1*sin2/cosA2
		}
		a, b, c := e.series(cosA2)
		next := lon + (1-c)*e.f*sinA*(sigma+c*sinS*(mid+c*cosS*(2*mid*mid-1)))
		if math.Abs(next-lambda) > vincentySettled {
			lambda = next
			if math.Abs(lambda) > math.Pi {
				return 0, 0, 0, errAntipodal
			}
			continue
		}
		length = e.a * (1 - e.f) * a * (sigma - arcCorrection(b, sinS, cosS, mid))
		start = Angle(math.Atan2(x, y)).Turn()
		end = Angle(math.Atan2(cos1*sinL, cos1*sin2*cosL-sin1*cos2)).Turn()
		return length, start, end, nil
	}
	return 0, 0, 0, errAntipodal
}

func (e spheroid) direct(from Place, azimuth Angle, distance float64) (Place, Angle) {
	sinA1, cosA1 := math.Sincos(float64(azimuth))
	sinU, cosU := e.reduced(from.Lat)
	sigma1 := math.Atan2(sinU, cosU*cosA1)
	sinA := cosU * sinA1
	a, b, c := e.series(1 - sinA*sinA)
	plain := distance / (e.a * (1 - e.f) * a)
	sigma := plain
	var sinS, cosS, mid float64
	for range 100 {
		mid = math.Cos(2*sigma1 + sigma)
		sinS, cosS = math.Sincos(sigma)
		next := plain + arcCorrection(b, sinS, cosS, mid)
		settled := math.Abs(next-sigma) <= vincentySettled
		sigma = next
		if settled {
			break
		}
	}
	mid = math.Cos(2*sigma1 + sigma)
	sinS, cosS = math.Sincos(sigma)
	q := sinU*sinS - cosU*cosS*cosA1
	lat := math.Atan2(sinU*cosS+cosU*sinS*cosA1, (1-e.f)*math.Hypot(sinA, q))
	lambda := math.Atan2(sinS*sinA1, cosU*cosS-sinU*sinS*cosA1)
	lon := lambda - (1-c)*e.f*sinA*(sigma+c*sinS*(mid+c*cosS*(2*mid*mid-1)))
	to := Place{Angle(math.Remainder(float64(from.Lon)+lon, 2*math.Pi)), Angle(lat)}
	return to, Angle(math.Atan2(sinA, -q)).Turn()
}
