package figure

import (
	"fmt"
	"math"
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
// Low and High are intervals of the means, or nil; lines with intervals stand a little beside
// each other, so that the intervals can be told apart.
type Line struct {
	Label     string
	Values    []float64
	Low, High []float64
}

// interval gives the interval of the mean at i, where there is one.
func (l Line) interval(i int) (lo, hi float64, ok bool) {
	if i >= len(l.Low) || i >= len(l.High) || !drawable(l.Low[i]) || !drawable(l.High[i]) {
		return 0, 0, false
	}
	return l.Low[i], l.High[i], true
}

// Draw gives the picture, and the same in words.
func (n Interaction) Draw() (*doc.Picture, string) {
	alt := n.words()
	values, xs := empty(), empty()
	scale := len(n.X) == len(n.Levels) && len(n.X) > 0
	place := func(i int) float64 {
		if scale {
			return n.X[i]
		}
		return float64(i)
	}
	for _, l := range n.Lines {
		for i, v := range l.Values {
			if i < len(n.Levels) && drawable(v) && drawable(place(i)) {
				values.add(v)
				xs.add(place(i))
				if lo, hi, ok := l.interval(i); ok {
					values.add(lo, hi)
				}
			}
		}
	}
	if values.empty() {
		return note(n.Size, "No means to draw."), alt
	}
	w, high := n.resolve(min(max(250, float64(len(n.Lines))*textSize*leading+60), pageHeight))
	label := func(l Line) string { return l.Label }
	t, h := tagged(n.Size, n.Lines, label, high)
	end := t.wide + 24
	entries := t.key
	bar := drawable(n.Bar) && n.Bar > 0
	if bar {
		// A bar that is longer than all the data are wide needs room of its own.
		mid := values.lo/2 + values.hi/2
		values.add(mid-n.Bar/2, mid+n.Bar/2)
	}
	y := numbers(n.Response, values.padded(0.07), h-foot, false)
	room := across(w, end, y)
	var x axis
	if scale {
		var ms []Mean
		for i, l := range n.Levels {
			ms = append(ms, Mean{Label: l, X: n.X[i]})
		}
		x = doseAxis(n.By, ms, xs.padded(0.04), room)
	} else {
		x = axis{title: titled(n.By, room+40), span: span{lo: -0.4, hi: float64(len(n.Levels)) - 0.6}, bare: true}
		pitch := room / float64(len(n.Levels))
		labels, whole := allFit(n.Levels, pitch-4, 3)
		every := 1
		if !whole {
			labels = make([][]string, len(n.Levels))
			wide := 0.0
			for i := range labels {
				labels[i] = []string{number(i)}
				wide = max(wide, width(number(i), textSize, false)+3)
			}
			entries = append(numbered(n.Levels, number), entries...)
			every = max(int(math.Ceil(wide/pitch)), 1)
		}
		for i := 0; i < len(n.Levels); i += every {
			x.ticks = append(x.ticks, plot.Tick{Value: float64(i), Label: strings.Join(labels[i], "\n")})
		}
	}
	top := 5.0
	if bar {
		top = 8
	}
	k, low := n.above(newList(entries), h)
	if low < h {
		h = low
		y = numbers(n.Response, values.padded(0.07), h-foot, false)
		if t = newTags(n.Lines, label, w*0.3, h-foot-10); t.labels == nil {
			entries = append(entries[:len(entries)-len(t.key):len(entries)-len(t.key)], t.key...)
			k = newList(entries).key(w-2, pageHeight-h)
		}
	}
	barLabel := fit(n.BarLabel, room*0.6, noteSize, false)
	if bar {
		// The bar has a corner to itself.
		try := newFrame(newCanvas(w, h), x, y, insets{right: end, top: top})
		if _, met := try.corner(n.Bar, barLabel, n.crowd(try, place)); met > 0 {
			more := 1.2 * max(n.Bar, (try.v.hi-try.v.lo)*(noteSize*leading+8)/(try.y1-try.y0))
			values.add(values.hi + more)
			y = numbers(n.Response, values.padded(0.04), h-foot, false)
		}
	}
	c := newCanvas(w, h+k.tall)
	f := newFrame(c, x, y, insets{right: end, top: top, bottom: k.tall})
	k.draw(c, 1, h)

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
		aside := 0.0
		if l.Low != nil && len(n.Lines) > 1 {
			aside = (float64(k) - float64(len(n.Lines)-1)/2) * min(4, 14/float64(len(n.Lines)-1))
			for i := range px {
				px[i] += aside * (f.h.hi - f.h.lo) / (f.x1 - f.x0)
			}
		}
		for _, i := range at {
			if lo, hi, ok := l.interval(i); ok {
				x := f.x(place(i)) + aside
				f.whiskerIn(colour, x, f.y(lo), x, f.y(hi), 2)
			}
		}
		f.curve(px, py, line{width: 1.2, dashes: dash(k), colour: colour})
		for i := range px {
			f.marker(shape, f.x(px[i]), f.y(py[i]), 2.6, colour)
		}
		last := len(px) - 1
		from, which = append(from, [2]float64{f.x(px[last]), f.y(py[last])}), append(which, k)
	}
	f.ends(which, from, t)
	f.mark("")
	if bar {
		f.bar(n.Bar, barLabel, n.crowd(f, place))
	}
	return c.pic, alt
}

// tags are what stands at the ends of lines: the names, or letters with a key.
type tags struct {
	names  []string
	labels [][]string
	wide   float64
	apart  float64
	size   float64
	key    []entry
}

// newTags chooses what stands at the ends of lines that have a width and a height for it.
func newTags[T any](lines []T, name func(T) string, most, tall float64) tags {
	t := tags{size: textSize}
	for _, l := range lines {
		t.names = append(t.names, clean(name(l)))
	}
	n := float64(len(lines))
	for k := 1; k <= 3; k++ {
		labels, whole := allFit(t.names, most, k)
		if t.apart = textSize * leading * float64(deepest(labels)); whole && t.apart*n <= tall {
			t.labels = labels
			break
		}
	}
	if t.labels == nil {
		t.labels = make([][]string, len(lines))
		for i := range lines {
			t.labels[i] = []string{letter(i)}
		}
		t.key = numbered(t.names, letter)
		if t.apart = textSize * leading; t.apart*n > tall {
			t.size, t.apart = leastSize, leastSize*leading
		}
		if t.apart*n > tall {
			// No room beside the ends: the marks alone stand in the key.
			for i := range t.key {
				shape, colour := symbol(i)
				t.key[i].draw = func(c *canvas, x, y float64) { c.marker(shape, x, y, 2.3, colour) }
			}
			t.labels = nil
		}
	}
	for _, l := range t.labels {
		for _, s := range l {
			t.wide = max(t.wide, width(s, t.size, false))
		}
	}
	return t
}

// tagged chooses the tags of lines and the height of a picture that has their key below:
// it may leave less height than the tags would take, which then are others.
func tagged[T any](s Size, lines []T, name func(T) string, h float64) (tags, float64) {
	w, _ := s.resolve(h)
	t := newTags(lines, name, w*0.3, h-foot-10)
	for range 2 {
		if t.key != nil {
			_, h = s.above(newList(t.key), h)
			t = newTags(lines, name, w*0.3, h-foot-10)
		}
	}
	return t, h
}

// ends writes the names of lines, with their marks, beside where they end.
func (f *frame) ends(which []int, from [][2]float64, t tags) {
	if t.labels == nil {
		return
	}
	at := make([]float64, len(from))
	for i, p := range from {
		at[i] = p[1]
	}
	half := t.apart / 2
	ys := spread(at, t.apart, f.y0+half, f.y1-half)
	if ys == nil {
		ys = spread(at, t.apart, f.y0-4+half, f.y1+foot/2-half)
	}
	for i, y := range ys {
		k := which[i]
		shape, colour := symbol(k)
		f.mark(t.names[k])
		f.leader(from[i][0]+5, from[i][1], f.x1+4, y)
		f.marker(shape, f.x1+9, y, 2.3, colour)
		lines := t.labels[k]
		base := y + capHeight(t.size)/2 - t.size*leading*float64(len(lines)-1)/2
		for _, l := range lines {
			f.text(f.x1+15, base, left, style{size: t.size, colour: ink}, l)
			base += t.size * leading
		}
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

// corner is the box of a bar with its label in whichever upper or lower corner is
// emptiest, and how many of the crowd it meets there.
func (f *frame) corner(length float64, label string, crowd [][2]float64) (best box, least int) {
	tall := length / (f.v.hi - f.v.lo) * (f.y1 - f.y0)
	wide := 12 + width(label, noteSize, false)
	deep := max(tall, noteSize*leading)
	least = -1
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
	return best, least
}

// bar draws a bar of a length on the axis of values in the emptiest corner.
func (f *frame) bar(length float64, label string, crowd [][2]float64) {
	tall := length / (f.v.hi - f.v.lo) * (f.y1 - f.y0)
	best, _ := f.corner(length, label, crowd)
	x, mid := best.x0+4, (best.y0+best.y1)/2
	f.whisker(x, mid-tall/2, x, mid+tall/2, 3)
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
	if len(n.Lines) > 0 && n.Lines[0].Low != nil {
		b.WriteString(", each with its interval")
	}
	b.WriteString(".")
	var each []string
	for _, l := range n.Lines {
		var vs []string
		for i, v := range l.Values {
			if i < len(n.Levels) {
				vs = append(vs, rounded(v))
			}
		}
		each = append(each, clean(l.Label)+": "+strings.Join(vs, ", ")+".")
	}
	if short(each) && len(n.Lines)*len(n.Levels) <= 4*listMost {
		b.WriteString(" " + strings.Join(each, " "))
	}
	var x extremes
	for _, l := range n.Lines {
		for i, v := range l.Values {
			if i < len(n.Levels) {
				x.add(v, clean(l.Label)+" at "+clean(n.Levels[i]))
			}
		}
	}
	b.WriteString(x.sentence("Of the means"))
	b.WriteString(crossing(n.Lines, len(n.Levels)))
	if drawable(n.Bar) && n.Bar > 0 {
		fmt.Fprintf(&b, " The single bar is %s, %s.", title(n.BarLabel, "a standard error"), rounded(n.Bar))
	}
	return b.String()
}
