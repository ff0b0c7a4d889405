package sheet

import (
	"bytes"
	"encoding/xml"
	"errors"
	"io"
	"math"
	"math/rand/v2"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/mask"
)

// sample is a sheet of n sites under k looks on made-up ground.
func sample(n, k int) *Sheet {
	rng := rand.New(rand.NewPCG(5, uint64(n*100+k)))
	s := &Sheet{
		Title: "A valley", DEM: "a/b/dem.tif", Command: "foldshade sites", Software: "foldshade", Made: time.Unix(0, 0).UTC(),
		Quantities: []Quantity{{"clearance", "Clearance", "m", 2}, {"slant_range", "Slant range", "m", 1}, {"downslope", "Downslope", "", 3}},
	}
	for i := range k {
		s.Looks = append(s.Looks, Look{Name: "look-" + letter(i), Kind: "fixed", Pairs: [][2]string{{"incidence", "38"}}})
	}
	for i := range n {
		site := Site{Name: "Site " + strconv.Itoa(i), Shape: "point", Ground: 700, X: 1, Y: 2, Lon: 8, Lat: 47}
		for j := range k {
			c := mask.Classes[(i+j)%len(mask.Classes)]
			site.Pairs = append(site.Pairs, Pair{
				Code: int(c.Code), Class: c.Name, Verdict: string(mask.Verdicts[(i+j)%len(mask.Verdicts)]), Reason: "A reason.",
				Values:  map[string]float64{"clearance": rng.NormFloat64() * 100, "slant_range": 800000},
				ToRadar: 360 * rng.Float64(), Incidence: 20 + 50*rng.Float64(),
			})
		}
		for a := 0.0; a < 360; a += 10 {
			low, high := 20*rng.Float64(), 90-30*rng.Float64()
			site.Sky = append(site.Sky, Ray{a, low, high, low + 2, high - 2})
		}
		p := Profile{Incidence: 38, ToRadar: 258, SlantRange: math.NaN(), At: 50, Blocker: ProfileMark{-40, 720}, Partner: ProfileMark{math.NaN(), math.NaN()}}
		for d := -500.0; d <= 500; d += 10 {
			p.Points = append(p.Points, ProfilePoint{d, 700 + 80*math.Sin(d/90), mask.Classes[1+rng.IntN(9)].Code})
		}
		site.Profiles = []Profile{p}
		s.Sites = append(s.Sites, site)
	}
	return s
}

func render(t *testing.T, s *Sheet) string {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, Render(&b, s))
	return b.String()
}

// evil holds what HTML, attributes, styles and SVG could take for more than
// text.
const evil = `"><svg onload=x()>&amp;'` + "`" + `{{.}}</style></script><!--`

// Whatever a text holds, the page has the same elements: texts are texts.
func TestTextsAreTexts(t *testing.T) {
	tags := func(page string) []string { return regexp.MustCompile(`<[a-zA-Z!/][^\s>]*`).FindAllString(page, -1) }
	plain := sample(2, 2)
	nasty := sample(2, 2)
	for _, s := range []*Sheet{plain, nasty} {
		text := "word"
		if s == nasty {
			text = evil
		}
		s.Title, s.DEM, s.Command, s.Software = text, text, text, text
		s.Warnings, s.Facts = []string{text}, [][2]string{{text, text}}
		s.Looks[0] = Look{text, text, [][2]string{{text, text}}}
		s.Sites[0].Name, s.Sites[0].Shape, s.Sites[0].Pairs[0].Reason, s.Sites[0].Pairs[0].Notes = text, text, text, []string{text}
		s.Sites[0].Pairs[0].Class, s.Sites[0].Pairs[0].Verdict = text, text
		s.Sites[1].Problem = text
		s.Maps = []Map{{PNG: []byte("x"), Width: 10, Height: 10, MetresPerPixel: 20, Marks: [][2]float64{{1, 1}, {2, 2}}}}
		s.Quantities[0].Title, s.Quantities[0].Unit = text, text
	}
	a, b := render(t, plain), render(t, nasty)
	assert.Equal(t, tags(a), tags(b))
	assert.NotContains(t, b, "onload=x()>")
	assert.NotContains(t, b, evil)
}

// The pictures are well-formed XML, for any classes, marks and holes, and hold
// no number that is none.
func TestPicturesAreWellFormed(t *testing.T) {
	s := sample(12, 9)
	nan := math.NaN()
	s.Sites[1].Sky[3].Low = nan
	s.Sites[2].Sky = s.Sites[2].Sky[:2]
	for i := 20; i < 30; i++ {
		s.Sites[3].Profiles[0].Points[i].Height = nan
	}
	s.Sites[4].Profiles[0].Points[50].Height = nan
	for i := range s.Sites[5].Profiles[0].Points {
		s.Sites[5].Profiles[0].Points[i].Height = nan
	}
	for i := range s.Sites[6].Profiles[0].Points {
		s.Sites[6].Profiles[0].Points[i].Height = 5 // flat
	}
	s.Sites[7].Profiles[0].Points = s.Sites[7].Profiles[0].Points[50:51]
	s.Sites[7].Profiles[0].At = 0
	s.Sites[8].Pairs[0].ToRadar = nan
	s.Maps = []Map{{PNG: []byte("x"), Width: 800, Height: 500, MetresPerPixel: 20, North: 3,
		Marks:    [][2]float64{{1, 1}, {2, 2}, {nan, nan}, {-5, 3}, {400, 250}, {401, 251}, {402, 250}},
		Outlines: []Outline{{4, true, [][2]float64{{1, 2}, {3, 4}, {5, 9}}}, {5, false, [][2]float64{{1, 2}, {3, 4}}}}}}
	page := render(t, s)
	pictures := regexp.MustCompile(`(?s)<svg.*?</svg>`).FindAllString(page, -1)
	require.Greater(t, len(pictures), 30)
	for _, p := range pictures {
		d := xml.NewDecoder(strings.NewReader(p))
		d.Strict = true
		for {
			if _, err := d.Token(); errors.Is(err, io.EOF) {
				break
			} else {
				require.NoError(t, err, p)
			}
		}
		assert.NotContains(t, p, "NaN")
		assert.NotContains(t, p, "Inf")
	}
}

// A radar in the zenith is in the middle of the sky, one on the horizon on the
// rim, in its direction.
func TestSkyPlaces(t *testing.T) {
	const middle, radius = skyMiddle, skyRadius
	for _, row := range []struct{ azimuth, incidence, x, y float64 }{
		{0, 0, middle, middle}, {0, 90, middle, middle - radius}, {90, 90, middle + radius, middle},
		{180, 45, middle, middle + radius/2}, {270, 30, middle - radius/3, middle}, {10, 120, middle + radius*math.Sin(math.Pi/18), middle - radius*math.Cos(math.Pi/18)},
	} {
		p := skyAt(row.azimuth, row.incidence)
		assert.InDelta(t, row.x, p[0], 1e-9)
		assert.InDelta(t, row.y, p[1], 1e-9)
	}
}

// The hatched air of a profile behind a single step: below the ray that grazes
// its edge, which falls one metre for every tan(incidence) metres of ground.
func TestProfileShadow(t *testing.T) {
	for _, far := range []float64{300, 160} { // with the end of the shadow, and without
		p := Profile{Incidence: 45, At: 0, SlantRange: math.NaN()}
		for d := 0.0; d <= far; d += 10 {
			q := ProfilePoint{d, 0, mask.Open}
			if d <= 100 {
				q.Height = 100
			} else if d < 200 {
				q.Class = mask.CastShadow
			}
			p.Points = append(p.Points, q)
		}
		f := p.layOut(math.NaN())
		d := &drawing{}
		p.shadow(d, &f, p.thin())
		path := regexp.MustCompile(`d="M([^"]*)Z" class="shade"`).FindStringSubmatch(d.b.String())
		require.NotNil(t, path)
		var corners [][2]float64
		for _, pair := range strings.Split(path[1], "L") {
			xy := strings.Fields(pair)
			x, err := strconv.ParseFloat(xy[0], 64)
			require.NoError(t, err)
			y, err := strconv.ParseFloat(xy[1], 64)
			require.NoError(t, err)
			s, z := f.s0+(x-chartLeft)/f.perS, f.z1-(y-chartTop)/f.perZ
			assert.LessOrEqual(t, s+z, 200+0.5, "on or below the ray: %g, %g", s, z) // coordinates are rounded to a tenth of a pixel
			assert.GreaterOrEqual(t, z, -0.3)
			corners = append(corners, [2]float64{s, z})
		}
		end := corners[len(corners)-1]
		assert.InDelta(t, min(far, 200), end[0], 0.3, "the shadow of a step of 100 m ends 100 m behind it")
		assert.InDelta(t, 200-end[0], end[1], 0.5, "on the ray")
	}
}

// Equal slant range: a line for a plane wave, a circle around the antenna
// otherwise, which comes close to the line from far away.
func TestProfileFront(t *testing.T) {
	plane := Profile{Incidence: 30, SlantRange: math.NaN()}
	near := Profile{Incidence: 30, SlantRange: 5000}
	space := Profile{Incidence: 30, SlantRange: 800e3}
	antenna := [2]float64{-5000 * math.Sin(math.Pi/6), 700 + 5000*math.Cos(math.Pi/6)}
	for s := -400.0; s <= 400; s += 50 {
		assert.InDelta(t, 700+s*math.Tan(math.Pi/6), plane.front(s, 700), 1e-9)
		assert.InDelta(t, 5000, math.Hypot(s-antenna[0], near.front(s, 700)-antenna[1]), 1e-6)
		// The circle leaves its tangent by d^2 / 2R, d the length along it, and
		// the next term is d/R of that, below a thousandth.
		assert.InDelta(t, plane.front(s, 700), space.front(s, 700), 1.001*400*400/math.Pow(math.Cos(math.Pi/6), 3)/2/800e3)
	}
}

// Scales: heights are drawn as they are where that gives a good shape, and
// never more than twice as tall.
func TestProfileScales(t *testing.T) {
	for _, relief := range []float64{0, 1, 30, 100, 300, 1000, 4000} {
		p := Profile{Incidence: 40, At: 50}
		for d := -1000.0; d <= 1000; d += 20 {
			p.Points = append(p.Points, ProfilePoint{d, relief * (d + 1000) / 2000, mask.Open})
		}
		f := p.layOut(relief / 2)
		assert.LessOrEqual(t, f.exaggeration(), mostStretch+1e-9)
		assert.GreaterOrEqual(t, f.tall, leastChart-1e-9)
		assert.LessOrEqual(t, f.tall, mostChart+1e-9)
		for _, q := range p.Points {
			at := f.at(q.Distance, q.Height)
			assert.True(t, at[0] >= chartLeft-1e-9 && at[0] <= chartWidth-chartRight+1e-9 && at[1] >= chartTop && at[1] <= chartTop+f.tall)
		}
	}
}

// Thinning keeps the site, both ends and every change of class.
func TestThin(t *testing.T) {
	p := Profile{At: 1234}
	for i := range 5000 {
		c := mask.Open
		if i >= 2001 && i < 2003 {
			c = mask.CastShadow
		}
		p.Points = append(p.Points, ProfilePoint{float64(i), 0, c})
	}
	keep := p.thin()
	assert.Less(t, len(keep), 500)
	for _, must := range []int{0, 1234, 2000, 2001, 2002, 2003, 4999} {
		assert.Contains(t, keep, must)
	}
}

// Marks do not lie on each other, as long as there is room.
func TestMarksApart(t *testing.T) {
	s := sample(1, 12)
	for i := range s.Sites[0].Pairs {
		s.Sites[0].Pairs[i].ToRadar, s.Sites[0].Pairs[i].Incidence = 100, 40
	}
	marks := regexp.MustCompile(`<circle cx="([\d.]+)" cy="([\d.]+)" r="9" class="mark`).FindAllStringSubmatch(string(drawSky(&s.Sites[0])), -1)
	require.Len(t, marks, 12)
	var at [][2]float64
	for _, m := range marks {
		x, _ := strconv.ParseFloat(m[1], 64)
		y, _ := strconv.ParseFloat(m[2], 64)
		assert.False(t, crowded([2]float64{x, y}, at, 16.8))
		at = append(at, [2]float64{x, y})
	}
}

func TestLetters(t *testing.T) {
	for i, want := range map[int]string{0: "A", 25: "Z", 26: "AA", 27: "AB", 51: "AZ", 52: "BA", 701: "ZZ", 702: "AAA"} {
		assert.Equal(t, want, letter(i))
	}
}

func TestNumbers(t *testing.T) {
	for _, row := range []struct {
		v        float64
		decimals int
		want     string
	}{{1.005, 1, "1.0"}, {-0.001, 2, "0.00"}, {-3, 0, "-3"}, {math.NaN(), 2, "–"}, {math.Inf(1), 2, "–"}, {123456.789, 2, "123456.79"}} {
		assert.Equal(t, row.want, number(row.v, row.decimals))
	}
	for span, want := range map[float64]float64{1000: 200, 1200: 200, 1201: 500, 0.7: 0.2, 6: 1, 0: 1} {
		assert.InEpsilon(t, want, roundStep(span, 6), 1e-9, "span %g", span)
	}
	for azimuth, want := range map[float64]string{0: "north", 350: "north", 23: "north-east", 180: "south", -90: "west"} {
		assert.Equal(t, want, wind(azimuth))
	}
}

// A sheet of every size renders; the tables part the looks into blocks.
func TestSizes(t *testing.T) {
	for _, size := range [][2]int{{1, 1}, {1, 4}, {2, 5}, {3, 100}, {60, 3}} {
		page := render(t, sample(size[0], size[1]))
		blocks := (size[1] + perBlock - 1) / perBlock
		assert.Equal(t, blocks, strings.Count(page, `class="stack glance"`))
		assert.Equal(t, size[0], strings.Count(page, "<article"))
		assert.NotContains(t, page, "Downslope", "a quantity that no pair has is left out")
	}
}

func TestRefused(t *testing.T) {
	assert.Error(t, Render(new(bytes.Buffer), &Sheet{}))
	short := sample(1, 2)
	short.Sites[0].Pairs = short.Sites[0].Pairs[:1]
	assert.EqualError(t, Render(new(bytes.Buffer), short), `sheet: site "Site 0" has 1 pairs for 2 looks`)
	full := errors.New("disk full")
	assert.ErrorIs(t, Render(refuser{full}, sample(1, 1)), full)
}

type refuser struct{ err error }

func (r refuser) Write([]byte) (int, error) { return 0, r.err }

func TestSameBytes(t *testing.T) {
	assert.Equal(t, render(t, sample(3, 5)), render(t, sample(3, 5)))
}
