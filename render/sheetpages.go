package render

import (
	"fmt"
	"slices"
	"strings"
	"unicode"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/protocol/layout"
	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/figure"
	"penwright/render/page"
)

// Sizes of a recording sheet, in points. Boxes are for a pencil in a cold hand.
const (
	sheetSide   = 40.0
	sheetTop    = 34.0
	sheetBottom = 44.0

	sheetRow     = 31.0 // 11 mm
	sheetBox     = 60.0 // least width of a box: 21 mm
	sheetBoxWide = 96.0
	sheetRemark  = 110.0
	sheetMap     = 120.0 // greatest height of the map

	leastRows = 4 // a larger unit with fewer rows than this shares its sheet with others
)

var (
	sheetInk  = doc.Colour{A: 255, Role: doc.Ink}
	sheetGrey = doc.Colour{R: 0x55, G: 0x5B, B: 0x61, A: 255}
	sheetRule = doc.Colour{R: 0x70, G: 0x74, B: 0x78, A: 255}
	sheetFill = doc.Colour{R: 0xEE, G: 0xEF, B: 0xF0, A: 255}
)

// batch is what one sheet is for: the units of a block, a room, a period.
type batch struct {
	form  *dataset.Form
	index int // of the form
	title string
	times []string
	units []int    // instances of the form's unit, as they are visited
	above []int32  // for each of units, the one it lies within; nil: none
	hides []string // units that the title names, so that the rows need not
}

// batches parts the rows of a form into sheets.
func (r *recorder) batches(index int) []batch {
	f := &r.forms[index]
	plan := r.trial.Plan
	order := r.order(f.Unit)
	top := r.top(f.Unit)
	var out []batch
	if top >= 0 && plan.Units[f.Unit].N >= leastRows*plan.Units[top].N {
		up := plan.Coarse(f.Unit, top)
		at := map[int32]int{}
		for _, i := range order {
			k, ok := at[up[i]]
			if !ok {
				k = len(out)
				at[up[i]] = k
				b := batch{form: f, index: index}
				var parts []string
				for v := range plan.Units {
					if to := plan.Coarse(top, v); to != nil && plan.Units[v].Own != nil {
						b.hides = append(b.hides, plan.Units[v].Name)
						parts = append(parts, prose.UnitName(&plan.Units[v])+" "+plan.Units[v].Own[to[up[i]]])
					}
				}
				b.title = capital(strings.Join(parts, ", "))
				out = append(out, b)
			}
			out[k].units = append(out[k].units, i)
		}
		// Periods of several squares run side by side: the first of all stand first.
		if within := plan.Units[top].Within; within >= 0 && prose.InTime(&plan.Units[top]) {
			place, seen := make([]int, plan.Units[top].N), map[int32]int{}
			for i, parent := range plan.Coarse(top, within) {
				place[i] = seen[parent]
				seen[parent]++
			}
			slices.SortStableFunc(out, func(a, b batch) int { return place[up[a.units[0]]] - place[up[b.units[0]]] })
		}
	} else {
		out = append(out, batch{form: f, index: index, units: order, title: "All " + prose.Plural(prose.UnitName(&plan.Units[f.Unit]))})
	}
	// Rows of one larger unit are set off from those of the next.
	if in := plan.Units[f.Unit].Within; in >= 0 {
		up := plan.Coarse(f.Unit, in)
		for k := range out {
			for _, i := range out[k].units {
				out[k].above = append(out[k].above, up[i])
			}
		}
	}
	// Every time has sheets of its own, so that those of a day are together.
	var all []batch
	names := r.timeNames(f)
	for _, t := range r.times(f) {
		for _, b := range out {
			b.times = t
			for k, word := range t {
				label := strings.ReplaceAll(names[k], "_", " ")
				if rep := r.trial.Protocol.RepeatedNamed(names[k]); rep != nil && rep.Label != "" {
					label = rep.Label
				}
				b.title += ", " + label + " " + word
			}
			all = append(all, b)
		}
	}
	return all
}

// top is the unit that has a sheet of its own: a period or the like that the rows are
// crossed with, else the largest block or room that holds them; -1: none.
func (r *recorder) top(unit int) int {
	plan := r.trial.Plan
	best := -1
	for v := range plan.Units {
		if v == unit || plan.Coarse(unit, v) == nil || plan.Units[v].N < 2 || plan.Units[v].Own == nil {
			continue
		}
		if prose.InTime(&plan.Units[v]) {
			return v
		}
		if crossed(plan, unit, v) {
			continue // rows or columns of a field are walked across
		}
		if best < 0 || plan.Units[v].N < plan.Units[best].N {
			best = v
		}
	}
	return best
}

// crossed tells whether v is one of the units that unit, or a unit above it, crosses.
func crossed(plan *layout.Plan, unit, v int) bool {
	for w := range plan.Units {
		if plan.Coarse(unit, w) != nil && slices.Contains(plan.Units[w].Crosses, v) {
			return true
		}
	}
	return false
}

// sheetColumn is a column of a sheet.
type sheetColumn struct {
	head  string
	unit  string // of the numbers, below the head
	width float64
	box   bool                 // to write into
	text  func(row int) string // nil for a box
	bold  bool
	size  float64
	lines int // that the text may take
}

// draft draws the pages of one sheet.
type draft struct {
	r     *recorder
	batch *batch
	book  *page.Book

	columns       []sheetColumn
	part, parts   int
	width, height float64
	x             []float64 // left edges, and the right one
	pg            *page.Page
	y             float64
	table         *page.Element
}

// book draws all sheets.
func (r *recorder) book() *page.Book {
	book := &page.Book{Anchors: map[string]page.Place{}}
	for i := range r.forms {
		for _, b := range r.batches(i) {
			fixed, boxes := r.columnsOf(&b)
			width, height := 595.28, 841.89
			if r.trial.Protocol.Report.Paper == "Letter" {
				width, height = 612, 792
			}
			used := 0.0
			for _, c := range fixed {
				used += c.width
			}
			fits := func(w float64) int { return int((w - 2*sheetSide - used - sheetRemark) / sheetBox) }
			if fits(width) < len(boxes) {
				width, height = height, width
			}
			each := max(fits(width), 1)
			parts := (len(boxes) + each - 1) / each
			for p := range parts {
				d := &draft{r: r, batch: &b, book: book, part: p, parts: parts, width: width, height: height}
				d.lay(fixed, boxes[p*len(boxes)/parts:(p+1)*len(boxes)/parts])
				d.draw()
			}
		}
	}
	for i := range book.Pages {
		r.foot(&book.Pages[i], i, len(book.Pages))
	}
	return book
}

// columnsOf lists the columns that name a row and those to write into.
func (r *recorder) columnsOf(b *batch) (fixed, boxes []sheetColumn) {
	f, plan, t := b.form, r.trial.Plan, r.trial
	fixed = append(fixed, sheetColumn{head: "", width: 24, size: 9, text: func(row int) string { return fmt.Sprint(row + 1) }})
	for v := range plan.Units {
		to := plan.Coarse(f.Unit, v)
		if to == nil || plan.Units[v].Own == nil || slices.Contains(b.hides, plan.Units[v].Name) {
			continue
		}
		fixed = append(fixed, sheetColumn{head: capital(prose.UnitName(&plan.Units[v])), bold: true, size: 13,
			text: func(row int) string { return plan.Units[v].Own[to[b.units[row]]] }})
	}
	if numbers := r.numbers[b.index]; numbers != nil {
		fixed = append(fixed, sheetColumn{head: "Animal no.", size: 8, lines: 3, text: func(row int) string { return strings.Join(numbers[b.units[row]], ", ") }})
	} else if n := plan.Units[f.Unit].Animals; n != nil {
		fixed = append(fixed, sheetColumn{head: "Animals", size: 10, text: func(row int) string { return num.Count(n[b.units[row]]) }})
	}
	if t.Allotment != nil && r.code(f.Unit, 0) != "" {
		fixed = append(fixed, sheetColumn{head: "Code", bold: true, size: 11, text: func(row int) string { return r.code(f.Unit, b.units[row]) }})
	}
	for _, k := range r.treated(f.Unit) {
		levels := t.Allotment.LevelAt(k, f.Unit)
		of := &plan.Factors[k]
		fixed = append(fixed, sheetColumn{head: prose.FactorLabel(of), size: 10, lines: 2, text: func(row int) string {
			if l := levels[b.units[row]]; l >= 0 {
				return prose.LevelText(plan, of.Name, of.Levels[l])
			}
			return ""
		}})
	}
	for i := range fixed {
		c := &fixed[i]
		if c.width > 0 {
			continue
		}
		c.width = max(40, 14+measure(c.head, 8, true))
		most := 110.0
		if c.lines > 1 {
			most = 84
		}
		for row := range b.units {
			c.width = max(c.width, min(most, 14+measure(c.text(row), c.size, c.bold)))
		}
	}
	if f.Over != "" {
		boxes = append(boxes, sheetColumn{head: capital(strings.ReplaceAll(f.Over, "_", " ")), box: true})
	}
	for _, e := range f.Entries {
		c := sheetColumn{head: e.Label, box: true}
		if c.head == "" || c.head == e.Name {
			c.head = capital(strings.ReplaceAll(e.Name, "_", " "))
		}
		if e.Unit != "" && e.Unit != "1" {
			c.unit = num.UnitText(e.Unit)
		}
		boxes = append(boxes, c)
	}
	return fixed, boxes
}

// lay gives the boxes and the remarks the room that the names leave.
func (d *draft) lay(fixed, boxes []sheetColumn) {
	d.columns = append(slices.Clone(fixed), boxes...)
	used := 0.0
	for _, c := range fixed {
		used += c.width
	}
	room := d.width - 2*sheetSide - used
	each := min(sheetBoxWide, (room-sheetRemark)/float64(len(boxes)))
	for i := len(fixed); i < len(d.columns); i++ {
		d.columns[i].width = each
	}
	d.columns = append(d.columns, sheetColumn{head: "Remarks", box: true, width: room - each*float64(len(boxes))})
	x := sheetSide
	d.x = []float64{x}
	for _, c := range d.columns {
		x += c.width
		d.x = append(d.x, x)
	}
}

// draw makes the pages: head, map, rows, and a place for what happened.
func (d *draft) draw() {
	d.open(true)
	m := d.r.mapOf(d.batch.form.Unit, d.batch.units, figure.Size{Width: d.width - 2*sheetSide, Height: sheetMap})
	if pic, alt := m.Draw(); pic != nil && pic.Height <= sheetMap+40 {
		d.add(&page.Element{Role: page.Figure, Alt: alt}, page.Picture{X: sheetSide, Y: d.y, Scale: 1, Picture: pic})
		d.y += pic.Height + 12
	}
	d.head()
	for row := range d.batch.units {
		height := d.rowHeight(row)
		if d.y+height > d.height-sheetBottom {
			d.open(false)
			d.head()
		}
		d.row(row, height)
	}
	d.happened()
}

func (d *draft) add(el *page.Element, ops ...page.Op) {
	d.pg.Ops = append(append(append(d.pg.Ops, page.Begin{Element: el}), ops...), page.End{})
}

func (d *draft) rule(x, y, w, h float64, c doc.Colour) {
	d.add(&page.Element{Role: page.Artifact}, page.Box{X: x, Y: y, Width: w, Height: h, Colour: c})
}

// open begins a page with what it is for and the lines for date and initials.
func (d *draft) open(first bool) {
	p := d.r.trial.Protocol
	d.book.Pages = append(d.book.Pages, page.Page{Width: d.width, Height: d.height})
	d.pg = &d.book.Pages[len(d.book.Pages)-1]
	d.y = sheetTop
	right := d.width - sheetSide
	mark := ""
	switch {
	case d.r.trial.Allotment == nil:
		mark = "not drawn yet"
	case d.r.masked:
		mark = "treatments masked"
	}
	d.y += 9
	code := p.Trial.Code
	d.add(&page.Element{Role: page.Paragraph}, set(sheetSide, d.y, code, 10, true, sheetInk)...)
	left := sheetSide + measure(code, 10, true) + 10
	markWide := measure(mark, 9, false)
	d.add(&page.Element{Role: page.Paragraph}, set(left, d.y, cut(p.Trial.Title, 9, false, right-left-markWide-16), 9, false, sheetGrey)...)
	if mark != "" {
		d.add(&page.Element{Role: page.Paragraph}, set(right-markWide, d.y, mark, 9, false, sheetGrey)...)
	}
	d.y += 26
	title := d.batch.title
	if d.parts > 1 {
		title += fmt.Sprintf(" (part %d of %d)", d.part+1, d.parts)
	}
	if !first {
		title += ", continued"
	} else {
		d.book.Outline = append(d.book.Outline, page.Entry{Level: 1, Title: title, Place: page.Place{Page: len(d.book.Pages) - 1, X: sheetSide, Y: d.y - 20}})
	}
	d.add(&page.Element{Role: page.Heading, Level: 1}, set(sheetSide, d.y, cut(title, 19, true, right-sheetSide), 19, true, sheetInk)...)
	d.y += 30
	// Lines to write on.
	x := sheetSide
	labels := []string{"Date", "Time", "Recorded (initials)", "Checked (initials)"}
	total := 0.0
	for _, l := range labels {
		total += measure(l, 9, false) + 5
	}
	line := (right - sheetSide - total - 14*float64(len(labels)-1)) / float64(len(labels))
	for _, l := range labels {
		d.add(&page.Element{Role: page.Paragraph}, set(x, d.y, l, 9, false, sheetInk)...)
		x += measure(l, 9, false) + 5
		d.rule(x, d.y+1.5, line, 0.6, sheetInk)
		x += line + 14
	}
	d.y += 14
}

// head draws the heads of the columns.
func (d *draft) head() {
	const lead, size = 9.5, 8.0
	lines, units := 1, false
	heads := make([][]string, len(d.columns))
	for i, c := range d.columns {
		heads[i] = wrap(c.head, size, true, c.width-6, 3)
		lines = max(lines, len(heads[i]))
		units = units || c.unit != ""
	}
	height := float64(lines)*lead + 7
	if units {
		height += lead
	}
	d.rule(d.x[0], d.y, d.x[len(d.x)-1]-d.x[0], height, sheetFill)
	d.rule(d.x[0], d.y, d.x[len(d.x)-1]-d.x[0], 1.0, sheetInk)
	again := d.table != nil // on a further page the heads are said no more
	if !again {
		d.table = &page.Element{Role: page.Table}
	}
	row := &page.Element{Role: page.TableRow, Parent: d.table}
	for i, c := range d.columns {
		y := d.y + lead + 1
		var ops []page.Op
		for _, l := range heads[i] {
			ops = append(ops, set(d.x[i]+3, y, l+" ", size, true, sheetInk)...)
			y += lead
		}
		if c.unit != "" {
			ops = append(ops, set(d.x[i]+3, y, cut(c.unit, size, false, c.width-6), size, false, sheetGrey)...)
		}
		cell := &page.Element{Role: page.HeadCell, Parent: row}
		if again {
			cell = &page.Element{Role: page.Artifact}
		}
		d.add(cell, ops...)
	}
	d.y += height
	d.rule(d.x[0], d.y-0.8, d.x[len(d.x)-1]-d.x[0], 0.8, sheetInk)
}

func (d *draft) rowHeight(row int) float64 {
	height := sheetRow
	for _, c := range d.columns {
		if c.text != nil && c.lines > 1 {
			n := len(wrap(c.text(row), c.size, c.bold, c.width-6, c.lines))
			height = max(height, float64(n)*c.size*1.2+10)
		}
	}
	return height
}

// row draws one row of boxes.
func (d *draft) row(row int, height float64) {
	el := &page.Element{Role: page.TableRow, Parent: d.table}
	if a := d.batch.above; a != nil && row > 0 && a[row] != a[row-1] {
		d.rule(d.x[0], d.y-1.1, d.x[len(d.x)-1]-d.x[0], 1.6, sheetInk)
	}
	for i, c := range d.columns {
		if c.text == nil {
			d.add(&page.Element{Role: page.Cell, Parent: el}) // to be written into
			continue
		}
		lines := wrap(c.text(row), c.size, c.bold, c.width-6, max(c.lines, 1))
		y := d.y + (height-float64(len(lines))*c.size*1.2)/2 + c.size*0.95
		var ops []page.Op
		colour := sheetInk
		if i == 0 {
			colour = sheetGrey
		}
		for _, l := range lines {
			ops = append(ops, set(d.x[i]+4, y, l+" ", c.size, c.bold, colour)...)
			y += c.size * 1.2
		}
		d.add(&page.Element{Role: page.Cell, Parent: el}, ops...)
	}
	d.rule(d.x[0], d.y+height-0.6, d.x[len(d.x)-1]-d.x[0], 0.6, sheetRule)
	for i := range d.x {
		w := 0.6
		if i < len(d.columns) && i > 0 && d.columns[i].box && !d.columns[i-1].box {
			w = 1.2 // what is to be written begins here
		}
		if i < len(d.columns) && i > 0 && !d.columns[i].box {
			continue // names stand without rules between them
		}
		d.rule(d.x[i]-w/2, d.y, w, height, sheetRule)
	}
	d.y += height
}

// happened leaves room for what happened to animals or plots, and says whom to tell.
func (d *draft) happened() {
	p := d.r.trial.Protocol
	what := "Lost, damaged or wrongly treated plots: day, plot, what was seen and done."
	if p.Animals != nil {
		what = "Dead, ill, moved or wrongly fed animals: day, unit, what was seen and done."
		for _, x := range p.Persons {
			if strings.Contains(strings.ToLower(x.Role), "veterinarian") {
				what += " Tell the veterinarian at once (" + x.Name + "); treatment never waits for the trial."
				break
			}
		}
	}
	right := d.width - sheetSide
	const line = 24.0
	lines := wrap(what, 9, false, right-sheetSide-12, 2)
	height := 8 + 12*float64(len(lines)) + 3*line
	if d.y+10+height > d.height-sheetBottom {
		if d.y+10+height-2*line > d.height-sheetBottom {
			d.open(false)
		} else {
			height -= 2 * line
		}
	}
	d.y += 10
	y := d.y + 13
	var ops []page.Op
	for _, l := range lines {
		ops = append(ops, set(sheetSide+6, y, l, 9, false, sheetInk)...)
		y += 12
	}
	d.add(&page.Element{Role: page.Paragraph}, ops...)
	for at := y - 12 + line; at < d.y+height-4; at += line {
		d.rule(sheetSide+6, at, right-sheetSide-12, 0.4, sheetRule)
	}
	for _, b := range [][4]float64{{sheetSide, d.y, right - sheetSide, 0.6}, {sheetSide, d.y + height, right - sheetSide, 0.6},
		{sheetSide, d.y, 0.6, height}, {right - 0.6, d.y, 0.6, height}} {
		d.rule(b[0], b[1], b[2], b[3], sheetRule)
	}
	d.y += height
}

// foot numbers a page and says which allotment it goes by.
func (r *recorder) foot(pg *page.Page, i, n int) {
	y := pg.Height - 24
	left := "Units in the order of the plan"
	if a := r.trial.Allotment; a != nil {
		left = "Units in the order of the allotment"
		if k := len(a.Draws); k > 0 {
			left += fmt.Sprintf(", draw %d (%.12s)", a.Draws[k-1].Number, a.Draws[k-1].Allotment)
		}
	}
	right := fmt.Sprintf("%s, page %d of %d", r.trial.Protocol.Trial.Code, i+1, n)
	ops := set(sheetSide, y, left, 8, false, sheetGrey)
	ops = append(ops, set(pg.Width-sheetSide-measure(right, 8, false), y, right, 8, false, sheetGrey)...)
	pg.Ops = append(append(append(pg.Ops, page.Begin{Element: &page.Element{Role: page.Artifact}}), ops...), page.End{})
}

// set is a line of text with its base line starting at x, y.
func set(x, y float64, text string, size float64, bold bool, colour doc.Colour) []page.Op {
	text, _ = face.Clean(text)
	var ops []page.Op
	for _, run := range face.Get(face.Sans, bold, false).Runs(text) {
		ops = append(ops, page.Text{X: x, Y: y, Face: run.Face, Size: size, Colour: colour, Text: run.Text})
		x += run.Face.Width(run.Text, size)
	}
	return ops
}

func measure(text string, size float64, bold bool) float64 {
	text, _ = face.Clean(text)
	return face.Get(face.Sans, bold, false).Width(text, size)
}

// cut shortens a text to a width.
func cut(text string, size float64, bold bool, width float64) string {
	if measure(text, size, bold) <= width {
		return text
	}
	r := []rune(text)
	if len(r) > 400 {
		r = r[:400]
	}
	for len(r) > 0 && measure(string(r)+"…", size, bold) > width {
		r = r[:len(r)-1]
	}
	return strings.TrimRight(string(r), " ") + "…"
}

// wrap breaks a text into at most so many lines of a width; what is left over is cut.
func wrap(text string, size float64, bold bool, width float64, most int) []string {
	var lines []string
	line := ""
	words := strings.Fields(text)
	for k, w := range words {
		next := w
		if line != "" {
			next = line + " " + w
		}
		if line == "" || measure(next, size, bold) <= width {
			line = next
			continue
		}
		if len(lines) == most-1 {
			return append(lines, cut(strings.Join(append([]string{line}, words[k:]...), " "), size, bold, width))
		}
		lines = append(lines, cut(line, size, bold, width))
		line = w
	}
	if line != "" {
		lines = append(lines, cut(line, size, bold, width))
	}
	return lines
}

// capital raises the first letter, as at the head of a column.
func capital(s string) string {
	r := []rune(s)
	if len(r) == 0 {
		return s
	}
	return string(unicode.ToUpper(r[0])) + string(r[1:])
}
