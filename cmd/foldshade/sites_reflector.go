package main

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"foldshade/geometry"
	"foldshade/mask"
)

// reflectorFlags ask for the corner reflector aid.
type reflectorFlags struct {
	legs   []float64 // inner legs, metres
	ratio  float64   // wanted signal to clutter, dB
	error  float64   // wanted displacement error, millimetres
	sigma0 float64   // of the ground around, dB
	across float64   // azimuth resolution, metres
}

func newReflectorFlags() reflectorFlags {
	nan := math.NaN()
	return reflectorFlags{ratio: nan, error: nan, sigma0: nan, across: nan}
}

// mostLegs is the most leg lengths of a run: each adds columns.
const mostLegs = 8

// decimalList is a flag that takes up to mostLegs numbers from lo to hi.
type decimalList struct {
	values *[]float64
	lo, hi float64
}

func (d *decimalList) Set(s string) error {
	var values []float64
	for _, part := range list(s) {
		v, err := parseDecimal(part)
		if err != nil || v < d.lo || v > d.hi {
			return fmt.Errorf("accepted are numbers from %s to %s with commas between them", shortest(d.lo), shortest(d.hi))
		}
		if slices.Contains(values, v) {
			return fmt.Errorf("%s stands there twice", shortest(v))
		}
		values = append(values, v)
	}
	if len(values) > mostLegs {
		return fmt.Errorf("found %d numbers; accepted are %d at most", len(values), mostLegs)
	}
	*d.values = values
	return nil
}

func (d *decimalList) String() string { return "" }

func (d *decimalList) Type() string { return "numbers" }

func (f *reflectorFlags) define(cmd *cobra.Command) {
	flags := newFlags(cmd)
	flags.Var(&decimalList{&f.legs, 0.05, 20}, "reflector-legs", "inner legs of triangular trihedrals to compare, metres,\n0.05 to 20, as in 0.7,1,1.5; needs a look's frequency or band")
	flags.Var(&decimal{&f.ratio, 3, 60, "dB"}, "reflector-ratio", "signal to clutter that a reflector shall reach, 3 to 60 dB;\nneeds the two flags below and a look's bandwidth_mhz")
	flags.Var(&decimal{&f.error, 0.01, 100, "millimetres"}, "reflector-error", "the same as an error of one line-of-sight displacement,\n0.01 to 100 mm")
	flags.Var(&decimal{&f.sigma0, -60, 20, "dB"}, "clutter", "backscatter sigma0 of the ground around, -60 to 20 dB")
	flags.Var(&decimal{&f.across, 0.01, 1000, "metres"}, "azimuth-resolution", "of the image, 0.01 to 1000 metres")
	inGroup(cmd, groupReflector, "reflector-legs METRES,...", "reflector-ratio DB", "reflector-error MM", "clutter DB", "azimuth-resolution METRES")
}

// wanted reports whether the aid is asked for.
func (f *reflectorFlags) wanted() bool { return len(f.legs) > 0 || f.target() }

// target reports whether a ratio or an error is to be reached.
func (f *reflectorFlags) target() bool { return !math.IsNaN(f.ratio) || !math.IsNaN(f.error) }

// cluttered reports whether the clutter around is known.
func (f *reflectorFlags) cluttered() bool { return !math.IsNaN(f.sigma0) && !math.IsNaN(f.across) }

// check refuses what the aid lacks.
func (f *reflectorFlags) check(looks []geometry.Look) error {
	if !math.IsNaN(f.ratio) && !math.IsNaN(f.error) {
		return usagef("--reflector-ratio and --reflector-error say the same; give one of them")
	}
	if math.IsNaN(f.sigma0) != math.IsNaN(f.across) {
		return usagef("--clutter and --azimuth-resolution belong together: they give the echo of the ground around")
	}
	if f.cluttered() && !f.wanted() {
		return usagef("--clutter and --azimuth-resolution need --reflector-legs, --reflector-ratio or --reflector-error")
	}
	if f.target() && !f.cluttered() {
		return usagef("--reflector-ratio and --reflector-error need --clutter and --azimuth-resolution")
	}
	if !f.wanted() {
		return nil
	}
	frequency, bandwidth := false, false
	for _, l := range looks {
		frequency = frequency || !math.IsNaN(l.Wavelength)
		bandwidth = bandwidth || !math.IsNaN(l.Bandwidth)
	}
	if !frequency {
		return hint(usagef("the corner reflector aid needs the frequency of a look, and no look has one"), "add band, frequency_ghz or wavelength_m to the looks")
	}
	if f.cluttered() && !bandwidth {
		return hint(usagef("the clutter around a reflector needs the bandwidth of a look, and no look has one"), "add bandwidth_mhz to the looks")
	}
	return nil
}

// reflectorAid is what a triangular trihedral at a site needs under a look.
type reflectorAid struct {
	azimuth, gridAzimuth, tilt geometry.Angle
	clears                     string  // yes, partly or no; empty when it is not known
	clutter                    float64 // square metres, NaN unless known
	ratio                      float64 // wanted, as powers
	leg                        float64 // for the wanted ratio
	legs                       []reflectorLeg
}

// reflectorLeg is a trihedral of one size.
type reflectorLeg struct {
	leg, section  float64 // metres, square metres
	ratio         float64 // of signal to clutter power, NaN unless known
	error         float64 // of a line-of-sight displacement, metres
	inWavelengths float64
}

// aid computes the aid for a pair; nil where it is not asked for or the look
// has no frequency.
func (f *reflectorFlags) aid(p *pair) *reflectorAid {
	r := &p.result
	wavelength := p.look.Wavelength
	if !f.wanted() || math.IsNaN(wavelength) || p.problem != "" || r.Verdict == mask.NotSeen || math.IsNaN(r.LineOfSight.Up) {
		return nil
	}
	aim := geometry.AimAt(r.LineOfSight)
	a := &reflectorAid{
		azimuth: aim.Azimuth, gridAzimuth: (aim.Azimuth + r.GridToRadar - r.ToRadar).Turn(), tilt: aim.BaseTilt,
		clears: f.clears(p), clutter: math.NaN(), ratio: math.NaN(), leg: math.NaN(),
	}
	if f.cluttered() && !math.IsInf(r.GroundResolution, 0) {
		a.clutter = geometry.Clutter(geometry.FromDecibels(f.sigma0), r.GroundResolution, f.across)
	}
	if f.target() {
		a.ratio = geometry.FromDecibels(f.ratio)
		if !math.IsNaN(f.error) {
			a.ratio = geometry.RatioForError(f.error/1000, wavelength)
		}
		a.leg = geometry.LegForRatio(a.ratio, a.clutter, wavelength)
	}
	for _, leg := range f.legs {
		section := geometry.TriangularTrihedral(leg, wavelength)
		a.legs = append(a.legs, reflectorLeg{
			leg: leg, section: section, ratio: section / a.clutter,
			error: geometry.LineOfSightError(section/a.clutter, wavelength), inWavelengths: leg / wavelength,
		})
	}
	return a
}

// clears says whether the opening of a reflector that stands at the site's
// height is seen: all of it, its upper part, or none. The opening reaches about
// a leg above its base; the longest leg asked for counts.
func (f *reflectorFlags) clears(p *pair) string {
	r := &p.result
	switch r.Class.Kind() {
	case mask.Open.Kind(), mask.Compressed.Kind():
		return "yes"
	case mask.ActiveLayover.Kind(), mask.SelfShadow.Kind():
		tallest := 0.0
		for _, leg := range f.legs {
			tallest = max(tallest, leg)
		}
		if r.MastToClear <= p.site.Height+tallest {
			return "partly"
		}
		return "no"
	}
	return ""
}

// rough is how many wavelengths a leg must have for the formula to hold well.
// Common practice.
const rough = 4

// notes are sentences about the aid, for the sheet.
func (a *reflectorAid) notes() []string {
	if a == nil {
		return nil
	}
	how := "tip the opening up"
	if a.tilt < 0 {
		how = "tip the opening down"
	}
	notes := []string{fmt.Sprintf("Corner reflector: opening to azimuth %.2f° true, %.2f° grid; base plate %.2f° (%s).",
		azimuth(a.azimuth), azimuth(a.gridAzimuth), a.tilt.Degrees(), how)}
	for _, l := range a.legs {
		text := fmt.Sprintf("Legs of %s m: %.2f dBsm", shortest(l.leg), geometry.Decibels(l.section))
		if !math.IsNaN(l.ratio) {
			text += fmt.Sprintf(", %.2f dB over the clutter, error %.3f mm", geometry.Decibels(l.ratio), 1000*l.error)
		}
		if l.inWavelengths < rough {
			text += ", rough: the legs are short against the wavelength"
		}
		notes = append(notes, text+".")
	}
	if !math.IsNaN(a.leg) {
		notes = append(notes, fmt.Sprintf("For %.2f dB over the clutter: legs of %.3f m.", geometry.Decibels(a.ratio), a.leg))
	}
	switch a.clears {
	case "partly":
		notes = append(notes, "Only a part of the opening would be clear of shadow and fold.")
	case "no":
		notes = append(notes, "At this height it would stand in shadow or fold.")
	}
	return notes
}

// columns are those of the aid; none when it is not asked for.
func (f *reflectorFlags) columns() []siteColumn {
	if !f.wanted() {
		return nil
	}
	// of reads a value of the aid, where a pair has one.
	of := func(get func(a *reflectorAid) float64) func(p *pair) float64 {
		return func(p *pair) float64 {
			if p.aid == nil {
				return math.NaN()
			}
			return get(p.aid)
		}
	}
	columns := []siteColumn{
		numberColumn("reflector_azimuth", "Reflector, opening to, true north", "°", 2, of(func(a *reflectorAid) float64 { return azimuth(a.azimuth) })),
		numberColumn("reflector_azimuth_grid", "Reflector, opening to, grid north", "°", 2, of(func(a *reflectorAid) float64 { return azimuth(a.gridAzimuth) })),
		numberColumn("reflector_base_tilt", "Reflector, base tilt", "°", 2, of(func(a *reflectorAid) float64 { return a.tilt.Degrees() })),
		textColumn("reflector_clears", func(p *pair) string {
			if p.aid == nil {
				return ""
			}
			return p.aid.clears
		}),
	}
	if f.cluttered() {
		columns = append(columns, numberColumn("clutter_dbsm", "Clutter around", "dBsm", 2, of(func(a *reflectorAid) float64 { return geometry.Decibels(a.clutter) })))
	}
	if f.target() {
		columns = append(columns,
			numberColumn("ratio_wanted_db", "Signal to clutter, wanted", "dB", 2, of(func(a *reflectorAid) float64 { return geometry.Decibels(a.ratio) })),
			numberColumn("leg_wanted", "Leg for it", "m", 3, of(func(a *reflectorAid) float64 { return a.leg })))
	}
	for i, leg := range f.legs {
		name := strings.ReplaceAll(shortest(leg), ".", "_")
		title := "Leg " + shortest(leg) + " m, "
		columns = append(columns, numberColumn("section_dbsm_leg_"+name, title+"cross-section", "dBsm", 2, of(func(a *reflectorAid) float64 { return geometry.Decibels(a.legs[i].section) })))
		if f.cluttered() {
			columns = append(columns,
				numberColumn("ratio_db_leg_"+name, title+"signal to clutter", "dB", 2, of(func(a *reflectorAid) float64 { return geometry.Decibels(a.legs[i].ratio) })),
				numberColumn("error_mm_leg_"+name, title+"displacement error", "mm", 3, of(func(a *reflectorAid) float64 { return 1000 * a.legs[i].error })))
		}
	}
	return columns
}
