package demo

import "math"

// Every product that enters a sum in this package stands in float64(...):
// the conversion keeps compilers from fusing the two roundings into one, so
// the valley has the same bytes on every machine. Only + - * / and the square
// root, which IEEE 754 rounds exactly, are used.

// hash mixes a lattice point and a seed into 64 well-spread bits (the
// finaliser of SplitMix64; Steele, Lea and Flood 2014, from memory).
func hash(seed uint64, row, col int) uint64 {
	z := seed + uint64(uint32(row))*0x9e3779b97f4a7c15 + uint64(uint32(col))*0xc2b2ae3d27d4eb4f
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// gradients are the eight directions of the lattice noise.
var gradients = [8][2]float64{
	{1, 0}, {-1, 0}, {0, 1}, {0, -1},
	{0.70710678, 0.70710678}, {-0.70710678, 0.70710678}, {0.70710678, -0.70710678}, {-0.70710678, -0.70710678},
}

// noise is gradient noise of wavelength 1, about -0.7 to 0.7.
func noise(seed uint64, row, col float64) float64 {
	r0, c0 := math.Floor(row), math.Floor(col)
	u, v := row-r0, col-c0
	corner := func(dr, dc int) float64 {
		g := gradients[hash(seed, int(r0)+dr, int(c0)+dc)>>61]
		return float64(g[0]*(u-float64(dr))) + float64(g[1]*(v-float64(dc)))
	}
	su, sv := smooth(u), smooth(v)
	return lerp(lerp(corner(0, 0), corner(0, 1), sv), lerp(corner(1, 0), corner(1, 1), sv), su)
}

// fractal sums octaves of noise, each of half the wavelength and half the
// height of the one before.
func fractal(seed uint64, row, col float64, octaves int) float64 {
	sum, amplitude := 0.0, 1.0
	for k := range octaves {
		sum += float64(amplitude * noise(seed+uint64(k), row, col))
		row, col, amplitude = 2*row, 2*col, amplitude/2
	}
	return sum
}

// ridged sums octaves of folded noise: sharp crests, 0 to about 1.
func ridged(seed uint64, row, col float64, octaves int) float64 {
	sum, amplitude, weight := 0.0, 0.5, 1.0
	for k := range octaves {
		crest := 1 - math.Abs(1.4*noise(seed+uint64(k), row, col))
		crest = float64(crest * crest * weight)
		weight = clamp(crest + crest)
		sum += float64(amplitude * crest)
		row, col, amplitude = 2*row, 2*col, amplitude/2
	}
	return sum
}

// clamp brings a number into [0, 1].
func clamp(t float64) float64 { return min(max(t, 0), 1) }

// smooth is the step 3t^2 - 2t^3 from 0 to 1, flat outside.
func smooth(t float64) float64 {
	t = clamp(t)
	return float64(t * t * (3 - float64(2*t)))
}

// lerp goes from a to b as t goes from 0 to 1.
func lerp(a, b, t float64) float64 { return a + float64((b-a)*t) }

// under and over are the lower and the higher of two surfaces, rounded off
// where they are less than k apart.
func under(a, b, k float64) float64 {
	t := max(k-math.Abs(a-b), 0)
	return min(a, b) - float64(float64(t*t)/(4*k))
}

func over(a, b, k float64) float64 { return -under(-a, -b, k) }
