package pdf

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"penwright/render/page"
)

// tree is the structure of a file: its elements in reading order, with the content of
// the pages that belongs to each (ISO 32000-1, clause 14.7).
type tree struct {
	root  *node
	nodes map[*page.Element]*node
	// parents lists for each page the element of every piece of marked content.
	parents [][]*node
	// links lists for each page the element of every link on it.
	links  [][]*node
	levels []int // of the headings that the next may stand under
	notes  int
}

type node struct {
	element *page.Element
	kind    string // structure type
	wrap    string // structure type of an element around it; empty: none
	parent  *node
	kids    []kid
	page    int // on which its first content stands
	box     [4]float64
	note    int // number of a note
	object  int
}

// kid is a part of an element: another one, or marked content, or a link of a page.
type kid struct {
	node *node
	page int
	mcid int // -1: none
	link int // -1: none
}

func newTree(pages int) *tree {
	return &tree{
		root:    &node{element: &page.Element{Role: page.Section}, kind: "Document"},
		nodes:   map[*page.Element]*node{},
		parents: make([][]*node, pages), links: make([][]*node, pages),
	}
}

// of gives the node of an element, put at the end of its parent's parts if it is new.
func (t *tree) of(el *page.Element) *node {
	if el == nil || el.Parent == nil && el.Role == page.Section {
		return t.root
	}
	if n := t.nodes[el]; n != nil {
		return n
	}
	parent := t.of(el.Parent)
	n := &node{element: el, parent: parent, page: -1}
	t.kind(n)
	t.nodes[el] = n
	parent.kids = append(parent.kids, kid{node: n, mcid: -1, link: -1})
	return n
}

// artifact tells whether an element is no part of the text.
func artifact(el *page.Element) bool {
	return el == nil || el.Role <= page.RunningFoot
}

// kind finds the structure type (ISO 32000-1, clause 14.8.4).
func (t *tree) kind(n *node) {
	switch n.element.Role {
	case page.Section, page.Aside:
		n.kind = "Sect"
	case page.Title:
		n.kind = t.heading(0)
	case page.Heading:
		n.kind = "P" // in a footnote, which is no section
		if !within(n, page.Note) {
			n.kind = t.heading(max(n.element.Level, 1))
		}
	case page.List:
		n.kind = "L"
	case page.Item:
		n.kind = "LI"
	case page.ItemLabel, page.NoteLabel:
		n.kind = "Lbl"
	case page.ItemBody:
		n.kind = "LBody"
	case page.Quote:
		n.kind = "BlockQuote"
	case page.Code:
		n.kind, n.wrap = "Code", "P"
	case page.Contents:
		n.kind = "TOC"
	case page.ContentsEntry:
		n.kind = "TOCI"
	case page.Table:
		n.kind = "Table"
	case page.TableRow:
		n.kind = "TR"
	case page.HeadCell:
		n.kind = "TH"
	case page.Cell:
		n.kind = "TD"
	case page.Figure:
		n.kind = "Figure"
	case page.Caption:
		n.kind = "Caption"
	case page.Note:
		t.notes++
		n.kind, n.note = "Note", t.notes
	case page.Linked:
		n.kind = "Span" // until a link is found that covers it
	default:
		n.kind = "P"
	}
}

func within(n *node, role page.Role) bool {
	for ; n != nil; n = n.parent {
		if n.element.Role == role {
			return true
		}
	}
	return false
}

// heading gives the structure type of a heading. No level is skipped on the way down,
// whatever the author skips: a heading is one below the nearest before it that is higher.
func (t *tree) heading(level int) string {
	for len(t.levels) > 0 && t.levels[len(t.levels)-1] >= level {
		t.levels = t.levels[:len(t.levels)-1]
	}
	t.levels = append(t.levels, level)
	return "H" + strconv.Itoa(min(len(t.levels), 6))
}

// content gives the next piece of content of a page to an element, and its number.
func (t *tree) content(el *page.Element, at int) (n *node, mcid int) {
	n = t.of(el)
	mcid = len(t.parents[at])
	t.parents[at] = append(t.parents[at], n)
	n.kids = append(n.kids, kid{page: at, mcid: mcid, link: -1})
	if n.page < 0 {
		n.page = at
	}
	return n, mcid
}

// span gives the next piece of content of a page to a new part of an element, and its
// number.
func (t *tree) span(el *page.Element, at int) int {
	parent := t.of(el)
	n := &node{element: &page.Element{}, kind: "Span", parent: parent, page: at}
	mcid := len(t.parents[at])
	n.kids = []kid{{page: at, mcid: mcid, link: -1}}
	t.parents[at] = append(t.parents[at], n)
	parent.kids = append(parent.kids, kid{node: n, mcid: -1, link: -1})
	return mcid
}

// link gives the next link of a page to an element.
func (t *tree) link(l page.Link, at int) {
	el := l.Element
	if el == nil {
		el = &page.Element{Role: page.Linked}
	}
	n := t.of(el)
	n.kids = append(n.kids, kid{page: at, mcid: -1, link: len(t.links[at])})
	t.links[at] = append(t.links[at], n)
	n.kind = "Link"
	if strings.HasPrefix(l.Dest, "#") {
		n.wrap = "Reference"
	}
}

// settle brings the parts of every element into reading order.
func (n *node) settle() {
	content, rows := false, false
	for _, k := range n.kids {
		if k.node == nil {
			content = true
			continue
		}
		rows = rows || k.node.kind == "TR"
		k.node.settle()
	}
	if n.kind == "Table" && !rows {
		n.kind = "Div" // nothing but its caption
	}
	if content {
		return // a line of text, whose order is that on the page
	}
	order := 0
	ordered := make([]kid, len(n.kids))
	keys := make(map[*node]int, len(n.kids))
	sorted := true
	for i, k := range n.kids {
		if o := k.node.element.Order; o != 0 {
			sorted = sorted && o >= order
			order = o
		}
		ordered[i], keys[k.node] = k, order
	}
	if sorted {
		return
	}
	slices.SortStableFunc(ordered, func(a, b kid) int { return keys[a.node] - keys[b.node] })
	n.kids = ordered
}

// number gives every element below n its object, from next on.
func (n *node) number(next int) int {
	n.object = next
	next++
	if n.wrap != "" {
		n.object, next = next, next+1
	}
	for _, k := range n.kids {
		if k.node != nil {
			next = k.node.number(next)
		}
	}
	return next
}

// outer is the object by which the parent knows n.
func (n *node) outer() int {
	if n.wrap != "" {
		return n.object - 1
	}
	return n.object
}

// structure writes the tree and gives the number of its root.
func (f *finisher) structure() int {
	t := f.tree
	t.root.settle()
	root := len(f.objects)
	last := t.root.number(root + 1)
	f.add("")
	f.elements(t.root, root)

	// What leads from the pages back to the elements.
	var b []byte
	b = append(b, "<</Nums ["...)
	key := 0
	for i, list := range t.parents {
		if len(list) == 0 {
			key++
			continue
		}
		b = fmt.Appendf(b, "%d [", i)
		for _, n := range list {
			b = refer(b, n.object)
		}
		b = append(b, "]\n"...)
		key++
	}
	for _, list := range t.links {
		for _, n := range list {
			b = fmt.Appendf(b, "%d ", key)
			b = refer(b, n.object)
			key++
		}
	}
	b = append(b, "]>>"...)
	if len(f.objects) != last {
		panic("pdf: an element is not where its number says")
	}
	parents := f.add(string(b))

	head := fmt.Sprintf("<</Type /StructTreeRoot /K %d 0 R /ParentTree %d 0 R /ParentTreeNextKey %d", t.root.object, parents, key)
	var notes []*node
	for _, n := range t.nodes {
		if n.note > 0 {
			notes = append(notes, n)
		}
	}
	if len(notes) > 0 {
		slices.SortFunc(notes, func(a, b *node) int { return a.note - b.note })
		head += " /IDTree <</Names ["
		for _, n := range notes {
			head += literal(n.id()) + fmt.Sprintf(" %d 0 R ", n.object)
		}
		head += "] /Limits [" + literal(notes[0].id()) + " " + literal(notes[len(notes)-1].id()) + "]>>"
	}
	f.objects[root] = []byte(head + ">>")
	return root
}

// id names a note; names sort as their numbers do.
func (n *node) id() string { return fmt.Sprintf("note-%06d", n.note) }

func refer(b []byte, object int) []byte {
	b = strconv.AppendInt(b, int64(object), 10)
	return append(b, " 0 R "...)
}

// elements writes the objects of n and of what is below it, in the order of number.
func (f *finisher) elements(n *node, parent int) {
	if n.wrap != "" {
		f.add(fmt.Sprintf("<</S /%s /P %d 0 R /K %d 0 R>>", n.wrap, parent, n.object))
		parent = n.object - 1
	}
	b := make([]byte, 0, 96)
	b = append(b, "<</S /"...)
	b = append(b, n.kind...)
	b = append(b, " /P "...)
	b = refer(b, parent)
	if n.page >= 0 {
		b = append(b, "/Pg "...)
		b = refer(b, pageObject(n.page))
	}
	b = n.attributes(b)
	if len(n.kids) > 0 {
		b = append(b, "/K "...)
		if len(n.kids) > 1 {
			b = append(b, '[')
		}
		for _, k := range n.kids {
			switch {
			case k.node != nil:
				b = refer(b, k.node.outer())
			case k.link >= 0:
				b = fmt.Appendf(b, "<</Type /OBJR /Obj %d 0 R /Pg %d 0 R>> ", f.links[k.page][k.link], pageObject(k.page))
			case k.page == n.page:
				b = strconv.AppendInt(b, int64(k.mcid), 10)
				b = append(b, ' ')
			default:
				b = fmt.Appendf(b, "<</Type /MCR /Pg %d 0 R /MCID %d>> ", pageObject(k.page), k.mcid)
			}
		}
		if len(n.kids) > 1 {
			b = append(b, ']')
		}
	}
	f.objects = append(f.objects, append(b, ">>"...))
	for _, k := range n.kids {
		if k.node != nil {
			f.elements(k.node, n.object)
		}
	}
}

// attributes are what is said of an element beside its parts (ISO 32000-1, clauses
// 14.7.5, 14.8.5 and 14.9.3).
func (n *node) attributes(b []byte) []byte {
	el := n.element
	switch n.kind {
	case "TH", "TD":
		var in string
		if n.kind == "TH" {
			in = " /Scope /Column"
			if el.Row {
				in = " /Scope /Row"
			}
		}
		if el.Span > 1 {
			in += fmt.Sprintf(" /ColSpan %d", el.Span)
		}
		if in != "" {
			b = append(b, "/A <</O /Table"+in+">> "...)
		}
	case "L":
		how := "Disc"
		if el.Ordered {
			how = "Decimal"
		}
		b = append(b, "/A <</O /List /ListNumbering /"+how+">> "...)
	case "Figure":
		alt := printable(el.Alt)
		if strings.TrimSpace(alt) == "" {
			alt = "Figure"
		}
		b = append(b, "/Alt "+textString(alt)+" /A <</O /Layout /Placement /Block /BBox ["+numbers(n.box[:]...)+"]>> "...)
	case "Note":
		b = append(b, "/ID "+literal(n.id())+" "...)
	}
	return b
}
