package diag

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
)

func source(files map[string]string) func(string) []byte {
	return func(name string) []byte { return []byte(files[name]) }
}

func TestText(t *testing.T) {
	files := map[string]string{
		"oats.csv":   "\ufeffunit,block,code,yield\r\nP17,B3,N90,4.31\r\n",
		"oats.toml":  "a = 1\n\tunit\t= \"µg/kg ⁻¹\" # é\n幅 = 'ü x' \nlast = \"\x1b[31m\u202eab\"",
		"broken.csv": "a\xff\xfeb,c\n",
	}
	tests := []struct {
		name string
		d    Diagnostic
		want string
	}{
		{
			name: "with all parts",
			d: Diagnostic{Pos: Pos{File: "oats.csv", Line: 2, Col: 8}, Code: "unknown-treatment", Message: `treatment "N90" is not declared in the protocol`,
				Hint: `did you mean "N60"?`, Related: []Related{{Pos: Pos{File: "oats.toml", Line: 12, Col: 1}, Message: "treatments are declared here"}}},
			want: `oats.csv:2:8: error: treatment "N90" is not declared in the protocol [unknown-treatment]
     2 | P17,B3,N90,4.31
       |        ^^^
    oats.toml:12:1: treatments are declared here
    hint: did you mean "N60"?
`,
		},
		{
			name: "after the byte order mark",
			d:    Diagnostic{Pos: Pos{File: "oats.csv", Line: 1, Col: 1}, Severity: Warning, Message: "m", Code: "c"},
			want: "oats.csv:1:1: warning: m [c]\n     1 | unit,block,code,yield\n       | ^^^^\n",
		},
		{
			name: "tabs, and text in quotes with characters of several bytes",
			d:    Diagnostic{Pos: Pos{File: "oats.toml", Line: 2, Col: 9}, Key: "factor[0].unit", Message: "m", Code: "c"},
			want: "oats.toml:2:9: error: factor[0].unit: m [c]\n     2 |     unit    = \"µg/kg ⁻¹\" # é\n       |               ^^^^^^^^^^\n",
		},
		{
			name: "behind characters of several bytes",
			d:    Diagnostic{Pos: Pos{File: "oats.toml", Line: 2, Col: len("\tunit\t= \"µg/kg ⁻¹\" # ") + 1}, Message: "m", Code: "c"},
			want: "oats.toml:2:26: error: m [c]\n     2 |     unit    = \"µg/kg ⁻¹\" # é\n       |                            ^\n",
		},
		{
			name: "wide characters",
			d:    Diagnostic{Pos: Pos{File: "oats.toml", Line: 3, Col: 7}, Message: "m", Code: "c"},
			want: "oats.toml:3:7: error: m [c]\n     3 | 幅 = 'ü x'\n       |      ^^^^^\n",
		},
		{
			name: "control and direction characters",
			d:    Diagnostic{Pos: Pos{File: "oats.toml", Line: 4, Col: 8}, Message: "m\x1b[2J\nn\xff", Code: "c"},
			want: "oats.toml:4:8: error: m<001B>[2J n<FFFD> [c]\n     4 | last = \"<001B>[31m<202E>ab\"\n       |        ^^^^^^^^^^^^^^^^^^^^\n",
		},
		{
			name: "not UTF-8",
			d:    Diagnostic{Pos: Pos{File: "broken.csv", Line: 1, Col: 5}, Message: "m", Code: "c"},
			want: "broken.csv:1:5: error: m [c]\n     1 | a<FFFD><FFFD>b,c\n       |               ^\n",
		},
		{
			name: "at the end of the line",
			d:    Diagnostic{Pos: Pos{File: "broken.csv", Line: 1, Col: 7}, Message: "m", Code: "c"},
			want: "broken.csv:1:7: error: m [c]\n     1 | a<FFFD><FFFD>b,c\n       |                 ^\n",
		},
		{
			name: "column outside the line",
			d:    Diagnostic{Pos: Pos{File: "broken.csv", Line: 1, Col: 99}, Message: "m", Code: "c"},
			want: "broken.csv:1:99: error: m [c]\n     1 | a<FFFD><FFFD>b,c\n",
		},
		{
			name: "line outside the file",
			d:    Diagnostic{Pos: Pos{File: "broken.csv", Line: 9, Col: 1}, Message: "m", Code: "c"},
			want: "broken.csv:9:1: error: m [c]\n",
		},
		{name: "file alone", d: Diagnostic{Pos: Pos{File: "a"}, Severity: Note, Message: "m", Code: "c"}, want: "a: note: m [c]\n"},
		{name: "no place", d: Diagnostic{Message: "m", Code: "c"}, want: "error: m [c]\n"},
	}
	for _, test := range tests {
		var b strings.Builder
		if err := (Text{Source: source(files)}).Write(&b, List{test.d}); err != nil {
			t.Fatal(err)
		}
		if b.String() != test.want {
			t.Errorf("%s: got\n%swant\n%s", test.name, b.String(), test.want)
		}
	}
}

// TestLongLine checks that a caret stands under its character in a line that is cut.
func TestLongLine(t *testing.T) {
	for _, length := range []int{100, 119, 121, 300, 5000, 2_000_000} {
		for _, at := range []int{0, 39, 41, 90, length - 1} {
			line := []byte(strings.Repeat("é", length/2))
			line = append(line[:at-at%2], append([]byte("X"), line[at-at%2:]...)...)
			col := bytes.IndexByte(line, 'X') + 1
			var b strings.Builder
			err := (Text{Source: source(map[string]string{"f": string(line)})}).Write(&b, List{{Pos: Pos{File: "f", Line: 1, Col: col}, Message: "m", Code: "c"}})
			if err != nil {
				t.Fatal(err)
			}
			drawn := strings.Split(b.String(), "\n")
			text, carets := []rune(drawn[1]), []rune(drawn[2])
			caret := strings.IndexRune(string(carets), '^')
			if len(text) > 140 || text[caret] != 'X' {
				t.Errorf("%d at %d:\n%s", length, at, b.String())
			}
		}
	}
}

func TestColor(t *testing.T) {
	var b strings.Builder
	l := List{{Pos: Pos{File: "f", Line: 1, Col: 1}, Severity: Warning, Message: "m", Code: "c", Hint: "h"}}
	if err := (Text{Color: true, Source: source(map[string]string{"f": "ab"})}).Write(&b, l); err != nil {
		t.Fatal(err)
	}
	want := "\x1b[1mf:1:1\x1b[0m: \x1b[1;33mwarning\x1b[0m: m [c]\n     1 | ab\n       | \x1b[1;33m^^\x1b[0m\n    \x1b[1mhint:\x1b[0m h\n"
	if b.String() != want {
		t.Errorf("got %q\nwant %q", b.String(), want)
	}
}

func TestFold(t *testing.T) {
	var l List
	for i := range 215 {
		l.Add(Diagnostic{Pos: Pos{File: "d.csv", Line: i + 2}, Code: "bad-number", Message: fmt.Sprintf("cell %d", i)})
	}
	l.Add(Diagnostic{Pos: Pos{File: "d.csv", Line: 300}, Code: "bad-number", Severity: Warning, Message: "w"})
	l.Add(Diagnostic{Pos: Pos{File: "p.toml"}, Key: "unit[0].count", Code: "x", Message: "first"})
	l.Add(Diagnostic{Pos: Pos{File: "p.toml"}, Key: "unit[10].count", Code: "x", Message: "second"})
	l.Add(Diagnostic{Pos: Pos{File: "p.toml"}, Key: "unit[1].counts", Code: "x", Message: "third"})
	for _, test := range []struct{ keep, shown, more int }{{3, 7, 212}, {1, 4, 215}, {0, 219, 0}, {1000, 219, 0}} {
		folded, more := l.Fold(test.keep), 0
		for _, f := range folded {
			more += f.More
		}
		if len(folded) != test.shown || more != test.more {
			t.Errorf("keep %d: %d shown and %d more, want %d and %d", test.keep, len(folded), more, test.shown, test.more)
		}
	}
	var b strings.Builder
	if err := (Text{Keep: 3}).Write(&b, l[:215]); err != nil {
		t.Fatal(err)
	}
	if want := "d.csv:2: error: cell 0 [bad-number]\nd.csv:3: error: cell 1 [bad-number]\nd.csv:4: error: cell 2 [bad-number]\n    and 212 more like it\n"; b.String() != want {
		t.Errorf("got %s", b.String())
	}
}

func TestSort(t *testing.T) {
	want := List{
		{Pos: Pos{File: "a"}, Code: "z"},
		{Pos: Pos{File: "a", Line: 2, Col: 9}},
		{Pos: Pos{File: "a", Line: 10, Col: 1}, Code: "a", Message: "1"},
		{Pos: Pos{File: "a", Line: 10, Col: 1}, Code: "a", Message: "2"},
		{Pos: Pos{File: "a", Line: 10, Col: 1}, Code: "b"},
		{Pos: Pos{File: "a", Line: 10, Col: 1}, Severity: Warning, Code: "a"},
		{Pos: Pos{File: "a", Line: 10, Col: 2}},
		{Pos: Pos{File: "b"}},
	}
	rng := rand.New(rand.NewPCG(3, 4))
	for range 50 {
		got := append(List(nil), want...)
		rng.Shuffle(len(got), func(i, j int) { got[i], got[j] = got[j], got[i] })
		got.Sort()
		if fmt.Sprint(got) != fmt.Sprint(want) {
			t.Fatalf("got %v", got)
		}
	}
	if e, w, n := (List{{}, {Severity: Warning}, {Severity: Note}, {}}).Count(); e != 2 || w != 1 || n != 1 {
		t.Error(e, w, n)
	}
	if !(List{{Severity: Warning}, {}}).HasErrors() || (List{{Severity: Warning}}).HasErrors() || (List(nil)).HasErrors() {
		t.Error("errors are not told from warnings")
	}
	if s := Severity(7).String(); s != "note" {
		t.Error(s)
	}
}

var example = List{
	{Pos: Pos{File: "a b/d.csv", Line: 2, Col: 6}, Key: "k", Code: "one", Message: `é <"&>`, Hint: "h",
		Related: []Related{{Pos: Pos{File: "p.toml", Line: 3, Col: 1}, Message: "there"}}},
	{Pos: Pos{File: "p.toml"}, Severity: Note, Code: "two", Message: "m"},
	{Severity: Warning, Code: "two", Message: "no place"},
}

func TestJSON(t *testing.T) {
	var b strings.Builder
	if err := WriteJSON(&b, example); err != nil {
		t.Fatal(err)
	}
	want := `{
 "diagnostics": [
  {
   "file": "a b/d.csv",
   "line": 2,
   "column": 6,
   "key": "k",
   "severity": "error",
   "code": "one",
   "message": "é <\"&>",
   "hint": "h",
   "related": [
    {
     "file": "p.toml",
     "line": 3,
     "column": 1,
     "message": "there"
    }
   ]
  },
  {
   "file": "p.toml",
   "severity": "note",
   "code": "two",
   "message": "m"
  },
  {
   "severity": "warning",
   "code": "two",
   "message": "no place"
  }
 ]
}
`
	if b.String() != want {
		t.Errorf("got %s", b.String())
	}
	b.Reset()
	if err := WriteJSON(&b, nil); err != nil || b.String() != "{\n \"diagnostics\": []\n}\n" {
		t.Errorf("an empty list is %q, %v", b.String(), err)
	}
}

// TestSARIF checks the log against what the standard requires (OASIS SARIF 2.1.0,
// from memory): §3.13 version and runs, §3.14.17 columnKind, §3.27 ruleId, ruleIndex
// into the driver's rules, level and message, §3.30 columns of a region in the
// characters that columnKind names, §3.4.4 an artifact's location as a URI.
func TestSARIF(t *testing.T) {
	var b bytes.Buffer
	s := SARIF{Tool: "penwright", Version: "1", Codes: []CodeInfo{{Code: "zero", Text: "never"}, {Code: "two", Text: "second"}},
		Source: source(map[string]string{"a b/d.csv": "x\n1,é,7\n", "p.toml": "a\nb\nc\n"})}
	if err := s.Write(&b, example); err != nil {
		t.Fatal(err)
	}
	var log struct {
		Version string
		Runs    []struct {
			Tool struct {
				Driver struct {
					Name, Version string
					Rules         []struct {
						ID               string
						ShortDescription *struct{ Text string }
					}
				}
			}
			ColumnKind string
			Results    []struct {
				RuleID                      string
				RuleIndex                   int
				Level                       string
				Message                     struct{ Text string }
				Locations, RelatedLocations []struct {
					PhysicalLocation *struct {
						ArtifactLocation struct{ URI string }
						Region           *struct{ StartLine, StartColumn int }
					}
					LogicalLocations []struct{ FullyQualifiedName string }
					Message          *struct{ Text string }
				}
			}
		}
	}
	if err := json.Unmarshal(b.Bytes(), &log); err != nil {
		t.Fatal(err)
	}
	run := log.Runs[0]
	if log.Version != "2.1.0" || len(log.Runs) != 1 || run.ColumnKind != "unicodeCodePoints" || run.Tool.Driver.Name != "penwright" {
		t.Errorf("the log is %s", b.String())
	}
	var ids []string
	for _, r := range run.Tool.Driver.Rules {
		ids = append(ids, r.ID)
	}
	if fmt.Sprint(ids) != "[zero two one]" || run.Tool.Driver.Rules[1].ShortDescription.Text != "second" {
		t.Errorf("the rules are %v", ids)
	}
	levels := ""
	for i, r := range run.Results {
		levels += r.Level + " "
		if r.RuleID != example[i].Code || ids[r.RuleIndex] != r.RuleID {
			t.Errorf("result %d has rule %s, index %d", i, r.RuleID, r.RuleIndex)
		}
	}
	if levels != "error note warning " {
		t.Errorf("the levels are %s", levels)
	}
	first := run.Results[0]
	at := first.Locations[0]
	if at.PhysicalLocation.ArtifactLocation.URI != "a%20b/d.csv" || at.PhysicalLocation.Region.StartLine != 2 || at.PhysicalLocation.Region.StartColumn != 5 {
		t.Errorf("the first is at %+v", at.PhysicalLocation)
	}
	if first.Message.Text != `k: é <"&>; h` || at.LogicalLocations[0].FullyQualifiedName != "k" || first.RelatedLocations[0].Message.Text != "there" {
		t.Errorf("the first is %+v", first)
	}
	if l := run.Results[1].Locations[0].PhysicalLocation; l.Region != nil {
		t.Errorf("a file without a line has the region %+v", l.Region)
	}
	if len(run.Results[2].Locations) != 0 {
		t.Error("a diagnostic without a place has one")
	}

	b.Reset()
	if err := (SARIF{}).Write(&b, nil); err != nil || !strings.Contains(b.String(), `"results": []`) || !strings.Contains(b.String(), `"rules": []`) {
		t.Errorf("an empty list is %s, %v", b.String(), err)
	}
}

type full struct{}

func (full) Write([]byte) (int, error) { return 0, errors.New("full") }

func TestWriteErrors(t *testing.T) {
	if (Text{}).Write(full{}, example) == nil || WriteJSON(full{}, example) == nil || (SARIF{}).Write(full{}, example) == nil {
		t.Error("a failed write goes unnoticed")
	}
}
