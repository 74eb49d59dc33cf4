package render

import (
	"bytes"
	"io"
	"slices"

	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/docx"
	"penwright/render/html"
	"penwright/render/pdf"
	"penwright/render/tex"
)

// Outputs are the kinds of output, in the order in which they are written.
var Outputs = []string{"pdf", "html", "md", "json", "tables", "figures", "tex", "docx"}

// thesis are those for an author who goes on writing: made where they are asked for, and
// of the chapter.
var thesis = []string{"tex", "docx"}

// wanted gives the outputs to be made: those asked for, or what the template is for. A
// chapter with a sign that LaTeX lacks comes without it, if nobody asked for LaTeX by
// name.
func wanted(t *trial.Trial, d *doc.Document, opt Options) ([]string, diag.List) {
	if opt.Only != nil {
		return opt.Only, nil
	}
	name := opt.Template
	if name == "" {
		name = t.Protocol.Report.Template
	}
	var list diag.List
	var out []string
	for _, kind := range Outputs {
		if slices.Contains(thesis, kind) && name != "chapter" {
			continue
		}
		if kind == "tex" {
			// Writing to nowhere cannot fail.
			if faults, _ := tex.Chapter(io.Discard, d); faults.HasErrors() {
				for _, f := range faults {
					f.Severity = diag.Warning
					f.Message += ", so that no LaTeX is written"
					f.Hint = "write it in Latin or Greek letters"
					list.Add(f)
				}
				continue
			}
		}
		out = append(out, kind)
	}
	return out, list
}

// texFiles writes a document in LaTeX: what another document reads, and one that reads
// it.
func texFiles(d *doc.Document) ([]File, diag.List, error) {
	const body = "chapter.tex"
	var whole, chapter bytes.Buffer
	list, err := tex.Report(&whole, d, body)
	if err != nil {
		return nil, nil, err
	}
	more, err := tex.Chapter(&chapter, d)
	if err != nil {
		return nil, nil, err
	}
	return []File{{Path: "report.tex", Data: whole.Bytes()}, {Path: body, Data: chapter.Bytes()}}, append(list, more...), nil
}

// docxFile writes a document for a word processor.
func docxFile(d *doc.Document, about pdf.Options) ([]File, diag.List, error) {
	var b bytes.Buffer
	err := docx.Write(&b, d, docx.Options{Date: about.Date, Producer: about.Producer, Subject: about.Subject})
	return []File{{Path: "report.docx", Data: b.Bytes()}}, nil, err
}

// figures writes each figure of a report as files of its own: pictures for the screen,
// and pages for LaTeX.
func figures(d *doc.Document, about pdf.Options, screen, print bool) ([]File, diag.List, error) {
	var shown []doc.Figure
	var pics []pdf.Picture
	doc.Walk(d.Blocks, func(n any) {
		if f, ok := n.(doc.Figure); ok && f.File != "" && f.Picture != nil {
			shown = append(shown, f)
			pics = append(pics, pdf.Picture{Title: doc.Plain(f.Caption), Picture: f.Picture})
		}
	})
	var pages [][]byte
	if print {
		var err error
		if pages, err = pdf.Pictures(pics, about); err != nil {
			return nil, nil, err
		}
	}
	var out []File
	for i, f := range shown {
		if screen {
			var svg bytes.Buffer
			if err := html.SVG(&svg, f.Picture, f.Alt); err != nil {
				return nil, nil, err
			}
			out = append(out, File{Path: "figures/" + f.File + ".svg", Data: svg.Bytes()})
		}
		if print {
			out = append(out, File{Path: "figures/" + f.File + ".pdf", Data: pages[i]})
		}
	}
	return out, nil, nil
}
