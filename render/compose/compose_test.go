package compose

import (
	"bytes"
	"errors"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"text/template"
	"time"

	"github.com/rogpeppe/go-internal/diff"

	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/doc/sample"
)

var update = flag.Bool("update", false, "rewrite the golden files")

type pen struct {
	Name string
	Pigs int
}

// The data of the tests; Secret has a method that no template may call.
type trial struct {
	Title, Gain, Diet, Code, Empty string
	Sealed                         bool
	Pens                           []pen
	Rate                           float64
	Keys                           map[string]any
	Nothing                        *pen
}

func (trial) Secret() string { return "secret" }

func testTrial() trial {
	return trial{
		Title: "Yeast & <barrows>", Gain: "0.86", Diet: "*1 %* | <b>`yeast`</b> {{.Code}} [x](y)", Code: "HM-1",
		Pens: []pen{{"P1", 8}, {"P_2_", 7}},
		Rate: 0.5,
		Keys: map[string]any{"one": 1, "two": []string{"a"}},
	}
}

func words(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }

func testFuncs() template.FuncMap {
	return template.FuncMap{
		"sup": func(s string) doc.Inline { return doc.Sup{Text: words(s)} },
		"ref": func(pos diag.Pos, id string) doc.Inline { return doc.Ref{ID: id, Pos: pos} },
		"table": func(id string) doc.Block {
			return doc.Table{ID: id, Caption: words("Caption of " + id), Columns: []doc.Column{{}}, Rows: []doc.Row{{Cells: []doc.Cell{{Text: words(sample.Hostile)}}}}}
		},
		"missing": func(code string) ([]doc.Block, error) {
			return []doc.Block{doc.Paragraph{Text: words("Not sealed: " + code)}}, nil
		},
		"narrative": func() (Text, error) {
			text, list := Markdown("narrative.md", "# Own words[^feed]\n\nText.\n\n[^feed]: A note of the narrative.\n", Limits{})
			if len(list) > 0 {
				return Text{}, errors.New(list[0].Message)
			}
			return Text{Blocks: doc.Shift(text.Blocks, 1), Notes: text.Notes}, nil
		},
		"claim": func(what string, holds bool) (string, error) {
			if !holds {
				return "", &Fault{Code: "claim-failed", Message: "the results do not bear out: " + what, Hint: "read them again"}
			}
			return "", nil
		},
		"half": func(x float64) string { return fmt.Sprintf("%.2f", x/2) },
		"fail": func() (string, error) { return "", errors.New("the moon is not a response") },
		"big": func() doc.Block {
			rows := make([]doc.Row, 10_000)
			return doc.Table{Rows: rows}
		},
	}
}

func dump(t *testing.T, text Text) string {
	t.Helper()
	var b bytes.Buffer
	if err := doc.Dump(&b, &doc.Document{Blocks: text.Blocks, Notes: text.Notes}); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestComposeGolden(t *testing.T) {
	source, err := os.ReadFile(filepath.Join("testdata", "report.md"))
	if err != nil {
		t.Fatal(err)
	}
	text, list := Compose([]Source{{Name: "report.md", Text: string(source)}}, "report.md", testTrial(), testFuncs(), Limits{})
	if len(list) > 0 {
		t.Fatalf("%+v", list)
	}
	got := []byte(dump(t, text))
	path := filepath.Join("testdata", "report.dump")
	if *update {
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

// one composes a single template and returns its dump without the first line.
func one(t *testing.T, template string) (string, diag.List) {
	t.Helper()
	text, list := Compose([]Source{{Name: "t.md", Text: template}}, "t.md", testTrial(), testFuncs(), Limits{})
	_, rest, _ := strings.Cut(dump(t, text), "\n")
	return rest, list
}

func TestDataIsNeverMarkup(t *testing.T) {
	hostile := []string{
		sample.Hostile, "# heading", "- item", "| a | b |\n|---|---|", "```\ncode", "\n\n    code", "[^1]", "&lt;", "\\*",
		"{{.Title}}", "<!-- x -->", "![a](b)", "***", "\U000F0000\U000F0001", "~~x~~", "> q", "1. a",
	}
	places := []string{"%s", "a %s b", "**%s**", "# a %s", "- %s", "> %s", "| a |\n|---|\n| %s |", "[%s](https://example.org)", "`%s`", "```\n%s\n```"}
	for _, place := range places {
		plainly, list := composeWith(place, "VALUE")
		if len(list) > 0 {
			t.Fatalf("%q: %+v", place, list)
		}
		shape := dump(t, plainly)
		for _, h := range hostile {
			got, list := composeWith(place, h)
			if len(list) > 0 {
				t.Errorf("%q in %q: %+v", h, place, list)
				continue
			}
			flat := strings.ReplaceAll(h, "\n", " ")
			want, _ := composeWith(place, "VALUE")
			want.Blocks = doc.Mapper{
				Inline: func(in doc.Inline) doc.Inline {
					switch in := in.(type) {
					case doc.Text:
						return doc.Text{Text: strings.ReplaceAll(in.Text, "VALUE", flat)}
					case doc.CodeSpan:
						return doc.CodeSpan{Text: strings.ReplaceAll(in.Text, "VALUE", flat)}
					}
					return in
				},
				Block: func(b doc.Block) doc.Block {
					if c, ok := b.(doc.Code); ok {
						return doc.Code{Text: strings.ReplaceAll(c.Text, "VALUE", h)}
					}
					return b
				},
			}.Blocks(want.Blocks)
			if g, w := dump(t, got), dump(t, want); g != w {
				t.Errorf("%q in %q changes the shape:\n%s\nwant\n%s\n(shape %s)", h, place, g, w, shape)
			}
		}
	}
}

func composeWith(place, value string) (Text, diag.List) {
	return Compose([]Source{{Name: "t.md", Text: fmt.Sprintf(place, "{{.X}}")}}, "t.md", map[string]string{"X": value}, nil, Limits{})
}

func TestMessages(t *testing.T) {
	tests := []struct {
		template string
		pos      string // line:col
		code     string
		message  string
		hint     string
	}{
		{"a\n{{tabel \"x\"}}", "2:3", CodeUnknownFunction, `there is no function "tabel"`, `did you mean "table"?`},
		{"{{if true}}{{printf \"%d\" 1}}{{end}}", "1:14", CodeUnknownFunction, "printf", "print"},
		{"{{html .Title}}", "1:3", CodeUnknownFunction, "html", "never taken for markup"},
		{"{{call .Title}}", "1:3", CodeUnknownFunction, "call", ""},
		{"a {{.Titel}} b", "1:5", CodeUnknownField, "Titel", `did you mean "Title"?`},
		{"{{range .Pens}}{{.Weight}}{{end}}", "1:18", CodeUnknownField, `no "Weight"`, "there are: Name, Pigs"},
		{"{{.Keys.three}}", "1:8", CodeUnknownField, "three", "one, two"},
		{"{{.Title.Length}}", "1:9", CodeUnknownField, "a text has no part", ""},
		{"{{.Secret}}", "1:3", CodeUnknownField, "Secret", ""},
		{"{{.Nothing.Name}}", "1:11", CodeWrongValue, "there is no value", "{{with}}"},
		{"{{.Nothing}}", "1:3", CodeWrongValue, "cannot be printed", ""},
		{"{{.Rate}}", "1:3", CodeWrongValue, "decimals", "rounds"},
		{"{{.Sealed}}", "1:3", CodeWrongValue, "a truth cannot be printed", ""},
		{"{{.Pens}}", "1:3", CodeWrongValue, "a list cannot be printed", ""},
		{"{{table}}", "1:3", CodeWrongValue, "table takes one value, not 0", ""},
		{"{{table 1}}", "1:3", CodeWrongValue, "value 1 of table must be a text, not a whole number", ""},
		{"{{.Title | .Gain}}", "1:12", CodeWrongValue, "takes no value", ""},
		{"{{.Title 1}}", "1:3", CodeWrongValue, "takes no value", ""},
		{"x {{table \"a\"}} y", "1:5", CodeMisplaced, "inside a line", "stand alone"},
		{"x\n{{table \"a\"}}", "2:3", CodeMisplaced, "inside a line", ""},
		{"# {{table \"a\"}}", "1:5", CodeMisplaced, "inside a line", ""},
		{"a\n\n      {{table \"a\"}}", "3:9", CodeMisplaced, "inside a line", "four spaces"},
		{"{{fail}}", "1:3", CodeFunction, "the moon is not a response", ""},
		{"{{claim \"gain rose\" (lt 2 1)}}", "1:3", "claim-failed", "bear out: gain rose", "again"},
		{"{{template \"prat\" .}}{{define \"part\"}}x{{end}}", "1:12", CodeUnknownTemplate, "prat", `"part"`},
		{"{{template \"../../etc/passwd\"}}", "1:12", CodeUnknownTemplate, "passwd", ""},
		{"a\n{{if .Sealed}}\nb", "2:1", CodeSyntax, "this {{if}} has no end", "{{end}}"},
		{"a\nb {{.Title", "2:3", CodeSyntax, "unclosed action", ""},
		{"{{$x}}", "1:1", CodeSyntax, "undefined variable", ""},
		{"{{range .Gain}}x{{end}}", "1:9", CodeWrongValue, "range can't iterate over", ""},
		{"{{lt .Title 1}}", "1:3", CodeFunction, "a text cannot be compared with a whole number", ""},
		{"{{index .Pens 9}}", "1:3", CodeFunction, "no place 9 in a list of 2", ""},
		{"{{print .Rate}}", "1:3", CodeFunction, "not a number", ""},
		{"a \U000F0000 b", "1:3", CodeCharacter, "U+F0000", ""},
		{"a \ue000", "1:3", CodeCharacter, "U+E000", ""},
		{"a\n\x00", "2:1", CodeCharacter, "U+0000", ""},
		{"µ \xff", "1:4", CodeCharacter, "0xff", "UTF-8"},
		{"a <b>c</b>", "1:3", CodeRawHTML, "HTML", ""},
		{"<div>\nx", "1:1", CodeRawHTML, "HTML", ""},
		{"a ![x](y.png)", "1:3", CodeImage, "picture", "figure"},
		{"[x](javascript:alert(1))", "1:1", CodeLink, "javascript", "https:"},
		{"[x](notes/pens.pdf)", "1:1", CodeLink, "pens.pdf", ""},
		{"a\n\n[^x]: never called", "", CodeFootnote, `"x" is never called`, ""},
		{"#\n", "1:1", CodeUnsupported, "heading without", ""},
		{"\r\n\r\na {{.Titel}}", "3:5", CodeUnknownField, "Titel", ""},
		{"\ufeff{{.Titel}}", "1:6", CodeUnknownField, "Titel", ""},
	}
	for _, test := range tests {
		_, list := one(t, test.template)
		if len(list) == 0 {
			t.Errorf("%q: no message, want %s", test.template, test.code)
			continue
		}
		d := list[0]
		if d.Code != test.code || !strings.Contains(d.Message, test.message) || !strings.Contains(d.Hint, test.hint) {
			t.Errorf("%q: %s %q hint %q\nwant %s %q hint %q", test.template, d.Code, d.Message, d.Hint, test.code, test.message, test.hint)
		}
		if got := strings.TrimPrefix(d.Pos.String(), "t.md:"); test.pos != "" && got != test.pos {
			t.Errorf("%q: at %s, want %s (%s)", test.template, got, test.pos, d.Message)
		}
	}
}

func TestAllFaultsAtOnce(t *testing.T) {
	_, list := one(t, "{{fail}}\n\n{{.Titel}}\n\n{{range .Pens}}{{.Weight}}{{end}}\n\n{{half (half .Titel)}}\n")
	if len(list) != 4 {
		t.Errorf("%d messages, want 4: %+v", len(list), list)
	}
	_, list = one(t, "{{nofunc}} {{template \"x\"}}\n{{alsonot}}")
	if len(list) != 3 {
		t.Errorf("%d messages, want 3: %+v", len(list), list)
	}
}

func TestPositions(t *testing.T) {
	sources := []Source{
		{Name: "main.md", Text: "# One\n\n{{template \"part.md\" .}}\n\n# Two\n"},
		{Name: "part.md", Text: "\n\n  Words here.\n\n{{table \"x\"}}\n"},
	}
	text, list := Compose(sources, "main.md", testTrial(), testFuncs(), Limits{})
	if len(list) > 0 {
		t.Fatal(list)
	}
	want := []string{"main.md:1:1", "part.md:3:3", "part.md:5:3", "main.md:5:1"}
	for i, b := range text.Blocks {
		var pos diag.Pos
		switch b := b.(type) {
		case doc.Heading:
			pos = b.Pos
		case doc.Paragraph:
			pos = b.Pos
		case doc.Table:
			pos = b.Pos
		}
		if pos.String() != want[i] {
			t.Errorf("block %d at %s, want %s", i, pos, want[i])
		}
	}
}

func TestLaterSourcesReplaceParts(t *testing.T) {
	sources := []Source{
		{Name: "a.md", Text: `{{template "part"}}{{define "part"}}old{{end}}`},
		{Name: "b.md", Text: `{{define "part"}}new{{end}}`},
	}
	text, list := Compose(sources, "a.md", nil, nil, Limits{})
	if len(list) > 0 {
		t.Fatal(list)
	}
	if got := dump(t, text); !strings.Contains(got, "new") {
		t.Errorf("the old part holds: %s", got)
	}
}

func TestCodeRunsInTables(t *testing.T) {
	got, list := one(t, "| a |\n|---|\n| `x \\| y` |\n")
	if len(list) > 0 || !strings.Contains(got, `code{x \| y}`) {
		t.Errorf("%s %v", got, list)
	}
}

func TestPanicsOfFunctionsAreNotHidden(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("the fault of a function was taken for one of the template")
		}
	}()
	Compose([]Source{{Name: "t", Text: "{{f}}"}}, "t", nil, template.FuncMap{"f": func() string { panic("boom") }}, Limits{})
}

// growing repeats a mark once, twice, … n times, with letters between.
func growing(mark string, n int) string {
	var b strings.Builder
	for i := range n {
		b.WriteString(strings.Repeat(mark, i+1) + "a")
	}
	return b.String()
}

// hostileTemplates each want more time or memory than a template may have.
func hostileTemplates() map[string]string {
	many := func(s string, n int) string { return strings.Repeat(s, n) }
	return map[string]string{
		"endless range":        `{{range 2000000000}}{{end}}`,
		"endless range, text":  `{{range 2000000000}}x{{end}}`,
		"endless range, value": `{{range 2000000000}}{{.Gain}}{{end}}`,
		"nested ranges":        many(`{{range 1000}}`, 20) + many(`{{end}}`, 20),
		"range with continue":  `{{range 2000000000}}{{continue}}{{end}}`,
		"doubling print":       `{{$x := "aaaaaaaaaaaaaaaa"}}{{range 100}}{{$x = print $x $x}}{{end}}{{$x}}`,
		"doubling print twice": `{{$x := "aaaaaaaa"}}{{range 2000000000}}{{$x = print $x $x}}{{end}}`,
		"recursion":            `{{define "r"}}{{template "r"}}{{end}}{{template "r"}}`,
		"doubling recursion":   `{{define "r"}}{{template "r"}}{{template "r"}}{{end}}{{template "r"}}`,
		"mutual recursion":     `{{define "a"}}x{{template "b"}}{{end}}{{define "b"}}{{template "a"}}{{end}}{{template "a"}}`,
		"deep blocks":          many(`{{if true}}`, 100_000) + many(`{{end}}`, 100_000),
		"long action":          `{{print` + many(` 1`, 500_000) + `}}`,
		"many short actions":   many(`{{print 1 1 1 1 1 1 1 1 1 1 1 1 1}}`, 9_900),
		"long pipeline":        `{{1` + many(`|print`, 170_000) + `}}`,
		"unprinted values":     `{{range 2000000000}}{{$x := big}}{{end}}`,
		"unprinted values 2":   `{{range 2000000000}}{{with big}}{{end}}{{end}}`,
		"growing ticks":        growing("`", 1400),
		"deep parentheses":     `{{` + many(`(`, 200_000) + `1` + many(`)`, 200_000) + `}}`,
		"big values": `{{range 100000}}{{big}}

{{end}}`,
		"quotes":      many(">", 500_000) + "a",
		"lists":       many("- ", 250_000) + "a",
		"numbers":     many("1. ", 250_000) + "a",
		"brackets":    many("[", 500_000),
		"links":       many("[a](", 200_000),
		"closed":      many("[", 250_000) + many("]", 250_000),
		"open links":  many("[a](b", 200_000),
		"emphasis":    many("*a_ ", 200_000),
		"emphasis 2":  many("**a *b ", 70_000) + many("b* a** ", 70_000),
		"deep":        many("*a **b ", 100) + many("b** a* ", 100),
		"cells":       "|" + many("a|", 500) + "\n|" + many("-|", 500) + "\n" + many("|\n", 100_000),
		"footnotes":   many("[^a]: b\n\n[^a]\n\n", 60_000),
		"indented":    many(" ", 500_000) + "- a",
		"many lines":  many("a\n", 500_000),
		"ticks":       many("`a``b```c", 110_000),
		"html":        many("<a ", 300_000),
		"titles":      many("[a]: b \"\n", 110_000),
		"range of it": `{{range 100000}}*a_ {{end}}`,
		"long":        many("x", 2_000_000),
		"private":     many("\U000F0000", 100),
	}
}

func TestHostileTemplatesAreRefused(t *testing.T) {
	templates := hostileTemplates()
	limits := Limits{}
	if underRace {
		limits.Steps = 50_000
	}
	for _, name := range sortedKeys(templates) {
		t.Run(name, func(t *testing.T) {
			runtime.GC()
			var before, after runtime.MemStats
			runtime.ReadMemStats(&before)
			start := cpu(t)
			_, list := Compose([]Source{{Name: "t.md", Text: templates[name]}}, "t.md", testTrial(), testFuncs(), limits)
			took := cpu(t) - start
			runtime.ReadMemStats(&after)
			if !list.HasErrors() {
				t.Error("not refused")
			}
			if len(list) > maxMessages {
				t.Errorf("%d messages", len(list))
			}
			for _, d := range list {
				if d.Pos.File != "t.md" {
					t.Errorf("message without a place: %+v", d)
				}
			}
			if !underRace && took > 2*time.Second { // a second, and as much for a slow machine
				t.Errorf("took %v", took)
			}
			if grown := int64(after.Sys) - int64(before.Sys); !underRace && grown > 100<<20 {
				t.Errorf("took %d MB from the system", grown>>20)
			}
			t.Logf("%v, %d MB allocated, %s", took, (after.TotalAlloc-before.TotalAlloc)>>20, list[0].Message)
		})
	}
}

func FuzzCompose(f *testing.F) {
	source, err := os.ReadFile(filepath.Join("testdata", "report.md"))
	if err != nil {
		f.Fatal(err)
	}
	f.Add(string(source), sample.Hostile)
	for _, s := range []string{
		"{{.X}}", "{{range 3}}{{.}}{{end}}", "{{template \"t\"}}", "[^a]\n\n[^a]: {{.X}}", "| {{.X}} |\n|-|\n", "{{with .X}}{{.}}{{else}}b{{end}}",
		"{{table .X}}", "[{{.X}}]({{.X}})", "{{$x := .X}}{{print $x 1}}", "{{and .X (or 1 2) | not}}", "> - `{{.X}}`",
	} {
		f.Add(s, "value")
	}
	f.Fuzz(func(t *testing.T, source, value string) {
		data := map[string]any{"X": value, "Pens": testTrial().Pens, "Title": value, "Gain": value}
		limits := Limits{Steps: 20_000, Output: 1 << 16, Values: 1 << 20}
		text, list := Compose([]Source{{Name: "t", Text: source}}, "t", data, testFuncs(), limits)
		lines := strings.Count(source, "\n") + strings.Count(source, "\r") + 1
		for _, d := range list {
			if d.Pos.File != "t" || d.Pos.Line > lines || d.Message == "" || d.Code == "" {
				t.Errorf("message without a place in the template: %+v", d)
			}
		}
		doc.Walk(text.Blocks, func(node any) {
			if s, ok := node.(doc.Text); ok && !strings.ContainsFunc(value, private) && strings.ContainsFunc(s.Text, private) {
				t.Errorf("a token is left in %q", s.Text)
			}
		})
		d := doc.Document{Blocks: text.Blocks, Notes: text.Notes}
		doc.Number(&d)
		var b bytes.Buffer
		if err := doc.Dump(&b, &d); err != nil {
			t.Fatal(err)
		}
	})
}
