package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"encoding/xml"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"foldshade/dem/raster"
	"foldshade/mask"
)

// The formats of --out by the ending of the file.
const (
	asGeoPackage = ".gpkg"
	asGeoJSON    = ".geojson"
	asCSV        = ".csv"
	asKML        = ".kml"
	asSheet      = ".html"
)

// namedOutput is a file that the user asks for.
type namedOutput struct{ path, format string }

// namedOutputs reads --out and --sheet.
func namedOutputs(out []string, sheet string) ([]namedOutput, error) {
	var files []namedOutput
	seen := map[string]bool{}
	add := func(flag, path string, formats ...string) error {
		format := strings.ToLower(filepath.Ext(path))
		if !slices.Contains(formats, format) {
			return usagef("%s %q: accepted are names that end in %s", flag, path, strings.Join(formats, ", "))
		}
		if clean := filepath.Clean(path); seen[clean] {
			return usagef("%s %q: is named twice", flag, path)
		} else {
			seen[clean] = true
		}
		if strings.HasPrefix(filepath.Base(path), ".") {
			return usagef("%s %q: the name must not begin with a dot", flag, path)
		}
		files = append(files, namedOutput{path, format})
		return nil
	}
	for _, path := range out {
		if err := add("--out", path, asGeoPackage, asGeoJSON, asCSV, asKML); err != nil {
			return nil, err
		}
	}
	if sheet != "" {
		if err := add("--sheet", sheet, asSheet); err != nil {
			return nil, err
		}
	}
	return files, nil
}

// siteOutputs are the files of a run, one set a folder.
type siteOutputs struct {
	sets  map[string]*raster.Set
	order []*raster.Set
	files []siteOutput
}

// siteOutput is one file whose name is claimed.
type siteOutput struct {
	namedOutput
	text    *raster.File       // nil for a GeoPackage
	vectors *raster.VectorFile // nil for the others
}

// newSiteOutputs claims the names, so that what may not be written is refused
// before anything is computed.
func newSiteOutputs(files []namedOutput, overwrite bool, inputs []string) (*siteOutputs, error) {
	o := &siteOutputs{sets: map[string]*raster.Set{}}
	for _, f := range files {
		dir, base := filepath.Dir(f.path), filepath.Base(f.path)
		set := o.sets[dir]
		if set == nil {
			var err error
			if set, err = raster.NewSet(dir, overwrite, inputs); err != nil {
				o.abort()
				return nil, err
			}
			o.sets[dir] = set
			o.order = append(o.order, set)
		}
		if err := o.claim(set, f, base); err != nil {
			o.abort()
			return nil, err
		}
	}
	return o, nil
}

// claim adds a file of a set.
func (o *siteOutputs) claim(set *raster.Set, f namedOutput, rel string) (err error) {
	out := siteOutput{namedOutput: f}
	if f.format == asGeoPackage {
		out.vectors, err = set.VectorFile(rel)
	} else {
		out.text, err = set.File(rel)
	}
	if err == nil {
		o.files = append(o.files, out)
	}
	return err
}

func (o *siteOutputs) abort() {
	for _, set := range o.order {
		set.Abort()
	}
}

// commit gives all files their final names.
func (o *siteOutputs) commit() error {
	for _, set := range o.order {
		if err := set.Commit(); err != nil {
			return err
		}
	}
	return nil
}

// write fills the files.
func (o *siteOutputs) write(ctx context.Context, r *siteReport) error {
	for _, f := range o.files {
		if err := ctx.Err(); err != nil {
			return err
		}
		var err error
		switch f.format {
		case asGeoPackage:
			err = f.vectors.Write(r.src.Grid(), r.vectorLayers())
		case asGeoJSON:
			err = r.writeGeoJSON(f.text)
		case asCSV:
			err = r.writeCSV(f.text)
		case asKML:
			err = r.writeKML(f.text)
		case asSheet:
			err = r.writeSheet(ctx, f.text)
		}
		if err != nil {
			return err
		}
		if f.text != nil {
			if err := f.text.Close(); err != nil {
				return err
			}
		}
	}
	return nil
}

// record is one row with its keys in their order, null for what has no value.
type record struct {
	columns []siteColumn
	pair    *pair
}

// MarshalJSON writes the row as an object.
func (r record) MarshalJSON() ([]byte, error) {
	var b strings.Builder
	b.WriteByte('{')
	for i := range r.columns {
		if i > 0 {
			b.WriteByte(',')
		}
		b.WriteString(strconv.Quote(r.columns[i].name)) // names are plain letters
		b.WriteByte(':')
		value, err := json.Marshal(r.columns[i].value(r.pair))
		if err != nil {
			return nil, err
		}
		b.Write(value)
	}
	b.WriteByte('}')
	return []byte(b.String()), nil
}

func (r *siteReport) records() []record {
	columns := r.allColumns()
	rows := make([]record, len(r.pairs))
	for i := range rows {
		rows[i] = record{columns, &r.pairs[i]}
	}
	return rows
}

// writeCSV writes one row a site and look.
func (r *siteReport) writeCSV(w io.Writer) error {
	columns := r.allColumns()
	out := csv.NewWriter(w)
	row := make([]string, len(columns))
	for i := range columns {
		row[i] = columns[i].name
	}
	err := out.Write(row)
	for i := range r.pairs {
		for k := range columns {
			row[k] = plain(columns[k].value(&r.pairs[i]))
		}
		if err == nil {
			err = out.Write(row)
		}
	}
	out.Flush()
	if err == nil {
		err = out.Error()
	}
	return err
}

// plain is a value as text, every digit kept; empty for none.
func plain(v any) string {
	switch x := v.(type) {
	case string:
		return x
	case int64:
		return strconv.FormatInt(x, 10)
	case float64:
		return shortest(x)
	}
	return ""
}

// writeGeoJSON writes one point a site and look, in WGS84 as RFC 7946 wants it.
func (r *siteReport) writeGeoJSON(w io.Writer) error {
	type geometry struct {
		Type        string     `json:"type"`
		Coordinates [2]float64 `json:"coordinates"`
	}
	type feature struct {
		Type       string    `json:"type"`
		Geometry   *geometry `json:"geometry"`
		Properties record    `json:"properties"`
	}
	if _, err := io.WriteString(w, "{\"type\":\"FeatureCollection\",\"features\":[\n"); err != nil {
		return err
	}
	for i, row := range r.records() {
		f := feature{Type: "Feature", Properties: row}
		if p := row.pair; !math.IsNaN(p.lon + p.lat) {
			f.Geometry = &geometry{"Point", [2]float64{roundTo(p.lon, 7), roundTo(p.lat, 7)}}
		}
		text, err := json.Marshal(f)
		if err != nil {
			return err
		}
		end := ",\n"
		if i == len(r.pairs)-1 {
			end = "\n"
		}
		if _, err := w.Write(append(text, end...)); err != nil {
			return err
		}
	}
	_, err := io.WriteString(w, "]}\n")
	return err
}

// ray is a line from a site to the terrain that decides its class.
type ray struct {
	pair *pair
	what string // hides or folds
	to   [2]float64
	by   *mask.Terrain
}

// rays returns the lines of the pairs that are hidden or folded.
func (r *siteReport) rays() []ray {
	var list []ray
	for i := range r.pairs {
		p := &r.pairs[i]
		switch {
		case p.problem != "":
		case p.result.Class.Kind() == mask.CastShadow.Kind() && p.result.Blocker.Found():
			list = append(list, ray{p, "hides", p.blocker, &p.result.Blocker})
		case p.result.Class.Kind() == mask.ActiveLayover.Kind() && p.result.Partner.Found():
			list = append(list, ray{p, "folds", p.partner, &p.result.Partner})
		}
	}
	return list
}

// vectorLayers are the layers of the GeoPackage: the sites, one row a site and
// look, and the lines.
func (r *siteReport) vectorLayers() []raster.VectorLayer {
	n := len(r.looks)
	lines := r.rays()
	lineColumns := []raster.Column{{Name: "site", Sample: ""}, {Name: "look", Sample: ""}, {Name: "terrain", Sample: ""},
		{Name: "class", Sample: ""}, {Name: "height", Sample: 0.0}, {Name: "distance", Sample: 0.0}}
	return []raster.VectorLayer{
		r.vectorLayer("sites", r.siteColumns(), len(r.sites.List), func(i int) *pair { return &r.pairs[i*n] }),
		r.vectorLayer("results", r.allColumns(), len(r.pairs), func(i int) *pair { return &r.pairs[i] }),
		{Name: "lines", Lines: true, Columns: lineColumns, Rows: len(lines), Row: func(i int) ([][2]float64, []any) {
			l := &lines[i]
			return [][2]float64{{l.pair.site.X, l.pair.site.Y}, l.to}, []any{l.pair.site.Name, l.pair.look.Name, l.what,
				l.pair.result.Class.String(), roundTo(l.by.Height, 2), roundTo(l.by.Distance, 2)}
		}},
	}
}

func (r *siteReport) vectorLayer(name string, columns []siteColumn, rows int, at func(i int) *pair) raster.VectorLayer {
	l := raster.VectorLayer{Name: name, Rows: rows}
	for _, c := range columns {
		l.Columns = append(l.Columns, raster.Column{Name: c.name, Sample: c.sample})
	}
	l.Row = func(i int) ([][2]float64, []any) {
		p := at(i)
		values := make([]any, len(columns))
		for k := range columns {
			values[k] = columns[k].value(p)
		}
		if math.IsNaN(p.site.X + p.site.Y) {
			return nil, values
		}
		return [][2]float64{{p.site.X, p.site.Y}}, values
	}
	return l
}

// The elements of a KML document (OGC 12-007r2) that the sites need.
type (
	kmlStyle struct {
		XMLName xml.Name `xml:"Style"`
		ID      string   `xml:"id,attr"`
		Icon    *kmlIcon `xml:"IconStyle"`
		Line    *kmlLine `xml:"LineStyle"`
	}
	kmlIcon struct {
		Color string  `xml:"color"`
		Scale float64 `xml:"scale"`
	}
	kmlLine struct {
		Color string  `xml:"color"`
		Width float64 `xml:"width"`
	}
	kmlPlace struct {
		XMLName     xml.Name   `xml:"Placemark"`
		Name        string     `xml:"name"`
		Description string     `xml:"description,omitempty"`
		Style       string     `xml:"styleUrl"`
		Data        []kmlData  `xml:"ExtendedData>Data"`
		Point       *kmlCoords `xml:"Point"`
		Line        *kmlCoords `xml:"LineString"`
	}
	kmlData struct {
		Name  string `xml:"name,attr"`
		Value string `xml:"value"`
	}
	kmlCoords struct {
		Tessellate  int    `xml:"tessellate,omitempty"`
		Coordinates string `xml:"coordinates"`
	}
)

// kmlColors are the verdicts' colours in KML's order: alpha, blue, green, red.
var kmlColors = map[mask.Verdict]string{
	mask.Usable: "ff3f6b1d", mask.Marginal: "ff005a8f", mask.Unusable: "ff26229b",
	mask.UndeterminedThere: "ff545a5d", mask.NotSeen: "ff726a5d",
}

// kmlSpace is the name space of KML.
const kmlSpace = "http://www.opengis.net/kml/2.2"

// kmlWriter writes a document piece by piece and keeps the first error.
type kmlWriter struct {
	*xml.Encoder
	err error
}

func (k *kmlWriter) add(piece any) {
	if k.err == nil {
		k.err = k.Encode(piece)
	}
}

// within writes an element around what inside writes, with a name first.
func (k *kmlWriter) within(element, name string, inside func()) {
	start := xml.StartElement{Name: xml.Name{Local: element}}
	if k.err == nil {
		k.err = k.EncodeToken(start)
	}
	if k.err == nil {
		k.err = k.EncodeElement(name, xml.StartElement{Name: xml.Name{Local: "name"}})
	}
	inside()
	if k.err == nil {
		k.err = k.EncodeToken(start.End())
	}
}

// writeKML writes a folder a look with a placemark a site, and the lines to
// what hides or folds it. Every value is in the placemark's data.
func (r *siteReport) writeKML(w io.Writer) error {
	if _, err := io.WriteString(w, xml.Header); err != nil {
		return err
	}
	k := &kmlWriter{Encoder: xml.NewEncoder(w)}
	k.Indent("", " ")
	root := xml.StartElement{Name: xml.Name{Space: kmlSpace, Local: "kml"}}
	k.err = k.EncodeToken(root)
	k.within("Document", "Sites and looks", func() {
		for _, v := range mask.Verdicts {
			k.add(kmlStyle{ID: string(v), Icon: &kmlIcon{kmlColors[v], 1.1}})
		}
		k.add(kmlStyle{ID: "line", Line: &kmlLine{kmlColors[mask.Unusable], 2}})
		columns, lines := r.allColumns(), r.rays()
		for look := range r.looks {
			k.within("Folder", r.looks[look].Name, func() { r.writeFolder(k, look, columns, lines) })
		}
	})
	if k.err == nil {
		k.err = k.EncodeToken(root.End())
	}
	if k.err == nil {
		k.err = k.Close()
	}
	return k.err
}

// writeFolder writes the placemarks of a look.
func (r *siteReport) writeFolder(k *kmlWriter, look int, columns []siteColumn, lines []ray) {
	for i := range r.sites.List {
		k.add(placemark(&r.pairs[i*len(r.looks)+look], columns))
	}
	for i := range lines {
		if l := &lines[i]; l.pair.look == &r.looks[look] {
			k.add(lineMark(l))
		}
	}
}

func placemark(p *pair, columns []siteColumn) kmlPlace {
	m := kmlPlace{Name: p.site.Name, Style: "#" + string(p.result.Verdict)}
	// A description may be taken for HTML; the name stands in its own element.
	m.Description = escapeHTML(fmt.Sprintf("%s: %s. %s", p.look.Name, p.result.Verdict, p.result.Reason))
	if !math.IsNaN(p.lon + p.lat) {
		m.Point = &kmlCoords{Coordinates: kmlAt(p.lon, p.lat)}
	}
	for i := range columns {
		if v := plain(columns[i].value(p)); v != "" {
			m.Data = append(m.Data, kmlData{columns[i].name, v})
		}
	}
	return m
}

func lineMark(l *ray) kmlPlace {
	to := l.by.Place
	return kmlPlace{
		Name: fmt.Sprintf("what %s %s", l.what, l.pair.site.Name), Style: "#line",
		Line: &kmlCoords{1, kmlAt(l.pair.lon, l.pair.lat) + " " + kmlAt(to.Lon.Degrees(), to.Lat.Degrees())},
	}
}

func kmlAt(lon, lat float64) string {
	return strconv.FormatFloat(roundTo(lon, 7), 'f', -1, 64) + "," + strconv.FormatFloat(roundTo(lat, 7), 'f', -1, 64)
}

var htmlEscaper = strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;")

func escapeHTML(s string) string { return htmlEscaper.Replace(s) }
