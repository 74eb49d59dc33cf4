package sound

import (
	"math"
	"slices"

	"penwright/analysis/linear"
	"penwright/analysis/power"
	"penwright/analysis/prose"
	"penwright/protocol/allot"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// within finds factors that do not vary inside a unit larger than the one said to
// receive them: what looks like replication is sampling then.
func (c *checker) within() {
	p, a := c.plan, c.trial.Allotment
	c.constant = make([]bool, len(p.Factors))
	if a == nil {
		return
	}
	for f := range p.Factors {
		u := p.Factors[f].Unit
		if u < 0 || p.Factors[f].Carried || a.Levels[f] == nil || slices.Contains(a.Levels[f], -1) {
			continue
		}
		level := factor.Factor{Level: a.Levels[f], N: len(p.Factors[f].Levels)}
		coarsest := -1
		for v := range p.Units {
			up := p.Coarse(u, v)
			if v == u || up == nil || p.Units[v].N < 2 || p.Units[v].N >= p.Units[u].N {
				continue
			}
			if factor.Finer(factor.Factor{Level: up, N: p.Units[v].N}, level) && (coarsest < 0 || p.Units[v].N < p.Units[coarsest].N) {
				coarsest = v
			}
		}
		if coarsest >= 0 {
			c.constant[f] = true
			message, hint := prose.ConstantWithin(p, f, u, coarsest)
			c.at(unitKey(u), ConstantWithin, Warning, message, hint)
		}
	}
}

// larger lists the units that lie above u and are smaller in number, without those that
// are one with another of them.
func (c *checker) larger(u int) []int {
	p := c.plan
	var out []int
	for v := range p.Units {
		if v == u || p.Coarse(u, v) == nil || p.Units[v].N < 2 || p.Units[v].N >= p.Units[u].N {
			continue
		}
		if !slices.ContainsFunc(out, func(w int) bool {
			return p.Units[w].N == p.Units[v].N && (p.Coarse(v, w) != nil || p.Coarse(w, v) != nil)
		}) {
			out = append(out, v)
		}
	}
	return out
}

func (c *checker) on(u, v int) factor.Factor {
	return factor.Factor{Level: c.plan.Coarse(u, v), N: c.plan.Units[v].N}
}

// blocks looks at blocks that do not hold all treatments: whether a chain of them joins
// all, and how much of the information they keep.
func (c *checker) blocks() {
	p := c.plan
	if p.Protocol.TimeTrend != nil || p.Protocol.CarryOver != nil {
		return // what else is fitted takes information too, which the size counts
	}
	for u := range p.Units {
		a := p.Allocation(u)
		if a == nil || a.Separate || a.Complete || a.Checks != nil || len(a.Blocks) == 0 || len(a.Combinations) > power.Most {
			continue
		}
		if slices.ContainsFunc(a.Factors, func(f int) bool { return c.constant[f] }) {
			continue
		}
		blocks := slices.DeleteFunc(slices.Clone(a.Blocks), func(v int) bool { return p.Units[v].N < 2 || p.Units[v].N >= p.Units[u].N })
		if len(blocks) == 0 {
			continue
		}
		of, n := c.combinations(u, a.Factors)
		if of == nil {
			if c.trial.Allotment != nil || len(blocks) != 1 {
				continue
			}
			message, hint := prose.IncompleteBlocks(p, u, blocks, power.Bound(n, c.on(u, blocks[0]).Counts()), true)
			c.at(unitKey(u), IncompleteBlocks, Note, message, hint)
			continue
		}
		treatment := factor.Factor{Level: of, N: n}
		if slices.Contains(treatment.Counts(), 0) {
			continue // which the check of the allotment says
		}
		var further []factor.Factor
		for _, v := range blocks[1:] {
			further = append(further, c.on(u, v))
		}
		adjusted, ok := power.Adjusted(treatment, c.on(u, blocks[0]), nil, 0, further...)
		if !ok {
			continue
		}
		if !adjusted.Connected() {
			if len(a.Factors) == 1 { // of several factors the terms are told apart below
				message, hint := prose.Disconnected(p, u, blocks, c.groups(a, adjusted))
				c.at(unitKey(u), Disconnected, Warning, message, hint)
			}
			continue
		}
		r := make([]float64, n)
		for k, m := range treatment.Counts() {
			r[k] = float64(m)
		}
		all := []int{n}
		message, hint := prose.IncompleteBlocks(p, u, blocks, power.Diagonal(r).Average(all)/adjusted.Average(all), false)
		c.at(unitKey(u), IncompleteBlocks, Note, message, hint)
	}
}

// groups sorts the treatments of a disconnected layout into groups within which every
// difference can be told.
func (c *checker) groups(a *layout.Allocation, v *power.Covariance) [][]string {
	var groups [][]int
	n := len(a.Combinations)
next:
	for k := range n {
		for g := range groups {
			w := make([]float64, n)
			w[k], w[groups[g][0]] = 1, -1
			if !math.IsNaN(v.Contrast(w)) {
				groups[g] = append(groups[g], k)
				continue next
			}
		}
		groups = append(groups, []int{k})
	}
	out := make([][]string, len(groups))
	for g := range groups {
		for _, k := range groups[g] {
			out[g] = append(out[g], c.plan.Factors[a.Factors[0]].Levels[a.Combinations[k][0]])
		}
	}
	return out
}

// The columns of the models that are looked at for aliasing, and the work on one, are
// bounded: a check is to take no longer than the analysis.
const (
	wide = 600
	work = 500_000_000
)

// terms finds treatment terms that the allotment confounds with larger units or with
// one another.
func (c *checker) terms() {
	p, a := c.plan, c.trial.Allotment
	if a == nil {
		return
	}
	for u := range p.Units {
		if p.Units[u].N > most {
			continue
		}
		var terms []int
		for t := range p.Terms {
			if p.Terms[t].Unit == u && !slices.ContainsFunc(p.Terms[t].Factors, func(f int) bool { return c.constant[f] }) {
				terms = append(terms, t)
			}
		}
		al := p.Allocation(u)
		if len(terms) == 0 || len(terms) == 1 && len(p.Terms[terms[0]].Factors) == 1 && al != nil && !al.Separate {
			continue // a single factor, whose blocks were looked at
		}
		larger := c.larger(u)
		base := c.lost(u, terms, nil)
		if base == nil {
			continue
		}
		full := c.lost(u, terms, larger)
		for i, t := range terms {
			term := &p.Terms[t]
			if base[i] > 0 {
				message, hint := prose.Aliased(p, term, base[i], base[i] >= term.DF)
				c.at(unitKey(u), Aliased, Warning, message, hint)
				continue
			}
			if full == nil || full[i] <= base[i] {
				continue
			}
			with := -1
			for _, v := range larger {
				if one := c.lost(u, terms, []int{v}); one != nil && one[i] >= full[i] {
					with = v
					break
				}
			}
			message, hint := prose.Confounded(p, term, with, full[i], full[i] >= term.DF)
			c.at(unitKey(u), Confounded, Warning, message, hint)
		}
	}
}

// lost is how many degrees of freedom each of terms loses on the instances of unit u to
// the terms before it and to the units fixed; nil where that is not known.
func (c *checker) lost(u int, terms, fixed []int) []int {
	p, a := c.plan, c.trial.Allotment
	m := linear.Model{Y: make([]float64, p.Units[u].N)}
	columns := 0
	finest := 0
	for _, v := range fixed {
		m.Nuisance = append(m.Nuisance, c.on(u, v))
		columns += p.Units[v].N
		finest = max(finest, p.Units[v].N)
	}
	columns -= finest // the unit with most instances is absorbed
	at := make([]int, len(p.Factors))
	for f := range at {
		at[f] = -1
	}
	for _, t := range terms {
		width := 1
		var indices []int
		for _, f := range p.Terms[t].Factors {
			width *= len(p.Factors[f].Levels)
			if at[f] < 0 {
				level := a.LevelAt(f, u)
				if level == nil || slices.Contains(level, -1) {
					return nil
				}
				at[f] = len(m.Factors)
				m.Factors = append(m.Factors, factor.Factor{Level: level, N: len(p.Factors[f].Levels)})
			}
			indices = append(indices, at[f])
		}
		slices.Sort(indices)
		columns += width
		m.Terms = append(m.Terms, indices)
	}
	if columns > wide || columns*columns > work/max(len(m.Y), 1) {
		return nil
	}
	fit, err := m.Fit()
	if err != nil {
		return nil
	}
	out := make([]int, len(terms))
	for _, x := range fit.Aliased() {
		if x.Kind == linear.Term {
			out[x.Index] = x.Lost
		}
	}
	return out
}

// listed finds factors that listed treatments are made of and that cannot be told
// apart in them. A control outside the factorial tells nothing of its factors.
func (c *checker) listed() {
	p := c.plan
	if len(p.Protocol.Treatments) == 0 || len(p.Protocol.Treatments) > wide {
		return
	}
	var fs []int
	var rows []int
	made := make([][]int32, len(p.Factors))
	for f := range p.Factors {
		if p.Factors[f].Protocol != nil && p.Factors[f].Unit < 0 {
			made[f] = allot.Made(p, f)
			if slices.ContainsFunc(made[f], func(l int32) bool { return l >= 0 }) {
				fs = append(fs, f)
			}
		}
	}
	for t := range p.Protocol.Treatments {
		if !slices.ContainsFunc(fs, func(f int) bool { return made[f][t] < 0 }) {
			rows = append(rows, t)
		}
	}
	if len(fs) < 2 || len(fs) > 12 || len(rows) < 2 {
		return
	}
	levels := make([]factor.Factor, len(fs))
	for i, f := range fs {
		x := factor.Factor{N: len(p.Factors[f].Levels)}
		for _, t := range rows {
			x.Level = append(x.Level, made[f][t])
		}
		levels[i] = x.Compact()
		if levels[i].N < 2 {
			return
		}
	}
	// lost tells how many degrees of freedom the last term loses to those before it.
	lost := func(terms ...[]int) int {
		fit, err := linear.Model{Y: make([]float64, len(rows)), Factors: levels, Terms: terms}.Fit()
		if err != nil {
			return 0
		}
		for _, x := range fit.Aliased() {
			if x.Kind == linear.Term && x.Index == len(terms)-1 {
				return x.Lost
			}
		}
		return 0
	}
	aliased := false
	done := make([]bool, len(fs))
	for i := range fs {
		var others [][]int
		var names []string
		for j := range fs {
			if j == i {
				continue
			}
			others = append(others, []int{j})
			if lost([]int{j}, []int{i}) > 0 {
				names = append(names, prose.TermText(p, p.Factors[fs[j]].Name))
				aliased = true
			}
		}
		if len(names) == 0 && lost(append(others, []int{i})...) > 0 {
			aliased = true
			for j := range fs {
				if j != i {
					names = append(names, prose.TermText(p, p.Factors[fs[j]].Name))
				}
			}
		}
		if len(names) == 0 || done[i] {
			continue
		}
		for j := range fs {
			done[j] = done[j] || slices.Contains(names, prose.TermText(p, p.Factors[fs[j]].Name))
		}
		message, hint := prose.AliasedFactors(p, fs[i], names)
		c.at("treatment[0]", Aliased, Warning, message, hint)
	}
	if aliased {
		return
	}
	// Each main effect against the interactions of two others: a fraction of a factorial.
	for i := range fs {
		var with []string
		var mains [][]int
		for j := range fs {
			if j != i {
				mains = append(mains, []int{j})
			}
		}
		for j := range fs {
			for k := j + 1; k < len(fs); k++ {
				if j == i || k == i {
					continue
				}
				if lost(append(slices.Clone(mains), []int{j, k}, []int{i})...) > 0 {
					with = append(with, prose.TermText(p, p.Factors[fs[j]].Name+":"+p.Factors[fs[k]].Name))
				}
			}
		}
		if len(with) > 0 {
			message, hint := prose.AliasedInteraction(p, fs[i], with)
			c.at("treatment[0]", Aliased, Note, message, hint)
		}
	}
}
