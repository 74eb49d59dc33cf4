package protocol

import (
	"bytes"
	"errors"
	"fmt"
	"maps"
	"math"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf16"
	"unicode/utf8"
)

// Canonical is the decoded protocol, its defaults written out, as JSON in the canonical
// form of RFC 8785: two files that say the same give the same bytes. The keys are those
// of the protocol file; what is neither stated nor has a default is absent. Lists keep
// their order. A text is its prose, also where a file holds it; a date is a string; a
// list of one number or level that could be written alone stands alone. It is an error
// if the protocol holds what JSON cannot, which no file without faults does.
func (p *Protocol) Canonical() ([]byte, error) { return encode(p.tree()) }

// CanonicalPlan is Canonical without what cannot be planned because it comes later:
// see later.
func (p *Protocol) CanonicalPlan() ([]byte, error) {
	root := p.tree()
	for _, key := range later {
		table, name, nested := strings.Cut(key, ".")
		if !nested {
			delete(root, table)
			continue
		}
		if t, ok := root[table].(map[string]any); ok {
			if delete(t, name); len(t) == 0 {
				delete(root, table)
			}
		}
	}
	return encode(root)
}

// later are the keys that are no part of a plan, because they are known only when the
// trial runs or is over.
var later = []string{
	"trial.end", "trial.data_access", "approval.severity_observed", "site.weather", "blinding.unblinded",
	"data", "correction", "exclusion", "event", "deviation", "amendment", "signature", "records", "report",
}

func (p *Protocol) tree() map[string]any {
	v, _ := value(reflect.ValueOf(*p), false)
	root, _ := v.(map[string]any)
	return root
}

// spelled are the fields whose key does not follow from their Go name; an empty key is
// that of no key of the file.
var spelled = map[string]string{
	"Protocol.File": "", "Protocol.Source": "", "Protocol.Texts": "", "Protocol.index": "",
	"Protocol.Format": "protocol", "Protocol.CarryOver": "carryover",
	"Response.Contrasts": "contrasts", "Data.DateColumn": "date",
	"Factor.Values": "", "Repeated.Values": "", "Unit.AnimalsColumn": "",
}

// value gives a part of the protocol as a JSON value; false: it is absent. zero tells
// whether 0 is a statement here and not the absence of one.
func value(v reflect.Value, zero bool) (any, bool) {
	switch x := v.Interface().(type) {
	case Date:
		return x.String(), !x.IsZero()
	case Quantity:
		if x.From == x.To {
			return map[string]any{"value": x.From, "unit": x.Unit}, true
		}
		return map[string]any{"from": x.From, "to": x.To, "unit": x.Unit}, true
	case Text:
		return x.Body, x.Body != ""
	case []StratumValue:
		if len(x) == 1 && x[0].Stratum == "" {
			return x[0].Value, true
		}
	}
	switch v.Kind() {
	case reflect.String:
		return v.String(), v.Len() > 0
	case reflect.Bool:
		return v.Bool(), true
	case reflect.Int:
		return float64(v.Int()), zero || v.Int() != 0
	case reflect.Float64:
		return v.Float(), zero || v.Float() != 0
	case reflect.Pointer:
		if v.IsNil() {
			return nil, false
		}
		return value(v.Elem(), true)
	case reflect.Slice, reflect.Array:
		if t := v.Type().Elem(); t.Kind() == reflect.Struct && t.NumField() == 2 && isPair[t.Name()] {
			return pairs(v)
		}
		list := make([]any, v.Len())
		for i := range list {
			list[i], _ = value(v.Index(i), true)
		}
		return list, len(list) > 0
	case reflect.Map: // the levels of a listed treatment
		m := map[string]any{}
		for _, k := range v.MapKeys() {
			m[k.String()] = v.MapIndex(k).String()
		}
		return m, len(m) > 0
	case reflect.Struct:
		return structure(v)
	}
	panic("protocol: a field of a type that has no canonical form")
}

// isPair holds the types whose first field is a name that the author chose and whose
// second is what is said of it: in the file they are tables.
var isPair = map[string]bool{
	"Described": true, "Replicate": true, "StratumValue": true, "Condition": true, "Weight": true, "ColumnName": true,
	"NamedUnit": true, "NarrativePart": true,
}

func pairs(v reflect.Value) (any, bool) {
	m := map[string]any{}
	for i := range v.Len() {
		m[v.Index(i).Field(0).String()], _ = value(v.Index(i).Field(1), true)
	}
	return m, len(m) > 0
}

func structure(v reflect.Value) (any, bool) {
	t := v.Type()
	m := map[string]any{}
	for i := range t.NumField() {
		f := t.Field(i)
		key, own := spelled[t.Name()+"."+f.Name]
		if !own {
			key = keyOf(f)
		}
		if key == "" {
			continue
		}
		// In [analysis] 0 says that something is not wanted.
		if x, ok := value(v.Field(i), t.Name() == "Analysis"); ok {
			m[key] = x
		}
	}
	switch x := v.Interface().(type) {
	case Factor:
		if x.Values != nil {
			m["levels"] = numbers(x.Values)
			for i, c := range x.Control {
				if k := slices.Index(x.Levels, c); k >= 0 {
					m["control"].([]any)[i] = x.Values[k]
				}
			}
		}
		single(m, "control")
	case Repeated:
		if x.Values != nil {
			m["at"] = numbers(x.Values)
		}
	case Unit:
		single(m, "count")
		single(m, "labels")
		if single(m, "animals"); x.AnimalsColumn != "" {
			m["animals"] = x.AnimalsColumn
		}
		if len(x.Crosses) > 0 {
			delete(m, "numbered") // such a unit is named by those it crosses
		}
	case Analysis:
		switch x.Interactions {
		case -1:
			m["interactions"] = "auto"
		case 1:
			m["interactions"] = "none"
		}
	case Data:
		if len(x.Missing) == 0 { // the default is not
			m["missing"] = []any{}
		}
	case Report:
		if n, err := strconv.Atoi(x.Decimals); err == nil {
			m["decimals"] = float64(n)
		}
	}
	return m, len(m) > 0
}

// single lets a list of one stand alone.
func single(m map[string]any, key string) {
	if list, ok := m[key].([]any); ok && len(list) == 1 {
		m[key] = list[0]
	}
}

func numbers(values []float64) []any {
	list := make([]any, len(values))
	for i, x := range values {
		list[i] = x
	}
	return list
}

// keyOf spells the Go name of a field as a key. Tables that repeat have their key in the
// singular.
func keyOf(f reflect.StructField) string {
	var b strings.Builder
	name := []rune(f.Name)
	for i, r := range name {
		if i > 0 && unicode.IsUpper(r) && (unicode.IsLower(name[i-1]) || i+1 < len(name) && unicode.IsLower(name[i+1])) {
			b.WriteByte('_')
		}
		b.WriteRune(unicode.ToLower(r))
	}
	if t := f.Type; t.Kind() == reflect.Slice && t.Elem().Kind() == reflect.Struct && !isPair[t.Elem().Name()] {
		return strings.TrimSuffix(b.String(), "s")
	}
	return b.String()
}

var (
	errNotFinite = errors.New("a number that is not finite has no canonical form")
	errNotUTF8   = errors.New("a text that is not UTF-8 has no canonical form")
)

// encode writes a JSON value in canonical form.
//
// Source: RFC 8785 (A. Rundgren, B. Jordan, S. Erdtman, 2020): names sorted by UTF-16
// code units (3.2.3), strings with the shortest escapes (3.2.2.2), numbers as ECMAScript
// prints them (3.2.2.3).
func encode(v any) ([]byte, error) {
	var b bytes.Buffer
	if err := encodeTo(&b, v); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}

func encodeTo(b *bytes.Buffer, v any) error {
	switch v := v.(type) {
	case nil:
		b.WriteString("null")
	case bool:
		b.WriteString(strconv.FormatBool(v))
	case float64:
		s, err := es6(v)
		if err != nil {
			return err
		}
		b.WriteString(s)
	case string:
		return encodeString(b, v)
	case []any:
		b.WriteByte('[')
		for i, x := range v {
			if i > 0 {
				b.WriteByte(',')
			}
			if err := encodeTo(b, x); err != nil {
				return err
			}
		}
		b.WriteByte(']')
	case map[string]any:
		b.WriteByte('{')
		for i, k := range slices.SortedFunc(maps.Keys(v), byUTF16) {
			if i > 0 {
				b.WriteByte(',')
			}
			if err := encodeString(b, k); err != nil {
				return err
			}
			b.WriteByte(':')
			if err := encodeTo(b, v[k]); err != nil {
				return err
			}
		}
		b.WriteByte('}')
	default:
		panic("protocol: a value of a type that JSON does not have")
	}
	return nil
}

func byUTF16(a, b string) int {
	return slices.Compare(utf16.Encode([]rune(a)), utf16.Encode([]rune(b)))
}

func encodeString(b *bytes.Buffer, s string) error {
	if !utf8.ValidString(s) {
		return errNotUTF8
	}
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r >= 0x20:
			b.WriteRune(r)
		default:
			if i := strings.IndexRune("\b\t\n\f\r", r); i >= 0 {
				b.WriteByte('\\')
				b.WriteByte("btnfr"[i])
			} else {
				fmt.Fprintf(b, `\u%04x`, r)
			}
		}
	}
	b.WriteByte('"')
	return nil
}

// es6 prints a number as ECMAScript does.
//
// Source: ECMA-262, Number::toString with radix 10: k digits d, value d × 10^(n−k).
func es6(x float64) (string, error) {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return "", errNotFinite
	}
	if x == 0 {
		return "0", nil // also for -0
	}
	sign := ""
	if x < 0 {
		sign, x = "-", -x
	}
	mantissa, exponent, _ := strings.Cut(strconv.FormatFloat(x, 'e', -1, 64), "e")
	digits := strings.Replace(mantissa, ".", "", 1)
	e, err := strconv.Atoi(exponent)
	if err != nil {
		panic("protocol: a number without exponent")
	}
	k, n := len(digits), e+1
	switch {
	case k <= n && n <= 21:
		return sign + digits + strings.Repeat("0", n-k), nil
	case 0 < n && n <= 21:
		return sign + digits[:n] + "." + digits[n:], nil
	case -6 < n && n <= 0:
		return sign + "0." + strings.Repeat("0", -n) + digits, nil
	}
	if k > 1 {
		digits = digits[:1] + "." + digits[1:]
	}
	return fmt.Sprintf("%s%se%+d", sign, digits, n-1), nil
}
