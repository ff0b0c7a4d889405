package mask

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"

	"foldshade/geometry"
	"foldshade/mask/internal/testterrain"
)

// isometric returns the isometric latitude, in which a line of constant azimuth is
// straight. Source: Snyder, Map Projections: A Working Manual, USGS Professional Paper
// 1395, 1987, eq. 3-7 (from memory).
func isometric(degrees float64) float64 {
	phi := degrees * math.Pi / 180
	e := math.Sqrt(geometry.Flattening * (2 - geometry.Flattening))
	return math.Asinh(math.Tan(phi)) - e*math.Atanh(e*math.Sin(phi))
}

// On a geographic grid lanes are lines of constant true azimuth, but for what the
// lattice leaves between its nodes: of a curve with a second derivative of b columns,
// b laneStep^2 / 8 at most, and a fifth more, since b changes within the grid and
// lanes do not lie quite evenly between two nodes.
func TestLanesFollowLinesOfConstantAzimuth(t *testing.T) {
	const second = 1. / 3600
	for _, s := range []struct {
		rows, cols         int
		width, height, lat float64
	}{
		{700, 500, second, second, 46},
		{700, 500, 3 * second, second, 70},
		{300, 300, 30 * second, 30 * second, -35},
	} {
		g := testterrain.Geographic(s.rows, s.cols, s.width, s.height, 8, s.lat)
		for _, az := range []float64{17, 78, 135, 191, 304} {
			ln := fixedLanes(g, fixed(40, az))
			tan := math.Tan(az * math.Pi / 180)
			place := func(u, v float64) (lon, psi, lat float64) {
				row, col := ln.cell(u, v)
				lat = s.lat - (row+0.5)*s.height
				return 8 + (col+0.5)*s.width, isometric(lat), lat
			}
			// The second derivatives of longitude by latitude and of latitude by
			// longitude, in columns and rows of the march.
			sin, cos := math.Sincos((s.lat - s.height*float64(s.rows)/2) * math.Pi / 180)
			bend := math.Abs(tan*sin) / (cos * cos) * s.height * s.height / s.width
			if ln.transposed {
				bend = math.Abs(sin*cos) / (tan * tan) * s.width * s.width / s.height
			}
			most := 1.2 * bend * math.Pi / 180 * laneStep * laneStep / 8
			worst := 0.0
			for k := 10.; k < float64(ln.orient.v); k += 23 {
				lon0, psi0, _ := place(ln.mid, k)
				for u := range ln.orient.u {
					v := ln.vAt(float64(u), k)
					if v < 0 || v > float64(ln.orient.v-1) {
						continue
					}
					lon, psi, lat := place(float64(u), v)
					off := (lon-lon0)*math.Pi/180 - tan*(psi-psi0)
					if ln.transposed { // columns of the march are rows of the grid
						const step = 1e-5
						off /= tan * (isometric(lat+step) - isometric(lat-step)) / (2 * step) * s.height
					} else {
						off *= 180 / math.Pi / s.width
					}
					worst = max(worst, math.Abs(off))
				}
			}
			t.Logf("%v degrees, cells of %v degrees, azimuth %v: %.6f columns off of %.6f", s.lat, s.height, az, worst, most)
			assert.Less(t, worst, most, "azimuth %v at latitude %v", az, s.lat)
		}
	}
}
