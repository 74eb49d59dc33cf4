package seal

import (
	"bytes"
	"encoding/json"
	"fmt"
	"maps"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

const base = `protocol = 1
[trial]
code = "HM-26-014"
title = "Graded dried yeast in diets of growing barrows"
objective = "Does daily gain rise with dried yeast?"
start = 2026-03-02
[[person]]
name = "Ansa Verrill"
role = "study director"
[eligibility]
exclusion_rules = ["humane endpoint reached", "feeder failure over 12 h"]
[[factor]]
name = "yeast"
label = "Dried yeast"
levels = [0, 20, 40, 60]
control = 0
[[unit]]
name = "block"
count = 5
[[unit]]
name = "pen"
within = "block"
count = 4
receives = ["yeast"]
[[response]]
name = "adg"
label = "Average daily gain"
unit = "g/d"
role = "primary"
kind = "continuous"
[[response]]
name = "intake"
kind = "continuous"
[[covariate]]
name = "initial_mass"
[analysis]
comparison = "tukey"
[[analysis.contrast]]
name = "yeast v. none"
factor = "yeast"
weights = { "0" = -3, "20" = 1, "40" = 1, "60" = 1 }
`

// edit replaces texts of a protocol, pairwise.
func edit(t testing.TB, text string, pairs ...string) string {
	t.Helper()
	for i := 0; i < len(pairs); i += 2 {
		if strings.Count(text, pairs[i]) != 1 {
			t.Fatalf("%q stands %d times in the protocol", pairs[i], strings.Count(text, pairs[i]))
		}
		text = strings.Replace(text, pairs[i], pairs[i+1], 1)
	}
	return text
}

func load(t testing.TB, text string) *protocol.Protocol {
	t.Helper()
	p, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(text)}}, "protocol.toml")
	if list.HasErrors() {
		t.Fatal(list)
	}
	return p
}

func TestDifferencesInWords(t *testing.T) {
	tests := []struct {
		pairs []string
		want  []string
	}{
		{nil, nil},
		{[]string{"count = 4", "count = 5"}, []string{"unit[1].count units of pen per block: 4 → 5"}},
		{[]string{"count = 5", "count = 6"}, []string{"unit[0].count units of block: 5 → 6"}},
		{[]string{`"tukey"`, `"lsd"`}, []string{"analysis.comparison comparison: tukey → lsd"}},
		{[]string{"[[covariate]]", "[[response]]\nname = \"backfat\"\nunit = \"mm\"\nkind = \"continuous\"\n[[covariate]]"},
			[]string{"response[2] response backfat added: kind continuous, role secondary, unit mm"}},
		{[]string{"[[response]]\nname = \"intake\"\nkind = \"continuous\"\n", ""}, []string{"response response intake removed: kind continuous, role secondary"}},
		{[]string{"[0, 20, 40, 60]", "[0, 20, 40]", `, "60" = 1 }`, " }", `"0" = -3`, `"0" = -2`}, []string{
			"factor[0].levels levels of factor yeast: 0, 20, 40, 60 → 0, 20, 40",
			"analysis.contrast[0].weights weights of contrast yeast v. none: 0 = -3, 20 = 1, 40 = 1, 60 = 1 → 0 = -2, 20 = 1, 40 = 1"}},
		{[]string{`, "feeder failure over 12 h"]`, `, "feeder failure over 24 h"]`}, []string{
			"eligibility.exclusion_rules[1] exclusion rule added: feeder failure over 24 h",
			"eligibility.exclusion_rules exclusion rule removed: feeder failure over 12 h"}},
		{[]string{"rise with dried yeast?", "rise with dried yeast up to 60 g/kg of diet?"},
			[]string{"trial.objective objective of the trial: “… with dried yeast?” → “… with dried yeast up to 60 g/kg of diet?”"}},
		{[]string{"role = \"primary\"\nkind", "role = \"secondary\"\ntransform = \"log\"\ncovariates = [\"initial_mass\"]\nkind"}, []string{
			"response[0].covariates covariates of response adg added: initial_mass",
			"response[0].role role of response adg: primary → secondary",
			"response[0].transform transform of response adg: none → log"}},
		{[]string{"[analysis]\n", "[housing]\nfloor_area = { value = 0.9, unit = \"m2\" }\nbedding = \"straw\"\n[analysis]\n"},
			[]string{"housing the housing added: bedding straw, floor area 0.9 m2"}},
		{[]string{"[[unit]]\nname = \"block\"", "[[person]]\nname = \"Imre Salloway\"\n[[unit]]\nname = \"block\""}, []string{"person[1] person Imre Salloway added"}},
		{[]string{"name = \"adg\"\nlabel", "name = \"gain\"\nlabel"}, []string{
			"response[0] response gain added: kind continuous, label Average daily gain, role primary, unit g/d",
			"response response adg removed: kind continuous, label Average daily gain, role primary, unit g/d"}},
		{[]string{"[analysis]\n", "[[analysis.contrast]]\nname = \"high v. low\"\nfactor = \"yeast\"\nweights = { \"20\" = -1, \"60\" = 1 }\n[analysis]\n"},
			[]string{"analysis.contrast[0] contrast high v. low added: factor yeast, weights (20 = -1, 60 = 1)"}},
		{[]string{"start = 2026-03-02", "start = 2026-03-09\nend = 2026-04-27"}, []string{
			"trial.end end of the trial added: 2026-04-27", "trial.start start of the trial: 2026-03-02 → 2026-03-09"}},
	}
	old := load(t, base)
	for _, test := range tests {
		text := edit(t, base, test.pairs...)
		found, err := CompareProtocols(old, load(t, text))
		if err != nil {
			t.Fatal(err)
		}
		var got []string
		for _, d := range found {
			got = append(got, d.Key+" "+d.String())
		}
		if !slices.Equal(got, test.want) {
			t.Errorf("%q:\n%s\nwant\n%s", test.pairs, strings.Join(got, "\n"), strings.Join(test.want, "\n"))
		}
	}
}

// TestOrder says when the same tables stand in another order.
func TestOrder(t *testing.T) {
	i, j := strings.Index(base, "[[response]]\nname = \"adg\""), strings.Index(base, "[[response]]\nname = \"intake\"")
	k := strings.Index(base, "[[covariate]]")
	found, err := CompareProtocols(load(t, base), load(t, base[:i]+base[j:k]+base[i:j]+base[k:]))
	if err != nil || len(found) != 1 || found[0].String() != "order of the tables response: adg, intake → intake, adg" {
		t.Error(found, err)
	}
}

// TestSections keeps the order of the protocol and its words whole.
func TestSections(t *testing.T) {
	text, err := load(t, base).Canonical()
	if err != nil {
		t.Fatal(err)
	}
	var plan map[string]any
	if err := json.Unmarshal(text, &plan); err != nil {
		t.Fatal(err)
	}
	for k := range plan {
		if !slices.Contains(sections, k) {
			t.Errorf("the table %s has no place", k)
		}
	}
	for k := range phrases {
		if section, _, _ := strings.Cut(k, "."); !slices.Contains(sections, section) {
			t.Errorf("there are words for %s, which has no place", k)
		}
	}
}

// trial is a folder that is written in memory.
type trial struct {
	t testing.TB
	m fstest.MapFS
}

func (x trial) files() *folder.Folder { return folder.FromFS(x.m) }

func (x trial) protocol() *protocol.Protocol {
	x.t.Helper()
	return load(x.t, string(x.m["protocol.toml"].Data))
}

func (x trial) seal(e Entry) {
	x.t.Helper()
	changes, err := Changes(x.files(), x.protocol(), e)
	if err != nil {
		x.t.Fatal(err)
	}
	for _, c := range changes {
		var old []byte
		if f := x.m[c.Path]; f != nil {
			old = f.Data
		}
		x.m[c.Path] = &fstest.MapFile{Data: append(bytes.Clone(old), c.Data...)}
	}
}

func (x trial) read() (*Seal, []string) {
	s, list := Read(x.files(), x.protocol())
	var said []string
	for _, d := range list {
		said = append(said, fmt.Sprintf("%v %v: %s [%s]", d.Pos, d.Severity, d.Message, d.Code))
	}
	return s, said
}

func newTrial(t testing.TB, text string) trial {
	return trial{t: t, m: fstest.MapFS{"protocol.toml": {Data: []byte(text)}}}
}

func on(month, day int) protocol.Date { return protocol.Date{Year: 2026, Month: month, Day: day} }

func TestSealAndRead(t *testing.T) {
	x := newTrial(t, base)
	if s, said := x.read(); s != nil || said != nil {
		t.Fatal("a trial without a seal has one", said)
	}
	x.seal(Entry{By: "Ansa \"Verrill\"", On: on(2, 20)})
	s, said := x.read()
	if s == nil || said != nil {
		t.Fatal(said)
	}
	e := s.Last()
	plan, err := x.protocol().CanonicalPlan()
	if err != nil || e.Number != 1 || e.By != "Ansa \"Verrill\"" || e.On != on(2, 20) || !bytes.Equal(e.Plan, plan) || e.SHA256 != folder.Hash(plan) {
		t.Errorf("sealed %+v, %v", e, err)
	}
	if _, err := Changes(x.files(), x.protocol(), Entry{On: on(2, 21)}); err != ErrSame {
		t.Errorf("sealing the same again: %v", err)
	}
	// What is no part of the plan may change.
	x.m["protocol.toml"].Data = []byte(edit(t, base, "start = 2026-03-02", "start = 2026-03-02\nend = 2026-04-27",
		"[[factor]]", "[[person]]\nname = \"Imre Salloway\"\n[[deviation]]\nwhat = \"a pump failed\"\n[[factor]]"))
	if s, said := x.read(); s == nil || said != nil || len(s.Revisions) > 0 {
		t.Error(s, said)
	}
	// A second seal keeps what stands there.
	first := bytes.Clone(x.m[File].Data)
	x.m["protocol.toml"].Data = []byte(edit(t, base, "count = 4", "count = 3"))
	x.seal(Entry{On: on(2, 25)})
	if !bytes.HasPrefix(x.m[File].Data, first) {
		t.Error("the second seal changed the first")
	}
	if s, _ := x.read(); s == nil || len(s.Entries) != 2 {
		t.Error("the second seal was not read")
	}
	if _, err := Changes(x.files(), load(t, base), Entry{On: on(2, 24)}); err == nil {
		t.Error("a third seal may be older than the second")
	}
	// Line ends of another system are no change.
	x.m[File].Data = bytes.ReplaceAll(x.m[File].Data, []byte("\n"), []byte("\r\n"))
	if s, _ := x.read(); s == nil {
		t.Error("the seal does not bear other line ends")
	}
}

// TestOddTexts seals plans whose texts need escapes in TOML.
func TestOddTexts(t *testing.T) {
	for _, odd := range []string{"'''", "a\u007fb", `\"quoted\" \\ back`, "two\\nlines", "µ ⁻¹ 😀"} {
		x := newTrial(t, edit(t, base, "Does daily gain rise", odd))
		if strings.Contains(odd, "\u007f") {
			x = newTrial(t, edit(t, base, "Does daily gain", `\u007F gain`))
		}
		x.seal(Entry{On: on(2, 20), By: "A\tB"})
		if s, said := x.read(); s == nil || said != nil || s.Last().By != "A\tB" {
			t.Errorf("%q: %v\n%s", odd, said, x.m[File].Data)
		}
	}
}

// TestTampered changes every byte of a record of two seals, of the long plans every 13th,
// and removes and adds lines.
func TestTampered(t *testing.T) {
	x := newTrial(t, base)
	x.seal(Entry{By: "Ansa Verrill", On: on(2, 20)})
	one := bytes.Clone(x.m[File].Data)
	x.m["protocol.toml"].Data = []byte(edit(t, base, "count = 4", "count = 3"))
	x.seal(Entry{By: "Ansa Verrill", On: on(2, 25)})
	two := bytes.Clone(x.m[File].Data)
	broken := func(data []byte) bool {
		_, list := parse(data)
		return list.HasErrors()
	}
	if broken(one) || broken(two) {
		t.Fatal("a whole record is taken as broken")
	}
	for i := range two {
		if start := bytes.LastIndexByte(two[:i], '\n') + 1; bytes.HasPrefix(two[start:], []byte("plan = ")) && i%13 != 0 {
			continue
		}
		data := bytes.Clone(two)
		data[i] ^= 1
		if !broken(data) {
			t.Errorf("byte %d, %q for %q in %q, is not noticed", i, data[i], two[i], two[max(0, i-20):min(len(two), i+20)])
		}
	}
	lines := strings.SplitAfter(string(two), "\n")
	for i := range lines {
		if strings.TrimSpace(lines[i]) != "" && !broken([]byte(strings.Join(slices.Delete(slices.Clone(lines), i, i+1), ""))) {
			t.Errorf("line %d was removed and nobody noticed: %s", i+1, lines[i])
		}
		if i > 0 && !broken([]byte(strings.Join(slices.Insert(slices.Clone(lines), i, "# a remark\n"), ""))) {
			t.Errorf("a remark before line %d is not noticed", i+1)
		}
	}
	for name, data := range map[string][]byte{
		"added below":        append(bytes.Clone(two), "data = \"x\"\n"...),
		"a seal without end": append(bytes.Clone(two), "[[seal]]\nnumber = 3\n"...),
		"no TOML":            []byte("[[seal"),
		"something else":     []byte("[[draw]]\nnumber = 1\n"),
		"blank":              []byte(" "),
		"empty":              nil,
	} {
		if !broken(data) {
			t.Errorf("%s: not noticed", name)
		}
	}
}

func TestFindings(t *testing.T) {
	amendment := func(on, what string) string {
		return fmt.Sprintf("[[amendment]]\non = %s\nwhat = %q\nwhy = \"x\"\n[analysis]\n", on, what)
	}
	pens := []string{"count = 4", "count = 5"}
	finding := "protocol.toml:23:9 warning: units of pen per block: 4 → 5, since seal 1 of 2026-02-20, and no amendment says so [not-amended]"
	tests := []struct {
		name  string
		pairs []string
		want  []string
	}{
		{"uncovered", pens, []string{finding}},
		{"a rule", []string{`, "feeder failure over 12 h"`, `, "feeder failure over 12 h", "outlier"`},
			[]string{"protocol.toml:11:75 warning: exclusion rule added: outlier, since seal 1 of 2026-02-20, and no amendment says so [not-amended]"}},
		{"keys that were absent", []string{"name = \"initial_mass\"", "name = \"initial_mass\"\nunit = \"kg\""},
			[]string{"protocol.toml:36:1 warning: unit of covariate initial_mass added: kg, since seal 1 of 2026-02-20, and no amendment says so [not-amended]"}},
		{"covered", append(slices.Clone(pens), "[analysis]\n", amendment("2026-02-20", "Five pens in each block.")), nil},
		{"too early", append(slices.Clone(pens), "[analysis]\n", amendment("2026-02-19", "Five pens in each block.")), []string{finding}},
		{"about something else", append(slices.Clone(pens), "[analysis]\n", amendment("2026-03-01", "Penelope joins.")), []string{finding}},
		{"by label", []string{"role = \"primary\"\nkind", "role = \"primary\"\ntransform = \"log\"\nkind",
			"[analysis]\n", amendment("2026-03-01", "Logarithms of average daily gains")}, nil},
		{"by key", []string{`"tukey"`, `"lsd"`, "[analysis]\n", amendment("2026-03-01", "Comparisons by LSD")}, nil},
		{"by key with underscores", []string{"[analysis]\n", amendment("2026-03-01", "error_df_min is 8") + "error_df_min = 8\n"}, nil},
	}
	for _, test := range tests {
		x := newTrial(t, base)
		x.seal(Entry{By: "Ansa Verrill", On: on(2, 20)})
		x.m["protocol.toml"].Data = []byte(edit(t, base, test.pairs...))
		if _, said := x.read(); !slices.Equal(said, test.want) {
			t.Errorf("%s: %q, want %q", test.name, said, test.want)
		}
	}
	// A second seal does not wash off what no amendment says.
	x := newTrial(t, base)
	x.seal(Entry{On: on(2, 20)})
	x.m["protocol.toml"].Data = []byte(edit(t, base, pens...))
	x.seal(Entry{On: on(2, 22)})
	if _, said := x.read(); !slices.Equal(said, []string{finding}) {
		t.Errorf("sealed again: %q", said)
	}
	// The roster and the allotment are sealed where they were there.
	x = newTrial(t, edit(t, base, "[analysis]\n", "[roster]\nfile = \"roster.csv\"\n[analysis]\n"))
	x.m["roster.csv"] = &fstest.MapFile{Data: []byte("block,pen\n1,1\n")}
	x.seal(Entry{On: on(2, 20)})
	x.m["allotment.csv"] = &fstest.MapFile{Data: []byte("drawn")}
	if _, said := x.read(); said != nil {
		t.Errorf("drawn after the seal: %q", said)
	}
	x.seal(Entry{On: on(2, 21)})
	x.m["allotment.csv"], x.m["roster.csv"] = &fstest.MapFile{Data: []byte("another")}, &fstest.MapFile{Data: []byte("block,pen\n1,2\n")}
	if _, said := x.read(); len(said) != 2 || !strings.Contains(said[0], "content of the roster: ") || !strings.Contains(said[1], "the allotment: ") {
		t.Errorf("the files changed: %q", said)
	}
	// Late seals.
	x = newTrial(t, base)
	x.seal(Entry{On: on(3, 3)})
	if _, said := x.read(); len(said) != 1 || !strings.Contains(said[0], "the plan was sealed on 2026-03-03, after the trial started on 2026-03-02 [sealed-late]") {
		t.Errorf("sealed after the start: %q", said)
	}
	x = newTrial(t, base)
	x.seal(Entry{On: on(2, 20), Data: folder.Hash([]byte("data"))})
	if _, said := x.read(); len(said) != 1 || !strings.Contains(said[0], "when there were data already [sealed-late]") {
		t.Errorf("sealed with data: %q", said)
	}
}

func TestPlanned(t *testing.T) {
	x := newTrial(t, base)
	x.seal(Entry{On: on(2, 20)})
	now := edit(t, base,
		"[[covariate]]", "[[response]]\nname = \"backfat\"\nkind = \"continuous\"\n[[covariate]]",
		"kind = \"continuous\"\n[[response]]\nname = \"intake\"", "kind = \"continuous\"\n[[response]]\nname = \"intake\"\ntransform = \"log\"",
		`"tukey"`, `"lsd"`,
		`, "feeder failure over 12 h"`, `, "feeder failure over 12 h", "outlier"`,
		`"0" = -3`, `"0" = -3.0`,
		"[[analysis.contrast]]", "[[analysis.contrast]]\nname = \"high v. low\"\nfactor = \"yeast\"\nweights = { \"20\" = -1, \"60\" = 1 }\n[[analysis.contrast]]",
		"[analysis]", "[analysis]\ntrend = 4")
	check := func(s *Seal) {
		t.Helper()
		if b := s.Response("adg"); !b.Planned() || len(b.Other) != 1 || b.Other[0].String() != "comparison: tukey → lsd" {
			t.Errorf("adg: %+v", b)
		}
		if b := s.Response("intake"); b.Planned() || b.New || len(b.Model) != 1 || b.Model[0].String() != "transform of response intake: none → log" {
			t.Errorf("intake: %+v", b)
		}
		if b := s.Response("backfat"); b.Planned() || !b.New {
			t.Errorf("backfat: %+v", b)
		}
		for name, want := range map[string]bool{"yeast v. none": true, "high v. low": false} {
			if s.Contrast("adg", name) != want {
				t.Errorf("contrast %s", name)
			}
		}
		for rule, want := range map[string]bool{"humane endpoint reached": true, "outlier": false} {
			if s.Rule(rule) != want {
				t.Errorf("rule %s", rule)
			}
		}
		if !s.Trend(3) || s.Trend(4) {
			t.Error("trends")
		}
	}
	x.m["protocol.toml"].Data = []byte(now)
	s, _ := x.read()
	check(s)
	// Sealed again with data in hand, it is planned no more than before.
	x.seal(Entry{On: on(4, 28), Data: folder.Hash([]byte("data"))})
	s, _ = x.read()
	check(s)
	// Sealed again before the data, it is.
	x = newTrial(t, base)
	x.seal(Entry{On: on(2, 20)})
	x.m["protocol.toml"].Data = []byte(now)
	x.seal(Entry{On: on(2, 22)})
	s, _ = x.read()
	if !s.Response("backfat").Planned() || !s.Response("intake").Planned() || !s.Contrast("adg", "high v. low") || !s.Rule("outlier") || !s.Trend(4) {
		t.Error("what the second seal holds was planned")
	}
	// Without a seal the protocol is taken at its word.
	s = nil
	if !s.Response("backfat").Planned() || !s.Contrast("adg", "high v. low") || !s.Rule("outlier") || !s.Trend(9) {
		t.Error("a trial without seal has nothing planned")
	}
}

// TestSealOfOlderProgram reads a plan that was sealed when the format had fewer keys.
func TestSealOfOlderProgram(t *testing.T) {
	x := newTrial(t, base)
	plan, err := x.protocol().CanonicalPlan()
	if err != nil {
		t.Fatal(err)
	}
	older := bytes.Replace(plan, []byte(`"df_method":"kenward-roger",`), nil, 1)
	if len(older) == len(plan) {
		t.Fatal("the plan has no df_method")
	}
	e := Entry{Number: 1, On: on(2, 20), Plan: older, SHA256: folder.Hash(older)}
	x.m[File] = &fstest.MapFile{Data: e.bytes(nil)}
	s, said := x.read()
	if said != nil || !s.Response("adg").Planned() {
		t.Errorf("a new default is a difference: %q", said)
	}
	x.m["protocol.toml"].Data = []byte(edit(t, base, "[analysis]\n", "[analysis]\ndf_method = \"satterthwaite\"\n"))
	if s, said = x.read(); len(said) != 1 || s.Response("adg").Planned() {
		t.Errorf("a new key that is stated is none: %q", said)
	}
}

func TestNames(t *testing.T) {
	tests := []struct {
		text, name string
		want       bool
	}{
		{"Five pens in each block", "pen", true},
		{"Penelope joins", "pen", false},
		{"initial mass as a covariate", "initial_mass", true},
		{"mass, initial", "initial_mass", false},
		{"Exclusion rules: one more", "exclusion rule", true},
		{"contrast ‘high v. low’ added", "high v. low", true},
		{"of +", "+", false},
		{"+", "+", true},
		{"anything", "", false},
		{"", "pen", false},
	}
	for _, test := range tests {
		if got := names(words(test.text), test.name); got != test.want {
			t.Errorf("%q names %q: %v", test.text, test.name, got)
		}
	}
}

// TestExamples runs the example of each code: a record, or what was added to a protocol
// that was sealed on the day in its first line.
func TestExamples(t *testing.T) {
	const plain = "protocol = 1\n[trial]\ncode = \"HM-1\"\ntitle = \"Small\"\nobjective = \"Which diet?\"\n[[factor]]\nname = \"diet\"\nlevels = [\"A\", \"B\"]\n" +
		"[[unit]]\nname = \"pen\"\ncount = 8\nreceives = [\"diet\"]\n"
	for _, c := range Codes() {
		var list diag.List
		x := newTrial(t, plain)
		if date, rest, ok := strings.Cut(strings.TrimPrefix(c.Example, "# sealed on "), "\n"); ok && date != "[[seal]]" {
			var day protocol.Date
			if _, err := fmt.Sscanf(date, "%d-%d-%d", &day.Year, &day.Month, &day.Day); err != nil {
				t.Fatal(c.Code, err)
			}
			with := plain + rest
			if keys, of := strings.CutPrefix(rest, "[trial]\n"); of {
				with = strings.Replace(plain, "[trial]\n", "[trial]\n"+keys+"\n", 1)
				x = newTrial(t, with)
			}
			x.seal(Entry{On: day})
			x.m["protocol.toml"].Data = []byte(with)
			_, list = Read(x.files(), x.protocol())
		} else {
			x.m[File] = &fstest.MapFile{Data: []byte(c.Example)}
			_, list = Read(x.files(), x.protocol())
		}
		if len(list) == 0 || list[0].Code != c.Code {
			t.Errorf("the example of %s brings about %v:\n%s", c.Code, list, c.Example)
		}
	}
}

func FuzzRead(f *testing.F) {
	x := newTrial(f, base)
	x.seal(Entry{By: "Ansa Verrill", On: on(2, 20)})
	f.Add(string(x.m[File].Data))
	f.Add("[[seal]]\nnumber = 1\nplan = '''{\"protocol\":1,\"unit\":{\"a\":[[]]}}'''\nsha256 = \"\"\nabove = \"\"\n")
	p := load(f, base)
	f.Fuzz(func(t *testing.T, text string) {
		x := trial{t: t, m: fstest.MapFS{File: {Data: []byte(text)}}}
		_, list := Read(x.files(), p)
		for _, d := range list {
			if d.Message == "" || d.Pos.File == File && d.Pos.Line > strings.Count(text, "\n")+1 {
				t.Errorf("%+v", d)
			}
		}
	})
}

// TestAnyPlan compares a plan with what is left of it after parts were replaced by JSON
// of any kind, as somebody might who makes up a record.
func TestAnyPlan(t *testing.T) {
	p := load(t, base)
	text, err := p.CanonicalPlan()
	if err != nil {
		t.Fatal(err)
	}
	mine, err := parsePlan(text)
	if err != nil {
		t.Fatal(err)
	}
	random := rand.New(rand.NewPCG(7, 7))
	odd := []any{nil, true, 1.5, "", "x y", []any{}, []any{[]any{}}, []any{map[string]any{}}, map[string]any{}, map[string]any{"name": []any{}}, []any{"a b", 1.0}}
	var spoil func(v any, path string) any
	spoil = func(v any, path string) any {
		if path != "" && path != ".protocol" && random.IntN(12) == 0 {
			return odd[random.IntN(len(odd))]
		}
		switch v := v.(type) {
		case map[string]any:
			out := map[string]any{}
			for _, k := range slices.Sorted(maps.Keys(v)) {
				out[k] = spoil(v[k], path+"."+k)
			}
			return out
		case []any:
			var out []any
			for _, x := range v {
				out = append(out, spoil(x, path))
			}
			return out
		}
		return v
	}
	for range 1000 {
		other, _ := spoil(mine, "").(map[string]any)
		use(t, p, mine, other)
	}
}

// use asks all that can be asked of two plans.
func use(t *testing.T, p *protocol.Protocol, mine, other map[string]any) {
	t.Helper()
	for _, found := range [][]Difference{compare(mine, other), compare(other, mine)} {
		s := &Seal{p: p, before: &Entry{plan: other}, present: mine, against: found}
		s.Response("adg")
		s.Contrast("adg", "yeast v. none")
		s.Rule("outlier")
		s.Trend(3)
		for i := range found {
			if found[i].String() == "" || found[i].What == "" {
				t.Errorf("a difference has no words: %+v", found[i])
			}
			p.ValuePos(found[i].Key)
			covers([]amendment{{on: on(3, 1), words: words("pen")}}, on(2, 1), &found[i])
		}
	}
}

// FuzzCompare compares a plan with any other JSON.
func FuzzCompare(f *testing.F) {
	p := load(f, base)
	plan, err := p.CanonicalPlan()
	if err != nil {
		f.Fatal(err)
	}
	f.Add(string(plan))
	f.Add(`{"protocol":1,"covariate":{"slopes":1},"factor":[{"levels":[[],{}]}],"unit":[3],"eligibility":[],"carryover":[{}],"person":[{"name":{}}]}`)
	f.Fuzz(func(t *testing.T, text string) {
		other, err := parsePlan([]byte(text))
		if err != nil {
			return
		}
		mine, err := parsePlan(plan)
		if err != nil {
			t.Fatal(err)
		}
		use(t, p, mine, other)
	})
}
