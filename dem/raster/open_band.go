package raster

import (
	"fmt"
	"math"
	"strings"

	"github.com/airbusgeo/godal"
)

// unfit says why a band cannot hold heights; empty when it can. forced bands
// were named by the user, who may know better than the colour table.
func unfit(b godal.Band, forced bool) string {
	s, ci := b.Structure(), b.ColorInterp()
	switch s.DataType {
	case godal.CInt16, godal.CInt32, godal.CFloat32, godal.CFloat64:
		return "complex numbers"
	case godal.Unknown:
		return "unknown data type"
	}
	if forced {
		return ""
	}
	switch {
	case ci == godal.CIPalette:
		return "colour indices"
	case ci == godal.CIAlpha:
		return "an alpha mask"
	case (s.DataType == godal.Byte || s.DataType == godal.UInt16) && ci >= godal.CIRed:
		return "an image channel (" + strings.ToLower(ci.Name()) + ")"
	}
	return ""
}

// chooseBand returns the number, from 1, of the band to take: the asked one,
// or the first that can hold heights.
func chooseBand(name string, bands []godal.Band, asked int) (int, error) {
	if asked != 0 {
		if asked < 0 || asked > len(bands) {
			return 0, refuse(name, nil, "has no band %d; --band takes 1 to %d", asked, len(bands))
		}
		if why := unfit(bands[asked-1], true); why != "" {
			return 0, refuse(name, nil, "band %d holds %s, not heights; choose another with --band", asked, why)
		}
		return asked, nil
	}
	var found []string
	for i, b := range bands {
		why := unfit(b, false)
		if why == "" {
			return i + 1, nil
		}
		if i < 4 {
			found = append(found, fmt.Sprintf("band %d holds %s", i+1, why))
		}
	}
	return 0, refuse(name, nil, "no band that looks like heights (%s); give a raster of heights, or name the band with --band if one of them is", strings.Join(found, ", "))
}

// decoder turns stored values into heights in metres.
type decoder struct {
	dtype         godal.DataType
	wide          bool // stored values need float64
	masked        bool // a mask or alpha band tells missing cells
	hasNodata     bool
	nodata        float64
	nodata32      float32
	scale, offset float64 // of the band
	mul, add      float64 // height = stored*mul + add, metres
	plain         bool    // mul is 1 and add is 0
}

// GDAL's mask flags, RFC 15.
const (
	maskAllValid = 1
	maskAlpha    = 4
	maskNodata   = 8
)

// huge is where a stored number stops being a height: formats write values
// such as 1e30, 3.4e38 or 1e100 for "nothing here", declared or not. They are
// taken as no height, as infinities are.
const huge = 1e30

func newDecoder(b godal.Band, unit float64) decoder {
	s := b.Structure()
	d := decoder{dtype: s.DataType, scale: s.Scale, offset: s.Offset}
	if d.scale == 0 || math.IsNaN(d.scale) || math.IsInf(d.scale, 0) { // no scale at all
		d.scale = 1
	}
	if math.IsNaN(d.offset) || math.IsInf(d.offset, 0) {
		d.offset = 0
	}
	d.mul, d.add = d.scale*unit, d.offset*unit
	d.plain = d.mul == 1 && d.add == 0
	switch s.DataType {
	case godal.Byte, godal.Int8, godal.Int16, godal.UInt16, godal.Float32:
	default:
		d.wide = true
	}
	d.nodata, d.hasNodata = b.NoData()
	d.nodata32 = float32(d.nodata)
	flags := b.MaskFlags()
	d.masked = flags&maskAllValid == 0 && flags != maskNodata
	return d
}

// narrow decodes float32 values in place; the tally, when there is one,
// learns of suspicious stored values.
func (d *decoder) narrow(v []float32, t *tally) {
	nan := float32(math.NaN())
	for i, x := range v {
		if t != nil && (x <= lowSuspect || x >= highSuspect) && !(d.hasNodata && x == d.nodata32) {
			t.stored(float64(x), i)
		}
		switch {
		case d.hasNodata && x == d.nodata32, !(x > -huge && x < huge):
			v[i] = nan
		case !d.plain:
			v[i] = d.height(float64(x))
		}
	}
}

// widen decodes float64 values into dst.
func (d *decoder) widen(dst []float32, v []float64, t *tally) {
	nan := float32(math.NaN())
	for i, x := range v {
		if t != nil && (x <= lowSuspect || x >= highSuspect) && !(d.hasNodata && x == d.nodata) {
			t.stored(x, i)
		}
		if d.hasNodata && x == d.nodata || !(x > -huge && x < huge) {
			dst[i] = nan
			continue
		}
		dst[i] = d.height(x)
	}
}

// height scales one stored value; NaN when a wild scale leaves the range.
func (d *decoder) height(x float64) float32 {
	h := x*d.mul + d.add
	if !(h > -huge && h < huge) {
		return float32(math.NaN())
	}
	return float32(h)
}
