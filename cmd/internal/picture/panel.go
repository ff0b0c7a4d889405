package picture

import (
	"fmt"
	"image/color"
	"math"
	"strings"

	"foldshade/mask"
)

func rgba(t [3]float64) color.RGBA {
	return color.RGBA{level(t[0]), level(t[1]), level(t[2]), 255}
}

// layoutPanel lays out maps in rows of up to three, each under its own title
// and small compass, over one legend with a column of shares a map.
func layoutPanel(p Panel) *sheet {
	across := min(len(p.Maps), 3)
	first := survey(&p.Maps[0])
	w, h := first.size(float64(1720-40*across)/float64(across), 640)
	cell := max(float64(w), 400)
	full := float64(across)*cell + float64(across-1)*gutter
	s := &sheet{}
	top := edge
	if p.Title != "" {
		top += titleType.ascent()
		s.say(titleType, false, spot{edge, top}, 0, titleType.fit(p.Title, full))
		top += 2
	}
	if p.Subtitle != "" {
		top += 27
		s.say(textType, true, spot{edge, top}, 0, textType.fit(p.Subtitle, full))
	}
	top += 30
	const head = 84.0
	var tallies []tally
	bottom := top
	for k := range p.Maps {
		m := &p.Maps[k]
		x := math.Round(edge + float64(k%across)*(cell+gutter))
		if k%across == 0 && k > 0 {
			top = math.Round(bottom + gutter)
		}
		y := math.Round(top)
		g := survey(m)
		s.head(m, g.north, k, len(p.Maps), x, y, cell)
		mw, mh := g.size(float64(w), float64(h))
		s.addMap(g, box{x, y + head, x + float64(mw), y + head + float64(mh)})
		t := count(m)
		tallies = append(tallies, t)
		s.bar(t, box{x, y + head + float64(mh) + 16, x + cell, y + head + float64(mh) + 30})
		bottom = max(bottom, y+head+float64(mh)+54)
	}
	bottom = s.foot(tallies, first.width/float64(w), edge+full, bottom+52)
	s.w, s.h = int(math.Ceil(edge+full+edge)), int(math.Ceil(bottom+edge))
	return s
}

// head writes a map's title and look above it, with the compass at the right.
func (s *sheet) head(m *Map, north float64, k, of int, x, y, wide float64) {
	title := m.title()
	if of > 1 {
		title = fmt.Sprintf("%c  %s", 'A'+rune(k%26), title)
	}
	const radius = 27
	s.say(headType, false, spot{x, y + 34}, 0, headType.fit(title, wide-2*radius-30))
	line := ""
	for _, part := range m.Look.words() {
		if line != "" {
			part = ", " + strings.ToLower(part)
		}
		line += part
	}
	if line == "" {
		line = m.Subtitle
	}
	s.say(captionType, true, spot{x, y + 60}, 0, captionType.fit(line, wide-2*radius-30))
	s.compassSmall(m.Look, north, spot{x + wide - radius - 2, y + radius + 14}, radius)
}

// compassSmall is the compass without degrees.
func (s *sheet) compassSmall(l Look, north float64, at spot, radius float64) {
	turn := func(a, r float64) spot { return spot{at.x + r*math.Sin(a), at.y - r*math.Cos(a)} }
	s.shape(func(c canvas) {
		c.curve(faint, at, radius, 0, 2*math.Pi, 1.4)
		c.fill(ink, []spot{turn(north, radius+2), turn(north-0.2, radius-7), turn(north+0.2, radius-7)})
		if l.Azimuth.Given() {
			a := north + float64(l.Azimuth)
			c.arrow(beam, turn(a+math.Pi, radius-7), turn(a, radius-7), 3.6, 14)
			c.disc(beam, turn(a+math.Pi, radius-7), 4.2)
			c.disc(paper, turn(a+math.Pi, radius-7), 1.7)
		}
	})
	s.say(captionType, false, spot{turn(north, radius+9).x, turn(north, radius+9).y + 4}, 0.5, "N")
}

// bar draws a map's shares as one strip of its classes, with the kinds'
// numbers below.
func (s *sheet) bar(t tally, b box) {
	if t.known == 0 || t.plain {
		return
	}
	x := b.x0
	for _, g := range groups() {
		if g.codes[0] == mask.NoData {
			continue
		}
		part := box{x, b.y0, x + t.part(g)*b.w(), b.y1}
		if part.w() > 0 {
			s.swatch(g.codes[0], part)
		}
		x = part.x1
	}
	var parts []string
	for _, k := range []struct {
		title string
		kind  int
	}{{"open", 1}, {"compressed", 2}, {"layover", 3}, {"shadow", 4}, {"undetermined", 5}} {
		all := group{title: k.title}
		for _, c := range mask.Classes {
			if c.Code.Kind() == k.kind {
				all.codes = append(all.codes, c.Code)
			}
		}
		if k.kind%2 == 1 && k.kind < 5 || k.kind == 4 || t.part(all) > 0 {
			parts = append(parts, k.title+" "+t.share(all))
		}
	}
	s.say(captionType, false, spot{b.x0, b.y1 + 20}, 0, captionType.fit(strings.Join(parts, "   "), b.w()))
}

// foot draws the shared legend in rows from the left, and the scale at the
// right or below, and returns the lower end.
func (s *sheet) foot(tallies []tally, metresPerPixel, right, y float64) float64 {
	const scaleWidth = 300
	room := right
	if right-edge > 900 {
		room = right - scaleWidth - gutter
	}
	x, base := edge, y
	for _, g := range groups() {
		if !shown(g, tallies) {
			continue
		}
		wide := 44 + textType.width(g.title)
		if x > edge && x+wide > room {
			x, base = edge, base+rowGap
		}
		s.swatch(g.codes[0], box{x, base - 17, x + 34, base + 5})
		s.say(textType, false, spot{x + 44, base}, 0, g.title)
		x += wide + 26
	}
	if room < right {
		return max(base+8, s.scale(metresPerPixel, right-scaleWidth, right, y-14))
	}
	return s.scale(metresPerPixel, edge, edge+scaleWidth, base+30)
}
