package raster

import (
	"context"
	"fmt"
	"math"

	"github.com/airbusgeo/godal"

	"foldshade/dem"
)

// Stored values at or beyond these are looked at twice: the fill values below
// and the huge ones all are.
const (
	lowSuspect  = -9999
	highSuspect = 32767
)

// fills are the values that formats and people write for "no height": the ends
// of the 16-bit integers, one off the lower end, and rows of nines. Common
// practice.
var fills = [...]float64{-32768, 32767, -32767, 65535, -9999, -99999}

// No ground is lower or higher: the shore of the Dead Sea is at -430 m, Everest
// at 8849 m, and the deepest quarries stay above -500 m (from memory).
const (
	lowestGround  = -500.0
	highestGround = 9000.0
)

// cliffHeight is the difference between neighbours that is called a cliff,
// metres: the tallest rock walls known are about 1200 m, and no grid resolves
// one in a single step (from memory). On coarse grids a cliff must also be
// steeper than cliffSlope, 76 degrees.
const (
	cliffHeight = 1000.0
	cliffSlope  = 4.0
)

// sight is a count and the first cell it was met at.
type sight struct {
	count    int64
	row, col int
}

func (s *sight) add(row, col int) {
	if s.count == 0 {
		s.row, s.col = row, col
	}
	s.count++
}

// tally is what a full pass notes besides the range.
type tally struct {
	d     *DEM
	part  dem.Window // being decoded
	fills [len(fills)]sight
	huge  sight

	cliff  float32 // metres
	cliffs sight
}

// at tells where the next stored values lie; nil does nothing.
func (t *tally) at(w dem.Window) {
	if t != nil {
		t.part = w
	}
}

// stored notes a suspicious stored value.
func (t *tally) stored(v float64, i int) {
	row, col := t.part.Row+i/t.part.Cols, t.part.Col+i%t.part.Cols
	if !(v > -huge && v < huge) {
		if !math.IsInf(v, 0) {
			t.huge.add(row, col)
		}
		return
	}
	for k, f := range fills {
		if v == f && t.d.decod.fill(f) {
			t.fills[k].add(row, col)
		}
	}
}

// fill reports whether a stored value of the list is one here: where it makes
// an impossible height, or is an end of the 16-bit type it is stored in.
func (d *decoder) fill(v float64) bool {
	switch h := v*d.mul + d.add; {
	case d.hasNodata && v == d.nodata:
		return false
	case h < lowestGround || h > highestGround:
		return true
	}
	return d.dtype == godal.Int16 && (v == -32768 || v == 32767) || d.dtype == godal.UInt16 && v == 65535
}

// Survey reads all heights once and returns their range; what looks wrong goes
// to Warnings. Heights that may be held are held from here on. Later calls
// return the same at once. A DEM without any height is an *InputError.
func (d *DEM) Survey(ctx context.Context) (dem.Range, error) {
	d.surveyMu.Lock()
	defer d.surveyMu.Unlock()
	if d.survey != nil {
		return *d.survey, nil
	}
	t := &tally{d: d, cliff: d.cliffStep()}
	r, heights, err := d.pass(ctx, t)
	if err != nil {
		return dem.Range{}, err
	}
	if r.Valid == 0 {
		return dem.Range{}, refuse(d.name, nil, "has no height: all %d cells of band %d are nodata; check its nodata value, or choose another band with --band", r.Missing, d.facts.Band)
	}
	d.warnHeights(t, r)
	if heights != nil {
		d.held.Store(&dem.Memory{Frame: d.grid, Heights: heights})
	}
	d.survey = &r
	return r, nil
}

// cliffStep is the least difference between neighbours that counts as a cliff.
func (d *DEM) cliffStep() float32 {
	return float32(max(cliffHeight, cliffSlope*max(d.facts.Centre.ColM, d.facts.Centre.RowM)))
}

// pass streams over the grid in strips of whole storage blocks.
func (d *DEM) pass(ctx context.Context, t *tally) (dem.Range, []float32, error) {
	g := d.grid
	r := dem.Range{Min: math.Inf(1), Max: math.Inf(-1)}
	strip := stripRows(g.Rows, g.Cols, d.facts.Block[0])
	var all, buf, above []float32
	if d.hold {
		all = make([]float32, g.Rows*g.Cols)
	} else {
		buf = make([]float32, strip*g.Cols)
		above = make([]float32, 0, g.Cols)
	}
	for row := 0; row < g.Rows; row += strip {
		if err := ctx.Err(); err != nil {
			return r, nil, err
		}
		w := dem.Window{Row: row, Rows: min(strip, g.Rows-row), Cols: g.Cols}
		part := buf
		if d.hold {
			part = all[row*g.Cols:]
		}
		part = part[:w.Rows*w.Cols]
		if err := d.fetch(w, part, t); err != nil {
			return r, nil, err
		}
		if d.hold && row > 0 {
			above = all[(row-1)*g.Cols : row*g.Cols]
		}
		t.heights(part, above, w, &r)
		if !d.hold {
			above = append(above[:0], part[len(part)-g.Cols:]...)
		}
	}
	if r.Valid == 0 {
		r.Min, r.Max = math.NaN(), math.NaN()
	}
	return r, all, nil
}

// stripRows is how many rows one read of a pass takes: about 16 MiB of
// heights, whole blocks where those fit 32 MiB.
func stripRows(rows, cols, block int) int {
	const cells = 1 << 22
	n := max(1, cells/cols)
	if block > 0 && block <= 2*n {
		n = max(1, n/block) * block
	}
	return min(n, rows)
}

// runCells is the stretch of a row whose range is taken at once: only where
// it spans a cliff's height are neighbours compared.
const runCells = 64

// heights adds a strip to the range and looks for cliffs; above is the row
// before the strip, empty at the first.
func (t *tally) heights(h, above []float32, w dem.Window, r *dem.Range) {
	runs := (w.Cols + runCells - 1) / runCells
	lows, highs := make([]float32, runs), make([]float32, runs)
	t.ranges(above, lows, highs, nil)
	for i := range w.Rows {
		row := h[i*w.Cols : (i+1)*w.Cols]
		t.row(row, above, w.Row+i, lows, highs, r)
		above = row
	}
}

// ranges fills the range of every run of a row, and counts its heights.
func (t *tally) ranges(row, lows, highs []float32, r *dem.Range) {
	for k := range lows {
		lo, hi := float32(math.Inf(1)), float32(math.Inf(-1))
		if len(row) > 0 {
			run := row[k*runCells : min((k+1)*runCells, len(row))]
			valid := 0
			for _, v := range run {
				if v == v {
					lo, hi = min(lo, v), max(hi, v)
					valid++
				}
			}
			if r != nil {
				r.Valid += int64(valid)
				r.Missing += int64(len(run) - valid)
				r.Min, r.Max = min(r.Min, float64(lo)), max(r.Max, float64(hi))
			}
		}
		lows[k], highs[k] = lo, hi
	}
}

// row takes one row: its range, and its cliffs to the left and above.
func (t *tally) row(row, above []float32, at int, lows, highs []float32, r *dem.Range) {
	lo, hi := float32(math.Inf(1)), float32(math.Inf(-1)) // of the last cell of the run before
	for k := range lows {
		upLo, upHi := lows[k], highs[k]
		from, to := k*runCells, min((k+1)*runCells, len(row))
		t.ranges(row[from:to], lows[k:k+1], highs[k:k+1], r)
		if max(hi, highs[k], upHi)-min(lo, lows[k], upLo) > t.cliff {
			t.cliffsIn(row, above, at, from, to)
		}
		if last := row[to-1]; last == last {
			lo, hi = last, last
		} else {
			lo, hi = float32(math.Inf(1)), float32(math.Inf(-1))
		}
	}
}

// cliffsIn compares the cells of a run with their neighbours. Fill values are
// no cliffs; they have a warning of their own.
func (t *tally) cliffsIn(row, above []float32, at, from, to int) {
	for c := from; c < to; c++ {
		v := row[c]
		if c > 0 && t.step(v, row[c-1]) {
			t.cliffs.add(at, c)
		}
		if len(above) > 0 && t.step(v, above[c]) {
			t.cliffs.add(at, c)
		}
	}
}

// step reports whether two heights differ by a cliff; NaN never does.
func (t *tally) step(a, b float32) bool {
	d := a - b
	return (d > t.cliff || d < -t.cliff) && !t.filled(a) && !t.filled(b)
}

// filled reports whether a height comes from a fill value met in this file.
func (t *tally) filled(h float32) bool {
	for k, f := range fills {
		if t.fills[k].count > 0 && t.d.shift.near(float64(h), float64(float32(f*t.d.decod.mul+t.d.decod.add))) {
			return true
		}
	}
	return false
}

// warnHeights turns what a pass noted into warnings.
func (d *DEM) warnHeights(t *tally, r dem.Range) {
	for k, s := range t.fills {
		if s.count > 0 {
			d.log.add(fmt.Sprintf("the fill value %g stands as a height in %s; declare it with gdal_translate -a_nodata %g", fills[k], s, fills[k]))
		}
	}
	if t.huge.count > 0 {
		d.log.add(fmt.Sprintf("values beyond 1e30 that are not declared as nodata stand in %s: taken as no height", t.huge))
	}
	if t.cliffs.count > 0 {
		d.log.add(fmt.Sprintf("neighbouring cells differ by more than %.0f m in %s; check for seams, spikes or undeclared nodata there", t.cliff, t.cliffs))
	}
	if none := t.fills == [len(fills)]sight{}; none && (r.Min < lowestGround || r.Max > highestGround) {
		d.log.add(fmt.Sprintf("heights run from %.0f to %.0f m, beyond any ground on earth: check their unit with --vertical-unit (used: %s)", r.Min, r.Max, d.facts.VerticalUnit))
	}
}

// String names the count and the first cell.
func (s sight) String() string {
	word := "places"
	if s.count == 1 {
		word = "place"
	}
	return fmt.Sprintf("%d %s, first at row %d, column %d (from 0)", s.count, word, s.row, s.col)
}

// warnReference warns when it is not known what the heights refer to. Geoid
// undulations lie within about 107 m (EGM96, from memory).
func (d *DEM) warnReference(r *reference) {
	const consequence = "used as ellipsoidal: only slant range shifts, by up to the geoid undulation (within about 107 m) times cos(incidence)"
	switch {
	case r.ellipsoidal:
	case r.vertical == nil:
		d.log.add("the vertical reference of the heights is not stated; they are " + consequence + "; give --geoid or --height-offset where it is known")
	default:
		d.log.add("the heights refer to " + r.vertical.name() + ", which PROJ cannot turn into ellipsoidal heights here: its grid is not installed or not known; they are " + consequence + "; install the grid, or give --geoid or --height-offset")
	}
}
