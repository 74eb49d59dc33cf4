package layout

import (
	"fmt"
	"strings"
	"testing"

	"penwright/protocol"
)

// levels makes a factor with n levels.
func levels(name string, n int) protocol.Factor {
	f := protocol.Factor{Name: name}
	for i := range n {
		f.Levels = append(f.Levels, fmt.Sprintf("%s%d", name[:1], i+1))
	}
	return f
}

func plan(t *testing.T, p *protocol.Protocol) *Plan {
	t.Helper()
	if p.Analysis.Interactions == 0 {
		p.Analysis.Interactions = -1
	}
	got, list := New(p)
	for _, d := range list {
		t.Logf("%s: %s [%s] %s", d.Key, d.Message, d.Code, d.Hint)
	}
	if list.HasErrors() {
		t.Fatal("the plan is refused")
	}
	return got
}

// Degrees of freedom as printed in the sources named; numbers of the check values.
func TestDegreesOfFreedom(t *testing.T) {
	for _, c := range []struct {
		name    string // source
		factors []protocol.Factor
		units   []protocol.Unit
		want    string // stratum df, then term df/error df
	}{
		{
			name:    "one way, 5 × 5 (Montgomery, Design and Analysis of Experiments, cotton)",
			factors: []protocol.Factor{levels("cotton", 5)},
			units:   []protocol.Unit{{Name: "sample", Count: []int{25}, Receives: []string{"cotton"}}},
			want:    "sample 24; cotton 4/20",
		},
		{
			name:    "randomized blocks (Gomez & Gomez 1984 p. 26)",
			factors: []protocol.Factor{levels("rate", 6)},
			units: []protocol.Unit{{Name: "block", Count: []int{4}},
				{Name: "plot", Within: "block", Count: []int{6}, Receives: []string{"rate"}}},
			want: "block 3, plot 20; rate 5/15",
		},
		{
			name:    "Latin square (Fisher, Statistical Methods for Research Workers §49)",
			factors: []protocol.Factor{levels("letter", 5)},
			units: []protocol.Unit{{Name: "row", Count: []int{5}}, {Name: "column", Count: []int{5}},
				{Name: "plot", Crosses: []string{"row", "column"}, Receives: []string{"letter"}}},
			want: "row 4, column 4, plot 16; letter 4/12",
		},
		{
			name:    "split plot, whole plots in blocks (Montgomery, pulp): the book's 6 + 12 together",
			factors: []protocol.Factor{levels("method", 3), levels("temperature", 4)},
			units: []protocol.Unit{{Name: "rep", Count: []int{3}},
				{Name: "batch", Within: "rep", Count: []int{3}, Receives: []string{"method"}},
				{Name: "piece", Within: "batch", Count: []int{4}, Receives: []string{"temperature"}}},
			want: "rep 2, batch 6, piece 27; method 2/4, temperature 3/18, method:temperature 6/18",
		},
		{
			name:    "split plot, whole plots completely randomized (Box, Hunter & Hunter 2005 Table 9.1)",
			factors: []protocol.Factor{levels("temperature", 3), levels("coating", 4)},
			units: []protocol.Unit{{Name: "heat", Count: []int{6}, Receives: []string{"temperature"}},
				{Name: "bar", Within: "heat", Count: []int{4}, Receives: []string{"coating"}}},
			want: "heat 5, bar 18; temperature 2/3, coating 3/9, temperature:coating 6/9",
		},
		{
			name:    "split plot (Yates 1935 JRSS Suppl 2:181, oats)",
			factors: []protocol.Factor{levels("variety", 3), levels("nitrogen", 4)},
			units: []protocol.Unit{{Name: "block", Count: []int{6}},
				{Name: "plot", Within: "block", Count: []int{3}, Receives: []string{"variety"}},
				{Name: "subplot", Within: "plot", Count: []int{4}, Receives: []string{"nitrogen"}}},
			want: "block 5, plot 12, subplot 54; variety 2/10, nitrogen 3/45, variety:nitrogen 6/45",
		},
		{
			name:    "split-split plot (Gomez & Gomez 1984 p. 143)",
			factors: []protocol.Factor{levels("nitrogen", 5), levels("management", 3), levels("variety", 3)},
			units: []protocol.Unit{{Name: "block", Count: []int{3}},
				{Name: "main", Within: "block", Count: []int{5}, Receives: []string{"nitrogen"}},
				{Name: "sub", Within: "main", Count: []int{3}, Receives: []string{"management"}},
				{Name: "subsub", Within: "sub", Count: []int{3}, Receives: []string{"variety"}}},
			want: "block 2, main 12, sub 30, subsub 90; nitrogen 4/8, management 2/20, variety 2/60, " +
				"nitrogen:management 8/20, nitrogen:variety 8/60, management:variety 4/60, nitrogen:management:variety 16/60",
		},
		{
			name:    "strip plot (Gomez & Gomez 1984 p. 110)",
			factors: []protocol.Factor{levels("variety", 6), levels("nitrogen", 3)},
			units: []protocol.Unit{{Name: "block", Count: []int{3}},
				{Name: "strip", Within: "block", Count: []int{6}, Receives: []string{"variety"}},
				{Name: "lane", Within: "block", Count: []int{3}, Receives: []string{"nitrogen"}},
				{Name: "cell", Crosses: []string{"strip", "lane"}}},
			want: "block 2, strip 15, lane 6, cell 30; variety 5/10, nitrogen 2/4, variety:nitrogen 10/20",
		},
		{
			name:    "sampling within units (Snedecor & Cochran, turnip calcium)",
			factors: []protocol.Factor{levels("plant", 4)},
			units: []protocol.Unit{{Name: "leaf", Count: []int{12}, Receives: []string{"plant"}},
				{Name: "sample", Within: "leaf", Count: []int{2}}},
			want: "leaf 11, sample 12; plant 3/8",
		},
		{
			name:    "two squares with periods of their own (Cochran & Cox 1957 §4.62a, without carry-over)",
			factors: []protocol.Factor{levels("ration", 3)},
			units: []protocol.Unit{{Name: "square", Count: []int{2}},
				{Name: "cow", Within: "square", Count: []int{3}}, {Name: "period", Within: "square", Count: []int{3}},
				{Name: "milk", Crosses: []string{"cow", "period"}, Receives: []string{"ration"}}},
			want: "square 1, cow 4, period 4, milk 8; ration 2/6",
		},
		{
			name:    "balanced incomplete blocks (Montgomery, catalyst)",
			factors: []protocol.Factor{levels("catalyst", 4)},
			units: []protocol.Unit{{Name: "batch", Count: []int{4}},
				{Name: "run", Within: "batch", Count: []int{3}, Receives: []string{"catalyst"}}},
			want: "batch 3, run 8; catalyst 3/5",
		},
		{
			name:    "alpha design (John & Williams 1995 p. 146)",
			factors: []protocol.Factor{levels("variety", 24)},
			units: []protocol.Unit{{Name: "replicate", Count: []int{3}},
				{Name: "block", Within: "replicate", Count: []int{6}},
				{Name: "plot", Within: "block", Count: []int{4}, Receives: []string{"variety"}}},
			want: "replicate 2, block 15, plot 54; variety 23/31",
		},
	} {
		t.Run(c.name, func(t *testing.T) {
			p := plan(t, &protocol.Protocol{Factors: c.factors, Units: c.units})
			var strata, terms []string
			for _, s := range p.Strata {
				strata = append(strata, fmt.Sprintf("%s %d", s.Name, s.DF))
			}
			for _, term := range p.Terms {
				terms = append(terms, fmt.Sprintf("%s %d/%d", term.Name, term.DF, term.ErrorDF))
			}
			if got := strings.Join(strata, ", ") + "; " + strings.Join(terms, ", "); got != c.want {
				t.Errorf("got  %s\nwant %s\n%s", got, c.want, p)
			}
		})
	}
}

// Lines of the skeleton beyond terms, with the degrees of freedom their sources print.
func TestPublishedLines(t *testing.T) {
	want := map[string]string{
		// Cochran & Cox 1957 p. 97, potato scab: a control beside 2 × 3.
		"factorial-plus-control": "treatment 6, control v. rest 1, season 1, rate 2, season:rate 2, residual 25",
		// Federer 1956, augmented blocks; the rest of the entries is 1 + 7.
		"augmented": "block 2, treatment 11, checks v. entries 1, checks 3, entries 7, residual 6",
		// Cochran & Cox 1957 §4.62a, carry-over in two 3 × 3 squares.
		"crossover-squares": "square 1, cow 4, period 4, ration 2, carry-over 2, residual 4",
		// Brandt 1938, switchback: F on 1 and 8.
		"switchback": "cow 9, period 2, grain 1, cow:period trend 9, residual 8",
		// Snedecor & Cochran, asparagus over years (layout 4 × 4 × 5, from memory).
		"repeated-measures": "block 3, cutting 3, residual 9, year 4, cutting:year 12, residual 48",
	}
	found := 0
	for _, d := range designs() {
		if want[d.file] == "" {
			continue
		}
		found++
		p := plan(t, &d.p)
		lines := p.Skeleton()
		for i := range p.Protocol.Repeated {
			lines = append(lines, p.Repeated(i)...)
		}
		var got []string
		for _, l := range lines {
			got = append(got, fmt.Sprintf("%s %d", l.Source, l.DF))
		}
		if s := strings.Join(got, ", "); s != want[d.file] {
			t.Errorf("%s:\ngot  %s\nwant %s", d.file, s, want[d.file])
		}
	}
	if found != len(want) {
		t.Errorf("%d of %d designs found", found, len(want))
	}
}
