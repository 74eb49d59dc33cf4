package page_test

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"penwright/render/doc"
	"penwright/render/page"
	"penwright/render/page/pagetest"
)

// grid is a table whose cells come from a function.
func grid(rows, columns int, head, body func(i, j int) string) doc.Table {
	t := doc.Table{Number: "1", Caption: text("A table"), Columns: make([]doc.Column, columns), Head: [][]doc.Cell{nil}}
	t.Columns[0].Key = true
	for j := range columns {
		if j > 0 {
			t.Columns[j].Align = doc.Decimal
		}
		t.Head[0] = append(t.Head[0], doc.Cell{Text: text(head(0, j))})
	}
	for i := range rows {
		r := doc.Row{}
		for j := range columns {
			r.Cells = append(r.Cells, doc.Cell{Text: text(body(i, j))})
		}
		t.Rows = append(t.Rows, r)
	}
	return t
}

func constant(s string) func(int, int) string { return func(int, int) string { return s } }

// What no careful author writes is set soundly all the same, without a letter lost, and
// in a time that grows with its length.
func TestHostile(t *testing.T) {
	long := strings.Repeat("weight and gain, ", 300)
	name := strings.Repeat("Hollowmere", 12)
	cjk, rtl := strings.Repeat("飼料", 60), strings.Repeat("שלום עולם ", 60)
	number := func(i, j int) string { return fmt.Sprintf("%d.%d", i, j) }
	one := func(b ...doc.Block) *doc.Document { return &doc.Document{Title: "Hostile", Blocks: b} }
	const mib, part = 1 << 20, 1 << 16
	tests := []struct {
		name string
		doc  *doc.Document
	}{
		{"a paragraph without spaces", one(doc.Paragraph{Text: text(strings.Repeat("x", mib))})},
		{"a paragraph held together", one(doc.Paragraph{Text: text(strings.Repeat("word\u00A0", part/6))})},
		{"a paragraph of words", one(doc.Paragraph{Text: text(strings.Repeat("word ", part/5))})},
		{"a paragraph of accents", one(doc.Paragraph{Text: text(strings.Repeat("\u0338", part/2))})},
		{"a paragraph of figures above the line", one(doc.Paragraph{Text: text(strings.Repeat("⁻¹", part/6))})},
		{"a paragraph from right to left", one(doc.Paragraph{Text: text(strings.Repeat("שלום(1) ", part/12))})},
		{"a paragraph without spaces from right to left", one(doc.Paragraph{Text: text(strings.Repeat("ש\u05B8", part/4))})},
		{"a paragraph of ideographs", one(doc.Paragraph{Text: text(strings.Repeat("飼料", part/24))})},
		{"an address", one(doc.Paragraph{Text: text(strings.Repeat("/a.b-c_d", part/8))})},
		{"code", one(doc.Code{Text: strings.Repeat("x", part)})},
		{"ten thousand rows", one(grid(10000, 6, constant("Head"), number))},
		{"long cells in forty columns", one(grid(2, 40, constant("Head"), constant(long)))},
		{"long cells in one column", one(grid(40, 3, constant("Head"), func(i, j int) string {
			if j == 1 {
				return long
			}
			return "1.5"
		}))},
		{"sixty columns", one(grid(30, 60, func(_, j int) string { return fmt.Sprintf("Treatment %d", j) }, number))},
		{"long names without spaces", one(grid(60, 5, constant(name), func(i, j int) string {
			if j == 0 {
				return fmt.Sprintf("%s%d", name, i)
			}
			return "1.5"
		}))},
		{"long names over sixty columns", one(grid(8, 60, constant(name), constant(name)))},
		{"a long head", one(grid(3, 4, constant(long), number))},
		{"other scripts", one(grid(20, 4, constant(cjk), func(i, j int) string { return []string{cjk, rtl}[(i+j)%2] }))},
		{"long words everywhere", &doc.Document{
			Title: name + name, ShortTitle: name, Code: name, Status: name, Author: name, Date: name, Fingerprint: name,
			Blocks: []doc.Block{
				doc.Contents{},
				doc.Heading{Level: 1, Number: name, Text: text(name)}, doc.Heading{Level: 2, Number: "1.1", Text: text(long)},
				doc.Figure{Number: "1", Caption: text(long), Picture: pagetest.Curves(300, 3000)},
				doc.Aside{Title: text(long), Blocks: []doc.Block{doc.Paragraph{Text: text(name + name + " " + name)}}},
				doc.List{Ordered: true, Start: 99999999, Items: [][]doc.Block{{doc.Paragraph{Text: text(name + name)}}}},
				doc.Table{Number: "1", Caption: text(long), Notes: [][]doc.Inline{text(name + name), text(long)}, Columns: make([]doc.Column, 1),
					Rows: []doc.Row{{Group: true, Cells: []doc.Cell{{Text: text(long)}}}, {Cells: []doc.Cell{{Text: text(name + name)}}}}},
			}}},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			start := time.Now()
			book, _ := page.Lay(test.doc)
			spent := time.Since(start)
			t.Logf("%d pages in %v", len(book.Pages), spent.Round(time.Millisecond))
			// A millisecond or two for each page on a quiet machine; what grows with the square
			// of the length takes minutes.
			if limit := 10 * time.Second; spent > limit {
				t.Errorf("%d pages took %v", len(book.Pages), spent)
			}
			if got, want := letters(book), lettersOf(test.doc.Blocks); got < want {
				t.Errorf("%d letters of %d", got, want)
			}
			check(t, book)
		})
	}
}

// letters counts what stands on the pages outside running heads and repeated ones.
func letters(book *page.Book) int {
	n := 0
	for _, pg := range book.Pages {
		var el *page.Element
		for _, o := range pg.Ops {
			switch o := o.(type) {
			case page.Begin:
				el = o.Element
			case page.Text:
				if el.Role != page.Artifact && !furniture(el) {
					n += len(strings.ReplaceAll(o.Text, " ", ""))
				}
			}
		}
	}
	return n
}

// lettersOf counts the letters that blocks bring to the pages, those in scripts that no
// face holds as one.
func lettersOf(blocks []doc.Block) int {
	n := 0
	count := func(list ...[]doc.Inline) {
		for _, x := range list {
			for _, r := range doc.Plain(x) {
				if r > ' ' && r != '\u00A0' {
					n++
				}
			}
		}
	}
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Paragraph:
			count(b.Text)
		case doc.Heading:
			count(b.Text)
		case doc.Code:
			n += len(b.Text)
		case doc.Figure:
			count(b.Caption)
		case doc.Aside:
			count(b.Title)
			n += lettersOf(b.Blocks)
		case doc.Table:
			count(b.Caption)
			count(b.Notes...)
			for _, cells := range b.Head {
				for _, c := range cells {
					count(c.Text)
				}
			}
			for _, r := range b.Rows {
				for _, c := range r.Cells {
					count(c.Text)
				}
			}
		}
	}
	return n
}
