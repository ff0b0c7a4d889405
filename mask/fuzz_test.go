package mask_test

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// FuzzRun takes a tiny grid through the engine: it must not panic, must give
// known classes only and NaN values only where they say so, and must agree
// with the walk but for cells beside a boundary. The heights are one byte a
// cell in quarters of a cell; 255 is a hole.
func FuzzRun(f *testing.F) {
	f.Add([]byte{0, 0, 0, 0, 0, 0, 0, 0, 0}, uint8(3), uint16(19000), uint16(7700), uint8(0))
	f.Add([]byte{0, 0, 9, 0, 0, 0, 0, 0, 255, 0, 0, 0}, uint8(4), uint16(40000), uint16(9000), uint8(1))
	f.Add([]byte{255, 255, 255, 255}, uint8(2), uint16(1), uint16(4500), uint8(2))
	f.Add([]byte{0, 4, 8, 12, 8, 4, 0, 0, 4, 8, 12, 8, 4, 0}, uint8(7), uint16(30000), uint16(27001), uint8(6))
	f.Add([]byte{0, 0, 4, 4, 8, 8, 12, 12, 8, 9, 4, 4, 0, 1}, uint8(2), uint16(60000), uint16(17999), uint8(12))
	f.Fuzz(func(t *testing.T, bytes []byte, width uint8, incidence, azimuth uint16, flags uint8) {
		if s, ok := fuzzScene(bytes, width, incidence, azimuth, flags); ok {
			s.fuzz(t)
		}
	})
}

// fuzzScene reads a scene; ok is false when there are not 2 x 2 cells in it. The
// incidence runs from 20.003 to 70 degrees and never hits 45 or another angle
// whose tangent is a ratio of small numbers, so that equal slant ranges do
// not hang on the last bit.
func fuzzScene(bytes []byte, width uint8, incidence, azimuth uint16, flags uint8) (scene, bool) {
	cols := 1 + int(width-1)%16
	rows := min(len(bytes)/cols, 16)
	if rows < 2 || cols < 2 { // refused; TestSliversAreRefused
		return scene{}, false
	}
	const cell = 8
	g := testterrain.Metric(rows, cols, cell, cell, 0)
	if flags&1 > 0 {
		g = testterrain.Metric(rows, cols, cell, 3*cell, 17*deg)
	}
	heights := make([]float32, rows*cols)
	some := false
	for i := range heights {
		heights[i] = float32(bytes[i]) * cell / 4
		if bytes[i] == 255 {
			heights[i] = float32(math.NaN())
		} else {
			some = true
		}
	}
	if !some { // refused
		return scene{}, false
	}
	s := scene{name: "fuzz", terrain: &dem.Memory{Frame: g, Heights: heights}, options: mask.DefaultOptions()}
	s.options.OpenEdge = flags&2 > 0
	if flags&4 > 0 {
		s.options.HoleHeight = 10
	}
	if flags&8 > 0 {
		s.options.Ceiling = 600
	}
	s.look = fixedLook(
		(20.003+49.993*geometry.Angle(incidence)/math.MaxUint16)*deg,
		geometry.Angle(azimuth%36000)/100*deg)
	return s, true
}

func (s scene) fuzz(t testing.TB) {
	c, got, answers := s.check(t)
	require.Empty(t, c.lone, "%v\nheights %v", s, s.terrain.Heights)
	for i, a := range answers {
		layover := mask.Class(got.classes[mask.LayoverLayer][i])
		shadow := mask.Class(got.classes[mask.ShadowLayer][i])
		require.Contains(t, layoverClasses, layover, "%v", s)
		require.Contains(t, shadowClasses, shadow, "%v", s)
		require.Equal(t, a.kind == kindNone, layover == mask.NoData, "%v", s)
		require.Equal(t, layover == mask.NoData, shadow == mask.NoData, "%v", s)
		checkSigns(t, layover, shadow, got.values[mask.Clearance][0][i], got.values[mask.FoldMargin][0][i], s)
	}
}

// The codes that each layer may hold.
var (
	layoverClasses = []mask.Class{mask.NoData, mask.Open, mask.ActiveLayover, mask.LayoverFarther, mask.LayoverNearer,
		mask.LayoverBoth, mask.SelfShadow, mask.CastShadow, mask.Undetermined}
	shadowClasses = []mask.Class{mask.NoData, mask.Open, mask.SelfShadow, mask.CastShadow, mask.Undetermined}
)

// checkSigns: margins are negative or zero in hidden and folded cells, not
// negative in lit and open ones, and NaN where there is no answer.
func checkSigns(t testing.TB, layover, shadow mask.Class, clearance, fold float32, where any) {
	t.Helper()
	switch shadow.Kind() {
	case kindHidden:
		require.Equal(t, shadow, layover, "a hidden cell keeps its code: %v", where)
		require.LessOrEqual(t, clearance, float32(0), "clearance of a hidden cell: %v", where)
		require.True(t, fold != fold, "fold margin %v of a hidden cell: %v", fold, where)
	case kindOpen:
		require.GreaterOrEqual(t, clearance, float32(0), "clearance of a lit cell: %v", where)
		require.NotEqual(t, kindHidden, layover.Kind(), "a lit cell: %v", where)
	case kindNone:
		require.True(t, clearance != clearance && fold != fold, "margins without data: %v", where)
	}
	switch layover.Kind() {
	case kindFolded:
		require.Equal(t, mask.Open, shadow, "a folded cell is lit: %v", where)
		require.LessOrEqual(t, fold, float32(0), "fold margin of a folded cell: %v", where)
	case kindOpen:
		require.GreaterOrEqual(t, fold, float32(0), "fold margin of an open cell: %v", where)
	}
}
