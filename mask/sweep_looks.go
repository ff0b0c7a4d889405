package mask

import (
	"context"
	"fmt"
	"sync"

	"foldshade/dem"
	"foldshade/geometry"
)

// RankJob asks how well looks of any kind serve a part of a grid, by the masks
// of Run.
type RankJob struct {
	// Job gives source, looks, window and options; its layers and Emit are set
	// aside.
	Job Job
	// Inside says which cells of the window count, row-major; nil for all.
	Inside []bool
	// Sights are the lines of sight of the looks, one each, by which two of
	// them separate east and up or do not: for looks whose lines of sight vary
	// over the grid those at the middle of the area.
	Sights    []geometry.ENU
	Best      int     // the most looks of the sets that are sought, 1 to MaxSet
	Condition float64 // the largest condition number that separates east and up
}

// MaxRanked is the most looks that are ranked at once.
const MaxRanked = patternBits

// rankBand is the most cells that are marched at once, 8 bytes each.
const rankBand = 1 << 23

// Rank marches every look and returns what it sees, in the order of the looks,
// and the best sets of them. Azimuth and Incidence of the result are those of
// the sights.
func Rank(ctx context.Context, job RankJob) (*SweepResult, error) {
	looks := job.Job.Looks
	n := len(looks)
	switch w := job.Job.Window; {
	case n < 1 || n > MaxRanked:
		return nil, fmt.Errorf("%d looks: 1 to %d can be ranked at once", n, MaxRanked)
	case len(job.Sights) != n:
		return nil, fmt.Errorf("%d lines of sight for %d looks", len(job.Sights), n)
	case job.Best < 1 || job.Best > MaxSet:
		return nil, fmt.Errorf("sets of %d looks: accepted are 1 to %d", job.Best, MaxSet)
	case job.Inside != nil && len(job.Inside) != w.Rows*w.Cols:
		return nil, fmt.Errorf("the mask of cells does not have the size of the window")
	}
	r := &ranking{RankJob: job, pattern: newPatterns(n), counts: make([][6]int64, n)}
	w := job.Job.Window
	rows := max(rankBand/max(w.Cols, 1), 1)
	bands := int64((w.Rows + rows - 1) / rows)
	for b := range bands {
		band := dem.Window{Row: w.Row + int(b)*rows, Col: w.Col, Rows: min(rows, w.Rows-int(b)*rows), Cols: w.Cols}
		if err := r.band(ctx, band, b, bands); err != nil {
			return nil, err
		}
	}
	return r.result(ctx)
}

// ranking is a Rank at work.
type ranking struct {
	RankJob
	counts  [][6]int64 // by look and kind
	pattern *patterns

	mu    sync.Mutex
	words []uint64 // of the band
}

// band marches the looks over rows of the window.
func (r *ranking) band(ctx context.Context, band dem.Window, done, all int64) error {
	r.words = resize(r.words, band.Rows*band.Cols)
	clear(r.words)
	job := r.Job
	job.Window, job.Layers = band, []Layer{VerdictLayer}
	job.Emit = func(look int, t *Tile) error {
		r.mu.Lock()
		defer r.mu.Unlock()
		r.take(band, look, t)
		return nil
	}
	if report := r.Job.Progress; report != nil {
		job.Progress = func(part, of int64) { report(done*of+part, all*of) }
	}
	if _, err := Run(ctx, job); err != nil {
		return err
	}
	r.pattern.addWords(r.words)
	return nil
}

func (r *ranking) take(band dem.Window, look int, t *Tile) {
	codes := t.Classes[VerdictLayer]
	w := r.Job.Window
	for row := range t.Window.Rows {
		in := (t.Window.Row-w.Row+row)*w.Cols + t.Window.Col - w.Col
		to := r.words[(t.Window.Row-band.Row+row)*band.Cols+t.Window.Col-band.Col:]
		for c := range t.Window.Cols {
			if r.Inside != nil && !r.Inside[in+c] {
				continue
			}
			code := Class(codes[row*t.Window.Cols+c])
			r.counts[look][code.Kind()]++
			if code == Open {
				to[c] |= 1 << look
			}
		}
	}
}

func (r *ranking) result(ctx context.Context) (*SweepResult, error) {
	r.pattern.gather()
	res := &SweepResult{}
	var open []int64
	for i, c := range r.counts {
		s := r.Sights[i]
		share := LookShare{
			Azimuth: s.LookAzimuth(), Incidence: s.Incidence(),
			Open: c[1], Compressed: c[2], Layover: c[3], Shadow: c[4], Undetermined: c[5],
		}
		res.Looks = append(res.Looks, share)
		res.Cells = max(res.Cells, c[1]+c[2]+c[3]+c[4]+c[5])
		open = append(open, c[1])
	}
	search := setSearch{open: open, both: r.pattern.both, apart: separating(r.Sights, r.Condition), more: r.pattern}
	var err error
	res.Coverage, res.TwoDirections, err = search.best(ctx, r.Best)
	return res, err
}
