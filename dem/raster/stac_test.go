package raster

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// testItem writes a set with rasters of all kinds and returns its item, as
// read back from the file.
func testItem(t *testing.T, change func(it *Item)) map[string]any {
	t.Helper()
	s, dir := newSet(t)
	win := dem.Window{Row: 10, Col: 20, Rows: 60, Cols: 70}
	g := utmGrid(t, 100, 120)
	add := func(l Layer, bands ...[]float32) Asset {
		w, err := s.Writer("look", l, g, win)
		require.NoError(t, err)
		if l.Classes != nil {
			require.NoError(t, w.WriteBytes(win, make([]uint8, 60*70)))
		}
		for i, b := range bands {
			require.NoError(t, w.WriteFloats(win, i, b))
		}
		require.NoError(t, w.Finish())
		return w.Asset("own-role")
	}
	picture, err := s.File("look/picture.png")
	require.NoError(t, err)
	_, err = picture.Write([]byte("not really"))
	require.NoError(t, err)
	require.NoError(t, picture.Close())
	v := smooth(60, 70)
	it := &Item{
		ID: "valley-look", Title: "Valley", Description: "A plan.", Grid: g, Window: win,
		Time: time.Date(2031, 5, 6, 7, 8, 9, 0, time.FixedZone("east", 7200)), TimeMeaning: "the time of the run",
		Sampling: "area", Software: map[string]string{"tool": "1.0"}, Lineage: "tool run",
		Properties: map[string]any{"sar:observation_direction": "right", "sar:frequency_band": "C",
			"sar:center_frequency": 5.4, "view:incidence_angle": 38.0, "view:azimuth": 77.0, "view:off_nadir": 33.5},
		Assets: []Asset{
			add(classLayer()), add(floatLayer(), v),
			add(Layer{Name: "angle", Title: "Angle", Unit: "degree", Scale: 0.01}, v),
			add(Layer{Name: "arrow", Unit: "1", Bands: []Band{{Name: "east"}, {Name: "up"}}}, v, v),
			picture.Asset("thumbnail", "Picture", TypePNG, "thumbnail"),
		},
		Links: []Link{{Href: "https://example.org/valley", Rel: "about"}},
	}
	if change != nil {
		change(it)
	}
	text, err := it.JSON()
	require.NoError(t, err)
	f, err := s.File("look/item.json")
	require.NoError(t, err)
	_, err = f.Write(text)
	require.NoError(t, err)
	require.NoError(t, s.Commit())
	onDisk, err := os.ReadFile(filepath.Join(dir, "look/item.json"))
	require.NoError(t, err)
	var doc map[string]any
	require.NoError(t, json.Unmarshal(onDisk, &doc))
	checkFiles(t, doc, filepath.Join(dir, "look"))
	return doc
}

// checkFiles compares file:size and file:checksum with the files and with
// the sha256sum program of GNU coreutils.
func checkFiles(t *testing.T, doc map[string]any, dir string) {
	t.Helper()
	for key, a := range object(doc["assets"]) {
		asset := object(a)
		path := filepath.Join(dir, asset["href"].(string))
		st, err := os.Stat(path)
		require.NoError(t, err, key)
		assert.Equal(t, float64(st.Size()), asset["file:size"], key)
		out, err := commandOutput("sha256sum", path)
		require.NoError(t, err)
		assert.Equal(t, "1220"+out[:64], asset["file:checksum"], key)
	}
}

func object(v any) map[string]any { o, _ := v.(map[string]any); return o }
func array(v any) []any           { a, _ := v.([]any); return a }
func isText(v any) bool           { s, ok := v.(string); return ok && s != "" }
func isNumber(v any) bool         { _, ok := v.(float64); return ok }

func inRange(v any, lo, hi float64) bool {
	n, ok := v.(float64)
	return ok && n >= lo && n <= hi
}

func isTime(v any) bool {
	s, _ := v.(string)
	_, err := time.Parse(time.RFC3339, s)
	return err == nil && strings.HasSuffix(s, "Z")
}

// rule is one published demand on an item.
type rule struct {
	source string
	name   string
	holds  func(doc map[string]any) bool
}

const (
	core       = "STAC Item specification 1.1.0, item-spec.md"
	common     = "STAC common metadata 1.1.0, common-metadata.md"
	assetSpec  = "STAC asset specification 1.1.0, assets.md"
	geoJSON    = "RFC 7946"
	projection = "projection extension 2.0.0"
	rasterExt  = "raster extension 2.0.0"
	classes    = "classification extension 2.0.0"
	sarExt     = "sar extension 1.3.0"
	viewExt    = "view extension 1.1.0"
	processing = "processing extension 1.2.0"
	fileExt    = "file extension 2.1.0"
)

// eachAsset and eachBand ask one thing of all assets, or of all objects that
// carry band fields.
func eachAsset(doc map[string]any, ok func(map[string]any) bool) bool {
	for _, a := range object(doc["assets"]) {
		if !ok(object(a)) {
			return false
		}
	}
	return len(object(doc["assets"])) > 0
}

func eachBand(doc map[string]any, ok func(map[string]any) bool) bool {
	return eachAsset(doc, func(a map[string]any) bool {
		for _, b := range array(a["bands"]) {
			if !ok(object(b)) {
				return false
			}
		}
		return ok(a)
	})
}

// where asks something of a field where it is present.
func where(o map[string]any, key string, ok func(any) bool) bool {
	v, present := o[key]
	return !present || ok(v)
}

func property(doc map[string]any, key string) any { return object(doc["properties"])[key] }

func ring(doc map[string]any) [][2]float64 {
	var out [][2]float64
	for _, p := range array(array(object(doc["geometry"])["coordinates"])[0]) {
		xy := array(p)
		out = append(out, [2]float64{xy[0].(float64), xy[1].(float64)})
	}
	return out
}

var (
	classNamePattern = regexp.MustCompile(`^[0-9A-Za-z_-]+$`)
	colorPattern     = regexp.MustCompile(`^[0-9A-F]{6}$`)
	checksumPattern  = regexp.MustCompile(`^1220[0-9a-f]{64}$`)
	codePattern      = regexp.MustCompile(`^[A-Za-z]+:[0-9A-Za-z]+$`)
)

var itemRules = []rule{
	{core, "type is Feature", func(d map[string]any) bool { return d["type"] == "Feature" }},
	{core, "stac_version", func(d map[string]any) bool { return d["stac_version"] == "1.1.0" }},
	{core, "id is not empty", func(d map[string]any) bool { return isText(d["id"]) }},
	{core, "bbox of 4 numbers, ordered, in degrees", func(d map[string]any) bool {
		b := array(d["bbox"])
		return len(b) == 4 && inRange(b[0], -180, 180) && inRange(b[2], b[0].(float64), 180) &&
			inRange(b[1], -90, 90) && inRange(b[3], b[1].(float64), 90)
	}},
	{core, "links is an array of objects with href and rel", func(d map[string]any) bool {
		links, ok := d["links"].([]any)
		return ok && !slices.ContainsFunc(links, func(l any) bool { return !isText(object(l)["href"]) || !isText(object(l)["rel"]) })
	}},
	{core, "no collection without a link", func(d map[string]any) bool { _, has := d["collection"]; return !has }},
	{core, "datetime is RFC 3339, UTC", func(d map[string]any) bool { return isTime(property(d, "datetime")) }},
	{core, "extensions are unique and exactly those whose fields are used", extensionsMatch},
	{common, "created is RFC 3339, UTC", func(d map[string]any) bool { return isTime(property(d, "created")) }},
	{common, "title and description are not empty", func(d map[string]any) bool {
		return isText(property(d, "title")) && isText(property(d, "description"))
	}},
	{geoJSON + ", section 3.1.6", "ring closed, at least four positions, counter-clockwise", func(d map[string]any) bool {
		r := ring(d)
		area := 0.0
		for i := 1; i < len(r); i++ {
			area += (r[i][0] - r[i-1][0]) * (r[i][1] + r[i-1][1])
		}
		return object(d["geometry"])["type"] == "Polygon" && len(r) >= 4 && r[0] == r[len(r)-1] && area < 0
	}},
	{geoJSON + ", section 5", "bbox is that of the ring", func(d map[string]any) bool {
		b := [4]float64{math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)}
		for _, p := range ring(d) {
			b = [4]float64{min(b[0], p[0]), min(b[1], p[1]), max(b[2], p[0]), max(b[3], p[1])}
		}
		return slices.Equal(array(d["bbox"]), []any{b[0], b[1], b[2], b[3]})
	}},
	{assetSpec, "href; title, description and type not empty; roles an array of text", func(d map[string]any) bool {
		return eachAsset(d, func(a map[string]any) bool {
			return isText(a["href"]) && where(a, "title", isText) && where(a, "description", isText) && where(a, "type", isText) &&
				where(a, "roles", func(v any) bool {
					return len(array(v)) > 0 && !slices.ContainsFunc(array(v), func(r any) bool { return !isText(r) })
				})
		})
	}},
	{assetSpec, "at least one asset with the role data", func(d map[string]any) bool {
		return !eachAsset(d, func(a map[string]any) bool { return !slices.Contains(array(a["roles"]), any("data")) })
	}},
	{common, "bands: objects with a unique name", func(d map[string]any) bool {
		return eachAsset(d, func(a map[string]any) bool {
			seen := map[any]bool{}
			for _, b := range array(a["bands"]) {
				if name := object(b)["name"]; !isText(name) || seen[name] {
					return false
				} else {
					seen[name] = true
				}
			}
			return where(a, "bands", func(v any) bool { return len(array(v)) > 0 })
		})
	}},
	{common, "data_type is one of the list", func(d map[string]any) bool {
		return eachBand(d, func(b map[string]any) bool {
			return where(b, "data_type", func(v any) bool {
				return slices.Contains([]any{"int8", "int16", "int32", "int64", "uint8", "uint16", "uint32", "uint64", "float16", "float32", "float64", "cint16", "cint32", "cfloat32", "cfloat64", "other"}, v)
			})
		})
	}},
	{common, "nodata is a number, nan, inf or -inf", func(d map[string]any) bool {
		return eachBand(d, func(b map[string]any) bool {
			return where(b, "nodata", func(v any) bool { return isNumber(v) || v == "nan" || v == "inf" || v == "-inf" })
		})
	}},
	{common, "statistics hold numbers, ordered, percent in 0 to 100", func(d map[string]any) bool {
		return eachBand(d, func(b map[string]any) bool {
			return where(b, "statistics", func(v any) bool {
				s := object(v)
				return len(s) > 0 && inRange(s["valid_percent"], 0, 100) && inRange(s["count"], 1, math.MaxInt64) &&
					where(s, "mean", func(m any) bool { return inRange(m, s["minimum"].(float64), s["maximum"].(float64)) }) &&
					where(s, "stddev", func(v any) bool { return inRange(v, 0, math.MaxFloat64) })
			})
		})
	}},
	{projection, "proj:code is AUTHORITY:CODE or null, proj:epsg is gone", func(d map[string]any) bool {
		code, has := object(d["properties"])["proj:code"]
		_, old := object(d["properties"])["proj:epsg"]
		text, _ := code.(string)
		return has && !old && (code == nil || codePattern.MatchString(text))
	}},
	{projection, "proj:wkt2 is text, proj:shape two whole numbers, proj:bbox four numbers", func(d map[string]any) bool {
		shape, box := array(property(d, "proj:shape")), array(property(d, "proj:bbox"))
		return isText(property(d, "proj:wkt2")) && len(shape) == 2 && inRange(shape[0], 1, 1e9) && inRange(shape[1], 1, 1e9) &&
			len(box) == 4 && inRange(box[2], box[0].(float64), 1e9) && inRange(box[3], box[1].(float64), 1e9)
	}},
	{projection, "proj:transform times the shape's corners is proj:bbox", func(d map[string]any) bool {
		m, shape, box := array(property(d, "proj:transform")), array(property(d, "proj:shape")), array(property(d, "proj:bbox"))
		if len(m) != 9 || m[6] != 0.0 || m[7] != 0.0 || m[8] != 1.0 {
			return false
		}
		n := func(v any) float64 { return v.(float64) }
		x := n(m[0])*n(shape[1]) + n(m[1])*n(shape[0]) + n(m[2])
		y := n(m[3])*n(shape[1]) + n(m[4])*n(shape[0]) + n(m[5])
		return slices.Equal(box, []any{min(x, n(m[2])), min(y, n(m[5])), max(x, n(m[2])), max(y, n(m[5]))})
	}},
	{projection, "proj:centroid lies in the bbox", func(d map[string]any) bool {
		c, b := object(property(d, "proj:centroid")), array(d["bbox"])
		return inRange(c["lon"], b[0].(float64), b[2].(float64)) && inRange(c["lat"], b[1].(float64), b[3].(float64))
	}},
	{rasterExt, "raster:sampling, raster:spatial_resolution", func(d map[string]any) bool {
		s := property(d, "raster:sampling")
		return (s == "area" || s == "point") && inRange(property(d, "raster:spatial_resolution"), 1e-6, 1e6)
	}},
	{rasterExt, "raster:scale and raster:offset are numbers", func(d map[string]any) bool {
		return eachBand(d, func(b map[string]any) bool {
			return where(b, "raster:scale", isNumber) && where(b, "raster:offset", isNumber)
		})
	}},
	{classes, "classes: unique whole values, names of letters, digits, hyphens, colours of six capitals", func(d map[string]any) bool {
		return eachBand(d, func(b map[string]any) bool { return where(b, "classification:classes", classesOK) })
	}},
	{sarExt, "direction, band and frequency", func(d map[string]any) bool {
		p := object(d["properties"])
		return where(p, "sar:observation_direction", func(v any) bool { return v == "left" || v == "right" }) &&
			where(p, "sar:frequency_band", func(v any) bool { return slices.Contains([]any{"P", "L", "S", "C", "X", "Ku", "K", "Ka"}, v) }) &&
			where(p, "sar:center_frequency", func(v any) bool { return inRange(v, 1e-9, math.MaxFloat64) })
	}},
	{viewExt, "angles in range", func(d map[string]any) bool {
		p := object(d["properties"])
		return where(p, "view:off_nadir", func(v any) bool { return inRange(v, 0, 90) }) &&
			where(p, "view:incidence_angle", func(v any) bool { return inRange(v, 0, 90) }) &&
			where(p, "view:azimuth", func(v any) bool { return inRange(v, 0, 360) })
	}},
	{processing, "software maps names to versions, lineage is text, datetime is UTC", func(d map[string]any) bool {
		for _, v := range object(property(d, "processing:software")) {
			if !isText(v) {
				return false
			}
		}
		p := object(d["properties"])
		return where(p, "processing:lineage", isText) && where(p, "processing:datetime", isTime)
	}},
	{fileExt, "size is a whole number, checksum a multihash in lower case", func(d map[string]any) bool {
		return eachAsset(d, func(a map[string]any) bool {
			sum, _ := a["file:checksum"].(string)
			return inRange(a["file:size"], 0, 1e15) && checksumPattern.MatchString(sum)
		})
	}},
}

func classesOK(v any) bool {
	seen := map[any]bool{}
	for _, c := range array(v) {
		o := object(c)
		value, _ := o["value"].(float64)
		name, _ := o["name"].(string)
		if seen[o["value"]] || !isNumber(o["value"]) || value != math.Trunc(value) || !classNamePattern.MatchString(name) ||
			!where(o, "description", isText) || !where(o, "title", isText) ||
			!where(o, "color_hint", func(v any) bool { s, _ := v.(string); return colorPattern.MatchString(s) }) {
			return false
		}
		seen[o["value"]] = true
	}
	return len(seen) > 0
}

// extensionsMatch compares the list of schemas with the prefixes that a plain
// search of the text finds.
func extensionsMatch(d map[string]any) bool {
	body := map[string]any{"properties": d["properties"], "assets": d["assets"]}
	text, _ := json.Marshal(body)
	var want []any
	for _, m := range regexp.MustCompile(`"([a-z]+):[a-z0-9_]+":`).FindAllStringSubmatch(string(text), -1) {
		uri := map[string]string{"proj": "projection/v2.0.0", "raster": "raster/v2.0.0", "sar": "sar/v1.3.0", "view": "view/v1.1.0",
			"classification": "classification/v2.0.0", "processing": "processing/v1.2.0", "file": "file/v2.1.0"}[m[1]]
		uri = "https://stac-extensions.github.io/" + uri + "/schema.json"
		if !slices.Contains(want, any(uri)) {
			want = append(want, uri)
		}
	}
	have := array(d["stac_extensions"])
	for _, w := range want {
		if !slices.Contains(have, w) {
			return false
		}
	}
	return len(have) == len(want)
}

// TestItemRules holds an item against each published rule.
func TestItemRules(t *testing.T) {
	doc := testItem(t, nil)
	for _, r := range itemRules {
		assert.True(t, r.holds(doc), "%s: %s", r.source, r.name)
	}
}

// TestRulesBite breaks an item in one place after another; some rule must
// notice each.
func TestRulesBite(t *testing.T) {
	whole := testItem(t, nil)
	text, err := json.Marshal(whole)
	require.NoError(t, err)
	breaks := map[string]func(d map[string]any){
		"type":       func(d map[string]any) { d["type"] = "feature" },
		"bbox":       func(d map[string]any) { d["bbox"] = []any{9.0, 46.0, 8.0, 47.0} },
		"ring":       func(d map[string]any) { slices.Reverse(array(array(object(d["geometry"])["coordinates"])[0])) },
		"datetime":   func(d map[string]any) { object(d["properties"])["datetime"] = "2031-05-06" },
		"extension":  func(d map[string]any) { d["stac_extensions"] = array(d["stac_extensions"])[1:] },
		"collection": func(d map[string]any) { d["collection"] = "x" },
		"href":       func(d map[string]any) { delete(object(object(d["assets"])["sea"]), "href") },
		"band name": func(d map[string]any) {
			delete(object(array(object(object(d["assets"])["arrow"])["bands"])[1]), "name")
		},
		"nodata": func(d map[string]any) { object(object(d["assets"])["height"])["nodata"] = "NaN" },
		"mean": func(d map[string]any) {
			object(object(object(d["assets"])["height"])["statistics"])["mean"] = 1e6
		},
		"transform": func(d map[string]any) { array(property(d, "proj:transform"))[2] = 0.0 },
		"colour": func(d map[string]any) {
			object(array(object(object(d["assets"])["sea"])["classification:classes"])[1])["color_hint"] = "#f6f1e4"
		},
		"checksum": func(d map[string]any) { object(object(d["assets"])["sea"])["file:checksum"] = strings.Repeat("0", 64) },
		"azimuth":  func(d map[string]any) { object(d["properties"])["view:azimuth"] = -3.0 },
		"band":     func(d map[string]any) { object(d["properties"])["sar:frequency_band"] = "Z" },
	}
	for name, spoil := range breaks {
		var doc map[string]any
		require.NoError(t, json.Unmarshal(text, &doc))
		spoil(doc)
		assert.True(t, slices.ContainsFunc(itemRules, func(r rule) bool { return !r.holds(doc) }), name)
	}
}

// TestItemContent checks the values that a reader relies on.
func TestItemContent(t *testing.T) {
	doc := testItem(t, nil)
	p := object(doc["properties"])
	assert.Equal(t, "2031-05-06T05:08:09Z", p["datetime"])
	assert.Equal(t, "A plan. The datetime is the time of the run.", p["description"])
	assert.Equal(t, "EPSG:32632", p["proj:code"])
	assert.Equal(t, []any{60.0, 70.0}, p["proj:shape"])
	assert.Equal(t, []any{30.0, 0.0, 500600.0, 0.0, -30.0, 5099700.0, 0.0, 0.0, 1.0}, p["proj:transform"])
	// 70 columns of 30 m from 600 m east of the first corner, 77 km a degree
	// in utmGrid's own map; rows likewise. The lattice is linear here, so only
	// the rounding to 1e-7 degrees is left.
	const tol = 1.01e-7
	box := array(doc["bbox"])
	for i, want := range []float64{9 + 600.0/77000, 46.05 - 2100.0/111200, 9 + 2700.0/77000, 46.05 - 300.0/111200} {
		assert.InDelta(t, want, box[i], tol)
	}
	assets := object(doc["assets"])
	sea := object(assets["sea"])
	assert.Equal(t, []any{"data", "own-role"}, sea["roles"])
	assert.Equal(t, 0.0, sea["nodata"])
	assert.Len(t, array(sea["classification:classes"]), len(testClasses))
	angle := object(assets["angle"])
	assert.Equal(t, "int16", angle["data_type"])
	assert.Equal(t, 0.01, angle["raster:scale"])
	stats := plainStatistics(smooth(60, 70))
	assert.InDelta(t, stats.Mean, object(angle["statistics"])["mean"], 0.005, "degrees, not stored numbers")
	assert.Equal(t, "nan", object(assets["height"])["nodata"])
	assert.Len(t, array(object(assets["arrow"])["bands"]), 2)
	assert.Equal(t, TypePNG, object(assets["thumbnail"])["type"])
}

// TestNoCode gives the grid a CRS without a code.
func TestNoCode(t *testing.T) {
	doc := testItem(t, func(it *Item) {
		g := *it.Grid
		g.CRS = regexp.MustCompile(`,\s*(ID|AUTHORITY)\["EPSG",\s*"?32632"?\]`).ReplaceAllString(g.CRS, "")
		it.Grid = &g
	})
	code, has := object(doc["properties"])["proj:code"]
	assert.True(t, has)
	assert.Nil(t, code)
	assert.True(t, isText(property(doc, "proj:wkt2")))
}

// TestItemRefusesNaN says which item holds what JSON cannot.
func TestItemRefusesNaN(t *testing.T) {
	it := Item{ID: "x", Grid: utmGrid(t, 3, 3), Window: dem.Window{Rows: 3, Cols: 3},
		Properties: map[string]any{"view:azimuth": math.NaN()}}
	_, err := it.JSON()
	assert.ErrorContains(t, err, fmt.Sprintf("item %q", "x"))
}
