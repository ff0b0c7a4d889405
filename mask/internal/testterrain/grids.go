package testterrain

import (
	"fmt"
	"math"

	"foldshade/dem"
	"foldshade/geometry"
)

// GeographicCRS and ProjectedCRS are well-known texts for grids that no file
// stands behind.
const (
	GeographicCRS = `GEOGCRS["WGS 84",DATUM["World Geodetic System 1984",ELLIPSOID["WGS 84",6378137,298.257223563,LENGTHUNIT["metre",1]]],CS[ellipsoidal,2],AXIS["longitude",east],AXIS["latitude",north],ANGLEUNIT["degree",0.0174532925199433]]`
	ProjectedCRS  = `ENGCRS["test plane",EDATUM["test plane"],CS[Cartesian,2],AXIS["easting",east],AXIS["northing",north],LENGTHUNIT["metre",1]]`
)

// Metric returns a grid of width x height metre cells centred on the point
// where the equator meets the Greenwich meridian. Its map axes are turned
// clockwise by turn: the map's Y axis points to the true azimuth turn. One
// metre of map is one metre of ground, to 1 part in 10^7 within 3 km of the
// centre: the parallel shrinks by lat^2 / 2, lat = 3 km / 6378 km.
func Metric(rows, cols int, width, height float64, turn geometry.Angle) *dem.Grid {
	transform := [6]float64{-float64(cols) * width / 2, width, 0, float64(rows) * height / 2, 0, -height}
	perEast := geometry.Angle(1 / geometry.PrimeVerticalRadius(0)).Degrees()
	perNorth := geometry.Angle(1 / geometry.MeridianRadius(0)).Degrees()
	sin, cos := turn.Sin(), turn.Cos()
	return must(dem.NewGrid(rows, cols, transform, ProjectedCRS, func(x, y []float64) error {
		for i := range x {
			east, north := x[i]*cos+y[i]*sin, y[i]*cos-x[i]*sin
			x[i], y[i] = east*perEast, north*perNorth
		}
		return nil
	}))
}

// Geographic returns a grid in longitude and latitude: cells of width x height
// degrees, the outer corner of the first one at lon, lat degrees.
func Geographic(rows, cols int, width, height, lon, lat float64) *dem.Grid {
	transform := [6]float64{lon, width, 0, lat, 0, -height}
	return must(dem.NewGrid(rows, cols, transform, GeographicCRS, func(x, y []float64) error { return nil }))
}

// Transverse returns a grid in the transverse Mercator projection of the WGS84
// ellipsoid, central meridian in degrees, scale 0.9996 on it, false easting
// 500 km: square cells, the outer corner of the first one at x, y.
func Transverse(rows, cols int, cell, x, y, meridian float64) *dem.Grid {
	transform := [6]float64{x, cell, 0, y, 0, -cell}
	return must(dem.NewGrid(rows, cols, transform, ProjectedCRS, func(x, y []float64) error {
		for i := range x {
			x[i], y[i] = transverseInverse(x[i], y[i], meridian)
		}
		return nil
	}))
}

// transverseInverse returns longitude and latitude in degrees:
//
//	mu   = y / (k0 a (1 - e2/4 - 3 e4/64 - 5 e6/256))
//	phi1 = mu + (3 e1/2 - 27 e1^3/32) sin 2mu + (21 e1^2/16) sin 4mu + (151 e1^3/96) sin 6mu
//
// and the series in D = x / (N1 k0). Source: Snyder, Map Projections: A
// Working Manual, USGS Professional Paper 1395, 1987, eq. 8-17 to 8-25 and
// 3-26 (from memory; the test compares with PROJ).
func transverseInverse(x, y, meridian float64) (lon, lat float64) {
	const k0, e2 = 0.9996, geometry.Flattening * (2 - geometry.Flattening)
	mu := y / (k0 * geometry.SemiMajor * (1 - e2/4 - 3*e2*e2/64 - 5*e2*e2*e2/256))
	e1 := (1 - math.Sqrt(1-e2)) / (1 + math.Sqrt(1-e2))
	phi1 := mu + (3*e1/2-27*e1*e1*e1/32)*math.Sin(2*mu) +
		21*e1*e1/16*math.Sin(4*mu) + 151*e1*e1*e1/96*math.Sin(6*mu)
	cos, tan := math.Cos(phi1), math.Tan(phi1)
	ep2 := e2 / (1 - e2)
	c, t := ep2*cos*cos, tan*tan
	n := geometry.PrimeVerticalRadius(geometry.Angle(phi1))
	m := geometry.MeridianRadius(geometry.Angle(phi1))
	d := (x - 500000) / (n * k0)
	phi := phi1 - n*tan/m*(d*d/2-
		(5+3*t+10*c-4*c*c-9*ep2)*math.Pow(d, 4)/24+
		(61+90*t+298*c+45*t*t-252*ep2-3*c*c)*math.Pow(d, 6)/720)
	lambda := (d - (1+2*t+c)*d*d*d/6 +
		(5-2*c+28*t-3*c*c+8*ep2+24*t*t)*math.Pow(d, 5)/120) / cos
	return meridian + geometry.Angle(lambda).Degrees(), geometry.Angle(phi).Degrees()
}

// must panics on an error: a test grid that cannot be laid out is a mistake
// in the test.
func must(g *dem.Grid, err error) *dem.Grid {
	if err != nil {
		panic(fmt.Sprintf("testterrain: %v", err))
	}
	return g
}

// Ground returns where a cell's centre lies: metres east and north of the
// middle of the grid, by the ground vectors there.
func Ground(g *dem.Grid, row, col float64) (east, north float64) {
	r0, c0 := float64(g.Rows-1)/2, float64(g.Cols-1)/2
	l := g.At(r0, c0)
	return (col-c0)*l.ColE + (row-r0)*l.RowE, (col-c0)*l.ColN + (row-r0)*l.RowN
}

// Sample takes the heights of a surface at the cell centres of a grid.
func Sample(g *dem.Grid, height func(east, north float64) float64) *dem.Memory {
	m := &dem.Memory{Frame: g, Heights: make([]float32, g.Rows*g.Cols)}
	for i := range m.Heights {
		m.Heights[i] = float32(height(Ground(g, float64(i/g.Cols), float64(i%g.Cols))))
	}
	return m
}
