package docx

import (
	"bytes"
	"fmt"
	"net/url"
	"strconv"
	"strings"

	"golang.org/x/text/unicode/bidi"

	"penwright/render/doc"
	"penwright/render/raster"
)

const (
	listStep     = 340 // indent of a list
	firstOrdered = 3   // number of the first numbered list
	deepest      = 8   // level of a list
	dpi          = 300
)

// The parts that have relationships.
const (
	inBody = iota
	inNotes
)

// element is a paragraph, or a table. A section ends with a paragraph.
type element struct {
	ppr, content string // of a paragraph
	table        string
	section      string // properties of the section that ends here
}

func (e element) String() string {
	if e.table != "" {
		return e.table
	}
	ppr := e.ppr
	if e.section != "" {
		ppr += e.section
	}
	if ppr != "" {
		ppr = `<w:pPr>` + ppr + `</w:pPr>`
	}
	return `<w:p>` + ppr + e.content + `</w:p>`
}

// ordered is a numbered list.
type ordered struct{ level, start int }

// builder keeps the parts as they grow.
type builder struct {
	doc       *doc.Document
	paper     paper
	body      strings.Builder
	footnotes strings.Builder
	out       []element
	links     [2][]relationship
	media     []file
	ordered   []ordered
	marks     map[string]int  // identifier → bookmark
	places    map[string]bool // identifiers of headings, whose number is that of a paragraph
	called    map[int]bool
	notes     []int // in the order of their calls
	drawings  int
	part      int // the one being written
	inLink    bool
	err       error
}

func newBuilder(d *doc.Document) *builder {
	b := &builder{doc: d, paper: sheet(d.Paper), marks: map[string]int{}, places: map[string]bool{}, called: map[int]bool{}}
	b.links[inBody] = []relationship{
		{id: "rId1", kind: "styles", target: "styles.xml"}, {id: "rId2", kind: "numbering", target: "numbering.xml"}, {id: "rId3", kind: "settings", target: "settings.xml"},
		{id: "rId4", kind: "fontTable", target: "fontTable.xml"}, {id: "rId5", kind: "footnotes", target: "footnotes.xml"},
		{id: "rId6", kind: "header", target: "header1.xml"}, {id: "rId7", kind: "footer", target: "footer1.xml"},
		{id: "rId8", kind: "header", target: "header2.xml"}, {id: "rId9", kind: "footer", target: "footer2.xml"},
	}
	name := func(id string) {
		if _, ok := b.marks[id]; id != "" && !ok {
			b.marks[id] = len(b.marks) + 1
		}
	}
	doc.Walk(d.Blocks, func(n any) {
		switch x := n.(type) {
		case doc.Heading:
			name(x.ID)
			b.places[x.ID] = true
		case doc.Table:
			if x.Number != "" {
				name(x.ID)
			}
		case doc.Figure:
			if x.Number != "" {
				name(x.ID)
			}
		}
	})
	return b
}

// add makes a relationship of the part being written.
func (b *builder) add(kind, target string, outside bool) string {
	id := "rId" + itoa(len(b.links[b.part])+1)
	b.links[b.part] = append(b.links[b.part], relationship{id: id, kind: kind, target: target, outside: outside})
	return id
}

const namespaces = wordNS + ` xmlns:r="http://schemas.openxmlformats.org/officeDocument/2006/relationships" ` +
	`xmlns:wp="http://schemas.openxmlformats.org/drawingml/2006/wordprocessingDrawing" xmlns:a="http://schemas.openxmlformats.org/drawingml/2006/main" ` +
	`xmlns:pic="http://schemas.openxmlformats.org/drawingml/2006/picture"`

// context is where blocks stand.
type context struct {
	style string // of paragraphs; empty: Normal
	left  int    // indent
	right int
	list  int // number of the list whose item begins; 0: none
	level int // of lists that are open
	tight bool
}

func (b *builder) document() {
	b.body.WriteString(`<w:document ` + namespaces + `><w:body>`)
	d := b.doc
	if d.Title != "" {
		b.paragraph("Title", "", []doc.Inline{doc.Text{Text: d.Title}})
	}
	if by := joined(" · ", d.Author, d.Code, d.Date); by != "" {
		b.paragraph("Subtitle", "", []doc.Inline{doc.Text{Text: by}})
	}
	b.blocks(d.Blocks, context{})
	for _, e := range b.out {
		b.body.WriteString(e.String())
	}
	b.body.WriteString(b.section(false) + `</w:body></w:document>`)

	b.part = inNotes
	b.footnotes.WriteString(`<w:footnotes ` + namespaces + `>` +
		`<w:footnote w:type="separator" w:id="-1"><w:p><w:pPr><w:spacing w:after="0" w:line="240" w:lineRule="auto"/></w:pPr><w:r><w:separator/></w:r></w:p></w:footnote>` +
		`<w:footnote w:type="continuationSeparator" w:id="0"><w:p><w:pPr><w:spacing w:after="0" w:line="240" w:lineRule="auto"/></w:pPr><w:r><w:continuationSeparator/></w:r></w:p></w:footnote>`)
	for i := 0; i < len(b.notes); i++ {
		b.out = nil
		b.blocks(d.Notes[b.notes[i]-1], context{style: "FootnoteText"})
		if len(b.out) == 0 || b.out[0].table != "" {
			b.out = append([]element{{ppr: style("FootnoteText")}}, b.out...)
		}
		if b.out[len(b.out)-1].table != "" {
			b.out = append(b.out, element{ppr: style("FootnoteText")})
		}
		b.out[0].content = `<w:r><w:rPr><w:rStyle w:val="FootnoteReference"/></w:rPr><w:footnoteRef/></w:r><w:r><w:t xml:space="preserve"> </w:t></w:r>` + b.out[0].content
		b.footnotes.WriteString(`<w:footnote w:id="` + itoa(b.notes[i]) + `">`)
		for _, e := range b.out {
			b.footnotes.WriteString(e.String())
		}
		b.footnotes.WriteString(`</w:footnote>`)
	}
	b.footnotes.WriteString(`</w:footnotes>`)
}

func joined(sep string, parts ...string) string {
	var kept []string
	for _, s := range parts {
		if s != "" {
			kept = append(kept, s)
		}
	}
	return strings.Join(kept, sep)
}

// section gives the properties of a section; turned, its pages lie on their side.
func (b *builder) section(turned bool) string {
	head, foot, width, height, orient := "rId6", "rId7", b.paper.width, b.paper.height, ""
	if turned {
		head, foot, width, height, orient = "rId8", "rId9", b.paper.height, b.paper.width, ` w:orient="landscape"`
	}
	return fmt.Sprintf(`<w:sectPr><w:headerReference w:type="default" r:id="%s"/><w:footerReference w:type="default" r:id="%s"/><w:pgSz w:w="%d" w:h="%d"%s/>`+
		`<w:pgMar w:top="%d" w:right="%d" w:bottom="%d" w:left="%d" w:header="708" w:footer="708" w:gutter="0"/></w:sectPr>`, head, foot, width, height, orient, margin, margin, margin, margin)
}

// endSection ends a section with the last paragraph, or with an empty one behind a
// table.
func (b *builder) endSection(turned bool) {
	if n := len(b.out); n == 0 || b.out[n-1].table != "" || b.out[n-1].section != "" {
		b.out = append(b.out, element{ppr: style("TableEnd")})
	}
	b.out[len(b.out)-1].section = b.section(turned)
}

func (b *builder) header(width int) string {
	tab := fmt.Sprintf(`<w:tabs><w:tab w:val="right" w:pos="%d"/></w:tabs>`, width-2*margin)
	return `<w:hdr ` + wordNS + `><w:p><w:pPr>` + style("Header") + tab + `</w:pPr>` + b.run(b.doc.Code, "") + `<w:r><w:tab/></w:r>` + b.run(b.doc.ShortTitle, "") + `</w:p></w:hdr>`
}

func (b *builder) footer(width int) string {
	tab := fmt.Sprintf(`<w:tabs><w:tab w:val="right" w:pos="%d"/></w:tabs>`, width-2*margin)
	left := joined(" · ", b.doc.Status, b.doc.Date)
	return `<w:ftr ` + wordNS + `><w:p><w:pPr>` + style("Footer") + tab + `</w:pPr>` + b.run(left, "") + `<w:r><w:tab/></w:r>` +
		b.run("page ", "") + b.field("PAGE", "1", "") + b.run(" of ", "") + b.field("NUMPAGES", "1", "") + `</w:p></w:ftr>`
}

// field writes a field with the text it shows until it is brought up to date.
func (b *builder) field(code, shown, rpr string) string {
	open := `<w:r>`
	if rpr != "" {
		open += `<w:rPr>` + rpr + `</w:rPr>`
	}
	return open + `<w:fldChar w:fldCharType="begin"/></w:r>` + open + `<w:instrText xml:space="preserve"> ` + code + ` </w:instrText></w:r>` + open + `<w:fldChar w:fldCharType="separate"/></w:r>` +
		b.run(shown, rpr) + open + `<w:fldChar w:fldCharType="end"/></w:r>`
}

func style(id string) string { return `<w:pStyle w:val="` + id + `"/>` }

// paragraph writes a paragraph of a style; more are its further properties, in the order
// of the schema after the style.
func (b *builder) paragraph(id, more string, text []doc.Inline) {
	ppr := more
	if id != "" {
		ppr = style(id) + more
	}
	b.out = append(b.out, element{ppr: b.turned(ppr, text), content: b.inlines(text, "")})
}

// turned adds to properties that a paragraph runs from right to left, if its first letter
// does.
func (b *builder) turned(ppr string, text []doc.Inline) string {
	if !rightToLeft(doc.Plain(text)) {
		return ppr
	}
	// The element comes after tabs and before spacing.
	at := len(ppr)
	for _, next := range []string{"<w:spacing", "<w:ind", "<w:contextualSpacing", "<w:jc"} {
		if i := strings.Index(ppr, next); i >= 0 {
			at = min(at, i)
		}
	}
	return ppr[:at] + `<w:bidi/>` + ppr[at:]
}

func (b *builder) blocks(blocks []doc.Block, at context) {
	for _, x := range blocks {
		switch x := x.(type) {
		case doc.Heading:
			b.out = append(b.out, element{
				ppr:     b.turned(style("Heading"+itoa(min(max(x.Level, 1), 6))), x.Text),
				content: b.marked(x.ID, b.inlines(flat(x.Text), "")),
			})
		case doc.Paragraph:
			b.paragraph(b.placed(&at, "", x.Text))
		case doc.List:
			b.list(x, at)
			at.list = 0
		case doc.Quote:
			b.blocks(x.Blocks, context{style: "Quote", left: at.left + 567, right: at.right + 567, level: at.level})
		case doc.Aside:
			if len(x.Title) > 0 {
				b.paragraph("BoxTitle", "", x.Title)
			}
			b.blocks(x.Blocks, context{style: "BoxText", left: at.left + 227, level: at.level})
		case doc.Code:
			for _, line := range strings.Split(strings.TrimSuffix(doc.Clean(x.Text), "\n"), "\n") {
				b.paragraph(b.placed(&context{style: "Code", left: at.left + 227}, "", []doc.Inline{doc.Text{Text: strings.ReplaceAll(line, "\t", "    ")}}))
			}
			b.out = append(b.out, element{ppr: style("TableEnd")})
		case doc.Rule:
			b.out = append(b.out, element{ppr: style("Break")})
		case doc.Contents:
			b.contents()
		case doc.Table:
			b.table(x)
		case doc.Figure:
			b.figure(x)
		default:
			panic("docx: unknown block")
		}
	}
}

// placed gives the style and the properties of a paragraph where it stands; the first of an
// item bears its mark.
func (b *builder) placed(at *context, more string, text []doc.Inline) (string, string, []doc.Inline) {
	id := at.style
	if at.list > 0 {
		if id == "" {
			id = "ListParagraph"
		}
		more += fmt.Sprintf(`<w:numPr><w:ilvl w:val="%d"/><w:numId w:val="%d"/></w:numPr>`, min(at.level-1, deepest), at.list)
		if at.tight {
			more += `<w:spacing w:after="40"/>`
		}
		at.list = 0
		return id, more, text
	}
	if id == "" && at.level > 0 {
		id = "ListParagraph"
	}
	if at.left > 0 || at.right > 0 {
		more += fmt.Sprintf(`<w:ind w:left="%d" w:right="%d"/>`, min(at.left, 4000), min(at.right, 2000))
	}
	return id, more, text
}

func (b *builder) list(l doc.List, at context) {
	inside := context{style: at.style, left: listStep * (at.level + 1), right: at.right, level: at.level + 1, tight: l.Tight}
	number := 2
	if l.Ordered {
		number = firstOrdered + len(b.ordered)
		b.ordered = append(b.ordered, ordered{level: min(at.level, deepest), start: min(max(l.Start, 0), 1_000_000)})
	}
	for _, item := range l.Items {
		inside.list = number
		first := inside
		if len(item) > 0 {
			if _, ok := item[0].(doc.Paragraph); ok {
				b.blocks(item[:1], first)
				item = item[1:]
				inside.list = 0
			}
		}
		if inside.list > 0 { // an item that begins with something else
			b.paragraph(b.placed(&inside, "", nil))
		}
		b.blocks(item, inside)
	}
}

// flat returns text without ends of lines.
func flat(text []doc.Inline) []doc.Inline {
	return doc.Mapper{Inline: func(n doc.Inline) doc.Inline {
		if _, ok := n.(doc.Break); ok {
			return doc.Text{Text: " "}
		}
		return n
	}}.Inlines(text)
}

// bookmark names the bookmark of an identifier.
func bookmark(n int) string { return fmt.Sprintf("_Ref%09d", n) }

// marked puts a bookmark around content.
func (b *builder) marked(id, content string) string {
	n, ok := b.marks[id]
	if !ok || b.part != inBody {
		return content
	}
	return fmt.Sprintf(`<w:bookmarkStart w:id="%d" w:name="%s"/>%s<w:bookmarkEnd w:id="%d"/>`, n, bookmark(n), content, n)
}

// caption writes a caption whose number a word processor counts.
func (b *builder) caption(kind, number, id, more string, text []doc.Inline) {
	if number == "" && len(text) == 0 {
		return
	}
	content := ""
	if number != "" {
		content = b.marked(id, b.run(kind+" ", "<w:b/><w:bCs/>")+b.field("SEQ "+kind+` \* ARABIC`, number, "<w:b/><w:bCs/>"))
		content += b.run(". ", "<w:b/><w:bCs/>")
	}
	b.out = append(b.out, element{ppr: b.turned(style("Caption")+more, text), content: content + b.inlines(flat(text), "")})
}

// contents writes the headings down to the third level. Their pages are the word
// processor's to find, so they stand without.
func (b *builder) contents() {
	first := len(b.out)
	doc.Walk(b.doc.Blocks, func(n any) {
		h, ok := n.(doc.Heading)
		if !ok || h.Level > 3 {
			return
		}
		text := b.run(joined(" ", h.Number, doc.Plain(h.Text)), "")
		if n, ok := b.marks[h.ID]; ok {
			text = `<w:hyperlink w:anchor="` + bookmark(n) + `">` + text + `</w:hyperlink>`
		}
		b.out = append(b.out, element{ppr: style("TOC" + itoa(max(h.Level, 1))), content: text})
	})
	if first == len(b.out) {
		return
	}
	b.out[first].content = `<w:r><w:fldChar w:fldCharType="begin"/></w:r><w:r><w:instrText xml:space="preserve"> TOC \o "1-3" \n \h \z </w:instrText></w:r><w:r><w:fldChar w:fldCharType="separate"/></w:r>` + b.out[first].content
	b.out[len(b.out)-1].content += `<w:r><w:fldChar w:fldCharType="end"/></w:r>`
}

func (b *builder) figure(f doc.Figure) {
	if f.Picture == nil {
		b.paragraph("Figure", "", []doc.Inline{doc.Text{Text: f.Alt}})
		b.caption("Figure", f.Number, f.ID, "", f.Caption)
		return
	}
	const point = 12700 // EMU
	wide, high := float64(b.paper.width-2*margin)/20, float64(b.paper.height-2*margin)/20*0.8
	scale := min(1, wide/max(f.Picture.Width, 1e-9), high/max(f.Picture.Height, 1e-9))
	var data bytes.Buffer
	if err := raster.PNG(&data, f.Picture, scale, dpi); err != nil {
		if b.err == nil {
			b.err = err
		}
		return
	}
	b.drawings++
	n := itoa(b.drawings)
	name := "image" + n + ".png"
	b.media = append(b.media, file{name: "word/media/" + name, data: data.Bytes(), packed: true})
	id := b.add("image", "media/"+name, false)
	cx, cy := int(f.Picture.Width*scale*point), int(f.Picture.Height*scale*point)
	alt := esc(f.Alt)
	if alt == "" {
		alt = esc(doc.Plain(f.Caption))
	}
	b.out = append(b.out, element{ppr: style("Figure"), content: fmt.Sprintf(`<w:r><w:drawing><wp:inline distT="0" distB="0" distL="0" distR="0"><wp:extent cx="%d" cy="%d"/>`+
		`<wp:docPr id="%s" name="Figure %s" descr="%s"/><wp:cNvGraphicFramePr><a:graphicFrameLocks noChangeAspect="1"/></wp:cNvGraphicFramePr>`+
		`<a:graphic><a:graphicData uri="http://schemas.openxmlformats.org/drawingml/2006/picture"><pic:pic><pic:nvPicPr><pic:cNvPr id="%s" name="%s" descr="%s"/><pic:cNvPicPr/></pic:nvPicPr>`+
		`<pic:blipFill><a:blip r:embed="%s"/><a:stretch><a:fillRect/></a:stretch></pic:blipFill>`+
		`<pic:spPr><a:xfrm><a:off x="0" y="0"/><a:ext cx="%d" cy="%d"/></a:xfrm><a:prstGeom prst="rect"><a:avLst/></a:prstGeom></pic:spPr></pic:pic></a:graphicData></a:graphic></wp:inline></w:drawing></w:r>`,
		cx, cy, n, n, alt, n, name, alt, id, cx, cy)})
	b.caption("Figure", f.Number, f.ID, `<w:spacing w:after="280"/>`, f.Caption)
}

// look is what a run has from the nodes around it.
type look struct{ bold, italic, code, link, up, down bool }

func (f look) rpr(base string) string {
	var s strings.Builder
	switch {
	case f.link:
		s.WriteString(`<w:rStyle w:val="Hyperlink"/>`)
	case f.code:
		s.WriteString(`<w:rStyle w:val="CodeText"/>`)
	}
	s.WriteString(base)
	if f.bold && !strings.Contains(base, "<w:b/>") {
		s.WriteString(`<w:b/><w:bCs/>`)
	}
	if f.italic {
		s.WriteString(`<w:i/><w:iCs/>`)
	}
	switch {
	case f.up:
		s.WriteString(`<w:vertAlign w:val="superscript"/>`)
	case f.down:
		s.WriteString(`<w:vertAlign w:val="subscript"/>`)
	}
	return s.String()
}

func (b *builder) inlines(text []doc.Inline, base string) string {
	var s strings.Builder
	b.spans(&s, text, look{}, base)
	return s.String()
}

func (b *builder) spans(s *strings.Builder, text []doc.Inline, f look, base string) {
	for _, in := range text {
		switch n := in.(type) {
		case doc.Text:
			s.WriteString(b.run(n.Text, f.rpr(base)))
		case doc.Emph:
			g := f
			g.italic = !f.italic
			b.spans(s, n.Text, g, base)
		case doc.Strong:
			g := f
			g.bold = true
			b.spans(s, n.Text, g, base)
		case doc.Sup:
			g := f
			g.up = true
			b.spans(s, n.Text, g, base)
		case doc.Sub:
			g := f
			g.down = true
			b.spans(s, n.Text, g, base)
		case doc.CodeSpan:
			g := f
			g.code = true
			s.WriteString(b.run(n.Text, g.rpr(base)))
		case doc.Link:
			b.link(s, n, f, base)
		case doc.Ref:
			b.ref(s, n, f, base)
		case doc.FootnoteRef:
			b.call(s, n.N)
		case doc.Break:
			s.WriteString(`<w:r><w:br/></w:r>`)
		default:
			panic("docx: unknown inline")
		}
	}
}

func (b *builder) link(s *strings.Builder, l doc.Link, f look, base string) {
	open := ""
	if id, inner := strings.CutPrefix(l.Dest, "#"); inner {
		if n, ok := b.marks[id]; ok {
			open = `<w:hyperlink w:anchor="` + bookmark(n) + `">`
		}
	} else if u, err := url.Parse(doc.Clean(l.Dest)); err == nil && len(l.Dest) < 2000 &&
		((u.Scheme == "http" || u.Scheme == "https") && u.Host != "" || u.Scheme == "mailto" && u.Opaque != "") {
		if !b.inLink {
			open = `<w:hyperlink r:id="` + b.add("hyperlink", u.String(), true) + `">`
		}
	}
	if open == "" || b.inLink {
		b.spans(s, l.Text, f, base)
		return
	}
	b.inLink = true
	f.link = true
	s.WriteString(open)
	b.spans(s, l.Text, f, base)
	s.WriteString(`</w:hyperlink>`)
	b.inLink = false
}

// ref writes a reference as a field, so that it follows when numbers change.
func (b *builder) ref(s *strings.Builder, r doc.Ref, f look, base string) {
	n, ok := b.marks[r.ID]
	if !ok || b.inLink {
		s.WriteString(b.run(r.Text, f.rpr(base)))
		return
	}
	code, text := "REF "+bookmark(n)+` \h \* MERGEFORMAT`, r.Text
	if i := strings.LastIndexByte(text, ' '); b.places[r.ID] && i >= 0 {
		s.WriteString(b.run(text[:i+1], f.rpr(base)))
		code, text = "REF "+bookmark(n)+` \r \h`, text[i+1:]
	}
	s.WriteString(b.field(code, text, f.rpr(base)))
}

// call calls a note; a second call, and one within a note, is a number.
func (b *builder) call(s *strings.Builder, n int) {
	if n < 1 || n > len(b.doc.Notes) {
		return
	}
	if b.called[n] || b.part != inBody {
		s.WriteString(b.run(strconv.Itoa(n), `<w:vertAlign w:val="superscript"/>`))
		return
	}
	b.called[n] = true
	b.notes = append(b.notes, n)
	s.WriteString(`<w:r><w:rPr><w:rStyle w:val="FootnoteReference"/></w:rPr><w:footnoteReference w:id="` + itoa(n) + `"/></w:r>`)
}

// run writes text as runs, those from right to left apart.
func (b *builder) run(text, rpr string) string {
	if text == "" {
		return ""
	}
	var s strings.Builder
	write := func(part string, turned bool) {
		if part == "" {
			return
		}
		p := rpr
		if turned {
			p += "<w:rtl/>" // last in the order of the schema, of all that is written here
		}
		s.WriteString(`<w:r>`)
		if p != "" {
			s.WriteString(`<w:rPr>` + p + `</w:rPr>`)
		}
		s.WriteString(`<w:t xml:space="preserve">` + esc(part) + `</w:t></w:r>`)
	}
	from, to := -1, 0 // a stretch from right to left
	done := 0
	for i, r := range text {
		switch direction(r) {
		case -1:
			if from < 0 {
				from = i
			}
			to = i + len(string(r))
		case 1:
			if from >= 0 {
				write(text[done:from], false)
				write(text[from:to], true)
				done, from = to, -1
			}
		}
	}
	if from >= 0 {
		write(text[done:from], false)
		write(text[from:to], true)
		done = to
	}
	write(text[done:], false)
	return s.String()
}

// direction tells whether a rune runs from left to right (1), from right to left (-1),
// or as those around it.
func direction(r rune) int {
	if r < 0x80 {
		if 'A' <= r && r <= 'Z' || 'a' <= r && r <= 'z' {
			return 1
		}
		return 0
	}
	p, _ := bidi.LookupRune(r)
	switch p.Class() {
	case bidi.L:
		return 1
	case bidi.R, bidi.AL:
		return -1
	}
	return 0
}

func rightToLeft(text string) bool {
	for _, r := range text {
		if d := direction(r); d != 0 {
			return d < 0
		}
	}
	return false
}
