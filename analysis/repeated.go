package analysis

import (
	"fmt"
	"math"
	"slices"

	"penwright/analysis/dataset"
	"penwright/analysis/dist"
	"penwright/analysis/linear"
	"penwright/analysis/mixed"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// repeated is a set of times within a unit, seen as a factor given to a unit of its own.
type repeated struct {
	protocol *protocol.Repeated
	on, unit int // in the extended plan: the unit measured, and its records
	factor   int // the times, in the extended plan
}

// overTime extends a trial by the records of a repeated response: a unit within the one that
// is measured, named UNIT:NAME, to which the times are given as a factor. What a split plot
// in time and the models of correlated records need follows from that plan as from any.
func overTime(t *trial.Trial, r *dataset.Response) (*trial.Trial, *dataset.Response, *repeated, *refusal) {
	p := t.Protocol
	rep := p.RepeatedNamed(r.Protocol.Repeated)
	on := unitIndex(t.Plan, rep.On)
	if r.Unit != on {
		return nil, nil, nil, &refusal{code: "repeated-unit", key: "", why: fmt.Sprintf("it is recorded on %s, but %s is repeated on %s", prose.UnitName(&t.Plan.Units[r.Unit]), rep.Name, prose.UnitName(&t.Plan.Units[on])),
			hint: fmt.Sprintf("set recorded_on = %q and say how values are brought together (aggregate)", rep.On)}
	}
	long := *p
	long.Repeated = nil
	long.Units, long.Factors = nil, nil
	gone := map[string]bool{}
	for i := range p.Units {
		if t.Plan.Coarse(on, i) == nil {
			for _, f := range append(slices.Clone(p.Units[i].Receives), p.Units[i].Carries...) {
				gone[f] = true
			}
			continue
		}
		long.Units = append(long.Units, p.Units[i])
	}
	for _, f := range p.Factors {
		if !gone[f.Name] {
			long.Factors = append(long.Factors, f)
		}
	}
	records := protocol.Unit{Name: rep.On + ":" + rep.Name, Within: rep.On, Count: []int{len(rep.At)}, Labels: [][]string{rep.At}, Receives: []string{rep.Name}}
	long.Units = append(long.Units, records)
	long.Factors = append(long.Factors, protocol.Factor{Name: rep.Name, Label: rep.Label, Unit: rep.Unit, Levels: rep.At, Values: rep.Values})
	plan, list := layout.New(&long)
	if plan == nil || list.HasErrors() {
		why := "the plan of its records cannot be made"
		if len(list) > 0 {
			why = list[0].Message
		}
		return nil, nil, nil, &refusal{code: "repeated-unit", why: why}
	}
	// What is fixed and what is random is decided by what units received in the trial; that
	// their records received times changes nothing.
	for i := range plan.Units {
		if j := unitIndex(t.Plan, plan.Units[i].Name); j >= 0 {
			plan.Units[i].Random = t.Plan.Units[j].Random
		}
	}
	x := &repeated{protocol: rep, on: unitIndex(plan, rep.On), unit: unitIndex(plan, records.Name)}
	times := len(rep.At)
	a := *t.Allotment
	a.Plan, a.Levels = plan, make([][]int32, len(plan.Factors))
	for i := range plan.Factors {
		if plan.Factors[i].Name == rep.Name && plan.Factors[i].Unit == x.unit {
			x.factor = i
			for k := range plan.Units[x.unit].N {
				a.Levels[i] = append(a.Levels[i], int32(k%times))
			}
			continue
		}
		for j := range t.Plan.Factors {
			if t.Plan.Factors[j].Name == plan.Factors[i].Name {
				a.Levels[i] = t.Allotment.Levels[j]
			}
		}
	}
	longer := *t
	longer.Protocol, longer.Plan, longer.Allotment = &long, plan, &a
	rows := *r
	rows.Unit, rows.Time = x.unit, nil
	rows.Instance = make([]int32, len(r.Instance))
	for i, u := range r.Instance {
		rows.Instance[i] = u*int32(times) + r.Time[i]
	}
	return &longer, &rows, x, nil
}

// splitPlotInTime is the correlation that an analysis by strata supposes.
const splitPlotInTime = "split plot in time"

// structures are the correlations that can be fitted, in the order in which they are tried.
var structures = []covariance{
	{name: "compound symmetry", unit: true},
	{name: "heterogeneous compound symmetry", kind: mixed.HeterogeneousSymmetric},
	{name: "autoregressive", kind: mixed.Autoregressive},
	{name: "heterogeneous autoregressive", kind: mixed.HeterogeneousAutoregressive},
	{name: "antedependence", kind: mixed.Antedependence},
	{name: "unstructured", kind: mixed.Unstructured},
}

// measured lists the times at which anything was measured, as indices into the planned ones,
// and gives that of each row of the model: a time without a record has no variance.
func (a *analyst) measured() (times []int, of []int32) {
	k := slices.Index(a.factors, a.over.factor)
	return a.present[k], a.classes[k].Level
}

// fitCorrelated fits repeated records with the correlation that the protocol names, or with
// the one of smallest AICc of all that converge.
func (a *analyst) fitCorrelated() *refusal {
	if a.at.unit != a.rows.unit {
		a.moveTo(a.rows)
	}
	wanted := a.over.protocol.Correlation
	if name := a.plan.Protocol.Analysis.VarianceBy; name != "" && wanted != structures[0].name {
		return &refusal{code: "not-carried-out", key: "analysis.variance_by", why: "a variance for each level of " + name + " is not fitted together with correlated records",
			hint: fmt.Sprintf("leave variance_by out, or set correlation = %q", structures[0].name)}
	}
	if wanted != "auto" && wanted != "" {
		i := slices.IndexFunc(structures, func(c covariance) bool { return c.name == wanted })
		x, refused := a.fitMixed(&structures[i])
		if refused != nil {
			return refused
		}
		a.correlation(x, nil)
		return a.finishMixed(x)
	}
	times, _ := a.measured()
	many := a.between() >= len(times)
	var best *mixedModel
	var first *refusal
	var tried []result.Candidate
	for i := range structures {
		c := &structures[i]
		if !many && (c.kind == mixed.Antedependence || c.kind == mixed.Unstructured) {
			continue
		}
		x, refused := a.fitMixed(c)
		if refused != nil {
			if first == nil {
				first = refused
			}
			tried = append(tried, result.Candidate{Kind: c.name, LogLikelihood: result.NaN, AICc: result.NaN})
			continue
		}
		tried = append(tried, result.Candidate{Kind: c.name, LogLikelihood: result.Number(-x.fit.Deviance / 2), Parameters: x.parameters(), AICc: result.Number(x.aicc())})
		if best == nil || x.aicc() < best.aicc() || math.IsNaN(best.aicc()) {
			best = x
		}
	}
	if best == nil {
		return first
	}
	if !many {
		a.note("structures-left-out", "", prose.StructuresLeftOut(prose.Plural(prose.UnitName(&a.plan.Units[a.over.on]))))
	}
	a.correlation(best, tried)
	return a.finishMixed(best)
}

// between is the residual df between the units that are measured.
func (a *analyst) between() int {
	means := a.rows.averaged(a.over.on)
	m := mixed.Model{Y: means.y}
	for _, u := range means.units() {
		if u != means.unit && !a.plan.Units[u].Random {
			m.Parts = append(m.Parts, mixed.Part{Factors: []int{len(m.Factors)}})
			m.Factors = append(m.Factors, means.unitFactor(u))
		}
	}
	for _, t := range a.terms {
		fs := a.plan.Terms[t].Factors
		if slices.Contains(fs, a.over.factor) {
			continue
		}
		var part []int
		for _, f := range fs {
			part = append(part, len(m.Factors))
			m.Factors = append(m.Factors, means.treatmentFactor(f))
		}
		m.Parts = append(m.Parts, mixed.Part{Factors: part})
	}
	rank, err := m.Rank()
	if err != nil {
		return 0
	}
	return len(means.y) - rank
}

// correlation tells the structure, its parameters, and what was tried.
func (a *analyst) correlation(x *mixedModel, tried []result.Candidate) {
	c := &result.Correlation{Kind: x.structure.name, Parameters: result.Parameters{}, Candidates: tried}
	if tried == nil {
		c.Candidates = []result.Candidate{}
	}
	th := x.fit.Theta[len(x.random):]
	times, _ := a.measured()
	var at []string
	for _, t := range times {
		at = append(at, a.over.protocol.At[t])
	}
	add := func(name string, v float64) {
		c.Parameters = append(c.Parameters, result.Parameter{Name: name, Value: result.Number(v)})
	}
	variances := func() {
		for i, t := range at {
			add("variance "+t, th[i])
		}
	}
	switch x.structure.kind {
	case mixed.Independent:
		for i, r := range x.random {
			switch {
			case r.unit != a.over.on || r.cross >= 0:
			case x.group > 0:
				f := &a.plan.Factors[a.factors[x.group-1]]
				for l, level := range a.present[x.group-1] {
					add("rho, "+f.Levels[level], x.fit.Theta[i]/(x.fit.Theta[i]+th[l]))
				}
			default:
				add("rho", x.fit.Theta[i]/(x.fit.Theta[i]+th[0]))
			}
		}
	case mixed.Autoregressive:
		add("rho", th[1])
	case mixed.HeterogeneousSymmetric, mixed.HeterogeneousAutoregressive:
		variances()
		add("rho", th[len(at)])
	case mixed.Antedependence:
		variances()
		for i := 1; i < len(at); i++ {
			add("rho "+at[i-1]+" "+at[i], th[len(at)+i-1])
		}
	case mixed.Unstructured:
		variances()
		k := len(at)
		for i := range at {
			for j := range i {
				add("covariance "+at[j]+" "+at[i], th[k])
				k++
			}
		}
	}
	a.out.Correlation = c
}

// sphericity tests what a split plot in time supposes of the correlation, and corrects the P
// of what is tested over the records, where every unit has all its records.
func (a *analyst) sphericity() {
	times := len(a.over.protocol.At)
	rows := map[int32][]int{} // by unit measured, in the order of times
	var units []int32
	up := a.plan.Coarse(a.over.unit, a.over.on)
	for i, u := range a.rows.inst {
		if rows[up[u]] == nil {
			rows[up[u]] = slices.Repeat([]int{-1}, times)
			units = append(units, up[u])
		}
		rows[up[u]][int(u)%times] = i
	}
	for _, u := range units {
		if slices.Contains(rows[u], -1) {
			a.note("no-sphericity", "", prose.NoSphericity())
			return
		}
	}
	residuals := make([][]float64, len(units))
	df := 0
	for t := range times {
		m := linear.Model{}
		pick := func(f factor.Factor) factor.Factor {
			out := factor.Factor{N: f.N}
			for _, u := range units {
				out.Level = append(out.Level, f.Level[rows[u][t]])
			}
			return out
		}
		for _, u := range units {
			m.Y = append(m.Y, a.rows.y[rows[u][t]])
		}
		for _, u := range a.rows.units() {
			if u != a.over.on && u != a.over.unit && a.plan.Coarse(a.over.on, u) != nil {
				m.Nuisance = append(m.Nuisance, pick(a.rows.unitFactor(u)))
			}
		}
		for _, f := range a.factors {
			c := a.rows.treatmentFactor(f)
			m.Factors = append(m.Factors, pick(c).Compact())
		}
		for _, fs := range a.modelTerms() {
			if !slices.ContainsFunc(fs, func(k int) bool { return a.factors[k] == a.over.factor }) {
				m.Terms = append(m.Terms, fs)
			}
		}
		f, err := m.Fit()
		if err != nil || f.DF < 1 {
			return
		}
		df = f.DF
		e, _ := f.Residuals()
		for i := range units {
			residuals[i] = append(residuals[i], e[i])
		}
	}
	if times < 3 {
		return
	}
	s := mixed.Sphere(residuals, df)
	if math.IsNaN(s.GreenhouseGeisser) {
		return
	}
	a.out.Sphericity = &result.Sphericity{W: result.Number(s.W), ChiSquared: result.Number(s.ChiSquared), DF: s.DF, P: result.Number(s.P),
		GreenhouseGeisser: result.Number(s.GreenhouseGeisser), HuynhFeldt: result.Number(s.HuynhFeldt)}
	for k, t := range a.terms {
		if !slices.Contains(a.plan.Terms[t].Factors, a.over.factor) {
			continue
		}
		x := a.model.test(k)
		for i := range a.out.Tests {
			if y := &a.out.Tests[i]; y.Source == a.plan.Terms[t].Name {
				corrected := func(e float64) result.Number {
					return result.Number(dist.FUpper(x.f(), e*float64(x.df), e*x.errorDF))
				}
				y.GreenhouseGeisser, y.HuynhFeldt = corrected(s.GreenhouseGeisser), corrected(s.HuynhFeldt)
			}
		}
	}
	if s.P < a.alpha {
		a.note("not-spherical", "", prose.NotSpherical(s.P, s.GreenhouseGeisser))
	}
}
