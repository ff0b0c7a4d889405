package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
)

// looksJob is one run of `foldshade looks`.
type looksJob struct {
	dem    demFlags
	looks  lookFlags
	name   string // of the DEM
	at     geometry.Place
	memory int64
	asJSON bool
}

func newLooks() *cobra.Command {
	job := &looksJob{at: geometry.Place{Lon: geometry.NotGiven, Lat: geometry.NotGiven}, memory: defaultMemory}
	cmd := &cobra.Command{
		Use:   "looks (--look KEY=VALUE,... | --looks FILE) [--at LON/LAT] [--dem DEM]",
		Short: "the geometry of looks at a place or over a DEM, and the DEM they need",
		Long: `looks resolves each look and prints from where, and at which angles, it sees the
ground: at a place on the ellipsoid, or at the near edge, the centre and the far
edge of a DEM, on the line through its centre in the direction of the look. With a
DEM it also says how far terrain beyond the area of interest can matter: cut the DEM
that much larger on either side, and no cell of the area is undetermined for its edge,
unless ground outside is higher or lower than all that the DEM shows.

The heading and the height of the antenna are those of the moment abreast of the
centre or the place. Times are there for an ephemeris alone: UTC, and local mean
solar time at the centre.`,
		Example: `  foldshade looks --look kind=orbit,incidence=38,altitude_km=620,heading=347,side=right --at 10.5/46.2
  foldshade looks --look name=line,kind=flight,start=-40.19/46.99,end=-40.19/47.05,height=5200,side=right \
      --dem valley/valley.tif
  foldshade looks --looks valley/looks.yaml --dem valley/valley.tif --json`,
		Args: exactly(),
		RunE: func(cmd *cobra.Command, _ []string) error {
			found, err := job.run(cmd.Context(), cmd.ErrOrStderr())
			if err != nil {
				return err
			}
			if job.asJSON {
				return printJSON(cmd.OutOrStdout(), found)
			}
			for i := range found {
				if i > 0 {
					fmt.Fprintln(cmd.OutOrStdout())
				}
				found[i].print(cmd.OutOrStdout())
			}
			return nil
		},
		DisableFlagsInUseLine: true,
	}
	job.looks.define(cmd)
	f := newFlags(cmd)
	f.StringVar(&job.name, "dem", "", "DEM over which the looks are resolved")
	f.Var(&placeFlag{&job.at}, "at", "place at which to show the geometry, longitude first,\ndegrees in WGS84; at the DEM's height with --dem,\nelse on the ellipsoid")
	inGroup(cmd, groupInput, "dem DEM", "at LON/LAT")
	job.dem.define(cmd)
	f.BoolVar(&job.asJSON, "json", false, "print JSON in place of tables")
	inGroup(cmd, groupOutput, "json")
	f.Var(&size{&job.memory, leastMemory, mostMemory}, "memory", memoryHelp)
	inGroup(cmd, groupMachine, "memory SIZE")
	return cmd
}

// placeFlag is a flag that takes LON/LAT in degrees.
type placeFlag struct{ value *geometry.Place }

func (p *placeFlag) Set(s string) error {
	const accepted = "accepted is LON/LAT in degrees, longitude -180 to 180 first, then latitude -90 to 90"
	lon, lat, ok := strings.Cut(s, "/")
	if !ok {
		return fmt.Errorf("no slash between longitude and latitude; %s", accepted)
	}
	var v [2]float64
	for i, text := range [2]string{lon, lat} {
		var err error
		if v[i], err = parseDecimal(strings.TrimSpace(text)); err != nil {
			return fmt.Errorf("%q: %w; %s", text, err, accepted)
		}
	}
	if math.Abs(v[0]) > 180 || math.Abs(v[1]) > 90 {
		return fmt.Errorf("out of range; %s", accepted)
	}
	*p.value = geometry.Place{Lon: geometry.Angle(v[0]) * geometry.Degree, Lat: geometry.Angle(v[1]) * geometry.Degree}
	return nil
}

func (p *placeFlag) String() string { return "" }

func (p *placeFlag) Type() string { return "place" }

// lookGeometry is what the command prints of a look, as JSON has it: degrees and
// metres, null for what a look does not have.
type lookGeometry struct {
	Look     string            `json:"look"`
	Kind     string            `json:"kind"`
	Keys     map[string]string `json:"keys"`
	Heading  *float64          `json:"heading"`
	Altitude *float64          `json:"antenna_height"` // above the ellipsoid
	Speed    *float64          `json:"ground_fixed_speed_m_s"`
	UTC      string            `json:"utc,omitempty"`
	Local    string            `json:"local_mean_solar_time,omitempty"`
	Spots    []spot            `json:"places"`
	Reach    *neededReach      `json:"reach"`
	Warnings []string          `json:"warnings"`
}

// spot is how a look sees one place.
type spot struct {
	Place      string   `json:"place"`
	Lon        float64  `json:"longitude"`
	Lat        float64  `json:"latitude"`
	Height     float64  `json:"height"`
	Incidence  *float64 `json:"incidence"`
	Azimuth    *float64 `json:"azimuth"`
	LookAngle  *float64 `json:"look_angle"`
	SlantRange *float64 `json:"slant_range"`
	Spacing    *float64 `json:"ground_spacing"` // of one slant resolution cell, level ground
	Seen       bool     `json:"seen"`
	Why        string   `json:"why_not,omitempty"`
}

// neededReach says how far terrain outside an area can matter to it, metres of
// ground; null where there is no end to it. On the radar's side the two reaches
// add up: what may share a cell's slant range may itself be hidden. Of a tripod all
// ground up to the radar can matter.
type neededReach struct {
	Relief    float64    `json:"relief"`
	Shadow    *float64   `json:"shadow_towards_radar"`
	Towards   *float64   `json:"layover_towards_radar"`
	Away      *float64   `json:"layover_away_from_radar"`
	NearSide  *float64   `json:"dem_needed_towards_radar"`
	FarSide   *float64   `json:"dem_needed_away_from_radar"`
	Incidence [2]float64 `json:"incidence_least_most"` // over the DEM
}

func (j *looksJob) run(ctx context.Context, stderr io.Writer) ([]lookGeometry, error) {
	looks, err := j.looks.read()
	if err != nil {
		return nil, err
	}
	if j.name == "" {
		return j.atPlace(looks)
	}
	b := split(j.memory)
	defer b.apply()()
	src, err := j.dem.open(j.name, b.heights)
	if err != nil {
		return nil, err
	}
	defer func() { _ = src.Close() }() // opened for reading only
	found, err := src.Survey(ctx)
	if err != nil {
		return nil, err
	}
	var all []lookGeometry
	for _, look := range looks {
		o, err := overDEM(src, look)
		if err != nil {
			return nil, err
		}
		l, err := j.overDEM(o, src, found)
		if err != nil {
			return nil, err
		}
		all = append(all, l)
	}
	if !j.asJSON {
		warn(stderr, src.Warnings())
	}
	return all, nil
}

// atPlace resolves looks at --at, or at their own anchor.
func (j *looksJob) atPlace(looks []geometry.Look) ([]lookGeometry, error) {
	var all []lookGeometry
	for _, look := range looks {
		at := j.at
		if !at.Given() {
			at = look.Anchor
		}
		if !at.Given() {
			return nil, hint(usagef("look %q: no place to show its geometry at", look.Name), "give --at LON/LAT or --dem DEM")
		}
		o, err := overPlace(at, look)
		if err != nil {
			return nil, err
		}
		l := o.describe(geometry.Geodetic{Place: at})
		l.add(o, "place", geometry.Geodetic{Place: at})
		all = append(all, l)
	}
	return all, nil
}

// overDEM describes a look over a DEM.
func (j *looksJob) overDEM(o *geometryOf, src *raster.DEM, found dem.Range) (lookGeometry, error) {
	g := src.Grid()
	row, col := float64(g.Rows-1)/2, float64(g.Cols-1)/2
	middle := (found.Min + found.Max) / 2
	centre := position(src, row, col, middle)
	l := o.describe(centre)
	l.Warnings = append(l.Warnings, src.Warnings()...)
	v, _ := o.view(centre)
	if near, far, ok := chord(g, row, col, v.LookAzimuth); ok {
		l.add(o, "near edge", position(src, near[0], near[1], middle))
		l.add(o, "centre", centre)
		l.add(o, "far edge", position(src, far[0], far[1], middle))
	} else {
		l.add(o, "centre", centre)
	}
	if j.at.Given() {
		row, col, ok := g.Find(j.at.Lon, j.at.Lat)
		if !ok {
			return l, usagef("--at %s: lies outside the DEM; leave --dem out to see the geometry there", placeText(j.at))
		}
		l.add(o, "place", position(src, row, col, middle))
	}
	relief := found.Max - found.Min
	if s := o.over(g, found.Min, found.Max, relief); s.seen > 0 {
		l.Reach = &neededReach{
			Relief: rounded(relief, 3), Shadow: finite(s.reach.shadow, 1), Towards: finite(s.reach.towards, 1), Away: finite(s.reach.away, 1),
			NearSide: finite(s.reach.shadow+s.reach.towards, 1), FarSide: finite(s.reach.away, 1),
			Incidence: [2]float64{rounded(s.least.Degrees(), 4), rounded(s.most.Degrees(), 4)},
		}
		if o.look.Kind == geometry.Tripod { // nothing lies beyond the radar
			l.Reach.Towards, l.Reach.NearSide = l.Reach.Shadow, l.Reach.Shadow
		}
	}
	return l, nil
}

// chord returns where the line through a grid position along an azimuth enters
// and leaves the cell centres of the grid, from the radar's side to the other.
func chord(g *dem.Grid, row, col float64, azimuth geometry.Angle) (near, far [2]float64, ok bool) {
	if math.IsNaN(float64(azimuth)) {
		return near, far, false
	}
	l := g.At(row, col)
	e, n := azimuth.Sin(), azimuth.Cos()
	det := l.ColE*l.RowN - l.ColN*l.RowE
	dr, dc := (l.ColE*n-l.ColN*e)/det, (e*l.RowN-n*l.RowE)/det
	d := math.Min((float64(g.Rows-1)-row)/math.Abs(dr), (float64(g.Cols-1)-col)/math.Abs(dc))
	return [2]float64{row - d*dr, col - d*dc}, [2]float64{row + d*dr, col + d*dc}, true
}

// describe fills what a look has once: the antenna abreast of a point.
func (o *geometryOf) describe(p geometry.Geodetic) lookGeometry {
	l := lookGeometry{Look: o.look.Name, Kind: string(o.look.Kind), Keys: map[string]string{}, Warnings: []string{}}
	for _, pair := range o.look.Pairs() {
		l.Keys[pair.Key] = pair.Value
	}
	if o.platform == nil {
		l.Heading = finite(o.look.Heading.Degrees(), 6)
		return l
	}
	v, _ := o.view(p)
	if math.IsNaN(v.T) {
		return l
	}
	pose := geometry.PoseAt(o.platform, v.T)
	l.Altitude = finite(pose.Foot.Height, 3)
	if o.look.Kind != geometry.Tripod {
		l.Heading = finite(math.Mod(rounded(pose.Heading.Degrees(), 6), 360), 6)
	}
	if o.look.Kind == geometry.Orbit || o.look.Kind == geometry.Ephemeris {
		l.Speed = finite(pose.Speed, 3)
	}
	if utc, ok := o.platform.Time(v.T); ok {
		l.UTC = utc.Format("2006-01-02T15:04:05.000Z")
		l.Local = geometry.LocalTime(utc, p.Lon).Format(time.TimeOnly)
	}
	return l
}

// add appends how the look sees a point.
func (l *lookGeometry) add(o *geometryOf, name string, p geometry.Geodetic) {
	v, seen := o.view(p)
	s := spot{
		Place: name, Lon: rounded(p.Lon.Degrees(), 7), Lat: rounded(p.Lat.Degrees(), 7), Height: rounded(p.Height, 3),
		Incidence: finite(v.Incidence.Degrees(), 4), Azimuth: finite(v.LookAzimuth.Degrees(), 4),
		LookAngle: finite(v.LookAngle.Degrees(), 4), SlantRange: finite(v.SlantRange, 2),
		Spacing: finite(geometry.SlantResolution(o.look.Bandwidth)/v.Incidence.Sin(), 3),
		Seen:    seen == geometry.InView,
	}
	if !s.Seen {
		s.Why = o.why(p, &v, seen)
	}
	l.Spots = append(l.Spots, s)
}

func placeText(p geometry.Place) string {
	return strconv.FormatFloat(rounded(p.Lon.Degrees(), 7), 'f', -1, 64) + "/" + strconv.FormatFloat(rounded(p.Lat.Degrees(), 7), 'f', -1, 64)
}

func (l *lookGeometry) print(w io.Writer) {
	pairs := [][2]string{{"look", l.Look + ", kind " + l.Kind}}
	pair := func(name string, v *float64, format string) {
		if v != nil {
			pairs = append(pairs, [2]string{name, fmt.Sprintf(format, *v)})
		}
	}
	pair("heading", l.Heading, "%.3f degrees")
	pair("antenna", l.Altitude, "%.1f m above the ellipsoid")
	pair("speed", l.Speed, "%.1f m/s against the turning earth")
	if l.UTC != "" {
		pairs = append(pairs, [2]string{"time", l.UTC + ", " + l.Local + " local mean solar time"})
	}
	if r := l.Reach; r != nil {
		near := text(r.NearSide, "%.0f m") + " beyond the area on the radar's side"
		if l.Kind == string(geometry.Tripod) {
			near = "all between the radar and the area, " + text(r.NearSide, "%.0f m") + " at most"
		}
		if l.Kind != string(geometry.Tripod) { // which looks at every angle, from its own foot on
			pairs = append(pairs, [2]string{"incidence", fmt.Sprintf("%.3f to %.3f degrees over the DEM", r.Incidence[0], r.Incidence[1])})
		}
		pairs = append(pairs,
			[2]string{"reach", fmt.Sprintf("shadow %s, layover %s towards the radar and %s away from it, relief %.0f m",
				text(r.Shadow, "%.0f m"), text(r.Towards, "%.0f m"), text(r.Away, "%.0f m"), r.Relief)},
			[2]string{"DEM needed", fmt.Sprintf("%s, %s on the far side", near, text(r.FarSide, "%.0f m"))})
	}
	printPairs(w, pairs)
	fmt.Fprintln(w)
	head := []string{"place", "longitude", "latitude", "height", "incidence", "azimuth", "look angle", "slant range km", "ground spacing m"}
	var rows [][]string
	for _, s := range l.Spots {
		km := s.SlantRange
		if km != nil {
			v := *km / 1e3
			km = &v
		}
		rows = append(rows, []string{s.Place, fmt.Sprintf("%.5f", s.Lon), fmt.Sprintf("%.5f", s.Lat), fmt.Sprintf("%.1f", s.Height),
			text(s.Incidence, "%.3f"), text(s.Azimuth, "%.3f"), text(s.LookAngle, "%.3f"), text(km, "%.3f"), text(s.Spacing, "%.2f")})
	}
	printTable(w, head, rows)
	for _, s := range l.Spots {
		if !s.Seen {
			fmt.Fprintf(w, "%s: not seen, %s\n", s.Place, s.Why)
		}
	}
}
