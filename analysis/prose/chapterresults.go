package prose

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// TableID is the identifier of the table of means of a term in a chapter.
func TableID(term string, planned bool) string {
	id := "chapter-means-" + strings.ReplaceAll(term, ":", "-")
	if !planned {
		id += "-unplanned"
	}
	return id
}

// FigureID is the identifier of the figure of the means of a term.
func FigureID(response, term string) string {
	return "figure-means-" + response + "-" + strings.ReplaceAll(term, ":", "-")
}

// ChapterUnits says how many units each analysis has, and what became of animals and
// units by treatment.
func ChapterUnits(t *trial.Trial, rs *result.Results) []Passage {
	if t.Table == nil {
		return []Passage{{Text: "There are no data yet, so that there are no results."}}
	}
	var s paragraphOf
	var all group
	for i := range rs.Responses {
		if r := &rs.Responses[i]; r.Model != nil {
			all = append(all, r)
		}
	}
	for i, g := range groups(all, func(r *result.Response) string { return fmt.Sprint(r.N, " ", r.Missing+r.Excluded) }) {
		r := g[0]
		n, of := r.N, r.N+r.Missing+r.Excluded
		name := Plural(valueUnit(t, r, of))
		switch {
		case n == of && i == 0 && len(g) == len(all):
			s.add("All %s %s were analysed", small(of), name)
		case n == of:
			s.add("All %s %s were analysed for %s", small(of), name, g.names(all))
		default:
			s.add("For %s %s of %s %s %s analysed", g.names(all), num.Count(n), num.Count(of), name, plural(n, "was", "were"))
		}
	}
	if x := lossText(t); x != "" {
		s.add("%s", x)
	}
	for i := range rs.Responses {
		if r := &rs.Responses[i]; r.Model == nil {
			for _, n := range r.Notes {
				s.add("%s", n.Text)
			}
		}
	}
	return s
}

// valueUnit is what bears one value of a response.
func valueUnit(t *trial.Trial, r *result.Response, n int) string {
	for i := range t.Plan.Units {
		if u := &t.Plan.Units[i]; u.N == n && i == t.Plan.Smallest {
			return UnitName(u)
		}
	}
	if x := t.Table.Response(r.Name); x != nil && t.Plan.Units[x.Unit].N == n {
		return UnitName(&t.Plan.Units[x.Unit])
	}
	for i := range t.Plan.Units {
		if u := &t.Plan.Units[i]; u.N == n {
			return UnitName(u)
		}
	}
	return "value"
}

// lossText tells of deaths, removals and illness by treatment.
func lossText(t *trial.Trial) string {
	p := t.Plan
	unit := allot.RowUnit(p)
	if t.Protocol.Animals == nil || t.Allotment == nil || unit < 0 {
		return ""
	}
	kinds := []struct{ kind, verb string }{{kind: "death", verb: "died"}, {kind: "removal", verb: "removed"}, {kind: "illness", verb: "ill"}}
	type loss struct {
		n      int
		causes []string
	}
	found := map[string]map[string]*loss{}
	finder := allot.NewFinder(p)
	any := false
	for _, e := range t.Protocol.Events {
		if !slices.ContainsFunc(kinds, func(k struct{ kind, verb string }) bool { return k.kind == e.Kind }) {
			continue
		}
		u, i, bad := finder.Unit(e.Unit)
		if bad != nil {
			continue
		}
		who := "" // a unit that has several treatments, such as a cow over periods
		if p.Coarse(u, unit) != nil {
			who = TreatmentText(t, unit, int(p.Coarse(u, unit)[i]))
		}
		if found[e.Kind] == nil {
			found[e.Kind] = map[string]*loss{}
		}
		if found[e.Kind][who] == nil {
			found[e.Kind][who] = &loss{}
		}
		x := found[e.Kind][who]
		x.n += max(e.Animals, 1)
		if c := phrase(e.Cause); said(c) && !slices.Contains(x.causes, c) {
			x.causes = append(x.causes, c)
		}
		any = true
	}
	if !any {
		return ""
	}
	var parts []string
	for _, k := range kinds {
		var of []string
		total := 0
		for _, who := range append(TreatmentOrder(t, unit), "") {
			x := found[k.kind][who]
			if x == nil {
				continue
			}
			line := small(x.n)
			if who != "" {
				line += " at " + who
			}
			if len(x.causes) > 0 {
				line += " (" + And(x.causes) + ")"
			}
			of = append(of, line)
			total += x.n
		}
		if total == 0 {
			if k.kind == "death" {
				parts = append(parts, "no "+animalWord(t)+" died")
			}
			continue
		}
		verb := k.verb
		if k.kind != "death" {
			verb = plural(total, "was ", "were ") + k.verb
		}
		if len(of) == 1 {
			of[0] = strings.TrimSpace(strings.TrimPrefix(of[0], small(total)))
			if strings.HasPrefix(of[0], "at ") {
				verb += ","
			}
			parts = append(parts, strings.TrimSpace(fmt.Sprintf("%s %s %s", someAnimals(t, total), verb, of[0])))
			continue
		}
		parts = append(parts, fmt.Sprintf("%s %s: %s", someAnimals(t, total), verb, series(of)))
	}
	return strings.Join(parts, "; ")
}

// shownTests are the tests that the results of a response are told by, in their order.
func shownTests(r *result.Response) []result.Test {
	var out []result.Test
	for _, x := range r.Tests {
		if x.F.Known() && !isCovariate(r, x.Source) {
			out = append(out, x)
		}
	}
	return out
}

// ChapterResult tells what one response showed, with effect, interval and P, and does not
// interpret beyond the design.
func ChapterResult(t *trial.Trial, r *result.Response) []Passage {
	var s paragraphOf
	p := t.Plan
	if r.Model == nil {
		for _, n := range r.Notes {
			s.add("%s", n.Text)
		}
		return s
	}
	tests := shownTests(r)
	if len(tests) == 0 {
		s.add("%s could not be tested", responseName(r))
	}
	stands := standing(p, r)
	for _, x := range tests {
		name := TermText(p, x.Source)
		var line string
		switch {
		case strings.Contains(x.Source, ":"):
			line = fmt.Sprintf("the interaction of %s had %s", FactorsText(p, x.Source), testText(x))
		case strings.Contains(x.Source, " v. "):
			line = fmt.Sprintf("the comparison of %s gave %s", name, testText(x))
		default:
			line = fmt.Sprintf("the test of %s gave %s", name, testText(x))
		}
		s.see(TableID(ownTerm(p, r, x.Source), Planned(r)), "%s", line)
		for k, e := range effects(p, r, x.Source, stands) {
			see := ""
			if k == 0 && r.Role == "primary" && Planned(r) && slices.Contains(Shown(p, r), x.Source) {
				see = FigureID(r.Name, x.Source)
			}
			s.see(see, "%s", e)
		}
	}
	for _, c := range foremost(r) {
		if strings.Contains(c.Name, ": ") || !c.Estimate.Known() {
			continue
		}
		s.add("%s", contrastText(p, r, c))
	}
	if len(stands) > 0 {
		s.see(TableID(stands[0], Planned(r)), "since the effects of %s depend on each other, the means of their combinations come before those of each", FactorsText(p, stands[0]))
	}
	return s
}

// ownTerm is the term in whose table of means a source stands.
func ownTerm(p *layout.Plan, r *result.Response, source string) string {
	for _, m := range r.Means {
		if m.Term == source {
			return source
		}
	}
	for _, m := range r.Means {
		return m.Term
	}
	return source
}

// FactorsText lists the factors of a term: "tillage, clover and nitrogen".
func FactorsText(p *layout.Plan, term string) string {
	var names []string
	for _, f := range strings.Split(term, ":") {
		names = append(names, TermText(p, f))
	}
	return And(names)
}

// standing are the interactions whose P is below the level of significance, those of most
// factors first.
func standing(p *layout.Plan, r *result.Response) []string {
	var out []string
	for _, x := range r.Tests {
		if strings.Contains(x.Source, ":") && x.P.Known() && float64(x.P) < Alpha(p, r) {
			out = append(out, x.Source)
		}
	}
	slices.SortStableFunc(out, func(a, b string) int { return strings.Count(b, ":") - strings.Count(a, ":") })
	return out
}

func testText(x result.Test) string {
	s := fmt.Sprintf("F(%s,\u00a0%s) = %s, P %s", num.DF(float64(x.DF)), num.DF(float64(x.ErrorDF)), num.Statistic(float64(x.F)), num.PStatement(float64(x.P)))
	if x.GreenhouseGeisser > 0 {
		s += fmt.Sprintf(" (with corrected degrees of freedom P %s)", num.PStatement(float64(x.GreenhouseGeisser)))
	}
	return s
}

// effects are the sentences that tell how large the effect of a term is: its trends, or
// the difference of its means, with limits and P.
func effects(p *layout.Plan, r *result.Response, term string, stands []string) []string {
	var out []string
	name := responseName(r)
	for _, c := range foremost(r) {
		factor, trend, isTrend := strings.Cut(c.Name, ": ")
		if !isTrend || factor != term || !c.Estimate.Known() {
			continue
		}
		d := num.SEDecimals(float64(c.SE))
		lo, hi := float64(c.Lower), float64(c.Upper)
		lim := fmt.Sprintf("%s limits %s to %s; P %s", confidence(Alpha(p, r)), num.Fixed(lo, d), num.Fixed(hi, d), num.PStatement(float64(c.P)))
		each := "for each " + eachUnit(p, factor)
		switch trend {
		case "linear":
			switch estimate := float64(c.Estimate); {
			case lo > 0:
				out = append(out, fmt.Sprintf("%s rose by %s %s (linear trend; %s)", name, num.Unit(num.Fixed(estimate, d), r.Unit), each, lim))
			case hi < 0:
				out = append(out, fmt.Sprintf("%s fell by %s %s (linear trend; %s)", name, num.Unit(num.Fixed(-estimate, d), r.Unit), each,
					fmt.Sprintf("%s limits %s to %s; P %s", confidence(Alpha(p, r)), num.Fixed(-hi, d), num.Fixed(-lo, d), num.PStatement(float64(c.P)))))
			default:
				out = append(out, fmt.Sprintf("the linear trend was %s %s (%s)", num.Unit(num.Fixed(estimate, d), r.Unit), each, lim))
			}
		default:
			if c.P.Known() && float64(c.P) >= Alpha(p, r) {
				out = append(out, fmt.Sprintf("the %s trend had P %s", trend, num.PStatement(float64(c.P))))
				continue
			}
			out = append(out, fmt.Sprintf("the %s coefficient was %s (%s)", trend, num.Fixed(float64(c.Estimate), d), lim))
		}
	}
	for _, c := range foremost(r) {
		if c.Name == term+": lack of fit" && c.P.Known() && len(out) > 0 {
			last := len(out) - 1
			if rest, ok := strings.CutSuffix(out[last], " trend had P "+num.PStatement(lastTrendP(r, term))); ok && !strings.Contains(rest, "(") {
				out[last] += fmt.Sprintf(" and lack of fit P %s", num.PStatement(float64(c.P)))
				continue
			}
			out = append(out, fmt.Sprintf("lack of fit had F(%s, %s) = %s, P %s", num.DF(float64(c.NumeratorDF)), num.DF(float64(c.DF)), num.Statistic(float64(c.F)), num.PStatement(float64(c.P))))
		}
	}
	if strings.Contains(term, ":") && !slices.Contains(stands, term) {
		return out
	}
	if len(out) > 0 {
		return out
	}
	return append(out, differenceTexts(p, r, term)...)
}

// lastTrendP is the P of the highest trend of a term.
func lastTrendP(r *result.Response, term string) float64 {
	p := math.NaN()
	for _, c := range foremost(r) {
		if factor, trend, ok := strings.Cut(c.Name, ": "); ok && factor == term && trend != "lack of fit" {
			p = float64(c.P)
		}
	}
	return p
}

// singularUnit is a unit of which there is one: seed/m² rather than seeds/m².
func singularUnit(unit string) string {
	what, per, ok := strings.Cut(unit, "/")
	if ok && len(what) > 3 && strings.HasSuffix(what, "s") {
		return strings.TrimSuffix(what, "s") + "/" + per
	}
	return unit
}

// differenceTexts tells the differences between the means of a term: each of them where they are
// few, the widest where they are many.
func differenceTexts(p *layout.Plan, r *result.Response, term string) []string {
	var cs []result.Comparison
	for _, c := range r.Comparisons {
		if c.Term == term && c.Difference.Known() {
			cs = append(cs, c)
		}
	}
	if len(cs) > 0 && cs[0].Method != "dunnett" {
		for i, c := range cs { // the larger mean first
			if c.Difference < 0 {
				c.A, c.B, c.Difference, c.Lower, c.Upper = c.B, c.A, -c.Difference, -c.Upper, -c.Lower
				cs[i] = c
			}
		}
	}
	var out []string
	lo, hi := rangeOfMeans(r, term)
	if len(cs) == 0 {
		if lo != nil && lo != hi {
			d := num.SEDecimals(float64(lo.SE))
			out = append(out, fmt.Sprintf("means ran from %s (%s) to %s (%s)", num.Unit(num.Fixed(float64(lo.Mean), d), r.Unit), LevelsText(p, lo.Levels), num.Unit(num.Fixed(float64(hi.Mean), d), r.Unit), LevelsText(p, hi.Levels)))
		}
		return out
	}
	d := 0
	for _, c := range cs {
		d = max(d, num.SEDecimals(float64(c.SE)))
	}
	show := func(c result.Comparison) string {
		diff, low, high := float64(c.Difference), float64(c.Lower), float64(c.Upper)
		lim := ""
		if c.Lower.Known() && c.Upper.Known() {
			lim = fmt.Sprintf("%s limits %s to %s; ", confidence(Alpha(p, r)), num.Fixed(low, d), num.Fixed(high, d))
		}
		return fmt.Sprintf("%s (%sP %s)", num.Unit(num.Fixed(diff, d), r.Unit), lim, num.PStatement(float64(c.PAdjusted)))
	}
	pair := func(c result.Comparison) string { return pairText(p, term, c) }
	switch {
	case len(cs) == 1:
		out = append(out, fmt.Sprintf("the difference %s was %s", pair(cs[0]), show(cs[0])))
	case cs[0].Method == "dunnett" && len(cs) <= 4:
		var parts []string
		for _, c := range cs {
			parts = append(parts, fmt.Sprintf("%s for %s", show(c), pairLevel(p, term, c.A)))
		}
		out = append(out, fmt.Sprintf("differences from the control (%s) were %s", pairLevel(p, term, cs[0].B), series(parts)))
	default:
		best := cs[0]
		for _, c := range cs[1:] {
			if math.Abs(float64(c.Difference)) > math.Abs(float64(best.Difference)) {
				best = c
			}
		}
		what := "the widest difference of two means"
		if best.Method == "dunnett" {
			what = "the widest difference from the control"
		}
		out = append(out, fmt.Sprintf("%s, %s, was %s", what, pair(best), show(best)))
	}
	return out
}

// pairText names the difference of two means, with the slice it is taken in.
func pairText(p *layout.Plan, term string, c result.Comparison) string {
	var free []string
	for _, f := range strings.Split(term, ":") {
		if c.At.Of(f) == "" {
			free = append(free, f)
		}
	}
	var s string
	if len(free) == 1 {
		s = LevelText(p, free[0], c.A) + " − " + LevelText(p, free[0], c.B)
	} else {
		s = PairText(c.A, c.B)
	}
	if len(c.At) > 0 {
		s += " within " + LevelsText(p, c.At)
	}
	return s
}

// contrastText tells a planned contrast.
func contrastText(p *layout.Plan, r *result.Response, c result.Contrast) string {
	c = Scaled(p, r, c)
	d := num.SEDecimals(float64(c.SE))
	lim := ""
	if c.Lower.Known() {
		lim = fmt.Sprintf("%s limits %s to %s; ", confidence(Alpha(p, r)), num.Fixed(float64(c.Lower), d), num.Fixed(float64(c.Upper), d))
	}
	return fmt.Sprintf("the contrast “%s” was %s (%sP %s)", TermText(p, c.Name), num.Unit(num.Fixed(float64(c.Estimate), d), r.Unit), lim, num.PStatement(float64(c.P)))
}

// ChapterOthers tells what the responses that are not primary showed, term by term: those
// with a P below the level of significance with their effects, the others together.
func ChapterOthers(t *trial.Trial, rs *result.Results) []Passage {
	var s paragraphOf
	p := t.Plan
	var all group
	for i := range rs.Responses {
		r := &rs.Responses[i]
		if r.Model != nil && Planned(r) && r.Role != "primary" {
			all = append(all, r)
		}
	}
	var sources []string
	for _, r := range all {
		for _, x := range shownTests(r) {
			if !slices.Contains(sources, x.Source) {
				sources = append(sources, x.Source)
			}
		}
	}
	for _, source := range sources {
		var rest group
		least := math.Inf(1)
		name := TermText(p, source)
		of := "the test of " + name
		if strings.Contains(source, ":") {
			of = "the interaction of " + FactorsText(p, source)
		}
		told := 0
		for _, r := range all {
			x := test(r, source)
			if x == nil {
				continue
			}
			if float64(x.P) >= Alpha(p, r) && len(all) > maxNamed {
				rest = append(rest, r)
				least = math.Min(least, float64(x.P))
				continue
			}
			line := fmt.Sprintf("for %s, %s gave %s", responseName(r), of, testText(*x))
			switch {
			case told > 0:
				line = fmt.Sprintf("for %s it gave %s", responseName(r), testText(*x))
			case len(all) == 1 && source != sources[0]:
				line = fmt.Sprintf("%s gave %s", of, testText(*x))
			}
			told++
			s.see(TableID(ownTerm(p, r, source), true), "%s", line)
			for _, e := range effects(p, r, source, standing(p, r)) {
				s.add("%s", e)
			}
		}
		if len(rest) > 0 {
			who := rest.names(all)
			if told > 0 && len(rest) > maxNamed {
				who = "the other " + num.Count(len(rest)) + " responses"
			}
			s.see(TableID(ownTerm(p, rest[0], source), true), "for %s, %s had P of %s or more", who, of, num.P(least))
		}
	}
	return s
}

func test(r *result.Response, source string) *result.Test {
	for i := range r.Tests {
		if r.Tests[i].Source == source && r.Tests[i].F.Known() {
			return &r.Tests[i]
		}
	}
	return nil
}

// ChapterChecks names the tests of residuals that gave a P below 0.05.
func ChapterChecks(rs *result.Results, planned bool) []Passage {
	var s paragraphOf
	var found []string
	all := analysedResponses(rs, planned)
	for _, r := range all {
		var of []string
		for _, d := range r.Diagnostics {
			if !d.P.Known() || float64(d.P) >= 0.05 {
				continue
			}
			name := lowerFirst(DiagnosticLabel(d.Name))
			if k := strings.Index(name, " ("); k > 0 {
				name = name[:k]
			}
			of = append(of, fmt.Sprintf("%s (P %s)", name, num.PStatement(float64(d.P))))
		}
		if len(of) > 0 {
			found = append(found, responseName(r)+", "+And(of))
		}
	}
	switch {
	case len(found) > 0:
		s.add("Tests of residuals with P below 0.05: %s", strings.Join(found, "; "))
	case len(all) > 0:
		s.add("No test of residuals had P below 0.05")
	}
	return s
}

// ChapterUnplanned tells the contrasts of planned responses that were not in the plan.
func ChapterUnplanned(t *trial.Trial, rs *result.Results) []Passage {
	var s paragraphOf
	for i := range rs.Responses {
		r := &rs.Responses[i]
		if r.Model == nil || !Planned(r) {
			continue
		}
		for _, c := range r.Contrasts {
			if !c.Planned && c.Estimate.Known() && !strings.Contains(c.Name, ": ") {
				s.add("for %s, %s", responseName(r), contrastText(t.Plan, r, c))
			}
		}
	}
	return s
}

// MeansNote says what the values of a table of means are, and of how many units.
func MeansNote(t *trial.Trial, g []*result.Response, term string) string {
	p := t.Plan
	adjusted, plain := false, false
	lo, hi, unit := 0, 0, -1
	for i := range p.Terms {
		if p.Terms[i].Name == term {
			unit = p.Terms[i].Unit
		}
	}
	for _, f := range strings.Split(term, ":") {
		if x := p.Protocol.RepeatedNamed(f); x != nil {
			unit = slices.IndexFunc(p.Units, func(u layout.Unit) bool { return u.Name == x.On })
		}
	}
	if unit < 0 {
		unit = allot.RowUnit(p) // a part of listed treatments
	}
	for _, r := range g {
		if adjustedMeans(r) {
			adjusted = true
		} else {
			plain = true
		}
		for _, m := range r.Means {
			if m.Term != term {
				continue
			}
			if lo == 0 || m.Units < lo {
				lo = m.Units
			}
			hi = max(hi, m.Units)
		}
	}
	what := "means"
	switch {
	case adjusted && plain:
		what = "means, adjusted means where the analysis was by least squares,"
		if slices.ContainsFunc(g, func(r *result.Response) bool { return r.Model.Method == "reml" }) {
			what = "means, adjusted means where the analysis was by a mixed model,"
		}
	case adjusted:
		what = "adjusted means"
	}
	s := "Values are " + what
	if hi > 0 {
		name := "unit"
		if unit >= 0 {
			name = UnitName(&p.Units[unit])
		}
		if lo == hi {
			s += " of " + some(lo, name)
		} else {
			s += fmt.Sprintf(" of %s %s %s", small(lo), plural(hi-lo, "or", "to"), some(hi, name))
		}
		if unit >= 0 {
			if a, b := span(p.Units[unit].Animals); a == b && a > 1 {
				s += fmt.Sprintf(" of %s", someAnimals(t, a))
			}
			for i := range p.Units {
				if u := &p.Units[i]; u.Role == layout.Sampling && u.Within == unit {
					if a, b := perParent(p, i); a == b && a > 1 {
						s += " of " + some(a, UnitName(u))
					}
				}
			}
		}
	}
	return s + "."
}

// ChapterNotes are the notes of a table of means: those that qualify the term or a whole
// analysis, with the response named where not all of the table have it. What the account
// of the methods says already is left out.
func ChapterNotes(t *trial.Trial, g []*result.Response, term string) []string {
	var out []string
	by := map[string]group{}
	for _, r := range g {
		for _, n := range r.Notes {
			if n.Term != "" && n.Term != term {
				continue
			}
			if slices.Contains([]string{"averaged", "units-lost", "not-balanced", "intra-block", "empty-cells", "covariate-aliased", "term-lost", "within-variance", "no-own-line", "sed-kinds", "not-spherical", "no-sphericity", "structures-left-out", "components-bounded", "several-maxima", "components-hardly-told", "leverage-one", "no-control"}, n.Code) {
				continue
			}
			if n.Code == "letters-withheld" && strings.Contains(n.Text, "graded") {
				continue // the table has their trends
			}
			if by[n.Text] == nil {
				out = append(out, n.Text)
			}
			if !slices.Contains(by[n.Text], r) {
				by[n.Text] = append(by[n.Text], r)
			}
		}
	}
	for i, text := range out {
		if len(by[text]) < len(g) {
			out[i] = upperFirst(by[text].names(g)) + ": " + lowerFirst(text)
		}
	}
	return out
}

// LettersNote says what letters in a row mean; "" where a table has none.
func LettersNote(p *layout.Plan, g []*result.Response, term, along string) string {
	var of group
	method := ""
	for _, r := range g {
		for _, m := range r.Means {
			if m.Term == term && m.Letters != nil {
				of = append(of, r)
				break
			}
		}
	}
	if len(of) == 0 || !Lettered(of[0], term) {
		return ""
	}
	for _, c := range of[0].Comparisons {
		if c.Term == term {
			method = c.Method
		}
	}
	by := ""
	if method != "" {
		by = " by " + Method(method)
	}
	return fmt.Sprintf("Means in a %s that share a letter were not found different at the %s level%s.", along, levelText(Alpha(p, of[0])), by)
}

// SEDNotes are the standard errors of differences by kind, where a term has several.
func SEDNotes(g []*result.Response, term string) []string {
	var out []string
	for _, r := range g {
		for _, n := range r.Notes {
			if n.Code == "sed-kinds" && n.Term == term {
				text := n.Text
				if len(g) > 1 {
					text = upperFirst(responseName(r)) + ": " + text
				}
				out = append(out, text)
			}
		}
	}
	return out
}

// Shown are the terms whose means a figure of a response shows: of its interactions that
// stand that of most factors, else the treatments by themselves.
func Shown(p *layout.Plan, r *result.Response) []string {
	if stands := standing(p, r); len(stands) > 0 {
		return stands[:1]
	}
	var out []string
	for _, m := range r.Means {
		if !strings.Contains(m.Term, ":") && !slices.Contains(out, m.Term) {
			out = append(out, m.Term)
		}
	}
	return out
}

// Scaled is a contrast of means as a difference: divided by the sum of its positive weights,
// so that the mean of some levels is compared with that of others.
func Scaled(p *layout.Plan, r *result.Response, c result.Contrast) result.Contrast {
	var all []protocol.Contrast
	all = append(all, p.Protocol.Analysis.Contrasts...)
	if x := p.Protocol.Response(r.Name); x != nil {
		all = append(all, x.Contrasts...)
	}
	for _, x := range all {
		if x.Name != c.Name {
			continue
		}
		sum := 0.0
		for _, w := range x.Weights {
			sum += max(w.Value, 0)
		}
		if sum > 0 {
			k := result.Number(sum)
			c.Estimate, c.SE, c.Lower, c.Upper = c.Estimate/k, c.SE/k, c.Lower/k, c.Upper/k
		}
		break
	}
	return c
}

// Lettered tells whether letters say something of the means of a term: of two means the
// P says it all.
func Lettered(r *result.Response, term string) bool {
	n := 0
	for _, m := range r.Means {
		if m.Term == term {
			n++
		}
	}
	return n > 2
}
