package pagetest

import (
	"math"
	"math/rand/v2"
	"strings"

	"penwright/render/doc"
)

// Random makes a document of random nodes: odd texts, empty parts, spans that do not
// add up, pictures with odd numbers. The same seed gives the same document.
func Random(seed uint64) *doc.Document {
	r := random{rand.New(rand.NewPCG(seed, 1))}
	d := &doc.Document{
		Lang: r.text(1), Title: r.text(6), ShortTitle: r.text(3), Code: r.text(1), Status: r.text(1), Author: r.text(2),
		Date: r.text(1), Fingerprint: r.text(1), Paper: r.pick("A4", "Letter", ""),
		Blocks: r.blocks(0, r.IntN(25)),
	}
	for range r.IntN(6) {
		d.Notes = append(d.Notes, r.blocks(3, r.IntN(3)))
	}
	return d
}

type random struct{ *rand.Rand }

func (r random) pick(list ...string) string { return list[r.IntN(len(list))] }

func (r random) text(words int) string {
	var list []string
	for range r.IntN(words + 1) {
		list = append(list, r.pick("gain", "of", "barrows", "α ≤ β", "kg ha⁻¹", "a\xff\xfeb", "🐖", "漢字", "x\x00y\u202Ez", "\u200B", "",
			"1.5", "−0.25", "<0.001", "שלום (1)", "سلام", "e\u0301\u0302", "-", "—", "/", "a/b-c", "\n\t", "\u00A0", "\u2009", "\u2028",
			"https://hollowmere.example/a/very/long/path?with=a&query=of-some-length#and-fragment", strings.Repeat("W", 1+r.IntN(150)),
			strings.Repeat("⁻¹", r.IntN(40)), "(", ")", "\\", "R\u0338", "\U0010FFFF", "\uE000", "\uFFFE"))
	}
	return strings.Join(list, r.pick(" ", " ", " ", ""))
}

func (r random) inlines(depth, n int) []doc.Inline {
	var list []doc.Inline
	if depth > 4 {
		return nil
	}
	for range r.IntN(n + 1) {
		switch r.IntN(14) {
		case 0:
			list = append(list, doc.Emph{Text: r.inlines(depth+1, 2)})
		case 1:
			list = append(list, doc.Strong{Text: r.inlines(depth+1, 2)})
		case 2:
			list = append(list, doc.Sup{Text: r.inlines(depth+1, 1)})
		case 3:
			list = append(list, doc.Sub{Text: r.inlines(depth+1, 1)})
		case 4:
			list = append(list, doc.CodeSpan{Text: r.text(2)})
		case 5:
			list = append(list, doc.Link{Dest: r.pick("#h1", "#", "", "#nowhere", "https://hollowmere.example/\xff(é)\n", r.text(1)), Text: r.inlines(depth+1, 2)})
		case 6:
			list = append(list, doc.Ref{ID: r.pick("h1", "t1", ""), Text: r.text(2)})
		case 7:
			list = append(list, doc.FootnoteRef{N: r.IntN(8) - 1})
		case 8:
			list = append(list, doc.Break{})
		case 9:
			list = append(list, nil)
		default:
			list = append(list, doc.Text{Text: r.text(30)})
		}
	}
	return list
}

func (r random) blocks(depth, n int) []doc.Block {
	var list []doc.Block
	if depth > 4 {
		return nil
	}
	for range n {
		switch r.IntN(16) {
		case 0, 1:
			list = append(list, doc.Heading{Level: r.IntN(9) - 1, ID: r.pick("h1", "h2", ""), Number: r.text(1), Text: r.inlines(0, 3)})
		case 2:
			l := doc.List{Ordered: r.IntN(2) == 0, Start: r.IntN(2000) - 3, Tight: r.IntN(2) == 0}
			for range r.IntN(4) {
				l.Items = append(l.Items, r.blocks(depth+1, r.IntN(3)))
			}
			list = append(list, l)
		case 3:
			list = append(list, doc.Quote{Blocks: r.blocks(depth+1, r.IntN(3))})
		case 4:
			list = append(list, doc.Code{Text: r.text(60)})
		case 5:
			list = append(list, doc.Rule{})
		case 6:
			list = append(list, doc.Aside{Kind: r.pick("answer", "caution", ""), Title: r.inlines(0, 1), Blocks: r.blocks(depth+1, r.IntN(4))})
		case 7:
			list = append(list, doc.Contents{})
		case 8, 9:
			list = append(list, r.table())
		case 10:
			f := doc.Figure{ID: r.pick("f1", ""), Number: r.pick("1", ""), Caption: r.inlines(0, 4), Alt: r.text(8), Picture: r.picture()}
			list = append(list, f)
		case 11:
			list = append(list, nil)
		default:
			list = append(list, doc.Paragraph{Text: r.inlines(0, 8)})
		}
	}
	return list
}

func (r random) cells(n int) []doc.Cell {
	var list []doc.Cell
	for range n {
		list = append(list, doc.Cell{Text: r.inlines(3, 1), Span: r.IntN(5) - 1, Own: r.IntN(5) == 0, Align: doc.Align(r.IntN(4))})
		if r.IntN(40) == 0 {
			list[len(list)-1].Span = math.MaxInt
		}
	}
	return list
}

func (r random) table() doc.Table {
	t := doc.Table{ID: r.pick("t1", ""), Number: r.pick("1", ""), Caption: r.inlines(0, 2), Wide: r.IntN(3) == 0}
	n := r.IntN(9)
	if r.IntN(6) == 0 {
		n = r.IntN(60)
	}
	for i := range n {
		t.Columns = append(t.Columns, doc.Column{Align: doc.Align(r.IntN(4)), Key: i == 0 || r.IntN(10) == 0})
	}
	for range r.IntN(3) {
		t.Head = append(t.Head, r.cells(r.IntN(n+2)))
	}
	for range r.IntN(30) {
		t.Rows = append(t.Rows, doc.Row{Cells: r.cells(r.IntN(n + 2)), Rule: r.IntN(9) == 0, Group: r.IntN(9) == 0})
	}
	for range r.IntN(3) {
		t.Notes = append(t.Notes, r.inlines(0, 2))
	}
	return t
}

func (r random) number() float64 {
	switch r.IntN(30) {
	case 0:
		return math.NaN()
	case 1:
		return math.Inf(1 - 2*r.IntN(2))
	case 2:
		return 1e300
	case 3:
		return 0
	}
	return r.NormFloat64() * 200
}

func (r random) picture() *doc.Picture {
	if r.IntN(6) == 0 {
		return nil
	}
	p := &doc.Picture{Width: math.Abs(r.number()), Height: math.Abs(r.number())}
	if r.IntN(3) > 0 {
		p.Width, p.Height = 400, 250
	}
	path := func() []doc.Segment {
		var s []doc.Segment
		for range r.IntN(6) {
			s = append(s, doc.Segment{Kind: doc.SegmentKind(r.IntN(5)), X: r.number(), Y: r.number(), X1: r.number(), Y1: r.number(), X2: r.number(), Y2: r.number()})
		}
		return s
	}
	colour := func() doc.Colour {
		return doc.Colour{R: uint8(r.IntN(256)), A: uint8(r.IntN(256)), Role: doc.Role(r.IntN(5))}
	}
	for range r.IntN(12) {
		switch r.IntN(5) {
		case 0:
			p.Ops = append(p.Ops, doc.Stroke{Path: path(), Width: r.number(), Dashes: []float64{r.number(), r.number()}, Colour: colour()})
		case 1:
			p.Ops = append(p.Ops, doc.Fill{Path: path(), Colour: colour()})
		case 2:
			p.Ops = append(p.Ops, doc.Label{X: r.number(), Y: r.number(), Size: r.number(), Angle: r.number(), Text: r.text(3), Bold: r.IntN(2) == 0, Colour: colour()})
		case 3:
			p.Ops = append(p.Ops, doc.Mark{Name: r.text(1)})
		default:
			p.Ops = append(p.Ops, nil)
		}
	}
	return p
}

// Large is a document with one table of so many rows and columns.
func Large(rows, columns int) *doc.Document {
	t := doc.Table{Number: "1", Caption: words("A large table")}
	var head []doc.Cell
	for k := range columns {
		t.Columns = append(t.Columns, doc.Column{Align: doc.Decimal, Key: k == 0})
		head = append(head, cell("Column"))
	}
	t.Head = [][]doc.Cell{head}
	for range rows {
		var row []doc.Cell
		for k := range columns {
			row = append(row, cell([]string{"12.5", "0.034", "1 024.5", "–"}[k%4]))
		}
		t.Rows = append(t.Rows, doc.Row{Cells: row})
	}
	return &doc.Document{Title: "Large", Blocks: []doc.Block{t}}
}
