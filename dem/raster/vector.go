package raster

import (
	"cmp"
	"errors"
	"fmt"
	"maps"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"unicode"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// SiteOptions tells ReadSites what the file does not.
type SiteOptions struct {
	// CRS replaces the coordinate reference system of the file: EPSG:code, WKT
	// or a PROJ string. Empty: as the file says.
	CRS string
	// Layer is the layer to take. Empty: the only one that holds features, or
	// all of a GPX or KML file but the points of GPX routes and tracks.
	Layer string
	// Name, Height and Footprint are the columns of a site's name, its height
	// above the ground and its radius. Empty: the columns of those names, in
	// any case, where there are such.
	Name, Height, Footprint string
}

// Shape is what the geometry of a site is.
type Shape string

// The shapes of sites. Several points, lines or polygons in one feature are
// one site.
const (
	ShapePoint   Shape = "point"
	ShapePoints  Shape = "points"
	ShapeLine    Shape = "line"
	ShapePolygon Shape = "polygon"
)

// Site is one feature of a vector file, placed in the CRS of a DEM.
type Site struct {
	Record int    // number of the feature in the file, from 1
	Name   string // without control characters, unlike that of any other site
	Shape  Shape
	// X and Y are map units of the DEM: the point itself, or a place on or in
	// the shape that stands for it.
	X, Y float64
	// Paths are the points, lines or rings of a shape that is no single point,
	// in map units of the DEM. A place is inside polygons when a ray from it
	// meets the rings an odd number of times.
	Paths [][][2]float64
	// Height is metres above the ground, Footprint a radius in metres; 0 where
	// the file gives none.
	Height, Footprint float64
	// Problem says in one lower-case line why the site cannot be judged; empty
	// when it can. X and Y are NaN when its place is not known.
	Problem string
}

// The ranges of a site's numbers, metres: masts, balloons on a line and
// towers stand below a kilometre; a footprint is a field, not a region.
const (
	mostSiteHeight    = 1000
	mostSiteFootprint = 10000
)

// Sites is what ReadSites found.
type Sites struct {
	Name     string // the file
	Files    []string
	List     []Site
	Warnings []string // what was decided for the user, and what looks wrong
}

// refuseSites makes an InputError about a file of sites.
func refuseSites(name string, cause error, format string, args ...any) error {
	return &InputError{fmt.Sprintf("sites %q: ", name) + fmt.Sprintf(format, args...), cause}
}

// ReadSites reads the features of a vector file, of any format GDAL reads, as
// sites on the grid of a DEM. A table without geometries is placed by its
// columns lon and lat (WGS84) or x and y (the DEM's CRS, when no other is
// given). Heights in the geometries are ignored: a site stands on the DEM.
//
// A feature that cannot be placed or lies outside the grid comes back with
// its Problem; a file that cannot serve at all is refused by an *InputError.
func ReadSites(name string, o SiteOptions, grid *dem.Grid) (*Sites, error) {
	register()
	r := &siteReader{name: name, o: o, grid: grid, log: &messages{}}
	ds, err := r.open()
	if err != nil {
		return nil, err
	}
	defer func() { _ = ds.Close(godal.ErrLogger(r.handler())) }() // opened for reading only
	layers, err := r.choose(ds)
	if err != nil {
		return nil, err
	}
	for _, l := range layers {
		if err := r.layer(l); err != nil {
			return nil, err
		}
	}
	if len(r.list) == 0 {
		return nil, refuseSites(name, nil, "holds no features; give a file with one feature a site")
	}
	r.unique()
	return &Sites{name, sourceFiles(name, 0), r.list, r.log.all()}, nil
}

// siteReader is one reading of a file of sites.
type siteReader struct {
	name string
	o    SiteOptions
	grid *dem.Grid
	log  *messages
	list []Site

	columns []string // of the layer, as its features name them
	toGrid  *placer  // for the geometries of the layer
}

func (r *siteReader) handler() godal.ErrorHandler { return r.log.handle }

// open opens the file and rewrites GDAL's refusal.
func (r *siteReader) open() (*godal.Dataset, error) {
	if r.name == "" {
		return nil, refuseSites(r.name, nil, "no name given; give the path of a vector file")
	}
	ds, err := godal.Open(r.name, godal.VectorOnly(), godal.ErrLogger(r.handler()))
	if err == nil {
		return ds, nil
	}
	info, statErr := os.Stat(r.name)
	plain := !strings.HasPrefix(r.name, "/vsi")
	switch detail := said(r.name, err); {
	case plain && errors.Is(statErr, os.ErrNotExist):
		return nil, refuseSites(r.name, err, "no such file; check the path and the folder it starts from")
	case plain && (errors.Is(statErr, os.ErrPermission) || statErr == nil && unreadable(r.name)):
		return nil, refuseSites(r.name, err, "permission denied; ask for read access to it")
	case statErr == nil && info.IsDir():
		return nil, refuseSites(r.name, err, "is a folder without vector files; name the file of the sites")
	case statErr == nil && info.Size() == 0:
		return nil, refuseSites(r.name, err, "the file is empty; give one with a feature a site")
	case strings.Contains(detail, "not recognized"):
		return nil, refuseSites(r.name, err, "not a vector file of a format GDAL reads; a table needs the ending .csv, others a format such as GeoPackage, GeoJSON, Shapefile, KML or GPX")
	default:
		return nil, refuseSites(r.name, err, "cannot be opened (GDAL: %s); check it with ogrinfo", detail)
	}
}

// choose returns the layers to read.
func (r *siteReader) choose(ds *godal.Dataset) ([]godal.Layer, error) {
	all := ds.Layers()
	var names, full []string
	var chosen []godal.Layer
	driver := ds.Driver().ShortName()
	for _, l := range all {
		names = append(names, l.Name())
		if r.o.Layer != "" {
			if l.Name() == r.o.Layer {
				return []godal.Layer{l}, nil
			}
			continue
		}
		if n, err := l.FeatureCount(godal.ErrLogger(r.handler())); err != nil || n == 0 {
			continue // an unreadable one is told by reading it, if it is named
		}
		if driver == "GPX" && strings.HasSuffix(l.Name(), "_points") {
			continue // the points of routes and tracks, which are sites as lines
		}
		chosen, full = append(chosen, l), append(full, l.Name())
	}
	switch {
	case r.o.Layer != "":
		return nil, refuseSites(r.name, nil, "has no layer %q; its layers are %s", r.o.Layer, quoted(names))
	case len(chosen) > 1 && driver != "GPX" && driver != "KML" && driver != "LIBKML":
		return nil, refuseSites(r.name, nil, "holds several layers with features: %s; name one with --sites-layer", quoted(full))
	}
	return chosen, nil
}

func quoted(names []string) string {
	const most = 20
	var q []string
	for i, n := range names {
		if i == most {
			return strings.Join(q, ", ") + fmt.Sprintf(" and %d more", len(names)-most)
		}
		q = append(q, strconv.Quote(n))
	}
	return strings.Join(q, ", ")
}

// layer reads the features of one layer.
func (r *siteReader) layer(l godal.Layer) error {
	want, err := l.FeatureCount(godal.ErrLogger(r.handler()))
	if err != nil {
		return refuseSites(r.name, err, "its features cannot be read (GDAL: %s); check it with ogrinfo", said(r.name, err))
	}
	r.columns, r.toGrid = nil, nil
	l.ResetReading()
	read := 0
	for {
		f := l.NextFeature()
		if f == nil {
			break
		}
		err := r.feature(l, f)
		f.Close()
		if err != nil {
			return err
		}
		read++
	}
	if r.toGrid != nil {
		r.toGrid.close()
	}
	if read < want {
		return refuseSites(r.name, nil, "only %d of its %d features can be read: the file is damaged or cut short; fetch it again", read, want)
	}
	return nil
}

// feature adds the site of one feature.
func (r *siteReader) feature(l godal.Layer, f *godal.Feature) error {
	fields := f.Fields()
	if r.columns == nil {
		r.columns = slices.Sorted(maps.Keys(fields))
		if err := r.checkColumns(); err != nil {
			return err
		}
	}
	s := Site{Record: len(r.list) + 1, X: math.NaN(), Y: math.NaN()}
	if c := r.column(cmp.Or(r.o.Name, "name")); c != "" {
		s.Name = cleanName(fieldText(fields[c]))
	}
	s.Name = cmp.Or(s.Name, fmt.Sprintf("site %d", s.Record))
	s.Height = r.metres(&s, fields, cmp.Or(r.o.Height, "height"), mostSiteHeight)
	s.Footprint = r.metres(&s, fields, cmp.Or(r.o.Footprint, "footprint"), mostSiteFootprint)
	g := f.Geometry()
	defer g.Close()
	if g.Type() == godal.GTUnknown || g.Empty() {
		if err := r.placeByColumns(&s, fields); err != nil {
			return err
		}
	} else if err := r.placeGeometry(&s, l, g); err != nil {
		return err
	}
	r.list = append(r.list, s)
	return nil
}

// checkColumns refuses columns that the user named and the layer lacks.
func (r *siteReader) checkColumns() error {
	for _, c := range []struct{ flag, name string }{
		{"--name-column", r.o.Name}, {"--height-column", r.o.Height}, {"--footprint-column", r.o.Footprint},
	} {
		if c.name != "" && r.column(c.name) == "" {
			if len(r.columns) == 0 {
				return refuseSites(r.name, nil, "has no column %q; it has no columns at all, so leave %s out", c.name, c.flag)
			}
			return refuseSites(r.name, nil, "has no column %q; %s takes one of %s", c.name, c.flag, quoted(r.columns))
		}
	}
	return nil
}

// column finds a column by its name, first as written, then in any case.
func (r *siteReader) column(names ...string) string {
	for _, n := range names {
		if slices.Contains(r.columns, n) {
			return n
		}
	}
	for _, n := range names {
		for _, c := range r.columns {
			if strings.EqualFold(strings.TrimSpace(c), n) {
				return c
			}
		}
	}
	return ""
}

// metres reads a length of a site; an empty field is 0, and one that is no
// length becomes the site's problem.
func (r *siteReader) metres(s *Site, fields map[string]godal.Field, name string, most float64) float64 {
	c := r.column(name)
	if c == "" {
		return 0
	}
	text := fieldText(fields[c])
	if text == "" {
		return 0
	}
	v, ok := plainNumber(text)
	if !ok || v < 0 || v > most {
		s.fail("%s %q is not a number of metres from 0 to %g", c, cleanName(text), most)
		return 0
	}
	return v
}

// fail notes the first problem of a site.
func (s *Site) fail(format string, args ...any) {
	if s.Problem == "" {
		s.Problem = fmt.Sprintf(format, args...)
	}
}

// plainNumber reads a plain decimal number: no NaN, no infinity, no unit.
func plainNumber(text string) (float64, bool) {
	if strings.Trim(text, "+-.0123456789eE") != "" {
		return 0, false
	}
	v, err := strconv.ParseFloat(text, 64)
	return v, err == nil
}

// fieldText is the value of a field as text, without blanks around it.
func fieldText(f godal.Field) string {
	if !f.IsSet() {
		return ""
	}
	switch f.Type() {
	case godal.FTInt, godal.FTInt64:
		return strconv.FormatInt(f.Int(), 10)
	case godal.FTReal:
		return strconv.FormatFloat(f.Float(), 'g', -1, 64)
	default:
		return strings.TrimSpace(f.String())
	}
}

// cleanName makes a text fit for every format and screen: control characters
// and marks that turn the direction of writing become blanks, runs of blanks
// one.
func cleanName(text string) string {
	text = strings.Map(func(c rune) rune {
		turns := c == 0x61c || c == 0x200e || c == 0x200f || c >= 0x202a && c <= 0x202e || c >= 0x2066 && c <= 0x2069
		if unicode.IsControl(c) || turns || c == 0xfffe || c == 0xffff || c == 0x2028 || c == 0x2029 {
			return ' '
		}
		return c
	}, strings.ToValidUTF8(text, "\uFFFD"))
	return strings.Join(strings.Fields(text), " ")
}

// unique tells sites of one name apart by a number after it.
func (r *siteReader) unique() {
	taken := map[string]bool{}
	for i := range r.list {
		taken[r.list[i].Name] = true
	}
	first, next := map[string]bool{}, map[string]int{}
	renamed := 0
	example := ""
	for i := range r.list {
		s := &r.list[i]
		if !first[s.Name] {
			first[s.Name] = true
			continue
		}
		old := s.Name
		for n := max(next[old], 2); ; n++ {
			if s.Name = fmt.Sprintf("%s (%d)", old, n); !taken[s.Name] {
				next[old] = n + 1
				break
			}
		}
		taken[s.Name], first[s.Name] = true, true
		if renamed++; renamed == 1 {
			example = fmt.Sprintf("record %d, %q, is now %q", s.Record, old, s.Name)
		}
	}
	if renamed > 0 {
		r.log.add(fmt.Sprintf("sites %q: %d sites had the name of an earlier one and were numbered; %s", r.name, renamed, example))
	}
}
