// Package tex writes a document for LaTeX: a body that any document can read by \input,
// and a small document around it. The body wants the encodings T1 and UTF-8 and the
// packages graphicx and booktabs, defines nothing, and takes numbers of sections,
// tables, figures and notes from its host. Text can never become a command; a sign that
// no command stands for is an error.
package tex

import (
	"fmt"
	"io"
	"path"
	"regexp"
	"strconv"
	"strings"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

// CodeSign is the code of a sign that LaTeX has no command for.
const CodeSign = "sign-without-command"

// Chapter writes the body of d, which must be numbered. Figures are files of the folder
// figures, in PDF. What is written is of use only if the list holds no error.
func Chapter(w io.Writer, d *doc.Document) (diag.List, error) {
	t := newWriter(d)
	t.line("% " + t.text(strings.Join(some(d.Title, d.Code, d.Status, d.Date), ", ")))
	t.line("% To be read by \\input into a document that has")
	t.line("%   \\usepackage[T1]{fontenc} \\usepackage[utf8]{inputenc} \\usepackage{graphicx} \\usepackage{booktabs}")
	t.line("% with the folder figures beside it.")
	t.blocks(d.Blocks)
	return t.list, t.write(w)
}

// Report writes a document that reads the body of d from a file.
func Report(w io.Writer, d *doc.Document, body string) (diag.List, error) {
	t := newWriter(d)
	paper := "a4paper"
	if d.Paper == "Letter" {
		paper = "letterpaper"
	}
	t.line(`\documentclass[11pt,` + paper + `]{article}`)
	t.line(`\usepackage[T1]{fontenc}`)
	t.line(`\usepackage[utf8]{inputenc}`)
	t.line(`\IfFileExists{lmodern.sty}{\usepackage{lmodern}}{}`)
	t.line(`\usepackage{graphicx}`)
	t.line(`\usepackage{booktabs}`)
	t.line(`\ifdefined\pdfgentounicode\input{glyphtounicode}\pdfgentounicode=1\fi`)
	t.line(`\addtolength{\textwidth}{60pt}\addtolength{\oddsidemargin}{-30pt}\addtolength{\evensidemargin}{-30pt}`)
	t.line(`\setlength{\emergencystretch}{3em}`)
	t.line(`\setcounter{secnumdepth}{5}`)
	t.line(`\extrafloats{200}`)
	t.line(`\title{` + t.text(d.Title) + `}`)
	t.line(`\author{` + t.text(strings.Join(some(d.Author, d.Code), `, `)) + `}`)
	t.line(`\date{` + t.text(d.Date) + `}`)
	t.line(`\begin{document}`)
	t.line(`\maketitle`)
	for _, b := range d.Blocks {
		if _, ok := b.(doc.Contents); ok {
			t.line(`\tableofcontents`)
			break
		}
	}
	t.line(`\input{` + strings.TrimSuffix(body, ".tex") + `}`)
	t.line(`\end{document}`)
	return t.list, t.write(w)
}

// some returns the texts that are not empty.
func some(texts ...string) []string {
	var out []string
	for _, s := range texts {
		if s != "" {
			out = append(out, s)
		}
	}
	return out
}

// writer keeps the text as it grows.
type writer struct {
	b      strings.Builder
	doc    *doc.Document
	prefix string // of labels, so that chapters on several trials can stand in one document
	list   diag.List
	pos    diag.Pos
	told   map[rune]bool
	long   int // letters beyond which a word may be broken

	lists, bullets, numbers int  // lists that are open
	held                    bool // in a table, a caption, a heading or a note, where no note can be
	code                    bool // in type of a fixed pitch
	line1                   bool // where a line cannot be ended
	floats                  int  // in a row without text between
	notes                   map[int]bool
	later                   []int // notes called where none can be
}

func newWriter(d *doc.Document) *writer {
	return &writer{doc: d, prefix: doc.ID(d.Code) + ":", told: map[rune]bool{}, long: longWord, notes: map[int]bool{}}
}

func (w *writer) write(to io.Writer) error {
	if _, err := io.WriteString(to, w.b.String()); err != nil {
		return fmt.Errorf("write LaTeX: %w", err)
	}
	return nil
}

func (w *writer) line(s string) {
	w.b.WriteString(s)
	w.b.WriteByte('\n')
}

func code(r rune) string { return fmt.Sprintf("U+%04X", r) }

const toldMost = 20 // signs reported, so that a text in another script does not flood

// missing reports a sign once, at its first place.
func (w *writer) missing(r rune) {
	if w.told[r] || len(w.told) >= toldMost {
		return
	}
	w.told[r] = true
	w.list.Add(diag.Diagnostic{Pos: w.pos, Severity: diag.Error, Code: CodeSign,
		Message: fmt.Sprintf("LaTeX has no command for the sign %q (%s)", r, code(r)),
		Hint:    "write it in Latin or Greek letters, or leave LaTeX out: --only pdf,html,docx has every sign",
	})
}

func (w *writer) text(s string) string {
	out := escape(s, w.long, w.missing)
	if w.code {
		// Type of a fixed pitch does not join hyphens to dashes.
		out = strings.NewReplacer("---", `\textemdash{}`, "--", `\textendash{}`).Replace(out)
	}
	return out
}

func (w *writer) at(pos diag.Pos) {
	if pos.File != "" || pos.Line != 0 {
		w.pos = pos
	}
}

func (w *writer) label(id string) string {
	if id == "" {
		return ""
	}
	return `\label{` + w.prefix + id + `}`
}

var sections = []string{"section", "subsection", "subsubsection", "paragraph", "subparagraph"}

func (w *writer) blocks(blocks []doc.Block) {
	for _, b := range blocks {
		switch b := b.(type) {
		case doc.Heading:
			w.at(b.Pos)
			text := w.within(b.Text)
			if text == "" {
				break
			}
			short := ""
			if calls(b.Text) {
				short = "[{" + w.text(doc.Plain(b.Text)) + "}]"
			}
			w.line("\n\\" + sections[min(max(b.Level, 1), len(sections))-1] + short + "{" + text + "}" + w.label(b.ID))
			w.due()
		case doc.Paragraph:
			w.at(b.Pos)
			if text := w.inlines(b.Text); strings.TrimSpace(text) != "" {
				w.line("\n" + text)
				w.floats = 0
			}
		case doc.List:
			w.bulletins(b)
		case doc.Quote:
			w.quote(nil, b.Blocks)
		case doc.Aside:
			w.quote(b.Title, b.Blocks)
		case doc.Code:
			w.listing(b.Text)
		case doc.Rule:
			w.line("\n\\begin{center}\\rule{0.3\\linewidth}{0.4pt}\\end{center}")
		case doc.Contents:
			// The host's own.
		case doc.Table:
			w.at(b.Pos)
			w.table(b)
		case doc.Figure:
			w.at(b.Pos)
			w.figure(b)
		default:
			panic("tex: unknown block")
		}
	}
}

// LaTeX nests six lists, four of a kind.
const mostLists, mostOfKind = 6, 4

func (w *writer) quote(title []doc.Inline, blocks []doc.Block) {
	boxed := w.lists < mostLists
	if boxed {
		w.lists++
		defer func() { w.lists-- }()
		w.line("\n\\begin{quote}")
	}
	if text := w.within(title); text != "" {
		w.line(`\textbf{` + text + `}\par`)
		w.due()
	}
	w.blocks(blocks)
	w.line(`\mbox{}`)
	if boxed {
		w.line(`\end{quote}`)
	}
}

func (w *writer) bulletins(l doc.List) {
	kind, open := "itemize", &w.bullets
	if l.Ordered {
		kind, open = "enumerate", &w.numbers
	}
	if len(l.Items) == 0 {
		return
	}
	if w.lists >= mostLists || *open >= mostOfKind {
		for _, item := range l.Items { // deeper than LaTeX goes
			w.line("\n--")
			w.blocks(item)
		}
		return
	}
	w.lists++
	*open++
	w.line("\n\\begin{" + kind + "}")
	if l.Ordered && l.Start != 1 {
		w.line(`\setcounter{enum` + []string{"i", "ii", "iii", "iv"}[*open-1] + `}{` + strconv.Itoa(min(max(l.Start, 0), 1_000_000)-1) + `}`)
	}
	for _, item := range l.Items {
		w.line(`\item{}`)
		if len(item) == 0 {
			w.line(`\mbox{}`)
		}
		for i, b := range item {
			if p, ok := b.(doc.Paragraph); ok && i == 0 {
				w.at(p.Pos)
				w.line(w.inlines(p.Text))
				continue
			}
			w.blocks([]doc.Block{b})
		}
	}
	w.line(`\end{` + kind + `}`)
	*open--
	w.lists--
}

// listing sets text as it stands. Verbatim text of LaTeX's own could be ended by what it
// holds.
func (w *writer) listing(text string) {
	w.code = true
	defer func() { w.code = false }()
	w.line("\n\\begin{flushleft}\\ttfamily\\footnotesize")
	lines := strings.Split(strings.TrimSuffix(doc.Clean(text), "\n"), "\n")
	for i, l := range lines {
		out := w.text(strings.ReplaceAll(l, "\t", "    "))
		out = strings.ReplaceAll(out, "  ", "~~")
		if rest := strings.TrimLeft(out, " "); len(rest) < len(out) {
			out = "~" + rest
		}
		if out == "" {
			out = `\mbox{}`
		}
		if i < len(lines)-1 {
			out += `\\`
		}
		w.line(out)
	}
	w.line(`\end{flushleft}`)
}

// fileName is what a figure may be called, so that its name is none of TeX's business.
var fileName = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_.-]*$`)

// column is the width of text that is counted on, in points; a wider picture is fitted
// to the line.
const column, highest = 345, 480

func (w *writer) figure(f doc.Figure) {
	caption := w.within(f.Caption)
	body := ""
	switch {
	case f.File == "" || f.Picture == nil || !fileName.MatchString(f.File):
		body = `\begin{minipage}{0.9\linewidth}\raggedright ` + w.within([]doc.Inline{doc.Text{Text: f.Alt}}) + `\end{minipage}`
	case f.Picture.Width <= column && f.Picture.Height <= highest:
		body = `\includegraphics{` + path.Join("figures", f.File+".pdf") + `}`
	default:
		body = `\includegraphics[width=\linewidth,height=0.8\textheight,keepaspectratio]{` + path.Join("figures", f.File+".pdf") + `}`
	}
	if w.held {
		w.line(body + `\par ` + caption)
		return
	}
	w.line("\n\\begin{figure}[!htbp]\n\\centering")
	if alt := w.text(f.Alt); alt != "" {
		w.line("% " + alt)
	}
	w.line(body)
	w.line(`\caption` + w.short(f.Caption) + `{` + caption + `}` + w.label(f.ID))
	w.line(`\end{figure}`)
	w.due()
	w.floated()
}

// short is the text of a caption for a list of them, where it calls notes.
func (w *writer) short(text []doc.Inline) string {
	if !calls(text) {
		return ""
	}
	return "[{" + w.text(doc.Plain(text)) + "}]"
}

// calls tells whether text calls a note.
func calls(text []doc.Inline) bool {
	found := false
	doc.Walk([]doc.Block{doc.Paragraph{Text: text}}, func(n any) {
		if _, ok := n.(doc.FootnoteRef); ok {
			found = true
		}
	})
	return found
}

// within returns text for a place where no note can be and no line be ended.
func (w *writer) within(text []doc.Inline) string {
	held, line1 := w.held, w.line1
	w.held, w.line1 = true, true
	defer func() { w.held, w.line1 = held, line1 }()
	return strings.TrimSpace(w.inlines(text))
}

func (w *writer) inlines(text []doc.Inline) string {
	var b strings.Builder
	for _, in := range text {
		switch n := in.(type) {
		case doc.Text:
			s := w.text(n.Text)
			if last := b.String(); s != "" && last != "" && strings.IndexByte("-'`,!?<>", s[0]) >= 0 && strings.IndexByte("-'`,!?<>", last[len(last)-1]) >= 0 {
				b.WriteString("{}")
			}
			b.WriteString(s)
		case doc.Emph:
			b.WriteString(w.wrap("emph", n.Text))
		case doc.Strong:
			b.WriteString(w.wrap("textbf", n.Text))
		case doc.Sup:
			b.WriteString(w.wrap("textsuperscript", n.Text))
		case doc.Sub:
			b.WriteString(w.wrap("textsubscript", n.Text))
		case doc.CodeSpan:
			b.WriteString(w.fixed(n.Text))
		case doc.Link:
			b.WriteString(w.link(n))
		case doc.Ref:
			b.WriteString(w.ref(n))
		case doc.FootnoteRef:
			b.WriteString(w.call(n.N))
		case doc.Break:
			if w.line1 {
				b.WriteByte(' ')
			} else {
				b.WriteString(`\leavevmode\newline{}`)
			}
		default:
			panic("tex: unknown inline")
		}
	}
	return b.String()
}

func (w *writer) wrap(command string, text []doc.Inline) string {
	inner := w.inlines(text)
	if inner == "" {
		return ""
	}
	return `\` + command + `{` + inner + `}`
}

func (w *writer) fixed(s string) string {
	if s == "" {
		return ""
	}
	code := w.code
	w.code = true
	defer func() { w.code = code }()
	return `\texttt{` + w.text(s) + `}`
}

// ref writes the reference to a number with the name before it: the number is the
// host's.
func (w *writer) ref(r doc.Ref) string {
	i := strings.LastIndexByte(r.Text, ' ')
	if i < 0 || r.ID == "" {
		return w.text(r.Text)
	}
	return w.text(r.Text[:i]) + `~\ref{` + w.prefix + r.ID + `}`
}

// link writes what a link says, and its address in a note, or behind it where no note
// can be.
func (w *writer) link(l doc.Link) string {
	text := w.inlines(l.Text)
	dest := strings.TrimPrefix(l.Dest, "mailto:")
	switch {
	case strings.HasPrefix(l.Dest, "#") || l.Dest == "":
		return text
	case doc.Plain(l.Text) == dest || text == "":
		return w.fixed(dest)
	case w.held:
		return text + " (" + w.fixed(dest) + ")"
	}
	return text + `\footnote{` + w.fixed(dest) + `}`
}

// call calls a note, with its text at the first call.
func (w *writer) call(n int) string {
	name := "x_note-" + strconv.Itoa(n)
	switch {
	case n < 1 || n > len(w.doc.Notes):
		return ""
	case w.notes[n]:
		return `\textsuperscript{\ref{` + w.prefix + name + `}}`
	case w.held:
		w.notes[n] = true
		w.later = append(w.later, n)
		return `\protect\footnotemark{}`
	}
	w.notes[n] = true
	return `\footnote{` + w.note(n) + `}`
}

func (w *writer) note(n int) string {
	held, line1 := w.held, w.line1
	w.held, w.line1 = true, true
	out := w.b
	w.b = strings.Builder{}
	w.blocks(w.doc.Notes[n-1])
	text := strings.TrimSpace(w.b.String())
	w.b = out
	w.held, w.line1 = held, line1
	return w.label("x_note-"+strconv.Itoa(n)) + strings.ReplaceAll(text, "\n\n", "\\par\n")
}

// mostFloats is how many tables and figures may wait for a place together. LaTeX gives up
// on too many.
const mostFloats = 12

// floated counts a table or a figure that waits for its place.
func (w *writer) floated() {
	if w.floats++; w.floats >= mostFloats {
		w.flush()
	}
}

// flush has what waits set before anything else.
func (w *writer) flush() {
	w.line(`\clearpage`)
	w.floats = 0
}

// due writes the texts of the notes that were called where none could be.
func (w *writer) due() {
	if w.held {
		return
	}
	for len(w.later) > 0 {
		due := w.later
		w.later = nil
		if k := len(due) - 1; k > 0 {
			w.line(`\addtocounter{footnote}{-` + strconv.Itoa(k) + `}`)
		}
		for i, n := range due {
			if i > 0 {
				w.line(`\stepcounter{footnote}`)
			}
			w.line(`\footnotetext{` + w.note(n) + `}`)
		}
	}
}
