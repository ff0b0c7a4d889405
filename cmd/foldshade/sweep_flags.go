package main

import (
	"errors"
	"fmt"
	"math"
	"os"
	"strings"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// spread is a flag that takes FROM:TO:STEP, or one number, in degrees.
type spread struct {
	value  *[]geometry.Angle
	text   string // what is shown as the default
	lo, hi float64
	below  bool // hi itself is left out
}

func (s *spread) Set(text string) error {
	values, err := s.read(text)
	if err != nil {
		return err
	}
	*s.value, s.text = values, text
	return nil
}

func (s *spread) accepted() string {
	end := "to"
	if s.below {
		end = "to below"
	}
	return fmt.Sprintf("accepted is FROM:TO:STEP or one number, %s %s %s degrees", shortest(s.lo), end, shortest(s.hi))
}

func (s *spread) read(text string) ([]geometry.Angle, error) {
	parts := strings.Split(text, ":")
	if len(parts) != 1 && len(parts) != 3 {
		return nil, fmt.Errorf("found %d parts; %s", len(parts), s.accepted())
	}
	var v [3]float64
	for i, p := range parts {
		var err error
		if v[i], err = parseDecimal(strings.TrimSpace(p)); err != nil {
			return nil, fmt.Errorf("%q: %w; %s", p, err, s.accepted())
		}
	}
	from, to, step := v[0], v[1], v[2]
	if len(parts) == 1 {
		to, step = from, 1
	}
	for _, x := range [2]float64{from, to} {
		if x < s.lo || x > s.hi || s.below && x == s.hi {
			return nil, fmt.Errorf("%s degrees is out of range; %s", shortest(x), s.accepted())
		}
	}
	switch {
	case !(step > 0):
		return nil, fmt.Errorf("the step %s leads nowhere; it must be more than 0", shortest(step))
	case to < from:
		return nil, fmt.Errorf("ends at %s, before it begins at %s; write the smaller number first", shortest(to), shortest(from))
	}
	// A last step that lands on TO but for rounding counts.
	n := math.Floor((to-from)/step + 1e-9)
	if n >= mask.MaxSweepLooks {
		return nil, fmt.Errorf("makes %.0f values; at most %d looks are swept", n+1, mask.MaxSweepLooks)
	}
	var out []geometry.Angle
	for i := range int(n) + 1 {
		out = append(out, geometry.Angle(from+float64(i)*step)*geometry.Degree)
	}
	return out, nil
}

func (s *spread) String() string { return s.text }

func (s *spread) Type() string { return "range" }

// place is the part of a DEM that --area names.
type place struct {
	window dem.Window
	inside []bool // nil for all of the window
	files  []string
}

// sweepArea reads --area: nothing for the whole DEM, a box in map units, or a
// file of polygons.
func sweepArea(text string, g *dem.Grid) (place, error) {
	if text == "" {
		return place{window: g.Whole()}, nil
	}
	_, err := os.Stat(text)
	if strings.Contains(text, ",") && errors.Is(err, os.ErrNotExist) {
		var b box
		var given bool
		if err := (&boxFlag{&b, &given}).Set(text); err != nil {
			return place{}, hint(usagef("--area %q: %w", text, err), "or give the path of a file of polygons")
		}
		w, err := b.window(g)
		return place{window: w}, err
	}
	a, err := raster.ReadArea(text, g)
	if err != nil {
		return place{}, err
	}
	return place{a.Window, a.Inside, a.Files}, nil
}
