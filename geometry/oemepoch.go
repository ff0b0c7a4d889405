package geometry

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
)

// instant is a moment in TAI: whole seconds since 1970-01-01T00:00:00 TAI and
// a fraction in [0, 1).
type instant struct {
	seconds  int64
	fraction float64
}

// since returns the seconds from another moment.
func (a instant) since(b instant) float64 {
	return float64(a.seconds-b.seconds) + (a.fraction - b.fraction)
}

// plus returns the moment some seconds later.
func (a instant) plus(seconds float64) instant {
	whole := math.Floor(a.fraction + seconds)
	return instant{a.seconds + int64(whole), a.fraction + seconds - whole}
}

// leapSeconds lists when TAI - UTC became what, since UTC ticks in whole
// seconds. Source: IERS, leap-seconds.list of 2025.
var leapSeconds = []struct {
	year, month int
	offset      int64
}{
	{1972, 1, 10}, {1972, 7, 11}, {1973, 1, 12}, {1974, 1, 13}, {1975, 1, 14}, {1976, 1, 15}, {1977, 1, 16},
	{1978, 1, 17}, {1979, 1, 18}, {1980, 1, 19}, {1981, 7, 20}, {1982, 7, 21}, {1983, 7, 22}, {1985, 7, 23},
	{1988, 1, 24}, {1990, 1, 25}, {1991, 1, 26}, {1992, 7, 27}, {1993, 7, 28}, {1994, 7, 29}, {1996, 1, 30},
	{1997, 7, 31}, {1999, 1, 32}, {2006, 1, 33}, {2009, 1, 34}, {2012, 7, 35}, {2015, 7, 36}, {2017, 1, 37},
}

// taiLessUTC returns TAI - UTC at a moment of UTC given as Unix seconds; ok is
// false before 1972.
func taiLessUTC(unix int64) (offset int64, ok bool) {
	for _, l := range leapSeconds {
		if unix < time.Date(l.year, time.Month(l.month), 1, 0, 0, 0, 0, time.UTC).Unix() {
			break
		}
		offset = l.offset
	}
	return offset, offset != 0
}

// utc returns the moment in UTC; an inserted leap second shows as the second
// after it.
func (a instant) utc() time.Time {
	unix := a.seconds
	for range 2 { // the offset is looked up in UTC: one round to get near, one to settle
		offset, _ := taiLessUTC(unix)
		unix = a.seconds - offset
	}
	return time.Unix(unix, int64(a.fraction*1e9)).UTC()
}

// timeSystems lists the accepted time systems and TAI less each; UTC is
// looked up. GPS time and terrestrial time by their definitions (from memory).
var timeSystems = map[string]float64{"UTC": 0, "TAI": 0, "GPS": 19, "TT": -32.184}

// parseEpoch reads YYYY-MM-DDThh:mm:ss[.d...][Z] or YYYY-DDDThh:mm:ss[.d...][Z]
// in one of timeSystems. A second of 60 is accepted where UTC has one.
func parseEpoch(text, system string) (instant, error) {
	bad := func(why string) (instant, error) {
		return instant{}, fmt.Errorf("epoch %q %s; epochs are written 2030-01-31T05:00:00.000 or 2030-031T05:00:00.000", text, why)
	}
	date, clock, ok := strings.Cut(strings.TrimSuffix(text, "Z"), "T")
	if !ok {
		return bad("has no T between date and time")
	}
	day, ok := parseDate(date)
	if !ok {
		return bad("has no such date")
	}
	if y := day.Year(); y < 1972 || y > 2200 {
		return bad("lies outside the years 1972 to 2200")
	}
	h, m, s, fraction, ok := parseClock(clock)
	if !ok {
		return bad("has no such time of day")
	}
	unix := day.Unix() + int64(h*3600+m*60+s)
	if s == 60 && (system != "UTC" || !leapAt(unix)) {
		return bad("has a second 60 where there is no leap second")
	}
	if system == "UTC" {
		offset, _ := taiLessUTC(unix)
		if s == 60 {
			offset-- // the inserted second still has the old offset
		}
		return instant{unix + offset, fraction}, nil
	}
	return instant{unix, 0}.plus(fraction + timeSystems[system]), nil
}

// leapAt reports whether the offset changes at a moment.
func leapAt(unix int64) bool {
	before, _ := taiLessUTC(unix - 1)
	after, _ := taiLessUTC(unix)
	return before != 0 && before != after
}

func parseDate(text string) (day time.Time, ok bool) {
	for _, layout := range []string{"2006-01-02", "2006-002"} {
		if len(text) != len(layout) {
			continue
		}
		d, err := time.Parse(layout, text)
		return d, err == nil
	}
	return time.Time{}, false
}

func parseClock(text string) (h, m, s int, fraction float64, ok bool) {
	if len(text) < 8 || text[2] != ':' || text[5] != ':' {
		return 0, 0, 0, 0, false
	}
	two := func(at int) int {
		a, b := text[at]-'0', text[at+1]-'0'
		if a > 9 || b > 9 {
			return 100
		}
		return int(a)*10 + int(b)
	}
	h, m, s = two(0), two(3), two(6)
	if h > 23 || m > 59 || s > 60 || (s == 60 && (h != 23 || m != 59)) {
		return 0, 0, 0, 0, false
	}
	if rest := text[8:]; rest != "" {
		if len(rest) < 2 || rest[0] != '.' || strings.Trim(rest[1:], "0123456789") != "" || len(rest) > 20 {
			return 0, 0, 0, 0, false
		}
		fraction, _ = strconv.ParseFloat("0"+rest, 64) // digits only: no error
		fraction = min(fraction, math.Nextafter(1, 0))
	}
	return h, m, s, fraction, true
}
