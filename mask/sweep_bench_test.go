package mask

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// BenchmarkSweep sweeps 24 azimuths x 31 incidences. It compares with the masks
// of one look of BenchmarkMasks: the project's limit is 60 times their cost. With
// four times the cells, and with half the azimuths, the cost of a cell and
// azimuth stays what it is.
func BenchmarkSweep(b *testing.B) {
	var azimuths, incidences []geometry.Angle
	for a := range 24 {
		azimuths = append(azimuths, geometry.Angle(15*a)*geometry.Degree)
	}
	for i := range 31 {
		incidences = append(incidences, geometry.Angle(20+i)*geometry.Degree)
	}
	for _, side := range []int{1800, 3600} {
		src := mountainSquare(b, side)
		rng, err := dem.Scan(context.Background(), src)
		require.NoError(b, err)
		for _, n := range []int{12, 24} {
			b.Run(fmt.Sprintf("%d cells, %d azimuths", side*side, n), func(b *testing.B) {
				before, runs := cpuTime(), 0
				for b.Loop() {
					runs++
					_, err := Sweep(context.Background(), SweepJob{Source: src, Range: rng, Azimuths: azimuths[:n],
						Incidences: incidences, Window: src.Frame.Whole(), Best: 2, Condition: 3, Options: DefaultOptions()})
					require.NoError(b, err)
				}
				cost := (cpuTime() - before) / float64(runs) / float64(side*side)
				b.ReportMetric(cost, "cpu-ns/cell")
				b.ReportMetric(cost/float64(n), "cpu-ns/cell/azimuth")
			})
		}
	}
}
