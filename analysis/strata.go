package analysis

import (
	"errors"
	"fmt"
	"math"

	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/strata"
	"penwright/protocol/factor"
)

// byStrata is an analysis of variance by strata.
type byStrata struct {
	rows  *rows
	units []int // plan units of the strata, coarse before fine
	an    *strata.Analysis
	st    *strata.Structure
	tests []test // of the terms
	at    int    // position of the bottom unit among units
	inst  []int32
	y     []float64 // values of the bottom unit's rows
}

// fitStrata analyses the rows by strata, or says what in the structure forbids it.
func (a *analyst) fitStrata(x *rows) error {
	d := strata.Design{Terms: a.modelTerms()}
	s := &byStrata{rows: x, units: x.units(), inst: a.at.inst, y: a.at.y}
	for k, u := range s.units {
		f := x.unitFactor(u)
		d.Units = append(d.Units, f)
		// Of a single block left nothing is known of how blocks vary: it is no source of error.
		d.Random = append(d.Random, a.plan.Units[u].Random && f.Compact().N > 1)
		if u == a.bottom {
			s.at = k
		}
	}
	if x == a.at {
		d.Factors = a.classes
	} else {
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
			d.Factors = append(d.Factors, factor.Factor{Level: level, N: len(a.present[k])})
		}
	}
	var err error
	if s.st, err = strata.New(d); err != nil {
		return err
	}
	s.an = s.st.Analyse(x.y)
	partial := a.plan.Protocol.Analysis.Adjustment == "auto" || a.plan.Protocol.Analysis.Adjustment == "" || a.plan.Protocol.Analysis.Adjustment == "partial"
	for k := range a.terms {
		st := s.an.Strata[s.st.Stratum(k)]
		line := s.an.Terms[k]
		t := test{df: line.DF, ss: line.SS, errorDF: float64(st.ErrorDF), errorMS: a.quiet(st.ErrorMS()), stratum: s.units[s.st.Stratum(k)], estimable: true}
		if st.ErrorDF < 1 {
			return noError{term: a.terms[k]}
		}
		if partial && len(a.terms) > 1 {
			h, err := s.an.Partial(k)
			if err != nil || h.Stratum != s.st.Stratum(k) {
				return noHypothesis{term: a.terms[k]}
			}
			t.ss, t.df = h.SS, h.DF
		}
		s.tests = append(s.tests, t)
	}
	a.model, a.st = s, s
	a.strataTable(s, partial)
	return nil
}

// noError says that a term's stratum leaves nothing to test it against.
type noError struct{ term int }

func (noError) Error() string { return "analysis: a stratum without error" }

// noHypothesis says that the partial hypothesis of a term lies in no single stratum.
type noHypothesis struct{ term int }

func (noHypothesis) Error() string { return "analysis: a hypothesis over several strata" }

// strataText says in words why a structure cannot be analysed by strata.
func strataText(a *analyst, err error) string {
	units := a.rows.units()
	unit := func(u int) string {
		if u < 0 || u >= len(units) {
			return "unit"
		}
		return prose.UnitName(&a.plan.Units[units[u]])
	}
	term := func(t int) string { return a.plan.Terms[a.terms[t]].Name }
	var spread strata.SpreadTerm
	var orth strata.NotOrthogonal
	var unequal strata.UnequalUnit
	var uno strata.UnitsNotOrthogonal
	var unc strata.UnitsNotClosed
	var ne noError
	var nh noHypothesis
	switch {
	case errors.As(err, &spread):
		return fmt.Sprintf("%s lies partly between larger units", term(spread.Term))
	case errors.As(err, &orth):
		return fmt.Sprintf("%s and %s are not combined in proportional numbers", term(orth.A), term(orth.B))
	case errors.As(err, &unequal):
		return fmt.Sprintf("%s differ in size", prose.Plural(unit(unequal.Unit)))
	case errors.As(err, &uno):
		return fmt.Sprintf("%s and %s cross in unequal numbers", prose.Plural(unit(uno.A)), prose.Plural(unit(uno.B)))
	case errors.As(err, &unc):
		return fmt.Sprintf("%s and %s have in common what is no unit", prose.Plural(unit(unc.A)), prose.Plural(unit(unc.B)))
	case errors.As(err, &ne):
		return fmt.Sprintf("nothing is left to test %s against", a.plan.Terms[ne.term].Name)
	case errors.As(err, &nh):
		return fmt.Sprintf("the means of %s draw on the variation of several units", a.plan.Terms[nh.term].Name)
	}
	return "the layout is not balanced"
}

func (s *byStrata) test(k int) test       { return s.tests[k] }
func (s *byStrata) means(k int) estimates { return strataMeans{m: s.an.Means(k)} }
func (s *byStrata) residuals() residuals {
	r := s.an.Residuals(s.at)
	out := residuals{df: r.DF, ms: r.MS}
	for i, u := range s.inst {
		out.fitted = append(out.fitted, s.y[i]-r.Value[u])
		out.leverage = append(out.leverage, r.Leverage[u])
	}
	return out
}

// strataMeans are means whose variances mix the errors of strata.
type strataMeans struct{ m *strata.Means }

func (m strataMeans) count() int           { return len(m.m.Value) }
func (m strataMeans) value(i int) float64  { return m.m.Value[i] }
func (m strataMeans) cov(i, j int) float64 { return m.m.Cov(i, j) }

func (m strataMeans) variance(i int) (float64, float64) {
	e := m.m.Mean(i)
	return e.Variance, e.DF
}

func (m strataMeans) diff(i, j int) (float64, float64) {
	e := m.m.Difference(i, j)
	return e.Variance, e.DF
}

func (m strataMeans) contrast(w []float64) (value, variance, df float64) {
	e := m.m.Contrast(w)
	return e.Value, e.Variance, e.DF
}

func (m strataMeans) test(contrasts [][]float64) test {
	h, err := m.m.Test(contrasts)
	if err != nil {
		return test{ss: math.NaN()}
	}
	return test{ss: h.SS, df: h.DF}
}

// strataTable fills the analysis of variance, tests, components and model.
func (a *analyst) strataTable(s *byStrata, partial bool) {
	out := a.out
	treated := 0
	for k, u := range s.units {
		st := s.an.Strata[k]
		name := a.plan.Units[u].Name
		if st.DF == 0 {
			continue
		}
		if len(st.Terms) == 0 {
			source := name
			if u == a.rows.unit && a.plan.Coarse(a.bottom, u) == nil {
				source = "residual" // sampling units: what is left at the end
			}
			out.Anova = append(out.Anova, result.Line{Stratum: &name, Source: source, DF: st.DF, SS: result.Number(st.SS), MS: result.Number(st.SS / float64(st.DF)), F: result.NaN, P: result.NaN})
			continue
		}
		treated++
		ordered := termsOf(s, k)
		for _, t := range ordered {
			x := s.tests[t]
			edf := result.Number(x.errorDF)
			f := x.f()
			l := result.Line{Stratum: &name, Source: a.plan.Terms[a.terms[t]].Name, DF: x.df, SS: result.Number(x.ss), MS: result.Number(x.ms()), F: result.Number(f), P: result.Number(upperF(f, x.df, x.errorDF)), ErrorDF: &edf}
			out.Anova = append(out.Anova, l)
		}
		if st.ErrorDF > 0 {
			out.Anova = append(out.Anova, result.Line{Stratum: &name, Source: "residual", DF: st.ErrorDF, SS: result.Number(st.ErrorSS), MS: result.Number(st.ErrorMS()), F: result.NaN, P: result.NaN})
		}
		cv := result.NaN
		if out.GrandMean != 0 {
			cv = result.Number(100 * math.Sqrt(st.ErrorMS()) / math.Abs(float64(out.GrandMean)))
		}
		out.Strata = append(out.Strata, result.StratumResult{Name: name, CVPercent: cv})
		if a.quiet(st.ErrorMS()) == 0 {
			a.note("no-variation", "", prose.Exact())
		}
	}
	for k, t := range a.terms {
		x := s.tests[k]
		f := x.f()
		out.Tests = append(out.Tests, result.Test{Source: a.plan.Terms[t].Name, DF: x.df, ErrorDF: result.Number(x.errorDF), F: result.Number(f), P: result.Number(upperF(f, x.df, x.errorDF)), Planned: true})
		name := a.plan.Units[x.stratum].Name
		a.insertParts(k, &name)
		if u := a.plan.Terms[t].Unit; a.plan.Units[x.stratum].N < a.plan.Units[u].N {
			a.note("other-stratum", a.plan.Terms[t].Name, prose.OtherStratum(a.plan, a.plan.Terms[t].Name, u, x.stratum))
		}
	}
	if treated == 1 {
		out.CVPercent = out.Strata[0].CVPercent
	}
	var fixed, random []string
	for k, u := range s.units {
		name := a.plan.Units[u].Name
		if a.plan.Units[u].Random || len(s.an.Strata[k].Terms) > 0 || k == len(s.units)-1 {
			random = append(random, name)
		} else {
			fixed = append(fixed, name)
		}
		component := name
		if k == len(s.units)-1 {
			component = "residual"
		}
		estimate, se := s.an.Component(k)
		if !math.IsNaN(estimate) {
			out.Components = append(out.Components, result.Component{Term: component, Estimate: result.Number(estimate), SE: result.Number(se)})
		}
	}
	if a.plan.Protocol.Analysis.Limits == "profile" && len(out.Components) > 0 {
		a.note("no-profile-limits", "", prose.NoProfileLimits())
	}
	for _, t := range a.terms {
		fixed = append(fixed, a.plan.Terms[t].Name)
	}
	hypothesis := "partial"
	if !partial {
		hypothesis = a.plan.Protocol.Analysis.Adjustment
	}
	out.Model = &result.Model{Method: "strata", Text: prose.ModelText(a.plan, "strata", fixed, random), Fixed: fixed, Random: random,
		Hypothesis: hypothesis, DFMethod: "stratum", Converged: true, LogLikelihood: result.NaN, AICc: result.NaN}
}

// termsOf lists the terms of a stratum in the order of the plan.
func termsOf(s *byStrata, k int) []int {
	in := map[int]bool{}
	for _, t := range s.an.Strata[k].Terms {
		in[t] = true
	}
	var out []int
	for t := range s.tests {
		if in[t] {
			out = append(out, t)
		}
	}
	return out
}

// insertParts adds the parts of listed treatments behind the line of their term.
func (a *analyst) insertParts(k int, stratum *string) {
	before := len(a.out.Anova)
	a.partLines(k, stratum)
	parts := append([]result.Line(nil), a.out.Anova[before:]...)
	if len(parts) == 0 {
		return
	}
	lines := a.out.Anova[:before]
	name := a.plan.Terms[a.terms[k]].Name
	for i := range lines {
		if lines[i].Source == name && lines[i].Stratum != nil && *lines[i].Stratum == *stratum {
			rest := append([]result.Line(nil), lines[i+1:]...)
			a.out.Anova = append(append(lines[:i+1:i+1], parts...), rest...)
			return
		}
	}
}

// efficiencies says what the larger units gained, where one kind of unit was treated
// and nothing but treatments lies in its stratum.
func (a *analyst) efficiencies() {
	if a.st == nil || len(a.out.Strata) != 1 {
		return
	}
	s := a.st
	err := s.an.Strata[s.at]
	if err.ErrorDF < 1 || a.quiet(err.ErrorMS()) == 0 {
		return
	}
	treatment := 0
	for _, t := range s.tests {
		treatment += t.df
	}
	var larger []int
	for k, u := range s.units {
		if k != s.at && a.plan.Coarse(a.bottom, u) != nil && s.an.Strata[k].DF > 0 {
			larger = append(larger, k)
		}
	}
	add := func(removed []int, of, against string) {
		var ms []strata.MeanSquare
		for _, k := range removed {
			st := s.an.Strata[k]
			ms = append(ms, strata.MeanSquare{MS: st.SS / float64(st.DF), DF: st.DF})
		}
		_, corrected := strata.Efficiency(ms, treatment, strata.MeanSquare{MS: err.ErrorMS(), DF: err.ErrorDF})
		if !math.IsNaN(corrected) {
			a.out.Efficiency = append(a.out.Efficiency, result.Efficiency{Name: prose.EfficiencyName(of, against), Value: result.Number(corrected),
				Text: prose.Efficiency(corrected, of, against, prose.Plural(prose.UnitName(&a.plan.Units[a.bottom])))})
		}
	}
	name := func(k int) string { return prose.Plural(prose.UnitName(&a.plan.Units[s.units[k]])) }
	switch {
	case len(larger) == 1:
		add(larger, name(larger[0]), "none")
	case len(larger) > 1:
		var all []string
		for _, k := range larger {
			all = append(all, name(k))
		}
		add(larger, prose.And(all), "none")
		for i, k := range larger {
			var rest []string
			for j, other := range larger {
				if j != i {
					rest = append(rest, name(other))
				}
			}
			add([]int{k}, prose.And(all), prose.And(rest)+" alone")
		}
	}
}
