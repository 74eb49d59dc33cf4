package figure

import (
	"fmt"
	"strings"

	"gonum.org/v1/plot"

	"penwright/render/doc"
)

// Interaction shows the means of one factor over the levels of another, a line for each
// level of the first.
type Interaction struct {
	Size
	Response string
	By       string    // the factor along the axis
	Levels   []string  // its levels
	X        []float64 // its doses; nil: the levels stand evenly
	Over     string    // the factor of the lines
	Lines    []Line
	// Bar is the length of one bar drawn in a corner, such as a standard error of a
	// difference; 0: none. BarLabel says what it is.
	Bar      float64
	BarLabel string
}

// Line is the means of one level over those of the other factor, NaN where there is none.
type Line struct {
	Label  string
	Values []float64
}

// Draw gives the picture, and the same in words.
func (n Interaction) Draw() (*doc.Picture, string) {
	alt := n.words()
	values, xs := empty(), empty()
	labels := 0.0
	scale := len(n.X) == len(n.Levels) && len(n.X) > 0
	place := func(i int) float64 {
		if scale {
			return n.X[i]
		}
		return float64(i)
	}
	for _, l := range n.Lines {
		labels = max(labels, width(clean(l.Label), textSize, false))
		for i, v := range l.Values {
			if i < len(n.Levels) && drawable(v) && drawable(place(i)) {
				values.add(v)
				xs.add(place(i))
			}
		}
	}
	if values.empty() {
		return note(n.Size, "No means to draw."), alt
	}
	w, h := n.resolve(min(max(250, float64(len(n.Lines))*textSize*leading+60), pageHeight))
	end := min(labels, w*0.28) + 24
	bar := drawable(n.Bar) && n.Bar > 0
	if bar {
		// A bar that is longer than all the data are wide needs room of its own.
		mid := values.lo/2 + values.hi/2
		values.add(mid-n.Bar/2, mid+n.Bar/2)
	}
	c := newCanvas(w, h)
	y := numbers(n.Response, values.padded(0.07), h-45, false)
	room := across(w, end, y)
	var x axis
	if scale {
		var ms []Mean
		for i, l := range n.Levels {
			ms = append(ms, Mean{Label: l, X: n.X[i]})
		}
		x = doseAxis(n.By, ms, xs.padded(0.04), room)
	} else {
		x = axis{title: clean(n.By), span: span{lo: -0.4, hi: float64(len(n.Levels)) - 0.6}, bare: true}
		pitch := room / float64(len(n.Levels))
		wrapped := make([]string, len(n.Levels))
		every := 1
		for i, l := range n.Levels {
			lines, whole := wrap(l, pitch-4, textSize, 3)
			if !whole && pitch < 45 {
				// Names that have no room in their own place are set less densely.
				most := min(width(clean(l), textSize, false), 90)
				every = max(every, int((most+4)/pitch)+1)
			}
			wrapped[i] = strings.Join(lines, "\n")
		}
		for i := 0; i < len(n.Levels); i += every {
			label := wrapped[i]
			if every > 1 {
				// The first and the last have half a place and the margin beside them.
				label = fit(n.Levels[i], min(pitch*float64(every)-4, pitch+14), textSize, false)
			}
			x.ticks = append(x.ticks, plot.Tick{Value: float64(i), Label: label})
		}
	}
	top := 5.0
	if bar {
		top = 8
	}
	f := newFrame(c, x, y, insets{right: end, top: top})

	var which []int
	var from [][2]float64 // where the lines end
	for k, l := range n.Lines {
		var ordered []float64
		var at []int
		for i := range min(len(l.Values), len(n.Levels)) {
			if drawable(l.Values[i]) && drawable(place(i)) {
				ordered = append(ordered, place(i))
				at = append(at, i)
			}
		}
		var px, py []float64
		for _, i := range byValue(ordered) {
			px = append(px, place(at[i]))
			py = append(py, l.Values[at[i]])
		}
		if len(px) == 0 {
			continue
		}
		shape, colour := symbol(k)
		f.mark(l.Label)
		f.curve(px, py, line{width: 1.2, dashes: dash(k), colour: colour})
		for i := range px {
			f.marker(shape, f.x(px[i]), f.y(py[i]), 2.6, colour)
		}
		last := len(px) - 1
		from, which = append(from, [2]float64{f.x(px[last]), f.y(py[last])}), append(which, k)
	}
	f.ends(which, from, func(k int) string { return n.Lines[k].Label })
	f.mark("")
	if bar {
		f.bar(n.Bar, fit(n.BarLabel, room*0.6, noteSize, false), n.crowd(f, place))
	}
	return c.pic, alt
}

// ends writes the names of lines, with their marks, beside where they end. Where there
// are more than the height has room for, none are written: a part would mislead.
func (f *frame) ends(which []int, from [][2]float64, name func(int) string) {
	at := make([]float64, len(from))
	for i, p := range from {
		at[i] = p[1]
	}
	ys := spread(at, textSize*leading, f.y0+textSize/2, f.y1-textSize/2)
	for i, y := range ys {
		k := which[i]
		shape, colour := symbol(k)
		f.mark(name(k))
		f.leader(from[i][0]+5, from[i][1], f.x1+4, y)
		f.marker(shape, f.x1+9, y, 2.3, colour)
		f.text(f.x1+15, y+capHeight(textSize)/2, left, style{size: textSize, colour: ink}, fit(name(k), f.pic.Width-f.x1-16, textSize, false))
	}
}

// crowd lists the places of all means.
func (n Interaction) crowd(f *frame, place func(int) float64) [][2]float64 {
	var out [][2]float64
	for _, l := range n.Lines {
		for i := range min(len(l.Values), len(n.Levels)) {
			if drawable(l.Values[i]) && drawable(place(i)) {
				out = append(out, [2]float64{f.x(place(i)), f.y(l.Values[i])})
			}
		}
	}
	return out
}

// bar draws a bar of a length on the axis of values in whichever upper or lower corner
// is emptiest.
func (f *frame) bar(length float64, label string, crowd [][2]float64) {
	tall := length / (f.v.hi - f.v.lo) * (f.y1 - f.y0)
	wide := 12 + width(label, noteSize, false)
	deep := max(tall, noteSize*leading)
	var best box
	least := -1
	for _, corner := range [][2]bool{{false, false}, {true, false}, {false, true}, {true, true}} {
		b := box{x0: f.x0 + 4, y0: f.y0 + 2}
		if corner[0] {
			b.x0 = f.x1 - wide - 4
		}
		if corner[1] {
			b.y0 = f.y1 - deep - 2
		}
		b.x1, b.y1 = b.x0+wide, b.y0+deep
		n := 0
		for _, p := range crowd {
			if p[0] > b.x0-6 && p[0] < b.x1+6 && p[1] > b.y0-6 && p[1] < b.y1+6 {
				n++
			}
		}
		if least < 0 || n < least {
			least, best = n, b
		}
	}
	x, mid := best.x0+4, (best.y0+best.y1)/2
	path := segment(x, mid-tall/2, x, mid+tall/2)
	path = append(path, segment(x-3, mid-tall/2, x+3, mid-tall/2)...)
	path = append(path, segment(x-3, mid+tall/2, x+3, mid+tall/2)...)
	f.stroke(line{width: medium, colour: ink}, path...)
	f.text(x+7, mid+capHeight(noteSize)/2, left, style{size: noteSize, colour: ink}, label)
}

func (n Interaction) words() string {
	var b strings.Builder
	s := empty()
	for _, l := range n.Lines {
		for i, v := range l.Values {
			if i < len(n.Levels) {
				s.add(v)
			}
		}
	}
	fmt.Fprintf(&b, "%s: means over %s", title(n.Response, "Values"), title(n.By, "the first factor"))
	b.WriteString(listed(n.Levels, func(l string) string { return l }))
	fmt.Fprintf(&b, ", one line for each of %s of %s", count(len(n.Lines), "level"), title(n.Over, "the other factor"))
	b.WriteString(listed(n.Lines, func(l Line) string { return l.Label }))
	if !s.empty() {
		fmt.Fprintf(&b, ", from %s to %s", rounded(s.lo), rounded(s.hi))
	}
	b.WriteString(".")
	if len(n.Lines)*len(n.Levels) <= 2*listMost {
		for _, l := range n.Lines {
			var vs []string
			for i, v := range l.Values {
				if i < len(n.Levels) {
					vs = append(vs, rounded(v))
				}
			}
			fmt.Fprintf(&b, " %s: %s.", clean(l.Label), strings.Join(vs, ", "))
		}
	}
	if drawable(n.Bar) && n.Bar > 0 {
		fmt.Fprintf(&b, " The single bar is %s, %s.", title(n.BarLabel, "a standard error"), rounded(n.Bar))
	}
	return b.String()
}
