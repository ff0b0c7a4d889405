// Package dem holds the elevation grid: where its cells are on the ground and
// what their heights are. It is pure Go and knows no radar; the sub-package
// raster holds everything of GDAL.
//
// # Conventions
//
// Row and column index cells, X and Y are map units of the grid's CRS, Z is
// metres. A window of heights is a slice in row-major order, the height of
// (row, col) at row*cols+col, NaN where the grid has no height. Heights stand
// at cell centres. Fractional rows and columns count from the centre of the
// first cell: cell (0, 0) has its centre at row 0, column 0. Row 0 is the
// first row of the file; it is the northern edge unless the raster is stored
// south-up, and code that needs a direction takes it from Grid.At.
package dem

import (
	"context"
	"fmt"
	"math"

	"foldshade/geometry"
)

// Grid says where the cells of an elevation grid lie. It holds no heights.
type Grid struct {
	Rows, Cols int
	// Transform maps a cell's corner to map units, in GDAL's order:
	// X = t[0] + col t[1] + row t[2], Y = t[3] + col t[4] + row t[5], where
	// col and row count from the outer corner of the first cell.
	Transform [6]float64
	// CRS is the coordinate reference system as WKT2.
	CRS string
	// Geographic says that the rows are parallels and the columns meridians,
	// as on a grid in longitude and latitude.
	Geographic bool

	stepR, stepC float64 // cells between lattice nodes
	latR, latC   int     // lattice nodes along rows and columns
	nodes        []Local
}

// Local is the ground at a grid position: its place on the ellipsoid, and the
// ground vectors in metres of one step along each axis of the grid.
type Local struct {
	Lon, Lat geometry.Angle
	// ColE, ColN: metres east and north of one column more.
	// RowE, RowN: metres east and north of one row more.
	ColE, ColN, RowE, RowN float64
}

// Locator turns map coordinates into WGS84 longitude and latitude in degrees,
// in place: x becomes the longitude, y the latitude.
type Locator func(x, y []float64) error

// latticeStep is the most cells between two lattice nodes. Between nodes the
// ground vectors are interpolated bilinearly; over 32 cells of 100 m a
// transverse Mercator scale factor departs from linear by (3.2 km)^2 / (8
// R^2) < 4e-8, and a Mercator's by less than 2e-7.
const latticeStep = 32

// NewGrid lays out a grid. The transform must be without rotation, and locate
// must be able to place the nodes of a lattice over the grid, from outer edge
// to outer edge and no farther; where it returns an error the grid is refused
// with it. It is called once, with all points.
func NewGrid(rows, cols int, transform [6]float64, crs string, locate Locator) (*Grid, error) {
	if rows < 1 || cols < 1 {
		return nil, fmt.Errorf("grid of %d x %d cells: needs at least one row and one column", rows, cols)
	}
	g := &Grid{Rows: rows, Cols: cols, Transform: transform, CRS: crs}
	for step := latticeStep; g.latR == 0 || g.latR*g.latC > maxNodes; step *= 2 {
		g.latR, g.stepR = lattice(rows, step)
		g.latC, g.stepC = lattice(cols, step)
	}
	if err := g.fill(locate); err != nil {
		return nil, err
	}
	return g, nil
}

// maxNodes bounds the lattice, 48 bytes a node and 160 more while it is laid
// out; beyond it the nodes stand farther apart. A grid reaches it at 16,000
// cells a side, where cells are smaller than the 100 m of latticeStep.
const maxNodes = 1 << 18

// lattice places nodes at most step cells apart from the first cell to the
// last one.
func lattice(cells, step int) (nodes int, spacing float64) {
	if cells == 1 {
		return 2, 1
	}
	nodes = (cells-2)/step + 2
	return nodes, float64(cells-1) / float64(nodes-1)
}

// fill computes the lattice: five located points a node, the node itself and
// its four neighbours half a cell away, whose differences give the ground
// vectors through the ellipsoid's radii of curvature.
func (g *Grid) fill(locate Locator) error {
	const half = 0.5
	offsets := [5][2]float64{{0, 0}, {0, -half}, {0, half}, {-half, 0}, {half, 0}}
	n := g.latR * g.latC
	x, y := make([]float64, 5*n), make([]float64, 5*n)
	for i := range n {
		row, col := float64(i/g.latC)*g.stepR, float64(i%g.latC)*g.stepC
		for k, o := range offsets {
			x[5*i+k], y[5*i+k] = g.XY(row+o[0], col+o[1])
		}
	}
	if err := locate(x, y); err != nil {
		return err
	}
	g.nodes = make([]Local, n)
	g.Geographic = true
	for i := range n {
		lon, lat := x[5*i:5*i+5], y[5*i:5*i+5]
		phi := geometry.Angle(lat[0]) * geometry.Degree
		east := geometry.PrimeVerticalRadius(phi) * phi.Cos() * float64(geometry.Degree)
		north := geometry.MeridianRadius(phi) * float64(geometry.Degree)
		g.nodes[i] = Local{
			Lon: geometry.Angle(lon[0]) * geometry.Degree, Lat: phi,
			ColE: wrap(lon[2]-lon[1]) * east, ColN: (lat[2] - lat[1]) * north,
			RowE: wrap(lon[4]-lon[3]) * east, RowN: (lat[4] - lat[3]) * north,
		}
		if l := &g.nodes[i]; math.Abs(l.ColN) > parallel*math.Abs(l.ColE) || math.Abs(l.RowE) > parallel*math.Abs(l.RowN) {
			g.Geographic = false
		}
		if !(math.Abs(g.nodes[i].ColE*g.nodes[i].RowN-g.nodes[i].ColN*g.nodes[i].RowE) > 0) {
			row, col := float64(i/g.latC)*g.stepR, float64(i%g.latC)*g.stepC
			return fmt.Errorf("cell size at row %.0f, column %.0f is not a positive number of metres", row, col)
		}
	}
	return nil
}

// parallel is the tangent of the angle by which a row may lean against the
// parallel: over 100,000 cells it stays below a tenth of a cell.
const parallel = 1e-6

// wrap brings a longitude difference into [-180, 180).
func wrap(d float64) float64 { return d - 360*math.Floor((d+180)/360) }

// XY returns the map coordinates of a fractional cell position.
func (g *Grid) XY(row, col float64) (x, y float64) {
	t := &g.Transform
	c, r := col+0.5, row+0.5
	return t[0] + c*t[1] + r*t[2], t[3] + c*t[4] + r*t[5]
}

// RowCol returns the fractional cell position of map coordinates, the inverse
// of XY.
func (g *Grid) RowCol(x, y float64) (row, col float64) {
	t := &g.Transform
	det := t[1]*t[5] - t[2]*t[4]
	dx, dy := x-t[0], y-t[3]
	return (t[1]*dy-t[4]*dx)/det - 0.5, (t[5]*dx-t[2]*dy)/det - 0.5
}

// At returns the ground at a fractional cell position, interpolated
// bilinearly on the lattice and extrapolated outside the grid.
func (g *Grid) At(row, col float64) Local {
	r, u := split(row/g.stepR, g.latR)
	c, v := split(col/g.stepC, g.latC)
	a, b := &g.nodes[r*g.latC+c], &g.nodes[r*g.latC+c+1]
	d, e := &g.nodes[(r+1)*g.latC+c], &g.nodes[(r+1)*g.latC+c+1]
	mix := func(p, q, s, t float64) float64 {
		top := p + v*(q-p)
		return top + u*(s+v*(t-s)-top)
	}
	ang := func(p, q, s, t geometry.Angle) geometry.Angle {
		return geometry.Angle(mix(float64(p), float64(q), float64(s), float64(t)))
	}
	return Local{
		Lon: ang(a.Lon, b.Lon, d.Lon, e.Lon), Lat: ang(a.Lat, b.Lat, d.Lat, e.Lat),
		ColE: mix(a.ColE, b.ColE, d.ColE, e.ColE), ColN: mix(a.ColN, b.ColN, d.ColN, e.ColN),
		RowE: mix(a.RowE, b.RowE, d.RowE, e.RowE), RowN: mix(a.RowN, b.RowN, d.RowN, e.RowN),
	}
}

// Nodes returns how many nodes At's lattice has along the rows and columns, and
// the cells between two of them: At is exact at the nodes, the first of which is
// the first cell.
func (g *Grid) Nodes() (rows, cols int, rowStep, colStep float64) {
	return g.latR, g.latC, g.stepR, g.stepC
}

// split parts a lattice coordinate into the node below and the remainder,
// keeping the node and the next one inside [0, n).
func split(p float64, n int) (node int, rest float64) {
	node = min(max(int(math.Floor(p)), 0), n-2)
	return node, p - float64(node)
}

// Find returns the fractional cell position of a place, the inverse of At, by
// Newton's method; ok is false outside the grid.
func (g *Grid) Find(lon, lat geometry.Angle) (row, col float64, ok bool) {
	row, col = float64(g.Rows-1)/2, float64(g.Cols-1)/2
	for range 20 {
		l := g.At(row, col)
		e := wrap((lon - l.Lon).Degrees()) * float64(geometry.Degree) * geometry.PrimeVerticalRadius(l.Lat) * l.Lat.Cos()
		n := float64(lat-l.Lat) * geometry.MeridianRadius(l.Lat)
		det := l.ColE*l.RowN - l.ColN*l.RowE
		dr, dc := (l.ColE*n-l.ColN*e)/det, (e*l.RowN-n*l.RowE)/det
		row, col = row+dr, col+dc
		if math.Abs(dr)+math.Abs(dc) < 1e-6 {
			break
		}
	}
	ok = row >= 0 && row <= float64(g.Rows-1) && col >= 0 && col <= float64(g.Cols-1)
	return row, col, ok
}

// Window is a rectangle of cells.
type Window struct{ Row, Col, Rows, Cols int }

// Whole returns the window of the whole grid.
func (g *Grid) Whole() Window { return Window{0, 0, g.Rows, g.Cols} }

// Clip returns the part of the window that lies in the grid; it has zero or
// negative size when nothing does.
func (g *Grid) Clip(w Window) Window {
	r0, c0 := max(w.Row, 0), max(w.Col, 0)
	r1, c1 := min(w.Row+w.Rows, g.Rows), min(w.Col+w.Cols, g.Cols)
	return Window{r0, c0, r1 - r0, c1 - c0}
}

// Source delivers the heights of a grid. Read may be called from several
// goroutines.
type Source interface {
	Grid() *Grid
	// Read fills dst, of length w.Rows*w.Cols, with the heights of a window
	// that lies inside the grid: metres, NaN where there is none.
	Read(w Window, dst []float32) error
}

// Memory is a Source that holds all its heights.
type Memory struct {
	Frame   *Grid
	Heights []float32 // row-major, Frame.Rows * Frame.Cols
}

// Grid returns the grid.
func (m *Memory) Grid() *Grid { return m.Frame }

// Read copies a window of the heights. It panics when the window is not
// inside the grid or dst has another length.
func (m *Memory) Read(w Window, dst []float32) error {
	if len(dst) != w.Rows*w.Cols {
		panic("dem: length of dst is not that of the window")
	}
	for r := range w.Rows {
		at := (w.Row+r)*m.Frame.Cols + w.Col
		copy(dst[r*w.Cols:(r+1)*w.Cols], m.Heights[at:at+w.Cols])
	}
	return nil
}

// Range is what a pass over all heights finds.
type Range struct {
	Min, Max       float64 // metres; NaN when there is no height at all
	Valid, Missing int64   // cells
}

// Scan reads the source once, in strips of rows, and returns its range.
func Scan(ctx context.Context, src Source) (Range, error) {
	g := src.Grid()
	r := Range{Min: math.Inf(1), Max: math.Inf(-1)}
	strip := min(g.Rows, max(1, 1<<22/g.Cols))
	buf := make([]float32, strip*g.Cols)
	for row := 0; row < g.Rows; row += strip {
		if err := ctx.Err(); err != nil {
			return Range{}, err
		}
		w := Window{row, 0, min(strip, g.Rows-row), g.Cols}
		part := buf[:w.Rows*w.Cols]
		if err := src.Read(w, part); err != nil {
			return Range{}, err
		}
		r.add(part)
	}
	if r.Valid == 0 {
		r.Min, r.Max = math.NaN(), math.NaN()
	}
	return r, nil
}

func (r *Range) add(heights []float32) {
	lo, hi := float32(math.Inf(1)), float32(math.Inf(-1))
	missing := 0
	for _, h := range heights {
		if h != h {
			missing++
			continue
		}
		lo, hi = min(lo, h), max(hi, h)
	}
	r.Min, r.Max = min(r.Min, float64(lo)), max(r.Max, float64(hi))
	r.Missing += int64(missing)
	r.Valid += int64(len(heights) - missing)
}
