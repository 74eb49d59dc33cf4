package figure

import (
	"image/color"
	"math"

	"penwright/render/doc"
)

// The colours of text and ground, which a writer may turn for a dark screen.
var (
	ink   = doc.Colour{R: 0, G: 0, B: 0, A: 255, Role: doc.Ink}
	paper = doc.Colour{R: 255, G: 255, B: 255, A: 255, Role: doc.Paper}
	faint = doc.Colour{R: 0xcc, G: 0xcc, B: 0xcc, A: 255, Role: doc.Faint}
	grey  = doc.Colour{R: 0x82, G: 0x82, B: 0x82, A: 255}
)

// palette holds colours for marks and lines. They are of middling lightness, so that
// each stands out from a white and from a dark page, and differ for readers with any of
// the common colour-vision deficiencies; see the tests. In grey they are nearly alike:
// shape, dash and name carry the difference there.
var palette = [...]doc.Colour{
	{R: 0x17, G: 0x69, B: 0xc9, A: 255}, // blue
	{R: 0xe0, G: 0x70, B: 0x1a, A: 255}, // orange
	{R: 0x6c, G: 0x9c, B: 0x6c, A: 255}, // sage
	{R: 0xa8, G: 0x48, B: 0x90, A: 255}, // plum
	{R: 0x80, G: 0x6a, B: 0x28, A: 255}, // umber
	{R: 0x98, G: 0x8a, B: 0xc6, A: 255}, // lilac
}

// below and above are the ends of the diverging scale; its middle is the page itself.
var below, above = palette[0], palette[1]

func hue(i int) doc.Colour { return palette[i%len(palette)] }

// tint is a colour laid thinly over the page, light on a light page and dark on a dark
// one, so that text set on it in the text's colour stays readable.
func tint(c doc.Colour, share float64) doc.Colour {
	c.A = uint8(math.Round(255 * min(max(share, 0), 1)))
	return c
}

// dashes tell lines apart in grey; the first is solid.
var dashes = [...][]float64{
	nil,
	{5, 2},
	{1.2, 1.8},
	{6, 1.8, 1.2, 1.8},
	{2.6, 1.6},
	{8, 2, 2.4, 2},
	{6, 1.6, 1.2, 1.6, 1.2, 1.6},
}

func dash(i int) []float64 { return dashes[i%len(dashes)] }

// paint makes a colour of the picture one that the plot library can carry.
type paint doc.Colour

var _ color.Color = paint{}

// RGBA is the colour as given, its alpha multiplied in.
func (p paint) RGBA() (r, g, b, a uint32) {
	return color.NRGBA{R: p.R, G: p.G, B: p.B, A: p.A}.RGBA()
}

// shape is the form of a mark. Filled and open forms alternate, so that neighbours in
// the order differ most.
type shape int

const (
	disc shape = iota
	ring
	square
	openTriangle
	diamond
	openSquare
	triangle
	openDiamond
	plus
	shapes
)

func form(i int) shape { return shape(i % int(shapes)) }

// symbols is how many marks are told apart by shape and colour together.
const symbols = int(shapes) * len(palette)

// symbol is the mark of the i-th of several things; the first of them differ in both.
func symbol(i int) (shape, doc.Colour) {
	const period = 18 // after which shapes and colours would meet again
	return form(i), hue(i + i%symbols/period)
}

// marker draws a mark of about radius r. Filled marks have a thin edge in the page's
// colour, so that those that overlap are still seen as several.
func (c *canvas) marker(s shape, x, y, r float64, colour doc.Colour) {
	var path []doc.Segment
	switch s {
	case disc, ring:
		path = circle(x, y, r)
	case square, openSquare:
		h := r * 0.88
		path = rectangle(x-h, y-h, 2*h, 2*h)
	case triangle, openTriangle:
		h := r * 1.25
		path = polyline(true, [2]float64{x, y - h}, [2]float64{x + h*0.866, y + h/2}, [2]float64{x - h*0.866, y + h/2})
	case diamond, openDiamond:
		h := r * 1.2
		path = polyline(true, [2]float64{x, y - h}, [2]float64{x + h, y}, [2]float64{x, y + h}, [2]float64{x - h, y})
	default:
		l := line{width: 1.1, colour: colour}
		c.stroke(l, append(segment(x-r, y, x+r, y), segment(x, y-r, x, y+r)...)...)
		return
	}
	switch s {
	case ring, openSquare, openTriangle, openDiamond:
		c.fill(paper, path...)
		c.stroke(line{width: 1.1, colour: colour}, path...)
	default:
		c.fill(colour, path...)
		c.stroke(line{width: 0.4, colour: paper}, path...)
	}
}

// cross marks what was left out.
func (c *canvas) cross(x, y, r float64) {
	c.stroke(line{width: 0.9, colour: ink}, append(segment(x-r, y-r, x+r, y+r), segment(x-r, y+r, x+r, y-r)...)...)
}
