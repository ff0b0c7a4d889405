package mask

import (
	"encoding/binary"
	"math"

	"foldshade/geometry"
)

// tileBuffers holds the results of one tile while they are computed.
type tileBuffers struct {
	out                   *Tile
	verdict               []uint8
	nodes                 nodeViews
	sights                sightRow
	zc, zr                []float32 // of one row: change of height
	turns                 []uint8   // of one row
	facets                facetRow  // of one row
	unseen                []bool    // of one row: cells that the look does not see
	gaps                  bool      // the row may have cells without a height, or unseen
	wantReturns           bool
	wantWindows           bool
	wantViews, wantFacets bool
}

// fill turns the raw codes and the differences of height of the sheet into the
// layers of look i.
func (w *worker) fill(i int) *Tile {
	t := w.newTile()
	ln, look := w.looks[i], &w.job.Looks[i]
	win := w.sheet.w
	w.turns = resize(w.turns, win.Cols)
	w.zc, w.zr = resize(w.zc, win.Cols), resize(w.zr, win.Cols)
	if w.wantFacets {
		w.facets.resize(win.Cols)
	}
	w.unseen = resize(w.unseen, win.Cols)
	clear(w.unseen)
	w.nodes.setUp(ln, w.grid, win, w.wantViews)
	for r := range win.Rows {
		w.gaps = !w.sheet.slopes(r, w.zc, w.zr)
		if ln.places == nil {
			w.see(win.Row+r, win.Col)
		} else {
			w.seeAbreast(ln, look, r)
		}
		w.classRow(t, r)
		for l, bands := range t.Values {
			w.valueRow(l, bands, r, ln, look)
		}
	}
	return t
}

// newTile returns the worker's tile with slices of the sheet's size, the
// sheet's own margins among them.
func (w *worker) newTile() *Tile {
	n := w.sheet.w.Rows * w.sheet.w.Cols
	if w.out == nil {
		w.out = &Tile{Classes: map[Layer][]uint8{}, Values: map[Layer][][]float32{}}
	}
	t := w.out
	t.Window = w.sheet.w
	w.verdict = resize(w.verdict, n)
	for _, l := range w.job.Layers {
		info, _ := Info(l)
		switch {
		case l == VerdictLayer:
			t.Classes[l] = w.verdict
		case info.IsClass:
			t.Classes[l] = resize(t.Classes[l], n)
		default:
			if t.Values[l] == nil {
				t.Values[l] = make([][]float32, len(info.Bands))
			}
			if a := w.sheet.kept(l); a != nil {
				t.Values[l][0], *a = *a, t.Values[l][0]
				continue
			}
			for b := range t.Values[l] {
				t.Values[l][b] = resize(t.Values[l][b], n)
			}
		}
	}
	return t
}

// kept returns the values that the sheet keeps for a layer, nil for others.
func (t *sheet) kept(l Layer) *[]float32 {
	switch l {
	case Clearance:
		return &t.clear
	case FoldMargin:
		return &t.fold
	case Returns:
		return &t.returns
	case Share:
		return &t.share
	}
	return nil
}

// see fills the turns of one row, its facets and sights when a layer of values
// is wanted, and its views when a layer asks for more.
func (w *worker) see(row, col int) {
	v := &w.nodes
	v.stand(row)
	n := len(w.turns)
	for j, i := 0, 0; j < n; i++ {
		left := v.col + i*viewStep
		end := min(n, left+viewStep-col)
		w.seeBlock(&v.row[i], &v.row[i+1], j, end, col+j-left)
		j = end
	}
}

// The turns of a facet.
const (
	turnLayover    = 1 << iota // slant range falls away from the radar
	turnShadow                 // the facet turns its back
	turnCompressed             // foreshortening below the limit
)

// seeBlock is see for the columns [from, to) that lie between two views, first
// columns from the left one.
func (w *worker) seeBlock(a, b *view, from, to, first int) {
	limit := w.job.Options.CompressedBelow
	if vectors && to-from == viewStep {
		blockVector(w, a, b, from)
		return
	}
	d := b.minus(a)
	turns, zc, zr := w.turns[from:to], w.zc[from:to], w.zr[from:to]
	for i := range turns {
		t := float64(first+i) * (1. / viewStep)
		c, r := float64(zc[i]), float64(zr[i])
		up0, up1 := a.up[0]+float64(t*d.up[0]), a.up[1]+float64(t*d.up[1])
		along := up0 + float64(c*(a.c[0]+float64(t*d.c[0]))) + float64(r*(a.r[0]+float64(t*d.r[0])))
		above := up1 + float64(c*(a.c[1]+float64(t*d.c[1]))) + float64(r*(a.r[1]+float64(t*d.r[1])))
		turns[i] = turnOf(along, above, limit*up1)
		if !w.wantFacets {
			continue
		}
		up2 := a.up[2] + float64(t*d.up[2])
		across := up2 + float64(c*(a.c[2]+float64(t*d.c[2]))) + float64(r*(a.r[2]+float64(t*d.r[2])))
		w.facets.set(from+i, geometry.Facet{Along: along, Above: above, Across: across}, up0, up1, up2)
		if w.wantViews {
			w.facets.setView(from+i, a.east+float64(t*d.east), a.north+float64(t*d.north), a.s+float64(t*d.s))
		}
	}
}

// turnOf returns the turns of a facet from two of its components, and the limit
// of the second at which it is compressed where range planes are level.
func turnOf(along, above, limit float64) (turn uint8) {
	if above < limit {
		turn = turnCompressed
		if above <= 0 {
			turn |= turnLayover
		}
	}
	if along <= 0 {
		turn |= turnShadow
	}
	return turn
}

// facetRow holds what layers of values ask of the facets of one row, each
// component by itself.
type facetRow struct {
	along, above, across []float64 // of the facet
	up                   [3][]float64
	// When a layer asks for more: of the line of sight, and the distance, for a
	// platform the slant range.
	east, north, s []float64
}

func (f *facetRow) resize(n int) {
	for _, a := range []*[]float64{&f.along, &f.above, &f.across, &f.up[0], &f.up[1], &f.up[2], &f.east, &f.north, &f.s} {
		*a = resize(*a, n)
	}
}

// set stores the facet of column j and the up components of its sight.
func (f *facetRow) set(j int, c geometry.Facet, up0, up1, up2 float64) {
	f.along[j], f.above[j], f.across[j] = c.Along, c.Above, c.Across
	f.up[0][j], f.up[1][j], f.up[2][j] = up0, up1, up2
}

func (f *facetRow) setView(j int, east, north, s float64) {
	f.east[j], f.north[j], f.s[j] = east, north, s
}

// facet returns the facet of column j.
func (f *facetRow) facet(j int) geometry.Facet {
	return geometry.Facet{Along: f.along[j], Above: f.above[j], Across: f.across[j]}
}

// sight returns the sight of column j as far as the quantities of a facet need
// it: the up components.
func (f *facetRow) sight(j int) *geometry.Sight {
	return &geometry.Sight{
		Along:  geometry.ENU{Up: f.up[0][j]},
		Above:  geometry.ENU{Up: f.up[1][j]},
		Across: geometry.ENU{Up: f.up[2][j]},
	}
}

// localIncidences fills a with the local incidences from column from on, degrees.
func (f *facetRow) localIncidences(a []float32, from int) {
	for j := from; j < len(a); j++ {
		a[j] = float32(f.facet(j).LocalIncidence().Degrees())
	}
}

// foreshortenings fills a with the foreshortenings from column from on.
func (f *facetRow) foreshortenings(a []float32, from int) {
	for j := from; j < len(a); j++ {
		a[j] = float32(f.sight(j).Foreshortening(f.facet(j)))
	}
}

// classRow writes the class layers of one row.
func (w *worker) classRow(t *Tile, row int) {
	n := t.Window.Cols
	raw := w.sheet.raw[row*n : (row+1)*n]
	if w.gaps {
		for j, h := range w.sheet.heights(row) {
			if h != h || w.unseen[j] { // also where a hole height was given
				raw[j] = uint8(NoData)
			}
		}
	}
	classes(w.verdict[row*n:(row+1)*n], raw, w.turns, &verdictOf)
	if out := t.Classes[LayoverLayer]; out != nil {
		classes(out[row*n:(row+1)*n], raw, w.turns, &layoverOf)
	}
	if out := t.Classes[ShadowLayer]; out != nil {
		classes(out[row*n:(row+1)*n], raw, w.turns, &shadowOf)
	}
}

// classTable gives the class by the turns of the facet and the raw code.
type classTable [8][64]uint8

// classes looks a row of classes up, eight cells at a time where they are alike.
func classes(out, raw, turns []uint8, of *classTable) {
	n := len(out)
	raw, turns = raw[:n], turns[:n]
	j := 0
	for ; j+8 <= n; j += 8 {
		if c, d := raw[j], turns[j]; alike(raw[j:j+8], c) && alike(turns[j:j+8], d) {
			binary.LittleEndian.PutUint64(out[j:j+8], each8*uint64(of[d&7][c&63]))
			continue
		}
		for i := j; i < j+8; i++ {
			out[i] = of[turns[i]&7][raw[i]&63]
		}
	}
	for ; j < n; j++ {
		out[j] = of[turns[j]&7][raw[j]&63]
	}
}

// each8 times a byte is eight of them.
const each8 = 0x0101010101010101

// alike reports whether the first eight bytes of a are all c.
func alike(a []uint8, c uint8) bool { return binary.LittleEndian.Uint64(a) == each8*uint64(c) }

// countClasses adds the cells of a to a tally of classes.
func countClasses(tally *[256]int64, a []uint8) {
	for ; len(a) >= 8; a = a[8:] {
		if alike(a, a[0]) {
			tally[a[0]] += 8
			continue
		}
		for _, c := range a[:8] {
			tally[c]++
		}
	}
	for _, c := range a {
		tally[c]++
	}
}

var layoverOf, shadowOf, verdictOf = func() (layover, shadow, verdict classTable) {
	for turns := range verdict {
		for raw := range verdict[turns] {
			l := layoverClass(Class(raw), turns)
			layover[turns][raw], shadow[turns][raw] = uint8(l), uint8(shadowClass(Class(raw), turns))
			if l == Open && turns&turnCompressed != 0 {
				l = Compressed
			}
			verdict[turns][raw] = uint8(l)
		}
	}
	return layover, shadow, verdict
}()

// valueRow writes one row of one layer of values.
func (w *worker) valueRow(l Layer, bands [][]float32, row int, ln *lanes, look *geometry.Look) {
	n := w.sheet.w.Cols
	z := w.sheet.heights(row)
	out := bands[0][row*n : (row+1)*n]
	each := func(f func(j int, fc geometry.Facet, s *geometry.Sight) float64) {
		for j := range out {
			if z[j] != z[j] || w.unseen[j] {
				out[j] = float32(nan)
				continue
			}
			out[j] = float32(f(j, w.facets.facet(j), w.facets.sight(j)))
		}
	}
	slant := func(j int) float64 {
		if ln.places != nil {
			return w.facets.s[j]
		}
		_, r := ln.at(w.facets.s[j], float64(z[j]))
		if look.SlantRange == look.SlantRange {
			r += look.SlantRange
		}
		return r
	}
	switch l {
	case LocalIncidence:
		done := 0
		if vectors {
			done = localIncidencesVector(&w.facets, out)
		}
		w.facets.localIncidences(out, done)
		w.known(out, z)
	case SlantRange:
		for j := range out {
			out[j] = float32(slant(j))
		}
		w.known(out, z)
	case Foreshortening:
		done := 0
		if vectors {
			done = foreshorteningsVector(&w.facets, out)
		}
		w.facets.foreshortenings(out, done)
		w.known(out, z)
	case Incidence:
		each(func(_ int, _ geometry.Facet, s *geometry.Sight) float64 {
			return geometry.Angle(math.Acos(s.Along.Up)).Degrees()
		})
	case RangeIncidence:
		each(func(_ int, f geometry.Facet, _ *geometry.Sight) float64 { return f.RangeIncidence().Degrees() })
	case Clearance, Returns, Share:
		w.known(out, z)
	case FoldMargin:
		w.known(out, z)
		w.foldActive(out)
	case LineOfSight:
		each(func(j int, _ geometry.Facet, _ *geometry.Sight) float64 { return w.facets.east[j] })
		out = bands[1][row*n : (row+1)*n]
		each(func(j int, _ geometry.Facet, _ *geometry.Sight) float64 { return w.facets.north[j] })
		out = bands[2][row*n : (row+1)*n]
		each(func(_ int, _ geometry.Facet, s *geometry.Sight) float64 { return s.Along.Up })
	case GroundResolution:
		step := geometry.SlantResolution(look.Bandwidth)
		each(func(_ int, f geometry.Facet, s *geometry.Sight) float64 { return s.GroundResolution(f, step) })
	case AreaFactor:
		each(func(_ int, f geometry.Facet, s *geometry.Sight) float64 { return s.SigmaArea(f) })
	case Downslope:
		each(func(_ int, f geometry.Facet, s *geometry.Sight) float64 { return downslope(f, s) })
	case OrientationShift:
		each(func(_ int, f geometry.Facet, _ *geometry.Sight) float64 { return f.OrientationShift().Degrees() })
	case CriticalBaseline:
		each(func(j int, f geometry.Facet, _ *geometry.Sight) float64 {
			return f.CriticalBaseline(look.Wavelength, slant(j), look.Bandwidth)
		})
	case AmbiguityHeight:
		each(func(j int, _ geometry.Facet, s *geometry.Sight) float64 {
			return geometry.AmbiguityHeight(look.Wavelength, slant(j), s.Above.Up, look.Baseline)
		})
	}
}

// known leaves values only where the DEM has a height, no hole height counted,
// and the look sees the cell.
func (w *worker) known(a, z []float32) {
	if !w.gaps {
		return
	}
	for j, h := range z {
		if h != h || w.unseen[j] {
			a[j] = float32(nan)
		}
	}
}

// foldActive says of a row of fold margins that active layover overlaps itself.
func (w *worker) foldActive(a []float32) {
	for j := 0; j < len(a); {
		if j+8 <= len(a) && binary.LittleEndian.Uint64(w.turns[j:])&(each8*turnLayover) == 0 {
			j += 8
			continue
		}
		for end := min(j+8, len(a)); j < end; j++ {
			if w.turns[j]&turnLayover != 0 && a[j] > 0 {
				a[j] = 0
			}
		}
	}
}

// downslope is geometry's Sight.Downslope from the facet, whose squared length
// is one more than that of the gradient g and whose Along component holds
// g . u = Along.Up - f.Along in the horizontal.
func downslope(f geometry.Facet, s *geometry.Sight) float64 {
	g2 := f.Along*f.Along + f.Above*f.Above + f.Across*f.Across - 1
	if !(g2 > 1e-18) { // level ground has no downslope direction
		return nan
	}
	return -(s.Along.Up - f.Along + g2*s.Along.Up) / math.Sqrt(g2*(1+g2))
}
