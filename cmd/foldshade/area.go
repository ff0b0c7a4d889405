package main

import (
	"fmt"
	"math"

	"foldshade/dem"
)

// box is an area in the map units of a DEM.
type box struct{ minX, minY, maxX, maxY float64 }

// boxFlag is a flag that takes minx,miny,maxx,maxy.
type boxFlag struct {
	value *box
	given *bool
}

func (b *boxFlag) Set(s string) error {
	parts := list(s)
	if len(parts) != 4 {
		return fmt.Errorf("found %d values; accepted are four, minx,miny,maxx,maxy, in the units of the DEM's CRS", len(parts))
	}
	var v [4]float64
	for i, p := range parts {
		var err error
		if v[i], err = parseDecimal(p); err != nil {
			return fmt.Errorf("value %d, %q: %w; accepted are minx,miny,maxx,maxy, in the units of the DEM's CRS", i+1, p, err)
		}
	}
	if v[0] >= v[2] || v[1] >= v[3] {
		return fmt.Errorf("the box is empty; accepted is minx,miny,maxx,maxy with minx below maxx and miny below maxy")
	}
	*b.value, *b.given = box{v[0], v[1], v[2], v[3]}, true
	return nil
}

func (b *boxFlag) String() string { return "" }

func (b *boxFlag) Type() string { return "box" }

// extent returns the outer edges of a grid in map units.
func extent(g *dem.Grid) box {
	x0, y0 := g.XY(-0.5, -0.5)
	x1, y1 := g.XY(float64(g.Rows)-0.5, float64(g.Cols)-0.5)
	return box{min(x0, x1), min(y0, y1), max(x0, x1), max(y0, y1)}
}

// window returns the cells of a grid whose centres lie in the box, edges
// included.
func (b box) window(g *dem.Grid) (dem.Window, error) {
	r0, c0 := g.RowCol(b.minX, b.minY)
	r1, c1 := g.RowCol(b.maxX, b.maxY)
	e := extent(g)
	if b.maxX < e.minX || b.minX > e.maxX || b.maxY < e.minY || b.minY > e.maxY {
		err := usagef("--area %s: does not overlap the DEM, which covers %s", b, e)
		if b.degrees() && !e.degrees() {
			return dem.Window{}, hint(err, "the numbers look like longitude and latitude; give the box in the units of the DEM's CRS")
		}
		if e.degrees() && !b.degrees() {
			return dem.Window{}, hint(err, "the DEM's CRS counts degrees, and the numbers look like metres")
		}
		if flip := (box{b.minY, b.minX, b.maxY, b.maxX}); flip.overlaps(e) {
			return dem.Window{}, hint(err, "with x and y swapped it would; the order is minx,miny,maxx,maxy")
		}
		return dem.Window{}, err
	}
	from := func(a, b float64) int { return int(math.Ceil(min(a, b))) }
	to := func(a, b float64) int { return int(math.Floor(max(a, b))) }
	// Clamped before the conversion: a box may be far larger than an int.
	limit := func(v float64, n int) float64 { return min(max(v, -1), float64(n)) }
	r0, r1 = limit(r0, g.Rows), limit(r1, g.Rows)
	c0, c1 = limit(c0, g.Cols), limit(c1, g.Cols)
	w := g.Clip(dem.Window{
		Row: from(r0, r1), Col: from(c0, c1),
		Rows: to(r0, r1) - from(r0, r1) + 1, Cols: to(c0, c1) - from(c0, c1) + 1,
	})
	if w.Rows < 1 || w.Cols < 1 {
		return dem.Window{}, hint(usagef("--area %s: holds the centre of no cell", b), "make the box wider than a cell")
	}
	return w, nil
}

// degrees reports whether the box could be one of longitude and latitude.
func (b box) degrees() bool {
	return b.minX >= -180 && b.maxX <= 360 && b.minY >= -90 && b.maxY <= 90
}

func (b box) overlaps(o box) bool {
	return b.maxX >= o.minX && b.minX <= o.maxX && b.maxY >= o.minY && b.minY <= o.maxY
}

func (b box) String() string {
	return fmt.Sprintf("%s,%s,%s,%s", shortest(b.minX), shortest(b.minY), shortest(b.maxX), shortest(b.maxY))
}
