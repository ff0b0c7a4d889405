// Package mask marches range lines over an elevation grid and says for every
// cell whether a radar look sees it once, folds it or hides it, and by how
// much. It is pure Go: geometry and the grid type are all it imports.
package mask

import (
	"context"

	"foldshade/dem"
	"foldshade/geometry"
)

// Options steer a Run. The zero value of a float64 is a value: start from
// DefaultOptions.
type Options struct {
	// Ceiling is the highest terrain that may stand where the DEM shows none,
	// metres; NaN for the DEM's own highest cell.
	Ceiling float64
	// HoleHeight is the height taken for holes, metres; NaN when unknown.
	HoleHeight float64
	// OpenEdge says that nothing stands outside the DEM.
	OpenEdge bool
	// CompressedBelow is the foreshortening under which an open cell is
	// compressed in the verdict.
	CompressedBelow float64

	Threads int   // workers; 0 for the number of processors
	Memory  int64 // bytes that buffers may take; 0 for 1 GiB
	Tile    int   // cells a side of a work tile; 0 to choose by memory
}

// Job is one run over a grid.
type Job struct {
	Source  dem.Source
	Range   dem.Range // from dem.Scan over the same source
	Looks   []geometry.Look
	Layers  []Layer
	Window  dem.Window // the output window, inside the grid
	Options Options

	// Emit takes each finished tile of each look. It is called from several
	// goroutines, never twice at once for the same look, in no fixed order.
	// The tile's slices are the callee's until it returns.
	Emit func(look int, t *Tile) error
	// Progress, when not nil, is told of finished work out of all work.
	Progress func(done, all int64)
}

// Tile is a rectangle of results. Window is in cells of the grid, inside the
// job's output window.
type Tile struct {
	Window  dem.Window
	Classes map[Layer][]uint8     // class layers, row-major
	Values  map[Layer][][]float32 // other layers, one slice a band, row-major
}

// Tally counts the cells of one look, by class as in the verdict layer.
type Tally struct {
	Look  string
	Cells map[Class]int64
}

// Run computes the layers for every look and hands out tiles. The results are
// bit-identical for every tile size, number of threads and output window. It
// returns the tallies in the order of the looks, or the first error of the
// source, of Emit or of the context.
func Run(ctx context.Context, job Job) ([]Tally, error) { return nil, context.Canceled }

// DefaultOptions returns the options that hold when the user gives none.
func DefaultOptions() Options {
	return Options{Ceiling: nan, HoleHeight: nan, CompressedBelow: 0.3}
}
