package mask

import (
	"math"

	"foldshade/dem"
)

// windows fills the window layers of look i, when the job wants them.
func (w *worker) windows(i int, t *Tile) error {
	low, high := t.Values[WindowLow], t.Values[WindowHigh]
	if low == nil && high == nil {
		return nil
	}
	win := w.sheet.w
	ln := windowLanes(w.grid, w.job.Looks[i].Azimuth, WindowFrom, WindowTo)
	x := &w.windower
	if err := x.run(w.job.Source, ln, w.lim, WindowFrom, WindowTo, win); err != nil {
		return err
	}
	rise := make([]float32, win.Cols)
	d := newDirections(w.grid, ln)
	for r := range win.Rows {
		w.sheet.rangeSlopes(d, r, rise)
		for c := range win.Cols {
			n := r*win.Cols + c
			h := w.sheet.z[n] // NaN also where a hole height was given
			if low != nil {
				low[0][n] = windowLow(x.fold[n], rise[c], h)
				low[1][n] = windowLow(x.foldU[n], rise[c], h)
			}
			if high != nil {
				high[0][n] = windowHigh(x.shade[n], h)
				high[1][n] = windowHigh(x.shadeU[n], h)
			}
		}
	}
	return nil
}

// windowLow returns the incidence, degrees, up to which a cell is folded: by
// other ground, or because its own slope is steeper.
func windowLow(fold, rise, height float32) float32 {
	if height != height {
		return height
	}
	if rise > fold {
		fold = rise
	}
	a := math.Atan(float64(fold)) * 180 / math.Pi
	return float32(min(max(a, WindowFrom.Degrees()), WindowTo.Degrees()))
}

// windowHigh returns the incidence, degrees, from which a cell is hidden.
func windowHigh(shade, height float32) float32 {
	if height != height {
		return height
	}
	a := 90 - math.Atan(float64(shade))*180/math.Pi
	return float32(min(max(a, WindowFrom.Degrees()), WindowTo.Degrees()))
}

// directions gives the direction of range lines over the rows of a sheet, as
// columns and rows a metre, at places of the grid viewStep rows and columns
// apart, between which it is interpolated.
type directions struct {
	grid  *dem.Grid
	lanes *lanes
	block int // of the rows
	rows  [2][]gridStep
}

type gridStep struct{ col, row float64 }

func newDirections(g *dem.Grid, ln *lanes) *directions {
	return &directions{grid: g, lanes: ln, block: -1}
}

// stand brings the places about a row.
func (d *directions) stand(row, col, cols int) {
	if block := row / viewStep; block != d.block {
		d.block = block
		for i := range d.rows {
			d.rows[i] = d.rows[i][:0]
			for c := col / viewStep; c <= (col+cols-1)/viewStep+1; c++ {
				d.rows[i] = append(d.rows[i], d.at(float64((block+i)*viewStep), float64(c*viewStep)))
			}
		}
	}
}

func (d *directions) at(row, col float64) gridStep {
	l := d.grid.At(row, col)
	e, n := d.lanes.ahead(&l)
	det := l.ColE*l.RowN - l.ColN*l.RowE
	return gridStep{(e*l.RowN - n*l.RowE) / det, (l.ColE*n - l.ColN*e) / det}
}

// between returns the lines through the directions at the two places about
// column block k of the sheet, by column from the first place.
func (d *directions) between(row, k int) (col, alongRow linear) {
	q := float64(row%viewStep) / viewStep
	mix := func(k int) gridStep {
		a, b := d.rows[0][k], d.rows[1][k]
		return gridStep{a.col + float64(q*(b.col-a.col)), a.row + float64(q*(b.row-a.row))}
	}
	a, b := mix(k), mix(k+1)
	return linearOf(a.col, b.col), linearOf(a.row, b.row)
}

// rangeSlopes fills the tangent of the terrain's slope along the range lines,
// positive where it rises away from the radar, for one row of the sheet; NaN
// where there is none.
func (t *sheet) rangeSlopes(d *directions, row int, out []float32) {
	cols := t.w.Cols
	zc, zr := t.zc[row*cols:][:cols], t.zr[row*cols:][:cols]
	d.stand(t.w.Row+row, t.w.Col, cols)
	from := t.w.Col % viewStep // in the block
	for j, k := 0, 0; j < cols; k++ {
		end := min(cols, j+viewStep-from)
		c, r := d.between(t.w.Row+row, k)
		alongLine(out[j:end], zc[j:end], zr[j:end], c, r, from)
		j, from = end, 0
	}
}

// alongLine fills slopes from changes of height by column and row, and the line's
// columns and rows a metre, by column from one on.
func alongLine(out, zc, zr []float32, c, r linear, from int) {
	j := 0
	if vectors {
		j = alongLineVector(out, zc, zr, &c, &r, from)
	}
	for ; j < len(out); j++ {
		out[j] = float32(zc[j]*c.at(from+j)) + float32(zr[j]*r.at(from+j))
	}
}
