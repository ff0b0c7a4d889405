package main

import (
	"context"
	"path/filepath"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// TestTripodAgainstViewshed compares what a tripod radar does not see with GDAL's
// viewshed (GDALViewshedGenerate, GDAL 3.6, no refraction) on the real mountain,
// in all directions. GDAL looks along lines of cells and takes the higher of its
// interpolated neighbours, foldshade along exact lines on the bilinear surface:
// the two differ where a line of sight grazes the ground, beside the borders of
// shadows, and now and then farther where GDAL's interpolated horizon has
// carried its error along: 0.4 to 0.6 % of the cells, nearly all of them within
// two cells of a border.
func TestTripodAgainstViewshed(t *testing.T) {
	d, err := raster.Open("../../testdata/sthelens_30m_utm10_nad27.tif", raster.Options{})
	require.NoError(t, err)
	defer d.Close()
	g := d.Grid()
	const edge = 16
	inner := dem.Window{Row: edge, Col: edge, Rows: g.Rows - 2*edge, Cols: g.Cols - 2*edge}
	z := make([]float32, inner.Rows*inner.Cols)
	require.NoError(t, d.Read(inner, z))
	transform := g.Transform
	transform[0], transform[3] = transform[0]+edge*transform[1], transform[3]+edge*transform[5]
	godal.RegisterAll()
	ds, err := godal.Create(godal.Memory, "", 1, godal.Float32, inner.Cols, inner.Rows)
	require.NoError(t, err)
	defer ds.Close()
	require.NoError(t, ds.SetGeoTransform(transform))
	require.NoError(t, ds.Write(0, 0, z, inner.Cols, inner.Rows))
	rng, err := d.Survey(context.Background())
	require.NoError(t, err)
	for _, at := range [][2]int{{200, 140}, {100, 80}, {330, 230}} {
		const antenna = 25
		x, y := g.XY(float64(edge+at[0]), float64(edge+at[1]))
		out, err := ds.Bands()[0].Viewshed(filepath.Join(t.TempDir(), "seen.tif"), x, y, antenna,
			godal.VisibilityVals(255, 0), godal.CurveCoeff(1), godal.CellMode(godal.MEdge), godal.NoDataVal(-1))
		require.NoError(t, err)
		visible := make([]byte, len(z))
		require.NoError(t, out.Read(0, 0, visible, inner.Cols, inner.Rows))
		require.NoError(t, out.Close())

		local := g.At(float64(edge+at[0]), float64(edge+at[1]))
		look := geometry.NewLook()
		look.Name, look.Kind, look.Antenna = "t", geometry.Tripod, antenna
		look.Position = geometry.Place{Lon: local.Lon, Lat: local.Lat}
		options := mask.DefaultOptions()
		options.OpenEdge, options.HoleHeight = true, rng.Min
		hidden := make([]bool, len(z))
		_, err = mask.Run(context.Background(), mask.Job{
			Source: d, Range: rng, Looks: []geometry.Look{look}, Layers: []mask.Layer{mask.ShadowLayer}, Window: inner, Options: options,
			Emit: func(_ int, tile *mask.Tile) error {
				for i, c := range tile.Classes[mask.ShadowLayer] {
					r, c0 := tile.Window.Row-edge+i/tile.Window.Cols, tile.Window.Col-edge+i%tile.Window.Cols
					hidden[r*inner.Cols+c0] = mask.Class(c).Kind() == 4
				}
				return nil
			},
		})
		require.NoError(t, err)
		differ, far := 0, 0
		for i := range z {
			if hidden[i] == (visible[i] == 0) {
				continue
			}
			differ++
			if !besideBorder(hidden, i, inner, 2) {
				far++
			}
		}
		share := float64(differ) / float64(len(z))
		t.Logf("radar at %v: %.2f %% of %d cells differ, %d of them more than two cells from the shadow's border", at, 100*share, len(z), far)
		assert.Less(t, share, 0.05)
		assert.Less(t, float64(far), 0.005*float64(len(z)))
	}
}

// besideBorder reports whether a cell within reach of cell i is hidden when i is
// not, or the other way round.
func besideBorder(hidden []bool, i int, w dem.Window, reach int) bool {
	row, col := i/w.Cols, i%w.Cols
	for r := max(row-reach, 0); r <= min(row+reach, w.Rows-1); r++ {
		for c := max(col-reach, 0); c <= min(col+reach, w.Cols-1); c++ {
			if hidden[r*w.Cols+c] != hidden[i] {
				return true
			}
		}
	}
	return false
}
