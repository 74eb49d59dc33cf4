package seal

import (
	"fmt"
	"slices"
	"strings"
	"unicode"

	"penwright/protocol"
	"penwright/protocol/diag"
)

// covers finds the amendment that covers a difference of the plan sealed on a day, or
// -1. The rule: the amendment is dated on that day or later, and its text names what
// differs: the name or label of the table that repeats (a unit, a response, a contrast),
// or, where there is none, the key or how it is called. Upper case, the plural, and
// underscores for spaces make no difference.
func covers(amendments []amendment, sealed protocol.Date, d *Difference) int {
	for i, a := range amendments {
		if a.on.IsZero() || a.on.Before(sealed) {
			continue
		}
		if slices.ContainsFunc(called(d), func(name string) bool { return names(a.words, name) }) {
			return i
		}
	}
	return -1
}

// amendment is one of the protocol with the words of its text.
type amendment struct {
	on    protocol.Date
	words string
}

func amendments(p *protocol.Protocol) []amendment {
	var out []amendment
	for _, a := range p.Amendments {
		out = append(out, amendment{on: a.On, words: words(a.What)})
	}
	return out
}

// called lists what a difference may be called in an amendment, the first as one would.
func called(d *Difference) []string {
	if len(d.Names) > 0 {
		out := []string{d.Names[len(d.Names)-1]}
		return append(append(out, d.Names...), d.labels...)
	}
	key := d.Field
	if key == "" || key == "order" {
		key = last(d.Table)
	}
	return []string{spaced(key), d.What, join(d.Table, d.Field)}
}

// names tells whether the words of a text have those of a name in sequence.
func names(text, name string) bool {
	n := words(name)
	return n != "  " && strings.Contains(text, n)
}

// words are the words of a text in lower case and in the singular, a space on either
// side of each. A text without letters and digits is one word.
func words(s string) string {
	w := strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !unicode.IsLetter(r) && !unicode.IsDigit(r) })
	if len(w) == 0 {
		w = strings.Fields(s)
	}
	for i := range w {
		if len(w[i]) > 2 {
			w[i] = strings.TrimSuffix(w[i], "s")
		}
	}
	return " " + strings.Join(w, " ") + " "
}

// mostFindings bounds the differences that are reported one by one.
const mostFindings = 100

func (s *Seal) check() diag.List {
	var list diag.List
	at := func(e *Entry) diag.Pos { return diag.Pos{File: File, Line: e.line, Col: 1} }
	first := &s.Entries[0]
	start := s.p.Trial.Start
	switch {
	case start.Before(first.On):
		list.Add(diag.Diagnostic{Pos: at(first), Severity: diag.Warning, Code: Late,
			Message: fmt.Sprintf("the plan was sealed on %s, after the trial started on %s", first.On, start),
			Hint:    "what was done before the seal is not proved to have been planned",
			Related: []diag.Related{{Pos: s.p.ValuePos("trial.start"), Message: "start is given here"}}})
	case s.before == nil:
		list.Add(diag.Diagnostic{Pos: at(first), Severity: diag.Warning, Code: Late, Message: "the plan was sealed when there were data already",
			Hint: "what was done before the seal is not proved to have been planned"})
	}
	for i := 1; i < len(s.Entries); i++ {
		if e, f := &s.Entries[i-1], &s.Entries[i]; f.On.Before(e.On) {
			list.Add(diag.Diagnostic{Pos: at(f), Severity: diag.Warning, Code: protocol.DateOrder,
				Message: fmt.Sprintf("seal %d is of %s, before seal %d of %s", f.Number, f.On, e.Number, e.On),
				Related: []diag.Related{{Pos: at(e), Message: fmt.Sprintf("seal %d", e.Number)}}})
		}
	}
	n := 0
	for i := range s.Revisions {
		r := &s.Revisions[i]
		if r.Amendment >= 0 {
			continue
		}
		if n++; n > mostFindings {
			continue
		}
		e := &s.Entries[r.Since-1]
		since := fmt.Sprintf("seal %d", e.Number)
		if !e.On.IsZero() {
			since += " of " + e.On.String()
		}
		pos := s.p.ValuePos(r.Key)
		if r.Kind != Changed {
			pos = s.p.Pos(r.Key)
		}
		list.Add(diag.Diagnostic{Pos: pos, Key: r.Key, Severity: diag.Warning, Code: NotAmended,
			Message: fmt.Sprintf("%s, since %s, and no amendment says so", r.Difference.String(), since),
			Hint:    fmt.Sprintf("add [[amendment]] with on, why, and a what that names %q", called(&r.Difference)[0]),
			Related: []diag.Related{{Pos: at(e), Message: "it was sealed here"}}})
	}
	if n > mostFindings {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: s.p.File}, Severity: diag.Warning, Code: NotAmended,
			Message: fmt.Sprintf("%d more differences from the sealed plan are not listed", n-mostFindings)})
	}
	return list
}
