package dataset

import (
	"fmt"
	"slices"

	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/sheet"
)

// treatmentColumn is a column of a data file that holds levels of a factor.
type treatmentColumn struct {
	factor int
	at     int
	unit   int     // that received it
	to     []int32 // instance of the rows' unit → of unit
	want   []int32 // level of every instance of unit by the allotment, -1 unknown; nil without one
	told   []bool  // instances whose disagreement was reported
	names  *allot.Names
	last   string // text of the row before
	level  int32
}

// found is a level that the data tell where no allotment does.
type found struct {
	level  []int32
	origin []Origin
}

// treatmentColumns finds the treatment columns of a frame.
func (r *reader) treatmentColumns(f *frame) []*treatmentColumn {
	var out []*treatmentColumn
	for k := range r.plan.Factors {
		of := &r.plan.Factors[k]
		at := r.find(f, of.Name)
		if at < 0 {
			continue
		}
		f.used[at] = true
		unit := of.Unit
		if unit < 0 {
			unit = r.plan.Factors[0].Unit // listed treatments stand first
		}
		t := &treatmentColumn{factor: k, at: at, unit: unit, to: r.plan.Coarse(f.unit, unit), level: -1}
		if t.to == nil {
			r.faults.Add(diag.Diagnostic{Pos: f.sheet.Pos(f.sheet.Heading, at), Severity: diag.Warning, Code: TreatmentUnchecked,
				Message: fmt.Sprintf("%s belongs to %s, but the rows are of %s, so it is not compared with the allotment", of.Name, r.plan.Units[unit].Name, r.plan.Units[f.unit].Name)})
			continue
		}
		if r.allotted != nil {
			t.want = r.allotted.LevelAt(k, unit)
		}
		if t.want != nil && slices.Contains(t.want, -1) && of.Unit >= 0 {
			t.want = nil // what is not known is taken from the data
		}
		t.names = allot.NewNames(of.Levels, of.Values)
		t.told = make([]bool, r.plan.Units[unit].N)
		out = append(out, t)
	}
	return out
}

// compare checks one treatment cell, or learns from it.
func (r *reader) compare(f *frame, t *treatmentColumn, row sheet.Row, i int32) {
	of := &r.plan.Factors[t.factor]
	text := row.Cells[t.at].Text
	if text == "" {
		return
	}
	if text != t.last {
		t.last, t.level = text, t.names.Find(text, f.decimal)
	}
	at := t.to[i]
	if t.level < 0 {
		if r.faults.Full(allot.UnknownLevelCode) {
			r.faults.Add(diag.Diagnostic{Code: allot.UnknownLevelCode})
			return
		}
		message, hint := allot.UnknownLevel(of, text)
		r.faults.Add(diag.Diagnostic{Pos: f.sheet.Pos(row, t.at), Code: allot.UnknownLevelCode, Message: message, Hint: hint})
		return
	}
	origin := Origin{File: int32(f.at), First: int32(row.Line), Last: int32(row.Line)}
	if t.want == nil {
		if of.Unit < 0 {
			return // its treatment column tells
		}
		l := r.learned[t.factor]
		if l == nil {
			l = &found{level: make([]int32, len(t.told)), origin: make([]Origin, len(t.told))}
			for i := range l.level {
				l.level[i] = -1
			}
			r.learned[t.factor] = l
		}
		switch {
		case l.level[at] < 0:
			l.level[at], l.origin[at] = t.level, origin
		case l.level[at] != t.level && !t.told[at]:
			t.told[at] = true
			first := l.origin[at]
			r.faults.Add(diag.Diagnostic{Pos: f.sheet.Pos(row, t.at), Code: allot.LevelVaries,
				Message: fmt.Sprintf("%s has %s %q here and %q in line %d", allot.Describe(r.plan, t.unit, at), of.Name, text, of.Levels[l.level[at]], first.First),
				Hint:    fmt.Sprintf("each %s has one level of %s", r.plan.Units[t.unit].Name, of.Name),
				Related: []diag.Related{{Pos: diag.Pos{File: r.frames[first.File].sheet.Path, Line: int(first.First)}, Message: "the other level"}}})
		}
		return
	}
	if t.level == t.want[at] || t.told[at] {
		return
	}
	t.told[at] = true
	r.table.Disagreements = append(r.table.Disagreements, Disagreement{Factor: t.factor, Instance: at, Allotted: t.want[at], Found: of.Levels[t.level], Origin: origin})
	d := diag.Diagnostic{Pos: f.sheet.Pos(row, t.at), Code: TreatmentDisagrees,
		Hint: `correct the data, or record it as an [[event]] of kind "wrong treatment" or "treatment changed" with given = "…"`}
	allotted := "nothing of it"
	if l := t.want[at]; l >= 0 {
		allotted = fmt.Sprintf("%q", of.Levels[l])
	}
	d.Message = fmt.Sprintf("%s has %s %q here, but was allotted %s", allot.Describe(r.plan, t.unit, at), of.Name, text, allotted)
	explained := false
	r.changes.each(r.plan, t.unit, at, func(int) { explained = true })
	for _, x := range r.changes { // an event may name a unit inside
		if down := r.plan.Coarse(x.unit, t.unit); down != nil && !explained {
			for inside := range x.of {
				explained = explained || down[inside] == at
			}
		}
	}
	if explained {
		d.Severity, d.Hint = diag.Warning, "an event records it; the unit is analysed as allotted"
	}
	r.faults.Add(d)
}

// maskedColumn is the column of masked codes of a frame, or -1 where there is nothing
// to compare it with.
func (r *reader) maskedColumn(f *frame) int {
	if r.allotted == nil || r.allotted.Codes == nil || !r.plan.Protocol.Randomization.Codes {
		return -1
	}
	at := r.find(f, "code")
	if at < 0 || r.plan.Coarse(f.unit, allot.RowUnit(r.plan)) == nil {
		return -1
	}
	f.used[at] = true
	return at
}

// compareCode checks the masked code of a row.
func (r *reader) compareCode(f *frame, column int, row sheet.Row, i int32) {
	unit := allot.RowUnit(r.plan)
	at := r.plan.Coarse(f.unit, unit)[i]
	if text, want := row.Cells[column].Text, r.allotted.Codes[at]; text != "" && text != want {
		r.faults.Add(diag.Diagnostic{Pos: f.sheet.Pos(row, column), Code: CodeDisagrees,
			Message: fmt.Sprintf("%s has the code %q here, but %q in %s", allot.Describe(r.plan, unit, at), text, want, allot.File), Hint: "see which unit the row is of"})
	}
}

// completeAllotment takes from the data what the allotment does not tell.
func (r *reader) completeAllotment() *allot.Allotment {
	var a *allot.Allotment
	if r.allotted != nil {
		a = new(allot.Allotment)
		*a = *r.allotted
		a.Levels = slices.Clone(a.Levels)
	} else {
		a = &allot.Allotment{Plan: r.plan, Levels: make([][]int32, len(r.plan.Factors)), Origin: allot.FromData}
		a.Order = r.order()
	}
	// Where a file or its cells could not be read, that has been said already.
	follows := len(r.failed) > 0 || r.faults.Has(allot.UnknownLevelCode) || r.faults.Has(allot.LevelVaries) || r.faults.Has(allot.UnknownUnit)
	learned := false
	for k := range r.plan.Factors {
		of := &r.plan.Factors[k]
		if of.Unit < 0 || a.Levels[k] != nil && !slices.Contains(a.Levels[k], -1) {
			continue
		}
		l := r.learned[k]
		if l == nil {
			if a.Levels[k] == nil {
				a.Levels[k] = make([]int32, r.plan.Units[of.Unit].N)
				for i := range a.Levels[k] {
					a.Levels[k][i] = -1
				}
			}
			unit := r.plan.Units[of.Unit].Name
			hint := fmt.Sprintf("add a column %q to the data, or bring %s", of.Name, allot.File)
			switch {
			case follows:
			case of.Carried:
				r.fail(fmt.Sprintf("unit[%d].carries", of.Unit), NoAllotment, hint, "nothing tells the %s of each %s: no file has a column %q", of.Name, unit, of.Name)
			default:
				r.fail(fmt.Sprintf("unit[%d].receives", of.Unit), NoAllotment, hint, "nothing tells the %s that each %s received: no file has a column %q", of.Name, unit, of.Name)
			}
			continue
		}
		learned = true
		levels := slices.Clone(l.level)
		if old := a.Levels[k]; old != nil {
			for i := range levels {
				if old[i] >= 0 {
					levels[i] = old[i]
				}
			}
		}
		a.Levels[k] = levels
		// A unit with rows but without a level cannot be analysed.
		var without []int32
		for i := range levels {
			if levels[i] < 0 && r.observed(of.Unit, int32(i)) {
				without = append(without, int32(i))
			}
		}
		if len(without) > 0 && !follows {
			more := ""
			if len(without) > 1 {
				more = fmt.Sprintf(" and %d more", len(without)-1)
			}
			r.fail(fmt.Sprintf("unit[%d]", of.Unit), NoAllotment, fmt.Sprintf("fill in the column %q", of.Name), "no row tells the %s of %s%s", of.Name, allot.Describe(r.plan, of.Unit, without[0]), more)
		}
	}
	if !learned && r.allotted != nil {
		return r.allotted
	}
	if r.allotted == nil && !r.faults.HasErrors() {
		r.faults.AddAll(allot.Check(a, func(factor int, instance int32) diag.Pos {
			o := r.learned[factor].origin[instance]
			return diag.Pos{File: r.frames[o.File].sheet.Path, Line: int(o.First)}
		}))
	}
	return a
}

// observed tells whether any row is of an instance of a unit.
func (r *reader) observed(unit int, instance int32) bool {
	if r.seen[unit] == nil {
		r.seen[unit] = make([]bool, r.plan.Units[unit].N)
		for _, f := range r.frames {
			if up := r.plan.Coarse(f.unit, unit); up != nil {
				for _, i := range f.rows {
					r.seen[unit][up[i]] = true
				}
			}
		}
	}
	return r.seen[unit][instance]
}

// order is the order in which the units that received the smallest treatments first
// appear in the data; those without a row follow.
func (r *reader) order() []int {
	unit := allot.RowUnit(r.plan)
	order := make([]int, r.plan.Units[unit].N)
	next := 0
	for _, f := range r.frames {
		up := r.plan.Coarse(f.unit, unit)
		if up == nil {
			continue
		}
		for _, i := range f.rows {
			if order[up[i]] == 0 {
				next++
				order[up[i]] = next
			}
		}
	}
	for i := range order {
		if order[i] == 0 {
			next++
			order[i] = next
		}
	}
	return order
}
