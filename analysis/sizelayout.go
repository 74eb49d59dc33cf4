package analysis

import (
	"math"
	"slices"
	"strings"

	"penwright/analysis/compare"
	"penwright/analysis/power"
	"penwright/analysis/prose"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// target is what a size is judged by: a treatment term, a part of one, an effect of the
// times of repeated measures, or a contrast of means.
type target struct {
	name  string
	unit  int // its experimental unit
	term  int // index into Plan.Terms; -1: the times alone
	df    int
	order int // number of factors, times included: a difference is over 2^order means

	groups [][]int // of listed treatments, for a part of their term; nil: the term itself
	rep    int     // index into Protocol.Repeated of the times in it; -1: none

	contrast contrast // nil: the term
}

// contrast gives the variance of a contrast of means whose covariance is known; n is the
// number of means. NaN stands for one that cannot be had.
type contrast func(n int, cov func(i, j int) float64) float64

// byWeights is a contrast with given weights.
func byWeights(w []float64) contrast {
	return func(n int, cov func(i, j int) float64) float64 {
		v := 0.0
		for i := range n {
			for j := range n {
				if w[i] != 0 && w[j] != 0 {
					v += w[i] * w[j] * cov(i, j)
				}
			}
		}
		return v
	}
}

// trend is the leading coefficient of the polynomial of a degree over the levels x.
func trend(x []float64, degree int) contrast {
	return func(n int, cov func(i, j int) float64) float64 {
		steps, _, _, ok := compare.Trends(x, make([]float64, n), cov, degree)
		if !ok || len(steps) < degree {
			return math.NaN()
		}
		return steps[degree-1].Variance
	}
}

// find names the target of the size: the stated contrast or term, or the first term.
func (z *sizer) find() bool {
	s, p := z.s, z.plan
	if s.Contrast != "" {
		return z.findContrast(s.Contrast)
	}
	if s.Term == "" {
		if len(p.Terms) == 0 {
			return false
		}
		t := &p.Terms[0]
		z.target = target{name: t.Name, unit: t.Unit, term: 0, df: t.DF, order: len(t.Factors), rep: -1}
		return true
	}
	names := strings.Split(s.Term, ":")
	rep := -1
	for i := range z.trial.Protocol.Repeated {
		if k := slices.Index(names, z.trial.Protocol.Repeated[i].Name); k >= 0 {
			rep = i
			names = slices.Delete(names, k, k+1)
		}
	}
	if rep >= 0 {
		return z.findTimes(rep, names)
	}
	for i := range p.Terms {
		if sameNames(strings.Split(p.Terms[i].Name, ":"), names) {
			t := &p.Terms[i]
			z.target = target{name: t.Name, unit: t.Unit, term: i, df: t.DF, order: len(t.Factors), rep: -1}
			return true
		}
		for _, part := range p.Parts(i) {
			if sameNames(strings.Split(part.Name, ":"), names) {
				z.target = target{name: part.Name, unit: p.Terms[i].Unit, term: i, df: part.DF, order: max(len(part.Factors), 1), groups: part.Groups, rep: -1}
				return true
			}
		}
	}
	z.out.Term = s.Term
	z.missing("term", prose.SizeNoTerm(p, s.Term), "")
	return false
}

func sameNames(a, b []string) bool {
	a, b = slices.Clone(a), slices.Clone(b)
	slices.Sort(a)
	slices.Sort(b)
	return slices.Equal(a, b)
}

// findTimes finds the effect of the times of repeated measures, or their interaction with
// a term.
func (z *sizer) findTimes(rep int, names []string) bool {
	p := z.plan
	lines := p.Repeated(rep)
	for _, l := range lines {
		if l.Kind != layout.TimeLine {
			continue
		}
		switch {
		case len(names) == 0 && l.Term < 0:
			z.target = target{name: l.Source, unit: l.Unit, term: -1, df: l.DF, order: 1, rep: rep}
			return true
		case l.Term >= 0 && sameNames(strings.Split(p.Terms[l.Term].Name, ":"), names):
			z.target = target{name: l.Source, unit: l.Unit, term: l.Term, df: l.DF, order: len(names) + 1, rep: rep}
			return true
		}
	}
	z.out.Term = z.s.Term
	z.missing("term", prose.SizeNoTerm(p, z.s.Term), "")
	return false
}

// findContrast finds a planned contrast by its name, or a trend as "factor: linear".
func (z *sizer) findContrast(name string) bool {
	p := z.plan
	of := func(factorName string) (t target, levels []string, values []float64, ok bool) {
		for f := range p.Factors {
			if p.Factors[f].Name != factorName {
				continue
			}
			levels, values = p.Factors[f].Levels, p.Factors[f].Values
			for i := range p.Terms {
				if len(p.Terms[i].Factors) == 1 && p.Terms[i].Factors[0] == f {
					return target{name: p.Terms[i].Name, unit: p.Terms[i].Unit, term: i, df: 1, order: 1, rep: -1}, levels, values, true
				}
				for _, part := range p.Parts(i) {
					if len(part.Factors) == 1 && part.Factors[0] == f {
						return target{name: part.Name, unit: p.Terms[i].Unit, term: i, df: 1, order: 1, groups: part.Groups, rep: -1}, levels, values, len(part.Groups) == len(levels)
					}
				}
			}
		}
		return target{}, nil, nil, false
	}
	contrasts := slices.Clone(z.trial.Protocol.Analysis.Contrasts)
	if z.r != nil {
		contrasts = append(contrasts, z.r.Contrasts...)
	}
	for _, c := range contrasts {
		if c.Name != name {
			continue
		}
		t, levels, _, ok := of(c.Factor)
		if !ok {
			break
		}
		w := make([]float64, len(levels))
		for _, x := range c.Weights {
			if l := slices.Index(levels, x.Level); l >= 0 {
				w[l] = x.Value
			}
		}
		t.contrast = byWeights(w)
		z.target = t
		return true
	}
	if factorName, kind, ok := strings.Cut(name, ": "); ok {
		if t, levels, values, ok := of(factorName); ok && values != nil && len(levels) <= power.Most {
			degree := slices.Index([]string{"linear", "quadratic", "cubic"}, kind) + 1
			if degree > 0 && degree < len(levels) {
				t.contrast = trend(values, degree)
				z.target = t
				return true
			}
		}
	}
	z.out.Contrast = name
	z.missing("contrast", prose.SizeNoContrast(name), "")
	return false
}

// setting is the target in a plan with a number of replicates.
type setting struct {
	count      int // of the unit that grows
	replicates int // units of the least replicated level or cell
	units      int // experimental units of the target
	animals    int
	errorDF    int     // −1: no single error
	variance   float64 // of the difference or contrast per unit of error variance, were nothing lost
}

// setting reads from a plan what the target has in it.
func (z *sizer) setting(p *layout.Plan) *setting {
	t := z.target
	x := &setting{units: p.Units[t.unit].N, errorDF: -1}
	if z.grower.step > 0 {
		x.count = z.grower.countOf(p)
	}
	base := z.plan
	for u := range base.Units {
		sum := 0
		for _, a := range base.Units[u].Animals {
			sum += a
		}
		if sum > 0 {
			x.animals += int(math.Round(float64(sum) / float64(base.Units[u].N) * float64(p.Units[u].N)))
		}
	}
	switch {
	case t.rep >= 0:
		for _, l := range p.Repeated(t.rep) {
			if l.Kind == layout.Residual {
				x.errorDF = l.DF
			}
		}
		if x.errorDF < 0 {
			x.errorDF = 0
		}
	case p.Terms[t.term].Stratum >= 0 || p.Terms[t.term].Over >= 0 || !p.Terms[t.term].Inexact:
		x.errorDF = max(p.Terms[t.term].ErrorDF-len(z.covariates()), 0)
	}
	n := z.counts(p)
	least := slices.Min(n)
	x.replicates = int(math.Floor(least + 1e-9))
	switch {
	case t.contrast != nil:
		x.variance = t.contrast(len(n), func(i, j int) float64 {
			if i != j {
				return 0
			}
			return 1 / n[i]
		})
	case t.rep >= 0 && t.term >= 0:
		x.variance = 2 * differenceVariance(n, t.order-1) // between two times, each as often
	default:
		x.variance = differenceVariance(n, t.order)
	}
	return x
}

// differenceVariance is that of a difference between the two means of least replication,
// or for interactions of a difference of differences, per unit of error variance. n are
// the replicates of all means, or of an interaction the one number of its cells.
func differenceVariance(n []float64, order int) float64 {
	sorted := slices.Clone(n)
	slices.Sort(sorted)
	want := 1 << min(order, 30)
	taken := min(want, len(sorted))
	v := 0.0
	for _, x := range sorted[:taken] {
		v += 1 / x
	}
	return v * float64(want) / float64(taken)
}

// counts are the numbers of experimental units behind the means of the target: of each
// level of a main effect, of each group of listed treatments, of the 2^order cells of
// least replication of an interaction. Groups of several treatments count as many units
// as give the variance of their equally weighted mean.
func (z *sizer) counts(p *layout.Plan) []float64 {
	t := z.target
	n := float64(p.Units[t.unit].N)
	if t.term < 0 {
		return []float64{n, n} // each time is measured on every unit
	}
	term := &p.Terms[t.term]
	if term.Over >= 0 {
		// Its error is that of the mean of one treatment in one of the units that interact.
		size := 1
		if t.groups == nil && len(term.Factors) == 1 {
			size = len(p.Factors[term.Factors[0]].Levels)
		}
		out := make([]float64, max(size, len(t.groups)))
		for i := range out {
			out[i] = float64(p.Units[p.Crossed[term.Over].Unit].N)
			if t.groups != nil {
				out[i] *= float64(len(t.groups[i]))
			}
		}
		return out
	}
	switch {
	case t.groups != nil:
		each := levelShares(p, term.Factors[0])
		out := make([]float64, len(t.groups))
		for g, levels := range t.groups {
			v := 0.0
			for _, l := range levels {
				v += 1 / (each[l] * n)
			}
			out[g] = float64(len(levels)) * float64(len(levels)) / v
		}
		return out
	case len(term.Factors) == 1:
		out := levelShares(p, term.Factors[0])
		for l := range out {
			out[l] *= n
		}
		return out
	}
	even := true
	cells := n
	for _, f := range term.Factors {
		cells /= float64(len(p.Factors[f].Levels))
		if a := p.Allocation(p.Factors[f].Unit); a != nil && !a.Separate {
			even = even && slices.Min(a.Total) == slices.Max(a.Total)
		}
	}
	if even {
		return []float64{cells}
	}
	// Two levels of least replication of each factor; all their combinations.
	pick := make([][]int, len(term.Factors))
	for i, f := range term.Factors {
		shares := levelShares(p, f)
		order := make([]int, len(shares))
		for l := range order {
			order[l] = l
		}
		slices.SortStableFunc(order, func(a, b int) int {
			switch {
			case shares[a] < shares[b]:
				return -1
			case shares[a] > shares[b]:
				return 1
			}
			return 0
		})
		pick[i] = order[:2]
	}
	const most = 8 // factors whose levels are looked at one by one
	out := make([]float64, 1<<min(len(pick), most))
	for c := range out {
		levels := make([]int, len(pick))
		for i := range pick {
			levels[i] = pick[i][c>>min(i, most)&1]
		}
		out[c] = n * cellShare(p, term.Factors, levels)
	}
	return out
}

// levelShares is the share of the units of each level of a factor. Levels of carried
// classes and of factors drawn each by itself are planned in equal numbers.
func levelShares(p *layout.Plan, f int) []float64 {
	out := make([]float64, len(p.Factors[f].Levels))
	of := &p.Factors[f]
	a := p.Allocation(of.Unit)
	if of.Carried || a == nil || a.Separate {
		for l := range out {
			out[l] = 1 / float64(len(out))
		}
		return out
	}
	k := slices.Index(a.Factors, f)
	for c, levels := range a.Combinations {
		out[levels[k]] += float64(a.Total[c]) / float64(p.Units[of.Unit].N)
	}
	return out
}

// cellShare is the share of the units of one combination of levels.
func cellShare(p *layout.Plan, fs, levels []int) float64 {
	share := 1.0
	var done []int
	for i, f := range fs {
		of := &p.Factors[f]
		a := p.Allocation(of.Unit)
		if of.Carried || a == nil || a.Separate {
			share /= float64(len(of.Levels))
			continue
		}
		if slices.Contains(done, of.Unit) {
			continue
		}
		done = append(done, of.Unit)
		total := 0
		for c, have := range a.Combinations {
			all := true
			for j := i; j < len(fs); j++ {
				if p.Factors[fs[j]].Unit == of.Unit && !p.Factors[fs[j]].Carried {
					all = all && have[slices.Index(a.Factors, fs[j])] == levels[j]
				}
			}
			if all {
				total += a.Total[c]
			}
		}
		share *= float64(total) / float64(p.Units[of.Unit].N)
	}
	return share
}

// spread is the standard deviation of one experimental unit of a target.
type spread struct {
	value float64
	text  string // what it is made of; empty for one that is simply stated
	why   string // why there is none; empty: there is

	// Where it is made of groups of animals: value² = between + inside/per.
	between, inside, per float64
}

// sd is the SD of one experimental unit of a target in its stratum: the stated one, or
// put together from components: the variance of the unit and of every smaller unit in it,
// divided by the number of those, as the expected mean square has it. The scale is that
// of the stated SD, for a logarithm with a CV √ln(1 + CV²).
func (z *sizer) sd(t target) spread {
	s, p := z.s, z.plan
	cv := func(percent float64) float64 {
		if z.r != nil && z.r.Transform == "log" {
			return math.Sqrt(math.Log1p(percent * percent / 1e4))
		}
		return percent
	}
	unit := &p.Units[t.unit]
	own := unit.Name
	var rep string
	repOn := -1
	if t.rep >= 0 {
		rep = z.trial.Protocol.Repeated[t.rep].Name
		repOn = t.unit
	} else if z.r != nil && z.r.Repeated != "" {
		for i := range z.trial.Protocol.Repeated {
			if r := &z.trial.Protocol.Repeated[i]; r.Name == z.r.Repeated {
				rep = r.Name
				repOn = slices.IndexFunc(p.Units, func(u layout.Unit) bool { return u.Name == r.On })
			}
		}
	}
	crossed := t.rep < 0 && p.Terms[t.term].Over >= 0
	single := 0.0
	switch {
	case len(s.SD) == 1 && s.SD[0].Stratum == "":
		single = s.SD[0].Value
	case len(s.SD) == 0 && s.CV != nil:
		single = cv(*s.CV)
	case len(s.SD) == 0:
		return spread{why: prose.SizeMissing([]string{"sd", "cv"})}
	}
	given := func(name string) float64 {
		for _, v := range s.SD {
			if v.Stratum == name {
				return v.Value
			}
		}
		return 0
	}
	if t.rep >= 0 {
		name := own + ":" + rep
		if x := given(name); x > 0 {
			return spread{value: x, text: prose.SizeTimes(p, t.unit, rep)}
		}
		return spread{why: prose.SizeMissing([]string{"sd." + name})}
	}
	holder, per := z.animalsIn(t.unit)
	switch {
	case single > 0 && s.ICC == nil:
		x := spread{value: single}
		switch {
		case crossed:
			x.text = prose.SizeCrossed(p, p.Crossed[p.Terms[t.term].Over].Name)
		case rep != "" && repOn >= 0 && p.Coarse(repOn, t.unit) != nil:
			x.text = prose.SizeMeanOfTimes(p, t.unit, rep)
		}
		return x
	case single > 0:
		if holder < 0 {
			return spread{why: prose.SizeNoGroup(p, t.unit)}
		}
		for u := range p.Units {
			if u != t.unit && p.Units[u].Role == layout.Experimental && p.Coarse(u, t.unit) != nil {
				return spread{why: prose.SizeGroupsInside(p, t.unit, u)}
			}
		}
		rho := *s.ICC
		x := spread{between: rho * single * single, inside: (1 - rho) * single * single, per: per, text: prose.SizeICC(p, t.unit, rho, per)}
		x.value = math.Sqrt(x.between + x.inside/per)
		return x
	case crossed:
		return spread{why: prose.SizeCrossedSD(p, p.Crossed[p.Terms[t.term].Over].Name)}
	}
	var lacks []string
	x := spread{}
	var parts []prose.SizePart
	add := func(name string, value, n float64) {
		x.between += value * value / n
		parts = append(parts, prose.SizePart{Name: name, SD: value, Per: n})
	}
	if v := given(own); v > 0 {
		add(own, v, 1)
	} else {
		lacks = append(lacks, "sd."+own)
	}
	sampling := -1
	for _, st := range p.Strata {
		u := st.Unit
		if u == t.unit || p.Coarse(u, t.unit) == nil || p.Units[u].N == unit.N {
			continue
		}
		v, n := given(p.Units[u].Name), z.perUnit(u, t.unit)
		switch {
		case v == 0:
			lacks = append(lacks, "sd."+p.Units[u].Name)
		case u == p.Smallest && p.Units[u].Role == layout.Sampling:
			sampling = u
			x.inside, x.per = v*v, n
			parts = append(parts, prose.SizePart{Name: p.Units[u].Name, SD: v, Per: n})
		default:
			add(p.Units[u].Name, v, n)
		}
	}
	if v := given("animal"); v > 0 && sampling < 0 && !slices.ContainsFunc(p.Units, func(u layout.Unit) bool { return u.Name == "animal" }) {
		if holder < 0 {
			return spread{why: prose.SizeNoGroup(p, t.unit)}
		}
		x.inside, x.per = v*v, per
		parts = append(parts, prose.SizePart{Name: "animal", SD: v, Per: per})
	}
	if rep != "" && repOn >= 0 && p.Coarse(repOn, t.unit) != nil {
		name := p.Units[repOn].Name + ":" + rep
		times := 0
		for i := range z.trial.Protocol.Repeated {
			if z.trial.Protocol.Repeated[i].Name == rep {
				times = len(z.trial.Protocol.Repeated[i].At)
			}
		}
		if v := given(name); v > 0 {
			add(name, v, float64(times)*z.perUnit(repOn, t.unit))
		} else {
			lacks = append(lacks, "sd."+name)
		}
	}
	if len(lacks) > 0 {
		return spread{why: prose.SizeMissingAll(lacks)}
	}
	x.value = math.Sqrt(x.between)
	if x.inside > 0 {
		x.value = math.Sqrt(x.between + x.inside/x.per)
	}
	if len(parts) > 1 {
		x.text = prose.SizeParts(p, t.unit, parts)
	}
	return x
}

// perUnit is the number of instances of u in one instance of the coarser unit v; where
// they differ, the harmonic mean, which an unweighted mean of the larger units has.
func (z *sizer) perUnit(u, v int) float64 {
	n := make([]float64, z.plan.Units[v].N)
	for _, i := range z.plan.Coarse(u, v) {
		n[i]++
	}
	return harmonic(n)
}

func harmonic(n []float64) float64 {
	s := 0.0
	for _, x := range n {
		s += 1 / x
	}
	h := float64(len(n)) / s
	if r := math.Round(h); math.Abs(h-r) < 1e-9*r {
		return r // equal numbers, but for rounding
	}
	return h
}

// animalsIn finds the animals or sampling units inside an experimental unit: the unit
// that states them and their number in one instance of v; −1 where there are none.
func (z *sizer) animalsIn(v int) (holder int, per float64) {
	p := z.plan
	for u := range p.Units {
		if p.Units[u].Animals == nil || p.Coarse(u, v) == nil {
			continue
		}
		n := make([]float64, p.Units[v].N)
		for i, at := range p.Coarse(u, v) {
			n[at] += float64(p.Units[u].Animals[i])
		}
		if h := harmonic(n); h > 0 {
			return u, h
		}
	}
	if u := p.Smallest; u != v && p.Units[u].Role == layout.Sampling && p.Coarse(u, v) != nil {
		return u, z.perUnit(u, v)
	}
	return -1, 0
}

// efficiency is the share of its replication that a target keeps in a layout.
type efficiency struct {
	value  float64
	bound  bool // an upper bound, since treatments are not drawn yet
	how    prose.SizeLoss
	reason string // why it is not known; empty: it is
}

// efficiency is 1 where a term lies wholly in one stratum; else the average efficiency
// factor of the allotment, of the given sequences, or before a draw the greatest that the
// layout allows.
func (z *sizer) efficiency(t target) efficiency {
	p := z.plan
	if t.term < 0 || t.rep >= 0 {
		return efficiency{value: 1}
	}
	term := &p.Terms[t.term]
	carry, lines := p.Protocol.CarryOver, p.Protocol.TimeTrend
	// Carry-over and trends act in the stratum of the unit that receives period by period.
	f := &p.Factors[term.Factors[0]]
	within := func(on, along string) bool {
		i, j := unitIndex(p, on), unitIndex(p, along)
		return i >= 0 && j >= 0 && f.Unit >= 0 && p.Coarse(term.Unit, i) != nil && p.Coarse(term.Unit, j) != nil
	}
	carries := carry != nil && within(carry.On, carry.Along) && carry.Factor == f.Name && len(term.Factors) == 1
	trends := lines != nil && within(lines.On, lines.Along)
	if !carries && !trends && (term.Stratum >= 0 || term.Over >= 0) {
		return efficiency{value: 1}
	}
	if term.Inexact {
		return efficiency{reason: prose.SizeNoError(p, t.name)}
	}
	how := prose.SizeLoss{Carry: carries, Trend: trends}
	levels, cells := z.received(term, carries, trends)
	if levels != nil {
		if e, ok := z.measured(t, levels, cells, carries, trends); ok {
			e.how = how
			if z.trial.Allotment == nil {
				e.how.Sequences = true
			} else {
				e.how.Drawn = true
			}
			return e
		}
	}
	how.Bound = true
	switch {
	case carries && !trends:
		periods := p.Units[term.Unit].N / p.Units[unitIndex(p, carry.On)].N
		if k := len(f.Levels); periods == k && k > 2 && term.Stratum >= 0 {
			how.Bound = false
			how.Balanced = true
			return efficiency{value: power.Williams(k), how: how}
		} else if k == 2 && periods == 2 {
			return efficiency{reason: prose.SizeAliasedCarryOver(p, t.name)}
		}
	case !carries && !trends && len(term.Factors) == 1:
		if e := z.bound(term); e > 0 {
			return efficiency{value: e, bound: true, how: how}
		}
	}
	return efficiency{reason: prose.SizeDrawFirst(p, t.name)}
}

// received gives the level of the term at every instance of its unit, from the allotment
// or from given sequences, and the numbers of levels of its factors; nil when not known.
func (z *sizer) received(term *layout.Term, carries, trends bool) (cell []int32, levels []int) {
	p := z.plan
	n := p.Units[term.Unit].N
	cells := 1
	for _, f := range term.Factors {
		levels = append(levels, len(p.Factors[f].Levels))
		cells *= len(p.Factors[f].Levels)
		if cells > power.Most {
			return nil, nil
		}
	}
	if a := z.trial.Allotment; a != nil {
		cell = make([]int32, n)
		for _, f := range term.Factors {
			at := a.LevelAt(f, term.Unit)
			if at == nil || slices.Contains(at, -1) {
				return nil, nil
			}
			for i, l := range at {
				cell[i] = cell[i]*int32(len(p.Factors[f].Levels)) + l
			}
		}
		return cell, levels
	}
	var sequences [][]string
	var on, along string
	if carries && p.Protocol.CarryOver.Sequences != nil {
		sequences, on, along = p.Protocol.CarryOver.Sequences, p.Protocol.CarryOver.On, p.Protocol.CarryOver.Along
	} else if trends && p.Protocol.TimeTrend.Sequences != nil {
		sequences, on, along = p.Protocol.TimeTrend.Sequences, p.Protocol.TimeTrend.On, p.Protocol.TimeTrend.Along
	}
	if sequences == nil || len(term.Factors) != 1 {
		return nil, nil
	}
	cell = make([]int32, n)
	f := &p.Factors[term.Factors[0]]
	for i, place := range z.places(term.Unit, unitIndex(p, on), unitIndex(p, along)) {
		s := sequences[int(p.Coarse(term.Unit, unitIndex(p, on))[i])%len(sequences)]
		if place >= len(s) {
			return nil, nil
		}
		l := slices.Index(f.Levels, s[place])
		if l < 0 {
			return nil, nil
		}
		cell[i] = int32(l)
	}
	return cell, levels
}

// places is the place of every instance of unit u in the order of its animal: its rank
// among those that share the instance of on, by the instance of along.
func (z *sizer) places(u, on, along int) []int {
	p := z.plan
	rows := make([][]int, p.Units[on].N)
	for i, a := range p.Coarse(u, on) {
		rows[a] = append(rows[a], i)
	}
	out := make([]int, p.Units[u].N)
	when := p.Coarse(u, along)
	for _, in := range rows {
		slices.SortStableFunc(in, func(a, b int) int { return int(when[a]) - int(when[b]) })
		for k, i := range in {
			out[i] = k
		}
	}
	return out
}

// measured computes the efficiency from what every unit receives.
func (z *sizer) measured(t target, cell []int32, levels []int, carries, trends bool) (efficiency, bool) {
	p := z.plan
	term := &p.Terms[t.term]
	n := 1
	for _, l := range levels {
		n *= l
	}
	treatment := factor.Factor{Level: cell, N: n}
	counts := treatment.Counts()
	if slices.Min(counts) == 0 {
		return efficiency{}, false
	}
	// The finest units above, the greatest in number first, which is taken group by group.
	var above []int
	for v := range p.Units {
		if v == term.Unit || p.Coarse(term.Unit, v) == nil || p.Units[v].N < 2 || p.Units[v].N >= p.Units[term.Unit].N {
			continue
		}
		finest := true
		for w := range p.Units {
			if w != v && w != term.Unit && p.Coarse(term.Unit, w) != nil && p.Coarse(w, v) != nil && p.Units[w].N < p.Units[term.Unit].N {
				finest = false
			}
		}
		if finest {
			above = append(above, v)
		}
	}
	slices.SortStableFunc(above, func(a, b int) int { return p.Units[b].N - p.Units[a].N })
	group := factor.Universe(len(cell))
	var position []float64
	order := 0
	if trends {
		on, along := unitIndex(p, p.Protocol.TimeTrend.On), unitIndex(p, p.Protocol.TimeTrend.Along)
		above = slices.DeleteFunc(above, func(v int) bool { return v == on })
		above = slices.Insert(above, 0, on)
		order = max(p.Protocol.TimeTrend.Order, 1)
		for _, k := range z.places(term.Unit, on, along) {
			position = append(position, float64(k))
		}
	}
	on := func(v int) factor.Factor { return factor.Factor{Level: p.Coarse(term.Unit, v), N: p.Units[v].N} }
	var further []factor.Factor
	for k, v := range above {
		if k == 0 {
			group = on(v)
		} else {
			further = append(further, on(v))
		}
	}
	if carries {
		c := p.Protocol.CarryOver
		cow, period := unitIndex(p, c.On), unitIndex(p, c.Along)
		before := factor.Factor{Level: make([]int32, len(cell)), N: n + 1}
		at := map[[2]int]int32{}
		places := z.places(term.Unit, cow, period)
		cows := p.Coarse(term.Unit, cow)
		for i := range cell {
			at[[2]int{int(cows[i]), places[i]}] = cell[i]
		}
		for i := range cell {
			before.Level[i] = int32(n)
			if l, ok := at[[2]int{int(cows[i]), places[i] - 1}]; ok {
				before.Level[i] = l
			}
		}
		further = append(further, before)
	}
	c, ok := power.Adjusted(treatment, group, position, order, further...)
	if !ok {
		return efficiency{}, false
	}
	plain := make([]float64, n)
	for i, k := range counts {
		plain[i] = float64(k)
	}
	value := 0.0
	switch {
	case !c.Connected():
		return efficiency{reason: prose.SizeDisconnected(p, t.name)}, true
	case t.groups != nil:
		value = pairVariance(power.Diagonal(plain), t.groups) / pairVariance(c, t.groups)
	case t.contrast != nil:
		value = t.contrast(n, power.Diagonal(plain).V.At) / t.contrast(n, c.V.At)
	default:
		value = power.Diagonal(plain).Average(levels) / c.Average(levels)
	}
	if !(value > 1e-9) {
		return efficiency{reason: prose.SizeDisconnected(p, t.name)}, true
	}
	return efficiency{value: min(value, 1)}, true
}

// pairVariance is the mean variance of the differences between neighbouring groups of
// treatments and between the first and the last.
func pairVariance(c *power.Covariance, groups [][]int) float64 {
	n := c.V.SymmetricDim()
	sum := 0.0
	for g := range groups {
		w := make([]float64, n)
		for _, l := range groups[g] {
			w[l] += 1 / float64(len(groups[g]))
		}
		next := groups[(g+1)%len(groups)]
		for _, l := range next {
			w[l] -= 1 / float64(len(next))
		}
		sum += c.Contrast(w)
	}
	return sum / float64(len(groups))
}

// bound is the greatest average efficiency factor that a layout of incomplete blocks, of
// rows and columns, or of replicates of blocks allows before treatments are drawn; 0 when
// that is not known.
func (z *sizer) bound(term *layout.Term) float64 {
	p := z.plan
	a := p.Allocation(term.Unit)
	f := &p.Factors[term.Factors[0]]
	if a == nil || f.Unit != term.Unit || len(a.Factors) != 1 || a.Checks != nil || slices.Min(a.Total) != slices.Max(a.Total) {
		return 0
	}
	t := len(f.Levels)
	e := 1.0
	for _, v := range a.Blocks {
		sizes := make([]int, p.Units[v].N)
		for _, i := range p.Coarse(term.Unit, v) {
			sizes[i]++
		}
		e -= 1 - power.Bound(t, sizes)
		// Blocks in replicates that each hold every treatment once.
		if w := p.Units[v].Within; w >= 0 && p.Units[w].N > 1 {
			full := make([]int, p.Units[w].N)
			for _, i := range p.Coarse(term.Unit, w) {
				full[i]++
			}
			if slices.Min(full) == t && slices.Max(full) == t && p.Units[v].N%p.Units[w].N == 0 {
				e = min(e, power.ResolvableBound(t, p.Units[w].N, p.Units[v].N/p.Units[w].N))
			}
		}
	}
	return e
}
