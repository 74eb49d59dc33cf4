package dataset

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
)

// slots gathers the rows of one response: one slot for each instance of its unit and
// time.
type slots struct {
	n         []int32 // rows with a value
	without   []int32 // rows without one
	leftOut   []int32 // rows excluded by name
	sum       [][]float64
	why       []uint8 // why the only row has no value
	reason    []string
	out       []bool // a row is outside the range
	confirmed []bool
	corrected []bool
	total     []float64
	event     []float64
	day       []int32
	origin    []Origin
	cov       [][]float64
	covN      [][]int32
}

// respond makes a response from the frames that were read.
func (r *reader) respond(j *job) Response {
	plan, p, f := r.plan, j.p, j.base
	times := 1
	var rep *protocol.Repeated
	var at []int32
	if j.repeated >= 0 {
		rep = &plan.Protocol.Repeated[j.repeated]
		times, at = len(rep.At), f.times[rep.Name]
	}
	n := plan.Units[j.unit].N * times
	out := Response{Protocol: p, Unit: j.unit, Instance: make([]int32, n), Value: make([]float64, n), Status: make([]Status, n),
		Reason: make([]string, n), Origin: make([]Origin, n), Confirmed: make([]bool, n), Corrected: make([]bool, n)}
	if rep != nil {
		out.Time = make([]int32, n)
	}
	for s := range n {
		out.Instance[s] = int32(s / times)
		if rep != nil {
			out.Time[s] = int32(s % times)
		}
	}
	ratio := p.Aggregate == "ratio"
	rowValue := r.rowValue(j, ratio)
	if rowValue == nil {
		for s := range n {
			out.Value[s], out.Status[s], out.Reason[s] = math.NaN(), Missing, "it cannot be computed"
		}
		return out
	}
	sums := 1
	if ratio {
		sums = len(j.variables)
	}
	g := newSlots(n, sums, j, f)
	up := plan.Coarse(f.unit, j.unit)
	own := make([]bool, len(j.covariates)) // covariates that stand in the same rows
	for i, cf := range j.covariates {
		own[i] = cf == f
	}
	var masks [][]bool
	for _, c := range p.Where {
		masks = append(masks, f.wheres[whereKey(c)])
	}
	finer := r.finerExclusions(j)
	once := map[[2]int32]int32{} // line by instance and what else identifies a row, where rows are aggregated over periods
	buffer := make([]float64, max(len(j.variables), 1))
	overs := f.overs[p.Over]
rows:
	for k, i := range f.rows {
		for _, m := range masks {
			if !m[k] {
				continue rows
			}
		}
		t := int32(0)
		if at != nil {
			if t = at[k]; t < 0 {
				continue // of an unknown time, which is an error already
			}
		}
		s := int(up[i])*times + int(t)
		line := f.line[k]
		if r.firstOf(j, g, once, overs, k, i, t, s) {
			continue
		}
		if g.origin[s].First == 0 {
			g.origin[s] = Origin{File: int32(f.at), First: line}
		}
		g.origin[s].Last = line
		if f.day != nil && (g.day[s] == 0 || f.day[k] < g.day[s]) {
			g.day[s] = f.day[k]
		}
		if len(finer) > 0 {
			reason := ""
			finer.each(plan, f.unit, i, func(e *exclusion) {
				if e.p.At == "" || rep != nil && r.timeIndex(j.repeated, e.p.At) == t {
					reason = e.reason
				}
			})
			if reason != "" {
				g.leftOut[s]++
				g.reason[s] = reason
				continue
			}
		}
		for _, v := range j.variables {
			if c := r.columnOf(v, f); c != nil && c.corrected[int32(k)] {
				g.corrected[s] = true
			}
		}
		for c, has := range own {
			if has {
				if x := f.column(p.Covariates[c]).v[k]; !math.IsNaN(x) {
					g.cov[c][s] += x
					g.covN[c][s]++
				}
			}
		}
		why := rowValue(k, i, t, buffer)
		if why == 0 {
			why = r.checkRow(j, g, k, i, t, s, buffer)
		}
		if why != 0 {
			g.without[s]++
			g.why[s] = why
			continue
		}
		g.n[s]++
		for v := range g.sum {
			g.sum[v][s] += buffer[v]
		}
	}
	r.finish(j, g, &out, times, rep, ratio)
	return out
}

func newSlots(n, sums int, j *job, f *frame) *slots {
	g := &slots{n: make([]int32, n), without: make([]int32, n), leftOut: make([]int32, n), why: make([]uint8, n),
		reason: make([]string, n), out: make([]bool, n), confirmed: make([]bool, n), corrected: make([]bool, n), origin: make([]Origin, n)}
	for range sums {
		g.sum = append(g.sum, make([]float64, n))
	}
	if j.total != nil {
		g.total = make([]float64, n)
	}
	if j.event != nil {
		g.event = make([]float64, n)
	}
	if f.day != nil {
		g.day = make([]int32, n)
	}
	for range j.covariates {
		g.cov, g.covN = append(g.cov, make([]float64, n)), append(g.covN, make([]int32, n))
	}
	return g
}

// firstOf tells, with an error, whether a row repeats one of the same unit and time.
func (r *reader) firstOf(j *job, g *slots, once map[[2]int32]int32, overs []int32, k int, i, t int32, s int) (again bool) {
	p, f := j.p, j.base
	what, hint := "", ""
	first := int32(0)
	switch {
	case p.Aggregate != "" && p.Over != "":
		times := int32(1)
		if j.repeated >= 0 {
			times = int32(len(r.plan.Protocol.Repeated[j.repeated].At))
		}
		key := [2]int32{i*times + t, overs[k]}
		if first = once[key]; first == 0 {
			once[key] = f.line[k]
			return false
		}
		what, hint = ", "+p.Over+" "+f.overNames[p.Over][overs[k]], "if the rows are of smaller units or animals, name them as a [[unit]]"
	case p.Aggregate != "" && f.unit == j.unit:
		return false // rows of animals that the plan does not name
	case p.Aggregate != "":
		key := [2]int32{i, t}
		if first = once[key]; first == 0 {
			once[key] = f.line[k]
			return false
		}
	default:
		if first = g.origin[s].First; first == 0 {
			return false
		}
		hint = `say what tells them apart: repeated, where, or aggregate with recorded_on`
	}
	if r.faults.Full(DuplicateRow) {
		r.faults.Add(diag.Diagnostic{Code: DuplicateRow})
		return true
	}
	d := diag.Diagnostic{Pos: f.sheet.Locate(int(f.line[k]), 0), Code: DuplicateRow,
		Message: fmt.Sprintf("%s%s stands in line %d already", allot.Describe(r.plan, f.unit, i), what, first), Hint: hint,
		Related: []diag.Related{{Pos: diag.Pos{File: f.sheet.Path, Line: int(first)}, Message: "the first row"}}}
	if j.repeated >= 0 {
		d.Message = fmt.Sprintf("%s, %s %s%s stands in line %d already", allot.Describe(r.plan, f.unit, i), p.Repeated, r.plan.Protocol.Repeated[j.repeated].At[t], what, first)
	}
	if r.duplicates[d.Pos] {
		return true // said for another response of the same file
	}
	r.duplicates[d.Pos] = true
	r.faults.Add(d)
	return true
}

// columnOf is the column of a variable, if it stands in frame f.
func (r *reader) columnOf(v variable, f *frame) *values {
	if v.frame != f {
		return nil
	}
	return f.column(v.name)
}

// rowValue makes the function that puts the value of a row into buffer[0], or, for a
// ratio, the row's part of every variable's sum into buffer. It returns 0, or why there
// is no value. It is nil, with a message, where values cannot be had.
func (r *reader) rowValue(j *job, ratio bool) func(k int, i, t int32, buffer []float64) uint8 {
	f, plan := j.base, r.plan
	var columns []*values // of this frame, nil for others
	var others [][]float64
	times := int32(1)
	if j.repeated >= 0 {
		times = int32(len(plan.Protocol.Repeated[j.repeated].At))
	}
	for _, v := range j.variables {
		switch {
		case v.frame == f:
			columns, others = append(columns, f.column(v.name)), append(others, nil)
			continue
		case ratio:
			others = append(others, nil) // added when the sums are complete
		case v.frame == nil:
			if j.base.unit == j.unit && j.p.Aggregate != "" && r.severalRows(f) {
				r.fail(j.key+".compute", BadCompute, `use aggregate = "ratio", which computes from the sums of each unit`,
					"%s is a number of each %s, which has several rows in %s", v.name, plan.Units[f.unit].Name, f.sheet.Path)
				return nil
			}
			a := r.animals(v.animal, f.unit, j.key+".compute")
			if a == nil {
				return nil
			}
			others = append(others, spread(a, times))
		default:
			o, ok := r.gather(j, v, f.unit, times, false)
			if !ok {
				return nil
			}
			others = append(others, o)
		}
		columns = append(columns, nil)
	}
	if j.expression == nil {
		c := columns[0]
		if c == nil {
			panic("dataset: a response without its column")
		}
		return func(k int, _, _ int32, buffer []float64) uint8 {
			buffer[0] = c.v[k]
			return c.why[k]
		}
	}
	if ratio {
		return func(k int, _, _ int32, buffer []float64) uint8 {
			for v, c := range columns {
				if c == nil {
					buffer[v] = 0
					continue
				}
				if c.why[k] != 0 {
					return c.why[k]
				}
				buffer[v] = c.v[k]
			}
			return 0
		}
	}
	values := make([]float64, len(columns))
	return func(k int, i, t int32, buffer []float64) uint8 {
		for v, c := range columns {
			if c != nil {
				if c.why[k] != 0 {
					return c.why[k]
				}
				values[v] = c.v[k]
				continue
			}
			if values[v] = others[v][i*times+t]; math.IsNaN(values[v]) {
				return absent
			}
		}
		buffer[0] = j.expression.eval(values)
		if math.IsNaN(buffer[0]) || math.IsInf(buffer[0], 0) {
			r.notComputed(j, diag.Pos{File: f.sheet.Path, Line: int(f.line[k])}, allot.Describe(plan, f.unit, i), values)
			return notFinite
		}
		return 0
	}
}

// spread repeats each value for every time.
func spread(a []float64, times int32) []float64 {
	if times == 1 {
		return a
	}
	out := make([]float64, 0, len(a)*int(times))
	for _, v := range a {
		for range times {
			out = append(out, v)
		}
	}
	return out
}

// severalRows tells whether a unit has several rows in a frame.
func (r *reader) severalRows(f *frame) bool {
	seen := make([]bool, r.plan.Units[f.unit].N)
	if len(f.times) > 0 {
		return false // told apart by time
	}
	for _, i := range f.rows {
		if seen[i] {
			return true
		}
		seen[i] = true
	}
	return false
}

// notComputed reports a computed value that is no number.
func (r *reader) notComputed(j *job, pos diag.Pos, unit string, values []float64) {
	with := ""
	for i, v := range j.variables {
		if i > 0 {
			with += ", "
		}
		with += fmt.Sprintf("%s = %s", v.name, readable(values[i]))
	}
	r.faults.Add(diag.Diagnostic{Pos: pos, Code: BadCompute, Message: fmt.Sprintf("%s cannot be computed for %s with %s", j.p.Name, unit, with),
		Hint:    "a division by zero, or a logarithm or root of a number that has none",
		Related: []diag.Related{{Pos: r.plan.Protocol.Pos(j.key + ".compute"), Message: "the expression"}}})
}

// gather brings a variable of another frame to the instances and times of a unit: the
// value of the instance, or of the one that holds it; of smaller units and further rows
// the sum, where sums are asked for.
func (r *reader) gather(j *job, v variable, unit int, times int32, sums bool) ([]float64, bool) {
	return r.collect(j, v.frame, v.name, unit, times, sums, false, j.key+".compute")
}

// collect is gather for compute and covariates; means asks for the mean of several rows.
func (r *reader) collect(j *job, f *frame, name string, unit int, times int32, sums, means bool, key string) ([]float64, bool) {
	plan, c := r.plan, f.column(name)
	var at []int32
	if j.repeated >= 0 {
		at = f.times[plan.Protocol.Repeated[j.repeated].Name]
	}
	n := int32(plan.Units[unit].N)
	if down := plan.Coarse(unit, f.unit); down != nil {
		own := make([]float64, int32(plan.Units[f.unit].N)*times)
		count := make([]int32, len(own))
		for i := range own {
			own[i] = math.NaN()
		}
		for k, i := range f.rows {
			lo, hi := i*times, (i+1)*times
			if at != nil {
				if at[k] < 0 {
					continue
				}
				lo, hi = i*times+at[k], i*times+at[k]+1
			}
			for s := lo; s < hi; s++ {
				if count[s]++; count[s] > 1 && !sums && !means {
					r.fail(key, DuplicateRow, "", "%s has several rows in %s, so %s is not told", allot.Describe(plan, f.unit, i), f.sheet.Path, name)
					return nil, false
				}
				switch x := c.v[k]; {
				case count[s] == 1:
					own[s] = x
				case means && math.IsNaN(x):
					count[s]--
				case means && math.IsNaN(own[s]):
					own[s], count[s] = x, 1
				default:
					own[s] += x
				}
			}
		}
		if means {
			for s, k := range count {
				if k > 1 {
					own[s] /= float64(k)
				}
			}
		}
		if f.unit == unit {
			return own, true
		}
		out := make([]float64, 0, n*times)
		for _, i := range down {
			out = append(out, own[i*times:(i+1)*times]...)
		}
		return out, true
	}
	up := plan.Coarse(f.unit, unit)
	if up == nil {
		r.fail(key, WrongLevel, "", "%s stands in %s, whose rows are of %s and tell nothing of each %s", name, f.sheet.Path, plan.Units[f.unit].Name, plan.Units[unit].Name)
		return nil, false
	}
	if !sums && !means {
		r.fail(key, WrongLevel, `use aggregate = "ratio", which computes from sums`, "%s stands in %s, whose rows are of %s, several for each %s", name, f.sheet.Path, plan.Units[f.unit].Name, plan.Units[unit].Name)
		return nil, false
	}
	out, count := make([]float64, n*times), make([]int32, n*times)
	for k, i := range f.rows {
		lo, hi := up[i]*times, (up[i]+1)*times
		if at != nil {
			if at[k] < 0 {
				continue
			}
			lo, hi = up[i]*times+at[k], up[i]*times+at[k]+1
		}
		for s := lo; s < hi; s++ {
			if x := c.v[k]; sums || !math.IsNaN(x) {
				out[s] += x
				count[s]++
			}
		}
	}
	for s := range out {
		switch {
		case count[s] == 0:
			out[s] = math.NaN()
		case means:
			out[s] /= float64(count[s])
		}
	}
	return out, true
}

// finerExclusions are those of units inside the unit of a response, which take rows out
// before they are aggregated.
func (r *reader) finerExclusions(j *job) byUnit[*exclusion] {
	var out byUnit[*exclusion]
	for _, x := range r.exclusions {
		if r.plan.Coarse(j.unit, x.unit) != nil || r.plan.Coarse(j.base.unit, x.unit) == nil {
			continue
		}
		for _, i := range sortedKeys(x.of) {
			for _, e := range x.of[i] {
				if e.concerns(j.p.Name) {
					out.add(x.unit, i, e)
				}
			}
		}
	}
	return out
}

// checkRow looks at the value of a row: whether its kind of response can have it, and,
// where rows are averaged, whether it lies in the range.
func (r *reader) checkRow(j *job, g *slots, k int, i, t int32, s int, buffer []float64) uint8 {
	p, f := j.p, j.base
	bad := func(column, hint, format string, args ...any) uint8 {
		d := diag.Diagnostic{Code: BadKind}
		if !r.faults.Full(BadKind) {
			d.Pos, d.Message, d.Hint = r.place(f, f.line[k], column), fmt.Sprintf(format, args...), hint
		}
		r.faults.Add(d)
		return impossible
	}
	v := buffer[0]
	if p.Aggregate != "ratio" {
		if message, hint := kindFault(p, v); message != "" {
			return bad(p.Name, hint, "%s", message)
		}
	}
	if g.total != nil {
		c := f.column(p.Total)
		if c.why[k] != 0 {
			return c.why[k]
		}
		if n := c.v[k]; n < 0 || n != math.Trunc(n) || v > n {
			return bad(p.Name, fmt.Sprintf("%s is the number out of which %s is counted", p.Total, p.Name), "%s is %v of %v", p.Name, v, n)
		}
		g.total[s] += c.v[k]
	}
	if g.event != nil {
		c := f.column(p.Event)
		if c.why[k] != 0 {
			return c.why[k]
		}
		if e := c.v[k]; e != 0 && e != 1 {
			return bad(p.Event, "1: the event was seen; 0: it was not seen until that time", "%s is %v, not 0 or 1", p.Event, e)
		}
		g.event[s] += c.v[k]
	}
	if p.Aggregate == "mean" && (p.Range != nil || len(r.confirmed) > 0) {
		stands := r.confirm(j, i, t, v, g, s)
		if p.Range != nil && (v < p.Range[0] || v > p.Range[1]) && !stands {
			g.out[s] = true
			r.outside(j, f.line[k], allot.Describe(r.plan, f.unit, i), v)
		}
	}
	return 0
}

// kindFault says why a kind of response cannot have a value, or nothing.
func kindFault(p *protocol.Response, v float64) (message, hint string) {
	whole := v == math.Trunc(v)
	switch {
	case p.Kind == "count" && (v < 0 || !whole):
		return fmt.Sprintf("%s is a count, which %v is not", p.Name, v), "write a whole number from 0"
	case p.Kind == "binary" && v != 0 && v != 1:
		return fmt.Sprintf("%s is %v, not 0 or 1", p.Name, v), "write 1 or 0"
	case p.Kind == "proportion" && p.Total != "" && (v < 0 || !whole):
		return fmt.Sprintf("%s counts out of %s, but is %v", p.Name, p.Total, v), "write a whole number from 0"
	case p.Kind == "time to event" && v < 0:
		return fmt.Sprintf("%s is a time, which %v is not", p.Name, v), "count from the start of the trial"
	}
	return "", ""
}

// place is where the cell of a name stands in a row; without such a cell, the row.
func (r *reader) place(f *frame, line int32, name string) diag.Pos {
	if at := r.find(f, name); at >= 0 {
		return f.sheet.Locate(int(line), at)
	}
	return diag.Pos{File: f.sheet.Path, Line: int(line)}
}

func (r *reader) outside(j *job, line int32, unit string, v float64) {
	if r.faults.Full(OutsideRange) {
		r.faults.Add(diag.Diagnostic{Code: OutsideRange})
		return
	}
	r.faults.Add(diag.Diagnostic{Pos: r.place(j.base, line, j.p.Name), Code: OutsideRange, Message: fmt.Sprintf("%s of %s is %s, outside %v to %v", j.p.Name, unit, readable(v, j.p.Range[0], j.p.Range[1]), j.p.Range[0], j.p.Range[1]),
		Hint:    "correct it under [[correction]], or confirm it under [[data.confirmed]] if it was checked and stands",
		Related: []diag.Related{{Pos: r.plan.Protocol.Pos(j.key + ".range"), Message: "the range"}}})
}

// readable is a number without what arithmetic leaves in its last digits, unless it would
// then stand elsewhere beside one of the others.
func readable(v float64, beside ...float64) string {
	x, err := strconv.ParseFloat(strconv.FormatFloat(v, 'g', 10, 64), 64)
	if err != nil || slices.ContainsFunc(beside, func(b float64) bool { return cmp.Compare(x, b) != cmp.Compare(v, b) }) {
		return fmt.Sprint(v)
	}
	return fmt.Sprint(x)
}

// confirm tells whether a person confirmed the value of a row. i is an instance of the
// unit of the base frame or, where no rows are averaged, of the response.
func (r *reader) confirm(j *job, i, t int32, v float64, g *slots, s int) bool {
	unit := j.unit
	if j.p.Aggregate == "mean" {
		unit = j.base.unit
	}
	ok := false
	for _, x := range r.confirmed {
		if x.unit != unit {
			continue
		}
		for _, c := range x.of[i] {
			p := &r.data.Confirmed[c.index]
			if p.Response != j.p.Name || p.At != "" && (j.repeated < 0 || r.timeIndex(j.repeated, p.At) != t) {
				continue
			}
			slack := 1e-9 * math.Abs(v)
			if d := j.p.Decimals; d != nil && j.p.Compute != "" {
				slack = max(slack, 0.5*math.Pow10(-*d)*(1+1e-9))
			}
			if math.Abs(v-p.Value) <= slack {
				c.met, ok = true, true
				g.confirmed[s] = true
			} else if !c.met {
				c.seen, c.value = true, v
			}
		}
	}
	return ok
}

// finish turns the gathered rows into values with their status.
func (r *reader) finish(j *job, g *slots, out *Response, times int, rep *protocol.Repeated, ratio bool) {
	plan, p, f := r.plan, j.p, j.base
	n := len(out.Value)
	values := make([][]float64, len(j.variables)) // for a ratio, what stands in other frames
	if ratio {
		for k, v := range j.variables {
			switch {
			case v.frame == f:
			case v.frame == nil:
				if a := r.animals(v.animal, j.unit, j.key+".compute"); a != nil {
					values[k] = spread(a, int32(times))
				}
			default:
				values[k], _ = r.gather(j, v, j.unit, int32(times), true)
			}
		}
	}
	for c, cf := range j.covariates {
		if cf == f {
			continue
		}
		if x, ok := r.collect(j, cf, p.Covariates[c], j.unit, int32(times), false, true, fmt.Sprintf("%s.covariates[%d]", j.key, c)); ok {
			copy(g.cov[c], x)
			for s := range x {
				g.covN[c][s] = 1
				if math.IsNaN(x[s]) {
					g.covN[c][s] = 0
				}
			}
		}
	}
	if p.Aggregate != "" {
		out.Animals = make([]int32, n)
	}
	noRow := "no row in " + f.sheet.Path
	buffer := make([]float64, len(j.variables))
	for s := range n {
		i := out.Instance[s]
		out.Origin[s], out.Corrected[s] = g.origin[s], g.corrected[s]
		v, reason := math.NaN(), ""
		switch {
		case g.n[s] == 0 && g.without[s] == 0 && g.leftOut[s] > 0:
			out.Status[s], reason = Excluded, g.reason[s]
		case g.n[s] == 0 && g.without[s] == 0:
			out.Status[s], reason = Missing, noRow
		case g.n[s] == 0 && g.without[s] == 1:
			out.Status[s], reason = Missing, r.whyText(g.why[s], f)
		case g.n[s] == 0:
			out.Status[s], reason = Missing, fmt.Sprintf("no value in its %d rows of %s", g.without[s], f.sheet.Path)
		case p.Aggregate == "sum" && g.without[s] > 0:
			out.Status[s], reason = Missing, fmt.Sprintf("%d of its %d rows of %s without a value, so there is no sum", g.without[s], g.n[s]+g.without[s], f.sheet.Path)
		case ratio:
			whole := true
			for k := range buffer {
				buffer[k] = g.sum[k][s]
				if j.variables[k].frame != f {
					if values[k] == nil {
						whole = false
						continue
					}
					buffer[k] = values[k][s]
				}
				whole = whole && !math.IsNaN(buffer[k])
			}
			if !whole {
				out.Status[s], reason = Missing, "a part of it has no value"
				break
			}
			if v = j.expression.eval(buffer); math.IsNaN(v) || math.IsInf(v, 0) {
				r.notComputed(j, diag.Pos{File: f.sheet.Path, Line: int(g.origin[s].First)}, allot.Describe(plan, j.unit, i), buffer)
				v = math.NaN()
				out.Status[s], reason = Missing, "it cannot be computed"
			} else if message, hint := kindFault(p, v); message != "" {
				r.faults.Add(diag.Diagnostic{Pos: diag.Pos{File: f.sheet.Path, Line: int(g.origin[s].First)}, Code: BadKind, Message: message, Hint: hint})
			}
		case p.Aggregate == "mean":
			v = g.sum[0][s] / float64(g.n[s])
		default:
			v = g.sum[0][s]
		}
		out.Value[s] = v
		if out.Animals != nil {
			out.Animals[s] = g.n[s]
		}
		out.Reason[s] = reason
		if math.IsNaN(v) {
			continue
		}
		t := int32(0)
		if rep != nil {
			t = out.Time[s]
		}
		if p.Aggregate != "mean" {
			stands := r.confirm(j, i, t, v, g, s)
			if p.Range != nil && (v < p.Range[0] || v > p.Range[1]) && !stands {
				g.out[s] = true
				r.outside(j, g.origin[s].First, allot.Describe(plan, j.unit, i), v)
			}
		}
		if g.out[s] {
			out.Status[s], out.Reason[s] = OutOfRange, outsideReason
		}
	}
	out.Confirmed = g.confirmed
	for c, name := range p.Covariates {
		x := make([]float64, n)
		reason := name + " is missing"
		for s := range n {
			x[s] = math.NaN()
			if g.covN[c][s] > 0 {
				x[s] = g.cov[c][s] / float64(g.covN[c][s])
			} else if out.Status[s] == Used {
				out.Status[s], out.Reason[s] = CovariateMissing, reason
			}
		}
		out.Covariates = append(out.Covariates, x)
	}
	out.Total, out.Event = g.total, g.event
	for s := range n {
		r.exclusions.each(plan, j.unit, out.Instance[s], func(e *exclusion) {
			if e.concerns(p.Name) && (e.p.At == "" || rep != nil && r.timeIndex(j.repeated, e.p.At) == out.Time[s]) {
				out.Status[s], out.Reason[s] = Excluded, e.reason
			}
		})
	}
	if g.day != nil {
		out.Recorded = ranks(g.day)
	}
}

const outsideReason = "outside the stated range and not confirmed"

// whyText says why a row has no value.
func (r *reader) whyText(why uint8, f *frame) string {
	switch {
	case why == unreadable:
		return "not readable"
	case why == impossible:
		return "not a value of its kind"
	case why == notFinite:
		return "it cannot be computed"
	case why == absent || int(why)-firstCode >= len(r.missing):
		return "a part of it has no value"
	}
	if code := r.missing[why-firstCode]; code != "" {
		return fmt.Sprintf("%q in %s", code, f.sheet.Path)
	}
	return "empty in " + f.sheet.Path
}

// ranks numbers the different days from 0 in order; -1 for day 0.
func ranks(day []int32) []int32 {
	sorted := slices.Clone(day)
	slices.Sort(sorted)
	sorted = slices.Compact(sorted)
	if len(sorted) > 0 && sorted[0] == 0 {
		sorted = sorted[1:]
	}
	out := make([]int32, len(day))
	for i, d := range day {
		out[i] = -1
		if k, ok := slices.BinarySearch(sorted, d); ok && d != 0 {
			out[i] = int32(k)
		}
	}
	return out
}
