package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"strconv"

	"github.com/spf13/cobra"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
)

// inspectIncidences are the incidences whose reach is shown when no look is
// given, degrees.
var inspectIncidences = []float64{20, 30, 40, 50, 60, 70}

type inspectJob struct {
	dem     demFlags
	looks   lookFlags
	ceiling float64
	memory  int64
	asJSON  bool
}

func newInspect() *cobra.Command {
	job := &inspectJob{ceiling: math.NaN(), memory: defaultMemory}
	cmd := &cobra.Command{
		Use:   "inspect DEM [--look KEY=VALUE,... | --looks FILE]",
		Short: "what a DEM is, what is wrong with it, how far its edges blind it",
		Long: `inspect reads a DEM once and prints what it is: size, place, cells in ground
metres, heights, holes. Warnings say what looks wrong. A table gives the reach of
shadow and layover, for the incidences of the looks or for 20 to 70 degrees: ground
closer than that to an edge or a hole may be undetermined.`,
		Example: `  foldshade inspect valley/valley.tif
  foldshade inspect valley/valley.tif --look incidence=38,azimuth=78 --json`,
		Args: exactly("DEM"),
		RunE: func(cmd *cobra.Command, args []string) error {
			found, err := job.run(cmd.Context(), args[0])
			if err != nil {
				return err
			}
			if job.asJSON {
				return printJSON(cmd.OutOrStdout(), found)
			}
			warn(cmd.ErrOrStderr(), found.Warnings)
			found.print(cmd.OutOrStdout())
			return nil
		},
		DisableFlagsInUseLine: true,
	}
	job.dem.define(cmd)
	job.looks.define(cmd)
	f := newFlags(cmd)
	f.Var(&decimal{&job.ceiling, -500, 9000, "metres"}, "ceiling", "the highest terrain that may stand where the DEM\nshows none, -500 to 9000; by default its own highest cell")
	inGroup(cmd, groupTerrain, "ceiling METRES")
	f.BoolVar(&job.asJSON, "json", false, "print JSON in place of tables")
	inGroup(cmd, groupOutput, "json")
	f.Var(&size{&job.memory, leastMemory, mostMemory}, "memory", memoryHelp)
	inGroup(cmd, groupMachine, "memory SIZE")
	return cmd
}

// inspection is what inspect prints, as JSON has it.
type inspection struct {
	DEM      raster.Facts `json:"dem"`
	Heights  heights      `json:"heights"`
	Reach    []reachRow   `json:"reach"`
	Warnings []string     `json:"warnings"`
}

// heights is what the pass over all cells found, metres and cells.
type heights struct {
	Min   float64 `json:"min"`
	Max   float64 `json:"max"`
	Valid int64   `json:"valid_cells"`
	Holes int64   `json:"hole_cells"`
}

// reachRow says how far terrain can matter to a cell, metres of ground.
type reachRow struct {
	Look      string   `json:"look,omitempty"`
	Kind      string   `json:"kind,omitempty"`
	Incidence float64  `json:"incidence"` // at the DEM's centre
	Azimuth   *float64 `json:"azimuth,omitempty"`
	// Shadow is how far towards the radar terrain may hide a cell, Layover
	// how far either way it may share the cell's slant range; null without end.
	Shadow  *float64 `json:"shadow_reach"`
	Layover *float64 `json:"layover_reach"`
	// Sure is the part of the grid's area farther from every edge than either
	// reach, 0 to 1.
	Sure float64 `json:"share_out_of_reach"`
}

func (j *inspectJob) run(ctx context.Context, name string) (*inspection, error) {
	var looks []geometry.Look
	if j.looks.given() {
		var err error
		if looks, err = j.looks.read(); err != nil {
			return nil, err
		}
		if err := drivenOnly(looks); err != nil {
			return nil, err
		}
	}
	b := split(j.memory)
	defer b.apply()()
	// Nothing is read twice: no heights are held.
	src, err := j.dem.open(name, -1)
	if err != nil {
		return nil, err
	}
	defer func() { _ = src.Close() }() // opened for reading only
	found, err := src.Survey(ctx)
	if err != nil {
		return nil, err
	}
	relief := math.Max(found.Max, j.ceiling) - found.Min
	if math.IsNaN(j.ceiling) {
		relief = found.Max - found.Min
	}
	result := &inspection{
		DEM:      src.Facts(),
		Heights:  heights{found.Min, found.Max, found.Valid, found.Missing},
		Warnings: append([]string{}, src.Warnings()...),
	}
	for _, look := range looks {
		row, err := lookReach(src, look, found, relief)
		if err != nil {
			return nil, err
		}
		result.Reach = append(result.Reach, row)
	}
	if len(looks) == 0 {
		for _, i := range inspectIncidences {
			look := geometry.NewLook()
			look.Kind, look.Incidence = geometry.Fixed, geometry.Angle(i)*geometry.Degree
			o := &geometryOf{look: look}
			v, _ := o.view(geometry.Geodetic{})
			result.Reach = append(result.Reach, rowOf(src.Grid(), look.Incidence, o.reach(&v, relief)))
		}
	}
	return result, nil
}

// lookReach returns the row of a look: the incidence at the DEM's centre and
// the longest reach anywhere on it.
func lookReach(src dem.Source, look geometry.Look, found dem.Range, relief float64) (reachRow, error) {
	if err := comesAbreast(src, look); err != nil {
		return reachRow{}, err
	}
	o, err := overDEM(src, look)
	if err != nil {
		return reachRow{}, err
	}
	g := src.Grid()
	centre := position(src, float64(g.Rows-1)/2, float64(g.Cols-1)/2, found.Min)
	v, seen := o.view(centre)
	s := o.over(g, found.Min, found.Max, relief)
	if s.seen == 0 {
		return reachRow{}, hint(fmt.Errorf("look %q does not see the DEM: %s", look.Name, o.why(centre, &v, seen)), "`foldshade looks --dem` shows the geometry of a look")
	}
	row := rowOf(g, v.Incidence, s.reach)
	azimuth := rounded(v.LookAzimuth.Degrees(), 9)
	row.Look, row.Kind, row.Azimuth = look.Name, string(look.Kind), &azimuth
	return row, nil
}

// rowOf makes a row of a reach over a grid.
func rowOf(g *dem.Grid, incidence geometry.Angle, r reach) reachRow {
	layover := math.Max(r.towards, r.away)
	row := reachRow{Incidence: rounded(incidence.Degrees(), 9), Shadow: finite(r.shadow, 3), Layover: finite(layover, 3)}
	l := g.At(float64(g.Rows-1)/2, float64(g.Cols-1)/2)
	width := float64(g.Cols) * math.Hypot(l.ColE, l.ColN)
	height := float64(g.Rows) * math.Hypot(l.RowE, l.RowN)
	rim := 2 * math.Max(r.shadow, layover)
	row.Sure = rounded(math.Max(0, 1-rim/width)*math.Max(0, 1-rim/height), 6)
	return row
}

// finite rounds a number for JSON, which has none for NaN and infinity: null.
func finite(v float64, decimals int) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	v = rounded(v, decimals)
	return &v
}

// text writes a number for a table, a dash for null.
func text(v *float64, format string) string {
	if v == nil {
		return "-"
	}
	return fmt.Sprintf(format, *v)
}

// rounded rounds to a number of decimals.
func rounded(v float64, decimals int) float64 {
	power := math.Pow10(decimals)
	return math.Round(v*power) / power
}

// shiftText says what made the heights ellipsoidal.
func shiftText(s *raster.HeightShift) string {
	name := s.Name
	if s.Source == "offset" {
		name = "the given offset"
	}
	return fmt.Sprintf("made ellipsoidal by %s: %+.2f to %+.2f m added", name, s.Least, s.Most)
}

func (p *inspection) print(w io.Writer) {
	f := p.DEM
	all := p.Heights.Valid + p.Heights.Holes
	crs := f.CRS
	if f.CRSCode != "" {
		crs += " (" + f.CRSCode + ")"
	}
	vertical := f.VerticalCRS
	if vertical == "" {
		vertical = "not stated; taken as ellipsoidal"
	}
	if s := f.HeightShift; s != nil {
		vertical = shiftText(s)
	}
	c := f.Centre
	printPairs(w, [][2]string{
		{"DEM", fmt.Sprintf("%s, band %d of %d, %s (%s)", f.Name, f.Band, f.Bands, f.DataType, f.Driver)},
		{"cells", fmt.Sprintf("%d rows x %d columns", f.Rows, f.Cols)},
		{"CRS", crs},
		{"centre", fmt.Sprintf("%s, %s (longitude %.5f, latitude %.5f)", shortest(c.X), shortest(c.Y), c.Lon, c.Lat)},
		{"cell at centre", fmt.Sprintf("%.3f m along the row, %.3f m along the column", c.ColM, c.RowM)},
		{"grid north", fmt.Sprintf("%.3f degrees east of true north at the centre", c.Convergence)},
		{"heights", fmt.Sprintf("%.2f to %.2f m, unit %s (%s)", p.Heights.Min, p.Heights.Max, f.VerticalUnit, f.VerticalUnitSource)},
		{"vertical", vertical},
		{"holes", fmt.Sprintf("%d cells (%.2f %%)", p.Heights.Holes, 100*float64(p.Heights.Holes)/float64(all))},
	})
	fmt.Fprintln(w)
	head := []string{"incidence", "shadow reach m", "layover reach m", "out of reach of the edges"}
	named := len(p.Reach) > 0 && p.Reach[0].Look != ""
	if named {
		head = append([]string{"look"}, head...)
	}
	var rows [][]string
	for _, r := range p.Reach {
		row := []string{strconv.FormatFloat(r.Incidence, 'g', 6, 64), text(r.Shadow, "%.0f"), text(r.Layover, "%.0f"), fmt.Sprintf("%.1f %%", 100*r.Sure)}
		if named {
			row = append([]string{r.Look}, row...)
		}
		rows = append(rows, row)
	}
	printTable(w, head, rows)
	fmt.Fprintln(w, "\nGround within reach of an edge or a hole may be undetermined: terrain that the DEM does\nnot show may hide it (toward the radar) or share its slant range (either way).")
}
