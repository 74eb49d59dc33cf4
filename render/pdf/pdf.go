// Package pdf writes documents as PDF and reads back the files that ride in them.
//
// A file is built to PDF/A-3b: faces embedded, sRGB output intent, XMP metadata that
// agrees with the document information, attachments with their relationship. It is
// tagged: every mark on a page belongs to an element of the structure, in reading
// order, or is an artifact. The same document, files and options give the same bytes.
package pdf

import (
	"bytes"
	"fmt"
	"io"
	"time"

	"penwright/protocol/diag"
	"penwright/render/doc"
	"penwright/render/page"
)

// Attachment is a file that rides in a PDF.
type Attachment struct {
	Name string // unique within the PDF, such as data/gain.csv
	MIME string // such as text/csv
	// Relationship is Source, Data, Alternative, Supplement or Unspecified; empty means
	// Unspecified.
	Relationship string
	Description  string
	Data         []byte
}

// Options are what does not follow from the document.
type Options struct {
	// Date stands in the metadata as the time of making, in UTC; zero: none.
	Date     time.Time
	Lang     string // BCP 47, of pages that do not come from a document
	Producer string // name and version of the program
	Subject  string
	Keywords string
}

// Write lays d out and writes it with its attachments. The diagnostics are those of
// page.Lay.
func Write(w io.Writer, d *doc.Document, files []Attachment, opt Options) (diag.List, error) {
	book, list := page.Lay(d)
	return list, write(w, book, meta{
		lang: d.Lang, title: d.Title, author: d.Author, options: opt,
	}, files)
}

// WritePicture writes one picture as a page of its own size.
func WritePicture(w io.Writer, pic *doc.Picture, title string, opt Options) error {
	files, err := Pictures([]Picture{{Title: title, Picture: pic}}, opt)
	if err != nil {
		return err
	}
	if _, err := w.Write(files[0]); err != nil {
		return fmt.Errorf("writing the PDF: %w", err)
	}
	return nil
}

// limited keeps the size of a page within what readers take (PDF 32000-1, annex C).
func limited(v, least float64) float64 {
	if !(v >= least) {
		return least
	}
	return min(v, 14400)
}

// meta is what is said about the file as a whole.
type meta struct {
	lang, title, author string
	options             Options
}

func write(w io.Writer, book *page.Book, m meta, files []Attachment) error {
	drawn, err := draw(book, false)
	if err != nil {
		return err
	}
	out, err := finish(drawn, book, m, files)
	if err != nil {
		return err
	}
	if _, err := io.Copy(w, bytes.NewReader(out)); err != nil {
		return fmt.Errorf("writing the PDF: %w", err)
	}
	return nil
}

// WriteBook writes pages that were set by hand.
func WriteBook(w io.Writer, book *page.Book, lang, title string, opt Options) error {
	return write(w, book, meta{lang: lang, title: title, options: opt}, nil)
}
