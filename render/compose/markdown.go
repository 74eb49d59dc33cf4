package compose

import (
	"bytes"
	"fmt"
	"html"
	"regexp"
	"strings"
	"unicode/utf8"

	"github.com/yuin/goldmark/ast"
	"github.com/yuin/goldmark/extension"
	"github.com/yuin/goldmark/parser"
	"github.com/yuin/goldmark/text"
	"github.com/yuin/goldmark/util"

	// The name of the nodes of tables and footnotes.
	extast "github.com/yuin/goldmark/extension/ast"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

// newParser returns a parser of CommonMark with tables and footnotes.
func newParser(uncalled *[]*extast.Footnote) parser.Parser {
	return parser.NewParser(
		parser.WithBlockParsers(append(parser.DefaultBlockParsers(),
			util.Prioritized(extension.NewFootnoteBlockParser(), 999))...),
		parser.WithInlineParsers(append(parser.DefaultInlineParsers(),
			util.Prioritized(extension.NewFootnoteParser(), 101))...),
		parser.WithParagraphTransformers(append(parser.DefaultParagraphTransformers(),
			util.Prioritized(extension.NewTableParagraphTransformer(), 200))...),
		parser.WithASTTransformers(
			util.Prioritized(extension.NewTableASTTransformer(), 0),
			util.Prioritized(footnoteCollector{uncalled: uncalled}, 998),
			util.Prioritized(extension.NewFootnoteASTTransformer(), 999)),
	)
}

// footnoteCollector notes the footnotes that nothing calls, before the parser drops
// them.
type footnoteCollector struct{ uncalled *[]*extast.Footnote }

func (c footnoteCollector) Transform(root *ast.Document, _ text.Reader, _ parser.Context) {
	for n := ast.Node(root); n != nil; n = following(n) {
		if f, ok := n.(*extast.Footnote); ok && f.Index < 0 {
			*c.uncalled = append(*c.uncalled, f)
		}
	}
}

// following returns the node after n in reading order, without inlines.
func following(n ast.Node) ast.Node {
	if c := n.FirstChild(); c != nil && c.Type() != ast.TypeInline {
		return c
	}
	for ; n != nil; n = n.Parent() {
		if next := n.NextSibling(); next != nil {
			return next
		}
	}
	return nil
}

// builder makes document blocks of a Markdown tree.
type builder struct {
	src    []byte
	place  func(offset int) diag.Pos
	values []value
	list   diag.List
	deep   bool // a node too deep has been reported

	notes   [][]doc.Block
	pending []func() []doc.Block // writes notes[i]
	called  map[int]int          // number of the parser → number in notes
	defined map[int]*extast.Footnote
}

func markdown(src []byte, place func(int) diag.Pos, values []value, spent *Spent) (Text, diag.List) {
	if list := guard(src, place, spent); list.HasErrors() {
		return Text{}, list
	}
	var uncalled []*extast.Footnote
	root := newParser(&uncalled).Parse(text.NewReader(src))
	b := &builder{src: src, place: place, values: values, called: map[int]int{}, defined: map[int]*extast.Footnote{}}
	for n := root.FirstChild(); n != nil; n = n.NextSibling() {
		if notes, ok := n.(*extast.FootnoteList); ok {
			for f := notes.FirstChild(); f != nil; f = f.NextSibling() {
				if f, ok := f.(*extast.Footnote); ok {
					b.defined[f.Index] = f
				}
			}
		}
	}
	t := Text{Blocks: b.blocks(root, 0)}
	for i := 0; i < len(b.pending); i++ { // grows while footnotes call footnotes
		b.notes[i] = b.pending[i]()
	}
	for _, f := range uncalled {
		b.report(diag.Warning, offsetOf(f), CodeFootnote, fmt.Sprintf("the footnote %q is never called", f.Ref), "call it by [^"+string(f.Ref)+"]")
	}
	t.Notes = b.notes
	sortList(b.list)
	return t, b.list
}

func (b *builder) report(severity diag.Severity, offset int, code, message, hint string) {
	b.list.Add(diag.Diagnostic{Pos: b.place(max(offset, 0)), Severity: severity, Code: code, Message: message, Hint: hint})
}

func (b *builder) fault(n ast.Node, code, message, hint string) {
	if len(b.list) < maxMessages {
		b.report(diag.Error, offsetOf(n), code, message, hint)
	}
}

// offsetOf returns where a node begins, as well as the parser knows.
func offsetOf(n ast.Node) int {
	for n != nil {
		if p := n.Pos(); p >= 0 {
			return p
		}
		if n.Type() == ast.TypeBlock && n.Lines().Len() > 0 {
			return n.Lines().At(0).Start
		}
		if c := n.FirstChild(); c != nil {
			n = c
			continue
		}
		for n != nil && n.Type() == ast.TypeInline {
			n = n.Parent()
		}
		break
	}
	if n != nil && n.Type() == ast.TypeBlock && n.Lines().Len() > 0 {
		return n.Lines().At(0).Start
	}
	return 0
}

func (b *builder) tooDeep(n ast.Node, depth int) bool {
	if depth <= maxDepth {
		return false
	}
	if !b.deep {
		b.deep = true
		b.fault(n, CodeTooMuch, fmt.Sprintf("the text is nested more than %d deep", maxDepth), "")
	}
	return true
}

func (b *builder) blocks(parent ast.Node, depth int) []doc.Block {
	if b.tooDeep(parent, depth) {
		return nil
	}
	var out []doc.Block
	for n := parent.FirstChild(); n != nil; n = n.NextSibling() {
		switch n := n.(type) {
		case *ast.Paragraph:
			out = append(out, b.paragraph(n, depth)...)
		case *ast.TextBlock:
			out = append(out, b.paragraph(n, depth)...)
		case *ast.Heading:
			said := len(b.list)
			words := b.inlines(n, depth+1)
			if blank(words) {
				if len(b.list) > said {
					continue
				}
				b.fault(n, CodeUnsupported, "a heading without a text", "write one, or take the # out")
				continue
			}
			out = append(out, doc.Heading{Level: n.Level, Text: words, Pos: b.place(offsetOf(n))})
		case *ast.Blockquote:
			out = append(out, doc.Quote{Blocks: b.blocks(n, depth+1)})
		case *ast.List:
			list := doc.List{Ordered: n.IsOrdered(), Start: n.Start, Tight: n.IsTight}
			for item := n.FirstChild(); item != nil; item = item.NextSibling() {
				list.Items = append(list.Items, b.blocks(item, depth+1))
			}
			out = append(out, list)
		case *ast.CodeBlock:
			out = append(out, doc.Code{Text: b.code(n)})
		case *ast.FencedCodeBlock:
			out = append(out, doc.Code{Text: b.code(n)})
		case *ast.ThematicBreak:
			out = append(out, doc.Rule{})
		case *ast.HTMLBlock:
			// A comment is no part of the text; anything else would be lost.
			if n.HTMLBlockType != ast.HTMLBlockType2 {
				b.fault(n, CodeRawHTML, "HTML is not carried over into the report", `write \< for the sign itself`)
			}
		case *extast.Table:
			out = append(out, b.table(n, depth))
		case *extast.FootnoteList, *ast.LinkReferenceDefinition:
			// Shown where they are called.
		default:
			b.fault(n, CodeUnsupported, fmt.Sprintf("the report cannot hold a %s", n.Kind()), "")
		}
	}
	return out
}

// blank tells whether text shows nothing.
func blank(words []doc.Inline) bool {
	for _, in := range words {
		switch in := in.(type) {
		case doc.Text:
			if strings.TrimSpace(in.Text) != "" {
				return false
			}
		case doc.Break:
		default:
			return false
		}
	}
	return true
}

// paragraph returns the paragraph, or the blocks that stand in its place.
func (b *builder) paragraph(n ast.Node, depth int) []doc.Block {
	if blocks, ok := b.alone(n); ok {
		return blocks
	}
	words := b.inlines(n, depth+1)
	if blank(words) {
		return nil // of values that were all empty
	}
	return []doc.Block{doc.Paragraph{Text: words, Pos: b.place(offsetOf(n))}}
}

// alone returns the blocks of a paragraph that holds nothing but tokens, if there are
// blocks among them.
func (b *builder) alone(n ast.Node) ([]doc.Block, bool) {
	var found []value
	holdsBlocks := false
	for c := n.FirstChild(); c != nil; c = c.NextSibling() {
		t, ok := c.(*ast.Text)
		if !ok {
			return nil, false
		}
		for _, r := range string(t.Segment.Value(b.src)) {
			switch {
			case r == ' ' || r == '\t' || r == '\n':
			case r >= firstToken && int(r-firstToken) < len(b.values):
				v := b.values[r-firstToken]
				found = append(found, v)
				holdsBlocks = holdsBlocks || v.block
			default:
				return nil, false
			}
		}
	}
	if !holdsBlocks {
		return nil, false
	}
	var out []doc.Block
	for _, v := range found {
		if v.block {
			out = append(out, b.adopt(v)...)
		} else if !blank(v.inline) {
			return nil, false // a line of text beside a block: reported as misplaced
		}
	}
	return out, true
}

// adopt returns the blocks of a value with its footnotes numbered among those here.
func (b *builder) adopt(v value) []doc.Block {
	if len(v.notes) == 0 {
		return v.blocks
	}
	numbers := map[int]int{}
	var m doc.Mapper
	m.Inline = func(in doc.Inline) doc.Inline {
		ref, ok := in.(doc.FootnoteRef)
		if !ok {
			return in
		}
		number, ok := numbers[ref.N]
		if !ok {
			number = b.note(func() []doc.Block { return m.Blocks(v.notes[ref.N-1]) })
			numbers[ref.N] = number
		}
		return doc.FootnoteRef{N: number}
	}
	return m.Blocks(v.blocks)
}

// note gives the next footnote its number; write is called when the text is done.
func (b *builder) note(write func() []doc.Block) int {
	b.pending = append(b.pending, write)
	b.notes = append(b.notes, nil)
	return len(b.notes)
}

func (b *builder) table(n *extast.Table, depth int) doc.Block {
	t := doc.Table{Pos: b.place(offsetOf(n))}
	for _, a := range n.Alignments {
		column := doc.Column{}
		switch a {
		case extast.AlignRight:
			column.Align = doc.Right
		case extast.AlignCenter:
			column.Align = doc.Center
		}
		t.Columns = append(t.Columns, column)
	}
	for row := n.FirstChild(); row != nil; row = row.NextSibling() {
		var cells []doc.Cell
		for c := row.FirstChild(); c != nil; c = c.NextSibling() {
			cells = append(cells, doc.Cell{Text: b.inlines(c, depth+1)})
		}
		switch row.(type) {
		case *extast.TableHeader:
			t.Head = append(t.Head, cells)
		default:
			t.Rows = append(t.Rows, doc.Row{Cells: cells})
		}
	}
	return t
}

// code returns the text of a code block, with the values of its tokens.
func (b *builder) code(n ast.Node) string {
	var out strings.Builder
	for i := range n.Lines().Len() {
		line := n.Lines().At(i)
		out.WriteString(b.fill(n, line.Value(b.src), false))
	}
	return out.String()
}

// fill returns a piece of source as plain text: tokens exchanged for the text of their
// values, escapes resolved if wanted.
func (b *builder) fill(n ast.Node, src []byte, escapes bool) string {
	var out strings.Builder
	b.split(src, escapes, func(s string) { out.WriteString(s) }, func(v value) {
		if v.block {
			b.misplaced(v, n)
		}
		out.WriteString(doc.Plain(v.inline))
	})
	return out.String()
}

func (b *builder) misplaced(v value, n ast.Node) {
	hint := "let its action stand alone, with empty lines around it"
	if n.Kind() == ast.KindCodeBlock {
		hint = "the line is indented by four spaces or more, which makes it code"
	}
	if len(b.list) < maxMessages {
		b.list.Add(diag.Diagnostic{
			Pos: v.pos, Severity: diag.Error, Code: CodeMisplaced,
			Message: "a table, figure or other block cannot stand inside a line of text", Hint: hint,
		})
	}
}

// entity is a character reference as CommonMark has them.
var entity = regexp.MustCompile(`^&(?:#[0-9]{1,7}|#[xX][0-9a-fA-F]{1,6}|[A-Za-z][A-Za-z0-9]{0,31});`)

// split walks over a piece of source: text goes to plain, values to token. Tokens are
// told apart before escapes are resolved, so that no escape can make one.
func (b *builder) split(src []byte, escapes bool, plain func(string), token func(value)) {
	var run strings.Builder
	flush := func() {
		if run.Len() > 0 {
			plain(run.String())
			run.Reset()
		}
	}
	for len(src) > 0 {
		r, size := utf8.DecodeRune(src)
		switch {
		case r >= firstToken && int(r-firstToken) < len(b.values):
			flush()
			token(b.values[r-firstToken])
		case escapes && r == '\\' && len(src) > 1 && util.IsPunct(src[1]):
			run.WriteByte(src[1])
			size = 2
		case escapes && r == '&':
			if m := entity.Find(src); m != nil {
				run.WriteString(resolve(string(m)))
				size = len(m)
			} else {
				run.WriteByte('&')
			}
		default:
			run.Write(src[:size])
		}
		src = src[size:]
	}
	flush()
}

// resolve returns the character that a reference names; one that no source could hold
// becomes U+FFFD.
func resolve(reference string) string {
	s := html.UnescapeString(reference)
	if s == reference { // an unknown name stands for itself
		return s
	}
	return strings.Map(func(r rune) rune {
		if forbidden(r) {
			return utf8.RuneError
		}
		return r
	}, s)
}

func (b *builder) inlines(parent ast.Node, depth int) []doc.Inline {
	if b.tooDeep(parent, depth) {
		return nil
	}
	var out []doc.Inline
	var run strings.Builder // text that is not yet in out
	add := func(s string) { run.WriteString(s) }
	flush := func() {
		if run.Len() > 0 {
			out = append(out, doc.Text{Text: run.String()})
			run.Reset()
		}
	}
	put := func(in doc.Inline) {
		flush()
		out = append(out, in)
	}
	token := func(v value) {
		if v.block {
			b.misplaced(v, parent)
			return
		}
		for _, in := range v.inline {
			if t, ok := in.(doc.Text); ok {
				add(strings.ReplaceAll(t.Text, "\n", " "))
			} else {
				put(in)
			}
		}
	}
	for n := parent.FirstChild(); n != nil; n = n.NextSibling() {
		switch n := n.(type) {
		case *ast.Text:
			b.split(n.Segment.Value(b.src), !n.IsRaw(), add, token)
			switch {
			case n.HardLineBreak():
				put(doc.Break{})
			case n.SoftLineBreak():
				add(" ")
			}
		case *ast.String:
			b.split(n.Value, !n.IsRaw() && !n.IsCode(), add, token)
		case *ast.CodeSpan:
			var code strings.Builder
			for c := n.FirstChild(); c != nil; c = c.NextSibling() {
				if t, ok := c.(*ast.Text); ok {
					code.WriteString(b.fill(n, t.Segment.Value(b.src), false))
				}
			}
			put(doc.CodeSpan{Text: strings.ReplaceAll(code.String(), "\n", " ")})
		case *ast.Emphasis:
			words := b.inlines(n, depth+1)
			if n.Level == 1 {
				put(doc.Emph{Text: words})
			} else {
				put(doc.Strong{Text: words})
			}
		case *ast.Link:
			if len(n.Title) > 0 {
				b.report(diag.Warning, offsetOf(n), CodeUnsupported, "the title of a link is not carried over into the report", "")
			}
			put(b.link(n, b.fill(n, n.Destination, true), b.inlines(n, depth+1)))
		case *ast.AutoLink:
			label := b.fill(n, n.Label(b.src), false)
			dest := b.fill(n, n.URL(b.src), false)
			if n.AutoLinkType == ast.AutoLinkEmail && !strings.HasPrefix(strings.ToLower(dest), "mailto:") {
				dest = "mailto:" + dest
			}
			put(b.link(n, dest, []doc.Inline{doc.Text{Text: label}}))
		case *ast.Image:
			b.fault(n, CodeImage, "a picture from a file is not carried over into the report", "use a figure function")
		case *ast.RawHTML:
			if !bytes.HasPrefix(n.Segments.Value(b.src), []byte("<!--")) {
				b.fault(n, CodeRawHTML, "HTML is not carried over into the report", `write \< for the sign itself`)
			}
		case *extast.FootnoteLink:
			put(doc.FootnoteRef{N: b.call(n.Index)})
		case *extast.FootnoteBacklink:
			// Writers make their own.
		default:
			b.fault(n, CodeUnsupported, fmt.Sprintf("the report cannot hold a %s", n.Kind()), "")
		}
	}
	flush()
	return out
}

// call returns the number of a footnote by that of the parser.
func (b *builder) call(index int) int {
	if number, ok := b.called[index]; ok {
		return number
	}
	f := b.defined[index]
	number := b.note(func() []doc.Block {
		if f == nil {
			return nil
		}
		return b.blocks(f, 1)
	})
	b.called[index] = number
	return number
}

// link returns a link to where a report may point; from elsewhere only its text is left.
func (b *builder) link(n ast.Node, dest string, words []doc.Inline) doc.Inline {
	if !allowed(dest) {
		b.fault(n, CodeLink, fmt.Sprintf("a link to %q does not work from inside a report", dest), "links begin with https:, http:, mailto: or #")
		return doc.Emph{Text: words}
	}
	var escaped strings.Builder
	for i := range len(dest) {
		if c := dest[i]; c <= ' ' || c >= 0x7f || strings.IndexByte("\"<>\\^`{|}", c) >= 0 {
			fmt.Fprintf(&escaped, "%%%02X", c)
		} else {
			escaped.WriteByte(c)
		}
	}
	return doc.Link{Dest: escaped.String(), Text: words}
}

func allowed(dest string) bool {
	lower := strings.ToLower(dest)
	for _, prefix := range []string{"https://", "http://", "mailto:", "#"} {
		if strings.HasPrefix(lower, prefix) && len(dest) > len(prefix) {
			return true
		}
	}
	return false
}
