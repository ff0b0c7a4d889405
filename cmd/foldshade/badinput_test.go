package main

import (
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// asciiGrid writes an ESRI ASCII raster, the plainest format that GDAL reads,
// without a CRS.
func asciiGrid(t *testing.T, path string, cols, rows int, x, y, cell float64, value func(i int) string) {
	t.Helper()
	var text strings.Builder
	fmt.Fprintf(&text, "ncols %d\nnrows %d\nxllcorner %v\nyllcorner %v\ncellsize %v\nNODATA_value -9999\n", cols, rows, x, y, cell)
	for i := range rows * cols {
		text.WriteString(value(i))
		if (i+1)%cols == 0 {
			text.WriteString("\n")
		} else {
			text.WriteString(" ")
		}
	}
	require.NoError(t, os.WriteFile(path, []byte(text.String()), 0o600))
}

// virtual writes a VRT of 4 x 4 cells over a raw file of zeros, with a part of
// the header to choose.
func virtual(t *testing.T, path, size, header, band, dataType string) {
	t.Helper()
	raw := path + ".raw"
	require.NoError(t, os.WriteFile(raw, make([]byte, 4*4*16), 0o600))
	text := fmt.Sprintf(`<VRTDataset %s>%s<VRTRasterBand dataType="%s" band="1" subClass="VRTRawRasterBand">%s`+
		`<SourceFilename relativeToVRT="1">%s</SourceFilename><ImageOffset>0</ImageOffset></VRTRasterBand></VRTDataset>`,
		size, header, dataType, band, filepath.Base(raw))
	require.NoError(t, os.WriteFile(path, []byte(text), 0o600))
}

// badPlace fills a folder with the inputs of the table and enters it.
func badPlace(t *testing.T) string {
	t.Helper()
	dir := t.TempDir()
	t.Chdir(dir)
	write := func(name, text string) {
		require.NoError(t, os.WriteFile(name, []byte(text), 0o600))
	}
	hill(t, dir, 40, 50)
	content, err := os.ReadFile("hill.tif")
	require.NoError(t, err)
	write("head.tif", string(content[:64]))
	write("half.tif", string(content[:len(content)/2]))
	write("empty.tif", "")
	write("text.tif", "these are no heights\n")
	write("archive.zip", "PK\x05\x06"+strings.Repeat("\x00", 18))
	require.NoError(t, os.Mkdir("folder", 0o700))

	one := func(int) string { return "700" }
	asciiGrid(t, "nocrs.asc", 5, 5, 600000, 5200000, 25, one)
	asciiGrid(t, "tiny.asc", 2, 2, 600000, 5200000, 25, one)
	asciiGrid(t, "holes.asc", 5, 5, 600000, 5200000, 25, func(int) string { return "-9999" })
	asciiGrid(t, "degrees.asc", 5, 5, 10, 46, 0.001, one)
	asciiGrid(t, "swapped.asc", 5, 5, 46, 100, 0.001, one)
	asciiGrid(t, "seam.asc", 5, 5, 179.998, 10, 0.001, one)
	asciiGrid(t, "pole.asc", 5, 5, 10, 89.997, 0.001, one)
	asciiGrid(t, "zerocell.asc", 5, 5, 600000, 5200000, 0, one)
	const square, srs = `rasterXSize="4" rasterYSize="4"`, `<SRS>EPSG:32632</SRS>`
	const upright = `<GeoTransform>600000, 25, 0, 5200000, 0, -25</GeoTransform>`
	virtual(t, "turned.vrt", square, srs+`<GeoTransform>600000, 20, 10, 5200000, 10, -20</GeoTransform>`, "", "Float32")
	virtual(t, "placeless.vrt", square, srs, "", "Float32")
	virtual(t, "complex.vrt", square, srs+upright, "", "CFloat32")
	virtual(t, "palette.vrt", square, srs+upright,
		`<ColorInterp>Palette</ColorInterp><ColorTable><Entry c1="1" c2="2" c3="3" c4="255"/></ColorTable>`, "Byte")
	virtual(t, "zerosize.vrt", `rasterXSize="0" rasterYSize="4"`, srs+upright, "", "Float32")
	virtual(t, "minus.vrt", `rasterXSize="-4" rasterYSize="4"`, srs+upright, "", "Float32")

	write("good.yaml", "looks:\n  - {name: a, incidence: 38, azimuth: 78}\n")
	write("broken.yaml", "looks:\n  - name: a\n    incidence: [38\n")
	write("none.yaml", "looks: []\n")
	write("empty.yaml", "")
	write("steep.yaml", "looks:\n  - name: a\n    incidence: 95\n    azimuth: 78\n")
	write("twice.yaml", "looks:\n  - {name: a, incidence: 38, azimuth: 78}\n  - {name: a, incidence: 30, azimuth: 78}\n")
	write("word.csv", "name,incidence,azimuth\na,steep,78\n")
	write("column.csv", "name,incidence,azimut\na,38,78\n")
	write("looks.txt", "incidence=38\n")

	require.NoError(t, os.MkdirAll("taken/a", 0o700))
	write("taken/a/layover.tif", "somebody's work")
	require.NoError(t, os.MkdirAll("blocked/a/shadow.tif", 0o700))
	require.NoError(t, os.MkdirAll("filed", 0o700))
	write("filed/a", "a file where the look's folder should be")
	require.NoError(t, os.MkdirAll("self/a", 0o700))
	require.NoError(t, os.Rename("hill.tif", "self/a/slant-range.tif"))
	require.NoError(t, os.Symlink("self/a/slant-range.tif", "hill.tif"))
	return dir
}

// TestBadInput goes through what can be wrong with the command line, the DEM,
// the looks and the output place. Each case names the exit code and parts of
// the message, and must leave the folder as it found it.
func TestBadInput(t *testing.T) {
	dir := badPlace(t)
	const look = "name=a,incidence=38,azimuth=78"
	// layers is the main job with one more thing said.
	layers := func(dem string, more ...string) []string {
		return append([]string{"layers", dem, "--look", look, "--out", "new"}, more...)
	}
	withLook := func(look string) []string { return []string{"layers", "hill.tif", "--look", look, "--out", "new"} }
	withFile := func(file string) []string { return []string{"layers", "hill.tif", "--looks", file, "--out", "new"} }
	to := func(out string, more ...string) []string {
		return append([]string{"layers", "hill.tif", "--look", look, "--out", out}, more...)
	}
	long := strings.Repeat("x", 300)

	cases := []struct {
		name string
		args []string
		code int
		says []string // parts of the standard error
	}{
		// The DEM.
		{"missing file", layers("nowhere.tif"), exitInput, []string{`"nowhere.tif"`, "no such file"}},
		{"folder", layers("folder"), exitInput, []string{`"folder"`, "is a folder"}},
		{"empty file", layers("empty.tif"), exitInput, []string{`"empty.tif"`, "empty"}},
		{"not a raster", layers("text.tif"), exitInput, []string{`"text.tif"`, "not a raster"}},
		{"archive", layers("archive.zip"), exitInput, []string{`"archive.zip"`, "/vsizip/"}},
		{"cut in the header", layers("head.tif"), exitInput, []string{`"head.tif"`}},
		{"cut in the cells", layers("half.tif"), exitInput, []string{`"half.tif"`}},
		{"no CRS", layers("nocrs.asc"), exitInput, []string{`"nocrs.asc"`, "--crs"}},
		{"unknown CRS code", layers("nocrs.asc", "--crs", "EPSG:999999"), exitInput, []string{"EPSG:999999"}},
		{"no CRS at all", layers("nocrs.asc", "--crs", "mars"), exitInput, []string{"mars"}},
		{"geographic CRS for metres", layers("nocrs.asc", "--crs", "EPSG:4326"), exitInput, []string{`"nocrs.asc"`}},
		{"rotated", layers("turned.vrt"), exitInput, []string{`"turned.vrt"`, "rotated"}},
		{"no place", layers("placeless.vrt"), exitInput, []string{`"placeless.vrt"`, "geotransform"}},
		{"2 x 2 cells", layers("tiny.asc", "--crs", "EPSG:32632"), exitInput, []string{`"tiny.asc"`, "3 x 3"}},
		{"zero columns", layers("zerosize.vrt"), exitInput, []string{`"zerosize.vrt"`}},
		{"negative columns", layers("minus.vrt"), exitInput, []string{`"minus.vrt"`}},
		{"cells of no size", layers("zerocell.asc", "--crs", "EPSG:32632"), exitInput, []string{`"zerocell.asc"`}},
		{"all holes", layers("holes.asc", "--crs", "EPSG:32632"), exitInput, []string{`"holes.asc"`, "nodata"}},
		{"complex", layers("complex.vrt"), exitInput, []string{`"complex.vrt"`, "complex"}},
		{"paletted", layers("palette.vrt"), exitInput, []string{`"palette.vrt"`, "palette"}},
		{"swapped axes", layers("swapped.asc", "--crs", "EPSG:4326"), exitInput, []string{`"swapped.asc"`, "swapped"}},
		{"across the antimeridian", layers("seam.asc", "--crs", "EPSG:4326"), exitInput, []string{`"seam.asc"`, "antimeridian"}},
		{"over the pole", layers("pole.asc", "--crs", "EPSG:4326"), exitInput, []string{`"pole.asc"`}},
		{"band that is not there", layers("hill.tif", "--band", "9"), exitInput, []string{"9"}},
		{"unit that is none", layers("hill.tif", "--vertical-unit", "furlong"), exitInput, []string{"furlong"}},
		{"geoid missing", layers("hill.tif", "--geoid", "nowhere.gtx"), exitInput, []string{`"nowhere.gtx"`, "undulations"}},
		{"geoid that is a DEM", layers("hill.tif", "--geoid", "hill.tif"), exitInput, []string{"no geoid undulation"}},
		{"geoid and offset", layers("hill.tif", "--geoid", "g.gtx", "--height-offset", "3"), exitUsage, []string{"--geoid", "--height-offset"}},
		{"offset NaN", layers("hill.tif", "--height-offset", "NaN"), exitUsage, []string{"--height-offset", "-1000 to 1000 metres"}},
		{"inspect a missing file", []string{"inspect", "nowhere.tif"}, exitInput, []string{"no such file"}},
		{"DEM of no name", layers(""), exitUsage, []string{"DEM is empty"}},

		// The looks.
		{"no look", []string{"layers", "hill.tif", "--out", "new"}, exitUsage, []string{"no look given", "--look"}},
		{"empty look", withLook(""), exitUsage, []string{"--look"}},
		{"incidence 0", withLook("incidence=0,azimuth=78"), exitUsage, []string{"incidence", `"0"`}},
		{"incidence 90", withLook("incidence=90,azimuth=78"), exitUsage, []string{"incidence", `"90"`}},
		{"incidence NaN", withLook("incidence=NaN,azimuth=78"), exitUsage, []string{"incidence", "NaN"}},
		{"incidence negative", withLook("incidence=-38,azimuth=78"), exitUsage, []string{"incidence", "-38"}},
		{"azimuth infinite", withLook("incidence=38,azimuth=Inf"), exitUsage, []string{"azimuth", "Inf"}},
		{"azimuth hexadecimal", withLook("incidence=38,azimuth=0x1p3"), exitUsage, []string{"azimuth", "0x1p3"}},
		{"unknown key", withLook("incidense=38,azimuth=78"), exitUsage, []string{"incidense", "did you mean incidence"}},
		{"no direction", withLook("incidence=38"), exitUsage, []string{"azimuth"}},
		{"two directions", withLook("incidence=38,azimuth=78,heading=347,side=right"), exitUsage, []string{"heading", "azimuth"}},
		{"heading without side", withLook("incidence=38,heading=347"), exitUsage, []string{"side"}},
		{"key twice", withLook("incidence=38,incidence=39,azimuth=78"), exitUsage, []string{"incidence", "twice"}},
		{"name that leaves the folder", withLook("name=../a,incidence=38,azimuth=78"), exitUsage, []string{"../a"}},
		{"two looks of a name", layers("hill.tif", "--look", look), exitUsage, []string{`"a"`}},
		{"tripod off the DEM", withLook("kind=tripod,position=11.3/46.9,antenna=2"), exitInput, []string{"11.3/46.9", "outside the DEM"}},
		{"flight far away", withLook("kind=flight,start=80/10,end=80/11,height=5000,side=left"), exitInput, []string{`"look-1"`, "does not see the DEM", "km"}},
		{"orbit in the wrong place", withLook("kind=orbit,incidence=38,altitude_km=620,inclination=20,pass=ascending,side=left"), exitInput, []string{"inclination 20", "never reaches"}},
		{"ephemeris missing", withLook("kind=ephemeris,oem=nowhere.oem,side=left"), exitInput, []string{"nowhere.oem"}},
		{"inspect from far away", []string{"inspect", "hill.tif", "--look", "kind=flight,start=80/10,end=80/11,height=5000,side=left"}, exitInput, []string{"does not see the DEM", "km"}},
		{"looks without place", []string{"looks", "--look", "incidence=38,azimuth=78"}, exitUsage, []string{"--at LON/LAT"}},
		{"looks at no place", []string{"looks", "--look", "incidence=38,azimuth=78", "--at", "10,46"}, exitUsage, []string{"--at", "slash"}},
		{"looks beyond the pole", []string{"looks", "--look", "incidence=38,azimuth=78", "--at", "10/96"}, exitUsage, []string{"--at", "latitude -90 to 90"}},
		{"looks beside the DEM", []string{"looks", "--look", "incidence=38,azimuth=78", "--dem", "hill.tif", "--at", "30/46"}, exitUsage, []string{"--at 30/46", "outside the DEM"}},
		{"looks file missing", withFile("nowhere.yaml"), exitInput, []string{`"nowhere.yaml"`}},
		{"looks file of no format", withFile("looks.txt"), exitInput, []string{`"looks.txt"`, ".yaml"}},
		{"looks file broken", withFile("broken.yaml"), exitInput, []string{`"broken.yaml"`, "line"}},
		{"looks file without looks", withFile("none.yaml"), exitInput, []string{`"none.yaml"`}},
		{"looks file empty", withFile("empty.yaml"), exitInput, []string{`"empty.yaml"`}},
		{"incidence 95 in a file", withFile("steep.yaml"), exitInput, []string{`"steep.yaml"`, "line 3", "95"}},
		{"name twice in a file", withFile("twice.yaml"), exitInput, []string{`"twice.yaml"`, "line 3"}},
		{"word for a number in a file", withFile("word.csv"), exitInput, []string{`"word.csv"`, "line 2", "steep"}},
		{"unknown column in a file", withFile("column.csv"), exitInput, []string{`"column.csv"`, "azimut", "did you mean azimuth"}},

		// The flags.
		{"unknown command", []string{"layer", "hill.tif"}, exitUsage, []string{`"layer"`, "did you mean layers?"}},
		{"unknown flag", layers("hill.tif", "--overwrit"), exitUsage, []string{"--overwrit", "did you mean --overwrite?"}},
		{"no DEM", []string{"layers", "--look", look, "--out", "new"}, exitUsage, []string{"DEM is missing"}},
		{"two DEMs", layers("hill.tif", "other.tif"), exitUsage, []string{`"other.tif"`}},
		{"no --out", []string{"layers", "hill.tif", "--look", look}, exitUsage, []string{"--out"}},
		{"--out without value", []string{"layers", "hill.tif", "--look", look, "--out"}, exitUsage, []string{"--out", "needs a value"}},
		{"unknown layer", layers("hill.tif", "--only", "layover,shadw"), exitUsage, []string{`"shadw"`, "did you mean shadow?"}},
		{"empty layer", layers("hill.tif", "--only", "layover,"), exitUsage, []string{"--only"}},
		{"layer that lacks a key", layers("hill.tif", "--only", "ground-resolution"), exitUsage, []string{"ground-resolution", `"a"`, "bandwidth_mhz"}},
		{"ceiling NaN", layers("hill.tif", "--ceiling", "NaN"), exitUsage, []string{"--ceiling", "NaN", "metres"}},
		{"ceiling infinite", layers("hill.tif", "--ceiling", "+Inf"), exitUsage, []string{"--ceiling", "Inf"}},
		{"ceiling hexadecimal", layers("hill.tif", "--ceiling", "0x10"), exitUsage, []string{"--ceiling", "0x10"}},
		{"ceiling too high", layers("hill.tif", "--ceiling", "20000"), exitUsage, []string{"--ceiling", "-500 to 9000 metres"}},
		{"hole height of words", layers("hill.tif", "--hole-height", "low"), exitUsage, []string{"--hole-height", "low"}},
		{"edge of no kind", layers("hill.tif", "--edge", "closed"), exitUsage, []string{"--edge", "unknown or open"}},
		{"compressed above 1", layers("hill.tif", "--compressed-below", "1.5"), exitUsage, []string{"--compressed-below", "0 to 1"}},
		{"memory without unit", layers("hill.tif", "--memory", "1000"), exitUsage, []string{"--memory", "unit"}},
		{"memory too small", layers("hill.tif", "--memory", "10MiB"), exitUsage, []string{"--memory", "384MiB"}},
		{"memory NaN", layers("hill.tif", "--memory", "NaNGiB"), exitUsage, []string{"--memory", "NaN"}},
		{"no threads", layers("hill.tif", "--threads", "0"), exitUsage, []string{"--threads", "1 to 1024"}},
		{"negative threads", layers("hill.tif", "--threads", "-2"), exitUsage, []string{"--threads", "1 to 1024"}},
		{"band 0", layers("hill.tif", "--band", "0"), exitUsage, []string{"--band", "1 to 65535"}},
		{"half a band", layers("hill.tif", "--band", "1.5"), exitUsage, []string{"--band", "whole"}},
		{"area of three", layers("hill.tif", "--area", "1,2,3"), exitUsage, []string{"--area", "four"}},
		{"area NaN", layers("hill.tif", "--area", "NaN,2,3,4"), exitUsage, []string{"--area", "value 1"}},
		{"area turned round", layers("hill.tif", "--area", "601000,5199500,600500,5199900"), exitUsage, []string{"--area", "empty"}},
		{"area elsewhere", layers("hill.tif", "--area", "700000,5199000,700500,5199500"), exitUsage, []string{"--area", "does not overlap", "600000"}},
		{"area in degrees", layers("hill.tif", "--area", "10.3,46.9,10.4,47"), exitUsage, []string{"--area", "longitude and latitude"}},
		{"area in metres", layers("degrees.asc", "--crs", "EPSG:4326", "--area", "600100,5199200,600900,5199900"), exitUsage, []string{"--area", "metres"}},
		{"area swapped", layers("hill.tif", "--area", "5199200,600100,5199900,600900"), exitUsage, []string{"--area", "swapped"}},
		{"area between centres", layers("hill.tif", "--area", "600026,5199951,600030,5199960"), exitUsage, []string{"--area", "centre"}},
		{"switch with a word", layers("hill.tif", "--json=perhaps"), exitUsage, []string{"--json", "perhaps"}},
		{"man without folder", []string{"man"}, exitUsage, []string{"--out"}},
		{"help of nothing", []string{"help", "nothing"}, exitUsage, []string{`"nothing"`}},

		// The output place.
		{"below a file", to("text.tif/new"), exitOutput, []string{"text.tif"}},
		{"a file", to("text.tif"), exitOutput, []string{`"text.tif"`, "is a file"}},
		{"below a folder that is not there", to("some/where"), exitOutput, []string{`"some"`, "does not exist"}},
		{"below a device", to("/dev/null/new"), exitOutput, []string{"/dev/null"}},
		{"name too long", to(long), exitOutput, []string{"too long"}},
		{"layer exists", to("taken"), exitOutput, []string{"taken/a/layover.tif", "--overwrite"}},
		{"layer is a folder", to("blocked", "--overwrite"), exitOutput, []string{"blocked/a/shadow.tif", "is a folder"}},
		{"look is a file", to("filed", "--overwrite"), exitOutput, []string{"filed/a"}},
		{"output is the input", to("self", "--overwrite"), exitOutput, []string{"self/a/slant-range.tif", "input"}},
		{"manual below a file", []string{"man", "--out", "text.tif/man"}, exitOutput, []string{"text.tif/man"}},
		{"demo below a file", []string{"demo", "--out", "text.tif/demo"}, exitOutput, []string{"text.tif"}},
	}
	require.Greater(t, len(cases), 40)
	before := listing(t, dir)
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			got := call(t.Context(), c.args...)
			assert.Equal(t, c.code, got.code, got.errOut)
			assert.Empty(t, got.out, "a refusal prints no result")
			checkMessage(t, got.errOut, c.says)
			assert.Equal(t, before, listing(t, dir), "something was left behind")
		})
	}
}

// checkMessage holds an error to its form: one line, at most one hint after
// it, warnings before it only.
func checkMessage(t *testing.T, text string, says []string) {
	t.Helper()
	lines := strings.Split(strings.TrimSuffix(text, "\n"), "\n")
	for len(lines) > 1 && strings.HasPrefix(lines[0], "warning: ") {
		lines = lines[1:]
	}
	assert.Regexp(t, `^foldshade: [^\n]+$`, lines[0])
	assert.NotRegexp(t, `\.$|^foldshade: [A-Z][a-z]+ `, lines[0], "lower case, without a full stop")
	if len(lines) > 1 {
		assert.Len(t, lines, 2)
		assert.Regexp(t, `^hint: \S`, lines[1])
	}
	for _, part := range says {
		assert.Contains(t, text, part)
	}
}

// TestStandardOutputFull: a full disk behind a redirection is not success.
func TestStandardOutputFull(t *testing.T) {
	full, err := os.OpenFile("/dev/full", os.O_WRONLY, 0)
	require.NoError(t, err)
	defer func() { _ = full.Close() }()
	for _, args := range [][]string{{"version"}, {"version", "--json"}, {"layers", "--help"}, {"inspect", mountain}, {"completion", "bash"}} {
		var errOut strings.Builder
		code := run(t.Context(), args, strings.NewReader(""), full, &errOut)
		assert.Equal(t, exitOutput, code, args)
		assert.Contains(t, errOut.String(), "no space left on device")
	}
}

// TestDiskFull: a file that cannot grow stands for a disk that is full. The
// limit is raised step by step, so that the failure meets the scratch files,
// the rasters and the catalogue entry.
func TestDiskFull(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 300, 400)
	before := listing(t, dir)
	for _, limit := range []int{0, 1000, 100_000, 250_000} {
		cmd := program(t, dir, "layers", name, "--look", "name=a,incidence=38,azimuth=78", "--out", "new")
		cmd.Env = append(cmd.Env, fmt.Sprintf("%s=%d", fileSizeLimit, limit))
		out, err := cmd.CombinedOutput()
		var exit *exec.ExitError
		require.ErrorAs(t, err, &exit, "limit %d: %s", limit, out)
		assert.Equal(t, exitOutput, exit.ExitCode(), "limit %d: %s", limit, out)
		assert.Contains(t, string(out), "foldshade: output ")
		assert.Equal(t, before, listing(t, dir), "limit %d", limit)
	}
}

// TestInterrupted: the first Ctrl-C ends the work, leaves nothing, and says so
// by the exit code.
func TestInterrupted(t *testing.T) {
	dir := t.TempDir()
	mountainPath, err := filepath.Abs(mountain)
	require.NoError(t, err)
	var looks strings.Builder
	looks.WriteString("incidence,azimuth\n")
	for i := range 400 {
		fmt.Fprintf(&looks, "%d,%d\n", 25+i%40, i%360)
	}
	require.NoError(t, os.WriteFile(filepath.Join(dir, "looks.csv"), []byte(looks.String()), 0o600))
	require.NoError(t, os.Mkdir(filepath.Join(dir, "old"), 0o700))
	before := listing(t, dir)
	for _, stop := range []os.Signal{os.Interrupt, syscall.SIGTERM} {
		for _, out := range []string{"new", "old"} {
			cmd := program(t, dir, "layers", mountainPath, "--looks", "looks.csv", "--only", "verdict", "--out", out)
			var errOut strings.Builder
			cmd.Stderr = &errOut
			require.NoError(t, cmd.Start())
			t.Cleanup(func() { _ = cmd.Process.Kill() }) // when the test fails half-way
			waitForScratch(t, filepath.Join(dir, out))
			require.NoError(t, cmd.Process.Signal(stop))
			err := cmd.Wait()
			var exit *exec.ExitError
			require.ErrorAs(t, err, &exit, errOut.String())
			assert.Equal(t, exitInterrupted, exit.ExitCode(), errOut.String())
			assert.Contains(t, errOut.String(), "foldshade: interrupted")
			assert.Equal(t, before, listing(t, dir), "%v, %s", stop, out)
		}
	}
}

// waitForScratch waits until a run has begun to write below a folder.
func waitForScratch(t *testing.T, dir string) {
	t.Helper()
	for range 6000 {
		if found, err := filepath.Glob(filepath.Join(dir, ".foldshade-*", "0301.raw")); err == nil && len(found) > 0 {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	require.Fail(t, "the run never began to write")
}

// TestCalledOff: a context that ends leaves nothing either, in every stage
// that a run goes through.
func TestCalledOff(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 60, 80)
	before := listing(t, dir)
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	for _, args := range [][]string{
		{"layers", name, "--look", "incidence=38,azimuth=78", "--out", filepath.Join(dir, "new")},
		{"inspect", name},
		{"demo", "--out", filepath.Join(dir, "demo")},
	} {
		got := call(ctx, args...)
		assert.Equal(t, exitInterrupted, got.code, args)
		assert.Empty(t, got.out)
		assert.Equal(t, before, listing(t, dir), args)
	}
}
