package compose

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"sort"
	"strconv"
	"strings"
	"text/template"
	"unicode/utf8"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

// Number is a value that is printed as Text and compared as X, which keeps its full
// precision. Where X is NaN the value is not there yet: it is printed all the same, and
// what is asked of it stays open.
type Number struct {
	X    float64
	Text []doc.Inline
	Bare string // the digits alone, as print and the function number give them
	Unit string // of X; what has another unit is not compared with it
	What string // for messages: "the mean at 20 g/kg"; empty: Text says it, as "P = 0.21" does
}

// Truth is what comparing gave, with the numbers compared. It is a slice because
// text/template takes an empty slice for false, whatever lies behind its end: one that
// holds has its outcome inside, one that does not has it behind.
type Truth []outcome

type outcome struct {
	why  string
	open bool
}

// NewTruth returns a truth with its reason, such as "P = 0.21, not < 0.05".
func NewTruth(holds bool, why string) Truth {
	t := Truth{{why: why}}
	if !holds {
		t = t[:0]
	}
	return t
}

func openTruth(why string) Truth { return Truth{{why: why, open: true}}[:0] }

func (t Truth) outcome() outcome {
	if cap(t) == 0 {
		return outcome{}
	}
	return t[:1][0]
}

// Holds tells whether what was asked holds.
func (t Truth) Holds() bool { return len(t) > 0 }

// Why tells the numbers that were compared.
func (t Truth) Why() string { return t.outcome().why }

// Open tells that a number compared is not there yet.
func (t Truth) Open() bool { return t.outcome().open }

// field reads names one inside the other. Text, numbers and truths come out with their
// plain types, whatever the data call them.
func (r *runner) field(n int, base any, names ...string) (any, error) {
	if err := r.spend(n, nodeSteps*len(names)); err != nil {
		return nil, err
	}
	v := reflect.ValueOf(base)
	for _, name := range names {
		v = indirect(v)
		if !v.IsValid() {
			return r.refuse(n, CodeWrongValue, fmt.Sprintf("there is no value to take %q from", name), "test it with {{if}} or {{with}} before")
		}
		if v.Type() == reflect.TypeFor[failure]() {
			return failed, nil
		}
		var known []string
		switch v.Kind() {
		case reflect.Struct:
			if f, ok := v.Type().FieldByName(name); ok && f.IsExported() {
				if inner, err := v.FieldByIndexErr(f.Index); err == nil {
					v = inner
					continue
				}
			}
			for i := range v.NumField() {
				if f := v.Type().Field(i); f.IsExported() {
					known = append(known, f.Name)
				}
			}
		case reflect.Map:
			if v.Type().Key().Kind() != reflect.String {
				return r.refuse(n, CodeWrongValue, fmt.Sprintf("%s has no key %q", describe(base), name), "")
			}
			if item := v.MapIndex(reflect.ValueOf(name).Convert(v.Type().Key())); item.IsValid() {
				v = item
				continue
			}
			for _, k := range v.MapKeys() {
				known = append(known, k.String())
			}
			sort.Strings(known)
		default:
			return r.refuse(n, CodeUnknownField, fmt.Sprintf("%s has no part %q", describe(v.Interface()), name), "")
		}
		return r.refuse(n, CodeUnknownField, fmt.Sprintf("there is no %q here", name), choices(name, known))
	}
	return plain(v), nil
}

// choices hints at the nearest of names, or at all if they are few.
func choices(word string, names []string) string {
	if hint := didYouMean(word, names); hint != "" {
		return hint
	}
	const few = 12
	if len(names) == 0 || len(names) > few {
		return ""
	}
	return "there are: " + strings.Join(names, ", ")
}

func indirect(v reflect.Value) reflect.Value {
	for v.Kind() == reflect.Pointer || v.Kind() == reflect.Interface {
		if v.Kind() == reflect.Pointer && v.Type() == reflect.TypeFor[*failure]() {
			return reflect.ValueOf(failure{})
		}
		v = v.Elem()
	}
	return v
}

func plain(v reflect.Value) any {
	for v.Kind() == reflect.Interface {
		v = v.Elem()
	}
	switch {
	case !v.IsValid():
		return nil
	case v.Kind() == reflect.String:
		return v.String()
	case v.Kind() == reflect.Bool:
		return v.Bool()
	case v.CanInt() && v.Int() == int64(int(v.Int())):
		return int(v.Int())
	case v.CanFloat():
		return v.Float()
	}
	return v.Interface()
}

// arguments fits the values of a call to the parameters of a function, or says why they
// do not fit.
func arguments(t reflect.Type, s site, args []any) ([]reflect.Value, string) {
	var in []reflect.Value
	skip := 0
	if t.NumIn() > 0 && t.In(0) == reflect.TypeFor[diag.Pos]() {
		in, skip = append(in, reflect.ValueOf(s.pos())), 1
	}
	want := t.NumIn() - skip
	switch {
	case t.IsVariadic() && len(args) < want-1:
		return nil, fmt.Sprintf("%s takes at least %s, not %d", s.name, plural(want-1), len(args))
	case !t.IsVariadic() && len(args) != want:
		return nil, fmt.Sprintf("%s takes %s, not %d", s.name, plural(want), len(args))
	}
	for i, a := range args {
		param := t.In(min(i+skip, t.NumIn()-1))
		if t.IsVariadic() && i+skip >= t.NumIn()-1 {
			param = param.Elem()
		}
		v, ok := fit(a, param)
		if !ok {
			return nil, fmt.Sprintf("value %d of %s must be %s, not %s", i+1, s.name, describeType(param), describe(a))
		}
		in = append(in, v)
	}
	return in, ""
}

func plural(n int) string {
	switch n {
	case 0:
		return "no value"
	case 1:
		return "one value"
	}
	return strconv.Itoa(n) + " values"
}

func fit(a any, t reflect.Type) (reflect.Value, bool) {
	v := reflect.ValueOf(a)
	if !v.IsValid() {
		switch t.Kind() {
		case reflect.Interface, reflect.Map, reflect.Pointer, reflect.Slice:
			return reflect.Zero(t), true
		}
		return v, false
	}
	if v.Type().AssignableTo(t) {
		return v, true
	}
	if v.Kind() == reflect.Pointer && !v.IsNil() && v.Type().Elem().AssignableTo(t) {
		return v.Elem(), true
	}
	target := reflect.New(t).Elem()
	if n, ok := a.(Number); ok && target.CanFloat() && !math.IsNaN(n.X) {
		return reflect.ValueOf(n.X).Convert(t), true
	}
	if truth, ok := a.(Truth); ok && t.Kind() == reflect.Bool {
		return reflect.ValueOf(truth.Holds()).Convert(t), true
	}
	switch {
	case v.Kind() == reflect.String && t.Kind() == reflect.String, v.Kind() == reflect.Bool && t.Kind() == reflect.Bool:
		return v.Convert(t), true
	case target.CanFloat() && (v.CanInt() || v.CanUint() || v.CanFloat()):
		return v.Convert(t), true
	case target.CanInt() && v.CanInt() && !target.OverflowInt(v.Int()):
		return v.Convert(t), true
	case target.CanUint() && v.CanInt() && v.Int() >= 0 && !target.OverflowUint(uint64(v.Int())):
		return v.Convert(t), true
	case target.CanInt() && v.CanUint() && v.Uint() <= math.MaxInt64 && !target.OverflowInt(int64(v.Uint())):
		return v.Convert(t), true
	}
	return v, false
}

func describe(a any) string {
	if a == nil {
		return "nothing"
	}
	return describeType(reflect.TypeOf(a))
}

// describeType names a kind of value as an author of templates knows it.
func describeType(t reflect.Type) string {
	switch t {
	case reflect.TypeFor[Number]():
		return "a number"
	case reflect.TypeFor[Truth]():
		return "a truth"
	case reflect.TypeFor[Text](), reflect.TypeFor[[]doc.Block]():
		return "a block"
	case reflect.TypeFor[doc.Inline](), reflect.TypeFor[[]doc.Inline]():
		return "a text"
	}
	switch t.Kind() {
	case reflect.String:
		return "a text"
	case reflect.Bool:
		return "a truth"
	case reflect.Float32, reflect.Float64:
		return "a number"
	case reflect.Slice, reflect.Array:
		return "a list"
	case reflect.Map:
		return "a set of keys"
	case reflect.Struct:
		return "a record"
	case reflect.Pointer:
		return describeType(t.Elem())
	case reflect.Interface:
		return "a value"
	}
	if reflect.New(t).Elem().CanInt() || reflect.New(t).Elem().CanUint() {
		return "a whole number"
	}
	return "a value of another kind"
}

// ownFuncs are the functions that every template has. They stand in for those of
// text/template, whose cost is not bounded (print) or which compare only equal types.
var ownFuncs = map[string]any{
	"not":     not,
	"eq":      equalsAny,
	"ne":      func(a, b any) (Truth, error) { return ordered(a, b, "≠", func(c int) bool { return c != 0 }) },
	"lt":      func(a, b any) (Truth, error) { return ordered(a, b, "<", func(c int) bool { return c < 0 }) },
	"le":      func(a, b any) (Truth, error) { return ordered(a, b, "≤", func(c int) bool { return c <= 0 }) },
	"gt":      func(a, b any) (Truth, error) { return ordered(a, b, ">", func(c int) bool { return c > 0 }) },
	"ge":      func(a, b any) (Truth, error) { return ordered(a, b, "≥", func(c int) bool { return c >= 0 }) },
	"between": between,
	"number":  func(n Number) string { return n.Bare },
	"len":     length,
	"index":   index,
	"print":   printText,
}

func truth(a any) bool {
	t, _ := template.IsTrue(a)
	return t
}

func not(a any) Truth {
	t, ok := a.(Truth)
	switch {
	case !ok:
		return NewTruth(!truth(a), "")
	case t.Open():
		return t
	}
	return NewTruth(!t.Holds(), t.Why())
}

func equalsAny(a any, others ...any) (Truth, error) {
	if len(others) == 0 {
		return nil, errors.New("eq takes at least two values")
	}
	var said Truth
	for _, b := range others {
		t, err := ordered(a, b, "=", func(c int) bool { return c == 0 })
		if err != nil || t.Holds() {
			return t, err
		}
		said = t
	}
	return said, nil
}

// between tells whether a lies from low to high, both included.
func between(a, low, high any) (Truth, error) {
	t, err := ordered(a, low, "≥", func(c int) bool { return c >= 0 })
	if err != nil || !t.Holds() {
		return t, err
	}
	return ordered(a, high, "≤", func(c int) bool { return c <= 0 })
}

// ordered compares two values and says how it came out.
func ordered(a, b any, sign string, holds func(order int) bool) (Truth, error) {
	x, isX := a.(Number)
	y, isY := b.(Number)
	switch {
	case isX && math.IsNaN(x.X):
		return openTruth(saidOf(a) + " is not there yet"), nil
	case isY && math.IsNaN(y.X):
		return openTruth(saidOf(b) + " is not there yet"), nil
	case isX && isY && x.Unit != y.Unit:
		return nil, &Fault{Code: CodeWrongValue, Message: fmt.Sprintf("%s and %s have different units", saidOf(a), saidOf(b)), Hint: "compare values of one unit"}
	}
	va, vb := indirect(reflect.ValueOf(a)), indirect(reflect.ValueOf(b))
	ta, boolA := verdict(a, va)
	tb, boolB := verdict(b, vb)
	if sign == "=" || sign == "≠" {
		unequal := -1
		switch {
		case !va.IsValid() || !vb.IsValid():
			if va.IsValid() == vb.IsValid() {
				unequal = 0
			}
			return NewTruth(holds(unequal), ""), nil
		case boolA && boolB:
			if ta == tb {
				unequal = 0
			}
			return NewTruth(holds(unequal), ""), nil
		}
	}
	c, err := compare(va, vb)
	if err != nil {
		return nil, err
	}
	right := saidOf(b)
	if isY && y.What != "" {
		right = y.What + ", " + doc.Plain(y.Text)
	}
	left := saidOf(a)
	if isX && x.What != "" {
		left = x.What + " is " + doc.Plain(x.Text)
	}
	why := left + ", not " + sign + " " + right
	if holds(c) {
		why = left + " (" + sign + " " + right + ")"
	}
	if fy, ok := number(vb); ok && isX && x.X != fy && rounded(fy, x.Bare) == x.Bare {
		why += fmt.Sprintf(" (%.6g against %.6g)", x.X, fy)
	}
	return NewTruth(holds(c), why), nil
}

// rounded is a number with as many decimals as digits that are already rounded.
func rounded(x float64, like string) string {
	_, decimals, _ := strings.Cut(like, ".")
	return strings.Replace(strconv.FormatFloat(x, 'f', len(decimals), 64), "-", "\u2212", 1)
}

// verdict reads a value that is true or false.
func verdict(a any, v reflect.Value) (holds, ok bool) {
	if t, ok := a.(Truth); ok {
		return t.Holds(), true
	}
	if v.IsValid() && v.Kind() == reflect.Bool {
		return v.Bool(), true
	}
	return false, false
}

// saidOf puts a value that is compared into words.
func saidOf(a any) string {
	const longest = 80
	if n, ok := a.(Number); ok {
		if n.What != "" && math.IsNaN(n.X) {
			return n.What
		}
		return doc.Plain(n.Text)
	}
	v := indirect(reflect.ValueOf(a))
	switch {
	case !v.IsValid():
		return "nothing"
	case v.Kind() == reflect.String && v.Len() <= longest:
		return strconv.Quote(v.String())
	case v.Kind() == reflect.String:
		return "a text"
	case v.CanInt():
		return wholeNumber(v.Int())
	case v.CanUint():
		return strconv.FormatUint(v.Uint(), 10)
	case v.CanFloat():
		return strings.Replace(strconv.FormatFloat(v.Float(), 'g', -1, 64), "-", "\u2212", 1)
	}
	return describe(a)
}

// compare orders two texts or two numbers.
func compare(va, vb reflect.Value) (int, error) {
	if va.Kind() == reflect.String && vb.Kind() == reflect.String {
		return strings.Compare(va.String(), vb.String()), nil
	}
	if va.CanInt() && vb.CanInt() {
		x, y := va.Int(), vb.Int()
		switch {
		case x < y:
			return -1, nil
		case x > y:
			return 1, nil
		}
		return 0, nil
	}
	x, okx := number(va)
	y, oky := number(vb)
	if !okx || !oky {
		return 0, fmt.Errorf("%s cannot be compared with %s", kindOf(va), kindOf(vb))
	}
	switch {
	case math.IsNaN(x) || math.IsNaN(y):
		return 0, errors.New("a value that is not a number cannot be compared")
	case x < y:
		return -1, nil
	case x > y:
		return 1, nil
	}
	return 0, nil
}

func kindOf(v reflect.Value) string {
	if !v.IsValid() {
		return "nothing"
	}
	return describeType(v.Type())
}

func number(v reflect.Value) (float64, bool) {
	switch {
	case !v.IsValid():
		return 0, false
	case v.Type() == reflect.TypeFor[Number]():
		return v.FieldByName("X").Float(), true
	case v.CanInt():
		return float64(v.Int()), true
	case v.CanUint():
		return float64(v.Uint()), true
	case v.CanFloat():
		return v.Float(), true
	}
	return 0, false
}

func length(a any) (int, error) {
	if describe(a) == "a truth" {
		return 0, errors.New("a truth has no length")
	}
	v := indirect(reflect.ValueOf(a))
	switch v.Kind() {
	case reflect.String:
		return utf8.RuneCountInString(v.String()), nil
	case reflect.Slice, reflect.Array, reflect.Map:
		return v.Len(), nil
	case reflect.Invalid:
		return 0, nil
	}
	return 0, fmt.Errorf("%s has no length", describe(a))
}

func index(a any, keys ...any) (any, error) {
	v := reflect.ValueOf(a)
	for _, key := range keys {
		v = indirect(v)
		switch v.Kind() {
		case reflect.Slice, reflect.Array:
			k := reflect.ValueOf(key)
			if !k.IsValid() || !k.CanInt() {
				return nil, fmt.Errorf("the place in a list must be a whole number, not %s", describe(key))
			}
			if i := k.Int(); i < 0 || i >= int64(v.Len()) {
				return nil, fmt.Errorf("there is no place %d in a list of %d; the first is 0", i, v.Len())
			}
			v = v.Index(int(k.Int()))
		case reflect.Map:
			k, ok := fit(key, v.Type().Key())
			if !ok || !k.Comparable() {
				return nil, fmt.Errorf("a key must be %s, not %s", describeType(v.Type().Key()), describe(key))
			}
			if v = v.MapIndex(k); !v.IsValid() {
				return nil, fmt.Errorf("there is no key %q", fmt.Sprint(key))
			}
		default:
			return nil, fmt.Errorf("%s has no index", describe(a))
		}
	}
	return plain(v), nil
}

// printText joins texts and whole numbers.
func printText(parts ...any) (string, error) {
	var b strings.Builder
	for _, p := range parts {
		if n, ok := p.(Number); ok {
			p = n.Bare
		}
		switch v := indirect(reflect.ValueOf(p)); {
		case v.Kind() == reflect.String:
			if b.Len()+v.Len() > maxPrint {
				return "", &Fault{Code: CodeTooMuch, Message: fmt.Sprintf("print makes more than %d bytes", maxPrint)}
			}
			b.WriteString(v.String())
		case v.CanInt():
			b.WriteString(strconv.FormatInt(v.Int(), 10))
		case v.CanUint():
			b.WriteString(strconv.FormatUint(v.Uint(), 10))
		default:
			return "", fmt.Errorf("print joins texts and whole numbers, not %s", describe(p))
		}
	}
	return b.String(), nil
}
