package layout

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"penwright/protocol"
)

var update = flag.Bool("update", false, "rewrite the golden files")

func top(name string, n int) protocol.Unit { return protocol.Unit{Name: name, Count: []int{n}} }

func in(name, parent string, n ...int) protocol.Unit {
	return protocol.Unit{Name: name, Within: parent, Count: n}
}

func crossing(name string, of ...string) protocol.Unit {
	return protocol.Unit{Name: name, Crosses: of}
}

func gets(u protocol.Unit, factors ...string) protocol.Unit {
	u.Receives = factors
	return u
}

func carries(u protocol.Unit, factors ...string) protocol.Unit {
	u.Carries = factors
	return u
}

func interacts(u protocol.Unit) protocol.Unit {
	u.Interacts = true
	return u
}

func replicates(u protocol.Unit, level string, n int) protocol.Unit {
	u.Replicates = append(u.Replicates, protocol.Replicate{Level: level, N: n})
	return u
}

// listed makes treatments outside any factorial.
func listed(codes ...string) []protocol.Treatment {
	var out []protocol.Treatment
	for _, c := range codes {
		out = append(out, protocol.Treatment{Code: c})
	}
	return out
}

// scab is a control beside a factorial of season and rate.
func scab() []protocol.Treatment {
	out := []protocol.Treatment{{Code: "O", Control: true}}
	for _, s := range []string{"s1", "s2"} {
		for _, r := range []string{"r1", "r2", "r3"} {
			out = append(out, protocol.Treatment{Code: s + r, Levels: map[string]string{"season": s, "rate": r}})
		}
	}
	return out
}

type design struct {
	file string
	want string
	p    protocol.Protocol
}

// designs holds every row of the table of designs, and the combinations that trials
// make of them.
func designs() []design {
	diet, line := levels("diet", 4), levels("line", 12)
	ab := []protocol.Factor{levels("grazing", 3), levels("supplement", 4)}
	rows := func(n, m int, u ...protocol.Unit) []protocol.Unit {
		return append([]protocol.Unit{top("cow", n), top("period", m)}, u...)
	}
	return []design{
		{"completely-randomized", "completely randomized", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{gets(top("pen", 16), "diet")}}},
		{"unequal-replication", "completely randomized", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{replicates(gets(top("pen", 17), "diet"), "d1", 8)}}},
		{"randomized-block", "randomized complete block", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("block", 5), gets(in("pen", "block", 4), "diet")}}},
		{"doubled-control", "randomized complete block", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("block", 5), replicates(gets(in("pen", "block", 5), "diet"), "d1", 2)}}},
		{"generalized-block", "generalized randomized block", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("block", 3), gets(in("pen", "block", 8), "diet")}}},
		{"latin-square", "Latin square", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: rows(4, 4, gets(crossing("sample", "cow", "period"), "diet"))}},
		{"replicated-latin-squares", "replicated Latin squares", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("square", 2), in("cow", "square", 4), in("period", "square", 4),
				gets(crossing("sample", "cow", "period"), "diet")}}},
		{"latin-squares-common-periods", "replicated Latin squares, common period", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("square", 2), in("cow", "square", 4), top("period", 4),
				gets(crossing("sample", "cow", "period"), "diet")}}},
		{"graeco-latin-square", "Graeco-Latin square", protocol.Protocol{
			Factors: []protocol.Factor{diet, levels("vessel", 4)}, Units: rows(4, 4, gets(crossing("sample", "cow", "period"), "diet", "vessel"))}},
		{"factorial-in-latin-square", "Latin square, 2 × 2 factorial", protocol.Protocol{
			Factors: []protocol.Factor{levels("fat", 2), levels("protein", 2)}, Units: rows(4, 4, gets(crossing("sample", "cow", "period"), "fat", "protein"))}},
		{"latin-rectangle", "row and column, Latin rectangle", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: rows(12, 4, gets(crossing("sample", "cow", "period"), "diet"))}},
		{"crossover", "crossover, Latin rectangle", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: rows(12, 4, gets(crossing("sample", "cow", "period"), "diet")),
			CarryOver: &protocol.CarryOver{Factor: "diet", Along: "period", On: "cow"}}},
		{"crossover-squares", "crossover, replicated Latin squares", protocol.Protocol{
			Factors: []protocol.Factor{levels("ration", 3)}, Units: []protocol.Unit{top("square", 2), in("cow", "square", 3), in("period", "square", 3),
				gets(crossing("milk", "cow", "period"), "ration")},
			CarryOver: &protocol.CarryOver{Factor: "ration", Along: "period", On: "cow"}}},
		{"switchback", "switchback", protocol.Protocol{
			Factors: []protocol.Factor{levels("grain", 2)}, Units: rows(10, 3, gets(crossing("sample", "cow", "period"), "grain")),
			TimeTrend: &protocol.TimeTrend{On: "cow", Along: "period", Order: 1}}},
		{"balanced-incomplete-block", "balanced incomplete block", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 7)}, Units: []protocol.Unit{top("block", 7), gets(in("pen", "block", 3), "diet")}}},
		{"incomplete-block", "incomplete block", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 6)}, Units: []protocol.Unit{top("block", 8), gets(in("pen", "block", 3), "diet")}}},
		{"extended-block", "extended block", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("block", 4), gets(in("pen", "block", 5), "diet")}}},
		{"alpha", "resolvable incomplete block, rectangular lattice", protocol.Protocol{
			Factors: []protocol.Factor{line}, Units: []protocol.Unit{top("replicate", 2), in("block", "replicate", 4), gets(in("plot", "block", 3), "line")}}},
		{"square-lattice", "resolvable incomplete block, square lattice", protocol.Protocol{
			Factors: []protocol.Factor{levels("line", 9)}, Units: []protocol.Unit{top("replicate", 2), in("block", "replicate", 3), gets(in("plot", "block", 3), "line")}}},
		{"row-and-column", "row and column", protocol.Protocol{
			Factors: []protocol.Factor{levels("line", 7)}, Units: []protocol.Unit{top("row", 4), top("column", 7), gets(crossing("plot", "row", "column"), "line")}}},
		{"split-plot", "split plot, whole plots in randomized complete blocks", protocol.Protocol{
			Factors: ab, Units: []protocol.Unit{top("block", 4), gets(in("paddock", "block", 3), "grazing"), gets(in("pen", "paddock", 4), "supplement")}}},
		{"split-plot-randomized", "split plot, whole plots completely randomized", protocol.Protocol{
			Factors: ab, Units: []protocol.Unit{gets(top("paddock", 9), "grazing"), gets(in("pen", "paddock", 4), "supplement")}}},
		{"split-plot-latin", "split plot, whole plots in a Latin square", protocol.Protocol{
			Factors: ab, Units: []protocol.Unit{top("row", 3), top("column", 3), gets(crossing("plot", "row", "column"), "grazing"), gets(in("subplot", "plot", 4), "supplement")}}},
		{"split-split-plot", "split-split plot, whole plots in randomized complete blocks", protocol.Protocol{
			Factors: append(ab[:2:2], levels("bedding", 2)), Units: []protocol.Unit{top("block", 4), gets(in("paddock", "block", 3), "grazing"),
				gets(in("pen", "paddock", 4), "supplement"), gets(in("crate", "pen", 2), "bedding")}}},
		{"split-split-split-plot", "split-split-split plot, whole plots completely randomized", protocol.Protocol{
			Factors: []protocol.Factor{levels("a", 2), levels("b", 2), levels("c", 2), levels("d", 2)}, Units: []protocol.Unit{
				gets(top("w", 6), "a"), gets(in("x", "w", 2), "b"), gets(in("y", "x", 2), "c"), gets(in("z", "y", 2), "d")}}},
		{"strip-plot", "strip plot, in complete blocks", protocol.Protocol{
			Factors: ab, Units: []protocol.Unit{top("block", 3), gets(in("strip", "block", 3), "grazing"), gets(in("lane", "block", 4), "supplement"),
				crossing("cell", "strip", "lane")}}},
		{"strip-split-plot", "strip-split plot, in complete blocks", protocol.Protocol{
			Factors: append(ab[:2:2], levels("cutting", 2)), Units: []protocol.Unit{top("block", 3), gets(in("strip", "block", 3), "grazing"), gets(in("lane", "block", 4), "supplement"),
				crossing("cell", "strip", "lane"), gets(in("half", "cell", 2), "cutting")}}},
		{"strips-within-whole-plots", "split plot, whole plots in randomized complete blocks, lane across strip", protocol.Protocol{
			Factors: append(ab[:2:2], levels("cutting", 2)), Units: []protocol.Unit{top("block", 3), gets(in("paddock", "block", 3), "grazing"),
				gets(in("strip", "paddock", 4), "supplement"), gets(in("lane", "paddock", 2), "cutting"), crossing("cell", "strip", "lane")}}},
		{"sampling", "randomized complete block, with sampling of animal", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("block", 5), gets(in("pen", "block", 4), "diet"), in("animal", "pen", 6)}}},
		{"sampling-unequal", "completely randomized, with sampling of animal", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{gets(top("pen", 8), "diet"), in("animal", "pen", 6, 5, 6, 6, 4, 6, 6, 5)}}},
		{"repeated-measures", "randomized complete block, repeated measures over year", protocol.Protocol{
			Factors:  []protocol.Factor{levels("cutting", 4)},
			Units:    []protocol.Unit{top("block", 4), gets(in("plot", "block", 4), "cutting")},
			Repeated: []protocol.Repeated{{Name: "year", On: "plot", At: []string{"1929", "1930", "1931", "1932", "1933"}}}}},
		{"several-sites", "randomized complete block, repeated over site", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{interacts(top("site", 3)), in("block", "site", 4), gets(in("plot", "block", 4), "diet")}}},
		{"several-sites-pooled", "randomized complete block, repeated over site", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{top("site", 3), in("block", "site", 4, 5, 4), gets(in("plot", "block", 4), "diet")}}},
		{"several-sites-randomized", "completely randomized, repeated over site", protocol.Protocol{
			Factors: []protocol.Factor{diet}, Units: []protocol.Unit{interacts(top("site", 3)), gets(in("pen", "site", 8), "diet")}}},
		{"carried-class", "randomized complete block, sex carried by pig", protocol.Protocol{
			Factors: []protocol.Factor{levels("diet", 3), levels("sex", 2)},
			Units:   []protocol.Unit{top("pen", 5), gets(carries(in("pig", "pen", 6), "sex"), "diet")}}},
		{"carried-within-pen", "randomized complete block, sex carried by group", protocol.Protocol{
			Factors: []protocol.Factor{diet, levels("sex", 2)},
			Units:   []protocol.Unit{top("block", 5), gets(in("pen", "block", 4), "diet"), carries(in("group", "pen", 2), "sex")}}},
		{"augmented", "augmented block", protocol.Protocol{
			Treatments: listed("A", "B", "C", "D", "e", "f", "g", "h", "i", "j", "k", "l"),
			Units: []protocol.Unit{top("block", 3), {Name: "plot", Within: "block", Count: []int{7, 6, 7}, Receives: []string{"treatment"},
				Checks: []string{"A", "B", "C", "D"}}}}},
		{"factorial", "completely randomized, 3 × 4 factorial", protocol.Protocol{
			Factors: ab, Units: []protocol.Unit{gets(top("pen", 24), "grazing", "supplement")}}},
		{"factorial-plus-control", "completely randomized, 2 × 3 factorial plus control", protocol.Protocol{
			Factors: []protocol.Factor{levels("season", 2), levels("rate", 3)}, Treatments: scab(),
			Units: []protocol.Unit{replicates(gets(top("plot", 32), "treatment"), "O", 8)}}},
		{"confounded-factorial", "incomplete block, 2 × 2 × 2 factorial", protocol.Protocol{
			Factors: []protocol.Factor{levels("a", 2), levels("b", 2), levels("c", 2)},
			Units:   []protocol.Unit{top("block", 14), gets(in("plot", "block", 4), "a", "b", "c")}}},
		{"unreplicated-factorial", "completely randomized, 2 × 2 × 2 factorial", protocol.Protocol{
			Factors: []protocol.Factor{levels("a", 2), levels("b", 2), levels("c", 2)},
			Units:   []protocol.Unit{gets(top("run", 8), "a", "b", "c")}}},
		{"year-across-plots", "randomized complete block, observed over year", protocol.Protocol{
			Factors: []protocol.Factor{diet},
			Units:   []protocol.Unit{top("block", 4), gets(in("plot", "block", 4), "diet"), interacts(top("year", 3)), crossing("cut", "plot", "year")}}},
	}
}

func TestDesigns(t *testing.T) {
	seen := map[string]bool{}
	for _, d := range designs() {
		if seen[d.file] {
			t.Errorf("two cases are called %s", d.file)
		}
		seen[d.file] = true
		t.Run(d.file, func(t *testing.T) {
			d.p.Analysis.Interactions = -1
			got, list := New(&d.p)
			var w strings.Builder
			if got != nil {
				w.WriteString(got.String())
			}
			for _, x := range list {
				fmt.Fprintf(&w, "%s %s: %s [%s] hint: %s\n", x.Severity, x.Key, x.Message, x.Code, x.Hint)
			}
			if got == nil {
				t.Fatalf("refused:\n%s", w.String())
			}
			if name := got.Design.String(); name != d.want {
				t.Errorf("named %q, want %q", name, d.want)
			}
			path := filepath.Join("testdata", d.file+".golden")
			if *update {
				if err := os.WriteFile(path, []byte(w.String()), 0o666); err != nil {
					t.Fatal(err)
				}
				return
			}
			want, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			if w.String() != string(want) {
				t.Errorf("got\n%s\nwant\n%s", w.String(), want)
			}
		})
	}
}
