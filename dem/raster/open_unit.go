package raster

import (
	"math"
	"strings"
)

// usFoot is the US survey foot in metres, 1200/3937; the international foot is
// 0.3048 m. Source: US National Bureau of Standards notice, Federal Register
// 24 FR 5348, 1959 (from memory); EPSG units 9003 and 9002.
const usFoot = 1200.0 / 3937.0

// lengths are the spellings of units in files and on the command line, lower
// case, without spaces, dots, underscores and hyphens.
var lengths = map[string]float64{
	"m": 1, "metre": 1, "meter": 1, "metres": 1, "meters": 1, "mtr": 1,
	"ft": 0.3048, "foot": 0.3048, "feet": 0.3048, "internationalfoot": 0.3048, "internationalfeet": 0.3048, "ftint": 0.3048, "ftintl": 0.3048, "footinternational": 0.3048,
	"usft": usFoot, "ftus": usFoot, "ussurveyfoot": usFoot, "ussurveyfeet": usFoot, "footus": usFoot, "usfoot": usFoot, "usfeet": usFoot, "surveyfoot": usFoot, "surveyfeet": usFoot, "footussurvey": usFoot, "ftussurvey": usFoot,
	"km": 1000, "kilometre": 1000, "kilometer": 1000, "kilometres": 1000, "kilometers": 1000,
	"dm": 0.1, "decimetre": 0.1, "decimeter": 0.1, "decimetres": 0.1, "decimeters": 0.1,
	"cm": 0.01, "centimetre": 0.01, "centimeter": 0.01, "centimetres": 0.01, "centimeters": 0.01,
	"mm": 0.001, "millimetre": 0.001, "millimeter": 0.001, "millimetres": 0.001, "millimeters": 0.001,
}

// length returns the metres in a unit by name.
func length(name string) (float64, bool) {
	key := strings.Map(func(r rune) rune {
		if strings.ContainsRune(" ._-()[]\t", r) {
			return -1
		}
		return r
	}, strings.ToLower(name))
	v, ok := lengths[key]
	return v, ok
}

// verticalUnit is the unit of the heights and where it was learnt.
type verticalUnit struct {
	name, source string
	metres       float64
}

// verticalUnit decides the unit of the heights: the option, the band, the
// vertical CRS, metres.
func (d *DEM) verticalUnit(s *sheet, r *reference, asked string) (verticalUnit, error) {
	if asked != "" {
		v, ok := length(asked)
		if !ok {
			return verticalUnit{}, refuse(d.name, nil, "the vertical unit %q is not known; --vertical-unit takes m, ft, us-ft, km, dm, cm or mm", asked)
		}
		return verticalUnit{asked, "given", v}, nil
	}
	if s.Band.Unit != "" {
		v, ok := length(s.Band.Unit)
		if ok {
			if r.heightMetres > 0 && math.Abs(v/r.heightMetres-1) > 1e-3 {
				d.log.add("the band says its heights are in " + s.Band.Unit + ", its CRS says " + r.heightUnit + ": the band is believed; say --vertical-unit if it is wrong")
			}
			return verticalUnit{s.Band.Unit, "band", v}, nil
		}
		d.log.add("the band's unit is \"" + s.Band.Unit + "\", which is no length: heights are used as metres; say --vertical-unit if they are not")
		return verticalUnit{"m", "assumed", 1}, nil
	}
	if r.heightMetres > 0 {
		return verticalUnit{r.heightUnit, "crs", r.heightMetres}, nil
	}
	if !r.geographic && math.Abs(r.unitSize/0.3048-1) < 1e-3 {
		d.log.add("the map is in " + r.unit + " and the unit of the heights is not stated: they are used as metres; if they are feet, say --vertical-unit ft or us-ft")
	}
	return verticalUnit{"m", "assumed", 1}, nil
}
