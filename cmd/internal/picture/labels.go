package picture

import "math"

// label is a site's name as placed on a map.
type label struct {
	text   string
	mark   spot
	at     spot // start of the baseline
	leader bool // far enough from its mark to need a line to it
	box    box
}

const (
	markRadius = 5.5
	haloWidth  = 2.8
)

// place finds room for every site's name: near its mark, inside the map, and
// clear of the other marks and names. Where there is no room a name moves
// outwards on a leader; a name that fits nowhere is left out, its mark stays.
func place(names []string, marks []spot, room box) []label {
	var taken []box
	for _, m := range marks {
		taken = append(taken, box{m.x, m.y, m.x, m.y}.grow(markRadius+2))
	}
	labels := make([]label, 0, len(marks))
	for k, m := range marks {
		l := label{mark: m}
		for _, o := range offers(siteType.fit(names[k], room.w()*0.6), m) {
			if o.text != "" && room.contains(o.box.grow(2)) && clear(o.box, taken) {
				l, taken = o, append(taken, o.box)
				break
			}
		}
		labels = append(labels, l)
	}
	return labels
}

func clear(b box, taken []box) bool {
	for _, t := range taken {
		if b.overlaps(t) {
			return false
		}
	}
	return true
}

// offers lists where a name may stand, the best first: right of the mark,
// left, above, below, the corners, then the same farther out.
func offers(text string, m spot) []label {
	wide, up, down := siteType.width(text), siteType.ascent(), siteType.descent()
	directions := []spot{{1, 0}, {-1, 0}, {0, -1}, {0, 1}, {1, -1}, {1, 1}, {-1, -1}, {-1, 1}}
	var all []label
	for _, gap := range []float64{markRadius + 5, 26, 44} {
		for _, d := range directions {
			long := math.Hypot(d.x, d.y)
			c := spot{m.x + d.x*(gap/long+wide/2), m.y + d.y*(gap/long+(up+down)/2)}
			at := spot{c.x - wide/2, c.y + (up-down)/2}
			b := box{at.x, at.y - up, at.x + wide, at.y + down}.grow(1)
			all = append(all, label{text, m, at, gap > 20, b})
		}
	}
	return all
}

// draw paints the marks and the names of one map.
func (c canvas) labels(all []label) {
	for _, l := range all {
		if l.leader && l.text != "" {
			end := spot{min(max(l.mark.x, l.box.x0), l.box.x1), min(max(l.mark.y, l.box.y0), l.box.y1)}
			c.line(paper, l.mark, end, 4)
			c.line(ink, l.mark, end, 1.4)
		}
	}
	for _, l := range all {
		c.disc(paper, l.mark, markRadius+1.6)
		c.disc(ink, l.mark, markRadius)
		c.disc(paper, l.mark, markRadius-2)
	}
	for _, l := range all {
		if l.text != "" {
			c.text(siteType, ink, l.at, l.text, haloWidth)
		}
	}
}
