package raster

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"sync"
	"sync/atomic"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Options tells Open what the file does not.
type Options struct {
	// CRS replaces the file's coordinate reference system: EPSG:code, WKT or
	// a PROJ string. Empty: as the file says.
	CRS string
	// Band is the band to take, from 1. Zero: the first that can hold heights.
	Band int
	// VerticalUnit is the unit of the heights (m, ft, us-ft, cm, dm, mm, km).
	// Empty: as the band or the vertical CRS says, else metres.
	VerticalUnit string
	// Geoid is a raster of geoid undulations in metres, in any format that GDAL
	// reads: they are added to the heights, which makes them ellipsoidal. It
	// rules over the vertical CRS. Empty: none.
	Geoid string
	// HeightOffset is added to all heights, metres, in place of a geoid; zero
	// says that they are ellipsoidal. nil: none.
	HeightOffset *float64
	// HoldBytes is the most memory the heights may take to be held, 4 bytes a
	// cell; a larger DEM is read again by window. Zero: DefaultHold; negative:
	// never hold.
	HoldBytes int64
}

// DefaultHold is the memory for held heights when Options does not say: an
// 8000 x 8000 grid, a quarter of the program's default memory.
const DefaultHold = 256 << 20

// maxCells is the most cells of a DEM, about a million columns and rows; the
// sizes computed from it stay far from overflow.
const maxCells = 1 << 40

// InputError says that a file cannot serve as it is. Its text is one line
// with the file, what was found and the next step.
type InputError struct {
	text  string
	cause error
}

// Error returns the line.
func (e *InputError) Error() string { return e.text }

// Unwrap returns the error behind it, if any.
func (e *InputError) Unwrap() error { return e.cause }

// refuse makes an InputError about a DEM.
func refuse(name string, cause error, format string, args ...any) error {
	return &InputError{fmt.Sprintf("dem %q: ", name) + fmt.Sprintf(format, args...), cause}
}

// DEM is an open elevation raster. It is a dem.Source, safe for several
// goroutines.
type DEM struct {
	name  string
	grid  *dem.Grid
	shift *lattice // from the heights of the file to ellipsoidal ones; nil for none
	facts Facts
	log   *messages

	mu    sync.Mutex // guards ds, band and mask
	ds    *godal.Dataset
	band  godal.Band
	mask  godal.Band
	decod decoder

	surveyMu sync.Mutex
	survey   *dem.Range // set by the first full pass
	hold     bool
	held     atomic.Pointer[dem.Memory]
}

var _ dem.Source = (*DEM)(nil)

var registerOnce sync.Once

// register makes GDAL's formats known, once.
func register() { registerOnce.Do(godal.RegisterAll) }

// messages collects GDAL's warnings, once per text, and turns its errors into
// Go errors.
type messages struct {
	mu   sync.Mutex
	list []string
}

// handle is a godal.ErrorHandler.
func (m *messages) handle(ec godal.ErrorCategory, _ int, text string) error {
	text = strings.Join(strings.Fields(text), " ")
	switch {
	case ec < godal.CE_Warning:
		return nil
	case ec == godal.CE_Warning:
		m.add("GDAL: " + text)
		return nil
	}
	return errors.New(text)
}

func (m *messages) add(text string) {
	m.mu.Lock()
	defer m.mu.Unlock()
	for _, t := range m.list {
		if t == text {
			return
		}
	}
	m.list = append(m.list, text)
}

func (m *messages) all() []string {
	m.mu.Lock()
	defer m.mu.Unlock()
	return append([]string(nil), m.list...)
}

// firstLine is the first of the messages GDAL gave for one failure; the
// others repeat it from farther away.
func firstLine(err error) string {
	text, _, _ := strings.Cut(err.Error(), "\n")
	return text
}

// said is firstLine without the name of the file, which our own message
// already begins with.
func said(name string, err error) string {
	if name == "" {
		return firstLine(err)
	}
	return strings.TrimLeft(strings.ReplaceAll(firstLine(err), name+":", ""), " ")
}

// Open opens an elevation raster by path or GDAL name. It reads the header
// only; heights are read by Survey and Read. Every failure is an *InputError.
func Open(name string, o Options) (*DEM, error) {
	register()
	d := &DEM{name: name, log: &messages{}}
	ds, err := openDataset(name, d.log)
	if err != nil {
		return nil, err
	}
	d.ds = ds
	if err := d.prepare(o); err != nil {
		d.close()
		return nil, err
	}
	return d, nil
}

// prepare chooses the band, lays out the grid and sets up the decoder.
func (d *DEM) prepare(o Options) error {
	s := d.ds.Structure()
	if s.NBands == 0 {
		return d.noBands()
	}
	n, err := chooseBand(d.name, d.ds.Bands(), o.Band)
	if err != nil {
		return err
	}
	d.band = d.ds.Bands()[n-1]
	if err := checkSize(d.name, s.SizeY, s.SizeX); err != nil {
		return err
	}
	t, err := d.transform()
	if err != nil {
		return err
	}
	sheet, err := d.describe(n, o.CRS)
	if err != nil {
		return err
	}
	ref, err := d.reference(sheet)
	if err != nil {
		return err
	}
	if err := checkPlace(d.name, s.SizeY, s.SizeX, t, ref); err != nil {
		return err
	}
	if d.grid, err = d.layOut(s.SizeY, s.SizeX, t, ref); err != nil {
		return err
	}
	unit, err := d.verticalUnit(sheet, ref, o.VerticalUnit)
	if err != nil {
		return err
	}
	d.decod = newDecoder(d.band, unit.metres)
	if d.decod.masked {
		d.mask = d.band.MaskBand()
	}
	d.hold = int64(s.SizeY)*int64(s.SizeX) <= holdBytes(o.HoldBytes)/4
	d.collect(n, ref, unit)
	d.checkUsage(ref)
	return d.raise(o, ref)
}

func holdBytes(asked int64) int64 {
	if asked == 0 {
		return DefaultHold
	}
	return asked
}

// Close releases the file. Heights already held stay readable.
func (d *DEM) Close() error { return d.close() }

func (d *DEM) close() error {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.ds == nil {
		return nil
	}
	err := d.ds.Close(godal.ErrLogger(d.log.handle))
	d.ds = nil
	if err != nil {
		return refuse(d.name, err, "closing failed (GDAL: %s)", said(d.name, err))
	}
	return nil
}

// Grid returns the grid.
func (d *DEM) Grid() *dem.Grid { return d.grid }

// Name returns the name the DEM was opened by.
func (d *DEM) Name() string { return d.name }

// Facts returns what is known of the file from its header.
func (d *DEM) Facts() Facts { return d.facts }

// Warnings returns what looks wrong but did not stop the work, in the order
// found; it grows while heights are read.
func (d *DEM) Warnings() []string { return d.log.all() }

// openDataset opens the raster and rewrites GDAL's refusal.
func openDataset(name string, log *messages) (*godal.Dataset, error) {
	ds, err := godal.Open(name, godal.RasterOnly(), godal.ErrLogger(log.handle))
	if err == nil {
		return ds, nil
	}
	detail := said(name, err)
	info, statErr := os.Stat(name)
	plain := !strings.HasPrefix(name, "/vsi")
	switch {
	case name == "":
		return nil, refuse(name, err, "no name given; give the path or GDAL name of a raster")
	case plain && errors.Is(statErr, os.ErrNotExist):
		return nil, refuse(name, err, "no such file; check the path and the folder it starts from")
	case plain && errors.Is(statErr, os.ErrPermission), plain && statErr == nil && unreadable(name):
		return nil, refuse(name, err, "permission denied; ask for read access to it")
	case statErr == nil && info.IsDir():
		return nil, refuse(name, err, "is a folder; name the raster in it")
	case statErr == nil && info.Size() == 0:
		return nil, refuse(name, err, "the file is empty; fetch it again")
	case statErr == nil && strings.HasSuffix(strings.ToLower(name), ".zip"):
		return nil, refuse(name, err, "is an archive; name the raster in it as /vsizip/%s/FILE", name)
	case strings.HasPrefix(name, "/vsicurl"), strings.HasPrefix(name, "http"):
		return nil, refuse(name, err, "cannot be fetched (GDAL: %s); check the address and the network", detail)
	case strings.Contains(detail, "No such file"), strings.Contains(detail, "does not exist"):
		return nil, refuse(name, err, "nothing found under this name; check the parts of the name with gdalinfo")
	case strings.Contains(detail, "not recognized"):
		return nil, refuse(name, err, "not a raster of a format GDAL reads; see what it is with gdalinfo, or convert it to GeoTIFF")
	}
	return nil, refuse(name, err, "cannot be opened (GDAL: %s); the file may be cut short or damaged: check it with gdalinfo, or fetch it again", detail)
}

// unreadable reports whether the file exists but may not be read.
func unreadable(name string) bool {
	f, err := os.Open(name)
	if err == nil {
		_ = f.Close() // opened for reading only
	}
	return errors.Is(err, os.ErrPermission)
}

// noBands refuses a container without a raster of its own.
func (d *DEM) noBands() error {
	subs := d.ds.Metadatas(godal.Domain("SUBDATASETS"), godal.ErrLogger(d.log.handle))
	if first := subs["SUBDATASET_1_NAME"]; first != "" {
		return refuse(d.name, nil, "holds %d rasters and none by itself; name one of them, such as %s", (len(subs)+1)/2, first)
	}
	return refuse(d.name, nil, "has no raster band; name a raster with heights")
}

// checkSize refuses grids too small for a slope or too large to count.
func checkSize(name string, rows, cols int) error {
	if rows < 3 || cols < 3 {
		return refuse(name, nil, "%d x %d cells (rows x columns); a slope needs at least 3 x 3: give a larger cut-out", rows, cols)
	}
	if rows > maxCells/cols {
		return refuse(name, nil, "%d x %d cells (rows x columns) are more than %d; cut the area out with gdal_translate -projwin", rows, cols, int64(maxCells))
	}
	return nil
}
