package sheet

import (
	"fmt"
	"html/template"
	"math"
	"strings"

	"foldshade/mask"
)

// The sky chart: the sky over the site, the zenith in the middle and the
// horizon at the rim, north up and east at the right, as on a map. A radar
// stands in the direction in which it is seen; the distance from the middle
// is its incidence.
const (
	skySize   = 264.0
	skyRadius = 108.0
	skyMiddle = skySize / 2
)

// skyAt is the place of an azimuth and an incidence, degrees.
func skyAt(azimuth, incidence float64) [2]float64 {
	sin, cos := math.Sincos(azimuth * math.Pi / 180)
	r := skyRadius * min(max(incidence, 0), 90) / 90
	return [2]float64{skyMiddle + r*sin, skyMiddle - r*cos}
}

func drawSky(s *Site) template.HTML {
	d := &drawing{}
	const rim = "M%[1]g %[2]gA%[3]g %[3]g 0 1 1 %[1]g %[4]gA%[3]g %[3]g 0 1 1 %[1]g %[2]gZ"
	circle := fmt.Sprintf(rim, skyMiddle, skyMiddle-skyRadius, skyRadius, skyMiddle+skyRadius)
	known := len(s.Sky) > 2
	for _, r := range s.Sky {
		known = known && !math.IsNaN(r.Low+r.High)
	}
	if !known {
		d.area(circle, mask.Undetermined, "nonzero")
	} else {
		d.area(circle, mask.Open, "nonzero")
		ring := func(of func(Ray) float64) string {
			var points [][2]float64
			for _, r := range s.Sky {
				points = append(points, skyAt(r.ToRadar, of(r)))
			}
			return polygon(points)
		}
		sure := func(v, otherwise float64) float64 {
			if math.IsNaN(v) {
				return otherwise
			}
			return v
		}
		d.area(ring(func(r Ray) float64 { return sure(r.LowSure, r.Low) }), mask.Undetermined, "nonzero")
		d.area(circle+ring(func(r Ray) float64 { return sure(r.HighSure, r.High) }), mask.Undetermined, "evenodd")
		d.area(ring(func(r Ray) float64 { return r.Low }), mask.LayoverFarther, "nonzero")
		d.area(circle+ring(func(r Ray) float64 { return r.High }), mask.CastShadow, "evenodd")
	}
	for _, inc := range []float64{30, 60, 90} {
		style := "grid"
		if inc == 90 {
			style = "frame"
		}
		d.add(`<circle cx="%g" cy="%g" r="%.1f" class="%s"/>`, skyMiddle, skyMiddle, skyRadius*inc/90, style)
	}
	for az := 0.0; az < 180; az += 45 {
		a, b := skyAt(az, 90), skyAt(az+180, 90)
		d.add(`<path d="M%.1f %.1fL%.1f %.1f" class="grid"/>`, a[0], a[1], b[0], b[1])
	}
	for _, inc := range []float64{30, 60} {
		p := skyAt(22, inc)
		d.text(p[0], p[1]+3.5, "small halo", "middle", fmt.Sprintf("%g°", inc))
	}
	for i, n := range []string{"N", "E", "S", "W"} {
		sin, cos := math.Sincos(float64(i) * math.Pi / 2)
		d.text(skyMiddle+(skyRadius+13)*sin, skyMiddle-(skyRadius+13)*cos+4.5, "label", "middle", n)
	}
	d.marks(s)
	return d.svg(skySize, skySize, "sky", skyWords(s))
}

// marks puts the looks on the sky. Letters that would cover each other move
// apart around their place, with a line to it.
func (d *drawing) marks(s *Site) {
	var taken [][2]float64
	for i := range s.Pairs {
		p := &s.Pairs[i]
		if math.IsNaN(p.ToRadar + p.Incidence) {
			continue
		}
		at := skyAt(p.ToRadar, p.Incidence)
		spot := at
		for k := 0; k < 24 && crowded(spot, taken, 17); k++ {
			sin, cos := math.Sincos(float64(k%8) * math.Pi / 4)
			reach := 18 * float64(1+k/8)
			spot = [2]float64{at[0] + reach*sin, at[1] - reach*cos}
		}
		taken = append(taken, spot)
		if spot != at {
			d.add(`<path d="M%.1f %.1fL%.1f %.1f" class="lead"/><circle cx="%.1f" cy="%.1f" r="2" class="dot"/>`, at[0], at[1], spot[0], spot[1], at[0], at[1])
		}
		d.add(`<circle cx="%.1f" cy="%.1f" r="9" class="mark %s"/>`, spot[0], spot[1], verdictClass(p.Verdict))
		d.text(spot[0], spot[1]+4, "marktext "+verdictClass(p.Verdict), "middle", letter(i))
	}
}

func crowded(at [2]float64, taken [][2]float64, least float64) bool {
	for _, t := range taken {
		if math.Hypot(at[0]-t[0], at[1]-t[1]) < least {
			return true
		}
	}
	return false
}

// skyWords says the chart in words: for eight directions, which incidences
// serve.
func skyWords(s *Site) string {
	var b strings.Builder
	b.WriteString("Sky of looks. ")
	for az := 0.0; az < 360; az += 45 {
		best, least := -1, math.Inf(1)
		for i, r := range s.Sky {
			if d := math.Abs(math.Remainder(r.ToRadar-az, 360)); d < least {
				best, least = i, d
			}
		}
		if best < 0 || math.IsNaN(s.Sky[best].Low+s.Sky[best].High) {
			continue
		}
		r := s.Sky[best]
		if r.High <= r.Low {
			fmt.Fprintf(&b, "Radar in the %s: no incidence is open. ", wind(az))
		} else {
			fmt.Fprintf(&b, "Radar in the %s: open from %.0f to %.0f degrees of incidence. ", wind(az), r.Low, r.High)
		}
	}
	for i := range s.Pairs {
		if p := &s.Pairs[i]; !math.IsNaN(p.ToRadar + p.Incidence) {
			fmt.Fprintf(&b, "Look %s at %.0f degrees of azimuth and %.0f of incidence: %s. ", letter(i), p.ToRadar, p.Incidence, p.Verdict)
		}
	}
	return strings.TrimSpace(b.String())
}
