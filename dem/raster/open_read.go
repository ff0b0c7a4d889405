package raster

import (
	"context"
	"fmt"
	"math"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Read fills dst, of length w.Rows*w.Cols, with the heights of a window that
// lies inside the grid: metres, NaN where there is none. It may be called from
// several goroutines. It panics when the window is not inside the grid or dst
// has another length; a file that cannot be read is an *InputError.
func (d *DEM) Read(w dem.Window, dst []float32) error {
	if w.Rows < 0 || w.Cols < 0 || len(dst) != w.Rows*w.Cols {
		panic("raster: length of dst is not that of the window")
	}
	if d.grid.Clip(w) != w {
		panic("raster: window outside the grid")
	}
	if len(dst) == 0 {
		return nil
	}
	if !d.hold {
		return d.fetch(w, dst, nil)
	}
	m := d.held.Load()
	if m == nil {
		if _, err := d.Survey(context.Background()); err != nil {
			return err
		}
		m = d.held.Load()
	}
	return m.Read(w, dst)
}

// chunkCells bounds the scratch memory of one read: 8 MiB of float64.
const chunkCells = 1 << 20

// fetch reads and decodes a window from GDAL, in chunks of rows.
func (d *DEM) fetch(w dem.Window, dst []float32, t *tally) error {
	step := w.Rows
	if d.decod.wide || d.decod.masked {
		step = max(1, min(w.Rows, chunkCells/w.Cols))
	}
	var wide []float64
	var mask []byte
	if d.decod.wide {
		wide = make([]float64, step*w.Cols)
	}
	if d.decod.masked {
		mask = make([]byte, step*w.Cols)
	}
	for r := 0; r < w.Rows; r += step {
		part := dem.Window{Row: w.Row + r, Col: w.Col, Rows: min(step, w.Rows-r), Cols: w.Cols}
		n := part.Rows * part.Cols
		out := dst[r*w.Cols : r*w.Cols+n]
		var raw any = out
		if d.decod.wide {
			raw = wide[:n]
		}
		if err := d.load(part, raw, mask); err != nil {
			return err
		}
		t.at(part)
		if d.decod.wide {
			blank(wide[:n], mask)
			d.decod.widen(out, wide[:n], t)
		} else {
			blank(out, mask)
			d.decod.narrow(out, t)
		}
		d.shift.add(part, out)
	}
	return nil
}

// blank sets the stored values under a zero mask to NaN; no mask, no change.
func blank[T float32 | float64](stored []T, mask []byte) {
	if mask == nil {
		return
	}
	nan := T(math.NaN())
	for i := range stored {
		if mask[i] == 0 {
			stored[i] = nan
		}
	}
}

// load reads stored values, and the mask when there is one, under the lock.
func (d *DEM) load(w dem.Window, raw any, mask []byte) error {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.ds == nil {
		return refuse(d.name, nil, "read after it was closed")
	}
	log := godal.ErrLogger(d.log.handle)
	err := d.band.Read(w.Col, w.Row, raw, w.Cols, w.Rows, log)
	if err == nil && d.decod.masked {
		err = d.mask.Read(w.Col, w.Row, mask, w.Cols, w.Rows, log)
	}
	if err != nil {
		return refuse(d.name, err, "band %d, %s cannot be read: the file is cut short or damaged (GDAL: %s); fetch it again, or check it with gdalinfo -checksum",
			d.facts.Band, place(w), said(d.name, err))
	}
	return nil
}

// place names a window in messages.
func place(w dem.Window) string {
	return fmt.Sprintf("rows %d to %d, columns %d to %d", w.Row, w.Row+w.Rows-1, w.Col, w.Col+w.Cols-1)
}
