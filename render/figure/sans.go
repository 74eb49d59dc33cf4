package figure

import (
	"strings"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"

	"penwright/render/face"
)

// Metrics of the sans family in ems.
const (
	ascent  = 0.905
	descent = 0.212
	leading = ascent + descent
)

func capHeight(size float64) float64 { return 0.70 * size }

// width is the width of a clean line in points.
func width(s string, size float64, bold bool) float64 {
	return face.Get(face.Sans, bold, false).Width(s, size)
}

// fit shortens a line to a width, ending it with an ellipsis.
func fit(s string, most, size float64, bold bool) string {
	s = clean(s)
	if width(s, size, bold) <= most {
		return s
	}
	runes := []rune(s)
	room := most - width("…", size, bold)
	w, n := 0.0, 0
	for n < len(runes) {
		a := width(string(runes[n]), size, bold)
		if w+a > room {
			break
		}
		w += a
		n++
	}
	if n == 0 {
		return ""
	}
	return strings.TrimRight(string(runes[:n]), " ,;:-–") + "…"
}

// wrap breaks text at spaces into at most lines lines of a width. It is whole when
// nothing had to be shortened.
func wrap(s string, most, size float64, lines int) (out []string, whole bool) {
	s = clean(s)
	if s == "" {
		return nil, true
	}
	if width(s, size, false) <= most {
		return []string{s}, true
	}
	whole = true
	rest := words(s)
	space := width(" ", size, false)
	for len(rest) > 0 {
		if len(out) == lines-1 {
			last := strings.Join(rest, " ")
			short := fit(last, most, size, false)
			return append(out, short), whole && short == last
		}
		// As many words as fit by their widths; kerning at the spaces may take one back.
		n, w := 1, width(rest[0], size, false)
		for n < len(rest) {
			w += space + width(rest[n], size, false)
			if w > most {
				break
			}
			n++
		}
		l := strings.Join(rest[:n], " ")
		for n > 1 && width(l, size, false) > most {
			n--
			l = strings.Join(rest[:n], " ")
		}
		if n == 1 && width(l, size, false) > most {
			l, whole = fit(l, most, size, false), false
		}
		out = append(out, l)
		rest = rest[n:]
	}
	return out, whole
}

// handler measures and places text for the plot library by the metrics above.
type handler struct{}

var _ text.Handler = handler{}

func (handler) Cache() *font.Cache { return font.DefaultCache }

func (handler) Extents(f font.Font) font.Extents {
	return font.Extents{Ascent: f.Size * ascent, Descent: f.Size * descent, Height: f.Size * leading}
}

func (handler) Lines(s string) []string { return strings.Split(strings.TrimRight(s, "\n"), "\n") }

func (handler) Box(s string, f font.Font) (w, h, d vg.Length) {
	return vg.Length(width(s, f.Size.Points(), false)), f.Size * ascent, f.Size * descent
}

// Draw sets the last line's baseline where the library's axes expect it.
func (h handler) Draw(c vg.Canvas, s string, sty text.Style, pt vg.Point) {
	if s == "" {
		return
	}
	c.SetColor(sty.Color)
	c.Push()
	c.Translate(pt)
	c.Rotate(sty.Rotation)
	lines := h.Lines(s)
	pitch := sty.Font.Size * leading
	y := pitch*vg.Length(len(lines))*vg.Length(sty.YAlign) + pitch*vg.Length(len(lines)-1)
	for _, l := range lines {
		w := vg.Length(width(l, sty.Font.Size.Points(), false))
		c.FillString(font.Face{Font: sty.Font}, vg.Point{X: vg.Length(sty.XAlign) * w, Y: y}, l)
		y -= pitch
	}
	c.Pop()
}
