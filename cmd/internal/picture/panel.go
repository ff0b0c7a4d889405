package picture

import (
	"fmt"
	"image/color"
	"math"
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
		y := math.Round(top + float64(k/across)*(head+640+gutter))
		if k/across > 0 {
			y = math.Round(bottom + gutter)
		}
		g := survey(m)
		s.head(m, g.north, k, len(p.Maps), x, y, cell)
		mw, mh := g.size(float64(w), float64(h))
		s.addMap(g, box{x, y + head, x + float64(mw), y + head + float64(mh)})
		tallies = append(tallies, count(m))
		if k%across == across-1 || k == len(p.Maps)-1 {
			bottom = y + head + float64(h)
		}
	}
	bottom = s.foot(tallies, first, float64(w), edge+full, bottom+50)
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
			line += " · "
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

// foot draws the shared legend at the left and the scale at the right, and
// returns the lower end.
func (s *sheet) foot(tallies []tally, g *ground, w, right, y float64) float64 {
	n := float64(len(tallies))
	shareWidth := min(104, (right-edge-titleWidth)/n)
	end := edge + titleWidth + shareWidth*n
	s.say(strongType, false, spot{edge, y}, 0, "What the radar sees")
	if len(tallies) > 1 {
		for k := range tallies {
			s.say(strongType, false, spot{end - shareWidth*float64(len(tallies)-1-k), y}, 1, string('A'+rune(k%26)))
		}
	}
	bottom := s.legend(tallies, edge, end, shareWidth, y)
	if x := right - 300; x > end+gutter {
		return max(bottom, s.scale(g.width/w, x, right, y-10))
	}
	return s.scale(g.width/w, edge, edge+300, bottom+36)
}
