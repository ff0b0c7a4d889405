package lookfile

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/geometry"
)

// printed returns the looks in the form of the flag, one a line.
func printed(looks []geometry.Look) string {
	lines := make([]string, len(looks))
	for i, l := range looks {
		lines[i] = l.String()
	}
	return strings.Join(lines, "\n")
}

// write puts a file into a new folder and returns its path.
func write(t *testing.T, name, content string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, os.WriteFile(path, []byte(content), 0o600))
	return path
}

const twoLooks = "name=a,kind=fixed,incidence=38,heading=347,side=right\n" +
	"name=b,kind=tripod,position=10.48/46.21,antenna=2.5,sector=300/40"

// Every form in which the same two looks may stand in a file.
func TestForms(t *testing.T) {
	for name, file := range map[string]struct{ name, content string }{
		"yaml block": {"l.yaml", "# two\nlooks:\n  - name: a\n    incidence: 38   # degrees\n    heading: 347\n    side: right\n" +
			"  - name: b\n    kind: tripod\n    position: 10.48/46.21\n    antenna: 2.5\n    sector: 300/40\n"},
		"yaml flow, bom, crlf": {"l.YML", "\xef\xbb\xbflooks:\r\n- {name: a, incidence: 38, heading: 347, side: right}\r\n" +
			"- {name: b, kind: tripod, position: 10.48/46.21, antenna: 2.5, sector: 300/40}\r\n"},
		"yaml quoted": {"l.yaml", "looks:\n- {\"name\": 'a', 'incidence': \"38\", heading: '347', side: \"right\"}\n" +
			"- {name: b, kind: tripod, position: '10.48/46.21', antenna: 2.5, sector: \" 300/40 \"}\n"},
		"yaml merged": {"l.yaml", "looks:\n- &a {name: a, incidence: 38, heading: &h 347, side: right}\n" +
			"- <<: [{sector: 1/2}, {antenna: 9}]\n  name: b\n  kind: tripod\n  position: 10.48/46.21\n  antenna: 2.5\n  sector: 300/40\n"},
		"csv": {"l.csv", "name,kind,incidence,heading,side,position,antenna,sector\na,,38,347,right,,,\nb,tripod,,,,10.48/46.21,2.5,300/40\n"},
		"csv, bom, crlf, blanks, comments, no line end": {"l.CSV", "\xef\xbb\xbf# looks; of a \"valley\"\r\n\r\nname, kind,incidence,heading,side,position,antenna,sector,\r\n" +
			" # the first\r\na,fixed, 38 ,347,right,,,,\r\n,,,,,,,,\r\n\"b\", \"tripod\",,,,10.48/46.21,2.5,\"300/40\","},
		"csv, semicolons": {"l.csv", "name;kind;incidence;heading;side;position;antenna;sector\na;;38;347;right;;;\nb;tripod;;;;10.48/46.21;2.5;300/40\n"},
		"csv, tabs":       {"l.csv", "name\tkind\tincidence\theading\tside\tposition\tantenna\tsector\na\t\t38\t347\tright\t\t\t\nb\ttripod\t\t\t\t10.48/46.21\t2.5\t300/40\n"},
	} {
		t.Run(name, func(t *testing.T) {
			looks, err := Read(write(t, file.name, file.content))
			require.NoError(t, err)
			assert.Equal(t, twoLooks, printed(looks))
		})
	}
}

func TestMergedKeys(t *testing.T) {
	looks, err := parseYAML([]byte("looks:\n" +
		"- &base {name: one, incidence: 38, azimuth: 77, band: L}\n" +
		"- {<<: *base, name: two, azimuth: 257}\n" +
		"- *base\n"))
	assert.ErrorContains(t, err, `line 2: name "one" is taken by the look at line 2`)
	assert.Nil(t, looks)

	looks, err = parseYAML([]byte("looks:\n" +
		"- &base {name: one, incidence: 38, azimuth: 77, band: L}\n" +
		"- &next {name: two, <<: *base, azimuth: &west 257}\n" +
		"- {<<: *next, name: three, azimuth: *west}\n"))
	require.NoError(t, err)
	assert.Equal(t, "name=one,kind=fixed,incidence=38,azimuth=77,band=L\n"+
		"name=two,kind=fixed,incidence=38,azimuth=257,band=L\n"+
		"name=three,kind=fixed,incidence=38,azimuth=257,band=L", printed(looks))
}

// An ephemeris path is relative to the looks file, unless it is absolute.
func TestEphemerisPath(t *testing.T) {
	root := filepath.VolumeName(os.TempDir()) + string(filepath.Separator)
	far := filepath.Join(root, "far", "c.oem")
	for name, content := range map[string]string{
		"l.yaml": "looks:\n- {kind: ephemeris, side: left, oem: tracks/a.oem}\n- {kind: ephemeris, side: left, oem: '" + far + "'}\n",
		"l.csv":  "kind,side,oem\nephemeris,left,tracks/a.oem\nephemeris,left," + far + "\n",
	} {
		path := write(t, name, content)
		looks, err := Read(path)
		require.NoError(t, err)
		assert.Equal(t, filepath.Join(filepath.Dir(path), "tracks", "a.oem"), looks[0].OEM)
		assert.Equal(t, far, looks[1].OEM)
	}
	look, err := Flag(`kind=ephemeris, side = left ,"oem=tracks/a,b.oem"`)
	require.NoError(t, err)
	assert.Equal(t, "tracks/a,b.oem", look.OEM)
}

// What refused flags say; a stroke between the parts.
func TestFlagRefused(t *testing.T) {
	for text, says := range map[string]string{
		"":                                  "no look given|write key=value",
		"  ":                                "no look given",
		"incidence=38,,azimuth=77":          "nothing stands at pair 2",
		"incidence=38,azimuth=77,":          "nothing stands at pair 3",
		"incidence=38,azimuth":              `pair 2, "azimuth", has no equals sign`,
		"incidence=38,5,azimuth=77":         `pair 2, "5"|if it is behind a decimal comma, write a point`,
		"incidence=38 azimuth=77":           `incidence "38 azimuth=77" is not a plain decimal number`,
		"incidence=38,azimuth=77\nname=a":   "line break|one look a flag",
		"incidence=\"38,azimuth=77":         "a quote stands in the middle or is not closed",
		"incidence=38,azimuth=77,incidence": "no equals sign",
		"incidence=38,azimuth=77,oem=a.oem": `oem "a.oem" belongs to kind ephemeris`,
		"incidence=95,azimuth=77":           `--look "incidence=95,azimuth=77": incidence "95" is out of range`,
		strings.Repeat("incidence=1,", 99):  `...": nothing stands at pair 100`,
	} {
		look, err := Flag(text)
		if !assert.Error(t, err, text) {
			continue
		}
		assert.Equal(t, geometry.Look{}, look, text)
		for part := range strings.SplitSeq("--look|"+says, "|") {
			assert.Contains(t, err.Error(), part, text)
		}
		assert.NotContains(t, err.Error(), "\n", text)
	}
}

// What refused files say; a stroke between the parts. Every message starts
// with the file.
func TestFileRefused(t *testing.T) {
	const header = "name,incidence,azimuth\n"
	merges := "looks:\n- &a {incidence: 38, azimuth: 77}\n"
	for i := range 6 {
		merges += fmt.Sprintf("- &%c {<<: *%c}\n", 'b'+i, 'a'+i)
	}
	bomb := "looks:\n- &a {incidence: 38, azimuth: 77}\n"
	for i := range 4 {
		bomb += fmt.Sprintf("- &%c {<<: [%s]}\n", 'b'+i, strings.TrimSuffix(strings.Repeat(fmt.Sprintf("*%c, ", 'a'+i), 100), ", "))
	}
	for _, row := range []struct{ name, content, says string }{
		{"looks.txt", "a", `the extension is ".txt"; accepted: .yaml, .yml, .csv`},
		{"looks", "a", `the extension is ""`},
		// YAML
		{"l.yaml", "", "is empty; write a list of looks under looks:"},
		{"l.yaml", "# nothing\n", "is empty"},
		{"l.yaml", "---\n", "is empty"},
		{"l.yaml", "looks:\n", "line 1: looks holds no list"},
		{"l.yaml", "looks: []\n", "looks holds no list"},
		{"l.yaml", "looks: {a: 1}\n", "looks holds no list"},
		{"l.yaml", "\n- name: a\n", "line 2: the list has no key"},
		{"l.yaml", "looks:\n- {incidence: 38, azimuth: 77}\nsites: []\n", `line 3: unknown key "sites"|looks`},
		{"l.yaml", "looks:\n- {incidence: 38, azimuth: 77}\nlooks:\n- {incidence: 38, azimuth: 77}\n", "line 3: looks is given twice"},
		{"l.yaml", "looks:\n- {incidence: 38, azimuth: 77}\n---\na: b\n", "a second document begins"},
		{"l.yaml", "looks:\n- {incidence: 38, azimuth: 77}\n---\n[\n", "correct the YAML there"},
		{"l.yaml", "looks:\n- name\n", "line 2: a look is a mapping"},
		{"l.yaml", "looks:\n- {}\n", "line 2: a look is a mapping"},
		{"l.yaml", "looks:\n- [a]\n", "line 2: a look is a mapping"},
		{"l.yaml", "looks:\n- name: a\n   incidence: 3\n", "line|correct the YAML there"},
		{"l.yaml", "looks:\n- name: a\n\tincidence: 3\n", "line|correct the YAML there"},
		{"l.yaml", "looks:\n- *nowhere\n", "line 2: unknown anchor 'nowhere' referenced; write the anchor &nowhere before its use"},
		{"l.yaml", "looks: [", "at or below line 1: did not find expected"},
		{"l.yaml", "looks:\n- *" + strings.Repeat("n", 400) + "\n", "unknown anchor 'nnn|..."},
		{"l.yaml", "looks:\n- name: a\x1b[31m\n", "line 2: holds the control character U+001B"},
		{"l.yaml", "looks:\n- name: a\n  incidence: 38\n  azimuth: 400\n", `line 4: look "a": azimuth "400" is out of range`},
		{"l.yaml", "looks:\n- name: a\n  incidence: 38\n  azimut: 40\n", `line 4: unknown key "azimut"; did you mean azimuth?`},
		{"l.yaml", "looks:\n- name: a\n  incidence: 38\n  incidence: 39\n", `line 4: incidence "39" is given twice (first at line 3)`},
		{"l.yaml", "looks:\n- incidence:\n  azimuth: 3\n", `line 2: incidence "" has no value`},
		{"l.yaml", "looks:\n- incidence: ~\n  azimuth: 3\n", "has no value"},
		{"l.yaml", "looks:\n- incidence: .nan\n  azimuth: 3\n", "not a plain decimal number"},
		{"l.yaml", "looks:\n- incidence: 0x26\n  azimuth: 3\n", "not a plain decimal number"},
		{"l.yaml", "looks:\n- incidence: !!binary MzgK\n  azimuth: 3\n", `the value of incidence has the tag "!!binary"`},
		{"l.yaml", "looks:\n- kind: tripod\n  position: [10, 46]\n", "line 3: the value of position is a list; write places as LON/LAT"},
		{"l.yaml", "looks:\n- kind: tripod\n  position: {lon: 10}\n", "line 3: the value of position is a mapping"},
		{"l.yaml", "looks:\n- {[a]: 10}\n", "line 2: a key is a list"},
		{"l.yaml", "looks:\n- name: a\n", `line 2: look "a" of kind fixed lacks incidence`},
		{"l.yaml", "looks:\n- {name: a, incidence: 38, azimuth: 7}\n- {name: A, incidence: 38, azimuth: 7}\n", `line 3: name "A" is taken by the look at line 2`},
		{"l.yaml", "looks:\n- {<<: 3, azimuth: 7}\n", "line 2: a merge key takes a mapping"},
		{"l.yaml", "looks:\n- {<<: [3], azimuth: 7}\n", "line 2: a merge key takes a mapping"},
		{"l.yaml", merges, "merge keys are nested more than 4 deep"},
		{"l.yaml", bomb, "a look of more than 500 keys, merged ones included"},
		{"l.yaml", "looks:\n- &a {<<: *a}\n", "line"},
		{"l.yaml", "looks:\n- name: \xff\n", "line 2: is not UTF-8 text"},
		{"l.yaml", "\xff\xfel\x00", "UTF-16|save it as UTF-8"},
		// CSV
		{"l.csv", "", "holds no row; the first row names the keys"},
		{"l.csv", "# nothing\n\n", "holds no row"},
		{"l.csv", header, "holds no look under its first row"},
		{"l.csv", header + ",,\n# a\n", "holds no look under its first row"},
		{"l.csv", header + "a,38,400\n", `line 2, column azimuth: look "a": azimuth "400" is out of range`},
		{"l.csv", "# one\n\n" + header + "\n# two\na,38,400\n", `line 6, column azimuth:`},
		{"l.csv", header + "\"a\n\n\n", "line 2|a quote stands in the middle of a cell or is not closed"},
		{"l.csv", header + "a\"b,38,7\n", "line 2: a quote stands in the middle"},
		{"l.csv", header + "a,38\n", "line 2: has 2 cells, the first row 3"},
		{"l.csv", header + "a,38,5,7\n", `line 2: cell 4, "7", has no key in the first row`},
		{"l.csv", "name,,azimuth\na,38,5\n", `line 2: cell 2, "38", has no key in the first row`},
		{"l.csv", "name;incidence;azimuth\na;38,5;7\n", `line 2, column incidence: look "a": incidence "38,5" has a decimal comma; write 38.5 with a point`},
		{"l.csv", "name,incidence,azimut\na,38,\n", `line 1, column 3: unknown key "azimut"; did you mean azimuth?`},
		{"l.csv", "name,incidence,name\na,38,\n", "line 1, column 3: key name has column 1 already"},
		{"l.csv", "a,38,77\nb,39,77\n", `line 1, column 1: unknown key "a"`},
		{"l.csv", header + "a,,77\n", `line 2: look "a" of kind fixed lacks incidence`},
		{"l.csv", header + "a,38,77\na,39,77\n", `line 3, column name: name "a" is taken by the look at line 2`},
		{"l.csv", header + "a,NaN,77\n", "not a plain decimal number"},
		{"l.csv", header + "a,3\x008,77\n", "line 2: holds the control character U+0000"},
		{"l.csv", header + "\xe4,38,77\n", "line 2: is not UTF-8 text"},
		{"l.csv", "\xfe\xff\x00n", "UTF-16|save it as UTF-8"},
		{"l.csv", strings.Repeat("#\n", maxSize/2) + "#\n", "is larger than 1 MiB; split it"},
	} {
		path := write(t, row.name, row.content)
		looks, err := Read(path)
		if !assert.Error(t, err, row.content) {
			continue
		}
		assert.Nil(t, looks)
		for part := range strings.SplitSeq(fmt.Sprintf("looks file %q: |%s", path, row.says), "|") {
			assert.Contains(t, err.Error(), part, row.content)
		}
		assert.NotContains(t, err.Error(), "\n", row.content)
	}
}

func TestFileUnreadable(t *testing.T) {
	dir := t.TempDir()
	_, err := Read(filepath.Join(dir, "none.yaml"))
	assert.ErrorIs(t, err, os.ErrNotExist)
	assert.ErrorContains(t, err, "check the path")
	require.NoError(t, os.Mkdir(filepath.Join(dir, "folder.csv"), 0o700))
	_, err = Read(filepath.Join(dir, "folder.csv"))
	assert.ErrorContains(t, err, "check that it is a file of looks")
}

// A file of the largest size is read.
func TestLargestFile(t *testing.T) {
	row := "incidence,azimuth\n38,77\n"
	path := write(t, "l.csv", row+strings.Repeat("#", maxSize-len(row)))
	looks, err := Read(path)
	require.NoError(t, err)
	assert.Len(t, looks, 1)
}

func TestMerge(t *testing.T) {
	flag := func(text string) geometry.Look {
		l, err := Flag(text)
		require.NoError(t, err)
		return l
	}
	flags := []geometry.Look{flag("incidence=38,azimuth=77"), flag("name=b,incidence=39,azimuth=77")}
	file := []geometry.Look{flag("incidence=40,azimuth=77"), flag("name=d,incidence=41,azimuth=77")}
	all, err := Merge(flags, file)
	require.NoError(t, err)
	var names []string
	for _, l := range all {
		names = append(names, l.Name)
	}
	assert.Equal(t, []string{"look-1", "b", "look-3", "d"}, names)
	assert.Empty(t, flags[0].Name, "the caller's looks stay as they are")

	_, err = Merge(flags, []geometry.Look{flag("name=B,incidence=40,azimuth=77")})
	assert.ErrorContains(t, err, `--look together with --looks: look names "b" and "B" differ in nothing but case`)
	_, err = Merge(nil, nil)
	assert.ErrorContains(t, err, "no look given; add --look name=north")
	one, err := Merge(nil, file[1:])
	require.NoError(t, err)
	assert.Equal(t, "d", one[0].Name)
}
