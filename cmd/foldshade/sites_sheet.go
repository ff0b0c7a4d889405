package main

import (
	"bytes"
	"cmp"
	"context"
	"fmt"
	"image/png"
	"io"
	"math"
	"path/filepath"
	"slices"
	"time"

	"foldshade/cmd/internal/picture"
	"foldshade/cmd/internal/sheet"
	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// What a sheet shows at most, so that it stays a sheet.
const (
	sheetMaps     = 4   // looks with a map
	sheetProfiles = 4   // looks with a profile, a site
	sheetPixels   = 800 // of a map, the longer side
	skyStep       = 5   // degrees between the azimuths of a sky
)

// profileReach is how far a profile goes on both sides of a site at least:
// metres, and cells of the DEM.
const (
	profileMetres = 600
	profileCells  = 25
)

// writeSheet writes the field sheet.
func (r *siteReport) writeSheet(ctx context.Context, w io.Writer) error {
	s := &sheet.Sheet{
		Title: cmp.Or(r.title, "Sites of "+filepath.Base(r.sites.Name)), DEM: r.label(), Command: shellJoin(r.command),
		Software: fmt.Sprintf("foldshade %s, GDAL %s", toolVersion(), raster.GDALVersion()),
		Made:     time.Now().UTC().Truncate(time.Second), Facts: r.facts(), Warnings: r.warnings,
		MapDecimals: r.mapDecimals(),
	}
	for i := range r.looks {
		l := &r.looks[i]
		look := sheet.Look{Name: l.Name, Kind: string(l.Kind)}
		for _, p := range l.Pairs() {
			if p.Key != "name" {
				look.Pairs = append(look.Pairs, [2]string{p.Key, p.Value})
			}
		}
		s.Looks = append(s.Looks, look)
	}
	columns := r.resultColumns()
	for _, c := range columns {
		if _, ok := c.sample.(float64); ok {
			s.Quantities = append(s.Quantities, sheet.Quantity{Key: c.name, Title: c.title, Unit: c.unit, Decimals: c.decimals})
		}
	}
	shown := min(len(r.sites.List), sheet.MostSites())
	s.Left = len(r.sites.List) - shown
	for i := range shown {
		s.Sites = append(s.Sites, r.sheetSite(i, columns))
	}
	if err := r.addSkies(ctx, s); err != nil {
		return err
	}
	if err := r.addProfiles(ctx, s); err != nil {
		return err
	}
	if err := r.addMaps(ctx, s); err != nil {
		return err
	}
	return sheet.Render(w, s)
}

// facts are the settings behind the results.
func (r *siteReport) facts() [][2]string {
	f := r.src.Facts()
	facts := [][2]string{
		{"DEM grid", fmt.Sprintf("%d x %d cells of %s x %s m in %s", f.Rows, f.Cols, fixed(f.Centre.ColM, 2), fixed(f.Centre.RowM, 2), cmp.Or(f.CRSCode, f.CRS))},
		{"Sites", r.sites.Name},
	}
	o := r.job.Options
	edge := "it is not known what stands there"
	if o.OpenEdge {
		edge = "nothing stands there"
	}
	facts = append(facts, [2]string{"Outside the DEM", edge})
	if !math.IsNaN(o.Ceiling) {
		facts = append(facts, [2]string{"Highest terrain that the DEM may not show", shortest(o.Ceiling) + " m"})
	}
	if !math.IsNaN(o.HoleHeight) {
		facts = append(facts, [2]string{"Height in holes", shortest(o.HoleHeight) + " m"})
	}
	facts = append(facts, [2]string{"Compressed below a foreshortening of", shortest(o.CompressedBelow)})
	if e := r.job.DEMError; e.Sigma > 0 {
		facts = append(facts, [2]string{"Error of the heights", fmt.Sprintf("standard deviation %s m, alike over %s m, seed %d", shortest(e.Sigma), shortest(e.Correlation), e.Seed)})
	} else {
		facts = append(facts, [2]string{"Error of the heights", "not given: margins within a few metres are to be doubted"})
	}
	return facts
}

// sheetSite is a site with its numbers, rounded as in the files.
func (r *siteReport) sheetSite(i int, columns []siteColumn) sheet.Site {
	n := len(r.looks)
	first := &r.pairs[i*n]
	s := sheet.Site{
		Name: first.site.Name, Shape: string(first.site.Shape), Lon: first.lon, Lat: first.lat, X: first.site.X, Y: first.site.Y,
		Ground: roundTo(first.result.Ground, 2), Height: first.site.Height, Footprint: first.site.Footprint, Problem: first.site.Problem,
	}
	if math.IsNaN(first.result.Ground) {
		s.Ground = math.NaN()
	}
	for k := range n {
		p := &r.pairs[i*n+k]
		q := sheet.Pair{
			Code: int(p.result.Class), Class: p.result.Class.String(), Verdict: string(p.result.Verdict), Reason: p.result.Reason,
			Values: map[string]float64{}, Notes: p.aid.notes(),
			ToRadar: p.result.ToRadar.Degrees(), Incidence: p.result.Incidence.Degrees(),
		}
		for c := range columns {
			if v, ok := columns[c].value(p).(float64); ok {
				q.Values[columns[c].name] = v
			}
		}
		s.Pairs = append(s.Pairs, q)
	}
	return s
}

// shownJob is the job of the judged sites that the sheet shows, and their
// places on it.
func (r *siteReport) shownJob(s *sheet.Sheet) (mask.SitesJob, []int) {
	job := r.job
	var places []int
	for _, i := range r.judged {
		if i < len(s.Sites) {
			places = append(places, i)
		}
	}
	job.Sites = job.Sites[:len(places)]
	return job, places
}

// addSkies adds the sky of looks of every site.
func (r *siteReport) addSkies(ctx context.Context, s *sheet.Sheet) error {
	var azimuths []geometry.Angle
	for a := 0; a < 360; a += skyStep {
		azimuths = append(azimuths, geometry.Angle(a)*geometry.Degree)
	}
	job, places := r.shownJob(s)
	if len(places) == 0 {
		return nil
	}
	skies, err := mask.SkyOfLooks(ctx, job, azimuths)
	if err != nil {
		return err
	}
	for k, i := range places {
		for _, ray := range skies[k] {
			s.Sites[i].Sky = append(s.Sites[i].Sky, sheet.Ray{
				ToRadar: (ray.Azimuth + 180*geometry.Degree).Turn().Degrees(), Low: ray.Low.Degrees(), High: ray.High.Degrees(),
				LowSure: ray.LowSure.Degrees(), HighSure: ray.HighSure.Degrees(),
			})
		}
	}
	return nil
}

// addProfiles adds the terrain under the looks that serve each site best.
func (r *siteReport) addProfiles(ctx context.Context, s *sheet.Sheet) error {
	job, places := r.shownJob(s)
	centre := r.src.Facts().Centre
	reach := max(profileMetres, profileCells*max(centre.ColM, centre.RowM))
	for k, i := range places {
		if err := ctx.Err(); err != nil {
			return err
		}
		for _, look := range r.bestLooks(i, sheetProfiles) {
			if q := &r.pairs[i*len(r.looks)+look].result; q.Where != mask.OnGround || q.Verdict == mask.NotSeen {
				continue // no ground to cut, or no ray to cut it along
			}
			p, err := mask.SiteProfile(ctx, job, k, look, reach)
			if err != nil {
				return err
			}
			if len(p.Points) > 1 {
				s.Sites[i].Profiles = append(s.Sites[i].Profiles, r.sheetProfile(p, i, look))
			}
		}
	}
	return nil
}

// bestLooks returns at most n looks of a site, the best first: by verdict,
// then by the smaller of its margins.
func (r *siteReport) bestLooks(site, n int) []int {
	order := make([]int, len(r.looks))
	for i := range order {
		order[i] = i
	}
	rank := func(look int) (int, float64) {
		q := &r.pairs[site*len(r.looks)+look].result
		margin := math.Inf(1)
		for _, m := range []float64{q.Clearance, q.FoldMargin} {
			if !math.IsNaN(m) {
				margin = min(margin, m)
			}
		}
		return slices.Index(mask.Verdicts, q.Verdict), -margin
	}
	slices.SortStableFunc(order, func(a, b int) int {
		va, ma := rank(a)
		vb, mb := rank(b)
		return cmp.Or(cmp.Compare(va, vb), cmp.Compare(ma, mb))
	})
	return order[:min(n, len(order))]
}

func (r *siteReport) sheetProfile(p *mask.Profile, site, look int) sheet.Profile {
	out := sheet.Profile{
		Look: look, At: p.Site, Incidence: p.Incidence.Degrees(),
		ToRadar: (p.LookAzimuth + 180*geometry.Degree).Turn().Degrees(), SlantRange: math.NaN(),
	}
	if r.looks[look].Kind != geometry.Fixed {
		out.SlantRange = r.pairs[site*len(r.looks)+look].result.SlantRange
	}
	for _, q := range p.Points {
		out.Points = append(out.Points, sheet.ProfilePoint{Distance: q.Distance, Height: q.Height, Class: q.Class})
	}
	q := &r.pairs[site*len(r.looks)+look].result
	out.Blocker = sheet.ProfileMark{Distance: q.Blocker.Distance, Height: q.Blocker.Height}
	out.Partner = sheet.ProfileMark{Distance: q.Partner.Distance, Height: q.Partner.Height}
	return out
}

// addMaps adds the maps of the looks that serve most sites, in their order.
func (r *siteReport) addMaps(ctx context.Context, s *sheet.Sheet) error {
	window := r.mapWindow(s)
	step := max(1, (max(window.Rows, window.Cols)+sheetPixels-1)/sheetPixels)
	grid, err := thinGrid(r.src.Grid(), window, step)
	if err != nil {
		return err
	}
	heights, err := thinHeights(r.src, window, step, grid)
	if err != nil {
		return err
	}
	looks := r.mapLooks(len(s.Sites))
	classes, err := r.thinClasses(ctx, looks, window, step, grid)
	if err != nil {
		return err
	}
	for k, look := range looks {
		m, err := r.sheetMap(s, picture.Map{Grid: grid, Heights: heights, Classes: classes[k]}, look)
		if err != nil {
			return err
		}
		s.Maps = append(s.Maps, *m)
	}
	return nil
}

// mapLooks chooses the looks with maps: those that measure most of the shown
// sites.
func (r *siteReport) mapLooks(shown int) []int {
	n := len(r.looks)
	order, serves := make([]int, n), make([]int, n)
	for k := range n {
		order[k] = k
		for i := range shown {
			if v := r.pairs[i*n+k].result.Verdict; v == mask.Usable || v == mask.Marginal {
				serves[k]++
			}
		}
	}
	slices.SortStableFunc(order, func(a, b int) int { return serves[b] - serves[a] })
	order = order[:min(sheetMaps, n)]
	slices.Sort(order)
	return order
}

// mapWindow is the part of the DEM that the maps show: all sites and what
// decides about them, with room around.
func (r *siteReport) mapWindow(s *sheet.Sheet) dem.Window {
	g := r.src.Grid()
	r0, c0, r1, c1 := math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	add := func(row, col float64) {
		if row >= 0 && col >= 0 && row <= float64(g.Rows-1) && col <= float64(g.Cols-1) {
			r0, c0, r1, c1 = min(r0, row), min(c0, col), max(r1, row), max(c1, col)
		}
	}
	for i := range len(s.Sites) * len(r.looks) {
		p := &r.pairs[i]
		if !math.IsNaN(p.site.X + p.site.Y) {
			add(g.RowCol(p.site.X, p.site.Y))
		}
		for _, path := range p.site.Paths {
			for _, at := range path {
				add(g.RowCol(at[0], at[1]))
			}
		}
		if k := p.result.Class.Kind(); k == mask.CastShadow.Kind() {
			add(p.result.Blocker.Row, p.result.Blocker.Col)
		} else if k == mask.ActiveLayover.Kind() {
			add(p.result.Partner.Row, p.result.Partner.Col)
		}
	}
	const leastCells, around = 60, 0.18
	high, wide := r1-r0, c1-c0
	room := max(around*max(high, wide), leastCells/2)
	// A strip makes a poor map: the shorter side is at least 0.6 of the longer.
	r0, r1 = r0-room, r1+room
	c0, c1 = c0-room, c1+room
	if lack := 0.6*(c1-c0) - (r1 - r0); lack > 0 {
		r0, r1 = r0-lack/2, r1+lack/2
	}
	if lack := 0.6*(r1-r0) - (c1 - c0); lack > 0 {
		c0, c1 = c0-lack/2, c1+lack/2
	}
	return g.Clip(dem.Window{Row: int(math.Floor(r0)), Col: int(math.Floor(c0)), Rows: int(math.Ceil(r1-r0)) + 1, Cols: int(math.Ceil(c1-c0)) + 1})
}

// thinGrid is the grid of every step-th cell of a window.
func thinGrid(g *dem.Grid, w dem.Window, step int) (*dem.Grid, error) {
	x, y := g.XY(float64(w.Row), float64(w.Col)) // the centre of the first cell
	n, t := float64(step), g.Transform
	t[1], t[5] = n*t[1], n*t[5]
	t[0], t[3] = x-t[1]/2, y-t[5]/2
	return dem.NewGrid((w.Rows+step-1)/step, (w.Cols+step-1)/step, t, g.CRS, func(x, y []float64) error {
		for i := range x {
			at := g.At(g.RowCol(x[i], y[i]))
			x[i], y[i] = at.Lon.Degrees(), at.Lat.Degrees()
		}
		return nil
	})
}

// thinHeights reads the heights of a thinned grid.
func thinHeights(src dem.Source, w dem.Window, step int, grid *dem.Grid) ([]float32, error) {
	row := make([]float32, w.Cols)
	var heights []float32
	for r := 0; r < w.Rows; r += step {
		if err := src.Read(dem.Window{Row: w.Row + r, Col: w.Col, Rows: 1, Cols: w.Cols}, row); err != nil {
			return nil, err
		}
		for c := 0; c < w.Cols; c += step {
			heights = append(heights, row[c])
		}
	}
	return heights, nil
}

// thinClasses computes the verdict layer of looks over a window and keeps every
// step-th cell.
func (r *siteReport) thinClasses(ctx context.Context, looks []int, w dem.Window, step int, grid *dem.Grid) ([][]uint8, error) {
	job := mask.Job{
		Source: r.src, Range: r.job.Range, Layers: []mask.Layer{mask.VerdictLayer}, Window: w, Options: r.job.Options,
	}
	classes := make([][]uint8, len(looks))
	for i, k := range looks {
		job.Looks = append(job.Looks, r.looks[k])
		classes[i] = make([]uint8, grid.Rows*grid.Cols)
	}
	bar := newProgress(r.stderr, "mapping  ")
	defer bar.close()
	job.Progress = bar.update
	job.Emit = func(look int, t *mask.Tile) error {
		codes := t.Classes[mask.VerdictLayer]
		for row := range t.Window.Rows {
			r0 := t.Window.Row + row - w.Row
			if r0%step != 0 {
				continue
			}
			for col := (step - (t.Window.Col-w.Col)%step) % step; col < t.Window.Cols; col += step {
				classes[look][r0/step*grid.Cols+(t.Window.Col+col-w.Col)/step] = codes[row*t.Window.Cols+col]
			}
		}
		return nil
	}
	_, err := mask.Run(ctx, job)
	return classes, err
}

// sheetMap draws a map and places the sites on it.
func (r *siteReport) sheetMap(s *sheet.Sheet, m picture.Map, look int) (*sheet.Map, error) {
	drawn, err := picture.Draw(m, sheetPixels, sheetPixels)
	if err != nil {
		return nil, err
	}
	var b bytes.Buffer
	if err := png.Encode(&b, drawn.Image); err != nil {
		return nil, err
	}
	size := drawn.Image.Bounds().Size()
	out := &sheet.Map{Look: look, PNG: b.Bytes(), Width: size.X, Height: size.Y,
		MetresPerPixel: drawn.MetresPerPixel, North: geometry.Angle(drawn.North).Degrees()}
	for i := range s.Sites {
		site := &r.sites.List[i]
		x, y := drawn.At(site.X, site.Y)
		out.Marks = append(out.Marks, [2]float64{x, y})
		for _, path := range site.Paths {
			o := sheet.Outline{Site: i, Closed: site.Shape == raster.ShapePolygon}
			for _, p := range path {
				x, y := drawn.At(p[0], p[1])
				o.Path = append(o.Path, [2]float64{x, y})
			}
			if len(path) > 1 {
				out.Outlines = append(out.Outlines, o)
			}
		}
	}
	return out, nil
}
