package allot

import (
	"crypto/sha256"
	"flag"
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
)

var update = flag.Bool("update", false, "rewrite golden files")

const head = `protocol = 1
[trial]
code = "HM-26-001"
title = "A trial"
objective = "To test the draw."
`

// factorText writes a factor of n levels a1, a2, …
func factorText(name string, n int) string {
	levels := make([]string, n)
	for i := range levels {
		levels[i] = fmt.Sprintf("%q", fmt.Sprintf("%s%d", name, i+1))
	}
	return fmt.Sprintf("[[factor]]\nname = %q\nlevels = [%s]\n", name, strings.Join(levels, ", "))
}

func planOf(t testing.TB, text string) *layout.Plan {
	t.Helper()
	p, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(head + text)}}, "protocol.toml")
	if list.HasErrors() {
		t.Fatalf("%v\n%s", list, text)
	}
	plan, list := layout.New(p)
	if list.HasErrors() {
		t.Fatalf("%v\n%s", list, text)
	}
	return plan
}

func file(name, text string) folder.File {
	return folder.File{Path: name, SHA256: folder.Hash([]byte(text)), Data: []byte(text)}
}

// designs that are drawn.
var designs = []struct{ name, text string }{
	{"completely randomized", factorText("a", 4) + "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"a\"]\n"},
	{"unequal replication", factorText("a", 3) + "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"a\"]\nreplicates = { a1 = 8, a2 = 4, a3 = 4 }\n"},
	{"no multiple", factorText("a", 3) + "control = \"a2\"\n[[unit]]\nname = \"pen\"\ncount = 10\nreceives = [\"a\"]\n"},
	{"randomized block", factorText("a", 4) + "[[unit]]\nname = \"block\"\ncount = 5\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nnumbered = \"through\"\nreceives = [\"a\"]\n"},
	{"generalized block", factorText("a", 3) + "[[unit]]\nname = \"block\"\ncount = [2]\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 6\nreceives = [\"a\"]\n"},
	{"doubled control", factorText("a", 3) + "control = \"a1\"\n[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"a\"]\nreplicates = { a1 = 2 }\n"},
	{"factorial", factorText("a", 2) + factorText("b", 3) + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 6\nreceives = [\"a\", \"b\"]\n"},
	{"latin square", factorText("a", 4) + "[[unit]]\nname = \"cow\"\ncount = 4\n[[unit]]\nname = \"period\"\ncount = 4\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n"},
	{"latin square of a factorial", factorText("a", 2) + factorText("b", 3) + "[[unit]]\nname = \"row\"\ncount = 6\n[[unit]]\nname = \"column\"\ncount = 6\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\", \"b\"]\n"},
	{"replicated squares", factorText("a", 3) + "[[unit]]\nname = \"square\"\ncount = 2\n[[unit]]\nname = \"cow\"\nwithin = \"square\"\ncount = 3\n[[unit]]\nname = \"period\"\nwithin = \"square\"\ncount = 3\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n"},
	{"squares with common periods", factorText("a", 3) + "[[unit]]\nname = \"square\"\ncount = 2\n[[unit]]\nname = \"cow\"\nwithin = \"square\"\ncount = 3\n[[unit]]\nname = \"period\"\ncount = 3\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n"},
	{"eight cows in four periods", factorText("a", 4) + "[[unit]]\nname = \"cow\"\ncount = 8\n[[unit]]\nname = \"period\"\ncount = 4\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n"},
	{"split plot", factorText("a", 3) + factorText("b", 4) + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 3\nreceives = [\"a\"]\n[[unit]]\nname = \"subplot\"\nwithin = \"plot\"\ncount = 4\nreceives = [\"b\"]\n"},
	{"split-split plot", factorText("a", 2) + factorText("b", 2) + factorText("c", 3) + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]\n[[unit]]\nname = \"subplot\"\nwithin = \"plot\"\ncount = 2\nreceives = [\"b\"]\n[[unit]]\nname = \"bed\"\nwithin = \"subplot\"\ncount = 3\nreceives = [\"c\"]\n"},
	{"split plot in a latin square", factorText("a", 3) + factorText("b", 2) + "[[unit]]\nname = \"row\"\ncount = 3\n[[unit]]\nname = \"column\"\ncount = 3\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\"]\n[[unit]]\nname = \"subplot\"\nwithin = \"plot\"\ncount = 2\nreceives = [\"b\"]\n"},
	{"strip plot", factorText("a", 3) + factorText("b", 2) + "[[unit]]\nname = \"block\"\ncount = 4\n[[unit]]\nname = \"strip\"\nwithin = \"block\"\ncount = 3\nreceives = [\"a\"]\n[[unit]]\nname = \"lane\"\nwithin = \"block\"\ncount = 2\nreceives = [\"b\"]\n[[unit]]\nname = \"cell\"\ncrosses = [\"strip\", \"lane\"]\n"},
	{"sampling", factorText("a", 2) + "[[unit]]\nname = \"pen\"\ncount = 6\nreceives = [\"a\"]\n[[unit]]\nname = \"animal\"\nwithin = \"pen\"\ncount = 3\n"},
	{"listed", factorText("dose", 2) + "[[treatment]]\ncode = \"none\"\nlevels = {}\ncontrol = true\n[[treatment]]\ncode = \"low\"\nlevels = { dose = \"dose1\" }\n[[treatment]]\ncode = \"high\"\nlevels = { dose = \"dose2\" }\n[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 3\nreceives = [\"treatment\"]\n"},
	{"codes", factorText("a", 2) + "[randomization]\ncodes = true\n[[unit]]\nname = \"pen\"\ncount = 8\nreceives = [\"a\"]\n"},
	{"crossover", factorText("a", 4) + cows(8, 4) + carried},
	{"crossover of an odd number", factorText("a", 3) + cows(6, 3) + carried},
	{"crossover of few periods", factorText("a", 4) + cows(12, 3) + carried},
	{"given sequences", factorText("a", 2) + cows(4, 3) + carried + "sequences = [[\"a1\", \"a2\", \"a2\"], [\"a2\", \"a1\", \"a1\"]]\n"},
	{"reversal", factorText("a", 3) + cows(6, 3) + "[time_trend]\non = \"cow\"\nalong = \"period\"\n"},
	{"rows that received", factorText("a", 3) + factorText("b", 2) + strings.Replace(cows(6, 3), "count = 6\n", "count = 6\nreceives = [\"b\"]\n", 1)},
	{"graeco-latin square", factorText("a", 4) + factorText("b", 4) + strings.Replace(cows(4, 4), `["a"]`, `["a", "b"]`, 1)},
	{"balanced incomplete blocks", factorText("a", 7) + blockText(7, "3")},
	{"incomplete blocks of two sizes", factorText("a", 5) + blockText(4, "[3, 2, 3, 2]")},
	{"square lattice", factorText("a", 9) + resolvableText(9, 3, 3)},
	{"rectangular lattice", factorText("a", 12) + resolvableText(12, 3, 3)},
	{"alpha design", factorText("a", 15) + resolvableText(15, 3, 2)},
	{"rows and columns", factorText("a", 7) + gridText(3, 7)},
	{"augmented", "[[treatment]]\ncode = \"c\"\nlevels = {}\n[[treatment]]\ncode = \"e1\"\nlevels = {}\n[[treatment]]\ncode = \"e2\"\nlevels = {}\n[[treatment]]\ncode = \"e3\"\nlevels = {}\n[[treatment]]\ncode = \"e4\"\nlevels = {}\n[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 3\nreceives = [\"treatment\"]\nchecks = [\"c\"]\n"},
}

// TestGolden pins what the seed text gives: a change of it would make every record
// unrepeatable.
func TestGolden(t *testing.T) {
	var b strings.Builder
	for _, d := range designs {
		plan := planOf(t, d.text)
		a, list := New(plan, nil, "HM-26-001/1")
		if list.HasErrors() {
			t.Errorf("%s: %v", d.name, list)
			continue
		}
		words, _ := Scheme(plan, nil)
		fmt.Fprintf(&b, "-- %s --\n%s\n%s\n", d.name, words, a.Bytes())
	}
	name := filepath.Join("testdata", "golden.txt")
	if *update {
		if err := os.WriteFile(name, []byte(b.String()), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	if b.String() != string(want) {
		t.Errorf("draws differ from %s:\n%s", name, b.String())
	}
}

// TestDrawsAreAsPlanned: every draw passes the checks of an allotment, is read back from
// its file as it was, and repeats.
func TestDrawsAreAsPlanned(t *testing.T) {
	for _, d := range designs {
		plan := planOf(t, d.text)
		all, list := Draws(plan, nil, "x", 20)
		if list.HasErrors() {
			t.Errorf("%s: %v", d.name, list)
			continue
		}
		one, _ := New(plan, nil, "x")
		if !reflect.DeepEqual(one.Levels, all[0].Levels) || !slices.Equal(one.Codes, all[0].Codes) {
			t.Errorf("%s: the first of many draws is not that of one", d.name)
		}
		different := false
		for _, a := range all {
			if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
				t.Errorf("%s: %v", d.name, list)
			}
			back, list := parse(file(File, string(a.Bytes())), plan)
			if len(list) > 0 {
				t.Errorf("%s: read back: %v", d.name, list)
			} else if !reflect.DeepEqual(back.Levels, a.Levels) || !slices.Equal(back.Order, a.Order) || !slices.Equal(back.Codes, a.Codes) {
				t.Errorf("%s: read back as %v %v %v, want %v %v %v", d.name, back.Levels, back.Order, back.Codes, a.Levels, a.Order, a.Codes)
			}
			different = different || !reflect.DeepEqual(a.Levels, all[0].Levels)
		}
		if !different {
			t.Errorf("%s: twenty draws are all the same", d.name)
		}
	}
}

// TestUniform draws small designs until every possible allotment has been met often and
// compares the frequencies. The number of allotments is counted by hand.
func TestUniform(t *testing.T) {
	for _, test := range []struct {
		name, text string
		allotments int
	}{
		{"three of each of two on six", factorText("a", 2) + "[[unit]]\nname = \"pen\"\ncount = 6\nreceives = [\"a\"]\n", 20},                                                                                                                                                                                                                   // C(6,3)
		{"two, one, one on four", factorText("a", 3) + "[[unit]]\nname = \"pen\"\ncount = 4\nreceives = [\"a\"]\nreplicates = { a1 = 2 }\n", 12},                                                                                                                                                                                                // 4!/2!
		{"three in two blocks", factorText("a", 3) + "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 3\nreceives = [\"a\"]\n", 36},                                                                                                                                                                // 3!²
		{"square of three", factorText("a", 3) + "[[unit]]\nname = \"row\"\ncount = 3\n[[unit]]\nname = \"column\"\ncount = 3\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\"]\n", 12},                                                                                                                           // 3!·2!
		{"square of four", factorText("a", 4) + "[[unit]]\nname = \"row\"\ncount = 4\n[[unit]]\nname = \"column\"\ncount = 4\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\"]\n", 576},                                                                                                                           // OEIS A002860
		{"strips and lanes", factorText("a", 3) + factorText("b", 2) + "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"strip\"\nwithin = \"block\"\ncount = 3\nreceives = [\"a\"]\n[[unit]]\nname = \"lane\"\nwithin = \"block\"\ncount = 2\nreceives = [\"b\"]\n[[unit]]\nname = \"cell\"\ncrosses = [\"strip\", \"lane\"]\n", 144}, // (3!·2!)²
		{"split plot", factorText("a", 2) + factorText("b", 2) + "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]\n[[unit]]\nname = \"subplot\"\nwithin = \"plot\"\ncount = 2\nreceives = [\"b\"]\n", 64},                                                                   // 2!²·2!⁴
		{"two squares' worth of rows", factorText("a", 2) + "[[unit]]\nname = \"row\"\ncount = 4\n[[unit]]\nname = \"column\"\ncount = 2\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\"]\n", 6},                                                                                                                 // C(4,2): rows are 12 or 21, two of each
	} {
		plan := planOf(t, test.text)
		n := 40 * test.allotments
		all, list := Draws(plan, nil, "uniform "+test.name, n)
		if list.HasErrors() {
			t.Fatalf("%s: %v", test.name, list)
		}
		seen := map[string]int{}
		for _, a := range all {
			k := ""
			for _, levels := range a.Levels {
				k += spell(levels)
			}
			seen[k]++
		}
		counts := make([]int, 0, len(seen))
		for _, c := range seen {
			counts = append(counts, c)
		}
		if len(seen) != test.allotments {
			t.Errorf("%s: %d different allotments, want %d", test.name, len(seen), test.allotments)
			continue
		}
		uniform(t, test.name, counts)
	}
}

const woodman = "[[unit]]\nname = \"pen\"\ncount = 3\n[[unit]]\nname = \"pig\"\nwithin = \"pen\"\ncount = 6\ncarries = [\"sex\"]\nreceives = [\"diet\"]\n"

// TestCarried: within each sex of each pen the diets are as equal as its number allows.
func TestCarried(t *testing.T) {
	plan := planOf(t, factorText("diet", 3)+"[[factor]]\nname = \"sex\"\nlevels = [\"F\", \"M\"]\n"+woodman)
	var roster strings.Builder
	roster.WriteString("pen,pig,sex\n")
	for pen := range 3 {
		for pig := range 6 {
			sex := "F"
			if pig >= 3-pen { // 3, 2 and 1 gilts
				sex = "M"
			}
			fmt.Fprintf(&roster, "%d,%d,%s\n", pen+1, pig+1, sex)
		}
	}
	r, list := ReadRoster(file("roster.csv", roster.String()), plan)
	if len(list) > 0 {
		t.Fatal(list)
	}
	if _, list := New(plan, nil, "x"); !slices.ContainsFunc(list, func(d diag.Diagnostic) bool { return d.Code == ClassUnknown }) {
		t.Errorf("a draw without the roster says %v", list)
	}
	all, list := Draws(plan, r, "carried", 2000)
	if list.HasErrors() {
		t.Fatal(list)
	}
	first := make([]int, 9) // diets of the single gilt of pen 3, and of two pigs of pen 1
	for _, a := range all {
		diet, sex := a.Levels[0], a.Levels[1]
		var count [3][2][3]int
		for i, d := range diet {
			count[i/6][sex[i]][d]++
		}
		for pen := range count {
			for d := range 3 {
				if n := count[pen][0][d] + count[pen][1][d]; n != 2 {
					t.Fatalf("pen %d has diet %d %d times, want 2", pen, d, n)
				}
			}
			for s := range count[pen] {
				if lo, hi := slices.Min(count[pen][s][:]), slices.Max(count[pen][s][:]); hi-lo > 1 {
					t.Fatalf("pen %d, sex %d: diets %v", pen, s, count[pen][s])
				}
			}
		}
		first[diet[12]]++
		first[3+diet[0]]++
		first[6+diet[11]]++
	}
	for k := range 3 {
		uniform(t, "diet of a pig", first[3*k:3*k+3])
	}
}

func TestNotDrawn(t *testing.T) {
	square := "[[unit]]\nname = \"cow\"\ncount = %d\n[[unit]]\nname = \"period\"\ncount = %d\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [%s]\n"
	for _, test := range []struct{ name, text, want string }{
		{"graeco-latin", factorText("a", 6) + factorText("b", 6) + fmt.Sprintf(square, 6, 6, `"a", "b"`), "no two Latin squares of order 6"},
	} {
		a, list := New(planOf(t, test.text), nil, "x")
		if a != nil || len(list) == 0 {
			t.Errorf("%s: drawn", test.name)
			continue
		}
		d := list[0]
		if d.Code != NotDrawn || !strings.Contains(d.Message, test.want) || !strings.Contains(d.Hint, "allotment.csv") || d.Pos.Line == 0 {
			t.Errorf("%s: %+v", test.name, d)
		}
	}
}

// BenchmarkDraw: a randomized block of four treatments in six blocks.
func BenchmarkDraw(b *testing.B) {
	plan := planOf(b, factorText("a", 4)+"[[unit]]\nname = \"block\"\ncount = 6\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"a\"]\n")
	s, list := newScheme(plan, nil)
	if list.HasErrors() {
		b.Fatal(list)
	}
	g := NewGenerator("x")
	for b.Loop() {
		s.draw(g)
	}
}

// TestRepeat draws as another program would from the words of the record: 64-bit numbers
// of the stream, rejection, exchange from the end, treatments in the protocol's order.
func TestRepeat(t *testing.T) {
	plan := planOf(t, designs[3].text) // four treatments in five blocks
	a, list := New(plan, nil, "HM-26-001/1")
	if list.HasErrors() {
		t.Fatal(list)
	}
	stream := rand.NewChaCha8(sha256.Sum256([]byte("HM-26-001/1")))
	below := func(k uint64) uint64 {
		for {
			v := new(big.Int).SetUint64(stream.Uint64())
			all, m := new(big.Int).Lsh(big.NewInt(1), 64), new(big.Int).SetUint64(k)
			if limit := new(big.Int).Sub(all, new(big.Int).Mod(all, m)); v.Cmp(limit) < 0 {
				return new(big.Int).Mod(v, m).Uint64()
			}
		}
	}
	var want []int32
	for range 5 {
		order := []int32{0, 1, 2, 3}
		for i := uint64(3); i >= 1; i-- {
			j := below(i + 1)
			order[i], order[j] = order[j], order[i]
		}
		want = append(want, order...)
	}
	if !slices.Equal(a.Levels[0], want) {
		t.Errorf("drawn %v, by the words of the record %v", a.Levels[0], want)
	}
}

// TestCodes: masked codes differ, and leave most numbers unused.
func TestCodes(t *testing.T) {
	for _, n := range []int{1, 9, 10, 90, 91, 5000} {
		c := maskedCodes(NewGenerator("codes"), n)
		seen := map[string]bool{}
		for _, s := range c {
			seen[s] = true
			if len(s) != len(c[0]) || s[0] != 'K' {
				t.Errorf("%d codes: %s beside %s", n, s, c[0])
			}
		}
		space := 9 * math.Pow10(len(c[0])-2)
		if len(seen) != n || float64(n) > space/10 && n > 1 {
			t.Errorf("%d codes: %d different out of %.0f", n, len(seen), space)
		}
	}
}

// TestCheck: departures from the plan, each with the unit it was found in.
func TestCheck(t *testing.T) {
	square := "[[unit]]\nname = \"row\"\ncount = 3\n[[unit]]\nname = \"column\"\ncount = 3\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\"]\n"
	rcb := "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 3\nreceives = [\"a\"]\n"
	for _, test := range []struct {
		name, text string
		levels     []int32
		want       []string
	}{
		{"a square", factorText("a", 3) + square, []int32{0, 1, 2, 1, 2, 0, 2, 0, 1}, nil},
		{"not a square", factorText("a", 3) + square, []int32{0, 1, 2, 0, 1, 2, 1, 2, 0}, []string{
			"a a1 stands twice in column 1", "a a2 stands twice in column 2", "a a3 stands twice in column 3",
			"a a3 stands nowhere in column 1", "a a1 stands nowhere in column 2", "a a2 stands nowhere in column 3"}},
		{"blocks", factorText("a", 3) + rcb, []int32{0, 1, 2, 2, 1, 0}, nil},
		{"a block with one twice", factorText("a", 3) + rcb, []int32{0, 0, 2, 2, 1, 1}, []string{
			"a a1 stands twice in block 1", "a a2 stands nowhere in block 1", "a a1 stands nowhere in block 2", "a a2 stands twice in block 2"}},
		{"other replicates", factorText("a", 3) + "[[unit]]\nname = \"pen\"\ncount = 5\nreceives = [\"a\"]\nreplicates = { a1 = 3, a2 = 1, a3 = 1 }\n", []int32{0, 0, 1, 1, 2}, []string{
			"a a1 stands on 2 of unit pen, 3 are planned", "a a2 stands on 2 of unit pen, 1 are planned"}},
		{"incomplete blocks", factorText("a", 3) + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]\n", []int32{0, 1, 1, 2, 2, 0}, nil},
		{"incomplete blocks with one twice", factorText("a", 3) + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]\n", []int32{0, 0, 1, 2, 2, 1}, []string{"a a1 stands twice in block 1"}},
	} {
		a := &Allotment{Plan: planOf(t, test.text), Levels: [][]int32{test.levels}}
		var got []string
		for _, d := range Check(a, func(int, int32) diag.Pos { return diag.Pos{File: File} }) {
			if d.Severity != diag.Warning || d.Code != UnequalAllotment {
				t.Errorf("%s: %+v", test.name, d)
			}
			got = append(got, d.Message)
		}
		slices.Sort(got)
		slices.Sort(test.want)
		if !slices.Equal(got, test.want) {
			t.Errorf("%s:\n got %q\nwant %q", test.name, got, test.want)
		}
	}
}

// TestRandomStructures: whatever the units, a plan is refused with advice, or its draw
// has every treatment as often in every block, row and column as the plan allows.
func TestRandomStructures(t *testing.T) {
	g := NewGenerator("structures")
	drawn, refused := 0, 0
	for range 500 {
		var text strings.Builder
		factors := 1 + g.Below(3)
		for f := range factors {
			text.WriteString(factorText(string(rune('a'+f)), 2+g.Below(3)))
		}
		names := []string{}
		next := 0
		for len(names) < 4 {
			name := fmt.Sprintf("u%d", len(names))
			unit := fmt.Sprintf("[[unit]]\nname = %q\n", name)
			crosses := len(names) >= 2 && g.Below(3) == 0
			switch {
			case crosses:
				unit += fmt.Sprintf("crosses = [%q, %q]\n", names[len(names)-2], names[len(names)-1])
			case len(names) > 0 && g.Below(3) > 0:
				unit += fmt.Sprintf("within = %q\ncount = %d\n", names[len(names)-1], 2+g.Below(5))
			default:
				unit += fmt.Sprintf("count = %d\n", 2+g.Below(5))
			}
			if next < factors && g.Below(2) == 0 {
				take := 1 + g.Below(factors-next)
				var list []string
				for range take {
					list = append(list, fmt.Sprintf("%q", string(rune('a'+next))))
					next++
				}
				unit += "receives = [" + strings.Join(list, ", ") + "]\n"
			}
			text.WriteString(unit)
			names = append(names, name)
		}
		p, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(head + text.String())}}, "protocol.toml")
		if list.HasErrors() {
			continue
		}
		plan, list := layout.New(p)
		if list.HasErrors() {
			continue
		}
		a, list := New(plan, nil, "x")
		if a == nil {
			refused++
			if !list.HasErrors() || list[0].Code != NotDrawn || list[0].Hint == "" {
				t.Errorf("neither drawn nor refused with advice: %v\n%s", list, text.String())
			}
			continue
		}
		drawn++
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Errorf("%v\n%s", list, text.String())
		}
		if back, list := parse(file(File, string(a.Bytes())), plan); len(list) > 0 || !reflect.DeepEqual(back.Levels, a.Levels) {
			t.Errorf("read back %v: %v\n%s", back, list, text.String())
		}
	}
	if drawn < 35 || refused < 3 {
		t.Errorf("%d drawn and %d refused: the structures are too much alike", drawn, refused)
	}
	t.Logf("%d drawn, %d refused", drawn, refused)
}
