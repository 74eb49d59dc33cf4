package allot

import (
	"fmt"

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
}

// ReadRoster reads the classes that units carry from the roster. A roster without unit
// columns, of animals that have only their own number, tells none.
func ReadRoster(file folder.File, plan *layout.Plan) (*Roster, diag.List) {
	r := &Roster{SHA256: file.SHA256, Levels: make([][]int32, len(plan.Factors))}
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
	if len(carried) == 0 {
		return r, list
	}
	b, bad := NewFinder(plan).Bind(columns, s.Headings)
	if bad != nil {
		if bad.Column >= 0 {
			list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, bad.Column), Code: UnitColumns, Message: bad.Message, Hint: bad.Hint})
		}
		return r, list // animals by their own numbers
	}
	list = append(list, fill(s, b, plan, carried, r.Levels, nil, nil)...)
	return r, list
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
