package raster

import (
	"encoding/json"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"

	"github.com/airbusgeo/godal"
)

// Facts is what the header of a DEM says, for people and machines. Angles are
// degrees, lengths metres, rows and columns count from 0.
type Facts struct {
	Name     string   `json:"name"`
	Driver   string   `json:"driver"`
	Files    []string `json:"files"` // those on disk that it is read from
	Rows     int      `json:"rows"`
	Cols     int      `json:"cols"`
	Bands    int      `json:"bands"`
	Band     int      `json:"band"` // the one taken, from 1
	DataType string   `json:"data_type"`
	Block    [2]int   `json:"block_rows_cols"` // storage block
	Nodata   *Number  `json:"nodata"`          // stored value; null when none is declared
	Mask     string   `json:"mask"`            // "none", "nodata", "mask band" or "alpha band"
	Scale    float64  `json:"scale"`           // height = (stored*scale + offset) * vertical unit
	Offset   float64  `json:"offset"`

	CRS                string  `json:"crs"`
	CRSCode            string  `json:"crs_code"` // such as EPSG:32632; empty without one
	Geographic         bool    `json:"geographic"`
	MapUnit            string  `json:"map_unit"`
	MapUnitSize        float64 `json:"map_unit_size"` // metres, or radians when geographic
	VerticalCRS        string  `json:"vertical_crs"`  // "ellipsoid", a name, or empty when unknown
	VerticalCode       string  `json:"vertical_code"`
	VerticalUnit       string  `json:"vertical_unit"`
	VerticalUnitM      float64 `json:"vertical_unit_m"`
	VerticalUnitSource string  `json:"vertical_unit_source"` // "given", "band", "crs" or "assumed"
	// HeightShift is what was added to the heights of the file to make them
	// ellipsoidal; null for nothing.
	HeightShift *HeightShift `json:"height_shift"`

	PixelIs   string     `json:"pixel_is"`  // "area" or "point", as the file says
	SouthUp   bool       `json:"south_up"`  // the first row is the southern edge
	Transform [6]float64 `json:"transform"` // GDAL's order, of the outer corner
	Centre    Place      `json:"centre"`
	Corners   []Place    `json:"corners"` // outer corners: first row first column, first row last column, last row first column, last row last column
	Held      bool       `json:"held"`    // heights fit the memory they may take
}

// Place is a position on the grid, with the ground under it.
type Place struct {
	X   float64 `json:"x"`
	Y   float64 `json:"y"`
	Lon float64 `json:"lon"`
	Lat float64 `json:"lat"`
	// ColM and RowM are the ground metres of one column and one row.
	ColM float64 `json:"column_m"`
	RowM float64 `json:"row_m"`
	// Convergence is the azimuth of grid north from true north, degrees,
	// positive east, in (-180, 180].
	Convergence float64 `json:"convergence"`
}

// Number is a float64 that JSON can carry when it is no number: NaN and the
// infinities become strings.
type Number float64

// MarshalJSON writes the number, or "NaN", "+Inf", "-Inf".
func (n Number) MarshalJSON() ([]byte, error) {
	v := float64(n)
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return json.Marshal(strconv.FormatFloat(v, 'g', -1, 64))
	}
	return json.Marshal(v)
}

// collect fills the facts.
func (d *DEM) collect(band int, r *reference, u verticalUnit) {
	s := d.band.Structure()
	g := d.grid
	f := Facts{
		Name: d.name, Driver: d.ds.Driver().ShortName(), Files: sourceFiles(d.name, 0),
		Rows: g.Rows, Cols: g.Cols, Bands: d.ds.Structure().NBands, Band: band,
		DataType: s.DataType.String(), Block: [2]int{s.BlockSizeY, s.BlockSizeX},
		Mask: d.decod.maskName(d.band.MaskFlags()), Scale: d.decod.scale, Offset: d.decod.offset,
		CRS: r.name, CRSCode: r.code, Geographic: r.geographic, MapUnit: r.unit, MapUnitSize: r.unitSize,
		VerticalCRS: r.heights(), VerticalUnit: u.name, VerticalUnitM: u.metres, VerticalUnitSource: u.source,
		PixelIs: "area", SouthUp: g.Transform[5] > 0, Transform: g.Transform, Held: d.hold,
	}
	if d.decod.hasNodata {
		v := Number(d.decod.nodata)
		f.Nodata = &v
	}
	if r.vertical != nil {
		f.VerticalCode = r.vertical.code()
	}
	if strings.EqualFold(d.ds.Metadata("AREA_OR_POINT", godal.ErrLogger(d.log.handle)), "point") {
		f.PixelIs = "point"
	}
	lastR, lastC := float64(g.Rows)-0.5, float64(g.Cols)-0.5
	f.Centre = d.at((lastR-0.5)/2, (lastC-0.5)/2)
	f.Corners = []Place{d.at(-0.5, -0.5), d.at(-0.5, lastC), d.at(lastR, -0.5), d.at(lastR, lastC)}
	d.facts = f
}

// at describes a fractional cell position.
func (d *DEM) at(row, col float64) Place {
	l := d.grid.At(row, col)
	p := Place{Lon: l.Lon.Degrees(), Lat: l.Lat.Degrees(), ColM: math.Hypot(l.ColE, l.ColN), RowM: math.Hypot(l.RowE, l.RowN)}
	p.X, p.Y = d.grid.XY(row, col)
	p.Lon -= 360 * math.Floor((p.Lon+180)/360)
	up := 1.0 // rows that run north
	if d.grid.Transform[5] < 0 {
		up = -1
	}
	p.Convergence = math.Atan2(up*l.RowE, up*l.RowN) * 180 / math.Pi
	return p
}

// maskName names how missing cells are told.
func (d *decoder) maskName(flags int) string {
	switch {
	case d.masked && flags&maskAlpha != 0:
		return "alpha band"
	case d.masked && flags&maskNodata == 0:
		return "mask band"
	case d.masked, d.hasNodata:
		return "nodata"
	}
	return "none"
}

// sourceFiles lists the files on disk behind a GDAL name: the file or archive
// itself, its sidecars, and what a virtual raster names. Names on the network
// are left out.
func sourceFiles(name string, depth int) []string {
	path, info := fileBehind(name)
	if info == nil || depth > maxNesting {
		return nil
	}
	files := []string{path}
	for _, side := range sidecars {
		if _, err := os.Stat(path + side); err == nil {
			files = append(files, path+side)
		}
	}
	for _, source := range vrtSources(path) {
		for _, f := range sourceFiles(source, depth+1) {
			if !slices.Contains(files, f) {
				files = append(files, f)
			}
		}
	}
	return files
}
