package mask

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

func BenchmarkWindows(b *testing.B) {
	src := mountainSquare(b, 1800)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	lim := limits{low: rng.Min, high: rng.Max, ceiling: rng.Max, openEdge: false, holeHeight: nan}
	for _, r := range [][2]geometry.Angle{{20, 50}, {5, 85}} {
		for _, az := range []geometry.Angle{78, 191, 225} {
			b.Run(fmt.Sprint(r[0], az), func(b *testing.B) {
				from, to := r[0]*geometry.Degree, r[1]*geometry.Degree
				before, runs := cpuTime(), 0
				var x windower
				for b.Loop() {
					runs++
					require.NoError(b, x.run(src, windowLanes(src.Frame, az*geometry.Degree, from, to), lim, from, to, dem.Window{Row: 400, Col: 400, Rows: 1024, Cols: 1024}))
				}
				b.ReportMetric((cpuTime()-before)/float64(runs)/1024/1024, "cpu-ns/cell")
			})
		}
	}
}
