package mask

import (
	"context"
	"math"
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

// alpine is a made range of peaks and valleys, about 2500 m of relief, rough
// down to the cell.
func alpine(rows, cols int, cell float64) *dem.Memory {
	g, err := dem.NewGrid(rows, cols, [6]float64{0, cell, 0, float64(rows) * cell, 0, -cell}, "", flatLocator)
	if err != nil {
		panic(err)
	}
	z := make([]float32, rows*cols)
	const part = 900 // computed once, then mirrored across the grid
	fold := func(i int) int {
		if i %= 2 * part; i >= part {
			i = 2*part - 1 - i
		}
		return i
	}
	for r := range rows {
		for c := range cols {
			if r >= part || c >= part {
				z[r*cols+c] = z[fold(r)*cols+fold(c)]
				continue
			}
			x, y := float64(c)*cell, float64(r)*cell
			h := 0.0
			for o, f := 0, 1.0; o < 9; o, f = o+1, f*2 {
				a := 1.3*float64(o) + 0.7
				p := (x*math.Cos(a)+y*math.Sin(a))*f/9000 + 3*math.Sin(a)
				q := (-x*math.Sin(a)+y*math.Cos(a))*f/9000 + 5*math.Cos(a)
				h += (1 - math.Abs(math.Sin(p)*math.Cos(q))) / math.Pow(f, 0.95)
			}
			z[r*cols+c] = float32(900 + 2600*h)
		}
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
	src := alpine(3600, 3600, 30)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	for _, az := range []float64{78, 191} {
		b.Run("", func(b *testing.B) {
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
