package figure

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot"

	"penwright/render/doc"
)

// Means shows treatment means with their intervals and letters. With a Dose the axis is
// the scale of the doses, and a fitted trend may go with it.
type Means struct {
	Size
	Response string
	By       string
	Interval string // what the bars are, in words: "95 % confidence intervals"
	Means    []Mean
	Dose     bool // X of each mean is its place
	Trend    Trend
}

// Mean is a mean with its interval; Low and High are NaN where there is none.
type Mean struct {
	Label            string
	X                float64
	Value, Low, High float64
	Letters          string
}

// Trend is a fitted curve over the doses: points from low to high X, with the limits of
// a band, or NaN.
type Trend struct {
	Label  string
	Points []TrendPoint
}

// TrendPoint is one point of a fitted curve.
type TrendPoint struct{ X, Y, Low, High float64 }

// Draw gives the picture, and the same in words.
func (m Means) Draw() (*doc.Picture, string) {
	alt := m.words()
	values, doses := empty(), empty()
	var names, tails []string
	letters := 0.0
	for _, q := range m.Means {
		values.add(q.Value, q.Low, q.High)
		names, tails = append(names, q.Label), append(tails, q.Letters)
		letters = max(letters, width(clean(q.Letters), textSize, false))
		if drawable(q.Value) {
			doses.add(q.X)
		}
	}
	if values.empty() || m.Dose && doses.empty() {
		return note(m.Size, "No means to draw."), alt
	}
	if m.Dose {
		return m.doses(values, doses), alt
	}
	w, _ := m.resolve(0)
	letters = min(letters, 90, w*0.2)
	g := newGroups(m.Size, names, m.By, m.Response, values.padded(0.08), room{lying: letters + 8, pitch: letters + 2, tails: tails})
	for i, q := range m.Means {
		if !drawable(q.Value) {
			continue
		}
		g.mark(q.Label)
		g.interval(i, q, 0)
		x, y := g.at(i, q.Value, 0)
		g.marker(disc, x, y, 2.8, palette[0])
	}
	// Letters stand in a column at the right when the groups lie, else above the bars,
	// else in the key.
	g.mark("")
	if g.keyed && !g.lying {
		return g.pic, alt
	}
	var taken []box
	for i, q := range m.Means {
		s := fit(q.Letters, letters, textSize, false)
		if s == "" || !drawable(q.Value) {
			continue
		}
		st := style{size: textSize, colour: ink}
		if g.lying {
			_, y := g.at(i, q.Value, 0)
			g.text(g.x1+6, y+capHeight(st.size)/2, left, st, s)
			continue
		}
		top := q.Value
		if drawable(q.High) {
			top = max(top, q.High)
		}
		x, y := g.at(i, top, 0)
		taken = g.above(taken, x, y-5, st, s)
	}
	return g.pic, alt
}

// above sets text centred over a place, higher where another is in the way.
func (f *frame) above(taken []box, x, y float64, st style, s string) []box {
	w := width(s, st.size, false)
	x = min(max(x, f.x0+w/2-4), f.pic.Width-w/2-1)
	for range 20 {
		b := lineBox(x, y, center, s, st.size)
		free := true
		for _, t := range taken {
			if b.meets(t) {
				free = false
				y = t.y0 - descent*st.size - 0.01
			}
		}
		if free {
			break
		}
	}
	b := lineBox(x, y, center, s, st.size)
	if b.y0 < 0 {
		return taken
	}
	for _, t := range taken {
		if b.meets(t) {
			return taken
		}
	}
	f.text(x, y, center, st, s)
	return append(taken, b)
}

// interval draws the whisker of a mean.
func (g *groups) interval(i int, q Mean, off float64) {
	if !drawable(q.Low) || !drawable(q.High) {
		return
	}
	x0, y0 := g.at(i, q.Low, off)
	x1, y1 := g.at(i, q.High, off)
	g.whisker(x0, y0, x1, y1, min(3, g.pitch*0.2))
}

// whisker is an interval between two places on one level or upright line, with caps.
func (c *canvas) whisker(x0, y0, x1, y1, cap float64) { c.whiskerIn(ink, x0, y0, x1, y1, cap) }

// whiskerIn is a whisker in a colour.
func (c *canvas) whiskerIn(colour doc.Colour, x0, y0, x1, y1, cap float64) {
	path := segment(x0, y0, x1, y1)
	dx, dy := cap, 0.0
	if y0 == y1 && x0 != x1 {
		dx, dy = 0, cap
	}
	path = append(path, segment(x0-dx, y0-dy, x0+dx, y0+dy)...)
	path = append(path, segment(x1-dx, y1-dy, x1+dx, y1+dy)...)
	c.stroke(line{width: medium, colour: colour}, path...)
}

// doses draws the means over a scale.
func (m Means) doses(values, doses span) *doc.Picture {
	for _, t := range m.Trend.Points {
		if drawable(t.X) {
			values.add(t.Y, t.Low, t.High)
			doses.add(t.X)
		}
	}
	w, h := m.resolve(250)
	y := numbers(m.Response, values.padded(0.08), h-foot, false)
	x := doseAxis(m.By, m.Means, doses.padded(0.05), across(w, 6, y))
	// Letters stand above the bars, or where one would cover something, in a key.
	f := newFrame(newCanvas(w, h), x, y, insets{right: 6})
	places, free := m.letters(f)
	if !free {
		var entries []entry
		for _, q := range m.Means {
			if q.Letters != "" && drawable(q.Value) {
				entries = append(entries, entry{sign: clean(q.Label), name: q.Letters})
			}
		}
		k, low := m.above(newList(entries), h)
		y = numbers(m.Response, values.padded(0.08), low-foot, false)
		f = newFrame(newCanvas(w, low+k.tall), x, y, insets{right: 6, bottom: k.tall})
		k.draw(f.canvas, 1, low)
		places = nil
	}
	var xs, ys, lo, hi []float64
	for _, t := range m.Trend.Points {
		xs, ys, lo, hi = append(xs, t.X), append(ys, t.Y), append(lo, t.Low), append(hi, t.High)
	}
	if len(xs) > 0 {
		f.mark(title(m.Trend.Label, "fitted curve"))
		f.band(xs, lo, hi, tint(palette[0], 0.2))
		f.curve(xs, ys, line{width: 1.4, colour: palette[0]})
	}
	for _, q := range m.Means {
		if !drawable(q.Value) || !drawable(q.X) {
			continue
		}
		f.mark(q.Label)
		px := f.x(q.X)
		if drawable(q.Low) && drawable(q.High) {
			f.whisker(px, f.y(q.Low), px, f.y(q.High), 3)
		}
		f.marker(disc, px, f.y(q.Value), 2.8, palette[0])
	}
	f.mark("")
	for i, p := range places {
		if p != nil {
			f.text(p.x, p.y, center, style{size: textSize, colour: ink}, clean(m.Means[i].Letters))
		}
	}
	return f.pic
}

// letters finds places above the bars of doses for the letters; free says that each has
// one where it covers no other and no mark or bar.
func (m Means) letters(f *frame) (places []*placed, free bool) {
	places = make([]*placed, len(m.Means))
	var taken []box
	any := false
	for _, q := range m.Means {
		if !drawable(q.Value) || !drawable(q.X) {
			continue
		}
		any = any || q.Letters != ""
		lo, hi := q.Value, q.Value
		if drawable(q.Low) && drawable(q.High) {
			lo, hi = min(lo, q.Low), max(hi, q.High)
		}
		px := f.x(q.X)
		taken = append(taken, box{x0: px - 3, y0: f.y(hi) - 3, x1: px + 3, y1: f.y(lo) + 3})
	}
	if !any {
		return nil, true
	}
	for i, q := range m.Means {
		s := clean(q.Letters)
		if s == "" || !drawable(q.Value) || !drawable(q.X) {
			continue
		}
		top := q.Value
		if drawable(q.High) {
			top = max(top, q.High)
		}
		half := width(s, textSize, false) / 2
		x, y := min(max(f.x(q.X), f.x0+half-4), f.pic.Width-half-1), f.y(top)-3-descent*textSize-0.5
		b := lineBox(x, y, center, s, textSize)
		if b.y0 < 0 || b.x0 < 0 || slices.ContainsFunc(taken, b.meets) {
			return nil, false
		}
		taken = append(taken, b)
		places[i] = &placed{x: x, y: y, box: b}
	}
	return places, true
}

// curve draws a line through points, left out where one is not finite and cut at the
// ground's edge.
func (f *frame) curve(xs, ys []float64, l line) {
	var path []doc.Segment
	down := false
	for i := range xs {
		if !drawable(xs[i]) || !drawable(ys[i]) {
			down = false
			continue
		}
		x, y := f.x(xs[i]), f.clampY(ys[i])
		if down {
			path = append(path, lineTo(x, y))
		} else {
			path = append(path, moveTo(x, y))
		}
		down = true
	}
	f.stroke(l, path...)
}

// doseAxis has its ticks at the doses where they have room, else at round numbers.
func doseAxis(by string, means []Mean, s span, length float64) axis {
	type dose struct {
		x     float64
		label string
	}
	var ds []dose
	for _, q := range means {
		if drawable(q.X) && drawable(q.Value) {
			ds = append(ds, dose{x: q.X, label: fit(q.Label, 80, textSize, false)})
		}
	}
	xs := make([]float64, len(ds))
	for i, d := range ds {
		xs[i] = d.x
	}
	a := axis{title: titled(by, length+40), span: s}
	last := math.Inf(-1)
	for n, i := range byValue(xs) {
		if n > 0 && len(a.ticks) > 0 && a.ticks[len(a.ticks)-1].Value == xs[i] {
			continue
		}
		at := (xs[i] - s.lo) / (s.hi - s.lo) * length
		half := width(ds[i].label, textSize, false) / 2
		// Beyond the ground there is room for little more than a number.
		if at-half < last+4 || at-half < -12 || at+half > length+20 {
			return numbers(by, s, length, true)
		}
		last = at + half
		a.ticks = append(a.ticks, plot.Tick{Value: xs[i], Label: ds[i].label})
	}
	return a
}

func (m Means) words() string {
	var b strings.Builder
	n := 0
	var each []string
	for _, q := range m.Means {
		if !drawable(q.Value) {
			continue
		}
		n++
		s := clean(q.Label) + " " + rounded(q.Value)
		if drawable(q.Low) && drawable(q.High) {
			s += " (" + rounded(q.Low) + " to " + rounded(q.High) + ")"
		}
		if q.Letters != "" {
			s += " " + clean(q.Letters)
		}
		each = append(each, s)
	}
	fmt.Fprintf(&b, "%s: %s by %s", title(m.Response, "Values"), count(n, "mean"), title(m.By, "treatment"))
	if m.Interval != "" {
		fmt.Fprintf(&b, ", with %s", clean(m.Interval))
	}
	if short(each) {
		fmt.Fprintf(&b, ": %s", strings.Join(each, "; "))
	} else if n > 0 {
		s := empty()
		for _, q := range m.Means {
			s.add(q.Value)
		}
		fmt.Fprintf(&b, ", from %s to %s", rounded(s.lo), rounded(s.hi))
	}
	b.WriteString(".")
	var x extremes
	for _, q := range m.Means {
		x.add(q.Value, q.Label)
	}
	b.WriteString(x.sentence("Of the means"))
	if len(m.Trend.Points) > 0 && m.Dose {
		fmt.Fprintf(&b, " The line is the %s.", title(m.Trend.Label, "fitted curve"))
	}
	if lost := len(m.Means) - n; lost > 0 {
		fmt.Fprintf(&b, " %s without a mean.", count(lost, "treatment"))
	}
	return b.String()
}
