package doc

// Picture is a recorded drawing. Lengths are in points; the origin is the top left
// corner, y grows downwards. It is drawn once and replayed by every writer that has
// ink.
type Picture struct {
	Width, Height float64
	Ops           []Op
}

// Op is one drawing operation: Stroke, Fill, Label or Mark.
type Op interface{ op() }

// Colour is an opaque sRGB colour with an alpha. Ink and Paper stand for the colours
// of text and background, which a writer may turn for a dark screen.
type Colour struct {
	R, G, B uint8
	A       uint8 // 255: opaque
	Role    Role
}

// Role tells a writer that a colour is the text's or the background's own.
type Role int

// The roles of a colour.
const (
	Own   Role = iota // as given
	Ink               // the text colour
	Paper             // the background
	Faint             // a grey between the two: grids, secondary rules
)

// Segment is a piece of a path.
type Segment struct {
	Kind SegmentKind
	// X, Y end the piece; X1 … Y2 are the control points of a cubic curve.
	X, Y, X1, Y1, X2, Y2 float64
}

// SegmentKind is the kind of a piece of a path.
type SegmentKind int

// The kinds of pieces.
const (
	MoveTo SegmentKind = iota
	LineTo
	CurveTo
	Close
)

// Stroke draws along a path.
type Stroke struct {
	Path   []Segment
	Width  float64
	Dashes []float64
	Colour Colour
}

// Fill fills a path by the nonzero rule.
type Fill struct {
	Path   []Segment
	Colour Colour
}

// Label sets text with its baseline starting at X, Y, turned by Angle degrees
// counter-clockwise. Face names a style of the sans family.
type Label struct {
	X, Y, Size, Angle float64
	Text              string
	Bold, Italic      bool
	Colour            Colour
	Width             float64 // as measured when it was drawn
}

// Mark names the thing that the operations up to the next Mark draw (a unit, a
// treatment), for writers that can show it; an empty Name ends it.
type Mark struct{ Name string }

func (Stroke) op() {}
func (Fill) op()   {}
func (Label) op()  {}
func (Mark) op()   {}
