package html

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
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

var errNotFinite = errors.New("a picture holds a length that no page has")

// drawing writes the svg element of a picture. Ink is the colour of the text around it;
// the background and the greys are variables of the page, with a value for where there
// is none. Ids begin with id. A title is for a picture that stands by itself: on a page
// the caption says it, and a browser would show it over every point.
func drawing(w *bufio.Writer, p *doc.Picture, id, title, desc string) error {
	s := &svg{}
	width, height := s.n(p.Width), s.n(p.Height)
	fmt.Fprintf(w, `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %s %s" width="%spt" height="%spt" role="img"`, width, height, width, height)
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
	writeNodes(w, s.nodes(p.Ops))
	w.WriteString("</svg>")
	if s.bad {
		return errNotFinite
	}
	return nil
}

// node is an element of a drawing. What it has in common with its neighbours, they may
// be given together.
type node struct {
	open    string // tag and geometry: <circle cx="1" cy="2" r="3"
	style   string // attributes that paint, each after a space
	inner   string
	closing string // end tag, or empty
}

func (n node) write(w io.StringWriter, style string) {
	w.WriteString(n.open)
	w.WriteString(style)
	if n.closing == "" {
		w.WriteString("/>\n")
		return
	}
	w.WriteString(">")
	w.WriteString(n.inner)
	w.WriteString(n.closing)
	w.WriteString("\n")
}

// titled names a node.
func (n node) titled(name string) node {
	n.inner = "<title>" + esc(name) + "</title>" + n.inner
	if n.closing == "" {
		tag, _, _ := strings.Cut(n.open[1:], " ")
		n.closing = "</" + tag + ">"
	}
	return n
}

// writeNodes writes nodes in order; those in a row that are painted alike say so once.
func writeNodes(w io.StringWriter, nodes []node) {
	for len(nodes) > 0 {
		style, n := nodes[0].style, 1
		for n < len(nodes) && nodes[n].style == style {
			n++
		}
		if n > 1 && style != "" {
			w.WriteString("<g" + style + ">\n")
			for _, x := range nodes[:n] {
				x.write(w, "")
			}
			w.WriteString("</g>\n")
		} else {
			for _, x := range nodes[:n] {
				x.write(w, x.style)
			}
		}
		nodes = nodes[n:]
	}
}

type svg struct {
	bad bool // a length was not finite, or beyond any page
}

// nodes turns the operations of a picture into elements. What a mark names is one
// element with a title.
func (s *svg) nodes(ops []doc.Op) []node {
	var out []node
	for len(ops) > 0 {
		name := ""
		if m, ok := ops[0].(doc.Mark); ok {
			name, ops = m.Name, ops[1:]
		}
		end := 0
		for end < len(ops) {
			if _, ok := ops[end].(doc.Mark); ok {
				break
			}
			end++
		}
		group := s.group(ops[:end])
		ops = ops[end:]
		switch {
		case name == "" || len(group) == 0:
			out = append(out, group...)
		case len(group) == 1:
			out = append(out, group[0].titled(name))
		default:
			var b strings.Builder
			b.WriteString("\n")
			writeNodes(&b, group)
			out = append(out, node{open: "<g", inner: b.String(), closing: "</g>"}.titled(name))
		}
	}
	return out
}

// group turns operations without marks into elements.
func (s *svg) group(ops []doc.Op) []node {
	var out []node
	for i := 0; i < len(ops); i++ {
		switch op := ops[i].(type) {
		case doc.Stroke:
			if op.Width <= 0 || len(op.Path) == 0 {
				continue
			}
			path, style := slices.Clip(op.Path), s.stroke(op)
			// Lines of one kind that hide what they cross are one path.
			for i+1 < len(ops) && op.Colour.A == 255 {
				next, ok := ops[i+1].(doc.Stroke)
				if !ok || len(next.Path) == 0 || next.Path[0].Kind != doc.MoveTo || s.stroke(next) != style || s.round(next.Path) || s.round(path) {
					break
				}
				path = append(path, next.Path...)
				i++
			}
			out = append(out, s.shape(path, style))
		case doc.Fill:
			if len(op.Path) == 0 {
				continue
			}
			style := colour("fill", op.Colour)
			if i+1 < len(ops) {
				if edge, ok := ops[i+1].(doc.Stroke); ok && edge.Width > 0 && slices.Equal(edge.Path, op.Path) {
					style += s.stroke(edge)
					i++
				}
			}
			out = append(out, s.shape(op.Path, style))
		case doc.Label:
			if op.Text != "" {
				out = append(out, s.label(op))
			}
		default:
			panic("html: unknown drawing operation")
		}
	}
	return out
}

// hundredths rounds a length, so that what is added up stays exact.
func (s *svg) hundredths(x float64) int {
	if !(math.Abs(x) < 1e7) {
		s.bad = true
		return 0
	}
	return int(math.Round(x * 100))
}

// n writes a length to a hundredth of a point.
func (s *svg) n(x float64) string { return points(s.hundredths(x)) }

// points writes hundredths of a point as points.
func points(h int) string {
	b := make([]byte, 0, 12)
	if h < 0 {
		b, h = append(b, '-'), -h
	}
	if h >= 100 || h == 0 {
		b = strconv.AppendInt(b, int64(h/100), 10)
	}
	if r := h % 100; r != 0 {
		b = append(b, '.', byte('0'+r/10))
		if r%10 != 0 {
			b = append(b, byte('0'+r%10))
		}
	}
	return string(b)
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

func (s *svg) stroke(op doc.Stroke) string {
	style := colour("stroke", op.Colour)
	if width := s.n(op.Width); width != "1" {
		style += " stroke-width=\"" + width + "\""
	}
	if len(op.Dashes) > 0 {
		dashes := make([]string, len(op.Dashes))
		for i, d := range op.Dashes {
			dashes[i] = s.n(d)
		}
		style += " stroke-dasharray=\"" + strings.Join(dashes, " ") + "\""
	}
	return style
}

func (s *svg) round(path []doc.Segment) bool {
	_, _, _, ok := circle(path)
	return ok
}

func (s *svg) shape(path []doc.Segment, style string) node {
	if x, y, r, ok := circle(path); ok {
		return node{open: `<circle cx="` + s.n(x) + `" cy="` + s.n(y) + `" r="` + s.n(r) + `"`, style: style}
	}
	return node{open: `<path d="` + s.path(path) + `"`, style: style}
}

// path writes a path in steps from point to point, which are shorter than places.
func (s *svg) path(path []doc.Segment) string {
	var d []byte
	command := byte(0)
	step := func(c byte, lengths ...int) {
		// Lines follow a line, and the first of them a move, without a letter.
		fresh := c != command
		if fresh {
			d = append(d, c)
		}
		for i, h := range lengths {
			if p := points(h); (i > 0 || !fresh) && p[0] != '-' {
				d = append(append(d, ' '), p...)
			} else {
				d = append(d, p...)
			}
		}
		command = c
	}
	var x, y, startX, startY int
	for _, g := range path {
		gx, gy := s.hundredths(g.X), s.hundredths(g.Y)
		switch g.Kind {
		case doc.MoveTo:
			command = 0
			if len(d) == 0 {
				step('M', gx, gy)
			} else {
				step('m', gx-x, gy-y)
			}
			startX, startY = gx, gy
		case doc.LineTo:
			switch {
			case gy == y:
				step('h', gx-x)
			case gx == x:
				step('v', gy-y)
			default:
				step('l', gx-x, gy-y)
			}
		case doc.CurveTo:
			step('c', s.hundredths(g.X1)-x, s.hundredths(g.Y1)-y, s.hundredths(g.X2)-x, s.hundredths(g.Y2)-y, gx-x, gy-y)
		case doc.Close:
			step('z')
			command = 0
			gx, gy = startX, startY
		default:
			panic("html: unknown segment")
		}
		x, y = gx, gy
	}
	return string(d)
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

func (s *svg) label(op doc.Label) node {
	x, y := s.n(op.X), s.n(op.Y)
	open := `<text x="` + x + `" y="` + y + `"`
	if op.Angle != 0 {
		open += ` transform="rotate(` + s.n(-op.Angle) + " " + x + " " + y + `)"`
	}
	style := ` font-size="` + s.n(op.Size) + `"`
	if op.Bold {
		style += ` font-weight="bold"`
	}
	if op.Italic {
		style += ` font-style="italic"`
	}
	return node{open: open, style: style + colour("fill", op.Colour), inner: esc(op.Text), closing: "</text>"}
}
