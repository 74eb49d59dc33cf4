package html

import (
	"bytes"
	"flag"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"runtime"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/diff"

	"penwright/render/doc"
	"penwright/render/doc/sample"
)

var update = flag.Bool("update", false, "rewrite the golden files")

func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	path := filepath.Join("testdata", name)
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

func numbered(t *testing.T) *doc.Document {
	t.Helper()
	d := sample.Document()
	if list := doc.Number(d); len(list) > 0 {
		t.Fatalf("the sample has faults: %+v", list)
	}
	return d
}

func testFiles() []Attachment {
	return []Attachment{
		{Name: "protocol.toml", MIME: "application/toml", Data: []byte("title = \"Yeast\"\n")},
		{Name: "data/pens & gain.csv", MIME: "text/csv", Data: []byte("pen,gain\nP1,0.8\n")},
		{Name: "means.csv", MIME: "text/csv", Data: []byte{0, 1, 2, 255}},
		{Name: "empty", MIME: "text/plain", Data: []byte{}},
	}
}

func write(t *testing.T, d *doc.Document, files []Attachment, opt Options) string {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, d, files, opt); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The golden page is without the style sheet and script, whose looks no text can judge.
func TestWriteGolden(t *testing.T) {
	got := write(t, numbered(t), testFiles(), Options{Style: "p { margin: 0; }"})
	got = strings.Replace(got, "\n"+strings.TrimSpace(script)+"\n", "…", 1)
	got = regexp.MustCompile(`script-src 'sha256-[^']*'`).ReplaceAllString(got, "script-src …")
	golden(t, "sample.html", []byte(got))
}

func TestWriteIsDeterministic(t *testing.T) {
	first := write(t, numbered(t), testFiles(), Options{})
	old := runtime.GOMAXPROCS(1)
	defer runtime.GOMAXPROCS(old)
	if second := write(t, numbered(t), testFiles(), Options{}); first != second {
		t.Error("two pages of one document differ")
	}
}

// TestNothingFromOutside looks for all that makes a browser ask for something.
func TestNothingFromOutside(t *testing.T) {
	style, err := os.ReadFile(filepath.Join("..", "..", "templates", "style.css"))
	if err != nil {
		t.Fatal(err)
	}
	page := write(t, numbered(t), testFiles(), Options{Style: string(style)})
	for _, pattern := range []string{`(?i)\bsrc\s*=`, `(?i)url\s*\(`, `(?i)@import`, `(?i)<link`, `(?i)<iframe`, `(?i)<img`, `(?i)\bsrcset`, `(?i) on[a-z]+=`, `(?i)javascript:`, `(?i)\sstyle=`} {
		if m := regexp.MustCompile(pattern).FindString(page); m != "" {
			t.Errorf("the page holds %q", m)
		}
	}
	for _, want := range []string{"default-src 'none'", "base-uri 'none'", "form-action 'none'"} {
		if !strings.Contains(page, want) {
			t.Errorf("the policy lacks %q", want)
		}
	}
}

func TestHashesMatch(t *testing.T) {
	page := write(t, numbered(t), nil, Options{Style: "p { color: red; } /* </style> */"})
	for _, part := range []struct{ open, close, policy string }{
		{"<style>", "</style>", "style-src "},
		{"<script>", "</script>", "script-src "},
	} {
		_, rest, _ := strings.Cut(page, part.open)
		content, _, ok := strings.Cut(rest, part.close)
		if !ok || strings.Count(page, part.close) != 1 {
			t.Fatalf("not one %s", part.open)
		}
		if !strings.Contains(page, part.policy+hash(content)) {
			t.Errorf("the policy does not allow the content of %s", part.open)
		}
	}
}

// everywhere builds a document with a text wherever text can stand.
func everywhere(text string) *doc.Document {
	words := []doc.Inline{
		doc.Text{Text: text}, doc.Emph{Text: []doc.Inline{doc.Strong{Text: []doc.Inline{doc.Text{Text: text}}}}},
		doc.CodeSpan{Text: text}, doc.Link{Dest: "https://example.org/" + text, Text: []doc.Inline{doc.Text{Text: text}}},
		doc.Link{Dest: "x:" + text, Text: []doc.Inline{doc.Text{Text: text}}},
		doc.Ref{ID: text, Text: text}, doc.FootnoteRef{N: 1}, doc.FootnoteRef{N: 7},
	}
	ink := doc.Colour{A: 255, Role: doc.Ink}
	return &doc.Document{
		Lang: text, Title: text, ShortTitle: text, Code: text, Status: text, Author: text, Date: text, Fingerprint: text, Paper: text,
		Blocks: []doc.Block{
			doc.Heading{Level: 1, ID: text, Number: text, Text: words},
			doc.Paragraph{Text: words}, doc.Code{Text: text}, doc.Aside{Kind: text, Title: words, Blocks: []doc.Block{doc.Code{Text: text}}},
			doc.Table{
				ID: text, Number: text, Caption: words, CSV: text, Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}},
				Head:  [][]doc.Cell{{{Text: words}, {Text: words}}},
				Rows:  []doc.Row{{Group: true, Cells: []doc.Cell{{Text: words}}}, {Cells: []doc.Cell{{Text: words}, {Text: words}}}, {Cells: []doc.Cell{{Text: words}, {Text: []doc.Inline{doc.Text{Text: "1.5<"}}}}}},
				Notes: [][]doc.Inline{words},
			},
			doc.Figure{ID: text, Number: text, Caption: words, Alt: text, File: text, Picture: &doc.Picture{Width: 9, Height: 9, Ops: []doc.Op{
				doc.Mark{Name: text}, doc.Label{Text: text, Colour: ink},
			}}},
		},
		Notes: [][]doc.Block{{doc.Paragraph{Text: words}}},
	}
}

var (
	tags     = regexp.MustCompile(`<[^>]*>`)
	quoted   = regexp.MustCompile(`"[^"]*"`)
	tagShape = regexp.MustCompile(`^<(?:!DOCTYPE html|/?[a-z][a-z0-9]*(?: [a-zA-Z-]+(?:="")?)* ?/?)>$`)
)

// checkEscaped parses a page as far as its own writing goes: every tag is one that the
// writer makes, and its skeleton does not depend on the text.
func checkEscaped(t *testing.T, text string) {
	t.Helper()
	skeleton := func(text string) []string {
		page := write(t, everywhere(text), nil, Options{})
		_, page, _ = strings.Cut(page, "</style>")
		page, _, _ = strings.Cut(page, "<script>")
		var shape []string
		for _, tag := range tags.FindAllString(page, -1) {
			tag = quoted.ReplaceAllString(tag, `""`)
			if !tagShape.MatchString(tag) {
				t.Errorf("%q makes the tag %s", text, tag)
			}
			shape = append(shape, tag)
		}
		return shape
	}
	got, want := skeleton(text+"#x"), skeleton("text#x")
	// Whether a column needs padding, and whether a cell breaks its words, is all that may
	// depend on the text.
	cells := regexp.MustCompile(`(<t[hd][^>]*) class=""`)
	drop := func(shape []string) string {
		all := cells.ReplaceAllString(strings.Join(shape, "\n"), "$1")
		return strings.ReplaceAll(strings.ReplaceAll(all, "<span class=\"\" aria-hidden=\"\">\n</span>\n", ""), "<a href=\"\">", "<a>")
	}
	if g, w := drop(got), drop(want); g != w {
		t.Errorf("%q changes the page:\n%s", text, diff.Diff("want", []byte(w), "got", []byte(g)))
	}
}

func TestTextIsEscaped(t *testing.T) {
	for _, text := range []string{
		sample.Hostile, `"><img src=x onerror=alert(1)>`, `' onmouseover='x`, "]]>", "<!--", "--><b>", "&lt;", "</script>", "</style>", "</title>",
		"\x00\x01\x1f\x7f", "\xff\xfe", "\u202e\u2066", "a\u2028b", "<a class=\"attachment\" download=\"x\" href=\"data:text/csv;base64,eA==\">",
	} {
		checkEscaped(t, text)
	}
}

func FuzzEscape(f *testing.F) {
	f.Add(sample.Hostile)
	f.Add(`"><script>x</script>`)
	f.Add("1.5 \u2212.3")
	f.Fuzz(func(t *testing.T, text string) {
		if strings.HasPrefix(strings.ToLower(text), "http") || strings.HasPrefix(strings.ToLower(text), "mailto:") || strings.HasPrefix(text, "#") || len(text) > 1<<12 {
			t.Skip("a text that is a link by itself")
		}
		if doc.Clean(text) == "" {
			t.Skip("nothing is left of it")
		}
		checkEscaped(t, text)
	})
}

func TestLinksThatRunAreNoLinks(t *testing.T) {
	for _, dest := range []string{"javascript:alert(1)", "JAVASCRIPT:x", " javascript:x", "data:text/html,x", "vbscript:x", "//example.org", "file:///etc/passwd", ""} {
		d := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: []doc.Inline{doc.Link{Dest: dest, Text: []doc.Inline{doc.Text{Text: "t"}}}}}}}
		if page := write(t, d, nil, Options{}); !strings.Contains(page, "<p>t</p>") {
			t.Errorf("%q is linked", dest)
		}
	}
}

func TestAddressesAreWhole(t *testing.T) {
	for _, test := range []struct{ dest, want string }{
		{"https://example.org/a?b=1&c=(2)", "https://example.org/a?b=1&amp;c=(2)"},
		{"HTTPS://example.org/[a] <b>\"c#d#e%20", "HTTPS://example.org/%5Ba%5D%20%3Cb%3E%22c#d%23e%20"},
		{"https://example.org/é", "https://example.org/%C3%A9"},
		{"mailto:farm@example.org", "mailto:farm@example.org"},
		{"https://<script>/", ""}, {"https://farm@example.org/", ""}, {"https://", ""}, {"http:x", ""}, {"mailto:", ""}, {"#", ""},
	} {
		d := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: []doc.Inline{doc.Link{Dest: test.dest, Text: []doc.Inline{doc.Text{Text: "t"}}}}}}}
		want := "<p>t</p>"
		if test.want != "" {
			want = `<p><a href="` + test.want + `">t</a></p>`
		}
		if page := write(t, d, nil, Options{}); !strings.Contains(page, want) {
			t.Errorf("%q is not linked as %s", test.dest, want)
		}
	}
	if got := encoded("a%zz"); got != "a%25zz" {
		t.Error(got)
	}
}

func TestTitleOfTheWindow(t *testing.T) {
	page := write(t, &doc.Document{Title: strings.Repeat("Dried yeast ", 20), Code: "HM-26-04", Date: "next spring"}, nil, Options{})
	if want := "<title>Dried yeast Dried yeast Dried yeast Dried yeast Dried yeas… – HM-26-04</title>"; !strings.Contains(page, want) {
		t.Errorf("no %s", want)
	}
	if strings.Contains(page, "<time>") {
		t.Error("what is no date is called one")
	}
}

func TestAttachmentsComeBack(t *testing.T) {
	want := testFiles()
	page := write(t, numbered(t), want, Options{})
	got, err := Attachments([]byte(page))
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got %+v", got)
	}
	if files, err := Attachments([]byte(write(t, everywhere(openLink+"x"+openHref+"text/csv"+openData), nil, Options{}))); err != nil || len(files) > 0 {
		t.Errorf("a text was read as a file: %v %v", files, err)
	}
}

func TestAttachmentsRefuse(t *testing.T) {
	link := func(name, mime, code string) string {
		return openLink + name + openHref + mime + openData + code + `">`
	}
	bad := []string{
		openLink + "x", openLink + "x" + openHref + "text/csv", link("x", "text/csv", "!!!!"), link("x", "text/csv", "eA=")[:40],
		link("../x", "text/csv", ""), link("/x", "text/csv", ""), link("", "text/csv", ""), link("x", "text csv", ""),
		link("x", "text/csv", "") + link("x", "text/csv", ""), link("a\x00b", "text/csv", ""), link(".", "text/csv", ""),
		link("x", "text/csv", "eB=="), // bits beyond the last byte
	}
	for _, page := range bad {
		if files, err := Attachments([]byte(page)); err == nil {
			t.Errorf("%q gives %+v", page, files)
		}
	}
	for _, name := range []string{"../x", "", "a\nb", "/x", "a\u202eb", "\xff"} {
		if err := Write(io.Discard, &doc.Document{}, []Attachment{{Name: name, MIME: "text/csv"}}, Options{}); err == nil {
			t.Errorf("the name %q is written", name)
		}
	}
	two := []Attachment{{Name: "x", MIME: "text/csv"}, {Name: "x", MIME: "text/csv"}}
	if err := Write(io.Discard, &doc.Document{}, two, Options{}); err == nil {
		t.Error("two files of one name are written")
	}
}

func FuzzAttachments(f *testing.F) {
	f.Add([]byte(openLink + "x" + openHref + "text/csv" + openData + `eA==">`))
	f.Fuzz(func(t *testing.T, page []byte) {
		files, err := Attachments(page)
		if err != nil {
			return
		}
		var b bytes.Buffer
		if err := Write(&b, &doc.Document{}, files, Options{}); err != nil {
			t.Fatalf("files that were read are not written: %v", err)
		}
		again, err := Attachments(b.Bytes())
		if err != nil || len(again) != len(files) {
			t.Fatalf("%v, %d files of %d", err, len(again), len(files))
		}
		for i := range files {
			if again[i].Name != files[i].Name || !bytes.Equal(again[i].Data, files[i].Data) {
				t.Errorf("%+v became %+v", files[i], again[i])
			}
		}
	})
}

func TestSVGGolden(t *testing.T) {
	var b bytes.Buffer
	if err := SVG(&b, sample.Picture(), "Gain & yeast"); err != nil {
		t.Fatal(err)
	}
	golden(t, "picture.svg", b.Bytes())
}

func TestSVGRefusesWhatIsNoLength(t *testing.T) {
	var zero float64
	p := &doc.Picture{Width: 1, Height: 1, Ops: []doc.Op{doc.Label{X: zero / zero, Text: "x"}}}
	if err := SVG(io.Discard, p, ""); err == nil {
		t.Error("a label at no place is drawn")
	}
}

func TestCircles(t *testing.T) {
	curve := func(dx float64) *doc.Picture {
		const k = 0.5522847498 * 3
		return &doc.Picture{Width: 9, Height: 9, Ops: []doc.Op{doc.Fill{Colour: doc.Colour{A: 255}, Path: []doc.Segment{
			{Kind: doc.MoveTo, X: 13, Y: 10},
			{Kind: doc.CurveTo, X: 10, Y: 13 + dx, X1: 13, Y1: 10 + k, X2: 10 + k, Y2: 13},
			{Kind: doc.CurveTo, X: 7, Y: 10, X1: 10 - k, Y1: 13, X2: 7, Y2: 10 + k},
			{Kind: doc.CurveTo, X: 10, Y: 7, X1: 7, Y1: 10 - k, X2: 10 - k, Y2: 7},
			{Kind: doc.CurveTo, X: 13, Y: 10, X1: 10 + k, Y1: 7, X2: 13, Y2: 10 - k},
			{Kind: doc.Close},
		}}}}
	}
	for _, test := range []struct {
		dx     float64
		circle bool
	}{{0, true}, {0.5, false}} {
		var b bytes.Buffer
		if err := SVG(&b, curve(test.dx), ""); err != nil {
			t.Fatal(err)
		}
		want := `<circle cx="10" cy="10" r="3" fill="#000000"/>`
		if got := strings.Contains(b.String(), want); got != test.circle {
			t.Errorf("moved by %g: circle %v\n%s", test.dx, got, &b)
		}
	}
}

type brokenWriter struct{}

func (brokenWriter) Write([]byte) (int, error) { return 0, fmt.Errorf("the disk is full") }

func TestFaultsOfWritingAreTold(t *testing.T) {
	if err := Write(brokenWriter{}, numbered(t), testFiles(), Options{}); err == nil || !strings.Contains(err.Error(), "the disk is full") {
		t.Errorf("%v", err)
	}
}
