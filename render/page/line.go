package page

import (
	"math"
	"unicode/utf8"

	"penwright/render/face"
)

// line is a run of atoms set on one line. Each word space grows by stretch of its
// natural width.
type line struct {
	atoms   []atom
	stretch float64
	width   float64 // natural, without the glue at its end
}

// splitLong breaks up atoms wider than the measure, between runes.
func splitLong(atoms []atom, measure float64) []atom {
	long := false
	for _, a := range atoms {
		if a.width > measure {
			long = true
		}
	}
	if !long {
		return atoms
	}
	var out []atom
	for _, a := range atoms {
		if a.width <= measure {
			out = append(out, a)
			continue
		}
		cur := atom{}
		for _, f := range a.frags {
			start, width := 0, 0.0
			cut := func(end int) {
				if end > start {
					part := f
					part.text, part.actual = f.text[start:end], ""
					part.width = f.face.Width(part.text, f.size)
					cur.frags = append(cur.frags, part)
					cur.width += part.width
				}
				start, width = end, 0
			}
			for i, r := range f.text {
				step := float64(f.face.Advance(r)) * f.size / 1000
				if cur.width+width+step > measure && (cur.width > 0 || width > 0) {
					cut(i)
					cur.breakable = true
					out = append(out, cur)
					cur = atom{}
				}
				width += step
			}
			cut(len(f.text))
		}
		cur.glue, cur.breakable, cur.forced, cur.notes = a.glue, a.breakable, a.forced, a.notes
		out = append(out, cur)
	}
	return out
}

// justified breaks atoms into lines of the measure so that the word spaces of the whole
// paragraph are as even as can be: the breaks with the least sum of demerits, by
// dynamic programming over the feasible breaks (D. E. Knuth and M. F. Plass,
// Software: Practice and Experience 11 (1981) 1119-1184, from memory, without
// hyphenation and fitness classes). Where spaces between spaceLeast and spaceMost of
// the natural one cannot do it, the paragraph is set ragged, as evenly as can be.
func justified(atoms []atom, measure float64) []line {
	return paragraph(atoms, measure, true)
}

// ragged breaks atoms into lines with natural spaces.
func ragged(atoms []atom, measure float64) []line {
	return paragraph(atoms, measure, false)
}

func paragraph(atoms []atom, measure float64, justify bool) []line {
	atoms = splitLong(atoms, measure)
	var out []line
	start := 0
	for i, a := range atoms {
		if a.forced || i == len(atoms)-1 {
			part := atoms[start : i+1]
			start = i + 1
			ends, even := []int(nil), false
			if justify {
				ends = fit(part, measure, true)
				even = ends != nil
			}
			if ends == nil {
				ends = fit(part, measure, false)
			}
			if ends == nil {
				loosen(part, measure)
				ends = fit(part, measure, false)
			}
			out = append(out, makeLines(part, ends, measure, even)...)
		}
	}
	return out
}

// loosen lets lines break within what is held together but wider than the measure.
func loosen(atoms []atom, measure float64) {
	start, width := 0, 0.0
	for i := range atoms {
		if i > start {
			width += atoms[i-1].glue
		}
		width += atoms[i].width
		if i > start && width > measure {
			atoms[i-1].breakable = true
			start, width = i, atoms[i].width
		}
		if atoms[i].breakable {
			start, width = i+1, 0
		}
	}
}

// fit gives the ends of the lines; nil where there is no way.
func fit(atoms []atom, measure float64, justify bool) []int {
	n := len(atoms)
	const never = math.MaxFloat64
	cost := make([]float64, n+1)
	from := make([]int, n+1)
	for j := 1; j <= n; j++ {
		cost[j] = never
		if j < n && !atoms[j-1].breakable {
			continue
		}
		width, glue := 0.0, 0.0
		for i := j - 1; i >= 0; i-- {
			width += atoms[i].width
			if i < j-1 {
				width += atoms[i].glue
				glue += atoms[i].glue
			}
			if width-glue*(1-spaceLeast) > measure && i < j-1 {
				break
			}
			if cost[i] == never {
				continue
			}
			d, ok := demerits(width, glue, measure, justify, j == n)
			if !ok && !justify && i == j-1 {
				ok = true // a rune wider than the measure
			}
			if !ok {
				continue
			}
			if j < n && atoms[j-1].glue == 0 {
				d += 30 * 30 // a word broken after its hyphen
			}
			if j == n && i == j-1 && i > 0 {
				d += 40 * 40 // a last line of one word
			}
			if c := cost[i] + d; c < cost[j] {
				cost[j], from[j] = c, i
			}
		}
	}
	if cost[n] == never {
		return nil
	}
	var ends []int
	for j := n; j > 0; j = from[j] {
		ends = append(ends, j)
	}
	for i, j := 0, len(ends)-1; i < j; i, j = i+1, j-1 {
		ends[i], ends[j] = ends[j], ends[i]
	}
	return ends
}

// demerits judges a line; ok is false where it cannot be set.
func demerits(width, glue, measure float64, justify, last bool) (d float64, ok bool) {
	const tolerance = 1e-6
	spare := measure - width
	if !justify {
		if last {
			return 0, spare > -tolerance
		}
		r := 10 * spare / measure
		return 1 + math.Abs(r*r*r), spare > -tolerance
	}
	switch {
	case spare < 0:
		room := glue * (1 - spaceLeast)
		if -spare > room+tolerance {
			return 0, false
		}
		r := -spare / max(room, tolerance)
		return square(1 + 100*r*r*r), true
	case last:
		return 0, true
	}
	room := glue * (spaceMost - 1)
	if spare > room+tolerance {
		return 0, false
	}
	r := spare / max(room, tolerance)
	return square(1 + 100*r*r*r), true
}

func square(x float64) float64 { return x * x }

func makeLines(atoms []atom, ends []int, measure float64, even bool) []line {
	lines := make([]line, 0, len(ends))
	start := 0
	for k, end := range ends {
		l := line{atoms: atoms[start:end]}
		glue := 0.0
		for i, a := range l.atoms {
			l.width += a.width
			if i < len(l.atoms)-1 {
				l.width += a.glue
				glue += a.glue
			}
		}
		if spare := measure - l.width; glue > 0 && (even && k < len(ends)-1 || even && spare < 0) {
			l.stretch = spare / glue
		}
		lines = append(lines, l)
		start = end
	}
	return lines
}

func (l line) notes() []int {
	var notes []int
	for _, a := range l.atoms {
		notes = append(notes, a.notes...)
	}
	return notes
}

// pen collects the operations of a line: pieces of one style become one Text.
type pen struct {
	ops    []Op
	links  []Link
	text   []byte
	cur    frag
	linked *Element // the link that the piece before belongs to
	closed bool     // the piece takes no more text
	start  float64
	x      float64
}

// draw sets the line with its base line starting at x, y.
func (l line) draw(x, y float64) []Op {
	if l.needsOrder() {
		l = l.ordered()
	}
	p := pen{x: x}
	for i, a := range l.atoms {
		for _, f := range a.frags {
			p.put(f, y, l.stretch)
		}
		switch {
		case i < len(l.atoms)-1 && a.glue > 0:
			p.space(a.glue, l.stretch)
		case i == len(l.atoms)-1 && (a.glue > 0 || a.forced) && len(p.text) > 0:
			p.text = append(p.text, ' ') // who copies the text has a word end here
			if p.cur.actual != "" {
				p.cur.actual += " "
			}
		}
	}
	p.flush(y, l.stretch)
	for _, k := range p.links {
		p.ops = append(p.ops, k)
	}
	return p.ops
}

func (p *pen) put(f frag, y, stretch float64) {
	joins := !p.closed && p.cur.face == f.face && p.cur.size == f.size && p.cur.rise == f.rise &&
		p.cur.colour == f.colour && p.cur.target == f.target && p.cur.actual == "" && f.actual == ""
	if joins && len(p.text) > 0 {
		// They were measured apart, and the writer kerns what it is given as one.
		last, _ := utf8.DecodeLastRune(p.text)
		joins = f.face.Kern(last, first(f.text)) == 0
	}
	if !joins {
		p.flush(y, stretch)
		p.start, p.cur = p.x, f
	}
	p.text = append(p.text, f.text...)
	if f.link != "" {
		p.link(f, y)
	}
	p.linked = f.target
	p.x += f.width
}

// link widens the rectangle of the link before where it is the same one.
func (p *pen) link(f frag, y float64) {
	if n := len(p.links); n > 0 && p.linked == f.target {
		p.links[n-1].Width = p.x + f.width - p.links[n-1].X
		return
	}
	p.links = append(p.links, Link{
		X: p.x, Y: y - 0.8*f.size - f.rise, Width: f.width, Height: 1.05 * f.size, Dest: f.link, Element: f.target,
	})
}

// space writes a real space, for those who copy the text. One of another width than
// the piece has ends the piece, so that what follows starts where it was measured to.
func (p *pen) space(glue, stretch float64) {
	p.x += glue * (1 + stretch)
	if len(p.text) == 0 {
		return
	}
	own := p.cur.blank()
	p.closed = p.cur.actual != "" || math.Abs(own-glue) > 1e-6
	p.text = append(p.text, ' ')
	if p.cur.actual != "" {
		p.cur.actual += " "
	}
}

func (p *pen) flush(y, stretch float64) {
	if len(p.text) > 0 {
		set := Text{
			X: p.start, Y: y - p.cur.rise, Face: p.cur.face, Size: p.cur.size, Colour: p.cur.colour,
			Text: string(p.text), Space: stretch * p.cur.blank(), Actual: p.cur.actual,
		}
		if p.cur.target != nil {
			p.ops = append(p.ops, Begin{p.cur.target}, set, End{})
		} else {
			p.ops = append(p.ops, set)
		}
	}
	p.text, p.cur, p.closed = p.text[:0], frag{}, false
}

// blank is the natural width of a word space as f has it.
func (f frag) blank() float64 { return float64(f.face.Advance(' ')) * f.size / 1000 }

// textWidth measures a plain text in one style.
func textWidth(s string, st style) float64 {
	clean, _ := face.Clean(s)
	return face.Get(st.family, st.bold, st.italic).Width(clean, st.size)
}
