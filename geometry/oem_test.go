package geometry

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

const oemStates = `2030-01-01T05:00:00.000 7000.0 0.0 0.0 0.0 1.0 7.5
2030-01-01T05:01:00.000 6985.4 61.0 450.0 -0.5 1.0 7.48
`

// oemOf returns a small message with one line replaced or added.
func oemOf(edit func(string) string) string {
	return edit(`CCSDS_OEM_VERS = 2.0
COMMENT invented
CREATION_DATE = 2030-01-01T00:00:00
ORIGINATOR = PLANNER
META_START
OBJECT_NAME = TALLOW
OBJECT_ID = 2030-001A
CENTER_NAME = EARTH
REF_FRAME = ITRF2014
TIME_SYSTEM = UTC
START_TIME = 2030-01-01T05:00:00.000
STOP_TIME = 2030-01-01T05:02:00.000
INTERPOLATION = HERMITE
INTERPOLATION_DEGREE = 3
META_STOP
` + oemStates)
}

func swap(old, new string) func(string) string {
	return func(s string) string {
		if !strings.Contains(s, old) {
			panic("nothing to replace: " + old)
		}
		return strings.Replace(s, old, new, 1)
	}
}

func add(tail string) func(string) string { return func(s string) string { return s + tail } }

func TestOEMAccepted(t *testing.T) {
	rows := map[string]func(string) string{
		"as is":          swap("2.0", "2.0"),
		"version 1":      swap("2.0", "1.0"),
		"version 3":      swap("ORIGINATOR = PLANNER", "CLASSIFICATION = none\nORIGINATOR = PLANNER\nMESSAGE_ID = 7"),
		"carriage":       func(s string) string { return strings.ReplaceAll(s, "\n", "\r\n") },
		"blank lines":    func(s string) string { return strings.ReplaceAll(s, "\n", "\n\n") },
		"spaces":         func(s string) string { return strings.ReplaceAll(s, " = ", "=") },
		"tabs":           func(s string) string { return strings.ReplaceAll(s, " 7000.0", "\t 7000.0") },
		"day of year":    swap("2030-01-01T05:00:00.000 ", "2030-001T05:00:00Z "),
		"no method":      swap("INTERPOLATION = HERMITE\nINTERPOLATION_DEGREE = 3\n", ""),
		"linear":         swap("HERMITE\nINTERPOLATION_DEGREE = 3", "LINEAR\nINTERPOLATION_DEGREE = 1"),
		"lagrange":       swap("HERMITE\nINTERPOLATION_DEGREE = 3", "LAGRANGE\nINTERPOLATION_DEGREE = 1"),
		"even hermite":   swap("DEGREE = 3", "DEGREE = 2"),
		"old frame":      swap("ITRF2014", "ITRF-97"),
		"two digits":     swap("ITRF2014", "ITRF97"),
		"rotating":       swap("ITRF2014", "GRC"),
		"lower centre":   swap("EARTH", "Earth"),
		"acceleration":   swap("1.0 7.5\n", "1.0 7.5 -0.008 0 0\n"),
		"useable":        swap("STOP_TIME =", "USEABLE_START_TIME = 2030-01-01T05:00:10\nUSEABLE_STOP_TIME = 2030-01-01T05:00:50\nSTOP_TIME ="),
		"data comment":   swap("META_STOP\n", "META_STOP\nCOMMENT here too\nCOMMENT\n"),
		"covariance":     add("COVARIANCE_START\nEPOCH = 2030-01-01T05:00:00\nCOV_REF_FRAME = RTN\n1\n2 3\nCOVARIANCE_STOP\n"),
		"frame epoch":    swap("TIME_SYSTEM", "REF_FRAME_EPOCH = 2000-01-01T12:00:00\nTIME_SYSTEM"),
		"exponent":       swap("7000.0", "7.0e3"),
		"no last return": func(s string) string { return strings.TrimSuffix(s, "\n") },
	}
	for name, edit := range rows {
		t.Run(name, func(t *testing.T) {
			text := oemOf(edit)
			if name == "no method" { // four states are needed then
				text += "2030-01-01T05:01:01.000 6984.9 62.0 457.48 -0.5 1.0 7.48\n2030-01-01T05:01:02.000 6984.4 63.0 464.96 -0.5 1.0 7.48\n"
			}
			o, err := ReadOEM(strings.NewReader(text), "x.oem")
			require.NoError(t, err)
			require.Len(t, o.Segments, 1)
			s := o.Segments[0]
			assert.Equal(t, "TALLOW", s.Object)
			assert.Equal(t, "2030-001A", s.ID)
			assert.Equal(t, 60.0, s.samples[1].t-s.samples[0].t)
			assert.Equal(t, ECEF{7e6, 0, 0}, s.samples[0].pos)
			assert.Equal(t, ECEF{0, 1e3, 7.5e3}, s.samples[0].vel)
			if name == "useable" {
				assert.Equal(t, []float64{10, 50}, []float64{s.from - s.samples[0].t, s.to - s.samples[0].t})
			}
		})
	}
}

// Two segments that share an epoch: each keeps it, and nothing is interpolated
// across.
func TestOEMSegments(t *testing.T) {
	text := oemOf(swap("2.0", "2.0"))
	block := text[strings.Index(text, "META_START"):]
	block = strings.Replace(block, "05:00:00.000\nSTOP", "05:01:00.000\nSTOP", 1)
	block = strings.Replace(block, "2030-01-01T05:01:00.000 6985.4", "2030-01-01T05:02:00.000 6985.4", 1)
	block = strings.Replace(block, "2030-01-01T05:00:00.000 7000.0", "2030-01-01T05:01:00.000 7000.0", 1)
	o, err := ReadOEM(strings.NewReader(text+block), "x.oem")
	require.NoError(t, err)
	require.Len(t, o.Segments, 2)
	assert.Equal(t, o.Segments[0].samples[1].t, o.Segments[1].samples[0].t)
	assert.NotEqual(t, o.Segments[0].samples[1].pos, o.Segments[1].samples[0].pos)
	assert.Equal(t, 5, o.Segments[0].Line)
	assert.Equal(t, 18, o.Segments[1].Line)
}

func TestOEMRefused(t *testing.T) {
	lagrange := "HERMITE\nINTERPOLATION_DEGREE = 3"
	rows := []struct {
		name string
		edit func(string) string
		line int
		want string
	}{
		{"empty", func(string) string { return "" }, 0, "the file is empty"},
		{"xml", func(string) string { return `<?xml version="1.0"?>` }, 1, "begins with CCSDS_OEM_VERS"},
		{"version", swap("2.0", "4.0"), 1, `CCSDS_OEM_VERS "4.0"`},
		{"header only", func(s string) string { return s[:strings.Index(s, "META_START")] }, 4, "no segment"},
		{"header key", swap("ORIGINATOR", "ORIGIN"), 4, `unknown keyword "ORIGIN"`},
		{"no pair", swap("ORIGINATOR = PLANNER", "ORIGINATOR PLANNER"), 4, "KEYWORD = value"},
		{"inertial", swap("ITRF2014", "EME2000"), 9, `REF_FRAME "EME2000" is not earth-fixed`},
		{"icrf", swap("ITRF2014", "ICRF"), 9, `REF_FRAME "ICRF"`},
		{"teme", swap("ITRF2014", "TEME"), 9, `REF_FRAME "TEME"`},
		{"tod", swap("ITRF2014", "TOD"), 9, `REF_FRAME "TOD"`},
		{"like itrf", swap("ITRF2014", "ITRF2014X"), 9, "ITRF2014X"},
		{"centre", swap("EARTH", "MARS"), 8, `CENTER_NAME "MARS"`},
		{"time system", swap("= UTC", "= TDB"), 10, `TIME_SYSTEM "TDB"`},
		{"twice", swap("TIME_SYSTEM = UTC", "REF_FRAME = GRC\nTIME_SYSTEM = UTC"), 10, "REF_FRAME stands twice"},
		{"no value", swap("= TALLOW", "="), 6, "OBJECT_NAME has no value"},
		{"missing", swap("OBJECT_ID = 2030-001A\n", ""), 14, "without OBJECT_ID"},
		{"no frame", swap("REF_FRAME = ITRF2014\n", ""), 14, "without REF_FRAME"},
		{"method", swap("HERMITE", "SPLINE"), 15, `INTERPOLATION "SPLINE"`},
		{"degree missing", swap("INTERPOLATION_DEGREE = 3\n", ""), 14, "without INTERPOLATION_DEGREE"},
		{"degree alone", swap("INTERPOLATION = HERMITE\n", ""), 14, "without INTERPOLATION"},
		{"degree text", swap("DEGREE = 3", "DEGREE = three"), 15, `INTERPOLATION_DEGREE "three"`},
		{"degree high", swap("DEGREE = 3", "DEGREE = 28"), 15, "from 1 to 27"},
		{"degree of line", swap(lagrange, "LINEAR\nINTERPOLATION_DEGREE = 5"), 15, "a line has degree 1"},
		{"start", swap("START_TIME = 2030-01-01T05:00:00.000", "START_TIME = yesterday"), 15, `START_TIME: epoch "yesterday"`},
		{"order", swap("STOP_TIME = 2030-01-01T05:02", "STOP_TIME = 2030-01-01T04:02"), 15, "not before STOP_TIME"},
		{"fields", swap(" 7.5\n", "\n"), 16, "found 6 fields"},
		{"units", swap(" 7000.0", " 7000.0[km]"), 16, `"7000.0[km]" is not a number`},
		{"hexadecimal", swap("7000.0", "0x1p12"), 16, `"0x1p12" is not a number`},
		{"nan", swap("7000.0", "NaN"), 16, `"NaN" is not a number`},
		{"infinite", swap("7000.0", "1e999"), 16, "is not a number"},
		{"metres", swap("7000.0", "7000000"), 16, "positions are in km"},
		{"under ground", swap("7000.0", "600"), 16, "600 km from the earth's centre"},
		{"metres a second", swap("1.0 7.5\n", "1000 7500\n"), 16, "velocities are in km/s"},
		{"inertial velocity", swap("1.0 7.48", "1.9 7.48"), 17, "velocities must be those of the earth-fixed frame"},
		{"repeated", swap("05:01:00.000 6985.4", "05:00:00.000 6985.4"), 17, "not later than the one before"},
		{"outside", swap("05:01:00.000 6985.4", "05:03:00.000 6985.4"), 17, "outside START_TIME to STOP_TIME"},
		{"month", swap("2030-01-01T05:01:00.000 6985.4", "2030-13-01T05:01:00.000 6985.4"), 17, "no such date"},
		{"day", swap("2030-01-01T05:01:00.000 6985.4", "2030-366T05:01:00.000 6985.4"), 17, "no such date"},
		{"hour", swap("2030-01-01T05:01:00.000 6985.4", "2030-01-01T25:01:00.000 6985.4"), 17, "no such time of day"},
		{"second 60", swap("2030-01-01T05:01:00.000 6985.4", "2030-01-01T23:59:60.000 6985.4"), 17, "no leap second"},
		{"century", swap("2030-01-01T05:01:00.000 6985.4", "1930-01-01T05:01:00.000 6985.4"), 17, "1972 to 2200"},
		{"short", swap(lagrange, "LAGRANGE\nINTERPOLATION_DEGREE = 7"), 17, "has 2 states; its interpolation needs at least 8"},
		{"useable", swap("STOP_TIME =", "USEABLE_START_TIME = 2030-01-01T05:01:30\nSTOP_TIME ="), 18, "no state inside its useable times"},
		{"in metadata", func(s string) string { return s[:strings.Index(s, "META_STOP")] }, 14, "inside the metadata block that begins on line 5"},
		{"in covariance", add("COVARIANCE_START\n1\n"), 19, "inside a covariance block"},
		{"late keyword", add("OBJECT_NAME = X\n"), 18, "found 3 fields"},
		{"long line", add("COMMENT " + strings.Repeat("x", 2000)), 18, "longer than 1024"},
	}
	for _, r := range rows {
		t.Run(r.name, func(t *testing.T) {
			o, err := ReadOEM(strings.NewReader(oemOf(r.edit)), "x.oem")
			require.Error(t, err)
			assert.Nil(t, o)
			assert.Contains(t, err.Error(), fmt.Sprintf("x.oem, line %d: ", r.line))
			assert.Contains(t, err.Error(), r.want)
		})
	}
}

// endless gives states for ever, a second apart.
type endless struct {
	head strings.Reader
	n    int
	rest []byte
}

func (e *endless) Read(p []byte) (int, error) {
	if n, err := e.head.Read(p); err == nil {
		return n, nil
	}
	if len(e.rest) == 0 {
		at := time.Date(2030, 1, 1, 5, 0, 0, 0, time.UTC).Add(time.Duration(e.n) * time.Second)
		e.rest = []byte(at.Format("2006-01-02T15:04:05") + " 7000 0 0 0 0.002 0\n")
		e.n++
	}
	n := copy(p, e.rest)
	e.rest = e.rest[n:]
	return n, nil
}

// A message without end is refused at the limit of states.
func TestOEMBounded(t *testing.T) {
	text := oemOf(swap("STOP_TIME = 2030", "STOP_TIME = 2090"))
	e := &endless{head: *strings.NewReader(strings.TrimSuffix(text, oemStates))}
	_, err := ReadOEM(e, "x.oem")
	require.ErrorContains(t, err, "more than 262144 states")
	assert.ErrorContains(t, err, fmt.Sprintf("line %d: ", 15+262145))
}

// TAI - UTC and the epochs around leap seconds: IERS Bulletin C 52 (2016-12-31)
// and 10 s at the start of 1972 (from memory); GPS time left UTC at 1980-01-06
// with TAI - UTC at 19 s.
func TestEpochs(t *testing.T) {
	parse := func(text, system string) instant {
		t.Helper()
		i, err := parseEpoch(text, system)
		require.NoError(t, err)
		return i
	}
	unix := func(y int, m time.Month, d, h, min, s int) int64 {
		return time.Date(y, m, d, h, min, s, 0, time.UTC).Unix()
	}
	assert.Equal(t, instant{unix(1972, 1, 1, 0, 0, 10), 0}, parse("1972-01-01T00:00:00", "UTC"))
	assert.Equal(t, instant{unix(2030, 1, 1, 5, 0, 37), 0.25}, parse("2030-01-01T05:00:00.25", "UTC"))
	assert.Equal(t, parse("2016-12-31T23:59:59", "UTC").plus(1), parse("2016-12-31T23:59:60", "UTC"))
	assert.Equal(t, parse("2016-12-31T23:59:59", "UTC").plus(2), parse("2017-001T00:00:00Z", "UTC"))
	assert.Equal(t, parse("1980-01-06T00:00:00", "UTC"), parse("1980-01-06T00:00:00", "GPS"))
	assert.Equal(t, parse("2030-01-01T00:00:00", "TAI").plus(19), parse("2030-01-01T00:00:00", "GPS"))
	assert.InDelta(t, 32.184, parse("2030-01-01T00:00:00", "TAI").since(parse("2030-01-01T00:00:00", "TT")), 1e-9)
	assert.Equal(t, parse("2032-12-31T00:00:00", "TAI"), parse("2032-366T00:00:00", "TAI"))
	for _, text := range []string{"2030-06-30T12:34:56", "2016-12-31T23:59:59", "2017-01-01T00:00:00", "1999-01-01T00:00:01"} {
		assert.Equal(t, text, parse(text, "UTC").utc().Format("2006-01-02T15:04:05"))
	}
	// The table holds every leap second once, in order, a second each.
	for i, l := range leapSeconds {
		assert.Equal(t, int64(10+i), l.offset)
		assert.True(t, l.month == 1 || l.month == 7)
	}
	for _, text := range []string{"", "2030-01-01", "2030-01-01T", "2030-01-01T1:2:3", "2030-01-01T00:00:00.", "2030-01-01T00:00:00.1x",
		"2030-1-1T00:00:00", "2030-000T00:00:00", "2030-01-01 00:00:00", "2030-01-01T00:00:61", "2030-01-01T12:59:60", "+030-01-01T00:00:00"} {
		_, err := parseEpoch(text, "UTC")
		assert.Error(t, err, text)
	}
	_, err := parseEpoch("2016-12-31T23:59:60", "TAI")
	assert.ErrorContains(t, err, "leap second")
}

func FuzzOEM(f *testing.F) {
	f.Add(oemOf(swap("2.0", "2.0")))
	f.Add(oemOf(swap("HERMITE\nINTERPOLATION_DEGREE = 3", "LAGRANGE\nINTERPOLATION_DEGREE = 1")))
	f.Add(oemOf(add("COVARIANCE_START\n1\nCOVARIANCE_STOP\n")))
	f.Add(oemOf(swap("2030-01-01T05:00:00.000 7000", "2030-001T05:00:00 7000")))
	f.Add("CCSDS_OEM_VERS = 2.0\nMETA_START\nMETA_STOP\n")
	look := NewLook()
	look.Kind, look.Side = Ephemeris, Right
	f.Fuzz(func(t *testing.T, text string) {
		o, err := ReadOEM(strings.NewReader(text), "x.oem")
		if err != nil {
			if o != nil || !strings.HasPrefix(err.Error(), "x.oem, line ") {
				t.Fatalf("error %q with a result, or without a line", err)
			}
			return
		}
		for _, s := range o.Segments {
			for i := 1; i < len(s.samples); i++ {
				if !(s.samples[i].t > s.samples[i-1].t) {
					t.Fatalf("times %g, %g do not ascend", s.samples[i-1].t, s.samples[i].t)
				}
			}
		}
		p, err := o.Platform(look, Site{Centre: place(4, 0.5)})
		if err != nil {
			return
		}
		v, seen := p.View(Geodetic{place(4, 0.5), 0})
		if seen == InView && !(v.SlantRange > 0 && !math.IsInf(v.SlantRange, 0)) {
			t.Fatalf("slant range %g", v.SlantRange)
		}
	})
}
