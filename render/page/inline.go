package page

import (
	"fmt"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/face"
)

// frag is a piece of one word in one face.
type frag struct {
	face       *face.Face
	text       string
	size, rise float64
	width      float64
	colour     doc.Colour
	link       string
	target     *Element // what the link reads
	actual     string
}

// atom is what a line is never broken within. Glue is the natural width of the space
// after it.
type atom struct {
	frags     []frag
	width     float64
	glue      float64
	breakable bool // the line may end after it
	forced    bool // the line must end after it
	notes     []int
}

// words turns inlines into atoms.
type words struct {
	set   *setter
	pos   diag.Pos
	atoms []atom
	cur   atom
	fresh bool // cur holds nothing yet
}

// atoms sets text in the style st, complaining of lacking glyphs at pos.
func (s *setter) atoms(text []doc.Inline, st style, pos diag.Pos) []atom {
	w := words{set: s, pos: pos, fresh: true}
	w.inlines(text, st, 0)
	w.flush(0, true, false)
	holdRelations(w.atoms)
	return w.atoms
}

// holdRelations keeps lines from breaking at the signs of a relation, as in P = 0.02.
func holdRelations(atoms []atom) {
	for i := range atoms {
		a := &atoms[i]
		if i == 0 || i+1 == len(atoms) || a.forced || atoms[i-1].forced || len(a.frags) != 1 {
			continue
		}
		switch a.frags[0].text {
		case "=", "<", ">", "≤", "≥", "≈", "±", "×", "∈":
			a.breakable, atoms[i-1].breakable = false, false
		}
	}
}

func (s *setter) plainAtoms(text string, st style) []atom {
	w := words{set: s, fresh: true}
	w.text(text, st)
	w.flush(0, true, false)
	return w.atoms
}

func (w *words) inlines(text []doc.Inline, st style, depth int) {
	if depth > deepest {
		return
	}
	for _, n := range text {
		switch n := n.(type) {
		case nil:
		case doc.Text:
			w.text(n.Text, st)
		case doc.Emph:
			in := st
			in.italic = !st.italic
			w.inlines(n.Text, in, depth+1)
		case doc.Strong:
			in := st
			in.bold = true
			w.inlines(n.Text, in, depth+1)
		case doc.Sup:
			w.inlines(n.Text, raised(st, raise), depth+1)
		case doc.Sub:
			w.inlines(n.Text, raised(st, lower), depth+1)
		case doc.CodeSpan:
			in := st
			in.family, in.code, in.size = face.Mono, true, st.size*0.88
			w.text(n.Text, in)
		case doc.Link:
			in := st
			in.link, in.target = n.Dest, &Element{Role: Linked, Alt: plain(n.Text, depth)}
			if !strings.HasPrefix(n.Dest, "#") {
				in.colour = blue
			}
			w.inlines(n.Text, in, depth+1)
		case doc.Ref:
			in := st
			in.link, in.target = "#"+n.ID, &Element{Role: Linked, Alt: n.Text}
			w.text(strings.ReplaceAll(n.Text, " ", "\u00A0"), in)
		case doc.FootnoteRef:
			w.note(n.N, st)
		case doc.Break:
			w.flush(0, true, true)
		default:
			panic("page: unknown inline")
		}
	}
}

func raised(st style, rise float64) style {
	if st.size > 4 {
		st.rise += rise * st.size
		st.size *= raisedSize
	}
	return st
}

func (w *words) note(n int, st style) {
	in := raised(st, raise)
	in.link, in.target = noteAnchor(n), &Element{Role: Linked, Alt: fmt.Sprintf("footnote %d", n)}
	w.set.calls[n] = append(w.set.calls[n], in.target)
	in.italic = false
	if n := len(w.cur.frags); n > 0 && w.cur.frags[n-1].rise != 0 {
		w.add("\u2009", st) // a raised figure before it is no part of the number
	}
	w.add(strconv.Itoa(n), in)
	if 0 < n && n <= len(w.set.doc.Notes) {
		w.cur.notes = append(w.cur.notes, n)
	}
}

func noteAnchor(n int) string { return "#fn:" + strconv.Itoa(n) }

// flush ends the atom.
func (w *words) flush(glue float64, breakable, forced bool) {
	if w.fresh {
		switch {
		case forced:
			w.atoms = append(w.atoms, atom{breakable: true, forced: true})
		case len(w.atoms) > 0 && glue > 0 && !w.atoms[len(w.atoms)-1].forced:
			last := &w.atoms[len(w.atoms)-1]
			last.glue, last.breakable = max(last.glue, glue), true
		}
		return
	}
	w.cur.glue, w.cur.breakable, w.cur.forced = glue, breakable, forced
	w.atoms = append(w.atoms, w.cur)
	w.cur, w.fresh = atom{}, true
}

// text splits s at spaces and at the places where a word may be broken.
func (w *words) text(s string, st style) {
	start, word := 0, 0 // where what is not yet added begins, and the word it is of
	long := longWord(s)
	var before rune
	for i, r := range s {
		end := i + utf8.RuneLen(r)
		if r == utf8.RuneError {
			_, size := utf8.DecodeRuneInString(s[i:])
			end = i + size
		}
		switch {
		case blank(r):
			w.add(s[start:i], st)
			f := face.Get(st.family, st.bold, st.italic)
			w.flush(float64(f.Advance(' '))*st.size/1000, true, false)
			start, word = end, end
			long = longWord(s[word:])
		case r == '\u200B':
			w.add(s[start:i], st)
			w.flush(0, true, false)
			start = end
		case ideograph(r):
			w.add(s[start:i], st)
			w.flush(0, true, false)
			w.add(s[i:end], st)
			w.flush(0, true, false)
			start = end
		case lastOfWord(r, st.code || long):
			next, _ := utf8.DecodeRuneInString(s[end:])
			if mayBreak(before, r, next, st.code || long) {
				w.add(s[start:end], st)
				w.flush(0, true, false)
				start = end
			}
		}
		before = r
	}
	w.add(s[start:], st)
}

// blank tells whether r is set as a space.
func blank(r rune) bool {
	switch r {
	case ' ', '\t', '\n', '\r', '\u0085', '\u2028', '\u2029':
		return true
	}
	return false
}

// ideograph tells whether r is of a script that is written without spaces, where a line
// may end after each sign.
func ideograph(r rune) bool {
	return r >= 0x2E80 && unicode.In(r, unicode.Han, unicode.Hiragana, unicode.Katakana, unicode.Hangul)
}

const longest = 30 // runes of a word; a longer one is an address or a path

// longWord tells whether s begins with a word too long to be one.
func longWord(s string) bool {
	n := 0
	for _, r := range s {
		if blank(r) {
			return false
		}
		if n++; n > longest {
			return true
		}
	}
	return false
}

// lastOfWord tells whether a line may end after r, within a word or a code.
func lastOfWord(r rune, code bool) bool {
	switch r {
	case '-', '/', '–', '—', '\u2010':
		return true
	case '_', '.', '=', ',', ':', '&', '?', '#':
		return code
	}
	return false
}

// mayBreak tells whether a line may end after r: not after a minus, nor in a range of
// numbers, nor in a unit such as kg/d.
func mayBreak(before, r, next rune, code bool) bool {
	switch {
	case next == utf8.RuneError || next == 0 || unicode.IsSpace(next) || before == 0 || unicode.IsSpace(before):
		return false
	case code && (r != '.' && r != ',' || !unicode.IsDigit(next)):
		return unicode.IsLetter(next) || unicode.IsDigit(next)
	case code:
		return false
	case r == '—':
		return true
	case r == '/':
		return unicode.IsLetter(before) && unicode.IsLetter(next) && unicode.IsUpper(next) || before == '/'
	}
	return unicode.IsLetter(before) && unicode.IsLetter(next)
}

// add puts a text without break opportunities into the atom.
func (w *words) add(s string, st style) {
	if s == "" {
		return
	}
	clean, missing := face.Clean(s)
	for _, r := range missing {
		w.set.missing(r, w.pos)
	}
	if clean == "" {
		return
	}
	if st.rise == 0 {
		w.lift(clean, st)
		return
	}
	w.piece(clean, st)
}

// lift sets the superscript and subscript figures of Unicode as raised and lowered
// text, so that those a face lacks look like those it has.
func (w *words) lift(s string, st style) {
	for s != "" {
		i := strings.IndexFunc(s, func(r rune) bool { plain, _ := lifted(r); return plain != 0 })
		if i < 0 {
			w.piece(s, st)
			return
		}
		if i > 0 {
			w.piece(s[:i], st)
			s = s[i:]
		}
		_, rise := lifted(first(s))
		var b strings.Builder
		end := len(s)
		for j, r := range s {
			plain, to := lifted(r)
			if plain == 0 || to != rise {
				end = j
				break
			}
			b.WriteRune(plain)
		}
		in := raised(st, rise)
		in.actual = s[:end]
		w.piece(b.String(), in)
		s = s[end:]
	}
}

func first(s string) rune {
	r, _ := utf8.DecodeRuneInString(s)
	return r
}

// lifted gives the plain rune of a superscript or subscript figure or sign, and how far
// it is moved.
func lifted(r rune) (plain rune, rise float64) {
	switch {
	case r == '¹':
		return '1', raise
	case r == '²' || r == '³':
		return '2' + r - '²', raise
	case r == '⁰' || '⁴' <= r && r <= '⁹':
		return '0' + r - '⁰', raise
	case '₀' <= r && r <= '₉':
		return '0' + r - '₀', lower
	}
	switch r {
	case '⁺':
		return '+', raise
	case '⁻':
		return '\u2212', raise
	case 'ⁿ':
		return 'n', raise
	case '₊':
		return '+', lower
	case '₋':
		return '\u2212', lower
	}
	return 0, 0
}

func (w *words) piece(s string, st style) {
	f := face.Get(st.family, st.bold, st.italic)
	runs := []face.Run{{Face: f, Text: s}}
	if !f.Alone(s) {
		runs = f.Runs(s)
	}
	for _, run := range runs {
		fr := frag{
			face: run.Face, text: run.Text, size: st.size, rise: st.rise, colour: st.colour, link: st.link, target: st.target,
			width: run.Face.Width(run.Text, st.size),
		}
		if len(runs) == 1 {
			fr.actual = st.actual
		}
		w.cur.frags = append(w.cur.frags, fr)
		w.cur.width += fr.width
	}
	w.fresh = false
}

const missingMost = 50 // runes reported, so that a text in another script does not flood

// missing reports a rune that no face holds, once for each place.
func (s *setter) missing(r rune, pos diag.Pos) {
	key := lack{r, pos}
	if s.lacking[key] || len(s.lacking) >= missingMost {
		return
	}
	s.lacking[key] = true
	s.diags.Add(diag.Diagnostic{
		Pos: pos, Severity: diag.Warning, Code: "missing-glyph",
		Message: fmt.Sprintf("no face holds %q (U+%04X); it is printed as its code", r, r),
		Hint:    "write it in Latin, Greek, Cyrillic or common mathematical letters",
	})
}
