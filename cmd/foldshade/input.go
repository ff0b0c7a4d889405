package main

import (
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"foldshade/cmd/internal/lookfile"
	"foldshade/dem/raster"
	"foldshade/geometry"
)

// demFlags say how a DEM is to be understood.
type demFlags struct {
	crs, unit string
	band      int
	geoid     string
	offset    float64 // NaN when not given
}

func (d *demFlags) define(cmd *cobra.Command) {
	f := newFlags(cmd)
	f.StringVar(&d.crs, "crs", "", "CRS of the DEM where the file has none or a wrong one:\nEPSG:code, WKT or a PROJ string")
	f.Var(&whole{&d.band, 1, 65535}, "band", "the band with the heights, 1 to 65535;\nby default the first that can hold heights")
	f.StringVar(&d.unit, "vertical-unit", "", "unit of the heights where the file does not say it:\nm, ft, us-ft, cm, dm, mm or km; by default m")
	f.StringVar(&d.geoid, "geoid", "", "raster of geoid undulations in metres, added to the\nheights of the DEM to make them ellipsoidal")
	d.offset = math.NaN()
	f.Var(&decimal{&d.offset, -1000, 1000, "metres"}, "height-offset", "metres added to the heights in place of a geoid,\n-1000 to 1000; 0 says that they are ellipsoidal")
	inGroup(cmd, groupInput, "crs CRS", "band N", "vertical-unit UNIT", "geoid FILE", "height-offset METRES")
}

// open opens a DEM that may hold its heights in so many bytes.
func (d *demFlags) open(name string, hold int64) (*raster.DEM, error) {
	if name == "" {
		return nil, usagef("DEM is empty; give the path or the GDAL name of a raster")
	}
	o := raster.Options{CRS: d.crs, Band: d.band, VerticalUnit: d.unit, Geoid: d.geoid, HoldBytes: hold}
	if !math.IsNaN(d.offset) {
		if d.geoid != "" {
			return nil, hint(usagef("--geoid and --height-offset are both given"), "give one of them")
		}
		o.HeightOffset = &d.offset
	}
	src, err := raster.Open(name, o)
	if err != nil {
		return nil, err
	}
	return src, nil
}

// warn prints warnings, one a line.
func warn(w io.Writer, warnings []string) {
	for _, text := range warnings {
		fmt.Fprintf(w, "warning: %s\n", oneLine(text))
	}
}

// lookFlags are the looks of a job.
type lookFlags struct {
	looks []string
	file  string
}

func (l *lookFlags) define(cmd *cobra.Command) {
	f := newFlags(cmd)
	f.StringArrayVar(&l.looks, "look", nil, "one look; repeat the flag for more. A fixed look takes\nincidence (degrees at the ground) with azimuth (where the\nradar looks, degrees clockwise from true north), or\nheading with side; docs/looks.md has the other kinds")
	f.StringVar(&l.file, "looks", "", "file of looks, .yaml, .yml or .csv, with the same keys")
	inGroup(cmd, groupLook, "look KEY=VALUE,...", "looks FILE")
}

// given reports whether the user gave any look.
func (l *lookFlags) given() bool { return len(l.looks) > 0 || l.file != "" }

// read returns the looks of the flags and of the file, all named.
func (l *lookFlags) read() ([]geometry.Look, error) {
	var flags, file []geometry.Look
	for _, text := range l.looks {
		look, err := lookfile.Flag(text)
		if err != nil {
			return nil, &usageError{err}
		}
		flags = append(flags, look)
	}
	if l.file != "" {
		var err error
		if file, err = lookfile.Read(l.file); err != nil {
			return nil, err
		}
	}
	looks, err := lookfile.Merge(flags, file)
	if err != nil {
		return nil, &usageError{err}
	}
	return looks, nil
}

// drivenOnly refuses the kinds of look that the marching does not serve.
func drivenOnly(looks []geometry.Look) error {
	for _, l := range looks {
		if !l.Driven() {
			return hint(usagef("look %q is of kind %s; layers are computed for %s", l.Name, l.Kind, driven()),
				"`foldshade looks` shows the geometry of this kind")
		}
	}
	return nil
}

// driven lists the kinds that the marching serves.
func driven() string {
	var names []string
	for _, kind := range geometry.DrivenKinds {
		names = append(names, string(kind))
	}
	return strings.Join(names, ", ")
}
