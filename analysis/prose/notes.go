package prose

import (
	"fmt"
	"math"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/protocol/layout"
)

// Refused says in the results that a response was not analysed.
func Refused(p *layout.Plan, r *result.Response, why string) string {
	return upperFirst(strings.SplitN(ResponseText(r), " (", 2)[0]) + " was not analysed: " + strings.TrimRight(why, ".") + "."
}

// Averaged says that values were averaged before the analysis; unequal tells that their
// number differed.
func Averaged(p *layout.Plan, from, to int, unequal bool) string {
	a, b := Plural(UnitName(&p.Units[from])), UnitName(&p.Units[to])
	if unequal {
		return fmt.Sprintf("%s differ in number, so that values were first averaged, without weights, to the %s; all tests are made there.", upperFirst(a), b)
	}
	return fmt.Sprintf("Values of %s were first averaged to the %s; all tests are made there.", a, b)
}

// WithinVariance reports the variance between sampling units beside tests on averages.
func WithinVariance(p *layout.Plan, r *result.Response, from, to int, variance float64, df int) string {
	return fmt.Sprintf("Variance of %s within the same %s: %s with %s degrees of freedom.", Plural(UnitName(&p.Units[from])), UnitName(&p.Units[to]),
		num.Fixed(variance, num.SEDecimals(variance)), num.DF(float64(df)))
}

// Lost says that units gave no value, so that the layout is no longer balanced.
func Lost(p *layout.Plan, unit, lost, of int) string {
	is := "are"
	if lost == 1 {
		is = "is"
	}
	return fmt.Sprintf("%s of %s %s %s missing or excluded; the layout is no longer balanced, and effects are estimated by least squares with every unit larger than the %s fixed.",
		upperFirst(small(lost)), num.Count(of), Plural(UnitName(&p.Units[unit])), is, UnitName(&p.Units[unit]))
}

// NotBalanced says that treatments are not in equal or proportional numbers.
func NotBalanced() string {
	return "Treatments do not stand in proportional numbers, so that effects are estimated by least squares, each adjusted for the others."
}

// IntraBlock says that only comparisons within blocks are used.
func IntraBlock(p *layout.Plan, units []int) string {
	var names []string
	for _, u := range units {
		names = append(names, Plural(UnitName(&p.Units[u])))
	}
	return fmt.Sprintf("Treatments are compared within %s, which are taken as fixed; what differences between them tell is not recovered.", And(names))
}

// EmptyCells says why hypotheses are marginal.
func EmptyCells(n int) string {
	if n == 1 {
		return "One combination of treatments has no unit, so that each term is adjusted for all that do not contain it; means over that combination cannot be estimated."
	}
	return fmt.Sprintf("%s combinations of treatments have no unit, so that each term is adjusted for all that do not contain it; means over them cannot be estimated.", upperFirst(small(n)))
}

// TermLost says that a term lost degrees of freedom to aliasing or empty cells.
func TermLost(p *layout.Plan, term string, lost int, whole bool) string {
	if whole {
		return fmt.Sprintf("%s cannot be told apart from the terms above it and was left out.", upperFirst(TermText(p, term)))
	}
	d := "degrees"
	if lost == 1 {
		d = "degree"
	}
	return fmt.Sprintf("%s lost %s %s of freedom, since not all of it can be told apart from other terms.", upperFirst(TermText(p, term)), small(lost), d)
}

// TermNotTold says that a term cannot be seen at the unit a response is recorded on.
func TermNotTold(p *layout.Plan, terms []string, unit int) string {
	for i := range terms {
		terms[i] = TermText(p, terms[i])
	}
	return fmt.Sprintf("The response is recorded on the %s, which is larger than the unit that received part of the treatments: effects of %s cannot be told.", UnitName(&p.Units[unit]), And(terms))
}

// CovariateAliased says that a covariate tells nothing within the blocks.
func CovariateAliased(p *layout.Plan, name string) string {
	return fmt.Sprintf("%s is constant within the units that the model takes as fixed, so that it cannot adjust comparisons within them; it was left out.", upperFirst(TermText(p, name)))
}

// CovariateUntested says that a covariate has no test of its own.
func CovariateUntested(p *layout.Plan, name string) string {
	return fmt.Sprintf("%s cannot be told apart from the treatments and the other covariates: its slope has no test.", upperFirst(TermText(p, name)))
}

// SlopesDiffer warns where the slopes of a covariate seem to differ.
func SlopesDiffer(p *layout.Plan, name string, pv float64) string {
	return fmt.Sprintf("The slope on %s seems to differ between treatments (P %s): differences between adjusted means then depend on the value at which they are taken.", TermText(p, name), num.PStatement(pv))
}

// NotTestable says that a partial hypothesis compares means that have no estimate.
func NotTestable(p *layout.Plan, term string) string {
	return fmt.Sprintf("Equality of all adjusted means of %s cannot be tested, since some cannot be estimated; adjustment “marginal” tests what is left.", TermText(p, term))
}

// ContrastNotTold says that the factor of a planned contrast cannot be seen at the unit a
// response is recorded on.
func ContrastNotTold(p *layout.Plan, contrast, factor string, unit int) string {
	return fmt.Sprintf("The contrast “%s” cannot be told: the response is recorded on the %s, which is larger than the unit that received %s.", contrast, UnitName(&p.Units[unit]), TermText(p, factor))
}

// LeverageOne says that some rows have no studentized residual.
func LeverageOne(n int) string {
	if n == 1 {
		return "One unit alone determines its fitted value, so that it has no studentized residual."
	}
	return fmt.Sprintf("%s units each alone determine their fitted value, so that they have no studentized residual.", upperFirst(small(n)))
}

// EqualSlopesUntested says that the slopes of a covariate cannot be compared.
func EqualSlopesUntested(p *layout.Plan, name string) string {
	return fmt.Sprintf("Too few units are left to fit a slope on %s for each treatment, so that equal slopes are taken for granted.", TermText(p, name))
}

// NoLimits says that means of a term have no limits.
func NoLimits(p *layout.Plan, term string) string {
	return fmt.Sprintf("Means of %s draw on the variation of several units, which these data estimate too poorly for limits; the standard errors of differences are sound.", TermText(p, term))
}

// OtherStratum warns that a term does not vary within the units it was planned to be
// compared within.
func OtherStratum(p *layout.Plan, term string, planned, actual int) string {
	return fmt.Sprintf("%s does not vary within any %s, though it was given to single %s: it is tested against the variation between %s, which leaves fewer degrees of freedom than planned.",
		upperFirst(TermText(p, term)), UnitName(&p.Units[actual]), Plural(UnitName(&p.Units[planned])), Plural(UnitName(&p.Units[actual])))
}

// NoSingleError says that a contrast or part has no F over one error.
func NoSingleError(p *layout.Plan, what string) string {
	return fmt.Sprintf("Means with equal weights draw on the variation of several units, since treatments are not equally replicated: %s has no sum of squares over a single error.", TermText(p, what))
}

// MeansNotEstimable says that some means of a term have no estimate.
func MeansNotEstimable(p *layout.Plan, term string) string {
	return fmt.Sprintf("Not all means of %s can be estimated from the units that are left.", TermText(p, term))
}

// LettersWithheld says why a term bears no letters.
func LettersWithheld(why string) string { return "No letters: " + why + "." }

// SEDKinds words the SEDs of a split plot or strip plot by kind: within a level of a
// factor, and otherwise.
func SEDKinds(p *layout.Plan, kinds []SEDKind) string {
	d := 0
	for i, k := range kinds {
		d = max(d, num.SEDecimals(k.SED))
		for _, l := range kinds[:i] {
			// Kinds that differ are not printed alike, if they can be told apart at a glance.
			for d < num.SEDecimals(k.SED)+2 && math.Abs(k.SED-l.SED) > 0.005*k.SED && num.Fixed(k.SED, d) == num.Fixed(l.SED, d) {
				d++
			}
		}
	}
	var parts []string
	rest := ""
	for _, k := range kinds {
		if len(k.Same) == 0 {
			rest = num.Fixed(k.SED, d) + " otherwise"
			continue
		}
		var same []string
		for _, f := range k.Same {
			same = append(same, TermText(p, f))
		}
		parts = append(parts, num.Fixed(k.SED, d)+" within a level of "+And(same))
	}
	if rest != "" {
		parts = append(parts, rest)
	}
	return "SED " + strings.Join(parts, ", ") + "."
}

// SEDKind is the SED of pairs of means that agree in the factors Same.
type SEDKind struct {
	Same []string
	SED  float64
}

// NoError says that nothing is left to test a term against.
func NoError(p *layout.Plan, term string) string {
	return fmt.Sprintf("No degrees of freedom are left to test %s.", TermText(p, term))
}

// Exact says that the data leave no residual variation.
func Exact() string {
	return "The values leave no variation between units treated alike: F and P cannot be computed. Values that agree to the last digit are worth a look."
}

// TooManyPairs says that a term has too many means to list all differences.
func TooManyPairs(p *layout.Plan, term string, means, limit int) string {
	return fmt.Sprintf("%s has %s means; differences are listed for up to %s.", upperFirst(TermText(p, term)), num.Count(means), num.Count(limit))
}

// NoControl says why Dunnett's procedure skips a term.
func NoControl(p *layout.Plan, term string) string {
	return fmt.Sprintf("No level of %s is declared as a control, so that Dunnett’s procedure does not apply to it.", TermText(p, term))
}

// Approximate says that a family of comparisons is only nearly of the stated level.
func Approximate(p *layout.Plan, term, method string) string {
	return fmt.Sprintf("Differences of %s have unequal standard errors or degrees of freedom; %s uses those of each pair and is then approximate.", TermText(p, term), Method(method))
}

// NoSimultaneousLimits says that a method gives none.
func NoSimultaneousLimits(method string) string {
	return upperFirst(Method(method)) + " gives no simultaneous limits."
}

// TwoLevel notes where the F of a factor of two levels and the t of its difference test
// different hypotheses.
func TwoLevel(p *layout.Plan, term string) string {
	return fmt.Sprintf("The F of %s is adjusted for fewer terms than the difference of its two adjusted means, so that F is not the square of t.", TermText(p, term))
}

// ManyResiduals says that residuals are not listed one by one.
func ManyResiduals(n int) string {
	return fmt.Sprintf("Residuals of %s rows are not listed here.", num.Count(n))
}

// ModelText writes a model as the trade does, in words.
func ModelText(p *layout.Plan, method string, fixed, random []string) string {
	var f, r []string
	for _, x := range fixed {
		f = append(f, TermText(p, x))
	}
	for _, x := range random {
		r = append(r, TermText(p, x))
	}
	s := "fixed: " + And(f)
	if len(r) > 0 {
		s += "; random: " + And(r)
	}
	return s
}

// Normality words the Shapiro-Wilk test of residuals.
func Normality(p float64) string {
	if p < 0.05 {
		return "Residuals depart from a normal distribution; look at the quantile picture for single units or skewness."
	}
	return "Residuals give no sign against a normal distribution."
}

// EqualVariance words a test of equal variances of treatments.
func EqualVariance(p float64) string {
	if p < 0.05 {
		return "Spread differs between treatments; look at the picture of spread."
	}
	return "Spread gives no sign of differing between treatments."
}

// NonAdditivity words the test of one degree of freedom for non-additivity.
func NonAdditivity(p float64) string {
	if p < 0.05 {
		return "Effects of treatments change with the level of the block; a transformation may make them add."
	}
	return "No sign that effects of treatments change with the level of the block."
}

// SpreadOnMean words the slope of log standard deviation on log mean: its P, and the
// power of the response that it suggests.
func SpreadOnMean(p, power float64) string {
	if !(p < 0.05) {
		return "Spread does not clearly change with the mean."
	}
	near := "the " + num.Fixed(power, 1) + " power"
	switch {
	case power > -0.25 && power < 0.25:
		near = "the logarithm"
	case power > 0.25 && power < 0.75:
		near = "the square root"
	case power < -0.75 && power > -1.25:
		near = "the reciprocal"
	}
	return "Spread changes with the mean; " + near + " of the response would even it."
}

// Outlier words the largest deleted residual.
func Outlier(p *layout.Plan, unit result.Levels, pv float64) string {
	where := UnitText(p, unit)
	if pv < 0.05 {
		return "The value of " + where + " lies farther out than chance among so many would put it; look up its record before anything else."
	}
	return "The farthest value, that of " + where + ", is no farther out than chance among so many would put it."
}

// UnitText names a unit in words: "block 2, pen 7".
func UnitText(p *layout.Plan, unit result.Levels) string {
	var parts []string
	for _, u := range unit {
		parts = append(parts, TermText(p, u.Factor)+" "+u.Level)
	}
	return strings.Join(parts, ", ")
}

// TwoSidedOnly says that a method ignores the side asked for.
func TwoSidedOnly(method string) string {
	return upperFirst(Method(method)) + " has no one-sided form; differences are judged two-sided."
}

// Correlations says that the correlations of differences from the control are only
// nearly of the form that the method needs.
func Correlations(method string) string {
	return "The differences from the control are not correlated in the form that " + Method(method) + " needs; the nearest such form was used."
}

// ComparisonRefused says why a method was not carried out for a term.
func ComparisonRefused(p *layout.Plan, term, method string, unequal bool) string {
	why := "the term has no F test"
	if unequal {
		why = "its differences have unequal standard errors"
	}
	return fmt.Sprintf("%s was not carried out for %s: %s.", upperFirst(Method(method)), TermText(p, term), why)
}

// NoOwnLine says why a larger unit has no line in a table of least squares.
func NoOwnLine(p *layout.Plan, unit int, within []int) string {
	name := Plural(UnitName(&p.Units[unit]))
	var names []string
	for _, w := range within {
		names = append(names, Plural(UnitName(&p.Units[w])))
	}
	if len(within) == 1 {
		return fmt.Sprintf("Differences between %s are part of the line of %s.", name, names[0])
	}
	return fmt.Sprintf("Differences between %s are removed with %s together and stand in no line, so that degrees of freedom do not add up to the total.", name, And(names))
}
