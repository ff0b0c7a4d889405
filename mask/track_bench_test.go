package mask

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// BenchmarkTracks compares the cost of a cell for platforms with that of a plane
// wave with about the same geometry at the middle: an orbit at 39 degrees over
// 27 km; a flight line beside 12 km, which it sees at 35 to 66 degrees; a radar
// on the ground, which sees most of 27 km at 70 degrees and more.
func BenchmarkTracks(b *testing.B) {
	for _, side := range []int{900, 400} {
		src := mountainSquare(b, side)
		at := func(row, col float64) geometry.Place {
			l := src.Frame.At(row, col)
			return geometry.Place{Lon: l.Lon, Lat: l.Lat}
		}
		track := geometry.NewLook()
		track.Name, track.Side = "track", geometry.Right
		tripod := func(row, col float64) geometry.Look {
			l := geometry.NewLook()
			l.Name, l.Kind, l.Position, l.Antenna = "tripod", geometry.Tripod, at(row, col), 25
			return l
		}
		if side == 900 {
			track.Kind, track.Pass, track.Altitude = geometry.Orbit, geometry.Ascending, 693e3
			track.Inclination, track.Incidence = 98.18*geometry.Degree, 39*geometry.Degree
			benchTrack(b, src, "900/fixed", fixed(39, 78))
			benchTrack(b, src, "900/orbit", track)
			benchTrack(b, src, "900/fixed70", fixed(70, 78))
			benchTrack(b, src, "900/tripod-middle", tripod(450.3, 449.6))
			benchTrack(b, src, "900/tripod-edge", tripod(440.2, 20.7))
			continue
		}
		// 8 km above the ground, 6 to 18 km away
		track.Kind, track.Start, track.End, track.Height = geometry.Flight, at(600, -130), at(-200, -270), 9500
		benchTrack(b, src, "400/fixed", fixed(55, 78))
		benchTrack(b, src, "400/flight", track)
	}
}

func benchTrack(b *testing.B, src *dem.Memory, name string, look geometry.Look) {
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	cells := float64(src.Frame.Rows * src.Frame.Cols)
	b.Run(name, func(b *testing.B) {
		before, runs := cpuTime(), 0
		for b.Loop() {
			runs++
			_, err := Run(context.Background(), Job{Source: src, Range: rng, Looks: []geometry.Look{look},
				Layers: []Layer{LayoverLayer, ShadowLayer, Clearance, FoldMargin}, Window: src.Frame.Whole(), Options: DefaultOptions()})
			require.NoError(b, err)
		}
		b.ReportMetric((cpuTime()-before)/float64(runs)/cells, "cpu-ns/cell")
	})
}
