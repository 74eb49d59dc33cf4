// Package raster draws pictures as points of colour, for outputs that hold no other
// pictures: the same strokes and letters as on paper, at a number of points to the inch.
package raster

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"image"
	"image/color"
	"image/png"
	"io"
	"math"

	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
	"golang.org/x/image/vector"

	"penwright/render/doc"
	"penwright/render/face"
)

// most is the greatest number of points of a picture; a larger one has fewer to the inch.
const most = 16 << 20

var errShape = errors.New("draw points: a picture needs a width and a height")

// PNG writes a picture as it is printed at a scale, with so many points to the inch. A
// picture whose lengths are no sizes is an error.
func PNG(w io.Writer, p *doc.Picture, scale, dpi float64) error {
	img, dpi, err := draw(p, scale, dpi)
	if err != nil {
		return err
	}
	var b bytes.Buffer
	if err := png.Encode(&b, few(img)); err != nil {
		return fmt.Errorf("draw points: %w", err)
	}
	// The size in print belongs behind the header, which is 33 bytes long (PNG, third
	// edition, 11.3.4.3).
	const header = 33
	perMetre := uint32(math.Round(dpi / 0.0254))
	phys := binary.BigEndian.AppendUint32(nil, 9)
	phys = append(phys, "pHYs"...)
	phys = binary.BigEndian.AppendUint32(phys, perMetre)
	phys = binary.BigEndian.AppendUint32(phys, perMetre)
	phys = append(phys, 1) // per metre
	phys = binary.BigEndian.AppendUint32(phys, crc32.ChecksumIEEE(phys[4:]))
	for _, part := range [][]byte{b.Bytes()[:header], phys, b.Bytes()[header:]} {
		if _, err := w.Write(part); err != nil {
			return fmt.Errorf("draw points: %w", err)
		}
	}
	return nil
}

// canvas is an image in the making. Lengths of the picture are multiplied by k.
type canvas struct {
	img    *image.RGBA
	k      float64
	raster vector.Rasterizer
	path   []piece // flattened or not, in points of the image
	fonts  map[*face.Face]*sfnt.Font
	glyphs map[glyph]sfnt.Segments
	buffer sfnt.Buffer
}

type glyph struct {
	face *face.Face
	r    rune
}

func draw(p *doc.Picture, scale, dpi float64) (*image.RGBA, float64, error) {
	if p == nil || !(p.Width > 0 && p.Height > 0 && scale > 0 && dpi > 0) || math.IsInf(p.Width*p.Height*scale*dpi, 0) {
		return nil, 0, errShape
	}
	k := scale * dpi / 72
	if n := p.Width * k * p.Height * k; n > most {
		dpi *= math.Sqrt(most / n)
		k = scale * dpi / 72
	}
	width, height := int(math.Ceil(p.Width*k)), int(math.Ceil(p.Height*k))
	if width > most || height > most || width*height > 2*most {
		return nil, 0, errShape
	}
	c := &canvas{img: image.NewRGBA(image.Rect(0, 0, width, height)), k: k, fonts: map[*face.Face]*sfnt.Font{}, glyphs: map[glyph]sfnt.Segments{}}
	for i := range c.img.Pix {
		c.img.Pix[i] = 0xFF
	}
	for _, op := range p.Ops {
		switch op := op.(type) {
		case doc.Fill:
			c.trace(op.Path)
			c.paint(op.Colour)
		case doc.Stroke:
			c.stroke(op)
		case doc.Label:
			if err := c.label(op); err != nil {
				return nil, 0, err
			}
		case doc.Mark:
		default:
			panic("raster: unknown drawing operation")
		}
	}
	return c.img, dpi, nil
}

// few gives an image of few colours a table of them, which makes its file small.
func few(img *image.RGBA) image.Image {
	index := map[color.RGBA]uint8{}
	var palette color.Palette
	out := image.NewPaletted(img.Rect, nil)
	var last color.RGBA
	var at uint8
	for i := 0; i < len(img.Pix); i += 4 {
		c := color.RGBA{R: img.Pix[i], G: img.Pix[i+1], B: img.Pix[i+2], A: 0xFF}
		if i == 0 || c != last {
			n, ok := index[c]
			if !ok {
				if len(palette) == 256 {
					return img
				}
				n = uint8(len(palette))
				index[c] = n
				palette = append(palette, c)
			}
			last, at = c, n
		}
		out.Pix[i/4] = at
	}
	out.Palette = palette
	return out
}

// rgb gives the colour of ink on paper.
func rgb(c doc.Colour) color.NRGBA {
	switch c.Role {
	case doc.Ink:
		return color.NRGBA{A: c.A}
	case doc.Paper:
		return color.NRGBA{R: 0xFF, G: 0xFF, B: 0xFF, A: c.A}
	case doc.Faint:
		return color.NRGBA{R: 0xC4, G: 0xC7, B: 0xCA, A: c.A}
	}
	return color.NRGBA{R: c.R, G: c.G, B: c.B, A: c.A}
}

// piece is a segment of a path in points of the image.
type piece struct {
	kind                 doc.SegmentKind
	x, y, x1, y1, x2, y2 float64
}

// far is beyond any image: what lies there is drawn as if at its edge.
const far = 1 << 20

func (c *canvas) at(v float64) float64 {
	v *= c.k
	switch {
	case v > far:
		return far
	case v < -far:
		return -far
	case v != v:
		return 0
	}
	return v
}

func (c *canvas) trace(path []doc.Segment) {
	c.path = c.path[:0]
	open := false
	for _, s := range path {
		p := piece{kind: s.Kind, x: c.at(s.X), y: c.at(s.Y), x1: c.at(s.X1), y1: c.at(s.Y1), x2: c.at(s.X2), y2: c.at(s.Y2)}
		if !open && p.kind != doc.Close {
			p.kind = doc.MoveTo // a path cannot begin with anything else
		}
		if !open && p.kind == doc.Close {
			continue
		}
		open = true
		c.path = append(c.path, p)
	}
}

// paint fills the path traced last, within the part of the image that it covers.
func (c *canvas) paint(colour doc.Colour) {
	if colour.A == 0 || len(c.path) == 0 {
		return
	}
	x0, y0, x1, y1 := math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	grow := func(x, y float64) {
		x0, y0, x1, y1 = min(x0, x), min(y0, y), max(x1, x), max(y1, y)
	}
	for _, p := range c.path {
		switch p.kind {
		case doc.MoveTo, doc.LineTo:
			grow(p.x, p.y)
		case doc.CurveTo:
			grow(p.x, p.y)
			grow(p.x1, p.y1)
			grow(p.x2, p.y2)
		}
	}
	box := image.Rect(int(math.Floor(x0)), int(math.Floor(y0)), int(math.Ceil(x1))+1, int(math.Ceil(y1))+1).Intersect(c.img.Rect)
	if box.Empty() {
		return
	}
	c.raster.Reset(box.Dx(), box.Dy())
	dx, dy := float64(box.Min.X), float64(box.Min.Y)
	for _, p := range c.path {
		switch p.kind {
		case doc.MoveTo:
			c.raster.MoveTo(float32(p.x-dx), float32(p.y-dy))
		case doc.LineTo:
			c.raster.LineTo(float32(p.x-dx), float32(p.y-dy))
		case doc.CurveTo:
			c.raster.CubeTo(float32(p.x1-dx), float32(p.y1-dy), float32(p.x2-dx), float32(p.y2-dy), float32(p.x-dx), float32(p.y-dy))
		case doc.Close:
			c.raster.ClosePath()
		}
	}
	c.raster.Draw(c.img, box, image.NewUniform(rgb(colour)), image.Point{})
}

// label sets the text of a picture, turned about its start.
func (c *canvas) label(l doc.Label) error {
	text, _ := face.Clean(l.Text)
	size := l.Size * c.k
	if text == "" || !(l.Size > 0) || l.Size > 1000 || l.Colour.A == 0 {
		return nil
	}
	sin, cos := math.Sincos(l.Angle * math.Pi / 180)
	if l.Angle-l.Angle != 0 {
		sin, cos = 0, 1
	}
	x, y := c.at(l.X), c.at(l.Y)
	c.path = c.path[:0]
	for _, run := range face.Get(face.Sans, l.Bold, l.Italic).Runs(text) {
		var before rune
		for _, r := range run.Text {
			kern := float64(run.Face.Kern(before, r)) * size / 1000
			x, y = x+cos*kern, y-sin*kern
			segments, em, err := c.glyph(run.Face, r)
			if err != nil {
				return err
			}
			unit := size / em
			place := func(p fixed.Point26_6) (float64, float64) {
				u, v := float64(p.X)*unit, float64(p.Y)*unit
				return x + u*cos + v*sin, y - u*sin + v*cos
			}
			for _, s := range segments {
				var p piece
				switch s.Op {
				case sfnt.SegmentOpMoveTo:
					p.kind = doc.MoveTo
					p.x, p.y = place(s.Args[0])
				case sfnt.SegmentOpLineTo:
					p.kind = doc.LineTo
					p.x, p.y = place(s.Args[0])
				case sfnt.SegmentOpQuadTo:
					// A quadratic curve as a cubic one.
					last := c.path[len(c.path)-1]
					qx, qy := place(s.Args[0])
					p.kind = doc.CurveTo
					p.x, p.y = place(s.Args[1])
					p.x1, p.y1 = last.x+2*(qx-last.x)/3, last.y+2*(qy-last.y)/3
					p.x2, p.y2 = p.x+2*(qx-p.x)/3, p.y+2*(qy-p.y)/3
				case sfnt.SegmentOpCubeTo:
					p.kind = doc.CurveTo
					p.x1, p.y1 = place(s.Args[0])
					p.x2, p.y2 = place(s.Args[1])
					p.x, p.y = place(s.Args[2])
				}
				c.path = append(c.path, p)
			}
			advance := float64(run.Face.Advance(r)) * size / 1000
			x, y = x+cos*advance, y-sin*advance
			before = r
		}
	}
	c.paint(l.Colour)
	return nil
}

// glyph gives the outline of a rune in units of the face, and their number to the em.
func (c *canvas) glyph(f *face.Face, r rune) (sfnt.Segments, float64, error) {
	parsed := c.fonts[f]
	if parsed == nil {
		var err error
		if parsed, err = sfnt.Parse(f.TTF()); err != nil {
			return nil, 1, fmt.Errorf("draw points: face %s: %w", f.Name, err)
		}
		c.fonts[f] = parsed
	}
	em := parsed.UnitsPerEm()
	key := glyph{face: f, r: r}
	if s, ok := c.glyphs[key]; ok {
		return s, float64(em), nil
	}
	var out sfnt.Segments
	if f.Has(r) {
		index, err := parsed.GlyphIndex(&c.buffer, r)
		if err != nil {
			return nil, 1, fmt.Errorf("draw points: face %s: %w", f.Name, err)
		}
		s, err := parsed.LoadGlyph(&c.buffer, index, fixed.Int26_6(em), &sfnt.LoadGlyphOptions{})
		if err != nil {
			return nil, 1, fmt.Errorf("draw points: face %s: %w", f.Name, err)
		}
		out = append(out, s...)
	}
	c.glyphs[key] = out
	return out, float64(em), nil
}
