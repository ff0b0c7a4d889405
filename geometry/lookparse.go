package geometry

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Pair is one key of a look with its value, as the user wrote them. Where is
// the place in the file, such as "line 4" or "line 3, column incidence", or
// empty; errors repeat it.
type Pair struct{ Key, Value, Where string }

// BuildLook checks keys and values and returns the look they describe, in SI
// units; see KeyTable for what is accepted. The kind is fixed when no pair
// gives it, the name is empty when no pair gives it (NameLooks numbers such
// looks). The error is one line with the place, what was found and what is
// accepted; the look returned with it is empty.
func BuildLook(pairs []Pair) (Look, error) {
	l, err := buildLook(pairs)
	if err != nil {
		return Look{}, err
	}
	return l, nil
}

func buildLook(pairs []Pair) (Look, error) {
	b := builder{look: NewLook(), given: map[string]Pair{}}
	if len(pairs) == 0 {
		return b.look, fmt.Errorf("a look without any key; a look is written like %s", Examples[Fixed])
	}
	for _, p := range pairs {
		p.Key, p.Value = strings.TrimSpace(p.Key), strings.TrimSpace(p.Value)
		if err := b.add(p); err != nil {
			return b.look, err
		}
	}
	if err := b.readAll(); err != nil {
		return b.look, err
	}
	for _, rule := range []func() error{b.complete, b.direction, b.limits, b.radio} {
		if err := rule(); err != nil {
			return b.look, err
		}
	}
	return b.look, nil
}

// builder gathers one look.
type builder struct {
	look  Look
	given map[string]Pair
	order []Pair
}

// add takes one pair, whatever the kind of the look.
func (b *builder) add(p Pair) error {
	if !printable(p.Key) || !printable(p.Value) {
		return p.fail("holds a control character or is not UTF-8; write plain text")
	}
	if err := CheckKey(p); err != nil {
		return err
	}
	if first, twice := b.given[p.Key]; twice {
		at := ""
		if first.Where != "" && first.Where != p.Where {
			at = " (first at " + first.Where + ")"
		}
		return p.fail("is given twice%s, before as %s; keep one", at, quote(first.Value))
	}
	if p.Value == "" {
		k, _ := keyNamed(p.Key)
		return p.fail("has no value; %s", k.accepted())
	}
	b.given[p.Key] = p
	b.order = append(b.order, p)
	return nil
}

// printable reports whether text is UTF-8 without control characters.
func printable(text string) bool {
	return utf8.ValidString(text) && strings.IndexFunc(text, unicode.IsControl) < 0
}

// readAll reads the values: the name and the kind first, since the errors of
// the others speak of them.
func (b *builder) readAll() error {
	b.look.Kind = Fixed
	for _, first := range []string{"name", "kind"} {
		if p, ok := b.given[first]; ok {
			if err := b.read(p); err != nil {
				return err
			}
		}
	}
	for _, p := range b.order {
		if p.Key == "name" || p.Key == "kind" {
			continue
		}
		if err := b.belongs(p); err != nil {
			return err
		}
		if err := b.read(p); err != nil {
			return err
		}
	}
	return nil
}

// read stores one value.
func (b *builder) read(p Pair) error {
	k, _ := keyNamed(p.Key)
	if err := k.read(p.Value, &b.look); err != nil {
		return b.fail(p, "%w; %s", err, k.accepted())
	}
	return nil
}

// belongs refuses a key of another kind.
func (b *builder) belongs(p Pair) error {
	k, _ := keyNamed(p.Key)
	if k.For(b.look.Kind) {
		return nil
	}
	if _, said := b.given["kind"]; !said {
		return b.fail(p, "belongs to kind %s, and a look is fixed when it gives no kind; add kind=%s or drop the key",
			orList(k.Kinds), k.Kinds[0])
	}
	return b.fail(p, "belongs to kind %s, not to %s; drop the key or change the kind", orList(k.Kinds), b.look.Kind)
}

// complete refuses a look that lacks required keys, all named at once.
func (b *builder) complete() error {
	var lacks []string
	for _, n := range required[b.look.Kind] {
		if !slices.ContainsFunc(n.keys, b.has) {
			lacks = append(lacks, n.said)
		}
	}
	if len(lacks) == 0 {
		return nil
	}
	return b.failLook("lacks %s; a look of this kind is written like %s", strings.Join(lacks, ", "), Examples[b.look.Kind])
}

// need is something a kind cannot do without: one of the keys.
type need struct {
	said string
	keys []string
}

// one is a need of a single key.
func one(key string) need { return need{key, []string{key}} }

// required lists what each kind needs. Where a need has several keys, the
// look's direction is checked further in direction.
var required = map[Kind][]need{
	Fixed: {one("incidence"),
		{"azimuth (or heading with side)", []string{"azimuth", "heading", "side"}}},
	Orbit: {one("incidence"), one("altitude_km"),
		{"heading (or inclination with pass)", []string{"heading", "inclination", "pass"}}, one("side")},
	Ephemeris: {one("oem"), one("side")},
	Flight: {one("start"), one("end"),
		{"height (or height_above_ground)", []string{"height", "height_above_ground"}}, one("side")},
	Tripod: {one("position"), one("antenna")},
}

// has reports whether the key was given.
func (b *builder) has(key string) bool { _, ok := b.given[key]; return ok }

// direction checks how the look says where it looks, and resolves the azimuth
// of a fixed look.
func (b *builder) direction() error {
	has, l := b.has, &b.look
	switch l.Kind {
	case Fixed:
		switch {
		case has("azimuth") && has("heading"):
			return b.fail(b.given["heading"], "is given beside azimuth %s; keep the azimuth (where the radar looks) or the heading with a side",
				quote(b.given["azimuth"].Value))
		case has("azimuth") && has("side"):
			return b.fail(b.given["side"], "says nothing beside an azimuth; drop it, or give heading in place of azimuth")
		case has("side") && !has("heading"):
			return b.fail(b.given["side"], "needs a heading; add one, such as heading=347")
		case has("heading") && !has("side"):
			return b.fail(b.given["heading"], "needs a side; add side=right or side=left, or give azimuth in place of heading")
		case has("heading"):
			l.Azimuth = lookAzimuth(l.Heading, l.Side)
		}
	case Orbit:
		switch {
		case has("heading") && (has("inclination") || has("pass")):
			return b.fail(b.given["heading"], "is given beside inclination or pass; keep the heading, or inclination with pass")
		case has("inclination") && !has("pass"):
			return b.fail(b.given["inclination"], "needs a pass; add pass=ascending or pass=descending")
		case has("pass") && !has("inclination"):
			return b.fail(b.given["pass"], "needs an inclination; add one, such as inclination=98.2")
		}
	case Flight:
		switch {
		case has("height") && has("height_above_ground"):
			return b.fail(b.given["height_above_ground"], "is given beside height %s; keep one of the two", quote(b.given["height"].Value))
		case l.Start == l.End:
			return b.fail(b.given["end"], "is the same place as the start; a flight line needs two places")
		}
	}
	return nil
}

// lookAzimuth returns the look azimuth of a heading and a side. The sum is
// done in degrees, where the right angle is exact: a heading of 270 looks to
// 0 on its right, not to the last number below 360.
func lookAzimuth(heading Angle, side Side) Angle {
	turn := 90.0
	if side == Left {
		turn = -90
	}
	d := writtenDegrees(heading) + turn
	if d < 0 {
		d += 360
	}
	return Angle(math.Mod(d, 360)) * Degree
}

// limits checks pairs of limits against each other.
func (b *builder) limits() error {
	l := &b.look
	if l.NearIncidence >= l.FarIncidence { // false when one is NaN
		return b.fail(b.given["near_incidence"], "is not below far_incidence %s; exchange the two or widen the swath",
			quote(b.given["far_incidence"].Value))
	}
	if l.MinRange >= l.MaxRange {
		return b.fail(b.given["min_range"], "is not below max_range %s; exchange the two or widen the limits",
			quote(b.given["max_range"].Value))
	}
	return nil
}

// radio checks band, frequency, wavelength and bandwidth against each other.
func (b *builder) radio() error {
	var said []Pair
	for _, key := range []string{"band", "frequency_ghz", "wavelength_m"} {
		if p, ok := b.given[key]; ok {
			said = append(said, p)
		}
	}
	if len(said) > 1 {
		return b.fail(said[1], "is given beside %s %s; keep one of band, frequency_ghz and wavelength_m",
			said[0].Key, quote(said[0].Value))
	}
	if f := b.look.Frequency(); b.look.Bandwidth >= 2*f {
		return b.fail(b.given["bandwidth_mhz"], "is not below twice the centre frequency of %.6g GHz, so the band would reach below zero; correct one of the two", f/1e9)
	}
	return nil
}

// fail returns an error about one pair of this look.
func (b *builder) fail(p Pair, format string, args ...any) error {
	if b.look.Name == "" || p.Key == "name" {
		return p.fail(format, args...)
	}
	return placed(p.Where, fmt.Errorf("look %s: %s %s %w", quote(b.look.Name), p.Key, quote(p.Value), fmt.Errorf(format, args...)))
}

// failLook returns an error about the look as a whole, at its first pair.
func (b *builder) failLook(format string, args ...any) error {
	name := "look"
	if b.look.Name != "" {
		name += " " + quote(b.look.Name)
	}
	where, _, _ := strings.Cut(b.order[0].Where, ",") // the line without the column
	return placed(where, fmt.Errorf("%s of kind %s %w", name, b.look.Kind, fmt.Errorf(format, args...)))
}

// fail returns an error about one pair.
func (p Pair) fail(format string, args ...any) error {
	return placed(p.Where, fmt.Errorf("%s %s %w", plainKey(p.Key), quote(p.Value), fmt.Errorf(format, args...)))
}

// plainKey quotes a key unless it is one of ours.
func plainKey(key string) string {
	if _, ok := keyNamed(key); ok {
		return key
	}
	return "key " + quote(key)
}

// placed puts the place in front of an error.
func placed(where string, err error) error {
	if where == "" {
		return err
	}
	return fmt.Errorf("%s: %w", where, err)
}

// quote returns text in quotes, cut where it is longer than a line can bear.
func quote(text string) string {
	const most = 60
	if r := []rune(text); len(r) > most {
		text = string(r[:most]) + "..."
	}
	return fmt.Sprintf("%q", text)
}

// CheckKey returns an error for a pair whose key is not in KeyTable, which
// says which one was probably meant. The value does not matter.
func CheckKey(p Pair) error {
	if _, ok := keyNamed(p.Key); ok {
		return nil
	}
	names := make([]string, len(KeyTable))
	for i, k := range KeyTable {
		names[i] = k.Name
	}
	hint := "known keys: " + strings.Join(names, " ")
	if near := nearest(p.Key, names); near != "" {
		hint = "did you mean " + near + "?"
	}
	if p.Key == "" {
		return placed(p.Where, fmt.Errorf("value %s without a key; %s", quote(p.Value), hint))
	}
	return placed(p.Where, fmt.Errorf("unknown key %s; %s", quote(p.Key), hint))
}

// nearest returns the candidate most like text: equal but for case, hyphens
// and spaces; else one that starts with it or that it starts with; else the
// least edit distance up to a third of its length. Empty when none is near.
func nearest(text string, candidates []string) string {
	t := strings.NewReplacer("-", "_", " ", "_").Replace(strings.ToLower(text))
	if t == "" || len(t) > 40 {
		return ""
	}
	for _, c := range candidates {
		if strings.ToLower(c) == t {
			return c
		}
	}
	for _, c := range candidates {
		l := strings.ToLower(c)
		if len(t) > 1 && strings.HasPrefix(l, t) || len(l) > 2 && strings.HasPrefix(t, l) {
			return c
		}
	}
	best, least := "", (len(t)+1)/3
	for _, c := range candidates {
		if d := EditDistance(t, strings.ToLower(c)); d <= least {
			if best == "" || d < least {
				best, least = c, d
			}
		}
	}
	return best
}

// EditDistance returns the least number of bytes inserted, removed or
// replaced that turns a into b. Source: Wagner & Fischer, The string-to-string
// correction problem, J. ACM 21(1), 1974, 168-173 (from memory).
func EditDistance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			replaced := diagonal
			if a[i] != b[j] {
				replaced++
			}
			diagonal = row[j+1]
			row[j+1] = min(replaced, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}

// orList joins kinds with "or".
func orList(kinds []Kind) string {
	words := make([]string, len(kinds))
	for i, k := range kinds {
		words[i] = string(k)
	}
	return strings.Join(words, " or ")
}

// NameLooks gives every look without a name the name look-N, N being its
// position from 1, or the next number that is free. It refuses two names that
// differ in nothing but case, as they would share a folder on some file
// systems. The looks are changed in place only when there is no error.
func NameLooks(looks []Look) error {
	taken := map[string]string{}
	for _, l := range looks {
		if l.Name == "" {
			continue
		}
		lower := strings.ToLower(l.Name)
		if before, twice := taken[lower]; twice {
			return sameName(before, l.Name)
		}
		taken[lower] = l.Name
	}
	for i := range looks {
		if looks[i].Name != "" {
			continue
		}
		for n := i + 1; looks[i].Name == ""; n++ {
			name := fmt.Sprintf("look-%d", n)
			if _, used := taken[name]; !used {
				looks[i].Name, taken[name] = name, name
			}
		}
	}
	return nil
}

// sameName says that two looks share a name.
func sameName(a, b string) error {
	if a == b {
		return fmt.Errorf("two looks have the name %s; give each its own", quote(a))
	}
	return fmt.Errorf("look names %s and %s differ in nothing but case and would share a folder; rename one", quote(a), quote(b))
}
