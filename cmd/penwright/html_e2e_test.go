//go:build e2e

package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"penwright/render"
	"penwright/render/doc"
	"penwright/render/html"
	"penwright/templates"
)

// modules is the folder of the checkers from the npm registry, which .ci/run installs.
func modules(t *testing.T) string {
	t.Helper()
	dir := os.Getenv("NODE_MODULES")
	if dir == "" {
		t.Fatal("NODE_MODULES must name a folder with puppeteer-core, axe-core, html-validate and vnu-jar, as .ci/run makes it")
	}
	return dir
}

// judged is what testdata/html/check.cjs says of a page.
type judged struct {
	File   string
	Faults []string
	Nodes  int
	Load   int // ms
	Jump   int // ms
	Find   struct{ All, Shown, Others int }
	Sorts  int // tables that were sorted
	Saves  int // tables that were saved
	Marks  int // whether marks were asked for their names
	Files  int // attachments
	Passes int // rules of axe that held
}

// inBrowser opens pages in a browser, as many at once as there are processors.
func inBrowser(t *testing.T, files []string, flags ...string) []judged {
	t.Helper()
	chromium, err := exec.LookPath("chromium")
	if err != nil {
		t.Fatal("chromium is not on PATH: apt-get install chromium")
	}
	node, err := exec.LookPath("node")
	if err != nil {
		t.Fatal("node is not on PATH: apt-get install nodejs")
	}
	out := make([]judged, len(files))
	faults := make([]error, len(files))
	next := make(chan int)
	var wg sync.WaitGroup
	for range min(runtime.NumCPU(), len(files)) {
		wg.Go(func() {
			for k := range next {
				args := slices.Concat([]string{"../../testdata/html/check.cjs", modules(t), chromium}, flags, []string{files[k]})
				cmd := exec.Command(node, args...)
				var stderr bytes.Buffer
				cmd.Stderr = &stderr
				data, err := cmd.Output()
				if err != nil {
					faults[k] = fmt.Errorf("%w\n%s", err, &stderr)
					continue
				}
				var list []judged
				if err := json.Unmarshal(data, &list); err != nil || len(list) != 1 {
					faults[k] = fmt.Errorf("%v: %.300s", err, data)
					continue
				}
				out[k] = list[0]
			}
		})
	}
	for k := range files {
		next <- k
	}
	close(next)
	wg.Wait()
	for k, err := range faults {
		if err != nil {
			t.Fatalf("%s: %v", filepath.Base(files[k]), err)
		}
	}
	return out
}

// complaints are the lines a checker writes. One that fails without a word is broken.
func complaints(t *testing.T, cmd *exec.Cmd) []string {
	t.Helper()
	out, err := cmd.CombinedOutput()
	var lines []string
	for line := range strings.Lines(string(out)) {
		if line = strings.TrimSpace(line); line != "" {
			lines = append(lines, line)
		}
	}
	var exit *exec.ExitError
	if err != nil && (!errors.As(err, &exit) || len(lines) == 0) {
		t.Fatalf("%s: %v\n%s", cmd.Path, err, out)
	}
	if err == nil {
		return nil
	}
	return lines
}

// validate is what html-validate says of pages, with its recommended rules.
func validate(t *testing.T, files ...string) []string {
	args := append([]string{filepath.Join(modules(t), "html-validate/bin/html-validate.mjs"), "--config", "../../testdata/html/htmlvalidate.json", "--formatter", "text"}, files...)
	return complaints(t, exec.Command("node", args...))
}

// nu is what the Nu checker says of pages.
func nu(t *testing.T, files ...string) []string {
	args := append([]string{"-jar", filepath.Join(modules(t), "vnu-jar/build/dist/vnu.jar"), "--errors-only", "--format", "gnu"}, files...)
	return complaints(t, exec.Command("java", args...))
}

// demo writes the trial of the Hollowmere farm, its files changed.
func demo(t *testing.T, dir string, change map[string]func(string) string) {
	t.Helper()
	from, err := fs.Sub(templates.FS, "demo")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.CopyFS(dir, from); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"protocol.toml", "data.csv", "diets.csv"} {
		f := change[name]
		if f == nil {
			continue
		}
		file := filepath.Join(dir, name)
		data, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		text := f(string(data))
		if text == string(data) {
			t.Fatalf("%s is not changed", name)
		}
		if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// measured adds n responses to the trial of the Hollowmere farm, their values drawn anew
// in the same way each time.
func measured(t *testing.T, dir string, n int) {
	t.Helper()
	demo(t, dir, map[string]func(string) string{
		"protocol.toml": func(text string) string {
			var b strings.Builder
			for k := range n {
				fmt.Fprintf(&b, "[[response]]\nname = \"m%03d\"\nlabel = \"Metabolite %d\"\nunit = \"mmol/l\"\nrole = \"secondary\"\nkind = \"continuous\"\nhow = \"assay of pooled plasma\"\nrange = [0, 100]\ndecimals = 1\nrecorded_on = \"pen\"\n\n", k, k)
			}
			return strings.Replace(text, "[[covariate]]\n", b.String()+"[[covariate]]\n", 1)
		},
		"data.csv": func(text string) string {
			random := rand.New(rand.NewPCG(4, uint64(n)))
			var b strings.Builder
			for i, line := range strings.Split(strings.TrimSpace(text), "\n") {
				b.WriteString(line)
				for k := range n {
					if i == 0 {
						fmt.Fprintf(&b, ",m%03d", k)
					} else {
						fmt.Fprintf(&b, ",%.1f", 20+float64(k%7)+2*random.NormFloat64())
					}
				}
				b.WriteByte('\n')
			}
			return b.String()
		},
	})
}

// Texts that would be something else where a page took them for its own.
var hostile = []string{
	`<script>alert(1)</script>`, `"><img src=x onerror=alert(2)>`, `'" onmouseover='alert(3)' x='`, `]]></style><svg onload=alert(4)>`, `<!-- {{.Secret}} -->`,
	`=HYPERLINK("http://127.0.0.1:9/x")`, `&lt;b&gt; &amp;`, `[a](javascript:alert(5)) **b** | c |`, "\u0627\u202eabc\u200f 飼料", `x` + strings.Repeat("y", 400),
}

// hostileTrial is a trial that has such a text wherever its author is free.
func hostileTrial(t *testing.T, dir string) {
	t.Helper()
	k := 0
	quoted := strings.NewReplacer(`\`, `\\`, `"`, `\"`)
	next := func() string {
		k++
		return quoted.Replace(hostile[k%len(hostile)])
	}
	demo(t, dir, map[string]func(string) string{
		"protocol.toml": func(text string) string {
			lines := strings.Split(text, "\n")
			free := []string{"title", "objective", "label", "how", "instrument", "reason", "what", "effect", "cause", "action", "caption", "breed", "source", "health", "bedding", "feed", "water",
				"fate", "residues", "site", "funding", "interests", "data_access", "registration", "name = \"weighing\"", "assumptions", "supplier", "storage", "batch", "location", "basis = \"initial", "affiliation", "species_rationale"}
			for i, line := range lines {
				for _, key := range free {
					rest, ok := strings.CutPrefix(line, key)
					if !ok || !strings.HasSuffix(line, `"`) || !strings.Contains(rest, `"`) {
						continue
					}
					if at := strings.Index(line, `"`); at > 0 {
						lines[i] = line[:at] + `"` + next() + line[at+1:]
					}
					break
				}
			}
			return strings.Join(lines, "\n")
		},
		"diets.csv": func(text string) string {
			quote := func(s string) string {
				return `"` + strings.ReplaceAll(s, `"`, `""`) + `"`
			}
			first, rest, _ := strings.Cut(text, "\n")
			cells := strings.Count(first, ",")
			for _, s := range append(hostile, strings.Repeat("many words in one cell, ", 220), strings.Repeat("w", 5000)) {
				rest += quote(s) + strings.Repeat(","+quote(s), cells) + "\n"
			}
			return first + "\n" + rest
		},
	})
}

// hostileDocument has such a text in every place of a document.
func hostileDocument(t *testing.T, file string) {
	t.Helper()
	d := &doc.Document{Lang: "en", Title: strings.Join(hostile, " "), Paper: "Letter", Code: hostile[0], ShortTitle: hostile[1], Status: hostile[2], Author: hostile[3], Date: hostile[4], Fingerprint: hostile[9]}
	head := []string{"nul \x00", "cdata", "rtl", "word"}
	for i, s := range append(slices.Clone(hostile), "a\x00b\x01c\x1f", strings.Repeat("z", 5000)) {
		words := []doc.Inline{doc.Text{Text: s}}
		d.Blocks = append(d.Blocks,
			doc.Heading{Level: 1, Text: words}, doc.Heading{Level: 2, Text: words}, doc.Paragraph{Text: []doc.Inline{doc.CodeSpan{Text: s}, doc.Text{Text: " "}, doc.Link{Dest: "https://example.org/" + s, Text: words}, doc.FootnoteRef{N: 1}}},
			doc.Aside{Kind: s, Title: words, Blocks: []doc.Block{doc.Paragraph{Text: words}}}, doc.Quote{Blocks: []doc.Block{doc.Paragraph{Text: words}}}, doc.Code{Text: s},
			doc.List{Tight: true, Items: [][]doc.Block{{doc.Paragraph{Text: words}}}},
		)
		table := doc.Table{Caption: words, Sortable: true, Columns: []doc.Column{{Key: true}, {Align: doc.Decimal}, {Align: doc.Right}, {}}, Notes: [][]doc.Inline{words}}
		var cells []doc.Cell
		for _, h := range head {
			cells = append(cells, doc.Cell{Text: []doc.Inline{doc.Text{Text: h + " " + s}}})
		}
		table.Head = [][]doc.Cell{cells}
		for k := range 5 {
			n := doc.Cell{Text: []doc.Inline{doc.Text{Text: []string{"−1.5", "< 0.001", "0.001", "12\u2009345.6", "–"}[k]}}}
			table.Rows = append(table.Rows, doc.Row{Cells: []doc.Cell{{Text: words}, n, {Text: []doc.Inline{doc.Text{Text: []string{"5", "−3", "20 %", "", "1.5e3"}[k]}}}, {Text: []doc.Inline{doc.Text{Text: hostile[(i+k)%len(hostile)]}}}}})
		}
		d.Blocks = append(d.Blocks, table)
		ink := doc.Colour{A: 255, Role: doc.Ink}
		picture := &doc.Picture{Width: 300, Height: 60}
		for k, name := range hostile {
			x := 20 + 25*float64(k)
			picture.Ops = append(picture.Ops, doc.Mark{Name: name}, doc.Fill{Colour: ink, Path: []doc.Segment{{X: x, Y: 20}, {Kind: doc.LineTo, X: x + 6, Y: 20}, {Kind: doc.LineTo, X: x + 6, Y: 26}, {Kind: doc.Close}}})
		}
		picture.Ops = append(picture.Ops, doc.Mark{}, doc.Label{X: 10, Y: 50, Size: 8, Text: s, Colour: ink})
		d.Blocks = append(d.Blocks, doc.Figure{Caption: words, Alt: s, Picture: picture})
	}
	d.Notes = [][]doc.Block{{doc.Paragraph{Text: []doc.Inline{doc.Text{Text: hostile[0]}}}}}
	if list := doc.Number(d); list.HasErrors() {
		t.Fatal(list)
	}
	style, err := fs.ReadFile(templates.FS, "style.css")
	if err != nil {
		t.Fatal(err)
	}
	var files []html.Attachment
	for i := range 3 {
		files = append(files, html.Attachment{Name: fmt.Sprintf("a <b> & '%d'.csv", i), MIME: "text/csv", Data: []byte("a,b\n")})
	}
	var b bytes.Buffer
	if err := html.Write(&b, d, files, html.Options{Style: string(style)}); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(file, b.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
}

// Every page that a reader may get passes axe in light and dark, wide and narrow, the
// Nu checker and html-validate; asks for nothing, runs nothing that is not its own,
// overflows nowhere, prints, and can be used by mouse and keyboard.
func TestPagesAreSound(t *testing.T) {
	dir := t.TempDir()
	var files []string
	keep := func(trial, name string, args ...string) {
		t.Helper()
		out := filepath.Join(dir, name)
		spawn(t, nil, slices.Concat([]string{"report", trial, "--only", "html", "--out", out}, args)...)
		files = append(files, filepath.Join(out, "report.html"))
	}
	trials := map[string]string{}
	names := []string{"hollowmere", "hostile", "split-plot", "latin-square"}
	for _, name := range names {
		trials[name] = filepath.Join(dir, "trials", name)
		switch name {
		case "hollowmere":
			demo(t, trials[name], nil)
		case "hostile":
			hostileTrial(t, trials[name])
		default:
			if err := os.CopyFS(trials[name], os.DirFS(filepath.Join("../../testdata/trials", name))); err != nil {
				t.Fatal(err)
			}
		}
	}
	for _, template := range render.Templates() {
		for _, name := range names {
			keep(trials[name], name+"-"+template, "--template", template)
		}
	}
	forty := filepath.Join(dir, "trials", "forty")
	measured(t, forty, 37)
	keep(forty, "forty-audit")
	document := filepath.Join(dir, "document.html")
	hostileDocument(t, document)
	files = append(files, document)

	for _, line := range validate(t, files...) {
		t.Error(line)
	}
	for _, line := range nu(t, files...) {
		t.Errorf("%.400s", line)
	}
	sorts, saves, marks := 0, 0, 0
	for _, j := range inBrowser(t, files) {
		name := strings.TrimPrefix(j.File, dir+"/")
		for _, fault := range j.Faults {
			t.Errorf("%s: %s", name, fault)
		}
		if j.Passes < 60 {
			t.Errorf("%s: axe looked at %d rules only", name, j.Passes)
		}
		if j.Files == 0 {
			t.Errorf("%s: no file can be had without scripts", name)
		}
		sorts, saves, marks = sorts+j.Sorts, saves+j.Saves, marks+j.Marks
		if info := tool(t, "poppler-utils", "pdfinfo", strings.TrimSuffix(j.File, ".html")+"-printed.pdf"); !strings.Contains(info, map[bool]string{true: "letter", false: "A4"}[j.File == document]) {
			t.Errorf("%s is printed on another paper:\n%s", name, info)
		}
		text := tool(t, "poppler-utils", "pdftotext", "-layout", strings.TrimSuffix(j.File, ".html")+"-printed.pdf", "-")
		for _, not := range []string{"Save as CSV", "Skip to the text"} {
			if strings.Contains(text, not) {
				t.Errorf("%s prints %q", name, not)
			}
		}
		if !strings.Contains(text, "page 1 of ") {
			t.Errorf("%s prints no page numbers", name)
		}
		t.Logf("%s: %d nodes, %d ms, %d tables sorted, %d saved", name, j.Nodes, j.Load, j.Sorts, j.Saves)
	}
	if sorts < 20 || saves < 100 || marks < 8 {
		t.Errorf("only %d tables were sorted, %d saved, %d figures asked", sorts, saves, marks)
	}
}

// Each checker sees what it is there for.
func TestCheckersSeeFaults(t *testing.T) {
	dir := t.TempDir()
	trial := filepath.Join(dir, "trial")
	demo(t, trial, nil)
	spawn(t, nil, "report", trial, "--only", "html", "--template", "plan")
	good, err := os.ReadFile(filepath.Join(trial, "report/report.html"))
	if err != nil {
		t.Fatal(err)
	}
	spawn(t, nil, "report", trial, "--only", "html", "--template", "audit") // a plan has no numbers to sort
	long, err := os.ReadFile(filepath.Join(trial, "report/report.html"))
	if err != nil {
		t.Fatal(err)
	}
	spoils := []struct{ name, from, to, fault string }{
		{"lang", `<html lang="en">`, `<html>`, "html-has-lang"},
		{"levels", `</header>`, `</header><h5>Deep</h5>`, "heading-order"},
		{"contrast", `--ink: #1c2126`, `--ink: #bbbbbb`, "color-contrast"},
		{"dark", `--ink: #e4e2dd`, `--ink: #33373b`, "axe, dark"},
		{"wide", `<main id="x_main">`, `<main id="x_main"><p class="kicker"><b>` + strings.Repeat("w", 900) + `</b></p>`, "pixels wider"},
		{"request", `<main id="x_main">`, `<main id="x_main"><img alt="x" src="http://127.0.0.1:9/x.png">`, "request: http://127.0.0.1:9/x.png"},
		{"dialog", `"use strict";`, `alert("boo");`, "dialog: boo"},
		{"error", `"use strict";`, `undefinedName();`, "undefinedName"},
		{"sort", `x.value - y.value`, `y.value - x.value`, "not ascending"},
		{"csv", `"'" + s : s`, `s : s`, "computes"},
	}
	var files []string
	for _, s := range spoils {
		of := string(good)
		if s.name == "sort" {
			of = string(long)
		}
		text := strings.ReplaceAll(of, s.from, s.to)
		if text == of {
			t.Fatalf("%s: nothing to spoil", s.name)
		}
		if s.name == "wide" {
			text = strings.Replace(text, "overflow-wrap: break-word;", "", 1)
		}
		if s.name == "csv" {
			text = strings.ReplaceAll(text, "</tbody>", "<tr><td>=1+1</td></tr></tbody>")
		}
		// The policy would stop what is spoiled in style and script, which is right but not asked here.
		before, rest, _ := strings.Cut(text, `<meta http-equiv="Content-Security-Policy"`)
		_, rest, _ = strings.Cut(rest, ">")
		file := filepath.Join(dir, s.name+".html")
		if err := os.WriteFile(file, []byte(before+rest), 0o644); err != nil {
			t.Fatal(err)
		}
		files = append(files, file)
	}
	for i, j := range inBrowser(t, files) {
		if all := strings.Join(j.Faults, "\n"); !strings.Contains(all, spoils[i].fault) {
			t.Errorf("%s: %q is not seen among\n%s", spoils[i].name, spoils[i].fault, all)
		}
	}
	// With its policy a page runs nothing that was put into it, and says so.
	file := filepath.Join(dir, "policy.html")
	if err := os.WriteFile(file, bytes.Replace(good, []byte(`<main id="x_main">`), []byte(`<main id="x_main"><script>alert("in")</script>`), 1), 0o644); err != nil {
		t.Fatal(err)
	}
	all := strings.Join(inBrowser(t, []string{file}, "--measure")[0].Faults, "\n")
	if strings.Contains(all, "dialog") || !strings.Contains(all, "Content Security Policy") {
		t.Errorf("a script that was put into a page: %s", all)
	}

	broken := filepath.Join(dir, "broken.html")
	if err := os.WriteFile(broken, bytes.Replace(good, []byte("<h2 "), []byte(`<h2 align="left" align="left" style="color: red" `), 1), 0o644); err != nil {
		t.Fatal(err)
	}
	if lines := validate(t, broken); len(lines) == 0 {
		t.Error("html-validate passes a spoiled page")
	}
	if lines := nu(t, broken); len(lines) == 0 {
		t.Error("the Nu checker passes a spoiled page")
	}
}

// A trial of a hundred responses stays a page that can be used.
func TestHundredResponses(t *testing.T) {
	dir := t.TempDir()
	measured(t, dir, 97)
	spawn(t, nil, "report", dir, "--only", "html")
	file := filepath.Join(dir, "report/report.html")
	info, err := os.Stat(file)
	if err != nil {
		t.Fatal(err)
	}
	j := inBrowser(t, []string{file}, "--measure")[0]
	t.Logf("%.1f MB, %d nodes, opened in %d ms, jumped to the end in %d ms", float64(info.Size())/1e6, j.Nodes, j.Load, j.Jump)
	if info.Size() > 15e6 {
		t.Errorf("the page takes %d bytes", info.Size())
	}
	if j.Nodes > 200_000 {
		t.Errorf("the page has %d nodes", j.Nodes)
	}
	for _, fault := range j.Faults {
		t.Error(fault)
	}
	if j.Find.All < 200 || j.Find.Shown == 0 || j.Find.Shown+j.Find.Others > 12 {
		t.Errorf("searching %d entries of the contents shows %d, and %d beside", j.Find.All, j.Find.Shown, j.Find.Others)
	}
	if j.Jump > 2000 && load() < 0.75*float64(runtime.NumCPU()) {
		t.Errorf("a jump to the end takes %d ms", j.Jump)
	}
	if limit := 10 * time.Second; time.Duration(j.Load)*time.Millisecond > limit && load() < 0.75*float64(runtime.NumCPU()) {
		t.Errorf("the page opens in %d ms", j.Load)
	}
}
