// Package render makes the report of a trial: it composes a template into a document
// and hands that to the writers. A report is a function of the trial's files, its
// results and the few options that ride inside it as report.json; nothing else
// influences a page.
package render

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strings"
	"sync"
	"time"

	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/html"
	"penwright/render/md"
	"penwright/render/pdf"
	"penwright/render/table"
	"penwright/templates"
)

// Options are what a report depends on beside the trial and its results.
type Options struct {
	Template string   // built-in name or a file of the trial; empty: as the protocol says
	Date     string   // ISO 8601 date that the report bears; empty: none
	Go       string   // version of the toolchain
	Arch     string   // operating system and processor
	Only     []string // outputs wanted, of Outputs; nil: those the template is for
	Workers  int      // jobs done side by side; it changes no byte
}

// What rides in a report beside the files of the trial.
const (
	aboutFile   = "report.json"
	resultsFile = "results.json"
)

// File is a file of the output folder.
type File struct {
	Path string
	Data []byte
}

// about is report.json: what a report depends on beside the files of the trial.
type about struct {
	Format   int            `json:"format"`
	Program  result.Program `json:"program"`
	Go       string         `json:"go"`
	Arch     string         `json:"arch"`
	Date     string         `json:"date"`
	Template string         `json:"template"`
	Paper    string         `json:"paper"`
	Outputs  []string       `json:"outputs"`
	Files    []result.Input `json:"files"`
}

// builder composes one report.
type builder struct {
	pictures
	options     Options
	fingerprint string
	list        diag.List
	author                  // what the author's words need and leave behind
	checklists  []checklist // whose places are found when all is numbered
}

// Report makes the report of a trial. The list tells of faults of templates, texts and
// characters; the files are those asked for, and nil when the list holds an error.
func Report(t *trial.Trial, rs *result.Results, opt Options) ([]File, diag.List, error) {
	d, list := Document(t, rs, opt)
	if list.HasErrors() {
		return nil, list, nil
	}
	only, more := wanted(t, d, opt)
	opt.Only = only
	list = append(list, more...)
	for _, f := range t.Files {
		if f.Path == aboutFile || f.Path == resultsFile {
			list.Add(diag.Diagnostic{Pos: diag.Pos{File: f.Path}, Severity: diag.Error, Code: "reserved-file",
				Message: "a file of the trial has a name that the report gives to what rides inside it", Hint: "rename it, and name it so in the protocol"})
		}
	}
	if list.HasErrors() {
		return nil, list, nil
	}
	attached, err := attachments(t, rs, opt)
	if err != nil {
		return nil, list, err
	}
	done := carryOut(jobs(d, rs, opt, attached), opt.Workers)
	var out []File
	for _, x := range done {
		list = append(list, x.list...)
		if x.err != nil {
			return nil, list, x.err
		}
		out = append(out, x.files...)
	}
	return out, list, nil
}

// job makes some files of a report. Jobs share nothing that they change, so that any
// number of them may run side by side; their results are merged in their order.
type job func() ([]File, diag.List, error)

// outcome is what a job gave.
type outcome struct {
	files []File
	list  diag.List
	err   error
}

// carryOut does jobs with so many workers, and gives the outcomes in the order of the
// jobs. A panic in a job is one of the caller, who alone can tell the user.
func carryOut(jobs []job, workers int) []outcome {
	done := make([]outcome, len(jobs))
	panics := make([]any, len(jobs))
	next := make(chan int)
	var wg sync.WaitGroup
	for range max(1, workers) {
		wg.Go(func() {
			for k := range next {
				func() {
					defer func() { panics[k] = recover() }()
					done[k].files, done[k].list, done[k].err = jobs[k]()
				}()
			}
		})
	}
	for k := range jobs {
		next <- k
	}
	close(next)
	wg.Wait()
	for _, x := range panics {
		if x != nil {
			panic(x)
		}
	}
	return done
}

// jobs lists what is wanted, the longest first.
func jobs(d *doc.Document, rs *result.Results, opt Options, attached []attached) []job {
	want := func(kind string) bool { return slices.Contains(opt.Only, kind) }
	about := pdf.Options{Lang: d.Lang, Date: moment(opt.Date), Producer: rs.Program.Name + " " + rs.Program.Version, Subject: "Report of trial " + rs.Trial.Code}
	one := func(path string, b *bytes.Buffer, list diag.List, err error) ([]File, diag.List, error) {
		return []File{{Path: path, Data: b.Bytes()}}, list, err
	}
	var out []job
	if want("pdf") {
		out = append(out, func() ([]File, diag.List, error) {
			var files []pdf.Attachment
			for _, a := range attached {
				files = append(files, pdf.Attachment{Name: a.path, MIME: a.mime, Relationship: a.relationship, Description: a.what, Data: a.data})
			}
			var b bytes.Buffer
			list, err := pdf.Write(&b, d, files, about)
			return one("report.pdf", &b, list, err)
		})
	}
	if want("html") {
		out = append(out, func() ([]File, diag.List, error) {
			var files []html.Attachment
			for _, a := range attached {
				files = append(files, html.Attachment{Name: a.path, MIME: a.mime, Data: a.data})
			}
			style, err := fs.ReadFile(templates.FS, "style.css")
			if err != nil {
				return nil, nil, fmt.Errorf("style sheet: %w", err)
			}
			var b bytes.Buffer
			return one("report.html", &b, nil, html.Write(&b, d, files, html.Options{Style: string(style)}))
		})
	}
	if want("md") {
		out = append(out, func() ([]File, diag.List, error) {
			var b bytes.Buffer
			return one("report.md", &b, nil, md.Write(&b, d))
		})
	}
	if want("json") {
		out = append(out, func() ([]File, diag.List, error) {
			var b bytes.Buffer
			return one("results.json", &b, nil, rs.Write(&b))
		})
	}
	if want("tables") {
		out = append(out, func() ([]File, diag.List, error) { return csvFiles(rs), nil, nil })
	}
	// Markdown and LaTeX refer to the files of figures.
	if screen, print := want("figures") || want("md"), want("figures") || want("tex"); screen || print {
		out = append(out, func() ([]File, diag.List, error) { return figures(d, about, screen, print) })
	}
	if want("tex") {
		out = append(out, func() ([]File, diag.List, error) { return texFiles(d) })
	}
	if want("docx") {
		out = append(out, func() ([]File, diag.List, error) { return docxFile(d, about) })
	}
	return out
}

// Document composes the report as a numbered document.
func Document(t *trial.Trial, rs *result.Results, opt Options) (*doc.Document, diag.List) {
	b := &builder{pictures: pictures{trial: t, rs: rs}, options: opt, fingerprint: Fingerprint(rs.Inputs)}
	sources, main, list := b.sources()
	if list.HasErrors() {
		return nil, list
	}
	text, more := b.compose(sources, main)
	list = append(append(list, b.list...), more...)
	p := t.Protocol
	var authors []string
	for _, x := range p.Persons {
		authors = append(authors, x.Name)
	}
	d := &doc.Document{
		Lang: "en", Title: p.Trial.Title, ShortTitle: p.Trial.Title, Code: p.Trial.Code, Status: rs.Trial.Status,
		Author: strings.Join(authors, ", "), Date: opt.Date, Fingerprint: b.fingerprint, Paper: p.Report.Paper,
		Blocks: withoutMissing(b.settled(tidy(text.Blocks))), Notes: text.Notes,
	}
	list = append(list, doc.Number(d)...)
	b.cover(d)
	return d, list
}

// Templates names the built-in templates of reports.
func Templates() []string { return []string{"audit", "chapter", "plan"} }

// sources lists the built-in parts and the template wanted, and names it.
func (b *builder) sources() ([]compose.Source, string, diag.List) {
	var list diag.List
	name := b.options.Template
	if name == "" {
		name = b.trial.Protocol.Report.Template
	}
	if name == "" {
		name = "audit"
	}
	var out []compose.Source
	parts, err := fs.Glob(templates.FS, "parts/*.md")
	if err != nil {
		panic("render: bad pattern of the built-in parts")
	}
	for _, file := range parts {
		data, err := fs.ReadFile(templates.FS, file)
		if err != nil {
			panic("render: a built-in part cannot be read")
		}
		out = append(out, compose.Source{Name: strings.TrimSuffix(path.Base(file), ".md"), File: file, Text: string(data)})
	}
	if data, err := fs.ReadFile(templates.FS, name+".md"); err == nil && !strings.Contains(name, "/") && name != functionsPage {
		return append(out, compose.Source{Name: name + ".md", Text: string(data)}), name + ".md", nil
	}
	if source, ok := b.source(name); ok {
		b.own = name
		return append(out, source), name, nil
	}
	fault := diag.Diagnostic{Severity: diag.Error, Code: "unknown-template",
		Message: fmt.Sprintf("there is no template %q in this version, and no such file in the folder", name), Hint: "built in are " + strings.Join(Templates(), ", ")}
	if b.options.Template == "" {
		fault.Key = "report.template"
		fault.Pos = b.trial.Protocol.Pos(fault.Key)
	}
	list.Add(fault)
	return nil, "", list
}

// tidy drops headings under which nothing stands, and paragraphs without text, which
// actions that had nothing to say leave behind.
func tidy(blocks []doc.Block) []doc.Block {
	var out []doc.Block
	for _, b := range blocks {
		switch x := b.(type) {
		case doc.Paragraph:
			if doc.Plain(x.Text) == "" {
				continue
			}
		case doc.Heading:
			for len(out) > 0 {
				h, ok := out[len(out)-1].(doc.Heading)
				if !ok || h.Level < x.Level {
					break
				}
				out = out[:len(out)-1]
			}
		}
		out = append(out, b)
	}
	for len(out) > 0 {
		if _, ok := out[len(out)-1].(doc.Heading); !ok {
			break
		}
		out = out[:len(out)-1]
	}
	return out
}

// Fingerprint is the first twelve hex digits of the SHA-256 over the inputs: one line a
// file with its hash and path, in the order of paths.
func Fingerprint(inputs []result.Input) string {
	h := sha256.New()
	for _, f := range inputs {
		fmt.Fprintf(h, "%s  %s\n", f.SHA256, f.Path)
	}
	return hex.EncodeToString(h.Sum(nil))[:12]
}

func moment(date string) time.Time {
	t, err := time.Parse("2006-01-02", date)
	if err != nil {
		return time.Time{}
	}
	return t
}

// attached is a file that rides in a report.
type attached struct {
	path, mime, relationship, what string
	data                           []byte
}

// attachments lists everything the report is made of, with report.json and the results.
func attachments(t *trial.Trial, rs *result.Results, opt Options) ([]attached, error) {
	var out []attached
	for _, f := range t.Files {
		out = append(out, attached{path: f.Path, mime: mime(f.Path), relationship: relationship(f), what: "file of the trial", data: f.Data})
	}
	name := opt.Template
	if name == "" {
		name = t.Protocol.Report.Template
	}
	info, err := json.MarshalIndent(about{Format: 1, Program: rs.Program, Go: opt.Go, Arch: opt.Arch, Date: opt.Date, Template: name, Paper: t.Protocol.Report.Paper, Outputs: opt.Only, Files: rs.Inputs}, "", " ")
	if err != nil {
		return nil, fmt.Errorf("report.json: %w", err)
	}
	var results bytes.Buffer
	if err := rs.Write(&results); err != nil {
		return nil, fmt.Errorf("results.json: %w", err)
	}
	out = append(out, attached{path: aboutFile, mime: "application/json", relationship: "Supplement", what: "how the report was made", data: append(info, '\n')},
		attached{path: resultsFile, mime: "application/json", relationship: "Data", what: "results in full precision", data: results.Bytes()})
	return out, nil
}

func mime(name string) string {
	switch path.Ext(name) {
	case ".csv":
		return "text/csv"
	case ".toml":
		return "application/toml"
	case ".md":
		return "text/markdown"
	case ".json":
		return "application/json"
	}
	return "application/octet-stream"
}

func relationship(f folder.File) string {
	switch {
	case f.Path == "protocol.toml":
		return "Source"
	case path.Ext(f.Path) == ".csv":
		return "Data"
	}
	return "Supplement"
}

// Design is a short document on what the layout alone says: the recognised design, what
// received what, and the skeleton analysis of variance.
func Design(t *trial.Trial) *doc.Document {
	blocks := paragraphs(prose.Design(t.Plan))
	blocks = append(blocks, paragraphs(prose.Units(t.Plan))...)
	blocks = append(blocks, table.Skeleton(t.Plan))
	return &doc.Document{Lang: "en", Blocks: blocks}
}
