package raster

import (
	"context"
	"errors"
	"fmt"
	"math"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// textFile writes a file and returns its path.
func textFile(t *testing.T, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, os.WriteFile(path, []byte(text), 0o644))
	return path
}

// cutShort keeps the first part of a file of incompressible blocks.
func cutShort(t *testing.T, keep float64) string {
	t.Helper()
	path := fixture{rows: 200, cols: 300, crs: "EPSG:32632", transform: utm32, options: []string{"TILED=YES", "BLOCKXSIZE=64", "BLOCKYSIZE=64"}}.write(t, "cut.tif")
	info, err := os.Stat(path)
	require.NoError(t, err)
	require.NoError(t, os.Truncate(path, int64(keep*float64(info.Size()))))
	return path
}

// world is a virtual raster without sources, of any size.
func world(t *testing.T, rows, cols int, crs, transform string) string {
	return textFile(t, "made.vrt", fmt.Sprintf(`<VRTDataset rasterXSize="%d" rasterYSize="%d"><SRS>%s</SRS><GeoTransform>%s</GeoTransform><VRTRasterBand dataType="Float32" band="1"/></VRTDataset>`, cols, rows, crs, transform))
}

// translated is a fixture copied by GDAL with switches.
func translated(t *testing.T, f fixture, switches ...string) string {
	t.Helper()
	src, err := godal.Open(f.write(t, "source.tif"))
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), "copy.tif")
	out, err := src.Translate(path, switches)
	require.NoError(t, err)
	require.NoError(t, out.Close())
	require.NoError(t, src.Close())
	return path
}

// twoTables is a GeoPackage with two rasters.
func twoTables(t *testing.T) string {
	path := filepath.Join(t.TempDir(), "two.gpkg")
	for _, table := range []string{"a", "b"} {
		src, err := godal.Open(fixture{crs: "EPSG:4326", transform: [6]float64{9, 0.1, 0, 46, 0, -0.1}}.write(t, "source.tif"))
		require.NoError(t, err)
		out, err := src.Translate(path, []string{"-of", "GPKG", "-co", "RASTER_TABLE=" + table, "-co", "APPEND_SUBDATASET=YES"})
		require.NoError(t, err)
		require.NoError(t, out.Close())
		require.NoError(t, src.Close())
	}
	return path
}

// TestRefused: each file that cannot serve gives one line that names the file,
// what was found and the next step.
func TestRefused(t *testing.T) {
	tif := func(f fixture) func(*testing.T) string {
		return func(t *testing.T) string {
			if f.crs == "" {
				f.crs = "EPSG:32632"
			} else if f.crs == "none" {
				f.crs = ""
			}
			if f.transform == [6]float64{} {
				f.transform = utm32
			} else if f.transform == [6]float64{9} {
				f.transform = [6]float64{}
			}
			return f.write(t, "bad.tif")
		}
	}
	deg := func(x, y float64) [6]float64 { return [6]float64{x, 0.1, 0, y, 0, -0.1} }
	made := func(rows, cols int, crs, transform string) func(*testing.T) string {
		return func(t *testing.T) string { return world(t, rows, cols, crs, transform) }
	}
	cases := []struct {
		name  string
		make  func(*testing.T) string
		o     Options
		found string
		next  string
	}{
		{"no name", func(*testing.T) string { return "" }, Options{}, "no name given", "give the path"},
		{"no such file", func(t *testing.T) string { return filepath.Join(t.TempDir(), "gone.tif") }, Options{}, "no such file", "check the path"},
		{"no such member", func(t *testing.T) string {
			zip := filepath.Join(t.TempDir(), "a.zip")
			pack(t, zip, textFile(t, "x.txt", "x"))
			return "/vsizip/" + zip + "/gone.tif"
		}, Options{}, "nothing found under this name", "gdalinfo"},
		{"folder", func(t *testing.T) string { return t.TempDir() }, Options{}, "is a folder", "name the raster in it"},
		{"empty file", func(t *testing.T) string { return textFile(t, "e.tif", "") }, Options{}, "empty", "fetch it again"},
		{"archive", func(t *testing.T) string {
			zip := filepath.Join(t.TempDir(), "a.zip")
			pack(t, zip, textFile(t, "x.txt", "x"))
			return zip
		}, Options{}, "is an archive", "/vsizip/"},
		{"text", func(t *testing.T) string { return textFile(t, "notes.txt", "no raster") }, Options{}, "not a raster", "convert it to GeoTIFF"},
		{"vector", func(t *testing.T) string {
			return textFile(t, "p.geojson", `{"type":"FeatureCollection","features":[{"type":"Feature","properties":{},"geometry":{"type":"Point","coordinates":[9,46]}}]}`)
		}, Options{}, "not a raster", "convert it to GeoTIFF"},
		{"header cut", func(t *testing.T) string { return cutShort(t, 1e-5) }, Options{}, "", "gdalinfo"},
		{"ground control points", func(t *testing.T) string {
			return translated(t, fixture{crs: "EPSG:32632"}, "-gcp", "0", "0", "500000", "5100000", "-gcp", "7", "0", "500210", "5100000", "-gcp", "0", "5", "500000", "5099850", "-a_srs", "EPSG:32632")
		}, Options{}, "ground control points", "gdalwarp"},
		{"several rasters in one file", twoTables, Options{}, "holds 2 rasters and none by itself", "name one of them, such as GPKG:"},
		{"nothing at the address", func(t *testing.T) string {
			server := httptest.NewServer(http.NotFoundHandler())
			t.Cleanup(server.Close)
			return "/vsicurl/" + server.URL + "/dem.tif"
		}, Options{}, "cannot be fetched", "check the address"},
		{"another planet", tif(fixture{crs: "none", transform: deg(10, 46)}), Options{CRS: "+proj=longlat +a=3396190 +b=3376200 +no_defs"}, "WGS84", "gdalwarp"},
		{"no CRS", tif(fixture{crs: "none"}), Options{}, "no coordinate reference system", "--crs"},
		{"CRS not understood", tif(fixture{}), Options{CRS: "EPSG:999999"}, "EPSG:999999", "--crs takes"},
		{"local CRS", tif(fixture{}), Options{CRS: `LOCAL_CS["site grid",UNIT["metre",1]]`}, "neither geographic nor projected", "--crs"},
		{"geocentric CRS", tif(fixture{}), Options{CRS: "EPSG:4978"}, "neither geographic nor projected", "--crs"},
		{"no geotransform", tif(fixture{transform: [6]float64{9}}), Options{}, "no geotransform", "gdal_translate -a_ullr"},
		{"rotated", tif(fixture{transform: [6]float64{500000, 30, 2, 5100000, 2, -30}}), Options{}, "rotated", "gdalwarp"},
		{"quarter turn", made(5, 5, "EPSG:32632", "500000,0,30,5100000,30,0"), Options{}, "rotated", "gdalwarp"},
		{"NaN geotransform", made(5, 5, "EPSG:32632", "500000,nan,0,5100000,0,-30"), Options{}, "geotransform holds NaN", "gdal_translate -a_ullr"},
		{"zero cells", made(5, 5, "EPSG:32632", "500000,0,0,5100000,0,-30"), Options{}, "0 x -30 map units", "gdal_translate -a_ullr"},
		{"complex", tif(fixture{dtype: godal.CFloat32}), Options{}, "complex numbers", "give a raster of heights"},
		{"complex asked", tif(fixture{dtype: godal.CFloat32}), Options{Band: 1}, "complex numbers", "choose another with --band"},
		{"paletted", tif(fixture{dtype: godal.Byte, table: true}), Options{}, "colour indices", "--band"},
		{"all alpha", tif(fixture{dtype: godal.Byte, colours: []godal.ColorInterp{godal.CIAlpha}}), Options{}, "alpha mask", "--band"},
		{"image", tif(fixture{dtype: godal.Byte, bands: 3, colours: []godal.ColorInterp{godal.CIRed, godal.CIGreen, godal.CIBlue}}), Options{}, "image channel (red)", "--band"},
		{"band beyond", tif(fixture{}), Options{Band: 2}, "no band 2", "--band takes 1 to 1"},
		{"negative band", tif(fixture{}), Options{Band: -1}, "no band -1", "--band takes 1 to 1"},
		{"unit not known", tif(fixture{}), Options{VerticalUnit: "ell"}, `"ell"`, "--vertical-unit takes"},
		{"all nodata", tif(fixture{nodata: ptr(7), value: func(int, int) float64 { return 7 }}), Options{}, "all 35 cells of band 1 are nodata", "--band"},
		{"all NaN", tif(fixture{value: func(int, int) float64 { return math.NaN() }}), Options{HoldBytes: -1}, "all 35 cells of band 1 are nodata", "--band"},
		{"two rows", tif(fixture{rows: 2, cols: 9}), Options{}, "2 x 9 cells", "at least 3 x 3"},
		{"two columns", tif(fixture{rows: 9, cols: 2}), Options{}, "9 x 2 cells", "at least 3 x 3"},
		{"cells overflow", made(2147483647, 2147483647, "EPSG:32632", "500000,1e-3,0,5100000,0,-1e-3"), Options{}, "2147483647 x 2147483647", "gdal_translate -projwin"},
		{"swapped", tif(fixture{crs: "EPSG:4326", transform: deg(46, -122)}), Options{}, "look swapped", "gdal_translate -a_ullr WEST"},
		{"metres in degrees", tif(fixture{crs: "EPSG:4326", transform: utm32}), Options{}, "beyond 90 degrees", "--crs"},
		{"longitude out of range", tif(fixture{crs: "EPSG:4326", transform: deg(400, 46)}), Options{}, "longitudes run from 400", "--crs"},
		{"antimeridian, geographic", tif(fixture{crs: "EPSG:4326", transform: deg(179.7, 46)}), Options{}, "antimeridian", "gdal_translate -projwin"},
		{"antimeridian, projected", tif(fixture{crs: "EPSG:32660", transform: [6]float64{600000, 30000, 0, 5100000, 0, -30000}}), Options{}, "antimeridian", "gdal_translate -projwin"},
		{"pole, geographic", tif(fixture{crs: "EPSG:4326", transform: deg(10, 90)}), Options{}, "pole", "gdal_translate -projwin"},
		{"south pole, geographic", tif(fixture{crs: "EPSG:4326", transform: deg(10, -89.5)}), Options{}, "pole", "gdal_translate -projwin"},
		{"pole inside", tif(fixture{crs: "EPSG:3413", transform: [6]float64{-100, 30, 0, 100, 0, -30}}), Options{}, "pole", "gdal_translate -projwin"},
		{"pole on the edge", tif(fixture{crs: "EPSG:3031", transform: [6]float64{0, 30, 0, 0, 0, -30}}), Options{}, "pole", "gdal_translate -projwin"},
		{"off the projection", tif(fixture{crs: "ESRI:54009", transform: [6]float64{17900000, 30000, 0, 5000000, 0, -30000}}), Options{}, "outside what its coordinate reference system", "--crs"},
		{"cut short", func(t *testing.T) string { return cutShort(t, 0.6) }, Options{}, "band 1, rows 0 to 199, columns 0 to 299 cannot be read", "fetch it again"},
		{"cut short, by window", func(t *testing.T) string { return cutShort(t, 0.6) }, Options{HoldBytes: -1}, "cannot be read", "fetch it again"},
		{"source of a virtual raster gone", func(t *testing.T) string {
			return vrt(t, filepath.Join(t.TempDir(), "gone.tif"), 5, 7, "EPSG:32632", utm32, "")
		}, Options{}, "gone.tif", "gdalinfo"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			name := c.make(t)
			d, err := Open(name, c.o)
			if err == nil {
				defer func() { assert.NoError(t, d.Close()) }()
				_, err = d.Survey(context.Background())
			}
			var input *InputError
			require.ErrorAs(t, err, &input)
			assert.Contains(t, err.Error(), fmt.Sprintf("dem %q: ", name))
			assert.Contains(t, err.Error(), c.found)
			assert.Contains(t, err.Error(), c.next)
			assert.NotContains(t, err.Error(), "\n")
			assert.NotContains(t, err.Error(), "unknown cpl error")
		})
	}
}

// TestReadRefused: a damaged file fails on the windows that touch the damage
// and no others, and a closed one on all.
func TestReadRefused(t *testing.T) {
	d, err := Open(cutShort(t, 0.6), Options{HoldBytes: -1})
	require.NoError(t, err)
	w := d.Grid().Whole()
	w.Rows = 64
	require.NoError(t, d.Read(w, make([]float32, w.Rows*w.Cols)))
	w.Row, w.Rows = 190, 2
	err = d.Read(w, make([]float32, w.Rows*w.Cols))
	require.ErrorContains(t, err, "rows 190 to 191, columns 0 to 299")
	require.NoError(t, d.Close())
	w.Row = 0
	require.ErrorContains(t, d.Read(w, make([]float32, w.Rows*w.Cols)), "after it was closed")
	assert.Panics(t, func() { _ = d.Read(w, nil) })
	w.Row = 199
	assert.Panics(t, func() { _ = d.Read(w, make([]float32, w.Rows*w.Cols)) })
}

// TestNearTheEdge: what ends close to a pole or on the antimeridian is fine.
func TestNearTheEdge(t *testing.T) {
	for name, f := range map[string]fixture{
		"a cell below the pole": {crs: "EPSG:4326", transform: [6]float64{10, 0.1, 0, 89.9, 0, -0.1}},
		"south-up to the pole":  {crs: "EPSG:4326", transform: [6]float64{10, 0.1, 0, 89.3, 0, 0.1}},
		"beside the pole":       {crs: "EPSG:3413", transform: [6]float64{1, 30, 0, 100, 0, -30}},
		"ends at 180":           {crs: "EPSG:4326", transform: [6]float64{179.3, 0.1, 0, 46, 0, -0.1}},
		"last centre at 180":    {crs: "EPSG:4326", transform: [6]float64{179.35, 0.1, 0, 46, 0, -0.1}},
		"begins at -180":        {crs: "EPSG:4326", transform: [6]float64{-180, 0.1, 0, 46, 0, -0.1}},
		"all beyond 180":        {crs: "EPSG:4326", transform: [6]float64{181, 0.1, 0, 46, 0, -0.1}},
		"edge of the ellipse":   {crs: "ESRI:54009", transform: [6]float64{17900000, 30, 0, 100, 0, -30}},
	} {
		t.Run(name, func(t *testing.T) {
			d, err := Open(f.write(t, "dem.tif"), Options{})
			require.NoError(t, err)
			defer func() { require.NoError(t, d.Close()) }()
			for _, p := range append(d.Facts().Corners, d.Facts().Centre) {
				assert.True(t, p.Lon >= -180 && p.Lon < 180, "longitude %v", p.Lon)
				assert.True(t, p.Lat > -90 && p.Lat < 90, "latitude %v", p.Lat)
			}
			requireHeights(t, d, 0, ramp)
		})
	}
}

// TestSurveyStops: a cancelled survey says so and leaves the DEM usable.
func TestSurveyStops(t *testing.T) {
	d, err := Open(mountain, Options{})
	require.NoError(t, err)
	defer func() { require.NoError(t, d.Close()) }()
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err = d.Survey(ctx)
	require.ErrorIs(t, err, context.Canceled)
	var input *InputError
	assert.False(t, errors.As(err, &input))
	r, err := d.Survey(context.Background())
	require.NoError(t, err)
	assert.Equal(t, 2543.0, r.Max)
}

// FuzzWKT: no text makes the reader panic or lose its place, and what it
// accepts it accepts again from its own copy.
func FuzzWKT(f *testing.F) {
	for _, s := range []string{`GEOGCRS["WGS 84",ID["EPSG",4326]]`, `A["x""y",B[1,2.5,north]]`, `A[`, `A["`, `A[B]]`, `A(1,B(2))`, strings.Repeat("A[", 99)} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		n, err := parseWKT(s)
		if err != nil {
			require.Nil(t, n)
			return
		}
		again, err := parseWKT(n.text)
		require.NoError(t, err)
		require.Equal(t, n, again)
	})
}
