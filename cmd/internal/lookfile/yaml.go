package lookfile

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"strings"

	"go.yaml.in/yaml/v3"

	"foldshade/geometry"
)

// Bounds on what anchors and merge keys may unfold to, and on what an error
// repeats.
const (
	maxSaid  = 200 // characters of an error of the YAML reader
	maxMerge = 4   // merge keys inside merged mappings
	maxPairs = 500 // pairs of one look, merged ones included
)

// shape is what a looks file in YAML looks like.
const shape = "write a list of looks under looks:, such as\n  looks:\n    - {name: north, incidence: 38, heading: 347, side: right}"

// shapeLine is shape on one line.
var shapeLine = strings.Join(strings.Fields(shape), " ")

// parseYAML reads looks from YAML: a mapping with one key, looks, that holds
// a list of mappings of scalars. Anchors, aliases and merge keys are followed
// within bounds.
func parseYAML(data []byte) ([]geometry.Look, error) {
	data, err := decode(data)
	if err != nil {
		return nil, err
	}
	list, err := looksList(data)
	if err != nil {
		return nil, err
	}
	var entries [][]geometry.Pair
	for _, item := range list.Content {
		if item.Kind == yaml.AliasNode {
			item = item.Alias
		}
		if item.Kind != yaml.MappingNode || len(item.Content) == 0 {
			return nil, at(item, "a look is a mapping of keys to values; %s", shapeLine)
		}
		var m mapping
		if err := m.take(item, 0); err != nil {
			return nil, err
		}
		entries = append(entries, m.pairs)
	}
	return build(entries)
}

// rootOf returns the root node of the only document.
func rootOf(data []byte) (*yaml.Node, error) {
	decoder := yaml.NewDecoder(bytes.NewReader(data))
	var first, second yaml.Node
	err := decoder.Decode(&first)
	if err != nil && err != io.EOF {
		return nil, syntax(err, data)
	}
	if err == io.EOF || len(first.Content) == 0 || first.Content[0].Tag == "!!null" {
		return nil, fmt.Errorf("is empty; %s", shapeLine)
	}
	switch err := decoder.Decode(&second); {
	case err == nil:
		return nil, at(&second, "a second document begins; keep all looks in one list")
	case err != io.EOF:
		return nil, syntax(err, data)
	}
	return first.Content[0], nil
}

// looksList returns the node of the list under looks.
func looksList(data []byte) (*yaml.Node, error) {
	root, err := rootOf(data)
	if err != nil {
		return nil, err
	}
	if root.Kind != yaml.MappingNode {
		return nil, at(root, "the list has no key; %s", shapeLine)
	}
	var list *yaml.Node
	for i := 0; i+1 < len(root.Content); i += 2 {
		key, value := root.Content[i], root.Content[i+1]
		switch {
		case key.Value != "looks":
			return nil, at(key, "unknown key %s beside the list; the only one accepted is looks", quote(key.Value))
		case list != nil:
			return nil, at(key, "looks is given twice; join the two lists")
		}
		list = value
	}
	if list == nil || list.Kind != yaml.SequenceNode || len(list.Content) == 0 {
		return nil, at(root, "looks holds no list; %s", shapeLine)
	}
	return list, nil
}

// syntax rewrites an error of the YAML reader. Its line is often that of the
// block around the fault or one line early, and it gives none in the first
// line and for an unknown anchor.
func syntax(err error, data []byte) error {
	said := strings.Join(strings.Fields(strings.TrimPrefix(err.Error(), "yaml: ")), " ")
	if r := []rune(said); len(r) > maxSaid { // it repeats names from the file
		said = string(r[:maxSaid]) + "..."
	}
	if name, _, ok := strings.Cut(strings.TrimPrefix(said, "unknown anchor '"), "' referenced"); ok {
		before, _, _ := bytes.Cut(data, []byte("*"+name))
		return fmt.Errorf("line %d: %s; write the anchor &%s before its use", 1+bytes.Count(before, []byte("\n")), said, name)
	}
	if !strings.HasPrefix(said, "line ") {
		said = "line 1: " + said
	}
	return errors.New("at or below " + said + "; correct the YAML there")
}

// at returns an error with the line of a node.
func at(n *yaml.Node, format string, args ...any) error {
	return fmt.Errorf("line %d: %w", n.Line, fmt.Errorf(format, args...))
}

// mapping gathers the pairs of one look.
type mapping struct {
	pairs []geometry.Pair
	seen  int // pairs and mappings looked at, dropped ones included
}

// count refuses a look that merges more than any look needs, also when what
// it merges is dropped again: a few nested lists of aliases stand for millions
// of mappings.
func (m *mapping) count(n *yaml.Node) error {
	if m.seen++; m.seen > maxPairs {
		return at(n, "a look of more than %d keys, merged ones included; write out the ones it needs", maxPairs)
	}
	return nil
}

// take adds the pairs of a mapping; own keys come before merged ones and win
// over them.
func (m *mapping) take(n *yaml.Node, depth int) error {
	if err := m.count(n); err != nil {
		return err
	}
	var merges []*yaml.Node
	own := len(m.pairs)
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, value := n.Content[i], n.Content[i+1]
		if key.Tag == "!!merge" {
			merges = append(merges, value)
			continue
		}
		if err := m.add(key, value, depth, own); err != nil {
			return err
		}
	}
	for _, value := range merges {
		if err := m.merge(value, depth+1); err != nil {
			return err
		}
	}
	return nil
}

// merge adds the pairs of a merge key's value, a mapping or a list of them.
func (m *mapping) merge(value *yaml.Node, depth int) error {
	if depth > maxMerge {
		return at(value, "merge keys are nested more than %d deep; write the keys out", maxMerge)
	}
	if value.Kind == yaml.AliasNode {
		value = value.Alias
	}
	switch value.Kind {
	case yaml.MappingNode:
		return m.take(value, depth)
	case yaml.SequenceNode:
		for _, item := range value.Content {
			if item.Kind == yaml.AliasNode {
				item = item.Alias
			}
			if item.Kind != yaml.MappingNode {
				return at(item, "a merge key takes a mapping; write the keys out")
			}
			if err := m.take(item, depth); err != nil {
				return err
			}
		}
		return nil
	}
	return at(value, "a merge key takes a mapping; write the keys out")
}

// add adds one pair. Pairs from the index own on stand in the same mapping:
// among them a key twice is left for BuildLook to refuse; a merged key that an
// outer mapping has already is dropped.
func (m *mapping) add(key, value *yaml.Node, depth, own int) error {
	if err := m.count(key); err != nil {
		return err
	}
	name, err := scalar(key, "a key")
	if err != nil {
		return err
	}
	text, err := scalar(value, "the value of "+name)
	if err != nil {
		return err
	}
	for i, p := range m.pairs {
		if depth > 0 && i < own && p.Key == name {
			return nil
		}
	}
	m.pairs = append(m.pairs, geometry.Pair{Key: name, Value: text, Where: fmt.Sprintf("line %d", key.Line)})
	return nil
}

// scalar returns the text of a scalar node, aliases followed. What the YAML
// reader would take it for does not count: the keys know what they hold.
func scalar(n *yaml.Node, what string) (string, error) {
	place := n
	if n.Kind == yaml.AliasNode {
		n = n.Alias
	}
	switch {
	case n.Kind == yaml.SequenceNode:
		return "", at(place, "%s is a list; write places as LON/LAT, ranges as FROM/TO, and one value otherwise", what)
	case n.Kind != yaml.ScalarNode:
		return "", at(place, "%s is a mapping; write one value", what)
	case n.Style&yaml.TaggedStyle != 0:
		return "", at(place, "%s has the tag %s; write the plain value", what, quote(n.Tag))
	case n.Tag == "!!null":
		return "", nil
	}
	return n.Value, nil
}
