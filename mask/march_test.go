package mask

import (
	"context"
	"fmt"
	"image"
	"image/png"
	"os"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
)

// flatLocator places map metres on a small patch of the ellipsoid at the
// equator, so that ground metres are map metres to one part in 10^7.
func flatLocator(x, y []float64) error {
	for i := range x {
		x[i] = x[i] / (geometry.SemiMajor * float64(geometry.Degree))
		y[i] = y[i] / (geometry.MeridianRadius(0) * float64(geometry.Degree))
	}
	return nil
}

// mountainSquare mirrors the inner part, free of holes, of the real mountain of
// testdata across a square of cells: the roughness of a real 30 m DEM.
func mountainSquare(t testing.TB, side int) *dem.Memory {
	file, err := os.Open("../testdata/sthelens_30m.png")
	require.NoError(t, err)
	defer file.Close()
	img, err := png.Decode(file)
	require.NoError(t, err)
	grey := img.(*image.Gray16)
	const edge = 16
	rows, cols := grey.Rect.Dy()-2*edge, grey.Rect.Dx()-2*edge
	fold := func(i, n int) int {
		if i %= 2 * n; i >= n {
			i = 2*n - 1 - i
		}
		return i + edge
	}
	g, err := dem.NewGrid(side, side, [6]float64{0, 30, 0, float64(side) * 30, 0, -30}, "", flatLocator)
	require.NoError(t, err)
	z := make([]float32, side*side)
	for i := range z {
		z[i] = float32(grey.Gray16At(fold(i%side, cols), fold(i/side, rows)).Y)
	}
	return &dem.Memory{Frame: g, Heights: z}
}

func fixed(incidence, azimuth float64) geometry.Look {
	l := geometry.NewLook()
	l.Name, l.Kind = "a", geometry.Fixed
	l.Incidence, l.Azimuth = geometry.Angle(incidence)*geometry.Degree, geometry.Angle(azimuth)*geometry.Degree
	return l
}

// cpuTime returns the processor time the process has used, nanoseconds: a
// measure that other work on the machine disturbs little.
func cpuTime() float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		panic(err)
	}
	return float64(u.Utime.Nano())
}

func BenchmarkMasks(b *testing.B) {
	src := mountainSquare(b, 3600)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	for _, az := range []float64{78, 191, 225} {
		b.Run(fmt.Sprint(az), func(b *testing.B) {
			o := DefaultOptions()
			before, runs := cpuTime(), 0
			for b.Loop() {
				runs++
				_, err := Run(context.Background(), Job{Source: src, Range: rng, Looks: []geometry.Look{fixed(39, az)},
					Layers: []Layer{LayoverLayer, ShadowLayer, Clearance, FoldMargin}, Window: src.Frame.Whole(), Options: o})
				require.NoError(b, err)
			}
			b.ReportMetric((cpuTime()-before)/float64(runs)/3600/3600, "cpu-ns/cell")
		})
	}
}
