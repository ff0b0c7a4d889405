package mask_test

import (
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

var windowLayers = []mask.Layer{mask.WindowLow, mask.WindowHigh}

// window is what the search below finds for a cell, degrees: the bounds by the
// terrain that is shown, and with unknown terrain at its worst.
type window struct{ low, high, lowWorst, highWorst float64 }

// search finds the window of a cell by its definition, from every sample of its
// range line a tenth of a cell apart: O(n^2) over a profile.
func (w *walker) search(row, col int, buf []sample) window {
	h0 := w.heights[row*w.cols+col]
	shade, fold, shadeU, foldU := 0.0, 0.0, 0.0, 0.0
	for _, sign := range [2]float64{-1, 1} {
		line := w.line(buf[:0], row, col, sign)
		for k, q := range line {
			d := math.Abs(q.s)
			switch {
			case q.known && sign < 0:
				shade, fold = max(shade, (q.h-h0)/d), max(fold, (h0-q.h)/d)
			case q.known:
				fold = max(fold, (q.h-h0)/d)
			case k == len(line)-1 && w.openEdge:
			case sign < 0:
				shadeU, foldU = max(shadeU, (w.ceiling-h0)/d), max(foldU, (h0-w.lowest)/d)
			default:
				foldU = max(foldU, (w.ceiling-h0)/d)
			}
		}
	}
	dc, dr := w.slopeAxes(row, col)
	fold = max(fold, dc*w.difference(row, col, 0, 1)+dr*w.difference(row, col, 1, 0))
	bound := func(a float64) float64 { return min(max(a*180/math.Pi, 5), 85) }
	return window{
		bound(math.Atan(fold)), bound(math.Pi/2 - math.Atan(shade)),
		bound(math.Atan(max(fold, foldU))), bound(math.Pi/2 - math.Atan(max(shade, shadeU))),
	}
}

// slopeAxes returns the columns and rows that a ground metre away from the
// radar takes at a cell.
func (w *walker) slopeAxes(row, col int) (dc, dr float64) {
	dc, dr = w.towards(w.grid.At(float64(row), float64(col)))
	if !w.parallel {
		m := w.metre[row*w.cols+col]
		dc, dr = w.dCol/m, w.dRow/m
	}
	return dc, dr
}

// spreadOf counts differences of angles by size.
type spreadOf struct {
	n     int64
	over  [4]int64
	worst float64
}

// spreadSteps are the sizes, degrees.
var spreadSteps = [4]float64{0.1, 0.5, 2, 5}

func (s *spreadOf) add(d float64) {
	s.n++
	d = math.Abs(d)
	s.worst = max(s.worst, d)
	for i, step := range spreadSteps {
		if d > step {
			s.over[i]++
		}
	}
}

func (s *spreadOf) share(i int) float64 { return float64(s.over[i]) / float64(max(s.n, 1)) }

func (s spreadOf) String() string {
	text := fmt.Sprintf("%d angles", s.n)
	for i, step := range spreadSteps {
		text += fmt.Sprintf(", over %v: %.4f %%", step, 100*s.share(i))
	}
	return text + fmt.Sprintf(", most %.2f", s.worst)
}

// windowsOf runs the engine for the windows of a scene.
func windowsOf(t testing.TB, m *dem.Memory, o mask.Options, look geometry.Look) *raster {
	got := march(t, m, m.Frame.Whole(), windowLayers, o, look)
	return &got[0]
}

func (r *raster) at(i int) window {
	low, high := r.values[mask.WindowLow], r.values[mask.WindowHigh]
	return window{float64(low[0][i]), float64(high[0][i]), float64(low[1][i]), float64(high[1][i])}
}

// TestWindowsAgainstSearch: on random grids. The search's own step of a tenth of
// a cell misses up to a twentieth of a cell of a crest or a foot.
func TestWindowsAgainstSearch(t *testing.T) {
	var shown, worst spreadOf
	for k := range 300 {
		s := randomScene(rand.New(rand.NewPCG(*walkSeed, uint64(k))))
		span := spanOf(t, s.terrain)
		w := newWalker(s.terrain, span, s.look, s.options)
		got := windowsOf(t, s.terrain, s.options, s.look)
		var buf [16384]sample
		for i := range w.heights {
			if w.hole[i] {
				require.True(t, math.IsNaN(got.at(i).low), "seed %d, grid %d: %v", *walkSeed, k, s)
				continue
			}
			g, want := got.at(i), w.search(i/w.cols, i%w.cols, buf[:])
			shown.add(g.low - want.low)
			shown.add(g.high - want.high)
			worst.add(max(want.lowWorst-g.lowWorst, 0)) // the safe side may be wider
			worst.add(max(g.highWorst-want.highWorst, 0))
		}
	}
	t.Logf("seed %d: shown: %v; worst: %v", *walkSeed, shown, worst)
	assert.Less(t, shown.share(2), searchOver2, "over 2 degrees")
	assert.Less(t, shown.share(3), searchOver5, "over 5 degrees")
	assert.Less(t, worst.share(2), searchOver2, "unknown terrain, over 2 degrees")
	assert.Less(t, worst.share(3), searchOver5, "unknown terrain, over 5 degrees")
}

// Shares of angles that may differ on the random grids, a third of which is
// nearly white noise as high as it is wide: there two lanes a cell apart may
// both miss the one cell that decides.
const (
	searchOver2 = 0.01
	searchOver5 = 0.003
)

func spanOf(t testing.TB, m *dem.Memory) dem.Range {
	span, err := dem.Scan(t.Context(), m)
	require.NoError(t, err)
	return span
}

// versus compares windows with masks over cells and incidences.
type versus struct {
	n int64
	// shadow and layover differ by more than the tolerance: hidden in one only,
	// or folded in the mask and not by the window.
	shadow, layover int64
	// unlit is folded by the window only, beyond the tolerance: the partner is
	// hidden, which the mask does not count.
	unlit int64
	// timid is undetermined by the window only, guessed in the mask only.
	timid, guessed int64
	near           int64 // differences within the tolerance
}

func (v versus) String() string {
	p := func(n int64) string { return fmt.Sprintf("%.4f %%", 100*float64(n)/float64(max(v.n, 1))) }
	return fmt.Sprintf("%d cells and incidences; shadow differs on %s, layover on %s; unlit partners %s; undetermined by the window only %s, in the mask only %s; within the tolerance %s",
		v.n, p(v.shadow), p(v.layover), p(v.unlit), p(v.timid), p(v.guessed), p(v.near))
}

// windowTolerance is how near to its bound, degrees, a window may give another
// class than the mask.
const windowTolerance = 1.0

// A bound of 5 or 85 degrees says that there is no other above or below.
func hides(high, incidence float64) bool { return incidence >= high && high < 85 }
func folds(low, incidence float64) bool  { return incidence <= low && low > 5 }

func (v *versus) add(w window, kind int, incidence float64) {
	v.n++
	have := kindOpen
	switch {
	case hides(w.high, incidence):
		have = kindHidden
	case hides(w.highWorst, incidence):
		have = kindUnsure
	case folds(w.low, incidence):
		have = kindFolded
	case folds(w.lowWorst, incidence):
		have = kindUnsure
	}
	close := func(bound float64) bool { return math.Abs(incidence-bound) <= windowTolerance }
	switch {
	case have == kind:
	case have == kindUnsure || kind == kindUnsure:
		switch {
		case close(w.high) || close(w.low) || close(w.highWorst) || close(w.lowWorst):
			v.near++
		case have == kindUnsure:
			v.timid++
		default:
			v.guessed++
		}
	case have == kindHidden || kind == kindHidden:
		if close(w.high) {
			v.near++
		} else {
			v.shadow++
		}
	case close(w.low):
		v.near++
	case have == kindFolded:
		v.unlit++
	default:
		v.layover++
	}
}

func (v *versus) sum(o versus) {
	v.n, v.shadow, v.layover, v.unlit = v.n+o.n, v.shadow+o.shadow, v.layover+o.layover, v.unlit+o.unlit
	v.timid, v.guessed, v.near = v.timid+o.timid, v.guessed+o.guessed, v.near+o.near
}

// compareWindows runs windows and masks of one azimuth.
func compareWindows(t testing.TB, m *dem.Memory, o mask.Options, azimuth geometry.Angle, incidences []float64) (v versus) {
	win := windowsOf(t, m, o, fixedLook(45*deg, azimuth))
	var looks []geometry.Look
	for _, i := range incidences {
		looks = append(looks, fixedLook(geometry.Angle(i)*deg, azimuth))
	}
	got := march(t, m, m.Frame.Whole(), []mask.Layer{mask.LayoverLayer}, o, looks...)
	for k, i := range incidences {
		for c, code := range got[k].classes[mask.LayoverLayer] {
			if kind := mask.Class(code).Kind(); kind != kindNone {
				v.add(win.at(c), kind, i)
			}
		}
	}
	return v
}

// allIncidences go from 5 to 85 degrees.
func allIncidences(step float64) (all []float64) {
	for i := 5.0; i <= 85; i += step {
		all = append(all, i)
	}
	return all
}

func TestWindowsEqualMasksOnRandomGrids(t *testing.T) {
	var all versus
	for k := range 200 {
		s := randomScene(rand.New(rand.NewPCG(*walkSeed, uint64(k))))
		all.sum(compareWindows(t, s.terrain, s.options, s.look.Azimuth, allIncidences(8)))
	}
	t.Logf("seed %d: %v", *walkSeed, all)
	all.check(t, randomShadow, randomLayover, randomNear, "random grids")
	assert.Less(t, all.share(all.timid), 0.03, "undetermined by the window only")
	assert.Less(t, all.share(all.guessed), 0.003, "undetermined in the mask only")
}

// The most that may differ by more than the tolerance, and within it, on the
// random grids and on the mountain, as shares of cells and incidences. Random
// grids are rougher than they are wide; a window may there miss a single cell
// that hides another. Within the tolerance masks and windows round a boundary
// differently: a degree is passed by about one cell in a hundred.
const (
	randomShadow, randomLayover, randomNear       = 0.001, 0.0005, 0.01
	mountainShadow, mountainLayover, mountainNear = 0.0001, 0.0001, 0.005
)

func (v *versus) share(n int64) float64 { return float64(n) / float64(max(v.n, 1)) }

func (v *versus) check(t *testing.T, shadow, layover, near float64, where string) {
	t.Helper()
	assert.Less(t, v.share(v.shadow), shadow, "%s: shadow", where)
	assert.Less(t, v.share(v.layover), layover, "%s: layover", where)
	assert.Less(t, v.share(v.near), near, "%s: within the tolerance", where)
}

// TestWindowsEqualMasksOnTheMountain takes every eighth incidence, with
// -walk.full all from 5 to 85, and more azimuths.
func TestWindowsEqualMasksOnTheMountain(t *testing.T) {
	m := mountain(t)
	azimuths, step := []geometry.Angle{77, 225, 0}, 16.0
	if *walkFull {
		azimuths, step = []geometry.Angle{77, 225, 0, 45, 103, 193, 311}, 1
	}
	for k, azimuth := range azimuths {
		o := mask.DefaultOptions()
		o.OpenEdge = k%2 == 1
		v := compareWindows(t, m, o, azimuth*deg, allIncidences(step))
		t.Logf("azimuth %v: %v", float64(azimuth), v)
		where := fmt.Sprintf("azimuth %v", float64(azimuth))
		v.check(t, mountainShadow, mountainLayover, mountainNear, where)
		assert.Less(t, v.share(v.timid), mountainTimid, where)
		assert.Less(t, v.share(v.guessed), 2*mountainGuessed, where)
	}
}

// TestWindowsDoNotDependOnTiles: bit by bit, for any tile, window and number of
// threads, with unknown ground and without.
func TestWindowsDoNotDependOnTiles(t *testing.T) {
	for k := range 40 {
		s := randomScene(rand.New(rand.NewPCG(*walkSeed, uint64(1000+k))))
		whole := windowsOf(t, s.terrain, s.options, s.look)
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(2000+k)))
		g := s.terrain.Frame
		row, col := rng.IntN(g.Rows), rng.IntN(g.Cols)
		w := dem.Window{Row: row, Col: col, Rows: 1 + rng.IntN(g.Rows-row), Cols: 1 + rng.IntN(g.Cols-col)}
		o := s.options
		o.Tile, o.Threads = 1+rng.IntN(40), 1+rng.IntN(4)
		part := march(t, s.terrain, w, windowLayers, o, s.look)
		for _, l := range windowLayers {
			for b := range 2 {
				for i, got := range part[0].values[l][b] {
					want := whole.values[l][b][(w.Row+i/w.Cols)*g.Cols+w.Col+i%w.Cols]
					require.Equal(t, math.Float32bits(want), math.Float32bits(got),
						"seed %d, grid %d: %v: %s, band %d, cell %d of %+v", *walkSeed, 1000+k, s, l, b, i, w)
				}
			}
		}
	}
	// Hulls of the mountain pass many tiles.
	m := mountain(t)
	look := fixedLook(40*deg, 151*deg)
	whole := windowsOf(t, m, mask.DefaultOptions(), look)
	o := mask.DefaultOptions()
	o.Tile = 100
	tiled := march(t, m, m.Frame.Whole(), windowLayers, o, look)
	for _, l := range windowLayers {
		for b := range 2 {
			for i, got := range tiled[0].values[l][b] {
				require.Equal(t, math.Float32bits(whole.values[l][b][i]), math.Float32bits(got), "%s, band %d, cell %d", l, b, i)
			}
		}
	}
}

// TestWindowOfACliff: a cliff of 100 m that faces the radar and one that falls
// away, by hand. At distance d before the first the partner is its top: low is
// atan(100 / d); on top, at d behind the edge, the foot: the same. Behind the
// second the edge hides: high is 90 degrees - atan(100 / d). The cliff spans one
// cell of 10 m, from s = -5 to 5, which is where d counts from.
func TestWindowOfACliff(t *testing.T) {
	o := mask.DefaultOptions()
	o.OpenEdge = true
	for _, azimuth := range []geometry.Angle{90, 270, 0, 180} {
		for _, rise := range []float64{100, -100} {
			g := testterrain.Metric(61, 61, 10, 10, 0)
			m := testterrain.Sample(g, func(e, n float64) float64 {
				if s, _ := testterrain.Along(azimuth*deg, e, n); s > 1 {
					return rise
				}
				return 0
			})
			got := windowsOf(t, m, o, fixedLook(40*deg, azimuth*deg))
			for i := range m.Heights {
				e, n := testterrain.Ground(g, float64(i/g.Cols), float64(i%g.Cols))
				s, _ := testterrain.Along(azimuth*deg, e, n)
				s = math.Round(s) // the last ground below at 0, the first above at 10
				w, low, high := got.at(i), 5.0, 85.0
				switch {
				case rise > 0 && s <= 0:
					low = math.Atan(100/(10-s)) * 180 / math.Pi
				case rise > 0:
					low = math.Atan(100/s) * 180 / math.Pi
				case s > 0:
					high = 90 - math.Atan(100/s)*180/math.Pi
				}
				require.InDelta(t, max(low, 5), w.low, 1e-3, "azimuth %v, rise %v, s %v", float64(azimuth), rise, s)
				require.InDelta(t, min(high, 85), w.high, 1e-3, "azimuth %v, rise %v, s %v", float64(azimuth), rise, s)
				require.Equal(t, [2]float64{w.low, w.high}, [2]float64{w.lowWorst, w.highWorst})
			}
		}
	}
}

// TestWindowOfARidge: a roof of slope 0.8 on both sides and 300 m half width,
// looked at across. Low on the facing side is atan 0.8 = 38.66 degrees, its own
// slope; on the lee side high is 90 degrees - atan 0.8 = 51.34. On the plain at d
// before the crest, low is atan(240 / d) at most: the crest is 240 m high.
func TestWindowOfARidge(t *testing.T) {
	o := mask.DefaultOptions()
	o.OpenEdge = true
	g := testterrain.Metric(31, 101, 20, 20, 0)
	m := testterrain.Sample(g, func(e, n float64) float64 { return max(240-0.8*math.Abs(e), 0) })
	got := windowsOf(t, m, o, fixedLook(40*deg, 90*deg))
	slope := math.Atan(0.8) * 180 / math.Pi
	for i := range m.Heights {
		e, _ := testterrain.Ground(g, float64(i/g.Cols), float64(i%g.Cols))
		e = math.Round(e)
		w := got.at(i)
		switch {
		case e > -300 && e < 0: // the facing side; the crest itself has a level slope
			require.InDelta(t, slope, w.low, 1e-3, "e %v", e)
			require.Equal(t, 85.0, w.high)
		case e > 0 && e < 300:
			require.InDelta(t, 90-slope, w.high, 1e-3, "e %v", e)
		case e <= -320:
			require.InDelta(t, max(math.Atan(240/-e)*180/math.Pi, 5), w.low, 1e-3, "e %v", e)
		case e >= 320:
			require.InDelta(t, min(90-math.Atan(240/e)*180/math.Pi, 85), w.high, 1e-3, "e %v", e)
		}
	}
}

// TestWindowsNeedOneAzimuth: looks that see every cell from another azimuth have
// no window.
func TestWindowsNeedOneAzimuth(t *testing.T) {
	look := fixedLook(40*deg, 90*deg)
	assert.Empty(t, mask.Lacks(mask.WindowLow, look))
	look.Kind = geometry.Tripod
	assert.Equal(t, []string{"azimuth"}, mask.Lacks(mask.WindowHigh, look))
}
