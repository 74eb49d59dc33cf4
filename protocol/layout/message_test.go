package layout

import (
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"penwright/protocol"
	"penwright/protocol/diag"
)

// load reads a protocol of these units and factors as a file, so that positions count.
// Faults that the protocol finds by itself do not matter here: a plan must refuse them
// on its own account, since a protocol can be made without a file.
func load(t testing.TB, body string) *protocol.Protocol {
	t.Helper()
	src := "protocol = 1\n[trial]\ncode = \"HM-1\"\ntitle = \"Pens\"\nobjective = \"Does it differ?\"\n" + body
	p, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(src)}}, "protocol.toml")
	if p == nil {
		t.Fatalf("no protocol: %v", list)
	}
	return p
}

const (
	diets = "[[factor]]\nname = \"diet\"\nlevels = [\"a\", \"b\", \"c\", \"d\"]\n"
	feeds = "[[factor]]\nname = \"feed\"\nlevels = [\"x\", \"y\"]\n"
)

// Each case names the words of a message and of its hint, and the text of the line it
// points at.
func TestMessages(t *testing.T) {
	for _, c := range []struct{ code, body, says, hint, line string }{
		{"units-not-joined", diets + "[[unit]]\nname = \"cow\"\ncount = 4\n[[unit]]\nname = \"period\"\ncount = 4\nreceives = [\"diet\"]\n",
			`no unit lies within both "cow" and "period"`, `crosses = ["cow", "period"]`, `name = "period"`},
		{"bad-count", diets + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = [4, 4]\nreceives = [\"diet\"]\n",
			`count lists 2 numbers, but there are 3 instances of "block"`, "give one number, or 3", "count = [4, 4]"},
		{"bad-count", diets + "[[unit]]\nname = \"pen\"\ncount = 8\nlabels = [\"p\", \"q\"]\nreceives = [\"diet\"]\n",
			"2 labels for a count of 8", "", `labels = ["p", "q"]`},
		{"too-few-units", diets + feeds + "[[unit]]\nname = \"pen\"\ncount = 6\nreceives = [\"diet\", \"feed\"]\n",
			`6 instances of unit "pen" cannot receive every one of 4 diet × 2 feed`, "[[treatment]]", `receives = ["diet", "feed"]`},
		{"no-error", diets + "[[unit]]\nname = \"pen\"\ncount = 4\nreceives = [\"diet\"]\n",
			"no degrees of freedom are left for the error of diet", "more units are needed", `name = "pen"`},
		{"no-error", diets + feeds + "[[unit]]\nname = \"pen\"\ncount = 8\nreceives = [\"diet\", \"feed\"]\n",
			"error of diet, feed, diet:feed", `interactions = "none" leaves 3`, `name = "pen"`},
		{"bad-count", diets + "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"diet\"]\nreplicates = { a = 4, b = 4, c = 4, d = 3 }\n",
			"replicates add up to 15, but there are 16 instances", "", "replicates ="},
		{"bad-count", diets + "[[unit]]\nname = \"block\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"diet\"]\nreplicates = { a = 2, b = 1, c = 1, d = 1 }\n",
			"replicates add up to 5, but each block holds 4", "", "replicates ="},
		{"blocks-uneven", diets + "[[unit]]\nname = \"block\"\ncount = 4\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 5\nreceives = [\"diet\"]\n",
			"no multiple of 4 treatments", "blocks of 4 or 8", "count = 5"},
		{"bad-checks", "[[treatment]]\ncode = \"A\"\n[[treatment]]\ncode = \"B\"\n[[treatment]]\ncode = \"e\"\n[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 3\nreceives = [\"treatment\"]\nchecks = [\"A\", \"B\"]\n",
			"less 4 for checks leave 2 for 1 entries", "needs 5 instances", `checks = ["A", "B"]`},
		{"too-many", diets + "[[unit]]\nname = \"block\"\ncount = 100000\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 100000\nreceives = [\"diet\"]\n",
			"more than the 1000000 instances", "", "count = 100000"},
		{"too-many", diets + "[[unit]]\nname = \"pen\"\ncount = 200000\nreceives = [\"diet\"]\n",
			"more than the 100000 experimental units", "", `receives = ["diet"]`},
		{"called-differs", "called = \"RCBD\"\n" + diets + "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"diet\"]\n",
			`called "RCBD", but its units make it "completely randomized"`, "", `called = "RCBD"`},
		{"called-unknown", "called = \"the usual\"\n" + diets + "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"diet\"]\n",
			"no name of a design", "completely randomized", `called = "the usual"`},
		{"cannot-interact", diets + "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"diet\"]\n[[unit]]\nname = \"animal\"\nwithin = \"pen\"\ncount = 2\ninteracts = true\n",
			"cannot interact", "", "interacts = true"},
		{"no-exact-error", diets + "[[unit]]\nname = \"plot\"\ncount = 16\nreceives = [\"diet\"]\n[[unit]]\nname = \"year\"\ncount = 3\ninteracts = true\n[[unit]]\nname = \"cut\"\ncrosses = [\"plot\", \"year\"]\n",
			"diet has two errors at once", "", "interacts = true"},
	} {
		t.Run(c.code, func(t *testing.T) {
			p := load(t, c.body)
			plan, list := New(p)
			if (plan == nil) != list.HasErrors() {
				t.Errorf("plan %v with %v", plan, list)
			}
			found := false
			for _, d := range list {
				if d.Code != c.code {
					t.Errorf("unexpected: %s [%s]", d.Message, d.Code)
					continue
				}
				found = true
				if !strings.Contains(d.Message, c.says) {
					t.Errorf("says %q, want %q", d.Message, c.says)
				}
				if !strings.Contains(d.Hint, c.hint) {
					t.Errorf("hints %q, want %q", d.Hint, c.hint)
				}
				lines := strings.Split(string(p.Source), "\n")
				if d.Pos.Line < 1 || d.Pos.Line > len(lines) || !strings.Contains(lines[d.Pos.Line-1], c.line) {
					t.Errorf("points at %v, want the line of %q", d.Pos, c.line)
				}
			}
			if !found {
				t.Errorf("no message %s in %v", c.code, list)
			}
		})
	}
}

// Units too many for memory are refused at once, whatever the numbers overflow to.
func TestLimitsBeforeMemory(t *testing.T) {
	huge := 1 << 62
	for _, units := range [][]protocol.Unit{
		{gets(top("a", huge), "diet")},
		{top("a", 1_000_000), gets(in("b", "a", huge), "diet")},
		{top("a", 2), gets(in("b", "a", huge, huge), "diet")},
		{top("a", 1_000_000), top("b", 1_000_000), gets(crossing("c", "a", "b"), "diet")},
		{top("a", 100), top("b", 100), top("c", 100), top("d", 100), gets(crossing("e", "a", "b", "c", "d"), "diet")},
	} {
		start := time.Now()
		plan, list := New(&protocol.Protocol{Factors: []protocol.Factor{levels("diet", 4)}, Units: units})
		if plan != nil || len(list) != 1 || list[0].Code != "too-many" {
			t.Errorf("%v: %v", units, list)
		}
		if d := time.Since(start); d > 10*time.Second {
			t.Errorf("took %v", d)
		}
	}
	var chain []protocol.Unit
	for k := range 32 {
		u := protocol.Unit{Name: string(rune('a' + k)), Count: []int{1}}
		if k > 0 {
			u.Within = chain[k-1].Name
		} else {
			u.Count = []int{1_000_000}
		}
		chain = append(chain, u)
	}
	if _, list := New(&protocol.Protocol{Units: chain}); len(list) != 1 || list[0].Code != "too-many" {
		t.Errorf("a long chain: %v", list)
	}
	var factors []protocol.Factor
	for k := range 14 {
		factors = append(factors, levels(string(rune('a'+k)), 2))
	}
	p := &protocol.Protocol{Factors: factors, Units: []protocol.Unit{top("run", 16384)}}
	for _, f := range factors {
		p.Units[0].Receives = append(p.Units[0].Receives, f.Name)
	}
	p.Analysis.Interactions = -1
	if _, list := New(p); len(list) != 1 || list[0].Code != "too-many" || list[0].Hint != "say interactions = 3" {
		t.Errorf("14 factors: %v", list)
	}
	p.Analysis.Interactions = 2
	if plan, list := New(p); plan == nil || len(plan.Terms) != 14+91 {
		t.Errorf("14 factors in pairs: %v", list)
	}
}

// What authors call designs, by the names and synonyms of the trade.
func TestCalled(t *testing.T) {
	byFile := map[string]design{}
	for _, d := range designs() {
		byFile[d.file] = d
	}
	for _, c := range []struct {
		file, called, code string
	}{
		{"completely-randomized", "Completely randomised design", ""},
		{"completely-randomized", "CRD", ""},
		{"completely-randomized", "randomized block", "called-differs"},
		{"randomized-block", "RCBD", ""},
		{"randomized-block", "randomised complete blocks", ""},
		{"randomized-block", "Latin square", "called-differs"},
		{"randomized-block", "balanced incomplete block", "called-differs"},
		{"generalized-block", "generalised randomised block design", ""},
		{"generalized-block", "randomized blocks", ""},
		{"doubled-control", "randomized complete block", ""},
		{"latin-square", "4 × 4 Latin square", ""},
		{"latin-square", "Latin-square crossover", ""},
		{"replicated-latin-squares", "replicated Latin squares", ""},
		{"replicated-latin-squares", "Latin square", ""},
		{"latin-square", "replicated Latin squares", "called-differs"},
		{"graeco-latin-square", "Greco-Latin square", ""},
		{"crossover", "cross-over", ""},
		{"crossover", "change-over design", ""},
		{"switchback", "double reversal", ""},
		{"switchback", "split plot", "called-differs"},
		{"balanced-incomplete-block", "BIBD", ""},
		{"balanced-incomplete-block", "incomplete blocks", ""},
		{"incomplete-block", "balanced incomplete block", "called-differs"},
		{"alpha", "alpha-lattice", ""},
		{"square-lattice", "simple lattice", ""},
		{"row-and-column", "Youden square", ""},
		{"row-and-column", "row-column design", ""},
		{"split-plot", "split-plot in randomized complete blocks", ""},
		{"split-plot", "split-plot in a Latin square", "called-differs"},
		{"split-plot-latin", "split plot in a Latin square", ""},
		{"split-plot", "3 × 4 factorial in split plots", ""},
		{"split-split-plot", "split-split-plot", ""},
		{"split-split-plot", "split plot", "called-differs"},
		{"split-plot", "split-split-plot", "called-differs"},
		{"strip-plot", "split-block", ""},
		{"strip-plot", "split plot", "called-differs"},
		{"strip-split-plot", "strip-split plot", ""},
		{"augmented", "augmented randomized complete block", ""},
		{"augmented", "augmented RCBD", ""},
		{"completely-randomized", "parallel groups", ""},
		{"factorial", "completely randomized 3 × 4 factorial", ""},
		{"completely-randomized", "completely randomized factorial", "called-differs"},
		{"repeated-measures", "randomized blocks with repeated measures", ""},
		{"several-sites", "multi-site randomized complete block", ""},
		{"sampling", "randomized complete block with subsampling", ""},
		{"randomized-block", "", ""},
		{"randomized-block", "as last year", "called-unknown"},
	} {
		d, ok := byFile[c.file]
		if !ok {
			t.Fatalf("no design %s", c.file)
		}
		d.p.Analysis.Interactions = -1
		d.p.Trial.Called = c.called
		_, list := New(&d.p)
		code := ""
		for _, x := range list {
			if x.Key == "trial.called" {
				code = x.Code
				if x.Severity == diag.Error {
					t.Errorf("%s: a name is no error", c.file)
				}
			}
		}
		if code != c.code {
			t.Errorf("%s called %q: %q, want %q", c.file, c.called, code, c.code)
		}
	}
}

// Numbers for each treatment, in all and in every block.
func TestReplicates(t *testing.T) {
	for _, c := range []struct {
		name  string
		p     protocol.Protocol
		unit  int
		total []int
		block []int // in the first instance of the parent; nil when the draw decides
	}{
		{"what is left over goes to controls first", protocol.Protocol{
			Factors: []protocol.Factor{func() protocol.Factor { f := levels("diet", 4); f.Control = []string{"d3"}; return f }()},
			Units:   []protocol.Unit{gets(top("pen", 18), "diet")}}, 0, []int{5, 4, 5, 4}, nil},
		{"stated for one level", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 4)}, Units: []protocol.Unit{replicates(gets(top("pen", 17), "diet"), "d2", 8)}}, 0, []int{3, 8, 3, 3}, nil},
		{"in every block", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 3)}, Units: []protocol.Unit{top("block", 5), replicates(gets(in("pen", "block", 4), "diet"), "d1", 2)}}, 1,
			[]int{10, 5, 5}, []int{2, 1, 1}},
		{"for the whole trial where blocks are too small", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 4)}, Units: []protocol.Unit{top("block", 7), replicates(gets(in("pen", "block", 3), "diet"), "d1", 6)}}, 1,
			[]int{6, 5, 5, 5}, nil},
		{"blocks of several sizes", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 4)}, Units: []protocol.Unit{top("block", 3), gets(in("pen", "block", 8, 4, 4), "diet")}}, 1,
			[]int{4, 4, 4, 4}, []int{2, 2, 2, 2}},
		{"in each row and column", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 4)}, Units: []protocol.Unit{top("row", 5), top("column", 5),
				replicates(gets(crossing("plot", "row", "column"), "diet"), "d1", 2)}}, 2, []int{10, 5, 5, 5}, nil},
	} {
		p := plan(t, &c.p)
		if got := p.Replicates(c.unit); !equalInts(got, c.total) {
			t.Errorf("%s: %v, want %v", c.name, got, c.total)
		}
		if w := p.Units[c.unit].Within; w >= 0 {
			if got := p.Planned(c.unit, w, 0); !equalInts(got, c.block) {
				t.Errorf("%s: %v in a block, want %v", c.name, got, c.block)
			}
		}
	}
}

func equalInts(a, b []int) bool {
	if len(a) != len(b) || (a == nil) != (b == nil) {
		return false
	}
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

// Names of instances: numbered within the parent, through the trial, or labelled.
func TestOwnNames(t *testing.T) {
	diet := []protocol.Factor{levels("diet", 2)}
	block := top("block", 2)
	for _, c := range []struct {
		unit protocol.Unit
		want string
	}{
		{protocol.Unit{Count: []int{2}}, "1 2 1 2"},
		{protocol.Unit{Count: []int{2}, Numbered: "through"}, "1 2 3 4"},
		{protocol.Unit{Count: []int{3, 2}, Numbered: "through"}, "1 2 3 4 5"},
		{protocol.Unit{Count: []int{2}, Labels: [][]string{{"n", "s"}}}, "n s n s"},
		{protocol.Unit{Count: []int{2, 3}, Labels: [][]string{{"a", "b"}, {"a", "c", "d"}}}, "a b a c d"},
		{protocol.Unit{Labels: [][]string{{"a", "b"}, {"a", "c", "d"}}}, "a b a c d"},
		{protocol.Unit{Count: []int{2}, Numbered: "through", Labels: [][]string{{"p", "q", "r", "s"}}}, "p q r s"},
	} {
		c.unit.Name, c.unit.Within, c.unit.Receives = "pen", "block", []string{"diet"}
		p := plan(t, &protocol.Protocol{Factors: diet, Units: []protocol.Unit{block, c.unit}})
		if got := strings.Join(p.Units[1].Own, " "); got != c.want {
			t.Errorf("named %s, want %s", got, c.want)
		}
	}
	_, list := New(&protocol.Protocol{Factors: diet, Units: []protocol.Unit{block,
		{Name: "pen", Within: "block", Count: []int{2}, Labels: [][]string{{"x", "x"}}, Receives: []string{"diet"}}}})
	if len(list) != 1 || list[0].Code != "duplicate" {
		t.Errorf("a name given twice: %v", list)
	}
}

// A crossing pairs only what agrees in the units shared, the first crossed slowest.
func TestCrossing(t *testing.T) {
	p := plan(t, &protocol.Protocol{Factors: []protocol.Factor{levels("diet", 2)}, Units: []protocol.Unit{
		top("block", 2), in("strip", "block", 2, 1), in("lane", "block", 2, 3), gets(crossing("cell", "strip", "lane"), "diet")}})
	var got []string
	for i := range p.Units[3].N {
		got = append(got, p.Units[1].Own[p.Coarse(3, 1)[i]]+p.Units[2].Own[p.Coarse(3, 2)[i]]+p.Units[0].Own[p.Coarse(3, 0)[i]])
	}
	if s := strings.Join(got, " "); s != "111 121 211 221 112 122 132" {
		t.Errorf("cells (strip, lane, block) %s", s)
	}
	if p.Coarse(1, 2) != nil || p.Coarse(0, 1) != nil {
		t.Error("maps between units that do not hold each other")
	}
}

// Fixed and random units, as the methods state them.
func TestRandom(t *testing.T) {
	no, yes := false, true
	set := func(u protocol.Unit, random *bool) protocol.Unit {
		u.Random = random
		return u
	}
	for _, c := range []struct {
		name, blocks, want string
		units              []protocol.Unit
		carry              *protocol.CarryOver
	}{
		{"complete blocks are fixed", "", "pen animal", []protocol.Unit{top("block", 5), gets(in("pen", "block", 4), "diet"), in("animal", "pen", 3)}, nil},
		{"incomplete blocks are random", "", "block pen", []protocol.Unit{top("block", 8), gets(in("pen", "block", 3), "diet")}, nil},
		{"resolvable: only the small blocks", "", "block pen", []protocol.Unit{top("replicate", 3), in("block", "replicate", 2), gets(in("pen", "block", 2), "diet")}, nil},
		{"rows and columns are fixed", "", "plot", []protocol.Unit{top("row", 3), top("column", 4), gets(crossing("plot", "row", "column"), "diet")}, nil},
		{"the unit of a crossover is random", "", "cow sample", []protocol.Unit{top("cow", 8), top("period", 4), gets(crossing("sample", "cow", "period"), "diet")},
			&protocol.CarryOver{Factor: "diet", On: "cow", Along: "period"}},
		{"all blocks fixed", "fixed", "pen", []protocol.Unit{top("block", 8), gets(in("pen", "block", 3), "diet")}, nil},
		{"all blocks random", "random", "block pen", []protocol.Unit{top("block", 8), gets(in("pen", "block", 4), "diet")}, nil},
		{"one unit overridden", "", "block pen", []protocol.Unit{set(top("block", 8), &yes), gets(in("pen", "block", 4), "diet")}, nil},
		{"one unit overridden against all", "random", "replicate pen", []protocol.Unit{top("replicate", 3), set(in("block", "replicate", 2), &no), gets(in("pen", "block", 2), "diet")}, nil},
	} {
		proto := &protocol.Protocol{Factors: []protocol.Factor{levels("diet", 4)}, Units: c.units, CarryOver: c.carry}
		proto.Analysis.Blocks = c.blocks
		p := plan(t, proto)
		var random []string
		for _, u := range p.Units {
			if u.Random {
				random = append(random, u.Name)
			}
		}
		if got := strings.Join(random, " "); got != c.want {
			t.Errorf("%s: %s, want %s", c.name, got, c.want)
		}
	}
}

// A file of any bytes gives a plan or messages inside the file.
func FuzzNew(f *testing.F) {
	head := "protocol = 1\n[trial]\ncode = \"HM-1\"\ntitle = \"Pens\"\nobjective = \"Does it differ?\"\n"
	for _, body := range []string{
		diets + "[[unit]]\nname = \"block\"\ncount = 5\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"diet\"]\n",
		diets + feeds + "[[unit]]\nname = \"site\"\ncount = 2\ninteracts = true\n[[unit]]\nname = \"row\"\nwithin = \"site\"\ncount = [4, 4]\n[[unit]]\nname = \"column\"\nwithin = \"site\"\ncount = 4\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"diet\"]\n[[unit]]\nname = \"half\"\nwithin = \"plot\"\ncount = 2\nreceives = [\"feed\"]\n",
		diets + feeds + "[[unit]]\nname = \"strip\"\ncount = 8\nreceives = [\"diet\"]\nreplicates = { a = 3 }\n[[unit]]\nname = \"lane\"\ncount = 4\ncarries = [\"feed\"]\n[[unit]]\nname = \"cell\"\ncrosses = [\"strip\", \"lane\"]\n",
		"[[treatment]]\ncode = \"A\"\n[[treatment]]\ncode = \"e\"\n[[treatment]]\ncode = \"f\"\n[[unit]]\nname = \"block\"\nlabels = [\"n\", \"s\"]\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 2\nreceives = [\"treatment\"]\nchecks = [\"A\"]\n",
	} {
		f.Add([]byte(head + body))
	}
	f.Fuzz(func(t *testing.T, src []byte) {
		p, _ := protocol.Load(fstest.MapFS{"protocol.toml": {Data: src}}, "protocol.toml")
		if p == nil {
			return
		}
		plan, list := New(p)
		if (plan == nil) != list.HasErrors() {
			t.Fatalf("plan %v with %v", plan, list)
		}
		lines := strings.Count(string(src), "\n") + 1
		for _, d := range list {
			if d.Pos.File != "protocol.toml" || d.Pos.Line > lines || d.Message == "" || d.Code == "" {
				t.Errorf("%+v", d)
			}
		}
		if plan != nil && plan.Units[plan.Smallest].N < 10_000 {
			_ = plan.String()
		}
	})
}

// A trial at the limit, 10⁶ animals in 10 000 pens.
func BenchmarkNew(b *testing.B) {
	p := &protocol.Protocol{Factors: []protocol.Factor{levels("diet", 4)}, Units: []protocol.Unit{
		top("block", 100), gets(in("pen", "block", 100), "diet"), in("animal", "pen", 100)}}
	for b.Loop() {
		if plan, list := New(p); plan == nil {
			b.Fatal(list)
		}
	}
}
