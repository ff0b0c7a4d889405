package main

import (
	"math"
	"strconv"

	"foldshade/geometry"
	"foldshade/mask"
)

// siteColumn is one value of a site under a look. The columns are the keys of
// the JSON, the columns of the CSV and of the GeoPackage, and the quantities of
// the field sheet: a number is rounded to its decimals once, for all of them.
type siteColumn struct {
	name     string // snake_case, with the unit where it is not degrees or metres
	title    string // for the sheet; empty when it has a place of its own there
	unit     string
	decimals int
	sample   any // a value of its type: string, int64 or float64
	get      func(p *pair) any
}

// value is the column's value of a pair: nil for none.
func (c *siteColumn) value(p *pair) any {
	v := c.get(p)
	if x, ok := v.(float64); ok {
		if math.IsNaN(x) || math.IsInf(x, 0) {
			return nil
		}
		return roundTo(x, c.decimals)
	}
	if v == "" {
		return nil
	}
	return v
}

// roundTo rounds to the number that is printed with so many decimals.
func roundTo(v float64, n int) float64 {
	r, err := strconv.ParseFloat(strconv.FormatFloat(v, 'f', n, 64), 64)
	if err != nil || r == 0 {
		return 0 // no negative zero
	}
	return r
}

// The functions below make columns.
func textColumn(name string, get func(p *pair) string) siteColumn {
	return siteColumn{name: name, sample: "", get: func(p *pair) any { return get(p) }}
}

func countColumn(name string, get func(p *pair) int) siteColumn {
	return siteColumn{name: name, sample: int64(0), get: func(p *pair) any { return int64(get(p)) }}
}

func numberColumn(name, title, unit string, n int, get func(p *pair) float64) siteColumn {
	return siteColumn{name, title, unit, n, 0.0, func(p *pair) any { return get(p) }}
}

func angleColumn(name, title string, get func(r *mask.SiteResult) geometry.Angle) siteColumn {
	return numberColumn(name, title, "°", 2, func(p *pair) float64 { return get(&p.result).Degrees() })
}

// azimuthColumn is angleColumn for a direction: 360 degrees, where rounding
// leads there, are 0.
func azimuthColumn(name, title string, get func(p *pair) geometry.Angle) siteColumn {
	return numberColumn(name, title, "°", 2, func(p *pair) float64 { return azimuth(get(p)) })
}

// azimuth is a direction in degrees, as it is printed with two decimals.
func azimuth(a geometry.Angle) float64 {
	if v := roundTo(a.Degrees(), 2); v == 360 {
		return 0
	}
	return a.Degrees()
}

func lengthColumn(name, title string, get func(r *mask.SiteResult) float64) siteColumn {
	return numberColumn(name, title, "m", 2, func(p *pair) float64 { return get(&p.result) })
}

func ratioColumn(name, title string, n int, get func(r *mask.SiteResult) float64) siteColumn {
	return numberColumn(name, title, "", n, func(p *pair) float64 { return get(&p.result) })
}

// siteColumns returns the columns of the sites themselves; the file writes one
// row a site.
func (r *siteReport) siteColumns() []siteColumn {
	coordinates := r.mapDecimals()
	return []siteColumn{
		textColumn("site", func(p *pair) string { return p.site.Name }),
		countColumn("record", func(p *pair) int { return p.site.Record }),
		textColumn("shape", func(p *pair) string { return string(p.site.Shape) }),
		numberColumn("lon", "", "°", 7, func(p *pair) float64 { return p.lon }),
		numberColumn("lat", "", "°", 7, func(p *pair) float64 { return p.lat }),
		numberColumn("x", "", "", coordinates, func(p *pair) float64 { return p.site.X }),
		numberColumn("y", "", "", coordinates, func(p *pair) float64 { return p.site.Y }),
		numberColumn("height", "", "m", 2, func(p *pair) float64 { return p.site.Height }),
		numberColumn("footprint", "", "m", 2, func(p *pair) float64 { return p.site.Footprint }),
		numberColumn("ground", "", "m", 2, func(p *pair) float64 { return p.result.Ground }),
		textColumn("problem", func(p *pair) string { return p.problem }),
	}
}

// mapDecimals is how many decimals map coordinates have: millimetres of a map
// in metres, tenths of a millimetre of one in degrees.
func (r *siteReport) mapDecimals() int {
	if r.src.Grid().Geographic {
		return 9
	}
	return 3
}

// resultColumns returns the columns of a site under a look, after those of the
// site and the look.
func (r *siteReport) resultColumns() []siteColumn {
	columns := []siteColumn{
		textColumn("look", func(p *pair) string { return p.look.Name }),
		textColumn("kind", func(p *pair) string { return string(p.look.Kind) }),
		countColumn("code", func(p *pair) int { return int(p.result.Class) }),
		textColumn("class", func(p *pair) string { return p.result.Class.String() }),
		textColumn("verdict", func(p *pair) string { return string(p.result.Verdict) }),
		textColumn("reason", func(p *pair) string { return p.result.Reason }),
		lengthColumn("clearance", "Clearance", func(r *mask.SiteResult) float64 { return r.Clearance }),
		lengthColumn("fold_margin", "Fold margin", func(r *mask.SiteResult) float64 { return r.FoldMargin }),
		lengthColumn("mast_to_clear", "Mast to clear", func(r *mask.SiteResult) float64 { return r.MastToClear }),
	}
	columns = append(columns, terrainColumns("blocker", "Hiding terrain",
		func(r *mask.SiteResult) *mask.Terrain { return &r.Blocker })...)
	columns = append(columns, terrainColumns("partner", "Folding terrain",
		func(r *mask.SiteResult) *mask.Terrain { return &r.Partner })...)
	columns = append(columns, viewColumns...)
	columns = append(columns, siteShareColumns...)
	columns = append(columns, chanceColumns...)
	return append(columns, r.reflector.columns()...)
}

// allColumns are those of one row a site and look.
func (r *siteReport) allColumns() []siteColumn {
	return append(r.siteColumns(), r.resultColumns()...)
}

func terrainColumns(name, title string, of func(r *mask.SiteResult) *mask.Terrain) []siteColumn {
	return []siteColumn{
		numberColumn(name+"_lon", title+", longitude", "°", 6, func(p *pair) float64 { return of(&p.result).Place.Lon.Degrees() }),
		numberColumn(name+"_lat", title+", latitude", "°", 6, func(p *pair) float64 { return of(&p.result).Place.Lat.Degrees() }),
		numberColumn(name+"_height", title+", height", "m", 2, func(p *pair) float64 { return of(&p.result).Height }),
		numberColumn(name+"_distance", title+", distance away from the radar", "m", 2, func(p *pair) float64 { return of(&p.result).Distance }),
	}
}

// viewColumns are how the radar sees a site.
var viewColumns = []siteColumn{
	angleColumn("incidence", "Incidence", func(r *mask.SiteResult) geometry.Angle { return r.Incidence }),
	angleColumn("local_incidence", "Local incidence", func(r *mask.SiteResult) geometry.Angle { return r.LocalIncidence }),
	angleColumn("range_incidence", "Range incidence", func(r *mask.SiteResult) geometry.Angle { return r.RangeIncidence }),
	azimuthColumn("look_azimuth", "Look azimuth", func(p *pair) geometry.Angle { return p.result.LookAzimuth }),
	azimuthColumn("to_radar", "To the radar, true north", func(p *pair) geometry.Angle { return p.result.ToRadar }),
	azimuthColumn("to_radar_grid", "To the radar, grid north", func(p *pair) geometry.Angle { return p.result.GridToRadar }),
	angleColumn("elevation", "Elevation of the radar", func(r *mask.SiteResult) geometry.Angle { return r.Elevation }),
	ratioColumn("los_east", "Line of sight, east", 6, func(r *mask.SiteResult) float64 { return r.LineOfSight.East }),
	ratioColumn("los_north", "Line of sight, north", 6, func(r *mask.SiteResult) float64 { return r.LineOfSight.North }),
	ratioColumn("los_up", "Line of sight, up", 6, func(r *mask.SiteResult) float64 { return r.LineOfSight.Up }),
	lengthColumn("slant_range", "Slant range", func(r *mask.SiteResult) float64 { return r.SlantRange }),
	ratioColumn("foreshortening", "Foreshortening", 4, func(r *mask.SiteResult) float64 { return r.Foreshortening }),
	lengthColumn("ground_resolution", "Ground resolution", func(r *mask.SiteResult) float64 { return r.GroundResolution }),
	ratioColumn("area_factor", "Area factor", 3, func(r *mask.SiteResult) float64 { return r.AreaFactor }),
	ratioColumn("downslope", "Downslope sensitivity", 4, func(r *mask.SiteResult) float64 { return r.Downslope }),
	lengthColumn("critical_baseline", "Critical baseline", func(r *mask.SiteResult) float64 { return r.CriticalBaseline }),
	lengthColumn("ambiguity_height", "Height of ambiguity", func(r *mask.SiteResult) float64 { return r.AmbiguityHeight }),
	numberColumn("fringe_mm", "One fringe along the line of sight", "mm", 3, func(p *pair) float64 { return 1000 * p.result.Fringe }),
	numberColumn("fringe_downslope_mm", "One fringe down the slope", "mm", 3, func(p *pair) float64 { return 1000 * p.result.FringeDownslope }),
}

// siteShareColumns are the parts of a footprint or of a shape, by kind.
var siteShareColumns = func() []siteColumn {
	var columns []siteColumn
	for kind, k := range []struct{ name, title string }{
		{"no_data", "no data"}, {"open", "open"}, {"compressed", "compressed"},
		{"layover", "layover"}, {"shadow", "shadow"}, {"undetermined", "undetermined"},
	} {
		columns = append(columns, numberColumn("share_"+k.name, "Share "+k.title, "", 4, func(p *pair) float64 {
			if p.site.Footprint == 0 && len(p.site.Paths) == 0 {
				return math.NaN() // a place has no parts
			}
			return p.result.Shares[kind]
		}))
	}
	return columns
}()

// chanceColumns are what simulated errors of the heights make of a site.
var chanceColumns = []siteColumn{
	ratioColumn("p_open", "Probability of open", 3, func(r *mask.SiteResult) float64 { return r.Chance.Open }),
	ratioColumn("p_folded", "Probability of folded", 3, func(r *mask.SiteResult) float64 { return r.Chance.Folded }),
	ratioColumn("p_hidden", "Probability of hidden", 3, func(r *mask.SiteResult) float64 { return r.Chance.Hidden }),
	ratioColumn("p_undetermined", "Probability of undetermined", 3, func(r *mask.SiteResult) float64 { return r.Chance.Undetermined }),
	ratioColumn("p_open_error", "Standard error of the first", 3, func(r *mask.SiteResult) float64 { return r.Chance.StdErr }),
}
