//go:build goexperiment.simd && amd64 && !go1.27

package mask

// SetVectors turns the vectors on or off.
func SetVectors(on bool) { vectors = on }
