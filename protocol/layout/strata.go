package layout

import (
	"slices"

	"penwright/protocol/factor"
)

// meet is the coarsest unit that is finer than or equal to all of us, as said by within
// and crosses; of several the one with the fewest instances, then the first declared.
func (b *builder) meet(us ...int) int {
	best := -1
	for v := range b.plan.Units {
		if slices.ContainsFunc(us, func(u int) bool { return !b.up[v][u] }) {
			continue
		}
		if best < 0 || b.up[best][v] || !b.up[v][best] && b.plan.Units[v].N < b.plan.Units[best].N {
			best = v
		}
	}
	return best
}

// suprema finds for each pair of units the finest unit coarser than both. The sets of
// units on which strata stand must be closed under supremum: where two units agree in
// a crossing that bears no name, the trial lacks a unit and is told which.
func (b *builder) suprema() bool {
	n := len(b.plan.Units)
	b.plan.sup = make([][]int, n)
	for u := range n {
		b.plan.sup[u] = make([]int, n)
	}
	for u := range n {
		b.plan.sup[u][u] = u
		for v := range u {
			s := -1
			switch {
			case b.up[u][v]:
				s = v
			case b.up[v][u]:
				s = u
			default:
				var ok bool
				if s, ok = b.supremum(u, v); !ok {
					return false
				}
			}
			b.plan.sup[u][v], b.plan.sup[v][u] = s, s
		}
	}
	return true
}

func (b *builder) supremum(u, v int) (int, bool) {
	plan, w := b.plan, b.meet(u, v)
	f := factor.Factor{Level: plan.coarse[w][u], N: plan.Units[u].N}
	g := factor.Factor{Level: plan.coarse[w][v], N: plan.Units[v].N}
	classes := factor.Supremum(f, g).N
	if classes == 1 {
		return -1, true
	}
	// A unit coarser than both holds the supremum, so equal numbers of classes mean the
	// same partition. With count = 1 one of the two may be the supremum itself.
	for x := range plan.Units {
		if (x == u || x == v || b.up[u][x] && b.up[v][x]) && plan.Units[x].N == classes {
			return x, true
		}
	}
	shared := ""
	for x := range plan.Units {
		if b.up[u][x] && b.up[v][x] {
			shared += ", " + plan.Units[x].Name
		}
	}
	hint := ""
	if shared != "" {
		hint = "add a [[unit]] that crosses " + shared[2:] + ", and let both lie within it"
	}
	b.fail(unitKey(max(u, v), "name"), UnnamedUnit, hint,
		"units %q and %q agree in %d classes that are no unit of the trial", plan.Units[min(u, v)].Name, plan.Units[max(u, v)].Name, classes)
	return 0, false
}

// finer tells whether every instance of u lies within one of v, by what within and
// crosses say or because count = 1 makes it so.
func (p *Plan) finer(u, v int) bool {
	classes := 1
	if s := p.sup[u][v]; s >= 0 {
		classes = p.Units[s].N
	}
	return classes == p.Units[v].N
}

// coarser tells whether v comes before u in the order of the strata: whether it is
// strictly coarser, or the same partition and said to be the larger unit.
func (b *builder) coarser(u, v int) bool {
	switch {
	case u == v || !b.plan.finer(u, v):
		return false
	case b.plan.Units[v].N != b.plan.Units[u].N:
		return true
	}
	return b.up[u][v] || !b.up[v][u] && v < u
}

// strata gives every unit the space that is left of it after all coarser units, by
// Möbius inversion over the order of the units (Tjur 1984; Bailey 2008, ch. 10; from
// memory): df u = N u − 1 − Σ df v over the units v coarser than u.
func (b *builder) strata() bool {
	plan := b.plan
	df := make([]int, len(plan.Units))
	placed := make([]bool, len(plan.Units))
	for len(plan.Strata) < len(plan.Units) {
		before := len(plan.Strata)
		for u := range plan.Units {
			ready := !placed[u]
			for v := range plan.Units {
				ready = ready && (placed[v] || !b.coarser(u, v))
			}
			if !ready {
				continue
			}
			placed[u] = true
			df[u] = plan.Units[u].N - 1
			for v := range plan.Units {
				if b.coarser(u, v) {
					df[u] -= df[v]
				}
			}
			plan.Strata = append(plan.Strata, Stratum{Unit: u, Name: plan.Units[u].Name, DF: df[u], ErrorDF: df[u]})
			break // look again from the first, so that the protocol's order is kept where it can be
		}
		if len(plan.Strata) == before {
			panic("layout: order of units has a cycle")
		}
	}
	total := 0
	for _, s := range plan.Strata {
		total += s.DF
	}
	if total != plan.Units[plan.Smallest].N-1 {
		b.fail(unitKey(plan.Smallest, "name"), UnnamedUnit, "",
			"the units of the trial do not split its %d degrees of freedom", plan.Units[plan.Smallest].N-1)
		return false
	}
	return true
}

// stratum is the index of the stratum of unit u.
func (p *Plan) stratum(u int) int {
	return slices.IndexFunc(p.Strata, func(s Stratum) bool { return s.Unit == u })
}
