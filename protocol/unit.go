package protocol

import (
	"fmt"
	"regexp"
	"slices"
	"strconv"

	"penwright/protocol/diag"
	"penwright/protocol/internal/tomlpos"
)

var identifier = regexp.MustCompile(`^[a-z][a-z0-9_]*$`)

// longestName bounds the names that become columns of files.
const longestName = 64

// reserved tells why a name cannot be given.
func reserved(name string) string {
	switch name {
	case "order", "code":
		return "it is a column of the allotment"
	case "treatment":
		return "it stands for the listed treatments"
	case "residual", "checks", "entries":
		return "it is a row of the analysis"
	case "animal_days", "animals_start", "animals_end", "mass_lost":
		return "it is worked out from animals and events"
	case "in", "not", "and", "or", "let", "if", "else", "true", "false", "nil", "matches", "contains",
		"log", "sqrt", "min", "max", "abs":
		return "it is a word of computed responses"
	}
	return ""
}

// name reads the key name: an identifier that may be a column.
func (t *table) name() string {
	const key = "name"
	s := t.word(key)
	if s == "" {
		return ""
	}
	switch {
	case !identifier.MatchString(s):
		hint := "use lower-case letters, digits and underscores, and begin with a letter"
		if tidy := tidyName(s); tidy != "" && tidy != s {
			hint += fmt.Sprintf(", such as %s; what is printed is its label", quote(tidy))
		}
		t.fail(key, BadName, hint, "%s cannot be a name", quote(s))
	case len(s) > longestName:
		t.fail(key, BadName, "", "the name is longer than %d characters", longestName)
	case reserved(s) != "":
		t.fail(key, ReservedName, "choose another name; what is printed is its label", "the name %s is reserved: %s", quote(s), reserved(s))
	}
	return s
}

// tidyName makes an identifier of a name, or "".
func tidyName(s string) string {
	var b []byte
	for i := range len(s) {
		switch c := s[i]; {
		case c >= 'a' && c <= 'z', c >= '0' && c <= '9' && len(b) > 0:
			b = append(b, c)
		case c >= 'A' && c <= 'Z':
			b = append(b, c-'A'+'a')
		case len(b) > 0 && b[len(b)-1] != '_' && i+1 < len(s):
			b = append(b, '_')
		}
	}
	if len(b) > longestName {
		return ""
	}
	return string(b)
}

func (t *table) unit() Unit {
	t.need("name")
	name := t.name()
	u := Unit{
		Name:      name,
		Label:     t.labelled(name),
		Within:    t.word("within"),
		Crosses:   t.words("crosses"),
		Count:     t.counts("count"),
		Numbered:  t.enum("numbered", "within", "within", "through"),
		Receives:  t.words("receives"),
		Carries:   t.words("carries"),
		Checks:    t.words("checks"),
		Basis:     t.str("basis"),
		Random:    t.yes("random"),
		Interacts: isTrue(t.yes("interacts")),
	}
	u.Labels = t.unitLabels()
	if column, isText := t.m["animals"].(string); isText {
		t.word("animals")
		u.AnimalsColumn = column
	} else {
		u.Animals = t.counts("animals")
	}
	if sub, names := t.free("replicates", "numbers of units for levels"); sub != nil {
		for _, n := range names {
			if k := sub.whole(n, 1, maxCount, 0); k > 0 {
				u.Replicates = append(u.Replicates, Replicate{Level: n, N: k})
			}
		}
		if len(names) == 0 {
			t.fail("replicates", TooFew, "write replicates = { control = 8, diet_a = 4 }", "no level is given")
		}
	}
	crossing := t.has("crosses")
	switch {
	case crossing && t.has("within"):
		t.exclude("within", "crosses")
	case crossing && t.has("count"):
		t.fail("count", Conflict, "delete count", "a unit that crosses others has no count: there is one for each pair")
	case !crossing && !t.has("count"):
		t.need("count")
	}
	if crossing && len(u.Crosses) < 2 && len(u.Crosses) == len(asItems(t.m["crosses"])) {
		t.fail("crosses", TooFew, `write crosses = ["row", "column"]`, "a unit must cross at least two others")
	}
	if crossing && t.has("labels") {
		t.fail("labels", Conflict, "delete labels", "a unit that crosses others is named by them")
	}
	if crossing && t.has("numbered") {
		t.fail("numbered", Conflict, "delete numbered", "a unit that crosses others is named by them")
	}
	if u.Random != nil && !*u.Random && len(u.Receives) > 0 {
		t.fail("random", Conflict, "delete random", "units that receive treatments vary at random")
	}
	return u
}

func asItems(v any) []any {
	items, _ := asList(v)
	return items
}

// counts reads one number of units or a list of them.
func (t *table) counts(key string) []int {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	if _, isList := asList(v); !isList {
		if n := t.whole(key, 1, maxCount, 0); n > 0 {
			return []int{n}
		}
		return nil
	}
	items, ok := t.list(key, "whole numbers")
	if !ok {
		return nil
	}
	var counts []int
	for i, v := range items {
		n, ok := v.(int64)
		switch {
		case !ok:
			t.item(key, i, WrongType, "", "expected a whole number, found %s", found(v))
		case n < 1 || n > maxCount:
			t.item(key, i, OutOfRange, "", "must be between 1 and %d, is %d", maxCount, n)
		default:
			counts = append(counts, int(n))
		}
	}
	if len(items) == 0 {
		t.fail(key, TooFew, "write one number, or one for each parent unit", "the list is empty")
	}
	if len(counts) < len(items) {
		return nil
	}
	return counts
}

// unitLabels reads the names of units: a list, or a list for each parent unit.
func (t *table) unitLabels() [][]string {
	const key = "labels"
	items, ok := t.list(key, "names of units")
	if !ok {
		return nil
	}
	if len(items) == 0 {
		t.fail(key, TooFew, "delete it; units are then numbered", "the list is empty")
		return nil
	}
	node, path := t.node.Child(key), t.key(key)
	if !slices.ContainsFunc(items, func(v any) bool { _, ok := asList(v); return ok }) {
		labels, ok := t.labelList(items, node, path)
		if !ok {
			return nil
		}
		return [][]string{labels}
	}
	var all [][]string
	fine := true
	for i, v := range items {
		inner, ok := asList(v)
		if !ok {
			t.item(key, i, WrongType, "write all names in one list, or one list for each parent unit", "%s stands among lists", found(v))
			fine = false
			continue
		}
		labels, ok := t.labelList(inner, node.Item(i), tomlpos.Index(path, i))
		all, fine = append(all, labels), fine && ok
	}
	if !fine {
		return nil
	}
	return all
}

// labelList reads one list of names of units; node and path are those of the list.
func (t *table) labelList(items []any, node *tomlpos.Node, path string) ([]string, bool) {
	labels := make([]string, 0, len(items))
	first := map[string]int{}
	for i, v := range items {
		s, ok := v.(string)
		if n, isWhole := v.(int64); isWhole {
			s, ok = strconv.FormatInt(n, 10), true
		}
		fault := func(code, hint, format string, args ...any) *diag.Diagnostic {
			f := t.failAt(t.d.position(node.Item(i), true), "", code, hint, format, args...)
			f.Key = tomlpos.Index(path, i)
			return f
		}
		j, twice := first[s]
		switch {
		case !ok:
			fault(WrongType, "write it in quotes", "expected the name of a unit, found %s", found(v))
		case badWord(s) != "":
			fault(BadText, "", "%s", badWord(s))
		case twice:
			f := fault(Duplicate, "units of one parent have different names", "the name %s is given twice", quote(s))
			f.Relate(t.d.position(node.Item(j), true), "first given here")
		default:
			first[s] = i
			labels = append(labels, s)
		}
	}
	return labels, len(labels) == len(items)
}
