package main

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"math"
	"strings"
	"unicode"
	"unicode/utf8"

	"github.com/spf13/cobra"

	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// sitesJob is one run of `foldshade sites`, as the flags ask for it.
type sitesJob struct {
	dem   demFlags
	looks lookFlags

	name      string // the DEM, as it is opened
	said      string // as the files name it, when that is not the same
	sites     string // the file of sites
	columns   raster.SiteOptions
	out       []string
	sheet     string
	title     string
	require   string
	edge      string
	memory    int64
	overwrite bool
	asJSON    bool
	options   mask.Options
	errors    mask.DEMError
	seed      int
	reflector reflectorFlags

	command []string
	stderr  io.Writer
}

func newSitesJob() *sitesJob {
	return &sitesJob{
		options: mask.DefaultOptions(), memory: defaultMemory, edge: "unknown", seed: 1,
		errors: mask.DEMError{Sigma: math.NaN(), Correlation: math.NaN()}, reflector: newReflectorFlags(),
	}
}

// label is how the files name the DEM.
func (j *sitesJob) label() string { return cmp.Or(j.said, j.name) }

func newSites(command []string) *cobra.Command {
	job := newSitesJob()
	job.command = command
	cmd := &cobra.Command{
		Use:   "sites DEM --sites FILE (--look KEY=VALUE,... | --looks FILE)",
		Short: "whether each look can measure each site, why not, and what it would take",
		Long: `sites judges places under looks: usable, marginal, unusable, undetermined or
not-seen, with the class, the reason in a sentence, the margins, and the terrain
that hides a site or folds over it. A site is judged at its own coordinates, not
at the nearest cell; lines and polygons are judged by their cells, with shares.

DEM is the path or the GDAL name of a raster of heights. FILE is any vector file
that GDAL reads, in any CRS: GeoPackage, GeoJSON, Shapefile, KML, GPX, or CSV with
columns lon and lat, or x and y in the DEM's CRS. A site that cannot be judged is
told, the others are not lost, and the exit status is 3.`,
		Example: `  foldshade sites valley/valley.tif --sites valley/sites.geojson --looks valley/looks.yaml
  foldshade sites valley/valley.tif --sites valley/sites.geojson --looks valley/looks.yaml \
      --dem-sigma 3 --dem-correlation 200 --out campaign.gpkg --sheet campaign.html`,
		Args: exactly("DEM"),
		RunE: func(cmd *cobra.Command, args []string) error {
			job.name = args[0]
			job.stderr = cmd.ErrOrStderr()
			report, err := job.run(cmd.Context())
			if err != nil {
				return err
			}
			if err := report.print(cmd.OutOrStdout(), job.asJSON); err != nil {
				return err
			}
			return report.verdict(job.stderr, job.require)
		},
		DisableFlagsInUseLine: true,
	}
	job.define(cmd)
	return cmd
}

func (j *sitesJob) define(cmd *cobra.Command) {
	j.dem.define(cmd)
	f := newFlags(cmd)
	f.StringVar(&j.sites, "sites", "", "vector file of the sites, or its GDAL name")
	f.StringVar(&j.columns.Layer, "sites-layer", "", "its layer, where several hold features")
	f.StringVar(&j.columns.CRS, "sites-crs", "", "CRS of the sites where the file has none or a wrong one:\nEPSG:code, WKT or a PROJ string")
	f.StringVar(&j.columns.Name, "name-column", "", "column of the sites' names; by default name")
	f.StringVar(&j.columns.Height, "height-column", "", "column of the target's height above the ground, metres;\nby default height, else 0")
	f.StringVar(&j.columns.Footprint, "footprint-column", "", "column of the radius over which shares are taken, metres;\nby default footprint, else 0")
	inGroup(cmd, groupInput, "sites FILE", "sites-layer NAME", "sites-crs CRS", "name-column NAME", "height-column NAME", "footprint-column NAME")
	j.looks.define(cmd)
	defineTerrain(cmd, &j.options, &j.edge)
	f.Var(&decimal{&j.errors.Sigma, 0.01, 1000, "metres"}, "dem-sigma", "standard deviation of the DEM's heights, 0.01 to 1000;\ngives each site a probability of being open")
	f.Var(&decimal{&j.errors.Correlation, 0, 100000, "metres"}, "dem-correlation", "ground distance over which the errors of the heights stay\nalike, 0 to 100000; by default 0: cell by cell")
	f.Var(&whole{&j.seed, 1, math.MaxInt32}, "seed", "where the simulated errors start, 1 to 2147483647")
	inGroup(cmd, groupConfidence, "dem-sigma METRES", "dem-correlation METRES", "seed N")
	j.reflector.define(cmd)
	f.StringArrayVar(&j.out, "out", nil, "file for the results, .gpkg, .geojson, .csv or .kml;\nrepeat the flag for more")
	f.StringVar(&j.sheet, "sheet", "", "file for the field sheet, .html: one page to print")
	f.StringVar(&j.title, "title", "", "heading of the field sheet; by default the name of the\nfile of sites")
	f.Var(&choice{&j.require, []string{"open", "usable"}}, "require", "open or usable: exit status 1 unless every site is that\nunder every look")
	f.Var(&decimal{&j.options.CompressedBelow, 0, 1, ""}, "compressed-below", "the foreshortening under which an open site is compressed,\n0 to 1")
	f.BoolVar(&j.overwrite, "overwrite", false, "replace outputs that exist")
	f.BoolVar(&j.asJSON, "json", false, "print JSON in place of the table")
	inGroup(cmd, groupOutput, "out FILE", "sheet FILE", "title TEXT", "require WORD", "compressed-below RATIO", "overwrite", "json")
	f.Var(&size{&j.memory, leastMemory, mostMemory}, "memory", memoryHelp)
	f.Var(&whole{&j.options.Threads, 1, 1024}, "threads", "workers, 1 to 1024; by default one a processor")
	inGroup(cmd, groupMachine, "memory SIZE", "threads N")
}

// defineTerrain defines the flags of what the DEM does not show, as `layers`
// has them.
func defineTerrain(cmd *cobra.Command, o *mask.Options, edge *string) {
	f := newFlags(cmd)
	f.Var(&decimal{&o.Ceiling, -500, 9000, "metres"}, "ceiling", "the highest terrain that may stand where the DEM\nshows none, -500 to 9000; by default its own highest cell")
	f.Var(&decimal{&o.HoleHeight, -500, 9000, "metres"}, "hole-height", "the height of the ground in holes, -500 to 9000;\nby default unknown")
	f.Var(&choice{edge, []string{"unknown", "open"}}, "edge", "unknown or open: whether it is not known what stands\noutside the DEM, or nothing does")
	inGroup(cmd, groupTerrain, "ceiling METRES", "hole-height METRES", "edge WORD")
}

// check refuses what the flags contradict, before any file is touched.
func (j *sitesJob) check() error {
	if j.sites == "" {
		return hint(usagef("--sites FILE is missing"), "name the vector file of the sites, as in --sites sites.geojson")
	}
	if j.title != "" && j.sheet == "" {
		return usagef("--title is the heading of the field sheet, and --sheet is not given")
	}
	if !math.IsNaN(j.errors.Correlation) && math.IsNaN(j.errors.Sigma) {
		return usagef("--dem-correlation needs --dem-sigma, the size of the errors")
	}
	return nil
}

// run does the job: everything that can be refused is refused before anything
// is computed, and nothing gets its final name before all is written.
func (j *sitesJob) run(ctx context.Context) (*siteReport, error) {
	if err := j.check(); err != nil {
		return nil, err
	}
	looks, err := j.looks.read()
	if err != nil {
		return nil, err
	}
	if err := drivenOnly(looks); err != nil {
		return nil, err
	}
	if err := j.reflector.check(looks); err != nil {
		return nil, err
	}
	files, err := namedOutputs(j.out, j.sheet)
	if err != nil {
		return nil, err
	}
	defer split(j.memory).apply()()
	src, err := j.dem.open(j.name, split(j.memory).heights)
	if err != nil {
		return nil, err
	}
	defer func() { _ = src.Close() }() // opened for reading only
	sites, err := raster.ReadSites(j.sites, j.columns, src.Grid())
	if err != nil {
		return nil, err
	}
	inputs := append([]string{j.name, j.sites, j.looks.file}, append(src.Facts().Files, sites.Files...)...)
	out, err := newSiteOutputs(files, j.overwrite, inputs)
	if err != nil {
		return nil, err
	}
	defer out.abort() // does nothing after commit
	report, err := j.compute(ctx, src, sites, looks)
	if err != nil {
		return nil, err
	}
	if err := out.write(ctx, report); err != nil {
		return nil, err
	}
	return report, out.commit()
}

// compute judges the sites.
func (j *sitesJob) compute(ctx context.Context, src *raster.DEM, sites *raster.Sites, looks []geometry.Look) (*siteReport, error) {
	report := newSiteReport(j, src, sites, looks)
	if len(report.judged) == 0 {
		first := sites.List[0]
		return nil, fmt.Errorf("sites %q: none of the %d can be judged; the first, record %d, %q: %s", sites.Name, len(sites.List), first.Record, first.Name, first.Problem)
	}
	found, err := src.Survey(ctx)
	if err != nil {
		return nil, err
	}
	j.options.OpenEdge = j.edge == "open"
	g := src.Grid()
	j.options.Memory = split(j.memory).forCells(int64(g.Rows) * int64(g.Cols)).march
	bar := newProgress(j.stderr, "judging  ")
	report.job = mask.SitesJob{
		Source: src, Range: found, Looks: looks, Sites: report.maskSites(),
		Options: j.options, DEMError: j.demError(), Progress: bar.update,
	}
	results, err := mask.EvaluateSites(ctx, report.job)
	bar.close()
	if err != nil {
		return nil, err
	}
	report.job.Progress = nil
	report.warnings = append(src.Warnings(), sites.Warnings...)
	warn(j.stderr, report.warnings)
	return report, report.fill(results)
}

func (j *sitesJob) demError() mask.DEMError {
	e := mask.DEMError{Seed: uint64(j.seed)}
	if !math.IsNaN(j.errors.Sigma) {
		e.Sigma = j.errors.Sigma
	}
	if !math.IsNaN(j.errors.Correlation) {
		e.Correlation = j.errors.Correlation
	}
	return e
}

// siteReport is the result of a run.
type siteReport struct {
	*sitesJob
	src      *raster.DEM
	sites    *raster.Sites
	looks    []geometry.Look
	judged   []int // the sites that have a place, by index
	job      mask.SitesJob
	pairs    []pair // of all sites, looks within a site
	warnings []string
}

// pair is one site under one look.
type pair struct {
	site     *raster.Site
	look     *geometry.Look
	result   mask.SiteResult
	lon, lat float64
	blocker  [2]float64 // map units; NaN where there is none
	partner  [2]float64
	aid      *reflectorAid // nil without the aid
	// problem says why the site was not judged, a sentence; empty when it was.
	problem string
}

func newSiteReport(j *sitesJob, src *raster.DEM, sites *raster.Sites, looks []geometry.Look) *siteReport {
	r := &siteReport{sitesJob: j, src: src, sites: sites, looks: looks}
	for i := range sites.List {
		if sites.List[i].Problem == "" {
			r.judged = append(r.judged, i)
		}
	}
	return r
}

// maskSites are the judged sites as the computation takes them.
func (r *siteReport) maskSites() []mask.Site {
	var list []mask.Site
	g := r.src.Grid()
	for _, i := range r.judged {
		s := &r.sites.List[i]
		m := mask.Site{Name: s.Name, Height: s.Height, Footprint: s.Footprint}
		m.Row, m.Col = g.RowCol(s.X, s.Y)
		if s.Shape != raster.ShapePoint {
			cells, _ := s.Cells(g) // their number was checked when the site was read
			for _, c := range cells {
				m.Cells = append(m.Cells, mask.Cell{Row: c[0], Col: c[1]})
			}
		}
		list = append(list, m)
	}
	return list
}

// fill makes the pairs of the results.
func (r *siteReport) fill(results []mask.SiteResult) error {
	n := len(r.looks)
	lon, lat, err := r.lonLat()
	if err != nil {
		return err
	}
	r.pairs = make([]pair, len(r.sites.List)*n)
	at := map[int]int{} // site to its place among the judged
	for k, i := range r.judged {
		at[i] = k
	}
	for i := range r.sites.List {
		for k := range r.looks {
			p := &r.pairs[i*n+k]
			*p = pair{site: &r.sites.List[i], look: &r.looks[k], lon: lon[i], lat: lat[i]}
			if j, ok := at[i]; ok {
				p.result = results[j*n+k]
				if p.result.Where != mask.OnGround && len(p.site.Paths) == 0 {
					p.problem = p.result.Reason
				}
			} else {
				p.problem = sentence(p.site.Problem)
				p.result = notJudged(p.problem)
			}
			p.blocker, p.partner = r.spot(&p.result.Blocker), r.spot(&p.result.Partner)
			p.aid = r.reflector.aid(p)
		}
	}
	return nil
}

// lonLat returns the sites' places in WGS84.
func (r *siteReport) lonLat() (lon, lat []float64, err error) {
	locate, done, err := raster.LonLat(r.src.Grid())
	if err != nil {
		return nil, nil, err
	}
	defer done()
	for i := range r.sites.List {
		lon, lat = append(lon, r.sites.List[i].X), append(lat, r.sites.List[i].Y)
	}
	return lon, lat, locate(lon, lat)
}

// spot is the place of terrain in map units.
func (r *siteReport) spot(t *mask.Terrain) [2]float64 {
	if !t.Found() {
		return [2]float64{math.NaN(), math.NaN()}
	}
	x, y := r.src.Grid().XY(t.Row, t.Col)
	return [2]float64{x, y}
}

// notJudged is the result of a site without a place.
func notJudged(reason string) mask.SiteResult {
	nan, angle := math.NaN(), geometry.NotGiven
	none := mask.Terrain{Row: nan, Col: nan, Place: geometry.Place{Lon: angle, Lat: angle}, Height: nan, Distance: nan}
	return mask.SiteResult{
		Where: mask.OutsideDEM, Class: mask.NoData, Layover: mask.NoData, Shadow: mask.NoData,
		Verdict: mask.UndeterminedThere, Reason: reason,
		Ground: nan, Clearance: nan, FoldMargin: nan, Blocker: none, Partner: none, MastToClear: nan,
		Incidence: angle, LocalIncidence: angle, RangeIncidence: angle, LookAzimuth: angle,
		ToRadar: angle, GridToRadar: angle, Elevation: angle, LineOfSight: geometry.ENU{East: nan, North: nan, Up: nan},
		SlantRange: nan, Foreshortening: nan, GroundResolution: nan, AreaFactor: nan, Downslope: nan,
		CriticalBaseline: nan, AmbiguityHeight: nan, Fringe: nan, FringeDownslope: nan,
		Shares: mask.Shares{nan, nan, nan, nan, nan, nan},
		Chance: mask.Chance{Open: nan, Folded: nan, Hidden: nan, Undetermined: nan, StdErr: nan},
	}
}

// sentence makes a sentence of a line.
func sentence(line string) string {
	first, n := utf8.DecodeRuneInString(line)
	return string(unicode.ToUpper(first)) + strings.TrimSuffix(line[n:], ".") + "."
}
