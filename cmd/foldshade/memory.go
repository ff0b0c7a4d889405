package main

import (
	"runtime/debug"

	"foldshade/dem/raster"
)

// The limits of --memory and its default.
const (
	leastMemory   = 384 << 20
	mostMemory    = 1 << 40
	defaultMemory = 1 << 30
)

// programMemory is what the process takes before it holds any cell: GDAL and
// the libraries it loads, PROJ's tables, the Go runtime and thread stacks.
const programMemory = 128 << 20

// budget parts --memory among all that takes much of it. The whole split is
// here: programMemory for the process itself, then of the rest
//
//	1/16  GDAL's block cache
//	1/4   the DEM's heights, when they fit; else they are read again by window
//	rest  the marching buffers (11/16, or 15/16 when the heights do not fit)
//
// The writers keep no cells: tiles go to scratch files beside the outputs as
// they come, and the rasters are made of those once the marching buffers are
// free. Go's own limit is set to all but GDAL's cache and half of what the
// process takes, most of which is memory of C libraries, so that the collector
// works harder before the sum is passed.
type budget struct{ cache, heights, march, goLimit int64 }

func split(memory int64) budget {
	rest := memory - programMemory
	b := budget{cache: rest / 16, heights: rest / 4}
	b.march = rest - b.cache - b.heights
	b.goLimit = memory - b.cache - programMemory/2
	return b
}

// apply sets the limits that hold for the whole process and returns the
// function that takes Go's back.
func (b budget) apply() (restore func()) {
	raster.SetCache(b.cache)
	before := debug.SetMemoryLimit(b.goLimit)
	return func() { debug.SetMemoryLimit(before) }
}

// forCells moves the part of the heights to the marching when the heights of
// so many cells do not fit.
func (b budget) forCells(cells int64) budget {
	if cells > b.heights/4 {
		b.march += b.heights
		b.heights = 0
	}
	return b
}
