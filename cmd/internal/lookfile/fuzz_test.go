package lookfile

import (
	"fmt"
	"strings"
	"testing"

	"foldshade/geometry"
)

// bits is a Look without its String method, so that %+v shows every field;
// the numbers are then the shortest that tell two float64 apart.
type bits geometry.Look

func show(l geometry.Look) string { return fmt.Sprintf("%+v", bits(l)) }

// readsBack fails when a look, printed and read again, is another one.
func readsBack(t *testing.T, l geometry.Look) {
	t.Helper()
	again, err := Flag(l.String())
	if err != nil {
		t.Fatalf("%s does not read back: %v", l, err)
	}
	if show(l) != show(again) {
		t.Fatalf("%s reads back as another look:\n%s\n%s", l, show(l), show(again))
	}
}

// oneLine fails on an error that is not one line of a bounded length.
func oneLine(t *testing.T, err error) {
	t.Helper()
	const most = 1000 // bytes; the longest texts repeat two quoted values and the list of keys
	if s := err.Error(); strings.ContainsAny(s, "\r\n") || len(s) > most {
		t.Fatalf("error of %d bytes or with a line break: %q", len(s), s)
	}
}

func FuzzFlag(f *testing.F) {
	for _, text := range geometry.Examples {
		f.Add(text)
	}
	f.Add(`kind=ephemeris,"oem=a, ""b"".oem",side=left`)
	f.Add("incidence=38,heading=270,side=right,frequency_ghz=5.405")
	f.Add("incidence=38,azimuth=360,wavelength_m=0.0313,baseline=1e3")
	f.Add("kind=tripod,position=-180/-90,antenna=2,sector=0/360,min_range=0,max_range=1")
	f.Fuzz(func(t *testing.T, text string) {
		l, err := Flag(text)
		if err != nil {
			oneLine(t, err)
			if l != (geometry.Look{}) {
				t.Fatalf("an error came with a look: %v", l)
			}
			return
		}
		readsBack(t, l)
	})
}

// fuzzFile checks a parser of looks files.
func fuzzFile(t *testing.T, data []byte, parse func([]byte) ([]geometry.Look, error)) {
	looks, err := parse(data)
	if err != nil {
		oneLine(t, err)
		if looks != nil {
			t.Fatalf("an error came with looks: %v", looks)
		}
		return
	}
	if len(looks) == 0 {
		t.Fatal("neither looks nor an error")
	}
	for _, l := range looks {
		readsBack(t, l)
	}
	if err := geometry.NameLooks(looks); err != nil {
		t.Fatalf("a file was taken whose names clash: %v", err)
	}
}

func FuzzYAML(f *testing.F) {
	f.Add([]byte("looks:\n- {name: a, incidence: 38, heading: 347, side: right}\n- kind: tripod\n  position: 10.48/46.21\n  antenna: 2.5\n"))
	f.Add([]byte("looks:\n- &a {name: one, incidence: 38, azimuth: &z 77}\n- {<<: [*a, {band: L}], name: two, azimuth: *z}\n"))
	f.Add([]byte("\xef\xbb\xbf# c\r\nlooks:\r\n- oem: 'a.oem'\r\n  kind: ephemeris\r\n  side: \"left\"\r\n---\r\n"))
	f.Add([]byte("looks: &a\n- *a\n"))
	f.Add([]byte("looks:\n- &a {<<: *a}\n"))
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, data, parseYAML) })
}

func FuzzCSV(f *testing.F) {
	f.Add([]byte("name,incidence,heading,side\na,38,347,right\n# c\n,39,12,left\n"))
	f.Add([]byte("\xef\xbb\xbfkind;side;oem\r\nephemeris;left;\"a, \"\"b\"\".oem\"\r\n;;\r\n"))
	f.Add([]byte("kind\tposition\tantenna\tsector\ntripod\t10/46\t2\t300/40\n"))
	f.Add([]byte("incidence,azimuth,frequency_ghz\n38,77,5.405\n38,5,7\n"))
	f.Fuzz(func(t *testing.T, data []byte) { fuzzFile(t, data, parseCSV) })
}
