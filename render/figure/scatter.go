package figure

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/plot"

	"penwright/render/doc"
)

// Fitted shows residuals against fitted values, or any second quantity of units
// against a first.
type Fitted struct {
	Size
	X, Y   string // titles of the axes
	Points []XY
	Zero   bool // draws a line at nought of Y
}

// XY is one unit's place; what is Named has its name written beside it.
type XY struct {
	Unit  string
	X, Y  float64
	Named bool
}

// Draw gives the picture, and the same in words.
func (p Fitted) Draw() (*doc.Picture, string) {
	xs, ys, n := extent(p.Points)
	alt := p.words(xs, ys, n)
	if n == 0 {
		return note(p.Size, "No values to draw."), alt
	}
	if p.Zero {
		ys.add(0)
	}
	return cloud(p.Points, n, p.Size, func(k key, h float64) (*frame, []box) {
		f := newScatter(p.Size, p.X, p.Y, xs, ys, k, h)
		if !p.Zero {
			return f, nil
		}
		return f, f.straight(0, 0)
	}), alt
}

func (p Fitted) words(xs, ys span, n int) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s against %s: %s", title(p.Y, "Values"), title(p.X, "fitted values"), count(n, "point"))
	if n > 0 {
		fmt.Fprintf(&b, ", from %s to %s across and from %s to %s up", rounded(xs.lo), rounded(xs.hi), rounded(ys.lo), rounded(ys.hi))
	}
	b.WriteString(".")
	var x extremes
	var far ranked
	for _, q := range p.Points {
		if drawable(q.X) && drawable(q.Y) {
			x.add(q.Y, q.Unit)
			far.add(math.Abs(q.Y), q.Y, q.Unit)
		}
	}
	if p.Zero {
		b.WriteString(farthest(far))
	} else {
		b.WriteString(x.sentence("Units"))
	}
	b.WriteString(shaded(n))
	b.WriteString(namedIn(p.Points))
	if lost := len(p.Points) - n; lost > 0 {
		fmt.Fprintf(&b, " %s without a place.", count(lost, "unit"))
	}
	return b.String()
}

func shaded(n int) string {
	if n > maxPoints {
		return " The points are too many to draw: shading shows how many lie in each field."
	}
	return ""
}

func namedIn(points []XY) string {
	var names []string
	for _, q := range points {
		if q.Named && drawable(q.X) && drawable(q.Y) {
			names = append(names, clean(q.Unit))
		}
	}
	if len(names) == 0 || len(names) > listMost {
		return ""
	}
	return " Named: " + strings.Join(names, ", ") + "."
}

func extent(points []XY) (xs, ys span, n int) {
	xs, ys = empty(), empty()
	for _, q := range points {
		if drawable(q.X) && drawable(q.Y) {
			xs.add(q.X)
			ys.add(q.Y)
			n++
		}
	}
	return xs, ys, n
}

func newScatter(s Size, x, y string, xs, ys span, k key, h float64) *frame {
	w, _ := s.resolve(h)
	c := newCanvas(w, h+k.tall)
	up := numbers(y, ys.padded(0.06), h-foot, false)
	f := newFrame(c, numbers(x, xs.padded(0.05), across(w, 1, up), true), up, insets{bottom: k.tall})
	k.draw(c, 1, h)
	return f
}

const (
	mostNamed = 60  // points of a cloud that are named
	longName  = 150 // beside a point
)

// cloud draws points on a frame, or a density where they are too many, and names those
// that are to be named: beside the points where all the names find a place that covers
// nothing, else with numbers and a key. build draws the frame above a key, with what
// belongs to it, and gives the boxes that names should not cover.
func cloud(points []XY, n int, s Size, build func(k key, h float64) (*frame, []box)) *doc.Picture {
	_, h := s.resolve(250)
	dense := n > maxPoints
	var named []int
	for i, q := range points {
		if q.Named && drawable(q.X) && drawable(q.Y) && len(named) < mostNamed {
			named = append(named, i)
		}
	}
	signs := make([]string, len(named))
	for k, i := range named {
		signs[k] = clean(points[i].Unit)
	}
	r := 2.3
	if n > 400 {
		r = 1.6
	}
	f, crowd := build(key{}, h)
	places, free := f.places(points, named, signs, crowd, r, dense)
	if !free {
		entries := numbered(signs, number)
		signs = make([]string, len(named))
		for k := range signs {
			signs[k] = number(k)
		}
		f, crowd = build(s.above(newList(entries), h))
		places, _ = f.places(points, named, signs, crowd, r, dense)
	}
	if dense {
		f.fields(points)
	}
	next := 0
	for i, q := range points {
		isNamed := next < len(named) && named[next] == i
		if isNamed {
			next++
		}
		if !drawable(q.X) || !drawable(q.Y) || dense && !isNamed {
			continue
		}
		f.mark(q.Unit)
		f.marker(disc, f.x(q.X), f.y(q.Y), r, palette[0])
	}
	f.mark("")
	for k, p := range places {
		if p.led {
			q := points[named[k]]
			x, y := f.x(q.X), f.y(q.Y)
			tx, ty := min(max(x, p.box.x0), p.box.x1), min(max(y, p.box.y0+1.5), p.box.y1-1.5)
			if d := math.Hypot(tx-x, ty-y); d > r+1 {
				f.leader(x+(tx-x)*(r+0.5)/d, y+(ty-y)*(r+0.5)/d, tx, ty)
			}
		}
		f.text(p.x, p.y, left, style{size: noteSize, colour: ink}, signs[k])
	}
	return f.pic
}

// placed is where a name stands.
type placed struct {
	x, y float64 // of its baseline's start
	box  box
	led  bool // a line leads to it from its mark
}

// places finds a place for the name of each named point: beside it, else farther off with
// a line that leads there. free says that no name covers another, a mark or the crowd.
func (f *frame) places(points []XY, named []int, names []string, crowd []box, r float64, dense bool) (out []placed, free bool) {
	if len(named) == 0 {
		return nil, true
	}
	own := make([]int, len(named)) // index of its own mark in the crowd
	next := 0
	for i, q := range points {
		isNamed := next < len(named) && named[next] == i
		if isNamed {
			own[next] = len(crowd)
			next++
		}
		if drawable(q.X) && drawable(q.Y) && (!dense || isNamed) {
			x, y := f.x(q.X), f.y(q.Y)
			crowd = append(crowd, box{x0: x - r, y0: y - r, x1: x + r, y1: y + r})
		}
	}
	free = true
	for k, i := range named {
		s := names[k]
		x, y := f.x(points[i].X), f.y(points[i].Y)
		w, up := width(s, noteSize, false), capHeight(noteSize)
		free = free && w <= longName
		d := r + 2
		tries := [][2]float64{
			{x + d, y + up/2}, {x - d - w, y + up/2}, {x - w/2, y - d}, {x - w/2, y + d + up},
			{x + d, y - d}, {x - d - w, y - d}, {x + d, y + d + up}, {x - d - w, y + d + up},
		}
		near := len(tries)
		for _, far := range []float64{10, 16, 24, 34, 46} {
			for a := range 12 {
				sin, cos := math.Sincos(float64(a) * math.Pi / 6)
				tx, ty := x+far*cos, y+far*sin
				switch {
				case cos > 0.3:
				case cos < -0.3:
					tx -= w
				default:
					tx -= w / 2
				}
				tries = append(tries, [2]float64{tx, ty + up/2})
			}
		}
		best, least := placed{}, -1
		for t, try := range tries {
			b := box{x0: try[0], y0: try[1] - ascent*noteSize, x1: try[0] + w, y1: try[1] + descent*noteSize}
			if b.x0 < f.x0-2 || b.x1 > f.pic.Width-1 || b.y0 < 0 || b.y1 > f.y1+2 {
				continue
			}
			meets, taken := 0, false
			for _, p := range out {
				taken = taken || b.meets(p.box)
			}
			if taken {
				continue
			}
			for _, m := range crowd {
				if b.meets(m) {
					meets++
				}
			}
			if least < 0 || meets < least {
				best, least = placed{x: try[0], y: try[1], box: b, led: t >= near}, meets
			}
			if meets == 0 {
				break
			}
		}
		if least != 0 {
			free = false
		}
		if least < 0 {
			// Nowhere free: on its own mark, over whatever is there.
			m := crowd[own[k]]
			best = placed{x: min(m.x1, f.pic.Width-1-w), y: min(max(m.y0, ascent*noteSize), f.y1), box: lineBox(m.x1, m.y0, left, s, noteSize)}
		}
		out = append(out, best)
	}
	return out, free
}

// fields shades the ground by how many points lie in each of its fields.
func (f *frame) fields(points []XY) {
	const across, up = 72, 40
	n := make([]int, across*up)
	most := 1
	for _, q := range points {
		if !drawable(q.X) || !drawable(q.Y) {
			continue
		}
		i := min(max(int((q.X-f.h.lo)/(f.h.hi-f.h.lo)*across), 0), across-1)
		j := min(max(int((q.Y-f.v.lo)/(f.v.hi-f.v.lo)*up), 0), up-1)
		n[j*across+i]++
		most = max(most, n[j*across+i])
	}
	// Shades are few, so that neighbours alike become one field.
	const shades = 8
	shade := func(k int) int {
		if k == 0 {
			return 0
		}
		return 1 + int((shades-1)*math.Log1p(float64(k))/math.Log1p(float64(most)+1e-9))
	}
	w, h := (f.x1-f.x0)/across, (f.y1-f.y0)/up
	for j := range up {
		for i := 0; i < across; {
			level, sum, from := shade(n[j*across+i]), 0, i
			for i < across && shade(n[j*across+i]) == level {
				sum += n[j*across+i]
				i++
			}
			if level == 0 {
				continue
			}
			f.mark(count(sum, "point"))
			f.fill(tint(palette[0], 0.12+0.88*float64(level)/shades), rectangle(f.x0+w*float64(from), f.y1-h*float64(j+1), w*float64(i-from), h)...)
		}
	}
}

// Quantiles shows ordered residuals against what a normal sample of the size would give.
type Quantiles struct {
	Size
	X, Y   string // titles; empty: those usual
	Points []Quantile
	// Intercept and Slope are of the line that a normal sample would follow; a slope of
	// nought draws none.
	Intercept, Slope float64
	Envelope         string // what the band is, in words: "95 % of 999 normal samples"
}

// Quantile is one unit: its expected normal quantile, its value, and the limits of the
// envelope there, or NaN.
type Quantile struct {
	Unit                       string
	Expected, Value, Low, High float64
	Named                      bool
}

// Draw gives the picture, and the same in words.
func (p Quantiles) Draw() (*doc.Picture, string) {
	var points []XY
	expected := make([]float64, 0, len(p.Points))
	var held []Quantile
	for _, q := range p.Points {
		if drawable(q.Expected) && drawable(q.Value) {
			held = append(held, q)
			expected = append(expected, q.Expected)
			points = append(points, XY{Unit: q.Unit, X: q.Expected, Y: q.Value, Named: q.Named})
		}
	}
	xs, ys, n := extent(points)
	var b strings.Builder
	fmt.Fprintf(&b, "Normal quantiles of %s: %s", title(p.Y, "residuals"), count(n, "point"))
	if n > 0 {
		fmt.Fprintf(&b, ", from %s to %s", rounded(ys.lo), rounded(ys.hi))
	}
	b.WriteString(".")
	outside, limits := 0, false
	var x extremes
	var out []string
	for _, q := range held {
		x.add(q.Value, q.Unit)
		if drawable(q.Low) && drawable(q.High) {
			limits = true
			if q.Value < q.Low || q.Value > q.High {
				outside++
				if q.Unit != "" {
					out = append(out, clean(q.Unit))
				}
			}
		}
	}
	b.WriteString(x.sentence("Units"))
	if limits {
		fmt.Fprintf(&b, " The band is %s; %s outside it", title(p.Envelope, "an envelope"), plural(outside, "1 point lies", fmt.Sprint(outside)+" points lie"))
		if len(out) > 0 {
			b.WriteString(": " + some(out))
		}
		b.WriteString(".")
	}
	b.WriteString(namedIn(points))
	if lost := len(p.Points) - n; lost > 0 {
		fmt.Fprintf(&b, " %s without a value.", count(lost, "unit"))
	}
	if n == 0 {
		return note(p.Size, "No residuals to draw."), b.String()
	}
	for _, q := range held {
		ys.add(q.Low, q.High)
	}
	order := byValue(expected)
	var ex, lo, hi []float64
	for _, k := range order {
		if q := held[k]; drawable(q.Low) && drawable(q.High) {
			ex, lo, hi = append(ex, q.Expected), append(lo, q.Low), append(hi, q.High)
		}
	}
	build := func(k key, h float64) (*frame, []box) {
		f := newScatter(p.Size, title(p.X, "Expected normal quantile"), title(p.Y, "Residual"), xs, ys, k, h)
		if len(ex) > 1 {
			f.mark(title(p.Envelope, "envelope"))
			f.band(ex, lo, hi, tint(grey, 0.22))
			f.mark("")
		}
		if p.Slope == 0 {
			return f, nil
		}
		return f, f.straight(p.Intercept, p.Slope)
	}
	shown := points
	if n > 1000 {
		// The points lie on a curve that never falls: of many, those that would all but
		// cover the one before tell nothing more.
		_, h := p.resolve(250)
		f, _ := build(key{}, h)
		far := math.Inf(-1)
		shown = nil
		for _, k := range order {
			at := f.x(held[k].Expected) - f.y(held[k].Value)
			if at-far < 2 && !held[k].Named {
				continue
			}
			far = at
			shown = append(shown, points[k])
		}
	}
	if left := n - len(shown); left > 0 {
		fmt.Fprintf(&b, " %s that would cover others %s left out.", count(left, "point"), plural(left, "is", "are"))
	}
	return cloud(shown, min(len(shown), maxPoints), p.Size, build), b.String()
}

// straight draws the line y = a + b·x across the ground, cut at its edges, and gives
// the boxes it runs through.
func (f *frame) straight(a, b float64) []box {
	if !drawable(a) || !drawable(b) {
		return nil
	}
	x0, x1 := f.h.lo, f.h.hi
	if b == 0 {
		if a < f.v.lo || a > f.v.hi {
			return nil
		}
	} else {
		lo, hi := (f.v.lo-a)/b, (f.v.hi-a)/b
		if lo > hi {
			lo, hi = hi, lo
		}
		x0, x1 = max(x0, lo), min(x1, hi)
	}
	if !(x0 < x1) {
		return nil
	}
	px, py, qx, qy := f.x(x0), f.clampY(a+b*x0), f.x(x1), f.clampY(a+b*x1)
	f.stroke(line{width: 0.9, colour: ink}, segment(px, py, qx, qy)...)
	return along(px, py, qx, qy)
}

// along gives the boxes that a straight line runs through.
func along(px, py, qx, qy float64) []box {
	pieces := min(max(int(math.Hypot(qx-px, qy-py)/4), 1), 200)
	boxes := make([]box, pieces)
	dx, dy := (qx-px)/float64(pieces), (qy-py)/float64(pieces)
	for i := range boxes {
		x, y := px+dx*float64(i), py+dy*float64(i)
		boxes[i] = box{x0: min(x, x+dx) - 0.5, y0: min(y, y+dy) - 0.5, x1: max(x, x+dx) + 0.5, y1: max(y, y+dy) + 0.5}
	}
	return boxes
}

// Spread shows the standard deviation of each treatment against its mean, both on
// logarithmic scales, where a power law is a straight line.
type Spread struct {
	Size
	Response string // with its unit
	Points   []Scale
	// Intercept and Slope are of log₁₀ SD on log₁₀ mean; a slope of NaN draws no line.
	Intercept, Slope float64
}

// Scale is the mean and standard deviation of one treatment.
type Scale struct {
	Label    string
	Mean, SD float64
}

// Draw gives the picture, and the same in words.
func (p Spread) Draw() (*doc.Picture, string) {
	var points []XY
	for _, q := range p.Points {
		if q.Mean > 0 && q.SD > 0 && drawable(q.Mean) && drawable(q.SD) {
			points = append(points, XY{Unit: q.Label, X: math.Log10(q.Mean), Y: math.Log10(q.SD), Named: true})
		}
	}
	xs, ys, n := extent(points)
	var b strings.Builder
	fmt.Fprintf(&b, "%s: standard deviation against mean of %s, both on logarithmic scales", title(p.Response, "Values"), count(n, "treatment"))
	if n > 0 {
		fmt.Fprintf(&b, "; means from %s to %s, standard deviations from %s to %s", rounded(math.Pow(10, xs.lo)), rounded(math.Pow(10, xs.hi)),
			rounded(math.Pow(10, ys.lo)), rounded(math.Pow(10, ys.hi)))
	}
	b.WriteString(".")
	var x extremes
	for _, q := range points {
		x.add(math.Pow(10, q.Y), q.Unit)
	}
	b.WriteString(x.sentence("Of the standard deviations"))
	if drawable(p.Slope) && n > 1 {
		fmt.Fprintf(&b, " The line has a slope of %s.", rounded(p.Slope))
	}
	if lost := len(p.Points) - n; lost > 0 {
		fmt.Fprintf(&b, " %s not drawn: a mean or standard deviation that is not above nought has no logarithm.", count(lost, "treatment"))
	}
	if n == 0 {
		return note(p.Size, "No means and standard deviations above nought to draw."), b.String()
	}
	return cloud(points, n, p.Size, func(k key, h float64) (*frame, []box) {
		w, _ := p.resolve(h)
		c := newCanvas(w, h+k.tall)
		y := logarithmic("Standard deviation (log scale)", wide(ys), h-foot, false)
		x := logarithmic(title(p.Response, "Response")+", mean (log scale)", wide(xs), across(w, 1, y), true)
		f := newFrame(c, x, y, insets{bottom: k.tall})
		k.draw(c, 1, h)
		return f, f.straight(p.Intercept, p.Slope)
	}), b.String()
}

// wide gives a range of logarithms some width, so that small differences do not look
// like large ones.
func wide(s span) span {
	const least = 0.12
	if d := least - (s.hi - s.lo); d > 0 {
		s.lo, s.hi = s.lo-d/2, s.hi+d/2
	}
	return s.padded(0.08)
}

// logarithmic makes an axis of a range of common logarithms, its ticks at the finest of
// 1, of 1-2-5, or of evenly spaced numbers that the length has room for.
func logarithmic(title string, s span, length float64, across bool) axis {
	apart := 22.0
	if across {
		apart = 46
	}
	a := axis{title: titled(title, max(length, 60)+20), span: s, grid: !across}
	room := max(length/apart, 2)
	add := func(v float64, label string) {
		if v < s.lo || v > s.hi {
			return
		}
		at := func(v float64) float64 { return (v - s.lo) / (s.hi - s.lo) * length }
		if n := len(a.ticks); n > 0 {
			last := a.ticks[n-1]
			need := textSize * leading
			if across {
				need = (width(label, textSize, false)+width(last.Label, textSize, false))/2 + 5
			}
			if at(v)-at(last.Value) < need {
				return
			}
		}
		a.ticks = append(a.ticks, plot.Tick{Value: v, Label: label})
	}
	if s.hi-s.lo < 0.7 {
		lo, hi := math.Pow(10, s.lo), math.Pow(10, s.hi)
		step := niceStep((hi - lo) / room)
		for _, v := range steps(span{lo: lo, hi: hi}, step) {
			if v > 0 {
				add(min(max(math.Log10(v), s.lo), s.hi), plain(v, step))
			}
		}
		return a
	}
	in := []float64{1, 2, 5}
	if 7*(s.hi-s.lo) <= 0.9*room {
		in = []float64{1, 2, 3, 4, 5, 6, 8}
	}
	every := 1
	if 3*(s.hi-s.lo) > room {
		in = in[:1]
		every = int(math.Ceil((s.hi - s.lo) / room))
	}
	for e := int(math.Floor(s.lo)); e <= int(math.Ceil(s.hi)); e++ {
		if e%every != 0 {
			continue
		}
		for _, m := range in {
			label := plain(m*math.Pow(10, float64(e)), math.Pow(10, float64(e)))
			if e > 5 || e < -4 {
				label = "10" + raised(e)
				if m != 1 {
					label = fmt.Sprintf("%g × ", m) + label
				}
			}
			add(float64(e)+math.Log10(m), label)
		}
	}
	return a
}
