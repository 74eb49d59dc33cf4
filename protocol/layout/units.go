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

// Limits, checked before memory is taken.
const (
	maxKinds        = 32         // kinds of unit
	maxRows         = 1_000_000  // instances of any unit
	maxExperimental = 100_000    // instances of a unit that receives
	maxLevels       = 10_000     // levels of a factor
	maxMaps         = 40_000_000 // entries of all coarse maps together
	maxTerms        = 1_000
)

// builder makes a Plan. Its list collects what is wrong; steps go on where they can.
type builder struct {
	p       *protocol.Protocol
	plan    *Plan
	list    diag.List
	sort    []int    // units so that every unit follows the coarser ones
	up      [][]bool // up[u][v]: v is u or coarser, as said by within and crosses
	maps    int
	classes map[[3]uint64][]int // remembered results of fixed
	also    map[string]bool     // names and properties that the design may be called by
}

func (b *builder) pos(key string) diag.Pos { return b.p.Pos(key) }

func (b *builder) add(s diag.Severity, key, code, hint, format string, args ...any) {
	b.list.Add(diag.Diagnostic{
		Pos: b.pos(key), Key: key, Severity: s, Code: code,
		Message: fmt.Sprintf(format, args...), Hint: hint,
	})
}

func (b *builder) fail(key, code, hint, format string, args ...any) {
	b.add(diag.Error, key, code, hint, format, args...)
}

// unitKey is the dotted key of a part of unit u.
func unitKey(u int, part string) string { return fmt.Sprintf("unit[%d].%s", u, part) }

// relations finds what every unit lies within and crosses.
func (b *builder) relations() bool {
	us := b.p.Units
	switch {
	case len(us) == 0:
		b.fail("unit", protocol.BadUnits, "add [[unit]] tables, from the largest unit to the smallest", "the protocol names no units")
		return false
	case len(us) > maxKinds:
		b.fail(unitKey(maxKinds, "name"), protocol.TooMany, "", "%d kinds of unit are more than the %d a trial may have", len(us), maxKinds)
		return false
	}
	index := map[string]int{}
	for u, pu := range us {
		if first, twice := index[pu.Name]; twice {
			b.fail(unitKey(u, "name"), protocol.Duplicate, "", "unit %q is declared twice", pu.Name)
			b.list[len(b.list)-1].Related = []diag.Related{{Pos: b.pos(unitKey(first, "name")), Message: "first declared here"}}
			continue
		}
		index[pu.Name] = u
	}
	find := func(u int, part, name string) int {
		v, ok := index[name]
		switch {
		case !ok:
			b.fail(unitKey(u, part), protocol.UnknownName, "units are "+names(us), "unit %q is not declared", name)
			return -1
		case v == u:
			b.fail(unitKey(u, part), protocol.BadUnits, "", "unit %q cannot hold itself", name)
			return -1
		}
		return v
	}
	b.plan.Units = make([]Unit, len(us))
	for u, pu := range us {
		unit := &b.plan.Units[u]
		*unit = Unit{Name: pu.Name, Label: pu.Label, Within: -1, Interacts: pu.Interacts}
		if pu.Within != "" {
			unit.Within = find(u, "within", pu.Within)
		}
		for _, name := range pu.Crosses {
			v := find(u, "crosses", name)
			if v >= 0 && slices.Contains(unit.Crosses, v) {
				b.fail(unitKey(u, "crosses"), protocol.BadUnits, "", "unit %q is named twice", name)
			}
			unit.Crosses = append(unit.Crosses, v)
		}
		if len(unit.Crosses) == 1 {
			b.fail(unitKey(u, "crosses"), protocol.BadUnits, `say within = "`+pu.Crosses[0]+`" for a unit that lies in another`, "unit %q crosses one unit only", pu.Name)
		}
	}
	return !b.list.HasErrors() && b.sorted() && b.crossings()
}

func names(us []protocol.Unit) string {
	s := make([]string, len(us))
	for i, u := range us {
		s[i] = u.Name
	}
	return strings.Join(s, ", ")
}

// sorted orders the units coarse before fine and finds which are coarser than which.
func (b *builder) sorted() bool {
	n := len(b.plan.Units)
	b.up = make([][]bool, n)
	for len(b.sort) < n {
		before := len(b.sort)
		for u := range n {
			if b.up[u] != nil {
				continue
			}
			above := b.above(u)
			if slices.ContainsFunc(above, func(v int) bool { return b.up[v] == nil }) {
				continue
			}
			b.up[u] = make([]bool, n)
			b.up[u][u] = true
			for _, v := range above {
				for w, is := range b.up[v] {
					b.up[u][w] = b.up[u][w] || is
				}
			}
			b.sort = append(b.sort, u)
		}
		if len(b.sort) == before {
			for u := range n {
				if b.up[u] == nil {
					b.fail(unitKey(u, "name"), protocol.BadUnits, "", "unit %q lies within itself by way of other units", b.plan.Units[u].Name)
				}
			}
			return false
		}
	}
	return true
}

func (b *builder) above(u int) []int {
	unit := &b.plan.Units[u]
	above := slices.Clone(unit.Crosses)
	if unit.Within >= 0 {
		above = append(above, unit.Within)
	}
	return above
}

// crossings checks what a unit that crosses others may say.
func (b *builder) crossings() bool {
	for u := range b.plan.Units {
		unit, pu := &b.plan.Units[u], &b.p.Units[u]
		if unit.Crosses == nil {
			continue
		}
		for i, v := range unit.Crosses {
			for _, w := range unit.Crosses[:i] {
				if b.up[v][w] || b.up[w][v] {
					fine, coarse := v, w
					if b.up[w][v] {
						fine, coarse = w, v
					}
					b.fail(unitKey(u, "crosses"), protocol.BadUnits, `say within = "`+b.plan.Units[fine].Name+`" instead`,
						"unit %q cannot cross %q and %q, since every %s lies within one %s", unit.Name,
						b.plan.Units[w].Name, b.plan.Units[v].Name, b.plan.Units[fine].Name, b.plan.Units[coarse].Name)
				}
			}
		}
		if w := unit.Within; w >= 0 {
			redundant := false
			for _, v := range unit.Crosses {
				redundant = redundant || b.up[v][w]
			}
			if !redundant {
				b.fail(unitKey(u, "within"), protocol.BadUnits, `leave out within, or name the unit in crosses`,
					"unit %q crosses %s and cannot lie within %q, in which none of them lies", unit.Name, strings.Join(pu.Crosses, " and "), b.plan.Units[w].Name)
			}
			unit.Within = -1 // the crossed units say it already
		}
		if len(pu.Count) > 0 {
			b.fail(unitKey(u, "count"), protocol.BadUnits, "leave out count; add a unit within "+strconv.Quote(unit.Name)+" for several units in each crossing",
				"unit %q crosses others, so its number follows from theirs", unit.Name)
		}
		if pu.Labels != nil {
			b.fail(unitKey(u, "labels"), protocol.BadUnits, "", "unit %q crosses others and is known by their names, so it has no labels", unit.Name)
		}
	}
	return !b.list.HasErrors()
}

// smallest finds the unit that lies within all others.
func (b *builder) smallest() bool {
	var leaves []int
	for u := range b.plan.Units {
		leaf := true
		for v := range b.plan.Units {
			leaf = leaf && (u == v || !b.up[v][u])
		}
		if leaf {
			leaves = append(leaves, u)
		}
	}
	if len(leaves) == 1 {
		b.plan.Smallest = leaves[0]
		return true
	}
	v, w := b.plan.Units[leaves[0]].Name, b.plan.Units[leaves[1]].Name
	b.fail(unitKey(leaves[1], "name"), UnitsNotJoined,
		fmt.Sprintf(`say within = %q for %s, or add a [[unit]] with crosses = [%q, %q]`, v, w, v, w),
		"no unit lies within both %q and %q, so nothing can be measured on them together", v, w)
	b.list[len(b.list)-1].Related = []diag.Related{{Pos: b.pos(unitKey(leaves[0], "name")), Message: "the other unit"}}
	return false
}

// instances makes all instances of every unit and their coarse maps.
func (b *builder) instances() bool {
	n := len(b.plan.Units)
	b.plan.coarse = make([][][]int32, n)
	for u := range n {
		b.plan.coarse[u] = make([][]int32, n)
	}
	for _, u := range b.sort {
		ok := false
		if b.plan.Units[u].Crosses != nil {
			ok = b.cross(u)
		} else {
			ok = b.nest(u)
		}
		if !ok {
			return false
		}
	}
	for u := range n {
		b.animals(u)
	}
	return !b.list.HasErrors()
}

func (b *builder) tooMany(u int, key string) bool {
	b.fail(unitKey(u, key), protocol.TooMany, "", "unit %q has more than the %d instances a trial may have", b.plan.Units[u].Name, maxRows)
	return false
}

// room accounts for the maps of unit u with n instances before they are made.
func (b *builder) room(u, n int) bool {
	for _, is := range b.up[u] {
		if is {
			b.maps += n
		}
	}
	if b.maps > maxMaps {
		b.fail(unitKey(u, "name"), protocol.TooMany, "", "the units of the trial are too many in all: their nesting takes more than %d entries", maxMaps)
		return false
	}
	return true
}

func (b *builder) nest(u int) bool {
	unit, pu := &b.plan.Units[u], &b.p.Units[u]
	parents := 1
	if unit.Within >= 0 {
		parents = b.plan.Units[unit.Within].N
	}
	counts, ok := b.counts(u, parents)
	if !ok {
		return false
	}
	for _, c := range counts {
		if c > maxRows || unit.N+c > maxRows {
			return b.tooMany(u, "count")
		}
		unit.N += c
	}
	if !b.room(u, unit.N) {
		return false
	}
	self := make([]int32, unit.N)
	for i := range self {
		self[i] = int32(i)
	}
	b.plan.coarse[u][u] = self
	if w := unit.Within; w >= 0 {
		parent := make([]int32, 0, unit.N)
		for i, c := range counts {
			for range c {
				parent = append(parent, int32(i))
			}
		}
		b.compose(u, w, parent)
	}
	return b.own(u, pu, counts)
}

// compose fills the maps of u to w and all units coarser than w from the map to w.
func (b *builder) compose(u, w int, to []int32) {
	for v, is := range b.up[w] {
		if !is || b.plan.coarse[u][v] != nil {
			continue
		}
		if v == w {
			b.plan.coarse[u][v] = to
			continue
		}
		m := make([]int32, len(to))
		for i, x := range to {
			m[i] = b.plan.coarse[w][v][x]
		}
		b.plan.coarse[u][v] = m
	}
}

// counts gives the number of instances of u in each parent.
func (b *builder) counts(u, parents int) ([]int, bool) {
	unit, pu := &b.plan.Units[u], &b.p.Units[u]
	counts := pu.Count
	switch {
	case len(counts) == 0 && len(pu.Labels) > 0 && (len(pu.Labels) == 1 || len(pu.Labels) == parents):
		for _, l := range pu.Labels {
			counts = append(counts, len(l))
		}
	case len(counts) == 0:
		b.fail(unitKey(u, "count"), protocol.BadCount, "add count", "unit %q has no count", unit.Name)
		return nil, false
	}
	if len(counts) != 1 && len(counts) != parents {
		if unit.Within < 0 {
			b.fail(unitKey(u, "count"), protocol.BadCount, "give one number", "unit %q lies within nothing, but its count lists %d numbers", unit.Name, len(counts))
		} else {
			b.fail(unitKey(u, "count"), protocol.BadCount, fmt.Sprintf("give one number, or %d", parents),
				"count lists %d numbers, but there are %d instances of %q", len(counts), parents, b.plan.Units[unit.Within].Name)
		}
		return nil, false
	}
	for i, c := range counts {
		if c < 1 {
			key := unitKey(u, "count")
			if len(counts) > 1 {
				key = fmt.Sprintf("%s[%d]", key, i)
			}
			b.fail(key, protocol.BadCount, "", "count %d of unit %q is less than 1", c, unit.Name)
			return nil, false
		}
	}
	if len(counts) == parents {
		return counts, true
	}
	all := make([]int, parents)
	for i := range all {
		all[i] = counts[0]
	}
	return all, true
}

// own names the instances of u.
func (b *builder) own(u int, pu *protocol.Unit, counts []int) bool {
	unit := &b.plan.Units[u]
	through := pu.Numbered == "through"
	unit.Own = make([]string, 0, unit.N)
	key := unitKey(u, "labels")
	switch {
	case pu.Labels == nil:
		for _, c := range counts {
			for i := range c {
				if through {
					i = len(unit.Own)
				}
				unit.Own = append(unit.Own, strconv.Itoa(i+1))
			}
		}
		return true
	case through && len(pu.Labels) == 1 && len(pu.Labels[0]) == unit.N:
		unit.Own = append(unit.Own, pu.Labels[0]...)
	case len(pu.Labels) != 1 && unit.Within < 0:
		b.fail(key, protocol.BadCount, "give one list", "unit %q lies within nothing, but labels holds %d lists", unit.Name, len(pu.Labels))
		return false
	case len(pu.Labels) != 1 && len(pu.Labels) != len(counts):
		b.fail(key, protocol.BadCount, "give one list for all, or one list for each",
			"labels holds %d lists, but there are %d instances of %q", len(pu.Labels), len(counts), b.plan.Units[unit.Within].Name)
		return false
	default:
		for i, c := range counts {
			list, at := pu.Labels[0], key
			if len(pu.Labels) > 1 {
				list, at = pu.Labels[i], fmt.Sprintf("%s[%d]", key, i)
			}
			if len(list) != c {
				b.fail(at, protocol.BadCount, "", "unit %q has %d labels for a count of %d", unit.Name, len(list), c)
				return false
			}
			unit.Own = append(unit.Own, list...)
		}
	}
	seen, from := map[string]bool{}, 0
	for _, c := range counts {
		if !through {
			clear(seen)
		}
		for _, name := range unit.Own[from : from+c] {
			if seen[name] {
				b.fail(key, protocol.Duplicate, "", "label %q stands for two instances of unit %q", name, unit.Name)
				return false
			}
			seen[name] = true
		}
		from += c
	}
	return true
}

// cross pairs the instances of the crossed units that agree in every unit both lie
// within, the first crossed unit slowest. Units are joined one by one: the instances
// of the next are sorted into classes by the units shared with those before, so that
// only pairs that agree are ever looked at.
func (b *builder) cross(u int) bool {
	unit := &b.plan.Units[u]
	first := unit.Crosses[0]
	tuples := make([][]int32, len(unit.Crosses)) // tuples[k][i]: instance of the k-th crossed unit
	tuples[0] = b.plan.coarse[first][first]
	above := map[int][]int32{} // map of the tuples to every unit coarser than one of them
	merge := func(v int, of []int32) {
		for w := range b.plan.Units {
			if b.up[v][w] && above[w] == nil {
				m := make([]int32, len(of))
				for i, x := range of {
					m[i] = b.plan.coarse[v][w][x]
				}
				above[w] = m
			}
		}
	}
	merge(first, tuples[0])
	for k, v := range unit.Crosses[1:] {
		left, right := len(tuples[0]), b.plan.Units[v].N
		class := factor.Universe(left + right)
		for w := range b.plan.Units {
			if above[w] != nil && b.up[v][w] {
				both := factor.Factor{Level: append(slices.Clone(above[w]), b.plan.coarse[v][w]...), N: b.plan.Units[w].N}
				class = factor.Infimum(class, both)
			}
		}
		members := make([][]int32, class.N)
		for j := range right {
			c := class.Level[left+j]
			members[c] = append(members[c], int32(j))
		}
		total := 0
		for i := range left {
			total += len(members[class.Level[i]])
			if total > maxRows {
				return b.tooMany(u, "crosses")
			}
		}
		if total == 0 {
			b.fail(unitKey(u, "crosses"), protocol.BadUnits, "", "no instances of the units that %q crosses agree in the units they share", unit.Name)
			return false
		}
		next := make([][]int32, k+2)
		for m := range next {
			next[m] = make([]int32, 0, total)
		}
		for i := range left {
			for _, j := range members[class.Level[i]] {
				for m := range k + 1 {
					next[m] = append(next[m], tuples[m][i])
				}
				next[k+1] = append(next[k+1], j)
			}
		}
		copy(tuples, next)
		clear(above)
		for m := range next {
			merge(unit.Crosses[m], tuples[m])
		}
	}
	unit.N = len(tuples[0])
	if !b.room(u, unit.N) {
		return false
	}
	self := make([]int32, unit.N)
	for i := range self {
		self[i] = int32(i)
	}
	b.plan.coarse[u][u] = self
	for k, v := range unit.Crosses {
		b.compose(u, v, tuples[k])
	}
	return true
}

func (b *builder) animals(u int) {
	unit, given := &b.plan.Units[u], b.p.Units[u].Animals
	if len(given) == 0 {
		return
	}
	if len(given) != 1 && len(given) != unit.N {
		b.fail(unitKey(u, "animals"), protocol.BadCount, fmt.Sprintf("give one number, or %d", unit.N),
			"animals lists %d numbers, but there are %d instances of %q", len(given), unit.N, unit.Name)
		return
	}
	unit.Animals = make([]int, unit.N)
	for i := range unit.Animals {
		unit.Animals[i] = given[0]
		if len(given) > 1 {
			unit.Animals[i] = given[i]
		}
		if unit.Animals[i] < 0 {
			b.fail(unitKey(u, "animals"), protocol.BadCount, "", "%d animals in a unit are less than none", unit.Animals[i])
			return
		}
	}
}
