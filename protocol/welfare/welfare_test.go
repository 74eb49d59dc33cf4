package welfare

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"reflect"
	"slices"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"penwright/protocol"
	"penwright/protocol/layout"
)

const head = `protocol = 1
[trial]
code = "HM-26-003"
title = "A trial"
objective = "To look after animals."
`

// load reads a part of a protocol; what it lacks for a trial is of no matter here.
func load(t testing.TB, source string) *protocol.Protocol {
	t.Helper()
	if strings.Contains(source, "[trial]") {
		source = strings.Replace(source, "[trial]\n", strings.TrimPrefix(head, "protocol = 1\n"), 1)
	} else {
		source = strings.TrimPrefix(head, "protocol = 1\n") + source
	}
	p, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte("protocol = 1\n" + source)}}, "protocol.toml")
	if p == nil {
		t.Fatal(list)
	}
	return p
}

func (f Finding) String() string {
	s := fmt.Sprintf("%-7s %s | %s | %s | %s", f.Level, f.Code, f.About, f.Stated, f.Text)
	for _, q := range f.Limits {
		s += fmt.Sprintf("\n          %-5v %-5v %s  ← %s [%s]", q.Applied, q.Met, q.Stated, q.Words(), q.Where())
	}
	return s
}

func dump(found []Finding) string {
	var b strings.Builder
	for _, f := range found {
		fmt.Fprintln(&b, f)
	}
	return b.String()
}

// of picks the findings of a code.
func of(found []Finding, code string) []Finding {
	return slices.DeleteFunc(slices.Clone(found), func(f Finding) bool { return f.Code != code })
}

// The built-in trial keeps to the limits: pigs of 77 kg on 0.9 m² in commercial
// conditions, where Directive 2008/120/EC asks for 0.55 m².
func TestDemo(t *testing.T) {
	p, list := protocol.Load(os.DirFS("../../templates/demo"), "protocol.toml")
	if list.HasErrors() {
		t.Fatal(list)
	}
	plan, _ := layout.New(p)
	found := Check(p, plan)
	t.Log("\n" + dump(found))
	for _, f := range found {
		if f.Level == Warning {
			t.Errorf("warning: %s", f)
		}
	}
	space := of(found, Space)
	if len(space) != 1 || space[0].Level != Pass {
		t.Fatalf("space: %v", space)
	}
	applied := slices.DeleteFunc(slices.Clone(space[0].Limits), func(q Quoted) bool { return !q.Applied })
	if len(applied) != 1 || applied[0].Printed != "0.55" || applied[0].Source != "120" {
		t.Errorf("applied: %v", applied)
	}
	if !slices.ContainsFunc(space[0].Limits, func(q Quoted) bool { return q.Printed == "1.00" && q.Source == "ES" && !q.Met && !q.Applied }) {
		t.Error("the laboratory table is not shown beside")
	}
}

// The example in the comment of every code brings the code about, and the list of codes
// says what the comments say.
func TestExamplesOfCodes(t *testing.T) {
	file, err := parser.ParseFile(token.NewFileSet(), "codes.go", nil, parser.ParseComments)
	if err != nil {
		t.Fatal(err)
	}
	infos, n := Codes(), 0
	for _, decl := range file.Decls {
		g, ok := decl.(*ast.GenDecl)
		if !ok || g.Tok != token.CONST {
			continue
		}
		for _, spec := range g.Specs {
			v := spec.(*ast.ValueSpec)
			name, code := v.Names[0].Name, strings.Trim(v.Values[0].(*ast.BasicLit).Value, `"`)
			if n >= len(infos) || infos[n].Code != code {
				t.Fatalf("%s is not number %d of the list of codes", name, n)
			}
			first, example, ok := strings.Cut(v.Doc.Text(), "\n\nExample:\n\n")
			if want := name + ": " + infos[n].Text + "."; !ok || strings.ReplaceAll(first, "\n", " ") != want {
				t.Errorf("the comment of %s is %q, want %q and an example", name, first, want)
			}
			n++
			p := load(t, strings.ReplaceAll("\n"+example, "\n\t", "\n"))
			found := Check(p, nil)
			if len(of(found, code)) == 0 {
				t.Errorf("the example of %s gives\n%s", name, dump(found))
			}
			wellFormed(t, p, found)
		}
	}
	if n != len(infos) {
		t.Errorf("%d codes are described, %d exist", len(infos), n)
	}
}

// wellFormed checks what holds for all findings.
func wellFormed(t testing.TB, p *protocol.Protocol, found []Finding) {
	t.Helper()
	for _, f := range found {
		if f.Code == "" || f.About == "" || f.Key == "" || f.Text == "" || strings.HasSuffix(f.Text, ".") || strings.HasSuffix(f.Hint, ".") || strings.Contains(f.Text, "NaN") || strings.Contains(f.Text, "Inf") {
			t.Errorf("not well formed: %s, key %q, hint %q", f, f.Key, f.Hint)
		}
		for _, q := range f.Limits {
			if q.Reading != Confirmed && q.Reading != SecondHand {
				t.Errorf("%s rests on what was not read", f)
			}
			if q.Applied && q.Stated == "" {
				t.Errorf("%s applies a limit without comparing it", f)
			}
		}
	}
	list := Diagnostics(p, found)
	if list.HasErrors() {
		t.Error("the program forbids something")
	}
	for _, d := range list {
		if !strings.HasSuffix(d.Hint, Deference) || d.Pos.File == "" || strings.Contains(d.Message+d.Hint, thin) {
			t.Errorf("diagnostic %+v", d)
		}
	}
}

// Every row says where it comes from.
func TestRows(t *testing.T) {
	cited := func(what string, c Citation) {
		if c.Source == "" || c.Jurisdiction == "" || c.Clause == "" {
			t.Errorf("%s: %+v has no source, jurisdiction or clause", what, c)
		}
		if _, err := time.Parse(time.DateOnly, c.Seen); err != nil {
			t.Errorf("%s: %v", what, err)
		}
		if s := SourceOf(c); s.Title == c.Source || s.Address == "" || s.Read == "" {
			t.Errorf("%s: source %+v", what, s)
		}
		if r := c.Reading.String(); r != "C" && r != "C2" {
			t.Errorf("%s: reading %s", what, r)
		}
	}
	limits := Limits()
	if len(limits) < 500 {
		t.Errorf("only %d limits", len(limits))
	}
	names := map[string]bool{"any": true}
	for _, a := range loaded().species {
		names[a.name] = true
		for _, g := range a.groups {
			names[g] = true
		}
	}
	seen := map[string]bool{}
	for _, l := range limits {
		cited(l.Topic+" "+l.Species, l.Citation)
		for _, s := range strings.Split(l.Species, "|") {
			if !names[s] {
				t.Errorf("no species %q", s)
			}
		}
		key := fmt.Sprint(l.Topic, l.Aim, l.Species, l.Class, l.Quantity, l.Unit, l.Source, l.most, l.band.text, l.animals.text, l.Clause, l.Note)
		if seen[key] {
			t.Errorf("twice: %s", key)
		}
		seen[key] = true
		if _, ok := units[l.band.unit]; l.band.unit != "" && !ok && !l.shown {
			t.Errorf("%s %s is compared by a band in %q", l.Species, l.Quantity, l.band.unit)
		}
	}
	for _, r := range Rules() {
		cited(r.ID, r.Citation)
		if r.Text == "" || strings.HasSuffix(r.Text, ".") {
			t.Errorf("rule %s: %q", r.ID, r.Text)
		}
	}
	for _, r := range loaded().recalled {
		if r.Topic == "" || r.What == "" || r.Document == "" || r.Jurisdiction == "" || r.Reason == "" || r.Recorded == "" {
			t.Errorf("recalled: %+v", r)
		}
	}
	for _, s := range loaded().sources {
		used := slices.ContainsFunc(limits, func(l Limit) bool { return l.Source == s.Key }) || slices.ContainsFunc(loaded().rules, func(r Rule) bool { return r.Source == s.Key })
		if !used {
			t.Errorf("source %s is not used", s.Key)
		}
	}
}

// Bands of one table and source leave no gap and do not overlap, so that every mass has
// one row.
func TestBands(t *testing.T) {
	tables := map[string][]band{}
	var order []string
	for _, l := range Limits() {
		if l.Topic != "space" || l.band.text == "" || l.shown {
			continue
		}
		key := strings.Join([]string{l.Aim, l.Species, l.Class, l.Quantity, l.Source, l.animals.text, l.band.unit}, "/")
		if tables[key] == nil {
			order = append(order, key)
		}
		tables[key] = append(tables[key], l.band)
	}
	for _, key := range order {
		bs := tables[key]
		if len(bs) == 1 {
			continue // a single exception
		}
		for i, b := range bs {
			if b.bounded[0] != (i > 0) || b.bounded[1] != (i < len(bs)-1) {
				// The floors of guinea pigs and rats change their enclosure half way.
				t.Errorf("%s: band %q stands at %d of %d", key, b.text, i, len(bs))
			}
			if i > 0 && (bs[i-1].high != b.low || bs[i-1].openHigh == b.openLow) {
				t.Errorf("%s: gap or overlap at %q", key, b.text)
			}
		}
	}
}

// Recalled holds no number and has no method, so that nothing can be compared with it;
// a limit cannot be marked M.
func TestRecalledReachesNoComparison(t *testing.T) {
	r := reflect.TypeFor[Recalled]()
	for i := range r.NumField() {
		if r.Field(i).Type.Kind() != reflect.String {
			t.Errorf("Recalled.%s is a %s", r.Field(i).Name, r.Field(i).Type)
		}
	}
	if r.NumMethod() != 0 || reflect.PointerTo(r).NumMethod() != 0 || r.ConvertibleTo(reflect.TypeFor[Limit]()) {
		t.Error("Recalled can do something")
	}
	for _, x := range loaded().recalled {
		if strings.ContainsAny(x.What, "0123456789") && !strings.Contains(x.What, "28 days") && !strings.Contains(x.What, "3.6") {
			t.Errorf("a number from memory: %s", x.What)
		}
	}
	defer func() {
		if recover() == nil {
			t.Error("a limit may be marked M")
		}
	}()
	citation("ES", "EU", "T1.1", "2026-12-01", "M")
}
