package figure

import (
	"image"
	"image/color"
	"math"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"

	"penwright/render/doc"
)

// canvas records a picture. What this package draws itself is in the picture's own
// coordinates, with the origin top left. The axes are drawn by the plot library through
// the methods of vg.Canvas, whose origin is bottom left.
type canvas struct {
	pic   *doc.Picture
	now   pen
	stack []pen
	named bool
}

// pen is the state that vg.Canvas pushes and pops.
type pen struct {
	m      affine
	width  float64
	dashes []float64
	colour doc.Colour
}

// affine maps (x, y) to (a·x + c·y + e, b·x + d·y + f).
type affine struct{ a, b, c, d, e, f float64 }

func (m affine) at(x, y float64) (float64, float64) {
	return m.a*x + m.c*y + m.e, m.b*x + m.d*y + m.f
}

// then returns the map that applies n first and m after it.
func (m affine) then(n affine) affine {
	var r affine
	r.a, r.b = m.a*n.a+m.c*n.b, m.b*n.a+m.d*n.b
	r.c, r.d = m.a*n.c+m.c*n.d, m.b*n.c+m.d*n.d
	r.e, r.f = m.at(n.e, n.f)
	return r
}

func newCanvas(w, h float64) *canvas {
	c := &canvas{pic: &doc.Picture{Width: tidy(w), Height: tidy(h)}}
	c.now = pen{m: affine{a: 1, d: -1, f: h}, width: 1, colour: ink}
	return c
}

// tidy rounds to a hundredth of a point: finer than any printer, and the same on
// machines that differ in the last bit.
func tidy(v float64) float64 {
	r := math.Round(v*100) / 100
	if r == 0 {
		return 0 // never -0
	}
	return r
}

// style is how a text is set.
type style struct {
	size         float64
	bold, italic bool
	colour       doc.Colour
}

// anchor is the part of a text that stands at its place.
type anchor float64

const (
	left   anchor = 0
	center anchor = 0.5
	right  anchor = 1
)

// text sets one line with its baseline at y.
func (c *canvas) text(x, y float64, a anchor, st style, s string) {
	if s == "" {
		return
	}
	w := width(s, st.size, st.bold)
	c.pic.Ops = append(c.pic.Ops, doc.Label{
		X: tidy(x - float64(a)*w), Y: tidy(y), Size: st.size, Text: s,
		Bold: st.bold, Italic: st.italic, Colour: st.colour, Width: tidy(w),
	})
}

// upward sets one line that reads upwards, its baseline at x and its middle at y.
func (c *canvas) upward(x, y float64, st style, s string) {
	w := width(s, st.size, st.bold)
	c.pic.Ops = append(c.pic.Ops, doc.Label{
		X: tidy(x), Y: tidy(y + w/2), Size: st.size, Angle: 90, Text: s,
		Bold: st.bold, Italic: st.italic, Colour: st.colour, Width: tidy(w),
	})
}

// mark names what is drawn until the next mark.
func (c *canvas) mark(name string) {
	name = clean(name)
	if name == "" && !c.named {
		return
	}
	c.named = name != ""
	c.pic.Ops = append(c.pic.Ops, doc.Mark{Name: name})
}

// line is how a path is stroked.
type line struct {
	width  float64
	dashes []float64
	colour doc.Colour
}

func (c *canvas) stroke(l line, path ...doc.Segment) {
	if len(path) < 2 || !(l.width > 0) || l.colour.A == 0 {
		return
	}
	c.pic.Ops = append(c.pic.Ops, doc.Stroke{Path: tidied(path), Width: l.width, Dashes: l.dashes, Colour: l.colour})
}

func (c *canvas) fill(colour doc.Colour, path ...doc.Segment) {
	if len(path) < 2 {
		return
	}
	c.pic.Ops = append(c.pic.Ops, doc.Fill{Path: tidied(path), Colour: colour})
}

func tidied(path []doc.Segment) []doc.Segment {
	out := make([]doc.Segment, len(path))
	for i, s := range path {
		out[i] = doc.Segment{
			Kind: s.Kind,
			X:    tidy(s.X), Y: tidy(s.Y),
			X1: tidy(s.X1), Y1: tidy(s.Y1), X2: tidy(s.X2), Y2: tidy(s.Y2),
		}
	}
	return out
}

func moveTo(x, y float64) doc.Segment { return doc.Segment{Kind: doc.MoveTo, X: x, Y: y} }
func lineTo(x, y float64) doc.Segment { return doc.Segment{Kind: doc.LineTo, X: x, Y: y} }

func segment(x0, y0, x1, y1 float64) []doc.Segment {
	return []doc.Segment{moveTo(x0, y0), lineTo(x1, y1)}
}

// polyline goes through the points; closed also returns to the first.
func polyline(closed bool, xy ...[2]float64) []doc.Segment {
	path := make([]doc.Segment, 0, len(xy)+1)
	for i, p := range xy {
		if i == 0 {
			path = append(path, moveTo(p[0], p[1]))
		} else {
			path = append(path, lineTo(p[0], p[1]))
		}
	}
	if closed && len(path) > 0 {
		path = append(path, doc.Segment{Kind: doc.Close})
	}
	return path
}

func rectangle(x, y, w, h float64) []doc.Segment {
	return polyline(true, [2]float64{x, y}, [2]float64{x + w, y}, [2]float64{x + w, y + h}, [2]float64{x, y + h})
}

func circle(x, y, r float64) []doc.Segment {
	path := arc(x, y, r, 0, 2*math.Pi)
	return append(path, doc.Segment{Kind: doc.Close})
}

// arc is the arc around (x, y) from angle start over sweep, in pieces of at most a
// quarter turn, each a cubic that leaves the circle by under 0.03 % of its radius.
func arc(x, y, r, start, sweep float64) []doc.Segment {
	n := min(max(int(math.Ceil(math.Abs(sweep)/(math.Pi/2)-1e-9)), 1), 64)
	step := sweep / float64(n)
	k := 4.0 / 3 * math.Tan(step/4)
	s0, c0 := math.Sincos(start)
	path := []doc.Segment{moveTo(x+r*c0, y+r*s0)}
	for i := range n {
		s1, c1 := math.Sincos(start + step*float64(i+1))
		path = append(path, doc.Segment{
			Kind: doc.CurveTo,
			X1:   x + r*(c0-k*s0), Y1: y + r*(s0+k*c0),
			X2: x + r*(c1+k*s1), Y2: y + r*(s1-k*c1),
			X: x + r*c1, Y: y + r*s1,
		})
		s0, c0 = s1, c1
	}
	return path
}

// What follows is vg.Canvas.

var _ vg.CanvasSizer = (*canvas)(nil)

func (c *canvas) Size() (x, y vg.Length) { return vg.Length(c.pic.Width), vg.Length(c.pic.Height) }

func (c *canvas) SetLineWidth(w vg.Length) { c.now.width = w.Points() }

func (c *canvas) SetLineDash(pattern []vg.Length, _ vg.Length) {
	c.now.dashes = nil
	for _, d := range pattern {
		c.now.dashes = append(c.now.dashes, d.Points())
	}
}

func (c *canvas) SetColor(col color.Color) {
	switch col := col.(type) {
	case nil:
		c.now.colour = ink
	case paint:
		c.now.colour = doc.Colour(col)
	default:
		v := color.NRGBAModel.Convert(col).(color.NRGBA)
		c.now.colour = doc.Colour{R: v.R, G: v.G, B: v.B, A: v.A}
	}
}

func (c *canvas) Rotate(rad float64) {
	s, k := math.Sincos(rad)
	c.now.m = c.now.m.then(affine{a: k, b: s, c: -s, d: k})
}

func (c *canvas) Translate(pt vg.Point) {
	c.now.m = c.now.m.then(affine{a: 1, d: 1, e: pt.X.Points(), f: pt.Y.Points()})
}

func (c *canvas) Scale(x, y float64) { c.now.m = c.now.m.then(affine{a: x, d: y}) }

func (c *canvas) Push() { c.stack = append(c.stack, c.now) }

func (c *canvas) Pop() {
	if len(c.stack) == 0 {
		panic("figure: pop of an empty stack")
	}
	c.now = c.stack[len(c.stack)-1]
	c.stack = c.stack[:len(c.stack)-1]
}

func (c *canvas) Stroke(p vg.Path) {
	c.stroke(line{width: c.now.width, dashes: c.now.dashes, colour: c.now.colour}, c.path(p)...)
}

func (c *canvas) Fill(p vg.Path) { c.fill(c.now.colour, c.path(p)...) }

func (c *canvas) path(p vg.Path) []doc.Segment {
	var out []doc.Segment
	at := func(pt vg.Point) (float64, float64) { return c.now.m.at(pt.X.Points(), pt.Y.Points()) }
	var last vg.Point
	for _, comp := range p {
		x, y := at(comp.Pos)
		switch comp.Type {
		case vg.MoveComp:
			out = append(out, moveTo(x, y))
			last = comp.Pos
		case vg.LineComp:
			out = append(out, lineTo(x, y))
			last = comp.Pos
		case vg.ArcComp:
			r := comp.Radius.Points()
			for i, s := range arc(comp.Pos.X.Points(), comp.Pos.Y.Points(), r, comp.Start, comp.Angle) {
				s.X, s.Y = c.now.m.at(s.X, s.Y)
				s.X1, s.Y1 = c.now.m.at(s.X1, s.Y1)
				s.X2, s.Y2 = c.now.m.at(s.X2, s.Y2)
				if i == 0 {
					if len(out) > 0 {
						s.Kind = doc.LineTo
					}
					s.X1, s.Y1, s.X2, s.Y2 = 0, 0, 0, 0
				}
				out = append(out, s)
			}
			sin, cos := math.Sincos(comp.Start + comp.Angle)
			last = comp.Pos.Add(vg.Point{X: vg.Length(r * cos), Y: vg.Length(r * sin)})
		case vg.CurveComp:
			c1, c2 := comp.Control[0], comp.Control[len(comp.Control)-1]
			if len(comp.Control) == 1 { // a quadratic, raised by one degree
				q := comp.Control[0]
				c1 = last.Add(q.Sub(last).Scale(2.0 / 3))
				c2 = comp.Pos.Add(q.Sub(comp.Pos).Scale(2.0 / 3))
			}
			s := doc.Segment{Kind: doc.CurveTo, X: x, Y: y}
			s.X1, s.Y1 = at(c1)
			s.X2, s.Y2 = at(c2)
			out = append(out, s)
			last = comp.Pos
		case vg.CloseComp:
			out = append(out, doc.Segment{Kind: doc.Close})
		}
	}
	return out
}

func (c *canvas) FillString(f font.Face, pt vg.Point, s string) {
	size := f.Font.Size.Points()
	if size == 0 || s == "" {
		return
	}
	x, y := c.now.m.at(pt.X.Points(), pt.Y.Points())
	angle := math.Atan2(-c.now.m.b, c.now.m.a) * 180 / math.Pi
	bold := f.Font.Weight >= xfont.WeightSemiBold
	c.pic.Ops = append(c.pic.Ops, doc.Label{
		X: tidy(x), Y: tidy(y), Size: size, Angle: tidy(angle), Text: s,
		Bold: bold, Italic: f.Font.Style != xfont.StyleNormal,
		Colour: c.now.colour, Width: tidy(width(s, size, bold)),
	})
}

func (c *canvas) DrawImage(vg.Rectangle, image.Image) {
	panic("figure: a picture holds no images")
}
