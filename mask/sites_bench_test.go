package mask

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// BenchmarkSites evaluates 1,000 sites under 100 fixed looks on 3600 x 3600
// cells, and reports the processor time in full masks of the same DEM. The
// project's bound is 10.
func BenchmarkSites(b *testing.B) {
	src := mountainSquare(b, 3600)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	var looks []geometry.Look
	for i := range 100 {
		looks = append(looks, fixed(20+float64(i%10)*4, float64(i)*3.6+1))
	}
	mask := func() float64 {
		before := cpuTime()
		_, err := Run(context.Background(), Job{Source: src, Range: rng, Looks: []geometry.Look{fixed(39, 78)},
			Layers: []Layer{LayoverLayer, ShadowLayer}, Window: src.Frame.Whole(), Options: DefaultOptions()})
		require.NoError(b, err)
		return cpuTime() - before
	}
	mask()
	full := min(mask(), mask())
	for _, c := range []struct {
		name  string
		round bool
		sigma float64
	}{{"between", false, 0}, {"centres", true, 0}, {"error", false, 5}} {
		b.Run(c.name, func(b *testing.B) {
			r := rand.New(rand.NewPCG(1, 1))
			sites := make([]Site, 1000)
			for i := range sites {
				sites[i] = Site{Name: fmt.Sprint(i), Row: r.Float64() * 3599, Col: r.Float64() * 3599}
				if c.round {
					sites[i].Row, sites[i].Col = math.Round(sites[i].Row), math.Round(sites[i].Col)
				}
			}
			before, runs := cpuTime(), 0
			for b.Loop() {
				runs++
				_, err := EvaluateSites(context.Background(), SitesJob{Source: src, Range: rng, Looks: looks, Sites: sites,
					Options: DefaultOptions(), DEMError: DEMError{Sigma: c.sigma, Correlation: 100}})
				require.NoError(b, err)
			}
			used := (cpuTime() - before) / float64(runs)
			b.ReportMetric(used/full, "masks")
			b.ReportMetric(used/float64(len(sites)*len(looks))/1e3, "cpu-us/pair")
			var m runtime.MemStats
			runtime.ReadMemStats(&m)
			b.ReportMetric(float64(m.HeapInuse)/(1<<20), "MiB")
		})
	}
}
