package pdf

import (
	"bytes"
	"compress/zlib"
	"crypto/md5"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"unicode/utf16"
)

// mostAttached is how much Attachments unpacks from one file.
const mostAttached = 512 << 20

// Attachments reads the files that ride in a PDF that Write wrote, in the order of
// their names; earlier releases wrote the table of objects in plain text. It refuses a
// file of another shape (updates after the end, predictors), a file whose bytes do not
// agree with their checksum, and more than 512 MiB of contents.
func Attachments(data []byte) ([]Attachment, error) {
	r, err := open(data)
	if err != nil {
		return nil, fmt.Errorf("reading the PDF: %w", err)
	}
	files, err := r.attachments()
	if err != nil {
		return nil, fmt.Errorf("reading the PDF: %w", err)
	}
	return files, nil
}

// The values of a file: numbers are float64, strings string, the rest as here.
type (
	nameValue string
	refValue  int
	array     []any
	dict      map[string]any
	word      string // true, false, null, or an operator
)

type reader struct {
	data    []byte
	offsets map[int]int
	packed  map[int]place
	streams map[int]*bundle
	trailer dict
	left    int64 // bytes that may still be unpacked
}

// place is where in a stream of objects an object is.
type place struct{ stream, index int }

// bundle is a stream of objects, unpacked.
type bundle struct {
	data    []byte
	numbers []int
	offsets []int
}

var (
	errOther  = errors.New("not a file that this program wrote, or one changed since")
	errDeeper = errors.New("values are nested too deeply")
)

func open(data []byte) (*reader, error) {
	if !bytes.HasPrefix(data, []byte("%PDF-")) {
		return nil, errors.New("not a PDF")
	}
	r := &reader{data: data, offsets: map[int]int{}, packed: map[int]place{}, streams: map[int]*bundle{}, left: mostAttached}
	tail := max(len(data)-1024, 0)
	i := bytes.LastIndex(data[tail:], []byte("startxref"))
	if i < 0 {
		return nil, errOther
	}
	p := &parser{data: data, at: tail + i + len("startxref")}
	table, err := p.whole()
	if err != nil || table < 0 || table >= len(data) {
		return nil, errOther
	}
	p.at = table
	first, err := p.token()
	if err != nil {
		return nil, errOther
	}
	if number, ok := first.(float64); ok {
		return r, r.table(int(number), table)
	}
	if first != word("xref") {
		return nil, errOther
	}
	for {
		v, err := p.value(0)
		if err != nil {
			return nil, errOther
		}
		if v == word("trailer") {
			break
		}
		first, ok := v.(float64)
		count, err := p.whole()
		if !ok || err != nil || first < 0 || first > 1e7 || count < 0 || count > len(data)/20+1 {
			return nil, errOther
		}
		for k := range count {
			offset, err := p.whole()
			if err != nil {
				return nil, errOther
			}
			if _, err := p.whole(); err != nil {
				return nil, errOther
			}
			kind, err := p.value(0)
			if err != nil {
				return nil, errOther
			}
			if kind == word("n") {
				r.offsets[int(first)+k] = offset
			}
		}
	}
	v, err := p.value(0)
	if err != nil {
		return nil, err
	}
	trailer, ok := v.(dict)
	if !ok {
		return nil, errOther
	}
	r.trailer = trailer
	return r, nil
}

// table reads a table of objects that is a stream, object n at an offset.
func (r *reader) table(n, offset int) error {
	r.offsets[n] = offset
	v, raw, err := r.object(n)
	if err != nil {
		return err
	}
	d, ok := v.(dict)
	if !ok || raw == nil || d["Type"] != nameValue("XRef") || d["Index"] != nil || d["Prev"] != nil {
		return errOther
	}
	rows, err := r.unpack(d, raw)
	if err != nil {
		return err
	}
	widths, ok := d["W"].(array)
	if !ok || len(widths) != 3 {
		return errOther
	}
	var w [3]int
	for i, v := range widths {
		f, ok := v.(float64)
		if !ok || f < 1 || f > 4 || f != float64(int(f)) {
			return errOther
		}
		w[i] = int(f)
	}
	size := w[0] + w[1] + w[2]
	if len(rows) > 16<<20 || len(rows)%size != 0 || d["Size"] != float64(len(rows)/size) {
		return errOther
	}
	delete(r.offsets, n)
	for i := 0; i*size < len(rows); i++ {
		row := rows[i*size : (i+1)*size]
		var field [3]int
		for k := range field {
			for _, c := range row[:w[k]] {
				field[k] = field[k]<<8 | int(c)
			}
			row = row[w[k]:]
		}
		switch field[0] {
		case 1:
			r.offsets[i] = field[1]
		case 2:
			r.packed[i] = place{stream: field[1], index: field[2]}
		}
	}
	r.trailer = d
	return nil
}

// unpack gives the contents of a stream.
func (r *reader) unpack(d dict, raw []byte) ([]byte, error) {
	switch {
	case d["Filter"] == nil:
		return raw, nil
	case d["Filter"] != nameValue("FlateDecode") || d["DecodeParms"] != nil:
		return nil, errOther
	}
	z, err := zlib.NewReader(bytes.NewReader(raw))
	if err != nil {
		return nil, err
	}
	defer z.Close()
	data, err := io.ReadAll(io.LimitReader(z, r.left+1))
	if err != nil {
		return nil, err
	}
	if r.left -= int64(len(data)); r.left < 0 {
		return nil, fmt.Errorf("it holds more than %d MiB", mostAttached>>20)
	}
	return data, nil
}

// bundle reads a stream of objects.
func (r *reader) bundle(n int) (*bundle, error) {
	if b := r.streams[n]; b != nil {
		return b, nil
	}
	if _, ok := r.packed[n]; ok {
		return nil, errOther // none stands in another
	}
	v, raw, err := r.object(n)
	if err != nil {
		return nil, err
	}
	d, ok := v.(dict)
	if !ok || raw == nil || d["Type"] != nameValue("ObjStm") {
		return nil, errOther
	}
	count, ok1 := d["N"].(float64)
	first, ok2 := d["First"].(float64)
	data, err := r.unpack(d, raw)
	if err != nil {
		return nil, err
	}
	if !ok1 || !ok2 || count < 0 || count > min(float64(len(data))/2, 1e6) || first < 0 || first > float64(len(data)) {
		return nil, errOther
	}
	b := &bundle{data: data}
	p := &parser{data: data[:int(first)]}
	for range int(count) {
		number, err := p.whole()
		if err != nil {
			return nil, errOther
		}
		offset, err := p.whole()
		if err != nil || offset < 0 || offset >= len(data)-int(first) {
			return nil, errOther
		}
		b.numbers = append(b.numbers, number)
		b.offsets = append(b.offsets, int(first)+offset)
	}
	r.streams[n] = b
	return b, nil
}

// object gives an object and, where it is one, the raw bytes of its stream.
func (r *reader) object(n int) (any, []byte, error) {
	if at, ok := r.packed[n]; ok {
		b, err := r.bundle(at.stream)
		if err != nil {
			return nil, nil, err
		}
		if at.index >= len(b.numbers) || b.numbers[at.index] != n {
			return nil, nil, errOther
		}
		p := &parser{data: b.data, at: b.offsets[at.index]}
		v, err := p.value(0)
		return v, nil, err
	}
	offset, ok := r.offsets[n]
	if !ok || offset < 0 || offset >= len(r.data) {
		return nil, nil, errOther
	}
	p := &parser{data: r.data, at: offset}
	number, err := p.whole()
	if err != nil || number != n {
		return nil, nil, errOther
	}
	if _, err := p.whole(); err != nil {
		return nil, nil, errOther
	}
	if w, err := p.value(0); err != nil || w != word("obj") {
		return nil, nil, errOther
	}
	v, err := p.value(0)
	if err != nil {
		return nil, nil, err
	}
	d, ok := v.(dict)
	if !ok {
		return v, nil, nil
	}
	if w, err := p.value(0); err != nil || w != word("stream") {
		return v, nil, nil
	}
	if p.at < len(r.data) && r.data[p.at] == '\r' {
		p.at++
	}
	p.at++ // the line end after the word
	length, ok := d["Length"].(float64)
	if !ok || length < 0 || length > float64(len(r.data)) || p.at+int(length) > len(r.data) {
		return nil, nil, errOther
	}
	return v, r.data[p.at : p.at+int(length)], nil
}

// dict follows references to a dictionary.
func (r *reader) dict(v any) (dict, error) {
	if n, ok := v.(refValue); ok {
		o, _, err := r.object(int(n))
		if err != nil {
			return nil, err
		}
		v = o
	}
	d, ok := v.(dict)
	if !ok {
		return nil, errOther
	}
	return d, nil
}

func (r *reader) attachments() ([]Attachment, error) {
	root, err := r.dict(r.trailer["Root"])
	if err != nil {
		return nil, err
	}
	if root["Names"] == nil {
		return nil, nil
	}
	names, err := r.dict(root["Names"])
	if err != nil {
		return nil, err
	}
	if names["EmbeddedFiles"] == nil {
		return nil, nil
	}
	tree, err := r.dict(names["EmbeddedFiles"])
	if err != nil {
		return nil, err
	}
	list, ok := tree["Names"].(array)
	if !ok || len(list)%2 != 0 {
		return nil, errOther
	}
	var out []Attachment
	for i := 0; i < len(list); i += 2 {
		spec, err := r.dict(list[i+1])
		if err != nil {
			return nil, err
		}
		a, err := r.attachment(spec)
		if err != nil {
			return nil, err
		}
		out = append(out, a)
	}
	slices.SortFunc(out, func(a, b Attachment) int { return strings.Compare(a.Name, b.Name) })
	return out, nil
}

func (r *reader) attachment(spec dict) (Attachment, error) {
	name, ok := spec["UF"].(string)
	if !ok {
		return Attachment{}, errOther
	}
	a := Attachment{Name: decode(name)}
	if s, ok := spec["Desc"].(string); ok {
		a.Description = decode(s)
	}
	if s, ok := spec["AFRelationship"].(nameValue); ok {
		a.Relationship = string(s)
	}
	files, err := r.dict(spec["EF"])
	if err != nil {
		return a, err
	}
	ref, ok := files["F"].(refValue)
	if !ok {
		return a, errOther
	}
	v, raw, err := r.object(int(ref))
	if err != nil {
		return a, err
	}
	d, ok := v.(dict)
	if !ok || raw == nil {
		return a, errOther
	}
	if s, ok := d["Subtype"].(nameValue); ok {
		a.MIME = string(s)
	}
	if a.Data, err = r.unpack(d, raw); err != nil {
		return a, fmt.Errorf("unpacking %q: %w", a.Name, err)
	}
	params, err := r.dict(d["Params"])
	if err != nil {
		return a, err
	}
	sum := md5.Sum(a.Data)
	if params["CheckSum"] != string(sum[:]) || params["Size"] != float64(len(a.Data)) {
		return a, fmt.Errorf("unpacking %q: its bytes do not agree with its checksum", a.Name)
	}
	return a, nil
}

// decode reads a text string: UTF-16 with a mark, else ASCII.
func decode(s string) string {
	if len(s) < 2 || s[0] != 0xFE || s[1] != 0xFF {
		return s
	}
	var units []uint16
	for i := 2; i+1 < len(s); i += 2 {
		units = append(units, uint16(s[i])<<8|uint16(s[i+1]))
	}
	return string(utf16.Decode(units))
}

// parser reads values.
type parser struct {
	data []byte
	at   int
}

func isSpace(c byte) bool {
	return c == ' ' || c == '\n' || c == '\r' || c == '\t' || c == '\f' || c == 0
}

func isDelimiter(c byte) bool { return bytes.IndexByte([]byte("()<>[]{}/%"), c) >= 0 }

func (p *parser) skip() {
	for p.at < len(p.data) {
		c := p.data[p.at]
		switch {
		case isSpace(c):
			p.at++
		case c == '%':
			for p.at < len(p.data) && p.data[p.at] != '\n' && p.data[p.at] != '\r' {
				p.at++
			}
		default:
			return
		}
	}
}

// whole reads a whole number.
func (p *parser) whole() (int, error) {
	v, err := p.token()
	if err != nil {
		return 0, err
	}
	f, ok := v.(float64)
	if !ok || f != float64(int(f)) {
		return 0, errOther
	}
	return int(f), nil
}

// token reads a number, name or word without looking for references.
func (p *parser) token() (any, error) {
	p.skip()
	start := p.at
	if start < len(p.data) && p.data[start] == '/' {
		p.at++
		return p.name(), nil
	}
	for p.at < len(p.data) && !isSpace(p.data[p.at]) && !isDelimiter(p.data[p.at]) {
		p.at++
	}
	s := string(p.data[start:p.at])
	if s == "" {
		return nil, errOther
	}
	if c := s[0]; '0' <= c && c <= '9' || c == '-' || c == '+' || c == '.' {
		f, err := strconv.ParseFloat(s, 64)
		if err != nil {
			return nil, errOther
		}
		return f, nil
	}
	return word(s), nil
}

func (p *parser) name() nameValue {
	var b []byte
	for p.at < len(p.data) && !isSpace(p.data[p.at]) && !isDelimiter(p.data[p.at]) {
		c := p.data[p.at]
		if c == '#' && p.at+2 < len(p.data) {
			if v, err := strconv.ParseUint(string(p.data[p.at+1:p.at+3]), 16, 8); err == nil {
				b = append(b, byte(v))
				p.at += 3
				continue
			}
		}
		b = append(b, c)
		p.at++
	}
	return nameValue(b)
}

func (p *parser) value(depth int) (any, error) {
	if depth > 32 {
		return nil, errDeeper
	}
	p.skip()
	if p.at >= len(p.data) {
		return nil, errOther
	}
	switch p.data[p.at] {
	case '(':
		return p.literal()
	case '[':
		p.at++
		var list array
		for {
			p.skip()
			if p.at < len(p.data) && p.data[p.at] == ']' {
				p.at++
				return list, nil
			}
			v, err := p.value(depth + 1)
			if err != nil {
				return nil, err
			}
			list = append(list, v)
		}
	case '<':
		if p.at+1 < len(p.data) && p.data[p.at+1] == '<' {
			p.at += 2
			return p.dict(depth)
		}
		return p.hexadecimal()
	}
	v, err := p.token()
	if err != nil {
		return nil, err
	}
	// "12 0 R" is a reference.
	if f, ok := v.(float64); ok && f >= 0 && f <= 1e7 && f == float64(int(f)) {
		save := p.at
		if g, err := p.token(); err == nil && g == float64(0) {
			if w, err := p.token(); err == nil && w == word("R") {
				return refValue(int(f)), nil
			}
		}
		p.at = save
	}
	return v, nil
}

func (p *parser) dict(depth int) (any, error) {
	d := dict{}
	for {
		p.skip()
		if p.at+1 < len(p.data) && p.data[p.at] == '>' && p.data[p.at+1] == '>' {
			p.at += 2
			return d, nil
		}
		key, err := p.token()
		if err != nil {
			return nil, err
		}
		k, ok := key.(nameValue)
		if !ok {
			return nil, errOther
		}
		v, err := p.value(depth + 1)
		if err != nil {
			return nil, err
		}
		d[string(k)] = v
	}
}

func (p *parser) literal() (any, error) {
	var b []byte
	depth := 0
	for ; p.at < len(p.data); p.at++ {
		switch c := p.data[p.at]; c {
		case '\\':
			p.at++
			if p.at >= len(p.data) {
				return nil, errOther
			}
			switch e := p.data[p.at]; e {
			case 'n':
				b = append(b, '\n')
			case 'r':
				b = append(b, '\r')
			case 't':
				b = append(b, '\t')
			default:
				b = append(b, e)
			}
		case '(':
			if depth++; depth > 1 {
				b = append(b, c)
			}
		case ')':
			if depth--; depth == 0 {
				p.at++
				return string(b), nil
			}
			b = append(b, c)
		default:
			b = append(b, c)
		}
	}
	return nil, errOther
}

func (p *parser) hexadecimal() (any, error) {
	p.at++
	end := bytes.IndexByte(p.data[p.at:], '>')
	if end < 0 {
		return nil, errOther
	}
	var b []byte
	half, have := byte(0), false
	for _, c := range p.data[p.at : p.at+end] {
		var v byte
		switch {
		case isSpace(c):
			continue
		case '0' <= c && c <= '9':
			v = c - '0'
		case 'a' <= c && c <= 'f':
			v = c - 'a' + 10
		case 'A' <= c && c <= 'F':
			v = c - 'A' + 10
		default:
			return nil, errOther
		}
		if have {
			b = append(b, half<<4|v)
		}
		half, have = v, !have
	}
	if have {
		b = append(b, half<<4)
	}
	p.at += end + 1
	return string(b), nil
}
