package demo

import (
	"math"
	"sort"
)

// point is a fractional cell position.
type point struct{ row, col float64 }

// towards returns the point so many cells away in a direction.
func (p point) towards(row, col, cells float64) point {
	return point{p.row + float64(cells*row), p.col + float64(cells*col)}
}

// course is a line over the field, from its mouth upwards, with the height of
// its bed at each point.
type course struct {
	points []point
	bed    []float64
	metres []float64 // from the mouth
}

// upstream follows the largest donor from a cell to the divide, while at
// least least square metres drain to it.
func (f *field) upstream(d *drainage, from int32, least float64) []int32 {
	best := make([]int32, len(f.h))
	for i := range best {
		best[i] = -1
	}
	for _, i := range d.order {
		r := d.receiver[i]
		if r != i && (best[r] < 0 || d.area[i] > d.area[best[r]]) {
			best[r] = i
		}
	}
	var path []int32
	for i := from; i >= 0 && d.area[i] >= least; i = best[i] {
		path = append(path, i)
	}
	return path
}

// trace makes a course of a path of cells: the steps of the grid smoothed
// away in so many rounds, the bed never falling upwards.
func (f *field) trace(path []int32, rounds int) course {
	c := course{points: make([]point, len(path)), bed: make([]float64, len(path)), metres: make([]float64, len(path))}
	for k, i := range path {
		c.points[k] = point{float64(int(i) / f.cols), float64(int(i) % f.cols)}
		c.bed[k] = f.h[i]
	}
	c.smooth(rounds)
	for k := 1; k < len(path); k++ {
		c.bed[k] = max(c.bed[k], c.bed[k-1])
		c.metres[k] = c.metres[k-1] + float64(f.cell*distance(c.points[k], c.points[k-1]))
	}
	return c
}

// smooth averages every point and bed height but the ends with its two
// neighbours, so many times over.
func (c *course) smooth(rounds int) {
	mean := func(a, b, e float64) float64 { return (a + float64(2*b) + e) / 4 }
	for range rounds {
		for k := 1; k < len(c.points)-1; k++ {
			a, b, e := c.points[k-1], c.points[k], c.points[k+1]
			c.points[k] = point{mean(a.row, b.row, e.row), mean(a.col, b.col, e.col)}
			c.bed[k] = mean(c.bed[k-1], c.bed[k], c.bed[k+1])
		}
	}
}

func distance(a, b point) float64 {
	r, c := a.row-b.row, a.col-b.col
	return math.Sqrt(float64(r*r) + float64(c*c))
}

// along reshapes the cells within reach metres of the course: shape gets the
// cell, the nearest point of the course and the metres to it. The last
// third of the reach leads back to the old surface.
func (f *field) along(c course, reach float64, shape func(i, k int, metres float64) float64) {
	n := int(reach/f.cell) + 1
	nearest, off := make([]int32, len(f.h)), make([]float64, len(f.h))
	for i := range off {
		off[i] = reach
	}
	for k, p := range c.points {
		for row := max(int(p.row)-n, 0); row <= min(int(p.row)+n, f.rows-1); row++ {
			for col := max(int(p.col)-n, 0); col <= min(int(p.col)+n, f.cols-1); col++ {
				i := row*f.cols + col
				if d := f.cell * distance(p, point{float64(row), float64(col)}); d < off[i] {
					off[i], nearest[i] = d, int32(k)
				}
			}
		}
	}
	for i, d := range off {
		if d < reach {
			f.h[i] = lerp(shape(i, int(nearest[i]), d), f.h[i], smooth(float64(3*d/reach)-2))
		}
	}
}

// tributary is a stream that joins the main one.
type tributary struct {
	course
	joins int // index of the main course's point
	area  float64
	left  bool // of the main course, seen upstream
}

// tributaries lists the streams of at least least square metres that join the
// main path, from its mouth upwards.
func (f *field) tributaries(d *drainage, main []int32, least float64) []tributary {
	on := map[int32]int{}
	for k, i := range main {
		on[i] = k
	}
	var found []tributary
	for i := range f.h {
		k, joins := on[d.receiver[i]]
		if _, self := on[int32(i)]; !joins || self || d.area[i] < least || k == 0 || k > len(main)-8 {
			continue
		}
		t := tributary{course: f.trace(append([]int32{main[k]}, f.upstream(d, int32(i), 6e4)...), 12), joins: k, area: d.area[i]}
		a, b := main[k-1], main[min(k+6, len(main)-1)]
		ahead := point{float64(int(b)/f.cols - int(a)/f.cols), float64(int(b)%f.cols - int(a)%f.cols)}
		p, q := t.points[0], t.points[min(8, len(t.points)-1)]
		t.left = float64(ahead.col*(q.row-p.row))-float64(ahead.row*(q.col-p.col)) < 0
		found = append(found, t)
	}
	sort.Slice(found, func(a, b int) bool { return found[a].joins < found[b].joins })
	return found
}

// floorWidth is half the width of the main valley's floor, metres.
const floorWidth = 230

// trough turns the main valley into one that a glacier left: its bed lowered
// but for a step near the head, its floor flat, its walls steepening upwards.
func (f *field) trough(main course) course {
	length, mouth := main.metres[len(main.metres)-1], main.bed[0]
	bed := make([]float64, len(main.bed))
	for k, z := range main.bed {
		step := smooth((main.metres[k]/length - 0.55) / 0.3)
		bed[k] = lerp(mouth+float64(0.40*(z-mouth)), z, step)
	}
	main.bed = bed
	f.along(main, 1300, func(i, k int, metres float64) float64 {
		narrow := 1 - float64(0.7*smooth(main.metres[k]/length))
		p := main.points[k]
		wide := float64(floorWidth * narrow * (1 + float64(0.5*noise(f.seed+9, p.row/40, p.col/40))))
		out := max(metres-wide, 0)
		wall := 480 * narrow * (1 + float64(1.1*f.spurs(i)))
		river := float64(4 * (1 - smooth(metres/60)))
		gravel := float64(2 * noise(f.seed+12, float64(i/f.cols)/6, float64(i%f.cols)/6))
		return under(f.h[i], bed[k]-river+gravel+float64(out*out)/wall, 40)
	})
	return main
}

// spurs says how far a wall stands out at a cell: about -0.7 to 0.7.
func (f *field) spurs(i int) float64 {
	row, col := float64(i/f.cols), float64(i%f.cols)
	return noise(f.seed+10, row/26, col/26) + float64(0.4*noise(f.seed+11, row/8, col/8))
}

// gorge cuts a slot up a hanging tributary until it meets the stream's old
// bed, and returns the point half way up.
func (f *field) gorge(t tributary, main course) point {
	const slotLength = 1300.0 // metres; above it the stream climbs back in rapids
	bed, end := make([]float64, len(t.bed)), len(t.bed)-1
	for k := range bed {
		up := max(t.metres[k]-floorWidth, 0)
		bed[k] = main.bed[t.joins] + float64(0.12*min(up, slotLength)) + float64(0.6*max(up-slotLength, 0))
		if bed[k] >= t.bed[k] && up > 0 && k < end {
			end = k
		}
	}
	slot := course{t.points[:end+1], bed[:end+1], t.metres[:end+1]}
	f.along(slot, 260, func(i, k int, metres float64) float64 {
		return min(f.h[i], bed[k]+float64(3.2*max(metres-18, 0)))
	})
	half := 0
	for t.metres[half] < (t.metres[end]+floorWidth)/2 {
		half++
	}
	return t.points[half]
}

// fan grades a tributary down to the main valley and spreads its debris as a
// cone at the mouth. It returns a dry place on the cone.
func (f *field) fan(t tributary, main course) point {
	const radius, steepness = 620.0, 0.11
	apex := 0
	for t.metres[apex] < floorWidth+90 {
		apex++
	}
	foot, top := main.bed[t.joins], steepness*radius
	bed, end := make([]float64, len(t.bed)), apex+2
	for k := range bed {
		bed[k] = foot + top + float64(0.30*(t.metres[k]-t.metres[apex]))
		if bed[k] < t.bed[k] {
			end = max(end, k)
		}
	}
	f.along(course{t.points[apex:end], bed[apex:end], t.metres[apex:end]}, 600, func(i, k int, metres float64) float64 {
		return under(f.h[i], bed[apex+k]+float64((0.85+float64(0.4*f.spurs(i)))*max(metres-12, 0)), 15)
	})
	p := t.points[apex]
	f.along(course{points: []point{p}}, radius, func(i, _ int, metres float64) float64 {
		return over(f.h[i], foot+float64(steepness*(radius-metres)), 5)
	})
	q := main.points[t.joins]
	return point{lerp(p.row, q.row, 0.55), lerp(p.col, q.col, 0.55)}
}

// glacier fills the upper part of a tributary with ice, smooth and a little
// convex, and returns a point on its tongue.
func (f *field) glacier(t tributary) point {
	from, to := len(t.points)*3/10, len(t.points)*17/20
	ice := course{t.points[from:to], t.bed[from:to], t.metres[from:to]}
	ice.smooth(200)
	width := func(k int) float64 { return 110 + float64(90*smooth(float64(k)/float64(len(ice.bed)))) }
	f.along(ice, 600, func(i, k int, metres float64) float64 {
		out := max(metres-width(k), 0)
		return under(f.h[i], ice.bed[k]-20+float64(out*out)/(260*(1+f.spurs(i))), 25)
	})
	f.along(ice, 420, func(i, k int, metres float64) float64 {
		thick := float64(75 * smooth((ice.metres[k]-ice.metres[0]+20)/500))
		across := metres / width(k)
		return over(f.h[i], ice.bed[k]-22+thick-float64(12*across*across), 8)
	})
	f.polish(ice, 300)
	return ice.points[len(ice.points)*2/5]
}

// polish smooths the cells within reach metres of a course.
func (f *field) polish(c course, reach float64) {
	var near []int
	part := make([]float64, len(f.h))
	f.along(c, reach, func(i, _ int, metres float64) float64 {
		near = append(near, i)
		part[i] = 1 - smooth(float64(3*metres/reach)-2)
		return f.h[i]
	})
	for range 6 {
		mean := make([]float64, len(near))
		for k, i := range near {
			f.each(i, func(j int, _ float64) { mean[k] += float64(f.h[j] / 8) })
		}
		for k, i := range near {
			f.h[i] = lerp(f.h[i], mean[k], part[i])
		}
	}
}

// slide breaks a spoon out of a slope at the main valley and heaps it up
// below. It returns a point in the scar.
func (f *field) slide(at, foot point) point {
	long := distance(at, foot)
	down := point{(foot.row - at.row) / long, (foot.col - at.col) / long}
	for i := range f.h {
		row, col := float64(i/f.cols), float64(i%f.cols)
		dr, dc := row-at.row, col-at.col
		u := float64(f.cell * (float64(dr*down.row) + float64(dc*down.col))) // metres downslope
		v := float64(f.cell * (float64(dc*down.row) - float64(dr*down.col))) // metres across
		wobble := float64(60 * noise(f.seed+3, row/9, col/9))
		across := (v + wobble) / 260
		scar := float64(70 * smooth((u+wobble+330)/60) * (1 - smooth((u-60)/260)) * (1 - smooth(float64(1.6*across*across)-0.35)))
		spread := (v + float64(1.5*wobble)) / 330
		lobe := smooth((u-120)/220) * (1 - smooth((u+wobble-float64(long*f.cell)-20)/140)) * (1 - smooth(float64(1.5*spread*spread)-0.25))
		hummock := 1 + float64(0.9*noise(f.seed+5, row/4.2, col/4.2))
		f.h[i] += float64(34*lobe*hummock) - scar
	}
	return point{at.row - float64(6*down.row), at.col - float64(6*down.col)}
}
