package html

import (
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"penwright/render/doc"
)

func (p *page) table(t doc.Table) {
	p.tables++
	number := strconv.Itoa(p.tables)
	class := "table"
	if t.Wide {
		class += " wide"
	}
	p.raw("<div class=\"", class, "\"", attribute("id", t.ID), ">\n")
	// The region scrolls sideways when the table is too wide, so it takes the focus.
	name := " aria-label=\"Table\""
	if t.Number != "" || len(t.Caption) > 0 {
		name = " aria-labelledby=\"x_caption_" + number + "\""
	}
	p.raw("<div class=\"scroll\" role=\"group\" tabindex=\"0\"", name, ">\n<table")
	if sortable(t) {
		p.raw(" class=\"sortable\"")
	}
	p.raw(">\n")
	if t.Number != "" || len(t.Caption) > 0 {
		p.raw("<caption id=\"x_caption_", number, "\"><span>")
		p.caption(label("Table", t.Number), t.Caption)
		p.raw("</span></caption>\n")
	}
	if len(t.Head) > 0 {
		p.raw("<thead>\n")
		for _, row := range t.Head {
			p.raw("<tr>")
			p.headCells(t, row)
			p.raw("</tr>\n")
		}
		p.raw("</thead>\n")
	}
	tails := longestTails(t)
	for i, row := range t.Rows {
		if i == 0 || row.Group {
			if i > 0 {
				p.raw("</tbody>\n")
			}
			p.raw("<tbody>\n")
		}
		p.row(t, row, tails)
	}
	if len(t.Rows) > 0 {
		p.raw("</tbody>\n")
	}
	p.raw("</table>\n</div>\n")
	for _, note := range t.Notes {
		p.raw("<p class=\"table-note\">")
		p.inlines(note)
		p.raw("</p>\n")
	}
	if place, ok := p.files[t.CSV]; ok {
		p.raw("<p class=\"table-note\">In full precision: <a href=\"#x_file_", strconv.Itoa(place+1), "\">", esc(t.CSV), "</a></p>\n")
	}
	p.raw("</div>\n")
}

// sortable tells whether the rows of a table can stand in any order, and every column
// has one head of its own to ask for it.
func sortable(t doc.Table) bool {
	if !t.Sortable || len(t.Head) == 0 || len(t.Rows) < 2 {
		return false
	}
	whole := func(cells []doc.Cell) bool {
		return len(cells) == len(t.Columns) && !slices.ContainsFunc(cells, func(c doc.Cell) bool { return c.Span > 1 })
	}
	return whole(t.Head[len(t.Head)-1]) && !slices.ContainsFunc(t.Rows, func(r doc.Row) bool { return r.Group || r.Rule || !whole(r.Cells) })
}

func (p *page) headCells(t doc.Table, row []doc.Cell) {
	col := 0
	for _, c := range row {
		span := max(c.Span, 1)
		if len(c.Text) == 0 || doc.Plain(c.Text) == "" {
			p.raw("<td", spanned(span), "></td>")
			col += span
			continue
		}
		scope := "col"
		if span > 1 {
			scope = "colgroup"
		}
		p.raw("<th scope=\"", scope, "\"", spanned(span), classes(headAlign(alignment(t, col, c)), longWord(c.Text)), ">")
		p.inlines(c.Text)
		p.raw("</th>")
		col += span
	}
}

// headAlign returns where the head of a column stands: numbers have theirs at the right.
func headAlign(a doc.Align) doc.Align {
	if a == doc.Decimal {
		return doc.Right
	}
	return a
}

func (p *page) row(t doc.Table, row doc.Row, tails []string) {
	p.raw("<tr")
	switch {
	case row.Rule && row.Group:
		p.raw(" class=\"group ruled\"")
	case row.Group:
		p.raw(" class=\"group\"")
	case row.Rule:
		p.raw(" class=\"ruled\"")
	}
	p.raw(">")
	if row.Group && len(row.Cells) > 0 {
		p.raw("<th scope=\"rowgroup\"", spanned(max(len(t.Columns), 1)), classes(doc.Left, longWord(row.Cells[0].Text)), ">")
		p.inlines(row.Cells[0].Text)
		p.raw("</th></tr>\n")
		return
	}
	col := 0
	for _, c := range row.Cells {
		span := max(c.Span, 1)
		align := alignment(t, col, c)
		tag, scope := "td", ""
		if col < len(t.Columns) && t.Columns[col].Key && doc.Plain(c.Text) != "" {
			tag, scope = "th", " scope=\"row\""
		}
		p.raw("<", tag, scope, spanned(span), classes(align, longWord(c.Text)), ">")
		p.inlines(c.Text)
		if align == doc.Decimal && col < len(tails) {
			// Invisible digits fill what the longest tail of the column has more.
			_, tail := doc.SplitDecimal(doc.Plain(c.Text))
			if pad := after(tails[col], utf8.RuneCountInString(tail)); pad != "" {
				p.raw("<span class=\"pad\" aria-hidden=\"true\">", esc(pad), "</span>")
			}
		}
		p.raw("</", tag, ">")
		col += span
	}
	p.raw("</tr>\n")
}

// after returns s without its first n characters.
func after(s string, n int) string {
	for i := range s {
		if n == 0 {
			return s[i:]
		}
		n--
	}
	return ""
}

// longestTails returns, by column, the longest of what stands after the decimal marks.
func longestTails(t doc.Table) []string {
	tails := make([]string, len(t.Columns))
	for _, row := range t.Rows {
		if row.Group {
			continue
		}
		col := 0
		for _, c := range row.Cells {
			if col < len(tails) && alignment(t, col, c) == doc.Decimal {
				_, tail := doc.SplitDecimal(doc.Plain(c.Text))
				if utf8.RuneCountInString(tail) > utf8.RuneCountInString(tails[col]) {
					tails[col] = tail
				}
			}
			col += max(c.Span, 1)
		}
	}
	return tails
}

func alignment(t doc.Table, col int, c doc.Cell) doc.Align {
	switch {
	case c.Own:
		return c.Align
	case col < len(t.Columns):
		return t.Columns[col].Align
	}
	return doc.Left
}

func spanned(span int) string {
	if span <= 1 {
		return ""
	}
	return " colspan=\"" + strconv.Itoa(span) + "\""
}

// classes are those of a cell.
func classes(a doc.Align, long bool) string {
	var names []string
	switch a {
	case doc.Center:
		names = append(names, "center")
	case doc.Right:
		names = append(names, "right")
	case doc.Decimal:
		names = append(names, "decimal")
	}
	if long {
		names = append(names, "long")
	}
	if len(names) == 0 {
		return ""
	}
	return " class=\"" + strings.Join(names, " ") + "\""
}

// longWord tells whether a text holds a word that would make its column wide, so that it
// must be broken.
func longWord(text []doc.Inline) bool {
	const longest = 32
	n := 0
	for _, r := range doc.Plain(text) {
		if n++; r == ' ' || r == '\n' || r == '\t' {
			n = 0
		}
		if n > longest {
			return true
		}
	}
	return false
}
