package compose

import (
	"bytes"
	"fmt"

	"penwright/protocol/diag"
)

// The Markdown parser takes time in proportion to the square of what stands open at a
// place, and memory in proportion to the marks and lines. These bounds keep the worst of
// texts to about a second and 100 MB; a text that people read stays far below them.
const (
	maxMarks   = 200_000     // characters that may be markup, and lines
	maxWork    = 200_000_000 // of each run of lines: marks × bytes, summed
	maxNesting = 32          // quotes and lists that one line opens
	maxIndent  = 256         // columns
	maxCells   = 100_000     // bars in the fullest line of a run × its lines
	maxCalls   = 4_000       // footnotes, called or defined
	maxDepth   = 64          // nodes within nodes, of those that hold text
)

// guard refuses a text that would take the Markdown parser too long, together with those
// that were read on the same account.
func guard(src []byte, place func(int) diag.Pos, spent *Spent) diag.List {
	var list diag.List
	refuse := func(offset int, format string, args ...any) diag.List {
		list.Add(diag.Diagnostic{
			Pos: place(offset), Severity: diag.Error, Code: CodeTooMuch,
			Message: fmt.Sprintf(format, args...),
		})
		return list
	}
	if spent.calls += bytes.Count(src, []byte("[^")); spent.calls > maxCalls {
		return refuse(bytes.Index(src, []byte("[^")), "%d footnote marks, more than %d", spent.calls, maxCalls)
	}
	marks, work := &spent.marks, &spent.work
	var start, runMarks, bars, n int // of the run of lines without a blank one
	for at := 0; at < len(src); {
		line := src[at:]
		if i := bytes.IndexByte(line, '\n'); i >= 0 {
			line = line[:i+1]
		}
		blank := len(bytes.TrimSpace(line)) == 0
		if blank || opensItem(line) {
			start, runMarks, bars, n = at, 0, 0, 0
		}
		nesting, indent := prefix(line)
		if nesting > maxNesting {
			return refuse(at, "quotes and lists %d deep, more than %d", nesting, maxNesting)
		}
		if indent > maxIndent {
			return refuse(at, "a line indented by %d columns, more than %d", indent, maxIndent)
		}
		before := runMarks * (at - start)
		lineBars := 0
		for _, c := range line {
			switch c {
			case '*', '_', '[', ']', '(', ')', '<', '!', '`', '&', '\\', '"', '\'':
				runMarks++
				*marks++
			case '|':
				lineBars++
				*marks++
			}
		}
		n++
		*marks++
		at += len(line)
		*work += runMarks*(at-start) - before
		bars = max(bars, lineBars)
		switch {
		case *marks > maxMarks:
			return refuse(at-len(line), "more than %d lines and marks", maxMarks)
		case *work > maxWork:
			return refuse(start, "a text with so many marks must be broken by empty lines")
		case bars*n > maxCells:
			return refuse(start, "a table of more than %d cells", maxCells)
		}
	}
	return list
}

// opensItem tells whether a line surely begins a list item, which ends what stood open
// in the line before.
func opensItem(line []byte) bool {
	trimmed := bytes.TrimLeft(line, " ")
	return len(line)-len(trimmed) <= 3 && len(trimmed) > 2 &&
		bytes.IndexByte([]byte("-*+"), trimmed[0]) >= 0 && trimmed[1] == ' ' && trimmed[2] > ' '
}

// prefix counts the marks of quotes and list items at the beginning of a line, and the
// columns of the blanks among them.
func prefix(line []byte) (nesting, indent int) {
	for i, c := range line {
		followed := i+1 < len(line) && (line[i+1] == ' ' || line[i+1] == '\t')
		switch {
		case c == ' ':
			indent++
		case c == '\t':
			indent += 4
		case c == '>':
			nesting++
		case c == '-' || c == '*' || c == '+' || c == '.' || c == ')':
			if followed {
				nesting++
			}
		case '0' <= c && c <= '9':
		default:
			return nesting, indent
		}
	}
	return nesting, indent
}
