package main

import (
	"math"
	"os/exec"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

func TestDecimal(t *testing.T) {
	for text, want := range map[string]float64{"0": 0, "-12.5": -12.5, "+3": 3, ".5": 0.5, "1e2": 100, "2E-1": 0.2} {
		got := math.NaN()
		require.NoError(t, (&decimal{&got, -100, 100, "metres"}).Set(text), text)
		assert.Equal(t, want, got, text)
	}
	for _, text := range []string{"", " 1", "NaN", "nan", "Inf", "-inf", "infinity", "0x10", "1_000", "1,5", "1m", "e", "--1", "1e999", "100.1", "-101"} {
		got := 7.0
		assert.Error(t, (&decimal{&got, -100, 100, "metres"}).Set(text), text)
		assert.Equal(t, 7.0, got, "a refused value changes nothing: %s", text)
	}
}

func TestSize(t *testing.T) {
	// Prefixes: IEC 80000-13 for the binary ones, SI for the decimal ones.
	for text, want := range map[string]int64{"1GiB": 1 << 30, "1.5GiB": 3 << 29, "512MiB": 512 << 20, "2GB": 2e9, "500MB": 5e8, "4000000kB": 4e9, "1TiB": 1 << 40} {
		var got int64
		require.NoError(t, (&size{&got, leastMemory, mostMemory}).Set(text), text)
		assert.Equal(t, want, got, text)
	}
	for _, text := range []string{"", "1", "GiB", "1G", "1gib", "-1GiB", "NaNGiB", "InfGiB", "0x1GiB", "1 GiB", "2TiB", "383MiB"} {
		var got int64
		assert.Error(t, (&size{&got, leastMemory, mostMemory}).Set(text), text)
		assert.Zero(t, got, text)
	}
	for n, want := range map[int64]string{1 << 30: "1GiB", 384 << 20: "384MiB", 1 << 40: "1TiB", 1536 << 20: "1.5GiB", 100: "100 B"} {
		assert.Equal(t, want, bytesText(n))
	}
}

// TestBudget: the parts of the memory never sum to more than the whole, and
// each is worth having at the least memory too.
func TestBudget(t *testing.T) {
	for _, memory := range []int64{leastMemory, defaultMemory, 8 << 30, mostMemory} {
		b := split(memory)
		sum := b.cache + b.heights + b.march + programMemory
		assert.LessOrEqual(t, sum, memory)
		assert.GreaterOrEqual(t, b.cache, int64(16<<20))
		assert.GreaterOrEqual(t, b.march, int64(128<<20))
		assert.Less(t, b.goLimit, memory-b.cache)
		large := b.forCells(1 << 50)
		assert.Zero(t, large.heights)
		assert.LessOrEqual(t, large.cache+large.march+programMemory, memory)
		assert.Equal(t, b, b.forCells(9))
	}
}

// TestBoxWindow: cells by their centres, edges included, against a loop over
// all cells; on a south-up grid too.
func TestBoxWindow(t *testing.T) {
	for _, step := range []float64{-10, 10} {
		g, err := dem.NewGrid(9, 7, [6]float64{100, 10, 0, 500, 0, step}, "", func(x, y []float64) error {
			for i := range x {
				x[i], y[i] = x[i]*1e-5, y[i]*1e-5 // any place will do
			}
			return nil
		})
		require.NoError(t, err)
		y := func(rows float64) float64 { return 500 + step*rows }
		for _, b := range []box{
			{100, min(y(0), y(9)), 170, max(y(0), y(9))},
			{115, min(y(1.5), y(3.5)), 135, max(y(1.5), y(3.5))},
			{-1e9, -1e9, 1e9, 1e9},
			{116, min(y(0), y(4)), 134, max(y(0), y(4))},
			{160, min(y(8), y(9)), 1e300, max(y(8), y(9))},
		} {
			got, err := b.window(g)
			require.NoError(t, err)
			for row := range g.Rows {
				for col := range g.Cols {
					cx, cy := g.XY(float64(row), float64(col))
					want := cx >= b.minX && cx <= b.maxX && cy >= b.minY && cy <= b.maxY
					inside := row >= got.Row && row < got.Row+got.Rows && col >= got.Col && col < got.Col+got.Cols
					assert.Equal(t, want, inside, "%v, row %d, column %d", b, row, col)
				}
			}
		}
	}
}

// TestShellJoin: a POSIX shell takes the line apart into the same words.
func TestShellJoin(t *testing.T) {
	words := []string{"plain", "a b", "", "it's", `"$HOME"`, "`id`", "new\nline", "*", "~", "key=1,2", "ümlaut", `back\slash`, "#no", "!x"}
	out, err := exec.Command("sh", "-c", "printf '%s\\0' "+shellJoin(words)).Output()
	require.NoError(t, err)
	assert.Equal(t, words, strings.Split(strings.TrimSuffix(string(out), "\x00"), "\x00"))
}

func TestDidYouMean(t *testing.T) {
	known := []string{"layover", "shadow", "slant-range"}
	assert.Equal(t, "did you mean shadow?", didYouMean("", "shadw", known))
	assert.Equal(t, "did you mean --layover?", didYouMean("--", "LAYOVER", known))
	assert.Empty(t, didYouMean("", "height", known))
}

func TestSignificant(t *testing.T) {
	for v, want := range map[float64]string{0: "0", 94.14: "94.14", 0.14729: "0.1473", 11409: "11409", 2.0354: "2.035", 1e-12: "0.000000000"} {
		assert.Equal(t, want, significant(v))
	}
}
