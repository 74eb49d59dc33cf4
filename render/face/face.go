// Package face holds the embedded typefaces: what they contain, how wide a text is
// set in them, and which face takes the runes another lacks. Nothing is parsed before
// the first use of a face, and all of it may be used by many goroutines at once.
package face

import (
	"fmt"
	"math"
	"sync"
	"sync/atomic"

	"codeberg.org/go-fonts/dejavu/dejavusans"
	"codeberg.org/go-fonts/dejavu/dejavusansbold"
	"codeberg.org/go-fonts/dejavu/dejavusansboldoblique"
	"codeberg.org/go-fonts/dejavu/dejavusansoblique"
	"codeberg.org/go-fonts/liberation/liberationmonobold"
	"codeberg.org/go-fonts/liberation/liberationmonobolditalic"
	"codeberg.org/go-fonts/liberation/liberationmonoitalic"
	"codeberg.org/go-fonts/liberation/liberationmonoregular"
	"codeberg.org/go-fonts/liberation/liberationsansbold"
	"codeberg.org/go-fonts/liberation/liberationsansbolditalic"
	"codeberg.org/go-fonts/liberation/liberationsansitalic"
	"codeberg.org/go-fonts/liberation/liberationsansregular"
	"codeberg.org/go-fonts/liberation/liberationserifbold"
	"codeberg.org/go-fonts/liberation/liberationserifbolditalic"
	"codeberg.org/go-fonts/liberation/liberationserifitalic"
	"codeberg.org/go-fonts/liberation/liberationserifregular"
	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// Family is a family of faces.
type Family int

// The families: Serif for running text, Sans for heads, tables and figures, Mono for
// code. Any takes the runes the others lack.
const (
	Serif Family = iota
	Sans
	Mono
	Any
)

// Face is one typeface. Widths are in thousandths of an em.
type Face struct {
	// Name is stable, without spaces, and unique among the faces.
	Name         string
	Family       Family
	Bold, Italic bool

	index  int
	others []*Face // where to look for runes this face lacks, in order
	ttf    []byte

	once   sync.Once
	font   *sfnt.Font
	height vertical
	// glyphs holds blocks of 256 runes, made when the first of them is asked for.
	glyphs [256]atomic.Pointer[[256]glyph]
	// kerns holds the pairs of printable ASCII plus one, 0 meaning not yet known.
	kerns []atomic.Int32
}

type vertical struct{ ascent, descent, cap, x float64 }

// glyph is what setting one rune needs; its advance is -1 where the face lacks it.
type glyph struct {
	advance int16
	index   sfnt.GlyphIndex
}

const (
	kernFirst = 0x21
	kernSide  = 0x7F - kernFirst
	// kernKnown lifts known pairs off 0, the value of pairs not yet looked up.
	kernKnown = 1 << 20
)

// faces stand in the order family, bold, italic.
var faces = sync.OnceValue(func() []*Face {
	return link([]*Face{
		{Name: "serif", Family: Serif, ttf: liberationserifregular.TTF},
		{Name: "serifitalic", Family: Serif, Italic: true, ttf: liberationserifitalic.TTF},
		{Name: "serifbold", Family: Serif, Bold: true, ttf: liberationserifbold.TTF},
		{Name: "serifbolditalic", Family: Serif, Bold: true, Italic: true, ttf: liberationserifbolditalic.TTF},
		{Name: "sans", Family: Sans, ttf: liberationsansregular.TTF},
		{Name: "sansitalic", Family: Sans, Italic: true, ttf: liberationsansitalic.TTF},
		{Name: "sansbold", Family: Sans, Bold: true, ttf: liberationsansbold.TTF},
		{Name: "sansbolditalic", Family: Sans, Bold: true, Italic: true, ttf: liberationsansbolditalic.TTF},
		{Name: "mono", Family: Mono, ttf: liberationmonoregular.TTF},
		{Name: "monoitalic", Family: Mono, Italic: true, ttf: liberationmonoitalic.TTF},
		{Name: "monobold", Family: Mono, Bold: true, ttf: liberationmonobold.TTF},
		{Name: "monobolditalic", Family: Mono, Bold: true, Italic: true, ttf: liberationmonobolditalic.TTF},
		{Name: "any", Family: Any, ttf: dejavusans.TTF},
		{Name: "anyitalic", Family: Any, Italic: true, ttf: dejavusansoblique.TTF},
		{Name: "anybold", Family: Any, Bold: true, ttf: dejavusansbold.TTF},
		{Name: "anybolditalic", Family: Any, Bold: true, Italic: true, ttf: dejavusansboldoblique.TTF},
	})
})

// link numbers the faces and tells each where to look for the runes it lacks: in the
// fallback of its own style, then in upright ones, which hold more.
func link(all []*Face) []*Face {
	rescue := all[len(all)-4:]
	for i, f := range all {
		f.index = i
		style := i % 4
		for _, s := range []int{style, style &^ 1, 0} {
			r := rescue[s]
			if r != f && (len(f.others) == 0 || f.others[len(f.others)-1] != r) {
				f.others = append(f.others, r)
			}
		}
	}
	return all
}

// Get gives the face of a family in a style.
func Get(family Family, bold, italic bool) *Face {
	if family < Serif || family > Any {
		panic("face: no such family")
	}
	i := int(family) * 4
	if bold {
		i += 2
	}
	if italic {
		i++
	}
	return faces()[i]
}

// Count is the number of faces; Index is below it.
func Count() int { return len(faces()) }

// Index numbers the faces from 0, so that a table by face can be a slice.
func (f *Face) Index() int { return f.index }

// TTF gives the font file. The bytes are shared: they must not be written to.
func (f *Face) TTF() []byte { return f.ttf }

func (f *Face) load() {
	f.once.Do(func() {
		parsed, err := sfnt.Parse(f.ttf)
		if err != nil {
			panic(fmt.Sprintf("face: embedded %s does not parse: %v", f.Name, err))
		}
		em := fixed.Int26_6(parsed.UnitsPerEm())
		m, err := parsed.Metrics(nil, em, font.HintingNone)
		if err != nil {
			panic(fmt.Sprintf("face: embedded %s has no metrics: %v", f.Name, err))
		}
		unit := 1 / float64(em)
		f.height = vertical{
			ascent:  float64(m.Ascent) * unit,
			descent: float64(m.Descent) * unit,
			cap:     float64(m.CapHeight) * unit,
			x:       float64(m.XHeight) * unit,
		}
		f.font = parsed
		f.kerns = make([]atomic.Int32, kernSide*kernSide)
	})
}

func (f *Face) glyph(r rune) glyph {
	if r < 0 || r > 0xFFFF {
		return glyph{advance: -1}
	}
	block := f.glyphs[r>>8].Load()
	if block == nil {
		block = f.block(r &^ 0xFF)
		f.glyphs[r>>8].Store(block) // a second goroutine stores an equal block
	}
	return block[r&0xFF]
}

func (f *Face) block(first rune) *[256]glyph {
	f.load()
	var (
		block  [256]glyph
		buffer sfnt.Buffer
		em     = fixed.Int26_6(f.font.UnitsPerEm())
	)
	for i := range block {
		block[i].advance = -1
		r := first + rune(i)
		if r < 0x20 || 0x7F <= r && r < 0xA0 || 0xD800 <= r && r < 0xE000 || r >= 0xFFFE {
			continue
		}
		g, err := f.font.GlyphIndex(&buffer, r)
		if err != nil || g == 0 {
			continue
		}
		advance, err := f.font.GlyphAdvance(&buffer, g, em, font.HintingNone)
		if err != nil {
			continue
		}
		block[i] = glyph{advance: int16((int(advance)*2000 + int(em)) / (2 * int(em))), index: g}
	}
	return &block
}

// Has tells whether the face itself holds r.
func (f *Face) Has(r rune) bool { return f.glyph(r).advance >= 0 }

// Advance gives the width of r in thousandths of an em, without kerning; 0 where the
// face lacks it.
func (f *Face) Advance(r rune) int { return max(int(f.glyph(r).advance), 0) }

// Kern gives what is to be added between a and b, in thousandths of an em. Only pairs
// of printable ASCII are kerned.
func (f *Face) Kern(a, b rune) int {
	i, j := a-kernFirst, b-kernFirst
	if i < 0 || i >= kernSide || j < 0 || j >= kernSide || f.Family == Mono {
		return 0
	}
	f.load()
	slot := &f.kerns[i*kernSide+j]
	if v := slot.Load(); v != 0 {
		return int(v) - kernKnown
	}
	k := 0
	if left, right := f.glyph(a), f.glyph(b); left.advance >= 0 && right.advance >= 0 {
		em := f.font.UnitsPerEm()
		v, err := f.font.Kern(nil, left.index, right.index, fixed.Int26_6(em), font.HintingNone)
		if err == nil {
			k = int(math.Round(float64(v) * 1000 / float64(em)))
		}
	}
	slot.Store(int32(k + kernKnown))
	return k
}

// Ascent, Descent, CapHeight and XHeight give heights above (Descent: below) the base
// line at a size, in the unit of the size.
func (f *Face) Ascent(size float64) float64    { f.load(); return f.height.ascent * size }
func (f *Face) Descent(size float64) float64   { f.load(); return f.height.descent * size }
func (f *Face) CapHeight(size float64) float64 { f.load(); return f.height.cap * size }
func (f *Face) XHeight(size float64) float64   { f.load(); return f.height.x * size }

// Run is a piece of text set in one face.
type Run struct {
	Face *Face
	Text string
}

// Alone tells whether f sets a clean text without help, so that it is one run.
func (f *Face) Alone(text string) bool {
	for _, r := range text {
		if f.glyph(r).advance < 0 {
			return false
		}
	}
	return true
}

// Runs splits a clean text (see Clean) into pieces each of one face: f where it can,
// else a fallback.
func (f *Face) Runs(text string) []Run {
	var (
		runs  []Run
		start int
		last  *Face
		in    int // length of a cluster of raised or lowered figures that must not be torn
		with  *Face
	)
	for i, r := range text {
		take := f.holder(r)
		// Raised figures and signs are drawn to one another's measure: where one is
		// lacking (⁻), all of them (⁻¹) come from the fallback.
		if in > i {
			take = with
		} else if raised(r) {
			in, with = f.cluster(text, i)
			take = with
		}
		if take != last && last != nil {
			runs = append(runs, Run{Face: last, Text: text[start:i]})
			start = i
		}
		last = take
	}
	if last != nil {
		runs = append(runs, Run{Face: last, Text: text[start:]})
	}
	return runs
}

// cluster gives the end of the raised runes from i and the one face that holds them
// all; without such a face, the end of the first.
func (f *Face) cluster(text string, i int) (end int, face *Face) {
	const longest = 64 // bytes, so that a text of nothing else is still split in linear time
	end = len(text)
	for j, r := range text[i:] {
		if !raised(r) || j > longest {
			end = i + j
			break
		}
	}
	all := text[i:end]
	if f.Alone(all) {
		return end, f
	}
	for _, o := range f.others {
		if o.Alone(all) {
			return end, o
		}
	}
	for _, r := range all {
		return i + len(string(r)), f.holder(r)
	}
	return end, f
}

// raised tells whether r is a superscript or subscript figure or sign.
func raised(r rune) bool {
	return 0x2070 <= r && r <= 0x208E || r == '¹' || r == '²' || r == '³'
}

// holder gives the face that draws r: f, a fallback, or f again where no face holds it.
func (f *Face) holder(r rune) *Face {
	if f.Has(r) {
		return f
	}
	for _, o := range f.others {
		if o.Has(r) {
			return o
		}
	}
	return f
}

// Width gives the width of a clean text at a size, in the unit of the size, with
// kerning and with the runes that f lacks taken from the fallback.
func (f *Face) Width(text string, size float64) float64 {
	if f.Alone(text) {
		return float64(f.units(text)) * size / 1000
	}
	total := 0
	for _, run := range f.Runs(text) {
		total += run.Face.units(run.Text)
	}
	return float64(total) * size / 1000
}

func (f *Face) units(text string) int {
	total := 0
	var before rune
	for _, r := range text {
		total += f.Advance(r) + f.Kern(before, r)
		before = r
	}
	return total
}
