package raster

import (
	"archive/zip"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"sync"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// holes is ramp with no height at row 1, column 2 and at row 4, column 6.
func holes(row, col int) float64 {
	if row == 1 && col == 2 || row == 4 && col == 6 {
		return math.NaN()
	}
	return ramp(row, col)
}

// holesAs is ramp with a value standing for the holes.
func holesAs(fill float64) func(int, int) float64 {
	return func(row, col int) float64 {
		if math.IsNaN(holes(row, col)) {
			return fill
		}
		return ramp(row, col)
	}
}

// seen is 0 where holes has no height, else 255.
func seen(row, col int) byte {
	if math.IsNaN(holes(row, col)) {
		return 0
	}
	return 255
}

func times(k, plus float64, f func(int, int) float64) func(int, int) float64 {
	return func(row, col int) float64 { return k*f(row, col) + plus }
}

// TestHeights: stored values become metres and NaN whatever the storage. The
// expected heights are the ramp times the published length of the unit.
func TestHeights(t *testing.T) {
	const intFoot, surveyFoot = 0.3048, 1200.0 / 3937
	cases := []struct {
		name      string
		f         fixture
		o         Options
		want      func(int, int) float64
		tolerance float64
	}{
		{"byte", fixture{dtype: godal.Byte}, Options{}, ramp, 0},
		{"int16", fixture{dtype: godal.Int16}, Options{}, ramp, 0},
		{"uint16", fixture{dtype: godal.UInt16}, Options{}, ramp, 0},
		{"int32", fixture{dtype: godal.Int32}, Options{}, ramp, 0},
		{"uint32", fixture{dtype: godal.UInt32}, Options{}, ramp, 0},
		{"float32", fixture{dtype: godal.Float32}, Options{}, ramp, 0},
		{"float64", fixture{dtype: godal.Float64}, Options{}, ramp, 0},
		{"int16 nodata", fixture{dtype: godal.Int16, nodata: ptr(-32768), value: holesAs(-32768)}, Options{}, holes, 0},
		{"int32 nodata", fixture{dtype: godal.Int32, nodata: ptr(-2147483648), value: holesAs(-2147483648)}, Options{}, holes, 0},
		{"float32 nodata", fixture{nodata: ptr(-9999), value: holesAs(-9999)}, Options{}, holes, 0},
		{"float32 lowest", fixture{nodata: ptr(-math.MaxFloat32), value: holesAs(-math.MaxFloat32)}, Options{}, holes, 0},
		{"float32 rounded nodata", fixture{nodata: ptr(-3.40282e38), value: holesAs(-math.MaxFloat32)}, Options{}, holes, 0},
		{"float32 nodata of float64", fixture{nodata: ptr(0.1), value: holesAs(0.1)}, Options{}, holes, 0},
		{"float64 lowest", fixture{dtype: godal.Float64, nodata: ptr(-math.MaxFloat64), value: holesAs(-math.MaxFloat64)}, Options{}, holes, 0},
		{"nodata declared NaN", fixture{nodata: ptr(math.NaN()), value: holesAs(math.NaN())}, Options{}, holes, 0},
		{"NaN undeclared", fixture{value: holesAs(math.NaN())}, Options{}, holes, 0},
		{"infinite", fixture{value: holesAs(math.Inf(1))}, Options{}, holes, 0},
		{"infinite float64", fixture{dtype: godal.Float64, value: holesAs(math.Inf(-1))}, Options{}, holes, 0},
		{"undeclared 1e30", fixture{value: holesAs(1e32)}, Options{}, holes, 0},
		{"mask band", fixture{mask: seen}, Options{}, holes, 0},
		{"mask band over fill values", fixture{mask: seen, dtype: godal.Float64, value: holesAs(-9999)}, Options{}, holes, 0},
		{"alpha band", fixture{bands: 2, colours: []godal.ColorInterp{godal.CIGray, godal.CIAlpha}, dtype: godal.UInt16, alpha: seen}, Options{}, holes, 0},
		{"nodata of the whole file", fixture{bands: 2, value: holesAs(-9999), metadata: map[string]string{"NODATA_VALUES": "-9999 -9899"}}, Options{}, holes, 0},
		// float32 of a sum of exact decimals: half a unit in the last place of 16.
		{"scale and offset", fixture{dtype: godal.Int16, scale: 0.1, offset: 5}, Options{}, times(0.1, 5, ramp), 1e-6},
		{"scaled nodata is stored", fixture{dtype: godal.Int16, scale: 0.1, offset: 5, nodata: ptr(-7), value: holesAs(-7)}, Options{}, times(0.1, 5, holes), 1e-6},
		// 2,000,000,001 needs more than float32 holds before it is scaled.
		{"int32 scaled", fixture{dtype: godal.Int32, scale: 1e-6, value: times(1, 2e9, ramp)}, Options{}, times(1e-6, 2000, ramp), 6.2e-5},
		{"feet of the compound CRS", fixture{crs: "EPSG:32632+8228"}, Options{}, times(intFoot, 0, ramp), 1e-5}, // NAVD88 height (ft)
		{"survey feet of the compound CRS", fixture{crs: "EPSG:32632+6360"}, Options{}, times(surveyFoot, 0, ramp), 1e-5},
		{"feet given", fixture{}, Options{VerticalUnit: "ft"}, times(intFoot, 0, ramp), 1e-5},
		{"survey feet given", fixture{}, Options{VerticalUnit: "US survey foot"}, times(surveyFoot, 0, ramp), 1e-5},
		{"centimetres, scaled, with holes", fixture{dtype: godal.Int32, nodata: ptr(-1), value: holesAs(-1), scale: 2}, Options{VerticalUnit: "cm"}, times(0.02, 0, holes), 1e-6},
		{"second band", fixture{bands: 3, dtype: godal.Int16}, Options{Band: 2}, times(1, 100, ramp), 0},
		{"first elevation-like band", fixture{bands: 2, dtype: godal.Byte, colours: []godal.ColorInterp{godal.CIRed, godal.CIGray}, value: func(r, c int) float64 { return ramp(r, c) - 100 }}, Options{}, ramp, 0},
		{"colour indices on demand", fixture{dtype: godal.Byte, table: true}, Options{Band: 1}, ramp, 0},
	}
	for _, c := range cases {
		for _, hold := range []int64{0, -1} {
			t.Run(fmt.Sprintf("%s/hold %d", c.name, hold), func(t *testing.T) {
				if c.f.crs == "" {
					c.f.crs = "EPSG:32632"
				}
				c.f.transform = utm32
				c.o.HoldBytes = hold
				d, err := Open(c.f.write(t, "dem.tif"), c.o)
				require.NoError(t, err)
				defer func() { require.NoError(t, d.Close()) }()
				requireHeights(t, d, c.tolerance, c.want)
				r, err := d.Survey(context.Background())
				require.NoError(t, err)
				scan, err := dem.Scan(context.Background(), d)
				require.NoError(t, err)
				assert.Equal(t, scan, r)
			})
		}
	}
}

// TestBandUnits: the unit of the band decides, in the spellings files use.
func TestBandUnits(t *testing.T) {
	source := fixture{crs: "EPSG:32632", transform: utm32}.write(t, "dem.tif")
	for unit, metres := range map[string]float64{
		"m": 1, "metre": 1, "Meters": 1, "ft": 0.3048, "feet": 0.3048, "foot": 0.3048, "US survey foot": 1200.0 / 3937,
		"us-ft": 1200.0 / 3937, "cm": 0.01, "dm": 0.1, "mm": 0.001, "km": 1000, "": 1,
	} {
		t.Run(unit, func(t *testing.T) {
			d, err := Open(vrt(t, source, 5, 7, "EPSG:32632", utm32, "<UnitType>"+unit+"</UnitType>"), Options{})
			require.NoError(t, err)
			defer func() { require.NoError(t, d.Close()) }()
			requireHeights(t, d, 1e-5*max(1, metres), times(metres, 0, ramp))
		})
	}
}

// TestNames: paths, archives, virtual rasters and COGs are all names.
func TestNames(t *testing.T) {
	tif := fixture{crs: "EPSG:32632", transform: utm32}.write(t, "dem.tif")
	archive := filepath.Join(t.TempDir(), "dem.zip")
	pack(t, archive, tif)
	cog := filepath.Join(t.TempDir(), "cog.tif")
	src, err := godal.Open(tif)
	require.NoError(t, err)
	out, err := src.Translate(cog, []string{"-of", "COG"})
	require.NoError(t, err)
	require.NoError(t, out.Close())
	require.NoError(t, src.Close())
	wrapped := vrt(t, tif, 5, 7, "EPSG:32632", utm32, "")
	for name, files := range map[string][]string{
		tif: {tif}, "/vsizip/" + archive + "/dem.tif": {archive}, cog: {cog}, wrapped: {wrapped, tif}, "GTIFF_DIR:1:" + tif: nil,
	} {
		d, err := Open(name, Options{})
		require.NoError(t, err, name)
		requireHeights(t, d, 0, ramp)
		assert.Equal(t, files, d.Facts().Files, name)
		require.NoError(t, d.Close())
	}
}

func pack(t *testing.T, archive, file string) {
	t.Helper()
	f, err := os.Create(archive)
	require.NoError(t, err)
	z := zip.NewWriter(f)
	w, err := z.Create(filepath.Base(file))
	require.NoError(t, err)
	in, err := os.Open(file)
	require.NoError(t, err)
	_, err = io.Copy(w, in)
	require.NoError(t, err)
	require.NoError(t, in.Close())
	require.NoError(t, z.Close())
	require.NoError(t, f.Close())
}

// Semi-axis and eccentricity of WGS84 for the closed forms below: NIMA
// TR8350.2, 2000, table 3.1 and 3.3 (from memory).
const (
	wgsA  = 6378137.0
	wgsE2 = 6.69437999014e-3
)

// radii are Snyder 1987, eq. 4-18 and 4-20, written out here independently.
func radii(lat float64) (meridian, normal float64) {
	s := math.Sin(lat * math.Pi / 180)
	w := 1 - wgsE2*s*s
	return wgsA * (1 - wgsE2) / math.Pow(w, 1.5), wgsA / math.Sqrt(w)
}

// arc is the ground length of a degree of longitude and of latitude.
func arc(lat float64) (lon, lat1 float64) {
	m, n := radii(lat)
	return n * math.Cos(lat*math.Pi/180) * math.Pi / 180, m * math.Pi / 180
}

// TestGround: longitude, latitude and ground metres of a cell at the middle of
// the grid, against closed forms.
func TestGround(t *testing.T) {
	const d = 1.0 / 3600
	lonArc, latArc := arc(46.5)
	mercLat := 46.5
	mercM, mercN := radii(mercLat)
	mercY := wgsA * math.Log(math.Tan(math.Pi/4+mercLat*math.Pi/360))
	// Web Mercator is spherical on the ellipsoid's latitude: dx = a dlon,
	// dy = a dlat / cos(lat). A map metre is N cos(lat)/a east, M cos(lat)/a north.
	cosLat := math.Cos(mercLat * math.Pi / 180)
	const foot = 1200.0 / 3937
	cases := []struct {
		name           string
		crs            string
		transform      [6]float64 // of a 101 x 101 grid; its middle cell is (50, 50)
		lon, lat       float64
		colE, rowN     float64
		place, lengths float64 // tolerances: degrees, relative
	}{
		{"geographic", "EPSG:4326", [6]float64{11 - 50.5*d, d, 0, 46.5 + 50.5*d, 0, -d}, 11, 46.5, lonArc * d, -latArc * d, 1e-9, 1e-6},
		{"geographic south-up", "EPSG:4326", [6]float64{11 - 50.5*d, d, 0, 46.5 - 50.5*d, 0, d}, 11, 46.5, lonArc * d, latArc * d, 1e-9, 1e-6},
		{"geographic columns westward", "EPSG:4326", [6]float64{11 + 50.5*d, -d, 0, 46.5 + 50.5*d, 0, -d}, 11, 46.5, -lonArc * d, -latArc * d, 1e-9, 1e-6},
		{"geographic, cells not square", "EPSG:4326", [6]float64{11 - 101*d, 2 * d, 0, 46.5 + 50.5*d, 0, -d}, 11, 46.5, 2 * lonArc * d, -latArc * d, 1e-9, 1e-6},
		{"geographic 0 to 360", "EPSG:4326", [6]float64{289 - 50.5*d, d, 0, 46.5 + 50.5*d, 0, -d}, -71, 46.5, lonArc * d, -latArc * d, 1e-9, 1e-6},
		{"geographic 3D", "EPSG:4979", [6]float64{11 - 50.5*d, d, 0, 46.5 + 50.5*d, 0, -d}, 11, 46.5, lonArc * d, -latArc * d, 1e-9, 1e-6},
		// UTM on its central meridian: scale factor 0.9996 (Snyder 1987, p. 58).
		{"utm", "EPSG:32632", [6]float64{500000 - 50.5*30, 30, 0, 5149886 + 50.5*30, 0, -30}, 9, 46.5, 30 / 0.9996, -30 / 0.9996, 1e-2, 1e-6},
		{"utm compound", "EPSG:32632+5773", [6]float64{500000 - 50.5*30, 30, 0, 5149886 + 50.5*30, 0, -30}, 9, 46.5, 30 / 0.9996, -30 / 0.9996, 1e-2, 1e-6},
		{"web mercator", "EPSG:3857", [6]float64{wgsA*11*math.Pi/180 - 50.5*30, 30, 0, mercY + 50.5*30, 0, -30}, 11, 46.5,
			30 * mercN * cosLat / wgsA, -30 * mercM * cosLat / wgsA, 1e-9, 1e-6},
		// A transverse Mercator in US survey feet, true to scale on its meridian.
		{"survey feet", "+proj=tmerc +lat_0=46.5 +lon_0=-110 +k=1 +x_0=0 +y_0=0 +datum=WGS84 +units=us-ft", [6]float64{-50.5 * 100, 100, 0, 50.5 * 100, 0, -100}, -110, 46.5,
			100 * foot, -100 * foot, 1e-9, 1e-6},
		// NTF (Paris), in grads from Paris, 2 deg 20 min 14.025 s east of Greenwich
		// (EPSG 4807 and 8903). The shift to WGS84 is up to a few hundred metres.
		{"grads", "EPSG:4807", [6]float64{4 - 50.5*1e-3, 1e-3, 0, 50 + 50.5*1e-3, 0, -1e-3}, 4*0.9 + 2.33722917, 45, 0, 0, 5e-3, 1e-4},
		{"nad27", "EPSG:4267", [6]float64{-110 - 50.5*d, d, 0, 46.5 + 50.5*d, 0, -d}, -110, 46.5, lonArc * d, -latArc * d, 2e-3, 2e-4},
	}
	lonGrad, latGrad := arc(45)
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			if c.name == "grads" {
				c.colE, c.rowN = 9e-4*lonGrad, -9e-4*latGrad
			}
			d, err := Open(fixture{rows: 101, cols: 101, crs: c.crs, transform: c.transform}.write(t, "dem.tif"), Options{})
			require.NoError(t, err)
			defer func() { require.NoError(t, d.Close()) }()
			l := d.Grid().At(50, 50)
			assert.InDelta(t, c.lon, l.Lon.Degrees(), c.place)
			assert.InDelta(t, c.lat, l.Lat.Degrees(), c.place)
			assert.InEpsilon(t, c.colE, l.ColE, c.lengths)
			assert.InEpsilon(t, c.rowN, l.RowN, c.lengths)
			assert.InDelta(t, 0, l.ColN/l.ColE, 1e-4)
			assert.InDelta(t, 0, l.RowE/l.RowN, 1e-4)
			f := d.Facts()
			assert.InDelta(t, math.Abs(c.colE), f.Centre.ColM, c.lengths*math.Abs(c.colE))
			assert.Equal(t, c.rowN > 0, f.SouthUp)
			assert.InDelta(t, 0, f.Centre.Convergence, 0.01)
		})
	}
}

// TestSharedRead: goroutines read their own windows, held or not.
func TestSharedRead(t *testing.T) {
	path := fixture{rows: 65, cols: 130, crs: "EPSG:32632", transform: utm32, options: []string{"TILED=YES", "BLOCKXSIZE=64", "BLOCKYSIZE=64"}, dtype: godal.Float64}.write(t, "dem.tif")
	for _, hold := range []int64{0, -1} {
		d, err := Open(path, Options{HoldBytes: hold})
		require.NoError(t, err)
		var wg sync.WaitGroup
		for k := range 8 {
			wg.Go(func() {
				w := dem.Window{Row: 7 * k, Col: 11 * k, Rows: 9, Cols: 50}
				out := make([]float32, w.Rows*w.Cols)
				if !assert.NoError(t, d.Read(w, out)) {
					return
				}
				for i, h := range out {
					assert.Equal(t, float32(ramp(w.Row+i/w.Cols, w.Col+i%w.Cols)), h)
				}
			})
		}
		wg.Wait()
		require.NoError(t, d.Close())
		require.NoError(t, d.Close())
	}
}

// TestPixelIsPoint: a GeoTIFF of points ties the first cell's centre to a map
// position, one of areas its outer corner (OGC GeoTIFF 1.1, 19-008r4, annex B).
// The file of points is written without GDAL's own half cell, so its tie point
// is the position given.
func TestPixelIsPoint(t *testing.T) {
	area := fixture{crs: "EPSG:32632", transform: utm32}.write(t, "area.tif")
	point := filepath.Join(t.TempDir(), "point.tif")
	src, err := godal.Open(area)
	require.NoError(t, err)
	out, err := src.Translate(point, []string{"-mo", "AREA_OR_POINT=Point"}, godal.ConfigOption("GTIFF_POINT_GEO_IGNORE=TRUE"))
	require.NoError(t, err)
	require.NoError(t, out.Close())
	require.NoError(t, src.Close())
	for path, centre := range map[string][2]float64{area: {500015, 5099985}, point: {500000, 5100000}} {
		d, err := Open(path, Options{})
		require.NoError(t, err)
		assert.Equal(t, path == point, d.Facts().PixelIs == "point")
		x, y := d.Grid().XY(0, 0)
		assert.Equal(t, centre, [2]float64{x, y})
		require.NoError(t, d.Close())
	}
}

// TestCRSOption: --crs replaces what the file says, or lacks.
func TestCRSOption(t *testing.T) {
	path := fixture{transform: utm32}.write(t, "dem.tif")
	for _, crs := range []string{"EPSG:32632", "EPSG:32632+5773", "+proj=utm +zone=32 +datum=WGS84"} {
		d, err := Open(path, Options{CRS: crs})
		require.NoError(t, err, crs)
		assert.InDelta(t, 9, d.Facts().Corners[0].Lon, 1e-9)
		shift := 0.0
		if s := d.Facts().HeightShift; s != nil { // over 210 m the undulation changes by less than a centimetre
			shift = (s.Least + s.Most) / 2
		}
		requireHeights(t, d, 0.01, func(r, c int) float64 { return ramp(r, c) + shift })
		require.NoError(t, d.Close())
	}
}

// TestDatumShiftDoesNotTear: NAD27 has many shifts to WGS84, each for its own
// region; a grid over many of them must get one, or neighbouring cells would
// drift apart. A difference of metres between two shifts would change a cell of
// 5.5 km by 1e-3; one shift keeps it to what two ellipsoids differ by.
func TestDatumShiftDoesNotTear(t *testing.T) {
	const d = 0.05
	f := fixture{rows: 300, cols: 900, crs: "EPSG:4267", transform: [6]float64{-120, d, 0, 60, 0, -d}}
	dm, err := Open(f.write(t, "dem.tif"), Options{})
	require.NoError(t, err)
	defer func() { require.NoError(t, dm.Close()) }()
	for row := 0.0; row < 300; row += 7 {
		lonArc, latArc := arc(60 - (row+0.5)*d)
		for col := 0.0; col < 900; col += 7 {
			l := dm.Grid().At(row, col)
			// Between nodes 1.6 degrees apart cos(lat) departs from linear by
			// (1.6 deg)^2/8 = 1e-4 of itself.
			require.InEpsilon(t, lonArc*d, l.ColE, 3e-4, "row %v, column %v", row, col)
			require.InEpsilon(t, -latArc*d, l.RowN, 3e-4, "row %v, column %v", row, col)
		}
	}
}

// TestInt64: the newest integer type, whose nodata float64 may not hold.
func TestInt64(t *testing.T) {
	path := translated(t, fixture{dtype: godal.Int32, crs: "EPSG:32632", transform: utm32, value: holesAs(-1), nodata: ptr(-1)}, "-ot", "Int64")
	d, err := Open(path, Options{})
	require.NoError(t, err)
	requireHeights(t, d, 0, holes)
	require.NoError(t, d.Close())
}

// TestNetwork: a raster behind an address is read in parts.
func TestNetwork(t *testing.T) {
	path := fixture{crs: "EPSG:32632", transform: utm32}.write(t, "dem.tif")
	server := httptest.NewServer(http.FileServer(http.Dir(filepath.Dir(path))))
	defer server.Close()
	d, err := Open("/vsicurl/"+server.URL+"/dem.tif", Options{})
	require.NoError(t, err)
	requireHeights(t, d, 0, ramp)
	assert.Empty(t, d.Facts().Files)
	require.NoError(t, d.Close())
}

// TestFactsJSON: facts are valid JSON with the promised keys, also where a
// number is none.
func TestFactsJSON(t *testing.T) {
	for nodata, want := range map[*float64]any{ptr(math.NaN()): "NaN", ptr(-9999): -9999.0, nil: nil} {
		f := fixture{crs: "EPSG:32632+5773", transform: utm32, nodata: nodata, dtype: godal.Float32}
		d, err := Open(f.write(t, "dem.tif"), Options{VerticalUnit: "ft"})
		require.NoError(t, err)
		text, err := json.Marshal(d.Facts())
		require.NoError(t, err)
		var got map[string]any
		require.NoError(t, json.Unmarshal(text, &got))
		assert.Equal(t, want, got["nodata"])
		assert.Equal(t, "WGS 84 / UTM zone 32N + EGM96 height", got["crs"])
		assert.Equal(t, "EGM96 height", got["vertical_crs"])
		assert.Equal(t, "EPSG:5773", got["vertical_code"])
		assert.Equal(t, "ft", got["vertical_unit"])
		assert.Equal(t, 0.3048, got["vertical_unit_m"])
		assert.Equal(t, "given", got["vertical_unit_source"])
		assert.Equal(t, "metre", got["map_unit"])
		assert.Len(t, got["corners"], 4)
		require.NoError(t, d.Close())
	}
}

// TestCache: the bound of GDAL's block cache is the one asked for.
func TestCache(t *testing.T) {
	before := cacheBytes()
	defer SetCache(before)
	SetCache(32 << 20)
	assert.Equal(t, int64(32<<20), cacheBytes())
	SetCache(0)
	assert.Equal(t, int64(1<<20), cacheBytes())
}
