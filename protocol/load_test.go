package protocol_test

import (
	"bytes"
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
	"penwright/protocol/diag"
)

// one loads a file alone in its folder.
func one(source string) (*protocol.Protocol, diag.List) {
	return protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(source)}}, "protocol.toml")
}

const small = `protocol = 1

[trial]
code = "HM-26-014"
title = "Dried yeast"
objective = "Does gain rise?"

[[factor]]
name = "yeast"
levels = [0, 20]

[[unit]]
name = "feed_pen"
count = 8
receives = ["yeast"]
`

func text(list diag.List) string {
	var b strings.Builder
	diag.Text{}.Write(&b, list)
	return b.String()
}

func TestValid(t *testing.T) {
	folders, err := filepath.Glob("testdata/*/protocol.toml")
	if err != nil || len(folders) < 4 {
		t.Fatal(len(folders), err)
	}
	for _, path := range folders {
		_, list := protocol.Load(os.DirFS(filepath.Dir(path)), "protocol.toml")
		if len(list) > 0 {
			t.Errorf("%s:\n%s", path, text(list))
		}
	}
}

func TestDefaults(t *testing.T) {
	p, list := one(small + "[[response]]\nname = \"daily_gain\"\nkind = \"continuous\"\n[data]\nfile = \"data.csv\"\n")
	if len(list) > 0 {
		t.Fatal(text(list))
	}
	a := protocol.Analysis{Alpha: 0.05, Comparison: "tukey", Side: "two", Pairs: "slices", Letters: "auto", Trend: 3,
		Interactions: -1, Blocks: "auto", Adjustment: "auto", DFMethod: "kenward-roger", Components: "auto", Limits: "wald",
		RandomizationTest: 9999, ErrorDFMin: 10}
	if !reflect.DeepEqual(p.Analysis, a) {
		t.Errorf("analysis: %+v", p.Analysis)
	}
	if want := (protocol.Report{Template: "audit", Paper: "A4", Decimals: "auto"}); !reflect.DeepEqual(p.Report, want) {
		t.Errorf("report: %+v", p.Report)
	}
	if want := (protocol.Randomization{Candidates: 1}); !reflect.DeepEqual(p.Randomization, want) {
		t.Errorf("randomization: %+v", p.Randomization)
	}
	if want := []string{"", "NA", "."}; !slices.Equal(p.Data.Missing, want) || p.Data.Delimiter != "auto" || p.Data.Decimal != "auto" {
		t.Errorf("data: %+v", p.Data)
	}
	r := p.Response("daily_gain")
	if r.Role != "primary" || r.Method != "auto" || r.Transform != "none" || r.Label != "daily gain" || r.Comparison != "" {
		t.Errorf("response: %+v", r)
	}
	if u := p.Unit("feed_pen"); u.Label != "feed pen" || u.Numbered != "within" || !slices.Equal(u.Count, []int{8}) {
		t.Errorf("unit: %+v", u)
	}
	if p.Format != 1 || p.File != "protocol.toml" || p.Factor("yeast").Label != "yeast" {
		t.Errorf("%+v", p)
	}

	p, _ = one(small + "[blinding]\nconduct = \"masked\"\n[sample_size]\nbasis = \"power\"\ndifference = 60\nsd = 24\n[data]\nfile = \"data.csv\"\nmissing = []\n" +
		"[[response]]\nname = \"a\"\nkind = \"count\"\n[[response]]\nname = \"b\"\nkind = \"count\"\nrole = \"primary\"\n[analysis.dose_response]\nfactor = \"yeast\"\n")
	if !p.Randomization.Codes {
		t.Error("a masked trial has no codes")
	}
	if s := p.SampleSize; *s.Power != 0.8 || s.Sides != 2 {
		t.Errorf("sample size: %+v", s)
	}
	if p.Responses[0].Role != "secondary" || p.Responses[1].Role != "primary" {
		t.Errorf("roles: %q %q", p.Responses[0].Role, p.Responses[1].Role)
	}
	if p.Data.Missing == nil || len(p.Data.Missing) != 0 {
		t.Errorf("missing: %q", p.Data.Missing)
	}
	if len(p.Analysis.DoseResponse.Models) != 6 {
		t.Errorf("models: %q", p.Analysis.DoseResponse.Models)
	}
}

func TestValues(t *testing.T) {
	p, list := protocol.Load(os.DirFS("testdata/barrows"), "protocol.toml")
	if len(list) > 0 {
		t.Fatal(text(list))
	}
	yes := true
	check := func(what string, got, want any) {
		t.Helper()
		if !reflect.DeepEqual(got, want) {
			t.Errorf("%s: got %+v, want %+v", what, got, want)
		}
	}
	check("background", p.Trial.Background, protocol.Text{File: "background.md", Body: "Dried yeast is a source of protein that the farm makes itself.\n"})
	check("start", p.Trial.Start, protocol.Date{Year: 2026, Month: 3, Day: 2})
	check("persons", p.Persons[1], protocol.Person{Name: "Bram Oakley", Role: "veterinarian"})
	check("food chain", p.Animals.FoodChain, &yes)
	check("mass", p.Animals.Mass, &protocol.Quantity{From: 24, To: 28, Unit: "kg"})
	check("mass at the end", p.Animals.MassEnd, &protocol.Quantity{From: 75, To: 75, Unit: "kg"})
	check("monitoring", p.Welfare.Monitoring, protocol.Monitoring{TimesPerDay: 2, By: "trained stockperson"})
	check("procedure", p.Welfare.Procedures[0].Every, &protocol.Quantity{From: 14, To: 14, Unit: "d"})
	check("factor", p.Factors[0], protocol.Factor{Name: "yeast", Label: "Dried yeast", Unit: "g/kg", Levels: []string{"0", "20", "40", "60"},
		Values: []float64{0, 20, 40, 60}, Control: []string{"0"}, Describe: []protocol.Described{{Level: "0", Text: "basal diet"}, {Level: "20", Text: "third of the greatest dose"}}})
	check("sex", p.Factors[1], protocol.Factor{Name: "sex", Label: "sex", Levels: []string{"barrow", "gilt"}, Random: true})
	check("block", p.Units[0], protocol.Unit{Name: "block", Label: "Mass block", Count: []int{5}, Numbered: "within", Basis: "initial body mass", Random: &yes})
	check("pen", p.Units[1], protocol.Unit{Name: "pen", Label: "pen", Within: "block", Count: []int{4}, Numbered: "through", Receives: []string{"yeast"},
		Carries: []string{"sex"}, Animals: []int{6}, Replicates: []protocol.Replicate{{Level: "0", N: 1}, {Level: "20", N: 1}, {Level: "40", N: 1}, {Level: "60", N: 1}}})
	check("roster", p.Roster, &protocol.Roster{File: "roster.csv", BlockBy: "initial_mass"})
	check("seed", p.Randomization.Seed, "HM-26-014/1")
	check("sd", p.SampleSize.SD, []protocol.StratumValue{{Value: 24}})
	check("range", p.Responses[0].Range, &[2]float64{200, 1500})
	check("decimals", *p.Responses[0].Decimals, 1)
	check("contrasts", p.Responses[0].Contrasts, []protocol.Contrast{{Name: "most v. none", Factor: "yeast", Weights: []protocol.Weight{{Level: "60", Value: 1}, {Level: "0", Value: -1}}}})
	check("where", p.Responses[1].Where, []protocol.Condition{{Column: "phase", Value: "grower"}, {Column: "pen", Value: "3"}})
	check("times", p.Repeated[0].At, []string{"2", "4", "6", "8"})
	check("time values", p.Repeated[0].Values, []float64{2, 4, 6, 8})
	check("tendency", p.Analysis.Tendency, 0.1)
	check("contrast", p.Analysis.Contrasts[0].Weights, []protocol.Weight{{Level: "0", Value: -3}, {Level: "20", Value: 1}, {Level: "40", Value: 1}, {Level: "60", Value: 1}})
	check("columns", p.Data.Columns, []protocol.ColumnName{{Name: "pen", Heading: "Pen no."}, {Name: "n_alive", Heading: "Alive"}})
	check("confirmed", p.Data.Confirmed[0].Unit, protocol.UnitName{{Unit: "block", Name: "3"}, {Unit: "pen", Name: "11"}})
	check("at", p.Data.Confirmed[0].At, "4")
	check("correction", p.Corrections[0].Old, "77.5")
	check("exclusion", p.Exclusions[0].BeforeUnblinding, &yes)
	check("given", p.Events[1].Given, "20")
	check("narrative", p.Report.Narrative, []protocol.NarrativePart{{Place: "introduction", File: "introduction.md"}, {Place: "discussion", File: "discussion.md"}})
	check("texts", len(p.Texts), 3)

	p, _ = protocol.Load(os.DirFS("testdata/cows"), "protocol.toml")
	check("labels", p.Units[0].Labels, [][]string{{"Ada", "Bo", "17", "Dot"}})
	check("sequences", p.CarryOver.Sequences, [][]string{{"A", "B", "A"}, {"B", "A", "B"}})
	check("interactions", p.Analysis.Interactions, 1)
	check("letters", p.Analysis.Letters, "true")
	check("report", p.Report, protocol.Report{Template: "house.md", Paper: "letter", Decimals: "2"})
	check("crossing unit", p.Units[2].Count, []int(nil))

	p, _ = protocol.Load(os.DirFS("testdata/field"), "protocol.toml")
	check("labels of each parent", p.Units[1].Labels, [][]string{{"a", "b"}, {"c", "d"}})
	check("levels", p.Factors[1].Levels, []string{"0", "0.2", "0.4"})
	check("counts", p.Units[2].Count, []int{3, 3})
	check("longitude", *p.Site.Longitude, -3.0)
	check("no animals", p.Animals, (*protocol.Animals)(nil))

	p, _ = protocol.Load(os.DirFS("testdata/lines"), "protocol.toml")
	check("treatments", p.Treatments[2], protocol.Treatment{Code: "101"})
	check("animals", p.Units[1].Animals, []int{1, 2, 1, 1, 2, 1})
	check("sd by stratum", p.SampleSize.SD, []protocol.StratumValue{{Stratum: "plot", Value: 0.3}, {Stratum: "animal", Value: 0.6}})
}

func TestLevelText(t *testing.T) {
	for literal, want := range map[string]string{
		"0.0": "0", "-0.0": "0", "20": "20", "20.0": "20", "0.20": "0.2", "1e3": "1000", "1e-3": "0.001", "0x10": "16",
		"1_000": "1000", "0.1": "0.1", "-1.50": "-1.5", "9007199254740993": "9007199254740993", "1e22": "10000000000000000000000",
	} {
		p, list := one(strings.Replace(small, "levels = [0, 20]", "levels = ["+literal+", 12345.5]", 1))
		if len(list) > 0 || p.Factors[0].Levels[0] != want {
			t.Errorf("%s: got %q, want %q\n%s", literal, p.Factors[0].Levels, want, text(list))
		}
	}
}

func TestPositions(t *testing.T) {
	p, list := protocol.Load(os.DirFS("testdata/barrows"), "protocol.toml")
	if list.HasErrors() {
		t.Fatal(text(list))
	}
	lines := strings.Split(string(p.Source), "\n")
	tests := []struct {
		key        string
		given      bool
		key1, val1 string // what stands there
	}{
		{"trial", true, "trial]", "[trial]"},
		{"trial.code", true, "code  ", `"HM-26-014"`},
		{"trial.hypotheses[0]", true, `"Daily`, `"Daily`},
		{"unit[1].count", true, "count = 4", "4"},
		{"unit[1].label", false, "unit]]", "unit]]"},
		{"unit[7].label", false, "unit]]", "unit]]"},
		{`analysis.contrast[0].weights."20"`, true, `"20" = 1`, "1,"},
		{"analysis.alpha", true, "alpha ", "0.05"},
		{"animals.mass.to", true, "to = 28.0", "28.0"},
	}
	for _, test := range tests {
		if p.Given(test.key) != test.given {
			t.Errorf("%s: given %t", test.key, !test.given)
		}
		for _, at := range []struct {
			pos  diag.Pos
			want string
		}{{p.Pos(test.key), test.key1}, {p.ValuePos(test.key), test.val1}} {
			if got := lines[at.pos.Line-1][at.pos.Col-1:]; !strings.HasPrefix(got, at.want) {
				t.Errorf("%s: %v is at %q, want %q", test.key, at.pos, got, at.want)
			}
		}
	}
	if pos := p.Pos("nothing.at.all"); pos != (diag.Pos{File: "protocol.toml"}) || p.Given("nothing") {
		t.Errorf("a key of no table is at %v", pos)
	}
	if (&protocol.Protocol{File: "f"}).Pos("a") != (diag.Pos{File: "f"}) {
		t.Error("a protocol that was not loaded has positions")
	}
}

// TestEncodings reads the forms in which editors save text.
func TestEncodings(t *testing.T) {
	for _, source := range []string{"\ufeff" + small, strings.ReplaceAll(small, "\n", "\r\n"), strings.TrimSuffix(small, "\n")} {
		p, list := one(source)
		if len(list) > 0 || string(p.Source) != source {
			t.Errorf("%.20q: %s", source, text(list))
		}
		if pos := p.Pos("protocol"); pos.Line != 1 || pos.Col != 1 {
			t.Errorf("%.20q: the first key is at %v", source, pos)
		}
	}
	p, list := one("\xff\xfep\x00r\x00")
	if p != nil || len(list) != 1 || list[0].Code != protocol.Syntax {
		t.Errorf("UTF-16: %s", text(list))
	}
}

func TestUnreadable(t *testing.T) {
	large := bytes.Repeat([]byte("#\n"), 32<<20+1)
	folder := fstest.MapFS{
		"protocol.toml": {Data: []byte(strings.Replace(small, `objective = "Does gain rise?"`, `objective = { file = "long.md" }`, 1))},
		"long.md":       {Data: large[:1<<20+1]},
		"large.toml":    {Data: large},
		"folder/x":      {Data: nil},
	}
	for path, want := range map[string]string{
		"absent.toml":    "absent.toml: error: the protocol file does not exist [unreadable]\n",
		"folder":         "folder: error: the protocol file is a folder [unreadable]\n",
		"large.toml":     "large.toml: error: the protocol file is larger than 64 MiB [too-many]\n",
		"protocol.toml":  "protocol.toml:6:22: error: trial.objective.file: the file \"long.md\" is larger than 1 MiB [too-many]\n",
		"folder/x/y/z.t": "folder/x/y/z.t: error: the protocol file does not exist [unreadable]\n",
	} {
		p, list := protocol.Load(folder, path)
		if got := text(list); got != want {
			t.Errorf("%s: got %swant %s", path, got, want)
		}
		if (p == nil) != (path != "protocol.toml") {
			t.Errorf("%s: protocol %v", path, p)
		}
	}
	if _, list := protocol.Load(brokenFS{}, "protocol.toml"); text(list) != "protocol.toml: error: the protocol file cannot be read: the disk is gone [unreadable]\n" {
		t.Error(text(list))
	}
}

// brokenFS fails while reading.
type brokenFS struct{}

func (brokenFS) Open(name string) (fs.File, error) { return brokenFile{}, nil }

type brokenFile struct{ fs.File }

func (brokenFile) Stat() (fs.FileInfo, error) { return fs.Stat(fstest.MapFS{"f": {}}, "f") }
func (brokenFile) Read([]byte) (int, error)   { return 0, fmt.Errorf("the disk is gone") }
func (brokenFile) Close() error               { return nil }

var _ io.Reader = brokenFile{}

// TestManyFaults checks that the number of faults is bounded, and that the rest is
// counted.
func TestManyFaults(t *testing.T) {
	var b strings.Builder
	b.WriteString(small + "[analysis]\n")
	for i := range 5000 {
		fmt.Fprintf(&b, "k%d = 1\n", i)
	}
	_, list := one(b.String())
	if len(list) != 1001 || !strings.Contains(list[0].Message, "4000 more faults") {
		t.Errorf("%d faults, first %s", len(list), list[0].Message)
	}
	if !slices.IsSortedFunc(list, func(a, b diag.Diagnostic) int { return a.Pos.Line - b.Pos.Line }) {
		t.Error("the faults are not sorted")
	}
}

// TestCodes runs the example of every code and looks whether it brings the code
// about, and whether the list of codes says what the comments say.
func TestCodes(t *testing.T) {
	file, err := parser.ParseFile(token.NewFileSet(), "codes.go", nil, parser.ParseComments)
	if err != nil {
		t.Fatal(err)
	}
	described := protocol.Codes()
	n := 0
	for _, decl := range file.Decls {
		g, ok := decl.(*ast.GenDecl)
		if !ok || g.Tok != token.CONST {
			continue
		}
		for _, spec := range g.Specs {
			v := spec.(*ast.ValueSpec)
			name, code := v.Names[0].Name, strings.Trim(v.Values[0].(*ast.BasicLit).Value, `"`)
			if n >= len(described) || described[n].Code != code {
				t.Fatalf("%s is not number %d of the list of codes", name, n)
			}
			first, example, ok := strings.Cut(v.Doc.Text(), "\n\nExample:\n\n")
			if want := name + ": " + described[n].Text + "."; !ok || strings.ReplaceAll(first, "\n", " ") != want {
				t.Errorf("the comment of %s is %q, want %q and an example", name, first, want)
			}
			n++
			source := strings.ReplaceAll("\n"+example, "\n\t", "\n")
			path := "protocol.toml"
			if rest, ok := strings.CutPrefix(source, "\nfile: "); ok {
				path, source = strings.TrimSpace(rest), ""
			} else if !strings.Contains(source, "protocol =") {
				source = "protocol = 1\n" + source
			}
			_, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(source)}}, path)
			if !slices.ContainsFunc(list, func(d diag.Diagnostic) bool { return d.Code == code }) {
				t.Errorf("the example of %s gives\n%s", name, text(list))
			}
		}
	}
	if n != len(described) {
		t.Errorf("%d codes are described, %d exist", len(described), n)
	}
}

// TestSyntaxSuite loads the invalid documents of the test suite of TOML itself,
// which comes with the library: each is refused in our own words, at a place inside.
func TestSyntaxSuite(t *testing.T) {
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}", "github.com/BurntSushi/toml").Output()
	if err != nil {
		t.Skip("the library's folder cannot be found:", err)
	}
	root := filepath.Join(strings.TrimSpace(string(out)), "internal", "toml-test", "tests", "invalid")
	n := 0
	filepath.WalkDir(root, func(path string, e fs.DirEntry, err error) error {
		if err != nil || filepath.Ext(path) != ".toml" {
			return nil
		}
		source, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		p, list := one(string(source))
		n++
		for _, d := range list {
			if p == nil && strings.Contains(d.Message, "this is not valid TOML") {
				t.Errorf("%s: %s", filepath.Base(path), d.Message)
			}
			wellFormed(t, d, string(source))
		}
		if len(list) == 0 {
			t.Errorf("%s is taken for a protocol", path)
		}
		return nil
	})
	if n == 0 {
		t.Skip("the suite does not come with the library")
	}
}

func BenchmarkLoad(b *testing.B) {
	folder := os.DirFS("testdata/barrows")
	for b.Loop() {
		if _, list := protocol.Load(folder, "protocol.toml"); len(list) > 0 {
			b.Fatal(text(list))
		}
	}
}

func FuzzLoad(f *testing.F) {
	seeds, _ := filepath.Glob(invalid + "/*.toml")
	valid, _ := filepath.Glob("testdata/*/protocol.toml")
	for _, path := range append(seeds, valid...) {
		source, err := os.ReadFile(path)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(string(source))
	}
	f.Fuzz(func(t *testing.T, source string) {
		folder := fstest.MapFS{"protocol.toml": {Data: []byte(source)}, "introduction.md": {Data: []byte("Pigs grow.\n")}}
		p, list := protocol.Load(folder, "protocol.toml")
		for _, d := range list {
			wellFormed(t, d, source)
		}
		show := func(string) []byte { return []byte(source) }
		for _, write := range []func(io.Writer) error{
			func(w io.Writer) error { return diag.Text{Source: show, Color: true, Keep: 5}.Write(w, list) },
			func(w io.Writer) error { return diag.WriteJSON(w, list) },
			func(w io.Writer) error { return diag.SARIF{Tool: "penwright", Source: show}.Write(w, list) },
		} {
			if err := write(io.Discard); err != nil {
				t.Error(err)
			}
		}
		if p == nil && !list.HasErrors() {
			t.Error("nothing is loaded and nothing is said")
		}
	})
}
