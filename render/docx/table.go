package docx

import (
	"fmt"
	"strings"

	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/grid"
)

// Lengths in points, beside those of the style sheet.
const (
	cellGap   = 8.5 // the margins of two neighbouring cells
	spread    = 16  // most that a column gets beyond what it takes
	highRow   = 15  // lines; a higher one may be broken over pages
	keptRows  = 14  // a table of no more is kept on one page
	mostWide  = 63  // columns of a table that word processors take
	widerType = 1.03
)

// table writes a table on the page as it stands, else on pages turned on their side,
// divided by columns where even these are too narrow.
func (b *builder) table(t doc.Table) {
	upright, turned := float64(b.paper.width-2*margin)/20, float64(b.paper.height-2*margin)/20
	g := grid.New(t, grid.Type{Face: face.Get(face.Serif, false, false), Size: tableSize / 2.0 * widerType})
	if len(g.Columns) == 0 {
		b.caption("Table", t.Number, t.ID, "", t.Caption)
		return
	}
	_, fits := g.Fit(upright, cellGap)
	if (fits && len(g.Columns) <= mostWide) || b.part != inBody {
		b.pieces(t, []*grid.Grid{g}, upright)
		return
	}
	parts := []*grid.Grid{g}
	if _, ok := g.Fit(turned, cellGap); !ok || len(g.Columns) > mostWide {
		parts = g.Divide(turned, cellGap)
	}
	b.endSection(false)
	b.pieces(t, parts, turned)
	b.endSection(true)
}

func (b *builder) pieces(t doc.Table, parts []*grid.Grid, width float64) {
	for i, g := range parts {
		if i == 0 {
			b.caption("Table", t.Number, t.ID, `<w:keepNext/><w:spacing w:before="280"/>`, t.Caption)
		} else {
			b.paragraph("Caption", `<w:keepNext/>`, []doc.Inline{doc.Strong{Text: []doc.Inline{doc.Text{Text: joined(" ", "Table", t.Number) + ", continued"}}}})
		}
		last := i == len(parts)-1
		b.out = append(b.out, element{table: b.grid(g, width, last && len(t.Notes) > 0)})
		if last {
			for _, note := range t.Notes {
				b.paragraph("TableNote", "", note)
			}
		}
		b.out = append(b.out, element{ppr: style("TableEnd")})
	}
}

var justified = map[doc.Align]string{doc.Left: "left", doc.Center: "center", doc.Right: "right", doc.Decimal: "right"}

// grid writes a table as such, ruled above, below its head and at its end.
func (b *builder) grid(g *grid.Grid, width float64, noted bool) string {
	widths, fits := g.Fit(width, cellGap)
	sum := 0.0
	for _, w := range widths {
		sum += w + cellGap
	}
	if more := (width - sum) / float64(len(widths)); fits && more > 0 {
		for i := range widths {
			widths[i] += min(more, spread)
		}
	}
	twips := make([]int, len(widths)) // with the margins of the cells
	total := 0
	for i, w := range widths {
		twips[i] = int((w + cellGap) * 20)
		total += twips[i]
	}
	var s strings.Builder
	fmt.Fprintf(&s, `<w:tbl><w:tblPr><w:tblStyle w:val="Ruled"/><w:tblW w:w="%d" w:type="dxa"/><w:tblLayout w:type="fixed"/><w:tblLook w:val="0020" w:firstRow="1" w:lastRow="0" w:firstColumn="0" w:lastColumn="0" w:noHBand="1" w:noVBand="1"/></w:tblPr><w:tblGrid>`, total)
	for _, w := range twips {
		fmt.Fprintf(&s, `<w:gridCol w:w="%d"/>`, w)
	}
	s.WriteString(`</w:tblGrid>`)
	for i, row := range g.Head {
		s.WriteString(`<w:tr><w:trPr><w:cantSplit/><w:tblHeader/></w:trPr>`)
		for _, c := range row {
			rules := rule("top", i == 0, 8)
			bottom := rule("bottom", i == len(g.Head)-1, 4)
			if bottom == "" {
				bottom = rule("bottom", c.Span > 1 && doc.Plain(c.Text) != "", 4)
			}
			if i == len(g.Head)-1 && len(g.Rows) == 0 {
				bottom = rule("bottom", true, 8)
			}
			if c.Align == doc.Decimal && c.Span > 1 {
				c.Align = doc.Center
			}
			b.cell(&s, c, twips, rules+bottom, "TableHead", "", `<w:vAlign w:val="bottom"/>`)
		}
		s.WriteString(`</w:tr>`)
	}
	for i, row := range g.Rows {
		s.WriteString(`<w:tr>`)
		if grid.Lines(row.Cells, widths, cellGap) <= highRow {
			s.WriteString(`<w:trPr><w:cantSplit/></w:trPr>`)
		}
		last := i == len(g.Rows)-1
		keep := ""
		if row.Group || last && noted || !last && (len(g.Rows) <= keptRows || i < 2 || i == len(g.Rows)-2) {
			keep = `<w:keepNext/>`
		}
		rules := ""
		switch {
		case i == 0 && len(g.Head) == 0:
			rules = rule("top", true, 8)
		case row.Rule:
			rules = rule("top", true, 4)
		}
		rules += rule("bottom", last, 8)
		for _, c := range row.Cells {
			if row.Group {
				c.Text = []doc.Inline{doc.Emph{Text: c.Text}}
			}
			if pad := g.Pad(c); pad != "" && len(c.Text) > 0 {
				c.Text = append(c.Text[:len(c.Text):len(c.Text)], doc.Text{Text: blank(pad)})
			}
			b.cell(&s, c, twips, rules, "TableText", keep, "")
		}
		s.WriteString(`</w:tr>`)
	}
	if len(g.Head)+len(g.Rows) == 0 {
		s.WriteString(`<w:tr>`)
		for i := range twips {
			b.cell(&s, grid.Cell{Col: i, Span: 1}, twips, "", "TableText", "", "")
		}
		s.WriteString(`</w:tr>`)
	}
	s.WriteString(`</w:tbl>`)
	return s.String()
}

func rule(side string, drawn bool, eighths int) string {
	if !drawn {
		return ""
	}
	return fmt.Sprintf(`<w:%s w:val="single" w:sz="%d" w:space="0" w:color="000000"/>`, side, eighths)
}

func (b *builder) cell(s *strings.Builder, c grid.Cell, twips []int, rules, id, keep, valign string) {
	width := 0
	for _, w := range twips[c.Col : c.Col+c.Span] {
		width += w
	}
	fmt.Fprintf(s, `<w:tc><w:tcPr><w:tcW w:w="%d" w:type="dxa"/>`, width)
	if c.Span > 1 {
		fmt.Fprintf(s, `<w:gridSpan w:val="%d"/>`, c.Span)
	}
	if rules != "" {
		s.WriteString(`<w:tcBorders>` + rules + `</w:tcBorders>`)
	}
	s.WriteString(valign + `</w:tcPr>`)
	more := keep
	if c.Align != doc.Left {
		more += `<w:jc w:val="` + justified[c.Align] + `"/>`
	}
	s.WriteString(element{ppr: b.turned(style(id)+more, c.Text), content: b.inlines(c.Text, "")}.String())
	s.WriteString(`</w:tc>`)
}

// blank makes of digits and points blanks of their width. They put numbers in line
// where a tab stop at the decimal mark would follow the reader's own settings, which may
// take a comma for it.
func blank(s string) string {
	return strings.Map(func(r rune) rune {
		switch r {
		case '.', ',', ' ':
			return '\u2008'
		}
		return '\u2007'
	}, s)
}
