package mask

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/mask/internal/testterrain"
)

// Near a pole the lanes of a wide grid spread, and the last of a strip may lie beyond
// the columns in which bends are looked for: there no lane is trusted.
func TestLanesBeyondWhatIsLookedAt(t *testing.T) {
	g := testterrain.Geographic(260, 300, 0.1, 0.025, 8, 78)
	src := &dem.Memory{Frame: g, Heights: make([]float32, 260*300)}
	for i := range src.Heights { // gentle, so that nothing else is doubtful
		src.Heights[i] = float32(20 * math.Sin(float64(i%300)/25))
	}
	span, err := dem.Scan(context.Background(), src)
	require.NoError(t, err)
	ln := fixedLanes(g, fixed(50, 58))
	var f field
	u0, u1, v0, v1 := ln.window(g.Whole())
	f.setUp(ln, limits{low: span.Min, high: span.Max, ceiling: span.Max, openEdge: true, holeHeight: nan}, u0, u1, v0, v1)
	require.NoError(t, f.load(src))
	var p strip
	beyond := 0
	for j := range f.strips {
		if !p.setUp(&f, f.first+j) {
			continue
		}
		p.forward()
		p.backward(func(u int) {
			if p.in != whole {
				return
			}
			var r laneMargins
			r.fill(&p, u, true)
			// bends looks at patches - 1 columns after the base.
			last := float64(p.gentle[u-p.ua].base + patches - 1)
			for k := 1; k <= laneStep; k++ {
				unseen := p.column(float64(k+1)) > last
				if unseen {
					beyond++
				}
				for _, rough := range []*byLane32{&r.roughM, &r.roughN, &r.roughF} {
					require.Equal(t, unseen, math.IsInf(float64(rough[k]), 1), "strip %d, row %d, lane %d at column %v", j, u, k, p.column(float64(k)))
				}
			}
		})
	}
	t.Logf("%d gaps beyond", beyond)
	require.Greater(t, beyond, 100)
}
