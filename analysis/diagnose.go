package analysis

import (
	"math"
	"sort"

	"penwright/analysis/dist"
	"penwright/analysis/linear"
	"penwright/analysis/prose"
	"penwright/analysis/residual"
	"penwright/analysis/result"
	"penwright/protocol/factor"
)

// maxResiduals is the number of rows up to which residuals are listed one by one.
const maxResiduals = 20_000

// diagnose fills residuals and the checks of the model, at the unit that received the
// smallest treatments.
func (a *analyst) diagnose() {
	r := a.model.residuals()
	rows := a.at
	e := make([]float64, len(rows.y))
	for i := range e {
		e[i] = rows.y[i] - r.fitted[i]
	}
	z := e // in a common unit
	if r.scale != nil {
		z = make([]float64, len(e))
		for i := range e {
			z[i] = e[i] / r.scale[i]
		}
	} else if a.quiet(r.ms) == 0 { // what is left is rounding, and says nothing
		r.ms = 0
		clear(e)
	}
	cases := residual.Cases(z, r.leverage, r.ms, r.df, len(e)-r.df)
	order := byStudentized(cases)
	if r.ms > 0 && len(order) < len(cases) {
		a.note("leverage-one", "", prose.LeverageOne(len(cases)-len(order)))
	}
	envelope := residual.OrderStatistics(len(order), 0.95)
	place := make([]int, len(cases))
	for i := range place {
		place[i] = -1
	}
	for k, i := range order {
		place[i] = k
	}
	if len(cases) > maxResiduals {
		a.out.Residuals = nil
		a.note("many-residuals", "", prose.ManyResiduals(len(cases)))
	} else {
		for i, c := range cases {
			x := result.Residual{
				Units: a.unitNames(rows, i), Observed: result.Number(rows.y[i]), Fitted: result.Number(r.fitted[i]), Residual: result.Number(e[i]),
				Studentized: result.Number(c.Internal), Deleted: result.Number(c.Deleted), Leverage: result.Number(c.Leverage), Cook: result.Number(c.Cook),
				Score: result.NaN, Lower: result.NaN, Upper: result.NaN,
			}
			if k := place[i]; k >= 0 {
				x.Score, x.Lower, x.Upper = result.Number(envelope.Score[k]), result.Number(envelope.Lower[k]), result.Number(envelope.Upper[k])
			}
			a.out.Residuals = append(a.out.Residuals, x)
		}
	}
	add := func(name string, statistic, df, p float64, text string) {
		a.out.Diagnostics = append(a.out.Diagnostics, result.Diagnostic{Name: name, Statistic: result.Number(statistic), DF: result.Number(df), P: result.Number(p), Text: text})
	}
	none := math.NaN()
	if t, err := residual.ShapiroWilk(z); err == nil {
		add("shapiro-wilk", t.Statistic, none, t.P, prose.Normality(t.P))
	}
	groups := a.groups(rows, e)
	if groups != nil {
		// Where nothing but treatments is fitted, residuals within a treatment are
		// independent up to its mean and the tests of equal variance hold; residuals of
		// blocked designs are correlated, and the picture of spread speaks for itself.
		if len(a.at.units()) == 1 && len(a.covs) == 0 {
			if t, err := residual.Bartlett(groups); err == nil {
				add("bartlett", t.Statistic, float64(t.DF), t.P, prose.EqualVariance(t.P))
			}
			if t, err := residual.BrownForsythe(groups); err == nil {
				add("brown-forsythe", t.Statistic, float64(t.DF), t.P, prose.EqualVariance(t.P))
			}
		}
		if t, err := residual.SpreadOnMean(a.groups(rows, rows.y)); err == nil && t.Groups >= 3 {
			p := dist.TTwoSided(t.Slope/t.SE, float64(t.Groups-2))
			add("spread on mean", t.Slope, float64(t.Groups-2), p, prose.SpreadOnMean(p, t.Power))
		}
	}
	if m, ok := a.additive(); ok {
		if t, _, err := residual.NonAdditivity(m); err == nil {
			add("non-additivity", t.Statistic, float64(t.DF), t.P, prose.NonAdditivity(t.P))
		}
	}
	if i, d, p := residual.Outlier(cases, r.df); i >= 0 {
		add("outlier", d, float64(r.df-1), p, prose.Outlier(a.plan, a.unitNames(rows, i), p))
	}
	a.efficiencies()
}

// byStudentized orders the cases that have a studentized residual from low to high.
func byStudentized(cases []residual.Case) []int {
	var order []int
	for i, c := range cases {
		if !math.IsNaN(c.Internal) {
			order = append(order, i)
		}
	}
	sort.SliceStable(order, func(i, j int) bool { return cases[order[i]].Internal < cases[order[j]].Internal })
	return order
}

// groups splits values by combination of treatments; nil when each stands alone.
func (a *analyst) groups(rows *rows, values []float64) [][]float64 {
	cells := factor.Infimum(a.classes...)
	if cells.N == len(values) {
		return nil
	}
	return residual.Groups(values, cells)
}

// maxAdditive is the number of treatments, or of larger units that are not absorbed, up to which non-additivity is looked for: with
// more the fit takes long, and one product of effects among so many tells little.
const maxAdditive = 200

// additive gives the additive model of larger units and treatments in which one degree
// of freedom for non-additivity is looked for: one kind of treated unit, some larger
// unit, and a single combination of treatments in each.
func (a *analyst) additive() (linear.Model, bool) {
	for _, t := range a.terms {
		if a.plan.Terms[t].Unit != a.bottom {
			return linear.Model{}, false
		}
	}
	nuisance := a.nuisance()
	if len(nuisance) == 0 || a.classes[0].N > maxAdditive || len(a.covs) > 0 || a.plan.Protocol.TimeTrend != nil || len(a.terms) != 1 {
		return linear.Model{}, false
	}
	m := linear.Model{Y: a.at.y, Factors: a.classes, Terms: a.modelTerms()}
	larger := 0
	for _, u := range nuisance {
		larger += a.plan.Units[u].N
		m.Nuisance = append(m.Nuisance, a.at.unitFactor(u))
	}
	return m, a.mx == nil || larger <= maxAdditive
}

// unitNames identifies a row by the units that have a name of their own in the data.
func (a *analyst) unitNames(rows *rows, row int) result.Levels {
	out := result.Levels{}
	for u := range a.plan.Units {
		up := a.plan.Coarse(rows.unit, u)
		if up == nil || a.plan.Units[u].Own == nil {
			continue
		}
		name := a.plan.Units[u].Name
		if a.over != nil && u == a.over.unit {
			name = a.over.protocol.Name
		}
		out = append(out, result.FactorLevel{Factor: name, Level: a.plan.Units[u].Own[up[rows.inst[row]]]})
	}
	return out
}
