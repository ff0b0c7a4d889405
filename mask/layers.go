package mask

import "foldshade/geometry"

// Layer is one quantity that Run can compute for every cell.
type Layer string

// The layers. LayoverLayer and ShadowLayer and VerdictLayer hold class codes;
// the others hold floating-point values, NaN where there is none.
const (
	LayoverLayer     Layer = "layover"
	ShadowLayer      Layer = "shadow"
	LocalIncidence   Layer = "local-incidence"
	SlantRange       Layer = "slant-range"
	Foreshortening   Layer = "foreshortening"
	VerdictLayer     Layer = "verdict"
	Returns          Layer = "returns"
	Share            Layer = "share"
	Incidence        Layer = "incidence"
	RangeIncidence   Layer = "range-incidence"
	Clearance        Layer = "clearance"
	FoldMargin       Layer = "fold-margin"
	LineOfSight      Layer = "line-of-sight"
	GroundResolution Layer = "ground-resolution"
	AreaFactor       Layer = "area-factor"
	Downslope        Layer = "downslope"
	OrientationShift Layer = "orientation-shift"
	CriticalBaseline Layer = "critical-baseline"
	AmbiguityHeight  Layer = "ambiguity-height"
	WindowLow        Layer = "window-low"
	WindowHigh       Layer = "window-high"
)

// LayerInfo is what files and tables say of a layer.
type LayerInfo struct {
	Layer       Layer
	Title       string
	Unit        string // UDUNITS: "m", "degree", "1"; empty for classes
	Description string
	IsClass     bool
	Bands       []string // band names; one unless the layer is a vector
}

// DefaultLayers is what is written when the user names none.
var DefaultLayers = []Layer{LayoverLayer, ShadowLayer, LocalIncidence, SlantRange, Foreshortening}

// Layers lists every layer with its description, in the order of the docs.
var Layers = []LayerInfo{
	{LayoverLayer, "Layover", "", "layover classes; a hidden cell has no echo to fold and keeps its shadow code", true, []string{"layover"}},
	{ShadowLayer, "Shadow", "", "shadow classes; a lit cell is open, folded or not", true, []string{"shadow"}},
	{LocalIncidence, "Local incidence", "degree", "angle between the terrain's outward normal and the direction to the antenna", false, []string{"local-incidence"}},
	{SlantRange, "Slant range", "m", "straight distance from the antenna to the ground", false, []string{"slant-range"}},
	{Foreshortening, "Foreshortening", "1", "slant range gained per ground metre over the same on flat ground: 1 flat, 0 fully compressed, negative in active layover", false, []string{"foreshortening"}},
	{VerdictLayer, "Verdict", "", "the worst class that applies, compressed below the foreshortening limit included", true, []string{"verdict"}},
	{Incidence, "Incidence", "degree", "angle between the ellipsoid's outward normal and the direction to the antenna", false, []string{"incidence"}},
	{RangeIncidence, "Range incidence", "degree", "incidence less the terrain slope in the range plane: 0 or less in active layover, 90 or more in self shadow", false, []string{"range-incidence"}},
	{Clearance, "Clearance", "m", "height of the ground above the shadow boundary; negative: the mast that would see the radar", false, []string{"clearance"}},
	{FoldMargin, "Fold margin", "m", "slant range to the nearest overlap; negative: depth of the overlap", false, []string{"fold-margin"}},
	{Returns, "Returns", "1", "number of lit points of the range line that share the cell's slant range, itself included", false, []string{"returns"}},
	{Share, "Share", "1", "the cell's own part of the lit ground in its range bin, by length along the range line", false, []string{"share"}},
	{LineOfSight, "Line of sight", "1", "unit vector from the ground to the antenna", false, []string{"east", "north", "up"}},
	{GroundResolution, "Ground resolution", "m", "ground distance along the range line covered by one range resolution cell", false, []string{"ground-resolution"}},
	{AreaFactor, "Area factor", "1", "illuminated area per slant-range cell relative to flat ground", false, []string{"area-factor"}},
	{Downslope, "Downslope", "1", "part of a unit downslope motion that the line of sight records, positive towards the radar", false, []string{"downslope"}},
	{OrientationShift, "Orientation shift", "degree", "polarisation orientation shift from the azimuth slope", false, []string{"orientation-shift"}},
	{CriticalBaseline, "Critical baseline", "m", "perpendicular baseline at which the spectra of two passes no longer overlap", false, []string{"critical-baseline"}},
	{AmbiguityHeight, "Ambiguity height", "m", "height difference of one interferometric fringe", false, []string{"ambiguity-height"}},
	{WindowLow, "Window low", "degree", "incidence above which the cell is not folded, for the azimuth of the look, 5 to 85", false, windowBands},
	{WindowHigh, "Window high", "degree", "incidence below which the cell is not hidden, for the azimuth of the look, 5 to 85", false, windowBands},
}

// windowBands are the bands of the two window layers: by the terrain that the
// DEM shows, and with what may stand where it shows none at its worst. At the
// incidences between the two the cell is undetermined.
var windowBands = []string{"shown", "worst"}

// Info returns the description of a layer; ok is false for an unknown name.
func Info(l Layer) (info LayerInfo, ok bool) {
	for _, i := range Layers {
		if i.Layer == l {
			return i, true
		}
	}
	return LayerInfo{}, false
}

// Lacks returns what the look lacks for a layer, as the keys the user would
// add ("bandwidth_mhz"), or nil when the layer can be computed.
func Lacks(l Layer, look geometry.Look) []string {
	var missing []string
	need := func(value float64, key string) {
		if value != value {
			missing = append(missing, key)
		}
	}
	switch l {
	case GroundResolution, Share:
		need(look.Bandwidth, "bandwidth_mhz")
	case CriticalBaseline:
		need(look.Wavelength, "frequency_ghz")
		need(look.Bandwidth, "bandwidth_mhz")
	case AmbiguityHeight:
		need(look.Wavelength, "frequency_ghz")
		need(look.Baseline, "baseline")
	}
	if (l == WindowLow || l == WindowHigh) && look.Kind != geometry.Fixed {
		missing = append(missing, "azimuth") // one everywhere: a fixed look's
	}
	if (l == CriticalBaseline || l == AmbiguityHeight) && look.Kind == geometry.Fixed {
		need(look.SlantRange, "slant_range_km")
	}
	return missing
}
