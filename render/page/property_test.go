package page_test

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"

	"penwright/render/doc"
	"penwright/render/page"
	"penwright/render/page/pagetest"
)

// plot makes documents of words that each stand in them once.
type plot struct {
	*rand.Rand
	words []string
}

func (p *plot) text(n int) []doc.Inline {
	var list []string
	for range n {
		w := fmt.Sprintf("w%05d", len(p.words))
		p.words = append(p.words, w)
		list = append(list, w+strings.Repeat("x", p.IntN(7)))
	}
	return text(strings.Join(list, " "))
}

func (p *plot) paragraph() doc.Paragraph {
	return doc.Paragraph{Text: p.text(1 + p.IntN(90))}
}

func (p *plot) table(number int) doc.Table {
	columns := 1 + p.IntN(6)
	if p.IntN(12) == 0 {
		columns = 9 // on a turned page
	}
	t := doc.Table{Number: fmt.Sprint(number), Caption: p.text(1 + p.IntN(25)), Columns: make([]doc.Column, columns)}
	row := func() []doc.Cell {
		var cells []doc.Cell
		for j := range columns {
			n := 1
			if j == 0 {
				n += p.IntN(6)
			}
			cells = append(cells, doc.Cell{Text: p.text(n)})
		}
		return cells
	}
	for range 1 + p.IntN(60) {
		t.Rows = append(t.Rows, doc.Row{Cells: row(), Rule: p.IntN(8) == 0})
		if p.IntN(10) == 0 {
			t.Rows = append(t.Rows, doc.Row{Group: true, Cells: []doc.Cell{{Text: p.text(2)}}}, doc.Row{Cells: row()})
		}
	}
	for range p.IntN(3) {
		t.Notes = append(t.Notes, p.text(1+p.IntN(40)))
	}
	return t
}

func (p *plot) document() *doc.Document {
	d := &doc.Document{Title: "Property", Paper: []string{"A4", "Letter"}[p.IntN(2)]}
	headings, tables, figures := 0, 0, 0
	for range 10 + p.IntN(40) {
		switch p.IntN(9) {
		case 0, 1:
			headings++
			d.Blocks = append(d.Blocks, doc.Heading{Level: 1 + p.IntN(4), ID: fmt.Sprint("h", headings), Text: p.text(1 + p.IntN(14))})
		case 2:
			tables++
			d.Blocks = append(d.Blocks, p.table(tables))
		case 3:
			figures++
			d.Blocks = append(d.Blocks, doc.Figure{Number: fmt.Sprint(figures), Caption: p.text(1 + p.IntN(30)), Picture: pagetest.Curves(200+p.Float64()*400, 80+p.Float64()*500)})
		case 4:
			l := doc.List{Ordered: p.IntN(2) == 0, Start: 1, Tight: p.IntN(2) == 0}
			for range 1 + p.IntN(5) {
				l.Items = append(l.Items, []doc.Block{p.paragraph()})
			}
			d.Blocks = append(d.Blocks, l)
		case 5:
			d.Blocks = append(d.Blocks, doc.Aside{Kind: "caution", Title: p.text(2), Blocks: []doc.Block{p.paragraph()}})
		default:
			q := p.paragraph()
			if p.IntN(3) == 0 {
				d.Notes = append(d.Notes, []doc.Block{doc.Paragraph{Text: p.text(1 + p.IntN(120))}})
				q.Text = append(q.Text, doc.FootnoteRef{N: len(d.Notes)})
			}
			d.Blocks = append(d.Blocks, q)
		}
	}
	return d
}

// Whatever a document is made of, every word of it stands on its pages once, pages break
// as they may, and none is left half empty but before what is too high for the rest.
func TestProperties(t *testing.T) {
	n := uint64(60)
	if testing.Short() {
		n = 20
	}
	white, pages := 0.0, 0
	for seed := range n {
		p := &plot{Rand: rand.New(rand.NewPCG(seed, 3))}
		d := p.document()
		book, list := page.Lay(d)
		for _, x := range list {
			t.Errorf("seed %d: %s", seed, x.Message)
		}
		check(t, book)
		breaks(t, book)
		once(t, book, p.words)
		for i := range book.Pages[:len(book.Pages)-1] {
			if book.Pages[i].Width > book.Pages[i].Height {
				continue // what follows stands upright
			}
			f := fill(book.Pages[i])
			white += 1 - f
			pages++
			if next := opening(book.Pages[i+1]); f < 0.55 && !next {
				t.Errorf("page %d is filled to %.0f %%, and running text follows", i+1, 100*f)
			}
		}
		if t.Failed() {
			t.Fatalf("seed %d", seed)
		}
	}
	t.Logf("%.1f %% white at the feet of %d pages", 100*white/float64(pages), pages)
	if white > 0.2*float64(pages) {
		t.Errorf("%.1f %% white at the feet of pages", 100*white/float64(pages))
	}
}

// once tells of words that are not on the pages exactly once, repeated heads apart.
func once(t *testing.T, book *page.Book, words []string) {
	t.Helper()
	count := map[string]int{}
	for _, pg := range book.Pages {
		var el *page.Element
		for _, o := range pg.Ops {
			switch o := o.(type) {
			case page.Begin:
				el = o.Element
			case page.Text:
				if el.Role == page.Artifact || furniture(el) {
					continue
				}
				for _, w := range strings.Fields(o.Text) {
					if len(w) >= 6 && w[0] == 'w' {
						count[w[:6]]++
					}
				}
			}
		}
	}
	for _, w := range words {
		if count[w] != 1 {
			t.Errorf("%s stands on the pages %d times", w, count[w])
		}
	}
}

// opening tells whether a page begins with what may have been too high for the page
// before it: a picture, a table, a heading, a box, or is a turned one.
func opening(pg page.Page) bool {
	if pg.Width > pg.Height {
		return true
	}
	all := pieces(pg)
	if len(all) == 0 || all[0].picture || all[0].el.Role != page.Paragraph {
		return true
	}
	for e := all[0].el; e != nil; e = e.Parent {
		if e.Role == page.Aside {
			return true
		}
	}
	return false
}
