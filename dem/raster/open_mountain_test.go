package raster

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

const mountain = "../../testdata/sthelens_30m_utm10_nad27.tif"

// TestMountain checks the real DEM against what its file declares and gdalinfo
// 3.6.2 prints of it: 327 columns, 468 rows, 682 to 2543 m, 97.29 % valid,
// nodata -32767, EPSG:26710, pixel-is-point, the corners of the extent.
func TestMountain(t *testing.T) {
	d, err := Open(mountain, Options{})
	require.NoError(t, err)
	defer func() { require.NoError(t, d.Close()) }()
	r, err := d.Survey(context.Background())
	require.NoError(t, err)
	assert.Equal(t, 682.0, r.Min)
	assert.Equal(t, 2543.0, r.Max)
	assert.Equal(t, int64(327*468), r.Valid+r.Missing)
	assert.InDelta(t, 97.29, 100*float64(r.Valid)/(327*468), 0.005) // two decimals given
	f := d.Facts()
	assert.Equal(t, "GTiff", f.Driver)
	assert.Equal(t, []string{filepath.Clean(mountain)}, f.Files)
	assert.Equal(t, [2]int{468, 327}, [2]int{f.Rows, f.Cols})
	assert.Equal(t, [2]int{256, 256}, f.Block)
	assert.Equal(t, "EPSG:26710", f.CRSCode)
	assert.Equal(t, "point", f.PixelIs)
	assert.Equal(t, "band", f.VerticalUnitSource)
	assert.Equal(t, "nodata", f.Mask)
	assert.Equal(t, Number(-32767), *f.Nodata)
	assert.True(t, f.Held)
	// gdalinfo prints the corners on NAD27. The shift to WGS84 there is about
	// -4.6" in longitude and -0.6" in latitude (NADCON, from memory: within a
	// second), so 1.5" bounds the difference after it.
	const second = 1.0 / 3600
	corners := [][2]float64{{-(122 + 15*60*second + 0.36*second), 46 + 15*60*second + 4.05*second},
		{-(122 + 7*60*second + 22.25*second), 46 + 15*60*second + 0.79*second},
		{-(122 + 15*60*second + 6.53*second), 46 + 7*60*second + 29.19*second},
		{-(122 + 7*60*second + 29.48*second), 46 + 7*60*second + 25.94*second}}
	for i, c := range corners {
		assert.InDelta(t, c[0]-4.6*second, f.Corners[i].Lon, 1.5*second, "corner %d", i)
		assert.InDelta(t, c[1]-0.6*second, f.Corners[i].Lat, 1.5*second, "corner %d", i)
	}
	// Scale factor of the transverse Mercator 62,710 m from the central
	// meridian, Snyder 1987 eq. 8-7: k = 0.9996 (1 + x^2/(2 R^2)); a map metre
	// is 1/k ground metres. R within 0.3 % of 6,378 km moves k by 3e-7; the
	// ellipsoid of NAD27 differs from WGS84's by 1e-4 in flattening, which
	// moves ground metres by as much as that.
	k := 0.9996 * (1 + math.Pow(562710.0-500000, 2)/(2*math.Pow(6378e3, 2)))
	assert.InEpsilon(t, 30/k, f.Centre.ColM, 1e-4)
	assert.InEpsilon(t, 30/k, f.Centre.RowM, 1e-4)
	// Convergence on the sphere, tan(c) = tan(dlon) sin(lat), Snyder 1987 eq.
	// 8-9; the ellipsoid changes the angle by less than a part in 300.
	dlon, lat := (f.Centre.Lon+123)*math.Pi/180, f.Centre.Lat*math.Pi/180
	assert.InEpsilon(t, math.Atan(math.Tan(dlon)*math.Sin(lat))*180/math.Pi, f.Centre.Convergence, 1.0/300)
	// What the file does not say is what its heights refer to.
	require.Len(t, d.Warnings(), 1)
	assert.Contains(t, d.Warnings()[0], "vertical reference")
}
