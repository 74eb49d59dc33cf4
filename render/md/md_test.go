package md_test

import (
	"bytes"
	"flag"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/diff"

	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/doc/sample"
	"penwright/render/md"
)

var update = flag.Bool("update", false, "rewrite the golden files")

func write(t *testing.T, d *doc.Document) string {
	t.Helper()
	var b bytes.Buffer
	if err := md.Write(&b, d); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestWriteGolden(t *testing.T) {
	d := sample.Document()
	if list := doc.Number(d); len(list) > 0 {
		t.Fatal(list)
	}
	got := []byte(write(t, d))
	path := filepath.Join("testdata", "sample.md")
	if *update {
		if err := os.MkdirAll("testdata", 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, got, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if d := diff.Diff("want", want, "got", got); len(d) > 0 {
		t.Errorf("%s differs:\n%s", path, d)
	}
}

// read reads Markdown back by the parser of the templates, which is not the writer's
// idea of Markdown but that of CommonMark.
func read(t *testing.T, text string) []doc.Block {
	t.Helper()
	got, list := compose.Markdown("report.md", text, compose.Limits{})
	for _, d := range list {
		if d.Code != compose.CodeLink && d.Code != compose.CodeImage { // files beside the report
			t.Errorf("%+v\n%s", d, text)
		}
	}
	blocks := got.Blocks
	for _, note := range got.Notes {
		blocks = append(blocks, note...)
	}
	return blocks
}

var blanks = regexp.MustCompile(`\s+`)

// words returns all text below blocks, with runs of blanks as one.
func words(blocks []doc.Block) string {
	var b strings.Builder
	doc.Walk(blocks, func(node any) {
		switch n := node.(type) {
		case doc.Text:
			b.WriteString(n.Text)
		case doc.CodeSpan:
			b.WriteString(n.Text)
		case doc.Code:
			b.WriteString(n.Text)
		case doc.Break:
			b.WriteByte(' ')
		}
	})
	return strings.TrimSpace(blanks.ReplaceAllString(strings.ReplaceAll(b.String(), "\u2060", ""), " "))
}

// shape dumps blocks without their places.
func shape(t *testing.T, blocks []doc.Block) string {
	t.Helper()
	var b bytes.Buffer
	if err := doc.Dump(&b, &doc.Document{Blocks: blocks}); err != nil {
		t.Fatal(err)
	}
	return regexp.MustCompile(` @report\.md:\d+:\d+`).ReplaceAllString(b.String(), "")
}

func text(s string) doc.Inline { return doc.Text{Text: s} }

func list(ordered bool, start int, tight bool, items ...[]doc.Block) doc.Block {
	return doc.List{Ordered: ordered, Start: start, Tight: tight, Items: items}
}

func paragraph(parts ...doc.Inline) doc.Block { return doc.Paragraph{Text: parts} }

func item(s string) []doc.Block { return []doc.Block{paragraph(text(s))} }

func TestStructureComesBack(t *testing.T) {
	em := func(s string) doc.Inline { return doc.Emph{Text: []doc.Inline{text(s)}} }
	strong := func(in ...doc.Inline) doc.Inline { return doc.Strong{Text: in} }
	tests := []struct {
		name   string
		blocks []doc.Block
	}{
		{"lists", []doc.Block{
			list(true, 3, true, item("a"), item("b")),
			list(true, 1, true, item("c"), item("d")),
			list(false, 0, true, item("e"), item("f")),
			list(false, 0, false, item("g"), item("h")),
			list(false, 0, true, item("i")),
		}},
		{"nested", []doc.Block{list(false, 0, true,
			[]doc.Block{paragraph(text("a")), list(true, 1, true, item("b"), []doc.Block{paragraph(text("c")), list(false, 0, true, item("d"))})},
			item("e"),
		)}},
		{"blocks in items", []doc.Block{list(false, 0, false,
			[]doc.Block{paragraph(text("a")), doc.Code{Text: "x\n\ny\n"}, doc.Quote{Blocks: []doc.Block{paragraph(text("q")), list(false, 0, true, item("z"))}}},
			[]doc.Block{doc.Code{Text: "first\n"}},
			[]doc.Block{doc.Quote{Blocks: item("quoted")}},
			[]doc.Block{doc.Rule{}},
		)}},
		{"quotes", []doc.Block{doc.Quote{Blocks: []doc.Block{paragraph(text("a")), doc.Quote{Blocks: item("b")}, paragraph(text("c"))}}, doc.Quote{Blocks: item("other")}}},
		{"code", []doc.Block{doc.Code{Text: "```\n~~~\n    x\n"}, doc.Code{Text: "\n"}}},
		{"emphasis", []doc.Block{
			paragraph(em("P"), text("-value and "), em("P."), text("x and x"), em("(a)"), text("y"), strong(text("b")), text("c")),
			paragraph(strong(text("a "), em("b"), text(" c")), text(" "), strong(text("a")), text(", "), em("*"), text(".")),
			paragraph(text("a"), doc.CodeSpan{Text: "`"}, text("b"), doc.CodeSpan{Text: "a``b"}, text(", "), doc.CodeSpan{Text: "x|y"}),
		}},
		{"links", []doc.Block{paragraph(doc.Link{Dest: "https://example.org/(a)_b_&c", Text: []doc.Inline{text("a [b] "), em("c")}}, text("!"),
			doc.Link{Dest: "mailto:a.wren@example.org", Text: []doc.Inline{text("mail")}})}},
		{"breaks", []doc.Block{paragraph(text("a"), doc.Break{}, text("- b"), doc.Break{}, text("1. c"), doc.Break{}, text("=== d"))}},
		{"table", []doc.Block{doc.Table{
			Columns: []doc.Column{{}, {Align: doc.Right}, {Align: doc.Center}},
			Head:    [][]doc.Cell{{{Text: []doc.Inline{text("a | b")}}, {Text: []doc.Inline{text("c")}}, {}}},
			Rows: []doc.Row{
				{Cells: []doc.Cell{{Text: []doc.Inline{doc.CodeSpan{Text: "x|y"}}}, {Text: []doc.Inline{em("1")}}, {Text: []doc.Inline{text("\\")}}}},
				{Cells: []doc.Cell{{}, {}, {}}},
			},
		}}},
		{"headings", []doc.Block{doc.Heading{Level: 1, Text: []doc.Inline{text("a #")}}, doc.Heading{Level: 2, Text: []doc.Inline{em("b")}}}},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			out := write(t, &doc.Document{Blocks: test.blocks})
			got := shape(t, doc.Shift(read(t, out), -1))
			want := shape(t, test.blocks)
			if got != want {
				t.Errorf("%s\nin Markdown:\n%s", diff.Diff("want", []byte(want), "got", []byte(got)), out)
			}
		})
	}
}

// texts that mean something to Markdown, at the start of a line or in it.
var hostile = []string{
	sample.Hostile, "# a", "## ", "- a", "+ a", "* a", "1. a", "1) a", "12345. a", "> a", "    a", "\ta", "```", "~~~ a", "---", "***", "___", "===", ": a",
	"a\n===", "a\n---", "| a |\n|---|", "[a]: b", "[^1]: a", "[^1]", "![a](b)", "<https://example.org>", "&amp;", "&#65;", "a  ", "a\\", "\\", "a\n\n\nb", "<!-- a -->",
	"<b>", "_a_", "__a__", "*a*", "a*b*c", "`a`", "``", "{{.X}}", "{#id}", "~a~", "$a$", "^a^", "a@b.c", "+", "-", "1.", "\u00a0a", "\u2003- a", "a\u2028b", "|", "\\|", "!", "![", "www.example.org",
}

func everywhere(s string) *doc.Document {
	in := []doc.Inline{text(s)}
	return &doc.Document{
		Title: s, Code: s,
		Blocks: []doc.Block{
			doc.Heading{Level: 1, Text: in}, paragraph(in...), paragraph(text("a"), doc.Emph{Text: in}, text("b")), paragraph(doc.Strong{Text: in}, doc.Emph{Text: in}),
			list(false, 0, true, item(s), item(s)), list(true, 1, false, item(s)), doc.Quote{Blocks: item(s)}, doc.Aside{Title: in, Blocks: item(s)},
			paragraph(text("a"), doc.Break{}, text(s)), paragraph(doc.CodeSpan{Text: "a"}, doc.CodeSpan{Text: strings.ReplaceAll(s, "\n", " ")}), paragraph(doc.Link{Dest: "https://example.org", Text: in}),
			doc.Table{Caption: in, Number: "1", Columns: make([]doc.Column, 2), Head: [][]doc.Cell{{{Text: in}, {Text: in}}},
				Rows: []doc.Row{{Group: true, Cells: []doc.Cell{{Text: in}}}, {Cells: []doc.Cell{{Text: in}, {Text: []doc.Inline{doc.CodeSpan{Text: strings.ReplaceAll(s, "\\", "/")}}}}}}, Notes: [][]doc.Inline{in}},
			doc.Figure{Caption: in, Alt: s},
		},
	}
}

func checkWords(t *testing.T, s string) {
	t.Helper()
	d := everywhere(s)
	out := write(t, d)
	blocks := read(t, out)
	// What no element of the tree says: title, code and alternative text.
	all := []doc.Block{paragraph(text(s)), paragraph(text(s))}
	for _, b := range d.Blocks {
		switch b := b.(type) {
		case doc.Table:
			b.Caption = append([]doc.Inline{text("Table 1 ")}, b.Caption...)
			all = append(all, b)
		case doc.Figure:
			all = append(all, paragraph(text(s)), b)
		default:
			all = append(all, b)
		}
	}
	strip := func(s string) string { return strings.Join(strings.Fields(s), "") }
	if g, w := strip(words(blocks)), strip(words(all)); g != w {
		t.Errorf("%q does not come back:\n%s", s, diff.Diff("want", []byte(w+"\n"), "got", []byte(g+"\n")))
		t.Log(out)
	}
}

func TestTextIsEscaped(t *testing.T) {
	for _, s := range hostile {
		checkWords(t, s)
	}
}

func FuzzEscape(f *testing.F) {
	for _, s := range hostile {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if len(s) > 1000 || strings.ContainsFunc(s, func(r rune) bool { return r >= 0xe000 && r <= 0xf8ff || r >= 0xf0000 || r == 0xfffd }) || doc.Clean(s) != s {
			t.Skip("not a text that a template may hold")
		}
		checkWords(t, s)
	})
}
