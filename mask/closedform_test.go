package mask_test

import (
	"context"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

const deg = geometry.Degree

// The closed forms stand on 10 m cells. Cells are judged within 900 m of the
// middle along the range line and 130 m across it; the rectangle fits into
// the grid of 2 km at every azimuth (hypot(900, 130) = 909), so the grid's
// edges hold no part of any answer: the longest shadow or fold of the 150 m
// surfaces is 150 cot 20 = 412 m.
const (
	formCell   = 10.0
	formRows   = 203
	formCols   = 205
	formAlong  = 900.0
	formAcross = 130.0
	formTop    = 150.0
)

// form is a surface with a known kind at s, y.
type form struct {
	name   string
	height func(east, north float64) float64
	kind   func(s, y float64) int
	crease float64 // radius of a crease around the middle, 0 for none
}

// formAzimuths are no multiples of 45 degrees; the grids are turned as well.
var formAzimuths = []geometry.Angle{17 * deg, 63.4 * deg, 111 * deg, 161.3 * deg, 205 * deg, 249.9 * deg, 298.7 * deg, 342 * deg}

// forms lists the surfaces for one look: the ridges are the rows of the
// project's reference notes, section 5.
func forms(i, azimuth geometry.Angle) []form {
	var all []form
	add := func(name string, height func(e, n float64) float64, kind func(s, y float64) int) {
		all = append(all, form{name: name, height: height, kind: kind})
	}
	for _, slope := range []geometry.Angle{0, 15 * deg, 30 * deg, 50 * deg, 62 * deg} {
		for _, turn := range []geometry.Angle{0, 55 * deg, 180 * deg} {
			p := testterrain.Plane{Slope: slope, Rise: azimuth + turn}
			add(fmt.Sprintf("plane %.0f, %.0f off", slope.Degrees(), turn.Degrees()), p.Height,
				func(s, y float64) int { return p.Kind(i, azimuth) })
		}
	}
	for _, rise := range []float64{formTop, -formTop} {
		p := testterrain.Step{Rise: rise, Azimuth: azimuth}
		add(fmt.Sprintf("step %.0f", rise), p.Height, func(s, y float64) int { return p.Kind(s, i) })
	}
	for _, p := range ridges(azimuth) {
		add(fmt.Sprintf("ridge %.0f/%.0f", p.Fore.Degrees(), p.Back.Degrees()), p.Height,
			func(s, y float64) int { return p.Kind(s, i) })
	}
	for _, slope := range []geometry.Angle{25 * deg, 40 * deg, 60 * deg, 72 * deg} {
		c := testterrain.Cone{Top: formTop, Slope: slope}
		add(fmt.Sprintf("cone %.0f", slope.Degrees()), c.Height, func(s, y float64) int { return c.Kind(s, y, i) })
		q := testterrain.Pit{Depth: formTop, Slope: slope}
		add(fmt.Sprintf("pit %.0f", slope.Degrees()), q.Height, func(s, y float64) int { return q.Kind(s, y, i) })
		all[len(all)-1].crease = formTop / slope.Tan()
		all[len(all)-2].crease = formTop / slope.Tan()
	}
	return all
}

func ridges(azimuth geometry.Angle) []testterrain.Ridge {
	var all []testterrain.Ridge
	for _, a := range [][2]geometry.Angle{{20, 30}, {45, 30}, {30, 30}, {15, 70}, {30, 60}, {50, 60}} {
		all = append(all, testterrain.Ridge{Top: formTop, Fore: a[0] * deg, Back: a[1] * deg, Azimuth: azimuth})
	}
	return all
}

// formIncidences are about those of the reference notes' ridge table; 45 is
// left out because a slope of exactly the incidence has no interior.
var formIncidences = []geometry.Angle{23 * deg, 35 * deg, 39 * deg, 47 * deg, 58 * deg}

// settled reports whether a cell lies farther than its eight neighbours reach
// from every boundary: 16 points one diagonal away have its kind. The cells on
// the crease at the foot of a cone or the rim of a pit, and at its tip, are left out too: the
// bilinear surface on whole cells is a saw there, with teeth of up to
// tan(slope) * diagonal / 4, where the form is a circle.
func (f form) settled(s, y float64) bool {
	const diagonal = formCell * math.Sqrt2
	if r := math.Hypot(s, y); f.crease > 0 && (math.Abs(r-f.crease) < diagonal || r < diagonal) {
		return false
	}
	want := f.kind(s, y)
	for k := range 16 {
		a := float64(k) * math.Pi / 8
		if f.kind(s+diagonal*math.Cos(a), y+diagonal*math.Sin(a)) != want {
			return false
		}
	}
	return true
}

// formCase is a form on its grid with the cells to judge.
type formCase struct {
	form
	name    string
	terrain *dem.Memory
	look    geometry.Look
	options mask.Options
}

// judged calls visit for every cell of the judged rectangle.
func (c formCase) judged(visit func(row, col int, s, y float64)) {
	g := c.terrain.Frame
	for row := range g.Rows {
		for col := range g.Cols {
			s, y := c.place(row, col)
			if math.Abs(s) <= formAlong && math.Abs(y) <= formAcross {
				visit(row, col, s, y)
			}
		}
	}
}

// place returns where a cell lies along and across the range lines.
func (c formCase) place(row, col int) (s, y float64) {
	east, north := testterrain.Ground(c.terrain.Frame, float64(row), float64(col))
	return testterrain.Along(c.look.Azimuth, east, north)
}

// wrong lists the settled cells whose kind is not that of the closed form.
func (c formCase) wrong(kind func(row, col int) int) (cells int, wrong []string) {
	c.judged(func(row, col int, s, y float64) {
		if !c.settled(s, y) {
			return
		}
		cells++
		if have, want := kind(row, col), c.kind(s, y); have != want {
			wrong = append(wrong, fmt.Sprintf("%s: row %d, column %d (s %.1f, y %.1f): kind %d, want %d", c.name, row, col, s, y, have, want))
		}
	})
	return cells, wrong
}

// formCases lists every form under every incidence, each at the next azimuth
// and grid direction in turn.
func formCases() []formCase {
	var all []formCase
	o := mask.DefaultOptions()
	o.OpenEdge = true
	grids := []*dem.Grid{
		testterrain.Metric(formRows, formCols, formCell, formCell, 0),
		testterrain.Metric(formRows, formCols, formCell, formCell, 21*deg),
	}
	for k, i := range formIncidences {
		for a, azimuth := range formAzimuths {
			g := grids[(a/2+k)%2]
			for n, f := range forms(i, azimuth) {
				if (n+k)%len(formAzimuths) != a {
					continue
				}
				name := fmt.Sprintf("%s, incidence %.0f, azimuth %.1f", f.name, i.Degrees(), azimuth.Degrees())
				all = append(all, formCase{f, name, testterrain.Sample(g, f.height), fixedLook(i, azimuth), o})
			}
		}
	}
	return all
}

func report(t *testing.T, cells int, wrong []string) {
	t.Helper()
	assert.Greater(t, cells, 1000, "settled cells")
	if len(wrong) > 0 {
		t.Errorf("%d of %d settled cells, such as %s", len(wrong), cells, wrong[len(wrong)/2])
	}
}

// TestClosedForms: class boundaries within one cell.
func TestClosedForms(t *testing.T) {
	kinds := map[int]int{}
	for _, c := range formCases() {
		got := march(t, c.terrain, c.terrain.Frame.Whole(), marginLayers, c.options, c.look)
		cells, wrong := c.wrong(func(row, col int) int {
			k := got[0].kind(mask.LayoverLayer, row, col)
			kinds[k]++
			return k
		})
		report(t, cells, wrong)
	}
	for _, k := range []int{kindOpen, kindFolded, kindHidden} {
		assert.Greater(t, kinds[k], 10000, "cells of kind %d", k)
	}
}

// TestClosedFormsByWalk: the walk that judges the engine elsewhere meets the
// closed forms too. One cell in 97 is walked, on every second form.
func TestClosedFormsByWalk(t *testing.T) {
	for k, c := range formCases() {
		if k%2 > 0 && !*walkFull {
			continue
		}
		span, err := dem.Scan(context.Background(), c.terrain)
		require.NoError(t, err)
		w := newWalker(c.terrain, span, c.look, c.options)
		answers := w.every(func(i int) bool { return i%97 == 0 })
		cells, wrong := c.wrong(func(row, col int) int {
			if i := row*formCols + col; i%97 == 0 {
				return answers[i].kind
			}
			return c.kind(c.place(row, col))
		})
		report(t, cells, wrong)
	}
}

// marginCase is a ridge on its grid. Aligned: the crest runs along a row or
// column of cell centres, so that the grid holds it exactly. Oblique: between
// four centres the bilinear surface cuts the crest by up to the bend of its
// slopes times a quarter of the way across the cell, and so moves the margins.
type marginCase struct {
	formCase
	ridge testterrain.Ridge
	cut   float64 // metres
}

func marginCases() []marginCase {
	o := mask.DefaultOptions()
	o.OpenEdge = true
	g := testterrain.Metric(formRows, formCols, formCell, formCell, 21*deg)
	var all []marginCase
	for k, i := range formIncidences {
		for n, azimuth := range []geometry.Angle{21 * deg, 111 * deg, 201 * deg, 291 * deg, 143 * deg, 338.2 * deg} {
			for m, p := range ridges(azimuth) {
				if (k+n+m)%3 > 0 {
					continue
				}
				c := marginCase{formCase{
					form: form{height: p.Height, kind: func(s, _ float64) int { return p.Kind(s, i) }},
					name: fmt.Sprintf("ridge %.0f/%.0f, incidence %.0f, azimuth %.1f", p.Fore.Degrees(), p.Back.Degrees(), i.Degrees(), azimuth.Degrees()),
					look: fixedLook(i, azimuth), options: o, terrain: testterrain.Sample(g, p.Height),
				}, p, 0}
				if n > 3 {
					turned := azimuth - 21*deg
					across := formCell * (math.Abs(turned.Sin()) + math.Abs(turned.Cos()))
					c.cut = (p.Fore.Tan() + p.Back.Tan()) * across / 4
				}
				all = append(all, c)
			}
		}
	}
	return all
}

// off lists the settled cells whose margins are farther from the closed form
// than one cell of ground distance stands for: cell cot i of height, cell sin
// i of slant range, and the cut of the crest. Lit ground is never below 0 and
// at most as far from the limit as the form says; NaN where hidden.
func (c marginCase) off(margins func(row, col int) (clearance, fold float64)) (cells int, off []string) {
	i := c.look.Incidence
	tolM := formCell/i.Tan() + c.cut
	tolR := formCell*i.Sin() + c.cut*i.Cos()
	c.judged(func(row, col int, s, y float64) {
		if !c.settled(s, y) {
			return
		}
		cells++
		clearance, fold := margins(row, col)
		wantM, wantR := c.ridge.Clearance(s, formCell, i), c.ridge.FoldMargin(s, formCell, i)
		if kind := c.ridge.Kind(s, i); !within(clearance, wantM, tolM, kind == kindHidden) ||
			math.IsNaN(fold) != (kind == kindHidden) || kind != kindHidden && !within(fold, wantR, tolR, kind == kindFolded) {
			off = append(off, fmt.Sprintf("%s: row %d, column %d (s %.1f): clearance %.2f, want %.2f within %.2f; fold margin %.2f, want %.2f within %.2f",
				c.name, row, col, s, clearance, wantM, tolM, fold, wantR, tolR))
		}
	})
	return cells, off
}

// within compares a margin: where the answer is bad (hidden, folded) it is
// below zero and as deep as the form says, elsewhere not below zero and not
// larger than the form says.
func within(have, want, tolerance float64, bad bool) bool {
	if bad {
		return have < 0 && math.Abs(have-want) <= tolerance
	}
	return have >= 0 && have <= want+tolerance
}

func TestRidgeMargins(t *testing.T) {
	for _, c := range marginCases() {
		got := march(t, c.terrain, c.terrain.Frame.Whole(), marginLayers, c.options, c.look)[0]
		cells, off := c.off(func(row, col int) (clearance, fold float64) {
			k := row*formCols + col
			return float64(got.values[mask.Clearance][0][k]), float64(got.values[mask.FoldMargin][0][k])
		})
		report(t, cells, off)
	}
}

// TestRidgeMarginsByWalk: the closed forms of the negative margins are those
// of the walk.
func TestRidgeMarginsByWalk(t *testing.T) {
	for _, c := range marginCases() {
		span, err := dem.Scan(context.Background(), c.terrain)
		require.NoError(t, err)
		w := newWalker(c.terrain, span, c.look, c.options)
		answers := w.every(func(i int) bool { return i%197 == 0 })
		cells, off := c.off(func(row, col int) (clearance, fold float64) {
			a := answers[row*formCols+col]
			s, _ := c.place(row, col)
			clearance, fold = c.ridge.Clearance(s, formCell, c.look.Incidence), c.ridge.FoldMargin(s, formCell, c.look.Incidence)
			if a.kind == kindHidden {
				clearance, fold = a.m, math.NaN()
			}
			if a.kind == kindFolded {
				fold = a.r
			}
			return clearance, fold
		})
		report(t, cells, off)
	}
}
