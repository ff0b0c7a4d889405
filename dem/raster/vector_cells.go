package raster

import (
	"cmp"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"slices"

	"foldshade/dem"
)

// mostSiteCells is the most cells of one site: 10 km2 of 10 m cells. Larger
// areas are a matter for rasters.
const mostSiteCells = 100_000

// Cells returns the cells of the grid, row and column, that a site of several
// positions takes, in row-major order: the cell under each point, every cell
// that a line enters, the cells whose centres lie in a polygon. A polygon that
// holds no centre takes the cells that its rings enter. Parts outside the grid
// are left out; the list is empty when nothing lies inside. It is an error
// when there are more than mostSiteCells.
func (s *Site) Cells(g *dem.Grid) ([][2]int, error) {
	found := map[[2]int]struct{}{}
	c := &cellCollector{g, found}
	if s.Shape == ShapePolygon {
		if !c.fill(s.Paths) {
			return nil, tooManyCells()
		}
		if len(found) > 0 {
			return c.sorted(), nil
		}
	}
	for _, path := range s.Paths {
		for i, p := range path {
			row, col := g.RowCol(p[0], p[1])
			if i == 0 || s.Shape == ShapePoints {
				c.add(math.Round(row), math.Round(col))
				continue
			}
			before, left := g.RowCol(path[i-1][0], path[i-1][1])
			if !c.line(before, left, row, col) {
				return nil, tooManyCells()
			}
		}
	}
	return c.sorted(), nil
}

func tooManyCells() error {
	return fmt.Errorf("takes more than %d cells of the DEM; compute layers for an area that large", mostSiteCells)
}

// cellCollector gathers cells of a grid.
type cellCollector struct {
	g     *dem.Grid
	found map[[2]int]struct{}
}

// add takes a cell that lies in the grid; it tells whether there is room for
// more.
func (c *cellCollector) add(row, col float64) bool {
	if row >= 0 && col >= 0 && row < float64(c.g.Rows) && col < float64(c.g.Cols) {
		c.found[[2]int{int(row), int(col)}] = struct{}{}
	}
	return len(c.found) <= mostSiteCells
}

func (c *cellCollector) sorted() [][2]int {
	cells := make([][2]int, 0, len(c.found))
	for at := range c.found {
		cells = append(cells, at)
	}
	slices.SortFunc(cells, func(a, b [2]int) int { return cmp.Or(a[0]-b[0], a[1]-b[1]) })
	return cells
}

// line takes every cell that the line between two positions enters.
func (c *cellCollector) line(r0, c0, r1, c1 float64) bool {
	t0, t1, ok := c.clip(r0, c0, r1, c1)
	if !ok {
		return true
	}
	// The borders that the line crosses, as parts of its length.
	cuts := []float64{t0, t1}
	for _, axis := range [2][2]float64{{r0, r1}, {c0, c1}} {
		a, b := axis[0]+t0*(axis[1]-axis[0]), axis[0]+t1*(axis[1]-axis[0])
		for k := math.Ceil(min(a, b) - 0.5); k+0.5 <= max(a, b); k++ {
			if axis[1] != axis[0] {
				cuts = append(cuts, (k+0.5-axis[0])/(axis[1]-axis[0]))
			}
		}
	}
	slices.Sort(cuts)
	for i := 1; i < len(cuts); i++ {
		t := (cuts[i-1] + cuts[i]) / 2
		if !c.add(math.Round(r0+t*(r1-r0)), math.Round(c0+t*(c1-c0))) {
			return false
		}
	}
	return true
}

// clip returns the part of a line that lies in the grid. Source: Liang &
// Barsky, ACM Trans. Graphics 3(1), 1984, 1-22 (from memory).
func (c *cellCollector) clip(r0, c0, r1, c1 float64) (t0, t1 float64, ok bool) {
	t0, t1 = 0, 1
	for _, edge := range [4][2]float64{
		{r0 - r1, r0 + 0.5}, {r1 - r0, float64(c.g.Rows) - 0.5 - r0},
		{c0 - c1, c0 + 0.5}, {c1 - c0, float64(c.g.Cols) - 0.5 - c0},
	} {
		p, q := edge[0], edge[1]
		switch {
		case p == 0 && q < 0:
			return 0, 0, false
		case p < 0:
			t0 = max(t0, q/p)
		case p > 0:
			t1 = min(t1, q/p)
		}
	}
	return t0, t1, t0 <= t1
}

// fill takes the cells whose centres lie in the rings, row by row.
func (c *cellCollector) fill(rings [][][2]float64) bool {
	top, bottom := math.Inf(1), math.Inf(-1)
	cells := make([][][2]float64, len(rings))
	for i, ring := range rings {
		for _, p := range ring {
			row, col := c.g.RowCol(p[0], p[1])
			cells[i] = append(cells[i], [2]float64{row, col})
			top, bottom = min(top, row), max(bottom, row)
		}
	}
	for row := max(math.Ceil(top), 0); row <= min(bottom, float64(c.g.Rows-1)); row++ {
		cols := crossings(cells, row)
		for i := 0; i+1 < len(cols); i += 2 {
			for col := max(math.Ceil(cols[i]), 0); col < cols[i+1] && col < float64(c.g.Cols); col++ {
				if !c.add(row, col) {
					return false
				}
			}
		}
	}
	return true
}

// crossings returns where rings cross a row, in order. A corner on the row
// belongs to the edge below it, so that each crossing counts once.
func crossings(rings [][][2]float64, row float64) []float64 {
	var cols []float64
	for _, ring := range rings {
		for i, p := range ring {
			q := ring[(i+1)%len(ring)]
			if (p[0] <= row) == (q[0] <= row) {
				continue
			}
			cols = append(cols, p[1]+(row-p[0])/(q[0]-p[0])*(q[1]-p[1]))
		}
	}
	slices.Sort(cols)
	return cols
}

// The types of well-known binary geometries that sites may have. Source: OGC
// 06-103r4, Simple Feature Access, table 7; the flags of the extended form are
// common practice.
const (
	wkbPoint      = 1
	wkbLine       = 2
	wkbPolygon    = 3
	wkbCollection = 7
	wkbFlags      = 0xE0000000
)

var errWKB = errors.New("its geometry is cut short")

// wkbReader takes a well-known binary geometry apart.
type wkbReader struct {
	b     []byte
	depth int
	paths [][][2]float64
	kinds [4]int // how many points, lines and polygons
}

// parseWKB returns the horizontal positions of a geometry: the points one
// path each, lines, or rings.
func parseWKB(b []byte) (Shape, [][][2]float64, error) {
	r := &wkbReader{b: b}
	if err := r.geometry(); err != nil {
		return "", nil, err
	}
	points, lines, polygons := r.kinds[wkbPoint], r.kinds[wkbLine], r.kinds[wkbPolygon]
	switch {
	case len(r.paths) == 0:
		return "", nil, errors.New("has an empty geometry")
	case points > 0 && lines+polygons == 0 && points == 1:
		return ShapePoint, r.paths, nil
	case points > 0 && lines+polygons == 0:
		return ShapePoints, r.paths, nil
	case lines > 0 && points+polygons == 0:
		return ShapeLine, r.paths, nil
	case polygons > 0 && points+lines == 0:
		return ShapePolygon, r.paths, nil
	}
	return "", nil, errors.New("mixes points, lines and polygons; give each a feature of its own")
}

func (r *wkbReader) geometry() error {
	if len(r.b) < 5 || r.depth > 32 {
		return errWKB
	}
	var order binary.ByteOrder = binary.LittleEndian
	if r.b[0] == 0 {
		order = binary.BigEndian
	}
	code := order.Uint32(r.b[1:])
	r.b = r.b[5:]
	kind := code &^ wkbFlags % 1000
	dims := 2
	for _, more := range []bool{code&0x80000000 != 0, code&0x40000000 != 0} {
		if more {
			dims++
		}
	}
	switch code &^ wkbFlags / 1000 {
	case 1, 2:
		dims = 3
	case 3:
		dims = 4
	}
	switch {
	case kind == wkbPoint:
		return r.path(order, dims, wkbPoint, 1)
	case kind == wkbLine:
		n, err := r.count(order)
		if err != nil {
			return err
		}
		return r.path(order, dims, wkbLine, n)
	case kind == wkbPolygon:
		return r.rings(order, dims)
	case kind > wkbPolygon && kind <= wkbCollection:
		return r.parts(order)
	}
	return fmt.Errorf("its geometry is of a kind that is not read (well-known binary type %d); give points, lines or polygons with straight edges", kind)
}

func (r *wkbReader) count(order binary.ByteOrder) (int, error) {
	if len(r.b) < 4 {
		return 0, errWKB
	}
	n := order.Uint32(r.b)
	r.b = r.b[4:]
	if int64(n) > int64(len(r.b)) { // every part takes more than a byte
		return 0, errWKB
	}
	return int(n), nil
}

func (r *wkbReader) rings(order binary.ByteOrder, dims int) error {
	n, err := r.count(order)
	for range n {
		var points int
		if points, err = r.count(order); err != nil {
			return err
		}
		if err = r.path(order, dims, wkbPolygon, points); err != nil {
			return err
		}
	}
	return err
}

func (r *wkbReader) parts(order binary.ByteOrder) error {
	n, err := r.count(order)
	if err != nil {
		return err
	}
	r.depth++
	defer func() { r.depth-- }()
	for range n {
		if err := r.geometry(); err != nil {
			return err
		}
	}
	return nil
}

// path reads positions of dims coordinates, of which two are kept. Empty
// points, which are NaN, are left out.
func (r *wkbReader) path(order binary.ByteOrder, dims, kind, n int) error {
	if int64(len(r.b)) < int64(n)*int64(dims)*8 {
		return errWKB
	}
	var path [][2]float64
	for range n {
		x := math.Float64frombits(order.Uint64(r.b))
		y := math.Float64frombits(order.Uint64(r.b[8:]))
		r.b = r.b[8*dims:]
		if x == x && y == y {
			path = append(path, [2]float64{x, y})
		}
	}
	if len(path) > 0 {
		r.paths = append(r.paths, path)
		r.kinds[kind]++
	}
	return nil
}
