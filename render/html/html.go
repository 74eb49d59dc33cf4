// Package html writes a document as one page that needs nothing else: semantic HTML
// with its style, its script, its figures and the files it was made of inside. The page
// asks for nothing from outside, and its policy forbids it to.
package html

import (
	"bufio"
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"fmt"
	"io"
	"net/url"
	"regexp"
	"strconv"
	"strings"
	"time"
	"unicode/utf8"

	"penwright/render/doc"
)

// Options say how a page is made.
type Options struct {
	// Style is the style sheet. It may use only what stands in the page.
	Style string
}

// script sorts and copies tables. The page is whole without it.
//
//go:embed script.js
var script string

// Write writes d, which must be numbered, as a page with files inside. Equal documents,
// files and options give equal bytes.
func Write(w io.Writer, d *doc.Document, files []Attachment, opt Options) error {
	p := &page{w: bufio.NewWriter(w), doc: d, files: map[string]int{}, called: map[int]bool{}}
	for i, f := range files {
		if err := f.check(); err != nil {
			return fmt.Errorf("write html: %w", err)
		}
		if _, twice := p.files[f.Name]; twice {
			return fmt.Errorf("write html: two attachments are called %q", f.Name)
		}
		p.files[f.Name] = i
	}
	p.head(opt)
	p.body(files)
	if p.err == nil {
		p.err = p.w.Flush()
	}
	if p.err != nil {
		return fmt.Errorf("write html: %w", p.err)
	}
	return nil
}

// page is a page in the making. Faults of writing are kept by w until the end.
type page struct {
	w       *bufio.Writer
	doc     *doc.Document
	files   map[string]int // attachment → place
	called  map[int]bool   // footnotes that have a call with an id
	figures int
	boxes   int
	tables  int
	inLink  bool   // links do not nest
	tail    string // what ends the page
	err     error
}

func (p *page) raw(parts ...string) {
	for _, s := range parts {
		p.w.WriteString(s)
	}
}

func (p *page) rawf(format string, args ...any) { fmt.Fprintf(p.w, format, args...) }

var escaper = strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", `"`, "&quot;", "'", "&#39;")

// esc makes text fit for content and for quoted attributes.
func esc(s string) string { return escaper.Replace(doc.Clean(s)) }

func hash(s string) string {
	sum := sha256.Sum256([]byte(s))
	return "'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'"
}

func (p *page) head(opt Options) {
	d := p.doc
	style := strings.ReplaceAll(opt.Style, "</", `<\/`)
	style = "\n" + strings.TrimSpace(style) + "\n" + paper(d) + "\n"
	code := "\n" + strings.TrimSpace(script) + "\n"

	title := shortened(d.Title, longestTitle)
	if d.Code != "" {
		code := shortened(d.Code, longestTitle/2)
		title = shortened(d.Title, longestTitle-3-utf8.RuneCountInString(code)) + " – " + code
	}
	p.raw("<!DOCTYPE html>\n<html lang=\"", language(d.Lang), "\">\n<head>\n<meta charset=\"utf-8\">\n")
	p.raw("<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src ", hash(style),
		"; script-src ", hash(code), "; img-src data:; base-uri 'none'; form-action 'none'\">\n")
	p.raw("<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n")
	p.raw("<meta name=\"color-scheme\" content=\"light dark\">\n")
	if d.Author != "" {
		p.raw("<meta name=\"author\" content=\"", esc(d.Author), "\">\n")
	}
	p.raw("<title>", esc(title), "</title>\n<style>", style, "</style>\n</head>\n")
	p.raw("<body>\n<a class=\"skip\" href=\"#x_main\">Skip to the text</a>\n")
	p.tail = "<script>" + code + "</script>\n</body>\n</html>\n"
}

// longestTitle is the number of characters that the title of a window has room for.
const longestTitle = 70

// shortened returns s, or the beginning of it with a sign that more follows.
func shortened(s string, longest int) string {
	s = doc.Clean(s)
	if utf8.RuneCountInString(s) <= longest {
		return s
	}
	return strings.TrimSpace(string([]rune(s)[:longest-1])) + "…"
}

// paper is the rule for printed pages, with what stands at their feet.
func paper(d *doc.Document) string {
	size := "A4"
	if d.Paper == "Letter" {
		size = "letter"
	}
	foot := join(" · ", d.Code, d.ShortTitle)
	if d.Fingerprint != "" {
		foot = join(" · ", d.Code, "fingerprint "+d.Fingerprint)
	}
	return "@page { size: " + size + `; margin: 20mm 18mm 22mm; @bottom-left { content: "` + cssString(shortened(foot, longestTitle)) + `"; font: 8pt sans-serif; color: #444; }` +
		` @bottom-right { content: "page " counter(page) " of " counter(pages); font: 8pt sans-serif; color: #444; } }`
}

// cssString makes text fit for a quoted string of a style sheet: what is not a letter, a
// digit or a space of ASCII is written by its number.
func cssString(s string) string {
	var b strings.Builder
	for _, r := range doc.Clean(s) {
		if r == ' ' || r >= '0' && r <= '9' || r >= 'A' && r <= 'Z' || r >= 'a' && r <= 'z' {
			b.WriteRune(r)
		} else {
			fmt.Fprintf(&b, "\\%06x ", r) // the space ends the number
		}
	}
	return b.String()
}

// language returns a language tag, or English for what is none.
func language(tag string) string {
	for _, r := range tag {
		if !(r == '-' || r >= '0' && r <= '9' || r >= 'A' && r <= 'Z' || r >= 'a' && r <= 'z') {
			return "en"
		}
	}
	if tag == "" {
		return "en"
	}
	return tag
}

func (p *page) body(files []Attachment) {
	d := p.doc
	p.raw("<header>\n")
	if head := join(" · ", d.Code, d.Status); head != "" {
		p.raw("<p class=\"kicker\">", esc(head), "</p>\n")
	}
	p.raw("<h1>", esc(d.Title), "</h1>\n")
	if d.Author != "" || d.Date != "" {
		p.raw("<p class=\"byline\">", esc(d.Author))
		if d.Date != "" {
			if d.Author != "" {
				p.raw(" · ")
			}
			if _, err := time.Parse(time.DateOnly, d.Date); err == nil {
				p.raw("<time>", esc(d.Date), "</time>")
			} else {
				p.raw(esc(d.Date))
			}
		}
		p.raw("</p>\n")
	}
	p.raw("</header>\n")
	p.contents(files)
	p.raw("<main id=\"x_main\">\n")
	p.sections(d.Blocks)
	p.notes()
	p.attachments(files)
	p.raw("</main>\n<footer>\n<p>", esc(join(" · ", d.Code, d.ShortTitle, d.Status)))
	if d.Fingerprint != "" {
		p.raw(" · fingerprint <code>", esc(d.Fingerprint), "</code>")
	}
	p.raw("</p>\n</footer>\n", p.tail)
}

func join(sep string, parts ...string) string {
	var kept []string
	for _, s := range parts {
		if s != "" {
			kept = append(kept, s)
		}
	}
	return strings.Join(kept, sep)
}

// deepest is the level of the headings down to which there are sections, which the
// contents name.
const deepest = 2

// contents writes the way through the page: headings down to the second level.
func (p *page) contents(files []Attachment) {
	var list []doc.Heading
	doc.Walk(p.doc.Blocks, func(node any) {
		if h, ok := node.(doc.Heading); ok && h.Level <= deepest && h.ID != "" {
			list = append(list, h)
		}
	})
	if len(list) == 0 {
		return
	}
	p.raw("<nav aria-label=\"Contents\">\n<details open>\n<summary>Contents</summary>\n")
	level := 0
	for _, h := range list {
		for level > h.Level {
			p.raw("</li>\n</ol>\n")
			level--
		}
		if level == h.Level {
			p.raw("</li>\n")
		}
		for level < h.Level {
			p.raw("<ol>\n")
			if level++; level < h.Level {
				p.raw("<li>") // a level without a heading of its own
			}
		}
		p.raw("<li><a href=\"#", esc(h.ID), "\">")
		p.number(h.Number)
		p.raw(esc(doc.Plain(h.Text)), "</a>")
	}
	if len(p.doc.Notes) > 0 {
		p.close(&level, 1)
		p.raw("<li><a href=\"#x_notes\">Notes</a>")
	}
	if len(files) > 0 {
		p.close(&level, 1)
		p.raw("<li><a href=\"#x_files\">Files</a>")
	}
	for ; level > 0; level-- {
		p.raw("</li>\n</ol>\n")
	}
	p.raw("</details>\n</nav>\n")
}

func (p *page) close(level *int, to int) {
	for ; *level > to; *level-- {
		p.raw("</li>\n</ol>\n")
	}
	p.raw("</li>\n")
}

func (p *page) number(number string) {
	if number != "" {
		p.raw("<span class=\"number\">", esc(number), "</span> ")
	}
}

// sections writes the blocks of the text, each heading with what stands under it.
func (p *page) sections(blocks []doc.Block) {
	var open []int // levels of the headings whose sections are open
	closeTo := func(level int) {
		for len(open) > 0 && open[len(open)-1] >= level {
			p.raw("</section>\n")
			open = open[:len(open)-1]
		}
	}
	for i, b := range blocks {
		if h, ok := b.(doc.Heading); ok && h.Level <= deepest {
			closeTo(h.Level)
			p.raw("<section>\n")
			open = append(open, h.Level)
		}
		p.blocks(blocks[i : i+1])
	}
	closeTo(0)
}

func (p *page) blocks(blocks []doc.Block) {
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Heading:
			tag := "h" + strconv.Itoa(min(b.Level+1, 6))
			p.raw("<", tag, attribute("id", b.ID), ">")
			p.number(b.Number)
			p.inlines(b.Text)
			p.raw("</", tag, ">\n")
		case doc.Paragraph:
			p.raw("<p>")
			p.inlines(b.Text)
			p.raw("</p>\n")
		case doc.List:
			p.list(b)
		case doc.Quote:
			p.raw("<blockquote>\n")
			p.blocks(b.Blocks)
			p.raw("</blockquote>\n")
		case doc.Code:
			p.raw("<pre tabindex=\"0\"><code>", esc(b.Text), "</code></pre>\n")
		case doc.Rule:
			p.raw("<hr>\n")
		case doc.Aside:
			p.box(b)
		case doc.Contents:
			// In view beside the text, or before it on a narrow screen.
		case doc.Table:
			p.table(b)
		case doc.Figure:
			p.figure(b)
		default:
			panic("html: unknown block")
		}
	}
}

func attribute(name, value string) string {
	if value == "" {
		return ""
	}
	return " " + name + "=\"" + esc(value) + "\""
}

func (p *page) list(l doc.List) {
	tag := "ul"
	if l.Ordered {
		tag = "ol"
	}
	p.raw("<", tag)
	if l.Ordered && l.Start != 1 {
		p.rawf(" start=\"%d\"", l.Start)
	}
	p.raw(">\n")
	for _, item := range l.Items {
		p.raw("<li>")
		for i, b := range item {
			if words, ok := b.(doc.Paragraph); ok && l.Tight {
				if i > 0 {
					p.raw("<br>")
				}
				p.inlines(words.Text)
				continue
			}
			p.raw("\n")
			p.blocks([]doc.Block{b})
		}
		p.raw("</li>\n")
	}
	p.raw("</", tag, ">\n")
}

func (p *page) box(a doc.Aside) {
	p.boxes++
	id := "x_box_" + strconv.Itoa(p.boxes)
	p.raw("<div class=\"box ", esc(doc.ID(a.Kind)), "\" role=\"note\"")
	if len(a.Title) > 0 {
		p.raw(" aria-labelledby=\"", id, "\">\n<p class=\"box-title\" id=\"", id, "\">")
		p.inlines(a.Title)
		p.raw("</p>\n")
	} else {
		p.raw(">\n")
	}
	p.blocks(a.Blocks)
	p.raw("</div>\n")
}

func (p *page) figure(f doc.Figure) {
	p.figures++
	id := "x_figure_" + strconv.Itoa(p.figures)
	p.raw("<figure", attribute("id", f.ID), ">\n")
	if f.Picture != nil {
		// The region scrolls sideways where the window is narrow, so it takes the focus.
		name := label("Figure", f.Number)
		if name == "" {
			name = "Figure"
		}
		p.raw("<div class=\"plot\" role=\"group\" tabindex=\"0\"", attribute("aria-label", name), ">\n")
		alt := f.Alt
		if alt == "" {
			alt = doc.Plain(f.Caption)
		}
		if err := drawing(p.w, f.Picture, id, "", alt); err != nil && p.err == nil {
			p.err = err
		}
		p.raw("\n</div>\n")
	}
	p.raw("<figcaption>")
	p.caption(label("Figure", f.Number), f.Caption)
	p.raw("</figcaption>\n</figure>\n")
}

func label(kind, number string) string {
	if number == "" {
		return ""
	}
	return kind + " " + number
}

func (p *page) caption(label string, text []doc.Inline) {
	if label != "" {
		p.raw("<b>", esc(label), "</b>")
		if len(text) > 0 {
			p.raw(" ")
		}
	}
	p.inlines(text)
}

func (p *page) inlines(text []doc.Inline) {
	for _, in := range text {
		switch n := in.(type) {
		case doc.Text:
			p.raw(esc(n.Text))
		case doc.Emph:
			p.wrap("em", n.Text)
		case doc.Strong:
			p.wrap("strong", n.Text)
		case doc.Sup:
			p.wrap("sup", n.Text)
		case doc.Sub:
			p.wrap("sub", n.Text)
		case doc.CodeSpan:
			p.raw("<code>", esc(n.Text), "</code>")
		case doc.Link:
			p.link(n.Dest, "", n.Text)
		case doc.Ref:
			p.link("#"+n.ID, " class=\"ref\"", []doc.Inline{doc.Text{Text: n.Text}})
		case doc.FootnoteRef:
			p.call(n.N)
		case doc.Break:
			p.raw("<br>\n")
		default:
			panic("html: unknown inline")
		}
	}
}

func (p *page) wrap(tag string, text []doc.Inline) {
	p.raw("<", tag, ">")
	p.inlines(text)
	p.raw("</", tag, ">")
}

func (p *page) link(dest, class string, text []doc.Inline) {
	address, ok := href(dest)
	if p.inLink || !ok {
		p.inlines(text)
		return
	}
	p.inLink = true
	p.raw("<a", class, " href=\"", esc(address), "\">")
	p.inlines(text)
	p.raw("</a>")
	p.inLink = false
}

// href returns the address to which a page may link: nothing that runs, nothing beside
// it, and nothing that is no address.
func href(dest string) (string, bool) {
	dest = doc.Clean(dest)
	if strings.HasPrefix(dest, "#") && len(dest) > 1 {
		return dest, true
	}
	dest = encoded(dest)
	u, err := url.Parse(dest)
	if err != nil {
		return "", false
	}
	switch u.Scheme {
	case "http", "https":
		if !hostName.MatchString(u.Host) || u.User != nil {
			return "", false
		}
	case "mailto":
		if u.Opaque == "" {
			return "", false
		}
	default:
		return "", false
	}
	return dest, true
}

var hostName = regexp.MustCompile(`^[A-Za-z0-9.-]+(:[0-9]+)?$`)

// encoded writes the bytes that an address cannot hold by their numbers (RFC 3986).
func encoded(address string) string {
	var b strings.Builder
	hash := false
	for i := range len(address) {
		c := address[i]
		switch {
		case c >= 'a' && c <= 'z', c >= 'A' && c <= 'Z', c >= '0' && c <= '9', strings.IndexByte("-._~:/?@!$&'()*+,;=", c) >= 0,
			c == '%' && i+2 < len(address) && hex(address[i+1]) && hex(address[i+2]):
			b.WriteByte(c)
		case c == '#' && !hash:
			hash = true
			b.WriteByte(c)
		default:
			fmt.Fprintf(&b, "%%%02X", c)
		}
	}
	return b.String()
}

func hex(c byte) bool { return c >= '0' && c <= '9' || c >= 'a' && c <= 'f' || c >= 'A' && c <= 'F' }

func (p *page) call(n int) {
	number := strconv.Itoa(n)
	if p.inLink || n < 1 || n > len(p.doc.Notes) {
		p.raw("<sup>", number, "</sup>")
		return
	}
	id := ""
	if !p.called[n] {
		p.called[n] = true
		id = " id=\"x_call_" + number + "\""
	}
	p.raw("<sup class=\"call\"><a", id, " href=\"#x_note_", number, "\" role=\"doc-noteref\">", number, "</a></sup>")
}

func (p *page) notes() {
	if len(p.doc.Notes) == 0 {
		return
	}
	p.raw("<section class=\"notes\">\n<h2 id=\"x_notes\">Notes</h2>\n<ol>\n")
	for i, note := range p.doc.Notes {
		number := strconv.Itoa(i + 1)
		p.raw("<li id=\"x_note_", number, "\">\n")
		p.blocks(note)
		if p.called[i+1] {
			p.raw("<a class=\"back\" href=\"#x_call_", number, "\" role=\"doc-backlink\" aria-label=\"Back to the call of note ", number, "\">↩\uFE0E</a>")
		}
		p.raw("</li>\n")
	}
	p.raw("</ol>\n</section>\n")
}
