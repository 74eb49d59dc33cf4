// Package md writes a document as Markdown: CommonMark with tables and footnotes.
// Everything that could be taken for markup is escaped. References and links inside the
// document are text, since Markdown has no names for places.
package md

import (
	"bytes"
	"fmt"
	"io"
	"path"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"penwright/render/doc"
)

// Write writes d, which must be numbered. Figures are links into the folder figures,
// tables name their files in the folder tables.
func Write(w io.Writer, d *doc.Document) error {
	var out writer
	out.head(d)
	out.blocks(d.Blocks)
	for i, note := range d.Notes {
		out.gap()
		out.item("[^"+strconv.Itoa(i+1)+"]: ", "    ", note, false)
	}
	if _, err := w.Write(out.buf.Bytes()); err != nil {
		return fmt.Errorf("write markdown: %w", err)
	}
	return nil
}

// writer keeps the text as it grows. prefix begins every line; first, once, the next.
type writer struct {
	buf    bytes.Buffer
	prefix string
	first  string
	begun  bool // something stands above, so that a block needs an empty line before it
}

// gap ends the block above by an empty line.
func (w *writer) gap() {
	if w.begun {
		w.buf.WriteString(strings.TrimRight(w.prefix, " ") + "\n")
	}
	w.begun = true
}

func (w *writer) line(s string) {
	start := w.prefix
	if w.first != "" {
		start, w.first = w.first, ""
	}
	w.buf.WriteString(strings.TrimRight(start+s, " ") + "\n")
}

// lines writes a text that may hold line ends.
func (w *writer) lines(s string) {
	for _, l := range strings.Split(s, "\n") {
		w.line(l)
	}
}

func (w *writer) head(d *doc.Document) {
	if title := strings.TrimSpace(plain(d.Title)); title != "" {
		w.gap()
		w.line("# " + title)
	}
	var parts []string
	for _, s := range []string{d.Code, d.Status, d.Author, d.Date} {
		if s != "" {
			parts = append(parts, s)
		}
	}
	if d.Fingerprint != "" {
		parts = append(parts, "fingerprint "+d.Fingerprint)
	}
	if len(parts) > 0 {
		w.gap()
		w.line(lineStart(plain(strings.Join(parts, " · "))))
	}
}

func (w *writer) blocks(blocks []doc.Block) {
	otherMark := false // neighbouring lists take turns, or they would be one
	for i, b := range blocks {
		otherMark = i > 0 && isList(blocks[i-1]) && !otherMark
		switch b := b.(type) {
		case doc.Heading:
			text := strings.TrimSpace(plain(b.Number) + " " + strings.ReplaceAll(inline(b.Text), hardBreak, " "))
			if text == "" {
				break
			}
			w.gap()
			w.line(strings.Repeat("#", min(b.Level+1, 6)) + " " + text)
		case doc.Paragraph:
			w.paragraph(inline(b.Text))
		case doc.List:
			w.list(b, otherMark)
		case doc.Quote:
			w.quote(func() { w.blocks(b.Blocks) })
		case doc.Code:
			w.gap()
			fence := strings.Repeat("`", max(3, longestRun(b.Text, '`')+1))
			w.line(fence)
			w.lines(strings.TrimSuffix(doc.Clean(b.Text), "\n"))
			w.line(fence)
		case doc.Rule:
			w.gap()
			w.line("***")
		case doc.Aside:
			w.quote(func() {
				w.paragraph(inline([]doc.Inline{doc.Strong{Text: b.Title}}))
				w.blocks(b.Blocks)
			})
		case doc.Contents:
			// A reader of Markdown makes its own.
		case doc.Table:
			w.table(b)
		case doc.Figure:
			w.figure(b)
		default:
			panic("md: unknown block")
		}
	}
}

func isList(b doc.Block) bool {
	_, ok := b.(doc.List)
	return ok
}

// interrupts tells whether b is a list that may follow a paragraph without an empty
// line.
func interrupts(b doc.Block) bool {
	l, ok := b.(doc.List)
	if !ok || len(l.Items) == 0 || len(l.Items[0]) == 0 || l.Ordered && l.Start != 1 {
		return false
	}
	p, ok := l.Items[0][0].(doc.Paragraph)
	return ok && inline(p.Text) != ""
}

func (w *writer) paragraph(text string) {
	if text == "" {
		return
	}
	w.gap()
	w.lines(lineStart(text))
}

func (w *writer) quote(content func()) {
	w.gap()
	old := w.prefix
	if w.first != "" {
		w.first += "> "
	}
	w.prefix += "> "
	w.begun = false
	content()
	if !w.begun {
		w.line("")
	}
	w.prefix, w.begun = old, true
}

func (w *writer) list(l doc.List, other bool) {
	mark := "-"
	if other {
		mark = "*"
	}
	number := max(l.Start, 0)
	for i, item := range l.Items {
		if i == 0 || !l.Tight {
			w.gap()
		}
		start := mark + " "
		if l.Ordered {
			start = strconv.Itoa(min(number+i, 999_999_999)) + "."
			if other {
				start = strings.TrimSuffix(start, ".") + ")"
			}
			start += " "
		}
		w.item(start, strings.Repeat(" ", len(start)), item, l.Tight)
	}
}

// item writes blocks that begin after a mark and go on indented.
func (w *writer) item(mark, indent string, blocks []doc.Block, tight bool) {
	old := w.prefix
	if w.first == "" {
		w.first = w.prefix
	}
	w.first += mark
	w.prefix += indent
	w.begun = false
	for i, b := range blocks {
		if i > 0 && tight && interrupts(b) {
			w.begun = false // a list within a tight item follows at once
		}
		w.blocks([]doc.Block{b})
	}
	if w.first != "" {
		w.line("")
	}
	w.prefix, w.begun = old, true
}

func (w *writer) figure(f doc.Figure) {
	if f.File != "" {
		w.paragraph("![" + plain(f.Alt) + "](" + destination(inFolder("figures", f.File+".svg")) + ")")
	} else {
		w.paragraph(plain(f.Alt))
	}
	w.paragraph(captioned("Figure", f.Number, f.Caption))
}

// inFolder returns the path of a file that may be named without its folder.
func inFolder(folder, name string) string {
	if strings.Contains(name, "/") {
		return name
	}
	return path.Join(folder, name)
}

func captioned(kind, number string, caption []doc.Inline) string {
	text := inline(caption)
	if number == "" {
		return text
	}
	return strings.TrimSpace("**" + plain(kind+" "+number) + "** " + text)
}

func (w *writer) table(t doc.Table) {
	w.paragraph(captioned("Table", t.Number, t.Caption))
	columns := len(t.Columns)
	for _, row := range t.Head {
		columns = max(columns, width(row))
	}
	for _, row := range t.Rows {
		columns = max(columns, width(row.Cells))
	}
	if columns == 0 {
		return
	}
	rows := [][]string{headRow(t.Head, columns)}
	for _, row := range t.Rows {
		cells := row.Cells
		if row.Group && len(cells) > 0 {
			cells = []doc.Cell{{Text: []doc.Inline{doc.Emph{Text: cells[0].Text}}}}
		}
		rows = append(rows, spread(cells, columns, false))
	}
	const widest = 40 // a column that holds more is left ragged
	widths := make([]int, columns)
	for c := range widths {
		widths[c] = 3
		for _, row := range rows {
			widths[c] = max(widths[c], min(utf8.RuneCountInString(row[c]), widest))
		}
	}
	w.gap()
	for i, row := range rows {
		w.line(tableRow(row, widths, t.Columns))
		if i == 0 {
			w.line(delimiters(widths, t.Columns))
		}
	}
	for _, note := range t.Notes {
		w.paragraph(inline(note))
	}
	if t.CSV != "" {
		w.paragraph("In full precision: [" + plain(t.CSV) + "](" + destination(inFolder("tables", t.CSV)) + ")")
	}
}

func width(row []doc.Cell) int {
	n := 0
	for _, c := range row {
		n += max(c.Span, 1)
	}
	return n
}

// spread returns the texts of a row by column; what spans several stands in the first,
// or in all if repeated.
func spread(row []doc.Cell, columns int, repeated bool) []string {
	cells := make([]string, columns)
	col := 0
	for _, c := range row {
		text := strings.ReplaceAll(inTable(c.Text), hardBreak, " ")
		for i := range max(c.Span, 1) {
			if col < columns && (i == 0 || repeated) {
				cells[col] = text
			}
			col++
		}
	}
	return cells
}

// headRow makes one row of all head rows, since Markdown has one: what stands above is
// put before what stands below.
func headRow(head [][]doc.Cell, columns int) []string {
	cells := make([]string, columns)
	for _, row := range head {
		for c, text := range spread(row, columns, true) {
			if cells[c] != "" && text != "" {
				cells[c] += ": "
			}
			cells[c] += text
		}
	}
	return cells
}

func tableRow(cells []string, widths []int, columns []doc.Column) string {
	var b strings.Builder
	for c, text := range cells {
		pad := strings.Repeat(" ", max(widths[c]-utf8.RuneCountInString(text), 0))
		if c < len(columns) && (columns[c].Align == doc.Right || columns[c].Align == doc.Decimal) {
			b.WriteString("| " + pad + text + " ")
		} else {
			b.WriteString("| " + text + pad + " ")
		}
	}
	return b.String() + "|"
}

func delimiters(widths []int, columns []doc.Column) string {
	var b strings.Builder
	for c, n := range widths {
		align := doc.Left
		if c < len(columns) {
			align = columns[c].Align
		}
		switch align {
		case doc.Center:
			b.WriteString("| :" + strings.Repeat("-", n-2) + ": ")
		case doc.Right, doc.Decimal:
			b.WriteString("| " + strings.Repeat("-", n-1) + ": ")
		default:
			b.WriteString("| " + strings.Repeat("-", n) + " ")
		}
	}
	return b.String() + "|"
}

// inTable returns text for a cell of a table, where even code needs its bars escaped.
func inTable(text []doc.Inline) string {
	var s spanner
	s.cell = true
	s.inlines(text)
	return s.done()
}

// inline returns text on one line, but for hard breaks.
func inline(text []doc.Inline) string {
	var s spanner
	s.inlines(text)
	return s.done()
}

// spanner writes inline nodes. Where a mark of emphasis would not count for one, because
// of what stands beside it, that character is written by its number.
type spanner struct {
	b      []byte
	cell   bool
	inLink bool
	nested int
	closed bool // a mark of emphasis has just been closed
	coded  bool // so has a code span
	inner  rune // the last character before that mark
}

// joiner, a character without a width, stands between marks that would run together.
const joiner = "&#8288;"

// hardBreak ends a line inside a paragraph. Text has no other line ends.
const hardBreak = "\\\n"

func (s *spanner) done() string {
	text := strings.ReplaceAll(string(s.b), hardBreak+" ", hardBreak)
	for {
		trimmed := strings.TrimFunc(text, func(r rune) bool { return r != '\n' && unicode.IsSpace(r) })
		trimmed = strings.TrimPrefix(trimmed, hardBreak)
		trimmed = strings.TrimSuffix(trimmed, hardBreak)
		if trimmed == text {
			return text
		}
		text = trimmed
	}
}

func (s *spanner) write(text string) {
	if text == "" {
		return
	}
	first, size := utf8.DecodeRuneInString(text)
	if s.closed && !neutral(first) && sign(s.inner) {
		s.b = append(s.b, number(first)...)
		text = text[size:]
	}
	s.closed, s.coded = false, false
	s.b = append(s.b, text...)
}

// neutral tells whether r can stand beside any mark: a blank or a sign.
func neutral(r rune) bool { return unicode.IsSpace(r) || sign(r) }

func sign(r rune) bool { return unicode.IsPunct(r) || unicode.IsSymbol(r) }

func number(r rune) string { return "&#" + strconv.Itoa(int(r)) + ";" }

func (s *spanner) inlines(text []doc.Inline) {
	for _, in := range text {
		switch n := in.(type) {
		case doc.Text:
			s.write(plain(n.Text))
		case doc.Emph:
			s.emphasis("*", n.Text)
		case doc.Strong:
			s.emphasis("**", n.Text)
		case doc.Sup:
			s.write(plain(doc.Raised(doc.Plain(n.Text))))
		case doc.Sub:
			s.write(plain(doc.Lowered(doc.Plain(n.Text))))
		case doc.CodeSpan:
			if s.coded {
				s.write(joiner)
			}
			s.write(code(n.Text, s.cell))
			s.coded = true
		case doc.Link:
			if s.inLink || strings.HasPrefix(n.Dest, "#") || n.Dest == "" {
				s.inlines(n.Text)
				break
			}
			s.write("[")
			s.inLink = true
			s.inlines(n.Text)
			s.inLink = false
			s.write("](" + destination(n.Dest) + ")")
		case doc.Ref:
			s.write(plain(n.Text))
		case doc.FootnoteRef:
			s.write("[^" + strconv.Itoa(n.N) + "]")
		case doc.Break:
			s.closed, s.coded = false, false
			s.b = append(bytes.TrimRight(s.b, " "), hardBreak...)
		default:
			panic("md: unknown inline")
		}
	}
}

// emphasis writes text between marks. Blanks at its ends go outside.
func (s *spanner) emphasis(mark string, text []doc.Inline) {
	inside := spanner{cell: s.cell, inLink: s.inLink, nested: s.nested + 1}
	inside.inlines(text)
	content := string(inside.b)
	body := strings.TrimSpace(content)
	if body == "" || strings.Contains(body, hardBreak) || s.nested > 1 {
		// Emphasis does not reach over all kinds of line ends, nor nest for ever.
		s.write(content)
		return
	}
	lead := content[:len(content)-len(strings.TrimLeftFunc(content, unicode.IsSpace))]
	trail := content[len(strings.TrimRightFunc(content, unicode.IsSpace)):]
	s.write(lead)
	if s.closed {
		s.closed = false
		s.b = append(s.b, joiner...)
	}
	first, _ := utf8.DecodeRuneInString(body)
	if last, size := utf8.DecodeLastRune(s.b); len(s.b) > 0 && sign(first) && !neutral(last) {
		s.b = append(s.b[:len(s.b)-size], number(last)...)
	}
	s.b = append(s.b, mark+body+mark...)
	s.closed = true
	s.inner, _ = utf8.DecodeLastRuneInString(body)
	s.write(trail)
}

// plain escapes text so that it means itself anywhere but at the start of a line.
func plain(s string) string {
	var b strings.Builder
	for _, r := range doc.Clean(s) {
		switch r {
		case '\\', '`', '*', '_', '[', ']', '<', '>', '&', '|', '{', '}', '~', '$', '#', '!':
			b.WriteByte('\\')
			b.WriteRune(r)
		case '\n', '\t':
			b.WriteByte(' ')
		default:
			b.WriteRune(r)
		}
	}
	return b.String()
}

// lineStart escapes what would make a line begin something else than a paragraph.
func lineStart(text string) string {
	lines := strings.Split(text, "\n")
	for i, l := range lines {
		l = strings.TrimLeft(l, " ")
		switch digits := len(l) - len(strings.TrimLeft(l, "0123456789")); {
		case l == "":
		case strings.IndexByte("-+=:", l[0]) >= 0:
			l = `\` + l
		case digits > 0 && digits < len(l) && (l[digits] == '.' || l[digits] == ')'):
			l = l[:digits] + `\` + l[digits:]
		}
		lines[i] = l
	}
	return strings.Join(lines, "\n")
}

func code(s string, cell bool) string {
	s = strings.Map(func(r rune) rune {
		if r == '\n' || r == '\t' {
			return ' '
		}
		return r
	}, doc.Clean(s))
	if strings.TrimSpace(s) == "" {
		return s
	}
	fence := strings.Repeat("`", longestRun(s, '`')+1)
	if strings.HasPrefix(s, "`") || strings.HasSuffix(s, "`") || strings.HasPrefix(s, " ") && strings.HasSuffix(s, " ") {
		s = " " + s + " "
	}
	if cell {
		s = strings.ReplaceAll(s, "|", `\|`)
	}
	return fence + s + fence
}

func longestRun(s string, c byte) int {
	longest, run := 0, 0
	for i := range len(s) {
		if s[i] == c {
			run++
			longest = max(longest, run)
		} else {
			run = 0
		}
	}
	return longest
}

// destination writes where a link goes between angle brackets, which allow most
// characters.
func destination(dest string) string {
	var b strings.Builder
	b.WriteByte('<')
	for _, r := range doc.Clean(dest) {
		switch {
		case r <= ' ' || r == '|' || r == '{' || r == '}':
			fmt.Fprintf(&b, "%%%02X", r)
		case r == '<' || r == '>' || r == '\\' || r == '&':
			b.WriteByte('\\')
			b.WriteRune(r)
		default:
			b.WriteRune(r)
		}
	}
	return b.String() + ">"
}
