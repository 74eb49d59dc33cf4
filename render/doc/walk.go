package doc

import "strings"

// Walk calls visit for every Block and Inline below blocks, in reading order, a node
// before its parts. Footnotes are not followed.
func Walk(blocks []Block, visit func(node any)) {
	for _, b := range blocks {
		visit(b)
		switch b := b.(type) {
		case Heading:
			walkInlines(b.Text, visit)
		case Paragraph:
			walkInlines(b.Text, visit)
		case List:
			for _, item := range b.Items {
				Walk(item, visit)
			}
		case Quote:
			Walk(b.Blocks, visit)
		case Aside:
			walkInlines(b.Title, visit)
			Walk(b.Blocks, visit)
		case Table:
			walkInlines(b.Caption, visit)
			for _, row := range b.Head {
				for _, cell := range row {
					walkInlines(cell.Text, visit)
				}
			}
			for _, row := range b.Rows {
				for _, cell := range row.Cells {
					walkInlines(cell.Text, visit)
				}
			}
			for _, note := range b.Notes {
				walkInlines(note, visit)
			}
		case Figure:
			walkInlines(b.Caption, visit)
		case Code, Rule, Contents:
		default:
			panic("doc: unknown block")
		}
	}
}

func walkInlines(text []Inline, visit func(node any)) {
	for _, n := range text {
		visit(n)
		switch n := n.(type) {
		case Emph:
			walkInlines(n.Text, visit)
		case Strong:
			walkInlines(n.Text, visit)
		case Sup:
			walkInlines(n.Text, visit)
		case Sub:
			walkInlines(n.Text, visit)
		case Link:
			walkInlines(n.Text, visit)
		case Text, CodeSpan, Ref, FootnoteRef, Break:
		default:
			panic("doc: unknown inline")
		}
	}
}

// Mapper makes a changed copy of a tree; what it is given stays as it was. Block and
// Inline are called for every node, a node before its parts, in reading order; either
// may be nil.
type Mapper struct {
	Block  func(Block) Block
	Inline func(Inline) Inline
}

// Blocks returns the changed copy of blocks.
func (m Mapper) Blocks(blocks []Block) []Block {
	if blocks == nil {
		return nil
	}
	out := make([]Block, len(blocks))
	for i, b := range blocks {
		if m.Block != nil {
			b = m.Block(b)
		}
		switch n := b.(type) {
		case Heading:
			n.Text = m.Inlines(n.Text)
			b = n
		case Paragraph:
			n.Text = m.Inlines(n.Text)
			b = n
		case List:
			items := make([][]Block, len(n.Items))
			for j, item := range n.Items {
				items[j] = m.Blocks(item)
			}
			n.Items = items
			b = n
		case Quote:
			n.Blocks = m.Blocks(n.Blocks)
			b = n
		case Aside:
			n.Title = m.Inlines(n.Title)
			n.Blocks = m.Blocks(n.Blocks)
			b = n
		case Table:
			b = m.table(n)
		case Figure:
			n.Caption = m.Inlines(n.Caption)
			b = n
		case Code, Rule, Contents:
		default:
			panic("doc: unknown block")
		}
		out[i] = b
	}
	return out
}

func (m Mapper) table(t Table) Table {
	t.Caption = m.Inlines(t.Caption)
	head := make([][]Cell, len(t.Head))
	for i, row := range t.Head {
		head[i] = m.cells(row)
	}
	t.Head = head
	rows := make([]Row, len(t.Rows))
	for i, row := range t.Rows {
		row.Cells = m.cells(row.Cells)
		rows[i] = row
	}
	t.Rows = rows
	notes := make([][]Inline, len(t.Notes))
	for i, note := range t.Notes {
		notes[i] = m.Inlines(note)
	}
	t.Notes = notes
	return t
}

func (m Mapper) cells(cells []Cell) []Cell {
	out := make([]Cell, len(cells))
	for i, c := range cells {
		c.Text = m.Inlines(c.Text)
		out[i] = c
	}
	return out
}

// Inlines returns the changed copy of text.
func (m Mapper) Inlines(text []Inline) []Inline {
	if text == nil {
		return nil
	}
	out := make([]Inline, len(text))
	for i, in := range text {
		if m.Inline != nil {
			in = m.Inline(in)
		}
		switch n := in.(type) {
		case Emph:
			n.Text = m.Inlines(n.Text)
			in = n
		case Strong:
			n.Text = m.Inlines(n.Text)
			in = n
		case Sup:
			n.Text = m.Inlines(n.Text)
			in = n
		case Sub:
			n.Text = m.Inlines(n.Text)
			in = n
		case Link:
			n.Text = m.Inlines(n.Text)
			in = n
		case Text, CodeSpan, Ref, FootnoteRef, Break:
		default:
			panic("doc: unknown inline")
		}
		out[i] = in
	}
	return out
}

// Plain returns text without its marks. Footnote calls are left out; a Break is a space.
func Plain(text []Inline) string {
	var b strings.Builder
	walkInlines(text, func(node any) {
		switch n := node.(type) {
		case Text:
			b.WriteString(n.Text)
		case CodeSpan:
			b.WriteString(n.Text)
		case Ref:
			b.WriteString(n.Text)
		case Break:
			b.WriteByte(' ')
		}
	})
	return b.String()
}

// Shift returns blocks with every heading lowered by so many levels, so that a text
// written by itself can stand inside a section. Levels stay within 1 … 6.
func Shift(blocks []Block, by int) []Block {
	return Mapper{Block: func(b Block) Block {
		if h, ok := b.(Heading); ok {
			h.Level = min(max(h.Level+by, 1), 6)
			return h
		}
		return b
	}}.Blocks(blocks)
}

// Size estimates how much memory and page a text takes, in bytes: the text, and a flat
// price for each node, cell and drawing operation.
func Size(blocks []Block) int {
	const node, cell, op = 16, 48, 48
	size := 0
	Walk(blocks, func(n any) {
		size += node
		switch n := n.(type) {
		case Text:
			size += len(n.Text)
		case CodeSpan:
			size += len(n.Text)
		case Code:
			size += len(n.Text)
		case Link:
			size += len(n.Dest)
		case Table:
			for _, row := range n.Head {
				size += cell * len(row)
			}
			for _, row := range n.Rows {
				size += cell * (1 + len(row.Cells))
			}
		case Figure:
			size += len(n.Alt)
			if n.Picture == nil {
				break
			}
			for _, o := range n.Picture.Ops {
				size += op
				switch o := o.(type) {
				case Stroke:
					size += node * len(o.Path)
				case Fill:
					size += node * len(o.Path)
				case Label:
					size += len(o.Text)
				case Mark:
					size += len(o.Name)
				}
			}
		}
	})
	return size
}
