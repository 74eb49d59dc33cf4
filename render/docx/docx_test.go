package docx_test

import (
	"archive/zip"
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"path"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"penwright/render/doc"
	"penwright/render/doc/sample"
	"penwright/render/docx"
)

// order lists the children that an element may have, in the order of its sequence in
// ECMA-376 part 1, annex A (WordprocessingML, transitional): CT_PPr, CT_RPr (there a
// choice, which strict readers take for a sequence), CT_TblPr, CT_TcPr, CT_TcBorders,
// CT_SectPr, CT_Lvl, CT_Style; from memory.
var order = map[string][]string{
	"pPr": strings.Fields("pStyle keepNext keepLines pageBreakBefore framePr widowControl numPr suppressLineNumbers pBdr shd tabs suppressAutoHyphens kinsoku wordWrap overflowPunct " +
		"topLinePunct autoSpaceDE autoSpaceDN bidi adjustRightInd snapToGrid spacing ind contextualSpacing mirrorIndents suppressOverlap jc textDirection textAlignment textboxTightWrap outlineLvl divId cnfStyle rPr sectPr pPrChange"),
	"rPr":        strings.Fields("rStyle rFonts b bCs i iCs caps smallCaps strike dstrike outline shadow emboss imprint noProof snapToGrid vanish webHidden color spacing w kern position sz szCs highlight u effect bdr shd fitText vertAlign rtl cs em lang eastAsianLayout specVanish oMath"),
	"tblPr":      strings.Fields("tblStyle tblpPr tblOverlap bidiVisual tblStyleRowBandSize tblStyleColBandSize tblW jc tblCellSpacing tblInd tblBorders shd tblLayout tblCellMar tblLook tblCaption tblDescription"),
	"tcPr":       strings.Fields("cnfStyle tcW gridSpan hMerge vMerge tcBorders shd noWrap tcMar textDirection tcFitText vAlign hideMark"),
	"tcBorders":  strings.Fields("top left bottom right insideH insideV tl2br tr2bl"),
	"tblCellMar": strings.Fields("top left bottom right"),
	"sectPr":     strings.Fields("headerReference footerReference footnotePr endnotePr type pgSz pgMar paperSrc pgBorders lnNumType pgNumType cols formProt vAlign noEndnote titlePg textDirection bidi rtlGutter docGrid"),
	"lvl":        strings.Fields("start numFmt lvlRestart pStyle isLgl suff lvlText lvlPicBulletId legacy lvlJc pPr rPr"),
	"style":      strings.Fields("name aliases basedOn next link autoRedefine hidden uiPriority semiHidden unhideWhenUsed qFormat locked personal rsid pPr rPr tblPr trPr tcPr tblStylePr"),
	"tbl":        strings.Fields("tblPr tblGrid tr"),
	"tc":         strings.Fields("tcPr p"),
	"settings":   strings.Fields("defaultTabStop footnotePr compat decimalSymbol listSeparator"),
	"inline":     strings.Fields("extent docPr cNvGraphicFramePr graphic"),
}

type node struct {
	name     string
	attr     map[string]string
	children []*node
	text     string
}

func (n *node) walk(visit func(*node)) {
	visit(n)
	for _, c := range n.children {
		c.walk(visit)
	}
}

func (n *node) all(name string) []*node {
	var out []*node
	n.walk(func(x *node) {
		if x.name == name {
			out = append(out, x)
		}
	})
	return out
}

// said is the text of an element, with the text of fields and without their code.
func (n *node) said() string {
	var b strings.Builder
	n.walk(func(x *node) {
		if x.name == "t" {
			b.WriteString(x.text)
		}
	})
	return b.String()
}

func parse(t *testing.T, name string, data []byte) *node {
	t.Helper()
	d := xml.NewDecoder(bytes.NewReader(data))
	root := &node{}
	stack := []*node{root}
	for {
		token, err := d.Token()
		if err == io.EOF {
			break
		}
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		top := stack[len(stack)-1]
		switch x := token.(type) {
		case xml.StartElement:
			n := &node{name: x.Name.Local, attr: map[string]string{}}
			for _, a := range x.Attr {
				n.attr[a.Name.Local] = a.Value
				if strings.HasSuffix(a.Name.Space, "officeDocument/2006/relationships") {
					n.attr["r:"+a.Name.Local] = a.Value
				}
			}
			top.children = append(top.children, n)
			stack = append(stack, n)
		case xml.EndElement:
			stack = stack[:len(stack)-1]
		case xml.CharData:
			top.text += string(x)
		}
	}
	if len(root.children) != 1 {
		t.Fatalf("%s has %d roots", name, len(root.children))
	}
	return root.children[0]
}

var options = docx.Options{Date: time.Date(2026, 5, 4, 0, 0, 0, 0, time.UTC), Producer: "Penwright 0 & <more>", Subject: "Report"}

func written(t *testing.T, d *doc.Document) map[string][]byte {
	t.Helper()
	if list := doc.Number(d); list.HasErrors() {
		t.Fatal(list)
	}
	var a, b bytes.Buffer
	if err := docx.Write(&a, d, options); err != nil {
		t.Fatal(err)
	}
	if err := docx.Write(&b, d, options); err != nil || !bytes.Equal(a.Bytes(), b.Bytes()) {
		t.Fatalf("not the same twice, %v", err)
	}
	z, err := zip.NewReader(bytes.NewReader(a.Bytes()), int64(a.Len()))
	if err != nil {
		t.Fatal(err)
	}
	out := map[string][]byte{}
	for i, f := range z.File {
		if i == 0 && f.Name != "[Content_Types].xml" {
			t.Errorf("the first part is %s", f.Name)
		}
		r, err := f.Open()
		if err != nil {
			t.Fatal(err)
		}
		data, err := io.ReadAll(r)
		if err != nil {
			t.Fatal(err)
		}
		if _, twice := out[f.Name]; twice {
			t.Errorf("%s is there twice", f.Name)
		}
		out[f.Name] = data
	}
	return out
}

// check asserts of a file what readers rely on, and gives its body.
func check(t *testing.T, d *doc.Document) (body, notes *node) {
	t.Helper()
	parts := written(t, d)
	trees := map[string]*node{}
	var names []string
	for name, data := range parts {
		names = append(names, name)
		if strings.HasSuffix(name, ".xml") || strings.HasSuffix(name, ".rels") {
			trees[name] = parse(t, name, data)
		}
	}
	slices.Sort(names)

	// Every part has a content type (part 2, 7.3).
	types := map[string]string{}
	for _, n := range trees["[Content_Types].xml"].children {
		if n.name == "Override" {
			if _, ok := parts[strings.TrimPrefix(n.attr["PartName"], "/")]; !ok {
				t.Errorf("a type for %s, which is not there", n.attr["PartName"])
			}
			types[n.attr["PartName"]] = n.attr["ContentType"]
		} else {
			types["."+n.attr["Extension"]] = n.attr["ContentType"]
		}
	}
	for _, name := range names {
		if types["/"+name] == "" && types[path.Ext(name)] == "" {
			t.Errorf("%s has no content type", name)
		}
		if path.Ext(name) == ".xml" && types["/"+name] == "" && name != "[Content_Types].xml" {
			t.Errorf("%s has no content type of its own", name)
		}
	}

	// Relationships lead to parts that are there, or outside; what is named is related.
	related := map[string]bool{}
	for _, name := range names {
		if !strings.HasSuffix(name, ".rels") {
			continue
		}
		owner := path.Join(path.Dir(path.Dir(name)), strings.TrimSuffix(path.Base(name), ".rels"))
		ids := map[string]bool{}
		for _, r := range trees[name].children {
			id, target := r.attr["Id"], r.attr["Target"]
			if ids[id] {
				t.Errorf("%s: %s twice", name, id)
			}
			ids[id] = true
			if r.attr["TargetMode"] == "External" {
				if !strings.HasPrefix(target, "http://") && !strings.HasPrefix(target, "https://") && !strings.HasPrefix(target, "mailto:") {
					t.Errorf("%s leads to %q", name, target)
				}
				continue
			}
			target = path.Join(path.Dir(path.Dir(name)), target)
			if _, ok := parts[target]; !ok {
				t.Errorf("%s leads to %s, which is not there", name, target)
			}
			related[target] = true
		}
		if tree := trees[owner]; tree != nil {
			tree.walk(func(n *node) {
				for _, key := range []string{"r:id", "r:embed"} {
					if id, ok := n.attr[key]; ok && !ids[id] {
						t.Errorf("%s: %s of %s has no relationship", owner, id, n.name)
					}
				}
			})
		}
	}
	for _, name := range names {
		if !related[name] && !strings.HasSuffix(name, ".rels") && name != "[Content_Types].xml" {
			t.Errorf("nothing leads to %s", name)
		}
	}

	// The order of the schema.
	for _, name := range names {
		if trees[name] == nil {
			continue
		}
		trees[name].walk(func(n *node) {
			allowed, ok := order[n.name]
			if !ok || n.name == "style" && len(n.children) == 0 {
				return
			}
			last := -1
			for _, c := range n.children {
				i := slices.Index(allowed, c.name)
				if i < 0 {
					t.Errorf("%s: %s has a %s", name, n.name, c.name)
				}
				if i < last || i == last && !slices.Contains([]string{"tr", "p", "headerReference", "footerReference", "tab", "tblStylePr"}, c.name) {
					t.Errorf("%s: in %s, %s comes after %s", name, n.name, c.name, allowed[last])
				}
				last = i
			}
		})
	}

	styles := map[string]bool{}
	for _, s := range trees["word/styles.xml"].all("style") {
		if styles[s.attr["styleId"]] {
			t.Errorf("style %s twice", s.attr["styleId"])
		}
		styles[s.attr["styleId"]] = true
	}
	numbers := map[string]bool{}
	for _, n := range trees["word/numbering.xml"].all("num") {
		numbers[n.attr["numId"]] = true
	}
	body, notes = trees["word/document.xml"], trees["word/footnotes.xml"]
	ids := map[string]map[string]bool{}
	unique := func(kind, id string) {
		if ids[kind] == nil {
			ids[kind] = map[string]bool{}
		}
		if ids[kind][id] {
			t.Errorf("%s %s twice", kind, id)
		}
		ids[kind][id] = true
	}
	for _, n := range notes.children {
		unique("footnote", n.attr["id"])
		if len(n.children) == 0 || n.children[len(n.children)-1].name != "p" {
			t.Errorf("footnote %s does not end with a paragraph", n.attr["id"])
		}
	}
	for _, name := range names {
		tree := trees[name]
		if tree == nil || !strings.HasPrefix(name, "word/") {
			continue
		}
		tree.walk(func(n *node) {
			switch n.name {
			case "pStyle", "rStyle", "tblStyle", "basedOn", "next":
				if !styles[n.attr["val"]] {
					t.Errorf("%s: there is no style %q", name, n.attr["val"])
				}
			case "numId":
				if !numbers[n.attr["val"]] {
					t.Errorf("%s: there is no list %q", name, n.attr["val"])
				}
			case "bookmarkStart":
				unique("bookmark", n.attr["name"])
				unique("bookmark id", n.attr["id"])
				if len(n.attr["name"]) > 40 {
					t.Errorf("bookmark %s is too long", n.attr["name"])
				}
			case "docPr":
				unique("drawing", n.attr["id"])
				if n.attr["descr"] == "" {
					t.Errorf("drawing %s is not told in words", n.attr["id"])
				}
			case "footnoteReference":
				unique("call of footnote", n.attr["id"])
				if !ids["footnote"][n.attr["id"]] {
					t.Errorf("there is no footnote %s", n.attr["id"])
				}
			case "t":
				if len(n.children) > 0 {
					t.Errorf("%s: a text with elements", name)
				}
			case "p":
				depth := 0
				for _, f := range n.all("fldChar") {
					switch f.attr["fldCharType"] {
					case "begin":
						depth++
					case "end":
						depth--
					}
				}
				if depth != 0 && !strings.HasPrefix(style(n), "TOC") {
					t.Errorf("%s: a field does not end with its paragraph: %s", name, n.said())
				}
			case "hyperlink":
				if len(n.all("hyperlink")) > 1 {
					t.Errorf("%s: a link in a link", name)
				}
			}
		})
		for _, tbl := range tree.all("tbl") {
			columns := len(tbl.children[1].children)
			if columns == 0 || columns > 63 {
				t.Errorf("a table of %d columns", columns)
			}
			headed := true
			for _, tr := range tbl.children[2:] {
				n := 0
				for _, tc := range tr.all("tc") {
					span := 1
					for _, s := range tc.children[0].all("gridSpan") {
						span, _ = strconv.Atoi(s.attr["val"])
					}
					n += span
					if tc.children[len(tc.children)-1].name != "p" {
						t.Error("a cell does not end with a paragraph")
					}
				}
				if n != columns {
					t.Errorf("a row of %d columns in a table of %d: %s", n, columns, tr.said())
				}
				head := len(tr.all("tblHeader")) > 0
				if head && !headed {
					t.Error("a head below the body")
				}
				headed = head
			}
		}
	}
	for _, n := range append(body.all("instrText"), body.all("hyperlink")...) {
		name := n.attr["anchor"]
		if f := strings.Fields(n.text); len(f) > 1 && f[0] == "REF" {
			name = f[1]
		}
		if name != "" && !ids["bookmark"][name] {
			t.Errorf("there is no bookmark %s", name)
		}
	}
	main := body.children[0].children
	if main[len(main)-1].name != "sectPr" {
		t.Error("the body does not end with its section")
	}
	return body, notes
}

func style(p *node) string {
	for _, c := range p.children {
		if c.name == "pPr" {
			for _, s := range c.children {
				if s.name == "pStyle" {
					return s.attr["val"]
				}
			}
		}
	}
	return ""
}

func TestSample(t *testing.T) {
	body, notes := check(t, sample.Document())
	var got []string
	for _, p := range body.all("p") {
		switch id := style(p); id {
		case "Title", "Subtitle", "Heading1", "Heading2", "Caption", "Quote", "BoxTitle":
			got = append(got, id+": "+p.said())
		}
	}
	want := []string{
		"Title: Dried yeast for growing barrows",
		"Subtitle: A. Wren, Hollowmere research farm · HM-26-04 · 2026-05-18",
		"BoxTitle: Daily gain", "Heading1: Design", "Quote: 1. A quotation that begins like a list.",
		"Heading1: Results", "Heading2: Residuals of gain", "Caption: Table 1. Means of daily gain (kg d−1) by diet",
		"Caption: Figure 1. Daily gain by diet; a line joins the pens of a block", "Heading2: Data", "BoxTitle: Before an animal is moved", "BoxTitle: Finding",
	}
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("got\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
	text := body.said()
	for _, s := range []string{sample.Hostile, "see Table 1, Figure 1 and section 2.1", "Means without a common letter differ at 5 % (Tukey-Kramer).", "飼料 Ŝ"} {
		if !strings.Contains(text, s) {
			t.Errorf("it does not say %q", s)
		}
	}
	if s := notes.said(); !strings.Contains(s, "Weighed before the morning feed, see section 2.2.") {
		t.Errorf("the note says %q", s)
	}
	// Numbers end in line: what a column has after its mark is filled up with blanks of
	// the width of a digit (U+2007) and of a point (U+2008).
	for _, s := range []string{"0.842\u2007"} {
		if strings.Contains(text, s) {
			t.Errorf("%q is filled up too far", s)
		}
	}
	if !strings.Contains(text, "−10.9\u2007\u2007") || !strings.Contains(text, "12\u2008\u2007\u2007\u2007") {
		t.Error("numbers are not in line")
	}
}

// What is hard: foreign scripts, forbidden characters, depth, width, and calls of notes
// where none can be.
func TestHard(t *testing.T) {
	say := func(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }
	p := func(s string) doc.Block { return doc.Paragraph{Text: say(s)} }
	nested := []doc.Block{p("deep")}
	for i := range 12 {
		nested = []doc.Block{doc.List{Ordered: i%2 == 0, Start: i, Items: [][]doc.Block{nested, {}, {doc.Quote{Blocks: nested}}}}}
	}
	wide := doc.Table{ID: "wide", Caption: say("Wide"), Columns: make([]doc.Column, 120), Head: [][]doc.Cell{nil}}
	wide.Columns[0].Key = true
	for i := range wide.Columns {
		wide.Head[0] = append(wide.Head[0], doc.Cell{Text: say("c" + strconv.Itoa(i))})
	}
	for range 3 {
		row := doc.Row{}
		for i := range wide.Columns {
			row.Cells = append(row.Cells, doc.Cell{Text: say(strconv.Itoa(i))})
		}
		wide.Rows = append(wide.Rows, row)
	}
	hostile := "]]></w:t></w:r><w:p/>&amp;&#0;\x00\x01\ufffe\xff\" ' \t \n " + sample.Hostile
	d := &doc.Document{
		Lang: `x"><`, Title: hostile, ShortTitle: hostile, Code: hostile, Author: hostile, Status: hostile, Date: hostile, Paper: "Letter",
		Blocks: append(nested, doc.Contents{}, doc.Heading{Level: 6, Text: append(say(hostile), doc.FootnoteRef{N: 1}, doc.Break{}, doc.FootnoteRef{N: 1})}, p(hostile), doc.Code{Text: hostile}, wide, wide2(),
			doc.Paragraph{Text: []doc.Inline{doc.Link{Dest: "javascript:alert(1)", Text: say("a")}, doc.Link{Dest: "https://example.org/\"><x>&y= \n", Text: []doc.Inline{doc.Link{Dest: "http://example.org", Text: say("inner")}, doc.Ref{ID: "wide"}}}, doc.Link{Dest: "#wide", Text: say("w")}, doc.Link{Dest: "::%zz", Text: say("bad")}}},
			p("علف الدجاج، 12 غرام من feed في اليوم"), p("feed of חיטה (12) שעורה, mixed"), doc.Aside{Blocks: []doc.Block{doc.Table{}, doc.Table{Columns: make([]doc.Column, 2)}, doc.Rule{}}}, doc.Figure{Caption: say("none"), Alt: hostile},
			doc.Table{ID: "tall", Caption: append(say("tall"), doc.FootnoteRef{N: 2}), Columns: make([]doc.Column, 1), Rows: []doc.Row{{Cells: []doc.Cell{{Text: say(strings.Repeat("barley ", 800))}}}}}),
		Notes: [][]doc.Block{{doc.Paragraph{Text: append(say("one"), doc.FootnoteRef{N: 1}, doc.FootnoteRef{N: 2}, doc.Link{Dest: "https://example.org", Text: say("out")})}}, {doc.Table{Columns: make([]doc.Column, 1), Rows: []doc.Row{{Cells: []doc.Cell{{Text: say("t")}}}}}}},
	}
	body, notes := check(t, d)
	var turned []string
	for _, r := range body.all("r") {
		if len(r.all("rtl")) > 0 {
			turned = append(turned, r.said())
		}
	}
	if got, want := fmt.Sprintf("%q", turned), `["علف الدجاج، 12 غرام من" "في اليوم" "חיטה (12) שעורה"]`; got != want {
		t.Errorf("from right to left runs %s, want %s", got, want)
	}
	if n := len(body.all("bidi")); n != 1 {
		t.Errorf("%d paragraphs run from right to left", n)
	}
	landscape := 0
	for _, s := range body.all("pgSz") {
		if s.attr["orient"] == "landscape" {
			landscape++
			if s.attr["w"] != "15840" || s.attr["h"] != "12240" {
				t.Errorf("a turned page of %s × %s", s.attr["w"], s.attr["h"])
			}
		}
	}
	if landscape != 2 {
		t.Errorf("%d sections with turned pages", landscape)
	}
	if s := notes.said(); !strings.Contains(s, "one12out") {
		t.Errorf("the notes say %q", s)
	}
}

func wide2() doc.Block {
	t := doc.Table{Caption: []doc.Inline{doc.Text{Text: "Wide again"}}, ID: "wide-2", Columns: make([]doc.Column, 12), Rows: []doc.Row{{}}}
	for range t.Columns {
		t.Rows[0].Cells = append(t.Rows[0].Cells, doc.Cell{Text: []doc.Inline{doc.Text{Text: "Landscapewise"}}})
	}
	return t
}

func FuzzText(f *testing.F) {
	for _, s := range []string{sample.Hostile, "]]>", "\x00\xff", "עברית abc", "\U0001F416\U000FFFFF", "a\u2028b"} {
		f.Add(s)
	}
	f.Add("\x00\x01")
	f.Fuzz(func(t *testing.T, s string) {
		if len(s) > 500 {
			t.Skip("long")
		}
		text := []doc.Inline{doc.Text{Text: s}}
		d := &doc.Document{Title: s, Blocks: []doc.Block{doc.Paragraph{Text: text}, doc.Heading{Level: 1, Text: text}, doc.Code{Text: s}, doc.Table{Columns: make([]doc.Column, 1), Rows: []doc.Row{{Cells: []doc.Cell{{Text: text}}}}},
			doc.Paragraph{Text: []doc.Inline{doc.Link{Dest: "https://" + s, Text: text}}}}}
		check(t, d)
	})
}
