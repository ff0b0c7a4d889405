package mask

import (
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// shareStep is the side of the squares that a site's cells are taken in.
const shareStep = 64

// cellShares tallies the verdict layer over the cells of a site that has some.
func (w *sitesWorker) cellShares(i, k int, res *SiteResult) error {
	cells := w.job.Sites[i].Cells
	if len(cells) == 0 {
		return nil
	}
	squares := map[Cell][]Cell{}
	var order []Cell
	for _, c := range cells {
		q := Cell{c.Row / shareStep, c.Col / shareStep}
		if squares[q] == nil {
			order = append(order, q)
		}
		squares[q] = append(squares[q], c)
	}
	var count [6]int
	for _, q := range order {
		win := dem.Window{}
		for _, c := range squares[q] {
			win = join(win, dem.Window{Row: c.Row, Col: c.Col, Rows: 1, Cols: 1})
		}
		t, err := w.cells(k, win)
		if err != nil {
			return err
		}
		for _, c := range squares[q] {
			count[Class(t.Classes[VerdictLayer][(c.Row-win.Row)*win.Cols+c.Col-win.Col]).Kind()]++
		}
	}
	for n, c := range count {
		res.Shares[n] = float64(c) / float64(len(cells))
	}
	return nil
}

// footprintPoints is about how many points across a footprint are looked at.
const footprintPoints = 9

// spacing returns the distance between the points of a footprint, metres: half
// a cell, but not so wide that a small footprint has one point only nor so
// narrow that a large one has thousands.
func (w *sitesWorker) spacing(i int) float64 {
	l, radius := &w.sites[i].local, w.job.Sites[i].Footprint
	cell := min(math.Hypot(l.ColE, l.ColN), math.Hypot(l.RowE, l.RowN))
	return min(max(cell/2, 2*radius/footprintPoints), radius/2)
}

// footprintCells returns the radius of a site's footprint in rows and columns.
func (w *sitesWorker) footprintCells(i int) (rows, cols float64) {
	l, radius := &w.sites[i].local, w.job.Sites[i].Footprint
	det := math.Abs(l.ColE*l.RowN - l.ColN*l.RowE)
	return radius * math.Hypot(l.ColE, l.ColN) / det, radius * math.Hypot(l.RowE, l.RowN) / det
}

// footprint tallies the class of the target's height over points of a square
// lattice about the site, the site among them. Without a footprint that is the
// site alone.
func (w *sitesWorker) footprint(i, k int, res *SiteResult) {
	p, s := &w.sites[i], &w.job.Sites[i]
	res.Shares = Shares{}
	if s.Footprint == 0 || len(s.Cells) > 0 || p.where != OnGround {
		res.Shares[res.Class.Kind()] = 1
		return
	}
	d := w.spacing(i)
	n := int(s.Footprint / d)
	l := &p.local
	det := l.ColE*l.RowN - l.ColN*l.RowE
	var count [6]int
	all := 0
	for a := -n; a <= n; a++ {
		for b := -n; b <= n; b++ {
			e, nn := float64(a)*d, float64(b)*d
			if math.Hypot(e, nn) > s.Footprint {
				continue
			}
			row, col := p.row+(l.ColE*nn-l.ColN*e)/det, p.col+(e*l.RowN-nn*l.RowE)/det
			count[w.classAt(i, k, row, col).Kind()]++
			all++
		}
	}
	for n, c := range count {
		res.Shares[n] = float64(c) / float64(all)
	}
}

// classAt returns the class of site i's target over another place of its
// footprint.
func (w *sitesWorker) classAt(i, k int, row, col float64) Class {
	height := w.job.Sites[i].Height
	p, err := groundAt(w.job.Source, &w.sheet, row, col)
	if err != nil || p.where != OnGround {
		return NoData
	}
	g := w.look(k, &p, height)
	ln, ok := w.side(k, &p)
	if g.seen != geometry.InView || !ok {
		return NoData
	}
	if ln != w.field.ln { // a tripod sees the footprint in two fans
		_, places, extra := w.windows([]int{i})
		if w.load(ln, places, extra) != nil {
			return NoData
		}
	}
	if !w.trace(p.row, p.col) {
		return NoData
	}
	f := w.judge.of(&w.line, w.line.target(height))
	m := f.lane(w.field, p.z, p.z+height)
	var res SiteResult
	w.classes(&m, &g, &res)
	return res.Class
}
