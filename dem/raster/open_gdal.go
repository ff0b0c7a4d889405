package raster

// #cgo pkg-config: gdal
// #include <stdlib.h>
// #include <cpl_conv.h>
// #include <cpl_error.h>
// #include <gdal.h>
// #include <ogr_srs_api.h>
// static void foldshade_quiet(void) { CPLSetErrorHandler(CPLQuietErrorHandler); }
import "C"

import (
	"fmt"
	"os"
	"unsafe"
)

// defaultCache is GDAL's block cache, bytes: a row of 512-cell blocks of a
// float32 mosaic 32,000 cells wide. GDAL's own default is 5 % of the machine.
const defaultCache = 64 << 20

func init() {
	// A few of godal's calls do not pass a handler; GDAL would print there.
	C.foldshade_quiet()
	if os.Getenv("GDAL_CACHEMAX") == "" {
		SetCache(defaultCache)
	}
}

// SetCache bounds GDAL's block cache, in bytes, at least 1 MiB, for the whole
// process. Without it the bound is GDAL_CACHEMAX from the environment, else
// 64 MiB.
func SetCache(bytes int64) { C.GDALSetCacheMax64(C.GIntBig(max(bytes, 1<<20))) }

// cacheBytes is the bound in force.
func cacheBytes() int64 { return int64(C.GDALGetCacheMax64()) }

// wkt2 rewrites a well-known text of any version as WKT2:2019 (ISO 19162).
func wkt2(text string) (string, error) {
	in := C.CString(text)
	defer C.free(unsafe.Pointer(in))
	sr := C.OSRNewSpatialReference(nil)
	defer C.OSRRelease(sr)
	at := in
	if e := C.OSRImportFromWkt(sr, &at); e != C.OGRERR_NONE {
		return "", fmt.Errorf("GDAL does not understand it, code %d", int(e))
	}
	format := C.CString("FORMAT=WKT2_2019")
	defer C.free(unsafe.Pointer(format))
	options := [2]*C.char{format, nil}
	var out *C.char
	e := C.OSRExportToWktEx(sr, &out, &options[0])
	defer C.CPLFree(unsafe.Pointer(out))
	if e != C.OGRERR_NONE {
		return "", fmt.Errorf("it cannot be written as WKT2, code %d", int(e))
	}
	return C.GoString(out), nil
}

// areaOfUse returns where a CRS of the registry is meant for, degrees: west,
// south, east, north; west is larger when the area crosses the antimeridian.
func areaOfUse(code string) (west, south, east, north float64, ok bool) {
	in := C.CString(code)
	defer C.free(unsafe.Pointer(in))
	sr := C.OSRNewSpatialReference(nil)
	defer C.OSRRelease(sr)
	if C.OSRSetFromUserInput(sr, in) != C.OGRERR_NONE {
		return 0, 0, 0, 0, false
	}
	var w, s, e, n C.double
	var name *C.char                                                   // belongs to sr
	if C.OSRGetAreaOfUse(sr, &w, &s, &e, &n, &name) == 0 || w < -180 { // -1000 when unknown
		return 0, 0, 0, 0, false
	}
	return float64(w), float64(s), float64(e), float64(n), true
}
