// Package page lays a document out: lines, tables, footnotes, figures, pages. What
// comes out is positioned text, boxes, pictures and links, each between the Begin and
// End of the element it belongs to. It knows no file format.
//
// Lengths are in points; the origin of a page is its top left corner and y grows
// downwards.
package page

import (
	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/face"
)

// Book is a document laid out.
type Book struct {
	Pages []Page
	// Anchors are the places that links inside the document point at, by ID.
	Anchors map[string]Place
	// Outline lists the headings in reading order.
	Outline []Entry
}

// Page is one page. A turned page has Width > Height.
type Page struct {
	Width, Height float64
	Ops           []Op
}

// Place is a point of a page; Page counts from 0.
type Place struct {
	Page int
	X, Y float64
}

// Entry is a heading as the outline shows it.
type Entry struct {
	Level int
	Title string
	Place Place
}

// Op is one operation on a page: Text, Box, Picture, Link, Begin or End.
type Op interface{ op() }

// Text sets a clean text in one face with its base line starting at X, Y.
type Text struct {
	X, Y   float64
	Face   *face.Face
	Size   float64
	Colour doc.Colour
	Text   string
	// Space is added to each U+0020 of the text.
	Space float64
	// Actual is what the text stands for where it is not the text itself: ⁻¹ for a
	// raised −1. Empty: the text.
	Actual string
}

// Box fills a rectangle; rules are thin boxes.
type Box struct {
	X, Y, Width, Height float64
	Colour              doc.Colour
}

// Picture replays a recorded drawing, its corner at X, Y, its lengths times Scale.
type Picture struct {
	X, Y, Scale float64
	Picture     *doc.Picture
}

// Link makes a rectangle lead to a URL, or to an anchor when Dest begins with "#".
// Element is the Linked element whose text it covers, if it is known.
type Link struct {
	X, Y, Width, Height float64
	Dest                string
	Element             *Element
}

// Begin and End enclose the operations of one element. They do not nest: what an
// element is part of stands in the element. With nothing between them they tell that
// there is such an element, as an empty cell.
type (
	Begin struct{ Element *Element }
	End   struct{}
)

func (Text) op()    {}
func (Box) op()     {}
func (Picture) op() {}
func (Link) op()    {}
func (Begin) op()   {}
func (End) op()     {}

// Role is what an element is in the structure of the document.
type Role int

// The roles. Artifact is what is no part of the text: rules, the heads of a table
// repeated on its further pages; so are running heads and feet.
const (
	Artifact Role = iota
	RunningHead
	RunningFoot
	Section
	Title
	Heading
	Paragraph
	List
	Item
	ItemLabel
	ItemBody
	Quote
	Code
	Aside
	Contents
	ContentsEntry
	Table
	TableRow
	HeadCell
	Cell
	Figure
	Caption
	Note
	NoteLabel
	Linked // what a link reads
)

// Element is a node of the structure. The same Element may appear on several pages.
type Element struct {
	Role    Role
	Level   int    // of a heading
	Span    int    // columns that a cell covers; 0 means one
	Row     bool   // of a head cell: it names its row, not its column
	Ordered bool   // of a list: its items are numbered
	Alt     string // a figure, or where a link leads, in words
	Parent  *Element
	// Order is the place among the parts of Parent in reading order, which that on the
	// pages is not where figures float. 0 means behind the part before it on the pages.
	Order int
}

// Lay lays d out on the paper it names. The diagnostics tell of runes that no face
// holds, of links that lead nowhere, and of what could not be set without a compromise.
func Lay(d *doc.Document) (*Book, diag.List) {
	s := newSetter(d)
	items := s.title()
	items = append(items, s.items(d.Blocks)...)
	s.layNotes()
	p := newPager(s)
	p.run(items)
	return p.finish(), s.diags
}
