//go:build e2e

package render

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"penwright/render/doc"
)

// tool runs a program in a folder, which must be there.
func tool(t *testing.T, dir, name string, args ...string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		t.Fatalf("%s is not on PATH: apt-get install texlive-latex-recommended lmodern libreoffice-writer-nogui poppler-utils", name)
	}
	c := exec.Command(path, args...)
	c.Dir = dir
	out, err := c.CombinedOutput()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s", name, args, err, last(string(out), 3000))
	}
	return string(out)
}

func last(s string, n int) string { return s[max(len(s)-n, 0):] }

func put(t *testing.T, dir string, files []File) {
	t.Helper()
	for _, f := range files {
		path := filepath.Join(dir, filepath.FromSlash(f.Path))
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, f.Data, 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// documents are the trials in every template, composed.
func documents(t *testing.T, do func(t *testing.T, d *doc.Document, files []File)) {
	for name, from := range trials(t) {
		for _, template := range Templates() {
			t.Run(name+" "+template, func(t *testing.T) {
				x, rs, _ := opened(t, from)
				opt := fixed
				opt.Template, opt.Only = template, []string{"tex", "docx", "md"}
				d, list := Document(x, rs, opt)
				if list.HasErrors() {
					t.Fatal(list)
				}
				files, list, err := Report(x, rs, opt)
				if err != nil || list.HasErrors() {
					t.Fatal(list, err)
				}
				do(t, d, files)
			})
		}
	}
}

var overfull = regexp.MustCompile(`Overfull \\hbox \(([0-9.]+)pt too wide\)[^\n]*`)

// The reports compile, no line juts out, and LaTeX's pages say what the documents say.
func TestLaTeXCompiles(t *testing.T) {
	documents(t, func(t *testing.T, d *doc.Document, files []File) {
		dir := t.TempDir()
		put(t, dir, files)
		latex := func(job, source string) string {
			tool(t, dir, "pdflatex", "-halt-on-error", "-interaction=nonstopmode", "-no-shell-escape", "-jobname="+job, source)
			log, err := os.ReadFile(filepath.Join(dir, job+".log"))
			if err != nil {
				t.Fatal(err)
			}
			return string(log)
		}
		latex("report", "report.tex")
		log := latex("report", "report.tex")
		for _, line := range strings.Split(log, "\n") {
			for _, bad := range []string{"undefined", "multiply defined", "Float too large", "Missing character", "Font Warning"} {
				if strings.Contains(line, bad) {
					t.Errorf("LaTeX says: %s", line)
				}
			}
		}
		for _, m := range overfull.FindAllStringSubmatch(log, -1) {
			if v, err := strconv.ParseFloat(m[1], 64); err != nil || v > 3 {
				t.Errorf("LaTeX says: %s", m[0])
			}
		}
		// Hyphens that LaTeX puts in would have to be told from the text's own.
		for _, kind := range []string{"aux", "toc"} {
			data, err := os.ReadFile(filepath.Join(dir, "report."+kind))
			if err == nil {
				put(t, dir, []File{{Path: "plain." + kind, Data: data}})
			}
		}
		latex("plain", `\AtBeginDocument{\hyphenpenalty=10000\exhyphenpenalty=10000}\input{report.tex}`)
		text := bare(tool(t, dir, "pdftotext", "plain.pdf", "-"))
		windows, lost := 0, 0
		for _, s := range said(d.Blocks) {
			words := strings.Fields(s.text)
			for _, w := range words {
				if w = bare(w); len([]rune(w)) > 40 || s.cell && len([]rune(w)) > 20 {
					continue // broken over lines
				}
				if !strings.Contains(text, w) {
					t.Errorf("%q of %q is not on the pages", w, s.text)
				}
			}
			if s.cell {
				continue // its lines stand beside those of others
			}
			const size = 3
			for i := 0; i+size <= len(words); i++ {
				windows++
				if !strings.Contains(text, bare(strings.Join(words[i:i+size], ""))) {
					lost++
				}
			}
		}
		// Pages and notes come between some.
		if lost*50 > windows {
			t.Errorf("%d of %d runs of three words are not on the pages", lost, windows)
		}
	})
}

// A word processor opens the reports and reads out what the documents say, in order.
func TestWordProcessorOpens(t *testing.T) {
	// It takes seconds to start: it is started once.
	dir := t.TempDir()
	args := []string{"--headless", "-env:UserInstallation=file://" + t.TempDir(), "--convert-to", "txt:Text (encoded):UTF8", "--outdir", dir}
	var all []*doc.Document
	documents(t, func(t *testing.T, d *doc.Document, files []File) {
		name := fmt.Sprintf("%d.docx", len(all))
		all = append(all, d)
		for _, f := range files {
			if f.Path == "report.docx" {
				put(t, dir, []File{{Path: name, Data: f.Data}})
			}
		}
		args = append(args, name)
	})
	tool(t, dir, "soffice", args...)
	for i, d := range all {
		raw, err := os.ReadFile(filepath.Join(dir, fmt.Sprintf("%d.txt", i)))
		if err != nil {
			t.Fatal(err)
		}
		text := bare(string(bytes.TrimPrefix(raw, []byte("\uFEFF"))))
		if !strings.Contains(text, bare(d.Title)) {
			t.Errorf("no title %q", d.Title)
		}
		at := 0
		for _, s := range said(d.Blocks) {
			want := bare(s.text)
			i := strings.Index(text[at:], want)
			if i < 0 {
				t.Fatalf("after %q comes not %q but %q", last(text[:at], 60), s.text, text[at:min(at+200, len(text))])
			}
			at += i + len(want)
		}
		// What is numbered is numbered as the document says, by the word processor.
		lines := strings.Split(string(raw), "\n")
		found := func(want string) bool {
			for _, l := range lines {
				if strings.HasPrefix(bare(l), bare(want)) {
					return true
				}
			}
			return false
		}
		doc.Walk(d.Blocks, func(n any) {
			want := ""
			switch x := n.(type) {
			case doc.Heading:
				want = x.Number + " " + doc.Plain(x.Text)
			case doc.Table:
				if x.Number != "" {
					want = fmt.Sprintf("Table %s. %s", x.Number, doc.Plain(x.Caption))
				}
			case doc.Figure:
				want = fmt.Sprintf("Figure %s. %s", x.Number, doc.Plain(x.Caption))
			}
			if want != "" && !found(want) {
				t.Errorf("no line %q", want)
			}
		})
	}
}
