package raster

import (
	"fmt"
	"math"
	"os/exec"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/geometry"
)

// TestGroundMetresAgainstPROJ: a step of a ten-thousandth of a degree north or east
// from a place of a projected DEM, brought to the map by PROJ, is by the grid's own
// ground vectors as long as the ellipsoid has it, and due north or due east: so are the
// convergence and both scales. A step to both sides leaves third derivatives; PROJ's
// program prints a micrometre.
func TestGroundMetresAgainstPROJ(t *testing.T) {
	const step, tolerance = 1e-4, 5e-5 // degrees; metres of 22 or 15
	d, err := Open(mountain, Options{})
	require.NoError(t, err)
	defer func() { require.NoError(t, d.Close()) }()
	g := d.Grid()
	for _, at := range [][2]float64{{234, 163}, {3, 3}, {460, 320}} {
		l := g.At(at[0], at[1])
		lon, lat := l.Lon.Degrees(), l.Lat.Degrees()
		x, y := toMap(t, [][2]float64{{lon, lat - step}, {lon, lat + step}, {lon - step, lat}, {lon + step, lat}}, "EPSG:26710")
		ground := func(a, b int) (e, n float64) {
			dc, dr := (x[b]-x[a])/g.Transform[1], (y[b]-y[a])/g.Transform[5]
			return dc*l.ColE + dr*l.RowE, dc*l.ColN + dr*l.RowN
		}
		angle := 2 * step * math.Pi / 180
		e, n := ground(0, 1)
		assert.InDelta(t, 0, e, tolerance, "east of a step north at %v", at)
		assert.InDelta(t, geometry.MeridianRadius(l.Lat)*angle, n, tolerance, "north of a step north at %v", at)
		e, n = ground(2, 3)
		sin, cos := math.Sincos(float64(l.Lat))
		e2 := geometry.Flattening * (2 - geometry.Flattening)
		// The radius of the parallel: Snyder 1987, eq. 4-20 and 4-21 (from memory).
		assert.InDelta(t, geometry.SemiMajor/math.Sqrt(1-e2*sin*sin)*cos*angle, e, tolerance, "east of a step east at %v", at)
		assert.InDelta(t, 0, n, tolerance, "north of a step east at %v", at)
		t.Logf("%v: convergence %.5f degrees", at, math.Atan2(-l.RowE, -l.RowN)*180/math.Pi)
	}
}

// toMap brings longitudes and latitudes to a CRS by PROJ, as GDAL's program calls it.
func toMap(t *testing.T, places [][2]float64, crs string) (x, y []float64) {
	var in strings.Builder
	for _, p := range places {
		fmt.Fprintf(&in, "%.12f %.12f\n", p[0], p[1])
	}
	cmd := exec.Command("gdaltransform", "-s_srs", "EPSG:4326", "-t_srs", crs, "-output_xy")
	cmd.Stdin = strings.NewReader(in.String())
	out, err := cmd.Output()
	require.NoError(t, err)
	for line := range strings.Lines(string(out)) {
		var a, b float64
		_, err := fmt.Sscan(line, &a, &b)
		require.NoError(t, err, line)
		x, y = append(x, a), append(y, b)
	}
	require.Len(t, x, len(places))
	return x, y
}
