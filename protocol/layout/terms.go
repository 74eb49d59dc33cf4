package layout

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/factor"
)

// Listed is the name of the factor that stands for listed treatments.
const Listed = "treatment"

// factors lists treatment factors and carried classes and finds who receives them.
func (b *builder) factors() bool {
	p, plan := b.p, b.plan
	made := map[string]bool{} // factors that listed treatments are made of
	if len(p.Treatments) > 0 {
		f := Factor{Name: Listed, Unit: -1}
		seen := map[string]bool{}
		for t, tr := range p.Treatments {
			if seen[tr.Code] {
				b.fail(fmt.Sprintf("treatment[%d].code", t), protocol.Duplicate, "", "treatment %q is listed twice", tr.Code)
			}
			seen[tr.Code] = true
			f.Levels = append(f.Levels, tr.Code)
			if tr.Control {
				f.Control = append(f.Control, t)
			}
			for _, pf := range p.Factors {
				level, ok := tr.Levels[pf.Name]
				if !ok {
					continue
				}
				made[pf.Name] = true
				if !slices.Contains(pf.Levels, level) {
					b.fail(fmt.Sprintf("treatment[%d].levels", t), protocol.UnknownLevel, "levels are "+strings.Join(pf.Levels, ", "),
						"treatment %q has %q, which is no level of factor %q", tr.Code, level, pf.Name)
				}
			}
		}
		plan.Factors = append(plan.Factors, f)
	}
	for i := range p.Factors {
		pf := &p.Factors[i]
		f := Factor{Name: pf.Name, Label: pf.Label, Unit: -1, Levels: pf.Levels, Values: pf.Values, Protocol: pf}
		if pf.Name == Listed && len(p.Treatments) > 0 {
			b.fail(fmt.Sprintf("factor[%d].name", i), protocol.ReservedName, "rename the factor", "listed treatments are called %q, so a factor cannot be", Listed)
		}
		if slices.ContainsFunc(p.Factors[:i], func(q protocol.Factor) bool { return q.Name == pf.Name }) {
			b.fail(fmt.Sprintf("factor[%d].name", i), protocol.Duplicate, "", "factor %q is declared twice", pf.Name)
		}
		for _, c := range pf.Control {
			if l := slices.Index(pf.Levels, c); l >= 0 {
				f.Control = append(f.Control, l)
			} else {
				b.fail(fmt.Sprintf("factor[%d].control", i), protocol.UnknownLevel, "levels are "+strings.Join(pf.Levels, ", "), "control %q is no level of factor %q", c, pf.Name)
			}
		}
		plan.Factors = append(plan.Factors, f)
	}
	for f, of := range plan.Factors {
		key := "treatment"
		if of.Protocol != nil {
			key = fmt.Sprintf("factor[%d].levels", f-min(len(p.Treatments), 1))
		}
		switch n := len(of.Levels); {
		case n > maxLevels:
			b.fail(key, protocol.TooMany, "", "%d levels of %q are more than the %d a factor may have", n, of.Name, maxLevels)
		case n < 2:
			b.fail(key, protocol.TooFew, "a factor needs two levels or more", "factor %q has %d levels, so there is nothing to compare", of.Name, n)
		}
	}
	receives := false
	for u := range plan.Units {
		for i, name := range p.Units[u].Receives {
			receives = true
			b.give(u, fmt.Sprintf("%s[%d]", unitKey(u, "receives"), i), name, made, false)
		}
		for i, name := range p.Units[u].Carries {
			b.give(u, fmt.Sprintf("%s[%d]", unitKey(u, "carries"), i), name, made, true)
		}
		if pr := p.Units[u].Random; pr != nil && !*pr && len(p.Units[u].Receives) > 0 {
			b.fail(unitKey(u, "random"), protocol.Conflict, "leave it out: units that receive a treatment are always random",
				"unit %q receives a treatment, so it cannot be fixed", plan.Units[u].Name)
		}
		if plan.Units[u].Interacts && len(p.Units[u].Receives)+len(p.Units[u].Carries) > 0 {
			b.fail(unitKey(u, "interacts"), CannotInteract, "interactions of treatments are terms of their own",
				"unit %q receives or carries something, so interacts cannot be set", plan.Units[u].Name)
		}
	}
	if !receives {
		b.fail("unit", protocol.NotReceived, `say receives = ["…"] on the unit to which the treatments are applied`, "no unit receives a treatment")
		return false
	}
	for f := range plan.Factors {
		of := &plan.Factors[f]
		switch {
		case of.Unit >= 0:
			// Units list their factors in the protocol's order of factors, not in
			// that of receives.
			unit := &plan.Units[of.Unit]
			if of.Carried {
				unit.Carries = append(unit.Carries, f)
			} else {
				unit.Receives = append(unit.Receives, f)
			}
		case of.Protocol == nil:
			b.fail("treatment[0].code", protocol.NotReceived, `say receives = ["treatment"] on the unit to which they are applied`, "treatments are listed, but no unit receives %q", Listed)
		case !made[of.Name]:
			b.fail(fmt.Sprintf("factor[%d].name", f-min(len(p.Treatments), 1)), protocol.NotReceived, "name it in receives or carries of a unit, or remove it",
				"factor %q is neither received nor carried by any unit", of.Name)
		}
	}
	for u := range plan.Units {
		unit := &plan.Units[u]
		if len(unit.Receives)+len(unit.Carries) > 0 && unit.N > maxExperimental {
			b.fail(unitKey(u, "receives"), protocol.TooMany, "", "unit %q has %d instances, more than the %d experimental units a trial may have", unit.Name, unit.N, maxExperimental)
		}
	}
	return !b.list.HasErrors()
}

// give makes unit u receive or carry the named factor.
func (b *builder) give(u int, key, name string, made map[string]bool, carried bool) {
	plan := b.plan
	f := slices.IndexFunc(plan.Factors, func(f Factor) bool { return f.Name == name })
	switch {
	case f < 0 && name == Listed:
		b.fail(key, protocol.UnknownName, "list treatments as [[treatment]] tables", "unit %q receives %q, but no treatments are listed", plan.Units[u].Name, name)
	case f < 0:
		known := make([]string, len(plan.Factors))
		for i, of := range plan.Factors {
			known[i] = of.Name
		}
		b.fail(key, protocol.UnknownName, "factors are "+strings.Join(known, ", "), "factor %q is not declared", name)
	case made[name]:
		b.fail(key, protocol.Conflict, `say "treatment"`, "factor %q is part of the listed treatments, which units receive as %q", name, Listed)
	case carried && plan.Factors[f].Protocol == nil:
		b.fail(key, protocol.Conflict, "say receives", "listed treatments are received, not carried")
	case plan.Factors[f].Unit >= 0:
		b.fail(key, protocol.ReceivedTwice, "a factor has one experimental unit", "factor %q is already received or carried by unit %q", name, plan.Units[plan.Factors[f].Unit].Name)
	default:
		plan.Factors[f].Unit, plan.Factors[f].Carried = u, carried
	}
}

// terms lists main effects and interactions with their experimental units and strata.
func (b *builder) terms() bool {
	plan := b.plan
	var active []int
	for f, of := range plan.Factors {
		if of.Unit >= 0 {
			active = append(active, f)
		}
	}
	highest := b.p.Analysis.Interactions
	if highest < 1 || highest > len(active) {
		highest = len(active)
	}
	for order := 1; order <= highest; order++ {
		before := len(plan.Terms)
		if !b.combine(active, nil, order) {
			b.fail("analysis.interactions", protocol.TooMany, fmt.Sprintf("say interactions = %d", max(order-1, 1)),
				"%d factors make more than the %d terms a trial may have", len(active), maxTerms)
			return false
		}
		if len(plan.Terms) == before {
			break
		}
	}
	for _, t := range plan.Terms {
		if unit := &plan.Units[t.Unit]; unit.N > maxExperimental {
			b.fail(unitKey(t.Unit, "name"), protocol.TooMany, "", "unit %q, on which %s acts, has %d instances, more than the %d experimental units a trial may have", unit.Name, t.Name, unit.N, maxExperimental)
			return false
		}
	}
	return true
}

// combine appends the terms of as many more factors as order says, in lexicographic
// order, and tells whether the limit holds.
func (b *builder) combine(rest, chosen []int, order int) bool {
	if order == 0 {
		return b.term(slices.Clone(chosen))
	}
	for i, f := range rest {
		if len(rest)-i < order {
			break
		}
		excluded := false
		for _, g := range chosen {
			u := b.plan.Factors[f].Unit
			excluded = excluded || u == b.plan.Factors[g].Unit && b.plan.separate[u] && !b.plan.Factors[f].Carried && !b.plan.Factors[g].Carried
		}
		if !excluded && !b.combine(rest[i+1:], append(chosen, f), order-1) {
			return false
		}
	}
	return true
}

const manyDF = 1 << 30 // stands for a product that is too large to matter

func (b *builder) term(fs []int) bool {
	plan := b.plan
	if len(plan.Terms) == maxTerms {
		return false
	}
	t := Term{Factors: fs, DF: 1, Stratum: -1, Over: -1}
	var units []int
	for i, f := range fs {
		of := plan.Factors[f]
		if i > 0 {
			t.Name += ":"
		}
		t.Name += of.Name
		if t.DF *= len(of.Levels) - 1; t.DF > manyDF {
			t.DF = manyDF
		}
		units = append(units, of.Unit)
	}
	t.Unit = b.meet(units...)
	plan.Terms = append(plan.Terms, t)
	return true
}

// place finds the stratum of each term, when units interact what that takes, and what
// is left for error.
func (b *builder) place() {
	plan := b.plan
	for i := range plan.Terms {
		t := &plan.Terms[i]
		s := plan.stratum(t.Unit)
		if b.lies(t) {
			t.Stratum = s
			plan.Strata[s].Terms = append(plan.Strata[s].Terms, i)
		}
		plan.Strata[s].ErrorDF -= t.DF
	}
	b.interact()
	for _, e := range b.extras() {
		plan.Strata[plan.stratum(e.unit)].ErrorDF -= e.df
	}
	for i := range plan.Terms {
		t := &plan.Terms[i]
		switch {
		case t.Inexact:
			t.Over = -1
			b.add(diag.Warning, unitKey(b.interacting(i), "interacts"), NoExactError, "a mixed model is needed, or interacts = true on fewer units",
				"%s has two errors at once, so no single mean square tests it", t.Name)
		case t.Over >= 0:
			t.ErrorDF = plan.Crossed[t.Over].DF
		default:
			t.ErrorDF = max(plan.Strata[plan.stratum(t.Unit)].ErrorDF, 0)
		}
	}
	b.noError()
}

// interacting is the last unit whose random interaction with term t counts.
func (b *builder) interacting(t int) int {
	u := 0
	for _, c := range b.plan.Crossed {
		if c.Term == t && c.Random {
			u = c.Unit
		}
	}
	return u
}

// lies tells whether term t can be orthogonal to every unit coarser than its own, so
// that it lies wholly in the stratum of its unit.
func (b *builder) lies(t *Term) bool {
	if b.plan.Strata[b.plan.stratum(t.Unit)].DF < t.DF {
		return false
	}
	for v := range b.plan.Units {
		if v != t.Unit && b.up[t.Unit][v] && !b.balanced(t, v) && !b.joint(t, v) {
			return false
		}
	}
	return true
}

// balanced tells whether t is orthogonal to unit v whenever every unit receives its
// levels in proportional numbers within its blocks: the factors that one of the units
// receives must stand in proportional numbers wherever v and the units that receive
// the other factors are fixed.
func (b *builder) balanced(t *Term, v int) bool {
	plan := b.plan
	for i, f := range t.Factors {
		w := plan.Factors[f].Unit
		first := i == 0 || !slices.ContainsFunc(t.Factors[:i], func(g int) bool { return plan.Factors[g].Unit == w })
		if first && !b.up[v][w] && b.proportional(t, w, b.fixed(t, w, v)) {
			return true
		}
	}
	return false
}

// joint tells whether unit v can hold all combinations of the factors of t equally
// often, as when squares are made for each level of a factor that whole animals get.
func (b *builder) joint(t *Term, v int) bool {
	plan := b.plan
	cells := 1
	for _, f := range t.Factors {
		w := plan.Factors[f].Unit
		if b.up[v][w] {
			return false
		}
		if total := plan.allocations[w]; total != nil && !total.Separate {
			m := total.marginal(plan, []int{f})
			if slices.Min(m) != slices.Max(m) {
				return false
			}
		}
		cells = min(cells*len(plan.Factors[f].Levels), manyDF)
	}
	return !slices.ContainsFunc(plan.sizes(t.Unit, v), func(n int) bool { return n%cells != 0 })
}

// fixed gives the different numbers of instances of unit w in the classes that
// fixing v and the other units of t leaves to it.
func (b *builder) fixed(t *Term, w, v int) []int {
	plan := b.plan
	mask := uint64(1) << v
	hold := []factor.Factor{plan.on(t.Unit, v)}
	for _, f := range t.Factors {
		if u := plan.Factors[f].Unit; u != w && mask&(1<<u) == 0 {
			mask |= 1 << u
			hold = append(hold, plan.on(t.Unit, u))
		}
	}
	key := [3]uint64{uint64(t.Unit), uint64(w), mask}
	if sizes, ok := b.classes[key]; ok {
		return sizes
	}
	units := plan.on(t.Unit, w)
	class := factor.Supremum(units, factor.Infimum(hold...))
	count := make([]int, class.N)
	seen := make([]bool, units.N)
	for i, u := range units.Level {
		if !seen[u] {
			seen[u] = true
			count[class.Level[i]]++
		}
	}
	slices.Sort(count)
	count = slices.Compact(count)
	if b.classes == nil {
		b.classes = map[[3]uint64][]int{}
	}
	b.classes[key] = count
	return count
}

// on is unit v as a partition of the instances of the finer unit u.
func (p *Plan) on(u, v int) factor.Factor {
	return factor.Factor{Level: p.coarse[u][v], N: p.Units[v].N}
}

// proportional tells whether the levels of the factors of t that unit w receives or
// carries can stand in proportional numbers in classes of the given sizes.
func (b *builder) proportional(t *Term, w int, sizes []int) bool {
	plan := b.plan
	n := plan.Units[w].N
	if len(sizes) == 1 && sizes[0] == n {
		return true
	}
	combinations, carried := 1, false
	var fs []int
	for _, f := range t.Factors {
		if plan.Factors[f].Unit == w {
			fs = append(fs, f)
			carried = carried || plan.Factors[f].Carried
			combinations = min(combinations*len(plan.Factors[f].Levels), manyDF)
		}
	}
	if carried {
		// Numbers of a carried class are known with the roster; plan on equal ones.
		return !slices.ContainsFunc(sizes, func(n int) bool { return n%combinations != 0 })
	}
	for _, total := range plan.allocations[w].marginal(plan, fs) {
		for _, size := range sizes {
			if size*total%n != 0 {
				return false
			}
		}
	}
	return true
}

// sizes lists the different numbers of instances of w in an instance of the coarser
// unit s, ascending.
func (p *Plan) sizes(w, s int) []int {
	count := make([]int, p.Units[s].N)
	for _, i := range p.coarse[w][s] {
		count[i]++
	}
	slices.Sort(count)
	return slices.Compact(count)
}

// interact adds the interactions of units with terms.
func (b *builder) interact() {
	plan := b.plan
	own := make([]int, len(plan.Units)) // degrees of freedom of an interacting unit after coarser ones that interact
	for _, v := range b.sort {
		unit := &plan.Units[v]
		if !unit.Interacts {
			continue
		}
		own[v] = unit.N - 1
		for w := range plan.Units {
			if w != v && b.up[v][w] {
				own[v] -= own[w]
			}
		}
	}
	for v := range plan.Units {
		unit := &plan.Units[v]
		if !unit.Interacts {
			continue
		}
		random := b.p.Units[v].Random == nil || *b.p.Units[v].Random
		some := false
		for i := range plan.Terms {
			t := &plan.Terms[i]
			if b.up[v][t.Unit] {
				continue // the unit lies within those that received the term
			}
			some = true
			c := Crossed{Name: unit.Name + ":" + t.Name, Unit: v, Term: i, DF: min(own[v]*t.DF, manyDF), Random: random}
			c.Stratum = plan.stratum(b.meet(v, t.Unit))
			plan.Strata[c.Stratum].ErrorDF -= c.DF
			if random && own[v] > 0 {
				if t.Over >= 0 || c.Stratum != plan.stratum(t.Unit) {
					t.Inexact = true
				}
				t.Over = len(plan.Crossed)
			}
			plan.Crossed = append(plan.Crossed, c)
		}
		if !some {
			b.fail(unitKey(v, "interacts"), CannotInteract, "leave it out", "unit %q lies within the units that receive the treatments, so it cannot interact with them", unit.Name)
		}
	}
}

// extra is what a declared crossover or time trend takes in the stratum of a unit.
type extra struct {
	unit   int
	source string
	df     int
	kind   Kind
}

// extras lists what [carryover] and [time_trend] add to the model. A crossover adds a
// carry-over effect of its factor; a time trend gives every unit its own polynomial
// over the periods, whose mean is part of the periods already.
func (b *builder) extras() []extra {
	var out []extra
	if c := b.p.CarryOver; c != nil {
		f := slices.IndexFunc(b.plan.Factors, func(f Factor) bool { return f.Name == c.Factor })
		if f >= 0 && b.plan.Factors[f].Unit >= 0 {
			out = append(out, extra{unit: b.plan.Factors[f].Unit, source: "carry-over", df: len(b.plan.Factors[f].Levels) - 1, kind: CarryOver})
		}
	}
	if t := b.p.TimeTrend; t != nil {
		on, along := b.unit(t.On), b.unit(t.Along)
		if on >= 0 && along >= 0 {
			if w := b.meet(on, along); w >= 0 {
				out = append(out, extra{unit: w, source: t.On + ":" + t.Along + " trend", df: (b.plan.Units[on].N - 1) * max(t.Order, 1), kind: Trend})
			}
		}
	}
	return out
}

func (b *builder) unit(name string) int {
	return slices.IndexFunc(b.plan.Units, func(u Unit) bool { return u.Name == name })
}

// noError warns of terms for which nothing is left to test them against, and says
// which order of interactions leaves something. It is a warning, since such a plan may
// be shown and changed; an analysis of it is refused.
func (b *builder) noError() {
	plan := b.plan
	var bad []string
	unit := -1
	for _, t := range plan.Terms {
		if t.ErrorDF > 0 || t.Inexact {
			continue
		}
		bad = append(bad, t.Name)
		if unit < 0 {
			unit = t.Unit
		}
	}
	if unit < 0 {
		return
	}
	hint := "more units are needed"
	highest := 0
	for _, t := range plan.Terms {
		highest = max(highest, len(t.Factors))
	}
	for order := highest - 1; order >= 1; order-- {
		if left := b.errorAt(order); left > 0 {
			hint = "interactions = " + strconv.Itoa(order) + " leaves " + strconv.Itoa(left)
			if order == 1 {
				hint = `interactions = "none" leaves ` + strconv.Itoa(left)
			}
			break
		}
	}
	shown := bad
	if len(shown) > 3 {
		shown = append(slices.Clone(shown[:3]), fmt.Sprintf("%d more", len(bad)-3))
	}
	b.list.Add(diag.Diagnostic{
		Pos: b.pos(unitKey(unit, "name")), Key: unitKey(unit, "name"), Severity: diag.Warning, Code: NoError,
		Message: fmt.Sprintf("no degrees of freedom are left for the error of %s", strings.Join(shown, ", ")),
		Hint:    hint,
	})
}

// errorAt is the smallest number of error degrees of freedom of any term when terms
// have at most order factors.
func (b *builder) errorAt(order int) int {
	plan := b.plan
	left := make([]int, len(plan.Strata))
	for s, st := range plan.Strata {
		left[s] = st.ErrorDF
	}
	for _, t := range plan.Terms {
		if len(t.Factors) > order {
			left[plan.stratum(t.Unit)] += t.DF
		}
	}
	for _, c := range plan.Crossed {
		if len(plan.Terms[c.Term].Factors) > order {
			left[c.Stratum] += c.DF
		}
	}
	least := manyDF
	for _, t := range plan.Terms {
		if len(t.Factors) > order || t.Inexact {
			continue
		}
		if t.Over >= 0 {
			least = min(least, plan.Crossed[t.Over].DF)
		} else {
			least = min(least, left[plan.stratum(t.Unit)])
		}
	}
	return least
}
