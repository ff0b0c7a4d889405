package demo

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"sync"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/cmd/internal/lookfile"
	"foldshade/geometry"
)

var made = sync.OnceValues(func() (*Valley, error) { return New(Seed) })

func valley(t *testing.T) *Valley {
	t.Helper()
	v, err := made()
	require.NoError(t, err)
	return v
}

// decimetres is the SHA-256 sum of the heights as whole decimetres.
func decimetres(v *Valley) string {
	hash := sha256.New()
	for _, h := range v.Heights {
		var b [4]byte
		binary.LittleEndian.PutUint32(b[:], uint32(int32(math.Round(10*float64(h)))))
		hash.Write(b[:])
	}
	return hex.EncodeToString(hash.Sum(nil))
}

func TestSameValleyEverywhere(t *testing.T) {
	v := valley(t)
	// Not a truth, a seal: change it together with the terrain, and look at
	// the pictures in docs when it changes.
	const sealed = "7dbf0384dc1f36d87430ab510ad6736abc4c9b9953a96e6e48bb81f07f8ab2e7"
	assert.Equal(t, sealed, decimetres(v))
	for i, h := range v.Heights {
		require.InDelta(t, math.Round(10*float64(h)), 10*float64(h), 1e-3, "cell %d is no multiple of 0.1 m", i)
	}
}

// On arm64 the compiler fuses a product and a sum into one rounding wherever
// the source allows it. The heights must not contain one.
func TestNothingFuses(t *testing.T) {
	cmd := exec.Command("go", "build", "-gcflags=-S", ".")
	cmd.Env = append(cmd.Environ(), "GOOS=linux", "GOARCH=arm64", "CGO_ENABLED=0")
	listing, err := cmd.CombinedOutput()
	require.NoError(t, err, string(listing))
	require.Contains(t, string(listing), "FMULD", "the listing shows arm64 arithmetic")
	fused := regexp.MustCompile(`\((\S+/([a-z]+\.go):\d+)\).*\bFN?M(ADD|SUB)[SD]`)
	for _, m := range fused.FindAllStringSubmatch(string(listing), -1) {
		// Coordinates of the sites are rounded text, no part of the terrain.
		assert.Equal(t, "sites.go", m[2], "fused at %s", m[1])
	}
}

func TestRelief(t *testing.T) {
	v := valley(t)
	require.Len(t, v.Heights, v.Rows*v.Cols)
	low, high := slices.Min(v.Heights), slices.Max(v.Heights)
	assert.InDelta(t, 1950, high-low, 150, "relief in metres")
	slopes := make([]float64, 0, len(v.Heights))
	for row := 1; row < v.Rows-1; row++ {
		for col := 1; col < v.Cols-1; col++ {
			slopes = append(slopes, slope(v, row, col))
		}
	}
	slices.Sort(slopes)
	part := func(p float64) float64 { return slopes[int(p*float64(len(slopes)-1))] }
	// Alpine ground: half of it near the angle of repose, little of it cliff,
	// some of it flat. Loose rock rests at 30 to 40 degrees (common practice).
	assert.InDelta(t, 33, part(0.5), 5, "median slope, degrees")
	assert.Less(t, part(0.02), 5.0, "flattest fiftieth, degrees")
	assert.Less(t, part(0.98), 60.0, "steepest fiftieth, degrees")
}

// slope is the steepest slope of a cell from central differences, degrees.
func slope(v *Valley, row, col int) float64 {
	z := func(r, c int) float64 { return float64(v.Heights[r*v.Cols+c]) }
	east := (z(row, col+1) - z(row, col-1)) / (2 * v.Transform[1])
	north := (z(row-1, col) - z(row+1, col)) / (2 * -v.Transform[5])
	return math.Atan(math.Hypot(east, north)) * 180 / math.Pi
}

// around lists the slopes within so many cells of a site.
func around(v *Valley, s Site, cells int) []float64 {
	row, col := cell(v, s)
	var all []float64
	for r := row - cells; r <= row+cells; r++ {
		for c := col - cells; c <= col+cells; c++ {
			all = append(all, slope(v, r, c))
		}
	}
	slices.Sort(all)
	return all
}

func cell(v *Valley, s Site) (row, col int) {
	return int((s.Y - v.Transform[3]) / v.Transform[5]), int((s.X - v.Transform[0]) / v.Transform[1])
}

func TestSites(t *testing.T) {
	v := valley(t)
	sites := map[string]Site{}
	names := map[string]bool{}
	for _, s := range v.Sites {
		row, col := cell(v, s)
		assert.True(t, row >= 8 && row < v.Rows-8 && col >= 8 && col < v.Cols-8, "%s at row %d, column %d", s.Name, row, col)
		assert.False(t, names[s.Name], "%s twice", s.Name)
		assert.NotEmpty(t, s.Note)
		names[s.Name], sites[s.Kind] = true, s
	}
	require.Len(t, sites, 5)
	height := func(kind string) float64 {
		row, col := cell(v, sites[kind])
		return float64(v.Heights[row*v.Cols+col])
	}
	town := around(v, sites["town"], 4)
	assert.Less(t, town[len(town)*9/10], 15.0, "the town stands on gentle ground")
	gorge := around(v, sites["gorge"], 5)
	assert.Greater(t, gorge[len(gorge)-6], 60.0, "walls on the gorge's both sides")
	ice := around(v, sites["glacier"], 5)
	assert.Less(t, ice[len(ice)-1]-ice[0], 20.0, "the glacier is smooth")
	slide := around(v, sites["landslide"], 12)
	assert.Greater(t, slide[len(slide)-1], 40.0, "the landslide has a scarp")
	assert.Greater(t, height("pass"), height("glacier"))
	assert.Greater(t, height("glacier"), height("town")+400)
	assert.Greater(t, height("landslide"), height("town")+200)
}

func TestGeoJSON(t *testing.T) {
	v := valley(t)
	var c struct {
		Type     string
		Features []struct {
			Type       string
			Properties map[string]string
			Geometry   struct {
				Type        string
				Coordinates [2]float64
			}
		}
	}
	require.NoError(t, json.Unmarshal([]byte(v.GeoJSON()), &c))
	assert.Equal(t, "FeatureCollection", c.Type)
	require.Len(t, c.Features, len(v.Sites))
	for k, f := range c.Features {
		assert.Equal(t, "Feature", f.Type)
		assert.Equal(t, "Point", f.Geometry.Type)
		assert.Equal(t, v.Sites[k].Name, f.Properties["name"])
		assert.InDelta(t, -40.08, f.Geometry.Coordinates[0], 0.08)
		assert.InDelta(t, 47.02, f.Geometry.Coordinates[1], 0.04)
	}
}

// Expected values: gdaltransform -s_srs EPSG:32624 -t_srs EPSG:4326, GDAL
// 3.6.2 with PROJ 9.1.
func TestLonLat(t *testing.T) {
	for _, row := range []struct{ x, y, lon, lat float64 }{
		{412000, 5212000, -40.1587144626878, 47.0556523864224},
		{423200, 5203600, -40.0098408581454, 46.9814718095518},
	} {
		lon, lat := lonLat(row.x, row.y)
		const millimetre = 1e-8 // degrees: a little more than one; what is left out is n^4, 0.4 mm
		assert.InDelta(t, row.lon, lon, millimetre)
		assert.InDelta(t, row.lat, lat, millimetre)
	}
}

func TestOtherSeeds(t *testing.T) {
	v, err := New(7)
	assert.ErrorContains(t, err, "seed 7: ", "its glacier lies outside the frame")
	assert.Nil(t, v)
	v, err = New(8)
	require.NoError(t, err)
	assert.NotEqual(t, decimetres(valley(t)), decimetres(v))
	for i, h := range v.Heights {
		require.True(t, h > 0 && h < 5000, "height %g at cell %d", h, i)
	}
}

func TestLooks(t *testing.T) {
	path := filepath.Join(t.TempDir(), "looks.yaml")
	require.NoError(t, os.WriteFile(path, []byte(Looks), 0o644))
	looks, err := lookfile.Read(path)
	require.NoError(t, err)
	require.Len(t, looks, 3)
	for k, want := range []struct{ incidence, azimuth float64 }{{39, 79}, {34, 281}, {61, 148}} {
		assert.Equal(t, geometry.Fixed, looks[k].Kind)
		assert.InDelta(t, want.incidence, looks[k].Incidence.Degrees(), 1e-9, looks[k].Name)
		assert.InDelta(t, want.azimuth, looks[k].Azimuth.Degrees(), 1e-9, looks[k].Name)
	}
}
