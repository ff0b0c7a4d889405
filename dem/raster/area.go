package raster

import (
	"errors"
	"fmt"
	"os"
	"strings"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Area is a part of a grid: the smallest window that holds it, and which of its
// cells belong to it, row-major.
type Area struct {
	Window dem.Window
	Inside []bool
	Cells  int64
	Files  []string // what was read
}

// areaBand is the most cells that GDAL burns at once, a byte each.
const areaBand = 1 << 24

// ReadArea reads the polygons of a vector file, of any format GDAL reads, as an
// area of a grid: the cells whose centres lie in one of them. A layer without a
// coordinate reference system is taken to be in the grid's. Every failure is an
// *InputError.
func ReadArea(name string, grid *dem.Grid) (*Area, error) {
	register()
	log := &messages{}
	ds, err := openArea(name, log)
	if err != nil {
		return nil, err
	}
	defer func() { _ = ds.Close(godal.ErrLogger(log.handle)) }() // opened for reading only
	layers, err := polygonLayers(name, ds, log)
	if err != nil {
		return nil, err
	}
	a := &Area{Files: []string{name}}
	rows := max(areaBand/grid.Cols, 1)
	for row := 0; row < grid.Rows; row += rows {
		w := dem.Window{Row: row, Rows: min(rows, grid.Rows-row), Cols: grid.Cols}
		burnt, err := burn(ds, layers, grid, w, log)
		if err != nil {
			return nil, refuseArea(name, err, "its polygons cannot be laid over the DEM (GDAL: %s); reproject it with ogr2ogr", said(name, err))
		}
		a.add(w, burnt)
	}
	if a.Cells == 0 {
		return nil, refuseArea(name, nil, "holds the centre of no cell of the DEM; check that it lies on the DEM, and its coordinate reference system, with ogrinfo")
	}
	return a, nil
}

func refuseArea(name string, cause error, format string, args ...any) error {
	return &InputError{fmt.Sprintf("area %q: ", name) + fmt.Sprintf(format, args...), cause}
}

// openArea opens the file and rewrites GDAL's refusal.
func openArea(name string, log *messages) (*godal.Dataset, error) {
	ds, err := godal.Open(name, godal.VectorOnly(), godal.ErrLogger(log.handle))
	if err == nil {
		return ds, nil
	}
	info, statErr := os.Stat(name)
	switch plain := !strings.HasPrefix(name, "/vsi"); {
	case plain && errors.Is(statErr, os.ErrNotExist):
		return nil, refuseArea(name, err, "no such file; give a box minx,miny,maxx,maxy or the path of a file of polygons")
	case statErr == nil && info.IsDir():
		return nil, refuseArea(name, err, "is a folder without vector files; name the file of polygons")
	case plain && statErr == nil && unreadable(name):
		return nil, refuseArea(name, err, "permission denied; ask for read access to it")
	}
	return nil, refuseArea(name, err, "not a vector file that GDAL reads (%s); give polygons in a format such as GeoPackage, GeoJSON or Shapefile", said(name, err))
}

// polygonLayers returns the names of the layers with polygons. Points and lines
// have no inside.
func polygonLayers(name string, ds *godal.Dataset, log *messages) ([]string, error) {
	var names []string
	features := 0
	for _, l := range ds.Layers() {
		polygons := 0
		l.ResetReading()
		for f := l.NextFeature(); f != nil; f = l.NextFeature() {
			features++
			if g := f.Geometry(); g != nil && !g.Empty() && g.Area() > 0 {
				polygons++
			}
			f.Close()
		}
		if polygons > 0 {
			names = append(names, l.Name())
		}
	}
	if len(names) == 0 {
		return nil, refuseArea(name, nil, "holds no polygon among %d features; an area is one or more polygons", features)
	}
	return names, nil
}

// burn lays the layers over a window of the grid: 1 where a cell's centre is
// inside a polygon.
func burn(ds *godal.Dataset, layers []string, grid *dem.Grid, w dem.Window, log *messages) ([]byte, error) {
	handler := godal.ErrLogger(log.handle)
	into, err := godal.Create(godal.Memory, "", 1, godal.Byte, w.Cols, w.Rows, handler)
	if err != nil {
		return nil, err
	}
	defer func() { _ = into.Close(handler) }() // in memory only
	t := grid.Transform
	t[0] += float64(w.Col)*t[1] + float64(w.Row)*t[2]
	t[3] += float64(w.Col)*t[4] + float64(w.Row)*t[5]
	if err := into.SetGeoTransform(t, handler); err != nil {
		return nil, err
	}
	sr, err := godal.NewSpatialRef(horizontalText(grid), handler)
	if err != nil {
		return nil, err
	}
	defer sr.Close()
	if err := into.SetSpatialRef(sr); err != nil {
		return nil, err
	}
	// Only what has an inside: GDAL would burn points and lines too.
	for _, l := range layers {
		where := "OGR_GEOM_AREA > 0"
		if err := into.RasterizeInto(ds, []string{"-burn", "1", "-l", l, "-where", where}, handler); err != nil {
			return nil, err
		}
	}
	out := make([]byte, w.Rows*w.Cols)
	if err := into.Read(0, 0, out, w.Cols, w.Rows, handler); err != nil {
		return nil, err
	}
	return out, nil
}

// horizontalText is the CRS of a grid without its vertical part, as WKT.
func horizontalText(grid *dem.Grid) string {
	root, err := parseWKT(grid.CRS)
	if err != nil {
		return grid.CRS
	}
	ref := &reference{}
	ref.part(root)
	return ref.horizontal.text
}

// add takes the burnt cells of a band of full rows.
func (a *Area) add(w dem.Window, burnt []byte) {
	r0, r1, c0, c1 := w.Rows, -1, w.Cols, -1
	for i, b := range burnt {
		if b != 0 {
			r, c := i/w.Cols, i%w.Cols
			r0, r1, c0, c1 = min(r0, r), max(r1, r), min(c0, c), max(c1, c)
			a.Cells++
		}
	}
	if r1 < 0 {
		return
	}
	old := *a
	top, left, bottom, right := w.Row+r0, c0, w.Row+r1+1, c1+1
	if o := old.Window; o.Rows > 0 {
		top, left, bottom, right = min(top, o.Row), min(left, o.Col), max(bottom, o.Row+o.Rows), max(right, o.Col+o.Cols)
	}
	a.Window = dem.Window{Row: top, Col: left, Rows: bottom - top, Cols: right - left}
	a.Inside = make([]bool, a.Window.Rows*a.Window.Cols)
	for r := range old.Window.Rows {
		copy(a.Inside[(old.Window.Row+r-top)*a.Window.Cols+old.Window.Col-left:],
			old.Inside[r*old.Window.Cols:(r+1)*old.Window.Cols])
	}
	for r := r0; r <= r1; r++ {
		row := a.Inside[(w.Row+r-top)*a.Window.Cols:]
		for c := c0; c <= c1; c++ {
			if burnt[r*w.Cols+c] != 0 {
				row[c-left] = true
			}
		}
	}
}
