package figure

import (
	"fmt"
	"math"
	"reflect"
	"regexp"
	"strings"
	"testing"

	"penwright/render/doc"
)

// outline is the box that the glyphs of a label fill: from the foot of a g to the top of
// an l. Labels are level or turned by a quarter.
func outline(l doc.Label) box {
	const up, down = 0.74, 0.21
	if l.Angle == 90 {
		return box{x0: l.X - up*l.Size, x1: l.X + down*l.Size, y0: l.Y - l.Width, y1: l.Y}
	}
	return box{x0: l.X, x1: l.X + l.Width, y0: l.Y - up*l.Size, y1: l.Y + down*l.Size}
}

var exponent = regexp.MustCompile(`[0-9]e[+-]?[0-9]`)

// inspect fails where texts run into one another, where anything leaves the picture, or
// where a coordinate is not a number.
func inspect(t *testing.T, pic *doc.Picture) {
	t.Helper()
	if !(pic.Width > 0 && pic.Height > 0) {
		t.Fatalf("the picture is %v by %v", pic.Width, pic.Height)
	}
	var texts []doc.Label
	const slack = 0.02
	inside := func(what string, b box) {
		if !(b.x0 >= -slack && b.y0 >= -slack && b.x1 <= pic.Width+slack && b.y1 <= pic.Height+slack) {
			t.Errorf("%s leaves the picture of %v by %v: %+v", what, pic.Width, pic.Height, b)
		}
	}
	paths := func(what string, segments []doc.Segment) {
		for i, s := range segments {
			if i == 0 && s.Kind != doc.MoveTo {
				t.Errorf("%s does not begin with a move", what)
			}
			if s.Kind == doc.Close {
				continue
			}
			inside(what, box{x0: s.X, y0: s.Y, x1: s.X, y1: s.Y})
			if s.Kind == doc.CurveTo {
				inside(what, box{x0: s.X1, y0: s.Y1, x1: s.X1, y1: s.Y1})
				inside(what, box{x0: s.X2, y0: s.Y2, x1: s.X2, y1: s.Y2})
			}
		}
	}
	for _, op := range pic.Ops {
		switch op := op.(type) {
		case doc.Stroke:
			if op.Width < 0.25 {
				t.Errorf("a line is %v wide", op.Width)
			}
			paths("a stroke", op.Path)
		case doc.Fill:
			paths("a fill", op.Path)
		case doc.Label:
			if exponent.MatchString(op.Text) && !strings.Contains(op.Text, "long") {
				t.Errorf("%q is a number as programs write it", op.Text)
			}
			if op.Size < leastSize-1e-9 {
				t.Errorf("%q is %v high", op.Text, op.Size)
			}
			if op.Angle != 0 && op.Angle != 90 {
				t.Errorf("%q is turned by %v", op.Text, op.Angle)
			}
			if op.Text == "" || strings.ContainsAny(op.Text, "\n\t") || strings.Contains(op.Text, "-") && strings.ContainsAny(op.Text[:1], "-") {
				t.Errorf("text %q", op.Text)
			}
			inside(fmt.Sprintf("%q", op.Text), outline(op))
			texts = append(texts, op)
		}
		if t.Failed() {
			return
		}
	}
	if len(texts) > 3000 {
		texts = texts[:3000]
	}
	// Nor does a text lie on a mark, where it would spoil both.
	for _, op := range pic.Ops {
		f, ok := op.(doc.Fill)
		if !ok || f.Colour.A < 255 || f.Colour.Role == doc.Paper {
			continue
		}
		m := box{x0: math.Inf(1), y0: math.Inf(1), x1: math.Inf(-1), y1: math.Inf(-1)}
		for _, s := range f.Path {
			if s.Kind != doc.Close {
				m = box{x0: min(m.x0, s.X), y0: min(m.y0, s.Y), x1: max(m.x1, s.X), y1: max(m.y1, s.Y)}
			}
		}
		if m.x1-m.x0 > 8 || m.y1-m.y0 > 8 || pic.Width < 250 {
			continue
		}
		for _, l := range texts {
			if b := outline(l); b.x0 < m.x1-0.3 && m.x0 < b.x1-0.3 && b.y0 < m.y1-0.3 && m.y0 < b.y1-0.3 {
				t.Errorf("%q lies on a mark: %+v %+v", l.Text, b, m)
				return
			}
		}
	}
	for i, a := range texts {
		for _, b := range texts[:i] {
			x, y := outline(a), outline(b)
			if x.x0 < y.x1-slack && y.x0 < x.x1-slack && x.y0 < y.y1-slack && y.y0 < x.y1-slack {
				t.Errorf("%q and %q run into one another: %+v %+v", a.Text, b.Text, x, y)
				return
			}
		}
	}
}

func TestGalleryLooks(t *testing.T) {
	for _, g := range gallery() {
		t.Run(g.name, func(t *testing.T) {
			pic, alt := g.Draw()
			inspect(t, pic)
			sentences(t, alt)
			again, _ := g.Draw()
			if !reflect.DeepEqual(pic, again) {
				t.Error("two drawings differ")
			}
		})
	}
}

// sentences checks that the picture in words is sentences.
func sentences(t *testing.T, alt string) {
	t.Helper()
	if len(alt) < 10 || !strings.HasSuffix(alt, ".") || strings.Contains(alt, "NaN") || strings.Contains(alt, "Inf") ||
		strings.Contains(alt, "..") || strings.Contains(alt, "  ") || len(alt) > 4000 {
		t.Errorf("in words: %q", alt)
	}
}

// names of treatments: short and long ones, one of 120 letters, scripts without a face
// and from right to left.
var nameKinds = []struct {
	kind string
	of   func(int) string
}{
	{"varieties", varietyName},
	{"doses", doseName},
	{"long", func(i int) string {
		return fmt.Sprintf("basal diet with a long description of an additive and its dose no %d", i+1)
	}},
	{"letters", func(i int) string {
		s := "basal diet of barley and soya bean meal with a long description of an additive, its maker, its batch and the dose, no "
		return s + fmt.Sprint(i+1) + strings.Repeat("x", 120-len(s)-len(fmt.Sprint(i+1)))
	}},
	{"unbroken", func(i int) string { return strings.Repeat("Hydroxypropylmethyl", 3) + fmt.Sprint(i+1) }},
	{"ideographs", func(i int) string { return fmt.Sprintf("小麦 %d", i+1) }},
	{"hebrew", func(i int) string { return fmt.Sprintf("שעורה מחיטה %d", i+1) }},
}

// kinds draws a figure of each kind with n treatments of a name, in so many blocks.
func kinds(n, blocks int, name func(int) string) []drawing {
	points := trial(n, blocks, name)
	means := meansOf(points)
	doses := means
	doses.Dose = true
	residual := points
	residual.Residual = true
	crossing := crossed(min(n, 9), n)
	inverse := crossed(n, 3)
	flow := Flow{Unit: "pen", Stages: []string{"planned", "allotted", "observed to the end of the trial", "analysed"}}
	sound := Flow{Unit: "pen", Stages: flow.Stages}
	spread := Spread{Response: "yield", Slope: 1}
	m := Map{Unit: "pen", Boxes: []Box{{}, {Label: "Block 2"}}}
	differences := Differences{Response: "Difference of daily gain (g/d)", Interval: "simultaneous 95 % limits"}
	power := Power{X: "Replicates", Target: 0.8, Chosen: 4}
	cloud := Fitted{X: "Fitted", Y: "Residual", Zero: true}
	for i := range n {
		flow.Rows = append(flow.Rows, FlowRow{Label: name(i), Counts: []int{6, 6, 5, 5}, Reasons: []string{"", []string{"a long reason why a pen was removed from the trial", "pneumonia"}[i%2], ""}})
		sound.Rows = append(sound.Rows, FlowRow{Label: name(i), Counts: []int{6, 6, 6, 6}})
		spread.Points = append(spread.Points, Scale{Label: name(i), Mean: 10 + float64(i), SD: 1 + 0.3*noise(i)})
		crossing.Lines[i].Label = name(i)
		if i < 40 {
			differences.Rows = append(differences.Rows, Difference{A: name(i), B: name((i + n/2) % n), Value: 10 * noise(i), Low: 10*noise(i) - 7, High: 10*noise(i) + 7})
		}
		power.Curves = append(power.Curves, PowerCurve{Label: name(i), Points: []PowerPoint{{N: 2, Power: 0.2 + 0.004*float64(i)}, {N: 4, Power: 0.6}, {N: 8, Power: 0.9}}})
		cloud.Points = append(cloud.Points, XY{Unit: name(i), X: noise(i), Y: noise(i + 400), Named: i%3 == 0})
		m.Treatments = append(m.Treatments, name(i))
		for b := range m.Boxes {
			m.Boxes[b].Cells = append(m.Boxes[b].Cells, Cell{Unit: fmt.Sprint("pen ", i), Number: fmt.Sprint(i + 1), Label: name(i), Treatment: i, Value: noise(i), Excluded: i == 1, Lost: i == 2})
		}
	}
	for i := range inverse.Levels {
		inverse.Levels[i] = name(i)
	}
	named := inverse
	named.X = nil
	shaded := m
	shaded.Shade = "Residual of the daily gain of growing barrows in the second period (g/d)"
	return []drawing{points, residual, means, doses, crossing, inverse, named, flow, sound, spread, differences, power, cloud, m, shaded}
}

func TestAnyNumberOfTreatments(t *testing.T) {
	for k, name := range nameKinds {
		// Each number of a few treatments, then some with each kind of name.
		numbers := []int{1, 2, 3, 7, 9 + k, 24, 33 + k, 40, 60}
		if k == 0 {
			numbers = []int{1, 2, 3, 4, 5, 6, 7, 8, 12, 20, 30, 45, 60}
		}
		for _, n := range numbers {
			blocks := 3
			if n%5 == 0 {
				blocks = 40
			}
			for _, d := range kinds(n, blocks, name.of) {
				pic, alt := d.Draw()
				inspect(t, pic)
				sentences(t, alt)
				if limit := pageHeight + 1.0; pic.Height > limit {
					t.Errorf("%v high", pic.Height)
				}
				if t.Failed() {
					t.Fatalf("%T with %d treatments such as %q in %d blocks", d, n, name.of(0), blocks)
				}
			}
		}
	}
}

// Every name stands in the picture, whole; where a page has no room for that, with its
// two ends, by which it is told from the others.
func TestEveryName(t *testing.T) {
	for _, name := range nameKinds {
		for _, n := range []int{2, 12, 24, 60} {
			for _, d := range kinds(n, 3, name.of) {
				switch d := d.(type) {
				case Means:
					if d.Dose {
						continue // a scale has numbers
					}
				case Interaction:
					if d.X != nil && len(d.Lines) == 3 || len(d.Lines) == n && name.kind == "doses" {
						continue
					}
				case Flow:
					if len(d.Rows) > foldFrom {
						continue // those that lost nothing are counted together
					}
				case Differences:
					if n > 40 {
						continue // not all have a row
					}
				case Fitted:
					continue // a few are named
				}
				pic, _ := d.Draw()
				var texts []string
				for _, op := range pic.Ops {
					if l, ok := op.(doc.Label); ok {
						texts = append(texts, l.Text)
					}
				}
				all := " " + strings.Join(texts, " ") + " "
				shortened := map[string]bool{}
				for _, s := range texts {
					if strings.Contains(s, "…") {
						shortened[s] = true
					}
				}
				whole := 0
				for i := range n {
					if strings.Contains(all, clean(name.of(i))) {
						whole++
					}
				}
				if whole+len(shortened) < n {
					t.Errorf("%T of %d %s: %d names in full, %d shortened", d, n, name.kind, whole, len(shortened))
				}
				if whole < n && n <= 24 {
					t.Errorf("%T of %d %s: only %d names in full", d, n, name.kind, whole)
				}
			}
		}
	}
}

// An editor's extremes: none of them may panic, leave the picture or spoil a text.
func TestExtremes(t *testing.T) {
	inf := math.Inf(1)
	values := []struct {
		name string
		of   []float64
	}{
		{"none", []float64{}},
		{"one", []float64{3}},
		{"equal", []float64{5, 5, 5, 5}},
		{"nought", []float64{0, 0}},
		{"missing", []float64{none, none}},
		{"partly", []float64{none, 1, inf, 2, -inf}},
		{"huge", []float64{1e308, -1e308, 1e299}},
		{"big", []float64{1e300, -1e300}},
		{"tiny", []float64{1e-310, 3e-310, 0}},
		{"small", []float64{2e-9, 5e-9}},
		{"close", []float64{1e15, 1e15 + 1, 1e15 + 2}},
		{"negative", []float64{-3.5, -0.25}},
		{"thousands", []float64{123456, 124567}},
		{"millions", []float64{2.5e6, 7.1e6}},
	}
	texts := []string{"", "Gain", "kg ha⁻¹", "line\nbreak\tand\x00control", "\xff\xfe broken", "漢字 and \u202eturned", strings.Repeat("long ", 1000), strings.Repeat("x", 5000)}
	sizes := []Size{{}, {Width: 60, Height: 40}, {Width: 200, Height: 120}, {Width: none, Height: -inf}, {Width: inf, Height: 1e9}}
	for v, value := range values {
		name, vs := value.name, value.of
		for k, text := range texts {
			for i, size := range sizes {
				if (i+k+v)%7 != 0 && (k > 0 || i > 0) {
					continue // all of them meet, but not all with all
				}
				p := Points{Size: size, Response: text, By: text, Blocks: text, Groups: []Group{{Label: text, Mean: none}, {Label: text, Mean: inf}, {}}}
				m := Means{Size: size, Response: text, By: text, Interval: text}
				n := Interaction{Size: size, Response: text, By: text, Over: text, BarLabel: text}
				f := Fitted{Size: size, X: text, Y: text, Zero: k%2 == 0}
				q := Quantiles{Size: size, X: text, Y: text, Slope: 1, Envelope: text}
				s := Spread{Size: size, Response: text, Slope: 0.5}
				fl := Flow{Size: size, Unit: text, Stages: []string{text, text, "analysed"}}
				mp := Map{Size: size, Unit: text, Boxes: []Box{{Label: text}, {Label: text, Columns: 2, Down: []string{text}, Across: []string{text, text, text}}}, Treatments: []string{text, text}}
				pw := Power{Size: size, X: text, Target: 0.8}
				df := Differences{Size: size, Response: text, By: text, Interval: text}
				for i, v := range vs {
					p.Groups[0].Points = append(p.Groups[0].Points, Point{Unit: text, Block: text, Value: v, Excluded: i == 1})
					p.Groups[1].Points = append(p.Groups[1].Points, Point{Unit: text, Block: text, Value: -v})
					m.Means = append(m.Means, Mean{Label: text, X: v, Value: v, Low: v - 1, High: v + 1, Letters: text})
					n.Levels = append(n.Levels, text)
					n.X = append(n.X, v)
					n.Lines = append(n.Lines, Line{Label: text, Values: vs})
					n.Bar = v
					f.Points = append(f.Points, XY{Unit: text, X: v, Y: -v, Named: true})
					q.Points = append(q.Points, Quantile{Unit: text, Expected: v, Value: v, Low: v - 1, High: inf, Named: true})
					s.Points = append(s.Points, Scale{Label: text, Mean: v, SD: v})
					s.Intercept = v
					fl.Rows = append(fl.Rows, FlowRow{Label: text, Counts: []int{i, int(min(max(v, -9), 9)), 3, 4, 5}, Reasons: []string{text}})
					for b := range mp.Boxes {
						mp.Boxes[b].Cells = append(mp.Boxes[b].Cells, Cell{Unit: text, Number: text, Label: text, Treatment: i - 1, Value: v, Excluded: i == 2})
					}
					df.Rows = append(df.Rows, Difference{At: text, A: text, B: text, Value: v, Low: v - 1, High: 2 * v})
					pw.Curves = append(pw.Curves, PowerCurve{Label: text, Points: []PowerPoint{{N: v, Power: 0.3}, {N: 2 * v, Power: v}}})
				}
				dosed, shaded, residual := m, mp, p
				dosed.Dose, shaded.Shade, residual.Residual = true, title(text, "Residual"), true
				dosed.Trend = Trend{Label: text, Points: []TrendPoint{{X: 0, Y: 1}, {X: none, Y: 2}, {X: 3, Y: inf, Low: 1, High: none}}}
				nameless := n
				nameless.X = nil
				for _, d := range []drawing{p, residual, m, dosed, n, nameless, f, q, s, fl, mp, shaded, pw, df} {
					pic, alt := d.Draw()
					inspect(t, pic)
					if strings.Contains(alt, "NaN") || len(alt) > 60000 {
						t.Errorf("in words: %.300q", alt)
					}
					if t.Failed() {
						t.Fatalf("%T of %s values, text %d, size %+v", d, name, k, size)
					}
				}
			}
		}
	}
}

func TestMapsOfAnyShape(t *testing.T) {
	grid := func(rows, columns int) Map {
		b := Box{Label: "Field", Columns: columns}
		for r := range rows {
			b.Down = append(b.Down, fmt.Sprint("Row ", r+1))
			for range columns {
				b.Cells = append(b.Cells, Cell{Unit: "plot", Label: "T1", Value: noise(r)})
			}
		}
		for c := range columns {
			b.Across = append(b.Across, fmt.Sprint("Column ", c+1))
		}
		return Map{Unit: "plot", Boxes: []Box{b}, Treatments: []string{"T1"}}
	}
	many := Map{Unit: "pen"}
	deep := Box{Label: "innermost", Cells: make([]Cell, 3)}
	for i := range 3000 {
		many.Boxes = append(many.Boxes, Box{Label: fmt.Sprint("House ", i), Cells: make([]Cell, 1+i%2)})
		if i < 40 {
			deep = Box{Label: fmt.Sprint("level ", i), Boxes: []Box{deep, {}}}
		}
	}
	for i, m := range []Map{
		grid(1, 1), grid(1, 2000), grid(2000, 1), grid(60, 60), grid(3, 900), many,
		{Boxes: []Box{deep}}, {Boxes: []Box{{Columns: 4}, {Label: "x", Columns: 4, Boxes: []Box{{}, deep}, Across: []string{"a", "b"}, Down: []string{"c", "d"}}}},
		planned("row 3, column 3, plot crosses row column, subplot within plot 4", 4),
		planned("block 2, strip within block 3, lane within block 4, plot crosses strip lane, subplot within plot 2", 2),
		planned("site 3, block within site 4, plot within block 6, sample within plot 2", 2),
	} {
		for _, shade := range []string{"", "Residual"} {
			m.Shade = shade
			pic, alt := m.Draw()
			inspect(t, pic)
			sentences(t, alt)
			if pic.Height > pageHeight+60 {
				t.Errorf("map %d is %v high", i, pic.Height)
			}
			if t.Failed() {
				t.Fatalf("map %d %s", i, shade)
			}
		}
	}
}

func TestManyPoints(t *testing.T) {
	const n = 100_000
	p := Points{Response: "Mass, g", By: "Diet", Groups: []Group{{Label: "a", Mean: 500}, {Label: "b", Mean: 510}}}
	f := Fitted{X: "Fitted", Y: "Residual", Zero: true}
	q := Quantiles{Slope: 1}
	m := Map{Unit: "bird", Treatments: []string{"a", "b"}}
	for b := range n / 1000 {
		box := Box{Label: fmt.Sprint("Block ", b+1)}
		for i := range 1000 {
			box.Cells = append(box.Cells, Cell{Unit: fmt.Sprint("bird ", i), Label: "a", Treatment: i % 2})
		}
		m.Boxes = append(m.Boxes, box)
	}
	for i := range n {
		v := noise(i) + noise(i+n) + noise(i+2*n)
		p.Groups[i%2].Points = append(p.Groups[i%2].Points, Point{Unit: fmt.Sprint(i), Value: 500 + v})
		f.Points = append(f.Points, XY{Unit: fmt.Sprint(i), X: noise(i), Y: v, Named: i == 5})
		z := math.Sqrt2 * math.Erfinv(2*(float64(i)+0.5)/n-1)
		q.Points = append(q.Points, Quantile{Unit: fmt.Sprint(i), Expected: z, Value: z})
	}
	for _, d := range []drawing{p, f, q, m} {
		pic, alt := d.Draw()
		inspect(t, pic)
		sentences(t, alt)
		if len(pic.Ops) > 5*maxPoints+100 {
			t.Errorf("%T: %d operations for %d points", d, len(pic.Ops), n)
		}
	}
	// Nothing is lost between the fields: their counts are those of all points.
	pic, _ := f.Draw()
	sum := 0
	for _, op := range pic.Ops {
		if mark, ok := op.(doc.Mark); ok {
			var k int
			var word string
			if _, err := fmt.Sscanf(mark.Name, "%d %s", &k, &word); err == nil && strings.HasPrefix(word, "point") {
				sum += k
			}
		}
	}
	if sum != n {
		t.Errorf("the fields hold %d points of %d", sum, n)
	}
}

// Every point bears the name of its unit, and lies where its value says.
func TestMarksNameUnits(t *testing.T) {
	p := trial(4, 5, doseName)
	pic, _ := p.Draw()
	y := map[string]float64{}
	name := ""
	for _, op := range pic.Ops {
		switch op := op.(type) {
		case doc.Mark:
			name = op.Name
		case doc.Fill:
			if strings.HasPrefix(name, "pen ") {
				lo, hi := math.Inf(1), math.Inf(-1)
				for _, s := range op.Path {
					if s.Kind != doc.Close {
						lo, hi = min(lo, s.Y), max(hi, s.Y)
					}
				}
				y[name] = (lo + hi) / 2
			}
		}
	}
	// The scale is read off the axis: two of its labels give it.
	var at, value [2]float64
	k := 0
	for _, op := range pic.Ops {
		if l, ok := op.(doc.Label); ok && l.X < 40 && l.Angle == 0 && k < 2 {
			if _, err := fmt.Sscan(l.Text, &value[k]); err == nil {
				at[k] = l.Y
				k++
			}
		}
	}
	if k < 2 {
		t.Fatal("no two labels on the axis")
	}
	first := math.NaN() // the distance from baseline to tick is the same for all
	for _, g := range p.Groups {
		for _, q := range g.Points {
			got, ok := y[q.Unit]
			if !ok {
				t.Fatalf("%s is not named", q.Unit)
			}
			want := at[0] + (q.Value-value[0])/(value[1]-value[0])*(at[1]-at[0])
			if math.IsNaN(first) {
				first = got - want
			}
			if math.Abs(first) > 4 || math.Abs(got-want-first) > 0.05 {
				t.Errorf("%s of %v lies at %v, not %v", q.Unit, q.Value, got, want+first)
			}
		}
	}
}

func TestCrowds(t *testing.T) {
	for _, m := range crowds() {
		pic, alt := m.Draw()
		inspect(t, pic)
		sentences(t, alt)
		again, _ := m.Draw()
		if !reflect.DeepEqual(pic, again) {
			t.Error("two drawings differ")
		}
	}
}
