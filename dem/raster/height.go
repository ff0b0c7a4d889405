package raster

import (
	"fmt"
	"math"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// HeightShift is what makes the heights of a DEM ellipsoidal:
//
//	height above the ellipsoid = height in the file + shift
//
// For heights above a geoid the shift is the geoid's undulation, about -107 to
// 86 m (EGM96, from memory).
type HeightShift struct {
	Source string  `json:"source"` // "vertical crs", "geoid" or "offset"
	Name   string  `json:"name"`   // of the vertical CRS or of the geoid's file
	Least  float64 `json:"least"`  // over the DEM, metres
	Most   float64 `json:"most"`
}

// shiftStep is the most cells between two nodes at which the shift is computed;
// between them it is bilinear. Undulations change by less than 0.1 m a kilometre
// and bend far less: over 32 cells of 100 m the error stays in the centimetres.
const shiftStep = 32

// maxShiftNodes bounds the lattice; beyond it the nodes stand farther apart.
const maxShiftNodes = 1 << 18

// largestShift is beyond any undulation, metres.
const largestShift = 150.0

// lattice is the shift over a grid: values at nodes from the first cell to the
// last, bilinear between. It depends on the grid alone, so a cell's height is
// the same in every window.
type lattice struct {
	rows, cols   int     // nodes
	stepR, stepC float64 // cells between nodes
	v            []float64
	least, most  float64
}

// newLattice places the nodes over a grid.
func newLattice(g *dem.Grid) *lattice {
	l := &lattice{}
	nodes := func(cells, step int) (int, float64) {
		n := (cells-2)/step + 2
		return n, float64(cells-1) / float64(n-1)
	}
	for step := shiftStep; l.rows == 0 || l.rows*l.cols > maxShiftNodes; step *= 2 {
		l.rows, l.stepR = nodes(g.Rows, step)
		l.cols, l.stepC = nodes(g.Cols, step)
	}
	l.v = make([]float64, l.rows*l.cols)
	return l
}

// places returns longitude and latitude of the nodes, degrees in WGS84.
func (l *lattice) places(g *dem.Grid) (lon, lat []float64) {
	lon, lat = make([]float64, len(l.v)), make([]float64, len(l.v))
	for i := range l.v {
		at := g.At(float64(i/l.cols)*l.stepR, float64(i%l.cols)*l.stepC)
		lon[i], lat[i] = at.Lon.Degrees(), at.Lat.Degrees()
	}
	return lon, lat
}

// bound finds the range of the values.
func (l *lattice) bound() {
	l.least, l.most = math.Inf(1), math.Inf(-1)
	for _, v := range l.v {
		l.least, l.most = min(l.least, v), max(l.most, v)
	}
}

// add adds the shift to the heights of a window.
func (l *lattice) add(w dem.Window, h []float32) {
	if l == nil {
		return
	}
	mixed := make([]float64, l.cols) // the nodes' values at one row
	for r := range w.Rows {
		p := float64(w.Row+r) / l.stepR
		i := min(int(p), l.rows-2)
		p -= float64(i)
		a, b := l.v[i*l.cols:(i+1)*l.cols], l.v[(i+1)*l.cols:(i+2)*l.cols]
		for j := range mixed {
			mixed[j] = a[j] + float64(p*(b[j]-a[j]))
		}
		row := h[r*w.Cols : (r+1)*w.Cols]
		for c := range row {
			q := float64(w.Col+c) / l.stepC
			j := min(int(q), l.cols-2)
			q -= float64(j)
			row[c] = float32(float64(row[c]) + (mixed[j] + float64(q*(mixed[j+1]-mixed[j]))))
		}
	}
}

// raise finds what makes the heights ellipsoidal: what the user gave, else the
// vertical CRS where PROJ can transform it. It warns where the heights stay as
// they are and may be no heights above the ellipsoid.
func (d *DEM) raise(o Options, r *reference) error {
	l := newLattice(d.grid)
	s := HeightShift{}
	switch {
	case o.Geoid != "" && o.HeightOffset != nil:
		return refuse(d.name, nil, "a geoid and a height offset are both given; give one of them")
	case o.Geoid != "" && r.ellipsoidal:
		return refuse(d.name, nil, "its heights are above the ellipsoid already (%s), and a geoid is given; leave --geoid out", r.name)
	case o.Geoid != "":
		s.Source, s.Name = "geoid", o.Geoid
		if err := d.geoidShift(o.Geoid, l); err != nil {
			return err
		}
	case o.HeightOffset != nil:
		s.Source = "offset"
		for i := range l.v {
			l.v[i] = *o.HeightOffset
		}
	case r.vertical != nil:
		s.Source, s.Name = "vertical crs", r.vertical.name()
		if !d.verticalShift(r, l) {
			d.warnReference(r)
			return nil
		}
	default:
		d.warnReference(r)
		return nil
	}
	l.bound()
	s.Least, s.Most = l.least, l.most
	d.shift, d.facts.HeightShift = l, &s
	return nil
}

// verticalShift has PROJ turn height zero of the vertical CRS into a height
// above WGS84 at every node; false where it cannot, such as without the grid of
// the geoid. The horizontal part is WGS84, so that no datum shift of the map
// gets into the heights; PROJ's stand-in for a missing grid is a shift of zero.
func (d *DEM) verticalShift(r *reference, l *lattice) bool {
	log := godal.ErrLogger(func(godal.ErrorCategory, int, string) error { return nil })
	dst, err := godal.NewSpatialRefFromEPSG(4979, log)
	if err != nil {
		return false
	}
	defer dst.Close()
	src, err := godal.NewSpatialRefFromWKT(r.heightsOverWGS84(), log)
	if err != nil {
		return false
	}
	defer src.Close()
	to, err := godal.NewTransform(src, dst, log)
	if err != nil {
		return false
	}
	defer to.Close()
	lon, lat := l.places(d.grid)
	ok := make([]bool, len(lon))
	if err := to.TransformEx(lon, lat, l.v, ok); err != nil {
		return false
	}
	zero := true
	for i, v := range l.v {
		if !ok[i] || !(math.Abs(v) < largestShift) {
			return false
		}
		zero = zero && v == 0
	}
	return !zero
}

// heightsOverWGS84 is the vertical part of the CRS over WGS84, as WKT2.
func (r *reference) heightsOverWGS84() string {
	return fmt.Sprintf(`COMPOUNDCRS["heights over WGS 84",GEOGCRS["WGS 84",DATUM["World Geodetic System 1984",ELLIPSOID["WGS 84",6378137,298.257223563,LENGTHUNIT["metre",1]]],`+
		`PRIMEM["Greenwich",0,ANGLEUNIT["degree",0.0174532925199433]],CS[ellipsoidal,2],`+
		`AXIS["geodetic latitude (Lat)",north,ORDER[1],ANGLEUNIT["degree",0.0174532925199433]],`+
		`AXIS["geodetic longitude (Lon)",east,ORDER[2],ANGLEUNIT["degree",0.0174532925199433]],ID["EPSG",4326]],%s]`, r.verticalText)
}

// geoidError says that a geoid's file cannot serve.
func geoidError(name string, cause error, format string, args ...any) error {
	return &InputError{fmt.Sprintf("geoid %q: ", name) + fmt.Sprintf(format, args...), cause}
}

// geoidShift reads the undulations at the nodes from a raster, bilinear between
// the centres of its cells.
func (d *DEM) geoidShift(name string, l *lattice) error {
	g, err := openGeoid(name)
	if err != nil {
		return err
	}
	defer g.close()
	lon, lat := l.places(d.grid)
	rows, cols, err := g.positions(lon, lat)
	if err != nil {
		return err
	}
	values, err := g.read(rows, cols)
	if err != nil {
		return err
	}
	for i, v := range values {
		at := fmt.Sprintf("at longitude %.4f, latitude %.4f", lon[i], lat[i])
		switch {
		case math.IsNaN(v):
			return geoidError(name, nil, "has no value %s, where the DEM lies; give a geoid that covers the DEM", at)
		case math.Abs(v) > largestShift:
			return geoidError(name, nil, "holds %.6g %s, which is no geoid undulation in metres (within about 107); name a raster of undulations", v, at)
		}
		l.v[i] = v
	}
	return nil
}

// geoid is an open raster of undulations.
type geoid struct {
	*DEM
	rows, cols int
	t          [6]float64
	around     bool // its columns go around the earth
	to         *godal.Transform
}

// openGeoid opens a raster of undulations. Without a CRS it is taken to be in
// longitude and latitude.
func openGeoid(name string) (*geoid, error) {
	d := &DEM{name: name, log: &messages{}}
	log := godal.ErrLogger(d.log.handle)
	ds, err := godal.Open(name, godal.RasterOnly(), log)
	if err != nil {
		return nil, geoidError(name, err, "cannot be opened (GDAL: %s); name a raster of geoid undulations, such as a .gtx or GeoTIFF grid of proj-data", said(name, err))
	}
	d.ds = ds
	g := &geoid{DEM: d}
	if err := g.prepareGeoid(); err != nil {
		d.close()
		return nil, err
	}
	return g, nil
}

func (g *geoid) prepareGeoid() error {
	s := g.ds.Structure()
	g.rows, g.cols = s.SizeY, s.SizeX
	if s.NBands < 1 || g.rows < 2 || g.cols < 2 {
		return geoidError(g.name, nil, "%d x %d cells in %d bands; a geoid needs at least 2 x 2 in one", g.rows, g.cols, s.NBands)
	}
	var err error
	if g.t, err = g.transform(); err != nil {
		return geoidError(g.name, err, "has no upright geotransform; warp it with gdalwarp -t_srs EPSG:4326")
	}
	g.band, g.facts.Band = g.ds.Bands()[0], 1
	if g.band.Structure().DataType >= godal.CInt16 {
		return geoidError(g.name, nil, "holds complex numbers; name a raster of undulations in metres")
	}
	g.decod = newDecoder(g.band, 1)
	if g.decod.masked {
		g.mask = g.band.MaskBand()
	}
	return g.place()
}

// place prepares the way from longitude and latitude to the raster's CRS.
func (g *geoid) place() error {
	log := godal.ErrLogger(g.log.handle)
	sr := g.ds.SpatialRef()
	defer sr.Close()
	if text, err := sr.WKT(); err != nil || text == "" || sr.Geographic() {
		g.around = math.Abs(math.Abs(g.t[1])*float64(g.cols)-360) < 1e-6
		return nil
	}
	from, err := godal.NewSpatialRefFromEPSG(4326, log)
	if err != nil {
		return geoidError(g.name, err, "the PROJ database is missing (%s); install proj-data", firstLine(err))
	}
	defer from.Close()
	if g.to, err = godal.NewTransform(from, sr, log); err != nil {
		return geoidError(g.name, err, "nothing leads from WGS84 to its coordinate reference system; warp it with gdalwarp -t_srs EPSG:4326")
	}
	return nil
}

func (g *geoid) close() {
	if g.to != nil {
		g.to.Close()
	}
	_ = g.DEM.close() // opened for reading only
}

// positions returns the fractional rows and columns of places, from the centre
// of the first cell. Places beyond the outer edge are an error; those in the
// outer half cell take the nearest centres.
func (g *geoid) positions(lon, lat []float64) (rows, cols []float64, err error) {
	x, y := append([]float64(nil), lon...), append([]float64(nil), lat...)
	if g.to != nil {
		_ = g.to.TransformEx(x, y, nil, nil) // a point that fails is infinite
	}
	for i := range x {
		if g.to == nil { // geographic grids begin at -180, at 0 or anywhere
			left := min(g.t[0], g.t[0]+float64(g.cols)*g.t[1])
			x[i] -= 360 * math.Floor((x[i]-left)/360)
		}
		col, row := (x[i]-g.t[0])/g.t[1]-0.5, (y[i]-g.t[3])/g.t[5]-0.5
		lastR, lastC := float64(g.rows-1), float64(g.cols-1)
		if !(row >= -0.5 && row <= lastR+0.5 && col >= -0.5-1e-9 && col <= lastC+0.5+1e-9) {
			return nil, nil, geoidError(g.name, nil, "does not reach longitude %.4f, latitude %.4f, where the DEM lies; give a geoid that covers the DEM", lon[i], lat[i])
		}
		if !g.around {
			col = min(max(col, 0), lastC)
		}
		x[i], y[i] = col, min(max(row, 0), lastR)
	}
	return y, x, nil
}

// maxGeoidCells bounds what is read of a geoid: 256 MiB.
const maxGeoidCells = 1 << 26

// read returns the undulations at fractional positions, bilinear.
func (g *geoid) read(rows, cols []float64) ([]float64, error) {
	r0, r1, c0, c1 := g.rows, 0, g.cols, -1
	for i := range rows {
		r, c := int(rows[i]), int(math.Floor(cols[i]))
		r0, r1, c0, c1 = min(r0, r), max(r1, min(r+1, g.rows-1)), min(c0, c), max(c1, c+1)
	}
	if !g.around {
		c1 = min(c1, g.cols-1)
	} else if c1-c0 >= g.cols { // both ends of the raster: take it all
		c0, c1 = -1, g.cols
	}
	height, width := r1-r0+1, c1-c0+1
	if height*width > maxGeoidCells {
		return nil, geoidError(g.name, nil, "%d x %d of its cells lie over the DEM, too many to hold; warp it to a coarser grid with gdalwarp -tr", height, width)
	}
	z := make([]float32, height*width)
	column := make([]float32, height)
	for c := c0; c <= c1; { // in runs of columns that the file holds side by side
		from := (c%g.cols + g.cols) % g.cols
		n := min(g.cols-from, c1-c+1)
		if n*height > len(column) {
			column = make([]float32, n*height)
		}
		if err := g.fetch(dem.Window{Row: r0, Col: from, Rows: height, Cols: n}, column[:n*height], nil); err != nil {
			return nil, geoidError(g.name, err, "cannot be read; fetch it again, or check it with gdalinfo -checksum")
		}
		for r := range height {
			copy(z[r*width+c-c0:], column[r*n:(r+1)*n])
		}
		c += n
	}
	out := make([]float64, len(rows))
	for i := range out {
		out[i] = bilinear(z, height, width, rows[i]-float64(r0), cols[i]-float64(c0))
	}
	return out, nil
}

// bilinear interpolates a grid; a corner of no weight does not count, so that
// one without a value spoils only what hangs on it.
func bilinear(z []float32, rows, cols int, row, col float64) float64 {
	r, c := min(int(row), rows-2), min(int(col), cols-2)
	p, q := row-float64(max(r, 0)), col-float64(max(c, 0))
	sum := 0.0
	for k, weight := range [4]float64{(1 - p) * (1 - q), (1 - p) * q, p * (1 - q), p * q} {
		if weight > 0 {
			sum += weight * float64(z[min(max(r, 0)+k/2, rows-1)*cols+min(max(c, 0)+k%2, cols-1)])
		}
	}
	return sum
}

// near reports whether a height may be another one after the shift; for
// comparisons that need no more.
func (l *lattice) near(a, b float64) bool {
	if l == nil {
		return a == b
	}
	return a-b >= l.least-1e-3 && a-b <= l.most+1e-3
}
