package page

import (
	"strings"
	"unicode"

	"golang.org/x/text/unicode/bidi"
)

// rightToLeft tells whether r belongs to a script written from right to left.
func rightToLeft(r rune) bool {
	return 0x0590 <= r && r <= 0x08FF || 0xFB1D <= r && r <= 0xFDFF || 0xFE70 <= r && r <= 0xFEFF
}

func (l line) needsOrder() bool {
	for _, a := range l.atoms {
		for _, f := range a.frags {
			if strings.IndexFunc(f.text, rightToLeft) >= 0 {
				return true
			}
		}
	}
	return false
}

// sign is one rune of a line with what it is set in; a space has its glue.
type sign struct {
	r    rune
	frag *frag
	glue float64
}

// ordered gives the line as it is seen: runs of right-to-left scripts turned around,
// the line as a whole running from left to right.
func (l line) ordered() line {
	var signs []sign
	for i := range l.atoms {
		a := &l.atoms[i]
		for j := range a.frags {
			for _, r := range a.frags[j].text {
				signs = append(signs, sign{r: r, frag: &a.frags[j]})
			}
		}
		if i < len(l.atoms)-1 && a.glue > 0 {
			signs = append(signs, sign{r: ' ', glue: a.glue})
		}
	}
	out := line{stretch: l.stretch, width: l.width}
	var cur atom
	var of *frag
	for _, s := range visual(signs) {
		if s.frag == nil {
			cur.glue = s.glue
			out.atoms = append(out.atoms, cur)
			cur, of = atom{}, nil
			continue
		}
		if s.frag != of {
			f := *s.frag
			f.text, f.width = "", 0
			if f.actual != "" && s.frag.text != f.text {
				f.actual = ""
			}
			cur.frags = append(cur.frags, f)
			of = s.frag
		}
		f := &cur.frags[len(cur.frags)-1]
		f.text += string(s.r)
	}
	out.atoms = append(out.atoms, cur)
	for i := range out.atoms {
		for j := range out.atoms[i].frags {
			f := &out.atoms[i].frags[j]
			f.width = f.face.Width(f.text, f.size)
		}
	}
	return out
}

// visual orders signs from left to right.
func visual(signs []sign) []sign {
	runes := make([]rune, len(signs))
	for i, s := range signs {
		runes[i] = s.r
	}
	text := string(runes)
	var p bidi.Paragraph
	if n, err := p.SetString(text, bidi.DefaultDirection(bidi.LeftToRight)); err != nil || n != len(text) {
		return signs
	}
	order, err := p.Order()
	if err != nil {
		return signs
	}
	type stretch struct {
		start, end int // of signs
		turned     bool
	}
	var (
		stretches []stretch
		at        int
	)
	for i := 0; i < order.NumRuns(); i++ {
		run := order.Run(i)
		n := len([]rune(run.String()))
		stretches = append(stretches, stretch{at, min(at+n, len(signs)), run.Direction() == bidi.RightToLeft})
		at += n
	}
	if at != len(signs) {
		return signs
	}
	// Runs come in the order of the text. Numbers inside a right-to-left passage keep
	// their own direction but change places with their neighbours.
	for i := 0; i < len(stretches); i++ {
		if !stretches[i].turned {
			continue
		}
		end := i
		for j := i + 1; j < len(stretches); j++ {
			if stretches[j].turned {
				end = j
			} else if strong(runes[stretches[j].start:stretches[j].end]) {
				break
			}
		}
		for a, b := i, end; a < b; a, b = a+1, b-1 {
			stretches[a], stretches[b] = stretches[b], stretches[a]
		}
		i = end
	}
	out := make([]sign, 0, len(signs))
	for _, s := range stretches {
		if !s.turned {
			out = append(out, signs[s.start:s.end]...)
			continue
		}
		for i := s.end - 1; i >= s.start; i-- {
			turned := signs[i]
			turned.r = mirror(turned.r)
			out = append(out, turned)
		}
	}
	return out
}

func strong(text []rune) bool {
	for _, r := range text {
		if unicode.IsLetter(r) {
			return true
		}
	}
	return false
}

func mirror(r rune) rune {
	const pairs = "()[]{}<>«»‹›≤≥"
	list := []rune(pairs)
	for i, p := range list {
		if p == r {
			return list[i^1]
		}
	}
	return r
}
