package pdf_test

import (
	"reflect"
	"strings"
	"testing"

	"penwright/render/doc"
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
	n := uint64(12)
	if testing.Short() {
		n = 6
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

// short is the sample with few rows in its tables.
func short() *doc.Document {
	d := pagetest.Sample()
	for i, b := range d.Blocks {
		if x, ok := b.(doc.Table); ok {
			x.Rows = x.Rows[:min(len(x.Rows), 8)]
			d.Blocks[i] = x
		}
	}
	return d
}

// The checks find what is spoiled. Each row changes a file and names the clause that
// this breaks.
func TestChecksBite(t *testing.T) {
	file := write(t, short(), attachments())
	for _, x := range []struct{ old, with, clause string }{
		{"/Marked true", "/Marked false", "14289-1 7.1"},
		{"/DisplayDocTitle true", "/DisplayDocTitle false", "14289-1 7.1"},
		{"/Artifact BMC", "/Span BMC", "14289-1 7.1"},
		{"/Artifact BMC", "/P <</MCID 99>> BDC", "32000-1 14.7.4.2"},
		{"/MCID 3>> BDC", "/MCID 4>> BDC", "32000-1 14.7.4.2"},
		{"/Lang (en)", "/Lang (in English)", "14289-1 7.2"},
		{"/Alt (", "/Other (", "14289-1 7.3"},
		{"/S /H3", "/S /H5", "14289-1 7.4.2"},
		{"/Scope /Column", "", "14289-1 7.5"},
		{"/ColSpan 4", "", "14289-1 7.5"},
		{"/ListNumbering /Disc", "", "14289-1 7.6"},
		{"/ID (note-000002)", "/ID (note-000001)", "14289-1 7.9"},
		{"/StructParent ", "/Parent ", "14289-1 7.18.1"},
		{"/Tabs /S", "", "14289-1 7.18.3"},
		{"/Contents (", "/Title (", "14289-1 7.18.5"},
		{"/Type /OBJR", "/Type /Other", "14289-1 7.18.5"},
		{"/S /TOCI", "/S /Entry", "32000-1 14.8.4"},
		{"/S /TR ", "/S /P ", "32000-1 14.8.4"},
		{"/StructParents 1\n", "/StructParents 2\n", "32000-1 14.7.4.4"},
		{"/BBox [", "/Box [", "32000-1 14.8.5.4.3"},
		{"/XYZ", "/Fit", "32000-1 12.3.2"},
		{"/Prev ", "/Before ", "32000-1 12.3.3"},
		{"beginbfrange\n<0020> <00", "beginbfrange\n<0020> <01", "32000-1 9.10.3"},
		{"<0041> <0", "<0042> <0", "19005-3 6.2.11.7"},
		{"/FontFile2", "/File", "19005-3 6.2.11.4.1"},
		{" rg\n", " k\n", "19005-3 6.2.2"},
		{"/F 4 ", "/F 0 ", "6.3.2"},
		{"/S /URI", "/S /Launch", "19005-3 6.5.1"},
		{"<pdfaid:part>3", "<pdfaid:part>2", "19005-3 6.6.4"},
		{"<pdf:Producer>", "<pdf:Other>", "19005-3 6.6.3"},
		{"/AFRelationship", "/Relation", "19005-3 6.8"},
		{"/AF [", "/Other [", "19005-3 6.8"},
		{"/GTS_PDFA1", "/GTS_PDFX", "19005-3 6.2.3"},
		{"RGB XYZ ", "CMYKXYZ ", "19005-3 6.2.3"},
		{"/CS /DeviceRGB", "/CS /DeviceCMYK", "19005-3 6.2.10"},
	} {
		spoiled, err := pdf.Plain(file, x.old, x.with)
		if err != nil {
			t.Fatal(err)
		}
		_, faults := pdf.Read(spoiled)
		found := false
		for _, f := range faults {
			clauses, _, _ := strings.Cut(f, ": ")
			found = found || strings.Contains(clauses, x.clause)
		}
		if !found {
			t.Errorf("%q for %q: found are %q", x.with, x.old, faults)
		}
	}
	plain, err := pdf.Plain(file, "\x00", "\x00")
	if err != nil {
		t.Fatal(err)
	}
	conforms(t, plain)
	// Files of earlier releases give their attachments too.
	got, err := pdf.Attachments(plain)
	if want, _ := pdf.Attachments(file); err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("a file with its table in plain text gives %q, %v", got, err)
	}
}
