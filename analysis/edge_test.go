package analysis

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/analysis/result"
	"penwright/protocol/diag"
)

// edge writes a trial from its [[factor]], [[unit]] … part and its data. The response is g
// unless the body has its own.
func edge(body, data string) fstest.MapFS {
	p := "protocol = 1\n[trial]\ncode = \"E\"\ntitle = \"Edge\"\nobjective = \"Edges.\"\n[randomization]\nmethod = \"made up\"\n" + body
	if !strings.Contains(body, "[[response]]") {
		p += "[[response]]\nname = \"g\"\nkind = \"continuous\"\n"
	}
	p += "[data]\nfile = \"data.csv\"\n"
	return fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(p)}, "data.csv": &fstest.MapFile{Data: []byte(data)}}
}

const (
	oneFactor = `[[factor]]
name = "diet"
levels = ["a", "b", "c"]
`
	twoFactors = `[[factor]]
name = "a"
levels = ["a1", "a2"]
[[factor]]
name = "b"
levels = ["b1", "b2", "b3"]
control = "b1"
`
	inBlocks = oneFactor + `[[unit]]
name = "block"
count = 4
[[unit]]
name = "pen"
within = "block"
count = 3
receives = ["diet"]
`
	splitPlots = `[[factor]]
name = "a"
levels = ["a1", "a2"]
[[factor]]
name = "b"
levels = ["b1", "b2"]
[[unit]]
name = "block"
count = %d
[[unit]]
name = "plot"
within = "block"
count = 2
receives = ["a"]
[[unit]]
name = "sub"
within = "plot"
count = 2
receives = ["b"]
`
	factorialData = `pen,a,b,g
1,a1,b1,5
2,a1,b2,7
3,a1,b3,9
4,a2,b1,6
5,a2,b2,8
6,a2,b3,12
7,a1,b1,6
8,a1,b2,9
9,a1,b3,9
10,a2,b1,4
11,a2,b2,8
12,a2,b3,13
`
)

// pens are count pens of a trial that is not blocked.
func pens(factors string, count int, receives, analysis string) string {
	return fmt.Sprintf("%s[[unit]]\nname = \"pen\"\ncount = %d\nreceives = [%s]\n[analysis]\n%s\n", factors, count, receives, analysis)
}

// blocked makes data of four blocks of three diets.
func blocked(value func(block, diet int) string) string {
	var b strings.Builder
	b.WriteString("block,pen,diet,g\n")
	for k := range 4 {
		for d, name := range []string{"a", "b", "c"} {
			fmt.Fprintf(&b, "%d,%d,%s,%s\n", k+1, d+1, name, value(k, d))
		}
	}
	return b.String()
}

func uneven(block, diet int) int { return 3*block + 2*diet + (block*diet*7)%5 + block*diet%3 }

// split makes data of blocks of two plots of two subplots.
func split(blocks int) string {
	var b strings.Builder
	b.WriteString("block,plot,sub,a,b,g\n")
	k := 0
	for i := range blocks {
		for p := range 2 {
			for s := range 2 {
				k++
				fmt.Fprintf(&b, "%d,%d,%d,a%d,b%d,%d\n", i+1, p+1, s+1, p+1, s+1, k*k%17+3*i)
			}
		}
	}
	return b.String()
}

// TestEdges holds what a trial at the edge must and must not say. want is a list of keys and
// values as in the reference cases, exact; notes the codes of all notes, in order.
func TestEdges(t *testing.T) {
	big := func(k, d int) string { return fmt.Sprint(1_000_000_000_000 + uneven(k, d)) }
	small := func(k, d int) string { return fmt.Sprint(uneven(k, d)) }
	exact := func(k, d int) string { return fmt.Sprintf("%.1f", 0.1+0.3*float64(k)+0.7*float64(d)) }
	lost := func(f func(int, int) string, which ...int) func(int, int) string {
		return func(k, d int) string {
			for _, w := range which {
				if w == 3*k+d {
					return "NA"
				}
			}
			return f(k, d)
		}
	}
	empty := strings.NewReplacer("2,a1,b2,7", "2,a1,b2,", "8,a1,b2,9", "8,a1,b2,").Replace(factorialData)
	tukey := `comparison = "tukey"`
	for _, c := range []struct {
		name, body, data string
		refused          string // code; empty: analysed
		says             string // part of message or hint of the refusal, or of a note
		want             string
		notes            string
	}{
		{name: "all values equal", body: pens(oneFactor, 6, `"diet"`, tukey), data: "pen,diet,g\n1,a,5\n2,b,5\n3,c,5\n4,a,5\n5,b,5\n6,c,5\n",
			want: "g.anova[diet].ss 0|g.tests[diet].f null|g.tests[diet].p null|g.means[diet/a].mean 5|g.means[diet/a].letters null|g.means[diet/c].units 2", notes: "no-variation"},
		{name: "no variation but between treatments", body: pens(oneFactor, 6, `"diet"`, `comparison = "lsd"`), data: "pen,diet,g\n1,a,5\n2,b,6\n3,c,9\n4,a,5\n5,b,6\n6,c,9\n",
			want: "g.anova[diet].ss 52/3|g.tests[diet].p null|g.means[diet/a].letters null", notes: "no-variation"},
		{name: "additive but for rounding", body: inBlocks + "[analysis]\n" + tukey + "\n", data: blocked(exact),
			want: "g.anova[diet].ss 3.92|g.tests[diet].f null|g.tests[diet].p null|g.means[diet/b].mean 1.25", notes: "no-variation"},
		{name: "additive but for rounding, one lost", body: inBlocks + "[analysis]\n" + tukey + "\n", data: blocked(lost(exact, 4)),
			want: "g.tests[diet].f null|g.tests[diet].p null|g.means[diet/b].mean 1.25|g.model.method least squares", notes: "units-lost no-variation"},
		{name: "one unit a treatment", body: pens(oneFactor, 3, `"diet"`, tukey), data: "pen,diet,g\n1,a,5\n2,b,7\n3,c,9\n", refused: "no-error", says: "more units"},
		{name: "one unit a combination", body: pens(twoFactors, 6, `"a", "b"`, tukey), data: strings.Join(strings.SplitAfter(factorialData, "\n")[:7], ""), refused: "no-error", says: "interactions = 1 "},
		{name: "one unit a combination, main effects alone", body: pens(twoFactors, 6, `"a", "b"`, "interactions = \"none\"\ncomparison = \"none\""), data: strings.Join(strings.SplitAfter(factorialData, "\n")[:7], ""),
			want: "g.anova[residual].df 2|g.anova[a].df 1|g.anova[b].df 2"},
		{name: "main effects by number", body: pens(twoFactors, 12, `"a", "b"`, "interactions = 1\ncomparison = \"none\""), data: factorialData, want: "g.anova[residual].df 8|g.anova[residual].ss 14.5"},
		{name: "a level lost", body: pens(oneFactor, 9, `"diet"`, "comparison = \"tukey\"\n[[analysis.contrast]]\nname = \"there\"\nfactor = \"diet\"\nweights = { a = 1, b = -1 }\n[[analysis.contrast]]\nname = \"lost\"\nfactor = \"diet\"\nweights = { a = 1, c = -1 }"),
			data: "pen,diet,g\n1,a,5\n2,b,7\n3,c,\n4,a,6\n5,b,9\n6,c,\n7,a,7\n8,b,8\n9,c,\n",
			want: "g.tests[diet].df 1|g.tests[diet].f 6|g.means[diet/c].mean null|g.means[diet/c].n 0|g.means[diet/c].units 0|g.contrasts[there].estimate -2|g.contrasts[there].ss 6|g.contrasts[lost].estimate null|g.contrasts[lost].p null|g.missing 3|g.summary[c].mean null", notes: "not-estimable"},
		{name: "all but one level lost", body: pens(oneFactor, 6, `"diet"`, tukey), data: "pen,diet,g\n1,a,5\n2,b,\n3,c,\n4,a,6\n5,b,\n6,c,\n", refused: "one-level"},
		{name: "nothing recorded", body: pens(oneFactor, 6, `"diet"`, tukey), data: "pen,diet,g\n1,a,\n2,b,\n3,c,\n4,a,\n5,b,\n6,c,\n", refused: "no-values"},
		{name: "a block lost", body: inBlocks + "[analysis]\n" + tukey + "\n", data: blocked(lost(small, 3, 4, 5)),
			want: "g.model.method strata|g.anova[block/block].df 2|g.tests[diet].error_df 4|g.means[diet/a].units 3|g.missing 3"},
		{name: "a block lost but for one", body: inBlocks + "[analysis]\n" + tukey + "\n", data: blocked(lost(small, 3, 4)),
			want: "g.model.method least squares|g.anova[block].df 3|g.tests[diet].error_df 4|g.means[diet/c].units 4", notes: "units-lost leverage-one"},
		{name: "blocks random", body: inBlocks + "[analysis]\nblocks = \"random\"\n" + tukey + "\n", data: blocked(small), want: "g.tests[diet].f 151/9|g.components[residual].estimate 3"},
		{name: "blocks random and one lost", body: inBlocks + "[analysis]\nblocks = \"random\"\n" + tukey + "\n", data: blocked(lost(small, 4)),
			want: "g.model.method reml|g.model.df_method kenward-roger|g.means[diet/b].units 3|g.means[diet/b].sem null|g.sed[diet].lsd null", notes: "units-lost few-levels approximate"},
		{name: "values of a million millions", body: inBlocks + "[analysis]\n" + tukey + "\n", data: blocked(big),
			want: "g.tests[diet].f 151/9|g.comparisons[diet/a/b].difference -4.5|g.anova[pen/residual].ss 18"},
		{name: "values of a million millions, one lost", body: inBlocks + "[analysis]\n" + tukey + "\n", data: blocked(lost(big, 4)),
			want: "g.comparisons[diet/a/c].difference -7", notes: "units-lost approximate"},
		{name: "an empty cell", body: pens(twoFactors, 12, `"a", "b"`, `comparison = "lsd"`), data: empty,
			want:  "g.model.hypothesis marginal|g.anova[a].ss 4.5|g.anova[a:b].df 1|g.anova[a:b].ss 8|g.means[a/a1].mean null|g.means[a/a2].mean 8.5|g.means[a/a2].letters null|g.means[a:b/a=a1/b=b2].units 0|g.comparisons[b/b1/b3].difference -5.5|g.comparisons[a/a1/a2].p null|g.sed[a].mean null",
			notes: "empty-cells units-lost term-lost not-estimable not-estimable not-estimable"},
		{name: "an empty cell, partial", body: pens(twoFactors, 12, `"a", "b"`, "comparison = \"lsd\"\nadjustment = \"partial\""), data: empty, says: "“marginal” tests what is left",
			want:  "g.model.hypothesis partial|g.anova[a].ss null|g.tests[a].f null|g.tests[a:b].p null|g.anova[residual].ss 3|g.means[b/b1].mean 5.25",
			notes: "units-lost not-testable not-testable not-testable not-estimable letters-withheld not-estimable letters-withheld not-estimable"},
		{name: "differences from a control in slices", body: pens(twoFactors, 12, `"a", "b"`, `comparison = "dunnett"`), data: factorialData,
			want: "g.comparisons[b/b2/b1].difference 2.75|g.comparisons[a:b/a=a1/b3/b1].difference 3.5|g.comparisons[a:b/a=a2/b3/b1].difference 7.5|g.comparisons[a:b/a=a2/b2/b1].p_adjusted 0.02936595124459", notes: "no-control"},
		{name: "all pairs of cells, with letters", body: pens(twoFactors, 12, `"a", "b"`, tukey+"\npairs = \"all\"\nletters = true"), data: factorialData,
			want: "g.comparisons[a:b/a1:b1/a2:b3].difference -7|g.means[a:b/a=a2/b=b3].letters a|g.means[a:b/a=a1/b=b3].letters ab|g.means[a:b/a=a2/b=b1].letters c|g.means[b/b1].letters c"},
		{name: "no letters", body: pens(twoFactors, 12, `"a", "b"`, tukey+"\nletters = false"), data: factorialData, want: "g.means[b/b1].letters null|g.means[a:b/a=a2/b=b3].letters null"},
		{name: "two plots that nothing tests", body: fmt.Sprintf(splitPlots, 1) + "[analysis]\n" + tukey + "\n", data: split(1), refused: "no-error", says: "left to test a"},
		{name: "recorded on the plot", body: fmt.Sprintf(splitPlots, 3) + "[analysis]\ncomparison = \"tukey\"\n[[analysis.contrast]]\nname = \"of halves\"\nfactor = \"b\"\nweights = { b1 = 1, b2 = -1 }\n[[response]]\nname = \"g\"\nkind = \"continuous\"\nrecorded_on = \"plot\"\naggregate = \"mean\"\n", data: split(3),
			want: "g.tests[a].error_df 2|g.n 6", notes: "term-not-told contrast-not-told"},
		{name: "recorded on the block", body: fmt.Sprintf(splitPlots, 3) + "[analysis]\ncomparison = \"tukey\"\n[[response]]\nname = \"g\"\nkind = \"continuous\"\nrecorded_on = \"block\"\naggregate = \"mean\"\n", data: split(3), refused: "no-terms"},
		{name: "a subplot lost", body: fmt.Sprintf(splitPlots, 3) + "[analysis]\n" + tukey + "\n", data: strings.Replace(split(3), "2,1,1,a1,b1,11", "2,1,1,a1,b1,", 1), says: "1 of 12 subs gave no value",
			want: "g.model.method reml|g.means[a/a1].units 3|g.cv_percent null", notes: "units-lost"},
		{name: "blocks that interact", body: strings.Replace(inBlocks, "count = 4\n", "count = 4\ninteracts = true\n", 1) + "[analysis]\n" + tukey + "\n", data: blocked(small), want: "g.tests[diet].f 151/9|g.tests[diet].error_df 6"},
		{name: "given to pens, the same in a whole block", body: strings.Replace(pens(strings.Replace(oneFactor, `, "c"`, "", 1), 3, `"diet"`, tukey), "[[unit]]\n", "[[unit]]\nname = \"block\"\ncount = 4\n[[unit]]\nwithin = \"block\"\n", 1),
			data: "block,pen,diet,g\n1,1,a,5\n1,2,a,7\n1,3,a,6\n2,1,b,5\n2,2,b,4\n2,3,b,9\n3,1,a,2\n3,2,a,4\n3,3,a,6\n4,1,b,8\n4,2,b,9\n4,3,b,7\n",
			want: "g.anova[block/diet].ss 12|g.tests[diet].error_df 2|g.anova[block/residual].ss 12", notes: "other-stratum", says: "variation between blocks"},
		{name: "a pen excluded", body: inBlocks + "[analysis]\n" + tukey + "\n[[exclusion]]\nunit = { block = \"2\", pen = \"2\" }\nreason = \"feeder failed\"\non = 2026-03-14\nby = \"A\"\n", data: blocked(small),
			want: "g.n 11|g.excluded 1|g.missing 0|g.means[diet/b].units 3|g.model.method least squares|g.tests[diet].error_df 5", notes: "units-lost approximate"},
		{name: "one-sided Tukey", body: inBlocks + "[analysis]\nside = \"greater\"\n" + tukey + "\n", data: blocked(small), want: "g.comparisons[diet/a/b].difference -4.5", notes: "two-sided"},
		{name: "a level of its own", body: inBlocks + "[analysis]\nalpha = 0.05\ncomparison = \"tukey\"\n[[response]]\nname = \"g\"\nkind = \"continuous\"\ncomparison = \"lsd\"\nalpha = 0.2\n", data: blocked(small),
			want: "g.comparisons[diet/a/b].method lsd|g.means[diet/a].letters c|g.means[diet/b].letters b|g.means[diet/c].letters a"},
		{name: "two-level F and t", body: pens(strings.Replace(twoFactors, `, "b3"`, "", 1), 8, `"a", "b"`, "comparison = \"none\"\nadjustment = \"marginal\""), data: "pen,a,b,g\n1,a1,b1,5\n2,a1,b2,7\n3,a1,b2,9\n4,a2,b1,6\n5,a2,b2,8\n6,a2,b2,12\n7,a1,b1,6\n8,a2,b2,9\n", notes: "not-balanced two-levels two-levels leverage-one"},
	} {
		t.Run(c.name, func(t *testing.T) {
			rs, list := runFiles(t, edge(c.body, c.data))
			k := &check{}
			k.wellFormed(rs)
			for _, f := range k.faults {
				t.Error(f)
			}
			if c.refused != "" {
				if len(list) != 1 || list[0].Code != c.refused || list[0].Severity != diag.Error || rs.Responses[0].Model != nil {
					t.Fatalf("want a refusal for %s, have %v", c.refused, list)
				}
				if text := list[0].Message + " | " + list[0].Hint; !strings.Contains(text, c.says) {
					t.Errorf("%q is not said: %s", c.says, text)
				}
				return
			}
			if len(list) > 0 {
				t.Fatalf("refused: %s: %s", list[0].Code, list[0].Message)
			}
			got := asJSON(t, rs)
			for _, w := range strings.Split(c.want, "|") {
				if w == "" {
					continue
				}
				key, value, _ := strings.Cut(w, " ")
				at, err := lookUp(got, strings.ReplaceAll(key, "/", "|"))
				if err != nil {
					t.Errorf("%s: %v", key, err)
				} else if why := differs(at, value, true); why != "" {
					t.Errorf("%s: %s", key, why)
				}
			}
			var codes []string
			said := c.says == ""
			for _, n := range rs.Responses[0].Notes {
				codes = append(codes, n.Code)
				said = said || strings.Contains(n.Text, c.says)
			}
			if strings.Join(codes, " ") != c.notes {
				t.Errorf("notes %v, want %s", codes, c.notes)
			}
			if !said {
				t.Errorf("%q is not said: %v", c.says, rs.Responses[0].Notes)
			}
		})
	}
}

// One response that cannot be analysed leaves the others as they are.
func TestOneOfTwoRefused(t *testing.T) {
	data := strings.ReplaceAll(blocked(func(k, d int) string { return fmt.Sprintf("%d,%d", uneven(k, d), k+d) }), "diet,g\n", "diet,g,h\n")
	rs, list := runFiles(t, edge(inBlocks+"[analysis]\ncomparison = \"tukey\"\n[[response]]\nname = \"h\"\nkind = \"count\"\n[[response]]\nname = \"g\"\nkind = \"continuous\"\n", data))
	if len(list) != 1 || list[0].Key != "response[0].kind" || list[0].Pos.Line == 0 {
		t.Fatalf("want one refusal with its key, have %v", list)
	}
	h, g := rs.Responses[0], rs.Responses[1]
	if h.Name != "h" || h.Model != nil || len(h.Notes) != 1 || h.Notes[0].Code != "not-carried-out" || h.N != 12 || len(h.Anova)+len(h.Means)+len(h.Tests) > 0 {
		t.Errorf("%+v", h)
	}
	if g.Model == nil || math.Abs(float64(g.Tests[0].F)-151./9) > 1e-12 {
		t.Errorf("%+v", g.Tests)
	}
	var back strings.Builder
	if err := rs.Write(&back); err != nil {
		t.Fatal(err)
	}
	again, err := result.Read(strings.NewReader(back.String()))
	if err != nil || len(again.Responses) != 2 || again.Responses[1].Tests[0].F != g.Tests[0].F {
		t.Errorf("read back: %v", err)
	}
}
