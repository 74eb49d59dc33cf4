package diag

import (
	"bytes"
	"fmt"
	"io"
	"strings"
	"unicode"
	"unicode/utf8"

	"golang.org/x/text/width"
)

// Text writes diagnostics for people, each with its source line and a caret under
// the place:
//
//	protocol.toml:4:8: error: trial.code: expected text, found the number 14 [wrong-type]
//	     4 | code = 14
//	       |        ^^
//	    hint: write it in quotes: code = "14"
//
// Control and direction characters of the input are written as their code, so that
// no input can play with a terminal.
type Text struct {
	// Source returns the bytes of a file of the trial folder, or nil if they are
	// not at hand; then no source line is drawn. A nil Source draws none.
	Source func(file string) []byte
	Color  bool // draw with ANSI colours
	Keep   int  // of diagnostics of one kind only the first Keep are shown; < 1: all
}

// The colours, as ANSI sequences.
const (
	bold   = "\x1b[1m"
	red    = "\x1b[1;31m"
	yellow = "\x1b[1;33m"
	blue   = "\x1b[1;34m"
	plain  = "\x1b[0m"
)

// Write writes l in its order.
func (t Text) Write(w io.Writer, l List) error {
	var b bytes.Buffer
	lines := map[string][][]byte{}
	for _, d := range l.Fold(t.Keep) {
		t.one(&b, d, lines)
	}
	_, err := w.Write(b.Bytes())
	return err
}

func (t Text) one(b *bytes.Buffer, d Folded, lines map[string][][]byte) {
	color := [...]string{red, yellow, blue}[min(max(d.Severity, Error), Note)]
	if place := d.Pos.String(); place != "" {
		b.WriteString(t.paint(bold, clean(place)) + ": ")
	}
	b.WriteString(t.paint(color, d.Severity.String()) + ": ")
	if d.Key != "" {
		b.WriteString(clean(d.Key) + ": ")
	}
	b.WriteString(clean(d.Message))
	if d.Code != "" {
		b.WriteString(" [" + d.Code + "]")
	}
	b.WriteByte('\n')
	t.excerpt(b, d.Pos, color, lines)
	for _, r := range d.Related {
		fmt.Fprintf(b, "    %s: %s\n", clean(r.Pos.String()), clean(r.Message))
	}
	if d.Hint != "" {
		fmt.Fprintf(b, "    %s %s\n", t.paint(bold, "hint:"), clean(d.Hint))
	}
	if d.More > 0 {
		fmt.Fprintf(b, "    and %d more like it\n", d.More)
	}
}

func (t Text) paint(color, s string) string {
	if !t.Color {
		return s
	}
	return color + s + plain
}

// excerpt draws the line of p and a caret line under it.
func (t Text) excerpt(b *bytes.Buffer, p Pos, color string, lines map[string][][]byte) {
	if t.Source == nil || p.Line < 1 || p.File == "" {
		return
	}
	file, ok := lines[p.File]
	if !ok {
		file = bytes.Split(bytes.TrimPrefix(t.Source(p.File), []byte("\ufeff")), []byte("\n"))
		lines[p.File] = file
	}
	if p.Line > len(file) {
		return
	}
	line := string(bytes.TrimSuffix(file[p.Line-1], []byte("\r")))
	if strings.TrimSpace(line) == "" {
		return
	}
	col := p.Col - 1
	if col < 0 || col > len(line) {
		drawn, _, _ := draw(line, 0, 0)
		fmt.Fprintf(b, "%6d | %s\n", p.Line, drawn)
		return
	}
	drawn, at, n := draw(line, col, extent(line[col:]))
	fmt.Fprintf(b, "%6d | %s\n", p.Line, drawn)
	fmt.Fprintf(b, "       | %s%s\n", strings.Repeat(" ", at), t.paint(color, strings.Repeat("^", n)))
}

// extent returns the length in bytes of the word or quoted text that s begins with,
// and at least that of one character.
func extent(s string) int {
	if s == "" {
		return 0
	}
	if q := s[0]; q == '"' || q == '\'' {
		for i := 1; i < len(s); i++ {
			if s[i] == '\\' && q == '"' {
				i++
			} else if s[i] == q {
				return i + 1
			}
		}
	}
	n := 0
	for i, r := range s {
		if !unicode.IsLetter(r) && !unicode.IsDigit(r) && !strings.ContainsRune("_-+.:%/", r) {
			break
		}
		n = i + utf8.RuneLen(r)
	}
	if n > 0 {
		return n
	}
	_, n = utf8.DecodeRuneInString(s)
	return n
}

// The greatest width of an excerpt, and what of it stands before the caret when the
// line is longer.
const (
	excerptWidth = 120
	excerptLead  = 40
)

// draw returns line as it can be printed, tabs expanded to multiples of four, the
// column where the byte col stands in it, counted from 0, and the width of the n
// bytes from there on, at least 1. A long line is cut to a window around col.
func draw(line string, col, n int) (drawn string, at, wide int) {
	if len(line) > excerptWidth*4 { // bounds the work on a line of megabytes
		from := max(0, col-excerptWidth*2)
		for from > 0 && !utf8.RuneStart(line[from]) {
			from--
		}
		to := min(len(line), from+excerptWidth*4)
		line, col = line[from:to], col-from
		if from > 0 {
			line, col = "…"+line, col+len("…")
		}
	}
	var cells []string // text of each column; a wide character leaves its second cell empty
	at, end := -1, 0
	for i := 0; i < len(line); {
		r, size := utf8.DecodeRuneInString(line[i:])
		if at < 0 && i >= col {
			at = len(cells)
		}
		s, w := glyph(r, size, len(cells))
		if w == 0 && len(cells) > 0 {
			cells[len(cells)-1] += s
		} else {
			cells = append(cells, s)
			for range w - 1 {
				cells = append(cells, "")
			}
		}
		i += size
		if i <= col+n {
			end = len(cells)
		}
	}
	if at < 0 {
		at = len(cells)
	}
	wide = max(1, end-at)
	from := 0
	if len(cells) > excerptWidth && at > excerptLead {
		from = at - excerptLead
	}
	to := min(len(cells), from+excerptWidth)
	drawn = strings.Join(cells[from:to], "")
	at -= from
	if from > 0 {
		drawn, at = "…"+drawn, at+1
	}
	if to < len(cells) {
		drawn += "…"
	}
	return strings.TrimRight(drawn, " "), at, min(wide, excerptWidth)
}

// glyph returns the text of r and its width in columns when the next free column is
// col.
func glyph(r rune, size, col int) (string, int) {
	switch {
	case r == '\t':
		n := 4 - col%4
		return strings.Repeat(" ", n), n
	case r == utf8.RuneError && size == 1, unprintable(r):
		s := code(r)
		return s, len(s)
	case unicode.In(r, unicode.Mn, unicode.Me):
		return string(r), 0
	}
	if k := width.LookupRune(r).Kind(); k == width.EastAsianWide || k == width.EastAsianFullwidth {
		return string(r), 2
	}
	return string(r), 1
}

// unprintable tells whether r is a control, direction or other character without a
// shape of its own.
func unprintable(r rune) bool {
	return r != ' ' && !unicode.IsPrint(r) && !unicode.In(r, unicode.Zs)
}

// code is the printed form of a character that cannot be printed.
func code(r rune) string { return fmt.Sprintf("<%04X>", r) }

// clean replaces in s what cannot be printed.
func clean(s string) string {
	ok := utf8.ValidString(s)
	for _, r := range s {
		ok = ok && !unprintable(r)
	}
	if ok {
		return s
	}
	var b strings.Builder
	for i := 0; i < len(s); {
		r, size := utf8.DecodeRuneInString(s[i:])
		switch {
		case r == '\n' || r == '\t':
			b.WriteByte(' ')
		case r == utf8.RuneError && size == 1, unprintable(r):
			b.WriteString(code(r))
		default:
			b.WriteRune(r)
		}
		i += size
	}
	return b.String()
}
