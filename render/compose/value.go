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
)

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
	"not":   func(a any) bool { return !truth(a) },
	"eq":    equalsAny,
	"ne":    func(a, b any) (bool, error) { c, err := equal(a, b); return !c, err },
	"lt":    func(a, b any) (bool, error) { c, err := compare(a, b); return c < 0, err },
	"le":    func(a, b any) (bool, error) { c, err := compare(a, b); return c <= 0, err },
	"gt":    func(a, b any) (bool, error) { c, err := compare(a, b); return c > 0, err },
	"ge":    func(a, b any) (bool, error) { c, err := compare(a, b); return c >= 0, err },
	"len":   length,
	"index": index,
	"print": printText,
}

func truth(a any) bool {
	t, _ := template.IsTrue(a)
	return t
}

func equalsAny(a any, others ...any) (bool, error) {
	if len(others) == 0 {
		return false, errors.New("eq takes at least two values")
	}
	for _, b := range others {
		if same, err := equal(a, b); same || err != nil {
			return same, err
		}
	}
	return false, nil
}

func equal(a, b any) (bool, error) {
	va, vb := indirect(reflect.ValueOf(a)), indirect(reflect.ValueOf(b))
	switch {
	case !va.IsValid() || !vb.IsValid():
		return va.IsValid() == vb.IsValid(), nil
	case va.Kind() == reflect.Bool && vb.Kind() == reflect.Bool:
		return va.Bool() == vb.Bool(), nil
	}
	c, err := compare(a, b)
	return c == 0, err
}

// compare orders two texts or two numbers. What is not a number is unequal to all.
func compare(a, b any) (int, error) {
	va, vb := indirect(reflect.ValueOf(a)), indirect(reflect.ValueOf(b))
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
		return 0, fmt.Errorf("%s cannot be compared with %s", describe(a), describe(b))
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

func number(v reflect.Value) (float64, bool) {
	switch {
	case !v.IsValid():
		return 0, false
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
