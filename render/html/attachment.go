package html

import (
	"bytes"
	"encoding/base64"
	"errors"
	"fmt"
	"html"
	"io/fs"
	"regexp"
	"strconv"
	"strings"
)

// Attachment is a file that rides inside a page. Name is a slash-separated path.
type Attachment struct {
	Name, MIME string
	Data       []byte
}

// What a page may carry.
const (
	maxFiles = 10_000
	maxBytes = 256 << 20
)

var mimeType = regexp.MustCompile(`^[a-z]+/[a-z0-9.+-]+$`)

func (a Attachment) check() error {
	if !fs.ValidPath(a.Name) || a.Name == "." || a.Name != cleanName(a.Name) {
		return fmt.Errorf("%q is no name of an attachment", a.Name)
	}
	if !mimeType.MatchString(a.MIME) {
		return fmt.Errorf("%q is no type of the attachment %q", a.MIME, a.Name)
	}
	return nil
}

// cleanName returns name without what an attribute would not carry through.
func cleanName(name string) string {
	return strings.Map(func(r rune) rune {
		if r < 0x20 || r == 0x7f || r == 0xfffd {
			return -1
		}
		return r
	}, html.UnescapeString(esc(name)))
}

// The links to attachments are written and read by these marks only.
const (
	openLink = `<a class="attachment" download="`
	openHref = `" href="data:`
	openData = `;base64,`
)

func (p *page) attachments(files []Attachment) {
	if len(files) == 0 {
		return
	}
	p.raw("<section class=\"files\">\n<h2 id=\"x_files\">Files</h2>\n<p>This report holds the files it was made of.</p>\n<ul>\n")
	for i, f := range files {
		p.raw("<li id=\"x_file_", strconv.Itoa(i+1), "\">", openLink, esc(f.Name), openHref, f.MIME, openData)
		encoder := base64.NewEncoder(base64.StdEncoding, p.w)
		encoder.Write(f.Data) // faults of p.w are kept until it is flushed
		encoder.Close()
		p.raw("\">", esc(f.Name), "</a> <span class=\"size\">", size(len(f.Data)), "</span></li>\n")
	}
	p.raw("</ul>\n</section>\n")
}

// size names a number of bytes, its digits in threes.
func size(n int) string {
	if n == 1 {
		return "1 byte"
	}
	digits := strconv.Itoa(n)
	var b strings.Builder
	for i, c := range digits {
		if i > 0 && (len(digits)-i)%3 == 0 {
			b.WriteString("\u2009")
		}
		b.WriteRune(c)
	}
	return b.String() + " bytes"
}

// Attachments returns the files inside a page that Write wrote. A page without files has
// none; one whose files do not read is an error.
func Attachments(data []byte) ([]Attachment, error) {
	var files []Attachment
	seen := map[string]bool{}
	total := 0
	for {
		_, rest, found := bytes.Cut(data, []byte(openLink))
		if !found {
			return files, nil
		}
		a, after, size, err := readAttachment(rest, maxBytes-total)
		if err != nil {
			return nil, fmt.Errorf("read attachment %d: %w", len(files)+1, err)
		}
		if seen[a.Name] {
			return nil, fmt.Errorf("read attachment %d: two files are called %q", len(files)+1, a.Name)
		}
		if len(files) == maxFiles {
			return nil, fmt.Errorf("more than %d attachments", maxFiles)
		}
		seen[a.Name] = true
		total += size
		files = append(files, a)
		data = after
	}
}

var errNotClosed = errors.New("its link does not end")

func readAttachment(rest []byte, budget int) (a Attachment, after []byte, size int, err error) {
	name, rest, ok := bytes.Cut(rest, []byte(openHref))
	if !ok || bytes.ContainsAny(name, `"<>`) {
		return a, nil, 0, errNotClosed
	}
	mime, rest, ok := bytes.Cut(rest, []byte(openData))
	if !ok || bytes.ContainsAny(mime, `"<>`) {
		return a, nil, 0, errNotClosed
	}
	code, after, ok := bytes.Cut(rest, []byte(`"`))
	if !ok {
		return a, nil, 0, errNotClosed
	}
	a = Attachment{Name: html.UnescapeString(string(name)), MIME: string(mime)}
	if err := a.check(); err != nil {
		return a, nil, 0, err
	}
	size = base64.StdEncoding.DecodedLen(len(code))
	if size > budget {
		return a, nil, 0, fmt.Errorf("the files take more than %d bytes", maxBytes)
	}
	a.Data = make([]byte, size)
	n, err := base64.StdEncoding.Strict().Decode(a.Data, code)
	if err != nil {
		return a, nil, 0, fmt.Errorf("%q: %w", a.Name, err)
	}
	a.Data = a.Data[:n]
	return a, after, size, nil
}
