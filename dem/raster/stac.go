package raster

import (
	"encoding/json"
	"fmt"
	"maps"
	"math"
	"path"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Item is a STAC 1.1.0 Item: what a set of files over one window of a grid
// is, for catalogues. Fields of a trade (sar:..., view:...) come from the
// caller, and the extensions they need are listed by themselves.
type Item struct {
	ID, Title, Description string
	Grid                   *dem.Grid
	Window                 dem.Window
	// Time becomes "datetime", and "created" and "processing:datetime" too
	// when Created is zero. TimeMeaning says in words what the time is: a plan
	// has no acquisition.
	Time        time.Time
	TimeMeaning string
	Created     time.Time
	// Sampling is "area" or "point", what the cells stand for.
	Sampling string
	// Software and Lineage are how the files were made: program to version,
	// and the command.
	Software map[string]string
	Lineage  string
	// Properties are further properties; they win over those made here.
	Properties map[string]any
	Assets     []Asset
	Links      []Link
}

// Link leads to something related.
type Link struct {
	Href  string `json:"href"`
	Rel   string `json:"rel"`
	Type  string `json:"type,omitempty"`
	Title string `json:"title,omitempty"`
}

// Asset is one file of an item.
type Asset struct {
	Key  string // unique in the item
	Href string // relative to the item, forward slashes
	// Fields are those of the asset: title, roles, bands and so on.
	Fields map[string]any
}

// Media types of assets.
const (
	TypeCOG     = "image/tiff; application=geotiff; profile=cloud-optimized"
	TypeGeoJSON = "application/geo+json"
	TypeJSON    = "application/json"
	TypePNG     = "image/png"
	TypeText    = "text/plain"
	TypeXML     = "application/xml"
)

// extensions are the schemas of the prefixes that fields may have.
var extensions = map[string]string{
	"classification": "https://stac-extensions.github.io/classification/v2.0.0/schema.json",
	"file":           "https://stac-extensions.github.io/file/v2.1.0/schema.json",
	"proj":           "https://stac-extensions.github.io/projection/v2.0.0/schema.json",
	"processing":     "https://stac-extensions.github.io/processing/v1.2.0/schema.json",
	"raster":         "https://stac-extensions.github.io/raster/v2.0.0/schema.json",
	"sar":            "https://stac-extensions.github.io/sar/v1.3.0/schema.json",
	"sat":            "https://stac-extensions.github.io/sat/v1.2.0/schema.json",
	"view":           "https://stac-extensions.github.io/view/v1.1.0/schema.json",
}

// Asset describes the finished raster as an asset of an item that lies in the
// same folder. Roles are added to "data". It panics before Finish.
func (w *Writer) Asset(roles ...string) Asset {
	if !w.finished() {
		panic("raster: asset of a raster that is not finished")
	}
	fields := map[string]any{
		"type":          TypeCOG,
		"roles":         append([]string{"data"}, roles...),
		"file:size":     w.size,
		"file:checksum": w.checksum,
	}
	text(fields, "title", w.layer.Title)
	text(fields, "description", w.layer.Description)
	if len(w.bands) == 1 {
		// One band: its fields may stand at the asset.
		maps.Copy(fields, w.bandFields(0))
		return Asset{w.layer.Name, path.Base(w.rel), fields}
	}
	var bands []map[string]any
	for i, b := range w.bands {
		f := w.bandFields(i)
		f["name"] = b.Name
		text(f, "description", b.Description)
		bands = append(bands, f)
	}
	fields["bands"] = bands
	return Asset{w.layer.Name, path.Base(w.rel), fields}
}

// Asset describes a closed file as an asset of an item in the same folder.
func (f *File) Asset(key, title, mediaType string, roles ...string) Asset {
	return Asset{key, path.Base(f.rel), map[string]any{
		"type": mediaType, "title": title, "roles": roles,
		"file:size": f.Size(), "file:checksum": f.Checksum(),
	}}
}

func text(fields map[string]any, key, value string) {
	if value != "" {
		fields[key] = value
	}
}

// bandFields are the common fields of a band, and its classes.
func (w *Writer) bandFields(i int) map[string]any {
	f := map[string]any{"data_type": w.store.stac}
	if math.IsNaN(w.store.nodata) {
		f["nodata"] = "nan"
	} else {
		f["nodata"] = w.store.nodata
	}
	text(f, "unit", w.bands[i].Unit)
	if w.layer.Scale != 0 {
		f["raster:scale"], f["raster:offset"] = w.layer.Scale, w.layer.Offset
	}
	if w.layer.Classes != nil {
		f["classification:classes"] = classObjects(w.layer.Classes)
		return f
	}
	// Statistics are "of all the values" and the unit that "of the value", so
	// both speak of what scale and offset make of the stored number.
	s := w.physical(w.stats[i])
	stats := map[string]any{"count": s.All, "valid_percent": 100 * float64(s.Valid) / float64(s.All)}
	if s.Valid > 0 {
		stats["minimum"], stats["maximum"] = tidy(s.Min), tidy(s.Max)
		stats["mean"], stats["stddev"] = tidy(s.Mean), tidy(s.StdDev)
	}
	f["statistics"] = stats
	return f
}

// tidy rounds to ten significant digits: more than the cells have, and few
// enough to hide that 0.005 times a whole number is not exact.
func tidy(v float64) float64 {
	short, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'g', 10, 64), 64) // reads what it wrote
	return short
}

func classObjects(classes []ClassEntry) []map[string]any {
	var all []map[string]any
	for _, c := range classes {
		o := map[string]any{"value": c.Value, "name": c.Name}
		text(o, "title", c.Title)
		text(o, "description", c.Description)
		text(o, "color_hint", strings.ToUpper(strings.TrimPrefix(c.Color, "#")))
		if c.Value == 0 {
			o["nodata"] = true
		}
		all = append(all, o)
	}
	return all
}

// JSON returns the item as indented text. The error says which field cannot
// be written.
func (it *Item) JSON() ([]byte, error) {
	outline, box := it.outline()
	properties := it.properties()
	assets := map[string]any{}
	for _, a := range it.Assets {
		f := maps.Clone(a.Fields)
		f["href"] = a.Href
		assets[a.Key] = f
	}
	links := it.Links
	if links == nil {
		links = []Link{}
	}
	out, err := json.MarshalIndent(map[string]any{
		"type":            "Feature",
		"stac_version":    "1.1.0",
		"stac_extensions": schemas(properties, assets),
		"id":              it.ID,
		"geometry":        map[string]any{"type": "Polygon", "coordinates": [][][2]float64{outline}},
		"bbox":            box,
		"properties":      properties,
		"links":           links,
		"assets":          assets,
	}, "", "  ")
	if err != nil {
		return nil, fmt.Errorf("item %q: %w", it.ID, err)
	}
	return append(out, '\n'), nil
}

func (it *Item) properties() map[string]any {
	created := it.Created
	if created.IsZero() {
		created = it.Time
	}
	p := map[string]any{
		"datetime":            it.Time.UTC().Format(time.RFC3339),
		"created":             created.UTC().Format(time.RFC3339),
		"processing:datetime": created.UTC().Format(time.RFC3339),
	}
	text(p, "title", it.Title)
	description := it.Description
	if it.TimeMeaning != "" {
		description = strings.TrimSpace(description + " The datetime is " + it.TimeMeaning + ".")
	}
	text(p, "description", description)
	text(p, "processing:lineage", it.Lineage)
	text(p, "raster:sampling", it.Sampling)
	if len(it.Software) > 0 {
		p["processing:software"] = it.Software
	}
	it.project(p)
	maps.Copy(p, it.Properties)
	return p
}

// project adds the fields of the projection extension, and the cell size in
// metres.
func (it *Item) project(p map[string]any) {
	g, w := it.Grid, it.Window
	x0, y0 := g.XY(float64(w.Row)-0.5, float64(w.Col)-0.5)
	x1, y1 := g.XY(float64(w.Row+w.Rows)-0.5, float64(w.Col+w.Cols)-0.5)
	t := g.Transform
	p["proj:code"] = epsgCode(g.CRS)
	p["proj:wkt2"] = g.CRS
	p["proj:shape"] = []int{w.Rows, w.Cols}
	p["proj:bbox"] = []float64{min(x0, x1), min(y0, y1), max(x0, x1), max(y0, y1)}
	p["proj:transform"] = []float64{t[1], t[2], x0, t[4], t[5], y0, 0, 0, 1}
	centre := g.At(float64(w.Row)+float64(w.Rows-1)/2, float64(w.Col)+float64(w.Cols-1)/2)
	p["proj:centroid"] = map[string]float64{"lat": degrees7(centre.Lat.Degrees()), "lon": degrees7(centre.Lon.Degrees())}
	cell := math.Sqrt(math.Abs(centre.ColE*centre.RowN - centre.ColN*centre.RowE))
	p["raster:spatial_resolution"] = math.Round(cell*1000) / 1000
}

// epsgCode returns a code such as "EPSG:32632", or nil, which the extension
// takes for "none", when the system has none.
func epsgCode(wkt string) any {
	register()
	sr, err := godal.NewSpatialRefFromWKT(wkt, godal.ErrLogger(strictly))
	if err != nil {
		return nil
	}
	defer sr.Close()
	if name, code := sr.AuthorityName(""), sr.AuthorityCode(""); name != "" && code != "" {
		return name + ":" + code
	}
	return nil
}

// outlineSteps is how many straight parts an edge of the outline has. An edge
// of 600 km along a parallel at 60 deg north in a projection bends 12 km from
// its chord in longitude and latitude; 32 parts leave a thousandth of that.
const outlineSteps = 32

// outline returns the window's edge in longitude and latitude, closed and
// counter-clockwise (RFC 7946, section 3.1.6), and its bounding box.
func (it *Item) outline() ([][2]float64, [4]float64) {
	w := it.Window
	r0, c0 := float64(w.Row)-0.5, float64(w.Col)-0.5
	corners := [5][2]float64{{0, 0}, {1, 0}, {1, 1}, {0, 1}, {0, 0}} // of rows and columns
	var ring [][2]float64
	for k := range 4 {
		a, b := corners[k], corners[k+1]
		for i := range outlineSteps {
			u := float64(i) / outlineSteps
			at := it.Grid.At(r0+(a[0]+u*(b[0]-a[0]))*float64(w.Rows), c0+(a[1]+u*(b[1]-a[1]))*float64(w.Cols))
			ring = append(ring, [2]float64{degrees7(at.Lon.Degrees()), degrees7(at.Lat.Degrees())})
		}
	}
	ring = append(ring, ring[0])
	if signedArea(ring) < 0 {
		slices.Reverse(ring)
	}
	box := [4]float64{ring[0][0], ring[0][1], ring[0][0], ring[0][1]}
	for _, p := range ring {
		box[0], box[1] = min(box[0], p[0]), min(box[1], p[1])
		box[2], box[3] = max(box[2], p[0]), max(box[3], p[1])
	}
	return ring, box
}

// signedArea is twice the area of a ring in square degrees, positive when it
// runs counter-clockwise. Taken about the first corner, so that it does not
// drown in rounding far from the origin.
func signedArea(ring [][2]float64) float64 {
	area, o := 0.0, ring[0]
	for i := 1; i < len(ring); i++ {
		a, b := ring[i-1], ring[i]
		area += float64((a[0]-o[0])*(b[1]-o[1])) - float64((b[0]-o[0])*(a[1]-o[1]))
	}
	return area
}

// degrees7 rounds to 1e-7 degrees, a centimetre on the ground.
func degrees7(v float64) float64 { return math.Round(v*1e7) / 1e7 }

// schemas lists the extensions whose fields are in use, sorted.
func schemas(parts ...map[string]any) []string {
	used := map[string]bool{}
	for _, part := range parts {
		collect(part, used)
	}
	list := []string{}
	for prefix := range used {
		if uri, ok := extensions[prefix]; ok {
			list = append(list, uri)
		}
	}
	slices.Sort(list)
	return list
}

// collect notes the prefixes of all keys, those of nested objects included.
func collect(value any, used map[string]bool) {
	switch v := value.(type) {
	case map[string]any:
		for key, inner := range v {
			if prefix, _, ok := strings.Cut(key, ":"); ok {
				used[prefix] = true
			}
			collect(inner, used)
		}
	case []map[string]any:
		for _, inner := range v {
			collect(inner, used)
		}
	}
}
