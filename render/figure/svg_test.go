package figure

import (
	"fmt"
	"strings"

	"penwright/render/doc"
)

// svg writes a picture as the goldens hold it: one operation a line, to be read in a
// difference and looked at in a browser.
func svg(p *doc.Picture) string {
	var b strings.Builder
	fmt.Fprintf(&b, "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 %g %g\" width=\"%g\" height=\"%g\" font-family=\"Liberation Sans, DejaVu Sans\" style=\"--ink:#000;--paper:#fff;--faint:#ccc\">\n",
		p.Width, p.Height, p.Width, p.Height)
	fmt.Fprintf(&b, "<rect width=\"%g\" height=\"%g\" style=\"fill:var(--paper)\"/>\n", p.Width, p.Height)
	open := false
	for _, op := range p.Ops {
		switch op := op.(type) {
		case doc.Mark:
			if open {
				b.WriteString("</g>\n")
			}
			if open = op.Name != ""; open {
				fmt.Fprintf(&b, "<g><title>%s</title>\n", escape(op.Name))
			}
		case doc.Stroke:
			fmt.Fprintf(&b, "<path d=\"%s\" fill=\"none\" stroke-width=\"%g\"", path(op.Path), op.Width)
			if len(op.Dashes) > 0 {
				b.WriteString(" stroke-dasharray=\"" + strings.Trim(fmt.Sprint(op.Dashes), "[]") + "\"")
			}
			b.WriteString(" style=\"" + colour("stroke", op.Colour) + "\"/>\n")
		case doc.Fill:
			fmt.Fprintf(&b, "<path d=\"%s\" style=\"%s\"/>\n", path(op.Path), colour("fill", op.Colour))
		case doc.Label:
			fmt.Fprintf(&b, "<text x=\"%g\" y=\"%g\" font-size=\"%g\"", op.X, op.Y, op.Size)
			if op.Angle != 0 {
				fmt.Fprintf(&b, " transform=\"rotate(%g %g %g)\"", -op.Angle, op.X, op.Y)
			}
			if op.Bold {
				b.WriteString(" font-weight=\"bold\"")
			}
			if op.Italic {
				b.WriteString(" font-style=\"italic\"")
			}
			fmt.Fprintf(&b, " style=\"%s\">%s</text>\n", colour("fill", op.Colour), escape(op.Text))
		}
	}
	if open {
		b.WriteString("</g>\n")
	}
	b.WriteString("</svg>\n")
	return b.String()
}

func escape(s string) string {
	return strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", `"`, "&quot;").Replace(s)
}

func colour(property string, c doc.Colour) string {
	value := fmt.Sprintf("#%02x%02x%02x", c.R, c.G, c.B)
	switch c.Role {
	case doc.Ink:
		value = "var(--ink)"
	case doc.Paper:
		value = "var(--paper)"
	case doc.Faint:
		value = "var(--faint)"
	}
	s := property + ":" + value
	if c.A != 255 {
		s += fmt.Sprintf(";%s-opacity:%.3g", property, float64(c.A)/255)
	}
	return s
}

func path(segments []doc.Segment) string {
	var b strings.Builder
	for _, s := range segments {
		switch s.Kind {
		case doc.MoveTo:
			fmt.Fprintf(&b, "M%g %g", s.X, s.Y)
		case doc.LineTo:
			fmt.Fprintf(&b, "L%g %g", s.X, s.Y)
		case doc.CurveTo:
			fmt.Fprintf(&b, "C%g %g %g %g %g %g", s.X1, s.Y1, s.X2, s.Y2, s.X, s.Y)
		case doc.Close:
			b.WriteString("Z")
		}
	}
	return b.String()
}
