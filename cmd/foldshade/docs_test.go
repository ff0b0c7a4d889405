package main

import (
	"go/ast"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/mask"
)

// TestArchitecture: each function in the table of stages is declared in the
// file that stands beside it.
func TestArchitecture(t *testing.T) {
	text, err := os.ReadFile(root + "/docs/architecture.md")
	require.NoError(t, err)
	row := regexp.MustCompile("(?m)^\\| [^|]+ \\| (`[^|]+`) \\| (\\S+\\.go) \\|$")
	trees := sources(t)
	rows := row.FindAllStringSubmatch(string(text), -1)
	require.Greater(t, len(rows), 20)
	for _, r := range rows {
		tree := trees[r[2]]
		require.NotNil(t, tree, r[2])
		for _, name := range strings.Split(r[1], ", ") {
			name = strings.Trim(name, "`")
			declared := false
			for _, d := range tree.Decls {
				if f, ok := d.(*ast.FuncDecl); ok && f.Name.Name == name {
					declared = true
				}
			}
			assert.True(t, declared, "%s declares no function %s", r[2], name)
		}
	}
}

// TestReadmeTables: the README lists every layer, class, colour and exit code
// as the program has them.
func TestReadmeTables(t *testing.T) {
	text, err := os.ReadFile(root + "/README.md")
	require.NoError(t, err)
	readme := string(text)
	plain := strings.ReplaceAll(readme, "`", "")
	for _, l := range mask.Layers {
		row := regexp.MustCompile("(?m)^\\| `" + string(l.Layer) + "` \\|.*$").FindString(readme)
		require.NotEmpty(t, row, "layer %s", l.Layer)
		unit := l.Unit
		if l.IsClass {
			unit = "code"
		}
		assert.Contains(t, row, " | "+unit+" | ", "unit of %s", l.Layer)
	}
	assert.Len(t, regexp.MustCompile("(?m)^\\| `[a-z-]+` \\|").FindAllString(readme, -1), len(mask.Layers))
	for _, c := range mask.Classes {
		row := regexp.MustCompile(`(?m)^\| (\d+, )*` + strconv.Itoa(int(c.Code)) + `(, \d+)* \|.*$`).FindString(readme)
		require.NotEmpty(t, row, "class %d", c.Code)
		assert.Contains(t, row, c.Color)
	}
	for _, line := range strings.Split(strings.TrimSpace(exitStatus), "\n")[1:] {
		code, meaning, _ := strings.Cut(strings.TrimSpace(line), " ")
		assert.Contains(t, plain, "| "+code+" | "+strings.TrimSpace(meaning)+" |")
	}
}

// TestRaceTargets: the race detector's tests, which the Makefile names, exist; a
// name that matches nothing would pass.
func TestRaceTargets(t *testing.T) {
	text, err := os.ReadFile(root + "/Makefile")
	require.NoError(t, err)
	list := regexp.MustCompile(`(?m)^CONCURRENT := (.+)$`).FindSubmatch(text)
	require.NotNil(t, list)
	tests := ""
	for _, dir := range []string{"/mask", "/cmd/foldshade"} {
		files, err := filepath.Glob(root + dir + "/*_test.go")
		require.NoError(t, err)
		for _, file := range files {
			content, err := os.ReadFile(file)
			require.NoError(t, err)
			tests += string(content)
		}
	}
	for _, name := range strings.Fields(string(list[1])) {
		assert.Contains(t, tests, "\nfunc "+name+"(t *testing.T)")
	}
}
