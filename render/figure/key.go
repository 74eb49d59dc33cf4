package figure

import (
	"math"
	"strconv"
	"strings"

	"penwright/render/doc"
)

// entry is a line of a key: the sign that stands in the picture, and what it stands for.
type entry struct {
	sign, name string
	ground     doc.Colour                    // behind the sign, with an edge; A of nought: none
	framed     bool                          // an edge also without a ground
	draw       func(c *canvas, x, y float64) // draws a sign that is no text, its middle at (x, y)
}

// key is the list below a picture that says what its signs stand for. It names them all:
// where the room is short, in smaller type, then with the middle of long names left out.
type key struct {
	entries []entry
	lines   [][]string
	signs   float64 // width of the column of signs
	column  float64
	rows    int
	tops    []float64 // of the entries, from the top of the key
	size    float64
	tall    float64
}

const keyGap = 5 // above a key, and between a sign and its name

// newKey arranges a key of a width, no higher than most where that is possible.
func newKey(entries []entry, wide, most float64) key {
	k := key{entries: entries}
	if len(entries) == 0 {
		return k
	}
	names := make([]string, len(entries))
	for i, e := range entries {
		names[i] = clean(e.name)
	}
	for _, size := range []float64{noteSize, leastSize} {
		for lines := 1; lines <= 3; lines++ {
			if k.arrange(names, wide, size, lines, 0); k.tall <= most && k.complete() {
				return k
			}
		}
	}
	// As many columns as the height asks for, the names shortened to fit.
	for columns := 1; columns <= 12; columns++ {
		if k.arrange(names, wide, leastSize, 1, columns); k.tall <= most {
			break
		}
	}
	return k
}

// leastGround is the height of the lowest picture above a key.
const leastGround = 145

// above arranges a key below a picture of height h, or where no height was asked for,
// below a lower one if the key could not name all in full otherwise.
func (s Size) above(entries []entry, h float64) (key, float64) {
	w, _ := s.resolve(h)
	k := newKey(entries, w-2, pageHeight-h)
	if h <= leastGround || s.Height > 0 || k.complete() && k.tall+h <= pageHeight {
		return k, h
	}
	k = newKey(entries, w-2, pageHeight-leastGround)
	return k, min(max(pageHeight-k.tall, leastGround), h)
}

// arrange sets the names on at most so many lines, in as many columns as the widest
// allows, or in columns of them.
func (k *key) arrange(names []string, wide, size float64, lines, columns int) {
	k.size, k.signs = size, 0
	for _, e := range k.entries {
		w := width(e.sign, size, true)
		if e.framed {
			w = max(w+5, 9)
		}
		if e.draw != nil {
			w = 12
		}
		k.signs = max(k.signs, w)
	}
	k.signs = min(math.Ceil(k.signs), wide*0.35)
	beside := k.signs + keyGap + 10
	if columns == 0 {
		widest := 1.0
		for _, n := range names {
			widest = max(widest, width(n, size, false))
		}
		columns = max(int(wide/(beside+widest/float64(lines)+1)), 1)
	}
	k.rows = (len(names) + columns - 1) / columns
	columns = (len(names) + k.rows - 1) / k.rows
	k.column = wide / float64(columns)
	k.lines, k.tops, k.tall = k.lines[:0], k.tops[:0], 0
	room := max(k.column-beside, 1)
	y, gap := 0.0, 1.2
	switch pictured := k.entries[0].framed || k.entries[0].draw != nil; {
	case size == leastSize && pictured:
		gap = 0.4
	case size == leastSize:
		gap = 0
	case pictured:
		gap = 2.2
	}
	for i, n := range names {
		if i%k.rows == 0 {
			y = keyGap
		}
		var ls []string
		if lines == 1 {
			ls = []string{shorten(n, room, size)}
		} else {
			ls, _ = wrap(n, room, size, lines)
		}
		k.lines = append(k.lines, ls)
		k.tops = append(k.tops, y)
		y += math.Ceil(100*size*leading)/100*float64(max(len(ls), 1)) + gap
		k.tall = max(k.tall, y)
	}
	k.tall += 2
}

// complete says whether no name was shortened.
func (k *key) complete() bool {
	for i, l := range k.lines {
		if strings.Join(l, " ") != clean(k.entries[i].name) {
			return false
		}
	}
	return true
}

func (k *key) draw(c *canvas, x, y float64) {
	for i, e := range k.entries {
		left0, top := x+k.column*float64(i/k.rows), y+k.tops[i]
		base := top + ascent*k.size
		c.mark(e.name)
		switch {
		case e.draw != nil:
			e.draw(c, left0+k.signs/2, base-capHeight(k.size)/2)
		case e.framed:
			edge := rectangle(left0, top, k.signs, k.size*leading)
			if e.ground.A > 0 {
				c.fill(e.ground, edge...)
			}
			c.stroke(line{width: fine, colour: grey}, edge...)
			c.text(left0+k.signs/2, base, center, style{size: k.size, colour: ink}, fit(e.sign, k.signs, k.size, false))
		default:
			c.text(left0+k.signs, base, right, style{size: k.size, bold: true, colour: ink}, fit(e.sign, k.signs, k.size, true))
		}
		for _, l := range k.lines[i] {
			c.text(left0+k.signs+keyGap, base, left, style{size: k.size, colour: ink}, l)
			base += k.size * leading
		}
	}
	c.mark("")
}

// shorten is fit that keeps both ends of a name, since many begin alike.
func shorten(s string, most, size float64) string {
	s = clean(s)
	if width(s, size, false) <= most {
		return s
	}
	runes := []rune(s)
	room := most - width("…", size, false)
	w, i, j := 0.0, 0, len(runes)
	for i < j {
		// Two signs of the head go with one of the tail.
		a := width(string(runes[i]), size, false)
		if (i+1)%3 == 0 && j > i+1 {
			a = width(string(runes[j-1]), size, false)
			if w+a > room {
				break
			}
			j--
			w += a
			a = width(string(runes[i]), size, false)
		}
		if w+a > room {
			break
		}
		w += a
		i++
	}
	if i == 0 {
		return fit(s, most, size, false)
	}
	out := strings.TrimRight(string(runes[:i]), " ,;:-–") + "…" + strings.TrimLeft(string(runes[j:]), " ")
	if width(out, size, false) > most { // kerning may differ from the sum of widths
		return fit(s, most, size, false)
	}
	return out
}

// number and letter are the signs of the i-th of things that have a key.
func number(i int) string { return strconv.Itoa(i + 1) }

func letter(i int) string {
	s := string(rune('A' + i%26))
	if i >= 26 {
		s = letter(i/26-1) + s
	}
	return s
}

// numbered is the key of names that are numbered in the picture.
func numbered(names []string, sign func(int) string) []entry {
	out := make([]entry, len(names))
	for i, n := range names {
		out[i] = entry{sign: sign(i), name: n}
	}
	return out
}

// allFit breaks names into at most so many lines of a width; whole says that none had
// to be shortened.
func allFit(names []string, most float64, lines int) (out [][]string, whole bool) {
	out = make([][]string, len(names))
	whole = true
	for i, n := range names {
		var fits bool
		out[i], fits = wrap(n, most, textSize, lines)
		whole = whole && fits
	}
	return out, whole
}

// deepest is the number of lines of the name that has most.
func deepest(lines [][]string) int {
	n := 1
	for _, l := range lines {
		n = max(n, len(l))
	}
	return n
}
