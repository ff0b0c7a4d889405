package raster

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/require"
)

// fixture is a raster to be made for a test. Stored values come from value, or
// from ramp.
type fixture struct {
	rows, cols int // 5 x 7 when zero
	dtype      godal.DataType
	crs        string
	transform  [6]float64
	nodata     *float64
	scale      float64
	offset     float64
	value      func(row, col int) float64
	mask       func(row, col int) byte // of the data set
	alpha      func(row, col int) byte // the last band
	bands      int
	colours    []godal.ColorInterp
	table      bool // a colour table on band 1
	metadata   map[string]string
	options    []string
}

// utm32 is a grid of 30 m cells around 9 E 46 N, UTM zone 32 north.
var utm32 = [6]float64{500000, 30, 0, 5100000, 0, -30}

// ramp gives every cell another height, exact in all number types.
func ramp(row, col int) float64 { return float64(100 + 10*row + col) }

func ptr(v float64) *float64 { return &v }

// write makes a GeoTIFF and returns its path.
func (f fixture) write(t *testing.T, name string) string {
	t.Helper()
	register()
	if f.rows == 0 {
		f.rows, f.cols = 5, 7
	}
	if f.dtype == godal.Unknown {
		f.dtype = godal.Float32
	}
	if f.value == nil {
		f.value = ramp
	}
	f.bands = max(f.bands, 1)
	path := filepath.Join(t.TempDir(), name)
	ds, err := godal.Create(godal.GTiff, path, f.bands, f.dtype, f.cols, f.rows, godal.CreationOption(f.options...))
	require.NoError(t, err)
	if f.transform != [6]float64{} {
		require.NoError(t, ds.SetGeoTransform(f.transform))
	}
	if f.crs != "" {
		require.NoError(t, ds.SetProjection(f.crs))
	}
	if f.nodata != nil {
		require.NoError(t, ds.SetNoData(*f.nodata))
	}
	if f.scale != 0 {
		require.NoError(t, ds.SetScaleOffset(f.scale, f.offset))
	}
	for k, v := range f.metadata {
		require.NoError(t, ds.SetMetadata(k, v))
	}
	for i, c := range f.colours {
		require.NoError(t, ds.Bands()[i].SetColorInterp(c))
	}
	if f.table {
		require.NoError(t, ds.Bands()[0].SetColorTable(godal.ColorTable{PaletteInterp: godal.RGBPalette, Entries: [][4]int16{{0, 0, 0, 255}, {9, 9, 9, 255}}}))
	}
	f.fill(t, ds)
	require.NoError(t, ds.Close())
	return path
}

// fill writes the values, a hundred more in every further band, and the mask.
func (f fixture) fill(t *testing.T, ds *godal.Dataset) {
	t.Helper()
	row := make([]float64, f.cols)
	for i, b := range ds.Bands() {
		for r := range f.rows {
			for c := range row {
				row[c] = f.value(r, c) + float64(100*i)
				if f.alpha != nil && i == f.bands-1 {
					row[c] = float64(f.alpha(r, c))
				}
			}
			if f.dtype >= godal.CInt16 {
				continue // complex values stay zero
			}
			require.NoError(t, b.Write(0, r, row, f.cols, 1))
		}
	}
	if f.mask == nil {
		return
	}
	m, err := ds.CreateMaskBand(2, godal.ConfigOption("GDAL_TIFF_INTERNAL_MASK=YES"))
	require.NoError(t, err)
	bytes := make([]byte, f.cols)
	for r := range f.rows {
		for c := range bytes {
			bytes[c] = f.mask(r, c)
		}
		require.NoError(t, m.Write(0, r, bytes, f.cols, 1))
	}
}

// vrt wraps band 1 of a raster in a virtual raster with extra band elements,
// such as <UnitType>ft</UnitType>.
func vrt(t *testing.T, source string, rows, cols int, crs string, transform [6]float64, extra string) string {
	t.Helper()
	g := transform
	text := fmt.Sprintf(`<VRTDataset rasterXSize="%d" rasterYSize="%d">
<SRS>%s</SRS>
<GeoTransform>%.17g, %.17g, %.17g, %.17g, %.17g, %.17g</GeoTransform>
<VRTRasterBand dataType="Float32" band="1">%s
<SimpleSource><SourceFilename relativeToVRT="0">%s</SourceFilename><SourceBand>1</SourceBand></SimpleSource>
</VRTRasterBand></VRTDataset>`, cols, rows, crs, g[0], g[1], g[2], g[3], g[4], g[5], extra, source)
	path := filepath.Join(t.TempDir(), "wrap.vrt")
	require.NoError(t, os.WriteFile(path, []byte(text), 0o644))
	return path
}

// heights reads the whole DEM.
func heights(t *testing.T, d *DEM) []float32 {
	t.Helper()
	out := make([]float32, d.grid.Rows*d.grid.Cols)
	require.NoError(t, d.Read(d.grid.Whole(), out))
	return out
}

// requireHeights compares the DEM with want(row, col), NaN meaning no height.
func requireHeights(t *testing.T, d *DEM, tolerance float64, want func(row, col int) float64) {
	t.Helper()
	for i, got := range heights(t, d) {
		row, col := i/d.grid.Cols, i%d.grid.Cols
		w := want(row, col)
		if math.IsNaN(w) != math.IsNaN(float64(got)) || math.Abs(w-float64(got)) > tolerance {
			t.Fatalf("row %d, column %d: got %v, want %v", row, col, got, w)
		}
	}
}
