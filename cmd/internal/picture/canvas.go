package picture

import (
	"image"
	"image/color"
	"image/draw"
	"math"
	"sort"
	"sync"

	"golang.org/x/image/font"
	"golang.org/x/image/font/gofont/gobold"
	"golang.org/x/image/font/gofont/goregular"
	"golang.org/x/image/font/opentype"
	"golang.org/x/image/math/fixed"
	"golang.org/x/image/vector"
)

// Inks of the sheet.
var (
	paper = color.RGBA{0xfd, 0xfc, 0xf9, 0xff}
	ink   = color.RGBA{0x1f, 0x25, 0x2b, 0xff}
	soft  = color.RGBA{0x5d, 0x66, 0x6e, 0xff}
	faint = color.RGBA{0xc9, 0xcb, 0xc8, 0xff}
	beam  = color.RGBA{0xb4, 0x3a, 0x1e, 0xff}
)

// style is a type size in pixels, regular or bold.
type style struct {
	size float64
	bold bool
}

// The sheet's type sizes.
var (
	titleType   = style{28, true}
	headType    = style{19, true}
	textType    = style{16, false}
	strongType  = style{16, true}
	siteType    = style{15, true}
	captionType = style{13, false}
)

var (
	facesLock sync.Mutex
	faces     = map[style]font.Face{}
)

// face returns the font of a style. The fonts are compiled in; a failure to
// parse them is a defect of the build.
func (s style) face() font.Face {
	if f := faces[s]; f != nil {
		return f
	}
	data := goregular.TTF
	if s.bold {
		data = gobold.TTF
	}
	parsed, err := opentype.Parse(data)
	if err == nil {
		faces[s], err = opentype.NewFace(parsed, &opentype.FaceOptions{Size: s.size, DPI: 72})
	}
	if err != nil {
		panic(err)
	}
	return faces[s]
}

// width is the advance of a text in pixels.
func (s style) width(text string) float64 {
	facesLock.Lock()
	defer facesLock.Unlock()
	return float64(font.MeasureString(s.face(), text)) / 64
}

// ascent and descent bound every glyph of the Go fonts, in pixels.
func (s style) ascent() float64  { return 0.95 * s.size }
func (s style) descent() float64 { return 0.25 * s.size }

// fit shortens a text with an ellipsis until it is no wider than the limit.
func (s style) fit(text string, limit float64) string {
	if s.width(text) <= limit {
		return text
	}
	runes := []rune(text)
	cut := func(n int) string { return string(runes[:n]) + "…" }
	tooLong := sort.Search(len(runes), func(n int) bool { return s.width(cut(n)) > limit })
	if tooLong == 0 {
		return ""
	}
	return cut(tooLong - 1)
}

// spot is a place on the sheet in pixels, y downwards.
type spot struct{ x, y float64 }

// box is a rectangle on the sheet.
type box struct{ x0, y0, x1, y1 float64 }

func (b box) w() float64 { return b.x1 - b.x0 }
func (b box) h() float64 { return b.y1 - b.y0 }

func (b box) contains(o box) bool {
	return o.x0 >= b.x0 && o.y0 >= b.y0 && o.x1 <= b.x1 && o.y1 <= b.y1
}

func (b box) overlaps(o box) bool {
	return b.x0 < o.x1 && o.x0 < b.x1 && b.y0 < o.y1 && o.y0 < b.y1
}

// grow widens a box by d on all sides.
func (b box) grow(d float64) box { return box{b.x0 - d, b.y0 - d, b.x1 + d, b.y1 + d} }

// canvas is the sheet while it is drawn.
type canvas struct{ *image.RGBA }

// fill paints closed outlines; where two overlap with opposite senses of
// rotation they leave a hole.
func (c canvas) fill(ink color.Color, outlines ...[]spot) {
	area := image.Rectangle{}
	for _, line := range outlines {
		for _, p := range line {
			if math.IsNaN(p.x + p.y) {
				return
			}
			x, y := int(math.Floor(p.x)), int(math.Floor(p.y))
			area = area.Union(image.Rect(x, y, x+2, y+2))
		}
	}
	r := vector.NewRasterizer(area.Dx(), area.Dy())
	for _, line := range outlines {
		for k, p := range line {
			x, y := float32(p.x-float64(area.Min.X)), float32(p.y-float64(area.Min.Y))
			if k == 0 {
				r.MoveTo(x, y)
				continue
			}
			r.LineTo(x, y)
		}
		r.ClosePath()
	}
	shape := image.NewAlpha(area)
	r.Draw(shape, area, image.Opaque, image.Point{})
	draw.DrawMask(c.RGBA, area, image.NewUniform(ink), image.Point{}, shape, area.Min, draw.Over)
}

func (c canvas) rect(ink color.Color, b box) {
	c.fill(ink, []spot{{b.x0, b.y0}, {b.x1, b.y0}, {b.x1, b.y1}, {b.x0, b.y1}})
}

// frame draws the border of a box, inside its edge when wide is negative.
func (c canvas) frame(ink color.Color, b box, wide float64) {
	o := b.grow(wide)
	c.fill(ink,
		[]spot{{o.x0, o.y0}, {o.x1, o.y0}, {o.x1, o.y1}, {o.x0, o.y1}},
		[]spot{{b.x0, b.y0}, {b.x0, b.y1}, {b.x1, b.y1}, {b.x1, b.y0}})
}

// line draws a straight stroke with square ends.
func (c canvas) line(ink color.Color, a, b spot, wide float64) {
	long := math.Hypot(b.x-a.x, b.y-a.y)
	if long == 0 {
		return
	}
	nx, ny := -(b.y-a.y)/long*wide/2, (b.x-a.x)/long*wide/2
	c.fill(ink, []spot{{a.x + nx, a.y + ny}, {b.x + nx, b.y + ny}, {b.x - nx, b.y - ny}, {a.x - nx, a.y - ny}})
}

// arrow draws a stroke that ends in a head at b.
func (c canvas) arrow(ink color.Color, a, b spot, wide, head float64) {
	long := math.Hypot(b.x-a.x, b.y-a.y)
	if long == 0 {
		return
	}
	ux, uy := (b.x-a.x)/long, (b.y-a.y)/long
	neck := spot{b.x - ux*head, b.y - uy*head}
	c.line(ink, a, spot{neck.x + ux, neck.y + uy}, wide)
	half := head * 0.46
	c.fill(ink, []spot{b, {neck.x - uy*half, neck.y + ux*half}, {neck.x + uy*half, neck.y - ux*half}})
}

// arc lists points of a circle, angles clockwise from up in radians.
func arc(at spot, radius, from, to float64) []spot {
	n := max(8, int(math.Abs(to-from)*radius/2))
	line := make([]spot, 0, n+1)
	for k := range n + 1 {
		a := from + (to-from)*float64(k)/float64(n)
		line = append(line, spot{at.x + radius*math.Sin(a), at.y - radius*math.Cos(a)})
	}
	return line
}

func (c canvas) disc(ink color.Color, at spot, radius float64) {
	c.fill(ink, arc(at, radius, 0, 2*math.Pi))
}

// curve strokes part of a circle.
func (c canvas) curve(ink color.Color, at spot, radius, from, to, wide float64) {
	outer := arc(at, radius+wide/2, from, to)
	inner := arc(at, radius-wide/2, to, from)
	c.fill(ink, append(outer, inner...))
}

// text writes a line whose baseline starts at a spot. A halo of the paper's
// colour keeps names readable on a map.
func (c canvas) text(s style, ink color.Color, at spot, text string, halo float64) {
	facesLock.Lock()
	defer facesLock.Unlock()
	face := s.face()
	wide := float64(font.MeasureString(face, text)) / 64
	area := image.Rect(int(at.x-halo)-2, int(at.y-s.ascent()-halo)-1, int(at.x+wide+halo)+3, int(at.y+s.descent()+halo)+2).Intersect(c.Bounds())
	glyphs := image.NewAlpha(area)
	d := font.Drawer{Dst: glyphs, Src: image.Opaque, Face: face,
		Dot: fixed.Point26_6{X: fixed.Int26_6(at.x * 64), Y: fixed.Int26_6(at.y * 64)}}
	d.DrawString(text)
	if halo > 0 {
		draw.DrawMask(c.RGBA, area, image.NewUniform(paper), image.Point{}, spread(glyphs, area, halo), area.Min, draw.Over)
	}
	draw.DrawMask(c.RGBA, area, image.NewUniform(ink), image.Point{}, glyphs, area.Min, draw.Over)
}

// spread widens a mask by a radius with a soft edge of one pixel.
func spread(mask *image.Alpha, area image.Rectangle, radius float64) *image.Alpha {
	out := image.NewAlpha(area)
	n := int(math.Ceil(radius))
	for y := area.Min.Y; y < area.Max.Y; y++ {
		for x := area.Min.X; x < area.Max.X; x++ {
			a := uint8(0)
			for dy := -n; dy <= n; dy++ {
				for dx := -n; dx <= n; dx++ {
					edge := min(max(radius+0.5-math.Hypot(float64(dx), float64(dy)), 0), 1)
					a = max(a, uint8(edge*float64(mask.AlphaAt(x+dx, y+dy).A)))
				}
			}
			out.SetAlpha(x, y, color.Alpha{uint8(float64(a) * 0.96)})
		}
	}
	return out
}
