package geometry

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"regexp"
	"strconv"
	"strings"
)

// OEM is an orbit ephemeris message: the earth-fixed track of one object in
// segments. Source: CCSDS 502.0-B-3, 2023, in its KVN text form.
type OEM struct {
	Segments  []OEMSegment
	reference instant // the moment from which all times count
}

// OEMSegment is a piece of the track, inside which states may be interpolated.
type OEMSegment struct {
	Object, ID string // name and international designator
	Frame      string // REF_FRAME as written
	Line       int    // of its META_START

	how      scheme
	samples  []sample // seconds from OEM.reference, metres, m/s
	from, to float64  // useable times, inside those of the samples
}

// Bounds of what is read; they keep the memory of a hostile file small.
const (
	maxOEMStates = 1 << 18 // 30 days at 10 s, 16 MB
	maxOEMLine   = 1024    // bytes; the standard allows 254
	maxOEMDegree = 27
	// Distances from the earth's centre, metres, that keep slips of the unit
	// out: below, no ground is so deep; above, beyond the moon.
	minOEMRadius = 6.3e6
	maxOEMRadius = 5e8
)

// earthFixed matches the accepted frames: the terrestrial reference frames
// with or without hyphen and year, and Greenwich rotating coordinates.
var earthFixed = regexp.MustCompile(`^(ITRF(-?(\d\d|\d{4}))?|GRC)$`)

var (
	oemHeaderKeys = []string{"CCSDS_OEM_VERS", "CLASSIFICATION", "CREATION_DATE", "ORIGINATOR", "MESSAGE_ID"}
	oemMetaKeys   = []string{"OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "REF_FRAME_EPOCH", "TIME_SYSTEM",
		"START_TIME", "USEABLE_START_TIME", "USEABLE_STOP_TIME", "STOP_TIME", "INTERPOLATION", "INTERPOLATION_DEGREE"}
	oemMandatory = []string{"OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "TIME_SYSTEM", "START_TIME", "STOP_TIME"}
)

// ReadOEM reads a message in KVN text. Errors begin with the name and the
// number of the line. Frames that are not earth-fixed and time systems other
// than UTC, TAI, GPS and TT are refused by name. Covariances are skipped.
func ReadOEM(r io.Reader, name string) (*OEM, error) {
	p := oemParser{keys: map[string]string{}}
	lines := bufio.NewScanner(r)
	lines.Buffer(make([]byte, 0, maxOEMLine), maxOEMLine)
	for lines.Scan() {
		p.line++
		text := strings.TrimSpace(lines.Text())
		if text == "" || text == "COMMENT" || strings.HasPrefix(text, "COMMENT ") || strings.HasPrefix(text, "COMMENT\t") {
			continue
		}
		if err := p.take(text); err != nil {
			return nil, fmt.Errorf("%s, line %d: %w", name, p.line, err)
		}
	}
	err := lines.Err()
	if errors.Is(err, bufio.ErrTooLong) {
		p.line++
		err = fmt.Errorf("longer than %d characters, so this is no OEM in KVN text; the standard allows 254", maxOEMLine)
	}
	if err == nil {
		err = p.finish()
	}
	if err != nil {
		return nil, fmt.Errorf("%s, line %d: %w", name, p.line, err)
	}
	return &p.oem, nil
}

// oemParser is the state of reading: in the header, in a metadata block, among
// the states or in a covariance block.
type oemParser struct {
	oem    OEM
	line   int
	states int

	begun, inMeta, inData, inCovariance bool

	keys    map[string]string // of the header or the metadata block being read
	system  string
	segment OEMSegment
	// Times that the metadata block allows.
	start, stop   float64
	useable, till float64
}

func (p *oemParser) take(text string) error {
	key, value, isPair := strings.Cut(text, "=")
	key, value = strings.TrimSpace(key), strings.TrimSpace(value)
	switch {
	case !p.begun:
		return p.begin(key, value)
	case p.inCovariance:
		p.inCovariance = text != "COVARIANCE_STOP"
		return nil
	case p.inMeta && text == "META_STOP":
		return p.endMeta()
	case p.inMeta:
		return p.pair(key, value, isPair, oemMetaKeys)
	case text == "META_START":
		return p.beginMeta()
	case p.inData && text == "COVARIANCE_START":
		p.inCovariance = true
		return nil
	case p.inData:
		return p.state(text)
	}
	return p.pair(key, value, isPair, oemHeaderKeys)
}

func (p *oemParser) begin(key, value string) error {
	if key != "CCSDS_OEM_VERS" {
		return fmt.Errorf("found %q where an OEM in KVN text begins with CCSDS_OEM_VERS = 2.0; the XML form is not read", clip(key))
	}
	if value != "1.0" && value != "2.0" && value != "3.0" {
		return fmt.Errorf("CCSDS_OEM_VERS %q is not read; versions read are 1.0, 2.0 and 3.0", clip(value))
	}
	p.begun = true
	return nil
}

// clip shortens what an error quotes.
func clip(text string) string {
	if len(text) > 40 {
		return text[:40] + "..."
	}
	return text
}

// pair takes a keyword and its value.
func (p *oemParser) pair(key, value string, isPair bool, known []string) error {
	if !isPair {
		return fmt.Errorf("found %q where a line KEYWORD = value is expected", clip(key))
	}
	found := false
	for _, k := range known {
		found = found || k == key
	}
	if !found {
		return fmt.Errorf("unknown keyword %q; keywords here are %s", clip(key), strings.Join(known, ", "))
	}
	if _, twice := p.keys[key]; twice {
		return fmt.Errorf("%s stands twice; keep one", key)
	}
	if value == "" {
		return fmt.Errorf("%s has no value", key)
	}
	p.keys[key] = value
	switch key {
	case "REF_FRAME":
		if !earthFixed.MatchString(value) {
			return fmt.Errorf("REF_FRAME %q is not earth-fixed; frames read are ITRFyyyy and GRC: have the track rotated into one of them first", clip(value))
		}
	case "CENTER_NAME":
		if !strings.EqualFold(value, "EARTH") {
			return fmt.Errorf("CENTER_NAME %q is not EARTH", clip(value))
		}
	case "TIME_SYSTEM":
		if _, ok := timeSystems[value]; !ok {
			return fmt.Errorf("TIME_SYSTEM %q is not read; time systems read are UTC, TAI, GPS and TT", clip(value))
		}
	}
	return nil
}

func (p *oemParser) beginMeta() error {
	if p.inData {
		if err := p.endSegment(); err != nil {
			return err
		}
	}
	p.inMeta, p.inData = true, false
	p.keys = map[string]string{}
	p.segment = OEMSegment{Line: p.line}
	return nil
}

func (p *oemParser) endMeta() error {
	for _, k := range oemMandatory {
		if p.keys[k] == "" {
			return fmt.Errorf("the metadata block ends without %s", k)
		}
	}
	p.system = p.keys["TIME_SYSTEM"]
	p.segment.Object, p.segment.ID, p.segment.Frame = p.keys["OBJECT_NAME"], p.keys["OBJECT_ID"], p.keys["REF_FRAME"]
	if err := p.interpolation(); err != nil {
		return err
	}
	bounds := []struct {
		key       string
		to        *float64
		otherwise float64
	}{
		{"START_TIME", &p.start, 0}, {"STOP_TIME", &p.stop, 0},
		{"USEABLE_START_TIME", &p.useable, math.Inf(-1)}, {"USEABLE_STOP_TIME", &p.till, math.Inf(1)},
	}
	for _, b := range bounds {
		*b.to = b.otherwise
		if p.keys[b.key] == "" {
			continue
		}
		at, err := parseEpoch(p.keys[b.key], p.system)
		if err != nil {
			return fmt.Errorf("%s: %w", b.key, err)
		}
		if p.oem.reference == (instant{}) {
			p.oem.reference = instant{at.seconds, 0}
		}
		*b.to = at.since(p.oem.reference)
	}
	if p.start >= p.stop || p.useable >= p.till {
		return errors.New("START_TIME is not before STOP_TIME, or USEABLE_START_TIME not before USEABLE_STOP_TIME")
	}
	p.inMeta, p.inData = false, true
	return nil
}

// interpolation reads how to interpolate. A file that does not say gets
// Hermite's with four states, which uses all that the file holds.
func (p *oemParser) interpolation() error {
	method, degree := p.keys["INTERPOLATION"], p.keys["INTERPOLATION_DEGREE"]
	n, err := strconv.Atoi(degree)
	switch {
	case method == "" && degree != "":
		return errors.New("INTERPOLATION_DEGREE stands without INTERPOLATION")
	case method == "":
		p.segment.how = scheme{hermite: true, degree: 7}
		return nil
	case degree == "" && method != "LINEAR":
		return fmt.Errorf("INTERPOLATION %s stands without INTERPOLATION_DEGREE", clip(method))
	case degree != "" && (err != nil || n < 1 || n > maxOEMDegree):
		return fmt.Errorf("INTERPOLATION_DEGREE %q is not a whole number from 1 to %d", clip(degree), maxOEMDegree)
	}
	switch method {
	case "LINEAR":
		if degree != "" && n != 1 {
			return fmt.Errorf("INTERPOLATION LINEAR has INTERPOLATION_DEGREE %d; a line has degree 1", n)
		}
		p.segment.how = scheme{degree: 1}
	case "LAGRANGE":
		p.segment.how = scheme{degree: n}
	case "HERMITE":
		p.segment.how = scheme{hermite: true, degree: n}
	default:
		return fmt.Errorf("INTERPOLATION %q is not read; methods read are LINEAR, LAGRANGE and HERMITE", clip(method))
	}
	return nil
}

// sameInstant is how far times that should agree may differ, seconds: epochs
// are often printed to the millisecond.
const sameInstant = 2e-3

// state takes a line of an epoch and six or nine numbers in km, km/s, km/s2.
func (p *oemParser) state(text string) error {
	fields := strings.Fields(text)
	if len(fields) != 7 && len(fields) != 10 {
		return fmt.Errorf("found %d fields starting with %q where a state has an epoch and 6 or 9 numbers", len(fields), clip(fields[0]))
	}
	at, err := parseEpoch(fields[0], p.system)
	if err != nil {
		return err
	}
	var v [9]float64
	for i, f := range fields[1:] {
		if v[i], err = decimal(f); err != nil {
			return err
		}
	}
	s := sample{at.since(p.oem.reference), ECEF{v[0], v[1], v[2]}.Scale(1e3), ECEF{v[3], v[4], v[5]}.Scale(1e3)}
	if err := p.plausible(s); err != nil {
		return err
	}
	if p.states++; p.states > maxOEMStates {
		return fmt.Errorf("more than %d states; cut the file to the days that matter", maxOEMStates)
	}
	p.segment.samples = append(p.segment.samples, s)
	return nil
}

// decimal reads a plain decimal number.
func decimal(text string) (float64, error) {
	v, err := strconv.ParseFloat(text, 64)
	if err != nil || strings.Trim(text, "+-.0123456789eE") != "" || math.IsInf(v, 0) {
		return 0, fmt.Errorf("%q is not a number", clip(text))
	}
	return v, nil
}

// velocitySlack is how much of the speed a velocity may differ from what the
// positions say, and velocityStep the longest step, seconds, over which that is
// judged: the mean of both velocities errs by (n dt)^2 / 12 of the speed, under
// 0.004 for the lowest orbits. A velocity that is not relative to the turning
// earth is off by up to 0.07.
const (
	velocitySlack = 0.01
	velocityStep  = 180.0
	printedTo     = 2.0 // metres by which rounding can move two positions apart
)

// plausible checks a state against the metadata and the state before it.
func (p *oemParser) plausible(s sample) error {
	if r := s.pos.Norm(); !(r > minOEMRadius && r < maxOEMRadius) {
		return fmt.Errorf("the position lies %.6g km from the earth's centre, accepted are %.0f to %.0f km; positions are in km", r/1e3, minOEMRadius/1e3, maxOEMRadius/1e3)
	}
	if v := s.vel.Norm(); !(v > 1 && v < 2e4) {
		return fmt.Errorf("the speed is %.6g km/s, accepted are 0.001 to 20 km/s; velocities are in km/s", v/1e3)
	}
	if s.t < p.start-sameInstant || s.t > p.stop+sameInstant {
		return errors.New("the epoch lies outside START_TIME to STOP_TIME of its segment")
	}
	n := len(p.segment.samples)
	if n == 0 {
		return nil
	}
	last := p.segment.samples[n-1]
	dt := s.t - last.t
	if !(dt > 0) {
		return errors.New("the epoch is not later than the one before; epochs ascend and are not repeated inside a segment")
	}
	if dt > velocityStep {
		return nil
	}
	moved := s.pos.Sub(last.pos).Scale(1 / dt)
	if off := moved.Sub(s.vel.Add(last.vel).Scale(0.5)).Norm(); off > velocitySlack*s.vel.Norm()+1+printedTo/dt {
		return fmt.Errorf("the velocity differs by %.3g km/s from what the positions say; velocities must be those of the earth-fixed frame", off/1e3)
	}
	return nil
}

// endSegment checks the segment that has been read and keeps it.
func (p *oemParser) endSegment() error {
	s := &p.segment
	if need := s.how.points(); len(s.samples) < need {
		return fmt.Errorf("the segment that begins on line %d has %d states; its interpolation needs at least %d", s.Line, len(s.samples), need)
	}
	first, last := s.samples[0].t, s.samples[len(s.samples)-1].t
	s.from, s.to = max(first, p.useable), min(last, p.till)
	if s.from >= s.to {
		return fmt.Errorf("the segment that begins on line %d has no state inside its useable times", s.Line)
	}
	p.oem.Segments = append(p.oem.Segments, *s)
	return nil
}

// finish is called at the end of the file.
func (p *oemParser) finish() error {
	switch {
	case !p.begun:
		return errors.New("the file is empty; an OEM begins with CCSDS_OEM_VERS = 2.0")
	case p.inMeta:
		return fmt.Errorf("the file ends inside the metadata block that begins on line %d", p.segment.Line)
	case p.inCovariance:
		return errors.New("the file ends inside a covariance block")
	case !p.inData:
		return errors.New("the file has no segment; a segment begins with META_START")
	}
	return p.endSegment()
}
