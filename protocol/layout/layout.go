package layout

import (
	"slices"

	"penwright/protocol"
	"penwright/protocol/diag"
)

// New makes the plan of a protocol. What is wrong is in the list; the plan is nil when
// any of it is an error. A plan that leaves no error for some term comes with the
// warning no-error, since it may be shown and mended; an analysis must refuse it.
func New(p *protocol.Protocol) (*Plan, diag.List) {
	b := &builder{p: p, plan: &Plan{Protocol: p}}
	for _, step := range []func() bool{
		b.relations, b.smallest, b.instances, b.factors, b.suprema, b.strata, b.allocate, b.terms,
	} {
		if !step() {
			return nil, b.list
		}
	}
	b.place()
	b.roles()
	b.random()
	if b.list.HasErrors() {
		return nil, b.list
	}
	b.plan.Design = b.recognise()
	b.called()
	return b.plan, b.list
}

// roles tells blocks, experimental units and sampling units apart.
func (b *builder) roles() {
	plan := b.plan
	for _, t := range plan.Terms {
		plan.Units[t.Unit].Role = Experimental
	}
	for u := range plan.Units {
		unit := &plan.Units[u]
		if unit.Role == Experimental {
			continue
		}
		within := true // all experimental units
		for v := range plan.Units {
			within = within && (plan.Units[v].Role != Experimental || b.up[u][v])
		}
		if within {
			unit.Role = Sampling
		}
	}
}

// random decides which units have random effects, by the rules of the methods: units
// that received a treatment and sampling units always; of the others blocks planned
// incomplete and the unit a crossover is made on, unless the protocol says otherwise.
func (b *builder) random() {
	plan := b.plan
	for u := range plan.Units {
		unit := &plan.Units[u]
		switch {
		case unit.Role != Block:
			unit.Random = true
		case b.p.CarryOver != nil && b.p.CarryOver.On == unit.Name:
			unit.Random = true
		default:
			unit.Random = b.incomplete(u)
		}
		if unit.Role == Block {
			switch b.p.Analysis.Blocks {
			case "fixed":
				unit.Random = false
			case "random":
				unit.Random = true
			}
		}
		if r := b.p.Units[u].Random; r != nil && len(unit.Receives) == 0 {
			unit.Random = *r
		}
	}
}

// incomplete tells whether unit v is a block planned incomplete: treatments are drawn
// inside it and cannot all stand in it in proportional numbers. Rows, columns and
// periods, which a crossing unit crosses, are not blocks in this sense.
func (b *builder) incomplete(v int) bool {
	plan := b.plan
	for u, a := range plan.allocations {
		if a == nil || !b.up[u][v] || u == v {
			continue
		}
		for w := range plan.Units {
			if b.up[u][w] && slices.Contains(plan.Units[w].Crosses, v) {
				return false
			}
		}
		if a.Separate || b.up[v][u] {
			continue
		}
		for _, size := range plan.sizes(u, v) {
			for _, total := range a.Total {
				if size*total%plan.Units[u].N != 0 {
					return true
				}
			}
		}
	}
	return false
}
