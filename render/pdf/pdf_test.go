package pdf_test

import (
	"bytes"
	"os"
	"testing"
	"time"

	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

var options = pdf.Options{Date: time.Date(2024, 11, 18, 0, 0, 0, 0, time.UTC), Producer: "penwright test"}

func attachments() []pdf.Attachment {
	return []pdf.Attachment{
		{Name: "protocol.toml", MIME: "application/toml", Relationship: "Source", Description: "the protocol", Data: []byte("code = \"HM\"\n")},
		{Name: "data/gain.csv", MIME: "text/csv", Relationship: "Data", Description: "daily gain (kg)", Data: bytes.Repeat([]byte("P01,B1,0.812\n"), 500)},
		{Name: "données.csv", MIME: "text/csv", Data: nil},
	}
}

func TestSample(t *testing.T) {
	var b bytes.Buffer
	list, err := pdf.Write(&b, pagetest.Sample(), attachments(), options)
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range list {
		t.Log(d)
	}
	os.WriteFile("/tmp/sample.pdf", b.Bytes(), 0o644)
}
