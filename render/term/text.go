package term

import (
	"strconv"
	"strings"
	"unicode"

	"golang.org/x/text/width"

	"penwright/render/doc"
)

// word is a piece of a line that is never broken. A word that follows another without a
// blank is joined; br ends the line before it.
type word struct {
	text   string
	bold   bool
	joined bool
	br     bool
}

// columns returns how many columns s takes: two for wide letters, none for marks that
// stand above or below another.
func columns(s string) int {
	n := 0
	for _, r := range s {
		switch {
		case r < 0x300:
			n++
		case unicode.In(r, unicode.Mn, unicode.Me, unicode.Cf):
		default:
			switch width.LookupRune(r).Kind() {
			case width.EastAsianWide, width.EastAsianFullwidth:
				n += 2
			default:
				n++
			}
		}
	}
	return n
}

// split makes words of text. Blanks that do not break a line stay inside a word.
func split(text []doc.Inline, bold bool) []word {
	var s splitter
	s.inlines(text, bold)
	s.end()
	return s.words
}

type splitter struct {
	words  []word
	run    strings.Builder
	bold   bool // of the run
	joined bool // the next word follows the last without a blank
	br     bool
}

func (s *splitter) end() {
	if s.run.Len() == 0 {
		return
	}
	s.words = append(s.words, word{text: s.run.String(), bold: s.bold, joined: s.joined && !s.br, br: s.br})
	s.run.Reset()
	s.joined, s.br = true, false
}

func (s *splitter) text(text string, bold bool) {
	if s.run.Len() > 0 && bold != s.bold {
		s.end()
	}
	for _, r := range doc.Clean(text) {
		if r == ' ' || r == '\n' || r == '\t' {
			s.end()
			s.joined = false
			continue
		}
		s.bold = bold
		s.run.WriteRune(r)
	}
}

func (s *splitter) inlines(text []doc.Inline, bold bool) {
	for _, in := range text {
		switch n := in.(type) {
		case doc.Text:
			s.text(n.Text, bold)
		case doc.Emph:
			s.inlines(n.Text, bold)
		case doc.Strong:
			s.inlines(n.Text, true)
		case doc.Sup:
			s.text(doc.Raised(doc.Plain(n.Text)), bold)
		case doc.Sub:
			s.text(doc.Lowered(doc.Plain(n.Text)), bold)
		case doc.CodeSpan:
			s.text(n.Text, bold)
		case doc.Link:
			s.inlines(n.Text, bold)
			dest := strings.TrimPrefix(n.Dest, "mailto:")
			if !strings.HasPrefix(dest, "#") && dest != "" && dest != doc.Plain(n.Text) {
				s.text(" ("+dest+")", bold)
			}
		case doc.Ref:
			s.text(n.Text, bold)
		case doc.FootnoteRef:
			s.text("["+strconv.Itoa(n.N)+"]", bold)
		case doc.Break:
			s.end()
			s.br = true
		default:
			panic("term: unknown inline")
		}
	}
}

// wrap sets words into lines of at most so many columns. A word longer than a line
// stands alone on one.
func wrap(words []word, room int) [][]word {
	var lines [][]word
	var line []word
	used := 0
	for i := 0; i < len(words); {
		// What is joined moves together.
		next := i + 1
		size := columns(words[i].text)
		for next < len(words) && words[next].joined {
			size += columns(words[next].text)
			next++
		}
		if len(line) > 0 && (words[i].br || used+1+size > room) {
			lines = append(lines, line)
			line, used = nil, 0
		}
		if len(line) > 0 {
			used++
		}
		used += size
		line = append(line, words[i:next]...)
		i = next
	}
	if len(line) > 0 {
		lines = append(lines, line)
	}
	return lines
}

func lineWidth(line []word) int {
	n := 0
	for i, w := range line {
		if i > 0 && !w.joined {
			n++
		}
		n += columns(w.text)
	}
	return n
}

// show returns a line as text, with the signs for bold if the terminal knows them.
func (t *setter) show(line []word) string {
	var b strings.Builder
	bold := false
	set := func(on bool) {
		if !t.bold || on == bold {
			return
		}
		bold = on
		if on {
			b.WriteString("\x1b[1m")
		} else {
			b.WriteString("\x1b[0m")
		}
	}
	for i, w := range line {
		if !w.bold {
			set(false)
		}
		if i > 0 && !w.joined {
			b.WriteByte(' ')
		}
		set(w.bold)
		b.WriteString(w.text)
	}
	set(false)
	return b.String()
}
