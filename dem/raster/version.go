package raster

// #cgo pkg-config: gdal
// #include <ogr_srs_api.h>
import "C"

import (
	"fmt"

	"github.com/airbusgeo/godal"
)

// GDALVersion returns the version of the GDAL library in use, as in "3.6.2".
func GDALVersion() string {
	v := godal.Version()
	return fmt.Sprintf("%d.%d.%d", v.Major(), v.Minor(), v.Revision())
}

// PROJVersion returns the version of the PROJ library that GDAL uses, as in
// "9.1.1".
func PROJVersion() string {
	var major, minor, patch C.int
	C.OSRGetPROJVersion(&major, &minor, &patch)
	return fmt.Sprintf("%d.%d.%d", int(major), int(minor), int(patch))
}
