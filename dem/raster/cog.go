package raster

import (
	"cmp"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Layer says what a raster file holds and how it is stored.
type Layer struct {
	Name        string // the file's name without .tif
	Title       string
	Unit        string // UDUNITS: "m", "degree", "1"; empty for classes
	Description string
	// Bands are the bands in order; none means one band with the layer's own
	// name, unit and description.
	Bands []Band
	// Classes, when not nil, makes a class raster: one band of bytes, nodata
	// 0, with a colour table and a legend. It lists every value in use.
	Classes []ClassEntry
	// Scale, when not 0, stores (value - Offset) / Scale, rounded, as 16-bit
	// integers, nodata -32768; readers get value and unit back through the
	// band's scale and offset.
	Scale, Offset float64
	// Quantum, when not 0, rounds floating-point values to its multiples: a
	// power of two, so that the multiples are exact. The zeros at the end of
	// each value are what compression saves.
	Quantum float64
	// NearestOverviews keeps overviews from averaging, for values that jump.
	NearestOverviews bool
	// Metadata becomes items of the file, AREA_OR_POINT among them.
	Metadata map[string]string
}

// Band describes one band.
type Band struct{ Name, Unit, Description string }

// ClassEntry describes one value of a class raster.
type ClassEntry struct {
	Value       uint8
	Name        string // letters, digits, hyphen
	Title       string
	Description string
	Color       string // #rrggbb; empty for transparent
}

// bands returns the bands with what is left out filled in from the layer.
func (l *Layer) bands() []Band {
	if len(l.Bands) == 0 {
		return []Band{{l.Name, l.Unit, l.Description}}
	}
	all := make([]Band, len(l.Bands))
	for i, b := range l.Bands {
		all[i] = Band{cmp.Or(b.Name, l.Name), cmp.Or(b.Unit, l.Unit), cmp.Or(b.Description, l.Description)}
	}
	return all
}

// storage is how cells lie in the scratch file and in the raster.
type storage struct {
	gdal   string // GDAL's name of the type
	stac   string // STAC's name of the type
	bytes  int
	nodata float64
}

// fill16 is the nodata value of scaled integers: the one value of 16 bits
// whose negative is none.
const fill16 = math.MinInt16

func (l *Layer) storage() storage {
	switch {
	case l.Classes != nil:
		return storage{"Byte", "uint8", 1, 0}
	case l.Scale != 0:
		return storage{"Int16", "int16", 2, fill16}
	}
	return storage{"Float32", "float32", 4, math.NaN()}
}

// Statistics are those of a band's valid values, in the band's unit: the
// population's standard deviation, and NaN for all but the counts when no
// value is valid.
type Statistics struct {
	Min, Max, Mean, StdDev float64
	Valid, All             int64 // cells
}

// Writer takes the cells of one layer in any order and makes a Cloud
// Optimized GeoTIFF of them. WriteBytes and WriteFloats may be called from
// several goroutines. Cells wait in an uncompressed scratch file beside the
// raster, so that memory does not grow with the grid.
type Writer struct {
	layer  Layer
	store  storage
	bands  []Band
	grid   *dem.Grid
	window dem.Window
	rel    string // final name, relative to the set
	final  string // final path, for messages
	path   string // of the unfinished raster
	set    *Set

	scratch *os.File
	written atomic.Int64 // cells, over all bands
	aborted atomic.Bool

	mu       sync.Mutex // held while finishing
	done     bool
	stats    []Statistics
	size     int64
	checksum string
}

func newWriter(path, final string, layer Layer, grid *dem.Grid, window dem.Window) (*Writer, error) {
	if window.Rows < 1 || window.Cols < 1 || grid.Clip(window) != window {
		panic("raster: the output window is not inside the grid")
	}
	w := &Writer{layer: layer, store: layer.storage(), bands: layer.bands(), grid: grid, window: window,
		path: path, final: final}
	if len(w.bands) > 1 && layer.Classes != nil {
		panic("raster: a class raster has one band")
	}
	f, err := os.OpenFile(w.scratchName(), os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return nil, failed(final, "create a scratch file for it", err)
	}
	w.scratch = f
	return w, nil
}

func (w *Writer) scratchName() string { return strings.TrimSuffix(w.path, ".tif") + ".raw" }
func (w *Writer) vrtName() string     { return strings.TrimSuffix(w.path, ".tif") + ".vrt" }

// bandBytes is the size of one band in the scratch file.
func (w *Writer) bandBytes() int64 {
	return int64(w.window.Rows) * int64(w.window.Cols) * int64(w.store.bytes)
}

// cost orders layers by the work they are.
func (w *Writer) cost() int64 { return w.bandBytes() * int64(len(w.bands)) }

// WriteBytes takes the class codes of a window, in cells of the grid, inside
// the output window. Every cell is to be written once. It panics when the
// layer holds no classes, the window is elsewhere or the length is not the
// window's. The error is an *OutputError.
func (w *Writer) WriteBytes(win dem.Window, codes []uint8) error {
	if w.layer.Classes == nil {
		panic("raster: class codes for a layer without classes")
	}
	w.check(win, len(codes))
	return w.put(win, 0, func(row int, _ []byte) ([]byte, error) {
		return codes[row*win.Cols : (row+1)*win.Cols], nil
	})
}

// WriteFloats takes the values of one band, counted from 0, of a window, in
// cells of the grid, inside the output window; NaN where there is none. Every
// cell is to be written once. It panics when the layer holds classes, the
// window is elsewhere or the length is not the window's. The error is an
// *OutputError.
func (w *Writer) WriteFloats(win dem.Window, band int, values []float32) error {
	if w.layer.Classes != nil || band < 0 || band >= len(w.bands) {
		panic("raster: no such band of floating-point values")
	}
	w.check(win, len(values))
	return w.put(win, band, func(row int, dst []byte) ([]byte, error) {
		part := values[row*win.Cols : (row+1)*win.Cols]
		if w.layer.Scale != 0 {
			return dst, w.encode16(dst, part)
		}
		encode32(dst, part, w.layer.Quantum)
		return dst, nil
	})
}

func (w *Writer) check(win dem.Window, n int) {
	o := w.window
	if n != win.Rows*win.Cols || win.Row < o.Row || win.Col < o.Col ||
		win.Row+win.Rows > o.Row+o.Rows || win.Col+win.Cols > o.Col+o.Cols {
		panic("raster: the cells do not fit the window, or the window not the output")
	}
}

// rowBytes is the most bytes that are gathered for one write.
const rowBytes = 1 << 20

// put writes a window row by row, or in bands of rows when they lie together
// in the file. encode returns the bytes of a row, in dst or elsewhere.
func (w *Writer) put(win dem.Window, band int, encode func(row int, dst []byte) ([]byte, error)) error {
	row := win.Cols * w.store.bytes
	together := 1
	if win.Cols == w.window.Cols {
		together = max(1, min(win.Rows, rowBytes/row))
	}
	buf := make([]byte, 0, together*row)
	at := int64(band)*w.bandBytes() + (int64(win.Row-w.window.Row)*int64(w.window.Cols)+int64(win.Col-w.window.Col))*int64(w.store.bytes)
	stride := int64(w.window.Cols) * int64(w.store.bytes)
	for r := 0; r < win.Rows; r += together {
		buf = buf[:0]
		for k := r; k < min(r+together, win.Rows); k++ {
			dst := buf[len(buf) : len(buf)+row]
			src, err := encode(k, dst)
			if err != nil {
				return err
			}
			copy(dst, src)
			buf = buf[:len(buf)+row]
		}
		if _, err := w.scratch.WriteAt(buf, at+int64(r)*stride); err != nil {
			return failed(w.final, "write a scratch file for it", err)
		}
	}
	w.written.Add(int64(win.Rows) * int64(win.Cols))
	return nil
}

// quietNaN is the one NaN that files hold.
const quietNaN = 0x7fc00000

// encode32 writes floats, little-endian, rounded to multiples of the quantum.
func encode32(dst []byte, values []float32, quantum float64) {
	per := 1 / quantum
	for i, v := range values {
		bits := uint32(quietNaN)
		if v == v {
			if quantum != 0 {
				v = float32(math.RoundToEven(float64(v)*per) * quantum)
			}
			bits = math.Float32bits(v)
		}
		binary.LittleEndian.PutUint32(dst[4*i:], bits)
	}
}

// encode16 writes scaled integers, little-endian. A value beyond their range
// is an error: clamped, it would be a wrong value that looks like a right one.
func (w *Writer) encode16(dst []byte, values []float32) error {
	per, offset := 1/w.layer.Scale, w.layer.Offset
	for i, v := range values {
		n := math.RoundToEven((float64(v) - offset) * per)
		if v != v {
			n = fill16
		} else if !(math.Abs(n) <= math.MaxInt16) {
			return &OutputError{Path: w.final, Text: fmt.Sprintf(
				"the value %g does not fit 16 bits at a scale of %g", v, w.layer.Scale)}
		}
		binary.LittleEndian.PutUint16(dst[2*i:], uint16(int16(n)))
	}
	return nil
}

// Finish makes the raster, still under its hidden name; Set.Commit gives it
// the final one. Every cell must have been written. A second call does
// nothing.
func (w *Writer) Finish() error { return w.finish(w.set.threads()) }

func (w *Writer) finished() bool {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.done
}

func (w *Writer) finish(threads int) error {
	w.mu.Lock()
	defer w.mu.Unlock()
	if w.done {
		return nil
	}
	err := w.make(threads)
	if err != nil {
		w.Abort()
		return failed(w.final, "write the raster", err)
	}
	w.done = true
	return nil
}

func (w *Writer) make(threads int) error {
	all := int64(len(w.bands)) * int64(w.window.Rows) * int64(w.window.Cols)
	if n := w.written.Load(); n != all {
		return fmt.Errorf("%d cells were computed, and it has %d", n, all)
	}
	if w.layer.Classes == nil {
		if err := w.survey(); err != nil {
			return err
		}
	}
	if err := os.WriteFile(w.vrtName(), w.vrt(), 0o666); err != nil {
		return err
	}
	if err := w.translate(threads); err != nil {
		return err
	}
	if err := w.seal(); err != nil {
		return err
	}
	return w.removeScratch()
}

// survey computes the statistics from the scratch file, row after row, so
// that they do not depend on the order in which tiles came.
func (w *Writer) survey() error {
	w.stats = make([]Statistics, len(w.bands))
	buf := make([]byte, 1<<20)
	for b := range w.bands {
		m := moments{low: math.Inf(1), high: math.Inf(-1)}
		part := io.NewSectionReader(w.scratch, int64(b)*w.bandBytes(), w.bandBytes())
		for {
			n, err := io.ReadFull(part, buf)
			if w.layer.Scale != 0 {
				m.add16(buf[:n])
			} else {
				m.add32(buf[:n])
			}
			if err == io.EOF || err == io.ErrUnexpectedEOF {
				break
			}
			if err != nil {
				return err
			}
		}
		w.stats[b] = m.statistics(int64(w.window.Rows) * int64(w.window.Cols))
	}
	return nil
}

// moments sums stored values less the first one, which keeps the sums small.
type moments struct {
	low, high, first, sum, squares float64
	n                              int64
}

func (m *moments) add(v float64) {
	if m.n == 0 {
		m.first = v
	}
	m.n++
	m.low, m.high = min(m.low, v), max(m.high, v)
	d := v - m.first
	m.sum += d
	m.squares += float64(d * d)
}

func (m *moments) add32(b []byte) {
	for ; len(b) >= 4; b = b[4:] {
		if v := math.Float32frombits(binary.LittleEndian.Uint32(b)); v == v {
			m.add(float64(v))
		}
	}
}

func (m *moments) add16(b []byte) {
	for ; len(b) >= 2; b = b[2:] {
		if v := int16(binary.LittleEndian.Uint16(b)); v != fill16 {
			m.add(float64(v))
		}
	}
}

// statistics returns those of the stored values.
func (m *moments) statistics(all int64) Statistics {
	s := Statistics{Valid: m.n, All: all}
	if m.n == 0 {
		s.Min, s.Max, s.Mean, s.StdDev = math.NaN(), math.NaN(), math.NaN(), math.NaN()
		return s
	}
	n := float64(m.n)
	mean := m.sum / n
	s.Min, s.Max, s.Mean = m.low, m.high, m.first+mean
	s.StdDev = math.Sqrt(max(0, m.squares/n-mean*mean))
	return s
}

// physical turns statistics of stored values into those of what they mean.
func (w *Writer) physical(s Statistics) Statistics {
	if scale, offset := w.layer.Scale, w.layer.Offset; scale != 0 {
		s.Min, s.Max = offset+scale*s.Min, offset+scale*s.Max
		if scale < 0 {
			s.Min, s.Max = s.Max, s.Min
		}
		s.Mean, s.StdDev = offset+scale*s.Mean, math.Abs(scale)*s.StdDev
	}
	return s
}

// blockSize is the side of a raster's blocks, in cells.
const blockSize = 512

// creation returns the options of GDAL's COG driver; docs/storage.md has the
// measurements behind them.
func (w *Writer) creation(threads int) []string {
	options := []string{
		"COMPRESS=DEFLATE", "PREDICTOR=YES", "LEVEL=1", "OVERVIEW_RESAMPLING=AVERAGE",
		"BLOCKSIZE=" + strconv.Itoa(blockSize), "OVERVIEWS=IGNORE_EXISTING", "BIGTIFF=IF_SAFER",
		"NUM_THREADS=" + strconv.Itoa(threads),
	}
	if w.layer.Classes != nil {
		options[1], options[2] = "PREDICTOR=NO", "LEVEL=6"
	}
	if w.layer.Classes != nil || w.layer.NearestOverviews {
		options[3] = "OVERVIEW_RESAMPLING=NEAREST"
	}
	return options
}

// translate has GDAL copy the scratch file, seen through its VRT, into the
// raster.
func (w *Writer) translate(threads int) error {
	register()
	src, err := godal.Open(w.vrtName(), godal.RasterOnly(), godal.Drivers("VRT"), godal.ErrLogger(strictly))
	if err != nil {
		return err
	}
	// The driver's own scratch overviews need no compression: they live for
	// seconds, and packing them would cost a tenth of the time.
	dst, err := src.Translate(w.path, []string{"-of", "COG"}, godal.CreationOption(w.creation(threads)...),
		godal.ConfigOption("COG_TMP_COMPRESSION=NONE"), godal.ErrLogger(strictly))
	if err == nil {
		err = dst.Close(godal.ErrLogger(strictly))
	}
	return errors.Join(err, src.Close(godal.ErrLogger(strictly)))
}

// strictly is the error handler of all writing: a warning may mean that
// something did not reach the file, so it stops the run too.
func strictly(ec godal.ErrorCategory, _ int, text string) error {
	if ec < godal.CE_Warning {
		return nil
	}
	return errors.New(strings.Join(strings.Fields(text), " "))
}

// seal reads the raster once: is it what was asked for, how large is it, what
// is its checksum; and brings it to the disk.
func (w *Writer) seal() error {
	ds, err := godal.Open(w.path, godal.RasterOnly(), godal.Drivers("GTiff"), godal.ErrLogger(strictly))
	if err != nil {
		return err
	}
	layout := ds.Metadata("LAYOUT", godal.Domain("IMAGE_STRUCTURE"))
	placed := ds.Projection() != "" || w.grid.CRS == ""
	if err := ds.Close(godal.ErrLogger(strictly)); err != nil {
		return err
	}
	if layout != "COG" {
		return fmt.Errorf("GDAL made a file of layout %q, not COG", layout)
	}
	if !placed {
		return errors.New("GDAL could not store the DEM's coordinate reference system in it; give the DEM one of the EPSG registry with --crs")
	}
	f, err := os.Open(w.path)
	if err != nil {
		return err
	}
	sum := sha256.New()
	w.size, err = io.Copy(sum, f)
	if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
		return err
	}
	w.checksum = multihash(sum)
	return w.syncSidecar()
}

func (w *Writer) syncSidecar() error {
	f, err := os.Open(w.path + ".aux.xml")
	if errors.Is(err, os.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	return errors.Join(f.Sync(), f.Close())
}

// removeScratch removes all but the raster and its category names.
func (w *Writer) removeScratch() error {
	return errors.Join(w.scratch.Close(), os.Remove(w.scratchName()), os.Remove(w.vrtName()))
}

// Abort removes everything of the layer. It may be called at any time before
// Commit, and more than once.
func (w *Writer) Abort() {
	if w.aborted.Swap(true) {
		return
	}
	_ = w.scratch.Close()
	for _, name := range []string{w.scratchName(), w.vrtName(), w.path, w.path + ".aux.xml", w.path + ".ovr.tmp"} {
		_ = os.Remove(name)
	}
}

// Statistics returns those of each band, after Finish; nil for classes.
func (w *Writer) Statistics() []Statistics {
	var all []Statistics
	for _, s := range w.stats {
		all = append(all, w.physical(s))
	}
	return all
}

// Size returns the bytes of the finished raster.
func (w *Writer) Size() int64 { return w.size }

// Checksum returns the multihash of the finished raster.
func (w *Writer) Checksum() string { return w.checksum }
