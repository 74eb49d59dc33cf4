package tomlpos

import (
	"bytes"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Scan finds the keys and values of a source without a byte order mark and shorter
// than 4 GiB. The error is nil or a *LimitError; the document is returned with it so
// that its place can be told.
func Scan(file string, src []byte) (*Doc, error) {
	s := &scanner{src: src, doc: &Doc{File: file, Root: &Node{Kind: Table}, size: len(src), lines: []int{0}}}
	s.doc.Root.End = uint32(len(src))
	for i := 0; ; i++ {
		n := bytes.IndexByte(src[i:], '\n')
		if n < 0 {
			break
		}
		i += n
		s.doc.lines = append(s.doc.lines, i+1)
		if s.nodes++; s.nodes > MaxNodes {
			s.stop(i, false)
			return s.doc, s.err
		}
	}
	s.document()
	if s.err != nil {
		return s.doc, s.err
	}
	return s.doc, nil
}

type scanner struct {
	src   []byte
	i     int // offset of the next byte
	nodes int
	doc   *Doc
	err   *LimitError
}

// part is one part of a dotted key.
type part struct {
	name string
	at   int
}

// stop ends the scan at a limit.
func (s *scanner) stop(at int, deep bool) {
	if s.err == nil {
		s.err = &LimitError{Offset: at, Deep: deep}
	}
	s.i = len(s.src)
}

// node makes a node that begins at an offset.
func (s *scanner) node(name string, key, value int, kind Kind) *Node {
	s.nodes++
	if s.nodes > MaxNodes {
		s.stop(key, false)
	}
	return &Node{Name: name, Key: uint32(key), Value: uint32(value), End: uint32(value), Kind: kind}
}

// twice notes the first key that was defined a second time.
func (s *scanner) twice(first *Node, second int) {
	if s.doc.Twice == [2]int{} {
		s.doc.Twice = [2]int{int(first.Key), second}
	}
}

func (s *scanner) more() bool { return s.i < len(s.src) }

// peek returns the next byte, 0 at the end.
func (s *scanner) peek() byte {
	if s.i < len(s.src) {
		return s.src[s.i]
	}
	return 0
}

// step goes on by a byte, but not beyond the end, where a limit may have led.
func (s *scanner) step() { s.i = min(s.i+1, len(s.src)) }

func (s *scanner) spaces() {
	for s.i < len(s.src) && (s.src[s.i] == ' ' || s.src[s.i] == '\t') {
		s.i++
	}
}

// blank skips spaces, line ends, comments and commas: all that may stand between
// the elements of an array.
func (s *scanner) blank() {
	for s.i < len(s.src) {
		switch s.src[s.i] {
		case ' ', '\t', '\n', '\r', ',':
			s.i++
		case '#':
			s.line()
		default:
			return
		}
	}
}

// line skips to the next line end.
func (s *scanner) line() {
	if n := bytes.IndexByte(s.src[s.i:], '\n'); n >= 0 {
		s.i += n
	} else {
		s.i = len(s.src)
	}
}

func (s *scanner) document() {
	current := s.doc.Root
	for {
		s.blank()
		if !s.more() {
			return
		}
		if s.peek() == '[' {
			current = s.header()
		} else {
			s.pair(current, 0)
		}
		s.line()
	}
}

// header scans [a.b] or [[a.b]] and returns the table that it opens.
func (s *scanner) header() *Node {
	bracket := s.i
	s.step()
	array := s.peek() == '['
	if array {
		s.step()
	}
	parts := s.key()
	n := s.doc.Root
	if len(parts) == 0 {
		return &Node{Kind: Table}
	}
	last := parts[len(parts)-1]
	for _, p := range parts[:len(parts)-1] {
		n = s.within(n, p)
	}
	kid := n.Child(last.name)
	switch {
	case array && kid == nil:
		kid = s.node(last.name, last.at, bracket, Array)
		kid.headed = true
		n.add(kid)
	case array && !kid.headed:
		s.twice(kid, last.at)
		return &Node{Kind: Table}
	case array:
	case kid == nil:
		kid = s.node(last.name, last.at, bracket, Table)
		n.add(kid)
		return kid
	case kid.Kind == Table && kid.implied:
		kid.Key, kid.Value, kid.End, kid.implied = uint32(last.at), uint32(bracket), uint32(bracket), false
		return kid
	default:
		s.twice(kid, last.at)
		return &Node{Kind: Table}
	}
	item := s.node("", last.at, bracket, Table)
	kid.add(item)
	return item
}

// within returns the table that the part of a dotted key leads to, which is made if
// it is not there.
func (s *scanner) within(n *Node, p part) *Node {
	kid := n.Child(p.name)
	switch {
	case kid == nil:
		kid = s.node(p.name, p.at, p.at, Table)
		kid.implied = true
		n.add(kid)
	case kid.Kind == Array && kid.headed && len(kid.Kids) > 0:
		kid = kid.Kids[len(kid.Kids)-1]
	case kid.Kind != Table:
		s.twice(kid, p.at)
		return &Node{Kind: Table}
	}
	return kid
}

// pair scans key = value into a table.
func (s *scanner) pair(n *Node, depth int) {
	parts := s.key()
	s.spaces()
	if s.peek() != '=' || len(parts) == 0 {
		if s.peek() != '\n' {
			s.step() // whatever it is, go on
		}
		return
	}
	s.step()
	last := parts[len(parts)-1]
	for _, p := range parts[:len(parts)-1] {
		n = s.within(n, p)
	}
	kid := s.value(last.name, last.at, depth)
	if old := n.Child(last.name); old != nil {
		s.twice(old, last.at)
		return
	}
	n.add(kid)
}

// key scans a dotted key up to the character that ends it.
func (s *scanner) key() []part {
	var parts []part
	for {
		s.spaces()
		if len(parts) == MaxDepth {
			s.stop(s.i, true)
			return nil
		}
		at := s.i
		switch c := s.peek(); c {
		case '"', '\'':
			s.text()
			parts = append(parts, part{name: unquote(s.src[at:s.i]), at: at})
		default:
			for s.i < len(s.src) && !strings.ContainsRune(" \t\r\n.=[]{},#\"'", rune(s.src[s.i])) {
				s.step()
			}
			if s.i == at {
				return parts
			}
			parts = append(parts, part{name: string(s.src[at:s.i]), at: at})
		}
		s.spaces()
		if s.peek() != '.' {
			return parts
		}
		s.step()
	}
}

// value scans a value and returns its node; key < 0: it is an element.
func (s *scanner) value(name string, key, depth int) *Node {
	s.spaces()
	at := s.i
	if key < 0 {
		key = at
	}
	if depth > MaxDepth {
		s.stop(at, true)
		return &Node{}
	}
	n := s.node(name, key, at, Scalar)
	switch s.peek() {
	case '[':
		n.Kind = Array
		s.step()
		for s.blank(); s.more() && s.peek() != ']'; s.blank() {
			before := s.i
			n.add(s.value("", -1, depth+1))
			if s.i == before {
				s.step()
			}
		}
		s.step()
	case '{':
		n.Kind = Table
		s.step()
		for s.blank(); s.more() && s.peek() != '}'; s.blank() {
			before := s.i
			s.pair(n, depth+1)
			if s.i == before {
				s.step()
			}
		}
		s.step()
	case '"', '\'':
		s.text()
	default:
		for s.i < len(s.src) && !strings.ContainsRune(",]}#\n", rune(s.src[s.i])) {
			s.step()
		}
		n.End = uint32(at + len(bytes.TrimRight(s.src[at:s.i], " \t\r")))
		return n
	}
	n.End = uint32(s.i)
	return n
}

// text scans a string of any of the four kinds. One that is not closed ends with
// its line, or with the source.
func (s *scanner) text() {
	q := s.peek()
	long := bytes.HasPrefix(s.src[s.i:], []byte{q, q, q})
	if long {
		s.i = min(s.i+3, len(s.src))
	} else {
		s.step()
	}
	for s.i < len(s.src) {
		switch c := s.src[s.i]; {
		case c == '\\' && q == '"':
			s.i = min(s.i+2, len(s.src))
		case c == '\n' && !long:
			return
		case c != q:
			s.step()
		case !long:
			s.step()
			return
		case bytes.HasPrefix(s.src[s.i:], []byte{q, q, q}):
			s.i = min(s.i+3, len(s.src))
			// The closing three are the last of the run: up to two quotes may stand
			// before them, and the decoder takes a third after a backslash.
			for s.peek() == q {
				s.step()
			}
			return
		default:
			s.step()
		}
	}
}

// unquote returns the text of a quoted key.
func unquote(quoted []byte) string {
	q := quoted[0]
	body := string(bytes.TrimSuffix(quoted[1:], quoted[:1]))
	if q == '\'' || !strings.Contains(body, `\`) {
		return body
	}
	var b strings.Builder
	for i := 0; i < len(body); i++ {
		if body[i] != '\\' || i+1 == len(body) {
			b.WriteByte(body[i])
			continue
		}
		i++
		digits := 0
		switch c := body[i]; c {
		case 'b':
			b.WriteByte('\b')
		case 't':
			b.WriteByte('\t')
		case 'n':
			b.WriteByte('\n')
		case 'f':
			b.WriteByte('\f')
		case 'r':
			b.WriteByte('\r')
		case 'e':
			b.WriteByte(0x1b)
		case 'x':
			digits = 2
		case 'u':
			digits = 4
		case 'U':
			digits = 8
		default:
			b.WriteByte(c)
		}
		if digits == 0 {
			continue
		}
		end := min(i+1+digits, len(body))
		r, err := strconv.ParseUint(body[i+1:end], 16, 32)
		if err != nil || r > utf8.MaxRune {
			r = utf8.RuneError
		}
		b.WriteRune(rune(r))
		i = end - 1
	}
	return b.String()
}
