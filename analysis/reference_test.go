package analysis

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/folder"
)

// references is where published trials with their expected numbers lie when they are at
// hand; the tests of this file pass without them.
const references = "../../shared/reference"

// wanted are the cases that this version must refuse, with a part of the reason; a case
// that starts to pass fails here, so that the table is kept true.
var wanted = map[string]string{}

func TestReferenceTrials(t *testing.T) {
	dirs, err := filepath.Glob(filepath.Join(references, "*", "expected.json"))
	if err != nil {
		t.Fatal(err)
	}
	for _, path := range dirs {
		name := filepath.Base(filepath.Dir(path))
		t.Run(name, func(t *testing.T) {
			tr, list := trial.Open(folder.FromFS(os.DirFS(filepath.Dir(path))))
			for _, d := range list {
				t.Logf("%s: %v: %s", d.Pos, d.Severity, d.Message)
			}
			if list.HasErrors() {
				t.Fatal("the trial does not open")
			}
			rs, found := Run(tr, result.Program{Name: "test", Version: "test"}, nil)
			if why, refused := wanted[name]; refused {
				if !found.HasErrors() {
					t.Fatal("this case was wanted as refused and is analysed now: compare its numbers and take it off the list")
				}
				if !strings.Contains(found[0].Message, why) {
					t.Errorf("refused, but not for %q: %s", why, found[0].Message)
				}
				return
			}
			if found.HasErrors() {
				t.Fatalf("refused: %s", found[0].Message)
			}
			compareExpected(t, path, rs)
		})
	}
}

// compareExpected holds results against an expected.json: every number that stands there
// must be met within its tolerance, and a null must be null.
func compareExpected(t *testing.T, path string, rs *result.Results) {
	t.Helper()
	var want struct {
		Tolerance struct{ Relative, P float64 }
		Design    map[string]any
		Responses []map[string]any
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(data, &want); err != nil {
		t.Fatal(err)
	}
	var text strings.Builder
	if err := rs.Write(&text); err != nil {
		t.Fatal(err)
	}
	var got map[string]any
	if err := json.Unmarshal([]byte(text.String()), &got); err != nil {
		t.Fatal(err)
	}
	c := &comparison{t: t, relative: want.Tolerance.Relative, p: want.Tolerance.P}
	if want.Design != nil {
		c.value("design", got["design"], want.Design)
	}
	for _, r := range want.Responses {
		var mine map[string]any
		for _, g := range got["responses"].([]any) {
			if g.(map[string]any)["name"] == r["name"] {
				mine = g.(map[string]any)
			}
		}
		if mine == nil {
			t.Errorf("no response %v", r["name"])
			continue
		}
		// Differences and residuals may be near zero by nature: they are measured by their
		// standard error.
		c.scale = 0
		for _, l := range mine["anova"].([]any) {
			if l := l.(map[string]any); l["source"] == "residual" {
				c.scale = math.Sqrt(l["ms"].(float64))
			}
		}
		c.value(fmt.Sprint(r["name"]), mine, r)
	}
	if c.n < 30 {
		t.Errorf("only %d numbers were compared", c.n)
	}
	t.Logf("%d values compared", c.n)
}

type comparison struct {
	t           *testing.T
	relative, p float64
	scale       float64
	n           int
}

// keyed names the keys that tell elements of a list apart.
var keyed = []string{"name", "stratum", "source", "term", "levels", "at", "a", "b", "units"}

func (c *comparison) value(path string, got, want any) {
	c.t.Helper()
	switch w := want.(type) {
	case map[string]any:
		g, ok := got.(map[string]any)
		if !ok {
			c.t.Errorf("%s: %v, want an object", path, got)
			return
		}
		for k, x := range w {
			y, there := g[k]
			if !there {
				c.t.Errorf("%s.%s is absent", path, k)
				continue
			}
			c.value(path+"."+k, y, x)
		}
	case []any:
		g, ok := got.([]any)
		if !ok {
			c.t.Errorf("%s: %v, want a list", path, got)
			return
		}
		for i, x := range w {
			m, isObject := x.(map[string]any)
			if !isObject {
				if i < len(g) {
					c.value(fmt.Sprintf("%s[%d]", path, i), g[i], x)
				} else {
					c.t.Errorf("%s[%d] is absent", path, i)
				}
				continue
			}
			found := false
			for _, y := range g {
				if alike(y.(map[string]any), m) {
					c.value(path+"["+label(m)+"]", y, x)
					found = true
					break
				}
			}
			if !found {
				c.t.Errorf("%s: no element %s", path, label(m))
			}
		}
	case float64:
		c.n++
		g, ok := got.(float64)
		if !ok {
			c.t.Errorf("%s: %v, want %v", path, got, w)
			return
		}
		last := path[strings.LastIndexByte(path, '.')+1:]
		switch last {
		case "p", "p_adjusted", "equal_slopes_p":
			if math.Abs(g-w) > c.p*math.Max(math.Abs(w), 1e-12) {
				c.t.Errorf("%s: %.12g, want %.12g", path, g, w)
			}
		case "difference", "residual", "studentized", "deleted", "estimate", "lower", "upper":
			if math.Abs(g-w) > c.relative*math.Max(math.Abs(w), math.Max(c.scale, 1)) {
				c.t.Errorf("%s: %.12g, want %.12g", path, g, w)
			}
		default:
			if math.Abs(g-w) > c.relative*math.Max(math.Abs(w), 1e-9) {
				c.t.Errorf("%s: %.12g, want %.12g", path, g, w)
			}
		}
	case nil:
		if got != nil {
			c.t.Errorf("%s: %v, want null", path, got)
		}
	default:
		if got != want {
			c.t.Errorf("%s: %v, want %v", path, got, want)
		}
	}
}

func alike(got, want map[string]any) bool {
	for _, k := range keyed {
		w, ok := want[k]
		if !ok {
			continue
		}
		x, _ := json.Marshal(got[k])
		y, _ := json.Marshal(w)
		if string(x) != string(y) {
			return false
		}
	}
	return true
}

func label(m map[string]any) string {
	var parts []string
	for _, k := range keyed {
		if v, ok := m[k]; ok {
			parts = append(parts, fmt.Sprint(v))
		}
	}
	return strings.Join(parts, " ")
}
