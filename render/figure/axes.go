package figure

import (
	"math"
	"strconv"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"penwright/analysis/num"
	"penwright/render/doc"
)

// axis is one axis of a frame. Its title is broken into lines already.
type axis struct {
	title []string
	span
	ticks []plot.Tick
	grid  bool
	bare  bool // names instead of numbers: no tick marks
}

// frame is a pair of axes with the ground between them.
type frame struct {
	*canvas
	x0, x1, y0, y1 float64 // the ground: left, right, top, bottom
	h, v           axis
}

// insets are kept free around the axes.
type insets struct{ top, right, bottom float64 }

// foot is what the ticks and a title of one line take below the ground.
const foot = 45

// titled breaks the title of an axis into lines of at most a width.
func titled(title string, most float64) []string {
	const lines = 3 // beyond them it is shortened
	out, _ := wrap(title, most, titleSize, lines)
	return out
}

// strip is what the title of an axis takes.
func strip(title []string) float64 {
	if len(title) == 0 {
		return 0
	}
	return titleSize*leading*float64(len(title)) + 3
}

// across is the length of the horizontal axis in a picture of width w beside the axis
// v, with end kept free at the right.
func across(w, end float64, v axis) float64 {
	names := 0.0
	for _, t := range v.ticks {
		for _, l := range strings.Split(t.Label, "\n") {
			names = max(names, width(l, textSize, false))
		}
	}
	const gap = 16 // ticks, padding, and the half of the last label that reaches beyond
	return max(w-names-strip(v.title)-gap-end, 10)
}

// newFrame draws two axes into the picture, with their grid and titles.
func newFrame(c *canvas, h, v axis, in insets) *frame {
	f := &frame{canvas: c, h: h, v: v}
	p := plot.New()
	p.BackgroundColor = nil
	p.TextHandler, p.Title.TextStyle.Handler = handler{}, handler{}
	edge := draw.LineStyle{Color: paint(ink), Width: thin}
	set := func(to *plot.Axis, from axis, x text.XAlignment, y text.YAlignment) {
		to.Min, to.Max = from.lo, from.hi
		to.Label.TextStyle.Handler = handler{}
		to.LineStyle, to.Tick.LineStyle = edge, edge
		if from.bare {
			to.Tick.LineStyle.Color = paint{} // keeps their room
		}
		to.Padding, to.Tick.Length = 4, 3
		to.Tick.Label = text.Style{Color: paint(ink), Font: font.Font{Size: textSize}, Handler: handler{}, XAlign: x, YAlign: y}
		to.Tick.Marker = plot.ConstantTicks(from.ticks)
	}
	set(&p.X, h, text.XCenter, text.YTop)
	set(&p.Y, v, text.XRight, text.YCenter)
	end := c.pic.Height - in.bottom
	bottom, side := 1+in.bottom+strip(h.title), 1+strip(v.title)
	area := draw.Crop(draw.New(c), vg.Length(side), vg.Length(-max(in.right, 1)), vg.Length(bottom), vg.Length(-max(in.top, 5)))
	ground := p.DataCanvas(area)
	f.x0, f.x1 = ground.Min.X.Points(), ground.Max.X.Points()
	f.y0, f.y1 = c.pic.Height-ground.Max.Y.Points(), c.pic.Height-ground.Min.Y.Points()

	rule := line{width: 0.4, colour: faint}
	if v.grid {
		for _, t := range v.ticks {
			c.stroke(rule, segment(f.x0, f.y(t.Value), f.x1, f.y(t.Value))...)
		}
	}
	if h.grid {
		for _, t := range h.ticks {
			c.stroke(rule, segment(f.x(t.Value), f.y0, f.x(t.Value), f.y1)...)
		}
	}
	p.Draw(area)

	// The titles stand at the middle of the ground, or as near as the picture's edges
	// let them.
	st := style{size: titleSize, colour: ink}
	for i, l := range h.title {
		half := width(l, titleSize, false) / 2
		x := min(max((f.x0+f.x1)/2, 1+half), c.pic.Width-1-half)
		c.text(x, end-1-titleSize*(descent+leading*float64(len(h.title)-1-i)), center, st, l)
	}
	for i, l := range v.title {
		half := width(l, titleSize, false) / 2
		y := min(max((f.y0+f.y1)/2, 1+half), c.pic.Height-bottom-half)
		if y-half < 0 { // longer than the axis and its foot
			l = fit(l, c.pic.Height-bottom-2, titleSize, false)
			y = (c.pic.Height - bottom) / 2
		}
		c.upward(1+titleSize*(ascent+leading*float64(i)), y, st, l)
	}
	return f
}

func (f *frame) x(v float64) float64 { return f.x0 + (v-f.h.lo)/(f.h.hi-f.h.lo)*(f.x1-f.x0) }
func (f *frame) y(v float64) float64 { return f.y1 - (v-f.v.lo)/(f.v.hi-f.v.lo)*(f.y1-f.y0) }

// numbers makes an axis of numbers over a range that takes a length across the picture
// or up it. Very large and very small numbers have a power of ten taken out into the
// title, before the unit; where numbers that are alike in their first digits would be
// long, what they have in common is taken off.
func numbers(title string, s span, length float64, across bool) axis {
	a := axis{span: s, grid: !across}
	title = clean(title)
	base := common(s)
	size := max(math.Abs(s.lo-base), math.Abs(s.hi-base))
	power := 0
	if size >= 1e6 || size < 1e-3 {
		power = int(math.Floor(math.Log10(size) + 1e-12))
		title = inUnit(title, "10"+raised(power))
	}
	if base != 0 {
		sign := " less "
		if base < 0 {
			sign = " plus "
		}
		title = strings.TrimSpace(title + "," + sign + magnitude(math.Abs(base)))
	}
	a.title = titled(title, max(length, 60)+20)
	apart := 30.0
	if across {
		apart = 50
	}
	step := niceStep((s.hi - s.lo) / max(length/apart, 2))
	for {
		a.ticks = a.ticks[:0]
		widest := 0.0
		for _, v := range steps(span{lo: s.lo - base, hi: s.hi - base}, step) {
			label := num.Fixed(scaled(v, -power), decimals(scaled(step, -power)))
			widest = max(widest, width(label, textSize, false))
			a.ticks = append(a.ticks, plot.Tick{Value: min(max(v+base, s.lo), s.hi), Label: label})
		}
		room := step / (s.hi - s.lo) * length
		if len(a.ticks) < 2 || across && widest+5 < room || !across && textSize*leading < room {
			return a
		}
		step = niceStep(step * 1.7)
	}
}

// common is the round number that all of a narrow range far from nought have in common,
// nought where the range is not narrow.
func common(s span) float64 {
	d := s.hi - s.lo
	if !(d > 0) || s.lo < 0 && s.hi > 0 || min(math.Abs(s.lo), math.Abs(s.hi)) < 1e5*d || math.Abs(s.hi) > 1e15*d {
		return 0
	}
	ten := math.Pow(10, math.Ceil(math.Log10(d)))
	if s.lo < 0 {
		return math.Ceil(s.hi/ten) * ten
	}
	return math.Floor(s.lo/ten) * ten
}

// inUnit puts a factor before the unit of a title such as "Mass (g)".
func inUnit(title, factor string) string {
	if open := strings.LastIndexByte(title, '('); open >= 0 && strings.HasSuffix(title, ")") {
		return title[:open+1] + factor + " " + title[open+1:]
	}
	return strings.TrimSpace(title + " (" + factor + ")")
}

// magnitude writes a positive round number without needless zeros.
func magnitude(v float64) string {
	if v < 1e15 && v >= 1e-4 {
		return strconv.FormatFloat(v, 'f', -1, 64)
	}
	m, e, _ := strings.Cut(strconv.FormatFloat(v, 'e', -1, 64), "e")
	n, _ := strconv.Atoi(e)
	return m + " × 10" + raised(n)
}

func scaled(v float64, power int) float64 {
	if power < -300 { // 10^-power itself would not be finite
		return v * math.Pow(10, 300) * math.Pow(10, float64(power+300))
	}
	if power > 0 {
		return v * math.Pow(10, float64(power))
	}
	return v / math.Pow(10, float64(-power))
}

// steps lists the multiples of a step within a range.
func steps(s span, step float64) []float64 {
	first, last := math.Ceil(s.lo/step-1e-9), math.Floor(s.hi/step+1e-9)
	if !(last-first < 100) {
		return nil
	}
	var out []float64
	for i := 0.0; first+i <= last; i++ {
		v := (first + i) * step
		if v == 0 {
			v = 0 // not -0
		}
		out = append(out, min(max(v, s.lo), s.hi))
	}
	return out
}

// niceStep is that of 1, 2, 5 times a power of ten nearest to v by ratio.
func niceStep(v float64) float64 {
	if !(v > 0) || math.IsInf(v, 0) {
		return 1
	}
	ten := math.Pow(10, math.Floor(math.Log10(v)))
	switch m := v / ten; {
	case m < math.Sqrt2:
		return ten
	case m < math.Sqrt(10):
		return 2 * ten
	case m < math.Sqrt(50):
		return 5 * ten
	}
	return 10 * ten
}

// decimals is how many decimals tell multiples of a step apart.
func decimals(step float64) int {
	if !(step > 0) {
		return 0
	}
	return min(max(int(math.Ceil(-math.Log10(step)-1e-9)), 0), 12)
}

// rounded prints a number to four significant digits, for the picture in words.
func rounded(v float64) string {
	if !drawable(v) {
		return "none"
	}
	a := math.Abs(v)
	if a != 0 && (a >= 1e7 || a < 1e-4) {
		m, e, _ := strings.Cut(strconv.FormatFloat(v, 'e', 3, 64), "e")
		n, _ := strconv.Atoi(e)
		return strings.Replace(m, "-", "−", 1) + " × 10" + raised(n)
	}
	r, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'g', 4, 64), 64)
	return strings.Replace(strconv.FormatFloat(r, 'f', -1, 64), "-", "−", 1)
}

// plain prints a multiple of a step without needless decimals.
func plain(v, step float64) string {
	if a := math.Abs(v); a >= 1e7 || a < 1e-5 {
		return rounded(v)
	}
	return num.Fixed(v, decimals(step))
}

// raised is an integer in superscript digits.
func raised(n int) string {
	const digits = "⁰¹²³⁴⁵⁶⁷⁸⁹"
	var b strings.Builder
	for _, r := range strconv.Itoa(n) {
		if r == '-' {
			b.WriteRune('⁻')
			continue
		}
		b.WriteRune([]rune(digits)[r-'0'])
	}
	return b.String()
}

// box is a rectangle of the picture.
type box struct{ x0, y0, x1, y1 float64 }

func (b box) meets(o box) bool { return b.x0 < o.x1 && o.x0 < b.x1 && b.y0 < o.y1 && o.y0 < b.y1 }

// lineBox is the box of a line of text with its baseline at y.
func lineBox(x, y float64, a anchor, s string, size float64) box {
	w := width(s, size, false)
	x -= float64(a) * w
	return box{x0: x, y0: y - ascent*size, x1: x + w, y1: y + descent*size}
}

// spread moves ordinates apart so that neighbours keep a distance and all stay within
// [lo, hi], as near to where they were as that allows. The order of equal ones is that
// given. It returns nil when there is no room.
func spread(at []float64, apart, lo, hi float64) []float64 {
	n := len(at)
	if n == 0 || float64(n-1)*apart > hi-lo+1e-9 {
		return nil
	}
	order := byValue(at)
	out := make([]float64, n)
	// Groups of touching labels are centred on the mean of where they want to be.
	type group struct {
		first, n int
		sum      float64 // of wanted ordinates less the offset within the group
	}
	var groups []group
	place := func(g group) float64 {
		return min(max(g.sum/float64(g.n), lo), hi-float64(g.n-1)*apart)
	}
	for i, k := range order {
		g := group{first: i, n: 1, sum: at[k]}
		for len(groups) > 0 {
			prev := groups[len(groups)-1]
			if place(prev)+float64(prev.n)*apart <= place(g)+1e-12 {
				break
			}
			g = group{first: prev.first, n: prev.n + g.n, sum: prev.sum + g.sum - float64(prev.n*g.n)*apart}
			groups = groups[:len(groups)-1]
		}
		groups = append(groups, g)
	}
	for _, g := range groups {
		y := place(g)
		for j := range g.n {
			out[order[g.first+j]] = y + float64(j)*apart
		}
	}
	return out
}

// band fills between two curves over the same abscissae.
func (f *frame) band(xs, lo, hi []float64, colour doc.Colour) {
	var ring [][2]float64
	for i := range xs {
		if drawable(xs[i]) && drawable(lo[i]) && drawable(hi[i]) {
			ring = append(ring, [2]float64{f.x(xs[i]), f.clampY(hi[i])})
		}
	}
	for i := len(xs) - 1; i >= 0; i-- {
		if drawable(xs[i]) && drawable(lo[i]) && drawable(hi[i]) {
			ring = append(ring, [2]float64{f.x(xs[i]), f.clampY(lo[i])})
		}
	}
	if len(ring) >= 4 {
		f.fill(colour, polyline(true, ring...)...)
	}
}

func (f *frame) clampY(v float64) float64 { return min(max(f.y(v), f.y0), f.y1) }
