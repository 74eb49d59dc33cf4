package analysis

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/rogpeppe/go-internal/txtar"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

// published is where the reference cases lie, one a file:
//
//	source         who printed the numbers, where, and which digits are printed
//	protocol.toml, data.csv, allotment.csv …   the trial
//	want.csv       key,value: as printed; half a unit in the last digit written is allowed
//	exact.csv      key,value: recomputed to full digits from the same data by another road,
//	               or by hand; a number such as 12.25 or 93/7 is exact, one of eight digits
//	               or more is rounded in the last; 1e-9 relative is allowed
//
// A key walks through results.json from the response: yield.anova[plot|yeast].ss. A name
// without brackets is a key of an object; [a|b] picks the one element of a list that has
// each of a, b among the texts that tell elements apart: code, stratum, name, kind, source, term,
// a, b; factor=level of levels and units, or the level alone where there is one; of at
// always factor=level. A value is a number, null, or a text.
const published = "../testdata/reference/*.txtar"

func TestPublishedTrials(t *testing.T) {
	names, err := filepath.Glob(published)
	if err != nil {
		t.Fatal(err)
	}
	if len(names) < 20 {
		t.Errorf("only %d cases", len(names))
	}
	for _, name := range names {
		t.Run(strings.TrimSuffix(filepath.Base(name), ".txtar"), func(t *testing.T) {
			archive, err := txtar.ParseFile(name)
			if err != nil {
				t.Fatal(err)
			}
			files := fstest.MapFS{}
			for _, f := range archive.Files {
				files[f.Name] = &fstest.MapFile{Data: f.Data}
			}
			if files["source"] == nil {
				t.Error("no source")
			}
			rs, list := runFiles(t, files)
			for _, d := range list {
				t.Errorf("%s: %v %s: %s", d.Pos, d.Severity, d.Code, d.Message)
			}
			got := asJSON(t, rs)
			held := 0
			for _, file := range []string{"want.csv", "exact.csv"} {
				if files[file] == nil {
					continue
				}
				rows, err := csv.NewReader(strings.NewReader(string(files[file].Data))).ReadAll()
				if err != nil {
					t.Fatal(err)
				}
				for _, row := range rows[1:] {
					value, err := lookUp(got, row[0])
					if err != nil {
						t.Errorf("%s: %s: %v", file, row[0], err)
						continue
					}
					if why := differs(value, row[1], file == "exact.csv"); why != "" {
						t.Errorf("%s: %s: %s", file, row[0], why)
					}
					held++
				}
			}
			if held == 0 {
				t.Error("nothing is held against this case")
			}
		})
	}
}

// runFiles opens and analyses a trial. The list holds what Run said; what Open said is an
// error of the test if it is an error, and else passed over.
func runFiles(t testing.TB, files fstest.MapFS) (*result.Results, diag.List) {
	t.Helper()
	tr, list := trial.Open(folder.FromFS(files))
	if list.HasErrors() || tr.Table == nil {
		for _, d := range list {
			t.Logf("%s: %v %s: %s", d.Pos, d.Severity, d.Code, d.Message)
		}
		t.Fatal("the trial does not open")
	}
	return Run(tr, result.Program{Name: "test", Version: "test"}, nil)
}

// asJSON is what results.json holds, responses by name.
func asJSON(t testing.TB, rs *result.Results) map[string]any {
	t.Helper()
	var text strings.Builder
	if err := rs.Write(&text); err != nil {
		t.Fatal(err)
	}
	var all map[string]any
	if err := json.Unmarshal([]byte(text.String()), &all); err != nil {
		t.Fatal(err)
	}
	out := map[string]any{"design": all["design"]}
	for _, r := range all["responses"].([]any) {
		out[r.(map[string]any)["name"].(string)] = r
	}
	return out
}

var step = regexp.MustCompile(`^([a-z_]+)(?:\[([^\]]*)\])?(?:\.|$)`)

// lookUp walks a key through decoded JSON.
func lookUp(at any, key string) (any, error) {
	name, rest, _ := strings.Cut(key, ".")
	m, ok := at.(map[string]any)[name]
	if !ok {
		return nil, fmt.Errorf("no %q", name)
	}
	at = m
	for rest != "" {
		s := step.FindStringSubmatch(rest)
		if s == nil {
			return nil, fmt.Errorf("no key at %q", rest)
		}
		rest = rest[len(s[0]):]
		object, ok := at.(map[string]any)
		if !ok {
			return nil, fmt.Errorf("no object holds %q", s[1])
		}
		if at, ok = object[s[1]]; !ok {
			return nil, fmt.Errorf("no %q", s[1])
		}
		if s[2] == "" {
			continue
		}
		list, ok := at.([]any)
		if !ok {
			return nil, fmt.Errorf("%q is no list", s[1])
		}
		var found []any
		for _, e := range list {
			if picks(identity(e.(map[string]any)), strings.Split(s[2], "|")) {
				found = append(found, e)
			}
		}
		if len(found) != 1 {
			return nil, fmt.Errorf("%d elements are [%s]", len(found), s[2])
		}
		at = found[0]
	}
	return at, nil
}

// identity lists the texts that tell an element of a list from the others.
func identity(e map[string]any) []string {
	var out []string
	for _, k := range []string{"code", "stratum", "name", "kind", "source", "term", "a", "b"} {
		if s, ok := e[k].(string); ok {
			out = append(out, s)
		}
	}
	for _, k := range []string{"levels", "at", "units"} {
		if m, ok := e[k].(map[string]any); ok {
			// An object has lost its order in decoding: each member by name, and, where it is
			// one alone, its level.
			for f, l := range m {
				out = append(out, f+"="+l.(string))
				if len(m) == 1 && k != "at" {
					out = append(out, l.(string))
				}
			}
		}
	}
	return out
}

// picks tells whether every pick is among the texts, each used once.
func picks(texts, pick []string) bool {
	used := make([]bool, len(texts))
next:
	for _, p := range pick {
		for i, s := range texts {
			if s == p && !used[i] {
				used[i] = true
				continue next
			}
		}
		return false
	}
	return true
}

// differs says how a value differs from what is wanted, or nothing.
func differs(got any, want string, exact bool) string {
	if want == "null" {
		if got != nil {
			return fmt.Sprintf("%v, want null", got)
		}
		return ""
	}
	above, below, fraction := strings.Cut(want, "/")
	w, err := strconv.ParseFloat(above, 64)
	if d, not := strconv.ParseFloat(below, 64); fraction && not == nil {
		w /= d
	}
	if err != nil {
		if got != want {
			return fmt.Sprintf("%v, want %q", got, want)
		}
		return ""
	}
	g, ok := got.(float64)
	if !ok {
		return fmt.Sprintf("%v, want %s", got, want)
	}
	allowed := 0.0
	if digits := len(strings.TrimLeft(digit.ReplaceAllString(want, "$1$2"), "0")); !exact || digits >= 8 && !fraction {
		allowed = halfUnit(want)
	}
	if exact {
		allowed = math.Max(allowed, 1e-9*math.Max(math.Abs(w), 1e-3))
	}
	if !(math.Abs(g-w) <= allowed) {
		return fmt.Sprintf("%.12g, want %s (± %.2g)", g, want, allowed)
	}
	return ""
}

// digit takes a written number apart: digits before and after the point.
var digit = regexp.MustCompile(`^-?(\d*)\.?(\d*)(?:e.*)?$`)

// halfUnit is half a unit in the last digit as the number is written: 4.30 allows 0.005.
func halfUnit(s string) float64 {
	mantissa, exponent, _ := strings.Cut(strings.ToLower(s), "e")
	e := 0
	if exponent != "" {
		e, _ = strconv.Atoi(exponent)
	}
	if _, decimals, ok := strings.Cut(mantissa, "."); ok {
		e -= len(decimals)
	}
	// A printed number is rounded once; its half unit is exclusive but for rounding of ties.
	return 0.5 * math.Pow(10, float64(e)) * (1 + 1e-9)
}

func TestHalfUnit(t *testing.T) {
	for s, want := range map[string]float64{"4.30": 0.005, "4.3": 0.05, "17": 0.5, "-2.5e-3": 5e-5, "1.4600e+01": 5e-4} {
		if got := halfUnit(s); math.Abs(got-want) > 1e-8*want {
			t.Errorf("%s: %v, want %v", s, got, want)
		}
	}
}
