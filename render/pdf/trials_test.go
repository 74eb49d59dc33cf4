package pdf_test

import (
	"io/fs"
	"os"
	"path"
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

// opened is a trial with its results.
func opened(t testing.TB, name string) (*trial.Trial, *result.Results) {
	t.Helper()
	files, err := fs.Sub(templates.FS, "demo")
	if err != nil {
		t.Fatal(err)
	}
	if name != "demo" {
		files = os.DirFS("../../testdata/trials/" + name)
	}
	x, list := trial.Open(folder.FromFS(files))
	rs, more := analysis.Run(x, result.Program{Name: "penwright", Version: "0"}, nil)
	if list.HasErrors() || more.HasErrors() {
		t.Fatalf("%s: %v %v", name, list, more)
	}
	return x, rs
}

// documents are the reports of the trials by every template.
func documents(t *testing.T) map[string]*doc.Document {
	t.Helper()
	out := map[string]*doc.Document{}
	for _, name := range []string{"demo", "split-plot", "latin-square"} {
		x, rs := opened(t, name)
		for _, template := range render.Templates() {
			d, list := render.Document(x, rs, render.Options{Template: template, Date: "2026-05-04"})
			if list.HasErrors() {
				t.Fatalf("%s, %s: %v", name, template, list)
			}
			out[name+" "+template] = d
		}
	}
	return out
}

// extent counts the pages and figures of a document.
func extent(d *doc.Document) (pages, figures int) {
	book, _ := page.Lay(d)
	doc.Walk(d.Blocks, func(n any) {
		if f, ok := n.(doc.Figure); ok && f.Picture != nil {
			figures++
		}
	})
	return len(book.Pages), figures
}

// BenchmarkReport makes the demo's report as PDF and as HTML from its results.
func BenchmarkReport(b *testing.B) {
	x, rs := opened(b, "demo")
	for b.Loop() {
		if _, list, err := render.Report(x, rs, render.Options{Date: "2026-05-04", Only: []string{"pdf", "html"}, Workers: 1}); err != nil || list.HasErrors() {
			b.Fatal(list, err)
		}
	}
	d, _ := render.Document(x, rs, render.Options{Date: "2026-05-04"})
	pages, figures := extent(d)
	b.ReportMetric(float64(pages), "pages")
	b.ReportMetric(float64(figures), "figures")
}

// The reports of the trials, by every template on both papers: each clause holds, the
// structure says what the document says in its order, and links and bookmarks lead
// where the pages say.
func TestTrials(t *testing.T) {
	papers := []string{"A4", "Letter"}
	if testing.Short() {
		papers = papers[1:]
	}
	for name, d := range documents(t) {
		for _, d.Paper = range papers {
			t.Run(name+" "+d.Paper, func(t *testing.T) {
				says(t, conforms(t, write(t, d, attachments())), d)
			})
		}
	}
}

// Sheets to fill and the files of figures hold to the clauses too.
func TestSheetsAndFigures(t *testing.T) {
	for _, name := range []string{"demo", "split-plot", "latin-square"} {
		x, rs := opened(t, name)
		sheets, _, err := render.Sheets(x, render.SheetOptions{Date: "2026-05-04", Only: []string{"pdf"}})
		if err != nil {
			t.Fatal(err)
		}
		figures, list, err := render.Report(x, rs, render.Options{Date: "2026-05-04", Only: []string{"figures"}, Workers: 1})
		if err != nil || list.HasErrors() {
			t.Fatal(list, err)
		}
		n := 0
		for _, f := range append(sheets, figures...) {
			if path.Ext(f.Path) == ".pdf" {
				n++
				t.Run(name+" "+f.Path, func(t *testing.T) { conforms(t, f.Data) })
			}
		}
		if n < 4 {
			t.Errorf("%s: %d files", name, n)
		}
	}
}
