package raster

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// areaGrid is 60 x 80 cells of 25 m in UTM zone 32 north.
func areaGrid() *dem.Grid {
	return &dem.Grid{Rows: 60, Cols: 80, Transform: [6]float64{600000, 25, 0, 5200000, 0, -25}, CRS: "EPSG:32632"}
}

func writeArea(t *testing.T, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, os.WriteFile(path, []byte(text), 0o600))
	return path
}

// polygonCSV writes rings, map units, as a CSV that GDAL reads as polygons
// without a CRS.
func polygonCSV(rings ...[][2]float64) string {
	var parts []string
	for _, ring := range rings {
		var points []string
		for _, p := range append(ring, ring[0]) {
			points = append(points, fmt.Sprintf("%v %v", p[0], p[1]))
		}
		parts = append(parts, "("+strings.Join(points, ",")+")")
	}
	return "id,WKT\n1,\"POLYGON(" + strings.Join(parts, ",") + ")\"\n"
}

// inside is the rule of crossings: an odd number of edges lie east of a place.
func inside(rings [][][2]float64, x, y float64) bool {
	odd := false
	for _, ring := range rings {
		for i, a := range ring {
			b := ring[(i+1)%len(ring)]
			if (a[1] > y) != (b[1] > y) && x < a[0]+(y-a[1])/(b[1]-a[1])*(b[0]-a[0]) {
				odd = !odd
			}
		}
	}
	return odd
}

// TestReadAreaByCentres: a polygon with a hole, corner by corner against the
// rule of crossings at the cells' centres.
func TestReadAreaByCentres(t *testing.T) {
	g := areaGrid()
	rings := [][][2]float64{
		{{600113, 5199903}, {601404, 5199747}, {601111, 5198701}, {600731, 5199222}, {600207, 5198803}},
		{{600801, 5199702}, {600903, 5199401}, {600497, 5199499}},
	}
	a, err := ReadArea(writeArea(t, "area.csv", polygonCSV(rings...)), g)
	require.NoError(t, err)
	w := a.Window
	cells := int64(0)
	for row := range g.Rows {
		for col := range g.Cols {
			x, y := g.XY(float64(row), float64(col))
			want := inside(rings, x, y)
			if want {
				cells++
			}
			in := row >= w.Row && row < w.Row+w.Rows && col >= w.Col && col < w.Col+w.Cols
			got := in && a.Inside[(row-w.Row)*w.Cols+col-w.Col]
			require.Equal(t, want, got, "row %d, column %d", row, col)
		}
	}
	assert.Equal(t, cells, a.Cells)
}

// TestReadAreaOtherCRS: a square in longitude and latitude. By gdaltransform
// (PROJ), EPSG:4326 to EPSG:32632, its south-west corner is at 600320.3 E,
// 5198917.4 N, its north-east corner at 600695.3 E, 5199257.1 N.
func TestReadAreaOtherCRS(t *testing.T) {
	square := `{"type":"Feature","properties":{},"geometry":{"type":"Polygon","coordinates":[[[%s],[%s],[%s],[%s],[%s]]]}}`
	corner := func(lon, lat float64) string { return fmt.Sprintf("%.9f,%.9f", lon, lat) }
	a := corner(10.318, 46.9362)
	text := fmt.Sprintf(square, a, corner(10.323, 46.9362), corner(10.323, 46.9392), corner(10.318, 46.9392), a)
	area, err := ReadArea(writeArea(t, "area.geojson", text), areaGrid())
	require.NoError(t, err)
	// 0.005 degrees of longitude are 380.6 m at 46.94 N, 0.003 of latitude 333.5
	// m: 126932 m2 or 203.1 cells of 625 m2; the outline of 1428 m may gain or
	// lose half a cell's width along a part of it.
	assert.InDelta(t, 203, float64(area.Cells), 8)
	// The sides lean against the grid by the convergence, 0.97 degrees: 6 m.
	w := area.Window
	assert.InDelta(t, (600320.3-600000)/25, w.Col, 1.3)
	assert.InDelta(t, (600695.3-600000)/25, w.Col+w.Cols, 1.3)
	assert.InDelta(t, (5200000-5199257.1)/25, w.Row, 1.3)
	assert.InDelta(t, (5200000-5198917.4)/25, w.Row+w.Rows, 1.3)
}

func TestReadAreaRefuses(t *testing.T) {
	g := areaGrid()
	dir := t.TempDir()
	for name, c := range map[string]struct{ path, want string }{
		"missing":   {filepath.Join(dir, "no.gpkg"), "no such file"},
		"no vector": {writeArea(t, "a.txt", "hello"), "not a vector file"},
		"points":    {writeArea(t, "a.csv", "id,WKT\n1,POINT (600100 5199900)\n"), "holds no polygon among 1 features"},
		"outside":   {writeArea(t, "b.csv", polygonCSV([][2]float64{{1, 1}, {2, 1}, {2, 2}})), "holds the centre of no cell"},
		"too small": {writeArea(t, "c.csv", polygonCSV([][2]float64{{600101, 5199901}, {600105, 5199901}, {600105, 5199905}})), "holds the centre of no cell"},
	} {
		_, err := ReadArea(c.path, g)
		var input *InputError
		require.ErrorAs(t, err, &input, name)
		assert.Contains(t, err.Error(), c.want, name)
		assert.NotContains(t, err.Error(), "\n", name)
	}
}
