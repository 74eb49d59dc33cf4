package protocol

import (
	"fmt"
	"io/fs"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"penwright/protocol/diag"
	"penwright/protocol/internal/tomlpos"
)

// table is a table of the file under decoding. Asking for a key makes the key known
// at this place; close reports those that were never asked for.
type table struct {
	d     *decoder
	path  string // dotted key, empty for the whole file
	shape string // as it is written, such as [[unit]]
	node  *tomlpos.Node
	m     map[string]any
	known []string
	named bool // its names are the author's own; none is known or unknown
	void  bool // stands for an element that is no table; what it lacks is not missed
}

// schema collects which keys stand in which table.
type schema struct{ places []place }

type place struct{ table, key string }

// add keeps a diagnostic, up to the limit, and returns it for additions.
func (d *decoder) add(f diag.Diagnostic) *diag.Diagnostic {
	if d.schema != nil {
		return &f
	}
	d.faults++
	if d.faults > maxFaults {
		return &f
	}
	d.list.Add(f)
	return &d.list[len(d.list)-1]
}

// enough tells whether further faults are only counted, so that no work need be
// spent on their words.
func (d *decoder) enough() bool { return d.faults >= maxFaults }

func (d *decoder) position(n *tomlpos.Node, value bool) diag.Pos {
	if n == nil || n == d.p.index.doc.Root {
		return diag.Pos{File: d.p.File}
	}
	if value {
		return d.p.index.doc.At(int(n.Value))
	}
	return d.p.index.doc.At(int(n.Key))
}

// key returns the dotted key of a name in t.
func (t *table) key(name string) string { return tomlpos.Join(t.path, name) }

// fail reports an error at the value of a key, or at the table if it is not there.
func (t *table) fail(key, code, hint, format string, args ...any) *diag.Diagnostic {
	n := t.node.Child(key)
	if n == nil {
		return t.failAt(t.d.position(t.node, false), key, code, hint, format, args...)
	}
	return t.failAt(t.d.position(n, n.Kind != tomlpos.Table), key, code, hint, format, args...)
}

func (t *table) failAt(pos diag.Pos, key, code, hint, format string, args ...any) *diag.Diagnostic {
	full := t.path
	if key != "" {
		full = t.key(key)
	}
	return t.d.add(diag.Diagnostic{Pos: pos, Key: full, Severity: diag.Error, Code: code,
		Message: fmt.Sprintf(format, args...), Hint: hint})
}

// warn reports a warning at the value of a key, or at the table if it is not there.
func (t *table) warn(key, code, hint, format string, args ...any) *diag.Diagnostic {
	f := t.fail(key, code, hint, format, args...)
	f.Severity = diag.Warning
	return f
}

// item reports an error at an element of a list.
func (t *table) item(key string, i int, code, hint, format string, args ...any) *diag.Diagnostic {
	n := t.node.Child(key)
	if e := n.Item(i); e != nil {
		n = e
	}
	f := t.fail(key, code, hint, format, args...)
	f.Key = tomlpos.Index(f.Key, i)
	if n != nil {
		f.Pos = t.d.position(n, true)
	}
	return f
}

// get returns the value of a key and makes the key known.
func (t *table) get(key string) (any, bool) {
	if !t.named && !slices.Contains(t.known, key) {
		t.known = append(t.known, key)
		if s := t.d.schema; s != nil {
			s.places = append(s.places, place{table: t.shape, key: key})
		}
	}
	v, ok := t.m[key]
	return v, ok
}

func (t *table) has(key string) bool {
	_, ok := t.m[key]
	return ok
}

// wrong reports a value of the wrong type.
func (t *table) wrong(key string, v any, want, hint string) {
	t.fail(key, WrongType, hint, "expected %s, found %s", want, found(v))
}

// need reports the keys that are missing though they are required.
func (t *table) need(keys ...string) {
	for _, k := range keys {
		if !t.has(k) && !t.void {
			t.fail(k, MissingKey, fmt.Sprintf("write %s = … in %s", k, t.shape), "the key %s is missing", quote(k))
		}
	}
}

// str reads a text of one line or more.
func (t *table) str(key string) string {
	v, ok := t.get(key)
	if !ok {
		return ""
	}
	s, ok := v.(string)
	if !ok {
		t.wrong(key, v, "a text", inQuotes(key, v))
		return ""
	}
	return s
}

// word reads a text of one line that must not be blank: something that is named,
// matched or pointed at.
func (t *table) word(key string) string {
	if s, isText := t.m[key].(string); isText {
		t.get(key)
		if why := badWord(s); why != "" {
			t.fail(key, BadText, "", "%s", why)
			return ""
		}
		return s
	}
	return t.str(key)
}

// badWord tells what is wrong with a text that shall be matched with others.
func badWord(s string) string {
	switch {
	case strings.TrimSpace(s) == "":
		return "the text is empty"
	case strings.TrimSpace(s) != s:
		return "the text begins or ends with a space: " + quote(s)
	case strings.IndexFunc(s, unicode.IsControl) >= 0:
		return "the text has a line end or a control character: " + quote(s)
	}
	return ""
}

// label reads a word that may be written as a whole number, such as the name of a
// unit.
func (t *table) label(key string) string {
	v, ok := t.get(key)
	if !ok {
		return ""
	}
	if n, ok := v.(int64); ok {
		return strconv.FormatInt(n, 10)
	}
	return t.word(key)
}

// scalar reads a word or a number as the text that data would have.
func (t *table) scalar(key string) string {
	v, ok := t.get(key)
	if !ok {
		return ""
	}
	if s, _, ok := number(v); ok {
		return s
	}
	if _, ok := v.(float64); ok {
		t.fail(key, NotFinite, "", "%s is not a number that can be used", found(v))
		return ""
	}
	return t.word(key)
}

// text reads prose, or the Markdown file that holds it.
func (t *table) text(key string) Text {
	v, ok := t.get(key)
	if !ok {
		return Text{}
	}
	switch v := v.(type) {
	case string:
		return Text{Body: v}
	case map[string]any:
		sub := t.sub(key, v)
		sub.need("file")
		name := sub.file("file")
		sub.close()
		if name == "" {
			return Text{}
		}
		body, _ := sub.read("file", name)
		return Text{Body: body, File: name}
	}
	t.wrong(key, v, "a text or { file = \"…\" }", inQuotes(key, v))
	return Text{}
}

// file reads the path of a file inside the folder.
func (t *table) file(key string) string {
	s := t.str(key)
	if s == "" {
		if v, ok := t.m[key]; ok && v == "" {
			t.fail(key, BadPath, "", "the name of the file is empty")
		}
		return ""
	}
	if why, hint := badPath(s); why != "" {
		t.fail(key, BadPath, hint, "%s", why)
		return ""
	}
	return s
}

// badPath tells why a path is not one of a file in the folder.
func badPath(s string) (why, hint string) {
	switch {
	case strings.Contains(s, `\`):
		return fmt.Sprintf("the path %s has backslashes", quote(s)), "write forward slashes, such as tables/diets.csv"
	case strings.HasPrefix(s, "/") || len(s) > 1 && s[1] == ':':
		return fmt.Sprintf("the path %s does not begin in the trial's folder", quote(s)), "put the file into the folder and write its name"
	case s == "." || !fs.ValidPath(s):
		return fmt.Sprintf("%s is not the path of a file in the trial's folder", quote(s)), "write a plain path without . or .., such as tables/diets.csv"
	case strings.IndexFunc(s, unicode.IsControl) >= 0:
		return fmt.Sprintf("the path %s has a control character", quote(s)), ""
	}
	return "", ""
}

// read reads a text file of the folder, once.
func (t *table) read(key, name string) (string, bool) {
	d := t.d
	if body, ok := d.p.Texts[name]; ok {
		return body, true
	}
	if d.fsys == nil {
		return "", false
	}
	data, err := readFile(d.fsys, name, maxText)
	if err == nil && d.texts+len(data) > maxTexts {
		t.fail(key, TooMany, "", "the text files together are larger than %d MiB", maxTexts>>20)
		return "", false
	}
	if err != nil {
		d.unreadable(d.position(t.node.Child(key), true), t.key(key), err, "file "+quote(name))
		return "", false
	}
	d.texts += len(data)
	if i := invalidUTF8(data); i >= 0 {
		t.fail(key, BadText, "save it as plain text in UTF-8", "the file %s is not UTF-8", quote(name))
		return "", false
	}
	body := strings.TrimPrefix(string(data), "\ufeff")
	d.p.Texts[name] = body
	return body, true
}

// span is what a number may be.
type span struct {
	low, high         float64
	lowOpen, highOpen bool
	words             string // how it is said, such as "between 0 and 1"
}

var (
	anyNumber  = span{low: math.Inf(-1), high: math.Inf(1)}
	positive   = span{low: 0, lowOpen: true, high: math.Inf(1), words: "greater than 0"}
	notBelow0  = span{low: 0, high: math.Inf(1), words: "0 or more"}
	proportion = span{low: 0, lowOpen: true, high: 1, highOpen: true, words: "between 0 and 1"}
	below1     = span{low: 0, high: 1, highOpen: true, words: "0 or more and less than 1"}
)

func (s span) holds(x float64) bool {
	return x >= s.low && x <= s.high && !(s.lowOpen && x == s.low) && !(s.highOpen && x == s.high)
}

// number reads a finite number.
func (t *table) number(key string, s span) *float64 {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	x, why := finite(v)
	switch {
	case why == WrongType:
		t.wrong(key, v, "a number", withoutQuotes(key, v))
		return nil
	case why != "":
		t.fail(key, why, "", "%s is not a number that can be used", found(v))
		return nil
	case !s.holds(x):
		hint := ""
		if s.high == 1 && x > 1 && x <= 100 {
			hint = fmt.Sprintf("write %s = %s for %s %%", key, shortest(x/100), shortest(x))
		}
		t.fail(key, OutOfRange, hint, "must be %s, is %s", s.words, shortest(x))
		return nil
	}
	return &x
}

// orElse is *x, or y if x is nil.
func orElse(x *float64, y float64) float64 {
	if x == nil {
		return y
	}
	return *x
}

// finite returns the number of v; why is the code of what is wrong with it.
func finite(v any) (x float64, why string) {
	switch v := v.(type) {
	case int64:
		return float64(v), ""
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return 0, NotFinite
		}
		return v, ""
	}
	return 0, WrongType
}

// whole reads a whole number between low and high.
func (t *table) whole(key string, low, high, otherwise int) int {
	v, ok := t.get(key)
	if !ok {
		return otherwise
	}
	n, ok := v.(int64)
	switch {
	case !ok:
		t.wrong(key, v, "a whole number", withoutQuotes(key, v))
		return otherwise
	case n < int64(low) || n > int64(high):
		t.fail(key, OutOfRange, "", "must be between %d and %d, is %d", low, high, n)
		return otherwise
	}
	return int(n)
}

// yes reads true or false; nil if it is not stated.
func (t *table) yes(key string) *bool {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	b, ok := v.(bool)
	if !ok {
		t.wrong(key, v, "true or false", withoutQuotes(key, v))
		return nil
	}
	return &b
}

func isTrue(b *bool) bool { return b != nil && *b }

// date reads a day.
func (t *table) date(key string) Date {
	v, ok := t.get(key)
	if !ok {
		return Date{}
	}
	hint := fmt.Sprintf("write year-month-day without quotes, such as %s = 2026-03-02", key)
	day, ok := v.(time.Time)
	if !ok {
		t.fail(key, BadDate, hint, "expected a date, found %s", found(v))
		return Date{}
	}
	if day.Location().String() != localDate {
		t.fail(key, BadDate, hint, "expected a date alone, found %s", found(v))
		return Date{}
	}
	if day.Year() < 1 {
		t.fail(key, BadDate, "", "the year 0 does not exist")
		return Date{}
	}
	return Date{Year: day.Year(), Month: int(day.Month()), Day: day.Day()}
}

// localDate is the name of the location that the library gives to a date without a
// time.
const localDate = "date-local"

// quantity reads { value, unit } or { from, to, unit }.
func (t *table) quantity(key string, s span) *Quantity {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	m, ok := v.(map[string]any)
	if !ok {
		hint := fmt.Sprintf(`write %s = { value = …, unit = "…" } or { from = …, to = …, unit = "…" }`, key)
		t.wrong(key, v, "an amount with its unit", hint)
		return nil
	}
	sub := t.sub(key, m)
	value, from, to := sub.number("value", s), sub.number("from", s), sub.number("to", s)
	unit := sub.word("unit")
	sub.close()
	sub.need("unit")
	switch {
	case sub.has("value") && (sub.has("from") || sub.has("to")):
		t.fail(key, BadQuantity, "write either value or from and to", "the amount has both a value and a range")
		return nil
	case !sub.has("value") && !(sub.has("from") && sub.has("to")):
		t.fail(key, BadQuantity, `write { value = …, unit = "…" } or { from = …, to = …, unit = "…" }`, "the amount is not complete")
		return nil
	case value != nil && unit != "":
		return &Quantity{From: *value, To: *value, Unit: unit}
	case from != nil && to != nil && *from > *to:
		t.fail(key, BadQuantity, "write the smaller number as from", "the range begins at %s, after its end at %s", shortest(*from), shortest(*to))
		return nil
	case from != nil && to != nil && unit != "":
		return &Quantity{From: *from, To: *to, Unit: unit}
	}
	return nil
}

// list returns the elements of a list. A single scalar is not a list.
func (t *table) list(key, of string) ([]any, bool) {
	v, ok := t.get(key)
	if !ok {
		return nil, false
	}
	items, ok := asList(v)
	if !ok {
		hint := ""
		if _, isText := v.(string); isText {
			hint = fmt.Sprintf("write it in brackets: %s = [%s]", key, found(v)[len("the text "):])
		} else if s, _, isNumber := number(v); isNumber {
			hint = fmt.Sprintf("write it in brackets: %s = [%s]", key, s)
		}
		t.wrong(key, v, "a list of "+of, hint)
		return nil, false
	}
	if len(items) > maxList {
		t.fail(key, TooMany, "", "the list has %d elements, more than %d", len(items), maxList)
		return nil, false
	}
	return items, true
}

func asList(v any) ([]any, bool) {
	switch v := v.(type) {
	case []any:
		return v, true
	case []map[string]any:
		items := make([]any, len(v))
		for i := range v {
			items[i] = v[i]
		}
		return items, true
	}
	return nil, false
}

// texts reads a list of texts, none of them empty.
func (t *table) texts(key string) []string { return t.strings(key, "texts", false) }

// words reads a list of words, none of them twice.
func (t *table) words(key string) []string { return t.strings(key, "names in quotes", true) }

func (t *table) strings(key, of string, names bool) []string {
	items, ok := t.list(key, of)
	if !ok {
		return nil
	}
	list := make([]string, 0, len(items))
	seen := map[string]bool{}
	for i, v := range items {
		s, ok := v.(string)
		switch {
		case !ok:
			t.item(key, i, WrongType, "write it in quotes", "expected a text, found %s", found(v))
			continue
		case strings.TrimSpace(s) == "":
			t.item(key, i, BadText, "delete it", "the text is empty")
			continue
		case names && badWord(s) != "":
			t.item(key, i, BadText, "", "%s", badWord(s))
			continue
		case names && seen[s]:
			t.item(key, i, Duplicate, "keep one of them", "%s is listed twice", quote(s))
			continue
		}
		seen[s] = true
		list = append(list, s)
	}
	return list
}

// enum reads one of a few words.
func (t *table) enum(key, otherwise string, values ...string) string {
	if !t.has(key) {
		t.get(key)
		return otherwise
	}
	s := t.str(key)
	if s == "" {
		if t.m[key] == "" {
			t.fail(key, UnknownValue, oneOf(values), "the value is empty")
		}
		return otherwise
	}
	if slices.Contains(values, s) {
		return s
	}
	t.fail(key, UnknownValue, t.d.suggest(s, values), "%s is not known here", quote(s))
	return otherwise
}

// sub makes the table of a key whose value was already found to be one.
func (t *table) sub(key string, m map[string]any) *table {
	return &table{d: t.d, path: t.key(key), shape: key + " = { … }", node: t.node.Child(key), m: m}
}

// table returns the table of a key, or nil if there is none.
func (t *table) table(key string) *table {
	v, ok := t.get(key)
	shape := "[" + t.key(key) + "]"
	if t.d.schema != nil {
		return &table{d: t.d, path: t.key(key), shape: shape}
	}
	if !ok {
		return nil
	}
	m, ok := v.(map[string]any)
	if !ok {
		hint := fmt.Sprintf("write %s and its keys below it", shape)
		if _, list := v.([]map[string]any); list {
			hint = fmt.Sprintf("there is only one: write %s with single brackets", shape)
		}
		t.wrong(key, v, "a table", hint)
		return nil
	}
	return &table{d: t.d, path: t.key(key), shape: shape, node: t.node.Child(key), m: m}
}

// tables returns the tables of a key that may be repeated.
func (t *table) tables(key string, most int) []*table {
	v, ok := t.get(key)
	shape := "[[" + withoutIndexes(t.key(key)) + "]]"
	if t.d.schema != nil {
		return []*table{{d: t.d, path: t.key(key), shape: shape}}
	}
	if !ok {
		return nil
	}
	items, ok := asList(v)
	if !ok {
		hint := fmt.Sprintf("write %s and its keys below it", shape)
		if _, single := v.(map[string]any); single {
			hint = fmt.Sprintf("there may be several: write %s with double brackets", shape)
		}
		t.wrong(key, v, "a list of tables", hint)
		return nil
	}
	if len(items) > most {
		t.fail(key, TooMany, "", "there are %d %s, more than %d", len(items), shape, most)
		return nil
	}
	var list []*table
	for i, v := range items {
		m, ok := v.(map[string]any)
		if !ok {
			t.item(key, i, WrongType, fmt.Sprintf("write %s and its keys below it", shape), "expected a table, found %s", found(v))
		}
		list = append(list, &table{d: t.d, path: tomlpos.Index(t.key(key), i), shape: shape, node: t.node.Child(key).Item(i), m: m, void: !ok})
	}
	return list
}

// free returns the table of a key whose names the author chooses, with the names in
// the order of the file.
func (t *table) free(key, of string) (*table, []string) {
	v, ok := t.get(key)
	if !ok {
		return nil, nil
	}
	m, ok := v.(map[string]any)
	if !ok {
		t.wrong(key, v, of, fmt.Sprintf("write %s = { name = …, name = … }", key))
		return nil, nil
	}
	if len(m) > maxList {
		t.fail(key, TooMany, "", "there are %d entries, more than %d", len(m), maxList)
		return nil, nil
	}
	sub := t.sub(key, m)
	sub.named = true
	var names []string
	if sub.node != nil && len(sub.node.Kids) == len(m) {
		for _, k := range sub.node.Kids {
			names = append(names, k.Name)
		}
	} else {
		for k := range m {
			names = append(names, k)
		}
		slices.Sort(names)
	}
	return sub, names
}

// close reports the keys that format 1 does not have at this place.
func (t *table) close() {
	if t.d.schema != nil {
		return
	}
	var unknown []string
	for k := range t.m {
		if !slices.Contains(t.known, k) {
			unknown = append(unknown, k)
		}
	}
	slices.Sort(unknown)
	for _, k := range unknown {
		if t.d.enough() {
			t.d.faults++
			continue
		}
		f := t.fail(k, UnknownKey, t.meant(k), "there is no key %s in %s", quote(k), t.title())
		f.Pos = t.d.position(t.node.Child(k), false)
	}
}

// title is how the table is called in a message.
func (t *table) title() string {
	if t.path == "" {
		return "the protocol"
	}
	return t.shape
}

// meant says which key may have been meant by an unknown one.
func (t *table) meant(key string) string {
	var hints []string
	if near := diag.Nearest(key, t.known); near != "" {
		hints = append(hints, fmt.Sprintf("did you mean %s?", quote(near)))
	}
	var tables []string
	for _, p := range t.d.keys() {
		if p.key == key && p.table != "" && !slices.Contains(tables, p.table) {
			tables = append(tables, p.table)
		}
	}
	if n := len(tables); n > 3 {
		tables = append(tables[:3], "others")
	}
	if len(tables) > 0 {
		hints = append(hints, fmt.Sprintf("the key %s belongs to %s", quote(key), enumerate(tables)))
	}
	if len(hints) == 0 && len(t.known) <= 24 {
		hints = append(hints, "the keys here are "+enumerate(t.known))
	}
	return strings.Join(hints, " ")
}

// keys returns all keys of format 1 with their tables, in the order of decoding.
// They are had by decoding an empty file, so that they are stated only once.
func (d *decoder) keys() []place {
	if d.allKeys == nil {
		s := &schema{}
		e := &decoder{schema: s, p: &Protocol{Texts: map[string]string{}}}
		e.document(&table{d: e})
		d.allKeys = s.places
	}
	return d.allKeys
}

// found describes a value of the file.
func found(v any) string {
	switch v := v.(type) {
	case string:
		return "the text " + quote(v)
	case int64:
		return "the number " + strconv.FormatInt(v, 10)
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return strings.TrimPrefix(strings.ToLower(strconv.FormatFloat(v, 'g', -1, 64)), "+")
		}
		return "the number " + shortest(v)
	case bool:
		return strconv.FormatBool(v)
	case time.Time:
		switch v.Location().String() {
		case localDate:
			return "the date " + v.Format(time.DateOnly)
		case "time-local":
			return "the time " + v.Format(time.TimeOnly)
		}
		return "the date and time " + v.Format("2006-01-02 15:04")
	case []any, []map[string]any:
		return "a list"
	}
	return "a table"
}

// number returns the shortest decimal text of a finite number, and the number.
func number(v any) (string, float64, bool) {
	switch v := v.(type) {
	case int64:
		return strconv.FormatInt(v, 10), float64(v), true
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return "", 0, false
		}
		return shortest(v), v, true
	}
	return "", 0, false
}

// shortest is the shortest decimal form that gives x back.
func shortest(x float64) string {
	if x == 0 {
		return "0" // also for -0
	}
	return strconv.FormatFloat(x, 'f', -1, 64)
}

// quote puts a text in quotes for a message, cut to a readable length.
func quote(s string) string {
	const most = 60
	if utf8.RuneCountInString(s) > most {
		s = string([]rune(s)[:most]) + "…"
	}
	return strconv.Quote(s)
}

// inQuotes shows how a scalar is written as a text.
func inQuotes(key string, v any) string {
	switch v := v.(type) {
	case int64, bool:
		return fmt.Sprintf("write it in quotes: %s = \"%v\"", key, v)
	case float64:
		return fmt.Sprintf("write it in quotes: %s = \"%s\"", key, shortest(v))
	case time.Time:
		if v.Location().String() == localDate {
			return fmt.Sprintf("write it in quotes: %s = \"%s\"", key, v.Format(time.DateOnly))
		}
	}
	return ""
}

// withoutQuotes shows how a number or a truth is written that was given as a text.
func withoutQuotes(key string, v any) string {
	s, ok := v.(string)
	if !ok {
		return ""
	}
	s = strings.TrimSpace(s)
	if _, err := strconv.ParseFloat(s, 64); err == nil || s == "true" || s == "false" {
		return fmt.Sprintf("write it without quotes: %s = %s", key, s)
	}
	if _, err := strconv.ParseFloat(strings.Replace(s, ",", ".", 1), 64); err == nil {
		return fmt.Sprintf("write it with a decimal point and without quotes: %s = %s", key, strings.Replace(s, ",", ".", 1))
	}
	return ""
}

// suggest names the word that was probably meant, or all that are known if there
// are few.
func (d *decoder) suggest(s string, known []string) string {
	if d.enough() {
		return ""
	}
	if near := diag.Nearest(s, known); near != "" {
		return fmt.Sprintf("did you mean %s?", quote(near))
	}
	return oneOf(known)
}

// oneOf lists words that may be written.
func oneOf(known []string) string {
	if len(known) == 0 || len(known) > 16 {
		return ""
	}
	quoted := make([]string, len(known))
	for i, k := range known {
		quoted[i] = quote(k)
	}
	if len(quoted) == 1 {
		return "write " + quoted[0]
	}
	return "write one of " + strings.Join(quoted, ", ")
}

// enumerate joins words as in a sentence.
func enumerate(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " and " + words[len(words)-1]
}

// withoutIndexes removes array indexes from a dotted key.
func withoutIndexes(key string) string {
	for {
		before, rest, ok := strings.Cut(key, "[")
		if !ok {
			return key
		}
		_, after, _ := strings.Cut(rest, "]")
		key = before + after
	}
}
