package raster

import (
	"fmt"
	"math"
	"os/exec"
	"strconv"
	"strings"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// egm96 is the 15-minute grid of EGM96 undulations of Debian's proj-data.
const egm96 = "/usr/share/proj/egm96_15.gtx"

// level is a DEM of 5 x 5 cells at 1000 m around a place.
func level(t *testing.T, lon, lat, cell float64, crs string) string {
	const n = 5
	return fixture{rows: n, cols: n, crs: crs, value: func(int, int) float64 { return 1000 },
		transform: [6]float64{lon - n*cell/2, cell, 0, lat + n*cell/2, 0, -cell}}.write(t, "level.tif")
}

// middle returns the height of the middle cell of level.
func middle(t *testing.T, d *DEM) float64 {
	t.Helper()
	h := make([]float32, 1)
	require.NoError(t, d.Read(dem.Window{Row: 2, Col: 2, Rows: 1, Cols: 1}, h))
	return float64(h[0])
}

// onHeight is the rounding of float32 at 1000 m, half of 2^-14, that of the
// published value, and what the grid's bend at a node costs over two cells of a
// metre: 4e-5 m where it bends most here, 4e-5 m a metre, at Everest.
const onHeight = 6e-5/2 + 5e-4 + 1e-4

// TestPublishedUndulations: EGM96 undulations of mountains at the node of the
// 15-minute grid that is nearest to each, to the millimetre; by --geoid and by
// the vertical CRS alike. Source: NIMA TR8350.2 and the EGM96 15-minute grid of
// undulations, nodes nearest to the summits.
func TestPublishedUndulations(t *testing.T) {
	for _, c := range []struct {
		summit         string
		lat, lon, want float64
	}{
		{"Rainier", 46.8525, -121.7608, -18.496},
		{"St. Helens", 46.20, -122.19, -19.780},
		{"Wilson", 34.32, -118.15, -33.800},
		{"Everest", 27.99, 86.925, -28.944},
		{"Fuji", 35.3608, 138.7275, 40.784},
		{"K2", 35.8817, 76.5133, -22.198},
	} {
		t.Run(c.summit, func(t *testing.T) {
			node := func(v float64) float64 { return math.Round(v*4) / 4 }
			lon, lat := node(c.lon), node(c.lat)
			for crs, o := range map[string]Options{
				"EPSG:4326":      {Geoid: egm96},
				"EPSG:4326+5773": {},
			} {
				d, err := Open(level(t, lon, lat, 1e-5, crs), o)
				require.NoError(t, err)
				assert.InDelta(t, 1000+c.want, middle(t, d), onHeight, crs)
				require.NotNil(t, d.Facts().HeightShift)
				assert.Empty(t, d.Warnings())
				require.NoError(t, d.Close())
			}
		})
	}
}

// TestGeoidAgainstPROJ: between the nodes, at the seams of the grid at 180
// degrees and on a projected DEM, undulations are those that PROJ applies.
func TestGeoidAgainstPROJ(t *testing.T) {
	// Both are bilinear in the grid's float32 values; the DEM's cells hold
	// float32 of 1000 m.
	const tolerance = 1e-3
	proj := func(lon, lat float64) float64 {
		cmd := exec.Command("gdaltransform", "-s_srs", "EPSG:4326+5773", "-t_srs", "EPSG:4979")
		cmd.Stdin = strings.NewReader(fmt.Sprintf("%.9f %.9f 0\n", lon, lat))
		out, err := cmd.Output()
		require.NoError(t, err)
		fields := strings.Fields(string(out))
		require.Len(t, fields, 3, string(out))
		v, err := strconv.ParseFloat(fields[2], 64)
		require.NoError(t, err)
		return v
	}
	for _, p := range [][2]float64{{-121.7608, 46.8525}, {86.925, 27.99}, {179.95, -16.6}, {-179.97, 66.2}, {0.01, 0.02}, {15.5, 69.9}, {-70.1, -33.3}} {
		d, err := Open(level(t, p[0], p[1], 0.0001, "EPSG:4326"), Options{Geoid: egm96})
		require.NoError(t, err)
		assert.InDelta(t, 1000+proj(p[0], p[1]), middle(t, d), tolerance, "%v", p)
		require.NoError(t, d.Close())
	}
	d, err := Open(level(t, 603000, 5203000, 10, "EPSG:32632"), Options{Geoid: egm96})
	require.NoError(t, err)
	defer d.Close()
	l := d.Grid().At(2, 2)
	assert.InDelta(t, 1000+proj(l.Lon.Degrees(), l.Lat.Degrees()), middle(t, d), tolerance)
}

// TestShiftHasNoWindows: heights with a geoid are the same in every window,
// held or not, and within a centimetre of PROJ's over a DEM of many lattice
// nodes, whose sizes straddle the lattice's step. Between nodes of 32 cells of
// 30 m the grid's own bilinear pieces, which bend at 27 km, are all but met.
func TestShiftHasNoWindows(t *testing.T) {
	const rows, cols = 65, 98
	name := fixture{rows: rows, cols: cols, crs: "EPSG:32632", transform: utm32, dtype: godal.Float64,
		value: func(r, c int) float64 { return 1500 + float64(r*c%701) }}.write(t, "many.tif")
	held, err := Open(name, Options{Geoid: egm96})
	require.NoError(t, err)
	defer held.Close()
	read, err := Open(name, Options{Geoid: egm96, HoldBytes: -1})
	require.NoError(t, err)
	defer read.Close()
	all := heights(t, held)
	assert.Equal(t, all, heights(t, read))
	for _, w := range []dem.Window{{Row: 31, Col: 32, Rows: 3, Cols: 34}, {Row: 64, Col: 97, Rows: 1, Cols: 1}, {Rows: rows, Cols: 1}} {
		part := make([]float32, w.Rows*w.Cols)
		require.NoError(t, read.Read(w, part))
		for i, h := range part {
			assert.Equal(t, all[(w.Row+i/w.Cols)*cols+w.Col+i%w.Cols], h)
		}
	}
	r, err := read.Survey(t.Context())
	require.NoError(t, err)
	s := read.Facts().HeightShift
	assert.InDelta(t, 1500+s.Least, r.Min, s.Most-s.Least+1e-3)
	assert.Greater(t, s.Most, s.Least)
}

// TestHeightOffset: a constant goes to every height and to no hole.
func TestHeightOffset(t *testing.T) {
	name := fixture{crs: "EPSG:32632", transform: utm32, nodata: ptr(-1), value: func(r, c int) float64 {
		if r == 2 {
			return -1
		}
		return ramp(r, c)
	}}.write(t, "offset.tif")
	for _, offset := range []float64{0, -12.5, 48.25} {
		d, err := Open(name, Options{HeightOffset: &offset})
		require.NoError(t, err)
		requireHeights(t, d, 0, func(r, c int) float64 {
			if r == 2 {
				return math.NaN()
			}
			return ramp(r, c) + offset
		})
		assert.Empty(t, d.Warnings(), "what the heights refer to is said")
		require.NoError(t, d.Close())
	}
}

// TestGeoidsThatCannotServe: each is refused by name, with the reason.
func TestGeoidsThatCannotServe(t *testing.T) {
	name := level(t, 9, 46, 0.001, "EPSG:4326")
	small := fixture{rows: 3, cols: 3, crs: "EPSG:4326", transform: [6]float64{20, 1, 0, 50, 0, -1}, value: func(int, int) float64 { return 40 }}.write(t, "small.tif")
	hole := fixture{rows: 3, cols: 3, crs: "EPSG:4326", transform: [6]float64{7.5, 1, 0, 47.5, 0, -1}, nodata: ptr(-99), value: func(r, c int) float64 { return -99 }}.write(t, "hole.tif")
	high := fixture{rows: 3, cols: 3, crs: "EPSG:4326", transform: [6]float64{7.5, 1, 0, 47.5, 0, -1}, value: func(int, int) float64 { return 1800 }}.write(t, "high.tif")
	line := fixture{rows: 1, cols: 9, crs: "EPSG:4326", transform: [6]float64{0, 1, 0, 47.5, 0, -1}}.write(t, "line.tif")
	offset := 1.0
	for _, c := range []struct {
		dem  string
		o    Options
		says []string
	}{
		{name, Options{Geoid: "nowhere.gtx"}, []string{`geoid "nowhere.gtx"`, "cannot be opened"}},
		{name, Options{Geoid: small}, []string{small, "does not reach longitude", "covers the DEM"}},
		{name, Options{Geoid: hole}, []string{hole, "no value at longitude"}},
		{name, Options{Geoid: high}, []string{high, "1800", "no geoid undulation"}},
		{name, Options{Geoid: line}, []string{line, "at least 2 x 2"}},
		{name, Options{Geoid: egm96, HeightOffset: &offset}, []string{"give one of them"}},
		{level(t, 9, 46, 0.001, "EPSG:4979"), Options{Geoid: egm96}, []string{"above the ellipsoid already"}},
	} {
		_, err := Open(c.dem, c.o)
		var input *InputError
		require.ErrorAs(t, err, &input)
		for _, text := range c.says {
			assert.Contains(t, err.Error(), text)
		}
		assert.NotContains(t, err.Error(), "\n")
	}
}

// TestProjectedGeoid: undulations on a map of their own, a plane in its
// coordinates, come out as that plane.
func TestProjectedGeoid(t *testing.T) {
	plane := func(x, y float64) float64 { return 40 + (x-500000)/1e4 + (y-5100000)/2e4 }
	const size = 1000.0
	g := [6]float64{490000, size, 0, 5110000, 0, -size}
	file := fixture{rows: 20, cols: 20, crs: "EPSG:32632", transform: g, dtype: godal.Float64, value: func(r, c int) float64 {
		return plane(g[0]+(float64(c)+0.5)*size, g[3]-(float64(r)+0.5)*size)
	}}.write(t, "plane.tif")
	d, err := Open(fixture{rows: 40, cols: 50, crs: "EPSG:32632", transform: utm32, value: func(int, int) float64 { return 1000 }}.write(t, "dem.tif"), Options{Geoid: file})
	require.NoError(t, err)
	defer d.Close()
	// The places go to longitude and latitude by the grid's lattice and back,
	// good to centimetres, which the plane's slope makes micrometres.
	requireHeights(t, d, 1e-4, func(r, c int) float64 {
		x, y := d.Grid().XY(float64(r), float64(c))
		return 1000 + plane(x, y)
	})
}
