package geometry

import "math"

// ECEF is a point or a vector in earth-centred, earth-fixed coordinates of
// WGS84, metres: X towards latitude 0 and longitude 0, Z towards the north
// pole.
type ECEF struct{ X, Y, Z float64 }

// Add returns a + b.
func (a ECEF) Add(b ECEF) ECEF { return ECEF{a.X + b.X, a.Y + b.Y, a.Z + b.Z} }

// Sub returns a - b.
func (a ECEF) Sub(b ECEF) ECEF { return ECEF{a.X - b.X, a.Y - b.Y, a.Z - b.Z} }

// Scale returns k a.
func (a ECEF) Scale(k float64) ECEF { return ECEF{k * a.X, k * a.Y, k * a.Z} }

// Dot returns the scalar product, unfused like ENU.Dot.
func (a ECEF) Dot(b ECEF) float64 {
	return float64(a.X*b.X) + float64(a.Y*b.Y) + float64(a.Z*b.Z)
}

// Cross returns the vector product, unfused like ENU.Cross.
func (a ECEF) Cross(b ECEF) ECEF {
	return ECEF{
		float64(a.Y*b.Z) - float64(a.Z*b.Y),
		float64(a.Z*b.X) - float64(a.X*b.Z),
		float64(a.X*b.Y) - float64(a.Y*b.X),
	}
}

// Norm returns the length.
func (a ECEF) Norm() float64 { return math.Sqrt(a.Dot(a)) }

// Geodetic is a point by its place on the WGS84 ellipsoid and its height above
// it, metres.
type Geodetic struct {
	Place
	Height float64
}

// ECEF returns the point in earth-centred coordinates:
//
//	X = (N + h) cos lat cos lon
//	Y = (N + h) cos lat sin lon
//	Z = (N (1 - e2) + h) sin lat
//
// Source: EPSG Guidance Note 7-2, section on geographic/geocentric conversions
// (from memory).
func (g Geodetic) ECEF() ECEF {
	f := newFrame(g)
	return f.origin
}

// frame is the local frame of a point: its position and the unit vectors east,
// north and up in earth-centred coordinates.
type frame struct{ origin, east, north, up ECEF }

func newFrame(g Geodetic) frame {
	sinLat, cosLat := math.Sincos(float64(g.Lat))
	sinLon, cosLon := math.Sincos(float64(g.Lon))
	n := SemiMajor / math.Sqrt(1-eccentricity2*sinLat*sinLat)
	ring := (n + g.Height) * cosLat
	return frame{
		origin: ECEF{ring * cosLon, ring * sinLon, (n*(1-eccentricity2) + g.Height) * sinLat},
		east:   ECEF{-sinLon, cosLon, 0},
		north:  ECEF{-sinLat * cosLon, -sinLat * sinLon, cosLat},
		up:     ECEF{cosLat * cosLon, cosLat * sinLon, sinLat},
	}
}

// local resolves a vector along east, north and up.
func (f *frame) local(v ECEF) ENU { return ENU{v.Dot(f.east), v.Dot(f.north), v.Dot(f.up)} }

// global puts a vector together from east, north and up.
func (f *frame) global(v ENU) ECEF {
	return f.east.Scale(v.East).Add(f.north.Scale(v.North)).Add(f.up.Scale(v.Up))
}

// ToENU resolves an earth-centred vector (a difference of points or a
// velocity) along east, north and up at the point.
func (g Geodetic) ToENU(v ECEF) ENU {
	f := newFrame(g)
	return f.local(v)
}

// FromENU is the inverse of ToENU.
func (g Geodetic) FromENU(v ENU) ECEF {
	f := newFrame(g)
	return f.global(v)
}

// ellipsoidUp returns the outward unit normal of the ellipsoid under a point
// and its distance from the axis, by Bowring's formula without trigonometry:
//
//	tan beta = (Z / rho) (1 - f) (1 + e'2 b / r)
//	tan lat  = (Z + e'2 b sin3 beta) / (rho - e2 a cos3 beta)
//
// A second round, with beta from tan beta = (1 - f) tan lat, brings the error
// under 1e-14 radian from 5 km below the ellipsoid to 100,000 km above it.
// Source: Bowring, Survey Review 28(218), 1985, 202-206 (from memory).
func ellipsoidUp(p ECEF) (up ECEF, rho float64) {
	const (
		b       = SemiMajor * (1 - Flattening)
		second2 = eccentricity2 / (1 - eccentricity2) // e'2
	)
	rho2 := p.X*p.X + p.Y*p.Y
	rho = math.Sqrt(rho2)
	// Tangents are kept as sine and cosine, scaled, so that the poles need no
	// special case.
	s, c := p.Z*(1-Flattening)*(1+second2*b/math.Sqrt(rho2+p.Z*p.Z)), rho
	for range 2 {
		l := 1 / math.Sqrt(s*s+c*c)
		s, c = s*l, c*l
		s, c = (p.Z+second2*b*s*s*s)*(1-Flattening), rho-eccentricity2*SemiMajor*c*c*c
	}
	s /= 1 - Flattening
	l := 1 / math.Sqrt(s*s+c*c)
	s, c = s*l, c*l
	if rho == 0 {
		return ECEF{c, 0, s}, 0
	}
	return ECEF{c * p.X / rho, c * p.Y / rho, s}, rho
}

// Geodetic returns the place and height of a point that lies no deeper than
// 5 km and no higher than 100,000 km; longitude in (-180, 180] degrees, 0 on
// the axis. Place within 1e-13 radian, height within 1e-8 m.
func (p ECEF) Geodetic() Geodetic {
	up, rho := ellipsoidUp(p)
	c := math.Sqrt(up.X*up.X + up.Y*up.Y)
	// h = rho cos lat + Z sin lat - a sqrt(1 - e2 sin2 lat) is steady at all
	// latitudes; Bowring 1985, eq. 7 (from memory).
	h := rho*c + p.Z*up.Z - SemiMajor*math.Sqrt(1-eccentricity2*up.Z*up.Z)
	return Geodetic{Place{Angle(math.Atan2(p.Y, p.X)), Angle(math.Atan2(up.Z, c))}, h}
}
