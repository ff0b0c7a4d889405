package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem/raster"
	"foldshade/mask"
)

// hillSites writes sites on the hill of the tests, in its map units, and
// returns the path: rows of name,x,y and more columns.
func hillSites(t testing.TB, dir, head string, rows ...string) string {
	t.Helper()
	path := filepath.Join(dir, "sites.csv")
	require.NoError(t, os.WriteFile(path, []byte(head+"\n"+strings.Join(rows, "\n")+"\n"), 0o600))
	return path
}

// twoLooks see the hill from the west, flat and steep: the first hides ground
// behind it, the second folds its western slope.
var twoLooks = []string{"--look", "name=flat,incidence=72,azimuth=90,band=X,bandwidth_mhz=150,slant_range_km=8,baseline=100",
	"--look", "name=steep,incidence=22,azimuth=90"}

// decodeRows reads the JSON of the command.
func decodeRows(t *testing.T, text string) []map[string]any {
	t.Helper()
	var rows []map[string]any
	require.NoError(t, json.Unmarshal([]byte(text), &rows), text)
	return rows
}

// TestSitesFormats: every format holds the values of the JSON, read back by
// GDAL's own program where it is GDAL's format.
func TestSitesFormats(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	sites := hillSites(t, dir, "name,x,y,height,footprint",
		`"<b>&amp; ""A"", 'one'",602010.5,5198505.25,0,0`, "behind,602400,5198490,2.5,60", "foot,601650,5198500,0,0")
	at := func(file string) string { return filepath.Join(dir, file) }
	args := append([]string{"sites", name, "--sites", sites, "--out", at("r.csv"), "--out", at("r.geojson"), "--out", at("r.gpkg"), "--out", at("r.kml"),
		"--dem-sigma", "2", "--reflector-legs", "0.7,1", "--json"}, twoLooks...)
	got := call(t.Context(), args...)
	require.Equal(t, exitDone, got.code, got.errOut)
	rows := decodeRows(t, got.out)
	require.Len(t, rows, 6)
	verdicts := map[any]bool{}
	for _, r := range rows {
		verdicts[r["verdict"]] = true
	}
	require.Greater(t, len(verdicts), 1, "the sites differ")

	t.Run("csv", func(t *testing.T) {
		f, err := os.Open(at("r.csv"))
		require.NoError(t, err)
		defer func() { _ = f.Close() }()
		table, err := csv.NewReader(f).ReadAll()
		require.NoError(t, err)
		require.Len(t, table, 7)
		for i, row := range rows {
			require.Len(t, table[0], len(row))
			for k, column := range table[0] {
				equalText(t, row[column], table[i+1][k], column)
			}
		}
	})
	t.Run("geojson", func(t *testing.T) {
		var all struct {
			Features []struct {
				Geometry   struct{ Coordinates []float64 }
				Properties map[string]any
			}
		}
		text, err := os.ReadFile(at("r.geojson"))
		require.NoError(t, err)
		require.NoError(t, json.Unmarshal(text, &all))
		require.Len(t, all.Features, 6)
		for i, row := range rows {
			assert.Equal(t, row, all.Features[i].Properties)
			assert.Equal(t, []float64{row["lon"].(float64), row["lat"].(float64)}, all.Features[i].Geometry.Coordinates)
		}
	})
	t.Run("gpkg", func(t *testing.T) {
		for i, f := range readBack(t, at("r.gpkg"), "results") {
			for column, want := range rows[i] {
				equalText(t, want, fmt.Sprint(f.Properties[column]), column)
			}
			assert.Equal(t, []float64{rows[i]["x"].(float64), rows[i]["y"].(float64)}, f.Geometry.Coordinates)
		}
		assert.Len(t, readBack(t, at("r.gpkg"), "sites"), 3)
		lines := 0
		for _, row := range rows {
			kind := int(row["code"].(float64)) / 10
			if kind == 3 && row["partner_distance"] != nil || kind == 4 && row["blocker_distance"] != nil {
				lines++
			}
		}
		require.Positive(t, lines)
		assert.Len(t, readBack(t, at("r.gpkg"), "lines"), lines)
	})
	t.Run("kml", func(t *testing.T) {
		for k, look := range []string{"flat", "steep"} {
			marks := 0
			for _, f := range readBack(t, at("r.kml"), look) {
				if len(f.Properties) == 0 || f.Properties["site"] == nil {
					continue // a line
				}
				row := rows[2*marks+k]
				assert.Equal(t, row["site"], f.Properties["Name"])
				for column, want := range row {
					equalText(t, want, fmt.Sprint(f.Properties[column]), column)
				}
				marks++
			}
			assert.Equal(t, 3, marks)
		}
	})
}

// feature is one of GDAL's own reading.
type feature struct {
	Geometry struct {
		Coordinates any
	}
	Properties map[string]any
}

// readBack has GDAL read a layer of a vector file.
func readBack(t *testing.T, path, layer string) []feature {
	t.Helper()
	out, err := exec.Command("ogr2ogr", "-f", "GeoJSON", "/vsistdout/", path, layer, "-lco", "RFC7946=NO", "-lco", "COORDINATE_PRECISION=9").Output()
	require.NoError(t, err)
	var all struct{ Features []feature }
	require.NoError(t, json.Unmarshal(out, &all))
	for i := range all.Features {
		if c, ok := all.Features[i].Geometry.Coordinates.([]any); ok && len(c) >= 2 {
			if x, ok := c[0].(float64); ok {
				all.Features[i].Geometry.Coordinates = []float64{x, c[1].(float64)}
			}
		}
	}
	return all.Features
}

// equalText compares a value of the JSON with a text that holds it.
func equalText(t *testing.T, want any, got, column string) {
	t.Helper()
	switch w := want.(type) {
	case nil:
		assert.Contains(t, []string{"", "<nil>"}, got, column)
	case float64:
		v, err := strconv.ParseFloat(got, 64)
		require.NoError(t, err, column)
		assert.Equal(t, w, v, column)
	default:
		assert.Equal(t, w, got, column)
	}
}

// TestSitesAtCellCentres: a site at a cell's centre gets the class and the
// margins that `layers` writes there. The rasters hold steps of 1/64 m, the
// rows hundredths: half a step of each is what they may differ by.
func TestSitesAtCellCentres(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	cells := [][2]int{{60, 60}, {60, 70}, {60, 80}, {59, 85}, {60, 95}, {40, 100}, {80, 50}, {61, 74}, {20, 30}}
	var rows []string
	for i, c := range cells {
		rows = append(rows, fmt.Sprintf("%d,%.1f,%.1f", i, 600000+25*(float64(c[1])+0.5), 5200000-25*(float64(c[0])+0.5)))
	}
	sites := hillSites(t, dir, "name,x,y", rows...)
	got := call(t.Context(), append([]string{"sites", name, "--sites", sites, "--json"}, twoLooks...)...)
	require.Equal(t, exitDone, got.code, got.errOut)
	found := decodeRows(t, got.out)
	layers := filepath.Join(dir, "layers")
	run := call(t.Context(), append([]string{"layers", name, "--out", layers, "--only", "verdict,clearance,fold-margin,local-incidence"}, twoLooks...)...)
	require.Equal(t, exitDone, run.code, run.errOut)
	const tolerance = 1.0/128 + 0.005 + 1e-9
	classes, rasters := map[float64]bool{}, map[string][]float64{}
	for i, c := range cells {
		for k, look := range []string{"flat", "steep"} {
			row := found[2*i+k]
			read := func(layer string) float64 {
				path := filepath.Join(layers, look, layer+".tif")
				if rasters[path] == nil {
					rasters[path] = allCells(t, path)
				}
				return rasters[path][c[0]*160+c[1]]
			}
			classes[row["code"].(float64)] = true
			assert.Equal(t, read("verdict"), row["code"], "cell %v, %s", c, look)
			for layer, column := range map[string]string{"clearance": "clearance", "fold-margin": "fold_margin"} {
				want := read(layer)
				if math.IsNaN(want) {
					assert.Nil(t, row[column], "cell %v, %s, %s", c, look, layer)
					continue
				}
				require.NotNil(t, row[column], "cell %v, %s, %s: want %g", c, look, layer, want)
				assert.InDelta(t, want, row[column], tolerance, "cell %v, %s, %s", c, look, layer)
			}
			// Stored in steps of 0.005 degrees.
			assert.InDelta(t, read("local-incidence"), row["local_incidence"], 0.0025+0.005+1e-9)
		}
	}
	assert.Greater(t, len(classes), 3, "the cells are of several classes: %v", classes)
}

// allCells reads a raster with GDAL's own program, row by row.
func allCells(t *testing.T, path string) []float64 {
	t.Helper()
	out, err := exec.Command("gdal_translate", "-q", "-unscale", "-ot", "Float64", "-of", "XYZ", path, "/vsistdout/").Output()
	require.NoError(t, err)
	var cells []float64
	for line := range strings.Lines(string(out)) {
		fields := strings.Fields(line)
		v, err := strconv.ParseFloat(fields[len(fields)-1], 64)
		require.NoError(t, err)
		cells = append(cells, v)
	}
	return cells
}

// TestSitesRequire: the exit status and what is printed when a pair is not
// what is required; the results are written either way.
func TestSitesRequire(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	sites := hillSites(t, dir, "name,x,y", "plain,600700,5199300", "behind,602250,5198490")
	table := call(t.Context(), append([]string{"sites", name, "--sites", sites, "--json"}, twoLooks...)...)
	require.Equal(t, exitDone, table.code, table.errOut)
	for _, require_ := range []string{"open", "usable"} {
		failing := 0
		for _, r := range decodeRows(t, table.out) {
			if require_ == "open" && r["code"] != 10.0 || require_ == "usable" && r["verdict"] != "usable" {
				failing++
			}
		}
		require.Positive(t, failing)
		out := filepath.Join(dir, require_+".csv")
		got := call(t.Context(), append([]string{"sites", name, "--sites", sites, "--require", require_, "--out", out}, twoLooks...)...)
		assert.Equal(t, exitRequire, got.code)
		assert.FileExists(t, out)
		assert.Equal(t, failing, strings.Count(got.errOut, "not "+require_+": "), got.errOut)
		assert.Contains(t, got.errOut, `"behind" under look "flat"`)
		assert.Contains(t, got.errOut, fmt.Sprintf("%d of 4 pairs", failing))
	}
	fine := call(t.Context(), "sites", name, "--sites", hillSites(t, dir, "name,x,y", "plain,600700,5199300"), "--edge", "open", "--require", "open",
		"--look", "name=a,incidence=40,azimuth=90")
	assert.Equal(t, exitDone, fine.code, fine.errOut)
}

// TestSitesOneBad: what cannot be judged is told, by the exit status too, and
// everything else is there as without it.
func TestSitesOneBad(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	good := []string{"plain,600700,5199300", "behind,602250,5198490"}
	args := func(out string, rows ...string) []string {
		return append([]string{"sites", name, "--sites", hillSites(t, dir, "name,x,y", rows...), "--json", "--out", filepath.Join(dir, out)}, twoLooks...)
	}
	alone := call(t.Context(), args("alone.csv", good...)...)
	require.Equal(t, exitDone, alone.code, alone.errOut)
	want := decodeRows(t, alone.out)
	got := call(t.Context(), args("all.csv", good[0], "swapped,5199300,600700", good[1], "far,0,0", "word,east,5199300")...)
	assert.Equal(t, exitInput, got.code)
	assert.Contains(t, got.errOut, `not judged: record 2, "swapped": At 5199300, 600700 it lies outside the DEM; with the two coordinates swapped`)
	assert.Contains(t, got.errOut, `record 4, "far"`)
	assert.Contains(t, got.errOut, `record 5, "word": Column x holds "east"`)
	assert.Contains(t, got.errOut, "3 of 5 could not be judged")
	rows := decodeRows(t, got.out)
	require.Len(t, rows, 10)
	for i, at := range []int{0, 1, 4, 5} {
		rows[at]["record"] = want[i]["record"]
		assert.Equal(t, want[i], rows[at])
	}
	assert.Equal(t, "undetermined", rows[2]["verdict"])
	assert.Equal(t, 0.0, rows[2]["code"])
	assert.NotEmpty(t, rows[2]["problem"])
	assert.Nil(t, rows[2]["clearance"])
	assert.FileExists(t, filepath.Join(dir, "all.csv"))

	none := call(t.Context(), args("none.csv", "far,0,0")...)
	assert.Equal(t, exitInput, none.code)
	assert.Contains(t, none.errOut, "none of the 1 can be judged")
	assert.NoFileExists(t, filepath.Join(dir, "none.csv"))
}

// TestSitesOnHole: a site without ground under it is told too.
func TestSitesOnHole(t *testing.T) {
	dir := t.TempDir()
	dem := filepath.Join(dir, "dem.asc")
	asciiGrid(t, dem, 40, 40, 600000, 5200000, 25, func(i int) string {
		if i/40 >= 10 && i/40 < 14 && i%40 >= 10 && i%40 < 14 {
			return "-9999"
		}
		return strconv.Itoa(700 + i%7)
	})
	sites := hillSites(t, dir, "name,x,y", "hole,600300,5200700", "ground,600700,5200300")
	got := call(t.Context(), "sites", dem, "--crs", "EPSG:32632", "--sites", sites, "--look", "name=a,incidence=40,azimuth=90", "--json",
		"--sheet", filepath.Join(dir, "sheet.html"))
	assert.Equal(t, exitInput, got.code, got.errOut)
	assert.Contains(t, got.errOut, `"hole"`)
	rows := decodeRows(t, got.out)
	assert.Equal(t, "undetermined", rows[0]["verdict"])
	assert.Contains(t, rows[0]["problem"], "no height")
	assert.Nil(t, rows[1]["problem"])
	assert.FileExists(t, filepath.Join(dir, "sheet.html"))
}

// TestSitesBadInput goes through what can be wrong with the sites, the flags
// and the output place: the exit code, one clear line, nothing left behind.
func TestSitesBadInput(t *testing.T) {
	dir := badPlace(t)
	write := func(name, text string) { require.NoError(t, os.WriteFile(name, []byte(text), 0o600)) }
	write("sites.csv", "name,x,y\na,600500,5199500\n")
	write("far.csv", "name,x,y\na,1,2\n")
	write("bare.csv", "name,note\na,b\n")
	write("rows.csv", "name,x,y\n")
	write("out.csv", "somebody's work")
	require.NoError(t, os.Mkdir("dir.csv", 0o700))
	const look = "name=a,incidence=38,azimuth=78"
	with := func(more ...string) []string {
		return append([]string{"sites", "hill.tif", "--look", look, "--sites", "sites.csv"}, more...)
	}
	from := func(file string, more ...string) []string {
		return append([]string{"sites", "hill.tif", "--look", look, "--sites", file}, more...)
	}
	radar := []string{"sites", "hill.tif", "--sites", "sites.csv", "--look", look + ",band=X"}
	before := listing(t, dir)
	for _, c := range []struct {
		name string
		args []string
		code int
		says []string
	}{
		{"no sites", []string{"sites", "hill.tif", "--look", look}, exitUsage, []string{"--sites FILE is missing"}},
		{"no look", []string{"sites", "hill.tif", "--sites", "sites.csv"}, exitUsage, []string{"no look given"}},
		{"no DEM", []string{"sites", "--sites", "sites.csv", "--look", look}, exitUsage, []string{"DEM is missing"}},
		{"missing DEM", []string{"sites", "nowhere.tif", "--sites", "sites.csv", "--look", look}, exitInput, []string{"no such file"}},
		{"missing file", from("nowhere.gpkg"), exitInput, []string{`"nowhere.gpkg"`, "no such file"}},
		{"raster", from("hill.tif"), exitInput, []string{`"hill.tif"`, "not a vector file"}},
		{"empty file", from("empty.tif"), exitInput, []string{"the file is empty"}},
		{"no rows", from("rows.csv"), exitInput, []string{"holds no features"}},
		{"no places", from("bare.csv"), exitInput, []string{"no columns lon and lat or x and y", `"note"`}},
		{"none inside", from("far.csv"), exitInput, []string{"none of the 1 can be judged", "lies outside the DEM"}},
		{"unknown CRS", with("--sites-crs", "EPSG:999999"), exitInput, []string{"EPSG:999999", "--sites-crs"}},
		{"unknown layer", with("--sites-layer", "b"), exitInput, []string{`no layer "b"`}},
		{"unknown column", with("--height-column", "mast"), exitInput, []string{`"mast"`, "--height-column"}},
		{"sigma 0", with("--dem-sigma", "0"), exitUsage, []string{"--dem-sigma", "0.01 to 1000 metres"}},
		{"sigma NaN", with("--dem-sigma", "NaN"), exitUsage, []string{"--dem-sigma", "NaN"}},
		{"correlation alone", with("--dem-correlation", "100"), exitUsage, []string{"--dem-correlation needs --dem-sigma"}},
		{"seed 0", with("--seed", "0"), exitUsage, []string{"--seed", "1 to 2147483647"}},
		{"require of no kind", with("--require", "good"), exitUsage, []string{"--require", "open or usable"}},
		{"out of no format", with("--out", "r.txt"), exitUsage, []string{`"r.txt"`, ".gpkg, .geojson, .csv, .kml"}},
		{"out of no ending", with("--out", "r"), exitUsage, []string{`"r"`}},
		{"sheet of no format", with("--sheet", "r.pdf"), exitUsage, []string{`"r.pdf"`, ".html"}},
		{"title without sheet", with("--title", "x"), exitUsage, []string{"--title", "--sheet"}},
		{"hidden out", with("--out", ".csv"), exitUsage, []string{"dot"}},
		{"out twice", with("--out", "r.csv", "--out", "./r.csv"), exitUsage, []string{"named twice"}},
		{"out exists", with("--out", "out.csv"), exitOutput, []string{"out.csv", "already exists", "--overwrite"}},
		{"second out exists", with("--out", "new.gpkg", "--out", "out.csv"), exitOutput, []string{"out.csv", "already exists"}},
		{"out is a folder", with("--out", "dir.csv", "--overwrite"), exitOutput, []string{"dir.csv", "is a folder"}},
		{"out is the input", with("--out", "sites.csv", "--overwrite"), exitOutput, []string{"sites.csv", "is the input"}},
		{"out below a file", with("--out", "text.tif/r.csv"), exitOutput, []string{"text.tif"}},
		{"out below nothing", with("--out", "some/where/r.gpkg"), exitOutput, []string{"does not exist"}},
		{"sheet below nothing", with("--sheet", "some/where/r.html"), exitOutput, []string{"does not exist"}},
		{"reflector without frequency", with("--reflector-legs", "1"), exitUsage, []string{"frequency"}},
		{"reflector of no size", append(radar, "--reflector-legs", "0"), exitUsage, []string{"--reflector-legs", "0.05 to 20"}},
		{"reflector twice", append(radar, "--reflector-legs", "1,1"), exitUsage, []string{"twice"}},
		{"reflectors without end", append(radar, "--reflector-legs", "1,2,3,4,5,6,7,8,9"), exitUsage, []string{"8 at most"}},
		{"ratio without clutter", append(radar, "--reflector-ratio", "20"), exitUsage, []string{"--clutter"}},
		{"ratio and error", append(radar, "--reflector-ratio", "20", "--reflector-error", "1"), exitUsage, []string{"give one of them"}},
		{"clutter alone", append(radar, "--clutter=-10"), exitUsage, []string{"belong together"}},
		{"clutter without reflector", append(radar, "--clutter=-10", "--azimuth-resolution", "1"), exitUsage, []string{"--reflector-legs"}},
		{"clutter without bandwidth", append(radar, "--reflector-legs", "1", "--clutter=-10", "--azimuth-resolution", "1"), exitUsage, []string{"bandwidth"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			got := call(t.Context(), c.args...)
			assert.Equal(t, c.code, got.code, got.errOut)
			assert.Empty(t, got.out, "a refusal prints no result")
			checkMessage(t, got.errOut, c.says)
			assert.Equal(t, before, listing(t, dir), "something was left behind")
		})
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	got := call(ctx, with("--out", "new.gpkg", "--sheet", "new.html")...)
	assert.Equal(t, exitInterrupted, got.code)
	assert.Equal(t, before, listing(t, dir))
	cmd := program(t, dir, with("--out", "new.csv", "--sheet", "new.html", "--out", "new.gpkg")...)
	cmd.Env = append(cmd.Env, fileSizeLimit+"=50000")
	text, err := cmd.CombinedOutput()
	var exit *exec.ExitError
	require.ErrorAs(t, err, &exit, string(text))
	assert.Equal(t, exitOutput, exit.ExitCode(), string(text))
	assert.Equal(t, before, listing(t, dir), "a full disk leaves nothing")
}

// TestSitesManySites: ten thousand sites of one name are told apart and all
// judged.
func TestSitesManySites(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	var rows []string
	for i := range 10000 {
		rows = append(rows, fmt.Sprintf("same,%.2f,%.2f", 600400+float64(i%100)*30, 5199600-float64(i/100)*22))
	}
	out := filepath.Join(dir, "r.gpkg")
	got := call(t.Context(), "sites", name, "--sites", hillSites(t, dir, "name,x,y", rows...), "--look", "incidence=40,azimuth=90", "--json", "--out", out,
		"--sheet", filepath.Join(dir, "r.html"))
	require.Equal(t, exitDone, got.code, got.errOut)
	assert.Contains(t, got.errOut, "9999 sites had the name of an earlier one")
	names := map[any]bool{}
	for _, r := range decodeRows(t, got.out) {
		names[r["site"]] = true
	}
	assert.Len(t, names, 10000)
	page, err := os.ReadFile(filepath.Join(dir, "r.html"))
	require.NoError(t, err)
	assert.Contains(t, string(page), "9940 more sites are not on this sheet")
}

// TestSitesPolygon: a polygon is judged by its cells; its shares are those of
// the verdict layer over the cells whose centres lie in it.
func TestSitesPolygon(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	sites := filepath.Join(dir, "area.csv")
	// Rows 50 to 69 and columns 70 to 99 of the grid.
	require.NoError(t, os.WriteFile(sites, []byte("name,WKT\nslope,\"POLYGON ((601750 5198750, 602500 5198750, 602500 5198250, 601750 5198250, 601750 5198750))\"\n"), 0o600))
	got := call(t.Context(), append([]string{"sites", name, "--sites", sites, "--sites-crs", "EPSG:32632", "--json"}, twoLooks...)...)
	require.Equal(t, exitDone, got.code, got.errOut)
	run := call(t.Context(), append([]string{"layers", name, "--out", filepath.Join(dir, "l"), "--only", "verdict", "--area", "601750,5198250,602500,5198750", "--json"}, twoLooks...)...)
	require.Equal(t, exitDone, run.code, run.errOut)
	var looks []struct{ Cells map[string]float64 }
	require.NoError(t, json.Unmarshal([]byte(run.out), &looks))
	for k, row := range decodeRows(t, got.out) {
		sum := 0.0
		for _, kind := range []string{"no_data", "open", "compressed", "layover", "shadow", "undetermined"} {
			share := row["share_"+kind].(float64)
			assert.InDelta(t, looks[k].Cells[kind]/600, share, 0.00005+1e-9, "%s, %s", row["look"], kind)
			sum += share
		}
		assert.InDelta(t, 1, sum, 0.0003, "shares are rounded to four decimals")
		assert.Equal(t, "polygon", row["shape"])
	}
}

// TestReflectorAid against published tables: cross-sections, base tilts and
// phase noise. Sources: Ruck, Radar Cross Section Handbook, 1970, and Garthwaite
// et al., Geoscience Australia Record 2015/03 (formulas from memory, values
// computed by hand); Ferretti et al., IEEE TGRS 45(5), 2007 (from memory).
func TestReflectorAid(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 120, 160)
	sites := hillSites(t, dir, "name,x,y", "plain,600700,5199300")
	aid := func(more ...string) map[string]any {
		t.Helper()
		args := append([]string{"sites", name, "--sites", sites, "--edge", "open", "--json"}, more...)
		got := call(t.Context(), args...)
		require.Equal(t, exitDone, got.code, got.errOut)
		return decodeRows(t, got.out)[0]
	}
	r := aid("--look", "name=a,incidence=39,azimuth=90,frequency_ghz=5.405,bandwidth_mhz=100", "--reflector-legs", "0.5,0.7,1,1.5,2.5",
		"--clutter=-10", "--azimuth-resolution", "2", "--reflector-ratio", "20")
	for leg, dbsm := range map[string]float64{"0_5": 19.30, "0_7": 25.14, "1": 31.34, "1_5": 38.38, "2_5": 47.26} {
		assert.InDelta(t, dbsm, r["section_dbsm_leg_"+leg], 0.0051, "leg %s", leg)
	}
	assert.InDelta(t, 15.74, r["reflector_base_tilt"], 0.02, "the plane wave's incidence is that of the grid: a hundredth of a degree from 39")
	assert.InDelta(t, 270, r["reflector_azimuth"], 2, "convergence of the grid")
	assert.Equal(t, r["to_radar"], r["reflector_azimuth"])
	assert.Equal(t, r["to_radar_grid"], r["reflector_azimuth_grid"])
	assert.Equal(t, "yes", r["reflector_clears"])
	assert.Equal(t, 20.0, r["ratio_wanted_db"])
	// Clutter: -10 dB of 2 m x the ground resolution; the leg for 20 dB over it
	// from 4 pi a^4 / (3 lambda^2), lambda = 55.466 mm.
	clutter := -10 + 10*math.Log10(2*r["ground_resolution"].(float64))
	assert.InDelta(t, clutter, r["clutter_dbsm"], 0.02)
	lambda := 299792458 / 5.405e9
	leg := math.Pow(3*lambda*lambda*math.Pow(10, (20+r["clutter_dbsm"].(float64))/10)/(4*math.Pi), 0.25)
	assert.InDelta(t, leg, r["leg_wanted"], 0.001)
	assert.InDelta(t, 31.34-r["clutter_dbsm"].(float64), r["ratio_db_leg_1"], 0.011)

	// A ratio of 20 dB is an error of 0.3121 mm at 5.405 GHz.
	e := aid("--look", "name=a,incidence=39,azimuth=90,frequency_ghz=5.405,bandwidth_mhz=100", "--reflector-error", "0.3121", "--clutter=-10", "--azimuth-resolution", "2")
	assert.InDelta(t, 20, e["ratio_wanted_db"], 0.011)
	assert.Equal(t, r["leg_wanted"], e["leg_wanted"])
	for incidence, tilt := range map[string]float64{"20": 34.74, "45": 9.74, "60": -5.26} {
		row := aid("--look", "name=a,incidence="+incidence+",azimuth=90,band=X", "--reflector-legs", "1")
		assert.InDelta(t, tilt, row["reflector_base_tilt"], 0.02)
	}
	text := call(t.Context(), "sites", name, "--sites", sites, "--look", "name=a,incidence=39,azimuth=90,band=X", "--reflector-legs", "0.1")
	assert.Contains(t, text.out, "rough: the legs are short against the wavelength")
	assert.Contains(t, text.out, "codes and permits come first")
}

// TestColumnNames: keys are snake_case, no two alike, and the scripting page
// names them all.
func TestColumnNames(t *testing.T) {
	text, err := os.ReadFile(root + "/docs/scripting.md")
	require.NoError(t, err)
	src, err := raster.Open(mountain, raster.Options{})
	require.NoError(t, err)
	defer func() { _ = src.Close() }()
	job := newSitesJob()
	job.reflector = reflectorFlags{legs: []float64{1.5}, ratio: 20, error: math.NaN(), sigma0: -10, across: 2}
	seen := map[string]bool{}
	for _, c := range newSiteReport(job, src, &raster.Sites{}, nil).allColumns() {
		assert.Regexp(t, `^[a-z][a-z0-9_]*$`, c.name)
		assert.False(t, seen[c.name], c.name)
		seen[c.name] = true
		written := strings.Replace(c.name, "leg_1_5", "leg_L", 1)
		assert.Contains(t, string(text), "`"+written+"`")
	}
	for _, v := range mask.Verdicts {
		assert.Contains(t, string(text), "`"+string(v)+"`")
	}
}

// TestWalkthrough runs what the walk-through tells its reader to run, in an
// empty folder, with the files that it lists. The last run shows what
// --require does.
func TestWalkthrough(t *testing.T) {
	text, err := os.ReadFile(root + "/docs/walkthrough.md")
	require.NoError(t, err)
	t.Chdir(t.TempDir())
	ran := 0
	parts := strings.Split(string(text), "```")
	for i := 1; i < len(parts); i += 2 {
		kind, body, _ := strings.Cut(parts[i], "\n")
		if kind != "" {
			before := strings.TrimSuffix(strings.TrimSpace(parts[i-1]), "`:")
			name := before[strings.LastIndex(before, "`")+1:]
			require.Equal(t, "."+kind, filepath.Ext(name))
			require.NoError(t, os.WriteFile(name, []byte(body), 0o600))
			continue
		}
		for line := range strings.Lines(strings.ReplaceAll(body, "\\\n", " ")) {
			out, err := exec.Command("sh", "-c", `for w in `+strings.TrimSpace(line)+`; do printf '%s\0' "$w"; done`).Output()
			require.NoError(t, err)
			words := strings.Split(strings.TrimSuffix(string(out), "\x00"), "\x00")
			require.Equal(t, "foldshade", words[0], line)
			want := exitDone
			if strings.Contains(line, "--require") {
				want = exitRequire
			}
			got := call(t.Context(), words[1:]...)
			assert.Equal(t, want, got.code, "%s: %s", line, got.errOut)
			ran++
		}
	}
	assert.GreaterOrEqual(t, ran, 8)
	for _, name := range []string{"campaign.gpkg", "campaign.kml", "campaign.csv", "campaign.html"} {
		assert.FileExists(t, name)
	}
	rows := decodeRows(t, call(t.Context(), "sites", "valley/valley.tif", "--sites", "plan.csv", "--looks", "plan.yaml", "--look", "name=plane,incidence=61,azimuth=148", "--json").out)
	verdicts := map[string]any{}
	for _, r := range rows {
		verdicts[r["site"].(string)+", "+r["look"].(string)] = r["verdict"]
	}
	for pair, want := range map[string]string{
		"Slide reflector, ascending": "usable", "Slide reflector, descending": "usable", "Slide scar, descending": "marginal",
		"Gorge gauge, ascending": "unusable", "Gorge gauge, descending": "unusable", "Gorge gauge, plane": "usable",
		"Gorge rim north, ascending": "unusable", "Gorge rim north, descending": "usable",
		"Gorge rim south, ascending": "usable", "Gorge rim south, descending": "unusable",
	} {
		assert.Equal(t, want, verdicts[pair], "the page says so: %s", pair)
	}
}
