package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/layout"
)

// MixedLost says that a mixed model is fitted since units gave no value.
func MixedLost(p *layout.Plan, unit, lost, of int) string {
	return fmt.Sprintf("%d of %d %s gave no value, so that the trial is not balanced: variances between larger and smaller units are estimated together by residual maximum likelihood, and each test has denominator degrees of freedom of its own.",
		lost, of, Plural(UnitName(&p.Units[unit])))
}

// MixedNotBalanced says that a mixed model is fitted since the layout is not balanced.
func MixedNotBalanced(why string) string {
	return fmt.Sprintf("The layout is not balanced for an analysis by strata (%s): variances are estimated together by residual maximum likelihood, and each test has denominator degrees of freedom of its own.", why)
}

// ComponentsBounded says that all components are kept from being negative.
func ComponentsBounded() string {
	return "Components of units that received treatments are held at zero or above, as the protocol asks. Where one would be negative, the treatments of that unit are tested over smaller units, with more degrees of freedom than the randomization gives: read such a test with caution."
}

// ComponentZero says that a component was held at zero.
func ComponentZero(p *layout.Plan, term string) string {
	return fmt.Sprintf("The variance component of %s is estimated as zero: %s differ no more than what lies within them would make them. It left the model for the degrees of freedom.", TermText(p, term), Variation(p, term))
}

// ComponentNegative says that a component is negative.
func ComponentNegative(p *layout.Plan, term string) string {
	return fmt.Sprintf("The variance component of %s is estimated below zero: %s differ less than what lies within them would make them, as when units within compete. It is kept, so that what was given to them is tested over them.", TermText(p, term), Variation(p, term))
}

// FewLevels says that a component rests on few units.
func FewLevels(p *layout.Plan, term string, n int) string {
	return fmt.Sprintf("The variance component of %s rests on %d classes alone: it is hardly known, and so is the precision of what is compared between them.", TermText(p, term), n)
}

// HardlyTold says that the information about the variances is nearly singular.
func HardlyTold() string {
	return "The data hardly tell the variances apart: their standard errors are large, and the degrees of freedom that rest on them are uncertain. More of the larger units would tell."
}

// SeveralMaxima says that the likelihood has more than one maximum.
func SeveralMaxima(n int) string {
	return fmt.Sprintf("The likelihood of the variances has %d maxima; the highest is reported. Look at the data for units that stand apart.", n)
}

// NoApproximation says that a term has no F.
func NoApproximation(p *layout.Plan, term string) string {
	return fmt.Sprintf("%s has no F: its error is known so badly that the approximation to the distribution of F breaks down.", upperFirst(TermText(p, term)))
}

// NotConverged says why a mixed model gave no numbers.
func NotConverged(iterations int) string {
	return fmt.Sprintf("the search for its variances came to no end in %d steps", iterations)
}

// NotConvergedAdvice says what to do then.
func NotConvergedAdvice() string {
	return "look for units with extreme values, take a simpler correlation, leave an interaction out, or keep components from being negative (components = \"bounded\" under [analysis])"
}

// NotToldApart says that components are confounded.
func NotToldApart(names []string) string {
	return "the variances of " + And(append(append([]string(nil), names...), "residual")) + " cannot be told apart"
}

// Variation is the plural of a unit by its name, or of what a unit crossed with a term is.
func Variation(p *layout.Plan, term string) string {
	for i := range p.Units {
		if p.Units[i].Name == term {
			return Plural(UnitName(&p.Units[i]))
		}
	}
	if strings.Contains(term, ":") {
		return "its effects"
	}
	return "its classes"
}

// StructuresLeftOut says why correlations with many parameters were not tried.
func StructuresLeftOut(units string) string {
	return "Antedependence and an unstructured correlation were not tried: there are fewer degrees of freedom between " + units + " than times."
}

// NoSphericity says why the correlation of repeated records was not tested.
func NoSphericity() string {
	return "Some units lack records, so that the supposition of a split plot in time, equal variances of all differences of two times, is not tested here; a model of the correlation does not need it."
}

// NotSpherical says that records are not correlated as a split plot in time supposes.
func NotSpherical(p, epsilon float64) string {
	return fmt.Sprintf("Differences of two times do not all have the same variance (Mauchly, P %s), as a split plot in time supposes: read P of times with corrected degrees of freedom (factor %s, Greenhouse and Geisser), or have the correlation fitted.", num.PStatement(p), num.Fixed(epsilon, 3))
}

// adjustedMeans tells whether means are not those of the values as they stand.
func adjustedMeans(r *result.Response) bool {
	return r.Model != nil && (len(r.Covariates) > 0 || r.Model.Method != "strata")
}

// fractional tells whether a mean of an analysis by strata has approximate degrees of freedom.
func fractional(r *result.Response, m result.Mean) bool {
	return r.Model.Method == "strata" && m.DF.Known() && strings.Contains(num.DF(float64(m.DF)), ".")
}

// DenominatorText says how a mixed model had the degrees of freedom of its tests.
func DenominatorText(r *result.Response) string { return denominator(r, nil) + "." }

func denominator(r *result.Response, cited citations) string {
	if cited != nil && r.Model.DFMethod == "satterthwaite" {
		return "Denominator degrees of freedom were approximated" + cited.cite("satterthwaite")
	}
	if cited != nil {
		return "F, its denominator degrees of freedom and standard errors were adjusted for the estimation of the variances" + cited.cite("kenward-roger")
	}
	if r.Model.DFMethod == "satterthwaite" {
		return "Denominator degrees of freedom are those of Satterthwaite"
	}
	return "F, its denominator degrees of freedom and the standard errors are those of Kenward and Roger"
}

// mixedWords tells a mixed model: what is fixed, what is random, and what the residual is.
func mixedWords(t *trial.Trial, r *result.Response, cited citations) string {
	p := t.Plan
	units, covariates, terms := fixedWords(t, r)
	s := "a mixed model"
	if len(r.Model.Random) < 2 && r.Correlation == nil {
		s = "a linear model"
	}
	s += " fitted by residual maximum likelihood" + cited.cite("reml")
	if cited == nil {
		s += " (" + DesignName(p) + ")"
	}
	s += ", with " + And(append(append(units, covariates...), terms...)) + " as fixed"
	n := len(r.Model.Random)
	var random []string
	for i, x := range r.Model.Random {
		if i < n-1 {
			random = append(random, randomName(p, x))
		}
	}
	if len(random) > 0 {
		s += " and " + And(random) + " as random"
	}
	s += " effects"
	if n > 0 {
		s += "; the residual is that of " + randomName(p, r.Model.Random[n-1])
	}
	if by := p.Protocol.Analysis.VarianceBy; by != "" {
		s += ", with a variance of its own for each level of " + TermText(p, by)
	}
	return s
}

// randomName names a random term by what varies.
func randomName(p *layout.Plan, term string) string {
	for i := range p.Units {
		if p.Units[i].Name == term {
			return ErrorName(p, i)
		}
	}
	if s := records(p, term); s != "" {
		return s
	}
	return TermText(p, term)
}

// ComponentRow names a component of variance; residual is the random term whose variance
// the residual is.
func ComponentRow(p *layout.Plan, r *result.Response, c result.Component) string {
	rest, residual := strings.CutPrefix(c.Term, "residual")
	if !residual {
		return upperFirst(randomName(p, c.Term))
	}
	s := "Residual"
	if n := len(r.Model.Random); n > 0 {
		s += ": " + randomName(p, r.Model.Random[n-1])
	}
	return s + rest
}

// ComponentNotes are the notes of a table of variance components.
func ComponentNotes(r *result.Response) []string {
	out := []string{"SE: standard error of the component, from the information about the variances; it is rough where a component rests on few units."}
	if r.Model != nil && r.Model.Method == "strata" {
		out = []string{"Components follow from the mean squares of the strata."}
	}
	for _, n := range r.Notes {
		switch n.Code {
		case "component-zero", "component-negative", "few-levels":
			out = append(out, n.Text)
		}
	}
	return out
}

// sphericity tells the test of what a split plot in time supposes, and P with corrected
// degrees of freedom.
func sphericity(p *layout.Plan, r *result.Response) []string {
	s := r.Sphericity
	if s == nil {
		return nil
	}
	out := []string{fmt.Sprintf("Equal variances of all differences of two times: Mauchly’s W %s, χ² %s with %d df, P %s.",
		num.Fixed(float64(s.W), 3), num.Statistic(float64(s.ChiSquared)), s.DF, num.PStatement(float64(s.P)))}
	var terms []string
	for _, x := range r.Tests {
		if x.GreenhouseGeisser > 0 && x.HuynhFeldt > 0 {
			terms = append(terms, fmt.Sprintf("%s P %s and P %s", TermText(p, x.Source), num.PStatement(float64(x.GreenhouseGeisser)), num.PStatement(float64(x.HuynhFeldt))))
		}
	}
	if len(terms) > 0 {
		out = append(out, fmt.Sprintf("With both degrees of freedom multiplied by %s (Greenhouse and Geisser) and by %s (Huynh and Feldt): %s.",
			num.Fixed(float64(s.GreenhouseGeisser), 3), num.Fixed(float64(s.HuynhFeldt), 3), strings.Join(terms, "; ")))
	}
	return out
}

// correctedWords says in the account of the methods that degrees of freedom were corrected.
func correctedWords(g group, cited citations) string {
	for _, r := range g {
		if r.Sphericity != nil {
			return "Records over time were analysed as a split plot in time; equal variances of all differences of two times were tested" + cited.cite("mauchly") +
				", and P of times was also had with corrected degrees of freedom" + cited.cite("sphericity")
		}
	}
	return ""
}

// structure names a correlation of repeated records in running text.
func structure(kind string) string {
	switch kind {
	case "compound symmetry":
		return "one variance and the same correlation of any two times"
	case "heterogeneous compound symmetry":
		return "a variance for each time and the same correlation of any two times"
	case "autoregressive":
		return "one variance and a correlation that falls by powers with the distance of two times (autoregressive)"
	case "heterogeneous autoregressive":
		return "a variance for each time and a correlation that falls by powers with the distance of two times (autoregressive)"
	case "antedependence":
		return "a variance for each time and a correlation for each pair of neighbouring times, of which others are products (antedependence)"
	case "unstructured":
		return "a variance for each time and a covariance for each pair of times"
	}
	return kind
}

// correlationChosen says how the correlation of repeated records was taken; "" where there
// is none.
func correlationChosen(p *layout.Plan, r *result.Response, cited citations) string {
	c := r.Correlation
	if c == nil {
		return ""
	}
	pr := p.Protocol.Response(r.Name)
	of := "one unit"
	if pr != nil {
		if x := p.Protocol.RepeatedNamed(pr.Repeated); x != nil {
			of = "the same " + TermText(p, x.On)
		}
	}
	s := fmt.Sprintf("Records of %s were taken as correlated, with %s", of, structure(c.Kind))
	if n := len(c.Candidates); n > 0 {
		s += fmt.Sprintf("; of %s structures tried it had the smallest AICc%s", small(n), cited.cite("aicc"))
	}
	return s
}

// correlationText tells a correlation that is one number; "" where it is more, and a table
// has it.
func correlationText(p *layout.Plan, r *result.Response) string {
	c := r.Correlation
	if c == nil || len(c.Parameters) != 1 {
		return ""
	}
	x := c.Parameters[0]
	of, times := "one unit", "neighbouring times"
	if pr := p.Protocol.Response(r.Name); pr != nil {
		if rep := p.Protocol.RepeatedNamed(pr.Repeated); rep != nil {
			of, times = "the same "+TermText(p, rep.On), "neighbouring "+Plural(TermText(p, rep.Name))
			if s := rep.Steps(); len(rep.Values) > 2 && s[len(s)-1] != float64(len(s)-1) {
				times = "times that are one apart"
				if rep.Unit != "" {
					times = "times that are " + num.Unit("1", rep.Unit) + " apart"
				}
			}
		}
	}
	if c.Kind == "autoregressive" {
		return fmt.Sprintf("Correlation of records of %s: %s for %s, to the power of the distance for others.", of, num.Fixed(float64(x.Value), 2), times)
	}
	return fmt.Sprintf("Correlation of any two records of %s: %s.", of, num.Fixed(float64(x.Value), 2))
}

// CorrelationNotes say what a table of the correlation of repeated records shows.
func CorrelationNotes(p *layout.Plan, r *result.Response) []string {
	return []string{"Off the diagonal of times: correlations of records of the same unit, with " + structure(r.Correlation.Kind) + "."}
}

// CandidatesNotes are the notes of a table of correlations that were tried.
func CandidatesNotes(r *result.Response) []string {
	out := []string{"AICc: −2 log residual likelihood + 2 qm/(m − q − 1), with q parameters and m rows less fixed effects; the smallest is taken."}
	for _, c := range r.Correlation.Candidates {
		if !c.LogLikelihood.Known() {
			out = append(out, "Structures without numbers could not be fitted to these data.")
			break
		}
	}
	return out
}

// ProfileLimits says where the limits of components come from.
func ProfileLimits(confidence float64, missing bool) string {
	text := fmt.Sprintf("Limits of the components (%s %%) are by the profile of the residual likelihood: values outside them are less likely, all other variances fitted anew, than χ² with one degree of freedom allows.", num.Fixed(100*confidence, 0))
	if missing {
		text += " One that is not given could not be found."
	}
	return text
}

// CorrelationZero says that a correlation was held at zero.
func CorrelationZero(time string) string {
	return fmt.Sprintf("The correlation of neighbouring records is estimated as zero: over unequal steps of %s a power of the distance knows none below. It left the model for the degrees of freedom.", time)
}

// NoProfileLimits says why components have no limits.
func NoProfileLimits() string {
	return "Components of variance have no limits by profile likelihood here: they come from the mean squares of the strata, with the standard errors given."
}
