package pdf_test

import (
	"io/fs"
	"os"
	"testing"

	"penwright/analysis"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/folder"
	"penwright/render"
	"penwright/render/doc"
	"penwright/templates"
)

// documents are the reports of the trials by every template.
func documents(t *testing.T) map[string]*doc.Document {
	t.Helper()
	demo, err := fs.Sub(templates.FS, "demo")
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]*doc.Document{}
	for _, x := range []struct {
		name  string
		files fs.FS
	}{
		{"demo", demo},
		{"split-plot", os.DirFS("../../testdata/trials/split-plot")},
		{"latin-square", os.DirFS("../../testdata/trials/latin-square")},
	} {
		tr, list := trial.Open(folder.FromFS(x.files))
		rs, more := analysis.Run(tr, result.Program{Name: "penwright", Version: "0"}, nil)
		if list.HasErrors() || more.HasErrors() {
			t.Fatalf("%s: %v %v", x.name, list, more)
		}
		for _, template := range render.Templates() {
			d, list := render.Document(tr, rs, render.Options{Template: template, Date: "2026-05-04"})
			if list.HasErrors() {
				t.Fatalf("%s, %s: %v", x.name, template, list)
			}
			out[x.name+" "+template] = d
		}
	}
	return out
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
