// Package sheet reads the trial's delimited text files (data, roster, allotment, extra
// tables) as cells that know their place: encodings, delimiters, quoting, decimal marks.
// What the cells mean is for others.
package sheet

import (
	"bytes"
	"fmt"
	"strings"
	"unicode/utf8"

	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"

	"penwright/protocol/diag"
)

// The greatest numbers of rows and columns that are read.
const (
	MaxRows    = 1_000_000
	MaxColumns = 1000
)

// The encodings that are recognised.
const (
	UTF8        = "UTF-8"
	UTF16LE     = "UTF-16LE"
	UTF16BE     = "UTF-16BE"
	Windows1252 = "Windows-1252"
)

// Sheet is a delimited text file with a line of headings.
type Sheet struct {
	Path      string
	Encoding  string
	Delimiter rune
	Headings  []string // trimmed
	Heading   Row      // where the headings stand

	text string
	body int // offset of the first row after the headings
	line int // its line
	mark int // bytes of the byte order mark
}

// Cell is one field of a row, trimmed of space; At is where it begins in the row.
type Cell struct {
	Text string
	at   int32 // offset from the start of the row
	line int32 // lines below the first of the row
}

// Row is one record of a sheet. Cells are valid until the next row is asked for.
type Row struct {
	Line  int // first line, from 1
	Cells []Cell

	start int // offset in the text
}

// Blank tells whether all cells of the row are empty.
func (r Row) Blank() bool {
	for _, c := range r.Cells {
		if c.Text != "" {
			return false
		}
	}
	return true
}

// Open decodes a file and reads its headings. delimiter is ",", ";", a tab, or "auto".
// The sheet is nil when the list has an error.
func Open(path string, data []byte, delimiter string) (*Sheet, diag.List) {
	s := &Sheet{Path: path}
	var list diag.List
	fail := func(line int, code, message, hint string) (*Sheet, diag.List) {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: path, Line: line}, Code: code, Message: message, Hint: hint})
		return nil, list
	}
	if bytes.HasPrefix(data, []byte("PK\x03\x04")) {
		return fail(0, NotText, "this is a packed workbook, not a text file", "save the table as text with commas or semicolons between the fields (CSV)")
	}
	s.decode(data)
	if s.Encoding == Windows1252 {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: path, Line: 1}, Severity: diag.Note, Code: Encoding,
			Message: "the file is not UTF-8 and was read as Windows-1252", Hint: "save it as UTF-8 if letters come out wrong"})
	}
	if i := strings.IndexByte(s.text, 0); i >= 0 {
		return fail(1+strings.Count(s.text[:i], "\n"), NotText, "the file holds zero bytes and is no text", "")
	}
	if !strings.Contains(s.text, "\n") {
		s.text = strings.ReplaceAll(s.text, "\r", "\n") // the same length, so places stay
	}
	s.body, s.line = 0, 1
	for s.body < len(s.text) { // empty lines before the headings
		rest := s.text[s.body:]
		end := strings.IndexByte(rest, '\n')
		if end < 0 || strings.TrimSpace(rest[:end]) != "" {
			break
		}
		s.body += end + 1
		s.line++
	}
	if strings.TrimSpace(s.text[s.body:]) == "" {
		return fail(1, EmptyFile, "the file has no headings and no rows", "")
	}
	switch {
	case delimiter == "" || delimiter == "auto":
		s.Delimiter = s.guess()
	default:
		s.Delimiter = rune(delimiter[0])
	}
	r := s.reader()
	row, ok := r.next()
	if !ok {
		list = append(list, r.list.List()...)
		return nil, list
	}
	if len(row.Cells) > MaxColumns {
		return fail(row.Line, TooManyColumns, fmt.Sprintf("%d columns; at most %d are read", len(row.Cells), MaxColumns), "")
	}
	for len(row.Cells) > 1 && row.Cells[len(row.Cells)-1].Text == "" {
		row.Cells = row.Cells[:len(row.Cells)-1] // delimiters that a spreadsheet left at the end
	}
	row.Cells = append([]Cell(nil), row.Cells...)
	s.Heading = row
	first := map[string]int{}
	for i, c := range row.Cells {
		s.Headings = append(s.Headings, c.Text)
		if j, ok := first[c.Text]; ok && c.Text != "" {
			list.Add(diag.Diagnostic{Pos: s.Pos(row, i), Code: DuplicateColumn,
				Message: fmt.Sprintf("the heading %q stands twice", c.Text), Hint: "give one of the columns another heading",
				Related: []diag.Related{{Pos: s.Pos(row, j), Message: "the first is here"}}})
			continue
		}
		first[c.Text] = i
	}
	s.body, s.line = r.at, r.line
	if list.HasErrors() {
		return nil, list
	}
	return s, list
}

// decode finds the encoding and turns the file into UTF-8.
func (s *Sheet) decode(data []byte) {
	order := unicode.LittleEndian
	switch {
	case bytes.HasPrefix(data, []byte{0xEF, 0xBB, 0xBF}):
		s.mark = 3
		if utf8.Valid(data[3:]) {
			s.Encoding, s.text = UTF8, string(data[3:])
			return
		}
		data = data[3:]
	case bytes.HasPrefix(data, []byte{0xFF, 0xFE}):
		s.Encoding, s.mark = UTF16LE, 2
	case bytes.HasPrefix(data, []byte{0xFE, 0xFF}):
		s.Encoding, s.mark, order = UTF16BE, 2, unicode.BigEndian
	case halfZero(data, 1):
		s.Encoding = UTF16LE
	case halfZero(data, 0):
		s.Encoding, order = UTF16BE, unicode.BigEndian
	case utf8.Valid(data):
		s.Encoding, s.text = UTF8, string(data)
		return
	}
	if s.Encoding != "" {
		text, err := unicode.UTF16(order, unicode.IgnoreBOM).NewDecoder().Bytes(data[s.mark:])
		if err == nil {
			s.text = string(text)
			return
		}
	}
	// Every byte has a meaning in it, so this cannot fail.
	text, err := charmap.Windows1252.NewDecoder().Bytes(data)
	if err != nil {
		panic("sheet: a byte without a meaning in Windows-1252")
	}
	s.Encoding, s.text = Windows1252, string(text)
}

// halfZero tells whether the beginning of a file is Latin text in UTF-16 without a byte
// order mark: every second byte, from the one at first, is zero.
func halfZero(data []byte, first int) bool {
	if len(data) < 4 || len(data)%2 != 0 {
		return false
	}
	for i := first; i < min(len(data), 64); i += 2 {
		if data[i] != 0 || data[i^1] == 0 {
			return false
		}
	}
	return true
}

// guess finds the delimiter: the one that divides the headings, and the lines after
// them into as many fields; of several the one that makes most fields.
func (s *Sheet) guess() rune {
	best, score, fields := ',', 0, 1
	for _, d := range []rune{'\t', ';', ','} {
		try := *s
		try.Delimiter = d
		r := try.reader()
		row, ok := r.next()
		if !ok || len(row.Cells) < 2 {
			continue
		}
		h, same, n := len(row.Cells), 1, 1
		for ; n < 50; n++ {
			row, ok := r.next()
			if !ok {
				break
			}
			if len(row.Cells) == h {
				same++
			}
		}
		if sc := same * 1000 / n; sc > score || sc == score && h > fields {
			best, score, fields = d, sc, h
		}
	}
	return best
}

// Pos is the place of a cell of a row in the file as it is stored, its column in bytes.
// A cell beyond the end of the row stands at its last one.
func (s *Sheet) Pos(r Row, cell int) diag.Pos {
	p := diag.Pos{File: s.Path, Line: r.Line}
	if len(r.Cells) == 0 {
		return p
	}
	c := r.Cells[min(cell, len(r.Cells)-1)]
	at := r.start + int(c.at)
	begin := strings.LastIndexByte(s.text[:at], '\n') + 1
	p.Line = r.Line + int(c.line)
	before := s.text[begin:at]
	switch s.Encoding {
	case UTF8:
		p.Col = len(before) + 1
	case Windows1252:
		p.Col = utf8.RuneCountInString(before) + 1
	default:
		for _, r := range before {
			p.Col += 2
			if r > 0xFFFF {
				p.Col += 2
			}
		}
		p.Col++
	}
	if begin == 0 {
		p.Col += s.mark
	}
	return p
}

// Locate finds the place of a cell again by the first line of its row.
func (s *Sheet) Locate(line, cell int) diag.Pos {
	p := diag.Pos{File: s.Path, Line: line}
	r := s.reader()
	for {
		row, ok := r.next()
		if !ok || row.Line > line {
			return p
		}
		if row.Line == line {
			return s.Pos(row, cell)
		}
	}
}

// Rows calls do with every row that is not blank, until it returns false. Cells are as
// many as there are headings, and valid only during the call. The list tells of broken
// quoting, of rows with more or fewer fields than headings, and of too many rows; those
// rows are not handed over, and their number is returned with that of the blank ones.
func (s *Sheet) Rows(do func(Row) bool) (rows, blank, broken int, list diag.List) {
	r := s.reader()
	var faults Faults
	for {
		row, ok := r.next()
		if !ok {
			break
		}
		if row.Blank() {
			blank++
			continue
		}
		if rows++; rows > MaxRows {
			faults.Add(diag.Diagnostic{Pos: diag.Pos{File: s.Path, Line: row.Line}, Code: TooManyRows,
				Message: fmt.Sprintf("more than %d rows", MaxRows), Hint: "split the trial's file, or record at a larger unit"})
			rows--
			break
		}
		h := len(s.Headings)
		for len(row.Cells) > h && row.Cells[len(row.Cells)-1].Text == "" {
			row.Cells = row.Cells[:len(row.Cells)-1]
		}
		if n := len(row.Cells); n != h {
			broken++
			hint := "quote fields that hold the delimiter"
			if n < h {
				hint = "write an empty field for a missing value"
			} else if s.Delimiter == ',' {
				hint = "quote fields that hold a comma; with decimal commas put semicolons between the fields"
			}
			faults.Add(diag.Diagnostic{Pos: s.Pos(row, h), Code: FieldCount,
				Message: fmt.Sprintf("%s, but there are %s", count(n, "field"), count(h, "heading")), Hint: hint})
			continue
		}
		if !do(row) {
			break
		}
	}
	faults.AddAll(r.list.List())
	return rows + r.broken, blank, broken + r.broken, faults.List()
}

func count(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}

// reader walks over the records of a sheet.
type reader struct {
	s      *Sheet
	at     int
	line   int
	broken int
	cells  []Cell
	list   Faults
}

func (s *Sheet) reader() *reader { return &reader{s: s, at: s.body, line: s.line} }

// next reads one record; a record with broken quoting is reported, counted and passed
// over to the end of its line.
func (r *reader) next() (Row, bool) {
	text := r.s.text
	delimiter := byte(r.s.Delimiter)
again:
	if r.at >= len(text) {
		return Row{}, false
	}
	row := Row{Line: r.line, start: r.at}
	r.cells = r.cells[:0]
	below := int32(0)
	i := r.at
	for {
		begin := i
		for i < len(text) && (text[i] == ' ' || text[i] == '\t' && delimiter != '\t') {
			i++
		}
		if i < len(text) && text[i] == '"' {
			cell := Cell{at: int32(i - row.start), line: below}
			value, end, lines, ok := quoted(text, i)
			for ok && end < len(text) && (text[end] == ' ' || text[end] == '\r' || text[end] == '\t' && delimiter != '\t') {
				end++
			}
			if !ok || end < len(text) && text[end] != delimiter && text[end] != '\n' {
				message, hint := "text follows a closing quote", `write a quote inside a quoted field twice: ""`
				if !ok {
					message, hint = "a quoted field is not closed", ""
				}
				r.cells = append(r.cells, cell)
				row.Cells = r.cells
				r.list.Add(diag.Diagnostic{Pos: r.s.Pos(row, len(r.cells)), Code: Quoting, Message: message, Hint: hint})
				r.broken++
				next := strings.IndexByte(text[i:], '\n')
				if next < 0 {
					r.at = len(text)
					return Row{}, false
				}
				r.line += int(below) + 1
				r.at = i + next + 1
				goto again
			}
			cell.Text = strings.TrimSpace(value)
			r.cells = append(r.cells, cell)
			below += lines
			i = end
		} else {
			for i < len(text) && text[i] != delimiter && text[i] != '\n' {
				i++
			}
			raw := text[begin:i]
			trimmed := trimLeft(raw)
			r.cells = append(r.cells, Cell{Text: trimRight(trimmed), at: int32(begin - row.start + len(raw) - len(trimmed)), line: below})
		}
		if i >= len(text) || text[i] == '\n' {
			break
		}
		i++ // the delimiter
		if len(r.cells) > MaxColumns+1 {
			for i < len(text) && text[i] != '\n' {
				i++
			}
			break
		}
	}
	r.at = min(i+1, len(text))
	r.line += int(below) + 1
	row.Cells = r.cells
	return row, true
}

// trimLeft and trimRight are strings.TrimSpace with a short cut for what most cells are.
func trimLeft(s string) string {
	if s == "" || s[0] > ' ' && s[0] < utf8.RuneSelf {
		return s
	}
	return strings.TrimLeftFunc(s, space)
}

func trimRight(s string) string {
	if s == "" || s[len(s)-1] > ' ' && s[len(s)-1] < utf8.RuneSelf {
		return s
	}
	return strings.TrimRightFunc(s, space)
}

// space tells blanks, no-break spaces and the byte order mark.
func space(r rune) bool {
	return r <= ' ' || r == 0x85 || r == 0xA0 || r >= 0x2000 && r <= 0x200B || r == 0x202F || r == 0x3000 || r == 0xFEFF
}

// quoted reads the quoted field that begins at i, and gives where it ends and the line
// breaks within it.
func quoted(text string, i int) (value string, end int, lines int32, ok bool) {
	i++
	begin := i
	var b []byte
	for i < len(text) {
		switch text[i] {
		case '"':
			if i+1 < len(text) && text[i+1] == '"' {
				b = append(b, text[begin:i+1]...)
				i += 2
				begin = i
				continue
			}
			if b == nil {
				return text[begin:i], i + 1, lines, true
			}
			return string(append(b, text[begin:i]...)), i + 1, lines, true
		case '\n':
			lines++
		}
		i++
	}
	return "", i, lines, false
}
