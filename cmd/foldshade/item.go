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
func (o *outputs) writeItem(i int, j *layersJob, grid *dem.Grid, window dem.Window, chosen []mask.Layer) error {
	look := o.looks[i]
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
		Properties:  lookProperties(look),
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

// lookProperties are the parameters of a look, in the fields of the STAC
// extensions view and sar where they have one, and all of them under the keys
// of the look files.
func lookProperties(look geometry.Look) map[string]any {
	p := map[string]any{}
	number := func(key string, v float64) {
		if !math.IsNaN(v) {
			p[key] = rounded(v, 9)
		}
	}
	number("view:incidence_angle", look.Incidence.Degrees())
	number("view:azimuth", look.Azimuth.Degrees())
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
