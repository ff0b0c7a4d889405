//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

// vectors says that the inner loops run on vectors: not in this build.
const vectors = false

const noVectors = "built without vectors"

func spreadVector(*byLane, []float32, float64, float64, int, int)              { panic(noVectors) }
func turnVectors([]float32, []float32, int, int, int, int)                     { panic(noVectors) }
func heightsVector(*byLane, *heightRun, *heightRun, float64)                   { panic(noVectors) }
func markVector(*patchRow, *patchRow, *grade) (rises, lit uint64, jagged bool) { panic(noVectors) }
func viewVector(*strip, float64, float64, float64, float64, float64)           { panic(noVectors) }
func forwardVector(*strip, *lines, float64, float64, float64)                  { panic(noVectors) }
func backwardVector(*strip, *lines, float64, float64)                          { panic(noVectors) }
func backwardMoveVector(*strip, *lines)                                        { panic(noVectors) }
func marginsVector(*laneMargins, *byLane, *lines, float32)                     { panic(noVectors) }
func roughnessVector(*byLane32, *byLane32, float32)                            { panic(noVectors) }
func widenVector(*byLane32, *byLane32, float32)                                { panic(noVectors) }

func (*sheet) classifyBundle(int, int, int, *[bundle]float32) {
	panic(noVectors)
}
