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
}

func spanOf(t testing.TB, m *dem.Memory) dem.Range {
	span, err := dem.Scan(t.Context(), m)
	require.NoError(t, err)
	return span
}

var _ = assert.Equal
var _ = testterrain.Metric
