package layout

import "slices"

// Part is a part of the sum of squares of a term of listed treatments.
type Part struct {
	Name string
	DF   int
	// Groups splits the levels of the listed treatments: the part is what lies between
	// the groups after the parts before it. Levels that stand in no group are left out.
	Groups [][]int
	// Factors names the factors, as indices into Plan.Factors, whose main effect or
	// interaction over the levels of the groups the part is; nil for a part between
	// groups.
	Factors []int
}

// Parts partitions term t where it is the main effect of listed treatments: checks,
// entries and checks v. entries in an augmented design; control v. rest and, where the
// rest is a full factorial, its effects. It is nil for other terms and where there is
// nothing to part.
func (p *Plan) Parts(t int) []Part {
	term := p.Terms[t]
	if len(term.Factors) != 1 || p.Factors[term.Factors[0]].Protocol != nil {
		return nil
	}
	f := p.Factors[term.Factors[0]]
	if a := p.allocations[f.Unit]; a.Checks != nil {
		var checks, entries []int
		for l := range f.Levels {
			if a.Checks[l] {
				checks = append(checks, l)
			} else {
				entries = append(entries, l)
			}
		}
		return between("checks", checks, "entries", entries)
	}
	// Controls outside the factorial stand apart; a control inside it is one of its cells.
	var controls, rest []int
	for l, tr := range p.Protocol.Treatments {
		if tr.Control && len(tr.Levels) == 0 {
			controls = append(controls, l)
		} else {
			rest = append(rest, l)
		}
	}
	effects := p.effects(rest)
	if len(controls) == 0 {
		return effects
	}
	if len(rest) == 0 {
		return nil
	}
	name := "rest"
	parts := between("controls", controls, name, rest)
	if effects != nil && len(rest) > 1 {
		parts = slices.DeleteFunc(parts, func(q Part) bool { return q.Name == name })
		parts = append(parts, effects...)
	}
	for i := range parts {
		if parts[i].Name == "controls v. rest" {
			parts[i].Name = "control v. rest"
		}
	}
	if len(parts) < 2 {
		return nil
	}
	return parts
}

// between parts two classes of levels: among one, among the other, one against the
// other.
func between(a string, as []int, c string, cs []int) []Part {
	if len(as) == 0 || len(cs) == 0 {
		return nil
	}
	out := []Part{{Name: a + " v. " + c, DF: 1, Groups: [][]int{as, cs}}}
	if len(as) > 1 {
		out = append(out, Part{Name: a, DF: len(as) - 1, Groups: single(as)})
	}
	if len(cs) > 1 {
		out = append(out, Part{Name: c, DF: len(cs) - 1, Groups: single(cs)})
	}
	return out
}

func single(ls []int) [][]int {
	out := make([][]int, len(ls))
	for i, l := range ls {
		out[i] = []int{l}
	}
	return out
}

// effects gives the main effects and interactions of the factors that the listed
// treatments of levels are made of, when these are every combination of at least one
// factor's levels exactly once; else nil.
func (p *Plan) effects(levels []int) []Part {
	var fs []int
	for f, of := range p.Factors {
		if of.Protocol == nil || of.Unit >= 0 {
			continue
		}
		in := 0
		for _, l := range levels {
			if _, ok := p.Protocol.Treatments[l].Levels[of.Name]; ok {
				in++
			}
		}
		if in == len(levels) && in > 0 {
			fs = append(fs, f)
		} else if in > 0 {
			return nil
		}
	}
	if len(fs) < 2 || len(fs) > 10 {
		return nil
	}
	// The levels of each factor that are used, and the cell of each treatment.
	used := make([][]string, len(fs))
	cells, seen := 1, map[int]bool{}
	for i, f := range fs {
		for _, name := range p.Factors[f].Levels {
			if slices.ContainsFunc(levels, func(l int) bool { return p.Protocol.Treatments[l].Levels[p.Factors[f].Name] == name }) {
				used[i] = append(used[i], name)
			}
		}
		if cells *= len(used[i]); cells > len(levels) || len(used[i]) < 2 {
			return nil
		}
	}
	if cells != len(levels) {
		return nil
	}
	at := make([][]int, len(levels))
	for k, l := range levels {
		cell := 0
		at[k] = make([]int, len(fs))
		for i, f := range fs {
			at[k][i] = slices.Index(used[i], p.Protocol.Treatments[l].Levels[p.Factors[f].Name])
			cell = cell*len(used[i]) + at[k][i]
		}
		if seen[cell] {
			return nil
		}
		seen[cell] = true
	}
	var out []Part
	for order := 1; order <= len(fs); order++ {
		for set := 1; set < 1<<len(fs); set++ {
			var in []int
			for i := range fs {
				if set&(1<<(len(fs)-1-i)) != 0 {
					in = append(in, i)
				}
			}
			if len(in) != order {
				continue
			}
			part := Part{DF: 1}
			cell := make([]int, len(levels))
			groups := 1
			for n, i := range in {
				if n > 0 {
					part.Name += ":"
				}
				part.Name += p.Factors[fs[i]].Name
				part.DF *= len(used[i]) - 1
				part.Factors = append(part.Factors, fs[i])
				groups *= len(used[i])
				for k := range levels {
					cell[k] = cell[k]*len(used[i]) + at[k][i]
				}
			}
			part.Groups = make([][]int, groups)
			for k, l := range levels {
				part.Groups[cell[k]] = append(part.Groups[cell[k]], l)
			}
			out = append(out, part)
		}
	}
	// Masks count the first factor highest; within an order the terms shall run in the
	// order of the factors.
	slices.SortStableFunc(out, func(a, c Part) int {
		if len(a.Factors) != len(c.Factors) {
			return len(a.Factors) - len(c.Factors)
		}
		return slices.Compare(a.Factors, c.Factors)
	})
	return out
}
