package sheet

import (
	"fmt"
	"html/template"
	"math"
	"strings"

	"foldshade/mask"
)

// drawing builds the inside of an SVG picture. Texts are escaped.
type drawing struct{ b strings.Builder }

func (d *drawing) add(format string, args ...any) { fmt.Fprintf(&d.b, format, args...) }

// text writes a text of a style; anchor is start, middle or end.
func (d *drawing) text(x, y float64, style, anchor, text string) {
	d.add(`<text x="%.1f" y="%.1f" class="%s" text-anchor="%s">%s</text>`, x, y, style, anchor, template.HTMLEscapeString(text))
}

// svg closes the picture. Title and text are what a screen reader says.
func (d *drawing) svg(w, h float64, style, label string) template.HTML {
	return template.HTML(fmt.Sprintf(`<svg class="%s" viewBox="0 0 %.0f %.0f" width="%.0f" height="%.0f" role="img" aria-label="%s">%s</svg>`,
		style, w, h, w, h, template.HTMLEscapeString(label), d.b.String()))
}

// polygon is a closed path.
func polygon(points [][2]float64) string {
	var b strings.Builder
	for i, p := range points {
		c := byte('L')
		if i == 0 {
			c = 'M'
		}
		fmt.Fprintf(&b, "%c%.1f %.1f", c, p[0], p[1])
	}
	b.WriteByte('Z')
	return b.String()
}

// polyline is an open path.
func polyline(points [][2]float64) string { return strings.TrimSuffix(polygon(points), "Z") }

// fills are the classes' colours by code, and the pattern that tells the kind
// without colour.
func fill(c mask.Class) (color, pattern string) {
	for _, k := range mask.Classes {
		if k.Code == c {
			color = k.Color
		}
	}
	switch {
	case c == mask.ActiveLayover:
		pattern = "rising-light"
	case c.Kind() == mask.ActiveLayover.Kind():
		pattern = "rising-dark"
	case c == mask.SelfShadow:
		pattern = "falling-light"
	case c.Kind() == mask.SelfShadow.Kind():
		pattern = "falling-dark"
	case c == mask.Undetermined:
		pattern = "dots"
	}
	return color, pattern
}

// area draws a path in the colour and pattern of a class.
func (d *drawing) area(path string, c mask.Class, rule string) {
	color, pattern := fill(c)
	if color == "" {
		return
	}
	d.add(`<path d="%s" fill="%s" fill-rule="%s"/>`, path, color, rule)
	if pattern != "" {
		d.add(`<path d="%s" fill="url(#%s)" fill-rule="%s"/>`, path, pattern, rule)
	}
}

// swatch is a legend's field.
func swatch(c mask.Class) template.HTML {
	d := &drawing{}
	d.area("M0.5 0.5H27.5V15.5H0.5Z", c, "nonzero")
	d.add(`<path d="M0.5 0.5H27.5V15.5H0.5Z" class="frame"/>`)
	return template.HTML(fmt.Sprintf(`<svg class="swatch" viewBox="0 0 28 16" width="28" height="16" aria-hidden="true">%s</svg>`, d.b.String()))
}

// defs are the patterns, once for all pictures of the page: strokes that rise
// for layover, strokes that fall for shadow, dots for undetermined.
func defs() template.HTML {
	d := &drawing{}
	for _, p := range []struct {
		id, color string
		opacity   float64
		turn      int
	}{
		{"rising-light", "#fff", 0.45, 45}, {"rising-dark", "#000", 0.35, 45},
		{"falling-light", "#fff", 0.45, -45}, {"falling-dark", "#000", 0.35, -45},
	} {
		d.add(`<pattern id="%s" width="5" height="5" patternUnits="userSpaceOnUse" patternTransform="rotate(%d)"><path d="M0 0V5" stroke="%s" stroke-opacity="%g" stroke-width="1.6"/></pattern>`,
			p.id, p.turn, p.color, p.opacity)
	}
	d.add(`<pattern id="dots" width="6" height="6" patternUnits="userSpaceOnUse"><circle cx="3" cy="3" r="1.2" fill="#000" fill-opacity="0.45"/></pattern>`)
	d.add(`<marker id="tip" viewBox="0 0 10 10" refX="9" refY="5" markerWidth="7" markerHeight="7" orient="auto"><path d="M0 0L10 5L0 10Z" class="tip"/></marker>`)
	return template.HTML(`<svg width="0" height="0" class="defs" aria-hidden="true"><defs>` + d.b.String() + `</defs></svg>`)
}

// roundStep is the 1, 2 or 5 times a power of ten that parts a span into at
// most n steps.
func roundStep(span float64, n int) float64 {
	if !(span > 0) {
		return 1
	}
	least := span / float64(n)
	p := math.Pow(10, math.Floor(math.Log10(least)))
	for _, m := range []float64{1, 2, 5} {
		if m*p >= least*(1-1e-9) {
			return m * p
		}
	}
	return 10 * p
}

// wind names a direction in words.
func wind(azimuth float64) string {
	names := []string{"north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west"}
	k := int(math.Round(azimuth/45)) % 8
	return names[(k+8)%8]
}
