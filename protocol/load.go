package protocol

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/BurntSushi/toml"

	"penwright/protocol/diag"
	"penwright/protocol/internal/tomlpos"
)

// The limits of what is read. What is beyond them is refused.
const (
	maxFile      = 64 << 20  // bytes of the protocol file
	maxText      = 1 << 20   // bytes of a text file
	maxTexts     = 16 << 20  // bytes of all text files together
	maxLevels    = 10_000    // of a factor
	maxResponses = 1_000     //
	maxCovariate = 1_000     //
	maxFactors   = 100       //
	maxUnits     = 100       // declared; of physical units there may be maxCount
	maxCount     = 1_000_000 // observational units
	maxTreated   = 100_000   // units that receive a treatment
	maxList      = 100_000   // elements of any other list
	maxFaults    = 1_000     // after so many the rest is only counted
)

// Load reads and validates the protocol file at path, normally "protocol.toml", and
// the text files that it names. Files are read only through fsys. The list holds all
// faults of the file, sorted; if it has errors the Protocol holds what could be
// understood, and is nil if the file cannot be read or is not TOML of format 1. A
// file that cannot be read has the code Unreadable.
func Load(fsys fs.FS, path string) (*Protocol, diag.List) {
	d := &decoder{fsys: fsys, p: &Protocol{File: path, Texts: map[string]string{}}}
	ok := d.load(path)
	if d.faults > maxFaults {
		d.list.Add(diag.Diagnostic{
			Pos: diag.Pos{File: path}, Severity: diag.Error, Code: TooMany,
			Message: fmt.Sprintf("%d more faults are not listed", d.faults-maxFaults),
			Hint:    "mend those listed first",
		})
	}
	d.list.Sort()
	if !ok {
		return nil, d.list
	}
	return d.p, d.list
}

// decoder is one run of Load.
type decoder struct {
	fsys   fs.FS
	p      *Protocol
	list   diag.List
	faults int     // reported, also those beyond maxFaults
	schema *schema // if not nil, keys are only collected
	texts  int     // bytes of text files read

	allKeys []place
}

func (d *decoder) load(path string) bool {
	source, err := readFile(d.fsys, path, maxFile)
	if err != nil {
		d.unreadable(diag.Pos{File: path}, "", err, "protocol file")
		return false
	}
	d.p.Source = source
	text := bytes.TrimPrefix(source, []byte("\ufeff"))
	doc, err := tomlpos.Scan(path, text)
	d.p.index = keyIndex{doc: doc}
	var limit *tomlpos.LimitError
	if errors.As(err, &limit) {
		f := diag.Diagnostic{Pos: doc.At(limit.Offset), Severity: diag.Error, Code: TooMany,
			Message: fmt.Sprintf("the file has more than %d lines, keys and values", tomlpos.MaxNodes)}
		if limit.Deep {
			f.Message = fmt.Sprintf("lists or tables are nested more than %d deep here", tomlpos.MaxDepth)
		}
		d.add(f)
		return false
	}
	values, fault := parse(doc, text)
	if fault != nil {
		d.add(*fault)
		return false
	}
	root := &table{d: d, node: doc.Root, m: values}
	if !d.format(root) {
		return false
	}
	d.document(root)
	d.resolve()
	return true
}

// format checks the number of the format. Keys of another format mean nothing here.
func (d *decoder) format(root *table) bool {
	v, ok := root.m["protocol"]
	if !ok {
		root.failAt(diag.Pos{File: d.p.File, Line: 1, Col: 1}, "protocol", MissingKey,
			"write protocol = 1 before the first table", "the number of the file format is missing")
		d.p.Format = 1
		return true
	}
	n, ok := v.(int64)
	if !ok {
		root.wrong("protocol", v, "the number of the file format", "write protocol = 1")
		d.p.Format = 1
		return true
	}
	if n != 1 {
		root.fail("protocol", UnknownFormat, "this version of the program reads format 1", "format %d is not known", n)
		return false
	}
	d.p.Format = 1
	return true
}

// readFile reads a regular file of at most limit bytes.
func readFile(fsys fs.FS, path string, limit int64) ([]byte, error) {
	f, err := fsys.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	if info.IsDir() {
		return nil, errFolder
	}
	data, err := io.ReadAll(io.LimitReader(f, limit+1))
	if err != nil {
		return nil, err
	}
	if int64(len(data)) > limit {
		return nil, tooLargeError(limit)
	}
	return data, nil
}

var errFolder = errors.New("is a folder")

// tooLargeError is the limit in bytes that a file is over.
type tooLargeError int64

func (e tooLargeError) Error() string { return fmt.Sprintf("is larger than %d MiB", int64(e)>>20) }

// unreadable reports a file that could not be read; kind says what it is.
func (d *decoder) unreadable(pos diag.Pos, key string, err error, kind string) {
	f := diag.Diagnostic{Pos: pos, Key: key, Severity: diag.Error, Code: Unreadable}
	var large tooLargeError
	var at *fs.PathError
	switch {
	case errors.As(err, &large):
		f.Code, f.Message = TooMany, fmt.Sprintf("the %s is larger than %d MiB", kind, int64(large)>>20)
	case errors.Is(err, fs.ErrNotExist):
		f.Message = fmt.Sprintf("the %s does not exist", kind)
		if key != "" {
			f.Code = MissingFile
		}
	case errors.Is(err, errFolder):
		f.Message = fmt.Sprintf("the %s is a folder", kind)
	case errors.As(err, &at):
		f.Message = fmt.Sprintf("the %s cannot be read: %v", kind, at.Err)
	default:
		f.Message = fmt.Sprintf("the %s cannot be read: %v", kind, err)
	}
	d.add(f)
}

// parse decodes TOML into maps. The library's errors are put in our words and at
// the right place: it counts columns wrongly where a key is repeated.
func parse(doc *tomlpos.Doc, text []byte) (values map[string]any, fault *diag.Diagnostic) {
	defer func() {
		// A fault of the library must not end the program on a file of the user.
		if r := recover(); r != nil {
			values = nil
			fault = &diag.Diagnostic{Pos: diag.Pos{File: doc.File}, Severity: diag.Error, Code: Syntax,
				Message: "this cannot be read as TOML"}
		}
	}()
	if i := bytes.IndexByte(text, 0); i >= 0 {
		return nil, &diag.Diagnostic{Pos: doc.At(i), Severity: diag.Error, Code: Syntax,
			Message: "there is a zero byte here", Hint: "save the file as plain text in UTF-8"}
	}
	if i := invalidUTF8(text); i >= 0 {
		return nil, &diag.Diagnostic{Pos: doc.At(i), Severity: diag.Error, Code: Syntax,
			Message: "this is not UTF-8", Hint: "save the file as plain text in UTF-8"}
	}
	_, err := toml.Decode(string(text), &values)
	if err == nil {
		return values, nil
	}
	f := diag.Diagnostic{Pos: diag.Pos{File: doc.File}, Severity: diag.Error, Code: Syntax}
	var pe toml.ParseError
	if !errors.As(err, &pe) {
		f.Message = "this cannot be read as TOML: " + err.Error()
		return nil, &f
	}
	at := pe.Position.Start
	f.Message, f.Hint = syntaxWords(pe.Message)
	if strings.Contains(pe.Message, "already") && doc.Twice != [2]int{} {
		at = doc.Twice[1]
		f.Related = []diag.Related{{Pos: doc.At(doc.Twice[0]), Message: "first written here"}}
	}
	f.Pos = doc.At(at)
	return nil, &f
}

// invalidUTF8 returns the offset of the first byte that is not UTF-8, or -1.
func invalidUTF8(text []byte) int {
	if utf8.Valid(text) {
		return -1
	}
	for i := 0; i < len(text); {
		r, size := utf8.DecodeRune(text[i:])
		if r == utf8.RuneError && size == 1 {
			return i
		}
		i += size
	}
	return -1
}

// syntaxWords puts the library's message in words for somebody who does not know
// TOML. The first row whose pattern occurs in the message holds; a row without
// words keeps the message.
func syntaxWords(message string) (words, hint string) {
	rows := []struct{ pattern, words, hint string }{
		{"has already been defined", "this key is written twice", "keep one of them; tables that repeat have double brackets, such as [[unit]]"},
		{"was already created", "this name is used both as a table and as something else", "keep one of them; tables that repeat have double brackets, such as [[unit]]"},
		{"is not a table", "this name is used both as a table and as something else", "keep one of them"},
		{"strings cannot contain newlines", "a text in quotes ends with its line", `close the quotes, or use """ for a text of several lines`},
		{"expected '\"'", "a text in quotes is not closed", "close the quotes"},
		{`expected "'"`, "a text in quotes is not closed", "close the quotes"},
		{`expected "'''"`, "a text in quotes is not closed", "close it with '''"},
		{`expected '"""'`, "a text in quotes is not closed", `close it with """`},
		{"unexpected '\"\"\"\"\"\"'", "there are too many quotes here", ""},
		{"unexpected \"''''''\"", "there are too many quotes here", ""},
		{"invalid escape", "a backslash stands before a letter that has no meaning after it", `write \\ for a backslash, or use single quotes: 'C:\trials'`},
		{"hexadecimal digits after", "a backslash with x, u or U needs hexadecimal digits", `write \\ for a backslash, or use single quotes`},
		{"is not valid UTF-8", "this escaped character does not exist", ""},
		{"cannot contain control characters", "there is a control character here", "delete it"},
		{"key name appears blank", "the name before the equals sign is missing", `write key = value`},
		{"keys cannot start with a '.'", "a key cannot begin with a point", ""},
		{"expected '.' or '='", "there is no equals sign after the key", `write key = value, and texts in quotes`},
		{"expected key separator", "there is no equals sign after the key", "write key = value"},
		{"expected end of table array name", "the name of a table is not closed", "write [[name]]"},
		{"table names cannot be empty", "the name of a table is missing", "write [name]"},
		{"to end table name", "the name of a table is not closed", "write [name]"},
		{"expected a top-level item to end", "something follows the value on the same line", "begin a new line, or put the whole text in quotes"},
		{"array terminator", "the list is not closed or a comma is missing", "write [first, second]"},
		{"inline table terminator", "the braces are not closed or a comma is missing", "write { key = value, key = value }"},
		{"unexpected comma", "a comma has nothing before it", "delete it"},
		{"floats must start with a digit", "a number must begin with a digit", "write 0.5 instead of .5"},
		{"must be followed by one or more digits", "a number cannot end with its point", "write 5 or 5.0"},
		{"leading zeroes", "a number cannot begin with zeros", "delete the zeros, or put it in quotes if it is a name"},
		{"underscores must be surrounded", "an underscore in a number must stand between digits", ""},
		{"out of range", "this number is too large", ""},
		{"invalid datetime", "this is not a date", "write year-month-day, such as 2026-03-02"},
		{"Invalid float", "this is not a number", "write a decimal point, such as 4.31; put it in quotes if it is a text"},
		{"invalid float", "this is not a number", "write a decimal point, such as 4.31; put it in quotes if it is a text"},
		{"Invalid integer", "this is not a number", "put it in quotes if it is a text"},
		{"cannot use sign", "this is not a number", ""},
		{"not a binary number", "this is not a number", "put it in quotes if it is a text"},
		{"not an octal number", "this is not a number", "put it in quotes if it is a text"},
		{"not a hexadecimal number", "this is not a number", "put it in quotes if it is a text"},
		{"expected a digit", "a number is wanted here", "put it in quotes if it is a text"},
		{"expected value", "a value is wanted here", "texts stand in quotes; numbers have a decimal point; true and false are lower case"},
		{"unexpected EOF", "the file ends too early", ""},
	}
	i := slices.IndexFunc(rows, func(r struct{ pattern, words, hint string }) bool {
		return strings.Contains(message, r.pattern)
	})
	if i < 0 {
		return "this is not valid TOML: " + message, ""
	}
	return rows[i].words, rows[i].hint
}
