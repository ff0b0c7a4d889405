package raster

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// utmGrid is a grid near 9 deg E, 46 deg N in UTM zone 32 north. It places
// cells on the ellipsoid by a plain linear map, which only the outlines in
// STAC items see.
func utmGrid(t *testing.T, rows, cols int) *dem.Grid {
	t.Helper()
	sr, err := godal.NewSpatialRefFromEPSG(32632)
	require.NoError(t, err)
	defer sr.Close()
	wkt, err := sr.WKT()
	require.NoError(t, err)
	g, err := dem.NewGrid(rows, cols, [6]float64{500000, 30, 0, 5100000, 0, -30}, wkt,
		func(x, y []float64) error {
			for i := range x {
				x[i], y[i] = 9+(x[i]-500000)/77000, 46.05+(y[i]-5100000)/111200
			}
			return nil
		})
	require.NoError(t, err)
	return g
}

var testClasses = []ClassEntry{
	{0, "no-data", "No data", "nothing here", ""},
	{10, "calm", "Calm", "still water", "#f6f1e4"},
	{30, "rough", "Rough & steep", "<waves>", "#9b2226"},
	{41, "dark", "Dark", "", "#0b2a3c"},
}

// awkward is text that XML, and a careless escape, would change.
const awkward = "Grünsee & \"co\" <1>\nsecond line\t'tab' ]]> &amp; %d"

func classLayer() Layer {
	return Layer{Name: "sea", Title: "Sea", Description: "state of the sea", Classes: testClasses,
		Metadata: map[string]string{"command": `tool --look "a=1" <x>`, "AREA_OR_POINT": "Point", "note": awkward}}
}

func floatLayer() Layer {
	return Layer{Name: "height", Title: "Height", Unit: "m", Description: "height of the thing"}
}

// tilesOf cuts a window into tiles of an awkward size.
func tilesOf(w dem.Window, side int) []dem.Window {
	var all []dem.Window
	for r := 0; r < w.Rows; r += side {
		for c := 0; c < w.Cols; c += side {
			all = append(all, dem.Window{Row: w.Row + r, Col: w.Col + c, Rows: min(side, w.Rows-r), Cols: min(side, w.Cols-c)})
		}
	}
	return all
}

// cut copies a tile out of the values of a window.
func cut[T any](values []T, w, tile dem.Window) []T {
	out := make([]T, 0, tile.Rows*tile.Cols)
	for r := range tile.Rows {
		at := (tile.Row-w.Row+r)*w.Cols + tile.Col - w.Col
		out = append(out, values[at:at+tile.Cols]...)
	}
	return out
}

// eachTile hands out the tiles in random order from four goroutines.
func eachTile(t *testing.T, w dem.Window, put func(tile dem.Window) error) {
	t.Helper()
	tiles := tilesOf(w, 200)
	rand.Shuffle(len(tiles), func(i, j int) { tiles[i], tiles[j] = tiles[j], tiles[i] })
	var group sync.WaitGroup
	for k := range 4 {
		group.Go(func() {
			for i := k; i < len(tiles); i += 4 {
				assert.NoError(t, put(tiles[i]))
			}
		})
	}
	group.Wait()
}

func writeFloats(t *testing.T, w *Writer, win dem.Window, bands ...[]float32) {
	t.Helper()
	eachTile(t, win, func(tile dem.Window) error {
		for b, values := range bands {
			if err := w.WriteFloats(tile, b, cut(values, win, tile)); err != nil {
				return err
			}
		}
		return nil
	})
}

func writeBytes(t *testing.T, w *Writer, win dem.Window, codes []uint8) {
	t.Helper()
	eachTile(t, win, func(tile dem.Window) error { return w.WriteBytes(tile, cut(codes, win, tile)) })
}

func newSet(t *testing.T) (*Set, string) {
	t.Helper()
	dir := t.TempDir()
	s, err := NewSet(dir, false, nil)
	require.NoError(t, err)
	return s, dir
}

// listing returns every file below a folder, relative to it, sorted.
func listing(t *testing.T, dir string) []string {
	t.Helper()
	all := []string{}
	require.NoError(t, filepath.WalkDir(dir, func(path string, d os.DirEntry, err error) error {
		if err == nil && path != dir {
			rel, _ := filepath.Rel(dir, path)
			all = append(all, rel)
		}
		return err
	}))
	return all
}

func openRaster(t *testing.T, path string) *godal.Dataset {
	t.Helper()
	register()
	ds, err := godal.Open(path, godal.RasterOnly(), godal.SiblingFiles(filepath.Base(path), filepath.Base(path)+".aux.xml"))
	require.NoError(t, err)
	t.Cleanup(func() { _ = ds.Close() })
	return ds
}

// info is what the gdalinfo program, which shares no code with this package,
// says of a raster.
func info(t *testing.T, path string, args ...string) map[string]any {
	t.Helper()
	out, err := exec.Command("gdalinfo", append([]string{"-json", path}, args...)...).Output()
	require.NoError(t, err)
	var doc map[string]any
	require.NoError(t, json.Unmarshal(out, &doc))
	return doc
}

// commandOutput runs a program and returns what it prints.
func commandOutput(name string, args ...string) (string, error) {
	out, err := exec.Command(name, args...).Output()
	return string(out), err
}

// band returns a band's part of what gdalinfo says.
func band(t *testing.T, doc map[string]any, i int) map[string]any {
	t.Helper()
	bands, _ := doc["bands"].([]any)
	require.Greater(t, len(bands), i)
	b, _ := bands[i].(map[string]any)
	return b
}

// items returns the metadata of a dataset or band in a domain.
func items(doc map[string]any, domain string) map[string]any {
	all, _ := doc["metadata"].(map[string]any)
	of, _ := all[domain].(map[string]any)
	return of
}

// TestSizes writes rasters whose sizes straddle the block, with a hole, and
// reads every cell back.
func TestSizes(t *testing.T) {
	for _, size := range [][2]int{{1, 1}, {1, 700}, {700, 1}, {511, 511}, {512, 512}, {513, 513}, {300, 1200}} {
		t.Run(fmt.Sprintf("%dx%d", size[0], size[1]), func(t *testing.T) {
			seed := rand.Uint64()
			t.Logf("seed %d", seed)
			r := rand.New(rand.NewPCG(seed, 1))
			win := dem.Window{Row: 0, Col: 0, Rows: size[0], Cols: size[1]}
			n := win.Rows * win.Cols
			codes, values := make([]uint8, n), make([]float32, n)
			for i := range n {
				codes[i] = testClasses[r.IntN(len(testClasses))].Value
				values[i] = float32(r.NormFloat64() * 1000)
				if i%7 == 3 {
					values[i] = float32(math.NaN())
				}
			}
			s, dir := newSet(t)
			g := utmGrid(t, win.Rows, win.Cols)
			wc, err := s.Writer("a", classLayer(), g, win)
			require.NoError(t, err)
			wf, err := s.Writer("a", floatLayer(), g, win)
			require.NoError(t, err)
			writeBytes(t, wc, win, codes)
			writeFloats(t, wf, win, values)
			require.NoError(t, s.Commit())
			assert.Equal(t, []string{"a", "a/height.tif", "a/sea.tif", "a/sea.tif.aux.xml"}, listing(t, dir))

			gotC := make([]uint8, n)
			require.NoError(t, openRaster(t, dir+"/a/sea.tif").Read(0, 0, gotC, win.Cols, win.Rows))
			assert.Equal(t, codes, gotC)
			gotF := make([]float32, n)
			require.NoError(t, openRaster(t, dir+"/a/height.tif").Read(0, 0, gotF, win.Cols, win.Rows))
			same(t, values, gotF, 0)
			for _, name := range []string{"sea", "height"} {
				ds := openRaster(t, dir+"/a/"+name+".tif")
				assert.Equal(t, "COG", ds.Metadata("LAYOUT", godal.Domain("IMAGE_STRUCTURE")))
				assert.Equal(t, "DEFLATE", ds.Metadata("COMPRESSION", godal.Domain("IMAGE_STRUCTURE")))
				assert.Equal(t, blockSize, ds.Bands()[0].Structure().BlockSizeX)
			}
		})
	}
}

// same compares two grids of values: NaN with NaN, numbers within tol.
func same(t *testing.T, want, got []float32, tol float64) {
	t.Helper()
	require.Len(t, got, len(want))
	for i := range want {
		a, b := float64(want[i]), float64(got[i])
		if math.IsNaN(a) != math.IsNaN(b) || math.Abs(a-b) > tol {
			t.Fatalf("cell %d: want %g, got %g, tolerance %g", i, a, b, tol)
		}
	}
}

// smooth is a gentle surface with a hole at every 97th cell.
func smooth(rows, cols int) []float32 {
	out := make([]float32, rows*cols)
	for i := range out {
		r, c := float64(i/cols), float64(i%cols)
		out[i] = float32(60 + 50*math.Sin(r/90)*math.Cos(c/70))
		if i%97 == 5 {
			out[i] = float32(math.NaN())
		}
	}
	return out
}

// TestScaled checks that 16-bit angles come back as degrees through the
// band's own scale, with GDAL's own unscaling, to half a step.
func TestScaled(t *testing.T) {
	const step = 0.01
	const halfStep = step/2 + 1e-5 // the values are float32: 6e-8 of 110
	s, dir := newSet(t)
	win := dem.Window{Row: 0, Col: 0, Rows: 600, Cols: 530}
	values := smooth(win.Rows, win.Cols)
	w, err := s.Writer("a", Layer{Name: "angle", Unit: "degree", Scale: step}, utmGrid(t, 600, 530), win)
	require.NoError(t, err)
	writeFloats(t, w, win, values)
	require.NoError(t, s.Commit())
	assert.Equal(t, []string{"a", "a/angle.tif"}, listing(t, dir), "no sidecar")

	path := dir + "/a/angle.tif"
	b := band(t, info(t, path), 0)
	assert.Equal(t, "Int16", b["type"])
	assert.Equal(t, "degree", b["unit"])
	assert.Equal(t, step, b["scale"])
	assert.Equal(t, float64(fill16), b["noDataValue"])

	plain := filepath.Join(t.TempDir(), "plain.tif")
	out, err := exec.Command("gdal_translate", "-q", "-unscale", "-ot", "Float32", path, plain).CombinedOutput()
	require.NoError(t, err, "%s", out)
	got := make([]float32, len(values))
	ds := openRaster(t, plain)
	require.NoError(t, ds.Read(0, 0, got, win.Cols, win.Rows))
	nodata, _ := ds.Bands()[0].NoData()
	for i := range got {
		if got[i] == float32(nodata) {
			got[i] = float32(math.NaN())
		}
	}
	same(t, values, got, halfStep)

	stat := w.Statistics()[0]
	want := plainStatistics(values)
	assert.InDelta(t, want.Min, stat.Min, halfStep)
	assert.InDelta(t, want.Max, stat.Max, halfStep)
	assert.InDelta(t, want.Mean, stat.Mean, halfStep)
	assert.InDelta(t, want.StdDev, stat.StdDev, halfStep)
	assert.Equal(t, want.Valid, stat.Valid)
}

// plainStatistics is the textbook two-pass computation.
func plainStatistics(values []float32) Statistics {
	s := Statistics{Min: math.Inf(1), Max: math.Inf(-1), All: int64(len(values))}
	for _, v := range values {
		if v == v {
			s.Valid++
			s.Mean += float64(v)
			s.Min, s.Max = math.Min(s.Min, float64(v)), math.Max(s.Max, float64(v))
		}
	}
	s.Mean /= float64(s.Valid)
	for _, v := range values {
		if v == v {
			s.StdDev += (float64(v) - s.Mean) * (float64(v) - s.Mean)
		}
	}
	s.StdDev = math.Sqrt(s.StdDev / float64(s.Valid))
	return s
}

// TestStatistics compares with a plain loop, and what the file says with
// what GDAL computes from the cells of the file.
func TestStatistics(t *testing.T) {
	s, dir := newSet(t)
	win := dem.Window{Row: 0, Col: 0, Rows: 400, Cols: 700}
	values := smooth(win.Rows, win.Cols)
	for i := range values {
		values[i] += 850000 // slant ranges are large beside their spread
	}
	w, err := s.Writer("a", floatLayer(), utmGrid(t, 400, 700), win)
	require.NoError(t, err)
	writeFloats(t, w, win, values)
	require.NoError(t, s.Commit())
	// Sums of 3e5 numbers below 200, in float64: 3e5 * 200 * 1e-16 over 3e5
	// values, with room.
	const tol = 1e-6
	want, got := plainStatistics(values), w.Statistics()[0]
	assert.Equal(t, want.Min, got.Min)
	assert.Equal(t, want.Max, got.Max)
	assert.InDelta(t, want.Mean, got.Mean, tol)
	assert.InDelta(t, want.StdDev, got.StdDev, tol)
	assert.Equal(t, want.Valid, got.Valid)
	assert.Equal(t, want.All, got.All)

	ds := openRaster(t, dir+"/a/height.tif")
	stored, ok, err := ds.Bands()[0].GetStatistics()
	require.NoError(t, err)
	require.True(t, ok, "the file carries statistics")
	// A copy whose cells are asked for anew: an ASCII grid has no statistics.
	fresh := filepath.Join(t.TempDir(), "fresh.asc")
	out, err := exec.Command("gdal_translate", "-q", "-of", "AAIGrid", "-co", "SIGNIFICANT_DIGITS=9", dir+"/a/height.tif", fresh).CombinedOutput()
	require.NoError(t, err, "%s", out)
	computed := items(band(t, info(t, fresh, "-stats"), 0), "")
	for key, value := range map[string]float64{"MINIMUM": stored.Min, "MAXIMUM": stored.Max, "MEAN": stored.Mean, "STDDEV": stored.Std} {
		var gdal float64
		_, err := fmt.Sscan(fmt.Sprint(computed["STATISTICS_"+key]), &gdal)
		require.NoError(t, err)
		assert.InDelta(t, gdal, value, 2e-6*math.Max(1, math.Abs(value)), key)
	}
}

// TestAllMissing writes a layer without one value.
func TestAllMissing(t *testing.T) {
	s, dir := newSet(t)
	win := dem.Window{Row: 0, Col: 0, Rows: 20, Cols: 30}
	values := make([]float32, 600)
	for i := range values {
		values[i] = float32(math.NaN())
	}
	w, err := s.Writer("a", floatLayer(), utmGrid(t, 20, 30), win)
	require.NoError(t, err)
	writeFloats(t, w, win, values)
	require.NoError(t, s.Commit())
	md := items(band(t, info(t, dir+"/a/height.tif"), 0), "")
	assert.Equal(t, "0.0000", md["STATISTICS_VALID_PERCENT"])
	assert.NotContains(t, md, "STATISTICS_MEAN")
	assert.Zero(t, w.Statistics()[0].Valid)
}

// TestClassRaster checks legend, colours, names, overviews and metadata with
// gdalinfo.
func TestClassRaster(t *testing.T) {
	s, dir := newSet(t)
	g := utmGrid(t, 1500, 1400)
	win := dem.Window{Row: 100, Col: 200, Rows: 1300, Cols: 1150}
	codes := make([]uint8, win.Rows*win.Cols)
	for i := range codes {
		codes[i] = testClasses[(i*7+i/win.Cols*3)%len(testClasses)].Value
	}
	w, err := s.Writer("a", classLayer(), g, win)
	require.NoError(t, err)
	writeBytes(t, w, win, codes)
	require.NoError(t, s.Commit())

	path := dir + "/a/sea.tif"
	doc := info(t, path)
	assert.Equal(t, []any{500000.0 + 200*30, 30.0, 0.0, 5100000.0 - 100*30, 0.0, -30.0}, doc["geoTransform"], "the window shifts the origin")
	assert.Contains(t, fmt.Sprint(doc["coordinateSystem"]), `ID["EPSG",32632]`)
	md := items(doc, "")
	assert.Equal(t, "Point", md["AREA_OR_POINT"])
	assert.Equal(t, `tool --look "a=1" <x>`, md["command"])
	assert.Equal(t, "Sea", md["title"])
	assert.Equal(t, awkward, md["note"])

	b := band(t, doc, 0)
	assert.Equal(t, "Byte", b["type"])
	assert.Equal(t, 0.0, b["noDataValue"])
	assert.Equal(t, "Palette", b["colorInterpretation"])
	assert.Equal(t, "Rough & steep: <waves>", items(b, "")["class_30"])
	table, _ := b["colorTable"].(map[string]any)
	entries, _ := table["entries"].([]any)
	require.Greater(t, len(entries), 41)
	assert.Equal(t, []any{246.0, 241.0, 228.0, 255.0}, entries[10])
	assert.Equal(t, []any{155.0, 34.0, 38.0, 255.0}, entries[30])

	overviews := openRaster(t, path).Bands()[0].Overviews()
	require.Len(t, overviews, 2, "1300 x 1150, 650 x 575, 325 x 288")
	known := map[uint8]bool{}
	for _, c := range testClasses {
		known[c.Value] = true
	}
	for _, o := range overviews {
		st := o.Structure()
		cells := make([]uint8, st.SizeX*st.SizeY)
		require.NoError(t, o.Read(0, 0, cells, st.SizeX, st.SizeY))
		for i, c := range cells {
			require.True(t, known[c], "overview cell %d holds %d", i, c)
		}
	}

	vrt := filepath.Join(t.TempDir(), "names.vrt")
	out, err := exec.Command("gdal_translate", "-q", "-of", "VRT", path, vrt).CombinedOutput()
	require.NoError(t, err, "%s", out)
	text, err := os.ReadFile(vrt)
	require.NoError(t, err)
	assert.Contains(t, string(text), "<Category>Rough &amp; steep</Category>")
	assert.Equal(t, 42, strings.Count(string(text), "<Category>")+strings.Count(string(text), "<Category />"))
}

// TestBands writes a vector of three bands.
func TestBands(t *testing.T) {
	s, dir := newSet(t)
	win := dem.Window{Row: 3, Col: 4, Rows: 530, Cols: 20}
	values := [][]float32{smooth(530, 20), smooth(530, 20), smooth(530, 20)}
	for i := range values[0] {
		values[1][i] *= 2
		values[2][i] -= 1
	}
	w, err := s.Writer("a", Layer{Name: "arrow", Unit: "1", Description: "all three",
		Bands: []Band{{Name: "east"}, {Name: "north", Unit: "m"}, {Name: "up", Description: "upwards"}}}, utmGrid(t, 600, 40), win)
	require.NoError(t, err)
	writeFloats(t, w, win, values...)
	require.NoError(t, s.Commit())
	doc := info(t, dir+"/a/arrow.tif")
	for i, want := range []Band{{"east", "1", "all three"}, {"north", "m", "all three"}, {"up", "1", "upwards"}} {
		b := band(t, doc, i)
		assert.Equal(t, want.Name, b["description"])
		assert.Equal(t, want.Unit, b["unit"])
		assert.Equal(t, want.Description, items(b, "")["description"])
		got := make([]float32, len(values[i]))
		require.NoError(t, openRaster(t, dir+"/a/arrow.tif").Bands()[i].Read(0, 0, got, win.Cols, win.Rows))
		same(t, values[i], got, 0)
	}
}

// TestQuantum checks the rounding, and that overviews are means of what is
// valid: within the range of the values they come from.
func TestQuantum(t *testing.T) {
	const quantum = 1.0 / 1024
	s, dir := newSet(t)
	win := dem.Window{Row: 0, Col: 0, Rows: 600, Cols: 600}
	values := smooth(600, 600)
	layer := floatLayer()
	layer.Quantum = quantum
	w, err := s.Writer("a", layer, utmGrid(t, 600, 600), win)
	require.NoError(t, err)
	writeFloats(t, w, win, values)
	require.NoError(t, s.Commit())
	b := openRaster(t, dir+"/a/height.tif").Bands()[0]
	got := make([]float32, len(values))
	require.NoError(t, b.Read(0, 0, got, 600, 600))
	same(t, values, got, quantum/2)
	for i, v := range got {
		if v == v {
			require.Equal(t, math.Trunc(float64(v)/quantum), float64(v)/quantum, "cell %d is no multiple", i)
		}
	}
	require.Len(t, b.Overviews(), 1)
	small := make([]float32, 300*300)
	require.NoError(t, b.Overviews()[0].Read(0, 0, small, 300, 300))
	for i := range small {
		lo, hi, sum, n := math.Inf(1), math.Inf(-1), 0.0, 0.0
		for _, k := range []int{0, 1, 600, 601} {
			if v := float64(got[i/300*1200+i%300*2+k]); v == v {
				lo, hi, sum, n = math.Min(lo, v), math.Max(hi, v), sum+v, n+1
			}
		}
		require.InDelta(t, sum/n, small[i], 1e-5*hi, "overview cell %d of values %g to %g", i, lo, hi)
	}
}

// TestOutOfRange checks that a value that 16 bits cannot hold stops the run.
func TestOutOfRange(t *testing.T) {
	s, dir := newSet(t)
	defer s.Abort()
	win := dem.Window{Row: 0, Col: 0, Rows: 1, Cols: 3}
	w, err := s.Writer("a", Layer{Name: "angle", Scale: 0.01}, utmGrid(t, 3, 3), win)
	require.NoError(t, err)
	require.NoError(t, w.WriteFloats(win, 0, []float32{327.67, -327.67, float32(math.NaN())}))
	for _, bad := range []float32{327.68, -327.68, float32(math.Inf(1))} {
		err = w.WriteFloats(win, 0, []float32{0, bad, 0})
		assertOutput(t, err, filepath.Join(dir, "a/angle.tif"), "does not fit 16 bits")
	}
}

// TestMissingCells checks that a raster with cells never written is refused.
func TestMissingCells(t *testing.T) {
	s, dir := newSet(t)
	win := dem.Window{Row: 0, Col: 0, Rows: 4, Cols: 4}
	w, err := s.Writer("a", classLayer(), utmGrid(t, 4, 4), win)
	require.NoError(t, err)
	require.NoError(t, w.WriteBytes(dem.Window{Row: 0, Col: 0, Rows: 2, Cols: 4}, make([]uint8, 8)))
	assertOutput(t, s.Commit(), filepath.Join(dir, "a/sea.tif"), "8 cells were computed, and it has 16")
	assert.Empty(t, listing(t, dir))
}

// TestSameBytes checks that a file does not depend on the order of tiles or
// on the number of threads.
func TestSameBytes(t *testing.T) {
	win := dem.Window{Row: 0, Col: 0, Rows: 1100, Cols: 900}
	values := smooth(win.Rows, win.Cols)
	var sums []string
	for _, threads := range []int{1, 2, 5} {
		s, _ := newSet(t)
		s.Threads = threads
		w, err := s.Writer("a", floatLayer(), utmGrid(t, 1100, 900), win)
		require.NoError(t, err)
		writeFloats(t, w, win, values)
		require.NoError(t, s.Finish(context.Background()))
		sums = append(sums, w.Checksum())
		s.Abort()
	}
	assert.Equal(t, sums[0], sums[1])
	assert.Equal(t, sums[0], sums[2])
}

// TestCRSKept writes grids of several reference systems, whose text comes from
// the gdalsrsinfo program, and has GDAL say whether what the file holds is the same.
func TestCRSKept(t *testing.T) {
	for _, code := range []string{
		"EPSG:4326",       // degrees, latitude first by definition
		"EPSG:26710",      // an old datum
		"EPSG:2263",       // feet
		"EPSG:32632+5773", // with heights above a geoid
		"EPSG:4979",       // three dimensions
		"+proj=laea +lat_0=46 +lon_0=9 +datum=WGS84 +units=m +no_defs +type=crs", // no code
	} {
		t.Run(code, func(t *testing.T) {
			want, err := godal.NewSpatialRef(code)
			require.NoError(t, err)
			defer want.Close()
			wkt, err := commandOutput("gdalsrsinfo", "-o", "wkt2", code)
			require.NoError(t, err)
			transform := [6]float64{9.25, 0.01, 0, 46.5, 0, -0.01}
			g, err := dem.NewGrid(4, 5, transform, wkt, func(_, _ []float64) error { return nil })
			require.NoError(t, err)
			s, dir := newSet(t)
			w, err := s.Writer("a", floatLayer(), g, g.Whole())
			require.NoError(t, err)
			writeFloats(t, w, g.Whole(), smooth(4, 5))
			require.NoError(t, s.Commit())
			ds := openRaster(t, dir+"/a/height.tif")
			got := ds.SpatialRef()
			defer got.Close()
			assert.True(t, got.IsSame(want), "%s", ds.Projection())
			gt, err := ds.GeoTransform()
			require.NoError(t, err)
			assert.InDeltaSlice(t, transform[:], gt[:], 1e-12)
			assert.Equal(t, []string{"a", "a/height.tif"}, listing(t, dir))
		})
	}
}

// TestBadCRS expects an error where GDAL would leave the reference system out
// and say nothing.
func TestBadCRS(t *testing.T) {
	g := *utmGrid(t, 4, 5)
	g.CRS = "somewhere"
	s, dir := newSet(t)
	w, err := s.Writer("a", floatLayer(), &g, g.Whole())
	require.NoError(t, err)
	writeFloats(t, w, g.Whole(), smooth(4, 5))
	assertOutput(t, s.Commit(), filepath.Join(dir, "a/height.tif"), "could not store the DEM's coordinate reference system")
	assert.Empty(t, listing(t, dir))
}
