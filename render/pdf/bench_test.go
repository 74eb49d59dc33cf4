package pdf_test

import (
	"fmt"
	"io"
	"testing"

	"penwright/render/doc"
	"penwright/render/page"
	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

// long is a report of about twenty pages with twelve figures.
func long() *doc.Document {
	d := pagetest.Sample()
	one := d.Blocks[2:]
	var blocks []doc.Block
	for i := range 3 {
		for _, b := range one {
			switch n := b.(type) {
			case doc.Heading:
				n.ID = fmt.Sprint(n.ID, i)
				b = n
			case doc.Table:
				n.Rows = n.Rows[:min(len(n.Rows), 20)]
				b = n
			}
			blocks = append(blocks, b)
		}
		for k := range 2 {
			blocks = append(blocks, doc.Figure{Number: fmt.Sprint(i, k), Picture: pagetest.Curves(430, 240)}, one[1])
		}
	}
	d.Blocks = append(d.Blocks[:2:2], blocks...)
	return d
}

func BenchmarkWrite(b *testing.B) {
	d := long()
	for b.Loop() {
		if _, err := pdf.Write(io.Discard, d, attachments(), options); err != nil {
			b.Fatal(err)
		}
	}
	book, _ := page.Lay(d)
	b.ReportMetric(float64(len(book.Pages)), "pages")
}

func BenchmarkLay(b *testing.B) {
	d := long()
	for b.Loop() {
		page.Lay(d)
	}
}
