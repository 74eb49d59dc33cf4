package prose

import (
	"fmt"
	"sort"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
)

// Methods is the paragraph of statistical methods of one response, written from what
// was done, fit to be pasted in a paper.
func Methods(t *trial.Trial, r *result.Response) string {
	p := t.Plan
	var s []string
	name := strings.SplitN(ResponseText(r), " (", 2)[0]
	pr := t.Protocol.Response(r.Name)
	if pr != nil && pr.Compute != "" {
		s = append(s, fmt.Sprintf("%s was computed as %s.", upperFirst(name), pr.Compute))
	}
	if pr != nil && pr.Aggregate != "" && pr.RecordedOn != "" {
		s = append(s, fmt.Sprintf("Values were brought to the %s by their %s.", unitText(t, pr.RecordedOn), pr.Aggregate))
	}
	if r.Model == nil {
		for _, n := range r.Notes {
			s = append(s, n.Text)
		}
		return strings.Join(s, " ")
	}
	switch r.Model.Method {
	case "strata":
		s = append(s, fmt.Sprintf("%s was analysed by analysis of variance in the strata of the layout (%s), each effect tested over the variation of the units that received it: %s.",
			upperFirst(name), DesignName(p), testedOver(t, r)))
	case "least squares":
		s = append(s, fmt.Sprintf("%s was analysed by least squares (%s) with %s; effects were tested over %s with %s degrees of freedom.",
			upperFirst(name), DesignName(p), modelWords(t, r), ErrorRow(p, r, ""), num.DF(errorDF(r))))
		switch r.Model.Hypothesis {
		case "partial":
			s = append(s, "Each hypothesis is the equality of adjusted means with equal weights.")
		case "marginal":
			s = append(s, "Each term was adjusted for all terms that do not contain it.")
		case "sequential":
			s = append(s, "Terms were adjusted in the order in which they are written.")
		}
	case "reml":
		s = append(s, fmt.Sprintf("%s was analysed by %s.", upperFirst(name), mixedWords(t, r, nil)), DenominatorText(r))
		if r.Model.Hypothesis == "marginal" {
			s = append(s, "Each term was adjusted for all terms that do not contain it.")
		}
	}
	if x := correlationChosen(t.Plan, r, nil); x != "" {
		s = append(s, x+".")
	}
	for _, n := range r.Notes {
		switch n.Code {
		case "averaged", "units-lost", "not-balanced", "intra-block", "empty-cells", "covariate-aliased", "components-bounded":
			s = append(s, n.Text)
		}
	}
	if len(r.Covariates) > 0 {
		var names []string
		for _, c := range r.Covariates {
			names = append(names, TermText(p, c.Name))
		}
		s = append(s, fmt.Sprintf("Means were adjusted by covariance to the mean of %s, with one slope for all treatments; equality of slopes was tested.", And(names)))
	}
	trend, planned := false, false
	for _, c := range foremost(r) {
		if strings.Contains(c.Name, ": linear") {
			trend = true
		} else if !strings.Contains(c.Name, ": ") {
			planned = true
		}
	}
	if trend {
		s = append(s, "Graded levels were described by polynomial trends on the actual levels, fitted in order, with what they leave over as lack of fit.")
	}
	if planned {
		s = append(s, "Contrasts named in the protocol were tested on adjusted means.")
	}
	if m := comparisonMethod(r); m != "" {
		s = append(s, fmt.Sprintf("Differences between means were judged by %s.", Method(m)))
	}
	a := levelText(Alpha(p, r))
	s = append(s, fmt.Sprintf("The level of significance was %s%s; intervals are %s confidence limits.", a, tendency(t.Protocol), confidence(Alpha(p, r))))
	var checks []string
	for _, d := range r.Diagnostics {
		switch d.Name {
		case "shapiro-wilk":
			checks = append(checks, "normality of residuals (Shapiro-Wilk)")
		case "brown-forsythe":
			checks = append(checks, "equal spread (Brown-Forsythe)")
		case "bartlett":
			checks = append(checks, "equal variance (Bartlett)")
		case "non-additivity":
			checks = append(checks, "additivity of blocks and treatments")
		case "outlier":
			checks = append(checks, "single outlying units (deleted residuals, Bonferroni)")
		}
	}
	if len(checks) > 0 {
		s = append(s, "Assumptions were looked at in residual pictures and by tests of "+And(checks)+".")
	}
	return strings.Join(s, " ")
}

// AddedContrasts names the contrasts of planned responses that were not in the sealed plan.
func AddedContrasts(t *trial.Trial, rs *result.Results) []string {
	var out []string
	for i := range rs.Responses {
		r := &rs.Responses[i]
		if !Planned(r) {
			continue
		}
		var names []string
		for _, c := range r.Contrasts {
			if !c.Planned {
				names = append(names, "“"+TermText(t.Plan, c.Name)+"”")
			}
		}
		if len(names) > 0 {
			out = append(out, fmt.Sprintf("For %s, %s %s tested on the means, though not in the sealed plan.", responseName(r), And(names), plural(len(names), "was", "were")))
		}
	}
	return out
}

func tendency(p *protocol.Protocol) string {
	if p.Analysis.Tendency > 0 {
		return ", and P up to " + num.Fixed(p.Analysis.Tendency, 2) + " was called a tendency, as stated beforehand"
	}
	return ""
}

func unitText(t *trial.Trial, name string) string {
	for i := range t.Plan.Units {
		if t.Plan.Units[i].Name == name {
			return UnitName(&t.Plan.Units[i])
		}
	}
	return name
}

func errorDF(r *result.Response) float64 {
	for _, x := range r.Tests {
		return float64(x.ErrorDF)
	}
	return 0
}

func comparisonMethod(r *result.Response) string {
	for _, c := range r.Comparisons {
		return c.Method
	}
	return ""
}

// testedOver lists terms by what they are tested over.
func testedOver(t *trial.Trial, r *result.Response) string {
	var order []string
	terms := map[string][]string{}
	df := map[string]float64{}
	for _, l := range r.Anova {
		if !l.F.Known() || l.Stratum == nil {
			continue
		}
		over := ErrorRow(t.Plan, r, *l.Stratum)
		if terms[over] == nil {
			order = append(order, over)
		}
		terms[over] = append(terms[over], TermText(t.Plan, l.Source))
		if l.ErrorDF != nil {
			df[over] = float64(*l.ErrorDF)
		}
	}
	var parts []string
	for _, over := range order {
		parts = append(parts, fmt.Sprintf("%s over %s (%s df)", And(terms[over]), over, num.DF(df[over])))
	}
	if len(parts) == 0 {
		return "no test was possible"
	}
	return strings.Join(parts, "; ")
}

func modelWords(t *trial.Trial, r *result.Response) string {
	units, covariates, terms := fixedWords(t, r)
	return And(append(append(units, covariates...), terms...)) + " in the model"
}

// fixedWords names the fixed part of a model: larger units and trends over time, covariates,
// and treatment terms.
func fixedWords(t *trial.Trial, r *result.Response) (units, covariates, terms []string) {
	for _, f := range r.Model.Fixed {
		switch {
		case isCovariate(r, f):
			covariates = append(covariates, TermText(t.Plan, f))
		case isUnit(t, f):
			units = append(units, Plural(TermText(t.Plan, f)))
		case t.Protocol.TimeTrend != nil && f == t.Protocol.TimeTrend.On+":"+t.Protocol.TimeTrend.Along:
			units = append(units, fmt.Sprintf("a %s over the %s for each %s", polynomial(t.Protocol.TimeTrend.Order), Plural(unitText(t, t.Protocol.TimeTrend.Along)), unitText(t, t.Protocol.TimeTrend.On)))
		default:
			terms = append(terms, TermText(t.Plan, f))
		}
	}
	return units, covariates, terms
}

func polynomial(order int) string {
	if order == 2 {
		return "parabola"
	}
	if order > 2 {
		return fmt.Sprintf("polynomial of degree %d", order)
	}
	return "straight line"
}

func isUnit(t *trial.Trial, name string) bool {
	for i := range t.Plan.Units {
		if t.Plan.Units[i].Name == name {
			return true
		}
	}
	return false
}

// Results is the paragraph that says what a response showed: tests with F and P, then
// the greatest effect with its interval. It does not interpret beyond the design.
func Results(t *trial.Trial, r *result.Response) string {
	p := t.Plan
	var s []string
	if r.Model == nil {
		for _, n := range r.Notes {
			s = append(s, n.Text)
		}
		return strings.Join(s, " ")
	}
	for _, x := range r.Tests {
		if isCovariate(r, x.Source) || strings.Contains(x.Source, " v. ") {
			continue
		}
		if !x.F.Known() {
			continue
		}
		what := TermText(p, x.Source)
		verb := "Effect of " + what
		if strings.Contains(x.Source, ":") {
			verb = "Interaction of " + strings.ReplaceAll(what, " × ", " with ")
		}
		s = append(s, fmt.Sprintf("%s: F(%s, %s) = %s, P %s.", verb, num.DF(float64(x.DF)), num.DF(float64(x.ErrorDF)), num.Statistic(float64(x.F)), num.PStatement(float64(x.P))))
	}
	for _, c := range foremost(r) {
		if !c.Estimate.Known() || !c.Lower.Known() {
			continue
		}
		d := num.SEDecimals(float64(c.SE))
		what, estimate := TermLabel(p, c.Name), num.Unit(num.Fixed(float64(c.Estimate), d), r.Unit)
		switch factor, trend, _ := strings.Cut(c.Name, ": "); trend {
		case "linear":
			what = "Linear trend in " + TermText(p, factor)
			estimate += " for each " + eachUnit(p, factor)
		case "quadratic", "cubic", "quartic", "quintic":
			what = upperFirst(trend) + " coefficient of " + TermText(p, factor)
			estimate = num.Fixed(float64(c.Estimate), d)
		}
		s = append(s, fmt.Sprintf("%s: %s (%s limits %s to %s; P %s).", what, estimate, confidence(Alpha(p, r)),
			num.Fixed(float64(c.Lower), d), num.Fixed(float64(c.Upper), d), num.PStatement(float64(c.P))))
	}
	return strings.Join(append(s, Advice(t, r)...), " ")
}

// Advice says what to read first, as the trade does: trends for graded factors, simple
// effects where an interaction stands.
func Advice(t *trial.Trial, r *result.Response) []string {
	var out []string
	alpha := Alpha(t.Plan, r)
	for _, x := range r.Tests {
		if strings.Contains(x.Source, ":") && x.P.Known() && float64(x.P) < alpha {
			parts := strings.Split(x.Source, ":")
			for i := range parts {
				parts[i] = TermText(t.Plan, parts[i])
			}
			out = append(out, fmt.Sprintf("Since effects of %s depend on each other, read the means of their combinations before the means of each.", And(parts)))
			break
		}
	}
	for _, c := range r.Contrasts {
		if strings.HasSuffix(c.Name, ": linear") && comparisonMethod(r) != "" {
			out = append(out, fmt.Sprintf("%s is graded: its trends say more than differences of single levels.", upperFirst(TermText(t.Plan, c.Term))))
			break
		}
	}
	return out
}

// Efficiency words a relative efficiency of the layout.
func Efficiency(value float64, of, against, unit string) string {
	switch {
	case value >= 1.005:
		return fmt.Sprintf("Without %s about %s times as many %s would have been needed for the same precision.", of, num.Fixed(value, 2), unit)
	case value > 0.995:
		return fmt.Sprintf("%s neither gained nor cost precision.", upperFirst(of))
	}
	return fmt.Sprintf("%s cost precision here: as many %s without them would have been a little more precise.", upperFirst(of), unit)
}

// EfficiencyName names the comparison of layouts.
func EfficiencyName(of, against string) string { return of + " v. " + against }

// References lists, once each and in alphabetical order, the sources of the methods
// used in the results.
func References(rs *result.Results) []string {
	used := map[string]bool{}
	for i := range rs.Responses {
		r := &rs.Responses[i]
		if r.Model == nil {
			continue
		}
		used[r.Model.Method] = true
		if m := comparisonMethod(r); m != "" {
			used[m] = true
		}
		for _, d := range r.Diagnostics {
			used[d.Name] = true
		}
		if r.Model.Method == "reml" {
			used[r.Model.DFMethod] = true
		}
		if r.Sphericity != nil {
			used["sphericity"] = true
		}
		if r.Correlation != nil && len(r.Correlation.Candidates) > 0 {
			used["aicc"] = true
		}
		for _, m := range r.Means {
			if fractional(r, m) {
				used["satterthwaite"] = true
			}
			if m.Letters != nil {
				used["letters"] = true
			}
		}
		if adjustedMeans(r) {
			used["adjusted"] = true
		}
		if len(r.Efficiency) > 0 {
			used["efficiency"] = true
		}
	}
	var out []string
	for _, s := range sources {
		for _, k := range strings.Fields(s.keys) {
			if used[strings.ReplaceAll(k, "_", " ")] {
				out = append(out, s.text)
				break
			}
		}
	}
	sort.Strings(out)
	return out
}

// sources of the methods; citations from memory.
var sources = []struct{ keys, short, text string }{
	{keys: "bartlett", short: "Bartlett, 1937", text: "Bartlett, M. S. (1937). Properties of sufficiency and statistical tests. Proceedings of the Royal Society A 160, 268–282."},
	{keys: "bonferroni", short: "Dunn, 1961", text: "Dunn, O. J. (1961). Multiple comparisons among means. Journal of the American Statistical Association 56, 52–64."},
	{keys: "brown-forsythe", short: "Brown and Forsythe, 1974", text: "Brown, M. B. and Forsythe, A. B. (1974). Robust tests for the equality of variances. Journal of the American Statistical Association 69, 364–367."},
	{keys: "dunnett", short: "Dunnett, 1955", text: "Dunnett, C. W. (1955). A multiple comparison procedure for comparing several treatments with a control. Journal of the American Statistical Association 50, 1096–1121."},
	{keys: "efficiency lsd protected_lsd", short: "Fisher, 1935", text: "Fisher, R. A. (1935). The Design of Experiments. Oliver and Boyd, Edinburgh."},
	{keys: "sphericity", short: "Greenhouse and Geisser, 1959", text: "Greenhouse, S. W. and Geisser, S. (1959). On methods in the analysis of profile data. Psychometrika 24, 95–112."},
	{keys: "aicc", short: "Hurvich and Tsai, 1989", text: "Hurvich, C. M. and Tsai, C.-L. (1989). Regression and time series model selection in small samples. Biometrika 76, 297–307."},
	{keys: "sphericity huynh-feldt", short: "Huynh and Feldt, 1976", text: "Huynh, H. and Feldt, L. S. (1976). Estimation of the Box correction for degrees of freedom from sample data in randomized block and split-plot designs. Journal of Educational Statistics 1, 69–82."},
	{keys: "kenward-roger", short: "Kenward and Roger, 1997", text: "Kenward, M. G. and Roger, J. H. (1997). Small sample inference for fixed effects from restricted maximum likelihood. Biometrics 53, 983–997."},
	{keys: "sphericity mauchly", short: "Mauchly, 1940", text: "Mauchly, J. W. (1940). Significance test for sphericity of a normal n-variate distribution. Annals of Mathematical Statistics 11, 204–209."},
	{keys: "reml", short: "Patterson and Thompson, 1971", text: "Patterson, H. D. and Thompson, R. (1971). Recovery of inter-block information when block sizes are unequal. Biometrika 58, 545–554."},
	{keys: "holm", short: "Holm, 1979", text: "Holm, S. (1979). A simple sequentially rejective multiple test procedure. Scandinavian Journal of Statistics 6, 65–70."},
	{keys: "strata", short: "Nelder, 1965", text: "Nelder, J. A. (1965). The analysis of randomized experiments with orthogonal block structure. Proceedings of the Royal Society A 283, 147–178."},
	{keys: "letters", short: "Piepho, 2004", text: "Piepho, H.-P. (2004). An algorithm for a letter-based representation of all-pairwise comparisons. Journal of Computational and Graphical Statistics 13, 456–466."},
	{keys: "shapiro-wilk", short: "Royston, 1995", text: "Royston, P. (1995). Remark AS R94: a remark on algorithm AS 181, the W-test for normality. Applied Statistics 44, 547–551."},
	{keys: "satterthwaite", short: "Satterthwaite, 1946", text: "Satterthwaite, F. E. (1946). An approximate distribution of estimates of variance components. Biometrics Bulletin 2, 110–114."},
	{keys: "scheffe", short: "Scheffé, 1953", text: "Scheffé, H. (1953). A method for judging all contrasts in the analysis of variance. Biometrika 40, 87–104."},
	{keys: "adjusted", short: "Searle and others, 1980", text: "Searle, S. R., Speed, F. M. and Milliken, G. A. (1980). Population marginal means in the linear model. The American Statistician 34, 216–221."},
	{keys: "sidak", short: "Šidák, 1967", text: "Šidák, Z. (1967). Rectangular confidence regions for the means of multivariate normal distributions. Journal of the American Statistical Association 62, 626–633."},
	{keys: "tukey", short: "Kramer, 1956", text: "Kramer, C. Y. (1956). Extension of multiple range tests to group means with unequal numbers of replications. Biometrics 12, 307–310."},
	{keys: "non-additivity", short: "Tukey, 1949", text: "Tukey, J. W. (1949). One degree of freedom for non-additivity. Biometrics 5, 232–242."},
	{keys: "least_squares", short: "Yates, 1934", text: "Yates, F. (1934). The analysis of multiple classifications with unequal numbers in the different classes. Journal of the American Statistical Association 29, 51–66."},
}
