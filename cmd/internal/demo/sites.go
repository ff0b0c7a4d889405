package demo

import (
	"fmt"
	"math"
	"strings"

	"foldshade/geometry"
)

// GeoJSON returns the sites as a GeoJSON feature collection in WGS84
// longitude and latitude (RFC 7946), rounded to 1e-6 degrees, about 0.1 m.
func (v *Valley) GeoJSON() string {
	var b strings.Builder
	b.WriteString("{\n  \"type\": \"FeatureCollection\",\n  \"features\": [\n")
	for k, s := range v.Sites {
		lon, lat := lonLat(s.X, s.Y)
		fmt.Fprintf(&b, "    {\"type\": \"Feature\",\n")
		fmt.Fprintf(&b, "     \"properties\": {\"name\": %q, \"kind\": %q, \"note\": %q},\n", s.Name, s.Kind, s.Note)
		fmt.Fprintf(&b, "     \"geometry\": {\"type\": \"Point\", \"coordinates\": [%.6f, %.6f]}}", lon, lat)
		if k < len(v.Sites)-1 {
			b.WriteString(",")
		}
		b.WriteString("\n")
	}
	b.WriteString("  ]\n}\n")
	return b.String()
}

// lonLat inverts UTM zone 24 north: easting and northing in metres to WGS84
// degrees. The series in the third flattening n,
//
//	xi' = xi - sum beta_j sin(2 j xi) cosh(2 j eta),  eta' likewise,
//
// with the conformal latitude undone by its own series in sin(2 j chi).
// Source: Krueger 1912 in the form of Karney 2011, Transverse Mercator with
// an accuracy of a few nanometers, eqs. 11 and 36 (from memory). Three terms
// err by less than a millimetre here.
func lonLat(x, y float64) (lon, lat float64) {
	const n = geometry.Flattening / (2 - geometry.Flattening)
	const radius = geometry.SemiMajor / (1 + n) * (1 + n*n/4 + n*n*n*n/64)
	beta := [3]float64{n/2 - 2*n*n/3 + 37*n*n*n/96, n*n/48 + n*n*n/15, 17 * n * n * n / 480}
	delta := [3]float64{2*n - 2*n*n/3 - 2*n*n*n, 7*n*n/3 - 8*n*n*n/5, 56 * n * n * n / 15}
	xi0, eta0 := y/(0.9996*radius), (x-500000)/(0.9996*radius)
	xi, eta := xi0, eta0
	for j, b := range beta {
		k := float64(2 * (j + 1))
		xi -= b * math.Sin(k*xi0) * math.Cosh(k*eta0)
		eta -= b * math.Cos(k*xi0) * math.Sinh(k*eta0)
	}
	chi := math.Asin(math.Sin(xi) / math.Cosh(eta))
	phi := chi
	for j, d := range delta {
		phi += d * math.Sin(float64(2*(j+1))*chi)
	}
	const centralMeridian = -39
	lambda := math.Atan2(math.Sinh(eta), math.Cos(xi))
	return centralMeridian + geometry.Angle(lambda).Degrees(), geometry.Angle(phi).Degrees()
}
