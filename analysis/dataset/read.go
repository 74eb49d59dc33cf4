package dataset

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
)

// The greatest numbers of cells of a file, and of rows of all responses together, that
// are held.
const (
	maxCells = 100_000_000
	maxSlots = 20_000_000
)

// reader is one reading of a trial's data.
type reader struct {
	files    *folder.Folder
	plan     *layout.Plan
	data     *protocol.Data
	allotted *allot.Allotment // as given; nil without
	finder   *allot.Finder
	table    *Table
	faults   sheet.Faults

	frames     []*frame
	failed     []string // files that could not be opened
	conditions []protocol.Condition
	missing    []string // codes of missing values
	broken     bool

	corrected []bool // corrections whose file is one of the trial's
	pending   []*correctionAt
	changes   byUnit[int]    // events that explain another treatment
	learned   []*found       // by factor
	seen      [][]bool       // by unit: instances with a row
	times     []*allot.Names // by index of [[repeated]], made when needed

	exclusions byUnit[*exclusion]
	confirmed  byUnit[*confirmation]
	departures []byUnitInstance
	moves      []int                // events that moved animals
	numbers    map[[2]int][]float64 // of animals, by index into animalNames and unit
	duplicates map[diag.Pos]bool    // repeated rows that were reported
}

// Read reads the data files of a trial into a Table at the level of the units that each
// response is recorded on. a is nil where the trial has no allotment file; the treatment
// columns of the data are then the allotment. The table is nil where there are no data;
// where the list has errors it holds what could be read. Diagnostics that concern many
// rows are kept up to a hundred of a kind.
func Read(files *folder.Folder, plan *layout.Plan, a *allot.Allotment) (*Table, diag.List) {
	p := plan.Protocol
	if p.Data == nil || p.Data.File == "" {
		return nil, nil
	}
	r := &reader{files: files, plan: plan, data: p.Data, allotted: a, finder: allot.NewFinder(plan),
		table: &Table{Plan: plan, Allotment: a}, corrected: make([]bool, len(p.Corrections)),
		learned: make([]*found, len(plan.Factors)), seen: make([][]bool, len(plan.Units)), times: make([]*allot.Names, len(p.Repeated)), numbers: map[[2]int][]float64{}, duplicates: map[diag.Pos]bool{}}
	late := p.Data.Locked != (protocol.Date{})
	main := r.openFrame(p.Data.File, "data.file", late)
	if main == nil {
		return nil, r.faults.List()
	}
	for k, further := range p.Data.Further {
		key := fmt.Sprintf("data.further[%d]", k)
		f := r.openFrame(further.File, key+".file", true)
		if f == nil || further.Unit == "" {
			continue
		}
		if want := r.unit(further.Unit); want >= 0 && want != f.unit {
			r.fail(key+".unit", WrongLevel, "name its rows by the columns of that unit", "the rows of %s are of %s, not of %s", further.File, plan.Units[f.unit].Name, further.Unit)
		}
	}
	for k := range p.Responses {
		if file := p.Responses[k].File; file != "" {
			r.openFrame(file, fmt.Sprintf("response[%d].file", k), true)
		}
		r.conditions = append(r.conditions, p.Responses[k].Where...)
	}
	if p.Roster != nil && p.Roster.File != "" {
		r.openFrame(p.Roster.File, "roster.file", true)
	}
	r.table.Files = make([]File, len(r.frames))
	for i, f := range r.frames {
		s := f.sheet
		r.table.Files[i] = File{Path: s.Path, Encoding: s.Encoding, Delimiter: s.Delimiter, Columns: s.Headings}
	}
	r.events()
	r.excluded()
	r.confirmations()
	jobs := make([]*job, len(p.Responses))
	for k := range p.Responses {
		jobs[k] = r.prepare(k)
	}
	for _, f := range r.frames {
		r.load(f)
	}
	r.settle()
	r.table.Allotment = r.completeAllotment()
	slots := 0
	for k, j := range jobs {
		if j != nil {
			slots += r.slots(j)
			if slots > maxSlots {
				r.fail(j.key, TooMuch, "record at a larger unit, or split the trial", "the responses down to %s make %d rows; together at most %d million are held", j.p.Name, slots, maxSlots/1_000_000)
				j, jobs[k] = nil, nil
			}
		}
		if j == nil {
			// What cannot be read keeps its place, without rows.
			r.table.Responses = append(r.table.Responses, Response{Protocol: &p.Responses[k], Unit: plan.Smallest})
			continue
		}
		r.table.Responses = append(r.table.Responses, r.respond(j))
	}
	r.without(jobs)
	r.unmet()
	list := r.faults.List()
	list.Sort()
	return r.table, slices.CompactFunc(list, func(a, b diag.Diagnostic) bool { // several responses may say the same
		return a.Pos == b.Pos && a.Code == b.Code && a.Message == b.Message
	})
}

func (r *reader) unit(name string) int {
	return slices.IndexFunc(r.plan.Units, func(u layout.Unit) bool { return u.Name == name })
}

// fail reports an error at the value of a key of the protocol.
func (r *reader) fail(key, code, hint, format string, args ...any) {
	r.faults.Add(diag.Diagnostic{Pos: r.plan.Protocol.ValuePos(key), Key: key, Code: code, Message: fmt.Sprintf(format, args...), Hint: hint})
}

// variable is a name that a response is computed from, and where its numbers stand.
type variable struct {
	name   string
	frame  *frame // nil for a number of animals
	animal int    // index into animalNames, for a number of animals
}

// job is how one response is to be made.
type job struct {
	index      int
	p          *protocol.Response
	key        string
	unit       int // recorded on
	base       *frame
	repeated   int // index into Protocol.Repeated, or -1
	expression *expression
	variables  []variable // of the expression, or the column itself
	total      *frame
	event      *frame
	covariates []*frame // nil: absent
}

// candidates lists the frames in which a response's columns are looked for, in order.
func (r *reader) candidates(p *protocol.Response) []*frame {
	var first, rest []*frame
	for _, f := range r.frames {
		if p.File != "" && f.sheet.Path == p.File {
			first = append(first, f)
		} else {
			rest = append(rest, f)
		}
	}
	return append(first, rest...)
}

// source finds the frame that holds a name, or nil.
func (r *reader) source(p *protocol.Response, name string) *frame {
	for _, f := range r.candidates(p) {
		if r.find(f, name) >= 0 {
			return f
		}
	}
	return nil
}

// headings lists all headings, for suggestions.
func (r *reader) headings() []string {
	var all []string
	for _, f := range r.frames {
		all = append(all, f.sheet.Headings...)
	}
	return all
}

// prepare finds the columns of a response. It is nil where that fails.
func (r *reader) prepare(k int) *job {
	plan := r.plan
	p := &plan.Protocol.Responses[k]
	j := &job{index: k, p: p, key: fmt.Sprintf("response[%d]", k), repeated: -1}
	names := []string{p.Name}
	if p.Compute != "" {
		e, bad := parseExpression(p.Compute)
		if bad != nil {
			r.fail(j.key+".compute", BadCompute, bad.Hint, "%s, at character %d of %q", bad.Message, bad.At+1, p.Compute)
			return nil
		}
		j.expression, names = e, e.names
	}
	wanting := false
	for _, name := range names {
		v := variable{name: name, animal: slices.Index(animalNames[:], name)}
		if v.animal < 0 || p.Compute == "" {
			if v.frame = r.source(p, name); v.frame == nil {
				wanting = true
				key := j.key + ".name"
				if p.Compute != "" {
					key = j.key + ".compute"
				}
				r.fail(key, NoColumn, near(name, r.headings()), "no data file has a column %q", name)
				continue
			}
			if j.base == nil {
				j.base = v.frame
			}
			r.need(v.frame, name)
		}
		j.variables = append(j.variables, v)
	}
	if wanting {
		return nil
	}
	if p.File != "" {
		if f := r.candidates(p)[0]; f.sheet.Path == p.File {
			j.base = f
		} else {
			return nil // said when it was opened
		}
		if p.Compute == "" && j.variables[0].frame != j.base {
			r.fail(j.key+".file", NoColumn, near(p.Name, j.base.sheet.Headings), "%s has no column %q", p.File, p.Name)
			return nil
		}
	}
	if j.base == nil {
		j.base = r.frames[0]
	}
	extra := func(name, key string) *frame {
		if name == "" {
			return nil
		}
		if r.find(j.base, name) < 0 {
			r.fail(j.key+"."+key, NoColumn, near(name, j.base.sheet.Headings), "%s has no column %q", j.base.sheet.Path, name)
			wanting = true
			return nil
		}
		r.need(j.base, name)
		return j.base
	}
	switch {
	case p.Total != "" && p.Aggregate == "mean":
		r.fail(j.key+".aggregate", BadKind, `say aggregate = "sum"`, "a proportion is counted from sums: %s of %s cannot be averaged", p.Name, p.Total)
		return nil
	case p.Event != "" && p.Aggregate != "":
		r.fail(j.key+".aggregate", BadKind, "", "times to an event cannot be aggregated")
		return nil
	}
	j.total, j.event = extra(p.Total, "total"), extra(p.Event, "event")
	for _, c := range p.Where {
		if r.find(j.base, c.Column) < 0 {
			r.fail(j.key+".where."+c.Column, NoColumn, near(c.Column, j.base.sheet.Headings), "%s has no column %q", j.base.sheet.Path, c.Column)
			wanting = true
		}
	}
	if p.Over != "" && r.find(j.base, p.Over) < 0 {
		r.fail(j.key+".over", NoColumn, near(p.Over, j.base.sheet.Headings), "%s has no column %q", j.base.sheet.Path, p.Over)
		wanting = true
	}
	for i, name := range p.Covariates {
		f := r.source(p, name)
		if f == nil {
			r.fail(fmt.Sprintf("%s.covariates[%d]", j.key, i), NoColumn, near(name, r.headings()), "no data file has a column %q", name)
			wanting = true
			continue
		}
		r.need(f, name)
		j.covariates = append(j.covariates, f)
	}
	j.unit = j.base.unit
	if p.RecordedOn != "" {
		if j.unit = r.unit(p.RecordedOn); j.unit < 0 {
			return nil // said by the protocol
		}
	}
	if p.Repeated != "" {
		j.repeated = slices.IndexFunc(plan.Protocol.Repeated, func(rep protocol.Repeated) bool { return rep.Name == p.Repeated })
		if j.repeated < 0 {
			return nil // said by the protocol
		}
		if r.find(j.base, p.Repeated) < 0 {
			r.fail(j.key+".repeated", NoColumn, near(p.Repeated, j.base.sheet.Headings), "%s has no column %q that tells the time of each row", j.base.sheet.Path, p.Repeated)
			wanting = true
		}
	}
	if wanting {
		return nil
	}
	up := plan.Coarse(j.base.unit, j.unit)
	switch {
	case up == nil:
		r.fail(j.key+".recorded_on", WrongLevel, "record it on "+plan.Units[j.base.unit].Name+", or name each "+plan.Units[j.unit].Name+" in the file",
			"%s is recorded on %s, but the rows of %s are of %s", p.Name, plan.Units[j.unit].Name, j.base.sheet.Path, plan.Units[j.base.unit].Name)
		return nil
	case j.base.unit != j.unit && p.Aggregate == "":
		r.fail(j.key+".recorded_on", WrongLevel, `say aggregate = "mean", "sum" or "ratio"`,
			"%s is recorded on %s, but the rows of %s are of %s", p.Name, plan.Units[j.unit].Name, j.base.sheet.Path, plan.Units[j.base.unit].Name)
		return nil
	}
	return j
}

// confirmation is a confirmed value with what it points at.
type confirmation struct {
	index int
	met   bool
	seen  bool // some value of the response was there
	value float64
}

func (r *reader) confirmations() {
	for k := range r.data.Confirmed {
		c := &r.data.Confirmed[k]
		if unit, instance, ok := r.locate(c.Unit, fmt.Sprintf("data.confirmed[%d].unit", k)); ok {
			r.confirmed.add(unit, instance, &confirmation{index: k})
		}
	}
}

// exclusion is an exclusion with what it points at.
type exclusion struct {
	index  int
	p      *protocol.Exclusion
	reason string
}

func (e *exclusion) concerns(response string) bool {
	return len(e.p.Responses) == 0 || slices.Contains(e.p.Responses, response)
}

func (r *reader) excluded() {
	for k := range r.plan.Protocol.Exclusions {
		p := &r.plan.Protocol.Exclusions[k]
		key := fmt.Sprintf("exclusion[%d]", k)
		known := p.At == ""
		for i := range r.plan.Protocol.Repeated {
			known = known || r.timeIndex(i, p.At) >= 0
		}
		if !known {
			r.fail(key+".at", BadExclusion, "", "no [[repeated]] has the time %q", p.At)
			continue
		}
		if unit, instance, ok := r.locate(p.Unit, key+".unit"); ok {
			r.exclusions.add(unit, instance, &exclusion{index: k, p: p, reason: strings.TrimSpace(p.Reason)})
		}
	}
}

// slots is the number of rows that a response has.
func (r *reader) slots(j *job) int {
	n := r.plan.Units[j.unit].N
	if j.repeated >= 0 {
		n *= len(r.plan.Protocol.Repeated[j.repeated].At)
	}
	return n
}

// without warns of exclusions that a response cannot follow, since nothing so small or
// of such a time is recorded.
func (r *reader) without(jobs []*job) {
	for _, x := range r.exclusions {
		for _, i := range sortedKeys(x.of) {
			for _, e := range x.of[i] {
				key, none, any := fmt.Sprintf("exclusion[%d]", e.index), "", false
				for _, j := range jobs {
					if j == nil || !e.concerns(j.p.Name) {
						continue
					}
					small := r.plan.Coarse(j.unit, x.unit) != nil || r.plan.Coarse(j.base.unit, x.unit) != nil
					timely := e.p.At == "" || j.repeated >= 0 && r.timeIndex(j.repeated, e.p.At) >= 0
					if small && timely {
						any = true
					} else if none == "" || len(e.p.Responses) > 0 {
						none = j.p.Name
					}
				}
				if none == "" || any && len(e.p.Responses) == 0 {
					continue
				}
				hint := ""
				if e.p.At != "" {
					hint = "a time concerns repeated responses only"
				}
				r.faults.Add(diag.Diagnostic{Pos: r.plan.Protocol.ValuePos(key + ".unit"), Key: key + ".unit", Severity: diag.Warning, Code: BadExclusion,
					Message: fmt.Sprintf("%s is not recorded by itself in %s, so it cannot be left out there", unitText(e.p.Unit), none), Hint: hint})
			}
		}
	}
}

// unmet reports confirmed values that no response has.
func (r *reader) unmet() {
	for _, x := range r.confirmed {
		for _, i := range sortedKeys(x.of) {
			for _, c := range x.of[i] {
				p := &r.data.Confirmed[c.index]
				key := fmt.Sprintf("data.confirmed[%d]", c.index)
				switch {
				case c.met:
				case c.seen:
					r.fail(key+".value", BadConfirmation, "confirm the value that the data give", "%s of %s is %s, not %v", p.Response, unitText(p.Unit), readable(c.value, p.Value), p.Value)
				default:
					r.fail(key+".unit", BadConfirmation, "", "there is no value of %s for %s", p.Response, unitText(p.Unit))
				}
			}
		}
	}
}

func sortedKeys[T any](m map[int32]T) []int32 {
	keys := make([]int32, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}
