package mask

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"sync"
	"sync/atomic"

	"golang.org/x/sync/errgroup"

	"foldshade/dem"
	"foldshade/geometry"
)

// SweepJob asks for every pair of an azimuth and an incidence over a part of a
// grid, by windows: plane waves, and any ground can be a partner in layover.
type SweepJob struct {
	Source dem.Source
	Range  dem.Range // from dem.Scan over the same source
	// Azimuths and Incidences span the look space, each ascending and without
	// repetition; incidences lie in [1, 89] degrees. There are at most 255
	// incidences and MaxSweepLooks pairs.
	Azimuths, Incidences []geometry.Angle
	// Window holds the cells that count; Inside, when not nil, says which of
	// them do, row-major.
	Window dem.Window
	Inside []bool
	// Best is the most looks of the sets that are sought, 1 to MaxSet.
	Best int
	// Condition is the largest condition number at which two looks separate
	// east and up.
	Condition float64
	Options   Options
	// Scratch, when not nil, takes what sets of three looks and more need, two
	// bytes a cell and azimuth, which are held in memory otherwise.
	Scratch Scratch

	// Emit, when not nil, takes each finished tile. It is called from several
	// goroutines, never twice at once, in no fixed order. The tile's slices are
	// the callee's until it returns.
	Emit func(t *SweepTile) error
	// Progress, when not nil, is told of finished work out of all work. It is
	// called from several goroutines, never twice at once.
	Progress func(done, all int64)
}

// Scratch is a file, or memory, that is written once and read several times.
type Scratch interface {
	io.ReaderAt
	io.WriterAt
}

// MaxSweepLooks is the most looks of a sweep; MaxSet the most of a set.
const (
	MaxSweepLooks = 4000
	MaxSet        = 8
)

// SweepTile is a rectangle of what a sweep says of each cell, row-major; NaN
// where a cell does not count or has no height.
type SweepTile struct {
	Window dem.Window
	// OpenCount is the number of looks at which the cell is open.
	OpenCount []float32
	// BestAzimuth is the azimuth with the most open incidences in a row, the
	// first of several, and BestIncidence the middle of these, degrees; NaN
	// where no look is open.
	BestAzimuth, BestIncidence []float32
}

// SweepResult is what a sweep finds.
type SweepResult struct {
	Cells int64 // that count and have a height
	// Looks are the pairs, incidence by incidence within each azimuth.
	Looks []LookShare
	// Coverage holds the best sets of one look and more by the cells that are open
	// in at least one of them, TwoDirections those of two looks and more by the
	// cells that are open in at least two that separate east and up, by size. A
	// size at which one look more gains nothing is left out.
	Coverage, TwoDirections []LookSet
}

// LookShare counts the cells of one look by what they are.
type LookShare struct {
	Azimuth, Incidence                              geometry.Angle
	Open, Compressed, Layover, Shadow, Undetermined int64
}

// LookSet is a set of looks, by index, and the cells that it serves. Exact says
// that no set of the size serves more; otherwise the set was built look by look
// from the best pair.
type LookSet struct {
	Looks []int
	Cells int64
	Exact bool
}

// Sweep marches once an azimuth and returns what every incidence sees. The
// result does not depend on tiles or threads.
func Sweep(ctx context.Context, job SweepJob) (*SweepResult, error) {
	s, err := newSweep(job)
	if err != nil {
		return nil, err
	}
	tiles := s.tiles()
	s.all = int64(len(tiles) * len(job.Azimuths))
	group, inner := errgroup.WithContext(ctx)
	var next atomic.Int64
	for range s.threads {
		group.Go(func() error {
			w := s.newWorker()
			for {
				i := int(next.Add(1)) - 1
				if i >= len(tiles) {
					s.merge(w)
					return nil
				}
				if err := w.tile(inner, tiles[i]); err != nil {
					return err
				}
			}
		})
	}
	if err := group.Wait(); err != nil {
		return nil, err
	}
	return s.result(ctx)
}

// sweep is what all workers of a sweep share.
type sweep struct {
	job     SweepJob
	grid    *dem.Grid
	lim     limits
	lanes   []*lanes // by azimuth
	steps   steps
	threads int
	from    geometry.Angle // the incidences that the march is bounded by
	to      geometry.Angle

	mu      sync.Mutex
	count   sweepCounts
	store   *openStore // nil when no set needs it
	pattern *patterns  // nil when there are too many looks
	done    int64
	all     int64
}

// sweepMargin keeps the bounds of the march off the looks' own incidences,
// where a slope at the bound would count.
const sweepMargin = 1e-4 * geometry.Degree

func newSweep(job SweepJob) (*sweep, error) {
	if err := job.check(); err != nil {
		return nil, err
	}
	r, err := newRunner(Job{Source: job.Source, Range: job.Range, Window: job.Window, Options: job.Options})
	if err != nil {
		return nil, err
	}
	s := &sweep{job: job, grid: r.grid, lim: r.lim, threads: r.threads}
	s.from, s.to = job.Incidences[0]-sweepMargin, job.Incidences[len(job.Incidences)-1]+sweepMargin
	for _, a := range job.Azimuths {
		s.lanes = append(s.lanes, windowLanes(s.grid, a, s.from, s.to))
	}
	s.steps = newSteps(job.Incidences, job.Options.CompressedBelow)
	s.count.init(len(job.Azimuths), len(job.Incidences))
	if job.Best >= 3 {
		if s.looks() <= patternBits {
			s.pattern = newPatterns(s.looks())
		} else {
			s.store = newOpenStore(len(job.Azimuths), len(job.Incidences), job.Scratch, s.threads)
		}
	}
	return s, nil
}

func (s *sweep) looks() int { return len(s.job.Azimuths) * len(s.job.Incidences) }

func (j *SweepJob) check() error {
	a, n := len(j.Azimuths), len(j.Incidences)
	if a == 0 || n == 0 {
		return errors.New("a sweep needs at least one azimuth and one incidence")
	}
	if n > 255 || a*n > MaxSweepLooks {
		return fmt.Errorf("%d azimuths x %d incidences: at most %d looks and 255 incidences are swept", a, n, MaxSweepLooks)
	}
	if j.Incidences[0] < 1*geometry.Degree || j.Incidences[n-1] > 89*geometry.Degree+1e-12 {
		return errors.New("incidences must lie between 1 and 89 degrees")
	}
	for _, list := range [][]geometry.Angle{j.Azimuths, j.Incidences} {
		for i, x := range list {
			if !x.Given() || i > 0 && !(x > list[i-1]) {
				return errors.New("azimuths and incidences must ascend")
			}
		}
	}
	if j.Best < 1 || j.Best > MaxSet {
		return fmt.Errorf("sets of %d looks: accepted are 1 to %d", j.Best, MaxSet)
	}
	if !(j.Condition >= 1) {
		return fmt.Errorf("condition number %v: it is at least 1", j.Condition)
	}
	if j.Inside != nil && len(j.Inside) != j.Window.Rows*j.Window.Cols {
		return errors.New("the mask of cells does not have the size of the window")
	}
	return nil
}

// tiles cuts the window: as large as memory allows, since halos are walked for
// nothing, but so that every worker gets some.
func (s *sweep) tiles() []dem.Window {
	memory := s.job.Options.Memory
	if memory <= 0 {
		memory = 1 << 30
	}
	// Slopes, sheet, the cell's part of the results, and the open incidences of
	// every azimuth; beside them counts, heights and lanes of a band.
	cell := int64(16 + 26 + 16 + 2*len(s.job.Azimuths))
	room := memory/int64(s.threads) - s.count.bytes()
	w := s.job.Window
	size := int64(math.Sqrt(float64(w.Rows) * float64(w.Cols) / float64(s.threads)))
	size = min(max(size, minTile), maxSweepTile)
	for size > minTile && size*size*cell+s.band(size) > room {
		size = size * 7 / 8
	}
	if t := s.job.Options.Tile; t > 0 {
		size = int64(t)
	}
	var out []dem.Window
	for _, r := range parts(w.Row, w.Rows, int(size)) {
		for _, c := range parts(w.Col, w.Cols, int(size)) {
			if t := s.crop(dem.Window{Row: r[0], Col: c[0], Rows: r[1], Cols: c[1]}); t.Rows > 0 {
				out = append(out, t)
			}
		}
	}
	return out
}

// parts cuts a run of cells into equal pieces of at most size cells, each by its
// first cell and its length.
func parts(first, cells, size int) (out [][2]int) {
	n := (cells + size - 1) / size
	for i := range n {
		a, b := i*cells/n, (i+1)*cells/n
		out = append(out, [2]int{first + a, b - a})
	}
	return out
}

const maxSweepTile = 2048

// band is the memory of the heights and lanes of one band of a tile.
func (s *sweep) band(size int64) int64 {
	rows := int64(0)
	for _, ln := range s.lanes {
		near, far := ln.reach(s.lim)
		rows = max(rows, min(size+int64(near+far), int64(ln.orient.u)))
	}
	// Heights, once more by lane, where lanes and runs stand, and cells of a strip.
	return rows * (5*(windowBand*laneStep+2*bandMargin) + 4*(laneStep+1) + 400 + 16*laneStep)
}

// crop shrinks a tile to the cells that count.
func (s *sweep) crop(t dem.Window) dem.Window {
	if s.job.Inside == nil {
		return t
	}
	w := s.job.Window
	r0, r1, c0, c1 := t.Rows, -1, t.Cols, -1
	for r := range t.Rows {
		row := s.job.Inside[(t.Row-w.Row+r)*w.Cols+t.Col-w.Col:][:t.Cols]
		for c, in := range row {
			if in {
				r0, r1, c0, c1 = min(r0, r), r, min(c0, c), max(c1, c)
			}
		}
	}
	return dem.Window{Row: t.Row + r0, Col: t.Col + c0, Rows: r1 - r0 + 1, Cols: c1 - c0 + 1}
}

// sweepWorker is the memory of one goroutine of a sweep.
type sweepWorker struct {
	*sweep
	sheet    sheet
	windower windower
	rise     []float32
	cells    []int32   // of the tile that count, by index
	from, to [][]uint8 // by azimuth and cell: the open incidences [from, to)
	count    sweepCounts
	pattern  *patterns
	words    []uint64
	out      SweepTile
}

func (s *sweep) newWorker() *sweepWorker {
	a := len(s.job.Azimuths)
	w := &sweepWorker{sweep: s, from: make([][]uint8, a), to: make([][]uint8, a)}
	w.count.init(a, len(s.job.Incidences))
	if s.pattern != nil {
		w.pattern = newPatterns(s.looks())
	}
	return w
}

func (w *sweepWorker) tile(ctx context.Context, win dem.Window) error {
	if err := w.sheet.load(w.job.Source, win); err != nil {
		return err
	}
	w.choose()
	for a := range w.lanes {
		if err := ctx.Err(); err != nil {
			return err
		}
		if len(w.cells) > 0 {
			if err := w.azimuth(a); err != nil {
				return err
			}
		}
		w.tick()
	}
	w.count.cells += int64(len(w.cells))
	if w.job.Best >= 2 {
		w.count.addPairs(w.from, w.to)
	}
	if w.pattern != nil {
		w.words = w.pattern.add(w.from, w.to, len(w.job.Incidences), w.words)
	}
	if w.store != nil {
		if err := w.store.put(w.from, w.to, len(w.cells)); err != nil {
			return err
		}
	}
	return w.emit()
}

// tick tells of one azimuth of one tile.
func (w *sweepWorker) tick() {
	w.mu.Lock()
	defer w.mu.Unlock()
	w.done++
	if w.job.Progress != nil {
		w.job.Progress(w.done, w.all)
	}
}

// choose lists the cells of the sheet that count and have a height.
func (w *sweepWorker) choose() {
	t, o := w.sheet.w, w.job.Window
	w.cells = w.cells[:0]
	for r := range t.Rows {
		from := (t.Row-o.Row+r)*o.Cols + t.Col - o.Col
		for c := range t.Cols {
			if i := r*t.Cols + c; w.sheet.z[i] == w.sheet.z[i] && (w.job.Inside == nil || w.job.Inside[from+c]) {
				w.cells = append(w.cells, int32(i))
			}
		}
	}
}

// azimuth finds the open incidences of the cells for one azimuth.
func (w *sweepWorker) azimuth(a int) error {
	x := &w.windower
	t := w.sheet.w
	if err := x.run(w.job.Source, w.lanes[a], w.lim, w.sweep.from, w.sweep.to, t); err != nil {
		return err
	}
	n := len(w.cells)
	w.from[a], w.to[a] = resize(w.from[a], n), resize(w.to[a], n)
	w.rise = resize(w.rise, t.Rows*t.Cols)
	d := newDirections(w.grid, w.lanes[a])
	for r := range t.Rows {
		w.sheet.rangeSlopes(d, r, w.rise[r*t.Cols:][:t.Cols])
	}
	var block endsBlock
	for c := 0; c < n; c += len(block[0]) {
		cells := w.cells[c:min(c+len(block[0]), n)]
		if block.fill(&w.steps, x, w.rise, cells) {
			w.count.add(a, &block, len(cells))
		} else {
			w.count.addOpen(a, len(cells))
		}
		for k := range cells {
			w.from[a][c+k], w.to[a][c+k] = uint8(block[endCompressed][k]), uint8(block[endOpen][k])
		}
	}
	return nil
}

// The ends of the runs of incidences that make up a cell's answer, from steep
// to shallow: folded below the first, then undetermined, compressed, open,
// undetermined, and hidden from the last on.
const (
	endFolded = iota
	endMayFold
	endCompressed
	endOpen
	endMayHide
	endCount
)

// steps turns slopes into numbers of incidences.
type steps struct {
	tan, cot, few ladder
	n             uint8
}

func newSteps(incidences []geometry.Angle, limit float64) steps {
	n := len(incidences)
	tan, cot, few := make([]float32, n), make([]float32, n), make([]float32, n)
	for i, a := range incidences {
		tan[i] = float32(a.Tan())
		cot[n-1-i] = float32(1 / a.Tan())
		few[i] = float32((1 - limit) * a.Tan())
	}
	return steps{newLadder(tan), newLadder(cot), newLadder(few), uint8(n)}
}

// endsBlock holds the ends of some cells, as numbers of incidences.
type endsBlock [endCount][32]int32

// fill takes the ends of up to 32 cells from their slopes, and reports whether
// any of them is not open throughout.
func (e *endsBlock) fill(s *steps, x *windower, rise []float32, cells []int32) bool {
	n := len(cells)
	if first := cells[0]; vectors && n == len(e[0]) && cells[n-1] == first+int32(n-1) && len(s.tan.rungs) <= fewRungs {
		return e.fillVector(s, x, rise, int(first))
	}
	any := false
	for k, i := range cells {
		ends := s.ends(x.shade[i], x.shadeU[i], x.fold[i], x.foldU[i], rise[i])
		any = any || ends != [endCount]uint8{endOpen: s.n, endMayHide: s.n}
		for end, b := range ends {
			e[end][k] = int32(b)
		}
	}
	return any
}

// fewRungs is the most rungs that are compared one by one.
const fewRungs = 64

// ends returns the ends of the runs, as numbers of incidences. The order of
// the classes is that of the verdict layer: hidden, perhaps hidden, folded,
// perhaps folded, compressed, open.
func (s *steps) ends(shade, shadeU, fold, foldU, rise float32) (e [endCount]uint8) {
	fold, foldU = higher(rise, fold), higher(rise, foldU)
	e[endMayHide] = s.n - s.cot.upTo(shade)
	e[endOpen] = min(s.n-s.cot.upTo(shadeU), e[endMayHide])
	top := e[endOpen]
	e[endFolded] = min(s.tan.upTo(fold), top)
	e[endMayFold] = min(max(s.tan.upTo(foldU), e[endFolded]), top)
	e[endCompressed] = min(max(s.few.below(rise), e[endMayFold]), top)
	return e
}

// ladder counts rungs up to a value.
type ladder struct {
	rungs []float32 // ascending
	start [ladderBins + 1]uint8
	low   float32
	scale float32
}

const ladderBins = 255

func newLadder(rungs []float32) ladder {
	l := ladder{rungs: rungs, low: rungs[0]}
	if span := rungs[len(rungs)-1] - l.low; span > 0 {
		l.scale = ladderBins / span
	}
	// start holds, of every bin, the rungs in the bins before it.
	for i, r := range rungs {
		for b := l.bin(r) + 1; b <= ladderBins; b++ {
			l.start[b] = uint8(i + 1)
		}
	}
	return l
}

func (l *ladder) bin(x float32) int { return min(int((x-l.low)*l.scale), ladderBins) }

// upTo counts the rungs that are not above x, none for NaN.
func (l *ladder) upTo(x float32) uint8 {
	n := len(l.rungs)
	switch {
	case !(x >= l.low):
		return 0
	case x >= l.rungs[n-1]:
		return uint8(n)
	}
	i := l.start[l.bin(x)]
	for int(i) < n && l.rungs[i] <= x {
		i++
	}
	return i
}

// below counts the rungs that are below x, none for NaN.
func (l *ladder) below(x float32) uint8 {
	n := len(l.rungs)
	switch {
	case !(x > l.low):
		return 0
	case x > l.rungs[n-1]:
		return uint8(n)
	}
	i := l.start[l.bin(x)]
	for int(i) < n && l.rungs[i] < x {
		i++
	}
	return i
}

// emit hands out what the sweep says of each cell of the tile.
func (w *sweepWorker) emit() error {
	if w.job.Emit == nil {
		return nil
	}
	t := &w.out
	t.Window = w.sheet.w
	n := t.Window.Rows * t.Window.Cols
	for _, a := range []*[]float32{&t.OpenCount, &t.BestAzimuth, &t.BestIncidence} {
		*a = resize(*a, n)
		fillWith(*a, float32(nan))
	}
	inc := w.job.Incidences
	for n, i := range w.cells {
		open, best, most := 0, 0, 0
		for a := range w.from {
			if k := int(w.to[a][n]) - int(w.from[a][n]); k > 0 {
				open += k
				if k > most {
					best, most = a, k
				}
			}
		}
		t.OpenCount[i] = float32(open)
		if most > 0 {
			t.BestAzimuth[i] = float32(w.job.Azimuths[best].Degrees())
			t.BestIncidence[i] = float32((inc[w.from[best][n]].Degrees() + inc[w.to[best][n]-1].Degrees()) / 2)
		}
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.job.Emit(t)
}

// merge adds what a worker found.
func (s *sweep) merge(w *sweepWorker) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.count.merge(&w.count)
	if s.pattern != nil {
		s.pattern.merge(w.pattern)
	}
}

// result reads the counts and seeks the best sets.
func (s *sweep) result(ctx context.Context) (*SweepResult, error) {
	res := &SweepResult{Cells: s.count.cells}
	sights := make([]geometry.ENU, 0, s.looks())
	open := make([]int64, 0, s.looks())
	for a, az := range s.job.Azimuths {
		for i, share := range s.count.shares(a) {
			share.Azimuth, share.Incidence = az, s.job.Incidences[i]
			res.Looks = append(res.Looks, share)
			sights = append(sights, geometry.LineOfSight(share.Incidence, az))
			open = append(open, share.Open)
		}
	}
	search := setSearch{open: open, both: s.count.both(open), apart: separating(sights, s.job.Condition)}
	switch {
	case s.pattern != nil:
		s.pattern.gather()
		search.more = s.pattern
	case s.store != nil:
		search.more = s.store
	}
	var err error
	res.Coverage, res.TwoDirections, err = search.best(ctx, s.job.Best)
	return res, err
}

// sweepCounts are the sums of a sweep.
type sweepCounts struct {
	cells int64
	n     int // incidences
	// ends[a][k][b] counts the cells whose run k ends after b incidences.
	ends [][endCount][]int64
	// pairs[p] is a table of (n+1) x (n+1): entry (x, y) counts cells that are not
	// open at incidences below x of one azimuth and below y of another; less those
	// that are open from there on, see addPairs.
	pairs  [][]int64
	closed []closedCells // by azimuth, of the cells being counted
}

func (c *sweepCounts) init(azimuths, n int) {
	c.n = n
	c.ends = make([][endCount][]int64, azimuths)
	for a := range c.ends {
		for k := range c.ends[a] {
			c.ends[a][k] = make([]int64, n+1)
		}
	}
	c.closed = make([]closedCells, azimuths)
	c.pairs = make([][]int64, azimuths*(azimuths+1)/2)
	for p := range c.pairs {
		c.pairs[p] = make([]int64, (n+1)*(n+1))
	}
}

func (c *sweepCounts) bytes() int64 { return 8 * int64(len(c.pairs)) * int64((c.n+1)*(c.n+1)) }

// add counts the ends of cells.
func (c *sweepCounts) add(a int, e *endsBlock, cells int) {
	for k := range e {
		ends := c.ends[a][k]
		for _, b := range e[k][:cells] {
			ends[b]++
		}
	}
}

// addOpen counts cells that are open throughout.
func (c *sweepCounts) addOpen(a, cells int) {
	ends, n := &c.ends[a], int64(cells)
	ends[endFolded][0] += n
	ends[endMayFold][0] += n
	ends[endCompressed][0] += n
	ends[endOpen][c.n] += n
	ends[endMayHide][c.n] += n
}

// closedCells are those of a run of cells that are not open at all incidences of
// an azimuth. A cell is closed below incidence from and from incidence to on; one
// that is closed throughout, below the end.
type closedCells struct {
	from, to []uint8
	low      []uint16 // cells with from above 0, in the run
	lowRow   []uint16 // where the table's row of their from begins
	high     []uint16 // cells with to before the end
}

// pairRun is how many cells are counted at once, so that they stay in the cache
// while all pairs of azimuths are.
const pairRun = 1 << 14

func (d *closedCells) take(from, to []uint8, n int) {
	d.from, d.to = append(d.from[:0], from...), append(d.to[:0], to...)
	d.low, d.lowRow, d.high = d.low[:0], d.lowRow[:0], d.high[:0]
	for c, f := range from {
		if f >= to[c] {
			d.from[c], d.to[c] = uint8(n), uint8(n)
		} else if f == 0 && int(to[c]) == n {
			continue
		}
		if f := d.from[c]; f > 0 {
			d.low, d.lowRow = append(d.low, uint16(c)), append(d.lowRow, uint16(f)*uint16(n+1))
		}
		if int(d.to[c]) < n {
			d.high = append(d.high, uint16(c))
		}
	}
}

// addPairs counts the cells of a tile for every pair of azimuths, one with
// itself included: only where they are closed. With [x] for "below incidence x",
// a cell is closed in [from] - [to] + [n].
func (c *sweepCounts) addPairs(from, to [][]uint8) {
	for at := 0; at < len(from[0]); at += pairRun {
		end := min(at+pairRun, len(from[0]))
		for a := range c.closed {
			c.closed[a].take(from[a][at:end], to[a][at:end], c.n)
		}
		p := 0
		for a := range c.closed {
			for b := a; b < len(c.closed); b++ {
				c.pair(c.pairs[p], &c.closed[a], &c.closed[b])
				p++
			}
		}
	}
}

func (c *sweepCounts) pair(table []int64, a, b *closedCells) {
	n, w := c.n, c.n+1
	row := func(x uint8) []int64 { return table[int(x)*w:][:w] }
	last := row(uint8(n))
	low, lowRow := a.low, a.lowRow[:len(a.low)]
	for i, k := range low {
		table[int(lowRow[i])+int(b.from[k])]++
	}
	for _, k := range b.high {
		r := row(a.from[k])
		r[b.to[k]]--
		r[n]++
	}
	for _, k := range a.high {
		r, f, t := row(a.to[k]), b.from[k], b.to[k]
		r[f]--
		last[f]++
		if int(t) < n {
			r[t]++
			r[n]--
			last[t]--
			last[n]++
		}
	}
}

func (c *sweepCounts) merge(o *sweepCounts) {
	c.cells += o.cells
	for a := range c.ends {
		for k := range c.ends[a] {
			addTo(c.ends[a][k], o.ends[a][k])
		}
	}
	for p := range c.pairs {
		addTo(c.pairs[p], o.pairs[p])
	}
}

func addTo(sum, add []int64) {
	for i, x := range add {
		sum[i] += x
	}
}

// shares returns the counts of the looks of an azimuth.
func (c *sweepCounts) shares(a int) []LookShare {
	out := make([]LookShare, c.n)
	var over [endCount]int64 // cells whose run ends after more than i incidences
	for k := range over {
		over[k] = c.cells - c.ends[a][k][0]
	}
	for i := range out {
		out[i] = LookShare{
			Layover:      over[endFolded],
			Compressed:   over[endCompressed] - over[endMayFold],
			Open:         over[endOpen] - over[endCompressed],
			Undetermined: over[endMayFold] - over[endFolded] + over[endMayHide] - over[endOpen],
			Shadow:       c.cells - over[endMayHide],
		}
		for k := range over {
			over[k] -= c.ends[a][k][i+1]
		}
	}
	return out
}

// both returns, for every two looks, the cells that are open in both, from those
// that are open in each.
func (c *sweepCounts) both(open []int64) func(a, b int) int64 {
	n, w := c.n, c.n+1
	// From entries for "below x and below y" to cells closed in both.
	for _, t := range c.pairs {
		for i := range w {
			for j := n - 1; j >= 0; j-- {
				t[i*w+j] += t[i*w+j+1]
			}
		}
		for i := n*w - 1; i >= 0; i-- {
			t[i] += t[i+w]
		}
	}
	azimuths := len(c.ends)
	return func(x, y int) int64 {
		if x > y {
			x, y = y, x
		}
		a, b := x/n, y/n
		p := a*azimuths - a*(a-1)/2 + b - a
		return open[x] + open[y] - c.cells + c.pairs[p][(x%n+1)*w+y%n+1]
	}
}

// separating says which looks have lines of sight that separate east and up.
func separating(sights []geometry.ENU, condition float64) func(a, b int) bool {
	n := len(sights)
	table := make([]bool, n*n)
	for a := range n {
		for b := range a {
			s, ok := geometry.SolveEastUp(sights[a], sights[b])
			ok = ok && s.Condition() <= condition
			table[a*n+b], table[b*n+a] = ok, ok
		}
	}
	return func(a, b int) bool { return table[a*n+b] }
}
