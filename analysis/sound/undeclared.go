package sound

import (
	"slices"
	"strings"

	"penwright/analysis/prose"
	"penwright/protocol/allot"
	"penwright/protocol/factor"
	"penwright/protocol/sheet"
)

// places are words for what holds animals or plants (common practice, no source). A
// column so headed is taken for a unit even where it says no more than the treatment.
var places = []string{"pen", "room", "tank", "cage", "house", "litter", "barn", "aviary", "box", "paddock", "pond", "hutch", "stall", "herd", "flock",
	"group", "block", "plot", "bench", "tray", "row", "shed", "raceway", "incubator", "chamber"}

// undeclared looks for a column that is no unit of the trial but within whose classes a
// treatment does not vary: animals recorded one by one while pens were treated.
func (c *checker) undeclared() {
	p, a := c.plan, c.trial.Allotment
	if a == nil {
		return
	}
	names := []string{allot.File}
	if p.Protocol.Data != nil {
		names = append(names, p.Protocol.Data.File)
	}
	if p.Protocol.Roster != nil {
		names = append(names, p.Protocol.Roster.File)
	}
	told := map[string]bool{} // one column is told once, whichever files hold it
	for _, name := range names {
		for _, f := range c.trial.Files {
			if f.Path == name && name != "" {
				c.columns(f.Path, f.Data, told)
			}
		}
	}
}

// columns looks at the columns of one file that nothing in the protocol names.
func (c *checker) columns(path string, data []byte, told map[string]bool) {
	p := c.plan
	delimiter := "auto"
	if d := p.Protocol.Data; d != nil && path == d.File {
		delimiter = d.Delimiter
	}
	s, _ := sheet.Open(path, data, delimiter)
	if s == nil {
		return
	}
	b, bad := allot.NewFinder(p).Bind(allot.Columns(p, s.Headings), s.Headings)
	if bad != nil {
		return
	}
	b.Quiet = true
	known := c.named()
	var at []int
	for i, h := range s.Headings {
		if h != "" && !known[h] && !told[h] {
			at = append(at, i)
		}
	}
	if len(at) == 0 || len(at) > 200 {
		return
	}
	classes := make([]map[string]int32, len(at))
	class := make([][]int32, len(at)) // class of every row, −1 where the cell is empty
	for k := range at {
		classes[k] = map[string]int32{}
	}
	var rows []int32
	s.Rows(func(r sheet.Row) bool {
		i, bad := b.Find(r.Cells)
		if bad != nil {
			return true
		}
		rows = append(rows, i)
		for k, col := range at {
			text := r.Cells[col].Text
			n := int32(-1)
			if text != "" {
				var ok bool
				if n, ok = classes[k][text]; !ok {
					n = int32(len(classes[k]))
					classes[k][strings.Clone(text)] = n
				}
			}
			class[k] = append(class[k], n)
		}
		return len(rows) < most
	})
	for k, col := range at {
		c.column(s, col, b.Unit, rows, class[k], len(classes[k]), told)
	}
}

// named lists the headings that the protocol gives a meaning.
func (c *checker) named() map[string]bool {
	p := c.plan.Protocol
	known := map[string]bool{"order": true, "code": true}
	var names []string
	for _, u := range c.plan.Units {
		names = append(names, u.Name)
	}
	for _, f := range c.plan.Factors {
		names = append(names, f.Name)
	}
	for _, r := range p.Responses {
		names = append(names, r.Name, r.Total, r.Event, r.Over, r.Repeated)
		for _, w := range r.Where {
			names = append(names, w.Column)
		}
		names = append(names, strings.FieldsFunc(r.Compute, func(r rune) bool {
			return !(r == '_' || r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9')
		})...)
	}
	for _, x := range p.Covariates {
		names = append(names, x.Name)
	}
	for _, x := range p.Repeated {
		names = append(names, x.Name)
	}
	if p.Data != nil {
		names = append(names, p.Data.DateColumn)
		for _, x := range p.Data.Columns {
			if slices.Contains(names, x.Name) {
				known[x.Heading] = true
			}
		}
	}
	for _, n := range names {
		known[n] = true
	}
	return known
}

// column judges one column: rows are instances of unit u, class their classes.
func (c *checker) column(s *sheet.Sheet, col, u int, rows, class []int32, n int, told map[string]bool) {
	p := c.plan
	for f := range p.Factors {
		of := &p.Factors[f]
		if of.Unit < 0 || of.Carried || c.constant[f] {
			continue
		}
		up := p.Coarse(u, of.Unit)
		level := c.trial.Allotment.Levels[f]
		if up == nil || level == nil {
			continue
		}
		// The class of every experimental unit; a unit that lies in two is not within it.
		in := make([]int32, p.Units[of.Unit].N)
		for i := range in {
			in[i] = -1
		}
		within, blank := true, 0
		for r, i := range rows {
			e := up[i]
			switch {
			case class[r] < 0:
				blank++
			case in[e] >= 0 && in[e] != class[r]:
				within = false
			default:
				in[e] = class[r]
			}
		}
		if !within || blank*10 > len(rows) || n < 2 {
			continue
		}
		var x, y factor.Factor
		x.N, y.N = n, len(of.Levels)
		for e, k := range in {
			if k >= 0 && level[e] >= 0 {
				x.Level, y.Level = append(x.Level, k), append(y.Level, level[e])
			}
		}
		several := 0 // units that share their class with others
		for _, m := range x.Counts() {
			if m > 1 {
				several += m
			}
		}
		if several*4 < 3*len(x.Level) || x.Rank() < 2 || x.Rank() >= len(x.Level) || !factor.Finer(x, y) || y.Rank() < 2 {
			continue
		}
		// A column that says the same as the treatment is its name, unless it is headed
		// as a place.
		if factor.Finer(y, x) && !place(s.Headings[col]) || c.repeats(s.Headings[col], f, x, in, level) {
			continue
		}
		told[s.Headings[col]] = true
		message, hint := prose.UndeclaredUnit(p, f, of.Unit, s.Headings[col], x.Rank())
		c.found = append(c.found, Finding{Code: UndeclaredUnit, Level: Warning, Pos: s.Pos(s.Heading, col), Message: message, Hint: hint})
		return
	}
}

// repeats tells whether the classes are those of a declared unit larger than the
// factor's own, or unions of levels of other factors, so that they say nothing new.
func (c *checker) repeats(heading string, f int, x factor.Factor, in, level []int32) bool {
	p := c.plan
	u := p.Factors[f].Unit
	for v := range p.Units {
		up := p.Coarse(u, v)
		if up == nil || v == u {
			continue
		}
		y := factor.Factor{N: p.Units[v].N}
		for e, k := range in {
			if k >= 0 && level[e] >= 0 {
				y.Level = append(y.Level, up[e])
			}
		}
		if factor.Equivalent(x, y) {
			return true
		}
	}
	// Labels of combinations of treatments.
	var all []factor.Factor
	for g := range p.Factors {
		at := c.trial.Allotment.LevelAt(g, u)
		if at == nil || slices.Contains(at, -1) {
			continue
		}
		y := factor.Factor{N: len(p.Factors[g].Levels)}
		for e, k := range in {
			if k >= 0 && level[e] >= 0 {
				y.Level = append(y.Level, at[e])
			}
		}
		all = append(all, y)
	}
	return len(all) > 1 && !place(heading) && factor.Finer(factor.Infimum(all...), x)
}

func place(heading string) bool {
	words := strings.FieldsFunc(strings.ToLower(heading), func(r rune) bool { return !(r >= 'a' && r <= 'z') })
	return slices.ContainsFunc(words, func(w string) bool {
		return slices.Contains(places, w) || slices.Contains(places, strings.TrimSuffix(w, "s"))
	})
}
