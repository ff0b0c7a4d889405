// Package raster is where GDAL ends: it opens elevation grids of any format
// GDAL reads, and writes the layers. Nothing outside this package sees a GDAL
// handle.
//
// # Reading
//
// Open returns a DEM, a dem.Source of heights in metres with NaN where there
// is no height: nodata values, masks, band scale and offset and feet are
// resolved here. A file that cannot serve is refused by an *InputError, one
// line that names the file, what was found and the next step. What looks
// wrong but may be right is in DEM.Warnings.
//
// GDAL handles are not safe for several goroutines; a DEM holds one handle
// behind one mutex, and copies from memory once it holds the heights.
//
// # GDAL's settings
//
// On start this package bounds GDAL's block cache (see SetCache) and keeps
// GDAL's own text off the standard error: every message reaches the caller as
// an error or a warning instead.
package raster
