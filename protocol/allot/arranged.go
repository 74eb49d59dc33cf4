package allot

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// arranged draws from an arrangement of treatments on a unit that is fixed beforehand:
// all units are permuted in every way that leaves the structure of the units as it is,
// and so are the names of treatments that stand equally often.
type arranged struct {
	of    *layout.Allocation
	plan  *layout.Plan
	start []int32 // combination of each instance before it is permuted
	how   string

	within []permuted
	last   int       // index into within of the unit itself
	names  [][]int32 // combinations of equal replication
}

// permuted is a unit whose instances are permuted.
type permuted struct {
	unit   int
	parent int   // index of the parent among the permuted; -1: none
	cross  []int // of a crossing unit: the crossed ones
	shape  []int32
	lists  [][]int32 // instances of each parent
}

// arrange prepares the permutations for an arrangement.
func arrange(plan *layout.Plan, a *layout.Allocation, start []int32, how string) *arranged {
	s := &arranged{of: a, plan: plan, start: start, how: how}
	index := make([]int, len(plan.Units))
	for _, v := range above(plan, a.Unit) {
		index[v] = len(s.within)
		p := permuted{unit: v, parent: -1}
		unit := &plan.Units[v]
		for _, w := range unit.Crosses {
			p.cross = append(p.cross, index[w])
		}
		if unit.Within >= 0 {
			p.parent = index[unit.Within]
			p.lists = members(plan, v, unit.Within)
		} else {
			p.lists = [][]int32{identity(unit.N)}
		}
		s.within = append(s.within, p)
	}
	s.last = index[a.Unit]
	// Units are alike when what they hold is alike, from the smallest upwards.
	for k := len(s.within) - 1; k >= 0; k-- {
		p := &s.within[k]
		words := make([]strings.Builder, plan.Units[p.unit].N)
		for c := k + 1; c < len(s.within); c++ {
			child := &s.within[c]
			if child.parent != k {
				continue
			}
			for i, list := range child.lists {
				shapes := make([]int32, len(list))
				for j, x := range list {
					shapes[j] = child.shape[x]
				}
				slices.Sort(shapes)
				fmt.Fprintf(&words[i], "%d:", c)
				for j := 0; j < len(shapes); {
					n := j
					for n < len(shapes) && shapes[n] == shapes[j] {
						n++
					}
					fmt.Fprintf(&words[i], "%d×%d ", n-j, shapes[j])
					j = n
				}
			}
		}
		number := map[string]int32{}
		p.shape = make([]int32, len(words))
		for i := range words {
			w := words[i].String()
			if _, ok := number[w]; !ok {
				number[w] = int32(len(number))
			}
			p.shape[i] = number[w]
		}
	}
	for c, total := range a.Total {
		at := slices.IndexFunc(s.names, func(group []int32) bool { return a.Total[group[0]] == total })
		if at < 0 {
			at = len(s.names)
			s.names = append(s.names, nil)
		}
		s.names[at] = append(s.names[at], int32(c))
	}
	return s
}

// above lists the units that unit u lies in and u, none before one that holds it.
func above(plan *layout.Plan, u int) []int {
	var out []int
	done := make([]bool, len(plan.Units))
	for range plan.Units {
		for v := range plan.Units {
			free := !done[v] && plan.Coarse(u, v) != nil
			for w := range plan.Units {
				free = free && (w == v || done[w] || plan.Coarse(v, w) == nil)
			}
			if free {
				done[v] = true
				out = append(out, v)
				break
			}
		}
	}
	return out
}

func (s *arranged) allocation() *layout.Allocation { return s.of }

func (s *arranged) draw(g *Generator, _ [][]int32, combination []int32) {
	to := make([][]int32, len(s.within))
	for k := range s.within {
		p := &s.within[k]
		to[k] = make([]int32, s.plan.Units[p.unit].N)
		if p.cross != nil {
			s.crossed(p, to, to[k])
			continue
		}
		for i, list := range p.lists {
			target := list
			if p.parent >= 0 {
				target = p.lists[to[p.parent][i]]
			}
			for from := 0; from < len(list); {
				shape := p.shape[list[from]]
				var source, place []int32
				for _, x := range list {
					if p.shape[x] == shape {
						source = append(source, x)
					}
				}
				for _, x := range target {
					if p.shape[x] == shape {
						place = append(place, x)
					}
				}
				g.Shuffle(place)
				for j, x := range source {
					to[k][x] = place[j]
				}
				// The next shape that was not met yet.
				for from++; from < len(list) && slices.ContainsFunc(list[:from], func(x int32) bool { return p.shape[x] == p.shape[list[from]] }); from++ {
				}
			}
		}
	}
	names := identity(len(s.of.Total))
	for _, group := range s.names {
		list := slices.Clone(group)
		g.Shuffle(list)
		for j, c := range group {
			names[c] = list[j]
		}
	}
	for i, c := range s.start {
		combination[to[s.last][i]] = names[c]
	}
}

// crossed finds where the instances of a crossing unit go when the crossed units are
// permuted.
func (s *arranged) crossed(p *permuted, to [][]int32, out []int32) {
	number := make(map[key]int32, len(out))
	tuple := make([]int32, len(p.cross))
	for i := range out {
		for c, k := range p.cross {
			tuple[c] = s.plan.Coarse(p.unit, s.within[k].unit)[i]
		}
		number[crossing(tuple)] = int32(i)
	}
	for i := range out {
		for c, k := range p.cross {
			tuple[c] = to[k][s.plan.Coarse(p.unit, s.within[k].unit)[i]]
		}
		out[i] = number[crossing(tuple)]
	}
}

func (s *arranged) words() string {
	var units []string
	for _, p := range s.within {
		if p.cross == nil && s.plan.Units[p.unit].N > 1 {
			units = append(units, s.plan.Units[p.unit].Name)
		}
	}
	place := ""
	if len(units) > 1 {
		place = ", each inside what holds it, whose place they take"
	}
	names := "the names of the treatments"
	if len(s.names) > 1 {
		names += " that stand equally often"
	}
	return fmt.Sprintf("%s to %s: %s; this arrangement, which stands in the record, is permuted at random: %s in this order, parent by parent in the plan's order%s (units of different size among their like), then %s",
		factorNames(s.plan, s.of.Factors), s.plan.Units[s.of.Unit].Name, s.how, strings.Join(units, ", "), place, names)
}

// text writes the arrangement before it is permuted: treatments counted from 1, blocks
// or rows apart.
func (s *arranged) text() string {
	first := s.plan.Units[s.of.Unit].Within
	if crosses := s.plan.Units[s.of.Unit].Crosses; crosses != nil {
		first = crosses[0]
	}
	var b strings.Builder
	for i, c := range s.start {
		if i > 0 {
			in := s.plan.Coarse(s.of.Unit, first)
			if b.WriteByte(' '); in[i] != in[i-1] {
				b.WriteString("| ")
			}
		}
		fmt.Fprint(&b, c+1)
	}
	return b.String()
}

// limit is how often treatment c may stand in a block of the given size inside which
// unit a.Unit is drawn: as equally as the size allows, or, where the protocol states
// numbers, as nearly in proportion to them.
func limit(plan *layout.Plan, a *layout.Allocation, c, size int) (low, high int) {
	unit := &plan.Units[a.Unit]
	stated := len(plan.Protocol.Units[a.Unit].Replicates) > 0 || a.Checks != nil
	if a.Total != nil && (stated || a.Complete) {
		return a.Total[c] * size / unit.N, (a.Total[c]*size + unit.N - 1) / unit.N
	}
	n := len(a.Total)
	return size / n, (size + n - 1) / n
}

// The greatest problems that are searched.
const (
	mostSearched = 1000       // treatments
	mostCounts   = 20_000_000 // treatments times blocks
)

// incomplete draws what a unit receives inside blocks, or rows and columns, that cannot
// all hold the treatments in the same numbers.
func (r *refusal) incomplete(a *layout.Allocation, fixed [][]int32) step {
	plan, u := r.plan, a.Unit
	unit := &plan.Units[u]
	key, names, t := fmt.Sprintf("unit[%d].receives", u), factorNames(plan, a.Factors), len(a.Combinations)
	refuse := func(hint, format string, args ...any) step {
		if hint != "" {
			hint += "; or "
		}
		r.add(key, NotDrawn, hint+elsewhere, "%s", fmt.Sprintf("%d treatments of %s on %s cannot stand in the same numbers in all blocks: ", t, names, unit.Name)+fmt.Sprintf(format, args...))
		return nil
	}
	if class, ok := r.classes(u, fixed); !ok {
		return nil
	} else if class != nil {
		return refuse("let the blocks hold every treatment in every class", "incomplete blocks are not drawn on a %s that carries a class", unit.Name)
	}
	s, why := newStructure(plan, a)
	switch {
	case s == nil:
		return refuse("", "%s", why)
	case t > mostSearched:
		return refuse(fmt.Sprintf("take at most %d treatments", mostSearched), "so many are not searched for")
	}
	if hint, why := s.impossible(); why != "" {
		return refuse(hint, "%s", why)
	}
	start, how := s.find()
	if start == nil {
		return refuse("", "no arrangement with every treatment as equally often in each as its size allows was found within %d moves", s.budget())
	}
	treatment := factor.Factor{Level: start, N: t}
	if e := canonical(s.closed, s.weights, treatment); factor.HarmonicMean(e) == 0 {
		need := t - 1
		for f, df := range s.df {
			if f != s.universe {
				need += df
			}
		}
		return refuse(fmt.Sprintf("take more units: %d are the least to compare %d treatments after these blocks", need+1, t), "the arrangement falls apart into sets of treatments that never meet")
	}
	return arrange(plan, a, start, how)
}
