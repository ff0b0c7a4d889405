package demo

// Looks is the text of the demo's looks.yaml.
const Looks = `# Three looks at the Oltrenza valley. The radars are invented.
#
# A look says from where a radar sees the ground. The kind "fixed" is a plane
# wave: the same direction over the whole map, good for a first answer.
# Angles are degrees, azimuths and headings count clockwise from true north.
# Copy a block, change the numbers, and run foldshade again with --looks.

looks:
  # Heading is the platform's direction of travel. A radar that travels north
  # and looks to its right looks east: azimuth = heading + 90.
  - name: east-looking
    kind: fixed
    incidence: 39        # from the vertical at the ground; small is steep
    heading: 349
    side: right

  # The other half of the orbit, travelling south: slopes that fold in the
  # first look lie open here, and the other way round.
  - name: west-looking
    kind: fixed
    incidence: 34
    heading: 191
    side: right

  # An aircraft north-west of the valley, at a grazing look: little folds, much
  # is hidden. The azimuth may stand in place of heading and side: it points
  # from the radar to the ground.
  - name: plane-south-east
    kind: fixed
    incidence: 61
    azimuth: 148
    slant_range_km: 8.5  # to the centre of the map, at height 0
`
