package term

import (
	"strings"

	"penwright/render/doc"
)

// gutter stands between the columns of a table.
const gutter = 2

// grid is the widths of the columns of a table.
type grid struct {
	table  doc.Table
	widths []int
	heads  []int // widest text before the decimal marks, by column
	tails  []int // widest after
}

func (t *setter) table(tab doc.Table) {
	t.paragraph(captioned("Table", tab.Number, tab.Caption))
	g := newGrid(tab)
	if len(g.widths) > 0 {
		g.fit(t.room())
		if tab.Number == "" && len(tab.Caption) == 0 {
			t.gap()
		}
		t.begun = true
		rule := strings.Repeat("-", g.total())
		t.line(rule)
		for _, row := range tab.Head {
			t.row(g, row, true)
		}
		if len(tab.Head) > 0 {
			t.line(rule)
		}
		for _, row := range tab.Rows {
			if row.Rule {
				t.line(rule)
			}
			if row.Group {
				var words []word
				if len(row.Cells) > 0 {
					words = split(row.Cells[0].Text, true)
				}
				for _, l := range wrap(words, max(g.total(), 20)) {
					t.line(t.show(l))
				}
				continue
			}
			t.row(g, row.Cells, false)
		}
		t.line(rule)
	}
	for _, note := range tab.Notes {
		for _, l := range wrap(split(note, false), t.room()) {
			t.line(t.show(l))
		}
	}
}

func newGrid(tab doc.Table) *grid {
	g := &grid{table: tab}
	n := len(tab.Columns)
	count := func(row []doc.Cell) {
		c := 0
		for _, cell := range row {
			c += max(cell.Span, 1)
		}
		n = max(n, c)
	}
	for _, row := range tab.Head {
		count(row)
	}
	for _, row := range tab.Rows {
		if !row.Group {
			count(row.Cells)
		}
	}
	g.widths, g.heads, g.tails = make([]int, n), make([]int, n), make([]int, n)
	g.each(func(col int, cell doc.Cell, head bool) {
		if cell.Span > 1 {
			return
		}
		if !head && g.align(col, cell) == doc.Decimal {
			before, after := doc.SplitDecimal(flat(cell))
			g.heads[col] = max(g.heads[col], columns(before))
			g.tails[col] = max(g.tails[col], columns(after))
			return
		}
		g.widths[col] = max(g.widths[col], columns(flat(cell)))
	})
	for col := range g.widths {
		g.widths[col] = max(g.widths[col], g.heads[col]+g.tails[col])
	}
	// What spans columns pushes the last of them.
	g.each(func(col int, cell doc.Cell, _ bool) {
		if cell.Span < 2 {
			return
		}
		last := min(col+cell.Span, len(g.widths)) - 1
		if more := columns(flat(cell)) - g.across(col, cell.Span); more > 0 {
			g.widths[last] += more
		}
	})
	return g
}

// each calls visit for the cells of all rows but those that head others.
func (g *grid) each(visit func(col int, cell doc.Cell, head bool)) {
	row := func(cells []doc.Cell, head bool) {
		col := 0
		for _, cell := range cells {
			visit(col, cell, head)
			col += max(cell.Span, 1)
		}
	}
	for _, cells := range g.table.Head {
		row(cells, true)
	}
	for _, r := range g.table.Rows {
		if !r.Group {
			row(r.Cells, false)
		}
	}
}

func (g *grid) align(col int, cell doc.Cell) doc.Align {
	switch {
	case cell.Own:
		return cell.Align
	case col < len(g.table.Columns):
		return g.table.Columns[col].Align
	}
	return doc.Left
}

// across is the width of so many columns with what stands between them.
func (g *grid) across(col, span int) int {
	n := -gutter
	for c := col; c < min(col+max(span, 1), len(g.widths)); c++ {
		n += g.widths[c] + gutter
	}
	return max(n, 0)
}

func (g *grid) total() int { return g.across(0, len(g.widths)) }

// fit makes columns of words narrower, the widest first, as long as no word is broken.
func (g *grid) fit(room int) {
	least := make([]int, len(g.widths))
	g.each(func(col int, cell doc.Cell, head bool) {
		if cell.Span > 1 {
			return
		}
		longest := 0
		for _, unit := range wrap(split(cell.Text, false), 1) {
			longest = max(longest, lineWidth(unit))
		}
		if a := g.align(col, cell); !head && (a == doc.Decimal || a == doc.Right) {
			longest = columns(flat(cell)) // numbers are not broken
		}
		least[col] = max(least[col], longest)
	})
	for col := range least {
		least[col] = max(least[col], g.heads[col]+g.tails[col])
	}
	for g.total() > room {
		widest := -1
		for col, w := range g.widths {
			if w > least[col] && (widest < 0 || w > g.widths[widest]) {
				widest = col
			}
		}
		if widest < 0 {
			return
		}
		g.widths[widest]--
	}
}

// flat is the text of a cell on one line.
func flat(cell doc.Cell) string {
	var b strings.Builder
	for i, w := range split(cell.Text, false) {
		if i > 0 && !w.joined {
			b.WriteByte(' ')
		}
		b.WriteString(w.text)
	}
	return b.String()
}

// row sets one row of cells; what does not fit on a line goes on below. Heads stand at
// the bottom of theirs.
func (t *setter) row(g *grid, cells []doc.Cell, head bool) {
	type set struct {
		lines [][]word
		width int
		align doc.Align
		lead  int // blanks before the text of a decimal
	}
	var sets []set
	height := 1
	col := 0
	for _, cell := range cells {
		if col >= len(g.widths) {
			break
		}
		s := set{width: g.across(col, cell.Span), align: g.align(col, cell), lead: -1}
		s.lines = wrap(split(cell.Text, head), max(s.width, 1))
		if s.align == doc.Decimal {
			s.align = doc.Right
			if !head && cell.Span < 2 && len(s.lines) == 1 {
				// The mark stands where the widest tail of the column begins.
				before, _ := doc.SplitDecimal(flat(cell))
				s.lead = max(s.width-g.tails[col]-columns(before), 0)
			}
		}
		sets = append(sets, s)
		height = max(height, len(s.lines))
		col += max(cell.Span, 1)
	}
	for i := range height {
		var b strings.Builder
		for j, s := range sets {
			n := i
			if head {
				n -= height - len(s.lines)
			}
			text, size := "", 0
			if n >= 0 && n < len(s.lines) {
				text, size = t.show(s.lines[n]), lineWidth(s.lines[n])
			}
			lead := 0
			switch {
			case s.lead >= 0:
				lead = s.lead
			case s.align == doc.Right:
				lead = max(s.width-size, 0)
			case s.align == doc.Center:
				lead = max(s.width-size, 0) / 2
			}
			if j > 0 {
				b.WriteString(strings.Repeat(" ", gutter))
			}
			b.WriteString(strings.Repeat(" ", lead) + text)
			if j < len(sets)-1 {
				b.WriteString(strings.Repeat(" ", max(s.width-lead-size, 0)))
			}
		}
		t.line(b.String())
	}
}
