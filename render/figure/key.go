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
	column  float64 // from one column to the next
	room    float64 // for a name
	rows    int
	tops    []float64 // of the entries, from the top of the key
	size    float64
	gap     float64 // between entries
	tall    float64

	complete bool // no name is shortened
}

const keyGap = 5 // above a key, and between a sign and its name

// list is what a key lists, measured.
type list struct {
	entries []entry
	names   []string
	wide    []float64 // of the names, at a size of 1
	widest  float64
}

func newList(entries []entry) *list {
	l := &list{entries: entries}
	for _, e := range entries {
		n := clean(e.name)
		w := width(n, 1, false)
		l.names, l.wide, l.widest = append(l.names, n), append(l.wide, w), max(l.widest, w)
	}
	return l
}

// key arranges a list of a width, no higher than most where that is possible. It is
// complete if no name had to be shortened.
func (l *list) key(wide, most float64) key {
	if len(l.entries) == 0 {
		return key{complete: true}
	}
	for _, size := range []float64{noteSize, leastSize} {
		for lines := 1; lines <= 3; lines++ {
			k := l.columns(wide, size, 0, lines)
			if l.least(k, lines) > most {
				continue
			}
			if l.set(&k, lines); k.complete && k.tall <= most {
				return k
			}
		}
	}
	// As many columns as the height asks for, the names shortened to fit.
	const columns = 12
	for c := 1; ; c++ {
		if k := l.columns(wide, leastSize, c, 1); l.least(k, 1) <= most || c == columns {
			l.set(&k, 1)
			return k
		}
	}
}

// leastGround is the height of the lowest picture above a key.
const leastGround = 145

// above arranges the key of a list below a picture of height h, or where no height was
// asked for, below a lower one if the key could not name all in full otherwise.
func (s Size) above(l *list, h float64) (key, float64) {
	w, _ := s.resolve(h)
	k := l.key(w-2, pageHeight-h)
	if h <= leastGround || s.Height > 0 || k.complete && k.tall+h <= pageHeight {
		return k, h
	}
	k = l.key(w-2, pageHeight-leastGround)
	return k, min(max(pageHeight-k.tall, leastGround), h)
}

// columns begins a key of names in a size, with so many columns, or where that is nought
// as many as the widest name on so many lines allows.
func (l *list) columns(wide, size float64, columns, lines int) key {
	k := key{entries: l.entries, size: size}
	pictured := false
	for _, e := range l.entries {
		w := 12.0
		if e.draw == nil {
			w = width(e.sign, size, true)
		}
		if e.framed {
			w = max(w+5, 9)
		}
		pictured = pictured || e.framed || e.draw != nil
		k.signs = max(k.signs, w)
	}
	k.signs = min(math.Ceil(k.signs), wide*0.35)
	switch {
	case size == leastSize && pictured:
		k.gap = 0.4
	case size > leastSize && pictured:
		k.gap = 2.2
	case size > leastSize:
		k.gap = 1.2
	}
	beside := k.signs + keyGap + 10
	if columns == 0 {
		columns = max(int(wide/(beside+max(l.widest*size, 1)/float64(lines)+1)), 1)
	}
	k.rows = (len(l.names) + columns - 1) / columns
	columns = (len(l.names) + k.rows - 1) / k.rows
	k.column = wide / float64(columns)
	k.room = max(k.column-beside, 1)
	return k
}

// least is a height that the key cannot be below, with names on at most so many lines.
func (l *list) least(k key, lines int) float64 {
	tall, y := 0.0, 0.0
	for i, w := range l.wide {
		if i%k.rows == 0 {
			y = keyGap
		}
		y += k.pitch(min(int(math.Ceil(w*k.size/k.room)), lines))
		tall = max(tall, y)
	}
	return tall + 2
}

func (k *key) pitch(lines int) float64 {
	return math.Ceil(100*k.size*leading)/100*float64(max(lines, 1)) + k.gap
}

// set breaks the names into at most so many lines.
func (l *list) set(k *key, lines int) {
	k.complete = true
	y := 0.0
	for i, n := range l.names {
		if i%k.rows == 0 {
			y = keyGap
		}
		var ls []string
		switch {
		case l.wide[i]*k.size <= k.room:
			ls = []string{n}
		case lines == 1:
			ls, k.complete = []string{shorten(n, k.room, k.size)}, false
		default:
			var whole bool
			ls, whole = wrap(n, k.room, k.size, lines)
			k.complete = k.complete && whole
		}
		k.lines, k.tops = append(k.lines, ls), append(k.tops, y)
		y += k.pitch(len(ls))
		k.tall = max(k.tall, y)
	}
	k.tall += 2
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

// allFit breaks names into at most so many lines of a width, or fails at the first that
// would have to be shortened.
func allFit(names []string, most float64, lines int) ([][]string, bool) {
	out := make([][]string, len(names))
	for i, n := range names {
		var whole bool
		if out[i], whole = wrap(n, most, textSize, lines); !whole {
			return nil, false
		}
	}
	return out, true
}

// deepest is the number of lines of the name that has most.
func deepest(lines [][]string) int {
	n := 1
	for _, l := range lines {
		n = max(n, len(l))
	}
	return n
}
