package sound

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/txtar"

	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

// head and tail make a whole protocol of an example; what the example declares itself
// is left out.
const head = "protocol = 1\n[trial]\ncode = \"X\"\ntitle = \"X\"\nobjective = \"X\"\n"

var parts = []struct{ needs, text string }{
	{"[[factor]]", "[[factor]]\nname = \"diet\"\nlevels = [\"A\", \"B\"]\n"},
	{"[[unit]]", "[[unit]]\nname = \"pen\"\ncount = 24\nreceives = [\"diet\"]\n"},
	{"[[response]]", "[[response]]\nname = \"gain\"\nrole = \"primary\"\nkind = \"continuous\"\n"},
}

// open writes files into a folder and opens the trial.
func open(t *testing.T, files []txtar.File) (*trial.Trial, diag.List) {
	t.Helper()
	dir := t.TempDir()
	for _, f := range files {
		if err := os.WriteFile(filepath.Join(dir, f.Name), f.Data, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	f, err := folder.Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = f.Close() })
	return trial.Open(f)
}

// example opens the trial that an example of a code makes.
func example(t *testing.T, text string) (*trial.Trial, diag.List) {
	t.Helper()
	a := txtar.Parse([]byte(text + "\n"))
	protocol := head
	for _, p := range parts {
		if !strings.Contains(string(a.Comment), p.needs) {
			protocol += p.text
		}
	}
	return open(t, append([]txtar.File{{Name: "protocol.toml", Data: []byte(protocol + string(a.Comment))}}, a.Files...))
}

// The example of every code brings the code about, and as more than a pass.
func TestExamplesOfCodes(t *testing.T) {
	for _, info := range Codes() {
		t.Run(info.Code, func(t *testing.T) {
			if info.Example == "" || info.Text == "" || reason(info.Code) == "" {
				t.Fatalf("%+v lacks words", info)
			}
			tr, list := example(t, info.Example)
			if tr.Plan == nil || list.HasErrors() {
				t.Fatalf("the example is not sound: %v", list)
			}
			found := Check(tr)
			if !slices.ContainsFunc(found, func(f Finding) bool { return f.Code == info.Code && f.Level != Pass }) {
				t.Errorf("the example gives %+v", found)
			}
			for _, f := range found {
				if f.Message == "" || strings.HasSuffix(f.Message, ".") || strings.HasSuffix(f.Hint, ".") || f.Pos.File == "" || f.Pos.Line == 0 && f.Code != NoTrend {
					t.Errorf("%+v", f)
				}
			}
			for _, d := range List(found) {
				t.Logf("%s: %s: %s [%s]\n\thint: %s", d.Pos, d.Severity, d.Message, d.Code, d.Hint)
			}
		})
	}
}

// codesOf lists what is found at a level or above, without what is only passed.
func codesOf(found []Finding, least Level) []string {
	var out []string
	for _, f := range found {
		if f.Level >= least {
			out = append(out, f.Code)
		}
	}
	return out
}

// A sound trial gets few lines: the built-in one none at all.
func TestSoundTrialsAreQuiet(t *testing.T) {
	for _, test := range []struct {
		dir  string
		want []string
	}{
		{"../../templates/demo", nil},
		{"../../testdata/trials/split-plot", nil},
		{"../../testdata/trials/latin-square", []string{NoCarryOver}},
	} {
		f, err := folder.Open(test.dir)
		if err != nil {
			t.Fatal(err)
		}
		tr, _ := trial.Open(f)
		found := Check(tr)
		if got := codesOf(found, Note); !slices.Equal(got, test.want) {
			t.Errorf("%s: %v, want %v", test.dir, got, test.want)
		}
		if len(Results(found)) != len(found) || len(List(found)) != len(test.want) {
			t.Errorf("%s: %d findings, %d results, %d reported", test.dir, len(found), len(Results(found)), len(List(found)))
		}
		_ = f.Close() // it was only read
	}
}

// message finds the message of a code, "" where it was not found.
func message(found []Finding, code string) string {
	for _, f := range found {
		if f.Code == code {
			return f.Message
		}
	}
	return ""
}

const lines7 = "[[factor]]\nname = \"line\"\nlevels = [\"A\", \"B\", \"C\", \"D\", \"E\", \"F\", \"G\"]\n" +
	"[[unit]]\nname = \"block\"\ncount = 7\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 3\nreceives = [\"line\"]\n"

// The efficiency of a balanced incomplete block design is t(k−1)/(k(t−1)) (Yates 1936):
// 7/9 for seven treatments in blocks of three, before and after the draw.
func TestEfficiencyOfBalancedIncompleteBlocks(t *testing.T) {
	allotment := "-- allotment.csv --\nblock,plot,line\n"
	for b := range 7 {
		for k, d := range []int{0, 1, 3} { // the plane of seven points, a difference set modulo 7
			allotment += string(rune('1'+b)) + "," + string(rune('1'+k)) + "," + string(rune('A'+(b+d)%7)) + "\n"
		}
	}
	for _, text := range []string{lines7, lines7 + allotment} {
		tr, list := example(t, text)
		if list.HasErrors() {
			t.Fatal(list)
		}
		got := message(Check(tr), IncompleteBlocks)
		if !strings.Contains(got, " 0.78 of the information") || strings.Contains(got, "at most") != (tr.Allotment == nil) {
			t.Errorf("%s", got)
		}
	}
}

// Error degrees of freedom of Latin squares, (t−1)(t−2): 2, 6, 12 for sides 3, 4, 5; two
// squares of side 4 leave 15 with rows and columns of their own and 18 with common ones.
func TestSquares(t *testing.T) {
	for _, test := range []struct {
		levels string
		side   string
		want   string
		hint   string
	}{
		{`"A", "B", "C"`, "3", "a square of side 3 leaves the test of diet 2 error", "three such squares leave 10, or 14"},
		{`"A", "B", "C", "D"`, "4", "a square of side 4 leaves the test of diet 6 error", "two such squares leave 15, or 18"},
		{`"A", "B", "C", "D", "E"`, "5", "", ""},
	} {
		tr, list := example(t, "[[factor]]\nname = \"diet\"\nlevels = ["+test.levels+"]\n[[unit]]\nname = \"row\"\ncount = "+test.side+
			"\n[[unit]]\nname = \"column\"\ncount = "+test.side+"\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"diet\"]\n")
		if list.HasErrors() {
			t.Fatal(list)
		}
		found := Check(tr)
		if got := message(found, SmallSquare); !strings.HasPrefix(got, test.want) || (got == "") != (test.want == "") {
			t.Errorf("side %s: %q", test.side, got)
		}
		for _, f := range found {
			if f.Code == SmallSquare && !strings.HasPrefix(f.Hint, test.hint) {
				t.Errorf("side %s: %q", test.side, f.Hint)
			}
		}
	}
}

// A factorial of three factors at two levels in blocks of four, with the interaction of
// all three confounded (F. Yates, The Design and Analysis of Factorial Experiments,
// 1937; from memory): that term is named, and no other.
func TestConfoundedFactorial(t *testing.T) {
	text := ""
	for _, f := range []string{"nitrogen", "phosphate", "potash"} {
		text += "[[factor]]\nname = \"" + f + "\"\nlevels = [\"0\", \"1\"]\n"
	}
	text += "[[unit]]\nname = \"block\"\ncount = 6\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 4\nreceives = [\"nitrogen\", \"phosphate\", \"potash\"]\n-- allotment.csv --\nblock,plot,nitrogen,phosphate,potash\n"
	for b := range 6 {
		plot := 0
		for c := range 8 {
			if n, p, k := c>>2, c>>1&1, c&1; (n+p+k)%2 == b%2 {
				plot++
				text += strings.Join([]string{string(rune('1' + b)), string(rune('0' + plot)), string(rune('0' + n)), string(rune('0' + p)), string(rune('0' + k))}, ",") + "\n"
			}
		}
	}
	tr, list := example(t, text)
	if list.HasErrors() {
		t.Fatal(list)
	}
	var got []string
	for _, f := range Check(tr) {
		if f.Code == Confounded || f.Code == Aliased || f.Code == Disconnected {
			got = append(got, f.Message)
		}
	}
	if len(got) != 1 || !strings.HasPrefix(got[0], "nitrogen × phosphate × potash is confounded with differences between blocks") {
		t.Errorf("%q", got)
	}
}

// Half of the same factorial as listed treatments, with the product of all three
// constant: each main effect stands beside the interaction of the other two.
func TestFraction(t *testing.T) {
	text := ""
	for _, f := range []string{"acid", "base", "clay"} {
		text += "[[factor]]\nname = \"" + f + "\"\nlevels = [\"0\", \"1\"]\n"
	}
	for _, x := range []string{"001", "010", "100", "111"} {
		text += "[[treatment]]\ncode = \"t" + x + "\"\nlevels = { acid = \"" + x[:1] + "\", base = \"" + x[1:2] + "\", clay = \"" + x[2:] + "\" }\n"
	}
	text += "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"treatment\"]\n"
	tr, list := example(t, text)
	if list.HasErrors() {
		t.Fatal(list)
	}
	var got []string
	for _, f := range Check(tr) {
		if f.Code == Aliased {
			got = append(got, f.Level.String()+": "+f.Message)
		}
	}
	want := []string{"note: in the listed treatments acid cannot be told from base × clay: ", "note: in the listed treatments base cannot be told from acid × clay: ", "note: in the listed treatments clay cannot be told from acid × base: "}
	if !slices.EqualFunc(got, want, strings.HasPrefix) {
		t.Errorf("%q", got)
	}
}

// Columns that look like undeclared units, and others that do not.
func TestUndeclaredUnits(t *testing.T) {
	const head = "[[factor]]\nname = \"diet\"\nlevels = [\"A\", \"B\"]\n[[unit]]\nname = \"pig\"\ncount = 12\nreceives = [\"diet\"]\n" +
		"[data]\nfile = \"data.csv\"\n-- data.csv --\n"
	diet := "AAABBBAAABBB"
	for _, test := range []struct {
		name, heading, column string // one letter for each pig
		want                  bool
	}{
		{"pens of three", "pen", "112233445566", false}, // pigs of one pen have both diets
		{"pens treated whole", "pen", "111222333444", true},
		{"any name treated whole", "where", "111222333444", true},
		{"one room for each diet", "room", "111222111222", true},
		{"the diet by another name", "feed", "111222111222", false},
		{"sex", "sex", "mfmfmfmfmfmf", false},
		{"a pig's own number", "tag", "abcdefghijkl", false},
		{"remarks on some", "remark", "xxx---------", false},
		{"all alike", "barn", "111111111111", false},
	} {
		t.Run(test.name, func(t *testing.T) {
			text := head + "pig,diet," + test.heading + ",gain\n"
			for i := range 12 {
				text += strings.Join([]string{"" + string("  1  2  3  4  5  6  7  8  9 10 11 12"[3*i:3*i+3]), diet[i : i+1], strings.Trim(test.column[i:i+1], "-"), string(rune('1' + i%9))}, ",") + "\n"
			}
			tr, list := example(t, text)
			if list.HasErrors() {
				t.Fatal(list)
			}
			if got := message(Check(tr), UndeclaredUnit); (got != "") != test.want {
				t.Errorf("%q", got)
			}
		})
	}
}

// What opening a trial said stands among the results and is not reported twice.
func TestSaidBefore(t *testing.T) {
	tr, list := example(t, "[trial.x]\n")
	if !list.HasErrors() || tr.Plan != nil {
		t.Fatal("a fault went by")
	}
	tr, list = example(t, "[[response]]\nname = \"a\"\nkind = \"continuous\"\n[[response]]\nname = \"b\"\nkind = \"continuous\"\n")
	if list.HasErrors() {
		t.Fatal(list)
	}
	found := Check(tr)
	if !slices.Contains(codesOf(found, Note), "no-primary") || len(List(found)) != 0 {
		t.Errorf("%+v", found)
	}
}

// Published layouts and exact ones: every finding has a place inside a file that was
// read, and a factorial or split plot as allotted has nothing confounded.
func TestReferenceTrials(t *testing.T) {
	names, err := filepath.Glob("../../testdata/reference/*.txtar")
	if err != nil || len(names) == 0 {
		t.Fatal(names, err)
	}
	for _, name := range names {
		a, err := txtar.ParseFile(name)
		if err != nil {
			t.Fatal(err)
		}
		var files []txtar.File
		for _, f := range a.Files {
			if !strings.Contains(f.Name, "/") {
				files = append(files, f)
			}
		}
		tr, _ := open(t, files)
		if tr.Plan == nil {
			continue
		}
		for _, f := range Check(tr) {
			if !slices.ContainsFunc(tr.Files, func(x folder.File) bool { return x.Path == f.Pos.File }) {
				t.Errorf("%s: %+v", filepath.Base(name), f)
			}
			switch f.Code {
			case Confounded, Aliased, Disconnected, ConstantWithin, UndeclaredUnit, SingleUnit, Inseparable:
				t.Errorf("%s: %s", filepath.Base(name), f.Message)
			}
		}
	}
}
