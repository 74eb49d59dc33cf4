// Package figure draws the pictures of a report: the layout map, points by treatment,
// means, differences, interactions, residuals, power, the flow of units. It knows no
// statistics: values come computed, names and letters come as finished text, and each
// figure gives back the recorded picture with the same in words.
//
// # The style
//
// All figures share one look, and its parts, so that a new picture is one file.
//
//   - Lengths are points at print size. A figure is columnWidth wide, which fits the text
//     of A4 and of Letter, and as high as what it shows asks for, never above pageHeight.
//   - Letters are those of the sans family: titles of axes titleSize, names and numbers
//     textSize, what is written beside or below noteSize, and nothing below leastSize.
//   - Lines are thin, medium or heavy, grid lines and edges of cells fine; none is below a
//     quarter of a point.
//   - The axes stand apart from the ground and carry round numbers with a true minus sign.
//     A title is what is measured with its unit, "Daily gain (g/d)"; a power of ten goes
//     before the unit, what all numbers have in common behind it. Grid lines run across
//     the axis of values only. A figure does not force nought into an axis: marks show
//     places, not lengths.
//   - Series are told apart by mark, by dash and by colour, in this order of trust; the
//     i-th has symbol(i) and dash(i). Six colours of middling lightness hold 3:1 to white
//     and to a dark page; text is ink and holds 4.5:1 on every ground used. The tests
//     compute both, and what readers with a colour-vision deficiency see.
//   - One series is palette[0]. What was measured is a disc, what is estimated a disc on a
//     whisker, a mean among its data a bar in ink. A fitted curve is a line in palette[0]
//     with its limits as a tint, reference lines are ink, wished values dashed ink, what
//     was left out a cross.
//   - Names stand whole: upright below their group on up to three lines, else lying at the
//     left, else as numbers (of lines: letters) with a key below that names them all.
//   - Captions are sentences and belong to the caller; they say what an interval is.
//     Pictures in words are sentences from the data and name the extremes.
//   - Up to maxPoints are drawn one by one; beyond, a density stands for them.
//
// # To add a picture
//
// Give it a type whose Draw returns the picture and its words, and build it of these:
// numbers, logarithmic, doseAxis and newFrame for a pair of axes, newGroups where one of
// them has names; curve and band for a fitted line or a curve over time with its limits (a
// curve in steps is one with both ends of each step); whisker and marker for an estimate
// with its interval; ends for names beside lines; places for names in a crowd; newList for
// what finds no place. Mark what a reader may point at with its name. Then add it to the
// gallery of the tests, which hold it to all of the above.
package figure

import (
	"math"
	"strings"

	"penwright/render/doc"
	"penwright/render/face"
)

// Size is the size of a picture in points, its key below not counted. A zero Width is
// that of a text column; a zero Height is chosen by the figure from what it has to show.
type Size struct{ Width, Height float64 }

const (
	columnWidth = 446 // 157 mm
	pageHeight  = 600 // the most a figure takes by itself, leaving room for its caption
	leastWidth  = 160 // axes have no room below this
	leastHeight = 110
	huge        = 1e4 // nor is anything drawn above this

	textSize  = 8.0
	titleSize = 8.5
	noteSize  = 7.0
	leastSize = 6.5 // below this, print is not read

	fine   = 0.4
	thin   = 0.5
	medium = 1.0
	heavy  = 1.6

	// maxPoints is how many points are drawn one by one; above it a density stands
	// for them.
	maxPoints = 5000

	// limit is the largest magnitude drawn; it keeps differences finite.
	limit = 1e300
)

func (s Size) resolve(height float64) (w, h float64) {
	w, h = s.Width, s.Height
	if !(w > 0) {
		w = columnWidth
	}
	if !(h > 0) {
		h = height
	}
	return min(max(w, leastWidth), huge), min(max(h, leastHeight), huge)
}

// drawable says whether a value can be placed on an axis.
func drawable(v float64) bool { return math.Abs(v) <= limit }

// span is the range of what is drawn.
type span struct{ lo, hi float64 }

func empty() span { return span{lo: math.Inf(1), hi: math.Inf(-1)} }

func (s *span) add(vs ...float64) {
	for _, v := range vs {
		if drawable(v) {
			s.lo, s.hi = min(s.lo, v), max(s.hi, v)
		}
	}
}

func (s span) empty() bool { return s.lo > s.hi }

// padded widens a range by a share of itself on both sides, and gives one to a range
// that has no extent, or one too small beside its magnitude to be told apart.
func (s span) padded(share float64) span {
	if s.empty() {
		return span{lo: 0, hi: 1}
	}
	size := max(math.Abs(s.lo), math.Abs(s.hi))
	if least := max(size*1e-9, 1e-290); s.hi-s.lo < least {
		half := size * 0.05
		if size < 1e-280 {
			half = 1
		}
		return span{lo: s.lo - half, hi: s.hi + half}
	}
	d := (s.hi - s.lo) * share
	return span{lo: s.lo - d, hi: s.hi + d}
}

// note is what is drawn where there is nothing to draw.
func note(s Size, text string) *doc.Picture {
	w, _ := s.resolve(0)
	const h = 40
	c := newCanvas(w, h)
	st := style{size: textSize, colour: ink}
	c.text(w/2, h/2+capHeight(textSize)/2, center, st, fit(text, w-12, textSize, false))
	return c.pic
}

// clean makes text of any source fit for one line of bounded length.
func clean(s string) string {
	const most = 300
	if len(s) <= most && plainText(s) {
		return s
	}
	if len(s) > 8*most {
		s = s[:8*most]
	}
	s, _ = face.Clean(s)
	s = strings.Join(words(s), " ")
	n := 0
	for i := range s {
		if n == most {
			return s[:i] + "…"
		}
		n++
	}
	return s
}

// words splits at plain spaces only: thin and fixed ones hold a number to its unit.
func words(s string) []string {
	return strings.FieldsFunc(s, func(r rune) bool { return r == ' ' })
}

// plainText says whether text is printable ASCII with single spaces between its words.
func plainText(s string) bool {
	space := true
	for i := 0; i < len(s); i++ {
		if s[i] < ' ' || s[i] > '~' || space && s[i] == ' ' {
			return false
		}
		space = s[i] == ' '
	}
	return !space || s == ""
}
