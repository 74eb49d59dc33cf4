package allot

import (
	"fmt"
	"strconv"
	"strings"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
)

// Finder finds the instances of units by the names that files give them. It is not for
// use by several goroutines at once.
type Finder struct {
	Plan  *layout.Plan
	units []index
}

// index holds the names of one unit, made when first needed.
type index struct {
	made   bool
	within map[key]int32    // by parent and own name, or by crossed instances folded pairwise
	alone  map[string]int32 // by own name, several where it is not unique; -2
	unique bool
}

type key struct {
	parent int32
	name   string
}

const several = -2 // a name that units of several parents bear

// NewFinder makes a Finder for the units of plan.
func NewFinder(plan *layout.Plan) *Finder {
	return &Finder{Plan: plan, units: make([]index, len(plan.Units))}
}

func (f *Finder) index(u int) *index {
	x, unit := &f.units[u], &f.Plan.Units[u]
	if x.made {
		return x
	}
	x.made = true
	if unit.Crosses != nil {
		x.within = make(map[key]int32, unit.N)
		tuple := make([]int32, len(unit.Crosses))
		for i := range unit.N {
			for k, v := range unit.Crosses {
				tuple[k] = f.Plan.Coarse(u, v)[i]
			}
			x.within[crossing(tuple)] = int32(i)
		}
		return x
	}
	x.alone = make(map[string]int32, min(unit.N, 1024))
	x.unique = true
	for i, name := range unit.Own {
		if _, ok := x.alone[name]; ok {
			x.alone[name] = several
			x.unique = false
		} else {
			x.alone[name] = int32(i)
		}
	}
	if unit.Within >= 0 && !x.unique {
		x.within = make(map[key]int32, unit.N)
		for i, parent := range f.Plan.Coarse(u, unit.Within) {
			x.within[key{parent: parent, name: unit.Own[i]}] = int32(i)
		}
	}
	return x
}

// crossing is the key of the instances that a crossing unit pairs.
func crossing(tuple []int32) key {
	b := make([]byte, 0, 24)
	for _, i := range tuple[1:] {
		b = append(strconv.AppendInt(b, int64(i), 36), ' ')
	}
	return key{parent: tuple[0], name: string(b)}
}

// Binding reads the unit of a row from the columns of a sheet.
type Binding struct {
	Unit  int  // the smallest unit that the columns name
	Quiet bool // faults are only counted, so that their words need not be found
	find  *Finder
	steps []bound // units with a column or needed on the way, coarse before fine
	last  int     // step of Unit
}

// bound is how one unit is found in a row.
type bound struct {
	unit   int
	column int   // -1: a crossing unit, or the only instance of its unit
	parent int   // step of the parent, -1: the name alone tells
	cross  []int // steps of the crossed units
	index  *index

	name     string // of the row before, which often is that of this row
	above    int32
	instance int32
	known    bool
}

// BadUnit tells why a row or a name points at no unit.
type BadUnit struct {
	Column  int // where it stands; -1 where a column is wanting
	Message string
	Hint    string
}

// Bind finds the smallest unit that columns name: columns[u] is the column that bears
// the name of unit u, or -1. Parents may be left out where names tell alone. headings
// serve to suggest what is wanting.
func (f *Finder) Bind(columns []int, headings []string) (*Binding, *BadUnit) {
	plan := f.Plan
	b := &Binding{find: f, Unit: -1}
	at := make([]int, len(plan.Units)) // step of each unit, -1 for none
	for u := range at {
		at[u] = -1
	}
	var visit func(u int) bool
	wanting := -1
	visit = func(u int) bool {
		unit := &plan.Units[u]
		if at[u] >= 0 {
			return true
		}
		s := bound{unit: u, column: -1, parent: -1}
		switch {
		case unit.Crosses != nil:
			for _, v := range unit.Crosses {
				if !visit(v) {
					return false
				}
				s.cross = append(s.cross, at[v])
			}
		case columns[u] < 0 && unit.N == 1:
		case columns[u] < 0:
			return false
		default:
			s.column = columns[u]
			if unit.Within >= 0 {
				if visit(unit.Within) {
					s.parent = at[unit.Within]
				} else if !f.index(u).unique {
					wanting = unit.Within
					return false
				}
			}
		}
		s.index = f.index(u)
		at[u] = len(b.steps)
		b.steps = append(b.steps, s)
		return true
	}
	for u := range plan.Units {
		wanting = -1
		if !visit(u) && columns[u] >= 0 {
			return nil, &BadUnit{Column: columns[u], Message: fmt.Sprintf("names of unit %q repeat, and no column tells the %s", plan.Units[u].Name, plan.Units[wanting].Name),
				Hint: wanted(plan.Units[wanting].Name, headings)}
		}
	}
	for u := range plan.Units {
		if at[u] < 0 {
			continue
		}
		finest := true
		for v := range plan.Units {
			finest = finest && (at[v] < 0 || plan.Coarse(u, v) != nil)
		}
		if finest && (b.Unit < 0 || plan.Units[u].N > plan.Units[b.Unit].N) {
			b.Unit, b.last = u, at[u]
		}
	}
	named := false
	for u := range columns {
		named = named || columns[u] >= 0
	}
	switch {
	case !named:
		bad := &BadUnit{Column: -1, Message: "no column names a unit", Hint: "the units are " + unitNames(plan) + "; columns under [data] says which heading stands for which"}
		for u := range plan.Units {
			if name := plan.Units[u].Name; plan.Units[u].Own != nil && diag.Nearest(name, headings) != "" {
				bad.Hint = wanted(name, headings)
				break
			}
		}
		return nil, bad
	case b.Unit < 0:
		return nil, &BadUnit{Column: -1, Message: "the columns name units that no unit lies within", Hint: "name the units in a way that one of them lies within all others"}
	}
	return b, nil
}

// wanted says how to provide the column of a name.
func wanted(name string, headings []string) string {
	if n := diag.Nearest(name, headings); n != "" {
		return fmt.Sprintf("if %q is the %s, say columns = { %s = %q } under [data]", n, name, name, n)
	}
	return fmt.Sprintf("add a column %q, or say under [data] columns which heading stands for it", name)
}

func unitNames(plan *layout.Plan) string {
	var names []string
	for u := range plan.Units {
		if plan.Units[u].Own != nil {
			names = append(names, plan.Units[u].Name)
		}
	}
	return strings.Join(names, ", ")
}

// Find gives the instance of b.Unit that a row names.
func (b *Binding) Find(cells []sheet.Cell) (int32, *BadUnit) {
	for i := range b.steps {
		if bad := b.step(&b.steps[i], cells); bad != nil {
			return -1, bad
		}
	}
	found := b.steps[b.last].instance
	for i := range b.steps {
		s := &b.steps[i]
		if up := b.find.Plan.Coarse(b.Unit, s.unit); up == nil || up[found] != s.instance {
			return -1, &BadUnit{Column: s.column, Message: fmt.Sprintf("%s does not lie in %s", Describe(b.find.Plan, b.Unit, found), Describe(b.find.Plan, s.unit, s.instance))}
		}
	}
	return found, nil
}

func (b *Binding) step(s *bound, cells []sheet.Cell) *BadUnit {
	plan := b.find.Plan
	switch {
	case s.cross != nil:
		tuple := make([]int32, 0, 4)
		for _, c := range s.cross {
			tuple = append(tuple, b.steps[c].instance)
		}
		i, ok := s.index.within[crossing(tuple)]
		if !ok {
			var parts []string
			for _, c := range s.cross {
				parts = append(parts, Describe(plan, b.steps[c].unit, b.steps[c].instance))
			}
			return &BadUnit{Column: b.steps[s.cross[len(s.cross)-1]].column, Message: fmt.Sprintf("no %s lies where %s meet", plan.Units[s.unit].Name, strings.Join(parts, " and "))}
		}
		s.instance = i
		return nil
	case s.column < 0:
		s.instance = 0 // the only one
		return nil
	}
	name, above := cells[s.column].Text, int32(-1)
	if s.parent >= 0 {
		above = b.steps[s.parent].instance
	}
	if s.known && name == s.name && above == s.above {
		return nil
	}
	s.known = false
	unit := &plan.Units[s.unit]
	i, ok := s.index.alone[name]
	if ok && i == several {
		i, ok = s.index.within[key{parent: above, name: name}]
	} else if ok && above >= 0 && plan.Coarse(s.unit, unit.Within)[i] != above {
		ok = false
	}
	if ok {
		s.name, s.above, s.instance, s.known = name, above, i, true
		return nil
	}
	bad := &BadUnit{Column: s.column}
	if b.Quiet {
		return bad
	}
	bad.Message = fmt.Sprintf("there is no %s %q", unit.Name, name)
	if name == "" {
		bad.Message = fmt.Sprintf("the %s is not named", unit.Name)
	}
	var near []string
	for i, own := range unit.Own {
		if above < 0 || plan.Coarse(s.unit, unit.Within)[i] == above {
			near = append(near, own)
		}
		if len(near) == 10_000 {
			break
		}
	}
	if above >= 0 {
		bad.Message += " in " + Describe(plan, b.steps[s.parent].unit, above)
		if elsewhere, ok := s.index.alone[name]; ok && elsewhere != several {
			bad.Hint = fmt.Sprintf("%s %q lies in %s", unit.Name, name, Describe(plan, unit.Within, plan.Coarse(s.unit, unit.Within)[elsewhere]))
			return bad
		}
	}
	bad.Hint = "they are " + some(near)
	if n := diag.Nearest(name, near); n != "" {
		bad.Hint = fmt.Sprintf("did you mean %q?", n)
	}
	return bad
}

// some lists the first and the last of names.
func some(names []string) string {
	if len(names) > 6 {
		return strings.Join(names[:4], ", ") + ", … " + names[len(names)-1]
	}
	return strings.Join(names, ", ")
}

// Unit finds the unit that a name of the protocol points at.
func (f *Finder) Unit(name protocol.UnitName) (unit int, instance int32, bad *BadUnit) {
	columns := make([]int, len(f.Plan.Units))
	for u := range columns {
		columns[u] = -1
	}
	cells := make([]sheet.Cell, len(name))
	for i, part := range name {
		cells[i].Text = part.Name
		found := false
		for u := range f.Plan.Units {
			if f.Plan.Units[u].Name == part.Unit && f.Plan.Units[u].Own != nil {
				columns[u], found = i, true
			}
		}
		if !found {
			return -1, -1, &BadUnit{Column: i, Message: fmt.Sprintf("no unit called %q is named in files", part.Unit), Hint: "the units are " + unitNames(f.Plan)}
		}
	}
	b, bad := f.Bind(columns, nil)
	if bad != nil {
		return -1, -1, bad
	}
	instance, bad = b.Find(cells)
	return b.Unit, instance, bad
}

// UnitName names an instance by all the units it is known by, in the plan's order:
// block 2, pen 7.
func UnitName(plan *layout.Plan, unit int, instance int32) protocol.UnitName {
	var name protocol.UnitName
	for v := range plan.Units {
		if up := plan.Coarse(unit, v); up != nil && plan.Units[v].Own != nil {
			name = append(name, protocol.NamedUnit{Unit: plan.Units[v].Name, Name: plan.Units[v].Own[up[instance]]})
		}
	}
	return name
}

// Describe is UnitName in words: block 2, pen 7.
func Describe(plan *layout.Plan, unit int, instance int32) string {
	var parts []string
	for _, n := range UnitName(plan, unit, instance) {
		parts = append(parts, n.Unit+" "+n.Name)
	}
	return strings.Join(parts, ", ")
}

// Names finds one of a list of names, such as the levels of a factor, by its text or,
// where the names are numbers, by the same number written differently.
type Names struct {
	text  map[string]int32
	value map[float64]int32 // nil where names are words
}

// NewNames takes the names and, where they are numbers, their values; else nil.
func NewNames(names []string, values []float64) *Names {
	n := &Names{text: make(map[string]int32, len(names))}
	for i, name := range names {
		n.text[name] = int32(i)
	}
	if values != nil {
		n.value = make(map[float64]int32, len(values))
		for i, v := range values {
			n.value[v] = int32(i)
		}
	}
	return n
}

// Find gives the index of the name that a cell bears, or -1.
func (n *Names) Find(text string, decimal rune) int32 {
	if i, ok := n.text[text]; ok {
		return i
	}
	if n.value != nil {
		if v, ok := sheet.Number(text, decimal); ok {
			if i, ok := n.value[v]; ok {
				return i
			}
		}
	}
	return -1
}

// UnknownLevel is said of a cell that names no level of f.
func UnknownLevel(f *layout.Factor, text string) (message, hint string) {
	message = fmt.Sprintf("%q is not a level of %s", text, f.Name)
	if text == "" {
		message = fmt.Sprintf("no level of %s is given", f.Name)
	}
	if n := diag.Nearest(text, f.Levels); n != "" {
		return message, fmt.Sprintf("did you mean %q?", n)
	}
	return message, "levels are " + some(f.Levels)
}
