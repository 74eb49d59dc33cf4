package allot

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// Check compares an allotment with the numbers of its plan. What a unit receives
// should stand as often as planned in the whole trial, and as equally as its size
// allows in every unit that the draw was made in: block, row, column. Each departure is
// a warning at the place that at gives for a factor and an instance of its unit.
func Check(a *Allotment, at func(factor int, instance int32) diag.Pos) diag.List {
	var list diag.List
	plan := a.Plan
	for u := range plan.Units {
		of := plan.Allocation(u)
		if of == nil {
			continue
		}
		sets := [][]int{of.Factors}
		if of.Separate {
			sets = nil
			for _, f := range of.Factors {
				sets = append(sets, []int{f})
			}
		}
		for _, fs := range sets {
			list = append(list, check(a, of, fs, at)...)
		}
	}
	return list
}

// check compares the combinations of the factors fs, which unit of.Unit received.
func check(a *Allotment, of *layout.Allocation, fs []int, at func(int, int32) diag.Pos) diag.List {
	var list diag.List
	plan, u := a.Plan, of.Unit
	unit := &plan.Units[u]
	n := 1
	for _, f := range fs {
		if a.Levels[f] == nil {
			return nil
		}
		n *= len(plan.Factors[f].Levels)
	}
	combination := make([]int, unit.N)
	for i := range combination {
		for _, f := range fs {
			l := int(a.Levels[f][i])
			if l < 0 {
				return nil // said elsewhere
			}
			combination[i] = combination[i]*len(plan.Factors[f].Levels) + l
		}
	}
	name := func(c int) string {
		text := ""
		for k := len(fs) - 1; k >= 0; k-- {
			levels := plan.Factors[fs[k]].Levels
			text = levels[c%len(levels)] + text
			if c /= len(levels); k > 0 {
				text = ":" + text
			}
		}
		return factorNames(plan, fs) + " " + text
	}
	warn := func(i int32, format string, args ...any) {
		list.Add(diag.Diagnostic{Pos: at(fs[0], i), Severity: diag.Warning, Code: UnequalAllotment, Message: fmt.Sprintf(format, args...),
			Hint: "the analysis follows the allotment as it is; if this was meant, say so with replicates"})
	}
	if s := given(plan, of); s != nil {
		s.check(a, of, combination, name, warn)
		return list
	}
	counts := make([]int, n)
	for _, c := range combination {
		counts[c]++
	}
	if of.Total != nil && !of.Separate {
		extra := unit.N % n // without stated numbers it is open which are one above the others
		for c, planned := range of.Total {
			if d := counts[c] - planned; d != 0 && (len(plan.Protocol.Units[u].Replicates) > 0 || extra == 0 || d > 1 || d < -1) {
				warn(0, "%s stands on %d of unit %s, %d are planned", name(c), counts[c], unit.Name, planned)
			}
		}
	}
	stated := len(plan.Protocol.Units[u].Replicates) > 0 || of.Checks != nil
	for _, v := range of.Blocks {
		in := plan.Coarse(u, v)
		inside := make([][]int32, plan.Units[v].N)
		for i, b := range in {
			inside[b] = append(inside[b], int32(i))
		}
		counts := make([]int, n)
		for b, members := range inside {
			clear(counts)
			for _, i := range members {
				counts[combination[i]]++
			}
			low, high := len(members)/n, (len(members)+n-1)/n
			for c, k := range counts {
				lo, hi := low, high
				if of.Total != nil && (stated || of.Complete) {
					lo = of.Total[c] * len(members) / unit.N
					hi = (of.Total[c]*len(members) + unit.N - 1) / unit.N
				}
				switch {
				case of.Checks == nil:
				case !of.Checks[c]:
					lo, hi = 0, 1
				case len(of.Blocks) == 1:
					lo, hi = of.Total[c]/len(inside), of.Total[c]/len(inside)
				}
				if k < lo || k > hi {
					warn(members[0], "%s stands %s in %s", name(c), times(k), Describe(plan, v, int32(b)))
				}
			}
		}
	}
	return list
}

// check compares what each row went through with sequences that are fixed beforehand.
func (s *sequences) check(a *Allotment, of *layout.Allocation, combination []int, name func(int) string, warn func(int32, string, ...any)) {
	plan := a.Plan
	on, along := carrier(plan)
	if on < 0 || along < 0 || plan.Coarse(of.Unit, on) == nil || plan.Coarse(of.Unit, along) == nil {
		return
	}
	known, open := map[string]int{}, false
	if half := s.count(); s.names {
		// Names are permuted, so that any pair may alternate; where only half the pairs
		// do, it is open which.
		t := len(of.Combinations)
		s = alternating(t, len(s.sets[0][0]), t*(t-1))
		open = s.count() > half
	}
	counts := make([]int, s.count())
	for k, row := range s.sets[0] {
		known[fmt.Sprint(row)] = k
	}
	for r, members := range members(plan, of.Unit, on) {
		row := make([]int32, len(members))
		slices.SortStableFunc(members, func(i, j int32) int {
			return int(plan.Coarse(of.Unit, along)[i]) - int(plan.Coarse(of.Unit, along)[j])
		})
		for k, i := range members {
			row[k] = int32(combination[i])
		}
		k, ok := known[fmt.Sprint(row)]
		if !ok {
			var words []string
			for _, c := range row {
				_, level, _ := strings.Cut(name(int(c)), " ")
				words = append(words, level)
			}
			warn(members[0], "%s goes through %s, which is none of %s", Describe(plan, on, int32(r)), strings.Join(words, ", "), s.how)
			continue
		}
		counts[k]++
	}
	if lo, hi := slices.Min(counts), slices.Max(counts); hi-lo > 1 && !open {
		warn(0, "of %s one stands on %d of unit %s and another on %d", s.how, hi, plan.Units[on].Name, lo)
	}
}

// carrier tells who goes through sequences and along what.
func carrier(plan *layout.Plan) (on, along int) {
	switch p := plan.Protocol; {
	case p.CarryOver != nil:
		return unitNamed(plan, p.CarryOver.On), unitNamed(plan, p.CarryOver.Along)
	case p.TimeTrend != nil:
		return unitNamed(plan, p.TimeTrend.On), unitNamed(plan, p.TimeTrend.Along)
	}
	return -1, -1
}

func times(n int) string {
	switch n {
	case 0:
		return "nowhere"
	case 1:
		return "once"
	case 2:
		return "twice"
	}
	return fmt.Sprintf("%d times", n)
}
