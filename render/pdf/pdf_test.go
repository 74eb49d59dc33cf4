package pdf_test

import (
	"bytes"
	"fmt"
	"io"
	"reflect"
	"regexp"
	"runtime"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"penwright/render/doc"
	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

var options = pdf.Options{Date: time.Date(2024, 11, 18, 0, 0, 0, 0, time.UTC), Producer: "penwright test", Lang: "en", Subject: "a trial", Keywords: "pigs, yeast"}

func attachments() []pdf.Attachment {
	return []pdf.Attachment{
		{Name: "protocol.toml", MIME: "application/toml", Relationship: "Source", Description: "the protocol", Data: []byte("code = \"HM\"\n")},
		{Name: "data/gain (1).csv", MIME: "text/csv", Relationship: "Data", Description: "daily gain — Zunahme", Data: bytes.Repeat([]byte("P01,B1,0.812\n"), 500)},
		{Name: "données.csv", MIME: "text/csv", Relationship: "Unspecified", Data: []byte{}},
	}
}

func write(t testing.TB, d *doc.Document, files []pdf.Attachment) []byte {
	t.Helper()
	var b bytes.Buffer
	if _, err := pdf.Write(&b, d, files, options); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// Same document, same bytes: again, with one and with four processors, and with several
// documents being written at once.
func TestSameBytes(t *testing.T) {
	want := write(t, pagetest.Sample(), attachments())
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(0))
	for _, n := range []int{1, 4} {
		runtime.GOMAXPROCS(n)
		got := make([][]byte, 3)
		var wait sync.WaitGroup
		for i := range got {
			wait.Go(func() { got[i] = write(t, pagetest.Sample(), attachments()) })
		}
		wait.Wait()
		for _, g := range got {
			if !bytes.Equal(g, want) {
				t.Errorf("with %d processors the file differs", n)
			}
		}
	}
	reversed := attachments()
	slices.Reverse(reversed)
	if !bytes.Equal(write(t, pagetest.Sample(), reversed), want) {
		t.Error("the order in which files are handed over changes the file")
	}
}

// What PDF/A-3b and our readers ask of the file as a whole (ISO 19005-3, clauses 6.1.2,
// 6.1.3, 6.2.3, 6.6.2, 6.8; from memory).
func TestShape(t *testing.T) {
	file := pdf.Expand(write(t, pagetest.Sample(), attachments()))
	if !bytes.HasPrefix(file, []byte("%PDF-1.7\n%\xE2\xE3\xCF\xD3\n")) {
		t.Error("the header is wrong")
	}
	for _, want := range []string{
		"/Lang (en)", "/MarkInfo <</Marked true>>", "/DisplayDocTitle true", "/OutputIntents [", "/S /GTS_PDFA1", "/ID [<", "/Outlines ", "/EmbeddedFiles",
		"/AFRelationship /Source", "/AFRelationship /Data", "/AF [", "<pdfaid:part>3</pdfaid:part>", "<pdfaid:conformance>B</pdfaid:conformance>",
		"<xmp:CreateDate>2024-11-18T00:00:00Z</xmp:CreateDate>", "/CreationDate (D:20241118000000Z)", "<pdf:Producer>penwright test</pdf:Producer>",
		"/Producer (penwright test)", "/ModDate (D:20241118000000Z)", "/Subtype /application#2Ftoml", "/URI (https://hollowmere.example/house-4)",
	} {
		if !bytes.Contains(file, []byte(want)) {
			t.Errorf("the file lacks %q", want)
		}
	}
	for _, unwanted := range []string{"/BaseFont /utf8", "gofpdf", "FPDF", "<0000> <FFFF> <0000>"} {
		if bytes.Contains(file, []byte(unwanted)) {
			t.Errorf("the file holds %q", unwanted)
		}
	}
	annots := bytes.Count(file, []byte("/Subtype /Link"))
	if annots == 0 || annots != bytes.Count(file, []byte("/Subtype /Link /F 4 ")) {
		t.Error("not every link is marked for printing")
	}
	if n := len(regexp.MustCompile(`/BaseFont /[A-Z]{6}\+`).FindAll(file, -1)); n == 0 || n%2 != 0 {
		t.Errorf("%d fonts are named as subsets", n)
	}
}

func TestAttachments(t *testing.T) {
	want := attachments()
	got, err := pdf.Attachments(write(t, pagetest.Sample(), want))
	if err != nil {
		t.Fatal(err)
	}
	slices.SortFunc(want, func(a, b pdf.Attachment) int { return strings.Compare(a.Name, b.Name) })
	if !reflect.DeepEqual(got, want) {
		t.Errorf("read %q\nwrote %q", got, want)
	}
	if got, err := pdf.Attachments(write(t, &doc.Document{}, nil)); err != nil || got != nil {
		t.Errorf("a file without attachments gives %v, %v", got, err)
	}
}

func TestAttachmentsRefused(t *testing.T) {
	same := []pdf.Attachment{{Name: "a"}, {Name: "a"}}
	for _, files := range [][]pdf.Attachment{same, {{}}, {{Name: "\xff"}}, {{Name: "a", Relationship: "Friend"}}} {
		if _, err := pdf.Write(io.Discard, &doc.Document{}, files, options); err == nil {
			t.Errorf("%v was attached", files)
		}
	}
	file := write(t, &doc.Document{}, attachments())
	i := bytes.Index(file, []byte("/CheckSum <")) + len("/CheckSum <")
	if file[i] == '0' {
		file[i] = '1'
	} else {
		file[i] = '0'
	}
	if _, err := pdf.Attachments(file); err == nil || !strings.Contains(err.Error(), "checksum") {
		t.Errorf("a changed checksum gives %v", err)
	}
	for _, s := range []string{"", "%PDF-1.7", "hello", "%PDF-1.7\nstartxref\n0\n%%EOF", "%PDF-1.7\nstartxref\n-5\n%%EOF"} {
		if _, err := pdf.Attachments([]byte(s)); err == nil {
			t.Errorf("%q was read", s)
		}
	}
}

func FuzzAttachments(f *testing.F) {
	f.Add(write(f, &doc.Document{}, attachments()))
	f.Add([]byte("%PDF-1.7\nxref\n0 1\n0000000000 65535 f \ntrailer\n<</Root 1 0 R>>\nstartxref\n9\n"))
	f.Fuzz(func(t *testing.T, data []byte) { pdf.Attachments(data) })
}

// Broken files are refused or read, never more.
func TestBrokenFiles(t *testing.T) {
	file := write(t, &doc.Document{}, attachments())
	for i := 0; i < len(file); i += 1 + i%37 {
		broken := bytes.Clone(file)
		broken[i] ^= byte(1 + i%255)
		pdf.Attachments(broken)
		pdf.Attachments(file[:i])
	}
}

func TestRandomDocuments(t *testing.T) {
	n := uint64(8)
	if testing.Short() {
		n = 8
	}
	for seed := range n {
		file := write(t, pagetest.Random(seed), nil)
		if len(file) < 1000 {
			t.Errorf("seed %d: %d bytes", seed, len(file))
		}
	}
}

func TestLargeTable(t *testing.T) {
	start := time.Now()
	file := write(t, pagetest.Large(1000, 30), nil)
	t.Logf("%d bytes in %v", len(file), time.Since(start))
}

func TestPicture(t *testing.T) {
	for _, pic := range []*doc.Picture{nil, {}, {Width: 1e9, Height: 10}, pagetest.Curves(300, 200)} {
		var b bytes.Buffer
		if err := pdf.WritePicture(&b, pic, "Gain", options); err != nil {
			t.Error(err)
		}
	}
	var b bytes.Buffer
	if err := pdf.WritePicture(&b, pagetest.Curves(300, 200), "Gain", options); err != nil {
		t.Fatal(err)
	}
	if !bytes.Contains(pdf.Expand(b.Bytes()), []byte("/MediaBox [0 0 300.00 200.00]")) {
		t.Error("the page has not the size of the picture")
	}
}

type broken struct{ left int }

func (b *broken) Write(p []byte) (int, error) {
	if len(p) > b.left {
		return 0, fmt.Errorf("disk full")
	}
	b.left -= len(p)
	return len(p), nil
}

func TestWriteErrors(t *testing.T) {
	if _, err := pdf.Write(&broken{10}, &doc.Document{}, nil, options); err == nil || !strings.Contains(err.Error(), "disk full") {
		t.Errorf("a full disk gives %v", err)
	}
}
