package prose

import (
	"fmt"
	"math"
	"sort"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/protocol/layout"
)

// ResponseText is what a response is called in running text, with its unit.
func ResponseText(r *result.Response) string {
	s := r.Label
	if s == "" {
		s = strings.ReplaceAll(r.Name, "_", " ")
	}
	s = lowerFirst(s)
	if r.Unit != "" && r.Unit != "1" {
		s += " (" + num.UnitText(r.Unit) + ")"
	}
	return s
}

// Alpha is the level at which a response is tested and limits are made.
func Alpha(p *layout.Plan, r *result.Response) float64 {
	if x := p.Protocol.Response(r.Name); x != nil && x.Alpha != nil {
		return *x.Alpha
	}
	return p.Protocol.Analysis.Alpha
}

// Interval heads a column of limits.
func Interval(p *layout.Plan, r *result.Response) string {
	return confidence(Alpha(p, r)) + " limits"
}

func confidence(alpha float64) string {
	c := 100 * (1 - alpha)
	s := strings.TrimRight(strings.TrimRight(fmt.Sprintf("%.2f", c), "0"), ".")
	return s + "\u202f%"
}

// Method names a procedure of comparison in running text.
func Method(method string) string {
	switch method {
	case "lsd":
		return "least significant difference"
	case "protected lsd":
		return "least significant difference after a significant F"
	case "tukey":
		return "Tukey’s procedure"
	case "dunnett":
		return "Dunnett’s procedure"
	case "bonferroni":
		return "Bonferroni’s procedure"
	case "holm":
		return "Holm’s procedure"
	case "sidak":
		return "Šidák’s procedure"
	case "scheffe":
		return "Scheffé’s procedure"
	case "newman-keuls":
		return "the procedure of Newman and Keuls"
	case "duncan":
		return "Duncan’s multiple range procedure"
	}
	return method
}

// SourceRow names a line of an analysis of variance.
func SourceRow(p *layout.Plan, r *result.Response, l result.Line) string {
	if l.Source == "residual" {
		st := ""
		if l.Stratum != nil {
			st = *l.Stratum
		}
		return upperFirst(ErrorRow(p, r, st))
	}
	for i := range p.Units {
		if p.Units[i].Name == l.Source {
			name := upperFirst(Plural(UnitName(&p.Units[i])))
			if w := p.Units[i].Within; w >= 0 && p.Units[w].Within < 0 && p.Units[i].Crosses == nil {
				name += " within " + Plural(UnitName(&p.Units[w]))
			}
			return name
		}
	}
	if s := records(p, l.Source); s != "" {
		return upperFirst(s)
	}
	for _, f := range p.Factors {
		if f.Name == l.Source && f.Carried {
			return FactorLabel(&f) + " (not randomized)"
		}
	}
	return TermLabel(p, l.Source)
}

// ErrorRow names the error of a stratum by what varies; an empty stratum is that of the
// single table of least squares.
func ErrorRow(p *layout.Plan, r *result.Response, stratum string) string {
	for i := range p.Units {
		if p.Units[i].Name == stratum {
			return ErrorName(p, i)
		}
	}
	if s := records(p, stratum); s != "" {
		return s
	}
	if u := ErrorUnit(p, r); u >= 0 {
		return ErrorName(p, u)
	}
	return "units treated alike"
}

// ErrorUnit is the unit whose variation is the error of a single table: the last unit
// that received a treatment and that the response knows; -1 when there is none.
func ErrorUnit(p *layout.Plan, r *result.Response) int {
	unit := -1
	for _, t := range p.Terms {
		for _, x := range r.Tests {
			if x.Source == t.Name && t.Unit >= 0 && (unit < 0 || p.Coarse(t.Unit, unit) != nil) {
				unit = t.Unit
			}
		}
	}
	return unit
}

// AnovaNotes are the notes of an analysis of variance.
func AnovaNotes(p *layout.Plan, r *result.Response) []string {
	var out []string
	if r.Model != nil && r.Model.Method == "reml" {
		out = append(out, DenominatorText(r))
	}
	if r.Model != nil {
		switch r.Model.Hypothesis {
		case "partial":
			if r.Model.Method == "least squares" {
				out = append(out, "Sums of squares test equality of adjusted means with equal weights (each term adjusted for all others).")
			} else if r.Model.Method == "reml" {
				out = append(out, "Each hypothesis is the equality of adjusted means with equal weights.")
			}
		case "marginal":
			out = append(out, "Each term is adjusted for all terms that do not contain it.")
		case "sequential":
			out = append(out, "Terms are adjusted for those written above them.")
		}
	}
	if r.CVPercent.Known() {
		if u := ErrorUnit(p, r); u >= 0 {
			out = append(out, fmt.Sprintf("Coefficient of variation of %s: %s\u202f%% of the mean, %s.", ErrorName(p, u), num.Percent(float64(r.CVPercent)), meanText(r)))
		}
	} else {
		var parts []string
		for _, s := range r.Strata {
			if s.CVPercent.Known() {
				parts = append(parts, fmt.Sprintf("%s %s\u202f%%", ErrorRow(p, r, s.Name), num.Percent(float64(s.CVPercent))))
			}
		}
		if len(parts) == 1 {
			out = append(out, "Coefficient of variation: "+parts[0]+" of the mean, "+meanText(r)+".")
		} else if len(parts) > 1 {
			out = append(out, "Coefficients of variation: "+And(parts)+" of the mean, "+meanText(r)+".")
		}
	}
	out = append(out, sphericity(p, r)...)
	if s := correlationText(p, r); s != "" {
		out = append(out, s)
	}
	for _, n := range r.Notes {
		if n.Term == "" {
			out = append(out, n.Text)
		}
	}
	return out
}

func meanText(r *result.Response) string {
	d := 0
	for _, m := range r.Means {
		d = max(d, num.SEDecimals(float64(m.SE)))
	}
	return num.Unit(num.Fixed(float64(r.GrandMean), d), r.Unit)
}

// FactorHead heads a column of levels, with the unit of a quantitative factor.
func FactorHead(p *layout.Plan, factor string) string {
	f := FactorNamed(p, factor)
	if f == nil {
		return label(p, factor)
	}
	s := FactorLabel(f)
	if f.Protocol != nil && f.Protocol.Unit != "" {
		s += " (" + num.UnitText(f.Protocol.Unit) + ")"
	}
	return s
}

// MeansCaption heads a table of means.
func MeansCaption(p *layout.Plan, r *result.Response, term string) string {
	kind := "Means"
	if adjustedMeans(r) {
		kind = "Adjusted means"
	}
	return kind + " of " + ResponseText(r) + " by " + strings.ReplaceAll(TermText(p, term), " × ", " and ")
}

// Letters says what the letters beside the means of a term tell; empty where there are
// none.
func Letters(p *layout.Plan, r *result.Response, term string) string {
	letters, method := false, ""
	for _, m := range r.Means {
		letters = letters || m.Term == term && m.Letters != nil
	}
	for _, c := range r.Comparisons {
		if c.Term == term {
			method = c.Method
		}
	}
	if !letters {
		return ""
	}
	return fmt.Sprintf("Means that share a letter were not found different at the %s level by %s.", levelText(Alpha(p, r)), Method(method))
}

// DifferenceLimits says what the limits of the differences of a term are; empty where
// there are none.
func DifferenceLimits(p *layout.Plan, r *result.Response, term string) string {
	for _, c := range r.Comparisons {
		if c.Term != term || !c.Lower.Known() || !c.Upper.Known() {
			continue
		}
		switch c.Method {
		case "none", "lsd", "protected lsd":
			return Interval(p, r) + " of each difference by itself"
		}
		return "simultaneous " + Interval(p, r) + " by " + Method(c.Method)
	}
	return ""
}

// MeansNotes are the notes of a table of means: SED by kind, least significant
// difference, what the letters say, and what qualifies the term.
func MeansNotes(p *layout.Plan, r *result.Response, term string) []string {
	var out []string
	kinds := false
	for _, n := range r.Notes {
		kinds = kinds || n.Term == term && n.Code == "sed-kinds"
	}
	if !kinds {
		out = append(out, sedRange(r, term)...)
	}
	for _, s := range r.SED {
		if s.Term == term && s.LSD.Known() {
			out = append(out, fmt.Sprintf("Least significant difference (%s): %s.", levelText(Alpha(p, r)), num.Fixed(float64(s.LSD), num.SEDecimals(float64(s.Max)))))
		}
	}
	if text := Letters(p, r, term); text != "" {
		out = append(out, text)
	}
	if len(r.Covariates) > 0 {
		var names []string
		for _, c := range r.Covariates {
			names = append(names, TermText(p, c.Name))
		}
		out = append(out, "Adjusted to the mean of "+And(names)+" over the analysed rows.")
	}
	for _, n := range r.Notes {
		if n.Term == term {
			out = append(out, n.Text)
		}
	}
	return out
}

func levelText(alpha float64) string {
	return strings.TrimRight(strings.TrimRight(fmt.Sprintf("%.3f", 100*alpha), "0"), ".") + "\u202f%"
}

// sedRange words the standard errors of differences of a term: one figure, or the range.
func sedRange(r *result.Response, term string) []string {
	for _, s := range r.SED {
		if s.Term != term || !s.Mean.Known() {
			continue
		}
		lo, hi := float64(s.Min), float64(s.Max)
		d := num.SEDecimals(lo)
		if num.Fixed(lo, d) == num.Fixed(hi, d) {
			return []string{"SED " + num.Fixed(hi, d) + "."}
		}
		return []string{fmt.Sprintf("SED from %s to %s, %s in the mean of all pairs.", num.Fixed(lo, d), num.Fixed(hi, d), num.Fixed(float64(s.Mean), d))}
	}
	return nil
}

// ComparisonsCaption heads a table of differences.
func ComparisonsCaption(p *layout.Plan, r *result.Response, term string) string {
	return "Differences between means of " + ResponseText(r) + " by " + strings.ReplaceAll(TermText(p, term), " × ", " and ")
}

// ComparisonsNotes say by which method the differences were judged.
func ComparisonsNotes(p *layout.Plan, r *result.Response, term string) []string {
	for _, c := range r.Comparisons {
		if c.Term != term {
			continue
		}
		a := levelText(Alpha(p, r))
		switch c.Method {
		case "lsd":
			return []string{"Each difference is judged by itself (least significant difference); P and limits hold for one difference at a time, not for all of them together."}
		case "protected lsd":
			return []string{"Each difference is judged by itself once F has passed the " + a + " level; adjusted P is the larger of the two. Limits hold for one difference at a time."}
		case "dunnett":
			return []string{"Differences from the control; adjusted P and simultaneous limits by Dunnett’s procedure, " + within(c) + "."}
		case "holm":
			return []string{"P adjusted by Holm’s procedure, " + within(c) + "; it gives no simultaneous limits."}
		}
		return []string{"Adjusted P and simultaneous limits by " + Method(c.Method) + ", " + within(c) + "."}
	}
	return nil
}

func within(c result.Comparison) string {
	if len(c.At) > 0 {
		return "one family for each level of the other factors"
	}
	return "one family for the term"
}

// LevelsText names the levels at which a slice is taken.
func LevelsText(p *layout.Plan, l result.Levels) string {
	var parts []string
	for _, x := range l {
		parts = append(parts, LevelText(p, x.Factor, x.Level))
	}
	return strings.Join(parts, ", ")
}

// LevelText names a level in words: with its unit where the factor has one, else with
// the factor's name where the level alone would not speak for itself.
func LevelText(p *layout.Plan, factor, level string) string {
	f := FactorNamed(p, factor)
	if f == nil || f.Values == nil {
		return level
	}
	u := ""
	if f.Protocol != nil {
		u = f.Protocol.Unit
	}
	level = strings.ReplaceAll(level, "-", "−")
	if u == "" {
		return lowerFirst(FactorLabel(f)) + " " + level
	}
	return num.Unit(level, u)
}

// PairText names a difference.
func PairText(a, b string) string {
	return strings.ReplaceAll(a, ":", ", ") + " − " + strings.ReplaceAll(b, ":", ", ")
}

// ContrastNotes are the notes of a table of contrasts.
func ContrastNotes(contrasts []result.Contrast) []string {
	trend, weights := false, false
	for _, c := range contrasts {
		if strings.Contains(c.Name, ": linear") {
			trend = true
		} else if !strings.Contains(c.Name, ": ") {
			weights = true
		}
	}
	var out []string
	if trend {
		out = append(out, "Trends are polynomials on the actual levels, fitted in order; the estimate is the coefficient of the highest power, in units of the response per unit of the factor to that power. Lack of fit is what they leave of the term.")
	}
	if weights {
		out = append(out, "Contrasts are weighted sums of adjusted means.")
	}
	return out
}

// DiagnosticLabel names a check of the model.
func DiagnosticLabel(name string) string {
	switch name {
	case "shapiro-wilk":
		return "Normality (Shapiro-Wilk)"
	case "brown-forsythe":
		return "Equal spread (Brown-Forsythe)"
	case "bartlett":
		return "Equal variance (Bartlett)"
	case "non-additivity":
		return "Non-additivity (one degree of freedom)"
	case "outlier":
		return "Largest deleted residual (Bonferroni)"
	case "spread on mean":
		return "Slope of log spread on log mean"
	}
	return upperFirst(name)
}

// Answer is the one sentence that says what a primary response showed: the effect with
// the greatest planned weight, its limits and P. It does not interpret beyond the
// design.
func Answer(p *layout.Plan, r *result.Response) string {
	alpha := Alpha(p, r)
	name := upperFirst(strings.SplitN(ResponseText(r), " (", 2)[0])
	if len(r.Tests) == 0 {
		return name + ": not analysed; see the notes."
	}
	// A planned trend of the first order says most of a graded factor.
	for _, c := range foremost(r) {
		if strings.HasSuffix(c.Name, ": linear") && c.Estimate.Known() {
			d := num.SEDecimals(float64(c.SE))
			f := strings.TrimSuffix(c.Name, ": linear")
			lo, hi := float64(c.Lower), float64(c.Upper)
			return fmt.Sprintf("%s changed by %s for each %s (linear trend; %s limits %s to %s; P %s).%s",
				name, num.Unit(num.Signed(float64(c.Estimate), d), r.Unit), eachUnit(p, f), confidence(alpha),
				num.Fixed(lo, d), num.Fixed(hi, d), num.PStatement(float64(c.P)), depends(p, r, f))
		}
	}
	t := r.Tests[0]
	for _, x := range r.Tests {
		if !isCovariate(r, x.Source) {
			t = x
			break
		}
	}
	best := -1
	for i, c := range r.Comparisons {
		if c.Term == t.Source && (best < 0 || math.Abs(float64(c.Difference)) > math.Abs(float64(r.Comparisons[best].Difference))) {
			best = i
		}
	}
	test := fmt.Sprintf("F(%s, %s) = %s, P %s", num.DF(float64(t.DF)), num.DF(float64(t.ErrorDF)), num.Statistic(float64(t.F)), num.PStatement(float64(t.P)))
	if best < 0 {
		lo, hi := rangeOfMeans(r, t.Source)
		if lo == nil {
			return fmt.Sprintf("%s by %s: %s.%s", name, TermText(p, t.Source), test, depends(p, r, t.Source))
		}
		d := num.SEDecimals(float64(lo.SE))
		return fmt.Sprintf("%s ranged from %s (%s) to %s (%s) between levels of %s: %s.%s", name,
			num.Fixed(float64(lo.Mean), d), LevelsText(p, lo.Levels), num.Unit(num.Fixed(float64(hi.Mean), d), r.Unit), LevelsText(p, hi.Levels), TermText(p, t.Source), test, depends(p, r, t.Source))
	}
	c := r.Comparisons[best]
	d := num.SEDecimals(float64(c.SE))
	lim := ""
	if c.Lower.Known() && c.Upper.Known() {
		lim = fmt.Sprintf("; %s limits %s to %s", confidence(alpha), num.Fixed(float64(c.Lower), d), num.Fixed(float64(c.Upper), d))
	}
	return fmt.Sprintf("%s by %s: %s. The widest difference is %s, %s (%s%s; P %s).%s", name, TermText(p, t.Source), test,
		PairText(pairLevel(p, t.Source, c.A), pairLevel(p, t.Source, c.B)), num.Unit(num.Fixed(float64(c.Difference), d), r.Unit), Method(c.Method), lim, num.PStatement(float64(c.PAdjusted)), depends(p, r, t.Source))
}

// depends says, as a sentence to follow another, with which other factors the effect of
// one interacts at the level of significance; empty: with none.
func depends(p *layout.Plan, r *result.Response, factor string) string {
	var with []string
	for _, x := range r.Tests {
		parts := strings.Split(x.Source, ":")
		if len(parts) < 2 || !x.P.Known() || float64(x.P) >= Alpha(p, r) {
			continue
		}
		var others []string
		here := false
		for _, part := range parts {
			if part == factor {
				here = true
			} else {
				others = append(others, TermText(p, part))
			}
		}
		if here {
			with = append(with, fmt.Sprintf("%s (interaction: P %s)", And(others), num.PStatement(float64(x.P))))
		}
	}
	if len(with) == 0 {
		return ""
	}
	return fmt.Sprintf(" This is an average: the effect of %s depends on %s.", TermText(p, factor), And(with))
}

func pairLevel(p *layout.Plan, term, level string) string {
	if strings.Contains(term, ":") {
		return level
	}
	return LevelText(p, term, level)
}

func isCovariate(r *result.Response, source string) bool {
	for _, c := range r.Covariates {
		if c.Name == source {
			return true
		}
	}
	return false
}

func factorUnit(p *layout.Plan, factor string) string {
	if f := FactorNamed(p, factor); f != nil && f.Protocol != nil && f.Protocol.Unit != "" {
		return num.UnitText(f.Protocol.Unit)
	}
	return "unit"
}

// timeUnits are units of time in words.
var timeUnits = map[string]string{"a": "year", "mo": "month", "wk": "week", "d": "day", "h": "hour", "min": "minute", "s": "second"}

// eachUnit is the unit of a graded factor with the factor: "kg/ha of nitrogen"; of times that
// are named as their unit is, such as weeks, that alone.
func eachUnit(p *layout.Plan, factor string) string {
	of := TermText(p, factor)
	if r := p.Protocol.RepeatedNamed(factor); r != nil {
		unit := r.Unit
		if word := timeUnits[unit]; word != "" {
			unit = word
		}
		if unit == "" || unit == of || Plural(unit) == of || unit == Plural(of) {
			return strings.TrimSuffix(of, "s")
		}
		return unit + " of " + of
	}
	return singularUnit(factorUnit(p, factor)) + " of " + of
}

func rangeOfMeans(r *result.Response, term string) (lo, hi *result.Mean) {
	var ms []*result.Mean
	for i := range r.Means {
		if r.Means[i].Term == term && r.Means[i].Mean.Known() {
			ms = append(ms, &r.Means[i])
		}
	}
	if len(ms) == 0 {
		return nil, nil
	}
	sort.SliceStable(ms, func(i, j int) bool { return ms[i].Mean < ms[j].Mean })
	return ms[0], ms[len(ms)-1]
}

// OwnNotes are the notes of a response that stand under none of its tables.
func OwnNotes(r *result.Response) []string {
	if len(r.Anova) > 0 || len(r.Tests) > 0 || r.Model == nil {
		return nil // they stand under the tests, or are all that is said
	}
	var out []string
	for _, n := range r.Notes {
		if n.Term == "" {
			out = append(out, n.Text)
		}
	}
	return out
}
