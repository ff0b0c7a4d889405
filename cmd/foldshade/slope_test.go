package main

import (
	"context"
	"math"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// TestLocalIncidenceAgainstSlopeAndAspect holds the terrain normal behind the local
// incidence against GDAL's slope s and aspect a of the same heights of a real mountain
// (Zevenbergen & Thorne, Earth Surface Processes and Landforms 12, 1987, as GDAL 3.6
// has it): for a look towards azimuth k at incidence i
//
//	cos(local) = cos i cos s - sin i sin s cos(a - k)
//
// Slope and aspect come as float32 degrees, good to 4e-6 and 2e-5; the frame, a plane at
// the equator, has metres good to 3e-6 in the window, 9e-5 degrees of a slope.
func TestLocalIncidenceAgainstSlopeAndAspect(t *testing.T) {
	const rows, cols, most = 400, 300, 1.3e-4
	src := mirrored(t)
	ds := inMemory(t, src, false)
	slope := demOf(t, ds, "slope", "-alg", "ZevenbergenThorne")
	aspect := demOf(t, ds, "aspect", "-alg", "ZevenbergenThorne")
	span, err := dem.Scan(context.Background(), src)
	require.NoError(t, err)
	for _, l := range [][2]float64{{39, 78}, {23, 191}, {61, 304.5}, {45, 0}} {
		look := geometry.NewLook()
		look.Name, look.Kind = "a", geometry.Fixed
		look.Incidence, look.Azimuth = geometry.Angle(l[0])*geometry.Degree, geometry.Angle(l[1])*geometry.Degree
		got := make([]float32, benchSide*benchSide)
		_, err = mask.Run(context.Background(), mask.Job{
			Source: src, Range: span, Looks: []geometry.Look{look}, Layers: []mask.Layer{mask.LocalIncidence},
			Window: dem.Window{Row: 1, Col: 1, Rows: rows, Cols: cols}, Options: mask.DefaultOptions(),
			Emit: func(_ int, tile *mask.Tile) error {
				w := tile.Window
				for row := range w.Rows {
					copy(got[(w.Row+row)*benchSide+w.Col:][:w.Cols], tile.Values[mask.LocalIncidence][0][row*w.Cols:])
				}
				return nil
			},
		})
		require.NoError(t, err)
		worst, steepest := 0.0, 0.0
		for row := 1; row <= rows; row++ {
			for col := 1; col <= cols; col++ {
				n := row*benchSide + col
				s, a := rad(slope[n]), rad(aspect[n]) // level ground has no aspect, and needs none
				i, k := l[0]*math.Pi/180, l[1]*math.Pi/180
				want := math.Acos(math.Cos(i)*math.Cos(s)-math.Sin(i)*math.Sin(s)*math.Cos(a-k)) * 180 / math.Pi
				worst, steepest = max(worst, math.Abs(want-float64(got[n]))), max(steepest, float64(slope[n]))
			}
		}
		t.Logf("incidence %v, azimuth %v: slopes up to %.1f degrees, at most %.2g degrees off", l[0], l[1], steepest, worst)
		assert.Greater(t, steepest, 30.)
		assert.Less(t, worst, most, "incidence %v, azimuth %v", l[0], l[1])
	}
}

// demOf returns what GDAL derives from heights, in full.
func demOf(t testing.TB, ds *godal.Dataset, mode string, switches ...string) []float32 {
	out, err := ds.Dem("", mode, "", append([]string{"-of", "MEM"}, switches...))
	require.NoError(t, err)
	all := make([]float32, benchSide*benchSide)
	require.NoError(t, out.Read(0, 0, all, benchSide, benchSide))
	require.NoError(t, out.Close())
	return all
}

func rad(degrees float32) float64 { return float64(degrees) * math.Pi / 180 }
