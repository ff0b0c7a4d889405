//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

// vectors says that the inner loops run on vectors: not in this build.
const vectors = false
