package analysis

import (
	"errors"
	"fmt"
	"math"

	"penwright/analysis/dist"
	"penwright/analysis/linear"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// analyst carries one response through its analysis.
type analyst struct {
	trial *trial.Trial
	plan  *layout.Plan
	rows  *rows     // as recorded
	over  *repeated // the times, where the response is repeated; else nil
	out   *result.Response

	alpha   float64
	terms   []int           // indices into plan.Terms, in order
	bottom  int             // unit to which the smallest treatments were given
	at      *rows           // the rows at bottom
	factors []int           // indices into plan.Factors of the factors of the terms
	present [][]int         // for each of factors, the levels that have a row
	classes []factor.Factor // for each of factors, the rows of at by present level
	model   model
	ls      *leastSquares // the model where it is least squares; else nil
	st      *byStrata     // the model where it is by strata; else nil
	mx      *mixedModel   // the model where it is mixed; else nil
	extra   []result.Test // of what a mixed model holds beside treatments
	covs    []int         // indices of the covariates in the model, into the response's
	noise   float64       // mean square at or below which an error is rounding
}

func (a *analyst) note(code, term, text string) {
	for _, n := range a.out.Notes {
		if n.Code == code && n.Term == term && n.Text == text {
			return
		}
	}
	a.out.Notes = append(a.out.Notes, result.Note{Code: code, Text: text, Term: term})
}

// run analyses the rows, or says why it cannot.
func (a *analyst) run() *refusal {
	a.alpha = prose.Alpha(a.plan, a.out)
	if len(a.rows.y) == 0 {
		return &refusal{code: "no-values", why: "no unit gave a value"}
	}
	a.out.GrandMean = result.Number(mean(a.rows.y))
	for _, v := range a.rows.y {
		// Values as written and their sums are off by a few units in the last place.
		a.noise = math.Max(a.noise, 64*epsilon*epsilon*v*v)
	}
	var cannot []int
	a.terms, cannot = a.rows.terms()
	if len(a.terms) == 0 {
		return &refusal{code: "no-terms", why: "it is recorded on a unit larger than those that received treatments",
			hint: "record it on the unit that received the treatment, or on a smaller one"}
	}
	if len(cannot) > 0 {
		var names []string
		for _, t := range cannot {
			names = append(names, a.plan.Terms[t].Name)
		}
		a.note("term-not-told", "", prose.TermNotTold(a.plan, names, a.rows.unit))
	}
	a.bottom = a.rows.bottom(a.terms)
	a.at = a.rows
	if a.bottom != a.rows.unit {
		a.at = a.rows.averaged(a.bottom)
	}
	if x := a.findLevels(); x != nil {
		return x
	}
	a.summarize()
	if x := a.fit(); x != nil {
		return x
	}
	a.estimate()
	a.diagnose()
	return nil
}

// epsilon is the spacing of float64 at 1.
const epsilon = 0x1p-52

// quiet gives 0 for a mean square that is no more than rounding leaves of no variation,
// and any other as it is.
func (a *analyst) quiet(ms float64) float64 {
	if ms <= a.noise {
		return 0
	}
	return ms
}

func mean(y []float64) float64 {
	s := 0.0
	for _, v := range y {
		s += v - y[0]
	}
	return y[0] + s/float64(len(y))
}

// findLevels lists the factors of the terms and the levels that have a row.
func (a *analyst) findLevels() *refusal {
	seen := map[int]bool{}
	for _, t := range a.terms {
		for _, f := range a.plan.Terms[t].Factors {
			if !seen[f] {
				seen[f] = true
				a.factors = append(a.factors, f)
			}
		}
	}
	for _, f := range a.factors {
		c := a.at.treatmentFactor(f)
		count := make([]int, c.N)
		for _, l := range c.Level {
			if l < 0 {
				return &refusal{code: "unknown-treatment", why: fmt.Sprintf("the level of %s is not known for every unit", a.plan.Factors[f].Name)}
			}
			count[l]++
		}
		var present []int
		renumber := make([]int32, c.N)
		for l, n := range count {
			if n > 0 {
				renumber[l] = int32(len(present))
				present = append(present, l)
			}
		}
		if len(present) < 2 {
			return &refusal{code: "one-level", why: fmt.Sprintf("only one level of %s gave a value, so that there is nothing to compare", a.plan.Factors[f].Name)}
		}
		for i, l := range c.Level {
			c.Level[i] = renumber[l]
		}
		c.N = len(present)
		a.present = append(a.present, present)
		a.classes = append(a.classes, c)
	}
	return nil
}

// modelTerms are the terms as lists of indices into a.factors.
func (a *analyst) modelTerms() [][]int {
	at := map[int]int{}
	for i, f := range a.factors {
		at[f] = i
	}
	var out [][]int
	for _, t := range a.terms {
		var fs []int
		for _, f := range a.plan.Terms[t].Factors {
			fs = append(fs, at[f])
		}
		out = append(out, fs)
	}
	return out
}

// fit picks the model: by strata where the values are balanced as the strata need; else
// least squares where all treatments stand on one kind of unit and all that is larger is
// fixed; else a mixed model.
func (a *analyst) fit() *refusal {
	p := a.plan.Protocol
	switch {
	case a.over != nil && a.over.protocol.Correlation != splitPlotInTime:
		return a.fitCorrelated()
	case len(a.rows.resp.Covariates) > 0 || p.TimeTrend != nil || p.CarryOver != nil || len(a.plan.Crossed) > 0 || p.Analysis.VarianceBy != "":
		return a.fitUnbalanced(nil)
	}
	err := a.fitStrata(a.rows)
	if err == nil && a.over != nil {
		a.sphericity()
		return nil
	}
	if err != nil && a.rows.unit != a.bottom {
		if again := a.fitStrata(a.at); again == nil {
			a.averagedNote()
			return nil
		}
	}
	if err == nil {
		return nil
	}
	return a.fitUnbalanced(err)
}

// fitUnbalanced fits what is not analysed by strata; unbalanced says why the values are not
// balanced, nil when something else asks for another model.
func (a *analyst) fitUnbalanced(unbalanced error) *refusal {
	p := a.plan.Protocol
	mixed := p.CarryOver != nil || len(a.plan.Crossed) > 0 || p.Analysis.VarianceBy != ""
	for _, t := range a.terms {
		mixed = mixed || a.plan.Terms[t].Unit != a.bottom
	}
	for _, u := range a.nuisance() {
		mixed = mixed || a.plan.Units[u].Random
	}
	var none noError
	switch {
	case !mixed:
		return a.fitLeastSquares(unbalanced)
	case errors.As(unbalanced, &none):
		return &refusal{code: "no-error", why: "no degrees of freedom are left to test " + a.plan.Terms[none.term].Name, hint: a.fewerTerms(a.strataLeaveError)}
	}
	x, refused := a.fitMixed(nil)
	if refused != nil {
		return refused
	}
	a.mixedWhy(unbalanced)
	return a.finishMixed(x)
}

// averagedNote says that values were averaged, with the variance within the unit.
func (a *analyst) averagedNote() {
	lo, hi := a.at.of[0], a.at.of[0]
	for _, n := range a.at.of {
		lo, hi = min(lo, n), max(hi, n)
	}
	a.note("averaged", "", prose.Averaged(a.plan, a.rows.unit, a.bottom, lo != hi))
	// The variance between values of one unit is reported beside; tests do not use it.
	up := a.plan.Coarse(a.rows.unit, a.bottom)
	unitMean := make([]float64, a.plan.Units[a.bottom].N)
	for i, u := range a.at.inst {
		unitMean[u] = a.at.y[i]
	}
	ss, df := 0.0, 0
	for i, u := range a.rows.inst {
		d := a.rows.y[i] - unitMean[up[u]]
		ss += d * d
		df++
	}
	df -= len(a.at.inst)
	if df > 0 {
		a.note("within-variance", "", prose.WithinVariance(a.plan, a.out, a.rows.unit, a.bottom, ss/float64(df), df))
	}
}

// nuisance lists the units larger than bottom that a least-squares model holds fixed:
// those that lie in no other one of them.
func (a *analyst) nuisance() []int {
	var all []int
	for _, u := range a.at.units() {
		if u != a.bottom {
			all = append(all, u)
		}
	}
	var out []int
	for _, u := range all {
		finest := true
		for _, v := range all {
			if v != u && a.plan.Coarse(v, u) != nil {
				finest = false
			}
		}
		if finest {
			out = append(out, u)
		}
	}
	return out
}

// fitLeastSquares fits all larger units as fixed. unbalanced says why the analysis by
// strata was not possible, nil when something else asks for least squares.
func (a *analyst) fitLeastSquares(unbalanced error) *refusal {
	p := a.plan.Protocol
	nuisance := a.nuisance()
	if a.at != a.rows {
		a.averagedNote()
	}
	m := linear.Model{Y: a.at.y, Factors: a.classes, Terms: a.modelTerms()}
	trendUnit := -1
	if p.TimeTrend != nil {
		on, time, centre, refused := a.trendTimes()
		if refused != nil {
			return refused
		}
		m.Trend = &linear.Trend{Unit: a.at.unitFactor(on), Order: max(p.TimeTrend.Order, 1), Time: time, Centre: centre}
		trendUnit = on
	}
	var nuisanceUnits []int
	for _, u := range nuisance {
		if u != trendUnit {
			m.Nuisance = append(m.Nuisance, a.at.unitFactor(u))
			nuisanceUnits = append(nuisanceUnits, u)
		}
	}
	for k := range a.rows.resp.Covariates {
		a.covs = append(a.covs, k)
		m.Covariates = append(m.Covariates, a.at.covariates[k])
	}
	empty := a.emptyCells(m)
	adjustment, hypothesis := linear.Partial, "partial"
	switch p.Analysis.Adjustment {
	case "marginal":
		adjustment, hypothesis = linear.Marginal, "marginal"
	case "sequential":
		adjustment, hypothesis = linear.Sequential, "sequential"
	case "partial":
	default:
		if empty > 0 {
			adjustment, hypothesis = linear.Marginal, "marginal"
			a.note("empty-cells", "", prose.EmptyCells(empty))
		}
	}
	ls, err := newLeastSquares(m, adjustment)
	if err != nil {
		return a.linearRefusal(err)
	}
	// A covariate that is constant within the fixed units adjusts nothing: it goes.
	if lost := lostCovariates(ls); len(lost) > 0 {
		var kept []int
		m.Covariates = nil
		for i, k := range a.covs {
			if lost[i] {
				a.note("covariate-aliased", "", prose.CovariateAliased(a.plan, a.rows.resp.Protocol.Covariates[k]))
				continue
			}
			kept = append(kept, k)
			m.Covariates = append(m.Covariates, a.at.covariates[k])
		}
		a.covs = kept
		if ls, err = newLeastSquares(m, adjustment); err != nil {
			return a.linearRefusal(err)
		}
	}
	if ls.fit.DF < 1 {
		return &refusal{code: "no-error", why: "no degrees of freedom are left to estimate error", hint: a.fewerTerms(func(order int) bool {
			small := m
			small.Terms = nil
			for _, t := range m.Terms {
				if len(t) <= order {
					small.Terms = append(small.Terms, t)
				}
			}
			f, err := small.Fit()
			return err == nil && f.DF > 0
		})}
	}
	ls.ms = a.quiet(ls.fit.MS())
	a.model, a.ls = ls, ls
	a.whyLeastSquares(unbalanced, nuisance)
	a.withinLarger(nuisance)
	a.leastSquaresTable(m, nuisanceUnits, adjustment, hypothesis)
	return nil
}

// fewerTerms words what to do when nothing is left for error: the highest order of
// interactions that leaves some, as left tells, if there is one.
func (a *analyst) fewerTerms(left func(order int) bool) string {
	highest := 0
	for _, t := range a.terms {
		highest = max(highest, len(a.plan.Terms[t].Factors))
	}
	for order := highest - 1; order >= 1; order-- {
		if left(order) {
			return fmt.Sprintf("interactions = %d under [analysis] leaves some, if interactions of more factors may be taken as error", order)
		}
	}
	return "more units for each treatment are needed"
}

// strataLeaveError tells whether terms of up to order factors leave error in every stratum.
func (a *analyst) strataLeaveError(order int) bool {
	left := map[int]int{}
	for _, t := range a.terms {
		term := &a.plan.Terms[t]
		if _, known := left[term.Unit]; !known {
			for _, s := range a.plan.Strata {
				if s.Unit == term.Unit {
					left[term.Unit] = s.DF
				}
			}
		}
		if len(term.Factors) <= order {
			left[term.Unit] -= term.DF
		}
	}
	for _, df := range left {
		if df < 1 {
			return false
		}
	}
	return true
}

// withinLarger notes larger units that have no line of their own, since what lies between
// them is held by the units within them. Where several kinds of unit lie within one, none
// of their lines shows it, and the degrees of freedom do not add up to the total.
func (a *analyst) withinLarger(nuisance []int) {
	for _, u := range a.at.units() {
		var within []int
		for _, v := range nuisance {
			if v != u && a.plan.Coarse(v, u) != nil {
				within = append(within, v)
			}
		}
		if u != a.bottom && len(within) > 0 && a.plan.Units[u].N > 1 {
			a.note("no-own-line", "", prose.NoOwnLine(a.plan, u, within))
		}
	}
}

func (a *analyst) linearRefusal(err error) *refusal {
	var wide linear.TooWide
	if errors.As(err, &wide) {
		return &refusal{code: "too-large", why: fmt.Sprintf("its model has %d columns, more than %d", wide.Columns, linear.MaxColumns)}
	}
	return &refusal{code: "not-finite", why: "its values or covariates are not all finite numbers"}
}

func lostCovariates(ls *leastSquares) map[int]bool {
	out := map[int]bool{}
	for _, x := range ls.fit.Aliased() {
		if x.Kind == linear.Covariate {
			out[x.Index] = true
		}
	}
	return out
}

// emptyCells counts the combinations of the factors that interact and have no row.
func (a *analyst) emptyCells(m linear.Model) int {
	worst := 0
	for _, t := range m.Terms {
		if len(t) < 2 {
			continue
		}
		cells := 1
		var fs []factor.Factor
		for _, f := range t {
			cells *= m.Factors[f].N
			fs = append(fs, m.Factors[f])
		}
		worst = max(worst, cells-factor.Infimum(fs...).N)
	}
	return worst
}

// whyLeastSquares notes why the analysis is not by strata.
func (a *analyst) whyLeastSquares(unbalanced error, nuisance []int) {
	if unbalanced == nil {
		return
	}
	var incomplete []int
	for _, u := range nuisance {
		for _, t := range a.terms {
			if a.plan.Terms[t].Stratum < 0 {
				incomplete = append(incomplete, u)
				break
			}
		}
	}
	lost := a.plan.Units[a.bottom].N - len(a.at.inst)
	switch {
	case len(incomplete) > 0:
		a.note("intra-block", "", prose.IntraBlock(a.plan, incomplete))
	case lost > 0:
		a.note("units-lost", "", prose.Lost(a.plan, a.bottom, lost, a.plan.Units[a.bottom].N))
	default:
		a.note("not-balanced", "", prose.NotBalanced())
	}
}

func unitIndex(p *layout.Plan, name string) int {
	for i := range p.Units {
		if p.Units[i].Name == name {
			return i
		}
	}
	return -1
}

// trendTimes gives the unit that has a trend of its own, the time of each row as the number
// of its period, and their centre.
func (a *analyst) trendTimes() (on int, time []float64, centre float64, x *refusal) {
	tt := a.plan.Protocol.TimeTrend
	on, along := unitIndex(a.plan, tt.On), unitIndex(a.plan, tt.Along)
	if on < 0 || along < 0 || a.plan.Coarse(a.at.unit, on) == nil || a.plan.Coarse(a.at.unit, along) == nil {
		return -1, nil, 0, &refusal{code: "time-trend", key: "time_trend", why: "its rows do not lie within the units of the time trend"}
	}
	number := periodNumber(a.plan, along)
	up := a.plan.Coarse(a.at.unit, along)
	for _, u := range a.at.inst {
		time = append(time, number[up[u]])
	}
	return on, time, mean(number), nil
}

// periodNumber numbers the instances of a unit from 1 within their parent.
func periodNumber(p *layout.Plan, unit int) []float64 {
	n := p.Units[unit].N
	out := make([]float64, n)
	w := p.Units[unit].Within
	if w < 0 {
		for i := range out {
			out[i] = float64(i + 1)
		}
		return out
	}
	count := make([]int, p.Units[w].N)
	for i, parent := range p.Coarse(unit, w) {
		count[parent]++
		out[i] = float64(count[parent])
	}
	return out
}

// leastSquaresTable fills the analysis of variance, tests, covariates and model of a
// least-squares fit.
func (a *analyst) leastSquaresTable(m linear.Model, nuisance []int, adjustment linear.Adjustment, hypothesis string) {
	fit, out := a.ls.fit, a.out
	df := result.Number(fit.DF)
	ms := a.ls.ms
	line := func(source string, d int, ss float64, tested bool) {
		l := result.Line{Source: source, DF: d, SS: result.Number(ss), MS: result.Number(ss / float64(d)), F: result.NaN, P: result.NaN}
		if d == 0 {
			l.SS, l.MS = result.NaN, result.NaN
		}
		if tested {
			l.ErrorDF = &df
			t := test{df: d, ss: ss, errorDF: float64(fit.DF), errorMS: ms}
			f := t.f()
			l.F, l.P = result.Number(f), result.Number(upperF(f, d, float64(fit.DF)))
			out.Tests = append(out.Tests, result.Test{Source: source, DF: d, ErrorDF: df, F: l.F, P: l.P, Planned: true})
		}
		out.Anova = append(out.Anova, l)
	}
	if ts, err := fit.Nuisance(adjustment); err == nil {
		for _, t := range ts {
			if t.DF > 0 {
				line(a.plan.Units[nuisance[t.Index]].Name, t.DF, t.SS, false)
			}
		}
	}
	slopes := fit.Slopes()
	for i, k := range a.covs {
		t := a.ls.tests[i]
		name := a.rows.resp.Protocol.Covariates[k]
		line(name, t.DF, t.SS, true)
		if t.DF == 0 {
			a.note("covariate-untested", name, prose.CovariateUntested(a.plan, name))
		}
		c := result.Covariate{Name: name, Slope: result.Number(slopes.Value[i]), SE: result.Number(math.Sqrt(slopes.Cov(i, i))), DF: df, P: result.NaN, EqualSlopesP: result.NaN}
		if c.SE > 0 && ms > 0 {
			c.P = result.Number(dist.TTwoSided(float64(c.Slope/c.SE), float64(fit.DF)))
		}
		if s, edf, ess, err := fit.EqualSlopes(i); err == nil && s.DF > 0 && edf > 0 && a.quiet(ess/float64(max(edf, 1))) > 0 {
			f := s.SS / float64(s.DF) / (ess / float64(edf))
			c.EqualSlopesP = result.Number(dist.FUpper(f, float64(s.DF), float64(edf)))
			if float64(c.EqualSlopesP) < a.alpha {
				a.note("slopes-differ", "", prose.SlopesDiffer(a.plan, name, float64(c.EqualSlopesP)))
			}
		} else {
			a.note("equal-slopes", name, prose.EqualSlopesUntested(a.plan, name))
		}
		out.Covariates = append(out.Covariates, c)
	}
	for k, t := range a.terms {
		x := a.ls.test(k)
		name := a.plan.Terms[t].Name
		switch {
		case !x.estimable:
			a.note("not-testable", name, prose.NotTestable(a.plan, name))
		case x.lost > 0 || x.whole:
			a.note("term-lost", name, prose.TermLost(a.plan, name, x.lost, x.whole))
		}
		line(name, x.df, x.ss, true)
		a.partLines(k, nil)
	}
	out.Anova = append(out.Anova, result.Line{Source: "residual", DF: fit.DF, SS: result.Number(fit.RSS), MS: result.Number(ms), F: result.NaN, P: result.NaN})
	if !(ms > 0) {
		a.note("no-variation", "", prose.Exact())
	}
	if out.GrandMean != 0 {
		out.CVPercent = result.Number(100 * math.Sqrt(ms) / math.Abs(float64(out.GrandMean)))
	}
	out.Strata = append(out.Strata, result.StratumResult{Name: a.plan.Units[a.bottom].Name, CVPercent: out.CVPercent})
	var fixed []string
	for _, u := range nuisance {
		fixed = append(fixed, a.plan.Units[u].Name)
	}
	if m.Trend != nil {
		fixed = append(fixed, a.plan.Protocol.TimeTrend.On, a.plan.Protocol.TimeTrend.On+":"+a.plan.Protocol.TimeTrend.Along)
	}
	for _, k := range a.covs {
		fixed = append(fixed, a.rows.resp.Protocol.Covariates[k])
	}
	for _, t := range a.terms {
		fixed = append(fixed, a.plan.Terms[t].Name)
	}
	random := []string{a.plan.Units[a.bottom].Name}
	out.Model = &result.Model{Method: "least squares", Text: prose.ModelText(a.plan, "least squares", fixed, random), Fixed: fixed, Random: random,
		Hypothesis: hypothesis, DFMethod: "residual", Converged: true, LogLikelihood: result.NaN, AICc: result.NaN}
}

// upperF is the upper tail of F, NaN where F is.
func upperF(f float64, d1 int, d2 float64) float64 {
	if math.IsNaN(f) || d1 < 1 || d2 <= 0 {
		return math.NaN()
	}
	return dist.FUpper(f, float64(d1), d2)
}
