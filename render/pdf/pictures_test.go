package pdf_test

import (
	"bytes"
	"fmt"
	"regexp"
	"strconv"
	"testing"

	"penwright/render/doc"
	"penwright/render/page/pagetest"
	"penwright/render/pdf"
)

// Pictures drawn together become files of one page each that hold nothing of the
// others' pages and refer only to what they hold.
func TestPictures(t *testing.T) {
	half := doc.Colour{A: 128}
	var pics []pdf.Picture
	for i := range 12 {
		pic := pagetest.Curves(float64(200+10*i), 150)
		pic.Ops = append(pic.Ops, doc.Label{X: 20, Y: 20, Size: 9, Text: fmt.Sprintf("picture %d", i), Colour: half})
		pics = append(pics, pdf.Picture{Title: fmt.Sprintf("Gain %d", i), Picture: pic})
	}
	pics = append(pics, pdf.Picture{Title: "nothing"})
	files, err := pdf.Pictures(pics, options)
	if err != nil || len(files) != len(pics) {
		t.Fatalf("%d files, %v", len(files), err)
	}
	again, err := pdf.Pictures(pics, options)
	if err != nil {
		t.Fatal(err)
	}
	for i, file := range files {
		if !bytes.Equal(file, again[i]) {
			t.Errorf("picture %d is not the same twice", i)
		}
		file = pdf.Expand(file)
		if n := bytes.Count(file, []byte("<</Type /Page\n")); n != 1 {
			t.Errorf("picture %d has %d pages", i, n)
		}
		if !bytes.Contains(file, []byte("(Gain "+strconv.Itoa(i)+")")) && i < 12 {
			t.Errorf("picture %d has not its title", i)
		}
		if want := fmt.Sprintf("[0 0 %d.00 150.00]", 200+10*i); i < 12 && !bytes.Contains(file, []byte(want)) {
			t.Errorf("picture %d has not its size", i)
		}
		objects := len(regexp.MustCompile(`(?m)^\d+ 0 obj$`).FindAll(file, -1))
		for _, m := range regexp.MustCompile(`\b(\d+) 0 R\b`).FindAllSubmatch(file, -1) {
			if n, err := strconv.Atoi(string(m[1])); err != nil || n < 1 || n > objects {
				t.Errorf("picture %d refers to object %s of %d", i, m[1], objects)
			}
		}
	}
	if none, err := pdf.Pictures(nil, options); len(none) != 0 || err != nil {
		t.Errorf("of nothing: %d files, %v", len(none), err)
	}
	var b bytes.Buffer
	if err := pdf.WritePicture(&b, pics[3].Picture, pics[3].Title, options); err != nil {
		t.Fatal(err)
	}
	one, err := pdf.Pictures(pics[3:4], options)
	if err != nil || !bytes.Equal(one[0], b.Bytes()) {
		t.Errorf("a picture by itself differs, %v", err)
	}
}
