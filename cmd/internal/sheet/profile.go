package sheet

import (
	"fmt"
	"html/template"
	"math"

	"foldshade/mask"
)

// Profile is the terrain along the range line through a site, from near range
// to far range.
type Profile struct {
	Look   int
	Points []ProfilePoint
	At     int // index of the point under the site
	// Incidence is that at the site, ToRadar the azimuth to the radar, degrees.
	Incidence, ToRadar float64
	// SlantRange is that of the site, NaN for a plane wave.
	SlantRange float64
	// Blocker and Partner are the terrain that hides or folds the site or comes
	// nearest to it; NaN distances where there is none.
	Blocker, Partner ProfileMark
}

// ProfilePoint is a point of the surface: its distance from the site along
// the ground, negative towards the radar, its height, NaN where there is none,
// and the code of its class.
type ProfilePoint struct {
	Distance, Height float64
	Class            mask.Class
}

// ProfileMark is a place of the profile.
type ProfileMark struct{ Distance, Height float64 }

// The profile chart: near range at the left.
const (
	chartWidth  = 420.0
	chartLeft   = 46.0
	chartRight  = 10.0
	chartTop    = 18.0
	chartBottom = 34.0
	leastChart  = 120.0 // height of the plot
	mostChart   = 210.0
	mostStretch = 2.0 // of heights against distances
)

// frame is the plot's scales.
type frame struct {
	s0, s1, z0, z1 float64
	perS, perZ     float64 // pixels a metre
	tall           float64 // height of the plot
}

func (f *frame) x(s float64) float64 { return chartLeft + (s-f.s0)*f.perS }
func (f *frame) y(z float64) float64 { return chartTop + (f.z1-z)*f.perZ }
func (f *frame) at(s, z float64) [2]float64 {
	return [2]float64{f.x(s), f.y(z)}
}

// exaggeration is how much taller heights are drawn than distances.
func (f *frame) exaggeration() float64 { return f.perZ / f.perS }

// layOut chooses the scales: heights as they are where that gives a plot of a
// good shape, else stretched or squeezed.
func (p *Profile) layOut(target float64) frame {
	f := frame{s0: p.Points[0].Distance, s1: p.Points[len(p.Points)-1].Distance, z0: math.Inf(1), z1: math.Inf(-1)}
	for _, q := range p.Points {
		if !math.IsNaN(q.Height) {
			f.z0, f.z1 = min(f.z0, q.Height), max(f.z1, q.Height)
		}
	}
	if math.IsInf(f.z0, 0) {
		f.z0, f.z1 = 0, 1
	}
	if !math.IsNaN(target) {
		f.z1 = max(f.z1, target)
	}
	if f.s1 <= f.s0 {
		f.s1 = f.s0 + 1
	}
	span := max(f.z1-f.z0, 0.02*(f.s1-f.s0), 1)
	f.z0, f.z1 = f.z0-0.24*span, f.z1+0.26*span
	f.perS = (chartWidth - chartLeft - chartRight) / (f.s1 - f.s0)
	f.tall = min(max((f.z1-f.z0)*f.perS, leastChart), mostChart)
	if least := f.tall / (mostStretch * f.perS); f.z1-f.z0 < least {
		f.z1 = f.z0 + least // more sky rather than steeper slopes
	}
	f.perZ = f.tall / (f.z1 - f.z0)
	return f
}

// mostPoints is what a chart of its width can show.
const mostPoints = 360

// thin leaves out points that a chart cannot show, never those where the
// class changes.
func (p *Profile) thin() []int {
	step := max(1, len(p.Points)/mostPoints)
	var keep []int
	for i := range p.Points {
		last := i == len(p.Points)-1
		changes := i > 0 && p.Points[i].Class != p.Points[i-1].Class || !last && p.Points[i].Class != p.Points[i+1].Class
		if i%step == 0 || last || i == p.At || changes {
			keep = append(keep, i)
		}
	}
	return keep
}

func (p *Profile) draw(site *Site, number int) template.HTML {
	d := &drawing{}
	ground := p.Points[p.At].Height
	target := ground + site.Height
	f := p.layOut(target)
	keep := p.thin()
	id := fmt.Sprintf("plot-%d-%d", number, p.Look)
	d.add(`<defs><clipPath id="%s"><rect x="%g" y="%g" width="%.1f" height="%.1f"/></clipPath></defs>`,
		id, chartLeft, chartTop, chartWidth-chartLeft-chartRight, f.tall)
	d.axes(&f)
	d.add(`<g clip-path="url(#%s)">`, id)
	p.body(d, &f, keep)
	p.shadow(d, &f, keep)
	p.ribbon(d, &f, keep)
	p.rays(d, &f, target)
	d.add(`</g>`)
	p.annotate(d, &f, target, number)
	return d.svg(chartWidth, chartTop+f.tall+chartBottom, "profile", p.words(site))
}

// axes draws the grid with distances and heights.
func (d *drawing) axes(f *frame) {
	bottom := chartTop + f.tall
	step := roundStep(f.s1-f.s0, 6)
	for s := math.Ceil(f.s0/step) * step; s <= f.s1; s += step {
		x := f.x(s)
		d.add(`<path d="M%.1f %gV%.1f" class="grid"/>`, x, chartTop, bottom)
		if x > chartLeft+4 && x < chartWidth-chartRight-12 {
			d.text(x, bottom+13, "small", "middle", fmt.Sprintf("%.6g", s+0))
		}
	}
	step = roundStep(f.z1-f.z0, 5)
	for z := math.Ceil(f.z0/step) * step; z <= f.z1; z += step {
		y := f.y(z)
		d.add(`<path d="M%g %.1fH%g" class="grid"/>`, chartLeft, y, chartWidth-chartRight)
		d.text(chartLeft-5, y+3.5, "small", "end", fmt.Sprintf("%.6g", z+0))
	}
	d.add(`<path d="M%g %gV%.1fH%g" class="axis"/>`, chartLeft, chartTop, bottom, chartWidth-chartRight)
	d.text(chartLeft-40, chartTop-8, "small", "start", "height, m")
	words := "ground distance from the site, m; radar at the left"
	if e := f.exaggeration(); e > 1.05 || e < 0.95 {
		words += fmt.Sprintf("; heights × %.2g", e)
	}
	d.text((chartLeft+chartWidth-chartRight)/2, bottom+28, "small", "middle", words)
}

// runs parts points into runs without holes.
func (p *Profile) runs(keep []int) [][]int {
	var all [][]int
	var run []int
	for _, i := range keep {
		if math.IsNaN(p.Points[i].Height) {
			if len(run) > 1 {
				all = append(all, run)
			}
			run = nil
			continue
		}
		run = append(run, i)
	}
	if len(run) > 1 {
		all = append(all, run)
	}
	return all
}

// body fills the ground.
func (p *Profile) body(d *drawing, f *frame, keep []int) {
	for _, run := range p.runs(keep) {
		points := [][2]float64{f.at(p.Points[run[0]].Distance, f.z0)}
		for _, i := range run {
			points = append(points, f.at(p.Points[i].Distance, p.Points[i].Height))
		}
		points = append(points, f.at(p.Points[run[len(run)-1]].Distance, f.z0))
		d.add(`<path d="%s" class="ground"/>`, polygon(points))
	}
}

// shadow fills the air that no ray reaches: from the last lit point before
// hidden ground straight to the first one behind it. Where the profile ends in
// shadow, the ray goes on at the site's own incidence.
func (p *Profile) shadow(d *drawing, f *frame, keep []int) {
	hidden := func(i int) bool {
		return p.Points[i].Class.Kind() == mask.SelfShadow.Kind() && !math.IsNaN(p.Points[i].Height)
	}
	for k := 1; k < len(keep); k++ {
		crest := p.Points[keep[k-1]]
		if !hidden(keep[k]) || hidden(keep[k-1]) || math.IsNaN(crest.Height) {
			continue
		}
		points := [][2]float64{f.at(crest.Distance, crest.Height)}
		for ; k < len(keep) && hidden(keep[k]); k++ {
			points = append(points, f.at(p.Points[keep[k]].Distance, p.Points[keep[k]].Height))
		}
		if k < len(keep) && !math.IsNaN(p.Points[keep[k]].Height) {
			points = append(points, f.at(p.Points[keep[k]].Distance, p.Points[keep[k]].Height))
		} else {
			end := p.Points[keep[k-1]].Distance
			z := crest.Height - (end-crest.Distance)/math.Tan(p.Incidence*math.Pi/180)
			points = append(points, f.at(end, max(z, p.Points[keep[k-1]].Height)))
		}
		path := polygon(points)
		d.add(`<path d="%s" class="shade"/><path d="%s" fill="url(#falling-dark)"/>`, path, path)
	}
}

// ribbon draws the surface with its classes.
func (p *Profile) ribbon(d *drawing, f *frame, keep []int) {
	const wide = 7
	for _, run := range p.runs(keep) {
		for from := 0; from < len(run)-1; {
			class, to := p.Points[run[from]].Class, from+1
			for to < len(run)-1 && p.Points[run[to]].Class == class {
				to++
			}
			var points [][2]float64
			for _, i := range run[from : to+1] {
				points = append(points, f.at(p.Points[i].Distance, p.Points[i].Height))
			}
			for k := len(points) - 1; k >= 0; k-- {
				points = append(points, [2]float64{points[k][0], points[k][1] + wide})
			}
			d.area(polygon(points), class, "nonzero")
			from = to
		}
		var line [][2]float64
		for _, i := range run {
			line = append(line, f.at(p.Points[i].Distance, p.Points[i].Height))
		}
		d.add(`<path d="%s" class="surface"/>`, polyline(line))
	}
}

// rays draws the ray that comes in at the site, the one that grazes the
// terrain that decides, and the line of equal slant range through the site.
func (p *Profile) rays(d *drawing, f *frame, target float64) {
	if math.IsNaN(target) {
		return
	}
	tan := math.Tan(p.Incidence * math.Pi / 180)
	from := max(f.s0, -(f.z1-target)*tan)
	a, b := f.at(from, target-from/tan), f.at(0, target)
	d.add(`<path d="M%.1f %.1fL%.1f %.1f" class="ray" marker-end="url(#tip)"/>`, a[0], a[1], b[0], b[1])
	var front [][2]float64
	for k := range frontPoints + 1 {
		at := f.s0 + (f.s1-f.s0)*float64(k)/frontPoints
		if z := p.front(at, target); !math.IsNaN(z) {
			front = append(front, f.at(at, z))
		}
	}
	if len(front) > 1 {
		d.add(`<path d="%s" class="front"/>`, polyline(front))
	}
}

// frontPoints is how many steps the line of equal slant range is drawn in.
const frontPoints = 48

// front is the height at a distance at which slant range is that of the
// target: a circle around the antenna, or for a plane wave, where
//
//	r = s sin i - z cos i,
//
// the line z = s tan i through the target. NaN where there is none.
func (p *Profile) front(s, target float64) float64 {
	sin, cos := math.Sincos(p.Incidence * math.Pi / 180)
	if math.IsNaN(p.SlantRange) {
		return target + s*sin/cos
	}
	r := p.SlantRange
	return target + r*cos - math.Sqrt(r*r-(s+r*sin)*(s+r*sin))
}

// annotate names the site and what decides. Letters that would cover each
// other or the site are drawn aside, with a line to their place.
func (p *Profile) annotate(d *drawing, f *frame, target float64, number int) {
	if math.IsNaN(target) {
		return
	}
	top, foot := f.at(0, target), f.at(0, p.Points[p.At].Height)
	label := [2]float64{top[0], foot[1] + 24}
	if label[1] > chartTop+f.tall-4 {
		label[1] = top[1] - 12
	}
	taken := [][2]float64{top, {label[0], label[1] - 4}, {label[0] - 16, label[1] - 4}, {label[0] + 16, label[1] - 4}}
	mark := func(m ProfileMark, style, sign string) {
		if math.IsNaN(m.Distance+m.Height) || m.Distance < f.s0 || m.Distance > f.s1 || m.Distance == 0 {
			return
		}
		at := f.at(m.Distance, m.Height)
		spot := aside(at, taken, f)
		taken = append(taken, spot)
		if spot != at {
			d.add(`<path d="M%.1f %.1fL%.1f %.1f" class="lead"/><circle cx="%.1f" cy="%.1f" r="2" class="dot"/>`, at[0], at[1], spot[0], spot[1], at[0], at[1])
		}
		d.add(`<circle cx="%.1f" cy="%.1f" r="8" class="%s"/>`, spot[0], spot[1], style)
		d.text(spot[0], spot[1]+4, "marktext "+style, "middle", sign)
	}
	if foot[1]-top[1] > 1 {
		d.add(`<path d="M%.1f %.1fL%.1f %.1f" class="mast"/>`, foot[0], foot[1], top[0], top[1])
	}
	d.add(`<circle cx="%.1f" cy="%.1f" r="3.2" class="site"/>`, top[0], top[1])
	mark(p.Blocker, "block", "H")
	mark(p.Partner, "fold", "F")
	d.text(label[0], label[1], "strong halo", "middle", fmt.Sprintf("site %d", number))
}

// aside is the free place nearest to a mark's own, in the plot.
func aside(at [2]float64, taken [][2]float64, f *frame) [2]float64 {
	for reach := 0.0; reach < 80; reach += 11 {
		for k := range 8 {
			sin, cos := math.Sincos(float64(k) * math.Pi / 4)
			spot := [2]float64{at[0] + reach*sin, at[1] - reach*cos}
			in := spot[0] > chartLeft+9 && spot[0] < chartWidth-chartRight-9 && spot[1] > chartTop+9 && spot[1] < chartTop+f.tall-9
			if in && !crowded(spot, taken, 18) {
				return spot
			}
		}
	}
	return at
}

// words says the picture in words.
func (p *Profile) words(site *Site) string {
	text := fmt.Sprintf("Terrain along look %s, seen from the side, radar at the left, in the %s; the ray comes in %.1f degrees from the vertical.",
		letter(p.Look), wind(p.ToRadar), p.Incidence)
	if p.Look < len(site.Pairs) {
		text += " " + site.Pairs[p.Look].Reason
	}
	return text
}
