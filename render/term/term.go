// Package term writes a document as plain text for a terminal: paragraphs wrapped,
// tables aligned in a fixed pitch, pictures by their words.
package term

import (
	"bytes"
	"fmt"
	"io"
	"strconv"
	"strings"

	"penwright/render/doc"
)

// Options say how a text is set.
type Options struct {
	Width int  // columns of the terminal; 0 stands for 80, and less than 40 for 40
	Bold  bool // the terminal knows the ANSI signs for bold
}

// Write writes d, which must be numbered. Tables that cannot be made to fit are wider
// than the terminal.
func Write(w io.Writer, d *doc.Document, opt Options) error {
	if opt.Width == 0 {
		opt.Width = 80
	}
	t := &setter{bold: opt.Bold, width: max(opt.Width, 40)}
	t.head(d)
	t.blocks(d.Blocks)
	if len(d.Notes) > 0 {
		t.gap()
		t.line(strings.Repeat("-", min(20, t.width)))
		for i, note := range d.Notes {
			t.within("["+strconv.Itoa(i+1)+"] ", func() { t.blocks(note) })
		}
	}
	if _, err := w.Write(t.buf.Bytes()); err != nil {
		return fmt.Errorf("write text: %w", err)
	}
	return nil
}

// setter keeps the text as it grows.
type setter struct {
	buf    bytes.Buffer
	bold   bool
	width  int    // of a whole line
	prefix string // begins every line
	first  string // begins the next line instead, once
	begun  bool   // something stands above, so that a block needs an empty line before it
	tight  bool   // but not inside a tight list
}

func (t *setter) gap() {
	if t.begun && !t.tight {
		t.buf.WriteString(strings.TrimRight(t.prefix, " ") + "\n")
	}
	t.begun = true
}

func (t *setter) line(s string) {
	start := t.prefix
	if t.first != "" {
		start, t.first = t.first, ""
	}
	t.buf.WriteString(strings.TrimRight(start+s, " ") + "\n")
}

// room is the width left for text; a little is always left, however deep the place.
func (t *setter) room() int { return max(t.width-columns(t.prefix), 20) }

// within sets what content writes behind a mark, its further lines indented as far.
func (t *setter) within(mark string, content func()) {
	oldPrefix, oldTight := t.prefix, t.tight
	if t.first == "" {
		t.first = t.prefix
	}
	t.first += mark
	t.prefix += strings.Repeat(" ", columns(mark))
	t.begun, t.tight = false, false
	content()
	if t.first != "" {
		t.line("")
	}
	t.prefix, t.tight, t.begun = oldPrefix, oldTight, true
}

// beside sets what content writes behind a bar on every line.
func (t *setter) beside(bar string, content func()) {
	oldPrefix, oldTight := t.prefix, t.tight
	t.prefix += bar
	if t.first != "" {
		t.first += bar
	}
	t.begun, t.tight = false, false
	content()
	t.prefix, t.tight, t.begun = oldPrefix, oldTight, true
}

func (t *setter) head(d *doc.Document) {
	if d.Title == "" {
		return
	}
	t.gap()
	title := []word{}
	for _, w := range strings.Fields(doc.Clean(d.Title)) {
		title = append(title, word{text: w, bold: true})
	}
	t.ruled(title, "=")
	var parts []string
	for _, s := range []string{d.Code, d.Status, d.Author, d.Date} {
		if s != "" {
			parts = append(parts, s)
		}
	}
	if d.Fingerprint != "" {
		parts = append(parts, "fingerprint "+d.Fingerprint)
	}
	t.paragraph([]doc.Inline{doc.Text{Text: strings.Join(parts, " · ")}})
}

// ruled sets words with a rule below them, as long as the longest line.
func (t *setter) ruled(words []word, rule string) {
	longest := 0
	for _, l := range wrap(words, t.room()) {
		t.line(t.show(l))
		longest = max(longest, lineWidth(l))
	}
	t.line(strings.Repeat(rule, longest))
}

func (t *setter) paragraph(text []doc.Inline) {
	words := split(text, false)
	if len(words) == 0 {
		return
	}
	t.gap()
	for _, l := range wrap(words, t.room()) {
		t.line(t.show(l))
	}
}

func (t *setter) blocks(blocks []doc.Block) {
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Heading:
			words := split(b.Text, true)
			if b.Number != "" {
				words = append([]word{{text: b.Number, bold: true}, {text: "", bold: true}}, words...)
			}
			t.gap()
			if b.Level == 1 {
				t.ruled(words, "-")
				break
			}
			for _, l := range wrap(words, t.room()) {
				t.line(t.show(l))
			}
		case doc.Paragraph:
			t.paragraph(b.Text)
		case doc.List:
			t.list(b)
		case doc.Quote:
			t.gap()
			t.beside("  ", func() { t.blocks(b.Blocks) })
		case doc.Code:
			t.gap()
			for _, l := range strings.Split(strings.TrimSuffix(doc.Clean(b.Text), "\n"), "\n") {
				t.line("    " + strings.ReplaceAll(l, "\t", "    "))
			}
		case doc.Rule:
			t.gap()
			t.line(strings.Repeat("-", min(20, t.room())))
		case doc.Aside:
			t.gap()
			t.beside("| ", func() {
				if len(b.Title) > 0 {
					t.paragraph([]doc.Inline{doc.Strong{Text: b.Title}})
					t.begun = false // its text follows at once
				}
				t.blocks(b.Blocks)
			})
		case doc.Contents:
			// A terminal shows no pages to find one's way in.
		case doc.Table:
			t.table(b)
		case doc.Figure:
			t.paragraph(captioned("Figure", b.Number, b.Caption))
			if b.Alt != "" {
				t.beside("  ", func() { t.paragraph([]doc.Inline{doc.Text{Text: b.Alt}}) })
			}
		default:
			panic("term: unknown block")
		}
	}
}

func captioned(kind, number string, caption []doc.Inline) []doc.Inline {
	if number == "" {
		return caption
	}
	label := []doc.Inline{doc.Strong{Text: []doc.Inline{doc.Text{Text: kind + " " + number}}}, doc.Text{Text: "  "}}
	return append(label, caption...)
}

func (t *setter) list(l doc.List) {
	last := strconv.Itoa(l.Start + len(l.Items) - 1)
	for i, item := range l.Items {
		if i == 0 || !l.Tight {
			t.gap()
		}
		mark := "- "
		if l.Ordered {
			mark = fmt.Sprintf("%*d. ", len(last), l.Start+i)
		}
		t.within(mark, func() {
			t.tight = l.Tight
			t.blocks(item)
		})
	}
}
