// Package doc is the document tree between composing and writing: a closed set of
// plain nodes. All text in it is finished: writers know no statistics and format no
// numbers.
package doc

import "penwright/protocol/diag"

// Document is a whole report.
type Document struct {
	Lang        string // BCP 47, such as "en"
	Title       string
	ShortTitle  string // for the running head
	Code        string // trial code
	Status      string // planned, allotted, sealed, complete
	Author      string
	Date        string // ISO 8601 date the report bears; empty: none
	Fingerprint string // first twelve hex digits over the inputs, for the foot
	Paper       string // A4 or Letter
	Blocks      []Block
	Notes       [][]Block // footnotes, by FootnoteRef.N-1
}

// Block is a node that stands on its own lines.
type Block interface{ block() }

// Inline is a node inside a line.
type Inline interface{ inline() }

// Heading opens a section. ID is unique in the document and is what links point at.
type Heading struct {
	Level  int // 1 … 6; the title of the document is not a Heading
	ID     string
	Number string // "3.2", or empty
	Text   []Inline
	Pos    diag.Pos
}

// Paragraph is running text.
type Paragraph struct {
	Text []Inline
	Pos  diag.Pos
}

// List is an ordered or unordered list; each item is a sequence of blocks.
type List struct {
	Ordered bool
	Start   int
	Tight   bool
	Items   [][]Block
}

// Quote is a quotation.
type Quote struct{ Blocks []Block }

// Code is preformatted text in a fixed pitch.
type Code struct{ Text string }

// Rule is a break between thoughts.
type Rule struct{}

// Aside is a box set off from the text.
type Aside struct {
	Kind   string // answer, caution, finding: what the box is for
	Title  []Inline
	Blocks []Block
}

// Contents stands where the table of contents is to be made.
type Contents struct{}

// Align is the alignment of a column.
type Align int

// The alignments. Decimal aligns at the decimal mark of each text, with what has none
// set as if the mark stood at its end.
const (
	Left Align = iota
	Center
	Right
	Decimal
)

// Table is a table with its caption above.
type Table struct {
	ID      string
	Number  string // set by the numbering of the finished document: "3"
	Caption []Inline
	Columns []Column
	Head    [][]Cell // head rows, repeated over pages
	Rows    []Row
	Notes   [][]Inline // below the table, in order
	Wide    bool       // the table is expected to need the whole width or a turned page
	// Sortable says that rows stand for themselves, so that a reader may sort them.
	Sortable bool
	// CSV names the file in the output folder that holds the same table in full precision; may be empty.
	CSV string
	Pos diag.Pos
}

// Column describes a column of a table.
type Column struct {
	Align Align
	// Key is true for columns that name the row.
	Key bool
}

// Row is a row of a table's body.
type Row struct {
	Cells []Cell
	// Rule draws a thin rule above the row, as before a total or a new stratum.
	Rule bool
	// Group marks a row that heads those below it; its first cell spans all columns.
	Group bool
}

// Cell is a cell; Span is the number of columns it covers, 0 meaning one.
type Cell struct {
	Text []Inline
	Span int
	// Align overrides that of the column where Own is true.
	Align Align
	Own   bool
}

// Figure is a picture with its caption below.
type Figure struct {
	ID      string
	Number  string
	Caption []Inline
	Alt     string // the picture in words
	Picture *Picture
	// File names the picture in the output folder, without extension; may be empty.
	File string
	Pos  diag.Pos
}

// Text is a run of plain text.
type Text struct{ Text string }

// Emph, Strong, Sup, Sub and CodeSpan set their content apart.
type (
	Emph     struct{ Text []Inline }
	Strong   struct{ Text []Inline }
	Sup      struct{ Text []Inline }
	Sub      struct{ Text []Inline }
	CodeSpan struct{ Text string }
)

// Link points to a URL, or inside the document when Dest begins with "#".
type Link struct {
	Dest string
	Text []Inline
}

// Ref stands for the number of a heading, table or figure; Text is filled in by the
// numbering of the finished document: "Table 3".
type Ref struct {
	ID       string
	Text     string
	Optional bool // where nothing has the ID the Text given stands, as it is
	Pos      diag.Pos
}

// FootnoteRef calls footnote N, from 1.
type FootnoteRef struct{ N int }

// Break ends the line.
type Break struct{}

func (Heading) block()   {}
func (Paragraph) block() {}
func (List) block()      {}
func (Quote) block()     {}
func (Code) block()      {}
func (Rule) block()      {}
func (Aside) block()     {}
func (Contents) block()  {}
func (Table) block()     {}
func (Figure) block()    {}

func (Text) inline()        {}
func (Emph) inline()        {}
func (Strong) inline()      {}
func (Sup) inline()         {}
func (Sub) inline()         {}
func (CodeSpan) inline()    {}
func (Link) inline()        {}
func (Ref) inline()         {}
func (FootnoteRef) inline() {}
func (Break) inline()       {}
