package page

import (
	"math"
	"slices"
	"strings"
	"unicode/utf8"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

// cell is a cell on its way to the page, measured at tableSize.
type cell struct {
	atoms    []atom
	col      int
	span     int
	align    doc.Align
	natural  float64 // on one line
	narrow   float64 // its widest word
	left     float64 // before the decimal mark
	empty    bool
	ownAlign bool
}

// row is a row of cells, of the head or the body.
type row struct {
	cells       []cell
	rule, group bool
	head        bool
}

// grid is a table measured.
type grid struct {
	columns []doc.Column
	head    []row
	rows    []row
	natural []float64 // by column
	comfort []float64 // below this a column looks cramped
	narrow  []float64 // below this a word is broken
	left    []float64 // by column: widest part before the decimal mark
	right   []float64
}

// form is how a table is set: the size of its type and where its columns stand.
type form struct {
	size   float64
	x      []float64 // left edges
	widths []float64
	width  float64 // of the table
}

const (
	mostColumns = 4096
	tallRow     = 12  // lines: a higher row is broken over pages
	longWordAt  = 180 // wider words are broken rather than that the others have no room
)

func (s *setter) tableItem(t doc.Table, w where) item {
	it := s.table(t, w)
	if it.turned {
		return s.turnedTable(t, w)
	}
	return it
}

// table sets t in the column if it fits with type of at least tableSizeMin. Else it is
// turned on the top level, and elsewhere divided.
func (s *setter) table(t doc.Table, w where) item {
	pos := s.at(t.Pos, w)
	g := s.measureTable(t, pos)
	least := tableSizeMin
	if t.Wide {
		least += 0.5
	}
	if f, ok := g.fit(w.width, least); ok {
		return item{boxes: s.setTable(t, g, f, w, pos), table: true}
	}
	if w.depth == 0 {
		return item{turned: true, table: true}
	}
	return item{boxes: s.divide(t, g, w, pos), table: true}
}

// turnedTable sets t on turned pages, divided by columns where even these are too narrow.
func (s *setter) turnedTable(t doc.Table, w where) item {
	pos := s.at(t.Pos, w)
	w.width = s.turnedMeasure()
	g := s.measureTable(t, pos)
	if f, ok := g.fit(w.width, tableSizeMin); ok {
		return item{boxes: s.setTable(t, g, f, w, pos), table: true, turned: true}
	}
	return item{boxes: s.divide(t, g, w, pos), table: true, turned: true}
}

// columnCount counts columns by the declaration and by what the rows hold.
func columnCount(t doc.Table) int {
	n := len(t.Columns)
	count := func(cells []doc.Cell) {
		limit := max(len(t.Columns), len(cells))
		sum := 0
		for _, c := range cells {
			sum += min(max(c.Span, 1), limit)
		}
		n = max(n, min(sum, limit))
	}
	for _, cells := range t.Head {
		count(cells)
	}
	for _, r := range t.Rows {
		if !r.Group {
			count(r.Cells)
		}
	}
	return min(n, mostColumns)
}

func (s *setter) measureTable(t doc.Table, pos diag.Pos) *grid {
	n := columnCount(t)
	g := &grid{columns: make([]doc.Column, n)}
	copy(g.columns, t.Columns)
	for _, cells := range t.Head {
		g.head = append(g.head, row{cells: s.cells(cells, g.columns, bold(sans(tableSize)), pos), head: true})
	}
	for i, r := range t.Rows {
		st := sans(tableSize)
		cells := r.Cells
		if r.Group {
			st = italic(st)
			cells = cells[:min(len(cells), 1)]
		}
		m := row{cells: s.cells(cells, g.columns, st, pos), rule: r.Rule && i > 0, group: r.Group}
		if r.Group && len(m.cells) > 0 {
			m.cells[0].span, m.cells[0].align = n, doc.Left
		}
		g.rows = append(g.rows, m)
	}
	g.measure()
	return g
}

func (s *setter) cells(cells []doc.Cell, columns []doc.Column, st style, pos diag.Pos) []cell {
	out := make([]cell, 0, len(cells))
	col := 0
	for _, c := range cells {
		if col >= len(columns) {
			break
		}
		span := min(max(c.Span, 1), len(columns)-col)
		m := cell{col: col, span: span, align: columns[col].Align, atoms: s.atoms(c.Text, st, pos), ownAlign: c.Own}
		if c.Own {
			m.align = c.Align
		}
		m.measure()
		out = append(out, m)
		col += span
	}
	return out
}

func (c *cell) measure() {
	width := 0.0
	c.empty = len(c.atoms) == 0
	for _, a := range c.atoms {
		c.narrow = max(c.narrow, a.width)
		width += a.width
		c.natural = max(c.natural, width)
		width += a.glue
		if a.forced {
			width = 0
		}
	}
	c.left = c.decimalAt()
}

// decimalAt is the width of what stands before the decimal mark of the first number, or
// before the end of a whole number, so that units, brackets and letters after it do not
// move it. A text without a number stands before the mark.
func (c *cell) decimalAt() float64 {
	x, end := 0.0, 0.0
	for _, a := range c.atoms {
		for _, f := range a.frags {
			if f.rise == 0 {
				if i := numberEnd(f.text); i >= 0 {
					return x + f.face.Width(f.text[:i], f.size)
				}
				end = x + f.width
			}
			x += f.width
		}
		x += a.glue
	}
	return end
}

// numberEnd is where the whole part of the first number in s ends, in bytes; -1 if there
// is none. Thousands may be set apart by narrow spaces.
func numberEnd(s string) int {
	start := strings.IndexAny(s, "0123456789")
	if start < 0 {
		return -1
	}
	if start > 0 && s[start-1] == '.' {
		return start - 1
	}
	end := start
	for end < len(s) {
		r, size := utf8.DecodeRuneInString(s[end:])
		next := end + size
		switch {
		case digitAt(s, end):
		case (r == '\u2009' || r == '\u202F') && digitAt(s, next) && digitAt(s, next+1) && digitAt(s, next+2):
		default:
			return end
		}
		end = next
	}
	return end
}

func digitAt(s string, i int) bool { return i < len(s) && '0' <= s[i] && s[i] <= '9' }

func (g *grid) measure() {
	n := len(g.columns)
	g.natural, g.comfort, g.narrow = make([]float64, n), make([]float64, n), make([]float64, n)
	g.left, g.right = make([]float64, n), make([]float64, n)
	whole := make([]float64, n) // of the body
	all := [][]row{g.head, g.rows}
	for _, rows := range all {
		for _, r := range rows {
			for _, c := range r.cells {
				if c.span != 1 || c.empty {
					continue
				}
				i := c.col
				g.narrow[i] = max(g.narrow[i], min(c.narrow, longWordAt))
				if !r.head {
					whole[i] = max(whole[i], c.natural)
				}
				if c.align == doc.Decimal && !r.head && c.natural <= longWordAt {
					g.left[i] = max(g.left[i], c.left)
					g.right[i] = max(g.right[i], c.natural-c.left)
				} else {
					g.natural[i] = max(g.natural[i], c.natural)
				}
			}
		}
	}
	for i, c := range g.columns {
		g.natural[i] = max(g.natural[i], g.left[i]+g.right[i])
		body := g.left[i] + g.right[i]
		g.comfort[i] = max(body, g.narrow[i], min(g.natural[i], 54+g.natural[i]/8, 120))
		if c.Align != doc.Left {
			g.comfort[i] = max(body, g.narrow[i], min(whole[i], 64)) // limits stay on one line
		}
	}
	// What spans columns widens them evenly.
	for _, rows := range all {
		for _, r := range rows {
			for _, c := range r.cells {
				if c.span < 2 || c.empty || r.group {
					continue
				}
				have := columnGap * float64(c.span-1)
				for _, v := range g.comfort[c.col : c.col+c.span] {
					have += v
				}
				if need := max(min(c.narrow, longWordAt), min(c.natural, 120)); need > have {
					for i := c.col; i < c.col+c.span; i++ {
						g.comfort[i] += (need - have) / float64(c.span)
						g.natural[i] = max(g.natural[i], g.comfort[i])
					}
				}
			}
		}
	}
}

// fit finds the largest type of at least a size with which the table is no wider than
// avail and no column is cramped.
func (g *grid) fit(avail, least float64) (form, bool) {
	for size := tableSize; size >= least-1e-9; size -= 0.5 {
		k := size / tableSize
		need := 0.0
		for _, v := range g.comfort {
			need += v * k
		}
		gaps := float64(max(len(g.columns)-1, 0))
		gap := columnGapTight * k
		if size-0.5 < least-1e-9 {
			gap = columnGapMin
		}
		if need+gaps*gap <= avail {
			return g.form(size, avail), true
		}
	}
	return form{}, false
}

// form sets the widths of the columns at a size: natural ones where there is room, else
// each its least and a share of the rest.
func (g *grid) form(size, avail float64) form {
	n := len(g.columns)
	f := form{size: size, widths: make([]float64, n), x: make([]float64, n), width: avail}
	if n == 0 {
		return f
	}
	k := size / tableSize
	gaps := float64(n - 1)
	natural, least := 0.0, 0.0
	for i := range g.columns {
		natural += g.natural[i] * k
		least += g.comfort[i] * k
	}
	gap := columnGap * k
	switch {
	case natural+gaps*gap <= avail:
		for i := range f.widths {
			f.widths[i] = g.natural[i] * k
		}
		// Tables look alike where they are as wide as the text, unless that tears the
		// columns apart.
		const apart, torn = 34, 80
		switch rest := avail - natural; {
		case n == 1:
			if g.columns[0].Align == doc.Left {
				f.widths[0] = avail
			}
		case g.columns[n-1].Align == doc.Left:
			gap = min(rest/gaps, apart)
			f.widths[n-1] += rest - gap*gaps
		case rest/gaps <= torn:
			gap = rest / gaps
		default:
			gap = apart
		}
	default:
		if least+gaps*gap > avail && n > 1 {
			gap = max(min(gap, (avail-least)/gaps), 3)
		}
		// The rest is shared by the root of what is wanted, so that one long text does
		// not starve the others.
		rest := avail - gaps*gap - least
		copyScaled(f.widths, g.comfort, k)
		if rest < 0 {
			shrink := max((avail-gaps*gap)/least, 0.01)
			for i := range f.widths {
				f.widths[i] *= shrink
			}
			break
		}
		for round := 0; round < 8 && rest > 0.01; round++ {
			sum := 0.0
			for i := range f.widths {
				sum += math.Sqrt(max(g.natural[i]*k-f.widths[i], 0))
			}
			if sum == 0 {
				break
			}
			given := 0.0
			for i := range f.widths {
				want := max(g.natural[i]*k-f.widths[i], 0)
				add := min(want, rest*math.Sqrt(want)/sum)
				f.widths[i] += add
				given += add
			}
			rest -= given
		}
		if n > 1 && rest > 0 {
			gap += rest / gaps
		}
	}
	x := 0.0
	for i, w := range f.widths {
		f.x[i] = x
		x += w + gap
	}
	f.width = x - gap
	return f
}

func copyScaled(dst, src []float64, k float64) {
	for i, v := range src {
		dst[i] = v * k
	}
}

// scaled gives atoms at another size.
func scaled(atoms []atom, k float64) []atom {
	if k == 1 {
		return atoms
	}
	out := slices.Clone(atoms)
	for i := range out {
		a := &out[i]
		a.width *= k
		a.glue *= k
		a.frags = slices.Clone(a.frags)
		for j := range a.frags {
			a.frags[j].size *= k
			a.frags[j].rise *= k
			a.frags[j].width *= k
		}
	}
	return out
}

// setTable makes the boxes of a table: caption, head, rows, notes.
func (s *setter) setTable(t doc.Table, g *grid, f form, w where, pos diag.Pos) []box {
	el := s.element(Element{Role: Table, Parent: w.parent})
	boxes := s.caption("Table", t.Number, t.Caption, w, pos, &Element{Role: Caption, Parent: el})
	for i := range boxes {
		boxes[i].keep = true
	}
	space(boxes, floatGap, 4)
	if len(g.columns) > 0 {
		rows := s.tableBody(t, g, f, w, el)
		if len(boxes) == 0 {
			space(rows, floatGap, 0)
		}
		boxes = append(boxes, rows...)
	}
	notes := s.tableNotes(t, w, pos)
	if n := len(boxes); n > 0 && len(notes) > 0 {
		boxes[n-1].keep = true
	}
	boxes = append(boxes, notes...)
	if len(boxes) == 0 {
		return nil
	}
	boxes[len(boxes)-1].below = floatGap
	if total(boxes) < 0.3*s.pageHeight(false) {
		for i := range boxes[:len(boxes)-1] {
			boxes[i].keep = true
		}
	}
	boxes[0].anchors = append(boxes[0].anchors, anchors(t.ID)...)
	return boxes
}

func (s *setter) tableNotes(t doc.Table, w where, pos diag.Pos) []box {
	var boxes []box
	st := sans(tableNoteSize)
	for i, n := range t.Notes {
		note := lineBoxes(ragged(s.atoms(n, st, pos), w.width), st, tableNoteSize*1.3, w, w.x, s.element(Element{Role: Paragraph, Parent: w.parent}))
		if len(note) > 0 {
			note[0].gap = 1
			if i == 0 {
				note[0].gap = 4
			}
		}
		boxes = append(boxes, note...)
	}
	for i := range boxes {
		boxes[i].keep = i < len(boxes)-1
	}
	return boxes
}

func (s *setter) tableBody(t doc.Table, g *grid, f form, w where, el *Element) []box {
	lead := f.size * tableLead
	frame := &band{paint: func(top, bottom float64) []Op {
		return artifact(
			Box{X: w.x, Y: top, Width: f.width, Height: thick, Colour: ink},
			Box{X: w.x, Y: bottom - thick, Width: f.width, Height: thick, Colour: ink},
		)
	}}
	in := w
	in.within = append(append([]*band(nil), w.within...), frame)

	head := box{height: thick + 1.5, keep: true, within: in.within}
	for i, r := range g.head {
		b := g.rowBoxes(r, f, lead, in, el, math.MaxInt)[0]
		for _, o := range b.ops {
			head.ops = append(head.ops, moved(o, 0, head.height))
		}
		head.notes = append(head.notes, b.notes...)
		head.height += b.height
		if i < len(g.head)-1 {
			head.ops = append(head.ops, g.spanRules(r, f, w, head.height)...)
		}
	}
	if len(g.head) > 0 {
		head.height += 1
		head.ops = append(head.ops, artifact(Box{X: w.x, Y: head.height, Width: f.width, Height: thin, Colour: ink})...)
		head.height += thin + 1
	}
	boxes := []box{head}
	if head.height > s.pageHeight(false)/2 {
		boxes = g.tallHead(f, lead, in, el)
	}
	for i, r := range g.rows {
		rows := g.rowBoxes(r, f, lead, in, el, tallRow)
		if r.rule {
			rows[0].above = artifact(Box{X: w.x, Y: 1, Width: f.width, Height: hair, Colour: ink})
			rows[0].ops = shifted(rows[0].ops, 2.5)
			rows[0].height += 2.5
		}
		if r.group {
			if i > 0 {
				rows[0].ops = shifted(rows[0].ops, 3)
				rows[0].height += 3
			}
			rows[len(rows)-1].keep = true
		}
		if i == 0 && len(g.rows) > 1 || i == len(g.rows)-2 {
			rows[len(rows)-1].keep = true
		}
		boxes = append(boxes, rows...)
	}
	boxes[len(boxes)-1].height += thick + 1.5
	boxes[len(boxes)-1].keep = false
	if head.height < s.pageHeight(false)/3 {
		frame.head = s.repeated(t, head, f, w)
	}
	return boxes
}

// tallHead sets a head that may be higher than a page.
func (g *grid) tallHead(f form, lead float64, w where, el *Element) []box {
	boxes := []box{{height: thick + 1.5, within: w.within}}
	for _, r := range g.head {
		boxes = append(boxes, g.rowBoxes(r, f, lead, w, el, tallRow)...)
	}
	return append(boxes, box{height: thin + 1, within: w.within, ops: artifact(Box{X: w.x, Width: f.width, Height: thin, Colour: ink})})
}

// repeated is the head of a table on its further pages.
func (s *setter) repeated(t doc.Table, head box, f form, w where) []box {
	var out []box
	if t.Number != "" {
		st := italic(sans(smallSize))
		out = lineBoxes(ragged(s.plainAtoms("Table\u00A0"+t.Number+", continued", st), w.width), st, smallLead, w, w.x, &Element{Role: Artifact})
		for i := range out {
			out[i].keep = true
		}
		space(out, 0, 3)
	}
	again := head
	again.notes, again.anchors, again.gap, again.again = nil, nil, 0, true
	again.ops = nil
	for _, o := range head.ops {
		switch o := o.(type) {
		case Begin:
			again.ops = append(again.ops, Begin{&Element{Role: Artifact}})
		case Link:
		default:
			again.ops = append(again.ops, o)
		}
	}
	return append(out, again)
}

// spanRules draws a rule under each head that spans columns.
func (g *grid) spanRules(r row, f form, w where, y float64) []Op {
	var ops []Op
	for _, c := range r.cells {
		if c.span > 1 && !c.empty {
			last := c.col + c.span - 1
			left, right := f.x[c.col], f.x[last]+f.widths[last]
			ops = append(ops, artifact(Box{X: w.x + left, Y: y - 0.5, Width: right - left, Height: hair, Colour: ink})...)
		}
	}
	return ops
}

// rowBoxes sets a row: one box, or one for each line where the row is taller than a
// number of lines.
func (g *grid) rowBoxes(r row, f form, lead float64, w where, table *Element, tall int) []box {
	k := f.size / tableSize
	el := &Element{Role: TableRow, Parent: table}
	type laid struct {
		lines []line
		cell  cell
		width float64
	}
	cells := make([]laid, 0, len(r.cells))
	most := 1
	for _, c := range r.cells {
		last := c.col + c.span - 1
		width := f.x[last] + f.widths[last] - f.x[c.col]
		atoms := scaled(c.atoms, k)
		var lines []line
		if c.natural*k <= width+0.01 && !slices.ContainsFunc(atoms, func(a atom) bool { return a.forced }) {
			if len(atoms) > 0 {
				lines = []line{{atoms: atoms, width: c.natural * k}}
			}
		} else {
			lines = ragged(atoms, max(width, 2))
		}
		most = max(most, len(lines))
		cells = append(cells, laid{lines, c, width})
	}
	n := 1
	if most > tall {
		n = most
	}
	boxes := make([]box, n)
	st := sans(f.size)
	for i := range boxes {
		boxes[i] = box{height: lead, within: w.within, keep: n > 1 && (i == 0 || i == n-2)}
	}
	if n == 1 {
		boxes[0].height = lead * float64(most)
	}
	boxes[0].height += rowPad
	boxes[n-1].height += rowPad
	base := baseline(st, lead)
	for _, c := range cells {
		role := Cell
		if r.head || g.columns[c.cell.col].Key {
			role = HeadCell
		}
		ce := &Element{Role: role, Row: role == HeadCell && !r.head, Parent: el}
		if c.cell.span > 1 {
			ce.Span = c.cell.span
		}
		down := 0
		if r.head && n == 1 {
			down = most - len(c.lines) // heads stand on the rule below them
		}
		inked := false
		for i, l := range c.lines {
			b, y := &boxes[0], rowPad+base+float64(i+down)*lead
			if n > 1 {
				b, y = &boxes[i], base
				if i == 0 {
					y += rowPad
				}
			}
			x := w.x + f.x[c.cell.col] + g.offset(c.cell, l, len(c.lines), c.width, r, k)
			ops := enclose(ce, l.draw(x, y))
			inked = inked || len(ops) > 0
			b.ops = append(b.ops, ops...)
			b.notes = append(b.notes, l.notes()...)
		}
		if !inked {
			boxes[0].ops = append(boxes[0].ops, Begin{ce}, End{})
		}
	}
	// Every row has as many cells as the table has columns.
	have := 0
	if n := len(r.cells); n > 0 {
		have = r.cells[n-1].col + r.cells[n-1].span
	}
	if lack := len(g.columns) - have; lack > 0 {
		boxes[0].ops = append(boxes[0].ops, Begin{&Element{Role: Cell, Span: lack, Parent: el}}, End{})
	}
	return boxes
}

// offset is where a line of a cell starts, from the left edge of its column.
func (g *grid) offset(c cell, l line, lines int, width float64, r row, k float64) float64 {
	align := c.align
	if r.head && !c.ownAlign && (c.span > 1 || align == doc.Decimal) {
		align = doc.Center
	}
	switch align {
	case doc.Center:
		return max((width-l.width)/2, 0)
	case doc.Right:
		return max(width-l.width, 0)
	case doc.Decimal:
		spare := width - (g.left[c.col]+g.right[c.col])*k
		if !r.head && c.span == 1 && lines == 1 && spare >= -0.01 && c.natural <= longWordAt {
			return spare/2 + (g.left[c.col]-c.left)*k
		}
		return max(width-l.width, 0)
	}
	return 0
}

// divide sets a table too wide for any page in parts of some columns each, with the
// columns that name the rows in every part.
func (s *setter) divide(t doc.Table, g *grid, w where, pos diag.Pos) []box {
	k := tableSizeMin / tableSize
	var keys []int
	used := 0.0
	for i, c := range g.columns {
		wide := g.comfort[i]*k + columnGapMin
		if (c.Key || i == 0) && len(keys) == i && used+wide < w.width/2 {
			keys = append(keys, i)
			used += wide
		}
	}
	var boxes []box
	first := true
	for i := len(keys); i < len(g.columns); {
		cols := slices.Clone(keys)
		width := used
		for ; i < len(g.columns); i++ {
			wide := g.comfort[i]*k + columnGapMin
			if width+wide > w.width && len(cols) > len(keys) {
				break
			}
			cols = append(cols, i)
			width += wide
		}
		part := takeColumns(t, g, cols)
		if !first {
			part.ID = ""
			part.Caption = []doc.Inline{doc.Text{Text: "Continued: further columns."}}
		}
		if i < len(g.columns) {
			part.Notes = nil
		}
		pg := s.measureTable(part, pos)
		f, ok := pg.fit(w.width, tableSizeMin)
		if !ok {
			f = pg.form(tableSizeMin, w.width)
		}
		boxes = append(boxes, s.setTable(part, pg, f, w, pos)...)
		first = false
	}
	if first {
		return s.setTable(t, g, g.form(tableSizeMin, w.width), w, pos)
	}
	return boxes
}

// takeColumns gives the table of some of its columns, in order.
func takeColumns(t doc.Table, g *grid, cols []int) doc.Table {
	take := func(cells []doc.Cell, group bool) []doc.Cell {
		if group {
			return cells[:min(len(cells), 1)]
		}
		var out []doc.Cell
		col := 0
		for _, c := range cells {
			if col >= len(g.columns) {
				break
			}
			span := min(max(c.Span, 1), len(g.columns)-col)
			from, _ := slices.BinarySearch(cols, col)
			to, _ := slices.BinarySearch(cols, col+span)
			if to > from {
				c.Span = to - from
				out = append(out, c)
			}
			col += span
		}
		return out
	}
	part := t
	part.Columns, part.Head, part.Rows = nil, nil, nil
	for _, i := range cols {
		part.Columns = append(part.Columns, g.columns[i])
	}
	for _, cells := range t.Head {
		part.Head = append(part.Head, take(cells, false))
	}
	for _, r := range t.Rows {
		r.Cells = take(r.Cells, r.Group)
		part.Rows = append(part.Rows, r)
	}
	return part
}

// shifted moves operations down.
func shifted(ops []Op, dy float64) []Op {
	for i, o := range ops {
		ops[i] = moved(o, 0, dy)
	}
	return ops
}

func moved(o Op, dx, dy float64) Op {
	switch o := o.(type) {
	case Text:
		o.X, o.Y = o.X+dx, o.Y+dy
		return o
	case Box:
		o.X, o.Y = o.X+dx, o.Y+dy
		return o
	case Picture:
		o.X, o.Y = o.X+dx, o.Y+dy
		return o
	case Link:
		o.X, o.Y = o.X+dx, o.Y+dy
		return o
	}
	return o
}
