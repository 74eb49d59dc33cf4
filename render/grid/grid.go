// Package grid places the cells of a table and measures its columns, for writers whose
// readers make the pages: what is not told to them beforehand, they set badly.
package grid

import (
	"math"
	"strings"
	"unicode"
	"unicode/utf8"

	"penwright/render/doc"
	"penwright/render/face"
)

// Most is the greatest number of columns of a table; what stands further right is left
// out.
const Most = 4096

// oneLine is the length of a cell of numbers that is not broken.
const oneLine = 26

// Grid is a table whose every cell knows its columns. Widths are in the unit of the size
// it was measured at, without the gaps between columns.
type Grid struct {
	Columns []Column
	Head    [][]Cell
	Rows    []Row
}

// Column is a column with its measures.
type Column struct {
	doc.Column
	Natural float64 // what it takes on one line
	Narrow  float64 // its widest word
	Firm    float64 // its widest number, which is never broken
	Tail    string  // of its decimal numbers, the longest after the mark
}

// Row is a row of the body. In a group, one cell covers all columns.
type Row struct {
	Cells       []Cell
	Rule, Group bool
}

// Cell is a cell over the columns from Col, Span of them, at least one.
type Cell struct {
	Text    []doc.Inline
	Col     int
	Span    int
	Align   doc.Align
	Natural float64
	Narrow  float64
	Firm    bool   // a number, or a range of them
	Tail    string // after the decimal mark, where the cell is aligned by it
}

// Type is what a table is set in.
type Type struct {
	Face *face.Face
	Size float64
	// Hyphens says that long words may be divided.
	Hyphens bool
}

func (t Type) width(text string) float64 { return t.Face.Width(text, t.Size) }

// New measures a table.
func New(t doc.Table, f Type) *Grid {
	n := count(t)
	g := &Grid{Columns: make([]Column, n)}
	for i := range g.Columns {
		if i < len(t.Columns) {
			g.Columns[i].Column = t.Columns[i]
		}
	}
	for _, cells := range t.Head {
		g.Head = append(g.Head, g.place(cells, f))
	}
	for i, r := range t.Rows {
		row := Row{Rule: r.Rule && i > 0, Group: r.Group}
		if r.Group {
			row.Cells = g.place(r.Cells, f)
			if n > 0 {
				row.Cells = row.Cells[:1]
				row.Cells[0].Span, row.Cells[0].Align = n, doc.Left
			}
		} else {
			row.Cells = g.place(r.Cells, f)
		}
		g.Rows = append(g.Rows, row)
	}
	g.measure(f)
	return g
}

// count counts columns by the declaration and by what the rows hold.
func count(t doc.Table) int {
	n := len(t.Columns)
	row := func(cells []doc.Cell) {
		sum := 0
		for _, c := range cells {
			sum = min(sum+max(c.Span, 1), max(len(t.Columns), len(cells)))
		}
		n = max(n, sum)
	}
	for _, cells := range t.Head {
		row(cells)
	}
	for _, r := range t.Rows {
		if !r.Group {
			row(r.Cells)
		}
	}
	return min(n, Most)
}

// place gives each cell its columns; empty cells fill a row to its end.
func (g *Grid) place(cells []doc.Cell, f Type) []Cell {
	n := len(g.Columns)
	var out []Cell
	col := 0
	for _, c := range cells {
		if col >= n {
			break
		}
		x := Cell{Text: c.Text, Col: col, Span: min(max(c.Span, 1), n-col), Align: g.Columns[col].Align}
		if c.Own {
			x.Align = c.Align
		}
		text, _ := face.Clean(doc.Plain(c.Text))
		x.Natural = f.width(text)
		for _, w := range strings.Fields(text) {
			width := f.width(w)
			if f.Hyphens && divisible(w) {
				width *= 0.6
			}
			x.Narrow = max(x.Narrow, width)
		}
		// A range of numbers is read as one.
		x.Firm = (x.Align == doc.Right || x.Align == doc.Decimal) && utf8.RuneCountInString(text) <= oneLine
		if x.Align == doc.Decimal {
			_, x.Tail = doc.SplitDecimal(doc.Plain(c.Text))
		}
		out = append(out, x)
		col += x.Span
	}
	for ; col < n; col++ {
		out = append(out, Cell{Col: col, Span: 1, Align: g.Columns[col].Align})
	}
	return out
}

// divisible tells whether a word is long enough, and of letters, so that it can be
// divided by a hyphen.
func divisible(word string) bool {
	const long = 8
	n := 0
	for _, r := range word {
		if !unicode.IsLetter(r) {
			return false
		}
		n++
	}
	return n >= long
}

// measure finds the widths of the columns from cells over one of them, then widens those
// under cells over several.
func (g *Grid) measure(f Type) {
	before := make([]float64, len(g.Columns)) // the widest before the decimal mark
	each := func(do func(c Cell, body bool)) {
		for _, row := range g.Head {
			for _, c := range row {
				do(c, false)
			}
		}
		for _, row := range g.Rows {
			for _, c := range row.Cells {
				if !row.Group {
					do(c, true)
				}
			}
		}
	}
	each(func(c Cell, body bool) {
		if c.Span > 1 {
			return
		}
		col := &g.Columns[c.Col]
		col.Natural, col.Narrow = max(col.Natural, c.Natural), max(col.Narrow, c.Narrow)
		if c.Firm && body {
			col.Firm = max(col.Firm, c.Natural)
		}
		if body && c.Align == doc.Decimal {
			if utf8.RuneCountInString(c.Tail) > utf8.RuneCountInString(col.Tail) {
				col.Tail = c.Tail
			}
			before[c.Col] = max(before[c.Col], c.Natural-f.width(c.Tail))
		}
	})
	for i := range g.Columns {
		if col := &g.Columns[i]; before[i] > 0 {
			wide := before[i] + f.width(col.Tail)
			col.Natural, col.Narrow = max(col.Natural, wide), max(col.Narrow, wide)
			if col.Firm > 0 {
				col.Firm = max(col.Firm, wide)
			}
		}
	}
	each(func(c Cell, _ bool) {
		if c.Span < 2 {
			return
		}
		natural, narrow := 0.0, 0.0
		for _, col := range g.Columns[c.Col : c.Col+c.Span] {
			natural, narrow = natural+col.Natural, narrow+col.Narrow
		}
		for i := c.Col; i < c.Col+c.Span; i++ {
			g.Columns[i].Natural += max(min(c.Natural, 2*c.Narrow)-natural, 0) / float64(c.Span)
			g.Columns[i].Narrow += max(c.Narrow-narrow, 0) / float64(c.Span)
		}
	})
}

// Fit gives the widths of the columns within a width, with a gap between columns:
// natural ones where there is room, else each its least and a share of the rest. It
// tells whether no word must be broken, but for words longer than a fourth of the width.
func (g *Grid) Fit(width, gap float64) ([]float64, bool) {
	n := len(g.Columns)
	out := make([]float64, n)
	if n == 0 {
		return out, true
	}
	avail := max(width-gap*float64(n-1), 1)
	natural, least := 0.0, 0.0
	for i, c := range g.Columns {
		out[i] = min(c.Natural, max(c.Firm, min(c.Narrow, width/4), width/10))
		natural += c.Natural
		least += out[i]
	}
	switch {
	case natural <= avail:
		for i, c := range g.Columns {
			out[i] = c.Natural
		}
		return out, true
	case least > avail:
		for i := range out {
			out[i] *= avail / least
		}
		return out, false
	}
	// The rest is shared by the root of what is wanted, so that one long text does not
	// starve the others.
	rest := avail - least
	for round := 0; round < 8 && rest > 0.01; round++ {
		sum := 0.0
		for i, c := range g.Columns {
			sum += math.Sqrt(max(c.Natural-out[i], 0))
		}
		if sum == 0 {
			break
		}
		share := rest / sum
		for i, c := range g.Columns {
			wanted := max(c.Natural-out[i], 0)
			add := min(wanted, share*math.Sqrt(wanted))
			out[i] += add
			rest -= add
		}
	}
	return out, true
}

// Natural tells whether the table takes no more than a width with every cell on one line.
func (g *Grid) Natural(width, gap float64) bool {
	sum := gap * float64(max(len(g.Columns)-1, 0))
	for _, c := range g.Columns {
		sum += c.Natural
	}
	return sum <= width
}

// Lines estimates how many lines a row takes with columns of such widths.
func Lines(cells []Cell, widths []float64, gap float64) int {
	lines := 1
	for _, c := range cells {
		if w := Width(c, widths, gap); c.Natural > w && w > 0 {
			// A line is on average short of half a word.
			lines = max(lines, int(math.Ceil(c.Natural/max(w-min(c.Narrow, w)/3, w/2))))
		}
	}
	return lines
}

// Width is the room of a cell.
func Width(c Cell, widths []float64, gap float64) float64 {
	w := gap * float64(c.Span-1)
	for _, x := range widths[c.Col : c.Col+c.Span] {
		w += x
	}
	return w
}

// Divide cuts a table that does not fit into ones of fewer columns, each with the
// columns that name its rows. A cell over columns of several of them stands in each.
func (g *Grid) Divide(width, gap float64) []*Grid {
	var keys []int
	room := width
	for i, c := range g.Columns {
		if !c.Key || i != len(keys) {
			break
		}
		keys = append(keys, i)
		room -= min(c.Natural, max(min(c.Narrow, width/4), width/8)) + gap
	}
	if room < width/3 {
		keys, room = nil, width
	}
	var parts [][]int
	used := 0.0
	for i := len(keys); i < len(g.Columns); i++ {
		c := g.Columns[i]
		need := min(c.Natural, max(c.Firm, min(c.Narrow, room/2), room/8)) + gap
		if len(parts) == 0 || used+need > room {
			parts = append(parts, append([]int(nil), keys...))
			used = 0
		}
		parts[len(parts)-1] = append(parts[len(parts)-1], i)
		used += need
	}
	if len(parts) < 2 {
		return []*Grid{g}
	}
	var out []*Grid
	for _, part := range parts {
		out = append(out, g.only(part))
	}
	return out
}

// only makes a table of some of the columns.
func (g *Grid) only(cols []int) *Grid {
	at := make([]int, len(g.Columns)) // where a column has gone, from 1
	out := &Grid{}
	for i, c := range cols {
		at[c] = i + 1
		out.Columns = append(out.Columns, g.Columns[c])
	}
	pick := func(cells []Cell) []Cell {
		var kept []Cell
		for _, c := range cells {
			first, n := 0, 0
			for i := c.Col; i < c.Col+c.Span; i++ {
				if at[i] > 0 {
					if n == 0 {
						first = at[i] - 1
					}
					n++
				}
			}
			if n > 0 {
				c.Col, c.Span = first, n
				kept = append(kept, c)
			}
		}
		return kept
	}
	for _, row := range g.Head {
		out.Head = append(out.Head, pick(row))
	}
	for _, row := range g.Rows {
		row.Cells = pick(row.Cells)
		out.Rows = append(out.Rows, row)
	}
	return out
}

// Pad gives what a decimal cell lacks at its end to stand in line with the longest of
// its column.
func (g *Grid) Pad(c Cell) string {
	if c.Align != doc.Decimal || c.Span > 1 {
		return ""
	}
	n := utf8.RuneCountInString(c.Tail)
	for i := range g.Columns[c.Col].Tail {
		if n == 0 {
			return g.Columns[c.Col].Tail[i:]
		}
		n--
	}
	return ""
}
