package render

import (
	"bytes"
	"slices"
	"strings"
	"testing"
	"unicode"

	"golang.org/x/text/unicode/norm"

	"penwright/protocol/diag"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/tex"
)

// spoken is a piece of a document as its readers see it: running text, or a cell.
type spoken struct {
	text string
	cell bool
	head bool // a cell of a head
}

// said lists what a document says, in reading order, without notes.
func said(blocks []doc.Block) []spoken {
	var out []spoken
	// What stands above or below the line may be read as a line of its own.
	plain := func(text []doc.Inline) string {
		return doc.Plain(doc.Mapper{Inline: func(n doc.Inline) doc.Inline {
			switch x := n.(type) {
			case doc.Sup:
				return doc.Text{Text: " " + doc.Plain(x.Text) + " "}
			case doc.Sub:
				return doc.Text{Text: " " + doc.Plain(x.Text) + " "}
			}
			return n
		}}.Inlines(text))
	}
	add := func(text string, cell bool) {
		if strings.TrimSpace(text) != "" {
			out = append(out, spoken{text: text, cell: cell})
		}
	}
	doc.Walk(blocks, func(n any) {
		switch x := n.(type) {
		case doc.Heading:
			add(plain(x.Text), false)
		case doc.Paragraph:
			add(plain(x.Text), false)
		case doc.Aside:
			add(plain(x.Title), false)
		case doc.Code:
			for _, l := range strings.Split(x.Text, "\n") {
				add(l, false)
			}
		case doc.Table:
			add(plain(x.Caption), false)
			for _, row := range x.Head {
				for _, c := range row {
					add(plain(c.Text), true)
					if n := len(out); n > 0 {
						out[n-1].head = out[n-1].cell
					}
				}
			}
			for _, row := range x.Rows {
				for _, c := range row.Cells {
					add(plain(c.Text), true)
				}
			}
			for _, note := range x.Notes {
				add(plain(note), false)
			}
		case doc.Figure:
			add(plain(x.Caption), false)
		}
	})
	return out
}

// bare is text without what setting it may change: blanks, hyphens, and which of the
// like signs stands for one.
func bare(s string) string {
	s = strings.NewReplacer("’", "'", "‘", "'", "·", "·", "⋅", "·", "∼", "~", "µ", "μ", "ϵ", "ε", "ϕ", "φ", "φ", "φ").Replace(s)
	return strings.Map(func(r rune) rune {
		if unicode.IsSpace(r) || strings.ContainsRune("-\u2010\u2011\u2007\u2008\u00ad\u200b\u2060", r) {
			return -1
		}
		return r
	}, norm.NFKC.String(s))
}

// The Markdown of a report, read again, says what the report says, in its order, and
// shows files that are there.
func TestMarkdownComesBack(t *testing.T) {
	for name, from := range trials(t) {
		for _, template := range Templates() {
			x, rs, _ := opened(t, from)
			opt := fixed
			opt.Template, opt.Only = template, []string{"md"}
			d, _ := Document(x, rs, opt)
			files, list, err := Report(x, rs, opt)
			if err != nil || list.HasErrors() {
				t.Fatal(list, err)
			}
			var text string
			there := map[string]bool{}
			for _, f := range files {
				there[f.Path] = true
				if f.Path == "report.md" {
					text = string(f.Data)
				}
			}
			again, list := compose.Markdown("report.md", text, compose.Limits{})
			for _, x := range list {
				if x.Code != compose.CodeLink && x.Code != compose.CodeImage { // files beside the report
					t.Errorf("%s %s: %+v", name, template, x)
				}
			}
			all := again.Blocks
			for _, note := range again.Notes {
				all = append(all, note...)
			}
			var read strings.Builder
			for _, s := range said(all) {
				read.WriteString(bare(s.text))
			}
			rest := read.String()
			for _, s := range said(d.Blocks) {
				want := bare(s.text)
				if s.head { // Markdown has one row for all of a head
					if !strings.Contains(read.String(), want) {
						t.Errorf("%s %s: no head %q", name, template, s.text)
					}
					continue
				}
				i := strings.Index(rest, want)
				if i < 0 {
					t.Errorf("%s %s: %q is not where it should be, but %q", name, template, s.text, rest[:min(len(rest), 200)])
					break
				}
				rest = rest[i+len(want):]
			}
			for _, line := range strings.Split(text, "\n") {
				if _, after, ok := strings.Cut(line, "](<figures/"); ok {
					if file := "figures/" + strings.TrimSuffix(after, ">)"); !there[file] {
						t.Errorf("%s %s: %s is shown, but not written", name, template, file)
					}
				}
			}
		}
	}
}

// A chapter comes in LaTeX and DOCX without being asked, an audit does not; and a sign
// that LaTeX lacks leaves LaTeX out, unless it was asked for.
func TestWanted(t *testing.T) {
	x, rs, _ := opened(t, trials(t)["demo"])
	plain := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: []doc.Inline{doc.Text{Text: "barley"}}}}}
	foreign := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: []doc.Inline{doc.Text{Text: "飼料"}}, Pos: diag.Pos{File: "narrative.md", Line: 3, Col: 1}}}}
	for _, test := range []struct {
		template string
		d        *doc.Document
		only     []string
		want     string
		told     int
	}{
		{"", plain, nil, "pdf html md json tables figures", 0},
		{"plan", foreign, nil, "pdf html md json tables figures", 0},
		{"chapter", plain, nil, "pdf html md json tables figures tex docx", 0},
		{"chapter", foreign, nil, "pdf html md json tables figures docx", 2},
		{"plan", foreign, []string{"tex"}, "tex", 0},
	} {
		opt := fixed
		opt.Template, opt.Only = test.template, test.only
		got, list := wanted(x, test.d, opt)
		if strings.Join(got, " ") != test.want || len(list) != test.told || list.HasErrors() {
			t.Errorf("%q: %v %v", test.template, got, list)
		}
	}
	_, list, err := texFiles(foreign)
	if err != nil || !list.HasErrors() || list[0].Code != tex.CodeSign || list[0].Pos.Line != 3 {
		t.Errorf("%v %v", list, err)
	}

	opt := fixed
	opt.Template = "chapter"
	files, list, err := Report(x, rs, opt)
	if err != nil || list.HasErrors() {
		t.Fatal(list, err)
	}
	has := func(name string) bool { return slices.ContainsFunc(files, func(f File) bool { return f.Path == name }) }
	for _, name := range []string{"report.pdf", "report.tex", "chapter.tex", "report.docx"} {
		if !has(name) {
			t.Errorf("no %s of a chapter", name)
		}
	}
	// LaTeX refers to figures that are there.
	for _, f := range files {
		for _, part := range bytes.Split(f.Data, []byte(`\includegraphics`))[1:] {
			if f.Path != "chapter.tex" {
				break
			}
			_, name, _ := strings.Cut(string(part), "{")
			name, _, _ = strings.Cut(name, "}")
			if !has(name) {
				t.Errorf("%s is shown, but not written", name)
			}
		}
	}
}

// A chapter, with all its outputs, is a function of what rides inside it.
func TestChapterFromItself(t *testing.T) {
	opt := fixed
	opt.Template = "chapter"
	closed(t, trials(t)["demo"], opt)
}
