package allot

import (
	"fmt"
	"slices"

	"penwright/protocol/layout"
)

// augmentedBlocks draws an augmented design: checks as often as planned in every block,
// and every other treatment once in the trial.
type augmentedBlocks struct {
	of      *layout.Allocation
	plan    *layout.Plan
	members [][]int32 // instances in each block
	checks  []int32   // in one block, each as often as it stands there
	entries []int32
}

// augmentedGrid draws an augmented design on rows and columns: the letters of a Latin
// square that are kept for checks, so that none stands twice in a row or column.
type augmentedGrid struct {
	of      *layout.Allocation
	plan    *layout.Plan
	grid    *grid
	square  square
	checks  []int32
	entries []int32
}

func (r *refusal) augmented(a *layout.Allocation, fixed, levels [][]int32) step {
	plan, u := r.plan, a.Unit
	unit := &plan.Units[u]
	key := fmt.Sprintf("unit[%d].checks", u)
	if class, ok := r.classes(u, fixed); !ok {
		return nil
	} else if class != nil {
		r.add(key, NotDrawn, "leave out carries; or "+elsewhere, "an augmented design on units that carry %s is not drawn, since every entry stands in one class only", factorNames(plan, unit.Carries))
		return nil
	}
	blocks := 1
	for i, v := range a.Blocks {
		if i == 0 || plan.Units[v].N < blocks {
			blocks = plan.Units[v].N
		}
	}
	var checks, entries []int32
	for c, total := range a.Total {
		if !a.Checks[c] {
			entries = append(entries, int32(c))
			continue
		}
		for range total / blocks {
			checks = append(checks, int32(c))
		}
	}
	if unit.Crosses == nil {
		members := members(plan, u, unit.Within)
		return &augmentedBlocks{of: a, plan: plan, members: members, checks: checks, entries: entries}
	}
	refuse := func(format string, args ...any) step {
		r.add(key, NotDrawn, "give the checks blocks instead, "+`within = "row"`+"; or "+elsewhere, format, args...)
		return nil
	}
	if len(unit.Crosses) != 2 {
		return refuse("checks on %s, which crosses %d units, are not drawn", unit.Name, len(unit.Crosses))
	}
	gr, why := r.grid(u, unit.Crosses[0], unit.Crosses[1], fixed)
	if gr == nil {
		if why == "" {
			return nil
		}
		return refuse("%s", why)
	}
	fields := gr.fields(levels)
	if len(fields) != 1 {
		return refuse("checks in the rows and columns of %s are drawn for a single field, in which every %s meets every %s", unit.Name, plan.Units[unit.Crosses[0]].Name, plan.Units[unit.Crosses[1]].Name)
	}
	n := max(fields[0].rows, fields[0].columns)
	if n > largestSquare {
		return refuse("checks on more than %d rows or columns are not drawn", largestSquare)
	}
	return &augmentedGrid{of: a, plan: plan, grid: gr, square: newSquare(n), checks: checks, entries: entries}
}

// members lists the instances of unit u in each instance of v, or all of them in one
// list where v is -1.
func members(plan *layout.Plan, u, v int) [][]int32 {
	if v < 0 {
		return [][]int32{identity(plan.Units[u].N)}
	}
	out := make([][]int32, plan.Units[v].N)
	for i, b := range plan.Coarse(u, v) {
		out[b] = append(out[b], int32(i))
	}
	return out
}

func (s *augmentedBlocks) allocation() *layout.Allocation { return s.of }

func (s *augmentedBlocks) draw(g *Generator, _ [][]int32, combination []int32) {
	entries := slices.Clone(s.entries)
	g.Shuffle(entries)
	for _, members := range s.members {
		list := slices.Clone(s.checks)
		n := len(members) - len(list)
		list = append(list, entries[:n]...)
		entries = entries[n:]
		g.Shuffle(list)
		for k, i := range members {
			combination[i] = list[k]
		}
	}
}

func (s *augmentedBlocks) words() string {
	unit := &s.plan.Units[s.of.Unit]
	place := "the trial"
	if unit.Within >= 0 {
		place = "each " + s.plan.Units[unit.Within].Name
	}
	return fmt.Sprintf("%s to %s: the list of the %d entries in the protocol's order is permuted; %s in the plan's order holds the %d checks in the protocol's order, then the next entries of that list until it is full, and what it holds is permuted",
		factorNames(s.plan, s.of.Factors), unit.Name, len(s.entries), place, len(s.checks))
}

func (s *augmentedGrid) allocation() *layout.Allocation { return s.of }

func (s *augmentedGrid) draw(g *Generator, levels [][]int32, combination []int32) {
	f := s.grid.fields(levels)[0]
	letters := s.square.draw(g)
	entries := slices.Clone(s.entries)
	g.Shuffle(entries)
	for k, i := range f.cells {
		letter := letters[k/f.columns*s.square.n+k%f.columns]
		if int(letter) < len(s.checks) {
			combination[i] = s.checks[letter]
			continue
		}
		combination[i] = entries[0]
		entries = entries[1:]
	}
}

func (s *augmentedGrid) words() string {
	unit := &s.plan.Units[s.of.Unit]
	return fmt.Sprintf("%s to %s: a Latin square of order %d is drawn and cut to the rows and columns there are; its first %d letters are the checks in the protocol's order, the other places in the plan's order are filled from the permuted list of the %d entries; %s",
		factorNames(s.plan, s.of.Factors), unit.Name, s.square.n, len(s.checks), len(s.entries), s.square.words())
}
