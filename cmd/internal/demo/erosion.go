package demo

import "math"

// field is a square-celled surface; the height of (row, col) is at
// row*cols+col.
type field struct {
	rows, cols int
	cell       float64 // metres
	seed       uint64
	h          []float64
}

// drainage says where the water of every cell goes.
type drainage struct {
	order    []int32   // cells, each after its receiver
	receiver []int32   // the cell itself at an outlet
	step     []float64 // metres to the receiver; 0 at an outlet
	area     []float64 // square metres that drain through the cell
}

// flood is a binary heap of cells by water level, then by index, so that ties
// fall alike on every machine. (container/heap takes three times as long.)
type flood struct {
	cells []int32
	level []float64 // of every cell of the field
}

func (f *flood) before(a, b int32) bool {
	if f.level[a] != f.level[b] {
		return f.level[a] < f.level[b]
	}
	return a < b
}

func (f *flood) push(cell int32) {
	f.cells = append(f.cells, cell)
	k := len(f.cells) - 1
	for k > 0 && f.before(cell, f.cells[(k-1)/2]) {
		f.cells[k] = f.cells[(k-1)/2]
		k = (k - 1) / 2
	}
	f.cells[k] = cell
}

func (f *flood) pop() int32 {
	top, last := f.cells[0], len(f.cells)-1
	cell := f.cells[last]
	f.cells = f.cells[:last]
	k := 0
	for 2*k+1 < last {
		child := 2*k + 1
		if child+1 < last && f.before(f.cells[child+1], f.cells[child]) {
			child++
		}
		if f.before(cell, f.cells[child]) {
			break
		}
		f.cells[k] = f.cells[child]
		k = child
	}
	if last > 0 {
		f.cells[k] = cell
	}
	return top
}

// neighbours lists the eight steps in rows and columns, the straight ones
// first.
var neighbours = [8][2]int{{-1, 0}, {0, -1}, {0, 1}, {1, 0}, {-1, -1}, {-1, 1}, {1, -1}, {1, 1}}

// each calls visit for the neighbours of a cell and their distance.
func (f *field) each(i int, visit func(j int, metres float64)) {
	row, col := i/f.cols, i%f.cols
	for k, n := range neighbours {
		r, c := row+n[0], col+n[1]
		if r < 0 || c < 0 || r >= f.rows || c >= f.cols {
			continue
		}
		metres := f.cell
		if k >= 4 {
			metres *= math.Sqrt2
		}
		visit(r*f.cols+c, metres)
	}
}

// drain floods the field from the outlets upwards and routes every cell down
// the steepest way on the water surface, hollows filled (Barnes, Lehman and
// Mulla 2014, priority flood).
func (f *field) drain(outlet func(row, col int) bool) drainage {
	n := len(f.h)
	d := drainage{make([]int32, 0, n), make([]int32, n), make([]float64, n), make([]float64, n)}
	q := &flood{level: make([]float64, n)}
	for i := range n {
		d.receiver[i] = -1
		if outlet(i/f.cols, i%f.cols) {
			d.receiver[i], q.level[i] = int32(i), f.h[i]
			q.push(int32(i))
		}
	}
	for len(q.cells) > 0 {
		i := q.pop()
		d.order = append(d.order, i)
		f.each(int(i), func(j int, metres float64) {
			if d.receiver[j] >= 0 {
				return
			}
			d.receiver[j], d.step[j] = i, metres
			q.level[j] = max(f.h[j], q.level[i]+1e-3)
			q.push(int32(j))
		})
	}
	f.steepest(&d, q.level)
	f.accumulate(&d)
	return d
}

// steepest turns every cell but the outlets to its steepest neighbour on the
// water surface, give or take a third at random: streams that may only run
// in eight directions would otherwise run straight.
func (f *field) steepest(d *drainage, level []float64) {
	for _, i := range d.order {
		if d.receiver[i] == i {
			continue
		}
		best := 0.0
		f.each(int(i), func(j int, metres float64) {
			jitter := 0.7 + float64(hash(f.seed, int(i), j)>>40)/(1<<24/0.6)
			if slope := (level[i] - level[j]) / metres * jitter; slope > best {
				best, d.receiver[i], d.step[i] = slope, int32(j), metres
			}
		})
	}
}

// accumulate adds up the drained areas, from the divides down.
func (f *field) accumulate(d *drainage) {
	for k := len(d.order) - 1; k >= 0; k-- {
		i := d.order[k]
		d.area[i] += float64(f.cell * f.cell)
		if r := d.receiver[i]; r != i {
			d.area[r] += d.area[i]
		}
	}
}

// evolve raises the land and lets streams cut it for one step: the stream
// power law dh/dt = U - K sqrt(A) S, solved implicitly from the outlets up
// (Braun and Willett 2013), with slopes held at the angle of their rock.
// uplift is metres a step, strength K times the step, repose the tangent of
// the steepest slope a cell keeps.
func (f *field) evolve(uplift, repose []float64, strength float64, outlet func(row, col int) bool) {
	d := f.drain(outlet)
	for _, i := range d.order {
		r := d.receiver[i]
		if r == i {
			continue
		}
		cut := strength * math.Sqrt(d.area[i]) / d.step[i]
		h := (f.h[i] + uplift[i] + float64(cut*f.h[r])) / (1 + cut)
		f.h[i] = min(h, max(f.h[r], f.h[r]+float64(repose[i]*d.step[i])))
	}
}

// soften spreads each height over its neighbours by the given part, 0 to 1.
func (f *field) soften(part float64) {
	out := make([]float64, len(f.h))
	for i := range f.h {
		sum, weight := 0.0, 0.0
		f.each(i, func(j int, metres float64) {
			w := f.cell / metres
			sum += float64(w * f.h[j])
			weight += w
		})
		out[i] = lerp(f.h[i], sum/weight, part)
	}
	f.h = out
}

// refine returns the field on cells of half the size, interpolated.
func (f *field) refine() *field {
	g := &field{2 * f.rows, 2 * f.cols, f.cell / 2, f.seed, make([]float64, 4*len(f.h))}
	for i := range g.h {
		g.h[i] = f.at(float64(float64(i/g.cols)/2)-0.25, float64(float64(i%g.cols)/2)-0.25)
	}
	return g
}

// at interpolates the height at a fractional cell position, which it moves
// inside the field.
func (f *field) at(row, col float64) float64 {
	row, col = min(max(row, 0), float64(f.rows-1)), min(max(col, 0), float64(f.cols-1))
	r, c := min(int(row), f.rows-2), min(int(col), f.cols-2)
	u, v := row-float64(r), col-float64(c)
	i := r*f.cols + c
	return lerp(lerp(f.h[i], f.h[i+1], v), lerp(f.h[i+f.cols], f.h[i+f.cols+1], v), u)
}

func (f *field) height(p point) float64 { return f.at(p.row, p.col) }

// crop cuts the same margin off all sides.
func (f *field) crop(margin int) *field {
	g := &field{f.rows - 2*margin, f.cols - 2*margin, f.cell, f.seed, nil}
	for row := range g.rows {
		at := (row+margin)*f.cols + margin
		g.h = append(g.h, f.h[at:at+g.cols]...)
	}
	return g
}
