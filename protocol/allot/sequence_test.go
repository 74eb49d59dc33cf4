package allot

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"penwright/protocol/diag"
)

// cows writes n cows over p periods with samples that receive a.
func cows(n, p int) string {
	return fmt.Sprintf("[[unit]]\nname = \"cow\"\ncount = %d\n[[unit]]\nname = \"period\"\ncount = %d\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n", n, p)
}

const carried = "[carryover]\nfactor = \"a\"\nalong = \"period\"\non = \"cow\"\n"

// follows counts how often treatment j follows i, and how often each stands in each
// period.
func follows(rows [][]int32, t int) (next [][]int, period [][]int) {
	next, period = make([][]int, t), make([][]int, len(rows[0]))
	for i := range next {
		next[i] = make([]int, t)
	}
	for j := range period {
		period[j] = make([]int, t)
	}
	for _, r := range rows {
		for j, x := range r {
			period[j][x]++
			if j > 0 {
				next[r[j-1]][x]++
			}
		}
	}
	return next, period
}

// TestWilliams: the defining properties, for even and odd numbers of treatments. The
// square of four is that of E. J. Williams, Australian Journal of Scientific Research
// A 2 (1949) 149-168: 1 2 4 3 | 2 3 1 4 | 3 4 2 1 | 4 1 3 2 (from memory).
func TestWilliams(t *testing.T) {
	if got := williams(4); len(got) != 1 || fmt.Sprint(got[0]) != "[[0 1 3 2] [1 2 0 3] [2 3 1 0] [3 0 2 1]]" {
		t.Errorf("square of four: %v", got)
	}
	for n := 2; n <= 12; n++ {
		var rows [][]int32
		for _, set := range williams(n) {
			rows = append(rows, set...)
		}
		times := len(rows) / n
		if times != 1+n%2 {
			t.Errorf("%d treatments: %d sequences", n, len(rows))
		}
		next, period := follows(rows, n)
		for i := range n {
			for j := range n {
				if want := times; i != j && next[i][j] != want || i == j && next[i][j] != 0 {
					t.Errorf("%d treatments: %d follows %d %d times", n, j, i, next[i][j])
				}
				if period[j][i] != times {
					t.Errorf("%d treatments: %d stands %d times in period %d", n, i, period[j][i], j)
				}
			}
		}
	}
}

// TestCarryOver: whatever is found for t treatments over p periods is balanced: each
// treatment in each period, and after each other, equally often; with fewer periods
// than treatments each two together in the same number of sequences.
func TestCarryOver(t *testing.T) {
	found := map[string]int{}
	for n := 2; n <= 7; n++ {
		for p := 2; p <= n+3; p++ {
			for m := 1; m <= n; m++ {
				s, advice := carryOver(n, p, m*n)
				if s == nil {
					if strings.Contains(advice, "%") {
						t.Errorf("%d treatments over %d periods: %q", n, p, advice)
					}
					continue
				}
				if _, ok := found[fmt.Sprint(n, p)]; !ok {
					found[fmt.Sprint(n, p)] = m
				}
				var rows [][]int32
				for _, set := range s.sets {
					rows = append(rows, set...)
				}
				if m*n%len(rows) != 0 {
					t.Errorf("%d treatments over %d periods: %d sequences for %d rows", n, p, len(rows), m*n)
				}
				next, period := follows(rows, n)
				together := make([]int, n*n)
				for _, r := range rows {
					for i := range r {
						for j := range r {
							if i != j {
								together[int(r[i])*n+int(r[j])]++
							}
						}
					}
				}
				for i := range n {
					for j := range n {
						switch {
						case i != j && next[i][j] != next[0][1]:
							t.Errorf("%d over %d: %d follows %d %d times, want %d", n, p, j, i, next[i][j], next[0][1])
						case i == j && p <= n && next[i][j] != 0, i == j && p > n && next[i][j] != next[0][1]:
							t.Errorf("%d over %d: %d follows itself %d times", n, p, i, next[i][i])
						case i != j && p <= n && together[i*n+j] != together[1]:
							t.Errorf("%d over %d: %d and %d stand together %d times, want %d", n, p, i, j, together[i*n+j], together[1])
						}
					}
					for j := range p {
						if period[j][i] != period[0][0] {
							t.Errorf("%d over %d: %d stands %d times in period %d", n, p, i, period[j][i], j)
						}
					}
				}
			}
		}
	}
	// Patterson (1952) has 14 sequences of seven treatments over four periods, and
	// twelve of four over three (from memory).
	for what, want := range map[string]int{"7 4": 2, "4 3": 3, "2 3": 1, "2 4": 2, "3 3": 2, "4 4": 1, "3 4": 2} {
		if found[what] != want {
			t.Errorf("treatments and periods %s: %d sets of cyclic sequences, want %d", what, found[what], want)
		}
	}
}

// TestCrossoversAreBalanced draws crossovers as protocols say them.
func TestCrossoversAreBalanced(t *testing.T) {
	squares := func(n, cows, periods int) string {
		return fmt.Sprintf("[[unit]]\nname = \"square\"\ncount = %d\n[[unit]]\nname = \"cow\"\nwithin = \"square\"\ncount = %d\n[[unit]]\nname = \"period\"\nwithin = \"square\"\ncount = %d\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n", n, cows, periods)
	}
	for _, test := range []struct {
		name, text         string
		treatments, period int
		self               bool // treatments follow themselves as well
	}{
		{"four on four", factorText("a", 4) + cows(4, 4) + carried, 4, 4, false},
		{"four on twelve", factorText("a", 4) + cows(12, 4) + carried, 4, 4, false},
		{"five on ten", factorText("a", 5) + cows(10, 5) + carried, 5, 5, false},
		{"three, two squares of three", factorText("a", 3) + squares(2, 3, 3) + carried, 3, 3, false},
		{"three, four squares of nine", factorText("a", 3) + squares(4, 9, 3) + carried, 3, 3, false},
		{"four, three squares", factorText("a", 4) + squares(3, 4, 4) + carried, 4, 4, false},
		{"an extra period", factorText("a", 3) + cows(6, 4) + carried, 3, 4, true},
		{"two over four", factorText("a", 2) + cows(8, 4) + carried, 2, 4, true},
		{"four over three", factorText("a", 4) + cows(12, 3) + carried, 4, 3, false},
		{"factorial", factorText("a", 2) + factorText("b", 2) + strings.Replace(cows(4, 4), `["a"]`, `["a", "b"]`, 1) + carried, 4, 4, false},
	} {
		plan := planOf(t, test.text)
		all, list := Draws(plan, nil, "x", 40)
		if list.HasErrors() {
			t.Errorf("%s: %v", test.name, list)
			continue
		}
		seen := map[string]bool{}
		for _, a := range all {
			if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
				t.Errorf("%s: %v", test.name, list)
			}
			u := len(plan.Units) - 1
			on := unitNamed(plan, "cow")
			rows := make([][]int32, plan.Units[on].N)
			for i, cow := range plan.Coarse(u, on) {
				level := int32(0)
				for _, f := range plan.Units[u].Receives {
					level = level*int32(len(plan.Factors[f].Levels)) + a.Levels[f][i]
				}
				rows[cow] = append(rows[cow], level)
			}
			next, period := follows(rows, test.treatments)
			for i := range test.treatments {
				for j := range test.treatments {
					if (i != j || test.self) && next[i][j] != next[0][1] {
						t.Errorf("%s: %d follows %d %d times, want %d", test.name, j, i, next[i][j], next[0][1])
					}
				}
				for j := range period {
					if period[j][i] != period[0][0] {
						t.Errorf("%s: %d stands %d times in period %d, want %d", test.name, i, period[j][i], j, period[0][0])
					}
				}
			}
			seen[fmt.Sprint(rows)] = true
		}
		if len(seen) < 20 && test.name != "four on four" && test.name != "three, two squares of three" {
			t.Errorf("%s: forty draws give %d", test.name, len(seen))
		}
	}
}

// TestSequencesUniform: with one Williams square each of the cows has each sequence
// equally often. Of four treatments there are three cyclic orders, and of names that
// give the same set of sequences 8, so that 4!·4!/8 allotments are met.
func TestSequencesUniform(t *testing.T) {
	plan := planOf(t, factorText("a", 4)+cows(4, 4)+carried)
	all, list := Draws(plan, nil, "sequences", 5000)
	if list.HasErrors() {
		t.Fatal(list)
	}
	seen := map[string]int{}
	cell := make([]int, 64)
	for _, a := range all {
		seen[spell(a.Levels[0])]++
		for i, l := range a.Levels[0] {
			cell[i*4+int(l)]++
		}
	}
	counts := make([]int, 0, len(seen))
	for _, n := range seen {
		counts = append(counts, n)
	}
	if 24*24%len(counts) != 0 {
		t.Errorf("%d allotments, which is no divisor of 4!·4!", len(counts))
	}
	uniform(t, "Williams squares of four", counts)
	for i := range 16 {
		uniform(t, "treatment of a sample", cell[4*i:4*i+4])
	}
	// Two given sequences on six cows: 6!/(3!·3!) allotments.
	plan = planOf(t, factorText("a", 2)+cows(6, 3)+carried+"sequences = [[\"a1\", \"a2\", \"a2\"], [\"a2\", \"a1\", \"a1\"]]\n")
	if all, list = Draws(plan, nil, "given", 800); list.HasErrors() {
		t.Fatal(list)
	}
	clear(seen)
	for _, a := range all {
		seen[spell(a.Levels[0])]++
	}
	counts = counts[:0]
	for _, n := range seen {
		counts = append(counts, n)
	}
	if len(counts) != 20 {
		t.Errorf("%d allotments of two sequences to six cows, want 20", len(counts))
	}
	uniform(t, "given sequences", counts)
}

// TestGivenSequences: rows go through what the protocol says, also a switchback, and an
// allotment that does not is found.
func TestGivenSequences(t *testing.T) {
	const trend = "[time_trend]\non = \"cow\"\nalong = \"period\"\norder = 1\n"
	for _, test := range []struct {
		name, text string
		want       []string // what rows go through, without those of the other names
	}{
		{"reversal", factorText("a", 2) + cows(4, 3) + trend, []string{"[0 1 0]", "[0 1 0]", "[1 0 1]", "[1 0 1]"}},
		{"reversal of three", factorText("a", 3) + cows(6, 3) + trend, []string{"[0 1 0]", "[0 2 0]", "[1 0 1]", "[1 2 1]", "[2 0 2]", "[2 1 2]"}},
		{"given", factorText("a", 3) + cows(3, 3) + trend + "sequences = [[\"a1\", \"a2\", \"a1\"], [\"a1\", \"a3\", \"a1\"], [\"a2\", \"a3\", \"a2\"]]\n", []string{"[0 1 0]", "[0 2 0]", "[1 2 1]"}},
		{"given, doubled", factorText("a", 2) + cows(4, 2) + carried + "sequences = [[\"a1\", \"a2\"], [\"a2\", \"a1\"]]\n", []string{"[0 1]", "[0 1]", "[1 0]", "[1 0]"}},
	} {
		plan := planOf(t, test.text)
		a, list := New(plan, nil, "x")
		if list.HasErrors() {
			t.Errorf("%s: %v", test.name, list)
			continue
		}
		var got []string
		p := plan.Units[1].N
		for r := range plan.Units[0].N {
			got = append(got, fmt.Sprint(a.Levels[0][r*p:r*p+p]))
		}
		slices.Sort(got)
		if !slices.Equal(got, test.want) {
			t.Errorf("%s: %v, want %v", test.name, got, test.want)
		}
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Errorf("%s: %v", test.name, list)
		}
		x := a.Levels[0]
		x[0] = x[1]
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) == 0 {
			t.Errorf("%s: a wrong sequence is not found", test.name)
		}
	}
	// Three pairs of three treatments alternate in one order only; each treatment comes
	// first once.
	plan := planOf(t, factorText("a", 3)+cows(3, 4)+trend)
	a, list := New(plan, nil, "x")
	if list.HasErrors() {
		t.Fatal(list)
	}
	first := []int32{a.Levels[0][0], a.Levels[0][4], a.Levels[0][8]}
	slices.Sort(first)
	if !slices.Equal(first, identity(3)) {
		t.Errorf("first treatments %v", first)
	}
	if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
		t.Error(list)
	}
}

// TestSequencesRefused: the nearest possible numbers are named.
func TestSequencesRefused(t *testing.T) {
	for _, test := range []struct{ name, text, want string }{
		{"five on five", factorText("a", 5) + cows(5, 5) + carried, "take 10 of cow"},
		{"four on ten", factorText("a", 4) + cows(10, 4) + carried, "take 8 or 12 of cow"},
		{"six over three on six", factorText("a", 6) + cows(6, 3) + carried, "6 or 7 periods are always possible"},
		{"squares of five", factorText("a", 5) + "[[unit]]\nname = \"square\"\ncount = 3\n[[unit]]\nname = \"cow\"\nwithin = \"square\"\ncount = 5\n[[unit]]\nname = \"period\"\ncount = 5\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n" + carried, "take 10 or 20 of cow"},
	} {
		a, list := New(planOf(t, test.text), nil, "x")
		if a != nil || len(list) == 0 {
			t.Errorf("%s: drawn", test.name)
			continue
		}
		if d := list[0]; d.Code != NotDrawn || !strings.Contains(d.Hint, test.want) || d.Pos.Line == 0 {
			t.Errorf("%s: %+v", test.name, d)
		}
	}
}

// TestAugmented: checks in every block, each entry once, in the trial as on rows and
// columns; entries are spread uniformly.
func TestAugmented(t *testing.T) {
	var lines strings.Builder
	for i := range 12 {
		fmt.Fprintf(&lines, "[[treatment]]\ncode = \"e%d\"\nlevels = {}\n", i+1)
	}
	checks := "[[treatment]]\ncode = \"c1\"\nlevels = {}\n[[treatment]]\ncode = \"c2\"\nlevels = {}\n"
	plan := planOf(t, lines.String()+checks+"[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = [8, 7, 6]\nreceives = [\"treatment\"]\nchecks = [\"c1\", \"c2\"]\nreplicates = { c2 = 2 }\n")
	all, list := Draws(plan, nil, "augmented", 3000)
	if list.HasErrors() {
		t.Fatal(list)
	}
	where := make([]int, 21)
	for _, a := range all {
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Fatal(list)
		}
		var in [3][14]int
		for i, b := range plan.Coarse(1, 0) {
			in[b][a.Levels[0][i]]++
			if a.Levels[0][i] == 4 {
				where[i]++
			}
		}
		for b := range in {
			if in[b][12] != 1 || in[b][13] != 2 {
				t.Fatalf("block %d has the checks %d and %d times", b, in[b][12], in[b][13])
			}
			for e := range 12 {
				if in[0][e]+in[1][e]+in[2][e] != 1 {
					t.Fatalf("entry %d does not stand once", e)
				}
			}
		}
	}
	// A block of n plots has n − 3 places for entries among 12.
	for b, from := range []int{0, 8, 15} {
		n := 8 - b
		uniform(t, fmt.Sprintf("plot of an entry in block %d", b), where[from:from+n])
	}
	if got := where[0] + where[1] + where[2] + where[3] + where[4] + where[5] + where[6] + where[7]; got < 3000*5/12-150 || got > 3000*5/12+150 {
		t.Errorf("an entry stands in the first block %d times of 3000, want about 5 in 12", got)
	}

	plan = planOf(t, lines.String()+checks+"[[unit]]\nname = \"row\"\ncount = 4\n[[unit]]\nname = \"column\"\ncount = 5\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"treatment\"]\nchecks = [\"c1\", \"c2\"]\n")
	if all, list = Draws(plan, nil, "grid", 200); list.HasErrors() {
		t.Fatal(list)
	}
	for _, a := range all {
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Fatal(list)
		}
	}
}

// TestRowsThatReceived: where cows received treatments of their own, each of their
// groups is a Latin square.
func TestRowsThatReceived(t *testing.T) {
	plan := planOf(t, factorText("a", 4)+factorText("b", 2)+"[[unit]]\nname = \"cow\"\ncount = 8\nreceives = [\"b\"]\n[[unit]]\nname = \"period\"\ncount = 4\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n")
	all, list := Draws(plan, nil, "x", 100)
	if list.HasErrors() {
		t.Fatal(list)
	}
	for _, a := range all {
		var in [2][4][4]int
		for i, l := range a.Levels[0] {
			in[a.Levels[1][i/4]][i%4][l]++
		}
		for b := range in {
			for p := range in[b] {
				if in[b][p] != [4]int{1, 1, 1, 1} {
					t.Fatalf("level %d in period %d: %v", b, p, in[b][p])
				}
			}
		}
	}
}
