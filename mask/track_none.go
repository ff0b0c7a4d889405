//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

func viewTrackVector(*strip)                              { panic(noVectors) }
func forwardTrackVector(*strip, *lines, float64, float64) { panic(noVectors) }
func forwardMoveVector(*strip, *lines)                    { panic(noVectors) }
func backwardTrackVector(*strip, *lines, float64)         { panic(noVectors) }
func trackMarginsVector(*laneMargins, *strip, *lines)     { panic(noVectors) }

func spreadNarrowVector(*byLane, []float32, float64, float64)           { panic(noVectors) }
func markFanVector(*byLane41, *byLane41, *fanGrade) (rises, lit uint64) { panic(noVectors) }
