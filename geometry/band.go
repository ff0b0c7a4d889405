package geometry

import (
	"math"
	"strings"
)

// SpeedOfLight is the speed of light in vacuum, m/s, exact by definition of
// the metre (17th CGPM, 1983, resolution 1).
const SpeedOfLight = 299792458.0

// The span of frequencies that a look may have, hertz: the microwaves in the
// wide sense. Source: Ulaby, Moore & Fung, Microwave Remote Sensing, vol. I,
// 1981 (from memory); the lower limit is a convention.
const (
	MinFrequency = 0.3e9
	MaxFrequency = 300e9
)

// Band is a radar band with its limits in hertz.
type Band struct {
	Letter    string
	Low, High float64
}

// Bands lists the radar bands of IEEE Std 521-2002, table 1, from 0.3 to
// 300 GHz. HF and VHF lie below what a look may have.
var Bands = []Band{
	{"UHF", 0.3e9, 1e9},
	{"L", 1e9, 2e9},
	{"S", 2e9, 4e9},
	{"C", 4e9, 8e9},
	{"X", 8e9, 12e9},
	{"Ku", 12e9, 18e9},
	{"K", 18e9, 27e9},
	{"Ka", 27e9, 40e9},
	{"V", 40e9, 75e9},
	{"W", 75e9, 110e9},
	{"mm", 110e9, 300e9},
}

// stacBands is the letter table of the STAC sar extension, version 1.3.0. It
// differs from IEEE Std 521 below 1 GHz, at 12 to 12.5 GHz and at 26.5 to
// 27 GHz, and it has no letter above 40 GHz.
var stacBands = []Band{
	{"P", 0.25e9, 1e9},
	{"L", 1e9, 2e9},
	{"S", 2e9, 4e9},
	{"C", 4e9, 8e9},
	{"X", 8e9, 12.5e9},
	{"Ku", 12.5e9, 18e9},
	{"K", 18e9, 26.5e9},
	{"Ka", 26.5e9, 40e9},
}

// Centre returns the middle of the band in hertz: the frequency that a look
// has when the user gives nothing but the letter.
func (b Band) Centre() float64 { return (b.Low + b.High) / 2 }

// BandOf returns the IEEE Std 521 band of a frequency in hertz. A limit
// belongs to the upper band, 300 GHz to mm. ok is false outside 0.3 to
// 300 GHz and for NaN.
func BandOf(frequency float64) (b Band, ok bool) {
	if math.Round(frequency) == MaxFrequency {
		return Bands[len(Bands)-1], true
	}
	return find(Bands, frequency)
}

// BandNamed returns the IEEE Std 521 band of a letter, in either case.
func BandNamed(letter string) (b Band, ok bool) {
	for _, b := range Bands {
		if strings.EqualFold(b.Letter, letter) {
			return b, true
		}
	}
	return Band{}, false
}

// STACBand returns the letter that the STAC sar extension has for a frequency
// in hertz, or the empty string where it has none: outside 0.25 to 40 GHz and
// for NaN. A limit belongs to the upper band.
func STACBand(frequency float64) string {
	b, _ := find(stacBands, frequency)
	return b.Letter
}

// find returns the band that holds a frequency. The frequency is rounded to
// whole hertz, as one that comes from a wavelength may miss a limit by the
// last bit.
func find(bands []Band, frequency float64) (Band, bool) {
	f := math.Round(frequency)
	for _, b := range bands {
		if b.Low <= f && f < b.High {
			return b, true
		}
	}
	return Band{}, false
}

// WavelengthOf returns the wavelength in vacuum, metres, of a frequency in
// hertz: lambda = c / f. NaN gives NaN.
func WavelengthOf(frequency float64) float64 { return SpeedOfLight / frequency }

// FrequencyOf returns the frequency in hertz of a wavelength in vacuum,
// metres: f = c / lambda. NaN gives NaN.
func FrequencyOf(wavelength float64) float64 { return SpeedOfLight / wavelength }
