package page

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"penwright/protocol/diag"
	"penwright/render/face"
)

// placed is a box on a page.
type placed struct {
	box *box
	y   float64
}

// sheet is a page being filled.
type sheet struct {
	turned bool
	placed []placed
	notes  []*box
}

// pager distributes boxes over pages.
type pager struct {
	s       *setter
	sheets  []*sheet
	cur     *sheet
	y       float64 // the foot of the last box
	below   float64 // space that wants to be below it
	used    float64 // height taken by footnotes at the foot
	called  []bool  // footnotes already on a page
	carry   []*box  // lines of footnotes that are left over from the page before
	waiting []item  // figures and turned tables on their way to the next page
}

const noteRuleSpace = 10.0 // rule and air above the footnotes

func newPager(s *setter) *pager {
	return &pager{s: s, called: make([]bool, len(s.notes)+1)}
}

func (p *pager) run(items []item) {
	p.open(false)
	for i := 0; i < len(items); i++ {
		it := items[i]
		if i+1 < len(items) && it.figure != nil && it.heading > 0 && items[i+1].text() && it.below.heading == 0 && !p.fits(it.boxes) {
			// The text under a heading goes on, its figure follows on the next page.
			after := items[i+1]
			after.boxes, after.heading = under(it.head, after.boxes), it.heading
			p.item(after)
			p.item(*it.below)
			i++
			continue
		}
		p.item(it)
	}
	for len(p.waiting) > 0 {
		p.turn()
	}
	for len(p.carry) > 0 {
		p.open(false)
	}
	for n := len(p.sheets); n > 1 && p.empty(p.sheets[n-1]); n = len(p.sheets) {
		p.sheets = p.sheets[:n-1]
	}
}

func (p *pager) empty(s *sheet) bool { return len(s.placed) == 0 && len(s.notes) == 0 }

func (p *pager) room() float64 { return p.s.pageHeight(p.cur.turned) - p.used - p.y }

func (p *pager) item(it item) {
	switch {
	case it.turned:
		p.waiting = append(p.waiting, it)
		if it.heading > 0 {
			p.flush() // it carries the heading of its section
		}
		return
	case it.figure != nil && it.heading > 0:
		// The heading cannot run ahead of the text, so nothing floats.
		if p.awaits(true) || len(p.waiting) > 0 && p.barrier(it) {
			p.flush()
		}
		if !p.fits(it.boxes) {
			it.boxes = it.figure(p.room() - 1)
			if !p.fits(it.boxes) || total(it.boxes) < 0.85*total(it.figure(p.s.pageHeight(false))) {
				p.turn()
				it.boxes = it.figure(p.room() - 1)
			}
		}
		p.flow(it.boxes)
		return
	case it.figure != nil, it.table && it.heading == 0 && total(it.boxes) < 0.4*p.s.pageHeight(false):
		p.float(it)
		return
	case len(p.waiting) > 0 && p.barrier(it):
		p.flush()
	}
	if it.squeeze != nil {
		it.boxes = it.squeeze(p.room() - max(it.boxes[0].gap, p.below))
	}
	p.flow(it.boxes)
}

// float places a figure or a small table here, or else on the next page, while the text
// goes on. Figures and tables keep their order each among themselves.
func (p *pager) float(it item) {
	if !p.awaits(it.figure != nil) {
		if p.fits(it.boxes) {
			p.place(it.boxes)
			return
		}
		// A little smaller is better than a hole in the page.
		if it.figure != nil && len(p.cur.placed) > 0 && p.room() > 0.85*total(it.boxes) {
			if smaller := it.figure(p.room() - 1); p.fits(smaller) {
				p.place(smaller)
				return
			}
		}
	}
	p.waiting = append(p.waiting, it)
}

// awaits tells whether a figure, or a table, is on its way to the next page.
func (p *pager) awaits(figure bool) bool {
	for _, w := range p.waiting {
		if (w.figure != nil) == figure {
			return true
		}
	}
	return false
}

// barrier tells whether what waits must come before it: tables keep their order, and
// no section leaves behind what belongs to it, but for a single figure or table at the
// top of the next page, which a section within a chapter may leave to the next one.
func (p *pager) barrier(it item) bool {
	switch {
	case it.table && p.awaits(false) || it.heading == 1 || it.bare:
		return true
	case it.heading > 1:
		return len(p.waiting) > 1 || p.room() < 0.2*p.s.pageHeight(p.cur.turned)
	}
	return false
}

func (p *pager) flush() {
	for len(p.waiting) > 0 {
		p.turn()
	}
}

func total(boxes []box) float64 {
	sum := 0.0
	for i, b := range boxes {
		sum += b.height
		if i > 0 {
			sum += max(b.gap, boxes[i-1].below)
		}
	}
	return sum
}

// fits tells whether boxes and the footnotes they call have room on the page.
func (p *pager) fits(boxes []box) bool {
	height := total(boxes)
	if len(p.cur.placed) > 0 && len(boxes) > 0 {
		height += max(boxes[0].gap, p.below)
	}
	return height+p.noteCost(boxes) <= p.room()+0.01
}

// noteCost is the height of the footnotes that boxes call first, as far as they must
// stand on the same page.
func (p *pager) noteCost(boxes []box) float64 {
	cost := 0.0
	var seen []int
	for _, b := range boxes {
		for _, n := range b.notes {
			if p.called[n] || contains(seen, n) {
				continue
			}
			seen = append(seen, n)
			cost += total(p.s.notes[n-1]) + p.s.notes[n-1][0].gap
		}
	}
	if cost > 0 && len(p.cur.notes) == 0 {
		cost += noteRuleSpace
	}
	return min(cost, p.s.pageHeight(p.cur.turned)/3)
}

func contains(list []int, n int) bool {
	for _, v := range list {
		if v == n {
			return true
		}
	}
	return false
}

// flow places boxes, breaking pages between those that need not be kept together.
func (p *pager) flow(boxes []box) {
	for start := 0; start < len(boxes); {
		end := start + 1
		for end < len(boxes) && boxes[end-1].keep {
			end++
		}
		p.chunk(boxes[start:end])
		start = end
	}
}

// chunk places boxes that belong together, on the next page if this one has no room, or
// on the one after it if what has been waiting fills that.
func (p *pager) chunk(boxes []box) {
	if p.fits(boxes) {
		p.place(boxes)
		return
	}
	if len(p.cur.placed) > 0 && total(boxes) < p.s.pageHeight(p.cur.turned) {
		before := p.cur
		for more := true; more; {
			more = len(p.waiting) > 0
			p.turn()
			heads := p.heads(before, boxes[0].within)
			if all := slices.Concat(heads, boxes); p.fits(all) {
				p.place(all)
				return
			}
		}
		p.place(p.heads(before, boxes[0].within))
	}
	// Higher than a page: break where it must.
	for i := range boxes {
		if !p.fits(boxes[i:i+1]) && len(p.cur.placed) > 0 {
			before := p.cur
			p.turn()
			p.place(p.heads(before, boxes[i].within))
		}
		p.place(boxes[i : i+1])
	}
}

// heads are those to be repeated above a box that goes on what a page ended with.
func (p *pager) heads(before *sheet, within []*band) []box {
	var out []box
	if len(before.placed) == 0 {
		return nil
	}
	for _, b := range within {
		if continues(before, b) && total(b.head) < p.room()/2 {
			out = append(out, b.head...)
		}
	}
	return out
}

func (p *pager) place(boxes []box) {
	for i := range boxes {
		b := &boxes[i]
		if len(p.cur.placed) > 0 {
			p.y += max(b.gap, p.below)
		}
		p.cur.placed = append(p.cur.placed, placed{b, p.y})
		p.y += b.height
		p.below = b.below
		for _, n := range b.notes {
			p.call(n)
		}
	}
}

// call puts a footnote at the foot of the page, as much of it as there is room for.
func (p *pager) call(n int) {
	if p.called[n] {
		return
	}
	p.called[n] = true
	p.s.seat(n)
	boxes := p.s.notes[n-1]
	for i := range boxes {
		p.carry = append(p.carry, &boxes[i])
	}
	for i := range boxes {
		for _, m := range boxes[i].notes {
			p.call(m)
		}
	}
	p.settle(p.s.pageHeight(p.cur.turned) / 3)
}

// settle moves lines of footnotes from what is carried to the foot of the page. The
// first always fits, so that every page takes some.
func (p *pager) settle(most float64) {
	for len(p.carry) > 0 {
		b := p.carry[0]
		need := b.height + b.gap + b.below
		if len(p.cur.notes) == 0 {
			need += noteRuleSpace
		}
		if len(p.cur.notes) > 0 && (p.room() < need || p.used+need > max(most, p.used) && p.used > most) {
			return
		}
		p.cur.notes = append(p.cur.notes, b)
		p.used += need
		p.carry = p.carry[1:]
	}
}

func (p *pager) open(turned bool) {
	p.cur = &sheet{turned: turned}
	p.sheets = append(p.sheets, p.cur)
	p.y, p.below, p.used = 0, 0, 0
	p.settle(p.s.pageHeight(turned) / 2)
}

// turn begins a page with what has been waiting.
func (p *pager) turn() {
	turned := p.cur.turned
	waiting := p.waiting
	p.waiting = nil
	if len(waiting) == 0 {
		p.open(turned)
	}
	for len(waiting) > 0 && waiting[0].turned {
		p.open(true)
		p.flow(waiting[0].boxes)
		waiting = waiting[1:]
		for len(waiting) > 0 && waiting[0].turned && p.fits(waiting[0].boxes) {
			p.place(waiting[0].boxes)
			waiting = waiting[1:]
		}
		if len(waiting) == 0 {
			p.open(false)
		}
	}
	if len(waiting) > 0 {
		p.open(false)
		first := waiting[0]
		if !p.fits(first.boxes) && first.figure != nil {
			first.boxes = first.figure(p.room())
		}
		p.flow(first.boxes)
		for _, it := range waiting[1:] {
			if it.turned {
				p.waiting = append(p.waiting, it)
			} else {
				p.float(it)
			}
		}
	}
}

// continues tells whether the last box of a page stands in a band.
func continues(s *sheet, b *band) bool {
	for _, have := range s.placed[len(s.placed)-1].box.within {
		if have == b {
			return true
		}
	}
	return false
}

// finish turns the filled sheets into pages.
func (p *pager) finish() *Book {
	s := p.s
	book := &Book{Anchors: map[string]Place{}}
	for i, sh := range p.sheets {
		left := marginSide
		pg := Page{Width: s.width, Height: s.height}
		if sh.turned {
			pg.Width, pg.Height = s.height, s.width
		}
		put := func(ops []Op, dy float64) {
			for _, o := range ops {
				pg.Ops = append(pg.Ops, moved(o, left, dy))
			}
		}
		for _, ops := range grounds(sh) {
			put(ops, marginTop)
		}
		mark := func(b *box, y float64) {
			for _, a := range b.anchors {
				if _, taken := book.Anchors[a.id]; !taken {
					book.Anchors[a.id] = Place{Page: i, X: left, Y: y + a.y}
				}
			}
		}
		for k, b := range sh.placed {
			if k > 0 && !sh.placed[k-1].box.again {
				put(b.box.above, marginTop+b.y)
			}
			put(b.box.ops, marginTop+b.y)
			mark(b.box, marginTop+b.y)
		}
		y := pg.Height - marginBottom
		for _, b := range sh.notes {
			y -= b.height + b.gap + b.below
		}
		if len(sh.notes) > 0 {
			pg.Ops = append(pg.Ops, artifact(Box{X: left, Y: y - 4, Width: 72, Height: thin, Colour: ink})...)
		}
		for _, b := range sh.notes {
			y += b.gap
			put(b.ops, y)
			mark(b, y)
			y += b.height + b.below
		}
		book.Pages = append(book.Pages, pg)
	}
	for i, sh := range p.sheets {
		p.numbers(book, i, sh)
		p.running(&book.Pages[i], i, len(p.sheets))
	}
	for _, e := range s.entries {
		place, ok := book.Anchors[e.anchor]
		if !ok {
			continue
		}
		title := e.title
		if e.number != "" {
			title = strings.TrimSpace(e.number + " " + title)
		}
		if strings.TrimSpace(title) == "" {
			continue
		}
		book.Outline = append(book.Outline, Entry{Level: e.level, Title: title, Place: place})
	}
	p.checkLinks(book)
	return book
}

// numbers writes the numbers of pages into the contents.
func (p *pager) numbers(book *Book, i int, sh *sheet) {
	for _, b := range sh.placed {
		at := b.box.pageOf
		if at == nil {
			continue
		}
		place, ok := book.Anchors[at.anchor]
		if !ok {
			continue
		}
		text := fmt.Sprint(place.Page + 1)
		l := line{atoms: p.s.plainAtoms(text, at.style)}
		for _, o := range enclose(at.element, l.draw(at.right-textWidth(text, at.style), at.y)) {
			book.Pages[i].Ops = append(book.Pages[i].Ops, moved(o, marginSide, marginTop+b.y))
		}
	}
}

// grounds gives what bands paint on a page, outer ones first.
func grounds(sh *sheet) [][]Op {
	type stretch struct {
		band        *band
		top, bottom float64
		depth       int
	}
	var all []stretch
	deepest := 0
	for _, b := range sh.placed {
		for depth, w := range b.box.within {
			found := false
			for k := len(all) - 1; k >= 0 && k >= len(all)-8; k-- {
				if all[k].band == w {
					all[k].bottom = b.y + b.box.height
					found = true
					break
				}
			}
			if !found {
				top := b.y
				all = append(all, stretch{w, top, b.y + b.box.height, depth})
				deepest = max(deepest, depth)
			}
		}
	}
	var out [][]Op
	for depth := 0; depth <= deepest; depth++ {
		for _, s := range all {
			if s.depth == depth && s.band.paint != nil {
				out = append(out, s.band.paint(s.top, s.bottom))
			}
		}
	}
	return out
}

// running writes the running head and the foot of page i of n.
func (p *pager) running(pg *Page, i, n int) {
	d := p.s.doc
	st := in(grey, sans(7.5))
	right := pg.Width - marginSide
	set := func(role Role, text string, x, y float64, rightAligned bool) {
		text, _ = face.Clean(text)
		room := pg.Width - 2*marginSide
		atoms := p.s.plainAtoms(text, st)
		l := line{atoms: atoms}
		for k, a := range atoms {
			l.width += a.width
			if k < len(atoms)-1 {
				l.width += a.glue
			}
		}
		if rightAligned {
			x -= math.Min(l.width, room)
		}
		pg.Ops = append(pg.Ops, enclose(&Element{Role: role}, l.draw(x, y))...)
	}
	if i > 0 {
		var parts []string
		for _, t := range []string{d.Code, firstOf(d.ShortTitle, d.Title)} {
			if t != "" {
				parts = append(parts, t)
			}
		}
		status := p.s.shorten(d.Status, st, (right-marginSide)*0.3)
		head := p.s.shorten(strings.Join(parts, "  ·  "), st, (right-marginSide)*0.65)
		set(RunningHead, head, marginSide, headBaseline, false)
		set(RunningHead, status, right, headBaseline, true)
		if head != "" || status != "" {
			pg.Ops = append(pg.Ops, enclose(&Element{Role: RunningHead}, []Op{Box{X: marginSide, Y: headBaseline + 5, Width: right - marginSide, Height: hair, Colour: faint}})...)
		}
	}
	y := pg.Height - footBaseline
	if d.Fingerprint != "" {
		set(RunningFoot, p.s.shorten("Fingerprint "+d.Fingerprint, st, (right-marginSide)*0.65), marginSide, y, false)
	}
	set(RunningFoot, fmt.Sprintf("page %d of %d", i+1, n), right, y, true)
}

func firstOf(list ...string) string {
	for _, s := range list {
		if s != "" {
			return s
		}
	}
	return ""
}

// shorten cuts a text to a width, with an ellipsis.
func (s *setter) shorten(text string, st style, width float64) string {
	clean, missing := face.Clean(text)
	for _, r := range missing {
		s.missing(r, diag.Pos{})
	}
	if textWidth(clean, st) <= width {
		return clean
	}
	runes := []rune(clean)
	low, high := 0, len(runes)
	for low < high {
		mid := (low + high + 1) / 2
		if textWidth(string(runes[:mid])+"…", st) <= width {
			low = mid
		} else {
			high = mid - 1
		}
	}
	return strings.TrimRight(string(runes[:low]), " ") + "…"
}

// checkLinks drops links into the document that lead nowhere, and says so.
func (p *pager) checkLinks(book *Book) {
	told := map[string]bool{}
	for i := range book.Pages {
		kept := book.Pages[i].Ops[:0]
		for _, o := range book.Pages[i].Ops {
			if l, ok := o.(Link); ok {
				if l.Dest == "" || l.Dest == "#" {
					continue
				}
				if id, inside := strings.CutPrefix(l.Dest, "#"); inside {
					if _, known := book.Anchors[id]; !known {
						if !told[id] && len(told) < missingMost {
							told[id] = true
							p.s.diags.Add(diag.Diagnostic{
								Severity: diag.Warning, Code: "dead-link",
								Message: fmt.Sprintf("a link leads to %q, which is nowhere in the document", id),
							})
						}
						continue
					}
				}
			}
			kept = append(kept, o)
		}
		book.Pages[i].Ops = kept
	}
}
