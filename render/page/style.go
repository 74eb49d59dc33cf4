package page

import (
	"penwright/render/doc"
	"penwright/render/face"
)

// Sizes and distances of the page.
const (
	marginSide   = 74.0 // 26 mm
	marginTop    = 74.0
	marginBottom = 76.0
	headBaseline = 44.0 // of the running head, from the upper edge
	footBaseline = 40.0 // of the foot, from the lower edge

	textSize, textLead   = 10.0, 13.5
	paragraphGap         = 6.0
	smallSize, smallLead = 8.5, 11.25 // captions
	noteSize, noteLead   = 8.5, 11.0  // footnotes
	codeSize, codeLead   = 8.0, 10.6

	titleSize, titleLead = 21.0, 1.21 // of the size
	contentsSize         = 9.0

	tableSize, tableSizeMin = 8.5, 7.0
	tableLead               = 1.28 // of the size
	rowPad                  = 2.0  // above and below the text of a row
	columnGap               = 12.0
	columnGapTight          = 8.0 // before smaller type is taken
	columnGapMin            = 6.0 // with the smallest type
	tableNoteSize           = 7.5

	thick, thin, hair = 0.9, 0.5, 0.3 // rules

	floatGap  = 15.0 // around tables and figures
	listStep  = 17.0 // indent of a list
	quoteStep = 20.0

	spaceLeast, spaceMost = 0.8, 1.6 // of the natural word space

	leastShrink = 0.93 // of a picture, to fill a page that has nearly room for it

	raisedSize, raise, lower = 0.7, 0.33, -0.15
)

// headings holds size, leading, space above and below by level.
var headings = [7]struct{ size, lead, above, below float64 }{
	1: {14, 18, 26, 7},
	2: {11.5, 15, 19, 4.5},
	3: {10, 13.5, 15, 3},
	4: {9.5, 13, 12, 2},
	5: {9.5, 13, 11, 1.5},
	6: {9.5, 13, 11, 1.5},
}

var (
	ink      = doc.Colour{A: 255, Role: doc.Ink}
	grey     = doc.Colour{R: 0x55, G: 0x5B, B: 0x61, A: 255}
	faint    = doc.Colour{R: 0xB4, G: 0xB8, B: 0xBC, A: 255}
	blue     = doc.Colour{R: 0x1B, G: 0x45, B: 0x7A, A: 255}
	codeFill = doc.Colour{R: 0xF5, G: 0xF5, B: 0xF3, A: 255}
)

// asideLook gives the background and the bar of a box; what an unknown kind is for
// does not matter to its looks.
func asideLook(kind string) (fill, bar doc.Colour) {
	switch kind {
	case "answer":
		return doc.Colour{R: 0xEC, G: 0xF1, B: 0xF6, A: 255}, doc.Colour{R: 0x2A, G: 0x5A, B: 0x8A, A: 255}
	case "caution":
		return doc.Colour{R: 0xFB, G: 0xF2, B: 0xE3, A: 255}, doc.Colour{R: 0xB3, G: 0x62, B: 0x00, A: 255}
	}
	return doc.Colour{R: 0xF3, G: 0xF3, B: 0xF1, A: 255}, doc.Colour{R: 0x80, G: 0x85, B: 0x8A, A: 255}
}

// style is how a piece of text is set.
type style struct {
	family       face.Family
	bold, italic bool
	size, rise   float64
	colour       doc.Colour
	link         string
	target       *Element // what the link reads
	code         bool
	actual       string
}

func serif(size float64) style { return style{family: face.Serif, size: size, colour: ink} }
func sans(size float64) style  { return style{family: face.Sans, size: size, colour: ink} }
func bold(s style) style       { s.bold = true; return s }
func italic(s style) style     { s.italic = true; return s }
func in(c doc.Colour, s style) style {
	s.colour = c
	return s
}

// paper gives the width and height of a paper; any name but Letter is A4.
func paper(name string) (width, height float64) {
	if name == "Letter" {
		return 612, 792
	}
	return 595.28, 841.89
}
