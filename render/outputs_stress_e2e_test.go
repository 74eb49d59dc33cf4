//go:build e2e

package render

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/doc/sample"
	"penwright/render/docx"
	"penwright/render/pdf"
	"penwright/render/tex"
)

// shortened gives the first runes of a text.
func shortened(s string, n int) string {
	runes := []rune(s)
	return string(runes[:min(len(runes), n)])
}

// hard is a document of all that is hard to set; foreign texts are in it if wanted.
func hard(foreign bool) *doc.Document {
	d := sample.Document()
	say := func(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }
	p := func(parts ...doc.Inline) doc.Block { return doc.Paragraph{Text: parts} }
	cell := func(s string) doc.Cell { return doc.Cell{Text: say(s)} }
	for i, s := range []string{
		sample.Hostile, `\input{/etc/passwd} \end{document} }{ $x$ ^^5cinput % \\[1em] --- '' "`, "[a] *b* & c # d_e ~f", strings.Repeat("barley ", 700), strings.Repeat("x", 5000),
		"kg d⁻¹ · 5 °C ± 3 µm ≤ 7 × 10³ α β Σ ŝ ễ ı \u202f1\u00a02 – — “a” ‘b’ …", "<w:p/>&amp;]]>\x00\x1b",
	} {
		d.Blocks = append(d.Blocks,
			doc.Heading{Level: 1 + i%6, ID: "hard-" + strconv.Itoa(i), Text: say(strings.TrimSpace(shortened(s, 120)))},
			p(say(s)...), doc.Quote{Blocks: []doc.Block{p(doc.Emph{Text: say(s)}), doc.List{Items: [][]doc.Block{{p(say(s)...)}}}}}, doc.Aside{Title: say("Box"), Blocks: []doc.Block{p(doc.Strong{Text: say(s)})}},
			doc.Code{Text: s + "\n\n  " + s}, p(doc.Text{Text: "a "}, doc.CodeSpan{Text: s}, doc.Break{}, doc.Break{}, doc.Link{Dest: "https://example.org/" + s, Text: say("link")}),
			doc.Table{ID: "t-" + strconv.Itoa(i), Caption: append(say(shortened(s, 200)), doc.FootnoteRef{N: 2 + i%2}), Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}, {Align: doc.Center}}, Head: [][]doc.Cell{{cell("[a"), cell("(b"), cell("*c")}},
				Rows: []doc.Row{{Cells: []doc.Cell{cell(s), cell("1.5"), cell("*")}}, {Group: true, Cells: []doc.Cell{cell(s)}}, {Rule: true, Cells: []doc.Cell{cell("[x"), cell("−10.25"), cell(shortened(s, 40))}}, {Cells: []doc.Cell{{Text: say(s), Span: 3}}}}, Notes: [][]doc.Inline{say(s), append(say("n"), doc.FootnoteRef{N: 2})}},
		)
	}
	nested := []doc.Block{p(doc.Text{Text: "deep"})}
	for i := range 10 {
		nested = []doc.Block{p(doc.Text{Text: "level"}), doc.List{Ordered: i%2 == 0, Start: i, Items: [][]doc.Block{nested, {}, {doc.Quote{Blocks: []doc.Block{p(doc.Text{Text: "quoted"})}}}}}}
	}
	d.Blocks = append(d.Blocks, nested...)
	long := doc.Table{ID: "long", Caption: say("Three hundred pens"), Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}}, Head: [][]doc.Cell{{cell("Pen"), cell("Gain")}}}
	for i := range 300 {
		if i%50 == 0 {
			long.Rows = append(long.Rows, doc.Row{Group: true, Cells: []doc.Cell{cell("House " + strconv.Itoa(i/50))}})
		}
		long.Rows = append(long.Rows, doc.Row{Cells: []doc.Cell{cell("P" + strconv.Itoa(i)), cell(fmt.Sprintf("%.3f", 0.8+float64(i)/1000))}})
	}
	wide := doc.Table{ID: "wide", Caption: say("Forty responses of sixty treatments"), Columns: []doc.Column{{Key: true}}, Head: [][]doc.Cell{{cell("Treatment")}, {cell("")}}}
	for k := range 40 {
		wide.Columns = append(wide.Columns, doc.Column{Align: doc.Decimal})
		wide.Head[0] = append(wide.Head[0], cell("Response "+strconv.Itoa(k)))
		if k%4 == 0 {
			wide.Head[1] = append(wide.Head[1], doc.Cell{Text: say("four of a kind"), Span: 4, Align: doc.Center, Own: true})
		}
	}
	for i := range 60 {
		row := doc.Row{Cells: []doc.Cell{cell("Treatment " + strconv.Itoa(i) + strings.Repeat(" long name", 10*(i%2)))}}
		for k := range 40 {
			row.Cells = append(row.Cells, cell(fmt.Sprintf("%.2f", float64(i*k)/7)))
		}
		wide.Rows = append(wide.Rows, row)
	}
	d.Blocks = append(d.Blocks, long, wide, doc.Heading{Level: 2, Text: append(say("A note in a head"), doc.FootnoteRef{N: 3}, doc.Break{}, doc.Sup{Text: say("2")})},
		p(doc.FootnoteRef{N: 2}, doc.Text{Text: "again"}, doc.Ref{ID: "wide"}, doc.Ref{ID: "long"}, doc.Ref{ID: "hard-3"}), doc.List{}, doc.Quote{}, doc.Table{}, doc.Table{Caption: say("No columns")}, doc.Figure{Caption: say("No picture"), Alt: sample.Hostile},
		doc.Figure{Caption: append(say("A note"), doc.FootnoteRef{N: 4}), Alt: sample.Hostile, Picture: sample.Picture(), File: "gain-points"})
	d.Notes = append(d.Notes, []doc.Block{p(doc.Text{Text: "Two"}, doc.FootnoteRef{N: 3}), p(doc.Text{Text: "paragraphs"}, doc.FootnoteRef{N: 2})}, []doc.Block{p(say(sample.Hostile)...)}, []doc.Block{doc.List{Items: [][]doc.Block{{p(doc.Text{Text: "a list in a note"})}}}})
	if foreign {
		d.Blocks = append(d.Blocks, p(doc.Text{Text: "علف الدجاج، 12 غرام من feed في اليوم"}), p(doc.Text{Text: "feed: חיטה (12) שעורה and 飼料"}), doc.Heading{Level: 2, Text: say("תוצאות")})
	} else {
		plain := doc.Mapper{Inline: func(n doc.Inline) doc.Inline {
			if x, ok := n.(doc.Text); ok {
				return doc.Text{Text: strings.NewReplacer("飼料", "feed").Replace(x.Text)}
			}
			return n
		}}
		d.Blocks = plain.Blocks(d.Blocks)
	}
	return d
}

func numbered(t *testing.T, d *doc.Document) {
	t.Helper()
	if list := doc.Number(d); list.HasErrors() {
		t.Fatal(list)
	}
}

func TestLaTeXOfHardDocument(t *testing.T) {
	d := hard(false)
	numbered(t, d)
	dir := t.TempDir()
	if keep := os.Getenv("KEEP"); keep != "" {
		dir = keep
	}
	files, list, err := texFiles(d)
	if err != nil || len(list) > 0 {
		t.Fatal(list, err)
	}
	pics, _, err := figures(d, pdf.Options{}, false, true)
	if err != nil {
		t.Fatal(err)
	}
	put(t, dir, append(files, pics...))
	for range 2 {
		tool(t, dir, "pdflatex", "-halt-on-error", "-interaction=nonstopmode", "-no-shell-escape", "report.tex")
	}
	log, err := os.ReadFile(filepath.Join(dir, "report.log"))
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range overfull.FindAllStringSubmatch(string(log), -1) {
		if v, err := strconv.ParseFloat(m[1], 64); err != nil || v > 10 {
			t.Errorf("LaTeX says: %s", m[0])
		}
	}
	text := bare(tool(t, dir, "pdftotext", "report.pdf", "-"))
	for _, want := range []string{bare(`\input{/etc/passwd}`), bare(`<script>alert("x")</script>`), bare("{{.Secret}}"), bare("a list in a note")} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not on the pages", want)
		}
	}
	if strings.Contains(text, "root:x:0") {
		t.Error("a file was read")
	}
}

// What LaTeX has no command for is told with its place.
func TestLaTeXLacksSigns(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: []doc.Inline{doc.Text{Text: "飼料"}}, Pos: diag.Pos{File: "narrative.md", Line: 7, Col: 1}}}}
	list, err := tex.Chapter(&bytes.Buffer{}, d)
	if err != nil || len(list) != 2 || list[0].Code != tex.CodeSign || list[0].Pos.Line != 7 || !list.HasErrors() {
		t.Errorf("%v %v", list, err)
	}
}

func TestWordProcessorOpensHardDocument(t *testing.T) {
	d := hard(true)
	numbered(t, d)
	dir := t.TempDir()
	if keep := os.Getenv("KEEP"); keep != "" {
		dir = keep
	}
	var b bytes.Buffer
	if err := docx.Write(&b, d, docx.Options{}); err != nil {
		t.Fatal(err)
	}
	put(t, dir, []File{{Path: "report.docx", Data: b.Bytes()}})
	tool(t, dir, "soffice", "--headless", "-env:UserInstallation=file://"+t.TempDir(), "--convert-to", "txt:Text (encoded):UTF8", "--outdir", dir, "report.docx")
	raw, err := os.ReadFile(filepath.Join(dir, "report.txt"))
	if err != nil {
		t.Fatal(err)
	}
	text := bare(string(raw))
	for _, s := range said(d.Blocks) {
		if !strings.Contains(text, bare(doc.Clean(s.text))) && !strings.Contains(s.text, "Treatment") {
			t.Errorf("%q is not in it", shortened(s.text, 80))
		}
	}
}
