//go:build !(goexperiment.simd && amd64 && !go1.27)

package mask

func blockVector(*worker, *view, *view, int) {
	panic("mask: no vectors in this build")
}

func centralVector(_, _, _, _ []float32) bool { panic("mask: no vectors in this build") }

func completeVector([]float32) bool { panic("mask: no vectors in this build") }

func turnVector([]float32, *[8]int, []float32, int, int, int, int) {
	panic("mask: no vectors in this build")
}

func sightVector(*sightCells, int) { panic("mask: no vectors in this build") }

func localIncidencesVector(*facetRow, []float32) int { panic("mask: no vectors in this build") }

func foreshorteningsVector(*facetRow, []float32) int { panic("mask: no vectors in this build") }
