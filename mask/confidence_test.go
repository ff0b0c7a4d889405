package mask_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// chances evaluates sites with an error of the heights.
func chances(t testing.TB, m *dem.Memory, e mask.DEMError, sites []mask.Site, looks ...geometry.Look) []mask.SiteResult {
	t.Helper()
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	got, err := mask.EvaluateSites(context.Background(), mask.SitesJob{
		Source: m, Range: span, Looks: looks, Sites: sites, Options: openEdge(), DEMError: e})
	require.NoError(t, err)
	for _, r := range got {
		c := r.Chance
		assert.InDelta(t, 1, c.Open+c.Folded+c.Hidden+c.Undetermined, 1e-9)
	}
	return got
}

// sampling returns four standard errors of a share p of n draws, and a hundredth
// of a percent for shares that cannot be met.
func sampling(p float64, n int) float64 { return 4*math.Sqrt(p*(1-p)/float64(n)) + 1e-4 }

// Level ground behind one wall. The target is lit when its height exceeds that
// of the ray over the wall, d cot(i) below the wall's top. Both heights have the
// same standard deviation and the correlation exp(-d/L), so the difference is
// normal with the standard deviation sigma sqrt(2 (1 - exp(-d/L))). At 65
// degrees and with errors this smooth, no other ground comes near.
func TestChanceBehindOneCrest(t *testing.T) {
	const cell, at, incidence = 10., 20, 65.
	g := testterrain.Metric(5, 80, cell, cell, 0)
	tested := 0
	for _, c := range []struct{ sigma, length, d, gap float64 }{
		{2, 80, 100, 0}, {2, 80, 100, 1.5}, {2, 80, 100, -2.5}, {2, 300, 100, 1}, {2, 300, 200, -1}, {1, 60, 200, 1}, {1, 60, 60, -0.5}, {0.5, 40, 120, 0.4},
	} {
		for _, mast := range []float64{0, 3} {
			m := &dem.Memory{Frame: g, Heights: make([]float32, 5*80)}
			height := mast - c.gap + c.d/math.Tan(incidence*math.Pi/180)
			for row := range 5 {
				m.Heights[row*80+at] = float32(height)
			}
			site := mask.Site{Row: 2, Col: at + c.d/cell, Height: mast}
			e := mask.DEMError{Sigma: c.sigma, Correlation: c.length, Draws: 20000, Seed: 7}
			r := chances(t, m, e, []mask.Site{site}, fixedLook(incidence*deg, 90*deg))[0]
			sd := c.sigma * math.Sqrt(2*(1-math.Exp(-c.d/c.length)))
			want := distuv.Normal{Mu: c.gap, Sigma: sd}.Survival(0)
			assert.InDelta(t, want, r.Chance.Open, sampling(want, e.Draws), "%+v, mast %v: %+v", c, mast, r.Chance)
			assert.InDelta(t, 1-want, r.Chance.Hidden, sampling(want, e.Draws), "%+v, mast %v", c, mast)
			assert.InDelta(t, math.Sqrt(want*(1-want)/20000), r.Chance.StdErr, 3e-4)
			tested++
		}
	}
	assert.Equal(t, 16, tested)
}

// errorField draws whole fields of error over a grid: independent standard
// normals times the Cholesky factor of the covariance of all pairs of cells.
type errorField struct {
	lower mat.TriDense
	n     int
}

func newErrorField(t testing.TB, g *dem.Grid, e mask.DEMError) *errorField {
	n := g.Rows * g.Cols
	cov := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			d := testterrainDistance(g, i, j)
			c := math.Exp(-d / max(e.Correlation, 1e-9))
			cov.SetSym(i, j, e.Sigma*e.Sigma*c)
		}
	}
	var chol mat.Cholesky
	require.True(t, chol.Factorize(cov))
	f := &errorField{n: n}
	chol.LTo(&f.lower)
	return f
}

func testterrainDistance(g *dem.Grid, i, j int) float64 {
	e0, n0 := testterrain.Ground(g, float64(i/g.Cols), float64(i%g.Cols))
	e1, n1 := testterrain.Ground(g, float64(j/g.Cols), float64(j%g.Cols))
	return math.Hypot(e1-e0, n1-n0)
}

func (f *errorField) add(rng *rand.Rand, to, from []float32) {
	z := mat.NewVecDense(f.n, nil)
	for i := range f.n {
		z.SetVec(i, rng.NormFloat64())
	}
	var e mat.VecDense
	e.MulVec(&f.lower, z)
	for i := range to {
		to[i] = from[i] + float32(e.AtVec(i))
	}
}

// The simulation knows the error of the cells around the site and at the line's
// crossings of rows and columns; between these it goes straight, and beyond two
// neighbours it is a Markov chain. Whole terrains with errors at every cell do
// not have to be so; this is how far the two may stay apart, beside the errors
// of sampling. With ten times as many draws the worst site stays within 0.045.
const chainError = 0.04

func TestChanceAgainstWholeTerrains(t *testing.T) {
	t.Logf("seed %d", *walkSeed)
	terrains, draws := 600, 4000
	if *walkFull {
		terrains, draws = 10000, 40000
	}
	between, worst := 0, 0.0
	for k, c := range []struct {
		incidence, azimuth  geometry.Angle
		sigma, length, side float64
	}{
		{35, 90, 5, 60, 20}, {35, 62, 5, 60, 20}, {50, 205, 6, 20, 20}, {40, 320, 6, 400, 20}, {65, 13, 6, 100, 20}, {30, 118, 4, 0, 20},
	} {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(9000+k)))
		g := testterrain.Metric(15, 17, c.side, c.side, 0)
		m := &dem.Memory{Frame: g, Heights: testterrain.Fractal(rng, 15, 17, 50, 0.8)}
		e := mask.DEMError{Sigma: c.sigma, Correlation: c.length, Draws: draws, Seed: 3}
		look := fixedLook(c.incidence*deg, c.azimuth*deg)
		var sites []mask.Site
		for range 25 {
			s := mask.Site{Row: 1 + 12*rng.Float64(), Col: 1 + 14*rng.Float64()}
			if rng.IntN(3) == 0 {
				s.Height = 4 * rng.Float64()
			}
			sites = append(sites, s)
		}
		got := chances(t, m, e, sites, look)
		count := make([][6]int, len(sites))
		field := newErrorField(t, g, e)
		noisy := &dem.Memory{Frame: g, Heights: make([]float32, len(m.Heights))}
		for range terrains {
			field.add(rng, noisy.Heights, m.Heights)
			for i, r := range evaluate(t, noisy, openEdge(), sites, look) {
				count[i][r.Layover.Kind()]++
			}
		}
		for i, r := range got {
			for kind, p := range map[int]float64{kindOpen: r.Chance.Open, kindFolded: r.Chance.Folded, kindHidden: r.Chance.Hidden} {
				want := float64(count[i][kind]) / float64(terrains)
				allowed := chainError + 4*math.Sqrt(max(want*(1-want), p*(1-p))*(1/float64(terrains)+1/float64(draws)))
				assert.InDelta(t, want, p, allowed, "%+v, site %+v: %v in whole terrains, %+v", c, sites[i], count[i], r.Chance)
				if kind == kindOpen && want > 0.02 && want < 0.98 {
					between++
					worst = max(worst, math.Abs(want-p))
				}
			}
		}
	}
	t.Logf("%d sites between, largest difference %.3f", between, worst)
	assert.Greater(t, between, 30)
}
