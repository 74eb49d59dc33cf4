package layout

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol"
	"penwright/protocol/diag"
)

// Allocation is what a unit receives and how often: all that a draw must know of
// numbers. It is planned from counts alone.
type Allocation struct {
	Unit    int
	Factors []int // indices into Plan.Factors, those the unit receives

	// Combinations lists what one instance can receive: one level for each of Factors,
	// the first factor slowest. Where Separate is true each factor is drawn by itself
	// and Combinations is nil.
	Combinations [][]int
	Separate     bool // factors that are each a Latin square on a crossing unit

	// Total is how many instances of the unit are planned for each combination in the
	// whole trial, as equal as can be where the protocol does not say: what is left
	// over goes one by one to controls first, then in order. With Separate it is nil.
	Total []int

	// Blocks lists the units inside which the draw is made: the parent, or the crossed
	// units; empty for a draw over the whole trial.
	Blocks []int
	// Complete tells whether every instance of every one of Blocks can hold the
	// combinations in the proportions of Total.
	Complete bool
	// Checks marks the combinations that stand in every block of an augmented design;
	// nil otherwise.
	Checks []bool
}

// Allocation tells what unit u receives, nil when it receives nothing.
func (p *Plan) Allocation(u int) *Allocation { return p.allocations[u] }

// Replicates is how many instances of unit u are planned for each of the combinations
// in Allocation(u).Combinations; nil when u receives nothing or its factors are drawn
// separately.
func (p *Plan) Replicates(u int) []int {
	if a := p.allocations[u]; a != nil {
		return a.Total
	}
	return nil
}

// Planned is how many instances of unit u inside instance i of the coarser unit v are
// planned for each combination, or nil when numbers are not proportional there, so
// that only the draw decides.
func (p *Plan) Planned(u, v, i int) []int {
	a := p.allocations[u]
	if a == nil || a.Separate || p.coarse[u][v] == nil {
		return nil
	}
	size := 0
	for _, j := range p.coarse[u][v] {
		if int(j) == i {
			size++
		}
	}
	out := make([]int, len(a.Total))
	for c, total := range a.Total {
		if size*total%p.Units[u].N != 0 {
			return nil
		}
		out[c] = size * total / p.Units[u].N
	}
	return out
}

// marginal adds Total over the combinations that agree in the factors fs.
func (a *Allocation) marginal(plan *Plan, fs []int) []int {
	n := 1
	for _, f := range fs {
		n *= len(plan.Factors[f].Levels)
	}
	if a.Separate {
		// One factor of a separate draw, since its factors share no term.
		return equally(plan.Units[a.Unit].N, n, nil)
	}
	out := make([]int, n)
	for c, levels := range a.Combinations {
		at := 0
		for i, f := range a.Factors {
			if slices.Contains(fs, f) {
				at = at*len(plan.Factors[f].Levels) + levels[i]
			}
		}
		out[at] += a.Total[c]
	}
	return out
}

// equally shares n among parts; what is left over goes to those of first, then to the
// others in order.
func equally(n, parts int, first []int) []int {
	out := make([]int, parts)
	for i := range out {
		out[i] = n / parts
	}
	left := n % parts
	for _, i := range first {
		if left > 0 {
			out[i]++
			left--
		}
	}
	for i := range out {
		if left > 0 && !slices.Contains(first, i) {
			out[i]++
			left--
		}
	}
	return out
}

// allocate plans numbers for every unit that receives something.
func (b *builder) allocate() bool {
	plan := b.plan
	plan.allocations = make([]*Allocation, len(plan.Units))
	plan.separate = make([]bool, len(plan.Units))
	for u := range plan.Units {
		unit, pu := &plan.Units[u], &b.p.Units[u]
		if len(unit.Receives) == 0 {
			if len(pu.Replicates) > 0 {
				b.fail(unitKey(u, "replicates"), protocol.Conflict, "", "unit %q receives nothing, so it has no replicates", unit.Name)
			}
			if len(pu.Checks) > 0 {
				b.fail(unitKey(u, "checks"), BadChecks, "", "unit %q receives nothing, so it has no checks", unit.Name)
			}
			continue
		}
		a := &Allocation{Unit: u, Factors: unit.Receives}
		plan.allocations[u] = a
		if unit.Within >= 0 {
			a.Blocks = []int{unit.Within}
		}
		if unit.Crosses != nil {
			a.Blocks = unit.Crosses
			a.Separate = b.latin(u)
			plan.separate[u] = a.Separate
		}
		if a.Separate {
			if len(pu.Replicates) > 0 {
				b.fail(unitKey(u, "replicates"), protocol.Conflict, "", "unit %q receives several factors, each a Latin square, so replicates cannot be set", unit.Name)
			}
			a.Complete = true
			continue
		}
		n := 1
		for _, f := range a.Factors {
			if n *= len(plan.Factors[f].Levels); n > unit.N {
				break
			}
		}
		if n > unit.N {
			b.tooFew(u)
			continue
		}
		a.Combinations = make([][]int, n)
		for c := range a.Combinations {
			a.Combinations[c] = make([]int, len(a.Factors))
			rest := c
			for i := len(a.Factors) - 1; i >= 0; i-- {
				levels := len(plan.Factors[a.Factors[i]].Levels)
				a.Combinations[c][i] = rest % levels
				rest /= levels
			}
		}
		switch {
		case len(pu.Checks) > 0:
			b.augment(u, a, pu)
		case len(pu.Replicates) > 0:
			b.replicate(u, a, pu)
		default:
			a.Total = equally(unit.N, n, b.controls(a))
		}
		if a.Total == nil {
			continue
		}
		a.Complete = true
		for _, v := range a.Blocks {
			for _, size := range plan.sizes(u, v) {
				for _, total := range a.Total {
					a.Complete = a.Complete && size*total%unit.N == 0
				}
			}
		}
		b.uneven(u, a)
	}
	return !b.list.HasErrors()
}

func (b *builder) tooFew(u int) {
	unit := &b.plan.Units[u]
	var product []string
	for _, f := range unit.Receives {
		product = append(product, fmt.Sprintf("%d %s", len(b.plan.Factors[f].Levels), b.plan.Factors[f].Name))
	}
	hint := "more units are needed"
	if len(unit.Receives) > 1 {
		hint = "more units are needed, or list the treatments that are used as [[treatment]] tables"
	}
	b.fail(unitKey(u, "receives"), TooFewUnits, hint, "%d instances of unit %q cannot receive every one of %s", unit.N, unit.Name, strings.Join(product, " × "))
}

// latin tells whether crossing unit u receives several factors that are each a Latin
// square on it, so that all their combinations cannot stand in every row and column.
func (b *builder) latin(u int) bool {
	plan := b.plan
	unit := &plan.Units[u]
	if len(unit.Receives) < 2 {
		return false
	}
	side := len(plan.Factors[unit.Receives[0]].Levels)
	for _, f := range unit.Receives {
		if len(plan.Factors[f].Levels) != side {
			return false
		}
	}
	square := false
	for _, v := range unit.Crosses {
		for _, size := range plan.sizes(u, v) {
			if size%side != 0 {
				return false
			}
			square = square || size == side
		}
	}
	return square
}

// controls lists the combinations all of whose levels are controls.
func (b *builder) controls(a *Allocation) []int {
	var out []int
	for c, levels := range a.Combinations {
		all := true
		for i, f := range a.Factors {
			all = all && slices.Contains(b.plan.Factors[f].Control, levels[i])
		}
		if all {
			out = append(out, c)
		}
	}
	return out
}

// replicate plans the numbers the protocol states. They hold inside every block, or,
// where they do not fit there, for the whole trial.
func (b *builder) replicate(u int, a *Allocation, pu *protocol.Unit) {
	plan := b.plan
	unit, key := &plan.Units[u], unitKey(u, "replicates")
	if len(a.Factors) != 1 {
		b.fail(key, protocol.Conflict, "list the treatments as [[treatment]] tables", "unit %q receives %d factors, so replicates of one level say too little", unit.Name, len(a.Factors))
		return
	}
	levels := plan.Factors[a.Factors[0]].Levels
	stated := make([]int, len(levels))
	sum, listed := 0, 0
	for _, r := range pu.Replicates {
		l := slices.Index(levels, r.Level)
		switch {
		case l < 0:
			b.fail(key, protocol.UnknownLevel, "levels are "+strings.Join(levels, ", "), "%q is no level of %q", r.Level, plan.Factors[a.Factors[0]].Name)
			return
		case r.N < 1 || r.N > maxRows:
			b.fail(key, protocol.BadCount, "", "%d replicates of %q are out of range", r.N, r.Level)
			return
		case stated[l] > 0:
			b.fail(key, protocol.Duplicate, "", "replicates of %q are given twice", r.Level)
			return
		}
		stated[l] = r.N
		sum += r.N
		listed++
	}
	fits := func(size int) bool {
		if listed == len(levels) {
			return sum == size
		}
		return size-sum >= len(levels)-listed
	}
	// share completes the stated numbers to size units in each of times places.
	share := func(size, times int) []int {
		rest := equally((size-sum)*times, max(len(levels)-listed, 1), nil)
		out, next := make([]int, len(levels)), 0
		for l, r := range stated {
			if r > 0 {
				out[l] = r * times
				continue
			}
			out[l] = rest[next]
			next++
		}
		return out
	}
	inBlocks := len(a.Blocks) > 0
	for _, v := range a.Blocks {
		sizes := plan.sizes(u, v)
		inBlocks = inBlocks && len(sizes) == 1 && fits(sizes[0])
	}
	switch {
	case inBlocks:
		size := plan.sizes(u, a.Blocks[0])[0]
		a.Total = share(size, unit.N/size)
	case fits(unit.N):
		a.Total = share(unit.N, 1)
	case listed < len(levels):
		b.fail(key, protocol.BadCount, "", "replicates add up to %d and leave too few of the %d instances of unit %q for the other %d levels", sum, unit.N, unit.Name, len(levels)-listed)
	case len(a.Blocks) > 0:
		v := a.Blocks[0]
		sizes := plan.sizes(u, v)
		b.fail(key, protocol.BadCount, "", "replicates add up to %d, but each %s holds %s and the trial %d", sum, plan.Units[v].Name, span(sizes, unit.Name), unit.N)
	default:
		b.fail(key, protocol.BadCount, "", "replicates add up to %d, but there are %d instances of unit %q", sum, unit.N, unit.Name)
	}
}

func span(sizes []int, name string) string {
	if len(sizes) == 1 {
		return fmt.Sprintf("%d of unit %q", sizes[0], name)
	}
	return fmt.Sprintf("%d to %d of unit %q", sizes[0], sizes[len(sizes)-1], name)
}

// augment plans an augmented design: checks once, or as replicates say, in every
// block, and every other treatment once in the trial.
func (b *builder) augment(u int, a *Allocation, pu *protocol.Unit) {
	plan := b.plan
	unit, key := &plan.Units[u], unitKey(u, "checks")
	if len(a.Factors) != 1 || plan.Factors[a.Factors[0]].Name != Listed {
		b.fail(key, BadChecks, "list the treatments as [[treatment]] tables and say receives = [\"treatment\"]", "checks are treatments of a list, which unit %q does not receive", unit.Name)
		return
	}
	codes := plan.Factors[a.Factors[0]].Levels
	each := make([]int, len(codes))
	a.Checks = make([]bool, len(codes))
	for i, c := range pu.Checks {
		at := slices.Index(codes, c)
		if at < 0 {
			b.fail(fmt.Sprintf("%s[%d]", key, i), protocol.UnknownLevel, "treatments are "+strings.Join(codes, ", "), "check %q is not a listed treatment", c)
			return
		}
		a.Checks[at], each[at] = true, 1
	}
	for _, r := range pu.Replicates {
		at := slices.Index(codes, r.Level)
		if at < 0 || !a.Checks[at] || r.N < 1 || r.N > maxRows {
			b.fail(unitKey(u, "replicates"), BadChecks, "", "in an augmented design replicates are for checks, 1 or more in each block; %q has %d", r.Level, r.N)
			return
		}
		each[at] = r.N
	}
	// Blocks are the instances of the parent; checks stand in each row and each column
	// of crossed units, and without either only once over the trial, or as replicates say.
	blocks, least := 1, unit.N
	for i, v := range a.Blocks {
		if i == 0 || plan.Units[v].N < blocks {
			blocks = plan.Units[v].N
		}
		least = min(least, plan.sizes(u, v)[0])
	}
	inBlock, entries := 0, 0
	total := make([]int, len(codes))
	for c := range codes {
		total[c] = 1
		if a.Checks[c] {
			total[c] = each[c] * blocks
			inBlock += each[c]
		} else {
			entries++
		}
	}
	if inBlock > least {
		b.fail(key, BadChecks, "", "the checks take %d units of a block, but the smallest block has %d", inBlock, least)
		return
	}
	if free := unit.N - inBlock*blocks; free != entries {
		b.fail(key, BadChecks, fmt.Sprintf("unit %q needs %d instances in all", unit.Name, inBlock*blocks+entries),
			"%d instances of unit %q less %d for checks leave %d for %d entries", unit.N, unit.Name, inBlock*blocks, free, entries)
		return
	}
	a.Total = total
}

// uneven warns where a block holds all treatments but not in equal numbers, since that
// is rarely meant.
func (b *builder) uneven(u int, a *Allocation) {
	plan := b.plan
	pu := &b.p.Units[u]
	if a.Complete || len(pu.Replicates) > 0 || a.Checks != nil || len(a.Blocks) != 1 || plan.Units[a.Blocks[0]].N == 1 {
		return
	}
	v, n := a.Blocks[0], len(a.Combinations)
	for _, size := range plan.sizes(u, v) {
		if size > n && size%n != 0 {
			b.list.Add(diag.Diagnostic{
				Pos: b.pos(unitKey(u, "count")), Key: unitKey(u, "count"), Severity: diag.Warning, Code: BlocksUneven,
				Message: fmt.Sprintf("%d instances of unit %q in one %s are no multiple of %d treatments", size, plan.Units[u].Name, plan.Units[v].Name, n),
				Hint:    fmt.Sprintf("blocks of %d or %d hold every treatment equally often", size/n*n, (size/n+1)*n),
			})
			return
		}
	}
}
