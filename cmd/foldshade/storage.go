package main

import (
	"math"

	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// angleStep is the step of stored angles, degrees: rounding moves an angle by
// at most 0.0025 degrees, and 16 bits of such steps span 327 degrees.
const angleStep = 0.005

// storage is how the values of a layer lie in its file; see raster.Layer.
// Quanta are powers of two well below what a DEM can decide.
type storage struct {
	scale, offset, quantum float64
	nearest                bool // values jump: overviews do not average
}

var storages = map[mask.Layer]storage{
	mask.LocalIncidence:   {scale: angleStep, offset: 90}, // 0 to 180
	mask.Incidence:        {scale: angleStep, offset: 90},
	mask.RangeIncidence:   {scale: angleStep, offset: 45}, // -90 to 180
	mask.OrientationShift: {scale: angleStep},             // -90 to 90
	mask.WindowLow:        {scale: angleStep, offset: 45}, // 5 to 85
	mask.WindowHigh:       {scale: angleStep, offset: 45},

	mask.SlantRange:       {quantum: 1.0 / 64},
	mask.Clearance:        {quantum: 1.0 / 64},
	mask.FoldMargin:       {quantum: 1.0 / 64},
	mask.Foreshortening:   {quantum: 1.0 / 2048},
	mask.LineOfSight:      {quantum: 1.0 / (1 << 16)},
	mask.Downslope:        {quantum: 1.0 / (1 << 14)},
	mask.GroundResolution: {quantum: 1.0 / 1024, nearest: true},
	mask.AreaFactor:       {quantum: 1.0 / 1024, nearest: true},
	mask.CriticalBaseline: {quantum: 1.0 / 64, nearest: true},
	mask.AmbiguityHeight:  {quantum: 1.0 / 1024, nearest: true},
	mask.Returns:          {quantum: 1, nearest: true},
	mask.Share:            {quantum: 1.0 / 2048, nearest: true},
}

// rasterLayer says what the file of a layer of a look holds.
func rasterLayer(info mask.LayerInfo, look geometry.Look, metadata map[string]string) raster.Layer {
	l := raster.Layer{
		Name: string(info.Layer), Title: info.Title, Unit: info.Unit, Description: info.Description,
		Metadata: metadata,
	}
	if info.Layer == mask.SlantRange && look.Kind == geometry.Fixed && math.IsNaN(look.SlantRange) {
		l.Description += "; relative to the DEM centre at height 0, since the look gives no reference range"
	}
	if info.IsClass {
		for _, c := range mask.Classes {
			l.Classes = append(l.Classes, raster.ClassEntry{
				Value: uint8(c.Code), Name: c.Name, Title: c.Title, Description: c.Description, Color: c.Color,
			})
		}
		return l
	}
	s := storages[info.Layer]
	l.Scale, l.Offset, l.Quantum, l.NearestOverviews = s.scale, s.offset, s.quantum, s.nearest
	if len(info.Bands) > 1 {
		for _, name := range info.Bands {
			l.Bands = append(l.Bands, raster.Band{Name: name, Description: l.Description + ", " + name})
		}
	}
	return l
}

// fileMetadata is what every raster of a look says of its making.
func fileMetadata(command []string, dem string, look geometry.Look, o mask.Options) map[string]string {
	items := map[string]string{
		"TIFFTAG_SOFTWARE": "foldshade " + toolVersion(),
		"AREA_OR_POINT":    "Area",
		"command":          shellJoin(command),
		"dem":              dem,
		"look":             look.String(),
		"edge":             "unknown",
	}
	if o.OpenEdge {
		items["edge"] = "open"
	}
	if !math.IsNaN(o.Ceiling) {
		items["ceiling"] = shortest(o.Ceiling) + " m"
	}
	if !math.IsNaN(o.HoleHeight) {
		items["hole_height"] = shortest(o.HoleHeight) + " m"
	}
	return items
}
