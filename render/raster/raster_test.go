package raster_test

import (
	"bytes"
	"image"
	"image/color"
	"image/png"
	"math"
	"os"
	"testing"

	"penwright/render/doc"
	"penwright/render/doc/sample"
	"penwright/render/raster"
)

func drawn(t *testing.T, p *doc.Picture, scale, dpi float64) image.Image {
	t.Helper()
	var a, b bytes.Buffer
	if err := raster.PNG(&a, p, scale, dpi); err != nil {
		t.Fatal(err)
	}
	if err := raster.PNG(&b, p, scale, dpi); err != nil || !bytes.Equal(a.Bytes(), b.Bytes()) {
		t.Fatalf("not the same twice, %v", err)
	}
	if name := os.Getenv("RASTER_KEEP"); name != "" {
		if err := os.WriteFile(name, a.Bytes(), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	img, err := png.Decode(&a)
	if err != nil {
		t.Fatal(err)
	}
	return img
}

func TestSample(t *testing.T) {
	img := drawn(t, sample.Picture(), 1, 300)
	if w, h := img.Bounds().Dx(), img.Bounds().Dy(); w != 1334 || h != 834 { // ⌈320 × 300/72⌉, ⌈200 × 300/72⌉
		t.Errorf("%d × %d points", w, h)
	}
	for _, x := range []struct {
		what string
		x, y float64 // points of the picture
		want color.NRGBA
	}{
		{"paper", 5, 5, color.NRGBA{R: 255, G: 255, B: 255, A: 255}},
		{"axis", 200, 170, color.NRGBA{A: 255}},
		{"dot", 70, 140, color.NRGBA{G: 114, B: 178, A: 255}},
		{"wash over paper", 300, 70, color.NRGBA{R: 249, G: 231, B: 191, A: 255}},
	} {
		got := color.NRGBAModel.Convert(img.At(int(x.x*300/72), int(x.y*300/72))).(color.NRGBA)
		near := func(a, b uint8) bool { return math.Abs(float64(a)-float64(b)) <= 2 }
		if !near(got.R, x.want.R) || !near(got.G, x.want.G) || !near(got.B, x.want.B) {
			t.Errorf("%s: %v, want %v", x.what, got, x.want)
		}
	}
}

// ink sums how dark a picture is, in square points of it.
func ink(img image.Image, dpi float64) float64 {
	sum := 0.0
	b := img.Bounds()
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r, _, _, _ := img.At(x, y).RGBA()
			sum += 1 - float64(r)/0xFFFF
		}
	}
	return sum * 72 / dpi * 72 / dpi
}

// The ink on the picture is the area of what was drawn, by geometry.
func TestInk(t *testing.T) {
	black := doc.Colour{A: 255, Role: doc.Ink}
	line := func(close bool, xy ...float64) []doc.Segment {
		var out []doc.Segment
		for i := 0; i < len(xy); i += 2 {
			out = append(out, doc.Segment{Kind: doc.LineTo, X: xy[i], Y: xy[i+1]})
		}
		if close {
			out = append(out, doc.Segment{Kind: doc.Close})
		}
		return out
	}
	const k = 0.5522847498
	circle := []doc.Segment{
		{Kind: doc.MoveTo, X: 80, Y: 50},
		{Kind: doc.CurveTo, X: 50, Y: 80, X1: 80, Y1: 50 + k*30, X2: 50 + k*30, Y2: 80},
		{Kind: doc.CurveTo, X: 20, Y: 50, X1: 50 - k*30, Y1: 80, X2: 20, Y2: 50 + k*30},
		{Kind: doc.CurveTo, X: 50, Y: 20, X1: 20, Y1: 50 - k*30, X2: 50 - k*30, Y2: 20},
		{Kind: doc.CurveTo, X: 80, Y: 50, X1: 50 + k*30, Y1: 20, X2: 80, Y2: 50 - k*30},
		{Kind: doc.Close},
	}
	for _, x := range []struct {
		name string
		op   doc.Op
		want float64
	}{
		{"box", doc.Fill{Path: line(true, 10, 10, 60, 10, 60, 40, 10, 40), Colour: black}, 1500},
		{"disc", doc.Fill{Path: circle, Colour: black}, math.Pi * 900},
		{"line", doc.Stroke{Path: line(false, 10, 10, 50, 40), Width: 2, Colour: black}, 100},
		{"dashes of 6 and 4", doc.Stroke{Path: line(false, 10, 10, 90, 10), Width: 2, Dashes: []float64{6, 4}, Colour: black}, 8 * 6 * 2},
		// Four sides, and at each corner a quarter of a disc on the outer side less the
		// square where two sides overlap.
		{"frame", doc.Stroke{Path: line(true, 20, 20, 80, 20, 80, 80, 20, 80), Width: 4, Colour: black}, 4*60*4 - 4*4 + math.Pi*4},
		{"ring", doc.Stroke{Path: circle, Width: 3, Colour: black}, 2 * math.Pi * 30 * 3},
	} {
		img := drawn(t, &doc.Picture{Width: 100, Height: 100, Ops: []doc.Op{x.op}}, 1, 144)
		if got := ink(img, 144); math.Abs(got-x.want) > 0.012*x.want {
			t.Errorf("%s: %.2f, want %.2f", x.name, got, x.want)
		}
	}
}

// What no picture should hold ends soon, and nothing panics.
func TestHostile(t *testing.T) {
	black := doc.Colour{A: 255}
	nan, inf := math.NaN(), math.Inf(1)
	var bad []doc.Op
	for _, v := range []float64{nan, inf, -inf, 1e300, -1e300, 0} {
		path := []doc.Segment{{Kind: doc.Close}, {Kind: doc.CurveTo, X: v, Y: v, X1: v, Y1: 3, X2: 9, Y2: v}, {Kind: doc.LineTo, X: v, Y: 7}, {Kind: doc.CurveTo, X: 1, X1: v}, {Kind: doc.Close}, {Kind: doc.LineTo, X: 5, Y: v}}
		bad = append(bad, doc.Fill{Path: path, Colour: black}, doc.Fill{Colour: black}, doc.Stroke{Path: path, Width: 1, Colour: black}, doc.Stroke{Path: path, Width: v, Colour: black},
			doc.Stroke{Path: path, Width: 1, Dashes: []float64{v}, Colour: black}, doc.Stroke{Path: path, Width: 1, Dashes: []float64{1e-9, 0, 3}, Colour: black},
			doc.Label{X: v, Y: 5, Size: 8, Text: "a\x00\xff漢\u202e العربية", Colour: black}, doc.Label{X: 5, Y: 5, Size: v, Angle: v, Text: "gain", Colour: black})
	}
	drawn(t, &doc.Picture{Width: 50, Height: 50, Ops: bad}, 1, 300)
	for _, p := range []*doc.Picture{nil, {}, {Width: nan, Height: 1}, {Width: 1, Height: inf}, {Width: 1e300, Height: 1e300}, {Width: -1, Height: 5}, {Width: 1e12, Height: 1e-12}} {
		if err := raster.PNG(&bytes.Buffer{}, p, 1, 300); err == nil {
			t.Errorf("%v is drawn", p)
		}
	}
	var b bytes.Buffer
	if err := raster.PNG(&b, &doc.Picture{Width: 90000, Height: 90000}, 1, 300); err != nil {
		t.Fatal(err)
	}
	if c, err := png.DecodeConfig(&b); err != nil || c.Width*c.Height > 17<<20 {
		t.Errorf("%d × %d points, %v", c.Width, c.Height, err)
	}
}
