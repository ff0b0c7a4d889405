package raster

import (
	"fmt"
	"math"
	"strings"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// wgs84 is the CRS of columns lon and lat.
const wgs84 = "EPSG:4326"

// placer turns coordinates of a file into map units of a DEM.
type placer struct {
	to   *godal.Transform // nil: they are map units already
	grid *dem.Grid
}

func (p *placer) close() {
	if p.to != nil {
		p.to.Close()
		p.to = nil
	}
}

// place transforms positions. What PROJ cannot place is NaN. On a grid in
// longitude and latitude the longitude is turned into the grid's own range.
func (p *placer) place(at [][2]float64) [][2]float64 {
	n := len(at)
	x, y, ok := make([]float64, n), make([]float64, n), make([]bool, n)
	for i, c := range at {
		x[i], y[i], ok[i] = c[0], c[1], true
	}
	if p.to != nil && n > 0 {
		_ = p.to.TransformEx(x, y, nil, ok) // the flags say which point failed
	}
	out := make([][2]float64, n)
	for i := range out {
		if !ok[i] || math.IsNaN(x[i]+y[i]) || math.IsInf(x[i]+y[i], 0) {
			x[i], y[i] = math.NaN(), math.NaN()
		}
		out[i] = [2]float64{p.turned(x[i]), y[i]}
	}
	return out
}

// turned adds full turns to a longitude that brings it next to the grid.
func (p *placer) turned(x float64) float64 {
	if !p.grid.Geographic {
		return x
	}
	mid, _ := p.grid.XY(float64(p.grid.Rows-1)/2, float64(p.grid.Cols-1)/2)
	return mid + math.Remainder(x-mid, 360)
}

// horizontalCRS returns the CRS of a grid without its vertical part.
func horizontalCRS(grid *dem.Grid) (*godal.SpatialRef, error) {
	text := grid.CRS
	if root, err := parseWKT(text); err == nil {
		ref := &reference{}
		ref.part(root)
		text = ref.horizontal.text
	}
	return godal.NewSpatialRef(text, godal.ErrLogger(new(messages).handle))
}

// newPlacer leads from a CRS, given as text or as that of a layer, to the
// grid.
func (r *siteReader) newPlacer(from *godal.SpatialRef, name string) (*placer, error) {
	to, err := horizontalCRS(r.grid)
	if err != nil {
		return nil, refuseSites(r.name, err, "the DEM's CRS is not understood (GDAL: %s)", firstLine(err))
	}
	defer to.Close()
	if from.IsSame(to) {
		return &placer{nil, r.grid}, nil
	}
	t, err := godal.NewTransform(from, to, godal.ErrLogger(r.handler()))
	if err != nil {
		return nil, refuseSites(r.name, err, "nothing leads from its CRS %s to that of the DEM (GDAL: %s); name its CRS with --sites-crs, or reproject it with ogr2ogr", name, said(r.name, err))
	}
	return &placer{t, r.grid}, nil
}

// namedPlacer is newPlacer for a CRS given by name.
func (r *siteReader) namedPlacer(crs string) (*placer, error) {
	from, err := godal.NewSpatialRef(crs, godal.ErrLogger(r.handler()))
	if err != nil {
		return nil, refuseSites(r.name, err, "the CRS %q is not understood (GDAL: %s); --sites-crs takes EPSG:code, WKT or a PROJ string", crs, said(r.name, err))
	}
	defer from.Close()
	return r.newPlacer(from, crs)
}

// layerPlacer is newPlacer for the geometries of a layer.
func (r *siteReader) layerPlacer(l godal.Layer) (*placer, error) {
	if r.o.CRS != "" {
		return r.namedPlacer(r.o.CRS)
	}
	sr := l.SpatialRef()
	wkt, err := sr.WKT(godal.ErrLogger(new(messages).handle))
	if err != nil || wkt == "" || strings.HasPrefix(wkt, "LOCAL_CS") || strings.HasPrefix(wkt, "ENGCRS") {
		return nil, refuseSites(r.name, nil, "layer %q has no coordinate reference system; name it with --sites-crs, such as --sites-crs EPSG:4326 for longitude and latitude", l.Name())
	}
	name, _ := sr.AttrValue("PROJCS", 0)
	return r.newPlacer(sr, fmt.Sprintf("%q", name))
}

// The names of the columns that place a feature without geometry.
var (
	lonColumns = []string{"lon", "longitude", "long", "lng"}
	latColumns = []string{"lat", "latitude"}
	xColumns   = []string{"x", "easting", "east"}
	yColumns   = []string{"y", "northing", "north"}
)

// placeByColumns places a feature by its columns lon and lat or x and y.
func (r *siteReader) placeByColumns(s *Site, fields map[string]godal.Field) error {
	s.Shape = ShapePoint
	x, y, crs := r.column(lonColumns...), r.column(latColumns...), wgs84
	if x == "" || y == "" {
		x, y, crs = r.column(xColumns...), r.column(yColumns...), ""
	}
	if x == "" || y == "" {
		if len(r.list) == 0 {
			return refuseSites(r.name, nil, "its features have no geometry, and there are no columns lon and lat or x and y; its columns are %s", quoted(r.columns))
		}
		s.fail("has no geometry")
		return nil
	}
	if r.toGrid == nil {
		if err := r.columnPlacer(x, y, crs); err != nil {
			return err
		}
	}
	var at [2]float64
	for i, c := range []string{x, y} {
		text := fieldText(fields[c])
		v, ok := plainNumber(text)
		if !ok {
			s.fail("column %s holds %q, which is not a plain decimal number", c, cleanName(text))
			return nil
		}
		at[i] = v
	}
	r.placePoint(s, at)
	return nil
}

// columnPlacer chooses the CRS of columns: the one that the user gives, WGS84
// for lon and lat, the DEM's own for x and y.
func (r *siteReader) columnPlacer(x, y, crs string) (err error) {
	switch {
	case r.o.CRS != "":
		r.toGrid, err = r.namedPlacer(r.o.CRS)
	case crs != "":
		r.toGrid, err = r.namedPlacer(crs)
	default:
		r.toGrid = &placer{nil, r.grid}
		r.log.add(fmt.Sprintf("sites %q: columns %s and %s are taken in the DEM's CRS; --sites-crs names another", r.name, x, y))
	}
	return err
}

// placePoint places a site that is a point.
func (r *siteReader) placePoint(s *Site, at [2]float64) {
	p := r.toGrid.place([][2]float64{at})[0]
	s.X, s.Y = p[0], p[1]
	if inGrid(r.grid, p) {
		return
	}
	swapped := r.toGrid.place([][2]float64{{at[1], at[0]}})[0]
	switch {
	case inGrid(r.grid, swapped):
		s.fail("at %s it lies outside the DEM; with the two coordinates swapped it would lie inside, so check their order", pairText(at))
	case math.IsNaN(p[0]):
		s.fail("at %s it is outside what its CRS can place; check the coordinates, or name the CRS with --sites-crs", pairText(at))
	default:
		s.fail("at %s it lies outside the DEM", pairText(at))
	}
}

func pairText(at [2]float64) string { return fmt.Sprintf("%.10g, %.10g", at[0], at[1]) }

// inGrid reports whether a place lies within the outermost cell centres of the
// grid, where its surface is.
func inGrid(g *dem.Grid, at [2]float64) bool {
	row, col := g.RowCol(at[0], at[1])
	return row >= 0 && col >= 0 && row <= float64(g.Rows-1) && col <= float64(g.Cols-1)
}

// placeGeometry places a site by its geometry.
func (r *siteReader) placeGeometry(s *Site, l godal.Layer, g *godal.Geometry) error {
	if r.toGrid == nil {
		var err error
		if r.toGrid, err = r.layerPlacer(l); err != nil {
			return err
		}
	}
	wkb, err := g.WKB(godal.ErrLogger(r.handler()))
	if err != nil {
		s.fail("its geometry cannot be read (GDAL: %s)", said(r.name, err))
		return nil
	}
	shape, paths, err := parseWKB(wkb)
	s.Shape = shape
	if err != nil {
		s.fail("%v", err)
		return nil
	}
	if shape == ShapePoint {
		r.placePoint(s, paths[0][0])
		return nil
	}
	r.placeShape(s, paths)
	return nil
}

// placeShape places a site of several positions: all of them must be
// placeable, and one cell at least must lie in the grid.
func (r *siteReader) placeShape(s *Site, paths [][][2]float64) {
	swapped := make([][][2]float64, len(paths))
	for i, path := range paths {
		s.Paths = append(s.Paths, r.toGrid.place(path))
		flip := make([][2]float64, len(path))
		for k, p := range path {
			flip[k] = [2]float64{p[1], p[0]}
		}
		swapped[i] = flip
	}
	for i, path := range s.Paths {
		for k, p := range path {
			if math.IsNaN(p[0]) {
				s.fail("at %s it is outside what its CRS can place; check the coordinates, or name the CRS with --sites-crs", pairText(paths[i][k]))
				s.Paths = nil
				return
			}
		}
	}
	cells, err := s.Cells(r.grid)
	if err != nil {
		s.fail("%v", err)
		s.X, s.Y = s.Paths[0][0][0], s.Paths[0][0][1]
		return
	}
	if len(cells) > 0 {
		s.stand(r.grid, cells)
		return
	}
	s.X, s.Y = s.Paths[0][0][0], s.Paths[0][0][1]
	flip := Site{Shape: s.Shape}
	for _, path := range swapped {
		flip.Paths = append(flip.Paths, r.toGrid.place(path))
	}
	if cells, err := flip.Cells(r.grid); err == nil && len(cells) > 0 {
		s.fail("it lies outside the DEM; with the two coordinates swapped it would lie inside, so check their order")
		return
	}
	s.fail("it lies outside the DEM")
}

// stand chooses the place that stands for a shape: the centre of the cell that
// is nearest to the mean of its cells, the first of equals.
func (s *Site) stand(g *dem.Grid, cells [][2]int) {
	var row, col float64
	for _, c := range cells {
		row, col = row+float64(c[0]), col+float64(c[1])
	}
	row, col = row/float64(len(cells)), col/float64(len(cells))
	best, least := cells[0], math.Inf(1)
	for _, c := range cells {
		if d := math.Hypot(float64(c[0])-row, float64(c[1])-col); d < least {
			best, least = c, d
		}
	}
	s.X, s.Y = g.XY(float64(best[0]), float64(best[1]))
}
