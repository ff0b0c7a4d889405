package picture

import (
	"image"
	"image/color"
	"math"
	"strconv"
	"strings"
	"sync"

	"foldshade/mask"
)

// ground is a map's grid made ready to be drawn north up: where each pixel
// falls and how its surface lies.
type ground struct {
	m            *Map
	width, tall  float64 // ground metres across and down at the grid's centre
	flipX, flipY bool    // columns run to the west, rows to the north
	north        float64 // true north on the sheet, radians clockwise from up
	right, up    []float32
}

// survey measures a map's grid.
func survey(m *Map) *ground {
	g := m.Grid
	at := g.At(float64(g.Rows-1)/2, float64(g.Cols-1)/2)
	col, row := math.Hypot(at.ColE, at.ColN), math.Hypot(at.RowE, at.RowN)
	s := &ground{m: m, width: float64(g.Cols) * col, tall: float64(g.Rows) * row,
		flipX: at.ColE < 0, flipY: at.RowN > 0}
	x, y := at.ColN/col, -at.RowN/row
	if s.flipX {
		x = -x
	}
	if s.flipY {
		y = -y
	}
	s.north = math.Atan2(x, y)
	return s
}

// size returns the pixels of the map that fill a box of at most w by h, at
// the ground's own proportions.
func (s *ground) size(w, h float64) (int, int) {
	scale := min(w/s.width, h/s.tall)
	return max(1, int(math.Round(s.width*scale))), max(1, int(math.Round(s.tall*scale)))
}

// slopes fills the gradient of every cell, metres a metre to the right and
// upwards on the sheet, central differences where both neighbours are there.
func (s *ground) slopes() {
	g, h := s.m.Grid, s.m.Heights
	s.right, s.up = make([]float32, len(h)), make([]float32, len(h))
	signX, signY := float32(1), float32(-1)
	if s.flipX {
		signX = -1
	}
	if s.flipY {
		signY = 1
	}
	diff := func(i, before, after int) float32 {
		a, b, n := h[before], h[after], float32(2)
		if before == i || a != a {
			a, n = h[i], n-1
		}
		if after == i || b != b {
			b, n = h[i], n-1
		}
		if d := (b - a) / n; d == d && n > 0 {
			return d
		}
		return 0
	}
	for row := range g.Rows {
		at := g.At(float64(row), float64(g.Cols-1)/2)
		stepX, stepY := float32(math.Hypot(at.ColE, at.ColN)), float32(math.Hypot(at.RowE, at.RowN))
		for col := range g.Cols {
			i := row*g.Cols + col
			left, right, above, below := i, i, i, i
			if col > 0 {
				left--
			}
			if col < g.Cols-1 {
				right++
			}
			if row > 0 {
				above -= g.Cols
			}
			if row < g.Rows-1 {
				below += g.Cols
			}
			s.right[i] = signX * diff(i, left, right) / stepX
			s.up[i] = signY * diff(i, above, below) / stepY
		}
	}
}

// light is where the hillshade's light stands: north-west, half way up.
var light = [3]float64{-0.5, 0.5, math.Sqrt2 / 2}

// shade is the brightness of a slope: 1 on flat ground, so that plains keep
// the colour of the legend, and hardly more on slopes that face the light, so
// that they do not glare.
func shade(right, up float64) float64 {
	lit := (-right*light[0]-up*light[1]+light[2])/math.Sqrt(1+right*right+up*up) - light[2]
	if lit > 0 {
		return 1 + 0.13*lit
	}
	return max(1+0.75*lit, 0.45)
}

// picture draws the map w by h pixels. Each pixel averages a few samples, so
// that the borders of classes are smooth when cells are large, and large
// grids are thinned without picking single cells.
func (s *ground) picture(w, h int) *image.RGBA {
	if s.right == nil {
		s.slopes()
	}
	g := s.m.Grid
	img := image.NewRGBA(image.Rect(0, 0, w, h))
	perX, perY := float64(g.Cols)/float64(w), float64(g.Rows)/float64(h)
	n := int(min(max(math.Ceil(max(perX, perY)), 2), 4))
	var rows sync.WaitGroup
	for y := range h {
		rows.Go(func() { s.row(img, y, perX, perY, n) })
	}
	rows.Wait()
	return img
}

// row draws one row of pixels, n by n samples each.
func (s *ground) row(img *image.RGBA, y int, perX, perY float64, n int) {
	for x := range img.Rect.Dx() {
		var sum [3]float64
		for k := range n * n {
			px := float64(x) + (float64(k%n)+0.5)/float64(n)
			py := float64(y) + (float64(k/n)+0.5)/float64(n)
			c := s.sample(py*perY-0.5, px*perX-0.5, px, py)
			sum[0], sum[1], sum[2] = sum[0]+c[0], sum[1]+c[1], sum[2]+c[2]
		}
		q := float64(n * n)
		img.SetRGBA(x, y, color.RGBA{level(sum[0] / q), level(sum[1] / q), level(sum[2] / q), 255})
	}
}

func level(v float64) uint8 { return uint8(min(max(v, 0), 255) + 0.5) }

// sample is the colour at a fractional cell position, counted from the
// sheet's upper left, and at pixel (px, py), which steers the texture.
func (s *ground) sample(row, col, px, py float64) [3]float64 {
	g := s.m.Grid
	if s.flipY {
		row = float64(g.Rows-1) - row
	}
	if s.flipX {
		col = float64(g.Cols-1) - col
	}
	row, col = min(max(row, 0), float64(g.Rows-1)), min(max(col, 0), float64(g.Cols-1))
	r, c := int(row), int(col)
	u, v := row-float64(r), col-float64(c)
	down, right := min(r+1, g.Rows-1), min(c+1, g.Cols-1)
	cells := [4]int{r*g.Cols + c, r*g.Cols + right, down*g.Cols + c, down*g.Cols + right}
	weights := [4]float64{(1 - u) * (1 - v), (1 - u) * v, u * (1 - v), u * v}
	var dx, dy float64
	for k, i := range cells {
		dx += weights[k] * float64(s.right[i])
		dy += weights[k] * float64(s.up[i])
	}
	return tone(s.class(cells, weights), shade(dx, dy), px, py)
}

// class is the one with the largest weight among four cells.
func (s *ground) class(cells [4]int, weights [4]float64) mask.Class {
	kinds := [4]mask.Class{s.at(cells[0]), s.at(cells[1]), s.at(cells[2]), s.at(cells[3])}
	if kinds[0] == kinds[1] && kinds[0] == kinds[2] && kinds[0] == kinds[3] {
		return kinds[0]
	}
	best, share := mask.NoData, -1.0
	for _, kind := range kinds {
		sum := 0.0
		for k, other := range kinds {
			if other == kind {
				sum += weights[k]
			}
		}
		if sum > share {
			best, share = kind, sum
		}
	}
	return best
}

// at is the class of a cell: no data in holes, open when there are no
// classes.
func (s *ground) at(i int) mask.Class {
	switch h := s.m.Heights[i]; {
	case h != h:
		return mask.NoData
	case s.m.Classes == nil:
		return mask.Open
	}
	return mask.Class(s.m.Classes[i])
}

// tone mixes a class's colour with the relief and its texture. The relief
// shows through: calm where the ground is open, weaker in dark classes.
func tone(c mask.Class, shade, px, py float64) [3]float64 {
	base, open := &colors[c], &colors[mask.Open]
	if !known[c] {
		stripe := 236 - 22*stroke(px+py, 9, 1.4)
		return [3]float64{stripe, stripe, stripe - 3}
	}
	out := [3]float64{}
	relief := 1 - 0.75*(1-shade)
	cover, dim := 0.86, [3]float64{relief, relief, relief}
	switch c {
	case mask.Open: // warm where it is dark, so that it is not taken for grey undetermined ground
		cover, dim = 1, [3]float64{1 - 0.92*(1-shade), shade, 1 - 1.10*(1-shade)}
	case mask.Undetermined:
		flat := 1 - 0.55*(1-shade)
		dim = [3]float64{flat, flat, flat}
	}
	line := texture(c, px, py)
	for k := range out {
		v := (cover*base[k] + (1-cover)*open[k]) * dim[k]
		if line >= 0 {
			v += line * (255 - v)
		} else {
			v *= 1 + line
		}
		out[k] = v
	}
	return out
}

// texture sets the classes apart where colour is lost, in grey print: strokes
// rising to the right for layover and falling for shadow, light on the two
// dark classes, dark on the two lighter ones; dots for undetermined. Above 0
// lightens, below 0 darkens.
func texture(c mask.Class, px, py float64) float64 {
	rising, falling := px+py, px-py
	switch c.Kind() {
	case mask.ActiveLayover.Kind():
		if c == mask.ActiveLayover {
			return 0.17 * stroke(rising, 8, 1.3)
		}
		return -0.17 * stroke(rising, 8, 1.3)
	case mask.SelfShadow.Kind():
		if c == mask.SelfShadow {
			return 0.19 * stroke(falling, 8, 1.3)
		}
		return -0.19 * stroke(falling, 8, 1.3)
	case mask.Undetermined.Kind():
		return -0.30 * stroke(rising, 8, 2) * stroke(falling, 8, 2)
	}
	return 0
}

// stroke is 1 on lines a period apart and wide pixels broad, 0 between.
func stroke(v, period, wide float64) float64 {
	d := math.Abs(v - period*math.Round(v/period))
	return min(max((wide/2-d/math.Sqrt2)+0.5, 0), 1)
}

// colors are the classes' colours in 0 to 255, by code; known tells the codes
// that have one.
var colors, known = palette()

func palette() (colors [256][3]float64, known [256]bool) {
	for _, c := range mask.Classes {
		if n, err := strconv.ParseUint(strings.TrimPrefix(c.Color, "#"), 16, 32); err == nil {
			colors[c.Code] = [3]float64{float64(n >> 16 & 255), float64(n >> 8 & 255), float64(n & 255)}
			known[c.Code] = true
		}
	}
	return colors, known
}
