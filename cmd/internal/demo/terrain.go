package demo

import "math"

// The valley is raised and cut on a frame that is wider than what is handed
// out, so that its rim does not show the frame's straight edges.
const (
	rows, cols = 420, 560
	cellSize   = 20.0 // metres
	margin     = 40   // cells cut off each side in the end
	coarser    = 4    // the first grid's cells are this much larger
)

// raise makes the mountains: uplift that is weak along a winding axis from
// west to east and strong on both sides, cut by streams on ever finer cells.
func raise(seed uint64) *field {
	f := &field{(rows + 2*margin) / coarser, (cols + 2*margin) / coarser, cellSize * coarser, seed, nil}
	f.h = make([]float64, f.rows*f.cols)
	for i := range f.h {
		r, c := f.share(i)
		f.h[i] = rimHeight(c) + float64(120*axisDistance(r, c)) + float64(260*fractal(seed, 4*r, 5.3*c, 5))
	}
	creep := [3]float64{0.12, 0.10, 0.08}
	for pass, steps := range []int{48, 12, 2} {
		if pass > 0 {
			f = f.refine()
		}
		uplift, repose := f.rock(seed)
		for range steps {
			f.seed++
			f.evolve(uplift, repose, 0.05, f.outlet)
			f.soften(creep[pass])
		}
	}
	return f
}

// share returns the place of a cell as parts of the frame, from the north and
// from the west.
func (f *field) share(i int) (r, c float64) {
	return (float64(i/f.cols) + 0.5) / float64(f.rows), (float64(i%f.cols) + 0.5) / float64(f.cols)
}

// axis is where the main valley runs, as a part of the frame from the north.
func axis(c float64) float64 {
	return 0.60 + float64(0.13*noise(7, 0.5, float64(2.2*c)+0.3)) - float64(0.10*c)
}

func axisDistance(r, c float64) float64 {
	d := r - axis(c)
	return min(max(d, -d)*2.2, 1)
}

// rimHeight is the height of the frame's edge, rising eastwards.
func rimHeight(c float64) float64 { return 640 + float64(500*c) }

// outlet says where water leaves the frame: where the axis meets its western
// edge, and over the northern and southern edges.
func (f *field) outlet(row, col int) bool {
	r, _ := f.share(row * f.cols)
	west := col == 0 && axisDistance(r, 0) < 0.05
	side := row == 0 || row == f.rows-1
	return west || side && noise(11, float64(row), float64(col)*9/float64(f.cols)+0.5) > 0.18
}

// rock returns the uplift of a step in metres and the tangent of the steepest
// slope that each cell keeps.
func (f *field) rock(seed uint64) (uplift, repose []float64) {
	uplift, repose = make([]float64, len(f.h)), make([]float64, len(f.h))
	for i := range f.h {
		r, c := f.share(i)
		grow := 0.25 + float64(0.75*smooth(axisDistance(r, c)*1.4))
		grow *= 0.75 + float64(0.5*c) + float64(0.5*fractal(seed+40, 3*r, 4*c, 3))
		uplift[i] = 18 * max(grow, 0.1)
		repose[i] = 0.74 + float64(0.5*fractal(seed+50, 24*r, 32*c, 3))
	}
	return uplift, repose
}

// gullies lets streams bite into the walls of the trough without grading the
// hanging valleys down to its floor.
func (f *field) gullies() {
	still, repose := make([]float64, len(f.h)), make([]float64, len(f.h))
	for i := range repose {
		repose[i] = 1.6
	}
	for range 2 {
		f.evolve(still, repose, 0.012, f.outlet)
	}
}

// weather roughens the rock: ribs and gullies on steep and high ground.
func (f *field) weather() {
	g := &field{f.rows, f.cols, f.cell, f.seed, append([]float64(nil), f.h...)}
	for i := range f.h {
		row, col := i/f.cols, i%f.cols
		dr := g.at(float64(row+1), float64(col)) - g.at(float64(row-1), float64(col))
		dc := g.at(float64(row), float64(col+1)) - g.at(float64(row), float64(col-1))
		steep := smooth(math.Sqrt(float64(dr*dr)+float64(dc*dc))/(2*f.cell)/0.6 - 0.3)
		rib := ridged(f.seed+60, float64(row)/14, float64(col)/14, 3) - 0.4
		f.h[i] += float64(26 * steep * rib)
	}
}
