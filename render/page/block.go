package page

import (
	"fmt"
	"math"
	"strings"

	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/face"
)

// deepest is how far nodes are followed into nodes; nothing written by hand gets near.
const deepest = 100

// box is a piece of a page that is never broken: a line, a row, a picture. The
// operations are relative to the left edge of the column and the top of the box.
type box struct {
	gap, height float64 // gap: space above
	below       float64 // space below; of two spaces that meet the larger counts
	keep        bool    // stands on the same page as the box after it
	ops         []Op
	above       []Op  // a rule, but not where the box begins a page or stands under a repeated head
	again       bool  // a head that is repeated
	notes       []int // footnotes called in it
	anchors     []anchor
	within      []*band
	pageOf      *pageOf
}

type anchor struct {
	id string
	y  float64
}

// pageOf is set when the number of a page is known.
type pageOf struct {
	anchor   string
	right, y float64
	style    style
	element  *Element
}

// band is what encloses boxes: a table with its head, the ground of an aside.
type band struct {
	head []box // repeated at the top of every further page
	// paint draws for the stretch of the band that stands on one page, beneath its boxes.
	paint func(top, bottom float64) []Op
}

// item is a block of the top level on its way to the pages.
type item struct {
	boxes   []box
	heading int  // level of the heading in it, 0: none
	bare    bool // nothing but a heading
	// figure makes the boxes of a figure no higher than a limit; it may float to the top
	// of the next page.
	figure func(highest float64) []box
	head   []box // the headings above, where there are any
	below  *item // what stands below them
	// squeeze makes the boxes closer together, to end no lower than a limit if it can.
	squeeze func(room float64) []box
	turned  bool // stands on a turned page
	table   bool
}

// text tells whether it is running text, which other things may change places with.
func (it item) text() bool {
	return it.heading == 0 && it.figure == nil && it.squeeze == nil && !it.table && !it.turned && len(it.boxes) > 0
}

// where says where blocks are set.
type where struct {
	x, width   float64
	size, lead float64
	parent     *Element
	within     []*band
	pos        diag.Pos // of the nearest node that has one
	depth      int
	bullets    int
	note       bool // inside a footnote
}

type lack struct {
	r   rune
	pos diag.Pos
}

// title of a heading as the contents and the outline need it.
type entry struct {
	level         int
	anchor        string
	number, title string
	text          []doc.Inline
}

type setter struct {
	doc           *doc.Document
	width, height float64 // of the paper
	measure       float64
	diags         diag.List
	lacking       map[lack]bool
	entries       []entry
	headings      int // met so far
	notes         [][]box
	noteElements  []*Element         // by number of the footnote, from 0
	calls         map[int][]*Element // the links that call a footnote, by its number
	root          *Element
	made          int // elements so far
}

func newSetter(d *doc.Document) *setter {
	s := &setter{doc: d, lacking: map[lack]bool{}, calls: map[int][]*Element{}, root: &Element{Role: Section}}
	s.width, s.height = paper(d.Paper)
	s.measure = s.width - 2*marginSide
	s.collect(d.Blocks, 0)
	return s
}

// collect lists the headings in the order in which they are going to be set.
func (s *setter) collect(blocks []doc.Block, depth int) {
	if depth > deepest {
		return
	}
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Heading:
			id := b.ID
			if id == "" {
				id = fmt.Sprintf("h:%d", len(s.entries)+1)
			}
			clean, _ := face.Clean(strings.Join(strings.Fields(plain(b.Text, 0)), " "))
			number, _ := face.Clean(b.Number)
			s.entries = append(s.entries, entry{level: min(max(b.Level, 1), 6), anchor: id, number: number, title: clean, text: b.Text})
		case doc.List:
			for _, item := range b.Items {
				s.collect(item, depth+1)
			}
		case doc.Quote:
			s.collect(b.Blocks, depth+1)
		case doc.Aside:
			s.collect(b.Blocks, depth+1)
		}
	}
}

// plain is the text of inlines without its marks.
func plain(text []doc.Inline, depth int) string {
	if depth > deepest {
		return ""
	}
	var b strings.Builder
	for _, n := range text {
		switch n := n.(type) {
		case doc.Text:
			b.WriteString(n.Text)
		case doc.CodeSpan:
			b.WriteString(n.Text)
		case doc.Ref:
			b.WriteString(n.Text)
		case doc.Emph:
			b.WriteString(plain(n.Text, depth+1))
		case doc.Strong:
			b.WriteString(plain(n.Text, depth+1))
		case doc.Sup:
			b.WriteString(plain(n.Text, depth+1))
		case doc.Sub:
			b.WriteString(plain(n.Text, depth+1))
		case doc.Link:
			b.WriteString(plain(n.Text, depth+1))
		case doc.Break:
			b.WriteByte(' ')
		}
	}
	return b.String()
}

// lineBoxes makes a box of each line. A paragraph leaves neither its first nor its last
// line alone on a page.
func lineBoxes(lines []line, st style, lead float64, w where, x float64, el *Element) []box {
	boxes := make([]box, len(lines))
	base := baseline(st, lead)
	for i, l := range lines {
		boxes[i] = box{
			height: lead,
			keep:   len(lines) > 1 && (i == 0 || i == len(lines)-2),
			ops:    enclose(el, l.draw(x, base)),
			notes:  l.notes(),
			within: w.within,
		}
	}
	return boxes
}

// baseline is the distance of the base line from the top of a line of a leading.
func baseline(st style, lead float64) float64 {
	f := face.Get(st.family, st.bold, st.italic)
	return (lead+f.Ascent(st.size)-f.Descent(st.size))/2 - 0.02*st.size
}

// element makes an element that comes after those made before.
func (s *setter) element(e Element) *Element {
	s.made++
	e.Order = s.made
	return &e
}

// enclose puts ops between the marks of their element, but for what already stands
// between marks of its own, as the text of links, which becomes a part of it. The
// rectangles of links stand outside, since they are no ink.
func enclose(el *Element, ops []Op) []Op {
	if len(ops) == 0 {
		return nil
	}
	out := make([]Op, 0, len(ops)+2)
	open, own := false, false
	for _, o := range ops {
		switch o := o.(type) {
		case Link:
			continue
		case Begin:
			if open {
				out = append(out, End{})
			}
			open, own = false, true
			if o.Element.Parent == nil {
				o.Element.Parent = el
			}
		case End:
			own = false
		default:
			if !open && !own {
				out = append(out, Begin{el})
				open = true
			}
		}
		out = append(out, o)
	}
	if open {
		out = append(out, End{})
	}
	for _, o := range ops {
		if _, ok := o.(Link); ok {
			out = append(out, o)
		}
	}
	return out
}

func (s *setter) top() where {
	return where{width: s.measure, size: textSize, lead: textLead, parent: s.root}
}

// title sets the head of the first page: what the trial is called in short and how it
// stands, then the title, then the people. Read aloud, the title comes first.
func (s *setter) title() []item {
	d := s.doc
	w := s.top()
	title, author := s.element(Element{Role: Title, Parent: s.root}), s.element(Element{Role: Paragraph, Parent: s.root})
	code, state := s.element(Element{Role: Paragraph, Parent: s.root}), s.element(Element{Role: Paragraph, Parent: s.root})
	var boxes []box
	add := func(el *Element, text string, st style, lead, gap float64) {
		if text == "" {
			return
		}
		lines := lineBoxes(ragged(s.plainAtoms(text, st), w.width), st, lead, w, 0, el)
		space(lines, gap, 0)
		boxes = append(boxes, lines...)
	}
	small := in(grey, sans(8.5))
	var parts []string
	for _, t := range []string{d.Status, d.Date} {
		if t != "" {
			parts = append(parts, strings.ReplaceAll(t, " ", "\u00A0"))
		}
	}
	left, right := strings.ReplaceAll(d.Code, " ", "\u00A0"), strings.Join(parts, "\u2002·\u2002")
	wide := textWidth(right, small)
	add(code, left, bold(small), 12, 0)
	if len(boxes) == 1 && textWidth(left, bold(small))+wide+24 <= w.width {
		l := line{atoms: s.plainAtoms(right, small)}
		boxes[0].ops = append(boxes[0].ops, enclose(state, l.draw(w.width-wide, baseline(small, 12)))...)
	} else {
		add(state, right, small, 12, 0)
	}
	if len(boxes) > 0 && d.Title != "" {
		boxes = append(boxes, box{gap: 3, height: hair, ops: artifact(Box{Width: w.width, Height: hair, Colour: faint})})
	}
	size := titleSize
	for size > titleSize-4 && textWidth(d.Title, bold(sans(size))) > w.width {
		size -= 0.5
	}
	if textWidth(d.Title, bold(sans(size))) > w.width {
		size = titleSize // it takes more lines anyway
	}
	add(title, d.Title, bold(sans(size)), size*titleLead, 20)
	add(author, d.Author, serif(textSize+1.5), 15.5, 6)
	if len(boxes) == 0 {
		return nil
	}
	boxes = append(boxes, box{gap: 10, height: 8, ops: artifact(Box{Width: w.width, Height: thick, Colour: ink})})
	for i := range boxes[:len(boxes)-1] {
		boxes[i].keep = true
	}
	return []item{{boxes: boxes}}
}

func artifact(ops ...Op) []Op { return enclose(&Element{Role: Artifact}, ops) }

// items sets the blocks of the top level.
func (s *setter) items(blocks []doc.Block) []item {
	var items []item
	for _, b := range blocks {
		w := s.top()
		switch b := b.(type) {
		case doc.Heading:
			items = append(items, item{boxes: s.heading(b, w), heading: min(max(b.Level, 1), 6), bare: true})
		case doc.Table:
			items = append(items, s.tableItem(b, w))
		case doc.Figure:
			items = append(items, s.figureItem(b, w))
		case doc.Contents:
			// However often they are set, they have one place in the reading order.
			title, parent := s.contentsElements(w)
			set := func(room float64) []box { return s.contents(w, room, title, parent) }
			if boxes := set(math.Inf(1)); len(boxes) > 0 {
				items = append(items, item{boxes: boxes, squeeze: set})
			}
		default:
			if boxes := s.block(b, w); len(boxes) > 0 {
				items = append(items, item{boxes: boxes})
			}
		}
	}
	return lead(items)
}

// lead joins headings with what they stand above.
func lead(items []item) []item {
	var out []item
	for i := 0; i < len(items); i++ {
		it := items[i]
		if !it.bare || i+1 == len(items) {
			out = append(out, it)
			continue
		}
		if i+2 < len(items) && items[i+1].turned && !items[i+2].bare && !items[i+2].table {
			// The heading belongs to the text; the table finds its place behind it.
			items[i+1], items[i+2] = items[i+2], items[i+1]
		}
		next := items[i+1]
		below := next
		if next.heading > 0 {
			next.heading = min(next.heading, it.heading)
		} else {
			next.heading = it.heading
		}
		next.head, next.below = it.boxes, &below
		next.boxes = under(it.boxes, next.boxes)
		next.squeeze = nil
		if figure := next.figure; figure != nil {
			head := it.boxes
			next.figure = func(highest float64) []box { return under(head, figure(highest-total(head)-floatGap)) }
		}
		items[i+1] = next
	}
	return out
}

// under puts boxes under those of a heading, whose own space below is enough.
func under(head, boxes []box) []box {
	out := append(append(make([]box, 0, len(head)+len(boxes)), head...), boxes...)
	if len(boxes) > 0 {
		out[len(head)].gap = max(boxes[0].gap-paragraphGap, 0)
	}
	return out
}

func (s *setter) blocks(blocks []doc.Block, w where) []box {
	var boxes []box
	if w.depth > deepest {
		return nil
	}
	above := false // a heading stands above
	for _, b := range blocks {
		if above {
			boxes = under(boxes, s.block(b, w))
		} else {
			boxes = append(boxes, s.block(b, w)...)
		}
		_, above = b.(doc.Heading)
	}
	return boxes
}

func (s *setter) block(b doc.Block, w where) []box {
	w.depth++
	switch b := b.(type) {
	case nil:
		return nil
	case doc.Heading:
		return s.heading(b, w)
	case doc.Paragraph:
		st := serif(w.size)
		el := s.element(Element{Role: Paragraph, Parent: w.parent})
		lines := lineBoxes(justified(s.atoms(b.Text, st, s.at(b.Pos, w)), w.width), st, w.lead, w, w.x, el)
		if len(lines) > 0 {
			lines[0].gap = paragraphGap
		}
		return lines
	case doc.List:
		return s.list(b, w)
	case doc.Quote:
		in := w
		in.parent = s.element(Element{Role: Quote, Parent: w.parent})
		step := min(quoteStep, w.width/6)
		in.x, in.width = w.x+step, w.width-2*step
		in.size, in.lead = w.size-0.5, w.lead-0.75
		boxes := s.blocks(b.Blocks, in)
		space(boxes, paragraphGap+1, 1)
		return boxes
	case doc.Code:
		return s.code(b, w)
	case doc.Rule:
		return []box{{gap: 11, height: 8, within: w.within, ops: artifact(Box{
			X: w.x + w.width/2 - 30, Width: 60, Height: thin, Colour: faint,
		})}}
	case doc.Aside:
		return s.aside(b, w)
	case doc.Contents:
		title, parent := s.contentsElements(w)
		return s.contents(w, math.Inf(1), title, parent)
	case doc.Table:
		return s.table(b, w).boxes
	case doc.Figure:
		el, caption := s.figureElements(b, w)
		return s.setFigure(b, w, s.pageHeight(false), el, caption)
	default:
		panic("page: unknown block")
	}
}

// at gives the position of a node, or of the one around it.
func (s *setter) at(pos diag.Pos, w where) diag.Pos {
	if pos.File == "" && pos.Line == 0 {
		return w.pos
	}
	return pos
}

// space sets the space above the first box and below the last.
func space(boxes []box, above, below float64) {
	if len(boxes) > 0 {
		boxes[0].gap = above
		boxes[len(boxes)-1].below = below
	}
}

func (s *setter) heading(h doc.Heading, w where) []box {
	level := min(max(h.Level, 1), 6)
	look := headings[level]
	st := bold(sans(look.size))
	if level >= 4 {
		st = italic(sans(look.size))
	}
	text := h.Text
	if h.Number != "" {
		text = append([]doc.Inline{doc.Text{Text: h.Number + "\u2002"}}, text...)
	}
	el := s.element(Element{Role: Heading, Level: level, Parent: w.parent})
	boxes := lineBoxes(ragged(s.atoms(text, st, s.at(h.Pos, w)), w.width), st, look.lead, w, w.x, el)
	if len(boxes) == 0 {
		boxes = []box{{within: w.within}}
	}
	for i := range boxes {
		boxes[i].keep = true
	}
	space(boxes, look.above, look.below)
	id := h.ID
	if !w.note {
		if s.headings < len(s.entries) {
			id = s.entries[s.headings].anchor
		}
		s.headings++
	}
	if id != "" {
		boxes[0].anchors = append(boxes[0].anchors, anchor{id: id})
	}
	return boxes
}

func (s *setter) list(l doc.List, w where) []box {
	var boxes []box
	el := s.element(Element{Role: List, Ordered: l.Ordered, Parent: w.parent})
	step := min(listStep, w.width/5)
	if l.Ordered {
		for i := range l.Items {
			step = max(step, textWidth(fmt.Sprintf("%d.", l.Start+i), serif(w.size))+6)
		}
		step = min(step, w.width/2)
	}
	for i, content := range l.Items {
		it := s.element(Element{Role: Item, Parent: el})
		in := w
		in.x, in.width = w.x+step, w.width-step
		label := s.element(Element{Role: ItemLabel, Parent: it})
		in.parent = s.element(Element{Role: ItemBody, Parent: it})
		in.bullets++
		sign := []string{"•", "–", "◦"}[w.bullets%3]
		if l.Ordered {
			sign = fmt.Sprintf("%d.", l.Start+i)
		}
		inner := s.blocks(content, in)
		if len(inner) == 0 {
			inner = []box{{height: w.lead, within: w.within}}
		}
		inner[0].gap = 1
		if !l.Tight {
			inner[0].gap = paragraphGap - 1
		}
		if i == 0 && (w.bullets == 0 || !l.Tight) {
			inner[0].gap = paragraphGap - 1
		}
		st := serif(w.size)
		right := w.x + step - 6
		mark := lineBoxes(ragged(s.plainAtoms(sign, st), w.width), st, w.lead, w, right-textWidth(sign, st), label)
		if len(mark) > 0 {
			inner[0].ops = append(mark[0].ops, inner[0].ops...)
		}
		boxes = append(boxes, inner...)
	}
	return boxes
}

func (s *setter) code(c doc.Code, w where) []box {
	st := style{family: face.Mono, size: codeSize, colour: ink, code: true}
	el := s.element(Element{Role: Code, Parent: w.parent})
	const pad = 6
	advance := float64(face.Get(face.Mono, false, false).Advance('m')) * codeSize / 1000
	most := max(int((w.width-2*pad)/advance), 8)
	in := w
	in.within = append(append([]*band(nil), w.within...), &band{paint: func(top, bottom float64) []Op {
		return artifact(Box{X: w.x, Y: top, Width: w.width, Height: bottom - top, Colour: codeFill})
	}})
	var boxes []box
	text := strings.TrimRight(strings.ReplaceAll(strings.ToValidUTF8(c.Text, "\uFFFD"), "\r", ""), "\n")
	for _, row := range strings.Split(text, "\n") {
		clean, missing := face.Clean(untab(row))
		for _, r := range missing {
			s.missing(r, w.pos)
		}
		for first := true; first || clean != ""; first = false {
			part := head(clean, most)
			clean = clean[len(part):]
			a := atom{forced: clean == ""} // the row, not only the line, ends here
			for _, run := range face.Get(face.Mono, false, false).Runs(part) {
				f := frag{face: run.Face, text: run.Text, size: st.size, colour: st.colour, width: run.Face.Width(run.Text, st.size)}
				a.frags = append(a.frags, f)
				a.width += f.width
			}
			boxes = append(boxes, lineBoxes([]line{{atoms: []atom{a}}}, st, codeLead, in, w.x+pad, el)...)
		}
	}
	boxes = framed(boxes, in.within, 4, 4, paragraphGap+2)
	space(boxes, paragraphGap+2, paragraphGap+2)
	return boxes
}

// head cuts what fits on a line of so many runes from s, at a space if there is one
// near the end.
func head(s string, most int) string {
	n := 0
	for i := range s {
		if n == most {
			if k := strings.LastIndexByte(s[:i], ' '); k > i*2/3 {
				return s[:k+1]
			}
			return s[:i]
		}
		n++
	}
	return s
}

func untab(s string) string {
	if !strings.Contains(s, "\t") {
		return s
	}
	var b strings.Builder
	col := 0
	for _, r := range s {
		if r == '\t' {
			n := 4 - col%4
			b.WriteString("    "[:n])
			col += n
			continue
		}
		b.WriteRune(r)
		col++
	}
	return b.String()
}

// framed pads boxes that share a ground, above and below.
func framed(boxes []box, within []*band, above, below, gap float64) []box {
	if len(boxes) == 0 {
		return nil
	}
	boxes[0].gap = 0
	boxes[len(boxes)-1].keep = true
	out := make([]box, 0, len(boxes)+2)
	out = append(out, box{gap: gap, height: above, keep: true, within: within})
	out = append(out, boxes...)
	out = append(out, box{height: below, within: within})
	if len(boxes) > 1 {
		out[1].keep = true
		out[len(out)-3].keep = true
	}
	return out
}

func (s *setter) aside(a doc.Aside, w where) []box {
	const padX, padY, barWidth = 11, 7, 2.5
	fill, bar := asideLook(a.Kind)
	in := w
	in.within = append(append([]*band(nil), w.within...), &band{paint: func(top, bottom float64) []Op {
		return artifact(
			Box{X: w.x, Y: top, Width: w.width, Height: bottom - top, Colour: fill},
			Box{X: w.x, Y: top, Width: barWidth, Height: bottom - top, Colour: bar},
		)
	}})
	in.x, in.width = w.x+padX, w.width-2*padX
	in.parent = s.element(Element{Role: Aside, Parent: w.parent})
	var boxes []box
	if len(a.Title) > 0 {
		st := bold(sans(9))
		el := s.element(Element{Role: Paragraph, Parent: in.parent})
		boxes = lineBoxes(ragged(s.atoms(a.Title, st, w.pos), in.width), st, 12.5, in, in.x, el)
		for i := range boxes {
			boxes[i].keep = true
		}
	}
	inner := s.blocks(a.Blocks, in)
	if len(inner) > 0 && len(boxes) > 0 {
		inner[0].gap = 3
	}
	boxes = framed(append(boxes, inner...), in.within, padY, padY, 10)
	if len(boxes) > 0 {
		boxes[len(boxes)-1].below = 11
		if total(boxes) < 0.2*s.pageHeight(false) {
			for i := range boxes[:len(boxes)-1] {
				boxes[i].keep = true
			}
		}
	}
	return boxes
}

func (s *setter) contentsElements(w where) (title, parent *Element) {
	return s.element(Element{Role: Paragraph, Parent: w.parent}), s.element(Element{Role: Contents, Parent: w.parent})
}

// contents sets the table of contents, two levels of it. It is set closer where it then
// ends on the page it begins on, room being what that has left.
func (s *setter) contents(w where, room float64, title, parent *Element) []box {
	var boxes []box
	for i, lead := range []float64{13, 12.25, 11.5, 10.9} {
		closer := s.contentsAt(w, lead, title, parent)
		if i == 0 {
			boxes = closer
		}
		if total(closer) <= room {
			return closer
		}
	}
	return boxes
}

func (s *setter) contentsAt(w where, lead float64, title, parent *Element) []box {
	top := 6
	for _, e := range s.entries {
		top = min(top, e.level)
	}
	var boxes []box
	st := bold(sans(headings[2].size))
	head := lineBoxes(ragged(s.plainAtoms("Contents", st), w.width), st, headings[2].lead, w, w.x, title)
	space(head, 14, 4)
	for i := range head {
		head[i].keep = true
	}
	for _, e := range s.entries {
		if e.level > top+1 {
			continue
		}
		st, indent, gap := sans(contentsSize), 22.0, 0.0
		if e.level == top {
			st, indent, gap = bold(st), 0, lead-9
		}
		number, numberWidth := s.shorten(e.number, st, w.width/4), 0.0
		if number != "" {
			numberWidth = max(22+indent/5, textWidth(number, st)+7)
		}
		el := s.element(Element{Role: ContentsEntry, Parent: parent})
		x := w.x + indent
		avail := max(w.width-indent-numberWidth-34, 40)
		link := st
		link.link = "#" + e.anchor
		link.target = &Element{Role: Linked, Alt: e.title}
		// A space before the number of the page, and after that of the heading, for those
		// who copy the text.
		text := append(uncalled(e.text), doc.Text{Text: " "})
		lines := lineBoxes(ragged(s.atoms(text, link, w.pos), avail), st, lead, w, x+numberWidth, el)
		if len(lines) == 0 {
			continue
		}
		for i := range lines {
			lines[i].notes = nil // a note belongs to the heading itself
			lines[i].keep = i < len(lines)-1
		}
		if number != "" {
			label := lineBoxes(ragged(s.plainAtoms(number+" ", st), w.width), st, lead, w, x, el)
			if len(label) > 0 {
				lines[0].ops = append(label[0].ops, lines[0].ops...)
			}
		}
		lines[0].gap = gap
		if e.level == top {
			// A rule guides the eye to the number of the page.
			lines[0].ops = append(artifact(Box{X: w.x, Y: -gap / 2, Width: w.width, Height: hair, Colour: faint}), lines[0].ops...)
		}
		// Neither a chapter nor its last section stands alone.
		n := len(boxes)
		switch {
		case n > 0 && e.level > top && boxes[n-1].gap > 0:
			boxes[n-1].keep = true
		case n > 1 && e.level == top && boxes[n-1].gap == 0:
			boxes[n-2].keep = true
		}
		at := st
		at.link, at.target = link.link, &Element{Role: Linked, Alt: e.title}
		lines[len(lines)-1].pageOf = &pageOf{anchor: e.anchor, right: w.x + w.width, y: baseline(st, lead), style: at, element: el}
		boxes = append(boxes, lines...)
	}
	if len(boxes) == 0 {
		return nil
	}
	// The first lines stay under the word above, the last are not left alone.
	for i := range boxes[:len(boxes)-1] {
		if i < 2 || i >= len(boxes)-4 {
			boxes[i].keep = true
		}
	}
	boxes = append(head, boxes...)
	boxes[len(boxes)-1].keep = false
	boxes[len(boxes)-1].below = 12
	return boxes
}

// uncalled is the text of a heading without what leads elsewhere: calls of footnotes,
// references.
func uncalled(text []doc.Inline) []doc.Inline {
	return doc.Mapper{Inline: func(n doc.Inline) doc.Inline {
		switch n := n.(type) {
		case doc.FootnoteRef, nil:
			return doc.Text{}
		case doc.Ref:
			return doc.Text{Text: n.Text}
		}
		return n
	}}.Inlines(text)
}

// caption sets "Table 3. …" or "Figure 3. …".
func (s *setter) caption(label, number string, text []doc.Inline, w where, pos diag.Pos, el *Element) []box {
	st := sans(smallSize)
	var all []doc.Inline
	if number != "" {
		end := "."
		if len(text) == 0 {
			end = ""
		}
		all = append(all, doc.Strong{Text: []doc.Inline{doc.Text{Text: label + "\u00A0" + number + end}}}, doc.Text{Text: " "})
	}
	all = append(all, text...)
	if len(all) == 0 {
		return nil
	}
	return lineBoxes(ragged(s.atoms(all, st, pos), w.width), st, smallLead, w, w.x, el)
}

func (s *setter) figureItem(f doc.Figure, w where) item {
	// However often it is set, it is one element.
	el, caption := s.figureElements(f, w)
	set := func(highest float64) []box { return s.setFigure(f, w, highest, el, caption) }
	return item{boxes: set(s.pageHeight(false)), figure: set}
}

// figureElements makes the elements of a picture and of its caption.
func (s *setter) figureElements(f doc.Figure, w where) (picture, caption *Element) {
	alt := firstOf(f.Alt, plain(f.Caption, 0), "Figure "+f.Number)
	picture = s.element(Element{Role: Figure, Alt: alt, Parent: w.parent})
	if !drawable(f.Picture) {
		picture.Role, picture.Alt = Paragraph, ""
	}
	return picture, s.element(Element{Role: Caption, Parent: w.parent})
}

func drawable(pic *doc.Picture) bool {
	return pic != nil && pic.Width > 0 && pic.Height > 0 && finite(pic.Width) && finite(pic.Height)
}

// setFigure sets a picture no wider than the column with its caption below, together no
// higher than a page; and no higher than a limit where a little less will do, so that its
// type stays as large as it was drawn.
func (s *setter) setFigure(f doc.Figure, w where, highest float64, el, captionElement *Element) []box {
	pos := s.at(f.Pos, w)
	caption := s.caption("Figure", f.Number, f.Caption, w, pos, captionElement)
	below := 0.0
	for _, b := range caption {
		below += b.height
	}
	pic := f.Picture
	picture := box{gap: floatGap, keep: true, within: w.within}
	if drawable(pic) {
		room := func(highest float64) float64 { return max(highest-below-floatGap-7, 40) }
		scale := min(1, w.width/pic.Width, room(s.pageHeight(false))/pic.Height)
		if less := room(highest) / pic.Height; less < scale && less >= leastShrink*scale {
			scale = less
		}
		picture.height = pic.Height * scale
		picture.ops = enclose(el, []Op{Picture{X: w.x, Scale: scale, Picture: pic}})
		for _, o := range pic.Ops {
			if l, ok := o.(doc.Label); ok {
				_, missing := face.Clean(l.Text)
				for _, r := range missing {
					s.missing(r, pos)
				}
			}
		}
	} else if f.Alt != "" {
		st := italic(serif(w.size))
		lines := lineBoxes(ragged(s.plainAtoms(f.Alt, st), w.width), st, w.lead, w, w.x, el)
		if len(lines) > 0 {
			lines[0].gap = floatGap
			for i := range lines {
				lines[i].keep = true
			}
			lines[0].anchors = anchors(f.ID)
			lines[len(lines)-1].keep = len(caption) > 0
			space(caption, 5, floatGap)
			return append(lines, caption...)
		}
	}
	picture.anchors = anchors(f.ID)
	for i := range caption {
		caption[i].keep = i < len(caption)-1
	}
	if len(caption) == 0 {
		picture.keep = false
		picture.below = floatGap
	}
	space(caption, 7, floatGap)
	return append([]box{picture}, caption...)
}

func anchors(id string) []anchor {
	if id == "" {
		return nil
	}
	return []anchor{{id: id}}
}

func finite(v float64) bool { return v-v == 0 }

// layNotes sets the footnotes, each with its number hanging before it.
func (s *setter) layNotes() {
	for i, blocks := range s.doc.Notes {
		label := fmt.Sprint(i + 1)
		st := serif(noteSize)
		el := s.element(Element{Role: Note, Parent: s.root})
		s.noteElements = append(s.noteElements, el)
		number := s.element(Element{Role: NoteLabel, Parent: el})
		hang := 12.0
		if i >= 99 {
			hang = 18
		}
		w := where{x: hang, width: s.measure - hang, size: noteSize, lead: noteLead, parent: el, note: true}
		boxes := s.blocks(blocks, w)
		if len(boxes) == 0 {
			boxes = []box{{height: noteLead}}
		}
		boxes[0].gap = 2
		mark := raised(st, raise)
		l := lineBoxes(ragged(s.plainAtoms(label, mark), s.measure), st, noteLead, w, 0, number)
		if len(l) > 0 {
			boxes[0].ops = append(l[0].ops, boxes[0].ops...)
		}
		boxes[0].anchors = append(boxes[0].anchors, anchor{id: noteAnchor(i + 1)[1:]})
		s.notes = append(s.notes, boxes)
	}
}

// seat gives the element of footnote n, from 1, its place in the reading order: behind
// the paragraph, heading or table that calls it first.
func (s *setter) seat(n int) {
	for _, call := range s.calls[n] {
		block, ok := caller(call.Parent)
		if ok {
			note := s.noteElements[n-1]
			note.Parent, note.Order = block.Parent, block.Order
			return
		}
	}
}

// caller is the block that an element with a call in it belongs to; ok is false for a
// heading as the contents show it, and for what was measured but never set.
func caller(e *Element) (block *Element, ok bool) {
	for ; e != nil && e.Parent != nil; e = e.Parent {
		switch e.Role {
		case ContentsEntry:
			return nil, false
		case Paragraph, Heading, Caption, Table:
			block = e
			if e.Role == Caption && e.Parent.Role == Table {
				block = e.Parent
			}
			for up := block.Parent; up != nil; up = up.Parent {
				if up.Role == Note {
					block = up // a note called in a note comes behind that
				}
			}
			return block, true
		}
	}
	return nil, false
}

// pageHeight is the height of the text on a page.
func (s *setter) pageHeight(turned bool) float64 {
	if turned {
		return s.width - marginTop - marginBottom
	}
	return s.height - marginTop - marginBottom
}

// turnedMeasure is the width of the text on a turned page.
func (s *setter) turnedMeasure() float64 { return s.height - 2*marginSide }
