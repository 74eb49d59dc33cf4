package figure

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"

	"penwright/analysis/num"
	"penwright/render/doc"
)

// Map shows where the units stand and what each received, or how far each lies from
// what was fitted.
type Map struct {
	Size
	Unit  string // what a cell is, such as "pen"
	Boxes []Box  // of one treelike arrangement, such as blocks
	// Treatments names what Cell.Treatment counts; a legend is drawn when a cell cannot
	// or does not bear the name.
	Treatments []string
	What       string // one of Treatments is; empty: a treatment
	// Shade is the title of the scale of Cell.Value, with its unit. Empty: the cells
	// are coloured by treatment.
	Shade string
}

// Box holds cells, or boxes. A grid has Columns and names for them and for its rows;
// without Columns, what is in the box stands in a row that is broken where it must.
type Box struct {
	Label        string
	Columns      int
	Across, Down []string
	Boxes        []Box
	Cells        []Cell
}

// Cell is a unit.
type Cell struct {
	Unit      string  // its full name
	Number    string  // its name within the box
	Label     string  // the treatment, in short
	Treatment int     // index into Map.Treatments; -1: none
	Excluded  bool    // by a decision
	Lost      bool    // it has no value
	Value     float64 // NaN: none
	Empty     bool    // a place of a grid without a unit
}

const (
	mostCells  = maxPoints
	mostListed = 300 // treatments in a legend
)

// Draw gives the picture, and the same in words.
func (m Map) Draw() (*doc.Picture, string) {
	all := cells(m.Boxes, nil)
	n := 0
	for _, c := range all {
		if !c.Empty {
			n++
		}
	}
	alt := m.words(all, n)
	if n == 0 {
		return note(m.Size, "No units to draw."), alt
	}
	w, _ := m.resolve(0)
	p := &mapper{Map: m, width: w - 2, all: all, n: n}
	var boxes []Box
	boxes, p.left = cut(m.Boxes, mostCells)
	for _, c := range all {
		p.crossed = p.crossed || c.Excluded
		p.struck = p.struck || c.Lost && !c.Excluded
		if m.Shade != "" && drawable(c.Value) && !c.Excluded {
			p.top = max(p.top, math.Abs(c.Value))
		}
	}
	most := float64(pageHeight)
	if m.Height > 0 {
		_, most = m.resolve(0)
	}
	p.most = most
	p.keys = m.needKeys(all)
	for p.bear = labels; ; p.bear++ {
		p.choose(boxes, most-p.foot(nil, 0)-2)
		if p.room() {
			break
		}
		p.keys = len(m.Treatments) > 0
	}
	tree := p.arrange(boxes)
	h := tree.h + p.foot(nil, 0) + 2
	c := newCanvas(w, min(h, huge))
	p.draw(c, tree, 1, 1)
	p.foot(c, tree.h+1)
	return c.pic, alt
}

func cells(boxes []Box, out []Cell) []Cell {
	for _, b := range boxes {
		out = append(out, b.Cells...)
		out = cells(b.Boxes, out)
	}
	return out
}

// cut keeps the first cells and says how many units fell away.
func cut(boxes []Box, most int) (kept []Box, left int) {
	room := most
	var walk func([]Box) []Box
	walk = func(bs []Box) []Box {
		var out []Box
		for _, b := range bs {
			if len(b.Cells) > 0 {
				k := min(room, len(b.Cells))
				for _, c := range b.Cells[k:] {
					if !c.Empty {
						left++
					}
				}
				b.Cells = b.Cells[:k]
				room -= k
			}
			b.Boxes = walk(b.Boxes)
			if len(b.Cells) > 0 || len(b.Boxes) > 0 {
				out = append(out, b)
			}
		}
		return out
	}
	return walk(boxes), left
}

// needKeys says whether the labels are other than the names, so that a legend must
// join them.
func (m Map) needKeys(all []Cell) bool {
	for _, c := range all {
		if c.Treatment >= 0 && c.Treatment < len(m.Treatments) && c.Label != m.Treatments[c.Treatment] {
			return true
		}
	}
	return false
}

// bears says what stands in the cells: the labels, or where these have no room keys
// from a legend (without treatments, the numbers of the units), or marks, or nothing at
// all.
type bears int

const (
	labels bears = iota
	keys
	marks
	nothing
)

// mapper arranges a map at one size of its cells.
type mapper struct {
	Map
	width   float64
	all     []Cell
	n, left int     // units, and those not drawn
	cw, ch  float64 // of a cell
	gap     float64 // between boxes
	label   float64 // size of the labels of boxes; 0: not drawn
	top     float64 // the end of the scale
	crossed bool    // some are excluded
	struck  bool    // some have no value
	most    float64 // height of the whole map
	list    *key    // the legend
	listed  bears   // what it was made for
	keys    bool    // a legend is drawn
	bear    bears
	set     lettering
}

// arranged is a box with its place for everything in it.
type arranged struct {
	box      *Box
	w, h     float64
	head     float64 // room above for the label and the names of columns
	side     float64 // room at the left for the names of rows
	label    float64
	columns  int
	children []*arranged
	x, y     []float64
}

const (
	widestCell = 108
	pad        = 3
	headGap    = 1.5 // between the label of a box and the box
)

// choose finds the largest cells with which the boxes are no higher than most.
func (p *mapper) choose(boxes []Box, most float64) {
	natural := 0.0
	for _, c := range p.all {
		if p.bear == labels {
			natural = max(natural, width(clean(c.Label), textSize, false))
		}
	}
	natural = min(max(natural+10, 26), widestCell)
	if p.Shade != "" {
		natural = max(natural, 34)
	}
	const tall = 21.0
	set := func(k int) {
		s := math.Pow(0.93, float64(k))
		p.cw, p.ch = natural*s, tall*math.Pow(s, 0.75)
		p.gap = min(max(p.cw*0.28, min(p.cw, 1.5)), 9)
		p.label = noteSize
		if p.ch < 9 {
			p.label = leastSize
		}
		if p.ch < 5 {
			p.label = 0
		}
	}
	// The smaller the cells, the more surely they fit; at the last they are dust.
	k := sort.Search(180, func(k int) bool {
		set(k)
		t := p.arrange(boxes)
		return t.h <= most && t.w <= p.width
	})
	set(k)
	// What room is left across, the cells take.
	least, h := p.cw, p.arrange(boxes).h
	steps := 0
	if least < widestCell {
		steps = int(math.Log(widestCell/least) / math.Log(1.03))
	}
	k = sort.Search(steps, func(k int) bool {
		p.cw = least * math.Pow(1.03, float64(k+1))
		wider := p.arrange(boxes)
		return wider.w > p.width || wider.h > h
	})
	p.cw = least * math.Pow(1.03, float64(k))
}

// arrange places the boxes at the present size of cells.
func (p *mapper) arrange(boxes []Box) *arranged {
	if len(boxes) == 1 {
		return p.place(&boxes[0], p.width, 0)
	}
	root := &Box{Boxes: boxes}
	return p.place(root, p.width, -1)
}

// place arranges a box that may be most wide.
func (p *mapper) place(b *Box, most float64, depth int) *arranged {
	a := &arranged{box: b, label: p.label}
	rim := 0.0
	if depth >= 0 {
		if len(b.Boxes) > 0 && len(b.Across) == 0 {
			rim = pad * min(p.gap/9, 1)
		}
		if p.label > 0 && b.Label != "" {
			a.head = p.label*leading + headGap
		}
	}
	inside := most - 2*rim
	n := len(b.Cells)
	gapX, gapY := 0.0, 0.0
	var sizes [][2]float64
	if n == 0 {
		n = len(b.Boxes)
		gapX, gapY = p.gap, p.gap
		if depth > 0 || b.Columns > 0 {
			gapX, gapY = p.gap*0.5, p.gap*0.5
		}
	}
	if len(b.Across) > 0 && p.label > 0 {
		a.head += p.label * leading
	}
	if len(b.Down) > 0 && p.label > 0 {
		for _, d := range b.Down {
			a.side = max(a.side, width(brief(d, 48, p.label), p.label, false)+3)
		}
	}
	inside -= a.side
	colW, rowH := p.cw, p.ch
	if len(b.Cells) == 0 {
		colW, rowH = 0, 0
		share := inside
		if b.Columns > 0 {
			share = (inside - gapX*float64(b.Columns-1)) / float64(b.Columns)
		}
		for i := range b.Boxes {
			c := p.place(&b.Boxes[i], share, depth+1)
			a.children = append(a.children, c)
			colW, rowH = max(colW, c.w), max(rowH, c.h)
			sizes = append(sizes, [2]float64{c.w, c.h})
		}
	}
	if n == 0 {
		return a
	}
	a.columns = b.Columns
	if a.columns <= 0 {
		fits := max(int((inside+gapX+1e-9)/(colW+gapX)), 1)
		a.columns = min(fits, n)
		rows := (n + a.columns - 1) / a.columns
		a.columns = (n + rows - 1) / rows
		if len(b.Cells) == 0 && n%a.columns != 0 {
			// Full rows look better, if they cost little height.
			for k := a.columns - 1; k >= 1; k-- {
				if n%k == 0 && float64(n/k)*(rowH+gapY) <= max(230, 1.3*float64(rows)*(rowH+gapY)) {
					a.columns = k
					break
				}
			}
		}
	}
	rows := (n + a.columns - 1) / a.columns
	tops := make([]float64, rows+1)
	for r := range rows {
		h := rowH
		if len(sizes) > 0 {
			h = 0
			for i := r * a.columns; i < min((r+1)*a.columns, n); i++ {
				h = max(h, sizes[i][1])
			}
		}
		tops[r+1] = tops[r] + h + gapY
	}
	for i := range n {
		a.x = append(a.x, rim+a.side+float64(i%a.columns)*(colW+gapX))
		a.y = append(a.y, rim+a.head+tops[i/a.columns])
	}
	a.w = 2*rim + a.side + float64(a.columns)*(colW+gapX) - gapX
	a.h = 2*rim + a.head + tops[rows] - gapY
	// A box that is wider for its label than for what it holds.
	if depth >= 0 && p.label > 0 && b.Label != "" {
		a.w = max(a.w, min(width(brief(b.Label, 60, p.label), p.label, false)+2*rim, most))
	}
	return a
}

// brief is text that fits, shortened if it can be to its last word, as in "Block 12".
func brief(s string, most, size float64) string {
	s = clean(s)
	if width(s, size, false) <= most {
		return s
	}
	if i := strings.LastIndexByte(s, ' '); i >= 0 && i < len(s)-1 {
		if last := s[i+1:]; width(last, size, false) <= most && strings.ContainsAny(last, "0123456789") {
			return last
		}
	}
	return fit(s, most, size, false)
}

func (p *mapper) draw(c *canvas, a *arranged, x, y float64) {
	b := a.box
	st := style{size: a.label, colour: ink}
	frameTop := y
	if a.label > 0 && b.Label != "" {
		if s := brief(b.Label, a.w, a.label); s != "" {
			c.text(x, y+a.label*ascent, left, st, s)
		}
		if a.head > 0 {
			frameTop += a.label*leading + headGap
		}
	}
	if len(b.Boxes) > 0 && b.Label != "" && len(b.Across) == 0 && p.gap > 2 {
		c.stroke(line{width: thin, colour: grey}, rectangle(x, frameTop, a.w, a.h-(frameTop-y))...)
	}
	childW := p.cw
	if len(a.children) > 0 {
		childW = 0
		for _, k := range a.children {
			childW = max(childW, k.w)
		}
	}
	if len(b.Across) > 0 && a.label > 0 && len(a.x) > 0 {
		if whole := clean(b.Across[0]); a.side > 0 {
			// Where the names are shortened to numbers, what these are stands beside.
			if what, ok := strings.CutSuffix(whole, " "+brief(whole, childW-2, a.label)); ok {
				c.text(x+a.side-3, frameTop+a.label*ascent, right, st, fit(what, a.side-3, a.label, false))
			}
		}
		end := math.Inf(-1)
		for i := 0; i < min(len(b.Across), a.columns, len(a.x)); i++ {
			s := brief(b.Across[i], childW-2, a.label)
			mid := x + a.x[i] + childW/2
			half := width(s, a.label, false) / 2
			if s == "" || mid-half < end+2 {
				continue
			}
			c.text(mid, frameTop+a.label*ascent, center, st, s)
			end = mid + half
		}
	}
	if len(b.Down) > 0 && a.label > 0 {
		end := math.Inf(-1)
		for r := 0; r < len(b.Down) && r*a.columns < len(a.y); r++ {
			h := p.ch
			if len(a.children) > 0 {
				h = a.children[r*a.columns].h
			}
			mid := y + a.y[r*a.columns] + h/2
			if mid-a.label*leading/2 < end {
				continue
			}
			c.text(x+a.side-3+(a.x[0]-a.side), mid+capHeight(a.label)/2, right, st, brief(b.Down[r], a.side-3, a.label))
			end = mid + a.label*leading/2
		}
	}
	for i, k := range a.children {
		p.draw(c, k, x+a.x[i], y+a.y[i])
	}
	for i, cell := range b.Cells {
		if !cell.Empty {
			p.cell(c, cell, x+a.x[i], y+a.y[i])
		}
	}
	c.mark("")
	if n := len(b.Cells); n > 0 && n%a.columns == 0 && p.cw > 6 {
		c.stroke(line{width: 0.9, colour: grey},
			rectangle(x+a.x[0], y+a.y[0], a.x[n-1]-a.x[0]+p.cw, a.y[n-1]-a.y[0]+p.ch)...)
	}
}

// sign stands for a treatment where its label has no room.
func sign(i, n int) string {
	if n <= 26 {
		return string(rune('A' + i))
	}
	return strconv.Itoa(i + 1)
}

// widestKey is as wide as any of the keys of n treatments.
func widestKey(n int) string {
	if n <= 26 {
		return "W"
	}
	return strings.Repeat("0", len(strconv.Itoa(n)))
}

// lettering is how the text of all cells is set, so that they look alike.
type lettering struct {
	size   float64 // of what the cells bear; 0: it has no room
	lines  int     // of a label, at most
	value  float64 // size of the value below it; 0: none
	number bool    // the unit's number stands in the corner
	clear  bool    // and needs a line of its own there
}

// room finds how the text of the cells is set, and says whether they have room for what
// they are to bear.
func (p *mapper) room() bool {
	n := len(p.Treatments)
	p.set = lettering{}
	switch p.bear {
	case marks:
		return n <= symbols && p.cw >= 3 && p.ch >= 3
	case nothing:
		return true
	}
	var texts, numbers, values []string
	if p.bear == keys && n > 0 {
		texts = []string{widestKey(n)}
	}
	seen := map[string]bool{}
	for _, c := range p.all {
		if l := clean(c.Label); p.bear == labels && !seen[l] && l != "" {
			seen[l] = true
			texts = append(texts, l)
		}
		numbers = append(numbers, c.Number)
		if p.Shade != "" && drawable(c.Value) && !c.Excluded {
			values = append(values, p.value(c.Value))
		}
	}
	if n == 0 && (p.bear == keys || len(texts) == 0) {
		texts = numbers
	}
	// Values are worth a smaller label.
	if len(values) > 0 {
		p.letter(texts, leastSize, leastSize*leading)
	}
	if p.set.size == 0 {
		p.letter(texts, leastSize, 0)
	}
	if p.set.size == 0 {
		return false
	}
	widest := func(texts []string, size float64, bold bool) float64 {
		w := 0.0
		for _, t := range texts {
			w = max(w, width(clean(t), size, bold))
		}
		return w
	}
	tall := p.set.size * leading * float64(p.set.lines)
	for _, size := range []float64{noteSize, leastSize} {
		if len(values) > 0 && widest(values, size, true) <= p.cw-2 && tall+size*leading <= p.ch {
			p.set.value = size
			tall += size * leading
			break
		}
	}
	corner := widest(numbers, leastSize, false)
	if corner == 0 || corner > p.cw-4 || len(texts) == 0 {
		return true
	}
	across := widest(texts, p.set.size, false)
	if p.set.lines > 1 {
		across = p.cw
	}
	p.set.clear = (p.cw-across)/2 < corner+3
	p.set.number = !p.set.clear && p.ch >= leastSize*leading || tall+leastSize <= p.ch
	return true
}

// letter finds the largest size at which all the texts have room, on one line or two,
// with some height left over.
func (p *mapper) letter(texts []string, least, over float64) {
	inside := p.cw - min(3, p.cw*0.06)
	for size := textSize; size >= least; size -= 0.5 {
		for lines := 1; lines <= 2 && float64(lines)*size*leading+over <= p.ch; lines++ {
			fits := true
			for _, t := range texts {
				if _, fits = wrap(t, inside, size, lines); !fits {
					break
				}
			}
			if fits {
				p.set.size, p.set.lines = size, lines
				return
			}
		}
	}
}

func (p *mapper) tint(c Cell) doc.Colour {
	switch {
	case c.Excluded || c.Lost:
		return doc.Colour{}
	case p.Shade != "":
		if !drawable(c.Value) || p.top == 0 {
			return doc.Colour{}
		}
		return p.shade(c.Value / p.top)
	case c.Treatment < 0:
		return doc.Colour{}
	}
	return p.light(c.Treatment)
}

// light is the ground of a treatment's cells.
func (p *mapper) light(i int) doc.Colour {
	return tint(hue(i), []float64{0.34, 0.18, 0.48}[i/len(palette)%3])
}

// shade is the colour of a place on the diverging scale from -1 to 1.
func (p *mapper) shade(v float64) doc.Colour {
	if v < 0 {
		return tint(below, -v*0.62)
	}
	return tint(above, v*0.62)
}

func (p *mapper) cell(c *canvas, cell Cell, x, y float64) {
	c.mark(cell.Unit)
	rect := rectangle(x, y, p.cw, p.ch)
	if t := p.tint(cell); t.A > 0 {
		c.fill(t, rect...)
	}
	if p.cw > 4 {
		c.stroke(line{width: 0.4, colour: grey}, rect...)
	}
	out := cell.Excluded || cell.Lost
	if out {
		c.strike(x, y, p.cw, p.ch, cell.Excluded)
	}
	if p.Shade != "" && p.set.value == 0 && !cell.Excluded && cell.Value < -p.top/20 && p.cw >= 4 && p.ch >= 3 {
		// Without a printed value a bar says, also in grey, that it is below nought.
		c.stroke(line{width: 0.8, colour: ink}, segment(x+p.cw*0.3, y+p.ch-1.3, x+p.cw*0.7, y+p.ch-1.3)...)
	}
	label := clean(cell.Label)
	switch {
	case p.bear == marks && cell.Treatment >= 0:
		shape, colour := symbol(cell.Treatment)
		c.marker(shape, x+p.cw/2, y+p.ch/2, min(p.cw, p.ch)*0.3, colour)
		return
	case p.bear == marks, p.bear == nothing, p.set.size == 0:
		return
	case p.bear == keys && len(p.Treatments) == 0:
		label = "" // the unit's number stands for it
	case p.bear == keys && cell.Treatment >= 0:
		label = sign(cell.Treatment, len(p.Treatments))
	}
	st := style{size: p.set.size, colour: ink}
	number := clean(cell.Number)
	if label == "" {
		label, number = number, "" // nothing is allotted yet: the unit's own name
	}
	lines, _ := wrap(label, p.cw-min(3, p.cw*0.06), st.size, max(p.set.lines, 1))
	tall := st.size * leading * float64(len(lines))
	value := ""
	if p.set.value > 0 && drawable(cell.Value) && !cell.Excluded {
		value = p.value(cell.Value)
		tall += p.set.value * leading
	}
	top, room := y, p.ch
	if p.set.number && number != "" {
		c.text(x+2, y+1+leastSize*0.8, left, style{size: leastSize, colour: ink}, number)
		if p.set.clear {
			// A line's own white space lies below the number's feet.
			top, room = y+leastSize, p.ch-leastSize
		}
	}
	base := top + (room-tall)/2 + st.size*(leading+capHeight(1))/2
	for _, l := range lines {
		if out {
			half := width(l, st.size, false)/2 + 1.5
			c.fill(paper, rectangle(x+p.cw/2-half, base-capHeight(st.size)-1, 2*half, capHeight(st.size)+2)...)
		}
		c.text(x+p.cw/2, base, center, st, l)
		base += st.size * leading
	}
	if value != "" {
		base += (p.set.value - st.size) * (leading + capHeight(1)) / 2
		c.text(x+p.cw/2, base, center, style{size: p.set.value, bold: true, colour: ink}, value)
	}
}

// strike crosses a cell out that was excluded, and strikes one through that has no value.
func (c *canvas) strike(x, y, w, h float64, excluded bool) {
	d := min(1.0, w/8, h/8)
	path := segment(x+d, y+h-d, x+w-d, y+d)
	if excluded {
		path = append(path, segment(x+d, y+d, x+w-d, y+h-d)...)
	}
	c.stroke(line{width: 0.6, colour: grey}, path...)
}

// value prints what a cell is shaded by, with its sign, to about two digits of the
// largest.
func (p *mapper) value(v float64) string {
	if p.top >= 1e6 || p.top < 1e-4 {
		if s := rounded(v); v <= 0 {
			return s
		} else {
			return "+" + s
		}
	}
	return num.Signed(v, min(max(1-int(math.Floor(math.Log10(p.top))), 0), 6))
}

// foot draws what explains the map, or measures it where there is no canvas, and gives
// its height.
func (p *mapper) foot(c *canvas, y float64) float64 {
	start := y
	y += 4
	st := style{size: noteSize, colour: ink}
	if p.Shade != "" && p.top > 0 {
		if c != nil {
			p.scale(c, y)
		}
		y += 26
	}
	if p.keys {
		y += p.legend(c, y)
	}
	x := 1.0
	for _, e := range []struct {
		drawn, excluded bool
		text            string
	}{{p.crossed, true, "excluded from the analysis"}, {p.struck, false, "no value"}} {
		if !e.drawn {
			continue
		}
		if c != nil {
			c.stroke(line{width: fine, colour: grey}, rectangle(x, y+2, 13, 9)...)
			c.strike(x, y+2, 13, 9, e.excluded)
			c.text(x+17, y+9, left, st, fit(e.text, p.width-x-17, noteSize, false))
		}
		x += 17 + width(e.text, noteSize, false) + 14
	}
	if x > 1 {
		y += 13
	}
	if p.left > 0 {
		if c != nil {
			c.text(1, y+9, left, st, fit(fmt.Sprintf("The first %d of %d units are drawn.", p.n-p.left, p.n), p.width, noteSize, false))
		}
		y += 13
	}
	return y - start
}

// scale draws the scale of the shading.
func (p *mapper) scale(c *canvas, y float64) {
	const steps = 30
	long := min(150, p.width*0.4)
	st := style{size: noteSize, colour: ink}
	title := fit(p.Shade, p.width-long-30, textSize, false)
	x := width(title, textSize, false) + 22
	c.text(1, y+9.5, left, style{size: textSize, colour: ink}, title)
	for i := range steps {
		v := 2*(float64(i)+0.5)/steps - 1
		c.fill(p.shade(v), rectangle(x+long*float64(i)/steps, y+2, long/steps, 9)...)
	}
	c.stroke(line{width: thin, colour: grey}, rectangle(x, y+2, long, 9)...)
	if p.set.value == 0 {
		c.stroke(line{width: 0.8, colour: ink}, segment(x+long*0.22, y+9.5, x+long*0.28, y+9.5)...)
	}
	end := math.Inf(-1)
	for _, v := range []float64{-1, 1, 0} {
		at := x + long*(v+1)/2
		c.stroke(line{width: thin, colour: ink}, segment(at, y+11, at, y+13.5)...)
		s := "0"
		if v != 0 {
			s = p.value(v * p.top)
		}
		half := width(s, noteSize, false) / 2
		if v == 0 && (at-half < end+2 || long < 4*half) {
			continue
		}
		at = min(max(at, 1+half), p.width-half)
		if v < 0 {
			end = at + half
		} else if v > 0 && at-half < end+2 {
			return
		}
		c.text(at, y+21, center, st, s)
		if v > 0 && at-half < x+long/2+6 {
			return
		}
	}
}

// legend lists what stands for which treatment.
func (p *mapper) legend(c *canvas, y float64) float64 {
	if p.bear == nothing || len(p.Treatments) > mostListed {
		if c != nil {
			c.text(1, y+8, left, style{size: noteSize, colour: ink}, fit(fmt.Sprintf("The %d treatments are too many to be named on a map of this size.", len(p.Treatments)), p.width, noteSize, false))
		}
		return 13
	}
	if p.list == nil || p.listed != p.bear {
		l := newList(p.entries())
		k := l.key(p.width, p.most*0.5)
		if !k.complete && p.n <= 300 {
			k = l.key(p.width, p.most*0.8)
		}
		p.list, p.listed = &k, p.bear
	}
	if c != nil {
		p.list.draw(c, 1, y)
	}
	return p.list.tall
}

// entries are the signs of the treatments with their names.
func (p *mapper) entries() []entry {
	shown := map[int]string{}
	if p.bear == labels {
		for _, cell := range p.all {
			if cell.Treatment >= 0 && shown[cell.Treatment] == "" {
				shown[cell.Treatment] = clean(cell.Label)
			}
		}
	}
	out := make([]entry, len(p.Treatments))
	for i, name := range p.Treatments {
		e := entry{name: name, framed: true}
		switch p.bear {
		case keys:
			e.sign = sign(i, len(p.Treatments))
		case marks:
			shape, colour := symbol(i)
			e.draw = func(c *canvas, x, y float64) { c.marker(shape, x, y, 2.6, colour) }
		default:
			e.sign = fit(shown[i], 80, noteSize, false)
		}
		if p.Shade == "" && p.bear != marks {
			e.ground = p.light(i)
		}
		out[i] = e
	}
	return out
}

func (m Map) words(all []Cell, n int) string {
	var b strings.Builder
	unit := title(m.Unit, "unit")
	fmt.Fprintf(&b, "Map of %s", count(n, unit))
	if len(m.Boxes) > 1 {
		fmt.Fprintf(&b, " in %d groups", len(m.Boxes))
		b.WriteString(strings.TrimSuffix(listed(m.Boxes, func(b Box) string { return b.Label }), fmt.Sprintf(" (%d groups)", len(m.Boxes))))
	}
	b.WriteString(".")
	per := make([]int, len(m.Treatments))
	given := 0
	var excluded, lost []string
	values := empty()
	var far Cell
	far.Value = 0
	for _, c := range all {
		if c.Empty {
			continue
		}
		if c.Excluded {
			excluded = append(excluded, title(c.Unit, c.Number))
		} else if c.Lost {
			lost = append(lost, title(c.Unit, c.Number))
		} else if m.Shade != "" && drawable(c.Value) {
			values.add(c.Value)
			if math.Abs(c.Value) > math.Abs(far.Value) {
				far = c
			}
		}
		if c.Treatment >= 0 && c.Treatment < len(per) {
			per[c.Treatment]++
			given++
		}
	}
	what := title(m.What, "treatment")
	switch {
	case given == 0:
	case slices.Min(per) == slices.Max(per):
		fmt.Fprintf(&b, " Each of %s stands on %s.", count(len(per), what), count(per[0], unit))
	case len(per) <= listMost:
		var each []string
		for i, k := range per {
			each = append(each, fmt.Sprintf("%s on %d", clean(m.Treatments[i]), k))
		}
		fmt.Fprintf(&b, " %ss: %s.", capital(what), strings.Join(each, ", "))
	default:
		fmt.Fprintf(&b, " %s, each on %d to %d %s.", count(len(per), what), slices.Min(per), slices.Max(per), unit+"s")
	}
	if !values.empty() {
		fmt.Fprintf(&b, " The cells are shaded by %s, from %s to %s", clean(m.Shade), rounded(values.lo), rounded(values.hi))
		if far.Unit != "" {
			fmt.Fprintf(&b, "; the farthest from nought is %s (%s)", clean(far.Unit), rounded(far.Value))
		}
		b.WriteString(".")
	}
	for _, out := range []struct {
		units []string
		how   string
	}{{excluded, "excluded and crossed out"}, {lost, "without a value and struck through"}} {
		k := len(out.units)
		if k == 0 {
			continue
		}
		fmt.Fprintf(&b, " %s %s", count(k, unit), out.how)
		for i, u := range out.units {
			out.units[i] = clean(u)
		}
		fmt.Fprintf(&b, ": %s", some(out.units))
		b.WriteString(".")
	}
	if n > mostCells {
		fmt.Fprintf(&b, " Only the first %d are drawn.", mostCells)
	}
	return b.String()
}
