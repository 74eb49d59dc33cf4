package doc

import (
	"bufio"
	"fmt"
	"io"
	"strconv"
	"strings"

	"penwright/protocol/diag"
)

// Dump writes the document as a text to be read and compared: a line for each block and
// row, indented by depth, with inline marks as name{…}. It is not read back.
func Dump(w io.Writer, d *Document) error {
	out := dumper{w: bufio.NewWriter(w)}
	out.line(0, "document %s", strconv.Quote(d.Title))
	for _, field := range []struct{ name, value string }{
		{"short", d.ShortTitle},
		{"lang", d.Lang},
		{"code", d.Code},
		{"status", d.Status},
		{"author", d.Author},
		{"date", d.Date},
		{"fingerprint", d.Fingerprint},
		{"paper", d.Paper},
	} {
		if field.value != "" {
			out.line(1, "%s %s", field.name, strconv.Quote(field.value))
		}
	}
	out.blocks(0, d.Blocks)
	for i, note := range d.Notes {
		out.line(0, "footnote %d", i+1)
		out.blocks(1, note)
	}
	if err := out.w.Flush(); err != nil {
		return fmt.Errorf("write dump: %w", err)
	}
	return nil
}

type dumper struct{ w *bufio.Writer }

func (d dumper) line(depth int, format string, args ...any) {
	for range depth {
		d.w.WriteString("  ")
	}
	fmt.Fprintf(d.w, format, args...)
	d.w.WriteByte('\n')
}

func (d dumper) blocks(depth int, blocks []Block) {
	for _, b := range blocks {
		switch b := b.(type) {
		case Heading:
			d.line(depth, "heading %d%s%s: %s%s", b.Level, mark(" #", b.ID), mark(" ", b.Number), inlines(b.Text), at(b.Pos))
		case Paragraph:
			d.line(depth, "paragraph: %s%s", inlines(b.Text), at(b.Pos))
		case List:
			kind := "bullets"
			if b.Ordered {
				kind = fmt.Sprintf("numbers from %d", b.Start)
			}
			if b.Tight {
				kind += ", tight"
			}
			d.line(depth, "list of %s", kind)
			for _, item := range b.Items {
				d.line(depth+1, "item")
				d.blocks(depth+2, item)
			}
		case Quote:
			d.line(depth, "quote")
			d.blocks(depth+1, b.Blocks)
		case Code:
			d.line(depth, "code %s", strconv.Quote(b.Text))
		case Rule:
			d.line(depth, "rule")
		case Aside:
			d.line(depth, "aside %s: %s", b.Kind, inlines(b.Title))
			d.blocks(depth+1, b.Blocks)
		case Contents:
			d.line(depth, "contents")
		case Table:
			d.table(depth, b)
		case Figure:
			d.figure(depth, b)
		default:
			panic("doc: unknown block")
		}
	}
}

func (d dumper) table(depth int, t Table) {
	var claims string
	if t.Wide {
		claims += " wide"
	}
	if t.Sortable {
		claims += " sortable"
	}
	d.line(depth, "table%s%s%s%s: %s%s", mark(" #", t.ID), mark(" ", t.Number), claims, mark(" csv=", t.CSV), inlines(t.Caption), at(t.Pos))
	columns := make([]string, len(t.Columns))
	for i, c := range t.Columns {
		columns[i] = alignName(c.Align)
		if c.Key {
			columns[i] += " key"
		}
	}
	d.line(depth+1, "columns %s", strings.Join(columns, ", "))
	for _, row := range t.Head {
		d.line(depth+1, "head | %s", cells(row))
	}
	for _, row := range t.Rows {
		kind := "row"
		if row.Group {
			kind = "group"
		}
		if row.Rule {
			kind = "ruled " + kind
		}
		d.line(depth+1, "%s | %s", kind, cells(row.Cells))
	}
	for _, note := range t.Notes {
		d.line(depth+1, "note: %s", inlines(note))
	}
}

func (d dumper) figure(depth int, f Figure) {
	d.line(depth, "figure%s%s%s: %s%s", mark(" #", f.ID), mark(" ", f.Number), mark(" file=", f.File), inlines(f.Caption), at(f.Pos))
	d.line(depth+1, "alt %s", strconv.Quote(f.Alt))
	p := f.Picture
	if p == nil {
		return
	}
	var strokes, fills, marks int
	var labels []string
	for _, op := range p.Ops {
		switch op := op.(type) {
		case Stroke:
			strokes++
		case Fill:
			fills++
		case Label:
			labels = append(labels, op.Text)
		case Mark:
			if op.Name != "" {
				marks++
			}
		default:
			panic("doc: unknown drawing operation")
		}
	}
	d.line(depth+1, "picture %.4g × %.4g pt: %d strokes, %d fills, %d marks, %d labels %q", p.Width, p.Height, strokes, fills, marks, len(labels), labels)
}

func cells(row []Cell) string {
	texts := make([]string, len(row))
	for i, c := range row {
		texts[i] = inlines(c.Text)
		if c.Own {
			texts[i] = "[" + alignName(c.Align) + "]" + texts[i]
		}
		if c.Span > 1 {
			texts[i] = fmt.Sprintf("[over %d]%s", c.Span, texts[i])
		}
	}
	return strings.Join(texts, " | ")
}

func alignName(a Align) string {
	switch a {
	case Left:
		return "left"
	case Center:
		return "center"
	case Right:
		return "right"
	case Decimal:
		return "decimal"
	}
	panic("doc: unknown alignment")
}

var dumpEscape = strings.NewReplacer(`\`, `\\`, "{", `\{`, "}", `\}`, "|", `\|`, "\n", `\n`, "\t", `\t`, "\r", `\r`)

func inlines(text []Inline) string {
	var b strings.Builder
	for _, in := range text {
		switch n := in.(type) {
		case Text:
			b.WriteString(dumpEscape.Replace(n.Text))
		case Emph:
			b.WriteString("emph{" + inlines(n.Text) + "}")
		case Strong:
			b.WriteString("strong{" + inlines(n.Text) + "}")
		case Sup:
			b.WriteString("sup{" + inlines(n.Text) + "}")
		case Sub:
			b.WriteString("sub{" + inlines(n.Text) + "}")
		case CodeSpan:
			b.WriteString("code{" + dumpEscape.Replace(n.Text) + "}")
		case Link:
			b.WriteString("link{" + dumpEscape.Replace(n.Dest) + " | " + inlines(n.Text) + "}")
		case Ref:
			b.WriteString("ref{#" + dumpEscape.Replace(n.ID) + " | " + dumpEscape.Replace(n.Text) + "}")
		case FootnoteRef:
			fmt.Fprintf(&b, "footnote{%d}", n.N)
		case Break:
			b.WriteString("break{}")
		default:
			panic("doc: unknown inline")
		}
	}
	return b.String()
}

func mark(prefix, text string) string {
	if text == "" {
		return ""
	}
	return prefix + text
}

func at(p diag.Pos) string {
	if p == (diag.Pos{}) {
		return ""
	}
	return " @" + p.String()
}
