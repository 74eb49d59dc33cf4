// Package docx writes a document as a file of Office Open XML (ECMA-376, part 1, the
// transitional schema of part 4), for an author who goes on writing: headings, captions,
// lists, notes, references and page numbers are what a word processor takes for such,
// with their text in place before any field is brought up to date. Equal documents give
// equal bytes.
package docx

import (
	"archive/zip"
	"bytes"
	"fmt"
	"io"
	"strconv"
	"strings"
	"time"

	"penwright/render/doc"
)

// Options say what a file tells of itself beside the document.
type Options struct {
	Date     time.Time // when it was made; zero: not told
	Producer string    // the program, with its version
	Subject  string
}

// file is a part of the package.
type file struct {
	name, kind string // kind: the content type; empty: that of its extension
	data       []byte
	packed     bool // holds compressed data already
}

// Write writes d, which must be numbered.
func Write(w io.Writer, d *doc.Document, opt Options) error {
	b := newBuilder(d)
	b.document()
	if b.err != nil {
		return fmt.Errorf("write docx: %w", b.err)
	}
	const main = "application/vnd.openxmlformats-officedocument.wordprocessingml."
	part := func(name, kind, text string) file {
		return file{name: name, kind: kind, data: []byte(declaration + text)}
	}
	files := []file{
		part("_rels/.rels", "", relationships([]relationship{
			{id: "rId1", kind: "officeDocument", target: "word/document.xml"},
			{id: "rId2", kind: coreProperties, target: "docProps/core.xml"},
			{id: "rId3", kind: "extended-properties", target: "docProps/app.xml"},
		})),
		part("docProps/core.xml", "application/vnd.openxmlformats-package.core-properties+xml", core(d, opt)),
		part("docProps/app.xml", "application/vnd.openxmlformats-officedocument.extended-properties+xml",
			`<Properties xmlns="http://schemas.openxmlformats.org/officeDocument/2006/extended-properties"><Application>`+esc(opt.Producer)+`</Application></Properties>`),
		part("word/document.xml", main+"document.main+xml", b.body.String()),
		part("word/styles.xml", main+"styles+xml", styles(d.Lang)),
		part("word/numbering.xml", main+"numbering+xml", b.numbering()),
		part("word/settings.xml", main+"settings+xml", settings),
		part("word/fontTable.xml", main+"fontTable+xml", fonts),
		part("word/footnotes.xml", main+"footnotes+xml", b.footnotes.String()),
		part("word/header1.xml", main+"header+xml", b.header(b.paper.width)),
		part("word/footer1.xml", main+"footer+xml", b.footer(b.paper.width)),
		part("word/header2.xml", main+"header+xml", b.header(b.paper.height)),
		part("word/footer2.xml", main+"footer+xml", b.footer(b.paper.height)),
		part("word/_rels/document.xml.rels", "", relationships(b.links[inBody])),
	}
	if len(b.links[inNotes]) > 0 {
		files = append(files, part("word/_rels/footnotes.xml.rels", "", relationships(b.links[inNotes])))
	}
	files = append(files, b.media...)

	z := zip.NewWriter(w)
	for _, f := range append([]file{part("[Content_Types].xml", "", contentTypes(files))}, files...) {
		h := &zip.FileHeader{Name: f.name, Method: zip.Deflate, Modified: time.Date(1980, 1, 1, 0, 0, 0, 0, time.UTC)}
		if f.packed {
			h.Method = zip.Store
		}
		to, err := z.CreateHeader(h)
		if err == nil {
			_, err = to.Write(f.data)
		}
		if err != nil {
			return fmt.Errorf("write docx: %w", err)
		}
	}
	if err := z.Close(); err != nil {
		return fmt.Errorf("write docx: %w", err)
	}
	return nil
}

const declaration = `<?xml version="1.0" encoding="UTF-8" standalone="yes"?>` + "\n"

var escaper = strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", `"`, "&quot;", "'", "&#39;", "\n", " ", "\t", " ")

// esc makes text fit for content and for attributes. What XML 1.0 forbids (2.2, Char) is
// among what Clean drops.
func esc(s string) string { return escaper.Replace(doc.Clean(s)) }

func contentTypes(files []file) string {
	var b strings.Builder
	b.WriteString(`<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types">` +
		`<Default Extension="rels" ContentType="application/vnd.openxmlformats-package.relationships+xml"/>` +
		`<Default Extension="xml" ContentType="application/xml"/><Default Extension="png" ContentType="image/png"/>`)
	for _, f := range files {
		if f.kind != "" {
			b.WriteString(`<Override PartName="/` + f.name + `" ContentType="` + f.kind + `"/>`)
		}
	}
	b.WriteString(`</Types>`)
	return b.String()
}

// relationship ties a part to another, or to an address outside.
type relationship struct {
	id, kind, target string
	outside          bool
}

const (
	relationshipKinds = "http://schemas.openxmlformats.org/officeDocument/2006/relationships/"
	coreProperties    = "http://schemas.openxmlformats.org/package/2006/relationships/metadata/core-properties"
)

func relationships(list []relationship) string {
	var b strings.Builder
	b.WriteString(`<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships">`)
	for _, r := range list {
		kind := r.kind
		if !strings.Contains(kind, ":") {
			kind = relationshipKinds + kind
		}
		b.WriteString(`<Relationship Id="` + r.id + `" Type="` + kind + `" Target="` + esc(r.target) + `"`)
		if r.outside {
			b.WriteString(` TargetMode="External"`)
		}
		b.WriteString(`/>`)
	}
	b.WriteString(`</Relationships>`)
	return b.String()
}

func core(d *doc.Document, opt Options) string {
	var b bytes.Buffer
	b.WriteString(`<cp:coreProperties xmlns:cp="http://schemas.openxmlformats.org/package/2006/metadata/core-properties" xmlns:dc="http://purl.org/dc/elements/1.1/" ` +
		`xmlns:dcterms="http://purl.org/dc/terms/" xmlns:xsi="http://www.w3.org/2001/XMLSchema-instance">`)
	b.WriteString(`<dc:title>` + esc(d.Title) + `</dc:title>`)
	if opt.Subject != "" {
		b.WriteString(`<dc:subject>` + esc(opt.Subject) + `</dc:subject>`)
	}
	if d.Author != "" {
		b.WriteString(`<dc:creator>` + esc(d.Author) + `</dc:creator>`)
	}
	b.WriteString(`<dc:language>` + language(d.Lang) + `</dc:language>`)
	if !opt.Date.IsZero() {
		date := opt.Date.UTC().Format("2006-01-02T15:04:05Z")
		b.WriteString(`<dcterms:created xsi:type="dcterms:W3CDTF">` + date + `</dcterms:created><dcterms:modified xsi:type="dcterms:W3CDTF">` + date + `</dcterms:modified>`)
	}
	b.WriteString(`</cp:coreProperties>`)
	return b.String()
}

// language gives a language tag that word processors know; English is that of Europe.
func language(tag string) string {
	for _, r := range tag {
		if !(r == '-' || r >= '0' && r <= '9' || r >= 'A' && r <= 'Z' || r >= 'a' && r <= 'z') {
			tag = ""
		}
	}
	if tag == "" || tag == "en" {
		return "en-GB"
	}
	return tag
}

// paper is a sheet, in twentieths of a point; upright.
type paper struct{ width, height int }

const margin = 1440 // an inch

func sheet(name string) paper {
	if name == "Letter" {
		return paper{width: 12240, height: 15840}
	}
	return paper{width: 11906, height: 16838}
}

func itoa(n int) string { return strconv.Itoa(n) }
