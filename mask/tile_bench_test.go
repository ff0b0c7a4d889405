package mask

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// BenchmarkTiles takes what a tile costs beside the march of its lanes: reading
// it and its field, and turning raw codes and margins into layers.
func BenchmarkTiles(b *testing.B) {
	const side = 3600
	src := mountainSquare(b, side)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	for _, az := range []float64{78, 191, 225} {
		r, err := newRunner(Job{Source: src, Range: rng, Looks: []geometry.Look{fixed(39, az)},
			Layers: []Layer{LayoverLayer, ShadowLayer, Clearance, FoldMargin}, Window: src.Frame.Whole(), Options: DefaultOptions()})
		require.NoError(b, err)
		tiles := r.tiles()
		w := r.newWorker()
		require.NoError(b, w.tile(context.Background(), tiles[0]))
		raw := append([]uint8{}, w.sheet.raw...)
		for _, part := range []string{"sheet", "field", "fill"} {
			b.Run(fmt.Sprintf("%v/%v", az, part), func(b *testing.B) {
				before, runs := cpuTime(), 0
				for b.Loop() {
					runs++
					for _, t := range tiles {
						switch part {
						case "sheet":
							require.NoError(b, w.sheet.read(src, t))
						case "field":
							u0, u1, v0, v1 := r.looks[0].window(t)
							w.field.setUp(r.looks[0], r.lim, u0, u1, v0, v1)
							require.NoError(b, w.field.load(src))
						case "fill": // the codes of one tile stand for those of all
							n := t.Rows * t.Cols
							require.NoError(b, w.sheet.read(src, t))
							copy(w.sheet.raw, raw)
							w.sheet.clear, w.sheet.fold = resize(w.sheet.clear, n), resize(w.sheet.fold, n)
							w.fill(0)
						}
					}
				}
				b.ReportMetric((cpuTime()-before)/float64(runs)/side/side, "cpu-ns/cell")
			})
		}
	}
}
