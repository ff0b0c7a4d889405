package raster

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// sitesGrid is a grid of 100 x 120 cells of 30 m in UTM zone 32 north.
func sitesGrid(t *testing.T) *dem.Grid {
	t.Helper()
	d, err := Open(fixture{rows: 100, cols: 120, crs: "EPSG:32632", transform: utm32}.write(t, "dem.tif"), Options{})
	require.NoError(t, err)
	t.Cleanup(func() { _ = d.Close() })
	return d.Grid()
}

func writeFile(t *testing.T, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, os.WriteFile(path, []byte(text), 0o600))
	return path
}

// collection makes a feature collection of pairs of properties and geometry.
func collection(features ...[2]string) string {
	var all []string
	for _, f := range features {
		all = append(all, fmt.Sprintf(`{"type":"Feature","properties":%s,"geometry":%s}`, f[0], f[1]))
	}
	return `{"type":"FeatureCollection","features":[` + strings.Join(all, ",") + `]}`
}

func pointAt(lon, lat float64) string {
	return fmt.Sprintf(`{"type":"Point","coordinates":[%.9f,%.9f]}`, lon, lat)
}

// ogr runs ogr2ogr, which stands for whoever made the file.
func ogr(t *testing.T, args ...string) {
	t.Helper()
	out, err := exec.Command("ogr2ogr", args...).CombinedOutput()
	require.NoError(t, err, string(out))
}

// threePoints are three sites on sitesGrid, and threePlaces where they lie in
// UTM zone 32 north: `gdaltransform -s_srs EPSG:4326 -t_srs EPSG:32632`, GDAL
// 3.6 with PROJ 9.1.
var (
	threePoints = collection(
		[2]string{`{"name":"Nörd <b>1</b> & \"Co\"","height":2.5,"footprint":50}`, pointAt(9.012, 46.0495)},
		[2]string{`{"name":"Second","height":0,"footprint":0}`, pointAt(9.0301, 46.0412)},
		[2]string{`{"name":"Third","height":null,"footprint":null}`, pointAt(9.02, 46.03)})
	threePlaces = [3][2]float64{
		{500928.358827756, 5099547.37546608}, {502328.982154159, 5098625.55157151}, {501547.809102975, 5097380.9010316},
	}
)

// TestReadSitesFormats: the same three sites come back from every format, in
// another CRS too, where PROJ says that they lie. 1 cm is what 1e-7 degrees,
// the digits of GeoJSON and KML, can tell.
func TestReadSitesFormats(t *testing.T) {
	grid := sitesGrid(t)
	source := writeFile(t, "sites.geojson", threePoints)
	dir := t.TempDir()
	cases := []struct {
		name, file string
		args       []string
		unnumbered bool // the format has no heights and footprints
	}{
		{"GeoJSON", "a.geojson", []string{"-f", "GeoJSON"}, false},
		{"GeoPackage in UTM", "a.gpkg", []string{"-f", "GPKG", "-t_srs", "EPSG:32632"}, false},
		{"GeoPackage in ETRS89 LAEA, axes north and east", "b.gpkg", []string{"-f", "GPKG", "-t_srs", "EPSG:3035"}, false},
		{"Shapefile in UTM 33", "a.shp", []string{"-f", "ESRI Shapefile", "-t_srs", "EPSG:32633", "-lco", "ENCODING=UTF-8"}, false},
		{"KML", "a.kml", []string{"-f", "KML"}, false},
		{"GPX", "a.gpx", []string{"-f", "GPX", "-select", "name"}, true},
		{"FlatGeobuf", "a.fgb", []string{"-f", "FlatGeobuf", "-lco", "SPATIAL_INDEX=NO"}, false},
		{"CSV of lon and lat", "a.csv", []string{"-f", "CSV", "-dialect", "SQLite", "-sql",
			"SELECT ST_Y(geometry) AS Lat, ST_X(geometry) AS Lon, name AS Name, height AS HEIGHT, footprint FROM sites"}, false},
		{"CSV of WKT", "b.csv", []string{"-f", "CSV", "-lco", "GEOMETRY=AS_WKT", "-lco", "CREATE_CSVT=YES"}, false},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			path := filepath.Join(dir, c.file)
			ogr(t, append(c.args, path, source)...)
			o := SiteOptions{}
			if c.file == "b.csv" {
				o.CRS = "EPSG:4326"
			}
			got, err := ReadSites(path, o, grid)
			require.NoError(t, err)
			require.Len(t, got.List, 3)
			for i, name := range []string{`Nörd <b>1</b> & "Co"`, "Second", "Third"} {
				s := got.List[i]
				assert.Empty(t, s.Problem)
				assert.Equal(t, i+1, s.Record)
				assert.Equal(t, name, s.Name)
				assert.Equal(t, ShapePoint, s.Shape)
				assert.InDelta(t, threePlaces[i][0], s.X, 0.01)
				assert.InDelta(t, threePlaces[i][1], s.Y, 0.01)
				if i == 0 && !c.unnumbered {
					assert.Equal(t, 2.5, s.Height)
					assert.Equal(t, 50.0, s.Footprint)
				} else {
					assert.Zero(t, s.Height)
					assert.Zero(t, s.Footprint)
				}
			}
			assert.Empty(t, got.Warnings)
		})
	}
}

// TestReadSitesMapUnits: columns x and y are the DEM's own, and it is said.
func TestReadSitesMapUnits(t *testing.T) {
	grid := sitesGrid(t)
	path := writeFile(t, "a.csv", "id;X;Y;mast\n7;500928.484;5099586.250;3\n8;501548.311;5097419.813;\n")
	got, err := ReadSites(path, SiteOptions{Name: "ID", Height: "mast"}, grid)
	require.NoError(t, err)
	require.Len(t, got.List, 2)
	assert.Equal(t, Site{Record: 1, Name: "7", Shape: ShapePoint, X: 500928.484, Y: 5099586.25, Height: 3}, got.List[0])
	assert.Equal(t, Site{Record: 2, Name: "8", Shape: ShapePoint, X: 501548.311, Y: 5097419.813}, got.List[1])
	require.Len(t, got.Warnings, 1)
	assert.Contains(t, got.Warnings[0], "columns X and Y are taken in the DEM's CRS")
	other, err := ReadSites(writeFile(t, "b.csv", "x,y\n9.012,46.0495\n"), SiteOptions{CRS: "EPSG:4326"}, grid)
	require.NoError(t, err)
	assert.InDelta(t, threePlaces[0][0], other.List[0].X, 0.01)
	assert.Empty(t, other.Warnings)
}

// TestReadSitesOneBad: a bad feature keeps its place and says what is wrong;
// the others are not lost.
func TestReadSitesOneBad(t *testing.T) {
	grid := sitesGrid(t)
	good := pointAt(9.012, 46.0495)
	cases := []struct{ name, properties, geometry, says string }{
		{"outside", `{}`, pointAt(10, 47), "lies outside the DEM"},
		{"swapped", `{}`, pointAt(46.0495, 9.012), "with the two coordinates swapped it would lie inside"},
		{"beyond the globe", `{}`, pointAt(9, 95), "outside what its CRS can place"},
		{"no geometry", `{}`, `null`, "has no geometry"},
		{"empty geometry", `{}`, `{"type":"Polygon","coordinates":[]}`, "has no geometry"},
		{"height below the ground", `{"height":-2}`, good, `height "-2" is not a number of metres from 0 to 1000`},
		{"height with a unit", `{"height":"2 m"}`, good, `height "2 m"`},
		{"height of no number", `{"height":"NaN"}`, good, `height "NaN"`},
		{"footprint too wide", `{"footprint":20000}`, good, `footprint "20000" is not a number of metres from 0 to 10000`},
		{"polygon outside", `{}`, `{"type":"Polygon","coordinates":[[[1,46],[1.01,46],[1.01,46.01],[1,46]]]}`, "it lies outside the DEM"},
		{"polygon swapped", `{}`, `{"type":"Polygon","coordinates":[[[46.04,9.01],[46.05,9.01],[46.05,9.02],[46.04,9.01]]]}`, "swapped"},
		{"a mixture", `{}`, `{"type":"GeometryCollection","geometries":[` + good + `,{"type":"LineString","coordinates":[[9.01,46.04],[9.02,46.04]]}]}`, "mixes points, lines and polygons"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			path := writeFile(t, "a.geojson", collection([2]string{`{"name":"first"}`, good}, [2]string{c.properties, c.geometry}, [2]string{`{"name":"last"}`, good}))
			got, err := ReadSites(path, SiteOptions{}, grid)
			require.NoError(t, err)
			require.Len(t, got.List, 3)
			assert.Empty(t, got.List[0].Problem)
			assert.Contains(t, got.List[1].Problem, c.says)
			assert.NotContains(t, got.List[1].Problem, "\n")
			assert.Equal(t, "site 2", got.List[1].Name)
			assert.Empty(t, got.List[2].Problem)
			assert.Equal(t, "last", got.List[2].Name)
		})
	}
	got, err := ReadSites(writeFile(t, "a.csv", "lon,lat\n9.012,46.0495\n9.012,north\n,46\n"), SiteOptions{}, grid)
	require.NoError(t, err)
	assert.Empty(t, got.List[0].Problem)
	assert.Contains(t, got.List[1].Problem, `column lat holds "north"`)
	assert.Contains(t, got.List[2].Problem, `column lon holds ""`)
}

// TestReadSitesRefused: a file that cannot serve is refused in one line.
func TestReadSitesRefused(t *testing.T) {
	grid := sitesGrid(t)
	good := [2]string{`{"name":"a","note":"b"}`, pointAt(9.012, 46.0495)}
	two := filepath.Join(t.TempDir(), "two.gpkg")
	source := writeFile(t, "s.geojson", collection(good))
	ogr(t, "-f", "GPKG", "-nln", "one", two, source)
	ogr(t, "-update", "-nln", "other", two, source)
	bare := filepath.Join(t.TempDir(), "bare.shp")
	ogr(t, "-f", "ESRI Shapefile", bare, source)
	require.NoError(t, os.RemoveAll(strings.TrimSuffix(bare, ".shp")+".prj"))
	cases := []struct {
		name, path string
		o          SiteOptions
		says       string
	}{
		{"missing", "nowhere.gpkg", SiteOptions{}, "no such file"},
		{"no name", "", SiteOptions{}, "no name given"},
		{"folder", t.TempDir(), SiteOptions{}, "folder"},
		{"empty file", writeFile(t, "e.geojson", ""), SiteOptions{}, "the file is empty"},
		{"text", writeFile(t, "e.txt", "nothing here\n"), SiteOptions{}, "not a vector file"},
		{"no features", writeFile(t, "e.geojson", collection()), SiteOptions{}, "holds no features"},
		{"table without rows", writeFile(t, "e.csv", "lon,lat\n"), SiteOptions{}, "holds no features"},
		{"table without places", writeFile(t, "e.csv", "name,lon\na,9\n"), SiteOptions{}, `no columns lon and lat or x and y; its columns are "lon", "name"`},
		{"cut short", writeFile(t, "e.geojson", collection(good)[:80]), SiteOptions{}, "GDAL"},
		{"several layers", two, SiteOptions{}, `several layers with features: "one", "other"; name one with --sites-layer`},
		{"unknown layer", two, SiteOptions{Layer: "third"}, `has no layer "third"; its layers are "one", "other"`},
		{"no CRS", bare, SiteOptions{}, "has no coordinate reference system; name it with --sites-crs"},
		{"CRS that is none", bare, SiteOptions{CRS: "EPSG:999999"}, `the CRS "EPSG:999999" is not understood`},
		{"missing name column", source, SiteOptions{Name: "title"}, `has no column "title"; --name-column takes one of "name", "note"`},
		{"missing height column", source, SiteOptions{Height: "mast"}, "--height-column"},
		{"missing footprint column", source, SiteOptions{Footprint: "r"}, "--footprint-column"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			got, err := ReadSites(c.path, c.o, grid)
			assert.Nil(t, got)
			var input *InputError
			require.ErrorAs(t, err, &input)
			assert.Contains(t, err.Error(), c.says)
			assert.NotContains(t, err.Error(), "\n")
		})
	}
	got, err := ReadSites(two, SiteOptions{Layer: "other"}, grid)
	require.NoError(t, err)
	assert.Len(t, got.List, 1)
	got, err = ReadSites(bare, SiteOptions{CRS: "EPSG:4326"}, grid)
	require.NoError(t, err)
	assert.InDelta(t, threePlaces[0][0], got.List[0].X, 0.01)
}

// TestSiteNames: no two sites share a name, and no name carries what a screen
// or a format could take for more than text.
func TestSiteNames(t *testing.T) {
	grid := sitesGrid(t)
	var features [][2]string
	for _, name := range []string{`"a"`, `"a"`, `"a (2)"`, `"a"`, `""`, `"site 6"`, `"tab\tbell\u0007 \u001b[31mred\u202etxt\u2028\n end"`, `12`, `1.5`} {
		features = append(features, [2]string{`{"name":` + name + `}`, pointAt(9.012, 46.0495)})
	}
	// The type of a column is the widest of its values, so numbers have a file
	// of their own.
	got, err := ReadSites(writeFile(t, "a.geojson", collection(features[:7]...)), SiteOptions{}, grid)
	require.NoError(t, err)
	var names []string
	for _, s := range got.List {
		names = append(names, s.Name)
	}
	assert.Equal(t, []string{"a", "a (3)", "a (2)", "a (4)", "site 5", "site 6", "tab bell [31mred txt end"}, names)
	require.Len(t, got.Warnings, 1)
	assert.Contains(t, got.Warnings[0], `2 sites had the name of an earlier one and were numbered; record 2, "a", is now "a (3)"`)
	got, err = ReadSites(writeFile(t, "b.geojson", collection(features[7])), SiteOptions{}, grid)
	require.NoError(t, err)
	assert.Equal(t, "12", got.List[0].Name)
}

// TestGPXTracks: waypoints and tracks are sites, the points of tracks are not.
func TestGPXTracks(t *testing.T) {
	grid := sitesGrid(t)
	got, err := ReadSites(writeFile(t, "a.gpx", `<?xml version="1.0"?><gpx version="1.1" creator="a" xmlns="http://www.topografix.com/GPX/1/1">
<wpt lat="46.0495" lon="9.012"><ele>900</ele><name>Way</name></wpt>
<trk><name>Track</name><trkseg><trkpt lat="46.045" lon="9.01"/><trkpt lat="46.045" lon="9.02"/></trkseg></trk></gpx>`), SiteOptions{}, grid)
	require.NoError(t, err)
	require.Len(t, got.List, 2)
	assert.Equal(t, "Way", got.List[0].Name)
	assert.Zero(t, got.List[0].Height, "ele is no height above ground")
	assert.Equal(t, "Track", got.List[1].Name)
	assert.Equal(t, ShapeLine, got.List[1].Shape)
}

// TestLongitudeOfTheGrid: sites in [-180, 180] meet a grid that counts from 0
// to 360.
func TestLongitudeOfTheGrid(t *testing.T) {
	d, err := Open(fixture{rows: 50, cols: 60, crs: "EPSG:4326", transform: [6]float64{235, 0.001, 0, 47, 0, -0.001}}.write(t, "dem.tif"), Options{})
	require.NoError(t, err)
	defer func() { _ = d.Close() }()
	got, err := ReadSites(writeFile(t, "a.csv", "lon,lat\n-124.98,46.98\n235.02,46.98\n"), SiteOptions{}, d.Grid())
	require.NoError(t, err)
	for _, s := range got.List {
		assert.Empty(t, s.Problem)
		assert.InDelta(t, 235.02, s.X, 1e-9)
	}
}

// TestSiteCells against plain definitions: the cells whose centres lie in a
// polygon, by winding angles; the cells that a line enters, by fine sampling.
func TestSiteCells(t *testing.T) {
	grid := sitesGrid(t)
	const seed = 11
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	spot := func() [2]float64 {
		x, y := grid.XY(rng.Float64()*130-15, rng.Float64()*150-15)
		return [2]float64{x, y}
	}
	for range 60 {
		var ring [][2]float64
		for range 3 + rng.IntN(5) {
			ring = append(ring, spot())
		}
		ring = append(ring, ring[0])
		s := Site{Shape: ShapePolygon, Paths: [][][2]float64{ring}}
		cells, err := s.Cells(grid)
		require.NoError(t, err)
		found := map[[2]int]bool{}
		for _, c := range cells {
			found[c] = true
		}
		inside := 0
		for row := range grid.Rows {
			for col := range grid.Cols {
				x, y := grid.XY(float64(row), float64(col))
				want := oddCrossings(ring, x, y)
				if want {
					inside++
				}
				if inside > 0 && found[[2]int{row, col}] != want {
					t.Fatalf("cell %d, %d: got %t, want %t", row, col, !want, want)
				}
			}
		}

		line := Site{Shape: ShapeLine, Paths: [][][2]float64{{spot(), spot()}}}
		cells, err = line.Cells(grid)
		require.NoError(t, err)
		got := map[[2]int]bool{}
		for _, c := range cells {
			got[c] = true
		}
		p, q := line.Paths[0][0], line.Paths[0][1]
		const steps = 20000
		for k := range steps + 1 {
			f := float64(k) / steps
			row, col := grid.RowCol(p[0]+f*(q[0]-p[0]), p[1]+f*(q[1]-p[1]))
			at := [2]int{int(math.Round(row)), int(math.Round(col))}
			if at[0] < 0 || at[1] < 0 || at[0] >= grid.Rows || at[1] >= grid.Cols {
				continue
			}
			require.True(t, got[at], "line cell %v", at)
		}
		for c := range got { // and no cell far from the line: half a diagonal
			row0, col0 := grid.RowCol(p[0], p[1])
			row1, col1 := grid.RowCol(q[0], q[1])
			area := math.Abs((row1-row0)*(float64(c[1])-col0) - (col1-col0)*(float64(c[0])-row0))
			assert.LessOrEqual(t, area/math.Hypot(row1-row0, col1-col0), math.Sqrt2/2+1e-9)
		}
	}
	tiny := Site{Shape: ShapePolygon, Paths: [][][2]float64{{{500001, 5099999}, {500002, 5099999}, {500002, 5099998}, {500001, 5099999}}}}
	cells, err := tiny.Cells(grid)
	require.NoError(t, err)
	assert.Equal(t, [][2]int{{0, 0}}, cells, "a polygon within a cell takes that cell")
	huge := dem.Grid{Rows: 1000, Cols: 1000, Transform: [6]float64{0, 1, 0, 0, 0, -1}}
	_, err = (&Site{Shape: ShapePolygon, Paths: [][][2]float64{{{-9, 9}, {2e9, 9}, {2e9, -2e9}, {-9, -2e9}}}}).Cells(&huge)
	assert.ErrorContains(t, err, "more than 100000 cells")
	cells, err = (&Site{Shape: ShapeLine, Paths: [][][2]float64{{{-1e12, -0.5}, {1e12, -0.5}}}}).Cells(&huge)
	require.NoError(t, err)
	assert.Len(t, cells, 1000)
}

// oddCrossings is the rule of the ray to the east for one ring, in map units.
func oddCrossings(ring [][2]float64, x, y float64) bool {
	odd := false
	for i := 1; i < len(ring); i++ {
		a, b := ring[i-1], ring[i]
		if (a[1] > y) != (b[1] > y) && x < a[0]+(y-a[1])*(b[0]-a[0])/(b[1]-a[1]) {
			odd = !odd
		}
	}
	return odd
}

// TestTenThousandSites: many sites are no trouble.
func TestTenThousandSites(t *testing.T) {
	grid := sitesGrid(t)
	var text strings.Builder
	text.WriteString("name,lon,lat\n")
	for i := range 10000 {
		fmt.Fprintf(&text, "same,%.6f,%.6f\n", 9.001+float64(i%100)*4e-4, 46.03+float64(i/100)*2e-4)
	}
	got, err := ReadSites(writeFile(t, "many.csv", text.String()), SiteOptions{}, grid)
	require.NoError(t, err)
	require.Len(t, got.List, 10000)
	assert.Equal(t, "same (10000)", got.List[9999].Name)
}

// FuzzWKB: whatever the bytes, no panic, and positions only for a shape.
func FuzzWKB(f *testing.F) {
	f.Add([]byte("\x01\x01\x00\x00\x00\x00\x00\x00\x00\x00\x00\xf0\x3f\x00\x00\x00\x00\x00\x00\x00\x40"))
	f.Add([]byte("\x00\x00\x00\x00\x02\x00\x00\x00\x02\x3f\xf0\x00\x00\x00\x00\x00\x00\x40\x00\x00\x00\x00\x00\x00\x00\x3f\xf0\x00\x00\x00\x00\x00\x00\x40\x00\x00\x00\x00\x00\x00\x00"))
	f.Add([]byte("\x01\x07\x00\x00\x00\x01\x00\x00\x00\x01\x03\x00\x00\x80\x00\x00\x00\x00"))
	f.Fuzz(func(t *testing.T, b []byte) {
		shape, paths, err := parseWKB(b)
		if (err == nil) != (shape != "") || (err == nil) != (len(paths) > 0) {
			t.Fatalf("%q: %v %v %v", b, shape, paths, err)
		}
	})
}

// TestGeoPackage: ogrinfo, in a process of its own, finds the layers, the CRS
// and every value, null where there is none.
func TestGeoPackage(t *testing.T) {
	grid := sitesGrid(t)
	dir := t.TempDir()
	set, err := NewSet(dir, false, nil)
	require.NoError(t, err)
	columns := []Column{{"site", ""}, {"clearance", 0.0}, {"code", int64(0)}, {"open", false}}
	rows := [][]any{{`<&"' ü`, 12.25, int64(10), true}, {"b", math.NaN(), nil, false}}
	file, err := set.VectorFile("out.gpkg")
	require.NoError(t, err)
	require.NoError(t, file.Write(grid, []VectorLayer{
		{Name: "sites", Columns: columns, Rows: 2, Row: func(i int) ([][2]float64, []any) {
			return [][2]float64{threePlaces[i]}, rows[i]
		}},
		{Name: "lines", Lines: true, Columns: columns[:1], Rows: 1, Row: func(int) ([][2]float64, []any) {
			return threePlaces[:2], []any{"b"}
		}},
	}))
	assert.NoFileExists(t, filepath.Join(dir, "out.gpkg"))
	require.NoError(t, set.Commit())
	out, err := exec.Command("ogrinfo", "-ro", "-al", filepath.Join(dir, "out.gpkg")).CombinedOutput()
	require.NoError(t, err)
	text := string(out)
	assert.NotContains(t, text, "ERROR")
	for _, part := range []string{
		"Layer name: sites\nGeometry: Point\nFeature Count: 2", "Layer name: lines\nGeometry: Line String\nFeature Count: 1",
		`ID["EPSG",32632]`, `site (String) = <&"' ü`, "clearance (Real) = 12.25", "code (Integer64) = 10", "open (Integer) = 1",
		"POINT (500928.358827756 5099547.37546608)", "LINESTRING (500928.358827756 5099547.37546608,502328.982154159 5098625.55157151)",
		"clearance (Real) = (null)", "code (Integer64) = (null)", "open (Integer) = 0",
	} {
		assert.Contains(t, text, part)
	}
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	assert.Len(t, entries, 1, "nothing else is left")

	set, err = NewSet(dir, true, nil)
	require.NoError(t, err)
	defer set.Abort()
	require.NoError(t, os.WriteFile(filepath.Join(dir, "out.gpkg-wal"), []byte("x"), 0o600))
	_, err = set.VectorFile("out.gpkg")
	assert.ErrorContains(t, err, "open in another program")
}

// TestLonLat against gdaltransform, which made threePlaces.
func TestLonLat(t *testing.T) {
	locate, done, err := LonLat(sitesGrid(t))
	require.NoError(t, err)
	defer done()
	x, y := []float64{threePlaces[0][0], threePlaces[1][0], 1e30}, []float64{threePlaces[0][1], threePlaces[1][1], 1e30}
	require.NoError(t, locate(x, y))
	assert.InDeltaSlice(t, []float64{9.012, 9.0301}, x[:2], 1e-9)
	assert.InDeltaSlice(t, []float64{46.0495, 46.0412}, y[:2], 1e-9)
	assert.True(t, math.IsNaN(x[2]))
}
