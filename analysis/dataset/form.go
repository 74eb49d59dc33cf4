package dataset

import (
	"slices"
	"strings"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// Form is a table that Read takes as a data file of the trial once it is filled in.
type Form struct {
	File     string      // the file that the protocol reads it from; empty: it names none for such rows
	Unit     int         // index into Plan.Units: rows are its instances
	Repeated int         // index into Protocol.Repeated: one row for each of its times; −1: none
	Splits   []Split     // further columns that part the rows of a unit, such as the phase
	Over     string      // a column that counts periods, one row for each; empty: none
	Date     string      // the column for the day of recording; empty: none
	Entries  []Entry     // the columns to be filled in
	Units    []string    // names of the units that tell a row, in the order of the plan
	headings [][2]string // our name and what the files call it
}

// Split is a column of which each value has rows of its own.
type Split struct {
	Name   string
	Values []string
}

// Entry is a column to be filled in.
type Entry struct {
	Name  string
	Label string // as reports call it; empty: only its name is known
	Unit  string // of the numbers, UCUM; empty: not known
}

// Heading is what the file calls one of our names.
func (f *Form) Heading(name string) string {
	for _, h := range f.headings {
		if h[0] == name {
			return h[1]
		}
	}
	return name
}

// Forms lists the tables to be filled in for the responses of a plan, in the order in
// which the responses need them: the raw columns of each, those that computed responses
// are made of, totals, events and covariates. The first is the main data file. known
// tells which names another file of the trial holds already, such as the roster.
func Forms(plan *layout.Plan, known func(name string) bool) []Form {
	p := plan.Protocol
	var forms []Form
	at := map[string][2]int{} // name → form and its place
	for k := range p.Responses {
		r := &p.Responses[k]
		want := formOf(plan, r)
		f := -1
		for i := range forms {
			if forms[i].File == want.File && forms[i].Unit == want.Unit && forms[i].Repeated == want.Repeated && forms[i].Over == want.Over && sameSplits(forms[i].Splits, want.Splits) {
				f = i
			}
		}
		if f < 0 {
			f = len(forms)
			forms = append(forms, want)
		}
		form := &forms[f]
		for i, s := range want.Splits {
			for _, v := range s.Values {
				if !slices.Contains(form.Splits[i].Values, v) {
					form.Splits[i].Values = append(form.Splits[i].Values, v)
				}
			}
		}
		add := func(e Entry, elsewhere bool) {
			switch {
			case e.Name == "" || elsewhere && known(e.Name) || slices.Contains(animalNames[:], e.Name):
				return
			case plan.Protocol.Unit(e.Name) != nil || p.RepeatedNamed(e.Name) != nil || e.Name == form.Over:
				return // it tells which row it is
			case slices.ContainsFunc(plan.Factors, func(x layout.Factor) bool { return x.Name == e.Name }):
				return // the allotment tells it
			case slices.ContainsFunc(form.Entries, func(x Entry) bool { return x.Name == e.Name }):
				return
			}
			// What a table of plain rows holds already is read from there.
			if other, ok := at[e.Name]; ok && elsewhere {
				if from := &forms[other[0]]; from.Repeated < 0 && from.Over == "" && len(from.Splits) == 0 && plan.Coarse(form.Unit, from.Unit) != nil {
					return
				}
			}
			at[e.Name] = [2]int{f, len(form.Entries)}
			form.Entries = append(form.Entries, e)
		}
		for _, name := range r.Covariates {
			e := Entry{Name: name}
			if c := p.Covariate(name); c != nil {
				e.Label, e.Unit = c.Label, c.Unit
			}
			add(e, true)
		}
		if r.Compute == "" {
			add(Entry{Name: r.Name, Label: r.Label, Unit: r.Unit}, false)
		} else if e, bad := parseExpression(r.Compute); bad == nil {
			for _, name := range e.names {
				x := Entry{Name: name}
				if c := p.Covariate(name); c != nil {
					x.Label, x.Unit = c.Label, c.Unit
				}
				if s := p.Response(name); s != nil && s.Compute == "" {
					x.Label, x.Unit = s.Label, s.Unit
				}
				add(x, true)
			}
		}
		add(Entry{Name: r.Total}, false)
		add(Entry{Name: r.Event}, false)
	}
	forms = slices.DeleteFunc(forms, func(f Form) bool { return len(f.Entries) == 0 })
	main := ""
	if p.Data != nil {
		main = p.Data.File
	}
	for i := range forms {
		f := &forms[i]
		// What is measured first is written first.
		slices.SortStableFunc(f.Entries, func(a, b Entry) int { return later(a.Name) - later(b.Name) })
		for _, n := range allot.UnitName(plan, f.Unit, 0) {
			f.Units = append(f.Units, n.Unit)
		}
		if p.Data != nil {
			f.Date = p.Data.DateColumn
			for _, c := range p.Data.Columns {
				f.headings = append(f.headings, [2]string{c.Name, c.Heading})
			}
		}
		if f.File != "" {
			continue
		}
		// Only one table can be the main file; others have a file of their own where the
		// protocol names one for their unit.
		if i == 0 {
			f.File = main
			continue
		}
		if p.Data == nil {
			continue
		}
		for _, further := range p.Data.Further {
			if further.Unit == plan.Units[f.Unit].Name && !slices.ContainsFunc(forms, func(g Form) bool { return g.File == further.File }) {
				f.File = further.File
				break
			}
		}
	}
	return forms
}

// formOf tells which rows a response is recorded in.
func formOf(plan *layout.Plan, r *protocol.Response) Form {
	p := plan.Protocol
	f := Form{File: r.File, Unit: plan.Smallest, Repeated: -1}
	if r.RecordedOn != "" {
		on := slices.IndexFunc(plan.Units, func(u layout.Unit) bool { return u.Name == r.RecordedOn })
		if on >= 0 && (r.Aggregate == "" || r.Over != "") {
			f.Unit = on
		}
	}
	repeated := func(name string) bool {
		i := slices.IndexFunc(p.Repeated, func(x protocol.Repeated) bool { return x.Name == name })
		if i >= 0 {
			f.Repeated = i
		}
		return i >= 0
	}
	if r.Repeated != "" {
		repeated(r.Repeated)
	}
	if r.Over != "" && !repeated(r.Over) {
		f.Over = r.Over
	}
	for _, w := range r.Where {
		if p.Unit(w.Column) != nil || slices.ContainsFunc(plan.Factors, func(x layout.Factor) bool { return x.Name == w.Column }) || repeated(w.Column) {
			continue
		}
		f.Splits = append(f.Splits, Split{Name: w.Column, Values: []string{w.Value}})
	}
	slices.SortStableFunc(f.Splits, func(a, b Split) int {
		switch {
		case a.Name < b.Name:
			return -1
		case a.Name > b.Name:
			return 1
		}
		return 0
	})
	return f
}

// later is 0 for what is named as measured at the start and 1 for all else (common
// practice, no source).
func later(name string) int {
	for _, start := range []string{"initial", "start", "baseline", "first"} {
		if strings.HasPrefix(name, start) {
			return 0
		}
	}
	return 1
}

func sameSplits(a, b []Split) bool {
	return slices.EqualFunc(a, b, func(x, y Split) bool { return x.Name == y.Name })
}
