package dataset

import (
	"errors"
	"fmt"
	"io/fs"
	"math"
	"slices"
	"strconv"
	"strings"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
)

// frame is one file: its rows bound to units, and the columns that something refers to.
type frame struct {
	at      int // index into Table.Files
	sheet   *sheet.Sheet
	binding *allot.Binding
	unit    int    // whose instances the rows are of
	from    string // dotted key that names the file
	decimal rune

	columns []*values          // numeric columns that are used
	times   map[string][]int32 // by repeated name: index of its time, for each row; -1 unknown
	wheres  map[string][]bool  // by condition: whether the row meets it
	overs   map[string][]int32 // by column of periods: number of its text
	day     []int32            // day of recording, 0 unknown; nil without such a column

	overNames map[string][]string // those texts

	rows []int32 // instance of unit, for each accepted row
	line []int32

	used map[int]bool // columns that something refers to
}

// values is a numeric column.
type values struct {
	name      string
	at        int
	v         []float64      // NaN where there is none
	why       []uint8        // 0 a value, 1 unreadable, else 2 + index into the missing codes
	corrected map[int32]bool // rows
}

// Why there is no value.
const (
	unreadable = iota + 1 // the cell is no number
	impossible            // a number that the kind of response cannot have
	notFinite             // computed, but no number
	absent                // a part of it, from another file, is not there
	firstCode             // a code of missing values
)

func (f *frame) column(name string) *values {
	for _, c := range f.columns {
		if c.name == name {
			return c
		}
	}
	return nil
}

// openFrame opens a file and binds its columns to the units. It is nil where that fails.
func (r *reader) openFrame(path, key string, required bool) *frame {
	for _, f := range r.frames {
		if f.sheet.Path == path {
			return f
		}
	}
	if slices.Contains(r.failed, path) {
		return nil
	}
	pos := r.plan.Protocol.Pos(key)
	file, err := r.files.Read(path, folder.MaxFile)
	switch {
	case errors.Is(err, fs.ErrNotExist) && !required:
		r.faults.Add(diag.Diagnostic{Pos: pos, Key: key, Severity: diag.Note, Code: NoData, Message: fmt.Sprintf("%s does not exist yet", path)})
		return nil
	case errors.Is(err, fs.ErrNotExist):
		r.failed = append(r.failed, path)
		r.faults.Add(diag.Diagnostic{Pos: pos, Key: key, Code: protocol.Unreadable, Message: fmt.Sprintf("there is no file %s in the trial folder", path)})
		return nil
	case err != nil:
		r.failed = append(r.failed, path)
		r.faults.Add(diag.Diagnostic{Pos: pos, Key: key, Code: protocol.Unreadable, Message: err.Error()})
		return nil
	}
	delimiter := "auto"
	if r.data != nil {
		delimiter = r.data.Delimiter
	}
	s, list := sheet.Open(path, file.Data, delimiter)
	r.faults.AddAll(list)
	if s == nil {
		r.failed = append(r.failed, path)
		return nil
	}
	b, bad := r.finder.Bind(allot.Columns(r.plan, s.Headings), s.Headings)
	if bad != nil {
		if key == "roster.file" && bad.Column < 0 {
			return nil // animals that have only their own numbers
		}
		r.failed = append(r.failed, path)
		r.faults.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, max(bad.Column, 0)), Code: allot.UnitColumns, Message: bad.Message, Hint: bad.Hint})
		return nil
	}
	f := &frame{at: len(r.frames), sheet: s, binding: b, unit: b.Unit, from: key, used: map[int]bool{},
		times: map[string][]int32{}, wheres: map[string][]bool{}, overs: map[string][]int32{}, overNames: map[string][]string{}}
	for _, c := range allot.Columns(r.plan, s.Headings) {
		if c >= 0 {
			f.used[c] = true
		}
	}
	r.frames = append(r.frames, f)
	return f
}

// find is the column of one of our names in a frame, or -1.
func (r *reader) find(f *frame, name string) int { return allot.Column(r.plan, f.sheet.Headings, name) }

// need asks for a numeric column of a frame.
func (r *reader) need(f *frame, name string) {
	if f.column(name) == nil {
		at := r.find(f, name)
		f.used[at] = true
		f.columns = append(f.columns, &values{name: name, at: at})
	}
}

// correctionAt is a correction with what it points at.
type correctionAt struct {
	index  int
	column int
	time   string
	hits   int
	met    string // what stood in a cell that did not match
	line   int
	pos    diag.Pos
}

// byUnit finds what was said of units: in the order it was said, for each unit.
type byUnit[T any] []unitIndex[T]

type unitIndex[T any] struct {
	unit int
	of   map[int32][]T
}

func (b *byUnit[T]) add(unit int, instance int32, v T) {
	for i := range *b {
		if (*b)[i].unit == unit {
			(*b)[i].of[instance] = append((*b)[i].of[instance], v)
			return
		}
	}
	*b = append(*b, unitIndex[T]{unit: unit, of: map[int32][]T{instance: {v}}})
}

// each calls do for what was said of the instance of unit u, or of one that holds it.
func (b byUnit[T]) each(plan *layout.Plan, u int, instance int32, do func(T)) {
	for _, x := range b {
		if up := plan.Coarse(u, x.unit); up != nil {
			for _, v := range x.of[up[instance]] {
				do(v)
			}
		}
	}
}

// corrections finds those of a file, by unit and instance.
func (r *reader) corrections(f *frame) byUnit[*correctionAt] {
	var out byUnit[*correctionAt]
	for k := range r.plan.Protocol.Corrections {
		c := &r.plan.Protocol.Corrections[k]
		if c.File != f.sheet.Path {
			continue
		}
		r.corrected[k] = true
		key := fmt.Sprintf("correction[%d]", k)
		unit, instance, ok := r.locate(c.Unit, key+".unit")
		if !ok {
			continue
		}
		if r.plan.Coarse(f.unit, unit) == nil {
			r.fail(key+".unit", BadCorrection, "", "the rows of %s are of %s and tell no single %s", c.File, r.plan.Units[f.unit].Name, r.plan.Units[unit].Name)
			continue
		}
		column := r.find(f, c.Column)
		if column < 0 {
			r.fail(key+".column", BadCorrection, near(c.Column, f.sheet.Headings), "%s has no column %q", c.File, c.Column)
			continue
		}
		if r.plan.Protocol.Unit(c.Column) != nil || r.plan.Protocol.RepeatedNamed(c.Column) != nil {
			r.fail(key+".column", BadCorrection, "correct the file and say so under [[deviation]]", "%q says which row it is, so it cannot be corrected here", c.Column)
			continue
		}
		at := &correctionAt{index: k, column: column, time: c.At}
		out.add(unit, instance, at)
		r.pending = append(r.pending, at)
	}
	return out
}

// locate finds a unit that the protocol names.
func (r *reader) locate(name protocol.UnitName, key string) (unit int, instance int32, ok bool) {
	unit, instance, bad := r.finder.Unit(name)
	if bad != nil {
		if bad.Column >= 0 && bad.Column < len(name) {
			key += "." + name[bad.Column].Unit
		}
		r.fail(key, allot.UnknownUnit, bad.Hint, "%s", bad.Message)
		return -1, -1, false
	}
	return unit, instance, true
}

// near suggests a heading.
func near(name string, headings []string) string {
	if n := diag.Nearest(name, headings); n != "" {
		return fmt.Sprintf("did you mean %q?", n)
	}
	shown := headings
	if len(shown) > 12 {
		shown = append(slices.Clone(shown[:12]), "…")
	}
	return "the headings are " + strings.Join(shown, ", ")
}

// load reads the rows of a frame.
func (r *reader) load(f *frame) {
	s, plan := f.sheet, r.plan
	table := &r.table.Files[f.at]
	treatments := r.treatmentColumns(f)
	r.chooseDecimal(f, treatments)
	table.Decimal = f.decimal

	dates := -1
	if r.data != nil && r.data.DateColumn != "" {
		if dates = r.find(f, r.data.DateColumn); dates >= 0 {
			f.used[dates] = true
			f.day = []int32{}
		}
	}
	missing := []string{"", "NA", "."}
	if r.data != nil {
		missing = r.data.Missing
	}
	var code map[string]uint8
	if len(missing) > 0 {
		code = make(map[string]uint8, len(missing))
		for i, m := range missing {
			code[strings.TrimSpace(m)] = uint8(min(firstCode+i, math.MaxUint8))
		}
	}
	r.missing = missing

	type timeColumn struct {
		at    int
		rep   *protocol.Repeated
		names *allot.Names
		last  string
		time  int32
	}
	var times []*timeColumn
	for i := range plan.Protocol.Repeated {
		rep := &plan.Protocol.Repeated[i]
		if at := r.find(f, rep.Name); at >= 0 {
			f.used[at] = true
			f.times[rep.Name] = []int32{}
			times = append(times, &timeColumn{at: at, rep: rep, names: allot.NewNames(rep.At, rep.Values)})
		}
	}
	type whereColumn struct {
		key   string
		value string
		at    int
	}
	var wheres []whereColumn
	for _, c := range r.conditions {
		if at := r.find(f, c.Column); at >= 0 {
			key := whereKey(c)
			if _, ok := f.wheres[key]; !ok {
				f.used[at] = true
				f.wheres[key] = []bool{}
				wheres = append(wheres, whereColumn{key: key, value: c.Value, at: at})
			}
		}
	}
	type overColumn struct {
		name   string
		at     int
		number map[string]int32
	}
	var overs []overColumn
	for i := range plan.Protocol.Responses {
		name := plan.Protocol.Responses[i].Over
		if name == "" || f.overs[name] != nil {
			continue
		}
		if at := r.find(f, name); at >= 0 {
			f.used[at] = true
			f.overs[name] = []int32{}
			overs = append(overs, overColumn{name: name, at: at, number: map[string]int32{}})
		}
	}
	corrections := r.corrections(f)
	masked := r.maskedColumn(f)

	rows, blank, broken, list := s.Rows(func(row sheet.Row) bool {
		f.binding.Quiet = r.faults.Full(allot.UnknownUnit)
		i, bad := f.binding.Find(row.Cells)
		if bad != nil {
			r.faults.Add(diag.Diagnostic{Pos: s.Pos(row, max(bad.Column, 0)), Code: allot.UnknownUnit, Message: bad.Message, Hint: bad.Hint})
			return true
		}
		n := int32(len(f.rows))
		if int(n)*len(f.columns) > maxCells {
			r.faults.Add(diag.Diagnostic{Pos: s.Pos(row, 0), Code: TooMuch, Message: fmt.Sprintf("%d columns are used of more than %d rows; together at most %d million cells are read", len(f.columns), n, maxCells/1_000_000),
				Hint: "put responses into files of their own"})
			return false
		}
		corrections.each(plan, f.unit, i, func(c *correctionAt) { r.correct(f, c, row, n) })
		f.rows = append(f.rows, i)
		f.line = append(f.line, int32(row.Line))
		for _, t := range times {
			text := row.Cells[t.at].Text
			if n == 0 || text != t.last {
				t.last, t.time = text, t.names.Find(text, f.decimal)
			}
			switch {
			case t.time >= 0:
			case r.faults.Full(UnknownTime):
				r.faults.Add(diag.Diagnostic{Code: UnknownTime})
			default:
				message := fmt.Sprintf("%q is not one of the times of %s", text, t.rep.Name)
				hint := "they are " + strings.Join(t.rep.At[:min(len(t.rep.At), 12)], ", ")
				if w := diag.Nearest(text, t.rep.At); w != "" {
					hint = fmt.Sprintf("did you mean %q?", w)
				}
				r.faults.Add(diag.Diagnostic{Pos: s.Pos(row, t.at), Code: UnknownTime, Message: message, Hint: hint})
			}
			f.times[t.rep.Name] = append(f.times[t.rep.Name], t.time)
		}
		for _, w := range wheres {
			f.wheres[w.key] = append(f.wheres[w.key], sameText(row.Cells[w.at].Text, w.value, f.decimal))
		}
		for _, o := range overs {
			text := row.Cells[o.at].Text
			k, ok := o.number[text]
			if !ok {
				k = int32(len(o.number))
				text = strings.Clone(text)
				o.number[text] = k
				f.overNames[o.name] = append(f.overNames[o.name], text)
			}
			f.overs[o.name] = append(f.overs[o.name], k)
		}
		for _, c := range f.columns {
			text := row.Cells[c.at].Text
			if why, ok := code[text]; ok {
				c.v, c.why = append(c.v, math.NaN()), append(c.why, why)
				continue
			}
			v, ok := sheet.Number(text, f.decimal)
			if !ok {
				c.v, c.why = append(c.v, math.NaN()), append(c.why, unreadable)
				r.faults.Add(diag.Diagnostic{Pos: s.Pos(row, c.at), Code: BadNumber, Message: fmt.Sprintf("%q is not a number", text), Hint: sheet.Hint(text, f.decimal)})
				continue
			}
			c.v, c.why = append(c.v, v), append(c.why, 0)
		}
		if dates >= 0 {
			day, ok := parseDay(row.Cells[dates].Text)
			if _, none := code[row.Cells[dates].Text]; !ok && !none {
				r.faults.Add(diag.Diagnostic{Pos: s.Pos(row, dates), Code: BadDate, Message: fmt.Sprintf("%q is not a date", row.Cells[dates].Text),
					Hint: "write it as 2026-03-31"})
			}
			f.day = append(f.day, day)
		}
		for _, t := range treatments {
			r.compare(f, t, row, i)
		}
		if masked >= 0 {
			r.compareCode(f, masked, row, i)
		}
		return true
	})
	r.faults.AddAll(list)
	table.Rows = rows
	if blank > 0 {
		r.faults.Add(diag.Diagnostic{Pos: diag.Pos{File: s.Path}, Severity: diag.Note, Code: BlankRows, Message: fmt.Sprintf("%d rows hold nothing but delimiters", blank)})
	}
	if rows == 0 {
		r.faults.Add(diag.Diagnostic{Pos: diag.Pos{File: s.Path, Line: 1}, Code: NoRows, Message: "the file has headings but no rows"})
	}
	r.broken = r.broken || broken > 0
	for i, h := range s.Headings {
		if !f.used[i] && h != "" {
			table.Unused = append(table.Unused, h)
		}
	}
}

// correct applies a correction to a cell of a row, whose cells may be written to since
// they are read anew for the next row.
func (r *reader) correct(f *frame, c *correctionAt, row sheet.Row, n int32) {
	p := &r.plan.Protocol.Corrections[c.index]
	if c.time != "" {
		matches := false
		for i := range r.plan.Protocol.Repeated {
			rep := &r.plan.Protocol.Repeated[i]
			if at := r.find(f, rep.Name); at >= 0 {
				matches = matches || sameText(row.Cells[at].Text, c.time, f.decimal)
			}
		}
		if !matches {
			return
		}
	}
	cell := &row.Cells[c.column]
	if cell.Text != strings.TrimSpace(p.Old) {
		c.met, c.line, c.pos = strings.Clone(cell.Text), row.Line, f.sheet.Pos(row, c.column)
		return
	}
	c.hits++
	if c.hits > 1 {
		c.line = row.Line
		return
	}
	cell.Text = strings.TrimSpace(p.New)
	for _, v := range f.columns {
		if v.at == c.column {
			if v.corrected == nil {
				v.corrected = map[int32]bool{}
			}
			v.corrected[n] = true
		}
	}
}

// settle reports the corrections that found no cell or several.
func (r *reader) settle() {
	for _, c := range r.pending {
		p := &r.plan.Protocol.Corrections[c.index]
		key := fmt.Sprintf("correction[%d]", c.index)
		switch {
		case c.hits == 1:
		case c.hits > 1:
			r.fail(key+".old", BadCorrection, "say which row it is by naming a smaller unit, or at", "%d rows of %s hold %q in %s", c.hits, unitText(p.Unit), p.Old, p.Column)
		case c.line == 0:
			r.fail(key+".unit", BadCorrection, "", "%s has no row for %s", p.File, unitText(p.Unit))
		default:
			r.faults.Add(diag.Diagnostic{Pos: r.plan.Protocol.ValuePos(key + ".old"), Key: key + ".old", Code: BadCorrection,
				Message: fmt.Sprintf("%s of %s is %q in %s, not %q", p.Column, unitText(p.Unit), c.met, p.File, p.Old),
				Hint:    "old must be what stands in the file", Related: []diag.Related{{Pos: c.pos, Message: "the cell"}}})
		}
	}
	for k := range r.plan.Protocol.Corrections {
		if !r.corrected[k] {
			r.fail(fmt.Sprintf("correction[%d].file", k), BadCorrection, "", "%q is not a data file of the trial", r.plan.Protocol.Corrections[k].File)
		}
	}
}

func unitText(name protocol.UnitName) string {
	var parts []string
	for _, n := range name {
		parts = append(parts, n.Unit+" "+n.Name)
	}
	return strings.Join(parts, ", ")
}

func whereKey(c protocol.Condition) string { return c.Column + "\x00" + c.Value }

// sameText compares a cell with a value of the protocol, as numbers where both are.
func sameText(cell, value string, decimal rune) bool {
	if cell == value {
		return true
	}
	v, ok := sheet.Number(cell, decimal)
	if !ok {
		return false
	}
	w, ok := sheet.Number(value, '.')
	return ok && v == w
}

// timeIndex finds the time that the protocol names, or -1.
func (r *reader) timeIndex(repeated int, text string) int32 {
	if r.times[repeated] == nil {
		rep := &r.plan.Protocol.Repeated[repeated]
		r.times[repeated] = allot.NewNames(rep.At, rep.Values)
	}
	return r.times[repeated].Find(text, '.')
}

// chooseDecimal finds the decimal mark of a frame from its numeric columns.
func (r *reader) chooseDecimal(f *frame, treatments []*treatmentColumn) {
	f.decimal = '.'
	if r.data != nil && r.data.Decimal != "" && r.data.Decimal != "auto" {
		f.decimal = rune(r.data.Decimal[0])
		return
	}
	var m sheet.Marks
	f.sheet.Rows(func(row sheet.Row) bool {
		for _, c := range f.columns {
			m.Add(row.Cells[c.at].Text)
		}
		for _, t := range treatments {
			if r.plan.Factors[t.factor].Values != nil {
				m.Add(row.Cells[t.at].Text)
			}
		}
		return true
	})
	var ok bool
	if f.decimal, ok = m.Decimal(f.sheet.Delimiter); !ok {
		r.faults.Add(diag.Diagnostic{Pos: diag.Pos{File: f.sheet.Path, Line: 1}, Code: AmbiguousDecimal,
			Message: "the numbers do not tell whether the comma or the point is the decimal mark", Hint: `set decimal = "." or decimal = "," under [data]`})
	}
}

// parseDay reads a date as the number of days since 0000-03-01, so that days sort and
// subtract: 2026-03-31, or 31.03.2026.
func parseDay(text string) (int32, bool) {
	text, _, _ = strings.Cut(text, "T") // a time of day may follow
	text, _, _ = strings.Cut(text, " ")
	var parts []string
	switch {
	case len(text) == 10 && text[4] == '-' && text[7] == '-':
		parts = []string{text[:4], text[5:7], text[8:]}
	default:
		dots := strings.Split(strings.TrimSuffix(text, "."), ".")
		if len(dots) != 3 || len(dots[2]) != 4 {
			return 0, false
		}
		parts = []string{dots[2], dots[1], dots[0]}
	}
	var n [3]int
	for i, p := range parts {
		v, err := strconv.ParseUint(p, 10, 16)
		if err != nil {
			return 0, false
		}
		n[i] = int(v)
	}
	d := protocol.Date{Year: n[0], Month: n[1], Day: n[2]}
	if d.Month < 1 || d.Month > 12 || d.Day < 1 || d.Day > monthDays(d.Year, d.Month) || d.Year < 1 {
		return 0, false
	}
	return days(d), true
}

func monthDays(year, month int) int {
	switch month {
	case 2:
		if year%4 == 0 && (year%100 != 0 || year%400 == 0) {
			return 29
		}
		return 28
	case 4, 6, 9, 11:
		return 30
	}
	return 31
}

// days counts the days from 0000-03-01 to d in the Gregorian calendar.
func days(d protocol.Date) int32 {
	y, m := d.Year, d.Month-3
	if m < 0 {
		y, m = y-1, m+12
	}
	return int32(365*y + y/4 - y/100 + y/400 + (153*m+2)/5 + d.Day - 1)
}
