package main

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"math"
	"runtime/debug"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// layersJob is one run of `foldshade layers`, as the flags ask for it.
type layersJob struct {
	dem   demFlags
	looks lookFlags

	name      string // the DEM, as it is opened
	said      string // as the files name it, when that is not the same
	out       string
	only      string
	area      box
	hasArea   bool
	edge      string
	memory    int64
	overwrite bool
	asJSON    bool
	options   mask.Options

	// command is what the files say that made them, one word an element.
	command []string
	stderr  io.Writer
	// tap, when not nil, sees every tile of every look, the verdict included.
	// It is called as mask.Job.Emit is.
	tap func(look int, t *mask.Tile)
}

func newLayersJob() *layersJob {
	return &layersJob{options: mask.DefaultOptions(), memory: defaultMemory, edge: "unknown"}
}

// label is how the files name the DEM.
func (j *layersJob) label() string { return cmp.Or(j.said, j.name) }

func newLayers(command []string) *cobra.Command {
	job := newLayersJob()
	job.command = command
	cmd := &cobra.Command{
		Use:   "layers DEM (--look KEY=VALUE,... | --looks FILE) --out DIR",
		Short: "layover, shadow, incidence and other layers of each look",
		Long: `layers computes for every cell of a DEM whether each look sees it once, folds it
or hides it, and writes one raster a layer and look, DIR/LOOK/LAYER.tif, with one
catalogue entry a look beside them. A table on standard output gives the ground
area and the share of each kind.

DEM is the path or the GDAL name of a raster of heights.`,
		Example: `  foldshade layers valley/valley.tif --look name=east,incidence=38,azimuth=78 --out east
  foldshade layers valley/valley.tif --look name=east,incidence=38,azimuth=78 --out east \
      --only verdict,clearance --area 414000,5205000,417000,5208000 --json`,
		Args: exactly("DEM"),
		RunE: func(cmd *cobra.Command, args []string) error {
			job.name = args[0]
			job.stderr = cmd.ErrOrStderr()
			done, err := job.run(cmd.Context())
			if err != nil {
				return err
			}
			return done.print(cmd.OutOrStdout(), job.asJSON)
		},
		DisableFlagsInUseLine: true,
	}
	job.define(cmd)
	return cmd
}

func (j *layersJob) define(cmd *cobra.Command) {
	j.dem.define(cmd)
	f := newFlags(cmd)
	f.Var(&boxFlag{&j.area, &j.hasArea}, "area", "write the cells whose centres lie in this box,\nin the units of the DEM's CRS; terrain outside still counts")
	inGroup(cmd, groupInput, "area MINX,MINY,MAXX,MAXY")
	j.looks.define(cmd)
	defineTerrain(cmd, &j.options, &j.edge)
	f.StringVar(&j.out, "out", "", "folder for the layers; made when only its last part\nis missing")
	f.StringVar(&j.only, "only", "", layersHelp())
	f.Var(&decimal{&j.options.CompressedBelow, 0, 1, ""}, "compressed-below", "the foreshortening under which an open cell is compressed,\n0 to 1")
	f.BoolVar(&j.overwrite, "overwrite", false, "replace outputs that exist")
	f.BoolVar(&j.asJSON, "json", false, "print JSON in place of the table")
	inGroup(cmd, groupOutput, "out DIR", "only LAYER,...", "compressed-below RATIO", "overwrite", "json")
	f.Var(&size{&j.memory, leastMemory, mostMemory}, "memory", memoryHelp)
	f.Var(&whole{&j.options.Threads, 1, 1024}, "threads", "workers, 1 to 1024; by default one a processor")
	inGroup(cmd, groupMachine, "memory SIZE", "threads N")
}

const memoryHelp = "the most memory that the program may take,\n384MiB to 1TiB"

// layersHelp lists the layers in lines of the help.
func layersHelp() string {
	text := "layers to write, or all for every one that the looks have\nthe keys for; by default the first five:"
	line := ""
	for _, name := range layerNames() {
		if len(line)+len(name) > 55 {
			text += "\n" + strings.TrimRight(line, " ")
			line = ""
		}
		line += name + ", "
	}
	return text + "\n" + strings.TrimRight(line, ", ")
}

func layerNames() []string {
	names := make([]string, len(mask.Layers))
	for i, l := range mask.Layers {
		names[i] = string(l.Layer)
	}
	return names
}

// chooseLayers reads --only: layer names, or "all" for every layer that all
// looks can serve. A layer that a look lacks the keys for is refused by name.
func chooseLayers(only string, looks []geometry.Look) ([]mask.Layer, error) {
	if strings.TrimSpace(only) == "all" {
		var all []mask.Layer
		for _, l := range mask.Layers {
			if lacking(l.Layer, looks) == nil {
				all = append(all, l.Layer)
			}
		}
		return all, nil
	}
	chosen := mask.DefaultLayers
	if only != "" {
		chosen = nil
		seen := map[mask.Layer]bool{}
		for _, name := range list(only) {
			info, ok := mask.Info(mask.Layer(name))
			if !ok {
				next := didYouMean("", name, layerNames())
				if next == "" {
					next = "the layers are " + strings.Join(layerNames(), ", ") + ", or all"
				}
				return nil, hint(usagef("--only %q: no such layer", name), next)
			}
			if !seen[info.Layer] {
				seen[info.Layer] = true
				chosen = append(chosen, info.Layer)
			}
		}
	}
	for _, l := range chosen {
		if err := lacking(l, looks); err != nil {
			return nil, err
		}
	}
	return chosen, nil
}

// lacking says what the first look that cannot serve a layer lacks for it.
func lacking(l mask.Layer, looks []geometry.Look) error {
	for _, look := range looks {
		if keys := mask.Lacks(l, look); len(keys) > 0 {
			return hint(usagef("layer %s: look %q lacks %s", l, look.Name, strings.Join(keys, ", ")),
				"add the key to the look, or leave the layer out of --only")
		}
	}
	return nil
}

// run does the job: everything that can be refused is refused before anything
// is computed, and nothing gets its final name before all is written.
func (j *layersJob) run(ctx context.Context) (*summary, error) {
	if j.out == "" {
		return nil, hint(usagef("--out DIR is missing"), "name the folder that takes the layers, as in --out layers")
	}
	looks, err := j.looks.read()
	if err != nil {
		return nil, err
	}
	if err := drivenOnly(looks); err != nil {
		return nil, err
	}
	chosen, err := chooseLayers(j.only, looks)
	if err != nil {
		return nil, err
	}
	defer split(j.memory).apply()()
	src, err := j.dem.open(j.name, split(j.memory).heights)
	if err != nil {
		return nil, err
	}
	defer func() { _ = src.Close() }() // opened for reading only
	window := src.Grid().Whole()
	if j.hasArea {
		if window, err = j.area.window(src.Grid()); err != nil {
			return nil, err
		}
	}
	set, err := raster.NewSet(j.out, j.overwrite, append([]string{j.name, j.looks.file}, src.Facts().Files...))
	if err != nil {
		return nil, err
	}
	defer set.Abort() // does nothing after Commit
	s, err := j.compute(ctx, src, looks, chosen, window, set, "")
	if err != nil {
		return nil, err
	}
	return s, set.Commit()
}

// compute fills a set with the layers and catalogue entries of the looks, each
// look in a folder of its own below a folder of the set. Outputs that may not
// be written are refused before anything is computed.
func (j *layersJob) compute(ctx context.Context, src *raster.DEM, looks []geometry.Look, chosen []mask.Layer,
	window dem.Window, set *raster.Set, folder string) (*summary, error) {
	j.options.OpenEdge = j.edge == "open"
	cells := int64(src.Grid().Rows) * int64(src.Grid().Cols)
	j.options.Memory = split(j.memory).forCells(cells).march
	set.Threads = j.options.Threads
	out, err := newOutputs(j, src, looks, chosen, window, set, folder)
	if err != nil {
		return nil, err
	}
	found, err := src.Survey(ctx)
	if err != nil {
		return nil, err
	}
	for _, look := range looks {
		if err := comesAbreast(src, look); err != nil {
			return nil, err
		}
	}
	if err := j.march(ctx, src, found, chosen, window, out); err != nil {
		return nil, err
	}
	warnings := src.Warnings()
	for i, look := range looks {
		if out.tallies[i].total() == 0 {
			warnings = append(warnings, fmt.Sprintf("look %q sees no ground of the area; `foldshade looks --dem` says why", look.Name))
		}
	}
	warn(j.stderr, warnings)
	// GDAL makes the rasters: give it the room that the marching took.
	debug.FreeOSMemory()
	if err := out.finish(ctx, j, src, window, chosen); err != nil {
		return nil, err
	}
	return summarize(chosen, out, warnings), nil
}

// march computes the layers and hands every tile to the writers and to the
// tallies. The verdict is always computed: the summary counts its kinds.
func (j *layersJob) march(ctx context.Context, src *raster.DEM, found dem.Range, chosen []mask.Layer,
	window dem.Window, out *outputs) error {
	computed := chosen
	if !slices.Contains(chosen, mask.VerdictLayer) {
		computed = append(slices.Clone(chosen), mask.VerdictLayer)
	}
	bar := newProgress(j.stderr, "computing")
	defer bar.close()
	_, err := mask.Run(ctx, mask.Job{
		Source: src, Range: found, Looks: out.looks, Layers: computed, Window: window, Options: j.options,
		Emit: func(look int, t *mask.Tile) error {
			out.tallies[look].add(src.Grid(), t.Window, t.Classes[mask.VerdictLayer])
			if j.tap != nil {
				j.tap(look, t)
			}
			return out.write(look, chosen, t)
		},
		Progress: bar.update,
	})
	return err
}

// kindNames are the kinds of the summary, in its order.
var kindNames = []struct {
	kind int
	name string
}{
	{kindOpen, "open"}, {kindCompressed, "compressed"}, {kindLayover, "layover"},
	{kindShadow, "shadow"}, {kindUndetermined, "undetermined"},
}

// lookSummary is the result of one look, as JSON has it.
type lookSummary struct {
	Look     string              `json:"look"`
	Kind     string              `json:"kind"`
	Files    map[string]string   `json:"files"`
	Item     string              `json:"item"`
	Cells    map[string]int64    `json:"cells"`
	AreaKM2  map[string]float64  `json:"area_km2"`
	Share    map[string]*float64 `json:"share"`
	Warnings []string            `json:"warnings"`
}

type summary struct {
	looks []lookSummary
	dir   string
	files int
}

func summarize(chosen []mask.Layer, out *outputs, warnings []string) *summary {
	s := &summary{dir: out.dir, files: len(out.looks) * (len(chosen) + 1)}
	for i, look := range out.looks {
		l := lookSummary{
			Look: look.Name, Kind: string(look.Kind), Files: out.files(i), Item: out.item(i),
			Cells: map[string]int64{}, AreaKM2: map[string]float64{}, Share: map[string]*float64{},
			Warnings: append([]string{}, warnings...),
		}
		t := out.tallies[i]
		l.Cells["no_data"] = t.cells[kindNoData]
		l.AreaKM2["total"] = t.total()
		for _, k := range kindNames {
			l.Cells[k.name] = t.cells[k.kind]
			l.AreaKM2[k.name] = t.area(k.kind)
			l.Share[k.name] = nil
			if share := t.share(k.kind); !math.IsNaN(share) {
				l.Share[k.name] = &share
			}
		}
		s.looks = append(s.looks, l)
	}
	return s
}

func (s *summary) print(w io.Writer, asJSON bool) error {
	if asJSON {
		return printJSON(w, s.looks)
	}
	head := []string{"look", "km2"}
	for _, k := range kindNames {
		head = append(head, k.name)
	}
	var rows [][]string
	for _, l := range s.looks {
		row := []string{l.Look, significant(l.AreaKM2["total"])}
		for _, k := range kindNames {
			cell := "-"
			if share := l.Share[k.name]; share != nil {
				cell = fmt.Sprintf("%s (%.1f %%)", significant(l.AreaKM2[k.name]), 100**share)
			}
			row = append(row, cell)
		}
		rows = append(rows, row)
	}
	printTable(w, head, rows)
	fmt.Fprintf(w, "\n%d files in %s; areas in km2 of ground, shares of the classified area\n", s.files, s.dir)
	return nil
}

// significant writes a number with four significant digits and no exponent.
func significant(v float64) string {
	if v == 0 || math.IsNaN(v) {
		return "0"
	}
	digits := 3 - int(math.Floor(math.Log10(math.Abs(v))))
	return fmt.Sprintf("%.*f", min(max(digits, 0), 9), v)
}
