package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// abreastStep is the number of columns between two places of a row at which a
// platform's geometry is solved; between them points and antenna move straight.
// Over 8 cells of 100 m the earth departs from straight by (800 m)^2 / (8 R) =
// 13 mm.
const abreastStep = 8

// abreast is a platform abreast of one grid position at the height of
// reference: earth-centred vectors, and the inverse of the ground vectors.
type abreast struct {
	ground, up, east, north geometry.ECEF
	pos, travel             geometry.ECEF
	// gE = ec zc + er zr, gN = nc zc + nr zr
	ec, er, nc, nr float64
}

// abreastOf solves one position. Where the platform never comes abreast the
// antenna is that of the nearer end of the track: such points are not seen.
func (ln *lanes) abreastOf(g *dem.Grid, row, col float64) abreast {
	l := g.At(row, col)
	p := geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: ln.datum}
	a := abreast{
		ground: p.ECEF(),
		up:     p.FromENU(geometry.ENU{Up: 1}), east: p.FromENU(geometry.ENU{East: 1}), north: p.FromENU(geometry.ENU{North: 1}),
	}
	t, _ := ln.platform.ZeroDoppler(a.ground)
	a.pos, a.travel = ln.platform.State(t)
	det := l.ColE*l.RowN - l.ColN*l.RowE
	a.ec, a.er = l.RowN/det, -l.ColN/det
	a.nc, a.nr = -l.RowE/det, l.ColE/det
	return a
}

func mixECEF(a, b geometry.ECEF, t float64) geometry.ECEF {
	return geometry.ECEF{X: a.X + t*(b.X-a.X), Y: a.Y + t*(b.Y-a.Y), Z: a.Z + t*(b.Z-a.Z)}
}

// at returns how the platform sees the point of height h between two positions:
// range, line of sight and the sight with the true range plane.
func (a *abreast) at(b *abreast, t, h float64) (r float64, s geometry.Sight) {
	up, east, north := mixECEF(a.up, b.up, t), mixECEF(a.east, b.east, t), mixECEF(a.north, b.north, t)
	d := mixECEF(a.pos, b.pos, t).Sub(mixECEF(a.ground, b.ground, t).Add(up.Scale(h)))
	r = d.Norm()
	v := mixECEF(a.travel, b.travel, t)
	los := geometry.ENU{East: d.Dot(east) / r, North: d.Dot(north) / r, Up: d.Dot(up) / r}
	return r, geometry.SightFrom(los, geometry.ENU{East: v.Dot(east), North: v.Dot(north), Up: v.Dot(up)})
}

// seeAbreast is see for a platform. It also marks the cells that the look does
// not see.
func (w *worker) seeAbreast(ln *lanes, look *geometry.Look, row, col, at int) {
	n := w.sheet.w.Cols
	z, zc, zr := w.sheet.z[at:at+n], w.sheet.zc[at:at+n], w.sheet.zr[at:at+n]
	limit := w.job.Options.CompressedBelow
	w.seenRow(ln, look, row, col, z)
	block := col / abreastStep * abreastStep
	right := ln.abreastOf(w.grid, float64(row), float64(block))
	for j := 0; j < n; block += abreastStep {
		left := right
		right = ln.abreastOf(w.grid, float64(row), float64(block+abreastStep))
		for ; j < n && col+j < block+abreastStep; j++ {
			t := float64(col+j-block) / abreastStep
			h := float64(z[j])
			r, s := left.at(&right, t, h-ln.datum)
			c, d := float64(zc[j]), float64(zr[j])
			f := s.Facet(left.ec*c+left.er*d, left.nc*c+left.nr*d)
			turn := uint8(0)
			if s.Foreshortening(f) < limit {
				turn = turnCompressed
			}
			if f.ActiveLayover() {
				turn |= turnLayover
			}
			if f.SelfShadow() {
				turn |= turnShadow
			}
			w.turns[j] = turn
			if w.unseen[j] || outsideSwath(look, s.Along.Up, r) {
				w.unseen[j] = true
			}
			if w.wantFacets {
				w.facets[j], w.ups[j] = f, [3]float64{s.Along.Up, s.Above.Up, s.Across.Up}
			}
			if w.wantViews {
				w.views[j] = view{east: s.Along.East, north: s.Along.North, s: r}
			}
		}
	}
}

// outsideSwath reports whether a cell lies outside the limits that can be told
// from its own incidence and slant range.
func outsideSwath(look *geometry.Look, cos, r float64) bool {
	near, far := look.NearIncidence, look.FarIncidence
	return near.Given() && cos > near.Cos() || far.Given() && cos < far.Cos() ||
		r < look.MinRange || r > look.MaxRange
}

// seenRow marks the cells of one row that the look does not see for a reason
// other than its swath. Where two places viewStep columns apart are both in
// view, so is what lies between; elsewhere every cell is asked for.
func (w *worker) seenRow(ln *lanes, look *geometry.Look, row, col int, z []float32) {
	ask := func(c int, h float64) bool {
		l := w.grid.At(float64(row), float64(c))
		if h != h {
			h = ln.datum
		}
		_, seen := ln.platform.View(geometry.Geodetic{Place: geometry.Place{Lon: l.Lon, Lat: l.Lat}, Height: h})
		return seen == geometry.InView || seen == geometry.OutsideSwath || seen == geometry.OutsideRange
	}
	w.unseen = resize(w.unseen, len(z))
	block := col / viewStep * viewStep
	right := ask(block, nan)
	for j := 0; j < len(z); block += viewStep {
		left := right
		right = ask(block+viewStep, nan)
		end := min(len(z), block+viewStep-col)
		for ; j < end; j++ {
			w.unseen[j] = !(left && right) && !ask(col+j, float64(z[j]))
		}
	}
}

// extended returns a look along a track that reaches as far past the DEM as
// its lanes are laid out: a flight line is carried on along its geodesic, at
// the height that p resolved.
func extended(g *dem.Grid, look geometry.Look, p geometry.Platform) geometry.Look {
	if look.Kind != geometry.Flight {
		return look
	}
	pos, _ := p.State(0)
	look.Height, look.HeightAboveGround = pos.Geodetic().Height, math.NaN()
	at := func(row, col float64) geometry.Place {
		l := g.At(row, col)
		return geometry.Place{Lon: l.Lon, Lat: l.Lat}
	}
	corner := at(0, 0)
	reach := 0.0
	for _, end := range []geometry.Place{at(float64(g.Rows-1), float64(g.Cols-1)), look.Start, look.End} {
		if length, _, _, err := geometry.Inverse(corner, end); err == nil {
			reach = max(reach, 2*length)
		}
	}
	_, leave, arrive, err := geometry.Inverse(look.Start, look.End)
	if err != nil {
		return look
	}
	look.Start, _ = geometry.Direct(look.Start, leave+180*geometry.Degree, reach)
	look.End, _ = geometry.Direct(look.End, arrive, reach)
	return look
}
