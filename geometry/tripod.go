package geometry

import (
	"errors"
	"fmt"
	"math"
	"time"
)

// tripod is a radar that stands still. Its range planes are the vertical
// planes through it; T is the azimuth of the plane.
type tripod struct {
	frame       frame
	from, width float64 // sector, clockwise, radians
	near, far   float64 // slant range limits, metres
}

func newTripod(look Look, site Site) (Platform, error) {
	if !look.Position.Given() {
		return nil, errors.New("no position; give position=LON/LAT")
	}
	if !(look.Antenna > 0) {
		return nil, fmt.Errorf("antenna %.6g m puts the antenna under the surface; give its height above the ground, more than 0", look.Antenna)
	}
	if look.MinRange >= look.MaxRange {
		return nil, fmt.Errorf("min_range %.6g m is not below max_range %.6g m", look.MinRange, look.MaxRange)
	}
	ground := math.NaN()
	if site.Ground != nil {
		ground = site.Ground(look.Position)
	}
	if math.IsNaN(ground) {
		return nil, fmt.Errorf("position %s lies outside the DEM or on a hole in it, so the ground's height there is unknown; move it, or give a DEM that holds it", look.Position.text())
	}
	t := &tripod{frame: newFrame(Geodetic{look.Position, ground + look.Antenna}), width: 2 * math.Pi, near: 0, far: math.Inf(1)}
	if look.SectorFrom.Given() && look.SectorTo.Given() && look.SectorFrom != look.SectorTo {
		t.from = float64(look.SectorFrom.Turn())
		t.width = float64((look.SectorTo - look.SectorFrom).Turn())
	}
	if look.MinRange > 0 {
		t.near = look.MinRange
	}
	if look.MaxRange > 0 {
		t.far = look.MaxRange
	}
	return t, nil
}

// text returns the place as the user writes it.
func (p Place) text() string {
	return fmt.Sprintf("%.6g/%.6g", p.Lon.Degrees(), p.Lat.Degrees())
}

func (t *tripod) ZeroDoppler(p ECEF) (float64, bool) {
	d := p.Sub(t.frame.origin)
	e, n := d.Dot(t.frame.east), d.Dot(t.frame.north)
	return turned(math.Atan2(e, n)), e != 0 || n != 0
}

func (t *tripod) State(azimuth float64) (pos, vel ECEF) {
	sin, cos := math.Sincos(azimuth)
	return t.frame.origin, t.frame.north.Scale(sin).Sub(t.frame.east.Scale(cos))
}

func (t *tripod) View(p Geodetic) (View, Seen) {
	f := newFrame(p)
	azimuth, ok := t.ZeroDoppler(f.origin)
	if !ok || math.IsNaN(azimuth) {
		return noView(), OutsideRange
	}
	_, vel := t.State(azimuth)
	v := viewOf(&f, t.frame.origin, vel, t.frame.up)
	v.T = azimuth
	switch {
	case turned(azimuth-t.from) > t.width:
		return v, OutsideSector
	case v.SlantRange < t.near || v.SlantRange > t.far:
		return v, OutsideRange
	}
	return v, InView
}

func (t *tripod) Span() (from, to float64) { return 0, 2 * math.Pi }

func (t *tripod) Time(float64) (time.Time, bool) { return time.Time{}, false }
