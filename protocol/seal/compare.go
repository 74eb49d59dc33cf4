package seal

import (
	"encoding/json"
	"fmt"
	"maps"
	"reflect"
	"slices"
	"strings"

	"penwright/protocol"
)

// Kind tells what became of something between two plans.
type Kind int

// The kinds of differences.
const (
	Changed Kind = iota
	Added
	Removed
)

// String gives the word for k.
func (k Kind) String() string { return [...]string{"changed", "added", "removed"}[k] }

// Difference is one thing in which a later plan differs from an earlier one.
type Difference struct {
	// Key is the dotted key in the later protocol, as Protocol.Pos takes it; of what was
	// removed, that of the table it stood in.
	Key   string
	Kind  Kind
	Table string   // dotted, without indexes: response, analysis.contrast; empty for a file
	Names []string // of the tables on the way that repeat, outermost first: adg
	Field string   // key within Table; empty: the whole table; order: the order of the tables
	What  string   // in words: units of pen per block
	// Old and New are the values as JSON has them, nil where there was none.
	Old, New any

	labels []string // by which people may call what differs
}

// Of tells whether d is about the repeated table of that name.
func (d *Difference) Of(table, name string) bool {
	return d.Table == table && len(d.Names) > 0 && d.Names[0] == name
}

// Compare lists the differences of two plans in canonical form, in the order of the
// protocol. It is an error if one of them is not such a plan.
func Compare(old, new []byte) ([]Difference, error) {
	a, err := parsePlan(old)
	if err != nil {
		return nil, fmt.Errorf("the earlier plan: %w", err)
	}
	b, err := parsePlan(new)
	if err != nil {
		return nil, fmt.Errorf("the later plan: %w", err)
	}
	return compare(a, b), nil
}

// CompareProtocols lists the differences of two protocols in all that they say, also of
// data and conduct.
func CompareProtocols(old, new *protocol.Protocol) ([]Difference, error) {
	a, err := old.Canonical()
	if err != nil {
		return nil, err
	}
	b, err := new.Canonical()
	if err != nil {
		return nil, err
	}
	return Compare(a, b)
}

func parsePlan(text []byte) (map[string]any, error) {
	var v any
	if err := json.Unmarshal(text, &v); err != nil {
		return nil, fmt.Errorf("not a plan: %w", err)
	}
	m, ok := v.(map[string]any)
	if !ok || m["protocol"] != 1.0 {
		return nil, fmt.Errorf("not a plan of format 1")
	}
	return m, nil
}

func compare(old, new map[string]any) []Difference {
	c := &comparison{old: old, new: new}
	c.table(place{}, old, new)
	return c.found
}

type comparison struct {
	old, new map[string]any // the whole plans
	found    []Difference
}

// place is where a value stands.
type place struct {
	key    string // with indexes of the later plan
	table  string // of the table around it, without indexes
	field  string
	names  []string
	labels []string
}

func join(a, b string) string {
	if a == "" || b == "" {
		return a + b
	}
	return a + "." + b
}

// path is the key without indexes.
func (p place) path() string { return join(p.table, p.field) }

func (p place) child(field string) place {
	q := p
	q.key, q.table, q.field = join(p.key, spell(field)), p.path(), field
	return q
}

func (p place) element(i int, name string, t map[string]any) place {
	q := p
	q.names = append(slices.Clip(p.names), name)
	if s, ok := t["label"].(string); ok {
		q.labels = append(slices.Clip(p.labels), s)
	}
	if i >= 0 {
		q.key = fmt.Sprintf("%s[%d]", p.key, i)
	}
	return q
}

// spell quotes a name that is no bare key.
func spell(name string) string {
	if name == "" || strings.ContainsFunc(name, func(r rune) bool {
		return !(r == '_' || r == '-' || r >= '0' && r <= '9' || r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z')
	}) {
		return fmt.Sprintf("%q", name)
	}
	return name
}

// table compares the keys of two tables; either may be nil.
func (c *comparison) table(at place, old, new map[string]any) {
	keys := map[string]bool{}
	for k := range old {
		keys[k] = true
	}
	for k := range new {
		keys[k] = true
	}
	order := slices.Sorted(maps.Keys(keys))
	if at.path() == "" {
		slices.SortStableFunc(order, func(a, b string) int { return rank(a) - rank(b) })
	}
	for _, k := range order {
		c.value(at.child(k), old[k], new[k])
	}
}

func (c *comparison) value(at place, old, new any) {
	if reflect.DeepEqual(old, new) {
		return
	}
	a, b := asTables(old), asTables(new)
	if (a != nil || old == nil) && (b != nil || new == nil) {
		c.repeated(at, a, b)
		return
	}
	x, isOld := old.(map[string]any)
	y, isNew := new.(map[string]any)
	if own := phrases[at.path()]; own.single && (isOld || old == nil) && (isNew || new == nil) {
		if isOld && isNew || own.text == "" { // without a name it is but a heading
			c.table(at, x, y)
			return
		}
		whole := at
		whole.table, whole.field = at.path(), ""
		c.add(whole, kindOf(old, new), old, new)
		return
	}
	if texts(old, new) {
		c.texts(at, old, new)
		return
	}
	c.add(at, kindOf(old, new), old, new)
}

func kindOf(old, new any) Kind {
	switch {
	case old == nil:
		return Added
	case new == nil:
		return Removed
	}
	return Changed
}

// asTables gives a list of tables, nil if v is none.
func asTables(v any) []map[string]any {
	list, ok := v.([]any)
	if !ok || len(list) == 0 {
		return nil
	}
	out := make([]map[string]any, len(list))
	for i := range list {
		if out[i], ok = list[i].(map[string]any); !ok {
			return nil
		}
	}
	return out
}

// repeated compares tables that repeat: those of one name with each other.
func (c *comparison) repeated(at place, old, new []map[string]any) {
	before, after := identities(at.path(), old), identities(at.path(), new)
	was, is := numbered(before), numbered(after)
	inner := func(i int, id string, t map[string]any) place {
		p := at.element(i, id, t)
		p.table, p.field = at.path(), ""
		return p
	}
	var kept, common []string
	for i, id := range after {
		k, there := was[id]
		p := inner(i, id, new[i])
		if !there {
			c.add(p, Added, nil, new[i])
			continue
		}
		kept = append(kept, id)
		c.table(p, old[k], new[i])
	}
	for i, id := range before {
		if _, there := is[id]; !there {
			c.add(inner(-1, id, old[i]), Removed, old[i], nil)
			continue
		}
		common = append(common, id)
	}
	if !slices.Equal(kept, common) {
		p := inner(0, "", nil)
		p.names, p.field = at.names, "order"
		c.add(p, Changed, list(common), list(kept))
	}
}

func numbered(names []string) map[string]int {
	out := make(map[string]int, len(names))
	for i, n := range names {
		out[n] = i
	}
	return out
}

func list(names []string) []any {
	out := make([]any, len(names))
	for i, n := range names {
		out[i] = n
	}
	return out
}

// identities tells repeated tables apart by what names them; those that are alike are
// numbered.
func identities(table string, tables []map[string]any) []string {
	count := map[string]int{}
	out := make([]string, len(tables))
	for i, t := range tables {
		var parts []string
		for _, key := range naming(table) {
			if v, ok := t[key]; ok {
				parts = append(parts, show(v))
			}
			if len(parts) > 0 && table != "event" && table != "correction" && table != "signature" && table != "data.confirmed" {
				break
			}
		}
		id := strings.Join(parts, ", ")
		if count[id]++; count[id] > 1 {
			id = fmt.Sprintf("%s (%d)", id, count[id])
		}
		out[i] = id
	}
	return out
}

// naming are the keys that name a table that repeats: the first that is stated, or, for
// what happened, all of them.
func naming(table string) []string {
	switch table {
	case "event":
		return []string{"on", "unit", "kind"}
	case "correction":
		return []string{"file", "unit", "at", "column"}
	case "signature":
		return []string{"who", "meaning"}
	case "data.confirmed":
		return []string{"unit", "at", "response"}
	case "exclusion":
		return []string{"unit"}
	}
	return []string{"name", "code", "file", "what", "kind", "on"}
}

// texts tells whether two values are lists of sentences, each of which stands for itself.
func texts(old, new any) bool {
	prose := false
	for _, v := range []any{old, new} {
		if v == nil {
			continue
		}
		l, ok := v.([]any)
		if !ok {
			return false
		}
		for _, x := range l {
			s, ok := x.(string)
			if !ok {
				return false
			}
			prose = prose || strings.Contains(s, " ")
		}
	}
	return prose
}

func (c *comparison) texts(at place, old, new any) {
	if phrases[at.path()].whole {
		c.add(at, kindOf(old, new), old, new)
		return
	}
	before, _ := old.([]any)
	after, _ := new.([]any)
	was, is := map[any]bool{}, map[any]bool{}
	for _, x := range before {
		was[x] = true
	}
	for _, x := range after {
		is[x] = true
	}
	n := len(c.found)
	for i, x := range after {
		if !was[x] {
			p := at
			p.key = fmt.Sprintf("%s[%d]", at.key, i)
			c.add(p, Added, nil, x)
		}
	}
	for _, x := range before {
		if !is[x] {
			c.add(at, Removed, x, nil)
		}
	}
	if len(c.found) == n {
		c.add(at, Changed, old, new)
	}
}

func (c *comparison) add(at place, kind Kind, old, new any) {
	d := Difference{Key: at.key, Kind: kind, Table: at.table, Names: at.names, Field: at.field, Old: old, New: new, labels: at.labels}
	d.What = c.what(&d)
	c.found = append(c.found, d)
}
