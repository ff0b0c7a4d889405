//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

// SetVectors does nothing: there are none.
func SetVectors(bool) {}
