package mask

import (
	"math"

	"foldshade/geometry"
)

// tileBuffers holds the results of one tile while they are computed.
type tileBuffers struct {
	out                   *Tile
	verdict               []uint8
	left                  view
	right                 view
	turns                 []uint8          // of one row
	facets                []geometry.Facet // of one row
	ups                   [][3]float64     // of one row: up components of the sights
	views                 []view           // of one row, when a layer asks for more
	unseen                []bool           // of one row: cells that the look does not see
	wantReturns           bool
	wantViews, wantFacets bool
}

// fill turns the raw codes and the differences of height of the sheet into the
// layers of look i.
func (w *worker) fill(i int) *Tile {
	t := w.newTile()
	ln, look := w.looks[i], &w.job.Looks[i]
	win := w.sheet.w
	w.turns = resize(w.turns, win.Cols)
	if w.wantFacets {
		w.facets, w.ups = resize(w.facets, win.Cols), resize(w.ups, win.Cols)
	}
	if w.wantViews {
		w.views = resize(w.views, win.Cols)
	}
	w.unseen = resize(w.unseen, win.Cols)
	clear(w.unseen)
	for r := range win.Rows {
		if ln.places == nil {
			w.see(ln, win.Row+r, win.Col, r*win.Cols)
		} else {
			w.seeAbreast(ln, look, win.Row+r, win.Col, r*win.Cols)
		}
		w.classRow(t, r)
		for l, bands := range t.Values {
			w.valueRow(l, bands, r, ln, look)
		}
	}
	return t
}

// newTile returns the worker's tile with slices of the sheet's size.
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
			for b := range t.Values[l] {
				t.Values[l][b] = resize(t.Values[l][b], n)
			}
		}
	}
	return t
}

// see fills the turns of one row of the sheet, its facets and sights when a
// layer of values is wanted, and its views when a layer asks for more.
func (w *worker) see(ln *lanes, row, col, at int) {
	n := w.sheet.w.Cols
	zc, zr := w.sheet.zc[at:at+n], w.sheet.zr[at:at+n]
	block := col / viewStep * viewStep
	w.right = ln.viewOf(w.grid, float64(row), float64(block), w.wantViews)
	for j := 0; j < n; block += viewStep {
		w.left, w.right = w.right, ln.viewOf(w.grid, float64(row), float64(block+viewStep), w.wantViews)
		end := min(n, block+viewStep-col)
		w.seeBlock(zc[j:end], zr[j:end], j, col+j-block)
		j = end
	}
}

// The turns of a facet.
const (
	turnLayover    = 1 << iota // slant range falls away from the radar
	turnShadow                 // the facet turns its back
	turnCompressed             // foreshortening below the limit
)

// seeBlock is see for the columns from j on that lie between two views, first
// columns from the left one.
func (w *worker) seeBlock(zc, zr []float32, j, first int) {
	a, b := &w.left, &w.right
	var d view
	for i := range 3 {
		d.up[i], d.c[i], d.r[i] = b.up[i]-a.up[i], b.c[i]-a.c[i], b.r[i]-a.r[i]
	}
	limit := w.job.Options.CompressedBelow
	turns := w.turns[j : j+len(zc)]
	for i := range zc {
		t := float64(first+i) * (1. / viewStep)
		c, r := float64(zc[i]), float64(zr[i])
		up0, up1 := a.up[0]+float64(t*d.up[0]), a.up[1]+float64(t*d.up[1])
		along := up0 + float64(c*(a.c[0]+float64(t*d.c[0]))) + float64(r*(a.r[0]+float64(t*d.r[0])))
		above := up1 + float64(c*(a.c[1]+float64(t*d.c[1]))) + float64(r*(a.r[1]+float64(t*d.r[1])))
		turn := uint8(0)
		if above < limit*up1 { // level range planes; leaning ones follow below
			turn = turnCompressed
			if above <= 0 {
				turn |= turnLayover
			}
		}
		if along <= 0 {
			turn |= turnShadow
		}
		turns[i] = turn
		if !w.wantFacets {
			continue
		}
		up2 := a.up[2] + float64(t*d.up[2])
		w.ups[j+i] = [3]float64{up0, up1, up2}
		w.facets[j+i] = geometry.Facet{
			Along: along, Above: above,
			Across: up2 + float64(c*(a.c[2]+float64(t*d.c[2]))) + float64(r*(a.r[2]+float64(t*d.r[2]))),
		}
		if w.wantViews {
			w.views[j+i] = between(a, b, t)
		}
	}
}

// sight returns the sight of column j of the row as far as the quantities of a
// facet need it: the up components.
func (w *worker) sight(j int) *geometry.Sight {
	u := &w.ups[j]
	return &geometry.Sight{
		Along:  geometry.ENU{Up: u[0]},
		Above:  geometry.ENU{Up: u[1]},
		Across: geometry.ENU{Up: u[2]},
	}
}

// classRow writes the class layers of one row.
func (w *worker) classRow(t *Tile, row int) {
	n := t.Window.Cols
	raw := w.sheet.raw[row*n : (row+1)*n]
	for j, h := range w.sheet.z[row*n : (row+1)*n] {
		if h != h || w.unseen[j] { // also where a hole height was given
			raw[j] = uint8(NoData)
		}
	}
	turns := w.turns[:n]
	verdict := w.verdict[row*n : (row+1)*n]
	for j, c := range raw {
		verdict[j] = verdictOf[turns[j]&7][c&63]
	}
	if out := t.Classes[LayoverLayer]; out != nil {
		out = out[row*n : (row+1)*n]
		for j, c := range raw {
			out[j] = layoverOf[turns[j]&3][c&63]
		}
	}
	if out := t.Classes[ShadowLayer]; out != nil {
		out = out[row*n : (row+1)*n]
		for j, c := range raw {
			out[j] = shadowOf[turns[j]&3][c&63]
		}
	}
}

// The classes by the turns of the facet and the raw code.
var layoverOf, shadowOf, verdictOf = func() (layover, shadow [4][64]uint8, verdict [8][64]uint8) {
	for turns := range verdict {
		for raw := range verdict[turns] {
			l := layoverClass(Class(raw), turns)
			layover[turns&3][raw], shadow[turns&3][raw] = uint8(l), uint8(shadowClass(Class(raw), turns))
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
	z := w.sheet.z[row*n : (row+1)*n]
	out := bands[0][row*n : (row+1)*n]
	each := func(f func(j int, fc geometry.Facet, s *geometry.Sight) float64) {
		for j := range out {
			if z[j] != z[j] || w.unseen[j] {
				out[j] = float32(nan)
				continue
			}
			out[j] = float32(f(j, w.facets[j], w.sight(j)))
		}
	}
	slant := func(j int) float64 {
		if ln.places != nil {
			return w.views[j].s
		}
		_, r := ln.at(w.views[j].s, float64(z[j]))
		if look.SlantRange == look.SlantRange {
			r += look.SlantRange
		}
		return r
	}
	switch l {
	case LocalIncidence:
		each(func(_ int, f geometry.Facet, _ *geometry.Sight) float64 { return f.LocalIncidence().Degrees() })
	case SlantRange:
		each(func(j int, _ geometry.Facet, _ *geometry.Sight) float64 { return slant(j) })
	case Foreshortening:
		each(func(_ int, f geometry.Facet, s *geometry.Sight) float64 { return s.Foreshortening(f) })
	case Incidence:
		each(func(_ int, _ geometry.Facet, s *geometry.Sight) float64 {
			return geometry.Angle(math.Acos(s.Along.Up)).Degrees()
		})
	case RangeIncidence:
		each(func(_ int, f geometry.Facet, _ *geometry.Sight) float64 { return f.RangeIncidence().Degrees() })
	case Clearance:
		w.known(out, w.sheet.clear[row*n:], z)
	case FoldMargin:
		w.known(out, w.sheet.fold[row*n:], z)
		for j, x := range out { // active layover overlaps itself
			if w.turns[j]&turnLayover != 0 && x > 0 {
				out[j] = 0
			}
		}
	case Returns:
		w.known(out, w.sheet.returns[row*n:], z)
	case Share:
		w.known(out, w.sheet.share[row*n:], z)
	case LineOfSight:
		each(func(j int, _ geometry.Facet, _ *geometry.Sight) float64 { return w.views[j].east })
		out = bands[1][row*n : (row+1)*n]
		each(func(j int, _ geometry.Facet, _ *geometry.Sight) float64 { return w.views[j].north })
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

// known copies values where the DEM has a height, no hole height counted, and
// the look sees the cell.
func (w *worker) known(dst, src, z []float32) {
	for j, h := range z {
		if dst[j] = src[j]; h != h || w.unseen[j] {
			dst[j] = float32(nan)
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
