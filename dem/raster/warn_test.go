package raster

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"github.com/airbusgeo/godal"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// TestWarnings: what looks wrong is told with its count and first cell, and
// what is right is not. Every fixture has its holes at (1, 2) and (4, 6).
func TestWarnings(t *testing.T) {
	wall := func(row, col int) float64 { return float64(1500 * (col / 4)) }
	cases := []struct {
		name string
		f    fixture
		o    Options
		want []string // a warning with all of these, split by "|"
		none []string // no warning with these
	}{
		{"clean", fixture{crs: "EPSG:4979", transform: [6]float64{9, 1e-3, 0, 46, 0, -1e-3}}, Options{}, nil, []string{""}},
		{"lower end of int16", fixture{dtype: godal.Int16, value: holesAs(-32768)}, Options{}, []string{"fill value -32768|2 places|row 1, column 2|-a_nodata -32768"}, []string{"neighbouring"}},
		{"upper end of int16", fixture{dtype: godal.Int16, value: holesAs(32767)}, Options{}, []string{"fill value 32767|2 places|row 1, column 2"}, []string{"neighbouring"}},
		{"upper end of uint16", fixture{dtype: godal.UInt16, value: holesAs(65535)}, Options{}, []string{"fill value 65535|2 places"}, nil},
		{"nines", fixture{value: holesAs(-9999)}, Options{}, []string{"fill value -9999|2 places|row 1, column 2"}, []string{"neighbouring", "any ground"}},
		{"nines, declared", fixture{value: holesAs(-9999), nodata: ptr(-9999)}, Options{}, nil, []string{"fill", "neighbouring"}},
		{"another declared", fixture{dtype: godal.Int16, value: holesAs(-32768), nodata: ptr(-9999)}, Options{}, []string{"fill value -32768|2 places"}, nil},
		{"masked fill", fixture{value: holesAs(-9999), mask: seen}, Options{}, nil, []string{"fill", "neighbouring"}},
		{"scaled end of int16", fixture{dtype: godal.Int16, value: holesAs(32767), scale: 0.1}, Options{}, []string{"fill value 32767|2 places"}, nil},
		{"a height in centimetres", fixture{dtype: godal.Int32, value: times(1, 32700, ramp)}, Options{VerticalUnit: "cm"}, nil, []string{"fill", "any ground"}},
		{"huge", fixture{value: holesAs(-1e32)}, Options{}, []string{"beyond 1e30|2 places|row 1, column 2"}, []string{"neighbouring"}},
		{"huge, declared", fixture{value: holesAs(-1e32), nodata: ptr(-1e32)}, Options{}, nil, []string{"1e30"}},
		{"a wall", fixture{value: wall}, Options{}, []string{"more than 1000 m|5 places|row 0, column 4"}, nil},
		{"a wall on wide cells", fixture{value: wall, transform: [6]float64{500000, 900, 0, 5100000, 0, -900}}, Options{}, nil, []string{"neighbouring"}},
		{"spike", fixture{value: func(r, c int) float64 {
			if r == 2 && c == 3 {
				return 5000
			}
			return ramp(r, c)
		}}, Options{}, []string{"more than 1000 m|4 places|row 2, column 3"}, nil},
		{"feet taken for metres", fixture{value: times(100, 0, ramp)}, Options{}, []string{"beyond any ground|--vertical-unit"}, nil},
		{"no vertical reference", fixture{}, Options{}, []string{"vertical reference|only slant range shifts|cos(incidence)"}, nil},
		{"geoid heights without a grid", fixture{crs: "EPSG:32632+5798"}, Options{}, []string{"refer to EGM84 height|grid is not installed|used as ellipsoidal|--geoid"}, []string{"not stated"}},
		{"geoid heights with a grid", fixture{crs: "EPSG:32632+5773"}, Options{}, nil, []string{"ellipsoidal", "not stated"}},
		{"a geoid given", fixture{}, Options{Geoid: egm96}, nil, []string{"ellipsoidal", "not stated"}},
		{"map in feet", fixture{crs: "EPSG:2926", transform: [6]float64{1200000, 100, 0, 500000, 0, -100}}, Options{}, []string{"map is in US survey foot|--vertical-unit"}, nil},
		{"map in feet, unit given", fixture{crs: "EPSG:2926", transform: [6]float64{1200000, 100, 0, 500000, 0, -100}}, Options{VerticalUnit: "m"}, nil, []string{"map is in"}},
		{"near a pole", fixture{crs: "EPSG:3413", transform: [6]float64{300, 30, 0, 100, 0, -30}}, Options{}, []string{"within 512 cells of a pole"}, nil},
		{"far from the pole", fixture{crs: "EPSG:3413", transform: [6]float64{30000, 30, 0, -30000, 0, -30}}, Options{}, nil, []string{"pole"}},
		{"wrong zone", fixture{crs: "EPSG:32632", transform: [6]float64{5100000, 30, 0, 500000, 0, -30}}, Options{}, []string{"outside the area that WGS 84 / UTM zone 32N is made for|--crs"}, nil},
	}
	for _, c := range cases {
		for _, hold := range []int64{0, -1} {
			t.Run(fmt.Sprintf("%s/hold %d", c.name, hold), func(t *testing.T) {
				if c.f.crs == "" {
					c.f.crs = "EPSG:32632"
				}
				if c.f.transform == [6]float64{} {
					c.f.transform = utm32
				}
				c.o.HoldBytes = hold
				d, err := Open(c.f.write(t, "dem.tif"), c.o)
				require.NoError(t, err)
				defer func() { require.NoError(t, d.Close()) }()
				_, err = d.Survey(context.Background())
				require.NoError(t, err)
				list := d.Warnings()
				for _, w := range c.want {
					assert.True(t, anyHas(list, strings.Split(w, "|")), "want %q in %q", w, list)
				}
				for _, w := range c.none {
					assert.False(t, anyHas(list, []string{w}), "do not want %q in %q", w, list)
				}
			})
		}
	}
}

func anyHas(list, parts []string) bool {
	for _, s := range list {
		all := true
		for _, p := range parts {
			all = all && strings.Contains(s, p)
		}
		if all {
			return true
		}
	}
	return false
}

// TestOddUnits: a band unit that is no length, or against its CRS, is told.
func TestOddUnits(t *testing.T) {
	source := fixture{crs: "EPSG:32632", transform: utm32}.write(t, "dem.tif")
	for _, c := range [][3]string{
		{"EPSG:32632", "degree", `the band's unit is "degree", which is no length`},
		{"EPSG:32632+8228", "m", "the band is believed"},
	} {
		d, err := Open(vrt(t, source, 5, 7, c[0], utm32, "<UnitType>"+c[1]+"</UnitType>"), Options{})
		require.NoError(t, err)
		assert.True(t, anyHas(d.Warnings(), []string{c[2]}), "%q", d.Warnings())
		requireHeights(t, d, 0, ramp)
		require.NoError(t, d.Close())
	}
}

// TestCliffsAgainstPlainCount: on rough random ground with holes and widths
// around the run length, the count, the first cell and the range equal those
// of a plain double loop over all neighbours.
func TestCliffsAgainstPlainCount(t *testing.T) {
	seed := rand.Uint64()
	t.Logf("seed %d", seed)
	rng := rand.New(rand.NewPCG(seed, 1))
	for _, cols := range []int{3, 63, 64, 65, 127, 128, 129, 300} {
		for range 20 {
			rows := 3 + rng.IntN(9)
			h := make([]float32, rows*cols)
			for i := range h {
				h[i] = float32(rng.NormFloat64() * 350)
				if rng.IntN(9) == 0 {
					h[i] = float32(math.NaN())
				}
			}
			want, first, lo, hi, valid := plainCliffs(h, rows, cols)
			got := &tally{d: &DEM{}, cliff: cliffHeight}
			r := dem.Range{Min: math.Inf(1), Max: math.Inf(-1)}
			split := 1 + rng.IntN(rows-1)
			got.heights(h[:split*cols], nil, dem.Window{Rows: split, Cols: cols}, &r)
			got.heights(h[split*cols:], h[(split-1)*cols:split*cols], dem.Window{Row: split, Rows: rows - split, Cols: cols}, &r)
			require.Equal(t, want, got.cliffs.count, "%d x %d", rows, cols)
			if want > 0 {
				require.Equal(t, first, got.cliffs.row*cols+got.cliffs.col)
			}
			require.Equal(t, dem.Range{Min: lo, Max: hi, Valid: valid, Missing: int64(rows*cols) - valid}, r)
		}
	}
}

func plainCliffs(h []float32, rows, cols int) (count int64, first int, lo, hi float64, valid int64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for i, v := range h {
		if v != v {
			continue
		}
		valid++
		lo, hi = math.Min(lo, float64(v)), math.Max(hi, float64(v))
		for _, n := range []int{-1, -cols} {
			if n == -1 && i%cols == 0 || i+n < 0 {
				continue
			}
			if math.Abs(float64(v-h[i+n])) > 1000 {
				if count == 0 {
					first = i
				}
				count++
			}
		}
	}
	return count, first, lo, hi, valid
}

// bench makes a smooth int16 grid, deflated in blocks as DEMs come.
func bench(b *testing.B, run func(d *DEM)) {
	b.Helper()
	path := b.TempDir() + "/bench.tif"
	register()
	const n = 3600
	ds, err := godal.Create(godal.GTiff, path, 1, godal.Int16, n, n, godal.CreationOption("TILED=YES", "COMPRESS=DEFLATE", "PREDICTOR=2"))
	require.NoError(b, err)
	require.NoError(b, ds.SetGeoTransform(utm32))
	require.NoError(b, ds.SetProjection("EPSG:32632"))
	row := make([]float64, n)
	for r := range n {
		for c := range row {
			row[c] = 1500 + 900*math.Sin(float64(r)/90)*math.Cos(float64(c)/70) + 40*math.Sin(float64(r*c)/900)
		}
		require.NoError(b, ds.Bands()[0].Write(0, r, row, n, 1))
	}
	require.NoError(b, ds.Close())
	for b.Loop() {
		d, err := Open(path, Options{HoldBytes: -1})
		require.NoError(b, err)
		run(d)
		require.NoError(b, d.Close())
	}
	b.ReportMetric(float64(b.N)*n*n/b.Elapsed().Seconds()/1e6, "Mcells/s")
}

func BenchmarkSurvey(b *testing.B) {
	bench(b, func(d *DEM) {
		_, err := d.Survey(context.Background())
		require.NoError(b, err)
	})
}

func BenchmarkScan(b *testing.B) {
	bench(b, func(d *DEM) {
		_, err := dem.Scan(context.Background(), d)
		require.NoError(b, err)
	})
}
