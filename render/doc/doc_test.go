package doc_test

import (
	"bytes"
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/diff"

	"penwright/protocol/diag"
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

func words(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }

func TestDump(t *testing.T) {
	d := sample.Document()
	if list := doc.Number(d); len(list) > 0 {
		t.Fatalf("the sample has faults: %+v", list)
	}
	var b bytes.Buffer
	if err := doc.Dump(&b, d); err != nil {
		t.Fatal(err)
	}
	golden(t, "sample.dump", b.Bytes())
}

func TestNumberTwiceIsNumberOnce(t *testing.T) {
	d := sample.Document()
	doc.Number(d)
	var once, twice bytes.Buffer
	if err := doc.Dump(&once, d); err != nil {
		t.Fatal(err)
	}
	if list := doc.Number(d); len(list) > 0 {
		t.Fatalf("a numbered document has faults: %+v", list)
	}
	if err := doc.Dump(&twice, d); err != nil {
		t.Fatal(err)
	}
	if once.String() != twice.String() {
		t.Error("numbering a numbered document changes it")
	}
}

func TestHeadings(t *testing.T) {
	tests := []struct {
		levels []int
		want   string
	}{
		{[]int{1, 2, 2, 1, 2}, "1 1.1 1.2 2 2.1"},
		{[]int{2, 3, 4, 3, 2}, "1 1.1 1.1.1 1.2 2"},
		{[]int{1, 3, 3, 2, 3}, "1 1.1 1.2 1.3 1.3.1"}, // a gap closes
		{[]int{3, 2, 3}, "1 2 2.1"},                   // stepping out further than the first
		{[]int{6, 1, 6}, "1 2 2.1"},
	}
	for _, test := range tests {
		d := &doc.Document{}
		for _, level := range test.levels {
			d.Blocks = append(d.Blocks, doc.Heading{Level: level, Text: words("Gain")})
		}
		if list := doc.Number(d); len(list) > 0 {
			t.Errorf("%v: %+v", test.levels, list)
		}
		var numbers []string
		for _, b := range d.Blocks {
			h := b.(doc.Heading)
			numbers = append(numbers, h.Number)
			if depth := strings.Count(h.Number, ".") + 1; h.Level != depth {
				t.Errorf("%v: heading %s has level %d", test.levels, h.Number, h.Level)
			}
		}
		if got := strings.Join(numbers, " "); got != test.want {
			t.Errorf("%v: %s, want %s", test.levels, got, test.want)
		}
	}
}

func TestHeadingIDsAreUnique(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{
		doc.Heading{Level: 1, Text: words("Gain")},
		doc.Heading{Level: 1, Text: words("Gain!")},
		doc.Table{ID: "gain-2", Caption: words("x")},
		doc.Heading{Level: 1, Text: words("x_")},
		doc.Heading{Level: 1, Text: words("飼料")},
	}}
	if list := doc.Number(d); len(list) > 0 {
		t.Fatal(list)
	}
	var ids []string
	for _, b := range d.Blocks {
		if h, ok := b.(doc.Heading); ok {
			ids = append(ids, h.ID)
		}
	}
	if got, want := strings.Join(ids, " "), "gain gain-3 x section"; got != want {
		t.Errorf("identifiers %s, want %s", got, want)
	}
}

func TestNumberFindsFaults(t *testing.T) {
	at := func(line int) diag.Pos { return diag.Pos{File: "r.md", Line: line, Col: 1} }
	d := &doc.Document{Blocks: []doc.Block{
		doc.Table{ID: "means", Caption: words("a"), Pos: at(1)},
		doc.Figure{ID: "means", Pos: at(2)},
		doc.Figure{ID: "1 bad", Pos: at(3)},
		doc.Figure{ID: "x_own", Pos: at(4)},
		doc.Paragraph{Text: []doc.Inline{
			doc.Ref{ID: "maens", Pos: at(5)},
			doc.Link{Dest: "#nowhere", Text: words("there")},
			doc.FootnoteRef{N: 1},
		}},
	}}
	want := []struct{ code, hint string }{
		{doc.CodeDuplicateID, ""},
		{doc.CodeInvalidID, "letters"},
		{doc.CodeInvalidID, "letters"},
		{doc.CodeUnknownRef, `did you mean "means"?`},
		{doc.CodeUnknownRef, ""},
		{doc.CodeUnknownFootnote, ""},
	}
	list := doc.Number(d)
	if len(list) != len(want) {
		t.Fatalf("%d diagnostics, want %d: %+v", len(list), len(want), list)
	}
	for i, w := range want {
		if list[i].Code != w.code || !strings.Contains(list[i].Hint, w.hint) {
			t.Errorf("diagnostic %d: %+v, want code %s", i, list[i], w.code)
		}
	}
	if list[0].Pos != at(2) || list[0].Related[0].Pos != at(1) {
		t.Errorf("the second use is reported, the first related: %+v", list[0])
	}
}

func TestID(t *testing.T) {
	tests := []struct{ in, want string }{
		{"Results", "results"},
		{"Average daily gain (kg/d)", "average-daily-gain-kg-d"},
		{"Ŝ of Müller's <pen>", "s-of-mullers-pen"},
		{"3 Rs", "n3-rs"},
		{"", "section"},
		{"飼料", "section"},
		{"--a--", "a"},
	}
	for _, test := range tests {
		if got := doc.ID(test.in); got != test.want {
			t.Errorf("ID(%q) = %q, want %q", test.in, got, test.want)
		}
	}
	if got := doc.ID("anova", "adg"); got != "anova-adg" {
		t.Errorf("ID of parts = %q", got)
	}
}

func TestPlain(t *testing.T) {
	got := doc.Plain([]doc.Inline{
		doc.Text{Text: "a "}, doc.Emph{Text: []doc.Inline{doc.Strong{Text: words("b")}}}, doc.Break{},
		doc.CodeSpan{Text: "c"}, doc.FootnoteRef{N: 1}, doc.Ref{Text: " Table 1"}, doc.Link{Dest: "x", Text: words(" d")},
	})
	if want := "a b c Table 1 d"; got != want {
		t.Errorf("Plain = %q, want %q", got, want)
	}
}

func TestMapperLeavesItsSourceAlone(t *testing.T) {
	d := sample.Document()
	var before, after bytes.Buffer
	if err := doc.Dump(&before, d); err != nil {
		t.Fatal(err)
	}
	doc.Mapper{Inline: func(doc.Inline) doc.Inline { return doc.Text{Text: "changed"} }}.Blocks(d.Blocks)
	doc.Shift(d.Blocks, 2)
	if err := doc.Dump(&after, d); err != nil {
		t.Fatal(err)
	}
	if before.String() != after.String() {
		t.Error("the tree that was mapped has changed")
	}
	if size := doc.Size(d.Blocks); size < 2000 {
		t.Errorf("Size = %d", size)
	}
}

func TestSplitDecimal(t *testing.T) {
	tests := []struct{ in, head, tail string }{
		{"0.842", "0", ".842"},
		{"12", "12", ""},
		{"\u221210.9", "\u221210", ".9"},
		{"< 0.001", "< 0", ".001"},
		{".5", "", ".5"},
		{"< .001", "< ", ".001"},
		{"0.84 (0.80–0.88)", "0", ".84 (0.80–0.88)"},
		{"5.", "5.", ""},
		{"P. 3", "P. 3", ""},
		{"v.3", "v.3", ""},
		{"", "", ""},
		{"–", "–", ""},
	}
	for _, test := range tests {
		if head, tail := doc.SplitDecimal(test.in); head != test.head || tail != test.tail {
			t.Errorf("SplitDecimal(%q) = %q, %q", test.in, head, tail)
		}
	}
}

func TestClean(t *testing.T) {
	tests := []struct{ in, want string }{
		{"plain µ ⁻¹ 漢 \U0001F416", "plain µ ⁻¹ 漢 \U0001F416"},
		{"a\x00b\x1b[0m\r\n\tc", "ab[0m\n\tc"},
		{"a\xffb", "a\uFFFDb"},
		{"\u202eabc\u2069\ufeff\u200f", "abc"},
		{"\u0085\ufffe", ""},
	}
	for _, test := range tests {
		if got := doc.Clean(test.in); got != test.want {
			t.Errorf("Clean(%q) = %q, want %q", test.in, got, test.want)
		}
	}
}

func TestRaisedAndLowered(t *testing.T) {
	for _, test := range []struct{ got, want string }{
		{doc.Raised("−1"), "⁻¹"}, {doc.Raised("ab"), "ᵃᵇ"}, {doc.Raised("Q2"), "^(Q2)"}, {doc.Raised(""), ""},
		{doc.Lowered("i"), "ᵢ"}, {doc.Lowered("12"), "₁₂"}, {doc.Lowered("b"), "_(b)"},
	} {
		if test.got != test.want {
			t.Errorf("%q, want %q", test.got, test.want)
		}
	}
}

// A reference that may fail says its own words where its target is not there, and
// nothing is reported.
func TestOptionalRef(t *testing.T) {
	d := doc.Document{Blocks: []doc.Block{
		doc.Heading{Level: 1, Text: words("Welfare")},
		doc.Paragraph{Text: []doc.Inline{doc.Ref{ID: "welfare", Text: "here", Optional: true}, doc.Text{Text: ", "}, doc.Ref{ID: "conduct", Text: "here", Optional: true}}},
	}}
	if list := doc.Number(&d); len(list) > 0 {
		t.Errorf("reported: %v", list)
	}
	if got := doc.Plain(d.Blocks[1].(doc.Paragraph).Text); got != "section 1, here" {
		t.Errorf("got %q", got)
	}
}
