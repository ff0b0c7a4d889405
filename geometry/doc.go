// Package geometry holds the radar's side of foldshade: the earth, frequency
// bands, the five kinds of look, and the quantities of a single ground point.
// It is pure Go and imports neither the DEM nor the masks.
//
// # Conventions, written once
//
// Every function in this module refers to these.
//
//   - Angles are of type Angle, radians. Lengths are float64 metres,
//     frequencies hertz.
//   - NaN stands for "not given" in a parameter and "no data" in a value.
//   - Azimuths are horizontal directions, clockwise from true north, in
//     [0, 360) degrees. The look azimuth points from the antenna to the
//     ground. Heading is the platform's direction of travel, same zero and
//     sense: right-looking azimuth = heading + 90, left-looking = heading - 90.
//   - Incidence is the angle at the ground point between the ellipsoid's
//     outward normal and the direction to the antenna, in [0, 180] degrees.
//     Local incidence is the same against the terrain's outward normal.
//   - The look angle is the angle at the antenna between nadir and the target.
//   - East, north, up is the local frame at the ground point on the WGS84
//     ellipsoid. The line of sight is the unit vector from the ground to the
//     antenna in that frame.
//   - A slope is given by the gradient (dz/dEast, dz/dNorth) in metres of
//     height per metre of ground.
//   - s is ground distance along a range line, growing away from the radar.
package geometry
