//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

func viewTrackVector(*strip)                                                  { panic(noVectors) }
func rangesVector(*strip, *byLane32, *byLane32, bool)                         { panic(noVectors) }
func forwardMoveUnsureVector(*strip, *lines)                                  { panic(noVectors) }
func forwardTrackVector(_ *strip, _, _ *byLane, _, _ *byLane32, _, _ float64) { panic(noVectors) }
func forwardMoveVector(*strip, *lines)                                        { panic(noVectors) }
func backwardTrackVector(*strip, *byLane, *byLane32, float64)                 { panic(noVectors) }
func trackMarginsVector(*laneMargins, *strip, *lines)                         { panic(noVectors) }

func spreadNarrowVector(*byLane, []float32, float64, float64) { panic(noVectors) }
func markSeenVector(_, _ *patchRow, _ *seenGrade, _, _ int) (rises, lit, dark uint64, high float32, jagged bool) {
	panic(noVectors)
}
