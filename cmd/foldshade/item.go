package main

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"time"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// itemName is the catalogue entry's file beside the rasters of a look.
const itemName = "item.json"

// assetRoles are the roles that extensions of STAC define for some layers: sar
// for the incidence angles, view for ground hidden from the sensor. The other
// layers carry their own name.
var assetRoles = map[mask.Layer]string{
	mask.LocalIncidence: "local-incidence-angle",
	mask.Incidence:      "ellipsoid-incidence-angle",
	mask.ShadowLayer:    "terrain-occlusion",
}

// writeItem writes the catalogue entry of a look whose rasters are finished.
func (o *outputs) writeItem(i int, j *layersJob, src dem.Source, window dem.Window, chosen []mask.Layer) error {
	look, grid := o.looks[i], src.Grid()
	scene, err := sceneOf(src, look)
	if err != nil {
		return err
	}
	item := raster.Item{
		ID:          look.Name,
		Title:       "Look " + look.Name,
		Description: fmt.Sprintf("Layover, shadow and geometry of a planned radar look over the DEM %s.", filepath.Base(j.label())),
		Grid:        grid,
		Window:      window,
		Time:        time.Now().UTC().Truncate(time.Second),
		TimeMeaning: "the time of the run, since a plan has no acquisition",
		Sampling:    "area",
		Software:    map[string]string{"foldshade": toolVersion(), "GDAL": raster.GDALVersion()},
		Lineage:     shellJoin(j.command),
		Properties:  lookProperties(look, scene),
	}
	if !scene.utc.IsZero() {
		item.Created, item.Time = item.Time, scene.utc
		item.TimeMeaning = "the moment at which the track of the ephemeris is abreast of the DEM's centre"
	}
	for _, l := range chosen {
		role := string(l)
		if r, ok := assetRoles[l]; ok {
			role = r
		}
		item.Assets = append(item.Assets, o.writers[i][l].Asset(role))
	}
	text, err := item.JSON()
	if err != nil {
		return err
	}
	if _, err := o.items[i].Write(text); err != nil {
		return err
	}
	return o.items[i].Close()
}

// scene is how a look sees the centre of the DEM.
type scene struct {
	view  geometry.View
	state string    // of the orbit: ascending or descending; empty without one
	utc   time.Time // zero for a look without a calendar
}

// sceneOf resolves a look at the centre of the DEM, on its ground.
func sceneOf(src dem.Source, look geometry.Look) (scene, error) {
	o, err := overDEM(src, look)
	if err != nil {
		return scene{}, err
	}
	g := src.Grid()
	var s scene
	s.view, _ = o.view(position(src, float64(g.Rows-1)/2, float64(g.Cols-1)/2, 0))
	if o.platform == nil || math.IsNaN(s.view.T) {
		return s, nil
	}
	s.utc, _ = o.platform.Time(s.view.T)
	if look.Kind == geometry.Orbit || look.Kind == geometry.Ephemeris {
		// The earth turns about the third axis: north is north in any frame.
		s.state = string(geometry.Descending)
		if _, vel := o.platform.State(s.view.T); vel.Z > 0 {
			s.state = string(geometry.Ascending)
		}
	}
	return s, nil
}

// lookProperties are the parameters of a look, in the fields of the STAC
// extensions view, sar and sat where they have one, and all of them under the
// keys of the look files. The angles are those at the scene's centre, as the
// view extension has it.
func lookProperties(look geometry.Look, at scene) map[string]any {
	p := map[string]any{}
	number := func(key string, v float64) {
		if !math.IsNaN(v) {
			p[key] = rounded(v, 9)
		}
	}
	number("view:incidence_angle", at.view.Incidence.Degrees())
	number("view:azimuth", at.view.LookAzimuth.Degrees())
	number("view:off_nadir", at.view.LookAngle.Degrees())
	for _, key := range []string{"view:incidence_angle", "view:off_nadir"} {
		if v, ok := p[key].(float64); ok && v > 90 { // beyond what the extension takes
			delete(p, key)
		}
	}
	if at.state != "" {
		p["sat:orbit_state"] = at.state
	}
	number("sar:bandwidth", look.Bandwidth/1e9)
	if look.Band == "" {
		number("sar:center_frequency", look.Frequency()/1e9)
	} else if slices.Contains([]string{"L", "S", "C", "X", "Ku", "K", "Ka"}, look.Band) {
		p["sar:frequency_band"] = look.Band
	}
	if look.Side != "" {
		p["sar:observation_direction"] = string(look.Side)
	}
	keys := map[string]any{}
	for _, pair := range look.Pairs() {
		keys[pair.Key] = pair.Value
	}
	p["foldshade:look"] = keys
	return p
}
