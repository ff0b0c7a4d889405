package mask

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// BenchmarkTracks compares the cost of a cell for moving platforms with that of
// a plane wave with about the same geometry at the middle: an orbit at 39
// degrees over 27 km, a flight line beside 12 km, which it sees at 35 to 66
// degrees.
func BenchmarkTracks(b *testing.B) {
	for _, side := range []int{900, 400} {
		src := mountainSquare(b, side)
		rng, err := dem.Scan(context.Background(), src)
		require.NoError(b, err)
		at := func(row, col float64) geometry.Place {
			l := src.Frame.At(row, col)
			return geometry.Place{Lon: l.Lon, Lat: l.Lat}
		}
		looks := []geometry.Look{fixed(39, 78), geometry.NewLook()}
		l := &looks[1]
		l.Name, l.Side = "track", geometry.Right
		if side == 900 {
			l.Kind, l.Pass, l.Altitude = geometry.Orbit, geometry.Ascending, 693e3
			l.Inclination, l.Incidence = 98.18*geometry.Degree, 39*geometry.Degree
		} else { // 8 km above the ground, 6 to 18 km away
			looks[0] = fixed(55, 78)
			l.Kind, l.Start, l.End, l.Height = geometry.Flight, at(600, -130), at(-200, -270), 9500
		}
		for _, look := range looks {
			b.Run(fmt.Sprintf("%d/%s", side, look.Kind), func(b *testing.B) {
				before, runs := cpuTime(), 0
				for b.Loop() {
					runs++
					_, err := Run(context.Background(), Job{Source: src, Range: rng, Looks: []geometry.Look{look},
						Layers: []Layer{LayoverLayer, ShadowLayer, Clearance, FoldMargin}, Window: src.Frame.Whole(), Options: DefaultOptions()})
					require.NoError(b, err)
				}
				b.ReportMetric((cpuTime()-before)/float64(runs)/float64(side)/float64(side), "cpu-ns/cell")
			})
		}
	}
}
