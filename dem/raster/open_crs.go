package raster

import (
	"encoding/xml"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"sync/atomic"

	"github.com/airbusgeo/godal"
)

// sheet is GDAL's own description of the file, as the XML of a virtual
// raster: the one place where it states the unit of a band.
type sheet struct {
	SRS  string `xml:"SRS"`
	Band struct {
		Unit string `xml:"UnitType"`
	} `xml:"VRTRasterBand"`
}

var sheetCount atomic.Int64

// describe has GDAL describe one band, under another CRS when one is given.
func (d *DEM) describe(band int, crs string) (*sheet, error) {
	log := godal.ErrLogger(d.log.handle)
	if crs != "" {
		sr, err := godal.NewSpatialRef(crs, log)
		if err != nil {
			return nil, refuse(d.name, err, "the CRS %q is not understood (GDAL: %s); --crs takes EPSG:code, WKT or a PROJ string", crs, said(d.name, err))
		}
		sr.Close()
	}
	path := fmt.Sprintf("/vsimem/sheet-%d.vrt", sheetCount.Add(1))
	switches := []string{"-of", "VRT", "-b", strconv.Itoa(band)}
	if crs != "" {
		switches = append(switches, "-a_srs", crs)
	}
	text, err := d.sheetText(path, switches)
	if err != nil {
		return nil, refuse(d.name, err, "its header cannot be read (GDAL: %s); check it with gdalinfo", said(d.name, err))
	}
	s := &sheet{}
	if err := xml.Unmarshal(text, s); err != nil {
		return nil, refuse(d.name, err, "its header cannot be read (%v); check it with gdalinfo", err)
	}
	return s, nil
}

func (d *DEM) sheetText(path string, switches []string) ([]byte, error) {
	log := godal.ErrLogger(d.log.handle)
	out, err := d.ds.Translate(path, switches, log)
	if err != nil {
		return nil, err
	}
	if err := out.Close(log); err != nil {
		return nil, err
	}
	defer func() { _ = godal.VSIUnlink(path, log) }() // in memory only
	f, err := godal.VSIOpen(path, log)
	if err != nil {
		return nil, err
	}
	text, err := io.ReadAll(f)
	if closing := f.Close(); err == nil {
		err = closing
	}
	return text, err
}

// reference is what the CRS says.
type reference struct {
	name, code   string
	horizontal   *wktNode // the CRS without its vertical part
	vertical     *wktNode // nil when there is none
	verticalText string   // the same as written, bound to a grid or not
	ellipsoidal  bool     // the CRS is three-dimensional
	geographic   bool
	unit         string
	unitSize     float64 // metres or radians
	heightUnit   string  // of the vertical part or third axis; empty when none
	heightMetres float64
	wkt          string // WKT2, the vertical part included
}

// reference reads the CRS and parts it into horizontal and vertical.
func (d *DEM) reference(s *sheet) (*reference, error) {
	text := strings.TrimSpace(s.SRS)
	if text == "" {
		return nil, refuse(d.name, nil, "has no coordinate reference system; name it with --crs, such as --crs EPSG:32632")
	}
	r := &reference{}
	var err error
	var root *wktNode
	if r.wkt, err = wkt2(text); err == nil {
		root, err = parseWKT(r.wkt)
	}
	if err != nil {
		return nil, refuse(d.name, err, "its coordinate reference system cannot be read (%v); name it with --crs, such as --crs EPSG:32632", err)
	}
	r.name, r.code = root.name(), root.code()
	r.part(root)
	core := base(r.horizontal)
	r.geographic = core != nil && core.is("GEOGCRS", "GEODCRS")
	if core == nil || !r.geographic && !core.is("PROJCRS") || r.geographic && core.system() != "ellipsoidal" {
		return nil, refuse(d.name, nil, "its coordinate reference system %q is neither geographic nor projected; name another with --crs, or reproject it with gdalwarp", root.name())
	}
	if r.name == "" {
		r.name, r.code = core.name(), core.code()
	}
	if r.unit, r.unitSize = core.unit(""); !(r.unitSize > 0) || math.IsInf(r.unitSize, 0) {
		return nil, refuse(d.name, nil, "its coordinate reference system %q states no usable unit; name another with --crs", r.name)
	}
	if r.vertical != nil {
		r.heightUnit, r.heightMetres = r.vertical.unit("")
	} else if r.ellipsoidal = core.dimensions() == 3; r.ellipsoidal {
		r.heightUnit, r.heightMetres = core.unit("up")
	}
	return r, nil
}

// part finds the horizontal and the vertical part.
func (r *reference) part(root *wktNode) {
	r.horizontal = root
	if !root.is("COMPOUNDCRS") {
		return
	}
	r.horizontal = root.kid("PROJCRS", "GEOGCRS", "GEODCRS", "BOUNDCRS", "ENGCRS")
	for _, k := range root.kids {
		if b := base(k); b != nil && b.is("VERTCRS") {
			r.vertical, r.verticalText = b, k.text
		}
	}
}

// base is the CRS under a bound one, or the CRS itself; nil of nil.
func base(n *wktNode) *wktNode {
	if n == nil || !n.is("BOUNDCRS") {
		return n
	}
	source := n.kid("SOURCECRS")
	if source == nil || len(source.kids) == 0 {
		return nil
	}
	return source.kids[0]
}

// heights says what the heights refer to: "ellipsoid", the name of a vertical
// CRS, or nothing.
func (r *reference) heights() string {
	switch {
	case r.vertical != nil:
		return r.vertical.name()
	case r.ellipsoidal:
		return "ellipsoid"
	}
	return ""
}
