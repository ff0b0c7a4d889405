package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strings"
	"unicode/utf8"

	"foldshade/mask"
)

// print writes the table or the JSON.
func (r *siteReport) print(w io.Writer, asJSON bool) error {
	if asJSON {
		return r.printJSON(w)
	}
	r.printTable(w)
	fmt.Fprintln(w, "\nmargins in metres, angles in degrees; to radar: azimuth from true north")
	r.printReasons(w)
	if r.reflector.wanted() {
		r.printReflectors(w)
	}
	r.printFiles(w)
	return nil
}

// printJSON prints the rows as printJSON of the package would, one at a time:
// a large campaign has a hundred thousand of them.
func (r *siteReport) printJSON(w io.Writer) error {
	out := bufio.NewWriter(w)
	before := "[\n  "
	var b bytes.Buffer
	for _, row := range r.records() {
		text, err := row.MarshalJSON()
		if err != nil {
			return err
		}
		b.Reset()
		b.WriteString(before)
		if err := json.Indent(&b, text, "  ", "  "); err != nil {
			return err
		}
		if _, err := out.Write(b.Bytes()); err != nil {
			return err
		}
		before = ",\n  "
	}
	_, _ = out.WriteString("\n]\n") // Flush has its error
	return out.Flush()
}

// printTable prints one line a site and look.
func (r *siteReport) printTable(w io.Writer) {
	head := []string{"site", "look", "verdict", "class", "clearance", "fold margin", "local inc.", "to radar"}
	chance := r.job.DEMError.Sigma > 0
	if chance {
		head = append(head, "p(open)")
	}
	var rows [][]string
	for i := range r.pairs {
		p := &r.pairs[i]
		q := &p.result
		row := []string{short(p.site.Name, 28), short(p.look.Name, 24), string(q.Verdict), q.Class.String(),
			fixed(q.Clearance, 2), fixed(q.FoldMargin, 2), fixed(q.LocalIncidence.Degrees(), 2), fixed(azimuth(q.ToRadar), 2)}
		if chance {
			row = append(row, fixed(q.Chance.Open, 3))
		}
		rows = append(rows, row)
	}
	leftAlign(append(rows, head), 4)
	printTable(w, head, rows)
}

// printReasons says why pairs are not usable.
func (r *siteReport) printReasons(w io.Writer) {
	var pairs [][2]string
	for i := range r.pairs {
		if p := &r.pairs[i]; p.result.Verdict != mask.Usable {
			pairs = append(pairs, [2]string{short(p.site.Name, 28) + ", " + short(p.look.Name, 24) + ":", p.result.Reason})
		}
	}
	if len(pairs) > 0 {
		fmt.Fprintln(w)
		printPairs(w, pairs)
	}
}

// printReflectors prints the corner reflector aid, with its cautions.
func (r *siteReport) printReflectors(w io.Writer) {
	fmt.Fprintln(w)
	for i := range r.pairs {
		p := &r.pairs[i]
		if p.aid == nil {
			continue
		}
		fmt.Fprintf(w, "%s, %s:\n", short(p.site.Name, 28), short(p.look.Name, 24))
		for _, note := range p.aid.notes() {
			fmt.Fprintf(w, "  %s\n", note)
		}
	}
	fmt.Fprint(w, `
Cross-sections are those of flawless trihedrals along their axis. A reflector needs footings for the
wind and snow of the place, drained corners, and the owner's consent; codes and permits come first.
`)
}

func (r *siteReport) printFiles(w io.Writer) {
	files := r.out
	if r.sheet != "" {
		files = append(files[:len(files):len(files)], r.sheet)
	}
	if len(files) > 0 {
		fmt.Fprintf(w, "\nwritten: %s\n", strings.Join(files, ", "))
	}
}

// leftAlign pads the first columns so that a table that aligns right leaves
// them at the left.
func leftAlign(rows [][]string, columns int) {
	for c := range columns {
		width := 0
		for _, row := range rows {
			width = max(width, utf8.RuneCountInString(row[c]))
		}
		for _, row := range rows {
			row[c] += strings.Repeat(" ", width-utf8.RuneCountInString(row[c]))
		}
	}
}

// short cuts a long name for a table.
func short(name string, most int) string {
	if utf8.RuneCountInString(name) <= most {
		return name
	}
	return string([]rune(name)[:most-1]) + "…"
}

// fixed is a number with its decimals, a dash for none.
func fixed(v float64, decimals int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "-"
	}
	return fmt.Sprintf("%.*f", decimals, roundTo(v, decimals))
}

// mostLines bounds what is printed of many failures of one kind.
const mostLines = 20

// verdict tells of what could not be judged and of requirements that are not
// met, and returns the error of it.
func (r *siteReport) verdict(stderr io.Writer, require string) error {
	failed := r.printUnmet(stderr, require)
	bad, first := 0, ""
	for i := 0; i < len(r.pairs); i += len(r.looks) {
		p := &r.pairs[i]
		for k := range r.looks { // the height at a site may be missing for one look only
			if q := &r.pairs[i+k]; q.problem != "" {
				p = q
				break
			}
		}
		if p.problem == "" {
			continue
		}
		if bad++; bad == 1 {
			first = fmt.Sprintf("record %d, %q", p.site.Record, p.site.Name)
		}
		if bad <= mostLines {
			fmt.Fprintf(stderr, "not judged: record %d, %q: %s\n", p.site.Record, p.site.Name, oneLine(p.problem))
		}
	}
	if bad > mostLines {
		fmt.Fprintf(stderr, "not judged: %d more\n", bad-mostLines)
	}
	switch {
	case bad > 0:
		return hint(fmt.Errorf("sites %q: %d of %d could not be judged, the first %s; the others were", r.sites.Name, bad, len(r.sites.List), first),
			"correct or drop them; all results of the others stand")
	case failed > 0:
		return fmt.Errorf("%w: %d of %d pairs of site and look are not %s", errRequire, failed, len(r.pairs), require)
	}
	return nil
}

// printUnmet prints the pairs that are not what --require asks for, and
// returns their number.
func (r *siteReport) printUnmet(w io.Writer, require string) int {
	failed := 0
	for i := range r.pairs {
		p := &r.pairs[i]
		if require == "" || meets(&p.result, require) {
			continue
		}
		failed++
		if failed <= mostLines {
			fmt.Fprintf(w, "not %s: %q under look %q: %s\n", require, p.site.Name, p.look.Name, oneLine(p.result.Reason))
		}
	}
	if failed > mostLines {
		fmt.Fprintf(w, "not %s: %d more\n", require, failed-mostLines)
	}
	return failed
}

// meets reports whether a result is what --require asks for.
func meets(r *mask.SiteResult, require string) bool {
	if require == "open" {
		return r.Class == mask.Open
	}
	return r.Verdict == mask.Usable
}
