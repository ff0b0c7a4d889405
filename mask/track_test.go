package mask_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
	"foldshade/geometry"
	"foldshade/mask"
	"foldshade/mask/internal/testterrain"
)

// orbitLook returns a look from a circular orbit 693 km up.
func orbitLook(incidence float64, pass geometry.Pass, side geometry.Side) geometry.Look {
	l := geometry.NewLook()
	l.Name, l.Kind, l.Side, l.Pass = fmt.Sprintf("orbit %v %v %v", incidence, pass, side), geometry.Orbit, side, pass
	l.Altitude, l.Inclination, l.Incidence = 693e3, 98.18*deg, geometry.Angle(incidence)*deg
	return l
}

// flightLook returns a look from a line over two positions of a grid.
func flightLook(g *dem.Grid, from, to [2]float64, height float64, side geometry.Side) geometry.Look {
	at := func(p [2]float64) geometry.Place {
		l := g.At(p[0], p[1])
		return geometry.Place{Lon: l.Lon, Lat: l.Lat}
	}
	l := geometry.NewLook()
	l.Name, l.Kind, l.Side = fmt.Sprintf("flight %v to %v at %v, %v", from, to, height, side), geometry.Flight, side
	l.Start, l.End, l.Height = at(from), at(to), height
	return l
}

// ephemerisLook writes an orbit's states around its pass to a file.
func ephemerisLook(t testing.TB, m dem.Source, orbit geometry.Look) geometry.Look {
	p, err := mask.PlatformOf(m, orbit)
	require.NoError(t, err)
	var b strings.Builder
	epoch := func(t float64) string {
		return time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC).Add(time.Duration(t * 1e9)).Format("2006-01-02T15:04:05.000")
	}
	fmt.Fprintf(&b, "CCSDS_OEM_VERS = 2.0\nCREATION_DATE = 2030-01-01T00:00:00\nORIGINATOR = PLANNER\n\n")
	fmt.Fprintf(&b, "META_START\nOBJECT_NAME = TALLOW\nOBJECT_ID = 2030-001A\nCENTER_NAME = EARTH\nREF_FRAME = ITRF2014\nTIME_SYSTEM = UTC\n")
	fmt.Fprintf(&b, "START_TIME = %s\nSTOP_TIME = %s\nMETA_STOP\n", epoch(-100), epoch(100))
	for s := -100.0; s <= 100; s += 10 {
		pos, vel := p.State(s)
		fmt.Fprintf(&b, "%s %.9f %.9f %.9f %.12f %.12f %.12f\n", epoch(s), pos.X/1e3, pos.Y/1e3, pos.Z/1e3, vel.X/1e3, vel.Y/1e3, vel.Z/1e3)
	}
	l := geometry.NewLook()
	l.Name, l.Kind, l.Side = "ephemeris "+orbit.Name, geometry.Ephemeris, orbit.Side
	l.OEM = filepath.Join(t.TempDir(), "pass.oem")
	require.NoError(t, os.WriteFile(l.OEM, []byte(b.String()), 0o600))
	return l
}

// arctic is the mountain's heights on a geographic grid at 70 degrees latitude,
// where a second of longitude is a third of one of latitude.
func arctic(m *dem.Memory) *dem.Memory {
	return &dem.Memory{Frame: testterrain.Geographic(468, 327, 3./3600, 1./3600, 21, 70.1), Heights: m.Heights}
}

// One cell in trackSample is walked, a few hundred a look; the shares that may
// differ are those of the mountain under plane waves.
const trackSample = 577

func TestPlatformsAgainstWalk(t *testing.T) {
	m := mountain(t)
	cold := arctic(m)
	g, c := m.Frame, cold.Frame
	span, err := dem.Scan(context.Background(), m)
	require.NoError(t, err)
	wanted := func(i int) bool { return *walkFull && i%23 == 0 || i%trackSample == 0 }
	var all tally
	var margins marginTally
	for k, s := range []struct {
		terrain *dem.Memory
		look    geometry.Look
	}{
		{m, orbitLook(25, geometry.Ascending, geometry.Right)},
		{m, orbitLook(33, geometry.Descending, geometry.Right)},
		{m, orbitLook(42, geometry.Ascending, geometry.Left)},
		{m, orbitLook(50, geometry.Descending, geometry.Left)},
		{cold, orbitLook(28, geometry.Ascending, geometry.Right)},
		{cold, orbitLook(38, geometry.Descending, geometry.Left)},
		{cold, orbitLook(47, geometry.Descending, geometry.Right)},
		{m, ephemerisLook(t, m, orbitLook(36, geometry.Descending, geometry.Right))},
		{cold, ephemerisLook(t, cold, orbitLook(31, geometry.Ascending, geometry.Left))},
		{m, flightLook(g, [2]float64{500, -50}, [2]float64{-40, -50}, 5500, geometry.Right)},
		{m, flightLook(g, [2]float64{-40, 380}, [2]float64{540, 345}, 8200, geometry.Right)},
		{m, flightLook(g, [2]float64{540, 400}, [2]float64{520, -70}, 4500, geometry.Right)},
		{m, flightLook(g, [2]float64{-80, 100}, [2]float64{560, 190}, 5600, geometry.Left)},
		{cold, flightLook(c, [2]float64{-80, 150}, [2]float64{560, 100}, 7000, geometry.Right)},
		{cold, flightLook(c, [2]float64{-60, 350}, [2]float64{530, 370}, 6200, geometry.Right)},
	} {
		o := mask.DefaultOptions()
		o.OpenEdge = k%2 == 1
		p, err := mask.PlatformOf(s.terrain, s.look)
		require.NoError(t, err)
		w := newTrackWalker(s.terrain, span, s.look, p, o)
		got := march(t, s.terrain, s.terrain.Frame.Whole(), marginLayers, o, s.look)
		answers := w.every(wanted)
		tally := compareTrack(t, w, &got[0], answers)
		margin := compareMargins(w, &got[0], answers)
		t.Logf("%d, %s: %v; %v", k, s.look.Name, tally, margin)
		margins.add(margin)
		all.add(tally)
		assert.LessOrEqual(t, float64(tally.differ), max(mountainDiffer*float64(tally.determined), 1), "%s: cells of another kind", s.look.Name)
		assert.Empty(t, tally.lone, "%s: differing cells alone", s.look.Name)
	}
	t.Logf("all: %v; %v", all, margins)
	assert.LessOrEqual(t, float64(all.differ), mountainDiffer*float64(all.determined), "cells of another kind")
	off := margins.clearOff + margins.mastOff + margins.foldOff
	assert.LessOrEqual(t, float64(off), mountainDiffer*float64(margins.clear+margins.mast+margins.fold), "margins off by more than a row's worth")
	assert.Greater(t, margins.mast, 50)
	assert.LessOrEqual(t, float64(all.guessed), mountainGuessed*float64(all.cells), "cells undetermined in the walk only")
	assert.LessOrEqual(t, float64(all.timid), mountainTimid*float64(all.cells), "cells undetermined in the engine only")
}

// tracked gives a random scene a look from an orbit or a flight line beside it,
// over it or ending abreast of it.
func (s scene) tracked(rng *rand.Rand) scene {
	g := s.terrain.Frame
	centre := g.At(float64(g.Rows-1)/2, float64(g.Cols-1)/2)
	if rng.IntN(2) == 0 {
		pass, side := geometry.Ascending, geometry.Left
		if rng.IntN(2) == 0 {
			pass = geometry.Descending
		}
		if rng.IntN(2) == 0 {
			side = geometry.Right
		}
		s.look = orbitLook(20+40*rng.Float64(), pass, side)
		return s
	}
	top := math.Inf(-1)
	for _, h := range s.terrain.Heights {
		if float64(h) > top {
			top = float64(h)
		}
	}
	if s.options.Ceiling > top {
		top = s.options.Ceiling
	}
	size := math.Hypot(math.Hypot(centre.ColE, centre.ColN)*float64(g.Cols), math.Hypot(centre.RowE, centre.RowN)*float64(g.Rows)) / 2
	course := geometry.Angle(360*rng.Float64()) * deg
	away := size * (2.5*rng.Float64() - 0.5)
	abreast, _ := geometry.Direct(geometry.Place{Lon: centre.Lon, Lat: centre.Lat}, course-90*deg, away)
	l := geometry.NewLook()
	l.Kind, l.Side, l.Height = geometry.Flight, geometry.Right, top+20+size*(0.3+2*rng.Float64())
	l.Start, _ = geometry.Direct(abreast, course+180*deg, size*(0.5+2*rng.Float64()))
	l.End, _ = geometry.Direct(abreast, course, size*(0.5+2*rng.Float64()))
	l.Name = fmt.Sprintf("flight %.1f m up, %.1f m away, course %.2f", l.Height, away, course.Degrees())
	s.look = l
	return s
}

// tracksLone is the share of cells that may be alone, and tracksLoneBelow that of cells
// that are seen within belowAngle of the downward vertical, where a look has no range
// to speak of: on white terrain lanes have little in common. Mountains have none
// (TestPlatformsAgainstWalk).
const (
	tracksLone      = 1e-4
	tracksLoneBelow = 5e-4
	belowAngle      = 11 * math.Pi / 180
)

func TestRandomGridsFromTracks(t *testing.T) {
	scenes := 120
	if *walkFull {
		scenes *= 10
	}
	var all tally
	smallest := math.MaxInt
	for k := range scenes {
		rng := rand.New(rand.NewPCG(*walkSeed, uint64(k)+1<<32))
		s := randomScene(rng).tracked(rng)
		span, err := dem.Scan(context.Background(), s.terrain)
		require.NoError(t, err)
		p, err := mask.PlatformOf(s.terrain, s.look)
		require.NoError(t, err)
		w := newTrackWalker(s.terrain, span, s.look, p, s.options)
		got := march(t, s.terrain, s.terrain.Frame.Whole(), marginLayers, s.options, s.look)
		c := compareTrack(t, w, &got[0], w.every(anyCell))
		all.add(c)
		if size := len(s.terrain.Heights); len(c.lone) > 0 && size < smallest {
			smallest = size
			t.Logf("seed %d, grid %d: %v, %s\n%s\nheights %v", *walkSeed, k, s, s.look.Name, strings.Join(c.lone, "\n"), short(s.terrain.Heights))
		}
	}
	t.Logf("seed %d, %d grids: %v", *walkSeed, scenes, all)
	t.Logf("of those alone, %d are almost below the platform", all.below)
	assert.Less(t, float64(len(all.lone)-all.below), tracksLone*float64(all.cells), "differing cells alone")
	assert.Less(t, float64(all.below), tracksLoneBelow*float64(all.cells), "differing cells alone almost below the platform")
	assert.Less(t, float64(all.differ), randomDiffer*float64(all.determined), "cells of another kind")
	assert.Less(t, float64(all.guessed), randomGuessed*float64(all.cells), "cells undetermined in the walk only")
	assert.Less(t, float64(all.timid), randomTimid*float64(all.cells), "cells undetermined in the engine only")
}
