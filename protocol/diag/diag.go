// Package diag holds what is said to a user about an input: a position, what is
// wrong, how to mend it. Every stage returns its value with a List; a stage
// collects faults and goes on instead of stopping at the first.
package diag

import "fmt"

// Pos is a place in a file of the trial folder. Line and Col count from 1, Col in
// bytes; 0 means unknown.
type Pos struct {
	File string
	Line int
	Col  int
}

// String gives file:line:col as editors read it, without the parts that are unknown.
func (p Pos) String() string {
	switch {
	case p.Line == 0:
		return p.File
	case p.Col == 0:
		return fmt.Sprintf("%s:%d", p.File, p.Line)
	}
	return fmt.Sprintf("%s:%d:%d", p.File, p.Line, p.Col)
}

// Severity orders diagnostics; only an Error makes a command fail.
type Severity int

// The severities, gravest first.
const (
	Error Severity = iota
	Warning
	Note
)

// String gives the word for s.
func (s Severity) String() string {
	if s < Error || s > Note {
		return "note"
	}
	return [...]string{"error", "warning", "note"}[s]
}

// Related points at a second place that explains a diagnostic.
type Related struct {
	Pos     Pos
	Message string
}

// Diagnostic is one thing said about an input. Message is lower case without a
// period and quotes the offending value; Hint says what to write instead.
type Diagnostic struct {
	Pos      Pos
	Key      string // dotted key with array index, such as unit[1].count; empty outside the protocol
	Severity Severity
	Code     string // stable, lower case with hyphens, such as unknown-key
	Message  string
	Hint     string
	Related  []Related
}

// List collects diagnostics. Its zero value is ready for use.
type List []Diagnostic

// Add appends d.
func (l *List) Add(d Diagnostic) { *l = append(*l, d) }

// HasErrors tells whether any diagnostic is an error.
func (l List) HasErrors() bool {
	for _, d := range l {
		if d.Severity == Error {
			return true
		}
	}
	return false
}

// Relate adds a second place to d.
func (d *Diagnostic) Relate(pos Pos, message string) {
	d.Related = append(d.Related, Related{Pos: pos, Message: message})
}
