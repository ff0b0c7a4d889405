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

// evaluate runs sites over a terrain.
func evaluate(t testing.TB, m *dem.Memory, o mask.Options, sites []mask.Site, looks ...geometry.Look) []mask.SiteResult {
	t.Helper()
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	got, err := mask.EvaluateSites(context.Background(), mask.SitesJob{Source: m, Range: span, Looks: looks, Sites: sites, Options: o})
	require.NoError(t, err)
	require.Len(t, got, len(sites)*len(looks))
	return got
}

var siteLayers = []mask.Layer{mask.VerdictLayer, mask.LayoverLayer, mask.ShadowLayer, mask.Clearance, mask.FoldMargin}

// sameAsCells compares sites on cell centres with the layers, bit by bit.
func sameAsCells(t *testing.T, m *dem.Memory, o mask.Options, cells []int, where any, looks ...geometry.Look) {
	t.Helper()
	g := m.Frame
	rasters := march(t, m, g.Whole(), siteLayers, o, looks...)
	sites := make([]mask.Site, len(cells))
	for k, i := range cells {
		// Half the snap off the centre: still the cell.
		d := 5e-7 * float64(k%3-1)
		sites[k] = mask.Site{Name: fmt.Sprint(i), Row: float64(i/g.Cols) + d, Col: float64(i%g.Cols) - d}
	}
	for _, r := range evaluate(t, m, o, sites, looks...) {
		i, want := cells[r.Site], &rasters[r.Look]
		at := fmt.Sprintf("row %d, column %d: %v", i/g.Cols, i%g.Cols, where)
		require.Equal(t, mask.Class(want.classes[mask.VerdictLayer][i]), r.Class, at)
		require.Equal(t, mask.Class(want.classes[mask.LayoverLayer][i]), r.Layover, at)
		require.Equal(t, mask.Class(want.classes[mask.ShadowLayer][i]), r.Shadow, at)
		for _, p := range []struct {
			layer mask.Layer
			got   float64
		}{{mask.Clearance, r.Clearance}, {mask.FoldMargin, r.FoldMargin}} {
			if w := want.values[p.layer][0][i]; math.Float32bits(w) != math.Float32bits(float32(p.got)) && (w == w || p.got == p.got) {
				t.Fatalf("%s: %s %v in the layer, %v at the site", at, p.layer, w, p.got)
			}
		}
	}
}

func TestSitesOnCentresEqualTheLayers(t *testing.T) {
	t.Logf("seed %d", *walkSeed)
	scenes := 200
	if *walkFull {
		scenes *= 15
	}
	for k := range scenes {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(1000+k)))
		s := randomScene(rng)
		var cells []int
		for i := range s.terrain.Heights {
			if rng.IntN(6) == 0 || i < 3 {
				cells = append(cells, i)
			}
		}
		sameAsCells(t, s.terrain, s.options, cells, fmt.Sprintf("grid %d: %v", k, s), s.look)
	}
}

func TestMountainSitesEqualTheLayers(t *testing.T) {
	m := mountain(t)
	var cells []int
	for i := 0; i < len(m.Heights); i += 997 {
		cells = append(cells, i)
	}
	for k, l := range mountainLooks {
		if k%2 == 0 && !*walkFull {
			continue
		}
		o := mask.DefaultOptions()
		o.OpenEdge = k%4 == 1
		look := fixedLook(l.incidence*deg, l.azimuth*deg)
		sameAsCells(t, m, o, cells, look.String(), look)
	}
	geographic := &dem.Memory{Frame: testterrain.Geographic(468, 327, 1./3600, 1./3600, -122.25, 46.25), Heights: m.Heights}
	sameAsCells(t, geographic, mask.DefaultOptions(), cells, "geographic", fixedLook(39*deg, 103*deg))
	assert.NotEmpty(t, cells)
}

// movingLooks are an orbit, a flight and a tripod over the mountain.
func movingLooks(m *dem.Memory) []geometry.Look {
	g := m.Frame
	at := func(row, col float64) geometry.Place {
		l := g.At(row, col)
		return geometry.Place{Lon: l.Lon, Lat: l.Lat}
	}
	orbit := geometry.NewLook()
	orbit.Name, orbit.Kind, orbit.Side = "orbit", geometry.Orbit, geometry.Right
	orbit.Incidence, orbit.Altitude, orbit.Heading = 22*deg, 700e3, 347*deg
	flight := geometry.NewLook()
	flight.Name, flight.Kind, flight.Side = "flight", geometry.Flight, geometry.Right
	flight.Start, flight.End, flight.Height = at(460, -150), at(-20, -170), 7000
	tripod := geometry.NewLook()
	tripod.Name, tripod.Kind = "tripod", geometry.Tripod
	tripod.Position, tripod.Antenna = at(150.3, 60.7), 300
	return []geometry.Look{orbit, flight, tripod}
}

// A millionth and a half of a cell beside a centre a site is walked to from its
// own place, and for every kind of look it gets the class that the layers have
// there, but for cells whose margin is all but nothing. On the centre it gets
// the bits of the layers.
func TestSitesOfEveryKind(t *testing.T) {
	m := mountain(t)
	g := m.Frame
	o := openEdge()
	var cells []int
	for i := 0; i < len(m.Heights); i += 1231 {
		cells = append(cells, i)
	}
	looks := append(movingLooks(m), fixedLook(66*deg, 260*deg))
	sameAsCells(t, m, o, cells, "moving", looks...)
	for _, look := range looks {
		raster := march(t, m, g.Whole(), siteLayers, o, look)[0]
		var sites []mask.Site
		for _, i := range cells {
			sites = append(sites, mask.Site{Row: float64(i/g.Cols) + 1.5e-6, Col: float64(i%g.Cols) + 1.5e-6})
		}
		checked, differ, kinds := 0, 0, map[int]int{}
		for k, r := range evaluate(t, m, o, sites, look) {
			want := mask.Class(raster.classes[mask.LayoverLayer][cells[k]])
			if r.Where != mask.OnGround || want == mask.NoData && r.Seen == geometry.InView {
				continue // beside a hole or the edge of what is seen
			}
			checked++
			kinds[r.Layover.Kind()]++
			if r.Layover.Kind() != want.Kind() {
				differ++
				t.Logf("%s, row %d, column %d: %v, %v, %v at the site, %v, %v, %v in the layers", look.Name, cells[k]/g.Cols, cells[k]%g.Cols,
					r.Layover, r.Clearance, r.FoldMargin, want, raster.values[mask.Clearance][0][cells[k]], raster.values[mask.FoldMargin][0][cells[k]])
			}
		}
		t.Logf("%s: %d sites, %v, %d differ", look.Name, checked, kinds, differ)
		assert.Greater(t, kinds[kindOpen], 10, look.Name)
		assert.Greater(t, kinds[kindFolded]+kinds[kindHidden], 10, look.Name)
		assert.LessOrEqual(t, float64(differ), 0.02*float64(checked), look.Name)
	}
}
