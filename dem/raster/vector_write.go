package raster

import (
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Column is an attribute of a VectorLayer. Its values are string, int64,
// float64 or bool by the sample; NaN and nil are written as null.
type Column struct {
	Name   string
	Sample any // a value of the column's type
}

// VectorLayer is a layer of a GeoPackage: one geometry and one value a column
// for every row.
type VectorLayer struct {
	Name    string
	Lines   bool // lines, else points
	Columns []Column
	// Row returns the positions of row i, in map units of the grid's CRS, and
	// its values: one position for points, two or more for lines. No position
	// means no geometry.
	Row  func(i int) (at [][2]float64, values []any)
	Rows int
}

// VectorFile is a GeoPackage of a Set whose name is claimed.
type VectorFile struct {
	set              *Set
	rel, path, final string
}

// VectorFile claims the name of a GeoPackage, relative to the output folder
// with forward slashes.
func (s *Set) VectorFile(rel string) (*VectorFile, error) {
	temp, err := s.claim(rel)
	if err != nil {
		return nil, err
	}
	final := filepath.Join(s.dir, filepath.FromSlash(rel))
	for _, side := range []string{"-wal", "-journal"} {
		if info, err := os.Stat(final + side); err == nil && info.Size() > 0 {
			return nil, &OutputError{Path: final, Text: fmt.Sprintf("seems to be open in another program, since %q stands beside it; close it there or choose another name", filepath.Base(final)+side)}
		}
	}
	return &VectorFile{s, rel, temp, final}, nil
}

// Write writes the layers in the CRS of a grid, once. The file is complete when
// Write returns, and gets its name when the set is committed. It panics when a
// row has another number of values than there are columns.
func (f *VectorFile) Write(grid *dem.Grid, layers []VectorLayer) error {
	if err := writeGeoPackage(f.path, grid, layers); err != nil {
		return failed(f.final, "write", err)
	}
	file, err := os.OpenFile(f.path, os.O_RDWR, 0)
	if err != nil {
		return failed(f.final, "write", err)
	}
	if err := errors.Join(file.Sync(), file.Close()); err != nil {
		return failed(f.final, "write", err)
	}
	f.set.mu.Lock()
	f.set.files = append(f.set.files, &File{rel: f.rel, path: f.path, final: f.final, closed: true})
	f.set.mu.Unlock()
	return nil
}

func writeGeoPackage(path string, grid *dem.Grid, layers []VectorLayer) (err error) {
	register()
	log := godal.ErrLogger(strictly)
	ds, err := godal.CreateVector("GPKG", path, log)
	if err != nil {
		return err
	}
	defer func() {
		if closing := ds.Close(log); err == nil {
			err = closing
		}
	}()
	sr, err := horizontalCRS(grid)
	if err != nil {
		return err
	}
	defer sr.Close()
	for _, l := range layers {
		if err := writeLayer(ds, sr, l); err != nil {
			return err
		}
	}
	return nil
}

func fieldType(sample any) godal.FieldType {
	switch sample.(type) {
	case int64:
		return godal.FTInt64
	case bool:
		return godal.FTInt
	case float64:
		return godal.FTReal
	}
	return godal.FTString
}

func writeLayer(ds *godal.Dataset, sr *godal.SpatialRef, l VectorLayer) error {
	log := godal.ErrLogger(strictly)
	kind := godal.GTPoint
	if l.Lines {
		kind = godal.GTLineString
	}
	options := []godal.CreateLayerOption{log}
	for _, c := range l.Columns {
		options = append(options, godal.NewFieldDefinition(c.Name, fieldType(c.Sample)))
	}
	layer, err := ds.CreateLayer(l.Name, sr, kind, options...)
	if err != nil {
		return err
	}
	if err := ds.StartTransaction(log); err != nil {
		return err
	}
	var fields map[string]godal.Field
	for i := range l.Rows {
		at, values := l.Row(i)
		if len(values) != len(l.Columns) {
			panic("raster: number of values is not that of the columns")
		}
		if err := writeFeature(layer, sr, &fields, l.Columns, at, values); err != nil {
			return err
		}
	}
	return ds.CommitTransaction(log)
}

// writeFeature adds one feature. The fields are those of the first one.
func writeFeature(layer godal.Layer, sr *godal.SpatialRef, fields *map[string]godal.Field, columns []Column, at [][2]float64, values []any) error {
	log := godal.ErrLogger(strictly)
	f, err := layer.NewFeature(nil, log)
	if err != nil {
		return err
	}
	defer f.Close()
	if *fields == nil {
		*fields = f.Fields()
	}
	for k, v := range values {
		switch x := v.(type) {
		case nil:
			continue
		case float64:
			if math.IsNaN(x) || math.IsInf(x, 0) {
				continue // an unset field is null
			}
		case bool:
			v = 0
			if x {
				v = 1
			}
		}
		field, ok := (*fields)[columns[k].Name]
		if !ok {
			return fmt.Errorf("column %q was not created", columns[k].Name)
		}
		if err := f.SetFieldValue(field, v, log); err != nil {
			return err
		}
	}
	if len(at) > 0 {
		g, err := godal.NewGeometryFromWKT(wktOf(at), sr, log)
		if err != nil {
			return err
		}
		defer g.Close()
		if err := f.SetGeometry(g, log); err != nil {
			return err
		}
	}
	return layer.CreateFeature(f, log)
}

// wktOf writes a point or a line as well-known text, every digit kept.
func wktOf(at [][2]float64) string {
	var b strings.Builder
	b.WriteString("POINT (")
	if len(at) > 1 {
		b.Reset()
		b.WriteString("LINESTRING (")
	}
	for i, p := range at {
		if i > 0 {
			b.WriteString(", ")
		}
		b.WriteString(strconv.FormatFloat(p[0], 'g', -1, 64))
		b.WriteByte(' ')
		b.WriteString(strconv.FormatFloat(p[1], 'g', -1, 64))
	}
	b.WriteByte(')')
	return b.String()
}

// LonLat returns a locator from map units of a grid's CRS to WGS84 longitude
// and latitude in degrees, in place; x becomes the longitude, brought into
// [-180, 180). What PROJ cannot place becomes NaN. Call the second function
// when done.
func LonLat(grid *dem.Grid) (dem.Locator, func(), error) {
	register()
	from, err := horizontalCRS(grid)
	if err != nil {
		return nil, nil, err
	}
	defer from.Close()
	log := godal.ErrLogger(new(messages).handle)
	to, err := godal.NewSpatialRef(wgs84, log)
	if err != nil {
		return nil, nil, err
	}
	defer to.Close()
	t, err := godal.NewTransform(from, to, log)
	if err != nil {
		return nil, nil, err
	}
	locate := func(x, y []float64) error {
		if len(x) == 0 {
			return nil
		}
		ok := make([]bool, len(x))
		_ = t.TransformEx(x, y, nil, ok) // the flags say which point failed
		for i := range x {
			if !ok[i] || math.IsInf(x[i]+y[i], 0) {
				x[i], y[i] = math.NaN(), math.NaN()
			}
			x[i] -= 360 * math.Floor((x[i]+180)/360)
		}
		return nil
	}
	return locate, t.Close, nil
}
