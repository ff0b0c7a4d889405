package main

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
)

// The headings under which the help lists flags, in its order.
const (
	groupInput      = "Input"
	groupLook       = "Look"
	groupTerrain    = "Terrain that the DEM does not show"
	groupConfidence = "Error of the DEM"
	groupReflector  = "Corner reflector"
	groupOutput     = "Output"
	groupMachine    = "Machine"
)

var groups = []string{groupInput, groupLook, groupTerrain, groupConfidence, groupReflector, groupOutput, groupMachine}

// Flag annotations that the help reads: the heading, and the placeholder of
// the value.
const (
	groupKey       = "group"
	placeholderKey = "placeholder"
)

// inGroup files flags that are already defined under a heading of the help.
// Each is a name, or a name and the placeholder of its value, as in "out DIR".
func inGroup(cmd *cobra.Command, group string, flags ...string) {
	for _, flag := range flags {
		name, placeholder, _ := strings.Cut(flag, " ")
		f := cmd.Flags().Lookup(name)
		if f.Annotations == nil {
			f.Annotations = map[string][]string{}
		}
		f.Annotations[groupKey] = []string{group}
		f.Annotations[placeholderKey] = []string{placeholder}
	}
}

// decimal is a flag that takes a plain decimal number from lo to hi.
type decimal struct {
	value  *float64
	lo, hi float64
	unit   string // plural, empty for a bare number
}

func (d *decimal) Set(s string) error {
	v, err := parseDecimal(s)
	if err != nil {
		return fmt.Errorf("%w; accepted is %s", err, d.accepted())
	}
	if v < d.lo || v > d.hi {
		return fmt.Errorf("out of range; accepted is %s", d.accepted())
	}
	*d.value = v
	return nil
}

func (d *decimal) accepted() string {
	unit := d.unit
	if unit != "" {
		unit = " " + unit
	}
	return fmt.Sprintf("%s to %s%s", shortest(d.lo), shortest(d.hi), unit)
}

// String is the default in the help: a value that is not given shows nothing.
func (d *decimal) String() string {
	if d.value == nil || math.IsNaN(*d.value) {
		return ""
	}
	return shortest(*d.value)
}

func (d *decimal) Type() string { return "number" }

func shortest(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }

// parseDecimal reads a number as people write it: digits, sign, point and
// exponent. It refuses what strconv takes beyond that: NaN, Inf, hexadecimal
// and underscores.
func parseDecimal(s string) (float64, error) {
	if s == "" || strings.Trim(s, "+-.0123456789eE") != "" {
		return 0, errors.New("not a plain decimal number")
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return 0, errors.New("not a plain decimal number")
	}
	return v, nil
}

// whole is a flag that takes a whole number from lo to hi.
type whole struct {
	value  *int
	lo, hi int
}

func (w *whole) Set(s string) error {
	v, err := strconv.ParseInt(s, 10, 32)
	if err != nil || int(v) < w.lo || int(v) > w.hi {
		return fmt.Errorf("accepted is a whole number from %d to %d", w.lo, w.hi)
	}
	*w.value = int(v)
	return nil
}

func (w *whole) String() string {
	if w.value == nil || *w.value == 0 {
		return ""
	}
	return strconv.Itoa(*w.value)
}

func (w *whole) Type() string { return "number" }

// choice is a flag that takes one of a few words.
type choice struct {
	value *string
	words []string
}

func (c *choice) Set(s string) error {
	for _, w := range c.words {
		if s == w {
			*c.value = s
			return nil
		}
	}
	return fmt.Errorf("accepted is %s", strings.Join(c.words, " or "))
}

func (c *choice) String() string {
	if c.value == nil {
		return ""
	}
	return *c.value
}

func (c *choice) Type() string { return "word" }

// size is a flag that takes a number of bytes with a unit, from lo to hi.
type size struct {
	value  *int64
	lo, hi int64
}

// units are the suffixes of a size, the longer before those they end with.
var units = []struct {
	suffix string
	bytes  float64
}{
	{"KiB", 1 << 10}, {"MiB", 1 << 20}, {"GiB", 1 << 30}, {"TiB", 1 << 40},
	{"kB", 1e3}, {"MB", 1e6}, {"GB", 1e9}, {"TB", 1e12},
}

func (z *size) Set(s string) error {
	accepted := fmt.Sprintf("accepted is %s to %s, as in 512MiB, 1GiB or 4GB", bytesText(z.lo), bytesText(z.hi))
	for _, u := range units {
		digits, ok := strings.CutSuffix(s, u.suffix)
		if !ok {
			continue
		}
		v, err := parseDecimal(digits)
		if err != nil {
			return fmt.Errorf("%w with a unit; %s", err, accepted)
		}
		if v *= u.bytes; v < float64(z.lo) || v > float64(z.hi) {
			return fmt.Errorf("out of range; %s", accepted)
		}
		*z.value = int64(v)
		return nil
	}
	return fmt.Errorf("not a size with a unit; %s", accepted)
}

func (z *size) String() string {
	if z.value == nil || *z.value == 0 {
		return ""
	}
	return bytesText(*z.value)
}

func (z *size) Type() string { return "size" }

// bytesText writes a number of bytes in the largest binary unit that keeps it
// at one or more.
func bytesText(n int64) string {
	for i := 3; i >= 0; i-- {
		if u := units[i]; float64(n) >= u.bytes {
			return fmt.Sprintf("%s%s", strconv.FormatFloat(float64(n)/u.bytes, 'g', 4, 64), u.suffix)
		}
	}
	return fmt.Sprintf("%d B", n)
}

// list splits a comma-separated value and drops the blanks around its parts.
func list(s string) []string {
	parts := strings.Split(s, ",")
	for i := range parts {
		parts[i] = strings.TrimSpace(parts[i])
	}
	return parts
}

// newFlags returns the flag set of a command in the order of definition.
func newFlags(cmd *cobra.Command) *pflag.FlagSet {
	cmd.Flags().SortFlags = false
	return cmd.Flags()
}
