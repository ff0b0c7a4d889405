package picture

import (
	"bytes"
	"errors"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
)

// grid is a geographic grid of square ground cells around 47 N, 8 E. Steps
// are in cells; flips turn columns to the west and rows to the north.
func grid(t *testing.T, rows, cols int, flipX, flipY bool) *dem.Grid {
	t.Helper()
	const step = 0.0002
	dx, dy := step, -step
	x, y := 8.0, 47.0
	if flipX {
		dx, x = -step, 8+step*float64(cols)
	}
	if flipY {
		dy, y = step, 47-step*float64(rows)
	}
	g, err := dem.NewGrid(rows, cols, [6]float64{x, dx, 0, y, 0, dy}, "", func(x, y []float64) error { return nil })
	require.NoError(t, err)
	return g
}

// sample is a map of random classes on random hills, a hole in the middle.
func sample(t *testing.T, rows, cols int) Map {
	rng := rand.New(rand.NewPCG(3, uint64(rows*cols)))
	m := Map{Title: "A map", Subtitle: "of random ground", Grid: grid(t, rows, cols, false, false),
		Look: Look{"up", 38 * geometry.Degree, 77 * geometry.Degree}}
	for i := range rows * cols {
		m.Heights = append(m.Heights, float32(900+300*math.Sin(float64(i%cols)/9)+20*rng.Float64()))
		m.Classes = append(m.Classes, uint8(mask.Classes[1+(i%cols/8)%9].Code))
	}
	m.Heights[rows*cols/2] = float32(math.NaN())
	for range 12 {
		x, y := m.Grid.XY(rng.Float64()*float64(rows-1), rng.Float64()*float64(cols-1))
		m.Sites = append(m.Sites, Site{fmt.Sprintf("Site with a name %d", len(m.Sites)), x, y})
	}
	return m
}

func decode(t *testing.T, m Map) image.Image {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, Render(&b, m))
	img, err := png.Decode(&b)
	require.NoError(t, err)
	return img
}

// Everything on a sheet lies on it, no text covers another, and no text lies
// on a map but the names of its sites.
func checkSheet(t *testing.T, s *sheet) {
	t.Helper()
	all := box{0, 0, float64(s.w), float64(s.h)}
	for i, a := range s.texts {
		assert.True(t, all.contains(a.box), "%q off the sheet: %v in %v", a.text, a.box, all)
		for _, b := range s.texts[i+1:] {
			assert.False(t, a.box.overlaps(b.box), "%q on %q", a.text, b.text)
		}
		for _, m := range s.maps {
			assert.False(t, a.box.overlaps(m.frame), "%q on a map", a.text)
		}
	}
	for i, m := range s.maps {
		assert.True(t, all.contains(m.frame), "map %d off the sheet", i)
		for _, other := range s.maps[i+1:] {
			assert.False(t, m.frame.overlaps(other.frame), "maps overlap")
		}
		for j, l := range m.labels {
			assert.True(t, m.frame.contains(box{l.mark.x, l.mark.y, l.mark.x, l.mark.y}.grow(markRadius)))
			if l.text == "" {
				continue
			}
			assert.True(t, m.frame.contains(l.box), "name %q off its map", l.text)
			for _, o := range m.labels[j+1:] {
				assert.False(t, o.text != "" && l.box.overlaps(o.box), "%q on %q", l.text, o.text)
				assert.False(t, l.box.contains(box{o.mark.x, o.mark.y, o.mark.x, o.mark.y}), "%q on a mark", l.text)
			}
		}
	}
}

// shapes straddle what a sheet must stand: single cells, strips, and grids
// larger and smaller than the picture.
var shapes = [][2]int{{1, 1}, {1, 2}, {2, 1}, {3, 3}, {1, 900}, {900, 1}, {4, 3000}, {3000, 4}, {60, 80}, {1300, 1500}}

func TestLayout(t *testing.T) {
	for _, shape := range shapes {
		t.Run(fmt.Sprintf("%d x %d", shape[0], shape[1]), func(t *testing.T) {
			m := sample(t, shape[0], shape[1])
			checkSheet(t, layoutMap(m))
			for _, n := range []int{1, 2, 3, 5, 12} {
				p := Panel{Title: "A panel", Subtitle: "of maps"}
				for range n {
					p.Maps = append(p.Maps, m)
				}
				checkSheet(t, layoutPanel(p))
			}
			m.Title = "A title that is far too long for any sheet of paper " + fmt.Sprint(make([]int, 200))
			m.Subtitle, m.Look.Name = m.Title, m.Title
			for k := range m.Sites {
				m.Sites[k].Name = m.Title
			}
			checkSheet(t, layoutMap(m))
			checkSheet(t, layoutPanel(Panel{Title: m.Title, Subtitle: m.Title, Maps: []Map{m, m}}))
		})
	}
}

func TestEveryLookFitsItsDials(t *testing.T) {
	m := sample(t, 60, 80)
	for deg := 0.0; deg < 360; deg += 15 {
		m.Look.Azimuth, m.Look.Incidence = geometry.Angle(deg)*geometry.Degree, geometry.Angle(deg/4.1+1)*geometry.Degree
		checkSheet(t, layoutMap(m))
		checkSheet(t, layoutPanel(Panel{Maps: []Map{m, m, m}}))
	}
	m.Look = Look{Name: "none", Incidence: geometry.NotGiven, Azimuth: geometry.NotGiven}
	s := layoutMap(m)
	checkSheet(t, s)
	for _, text := range s.texts {
		assert.NotContains(t, text.text, "NaN")
	}
}

func TestRenderAnyShape(t *testing.T) {
	for _, shape := range [][2]int{{1, 1}, {1, 900}, {3000, 4}, {1300, 1500}} {
		m := sample(t, shape[0], shape[1])
		s := layoutMap(m)
		img := decode(t, m)
		assert.Equal(t, image.Pt(s.w, s.h), img.Bounds().Size())
		assert.LessOrEqual(t, s.w, 1700)
		assert.LessOrEqual(t, s.maps[0].frame.h(), 1000.0)
	}
}

func TestProportions(t *testing.T) {
	m := sample(t, 300, 300)
	f := layoutMap(m).maps[0].frame
	// Cells of 0.0002 degrees: at 47 N a degree of longitude is 76.0 km, of
	// latitude 111.2 km (WGS84, from memory), so the map is taller than wide.
	assert.InDelta(t, 76.0/111.2, f.w()/f.h(), 0.004)
}

// On flat ground every class keeps its hue: the map's pixels come close to
// the colours that the project's design fixes, within what the 14 % of paper
// under the classes and the texture may change. Open is plain.
func TestPalette(t *testing.T) {
	want := map[mask.Class]color.RGBA{
		mask.Open: {0xf6, 0xf1, 0xe4, 255}, mask.Compressed: {0xf2, 0xc1, 0x4e, 255}, mask.ActiveLayover: {0x9b, 0x22, 0x26, 255},
		mask.LayoverFarther: {0xe0, 0x7a, 0x5f, 255}, mask.LayoverNearer: {0xe0, 0x7a, 0x5f, 255}, mask.LayoverBoth: {0xe0, 0x7a, 0x5f, 255},
		mask.SelfShadow: {0x0b, 0x2a, 0x3c, 255}, mask.CastShadow: {0x3d, 0x8a, 0xb5, 255}, mask.Undetermined: {0xa9, 0xa5, 0x9b, 255},
	}
	m := Map{Title: "Flat", Grid: grid(t, 90, 90, false, false), Heights: make([]float32, 90*90), Classes: make([]uint8, 90*90)}
	for i := range m.Classes {
		m.Classes[i] = uint8(mask.Classes[1+i/90/10].Code)
	}
	s := layoutMap(m)
	img, frame := s.draw(), s.maps[0].frame
	for k, c := range mask.Classes[1:] {
		y0 := frame.y0 + (float64(k)+0.2)/9*frame.h()
		var sum [3]float64
		const side = 48 // pixels, several periods of the texture
		for y := range side {
			for x := range side {
				p := color.RGBAModel.Convert(img.At(int(frame.x0)+100+x, int(y0)+y)).(color.RGBA)
				sum[0], sum[1], sum[2] = sum[0]+float64(p.R), sum[1]+float64(p.G), sum[2]+float64(p.B)
			}
		}
		tolerance := 0.14*255 + 12
		if c.Code == mask.Open {
			tolerance = 1
		}
		for b, v := range []uint8{want[c.Code].R, want[c.Code].G, want[c.Code].B} {
			assert.InDelta(t, float64(v), sum[b]/side/side, tolerance, "%s, band %d", c.Name, b)
		}
	}
}

// The kinds stay apart in grey print: their texture differs in direction, or
// their grey by at least a tenth.
func TestGreyPrint(t *testing.T) {
	grey := func(c mask.Class) float64 {
		p := colors[c]
		return (0.299*p[0] + 0.587*p[1] + 0.114*p[2]) / 255 // ITU-R BT.601, from memory
	}
	direction := func(c mask.Class) (rising, falling bool) {
		var along, across float64
		for k := range 64 {
			v := float64(k) / 8
			along = max(along, math.Abs(texture(c, v, 8-v)-texture(c, 0, 8)))
			across = max(across, math.Abs(texture(c, v, v)-texture(c, 0, 0)))
		}
		return across > 0.05, along > 0.05
	}
	all := []mask.Class{mask.Open, mask.Compressed, mask.ActiveLayover, mask.LayoverBoth, mask.SelfShadow, mask.CastShadow, mask.Undetermined}
	for i, a := range all {
		for _, b := range all[i+1:] {
			ar, af := direction(a)
			br, bf := direction(b)
			apart := ar != br || af != bf || math.Abs(grey(a)-grey(b)) >= 0.1
			assert.True(t, apart, "%v and %v", a, b)
		}
	}
}

// A pyramid's north-western side is the brightest and the map's upper left,
// however the raster is stored.
func TestUpIsNorth(t *testing.T) {
	for _, flip := range [][2]bool{{false, false}, {true, false}, {false, true}, {true, true}} {
		const n = 41
		m := Map{Title: "Pyramid", Grid: grid(t, n, n, flip[0], flip[1])}
		for i := range n * n {
			r, c := float64(i/n)-n/2, float64(i%n)-n/2
			m.Heights = append(m.Heights, float32(-8*(math.Abs(r)+math.Abs(c))))
		}
		m.Classes = bytes.Repeat([]byte{10}, n*n)
		lon, lat := m.Grid.XY(n/2, n/2)
		m.Sites = []Site{{"Peak", lon, lat}, {"Outside", lon + 1, lat}, {"North-east", lon + 0.003, lat + 0.003}}
		s := layoutMap(m)
		img, f := s.draw(), s.maps[0].frame
		at := func(x, y float64) uint8 {
			return color.GrayModel.Convert(img.At(int(f.x0+x*f.w()), int(f.y0+y*f.h()))).(color.Gray).Y
		}
		nw, ne, sw, se := at(.25, .25), at(.75, .25), at(.25, .75), at(.75, .75)
		assert.Greater(t, nw, ne, "flip %v", flip)
		assert.Greater(t, nw, sw, "flip %v", flip)
		assert.Greater(t, ne, se, "flip %v", flip)
		labels := s.maps[0].labels
		require.Len(t, labels, 2, "a site outside the map is left out")
		assert.InDelta(t, (f.x0+f.x1)/2, labels[0].mark.x, 1)
		assert.InDelta(t, (f.y0+f.y1)/2, labels[0].mark.y, 1)
		assert.Greater(t, labels[1].mark.x, labels[0].mark.x)
		assert.Less(t, labels[1].mark.y, labels[0].mark.y)
	}
}

func TestShares(t *testing.T) {
	m := Map{Grid: grid(t, 10, 100, false, false), Heights: make([]float32, 1000), Classes: bytes.Repeat([]byte{10}, 1000)}
	copy(m.Classes, bytes.Repeat([]byte{31}, 100))
	copy(m.Classes[100:], bytes.Repeat([]byte{33}, 150))
	for i := range 200 {
		m.Heights[999-i] = float32(math.NaN())
	}
	c := count(&m)
	for _, g := range groups() {
		switch g.title {
		case "Open": // 550 of the 800 cells with data
			assert.Equal(t, "68.8 %", c.share(g))
		case "Passive layover": // 250 of 800
			assert.Equal(t, "31.2 %", c.share(g))
		case "No data": // 200 of 1000
			assert.Equal(t, "20.0 %", c.share(g))
		default:
			assert.Equal(t, "–", c.share(g), g.title)
		}
	}
	rare := tally{cells: [256]int{mask.Open: 99999, mask.CastShadow: 1}, known: 100000}
	assert.Equal(t, "> 99.9 %", rare.share(group{"", []mask.Class{mask.Open}}))
	assert.Equal(t, "< 0.1 %", rare.share(group{"", []mask.Class{mask.CastShadow}}))
}

func TestRoundLength(t *testing.T) {
	for _, row := range []struct{ room, want float64 }{
		{1, 1}, {1.99, 1}, {2, 2}, {4.9, 2}, {7, 5}, {9.9, 5}, {10, 10}, {0.3, 0.2}, {48000, 20000}, {0, 1},
	} {
		assert.InEpsilon(t, row.want, round(row.room), 1e-12, "room %g", row.room)
	}
	assert.Equal(t, "20 km", distance(20000))
	assert.Equal(t, "500 m", distance(500))
}

func TestWind(t *testing.T) {
	for deg, want := range map[float64]string{0: "north", 359: "north", 11.2: "north", 11.3: "north-north-east", 90: "east", 225: "south-west", -22.5: "north-north-west"} {
		assert.Equal(t, want, wind(geometry.Angle(deg)*geometry.Degree), "%g", deg)
	}
}

func TestRefused(t *testing.T) {
	m := sample(t, 5, 6)
	short := m
	short.Heights = short.Heights[1:]
	assert.EqualError(t, Render(new(bytes.Buffer), short), "picture: 29 heights and 30 classes for 30 cells")
	assert.Error(t, RenderPanel(new(bytes.Buffer), Panel{Maps: []Map{m, short}}))
	assert.Error(t, Render(new(bytes.Buffer), Map{}))
	assert.Error(t, RenderPanel(new(bytes.Buffer), Panel{}))
	assert.Error(t, RenderPanel(new(bytes.Buffer), Panel{Maps: make([]Map, 13)}))
	full := errors.New("disk full")
	assert.ErrorIs(t, Render(refuser{full}, m), full)
}

type refuser struct{ err error }

func (r refuser) Write([]byte) (int, error) { return 0, r.err }

func TestSameBytes(t *testing.T) {
	m := sample(t, 30, 40)
	m.Classes = nil
	var a, b bytes.Buffer
	require.NoError(t, RenderPanel(&a, Panel{Maps: []Map{m, m}}))
	require.NoError(t, RenderPanel(&b, Panel{Maps: []Map{m, m}}))
	assert.True(t, bytes.Equal(a.Bytes(), b.Bytes()))
}
