package protocol

import (
	"encoding/json"
	"fmt"
	"io/fs"
	"maps"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
	"testing/fstest"
)

// TestNumbersOfRFC8785 has the samples of its appendix B (from memory).
func TestNumbersOfRFC8785(t *testing.T) {
	tests := []struct {
		bits uint64
		want string // empty: an error
	}{
		{0x0000000000000000, "0"},
		{0x8000000000000000, "0"},
		{0x0000000000000001, "5e-324"},
		{0x8000000000000001, "-5e-324"},
		{0x7fefffffffffffff, "1.7976931348623157e+308"},
		{0xffefffffffffffff, "-1.7976931348623157e+308"},
		{0x4340000000000000, "9007199254740992"},
		{0xc340000000000000, "-9007199254740992"},
		{0x4430000000000000, "295147905179352830000"},
		{0x7fffffffffffffff, ""},
		{0x7ff0000000000000, ""},
		{0x44b52d02c7e14af5, "9.999999999999997e+22"},
		{0x44b52d02c7e14af6, "1e+23"},
		{0x44b52d02c7e14af7, "1.0000000000000001e+23"},
		{0x444b1ae4d6e2ef4e, "999999999999999700000"},
		{0x444b1ae4d6e2ef4f, "999999999999999900000"},
		{0x444b1ae4d6e2ef50, "1e+21"},
		{0x3eb0c6f7a0b5ed8c, "9.999999999999997e-7"},
		{0x3eb0c6f7a0b5ed8d, "0.000001"},
		{0x41b3de4355555553, "333333333.3333332"},
		{0x41b3de4355555554, "333333333.33333325"},
		{0x41b3de4355555555, "333333333.3333333"},
		{0x41b3de4355555556, "333333333.3333334"},
		{0x41b3de4355555557, "333333333.33333343"},
		{0xbecbf647612f3696, "-0.0000033333333333333333"},
		{0x43143ff3c1cb0959, "1424953923781206.2"},
	}
	for _, test := range tests {
		got, err := es6(math.Float64frombits(test.bits))
		if got != test.want || (err != nil) != (test.want == "") {
			t.Errorf("%016x is %q, %v, want %q", test.bits, got, err, test.want)
		}
	}
	// What is printed is the number, and no shorter text is: by the reader of JSON.
	random := rand.New(rand.NewPCG(1, 2))
	for range 20_000 {
		x := math.Float64frombits(random.Uint64())
		s, err := es6(x)
		if err != nil {
			continue
		}
		var back float64
		if err := json.Unmarshal([]byte(s), &back); err != nil || back != x {
			t.Fatalf("%v was printed as %s, read back as %v, %v", x, s, back, err)
		}
	}
}

// TestTextsOfRFC8785 has the examples of its sections 3.2.2 and 3.2.3.
func TestTextsOfRFC8785(t *testing.T) {
	tests := []struct{ name, in, want string }{
		{
			"3.2.2",
			`{"numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
			  "string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/", "literals": [null, true, false]}`,
			`{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],"string":"€$\u000f\nA'B\"\\\\\"/"}`,
		},
		{
			"3.2.3",
			`{"\u20ac": "Euro Sign", "\r": "Carriage Return", "\ufb33": "Hebrew Letter Dalet With Dagesh", "1": "One",
			  "\ud83d\ude00": "Emoji: Grinning Face", "\u0080": "Control", "\u00f6": "Latin Small Letter O With Diaeresis"}`,
			`{"\r":"Carriage Return","1":"One","` + "\u0080" + `":"Control","ö":"Latin Small Letter O With Diaeresis",` +
				`"€":"Euro Sign","😀":"Emoji: Grinning Face","` + "\ufb33" + `":"Hebrew Letter Dalet With Dagesh"}`,
		},
		{"no escapes of HTML", `"<a href='x'>&\u2028\u007f</a>"`, "\"<a href='x'>&\u2028\u007f</a>\""},
	}
	for _, test := range tests {
		var v any
		if err := json.Unmarshal([]byte(test.in), &v); err != nil {
			t.Fatal(err)
		}
		got, err := encode(v)
		if err != nil || string(got) != test.want {
			t.Errorf("%s: %s, %v\nwant %s", test.name, got, err, test.want)
		}
		var back any
		if err := json.Unmarshal(got, &back); err != nil || fmt.Sprint(back) != fmt.Sprint(v) {
			t.Errorf("%s: read back as %v", test.name, back)
		}
	}
	if _, err := encode(map[string]any{"\xff": true}); err == nil {
		t.Error("a name that is not UTF-8 was written")
	}
	if _, err := encode([]any{math.Inf(1)}); err == nil {
		t.Error("an infinite number was written")
	}
}

// canonicalTrials are valid trials that state every key of the format between them.
func canonicalTrials(t *testing.T) []string {
	t.Helper()
	var all []string
	for _, pattern := range []string{"testdata/*/protocol.toml", "../templates/demo/protocol.toml", "../testdata/trials/*/protocol.toml"} {
		files, err := filepath.Glob(pattern)
		if err != nil || len(files) == 0 {
			t.Fatal(pattern, err)
		}
		all = append(all, files...)
	}
	return all
}

func canonical(t *testing.T, fsys fs.FS) (*Protocol, string) {
	t.Helper()
	p, list := Load(fsys, "protocol.toml")
	if list.HasErrors() {
		t.Fatal(list)
	}
	b, err := p.Canonical()
	if err != nil {
		t.Fatal(err)
	}
	return p, string(b)
}

// over is a file system whose protocol is another one.
type over struct {
	fs.FS
	protocol string
}

func (o over) Open(name string) (fs.File, error) {
	if name == "protocol.toml" {
		return fstest.MapFS{name: {Data: []byte(o.protocol)}}.Open(name)
	}
	return o.FS.Open(name)
}

// rareKeys states what the other trials leave empty.
const rareKeys = `protocol = 1
[trial]
code = "HM-2"
title = "Rare"
objective = "What pays?"
[[person]]
name = "Ansa Verrill"
orcid = "0000-0002-1825-0097"
[[factor]]
name = "additive"
levels = ["a1", "a2"]
[[factor]]
name = "dose"
levels = [1, 2]
[[treatment]]
code = "none"
control = true
[[treatment]]
code = "low"
levels = { additive = "a1", dose = 1 }
[[treatment]]
code = "high"
levels = { additive = "a2", dose = 2 }
[[unit]]
name = "cow"
count = 6
[[unit]]
name = "period"
count = 3
[[unit]]
name = "sample"
crosses = ["cow", "period"]
receives = ["treatment"]
[time_trend]
on = "cow"
along = "period"
sequences = [["none", "low", "high"], ["high", "low", "none"]]
[randomization]
method = "drawn by lot"
[[response]]
name = "milk"
kind = "continuous"
[data]
file = "data.csv"
date = "day"
`

// TestCanonicalSaysTheSame writes the canonical form as a protocol file again, which must
// be without fault and have the same canonical form: every key and every type is that
// of the format, and all that a decoded protocol holds is in it.
func TestCanonicalSaysTheSame(t *testing.T) {
	trials := map[string]fs.FS{"rare keys": fstest.MapFS{"protocol.toml": {Data: []byte(rareKeys)}}}
	for _, file := range canonicalTrials(t) {
		trials[file] = os.DirFS(filepath.Dir(file))
	}
	for _, file := range slices.Sorted(maps.Keys(trials)) {
		dir := trials[file]
		_, first := canonical(t, dir)
		text := asTOML(t, first)
		p, list := Load(over{dir, text}, "protocol.toml")
		if list.HasErrors() {
			t.Errorf("%s: %v\n%s", file, list, text)
			continue
		}
		second, err := p.Canonical()
		if err != nil || string(second) != first {
			t.Errorf("%s: %v\n%s\nbecame\n%s", file, err, first, second)
		}
	}
}

var isDate = regexp.MustCompile(`^\d{4}-\d{2}-\d{2}$`)

// asTOML writes JSON as TOML with inline tables.
func asTOML(t *testing.T, text string) string {
	t.Helper()
	var root map[string]any
	if err := json.Unmarshal([]byte(text), &root); err != nil {
		t.Fatal(err)
	}
	var b strings.Builder
	var write func(v any)
	quoted := func(s string) {
		q, err := json.Marshal(s)
		if err != nil {
			t.Fatal(err)
		}
		b.Write(q)
	}
	write = func(v any) {
		switch v := v.(type) {
		case string:
			if isDate.MatchString(v) {
				b.WriteString(v)
			} else {
				quoted(v)
			}
		case []any:
			b.WriteByte('[')
			for i, x := range v {
				if i > 0 {
					b.WriteString(", ")
				}
				write(x)
			}
			b.WriteByte(']')
		case map[string]any:
			b.WriteByte('{')
			for i, k := range slices.Sorted(maps.Keys(v)) {
				if i > 0 {
					b.WriteString(", ")
				}
				quoted(k)
				b.WriteString(" = ")
				write(v[k])
			}
			b.WriteByte('}')
		case float64:
			s, err := es6(v)
			if err != nil {
				t.Fatal(err)
			}
			b.WriteString(s)
		default:
			fmt.Fprint(&b, v)
		}
	}
	for _, k := range slices.Sorted(maps.Keys(root)) {
		b.WriteString(k + " = ")
		write(root[k])
		b.WriteByte('\n')
	}
	return b.String()
}

// TestCanonicalHasEveryKey compares the keys of the canonical form with those that are
// decoded.
func TestCanonicalHasEveryKey(t *testing.T) {
	seen := map[string]bool{}
	var walk func(path string, v any)
	walk = func(path string, v any) {
		switch v := v.(type) {
		case []any:
			for _, x := range v {
				walk(path, x)
			}
		case map[string]any:
			for k, x := range v {
				key := strings.TrimPrefix(path+"."+k, ".")
				seen[key] = true
				walk(key, x)
			}
		}
	}
	texts := []string{}
	for _, file := range canonicalTrials(t) {
		_, text := canonical(t, os.DirFS(filepath.Dir(file)))
		texts = append(texts, text)
	}
	_, text := canonical(t, fstest.MapFS{"protocol.toml": {Data: []byte(rareKeys)}})
	for _, text := range append(texts, text) {
		var v any
		if err := json.Unmarshal([]byte(text), &v); err != nil {
			t.Fatal(err)
		}
		walk("", v)
	}
	known := map[string]bool{}
	d := &decoder{p: &Protocol{}}
	for _, k := range d.keys() {
		key := strings.TrimPrefix(strings.Trim(k.table, "[]")+"."+k.key, ".")
		known[key] = true
		if !seen[key] {
			t.Errorf("no canonical form has the key %s", key)
		}
	}
	for _, key := range slices.Sorted(maps.Keys(seen)) {
		parent := key[:max(0, strings.LastIndexByte(key, '.'))]
		if !known[key] && !known[parent] { // below a key, names are the author's
			t.Errorf("%s is no key of the format", key)
		}
	}
	for _, key := range later {
		if !known[key] {
			t.Errorf("%s, which is not sealed, is no key of the format", key)
		}
	}
}

const smallTrial = `protocol = 1
[trial]
code = "HM-1"
title = "Small"
objective = "Which diet?"
[[factor]]
name = "diet"
levels = ["A", "B"]
[[unit]]
name = "pen"
count = 8
receives = ["diet"]
[[response]]
name = "gain"
kind = "continuous"
`

// TestCanonicalIsOfWhatIsSaid changes how things are written and not what they say.
func TestCanonicalIsOfWhatIsSaid(t *testing.T) {
	load := func(text string) (string, string) {
		p, all := canonical(t, fstest.MapFS{"protocol.toml": {Data: []byte(text)}, "why.md": {Data: []byte("Because.")}})
		plan, err := p.CanonicalPlan()
		if err != nil {
			t.Fatal(err)
		}
		return all, string(plan)
	}
	all, plan := load(smallTrial)
	same := []struct{ name, old, new string }{
		{"a comment and spaces", "count = 8", "count   = [8] # pens"},
		{"a default written out", "[[response]]", "[analysis]\nalpha = 0.05\ncomparison = \"tukey\"\ninteractions = \"auto\"\n[[response]]"},
		{"the label that serves anyway", "name = \"pen\"", "name = \"pen\"\nlabel = \"pen\""},
		{"the order of tables", "protocol = 1", "protocol = 1\nanalysis = { trend = 3 }"},
		{"an empty list", "[[factor]]", "hypotheses = []\n[[factor]]"},
	}
	for _, s := range same {
		if got, _ := load(strings.Replace(smallTrial, s.old, s.new, 1)); got != all {
			t.Errorf("%s: %s\nbecame %s", s.name, all, got)
		}
	}
	different := []struct{ name, old, new string }{
		{"a count", "count = 8", "count = 9"},
		{"the order of levels", `["A", "B"]`, `["B", "A"]`},
		{"levels as numbers", `["A", "B"]`, `[1, 2]`},
		{"no randomization test", "[[response]]", "[analysis]\nrandomization_test = 0\n[[response]]"},
		{"a start", "[[factor]]", "start = 2026-03-02\n[[factor]]"},
	}
	for _, s := range different {
		if _, got := load(strings.Replace(smallTrial, s.old, s.new, 1)); got == plan {
			t.Errorf("%s does not show in the plan", s.name)
		}
	}
	later := []struct{ name, old, new string }{
		{"the end", "[[factor]]", "end = 2026-03-02\ndata_access = \"on request\"\n[[factor]]"},
		{"the severity observed", "[[factor]]", "[approval]\nseverity_observed = \"mild\"\n[[factor]]"},
		{"data", "[[response]]", "[data]\nfile = \"data.csv\"\n[[response]]"},
		{"conduct", "[[response]]", "[[deviation]]\nwhat = \"late\"\n[[event]]\nkind = \"death\"\non = 2026-03-02\n[[exclusion]]\nunit = { pen = 1 }\nreason = \"lame\"\n[[response]]"},
		{"papers", "[[response]]", "[[amendment]]\nwhat = \"x\"\non = 2026-03-02\n[[signature]]\nwho = \"A\"\n[records]\nlocation = \"here\"\n[report]\ntemplate = \"chapter\"\n[[response]]"},
	}
	for _, s := range later {
		whole, got := load(strings.Replace(smallTrial, s.old, s.new, 1))
		if got != plan {
			t.Errorf("%s shows in the plan: %s", s.name, got)
		}
		if whole == all {
			t.Errorf("%s does not show in the protocol", s.name)
		}
	}
	// A text is its prose, wherever it stands.
	inline, _ := load(strings.Replace(smallTrial, "[[factor]]", "background = \"Because.\"\n[[factor]]", 1))
	file, _ := load(strings.Replace(smallTrial, "[[factor]]", "background = { file = \"why.md\" }\n[[factor]]", 1))
	if inline != file || inline == all {
		t.Errorf("%s\nbecame %s", inline, file)
	}
}
