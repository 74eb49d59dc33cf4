// Package tomlpos finds where the keys and values of a TOML source stand.
//
// The library that decodes TOML tells no positions of keys, so this package scans
// the source a second time. The scan may be plain, because only a source that the
// library has accepted matters: on any other it ends, but what it returns means
// nothing beyond Doc.Twice. Keys and values get positions, nothing is evaluated.
package tomlpos

import (
	"slices"
	"strconv"
	"strings"

	"penwright/protocol/diag"
)

// The limits of a source. A decoder that recurses over nested values is safe within
// them, and so is the memory it needs.
const (
	MaxDepth = 16        // of nested arrays and tables, and parts of a dotted key
	MaxNodes = 1_000_000 // lines, keys and values together
)

// LimitError says that a source is beyond a limit, and where.
type LimitError struct {
	Offset int
	Deep   bool // MaxDepth, else MaxNodes
}

func (e *LimitError) Error() string {
	if e.Deep {
		return "nested too deeply"
	}
	return "too many lines, keys and values"
}

// Kind is the shape of a value.
type Kind uint8

// The kinds.
const (
	Scalar Kind = iota
	Array
	Table
)

// Node is a key with its value, or an element of an array.
type Node struct {
	Name string // the key without quotes; empty for an element
	// Offsets in bytes. Key is that of the key, for a table with a header that of
	// the last part of the name, for an element of an array that of the element
	// itself. Value is that of the value, for a table with a header that of its
	// bracket. The value ends before End.
	Key, Value, End uint32
	Kind            Kind
	implied         bool // a table that was named only in passing
	headed          bool // an array that grows by [[headers]]
	Kids            []*Node
	byName          map[string]*Node // of Kids, once there are many
}

// manyKids is the number from which children are looked up in a map.
const manyKids = 16

// Child returns the key of a table, or nil.
func (n *Node) Child(name string) *Node {
	if n == nil || n.Kind != Table {
		return nil
	}
	if n.byName != nil {
		return n.byName[name]
	}
	for _, k := range n.Kids {
		if k.Name == name {
			return k
		}
	}
	return nil
}

// Item returns the i-th element of an array, counted from 0, or nil.
func (n *Node) Item(i int) *Node {
	if n == nil || n.Kind != Array || i < 0 || i >= len(n.Kids) {
		return nil
	}
	return n.Kids[i]
}

func (n *Node) add(kid *Node) {
	n.Kids = append(n.Kids, kid)
	if n.Kind != Table {
		return
	}
	switch {
	case n.byName != nil:
		n.byName[kid.Name] = kid
	case len(n.Kids) > manyKids:
		n.byName = make(map[string]*Node, 2*manyKids)
		for _, k := range n.Kids {
			n.byName[k.Name] = k
		}
	}
}

// Doc is a scanned source.
type Doc struct {
	File string
	Root *Node
	// Twice holds the offsets of the first key that was defined twice: of its first
	// and its second place. Zero if there is none.
	Twice [2]int

	size  int
	lines []int // offset of each line
}

// At returns the position of a byte offset. An offset beyond the source is that of
// its end.
func (d *Doc) At(offset int) diag.Pos {
	offset = min(max(offset, 0), d.size)
	line, found := slices.BinarySearch(d.lines, offset)
	if !found {
		line--
	}
	return diag.Pos{File: d.File, Line: line + 1, Col: offset - d.lines[line] + 1}
}

// Find returns the node of a dotted key such as unit[1].count or
// contrast[0].weights."20". If it does not exist, found is false and the node is
// that of the nearest enclosing table or array that does.
func (d *Doc) Find(key string) (n *Node, found bool) {
	n = d.Root
	for key != "" {
		var next *Node
		switch {
		case key[0] == '[':
			digits, rest, ok := strings.Cut(key[1:], "]")
			i, err := strconv.Atoi(digits)
			if !ok || err != nil {
				return n, false
			}
			next, key = n.Item(i), strings.TrimPrefix(rest, ".")
		case key[0] == '"':
			quoted, err := strconv.QuotedPrefix(key)
			if err != nil {
				return n, false
			}
			name, err := strconv.Unquote(quoted)
			if err != nil {
				return n, false
			}
			next, key = n.Child(name), strings.TrimPrefix(key[len(quoted):], ".")
		default:
			end := strings.IndexAny(key, ".[")
			if end < 0 {
				end = len(key)
			}
			next, key = n.Child(key[:end]), strings.TrimPrefix(key[end:], ".")
		}
		if next == nil {
			return n, false
		}
		n = next
	}
	return n, true
}

// Join appends a name to a dotted key, quoted where it must be.
func Join(key, name string) string {
	bare := name != ""
	for i := 0; i < len(name); i++ {
		bare = bare && isBare(name[i])
	}
	if !bare {
		name = strconv.Quote(name)
	}
	if key == "" {
		return name
	}
	return key + "." + name
}

// Index appends an array index, counted from 0, to a dotted key.
func Index(key string, i int) string { return key + "[" + strconv.Itoa(i) + "]" }

func isBare(c byte) bool {
	return c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '_' || c == '-'
}
