package geometry

import (
	"flag"
	"fmt"
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

var updateLooks = flag.Bool("update-looks", false, "rewrite the generated parts of docs/looks.md")

const looksDoc = "../docs/looks.md"

// keyMarkdown is KeyTable as a table in Markdown.
func keyMarkdown() string {
	var text strings.Builder
	text.WriteString("| key | looks of kind | unit | accepted | meaning | example |\n| --- | --- | --- | --- | --- | --- |\n")
	for _, k := range KeyTable {
		kinds := "any"
		if k.Kinds != nil {
			kinds = strings.ReplaceAll(orList(k.Kinds), " or ", ", ")
		}
		fmt.Fprintf(&text, "| `%s` | %s | %s | %s | %s | `%s` |\n", k.Name, kinds, k.Unit, k.Accepts(), k.Meaning, k.Example)
	}
	return text.String()
}

// drivenMarkdown says which kinds the program computes.
func drivenMarkdown() string {
	var driven, waiting []string
	for _, kind := range Kinds {
		if (Look{Kind: kind}).Driven() {
			driven = append(driven, "`"+string(kind)+"`")
		} else {
			waiting = append(waiting, "`"+string(kind)+"`")
		}
	}
	text := "Kinds that layers and masks are computed for: " + strings.Join(driven, ", ") + ".\n"
	if len(waiting) > 0 {
		text += "Kinds that are read and checked, but not computed yet: " + strings.Join(waiting, ", ") + ".\n"
	}
	return text
}

// The generated parts of the looks reference are those of the program; go
// test ./geometry -update-looks rewrites them.
func TestLooksDoc(t *testing.T) {
	data, err := os.ReadFile(looksDoc)
	require.NoError(t, err)
	doc := string(data)
	for name, want := range map[string]string{"keys": keyMarkdown(), "kinds computed": drivenMarkdown()} {
		before, rest, ok := strings.Cut(doc, "<!-- "+name+": generated -->\n")
		require.True(t, ok, "no start of %q in %s", name, looksDoc)
		got, after, ok := strings.Cut(rest, "<!-- "+name+": end -->\n")
		require.True(t, ok, "no end of %q in %s", name, looksDoc)
		if *updateLooks {
			doc = before + "<!-- " + name + ": generated -->\n" + want + "<!-- " + name + ": end -->\n" + after
			continue
		}
		assert.Equal(t, want, got, "%s, part %q; rewrite it with -update-looks", looksDoc, name)
	}
	if *updateLooks {
		require.NoError(t, os.WriteFile(looksDoc, []byte(doc), 0o644))
	}
	for _, kind := range Kinds {
		assert.Contains(t, doc, Examples[kind], "the worked example of kind %s", kind)
	}
}
