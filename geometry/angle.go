package geometry

import "math"

// Angle is a plane angle in radians. Degrees exist only in flags, files,
// printed text and rasters; they enter through the constant Degree and leave
// through the method Degrees.
type Angle float64

// Degree is one degree; write 38 * Degree.
const Degree Angle = math.Pi / 180

// Degrees returns the angle in degrees. The conversion rounds once, so
// (x * Degree).Degrees() may differ from x in the last bit.
func (a Angle) Degrees() float64 { return float64(a) * (180 / math.Pi) }

// Given reports whether the angle holds a value: NaN stands for "not given".
func (a Angle) Given() bool { return !math.IsNaN(float64(a)) }

// Sin, Cos and Tan are the functions of the angle.
func (a Angle) Sin() float64 { return math.Sin(float64(a)) }

// Cos returns the cosine of the angle.
func (a Angle) Cos() float64 { return math.Cos(float64(a)) }

// Tan returns the tangent of the angle.
func (a Angle) Tan() float64 { return math.Tan(float64(a)) }

// Turn returns the angle brought into [0, 360) degrees, the range of every
// azimuth and heading. NaN stays NaN.
func (a Angle) Turn() Angle {
	t := math.Mod(float64(a), 2*math.Pi)
	if t < 0 {
		t += 2 * math.Pi
	}
	if t >= 2*math.Pi { // a tiny negative angle rounds up to a full turn
		t = 0
	}
	return Angle(t)
}

// NotGiven is the Angle that stands for a parameter the user did not give.
var NotGiven = Angle(math.NaN())
