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
	for k := range 200 {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(2000+k)))
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
	for i := 0; i < len(m.Heights); i += 383 {
		cells = append(cells, i)
	}
	for k, l := range mountainLooks {
		o := mask.DefaultOptions()
		o.OpenEdge = k%2 == 1
		look := fixedLook(l.incidence*deg, l.azimuth*deg)
		sameAsCells(t, m, o, cells, look.String(), look)
	}
	geographic := &dem.Memory{Frame: testterrain.Geographic(468, 327, 1./3600, 1./3600, -122.25, 46.25), Heights: m.Heights}
	sameAsCells(t, geographic, mask.DefaultOptions(), cells, "geographic", fixedLook(39*deg, 103*deg))
	assert.NotEmpty(t, cells)
}
