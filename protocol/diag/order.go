package diag

import (
	"cmp"
	"slices"
	"strings"
)

// Sort orders l by file, line, column, severity, code, key and message, so that a
// list reads down the file and two runs give the same text.
func (l List) Sort() {
	slices.SortStableFunc(l, func(a, b Diagnostic) int {
		return cmp.Or(
			strings.Compare(a.Pos.File, b.Pos.File),
			cmp.Compare(a.Pos.Line, b.Pos.Line),
			cmp.Compare(a.Pos.Col, b.Pos.Col),
			cmp.Compare(a.Severity, b.Severity),
			strings.Compare(a.Code, b.Code),
			strings.Compare(a.Key, b.Key),
			strings.Compare(a.Message, b.Message),
		)
	})
}

// Count returns the number of diagnostics of each severity.
func (l List) Count() (errors, warnings, notes int) {
	for _, d := range l {
		switch d.Severity {
		case Error:
			errors++
		case Warning:
			warnings++
		default:
			notes++
		}
	}
	return errors, warnings, notes
}

// Folded is a diagnostic that is shown, and the number of those like it that come
// after it in the list and are not shown.
type Folded struct {
	Diagnostic
	More int
}

// Fold keeps the first keep diagnostics of each kind and counts the rest at the
// last one kept. Two are of a kind if file, severity, code and key, apart from
// array indexes, are the same. keep < 1 keeps all.
func (l List) Fold(keep int) []Folded {
	type kind struct {
		file, code, key string
		severity        Severity
	}
	type seen struct{ n, last int }
	var folded []Folded
	kinds := map[kind]seen{}
	for _, d := range l {
		k := kind{file: d.Pos.File, code: d.Code, key: withoutIndexes(d.Key), severity: d.Severity}
		s := kinds[k]
		s.n++
		if keep >= 1 && s.n > keep {
			folded[s.last].More++
		} else {
			s.last = len(folded)
			folded = append(folded, Folded{Diagnostic: d})
		}
		kinds[k] = s
	}
	return folded
}

// withoutIndexes removes array indexes from a dotted key: unit[1].count gives
// unit[].count.
func withoutIndexes(key string) string {
	if !strings.Contains(key, "[") {
		return key
	}
	var b strings.Builder
	for {
		before, after, found := strings.Cut(key, "[")
		b.WriteString(before)
		if !found {
			return b.String()
		}
		b.WriteString("[]")
		_, key, _ = strings.Cut(after, "]")
	}
}
