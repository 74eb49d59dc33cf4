package diag

import (
	"bytes"
	"encoding/json"
	"io"
	"net/url"
	"slices"
	"unicode/utf8"
)

// CodeInfo describes a diagnostic code in one sentence, and by the smallest input that
// brings it about where there is one.
type CodeInfo struct{ Code, Text, Example string }

// WriteJSON writes l as one JSON object, in its order and unfolded:
//
//	{"diagnostics": [{"file", "line", "column", "key", "severity", "code", "message", "hint", "related": [{"file", "line", "column", "message"}]}]}
//
// Columns count bytes from 1; what is unknown or empty is left out.
func WriteJSON(w io.Writer, l List) error {
	type place struct {
		File    string `json:"file,omitempty"`
		Line    int    `json:"line,omitempty"`
		Column  int    `json:"column,omitempty"`
		Message string `json:"message"`
	}
	type item struct {
		File     string  `json:"file,omitempty"`
		Line     int     `json:"line,omitempty"`
		Column   int     `json:"column,omitempty"`
		Key      string  `json:"key,omitempty"`
		Severity string  `json:"severity"`
		Code     string  `json:"code"`
		Message  string  `json:"message"`
		Hint     string  `json:"hint,omitempty"`
		Related  []place `json:"related,omitempty"`
	}
	items := make([]item, 0, len(l))
	for _, d := range l {
		it := item{File: d.Pos.File, Line: d.Pos.Line, Column: d.Pos.Col, Key: d.Key,
			Severity: d.Severity.String(), Code: d.Code, Message: d.Message, Hint: d.Hint}
		for _, r := range d.Related {
			it.Related = append(it.Related, place{File: r.Pos.File, Line: r.Pos.Line, Column: r.Pos.Col, Message: r.Message})
		}
		items = append(items, it)
	}
	return encode(w, map[string]any{"diagnostics": items})
}

// SARIF writes diagnostics as a log of the Static Analysis Results Interchange
// Format, version 2.1.0 (OASIS standard, 27 March 2020), one run.
type SARIF struct {
	Tool    string // name of the program
	Version string
	Codes   []CodeInfo // descriptions; codes of the list that are missing here are added without one
	// Source returns the bytes of a file, or nil. Columns are converted from bytes
	// to characters by it; without it they are left out.
	Source func(file string) []byte
}

type sarifText struct {
	Text string `json:"text"`
}

type sarifRule struct {
	ID    string     `json:"id"`
	Short *sarifText `json:"shortDescription,omitempty"`
}

type sarifRegion struct {
	Line int `json:"startLine"`
	Col  int `json:"startColumn,omitempty"`
}

type sarifLocation struct {
	Physical *sarifPhysical `json:"physicalLocation,omitempty"`
	Logical  []sarifLogical `json:"logicalLocations,omitempty"`
	Message  *sarifText     `json:"message,omitempty"`
}

type sarifPhysical struct {
	Artifact struct {
		URI string `json:"uri"`
	} `json:"artifactLocation"`
	Region *sarifRegion `json:"region,omitempty"`
}

type sarifLogical struct {
	Name string `json:"fullyQualifiedName"`
}

type sarifResult struct {
	RuleID    string          `json:"ruleId"`
	RuleIndex int             `json:"ruleIndex"`
	Level     string          `json:"level"`
	Message   sarifText       `json:"message"`
	Locations []sarifLocation `json:"locations"`
	Related   []sarifLocation `json:"relatedLocations,omitempty"`
}

type sarifDriver struct {
	Name    string      `json:"name"`
	Version string      `json:"version,omitempty"`
	Rules   []sarifRule `json:"rules"`
}

type sarifRun struct {
	Tool struct {
		Driver sarifDriver `json:"driver"`
	} `json:"tool"`
	ColumnKind string        `json:"columnKind"`
	Results    []sarifResult `json:"results"`
}

// Write writes l in its order and unfolded.
func (s SARIF) Write(w io.Writer, l List) error {
	var run sarifRun
	run.ColumnKind = "unicodeCodePoints"
	run.Results = make([]sarifResult, 0, len(l))
	rules, index := s.rules(l)
	run.Tool.Driver = sarifDriver{Name: s.Tool, Version: s.Version, Rules: rules}
	sources := map[string]starts{}
	for _, d := range l {
		text := d.Message
		if d.Key != "" {
			text = d.Key + ": " + text
		}
		if d.Hint != "" {
			text += "; " + d.Hint
		}
		r := sarifResult{RuleID: d.Code, RuleIndex: index[d.Code], Level: d.Severity.String(),
			Message: sarifText{Text: text}, Locations: []sarifLocation{}}
		if loc := s.location(d.Pos, sources); loc.Physical != nil || d.Key != "" {
			if d.Key != "" {
				loc.Logical = []sarifLogical{{Name: d.Key}}
			}
			r.Locations = append(r.Locations, loc)
		}
		for _, rel := range d.Related {
			loc := s.location(rel.Pos, sources)
			loc.Message = &sarifText{Text: rel.Message}
			r.Related = append(r.Related, loc)
		}
		run.Results = append(run.Results, r)
	}
	return encode(w, struct {
		Schema  string     `json:"$schema"`
		Version string     `json:"version"`
		Runs    []sarifRun `json:"runs"`
	}{
		Schema:  "https://docs.oasis-open.org/sarif/sarif/v2.1.0/os/schemas/sarif-schema-2.1.0.json",
		Version: "2.1.0",
		Runs:    []sarifRun{run},
	})
}

// rules lists the codes, those described first, and the place of each in the list.
func (s SARIF) rules(l List) ([]sarifRule, map[string]int) {
	rules := []sarifRule{}
	index := map[string]int{}
	for _, c := range s.Codes {
		if _, ok := index[c.Code]; !ok {
			index[c.Code] = len(rules)
			rules = append(rules, sarifRule{ID: c.Code, Short: &sarifText{Text: c.Text}})
		}
	}
	var rest []string
	for _, d := range l {
		if _, ok := index[d.Code]; !ok {
			rest = append(rest, d.Code)
		}
	}
	slices.Sort(rest)
	for _, c := range slices.Compact(rest) {
		index[c] = len(rules)
		rules = append(rules, sarifRule{ID: c})
	}
	return rules, index
}

// starts are the offsets of a file's lines, and its bytes.
type starts struct {
	text []byte
	line []int
}

func (s SARIF) location(p Pos, sources map[string]starts) sarifLocation {
	if p.File == "" {
		return sarifLocation{}
	}
	var at sarifPhysical
	at.Artifact.URI = (&url.URL{Path: p.File}).String()
	if p.Line > 0 {
		at.Region = &sarifRegion{Line: p.Line, Col: s.column(p, sources)}
	}
	return sarifLocation{Physical: &at}
}

// column converts the column of p from bytes to characters; 0: unknown.
func (s SARIF) column(p Pos, sources map[string]starts) int {
	if s.Source == nil || p.Col < 1 {
		return 0
	}
	src, ok := sources[p.File]
	if !ok {
		src = linesOf(s.Source(p.File))
		sources[p.File] = src
	}
	if p.Line > len(src.line) {
		return 0
	}
	line := src.text[src.line[p.Line-1]:]
	if i := bytes.IndexByte(line, '\n'); i >= 0 {
		line = line[:i]
	}
	if p.Col-1 > len(line) {
		return 0
	}
	return utf8.RuneCount(line[:p.Col-1]) + 1
}

func linesOf(text []byte) starts {
	text = bytes.TrimPrefix(text, []byte("\ufeff"))
	s := starts{text: text, line: []int{0}}
	for i, c := range text {
		if c == '\n' {
			s.line = append(s.line, i+1)
		}
	}
	return s
}

// encode writes v as indented JSON that keeps <, > and & as they are.
func encode(w io.Writer, v any) error {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	e.SetIndent("", " ")
	if err := e.Encode(v); err != nil {
		return err
	}
	_, err := w.Write(b.Bytes())
	return err
}
