package pdf_test

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/page"
	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

// leaf is an element with text; headings of all levels are "H".
type leaf struct{ kind, text string }

// reading lists what a document says in reading order: footnotes behind the block that
// calls them first, figures and tables where the document has them, wherever they float.
type reading struct {
	d     *doc.Document
	toc   []page.Entry
	noted map[int]bool
	out   []leaf
	alts  []string

	within bool // a footnote
	later  []int
}

func (r *reading) add(kind, text string) { r.out = append(r.out, leaf{kind, text}) }

func expected(d *doc.Document) *reading {
	book, _ := page.Lay(d)
	r := &reading{d: d, toc: book.Outline, noted: map[int]bool{}}
	if d.Title != "" {
		r.add("H", d.Title)
	}
	state := d.Status
	if d.Status != "" && d.Date != "" {
		state += " · "
	}
	for _, p := range []string{d.Author, d.Code, state + d.Date} {
		if p != "" {
			r.add("P", p)
		}
	}
	r.blocks(d.Blocks, 0, false)
	for i := range r.out {
		r.out[i].text = words(r.out[i].text)
	}
	return r
}

// words is a text as words, cleaned as it is for drawing.
func words(s string) string {
	s, _ = face.Clean(s)
	return strings.Join(strings.Fields(strings.ReplaceAll(s, "\u2009", "")), " ")
}

// inlines gives the text with the numbers of footnotes, and those.
func inlines(list []doc.Inline) (string, []int) {
	var b strings.Builder
	var calls []int
	doc.Walk([]doc.Block{doc.Paragraph{Text: list}}, func(n any) {
		switch n := n.(type) {
		case doc.Text:
			b.WriteString(n.Text)
		case doc.CodeSpan:
			b.WriteString(n.Text)
		case doc.Ref:
			b.WriteString(n.Text)
		case doc.Break:
			b.WriteByte(' ')
		case doc.FootnoteRef:
			b.WriteString(fmt.Sprint(n.N))
			calls = append(calls, n.N)
		}
	})
	return b.String(), calls
}

func (r *reading) notes(calls []int) {
	if r.within {
		r.later = append(r.later, calls...) // a note called in a note comes behind that
		return
	}
	for _, n := range calls {
		if r.noted[n] || n < 1 || n > len(r.d.Notes) {
			continue
		}
		r.noted[n] = true
		r.add("Lbl", fmt.Sprint(n))
		r.within = true
		r.blocks(r.d.Notes[n-1], 0, true)
		r.within = false
		more := r.later
		r.later = nil
		r.notes(more)
	}
}

func (r *reading) text(kind, before string, list []doc.Inline) []int {
	s, calls := inlines(list)
	if words(before+s) != "" {
		r.add(kind, before+s)
	}
	return calls
}

func (r *reading) blocks(blocks []doc.Block, bullets int, note bool) {
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Heading:
			kind := "H"
			if note {
				kind = "P"
			}
			r.notes(r.text(kind, b.Number+" ", b.Text))
		case doc.Paragraph:
			r.notes(r.text("P", "", b.Text))
		case doc.List:
			for i, item := range b.Items {
				label := []string{"•", "–", "◦"}[bullets%3]
				if b.Ordered {
					label = fmt.Sprintf("%d.", b.Start+i)
				}
				r.add("Lbl", label)
				r.blocks(item, bullets+1, note)
			}
		case doc.Quote:
			r.blocks(b.Blocks, bullets, note)
		case doc.Aside:
			r.notes(r.text("P", "", b.Title))
			r.blocks(b.Blocks, bullets, note)
		case doc.Code:
			r.add("Code", b.Text)
		case doc.Contents:
			r.add("P", "Contents")
			top := 6
			for _, e := range r.toc {
				top = min(top, e.Level)
			}
			for _, e := range r.toc {
				if e.Level <= top+1 {
					r.add("TOCI", fmt.Sprint(e.Title, " ", e.Place.Page+1))
				}
			}
		case doc.Table:
			r.table(b)
		case doc.Figure:
			if b.Picture != nil {
				var labels []string
				for _, o := range b.Picture.Ops {
					if l, ok := o.(doc.Label); ok {
						labels = append(labels, l.Text)
					}
				}
				r.add("Figure", strings.Join(labels, " "))
				r.alts = append(r.alts, b.Alt)
			} else {
				r.add("P", b.Alt)
			}
			before := ""
			if b.Number != "" {
				before = "Figure " + b.Number
				if len(b.Caption) > 0 {
					before += ". "
				}
			}
			r.notes(r.text("Caption", before, b.Caption))
		}
	}
}

func (r *reading) table(t doc.Table) {
	before := ""
	if t.Number != "" {
		before = "Table " + t.Number + ". "
	}
	calls := r.text("Caption", before, t.Caption)
	row := func(cells []doc.Cell, head, group bool) {
		col := 0
		for i, c := range cells {
			if col >= len(t.Columns) || group && i > 0 {
				break
			}
			kind := "TD"
			if head || t.Columns[col].Key {
				kind = "TH"
			}
			s, more := inlines(c.Text)
			r.add(kind, s)
			calls = append(calls, more...)
			col += max(c.Span, 1)
			if group {
				col = len(t.Columns)
			}
		}
		if col < len(t.Columns) {
			r.add("TD", "")
		}
	}
	for _, cells := range t.Head {
		row(cells, true, false)
	}
	for _, x := range t.Rows {
		row(x.Cells, false, x.Group)
	}
	var last []int
	for _, n := range t.Notes {
		last = append(last, r.text("P", "", n)...)
	}
	// The notes of the page come behind the table, before what stands below it.
	at := len(r.out)
	r.notes(calls)
	notes := slices.Clone(r.out[at:])
	below := 0
	for _, n := range t.Notes {
		if s, _ := inlines(n); words(s) != "" {
			below++
		}
	}
	r.out = slices.Insert(r.out[:at], at-below, notes...)
	r.notes(last)
}

// leaves lists what the structure of a file says, in its order.
func leaves(s *pdf.Struct) (out []leaf, alts []string) {
	var walk func(s *pdf.Struct)
	walk = func(s *pdf.Struct) {
		switch {
		case s.Kind == "P" && len(s.Kids) == 1 && s.Kids[0].Kind == "Code":
		case pdf.Leaves[s.Kind]:
			kind := s.Kind
			if strings.HasPrefix(kind, "H") {
				kind = "H"
			}
			out = append(out, leaf{kind, words(s.Text)})
			if kind == "Figure" {
				alts = append(alts, s.Alt)
			}
		}
		for _, k := range s.Kids {
			walk(k)
		}
	}
	walk(s)
	return out, alts
}

// letters is a text for comparing where words from right to left stand as they are seen.
func letters(s string) string {
	for _, r := range s {
		if 0x0590 <= r && r <= 0x08FF {
			runes := []rune(strings.ReplaceAll(s, " ", ""))
			slices.Sort(runes)
			return string(runes)
		}
	}
	return s
}

// says fails where the structure of a file does not say what the document says, element
// by element, in the same order.
func says(t *testing.T, tree *pdf.Struct, d *doc.Document) {
	t.Helper()
	want := expected(d)
	got, alts := leaves(tree)
	for i := range max(len(got), len(want.out)) {
		var g, w leaf
		if i < len(got) {
			g = got[i]
		}
		if i < len(want.out) {
			w = want.out[i]
		}
		if g.kind != w.kind || letters(g.text) != letters(w.text) {
			t.Fatalf("element %d of %d:\n the file says     %s %q\n the document says %s %q", i, len(got), g.kind, g.text, w.kind, w.text)
		}
	}
	if !slices.Equal(alts, want.alts) {
		t.Errorf("figures say %q, not %q", alts, want.alts)
	}
}

func TestReadingOrder(t *testing.T) {
	for _, paper := range []string{"A4", "Letter"} {
		d := pagetest.Sample()
		d.Paper = paper
		for i, b := range d.Blocks {
			// A table wider than any page is divided, and says more than the document.
			if x, ok := b.(doc.Table); ok && len(x.Columns) > 12 {
				x.Columns, x.Head = x.Columns[:12], [][]doc.Cell{x.Head[0][:12]}
				x.Rows = slices.Clone(x.Rows)
				for k := range x.Rows {
					x.Rows[k].Cells = x.Rows[k].Cells[:12]
				}
				d.Blocks[i] = x
			}
		}
		says(t, conforms(t, write(t, d, nil)), d)
	}
}

// Notes in lists, tables, captions, notes and asides; figures that float; a table over
// pages; levels that are skipped.
func TestReadingOrderOfWhatMoves(t *testing.T) {
	text := func(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }
	call := func(s string, n int) []doc.Inline {
		return []doc.Inline{doc.Text{Text: s}, doc.FootnoteRef{N: n}, doc.Text{Text: " and on."}}
	}
	long := strings.Repeat("A pen is the unit that received a diet. ", 60)
	para := func(s string) doc.Paragraph { return doc.Paragraph{Text: text(s)} }
	d := &doc.Document{Lang: "en", Title: "What moves", Blocks: []doc.Block{
		doc.Contents{},
		doc.Heading{Level: 1, ID: "a", Number: "1", Text: call("First", 1)},
		doc.Heading{Level: 4, ID: "b", Text: text("Skipped")},
		para(long),
		doc.Figure{ID: "f1", Number: "1", Alt: "one", Caption: call("The first", 2), Picture: pagetest.Curves(400, 300)},
		para(long),
		doc.Figure{ID: "f2", Number: "2", Alt: "two", Caption: text("The second"), Picture: pagetest.Curves(400, 300)},
		doc.Heading{Level: 2, ID: "c", Text: text("Less skipped")},
		para(long),
		doc.Figure{ID: "f3", Number: "3", Alt: "three", Picture: pagetest.Curves(400, 400)},
		doc.List{Items: [][]doc.Block{{para("one"), doc.Paragraph{Text: call("two", 3)}}, {doc.List{Ordered: true, Start: 7, Items: [][]doc.Block{{para("seven")}, {}}}}}},
		doc.Aside{Kind: "caution", Title: text("Caution"), Blocks: []doc.Block{doc.Paragraph{Text: call("With a note", 4)}, para("after")}},
		doc.Quote{Blocks: []doc.Block{para(long), doc.Heading{Level: 3, Text: text("In a quotation")}, para("quoted")}},
		para(long),
	}, Notes: [][]doc.Block{{para("note one")}, {para("note two")}, {doc.Paragraph{Text: call("note three calls", 5)}, para("its second paragraph")}, {para("note four")}, {para("note five")}, {para("note six")}}}
	table := doc.Table{ID: "t1", Number: "1", Caption: text("Long"), Columns: []doc.Column{{Key: true}, {}, {Align: doc.Decimal}},
		Head: [][]doc.Cell{{{Text: text("Pen")}, {Text: text("Both"), Span: 2}}, {{}, {Text: text("A")}, {Text: text("B")}}}, Notes: [][]doc.Inline{text("Below the table.")}}
	for i := range 120 {
		table.Rows = append(table.Rows, doc.Row{Cells: []doc.Cell{{Text: text(fmt.Sprint("P", i))}, {Text: text("words that need more than one line in a column of this width, as they are so many of them")}, {Text: text("1.5")}}})
	}
	table.Rows[50].Cells[1].Text = call("here", 6)
	table.Rows[60].Cells = table.Rows[60].Cells[:1]
	table.Rows[70] = doc.Row{Group: true, Cells: []doc.Cell{{Text: text("A group")}}}
	table.Rows[80].Cells[1].Text = text(long)
	d.Blocks = append(d.Blocks, table, para(long))
	for _, d.Paper = range []string{"A4", "Letter"} {
		file := write(t, d, nil)
		tree := conforms(t, file)
		says(t, tree, d)
		tables := 0
		var walk func(s *pdf.Struct)
		walk = func(s *pdf.Struct) {
			if s.Kind == "Table" {
				tables++
			}
			for _, k := range s.Kids {
				walk(k)
			}
		}
		walk(tree)
		if tables != 1 {
			t.Errorf("a table over pages is %d tables", tables)
		}
	}
}
