package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io/fs"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"

	"github.com/spf13/cobra"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/cmd/internal/lookfile"
	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// Variables that make the test binary be the program itself, for what can
// only be seen from outside a process.
const (
	actAsProgram  = "FOLDSHADE_TEST_MAIN"
	fileSizeLimit = "FOLDSHADE_TEST_FSIZE" // bytes
)

func TestMain(m *testing.M) {
	if os.Getenv(actAsProgram) != "" {
		if n, err := strconv.ParseUint(os.Getenv(fileSizeLimit), 10, 64); err == nil {
			if err := syscall.Setrlimit(syscall.RLIMIT_FSIZE, &syscall.Rlimit{Cur: n, Max: n}); err != nil {
				panic(err)
			}
		}
		main()
	}
	os.Exit(m.Run())
}

// program returns the program as a process of its own.
func program(t *testing.T, dir string, args ...string) *exec.Cmd {
	t.Helper()
	self, err := os.Executable()
	require.NoError(t, err)
	cmd := exec.Command(self, args...)
	cmd.Dir = dir
	cmd.Env = append(os.Environ(), actAsProgram+"=1")
	return cmd
}

// result is what a run left.
type result struct {
	code        int
	out, errOut string
}

// call runs the program in this process.
func call(ctx context.Context, args ...string) result {
	var out, errOut bytes.Buffer
	code := run(ctx, args, strings.NewReader(""), &out, &errOut)
	return result{code, out.String(), errOut.String()}
}

// mountain is the real DEM.
const mountain = "../../testdata/sthelens_30m_utm10_nad27.tif"

// hill writes a raster of rows x cols cells of 25 m in UTM zone 32 north: a
// round hill 300 m high in the middle of a plain at 500 m. It returns its path.
func hill(t testing.TB, dir string, rows, cols int) string {
	t.Helper()
	grid := &dem.Grid{Rows: rows, Cols: cols, Transform: [6]float64{600000, 25, 0, 5200000, 0, -25}, CRS: "EPSG:32632"}
	heights := make([]float32, rows*cols)
	for i := range heights {
		r, c := float64(i/cols-rows/2), float64(i%cols-cols/2)
		heights[i] = float32(500 + 300*math.Exp(-(r*r+c*c)/(0.02*float64(rows*cols))))
	}
	set, err := raster.NewSet(dir, true, nil)
	require.NoError(t, err)
	w, err := set.Writer("", raster.Layer{Name: "hill", Unit: "m"}, grid, grid.Whole())
	require.NoError(t, err)
	require.NoError(t, w.WriteFloats(grid.Whole(), 0, heights))
	require.NoError(t, set.Commit())
	return filepath.Join(dir, "hill.tif")
}

// listing returns every file and folder below a folder with its size.
func listing(t *testing.T, dir string) map[string]int64 {
	t.Helper()
	found := map[string]int64{}
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		info, err := d.Info()
		if err != nil {
			return err
		}
		size := info.Size()
		if d.IsDir() {
			size = -1 // a folder's own size may grow for good
		}
		rel, err := filepath.Rel(dir, path)
		found[rel] = size
		return err
	})
	require.NoError(t, err)
	return found
}

// TestLayersWritesEverything runs the main job on a small hill and looks at
// all that it leaves: the files, the table, the JSON.
func TestLayersWritesEverything(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 60, 80)
	out := filepath.Join(dir, "layers")
	args := []string{"layers", name, "--look", "name=a,incidence=38,azimuth=78", "--look", "name=b,incidence=30,heading=200,side=right", "--out", out}
	got := call(t.Context(), append(args, "--json")...)
	require.Equal(t, exitDone, got.code, got.errOut)

	var looks []map[string]any
	require.NoError(t, json.Unmarshal([]byte(got.out), &looks))
	require.Len(t, looks, 2)
	for i, want := range []string{"a", "b"} {
		l := looks[i]
		assert.Equal(t, want, l["look"])
		assert.Equal(t, "fixed", l["kind"])
		files := l["files"].(map[string]any)
		assert.Len(t, files, 5)
		for layer, file := range files {
			assert.Equal(t, filepath.Join(out, want, layer+".tif"), file)
			assert.FileExists(t, file.(string))
		}
		assert.FileExists(t, l["item"].(string))
		sum := 0.0
		for _, n := range l["cells"].(map[string]any) {
			sum += n.(float64)
		}
		assert.Equal(t, 60.0*80, sum, "every cell is counted once")
		shares := 0.0
		for _, s := range l["share"].(map[string]any) {
			shares += s.(float64)
		}
		assert.InDelta(t, 1, shares, 1e-12)
		// 60 x 80 cells of 25 x 25 m on the map. UTM's scale 100 km east of the
		// central meridian is 0.9996 (1 + (100 km)^2 / (2 (6378 km)^2)) =
		// 0.99972, so the ground is larger by its square (Snyder 1987, eq. 8-9).
		const scale = 0.99972
		assert.InEpsilon(t, 60*80*25*25/1e6/(scale*scale), l["area_km2"].(map[string]any)["total"].(float64), 1e-4)
	}

	got = call(t.Context(), append(args, "--overwrite")...)
	require.Equal(t, exitDone, got.code, got.errOut)
	assert.Contains(t, got.out, "undetermined")
	assert.Contains(t, got.out, "12 files in "+out)
	for file := range listing(t, dir) {
		assert.NotContains(t, file, ".foldshade", "a hidden folder was left")
	}
}

// TestRastersExplainThemselves reads the outputs with GDAL's own program: the
// command, the look, units, palette and storage are in the files, and the
// catalogue entry says the same.
func TestRastersExplainThemselves(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 60, 80)
	out := filepath.Join(dir, "my layers")
	const look = "name=b,incidence=30.5,heading=200,side=right,slant_range_km=820,frequency_ghz=5.4,bandwidth_mhz=60"
	got := call(t.Context(), "layers", name, "--look", look, "--out", out, "--only", "all", "--ceiling", "900")
	require.Equal(t, exitDone, got.code, got.errOut)
	type band struct {
		Type          string
		NoDataValue   any
		Unit          string
		Offset, Scale float64
		ColorTable    struct{ Entries [][4]int }
	}
	type info struct {
		Size     [2]int
		Metadata map[string]map[string]string
		Bands    []band
	}
	for _, l := range mask.Layers {
		file := filepath.Join(out, "b", string(l.Layer)+".tif")
		if len(mask.Lacks(l.Layer, oneLook(t, look))) > 0 {
			assert.NoFileExists(t, file, "the look gives no baseline")
			continue
		}
		text, err := exec.Command("gdalinfo", "-json", file).Output()
		require.NoError(t, err, file)
		var i info
		require.NoError(t, json.Unmarshal(text, &i))
		items := i.Metadata[""]
		assert.Equal(t, "COG", i.Metadata["IMAGE_STRUCTURE"]["LAYOUT"])
		assert.Equal(t, [2]int{80, 60}, i.Size)
		assert.Contains(t, items["command"], "foldshade layers "+name+" --look name=b,")
		assert.Contains(t, items["command"], "--out '"+out+"'")
		assert.Equal(t, "900 m", items["ceiling"])
		assert.Contains(t, items["look"], "incidence=30.5")
		assert.Equal(t, l.Title, items["title"])
		require.Len(t, i.Bands, len(l.Bands))
		for _, b := range i.Bands {
			assert.Equal(t, l.Unit, b.Unit)
			if !l.IsClass {
				continue
			}
			assert.Equal(t, "Byte", b.Type)
			assert.Equal(t, 0.0, b.NoDataValue)
			for _, c := range mask.Classes[1:] {
				e := b.ColorTable.Entries[c.Code]
				assert.Equal(t, c.Color, fmt.Sprintf("#%02x%02x%02x", e[0], e[1], e[2]))
			}
		}
	}
	text, err := os.ReadFile(filepath.Join(out, "b", itemName))
	require.NoError(t, err)
	var item struct {
		ID         string
		Properties map[string]any
		Assets     map[string]struct{ Roles []string }
	}
	require.NoError(t, json.Unmarshal(text, &item))
	assert.Equal(t, "b", item.ID)
	// Right-looking azimuth = heading + 90; fields of the view and sar
	// extensions, gigahertz and degrees.
	for key, want := range map[string]any{
		"view:incidence_angle": 30.5, "view:azimuth": 290.0, "sar:center_frequency": 5.4, "sar:bandwidth": 0.06,
		"sar:observation_direction": "right",
	} {
		assert.Equal(t, want, item.Properties[key], key)
	}
	assert.Equal(t, []string{"data", "local-incidence-angle"}, item.Assets["local-incidence"].Roles)
	assert.Len(t, item.Assets, len(mask.Layers)-1)
}

// oneLook reads the text of a --look flag.
func oneLook(t *testing.T, text string) geometry.Look {
	t.Helper()
	look, err := lookfile.Flag(text)
	require.NoError(t, err)
	return look
}

// TestAreaIsAWindow: a box gives the same cells that the whole grid has there,
// and the summary counts them alone.
func TestAreaIsAWindow(t *testing.T) {
	dir := t.TempDir()
	name := hill(t, dir, 60, 80)
	got := call(t.Context(), "layers", name, "--look", "incidence=38,azimuth=78", "--out", filepath.Join(dir, "part"),
		"--area", "600250,5199000,600750,5199500", "--json")
	require.Equal(t, exitDone, got.code, got.errOut)
	var looks []lookSummary
	require.NoError(t, json.Unmarshal([]byte(got.out), &looks))
	cells := int64(0)
	for _, n := range looks[0].Cells {
		cells += n
	}
	assert.Equal(t, int64(20*20), cells, "500 m of 25 m cells each way")
	src, err := raster.Open(filepath.Join(dir, "part", "look-1", "slant-range.tif"), raster.Options{})
	require.NoError(t, err)
	defer func() { _ = src.Close() }()
	assert.Equal(t, 20, src.Grid().Rows)
	x, y := src.Grid().XY(-0.5, -0.5)
	assert.Equal(t, [2]float64{600250, 5199500}, [2]float64{x, y})
}

// TestRepeats: neither threads nor memory change a byte of a raster.
func TestRepeats(t *testing.T) {
	dir := t.TempDir()
	var first map[string][]byte
	for i, extra := range [][]string{nil, {"--threads", "1"}, {"--threads", "3", "--memory", "384MiB"}} {
		out := filepath.Join(dir, fmt.Sprint("run", i))
		args := append([]string{"layers", mountain, "--look", "incidence=41,azimuth=112", "--only", "verdict,clearance", "--out", out}, extra...)
		got := call(t.Context(), args...)
		require.Equal(t, exitDone, got.code, got.errOut)
		cells := readCells(t, filepath.Join(out, "look-1"), "verdict.tif", "clearance.tif")
		if first == nil {
			first = cells
		}
		for name := range first {
			assert.True(t, bytes.Equal(first[name], cells[name]), "%s of %v", name, extra)
		}
	}
}

// readCells returns the stored cells of rasters, through GDAL's own translator:
// the files themselves differ in the command that they name.
func readCells(t *testing.T, dir string, names ...string) map[string][]byte {
	t.Helper()
	all := map[string][]byte{}
	for _, name := range names {
		to := filepath.Join(t.TempDir(), "cells.bin")
		out, err := exec.Command("gdal_translate", "-q", "-of", "ENVI", filepath.Join(dir, name), to).CombinedOutput()
		require.NoError(t, err, string(out))
		all[name], err = os.ReadFile(to)
		require.NoError(t, err)
	}
	return all
}

// TestHelpShowsEveryFlag: every flag is filed under a heading of the help and
// stands in it with a text, and every command ends its help by an example.
func TestHelpShowsEveryFlag(t *testing.T) {
	root := newRoot(nil)
	checked := 0
	for _, cmd := range root.Commands() {
		if !cmd.IsAvailableCommand() || cmd.Name() == "completion" {
			continue
		}
		t.Run(cmd.Name(), func(t *testing.T) {
			help := call(t.Context(), cmd.Name(), "--help")
			require.Equal(t, exitDone, help.code)
			assert.Contains(t, help.out, "\nExample:\n  foldshade "+cmd.Name())
			for _, f := range flagsOf(cmd, "") {
				assert.Equal(t, "help", f.Name, "flag under no heading")
			}
			for _, group := range groups {
				for _, f := range flagsOf(cmd, group) {
					checked++
					_, section, found := strings.Cut(help.out, "\n"+group+":\n")
					require.True(t, found, group)
					section, _, _ = strings.Cut(section, "\n\n")
					first, _, _ := strings.Cut(f.Usage, "\n")
					assert.Regexp(t, `(?m)^  --`+f.Name+` .*`, section)
					assert.Contains(t, section, first)
					if kind := f.Value.Type(); kind == "number" || kind == "size" {
						assert.Regexp(t, `\d+\S* to \d`, strings.ReplaceAll(f.Usage, "\n", " "), "--%s: the range", f.Name)
					}
				}
			}
		})
	}
	assert.Greater(t, checked, 20)
}

// TestHelpExamplesRun runs what the help of every command shows, the program's
// own examples first: they make the valley that the others use.
func TestHelpExamplesRun(t *testing.T) {
	t.Chdir(t.TempDir())
	ran := map[string]bool{}
	root := newRoot(nil)
	for _, cmd := range append([]*cobra.Command{root}, root.Commands()...) {
		if cmd.Name() == "completion" {
			continue
		}
		for line := range strings.Lines(strings.ReplaceAll(cmd.Example, "\\\n", " ")) {
			line, _, _ = strings.Cut(line, "&&") // man itself is not ours
			words := strings.Fields(line)
			line = strings.Join(words, " ")
			require.NotEmpty(t, words)
			require.Equal(t, "foldshade", words[0], line)
			if ran[line] {
				continue
			}
			ran[line] = true
			got := call(t.Context(), words[1:]...)
			assert.Equal(t, exitDone, got.code, "%s: %s", line, got.errOut)
			require.NoError(t, os.RemoveAll("east")) // the next example uses the name again
		}
	}
	assert.GreaterOrEqual(t, len(ran), 7)
}

// TestDemo: the demo leaves all that it names, and a second one is refused.
func TestDemo(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "demo")
	got := call(t.Context(), "demo", "--out", dir)
	require.Equal(t, exitDone, got.code, got.errOut)
	for _, name := range []string{demoDEM, demoLooks, demoSites, demoPicture, demoResults, demoSheet} {
		assert.FileExists(t, filepath.Join(dir, name))
	}
	made, err := lookfile.Read(filepath.Join(dir, demoLooks))
	require.NoError(t, err)
	require.NotEmpty(t, made)
	// The demo's layers are those that the same command gives.
	again := filepath.Join(t.TempDir(), "again")
	run := call(t.Context(), "layers", filepath.Join(dir, demoDEM), "--looks", filepath.Join(dir, demoLooks), "--out", again)
	require.Equal(t, exitDone, run.code, run.errOut)
	for _, look := range made {
		assert.FileExists(t, filepath.Join(dir, demoLayers, look.Name, itemName))
		ours := readCells(t, filepath.Join(dir, demoLayers, look.Name), "layover.tif", "slant-range.tif")
		for name, cells := range readCells(t, filepath.Join(again, look.Name), "layover.tif", "slant-range.tif") {
			assert.True(t, bytes.Equal(ours[name], cells), "%s of %s", name, look.Name)
		}
	}
	before := listing(t, dir)
	got = call(t.Context(), "demo", "--out", dir)
	assert.Equal(t, exitOutput, got.code)
	assert.Contains(t, got.errOut, "already exists")
	assert.Equal(t, before, listing(t, dir))
}

// TestVersion: the versions are those that the libraries' own programs print.
func TestVersion(t *testing.T) {
	got := call(t.Context(), "version", "--json")
	require.Equal(t, exitDone, got.code)
	var v map[string]string
	require.NoError(t, json.Unmarshal([]byte(got.out), &v))
	out, err := exec.Command("gdalinfo", "--version").Output()
	require.NoError(t, err)
	assert.Contains(t, string(out), "GDAL "+v["gdal"]+",")
	assert.Regexp(t, `^\d+\.\d+\.\d+$`, v["proj"])
	assert.Contains(t, call(t.Context(), "--version").out, v["gdal"])
}

// TestManAndCompletion: every command has a page, and shells a script.
func TestManAndCompletion(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "man")
	require.Equal(t, exitDone, call(t.Context(), "man", "--out", dir).code)
	for _, page := range []string{"foldshade", "foldshade-layers", "foldshade-inspect", "foldshade-demo", "foldshade-version", "foldshade-man"} {
		content, err := os.ReadFile(filepath.Join(dir, page+".1"))
		require.NoError(t, err)
		assert.Contains(t, string(content), ".TH ")
	}
	for _, shell := range []string{"bash", "fish", "zsh", "powershell"} {
		got := call(t.Context(), "completion", shell)
		assert.Equal(t, exitDone, got.code)
		assert.Contains(t, got.out, "foldshade")
	}
}

// TestInspect checks facts and reach against the file's own description
// (testdata/README.md: 327 x 468 cells of 30 m, 682 to 2543 m).
func TestInspect(t *testing.T) {
	got := call(t.Context(), "inspect", mountain, "--look", "incidence=45,azimuth=78", "--json")
	require.Equal(t, exitDone, got.code, got.errOut)
	var p inspection
	require.NoError(t, json.Unmarshal([]byte(got.out), &p))
	assert.Equal(t, [2]int{468, 327}, [2]int{p.DEM.Rows, p.DEM.Cols})
	assert.Equal(t, heights{682, 2543, 148885, 4151}, p.Heights)
	// At 45 degrees tan and cot are 1: both reaches are the relief.
	require.Len(t, p.Reach, 1)
	assert.InDelta(t, 2543-682, *p.Reach[0].Shadow, 1e-3)
	assert.InDelta(t, 2543-682, *p.Reach[0].Layover, 1e-3)
	assert.NotEmpty(t, p.Warnings)

	got = call(t.Context(), "inspect", mountain)
	require.Equal(t, exitDone, got.code)
	assert.Contains(t, got.out, "468 rows x 327 columns")
	assert.Contains(t, got.errOut, "warning: ")
}
