package table

import (
	"math"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol/layout"
	"penwright/render/doc"
)

// sizeDecimals is the number of decimals of a column of numbers on the scale of a size:
// those that show its spread, and each number, to two digits.
func sizeDecimals(s *result.SampleSize, xs ...result.Number) int {
	var v []float64
	for _, x := range append(xs, s.SD) {
		if x.Known() {
			v = append(v, float64(x))
		}
	}
	return num.ColumnDecimals(v, 2, 6)
}

// sizeUnit is a heading with the unit of a size behind it.
func sizeUnit(p *layout.Plan, s *result.SampleSize, heading string) string {
	if u := strings.TrimLeft(prose.SizeAmount(p, s, ""), "\u202f\u2009 "); u != "" {
		return heading + " (" + u + ")"
	}
	return heading
}

func powerCell(x result.Number) doc.Cell {
	if !x.Known() {
		return cell("")
	}
	return cell(prose.PowerText(x))
}

// Sizes shows what replication gives: a row for a number of replicates, those planned and
// needed marked. It has no rows where nothing was computed.
func Sizes(p *layout.Plan, s *result.SampleSize) doc.Table {
	if s == nil || len(s.Curve) == 0 {
		return doc.Table{}
	}
	t := doc.Table{ID: "size-replication", Caption: text("What replication gives")}
	counted := s.Grows != nil && s.Curve[0].Count > 0 && s.Grows.Unit != "replicate"
	powers := s.Power.Known()
	t.Columns = append(t.Columns, doc.Column{Align: doc.Decimal, Key: true})
	h := []doc.Cell{cell("Replicates")}
	if counted {
		t.Columns = append(t.Columns, decimal())
		h = append(h, cell(upper(prose.Plural(unitLabel(p, s.Grows.Unit)))))
	}
	t.Columns = append(t.Columns, decimal())
	h = append(h, cell("Error df"))
	if powers {
		t.Columns = append(t.Columns, decimal())
		h = append(h, cell("Power"))
	}
	t.Columns = append(t.Columns, decimal(), left(false))
	h = append(h, cell(sizeUnit(p, s, "Half width")), cell("Remark"))
	t.Head = head(h...)
	d := sizeDecimals(s, s.Curve[len(s.Curve)-1].HalfWidth)
	for _, c := range s.Curve {
		row := []doc.Cell{cell(num.Count(c.Replicates))}
		if counted {
			row = append(row, cell(num.Count(c.Count)))
		}
		row = append(row, cell(num.Count(c.ErrorDF)))
		if powers {
			row = append(row, powerCell(c.Power))
		}
		var marks []string
		if c.Replicates == s.Replicates {
			marks = append(marks, "planned")
		}
		if s.Needed != nil && c.Replicates == s.Needed.Replicates {
			marks = append(marks, "smallest that will do")
		}
		if s.WithLosses != nil && c.Replicates == s.WithLosses.Replicates {
			marks = append(marks, "with losses")
		}
		row = append(row, cell(fixed(c.HalfWidth, float64(c.HalfWidth), d)), cell(strings.Join(marks, ", ")))
		t.Rows = append(t.Rows, doc.Row{Cells: row})
	}
	return t
}

func unitLabel(p *layout.Plan, name string) string {
	for i := range p.Units {
		if p.Units[i].Name == name {
			return prose.UnitName(&p.Units[i])
		}
	}
	return name
}

// SizeTerms shows for every treatment term the replication, the error df and the difference
// that can be detected.
func SizeTerms(p *layout.Plan, s *result.SampleSize) doc.Table {
	if s == nil || len(s.Terms) == 0 {
		return doc.Table{}
	}
	wished := s.Wished
	if !wished.Known() {
		wished = 0.80
	}
	t := doc.Table{ID: "size-terms", Caption: text("What the plan detects with a power of " + prose.PowerText(wished))}
	known := slices.ContainsFunc(s.Terms, func(x result.TermPower) bool { return x.Detectable.Known() })
	lost := slices.ContainsFunc(s.Terms, func(x result.TermPower) bool { return x.Efficiency.Known() && x.Efficiency < 1-1e-9 })
	t.Columns = []doc.Column{left(true), left(false), decimal(), decimal(), decimal()}
	h := []doc.Cell{cell("Term"), cell("Unit"), cell("Replicates"), emph("df"), cell("Error df")}
	if lost {
		t.Columns = append(t.Columns, decimal())
		h = append(h, cell("Efficiency (%)"))
	}
	t.Columns = append(t.Columns, decimal())
	h = append(h, cell("Difference (SD)"))
	if known {
		t.Columns = append(t.Columns, decimal())
		h = append(h, cell(sizeUnit(p, s, "Difference")))
	}
	t.Head = head(h...)
	var shown []result.Number
	for _, x := range s.Terms {
		shown = append(shown, x.Detectable)
	}
	d := sizeDecimals(s, shown...)
	interaction := false
	for _, x := range s.Terms {
		df := ""
		if x.ErrorDF != nil {
			df = num.Count(*x.ErrorDF)
		}
		row := []doc.Cell{cell(prose.TermLabel(p, x.Term)), cell(unitLabel(p, x.Unit)), cell(num.Count(x.Replicates)), cell(num.Count(x.DF)), cell(df)}
		if lost {
			row = append(row, cell(fixed(x.Efficiency, 100*float64(x.Efficiency), 1)))
		}
		row = append(row, cell(fixed(x.DetectableSD, float64(x.DetectableSD), 2)))
		if known {
			row = append(row, cell(fixed(x.Detectable, float64(x.Detectable), d)))
		}
		t.Rows = append(t.Rows, doc.Row{Cells: row})
		interaction = interaction || strings.Contains(x.Term, ":")
	}
	note := "Differences are between two means, all others midway, by the F test of the term; SD is that of one unit in its own error."
	if interaction {
		note += " Those of interactions are differences of differences, and replicates are those of a combination."
	}
	t.Notes = append(t.Notes, text(note))
	return t
}

// SizeSpread shows power at other differences and at a smaller and a greater spread.
func SizeSpread(p *layout.Plan, s *result.SampleSize) doc.Table {
	if s == nil || len(s.ByDifference) == 0 || !s.Power.Known() {
		return doc.Table{}
	}
	t := doc.Table{
		ID: "size-difference", Caption: text("Power by difference and by spread"),
		Columns: []doc.Column{left(true), decimal(), decimal()},
		Head:    head(cell("Changed"), cell(sizeUnit(p, s, "To")), cell("Power")),
	}
	d := sizeDecimals(s, s.ByDifference[0].Difference)
	for _, x := range s.ByDifference {
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{cell("Difference"), cell(fixed(x.Difference, float64(x.Difference), d)), powerCell(x.Power)}})
	}
	for i, x := range s.BySD {
		t.Rows = append(t.Rows, doc.Row{Rule: i == 0, Cells: []doc.Cell{cell("SD"), cell(fixed(x.SD, float64(x.SD), d)), powerCell(x.Power)}})
	}
	return t
}

// SizeGroups shows what more units and more animals in each buy.
func SizeGroups(p *layout.Plan, s *result.SampleSize) doc.Table {
	if s == nil || len(s.Groups) == 0 {
		return doc.Table{}
	}
	unit := unitLabel(p, s.Unit)
	powers := s.Power.Known()
	t := doc.Table{
		ID: "size-groups", Caption: text("More " + prose.Plural(unit) + " against more animals in each"),
		Columns: []doc.Column{{Align: doc.Decimal, Key: true}, {Align: doc.Decimal, Key: true}, decimal(), decimal(), decimal()},
	}
	h := []doc.Cell{cell("Replicates"), cell("Animals per " + unit), cell("Animals"), cell(sizeUnit(p, s, "SD of a "+unit)), cell(sizeUnit(p, s, "Half width"))}
	if powers {
		t.Columns = append(t.Columns, decimal())
		h = append(h, cell("Power"))
	}
	t.Head = head(h...)
	d := sizeDecimals(s)
	endless, last := false, 0
	for i, g := range s.Groups {
		per, animals := "any number", ""
		if g.PerUnit.Known() {
			per = num.Fixed(float64(g.PerUnit), decimalsOf(float64(g.PerUnit)))
			animals = num.Count(g.Animals)
		} else {
			endless = true
		}
		row := []doc.Cell{cell(num.Count(g.Replicates)), cell(per), cell(animals), cell(fixed(g.SD, float64(g.SD), d+1)), cell(fixed(g.HalfWidth, float64(g.HalfWidth), d))}
		if powers {
			row = append(row, powerCell(g.Power))
		}
		t.Rows = append(t.Rows, doc.Row{Rule: i > 0 && g.Replicates != last, Cells: row})
		last = g.Replicates
	}
	if endless {
		t.Notes = append(t.Notes, text("However many animals a "+unit+" holds, precision stays below that of the row “any number”; only more "+prose.Plural(unit)+" help further. How many a "+unit+" may hold is a matter of space and welfare rules."))
	}
	return t
}

func decimalsOf(x float64) int {
	if x == math.Round(x) {
		return 0
	}
	return 1
}
