package pdf_test

import (
	"testing"

	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

// conforms fails for every clause that a file breaks.
func conforms(t *testing.T, file []byte) *pdf.Struct {
	t.Helper()
	tree, faults := pdf.Read(file)
	for i, f := range faults {
		if i == 20 {
			t.Errorf("and %d more", len(faults)-i)
			break
		}
		t.Error(f)
	}
	return tree
}

func TestConformance(t *testing.T) {
	for _, paper := range []string{"A4", "Letter"} {
		d := pagetest.Sample()
		d.Paper = paper
		conforms(t, write(t, d, attachments()))
	}
	pics, err := pdf.Pictures([]pdf.Picture{{Title: "Gain", Picture: pagetest.Curves(300, 200)}, {Title: "Loss", Picture: pagetest.Curves(200, 200)}}, options)
	if err != nil {
		t.Fatal(err)
	}
	for _, file := range pics {
		conforms(t, file)
	}
}

// Whatever the document, each clause holds.
func TestConformanceOfRandomDocuments(t *testing.T) {
	n := uint64(24)
	if testing.Short() {
		n = 8
	}
	for seed := range n {
		d := pagetest.Random(seed)
		d.Lang, d.Title = "en", "random "+d.Title
		conforms(t, write(t, d, attachments()))
		if t.Failed() {
			t.Fatalf("seed %d", seed)
		}
	}
}
