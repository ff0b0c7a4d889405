// Package picture draws class rasters as maps for people: hillshade under the
// classes, with legend, scale, north, the look's direction and site names.
package picture

import (
	"errors"
	"fmt"
	"image/png"
	"io"

	"foldshade/dem"
	"foldshade/geometry"
)

// Map is one map: an elevation grid and what a look makes of it.
type Map struct {
	Title    string // one line; empty for the look's name
	Subtitle string // one line under the title; may be empty
	Grid     *dem.Grid
	Heights  []float32 // row-major, metres, NaN where there is none
	Classes  []uint8   // row-major class codes as in the verdict layer; nil for plain hillshade
	Look     Look
	Sites    []Site
}

// Look is the direction that a map's arrows show. Angles that are not given
// are left out of the picture.
type Look struct {
	Name      string
	Incidence geometry.Angle
	Azimuth   geometry.Angle // horizontal, radar to ground, from true north
}

// Site is a named place in map units of the grid's CRS.
type Site struct {
	Name string
	X, Y float64
}

// Panel is several maps of the same ground side by side, which share one
// legend, scale and north arrow. The first map's grid gives the scale.
type Panel struct {
	Title, Subtitle string
	Maps            []Map
}

// Render writes a map as PNG. Any size of grid will do: the map itself is at
// most 1240 pixels wide and 1000 high. It returns an error when the slices do
// not fit the grid, and those of w.
func Render(w io.Writer, m Map) error {
	if err := m.check(); err != nil {
		return err
	}
	p := layoutMap(m)
	return png.Encode(w, p.draw())
}

// RenderPanel writes a panel as PNG, up to three maps in a row.
func RenderPanel(w io.Writer, panel Panel) error {
	if n := len(panel.Maps); n < 1 || n > 12 {
		return fmt.Errorf("picture: a panel of %d maps: 1 to 12 are possible", n)
	}
	for _, m := range panel.Maps {
		if err := m.check(); err != nil {
			return err
		}
	}
	p := layoutPanel(panel)
	return png.Encode(w, p.draw())
}

func (m *Map) check() error {
	if m.Grid == nil {
		return errors.New("picture: a map needs a grid")
	}
	n := m.Grid.Rows * m.Grid.Cols
	if len(m.Heights) != n || m.Classes != nil && len(m.Classes) != n {
		return fmt.Errorf("picture: %d heights and %d classes for %d cells", len(m.Heights), len(m.Classes), n)
	}
	return nil
}

func (m *Map) title() string {
	if m.Title != "" {
		return m.Title
	}
	return m.Look.Name
}
