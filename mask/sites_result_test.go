package mask_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// wallScene is level ground of 10 m cells with a wall of a height along column
// 20, looked at eastwards.
func wallScene(wall float32) *dem.Memory {
	g := testterrain.Metric(9, 61, 10, 10, 0)
	m := &dem.Memory{Frame: g, Heights: make([]float32, 9*61)}
	for row := range 9 {
		m.Heights[row*61+20] = wall
	}
	return m
}

// A wall of 50 m under 45 degrees. Its shadow is 50 m long; a target 30 m behind
// it needs 50 - 30 = 20 m to see over it. Its top has the slant range of ground
// 50 m before it: a target 30 m before it is folded 30 sin 45 - (30 - 50) ...
// that is, its slant range exceeds the top's by (50 - 30) / sqrt 2 = 14.14 m,
// and one raised by 20 m stands level with the top's wavefront.
func TestWallByHand(t *testing.T) {
	m := wallScene(50)
	look := fixedLook(45*deg, 90*deg)
	at := func(col, height float64) mask.SiteResult {
		return evaluate(t, m, openEdge(), []mask.Site{{Name: "a", Row: 4.25, Col: col, Height: height}}, look)[0]
	}
	const mm = 2e-3 // float32 margins and the ellipsoid: 1e-7 of 20 km
	hidden := at(23, 0)
	assert.Equal(t, mask.CastShadow, hidden.Class)
	assert.Equal(t, mask.Unusable, hidden.Verdict)
	assert.InDelta(t, -20, hidden.Clearance, mm)
	assert.True(t, math.IsNaN(hidden.FoldMargin))
	assert.InDelta(t, -30, hidden.Blocker.Distance, mm)
	assert.InDelta(t, 20, hidden.Blocker.Col, 1e-3)
	assert.InDelta(t, 4.25, hidden.Blocker.Row, 1e-3)
	assert.InDelta(t, 50, hidden.Blocker.Height, 1e-6)
	assert.InDelta(t, 20, hidden.MastToClear, 0.02)
	assert.Equal(t, "Hidden by terrain 30 m towards the radar, at a height of 50 m; a mast of 20.1 m would clear it.", hidden.Reason)
	assert.Equal(t, mask.Usable, at(23, hidden.MastToClear).Verdict)
	assert.Equal(t, mask.CastShadow, at(23, hidden.MastToClear-0.05).Class)

	folded := at(17, 0)
	assert.Equal(t, mask.LayoverFarther, folded.Class)
	assert.InDelta(t, -20/math.Sqrt2, folded.FoldMargin, mm)
	assert.InDelta(t, 30, folded.Partner.Distance, mm)
	assert.InDelta(t, 20, folded.MastToClear, 0.02)
	assert.Equal(t, "Folded 14 m deep with ground 30 m away from the radar, at a height of 50 m; a mast of 20.1 m would clear it.", folded.Reason)
	assert.Equal(t, mask.Usable, at(17, folded.MastToClear).Verdict)
	assert.Equal(t, mask.LayoverFarther, at(17, folded.MastToClear-0.05).Class)

	open := at(10, 0)
	assert.Equal(t, mask.Open, open.Class)
	assert.Equal(t, mask.Usable, open.Verdict)
	assert.InDelta(t, 0, open.MastToClear, 0)
	assert.InDelta(t, 10, math.Abs(open.Partner.Distance), mm) // what comes nearest: the next row
	// A mast of 8 m on level ground shares its slant range with the ground in
	// front of its foot, and that is no fold.
	assert.Equal(t, mask.Usable, at(10, 8).Verdict)
	assert.InDelta(t, open.Clearance+8, at(10, 8).Clearance, mm)
	// On the wall a mast of 30 m has its top at the wavefront of ground 80 m
	// before it, which the wall's own face, its surroundings, does not part from.
	top := at(20, 0)
	assert.Equal(t, 3, top.Class.Kind())
	// 20 m behind the wall a target sees the radar from 30 m up, where it shares
	// its slant range with lit ground 30 m away, before the wall: no mast helps.
	raised := at(22, 40.1)
	assert.Equal(t, mask.LayoverNearer, raised.Class)
	assert.True(t, math.IsNaN(raised.MastToClear))
	assert.Contains(t, raised.Reason, "; no mast helps.")
	assert.Equal(t, "Hidden by terrain 20 m towards the radar, at a height of 50 m; a mast of 30.1 m would see the radar but be folded.", at(22, 0).Reason)
}

// relative asserts a relative difference, also from zero.
func relative(t *testing.T, want, got, part float64, where string) {
	t.Helper()
	assert.InDelta(t, want, got, part*math.Abs(want), where)
}

// What a result says of the geometry is what the layers hold at the cell.
func TestSiteQuantitiesEqualTheLayers(t *testing.T) {
	m := mountain(t)
	g := m.Frame
	looks := append(movingLooks(m)[:2], fixedLook(38*deg, 77*deg))
	for i := range looks {
		looks[i].Wavelength, looks[i].Bandwidth, looks[i].Baseline = 0.056, 50e6, 150
	}
	looks[2].SlantRange = 850e3
	layers := []mask.Layer{mask.LocalIncidence, mask.SlantRange, mask.Foreshortening, mask.Incidence, mask.RangeIncidence,
		mask.LineOfSight, mask.GroundResolution, mask.AreaFactor, mask.Downslope, mask.CriticalBaseline, mask.AmbiguityHeight}
	o := openEdge()
	rasters := march(t, m, g.Whole(), layers, o, looks...)
	rng := rand.New(rand.NewPCG(*walkSeed, 31))
	var sites []mask.Site
	for range 300 {
		sites = append(sites, mask.Site{Row: float64(rng.IntN(g.Rows)), Col: float64(rng.IntN(g.Cols))})
	}
	compared := 0
	for _, r := range evaluate(t, m, o, sites, looks...) {
		if r.Seen != geometry.InView || r.Where != mask.OnGround {
			continue
		}
		i := int(sites[r.Site].Row)*g.Cols + int(sites[r.Site].Col)
		v := func(l mask.Layer, band int) float64 { return float64(rasters[r.Look].values[l][band][i]) }
		if f := v(mask.Foreshortening, 0); !(math.Abs(f) > 0.01) {
			continue // near the layover limit several quantities have no bound
		}
		where := fmt.Sprintf("look %d, %+v", r.Look, sites[r.Site])
		// Layers are float32 and interpolate views over 32 columns: 1e-4 of a
		// unit vector, a hundredth of a degree.
		assert.InDelta(t, v(mask.LocalIncidence, 0), r.LocalIncidence.Degrees(), 0.01, where)
		assert.InDelta(t, v(mask.RangeIncidence, 0), r.RangeIncidence.Degrees(), 0.01, where)
		assert.InDelta(t, v(mask.Incidence, 0), r.Incidence.Degrees(), 0.01, where)
		assert.InDelta(t, 90-v(mask.Incidence, 0), r.Elevation.Degrees(), 0.01, where)
		assert.InDelta(t, v(mask.Foreshortening, 0), r.Foreshortening, 1e-3, where)
		relative(t, v(mask.SlantRange, 0), r.SlantRange, 2e-7, where)
		assert.InDelta(t, v(mask.LineOfSight, 0), r.LineOfSight.East, 1e-4, where)
		assert.InDelta(t, v(mask.LineOfSight, 1), r.LineOfSight.North, 1e-4, where)
		assert.InDelta(t, v(mask.LineOfSight, 2), r.LineOfSight.Up, 1e-4, where)
		assert.InDelta(t, v(mask.Downslope, 0), r.Downslope, 1e-3, where)
		relative(t, v(mask.GroundResolution, 0), r.GroundResolution, 0.05, where)
		relative(t, v(mask.AreaFactor, 0), r.AreaFactor, 0.05, where)
		relative(t, v(mask.CriticalBaseline, 0), r.CriticalBaseline, 0.05, where)
		relative(t, v(mask.AmbiguityHeight, 0), r.AmbiguityHeight, 1e-4, where)
		assert.InDelta(t, 0.028, r.Fringe, 1e-12, where)
		assert.InEpsilon(t, 0.028/math.Abs(r.Downslope), r.FringeDownslope, 1e-9, where)
		// The direction to the radar is that of the line of sight.
		assert.InDelta(t, r.LineOfSight.East, r.ToRadar.Sin()*r.Elevation.Cos(), 1e-9, where)
		assert.InDelta(t, r.LineOfSight.North, r.ToRadar.Cos()*r.Elevation.Cos(), 1e-9, where)
		compared++
	}
	assert.Greater(t, compared, 500)
}

// Grid north on a map turned by 20 degrees points to the azimuth 20; on the
// transverse Mercator grid the convergence is atan(tan(lon - lon0) sin(lat))
// (closed form on the sphere, from memory).
func TestGridNorth(t *testing.T) {
	m := testterrain.Sample(testterrain.Metric(9, 9, 10, 10, 20*deg), func(_, _ float64) float64 { return 5 })
	r := evaluate(t, m, openEdge(), []mask.Site{{Row: 4, Col: 4}}, fixedLook(38*deg, 77*deg))[0]
	assert.InDelta(t, 257, r.ToRadar.Degrees(), 1e-4)
	assert.InDelta(t, 237, r.GridToRadar.Degrees(), 1e-4)
	g := testterrain.Transverse(9, 9, 30, 700000, 5.1e6, -123)
	m = testterrain.Sample(g, func(_, _ float64) float64 { return 5 })
	l := g.At(4, 4)
	convergence := geometry.Angle(math.Atan((l.Lon - -123*deg).Tan() * l.Lat.Sin())).Degrees()
	r = evaluate(t, m, openEdge(), []mask.Site{{Row: 4, Col: 4}}, fixedLook(38*deg, 77*deg))[0]
	// The sphere's formula departs from the ellipsoid's by about a third of e^2
	// of itself: 0.002 of 1.9 degrees.
	assert.InDelta(t, convergence, (r.ToRadar - r.GridToRadar).Degrees(), 0.004)
}

// Shares over cells are those of the verdict layer; over a footprint those of
// the ground around the place.
func TestShares(t *testing.T) {
	m := mountain(t)
	g := m.Frame
	look := fixedLook(38*deg, 77*deg)
	raster := march(t, m, g.Whole(), siteLayers, mask.DefaultOptions(), look)[0]
	var cells []mask.Cell
	var want [6]float64
	for row := 180; row < 290; row += 3 {
		for col := 90; col < 220; col += 2 {
			cells = append(cells, mask.Cell{Row: row, Col: col})
			want[mask.Class(raster.classes[mask.VerdictLayer][row*g.Cols+col]).Kind()]++
		}
	}
	sites := []mask.Site{
		{Name: "area", Row: 200, Col: 100, Cells: cells},
		{Name: "cell", Row: 201, Col: 101}, // its result must not suffer from the other's cells
	}
	got := evaluate(t, m, mask.DefaultOptions(), sites, look)
	for kind := range want {
		assert.InDelta(t, want[kind]/float64(len(cells)), got[0].Shares[kind], 1e-12)
	}
	assert.Equal(t, mask.Marginal, got[0].Verdict)
	assert.Contains(t, got[0].Reason, "% open")
	assert.Equal(t, mask.Class(raster.classes[mask.VerdictLayer][201*g.Cols+101]), got[1].Class)

	// A footprint of 100 m about a place 20 m behind the shadow's end: of the disc
	// the part nearer than -20 m lies in shadow or on the wall, by the circular
	// segment acos(d/R)/pi - d sqrt(R^2 - d^2) / (pi R^2) = 0.374 for d = 20; and
	// no more, as the wall's own cells and the fold before it lie 70 m away and
	// beyond. Some 60 points tell shares to 0.04.
	wall := &dem.Memory{Frame: testterrain.Metric(41, 61, 10, 10, 0), Heights: make([]float32, 41*61)}
	for row := range 41 {
		wall.Heights[row*61+20] = 50
	}
	r := evaluate(t, wall, openEdge(), []mask.Site{{Row: 20, Col: 27, Footprint: 60}}, fixedLook(45*deg, 90*deg))[0]
	segment := func(d, radius float64) float64 {
		return math.Acos(d/radius)/math.Pi - d*math.Sqrt(radius*radius-d*d)/(math.Pi*radius*radius)
	}
	assert.Equal(t, mask.Open, r.Class)
	assert.Equal(t, mask.Marginal, r.Verdict)
	assert.InDelta(t, segment(20, 60), r.Shares[4], 0.04)
	assert.InDelta(t, 1-segment(20, 60), r.Shares[1], 0.04)
	assert.Contains(t, r.Reason, "its footprint is")
}

// A tripod looks at a footprint across the border of two of its fans of range
// lines: level ground, all open, but for the radar's own cell.
func TestFootprintAcrossFans(t *testing.T) {
	m := testterrain.Sample(testterrain.Metric(61, 61, 10, 10, 0), func(_, _ float64) float64 { return 100 })
	l := m.Frame.At(30, 30)
	look := geometry.NewLook()
	look.Name, look.Kind, look.Antenna = "tripod", geometry.Tripod, 40
	look.Position = geometry.Place{Lon: l.Lon, Lat: l.Lat}
	sites := []mask.Site{{Row: 15.2, Col: 15.2, Footprint: 60}, {Row: 45.3, Col: 44.9, Footprint: 60}, {Row: 15.5, Col: 44.5, Footprint: 35}, {Row: 30, Col: 30}}
	got := evaluate(t, m, openEdge(), sites, look)
	for _, r := range got[:3] {
		assert.Equal(t, mask.Usable, r.Verdict, "%v: %v", r.Reason, r.Shares)
		assert.Equal(t, mask.Shares{1: 1}, r.Shares)
	}
	assert.Equal(t, mask.NotSeen, got[3].Verdict)
	assert.Regexp(t, "^Not seen: ", got[3].Reason)
}

// A place without ground is a result, not an error, and leaves the others
// alone.
func TestSitesWithoutGround(t *testing.T) {
	m := wallScene(50)
	m.Heights[4*61+40] = float32(math.NaN())
	sites := []mask.Site{
		{Name: "west", Row: 4, Col: -0.4}, {Name: "far", Row: 4000, Col: 3}, {Name: "nowhere", Row: math.NaN(), Col: 3},
		{Name: "hole", Row: 4, Col: 40}, {Name: "beside", Row: 4.2, Col: 40.7}, {Name: "good", Row: 4, Col: 10},
		{Name: "corner", Row: 8, Col: 60}, {Name: "edge", Row: 0, Col: 59.5},
	}
	got := evaluate(t, m, openEdge(), sites, fixedLook(45*deg, 90*deg))
	for i, where := range []mask.Where{mask.OutsideDEM, mask.OutsideDEM, mask.OutsideDEM, mask.OnHole, mask.OnHole, mask.OnGround, mask.OnGround, mask.OnGround} {
		r := got[i]
		assert.Equal(t, where, r.Where, sites[i].Name)
		if where == mask.OnGround {
			assert.Equal(t, mask.Usable, r.Verdict, sites[i].Name)
			continue
		}
		assert.Equal(t, mask.NoData, r.Class, sites[i].Name)
		assert.Equal(t, mask.UndeterminedThere, r.Verdict, sites[i].Name)
		assert.True(t, math.IsNaN(r.Clearance) && math.IsNaN(r.FoldMargin) && math.IsNaN(r.SlantRange) && !r.Blocker.Found(), sites[i].Name)
		assert.Regexp(t, "^(It lies outside the DEM|The DEM has no height)", r.Reason)
	}
}

// Results do not depend on threads, order or company.
func TestSitesDoNotDependOnEachOther(t *testing.T) {
	m := mountain(t)
	rng := rand.New(rand.NewPCG(*walkSeed, 33))
	looks := append(movingLooks(m)[:1], fixedLook(38*deg, 77*deg), fixedLook(50*deg, 193*deg))
	var sites []mask.Site
	for i := range 60 {
		s := mask.Site{Name: fmt.Sprint(i), Row: 100 + 60*rng.Float64(), Col: 100 + 60*rng.Float64()}
		switch i % 4 {
		case 0:
			s.Row, s.Col = math.Round(s.Row), math.Round(s.Col)
		case 1:
			s.Height = 10 * rng.Float64()
		case 2:
			s.Footprint = 80
		}
		sites = append(sites, s)
	}
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	run := func(sites []mask.Site, threads int) []mask.SiteResult {
		o := mask.DefaultOptions()
		o.Threads = threads
		got, err := mask.EvaluateSites(context.Background(), mask.SitesJob{Source: m, Range: span, Looks: looks, Sites: sites,
			Options: o, DEMError: mask.DEMError{Sigma: 4, Correlation: 80, Draws: 100}})
		require.NoError(t, err)
		return got
	}
	all := run(sites, 3)
	text := func(r mask.SiteResult) string {
		r.Site = 0
		return fmt.Sprintf("%+v", r)
	}
	for i := range sites {
		if i%7 != 0 && i > 8 {
			continue
		}
		alone := run(sites[i:i+1], 1)
		for k := range looks {
			assert.Equal(t, text(alone[k]), text(all[i*len(looks)+k]), "site %d, look %d", i, k)
		}
	}
}

// What cannot be computed is refused in one line that names it.
func TestSitesJobErrors(t *testing.T) {
	m := wallScene(50)
	good := mask.SitesJob{Source: m, Range: dem.Range{Min: 0, Max: 50, Valid: 549}, Looks: []geometry.Look{fixedLook(45*deg, 90*deg)},
		Sites: []mask.Site{{Name: "hut", Row: 4, Col: 10}}, Options: mask.DefaultOptions()}
	for text, spoil := range map[string]func(j *mask.SitesJob){
		`site "hut": height -1 m`:       func(j *mask.SitesJob) { j.Sites = []mask.Site{{Name: "hut", Height: -1}} },
		`site "hut": height NaN m`:      func(j *mask.SitesJob) { j.Sites = []mask.Site{{Name: "hut", Height: math.NaN()}} },
		`footprint -3 m`:                func(j *mask.SitesJob) { j.Sites = []mask.Site{{Name: "hut", Footprint: -3}} },
		`cell at row 9, column 0`:       func(j *mask.SitesJob) { j.Sites = []mask.Site{{Name: "hut", Cells: []mask.Cell{{Row: 9}}}} },
		`DEM error of -1 m`:             func(j *mask.SitesJob) { j.DEMError.Sigma = -1 },
		`correlation length NaN m`:      func(j *mask.SitesJob) { j.DEMError.Correlation = math.NaN() },
		`needs an incidence between 0 `: func(j *mask.SitesJob) { j.Looks = []geometry.Look{fixedLook(0, 0)} },
	} {
		j := good
		spoil(&j)
		_, err := mask.EvaluateSites(context.Background(), j)
		require.ErrorContains(t, err, text)
		assert.NotContains(t, err.Error(), "\n")
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err := mask.EvaluateSites(ctx, good)
	assert.ErrorIs(t, err, context.Canceled)
	none := good
	none.Sites = nil
	got, err := mask.EvaluateSites(context.Background(), none)
	require.NoError(t, err)
	assert.Empty(t, got)
	done := int64(0)
	good.Progress = func(d, all int64) { done = d; assert.Equal(t, int64(1), all) }
	_, err = mask.EvaluateSites(context.Background(), good)
	require.NoError(t, err)
	assert.Equal(t, int64(1), done)
}

// The probability moves the verdict to marginal and is said in the reason.
func TestMarginalByChance(t *testing.T) {
	m := wallScene(50)
	look := fixedLook(45*deg, 90*deg)
	sites := []mask.Site{{Row: 4, Col: 25.1}, {Row: 4, Col: 24.8}, {Row: 4, Col: 21}, {Row: 4, Col: 45}}
	got := chances(t, m, mask.DEMError{Sigma: 3, Correlation: 200, Seed: 1}, sites, look)
	for i, want := range []mask.Verdict{mask.Marginal, mask.Marginal, mask.Unusable, mask.Usable} {
		r := got[i]
		assert.Equal(t, want, r.Verdict, "%+v", r.Chance)
		assert.Equal(t, want == mask.Marginal, r.Chance.Open >= mask.UnusableBelow && r.Chance.Open < mask.UsableFrom)
		assert.Contains(t, r.Reason, "probability of")
		assert.True(t, strings.HasSuffix(r.Reason, "."))
	}
	assert.Equal(t, mask.Open, got[0].Class)
	assert.Equal(t, mask.CastShadow, got[1].Class)
}

// The profile over the wall: classes by distance from a site at column 10,
// 100 m before it, at 45 degrees: the foot of the wall's fold is 50 m before
// it, its shadow ends 50 m behind it.
func TestProfileByHand(t *testing.T) {
	m := wallScene(50)
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	job := mask.SitesJob{Source: m, Range: span, Looks: []geometry.Look{fixedLook(30*deg, 0), fixedLook(45*deg, 90*deg)},
		Sites: []mask.Site{{Name: "other", Row: 1, Col: 1}, {Name: "a", Row: 4, Col: 10}}, Options: openEdge()}
	p, err := mask.SiteProfile(context.Background(), job, 1, 1, 200)
	require.NoError(t, err)
	assert.Zero(t, p.Points[p.Site].Distance)
	assert.Equal(t, 10., p.Points[p.Site].Col)
	assert.InDelta(t, 90, p.LookAzimuth.Degrees(), 1e-9)
	kinds := map[int]int{}
	last := math.Inf(-1)
	for _, q := range p.Points {
		require.GreaterOrEqual(t, q.Distance, last)
		last = q.Distance
		assert.InDelta(t, q.Distance/10+10, q.Col, 1e-4)
		want := kindOpen
		switch d := q.Distance; {
		case d > 49 && d < 51 || d > 149 && d < 151: // a tie but for rounding
			continue
		case d > 51 && d <= 100.5:
			want = kindFolded
		case d > 100.5 && d < 149:
			want = kindHidden
		}
		kinds[want]++
		assert.Equal(t, want, q.Class.Kind(), "%+v", q)
	}
	assert.InDelta(t, 200, last, 11)
	for _, k := range []int{kindOpen, kindFolded, kindHidden} {
		assert.Greater(t, kinds[k], 2)
	}
	job.Sites[1].Col = 99
	_, err = mask.SiteProfile(context.Background(), job, 1, 1, 200)
	assert.ErrorContains(t, err, `site "a" has no ground`)
}

// anySites draws sites of all sorts: with masts, footprints and cells, on the
// grid and beside it.
func anySites(rng *rand.Rand, g *dem.Grid) []mask.Site {
	sites := make([]mask.Site, 8)
	for i := range sites {
		s := randomSite(rng, g)
		if rng.IntN(4) == 0 {
			l := g.At(s.Row, s.Col)
			s.Footprint = 4 * rng.Float64() * math.Hypot(l.ColE, l.ColN)
		}
		if rng.IntN(5) == 0 {
			s.Cells = []mask.Cell{{Row: rng.IntN(g.Rows), Col: rng.IntN(g.Cols)}, {Row: rng.IntN(g.Rows), Col: rng.IntN(g.Cols)}}
		}
		if rng.IntN(9) == 0 {
			s.Row = float64(g.Rows) * 3 * (rng.Float64() - 0.5)
		}
		sites[i] = s
	}
	return sites
}

// Whatever the grid, the look and the sites: shares and probabilities sum to 1,
// classes are known ones, reasons are sentences, and profiles and skies come
// out whole.
func TestSitesAnywhere(t *testing.T) {
	t.Logf("seed %d", *walkSeed)
	known := map[mask.Class]bool{}
	for _, c := range mask.Classes {
		known[c.Code] = true
	}
	evaluated := 0
	for k := range 25 {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(11000+k)))
		s := randomScene(rng)
		g := s.terrain.Frame
		span, err := dem.Scan(context.Background(), s.terrain)
		require.NoError(t, err)
		at := func() geometry.Place {
			l := g.At(rng.Float64()*float64(g.Rows-1), rng.Float64()*float64(g.Cols-1))
			return geometry.Place{Lon: l.Lon, Lat: l.Lat}
		}
		looks := movingLooks(s.terrain)
		looks[1].Start, looks[1].End, looks[1].Height = at(), at(), 4000
		looks[2].Position, looks[2].Antenna = at(), 20
		for _, look := range append(looks, s.look) {
			job := mask.SitesJob{Source: s.terrain, Range: span, Looks: []geometry.Look{look}, Sites: anySites(rng, g), Options: s.options,
				DEMError: mask.DEMError{Sigma: 3, Correlation: 30 * float64(rng.IntN(2)), Draws: 30}}
			got, err := mask.EvaluateSites(context.Background(), job)
			if err != nil { // a track that does not pass the DEM, a tripod on a hole
				assert.NotEqual(t, geometry.Fixed, look.Kind, "%v: %v", s, err)
				continue
			}
			for i, r := range got {
				where := fmt.Sprintf("grid %d: %v, %v, site %+v: %+v", k, s, look.Kind, job.Sites[i], r)
				sum := 0.0
				for _, x := range r.Shares {
					sum += x
				}
				assert.InDelta(t, 1, sum, 1e-9, where)
				if c := r.Chance; c.Open == c.Open {
					assert.InDelta(t, 1, c.Open+c.Folded+c.Hidden+c.Undetermined, 1e-9, where)
				}
				assert.True(t, known[r.Class] && known[r.Layover] && known[r.Shadow], where)
				assert.Regexp(t, `^[A-Z].*[^.]\.$`, r.Reason, where)
				assert.Contains(t, mask.Verdicts, r.Verdict, where)
				evaluated++
				p, err := mask.SiteProfile(context.Background(), job, i, 0, 50)
				if r.Where != mask.OnGround {
					assert.Error(t, err, where)
				} else if err == nil {
					assert.Zero(t, p.Points[p.Site].Distance, where)
				}
			}
		}
		job := mask.SitesJob{Source: s.terrain, Range: span, Sites: []mask.Site{randomSite(rng, g)}, Options: s.options}
		sky, err := mask.SkyOfLooks(context.Background(), job, []geometry.Angle{0, 1, 2, 3, 4, 5, 6})
		require.NoError(t, err)
		require.Len(t, sky[0], 7)
	}
	assert.Greater(t, evaluated, 400)
}
