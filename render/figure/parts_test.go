package figure

import (
	"math"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/plot/vg"

	"penwright/protocol/layout"
	"penwright/render/doc"
)

// linear is the linear-light value of an sRGB channel; luminance and contrast are those
// of WCAG 2.2 (relative luminance; contrast ratio).
func linear(c uint8) float64 {
	v := float64(c) / 255
	if v <= 0.04045 {
		return v / 12.92
	}
	return math.Pow((v+0.055)/1.055, 2.4)
}

func light(c doc.Colour) [3]float64 { return [3]float64{linear(c.R), linear(c.G), linear(c.B)} }

func luminance(v [3]float64) float64 { return 0.2126*v[0] + 0.7152*v[1] + 0.0722*v[2] }

func contrast(a, b [3]float64) float64 {
	x, y := luminance(a), luminance(b)
	return (max(x, y) + 0.05) / (min(x, y) + 0.05)
}

// over lays a colour with its alpha over an opaque ground, as screens do.
func over(c, ground doc.Colour) doc.Colour {
	mix := func(a, b uint8) uint8 {
		return uint8(math.Round((float64(a)*float64(c.A) + float64(b)*float64(255-c.A)) / 255))
	}
	return doc.Colour{R: mix(c.R, ground.R), G: mix(c.G, ground.G), B: mix(c.B, ground.B), A: 255}
}

// pages are the grounds on which figures are seen, with the text's colour on each: print,
// the light and the dark page of the style sheet, and a dark page that is less dark.
var pages = []struct{ paper, ink doc.Colour }{
	{doc.Colour{R: 255, G: 255, B: 255, A: 255}, doc.Colour{A: 255}},
	{doc.Colour{R: 255, G: 255, B: 255, A: 255}, doc.Colour{R: 0x1c, G: 0x21, B: 0x26, A: 255}},
	{doc.Colour{R: 0x15, G: 0x18, B: 0x1b, A: 255}, doc.Colour{R: 0xe4, G: 0xe2, B: 0xdd, A: 255}},
	{doc.Colour{R: 0x1c, G: 0x1c, B: 0x1f, A: 255}, doc.Colour{R: 0xe4, G: 0xe4, B: 0xe4, A: 255}},
}

// WCAG 2.2, 1.4.11: graphical objects have a contrast of 3:1 to what is beside them;
// 1.4.3: text one of 4.5:1.
func TestContrast(t *testing.T) {
	for _, page := range pages {
		for i, c := range append([]doc.Colour{grey}, palette[:]...) {
			if r := contrast(light(c), light(page.paper)); r < 3 {
				t.Errorf("colour %d has a contrast of %.2f to %v", i, r, page.paper)
			}
		}
		var p mapper
		var grounds []doc.Colour
		for i := range 3 * len(palette) {
			grounds = append(grounds, p.light(i))
		}
		for i := -4; i <= 4; i++ {
			grounds = append(grounds, p.shade(float64(i)/4))
		}
		grounds = append(grounds, tint(palette[0], 0.2), tint(grey, 0.22))
		for _, g := range grounds {
			if r := contrast(light(page.ink), light(over(g, page.paper))); r < 4.5 {
				t.Errorf("text has a contrast of %.2f on %v over %v", r, g, page.paper)
			}
		}
	}
}

// Any two colours are told apart by readers without red, green or blue cones.
// The matrices simulate protanopia, deuteranopia and tritanopia at full severity
// (Machado, Oliveira and Fernandes, IEEE TVCG 15 (2009) 1291-1298; from memory). The
// distance is Euclidean in Oklab (B. Ottosson 2020; from memory); 0.05 is about two
// and a half times a just noticeable difference of large fields.
func TestColourBlind(t *testing.T) {
	simulations := map[string][3][3]float64{
		"normal":       {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
		"protanopia":   {{0.152286, 1.052583, -0.204868}, {0.114503, 0.786281, 0.099216}, {-0.003882, -0.048116, 1.051998}},
		"deuteranopia": {{0.367322, 0.860646, -0.227968}, {0.280085, 0.672501, 0.047413}, {-0.011820, 0.042940, 0.968881}},
		"tritanopia":   {{1.255528, -0.076749, -0.178779}, {-0.078411, 0.930809, 0.147602}, {0.004733, 0.691367, 0.303900}},
	}
	apply := func(m [3][3]float64, v [3]float64) (r [3]float64) {
		for i := range r {
			r[i] = m[i][0]*v[0] + m[i][1]*v[1] + m[i][2]*v[2]
		}
		return r
	}
	oklab := func(v [3]float64) [3]float64 {
		v = apply([3][3]float64{{0.4122214708, 0.5363325363, 0.0514459929}, {0.2119034982, 0.6806995451, 0.1073969566}, {0.0883024619, 0.2817188376, 0.6299787005}}, v)
		for i := range v {
			v[i] = math.Cbrt(v[i])
		}
		return apply([3][3]float64{{0.2104542553, 0.7936177850, -0.0040720468}, {1.9779984951, -2.4285922050, 0.4505937099}, {0.0259040371, 0.7827717662, -0.8086757660}}, v)
	}
	for name, m := range simulations {
		see := func(c doc.Colour) [3]float64 {
			v := apply(m, light(c))
			for i := range v {
				v[i] = min(max(v[i], 0), 1)
			}
			return oklab(v)
		}
		for i, a := range palette {
			for j, b := range palette[:i] {
				x, y := see(a), see(b)
				if d := math.Sqrt((x[0]-y[0])*(x[0]-y[0]) + (x[1]-y[1])*(x[1]-y[1]) + (x[2]-y[2])*(x[2]-y[2])); d < 0.05 {
					t.Errorf("%s: colours %d and %d differ by %.3f", name, j, i, d)
				}
			}
		}
	}
}

// In grey the shading of a residual tells how far it lies out: each step is darker than
// the one before it on a light page and lighter on a dark one, above nought and below it.
// On which side it lies the printed sign says, or the bar that stands for it.
func TestGreyOrder(t *testing.T) {
	for _, page := range pages {
		for _, side := range []float64{-1, 1} {
			var p mapper
			last := luminance(light(page.paper))
			dark := last < 0.5
			for i := 1; i <= 8; i++ {
				l := luminance(light(over(p.shade(side*float64(i)/8), page.paper)))
				if dark && l <= last || !dark && l >= last {
					t.Errorf("step %v of %d eighths is %.3f after %.3f on %v", side, i, l, last, page.paper)
				}
				last = l
			}
		}
	}
	m := planned("block 8, plot within block 60", 60)
	m.Shade = "Residual"
	below := 0
	for b := range m.Boxes {
		for i := range m.Boxes[b].Cells {
			c := &m.Boxes[b].Cells[i]
			if c.Value = 1; i%3 == 0 {
				c.Value = -1
				below++
			}
		}
	}
	pic, _ := m.Draw()
	bars, signs := 0, 0
	for _, op := range pic.Ops {
		switch op := op.(type) {
		case doc.Stroke:
			if op.Colour == ink && op.Width == 0.8 && len(op.Path) == 2 {
				bars++
			}
		case doc.Label:
			if strings.HasPrefix(op.Text, "−") {
				signs++
			}
		}
	}
	if bars != below+1 && signs < below {
		t.Errorf("%d bars and %d signs for %d values below nought", bars, signs, below)
	}
}

// Without colour, marks and dashes must do.
func TestSymbols(t *testing.T) {
	type mark struct {
		shape  shape
		colour doc.Colour
	}
	seen := map[mark]bool{}
	for i := range symbols {
		s, c := symbol(i)
		if m := (mark{s, c}); seen[m] {
			t.Errorf("symbol %d is one of those before", i)
		} else {
			seen[m] = true
		}
	}
	grey := map[[2]int]bool{}
	for i := range 24 {
		s, _ := symbol(i)
		k := [2]int{int(s), i % len(dashes)}
		if grey[k] {
			t.Errorf("line %d has the mark and the dash of one before", i)
		}
		grey[k] = true
	}
	for i := range len(dashes) {
		for j := range i {
			if slices.Equal(dash(i), dash(j)) {
				t.Errorf("dashes %d and %d are the same", i, j)
			}
		}
	}
}

// The axes that readers expect: round numbers, as few decimals as tell them apart, and a
// minus sign that is one.
func TestNumbers(t *testing.T) {
	for _, c := range []struct {
		lo, hi float64
		title  string
		want   []string
	}{
		{0, 100, "g", []string{"0", "20", "40", "60", "80", "100"}},
		{-1, 1, "g", []string{"−1.0", "−0.5", "0.0", "0.5", "1.0"}},
		{612, 745, "g", []string{"620", "640", "660", "680", "700", "720", "740"}},
		{0.0101, 0.0147, "g", []string{"0.011", "0.012", "0.013", "0.014"}},
		{1e12, 1e12 + 50, "g, less 1000000000000", []string{"0", "10", "20", "30", "40", "50"}},
		{-5e7 - 3, -5e7, "g, plus 50000000", []string{"−3.0", "−2.5", "−2.0", "−1.5", "−1.0", "−0.5", "0.0"}},
		{0, 5.2e6, "g (10⁶)", []string{"0", "1", "2", "3", "4", "5"}},
		{-6e-6, 0, "g (10⁻⁶)", []string{"−6", "−5", "−4", "−3", "−2", "−1", "0"}},
	} {
		a := numbers("g", span{lo: c.lo, hi: c.hi}, 170, false)
		var got []string
		for _, tick := range a.ticks {
			got = append(got, tick.Label)
			if tick.Value < c.lo || tick.Value > c.hi {
				t.Errorf("tick at %v outside %v to %v", tick.Value, c.lo, c.hi)
			}
		}
		if !slices.Equal(got, c.want) || strings.Join(a.title, " ") != c.title {
			t.Errorf("%v to %v: %q %q, want %q %q", c.lo, c.hi, a.title, got, c.title, c.want)
		}
	}
	for in, want := range map[string]string{"Mass (g)": "Mass (10⁶ g)", "Mass": "Mass (10⁶)", "": "(10⁶)", "Gain (a) of b": "Gain (a) of b (10⁶)"} {
		if got := inUnit(in, "10⁶"); got != want {
			t.Errorf("%q becomes %q", in, got)
		}
	}
	for _, c := range []struct {
		lo, hi float64
		want   []string
	}{
		{-0.1, 3.2, []string{"1", "10", "100", "1000"}},
		{0, 1, []string{"1", "2", "5", "10"}},
		{math.Log10(35), math.Log10(62), []string{"35", "40", "45", "50", "55", "60"}},
		{5, 9, []string{"100000", "10⁶", "10⁷", "10⁸", "10⁹"}},
	} {
		a := logarithmic("", span{lo: c.lo, hi: c.hi}, 170, false)
		var got []string
		for _, tick := range a.ticks {
			got = append(got, tick.Label)
		}
		if !slices.Equal(got, c.want) {
			t.Errorf("log %v to %v: %q, want %q", c.lo, c.hi, got, c.want)
		}
	}
}

// spread against its definition: the least sum of squared moves that keeps order and
// distance, found by trying all places on a grid.
func TestSpread(t *testing.T) {
	for trial := range 60 {
		n := 2 + trial%3
		at := make([]float64, n)
		for i := range at {
			at[i] = math.Round(10 * (1 + noise(trial*7+i)))
		}
		slices.Sort(at)
		const apart, lo, hi = 4.0, 0.0, 20.0
		got := spread(at, apart, lo, hi)
		if got == nil {
			t.Fatalf("no room for %v", at)
		}
		cost := func(y []float64) float64 {
			s := 0.0
			for i := range y {
				s += (y[i] - at[i]) * (y[i] - at[i])
			}
			return s
		}
		best := math.Inf(1)
		y := make([]float64, n)
		var try func(i int, from float64)
		try = func(i int, from float64) {
			if i == n {
				best = min(best, cost(y))
				return
			}
			for v := from; v <= hi; v += 0.5 {
				y[i] = v
				try(i+1, v+apart)
			}
		}
		try(0, lo)
		for i := 1; i < n; i++ {
			if got[i]-got[i-1] < apart-1e-9 {
				t.Errorf("%v become %v", at, got)
			}
		}
		if got[0] < lo-1e-9 || got[n-1] > hi+1e-9 || cost(got) > best+1e-9 {
			t.Errorf("%v become %v at a cost of %v, not %v", at, got, cost(got), best)
		}
	}
	if spread([]float64{1, 1, 1, 1}, 4, 0, 11) != nil {
		t.Error("four labels of height 4 have room in 11")
	}
}

// The plot library's coordinates, turned and scaled, come out in the picture's.
func TestCanvas(t *testing.T) {
	c := newCanvas(100, 80)
	c.Push()
	c.Translate(vg.Point{X: 10, Y: 20})
	c.Rotate(math.Pi / 2)
	c.Scale(2, 2)
	var p vg.Path
	p.Move(vg.Point{X: 5})
	p.Line(vg.Point{X: 5, Y: 1})
	p.QuadTo(vg.Point{X: 6, Y: 1}, vg.Point{X: 6, Y: 2})
	p.Close()
	c.SetLineDash([]vg.Length{3, 1}, 0)
	c.Stroke(p)
	c.Pop()
	c.Stroke(p)
	// (5,0) scaled by 2, turned: (0,10), moved: (10,30), from the top: (10,50).
	s := c.pic.Ops[0].(doc.Stroke)
	want := []doc.Segment{
		{Kind: doc.MoveTo, X: 10, Y: 50}, {Kind: doc.LineTo, X: 8, Y: 50},
		{Kind: doc.CurveTo, X1: 8, Y1: 48.67, X2: 7.33, Y2: 48, X: 6, Y: 48}, {Kind: doc.Close},
	}
	if !slices.Equal(s.Path, want) || !slices.Equal(s.Dashes, []float64{3, 1}) {
		t.Errorf("turned: %+v", s)
	}
	if s := c.pic.Ops[1].(doc.Stroke); s.Path[0] != (doc.Segment{X: 5, Y: 80}) || s.Dashes != nil {
		t.Errorf("after the pop: %+v", s)
	}

	// An arc stays on its circle.
	for _, a := range [][2]float64{{0, 2 * math.Pi}, {1, -2}, {0.3, 4}} {
		path := arc(0, 0, 1000, a[0], a[1])
		x, y := path[0].X, path[0].Y
		for _, s := range path[1:] {
			for i := range 11 {
				u := float64(i) / 10
				v := 1 - u
				bx := v*v*v*x + 3*v*v*u*s.X1 + 3*v*u*u*s.X2 + u*u*u*s.X
				by := v*v*v*y + 3*v*v*u*s.Y1 + 3*v*u*u*s.Y2 + u*u*u*s.Y
				if d := math.Abs(math.Hypot(bx, by) - 1000); d > 0.3 {
					t.Errorf("arc %v leaves the circle by %v", a, d)
				}
			}
			x, y = s.X, s.Y
		}
		sin, cos := math.Sincos(a[0] + a[1])
		if math.Hypot(x-1000*cos, y-1000*sin) > 1e-6 {
			t.Errorf("arc %v ends at %v %v", a, x, y)
		}
	}
}

func TestFromPlan(t *testing.T) {
	type at struct {
		boxes, cells int
		label, unit  string // of the first box, of its last cell
		columns      int
	}
	for _, c := range []struct {
		units string
		want  at
	}{
		{"pen 12", at{1, 12, "", "Pen 12", 0}},
		{"block 5, pen within block 4", at{5, 20, "Block 1", "Block 1, pen 4", 0}},
		{"cow 4, period 4, sample crosses cow period", at{1, 16, "", "Cow 4, period 4", 4}},
		{"square 2, cow within square 4, period within square 4, sample crosses cow period", at{2, 32, "Square 1", "Square 1, cow 4, period 4", 4}},
		{"square 2, cow within square 4, period 4, sample crosses cow period", at{2, 32, "Square 1", "Square 1, cow 4, period 4", 4}},
		{"block 3, strip within block 3, lane within block 4, plot crosses strip lane", at{3, 36, "Block 1", "Block 1, strip 3, lane 4", 4}},
		{"replicate 2, block within replicate 3, plot within block 3", at{2, 18, "Replicate 1", "Replicate 1, block 3, plot 3", 0}},
		{"block 2, paddock within block 3, pen within paddock 4", at{2, 24, "Block 1", "Block 1, paddock 3, pen 4", 0}},
	} {
		m := FromPlan(plan(c.units), nil)
		got := at{boxes: len(m.Boxes), label: m.Boxes[0].Label, columns: m.Boxes[0].Columns}
		got.cells = len(cells(m.Boxes, nil))
		first := cells(m.Boxes[:1], nil)
		got.unit = first[len(first)-1].Unit
		if got != c.want {
			t.Errorf("%s: %+v, want %+v", c.units, got, c.want)
		}
		seen := map[string]bool{}
		for _, cell := range cells(m.Boxes, nil) {
			if seen[cell.Unit] {
				t.Errorf("%s: two cells are %s", c.units, cell.Unit)
			}
			seen[cell.Unit] = true
		}
		pic, alt := m.Draw()
		inspect(t, pic)
		sentences(t, alt)
	}
	if m := FromPlan(&layout.Plan{}, nil); len(m.Boxes) != 0 {
		t.Error("boxes of no units")
	}
}

// In a grid, a cell stands where its row and column meet.
func TestFromPlanPlaces(t *testing.T) {
	p := plan("cow 3, period 4, sample crosses cow period")
	m := FromPlan(p, func(u, i int) Look { return Look{Label: "t", Treatment: i, Value: none} })
	b := m.Boxes[0]
	for k, c := range b.Cells {
		i := c.Treatment // the instance
		row, column := int(p.Coarse(2, 0)[i]), int(p.Coarse(2, 1)[i])
		if k != row*b.Columns+column {
			t.Errorf("the sample of row %d and column %d stands at %d", row, column, k)
		}
	}
	if got := b.Down[2] + "/" + b.Across[3]; got != "Cow 3/Period 4" {
		t.Error(got)
	}
}

func TestInWords(t *testing.T) {
	want := map[string]string{
		"points": "Daily gain, g: 19 values by Dried yeast, g/kg (0, 20, 40, 60), from ",
		"means":  "Daily gain, g: 5 means by Dried yeast, g/kg, with 95 % confidence intervals: Harrow 1 ",
		"flow": "Flow of pens over 4 treatments: 20 planned, 20 allotted, 19 observed, 18 analysed. 2 lost on the way. " +
			"20 g/kg: 5, 5, 5, 4 (feeder failure). 40 g/kg: 5, 5, 4 (humane endpoint reached, whole pen removed), 4.",
		"map-blocks": "Map of 20 pens in 5 groups (Block 1, Block 2, Block 3, Block 4, Block 5). Each of 4 treatments stands on 5 pens. 1 pen excluded and crossed out: Block 2, pen 3.",
	}
	for _, g := range gallery() {
		if w, ok := want[g.name]; ok {
			if _, alt := g.Draw(); len(alt) < len(w) || alt[:len(w)] != w {
				t.Errorf("%s: %q", g.name, alt)
			}
		}
	}
}

// The picture in words tells what is highest and lowest, from the data.
func TestWordsNameExtremes(t *testing.T) {
	for _, g := range gallery() {
		type value struct {
			name string
			v    float64
		}
		var all []value
		far := false // only the one that is farthest from nought is told
		switch d := g.drawing.(type) {
		case Points:
			far = d.Residual
			for _, group := range d.Groups {
				for _, q := range group.Points {
					if !q.Excluded {
						all = append(all, value{q.Unit, q.Value})
					}
				}
			}
		case Means:
			for _, q := range d.Means {
				all = append(all, value{q.Label, q.Value})
			}
		case Interaction:
			for _, l := range d.Lines {
				for i, v := range l.Values {
					all = append(all, value{l.Label + " at " + d.Levels[i], v})
				}
			}
		case Fitted:
			far = true
			for _, q := range d.Points {
				all = append(all, value{q.Unit, q.Y})
			}
		case Quantiles:
			for _, q := range d.Points {
				all = append(all, value{q.Unit, q.Value})
			}
		case Spread:
			for _, q := range d.Points {
				all = append(all, value{q.Label, q.SD})
			}
		case Map:
			if far = true; d.Shade == "" {
				continue
			}
			for _, c := range cells(d.Boxes, nil) {
				if !c.Excluded {
					all = append(all, value{c.Unit, c.Value})
				}
			}
		case Differences:
			far = true
			for _, q := range d.Rows {
				all = append(all, value{q.String(), q.Value})
			}
		default:
			continue
		}
		high, low, out := all[0], all[0], all[0]
		for _, x := range all {
			if x.v > high.v {
				high = x
			}
			if x.v < low.v {
				low = x
			}
			if math.Abs(x.v) > math.Abs(out.v) {
				out = x
			}
		}
		want := []value{high, low}
		if far {
			want = []value{out}
		}
		_, alt := g.Draw()
		for _, x := range want {
			if s := x.name + " (" + rounded(x.v) + ")"; !strings.Contains(alt, s) {
				t.Errorf("%s: %q is not told in %q", g.name, s, alt)
			}
		}
	}
	// What a curve of power is read for.
	p := Power{X: "Pens", Target: 0.8, Chosen: 4, Curves: []PowerCurve{
		{Label: "SD 18", Points: []PowerPoint{{N: 2, Power: 0.3}, {N: 3, Power: 0.7}, {N: 4, Power: 0.85}, {N: 5, Power: 0.95}}},
		{Label: "SD 30", Points: []PowerPoint{{N: 2, Power: 0.1}, {N: 3, Power: 0.2}, {N: 4, Power: 0.3}, {N: 5, Power: 0.4}}},
	}}
	_, alt := p.Draw()
	for _, s := range []string{"SD 18: 85 % with 4.", "SD 18 reaches it from 4 on.", "SD 30 does not reach it."} {
		if !strings.Contains(alt, s) {
			t.Errorf("%q is not told in %q", s, alt)
		}
	}
	// Lines that cross, and such that do not.
	cross := Interaction{Levels: []string{"a", "b"}, Lines: []Line{{Label: "x", Values: []float64{1, 2}}, {Label: "y", Values: []float64{2, 1}}}}
	if _, alt := cross.Draw(); !strings.Contains(alt, "The lines cross.") {
		t.Error(alt)
	}
	cross.Lines[1].Values = []float64{2, 3}
	if _, alt := cross.Draw(); !strings.Contains(alt, "The lines keep their order") {
		t.Error(alt)
	}
}
