package geometry

import "math"

// This file holds the quantities of a single ground point. Everything follows
// from three orthonormal vectors of the line of sight (Sight) and from the
// terrain normal's components along them (Facet), so that an inner loop spends
// nine multiplications a cell and at most one square root and one arctangent
// a layer.

// ENU is a vector in the local frame at a ground point: east, north, up.
type ENU struct{ East, North, Up float64 }

// Dot returns the scalar product. The explicit conversions keep the compiler
// from fusing, so that signs do not differ between machines.
func (a ENU) Dot(b ENU) float64 {
	return float64(a.East*b.East) + float64(a.North*b.North) + float64(a.Up*b.Up)
}

// Cross returns the vector product, unfused as in Dot.
func (a ENU) Cross(b ENU) ENU {
	return ENU{
		float64(a.North*b.Up) - float64(a.Up*b.North),
		float64(a.Up*b.East) - float64(a.East*b.Up),
		float64(a.East*b.North) - float64(a.North*b.East),
	}
}

// Unit returns the vector scaled to length 1, NaN for the zero vector.
func (a ENU) Unit() ENU {
	l := math.Sqrt(a.Dot(a))
	return ENU{a.East / l, a.North / l, a.Up / l}
}

// LineOfSight returns the unit vector from the ground to the antenna for an
// incidence and a look azimuth:
//
//	u = (-sin th sin k, -sin th cos k, cos th)
//
// Source: resolution of a unit vector along east, north and up; common
// practice.
func LineOfSight(incidence, azimuth Angle) ENU {
	sin, cos := math.Sincos(float64(incidence))
	sinK, cosK := math.Sincos(float64(azimuth))
	return ENU{-sin * sinK, -sin * cosK, cos}
}

// Incidence returns the ellipsoidal incidence of a line of sight, [0, 180]
// degrees.
func (a ENU) Incidence() Angle {
	return Angle(math.Atan2(math.Hypot(a.East, a.North), a.Up))
}

// LookAzimuth returns the azimuth from the antenna to the ground of a line of
// sight, [0, 360) degrees; 0 where it is vertical.
func (a ENU) LookAzimuth() Angle {
	if a.East == 0 && a.North == 0 {
		return 0
	}
	return Angle(turned(math.Atan2(-a.East, -a.North)))
}

// turned brings an angle in (-2 pi, 2 pi), radians, into [0, 2 pi).
func turned(a float64) float64 {
	if a < 0 {
		a += 2 * math.Pi
		if a >= 2*math.Pi { // a tiny negative angle rounds up to a full turn
			return 0
		}
	}
	return a
}

// Sight is how a radar sees one ground point: a right-handed orthonormal frame
// in which Along and Above span the range plane.
type Sight struct {
	// Along is the line of sight, from the ground to the antenna.
	Along ENU
	// Above lies in the range plane at right angles to Along, upward.
	Above ENU
	// Across is the normal of the range plane. Seen along the look azimuth it
	// points to the left: the direction of travel of a right-looking platform.
	Across ENU
}

// NewSight returns the sight of an incidence above 0 and a look azimuth, with
// a vertical range plane.
func NewSight(incidence, azimuth Angle) Sight {
	sin, cos := math.Sincos(float64(incidence))
	sinK, cosK := math.Sincos(float64(azimuth))
	return Sight{
		Along:  ENU{-sin * sinK, -sin * cosK, cos},
		Above:  ENU{cos * sinK, cos * cosK, sin},
		Across: ENU{-cosK, sinK, 0},
	}
}

// SightAlong returns the sight of a unit line of sight, with a vertical range
// plane. A vertical line of sight has no such plane and gives NaN.
func SightAlong(los ENU) Sight {
	h := math.Sqrt(float64(los.East*los.East) + float64(los.North*los.North))
	e, n := los.East/h, los.North/h // horizontal direction to the radar
	return Sight{
		Along:  los,
		Above:  ENU{-los.Up * e, -los.Up * n, h},
		Across: ENU{n, -e, 0},
	}
}

// SightFrom returns the sight of a unit line of sight whose range plane is at
// right angles to the platform's travel, given as a vector of any length in
// the local frame of the ground point. The part of travel along the line of
// sight, which zero Doppler makes nothing, is ignored.
func SightFrom(los, travel ENU) Sight {
	above := travel.Cross(los).Unit()
	if above.Up < 0 {
		above = ENU{-above.East, -above.North, -above.Up}
	}
	return Sight{Along: los, Above: above, Across: los.Cross(above)}
}

// Facet is a terrain normal (-dz/dE, -dz/dN, 1), not scaled to length 1, by
// its components in the frame of a Sight. With th the incidence, alpha the
// slope in a vertical range plane (positive where the ground rises away from
// the radar) and w the slope along Sight.Across:
//
//	Along  = cos th + sin th tan alpha = cos(th - alpha) / cos alpha
//	Above  = sin th - cos th tan alpha = sin(th - alpha) / cos alpha
//	Across = -tan w
//
// Above is the slant range gained per horizontal metre away from the radar:
// zero or negative means active layover. Along zero or negative means that the
// facet turns its back: self shadow. NaN gradients give NaN everywhere.
//
// Source: projections as in Ulander, IEEE TGRS 34(5), 1996, 1115-1122 and
// Meier, Frei & Nuesch in Schreier (ed.), SAR Geocoding, 1993 (from memory).
type Facet struct{ Along, Above, Across float64 }

// Facet resolves the terrain of gradient (gE, gN) in the frame of the sight.
// Products are not fused: their signs decide classes.
func (s *Sight) Facet(gE, gN float64) Facet {
	return Facet{
		Along:  s.Along.Up - float64(gE*s.Along.East) - float64(gN*s.Along.North),
		Above:  s.Above.Up - float64(gE*s.Above.East) - float64(gN*s.Above.North),
		Across: s.Across.Up - float64(gE*s.Across.East) - float64(gN*s.Across.North),
	}
}

// Normal returns the outward unit normal of terrain of gradient (gE, gN).
func Normal(gE, gN float64) ENU {
	l := math.Sqrt(1 + gE*gE + gN*gN)
	return ENU{-gE / l, -gN / l, 1 / l}
}

// ActiveLayover reports whether slant range does not grow away from the
// radar. The exact tie, a slope along the wave front, counts as layover.
func (f Facet) ActiveLayover() bool { return f.Above <= 0 }

// SelfShadow reports whether the facet turns its back to the radar. The exact
// tie, a grazing ray, counts as shadow.
func (f Facet) SelfShadow() bool { return f.Along <= 0 }

// LocalIncidence returns the angle between the terrain's outward normal and
// the line of sight, [0, 180) degrees; it exceeds 90 in self shadow:
//
//	cos LIA = n . s,  cot LIA = Along / sqrt(Above^2 + Across^2)
//
// The second form needs no scaled normal and keeps its digits near 0. Error
// below arctanError.
// Source: Kropatsch & Strobl, IEEE TGRS 28(1), 1990, 98-107 (from memory).
func (f Facet) LocalIncidence() Angle {
	side := math.Sqrt(float64(f.Above*f.Above) + float64(f.Across*f.Across))
	if f.Along > 0 {
		return Angle(math.Pi/4 + arctan((side-f.Along)/(side+f.Along)))
	}
	return Angle(math.Atan2(side, f.Along))
}

// RangeIncidence returns the incidence less the terrain slope in the range
// plane, th - alpha, in (-90, 180) degrees: 0 or less in active layover, 90 or
// more in self shadow. Error below arctanError.
func (f Facet) RangeIncidence() Angle {
	if f.Along > 0 && f.Above > 0 {
		return Angle(math.Pi/4 + arctan((f.Above-f.Along)/(f.Above+f.Along)))
	}
	return Angle(math.Atan2(f.Above, f.Along))
}

// arctan returns the arctangent of x in [-1, 1] within arctanError. Without
// the branches of math.Atan it takes a third of the time on terrain, where the
// argument's octant cannot be predicted. Source: Abramowitz & Stegun, Handbook
// of Mathematical Functions, 1964, eq. 4.4.49 (from memory).
func arctan(x float64) float64 {
	y := x * x
	z := y * y
	low := (1 + float64(Arctan3*y)) + float64(z*(Arctan5+float64(Arctan7*y)))
	high := (Arctan9 + float64(Arctan11*y)) + float64(z*(Arctan13+float64(Arctan15*y)))
	return x * (low + float64(float64(z*z)*(high+float64(float64(z*z)*Arctan17))))
}

// The coefficients of the odd powers of x in the arctangent of LocalIncidence,
// for vector code that is to give the same bits.
const (
	Arctan3  = -0.3333314528
	Arctan5  = 0.1999355085
	Arctan7  = -0.1420889944
	Arctan9  = 0.1065626393
	Arctan11 = -0.0752896400
	Arctan13 = 0.0429096138
	Arctan15 = -0.0161657367
	Arctan17 = 0.0028662257
)

// arctanError bounds the error of the angles LocalIncidence and RangeIncidence
// return, radians: 0.0000012 degrees, a third of a 32-bit float's step at 45.
const arctanError = 2e-8

// RangeSlope returns the terrain slope alpha in the range plane, (-90, 90)
// degrees, positive where the ground rises away from the radar, that is on a
// facing slope: tan alpha = tan S cos(A - g), S the slope, A the azimuth of
// steepest descent, g the azimuth from the ground to the radar.
func (s *Sight) RangeSlope(f Facet) Angle {
	return Angle(math.Atan2(s.Above.Up, s.Along.Up)) - f.RangeIncidence()
}

// SlantPerGround returns the slant range gained per metre of horizontal ground
// distance along the range line; sin(th - alpha) / cos alpha for a vertical
// range plane. Where the plane leans, the line's direction on the terrain is
// Along turned within the plane until it lies in the facet,
//
//	T = f.Along Above - f.Above Along
//
// and the divisor is the length of its horizontal part.
func (s *Sight) SlantPerGround(f Facet) float64 {
	lean := s.Across.Up
	if lean == 0 {
		return f.Above
	}
	level := 1 - float64(lean*f.Across)
	in := float64(f.Along*f.Along) + float64(f.Above*f.Above)
	return f.Above / math.Sqrt(float64(level*level)+float64(float64(lean*lean)*in))
}

// Foreshortening returns the slant range gained per ground metre over the same
// on level ground: 1 flat, 0 fully compressed, negative in active layover,
// above 1 on lee slopes:
//
//	sin(th - alpha) / (cos alpha sin th) = 1 - tan alpha / tan th
//
// Source: geometry; see docs/geometry.md.
func (s *Sight) Foreshortening(f Facet) float64 {
	level := s.Above.Up
	if lean := s.Across.Up; lean != 0 {
		level /= math.Sqrt(1 - float64(lean*lean))
	}
	return s.SlantPerGround(f) / level
}

// SlantResolution returns the slant range resolution of a range bandwidth in
// hertz, metres: c / (2 W). Common practice.
func SlantResolution(bandwidth float64) float64 { return SpeedOfLight / (2 * bandwidth) }

// GroundResolution returns the horizontal ground distance along the range line
// that one slant resolution cell covers, metres. It is +Inf at the layover
// limit and positive on both sides of it.
func (s *Sight) GroundResolution(f Facet, slantResolution float64) float64 {
	return slantResolution / math.Abs(s.SlantPerGround(f))
}

// SigmaArea returns the illuminated ground area per slant-range cell relative
// to level ground:
//
//	sin th / |cos psi|,  cos psi = n . Above
//
// It is +Inf at the layover limit and keeps its meaning, the facet's own share,
// past it; a facet that turns its back has 0. Source: Ulander 1996 (from
// memory).
func (s *Sight) SigmaArea(f Facet) float64 {
	if f.Along <= 0 {
		return 0
	}
	n := math.Sqrt(f.Along*f.Along + f.Above*f.Above + f.Across*f.Across)
	return s.Above.Up * n / math.Abs(f.Above)
}

// GammaArea returns the same area projected at right angles to the line of
// sight, relative to level ground:
//
//	tan th cos LIA / |cos psi|
//
// with the limits of SigmaArea. Source: Small, IEEE TGRS 49(8), 2011,
// 3081-3093 (from memory).
func (s *Sight) GammaArea(f Facet) float64 {
	if f.Along <= 0 {
		return 0
	}
	return s.Above.Up / s.Along.Up * f.Along / math.Abs(f.Above)
}

// Downslope returns the part of a unit motion down the steepest descent that
// the line of sight records, [-1, 1], positive towards the radar:
//
//	C = u . d,  d = (cos S sin A, cos S cos A, -sin S)
//
// Level ground has no downslope direction and gives NaN. Sources: Notti et
// al., Int. J. Remote Sens. 35(6), 2014, 2186-2214; Colesanti & Wasowski,
// Engineering Geology 88, 2006, 173-199 (from memory).
func (s *Sight) Downslope(gE, gN float64) float64 {
	g2 := gE*gE + gN*gN
	u := &s.Along
	return -(gE*u.East + gN*u.North + g2*u.Up) / math.Sqrt(g2*(1+g2))
}

// OrientationShift returns the polarisation orientation shift of the facet,
// [-90, 90] degrees, a line's orientation being the same after half a turn:
//
//	tan POA = tan w / (sin th - tan alpha cos th)
//
// with w positive where the ground rises along Sight.Across, the direction of
// travel of a right-looking platform; published signs differ. It reaches 90 at
// the layover limit and changes sign there; NaN where the normal points along
// the line of sight. Source: Lee, Schuler & Ainsworth, IEEE TGRS 38(5), 2000,
// 2153-2163 (from memory).
func (f Facet) OrientationShift() Angle { return Angle(math.Atan(-f.Across / f.Above)) }

// CriticalBaseline returns the perpendicular baseline at which the spectra of
// two passes no longer overlap, metres:
//
//	Bc = lambda R W |tan(th - alpha)| / c
//
// wavelength and slantRange in metres, bandwidth in hertz. 0 at the layover
// limit, +Inf at the self-shadow limit. Source: Gatelli et al., IEEE TGRS
// 32(4), 1994, 855-865 (from memory).
func (f Facet) CriticalBaseline(wavelength, slantRange, bandwidth float64) float64 {
	return wavelength * slantRange * bandwidth / SpeedOfLight * math.Abs(f.Above/f.Along)
}

// AmbiguityHeight returns the height difference of one interferometric fringe
// for two passes with the given perpendicular baseline, metres:
//
//	ha = lambda R sin th / (2 B)
//
// wavelength, slantRange and baseline in metres; sinIncidence is the sine of
// the ellipsoidal incidence. Source: Ferretti et al., InSAR Principles, ESA
// TM-19, 2007 (from memory).
func AmbiguityHeight(wavelength, slantRange, sinIncidence, baseline float64) float64 {
	return wavelength * slantRange * sinIncidence / (2 * math.Abs(baseline))
}

// FringeDisplacement returns the displacement along a direction that makes one
// fringe between two passes, metres: lambda / (2 |C|), where C is the part of
// a unit displacement along the line of sight, 1 along it and Downslope for
// motion down the slope. +Inf for C = 0. Source as AmbiguityHeight.
func FringeDisplacement(wavelength, share float64) float64 {
	return wavelength / (2 * math.Abs(share))
}

// EastUp is the solution of two line-of-sight displacements for east and up,
// the north component neglected:
//
//	east = EastA a + EastB b,  up = UpA a + UpB b
//
// Source: Wright, Parsons & Lu, GRL 31, 2004, L01607 (from memory).
type EastUp struct{ EastA, EastB, UpA, UpB float64 }

// SolveEastUp returns the solution for two lines of sight; ok is false where
// they have the same direction in the plane of east and up.
func SolveEastUp(a, b ENU) (s EastUp, ok bool) {
	det := float64(a.East*b.Up) - float64(b.East*a.Up)
	if det == 0 || det != det {
		return EastUp{}, false
	}
	return EastUp{b.Up / det, -a.Up / det, -b.East / det, a.East / det}, true
}

// Noise returns the standard errors of east and up for unit, independent
// errors along both lines of sight.
func (s EastUp) Noise() (east, up float64) {
	return math.Hypot(s.EastA, s.EastB), math.Hypot(s.UpA, s.UpB)
}

// Condition returns the condition number in the 2-norm of the two-look system,
// 1 when the lines are at right angles and without bound as they align.
func (s EastUp) Condition() float64 {
	// With f the squared Frobenius norm and d the determinant the singular
	// values satisfy s1^2 + s2^2 = f, s1 s2 = |d|.
	f := s.EastA*s.EastA + s.EastB*s.EastB + s.UpA*s.UpA + s.UpB*s.UpB
	d := math.Abs(s.EastA*s.UpB - s.EastB*s.UpA)
	root := math.Sqrt(max(f*f-4*d*d, 0))
	return (f + root) / (2 * d)
}
