package pdf

import (
	"bytes"
	"encoding/hex"
	"fmt"
	"math"
	"strconv"
	"time"

	"github.com/jung-kurt/gofpdf"

	"penwright/render/doc"
	"penwright/render/face"
	"penwright/render/page"
)

// drawn is what the drawing library made of a book, before it is finished.
type drawn struct {
	file []byte
	// blocks tells for each face, by its name, which blocks of 256 runes it was used
	// for, and for which runes.
	runes map[string]*runeSet
	trees []*tree // one, or one for each page where pages are to be files of their own
}

// runeSet is a set of runes up to U+FFFF.
type runeSet [1024]uint64

func (s *runeSet) add(r rune)      { s[r>>6] |= 1 << (r & 63) }
func (s *runeSet) has(r rune) bool { return s[r>>6]&(1<<(r&63)) != 0 }

// pen draws pages. It writes text and paths as operators of its own: the library has
// neither kerning nor word spaces for these faces, and prints fewer decimals.
type pen struct {
	pdf    *gofpdf.Fpdf
	height float64 // of the page
	faces  []*runeSet

	// What the page last had set.
	face         *face.Face
	size         float64
	fill, stroke [3]uint8
	alpha        uint8
	width        float64
	dashed       bool

	// The structure, and where the page stands in it.
	tree    *tree
	at      int           // page of the tree
	element *page.Element // nil: none
	marked  bool          // marked content is open
	of      *page.Element // whose it is
	touched bool          // the element has content since its Begin

	b []byte
}

// draw draws the pages of a book: of one file, or, apart, each for a file of its own.
func draw(book *page.Book, apart bool) (*drawn, error) {
	if len(book.Pages) == 0 {
		return nil, fmt.Errorf("writing the PDF: there is no page")
	}
	size := gofpdf.SizeType{Wd: book.Pages[0].Width, Ht: book.Pages[0].Height}
	pdf := gofpdf.NewCustom(&gofpdf.InitType{OrientationStr: "P", UnitStr: "pt", Size: size})
	pdf.SetMargins(0, 0, 0)
	pdf.SetAutoPageBreak(false, 0)
	pdf.SetCatalogSort(true)
	pdf.SetCompression(false)                  // of pages, which finish packs with less ado
	pdf.SetCreationDate(time.Unix(0, 0).UTC()) // replaced when the file is finished
	pdf.SetModificationDate(time.Unix(0, 0).UTC())
	p := &pen{pdf: pdf, faces: make([]*runeSet, face.Count())}
	d := &drawn{runes: map[string]*runeSet{}}
	for i := range book.Pages {
		if apart || i == 0 {
			n := len(book.Pages)
			if apart {
				n = 1
			}
			p.tree, p.at = newTree(n), 0
			d.trees = append(d.trees, p.tree)
		} else {
			p.at = i
		}
		p.page(&book.Pages[i])
	}
	p.register()
	var out bytes.Buffer
	if err := pdf.Output(&out); err != nil {
		return nil, fmt.Errorf("writing the PDF: %w", err)
	}
	d.file = out.Bytes()
	for i, set := range p.faces {
		if set != nil {
			d.runes[faceAt(i).Name] = set
		}
	}
	return d, nil
}

func faceAt(i int) *face.Face {
	return face.Get(face.Family(i/4), i/2%2 == 1, i%2 == 1)
}

// register tells the library which runes each face was used for: a template sets them
// all and is then thrown away.
func (p *pen) register() {
	for i, set := range p.faces {
		if set == nil {
			continue
		}
		var runes []rune
		for r := rune(0); r <= 0xFFFF; r++ {
			if r&63 == 0 && set[r>>6] == 0 {
				r += 63
				continue
			}
			if set.has(r) {
				runes = append(runes, r)
			}
		}
		p.pdf.CreateTemplate(func(t *gofpdf.Tpl) {
			t.SetFont(faceAt(i).Name, "", 10)
			t.Text(0, 0, string(runes))
		})
	}
}

func (p *pen) page(pg *page.Page) {
	p.pdf.AddPageFormat("P", gofpdf.SizeType{Wd: pg.Width, Ht: pg.Height})
	p.height = pg.Height
	p.face, p.size = nil, 0
	p.fill, p.stroke, p.alpha = [3]uint8{}, [3]uint8{}, 255
	p.width, p.dashed = -1, false
	p.element = nil
	p.b = append(p.b, "1 j\n"...)
	for _, o := range pg.Ops {
		switch o := o.(type) {
		case page.Begin:
			p.element, p.touched = o.Element, false
		case page.End:
			if !p.touched && !artifact(p.element) {
				p.tree.of(p.element)
			}
			p.element = nil
		case page.Link:
			p.tree.link(o, p.at)
		case page.Text:
			p.text(o)
		case page.Box:
			p.box(o)
		case page.Picture:
			p.picture(o)
		}
	}
	p.unmark()
	p.flush()
}

// mark sees to it that what is drawn next is marked as content of the element, or as
// an artifact (ISO 32000-1, clauses 14.6 and 14.8.2.2). It gives the node of the element.
func (p *pen) mark() *node {
	p.touched = true
	none := artifact(p.element)
	if p.marked && (p.of == p.element || none && artifact(p.of) && role(p.of) == role(p.element)) {
		if none {
			return nil
		}
		return p.tree.of(p.element)
	}
	p.unmark()
	p.marked, p.of = true, p.element
	if none {
		switch role(p.element) {
		case page.RunningHead:
			p.op("/Artifact <</Type /Pagination /Subtype /Header>> BDC")
		case page.RunningFoot:
			p.op("/Artifact <</Type /Pagination /Subtype /Footer>> BDC")
		default:
			p.op("/Artifact BMC")
		}
		return nil
	}
	n, mcid := p.tree.content(p.element, p.at)
	kind := n.kind
	if p.element.Role == page.Linked {
		kind = "Link"
	}
	p.b = append(p.b, '/')
	p.b = append(p.b, kind...)
	p.b = append(p.b, " <</MCID "...)
	p.b = strconv.AppendInt(p.b, int64(mcid), 10)
	p.op(">> BDC")
	return n
}

// span marks what is drawn next, up to an EMC, as standing for a text. It is an element
// of its own: readers lose track of marked content in marked content.
func (p *pen) span(actual string) {
	id := ""
	if artifact(p.element) {
		p.mark()
	} else {
		p.unmark()
		p.touched = true
		id = fmt.Sprintf("/MCID %d ", p.tree.span(p.element, p.at))
	}
	p.b = append(p.b, "/Span <<"+id+"/ActualText "...)
	p.b = append(p.b, textString(actual)...)
	p.op(">> BDC")
}

func (p *pen) unmark() {
	if p.marked {
		p.op("EMC")
		p.marked = false
	}
}

func role(el *page.Element) page.Role {
	if el == nil {
		return page.Artifact
	}
	return el.Role
}

// flush hands what has been written to the library.
func (p *pen) flush() {
	if len(p.b) > 0 {
		p.pdf.RawWriteStr(string(p.b))
		p.b = p.b[:0]
	}
}

// num writes a number with at most three decimals.
func (p *pen) num(v float64) {
	const most = 32767
	switch {
	case v != v:
		v = 0
	case v > most:
		v = most
	case v < -most:
		v = -most
	}
	p.b = number(p.b, v)
	p.b = append(p.b, ' ')
}

func number(b []byte, v float64) []byte {
	n := int64(math.Round(v * 1000))
	if n < 0 {
		b = append(b, '-')
		n = -n
	}
	b = strconv.AppendInt(b, n/1000, 10)
	if frac := n % 1000; frac != 0 {
		b = append(b, '.', byte('0'+frac/100))
		if frac%100 != 0 {
			b = append(b, byte('0'+frac/10%10))
			if frac%10 != 0 {
				b = append(b, byte('0'+frac%10))
			}
		}
	}
	return b
}

func (p *pen) op(s string) { p.b = append(append(p.b, s...), '\n') }

// rgb resolves a colour to paper and ink.
func rgb(c doc.Colour) [3]uint8 {
	switch c.Role {
	case doc.Ink:
		return [3]uint8{}
	case doc.Paper:
		return [3]uint8{255, 255, 255}
	case doc.Faint:
		return [3]uint8{0xC4, 0xC7, 0xCA}
	}
	return [3]uint8{c.R, c.G, c.B}
}

func (p *pen) setFill(c doc.Colour) {
	p.setAlpha(c.A)
	if v := rgb(c); v != p.fill {
		p.fill = v
		p.colour(v, "g", "rg")
	}
}

func (p *pen) setStroke(c doc.Colour) {
	p.setAlpha(c.A)
	if v := rgb(c); v != p.stroke {
		p.stroke = v
		p.colour(v, "G", "RG")
	}
}

func (p *pen) colour(v [3]uint8, one, three string) {
	p.num(float64(v[0]) / 255)
	if v[0] == v[1] && v[1] == v[2] {
		p.op(one)
		return
	}
	p.num(float64(v[1]) / 255)
	p.num(float64(v[2]) / 255)
	p.op(three)
}

func (p *pen) setAlpha(a uint8) {
	if a != p.alpha {
		p.alpha = a
		p.flush()
		p.pdf.SetAlpha(float64(a)/255, "Normal")
	}
}

func (p *pen) setFace(f *face.Face, size float64) {
	if f == p.face && size == p.size {
		return
	}
	p.flush()
	if p.faces[f.Index()] == nil {
		p.faces[f.Index()] = new(runeSet)
		// The library writes into the bytes it is given.
		p.pdf.AddUTF8FontFromBytes(f.Name, "", bytes.Clone(f.TTF()))
	}
	p.pdf.SetFont(f.Name, "", size)
	p.face, p.size = f, size
}

func (p *pen) box(o page.Box) {
	p.mark()
	p.setFill(o.Colour)
	p.num(o.X)
	p.num(p.height - o.Y - o.Height)
	p.num(o.Width)
	p.num(o.Height)
	p.op("re f")
}

func (p *pen) text(o page.Text) {
	if o.Text == "" || !(o.Size > 0) {
		return
	}
	if o.Actual != "" {
		p.span(o.Actual)
	} else {
		p.mark()
	}
	p.setFill(o.Colour)
	p.setFace(o.Face, o.Size)
	p.b = append(p.b, "BT "...)
	p.num(o.X)
	p.num(p.height - o.Y)
	p.b = append(p.b, "Td "...)
	p.show(o.Face, o.Text, o.Space*1000/o.Size)
	p.op(" ET")
	if o.Actual != "" {
		p.op("EMC") // of the span
	}
}

// show writes a text with its kerning; space, in thousandths of an em, is added to each
// word space.
func (p *pen) show(f *face.Face, text string, space float64) {
	set := p.faces[f.Index()]
	p.b = append(p.b, "[<"...)
	var before rune
	gap := 0.0
	for _, r := range text {
		if r > 0xFFFF || !f.Has(r) {
			continue // never drawn: a clean text split into runs has none
		}
		if gap += float64(f.Kern(before, r)); gap != 0 {
			p.b = append(p.b, '>')
			p.b = number(p.b, -gap)
			p.b = append(p.b, '<')
			gap = 0
		}
		set.add(r)
		p.b = hex.AppendEncode(p.b, []byte{byte(r >> 8), byte(r)})
		if r == ' ' {
			gap = space
		}
		before = r
	}
	p.b = append(p.b, ">] TJ"...)
}

// picture replays a drawing.
func (p *pen) picture(o page.Picture) {
	if n := p.mark(); n != nil {
		n.box = [4]float64{o.X, p.height - o.Y - o.Picture.Height*o.Scale, o.X + o.Picture.Width*o.Scale, p.height - o.Y}
	}
	at := func(x, y float64) {
		p.num(o.X + x*o.Scale)
		p.num(p.height - o.Y - y*o.Scale)
	}
	for _, op := range o.Picture.Ops {
		switch op := op.(type) {
		case doc.Stroke:
			if !(op.Width > 0) || op.Colour.A == 0 || len(op.Path) == 0 {
				continue
			}
			p.setStroke(op.Colour)
			p.setLine(op.Width*o.Scale, op.Dashes, o.Scale)
			if p.path(op.Path, at) {
				p.op("S")
			}
		case doc.Fill:
			if op.Colour.A == 0 || len(op.Path) == 0 {
				continue
			}
			p.setFill(op.Colour)
			if p.path(op.Path, at) {
				p.op("f")
			}
		case doc.Label:
			p.label(o, op)
		}
	}
	p.setLine(p.width, nil, 1)
	p.setAlpha(255)
}

func (p *pen) setLine(width float64, dashes []float64, scale float64) {
	if width != p.width {
		p.width = width
		p.num(width)
		p.op("w")
	}
	sum := 0.0
	for _, d := range dashes {
		if !(d >= 0) {
			dashes = nil
			break
		}
		sum += d
	}
	if len(dashes) == 0 || !(sum > 0) || math.IsInf(sum, 0) {
		if p.dashed {
			p.dashed = false
			p.op("[] 0 d")
		}
		return
	}
	p.dashed = true
	p.b = append(p.b, '[')
	for _, d := range dashes {
		p.num(d * scale)
	}
	p.op("] 0 d")
}

// path writes a path; it tells whether there is one.
func (p *pen) path(path []doc.Segment, at func(x, y float64)) bool {
	open := false
	for _, s := range path {
		kind := s.Kind
		if !open && kind != doc.Close {
			kind = doc.MoveTo // a path cannot begin with anything else
		}
		switch kind {
		case doc.MoveTo:
			at(s.X, s.Y)
			p.op("m")
			open = true
		case doc.LineTo:
			at(s.X, s.Y)
			p.op("l")
		case doc.CurveTo:
			at(s.X1, s.Y1)
			at(s.X2, s.Y2)
			at(s.X, s.Y)
			p.op("c")
		case doc.Close:
			if open {
				p.op("h")
			}
		}
	}
	return open
}

// label sets the text of a picture, turned about its start.
func (p *pen) label(o page.Picture, l doc.Label) {
	size := l.Size * o.Scale
	text, _ := face.Clean(l.Text)
	if text == "" || !(size > 0) || size > 1000 || l.Colour.A == 0 {
		return
	}
	p.setFill(l.Colour)
	sin, cos := math.Sincos(l.Angle * math.Pi / 180)
	if l.Angle-l.Angle != 0 {
		sin, cos = 0, 1
	}
	x, y := o.X+l.X*o.Scale, p.height-o.Y-l.Y*o.Scale
	runs := face.Get(face.Sans, l.Bold, l.Italic).Runs(text)
	for i, run := range runs {
		if i == len(runs)-1 {
			run.Text += " " // who copies the text has a word end here
		}
		p.setFace(run.Face, size)
		p.b = append(p.b, "BT "...)
		for _, v := range []float64{cos, sin, -sin, cos, x, y} {
			p.num(v)
		}
		p.b = append(p.b, "Tm "...)
		p.show(run.Face, run.Text, 0)
		p.op(" ET")
		width := run.Face.Width(run.Text, size)
		x, y = x+cos*width, y+sin*width
	}
}
