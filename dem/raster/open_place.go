package raster

import (
	"errors"
	"fmt"
	"math"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
	"foldshade/geometry"
)

// transform returns the geotransform, refused when absent, rotated or without
// extent.
func (d *DEM) transform() ([6]float64, error) {
	t, err := d.ds.GeoTransform(godal.ErrLogger(d.log.handle))
	if err != nil || t == [6]float64{0, 1, 0, 0, 0, 1} || t == [6]float64{0, 1, 0, 0, 0, -1} {
		if len(d.ds.GCPs()) > 0 {
			return t, refuse(d.name, err, "is placed by ground control points only; warp it onto a map first, such as gdalwarp -t_srs EPSG:32632")
		}
		return t, refuse(d.name, err, "has no geotransform, so its cells are nowhere; give it corners with gdal_translate -a_ullr, or a world file")
	}
	for _, v := range t {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return t, refuse(d.name, nil, "its geotransform holds %g; write it again with gdal_translate -a_ullr", v)
		}
	}
	s := d.ds.Structure()
	// Rounding leaves 1e-17 where a rotation of zero was meant: what moves no
	// cell by a thousandth of a cell is none.
	if math.Abs(t[2])*float64(s.SizeY) > 1e-3*math.Abs(t[1]) || math.Abs(t[4])*float64(s.SizeX) > 1e-3*math.Abs(t[5]) {
		return t, refuse(d.name, nil, "its geotransform is rotated (terms %g and %g); warp it straight with gdalwarp", t[2], t[4])
	}
	t[2], t[4] = 0, 0
	if t[1] == 0 || t[5] == 0 {
		return t, refuse(d.name, nil, "its cells are %g x %g map units; write it again with gdal_translate -a_ullr", t[1], t[5])
	}
	return t, nil
}

// extent is the map rectangle of a grid, outer edges.
func extent(rows, cols int, t [6]float64) (x0, y0, x1, y1 float64) {
	x0, x1 = t[0], t[0]+float64(cols)*t[1]
	y0, y1 = t[3], t[3]+float64(rows)*t[5]
	return min(x0, x1), min(y0, y1), max(x0, x1), max(y0, y1)
}

// slack is the rounding allowed at the pole and the antimeridian, degrees:
// about a millimetre.
const slack = 1e-8

// checkPlace refuses a geographic grid that is not on the globe.
func checkPlace(name string, rows, cols int, t [6]float64, r *reference) error {
	if !r.geographic {
		return nil
	}
	x0, y0, x1, y1 := extent(rows, cols, t)
	deg := r.unitSize * 180 / math.Pi
	x0, y0, x1, y1 = x0*deg, y0*deg, x1*deg, y1*deg
	if y0 < -90-slack || y1 > 90+slack {
		if x0 >= -90 && x1 <= 90 && y0 >= -180 && y1 <= 180 {
			return refuse(name, nil, "its latitudes run from %.6g to %.6g and its longitudes from %.6g to %.6g: they look swapped; exchange them with gdal_translate -a_ullr WEST NORTH EAST SOUTH", y0, y1, x0, x1)
		}
		return refuse(name, nil, "its latitudes run from %.6g to %.6g, beyond 90 degrees; if the map is in metres or feet, name its CRS with --crs", y0, y1)
	}
	if y0 <= -90+slack || y1 >= 90-slack {
		return atPole(name)
	}
	if x0 < -360-slack || x1 > 360+slack || x1-x0 > 360+slack {
		return refuse(name, nil, "its longitudes run from %.6g to %.6g; they must lie between -360 and 360 degrees: check the CRS, or name it with --crs", x0, x1)
	}
	return nil
}

func atPole(name string) error {
	return refuse(name, nil, "holds or touches a pole, where east and north end; cut the pole off with gdal_translate -projwin")
}

// layOut makes the grid, with PROJ to place its cells.
func (d *DEM) layOut(rows, cols int, t [6]float64, r *reference) (*dem.Grid, error) {
	log := godal.ErrLogger(d.log.handle)
	src, err := godal.NewSpatialRefFromWKT(r.horizontal.text, log)
	if err != nil {
		return nil, refuse(d.name, err, "its coordinate reference system %q is not understood (GDAL: %s); name another with --crs", r.name, said(d.name, err))
	}
	defer src.Close()
	dst, err := godal.NewSpatialRefFromEPSG(4326, log)
	if err != nil {
		return nil, refuse(d.name, err, "the PROJ database is missing (%s); install proj-data, or set PROJ_DATA to its folder", said(d.name, err))
	}
	defer dst.Close()
	if err := d.poleInside(rows, cols, t, src, dst); err != nil {
		return nil, err
	}
	to, err := godal.NewTransform(src, dst, log)
	if err != nil {
		return nil, refuse(d.name, err, "nothing leads from its coordinate reference system %q to WGS84 (GDAL: %s); reproject it with gdalwarp", r.name, said(d.name, err))
	}
	defer to.Close()
	grid, err := dem.NewGrid(rows, cols, t, r.wkt, func(x, y []float64) error { return d.locate(to, r, x, y) })
	var input *InputError
	if err != nil && !errors.As(err, &input) {
		return nil, refuse(d.name, err, "%v; check its CRS and geotransform with gdalinfo", err)
	}
	if err != nil {
		return nil, err
	}
	return grid, d.checkEdges(grid)
}

// poleInside refuses a grid that holds or touches a pole.
func (d *DEM) poleInside(rows, cols int, t [6]float64, src, dst *godal.SpatialRef) error {
	from, err := godal.NewTransform(dst, src, godal.ErrLogger(d.log.handle))
	if err != nil {
		return nil // no way back from WGS84: locate judges by latitude
	}
	defer from.Close()
	x0, y0, x1, y1 := extent(rows, cols, t)
	for _, lat := range []float64{90, -90} {
		x, y, ok := []float64{0}, []float64{lat}, []bool{false}
		if err := from.TransformEx(x, y, nil, ok); err != nil || !ok[0] {
			continue // the projection does not reach this pole
		}
		if x[0] >= x0 && x[0] <= x1 && y[0] >= y0 && y[0] <= y1 {
			return atPole(d.name)
		}
	}
	return nil
}

// locate is the dem.Locator: map coordinates to longitude and latitude in
// WGS84. GDAL chooses one datum shift for all points of a call, so neighbours
// are never torn apart. Longitudes are continuous over the grid, around one
// in [-180, 180).
func (d *DEM) locate(to *godal.Transform, r *reference, x, y []float64) error {
	ok := make([]bool, len(x))
	mapX, mapY := append([]float64(nil), x...), append([]float64(nil), y...)
	_ = to.TransformEx(x, y, nil, ok) // the flags say which point failed
	for i := range x {
		switch {
		case !ok[i] || math.IsNaN(x[i]+y[i]) || math.IsInf(x[i]+y[i], 0):
			return refuse(d.name, nil, "the map position %.10g, %.10g is outside what its coordinate reference system %q can place; cut the DEM with gdal_translate -projwin, or name the right CRS with --crs", mapX[i], mapY[i], r.name)
		case math.Abs(y[i]) > 90-slack:
			return atPole(d.name)
		}
	}
	mid := x[len(x)/2]
	mid -= 360 * math.Floor((mid+180)/360)
	for i := range x {
		x[i] = mid + math.Remainder(x[i]-mid, 360)
	}
	return nil
}

// nearPole is how many cells from a pole the directions of east and north turn
// too fast for the grid's lattice: over its 32 cells they turn by 32/nearPole
// radians, and lengths lose an eighth of the square, 5e-4.
const nearPole = 512

// checkEdges walks the outer cells. It refuses a grid with cell centres on
// both sides of the antimeridian, which may end there with half a cell beyond,
// and warns of one close to a pole.
func (d *DEM) checkEdges(g *dem.Grid) error {
	const limit = (180 + slack) * geometry.Degree
	lastR, lastC := float64(g.Rows-1), float64(g.Cols-1)
	polar := false
	for i := range 65 {
		f := float64(i) / 64
		for _, p := range [4][2]float64{{f * lastR, 0}, {f * lastR, lastC}, {0, f * lastC}, {lastR, f * lastC}} {
			l := g.At(p[0], p[1])
			if l.Lon > limit || l.Lon < -limit {
				return refuse(d.name, nil, "crosses the antimeridian (180 degrees) near row %d, column %d; cut it in two there with gdal_translate -projwin", int(math.Round(p[0])), int(math.Round(p[1])))
			}
			metres := geometry.SemiMajor * float64(90*geometry.Degree-geometry.Angle(math.Abs(float64(l.Lat))))
			polar = polar || metres < nearPole*max(math.Hypot(l.ColE, l.ColN), math.Hypot(l.RowE, l.RowN))
		}
	}
	if polar && !g.Geographic {
		d.log.add(fmt.Sprintf("it comes within %d cells of a pole, where east and north turn too fast to follow: slopes and azimuths there are rough; cut that part off", nearPole))
	}
	return nil
}

// checkUsage warns of a grid far from where its CRS is meant for.
func (d *DEM) checkUsage(r *reference) {
	west, south, east, north, ok := areaOfUse(base(r.horizontal).code())
	if !ok {
		return
	}
	c := d.grid.At(float64(d.grid.Rows-1)/2, float64(d.grid.Cols-1)/2)
	lat, lon := c.Lat.Degrees(), c.Lon.Degrees()
	// A degree is what surveys reach over the border of the area.
	const margin = 1
	inside := lon >= west-margin && lon <= east+margin
	if west > east { // the area crosses the antimeridian
		inside = lon >= west-margin || lon <= east+margin
	}
	if lat < south-margin || lat > north+margin || !inside {
		d.log.add(fmt.Sprintf("its centre, longitude %.4f, latitude %.4f, is outside the area that %s is made for: check the CRS, or name it with --crs", lon, lat, r.name))
	}
}
