package main

import (
	"context"
	"math"
	"syscall"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// benchSide is the side of the benchmark's DEM in cells.
const benchSide = 3600

// mirrored reads the real mountain of testdata and mirrors its inner part, free
// of holes, across a square of benchSide cells: alpine terrain with the
// roughness of a real 30 m DEM.
func mirrored(b testing.TB) *dem.Memory {
	d, err := raster.Open("../../testdata/sthelens_30m_utm10_nad27.tif", raster.Options{})
	require.NoError(b, err)
	defer d.Close()
	g := d.Grid()
	const edge = 16
	rows, cols := g.Rows-2*edge, g.Cols-2*edge
	part := make([]float32, rows*cols)
	require.NoError(b, d.Read(dem.Window{Row: edge, Col: edge, Rows: rows, Cols: cols}, part))
	fold := func(i, n int) int {
		if i %= 2 * n; i >= n {
			i = 2*n - 1 - i
		}
		return i
	}
	z := make([]float32, benchSide*benchSide)
	for i := range z {
		z[i] = part[fold(i/benchSide, rows)*cols+fold(i%benchSide, cols)]
	}
	frame, err := dem.NewGrid(benchSide, benchSide, g.Transform, g.CRS, func(x, y []float64) error {
		for i := range x { // a plane patch at the equator: true metres
			x[i] = (x[i] - g.Transform[0]) / (geometry.SemiMajor * float64(geometry.Degree))
			y[i] = (y[i] - g.Transform[3]) / (geometry.MeridianRadius(0) * float64(geometry.Degree))
		}
		return nil
	})
	require.NoError(b, err)
	return &dem.Memory{Frame: frame, Heights: z}
}

// cpuSeconds returns the processor time the process has used: a measure that
// other work on the machine disturbs less than the clock.
func cpuSeconds() float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		panic(err)
	}
	return float64(u.Utime.Nano()) / 1e9
}

// BenchmarkMasksAgainstSlope measures shadow, layover and both margins, settled,
// against GDAL's Zevenbergen-Thorne slope of the same heights in memory, turn by
// turn, each on one thread; it reports the ratio of their processor times. GDAL looks
// for missing heights only where the raster declares a nodata value, as DEMs mostly do
// and as the masks always look; that slope, ratio-nodata, costs twice the other.
func BenchmarkMasksAgainstSlope(b *testing.B) {
	src := mirrored(b)
	rng, err := dem.Scan(context.Background(), src)
	require.NoError(b, err)
	plain, declared := inMemory(b, src, false), inMemory(b, src, true)
	for _, l := range []struct {
		name               string
		incidence, azimuth geometry.Angle
	}{{"39-78", 39, 78}, {"39-282", 39, 282}, {"33-191", 33, 191}, {"45-45", 45, 45}, {"23-78", 23, 78}, {"60-300", 60, 300}} {
		b.Run(l.name, func(b *testing.B) {
			look := geometry.NewLook()
			look.Name, look.Kind = "a", geometry.Fixed
			look.Incidence, look.Azimuth = l.incidence*geometry.Degree, l.azimuth*geometry.Degree
			options := mask.DefaultOptions()
			options.Threads = 1
			var slope, noData, masks float64
			for b.Loop() {
				slope += slopeSeconds(b, plain)
				noData += slopeSeconds(b, declared)
				before := cpuSeconds()
				_, err = mask.Run(context.Background(), mask.Job{
					Source: src, Range: rng, Looks: []geometry.Look{look}, Window: src.Frame.Whole(), Options: options,
					Layers: []mask.Layer{mask.LayoverLayer, mask.ShadowLayer, mask.Clearance, mask.FoldMargin},
				})
				require.NoError(b, err)
				masks += cpuSeconds() - before
			}
			cells := float64(b.N) * benchSide * benchSide
			b.ReportMetric(slope/cells*1e9, "slope-ns/cell")
			b.ReportMetric(masks/cells*1e9, "masks-ns/cell")
			b.ReportMetric(masks/slope, "ratio")
			b.ReportMetric(masks/noData, "ratio-nodata")
		})
	}
}

// inMemory returns the heights of a benchmark as a raster in memory, with or without a
// nodata value declared, until the benchmark ends.
func inMemory(b testing.TB, src *dem.Memory, noData bool) *godal.Dataset {
	godal.RegisterAll()
	ds, err := godal.Create(godal.Memory, "", 1, godal.Float32, benchSide, benchSide)
	require.NoError(b, err)
	b.Cleanup(func() { require.NoError(b, ds.Close()) })
	if noData {
		require.NoError(b, ds.Bands()[0].SetNoData(-32767))
	}
	require.NoError(b, ds.SetGeoTransform([6]float64{0, 30, 0, 0, 0, -30}))
	require.NoError(b, ds.Write(0, 0, src.Heights, benchSide, benchSide))
	return ds
}

// slopeSeconds returns the processor time of GDAL's slope. Where the runtime has
// interrupted Go code in a build with vectors, it leaves the upper halves of registers
// in use, and C code that mixes instruction sets takes up to ten times as long; the
// runtime's way to clear a large block ends with them out of use.
func slopeSeconds(b *testing.B, ds *godal.Dataset) float64 {
	clear(block)
	before := cpuSeconds()
	out, err := ds.Dem("", "slope", "", []string{"-of", "MEM", "-alg", "ZevenbergenThorne"})
	require.NoError(b, err)
	require.NoError(b, out.Close())
	return cpuSeconds() - before
}

// block is there to be cleared.
var block = make([]byte, 1<<16)

// BenchmarkBareMarchAgainstSlope measures what the masks begin with, by itself: the
// marches of shadow and of both partners along lanes a cell apart, with their margins,
// in plain loops over the whole DEM; no halo, no classes, no cells between the lanes,
// no missing heights, nothing settled. It takes the least of several runs of each.
func BenchmarkBareMarchAgainstSlope(b *testing.B) {
	src := mirrored(b)
	plain, declared := inMemory(b, src, false), inMemory(b, src, true)
	m := bareMarch{z: src.Heights}
	for i := range m.margins {
		m.margins[i] = make([]float32, len(m.z))
	}
	slope, noData, march := math.Inf(1), math.Inf(1), math.Inf(1)
	for range 3 {
		slope, noData = min(slope, slopeSeconds(b, plain)), min(noData, slopeSeconds(b, declared))
	}
	for b.Loop() {
		before := cpuSeconds()
		for k := 0; k < benchSide; k += bareLanes {
			m.lanes(k)
		}
		march = min(march, cpuSeconds()-before)
	}
	b.ReportMetric(march/benchSide/benchSide*1e9, "march-ns/cell")
	b.ReportMetric(march/slope, "ratio")
	b.ReportMetric(march/noData, "ratio-nodata")
}

// bareLanes is how many lanes are marched abreast.
const bareLanes = 240

// bareMarch is a march at 39 degrees; margins are clearance and those of ranges, of
// partners nearer and farther, lane by lane.
type bareMarch struct {
	z       []float32
	margins [3][]float32
}

// lanes marches bareLanes lanes from lane k on, away from the radar and back; lanes
// that leave the DEM go on at its other side.
func (m *bareMarch) lanes(k int) {
	const slope, incidence = 0.2, 39 * geometry.Degree
	cot, sin, cos := 1/incidence.Tan(), incidence.Sin(), incidence.Cos()
	var top, most, least [bareLanes]float64
	for i := range bareLanes {
		top[i], most[i], least[i] = math.Inf(-1), math.Inf(-1), math.Inf(1)
	}
	var h [bareLanes]float64
	sample := func(u int) (s float64, at int) {
		v := slope * float64(u)
		first, w := k+int(v), float32(v-math.Floor(v))
		row := m.z[u*benchSide : (u+1)*benchSide]
		for i := range h {
			c := (first + i) % (benchSide - 1)
			h[i] = float64(row[c] + w*(row[c+1]-row[c]))
		}
		return 30 * math.Hypot(1, slope) * float64(u), u*benchSide + k
	}
	for u := range benchSide {
		s, at := sample(u)
		clear, near := m.margins[0][at:at+bareLanes], m.margins[1][at:at+bareLanes]
		for i, h := range h {
			m, r := h+cot*s, sin*s-cos*h
			clear[i], near[i] = float32(m-top[i]), float32(r-most[i])
			if m > top[i] {
				top[i], most[i] = m, max(most[i], r)
			}
		}
	}
	for u := benchSide - 1; u >= 0; u-- {
		s, at := sample(u)
		clear, far := m.margins[0][at:at+bareLanes], m.margins[2][at:at+bareLanes]
		for i, h := range h {
			r := sin*s - cos*h
			if far[i] = float32(least[i] - r); clear[i] > 0 {
				least[i] = min(least[i], r)
			}
		}
	}
}
