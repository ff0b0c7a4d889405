//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

func (*guide) advanceVector(*laneRow, *linear, float32) { panic(noVectors) }

func (*guide) seesVector(int, bool, []float32, []float32, *linear, int, int) uint64 {
	panic(noVectors)
}

func (*besideLine) slopesVector(int, []float32, []float32) int { panic(noVectors) }

func (*steepness) searchVector(int) int { panic(noVectors) }

func (*summits) raiseVector() { panic(noVectors) }

func (*endsBlock) fillVector(*steps, *windower, []float32, int) bool { panic(noVectors) }

func heightsBetweenVector([]float32, []float32, *linear, int) int { panic(noVectors) }

func alongLineVector(_, _, _ []float32, _, _ *linear, _ int) int { panic(noVectors) }
