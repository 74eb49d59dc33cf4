package pdf

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"testing"

	"penwright/render/page"
	"penwright/render/page/pagetest"
)

// Bookmarks and links lead to the place that the layout names, inside the document and
// out of it, and the numbers in the contents are those of the pages.
func TestWhereLinksLead(t *testing.T) {
	for _, paper := range []string{"A4", "Letter"} {
		d := pagetest.Sample()
		d.Paper = paper
		book, _ := page.Lay(d)
		var b bytes.Buffer
		if _, err := Write(&b, d, nil, Options{}); err != nil {
			t.Fatal(err)
		}
		r, err := open(b.Bytes())
		if err != nil {
			t.Fatal(err)
		}
		c := &checker{reader: r}
		root := c.at(r.trailer["Root"])
		var pages []any
		for _, k := range c.list(c.at(root["Pages"])["Kids"]) {
			pages = append(pages, k)
		}
		if len(pages) != len(book.Pages) {
			t.Fatalf("%d pages, laid out are %d", len(pages), len(book.Pages))
		}
		leads := func(what string, dest any, to page.Place) {
			a := c.list(dest)
			height := book.Pages[to.Page].Height
			if len(a) != 5 || a[0] != pages[to.Page] || a[1] != nameValue("XYZ") || math.Abs(a[3].(float64)-min(height-to.Y+12, height)) > 0.01 {
				t.Errorf("%s leads to %v, not to page %d, %.1f from above", what, a, to.Page+1, to.Y)
			}
		}

		// Bookmarks, in the order of the headings and one below the other as they are.
		at := 0
		var walk func(v any, above []int)
		walk = func(v any, above []int) {
			for v != nil && at < len(book.Outline) {
				e := c.at(v)
				want := book.Outline[at]
				at++
				title, _ := e["Title"].(string)
				if decode(title) != want.Title {
					t.Errorf("bookmark %d is %q, the heading %q", at, decode(title), want.Title)
				}
				if len(above) > 0 && want.Level <= above[len(above)-1] {
					t.Errorf("bookmark %q of level %d stands below one of level %d", want.Title, want.Level, above[len(above)-1])
				}
				leads(fmt.Sprintf("bookmark %q", want.Title), e["Dest"], want.Place)
				walk(e["First"], append(above[:len(above):len(above)], want.Level))
				v = e["Next"]
			}
		}
		walk(c.at(root["Outlines"])["First"], nil)
		if at != len(book.Outline) || at < 6 {
			t.Errorf("%d bookmarks, %d headings", at, len(book.Outline))
		}

		inside, outside, notes := 0, 0, 0
		for i, pg := range book.Pages {
			annots := c.list(c.at(pages[i])["Annots"])
			for _, o := range pg.Ops {
				l, ok := o.(page.Link)
				if !ok {
					continue
				}
				if len(annots) == 0 {
					t.Fatalf("page %d lacks links", i+1)
				}
				a := c.at(annots[0])
				annots = annots[1:]
				rect := c.list(a["Rect"])
				if math.Abs(rect[0].(float64)-l.X) > 0.01 || math.Abs(rect[3].(float64)-(pg.Height-l.Y)) > 0.01 {
					t.Errorf("page %d: the link to %s covers %v", i+1, l.Dest, rect)
				}
				if id, in := strings.CutPrefix(l.Dest, "#"); in {
					inside++
					if strings.HasPrefix(id, "fn:") {
						notes++
					}
					leads("the link to "+id, a["Dest"], book.Anchors[id])
				} else if outside++; c.at(a["A"])["URI"] != l.Dest {
					t.Errorf("page %d: the link to %s leads to %v", i+1, l.Dest, c.at(a["A"]))
				}
			}
			if len(annots) != 0 {
				t.Errorf("page %d has %d links more", i+1, len(annots))
			}
		}
		if inside < 10 || outside < 1 || notes < 2 {
			t.Errorf("%d links inside, %d of them to notes, %d outside", inside, notes, outside)
		}

		// The contents.
		numbered := 0
		var toc func(s *Struct)
		tree, _ := Read(b.Bytes())
		toc = func(s *Struct) {
			for _, k := range s.Kids {
				toc(k)
			}
			if s.Kind != "TOCI" {
				return
			}
			for _, e := range book.Outline {
				title := strings.Join(strings.Fields(e.Title), " ")
				if strings.Join(strings.Fields(s.Text), " ") == fmt.Sprint(title, " ", e.Place.Page+1) {
					numbered++
					return
				}
			}
			t.Errorf("the contents say %q", s.Text)
		}
		toc(tree)
		if numbered < 4 {
			t.Errorf("%d lines of contents", numbered)
		}
	}
}
