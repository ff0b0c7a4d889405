// Package chart draws a look space: a polar chart with the look azimuth around
// and the incidence outward, shaded by the share of the ground that is open.
package chart

import (
	"errors"
	"fmt"
	"image/color"
	"io"
	"math"

	stdfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"
)

// Chart is one look space. Angles are degrees: look azimuths clockwise from true
// north, incidences from the vertical.
type Chart struct {
	Title, Subtitle string // one line each
	// Azimuths and Incidences ascend.
	Azimuths, Incidences []float64
	// Share is the part of the ground that is open, 0 to 1, incidence by
	// incidence within each azimuth.
	Share []float64
	Marks []Mark
}

// Kind is what a mark stands for.
type Kind int

// The kinds of marks.
const (
	Best Kind = iota // the best single look
	Pair             // of the best pair, or a larger set, for coverage
	Two              // of the best looks for measuring in two directions
	User             // a candidate of the user
)

// Mark is a look that is marked, with a line of the legend. Marks of the same
// kind with the same text share the line. Name stands beside the mark of a
// candidate.
type Mark struct {
	Kind               Kind
	Azimuth, Incidence float64
	Name, Text         string
}

// The sheet, in points.
const (
	wide   = 620.0
	edge   = 26.0
	radius = 232.0
	line   = 21.0
)

var (
	paper = color.RGBA{0xfd, 0xfc, 0xf9, 0xff}
	ink   = color.RGBA{0x1f, 0x25, 0x2b, 0xff}
	soft  = color.RGBA{0x5d, 0x66, 0x6e, 0xff}
)

// ramp goes from light to dark in one hue, so that its order stays plain in
// grey and to every eye.
var ramp = []color.RGBA{
	{0xf3, 0xee, 0xdf, 0xff}, {0xc3, 0xd9, 0xcf, 0xff}, {0x84, 0xb9, 0xb6, 0xff},
	{0x43, 0x8d, 0x98, 0xff}, {0x1d, 0x5c, 0x70, 0xff}, {0x0b, 0x2a, 0x3c, 0xff},
}

// shade returns the colour of a value from 0 to 1.
func shade(t float64) color.RGBA {
	t = min(max(t, 0), 1) * float64(len(ramp)-1)
	i := min(int(t), len(ramp)-2)
	t -= float64(i)
	mix := func(a, b uint8) uint8 { return uint8(math.Round(float64(a) + t*(float64(b)-float64(a)))) }
	a, b := ramp[i], ramp[i+1]
	return color.RGBA{mix(a.R, b.R), mix(a.G, b.G), mix(a.B, b.B), 0xff}
}

func (c *Chart) check() error {
	if len(c.Azimuths) == 0 || len(c.Incidences) == 0 || len(c.Share) != len(c.Azimuths)*len(c.Incidences) {
		return errors.New("chart: the shares do not fit the look space")
	}
	return nil
}

// PNG writes the chart as a picture, about 1300 pixels wide. Errors are those of
// w, and of shares that do not fit.
func (c *Chart) PNG(w io.Writer) error {
	if err := c.check(); err != nil {
		return err
	}
	d := newDrawing(c)
	canvas := vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(wide, vg.Length(d.tall)), vgimg.UseDPI(150))}
	d.draw(canvas)
	_, err := canvas.WriteTo(w)
	return err
}

// SVG writes the chart as a scalable drawing. Errors are those of w, and of
// shares that do not fit.
func (c *Chart) SVG(w io.Writer) error {
	if err := c.check(); err != nil {
		return err
	}
	d := newDrawing(c)
	canvas := vgsvg.New(wide, vg.Length(d.tall))
	d.draw(canvas)
	_, err := canvas.WriteTo(w)
	return err
}

// drawing is a chart while it is drawn. Places are points from the lower left
// corner.
type drawing struct {
	*Chart
	vg.Canvas
	tall   float64
	centre vg.Point
	base   float64 // incidence at the centre
	top    float64 // incidence at the rim
	lo, hi float64 // shares at the ends of the ramp
	legend []Mark
}

func newDrawing(c *Chart) *drawing {
	d := &drawing{Chart: c}
	n := len(c.Incidences)
	first, last := c.Incidences[0], c.Incidences[n-1]
	step := d.incidenceStep()
	span := last - first + step
	d.base, d.top = max(first-step/2-0.45*span, 0), last+step/2
	d.lo, d.hi = 1, 0
	for _, s := range c.Share {
		d.lo, d.hi = min(d.lo, s), max(d.hi, s)
	}
	d.lo, d.hi = math.Floor(d.lo*10+1e-9)/10, math.Ceil(d.hi*10-1e-9)/10
	if d.hi <= d.lo {
		d.hi = d.lo + 0.1
	}
	seen := map[string]bool{}
	for _, m := range c.Marks {
		if key := fmt.Sprint(m.Kind, m.Text); !seen[key] {
			seen[key] = true
			d.legend = append(d.legend, m)
		}
	}
	d.tall = 2*edge + 52 + 2*(radius+34) + 62 + line*float64(len(d.legend)+1)
	d.centre = vg.Point{X: wide / 2, Y: vg.Length(d.tall - edge - 52 - radius - 34)}
	return d
}

// incidenceStep is the width of a ring, degrees.
func (d *drawing) incidenceStep() float64 {
	n := len(d.Incidences)
	if n == 1 {
		return 5
	}
	return (d.Incidences[n-1] - d.Incidences[0]) / float64(n-1)
}

// at returns the place of a look.
func (d *drawing) at(azimuth, incidence float64) vg.Point {
	r := radius * (incidence - d.base) / (d.top - d.base)
	s, c := math.Sincos(azimuth * math.Pi / 180)
	return vg.Point{X: d.centre.X + vg.Length(r*s), Y: d.centre.Y + vg.Length(r*c)}
}

func (d *drawing) draw(canvas vg.Canvas) {
	d.Canvas = canvas
	d.box(vg.Point{}, wide, vg.Length(d.tall), paper)
	y := d.tall - edge - 16
	d.say(edge, y, 17, true, ink, 0, d.Title)
	d.say(edge, y-20, 10.5, false, soft, 0, d.Subtitle)
	d.cells()
	d.frame()
	for _, m := range d.Marks {
		if m.Kind == User && m.Name != "" {
			p := d.at(m.Azimuth, m.Incidence)
			d.haloed(float64(p.X)+9, float64(p.Y)-3.5, 9.5, 0, m.Name)
		}
	}
	for _, m := range d.Marks {
		d.mark(m.Kind, d.at(m.Azimuth, m.Incidence))
	}
	d.scale()
	d.notes()
}

// cells shades the looks. Each is a wedge of a ring, up to halfway to its
// neighbours.
func (d *drawing) cells() {
	half := d.incidenceStep() / 2
	for a, azimuth := range d.Azimuths {
		left, right := d.wedge(a)
		for i, inc := range d.Incidences {
			lo, hi := inc-half, inc+half
			if i > 0 {
				lo = (inc + d.Incidences[i-1]) / 2
			}
			if i < len(d.Incidences)-1 {
				hi = (inc + d.Incidences[i+1]) / 2
			}
			c := shade((d.Share[a*len(d.Incidences)+i] - d.lo) / (d.hi - d.lo))
			var p vg.Path
			d.arc(&p, azimuth-left, azimuth+right, max(lo, d.base), true)
			d.arc(&p, azimuth+right, azimuth-left, hi, false)
			p.Close()
			d.SetColor(c)
			d.Fill(p)
			// Over the hairline that smoothing leaves between neighbours.
			d.SetLineWidth(0.4)
			d.Stroke(p)
		}
	}
}

// wedge returns how far the wedge of an azimuth reaches to both sides, degrees.
func (d *drawing) wedge(a int) (left, right float64) {
	n := len(d.Azimuths)
	if n == 1 {
		return 6, 6
	}
	gap := func(i int) float64 { // from azimuth i to the next
		g := d.Azimuths[(i+1)%n] - d.Azimuths[i%n]
		return math.Mod(g+360, 360)
	}
	left, right = gap((a+n-1)%n)/2, gap(a)/2
	// Where the azimuths do not go all around, the ends are as wide as inside.
	least := math.Inf(1)
	for i := range n {
		least = min(least, gap(i))
	}
	if left > least {
		left = least / 2
	}
	if right > least {
		right = least / 2
	}
	return left, right
}

// arc appends an arc of a ring in short straight steps.
func (d *drawing) arc(p *vg.Path, from, to, incidence float64, first bool) {
	n := max(int(math.Abs(to-from)/2), 1)
	for i := range n + 1 {
		at := d.at(from+(to-from)*float64(i)/float64(n), incidence)
		if first && i == 0 {
			p.Move(at)
		} else {
			p.Line(at)
		}
	}
}

// frame draws the rings and spokes with their degrees.
func (d *drawing) frame() {
	step := tick((d.top - d.base) / 5)
	last := d.top - 0.04*(d.top-d.base) // closer to the rim there is no room
	for inc := math.Ceil(d.Incidences[0]/step) * step; inc <= last; inc += step {
		d.ring(inc, 1, color.NRGBA{paper.R, paper.G, paper.B, 0x60})
		d.ring(inc, 0.5, color.NRGBA{ink.R, ink.G, ink.B, 0x90})
	}
	d.ring(d.top, 0.9, ink)
	const out = 6.0
	for a := 0.0; a < 360; a += 30 {
		var p vg.Path
		p.Move(d.at(a, d.top))
		long := out * (d.top - d.base) / radius
		p.Line(d.at(a, d.top+long))
		d.stroke(p, 0.9, ink)
		at := d.at(a, d.top+2.6*long)
		x, y := float64(at.X), float64(at.Y)
		anchor := 0.5 - 0.5*math.Sin(a*math.Pi/180)
		text := fmt.Sprintf("%.0f°", a)
		switch a {
		case 0:
			text = "N 0°"
		case 90:
			text = "E 90°"
		case 180:
			text = "S 180°"
		case 270:
			text = "W 270°"
		}
		d.say(x, y-3.5-3*math.Cos((a+180)*math.Pi/180), 10, math.Mod(a, 90) == 0, ink, anchor, text)
	}
	// A triangle points north at the rim.
	n := d.at(0, d.top)
	var p vg.Path
	p.Move(vg.Point{X: n.X, Y: n.Y + 9})
	p.Line(vg.Point{X: n.X - 5, Y: n.Y})
	p.Line(vg.Point{X: n.X + 5, Y: n.Y})
	p.Close()
	d.SetColor(ink)
	d.Fill(p)
	for inc := math.Ceil(d.Incidences[0]/step) * step; inc <= last; inc += step {
		at := d.at(0, inc)
		d.haloed(float64(at.X), float64(at.Y)-3.2, 9, 0.5, fmt.Sprintf("%g°", inc))
	}
	d.say(float64(d.centre.X), float64(d.centre.Y)+2, 9, false, soft, 0.5, "incidence")
	d.say(float64(d.centre.X), float64(d.centre.Y)-9, 9, false, soft, 0.5, "grows outward")
}

// tick returns the step of degrees at or above a wish.
func tick(wish float64) float64 {
	for _, s := range []float64{1, 2, 5, 10, 15, 20} {
		if s >= wish {
			return s
		}
	}
	return 30
}

func (d *drawing) ring(incidence, width float64, c color.Color) {
	var p vg.Path
	d.arc(&p, 0, 360, incidence, true)
	p.Close()
	d.stroke(p, width, c)
}

func (d *drawing) stroke(p vg.Path, width float64, c color.Color) {
	d.SetLineWidth(vg.Length(width))
	d.SetColor(c)
	d.Stroke(p)
}

// mark draws a mark: outlines of different sizes, so that several show on one
// look, light under dark, so that they show on every shade.
func (d *drawing) mark(k Kind, at vg.Point) {
	corners := func(n int, r, turn float64) vg.Path {
		var p vg.Path
		for i := range n {
			s, c := math.Sincos(turn + 2*math.Pi*float64(i)/float64(n))
			q := vg.Point{X: at.X + vg.Length(r*s), Y: at.Y + vg.Length(r*c)}
			if i == 0 {
				p.Move(q)
			} else {
				p.Line(q)
			}
		}
		p.Close()
		return p
	}
	outline := func(p vg.Path) {
		d.stroke(p, 3.6, paper)
		d.stroke(p, 1.5, ink)
	}
	switch k {
	case Best:
		disc := corners(24, 3.4, 0)
		d.stroke(disc, 3.2, paper)
		d.SetColor(ink)
		d.Fill(disc)
	case Pair:
		outline(corners(4, 9, math.Pi/4))
	case Two:
		outline(corners(4, 10.5, 0))
	case User:
		var p vg.Path
		for _, s := range [2]vg.Length{1, -1} {
			p.Move(vg.Point{X: at.X - 4.5, Y: at.Y - 4.5*s})
			p.Line(vg.Point{X: at.X + 4.5, Y: at.Y + 4.5*s})
		}
		outline(p)
	}
}

// scale draws the ramp with its shares.
func (d *drawing) scale() {
	const long, thick = 300.0, 12.0
	x0, y := (wide-long)/2, float64(d.centre.Y)-radius-34-30
	const n = 60
	for i := range n {
		t := (float64(i) + 0.5) / n
		d.box(vg.Point{X: vg.Length(x0 + long*float64(i)/n), Y: vg.Length(y)}, long/n+0.4, thick, shade(t))
	}
	steps := int(math.Round((d.hi - d.lo) * 10))
	every := (steps + 4) / 5
	for i := 0; i <= steps; i += every {
		x := x0 + long*float64(i)/float64(steps)
		d.say(x, y-12, 9.5, false, ink, 0.5, fmt.Sprintf("%.0f %%", 100*d.lo+10*float64(i)))
	}
	d.say(wide/2, y+thick+5, 9.5, false, ink, 0.5, "share of the cells that are open")
}

// notes writes the legend of the marks, and what the azimuth is.
func (d *drawing) notes() {
	y := edge + line*float64(len(d.legend)) - 4
	for _, m := range d.legend {
		d.mark(m.Kind, vg.Point{X: edge + 12, Y: vg.Length(y + 3.5)})
		d.say(edge+32, y, 10.5, false, ink, 0, m.Text)
		y -= line
	}
	d.say(edge, y+2, 9.5, false, soft, 0, "Azimuth: the direction in which the radar looks, clockwise from true north. Incidence: from the vertical.")
}

func (d *drawing) box(at vg.Point, w, h vg.Length, c color.Color) {
	var p vg.Path
	p.Move(at)
	p.Line(vg.Point{X: at.X + w, Y: at.Y})
	p.Line(vg.Point{X: at.X + w, Y: at.Y + h})
	p.Line(vg.Point{X: at.X, Y: at.Y + h})
	p.Close()
	d.SetColor(c)
	d.Fill(p)
}

var fonts = font.NewCache(liberation.Collection())

// say writes a text; anchor is the part of its width that lies left of x.
func (d *drawing) say(x, y, size float64, bold bool, c color.Color, anchor float64, text string) {
	f := font.Font{Typeface: "Liberation", Variant: "Sans"}
	if bold {
		f.Weight = stdfont.WeightBold
	}
	face := fonts.Lookup(f, vg.Length(size))
	text = fit(face, text, wide-2*edge)
	d.SetColor(c)
	d.FillString(face, vg.Point{X: vg.Length(x) - face.Width(text)*vg.Length(anchor), Y: vg.Length(y)}, text)
}

// fit shortens a text with an ellipsis until it is no wider than the limit.
func fit(face font.Face, text string, limit vg.Length) string {
	if face.Width(text) <= limit {
		return text
	}
	runes := []rune(text)
	for len(runes) > 0 && face.Width(string(runes)+"…") > limit {
		runes = runes[:len(runes)-1]
	}
	return string(runes) + "…"
}

// haloed writes a text on a light ground of its own.
func (d *drawing) haloed(x, y, size, anchor float64, text string) {
	face := fonts.Lookup(font.Font{Typeface: "Liberation", Variant: "Sans"}, vg.Length(size))
	w := face.Width(text)
	d.box(vg.Point{X: vg.Length(x) - w*vg.Length(anchor) - 2, Y: vg.Length(y - 2)}, w+4, vg.Length(size+1.5),
		color.NRGBA{paper.R, paper.G, paper.B, 0xd0})
	d.say(x, y, size, false, ink, anchor, text)
}
