package lookfile

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"strings"

	"foldshade/geometry"
)

// parseCSV reads looks from CSV: keys in the first row, one look a row, empty
// cells for what is not given. Commas, semicolons or tabs part the cells, as
// the first row has them; empty rows and rows that start with # are skipped.
func parseCSV(data []byte) ([]geometry.Look, error) {
	data, err := decode(data)
	if err != nil {
		return nil, err
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.Comma, r.Comment, r.FieldsPerRecord = separator(data), '#', -1
	r.TrimLeadingSpace = r.Comma != '\t' // else it would swallow empty cells
	header, line, err := nextRow(r)
	if err == io.EOF {
		return nil, fmt.Errorf("holds no row; the first row names the keys, such as name,incidence,heading,side")
	}
	if err != nil {
		return nil, err
	}
	if err := checkHeader(header, line); err != nil {
		return nil, err
	}
	var entries [][]geometry.Pair
	for {
		cells, line, err := nextRow(r)
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, err
		}
		pairs, err := rowPairs(header, cells, line)
		if err != nil {
			return nil, err
		}
		entries = append(entries, pairs)
	}
	if len(entries) == 0 {
		return nil, fmt.Errorf("holds no look under its first row; write one look a row")
	}
	return build(entries)
}

// checkHeader refuses unknown keys and keys that stand there twice, also in
// columns without a value.
func checkHeader(header []string, line int) error {
	first := map[string]int{}
	for i, cell := range header {
		key := strings.TrimSpace(cell)
		if key == "" {
			continue // refused once a row has a value there
		}
		where := fmt.Sprintf("line %d, column %d", line, i+1)
		if err := geometry.CheckKey(geometry.Pair{Key: key, Where: where}); err != nil {
			return err
		}
		if before, twice := first[key]; twice {
			return fmt.Errorf("%s: key %s has column %d already; keep one", where, key, before)
		}
		first[key] = i + 1
	}
	return nil
}

// separator returns what parts the cells: the first row that is no comment
// shows it, as keys hold neither semicolons nor tabs.
func separator(data []byte) rune {
	for line := range bytes.Lines(data) {
		if t := bytes.TrimSpace(line); len(t) == 0 || t[0] == '#' {
			continue
		}
		switch {
		case bytes.ContainsRune(line, ';'):
			return ';'
		case bytes.ContainsRune(line, '\t'):
			return '\t'
		}
		break
	}
	return ','
}

// nextRow returns the next row that is neither empty nor a comment, and its
// line.
func nextRow(r *csv.Reader) (cells []string, line int, err error) {
	for {
		cells, err = r.Read()
		var bad *csv.ParseError
		if errors.As(err, &bad) {
			return nil, 0, fmt.Errorf("line %d: a quote stands in the middle of a cell or is not closed; quote whole cells and double the quotes inside", bad.StartLine)
		}
		if err != nil {
			return nil, 0, err
		}
		if strings.HasPrefix(strings.TrimSpace(cells[0]), "#") || strings.TrimSpace(strings.Join(cells, "")) == "" {
			continue
		}
		line, _ = r.FieldPos(0)
		return cells, line, nil
	}
}

// rowPairs pairs the cells of a row with the keys of the header.
func rowPairs(header, cells []string, line int) ([]geometry.Pair, error) {
	if len(cells) < len(header) {
		return nil, fmt.Errorf("line %d: has %d cells, the first row %d; leave a cell empty, but do not leave it out",
			line, len(cells), len(header))
	}
	var pairs []geometry.Pair
	for i, cell := range cells {
		key := ""
		if i < len(header) {
			key = strings.TrimSpace(header[i])
		}
		where := fmt.Sprintf("line %d, column %s", line, key)
		switch {
		case strings.TrimSpace(cell) == "":
			continue
		case key == "":
			return nil, fmt.Errorf("line %d: cell %d, %s, has no key in the first row; name the key or quote a value that holds the separator",
				line, i+1, quote(cell))
		}
		pairs = append(pairs, geometry.Pair{Key: key, Value: cell, Where: where})
	}
	return pairs, nil
}
