package page_test

import (
	"math"
	"slices"
	"strings"
	"testing"

	"penwright/render/face"
	"penwright/render/page"
)

// What no page may show, whatever the document.

const (
	side = 74.0 // the margins
	head = 74.0
	foot = 76.0
)

// rect is where a text has its ink, give or take.
type rect struct{ left, top, right, bottom float64 }

func rectOf(o page.Text) rect {
	return rect{o.X, o.Y - 0.68*o.Size, o.X + width(o), o.Y + 0.18*o.Size}
}

func furniture(e *page.Element) bool {
	return e != nil && (e.Role == page.RunningHead || e.Role == page.RunningFoot)
}

// check looks for what no page may show: elements that nest or do not close, text
// without an element, over the margins, over other text, in glyphs that its face lacks,
// with word spaces beyond their limits.
func check(t *testing.T, book *page.Book) {
	t.Helper()
	const tolerance = 0.02
	for i, pg := range book.Pages {
		var open *page.Element
		var all []page.Text
		for _, o := range pg.Ops {
			switch o := o.(type) {
			case page.Begin:
				if open != nil || o.Element == nil {
					t.Fatalf("page %d: elements nest", i+1)
				}
				open = o.Element
			case page.End:
				open = nil
			case page.Text:
				if open == nil {
					t.Fatalf("page %d: %q belongs to no element", i+1, o.Text)
				}
				all = append(all, o)
				right := o.X + width(o)
				if !(o.X >= side-tolerance && right <= pg.Width-side+tolerance) {
					t.Errorf("page %d: %q stands from %.2f to %.2f of %.2f", i+1, o.Text, o.X, right, pg.Width)
				}
				top, bottom := head, pg.Height-foot
				if furniture(open) {
					top, bottom = 30, pg.Height-30
				}
				if !(o.Y > top && o.Y <= bottom+tolerance) {
					t.Errorf("page %d: %q stands at height %.2f", i+1, o.Text, o.Y)
				}
				for _, r := range o.Text {
					if !o.Face.Has(r) {
						t.Errorf("page %d: %s lacks %U", i+1, o.Face.Name, r)
					}
				}
				if natural := o.Face.Width(" ", o.Size); o.Space < -0.2*natural-1e-6 || o.Space > 0.6*natural+1e-6 {
					t.Errorf("page %d: %q has word spaces of %.3f", i+1, o.Text, (natural+o.Space)/natural)
				}
			case page.Box:
				if math.IsNaN(o.X+o.Y+o.Width+o.Height) || o.Height < 0 || o.Width < -0.01 {
					t.Errorf("page %d: box %+v", i+1, o)
				}
			case page.Picture:
				if w, h := o.Picture.Width*o.Scale, o.Picture.Height*o.Scale; o.X < side-tolerance || o.X+w > pg.Width-side+tolerance || o.Y < head-tolerance || o.Y+h > pg.Height-foot+tolerance {
					t.Errorf("page %d: a picture of %.1f × %.1f at %.1f, %.1f", i+1, w, h, o.X, o.Y)
				}
			}
		}
		if open != nil {
			t.Fatalf("page %d: an element is not closed", i+1)
		}
		overlaps(t, i, all)
	}
}

// overlaps complains of texts that stand on each other.
func overlaps(t *testing.T, i int, all []page.Text) {
	t.Helper()
	slices.SortStableFunc(all, func(a, b page.Text) int { return cmpFloat(rectOf(a).top, rectOf(b).top) })
	tallest := 0.0
	for _, o := range all {
		tallest = max(tallest, o.Size)
	}
	for k, a := range all {
		ra := rectOf(a)
		if strings.TrimSpace(a.Text) == "" || ra.right-ra.left < 0.1 {
			continue
		}
		for _, b := range all[k+1:] {
			rb := rectOf(b)
			if rb.top > ra.bottom {
				break
			}
			if strings.TrimSpace(b.Text) == "" || rb.right-rb.left < 0.1 {
				continue
			}
			if min(ra.right, rb.right)-max(ra.left, rb.left) > 0.05 && min(ra.bottom, rb.bottom)-max(ra.top, rb.top) > 0.05 {
				t.Errorf("page %d: %q at %.1f, %.1f and %q at %.1f, %.1f stand on each other", i+1, a.Text, a.X, a.Y, b.Text, b.X, b.Y)
			}
		}
	}
}

func cmpFloat(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// piece is a line of an element, or a picture, in the order of a page.
type piece struct {
	el      *page.Element // the block that it belongs to
	y       float64
	picture bool
}

// blockOf is what stands in the flow: a paragraph, heading, caption, row, picture. It is
// nil for footnotes and what is no part of the text.
func blockOf(e *page.Element) *page.Element {
	var block *page.Element
	for ; e != nil; e = e.Parent {
		switch e.Role {
		case page.Artifact, page.RunningHead, page.RunningFoot, page.Note:
			return nil
		case page.Title, page.Heading, page.Paragraph, page.Caption, page.TableRow, page.Figure, page.Code, page.ContentsEntry, page.ItemLabel:
			if block == nil {
				block = e
			}
		}
	}
	return block
}

// pieces lists the lines of the flow on a page from top to bottom.
func pieces(pg page.Page) []piece {
	var out []piece
	var el *page.Element
	for _, o := range pg.Ops {
		switch o := o.(type) {
		case page.Begin:
			el = blockOf(o.Element)
		case page.Picture:
			if el != nil {
				out = append(out, piece{el: el, y: o.Y, picture: true})
			}
		case page.Text:
			if el == nil || el.Role == page.ItemLabel {
				continue
			}
			// Raised and lowered text is part of its line.
			n := len(out)
			if n > 0 && out[n-1].el == el && math.Abs(out[n-1].y-o.Y) < 6 {
				continue
			}
			out = append(out, piece{el: el, y: o.Y})
		}
	}
	return out
}

// breaks complains of pages that begin or end as none may: with a heading or a caption
// last, with one line of a paragraph, with a heading that has less than two lines of
// what it stands above.
func breaks(t *testing.T, book *page.Book) {
	t.Helper()
	whole := map[*page.Element]int{}
	for _, pg := range book.Pages {
		for _, p := range pieces(pg) {
			whole[p.el]++
		}
	}
	for i, pg := range book.Pages {
		lines := pieces(pg)
		here := map[*page.Element]int{}
		for _, p := range lines {
			here[p.el]++
		}
		for k, p := range lines {
			switch p.el.Role {
			case page.Heading:
				if k > 0 && lines[k-1].el == p.el && k+1 < len(lines) && lines[k+1].el == p.el {
					continue
				}
				if here[p.el] != whole[p.el] && whole[p.el] < 20 {
					t.Errorf("page %d: a heading is broken", i+1)
				}
				if i == len(book.Pages)-1 && k == len(lines)-1 {
					continue // there is nothing below it
				}
				if k == len(lines)-1 {
					t.Errorf("page %d ends with a heading", i+1)
				}
			case page.Paragraph:
				if here[p.el] == 1 && whole[p.el] > 1 {
					t.Errorf("page %d: one line of a paragraph of %d", i+1, whole[p.el])
				}
			case page.Caption:
				if k == len(lines)-1 && p.el.Parent.Role == page.Table {
					t.Errorf("page %d ends with the caption of a table", i+1)
				}
			}
		}
	}
}

// fill is how much of a page's height is used, by text, pictures or footnotes.
func fill(pg page.Page) float64 {
	low, notes, first := head, 0.0, math.Inf(1)
	var el *page.Element
	for _, o := range pg.Ops {
		switch o := o.(type) {
		case page.Begin:
			el = o.Element
		case page.Text:
			if furniture(el) {
				continue
			}
			if note(el) {
				first = min(first, o.Y-o.Size)
			} else {
				low = max(low, o.Y)
			}
		case page.Picture:
			low = max(low, o.Y+o.Picture.Height*o.Scale)
		}
	}
	if first < math.Inf(1) {
		notes = pg.Height - foot - first
	}
	return min((low-head+notes)/(pg.Height-head-foot), 1)
}

func note(e *page.Element) bool {
	for ; e != nil; e = e.Parent {
		if e.Role == page.Note {
			return true
		}
	}
	return false
}

// justifiedLines counts the lines of running text that end at the right edge, and those
// of paragraphs set ragged: lines but the last that do not.
func justifiedLines(book *page.Book) (even, uneven int) {
	type key struct {
		el *page.Element
		y  float64
		i  int
	}
	right := map[key]float64{}
	var order []key
	for i, pg := range book.Pages {
		var el *page.Element
		for _, o := range pg.Ops {
			switch o := o.(type) {
			case page.Begin:
				el = blockOf(o.Element)
			case page.Text:
				if el == nil || el.Role != page.Paragraph || el.Parent.Role != page.Section || o.Face.Family != face.Serif {
					continue
				}
				k := key{el, math.Round(o.Y), i}
				if n := len(order); n > 0 && order[n-1].el == el && order[n-1].i == i && math.Abs(order[n-1].y-k.y) < 6 {
					k = order[n-1]
				}
				if _, ok := right[k]; !ok {
					order = append(order, k)
				}
				right[k] = max(right[k], o.X+width(o))
			}
		}
	}
	for n, k := range order {
		if n+1 == len(order) || order[n+1].el != k.el {
			continue
		}
		if math.Abs(right[k]-(book.Pages[k.i].Width-side)) < 0.05 {
			even++
		} else {
			uneven++
		}
	}
	return even, uneven
}
