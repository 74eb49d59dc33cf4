package analysis

import (
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

var (
	trials = flag.Int("trials", 300, "made-up trials to hold against the second analysis")
	seed   = flag.Uint64("seed", 1, "of the made-up trials")
)

// check collects disagreements between results and a reckoning.
type check struct {
	faults []string
	n      int
}

func (c *check) fault(format string, args ...any) {
	if len(c.faults) < 12 {
		c.faults = append(c.faults, fmt.Sprintf(format, args...))
	}
}

// number holds one number; scale is what a difference is measured by beside the number.
func (c *check) number(what string, got result.Number, want, scale float64) {
	c.n++
	g := float64(got)
	if math.IsInf(want, 0) {
		want = math.NaN()
	}
	switch {
	case math.IsNaN(want) && !got.Known():
	case math.IsNaN(want) || !got.Known():
		c.fault("%s: %v, want %v", what, g, want)
	case math.Abs(g-want) > 1e-7*math.Max(math.Abs(want), scale):
		c.fault("%s: %.12g, want %.12g", what, g, want)
	}
}

func (c *check) count(what string, got, want int) {
	c.n++
	if got != want {
		c.fault("%s: %d, want %d", what, got, want)
	}
}

// reasons are the words in which refusals must be said, by what the reckoning finds.
var reasons = map[string][]string{
	"no values":      {"no-values"},
	"one level":      {"one-level", "no-values"},
	"several strata": {"no-error", "not-converged", "not-told-apart", "time-trend"},
	"random units":   {"no-error", "not-converged", "not-told-apart"},
	"no error":       {"no-error"},
}

// TestMadeUpTrials analyses made-up trials of many structures twice. Each is refused for a
// reason that the other road finds too, or all numbers agree.
//
//	go test ./analysis -run MadeUpTrials -trials 20000 -seed 7
func TestMadeUpTrials(t *testing.T) {
	n := *trials
	if testing.Short() {
		n = min(n, 60)
	}
	tally := map[string]int{}
	numbers, failed := 0, 0
	for k := range n {
		r := rand.New(rand.NewPCG(*seed, uint64(k)))
		s := randomTrial(r)
		for len(s.y) > 72 && r.IntN(30) > 0 { // dense matrices of large ones take their time
			s = randomTrial(r)
		}
		what, c := agree(t, s)
		tally[what]++
		if c != nil {
			numbers += c.n
			if len(c.faults) > 0 {
				failed++
				t.Errorf("trial %d of seed %d (%s)\n\t%s\n%s", k, *seed, what, strings.Join(c.faults, "\n\t"), describe(s))
			}
		}
		if failed == 10 {
			t.Fatal("enough")
		}
	}
	t.Logf("%d numbers: %v", numbers, tally)
	if n >= 300 && (tally["strata"] < n/5 || tally["least squares"] < n/8 || tally["not opened"] > n/5) {
		t.Errorf("the trials are too much alike: %v", tally)
	}
}

func describe(s *sketch) string {
	f := s.files(nil)
	return string(f["protocol.toml"].Data) + string(f["data.csv"].Data)
}

// agree analyses a sketch both ways and says how it was done.
func agree(t *testing.T, s *sketch) (string, *check) {
	tr, list := trial.Open(folder.FromFS(s.files(nil)))
	if list.HasErrors() {
		if why := unexpected(list); why != "" {
			return "not opened", &check{faults: []string{why}}
		}
		return "not opened", nil
	}
	rs, found := Run(tr, result.Program{Name: "test"}, nil)
	b := reckon(s, tr)
	out := &rs.Responses[0]
	c := &check{}
	c.wellFormed(rs)
	switch {
	case found.HasErrors() && b.refused == "":
		c.fault("refused (%s: %s), but %s can do it", found[0].Code, found[0].Message, b.method)
		return "refused", c
	case found.HasErrors():
		if !slices.Contains(reasons[b.refused], found[0].Code) {
			c.fault("refused for %s (%s), want %s", found[0].Code, found[0].Message, b.refused)
		}
		return "refused: " + b.refused, c
	case out.Model.Method == "reml" && (b.refused == "several strata" || b.refused == "random units"):
		c.holdMixed(out, b)
		return "reml", c
	case b.refused != "":
		c.fault("analysed by %s, but there is reason to refuse: %s", out.Model.Method, b.refused)
		return "analysed", c
	case out.Model.Method != b.method:
		c.fault("analysed by %s, want %s", out.Model.Method, b.method)
		return "analysed", c
	}
	for _, x := range b.tests { // errors that are rounding are told apart elsewhere
		if x.errMS < 1e-20 {
			return b.method, c
		}
	}
	c.hold(out, b)
	return b.method, c
}

// unexpected finds an error on opening that a made-up trial gives no reason for.
func unexpected(list diag.List) string {
	for _, d := range list {
		switch {
		case d.Severity != diag.Error:
		case d.Code == "too-few-units", d.Code == "unnamed-unit":
		default:
			return fmt.Sprintf("not opened: %s: %s: %s", d.Pos, d.Code, d.Message)
		}
	}
	return ""
}

// wellFormed looks for numbers that cannot be and for nulls that no note explains.
func (c *check) wellFormed(rs *result.Results) {
	var text strings.Builder
	if err := rs.Write(&text); err != nil {
		c.fault("does not write: %v", err)
	}
	if strings.Contains(text.String(), "NaN") || strings.Contains(text.String(), "Inf") {
		c.fault("NaN or Inf in results.json")
	}
	for i := range rs.Responses {
		r := &rs.Responses[i]
		has := func(code, term string) bool {
			for _, n := range r.Notes {
				if n.Code == code && (n.Term == "" || n.Term == term) {
					return true
				}
			}
			return false
		}
		if r.Model == nil && len(r.Notes) == 0 {
			c.fault("refused without a note")
		}
		for _, m := range r.Means {
			if !m.Mean.Known() && !has("not-estimable", m.Term) {
				c.fault("mean of %s %v is null without a note", m.Term, m.Levels)
			}
			if m.Mean.Known() && !m.Lower.Known() && !has("no-variation", m.Term) && !has("no-limits", m.Term) {
				c.fault("limits of mean of %s %v are null without a note", m.Term, m.Levels)
			}
		}
		for _, x := range r.Tests {
			if !x.F.Known() && !has("no-variation", x.Source) && !has("term-lost", x.Source) && !has("not-testable", x.Source) && !has("covariate-untested", x.Source) {
				c.fault("F of %s is null without a note", x.Source)
			}
		}
		for _, x := range r.Contrasts {
			if !x.P.Known() && !has("no-variation", x.Term) && !has("not-estimable", x.Term) {
				c.fault("P of contrast %s is null without a note", x.Name)
			}
			if !x.SS.Known() && !has("no-variation", x.Term) && !has("not-estimable", x.Term) && !has("no-single-error", x.Term) && r.Model.Method != "reml" {
				c.fault("SS of contrast %s is null without a note", x.Name)
			}
		}
		for _, x := range r.Comparisons {
			if !x.P.Known() && !has("no-variation", x.Term) && !has("not-estimable", x.Term) {
				c.fault("P of %s %s − %s is null without a note", x.Term, x.A, x.B)
			}
		}
		for _, x := range r.Covariates {
			if !x.EqualSlopesP.Known() && !has("equal-slopes", x.Name) {
				c.fault("equal slopes of %s is null without a note", x.Name)
			}
		}
	}
}

// hold holds every number of a response against the reckoning.
func (c *check) hold(out *result.Response, b *reckoning) {
	total := floatsSquared(centred(b.level.y))
	spread := math.Sqrt(total / float64(len(b.level.y)))
	c.count("n", out.N, len(b.inst))
	c.count("missing", out.Missing, len(b.s.y)-len(b.inst))
	m := 0.0
	for _, i := range b.inst {
		m += b.s.y[i] / float64(len(b.inst))
	}
	c.number("grand mean", out.GrandMean, m, spread)

	// The table.
	line := func(stratum, source string) *result.Line {
		for i := range out.Anova {
			l := &out.Anova[i]
			if l.Source == source && (stratum == "" && l.Stratum == nil || l.Stratum != nil && *l.Stratum == stratum) {
				return l
			}
		}
		c.fault("no line %s %s", stratum, source)
		return &result.Line{}
	}
	held := 0
	holdLine := func(stratum, source string, df int, ss float64) {
		l := line(stratum, source)
		c.count(source+" df", l.DF, df)
		if df == 0 {
			ss = math.NaN()
		}
		c.number(stratum+" "+source+" ss", l.SS, ss, total)
		c.number(stratum+" "+source+" ms", l.MS, ss/float64(df), total)
		held++
	}
	stratumName := func(k int) string { return b.s.units[b.strata[k].unit].name }
	switch b.method {
	case "strata":
		treated, cv := 0, math.NaN()
		for k := range b.strata {
			d := &b.strata[k]
			name := stratumName(k)
			switch {
			case d.df == 0:
				continue
			case len(d.terms) == 0:
				source := name
				if d.unit == b.rowUnit && d.unit != b.bottom && b.level.unit == b.rowUnit {
					source = "residual"
				}
				holdLine(name, source, d.df, d.ss)
				continue
			}
			treated++
			cv = 100 * math.Sqrt(d.ms()) / math.Abs(m)
			for _, t := range d.terms {
				holdLine(name, b.names[t], b.tests[t].df, b.tests[t].ss)
			}
			holdLine(name, "residual", d.errDF, d.errSS)
			for _, x := range out.Strata {
				if x.Name == name {
					c.number("cv of "+name, x.CVPercent, cv, 0)
				}
			}
		}
		if treated != 1 {
			cv = math.NaN()
		}
		c.number("cv", out.CVPercent, cv, 0)
		for k := range b.strata {
			d := &b.strata[k]
			if d.df == 0 {
				continue
			}
			name := stratumName(k)
			if k == len(b.strata)-1 {
				name = "residual"
			}
			estimate, square := 0.0, 0.0
			for u, share := range d.share {
				if share != 0 {
					ms := b.strata[u].ms()
					estimate += share * ms
					square += 2 * share * share * ms * ms / float64(b.strata[u].errDF)
				}
			}
			for _, x := range out.Components {
				if x.Term == name && !math.IsNaN(d.size) {
					c.number("component "+name, x.Estimate, estimate, spread*spread)
					c.number("se of component "+name, x.SE, math.Sqrt(square), spread*spread)
				}
			}
		}
	default:
		for _, l := range b.lines {
			if l.df > 0 || strings.HasPrefix(l.source, "x") {
				holdLine("", l.source, l.df, l.ss)
			}
		}
		for t, x := range b.tests {
			holdLine("", b.names[t], x.df, x.ss)
		}
		holdLine("", "residual", b.errDF, b.errMS*float64(b.errDF))
		c.number("cv", out.CVPercent, 100*math.Sqrt(b.errMS)/math.Abs(m), 0)
		c.count("covariates", len(out.Covariates), len(b.cov))
		for i, x := range b.cov {
			if i < len(out.Covariates) {
				got := out.Covariates[i]
				c.number("slope", got.Slope, x.slope, 1e-3*x.se)
				c.number("se of slope", got.SE, x.se, 0)
				c.number("P of slope", got.P, upperTail(x.slope*x.slope/x.se/x.se, 1, float64(b.errDF)), 1e-3)
				c.number("P of equal slopes", got.EqualSlopesP, x.equalP, 1e-3)
			}
		}
	}
	for t, x := range b.tests {
		i := slices.IndexFunc(out.Tests, func(r result.Test) bool { return r.Source == b.names[t] })
		if i < 0 {
			c.fault("no test of %s", b.names[t])
			continue
		}
		got := out.Tests[i]
		f := x.f()
		if x.df == 0 {
			f = math.NaN()
		}
		c.count("df of "+b.names[t], got.DF, x.df)
		c.number("error df of "+b.names[t], got.ErrorDF, float64(x.errDF), 0)
		c.number("F of "+b.names[t], got.F, f, 1e-3)
		c.number("P of "+b.names[t], got.P, upperTail(f, x.df, float64(x.errDF)), 1e-3)
	}
	if b.s.trend && !b.lined() {
		c.holdResiduals(out, b, spread)
		return // whose line enters a mean is a rule of the program's own
	}
	for t := range b.terms {
		c.holdMeans(out, b, t, spread)
	}
	c.holdParts(out, b, total)
	c.holdContrast(out, b)
	c.holdResiduals(out, b, spread)
	c.holdSummary(out, b, spread)
}

func floatsSquared(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x * x
	}
	return s
}

// lined tells whether every animal has two records, and every period one.
func (b *reckoning) lined() bool {
	for _, name := range []string{"cow", "period"} {
		u := slices.IndexFunc(b.s.units, func(u sketchUnit) bool { return u.name == name })
		records := make([]int, len(b.s.up[u]))
		for _, i := range b.at.inst {
			records[b.s.up[b.bottom][i][u]]++
		}
		least := slices.Min(records)
		if name == "cow" && least < 2 || least < 1 {
			return false
		}
	}
	return true
}

// meanWeights gives the weights over the values of the mean of a cell of planned levels.
func (b *reckoning) meanWeights(t int, levels []int) ([]float64, bool) {
	var at []int
	for i, f := range b.terms[t] {
		p := slices.Index(b.present[f], levels[i])
		if p < 0 {
			return nil, false
		}
		at = append(at, p)
	}
	return b.estimate(b.meanRow(t, at))
}

func minusWeights(a, b []float64) []float64 {
	out := slices.Clone(a)
	for i, v := range b {
		out[i] -= v
	}
	return out
}

func (c *check) holdMeans(out *result.Response, b *reckoning, t int, spread float64) {
	var sizes []int
	for _, f := range b.terms[t] {
		sizes = append(sizes, len(b.s.factors[f].levels))
	}
	cells := product(sizes)
	var got []result.Mean
	for _, m := range out.Means {
		if m.Term == b.names[t] {
			got = append(got, m)
		}
	}
	if len(got) != len(cells) {
		c.fault("%d means of %s, want %d", len(got), b.names[t], len(cells))
		return
	}
	alpha := 0.05
	if b.s.alpha != "" {
		alpha = 0.1
	}
	weights := make([][]float64, len(cells))
	for i, levels := range cells {
		g := got[i]
		name := fmt.Sprintf("mean of %s %v", b.names[t], g.Levels)
		for j, f := range b.terms[t] {
			if g.Levels.Of(b.s.factors[f].name) != b.s.factors[f].levels[levels[j]] {
				c.fault("%s stands out of order", name)
			}
		}
		// Counts.
		n, inModel := 0, 0
		units := map[int]bool{}
		for _, row := range b.inst {
			if b.inCell(b.rowUnit, row, t, levels) {
				n++
				units[b.s.up[b.rowUnit][row][b.units[t]]] = true
			}
		}
		for _, row := range b.level.inst {
			if b.inCell(b.level.unit, row, t, levels) {
				inModel++
			}
		}
		c.count(name+" n", g.N, n)
		c.count(name+" units", g.Units, len(units))
		a, ok := b.meanWeights(t, levels)
		if !ok {
			c.number(name, g.Mean, math.NaN(), 0)
			continue
		}
		weights[i] = a
		c.number(name, g.Mean, b.value(a), spread)
		v, df := b.variance(a)
		se := math.Sqrt(v)
		c.number(name+" se", g.SE, se, 0)
		if !math.IsNaN(v) && v > 1e-9*spread*spread {
			c.number(name+" df", g.DF, df, 0)
			h := math.NaN()
			if df > 1-1e-9 {
				h = tQuantile(alpha/2, df) * se
			}
			c.number(name+" lower", g.Lower, b.value(a)-h, spread)
			c.number(name+" upper", g.Upper, b.value(a)+h, spread)
		}
		if inModel > 0 {
			c.number(name+" sem", g.SEM, math.Sqrt(b.tests[t].errMS/float64(inModel)), 0)
		}
	}
	// Differences.
	lo, hi, sum, pairs := math.Inf(1), 0.0, 0.0, 0
	dfLo, dfHi := math.Inf(1), 0.0
	label := func(levels []int, only int) string {
		var parts []string
		for i, f := range b.terms[t] {
			if only < 0 || only == i {
				parts = append(parts, b.s.factors[f].levels[levels[i]])
			}
		}
		return strings.Join(parts, ":")
	}
	listed := 0
	for i := range cells {
		for j := range cells[:i] {
			vary := -1 // the one factor in which they differ
			for k := range sizes {
				if cells[i][k] != cells[j][k] {
					if vary == -1 {
						vary = k
					} else {
						vary = -2
					}
				}
			}
			if vary >= 0 {
				listed++
			}
			if weights[i] == nil || weights[j] == nil {
				continue
			}
			d := minusWeights(weights[j], weights[i]) // the earlier one first
			v, df := b.variance(d)
			se := math.Sqrt(v)
			if math.IsNaN(se) {
				continue
			}
			lo, hi, sum, pairs = math.Min(lo, se), math.Max(hi, se), sum+se, pairs+1
			dfLo, dfHi = math.Min(dfLo, df), math.Max(dfHi, df)
			if vary < 0 {
				continue
			}
			found := false
			for _, x := range out.Comparisons {
				if x.Term != b.names[t] || x.A != label(cells[j], vary) || x.B != label(cells[i], vary) {
					continue
				}
				same := true
				for k, f := range b.terms[t] {
					same = same && (k == vary || x.At.Of(b.s.factors[f].name) == b.s.factors[f].levels[cells[i][k]])
				}
				if !same {
					continue
				}
				found = true
				name := fmt.Sprintf("%s %v %s − %s", x.Term, x.At, x.A, x.B)
				c.number(name, x.Difference, b.value(d), spread)
				c.number(name+" se", x.SE, se, 0)
				if se > 1e-6*spread {
					c.number(name+" df", x.DF, df, 0)
					c.number(name+" P", x.P, upperTail(b.value(d)*b.value(d)/v, 1, df), 1e-3)
					c.number(name+" lower", x.Lower, b.value(d)-tQuantile(alpha/2, df)*se, spread)
				}
			}
			if !found {
				c.fault("no comparison of %s: %s, %s", b.names[t], label(cells[j], -1), label(cells[i], -1))
			}
		}
	}
	for _, x := range out.SED {
		if x.Term != b.names[t] || pairs == 0 {
			continue
		}
		c.number("sed min "+x.Term, x.Min, lo, 0)
		c.number("sed mean "+x.Term, x.Mean, sum/float64(pairs), 0)
		c.number("sed max "+x.Term, x.Max, hi, 0)
		if hi-lo < 1e-8*hi && dfHi-dfLo < 1e-5*dfHi {
			c.number("lsd "+x.Term, x.LSD, tQuantile(alpha/2, dfHi)*hi, 0)
		} else if hi-lo > 1e-6*hi {
			c.number("lsd "+x.Term, x.LSD, math.NaN(), 0)
		}
	}
	if len(b.terms[t]) == 1 {
		c.holdTrends(out, b, t, weights)
		return
	}
	for v := range b.terms[t] {
		c.holdInteractionTrends(out, b, t, v, cells, weights)
	}
}

func (b *reckoning) inCell(unit, row, t int, levels []int) bool {
	for i, f := range b.terms[t] {
		if b.s.level[f][b.s.up[unit][row][b.s.factors[f].unit]] != levels[i] {
			return false
		}
	}
	return true
}

// holdTrends fits polynomials to the differences of means from the first one by
// generalized least squares: the step from one degree to the next is what the weighted
// residual sum of squares falls by.
func (c *check) holdTrends(out *result.Response, b *reckoning, t int, weights [][]float64) {
	f := b.s.factors[b.terms[t][0]]
	if f.values == nil || b.s.degree == 0 {
		return
	}
	var x []float64
	var rows [][]float64
	for i, w := range weights {
		if w == nil {
			continue
		}
		x, rows = append(x, f.values[i]), append(rows, w)
	}
	if len(x) < 3 {
		return
	}
	ms := b.tests[t].errMS
	if !(ms > 1e-12) {
		return
	}
	var d [][]float64
	for _, w := range rows[1:] {
		d = append(d, minusWeights(w, rows[0]))
	}
	for _, w := range d {
		if !b.single(t, w) {
			return
		}
	}
	cm := b.covariance(d, ms)
	y := make([]float64, len(d))
	for i := range d {
		y[i] = b.value(d[i])
	}
	k := len(d)
	rss := func(degree int) (float64, float64) {
		var cols [][]float64
		for p := 1; p <= degree; p++ {
			col := make([]float64, k)
			for i := range col {
				col[i] = math.Pow((x[i+1]-x[0])/10, float64(p))
			}
			cols = append(cols, col)
		}
		return weightedResidual(cm, cols, y)
	}
	before, _ := rss(0)
	names := []string{"linear", "quadratic", "cubic"}
	find := func(name string) *result.Contrast {
		for i := range out.Contrasts {
			if out.Contrasts[i].Name == b.names[t]+": "+name {
				return &out.Contrasts[i]
			}
		}
		c.fault("no contrast %s: %s", b.names[t], name)
		return &result.Contrast{}
	}
	scale := before + ms
	degree := min(b.s.degree, len(x)-1)
	for p := 1; p <= degree; p++ {
		after, last := rss(p)
		got := find(names[p-1])
		c.number(got.Name+" ss", got.SS, before-after, scale)
		c.number(got.Name+" estimate", got.Estimate, last/math.Pow(10, float64(p)), 1e-3*float64(got.SE))
		c.number(got.Name+" F", got.F, (before-after)/ms, scale/ms)
		c.number(got.Name+" P", got.P, upperTail((before-after)/ms, 1, float64(b.tests[t].errDF)), 1)
		before = after
	}
	if rest := len(x) - 1 - degree; rest > 0 {
		got := find("lack of fit")
		c.number(got.Name+" ss", got.SS, before, scale)
		c.number(got.Name+" F", got.F, before/float64(rest)/ms, scale/ms)
		c.count(got.Name+" df", got.NumeratorDF, rest)
	}
}

// holdInteractionTrends fits to the differences of cell means from the first one all that
// margins can explain, and polynomials of the factor at position v with coefficients of
// their own at every combination of levels of the others: a step from one degree to the next
// is what the weighted residual sum of squares falls by.
func (c *check) holdInteractionTrends(out *result.Response, b *reckoning, t, v int, cells [][]int, weights [][]float64) {
	f := b.s.factors[b.terms[t][v]]
	if f.values == nil || b.s.degree == 0 || len(b.present[b.terms[t][v]]) < 3 {
		return
	}
	ms := b.tests[t].errMS
	var in [][]int
	var rows [][]float64
	for i, levels := range cells {
		there := true
		for k, f := range b.terms[t] {
			there = there && slices.Contains(b.present[f], levels[k])
		}
		switch {
		case !there:
			continue
		case weights[i] == nil:
			return
		}
		in, rows = append(in, levels), append(rows, weights[i])
	}
	var d [][]float64
	for _, w := range rows[1:] {
		d = append(d, minusWeights(w, rows[0]))
	}
	if !(ms > 1e-12) {
		return
	}
	// Columns over the cells: an indicator of every combination of levels in all factors but
	// one; then x to a power within every combination of levels of the others.
	key := func(levels []int, without int) string {
		kept := slices.Clone(levels)
		kept[without] = -1
		return fmt.Sprint(kept)
	}
	var cols [][]float64
	indicate := func(without int, value func(levels []int) float64) {
		for i, first := range in {
			k := key(first, without)
			if slices.IndexFunc(in, func(l []int) bool { return key(l, without) == k }) != i {
				continue
			}
			col := make([]float64, len(in))
			for j, l := range in {
				if key(l, without) == k {
					col[j] = value(l)
				}
			}
			cols = append(cols, minusWeights(col[1:], slices.Repeat(col[:1], len(col)-1)))
		}
	}
	for k := range b.terms[t] {
		indicate(k, func([]int) float64 { return 1 })
	}
	// The interaction by itself: what margins leave. In several strata there is none.
	cov, y := b.covariance(d, ms), make([]float64, len(d))
	for i := range d {
		y[i] = b.value(d[i])
	}
	before, dfBefore := weightedLeft(cov, cols, y)
	scale := before + ms
	find := func(name string) *result.Contrast {
		name = b.names[t] + ": " + f.name + " " + name
		for i := range out.Contrasts {
			if out.Contrasts[i].Name == name {
				return &out.Contrasts[i]
			}
		}
		return nil
	}
	// Whether all that is beyond margins lies in one stratum.
	for _, l := range in {
		w := make([]float64, len(rows[0]))
		for s := range 1 << len(l) {
			corner, sign := slices.Clone(l), 1.0
			for k := range corner {
				if s>>k&1 == 1 {
					corner[k], sign = in[0][k], -sign
				}
			}
			j := slices.IndexFunc(in, func(x []int) bool { return slices.Equal(x, corner) })
			for i, x := range rows[j] {
				w[i] += sign * x
			}
		}
		if floatsSquared(w) > tiny*floatsSquared(rows[0]) && !b.single(t, w) {
			if find("linear") != nil {
				c.fault("trends of %s over several errors", b.names[t])
			}
			return
		}
	}
	names := []string{"linear", "quadratic", "cubic"}
	degree := min(b.s.degree, len(b.present[b.terms[t][v]])-1)
	for p := 1; p <= degree; p++ {
		indicate(v, func(l []int) float64 { return math.Pow((f.values[l[v]]-f.values[in[0][v]])/4, float64(p)) })
		after, df := weightedLeft(cov, cols, y)
		got := find(names[p-1])
		if got == nil {
			c.fault("no trend %s of %s in %s", names[p-1], f.name, b.names[t])
			return
		}
		c.count(got.Name+" df", got.NumeratorDF, dfBefore-df)
		c.number(got.Name+" ss", got.SS, before-after, scale)
		c.number(got.Name+" P", got.P, upperTail((before-after)/float64(dfBefore-df)/ms, dfBefore-df, float64(b.tests[t].errDF)), 1)
		before, dfBefore = after, df
	}
	if got := find("lack of fit"); dfBefore > 0 && got != nil {
		c.count(got.Name+" df", got.NumeratorDF, dfBefore)
		c.number(got.Name+" ss", got.SS, before, scale)
	} else if dfBefore > 0 {
		c.fault("no lack of fit of %s in %s", f.name, b.names[t])
	}
}

func (c *check) holdContrast(out *result.Response, b *reckoning) {
	if b.s.contrast == nil {
		return
	}
	i := slices.IndexFunc(out.Contrasts, func(x result.Contrast) bool { return x.Name == "planned" })
	if i < 0 {
		c.fault("no planned contrast")
		return
	}
	got := out.Contrasts[i]
	lost := false
	row := make([]float64, len(b.columns))
	for l, w := range b.s.contrast {
		if w == 0 {
			continue
		}
		p := slices.Index(b.present[0], l)
		if p < 0 {
			lost = true
			continue
		}
		for j, v := range b.meanRow(0, []int{p}) {
			row[j] += float64(w) * v
		}
	}
	for j := range row {
		if math.Abs(row[j]) < 1e-12 {
			row[j] = 0
		}
	}
	a, ok := b.estimate(row)
	if lost || !ok {
		c.number("contrast", got.Estimate, math.NaN(), 0)
		return
	}
	v, df := b.variance(a)
	c.number("contrast", got.Estimate, b.value(a), math.Sqrt(v))
	c.number("contrast se", got.SE, math.Sqrt(v), 0)
	c.number("contrast df", got.DF, df, 0)
	ss := math.NaN()
	if b.single(0, a) {
		ss = b.value(a) * b.value(a) / v * b.tests[0].errMS
	}
	c.number("contrast ss", got.SS, ss, b.tests[0].errMS)
	c.number("contrast F", got.F, b.value(a)*b.value(a)/v, 1e-3)
	c.number("contrast P", got.P, upperTail(b.value(a)*b.value(a)/v, 1, df), 1e-3)
}

// holdParts holds the parts of listed treatments: tests of the means that the parts are
// about, with equal weights within groups.
func (c *check) holdParts(out *result.Response, b *reckoning, total float64) {
	if b.s.listed == nil {
		return
	}
	var rows []([]float64)
	for l := range b.s.listed {
		a, ok := b.meanWeights(0, []int{l})
		if !ok {
			return
		}
		rows = append(rows, a)
	}
	combine := func(w []float64) []float64 {
		out := make([]float64, len(rows[0]))
		for l, x := range w {
			for i, v := range rows[l] {
				out[i] += x * v
			}
		}
		return out
	}
	n := len(rows)
	part := func(name string, contrasts ...[]float64) {
		var a [][]float64
		for _, w := range contrasts {
			a = append(a, combine(w))
		}
		for _, w := range a {
			if !b.single(0, w) {
				return // over several errors there is no part, and a note says so
			}
		}
		ss, df := squaredLength(a, b.level.y)
		i := slices.IndexFunc(out.Anova, func(l result.Line) bool { return l.Source == name })
		if i < 0 {
			c.fault("no part %s", name)
			return
		}
		c.count(name+" df", out.Anova[i].DF, df)
		c.number(name+" ss", out.Anova[i].SS, ss, total)
		c.number(name+" F", out.Anova[i].F, ss/float64(df)/b.tests[0].errMS, 1e-3)
	}
	control := make([]float64, n)
	control[0] = 1
	for l := 1; l < n; l++ {
		control[l] = -1 / float64(n-1)
	}
	part("control v. rest", control)
	if b.s.listed[1].levels == nil {
		var rest [][]float64
		for l := 2; l < n; l++ {
			w := make([]float64, n)
			w[1], w[l] = 1, -1
			rest = append(rest, w)
		}
		if len(rest) > 0 {
			part("rest", rest...)
		}
		return
	}
	of := func(f func(sort, dose int) float64) []float64 {
		w := make([]float64, n)
		for s := range 2 {
			for d := range 3 {
				w[1+3*s+d] = f(s, d)
			}
		}
		return w
	}
	sort := func(s, d int) float64 { return float64(1 - 2*s) }
	first := func(s, d int) float64 { return []float64{1, -1, 0}[d] }
	second := func(s, d int) float64 { return []float64{1, 1, -2}[d] }
	part("sort", of(sort))
	part("dose", of(first), of(second))
	part("sort:dose", of(func(s, d int) float64 { return sort(s, d) * first(s, d) }), of(func(s, d int) float64 { return sort(s, d) * second(s, d) }))
}

func (c *check) holdResiduals(out *result.Response, b *reckoning, spread float64) {
	if len(out.Residuals) != len(b.at.y) {
		c.fault("%d residuals, want %d", len(out.Residuals), len(b.at.y))
		return
	}
	n := len(b.at.y)
	p := n - b.errDF
	for i, got := range out.Residuals {
		name := fmt.Sprintf("residual %d", i)
		e, h := b.at.y[i]-b.fitted[i], b.leverage[i]
		c.number(name+" observed", got.Observed, b.at.y[i], spread)
		c.number(name+" fitted", got.Fitted, b.fitted[i], spread)
		c.number(name, got.Residual, e, spread)
		c.number(name+" leverage", got.Leverage, h, 1)
		switch {
		case h > 1-1e-10:
			c.number(name+" studentized", got.Studentized, math.NaN(), 0)
			c.number(name+" cook", got.Cook, math.NaN(), 0)
			continue
		case h > 1-1e-5: // a residual that is all rounding
			continue
		}
		r := e / math.Sqrt(b.errMS*(1-h))
		c.number(name+" studentized", got.Studentized, r, 1)
		c.number(name+" cook", got.Cook, r*r*h/(1-h)/float64(p), 1)
		if left := float64(b.errDF) - r*r; b.errDF > 1 && left > 1e-6 {
			c.number(name+" deleted", got.Deleted, r*math.Sqrt(float64(b.errDF-1)/left), 1)
		}
	}
}

func (c *check) holdSummary(out *result.Response, b *reckoning, spread float64) {
	var sizes []int
	for _, f := range b.s.factors {
		sizes = append(sizes, len(f.levels))
	}
	cells := product(sizes)
	if len(out.Summary) != len(cells) {
		c.fault("%d cells in the summary, want %d", len(out.Summary), len(cells))
		return
	}
	for k, levels := range cells {
		got := out.Summary[k]
		var v []float64
		rows := 0
		for i, inst := range b.at.inst {
			in := true
			for f := range b.s.factors {
				in = in && b.s.level[f][b.s.up[b.bottom][inst][b.s.factors[f].unit]] == levels[f]
			}
			if in {
				v = append(v, b.at.y[i])
				rows += b.at.count[i]
			}
		}
		c.count("summary n", got.N, rows)
		c.count("summary units", got.Units, len(v))
		if len(v) == 0 {
			c.number("summary mean", got.Mean, math.NaN(), 0)
			continue
		}
		m := v[0] - centred(v)[0]
		c.number("summary mean", got.Mean, m, spread)
		c.number("summary min", got.Min, slices.Min(v), spread)
		c.number("summary max", got.Max, slices.Max(v), spread)
		if len(v) > 1 {
			c.number("summary sd", got.SD, math.Sqrt(floatsSquared(centred(v))/float64(len(v)-1)), spread)
		}
	}
}
