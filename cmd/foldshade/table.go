package main

import (
	"encoding/json"
	"fmt"
	"io"
	"strings"
	"unicode/utf8"
)

// printTable writes rows under a head in columns two blanks apart. The first
// column is aligned left, the others, which hold numbers, right.
func printTable(w io.Writer, head []string, rows [][]string) {
	all := append([][]string{head}, rows...)
	width := make([]int, len(head))
	for _, row := range all {
		for i, cell := range row {
			width[i] = max(width[i], utf8.RuneCountInString(cell))
		}
	}
	for _, row := range all {
		var line strings.Builder
		for i, cell := range row {
			pad := strings.Repeat(" ", width[i]-utf8.RuneCountInString(cell))
			if i == 0 {
				line.WriteString(cell + pad)
			} else {
				line.WriteString("  " + pad + cell)
			}
		}
		fmt.Fprintln(w, strings.TrimRight(line.String(), " "))
	}
}

// printPairs writes names and values in two columns.
func printPairs(w io.Writer, pairs [][2]string) {
	width := 0
	for _, p := range pairs {
		width = max(width, utf8.RuneCountInString(p[0]))
	}
	for _, p := range pairs {
		fmt.Fprintf(w, "%s%s  %s\n", p[0], strings.Repeat(" ", width-utf8.RuneCountInString(p[0])), p[1])
	}
}

// printJSON writes a value as indented JSON.
func printJSON(w io.Writer, value any) error {
	encoder := json.NewEncoder(w)
	encoder.SetEscapeHTML(false)
	encoder.SetIndent("", "  ")
	return encoder.Encode(value)
}
