package main

import (
	"encoding/json"
	"errors"
	"go/ast"
	"go/parser"
	"go/token"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// root is the module's top folder, seen from this package.
const root = "../.."

// listed is what `go list -json` says of a package.
type listed struct {
	ImportPath string
	Standard   bool
	Imports    []string
}

func listPackages(t *testing.T, args ...string) []listed {
	t.Helper()
	cmd := exec.Command("go", append([]string{"list", "-json=ImportPath,Standard,Imports"}, args...)...)
	cmd.Dir = root
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	require.NoError(t, err)
	var all []listed
	for d := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p listed
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			return all
		} else {
			require.NoError(t, err)
		}
		all = append(all, p)
	}
}

// within reports whether a package path is one of the paths or lies below one.
func within(path string, of ...string) bool {
	return slices.ContainsFunc(of, func(o string) bool { return path == o || strings.HasPrefix(path, o+"/") })
}

// TestImportRules holds the one-way imports that docs/architecture.md
// describes. A rule names packages and all that they may import beyond the
// standard library.
func TestImportRules(t *testing.T) {
	standard := map[string]bool{"C": true}
	for _, p := range listPackages(t, "-deps", "./...") {
		if p.Standard {
			standard[p.ImportPath] = true
		}
	}
	rules := []struct {
		name    string
		of      []string // the packages, sub-packages included
		except  []string
		allowed []string
	}{
		{"geometry: standard library and gonum", []string{"foldshade/geometry"}, nil,
			[]string{"foldshade/geometry", "gonum.org/v1/gonum"}},
		{"dem: geometry", []string{"foldshade/dem"}, []string{"foldshade/dem/raster"},
			[]string{"foldshade/dem", "foldshade/geometry"}},
		{"mask: geometry, the grid and x/sync", []string{"foldshade/mask"}, nil,
			[]string{"foldshade/mask", "foldshade/geometry", "foldshade/dem", "golang.org/x/sync"}},
		{"raster knows no radar and no flags", []string{"foldshade/dem/raster"}, nil,
			[]string{"foldshade/dem", "foldshade/geometry", "github.com/airbusgeo/godal", "golang.org/x"}},
	}
	packages := listPackages(t, "./...")
	for _, rule := range rules {
		t.Run(rule.name, func(t *testing.T) {
			matched := 0
			for _, p := range packages {
				if !within(p.ImportPath, rule.of...) || within(p.ImportPath, rule.except...) {
					continue
				}
				matched++
				for _, i := range p.Imports {
					assert.True(t, standard[i] || within(i, rule.allowed...), "%s imports %s", p.ImportPath, i)
				}
			}
			assert.NotZero(t, matched, "the rule matches no package")
		})
	}
	owners := []struct {
		library string
		owner   string // the only packages that may import it; benchmarks in tests may compare with it
	}{
		{"github.com/airbusgeo/godal", "foldshade/dem/raster"},
		{"github.com/spf13/pflag", "foldshade/cmd"},
		{"github.com/spf13/cobra", "foldshade/cmd"},
		{"github.com/schollz/progressbar", "foldshade/cmd"},
	}
	for _, o := range owners {
		t.Run("only "+o.owner+" imports "+o.library, func(t *testing.T) {
			imported := false
			for _, p := range packages {
				if !slices.ContainsFunc(p.Imports, func(i string) bool { return within(i, o.library) }) {
					continue
				}
				imported = true
				assert.True(t, within(p.ImportPath, o.owner), "%s imports %s", p.ImportPath, o.library)
			}
			assert.True(t, imported, "nothing imports it: drop the rule or the module")
		})
	}
}

// TestWithoutCgo: geometry, dem and mask serve programs without a C compiler,
// so nothing that they or their tests need may use cgo.
func TestWithoutCgo(t *testing.T) {
	for _, p := range listPackages(t, "-deps", "-test", "./geometry/...", "./dem", "./mask/...") {
		if !p.Standard {
			assert.NotContains(t, p.Imports, "C", p.ImportPath)
		}
	}
}

// TestOnlyMainExits: below main, everything returns an error.
func TestOnlyMainExits(t *testing.T) {
	exits := map[string][]string{
		"os": {"Exit"}, "syscall": {"Exit"}, "runtime": {"Goexit"},
		"log": {"Fatal", "Fatalf", "Fatalln"},
	}
	inMain := 0
	for file, tree := range sources(t) {
		ast.Inspect(tree, func(n ast.Node) bool {
			call, ok := n.(*ast.SelectorExpr)
			if !ok {
				return true
			}
			pkg, ok := call.X.(*ast.Ident)
			if !ok || !slices.Contains(exits[pkg.Name], call.Sel.Name) {
				return true
			}
			if file == "cmd/foldshade/main.go" {
				inMain++
				return true
			}
			assert.Fail(t, "exit below main", "%s calls %s.%s", file, pkg.Name, call.Sel.Name)
			return true
		})
	}
	assert.Equal(t, 1, inMain, "main itself exits once")
}

// sources parses the module's Go files that are no tests, by their path.
func sources(t *testing.T) map[string]*ast.File {
	t.Helper()
	found := map[string]*ast.File{}
	err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && path != root && strings.HasPrefix(d.Name(), ".") {
			return fs.SkipDir
		}
		if !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
			return nil
		}
		tree, err := parser.ParseFile(token.NewFileSet(), path, nil, parser.SkipObjectResolution)
		rel, _ := filepath.Rel(root, path)
		found[filepath.ToSlash(rel)] = tree
		return err
	})
	require.NoError(t, err)
	return found
}

// TestTopFolders: design has room for these top-level folders and no more.
// What builds and demos make is not part of the tree.
func TestTopFolders(t *testing.T) {
	allowed := []string{"cmd", "geometry", "dem", "mask", "testdata", "docs", ".ci", ".git", "bin", "demo"}
	entries, err := os.ReadDir(root)
	require.NoError(t, err)
	for _, e := range entries {
		if e.IsDir() {
			assert.Contains(t, allowed, e.Name())
		}
	}
}
