package main

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"os"
	"runtime/debug"
	"strings"

	"github.com/spf13/cobra"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// sweepJob is one run of `foldshade sweep`, as the flags ask for it.
type sweepJob struct {
	dem   demFlags
	looks lookFlags

	name       string
	out        string
	area       string
	azimuths   []geometry.Angle
	incidences []geometry.Angle
	best       int
	condition  float64
	rasters    bool
	edge       string
	memory     int64
	overwrite  bool
	asJSON     bool
	options    mask.Options

	command []string
	stderr  io.Writer
}

// defaultCondition is the condition number up to which two looks separate east
// and up: two lines of sight 37 degrees apart in the plane of the two. The least
// certain direction then has 2.2 times the noise of one line of sight.
const defaultCondition = 3

func newSweep(command []string) *cobra.Command {
	job := &sweepJob{options: mask.DefaultOptions(), memory: defaultMemory, edge: "unknown",
		best: 2, condition: defaultCondition, command: command}
	cmd := &cobra.Command{
		Use:   "sweep DEM --out DIR",
		Short: "which azimuths and incidences see the most of an area",
		Long: `sweep asks every pair of a look azimuth and an incidence how much of a DEM, or of
an area of it, is open, compressed, folded, hidden or undetermined, and which
looks serve the area best: alone, and as pairs and sets, so that each cell is
open in at least one of them, or in two that tell east from up. Candidate looks
of your own are ranked beside them by their exact masks.

It takes every radar for a plane wave; docs/sweep.md says when that is not
enough. DEM is the path or the GDAL name of a raster of heights.`,
		Example: `  foldshade sweep valley/valley.tif --out space
  foldshade sweep valley/valley.tif --azimuths 60:120:5 --incidences 30:45:1 \
      --area 414000,5205000,417000,5208000 --best 3 --out slope`,
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

func (j *sweepJob) define(cmd *cobra.Command) {
	j.dem.define(cmd)
	f := newFlags(cmd)
	f.StringVar(&j.area, "area", "", "the cells that count, by their centres: a box in the\nunits of the DEM's CRS, or a file of polygons;\nterrain outside still matters")
	inGroup(cmd, groupInput, "area MINX,MINY,MAXX,MAXY|FILE")
	azimuths := &spread{value: &j.azimuths, lo: 0, hi: 360, below: true}
	incidences := &spread{value: &j.incidences, lo: 1, hi: 89}
	_ = azimuths.Set("0:345:15") // a default is in range
	_ = incidences.Set("20:50:1")
	f.Var(azimuths, "azimuths", "look azimuths, degrees clockwise from true north,\n0 to below 360")
	f.Var(incidences, "incidences", "incidences, degrees, 1 to 89")
	j.looks.define(cmd)
	f.Lookup("look").Usage = "a candidate look to rank as well; repeat the flag for\nmore, 64 at most"
	f.Lookup("looks").Usage = "file of candidate looks, .yaml, .yml or .csv"
	f.Var(&whole{&j.best, 1, mask.MaxSet}, "best", fmt.Sprintf("the most looks of the sets that are sought, 1 to %d", mask.MaxSet))
	f.Var(&decimal{&j.condition, 1, 100, ""}, "condition", "the largest condition number at which two looks tell\neast from up, 1 to 100")
	inGroup(cmd, groupLook, "azimuths FROM:TO:STEP", "incidences FROM:TO:STEP", "best N", "condition NUMBER")
	defineTerrain(cmd, &j.options, &j.edge)
	f.StringVar(&j.out, "out", "", "folder for the results; made when only its last part\nis missing")
	f.BoolVar(&j.rasters, "rasters", false, "write "+strings.Join(sweepRasterNames(), ", ")+"\nas rasters too")
	f.Var(&decimal{&j.options.CompressedBelow, 0, 1, ""}, "compressed-below", "the foreshortening under which an open cell is compressed,\n0 to 1")
	f.BoolVar(&j.overwrite, "overwrite", false, "replace outputs that exist")
	f.BoolVar(&j.asJSON, "json", false, "print JSON in place of the table")
	inGroup(cmd, groupOutput, "out DIR", "rasters", "compressed-below RATIO", "overwrite", "json")
	f.Var(&size{&j.memory, leastMemory, mostMemory}, "memory", memoryHelp)
	f.Var(&whole{&j.options.Threads, 1, 1024}, "threads", "workers, 1 to 1024; by default one a processor")
	inGroup(cmd, groupMachine, "memory SIZE", "threads N")
}

// run does the job: everything that can be refused is refused before anything
// is computed, and nothing gets its final name before all is written.
func (j *sweepJob) run(ctx context.Context) (*sweepSummary, error) {
	if j.out == "" {
		return nil, hint(usagef("--out DIR is missing"), "name the folder that takes the results, as in --out space")
	}
	if n := len(j.azimuths) * len(j.incidences); n > mask.MaxSweepLooks {
		return nil, hint(usagef("%d azimuths x %d incidences are %d looks; at most %d are swept", len(j.azimuths), len(j.incidences), n, mask.MaxSweepLooks),
			"take larger steps in --azimuths or --incidences")
	}
	candidates, err := j.candidates()
	if err != nil {
		return nil, err
	}
	defer split(j.memory).apply()()
	src, err := j.dem.open(j.name, split(j.memory).heights)
	if err != nil {
		return nil, err
	}
	defer func() { _ = src.Close() }() // opened for reading only
	at, err := sweepArea(j.area, src.Grid())
	if err != nil {
		return nil, err
	}
	inputs := append([]string{j.name, j.looks.file}, src.Facts().Files...)
	set, err := raster.NewSet(j.out, j.overwrite, append(inputs, at.files...))
	if err != nil {
		return nil, err
	}
	defer set.Abort() // does nothing after Commit
	s, err := j.compute(ctx, src, at, candidates, set)
	if err != nil {
		return nil, err
	}
	return s, set.Commit()
}

// candidates reads the user's own looks, if there are any.
func (j *sweepJob) candidates() ([]geometry.Look, error) {
	if !j.looks.given() {
		return nil, nil
	}
	looks, err := j.looks.read()
	if err != nil {
		return nil, err
	}
	if len(looks) > mask.MaxRanked {
		return nil, hint(usagef("%d candidate looks; at most %d are ranked at once", len(looks), mask.MaxRanked), "rank them in several runs")
	}
	return looks, drivenOnly(looks)
}

// compute sweeps, ranks and fills the set.
func (j *sweepJob) compute(ctx context.Context, src *raster.DEM, at place, candidates []geometry.Look, set *raster.Set) (*sweepSummary, error) {
	j.options.OpenEdge = j.edge == "open"
	cells := int64(src.Grid().Rows) * int64(src.Grid().Cols)
	j.options.Memory = split(j.memory).forCells(cells).march
	set.Threads = j.options.Threads
	files, err := newSweepFiles(j, src, at.window, len(candidates) > 0, set)
	if err != nil {
		return nil, err
	}
	found, err := src.Survey(ctx)
	if err != nil {
		return nil, err
	}
	space, err := j.sweep(ctx, src, found, at, files)
	if err != nil {
		return nil, err
	}
	if space.Cells == 0 {
		return nil, hint(fmt.Errorf("dem %q: the area holds no cell with a height", j.name), "choose an area that is not all hole")
	}
	s := &sweepSummary{dir: j.out, job: j, space: space, candidates: candidates}
	if len(candidates) > 0 {
		if s.ranked, err = j.rank(ctx, src, found, at, candidates); err != nil {
			return nil, err
		}
	}
	s.warnings = src.Warnings()
	warn(j.stderr, s.warnings)
	debug.FreeOSMemory()
	return s, files.finish(ctx, s)
}

// sweep runs the look space.
func (j *sweepJob) sweep(ctx context.Context, src *raster.DEM, found dem.Range, at place, files *sweepFiles) (*mask.SweepResult, error) {
	job := mask.SweepJob{
		Source: src, Range: found, Azimuths: j.azimuths, Incidences: j.incidences,
		Window: at.window, Inside: at.inside, Best: j.best, Condition: j.condition, Options: j.options,
	}
	if j.rasters {
		job.Emit = files.write
	}
	// Larger sets look at all cells again: from memory when they fit in a
	// quarter of the marching's, else from a file.
	open := 2 * int64(len(j.azimuths)) * int64(at.window.Rows) * int64(at.window.Cols)
	if j.best >= 3 && open > j.options.Memory/4 {
		scratch, err := scratchFile(j.out)
		if err != nil {
			return nil, err
		}
		defer func() { _ = scratch.Close() }() // without a name, it is gone then
		job.Scratch = scratch
	} else if j.best >= 3 {
		job.Options.Memory -= open
	}
	bar := newProgress(j.stderr, "sweeping ")
	defer bar.close()
	job.Progress = bar.update
	return mask.Sweep(ctx, job)
}

// scratchFile opens a file beside the outputs that has no name any more, so
// that nothing is left of it whatever happens.
func scratchFile(dir string) (*os.File, error) {
	f, err := os.CreateTemp(dir, ".foldshade-*")
	if err == nil {
		err = os.Remove(f.Name())
	}
	if err != nil {
		return nil, outputf("%q: scratch file: %w", dir, reason(err))
	}
	return f, nil
}

// rank marches the candidates.
func (j *sweepJob) rank(ctx context.Context, src *raster.DEM, found dem.Range, at place, looks []geometry.Look) (*mask.SweepResult, error) {
	bar := newProgress(j.stderr, "ranking  ")
	defer bar.close()
	job := mask.RankJob{
		Job:    mask.Job{Source: src, Range: found, Looks: looks, Window: at.window, Options: j.options, Progress: bar.update},
		Inside: at.inside, Best: j.best, Condition: j.condition,
	}
	for _, l := range looks {
		sight, err := sightOf(src, at.window, l)
		if err != nil {
			return nil, err
		}
		job.Sights = append(job.Sights, sight)
	}
	return mask.Rank(ctx, job)
}

// sightOf returns the line of sight of a look at the middle of a window: that of
// a platform varies over the area.
func sightOf(src *raster.DEM, w dem.Window, l geometry.Look) (geometry.ENU, error) {
	if l.Kind == geometry.Fixed {
		return geometry.LineOfSight(l.Incidence, l.Azimuth), nil
	}
	p, err := mask.PlatformOf(src, l)
	if err != nil {
		return geometry.ENU{}, err
	}
	row, col := float64(w.Row)+float64(w.Rows-1)/2, float64(w.Col)+float64(w.Cols-1)/2
	ground := src.Grid().At(row, col)
	v, seen := p.View(geometry.Geodetic{Place: geometry.Place{Lon: ground.Lon, Lat: ground.Lat}})
	if seen == geometry.OutsideSegment {
		return geometry.ENU{}, hint(fmt.Errorf("look %q does not see the middle of the area: %s", l.Name, seen), "leave the look out, or move --area under its track")
	}
	return v.LineOfSight, nil
}

// sweepRasters are the rasters that --rasters asks for.
var sweepRasters = []raster.Layer{
	{
		Name: "open-count", Title: "Open looks", Unit: "1", Scale: 1,
		Description: "number of looks of the sweep at which the cell is open",
	},
	{
		Name: "best-azimuth", Title: "Best azimuth", Unit: "degree", Scale: 0.01, Offset: 180, NearestOverviews: true,
		Description: "swept look azimuth with the most open incidences in a row, clockwise from true north",
	},
	{
		Name: "best-incidence", Title: "Best incidence", Unit: "degree", Scale: angleStep, Offset: 45,
		Description: "middle of the open incidences at the best azimuth",
	},
}

func sweepRasterNames() []string {
	var names []string
	for _, l := range sweepRasters {
		names = append(names, l.Name)
	}
	return names
}

// sweepFiles are the files of a run within its set.
type sweepFiles struct {
	job      *sweepJob
	set      *raster.Set
	table    *raster.File
	looks    *raster.File // nil without candidates
	png, svg *raster.File
	writers  []*raster.Writer
}

// The files of a sweep below its folder.
const (
	sweepTable = "sweep.csv"
	sweepLooks = "looks.csv"
	sweepPNG   = "chart.png"
	sweepSVG   = "chart.svg"
)

func newSweepFiles(j *sweepJob, src *raster.DEM, window dem.Window, candidates bool, set *raster.Set) (*sweepFiles, error) {
	f := &sweepFiles{job: j, set: set}
	var err error
	if f.table, err = set.File(sweepTable); err != nil {
		return nil, err
	}
	if f.png, err = set.File(sweepPNG); err != nil {
		return nil, err
	}
	if f.svg, err = set.File(sweepSVG); err != nil {
		return nil, err
	}
	if candidates {
		if f.looks, err = set.File(sweepLooks); err != nil {
			return nil, err
		}
	}
	if !j.rasters {
		return f, nil
	}
	for _, l := range sweepRasters {
		l.Metadata = map[string]string{
			"TIFFTAG_SOFTWARE": "foldshade " + toolVersion(), "AREA_OR_POINT": "Area",
			"command": shellJoin(j.command), "dem": j.name, "edge": cmp.Or(j.edge, "unknown"),
			"azimuths": degreesText(j.azimuths), "incidences": degreesText(j.incidences),
		}
		w, err := set.Writer("", l, src.Grid(), window)
		if err != nil {
			return nil, err
		}
		f.writers = append(f.writers, w)
	}
	return f, nil
}

// degreesText says in words which angles are swept.
func degreesText(a []geometry.Angle) string {
	first, last := shortest(rounded(a[0].Degrees(), 9)), shortest(rounded(a[len(a)-1].Degrees(), 9))
	if len(a) == 1 {
		return first
	}
	return fmt.Sprintf("%s to %s degrees, %d values", first, last, len(a))
}

// write takes a tile of the rasters.
func (f *sweepFiles) write(t *mask.SweepTile) error {
	for i, values := range [][]float32{t.OpenCount, t.BestAzimuth, t.BestIncidence} {
		if err := f.writers[i].WriteFloats(t.Window, 0, values); err != nil {
			return err
		}
	}
	return nil
}

// finish writes the tables and charts and makes the rasters.
func (f *sweepFiles) finish(ctx context.Context, s *sweepSummary) error {
	if err := s.writeSpace(f.table); err != nil {
		return err
	}
	if f.looks != nil {
		if err := s.writeCandidates(f.looks); err != nil {
			return err
		}
	}
	c := s.chart()
	if err := c.PNG(f.png); err != nil {
		return err
	}
	if err := c.SVG(f.svg); err != nil {
		return err
	}
	bar := newProgress(f.job.stderr, "writing  ")
	f.set.Progress = bar.update
	defer bar.close()
	return f.set.Finish(ctx)
}
