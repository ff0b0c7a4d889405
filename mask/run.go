// Package mask marches range lines over an elevation grid and says for every
// cell whether a radar look sees it once, folds it or hides it, and by how
// much. It is pure Go: geometry and the grid type are all it imports.
package mask

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"

	"golang.org/x/sync/errgroup"

	"foldshade/dem"
	"foldshade/geometry"
)

// Options steer a Run. The zero value of a float64 is a value: start from
// DefaultOptions.
type Options struct {
	// Ceiling is the highest terrain that may stand where the DEM shows none,
	// metres; NaN for the DEM's own highest cell.
	Ceiling float64
	// HoleHeight is the height taken for holes, metres; NaN when unknown.
	HoleHeight float64
	// OpenEdge says that nothing stands outside the DEM.
	OpenEdge bool
	// CompressedBelow is the foreshortening under which an open cell is
	// compressed in the verdict.
	CompressedBelow float64

	Threads int   // workers; 0 for the number of processors
	Memory  int64 // bytes that buffers may take; 0 for 1 GiB
	Tile    int   // cells a side of a work tile; 0 to choose by memory
}

// DefaultOptions returns the options that hold when the user gives none.
func DefaultOptions() Options {
	return Options{Ceiling: nan, HoleHeight: nan, CompressedBelow: 0.3}
}

// Job is one run over a grid.
type Job struct {
	Source  dem.Source
	Range   dem.Range // from dem.Scan over the same source
	Looks   []geometry.Look
	Layers  []Layer
	Window  dem.Window // the output window, inside the grid
	Options Options

	// Emit takes each finished tile of each look. It is called from several
	// goroutines, never twice at once for the same look, in no fixed order.
	// The tile's slices are the callee's until it returns.
	Emit func(look int, t *Tile) error
	// Progress, when not nil, is told of finished work out of all work. It is
	// called from several goroutines, never twice at once.
	Progress func(done, all int64)
}

// Tile is a rectangle of results. Window is in cells of the grid, inside the
// job's output window.
type Tile struct {
	Window  dem.Window
	Classes map[Layer][]uint8     // class layers, row-major
	Values  map[Layer][][]float32 // other layers, one slice a band, row-major
}

// Tally counts the cells of one look, by class as in the verdict layer.
type Tally struct {
	Look  string
	Cells map[Class]int64
}

// Run computes the layers for every look and hands out tiles. The results are
// bit-identical for every tile size, number of threads and output window. It
// returns the tallies in the order of the looks, or the first error of the
// source, of Emit or of the context. A grid of fewer than 2 x 2 cells, a look
// of a kind that cannot be marched, a layer that the look lacks something for
// and an output window outside the grid are errors.
func Run(ctx context.Context, job Job) ([]Tally, error) {
	r, err := newRunner(job)
	if err != nil {
		return nil, err
	}
	tiles := r.tiles()
	r.all = int64(len(tiles) * len(job.Looks))
	queue := make(chan dem.Window)
	group, ctx := errgroup.WithContext(ctx)
	group.Go(func() error {
		defer close(queue)
		for _, t := range tiles {
			select {
			case queue <- t:
			case <-ctx.Done():
				return ctx.Err()
			}
		}
		return nil
	})
	for range r.threads {
		group.Go(func() error {
			w := r.newWorker()
			for t := range queue {
				if err := w.tile(ctx, t); err != nil {
					return err
				}
			}
			return nil
		})
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	return r.result(), nil
}

// runner is what all workers share.
type runner struct {
	job     Job
	grid    *dem.Grid
	lim     limits
	looks   []*lanes
	locks   []sync.Mutex // one a look, around Emit and its tally
	tally   [][256]int64
	threads int

	done     atomic.Int64
	all      int64
	progress sync.Mutex
}

func newRunner(job Job) (*runner, error) {
	g := job.Source.Grid()
	if g.Rows < 2 || g.Cols < 2 {
		return nil, fmt.Errorf("grid of %d x %d cells: range lines need at least 2 x 2", g.Rows, g.Cols)
	}
	if w := job.Window; w != g.Clip(w) || w.Rows < 1 || w.Cols < 1 {
		return nil, fmt.Errorf("output window %+v is not inside the grid of %d x %d cells", w, g.Rows, g.Cols)
	}
	o := job.Options
	lim := limits{low: job.Range.Min, high: job.Range.Max, ceiling: o.Ceiling, openEdge: o.OpenEdge, holeHeight: o.HoleHeight}
	if !(lim.low <= lim.high) {
		return nil, fmt.Errorf("the grid has no height")
	}
	if lim.ceiling != lim.ceiling {
		lim.ceiling = lim.high
	}
	if job.Range.Missing > 0 && lim.holeHeight == lim.holeHeight {
		lim.low, lim.high = min(lim.low, lim.holeHeight), max(lim.high, lim.holeHeight)
	}
	r := &runner{job: job, grid: g, lim: lim, threads: o.Threads}
	if r.threads < 1 {
		r.threads = runtime.GOMAXPROCS(0)
	}
	for _, look := range job.Looks {
		if look.Kind == geometry.Fixed && !(look.Incidence > 0 && look.Incidence < 90*geometry.Degree && look.Azimuth.Given()) {
			return nil, fmt.Errorf("look %q: needs an incidence between 0 and 90 degrees and an azimuth", look.Name)
		}
		for _, l := range job.Layers {
			if _, ok := Info(l); !ok {
				return nil, fmt.Errorf("unknown layer %q", l)
			}
			if lacks := Lacks(l, look); lacks != nil {
				return nil, fmt.Errorf("look %q: layer %q needs %v", look.Name, l, lacks)
			}
		}
		ln, err := lanesOf(job.Source, look, job.Range)
		if err != nil {
			return nil, err
		}
		r.looks = append(r.looks, ln)
	}
	r.locks = make([]sync.Mutex, len(job.Looks))
	r.tally = make([][256]int64, len(job.Looks))
	return r, nil
}

// rangeBin returns the slant range resolution of a look; without a bandwidth a
// millimetre, which leaves the count of equal ranges.
func rangeBin(look *geometry.Look) float64 {
	if look.Bandwidth == look.Bandwidth {
		return geometry.SlantResolution(look.Bandwidth)
	}
	return 1e-3
}

// lanesOf lays out the range lines of a look.
func lanesOf(src dem.Source, look geometry.Look, rng dem.Range) (*lanes, error) {
	g := src.Grid()
	if look.Kind == geometry.Fixed {
		return fixedLanes(g, look), nil
	}
	p, err := PlatformOf(src, look)
	if err != nil {
		return nil, err
	}
	if look.Kind == geometry.Tripod {
		return fanLanes(g, look, p, rng)
	}
	return trackLanes(g, look, p, rng)
}

// PlatformOf resolves a look that is not a plane wave over a DEM: anchored at
// its centre, over its ground.
func PlatformOf(src dem.Source, look geometry.Look) (geometry.Platform, error) {
	g := src.Grid()
	c := g.At(float64(g.Rows-1)/2, float64(g.Cols-1)/2)
	return geometry.NewPlatform(look, geometry.Site{
		Centre: geometry.Place{Lon: c.Lon, Lat: c.Lat},
		Ground: func(p geometry.Place) float64 { return heightAt(src, p) },
	})
}

// heightAt returns the bilinear height at a place, NaN outside the DEM and
// where a height is missing or cannot be read.
func heightAt(src dem.Source, p geometry.Place) float64 {
	g := src.Grid()
	row, col, ok := g.Find(p.Lon, p.Lat)
	if !ok {
		return nan
	}
	r, c := min(int(row), g.Rows-2), min(int(col), g.Cols-2)
	var z [4]float32
	if r < 0 || c < 0 || src.Read(dem.Window{Row: r, Col: c, Rows: 2, Cols: 2}, z[:]) != nil {
		return nan
	}
	u, v := row-float64(r), col-float64(c)
	a := float64(z[0]) + v*float64(z[1]-z[0])
	b := float64(z[2]) + v*float64(z[3]-z[2])
	return a + u*(b-a)
}

// tileSize returns the cells a side of a work tile: small enough for a processor's
// cache, for memory and for every worker to get some, but large against its halo,
// which is walked for nothing.
func (r *runner) tileSize() int {
	if r.job.Options.Tile > 0 {
		return r.job.Options.Tile
	}
	memory := r.job.Options.Memory
	if memory <= 0 {
		memory = 1 << 30
	}
	bands := int64(0)
	for _, l := range r.job.Layers {
		info, _ := Info(l)
		bands += 4 * int64(len(info.Bands))
	}
	halo := 0
	for _, ln := range r.looks {
		near, far := ln.reach(r.lim)
		halo = max(halo, near+far)
	}
	fits := func(t int64) bool {
		most := int64(0)
		for _, ln := range r.looks {
			near, far := ln.reach(r.lim)
			rows := min(t+int64(near+far), int64(ln.orient.u))
			most = max(most, rows*(t+8)*5+(t+int64(far))*t*13+t*t*24)
		}
		return (most+t*t*(24+bands))*int64(r.threads) <= memory
	}
	// Two tiles a worker balance their unequal costs, and more of them would march
	// more ground twice. A tripod has one: the lanes of each tile are marched from the
	// radar on.
	w, tiles := r.job.Window, 2*r.threads
	for _, ln := range r.looks {
		if ln.fan != nil {
			tiles = r.threads
		}
	}
	share := int64(math.Sqrt(float64(w.Rows) * float64(w.Cols) / float64(tiles)))
	t := min(max(share, minTile), max(cacheTile, 2*int64(halo)), maxTile)
	for t > minTile && !fits(t) {
		t = t * 3 / 4
	}
	return int(t)
}

// Tiles of 400 to 800 cells take the least time where the halo is 200 rows;
// with 1,800 cells a side a third more, since less stays in the cache.
const (
	minTile   = 192
	cacheTile = 640
	maxTile   = 2048
)

func (r *runner) tiles() []dem.Window {
	w := r.job.Window
	size := r.tileSize()
	rows, cols := size, size
	if r.job.Options.Tile <= 0 {
		rows, cols = evenly(w.Rows, size), evenly(w.Cols, size)
	}
	var out []dem.Window
	for row := 0; row < w.Rows; row += rows {
		for col := 0; col < w.Cols; col += cols {
			out = append(out, dem.Window{Row: w.Row + row, Col: w.Col + col,
				Rows: min(rows, w.Rows-row), Cols: min(cols, w.Cols-col)})
		}
	}
	return out
}

// evenly parts n cells into as few tiles as size allows and returns the size of
// most of them: whole blocks of views where there is room.
func evenly(n, size int) int {
	parts := (n + size - 1) / size
	each := (n + parts - 1) / parts
	return min((each+viewStep-1)/viewStep*viewStep, size)
}

func (r *runner) result() []Tally {
	out := make([]Tally, len(r.job.Looks))
	for i := range out {
		out[i] = Tally{Look: r.job.Looks[i].Name, Cells: map[Class]int64{}}
		for code, n := range r.tally[i] {
			if n > 0 {
				out[i].Cells[Class(code)] = n
			}
		}
	}
	return out
}

// worker is the memory of one goroutine.
type worker struct {
	*runner
	sheet sheet
	field field
	strip strip
	walk  walker
	tileBuffers
	windower windower
}

func (r *runner) newWorker() *worker {
	w := &worker{runner: r}
	has := func(l Layer) bool { return slices.Contains(r.job.Layers, l) }
	w.wantViews = has(SlantRange) || has(LineOfSight) || has(CriticalBaseline) || has(AmbiguityHeight)
	for _, l := range r.job.Layers {
		info, _ := Info(l)
		w.wantFacets = w.wantFacets || !info.IsClass && l != Clearance && l != FoldMargin
	}
	w.wantWindows = has(WindowLow) || has(WindowHigh)
	w.wantReturns = has(Returns) || has(Share)
	w.sheet.wantClear, w.sheet.wantFold = has(Clearance), has(FoldMargin)
	return w
}

// tile computes one tile for every look.
func (w *worker) tile(ctx context.Context, win dem.Window) error {
	load := w.sheet.read
	if w.wantWindows {
		load = w.sheet.load
	}
	if err := load(w.job.Source, win); err != nil {
		return err
	}
	for i := range w.looks {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := w.look(i, win); err != nil {
			return err
		}
	}
	return nil
}

func (w *worker) look(i int, win dem.Window) error {
	ln := w.looks[i]
	if w.sheet.bin = 0; w.wantReturns {
		w.sheet.bin = rangeBin(&w.job.Looks[i])
	}
	if ln.fan != nil {
		w.sheet.blank() // no fan holds the radar's own place
	}
	for n := -1; n < len(ln.more); n++ {
		side := ln
		if n >= 0 {
			side = ln.more[n]
		}
		u0, u1, v0, v1 := side.window(win)
		if u0 = max(u0, side.firstRow()); u0 >= u1 {
			continue
		}
		w.field.setUp(side, w.lim, u0, u1, v0, v1)
		if err := w.field.load(w.job.Source); err != nil {
			return err
		}
		w.sheet.classify(&w.field, &w.strip, &w.walk)
	}
	t := w.fill(i)
	if err := w.windows(i, t); err != nil {
		return err
	}
	w.locks[i].Lock()
	defer w.locks[i].Unlock()
	countClasses(&w.tally[i], w.verdict)
	if w.job.Emit != nil {
		if err := w.job.Emit(i, t); err != nil {
			return err
		}
	}
	if w.job.Progress != nil {
		w.progress.Lock()
		w.job.Progress(w.done.Add(1), w.all)
		w.progress.Unlock()
	}
	return nil
}
