package page_test

import (
	"bytes"
	"flag"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/page"
	"penwright/render/page/pagetest"
)

var update = flag.Bool("update", false, "rewrite the golden files")

// trace writes what is drawn, one operation a line.
func trace(w io.Writer, book *page.Book) {
	for i, pg := range book.Pages {
		fmt.Fprintf(w, "page %d: %.2f × %.2f\n", i+1, pg.Width, pg.Height)
		for _, o := range pg.Ops {
			switch o := o.(type) {
			case page.Text:
				fmt.Fprintf(w, "  text %7.2f %7.2f %s %.2f %q", o.X, o.Y, o.Face.Name, o.Size, o.Text)
				if o.Space != 0 {
					fmt.Fprintf(w, " space %.2f", o.Space)
				}
				if o.Actual != "" {
					fmt.Fprintf(w, " for %q", o.Actual)
				}
				fmt.Fprintln(w)
			case page.Box:
				fmt.Fprintf(w, "  box  %7.2f %7.2f %.2f × %.2f\n", o.X, o.Y, o.Width, o.Height)
			case page.Picture:
				fmt.Fprintf(w, "  pict %7.2f %7.2f scale %.3f\n", o.X, o.Y, o.Scale)
			case page.Link:
				fmt.Fprintf(w, "  link %7.2f %7.2f %.2f × %.2f %s\n", o.X, o.Y, o.Width, o.Height, o.Dest)
			}
		}
	}
	for _, e := range book.Outline {
		fmt.Fprintf(w, "outline %d %q page %d y %.2f\n", e.Level, e.Title, e.Place.Page+1, e.Place.Y)
	}
}

func TestTrace(t *testing.T) {
	book, list := page.Lay(pagetest.Sample())
	var b bytes.Buffer
	for _, d := range list {
		fmt.Fprintln(&b, d.Pos, d.Code, d.Message)
	}
	trace(&b, book)
	golden(t, filepath.Join("testdata", "sample.trace"), b.Bytes())
}

func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	if *update {
		if err := os.WriteFile(name, got, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	want, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	if bytes.Equal(got, want) {
		return
	}
	g, w := strings.Split(string(got), "\n"), strings.Split(string(want), "\n")
	for i := range max(len(g), len(w)) {
		var a, b string
		if i < len(g) {
			a = g[i]
		}
		if i < len(w) {
			b = w[i]
		}
		if a != b {
			t.Fatalf("%s line %d:\n got %s\nwant %s\n(rerun with -update if this is meant)", name, i+1, a, b)
		}
	}
}

// width measures a text as a writer draws it.
func width(o page.Text) float64 {
	s := strings.TrimRight(o.Text, " ")
	return o.Face.Width(s, o.Size) + o.Space*float64(strings.Count(s, " "))
}

func TestSampleIsSound(t *testing.T) {
	for _, paper := range []string{"A4", "Letter"} {
		d := pagetest.Sample()
		d.Paper = paper
		book, _ := page.Lay(d)
		check(t, book)
	}
}

func text(s string) []doc.Inline { return []doc.Inline{doc.Text{Text: s}} }

const sentence = "A pen is the unit that received a diet, so the mean of its eight barrows is what the analysis sees, and the barrows within it add nothing. "

// Wherever the page happens to end, no heading is left alone at its foot, no line of a
// paragraph is alone, captions stay with what they name, footnotes with their call.
func TestBreaksWhereverThePageEnds(t *testing.T) {
	for shift := range 56 {
		d := &doc.Document{Title: "Breaks", Notes: [][]doc.Block{{doc.Paragraph{Text: text("The note of the call.")}}}}
		for range shift {
			d.Blocks = append(d.Blocks, doc.Paragraph{Text: text("filler")})
		}
		d.Blocks = append(d.Blocks,
			doc.Heading{Level: 2, ID: "a", Text: text("HEADING")},
			doc.Heading{Level: 3, ID: "b", Text: text("HEADING BELOW")},
			doc.Paragraph{Text: []doc.Inline{doc.Text{Text: strings.Repeat(sentence, 3) + "CALL"}, doc.FootnoteRef{N: 1}, doc.Text{Text: " " + strings.Repeat(sentence, 3)}}},
			doc.Table{Number: "1", Caption: text("TABLE"), Columns: make([]doc.Column, 2), Head: [][]doc.Cell{{{Text: text("HEAD")}, {Text: text("x")}}},
				Rows: rows(7), Notes: [][]doc.Inline{text("TABLENOTE")}},
			doc.Heading{Level: 2, ID: "c", Text: text("HEADING")},
			doc.Figure{Number: "1", Caption: text("FIGURE"), Picture: pagetest.Curves(300, 160)},
			doc.Paragraph{Text: text(strings.Repeat(sentence, 4))},
		)
		book, _ := page.Lay(d)
		check(t, book)
		for i, pg := range book.Pages {
			lines := map[*page.Element]int{}
			var order []*page.Element
			all := ""
			var last *page.Element
			var cur *page.Element
			picture := false
			for _, o := range pg.Ops {
				switch o := o.(type) {
				case page.Begin:
					cur = o.Element
					if cur.Role == page.Artifact {
						continue
					}
					if lines[cur] == 0 {
						order = append(order, cur)
					}
					lines[cur]++
					if cur.Role != page.Note && (cur.Parent == nil || cur.Parent.Role != page.Note) {
						last = cur
					}
				case page.Picture:
					picture = true
				case page.Text:
					all += o.Text + "\n"
				}
			}
			if last != nil && (last.Role == page.Heading || last.Role == page.Caption && !picture) {
				t.Errorf("shift %d: page %d ends with a heading or a caption", shift, i+1)
			}
			for _, el := range order {
				if el.Role == page.Paragraph && lines[el] == 1 && el.Parent.Role == page.Section {
					whole := 0
					for _, other := range book.Pages {
						for _, o := range other.Ops {
							if b, ok := o.(page.Begin); ok && b.Element == el {
								whole++
							}
						}
					}
					if whole > 1 {
						t.Errorf("shift %d: page %d has one line of a paragraph of %d", shift, i+1, whole)
					}
				}
			}
			if strings.Contains(all, "CALL") != strings.Contains(all, "The note of the call") {
				t.Errorf("shift %d: page %d: the footnote is not where its call is", shift, i+1)
			}
			if strings.Contains(all, "FIGURE") != picture {
				t.Errorf("shift %d: page %d: the picture is not where its caption is", shift, i+1)
			}
			if strings.Contains(all, "row 7") != strings.Contains(all, "TABLENOTE") {
				t.Errorf("shift %d: page %d: the table's note is not where its end is", shift, i+1)
			}
			if strings.Contains(all, "\nrow ") && !strings.Contains(all, "HEAD\n") {
				t.Errorf("shift %d: page %d: rows without a head", shift, i+1)
			}
		}
	}
}

func rows(n int) []doc.Row {
	var list []doc.Row
	for i := range n {
		list = append(list, doc.Row{Cells: []doc.Cell{{Text: text(fmt.Sprintf("row %d", i+1))}, {Text: text("1.5")}}})
	}
	return list
}

// Every line of a justified paragraph but the last ends at the right edge, with word
// spaces between 0.8 and 1.6 of the natural one; no word is lost.
func TestJustified(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: text(strings.Repeat(sentence, 20))}}}
	book, _ := page.Lay(d)
	check(t, book)
	natural := face.Get(face.Serif, false, false).Width(" ", 10)
	var lines []page.Text
	got := ""
	for _, o := range book.Pages[0].Ops {
		if o, ok := o.(page.Text); ok && o.Face.Family == face.Serif {
			lines = append(lines, o)
			got += strings.TrimSpace(o.Text) + " "
		}
	}
	if want := strings.Repeat(sentence, 20); got != want {
		t.Errorf("the text is not the same: %q", got)
	}
	for i, l := range lines[:len(lines)-1] {
		if s := (natural + l.Space) / natural; s < 0.8-1e-9 || s > 1.6+1e-9 {
			t.Errorf("line %d: word space %.2f", i+1, s)
		}
		if right := l.X + width(l); math.Abs(right-(595.28-74)) > 0.01 {
			t.Errorf("line %d ends at %.3f", i+1, right)
		}
	}
}

func find(t *testing.T, book *page.Book, want string) (int, page.Text) {
	t.Helper()
	for i, pg := range book.Pages {
		for _, o := range pg.Ops {
			if o, ok := o.(page.Text); ok && o.Text == want {
				return i, o
			}
		}
	}
	t.Fatalf("no text %q", want)
	return 0, page.Text{}
}

// The mark stands at the same place in every row; what has none ends there; raised
// letters do not move the number.
func TestDecimalAlignment(t *testing.T) {
	cell := func(in ...doc.Inline) doc.Row { return doc.Row{Cells: []doc.Cell{{Text: in}, {Text: text("x")}}} }
	d := &doc.Document{Blocks: []doc.Block{doc.Table{Columns: []doc.Column{{Align: doc.Decimal}, {}}, Head: [][]doc.Cell{{{Text: text("A very long head of the column")}, {}}}, Rows: []doc.Row{
		cell(doc.Text{Text: "1.25"}), cell(doc.Text{Text: "\u2212103.5"}), cell(doc.Text{Text: "84"}), cell(doc.Text{Text: "7"}, doc.Sup{Text: text("ab")}), cell(doc.Text{Text: "< 0.001"}),
	}}}}
	book, _ := page.Lay(d)
	f := face.Get(face.Sans, false, false)
	_, ref := find(t, book, "1.25")
	mark := ref.X + f.Width("1", ref.Size)
	for whole, before := range map[string]string{"\u2212103.5": "\u2212103", "84": "84", "7": "7", "< 0.001": "< 0"} {
		_, o := find(t, book, whole)
		if got := o.X + f.Width(before, o.Size); math.Abs(got-mark) > 0.02 {
			t.Errorf("%q: mark at %.2f, others at %.2f", whole, got, mark)
		}
	}
}

func TestLongTableRepeatsItsHead(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{doc.Table{Number: "9", Caption: text("long"), Columns: make([]doc.Column, 2), Head: [][]doc.Cell{{{Text: text("HEAD")}, {}}}, Rows: rows(150)}}}
	book, _ := page.Lay(d)
	check(t, book)
	if len(book.Pages) < 3 {
		t.Fatalf("%d pages", len(book.Pages))
	}
	seen := 0
	for i, pg := range book.Pages {
		heads, thick := 0, 0
		for _, o := range pg.Ops {
			switch o := o.(type) {
			case page.Text:
				if o.Text == "HEAD" {
					heads++
				}
				if strings.HasPrefix(o.Text, "row ") {
					seen++
				}
			case page.Box:
				if o.Height == 0.9 {
					thick++
				}
			}
		}
		if heads != 1 || thick != 2 {
			t.Errorf("page %d: %d heads, %d strong rules", i+1, heads, thick)
		}
	}
	if seen != 150 {
		t.Errorf("%d rows of 150", seen)
	}
	find(t, book, "Table\u00A09, continued")
}

func TestWideTables(t *testing.T) {
	tests := []struct {
		columns int
		turned  bool
		parts   int
	}{{8, false, 1}, {20, true, 1}, {80, true, 4}}
	for _, test := range tests {
		book, _ := page.Lay(pagetest.Large(5, test.columns))
		check(t, book)
		turned, numbers := false, 0
		for _, pg := range book.Pages {
			turned = turned || pg.Width > pg.Height
			for _, o := range pg.Ops {
				if o, ok := o.(page.Text); ok && o.Text == "Table\u00A01. " {
					numbers++
				}
			}
		}
		if turned != test.turned || numbers != test.parts {
			t.Errorf("%d columns: turned %v, %d parts; want %v, %d", test.columns, turned, numbers, test.turned, test.parts)
		}
	}
}

func TestTallRowIsBroken(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{doc.Table{Columns: make([]doc.Column, 2), Rows: []doc.Row{{Cells: []doc.Cell{{Text: text("k")}, {Text: text(strings.Repeat(sentence, 90))}}}}}}}
	book, _ := page.Lay(d)
	check(t, book)
	if len(book.Pages) < 2 {
		t.Errorf("%d pages", len(book.Pages))
	}
	n := 0
	for _, pg := range book.Pages {
		for _, o := range pg.Ops {
			if o, ok := o.(page.Text); ok {
				n += strings.Count(o.Text, "barrows")
			}
		}
	}
	if n != 180 {
		t.Errorf("%d words of 180", n)
	}
}

// A footnote longer than the page goes on at the foot of the next ones.
func TestLongFootnote(t *testing.T) {
	d := &doc.Document{
		Blocks: []doc.Block{doc.Paragraph{Text: []doc.Inline{doc.Text{Text: "call"}, doc.FootnoteRef{N: 1}}}, doc.Paragraph{Text: text(strings.Repeat(sentence, 30))}},
		Notes:  [][]doc.Block{{doc.Paragraph{Text: text(strings.Repeat("NOTE "+sentence, 120))}}},
	}
	book, _ := page.Lay(d)
	check(t, book)
	n := 0
	for _, pg := range book.Pages {
		for _, o := range pg.Ops {
			if o, ok := o.(page.Text); ok {
				n += strings.Count(o.Text, "NOTE")
			}
		}
	}
	if n != 120 || len(book.Pages) < 3 {
		t.Errorf("%d sentences of 120 on %d pages", n, len(book.Pages))
	}
}

// The contents name the pages on which the headings stand.
func TestContents(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{doc.Contents{}}}
	for i := range 12 {
		d.Blocks = append(d.Blocks, doc.Heading{Level: 1 + i%2, ID: fmt.Sprintf("s%d", i), Number: fmt.Sprint(i), Text: text("section")},
			doc.Paragraph{Text: text(strings.Repeat(sentence, 13))})
	}
	book, _ := page.Lay(d)
	check(t, book)
	var want, got []string
	for i := range 12 {
		want = append(want, fmt.Sprint(book.Anchors[fmt.Sprintf("s%d", i)].Page+1))
	}
	var el *page.Element
	for _, o := range book.Pages[0].Ops {
		switch o := o.(type) {
		case page.Begin:
			el = o.Element
		case page.Text:
			if el.Role == page.Linked && el.Parent.Role == page.ContentsEntry && o.X > 500 {
				got = append(got, o.Text)
			}
		}
	}
	if !slices.Equal(got, want) || len(book.Outline) != 12 {
		t.Errorf("contents say %v, the headings stand on %v", got, want)
	}
}

// Relations and units are not torn at the end of a line, whatever the line before it.
func TestHeldTogether(t *testing.T) {
	for shift := range 60 {
		s := strings.Repeat("o", shift) + " the trend gave P = 0.002 at 4\u2009kg and more"
		d := &doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: text(strings.Repeat("word ", 14) + s)}}}
		book, _ := page.Lay(d)
		for _, o := range book.Pages[0].Ops {
			if o, ok := o.(page.Text); ok && o.Face.Family == face.Serif {
				line := strings.TrimSpace(o.Text)
				if strings.HasSuffix(line, "P") || strings.HasSuffix(line, "=") || strings.HasSuffix(line, "4") {
					t.Errorf("shift %d: a line ends with %q", shift, line)
				}
			}
		}
	}
}

func TestRightToLeft(t *testing.T) {
	tests := []struct{ in, want string }{
		{"abc שלום xyz", "abc םולש xyz"},
		{"שלום עולם", "םלוע םולש"},
		{"a שלום 12 עולם b", "a םלוע 12 םולש b"},
		{"(שלום)", "(םולש)"},
	}
	for _, test := range tests {
		book, _ := page.Lay(&doc.Document{Blocks: []doc.Block{doc.Paragraph{Text: text(test.in)}}})
		got := ""
		for _, o := range book.Pages[0].Ops {
			if o, ok := o.(page.Text); ok && o.Y < 100 {
				got += o.Text
			}
		}
		if strings.TrimSpace(got) != test.want {
			t.Errorf("%q is set as %q, want %q", test.in, got, test.want)
		}
	}
}

func TestDiagnostics(t *testing.T) {
	d := &doc.Document{Blocks: []doc.Block{
		doc.Paragraph{Text: text("漢 漢 字")},
		doc.Paragraph{Text: []doc.Inline{doc.Link{Dest: "#nowhere", Text: text("x")}}},
	}}
	_, list := page.Lay(d)
	var codes []string
	for _, d := range list {
		codes = append(codes, d.Code)
	}
	if got := strings.Join(codes, " "); got != "missing-glyph missing-glyph dead-link" {
		t.Error(got)
	}
}

func TestRandomDocuments(t *testing.T) {
	n := uint64(70)
	if testing.Short() {
		n = 60
	}
	for seed := range n {
		book, _ := page.Lay(pagetest.Random(seed))
		check(t, book)
		if t.Failed() {
			t.Fatalf("seed %d", seed)
		}
	}
}

func TestEmpty(t *testing.T) {
	for _, d := range []*doc.Document{
		{}, {Blocks: []doc.Block{doc.Table{}, doc.Figure{}, doc.List{}, doc.Aside{}, doc.Code{}, doc.Contents{}, doc.Heading{}, doc.Paragraph{}, doc.Quote{}}},
		{Notes: make([][]doc.Block, 3)},
	} {
		book, _ := page.Lay(d)
		check(t, book)
		if len(book.Pages) != 1 {
			t.Errorf("%d pages", len(book.Pages))
		}
	}
}

// Figures and small tables may wait for the next page, but figures keep their order,
// tables theirs, text its own, and none of them crosses a heading of the first level.
func TestOrderIsKept(t *testing.T) {
	for seed := range uint64(120) {
		r := rand.New(rand.NewPCG(seed, 2))
		d := &doc.Document{}
		section, figures, tables, paragraphs := 0, 0, 0, 0
		wantSection := map[string]int{}
		for range 40 {
			switch r.IntN(6) {
			case 0:
				section++
				level := 1 + r.IntN(3)
				d.Blocks = append(d.Blocks, doc.Heading{Level: level, ID: fmt.Sprint("s", section), Text: text(fmt.Sprintf("H%d section %d", level, section))})
			case 1:
				figures++
				d.Blocks = append(d.Blocks, doc.Figure{Number: fmt.Sprint(figures), Caption: text("figure"), Picture: pagetest.Curves(300, 80+r.Float64()*400)})
				wantSection[fmt.Sprintf("Figure\u00A0%d. ", figures)] = section
			case 2:
				tables++
				columns := 2
				if r.IntN(5) == 0 {
					columns = 18
				}
				tb := pagetest.Large(1+r.IntN(30), columns).Blocks[0].(doc.Table)
				tb.Number = fmt.Sprint(tables)
				d.Blocks = append(d.Blocks, tb)
				wantSection[fmt.Sprintf("Table\u00A0%d. ", tables)] = section
			default:
				paragraphs++
				d.Blocks = append(d.Blocks, doc.Paragraph{Text: text(fmt.Sprintf("paragraph%d ", paragraphs) + strings.Repeat(sentence, r.IntN(8)))})
			}
		}
		book, _ := page.Lay(d)
		check(t, book)
		last := map[string]int{}
		chapter, chapters := 0, map[int]int{} // section → the first level heading it stands under
		for _, b := range d.Blocks {
			if h, ok := b.(doc.Heading); ok {
				n := 0
				fmt.Sscanf(h.ID, "s%d", &n)
				if h.Level == 1 {
					chapter = n
				}
				chapters[n] = chapter
			}
		}
		chapter = 0
		for _, pg := range book.Pages {
			for _, o := range pg.Ops {
				o, ok := o.(page.Text)
				if !ok {
					continue
				}
				var kind string
				n := 0
				switch {
				case strings.HasPrefix(o.Text, "Figure\u00A0") && strings.HasSuffix(o.Text, ". "):
					kind = "figure"
					fmt.Sscanf(strings.TrimPrefix(o.Text, "Figure\u00A0"), "%d.", &n)
				case strings.HasPrefix(o.Text, "Table\u00A0") && strings.HasSuffix(o.Text, ". "):
					kind = "table"
					fmt.Sscanf(strings.TrimPrefix(o.Text, "Table\u00A0"), "%d.", &n)
				case strings.HasPrefix(o.Text, "paragraph"):
					kind = "text"
					fmt.Sscanf(o.Text, "paragraph%d", &n)
				case strings.HasPrefix(o.Text, "H"):
					level := 0
					if k, _ := fmt.Sscanf(o.Text, "H%d section %d", &level, &n); k == 2 {
						kind = "heading"
						chapter = chapters[n]
					}
				}
				if kind == "" {
					continue
				}
				if n != last[kind]+1 {
					t.Errorf("seed %d: %s %d comes after %d", seed, kind, n, last[kind])
				}
				last[kind] = n
				if s, ok := wantSection[o.Text]; ok && chapters[s] != chapter {
					t.Errorf("seed %d: %q of chapter %d stands in chapter %d", seed, o.Text, chapters[s], chapter)
				}
			}
		}
		if last["figure"] != figures || last["table"] != tables || last["text"] != paragraphs || last["heading"] != section {
			t.Errorf("seed %d: %v of %d figures, %d tables, %d paragraphs, %d sections", seed, last, figures, tables, paragraphs, section)
		}
	}
}
