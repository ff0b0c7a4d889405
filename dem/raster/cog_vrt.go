package raster

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"maps"
	"math"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
)

// vrt describes the scratch file to GDAL, with all that the raster shall
// carry. A raster is not touched after the copy: that would break its layout.
func (w *Writer) vrt() []byte {
	var x vrtText
	t := w.grid.Transform
	row, col := float64(w.window.Row), float64(w.window.Col)
	x.line(`<VRTDataset rasterXSize="%d" rasterYSize="%d">`, w.window.Cols, w.window.Rows)
	if crs := strings.TrimSpace(w.grid.CRS); crs != "" {
		x.element("SRS", crs)
	}
	x.line("<GeoTransform>%.17g, %.17g, %.17g, %.17g, %.17g, %.17g</GeoTransform>",
		t[0]+col*t[1]+row*t[2], t[1], t[2], t[3]+col*t[4]+row*t[5], t[4], t[5])
	x.metadata(w.items())
	for i := range w.bands {
		w.vrtBand(&x, i)
	}
	x.line("</VRTDataset>")
	return x.Bytes()
}

// items are the metadata of the file: the caller's, and the layer's own text.
func (w *Writer) items() map[string]string {
	items := map[string]string{"layer": w.layer.Name}
	if w.layer.Title != "" {
		items["title"] = w.layer.Title
	}
	if w.layer.Description != "" {
		items["description"] = w.layer.Description
	}
	maps.Copy(items, w.layer.Metadata)
	return items
}

func (w *Writer) vrtBand(x *vrtText, i int) {
	band := w.bands[i]
	x.line(`<VRTRasterBand dataType="%s" band="%d" subClass="VRTRawRasterBand">`, w.store.gdal, i+1)
	x.element("Description", band.Name)
	x.metadata(w.bandItems(i))
	nodata := "nan"
	if !math.IsNaN(w.store.nodata) {
		nodata = number(w.store.nodata)
	}
	x.element("NoDataValue", nodata)
	if band.Unit != "" {
		x.element("UnitType", band.Unit)
	}
	if w.layer.Scale != 0 {
		x.element("Offset", number(w.layer.Offset))
		x.element("Scale", number(w.layer.Scale))
	}
	if w.layer.Classes != nil {
		w.vrtLegend(x)
	}
	x.line(`<SourceFilename relativeToVRT="1">%s</SourceFilename>`, escaped(filepath.Base(w.scratchName())))
	x.line("<ImageOffset>%d</ImageOffset>", int64(i)*w.bandBytes())
	x.line("<PixelOffset>%d</PixelOffset>", w.store.bytes)
	x.line("<LineOffset>%d</LineOffset>", w.store.bytes*w.window.Cols)
	x.line("<ByteOrder>LSB</ByteOrder>")
	x.line("</VRTRasterBand>")
}

// bandItems are the metadata of a band: the legend of a class raster, else
// the description and the statistics. GDAL's statistics are of the stored
// values, before scale and offset.
func (w *Writer) bandItems(i int) map[string]string {
	items := map[string]string{}
	for _, c := range w.layer.Classes {
		text := c.Title
		if c.Description != "" {
			text += ": " + c.Description
		}
		items[fmt.Sprintf("class_%d", c.Value)] = text
	}
	if w.layer.Classes != nil {
		return items
	}
	if d := w.bands[i].Description; d != "" {
		items["description"] = d
	}
	s := w.stats[i]
	items["STATISTICS_VALID_PERCENT"] = strconv.FormatFloat(100*float64(s.Valid)/float64(s.All), 'f', 4, 64)
	if s.Valid > 0 {
		items["STATISTICS_MINIMUM"] = number(s.Min)
		items["STATISTICS_MAXIMUM"] = number(s.Max)
		items["STATISTICS_MEAN"] = number(s.Mean)
		items["STATISTICS_STDDEV"] = number(s.StdDev)
	}
	return items
}

// vrtLegend writes category names and colours for every value up to the
// largest in use.
func (w *Writer) vrtLegend(x *vrtText) {
	var largest uint8
	byValue := map[uint8]ClassEntry{}
	for _, c := range w.layer.Classes {
		byValue[c.Value] = c
		largest = max(largest, c.Value)
	}
	x.line("<CategoryNames>")
	for v := range int(largest) + 1 {
		x.element("Category", byValue[uint8(v)].Title)
	}
	x.line("</CategoryNames>")
	x.line("<ColorInterp>Palette</ColorInterp>")
	x.line("<ColorTable>")
	for v := range int(largest) + 1 {
		r, g, b, alpha := rgba(byValue[uint8(v)].Color)
		x.line(`<Entry c1="%d" c2="%d" c3="%d" c4="%d"/>`, r, g, b, alpha)
	}
	x.line("</ColorTable>")
}

// rgba reads a colour of the form #rrggbb; all zero when there is none.
func rgba(color string) (r, g, b, alpha uint8) {
	if n, _ := fmt.Sscanf(color, "#%02x%02x%02x", &r, &g, &b); n != 3 {
		return 0, 0, 0, 0
	}
	return r, g, b, 255
}

// number writes a value so that reading it gives the same one.
func number(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// vrtText gathers XML.
type vrtText struct{ bytes.Buffer }

func (x *vrtText) line(format string, args ...any) { fmt.Fprintf(x, format+"\n", args...) }

func (x *vrtText) element(name, text string) {
	x.line("<%s>%s</%s>", name, escaped(text), name)
}

func (x *vrtText) metadata(items map[string]string) {
	x.line("<Metadata>")
	for _, key := range slices.Sorted(maps.Keys(items)) {
		x.line(`<MDI key="%s">%s</MDI>`, escaped(key), escaped(items[key]))
	}
	x.line("</Metadata>")
}

func escaped(text string) string {
	var b bytes.Buffer
	_ = xml.EscapeText(&b, []byte(text)) // a bytes.Buffer takes all
	return b.String()
}
