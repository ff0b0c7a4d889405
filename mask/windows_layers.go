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
	for r := range win.Rows {
		w.sheet.rangeSlopes(w.grid, ln, r, rise)
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

// rangeSlopes fills the tangent of the terrain's slope along the range lines,
// positive where it rises away from the radar, for one row of the sheet; NaN
// where there is none. The direction is interpolated between places of the grid
// viewStep columns apart, as the views are.
func (t *sheet) rangeSlopes(g *dem.Grid, ln *lanes, row int, out []float32) {
	at := func(col int) (dc, dr float64) {
		l := g.At(float64(t.w.Row+row), float64(col))
		e, n := ln.ahead(&l)
		det := l.ColE*l.RowN - l.ColN*l.RowE
		return (e*l.RowN - n*l.RowE) / det, (l.ColE*n - l.ColN*e) / det
	}
	cols := t.w.Cols
	zc, zr := t.zc[row*cols:][:cols], t.zr[row*cols:][:cols]
	block := t.w.Col / viewStep * viewStep
	c1, r1 := at(block)
	for j := 0; j < cols; block += viewStep {
		c0, r0 := c1, r1
		c1, r1 = at(block + viewStep)
		for end := min(cols, block+viewStep-t.w.Col); j < end; j++ {
			q := float64(t.w.Col+j-block) / viewStep
			out[j] = float32(float64(float64(zc[j])*(c0+float64(q*(c1-c0)))) + float64(float64(zr[j])*(r0+float64(q*(r1-r0)))))
		}
	}
}
