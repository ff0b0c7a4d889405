package geometry

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Limits of the letters in GHz as IEEE Std 521-2002, table 1, and the table of
// the STAC sar extension, version 1.3.0, print them, written here a second
// time so that a slip in one shows. The two disagree below 1 GHz, from 12 to
// 12.5 and from 26.5 to 27 GHz.
var letterRows = []struct {
	ghz        float64
	ieee, stac string
}{
	{0.2, "", ""},
	{0.25, "", "P"},
	{0.299, "", "P"},
	{0.3, "UHF", "P"},
	{0.435, "UHF", "P"},
	{0.999, "UHF", "P"},
	{1, "L", "L"},
	{1.999, "L", "L"},
	{2, "S", "S"},
	{3.999, "S", "S"},
	{4, "C", "C"},
	{7.999, "C", "C"},
	{8, "X", "X"},
	{11.999, "X", "X"},
	{12, "Ku", "X"},
	{12.499, "Ku", "X"},
	{12.5, "Ku", "Ku"},
	{17.999, "Ku", "Ku"},
	{18, "K", "K"},
	{26.499, "K", "K"},
	{26.5, "K", "Ka"},
	{26.999, "K", "Ka"},
	{27, "Ka", "Ka"},
	{39.999, "Ka", "Ka"},
	{40, "V", ""},
	{74.999, "V", ""},
	{75, "W", ""},
	{109.999, "W", ""},
	{110, "mm", ""},
	{300, "mm", ""},
	{300.001, "", ""},
	{math.NaN(), "", ""},
}

func TestBandLetters(t *testing.T) {
	for _, row := range letterRows {
		b, ok := BandOf(row.ghz * 1e9)
		assert.Equal(t, row.ieee, b.Letter, "IEEE letter at %v GHz", row.ghz)
		assert.Equal(t, row.ieee != "", ok, "IEEE letter at %v GHz", row.ghz)
		assert.Equal(t, row.stac, STACBand(row.ghz*1e9), "STAC letter at %v GHz", row.ghz)
	}
}

// A limit keeps its letter on the way through a wavelength and back.
func TestBandLettersThroughWavelength(t *testing.T) {
	for _, row := range letterRows {
		b, _ := BandOf(FrequencyOf(WavelengthOf(row.ghz * 1e9)))
		assert.Equal(t, row.ieee, b.Letter, "IEEE letter at %v GHz", row.ghz)
		assert.Equal(t, row.stac, STACBand(FrequencyOf(WavelengthOf(row.ghz*1e9))), "STAC letter at %v GHz", row.ghz)
	}
}

// Wavelengths in millimetres of centre frequencies in use, computed by hand
// from c / f to a micrometre, so half a micrometre is the tolerance; and the
// wavelength limits printed beside the letters in IEEE Std 521-2002, table 1,
// rounded there to the digits shown.
func TestWavelength(t *testing.T) {
	const half = 0.0005 // mm
	for ghz, mm := range map[float64]float64{
		0.435: 689.178, 1.27: 236.057, 1.275: 235.131, 3.2: 93.685, 5.3: 56.565, 5.331: 56.236,
		5.405: 55.466, 9.6: 31.228, 9.65: 31.067, 17.2: 17.430, 35.75: 8.386,
	} {
		assert.InDelta(t, mm, WavelengthOf(ghz*1e9)*1000, half, "%v GHz", ghz)
		assert.InEpsilon(t, ghz*1e9, FrequencyOf(WavelengthOf(ghz*1e9)), 1e-15, "%v GHz", ghz)
	}
	for letter, cm := range map[string][2]float64{"UHF": {100, 30}, "L": {30, 15}, "S": {15, 7.5}, "C": {7.5, 3.75}, "X": {3.75, 2.5}, "Ku": {2.5, 1.67}, "K": {1.67, 1.11}, "Ka": {1.11, 0.75}} {
		b, ok := BandNamed(letter)
		require.True(t, ok, letter)
		const rounded = 0.003 // of the value: the table takes c as 3e8 m/s and rounds to three digits
		assert.InEpsilon(t, cm[0], 100*WavelengthOf(b.Low), rounded, letter)
		assert.InEpsilon(t, cm[1], 100*WavelengthOf(b.High), rounded, letter)
	}
}

func TestBandsMeet(t *testing.T) {
	assert.Equal(t, MinFrequency, Bands[0].Low)
	assert.Equal(t, MaxFrequency, Bands[len(Bands)-1].High)
	for i, b := range Bands[1:] {
		assert.Equal(t, Bands[i].High, b.Low, b.Letter)
	}
	for _, b := range Bands {
		at, _ := BandOf(b.Centre())
		assert.Equal(t, b, at)
		_, ok := BandNamed(b.Letter)
		assert.True(t, ok)
	}
	_, ok := BandNamed("P") // no letter of IEEE Std 521
	assert.False(t, ok)
}
