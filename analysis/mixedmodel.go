package analysis

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"penwright/analysis/dist"
	"penwright/analysis/mixed"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// mixedModel is a model with several variances, fitted by residual maximum likelihood.
type mixedModel struct {
	rows   *rows
	fit    *mixed.Fit
	model  mixed.Model
	tests  []test      // of the terms
	terms  [][]int     // of each term, indices into the model's factors
	part   []int       // of each term, its part
	covs   []int       // of each covariate in the model, its part
	trend  int         // the unit with a trend of its own, or -1
	random []component // of each random term of the model

	structure *covariance // of repeated records; nil: independent
	group     int         // the factor by which the residual variance differs, plus one
	carry     int         // the part of carry-over effects, or -1
	carried   int         // the factor whose effects carry over
	sequence  int         // the part of sequences, or -1
	crossed   []fixedPart // interactions of fixed units with treatments
	names     []string    // of the fixed part
}

// fixedPart is a part of a mixed model with a test of its own.
type fixedPart struct {
	name string
	part int
}

// component says what a random term of a mixed model is.
type component struct {
	name  string // as results write it
	unit  int    // index into plan.Units
	cross int    // index into plan.Crossed, or -1
}

func (x *mixedModel) test(k int) test       { return x.tests[k] }
func (x *mixedModel) means(k int) estimates { return mixedMeans{x.fit.Means(x.terms[k])} }

func (x *mixedModel) residuals() residuals {
	e, variance, row := x.fit.Residuals()
	out := residuals{}
	free := 0.0
	for i, v := range variance {
		out.fitted = append(out.fitted, x.rows.y[i]-e[i])
		// With a negative component a residual may vary more than its row.
		of := math.Max(v, row[i])
		out.leverage = append(out.leverage, 1-v/of)
		out.scale = append(out.scale, math.Sqrt(of))
		free += v / row[i]
	}
	out.df, out.ms = max(1, int(math.Round(free))), 1
	return out
}

// mixedMeans are adjusted means of a mixed model.
type mixedMeans struct{ f *mixed.Functions }

func (m mixedMeans) count() int           { return len(m.f.Value) }
func (m mixedMeans) value(i int) float64  { return m.f.Value[i] }
func (m mixedMeans) cov(i, j int) float64 { return m.f.Cov(i, j) }

func (m mixedMeans) contrast(w []float64) (value, variance, df float64) { return m.f.Contrast(w) }

func (m mixedMeans) diff(i, j int) (variance, df float64) { return m.f.Difference(i, j) }

func (m mixedMeans) variance(i int) (variance, df float64) {
	w := make([]float64, m.count())
	w[i] = 1
	_, variance, df = m.f.Contrast(w)
	return variance, df
}

func (m mixedMeans) test(contrasts [][]float64) test { return mixedTest(m.f.Test(contrasts)) }

// mixedTest is a test of a mixed model: F with df of its own.
func mixedTest(t mixed.Test) test {
	out := test{df: t.DF, ss: math.NaN(), own: t.F, errorDF: t.ErrorDF, errorMS: math.NaN(), stratum: -1, whole: t.DF == 0, estimable: t.Estimable}
	if t.F == 0 {
		out.own = math.SmallestNonzeroFloat64
	}
	if !(t.F >= 0 && t.ErrorDF > 0) {
		// So little is known of the variances that F has no approximation.
		out.own, out.errorDF = math.NaN(), math.NaN()
	}
	return out
}

// covariance is the structure of the residual of a mixed model, beside its random units.
type covariance struct {
	name string // as the protocol writes it
	kind mixed.Kind
	unit bool // the unit measured is random, and its records have one variance
}

// fitMixed fits what neither strata nor least squares hold: units that received treatments
// are random, as are those that the plan says; the others are fixed. With a structure c the
// records of the unit that is measured repeatedly are correlated by it.
func (a *analyst) fitMixed(c *covariance) (*mixedModel, *refusal) {
	a.moveTo(a.rows)
	a.covs = nil
	x := &mixedModel{rows: a.rows, structure: c}
	m, refused := a.mixedFixed(x)
	if refused != nil {
		return nil, refused
	}
	a.mixedRandom(x, m)
	if a.plan.Protocol.Analysis.Components == "bounded" {
		for i := range m.Random {
			m.Random[i].Unbounded = false
		}
	}
	switch name := a.plan.Protocol.Analysis.VarianceBy; {
	case c != nil && !c.unit:
		var times []int
		times, m.Time = a.measured()
		m.Kind, m.Subject = c.kind, a.at.unitFactor(a.over.on)
		steps := a.over.protocol.Steps()
		for _, t := range times {
			m.Times = append(m.Times, steps[t])
		}
	case name != "":
		k := slices.IndexFunc(a.factors, func(f int) bool { return a.plan.Factors[f].Name == name })
		if k < 0 {
			return nil, &refusal{code: "not-carried-out", key: "analysis.variance_by", why: fmt.Sprintf("its variance by %s cannot be told on its unit", name)}
		}
		m.Group, x.group = a.classes[k], k+1
	}
	f, err := m.Fit()
	if err != nil {
		return nil, a.mixedRefusal(x, m, err)
	}
	if a.plan.Protocol.Analysis.DFMethod == "satterthwaite" {
		f.Satterthwaite()
	}
	x.fit, x.model = f, *m
	return x, nil
}

// finishMixed takes a mixed model as that of the response.
func (a *analyst) finishMixed(x *mixedModel) *refusal {
	a.model, a.mx = x, x
	if len(x.random) > 0 && a.plan.Protocol.Analysis.Components == "bounded" {
		a.note("components-bounded", "", prose.ComponentsBounded())
	}
	hypothesis := a.mixedTests(x)
	if refused := a.mixedExtras(x); refused != nil {
		a.model, a.mx = nil, nil
		return refused
	}
	a.mixedCovariates(x)
	a.mixedNotes(x)
	a.mixedResults(x, hypothesis)
	return nil
}

// moveTo makes the rows those of the model, and the classes of treatments theirs.
func (a *analyst) moveTo(x *rows) {
	if a.at == x {
		return
	}
	a.at = x
	for k, f := range a.factors {
		c := x.treatmentFactor(f)
		renumber := make([]int32, c.N)
		for n, l := range a.present[k] {
			renumber[l] = int32(n)
		}
		level := make([]int32, len(c.Level))
		for i, l := range c.Level {
			level[i] = renumber[l]
		}
		a.classes[k] = factor.Factor{Level: level, N: len(a.present[k])}
	}
}

// mixedFixed makes the fixed part: larger units that are fixed, a time trend, covariates,
// treatment terms.
func (a *analyst) mixedFixed(x *mixedModel) (*mixed.Model, *refusal) {
	names := &x.names
	m := &mixed.Model{Y: a.at.y, Factors: slices.Clone(a.classes)}
	x.trend, x.carry, x.sequence = -1, -1, -1
	if tt := a.plan.Protocol.TimeTrend; tt != nil {
		on, time, centre, refused := a.trendTimes()
		if refused != nil {
			return nil, refused
		}
		x.trend = on
		unit := len(m.Factors)
		m.Factors = append(m.Factors, a.at.unitFactor(on).Compact())
		m.Parts = append(m.Parts, mixed.Part{Factors: []int{unit}})
		for degree := 1; degree <= max(tt.Order, 1); degree++ {
			v := make([]float64, len(time))
			for i, t := range time {
				v[i] = math.Pow(t-centre, float64(degree))
			}
			m.Parts = append(m.Parts, mixed.Part{Factors: []int{unit}, Value: v})
		}
		*names = append(*names, tt.On, tt.On+":"+tt.Along)
	}
	for _, u := range a.fixedUnits() {
		if u == x.trend || x.trend >= 0 && a.plan.Coarse(x.trend, u) != nil {
			continue // the unit with a trend of its own, and what it lies in
		}
		m.Parts = append(m.Parts, mixed.Part{Factors: []int{len(m.Factors)}, Weights: a.evenly(u)})
		m.Factors = append(m.Factors, a.at.unitFactor(u).Compact())
		*names = append(*names, a.plan.Units[u].Name)
	}
	for k := range a.rows.resp.Covariates {
		v := a.at.covariates[k]
		a.covs = append(a.covs, k)
		x.covs = append(x.covs, len(m.Parts))
		m.Parts = append(m.Parts, mixed.Part{Value: v, At: mean(v)})
		*names = append(*names, a.rows.resp.Protocol.Covariates[k])
	}
	x.terms = a.modelTerms()
	for k, t := range x.terms {
		x.part = append(x.part, len(m.Parts))
		m.Parts = append(m.Parts, mixed.Part{Factors: t})
		*names = append(*names, a.plan.Terms[a.terms[k]].Name)
	}
	for _, c := range a.crossed(false) {
		part := []int{len(m.Factors)}
		m.Factors = append(m.Factors, a.at.unitFactor(c.Unit).Compact())
		part = append(part, x.terms[slices.Index(a.terms, c.Term)]...)
		x.crossed = append(x.crossed, fixedPart{name: c.Name, part: len(m.Parts)})
		m.Parts = append(m.Parts, mixed.Part{Factors: part})
		*names = append(*names, c.Name)
	}
	if a.plan.Protocol.CarryOver != nil {
		if refused := a.carryOver(x, m); refused != nil {
			return nil, refused
		}
	}
	return m, nil
}

// evenly gives the weights in means of the instances of a fixed unit that lie, not all in even
// numbers, in those of a larger one whose interactions with treatments are fixed too: each of
// the larger ones counts alike, as it does in the means over its interactions. Else nil.
func (a *analyst) evenly(u int) []float64 {
	for _, c := range a.crossed(false) {
		if c.Unit == u || a.plan.Coarse(u, c.Unit) == nil {
			continue
		}
		small, large := a.at.unitFactor(u).Compact(), a.at.unitFactor(c.Unit).Compact()
		in, held := make([]int32, small.N), make([]float64, large.N)
		for i, l := range small.Level {
			in[l] = large.Level[i]
		}
		for _, l := range in {
			held[l]++
		}
		out := make([]float64, small.N)
		for i, l := range in {
			out[i] = 1 / (held[l] * float64(large.N))
		}
		return out
	}
	return nil
}

// crossed lists the interactions of units with terms of the model, random or fixed.
func (a *analyst) crossed(random bool) []layout.Crossed {
	var out []layout.Crossed
	for _, c := range a.plan.Crossed {
		if c.Random == random && slices.Contains(a.terms, c.Term) && a.plan.Coarse(a.at.unit, c.Unit) != nil {
			out = append(out, c)
		}
	}
	return out
}

// fixedUnits lists the fixed units larger than the rows' that lie in no other one of them.
func (a *analyst) fixedUnits() []int {
	var all []int
	for _, u := range a.at.units() {
		if u != a.at.unit && !a.plan.Units[u].Random {
			all = append(all, u)
		}
	}
	var out []int
	for _, u := range all {
		finest := true
		for _, v := range all {
			finest = finest && (v == u || a.plan.Coarse(v, u) == nil)
		}
		if finest {
			out = append(out, u)
		}
	}
	return out
}

// mixedRandom adds the variance components. A unit whose rows stand alone, or are those of
// another unit or of the whole trial, has none of its own; nor has one within which fixed
// units take its differences up.
func (a *analyst) mixedRandom(x *mixedModel, m *mixed.Model) {
	fixed := a.fixedUnits()
	if x.trend >= 0 {
		fixed = append(fixed, x.trend)
	}
	add := func(c component, f factor.Factor, unbounded bool) {
		f = f.Compact()
		if f.N < 2 || f.N == len(a.at.y) {
			return
		}
		for _, r := range m.Random {
			if factor.Equivalent(r.Factor, f) {
				return
			}
		}
		x.random = append(x.random, c)
		m.Random = append(m.Random, mixed.Random{Factor: f, Unbounded: unbounded})
	}
	for _, u := range a.at.units() {
		unit := &a.plan.Units[u]
		if u == a.at.unit || !unit.Random {
			continue
		}
		if x.structure != nil && !x.structure.unit && u == a.over.on {
			continue // its records are correlated instead
		}
		taken := false
		for _, v := range fixed {
			taken = taken || a.plan.Coarse(v, u) != nil
		}
		if taken {
			continue
		}
		add(component{name: unit.Name, unit: u, cross: -1}, a.at.unitFactor(u), unit.Role == layout.Experimental)
	}
	for i, c := range a.plan.Crossed {
		if !c.Random || !slices.Contains(a.terms, c.Term) || a.plan.Coarse(a.at.unit, c.Unit) == nil {
			continue
		}
		fs := []factor.Factor{a.at.unitFactor(c.Unit)}
		for _, k := range x.terms[slices.Index(a.terms, c.Term)] {
			fs = append(fs, a.classes[k])
		}
		add(component{name: c.Name, unit: c.Unit, cross: i}, factor.Infimum(fs...), false)
	}
}

// exact tells whether fixed and random effects together give every value.
func exact(m mixed.Model) bool {
	m.Parts, m.Factors = slices.Clone(m.Parts), slices.Clone(m.Factors)
	add := func(f factor.Factor) {
		m.Parts = append(m.Parts, mixed.Part{Factors: []int{len(m.Factors)}})
		m.Factors = append(m.Factors, f.Compact())
	}
	for _, r := range m.Random {
		add(r.Factor)
	}
	if m.Kind != mixed.Independent {
		add(m.Subject)
	}
	without, err := m.Rank()
	if err != nil || without >= len(m.Y) {
		return false
	}
	m.Parts = append(m.Parts, mixed.Part{Value: m.Y})
	with, err := m.Rank()
	return err == nil && with == without
}

func (a *analyst) mixedRefusal(x *mixedModel, m *mixed.Model, err error) *refusal {
	var large mixed.TooLarge
	var no mixed.NoError
	var not mixed.NotConverged
	var singular mixed.ErrSingular
	var confounded mixed.Confounded
	switch {
	case errors.As(err, &confounded):
		return &refusal{code: "no-error", why: "the fixed part of its model leaves nothing to tell how " + prose.Variation(a.plan, x.random[confounded.Random].name) + " vary",
			hint: a.fewerTerms(func(int) bool { return false })}
	case errors.As(err, &large):
		return &refusal{code: "too-large", why: fmt.Sprintf("its mixed model has %d fixed columns and %d levels of random units that cross, more than %d and %d",
			large.Columns, large.Levels, mixed.MaxColumns, mixed.MaxLevels)}
	case errors.As(err, &no):
		return &refusal{code: "no-error", why: fmt.Sprintf("%d degrees of freedom are left for %d variances", max(no.Left, 0), no.Parameters), hint: "fewer terms or larger units as fixed leave more; so do more units"}
	case errors.As(err, &not) && exact(*m):
		return &refusal{code: "no-error", why: "units and treatments together give every value as it is, and no variation is left to judge anything by", hint: "look whether the values are rounded, copied or computed from each other"}
	case errors.As(err, &not) && x.group > 0:
		return &refusal{code: "not-converged", key: "analysis.variance_by", why: prose.NotConverged(not.Iterations) + ", or one of them falls to zero",
			hint: "leave variance_by out; with few units, blocks = \"random\" leaves more to tell variances by"}
	case errors.As(err, &not):
		return &refusal{code: "not-converged", why: prose.NotConverged(not.Iterations), hint: prose.NotConvergedAdvice()}
	case errors.As(err, &singular):
		var names []string
		for _, c := range x.random {
			names = append(names, c.name)
		}
		return &refusal{code: "not-told-apart", why: prose.NotToldApart(names), hint: "leave one of the units out, or set random = false on one of them"}
	}
	return &refusal{code: "not-finite", why: "its values or covariates are not all finite numbers"}
}

// mixedTests tests the terms, by adjusted means where all cells are filled, and says which
// hypothesis it took.
func (a *analyst) mixedTests(x *mixedModel) string {
	adjustment := a.plan.Protocol.Analysis.Adjustment
	if adjustment == "" || adjustment == "auto" {
		adjustment = "partial"
		empty := 0
		for _, t := range x.terms {
			if len(t) < 2 {
				continue
			}
			cells := 1
			var fs []factor.Factor
			for _, f := range t {
				cells *= x.model.Factors[f].N
				fs = append(fs, x.model.Factors[f])
			}
			empty = max(empty, cells-factor.Infimum(fs...).N)
		}
		if empty > 0 {
			adjustment = "marginal"
			a.note("empty-cells", "", prose.EmptyCells(empty))
		}
	}
	for k, t := range x.terms {
		var y mixed.Test
		if adjustment == "partial" {
			y = x.fit.Means(t).Test(interaction(sizes(x.model.Factors, t)))
		} else {
			var after []int
			for p := range x.model.Parts {
				if p == x.part[k] || adjustment == "sequential" && p > x.part[k] || contains(x.model.Parts[p].Factors, t) {
					continue
				}
				after = append(after, p)
			}
			y = x.fit.Adjusted([]int{x.part[k]}, after)
		}
		z := mixedTest(y)
		z.lost = interactionDF(sizes(x.model.Factors, t)) - z.df
		x.tests = append(x.tests, z)
	}
	return adjustment
}

// contains tells whether all of in stand among fs.
func contains(fs, in []int) bool {
	for _, f := range in {
		if !slices.Contains(fs, f) {
			return false
		}
	}
	return len(in) > 0
}

func sizes(fs []factor.Factor, term []int) []int {
	var out []int
	for _, f := range term {
		out = append(out, fs[f].N)
	}
	return out
}

// interactionDF is the df of an interaction with all cells.
func interactionDF(sizes []int) int {
	n := 1
	for _, s := range sizes {
		n *= s - 1
	}
	return n
}

// interaction gives the contrasts, over cells with the last factor fastest, whose being
// zero is the hypothesis of a term: products of each level less the last.
func interaction(sizes []int) [][]float64 {
	out := [][]float64{{1}}
	for _, n := range sizes {
		var next [][]float64
		for _, c := range out {
			for i := range n - 1 {
				w := make([]float64, 0, len(c)*n)
				for _, v := range c {
					for l := range n {
						switch l {
						case i:
							w = append(w, v)
						case n - 1:
							w = append(w, -v)
						default:
							w = append(w, 0)
						}
					}
				}
				next = append(next, w)
			}
		}
		out = next
	}
	return out
}

// mixedCovariates fills the slopes, and tests whether they are the same in all cells.
func (a *analyst) mixedCovariates(x *mixedModel) {
	for i, k := range a.covs {
		name := a.rows.resp.Protocol.Covariates[k]
		s := x.fit.Slopes(x.covs[i])
		c := result.Covariate{Name: name, Slope: result.Number(s.Value[0]), SE: result.NaN, DF: result.NaN, P: result.NaN, EqualSlopesP: result.NaN}
		if !s.Estimable[0] {
			a.note("covariate-aliased", name, prose.CovariateAliased(a.plan, name))
			a.note("equal-slopes", name, prose.EqualSlopesUntested(a.plan, name))
			a.out.Covariates = append(a.out.Covariates, c)
			continue
		}
		_, v, df := s.Contrast([]float64{1})
		if v > 0 {
			t := s.Value[0] / math.Sqrt(v)
			c.SE, c.DF, c.P = result.Number(math.Sqrt(v)), result.Number(df), result.Number(dist.TTwoSided(t, df))
			a.out.Tests = append(a.out.Tests, result.Test{Source: name, DF: 1, ErrorDF: c.DF, F: result.Number(t * t), P: c.P, Planned: true})
		}
		if p := a.equalSlopes(x, i); !math.IsNaN(p) {
			c.EqualSlopesP = result.Number(p)
			if p < a.alpha {
				a.note("slopes-differ", "", prose.SlopesDiffer(a.plan, name, p))
			}
		} else {
			a.note("equal-slopes", name, prose.EqualSlopesUntested(a.plan, name))
		}
		a.out.Covariates = append(a.out.Covariates, c)
	}
}

// equalSlopes is the P of the test that covariate i has the same slope in all treatments;
// NaN where slopes cannot be told apart.
func (a *analyst) equalSlopes(x *mixedModel, i int) float64 {
	m := x.model
	m.Parts = slices.Clone(m.Parts)
	var own, others []int
	for p := range m.Parts {
		others = append(others, p)
	}
	for _, t := range x.terms {
		own = append(own, len(m.Parts))
		m.Parts = append(m.Parts, mixed.Part{Factors: t, Value: m.Parts[x.covs[i]].Value, At: m.Parts[x.covs[i]].At})
	}
	f, err := m.Fit()
	if err != nil {
		return math.NaN()
	}
	if a.plan.Protocol.Analysis.DFMethod == "satterthwaite" {
		f.Satterthwaite()
	}
	t := f.Adjusted(own, others)
	if t.DF < 1 {
		return math.NaN()
	}
	return upperF(t.F, t.DF, t.ErrorDF)
}

// mixedWhy notes why values that strata do not hold need a mixed model.
func (a *analyst) mixedWhy(why error) {
	if why == nil {
		return
	}
	if lost := a.plan.Units[a.at.unit].N - len(a.at.inst); lost > 0 {
		a.note("units-lost", "", prose.MixedLost(a.plan, a.at.unit, lost, a.plan.Units[a.at.unit].N))
		return
	}
	a.note("not-balanced", "", prose.MixedNotBalanced(strataText(a, why)))
}

// mixedNotes says what qualifies the results of a mixed model.
func (a *analyst) mixedNotes(x *mixedModel) {
	for i, c := range x.random {
		switch {
		case x.fit.Bound[i]:
			a.note("component-zero", c.name, prose.ComponentZero(a.plan, c.name))
		case x.fit.Theta[i] < 0:
			a.note("component-negative", c.name, prose.ComponentNegative(a.plan, c.name))
		}
		if n := x.model.Random[i].Factor.N; n < 5 {
			a.note("few-levels", c.name, prose.FewLevels(a.plan, c.name, n))
		}
	}
	for _, bound := range x.fit.Bound[len(x.random):] {
		if bound {
			a.note("correlation-zero", "", prose.CorrelationZero(a.over.protocol.Name))
		}
	}
	if x.fit.Smallest < 1e-3 {
		a.note("components-hardly-told", "", prose.HardlyTold())
	}
	if x.fit.Starts > 1 {
		a.note("several-maxima", "", prose.SeveralMaxima(x.fit.Starts))
	}
}

// mixedResults fills tests, components and the model.
func (a *analyst) mixedResults(x *mixedModel, hypothesis string) {
	out, fit := a.out, x.fit
	for k, t := range a.terms {
		y := x.tests[k]
		name := a.plan.Terms[t].Name
		switch {
		case !y.estimable:
			a.note("not-testable", name, prose.NotTestable(a.plan, name))
		case y.df > 0 && !(y.own > 0):
			a.note("no-variation", name, prose.NoApproximation(a.plan, name))
		case y.lost > 0 || y.whole:
			a.note("term-lost", name, prose.TermLost(a.plan, name, y.lost, y.whole))
		}
		f := y.f()
		out.Tests = append(out.Tests, result.Test{Source: name, DF: y.df, ErrorDF: result.Number(y.errorDF), F: result.Number(f), P: result.Number(upperF(f, y.df, y.errorDF)), Planned: true})
		a.partLines(k, nil)
	}
	out.Tests = append(out.Tests, a.extra...)
	var random []string
	for i, c := range x.random {
		random = append(random, c.name)
		out.Components = append(out.Components, result.Component{Term: c.name, Estimate: result.Number(fit.Theta[i]), SE: result.Number(fit.SE[i]), Boundary: fit.Bound[i]})
	}
	a.residualComponents(x)
	if a.plan.Protocol.Analysis.Limits == "profile" {
		a.profileLimits(x)
	}
	random = append(random, a.plan.Units[a.at.unit].Name)
	treated := map[int]bool{}
	for _, t := range a.terms {
		treated[a.plan.Terms[t].Unit] = true
	}
	if n := len(x.random); out.GrandMean != 0 && len(treated) == 1 && treated[a.at.unit] && x.group == 0 && x.structure == nil {
		out.CVPercent = result.Number(100 * math.Sqrt(fit.Theta[n]) / math.Abs(float64(out.GrandMean)))
		out.Strata = append(out.Strata, result.StratumResult{Name: a.plan.Units[a.at.unit].Name, CVPercent: out.CVPercent})
	}
	df := "kenward-roger"
	if a.plan.Protocol.Analysis.DFMethod == "satterthwaite" {
		df = "satterthwaite"
	}
	out.Model = &result.Model{Method: "reml", Text: prose.ModelText(a.plan, "reml", x.names, random), Fixed: x.names, Random: random,
		Hypothesis: hypothesis, DFMethod: df, Converged: true, LogLikelihood: result.Number(-fit.Deviance / 2), AICc: result.Number(x.aicc())}
}

// aicc is −2ℓ_R + 2qm/(m − q − 1), with m = n − p and q the parameters not at a bound; NaN
// where there are too few rows for it.
func (x *mixedModel) aicc() float64 {
	q := float64(x.parameters())
	m := float64(x.fit.N - x.fit.Rank)
	if m-q-1 <= 0 {
		return math.NaN()
	}
	return x.fit.Deviance + 2*q*m/(m-q-1)
}

// parameters counts the variances and correlations that are not at a bound.
func (x *mixedModel) parameters() int {
	q := 0
	for _, b := range x.fit.Bound {
		if !b {
			q++
		}
	}
	return q
}

// residualComponents lists what belongs to the residual: one variance, one for each level of
// a factor, or the parameters of a structure.
func (a *analyst) residualComponents(x *mixedModel) {
	out, fit, n := a.out, x.fit, len(x.random)
	add := func(name string, i int) {
		out.Components = append(out.Components, result.Component{Term: name, Estimate: result.Number(fit.Theta[i]), SE: result.Number(fit.SE[i])})
	}
	switch {
	case x.group > 0:
		f := a.factors[x.group-1]
		for l, level := range a.present[x.group-1] {
			add("residual, "+a.plan.Factors[f].Levels[level], n+l)
		}
		a.equalVariances(x)
	case x.structure == nil || x.structure.unit || x.structure.kind == mixed.Autoregressive:
		add("residual", n)
	}
}

// profileLimits gives the components that are listed limits by the profile likelihood.
func (a *analyst) profileLimits(x *mixedModel) {
	missing := false
	for i := range a.out.Components {
		c := &a.out.Components[i]
		lower, upper := x.fit.Profile(i, a.alpha)
		missing = missing || math.IsNaN(lower) || math.IsNaN(upper)
		l, u := result.Number(lower), result.Number(upper)
		c.Lower, c.Upper = &l, &u
	}
	if len(a.out.Components) > 0 {
		a.note("profile-limits", "", prose.ProfileLimits(1-a.alpha, missing))
	}
}

// equalVariances tests, by the likelihood, that the residual variance is the same at all
// levels of the factor by which it was let differ.
func (a *analyst) equalVariances(x *mixedModel) {
	m := x.model
	m.Group = factor.Factor{}
	same, err := m.Fit()
	if err != nil {
		return
	}
	df := x.model.Group.N - 1
	chi := math.Max(0, same.Deviance-x.fit.Deviance)
	a.out.Diagnostics = append(a.out.Diagnostics, result.Diagnostic{Name: "equal variances", Statistic: result.Number(chi), DF: result.Number(df),
		P: result.Number(dist.ChiSquaredUpper(chi, float64(df))), Text: prose.EqualVariance(dist.ChiSquaredUpper(chi, float64(df)))})
}

// mixedExtras tests what is in a mixed model beside treatments: carry-over, sequences,
// interactions of fixed units.
func (a *analyst) mixedExtras(x *mixedModel) *refusal {
	test := func(name string, part int) mixed.Test {
		var after []int
		for p := range x.model.Parts {
			if p != part {
				after = append(after, p)
			}
		}
		t := x.fit.Adjusted([]int{part}, after)
		if t.DF > 0 {
			a.extra = append(a.extra, result.Test{Source: name, DF: t.DF, ErrorDF: result.Number(t.ErrorDF), F: result.Number(t.F), P: result.Number(upperF(t.F, t.DF, t.ErrorDF)), Planned: true})
		}
		return t
	}
	if x.sequence >= 0 {
		test("sequence", x.sequence)
	}
	if x.carry >= 0 {
		direct := x.fit.Means([]int{x.carried})
		if t := test("carry-over", x.carry); t.DF < x.model.Factors[x.carried].N-1 || !direct.Estimable[0] {
			return &refusal{code: "carry-over-aliased", key: "carryover", why: "carry-over effects cannot be told from those of sequences or treatments in this crossover",
				hint: "use more periods or other sequences; without [carryover] direct effects are compared as if nothing carried over"}
		}
	}
	for _, c := range x.crossed {
		test(c.name, c.part)
	}
	return nil
}

// whole gives a sequence of which not all is known as the only one among known ones that it
// can be; else as it is.
func whole(known [][]int32, s []int32) []int32 {
	if !slices.Contains(s[1:], -1) {
		return s
	}
	var found []int32
	for _, k := range known {
		fits := !slices.Contains(k[1:], -1)
		for i := range s {
			fits = fits && (s[i] < 0 || s[i] == k[i])
		}
		switch {
		case fits && found == nil:
			found = k
		case fits && !slices.Equal(found, k):
			return s
		}
	}
	if found == nil {
		return s
	}
	return found
}

// carryOver adds the effect of the treatment of the period before, none in the first
// period, and that of the sequence of treatments where a sequence has two animals.
func (a *analyst) carryOver(x *mixedModel, m *mixed.Model) *refusal {
	c := a.plan.Protocol.CarryOver
	on, along := unitIndex(a.plan, c.On), unitIndex(a.plan, c.Along)
	f := slices.IndexFunc(a.plan.Factors, func(f layout.Factor) bool { return f.Name == c.Factor })
	if on < 0 || along < 0 || f < 0 {
		return &refusal{code: "carry-over-aliased", key: "carryover", why: "its crossover is not laid out for carry-over"}
	}
	unit := a.plan.Factors[f].Unit
	k := slices.Index(a.factors, f)
	if unit < 0 || k < 0 || a.plan.Coarse(unit, on) == nil || a.plan.Coarse(unit, along) == nil || a.plan.Coarse(a.at.unit, unit) == nil {
		return &refusal{code: "carry-over-aliased", key: "carryover", why: "its rows do not lie within the units of the crossover"}
	}
	level := a.trial.Allotment.LevelAt(f, unit)
	number := periodNumber(a.plan, along)
	last := 0
	for _, n := range number {
		last = max(last, int(n))
	}
	given := make([][]int32, a.plan.Units[on].N) // by animal and period; -1: nothing known
	for i := range given {
		given[i] = slices.Repeat([]int32{-1}, last+1)
	}
	for i, o := range a.plan.Coarse(unit, on) {
		given[o][int(number[a.plan.Coarse(unit, along)[i]])] = level[i]
	}
	value := make([]float64, len(a.at.inst))
	before := factor.Factor{N: len(a.present[k]), Level: make([]int32, len(a.at.inst))}
	ofRow := a.plan.Coarse(a.at.unit, unit)
	for i, u := range a.at.inst {
		s := ofRow[u]
		o, n := a.plan.Coarse(unit, on)[s], int(number[a.plan.Coarse(unit, along)[s]])
		if n < 2 {
			continue
		}
		if given[o][n-1] < 0 {
			return &refusal{code: "unknown-treatment", key: "carryover", why: fmt.Sprintf("the level of %s before %s of %s is not known, and neither is what it left behind", a.plan.Factors[f].Name, prose.InstanceText(a.plan, along, a.plan.Coarse(unit, along)[s]), prose.InstanceText(a.plan, on, o)),
				hint: "give its row with an empty value, or bring the allotment along"}
		}
		at := slices.Index(a.present[k], int(given[o][n-1]))
		if at < 0 {
			return &refusal{code: "carry-over-aliased", key: "carryover", why: fmt.Sprintf("the effect of %s carries over, but no row with it is left", a.plan.Factors[f].Levels[given[o][n-1]])}
		}
		value[i], before.Level[i] = 1, int32(at)
	}
	x.carried = k
	x.carry = len(m.Parts)
	m.Parts = append(m.Parts, mixed.Part{Factors: []int{len(m.Factors)}, Value: value, At: float64(last-1) / float64(last)})
	m.Factors = append(m.Factors, before)
	x.names = append(x.names, "carry-over")
	// Sequences.
	known := map[string]int32{}
	count := map[int32]map[int32]bool{}
	sequence := factor.Factor{Level: make([]int32, len(a.at.inst))}
	for i, u := range a.at.inst {
		o := a.plan.Coarse(unit, on)[ofRow[u]]
		key := fmt.Sprint(whole(given, given[o]))
		if _, ok := known[key]; !ok {
			known[key] = int32(len(known))
			count[known[key]] = map[int32]bool{}
		}
		sequence.Level[i] = known[key]
		count[known[key]][o] = true
	}
	sequence.N = len(known)
	repeats := false
	for s := range int32(sequence.N) {
		repeats = repeats || len(count[s]) > 1
	}
	if repeats && sequence.N > 1 && a.plan.Units[on].Random {
		x.sequence = len(m.Parts)
		m.Parts = append(m.Parts, mixed.Part{Factors: []int{len(m.Factors)}})
		m.Factors = append(m.Factors, sequence)
		x.names = append(x.names, "sequence")
	}
	return nil
}
