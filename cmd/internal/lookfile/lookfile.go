// Package lookfile reads looks from the --look flag and from --looks files,
// YAML or CSV, and joins them. The keys and their checks are those of
// geometry.BuildLook; this package finds the keys and says where they stand.
package lookfile

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"unicode"
	"unicode/utf8"

	"foldshade/geometry"
)

// maxSize bounds a looks file, bytes: ten thousand looks fit, and text made to
// keep the YAML reader busy takes about a second.
const maxSize = 1 << 20

// Flag reads the text of one --look flag: key=value pairs with commas between
// them. A pair that holds a comma itself stands in double quotes, as in CSV.
// The path of an ephemeris file is taken as it is written.
func Flag(text string) (geometry.Look, error) {
	pairs, err := flagPairs(text)
	if err != nil {
		return geometry.Look{}, fmt.Errorf("--look %s: %w", quote(text), err)
	}
	look, err := geometry.BuildLook(pairs)
	if err != nil {
		return geometry.Look{}, fmt.Errorf("--look %s: %w", quote(text), err)
	}
	return look, nil
}

// flagPairs splits the text of a flag.
func flagPairs(text string) ([]geometry.Pair, error) {
	example := "write key=value,key=value, such as " + geometry.Examples[geometry.Fixed]
	if strings.TrimSpace(text) == "" {
		return nil, fmt.Errorf("no look given; %s", example)
	}
	if strings.ContainsAny(text, "\r\n") {
		return nil, fmt.Errorf("holds a line break; give one look a flag")
	}
	r := csv.NewReader(strings.NewReader(text))
	r.TrimLeadingSpace = true
	fields, err := r.Read()
	if err != nil {
		return nil, fmt.Errorf("a quote stands in the middle or is not closed; quote a whole pair, such as \"oem=a,b.oem\"")
	}
	pairs := make([]geometry.Pair, 0, len(fields))
	for i, f := range fields {
		key, value, ok := strings.Cut(f, "=")
		if strings.TrimSpace(f) == "" {
			return nil, fmt.Errorf("nothing stands at pair %d, between or behind the commas; %s", i+1, example)
		}
		if !ok && i > 0 && strings.Trim(f, "0123456789") == "" {
			return nil, fmt.Errorf("pair %d, %s, has no equals sign; if it is behind a decimal comma, write a point", i+1, quote(f))
		}
		if !ok {
			return nil, fmt.Errorf("pair %d, %s, has no equals sign; %s", i+1, quote(f), example)
		}
		pairs = append(pairs, geometry.Pair{Key: key, Value: value})
	}
	return pairs, nil
}

// Read reads the looks of a file: YAML by the extension .yaml or .yml, CSV by
// .csv. Ephemeris paths are taken relative to the file's own folder. Names
// that differ in nothing but case are refused; looks without a name are left
// so, for Merge to number.
func Read(path string) ([]geometry.Look, error) {
	parse, err := parserFor(path)
	if err != nil {
		return nil, err
	}
	data, err := load(path)
	if err != nil {
		return nil, err
	}
	looks, err := parse(data)
	if err != nil {
		return nil, fmt.Errorf("looks file %q: %w", path, err)
	}
	for i := range looks {
		if p := looks[i].OEM; p != "" && !filepath.IsAbs(p) {
			looks[i].OEM = filepath.Join(filepath.Dir(path), p)
		}
	}
	return looks, nil
}

// parserFor chooses the format by the extension.
func parserFor(path string) (func([]byte) ([]geometry.Look, error), error) {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".yaml", ".yml":
		return parseYAML, nil
	case ".csv":
		return parseCSV, nil
	}
	return nil, fmt.Errorf("looks file %q: the extension is %q; accepted: .yaml, .yml, .csv; rename the file by its format",
		path, filepath.Ext(path))
}

// load reads a file of bounded size and refuses what is not UTF-8 text.
func load(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("looks file %q: %w; check the path", path, bare(err))
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxSize+1))
	if err != nil {
		return nil, fmt.Errorf("looks file %q: %w; check that it is a file of looks", path, bare(err))
	}
	if len(data) > maxSize {
		return nil, fmt.Errorf("looks file %q: is larger than %d MiB; split it", path, maxSize>>20)
	}
	return data, nil
}

// bare takes the operation and the path off a file error.
func bare(err error) error {
	if p, ok := err.(*os.PathError); ok {
		return p.Err
	}
	return err
}

// decode checks the encoding and takes a byte order mark off.
func decode(data []byte) ([]byte, error) {
	if bytes.HasPrefix(data, []byte{0xff, 0xfe}) || bytes.HasPrefix(data, []byte{0xfe, 0xff}) {
		return nil, fmt.Errorf("is UTF-16 text; save it as UTF-8")
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	for i, line := range bytes.Split(data, []byte("\n")) {
		if !utf8.Valid(line) {
			return nil, fmt.Errorf("line %d: is not UTF-8 text; save the file as UTF-8", i+1)
		}
		if at := bytes.IndexFunc(line, unprintable); at >= 0 {
			r, _ := utf8.DecodeRune(line[at:])
			return nil, fmt.Errorf("line %d: holds the control character %U; save the file as plain text", i+1, r)
		}
	}
	return data, nil
}

// unprintable reports a control character that has no place in a line.
func unprintable(r rune) bool { return unicode.IsControl(r) && r != '\t' && r != '\r' }

// Merge joins the looks of the flags and of the file, flags first, and
// numbers those without a name by their place in the joined list. It refuses
// an empty list and two looks of one name.
func Merge(flags, file []geometry.Look) ([]geometry.Look, error) {
	if len(flags)+len(file) == 0 {
		return nil, fmt.Errorf("no look given; add --look %s, or --looks FILE", geometry.Examples[geometry.Fixed])
	}
	all := make([]geometry.Look, 0, len(flags)+len(file))
	all = append(append(all, flags...), file...)
	err := geometry.NameLooks(all)
	switch {
	case err != nil && len(flags) > 0 && len(file) > 0:
		return nil, fmt.Errorf("--look together with --looks: %w", err)
	case err != nil:
		return nil, err
	}
	return all, nil
}

// build makes a look of the pairs of each entry and refuses two that share a
// name, with both places.
func build(entries [][]geometry.Pair) ([]geometry.Look, error) {
	looks := make([]geometry.Look, 0, len(entries))
	first := map[string]geometry.Pair{}
	for _, pairs := range entries {
		look, err := geometry.BuildLook(pairs)
		if err != nil {
			return nil, err
		}
		for _, p := range pairs {
			if strings.TrimSpace(p.Key) != "name" {
				continue
			}
			lower := strings.ToLower(look.Name)
			if before, twice := first[lower]; twice {
				return nil, fmt.Errorf("%s: name %q is taken by the look at %s (%q; case does not count); rename one",
					p.Where, look.Name, before.Where, before.Value)
			}
			first[lower] = p
		}
		looks = append(looks, look)
	}
	return looks, nil
}

// quote returns text in quotes, cut where it is longer than a line can bear.
func quote(text string) string {
	const most = 80
	if r := []rune(text); len(r) > most {
		text = string(r[:most]) + "..."
	}
	return fmt.Sprintf("%q", text)
}
