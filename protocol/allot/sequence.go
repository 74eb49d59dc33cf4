package allot

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol/layout"
)

// sequenced draws which sequence of treatments each row of a grid goes through.
type sequenced struct {
	of   *layout.Allocation
	plan *layout.Plan
	grid *grid
	sequences
}

// sequences are what the rows of a grid can go through, one level for each column.
type sequences struct {
	// sets of sequences, all of one size. In every group of rows each set stands as
	// often as the others to within one, and in the whole trial equally often.
	sets  [][][]int32
	names bool // the treatments' names are permuted as well
	how   string
}

func (s *sequences) count() int { return len(s.sets) * len(s.sets[0]) }

// given brings the sequences that the protocol gives for unit u to levels, or those
// that alternate where it only says that there is a time trend; nil where what rows go
// through is balanced for carry-over or free.
func given(plan *layout.Plan, a *layout.Allocation) *sequences {
	p, unit := plan.Protocol, &plan.Units[a.Unit]
	if unit.Crosses == nil || len(a.Factors) == 0 || a.Separate {
		return nil
	}
	var listed [][]string
	of := ""
	if c := p.CarryOver; c != nil && len(c.Sequences) > 0 {
		listed, of = c.Sequences, c.Factor
	} else if t := p.TimeTrend; t != nil && len(t.Sequences) > 0 {
		listed, of = t.Sequences, plan.Factors[a.Factors[0]].Name
	}
	if len(a.Factors) != 1 || listed != nil && plan.Factors[a.Factors[0]].Name != of {
		return nil
	}
	if listed != nil {
		s := &sequences{sets: make([][][]int32, 1), how: fmt.Sprintf("the %d sequences of the protocol", len(listed))}
		for _, words := range listed {
			var levels []int32
			for _, w := range words {
				levels = append(levels, int32(slices.Index(plan.Factors[a.Factors[0]].Levels, w)))
			}
			s.sets[0] = append(s.sets[0], levels)
		}
		return s
	}
	if p.TimeTrend == nil || p.CarryOver != nil {
		return nil
	}
	on, along := unitNamed(plan, p.TimeTrend.On), unitNamed(plan, p.TimeTrend.Along)
	if on < 0 || along < 0 || plan.Coarse(a.Unit, on) == nil || plan.Coarse(a.Unit, along) == nil {
		return nil
	}
	rows := plan.Units[on].N
	return alternating(len(a.Combinations), plan.Units[a.Unit].N/rows, rows)
}

// alternating lists the sequences of a reversal design of p periods, in which every
// pair of t treatments alternates: in both orders, or, for an odd number of treatments
// on fewer rows, in one order of each pair, so that each treatment comes first equally
// often.
//
// Source: H. L. Lucas, Journal of Dairy Science 39 (1956) 146-154 (from memory).
func alternating(t, p, rows int) *sequences {
	differences, how := t-1, "every ordered pair of treatments in alternation"
	if t > 2 && t%2 == 1 && rows%(t*(t-1)) != 0 {
		differences, how = (t-1)/2, fmt.Sprintf("treatments i and i + d in alternation (the treatments counted round from 1 to %d) for d = 1 to %d", t, (t-1)/2)
	}
	s := &sequences{sets: make([][][]int32, 1), names: t > 2, how: how}
	for d := 1; d <= differences; d++ {
		for i := range t {
			row := make([]int32, p)
			for j := range row {
				row[j] = int32((i + j%2*d) % t)
			}
			s.sets[0] = append(s.sets[0], row)
		}
	}
	return s
}

func unitNamed(plan *layout.Plan, name string) int {
	return slices.IndexFunc(plan.Units, func(u layout.Unit) bool { return u.Name == name })
}

// williams lists sequences of t treatments over t periods in which every treatment
// stands once in each period and follows each other equally often: one set of t for
// even t, a set and its mirror image for odd t.
//
// Source: E. J. Williams, Australian Journal of Scientific Research A 2 (1949) 149-168.
func williams(t int) [][][]int32 {
	zigzag := make([]int32, t)
	for j := range zigzag {
		zigzag[j] = int32((j + 1) / 2)
		if j%2 == 0 {
			zigzag[j] = int32((t - j/2) % t)
		}
	}
	sets := [][][]int32{cyclic(t, [][]int32{zigzag})}
	if t%2 == 1 {
		slices.Reverse(zigzag)
		sets = append(sets, cyclic(t, [][]int32{zigzag}))
	}
	return sets
}

// cyclic develops sequences modulo t.
func cyclic(t int, initial [][]int32) [][]int32 {
	var out [][]int32
	for _, s := range initial {
		for i := range t {
			row := make([]int32, len(s))
			for j, x := range s {
				row[j] = (x + int32(i)) % int32(t)
			}
			out = append(out, row)
		}
	}
	return out
}

// carryOver finds sequences of t treatments over p periods for the given number of rows
// that are balanced for carry-over: every treatment stands equally often in each
// period, and follows each other treatment (and itself, where there are more periods
// than treatments) equally often. It is nil where none is found; advice then says which
// numbers of rows there are sequences for.
func carryOver(t, p, rows int) (s *sequences, advice string) {
	how := func(format string, args ...any) string { return fmt.Sprintf(format, args...) }
	switch {
	case p < 2 || t < 2:
		return nil, "a crossover needs two periods or more"
	case p == t || p == t+1:
		s = &sequences{sets: williams(t), names: true, how: how("the %d sequences of Williams (1949) for %d treatments", len(williams(t))*t, t)}
		if p > t {
			// Each treatment then follows itself as often as any other (H. L. Lucas,
			// Journal of Dairy Science 40 (1957) 225-239, from memory).
			for _, set := range s.sets {
				for i, row := range set {
					set[i] = append(row, row[t-1])
				}
			}
			s.how += ", whose last period is repeated"
		}
		if rows%s.count() != 0 {
			return nil, multiples(s.count(), rows)
		}
		return s, ""
	}
	least := 0
	developed := func(strict bool) *sequences {
		for m := 1; m <= t; m++ {
			if rows%(m*t) != 0 && least > 0 {
				continue
			}
			initial := initialSequences(t, p, m, strict)
			if initial == nil {
				continue
			}
			if rows%(m*t) == 0 {
				return &sequences{sets: [][][]int32{cyclic(t, initial)}, names: true,
					how: how("the %d sequences made by adding 0 to %d, modulo %d, to %s (treatments counted from 0)", m*t, t-1, t, spellSequences(initial))}
			}
			if least == 0 {
				least = m * t
			}
		}
		return nil
	}
	if s = developed(true); s != nil {
		return s, ""
	}
	if f := newField(t); f != nil && p < t {
		if rows%(t*(t-1)) == 0 {
			s = &sequences{sets: make([][][]int32, 1), names: true, how: how("the first %d rows of the %d orthogonal Latin squares of order %d, with their columns as sequences: a·j + b in the field of %d elements, period j, for a from 1 and b from 0", p, t-1, t, t)}
			for a := 1; a < t; a++ {
				for b := range t {
					row := make([]int32, p)
					for j := range row {
						row[j] = int32(f.add(f.times(a, j), b))
					}
					s.sets[0] = append(s.sets[0], row)
				}
			}
			return s, ""
		}
		if least == 0 {
			least = t * (t - 1)
		}
	}
	if p < t {
		if s = developed(false); s != nil {
			return s, ""
		}
	}
	if least == 0 {
		return nil, ""
	}
	return nil, multiples(least, rows)
}

func multiples(of, rows int) string {
	if low := rows / of * of; low > 0 {
		return fmt.Sprintf("%d or %d", low, low+of)
	}
	return fmt.Sprint(of)
}

func spellSequences(all [][]int32) string {
	var out []string
	for _, s := range all {
		out = append(out, strings.Join(strings.Fields(strings.Trim(fmt.Sprint(s), "[]")), " "))
	}
	return strings.Join(out, ", ")
}

// sequenceMoves is the most positions that a search of initial sequences tries.
const sequenceMoves = 200_000

// initialSequences searches m sequences of p periods that, developed modulo t, are
// balanced. With up to t periods no treatment stands twice in a sequence, all
// differences between two periods, between two of all but the last, and between a
// period and the next stand equally often, so that also the treatments of the last
// period meet all earlier ones equally often (H. D. Patterson, Biometrika 39 (1952)
// 32-48, from memory); without strict the differences without the last period, and
// those to it, are free. With more periods each treatment stands as often in a sequence
// as the others to within one, and all differences to the next period, 0 included,
// stand equally often.
func initialSequences(t, p, m int, strict bool) [][]int32 {
	first := 1 // least difference to the next period
	if p > t {
		first = 0
	}
	if m*(p-1)%(t-first) != 0 {
		return nil
	}
	next := m * (p - 1) / (t - first)
	pairs, early := -1, -1 // how often each difference stands; not asked for with more periods
	if p < t {
		if m*p*(p-1)%(t-1) != 0 || strict && m*(p-1)*(p-2)%(t-1) != 0 {
			return nil
		}
		pairs, early = m*p*(p-1)/(t-1), m*(p-1)*(p-2)/(t-1)
	}
	all := make([][]int32, m)
	for i := range all {
		all[i] = make([]int32, p)
	}
	nexts, met, metEarly, used := make([]int, t), make([]int, t), make([]int, t), make([][]int, m)
	for i := range used {
		used[i] = make([]int, t)
		used[i][0] = 1
	}
	last := make([]int, t) // last minus earlier periods
	moves := 0
	var fill func(at int) bool
	fill = func(at int) bool {
		i, j := at/p, at%p
		if i == m {
			return true
		}
		if j == 0 {
			return fill(at + 1) // sequences begin with 0
		}
		s := all[i]
		for x := range t {
			if moves++; moves > sequenceMoves {
				return false
			}
			d := (x - int(s[j-1]) + t) % t
			if d < first || nexts[d] == next || used[i][x] >= (p+t-1)/t {
				continue
			}
			// Differences to all earlier periods, in both directions.
			fine := true
			count := func(by int) {
				for _, y := range s[:j] {
					e := (x - int(y) + t) % t
					f := (t - e) % t
					met[e] += by
					met[f] += by
					if j < p-1 {
						metEarly[e] += by
						metEarly[f] += by
					} else {
						last[e] += by
					}
					if pairs >= 0 && (met[e] > pairs || met[f] > pairs || strict && (metEarly[e] > early || metEarly[f] > early || last[e] > m*(p-1)/(t-1))) {
						fine = false
					}
				}
			}
			s[j] = int32(x)
			nexts[d]++
			used[i][x]++
			count(1)
			if fine && j == p-1 {
				for _, n := range used[i] {
					fine = fine && n >= p/t
				}
			}
			if fine && fill(at+1) {
				return true
			}
			count(-1)
			nexts[d]--
			used[i][x]--
		}
		return false
	}
	if !fill(0) {
		return nil
	}
	return all
}

// sequenced prepares the draw of sequences along one crossed unit on the other.
func (r *refusal) sequenced(a *layout.Allocation, fixed, levels [][]int32, key, on, along string) step {
	plan, u := r.plan, a.Unit
	unit := &plan.Units[u]
	rows, columns := unitNamed(plan, on), unitNamed(plan, along)
	refuse := func(hint, format string, args ...any) step {
		if hint != "" {
			hint += "; or "
		}
		r.add(key, NotDrawn, hint+elsewhere, format, args...)
		return nil
	}
	if len(unit.Crosses) != 2 || !slices.Contains(unit.Crosses, rows) || !slices.Contains(unit.Crosses, columns) || rows == columns {
		return refuse(fmt.Sprintf("let the %s cross %s and %s only", unit.Name, on, along), "sequences are drawn for units that cross %s and %s, which %s does not or not alone", on, along, unit.Name)
	}
	if class, ok := r.classes(u, fixed); !ok {
		return nil
	} else if class != nil {
		return refuse("", "sequences on a %s that carries a class of its own are not drawn", unit.Name)
	}
	gr, why := r.grid(u, rows, columns, fixed)
	if gr == nil {
		if why == "" {
			return nil
		}
		return refuse("", "sequences of %s: %s", factorNames(plan, a.Factors), why)
	}
	fields := gr.fields(levels)
	if fields == nil {
		return refuse("", "sequences along %s cannot be drawn, since not every %s meets every %s", along, on, along)
	}
	periods, total := fields[0].columns, 0
	met := make([]bool, len(gr.parts[0].size))
	for _, f := range fields {
		if f.columns != periods || met[f.row] {
			return refuse("", "sequences along %s cannot be drawn, since not every %s goes through the same number of them, or they are of several classes", along, on)
		}
		met[f.row] = true
		total += f.rows
	}
	t := len(a.Combinations)
	s := given(plan, a)
	switch {
	case s == nil && key == "time_trend":
		return refuse("", "%s on %s receives %d factors, so that no sequences can be made", factorNames(plan, a.Factors), unit.Name, len(a.Factors))
	case s == nil:
		if p := plan.Protocol; p.CarryOver != nil && len(p.CarryOver.Sequences) > 0 {
			return refuse("", "the sequences are of one factor, but %s receives %s", unit.Name, factorNames(plan, a.Factors))
		}
		if slices.ContainsFunc(a.Total, func(n int) bool { return n != a.Total[0] }) || len(plan.Protocol.Units[u].Replicates) > 0 {
			return refuse("give the sequences under [carryover]", "sequences that are balanced for carry-over hold every treatment equally often, which %d of unit %s for %d treatments do not allow", unit.N, unit.Name, t)
		}
		var advice string
		s, advice = carryOver(t, periods, total)
		switch {
		case s != nil:
		case advice == "":
			return refuse(fmt.Sprintf("%d or %d periods are always possible", t, t+1)+", or give the sequences under [carryover]", "no sequences of %d treatments over %d of %s that are balanced for carry-over were found within %d moves", t, periods, along, sequenceMoves)
		default:
			return refuse(fmt.Sprintf("take %s of %s, or give the sequences under [carryover]", advice, on), "%d treatments over %d of %s are balanced for carry-over on multiples of the sequences only, and there are %d of %s", t, periods, along, total, on)
		}
	default:
		for _, row := range s.sets[0] {
			if len(row) != periods {
				return refuse("", "a sequence has %d levels, but each %s goes through %d of %s", len(row), on, periods, along)
			}
		}
		if total < s.count() || s.names && total%s.count() != 0 {
			return refuse(fmt.Sprintf("take %s of %s, or give the sequences under [%s]", multiples(s.count(), total), on, key), "%s are %d sequences, which %d of %s do not hold equally often", s.how, s.count(), total, on)
		}
	}
	// Groups of rows hold whole sets, in numbers that even out over the trial.
	odd, h := 0, len(s.sets[0])
	for _, f := range fields {
		switch {
		case len(fields) == 1 && len(s.sets) == 1 && !s.names: // given sequences, as equal as can be
		case f.rows%h != 0:
			return refuse(fmt.Sprintf("let each group hold a multiple of %d", h), "the %d sequences cannot stand equally often in a group of %d of %s", h, f.rows, on)
		default:
			odd += f.rows / h % len(s.sets)
		}
	}
	if odd%len(s.sets) != 0 {
		return refuse(fmt.Sprintf("take another group of %d of %s, or one less", h, on), "the %d sets of %d sequences cannot stand equally often on %d of %s", len(s.sets), h, total, on)
	}
	return &sequenced{of: a, plan: plan, grid: gr, sequences: *s}
}

func (s *sequenced) allocation() *layout.Allocation { return s.of }

func (s *sequenced) draw(g *Generator, levels [][]int32, combination []int32) {
	names := identity(len(s.of.Combinations))
	if s.names {
		g.Shuffle(names)
	}
	fields := s.grid.fields(levels)
	h := len(s.sets[0])
	var spare []int32 // which set groups of an odd number of sets hold once more
	for _, f := range fields {
		for range f.rows / h % len(s.sets) {
			spare = append(spare, int32(len(spare)%len(s.sets)))
		}
	}
	g.Shuffle(spare)
	for _, f := range fields {
		var list [][]int32
		for len(list)+h*len(s.sets) <= f.rows {
			for _, set := range s.sets {
				list = append(list, set...)
			}
		}
		for len(list)+h <= f.rows {
			list = append(list, s.sets[spare[0]]...)
			spare = spare[1:]
		}
		if extra := f.rows - len(list); extra > 0 { // given sequences on other numbers
			which := identity(h)
			g.Shuffle(which)
			for _, k := range which[:extra] {
				list = append(list, s.sets[0][k])
			}
		}
		order := identity(f.rows)
		g.Shuffle(order)
		for r := range f.rows {
			for c, x := range list[order[r]] {
				combination[f.cells[r*f.columns+c]] = names[x]
			}
		}
	}
}

func (s *sequenced) words() string {
	on, along := s.plan.Units[s.grid.sides[0]].Name, s.plan.Units[s.grid.sides[1]].Name
	text := fmt.Sprintf("%s to %s: %s", factorNames(s.plan, s.of.Factors), s.plan.Units[s.of.Unit].Name, s.how)
	if s.names {
		text += "; the treatments' names are permuted"
	}
	if len(s.sets) > 1 {
		text += fmt.Sprintf("; a group of %s of an odd number of sets holds one of the sets once more, by a permuted list of them", on)
	}
	return text + fmt.Sprintf("; the list of sequences, each equally often, is permuted over the %s of each group in the plan's order, and a sequence runs along %s", on, along)
}
