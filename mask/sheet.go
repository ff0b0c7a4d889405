package mask

import "foldshade/dem"

// sheet is the rectangle of cells that one worker finishes: what all looks
// share, in row-major order of the grid.
type sheet struct {
	w      dem.Window
	z      []float32  // heights, of load
	zc, zr []float32  // change of height for one column more, one row more, of load
	pad    []float32  // the window with a margin of one cell
	padded dem.Window // what pad holds
	cols   int        // of the grid

	findings
	turned    bool     // the findings lie row by row of the marching frame, for now
	beside    findings // room for them
	margins   laneMargins
	mixed     mixed
	bin       float64 // metres of slant range, 0 when neither is wanted
	wantClear bool
	wantFold  bool
}

// findings are what the march finds of the cells of a sheet; returns and share are
// filled where they are wanted, clear and fold as well.
type findings struct {
	raw            []uint8 // class codes before the cells' own slopes are looked at
	clear, fold    []float32
	returns, share []float32
}

// load reads the heights of the window and their central differences.
func (t *sheet) load(src dem.Source, w dem.Window) error {
	if err := t.read(src, w); err != nil {
		return err
	}
	n := w.Rows * w.Cols
	t.z, t.zc, t.zr = resize(t.z, n), resize(t.zc, n), resize(t.zr, n)
	for i := range w.Rows {
		a, b := i*w.Cols, (i+1)*w.Cols
		copy(t.z[a:b], t.heights(i))
		t.slopes(i, t.zc[a:b], t.zr[a:b])
	}
	return nil
}

// read reads the heights of the window and leaves it to heights and slopes to
// give them by the row: what is computed when it is needed stays in the cache.
func (t *sheet) read(src dem.Source, w dem.Window) error {
	g := src.Grid()
	t.w, t.cols = w, g.Cols
	t.raw = resize(t.raw, w.Rows*w.Cols)
	t.padded = g.Clip(dem.Window{Row: w.Row - 1, Col: w.Col - 1, Rows: w.Rows + 2, Cols: w.Cols + 2})
	t.pad = resize(t.pad, t.padded.Rows*t.padded.Cols)
	return src.Read(t.padded, t.pad)
}

// from returns where row i of the window begins in pad.
func (t *sheet) from(i int) int {
	return (t.w.Row+i-t.padded.Row)*t.padded.Cols + t.w.Col - t.padded.Col
}

// heights returns row i of the window.
func (t *sheet) heights(i int) []float32 { return t.pad[t.from(i):][:t.w.Cols] }

// slopes fills the central differences of row i of the window: the change of
// height for one column more and for one row more. It reports whether all
// heights of the row are there, as far as a look at whole rows tells.
func (t *sheet) slopes(i int, zc, zr []float32) (whole bool) {
	from, n := t.from(i), t.w.Cols
	row := t.pad[from : from+n]
	r := t.w.Row + i - t.padded.Row
	hasAbove, hasBelow := r > 0, r < t.padded.Rows-1
	above, below := row, row // itself where there is no row
	if hasAbove {
		above = t.pad[from-t.padded.Cols:][:n]
	}
	if hasBelow {
		below = t.pad[from+t.padded.Cols:][:n]
	}
	whole = hasAbove && hasBelow && central(zr, above, row, below)
	if !whole {
		for j, h := range row {
			zr[j] = difference(above[j], h, below[j], hasAbove, hasBelow)
		}
	}
	a, b := 0, n // columns with both neighbours
	if t.w.Col == 0 {
		a = 1
	}
	if t.w.Col+n == t.cols {
		b = n - 1
	}
	if a >= b || !central(zc[a:b], t.pad[from+a-1:from+b-1], row[a:b], t.pad[from+a+1:from+b+1]) {
		a, b = n, n
	}
	for j := range a {
		zc[j] = t.alongRow(from, j)
	}
	for j := b; j < n; j++ {
		zc[j] = t.alongRow(from, j)
	}
	return whole
}

// alongRow returns the change of height for one column more at column j of the
// row that begins at from.
func (t *sheet) alongRow(from, j int) float32 {
	h := t.pad[from+j]
	left, right, hasL, hasR := h, h, t.w.Col+j > 0, t.w.Col+j < t.cols-1
	if hasL {
		left = t.pad[from+j-1]
	}
	if hasR {
		right = t.pad[from+j+1]
	}
	return difference(left, h, right, hasL, hasR)
}

// central fills d with half the difference of after and before, and reports
// whether that is all: false where a height is missing.
func central(d, before, mid, after []float32) bool {
	if vectors {
		return centralVector(d, before, mid, after)
	}
	return centralScalar(d, before, mid, after)
}

func centralScalar(d, before, mid, after []float32) bool {
	before, mid, after = before[:len(d)], mid[:len(d)], after[:len(d)]
	whole := true
	for j := range d {
		d[j] = (after[j] - before[j]) / 2
		if d[j] != d[j] || mid[j] != mid[j] {
			whole = false
		}
	}
	return whole
}

// difference returns the change of height over one step at the middle of
// three neighbours: central where both others have a height, one-sided where
// one has, NaN where none has or the middle is missing. Source: Zevenbergen &
// Thorne, Earth Surface Processes and Landforms 12, 1987, 47-56 (from memory).
func difference(a, mid, b float32, hasA, hasB bool) float32 {
	if d := (b - a) / 2; hasA && hasB && d == d {
		if mid != mid {
			return mid
		}
		return d
	}
	if hasA && a == a {
		return mid - a
	}
	if hasB {
		return b - mid
	}
	return float32(nan)
}
