package figure

import (
	"fmt"
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
}

// mostRows is how many treatments a flow shows one by one.
const mostRows = 40

// Draw gives the picture, and the same in words.
func (f Flow) Draw() (*doc.Picture, string) {
	k := len(f.Stages)
	alt := f.words()
	if k == 0 || len(f.Rows) == 0 {
		return note(f.Size, "No units to count."), alt
	}
	rows := f.rows()
	pitch := 25.0
	switch {
	case len(rows) > 22:
		pitch = 15
	case len(rows) <= 14 && f.wordy():
		pitch = 40
	}
	const top = 30.0
	w, h := f.resolve(top + pitch*float64(len(rows)) + 6)
	pitch = (h - top - 6) / float64(len(rows))
	c := newCanvas(w, h)
	names := 0.0
	for _, r := range rows {
		names = max(names, width(fit(r.Label, w*0.3, textSize, false), textSize, false))
	}
	names += 8
	boxW := min(46, (w-names-2)/(float64(k)*1.6))
	boxH := min(15, pitch-4)
	step := boxW
	if k > 1 {
		step = (w - names - boxW - 2) / float64(k-1)
	}
	size := min(textSize, boxH/leading)
	if size < 3 {
		return note(f.Size, "Too many treatments for the height of this picture."), alt
	}
	centre := func(s int) float64 { return names + boxW/2 + step*float64(s) }
	for s, name := range f.Stages {
		most := step - 6
		if s == 0 || s == k-1 {
			// The outer columns have only half a step to spare at the edge.
			most = min(most, boxW+8)
		}
		lines, _ := wrap(name, max(most, boxW), textSize, 2)
		for i, l := range lines {
			x := centre(s)
			half := width(l, textSize, false) / 2
			x = min(max(x, half+1), w-half-1)
			c.text(x, top-8-textSize*leading*float64(len(lines)-1-i), center, style{size: textSize, colour: ink}, l)
		}
	}
	for i, r := range rows {
		mid := top + pitch*(float64(i)+0.5)
		last := i == len(rows)-1 && len(f.Rows) > 1
		if last {
			c.stroke(line{width: thin, colour: ink}, segment(0, mid-pitch/2, w, mid-pitch/2)...)
		}
		c.text(0, mid+capHeight(size)/2, left, style{size: size, bold: last, colour: ink}, fit(r.Label, names-6, size, last))
		first := 0
		if len(r.Counts) > 0 {
			first = r.Counts[0]
		}
		for s := range min(k, len(r.Counts)) {
			x := centre(s) - boxW/2
			n := r.Counts[s]
			c.mark(fmt.Sprintf("%s, %s", clean(r.Label), clean(f.Stages[s])))
			// How much of the first stage is left fills the box.
			if first > 0 && n > 0 {
				share := min(float64(n)/float64(first), 1)
				c.fill(tint(palette[0], 0.2), rectangle(x, mid-boxH/2, boxW*share, boxH)...)
			}
			c.stroke(line{width: thin, colour: grey}, rectangle(x, mid-boxH/2, boxW, boxH)...)
			c.text(centre(s), mid+capHeight(size)/2, center, style{size: size, bold: last, colour: ink}, fit(num.Count(n), boxW-2, size, last))
			c.mark("")
			if s+1 < min(k, len(r.Counts)) {
				reason := ""
				if s < len(r.Reasons) {
					reason = r.Reasons[s]
				}
				c.arrow(x+boxW+2, centre(s+1)-boxW/2-2, mid, n, r.Counts[s+1], reason, pitch)
			}
		}
	}
	return c.pic, alt
}

// arrow leads from one stage to the next, with what changed above it and why below.
func (c *canvas) arrow(x0, x1, y float64, from, to int, reason string, pitch float64) {
	if x1-x0 < 6 {
		return
	}
	c.stroke(line{width: 0.7, colour: grey}, segment(x0, y, x1-2, y)...)
	c.fill(grey, polyline(true, [2]float64{x1, y}, [2]float64{x1 - 4, y - 1.9}, [2]float64{x1 - 4, y + 1.9})...)
	if from == to {
		return
	}
	size := min(noteSize, (pitch-3)/2/leading)
	if size < 4 {
		return
	}
	s := num.Count(to - from)
	if to > from {
		s = "+" + s
	}
	mid, most := (x0+x1)/2, x1-x0-6
	c.text(mid, y-2.2, center, style{size: size, bold: true, colour: ink}, fit(s, most, size, true))
	lines, _ := wrap(reason, most, size, max(int((pitch/2-1)/(size*leading)), 1))
	for i, l := range lines {
		c.text(mid, y+1.5+size*(ascent+leading*float64(i)), center, style{size: size, colour: ink}, l)
	}
}

// wordy says whether a reason is longer than a line between two stages.
func (f Flow) wordy() bool {
	w, _ := f.resolve(0)
	for _, r := range f.Rows {
		for _, s := range r.Reasons {
			if width(clean(s), noteSize, false) > w*0.14 {
				return true
			}
		}
	}
	return false
}

// rows are those shown: all, or where they are too many those that changed, the others
// together; then the sum.
func (f Flow) rows() []FlowRow {
	shown := f.Rows
	if len(shown) > mostRows {
		shown = nil
		var others []FlowRow
		for _, r := range f.Rows {
			if r.changed() && len(shown) < mostRows-1 {
				shown = append(shown, r)
			} else {
				others = append(others, r)
			}
		}
		shown = append(shown, f.sum(fmt.Sprintf("%d others", len(others)), others))
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
	told := 0
	for _, r := range f.Rows {
		if !r.changed() || told == listMost {
			continue
		}
		told++
		fmt.Fprintf(&b, " %s:", clean(r.Label))
		sep := " "
		for s, n := range r.Counts {
			if s == len(f.Stages) {
				break
			}
			b.WriteString(sep + num.Count(n))
			if s > 0 && n != r.Counts[s-1] && s-1 < len(r.Reasons) && r.Reasons[s-1] != "" {
				fmt.Fprintf(&b, " (%s)", clean(r.Reasons[s-1]))
			}
			sep = ", "
		}
		b.WriteString(".")
	}
	return b.String()
}
