//go:build goexperiment.simd && amd64 && !go1.27

package mask

import "simd/archsimd"

// vectors says that the inner loops run on vectors of four and eight numbers. They
// do what the portable loops do, operation by operation, and give the same bits.
// The vector package of Go 1.26 is an experiment: another version of Go takes
// the portable loops until this one is looked at again.
var vectors = archsimd.X86.AVX2()
