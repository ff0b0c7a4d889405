package mask_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// skyOf returns the sky of sites.
func skyOf(t testing.TB, m *dem.Memory, o mask.Options, sites []mask.Site, azimuths ...geometry.Angle) [][]mask.SkyRay {
	t.Helper()
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	sky, err := mask.SkyOfLooks(context.Background(), mask.SitesJob{Source: m, Range: span, Sites: sites, Options: o}, azimuths)
	require.NoError(t, err)
	return sky
}

// A slope of 20 degrees that rises to the east: looking east it is open from
// 20 degrees to the upper limit, looking west from the lower one to 70, and
// looking along it everywhere. On level ground 100 m before a wall of 60 m, as
// seen from a radar beyond the wall, everything above 90 - atan(0.6) = 59.04 is
// hidden; on the radar's side of it, incidences below atan(0.6) = 30.96 fold
// the wall's top over the ground.
func TestSkyByHand(t *testing.T) {
	g := testterrain.Metric(81, 81, 10, 10, 0)
	slope := testterrain.Sample(g, testterrain.Plane{Slope: 20 * deg, Rise: 90 * deg}.Height)
	site := []mask.Site{{Row: 40.3, Col: 40.6}}
	for _, c := range []struct{ azimuth, low, high geometry.Angle }{
		{90, 20, 80}, {270, 10, 70}, {0, 10, 80}, {180, 10, 80},
	} {
		r := skyOf(t, slope, openEdge(), site, c.azimuth*deg)[0][0]
		// Heights are float32: 1e-5 m over a cell of 10 m.
		assert.InDelta(t, float64(c.low), r.Low.Degrees(), 1e-3, "azimuth %v", c.azimuth)
		assert.InDelta(t, float64(c.high), r.High.Degrees(), 1e-3, "azimuth %v", c.azimuth)
		assert.Equal(t, [2]geometry.Angle{r.Low, r.High}, [2]geometry.Angle{r.LowSure, r.HighSure})
	}
	wall := &dem.Memory{Frame: g, Heights: make([]float32, 81*81)}
	for row := range 81 {
		wall.Heights[row*81+50] = 60
	}
	site = []mask.Site{{Row: 40, Col: 40}}
	r := skyOf(t, wall, openEdge(), site, 270*deg, 90*deg)[0]
	assert.InDelta(t, 59.036, r[0].High.Degrees(), 1e-3)
	assert.InDelta(t, 10, r[0].Low.Degrees(), 1e-9)
	assert.InDelta(t, 30.964, r[1].Low.Degrees(), 1e-3)
	assert.InDelta(t, 80, r[1].High.Degrees(), 1e-9)
	// A mast of 60 m sees over the wall; the wall's top is level with it.
	site[0].Height = 60
	r = skyOf(t, wall, openEdge(), site, 270*deg, 90*deg)[0]
	assert.InDelta(t, 80, r[0].High.Degrees(), 1e-9)
	assert.InDelta(t, 10, r[1].Low.Degrees(), 1e-9)
}

// A pit 100 m deep between a site and the radar folds over the site only where
// it is lit. The bottom's far edge, 30 m from the site, would do so up to
// atan(100/30) = 73.3 degrees but is hidden from atan(20/100) = 11.3 on, the rim
// standing 20 m before it. x metres below the ground, the far wall is 20 + x/10
// from the site and 30 - x/10 behind the rim: it folds up to atan(x/(20+x/10))
// and is lit up to atan((30-x/10)/x). The two are equal where
// x^2 = (30-x/10)(20+x/10), x = (1 + sqrt(2425)) / 2.02 = 24.873, at 47.88 degrees.
func TestSkyCountsLitPartnersOnly(t *testing.T) {
	g := testterrain.Metric(3, 81, 10, 10, 0)
	m := &dem.Memory{Frame: g, Heights: make([]float32, 3*81)}
	for row := range 3 {
		m.Heights[row*81+36], m.Heights[row*81+37] = -100, -100
	}
	x := (1 + math.Sqrt(2425)) / 2.02
	require.InDelta(t, (30-x/10)*(20+x/10), x*x, 1e-9)
	r := skyOf(t, m, openEdge(), []mask.Site{{Row: 1, Col: 40}}, 90*deg)[0][0]
	assert.InDelta(t, math.Atan(x/(20+x/10))/float64(deg), r.Low.Degrees(), 1e-3)
	// Evaluated one incidence at a time the answer is the same.
	for _, i := range []geometry.Angle{47, 48.5} {
		c := evaluate(t, m, openEdge(), []mask.Site{{Row: 1, Col: 40.01}}, fixedLook(i*deg, 90*deg))[0]
		assert.Equal(t, i < 47.88, c.Layover.Kind() == kindFolded, "incidence %v: %v, %v", float64(i), c.Layover, c.FoldMargin)
	}
}

// The sky agrees with sites evaluated one incidence at a time, but for
// incidences within a few tenths of a degree of a limit: both take spots of the
// same line, at the vertices of their own parabolas.
func TestSkyAgreesWithSites(t *testing.T) {
	t.Logf("seed %d", *walkSeed)
	const slack = 1.5 * deg
	checked, differ := 0, 0
	for k := range 80 {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(7000+k)))
		s := randomScene(rng)
		s.options.HoleHeight = math.NaN()
		var sites []mask.Site
		for range 8 {
			sites = append(sites, randomSite(rng, s.terrain.Frame))
		}
		var looks []geometry.Look
		for i := 12; i < 80; i += 4 {
			looks = append(looks, fixedLook(geometry.Angle(i)*deg, s.look.Azimuth))
		}
		sky := skyOf(t, s.terrain, s.options, sites, s.look.Azimuth)
		for _, r := range evaluate(t, s.terrain, s.options, sites, looks...) {
			ray := sky[r.Site][0]
			i := looks[r.Look].Incidence
			where := fmt.Sprintf("grid %d: %v, incidence %v, %+v: %v, %+v", k, s, i.Degrees(), sites[r.Site], r.Layover, ray)
			if r.Where != mask.OnGround {
				require.False(t, ray.Low.Given(), where)
				continue
			}
			near := func(a geometry.Angle) bool { return math.Abs(float64(a-i)) < float64(slack) }
			if near(ray.Low) || near(ray.High) || near(ray.LowSure) || near(ray.HighSure) {
				continue
			}
			want := kindOpen
			switch {
			case i > ray.High:
				want = kindHidden
			case i > ray.HighSure || i < ray.LowSure && i > ray.Low:
				want = kindUnsure
			case i < ray.Low:
				want = kindFolded
			}
			checked++
			if have := r.Layover.Kind(); have != want && !(have == kindUnsure && want == kindFolded) {
				differ++

			}
		}
	}
	t.Logf("%d checked, %d differ", checked, differ)
	assert.Less(t, float64(differ), 0.01*float64(checked))
}
