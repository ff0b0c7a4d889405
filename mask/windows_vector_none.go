//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

func (g *guide) advanceVector(*laneRow, linear, float32) {}

func (g *guide) seesVector(int, bool, []float32, []float32, linear, int, int) uint32 { return 0 }

func (b *besideLine) slopesVector(int, []float32, []float32) int { return 0 }

func (q *steepness) searchVector(int) int { return 0 }

func heightsBetweenVector([]float32, []float32, linear, int) int { return 0 }

func alongLineVector(_, _, _ []float32, _, _ linear, _ int) int { return 0 }

func (e *endsBlock) fillVector(*steps, *windower, []float32, int) bool { return false }

func (q *summits) raiseVector() {}
