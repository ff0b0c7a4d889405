package picture

import (
	"fmt"
	"image"
	"image/draw"
	"math"
	"strings"

	"foldshade/geometry"
	"foldshade/mask"
)

// sheet is a finished layout: where everything stands, before anything is
// drawn. Tests look at it.
type sheet struct {
	w, h   int
	maps   []placed
	texts  []words
	shapes []func(canvas) // legend swatches, arrows, scale bar
}

// placed is a map on the sheet.
type placed struct {
	ground *ground
	frame  box
	labels []label
}

// words is a line of text on the sheet.
type words struct {
	style style
	soft  bool
	at    spot
	text  string
	box   box
}

// draw paints the sheet.
func (s *sheet) draw() image.Image {
	c := canvas{image.NewRGBA(image.Rect(0, 0, s.w, s.h))}
	draw.Draw(c.RGBA, c.Bounds(), image.NewUniform(paper), image.Point{}, draw.Src)
	for _, m := range s.maps {
		b := image.Rect(int(m.frame.x0), int(m.frame.y0), int(m.frame.x1), int(m.frame.y1))
		draw.Draw(c.RGBA, b, m.ground.picture(b.Dx(), b.Dy()), image.Point{}, draw.Src)
		c.frame(ink, m.frame, 1.2)
		c.labels(m.labels)
	}
	for _, shape := range s.shapes {
		shape(c)
	}
	for _, t := range s.texts {
		color := ink
		if t.soft {
			color = soft
		}
		c.text(t.style, color, t.at, t.text, 0)
	}
	return c.RGBA
}

// say adds a line of text that starts at a spot of its baseline, or ends
// there when anchor is 1, or is centred on it when anchor is 0.5.
func (s *sheet) say(style style, isSoft bool, at spot, anchor float64, text string) {
	if text == "" {
		return
	}
	wide := style.width(text)
	at.x -= anchor * wide
	s.texts = append(s.texts, words{style, isSoft, at, text, box{at.x, at.y - style.ascent(), at.x + wide, at.y + style.descent()}})
}

func (s *sheet) shape(f func(canvas)) { s.shapes = append(s.shapes, f) }

// Measures of the sheet in pixels.
const (
	edge   = 44.0  // margin of the sheet
	gutter = 40.0  // between map and column, and between maps
	column = 304.0 // legend column beside a single map
	rowGap = 31.0  // from one legend row to the next
)

// layoutMap lays out one map with its legend in a column at the right.
func layoutMap(m Map) *sheet {
	g := survey(&m)
	w, h := g.size(1240, 1000)
	wide, tall := max(float64(w), 420), float64(h)
	s := &sheet{}
	y := edge + titleType.ascent()
	full := wide + gutter + column
	s.say(titleType, false, spot{edge, y}, 0, titleType.fit(m.title(), full))
	if m.Subtitle != "" {
		y += 29
		s.say(textType, true, spot{edge, y}, 0, textType.fit(m.Subtitle, full))
	}
	top := math.Round(y + 42)
	s.addMap(g, box{edge, top, edge + float64(w), top + float64(h)})
	s.corners(g, s.maps[0].frame, wide)
	x := math.Round(edge + wide + gutter)
	bottom := s.dials(m.Look, g.north, x, top)
	bottom = s.legend(count(&m), x, x+column, bottom+46)
	bottom = s.scale(g.width/float64(w), x, x+column, bottom+36)
	s.w = int(math.Ceil(edge + full + edge))
	s.h = int(math.Ceil(max(top+tall+20, bottom) + edge))
	return s
}

// addMap puts a map into its frame, with the names of its sites.
func (s *sheet) addMap(g *ground, frame box) {
	var names []string
	var marks []spot
	for _, site := range g.m.Sites {
		at, ok := g.pixel(site.X, site.Y, frame)
		if ok {
			names, marks = append(names, site.Name), append(marks, at)
		}
	}
	s.maps = append(s.maps, placed{g, frame, place(names, marks, frame)})
}

// pixel is the place of map coordinates on the sheet; ok is false outside the
// map or within a mark's width of its border.
func (g *ground) pixel(x, y float64, frame box) (at spot, ok bool) {
	row, col := g.m.Grid.RowCol(x, y)
	if g.flipY {
		row = float64(g.m.Grid.Rows-1) - row
	}
	if g.flipX {
		col = float64(g.m.Grid.Cols-1) - col
	}
	at.x = frame.x0 + (col+0.5)/float64(g.m.Grid.Cols)*frame.w()
	at.y = frame.y0 + (row+0.5)/float64(g.m.Grid.Rows)*frame.h()
	mark := box{at.x, at.y, at.x, at.y}.grow(markRadius + 2)
	return at, frame.contains(mark)
}

// corners writes the longitude and latitude of the map's corners, two where
// there is no room for four.
func (s *sheet) corners(g *ground, frame box, room float64) {
	grid := g.m.Grid
	corner := func(down, right float64) string {
		row, col := down*float64(grid.Rows)-0.5, right*float64(grid.Cols)-0.5
		if g.flipY {
			row = float64(grid.Rows-1) - row
		}
		if g.flipX {
			col = float64(grid.Cols-1) - col
		}
		at := grid.At(row, col)
		return degrees(at.Lat, "N", "S") + "  " + degrees(at.Lon, "E", "W")
	}
	above, below := frame.y0-9, frame.y1+9+captionType.ascent()
	s.say(captionType, true, spot{frame.x0, above}, 0, corner(0, 0))
	if frame.w() < 380 {
		s.say(captionType, true, spot{frame.x0, below}, 0, captionType.fit(corner(1, 1), room))
		return
	}
	s.say(captionType, true, spot{frame.x1, above}, 1, corner(0, 1))
	s.say(captionType, true, spot{frame.x0, below}, 0, corner(1, 0))
	s.say(captionType, true, spot{frame.x1, below}, 1, corner(1, 1))
}

func degrees(a geometry.Angle, positive, negative string) string {
	side := positive
	if a < 0 {
		side = negative
	}
	return fmt.Sprintf("%.4f° %s", math.Abs(a.Degrees()), side)
}

// dials draws the look from above and from the side, with a line of words,
// and returns the lower end.
func (s *sheet) dials(l Look, north, x, y float64) float64 {
	const radius = 56
	left, right := spot{x + radius + 14, y + radius + 22}, spot{x + column - 108, y + radius + 22}
	s.compass(l, north, left, radius)
	if l.Incidence.Given() {
		s.side(l.Incidence, right, radius)
	}
	base := left.y + radius + 34
	s.say(captionType, true, spot{left.x, base}, 0.5, "from above")
	if l.Incidence.Given() {
		s.say(captionType, true, spot{right.x + 40, base}, 0.5, "from the side")
	}
	base += 6
	for _, line := range l.words() {
		base += 26
		s.say(textType, false, spot{x, base}, 0, textType.fit(line, column))
	}
	return base
}

// words describes a look in short lines.
func (l Look) words() []string {
	var lines []string
	if l.Azimuth.Given() {
		lines = append(lines, fmt.Sprintf("Looks towards %s (%s)", whole(l.Azimuth.Turn()), wind(l.Azimuth)))
	}
	if l.Incidence.Given() {
		lines = append(lines, fmt.Sprintf("Incidence %s", whole(l.Incidence)))
	}
	return lines
}

// whole writes an angle in degrees, with one decimal where it has one.
func whole(a geometry.Angle) string {
	return strings.TrimSuffix(fmt.Sprintf("%.1f", a.Degrees()), ".0") + "°"
}

// wind names the nearest of sixteen directions.
func wind(a geometry.Angle) string {
	names := strings.Fields("north north-north-east north-east east-north-east east east-south-east south-east south-south-east south south-south-west south-west west-south-west west west-north-west north-west north-north-west")
	return names[int(math.Round(a.Turn().Degrees()/22.5))%16]
}

// compass draws a dial with true north and the look's arrow across it.
func (s *sheet) compass(l Look, north float64, at spot, radius float64) {
	turn := func(a, r float64) spot { return spot{at.x + r*math.Sin(a), at.y - r*math.Cos(a)} }
	s.shape(func(c canvas) {
		c.curve(faint, at, radius, 0, 2*math.Pi, 1.4)
		for k := range 36 {
			a, long := north+float64(k)*math.Pi/18, 4.0
			if k%9 == 0 {
				long = 9
			}
			c.line(faint, turn(a, radius-long), turn(a, radius), 1.4)
		}
		c.fill(ink, []spot{turn(north, radius+3), turn(north-0.13, radius-13), turn(north+0.13, radius-13)})
		if l.Azimuth.Given() {
			a := north + float64(l.Azimuth)
			c.arrow(beam, turn(a+math.Pi, radius-12), turn(a, radius-12), 5, 20)
			c.disc(beam, turn(a+math.Pi, radius-12), 6.5)
			c.disc(paper, turn(a+math.Pi, radius-12), 2.8)
		}
	})
	s.say(strongType, false, spot{turn(north, radius+13).x, turn(north, radius+13).y + 6}, 0.5, "N")
}

// side draws the ray that meets the ground under the incidence, with the
// vertical and the angle between them.
func (s *sheet) side(incidence geometry.Angle, at spot, radius float64) {
	foot := spot{at.x + 78, at.y + radius}
	a := -float64(incidence)
	long := 1.75 * radius
	from := spot{foot.x + long*math.Sin(a), foot.y - long*math.Cos(a)}
	s.shape(func(c canvas) {
		c.line(ink, spot{foot.x - 104, foot.y + 1}, spot{foot.x + 26, foot.y + 1}, 2)
		for k := range 13 {
			x := foot.x - 102 + 10*float64(k)
			c.line(faint, spot{x + 6, foot.y + 3}, spot{x, foot.y + 9}, 1.2)
		}
		for d := 0.0; d < long; d += 8 {
			c.line(soft, spot{foot.x, foot.y - d}, spot{foot.x, foot.y - min(d+4, long)}, 1.2)
		}
		c.curve(soft, foot, 36, a, 0, 1.4)
		c.arrow(beam, from, foot, 4, 17)
		c.disc(beam, from, 6.5)
		c.disc(paper, from, 2.8)
	})
	s.say(captionType, false, spot{foot.x + 7, foot.y - 30}, 0, whole(incidence))
}

// group is a row of the legend: the classes that share a colour.
type group struct {
	title string
	codes []mask.Class
}

// groups are the legend's rows, no data last.
func groups() []group {
	var rows []group
	byColor := map[string]int{}
	for _, c := range append(mask.Classes[1:len(mask.Classes):len(mask.Classes)], mask.Classes[0]) {
		if k, ok := byColor[c.Color]; ok {
			rows[k].codes = append(rows[k].codes, c.Code)
			continue
		}
		byColor[c.Color] = len(rows)
		title, _, _ := strings.Cut(c.Title, ",")
		rows = append(rows, group{title, []mask.Class{c.Code}})
	}
	return rows
}

// tally counts a map's cells by class.
type tally struct {
	cells [256]int // by class code
	known int      // all but no data
	plain bool
}

func count(m *Map) tally {
	t := tally{plain: m.Classes == nil}
	g := ground{m: m}
	for i := range m.Heights {
		c := g.at(i)
		t.cells[c]++
		if c != mask.NoData {
			t.known++
		}
	}
	return t
}

// part is the share of a group in the cells with data, 0 to 1. No data itself
// is counted against all cells.
func (t tally) part(g group) float64 {
	n, all := 0, t.known
	for _, c := range g.codes {
		n += t.cells[c]
		if c == mask.NoData {
			all += t.cells[c]
		}
	}
	return float64(n) / float64(max(all, 1))
}

// share is the part in words, never rounded to all or nothing.
func (t tally) share(g group) string {
	switch p := 100 * t.part(g); {
	case p == 0:
		return "–"
	case p < 0.1:
		return "< 0.1 %"
	case p > 99.9 && p < 100:
		return "> 99.9 %"
	default:
		return fmt.Sprintf("%.1f %%", p)
	}
}

// shown says whether a legend row is worth its place: compressed,
// undetermined and no data only where some map has them.
func shown(g group, tallies []tally) bool {
	plain := true
	for _, t := range tallies {
		plain = plain && t.plain
		for _, c := range g.codes {
			if t.cells[c] > 0 {
				return true
			}
		}
	}
	kind := g.codes[0].Kind()
	return !plain && (kind == mask.Open.Kind() || kind == mask.ActiveLayover.Kind() || kind == mask.SelfShadow.Kind())
}

// legend lists the classes with a swatch, the title and the share, and
// returns the lower end.
func (s *sheet) legend(t tally, x0, x1, y float64) float64 {
	s.say(strongType, false, spot{x0, y}, 0, "What the radar sees")
	s.say(captionType, true, spot{x1, y}, 1, "share of cells")
	for _, g := range groups() {
		if !shown(g, []tally{t}) {
			continue
		}
		y += rowGap
		s.swatch(g.codes[0], box{x0, y - 17, x0 + 34, y + 5})
		s.say(textType, false, spot{x0 + 48, y}, 0, g.title)
		s.say(textType, false, spot{x1, y}, 1, t.share(g))
	}
	return y
}

// swatch is a piece of a class as the map shows it on flat ground.
func (s *sheet) swatch(code mask.Class, b box) {
	s.shape(func(c canvas) {
		x0, y0 := int(math.Round(b.x0)), int(math.Round(b.y0))
		for y := y0; y < y0+int(b.h()); y++ {
			for x := x0; x < x0+int(b.w()); x++ {
				t := tone(code, 1, float64(x)+0.5, float64(y)+0.5)
				c.SetRGBA(x, y, rgba(t))
			}
		}
		c.frame(soft, box{float64(x0), float64(y0), float64(x0) + math.Floor(b.w()), float64(y0) + math.Floor(b.h())}, 1)
	})
}

// scale draws a bar of a round length that fits between x0 and x1, and
// returns its lower end.
func (s *sheet) scale(metresPerPixel, x0, x1, y float64) float64 {
	metres := round(metresPerPixel * (x1 - x0 - 60))
	long := metres / metresPerPixel
	bar := box{x0 + 1, y, x0 + 1 + long, y + 7}
	s.shape(func(c canvas) {
		c.rect(paper, bar)
		for k := range 4 {
			if k%2 == 0 {
				c.rect(ink, box{bar.x0 + long*float64(k)/4, bar.y0, bar.x0 + long*float64(k+1)/4, bar.y1})
			}
		}
		c.frame(ink, bar, 1)
	})
	base := bar.y1 + 8 + captionType.ascent()
	s.say(captionType, true, spot{x0, base}, 0, "0")
	s.say(captionType, true, spot{bar.x1, base}, 0.5, distance(metres))
	return base
}

// round is the largest of 1, 2 and 5 times a power of ten up to a length.
func round(metres float64) float64 {
	if !(metres > 0) {
		return 1
	}
	power := math.Pow(10, math.Floor(math.Log10(metres)))
	for _, lead := range []float64{5, 2} {
		if lead*power <= metres {
			return lead * power
		}
	}
	return power
}

func distance(metres float64) string {
	if metres >= 1000 {
		return fmt.Sprintf("%g km", metres/1000)
	}
	return fmt.Sprintf("%g m", metres)
}
