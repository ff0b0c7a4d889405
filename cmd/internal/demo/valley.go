// Package demo makes the Oltrenza valley: an alpine landscape that does not
// exist, with a town, a glacier, a landslide, a gorge and a pass, for trying
// foldshade before one's own DEM is at hand. The same seed gives the same
// bytes on every machine.
package demo

import (
	"fmt"
	"math"
)

// Seed is the seed of the valley that the demo shows.
const Seed = 10

// Outer corner of the first cell in UTM zone 24 north, metres: open ocean, so
// that nobody takes the valley for a real one.
const west, north = 412000.0, 5212000.0

// Valley is the finished landscape.
type Valley struct {
	Rows, Cols int
	Heights    []float32  // row-major, metres, in steps of 0.1 m; row 0 is north
	Transform  [6]float64 // cell corner to map units, in GDAL's order
	EPSG       int        // code of the CRS, a UTM zone
	Sites      []Site
}

// Site is a named place. X and Y are map metres, the centre of a cell.
type Site struct {
	Name, Kind string
	X, Y       float64
	Note       string
}

// marks are the places of the five sites on the uncropped field.
type marks struct{ town, glacier, slide, gorge, pass point }

// New makes the valley of a seed. Most seeds make one; the error says what a
// seed's land lacks.
func New(seed uint64) (*Valley, error) {
	f, m, err := build(seed)
	if err != nil {
		return nil, err
	}
	v := &Valley{Rows: rows, Cols: cols, Heights: make([]float32, 0, rows*cols), EPSG: 32624}
	v.Transform = [6]float64{west, cellSize, 0, north, 0, -cellSize}
	for _, h := range f.crop(margin).h {
		v.Heights = append(v.Heights, float32(math.Floor(float64(h*10)+0.5)/10))
	}
	v.name(m)
	return v, nil
}

// name places the sites, each at the centre of its cell.
func (v *Valley) name(m marks) {
	add := func(p point, name, kind, note string) {
		row, col := math.Floor(p.row+0.5)-margin, math.Floor(p.col+0.5)-margin
		x, y := west+float64((col+0.5)*cellSize), north-float64((row+0.5)*cellSize)
		v.Sites = append(v.Sites, Site{name, kind, x, y, note})
	}
	add(m.town, "Pravell", "town", "on a debris fan at the edge of the valley floor")
	add(m.glacier, "Isvarn Glacier", "glacier", "tongue of a hanging side valley")
	add(m.slide, "Drummel Slide", "landslide", "scar above a hummocky deposit")
	add(m.gorge, "Skarrel Gorge", "gorge", "slot of a side stream, walls steeper than 60 degrees")
	add(m.pass, "Tovary Pass", "pass", "lowest way over the northern or southern divide")
}

// build makes the valley's surface on the uncropped frame.
func build(seed uint64) (*field, marks, error) {
	f := raise(seed)
	d := f.drain(f.outlet)
	path := f.trunk(&d)
	streams := f.tributaries(&d, path, 8e5)
	gorge, fan, ice := cast(streams, len(path))
	if min(gorge, fan, ice) < 0 {
		return nil, marks{}, fmt.Errorf("seed %d: its valley lacks side streams for a gorge, a fan and a glacier; take another seed", seed)
	}
	main := f.trough(f.trace(path, 100))
	f.gullies()
	f.weather()
	var m marks
	m.glacier = f.glacier(streams[ice])
	m.gorge = f.gorge(streams[gorge], main)
	m.town = f.fan(streams[fan], main)
	at, foot := f.slope(main, streams[gorge].joins, streams[fan].joins)
	m.slide = f.slide(at, foot)
	m.pass = f.saddle(path)
	for _, p := range []point{m.town, m.glacier, m.slide, m.gorge, m.pass} {
		if !inside(p, 1) {
			return nil, marks{}, fmt.Errorf("seed %d: a site falls outside the valley's frame; take another seed", seed)
		}
	}
	return f, m, nil
}

// trunk is the largest stream that leaves by the west, mouth first.
func (f *field) trunk(d *drainage) []int32 {
	mouth := int32(-1)
	for row := range f.rows {
		i := int32(row * f.cols)
		if d.receiver[i] == i && row > 0 && row < f.rows-1 && (mouth < 0 || d.area[i] > d.area[mouth]) {
			mouth = i
		}
	}
	return f.upstream(d, mouth, 4e5)
}

// cast gives the streams their parts: the gorge to the largest in the
// valley's middle, the fan to the largest on the other side, the ice to the
// stream whose upper half lies highest.
func cast(streams []tributary, length int) (gorge, fan, ice int) {
	gorge, fan, ice = -1, -1, -1
	middle := func(t tributary) bool { return t.joins > length/6 && t.joins < length*6/10 }
	high := func(t tributary) float64 { return t.bed[len(t.bed)/2] }
	for k, t := range streams {
		if inside(t.points[len(t.points)-1], 60) && len(t.points) > 60 && (ice < 0 || high(t) > high(streams[ice])) {
			ice = k
		}
	}
	for k, t := range streams {
		if k != ice && middle(t) && (gorge < 0 || t.area > streams[gorge].area) {
			gorge = k
		}
	}
	if gorge < 0 {
		return gorge, fan, ice
	}
	for k, t := range streams {
		if k != ice && middle(t) && t.left != streams[gorge].left && (fan < 0 || t.area > streams[fan].area) {
			fan = k
		}
	}
	return gorge, fan, ice
}

// inside says whether a point of the frame is at least so many cells inside
// what is handed out.
func inside(p point, cells float64) bool {
	return p.row > margin+cells && p.row < margin+rows-1-cells && p.col > margin+cells && p.col < margin+cols-1-cells
}

// slope finds the valley side that is highest above the floor, away from the
// two mouths: the middle of the slope and the floor below it.
func (f *field) slope(main course, mouths ...int) (at, foot point) {
	const away = 32 // cells from the axis
	best := 0.0
	for k := len(main.points) / 6; k < len(main.points)*6/10; k++ {
		near := false
		for _, m := range mouths {
			near = near || distance(main.points[k], main.points[m]) < 60
		}
		if near {
			continue
		}
		a, b := main.points[k-8], main.points[k+8]
		long := distance(a, b)
		for _, side := range []float64{-1, 1} {
			n := point{side * (b.col - a.col) / long, -side * (b.row - a.row) / long}
			q := main.points[k]
			p := q.towards(n.row, n.col, away)
			top := f.height(p.towards(n.row, n.col, 12)) - main.bed[k]
			ahead := f.height(p.towards(n.col, -n.row, 12))
			behind := f.height(p.towards(-n.col, n.row, 12))
			if score := top - float64(0.7*math.Abs(ahead-behind)); score > best && inside(p, 40) {
				best, at, foot = score, p, q
			}
		}
	}
	return at, foot
}

// saddle returns the lowest way over the divide between the main valley and
// the land that drains elsewhere.
func (f *field) saddle(path []int32) point {
	d := f.drain(f.outlet)
	home := make([]bool, len(f.h))
	mouth := path[0]
	for _, i := range d.order {
		home[i] = i == mouth || home[d.receiver[i]]
	}
	best, at := math.Inf(1), point{}
	for i := range f.h {
		p := point{float64(i / f.cols), float64(i % f.cols)}
		if !home[i] || !inside(p, 50) {
			continue
		}
		f.each(i, func(j int, _ float64) {
			if h := max(f.h[i], f.h[j]); !home[j] && h < best {
				best, at = h, p
			}
		})
	}
	return at
}
