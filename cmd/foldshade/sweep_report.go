package main

import (
	"encoding/csv"
	"fmt"
	"io"
	"path/filepath"
	"slices"
	"strings"

	"foldshade/cmd/internal/chart"
	"foldshade/geometry"
	"foldshade/mask"
)

// sweepSummary is what a sweep found, for people and for machines.
type sweepSummary struct {
	dir        string
	job        *sweepJob
	space      *mask.SweepResult
	candidates []geometry.Look
	ranked     *mask.SweepResult // nil without candidates
	warnings   []string
}

// shareColumns are the kinds of a look's cells, in the order of the tables.
var shareColumns = []string{"open", "compressed", "layover", "shadow", "undetermined"}

func shares(l *mask.LookShare, cells int64) []float64 {
	var out []float64
	for _, n := range []int64{l.Open, l.Compressed, l.Layover, l.Shadow, l.Undetermined} {
		out = append(out, float64(n)/float64(max(cells, 1)))
	}
	return out
}

// degrees writes an angle as people gave it.
func degrees(a geometry.Angle) string { return shortest(rounded(a.Degrees(), 6)) }

// writeSpace writes a row a pair of azimuth and incidence.
func (s *sweepSummary) writeSpace(to io.Writer) error {
	w := csv.NewWriter(to)
	_ = w.Write(append([]string{"azimuth", "incidence"}, shareColumns...)) // Error tells
	for i := range s.space.Looks {
		l := &s.space.Looks[i]
		_ = w.Write(append([]string{degrees(l.Azimuth), degrees(l.Incidence)}, shareTexts(l, s.space.Cells)...))
	}
	w.Flush()
	return w.Error()
}

func shareTexts(l *mask.LookShare, cells int64) []string {
	var out []string
	for _, x := range shares(l, cells) {
		out = append(out, fmt.Sprintf("%.6f", x))
	}
	return out
}

// writeCandidates writes a row a candidate, the best first.
func (s *sweepSummary) writeCandidates(to io.Writer) error {
	w := csv.NewWriter(to)
	_ = w.Write(append([]string{"name", "kind"}, shareColumns...)) // Error tells
	for _, i := range s.ranking() {
		_ = w.Write(append([]string{s.candidates[i].Name, string(s.candidates[i].Kind)}, shareTexts(&s.ranked.Looks[i], s.ranked.Cells)...))
	}
	w.Flush()
	return w.Error()
}

// ranking returns the candidates, most open cells first.
func (s *sweepSummary) ranking() []int { return byOpen(s.ranked.Looks) }

func byOpen(looks []mask.LookShare) []int {
	order := make([]int, len(looks))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return int(looks[b].Open - looks[a].Open) })
	return order
}

// lookName names a look of the space.
func lookName(l *mask.LookShare) string {
	return fmt.Sprintf("%s°/%s°", degrees(l.Azimuth), degrees(l.Incidence))
}

func (s *sweepSummary) spaceName(i int) string { return lookName(&s.space.Looks[i]) }

func (s *sweepSummary) candidateName(i int) string { return s.candidates[i].Name }

// jsonLook, jsonSet and jsonSweep are the summary as JSON has it.
type jsonLook struct {
	Name      string             `json:"name,omitempty"`
	Kind      string             `json:"kind,omitempty"`
	Azimuth   float64            `json:"azimuth"`
	Incidence float64            `json:"incidence"`
	Share     map[string]float64 `json:"share,omitempty"`
}

type jsonSet struct {
	Looks []jsonLook `json:"looks"`
	Cells int64      `json:"cells"`
	Share float64    `json:"share"`
	Exact bool       `json:"exact"`
}

type jsonSpace struct {
	Cells         int64      `json:"cells"`
	Looks         []jsonLook `json:"looks"`
	Coverage      []jsonSet  `json:"coverage"`
	TwoDirections []jsonSet  `json:"two_directions"`
}

type jsonSweep struct {
	jsonSpace
	Condition  float64           `json:"condition"`
	Candidates *jsonSpace        `json:"candidates"`
	Files      map[string]string `json:"files"`
	Warnings   []string          `json:"warnings"`
}

func newJSONSpace(r *mask.SweepResult, candidates []geometry.Look) jsonSpace {
	look := func(i int, share bool) jsonLook {
		l := &r.Looks[i]
		out := jsonLook{Azimuth: rounded(l.Azimuth.Degrees(), 6), Incidence: rounded(l.Incidence.Degrees(), 6)}
		if candidates != nil {
			out.Name, out.Kind = candidates[i].Name, string(candidates[i].Kind)
		}
		if share {
			out.Share = map[string]float64{}
			for k, x := range shares(l, r.Cells) {
				out.Share[shareColumns[k]] = rounded(x, 6)
			}
		}
		return out
	}
	sets := func(from []mask.LookSet) []jsonSet {
		out := []jsonSet{}
		for _, f := range from {
			set := jsonSet{Cells: f.Cells, Share: rounded(float64(f.Cells)/float64(max(r.Cells, 1)), 6), Exact: f.Exact}
			for _, i := range f.Looks {
				set.Looks = append(set.Looks, look(i, false))
			}
			out = append(out, set)
		}
		return out
	}
	s := jsonSpace{Cells: r.Cells, Coverage: sets(r.Coverage), TwoDirections: sets(r.TwoDirections)}
	for i := range r.Looks {
		s.Looks = append(s.Looks, look(i, true))
	}
	return s
}

func (s *sweepSummary) files() map[string]string {
	files := map[string]string{}
	names := []string{sweepTable, sweepPNG, sweepSVG}
	if s.ranked != nil {
		names = append(names, sweepLooks)
	}
	if s.job.rasters {
		for _, n := range sweepRasterNames() {
			names = append(names, n+".tif")
		}
	}
	for _, n := range names {
		files[n] = filepath.Join(s.dir, n)
	}
	return files
}

func (s *sweepSummary) print(w io.Writer, asJSON bool) error {
	if asJSON {
		out := jsonSweep{jsonSpace: newJSONSpace(s.space, nil), Condition: s.job.condition, Files: s.files(), Warnings: append([]string{}, s.warnings...)}
		if s.ranked != nil {
			ranked := newJSONSpace(s.ranked, s.candidates)
			out.Candidates = &ranked
		}
		return printJSON(w, out)
	}
	fmt.Fprintf(w, "%d azimuths x %d incidences over %d cells; the open looks that see the most:\n\n",
		len(s.job.azimuths), len(s.job.incidences), s.space.Cells)
	const top = 5
	var rows [][]string
	for k, i := range byOpen(s.space.Looks) {
		if k == top {
			break
		}
		l := &s.space.Looks[i]
		rows = append(rows, append([]string{degrees(l.Azimuth), degrees(l.Incidence)}, percents(l, s.space.Cells)...))
	}
	printTable(w, append([]string{"azimuth", "incidence"}, shareColumns...), rows)
	s.printSets(w, s.space, s.spaceName)
	if s.ranked != nil {
		fmt.Fprintf(w, "\nYour looks, by their exact masks:\n\n")
		rows = nil
		for _, i := range s.ranking() {
			rows = append(rows, append([]string{s.candidates[i].Name, string(s.candidates[i].Kind)}, percents(&s.ranked.Looks[i], s.ranked.Cells)...))
		}
		printTable(w, append([]string{"look", "kind"}, shareColumns...), rows)
		s.printSets(w, s.ranked, s.candidateName)
	}
	fmt.Fprintf(w, "\n%d files in %s; shares of cells. Looks are azimuth/incidence in degrees.\n", len(s.files()), s.dir)
	return nil
}

func percents(l *mask.LookShare, cells int64) []string {
	var out []string
	for _, x := range shares(l, cells) {
		out = append(out, fmt.Sprintf("%.1f %%", 100*x))
	}
	return out
}

// printSets prints the best sets of two looks and more.
func (s *sweepSummary) printSets(w io.Writer, r *mask.SweepResult, name func(int) string) {
	if s.job.best < 2 {
		return
	}
	var rows [][]string
	add := func(sets []mask.LookSet, goal string) {
		for _, set := range sets {
			if len(set.Looks) < 2 {
				continue
			}
			how := "exact"
			if !set.Exact {
				how = "greedy"
			}
			rows = append(rows, []string{goal, setNames(set, name), percent(set.Cells, r.Cells), how})
		}
	}
	add(r.Coverage, "open in at least one")
	add(r.TwoDirections, "east and up from two")
	if len(rows) > 0 {
		fmt.Fprintln(w)
		printTable(w, []string{"goal", "looks", "cells", "search"}, rows)
	}
	if len(r.TwoDirections) == 0 {
		fmt.Fprintf(w, "\nNo two looks that are open on one cell tell east from up at condition %s or less.\n", shortest(s.job.condition))
	}
}

func percent(n, of int64) string { return fmt.Sprintf("%.1f %%", 100*float64(n)/float64(max(of, 1))) }

func setNames(set mask.LookSet, name func(int) string) string {
	var names []string
	for _, i := range set.Looks {
		names = append(names, name(i))
	}
	return strings.Join(names, " ")
}

// chart is the look space with its best looks and the candidates.
func (s *sweepSummary) chart() *chart.Chart {
	c := &chart.Chart{
		Title: "Look space over " + filepath.Base(s.job.name),
		Subtitle: fmt.Sprintf("%d azimuths x %d incidences, %d cells; plane waves, open: lit once, not compressed",
			len(s.job.azimuths), len(s.job.incidences), s.space.Cells),
	}
	for _, a := range s.job.azimuths {
		c.Azimuths = append(c.Azimuths, a.Degrees())
	}
	for _, a := range s.job.incidences {
		c.Incidences = append(c.Incidences, a.Degrees())
	}
	for i := range s.space.Looks {
		c.Share = append(c.Share, float64(s.space.Looks[i].Open)/float64(s.space.Cells))
	}
	mark := func(kind chart.Kind, sets []mask.LookSet, size int, text string) {
		for _, set := range sets {
			if len(set.Looks) != size {
				continue
			}
			line := fmt.Sprintf("%s: %s, %s", text, strings.ReplaceAll(setNames(set, s.spaceName), " ", " and "), percent(set.Cells, s.space.Cells))
			for _, i := range set.Looks {
				l := &s.space.Looks[i]
				c.Marks = append(c.Marks, chart.Mark{Kind: kind, Azimuth: l.Azimuth.Degrees(), Incidence: l.Incidence.Degrees(), Text: line})
			}
		}
	}
	mark(chart.Best, s.space.Coverage, 1, "best single look")
	mark(chart.Pair, s.space.Coverage, 2, "best pair, open in at least one")
	mark(chart.Two, s.space.TwoDirections, 2, "best pair, east and up from both")
	if s.ranked != nil {
		for i := range s.ranked.Looks {
			l := &s.ranked.Looks[i]
			c.Marks = append(c.Marks, chart.Mark{Kind: chart.User, Azimuth: l.Azimuth.Degrees(), Incidence: l.Incidence.Degrees(),
				Name: s.candidates[i].Name, Text: "your looks"})
		}
	}
	return c
}
