package compose

import (
	"errors"
	"fmt"
	"io"
	"reflect"
	"slices"
	"sort"
	"strconv"
	"strings"
	"text/template"

	"penwright/protocol/diag"
	"penwright/render/doc"
)

// Tokens are the characters of the two private-use planes: one for each value.
const (
	firstToken = 0xf0000
	lastToken  = 0x10fffd
)

const (
	nodeSteps   = 5  // of a node run
	callSteps   = 20 // of a function called
	givenSteps  = 80 // more, of one that was handed in
	maxMessages = 100
	maxReasons  = 8        // told of an and or an or
	maxPrint    = 64 << 10 // bytes that one print makes
)

// value is what an action gave, with its place. One of inline and blocks is set, or
// neither when the value is empty.
type value struct {
	pos    diag.Pos
	inline []doc.Inline
	blocks []doc.Block
	notes  [][]doc.Block
	block  bool // blocks, perhaps none
}

// failure stands for the value of what has failed and been reported. It is nil, so that
// it is false where a condition is wanted.
type failure struct{}

var failed = (*failure)(nil)

// stop is the error that ends a run; what it stands for has been reported.
var errStop = errors.New("stop")

// mark says where a stretch of the output comes from.
type mark struct {
	out  int
	site *site
}

// runner runs a program and keeps what it says.
type runner struct {
	*program
	limits  Limits
	list    diag.List
	stopped bool
	out     strings.Builder
	marks   []mark
	values  []value
	depth   int
	trail   []string // what was compared within and and or
	begun   []int    // where they began in it
	fault   any      // what a function of ours panicked with
}

// execute runs a template.
func (r *runner) execute(main string, data any) {
	t := template.New(main).Funcs(template.FuncMap{
		stepName:  r.step,
		textName:  r.text,
		tokenName: r.token,
		callName:  r.call,
		fieldName: r.field,
		enterName: r.enter,
		leaveName: r.leave,
		beginName: r.begin,
		joinName:  r.join,
	})
	for _, name := range r.order {
		if _, err := t.AddParseTree(name, r.trees[name]); err != nil {
			panic("compose: template not added")
		}
	}
	err := t.Execute(io.Discard, data)
	if r.fault != nil {
		panic(r.fault)
	}
	if err != nil && !errors.Is(err, errStop) {
		r.report(r.executionError(err))
		r.stopped = true
	}
}

// executionError makes a diagnostic of an error that text/template found by itself.
func (r *runner) executionError(err error) diag.Diagnostic {
	d := diag.Diagnostic{Severity: diag.Error, Code: CodeWrongValue, Message: strings.TrimPrefix(err.Error(), "template: ")}
	for _, name := range sortedKeys(r.files) {
		rest, ok := strings.CutPrefix(err.Error(), "template: "+name+":")
		if !ok {
			continue
		}
		parts := strings.SplitN(rest, ":", 3)
		if len(parts) != 3 {
			continue
		}
		line, err1 := strconv.Atoi(parts[0])
		col, err2 := strconv.Atoi(parts[1])
		if err1 != nil || err2 != nil {
			continue
		}
		d.Pos = diag.Pos{File: r.files[name].name, Line: line, Col: col + 1} // text/template counts columns from 0
		d.Message = parts[2]
		if i := strings.LastIndex(d.Message, ">: "); i >= 0 {
			d.Message = d.Message[i+len(">: "):]
		}
	}
	return d
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}

// report adds a diagnostic unless the same was said before, as inside a range.
func (r *runner) report(d diag.Diagnostic) {
	for _, old := range r.list {
		if old.Pos == d.Pos && old.Message == d.Message {
			return
		}
	}
	r.list.Add(d)
}

// refuse reports a fault at a site and goes on with no value.
func (r *runner) refuse(n int, code, message, hint string) (any, error) {
	r.report(diag.Diagnostic{Pos: r.sites[n].pos(), Severity: diag.Error, Code: code, Message: message, Hint: hint})
	if len(r.list) >= maxMessages {
		r.stopped = true
		return nil, errStop
	}
	return failed, nil
}

// exceed reports that a bound is passed and stops.
func (r *runner) exceed(n int, format string, args ...any) error {
	r.report(diag.Diagnostic{Pos: r.sites[n].pos(), Severity: diag.Error, Code: CodeTooMuch, Message: fmt.Sprintf(format, args...)})
	r.stopped = true
	return errStop
}

func (r *runner) spend(n, steps int) error {
	if r.limits.Spent.steps += steps; r.limits.Spent.steps > r.limits.Steps {
		return r.exceed(n, "the template takes more than %d steps", r.limits.Steps)
	}
	return nil
}

func (r *runner) step(n int) (string, error) { return "", r.spend(n, nodeSteps+r.sites[n].weight) }

func (r *runner) enter(n int) (string, error) {
	if r.depth++; r.depth > r.limits.Depth {
		return "", r.exceed(n, "templates call each other more than %d deep", r.limits.Depth)
	}
	return "", nil
}

func (r *runner) leave(int) string {
	r.depth--
	return ""
}

// begin and join stand around what and and or evaluate, and give their outcome the reasons
// of all that decided it.
func (r *runner) begin(int) bool {
	r.begun = append(r.begun, len(r.trail))
	return true
}

func (r *runner) join(n int, _ bool, x any) any {
	last := len(r.begun) - 1
	whys := r.trail[r.begun[last]:]
	r.trail, r.begun = r.trail[:r.begun[last]], r.begun[:last]
	t, ok := x.(Truth)
	if !ok || t.Open() {
		return x
	}
	if t.Holds() == (r.sites[n].name == "and") && len(whys) > 1 {
		var once []string
		for _, w := range whys {
			if !slices.Contains(once, w) && len(once) < maxReasons {
				once = append(once, w)
			}
		}
		t = NewTruth(t.Holds(), strings.Join(once, "; "))
	}
	if last > 0 && t.Why() != "" {
		r.trail = append(r.trail, t.Why())
	}
	return t
}

func (r *runner) text(n int) (string, error) { return "", r.write(n, r.sites[n].text) }

func (r *runner) write(n int, s string) error {
	if r.limits.Spent.output += len(s); r.limits.Spent.output > r.limits.Output {
		return r.exceed(n, "the template makes more than %d bytes of text", r.limits.Output)
	}
	r.marks = append(r.marks, mark{out: r.out.Len(), site: &r.sites[n]})
	r.out.WriteString(s)
	return r.spend(n, nodeSteps+len(s)/64)
}

// place maps an offset in the output back to a template.
func (r *runner) place(offset int) diag.Pos {
	i := sort.Search(len(r.marks), func(i int) bool { return r.marks[i].out > offset }) - 1
	if i < 0 {
		return diag.Pos{}
	}
	m := r.marks[i]
	// A token stands for the whole of its action.
	return m.site.file.pos(m.site.offset + min(offset-m.out, len(m.site.text)))
}

// token puts the value of an action aside.
func (r *runner) token(n int, x any) (any, error) {
	v := value{pos: r.sites[n].pos()}
	bytes := 0
	switch x := x.(type) {
	case *failure:
		return "", nil
	case nil:
		return r.refuse(n, CodeWrongValue, "there is no value to print", "test it with {{if}} or {{with}} before")
	case string:
		v.inline = []doc.Inline{doc.Text{Text: x}}
		bytes = len(x)
	case doc.Inline:
		v.inline = []doc.Inline{x}
	case []doc.Inline:
		v.inline = x
	case doc.Block:
		v.blocks, v.block = []doc.Block{x}, true
	case []doc.Block:
		v.blocks, v.block = x, true
	case Number:
		v.inline = x.Text
	case Truth:
		return r.refuse(n, CodeWrongValue, "a truth cannot be printed", "use it in {{if}} or in a claim")
	case Text:
		v.blocks, v.notes, v.block = x.Blocks, x.Notes, true
	default:
		switch rv := reflect.ValueOf(x); {
		case rv.CanInt():
			v.inline = []doc.Inline{doc.Text{Text: wholeNumber(rv.Int())}}
		case rv.CanUint():
			v.inline = []doc.Inline{doc.Text{Text: strconv.FormatUint(rv.Uint(), 10)}}
		case rv.Kind() == reflect.String:
			v.inline = []doc.Inline{doc.Text{Text: rv.String()}}
			bytes = rv.Len()
		case rv.CanFloat():
			return r.refuse(n, CodeWrongValue, "a number with decimals cannot be printed as it is", "use a function that rounds it")
		default:
			return r.refuse(n, CodeWrongValue, describe(x)+" cannot be printed", "print one of its parts, or use a function")
		}
	}
	if len(r.values) > lastToken-firstToken {
		return nil, r.exceed(n, "the template prints more than %d values", lastToken-firstToken+1)
	}
	if v.block {
		bytes = doc.Size(v.blocks)
		for _, note := range v.notes {
			bytes += doc.Size(note)
		}
	} else if bytes == 0 {
		bytes = doc.Size([]doc.Block{doc.Paragraph{Text: v.inline}})
	}
	if r.limits.Spent.values += bytes; r.limits.Spent.values > r.limits.Values {
		return nil, r.exceed(n, "the values that the template prints take more than %d bytes", r.limits.Values)
	}
	if message := v.settle(); message != "" {
		return r.refuse(n, CodeWrongValue, message, "")
	}
	r.values = append(r.values, v)
	return "", r.write(n, string(rune(firstToken+len(r.values)-1)))
}

func wholeNumber(n int64) string {
	return strings.Replace(strconv.FormatInt(n, 10), "-", "\u2212", 1)
}

// settle gives the parts of a value the place of their action, unless they know their
// own, and says what is wrong with it.
func (v *value) settle() string {
	calls := 0
	m := doc.Mapper{
		Block: func(b doc.Block) doc.Block {
			switch b := b.(type) {
			case doc.Heading:
				placed(&b.Pos, v.pos)
				return b
			case doc.Paragraph:
				placed(&b.Pos, v.pos)
				return b
			case doc.Table:
				placed(&b.Pos, v.pos)
				return b
			case doc.Figure:
				placed(&b.Pos, v.pos)
				return b
			}
			return b
		},
		Inline: func(in doc.Inline) doc.Inline {
			switch in := in.(type) {
			case doc.Ref:
				placed(&in.Pos, v.pos)
				return in
			case doc.FootnoteRef:
				if in.N < 1 || in.N > len(v.notes) {
					calls++
				}
			}
			return in
		},
	}
	v.inline = m.Inlines(v.inline)
	v.blocks = m.Blocks(v.blocks)
	notes := make([][]doc.Block, len(v.notes))
	for i, note := range v.notes {
		notes[i] = m.Blocks(note)
	}
	v.notes = notes
	if calls > 0 {
		return "the value calls a footnote that it does not bring"
	}
	return ""
}

func placed(pos *diag.Pos, at diag.Pos) {
	if *pos == (diag.Pos{}) {
		*pos = at
	}
}

// call calls a function by its name in the template.
func (r *runner) call(n int, args ...any) (any, error) {
	s := r.sites[n]
	if err := r.spend(n, callSteps); err != nil {
		return nil, err
	}
	for _, a := range args {
		if a == any(failed) {
			return failed, nil
		}
		if text, ok := a.(string); ok {
			if err := r.spend(n, len(text)/64); err != nil {
				return nil, err
			}
		}
	}
	if _, own := ownFuncs[s.name]; !own {
		if err := r.spend(n, givenSteps); err != nil {
			return nil, err
		}
	}
	f := r.funcs[s.name]
	in, message := arguments(f.Type(), s, args)
	if message != "" {
		return r.refuse(n, CodeWrongValue, message, "")
	}
	out, err := r.invoke(f, in)
	if err != nil {
		d := diag.Diagnostic{Code: CodeFunction, Message: err.Error()}
		if fault, ok := errors.AsType[*Fault](err); ok {
			d = diag.Diagnostic{Code: fault.Code, Message: fault.Message, Hint: fault.Hint, Related: fault.Related}
		}
		d.Pos, d.Severity = s.pos(), diag.Error
		r.report(d)
		if len(r.list) >= maxMessages {
			r.stopped = true
			return nil, errStop
		}
		return failed, nil
	}
	if t, ok := out.(Truth); ok && len(r.begun) > 0 && t.Why() != "" {
		r.trail = append(r.trail, t.Why())
	}
	// Also what is never printed takes time to make.
	return out, r.spend(n, sizeOf(out)/64)
}

// sizeOf counts what a function gave as doc.Size does.
func sizeOf(x any) int {
	switch x := x.(type) {
	case string:
		return len(x)
	case []doc.Inline:
		return doc.Size([]doc.Block{doc.Paragraph{Text: x}})
	case doc.Block:
		return doc.Size([]doc.Block{x})
	case []doc.Block:
		return doc.Size(x)
	case Text:
		size := doc.Size(x.Blocks)
		for _, note := range x.Notes {
			size += doc.Size(note)
		}
		return size
	}
	return 0
}

// invoke calls f. A panic in it is a fault of the program: text/template would make it
// an error of the template, so it is kept and raised again after the run.
func (r *runner) invoke(f reflect.Value, in []reflect.Value) (result any, err error) {
	defer func() {
		if fault := recover(); fault != nil {
			r.fault = fault
			err = errStop
		}
	}()
	out := f.Call(in)
	if len(out) == 2 && !out[1].IsNil() {
		return nil, out[1].Interface().(error)
	}
	return out[0].Interface(), nil
}
