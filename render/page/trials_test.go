package page_test

import (
	"io/fs"
	"os"
	"slices"
	"testing"

	"penwright/analysis"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/folder"
	"penwright/render"
	"penwright/render/doc"
	"penwright/render/page"
	"penwright/templates"
)

// reports are the documents of the trials that the project keeps, by every template.
func reports(t *testing.T) map[string]*doc.Document {
	t.Helper()
	demo, err := fs.Sub(templates.FS, "demo")
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]*doc.Document{}
	for name, from := range map[string]fs.FS{
		"demo":         demo,
		"split-plot":   os.DirFS("../../testdata/trials/split-plot"),
		"latin-square": os.DirFS("../../testdata/trials/latin-square"),
	} {
		x, list := trial.Open(folder.FromFS(from))
		if list.HasErrors() {
			t.Fatalf("%s: %v", name, list)
		}
		rs, _ := analysis.Run(x, result.Program{Name: "penwright", Version: "0"}, nil)
		for _, template := range slices.Concat(render.Templates(), []string{"analysis"}) {
			d, list := render.Document(x, rs, render.Options{Date: "2026-05-04", Go: "go1", Arch: "any", Template: template})
			if list.HasErrors() {
				t.Fatalf("%s by %s: %v", name, template, list)
			}
			out[name+" "+template] = d
		}
	}
	return out
}

// Every page of the trials' reports, on either paper and wherever the pages happen to
// end, is set as the rules of the page want it.
func TestTrials(t *testing.T) {
	all := reports(t)
	names := make([]string, 0, len(all))
	for name := range all {
		names = append(names, name)
	}
	slices.Sort(names)
	even, ragged := 0, 0
	shifts := 3
	if testing.Short() {
		shifts = 1
	}
	for _, name := range names {
		for _, paper := range []string{"A4", "Letter"} {
			t.Run(name+" "+paper, func(t *testing.T) {
				d := *all[name]
				d.Paper = paper
				book, list := page.Lay(&d)
				for _, x := range list {
					t.Errorf("%s: %s", x.Code, x.Message)
				}
				check(t, book)
				breaks(t, book)
				for shift := range shifts {
					moved := d
					moved.Blocks = nil
					for range 2*shift + 1 {
						moved.Blocks = append(moved.Blocks, doc.Paragraph{Text: text("filler")})
					}
					moved.Blocks = append(moved.Blocks, d.Blocks...)
					book, _ := page.Lay(&moved)
					breaks(t, book)
				}
				lines, uneven := justifiedLines(book)
				loose := 0.0
				for i := range book.Pages {
					loose += 1 - fill(book.Pages[i])
				}
				t.Logf("%d pages, %.0f %% white at their feet; %d lines justified, %d lines in paragraphs that are not", len(book.Pages), 100*loose/float64(len(book.Pages)), lines, uneven)
				for i := range book.Pages {
					if f := fill(book.Pages[i]); f < 0.75 {
						t.Logf("page %d is filled to %.0f %%", i+1, 100*f)
					}
				}
				even, ragged = even+lines, ragged+uneven
			})
		}
	}
	// Where short paragraphs allow no even spaces, they are ragged; that is to stay rare.
	if ragged*8 > even+ragged {
		t.Errorf("%d lines of %d stand in ragged paragraphs", ragged, even+ragged)
	}
}
