package figure

import (
	"math"
	"strings"
	"unicode"
	"unicode/utf8"

	"penwright/protocol/layout"
)

// Look is what a map shows of one instance of a unit.
type Look struct {
	Label     string // the treatment, in short; empty: none yet
	Treatment int    // index into Map.Treatments; -1: none
	Excluded  bool
	Lost      bool    // it has no value
	Value     float64 // NaN: none
}

// FromPlan lays the units of a plan out as a map: coarser units as boxes, units that
// cross as grids, and the smallest experimental units as its cells. look is asked for
// every cell, and for every coarser unit that receives a treatment, whose label then
// stands beside its name; it may be nil.
func FromPlan(plan *layout.Plan, look func(unit, instance int) Look) Map {
	if look == nil {
		look = func(int, int) Look { return Look{Treatment: -1, Value: math.NaN()} }
	}
	l := &laid{plan: plan, look: look, leaf: finest(plan)}
	if l.leaf < 0 {
		return Map{}
	}
	l.levels = l.nest(l.leaf, nil)
	l.unique = make([]bool, len(plan.Units))
	for u, unit := range plan.Units {
		seen := make(map[string]bool, len(unit.Own))
		for _, own := range unit.Own {
			seen[own] = true
		}
		l.unique[u] = len(seen) == len(unit.Own) && len(unit.Own) > 0
	}
	all := make([]int32, plan.Units[l.leaf].N)
	for i := range all {
		all[i] = int32(i)
	}
	top := l.fill(Box{}, 0, all)
	m := Map{Unit: noun(plan.Units[l.leaf]), Boxes: []Box{top}}
	if top.Columns == 0 && len(top.Boxes) > 0 {
		m.Boxes = top.Boxes
	}
	return m
}

// finest is the unit that becomes the cells: the smallest that receives something, else
// the smallest of all.
func finest(plan *layout.Plan) int {
	for u, unit := range plan.Units {
		if unit.Role != layout.Experimental {
			continue
		}
		all := true
		for v, other := range plan.Units {
			if other.Role == layout.Experimental && v != u && plan.Coarse(u, v) == nil {
				all = false
			}
		}
		if all {
			return u
		}
	}
	if len(plan.Units) == 0 {
		return -1
	}
	return plan.Smallest
}

// level is a step from the whole to the cells: the instances of a unit one after
// another, or, for a unit that crosses, its two crossed units as rows and columns.
type level struct {
	unit      int
	grid      bool
	down, run int // the crossed units
}

type laid struct {
	plan   *layout.Plan
	look   func(unit, instance int) Look
	leaf   int
	levels []level
	unique []bool // the unit's own names tell its instances apart
}

// nest lists the levels down to unit u after those already listed.
func (l *laid) nest(u int, levels []level) []level {
	for _, have := range levels {
		if have.unit == u {
			return levels
		}
	}
	unit := l.plan.Units[u]
	if len(unit.Crosses) < 2 {
		if unit.Within >= 0 {
			levels = l.nest(unit.Within, levels)
		}
		return append(levels, level{unit: u})
	}
	// Of more than two crossed units, the first ones become boxes around the grid; so
	// do the units that the crossed ones lie within.
	n := len(unit.Crosses)
	for _, c := range unit.Crosses[:n-2] {
		levels = l.nest(c, levels)
	}
	down, run := unit.Crosses[n-2], unit.Crosses[n-1]
	for _, c := range []int{down, run} {
		switch crossed := l.plan.Units[c]; {
		case len(crossed.Crosses) >= 2:
			for _, d := range crossed.Crosses {
				if d != down && d != run {
					levels = l.nest(d, levels)
				}
			}
		case crossed.Within >= 0 && crossed.Within != down && crossed.Within != run:
			levels = l.nest(crossed.Within, levels)
		}
	}
	if l.plan.Units[down].N > 2*l.plan.Units[run].N {
		down, run = run, down // a page is wider than it is high
	}
	return append(levels, level{unit: u, grid: true, down: down, run: run})
}

// at is the instance of unit u that holds cell i.
func (l *laid) at(u int, i int32) int32 {
	if u == l.leaf {
		return i
	}
	if to := l.plan.Coarse(l.leaf, u); to != nil {
		return to[i]
	}
	return 0
}

// fill puts the cells into a box from a level on.
func (l *laid) fill(b Box, depth int, cells []int32) Box {
	lv := l.levels[depth]
	last := depth == len(l.levels)-1
	if !lv.grid {
		if last {
			for _, i := range cells {
				b.Cells = append(b.Cells, l.cell(i))
			}
			return b
		}
		values, groups := l.split(lv.unit, cells)
		for k, g := range groups {
			b.Boxes = append(b.Boxes, l.fill(Box{Label: l.label(lv.unit, int(values[k]))}, depth+1, g))
		}
		return b
	}
	rows, _ := l.split(lv.down, cells)
	columns, _ := l.split(lv.run, cells)
	b.Columns = len(columns)
	row, column := rank(rows), rank(columns)
	for _, r := range rows {
		b.Down = append(b.Down, l.label(lv.down, int(r)))
	}
	for _, c := range columns {
		b.Across = append(b.Across, l.label(lv.run, int(c)))
	}
	places := make([][]int32, len(rows)*len(columns))
	for _, i := range cells {
		k := row[l.at(lv.down, i)]*len(columns) + column[l.at(lv.run, i)]
		places[k] = append(places[k], i)
	}
	for _, at := range places {
		switch {
		case last && len(at) == 0:
			b.Cells = append(b.Cells, Cell{Empty: true, Treatment: -1, Value: math.NaN()})
		case last:
			c := l.cell(at[0])
			c.Number = "" // its row and column say it
			b.Cells = append(b.Cells, c)
		case len(at) == 0:
			b.Boxes = append(b.Boxes, Box{})
		default:
			var inner Box
			if u := l.plan.Units[lv.unit]; u.Role == layout.Experimental && len(u.Receives) > 0 {
				inner.Label = clean(l.look(lv.unit, int(l.at(lv.unit, at[0]))).Label)
			}
			b.Boxes = append(b.Boxes, l.fill(inner, depth+1, at))
		}
	}
	return b
}

// split groups cells by the instance of a unit, in the unit's order.
func (l *laid) split(u int, cells []int32) (values []int32, groups [][]int32) {
	where := map[int32]int{}
	for _, i := range cells {
		v := l.at(u, i)
		k, ok := where[v]
		if !ok {
			k = len(values)
			where[v] = k
			values = append(values, v)
			groups = append(groups, nil)
		}
		groups[k] = append(groups[k], i)
	}
	order := make([]float64, len(values))
	for i, v := range values {
		order[i] = float64(v)
	}
	sortedValues, sortedGroups := make([]int32, len(values)), make([][]int32, len(values))
	for n, k := range byValue(order) {
		sortedValues[n], sortedGroups[n] = values[k], groups[k]
	}
	return sortedValues, sortedGroups
}

func rank(values []int32) map[int32]int {
	m := make(map[int32]int, len(values))
	for i, v := range values {
		m[v] = i
	}
	return m
}

func (l *laid) cell(i int32) Cell {
	look := l.look(l.leaf, int(i))
	c := Cell{
		Unit: l.name(l.leaf, int(i)), Label: clean(look.Label), Treatment: look.Treatment,
		Excluded: look.Excluded, Lost: look.Lost, Value: look.Value,
	}
	if own := l.plan.Units[l.leaf].Own; int(i) < len(own) {
		c.Number = own[i]
	}
	return c
}

// label names an instance within what holds it, with the treatment it received.
func (l *laid) label(u, i int) string {
	unit := l.plan.Units[u]
	s := l.own(u, i)
	if unit.Role == layout.Experimental && len(unit.Receives) > 0 {
		if t := clean(l.look(u, i).Label); t != "" {
			s += ": " + t
		}
	}
	return s
}

// own is an instance's own name, with the unit's before it where it is a bare number.
func (l *laid) own(u, i int) string {
	unit := l.plan.Units[u]
	if i >= len(unit.Own) {
		return ""
	}
	own := clean(unit.Own[i])
	if strings.ContainsFunc(own, unicode.IsLetter) && !bareCode(own) {
		return own
	}
	return capital(noun(unit)) + " " + own
}

// bareCode says whether a name is a number with at most one letter before or after it,
// such as "B3", which means little by itself.
func bareCode(s string) bool {
	letters := 0
	for _, r := range s {
		if unicode.IsLetter(r) {
			letters++
		}
	}
	return letters <= 1
}

// name tells an instance apart from all others of its unit.
func (l *laid) name(u, i int) string {
	var parts []string
	seen := map[[2]int]bool{}
	var walk func(u, i int)
	walk = func(u, i int) {
		if seen[[2]int{u, i}] {
			return
		}
		seen[[2]int{u, i}] = true
		unit := l.plan.Units[u]
		if len(unit.Crosses) >= 2 {
			for _, c := range unit.Crosses {
				if to := l.plan.Coarse(u, c); to != nil {
					walk(c, int(to[i]))
				}
			}
			return
		}
		if unit.Within >= 0 && !l.unique[u] {
			if to := l.plan.Coarse(u, unit.Within); to != nil {
				walk(unit.Within, int(to[i]))
			}
		}
		if own := l.own(u, i); own != "" {
			if len(parts) > 0 {
				own = small(own, noun(unit))
			}
			parts = append(parts, own)
		}
	}
	walk(u, i)
	return strings.Join(parts, ", ")
}

// noun is what a unit is called in a sentence.
func noun(u layout.Unit) string {
	if s := clean(u.Label); s != "" {
		return s
	}
	return clean(strings.ReplaceAll(u.Name, "_", " "))
}

func capital(s string) string {
	r, n := utf8.DecodeRuneInString(s)
	if n == 0 {
		return s
	}
	return string(unicode.ToUpper(r)) + s[n:]
}

// small undoes capital where it was done to noun.
func small(s, noun string) string {
	if rest, ok := strings.CutPrefix(s, capital(noun)); ok {
		return noun + rest
	}
	return s
}
