package allot

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
)

// herd writes a roster of n animals of different mass, sexes in turn.
func herd(n int) string {
	var b strings.Builder
	b.WriteString("ear_tag,sex,mass\n")
	for i := range n {
		fmt.Fprintf(&b, "T%02d,%s,%d\n", i+1, []string{"F", "M"}[i%2], 200+(i*37)%n)
	}
	return b.String()
}

func rosterOf(t testing.TB, plan *layout.Plan, text string) *Roster {
	t.Helper()
	r, list := ReadRoster(file("roster.csv", text), plan)
	if list.HasErrors() {
		t.Fatal(list)
	}
	return r
}

const byMass = "[roster]\nfile = \"roster.csv\"\nblock_by = \"mass\"\n"

// TestBlocksByRank: blocks hold successive ranks, the animals at the ends are spare, and
// each animal has a place of its own.
func TestBlocksByRank(t *testing.T) {
	for _, test := range []struct {
		name, units       string
		animals, blocks   int
		size, spare, unit int // animals of a block, spare ones, columns of units
	}{
		{"calves in blocks", "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"calf\"\nwithin = \"block\"\ncount = 4\nreceives = [\"a\"]\n", 14, 3, 4, 2, 2},
		{"pens of five", "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nanimals = 5\nreceives = [\"a\"]\n", 40, 2, 20, 0, 2},
		{"pigs in pens", "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"a\"]\n[[unit]]\nname = \"pig\"\nwithin = \"pen\"\ncount = 2\n", 19, 2, 8, 3, 3},
		{"cows in squares", "[[unit]]\nname = \"square\"\ncount = 2\n[[unit]]\nname = \"cow\"\nwithin = \"square\"\ncount = 4\n[[unit]]\nname = \"period\"\ncount = 4\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"a\"]\n", 8, 2, 4, 0, 2},
	} {
		plan := planOf(t, factorText("a", 4)+byMass+test.units)
		a, list := New(plan, rosterOf(t, plan, herd(test.animals)), "x")
		if list.HasErrors() {
			t.Errorf("%s: %v", test.name, list)
			continue
		}
		rows, err := csv.NewReader(strings.NewReader(string(a.Animals))).ReadAll()
		if err != nil || len(rows) != test.animals+1 || len(rows[0]) != 2+test.unit || rows[0][0] != "ear_tag" || rows[0][1] != "mass" {
			t.Errorf("%s: %v %v", test.name, rows, err)
			continue
		}
		spare, last := 0, -1.0
		low, high, count := map[string]float64{}, map[string]float64{}, map[string]int{}
		for _, row := range rows[1:] {
			v, _ := strconv.ParseFloat(row[1], 64)
			if v < last {
				t.Errorf("%s: %v after %v", test.name, v, last)
			}
			last = v
			b := row[2]
			if b == "" {
				spare++
				continue
			}
			if count[b]++; count[b] == 1 {
				low[b] = v
			}
			high[b] = v
		}
		if spare != test.spare || len(count) != test.blocks {
			t.Errorf("%s: %d spare in %v", test.name, spare, count)
		}
		for b := 1; b <= test.blocks; b++ {
			k := fmt.Sprint(b)
			if count[k] != test.size || b > 1 && low[k] <= high[fmt.Sprint(b-1)] {
				t.Errorf("%s: block %s holds %d animals from %v to %v", test.name, k, count[k], low[k], high[k])
			}
		}
	}
}

// TestSpare: of the runs of ranks the one with the smallest range is kept.
func TestSpare(t *testing.T) {
	plan := planOf(t, factorText("a", 2)+byMass+"[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"calf\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]\n")
	r := rosterOf(t, plan, "animal;mass\n7;41,5\n8;20\n3;42\n5;43,5\n4;44\n6;60\n")
	a, list := New(plan, r, "x")
	if list.HasErrors() {
		t.Fatal(list)
	}
	const want = "animal,mass,block,calf\n8,20,,\n7,\"41,5\",1,1\n3,42,1,2\n5,\"43,5\",2,1\n4,44,2,2\n6,60,,\n"
	if string(a.Animals) != want {
		t.Errorf("%s", a.Animals)
	}
	if words, _ := Scheme(plan, r); !strings.Contains(words, "2 are spare (8, 6)") {
		t.Error(words)
	}
}

// TestAnimalsUniform: an animal of a block goes to each of its pens equally often, and
// that does not hang on what the pen receives.
func TestAnimalsUniform(t *testing.T) {
	plan := planOf(t, factorText("a", 3)+byMass+"[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 3\nanimals = 2\nreceives = [\"a\"]\n")
	all, list := Draws(plan, rosterOf(t, plan, herd(12)), "animals", 3600)
	if list.HasErrors() {
		t.Fatal(list)
	}
	counts := make([]int, 9)
	for _, a := range all {
		rows, _ := csv.NewReader(strings.NewReader(string(a.Animals))).ReadAll()
		pen, _ := strconv.Atoi(rows[1][3])
		counts[(pen-1)*3+int(a.Levels[0][pen-1])]++
	}
	uniform(t, "pen and treatment of the lightest animal", counts)
}

// TestClassesByRank: where the animals are the units, their sex is that of the roster,
// and the draw is made within it.
func TestClassesByRank(t *testing.T) {
	plan := planOf(t, factorText("a", 2)+"[[factor]]\nname = \"sex\"\nlevels = [\"F\", \"M\"]\n"+byMass+"[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"calf\"\nwithin = \"block\"\ncount = 4\ncarries = [\"sex\"]\nreceives = [\"a\"]\n")
	r := rosterOf(t, plan, "tag,sex,mass\n1,F,10\n2,F,11\n3,M,12\n4,M,13\n5,M,14\n6,F,15\n7,M,16\n8,F,17\n")
	all, list := Draws(plan, r, "x", 50)
	if list.HasErrors() {
		t.Fatal(list)
	}
	for _, a := range all {
		if !slices.Equal(a.Levels[1], []int32{0, 0, 1, 1, 1, 0, 1, 0}) {
			t.Fatalf("sexes %v", a.Levels[1])
		}
		var n [2][2][2]int
		for i, l := range a.Levels[0] {
			n[i/4][a.Levels[1][i]][l]++
		}
		if n != [2][2][2]int{{{1, 1}, {1, 1}}, {{1, 1}, {1, 1}}} {
			t.Fatalf("treatments by block and sex: %v", n)
		}
	}
}

// TestBalance: of the candidates the one with the least spread of the treatments' means is
// kept, by a sum over all candidates made here again.
func TestBalance(t *testing.T) {
	const units = "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"a\"]\n"
	const ask = "[randomization]\nbalance_on = [\"mass\"]\ncandidates = 25\n[[covariate]]\nname = \"mass\"\n[roster]\nfile = \"roster.csv\"\n"
	var text strings.Builder
	text.WriteString("block,pen,mass\n")
	var mass []float64
	for i := range 12 {
		mass = append(mass, float64(i*i%17))
		fmt.Fprintf(&text, "%d,%d,%v\n", i/4+1, i%4+1, mass[i])
	}
	plan := planOf(t, factorText("a", 4)+ask+units)
	r := rosterOf(t, plan, text.String())
	all, list := Draws(plan, r, "balance", 20)
	if list.HasErrors() {
		t.Fatal(list)
	}
	plain, list := Draws(planOf(t, factorText("a", 4)+units), nil, "balance", 500)
	if list.HasErrors() {
		t.Fatal(list)
	}
	spread := func(a *Allotment) float64 {
		var sum [4]float64
		for i, l := range a.Levels[0] {
			sum[l] += mass[i]
		}
		x := 0.0
		for _, s := range sum {
			x += s * s
		}
		return x
	}
	for k, a := range all {
		least := math.Inf(1)
		var want *Allotment
		for _, c := range plain[25*k : 25*k+25] {
			if x := spread(c); x < least*(1-1e-12) {
				least, want = x, c
			}
		}
		if !slices.Equal(a.Levels[0], want.Levels[0]) {
			t.Errorf("draw %d: kept %v, want %v", k, a.Levels[0], want.Levels[0])
		}
		if a.made.Candidates != 25 || a.made.Rejected != 24 {
			t.Errorf("recorded %+v", a.made)
		}
	}
	for _, x := range []struct{ text, want string }{
		{strings.Replace(ask, "candidates = 25\n", "", 1), "there is one only"},
		{strings.Replace(ask, "balance_on = [\"mass\"]\n", "", 1), "nothing to choose among 25"},
	} {
		_, list := New(planOf(t, factorText("a", 4)+x.text+units), r, "x")
		if len(list) == 0 || !strings.Contains(list[0].Message, x.want) {
			t.Errorf("%v, want %q", list, x.want)
		}
	}
	if _, list := Draws(plan, r, "x", 1_000_000); !list.HasErrors() {
		t.Error("a million draws of 25 candidates are made")
	}
}

// TestRosterRefused: what is wrong with a roster is said with its place.
func TestRosterRefused(t *testing.T) {
	const units = "[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"calf\"\nwithin = \"block\"\ncount = 2\nreceives = [\"a\"]\n"
	plan := planOf(t, factorText("a", 2)+byMass+units)
	for _, x := range []struct{ roster, want string }{
		{"tag,weight\n1,2\n", `the roster has no column "mass"`},
		{"tag,mass\n1,2\n2,x\n3,4\n4,5\n", `mass "x" is not a number`},
		{"tag,mass\n1,2\n1,3\n3,4\n4,5\n", "tells all animals apart"},
		{"tag,mass\n1,2\n2,3\n3,4\n", "the units hold 4 animals, but the roster lists 3"},
		{"block,calf,mass\n1,1,2\n", "names units"},
	} {
		r, list := ReadRoster(file("roster.csv", x.roster), plan)
		if !list.HasErrors() {
			_, list = New(plan, r, "x")
		}
		if !list.HasErrors() || !strings.Contains(list[0].Message, x.want) || list[0].Pos.Line == 0 && list[0].Code != NotDrawn {
			t.Errorf("%q: %v", x.roster, list)
		}
	}
	_, list := New(plan, nil, "x")
	if !list.HasErrors() || list[0].Code != NotDrawn {
		t.Error(list)
	}
}

// TestAnimalsRecord: animals.csv is recorded with the draw, kept on a second one, and a
// change of it is found.
func TestAnimalsRecord(t *testing.T) {
	plan := planOf(t, factorText("a", 2)+byMass+"[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 2\nanimals = 3\nreceives = [\"a\"]\n")
	r := rosterOf(t, plan, herd(12))
	dir := t.TempDir()
	open := func() *folder.Folder {
		f, err := folder.Open(dir)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { _ = f.Close() })
		return f
	}
	var first *Allotment
	for _, seed := range []string{"one", "two"} {
		a, list := New(plan, r, seed)
		if list.HasErrors() {
			t.Fatal(list)
		}
		if first == nil {
			first = a
		}
		f := open()
		changes, err := Changes(f, a, Draw{Seed: seed, Why: "a pen was flooded"})
		if err == nil {
			err = f.Apply(changes...)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	a, list := Read(open(), plan)
	if list.HasErrors() || len(a.Draws) != 2 || a.Draws[0].Animals != folder.Hash(first.Animals) || !strings.Contains(a.Draws[1].Scheme, "ranked by mass") {
		t.Errorf("%+v %v", a, list)
	}
	if kept, err := os.ReadFile(filepath.Join(dir, "animals.1.csv")); err != nil || string(kept) != string(first.Animals) {
		t.Errorf("kept %q, %v", kept, err)
	}
	if err := os.WriteFile(filepath.Join(dir, AnimalsFile), first.Animals, 0o644); err != nil {
		t.Fatal(err)
	}
	if _, list := Read(open(), plan); !slices.ContainsFunc(list, func(d diag.Diagnostic) bool { return d.Code == AllotmentChanged }) {
		t.Errorf("a changed %s: %v", AnimalsFile, list)
	}
}
