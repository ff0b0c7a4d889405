//go:build goexperiment.simd && amd64 && !go1.27

package mask

import (
	"math"
	"unsafe"

	"simd/archsimd"
)

// vectors says that the inner loops run on vectors of four and eight numbers. They
// do what the portable loops do, operation by operation, and give the same bits.
// The vector package of Go 1.26 is an experiment: another version of Go takes
// the portable loops until this one is looked at again.
var vectors = archsimd.X86.AVX2()

// The compiler has single numbers handled by instructions that on some processors
// cost a hundred cycles as long as the upper halves of registers hold something. So
// functions on vectors work on vectors only from their first one on, and clear the
// upper halves before they return or call one that does not; TestVectorsStayAmongThemselves
// looks for such instructions.

// four and eight hold a number that is in a register in every place; fourAt and
// eightAt take it from memory; fourOf and eightOf are for constants, zero4 and zero8
// for nought, none8 for NaN.
func four(x float64) archsimd.Float64x4 { return archsimd.BroadcastFloat64x4(x) }

func eight(x float32) archsimd.Float32x8 { return archsimd.BroadcastFloat32x8(x) }

func fourAt(x *float64) archsimd.Float64x4 {
	return archsimd.BroadcastInt64x4(*(*int64)(unsafe.Pointer(x))).AsFloat64x4()
}

func eightAt(x *float32) archsimd.Float32x8 {
	return archsimd.BroadcastInt32x8(*(*int32)(unsafe.Pointer(x))).AsFloat32x8()
}

func fourOf(x float64) archsimd.Float64x4 {
	return archsimd.BroadcastInt64x4(int64(math.Float64bits(x))).AsFloat64x4()
}

func eightOf(x float32) archsimd.Float32x8 {
	return archsimd.BroadcastInt32x8(int32(math.Float32bits(x))).AsFloat32x8()
}

func zero4() (x archsimd.Float64x4) { return x }

func zero8() (x archsimd.Float32x8) { return x }

func none8() archsimd.Float32x8 { return archsimd.BroadcastInt32x8(0x7fc00000).AsFloat32x8() }

// whole4 and whole8 hold a whole number in every place.
func whole4(n int) archsimd.Float64x4 { return archsimd.BroadcastInt32x4(int32(n)).ConvertToFloat64() }

func whole8(n int) archsimd.Float32x8 { return archsimd.BroadcastInt32x8(int32(n)).ConvertToFloat32() }
