package allot

import (
	"fmt"
	"math"
	"slices"

	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
)

// Roster is what the list of units as they stood before the draw tells the draw.
type Roster struct {
	SHA256 string
	// Levels holds for each factor of the plan the level index of every instance of
	// the unit that carries it, -1 where the roster does not tell; nil for a factor
	// without a column.
	Levels [][]int32

	unit    int     // the unit of the rows, -1: animals by their own numbers
	rows    []int32 // instance of unit of each row
	animals []animal
	heading string      // of the animals' own numbers
	by      string      // heading of the values that block_by ranks
	values  [][]float64 // for each name of balance_on the value of each row; NaN: missing
}

// animal is a row of a roster of animals by their own numbers.
type animal struct {
	name  string
	text  string  // as the roster writes what it is ranked by
	value float64 // what it is ranked by
	class []int32 // level of each factor that is carried, -1 where there is no column
}

// ReadRoster reads from the roster the classes that units carry, what block_by ranks and
// what balance_on names. A roster without unit columns, of animals that have only their
// own number, tells classes of units only where blocks are formed from it.
func ReadRoster(file folder.File, plan *layout.Plan) (*Roster, diag.List) {
	p := plan.Protocol
	r := &Roster{SHA256: file.SHA256, Levels: make([][]int32, len(plan.Factors)), unit: -1}
	s, list := sheet.Open(file.Path, file.Data, "auto")
	if s == nil {
		return nil, list
	}
	columns := Columns(plan, s.Headings)
	var carried []column
	for f := range plan.Factors {
		if c := Column(plan, s.Headings, plan.Factors[f].Name); c >= 0 && plan.Factors[f].Carried {
			carried = append(carried, column{factor: f, at: c})
		}
	}
	ranked := p.Roster != nil && p.Roster.BlockBy != ""
	if len(carried) == 0 && len(p.Randomization.BalanceOn) == 0 && !ranked {
		return r, list
	}
	b, bad := NewFinder(plan).Bind(columns, s.Headings)
	if bad != nil && bad.Column >= 0 {
		list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, bad.Column), Code: UnitColumns, Message: bad.Message, Hint: bad.Hint})
		return r, list
	}
	if b != nil && ranked {
		list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, max(slices.Max(columns), 0)), Code: UnitColumns, Message: "the roster names units, and blocks are to be formed by rank",
			Hint: "leave block_by out, or list animals by numbers of their own without unit columns"})
		return r, list
	}
	if b != nil {
		r.unit = b.Unit
		list = append(list, fill(s, b, plan, carried, r.Levels, func(_ sheet.Row, i int32) bool {
			r.rows = append(r.rows, i)
			return true
		}, nil)...)
		if list.HasErrors() {
			return r, list
		}
	}
	numbers := func(key, name string) []float64 {
		at := Column(plan, s.Headings, name)
		if at < 0 {
			list.Add(diag.Diagnostic{Pos: p.Pos(key), Key: key, Code: RosterColumn, Message: fmt.Sprintf("the roster has no column %q", name), Hint: nearHeading(name, s.Headings)})
			return nil
		}
		decimal := decimalOf(s, []column{{at: at}})
		var out []float64
		faults := sheet.Faults{}
		s.Rows(func(row sheet.Row) bool {
			text := row.Cells[at].Text
			v, ok := sheet.Number(text, decimal)
			if !ok {
				v = math.NaN()
				if !slices.Contains(missing(plan), text) || ranked {
					faults.Add(diag.Diagnostic{Pos: s.Pos(row, at), Code: RosterColumn, Message: fmt.Sprintf("%s %q is not a number", name, text), Hint: sheet.Hint(text, decimal)})
				}
			}
			out = append(out, v)
			return true
		})
		list = append(list, faults.List()...)
		return out
	}
	for k, name := range p.Randomization.BalanceOn {
		r.values = append(r.values, numbers(fmt.Sprintf("randomization.balance_on[%d]", k), name))
	}
	if ranked {
		r.by = p.Roster.BlockBy
		values := numbers("roster.block_by", r.by)
		if list.HasErrors() {
			return r, list
		}
		list = append(list, r.read(s, plan, carried, values)...)
	}
	return r, list
}

func missing(plan *layout.Plan) []string {
	if d := plan.Protocol.Data; d != nil {
		return d.Missing
	}
	return []string{"", "NA", "."}
}

// read reads the animals that blocks are formed of. Their own number stands in the first
// column that tells all of them apart.
func (r *Roster) read(s *sheet.Sheet, plan *layout.Plan, carried []column, values []float64) diag.List {
	var list sheet.Faults
	by := Column(plan, s.Headings, r.by)
	own := -1
	for c := range s.Headings {
		used := c == by || slices.ContainsFunc(carried, func(x column) bool { return x.at == c }) || slices.Contains(plan.Protocol.Randomization.BalanceOn, s.Headings[c])
		seen := map[string]bool{}
		n := 0
		s.Rows(func(row sheet.Row) bool {
			seen[row.Cells[c].Text] = true
			n++
			return !used
		})
		if !used && len(seen) == n && !seen[""] {
			own = c
			break
		}
	}
	if own < 0 {
		list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, 0), Code: RosterColumn, Message: "no column of the roster tells all animals apart", Hint: "give every animal a number of its own, in a column such as animal"})
		return list.List()
	}
	r.heading = s.Headings[own]
	decimal := decimalOf(s, carried)
	names := make([]*Names, len(carried))
	for k, c := range carried {
		names[k] = NewNames(plan.Factors[c.factor].Levels, plan.Factors[c.factor].Values)
	}
	s.Rows(func(row sheet.Row) bool {
		a := animal{name: row.Cells[own].Text, text: row.Cells[by].Text, value: values[len(r.animals)], class: make([]int32, len(plan.Factors))}
		for f := range a.class {
			a.class[f] = -1
		}
		for k, c := range carried {
			text := row.Cells[c.at].Text
			if a.class[c.factor] = names[k].Find(text, decimal); a.class[c.factor] < 0 {
				message, hint := UnknownLevel(&plan.Factors[c.factor], text)
				list.Add(diag.Diagnostic{Pos: s.Pos(row, c.at), Code: UnknownLevelCode, Message: message, Hint: hint})
			}
		}
		r.animals = append(r.animals, a)
		return true
	})
	return list.List()
}

// Columns finds the column of each unit's name by the headings, -1 where it has none.
func Columns(plan *layout.Plan, headings []string) []int {
	columns := make([]int, len(plan.Units))
	for u := range columns {
		columns[u] = -1
		if plan.Units[u].Own != nil {
			columns[u] = Column(plan, headings, plan.Units[u].Name)
		}
	}
	return columns
}

// Column finds the column that bears one of our names, by the heading that [data]
// columns gives to it or by the name itself; -1 if there is none.
func Column(plan *layout.Plan, headings []string, name string) int {
	at := -1
	if d := plan.Protocol.Data; d != nil {
		for _, c := range d.Columns {
			if c.Name != name {
				continue
			}
			for i, h := range headings {
				if h == c.Heading {
					return i
				}
			}
		}
	}
	for i, h := range headings {
		if h == name {
			at = i
			break
		}
	}
	return at
}

// column is a column that holds levels of a factor.
type column struct{ factor, at int }

// first is where the level of an instance was read first.
type first struct {
	line int
	pos  diag.Pos
}

// fill reads levels into levels[factor], one for each instance of the factor's unit,
// and refuses a level that varies inside an instance. row, if not nil, is called with
// every row and its instance, and may forbid to use it.
func fill(s *sheet.Sheet, b *Binding, plan *layout.Plan, columns []column, levels [][]int32, row func(sheet.Row, int32) bool, seen [][]first) diag.List {
	var list sheet.Faults
	if seen == nil {
		seen = make([][]first, len(plan.Factors))
	}
	decimal := decimalOf(s, columns)
	names := make([]*Names, len(plan.Factors))
	for _, c := range columns {
		f := &plan.Factors[c.factor]
		names[c.factor] = NewNames(f.Levels, f.Values)
		levels[c.factor] = make([]int32, plan.Units[f.Unit].N)
		seen[c.factor] = make([]first, plan.Units[f.Unit].N)
		for i := range levels[c.factor] {
			levels[c.factor][i] = -1
		}
		if plan.Coarse(b.Unit, f.Unit) == nil {
			list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, c.at), Code: UnitColumns,
				Message: fmt.Sprintf("%s belongs to %s, but the rows are of %s", f.Name, plan.Units[f.Unit].Name, plan.Units[b.Unit].Name),
				Hint:    "add the columns that name each " + plan.Units[f.Unit].Name})
			return list.List()
		}
	}
	_, _, _, broken := s.Rows(func(r sheet.Row) bool {
		b.Quiet = list.Full(UnknownUnit)
		i, bad := b.Find(r.Cells)
		if bad != nil {
			list.Add(diag.Diagnostic{Pos: s.Pos(r, max(bad.Column, 0)), Code: UnknownUnit, Message: bad.Message, Hint: bad.Hint})
			return true
		}
		if row != nil && !row(r, i) {
			return true
		}
		for _, c := range columns {
			f := &plan.Factors[c.factor]
			at := plan.Coarse(b.Unit, f.Unit)[i]
			text := r.Cells[c.at].Text
			l := names[c.factor].Find(text, decimal)
			old, from := &levels[c.factor][at], &seen[c.factor][at]
			switch {
			case l < 0 && list.Full(UnknownLevelCode):
				list.Add(diag.Diagnostic{Code: UnknownLevelCode})
			case l < 0:
				message, hint := UnknownLevel(f, text)
				list.Add(diag.Diagnostic{Pos: s.Pos(r, c.at), Code: UnknownLevelCode, Message: message, Hint: hint})
			case *old < 0:
				*old, *from = l, first{line: r.Line, pos: s.Pos(r, c.at)}
			case *old != l:
				list.Add(diag.Diagnostic{Pos: s.Pos(r, c.at), Code: LevelVaries,
					Message: fmt.Sprintf("%s has %s %q here and %q in line %d", Describe(plan, f.Unit, at), f.Name, text, f.Levels[*old], from.line),
					Hint:    fmt.Sprintf("each %s has one level of %s", plan.Units[f.Unit].Name, f.Name),
					Related: []diag.Related{{Pos: from.pos, Message: "the other level"}}})
			}
		}
		return true
	})
	list.AddAll(broken)
	return list.List()
}

// decimalOf is the decimal mark of the levels of quantitative factors in a sheet: the
// comma where commas do not part the fields and levels are written so.
func decimalOf(s *sheet.Sheet, columns []column) rune {
	var m sheet.Marks
	s.Rows(func(r sheet.Row) bool {
		for _, c := range columns {
			m.Add(r.Cells[c.at].Text)
		}
		return true
	})
	mark, _ := m.Decimal(s.Delimiter)
	return mark
}
