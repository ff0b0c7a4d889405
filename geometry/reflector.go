package geometry

import "math"

// Peak radar cross-sections of the usual passive targets, square metres.
// wavelength and lengths in metres, all above 0. They hold for bodies of
// several wavelengths, seen along their symmetry axis. Sources: Ruck, Radar
// Cross Section Handbook, 1970; Garthwaite et al., The Design of Radar Corner
// Reflectors for the Australian Geophysical Observing System, Geoscience
// Australia Record 2015/03 (formulas from memory; the coefficients of the
// trihedrals are tested by integrating their apertures).

// TriangularTrihedral returns the peak cross-section of a trihedral of three
// right-angled triangles with inner leg a: 4 pi a^4 / (3 lambda^2).
func TriangularTrihedral(leg, wavelength float64) float64 {
	return 4 * math.Pi / 3 * square(leg*leg/wavelength)
}

// SquareTrihedral returns the peak cross-section of a trihedral of three
// squares of side a: 12 pi a^4 / lambda^2.
func SquareTrihedral(side, wavelength float64) float64 {
	return 12 * math.Pi * square(side*side/wavelength)
}

// quarterDisc is the effective aperture of a trihedral of quarter discs along
// its axis, in squares of their radius: the part of its silhouette whose mirror
// image through the apex lies in the silhouette too. By summing over a grid of
// 12,000 points a side.
const quarterDisc = 1.11458

// DiscTrihedral returns the peak cross-section of a trihedral of three quarter
// discs of radius a: 15.61 a^4 / lambda^2.
func DiscTrihedral(radius, wavelength float64) float64 {
	return FlatPlate(quarterDisc*radius*radius, wavelength)
}

// FlatPlate returns the peak cross-section of a plate of area F seen at right
// angles: 4 pi F^2 / lambda^2.
func FlatPlate(area, wavelength float64) float64 {
	return 4 * math.Pi * square(area/wavelength)
}

// Dihedral returns the peak cross-section of two plates of width w and height
// h at right angles, w along their common edge: 8 pi w^2 h^2 / lambda^2.
func Dihedral(width, height, wavelength float64) float64 {
	return 8 * math.Pi * square(width*height/wavelength)
}

func square(x float64) float64 { return x * x }

// Decibels returns a ratio of powers, or square metres against one, in dB.
func Decibels(ratio float64) float64 { return 10 * math.Log10(ratio) }

// FromDecibels is the inverse of Decibels.
func FromDecibels(db float64) float64 { return math.Pow(10, db/10) }

// TrihedralBoresight is the angle of a trihedral's axis above its base plate,
// arctan(1/sqrt 2) = 35.264 degrees: the axis makes the same angle with all
// three plates.
var TrihedralBoresight = Angle(math.Atan(1 / math.Sqrt2))

// TrihedralWidth is about the angle over which a triangular trihedral's
// cross-section stays within 3 dB of its peak, the same in both planes. Common
// practice (from memory).
const TrihedralWidth = 40 * Degree

// Aim is how a trihedral with a horizontal base edge is set up.
type Aim struct {
	// Azimuth is the direction in which the opening points, that of the radar
	// from the site, from true north.
	Azimuth Angle
	// BaseTilt is the angle of the base plate's axis above the horizon: 0 when
	// the base lies level, positive when the opening is tipped upwards, negative
	// when it is tipped downwards.
	BaseTilt Angle
}

// AimAt returns the aim that brings a trihedral's axis onto a line of sight,
// the unit vector from the ground to the antenna:
//
//	base tilt = (90 deg - incidence) - 35.264 deg
//
// Source: geometry; check values in the test.
func AimAt(los ENU) Aim {
	return Aim{
		Azimuth:  (los.LookAzimuth() + math.Pi).Turn(),
		BaseTilt: 90*Degree - los.Incidence() - TrihedralBoresight,
	}
}

// PhaseNoise returns the standard deviation of the phase of a point target over
// clutter, radians, for a ratio of signal to clutter power (not in dB) of
// several at least:
//
//	sigma = sqrt(1 / (2 SCR))
//
// Sources: Freeman, IEEE TGRS 30(6), 1992, 1107-1121; Ferretti et al., IEEE
// TGRS 45(5), 2007, 1142-1153 (from memory).
func PhaseNoise(scr float64) float64 { return math.Sqrt(1 / (2 * scr)) }

// LineOfSightError returns the standard error of a displacement along the line
// of sight from one phase, metres: lambda / (4 pi) times the phase noise. A
// displacement between two passes, both with this noise, has sqrt 2 times it.
// Source as PhaseNoise.
func LineOfSightError(scr, wavelength float64) float64 {
	return wavelength / (4 * math.Pi) * PhaseNoise(scr)
}

// RatioForError returns the ratio of signal to clutter power at which
// LineOfSightError is the given error, metres: its inverse.
func RatioForError(err, wavelength float64) float64 {
	return square(wavelength/(4*math.Pi*err)) / 2
}

// AmplitudeError returns the largest error that clutter in phase with a target
// makes of its cross-section, dB: 20 log10(1 + 1/sqrt(SCR)). Source as
// PhaseNoise.
func AmplitudeError(scr float64) float64 { return 20 * math.Log10(1+1/math.Sqrt(scr)) }

// Clutter returns the cross-section of the ground around a target that echoes
// in the same resolution cell, square metres: sigma0 times the cell's area on
// the ground. sigma0 is a ratio (not in dB), groundResolution and
// azimuthResolution are metres. Common practice.
func Clutter(sigma0, groundResolution, azimuthResolution float64) float64 {
	return sigma0 * groundResolution * azimuthResolution
}

// LegForRatio returns the inner leg of a triangular trihedral that stands out
// of the clutter, square metres, by a ratio of powers, metres:
//
//	a = (3 lambda^2 SCR clutter / (4 pi))^(1/4)
//
// the inverse of TriangularTrihedral.
func LegForRatio(scr, clutter, wavelength float64) float64 {
	return math.Sqrt(wavelength * math.Sqrt(3*scr*clutter/(4*math.Pi)))
}
