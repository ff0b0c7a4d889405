package geometry

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// interval is a range of numbers as the user writes them.
type interval struct {
	lo, hi         float64
	openLo, openHi bool
	atLo, atHi     string // why the limit itself is refused
}

// String returns the interval in words.
func (v interval) String() string {
	lo, hi := plainNumber(v.lo), plainNumber(v.hi)
	switch {
	case v.openLo && v.openHi:
		return "above " + lo + " and below " + hi
	case v.openLo:
		return "above " + lo + ", at most " + hi
	case v.openHi:
		return "at least " + lo + ", below " + hi
	}
	return lo + " to " + hi
}

// check returns an error for a number outside the interval.
func (v interval) check(x float64) error {
	switch {
	case v.openLo && x == v.lo && v.atLo != "":
		return errors.New("is out of range: " + v.atLo)
	case v.openHi && x == v.hi && v.atHi != "":
		return errors.New("is out of range: " + v.atHi)
	case x < v.lo || x > v.hi || v.openLo && x == v.lo || v.openHi && x == v.hi:
		return errors.New("is out of range")
	}
	return nil
}

// number reads a plain decimal number. What else strconv reads (hexadecimal,
// infinity, NaN) is refused, as none is meant by a person who writes a look.
func number(text string) (float64, error) {
	if strings.Trim(text, "+-.,0123456789eE") == "" && strings.Count(text, ",") == 1 && !strings.Contains(text, ".") {
		return 0, fmt.Errorf("has a decimal comma; write %s with a point", strings.Replace(text, ",", ".", 1))
	}
	if strings.IndexFunc(text, func(r rune) bool { return !strings.ContainsRune("+-.0123456789eE", r) }) >= 0 {
		if digits := strings.TrimRight(text, "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ°% "); digits != text && isNumber(digits) {
			return 0, fmt.Errorf("has a unit behind the number; write %s alone", digits)
		}
		return 0, errors.New("is not a plain decimal number")
	}
	x, err := strconv.ParseFloat(text, 64)
	if errors.Is(err, strconv.ErrRange) {
		return 0, errors.New("is too large a number")
	}
	if err != nil {
		return 0, errors.New("is not a plain decimal number")
	}
	return x + 0, nil // -0 becomes 0
}

// isNumber reports whether text is a plain decimal number.
func isNumber(text string) bool {
	_, err := strconv.ParseFloat(text, 64)
	return err == nil && strings.Trim(text, "+-.0123456789eE") == ""
}

// plainNumber returns the shortest text of a number, without an exponent
// where that stays readable.
func plainNumber(x float64) string {
	if a := math.Abs(x); a != 0 && (a < 1e-5 || a >= 1e15) {
		return strconv.FormatFloat(x, 'g', -1, 64)
	}
	return strconv.FormatFloat(x, 'f', -1, 64)
}

// shortest returns the number of fewest digits that read turns into exactly
// value. guess must lie within a few units of the last place of such a
// number; it is returned itself when there is none.
func shortest(value, guess float64, read func(float64) float64) float64 {
	const most = 17 // digits that tell any two float64 apart
	for digits := 1; digits <= most; digits++ {
		x, _ := strconv.ParseFloat(strconv.FormatFloat(guess, 'e', digits-1, 64), 64)
		if read(x) == value {
			return x
		}
	}
	below, above := guess, guess
	for range 4 {
		below, above = math.Nextafter(below, math.Inf(-1)), math.Nextafter(above, math.Inf(1))
		if read(below) == value {
			return below
		}
		if read(above) == value {
			return above
		}
	}
	return guess
}

// writtenDegrees returns the degrees that a user would write for an angle.
func writtenDegrees(a Angle) float64 {
	return shortest(float64(a), a.Degrees(), func(x float64) float64 { return float64(Angle(x) * Degree) })
}

// angleText is writtenDegrees as text, empty for an angle not given.
func angleText(a Angle) string {
	if !a.Given() {
		return ""
	}
	return plainNumber(writtenDegrees(a))
}

// angleCodec is a number of degrees within an interval.
func angleCodec(in interval, field func(*Look) *Angle) codec {
	return codec{in.String(), func(text string, l *Look) error {
		x, err := number(text)
		if err != nil {
			return err
		}
		if err := in.check(x); err != nil {
			return err
		}
		*field(l) = Angle(x) * Degree
		return nil
	}, func(l *Look) string { return angleText(*field(l)) }}
}

// circle is the interval of an azimuth as written; 360 is stored as 0.
var circle = interval{lo: 0, hi: 360}

// readAzimuth reads degrees clockwise from north.
func readAzimuth(text string) (Angle, error) {
	x, err := number(text)
	if err != nil {
		return NotGiven, err
	}
	if err := circle.check(x); err != nil {
		if x >= -360 && x < 0 {
			return NotGiven, fmt.Errorf("%w; write %s for it", err, plainNumber(x+360))
		}
		return NotGiven, err
	}
	return Angle(math.Mod(x, 360)) * Degree, nil
}

// azimuthCodec is an azimuth; it is written only where shown says so.
func azimuthCodec(field func(*Look) *Angle, shown func(*Look) bool) codec {
	return codec{circle.String(), func(text string, l *Look) (err error) {
		*field(l), err = readAzimuth(text)
		return err
	}, func(l *Look) string {
		if !shown(l) {
			return ""
		}
		return angleText(*field(l))
	}}
}

// numberCodec is a number within an interval, stored times the scale.
func numberCodec(scale float64, in interval, field func(*Look) *float64) codec {
	return codec{in.String(), func(text string, l *Look) error {
		x, err := number(text)
		if err != nil {
			return err
		}
		if err := in.check(x); err != nil {
			return err
		}
		*field(l) = x * scale
		return nil
	}, func(l *Look) string {
		v := *field(l)
		if math.IsNaN(v) {
			return ""
		}
		return plainNumber(shortest(v, v/scale, func(x float64) float64 { return x * scale }))
	}}
}

// wordCodec is one of a few words, in either case.
func wordCodec(words []string, set func(*Look, string), get func(*Look) string) codec {
	return codec{strings.Join(words, ", "), func(text string, l *Look) error {
		for _, w := range words {
			if strings.EqualFold(w, text) {
				set(l, w)
				return nil
			}
		}
		if near := nearest(text, words); near != "" {
			return fmt.Errorf("is unknown, did you mean %s?", near)
		}
		return errors.New("is unknown")
	}, get}
}

var (
	longitudes = interval{lo: -180, hi: 180}
	latitudes  = interval{lo: -90, hi: 90}
)

// readPlace reads LON/LAT in degrees.
func readPlace(text string) (Place, error) {
	first, second, err := twoNumbers(text)
	if err != nil {
		return Place{}, err
	}
	lonErr, latErr := longitudes.check(first), latitudes.check(second)
	if lonErr == nil && latErr == nil {
		return Place{Angle(first) * Degree, Angle(second) * Degree}, nil
	}
	if longitudes.check(second) == nil && latitudes.check(first) == nil {
		return Place{}, fmt.Errorf("has latitude %s, outside -90 to 90; longitude comes first: did you mean %s/%s?",
			plainNumber(second), plainNumber(second), plainNumber(first))
	}
	if latErr == nil && first > 180 && first <= 360 {
		return Place{}, fmt.Errorf("has longitude %s, outside -180 to 180; write %s/%s for it",
			plainNumber(first), plainNumber(first-360), plainNumber(second))
	}
	if lonErr != nil {
		return Place{}, fmt.Errorf("has longitude %s, outside -180 to 180", plainNumber(first))
	}
	return Place{}, fmt.Errorf("has latitude %s, outside -90 to 90", plainNumber(second))
}

// twoNumbers reads two numbers with a slash between them.
func twoNumbers(text string) (first, second float64, err error) {
	a, b, ok := strings.Cut(text, "/")
	if !ok {
		return 0, 0, errors.New("has no slash between two numbers")
	}
	if strings.Contains(b, "/") {
		return 0, 0, errors.New("has more than one slash")
	}
	a, b = strings.TrimSpace(a), strings.TrimSpace(b)
	if first, err = number(a); err != nil {
		return 0, 0, fmt.Errorf("has %s before the slash, which %w", quote(a), err)
	}
	if second, err = number(b); err != nil {
		return 0, 0, fmt.Errorf("has %s behind the slash, which %w", quote(b), err)
	}
	return first, second, nil
}

// placeCodec is LON/LAT.
func placeCodec(field func(*Look) *Place) codec {
	return codec{"LON/LAT in degrees, longitude -180 to 180 first, then latitude -90 to 90", func(text string, l *Look) (err error) {
		*field(l), err = readPlace(text)
		return err
	}, func(l *Look) string {
		p := *field(l)
		if !p.Given() {
			return ""
		}
		return angleText(p.Lon) + "/" + angleText(p.Lat)
	}}
}

// sectorCodec is FROM/TO in azimuths; 0/360 is all around, as if not given.
var sectorCodec = codec{"FROM/TO, each 0 to 360", func(text string, l *Look) error {
	first, second, err := twoNumbers(text)
	if err != nil {
		return err
	}
	if first == 0 && second == 360 {
		return nil
	}
	a, b, _ := strings.Cut(text, "/")
	from, err := readAzimuth(strings.TrimSpace(a))
	if err != nil {
		return fmt.Errorf("has a first azimuth that %w", err)
	}
	to, err := readAzimuth(strings.TrimSpace(b))
	if err != nil {
		return fmt.Errorf("has a second azimuth that %w", err)
	}
	if from == to {
		return errors.New("has no width; leave the key out for all around")
	}
	l.SectorFrom, l.SectorTo = from, to
	return nil
}, func(l *Look) string {
	if !l.SectorFrom.Given() {
		return ""
	}
	return angleText(l.SectorFrom) + "/" + angleText(l.SectorTo)
}}

// maxName is the length of the longest name; folders hold 255 bytes, and
// names of temporary files are longer than the name.
const maxName = 64

// nameCodec is a name that is safe as a folder on every common file system.
var nameCodec = codec{
	"1 to 64 letters a-z A-Z, digits, hyphens, underscores and points, a letter or digit first, no point last",
	func(text string, l *Look) error {
		if len(text) > maxName {
			return fmt.Errorf("is too long, %d bytes", len(text))
		}
		for i, r := range text {
			plain := r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9'
			if !plain && (i == 0 || !strings.ContainsRune("-_.", r)) {
				return fmt.Errorf("holds %q at character %d", r, len([]rune(text[:i]))+1)
			}
		}
		if strings.HasSuffix(text, ".") {
			return errors.New("ends in a point")
		}
		if reserved(text) {
			return errors.New("is the name of a device on some systems; choose another")
		}
		l.Name = text
		return nil
	}, func(l *Look) string { return l.Name }}

// reserved reports whether some systems refuse a name, with or without an
// extension, in either case: CON, PRN, AUX, NUL, COM0 to COM9, LPT0 to LPT9.
func reserved(name string) bool {
	stem, _, _ := strings.Cut(strings.ToLower(name), ".")
	switch stem {
	case "con", "prn", "aux", "nul":
		return true
	}
	return len(stem) == 4 && (strings.HasPrefix(stem, "com") || strings.HasPrefix(stem, "lpt")) &&
		stem[3] >= '0' && stem[3] <= '9'
}

// bandCodec is a band letter, which also sets the wavelength of its centre.
var bandCodec = codec{bandLetters(), func(text string, l *Look) error {
	b, ok := BandNamed(text)
	switch {
	case ok:
		l.Band, l.Wavelength = b.Letter, WavelengthOf(b.Centre())
		return nil
	case strings.EqualFold(text, "P"):
		return errors.New("is no letter of IEEE Std 521, which has UHF from 0.3 to 1 GHz; give band=UHF or frequency_ghz")
	case strings.EqualFold(text, "HF"), strings.EqualFold(text, "VHF"):
		return errors.New("lies below 0.3 GHz")
	}
	return errors.New("is no letter of IEEE Std 521")
}, func(l *Look) string { return l.Band }}

// bandLetters lists the letters.
func bandLetters() string {
	letters := make([]string, len(Bands))
	for i, b := range Bands {
		letters[i] = b.Letter
	}
	return strings.Join(letters, ", ")
}

// wavelengths and frequencies are the same span, in metres and gigahertz.
var (
	frequencies = interval{lo: MinFrequency / 1e9, hi: MaxFrequency / 1e9}
	wavelengths = interval{lo: SpeedOfLight / MaxFrequency, hi: SpeedOfLight / MinFrequency}
)

// gigahertzToMetres is the wavelength of a frequency as written.
func gigahertzToMetres(ghz float64) float64 { return WavelengthOf(ghz * 1e9) }

// frequencyCodec is a frequency, stored as its wavelength. It is written when
// the wavelength is exactly that of a frequency of few digits.
var frequencyCodec = codec{frequencies.String(), func(text string, l *Look) error {
	x, err := number(text)
	if err != nil {
		return err
	}
	if err := frequencies.check(x); err != nil {
		return scaleHint(err, x, frequencies, []scaled{{1e-9, "hertz"}, {1e-3, "megahertz"}})
	}
	l.Wavelength = gigahertzToMetres(x)
	return nil
}, func(l *Look) string {
	if x, ok := roundFrequency(l); ok {
		return plainNumber(x)
	}
	return ""
}}

// wavelengthCodec is a wavelength, written where frequencyCodec writes none.
var wavelengthCodec = codec{fmt.Sprintf("%.9f to %.6f", wavelengths.lo, wavelengths.hi), func(text string, l *Look) error {
	x, err := number(text)
	if err != nil {
		return err
	}
	if err := wavelengths.check(x); err != nil {
		return scaleHint(err, x, wavelengths, []scaled{{1e-2, "centimetres"}, {1e-3, "millimetres"}})
	}
	l.Wavelength = x
	return nil
}, func(l *Look) string {
	if _, ok := roundFrequency(l); ok || l.Band != "" || math.IsNaN(l.Wavelength) {
		return ""
	}
	return plainNumber(l.Wavelength)
}}

// roundFrequency returns the frequency in GHz behind a wavelength when it has
// at most 10 digits, as a written frequency has and a chance one has not.
func roundFrequency(l *Look) (ghz float64, ok bool) {
	if l.Band != "" || math.IsNaN(l.Wavelength) {
		return 0, false
	}
	x, _ := strconv.ParseFloat(strconv.FormatFloat(l.Frequency()/1e9, 'g', 10, 64), 64)
	return x, frequencies.check(x) == nil && gigahertzToMetres(x) == l.Wavelength
}

// scaled is a unit that a user may have had in mind.
type scaled struct {
	factor float64
	unit   string
}

// scaleHint adds to a range error the unit in which the number would fit.
func scaleHint(err error, x float64, in interval, units []scaled) error {
	for _, u := range units {
		if in.check(x*u.factor) == nil {
			return fmt.Errorf("%w; if it is in %s, write %s", err, u.unit, plainNumber(shortestProduct(x, u.factor)))
		}
	}
	return err
}

// shortestProduct returns x times factor rounded to 12 digits, for hints.
func shortestProduct(x, factor float64) float64 {
	p, _ := strconv.ParseFloat(strconv.FormatFloat(x*factor, 'g', 12, 64), 64)
	return p
}
