package prose

import (
	"fmt"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/layout"
)

// maxNamed is the number of responses that a sentence names; of more it says how many.
const maxNamed = 5

// responseName is a response in running text without its unit.
func responseName(r *result.Response) string {
	r2 := *r
	r2.Unit = ""
	return ResponseText(&r2)
}

// some of the responses of a trial, as a sentence speaks of them.
type group []*result.Response

// names lists a group: by name where they are few, else by what they are of the whole.
func (g group) names(whole group) string {
	var all []string
	for _, r := range g {
		all = append(all, responseName(r))
	}
	if len(g) == len(whole) && len(g) > maxNamed {
		return "all " + num.Count(len(g)) + " responses"
	}
	if len(g) <= maxNamed {
		return And(all)
	}
	var but []string
	for _, r := range whole {
		if !slices.Contains(g, r) {
			but = append(but, responseName(r))
		}
	}
	if len(but) <= maxNamed {
		return "all responses but " + And(but)
	}
	return num.Count(len(g)) + " responses (" + And(all) + ")"
}

// be is the past tense that fits a group.
func (g group) be() string {
	if len(g) == 1 {
		return "was"
	}
	return "were"
}

// groups sorts responses by a key, in the order in which the keys come.
func groups(of group, key func(*result.Response) string) []group {
	var order []string
	by := map[string]group{}
	for _, r := range of {
		k := key(r)
		if by[k] == nil {
			order = append(order, k)
		}
		by[k] = append(by[k], r)
	}
	var out []group
	for _, k := range order {
		out = append(out, by[k])
	}
	return out
}

// analysedResponses are those with a model, planned beforehand or not.
func analysedResponses(rs *result.Results, planned bool) group {
	var out group
	for i := range rs.Responses {
		if r := &rs.Responses[i]; r.Model != nil && Planned(r) == planned {
			out = append(out, r)
		}
	}
	return out
}

// past tells notes of an analysis as what was done.
var past = strings.NewReplacer("are compared", "were compared", "are taken", "were taken", "is not recovered", "was not recovered", "tell is", "told was",
	"are estimated", "were estimated", "is adjusted", "was adjusted", "cannot be estimated", "could not be estimated", "has no unit", "had no unit", "have no unit", "had no unit",
	"differ in number", "differed in number", "all tests are made", "all tests were made", "is constant", "was constant", "it cannot adjust", "it could not adjust",
	"what differences between them tell is not", "what differences between them tell was not", "that do not contain it", "that did not contain it")

// citations gathers the keys of the sources that a text cites.
type citations map[string]bool

// cite is a source in parentheses, to stand after what it is cited for; "" where none is
// known.
func (c citations) cite(key string) string {
	if c == nil {
		return "" // the text cites nothing
	}
	for _, s := range sources {
		for _, k := range strings.Fields(s.keys) {
			if strings.ReplaceAll(k, "_", " ") == key {
				if c[s.text] {
					return "" // once is enough
				}
				c[s.text] = true
				return " (" + s.short + ")"
			}
		}
	}
	return ""
}

// ChapterAnalysis is the account of the statistical analysis: responses that were
// analysed alike are told together, and what deviates is named. planned wants the analyses
// that were in the plan sealed before the data (all of them where none was), else the
// others.
func ChapterAnalysis(t *trial.Trial, rs *result.Results, planned bool) []Passage {
	s, _ := chapterAnalysis(t, rs, planned)
	return s
}

// ChapterReferences are the sources that ChapterAnalysis cites, in alphabetical order.
func ChapterReferences(t *trial.Trial, rs *result.Results) []string {
	_, cited := chapterAnalysis(t, rs, true)
	_, more := chapterAnalysis(t, rs, false)
	var out []string
	for _, s := range sources {
		if cited[s.text] || more[s.text] {
			out = append(out, s.text)
		}
	}
	slices.Sort(out)
	return out
}

func chapterAnalysis(t *trial.Trial, rs *result.Results, planned bool) ([]Passage, citations) {
	cited := citations{}
	if t.Table == nil {
		if !planned {
			return nil, cited
		}
		return chapterPlan(t, rs), cited
	}
	all := analysedResponses(rs, planned)
	if len(all) == 0 {
		return nil, cited
	}
	var s paragraphOf
	p := t.Plan
	var before group
	for _, g := range groups(all, func(r *result.Response) string { return modelKey(t, r) }) {
		s.add("%s", modelSentence(t, g, before, all, cited))
		before = g
		for _, x := range modelNotes(t, g, all, cited) {
			s.add("%s", x)
		}
	}
	if c := p.Protocol.CarryOver; c != nil {
		s.add("Carry-over from one %s to the next was a term of the model", unitText(t, c.Along))
	}
	satterthwaite, adjusted, mixed := false, false, false
	for _, r := range all {
		for _, m := range r.Means {
			satterthwaite = satterthwaite || fractional(r, m)
		}
		adjusted = adjusted || adjustedMeans(r)
		mixed = mixed || r.Model.Method == "reml"
	}
	if adjusted {
		of := "least squares"
		if mixed {
			of = "these models"
		}
		s.add("Means from %s are adjusted means with equal weights%s", of, cited.cite("adjusted"))
	}
	if satterthwaite {
		s.add("Where a mean draws on the variation of several units, its degrees of freedom were approximated%s", cited.cite("satterthwaite"))
	}
	s = append(s, Passage{})
	s = append(s, contrastSentences(t, all)...)
	s = append(s, comparisonSentences(t, all, cited)...)
	for _, g := range groups(all, func(r *result.Response) string { return levelText(Alpha(p, r)) }) {
		who := ""
		if len(g) < len(all) {
			who = " for " + g.names(all)
		}
		s.add("The level of significance%s was %s; limits are those of %s confidence intervals", who, levelText(Alpha(p, g[0])), confidence(Alpha(p, g[0])))
	}
	if x := t.Protocol.Analysis.Tendency; x > 0 {
		s.add("P up to %s was called a tendency, as stated beforehand", num.Fixed(x, 2))
	}
	s = append(s, Passage{})
	s = append(s, checkSentences(t, all, cited)...)
	if planned || len(analysedResponses(rs, true)) == 0 {
		s.add("All computations were made with %s %s", upperFirst(rs.Program.Name), rs.Program.Version)
	}
	return s, cited
}

// modelKey is the same for responses that were analysed alike.
func modelKey(t *trial.Trial, r *result.Response) string {
	var fixed []string
	for _, f := range r.Model.Fixed {
		if !isCovariate(r, f) {
			fixed = append(fixed, f)
		}
	}
	var covariates []string
	for _, c := range r.Covariates {
		covariates = append(covariates, c.Name)
	}
	chosen := r.Model.DFMethod
	if r.Correlation != nil {
		chosen += r.Correlation.Kind + fmt.Sprint(len(r.Correlation.Candidates))
	}
	return strings.Join([]string{r.Model.Method, chosen, strings.Join(r.Model.Random, "+"), r.Model.Hypothesis, strings.Join(fixed, "+"), strings.Join(covariates, "+"), overText(t, r, false), r.Transform, r.Kind}, "|")
}

// overText lists terms by what they were tested over, with its degrees of freedom.
func overText(t *trial.Trial, r *result.Response, df bool) string {
	type row struct {
		over  string
		terms []string
		df    string
	}
	var rows []row
	for _, l := range r.Anova {
		if !l.F.Known() || isCovariate(r, l.Source) {
			continue
		}
		st := ""
		if l.Stratum != nil {
			st = *l.Stratum
		}
		over := ErrorRow(t.Plan, r, st)
		k := slices.IndexFunc(rows, func(x row) bool { return x.over == over })
		if k < 0 {
			x := row{over: over}
			if l.ErrorDF != nil {
				x.df = num.DF(float64(*l.ErrorDF))
			}
			rows = append(rows, x)
			k = len(rows) - 1
		}
		if len(rows[k].terms) == 0 || !partOf(t.Plan, l.Source) {
			rows[k].terms = append(rows[k].terms, TermText(t.Plan, l.Source))
		}
	}
	var parts []string
	for k, x := range rows {
		lead := plural(len(x.terms), "the effect of ", "effects of ")
		part := lead + And(x.terms) + plural(len(x.terms), " was", " were") + " tested over " + x.over
		if k > 0 {
			part = plural(len(x.terms), "that of ", "those of ") + And(x.terms) + " over " + x.over
		}
		if df && x.df != "" {
			part += " (" + x.df + " df)"
		}
		parts = append(parts, part)
	}
	if n := len(parts); n > 1 {
		return strings.Join(parts[:n-1], ", ") + ", and " + parts[n-1]
	}
	return strings.Join(parts, "")
}

// partOf tells whether a source is a part of a listed treatment and not a term.
func partOf(p *layout.Plan, source string) bool {
	for _, f := range strings.Split(source, ":") {
		if p.Protocol.RepeatedNamed(f) != nil {
			return false
		}
	}
	for _, x := range p.Terms {
		if x.Name == source {
			return false
		}
	}
	return true
}

// modelSentence says by which model a group was analysed; before is the group told before
// it, nil for the first.
func modelSentence(t *trial.Trial, g, before, all group, cited citations) string {
	r := g[0]
	over := overText(t, r, true)
	for _, x := range g[1:] {
		if overText(t, x, true) != over {
			over = overText(t, r, false)
			break
		}
	}
	what := "; " + over
	if over == "" {
		what = "; no test was possible"
	}
	lead := fmt.Sprintf("%s %s analysed by ", g.names(all), g.be())
	if r.Model.Method == "reml" {
		return lead + mixedWords(t, r, cited)
	}
	if r.Model.Method == "strata" {
		return lead + "analysis of variance" + cited.cite("strata") + what
	}
	lost, of := false, ""
	for _, x := range g {
		for _, n := range x.Notes {
			lost = lost || n.Code == "units-lost"
		}
	}
	if lost && len(g) == 1 {
		of = fmt.Sprintf(", of which %s of %s values were available,", num.Count(r.N), num.Count(r.N+r.Missing+r.Excluded))
		lead = fmt.Sprintf("%s%s %s analysed by ", g.names(all), of, g.be())
	}
	var units, terms, covariates []string
	for _, f := range r.Model.Fixed {
		switch {
		case isCovariate(r, f):
			covariates = append(covariates, TermText(t.Plan, f))
		case isUnit(t, f):
			units = append(units, Plural(TermText(t.Plan, f)))
		case t.Protocol.TimeTrend != nil && f == t.Protocol.TimeTrend.On+":"+t.Protocol.TimeTrend.Along:
			x := t.Protocol.TimeTrend
			units = append(units, fmt.Sprintf("a %s over the %s for each %s", polynomial(x.Order), Plural(unitText(t, x.Along)), unitText(t, x.On)))
		default:
			terms = append(terms, TermText(t.Plan, f))
		}
	}
	with := ""
	if len(covariates) > 0 {
		with = fmt.Sprintf(", with %s as %s (one slope for all treatments, the equality of slopes being tested)", And(covariates), plural(len(covariates), "a covariate", "covariates"))
	}
	if before != nil && before[0].Model.Method == r.Model.Method && withoutCovariates(before[0]) == withoutCovariates(r) {
		return lead + "least squares likewise" + with + what
	}
	why := ""
	if lost {
		why = ", since the layout was no longer balanced"
	}
	return lead + "least squares" + cited.cite("least squares") + why + ", with " + And(append(units, terms...)) + " in the model" + strings.Replace(with, ", with", " and", 1) + what
}

// withoutCovariates is the model of a response but for its covariates.
func withoutCovariates(r *result.Response) string {
	var out []string
	for _, f := range r.Model.Fixed {
		if !isCovariate(r, f) {
			out = append(out, f)
		}
	}
	return strings.Join(out, "+")
}

// modelNotes are the sentences on what is particular to the analysis of a group.
func modelNotes(t *trial.Trial, g, all group, cited citations) []string {
	var out []string
	// A note that all of the group have is told once, others with the response's name.
	for _, r := range g {
		for _, n := range r.Notes {
			var text string
			switch n.Code {
			case "units-lost":
				if len(g) == 1 {
					continue // the sentence of the model says it
				}
				text = fmt.Sprintf("Of %s %s of %s values %s available.", responseName(r), num.Count(r.N), num.Count(r.N+r.Missing+r.Excluded), plural(r.N, "was", "were"))
			case "averaged", "not-balanced", "intra-block", "empty-cells", "covariate-aliased", "term-lost", "within-variance", "components-bounded", "no-sphericity", "structures-left-out", "several-maxima", "components-hardly-told":
				text = past.Replace(n.Text)
			default:
				continue
			}
			if !slices.Contains(out, text) {
				out = append(out, text)
			}
		}
	}
	if g[0].Model.Method == "reml" {
		out = append(out, denominator(g[0], cited))
	}
	if x := correlationChosen(t.Plan, g[0], cited); x != "" {
		out = append(out, x)
	}
	if x := correctedWords(g, cited); x != "" {
		out = append(out, x)
	}
	switch g[0].Model.Hypothesis {
	case "marginal":
		out = append(out, "Each term was adjusted for all terms that do not contain it")
	case "sequential":
		out = append(out, "Terms were adjusted in the order in which they are written")
	}
	return out
}

// contrastSentences name the trends and contrasts that were planned.
func contrastSentences(t *trial.Trial, all group) []Passage {
	var s paragraphOf
	for _, g := range groups(all, func(r *result.Response) string {
		var names []string
		for _, c := range foremost(r) {
			names = append(names, c.Name)
		}
		return strings.Join(names, "|")
	}) {
		var factors, orders, contrasts []string
		interactions, lack := false, false
		for _, c := range foremost(g[0]) {
			factor, trend, isTrend := strings.Cut(c.Name, ": ")
			switch {
			case !isTrend:
				contrasts = append(contrasts, "“"+TermText(t.Plan, c.Name)+"”")
			case strings.Contains(factor, ":"):
				interactions = true
			case trend == "lack of fit":
				lack = true
			default:
				if f := TermText(t.Plan, factor); !slices.Contains(factors, f) {
					factors = append(factors, f)
				}
				if !slices.Contains(orders, trend) {
					orders = append(orders, trend)
				}
			}
		}
		of := ""
		if len(g) < len(all) {
			of = " of " + g.names(all)
		}
		if len(factors) > 0 {
			line := fmt.Sprintf("The response%s to %s was described by %s %s on the actual levels", of, And(factors), And(orders), plural(len(orders), "trend", "trends"))
			if lack {
				line += ", with a test of lack of fit"
			}
			if interactions {
				line += "; the interaction was divided accordingly"
			}
			s.add("%s", line)
		}
		switch {
		case len(contrasts) == 1:
			s.add("The contrast %s%s was tested on the means", contrasts[0], of)
		case len(contrasts) > 1:
			s.add("The contrasts %s%s were tested on the means", And(contrasts), of)
		}
	}
	return s
}

// comparisonSentences say by which method means were compared.
func comparisonSentences(t *trial.Trial, all group, cited citations) []Passage {
	var s paragraphOf
	slices_, letters := false, false
	for _, r := range all {
		for _, c := range r.Comparisons {
			slices_ = slices_ || len(c.At) > 0
		}
		for _, m := range r.Means {
			letters = letters || m.Letters != nil && Lettered(r, m.Term)
		}
	}
	gs := groups(all, comparisonMethod)
	for _, g := range gs {
		of := "Means"
		if len(gs) > 1 {
			of = "Means of " + g.names(all)
		}
		switch m := comparisonMethod(g[0]); m {
		case "":
			if len(gs) > 1 {
				s.add("Pairs of means of %s were not compared", g.names(all))
			}
		case "dunnett":
			s.add("%s were compared with the control by %s%s", of, Method(m), cited.cite(m))
		default:
			s.add("Pairs of %s were compared by %s%s", lowerFirst(of), Method(m), cited.cite(m))
		}
	}
	if slices_ {
		s.add("Means of combinations were compared within each level of the other factors")
	}
	if letters {
		s.add("Letters were assigned to means by an algorithm%s", cited.cite("letters"))
	}
	return s
}

// checkSentences say how assumptions were looked at.
func checkSentences(t *trial.Trial, all group, cited citations) []Passage {
	var s paragraphOf
	seen := map[string]bool{}
	for _, r := range all {
		for _, d := range r.Diagnostics {
			seen[d.Name] = true
		}
	}
	var checks []string
	for _, x := range []struct{ name, text string }{
		{name: "shapiro-wilk", text: "normality"}, {name: "brown-forsythe", text: "equal spread of treatments"}, {name: "bartlett", text: "equal variance of treatments"},
		{name: "non-additivity", text: "additivity of blocks and treatments"}, {name: "spread on mean", text: "a change of spread with the mean"}, {name: "outlier", text: "single outlying units"},
	} {
		if seen[x.name] {
			checks = append(checks, x.text+cited.cite(x.name))
		}
	}
	if len(checks) > 0 {
		s.add("Residuals were looked at in pictures and tested for %s", And(checks))
	}
	if a := t.Protocol.Analysis.Assumptions; said(a) {
		s.add("What to do if assumptions fail was laid down beforehand: %s", inner(a))
	}
	return s
}

// chapterPlan tells how the responses are going to be analysed.
func chapterPlan(t *trial.Trial, rs *result.Results) []Passage {
	var s paragraphOf
	p, a := t.Plan, t.Protocol.Analysis
	var all group
	for i := range t.Protocol.Responses {
		r := &t.Protocol.Responses[i]
		all = append(all, &result.Response{Name: r.Name, Label: r.Label, Unit: r.Unit, Kind: r.Kind, Transform: r.Transform})
	}
	if len(all) == 0 {
		return nil
	}
	var over, terms []string // what terms are tested over, and those
	for i := range p.Terms {
		x := &p.Terms[i]
		if x.Stratum < 0 || x.Inexact {
			continue
		}
		by := ErrorName(p, p.Strata[x.Stratum].Unit)
		if x.Over >= 0 {
			by = TermText(p, p.Crossed[x.Over].Name)
		}
		by = fmt.Sprintf("%s (%s df)", by, num.DF(float64(x.ErrorDF)))
		k := slices.Index(over, by)
		if k < 0 {
			over, terms = append(over, by), append(terms, TermText(p, x.Name))
			continue
		}
		terms[k] += "\x00" + TermText(p, x.Name)
	}
	for _, g := range groups(all, func(r *result.Response) string {
		x := t.Protocol.Response(r.Name)
		return strings.Join([]string{r.Kind, r.Transform, strings.Join(x.Covariates, "+"), x.Repeated}, "|")
	}) {
		x := t.Protocol.Response(g[0].Name)
		line := g.names(all)
		if g[0].Kind != "continuous" && g[0].Kind != "" {
			line += " (" + g[0].Kind + ")"
		}
		line += " will be analysed as the layout dictates"
		if tr := g[0].Transform; tr != "" && tr != "none" {
			line += ", after the transformation " + tr
		}
		var names []string
		for _, c := range x.Covariates {
			if c := t.Protocol.Covariate(c); c != nil {
				names = append(names, lowerFirst(CovariateLabel(c)))
			}
		}
		if len(names) > 0 {
			line += ", adjusted for " + And(names)
		}
		if x.Repeated != "" {
			line += ", with a model of the correlation between the times of a unit"
		}
		s.add("%s", line)
	}
	for k := range over {
		over[k] = And(strings.Split(terms[k], "\x00")) + " over " + over[k]
	}
	if len(over) > 0 {
		over[0] = strings.Replace(over[0], " over ", " will be tested over ", 1)
		list := over[0]
		if n := len(over); n > 1 {
			list = strings.Join(over[:n-1], ", ") + ", and " + over[n-1]
		}
		s.add("%s", list)
	}
	if c := t.Protocol.CarryOver; c != nil {
		s.add("Carry-over from one %s to the next will be a term of the model", unitText(t, c.Along))
	}
	if x := t.Protocol.TimeTrend; x != nil {
		s.add("Each %s will have a %s of its own over the %s", unitText(t, x.On), polynomial(x.Order), Plural(unitText(t, x.Along)))
	}
	var graded []string
	for f := range p.Factors {
		if p.Factors[f].Values != nil && len(p.Factors[f].Levels) > 2 {
			graded = append(graded, lowerFirst(FactorLabel(&p.Factors[f])))
		}
	}
	if n := min(a.Trend, 3); n > 0 && len(graded) > 0 {
		s.add("The response to %s will be described by %s on the actual levels", And(graded), []string{"a linear trend", "linear and quadratic trends", "linear, quadratic and cubic trends"}[n-1])
	}
	var contrasts []string
	for _, c := range a.Contrasts {
		contrasts = append(contrasts, "“"+phrase(c.Name)+"”")
	}
	if len(contrasts) > 0 {
		s.add("%s %s will be tested on the means", plural(len(contrasts), "The contrast", "The contrasts"), And(contrasts))
	}
	gs := groups(all, func(r *result.Response) string {
		if c := t.Protocol.Response(r.Name).Comparison; c != "" {
			return c
		}
		return a.Comparison
	})
	for _, g := range gs {
		m := t.Protocol.Response(g[0].Name).Comparison
		if m == "" {
			m = a.Comparison
		}
		of := "Means"
		if len(gs) > 1 {
			of = "Means of " + g.names(all)
		}
		switch m {
		case "none", "":
			if len(gs) > 1 {
				s.add("Pairs of means of %s will not be compared", g.names(all))
			}
		case "dunnett":
			s.add("%s will be compared with the control by %s", of, Method(m))
		default:
			s.add("Pairs of %s will be compared by %s", lowerFirst(of), Method(m))
		}
	}
	s.add("The level of significance is %s, and intervals will be %s confidence limits", levelText(a.Alpha), confidence(a.Alpha))
	if a.Tendency > 0 {
		s.add("P up to %s will be called a tendency", num.Fixed(a.Tendency, 2))
	}
	if said(a.Assumptions) {
		s.add("If assumptions fail: %s", inner(a.Assumptions))
	}
	return s
}
