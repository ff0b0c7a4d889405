package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"encoding/xml"
	"fmt"
	"image/png"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem/raster"
	"foldshade/geometry"
)

func TestSpread(t *testing.T) {
	for text, want := range map[string][]float64{
		"30": {30}, "20:22:1": {20, 21, 22}, "20:23:2": {20, 22}, "1:1:5": {1}, "10:11:0.25": {10, 10.25, 10.5, 10.75, 11},
		"0.1:0.7:0.1": {0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7}, // 0.7 is not 0.1 + 6 * 0.1 in binary
	} {
		var got []geometry.Angle
		require.NoError(t, (&spread{value: &got, lo: 0, hi: 89}).Set(text), text)
		require.Len(t, got, len(want), text)
		for i := range want {
			assert.InDelta(t, want[i], got[i].Degrees(), 1e-9, text)
		}
	}
	for text, why := range map[string]string{
		"20:10:1": "before it begins", "20:30:0": "more than 0", "20:30:-1": "more than 0", "0.5:30:1": "out of range",
		"20:90:1": "out of range", "20:30": "2 parts", "": "not a plain decimal", "a:b:c": "not a plain decimal",
		"20:30:1:2": "4 parts", "NaN": "not a plain decimal", "1:89:0.00001": "at most",
	} {
		var got []geometry.Angle
		err := (&spread{value: &got, lo: 1, hi: 89}).Set(text)
		require.Error(t, err, text)
		assert.Contains(t, err.Error(), why, text)
		assert.Nil(t, got, "a refused value changes nothing: %s", text)
	}
	var got []geometry.Angle
	assert.Error(t, (&spread{value: &got, lo: 0, hi: 360, below: true}).Set("0:360:15"), "360 is 0 again")
}

// sweepAt runs a sweep of a small hill.
func sweepAt(t *testing.T, extra ...string) (result, string) {
	t.Helper()
	dir := t.TempDir()
	out := filepath.Join(dir, "space")
	args := append([]string{"sweep", hill(t, dir, 40, 50), "--out", out, "--edge", "open",
		"--azimuths", "0:270:90", "--incidences", "20:60:20"}, extra...)
	return call(context.Background(), args...), out
}

func TestSweepOutputs(t *testing.T) {
	got, out := sweepAt(t, "--rasters", "--json", "--look", "name=mine,incidence=35,azimuth=80", "--look", "name=other,incidence=35,azimuth=280")
	require.Equal(t, exitDone, got.code, got.errOut)
	var s jsonSweep
	require.NoError(t, json.Unmarshal([]byte(got.out), &s))
	assert.Equal(t, int64(40*50), s.Cells)
	require.Len(t, s.Looks, 12)
	rows := readCSV(t, filepath.Join(out, sweepTable))
	require.Len(t, rows, 13)
	assert.Equal(t, append([]string{"azimuth", "incidence"}, shareColumns...), rows[0])
	for i, l := range s.Looks {
		sum := 0.0
		for k, name := range shareColumns {
			assert.Equal(t, fmt.Sprintf("%.6f", l.Share[name]), rows[i+1][2+k])
			sum += l.Share[name]
		}
		assert.InDelta(t, 1, sum, 5e-6)
	}
	require.NotNil(t, s.Candidates)
	assert.Equal(t, "mine", s.Candidates.Looks[0].Name)
	require.NotEmpty(t, s.Coverage)
	assert.Len(t, s.Coverage[0].Looks, 1)
	require.NotEmpty(t, s.TwoDirections)
	assert.Len(t, s.TwoDirections[0].Looks, 2)
	assert.Len(t, readCSV(t, filepath.Join(out, sweepLooks)), 3)
	for name, path := range s.Files {
		assert.FileExists(t, path, name)
	}
	assert.Len(t, s.Files, 7)
	f, err := os.Open(filepath.Join(out, sweepPNG))
	require.NoError(t, err)
	defer f.Close()
	_, err = png.Decode(f)
	require.NoError(t, err)
	svg, err := os.ReadFile(filepath.Join(out, sweepSVG))
	require.NoError(t, err)
	for d := xml.NewDecoder(strings.NewReader(string(svg))); ; {
		if _, err := d.Token(); err == io.EOF {
			break
		} else {
			require.NoError(t, err)
		}
	}
	src, err := raster.Open(filepath.Join(out, "open-count.tif"), raster.Options{})
	require.NoError(t, err)
	defer src.Close()
	counts := make([]float32, 40*50)
	require.NoError(t, src.Read(src.Grid().Whole(), counts))
	open := 0.0
	for _, n := range counts {
		open += float64(n)
	}
	want := 0.0
	for _, l := range s.Looks {
		want += l.Share["open"] * float64(s.Cells)
	}
	assert.InDelta(t, want, open, 0.1, "the raster's sum is that of the table")
}

func readCSV(t *testing.T, path string) [][]string {
	t.Helper()
	f, err := os.Open(path)
	require.NoError(t, err)
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	require.NoError(t, err)
	return rows
}

// TestSweepTable: what people read, and a set large enough to be sought in the
// scratch file.
func TestSweepTable(t *testing.T) {
	got, out := sweepAt(t, "--best", "4", "--azimuths", "0:345:15", "--incidences", "20:50:5")
	require.Equal(t, exitDone, got.code, got.errOut)
	assert.Contains(t, got.out, "24 azimuths x 7 incidences over 2000 cells")
	assert.Contains(t, got.out, "open in at least one")
	assert.Contains(t, got.out, "east and up from two")
	entries, err := os.ReadDir(out)
	require.NoError(t, err)
	assert.Len(t, entries, 3, "no scratch file is left")
}

func TestSweepArea(t *testing.T) {
	dir := t.TempDir()
	polygon := filepath.Join(dir, "area.csv")
	require.NoError(t, os.WriteFile(polygon, []byte("id,WKT\n1,\"POLYGON((600100 5199900,600400 5199900,600400 5199400,600100 5199400,600100 5199900))\"\n"), 0o600))
	for area, cells := range map[string]int64{
		"600100,5199400,600400,5199900": 12 * 20,
		polygon:                         12 * 20,
	} {
		got, _ := sweepAt(t, "--area", area, "--json")
		require.Equal(t, exitDone, got.code, got.errOut)
		var s jsonSweep
		require.NoError(t, json.Unmarshal([]byte(got.out), &s))
		assert.Equal(t, cells, s.Cells, area)
	}
}

func TestSweepRefuses(t *testing.T) {
	dir := t.TempDir()
	empty := filepath.Join(dir, "empty.yaml")
	require.NoError(t, os.WriteFile(empty, []byte("looks: []\n"), 0o600))
	for name, c := range map[string]struct {
		args []string
		code int
		want string
	}{
		"falling range":     {[]string{"--incidences", "20:10:1"}, exitUsage, "before it begins"},
		"step 0":            {[]string{"--incidences", "20:30:0"}, exitUsage, "more than 0"},
		"incidence 0":       {[]string{"--incidences", "0:30:1"}, exitUsage, "1 to 89"},
		"incidence 90":      {[]string{"--incidences", "30:90:1"}, exitUsage, "1 to 89"},
		"azimuth 360":       {[]string{"--azimuths", "0:360:15"}, exitUsage, "to below 360"},
		"too many":          {[]string{"--azimuths", "0:359:1", "--incidences", "20:50:1"}, exitUsage, "larger steps"},
		"area off the DEM":  {[]string{"--area", "1,1,2,2"}, exitUsage, "does not overlap"},
		"area of no centre": {[]string{"--area", "600101,5199901,600103,5199903"}, exitUsage, "centre of no cell"},
		"area of 3 numbers": {[]string{"--area", "1,2,3"}, exitUsage, "--area"},
		"area file":         {[]string{"--area", filepath.Join(dir, "none.gpkg")}, exitInput, "no such file"},
		"empty looks":       {[]string{"--looks", empty}, exitInput, "look"},
		"no looks file":     {[]string{"--looks", filepath.Join(dir, "none.yaml")}, exitInput, "none.yaml"},
		"best 0":            {[]string{"--best", "0"}, exitUsage, "1 to 8"},
		"condition below 1": {[]string{"--condition", "0.5"}, exitUsage, "1 to 100"},
	} {
		got, out := sweepAt(t, c.args...)
		assert.Equal(t, c.code, got.code, "%s: %s", name, got.errOut)
		assert.Contains(t, got.errOut, c.want, name)
		assert.NoDirExists(t, out, name)
	}
	got := call(context.Background(), "sweep", hill(t, dir, 10, 10))
	assert.Equal(t, exitUsage, got.code)
	assert.Contains(t, got.errOut, "--out DIR is missing")
}

func TestSweepInterrupted(t *testing.T) {
	dir := t.TempDir()
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	out := filepath.Join(dir, "space")
	got := call(ctx, "sweep", hill(t, dir, 40, 50), "--out", out, "--best", "4")
	assert.Equal(t, exitInterrupted, got.code)
	assert.NoDirExists(t, out)
}
