package figure

import (
	"fmt"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/render/doc"
)

// Flow shows how many units each treatment had at each stage, from what was planned to
// what was analysed.
type Flow struct {
	Size
	Unit   string // what is counted, such as "pen"
	Stages []string
	Rows   []FlowRow
}

// FlowRow is one treatment: a count for each stage, and for each step between stages,
// in short, why units fell away or came.
type FlowRow struct {
	Label   string
	Counts  []int
	Reasons []string
	folded  bool // several treatments together
}

const (
	mostRows = 58 // treatments that a flow shows one by one
	foldFrom = 16 // above so many, those that lost nothing are counted together
	flowHead = 26 // height of the names of the stages
	flowFoot = 4
	boxHigh  = 15
)

// flowing is a flow with its measures.
type flowing struct {
	rows    []FlowRow
	names   [][]string
	signs   float64 // width of the names
	boxW    float64
	boxH    float64
	at      []float64         // the left edges of the boxes of each stage
	letters map[string]string // that stand for the reasons, where these have no room
	compact bool              // what changed stands on the arrow, not above and below it
	up      []float64
	down    []float64 // the reach of each row above and below its middle
	key     key
}

// Draw gives the picture, and the same in words.
func (f Flow) Draw() (*doc.Picture, string) {
	k := len(f.Stages)
	alt := f.words()
	if k == 0 || len(f.Rows) == 0 {
		return note(f.Size, "No units to count."), alt
	}
	w, _ := f.resolve(0)
	most := float64(pageHeight)
	if f.Height > 0 {
		_, most = f.resolve(0)
	}
	g, ok := f.measure(w, most)
	if !ok {
		return note(f.Size, "Too many treatments for the height of this picture."), alt
	}
	h := flowHead + flowFoot + g.tall()
	if f.Height > 0 { // the rows share what is left
		extra := (most - h) / float64(2*len(g.rows))
		for i := range g.rows {
			g.up[i], g.down[i] = g.up[i]+extra, g.down[i]+extra
		}
		h = most
	}
	c := newCanvas(w, h+g.key.tall)
	centre := func(s int) float64 { return g.at[s] + g.boxW/2 }
	for s, name := range f.Stages {
		// A name may reach half way to those beside it, and not over the edge.
		room := g.boxW + 8
		if s > 0 && s < k-1 {
			room = min(g.at[s]-g.at[s-1], g.at[s+1]-g.at[s]) - 6
		}
		lines, _ := wrap(name, max(room, g.boxW), textSize, 2)
		for i, l := range lines {
			half := width(l, textSize, false) / 2
			x := min(max(centre(s), half+1), w-half-1)
			c.text(x, flowHead-6-textSize*leading*float64(len(lines)-1-i), center, style{size: textSize, colour: ink}, l)
		}
	}
	y := float64(flowHead)
	for i, r := range g.rows {
		mid := y + g.up[i]
		last := i == len(g.rows)-1 && len(f.Rows) > 1
		if last {
			c.stroke(line{width: thin, colour: ink}, segment(0, y, w, y)...)
		}
		base := mid + capHeight(textSize)/2 - textSize*leading*float64(len(g.names[i])-1)/2
		for _, l := range g.names[i] {
			c.text(0, base, left, style{size: textSize, bold: last, colour: ink}, l)
			base += textSize * leading
		}
		first := 0
		if len(r.Counts) > 0 {
			first = r.Counts[0]
		}
		for s := range min(k, len(r.Counts)) {
			x := centre(s) - g.boxW/2
			n := r.Counts[s]
			c.mark(fmt.Sprintf("%s, %s", clean(r.Label), clean(f.Stages[s])))
			// How much of the first stage is left fills the box.
			if first > 0 && n > 0 {
				share := min(float64(n)/float64(first), 1)
				c.fill(tint(palette[0], 0.2), rectangle(x, mid-g.boxH/2, g.boxW*share, g.boxH)...)
			}
			c.stroke(line{width: thin, colour: grey}, rectangle(x, mid-g.boxH/2, g.boxW, g.boxH)...)
			size := min(textSize, max(leastSize, g.boxH/leading))
			c.text(centre(s), mid+capHeight(size)/2, center, style{size: size, bold: last, colour: ink}, fit(num.Count(n), g.boxW-2, size, last))
			c.mark("")
			if s+1 < min(k, len(r.Counts)) {
				c.arrow(x+g.boxW+2, g.at[s+1]-2, mid, r.change(s), g.reason(r, s), g.compact)
			}
		}
		y += g.up[i] + g.down[i]
	}
	g.key.draw(c, 0, h)
	return c.pic, alt
}

// measure finds how the rows are set so that all is no higher than most: first with what
// changed above and below the arrows, then on them; the names on a line, on several,
// numbered, or at the last shortened. Reasons that have no room become letters.
func (f Flow) measure(w, most float64) (*flowing, bool) {
	most -= flowHead + flowFoot
	rows := f.rows(mostRows)
	for {
		names := make([]string, len(rows))
		var reasons []string
		for i, r := range rows {
			names[i] = clean(r.Label)
			for s := range f.Stages {
				if why := r.reason(s); why != "" && r.change(s) != 0 && !slices.Contains(reasons, why) {
					reasons = append(reasons, why)
				}
			}
		}
		var why []entry
		letters := map[string]string{}
		for i, reason := range reasons {
			letters[reason] = strings.ToLower(letter(i))
			why = append(why, entry{sign: letters[reason], name: reason})
		}
		try := func(names [][]string, entries []entry, compact bool) *flowing {
			g := &flowing{rows: rows, compact: compact, names: names}
			named := newList(entries)
			if !compact && g.arrange(f, w, most) {
				// All reasons have room in full.
				if g.key = named.key(w-2, most-g.tall()); g.key.complete && g.tall()+g.key.tall <= most {
					return g
				}
			}
			g.letters = letters
			g.arrange(f, w, most)
			g.key = newList(append(entries[:len(entries):len(entries)], why...)).key(w-2, most-g.tall())
			if g.key.complete && g.tall()+g.key.tall <= most {
				return g
			}
			return nil
		}
		signs := make([][]string, len(names))
		var entries []entry
		for i, n := range names {
			signs[i] = []string{n}
			if sum := i == len(rows)-1 && len(f.Rows) > 1; !sum && !rows[i].folded {
				signs[i] = []string{number(i)}
				entries = append(entries, entry{sign: number(i), name: n})
			}
		}
		for _, compact := range []bool{false, true} {
			for lines := 1; lines <= 4; lines++ {
				broken, whole := allFit(names, w*0.36, lines)
				if !whole {
					continue
				}
				if g := try(broken, nil, compact); g != nil {
					return g, true
				}
				break
			}
			if g := try(signs, entries, compact); g != nil {
				return g, true
			}
		}
		g := &flowing{rows: rows, compact: true, letters: letters}
		for _, n := range names {
			g.names = append(g.names, []string{shorten(n, w*0.36, textSize)})
		}
		g.arrange(f, w, most)
		if g.key = newList(why).key(w-2, most-g.tall()); g.tall()+g.key.tall <= most {
			return g, true
		}
		if len(rows) <= 2 {
			g.key = key{}
			return g, g.tall() <= most
		}
		rows = f.rows(len(rows) / 2)
	}
}

// reason is what stands at a step of a row.
func (g *flowing) reason(r FlowRow, s int) string {
	why := r.reason(s)
	if l, ok := g.letters[why]; ok {
		return l
	}
	return why
}

func (g *flowing) tall() float64 {
	sum := 0.0
	for i := range g.up {
		sum += g.up[i] + g.down[i]
	}
	return sum
}

// arrange finds the places of the stages and the heights of the rows. Steps at which
// something changed are wider. whole says that all reasons have room.
func (g *flowing) arrange(f Flow, w, most float64) (whole bool) {
	k := len(f.Stages)
	g.signs = 0
	for i, ls := range g.names {
		for _, l := range ls {
			g.signs = max(g.signs, width(l, textSize, i == len(g.names)-1 && len(f.Rows) > 1))
		}
	}
	g.signs = min(g.signs, w*0.4) + 8
	room := w - g.signs - 1
	g.boxW = min(46, room/(float64(k)*1.6))
	g.boxH = boxHigh
	room -= g.boxW * float64(k)
	weight, sum := make([]float64, k), 0.0
	for s := range k - 1 {
		weight[s] = 1
		for _, r := range g.rows {
			if r.change(s) != 0 {
				weight[s] = 2.2
			}
		}
		sum += weight[s]
	}
	g.at = make([]float64, k)
	g.at[0] = g.signs
	for s := range k - 1 {
		g.at[s+1] = g.at[s] + g.boxW + room*weight[s]/sum
	}
	g.up, g.down = make([]float64, len(g.rows)), make([]float64, len(g.rows))
	if g.compact {
		pitch := (most - 0.5) / float64(len(g.rows))
		deep := float64(deepest(g.names)) * textSize * leading
		pitch = max(min(pitch, 14), deep, leastPitch)
		if len(g.letters) > 0 { // the key needs room as well
			pitch = max(deep, leastPitch+1)
		}
		g.boxH = min(boxHigh, pitch-1.5)
		for i := range g.rows {
			g.up[i], g.down[i] = pitch/2, pitch/2
		}
		return true
	}
	whole = true
	for i, r := range g.rows {
		up, down := boxHigh/2+3.0, boxHigh/2+3.0
		for s := range k - 1 {
			if r.change(s) == 0 {
				continue
			}
			up = max(up, 2.2+noteSize*leading)
			if reason := g.reason(r, s); reason != "" {
				lines, fits := wrap(reason, g.at[s+1]-g.at[s]-g.boxW-10, noteSize, 4)
				whole = whole && fits
				down = max(down, 1.5+noteSize*leading*float64(len(lines))+2.5)
			}
		}
		half := float64(len(g.names[i])) * textSize * leading / 2
		g.up[i], g.down[i] = max(up, half+1), max(down, half+1)
	}
	return whole
}

// change is by how much a row changes after a stage.
func (r FlowRow) change(s int) int {
	if s+1 >= len(r.Counts) {
		return 0
	}
	return r.Counts[s+1] - r.Counts[s]
}

func (r FlowRow) reason(s int) string {
	if s >= len(r.Reasons) {
		return ""
	}
	return clean(r.Reasons[s])
}

// arrow leads from one stage to the next, with what changed above it and why below, or
// both on it.
func (c *canvas) arrow(x0, x1, y float64, change int, reason string, compact bool) {
	if x1-x0 < 6 {
		return
	}
	c.stroke(line{width: 0.7, colour: grey}, segment(x0, y, x1-2, y)...)
	c.fill(grey, polyline(true, [2]float64{x1, y}, [2]float64{x1 - 4, y - 1.9}, [2]float64{x1 - 4, y + 1.9})...)
	if change == 0 {
		return
	}
	s := num.Count(change)
	if change > 0 {
		s = "+" + s
	}
	mid, most := (x0+x1)/2, x1-x0-6
	if compact {
		if most -= 6; width(s, leastSize, true) > most {
			return
		}
		room := most - width(s, leastSize, true) - 4
		if reason = fit(reason, room, leastSize, false); room < 8 {
			reason = ""
		}
		wide := width(s, leastSize, true)
		if reason != "" {
			wide += 3 + width(reason, leastSize, false)
		}
		x, base := mid-2-wide/2, y+capHeight(leastSize)/2
		c.fill(paper, rectangle(x-2, y-1, wide+4, 2)...)
		c.text(x, base, left, style{size: leastSize, bold: true, colour: ink}, s)
		c.text(x+wide, base, right, style{size: leastSize, colour: ink}, reason)
		return
	}
	if s = fit(s, most, noteSize, true); s == "" {
		return
	}
	c.text(mid, y-2.2, center, style{size: noteSize, bold: true, colour: ink}, s)
	lines, _ := wrap(reason, most, noteSize, 4)
	for i, l := range lines {
		c.text(mid, y+1.5+noteSize*(ascent+leading*float64(i)), center, style{size: noteSize, colour: ink}, l)
	}
}

// rows are those shown: all, or where they are many those that changed, at most so many,
// and the others together; then the sum.
func (f Flow) rows(most int) []FlowRow {
	shown := f.Rows
	if len(shown) > min(most, foldFrom) {
		shown = nil
		var others []FlowRow
		lost := false
		for _, r := range f.Rows {
			if r.changed() && len(shown) < most-1 {
				shown = append(shown, r)
				continue
			}
			others = append(others, r)
			lost = lost || r.changed()
		}
		switch {
		case len(others) == 1:
			shown = append(shown, others[0])
		case len(others) > 1:
			label := "others"
			if len(shown) == 0 {
				label = "treatments"
			}
			label = fmt.Sprintf("%s %s", num.Count(len(others)), label)
			if !lost {
				label += ", nothing lost"
			}
			r := f.sum(label, others)
			r.folded = true
			shown = append(shown, r)
		}
	}
	if len(f.Rows) < 2 {
		return shown
	}
	return append(shown[:len(shown):len(shown)], f.sum("all", f.Rows))
}

func (r FlowRow) changed() bool {
	for i := 1; i < len(r.Counts); i++ {
		if r.Counts[i] != r.Counts[0] {
			return true
		}
	}
	return false
}

func (f Flow) sum(label string, rows []FlowRow) FlowRow {
	out := FlowRow{Label: label, Counts: make([]int, len(f.Stages))}
	for _, r := range rows {
		for s := range min(len(r.Counts), len(f.Stages)) {
			out.Counts[s] += r.Counts[s]
		}
	}
	return out
}

func (f Flow) words() string {
	var b strings.Builder
	all := f.sum("all", f.Rows)
	fmt.Fprintf(&b, "Flow of %ss over %s", title(f.Unit, "unit"), count(len(f.Rows), "treatment"))
	sep := ": "
	for s, n := range all.Counts {
		fmt.Fprintf(&b, "%s%s %s", sep, num.Count(n), clean(f.Stages[s]))
		sep = ", "
	}
	b.WriteString(".")
	if k := len(all.Counts); k > 1 {
		switch lost := all.Counts[0] - all.Counts[k-1]; {
		case lost > 0:
			fmt.Fprintf(&b, " %s lost on the way.", num.Count(lost))
		case lost == 0 && !slices.ContainsFunc(f.Rows, FlowRow.changed):
			b.WriteString(" None was lost.")
		}
	}
	var each []string
	left := 0
	for _, r := range f.Rows {
		if !r.changed() {
			continue
		}
		var one strings.Builder
		fmt.Fprintf(&one, " %s:", clean(r.Label))
		sep := " "
		for s, n := range r.Counts {
			if s == len(f.Stages) {
				break
			}
			one.WriteString(sep + num.Count(n))
			if s > 0 && r.change(s-1) != 0 && r.reason(s-1) != "" {
				fmt.Fprintf(&one, " (%s)", r.reason(s-1))
			}
			sep = ", "
		}
		one.WriteString(".")
		if each = append(each, one.String()); !short(each) {
			each = each[:len(each)-1]
			left++
		}
	}
	b.WriteString(strings.Join(each, ""))
	if left > 0 {
		fmt.Fprintf(&b, " %s more changed.", count(left, "treatment"))
	}
	return b.String()
}
