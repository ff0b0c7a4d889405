package main

import (
	"fmt"
	"math"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// geometryOf is a look over a place or a DEM, its platform resolved.
type geometryOf struct {
	look     geometry.Look
	platform geometry.Platform // nil for a fixed look
	centre   geometry.Geodetic // where a fixed look counts its slant range from, at height 0
}

// overDEM resolves a look over a DEM.
func overDEM(src dem.Source, look geometry.Look) (*geometryOf, error) {
	g := src.Grid()
	l := g.At(float64(g.Rows-1)/2, float64(g.Cols-1)/2)
	o := &geometryOf{look: look, centre: geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}}}
	if look.Kind == geometry.Fixed {
		return o, nil
	}
	var err error
	o.platform, err = mask.PlatformOf(src, look)
	return o, err
}

// overPlace resolves a look over a place without a DEM.
func overPlace(p geometry.Place, look geometry.Look) (*geometryOf, error) {
	o := &geometryOf{look: look, centre: geometry.Geodetic{Place: p}}
	if look.Kind == geometry.Fixed {
		return o, nil
	}
	var err error
	o.platform, err = geometry.NewPlatform(look, geometry.Site{Centre: p})
	return o, err
}

// view returns how the look sees a point. A fixed look knows no look angle, and
// a slant range only when the look gives the reference.
func (o *geometryOf) view(p geometry.Geodetic) (geometry.View, geometry.Seen) {
	if o.platform != nil {
		return o.platform.View(p)
	}
	i, a := o.look.Incidence, o.look.Azimuth
	v := geometry.View{
		T: math.NaN(), SlantRange: o.look.SlantRange, Incidence: i, LookAzimuth: a, LookAngle: geometry.NotGiven,
		LineOfSight: geometry.ENU{East: -i.Sin() * a.Sin(), North: -i.Sin() * a.Cos(), Up: i.Cos()},
	}
	s := 0.0 // ground distance along the look
	if d, course, _, err := geometry.Inverse(o.centre.Place, p.Place); err == nil && d > 0 {
		s = d * (course - a).Cos()
	}
	v.SlantRange += s*i.Sin() - p.Height*i.Cos()
	return v, geometry.InView
}

// miss returns by how many metres along the track a point that the look does
// not come abreast of lies before its start or beyond its end; NaN when that is
// not why it is not seen, or not known.
func (o *geometryOf) miss(p geometry.Geodetic, v *geometry.View) float64 {
	if o.platform == nil {
		return math.NaN()
	}
	if math.IsNaN(v.T) {
		t, _ := o.platform.ZeroDoppler(p.ECEF())
		pos, vel := o.platform.State(t)
		return math.Abs(p.ECEF().Sub(pos).Dot(vel)) / vel.Norm()
	}
	if o.look.Kind != geometry.Flight {
		return math.NaN()
	}
	length, _, _, err := geometry.Inverse(o.look.Start, o.look.End)
	switch {
	case err != nil:
		return math.NaN()
	case v.T < 0:
		return -v.T
	case v.T > length:
		return v.T - length
	}
	return math.NaN()
}

// why says in words why a point is not seen, with the distance where there is
// one.
func (o *geometryOf) why(p geometry.Geodetic, v *geometry.View, seen geometry.Seen) string {
	if miss := o.miss(p, v); seen == geometry.OutsideSegment && !math.IsNaN(miss) {
		return fmt.Sprintf("%s, by %.1f km", seen, miss/1e3)
	}
	return seen.String()
}

// comesAbreast refuses a look whose track never comes abreast of the DEM's centre.
func comesAbreast(src dem.Source, look geometry.Look) error {
	o, err := overDEM(src, look)
	if err != nil || o.platform == nil || look.Kind == geometry.Tripod {
		return err
	}
	g := src.Grid()
	centre := position(src, float64(g.Rows-1)/2, float64(g.Cols-1)/2, 0)
	if v, seen := o.view(centre); math.IsNaN(v.T) {
		return hint(fmt.Errorf("look %q does not see the DEM: %s", look.Name, o.why(centre, &v, seen)), "`foldshade looks --dem` shows the geometry of a look")
	}
	return nil
}

// position turns a fractional cell position into a point at the DEM's height
// there, or at the height given where it has none.
func position(src dem.Source, row, col, otherwise float64) geometry.Geodetic {
	g := src.Grid()
	l := g.At(row, col)
	p := geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: otherwise}
	var z [1]float32
	w := dem.Window{Row: int(math.Round(row)), Col: int(math.Round(col)), Rows: 1, Cols: 1}
	if g.Clip(w) == w && src.Read(w, z[:]) == nil && z[0] == z[0] {
		p.Height = float64(z[0])
	}
	return p
}

// extremes are the range of the geometry over a DEM.
type extremes struct {
	seen        int // places that the look sees, of those tried
	least, most geometry.Angle
	reach       reach
}

// gridSteps is the number of steps a side at which the geometry is tried over
// a DEM: it is smooth, and its extremes lie on the rim.
const gridSteps = 16

// over returns the extremes of the incidence over the DEM, at its lowest and
// its highest height, and how far terrain can matter.
func (o *geometryOf) over(g *dem.Grid, lo, hi, relief float64) extremes {
	s := extremes{least: geometry.Angle(math.Inf(1)), most: geometry.Angle(math.Inf(-1))}
	for i := range (gridSteps + 1) * (gridSteps + 1) {
		row := float64(i/(gridSteps+1)) / gridSteps * float64(g.Rows-1)
		col := float64(i%(gridSteps+1)) / gridSteps * float64(g.Cols-1)
		l := g.At(row, col)
		for _, h := range [2]float64{lo, hi} {
			v, seen := o.view(geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: h})
			if seen != geometry.InView {
				continue
			}
			s.seen++
			s.least, s.most = min(s.least, v.Incidence), max(s.most, v.Incidence)
			s.reach = s.reach.or(o.reach(&v, relief))
		}
	}
	return s
}

// reach is how far terrain can matter to a cell, metres of ground.
type reach struct {
	shadow  float64 // towards the radar terrain may hide it
	towards float64 // towards the radar terrain may share its slant range
	away    float64 // away from the radar terrain may share its slant range
}

func (r reach) or(o reach) reach {
	return reach{max(r.shadow, o.shadow), max(r.towards, o.towards), max(r.away, o.away)}
}

// reach returns how far terrain of a relief can matter to a point. A ray that
// grazes the highest ground meets the lowest
//
//	relief tan(incidence)
//
// behind it at most, on a round earth too: seen from the shaded point the ray
// bends up from the ground. Points of one slant range r lie relief cot(incidence)
// apart under a plane wave; around an antenna they lie on a circle, so that from
// x = r sin(i), y = r cos(i) a point higher by the relief, farther out, is at
//
//	x' = sqrt(r^2 - (y - relief)^2)
//
// and a lower one, nearer, at sqrt(r^2 - (y + relief)^2); for an antenna below the
// point the other way round. The ground's own drop
// over the distance, d^2 / 2R, counts as relief.
func (o *geometryOf) reach(v *geometry.View, relief float64) reach {
	r := reach{shadow: relief * math.Max(v.Incidence.Tan(), 0)}
	if v.Incidence >= 90*geometry.Degree {
		r.shadow = math.Inf(1)
	}
	if o.platform == nil {
		r.towards = relief / v.Incidence.Tan()
		r.away = r.towards
		return r
	}
	x, y := v.SlantRange*v.Incidence.Sin(), v.SlantRange*v.Incidence.Cos()
	r.shadow = math.Min(r.shadow, x) // nothing beyond the antenna hides
	at := func(y float64) float64 { return math.Sqrt(max(v.SlantRange*v.SlantRange-y*y, 0)) }
	for range 3 {
		drop := func(d float64) float64 { return relief + d*d/(2*geometry.SemiMajor) }
		r.away = at(max(y-drop(r.away), -y-drop(r.away), 0)) - x
		r.towards = x - at(max(y+drop(r.towards), drop(r.towards)-y))
	}
	return r
}
