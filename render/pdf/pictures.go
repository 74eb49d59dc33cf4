package pdf

import (
	"bytes"
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"penwright/render/doc"
	"penwright/render/page"
)

// Picture is a picture with the title of the file it becomes.
type Picture struct {
	Title   string
	Picture *doc.Picture
}

// Pictures writes each picture as a file of one page of the picture's size. They are
// drawn together, for making a face ready costs more than drawing: each file holds the
// faces, and the letters of them, that all of them use.
func Pictures(pics []Picture, opt Options) ([][]byte, error) {
	if len(pics) == 0 {
		return nil, nil
	}
	book := &page.Book{}
	for _, p := range pics {
		pg := page.Page{Width: 1, Height: 1}
		if p.Picture != nil {
			pg.Width, pg.Height = limited(p.Picture.Width, 1), limited(p.Picture.Height, 1)
			pg.Ops = []page.Op{
				page.Begin{Element: &page.Element{Role: page.Figure, Alt: p.Title}},
				page.Picture{Scale: 1, Picture: p.Picture},
				page.End{},
			}
		}
		book.Pages = append(book.Pages, pg)
	}
	drawn, err := draw(book, true)
	if err != nil {
		return nil, err
	}
	all, err := split(drawn.file)
	if err != nil {
		return nil, err
	}
	one, err := alone(all, len(pics))
	if err != nil {
		return nil, err
	}
	f := &finisher{objects: one}
	if err := f.fonts(drawn.runes); err != nil {
		return nil, err
	}
	shared := f.objects
	var out [][]byte
	for i, p := range pics {
		f.objects = slices.Clone(shared)
		f.objects[pageObject(0)] = all[pageObject(i)]
		f.objects[pageObject(0)+1] = all[pageObject(i)+1]
		if i > 0 {
			contents := func(i int) string { return fmt.Sprintf("/Contents %d 0 R", pageObject(i)+1) }
			if err := f.replace(pageObject(0), contents(i), contents(0)); err != nil {
				return nil, err
			}
		}
		file, err := f.finish(&page.Book{Pages: book.Pages[i : i+1]}, drawn.trees[i], meta{lang: opt.Lang, title: p.Title, options: opt}, nil)
		if err != nil {
			return nil, err
		}
		out = append(out, file)
	}
	return out, nil
}

var (
	kids      = regexp.MustCompile(`/Kids \[(?:\d+ 0 R )+\]\n/Count \d+\n`)
	reference = regexp.MustCompile(`\b\d+ 0 R\b`)
)

// alone makes of the objects of a file of n pages those of a file with its first page
// only, numbered as the library would have.
func alone(all [][]byte, n int) ([][]byte, error) {
	after := pageObject(n) // the first object that is neither page nor content
	if len(all) <= after || len(kids.FindAll(all[1], -1)) != 1 {
		return nil, errShape
	}
	out := slices.Clone(all[:pageObject(1)])
	out[1] = kids.ReplaceAll(all[1], fmt.Appendf(nil, "/Kids [%d 0 R ]\n/Count 1\n", pageObject(0)))
	out = append(out, all[after:]...)
	shift := after - pageObject(1)
	for i := range out {
		if i < 2 || pageObject(0) <= i && i < pageObject(1) {
			continue
		}
		// Only dictionaries refer to objects; streams stay as they are.
		dict, stream, has := bytes.Cut(out[i], []byte("stream\n"))
		dict = reference.ReplaceAllFunc(dict, func(ref []byte) []byte {
			number, err := strconv.Atoi(strings.TrimSuffix(string(ref), " 0 R"))
			if err != nil || number < after {
				return ref
			}
			return fmt.Appendf(nil, "%d 0 R", number-shift)
		})
		if has {
			dict = slices.Concat(dict, []byte("stream\n"), stream)
		}
		out[i] = dict
	}
	return out, nil
}
