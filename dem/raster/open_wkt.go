package raster

import (
	"fmt"
	"strconv"
	"strings"
)

// wktNode is one node of a well-known text: KEYWORD[arguments]. Arguments
// that are not nodes keep their text, strings without their quotes.
type wktNode struct {
	key  string
	args []string
	kids []*wktNode
	text string // the node as written
}

// maxDepth bounds the nesting; WKT of real systems nests about eight deep.
const maxDepth = 64

// parseWKT reads a well-known text by its grammar alone (ISO 19162, chapter 6).
func parseWKT(s string) (*wktNode, error) {
	n, rest, err := parseNode(s, maxDepth)
	if err != nil {
		return nil, err
	}
	if strings.TrimSpace(rest) != "" {
		return nil, fmt.Errorf("text after the end of the WKT")
	}
	return n, nil
}

// parseNode reads one node and returns what follows it.
func parseNode(s string, depth int) (*wktNode, string, error) {
	s = strings.TrimSpace(s)
	open := strings.IndexAny(s, "[(")
	if open <= 0 || depth == 0 {
		return nil, "", fmt.Errorf("WKT node without keyword and bracket")
	}
	n := &wktNode{key: strings.ToUpper(strings.TrimSpace(s[:open]))}
	rest := s[open+1:]
	for {
		var err error
		if rest, err = n.argument(rest, depth); err != nil {
			return nil, "", err
		}
		if rest == "" {
			return nil, "", fmt.Errorf("WKT ends inside %s", n.key)
		}
		end := rest[0] == ']' || rest[0] == ')'
		rest = rest[1:]
		if end {
			n.text = s[:len(s)-len(rest)]
			return n, rest, nil
		}
	}
}

// argument reads one argument up to the comma or closing bracket, which is
// left in front of what it returns.
func (n *wktNode) argument(s string, depth int) (string, error) {
	s = strings.TrimSpace(s)
	if strings.HasPrefix(s, `"`) {
		return n.quoted(s[1:])
	}
	stop := strings.IndexAny(s, `[(,])`)
	if stop < 0 {
		return "", fmt.Errorf("WKT ends inside %s", n.key)
	}
	if s[stop] == '[' || s[stop] == '(' {
		kid, rest, err := parseNode(s, depth-1)
		if err != nil {
			return "", err
		}
		n.kids = append(n.kids, kid)
		return separator(rest, n.key)
	}
	n.args = append(n.args, strings.TrimSpace(s[:stop]))
	return s[stop:], nil
}

// quoted reads a string whose opening quote is gone; "" stands for a quote.
func (n *wktNode) quoted(s string) (string, error) {
	var b strings.Builder
	for {
		end := strings.IndexByte(s, '"')
		if end < 0 {
			return "", fmt.Errorf("WKT string without its closing quote in %s", n.key)
		}
		b.WriteString(s[:end])
		s = s[end+1:]
		if !strings.HasPrefix(s, `"`) {
			n.args = append(n.args, b.String())
			return separator(s, n.key)
		}
		b.WriteByte('"')
		s = s[1:]
	}
}

// separator checks that a comma or closing bracket comes next.
func separator(s, key string) (string, error) {
	s = strings.TrimSpace(s)
	if s == "" || !strings.ContainsRune(",])", rune(s[0])) {
		return "", fmt.Errorf("WKT of %s lacks a comma or bracket", key)
	}
	return s, nil
}

// is reports whether the node has one of the keywords.
func (n *wktNode) is(keys ...string) bool {
	for _, k := range keys {
		if n.key == k {
			return true
		}
	}
	return false
}

// kid returns the first child with one of the keywords, or nil.
func (n *wktNode) kid(keys ...string) *wktNode {
	for _, k := range n.kids {
		if k.is(keys...) {
			return k
		}
	}
	return nil
}

// name is the node's first argument.
func (n *wktNode) name() string {
	if len(n.args) == 0 {
		return ""
	}
	return n.args[0]
}

// number is the node's i-th argument as a number.
func (n *wktNode) number(i int) (float64, bool) {
	if n == nil || i >= len(n.args) {
		return 0, false
	}
	v, err := strconv.ParseFloat(n.args[i], 64)
	return v, err == nil
}

// code is the node's registry entry, such as EPSG:26710; empty without one.
func (n *wktNode) code() string {
	id := n.kid("ID")
	if id == nil || len(id.args) < 2 {
		return ""
	}
	return id.args[0] + ":" + id.args[1]
}

// system is the kind of the CRS's coordinate system, such as "ellipsoidal".
func (n *wktNode) system() string {
	if cs := n.kid("CS"); cs != nil {
		return strings.ToLower(cs.name())
	}
	return ""
}

// dimensions is the number of axes of the CRS.
func (n *wktNode) dimensions() int {
	v, _ := n.kid("CS").number(1)
	return int(v)
}

// unit returns the name of the CRS's unit and its size in metres or radians,
// of its first axis or the one with a direction. The unit stands on the axes,
// or once for all of them.
func (n *wktNode) unit(axis string) (string, float64) {
	u := n.kid("UNIT", "LENGTHUNIT", "ANGLEUNIT")
	for _, k := range n.kids {
		if k.is("AXIS") && (axis == "" || hasWord(k.args, axis)) {
			if own := k.kid("UNIT", "LENGTHUNIT", "ANGLEUNIT"); own != nil {
				u = own
				break
			}
		}
	}
	if u == nil {
		return "", 0
	}
	size, _ := u.number(1)
	return u.name(), size
}

func hasWord(list []string, word string) bool {
	for _, s := range list {
		if strings.EqualFold(s, word) {
			return true
		}
	}
	return false
}
