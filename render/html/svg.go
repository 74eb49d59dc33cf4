package html

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"penwright/render/doc"
)

// svgFamily names faces whose letters are as wide as those the labels were measured
// with.
const svgFamily = "'Liberation Sans', Arimo, Arial, Helvetica, sans-serif"

// SVG writes a picture as a file by itself; alt says in words what it shows.
func SVG(w io.Writer, p *doc.Picture, alt string) error {
	out := bufio.NewWriter(w)
	err := drawing(out, p, "picture", "", alt)
	if err == nil {
		out.WriteByte('\n')
		err = out.Flush()
	}
	if err != nil {
		return fmt.Errorf("write svg: %w", err)
	}
	return nil
}

var errNotFinite = errors.New("a picture holds a length that is not a number")

// drawing writes the svg element of a picture. Ink is the colour of the text around it;
// the background and the greys are variables of the page, with a value for where there
// is none. Ids begin with id.
func drawing(w *bufio.Writer, p *doc.Picture, id, title, desc string) error {
	s := &svg{w: w}
	fmt.Fprintf(w, `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %s %s" width="%spt" height="%spt" role="img"`,
		s.n(p.Width), s.n(p.Height), s.n(p.Width), s.n(p.Height))
	var names []string
	if title != "" {
		names = append(names, id+"_title")
	}
	if desc != "" {
		names = append(names, id+"_desc")
	}
	if len(names) > 0 {
		fmt.Fprintf(w, ` aria-labelledby="%s"`, strings.Join(names, " "))
	}
	fmt.Fprintf(w, ` font-family="%s" fill="none">`+"\n", svgFamily)
	if title != "" {
		fmt.Fprintf(w, `<title id="%s_title">%s</title>`+"\n", id, esc(title))
	}
	if desc != "" {
		fmt.Fprintf(w, `<desc id="%s_desc">%s</desc>`+"\n", id, esc(desc))
	}
	for _, op := range p.Ops {
		switch op := op.(type) {
		case doc.Stroke:
			s.stroke(op)
		case doc.Fill:
			s.fill(op)
		case doc.Label:
			s.label(op)
		case doc.Mark:
			s.mark(op.Name)
		default:
			panic("html: unknown drawing operation")
		}
	}
	s.mark("")
	w.WriteString("</svg>")
	if s.bad {
		return errNotFinite
	}
	return nil
}

type svg struct {
	w      *bufio.Writer
	marked bool
	bad    bool // a length was not finite
}

// n writes a length to a hundredth of a point.
func (s *svg) n(x float64) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		s.bad = true
		return "0"
	}
	x = math.Round(x*100) / 100
	if x == 0 {
		return "0" // never -0
	}
	return strconv.FormatFloat(x, 'f', -1, 64)
}

func (s *svg) mark(name string) {
	if s.marked {
		s.w.WriteString("</g>\n")
	}
	s.marked = name != ""
	if s.marked {
		s.w.WriteString("<g><title>" + esc(name) + "</title>\n")
	}
}

// colour returns the attributes that paint with c.
func colour(attribute string, c doc.Colour) string {
	var value string
	switch c.Role {
	case doc.Ink:
		value = "currentColor"
	case doc.Paper:
		value = "var(--paper, #fff)"
	case doc.Faint:
		value = "var(--faint, #c3c8ce)"
	default:
		value = fmt.Sprintf("#%02x%02x%02x", c.R, c.G, c.B)
	}
	out := " " + attribute + "=\"" + value + "\""
	if c.A < 255 {
		out += " " + attribute + "-opacity=\"" + strconv.FormatFloat(math.Round(float64(c.A)/255*1000)/1000, 'f', -1, 64) + "\""
	}
	return out
}

func (s *svg) stroke(op doc.Stroke) {
	if op.Width <= 0 || len(op.Path) == 0 {
		return
	}
	style := colour("stroke", op.Colour) + " stroke-width=\"" + s.n(op.Width) + "\""
	if len(op.Dashes) > 0 {
		dashes := make([]string, len(op.Dashes))
		for i, d := range op.Dashes {
			dashes[i] = s.n(d)
		}
		style += " stroke-dasharray=\"" + strings.Join(dashes, " ") + "\""
	}
	s.shape(op.Path, style)
}

func (s *svg) fill(op doc.Fill) {
	if len(op.Path) > 0 {
		s.shape(op.Path, colour("fill", op.Colour))
	}
}

func (s *svg) shape(path []doc.Segment, style string) {
	if x, y, r, ok := circle(path); ok {
		fmt.Fprintf(s.w, "<circle cx=\"%s\" cy=\"%s\" r=\"%s\"%s/>\n", s.n(x), s.n(y), s.n(r), style)
		return
	}
	var d strings.Builder
	for _, g := range path {
		switch g.Kind {
		case doc.MoveTo:
			d.WriteString("M" + s.n(g.X) + " " + s.n(g.Y))
		case doc.LineTo:
			d.WriteString("L" + s.n(g.X) + " " + s.n(g.Y))
		case doc.CurveTo:
			d.WriteString("C" + s.n(g.X1) + " " + s.n(g.Y1) + " " + s.n(g.X2) + " " + s.n(g.Y2) + " " + s.n(g.X) + " " + s.n(g.Y))
		case doc.Close:
			d.WriteString("Z")
		default:
			panic("html: unknown segment")
		}
	}
	fmt.Fprintf(s.w, "<path d=\"%s\"%s/>\n", d.String(), style)
}

// circle recognises the four curves that draw a circle, which make most of a scatter of
// points.
func circle(path []doc.Segment) (x, y, r float64, ok bool) {
	if len(path) != 5 && !(len(path) == 6 && path[5].Kind == doc.Close) || path[0].Kind != doc.MoveTo {
		return 0, 0, 0, false
	}
	for _, g := range path[1:5] {
		if g.Kind != doc.CurveTo {
			return 0, 0, 0, false
		}
	}
	near := func(a, b, tolerance float64) bool { return math.Abs(a-b) <= tolerance }
	if !near(path[4].X, path[0].X, 0.01) || !near(path[4].Y, path[0].Y, 0.01) {
		return 0, 0, 0, false
	}
	x, y = (path[0].X+path[2].X)/2, (path[0].Y+path[2].Y)/2
	r = math.Hypot(path[0].X-x, path[0].Y-y)
	// A control point of a quarter circle lies 0.5523 of the radius along the tangent.
	reach := r * math.Hypot(1, 0.5523)
	last := path[0]
	for _, g := range path[1:5] {
		if !near(math.Hypot(g.X-x, g.Y-y), r, 0.01) || !near(math.Hypot(g.X-last.X, g.Y-last.Y), r*math.Sqrt2, 0.02) ||
			!near(math.Hypot(g.X1-x, g.Y1-y), reach, 0.01*(1+r)) || !near(math.Hypot(g.X2-x, g.Y2-y), reach, 0.01*(1+r)) {
			return 0, 0, 0, false
		}
		last = g
	}
	return x, y, r, r > 0
}

func (s *svg) label(op doc.Label) {
	if op.Text == "" {
		return
	}
	x, y := s.n(op.X), s.n(op.Y)
	fmt.Fprintf(s.w, "<text x=\"%s\" y=\"%s\" font-size=\"%s\"", x, y, s.n(op.Size))
	if op.Bold {
		s.w.WriteString(" font-weight=\"bold\"")
	}
	if op.Italic {
		s.w.WriteString(" font-style=\"italic\"")
	}
	if op.Angle != 0 {
		fmt.Fprintf(s.w, " transform=\"rotate(%s %s %s)\"", s.n(-op.Angle), x, y)
	}
	s.w.WriteString(colour("fill", op.Colour) + ">" + esc(op.Text) + "</text>\n")
}
