package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"foldshade/cmd/internal/demo"
	"foldshade/cmd/internal/lookfile"
	"foldshade/cmd/internal/picture"
	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/mask"
)

// The files of the demo, below its folder.
const (
	demoDEM     = "valley.tif"
	demoLooks   = "looks.yaml"
	demoSites   = "sites.geojson"
	demoPicture = "valley.png"
	demoLayers  = "layers"
	demoResults = "campaign.gpkg"
	demoSheet   = "sheet.html"
)

// What the demo takes for the error of its heights: metres.
const demoSigma, demoCorrelation = 3, 200

type demoJob struct {
	out       string
	overwrite bool
	stdout    io.Writer
	stderr    io.Writer
}

func newDemo() *cobra.Command {
	job := &demoJob{}
	cmd := &cobra.Command{
		Use:   "demo [--out DIR]",
		Short: "an invented valley, its sites and looks, and the main job on it",
		Long: `demo makes the Oltrenza valley, which does not exist, with a town, a glacier, a
landslide, a gorge and a pass. It writes the valley's DEM, sites and looks into a
folder, computes the layers of the looks, draws a picture of the result, judges the
sites, makes the field sheet that a crew would print, and says what to try next.`,
		Example: `  foldshade demo --out valley`,
		Args:    exactly(),
		RunE: func(cmd *cobra.Command, _ []string) error {
			job.stdout, job.stderr = cmd.OutOrStdout(), cmd.ErrOrStderr()
			return job.run(cmd.Context())
		},
		DisableFlagsInUseLine: true,
	}
	f := newFlags(cmd)
	f.StringVar(&job.out, "out", "demo", "folder for the files")
	f.BoolVar(&job.overwrite, "overwrite", false, "replace outputs that exist")
	inGroup(cmd, groupOutput, "out DIR", "overwrite")
	return cmd
}

// run makes the valley and does the main job on it, as `foldshade layers`
// would. All files get their final names together.
func (d *demoJob) run(ctx context.Context) error {
	if d.out == "" {
		return usagef("--out is empty; name a folder")
	}
	set, err := raster.NewSet(d.out, d.overwrite, nil)
	if err != nil {
		return err
	}
	defer set.Abort() // does nothing after Commit
	if err := writeText(set, demoLooks, demo.Looks); err != nil {
		return err
	}
	valley, err := demo.New(demo.Seed)
	if err != nil {
		return err
	}
	if err := writeText(set, demoSites, valley.GeoJSON()); err != nil {
		return err
	}
	scratch, err := os.MkdirTemp("", "foldshade-demo-*")
	if err != nil {
		return outputf("scratch folder: %w", err)
	}
	defer func() { _ = os.RemoveAll(scratch) }()
	src, err := openValley(valley, scratch, set)
	if err != nil {
		return err
	}
	defer func() { _ = src.Close() }() // opened for reading only
	result, err := d.layers(ctx, src, valley, scratch, set)
	if err != nil {
		return err
	}
	report, err := d.sites(ctx, src, scratch, valley.GeoJSON(), set)
	if err != nil {
		return err
	}
	if err := set.Commit(); err != nil {
		return err
	}
	return d.print(result, report)
}

func writeText(set *raster.Set, name, text string) error {
	file, err := set.File(name)
	if err != nil {
		return err
	}
	if _, err := io.WriteString(file, text); err != nil {
		return err
	}
	return file.Close()
}

// openValley writes the valley's DEM into a scratch folder, copies it into the
// set and opens the scratch file: the one in the set has no final name yet.
func openValley(v *demo.Valley, scratch string, set *raster.Set) (*raster.DEM, error) {
	if err := writeValley(v, scratch); err != nil {
		return nil, err
	}
	name := filepath.Join(scratch, demoDEM)
	content, err := os.ReadFile(name)
	if err != nil {
		return nil, outputf("%q: %w", name, reason(err))
	}
	if err := writeText(set, demoDEM, string(content)); err != nil {
		return nil, err
	}
	return raster.Open(name, raster.Options{})
}

// writeValley writes the valley's heights as a raster.
func writeValley(v *demo.Valley, dir string) error {
	set, err := raster.NewSet(dir, false, nil)
	if err != nil {
		return err
	}
	defer set.Abort()
	grid := &dem.Grid{Rows: v.Rows, Cols: v.Cols, Transform: v.Transform, CRS: fmt.Sprintf("EPSG:%d", v.EPSG)}
	layer := raster.Layer{
		Name: "valley", Title: "Oltrenza valley", Unit: "m",
		Description: "heights of a valley that does not exist",
		Metadata:    map[string]string{"AREA_OR_POINT": "Area", "TIFFTAG_SOFTWARE": "foldshade " + toolVersion()},
	}
	w, err := set.Writer("", layer, grid, grid.Whole())
	if err != nil {
		return err
	}
	if err := w.WriteFloats(grid.Whole(), 0, v.Heights); err != nil {
		return err
	}
	return set.Commit()
}

// layers computes the default layers of the demo's looks, and draws them.
func (d *demoJob) layers(ctx context.Context, src *raster.DEM, v *demo.Valley, scratch string, set *raster.Set) (*summary, error) {
	name := filepath.Join(scratch, demoLooks)
	if err := os.WriteFile(name, []byte(demo.Looks), 0o600); err != nil {
		return nil, outputf("%q: %w", name, reason(err))
	}
	looks, err := lookfile.Read(name)
	if err != nil {
		return nil, err
	}
	job := newLayersJob()
	job.out, job.stderr = d.out, io.Discard // the valley's warnings are no news
	job.said = filepath.Join(d.out, demoDEM)
	job.command = []string{"foldshade", "layers", job.said, "--looks", filepath.Join(d.out, demoLooks),
		"--out", filepath.Join(d.out, demoLayers)}
	grid := src.Grid()
	verdicts := make([][]uint8, len(looks))
	for i := range verdicts {
		verdicts[i] = make([]uint8, grid.Rows*grid.Cols)
	}
	job.tap = func(look int, t *mask.Tile) {
		for r := range t.Window.Rows {
			at := (t.Window.Row+r)*grid.Cols + t.Window.Col
			copy(verdicts[look][at:at+t.Window.Cols], t.Classes[mask.VerdictLayer][r*t.Window.Cols:])
		}
	}
	result, err := job.compute(ctx, src, looks, mask.DefaultLayers, grid.Whole(), set, demoLayers)
	if err != nil {
		return nil, err
	}
	panel := picture.Panel{Title: "Oltrenza valley", Subtitle: "an invented place, seen by three invented radars"}
	for i, look := range looks {
		m := picture.Map{
			Grid: grid, Heights: v.Heights, Classes: verdicts[i],
			Look: picture.Look{Name: look.Name, Incidence: look.Incidence, Azimuth: look.Azimuth},
		}
		for _, s := range v.Sites {
			m.Sites = append(m.Sites, picture.Site{Name: s.Name, X: s.X, Y: s.Y})
		}
		panel.Maps = append(panel.Maps, m)
	}
	file, err := set.File(demoPicture)
	if err != nil {
		return nil, err
	}
	if err := picture.RenderPanel(file, panel); err != nil {
		return nil, err
	}
	return result, file.Close()
}

// sites judges the sites of the valley and makes the field sheet, as
// `foldshade sites` would.
func (d *demoJob) sites(ctx context.Context, src *raster.DEM, scratch, sites string, set *raster.Set) (*siteReport, error) {
	name := filepath.Join(scratch, demoSites)
	if err := os.WriteFile(name, []byte(sites), 0o600); err != nil {
		return nil, outputf("%q: %w", name, reason(err))
	}
	looks, err := lookfile.Read(filepath.Join(scratch, demoLooks))
	if err != nil {
		return nil, err
	}
	list, err := raster.ReadSites(name, raster.SiteOptions{}, src.Grid())
	if err != nil {
		return nil, err
	}
	list.Name = filepath.Join(d.out, demoSites)
	job := newSitesJob()
	job.stderr, job.said, job.title = io.Discard, filepath.Join(d.out, demoDEM), "Oltrenza valley"
	job.errors = mask.DEMError{Sigma: demoSigma, Correlation: demoCorrelation}
	job.out, job.sheet = []string{filepath.Join(d.out, demoResults)}, filepath.Join(d.out, demoSheet)
	job.command = []string{"foldshade", "sites", job.said, "--sites", list.Name, "--looks", filepath.Join(d.out, demoLooks),
		"--dem-sigma", fmt.Sprint(demoSigma), "--dem-correlation", fmt.Sprint(demoCorrelation),
		"--out", job.out[0], "--sheet", job.sheet, "--title", job.title}
	out := &siteOutputs{}
	for _, f := range []namedOutput{{demoResults, asGeoPackage}, {demoSheet, asSheet}} {
		if err := out.claim(set, f, f.path); err != nil {
			return nil, err
		}
	}
	report, err := job.compute(ctx, src, list, looks)
	if err != nil {
		return nil, err
	}
	return report, out.write(ctx, report)
}

// print says what was made and what to try next.
func (d *demoJob) print(s *summary, sites *siteReport) error {
	w := d.stdout
	at := func(name string) string { return filepath.Join(d.out, name) }
	fmt.Fprint(w, "The Oltrenza valley, which does not exist, and what three invented radars see of it:\n\n")
	if err := s.print(w, false); err != nil {
		return err
	}
	fmt.Fprint(w, "\nIts five sites under the looks:\n\n")
	sites.printTable(w)
	fmt.Fprintln(w, "\nMade:")
	printPairs(w, [][2]string{
		{"  " + at(demoPicture), "the picture to look at first"},
		{"  " + at(demoSheet), "the field sheet: open it in a browser, print it on A4"},
		{"  " + at(demoDEM), "the DEM"},
		{"  " + at(demoLooks), "the looks; change one and run again"},
		{"  " + at(demoSites), "town, glacier, landslide, gorge and pass"},
		{"  " + at(demoLayers), "a folder a look: five layers and item.json; open them in a GIS"},
		{"  " + at(demoResults), "the sites, their verdicts, and lines to what hides or folds them"},
	})
	fmt.Fprintf(w, `
Try next:
  foldshade inspect %[1]s
  foldshade layers %[1]s --look name=mine,incidence=45,azimuth=200 --out %[2]s
  foldshade sites %[1]s --sites %[3]s --look name=mine,incidence=45,azimuth=200
  foldshade layers YOUR_DEM.tif --look incidence=38,heading=347,side=right --out layers

Open to the radar does not mean safe to stand on: steep ground, rockfall, avalanches
and crevasses are not on these maps. Local codes, permits and licensed practice come first.
`, shellJoin([]string{at(demoDEM)}), shellJoin([]string{at("mine")}), shellJoin([]string{at(demoSites)}))
	return nil
}
