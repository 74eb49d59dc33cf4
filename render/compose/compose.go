// Package compose makes document blocks of templates and of Markdown. It knows nothing
// of trials: data and functions are handed in.
//
// A template is Markdown with the actions of text/template. Before it runs, its parse
// tree is rewritten so that an action puts one private-use character, a token, into the
// text and its value, with its place, aside. The Markdown parser sees only what the
// author of the template wrote, so that no value can be taken for markup; the tokens are
// exchanged for their values in the finished tree.
//
// The world of a template is closed. It reads plain data by field and by key, never a
// method; it calls the functions handed in and a few of its own (and, or, not, eq, ne,
// lt, le, gt, ge, len, index, print); it opens nothing. What it may cost is counted.
package compose

import (
	"fmt"
	"sort"
	"strings"
	"text/template"
	"unicode/utf8"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

// Source is a template or a Markdown text. Name is what templates call it by; messages
// call it by File, or by Name where File is empty.
type Source struct {
	Name, File, Text string
}

// Text is a composed text: its blocks, and the footnotes that they call by their place
// in Notes, from 1. As the value of an action it stands for its blocks, and its
// footnotes are numbered among those of the text around it.
type Text struct {
	Blocks []doc.Block
	Notes  [][]doc.Block
}

// Limits bound what a template may cost. A field that is zero stands for its default.
type Limits struct {
	// Steps are 5 for a node that is run, 20 for a function of compose and 100 for one
	// handed in, and one for each 64 bytes that it is given or gives; default 2 000 000.
	Steps  int
	Depth  int // templates within templates; default 64
	Output int // bytes of Markdown; default 2 MiB
	Values int // bytes of all values, as doc.Size counts them; default 64 MiB
	// Spent is the account of texts that share these limits; nil: the text has its own.
	Spent *Spent
}

// Spent is what texts have cost so far. Its zero value is ready for use.
type Spent struct{ steps, output, values, calls, marks, work int }

func (l Limits) orDefaults() Limits {
	for _, f := range []struct {
		field *int
		def   int
	}{{&l.Steps, 2_000_000}, {&l.Depth, 64}, {&l.Output, 2 << 20}, {&l.Values, 64 << 20}} {
		if *f.field == 0 {
			*f.field = f.def
		}
	}
	if l.Spent == nil {
		l.Spent = &Spent{}
	}
	return l
}

// What a source may hold. The bound on actions also bounds how deep they nest.
const (
	maxSources = 1000
	maxSource  = 1 << 20 // bytes
	maxActions = 10_000
	maxWords   = 100_000 // within actions
)

// The codes of what compose finds.
const (
	// Example: {{means "adg" }
	CodeSyntax = "template-syntax"
	// Example: {{maens "adg"}}
	CodeUnknownFunction = "unknown-function"
	// Example: {{template "apendix" .}}
	CodeUnknownTemplate = "unknown-template"
	// Example: {{.Titel}}
	CodeUnknownField = "unknown-field"
	// Example: {{range 3}}{{means}}{{end}}, where means wants the name of a response.
	CodeWrongValue = "wrong-value"
	// A function could not do what it was asked.
	CodeFunction = "function-failed"
	// Example: {{range 2000000000}}x{{end}}
	CodeTooMuch = "template-limit"
	// Example: Gain was {{table "means"}} in all.
	CodeMisplaced = "misplaced-block"
	// A character that the sources may not hold: private use, control, not UTF-8.
	CodeCharacter = "forbidden-character"
	// Example: <b>gain</b>
	CodeRawHTML = "raw-html"
	// Example: ![pens](pens.png)
	CodeImage = "image"
	// Example: [here](javascript:alert(1))
	CodeLink = "link-target"
	// Example: a footnote that is defined and never called.
	CodeFootnote = "unused-footnote"
	// A construction that the document cannot hold.
	CodeUnsupported = "unsupported-markdown"
)

// Fault is an error of a function that says its own code and hint; Compose adds where
// the function was called. Any other error is reported with CodeFunction.
type Fault struct {
	Code, Message, Hint string
	Related             []diag.Related
}

func (f *Fault) Error() string { return f.Message }

// Compose runs the source named main, with data as its dot, and returns what it says.
// Sources call each other, and what they define, by {{template "name"}}; where two
// sources define the same name the later one holds, so that a part can be replaced.
//
// The values of actions may be text, whole numbers, doc.Inline, []doc.Inline, doc.Block,
// []doc.Block and Text; numbers with decimals must be rounded by a function before.
// Blocks stand alone in a paragraph of their own. Functions have the form that
// text/template wants; one whose first parameter is a diag.Pos is given the place of its
// call there. A function that fails does not stop the others: the faults of all are
// reported. It panics if funcs holds what is no such function, or a reserved name.
//
// The blocks are not numbered, and a heading has no ID: doc.Number gives both.
func Compose(sources []Source, main string, data any, funcs template.FuncMap, limits Limits) (Text, diag.List) {
	var list diag.List
	if len(sources) > maxSources {
		list.Add(diag.Diagnostic{
			Pos: diag.Pos{File: main}, Severity: diag.Error, Code: CodeTooMuch,
			Message: fmt.Sprintf("%d template sources, more than %d", len(sources), maxSources),
		})
		return Text{}, list
	}
	p := newProgram(funcs)
	for _, s := range sources {
		p.parse(s)
	}
	p.rewrite(main)
	if list = p.list; list.HasErrors() {
		sortList(list)
		return Text{}, list
	}

	run := &runner{program: p, limits: limits.orDefaults()}
	run.execute(main, data)
	list = append(list, run.list...)
	if run.stopped {
		return Text{}, list
	}
	text, more := markdown([]byte(run.out.String()), run.place, run.values, run.limits.Spent)
	return text, append(list, more...)
}

// Markdown returns the blocks of a Markdown text without actions: CommonMark with
// tables and footnotes. Of the limits only what was spent counts.
func Markdown(name, text string, limits Limits) (Text, diag.List) {
	file, list := newFile(Source{Name: name, Text: text})
	if list.HasErrors() {
		return Text{}, list
	}
	return markdown([]byte(file.text), file.pos, nil, limits.orDefaults().Spent)
}

// file is a source made fit for parsing, with the places of its lines.
type file struct {
	name  string
	text  string
	lines []int // the offsets at which lines start
	bom   int   // bytes before the first
}

func newFile(s Source) (*file, diag.List) {
	var list diag.List
	refuse := func(pos diag.Pos, code, message, hint string) (*file, diag.List) {
		list.Add(diag.Diagnostic{Pos: pos, Severity: diag.Error, Code: code, Message: message, Hint: hint})
		return nil, list
	}
	if s.File == "" {
		s.File = s.Name
	}
	if len(s.Text) > maxSource {
		return refuse(diag.Pos{File: s.File}, CodeTooMuch, fmt.Sprintf("%d bytes of text, more than %d", len(s.Text), maxSource), "")
	}
	f := &file{name: s.File, text: s.Text, lines: []int{0}}
	if rest, ok := strings.CutPrefix(f.text, "\uFEFF"); ok {
		f.text, f.bom = rest, len("\uFEFF")
	}
	if strings.Contains(f.text, "\r") {
		f.text = strings.ReplaceAll(strings.ReplaceAll(f.text, "\r\n", "\n"), "\r", "\n")
	}
	for i := range len(f.text) {
		if f.text[i] == '\n' {
			f.lines = append(f.lines, i+1)
		}
	}
	for i, r := range f.text {
		if r == utf8.RuneError {
			if _, size := utf8.DecodeRuneInString(f.text[i:]); size == 1 {
				return refuse(f.pos(i), CodeCharacter, fmt.Sprintf("the byte %#02x is not UTF-8", f.text[i]), "save the file as UTF-8")
			}
		}
		if forbidden(r) {
			return refuse(f.pos(i), CodeCharacter, fmt.Sprintf("the character %U is not allowed in a text", r), "take it out")
		}
	}
	return f, nil
}

// forbidden tells whether a source may not hold r: private use is where tokens live, and
// control characters have no look.
func forbidden(r rune) bool {
	switch {
	case r == '\n' || r == '\t':
		return false
	case r < 0x20, 0x7f <= r && r < 0xa0:
		return true
	}
	return private(r)
}

func private(r rune) bool {
	return 0xe000 <= r && r <= 0xf8ff || r >= firstToken
}

// pos returns the place of an offset in the text.
func (f *file) pos(offset int) diag.Pos {
	offset = min(max(offset, 0), len(f.text))
	line := sort.SearchInts(f.lines, offset+1) - 1
	col := offset - f.lines[line] + 1
	if line == 0 {
		col += f.bom
	}
	return diag.Pos{File: f.name, Line: line + 1, Col: col}
}

func sortList(list diag.List) {
	sort.SliceStable(list, func(i, j int) bool {
		a, b := list[i].Pos, list[j].Pos
		switch {
		case a.File != b.File:
			return a.File < b.File
		case a.Line != b.Line:
			return a.Line < b.Line
		}
		return a.Col < b.Col
	})
}
