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
		used := slices.ContainsFunc(limits, func(l Limit) bool { return l.Source == s.Key }) || slices.ContainsFunc(loaded().rules, func(r Rule) bool { return r.Source == s.Key }) ||
			slices.ContainsFunc(loaded().asked, func(x asked) bool { return x.Source == s.Key })
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

// Rows as the checked list of values has them. [ES] is Real Decreto 53/2013, which keeps
// the table numbers of Directive 2010/63/EU; the others are named in sources.csv.
func TestValues(t *testing.T) {
	for _, x := range []struct{ species, class, quantity, band, printed, unit, source, clause, status string }{
		{"mouse", "", "floor per animal", "<=20 g", "60", "cm2", "ES", "Annex III T1.1", "C"},
		{"mouse", "", "floor per animal", ">30 g", "100", "cm2", "ES", "Annex III T1.1", "C"},
		{"mouse", "", "enclosure", ">30 g", "330", "cm2", "ES", "Annex III T1.1", "C"},
		{"mouse", "", "floor per animal", ">15 <=25 g", "77.4", "cm2", "NAP", "Table 3.2", "C"},
		{"rat", "", "floor per animal", ">400 <=600 g", "450", "cm2", "ES", "Annex III T1.2", "C"},
		{"rat", "", "enclosure", ">600 g", "1500", "cm2", "ES", "Annex III T1.2", "C"},
		{"rat", "", "floor per animal", ">=100 <=200 g", "148.35", "cm2", "NAP", "Table 3.2", "C"},
		{"gerbil", "", "floor per animal", ">40 g", "250", "cm2", "ES", "Annex III T1.3", "C"},
		{"hamster", "", "floor per animal", ">60 <=100 g", "200", "cm2", "ES", "Annex III T1.4", "C"},
		{"guinea pig", "", "floor per animal", ">450 <=700 g", "700", "cm2", "ES", "Annex III T1.5", "C"},
		{"guinea pig", "", "enclosure", ">700 g", "2500", "cm2", "ES", "Annex III T1.5", "C"},
		{"guinea pig", "", "floor per animal", ">350 g", "651.5", "cm2", "NAP", "Table 3.2", "C"},
		{"rabbit", "rabbit over 10 wk", "area for a group", ">5 kg", "5400", "cm2", "ES", "Annex III T2.1", "C"},
		{"rabbit", "rabbit of 7 to 10 wk", "floor per animal", "", "1200", "cm2", "ES", "Annex III T2.3", "C"},
		{"rabbit", "", "floor per animal", ">4 <=5.4 kg", "3700", "cm2", "YU", "Table 3.3", "C2"},
		{"cattle", "", "floor per animal", ">600 <=800 kg", "8.75", "m2", "ES", "Annex III T7.1", "C"},
		{"cattle", "", "enclosure", ">800 kg", "16.00", "m2", "ES", "Annex III T7.1", "C"},
		{"cattle", "", "trough per animal, polled, fed restrictedly", ">400 <=600 kg", "0.70", "m", "ES", "Annex III T7.1", "C"},
		{"cattle", "calf", "floor per animal", ">=150 <220 kg", "1.7", "m2", "119", "art 3(1)b", "C"},
		{"cattle", "calf", "floor per animal", ">=200 kg", "3.0", "m2", "S43", "schedule 4", "C"},
		{"sheep", "", "floor per animal", ">35 <=60 kg", "1.5", "m2", "ES", "Annex III T7.2", "C"},
		{"pig", "", "floor per animal", ">70 <=100 kg", "1.00", "m2", "ES", "Annex III T7.3", "C"},
		{"pig", "", "floor per animal", ">150 kg", "2.50", "m2", "ES", "Annex III T7.3", "C"},
		{"pig", "", "lying area per animal, thermoneutral", ">50 <=70 kg", "0.41", "m2", "ES", "Annex III T7.3", "C"},
		{"pig", "adult boar", "enclosure", "", "7.5", "m2", "ES", "Annex III T7.3", "C"},
		{"pig", "", "floor per animal", ">50 <=85 kg", "0.55", "m2", "120", "art 3(1)a", "C"},
		{"pig", "sow", "floor per animal", "", "2.25", "m2", "120", "art 3(1)b, 3(2)a", "C"},
		{"fowl", "", "floor per animal", ">1800 <=2400 g", "0.13", "m2", "ES", "Annex III T8.1", "C"},
		{"fowl", "broiler", "live mass per area", "", "33", "kg/m2", "43", "art 3(2)–(5)", "C"},
		{"fowl", "laying hen on the floor", "animals per area", "", "9", "1/m2", "74", "art 4", "C"},
		{"fowl", "laying hen in a cage", "floor per animal", "", "750", "cm2", "74", "art 6", "C"},
		{"turkey", "", "floor per animal", ">8 <=12 kg", "0.50", "m2", "ES", "Annex III T8.2", "C"},
		{"quail", "", "area per further animal", ">150 g", "0.15", "m2", "ES", "Annex III T8.3", "C"},
		{"duck", "", "floor per animal", ">1200 <=3500 g", "0.25", "m2", "ES", "Annex III T8.4", "C"},
		{"goose", "", "floor per animal", ">2000 g", "0.50", "m2", "ES", "Annex III T8.4, 8.5", "C"},
		{"pigeon", "", "area per further animal", "", "0.15", "m2", "ES", "Annex III T8.6", "C"},
		{"zebrafish", "", "animals per volume", "", "10", "1/L", "ES", "Annex III B.11.6", "C"},
		{"horse", "", "circulating volume", "", "75", "mL/kg", "S60", "circulating volumes", "C"},
		{"mouse", "", "circulating volume", "", "72", "mL/kg", "ALT", "circulating volumes", "C2"},
		{"any", "", "blood drawn", "7 d", "7.5", "%", "BU", "table of NIH as printed there", "C2"},
		{"cattle", "", "blood drawn", "30 d", "20", "%", "RARC", "limits", "C"},
		{"mouse", "good practice", "intravenous", "", "5", "mL/kg", "DV", "table of dose volumes", "C2"},
		{"rat", "maximum", "oral", "", "40", "mL/kg", "DV", "table of dose volumes", "C2"},
		{"rabbit", "maximum", "intraperitoneal", "", "20", "mL/kg", "DV", "table of dose volumes", "C2"},
		{"pig", "good practice", "intramuscular", "", "0.25", "mL/kg", "DV", "table of dose volumes", "C2"},
		{"marmoset", "maximum", "intravenous", "", "10", "mL/kg", "DV", "table of dose volumes", "C2"},
		{"fowl", "broiler", "feed off before slaughter", "", "12", "h", "43", "Annex I 7", "C"},
		{"any", "", "feed off without a justification", "", "18", "h", "S47", "one institution’s policy", "C"},
		{"cattle", "calf", "looks at the animals", "", "2", "/d", "119", "Annex I 6", "C"},
		{"any", "tumour", "loss of mass with a tumour", "", "15", "%", "WIS", "limits", "C"},
		{"fish", "", "fish and other aquatic animals: not authorised for that food use", "", "500", "degree-days", "R6", "art 115(1)", "C"},
		{"eggs", "", "eggs: not authorised for that food use", "", "10", "d", "R6", "art 115(1)", "C"},
	} {
		found := slices.ContainsFunc(Limits(), func(l Limit) bool {
			return slices.Contains(strings.Split(l.Species, "|"), x.species) && l.Class == x.class && l.Quantity == x.quantity && l.band.text == x.band && l.Printed == x.printed &&
				l.Unit == x.unit && l.Source == x.source && l.Clause == x.clause && l.Reading.String() == x.status
		})
		if !found {
			t.Errorf("no row %+v", x)
		}
	}
}

// one gives the only finding of a code that is about something.
func one(t *testing.T, found []Finding, code, about string) Finding {
	t.Helper()
	var out []Finding
	for _, f := range found {
		if f.Code == code && (about == "" || f.About == about) {
			out = append(out, f)
		}
	}
	if len(out) != 1 {
		t.Fatalf("%d findings of %s about %q:\n%s", len(out), code, about, dump(found))
	}
	return out[0]
}

// Space: species, aim, final mass and group decide the row; where documents differ the
// stricter is applied.
func TestSpace(t *testing.T) {
	for _, x := range []struct {
		name, animals, housing, aim string
		about                       string
		level                       Level
		text                        string // of the finding
		applied                     string // source and printed number of the row
	}{
		{"pig on a farm", `species = "barrow"` + "\n" + `mass_end = { value = 77, unit = "kg" }`, `floor_area = { value = 0.54, unit = "m2" }`, commercial, "floor per animal", Warning, "less than 0.55", "120 0.55"},
		{"pig on a farm, at the limit in cm2", `species = "pigs"` + "\n" + `mass_end = { value = 77, unit = "kg" }`, `floor_area = { value = 5500, unit = "cm2" }`, commercial, "floor per animal", Pass, "5500", "120 0.55"},
		{"pig in a laboratory", `species = "swine"` + "\n" + `mass_end = { value = 77000, unit = "g" }`, `floor_area = { value = 0.9, unit = "m2" }`, "laboratory", "floor per animal", Warning, "less than 1", "ES 1.00"},
		{"no aim, the stricter", `species = "pig"` + "\n" + `mass_end = { value = 77, unit = "kg" }`, `floor_area = { value = 0.9, unit = "m2" }`, "", "floor per animal", Warning, "less than 1", "ES 1.00"},
		{"exactly 85 kg", `species = "pig"` + "\n" + `mass_end = { value = 85, unit = "kg" }`, `floor_area = { value = 0.55, unit = "m2" }`, commercial, "floor per animal", Pass, "0.55", "120 0.55"},
		{"over 85 kg", `species = "pig"` + "\n" + `mass_end = { value = 85.1, unit = "kg" }`, `floor_area = { value = 0.55, unit = "m2" }`, commercial, "floor per animal", Warning, "0.65", "120 0.65"},
		{"mouse of 25 g, Guide over Annex III", `species = "mice"` + "\n" + `mass_end = { value = 25, unit = "g" }`, `floor_area = { value = 75, unit = "cm2" }`, "laboratory", "floor per animal", Warning, "77.4", "NAP 77.4"},
		{"mouse of 26 g, Annex III and Guide", `species = "mouse"` + "\n" + `mass_end = { value = 26, unit = "g" }`, `floor_area = { value = 97, unit = "cm2" }`, "laboratory", "floor per animal", Pass, "96.7", "NAP 96.7"},
		{"sheep of 20 kg take the next row", `species = "lambs"` + "\n" + `mass_end = { value = 20, unit = "kg" }`, `floor_area = { value = 0.9, unit = "m2" }`, "laboratory", "floor per animal", Warning, "less than 1", "ES 1.0"},
		{"calf, Scotland over EU", `species = "calves"` + "\n" + `mass_end = { value = 205, unit = "kg" }`, `floor_area = { value = 1.8, unit = "m2" }`, commercial, "floor per animal", Warning, "less than 3", "S43 3.0"},
		{"young cattle are calves", `species = "cattle"` + "\n" + `age = { value = 8, unit = "wk" }` + "\n" + `mass_end = { value = 140, unit = "kg" }`, `floor_area = { value = 1.4, unit = "m2" }`, commercial, "floor per animal", Warning, "1.5", "119 1.5"},
		{"cows on a farm have no standard", `species = "dairy cows"` + "\n" + `mass = { value = 650, unit = "kg" }`, `floor_area = { value = 7, unit = "m2" }`, commercial, "floor per animal", Note, "only shown", "ES 8.75"},
		{"sows, small group", `species = "sows"` + "\n" + `mass = { value = 220, unit = "kg" }`, "group_size = 5\n" + `floor_area = { value = 2.4, unit = "m2" }`, commercial, "floor per animal", Warning, "2.48", "120 2.25"},
		{"sows, large group", `species = "sows"` + "\n" + `mass = { value = 220, unit = "kg" }`, "group_size = 40\n" + `floor_area = { value = 2.03, unit = "m2" }`, commercial, "floor per animal", Pass, "90 %", "120 2.25"},
		{"broilers by mass on the floor", `species = "broiler chickens"` + "\n" + `mass_end = { value = 2.4, unit = "kg" }`, `floor_area = { value = 0.07, unit = "m2" }`, commercial, "floor per animal", Warning, "0.0727", "43 33"},
		{"hens on the floor", `species = "laying hen"` + "\n" + `mass_end = { value = 1.9, unit = "kg" }`, `floor_area = { value = 0.1, unit = "m2" }`, commercial, "floor per animal", Warning, "0.111", "74 9"},
		{"hens in a cage", `species = "hens"` + "\n" + `mass_end = { value = 1.9, unit = "kg" }`, `bedding = "none: enriched cages"` + "\n" + `floor_area = { value = 760, unit = "cm2" }`, commercial, "floor per animal", Pass, "750", "74 750"},
		{"a small pen of pigs", `species = "pig"` + "\n" + `mass_end = { value = 40, unit = "kg" }`, "group_size = 2\n" + `floor_area = { value = 0.9, unit = "m2" }`, "laboratory", "floor of the group", Warning, "less than 2", "ES 2.0"},
		{"four rabbits: 4200 + 2 × 3000", `species = "rabbits"` + "\n" + `mass_end = { value = 4, unit = "kg" }`, "group_size = 4\n" + `floor_area = { value = 2500, unit = "cm2" }`, "laboratory", "floor of the group", Warning, "10200", ""},
		{"eight rabbits: 4200 + 4 × 3000 + 2 × 2500", `species = "rabbit"` + "\n" + `mass_end = { value = 4, unit = "kg" }`, "group_size = 8\n" + `floor_area = { value = 2650, unit = "cm2" }`, "laboratory", "floor of the group", Pass, "21200", ""},
		{"ten quail: 2 × 0.5 + 8 × 0.10", `species = "quail"` + "\n" + `mass_end = { value = 150, unit = "g" }`, "group_size = 10\n" + `floor_area = { value = 0.17, unit = "m2" }`, "laboratory", "floor of the group", Warning, "1.8", "ES 0.5"},
		{"fourteen pigeons: 3 + 2 × 0.15", `species = "pigeons"` + "\n" + `mass_end = { value = 400, unit = "g" }`, "group_size = 14\n" + `floor_area = { value = 0.2357, unit = "m2" }`, "laboratory", "floor of the group", Warning, "3.3", "ES 3"},
	} {
		t.Run(x.name, func(t *testing.T) {
			aim := ""
			if x.aim != "" {
				aim = "aim = \"" + x.aim + "\"\n"
			}
			p := load(t, "[animals]\n"+x.animals+"\n[housing]\n"+x.housing+"\n[welfare]\n"+aim+"fate = \"returned\"\n")
			found := Check(p, nil)
			wellFormed(t, p, found)
			code := Space
			if x.about == "floor of the group" {
				code = Enclosure
			}
			f := one(t, found, code, x.about)
			if f.Level != x.level || !strings.Contains(f.Text, x.text) {
				t.Errorf("got %s, want %s and %q", f, x.level, x.text)
			}
			applied := ""
			for _, q := range f.Limits {
				if q.Applied {
					applied = q.Source + " " + q.Printed
				}
			}
			if x.applied != "" && applied != x.applied {
				t.Errorf("applied %q, want %q\n%s", applied, x.applied, f)
			}
		})
	}
}

// Blood of 65 mL/kg in a pig of 10 kg: 650 mL circulate, so that 65 mL are 10 %.
func TestBlood(t *testing.T) {
	for _, x := range []struct {
		name, procedure string
		level           Level
		text            string
	}{
		{"1 % daily, one day", `volume = { value = 6.5, unit = "mL" }`, Pass, "1 %"},
		{"1 % daily for two weeks is 14 %", `volume = { value = 6.5, unit = "mL" }` + "\ntimes = 14\n" + `every = { value = 1, unit = "d" }`, Warning, "14 % of the circulating volume in 14 d is more than 10 %"},
		{"1 % daily for a week", `volume = { value = 6500, unit = "uL" }` + "\ntimes = 7\n" + `every = { value = 24, unit = "h" }`, Pass, "rest of 24"},
		{"5 % once", `volume = { value = 32.5, unit = "mL" }` + "\ntimes = 1", Pass, "rest of 7 d"},
		{"5 % weekly is 10 % in 14 d", `volume = { value = 32.5, unit = "mL" }` + "\ntimes = 8\n" + `every = { value = 1, unit = "wk" }`, Pass, "rest of 7 d"},
		{"5 % every six days", `volume = { value = 32.5, unit = "mL" }` + "\ntimes = 8\n" + `every = { value = 6, unit = "d" }`, Warning, "15 % of the circulating volume in 14 d"},
		{"2 % on three days", `volume = { value = 1.3, unit = "mL/kg" }` + "\ntimes = 3\n" + `every = { value = 1, unit = "d" }`, Warning, "2 % of the circulating volume in 24 h is more than 1 %"},
		{"9 % every 14 d", `volume = { value = 58.5, unit = "mL" }` + "\ntimes = 4\n" + `every = { value = 14, unit = "d" }`, Pass, "rest of 14 d"},
		{"9 % every 13 d", `volume = { value = 58.5, unit = "mL" }` + "\ntimes = 4\n" + `every = { value = 13, unit = "d" }`, Warning, "18 % of the circulating volume in 14 d"},
		{"10 % once", `volume = { value = 65, unit = "mL" }`, Pass, "rest of 14 d"},
		{"11 % once", `volume = { value = 71.5, unit = "mL" }`, Warning, "11 % of the circulating volume in 14 d is more than 10 %"},
		{"interval not stated", `volume = { value = 6.5, unit = "mL" }` + "\ntimes = 4", Note, "time between samples is not stated"},
	} {
		t.Run(x.name, func(t *testing.T) {
			p := load(t, "[animals]\nspecies = \"pig\"\nmass = { from = 10, to = 14, unit = \"kg\" }\n[[welfare.procedure]]\nkind = \"blood sample\"\nname = \"vena cava\"\n"+x.procedure+"\n")
			found := Check(p, nil)
			wellFormed(t, p, found)
			f := one(t, found, Blood, "")
			if f.Level != x.level || !strings.Contains(plain(f.Text), x.text) {
				t.Errorf("got %s", f)
			}
		})
	}
}

// Domain examples of a policy on farm animals: 10 % of a hen of 2.5 kg are 15 mL, of a
// sheep of 60 kg 360 mL (Montana State University).
func TestTenPercent(t *testing.T) {
	for _, x := range []struct {
		species     string
		mass, tenth float64
	}{{"hen", 2.5, 15}, {"sheep", 60, 360}} {
		p := load(t, fmt.Sprintf("[animals]\nspecies = %q\nmass = { value = %g, unit = \"kg\" }\n[[welfare.procedure]]\nkind = \"blood sample\"\nvolume = { value = %g, unit = \"mL\" }\n", x.species, x.mass, x.tenth))
		f := one(t, Check(p, nil), Blood, "")
		if f.Level != Pass || !strings.Contains(plain(f.Text), "10 % of the circulating volume") {
			t.Errorf("%s: %s", x.species, f)
		}
	}
}

// Several procedures add up.
func TestBloodTogether(t *testing.T) {
	one7 := "[[welfare.procedure]]\nkind = \"blood sample\"\nvolume = { value = %g, unit = \"mL/kg\" }\ntimes = 2\nevery = { value = 14, unit = \"d\" }\n"
	p := load(t, "[animals]\nspecies = \"pig\"\n"+fmt.Sprintf(one7+one7, 3.9, 3.25))
	f := one(t, Check(p, nil), Blood, "blood of all procedures")
	if f.Level != Warning || !strings.Contains(plain(f.Text), "11 %") {
		t.Error(f)
	}
	p = load(t, "[animals]\nspecies = \"pig\"\n"+fmt.Sprintf(one7+one7, 3.25, 3.25))
	if f := one(t, Check(p, nil), Blood, "blood of all procedures"); f.Level != Pass {
		t.Error(f)
	}
}

func TestDose(t *testing.T) {
	for _, x := range []struct {
		name, species, mass, kind, route, volume string
		level                                    Level
		text                                     string
	}{
		{"mouse IV at the resolved limit", "mouse", `{ value = 20, unit = "g" }`, "injection", "i.v., tail vein", `{ value = 0.1, unit = "mL" }`, Pass, "5 mL/kg"},
		{"mouse IV over good practice", "mouse", `{ value = 20, unit = "g" }`, "injection", "IV", `{ value = 0.2, unit = "mL" }`, Warning, "10 mL/kg is more than 5 mL/kg"},
		{"mouse IV unusual", "mouse", `{ value = 20, unit = "g" }`, "injection", "intravenous", `{ value = 0.6, unit = "mL" }`, Warning, "unusual: more than 25 mL/kg"},
		{"mouse SC, the stricter document", "mouse", `{ value = 20, unit = "g" }`, "injection", "subcutaneous", `{ value = 8, unit = "mL/kg" }`, Warning, "more than 5 mL/kg"},
		{"mouse IM by site", "mouse", `{ value = 20, unit = "g" }`, "injection", "im", `{ value = 80, unit = "uL" }`, Warning, "more than 0.05 mL/site"},
		{"rat oral, the stricter maximum", "rat", `{ value = 200, unit = "g" }`, "gavage", "", `{ value = 5, unit = "mL" }`, Warning, "unusual: more than 20 mL/kg"},
		{"pig IM", "pig", `{ value = 20, unit = "kg" }`, "injection", "intramuscular, neck", `{ value = 5, unit = "mL" }`, Pass, "0.25 mL/kg"},
		{"in oil the maximum is halved", "pig", `{ value = 20, unit = "kg" }`, "injection", "intramuscular, in oil", `{ value = 6, unit = "mL" }`, Warning, "half of 0.5 mL/kg"},
		{"rabbit IP", "rabbit", `{ value = 3, unit = "kg" }`, "injection", "ip", `{ value = 35, unit = "mL" }`, Warning, "unusual: more than 10 mL/kg"},
	} {
		t.Run(x.name, func(t *testing.T) {
			p := load(t, fmt.Sprintf("[animals]\nspecies = %q\nmass = %s\n[[welfare.procedure]]\nkind = %q\nroute = %q\nvolume = %s\n", x.species, x.mass, x.kind, x.route, x.volume))
			found := Check(p, nil)
			wellFormed(t, p, found)
			f := one(t, found, Dose, "")
			if f.Level != x.level || !strings.Contains(plain(f.Text), x.text) {
				t.Errorf("got %s", f)
			}
		})
	}
}

// What cannot be compared is a note that says so, never a pass.
func TestNotCompared(t *testing.T) {
	for _, x := range []struct{ name, source, text string }{
		{"species", "[animals]\nspecies = \"axolotl\"\n", "do not know this species"},
		{"two species", "[animals]\nspecies = \"sheep and goats\"\n", "do not know this species"},
		{"read as", "[animals]\nspecies = \"growing-finishing pigs\"\n", "read as pig"},
		{"mass", "[animals]\nspecies = \"pig\"\nmass_end = { value = 80, unit = \"stone\" }\n", "not read as a body mass"},
		{"no mass", "[animals]\nspecies = \"pig\"\n[housing]\nfloor_area = { value = 1, unit = \"m2\" }\n", "the body mass is not known"},
		{"no floor", "[animals]\nspecies = \"pig\"\nmass = { value = 80, unit = \"kg\" }\n", "floor area per animal is not stated"},
		{"floor", "[animals]\nspecies = \"pig\"\nmass = { value = 80, unit = \"kg\" }\n[housing]\nfloor_area = { value = 1, unit = \"kg\" }\n", "not read as an area"},
		{"temperature", "[animals]\nspecies = \"pig\"\n[housing]\ntemperature = { value = 20, unit = \"Cel\" }\n", "no temperatures for pig"},
		{"group", "[animals]\nspecies = \"pig\"\n", "how many animals live together is not stated"},
		{"route", "[animals]\nspecies = \"pig\"\nmass = { value = 80, unit = \"kg\" }\n[[welfare.procedure]]\nkind = \"injection\"\nvolume = { value = 1, unit = \"mL\" }\nroute = \"iv or im\"\n", "route is not read"},
		{"no row", "[animals]\nspecies = \"goose\"\nmass = { value = 3, unit = \"kg\" }\n[[welfare.procedure]]\nkind = \"gavage\"\nvolume = { value = 1, unit = \"mL\" }\n", "no oral volume for goose"},
		{"blood without mass", "[animals]\nspecies = \"pig\"\n[[welfare.procedure]]\nkind = \"blood sample\"\nvolume = { value = 1, unit = \"mL\" }\n", "the body mass is not known"},
		{"blood by interval", "[animals]\nspecies = \"pig\"\nmass = { value = 80, unit = \"kg\" }\n[[welfare.procedure]]\nkind = \"blood sample\"\nvolume = { value = 1, unit = \"mL\" }\nevery = { value = 1, unit = \"moon\" }\n", "interval of time"},
	} {
		t.Run(x.name, func(t *testing.T) {
			p := load(t, x.source)
			found := Check(p, nil)
			wellFormed(t, p, found)
			ok := slices.ContainsFunc(found, func(f Finding) bool {
				return f.Code == NotCompared && f.Level == Note && strings.Contains(f.Text, x.text)
			})
			if !ok {
				t.Errorf("nothing says %q:\n%s", x.text, dump(found))
			}
			if x.name != "read as" && len(of(found, Space))+len(of(found, Dose))+len(of(found, Blood)) > 0 {
				t.Errorf("something was compared:\n%s", dump(found))
			}
		})
	}
}

func TestSpecies(t *testing.T) {
	for text, want := range map[string]string{
		"pig": "pig", "Swine": "pig", "barrows": "pig", "sow": "pig", "guinea pigs": "guinea pig", "minipig": "minipig", "Göttingen-like miniature pigs": "minipig",
		"cattle": "cattle", "Holstein-like cows": "cattle", "steer": "cattle", "calf": "cattle", "hen": "fowl", "laying hens": "fowl", "broiler": "fowl", "chicken": "fowl",
		"mouse": "mouse", "mice (C57)": "mouse", "lamb": "sheep", "sheep": "sheep", "naked mole rat": "mole rat", "guinea fowl": "guinea fowl", "wild boar": "wild boar",
		"rainbow trout": "fish", "zebra fish": "zebrafish", "pigs, sows and gilts": "pig", "pigeon": "pigeon", "dogs": "dog",
		"": "", "pigs and sheep": "", "ratite": "", "seahorse": "", "horseshoe crab": "",
	} {
		got := ""
		if a := identify(text); a != nil {
			got = a.name
		}
		if got != want {
			t.Errorf("%q is read as %q, want %q", text, got, want)
		}
	}
	words := map[string]string{}
	for _, a := range loaded().species {
		for _, w := range a.words {
			if words[w] != "" {
				t.Errorf("%q means %s and %s", w, words[w], a.name)
			}
			words[w] = a.name
		}
	}
}

// Factors of UCUM (ucum.org, tables of units): 1 [lb_av] = 0.45359237 kg, 1 [sft_i] =
// 0.09290304 m2, 1 wk = 7 d, 1 mo = 30.4375 d, 1 a = 365.25 d.
func TestUnits(t *testing.T) {
	for _, x := range []struct {
		value     float64
		unit, dim string
		want      float64
	}{
		{250, "g", "mass", 0.25}, {1, "[lb_av]", "mass", 0.45359237}, {1.2, "t", "mass", 1200}, {5, "mL", "volume", 0.005}, {5, "ml", "volume", 0.005}, {200, "uL", "volume", 2e-4},
		{1, "cm3", "volume", 1e-3}, {900, "cm2", "area", 0.09}, {1, "[sft_i]", "area", 0.09290304}, {36, "h", "time", 1.5}, {2, "wk", "time", 14}, {1, "a", "time", 365.25}, {90, "min", "time", 0.0625},
	} {
		got, _, ok := in(&protocol.Quantity{From: x.value, To: x.value, Unit: x.unit}, x.dim)
		if !ok || !near(got, x.want) {
			t.Errorf("%g %s = %g, want %g", x.value, x.unit, got, x.want)
		}
	}
	for _, unit := range []string{"", "KG", "m", "m2/kg", "Cel", "lb", "G"} {
		for _, dim := range []string{"mass", "volume", "area", "time"} {
			if _, _, ok := in(&protocol.Quantity{From: 1, To: 1, Unit: unit}, dim); ok {
				t.Errorf("%q is read as %s", unit, dim)
			}
		}
	}
	if x, _, ok := perMass(&protocol.Quantity{From: 10, To: 10, Unit: "uL/g"}); !ok || !near(x, 10) {
		t.Errorf("10 uL/g = %g mL/kg", x)
	}
	if x, _, ok := celsius(&protocol.Quantity{From: 72, To: 72, Unit: "[degF]"}); !ok || !near(x, 40.0/1.8) {
		t.Errorf("72 °F = %g °C", x)
	}
	for _, q := range []*protocol.Quantity{nil, {From: 1e300, To: 1e300, Unit: "kg"}, {From: 1e-300, To: 1, Unit: "kg"}} {
		if _, _, ok := in(q, "mass"); ok {
			t.Errorf("%v is read", q)
		}
	}
	if wholeDays(500, 12) != 42 || wholeDays(500, 10) != 50 || wholeDays(25, 12) != 3 {
		t.Error("degree-days are not rounded up to whole days")
	}
}

func near(a, b float64) bool { return a-b <= 1e-12*b && b-a <= 1e-12*b }

// Care: what is asked beside numbers.
func TestCare(t *testing.T) {
	pig := "[animals]\nspecies = \"pig\"\n"
	for _, x := range []struct {
		name, source, code, about string
		level                     Level
		text                      string
	}{
		{"monitoring absent", pig, Monitoring, "", Warning, "not stated"},
		{"monitoring of broilers", "[animals]\nspecies = \"broilers\"\n[welfare]\nmonitoring = { times_per_day = 1, by = \"x\" }\n", Monitoring, "", Warning, "less than 2 a day"},
		{"monitoring of pigs", pig + "[welfare]\nmonitoring = { times_per_day = 1, by = \"x\" }\n", Monitoring, "", Pass, "1 a day"},
		{"loss of mass at the limit", pig + "[welfare]\nhumane_endpoints = [\"loss of 15 to 20 % of body mass\"]\n", MassLoss, "", Pass, "20 %"},
		{"loss of mass with a tumour", "[animals]\nspecies = \"mouse\"\n[welfare]\nhumane_endpoints = [\"tumour over 12 mm\", \"weight loss of 18 percent\"]\n", MassLoss, "", Warning, "more than 15 %"},
		{"no loss of mass", pig + "[welfare]\nhumane_endpoints = [\"lameness\"]\n", MassLoss, "", Note, "no endpoint states"},
		{"death", pig + "[welfare]\nhumane_endpoints = [\"death within a day\"]\n", Endpoints, "death as an endpoint", Warning, "death"},
		{"no endpoints, harmless", pig + "[[welfare.procedure]]\nkind = \"other\"\n", Endpoints, "", Note, "no humane endpoints"},
		{"no endpoints, harmful", pig + "[[welfare.procedure]]\nkind = \"surgery\"\n", Endpoints, "", Warning, "call for them"},
		{"light", pig + "[housing]\nlighting = \"12 h of 30 lux\"\n", Housing, "light", Warning, "less than 40 lx"},
		{"fasting with a reason", pig + "[[welfare.procedure]]\nkind = \"fasting\"\nwhy = \"surgery\"\nduration = { value = 24, unit = \"h\" }\n", Fasting, "", Note, "asks for the justification"},
		{"fasting without", pig + "[[welfare.procedure]]\nkind = \"fasting\"\nduration = { value = 1, unit = \"d\" }\n", Fasting, "", Warning, "more than 18 h"},
		{"fasting of broilers", "[animals]\nspecies = \"broiler\"\n[[welfare.procedure]]\nkind = \"fasting\"\nwhy = \"slaughter\"\nduration = { value = 13, unit = \"h\" }\n", Fasting, "", Warning, "more than 12 h"},
		{"short fasting", pig + "[[welfare.procedure]]\nkind = \"fasting\"\nduration = { value = 12, unit = \"h\" }\n", Fasting, "", Pass, "no longer"},
		{"rat off feed for two days", "[approval]\nnumber = \"1\"\nbody = \"b\"\nseverity = \"mild\"\n[animals]\nspecies = \"rat\"\n[[welfare.procedure]]\nkind = \"fasting\"\nduration = { value = 48, unit = \"h\" }\n", Severity, "", Warning, "trigger for moderate"},
		{"severity observed", "[approval]\nnumber = \"1\"\nseverity = \"mild\"\nseverity_observed = \"severe\"\n" + pig, Severity, "severity observed", Warning, "above the one foreseen"},
		{"authorised for five years and a day", "[approval]\nnumber = \"1\"\ndate = 2024-03-01\nexpires = 2029-03-02\n" + pig, Approval, "duration of the approval", Warning, "longer than 5 years"},
		{"authorised for five years", "[approval]\nnumber = \"1\"\ndate = 2024-03-01\nexpires = 2029-03-01\n" + pig, Approval, "duration of the approval", Pass, "no longer"},
		{"castration in time", pig + "[[welfare.procedure]]\nkind = \"marking\"\nname = \"castration\"\n" + "", Pain, "", Note, "pain relief"},
		{"reuse", "[approval]\nnumber = \"1\"\nseverity = \"severe\"\n" + pig + "previous_use = \"one trial, no surgery\"\n", Reuse, "", Warning, "severe procedures"},
		{"food chain", pig + "food_chain = true\n", Residues, "", Warning, "nothing is said of residues"},
		{"out of the food chain", pig + "food_chain = false\n", Residues, "", Pass, "neither"},
		{"killing", pig + "[welfare]\nfate = \"killed\"\n", Killing, "", Warning, "nothing is said of how"},
		{"not killed", pig + "[welfare]\nfate = \"no animal is killed\"\n", Killing, "", Note, "not read"},
		{"slaughter", pig + "[welfare]\nfate = \"sold for slaughter\"\n", Killing, "", Note, "slaughtered"},
		{"one animal", "[animals]\nspecies = \"sheep\"\n[housing]\ngroup_size = 1\n", Group, "", Warning, "singly"},
		{"records", "[trial]\nend = 2026-05-01\n" + pig + "[records]\nretain_until = 2029-04-30\n", Records, "", Warning, "less than 3 years"},
		{"zebrafish too cold", "[trial]\nstart = 2027-02-01\n[animals]\nspecies = \"zebrafish\"\n[housing]\ntemperature = { from = 23, to = 28, unit = \"Cel\" }\n", Temperature, "", Warning, "23 °C"},
		{"zebrafish before the rule", "[trial]\nstart = 2026-02-01\n[animals]\nspecies = \"zebrafish\"\n[housing]\ntemperature = { from = 23, to = 28, unit = \"Cel\" }\n", Temperature, "", Note, "applies from 2026-12-05"},
		{"zebrafish, crowded", "[trial]\nstart = 2027-02-01\n[animals]\nspecies = \"zebrafish\"\n[housing]\nfloor_area = { value = 80, unit = \"mL\" }\n", Space, "", Warning, "12.5 per L is above 10 per L"},
		{"metabolism cage for six days", "[approval]\nnumber = \"1\"\nseverity = \"moderate\"\n[animals]\nspecies = \"rat\"\n[[welfare.procedure]]\nkind = \"restraint\"\nname = \"metabolism cage\"\nwhy = \"urine\"\nduration = { value = 6, unit = \"d\" }\n", Severity, "", Warning, "trigger for severe"},
	} {
		t.Run(x.name, func(t *testing.T) {
			p := load(t, x.source)
			found := Check(p, nil)
			wellFormed(t, p, found)
			f := one(t, found, x.code, x.about)
			if f.Level != x.level || !strings.Contains(plain(f.Text), x.text) {
				t.Errorf("got %s", f)
			}
		})
	}
}

// Degree-days are turned into days at the coldest temperature stated.
func TestDegreeDays(t *testing.T) {
	p := load(t, "[animals]\nspecies = \"trout\"\nfood_chain = true\n[housing]\ntemperature = { from = 12, to = 15, unit = \"Cel\" }\n[welfare]\nresidues = \"set by the veterinarian\"\n")
	f := one(t, Check(p, nil), Residues, "")
	var got []string
	for _, q := range f.Limits {
		if q.Unit == "degree-days" {
			got = append(got, q.Printed+": "+plain(q.Stated))
		}
	}
	if want := "[500: at 12 °C that is 42 d 25: at 12 °C that is 3 d]"; fmt.Sprint(got) != want {
		t.Errorf("got %v, want %s", got, want)
	}
}

// Where there are no animals there is nothing to compare.
func TestNoAnimals(t *testing.T) {
	p := load(t, "[material]\ncrop = \"barley\"\n")
	if found := Check(p, nil); found != nil || LookUp(p) != nil || Check(nil, nil) != nil {
		t.Errorf("found %v", found)
	}
}

// No method of killing is named by a row or a finding: only the documents do that. The
// words are those by which methods are known in the trade (common practice, no source).
func TestNoMethodOfKilling(t *testing.T) {
	var all []string
	for _, name := range []string{"space", "care", "blood", "dose", "rules", "recalled", "sources", "species", "guideline"} {
		b, err := files.ReadFile("data/" + name + ".csv")
		if err != nil {
			t.Fatal(err)
		}
		all = append(all, string(b))
	}
	for _, name := range []string{"care.go", "procedure.go", "space.go", "welfare.go", "codes.go"} {
		b, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		all = append(all, string(b))
	}
	for _, text := range all {
		for _, w := range []string{"barbiturate", "pentobarbital", "dislocation", "decapitation", "captive bolt", "gassing", "overdose", "stunning", "electrocution"} {
			if strings.Contains(strings.ToLower(text), w) {
				t.Errorf("a method is named: %s", w)
			}
		}
	}
}

// Many procedures of every kind: each gives a finding, in the order of the file, and the
// same input gives the same findings.
func TestManyProcedures(t *testing.T) {
	source := "[animals]\nspecies = \"rat\"\nmass = { value = 200, unit = \"g\" }\n"
	kinds := []string{"blood sample", "injection", "gavage", "fasting", "water restriction", "single housing", "restraint", "marking", "surgery", "transport", "challenge", "deficient diet"}
	for range 40 {
		for _, k := range kinds {
			source += "[[welfare.procedure]]\nkind = \"" + k + "\"\nvolume = { value = 0.3, unit = \"mL\" }\nroute = \"sc\"\nduration = { value = 3, unit = \"h\" }\ntimes = 2\nevery = { value = 14, unit = \"d\" }\n"
		}
	}
	p := load(t, source)
	found := Check(p, nil)
	wellFormed(t, p, found)
	for i := range p.Welfare.Procedures {
		key := fmt.Sprintf("welfare.procedure[%d]", i)
		if !slices.ContainsFunc(found, func(f Finding) bool { return f.Key == key || strings.HasPrefix(f.Key, key+".") }) {
			t.Errorf("nothing is said of %s", key)
		}
	}
	if dump(found) != dump(Check(p, nil)) {
		t.Error("two runs differ")
	}
}

// Whatever a protocol says, findings are well formed.
func FuzzCheck(f *testing.F) {
	demo, err := os.ReadFile("../../templates/demo/protocol.toml")
	if err != nil {
		f.Fatal(err)
	}
	f.Add(string(demo))
	f.Add("protocol = 1\n[animals]\nspecies = \"quail\"\nmass = { value = 1e-9, unit = \"g\" }\n[housing]\ngroup_size = 1000000\nfloor_area = { value = 1e12, unit = \"m2\" }\n")
	f.Add("protocol = 1\n[animals]\nspecies = \"mice\"\nmass = { value = 20, unit = \"g\" }\n[[welfare.procedure]]\nkind = \"blood sample\"\nvolume = { value = 0.1, unit = \"mL\" }\nevery = { value = 1, unit = \"s\" }\ntimes = 900000\n")
	f.Fuzz(func(t *testing.T, source string) {
		p, _ := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(source)}}, "protocol.toml")
		if p == nil {
			return
		}
		for _, x := range Check(p, nil) {
			if x.Code == "" || x.Text == "" || x.Key == "" || strings.Contains(x.Text, "NaN") || strings.Contains(x.Text, "Inf") {
				t.Errorf("%s", x)
			}
		}
		for _, d := range Diagnostics(p, Check(p, nil)) {
			if !strings.HasSuffix(d.Hint, Deference) {
				t.Errorf("%+v", d)
			}
		}
		LookUp(p)
	})
}
