package mask

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"golang.org/x/sync/errgroup"

	"foldshade/dem"
	"foldshade/geometry"
)

// EvaluateSites evaluates every site under every look, exactly at the sites'
// places on the bilinear surface, by range lines through them. The results
// stand in the order of the sites, and of the looks within a site: that of site
// i and look j at i*len(job.Looks)+j. A site outside the DEM or on a hole is no
// error: its results say so. Errors are those of Run, a site with a negative
// height or footprint or a cell outside the grid, and a negative DEM error.
//
// The margins of a site within onCentre of a cell centre and of no height are,
// bit for bit, those that Run finds for the cell. The results do not depend on
// the number of threads or on the other sites.
func EvaluateSites(ctx context.Context, job SitesJob) ([]SiteResult, error) {
	r, err := newSitesRunner(job)
	if err != nil {
		return nil, err
	}
	out := make([]SiteResult, len(job.Sites)*len(job.Looks))
	if len(out) == 0 {
		return out, nil
	}
	r.all = int64(len(out))
	if err := r.each(ctx, func(w *sitesWorker, sites []int) error { return w.bundle(ctx, sites, out) }); err != nil {
		return nil, err
	}
	return out, nil
}

// each hands the bundles of sites to the workers.
func (r *sitesRunner) each(ctx context.Context, do func(w *sitesWorker, sites []int) error) error {
	queue := make(chan []int)
	group, ctx := errgroup.WithContext(ctx)
	group.Go(func() error {
		defer close(queue)
		for _, b := range r.bundles() {
			select {
			case queue <- b:
			case <-ctx.Done():
				return ctx.Err()
			}
		}
		return nil
	})
	for range r.threads {
		group.Go(func() error {
			w := r.newSitesWorker()
			for b := range queue {
				if err := do(w, b); err != nil {
					return err
				}
			}
			return nil
		})
	}
	return group.Wait()
}

// onCentre is the distance, cells, within which a site counts as standing on a
// row, a column or a cell centre: a ten-thousandth of a metre or less, which
// map coordinates do not hold.
const onCentre = 1e-6

// sitesRunner is what all workers share.
type sitesRunner struct {
	*runner
	job   SitesJob
	sites []ground
}

// siteLayers are what a cell's result is read from.
var siteLayers = []Layer{VerdictLayer, LayoverLayer, ShadowLayer, Clearance, FoldMargin}

func newSitesRunner(job SitesJob) (*sitesRunner, error) {
	base, err := newRunner(Job{Source: job.Source, Range: job.Range, Looks: job.Looks, Layers: siteLayers,
		Window: job.Source.Grid().Whole(), Options: job.Options})
	if err != nil {
		return nil, err
	}
	e := job.DEMError
	if !(e.Sigma >= 0 && e.Sigma < math.Inf(1)) || !(e.Correlation >= 0 && e.Correlation < math.Inf(1)) || e.Draws < 0 {
		return nil, fmt.Errorf("DEM error of %v m, correlation length %v m, %d draws: none may be negative or endless", e.Sigma, e.Correlation, e.Draws)
	}
	r := &sitesRunner{runner: base, job: job, sites: make([]ground, len(job.Sites))}
	if r.job.DEMError.Draws == 0 {
		r.job.DEMError.Draws = DefaultDraws
	}
	var t sheet
	for i := range job.Sites {
		s := &job.Sites[i]
		if !(s.Height >= 0 && s.Height < math.Inf(1)) || !(s.Footprint >= 0 && s.Footprint < math.Inf(1)) {
			return nil, fmt.Errorf("site %q: height %v m, footprint %v m: give 0 or more", s.Name, s.Height, s.Footprint)
		}
		for _, c := range s.Cells {
			if c.Row < 0 || c.Col < 0 || c.Row >= base.grid.Rows || c.Col >= base.grid.Cols {
				return nil, fmt.Errorf("site %q: cell at row %d, column %d is not in the grid of %d x %d cells", s.Name, c.Row, c.Col, base.grid.Rows, base.grid.Cols)
			}
		}
		if r.sites[i], err = groundAt(job.Source, &t, s.Row, s.Col); err != nil {
			return nil, err
		}
	}
	return r, nil
}

// ground is what all looks share of a site.
type ground struct {
	where    Where
	row, col float64 // snapped to a row or column within onCentre
	centre   bool    // on both: a cell
	local    dem.Local
	z        float64 // height of the bilinear surface
	// zc and zr are the change of height for one column and one row more: the
	// cells' central differences, bilinear between them.
	zc, zr float64
}

// groundAt reads the ground at a place of the grid, with the room of a sheet.
func groundAt(src dem.Source, t *sheet, row, col float64) (ground, error) {
	g := src.Grid()
	row, onRow := snapped(row)
	col, onCol := snapped(col)
	p := ground{row: row, col: col, centre: onRow && onCol, z: nan, zc: nan, zr: nan}
	if !(row >= 0 && col >= 0 && row <= float64(g.Rows-1) && col <= float64(g.Cols-1)) {
		p.where = OutsideDEM
		return p, nil
	}
	p.local = g.At(row, col)
	cells := dem.Window{Row: int(row), Col: int(col), Rows: 2, Cols: 2}
	if onRow {
		cells.Rows = 1
	}
	if onCol {
		cells.Cols = 1
	}
	if err := t.load(src, cells); err != nil {
		return p, err
	}
	p.z = blend4(t.z, cells, row, col, false)
	p.zc, p.zr = blend4(t.zc, cells, row, col, true), blend4(t.zr, cells, row, col, true)
	if p.z != p.z {
		p.where = OnHole
	}
	return p, nil
}

// snapped moves a position within onCentre of a whole number onto it.
func snapped(x float64) (float64, bool) {
	if n := math.Round(x); math.Abs(x-n) <= onCentre {
		return n, true
	}
	return x, false
}

// blend4 interpolates the values of 1 or 2 rows and columns of cells. NaN
// counts, unless lenient leaves it out.
func blend4(a []float32, cells dem.Window, row, col float64, lenient bool) float64 {
	sum, weight := 0.0, 0.0
	for i, x := range a {
		wr := 1 - math.Abs(row-float64(cells.Row+i/cells.Cols))
		wc := 1 - math.Abs(col-float64(cells.Col+i%cells.Cols))
		if lenient && x != x {
			continue
		}
		sum += wr * wc * float64(x)
		weight += wr * wc
	}
	if weight == 0 {
		return nan
	}
	return sum / weight
}

// bundleStep is the side of the squares of cells whose sites share a field.
const bundleStep = 16

// bundles sorts the sites into bundles that stand close together.
func (r *sitesRunner) bundles() [][]int {
	type place struct{ row, col int }
	at := map[place]int{}
	var out [][]int
	for i, s := range r.sites {
		p := place{-1, i}
		if s.where == OnGround {
			p = place{int(s.row) / bundleStep, int(s.col) / bundleStep}
		}
		k, ok := at[p]
		if !ok {
			k = len(out)
			at[p] = k
			out = append(out, nil)
		}
		out[k] = append(out[k], i)
	}
	slices.SortFunc(out, func(a, b []int) int { // neighbours read the same blocks of a file
		return cmp.Or(cmp.Compare(r.sites[a[0]].row, r.sites[b[0]].row), cmp.Compare(a[0], b[0]))
	})
	return out
}

// sitesWorker is the memory of one goroutine.
type sitesWorker struct {
	*sitesRunner
	w     *worker
	field *field // of the places: the worker's, or when heights above the ground need more room, wide
	wide  field
	line  line
	judge judge
	sheet sheet // of a place
	draws draws
}

func (r *sitesRunner) newSitesWorker() *sitesWorker {
	return &sitesWorker{sitesRunner: r, w: r.newWorker()}
}

// bundle evaluates the sites of a bundle for every look.
func (w *sitesWorker) bundle(ctx context.Context, sites []int, out []SiteResult) error {
	cells, places, extra := w.windows(sites)
	for k := range w.looks {
		if err := ctx.Err(); err != nil {
			return err
		}
		var t *Tile
		if cells.Rows > 0 {
			var err error
			if t, err = w.cells(k, cells); err != nil {
				return err
			}
		}
		shared := w.looks[k].fan == nil
		if w.field = &w.w.field; shared && places.Rows > 0 && (places != cells || extra > 0) {
			if err := w.load(w.looks[k], places, extra); err != nil {
				return err
			}
		}
		for _, i := range sites {
			res := &out[i*len(w.looks)+k]
			*res = w.blank(i, k)
			if w.sites[i].where == OnGround {
				if !shared {
					if err := w.approach(i, k); err != nil {
						return err
					}
				}
				w.evaluate(i, k, t, res)
			}
			w.footprint(i, k, res)
		}
		for _, i := range sites { // these take the place of t and its field
			res := &out[i*len(w.looks)+k]
			if err := w.cellShares(i, k, res); err != nil {
				return err
			}
			w.conclude(res)
		}
		w.tell(len(sites))
	}
	return nil
}

// approach reads the field of a site for a tripod, whose fan depends on the
// place.
func (w *sitesWorker) approach(i, k int) error {
	p := &w.sites[i]
	ln, ok := w.side(k, p)
	if !ok {
		return nil // evaluate finds out
	}
	_, places, extra := w.windows([]int{i})
	return w.load(ln, places, extra)
}

// tell reports finished pairs.
func (w *sitesWorker) tell(n int) {
	if w.job.Progress == nil {
		return
	}
	w.progress.Lock()
	defer w.progress.Unlock()
	w.job.Progress(w.done.Add(int64(n)), w.all)
}

// windows returns the cells on whose centres sites stand and the cells around
// all places, with footprints, and the metres that targets and errors of the
// heights may add to the relief. A window without rows has no cells.
func (w *sitesWorker) windows(sites []int) (cells, places dem.Window, extra float64) {
	for _, i := range sites {
		p, s := &w.sites[i], &w.job.Sites[i]
		if p.where != OnGround {
			continue
		}
		if p.centre && s.Height == 0 {
			cells = join(cells, dem.Window{Row: int(p.row), Col: int(p.col), Rows: 1, Cols: 1})
		}
		dr, dc := w.footprintCells(i)
		r0, c0 := math.Floor(p.row-dr), math.Floor(p.col-dc)
		places = join(places, w.grid.Clip(dem.Window{Row: int(r0), Col: int(c0),
			Rows: int(math.Ceil(p.row+dr)-r0) + 1, Cols: int(math.Ceil(p.col+dc)-c0) + 1}))
		extra = max(extra, s.Height)
	}
	return cells, places, extra + 2*surelyWithin*w.job.DEMError.Sigma
}

// join returns the smallest window that holds two; one without rows is none.
func join(a, b dem.Window) dem.Window {
	if a.Rows <= 0 {
		return b
	}
	if b.Rows <= 0 {
		return a
	}
	r, c := min(a.Row, b.Row), min(a.Col, b.Col)
	return dem.Window{Row: r, Col: c,
		Rows: max(a.Row+a.Rows, b.Row+b.Rows) - r, Cols: max(a.Col+a.Cols, b.Col+b.Cols) - c}
}

// cells computes the layers of a window for look k, as Run does.
func (w *sitesWorker) cells(k int, win dem.Window) (*Tile, error) {
	b := w.w
	if err := b.sheet.load(w.job.Source, win); err != nil {
		return nil, err
	}
	if w.looks[k].fan != nil {
		b.sheet.blank()
	}
	for _, side := range w.sides(k) {
		u0, u1, v0, v1 := side.window(win)
		if u0 = max(u0, side.firstRow()); u0 >= u1 {
			continue
		}
		b.field.setUp(side, w.lim, u0, u1, v0, v1)
		if err := b.field.load(w.job.Source); err != nil {
			return nil, err
		}
		b.sheet.classify(&b.field, &b.strip, &b.walk)
	}
	return b.fill(k), nil
}

// sides returns the lanes of look k: the fans of a tripod, one set otherwise.
func (r *sitesRunner) sides(k int) []*lanes {
	return append([]*lanes{r.looks[k]}, r.looks[k].more...)
}

// side returns the lanes of look k that hold a place; ok is false beside a
// tripod.
func (r *sitesRunner) side(k int, p *ground) (*lanes, bool) {
	if r.looks[k].fan == nil {
		return r.looks[k], true
	}
	for _, ln := range r.sides(k) {
		u, v := ln.place(p.row, p.col)
		d := u - ln.fan.u
		if u >= float64(ln.firstRow()) && math.Abs(v-ln.fan.v) <= d+onColumn { // a diagonal serves in either
			return ln, true
		}
	}
	return nil, false
}

// load reads the field around places for lanes of a look, with a reach for
// that much more relief.
func (w *sitesWorker) load(ln *lanes, win dem.Window, extra float64) error {
	u0, u1, v0, v1 := ln.window(win)
	lim := w.lim
	lim.high += extra
	lim.ceiling += extra
	w.field = &w.wide
	w.field.setUp(ln, lim, max(u0, ln.firstRow()), u1, v0, v1)
	w.field.lim = w.lim
	return w.field.load(w.job.Source)
}

// trace lays the line through a place of the grid; ok is false where the
// surface has no value.
func (w *sitesWorker) trace(row, col float64) (ok bool) {
	f := w.field
	u, v := f.ln.place(row, col)
	return w.line.trace(f, u, v, f.near, f.far)
}

// blank returns the result of site i and look k with nothing in it.
func (w *sitesWorker) blank(i, k int) SiteResult {
	n := geometry.NotGiven
	return SiteResult{
		Site: i, Look: k, Where: w.sites[i].where,
		Ground: w.sites[i].z, Clearance: nan, FoldMargin: nan, Blocker: noTerrain, Partner: noTerrain, MastToClear: nan,
		Incidence: n, LocalIncidence: n, RangeIncidence: n, LookAzimuth: n, ToRadar: n, GridToRadar: n, Elevation: n,
		LineOfSight: geometry.ENU{East: nan, North: nan, Up: nan},
		SlantRange:  nan, Foreshortening: nan, GroundResolution: nan, AreaFactor: nan, Downslope: nan,
		CriticalBaseline: nan, AmbiguityHeight: nan, Fringe: nan, FringeDownslope: nan,
		Shares: Shares{1}, Chance: Chance{nan, nan, nan, nan, nan},
	}
}

// evaluate fills the result of a site with ground under it. t holds the cells
// on whose centres sites stand.
func (w *sitesWorker) evaluate(i, k int, t *Tile, res *SiteResult) {
	p, s := &w.sites[i], &w.job.Sites[i]
	g := w.look(k, p, s.Height)
	res.Seen = g.seen
	w.describe(p, k, &g, res)
	if _, ok := w.side(k, p); !ok && res.Seen == geometry.InView {
		res.Seen = geometry.OutsideRange // right at a tripod
	}
	if p.centre && s.Height == 0 {
		if w.fromCell(t, p, res); res.Class == NoData && res.Seen == geometry.InView {
			res.Seen = geometry.OutsideSwath // of what the layers interpolate
		}
	}
	if res.Seen != geometry.InView || !w.trace(p.row, p.col) {
		return
	}
	f := w.judge.of(&w.line, w.line.target(s.Height))
	if f.blocker != nil {
		res.Blocker = w.line.terrain(w.grid, f.blocker)
	}
	if f.partner != nil {
		res.Partner = w.line.terrain(w.grid, f.partner)
	}
	if !p.centre || s.Height > 0 {
		m := f.lane(w.field, p.z, p.z+s.Height)
		w.classes(&m, &g, res)
	}
	res.MastToClear = w.mastToClear(s.Height, res)
	if w.job.DEMError.Sigma > 0 {
		w.chance(i, k, g.facet, res)
	}
}

// glance is how a look sees a target over a place.
type glance struct {
	seen       geometry.Seen
	facet      geometry.Facet // of the ground
	sight      geometry.Sight
	slantRange float64 // to the target, metres
}

// look returns how look k sees a target over a place.
func (w *sitesWorker) look(k int, p *ground, height float64) (g glance) {
	ln, look := w.looks[k], &w.job.Looks[k]
	if ln.places != nil {
		at := geometry.Geodetic{Place: geometry.Place{Lon: p.local.Lon, Lat: p.local.Lat}, Height: p.z}
		v, seen := ln.platform.View(at)
		at.Height += height
		top, _ := ln.platform.View(at)
		g = glance{seen: seen, sight: v.Sight(), slantRange: top.SlantRange}
		l := &p.local
		det := l.ColE*l.RowN - l.ColN*l.RowE
		g.facet = g.sight.Facet((p.zc*l.RowN-p.zr*l.ColN)/det, (p.zr*l.ColE-p.zc*l.RowE)/det)
		return g
	}
	v := ln.viewOf(w.grid, p.row, p.col, true)
	c := func(i int) float64 { return v.up[i] + p.zc*v.c[i] + p.zr*v.r[i] }
	g.facet = geometry.Facet{Along: c(0), Above: c(1), Across: c(2)}
	g.sight = geometry.Sight{
		Along:  geometry.ENU{East: v.east, North: v.north, Up: v.up[0]},
		Above:  geometry.ENU{Up: v.up[1]},
		Across: geometry.ENU{Up: v.up[2]},
	}
	_, g.slantRange = ln.at(v.s, p.z+height)
	if look.SlantRange == look.SlantRange {
		g.slantRange += look.SlantRange
	}
	return g
}

// classes fills the classes and margins from the line's.
func (w *sitesWorker) classes(m *lane, g *glance, res *SiteResult) {
	raw, turns := m.raw(), w.turns(g)
	res.Layover, res.Shadow = Class(layoverOf[turns&3][raw]), Class(shadowOf[turns&3][raw])
	res.Class = Class(verdictOf[turns][raw])
	res.Clearance = float64(m.clear)
	if m.clear > 0 {
		res.FoldMargin = float64(min(m.near, m.far))
	}
}

// turns returns the turns of a facet.
func (w *sitesWorker) turns(g *glance) (turns int) {
	f := g.facet
	if f.ActiveLayover() {
		turns |= turnLayover
	}
	if f.SelfShadow() {
		turns |= turnShadow
	}
	if g.sight.Foreshortening(f) < w.job.Options.CompressedBelow {
		turns |= turnCompressed
	}
	return turns
}

// fromCell takes classes and margins from the layers.
func (w *sitesWorker) fromCell(t *Tile, p *ground, res *SiteResult) {
	at := (int(p.row)-t.Window.Row)*t.Window.Cols + int(p.col) - t.Window.Col
	res.Class, res.Layover, res.Shadow = Class(t.Classes[VerdictLayer][at]), Class(t.Classes[LayoverLayer][at]), Class(t.Classes[ShadowLayer][at])
	res.Clearance, res.FoldMargin = float64(t.Values[Clearance][0][at]), float64(t.Values[FoldMargin][0][at])
}

// describe fills what does not depend on other terrain.
func (w *sitesWorker) describe(p *ground, k int, g *glance, res *SiteResult) {
	look, sight, f := &w.job.Looks[k], &g.sight, g.facet
	res.LineOfSight = sight.Along
	res.Incidence = sight.Along.Incidence()
	res.Elevation = 90*geometry.Degree - res.Incidence
	res.LookAzimuth = sight.Along.LookAzimuth()
	res.ToRadar = (res.LookAzimuth + math.Pi).Turn()
	res.GridToRadar = (res.ToRadar - gridNorth(w.grid, &p.local)).Turn()
	res.LocalIncidence, res.RangeIncidence = f.LocalIncidence(), f.RangeIncidence()
	res.Foreshortening = sight.Foreshortening(f)
	res.AreaFactor = sight.SigmaArea(f)
	res.Downslope = downslope(f, sight)
	res.SlantRange = g.slantRange
	if Lacks(GroundResolution, *look) == nil {
		res.GroundResolution = sight.GroundResolution(f, geometry.SlantResolution(look.Bandwidth))
	}
	if Lacks(CriticalBaseline, *look) == nil {
		res.CriticalBaseline = f.CriticalBaseline(look.Wavelength, res.SlantRange, look.Bandwidth)
	}
	if Lacks(AmbiguityHeight, *look) == nil {
		res.AmbiguityHeight = geometry.AmbiguityHeight(look.Wavelength, res.SlantRange, sight.Above.Up, look.Baseline)
	}
	res.Fringe = geometry.FringeDisplacement(look.Wavelength, 1)
	res.FringeDownslope = geometry.FringeDisplacement(look.Wavelength, res.Downslope)
}

// gridNorth returns the true azimuth of the map's Y axis at a place.
func gridNorth(g *dem.Grid, l *dem.Local) geometry.Angle {
	sign := 1.0
	if g.Transform[5] < 0 {
		sign = -1
	}
	return geometry.Angle(math.Atan2(sign*l.RowE, sign*l.RowN))
}

// mastToClear returns the least height of a target over the line's point that
// is neither hidden nor folded; res is that of one at height now. The
// target must stand above the shadow, above the ground farther away that has
// its slant range, and not above the ground nearer that has it.
func (w *sitesWorker) mastToClear(now float64, res *SiteResult) float64 {
	if k := res.Layover; k == Open {
		return 0
	} else if k == NoData || k == Undetermined || k == ActiveLayover {
		return nan
	}
	need := max(now-res.Clearance, 0)
	for range 3 { // above the shadow other ground may fold over it
		if need > 0 {
			need += liftAbove
		}
		at := w.line.target(need)
		g := w.judge.of(&w.line, at)
		if g.clear > 0 && g.near > 0 && g.far > 0 {
			return need
		}
		if !(g.near > 0) && g.clear > 0 || math.IsInf(g.far, 0) {
			return nan
		}
		need += max(0, -g.clear, -g.far/at.drop)
	}
	return nan
}

// liftAbove is how far above the limit a target that just clears it stands,
// metres.
const liftAbove = 0.01
