package sheet

import (
	"encoding/base64"
	"fmt"
	"html/template"
	"math"
	"strings"
)

// Map is the ground under one look with its classes.
type Map struct {
	Look int
	PNG  []byte
	// Width and Height are the picture's pixels; MetresPerPixel is its scale,
	// North true north in degrees clockwise from up.
	Width, Height         int
	MetresPerPixel, North float64
	// Marks are the pixels of the sites, NaN for those off the map; Outlines
	// the lines and polygons among them.
	Marks    [][2]float64
	Outlines []Outline
}

// Outline is the shape of a site that is no point.
type Outline struct {
	Site   int
	Closed bool
	Path   [][2]float64
}

// mapWidth is the width of a map in the units of its own drawing.
const mapWidth = 400.0

func (m *Map) draw(s *Sheet) template.HTML {
	d := &drawing{}
	scale := mapWidth / float64(m.Width)
	tall := float64(m.Height) * scale
	d.add(`<image href="data:image/png;base64,%s" x="0" y="0" width="%g" height="%.2f" preserveAspectRatio="none"/>`,
		base64.StdEncoding.EncodeToString(m.PNG), mapWidth, tall)
	for _, o := range m.Outlines {
		var points [][2]float64
		for _, p := range o.Path {
			points = append(points, [2]float64{p[0] * scale, p[1] * scale})
		}
		path := polyline(points)
		if o.Closed {
			path = polygon(points)
		}
		d.add(`<path d="%s" class="outline-back"/><path d="%s" class="outline"/>`, path, path)
	}
	d.add(`<path d="M0.5 0.5H%gV%.1fH0.5Z" class="frame"/>`, mapWidth-0.5, tall-0.5)
	m.scaleBar(d, scale, tall)
	d.arrow(m.North)
	m.sites(d, s, scale, tall)
	return d.svg(mapWidth, tall, "map", m.words(s))
}

// sites puts the numbers of the sites on the map. Where they would cover each
// other they move apart, with a line to their place.
func (m *Map) sites(d *drawing, s *Sheet, scale, tall float64) {
	var taken [][2]float64
	for i, p := range m.Marks {
		at := [2]float64{p[0] * scale, p[1] * scale}
		if math.IsNaN(at[0]+at[1]) || at[0] < 0 || at[1] < 0 || at[0] > mapWidth || at[1] > tall || i >= len(s.Sites) {
			continue
		}
		spot := inside(at, tall)
		for k := 0; k < 32 && crowded(spot, taken, 19); k++ {
			sin, cos := math.Sincos(float64(k%8) * math.Pi / 4)
			reach := 20 * float64(1+k/8)
			spot = inside([2]float64{at[0] + reach*sin, at[1] - reach*cos}, tall)
		}
		taken = append(taken, spot)
		if spot != at {
			d.add(`<path d="M%.1f %.1fL%.1f %.1f" class="lead"/><circle cx="%.1f" cy="%.1f" r="2.2" class="dot"/>`, at[0], at[1], spot[0], spot[1], at[0], at[1])
		}
		style := verdictClass(s.Sites[i].Pairs[m.Look].Verdict)
		d.add(`<circle cx="%.1f" cy="%.1f" r="9.5" class="mark %s"/>`, spot[0], spot[1], style)
		d.text(spot[0], spot[1]+4, "marktext "+style, "middle", fmt.Sprint(i+1))
	}
}

// inside moves a mark so that it is seen whole.
func inside(at [2]float64, tall float64) [2]float64 {
	const edge = 11
	return [2]float64{min(max(at[0], edge), mapWidth-edge), min(max(at[1], edge), tall-edge)}
}

// scaleBar draws a round length at the lower left.
func (m *Map) scaleBar(d *drawing, scale, tall float64) {
	perUnit := m.MetresPerPixel / scale
	if !(perUnit > 0) {
		return
	}
	length := roundStep(perUnit*mapWidth*0.35, 1)
	if length > perUnit*mapWidth*0.5 {
		length = roundStep(perUnit*mapWidth*0.15, 1)
	}
	wide, text := length/perUnit, fmt.Sprintf("%g m", length)
	if length >= 1000 {
		text = fmt.Sprintf("%g km", length/1000)
	}
	d.add(`<rect x="6" y="%.1f" width="%.1f" height="24" rx="3" class="plate"/>`, tall-30, max(wide, 40)+16)
	d.add(`<path d="M14 %.1fv5h%.1fv-5" class="bar"/>`, tall-15, wide)
	d.text(14+wide/2, tall-18, "plate-text", "middle", text)
}

// arrow points to true north, at the upper right.
func (d *drawing) arrow(north float64) {
	d.add(`<g transform="translate(%g 24)"><circle r="16" class="plate"/><g transform="rotate(%.2f)"><path d="M0 -13L4.5 3L0 0L-4.5 3Z" class="needle"/></g>`, mapWidth-24, north)
	d.text(0, 13, "plate-text", "middle", "N")
	d.add(`</g>`)
}

func (m *Map) words(s *Sheet) string {
	var b strings.Builder
	fmt.Fprintf(&b, "Map of the ground under look %s with the classes in their colours. Sites: ", letter(m.Look))
	for i := range s.Sites {
		if i > 0 {
			b.WriteString("; ")
		}
		if i == 12 {
			fmt.Fprintf(&b, "and %d more", len(s.Sites)-i)
			break
		}
		fmt.Fprintf(&b, "%d %s, %s", i+1, s.Sites[i].Name, s.Sites[i].Pairs[m.Look].Verdict)
	}
	return b.String() + "."
}
