package term

import (
	"bytes"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/diff"

	"penwright/render/doc"
	"penwright/render/doc/sample"
)

var update = flag.Bool("update", false, "rewrite the golden files")

func write(t *testing.T, d *doc.Document, opt Options) string {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, d, opt); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestWriteGolden(t *testing.T) {
	for _, opt := range []Options{{Width: 80}, {Width: 48}, {Width: 100, Bold: true}} {
		d := sample.Document()
		if list := doc.Number(d); len(list) > 0 {
			t.Fatal(list)
		}
		got := []byte(write(t, d, opt))
		path := filepath.Join("testdata", fmt.Sprintf("sample-%d.txt", opt.Width))
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
}

func text(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }

func TestColumns(t *testing.T) {
	// Widths by Unicode Standard Annex 11: W and F take two columns, Mn and Me none.
	tests := []struct {
		in   string
		want int
	}{
		{"pen", 3}, {"µé", 2}, {"飼料", 4}, {"e\u0301", 1}, {"Ａ", 2}, {"\u2009", 1}, {"⁻¹", 2}, {"\u200b", 0}, {"", 0}, {"α≤σ", 3},
	}
	for _, test := range tests {
		if got := columns(test.in); got != test.want {
			t.Errorf("columns(%q) = %d, want %d", test.in, got, test.want)
		}
	}
}

func TestParagraphsKeepToTheWidth(t *testing.T) {
	long := strings.Repeat("a word, another 飼料 word. ", 40)
	d := &doc.Document{Blocks: []doc.Block{
		doc.Paragraph{Text: text(long)},
		doc.Quote{Blocks: []doc.Block{doc.Paragraph{Text: text(long)}}},
		doc.List{Items: [][]doc.Block{{doc.Paragraph{Text: text(long)}}}},
		doc.Aside{Title: text(long), Blocks: []doc.Block{doc.Paragraph{Text: text(long)}}},
		doc.Table{Columns: make([]doc.Column, 3), Rows: []doc.Row{{Cells: []doc.Cell{{Text: text(long)}, {Text: text("b")}, {Text: text(long)}}}}},
	}}
	for _, width := range []int{40, 60, 80, 132} {
		for i, line := range strings.Split(write(t, d, Options{Width: width}), "\n") {
			if n := columns(line); n > width {
				t.Errorf("width %d: line %d takes %d columns: %s", width, i+1, n, line)
			}
		}
	}
}

func TestDecimalsStandBelowEachOther(t *testing.T) {
	var rows []doc.Row
	values := []string{"0.842", "\u221210.9", "12", "< 0.001", "123.4567", "–", ""}
	for _, v := range values {
		rows = append(rows, doc.Row{Cells: []doc.Cell{{Text: text("x")}, {Text: text(v)}, {Text: text("end")}}})
	}
	d := &doc.Document{Blocks: []doc.Block{doc.Table{Columns: []doc.Column{{}, {Align: doc.Decimal}, {}}, Rows: rows}}}
	lines := strings.Split(write(t, d, Options{}), "\n")[1:]
	mark := -1
	for i, v := range values {
		line := lines[i]
		if strings.Contains(v, ".") {
			at := columns(line[:strings.Index(line, ".")])
			if mark >= 0 && at != mark {
				t.Errorf("the mark of %s stands at %d, not %d", v, at, mark)
			}
			mark = at
		}
		if v == "12" {
			if at := columns(line[:strings.Index(line, "12")+2]); at != mark {
				t.Errorf("%s ends at %d, not before the mark at %d", v, at, mark)
			}
		}
		if at := columns(line[:strings.Index(line, "end")]); at != columns(lines[0][:strings.Index(lines[0], "end")]) {
			t.Errorf("the next column of %q begins at %d", v, at)
		}
	}
}

// What data say never reaches the terminal as a command.
func TestNoSignsFromData(t *testing.T) {
	evil := "a\x1b[2Jb\x1b]0;title\x07c\u009b31md\u202ee"
	in := text(evil)
	d := &doc.Document{Title: evil, Code: evil, Blocks: []doc.Block{
		doc.Heading{Level: 1, Number: "1", Text: in}, doc.Paragraph{Text: in}, doc.Code{Text: evil}, doc.Paragraph{Text: []doc.Inline{doc.CodeSpan{Text: evil}, doc.Link{Dest: evil, Text: in}, doc.Ref{Text: evil}, doc.Sup{Text: in}}},
		doc.Table{Caption: in, Columns: make([]doc.Column, 1), Head: [][]doc.Cell{{{Text: in}}}, Rows: []doc.Row{{Cells: []doc.Cell{{Text: in}}}, {Group: true, Cells: []doc.Cell{{Text: in}}}}, Notes: [][]doc.Inline{in}},
		doc.Figure{Alt: evil, Caption: in},
	}, Notes: [][]doc.Block{{doc.Paragraph{Text: in}}}}
	got := write(t, d, Options{})
	if strings.ContainsAny(got, "\x1b\x07\u009b\u202e") {
		t.Errorf("%q", got)
	}
}

func TestNarrowPlacesAndEmptyTables(t *testing.T) {
	var blocks []doc.Block = []doc.Block{doc.Paragraph{Text: text("deep words here and there")}}
	for range 50 {
		blocks = []doc.Block{doc.List{Items: [][]doc.Block{blocks}}, doc.Quote{Blocks: blocks}}[:1]
	}
	blocks = append(blocks, doc.Table{}, doc.Table{Rows: []doc.Row{{}}}, doc.List{}, doc.List{Items: [][]doc.Block{{}}}, doc.Quote{}, doc.Paragraph{}, doc.Code{},
		doc.Table{Columns: make([]doc.Column, 2), Rows: []doc.Row{{Cells: []doc.Cell{{Span: 9, Text: text("wide")}}}, {Cells: []doc.Cell{{}, {}, {}, {}}}, {Group: true}}})
	got := write(t, &doc.Document{Blocks: blocks}, Options{Width: -5})
	if !strings.Contains(got, "deep words here and") {
		t.Errorf("%s", got)
	}
}
