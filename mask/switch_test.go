//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// SetVectors turns the vectors on, where the processor has them, or off.
func SetVectors(on bool) { vectors = on && archsimd.X86.AVX2() }
