package tomlpos

import (
	"fmt"
	"io/fs"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
	"time"

	"github.com/BurntSushi/toml"
)

const sample = `a = 1
"b c" . d = [ 10, # ten
  'x', """
[not]
a table""", { e = 2.5, "f.g" = [ [1], [2, 3] ] } ]
[factor]   # comment = [
  name = "µ"
[[unit]]
name = "block"
[[unit]]
	name = 'pen'
  [unit.inner."x]y"]
  z = 2026-03-02 07:32:00 # a space inside
[[analysis.contrast]]
weights = { "0" = -3,
  "20" = 1 }
[analysis]
alpha = 0.05
`

func TestFind(t *testing.T) {
	doc, err := Scan("protocol.toml", []byte(sample))
	if err != nil {
		t.Fatal(err)
	}
	tests := []struct {
		key        string
		found      bool
		keyAt      string // line:column
		valueAt    string
		valueBegin string
	}{
		{key: "a", found: true, keyAt: "1:1", valueAt: "1:5", valueBegin: "1"},
		{key: `"b c".d`, found: true, keyAt: "2:9", valueAt: "2:13", valueBegin: "["},
		{key: `"b c".d[0]`, found: true, keyAt: "2:15", valueAt: "2:15", valueBegin: "10"},
		{key: `"b c".d[1]`, found: true, keyAt: "3:3", valueAt: "3:3", valueBegin: "'x'"},
		{key: `"b c".d[2]`, found: true, keyAt: "3:8", valueAt: "3:8", valueBegin: `"""`},
		{key: `"b c".d[3].e`, found: true, keyAt: "5:15", valueAt: "5:19", valueBegin: "2.5"},
		{key: `"b c".d[3]."f.g"[1][1]`, found: true, keyAt: "5:43", valueAt: "5:43", valueBegin: "3"},
		{key: "factor", found: true, keyAt: "6:2", valueAt: "6:1", valueBegin: "[factor]"},
		{key: "factor.name", found: true, keyAt: "7:3", valueAt: "7:10", valueBegin: `"µ"`},
		{key: "factor.label", keyAt: "6:2", valueAt: "6:1", valueBegin: "[factor]"},
		{key: "unit", found: true, keyAt: "8:3", valueAt: "8:1", valueBegin: "[[unit]]"},
		{key: "unit[1]", found: true, keyAt: "10:3", valueAt: "10:1", valueBegin: "[[unit]]"},
		{key: "unit[1].name", found: true, keyAt: "11:2", valueAt: "11:9", valueBegin: "'pen'"},
		{key: "unit[0].count", keyAt: "8:3", valueAt: "8:1", valueBegin: "[[unit]]"},
		{key: "unit[2].count", keyAt: "8:3", valueAt: "8:1", valueBegin: "[[unit]]"},
		{key: `unit[1].inner."x]y".z`, found: true, keyAt: "13:3", valueAt: "13:7", valueBegin: "2026-03-02 07:32:00"},
		{key: "analysis", found: true, keyAt: "17:2", valueAt: "17:1", valueBegin: "[analysis]"},
		{key: `analysis.contrast[0].weights."20"`, found: true, keyAt: "16:3", valueAt: "16:10", valueBegin: "1 }"},
		{key: "analysis.alpha", found: true, keyAt: "18:1", valueAt: "18:9", valueBegin: "0.05"},
	}
	at := func(offset uint32) string {
		p := doc.At(int(offset))
		return fmt.Sprintf("%d:%d", p.Line, p.Col)
	}
	for _, test := range tests {
		n, found := doc.Find(test.key)
		if found != test.found || at(n.Key) != test.keyAt || at(n.Value) != test.valueAt {
			t.Errorf("%s: found %t, key %s, value %s; want %t, %s, %s", test.key, found, at(n.Key), at(n.Value), test.found, test.keyAt, test.valueAt)
		}
		if !strings.HasPrefix(sample[n.Value:], test.valueBegin) {
			t.Errorf("%s: the value begins with %.10q, want %q", test.key, sample[n.Value:], test.valueBegin)
		}
	}
	for _, key := range []string{"nothing", "a.b", "a[0]", "[0]", `"`, `"b`, "unit[x]", "unit[1", "unit[-1]", ".", "a."} {
		if n, found := doc.Find(key); found && key != "a." {
			t.Errorf("%s: found %+v", key, n)
		}
	}
}

func TestJoin(t *testing.T) {
	for want, got := range map[string]string{
		"a":                  Join("", "a"),
		"a.b_1-c":            Join("a", "b_1-c"),
		`weights."0.5"`:      Join("weights", "0.5"),
		`weights.""`:         Join("weights", ""),
		`weights."a\"b"`:     Join("weights", `a"b`),
		"unit[3].count":      Join(Index("unit", 3), "count"),
		`describe."µ kg"`:    Join("describe", "µ kg"),
		`describe."a\x00b"`:  Join("describe", "a\x00b"),
		`describe."\ufeffb"`: Join("describe", "\ufeffb"),
	} {
		if got != want {
			t.Errorf("got %s, want %s", got, want)
		}
	}
}

func TestTwice(t *testing.T) {
	tests := []struct {
		src   string
		first string // 0-based "offset,offset"
	}{
		{"a = 1\nb = 2\na = 2\n", "0,12"},
		{"[x]\na = 1\n[y]\n[x]\n", "1,15"},
		{"x = []\n[[x]]\n", "0,9"},
		{"[[x]]\n[x]\n", "2,7"},
		{"x = 1\nx.y = 2\n", "0,6"},
		{"a = { b = 1, b = 2 }", "6,13"},
		{"[a.b]\n[a]\nc = 1\n[a.c.d]", "10,19"},
	}
	for _, test := range tests {
		if _, err := toml.Decode(test.src, new(map[string]any)); err == nil {
			t.Errorf("%q: the library finds nothing wrong", test.src)
		}
		doc, err := Scan("f", []byte(test.src))
		if err != nil {
			t.Fatal(err)
		}
		if got := fmt.Sprintf("%d,%d", doc.Twice[0], doc.Twice[1]); got != test.first {
			t.Errorf("%q: twice at %s, want %s", test.src, got, test.first)
		}
	}
}

func TestLimits(t *testing.T) {
	tests := []struct {
		name, src string
		deep      bool
	}{
		{"lists", "a = " + strings.Repeat("[", 1_000_000), true},
		{"lists with elements", "a = " + strings.Repeat(`["]", `, 100_000), true},
		{"tables", "a = " + strings.Repeat("{ a = ", 100_000), true},
		{"key", strings.Repeat("a.", 1_000_000) + "a = 1", true},
		{"header", "[" + strings.Repeat("a . ", 100_000) + "a]", true},
		{"lines", strings.Repeat("\n", MaxNodes+1), false},
		{"elements", "a = [" + strings.Repeat("1,", MaxNodes+1) + "]", false},
	}
	for _, test := range tests {
		_, err := Scan("f", []byte(test.src))
		limit, ok := err.(*LimitError)
		if !ok || limit.Deep != test.deep || limit.Offset <= 0 || limit.Offset > len(test.src) {
			t.Errorf("%s: got %v", test.name, err)
		}
	}
	wide := "a = " + strings.Repeat("[", MaxDepth) + strings.Repeat("]", MaxDepth)
	if _, err := Scan("f", []byte(wide)); err != nil {
		t.Errorf("%d lists within each other: %v", MaxDepth, err)
	}
}

// agrees compares the scan with what the library decoded: the same keys in every
// table, the same number of elements in every list, and for each scalar a value that
// decodes alone to the same.
func agrees(src string) error {
	var values map[string]any
	if _, err := toml.Decode(src, &values); err != nil {
		return errNotTOML
	}
	src = strings.TrimPrefix(src, "\ufeff")
	doc, err := Scan("f", []byte(src))
	if err != nil {
		return err
	}
	if doc.Twice != [2]int{} {
		return fmt.Errorf("a key is said to stand twice, at %v", doc.Twice)
	}
	return same(src, "", values, doc.Root)
}

var errNotTOML = fmt.Errorf("not TOML")

func same(src, path string, v any, n *Node) error {
	if int(n.End) > len(src) || n.Value > n.End || n.Key > n.Value && path != "" && !strings.HasPrefix(src[n.Value:], "[") {
		return fmt.Errorf("%s: key %d, value %d to %d", path, n.Key, n.Value, n.End)
	}
	switch v := v.(type) {
	case map[string]any:
		if n.Kind != Table || len(n.Kids) != len(v) {
			return fmt.Errorf("%s: kind %d with %d keys, want a table with %d", path, n.Kind, len(n.Kids), len(v))
		}
		for name, inner := range v {
			kid := n.Child(name)
			if kid == nil || kid.Name != name {
				return fmt.Errorf("%s: no key %q", path, name)
			}
			if err := same(src, Join(path, name), inner, kid); err != nil {
				return err
			}
		}
		return nil
	case []map[string]any:
		items := make([]any, len(v))
		for i := range v {
			items[i] = v[i]
		}
		return same(src, path, items, n)
	case []any:
		if n.Kind != Array || len(n.Kids) != len(v) {
			return fmt.Errorf("%s: kind %d with %d elements, want a list of %d", path, n.Kind, len(n.Kids), len(v))
		}
		for i := range v {
			if err := same(src, Index(path, i), v[i], n.Item(i)); err != nil {
				return err
			}
		}
		return nil
	}
	if n.Kind != Scalar {
		return fmt.Errorf("%s: kind %d, want a scalar", path, n.Kind)
	}
	var alone map[string]any
	text := src[n.Value:n.End]
	if _, err := toml.Decode("x = "+text, &alone); err != nil {
		return fmt.Errorf("%s: %q does not stand alone: %v", path, text, err)
	}
	got := alone["x"]
	if a, ok := got.(time.Time); ok {
		if b, ok := v.(time.Time); ok && a.Equal(b) {
			return nil
		}
	}
	if a, ok := got.(float64); ok && math.IsNaN(a) {
		if b, ok := v.(float64); ok && math.IsNaN(b) {
			return nil
		}
	}
	if !reflect.DeepEqual(got, v) {
		return fmt.Errorf("%s: %q is %v, want %v", path, text, got, v)
	}
	return nil
}

// TestStandardSuite scans the valid documents of the test suite of TOML itself,
// which comes with the library.
func TestStandardSuite(t *testing.T) {
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}", "github.com/BurntSushi/toml").Output()
	if err != nil {
		t.Skip("the library's folder cannot be found:", err)
	}
	root := filepath.Join(strings.TrimSpace(string(out)), "internal", "toml-test", "tests", "valid")
	n := 0
	err = filepath.WalkDir(root, func(path string, e fs.DirEntry, err error) error {
		if err != nil || filepath.Ext(path) != ".toml" {
			return err
		}
		src, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		switch err := agrees(string(src)); err {
		case nil:
			n++
		case errNotTOML: // of a later version of the language
		default:
			t.Errorf("%s: %v", filepath.Base(path), err)
		}
		return nil
	})
	if err != nil {
		t.Skip("the suite does not come with the library:", err)
	}
	if n < 150 {
		t.Errorf("only %d documents agree", n)
	}
}

// TestRandom compares scan and library on documents made at random.
func TestRandom(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	n := 0
	for range 3000 {
		g := &generator{Rand: rng}
		src := g.document()
		switch err := agrees(src); err {
		case nil:
			n++
		case errNotTOML: // it named a key twice
		default:
			t.Fatalf("%v in\n%s", err, src)
		}
	}
	if n < 1000 {
		t.Errorf("only %d documents were TOML", n)
	}
}

type generator struct {
	*rand.Rand
	b strings.Builder
	n int
}

func (g *generator) pick(from ...string) string { return from[g.IntN(len(from))] }

func (g *generator) document() string {
	for range g.IntN(4) {
		g.pair()
	}
	for range g.IntN(6) {
		switch g.IntN(3) {
		case 0:
			g.b.WriteString(g.space() + "[" + g.space() + g.key() + "]" + g.end())
		case 1:
			g.b.WriteString("[[" + g.pick("unit", "factor", "unit.inner") + g.space() + "]]" + g.end())
		}
		for range g.IntN(4) {
			g.pair()
		}
	}
	return g.b.String()
}

func (g *generator) space() string { return g.pick("", "", " ", "\t", "  ") }

func (g *generator) end() string {
	return g.space() + g.pick("", "# [x] = \"", "#'''") + g.pick("\n", "\n", "\r\n", "\n\n")
}

func (g *generator) pair() {
	g.b.WriteString(g.space() + g.key() + g.space() + "=" + g.space() + g.value(0) + g.end())
}

func (g *generator) key() string {
	g.n++
	k := g.pick(fmt.Sprintf("k%d", g.n), fmt.Sprintf(`"q %d.[]=#"`, g.n), fmt.Sprintf(`'r"%d'`, g.n), fmt.Sprintf(`"\u00b5\t\\%d"`, g.n), fmt.Sprint(g.n))
	for range g.IntN(3) {
		k = g.pick("common", "other", `"µ"`) + g.space() + "." + g.space() + k
	}
	return k
}

func (g *generator) value(depth int) string {
	if depth < 4 {
		switch g.IntN(6) {
		case 0:
			s := "["
			for range g.IntN(4) {
				s += g.gap() + g.value(depth+1) + g.gap() + ","
			}
			if g.IntN(2) == 0 {
				s = strings.TrimSuffix(s, ",")
			}
			return s + g.gap() + "]"
		case 1:
			s := "{"
			n := g.IntN(4)
			for i := range n {
				s += g.space() + g.key() + g.space() + "=" + g.space() + g.value(depth+1) + g.space()
				if i < n-1 {
					s += ","
				}
			}
			return s + g.space() + "}"
		}
	}
	return g.pick("1", "-3", "0.5", "1e6", "+1_000", "0xff", "true", "false", "inf", "-nan", "2026-03-02", "2026-03-02T07:32:00Z",
		"2026-03-02 07:32:00", "07:32:00", `""`, `"a#b"`, `"a\"]b"`, `"\\"`, `''`, `'C:\'`, `"µ ⁻¹"`,
		`"""a"""`, "\"\"\"\na\\\n  b\"\"\"", `"""a""b\"""" """`, `"""a"""""`, "'''\n[x]\n'a''b'''", "''''a'''''", `""""a"""`)
}

func (g *generator) gap() string { return g.pick("", "", " ", "\n", "\n  # ] }\n", "\r\n\t") }

func FuzzScan(f *testing.F) {
	f.Add(sample)
	f.Add("a = [[1], [2, { b = 3 }]]\n[c.d]\n[[c.e]]\n")
	f.Add("a = \"\"\"x\"\"\"\"\"\n'b' = '''\n'''")
	f.Add("a = \"\"\"x\\\\\"\"\"\"\"\"")
	f.Fuzz(func(t *testing.T, src string) {
		doc, err := Scan("f", []byte(src))
		if err != nil && err.(*LimitError).Offset > len(src) {
			t.Error("the limit lies outside")
		}
		var walk func(n *Node)
		walk = func(n *Node) {
			for _, offset := range []uint32{n.Key, n.Value, n.End} {
				if p := doc.At(int(offset)); int(offset) > len(src) || p.Line < 1 || p.Col < 1 {
					t.Errorf("%d is at %v", offset, p)
				}
			}
			for _, k := range n.Kids {
				walk(k)
			}
		}
		walk(doc.Root)
		if err != nil {
			return
		}
		if err := agrees(src); err != nil && err != errNotTOML {
			t.Error(err)
		}
	})
}
