package testterrain

import (
	"math"
	"math/rand/v2"
)

// Fractal returns random heights, rows x cols in row-major order, metres:
// octaves of smoothly interpolated noise whose amplitude falls by 2^-smooth
// from one to the next finer, as in fractional Brownian motion, from half the
// grid down to single cells. smooth near 1 gives rolling hills, near 0 almost
// white noise. The largest octave has the amplitude given. Heights are whole
// multiples of 1/64 m, so that float32 still holds them exactly after adding
// or subtracting any whole number below 2^16. No class is known beforehand.
func Fractal(rng *rand.Rand, rows, cols int, amplitude, smooth float64) []float32 {
	sum := make([]float64, rows*cols)
	for wave := float64(max(rows, cols, 2)) / 2; ; wave /= 2 {
		addOctave(rng, sum, cols, max(wave, 1), amplitude)
		if wave <= 1 {
			break
		}
		amplitude *= math.Exp2(-smooth)
	}
	heights := make([]float32, len(sum))
	for i, h := range sum {
		heights[i] = float32(math.Round(h*64) / 64)
	}
	return heights
}

// addOctave adds noise with one independent value in [-amplitude, amplitude)
// every wave cells.
func addOctave(rng *rand.Rand, sum []float64, cols int, wave, amplitude float64) {
	rows := len(sum) / cols
	nc := int(float64(cols)/wave) + 2
	knots := make([]float64, (int(float64(rows)/wave)+2)*nc)
	for i := range knots {
		knots[i] = amplitude * (2*rng.Float64() - 1)
	}
	ease := func(t float64) float64 { return t * t * (3 - 2*t) }
	for i := range sum {
		r, u := math.Modf(float64(i/cols) / wave)
		c, v := math.Modf(float64(i%cols) / wave)
		u, v = ease(u), ease(v)
		k := knots[int(r)*nc+int(c):]
		sum[i] += (1-u)*((1-v)*k[0]+v*k[1]) + u*((1-v)*k[nc]+v*k[nc+1])
	}
}
