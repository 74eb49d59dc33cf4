package allot

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strconv"
	"strings"

	"github.com/BurntSushi/toml"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
)

// The files of the record.
const (
	File       = "allotment.csv"
	RecordFile = "allotment.toml"
)

// Bytes is the allotment as allotment.csv: one row for each instance of RowUnit in
// field or barn order.
func (a *Allotment) Bytes() []byte {
	plan := a.Plan
	row := RowUnit(plan)
	var head []string
	for _, n := range UnitName(plan, row, 0) {
		head = append(head, n.Unit)
	}
	head = append(head, "order")
	if a.Codes != nil {
		head = append(head, "code")
	}
	var levels [][]int32
	var factors []int
	for f := range plan.Factors {
		if plan.Factors[f].Unit < 0 {
			continue
		}
		if at := a.LevelAt(f, row); at != nil && !slices.Contains(at, -1) {
			head, levels, factors = append(head, plan.Factors[f].Name), append(levels, at), append(factors, f)
		}
	}
	rows := identity(plan.Units[row].N)
	slices.SortStableFunc(rows, func(i, j int32) int { return a.Order[i] - a.Order[j] })
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	write := func(record []string) {
		if err := w.Write(record); err != nil {
			panic("allot: a buffer refused a row")
		}
	}
	write(head)
	for _, i := range rows {
		var record []string
		for _, n := range UnitName(plan, row, i) {
			record = append(record, n.Name)
		}
		record = append(record, strconv.Itoa(a.Order[i]))
		if a.Codes != nil {
			record = append(record, a.Codes[i])
		}
		for k, f := range factors {
			record = append(record, plan.Factors[f].Levels[levels[k][i]])
		}
		write(record)
	}
	w.Flush()
	return b.Bytes()
}

// Seed is the seed text of the next draw: the given one, or, where an earlier draw of
// the record used it, that with the number of the draw, so that no draw repeats another.
func Seed(record []Draw, seed string) string {
	used := func(s string) bool { return slices.ContainsFunc(record, func(d Draw) bool { return d.Seed == s }) }
	next := seed
	for n := len(record) + 1; used(next); n++ {
		next = fmt.Sprintf("%s, draw %d", seed, n)
	}
	return next
}

// Changes are the writes that record a draw: the new allotment.csv, the entry at the
// end of allotment.toml, and, from the second draw on, the old allotment under its
// number. d's Number, Generator, Start, Candidates, Rejected, Allotment and, where it is
// empty, Scheme are set here. files is the folder as it is. It is an error to replace an allotment that this program did not
// draw, or that was changed since, or without d.Why.
func Changes(files *folder.Folder, a *Allotment, d Draw) ([]folder.Change, error) {
	text := a.Bytes()
	old, err := files.Read(File, folder.MaxFile)
	first := isAbsent(err)
	if err != nil && !first {
		return nil, err
	}
	record, err := files.Read(RecordFile, folder.MaxFile)
	if err != nil && !isAbsent(err) {
		return nil, err
	}
	draws, list := parseRecord(record)
	if list.HasErrors() {
		return nil, fmt.Errorf("%s: %s", list[0].Pos, list[0].Message)
	}
	d.Number, d.Generator, d.Allotment = len(draws)+1, GeneratorText, folder.Hash(text)
	d.Start, d.Candidates, d.Rejected = a.made.Start, max(a.made.Candidates, 1), a.made.Rejected
	if d.Scheme == "" {
		d.Scheme = a.made.Scheme
	}
	var changes []folder.Change
	switch {
	case first && len(draws) > 0:
		return nil, fmt.Errorf("%s: missing, though %s records its draw; restore it", File, RecordFile)
	case !first && len(draws) == 0:
		return nil, fmt.Errorf("%s: allotted elsewhere, and never overwritten; remove or rename it to draw here", File)
	case !first && draws[len(draws)-1].Allotment != old.SHA256:
		return nil, fmt.Errorf("%s: changed after it was drawn; restore it before it is replaced", File)
	case !first && strings.TrimSpace(d.Why) == "":
		return nil, errors.New("a second draw needs the reason why the first is replaced")
	}
	if !first {
		changes = append(changes, folder.Change{Path: fmt.Sprintf("allotment.%d.csv", len(draws)), How: folder.Create, Data: old.Data})
		changes = append(changes, folder.Change{Path: File, How: folder.Replace, Data: text, Old: old.SHA256})
	} else {
		changes = append(changes, folder.Change{Path: File, How: folder.Create, Data: text})
	}
	animals, err := files.Read(AnimalsFile, folder.MaxFile)
	absent := isAbsent(err)
	switch {
	case err != nil && !absent:
		return nil, err
	case a.Animals == nil:
	case absent:
		changes = append(changes, folder.Change{Path: AnimalsFile, How: folder.Create, Data: a.Animals})
	case len(draws) == 0 || draws[len(draws)-1].Animals != animals.SHA256:
		return nil, fmt.Errorf("%s: not of the draw that is replaced; remove or rename it to draw here", AnimalsFile)
	default:
		changes = append(changes, folder.Change{Path: fmt.Sprintf("animals.%d.csv", len(draws)), How: folder.Create, Data: animals.Data},
			folder.Change{Path: AnimalsFile, How: folder.Replace, Data: a.Animals, Old: animals.SHA256})
	}
	if a.Animals != nil {
		d.Animals = folder.Hash(a.Animals)
	}
	return append(changes, folder.Change{Path: RecordFile, How: folder.Append, Data: d.Bytes(), Old: record.SHA256}), nil
}

// Bytes is the entry as it stands in allotment.toml.
func (d Draw) Bytes() []byte {
	var b bytes.Buffer
	if d.Number > 1 {
		b.WriteByte('\n')
	}
	b.WriteString("[[draw]]\n")
	text := func(key, value string) {
		if value != "" {
			fmt.Fprintf(&b, "%s = %s\n", key, quote(value))
		}
	}
	fmt.Fprintf(&b, "number = %d\n", d.Number)
	text("scheme", d.Scheme)
	text("start", d.Start)
	text("generator", d.Generator)
	fmt.Fprintf(&b, "seed = %s\n", quote(d.Seed))
	fmt.Fprintf(&b, "candidates = %d\nrejected = %d\n", d.Candidates, d.Rejected)
	text("by", d.By)
	if d.On != (protocol.Date{}) {
		fmt.Fprintf(&b, "on = %04d-%02d-%02d\n", d.On.Year, d.On.Month, d.On.Day)
	}
	text("plan", d.Plan)
	text("roster", d.Roster)
	text("allotment", d.Allotment)
	text("animals", d.Animals)
	text("why", d.Why)
	return b.Bytes()
}

// quote writes a TOML basic string.
func quote(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range strings.ToValidUTF8(s, "\uFFFD") {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r == '\n':
			b.WriteString(`\n`)
		case r == '\t':
			b.WriteString(`\t`)
		case r < 0x20 || r == 0x7F:
			fmt.Fprintf(&b, `\u%04X`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

// entry is a draw as TOML spells it.
type entry struct {
	Number     int    `toml:"number"`
	Scheme     string `toml:"scheme"`
	Start      string `toml:"start"`
	Generator  string `toml:"generator"`
	Seed       string `toml:"seed"`
	Candidates int    `toml:"candidates"`
	Rejected   int    `toml:"rejected"`
	By         string `toml:"by"`
	On         any    `toml:"on"`
	Plan       string `toml:"plan"`
	Roster     string `toml:"roster"`
	Allotment  string `toml:"allotment"`
	Animals    string `toml:"animals"`
	Why        string `toml:"why"`
}

// parseRecord reads allotment.toml. A file without data gives no draws.
func parseRecord(file folder.File) ([]Draw, diag.List) {
	var list diag.List
	add := func(line int, format string, args ...any) {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: RecordFile, Line: line, Col: 1}, Code: BadRecord, Message: fmt.Sprintf(format, args...),
			Hint: "the record grows by appending only; restore what stood there"})
	}
	var record struct {
		Draw []entry `toml:"draw"`
	}
	meta, err := toml.Decode(string(file.Data), &record)
	if err != nil {
		line := 1
		message := err.Error()
		var parse toml.ParseError
		if errors.As(err, &parse) {
			line, message = max(parse.Position.Line, 1), parse.Message
		}
		if message == "" {
			message = "not a record of draws"
		}
		add(line, "%s", strings.ReplaceAll(message, "\n", " "))
		return nil, list
	}
	lines := headLines(file.Data)
	at := func(k int) int {
		if k < len(lines) {
			return lines[k]
		}
		return 1
	}
	for _, k := range meta.Undecoded() {
		add(1, "unknown key %q", k.String())
	}
	var draws []Draw
	for k, e := range record.Draw {
		d := Draw{Number: e.Number, Scheme: e.Scheme, Start: e.Start, Generator: e.Generator, Seed: e.Seed, Candidates: e.Candidates, Rejected: e.Rejected,
			By: e.By, Plan: e.Plan, Roster: e.Roster, Allotment: e.Allotment, Animals: e.Animals, Why: e.Why}
		if t, ok := e.On.(interface{ Format(string) string }); ok {
			var ok bool
			if d.On, ok = date(t.Format("2006-01-02")); !ok {
				add(at(k), "the day of draw %d is out of range", e.Number)
			}
		} else if e.On != nil {
			add(at(k), "the day of draw %d is not a date", e.Number)
		}
		switch {
		case e.Number != k+1:
			add(at(k), "draw %d stands where draw %d should", e.Number, k+1)
		case e.Allotment == "":
			add(at(k), "draw %d has no fingerprint of its allotment", e.Number)
		case k > 0 && e.Why == "":
			add(at(k), "draw %d does not say why it replaced draw %d", e.Number, k)
		}
		draws = append(draws, d)
	}
	return draws, list
}

func date(s string) (protocol.Date, bool) {
	var d protocol.Date
	n, err := fmt.Sscanf(s, "%d-%d-%d", &d.Year, &d.Month, &d.Day)
	return d, err == nil && n == 3 && d.Year >= 0 && d.Year <= 9999
}

// headLines finds the lines of the [[draw]] heads.
func headLines(data []byte) []int {
	var lines []int
	for i, l := range bytes.Split(data, []byte("\n")) {
		if l = bytes.TrimSpace(l); bytes.HasPrefix(l, []byte("[[")) && bytes.Contains(l, []byte("draw")) {
			lines = append(lines, i+1)
		}
	}
	return lines
}

// Read reads the allotment of a folder: allotment.csv with the record of
// allotment.toml, or as brought from elsewhere. It is nil without an allotment, and
// where the list has an error it may lack levels.
func Read(files *folder.Folder, plan *layout.Plan) (*Allotment, diag.List) {
	var list diag.List
	read := func(name string) (folder.File, bool) {
		file, err := files.Read(name, folder.MaxFile)
		if err != nil && !isAbsent(err) {
			list.Add(diag.Diagnostic{Pos: diag.Pos{File: name}, Code: protocol.Unreadable, Message: err.Error()})
		}
		return file, err == nil
	}
	file, found := read(File)
	record, recorded := read(RecordFile)
	switch {
	case list.HasErrors():
		return nil, list
	case !found && !recorded:
		return nil, nil
	case !found:
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: RecordFile, Line: 1, Col: 1}, Code: AllotmentChanged,
			Message: "there is a record of the draw, but no " + File, Hint: "restore " + File})
		return nil, list
	}
	draws, more := parseRecord(record)
	list = append(list, more...)
	a, more := parse(file, plan)
	list = append(list, more...)
	if a == nil {
		return nil, list
	}
	a.Draws = draws
	method := plan.Protocol.Randomization.Method
	switch {
	case !recorded:
		a.Origin = Elsewhere
		if method == "" {
			list.Add(diag.Diagnostic{Pos: diag.Pos{File: File, Line: 1, Col: 1}, Severity: diag.Warning, Code: NoAllotmentRecord,
				Message: "the allotment has no record of a draw", Hint: "say under [randomization] method how it was drawn"})
		}
	case len(draws) > 0:
		last := draws[len(draws)-1]
		if last.Allotment != "" && last.Allotment != file.SHA256 {
			list.Add(diag.Diagnostic{Pos: diag.Pos{File: File, Line: 1, Col: 1}, Code: AllotmentChanged,
				Message: File + " was changed after it was drawn", Hint: "restore the file that was drawn; what was done otherwise is an event of kind \"wrong treatment\"",
				Related: []diag.Related{{Pos: diag.Pos{File: RecordFile, Line: lastOf(headLines(record.Data)), Col: 1}, Message: "its fingerprint is in this draw"}}})
		}
		if last.Animals != "" {
			if animals, ok := read(AnimalsFile); !ok || animals.SHA256 != last.Animals {
				list.Add(diag.Diagnostic{Pos: diag.Pos{File: AnimalsFile, Line: 1, Col: 1}, Code: AllotmentChanged,
					Message: AnimalsFile + " is not as it was when it was drawn", Hint: "restore the file that was drawn; an animal that was moved is an event of kind \"move\""})
			}
		}
		if method != "" {
			list.Add(diag.Diagnostic{Pos: plan.Protocol.Pos("randomization.method"), Key: "randomization.method", Severity: diag.Warning, Code: NoAllotmentRecord,
				Message: "method says that the allotment was drawn elsewhere, but there is a record of a draw", Hint: "leave method out"})
		}
	}
	return a, list
}

func lastOf(lines []int) int {
	if len(lines) == 0 {
		return 1
	}
	return lines[len(lines)-1]
}

// parse reads allotment.csv.
func parse(file folder.File, plan *layout.Plan) (*Allotment, diag.List) {
	s, said := sheet.Open(file.Path, file.Data, "auto")
	if s == nil {
		return nil, said
	}
	var list sheet.Faults
	list.AddAll(said)
	b, bad := NewFinder(plan).Bind(Columns(plan, s.Headings), s.Headings)
	if bad != nil {
		list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, max(bad.Column, 0)), Code: UnitColumns, Message: bad.Message, Hint: bad.Hint})
		return nil, list.List()
	}
	row := RowUnit(plan)
	rows := plan.Coarse(b.Unit, row)
	if rows == nil {
		list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, 0), Code: UnitColumns,
			Message: fmt.Sprintf("the rows are of %s, but treatments are allotted to each %s", plan.Units[b.Unit].Name, plan.Units[row].Name),
			Hint:    "add the columns that name each " + plan.Units[row].Name})
		return nil, list.List()
	}
	var columns []column
	for f := range plan.Factors {
		of := &plan.Factors[f]
		if of.Unit < 0 {
			continue
		}
		c := Column(plan, s.Headings, of.Name)
		switch {
		case c >= 0:
			columns = append(columns, column{factor: f, at: c})
		case !of.Carried:
			list.Add(diag.Diagnostic{Pos: s.Pos(s.Heading, len(s.Headings)-1), Code: NoTreatmentColumn,
				Message: fmt.Sprintf("no column %q tells what each %s received", of.Name, plan.Units[of.Unit].Name), Hint: nearHeading(of.Name, s.Headings)})
		}
	}
	if list.HasErrors() {
		return nil, list.List()
	}
	a := &Allotment{Plan: plan, Levels: make([][]int32, len(plan.Factors)), Order: make([]int, plan.Units[row].N)}
	order, code := Column(plan, s.Headings, "order"), Column(plan, s.Headings, "code")
	if code >= 0 {
		a.Codes = make([]string, plan.Units[row].N)
	}
	lines := make([]int, plan.Units[b.Unit].N) // where each unit stands
	placed := map[int]int{}                    // line by order
	next := 0
	seen := make([][]first, len(plan.Factors))
	list.AddAll(fill(s, b, plan, columns, a.Levels, func(r sheet.Row, i int32) bool {
		if lines[i] > 0 {
			list.Add(diag.Diagnostic{Pos: s.Pos(r, 0), Code: DuplicateUnit, Message: fmt.Sprintf("%s stands in line %d already", Describe(plan, b.Unit, i), lines[i]),
				Related: []diag.Related{{Pos: diag.Pos{File: s.Path, Line: lines[i]}, Message: "the first row"}}})
			return false
		}
		lines[i] = r.Line
		at := rows[i]
		if a.Order[at] > 0 {
			return true // a further row of the same unit, where rows are finer
		}
		next++
		a.Order[at] = next
		if order >= 0 {
			n, err := strconv.Atoi(r.Cells[order].Text)
			if err != nil || n < 1 || n > 1_000_000_000 {
				list.Add(diag.Diagnostic{Pos: s.Pos(r, order), Code: BadOrder, Message: fmt.Sprintf("order %q is not a whole number from 1", r.Cells[order].Text)})
			} else {
				a.Order[at] = n
				if line, twice := placed[n]; twice {
					list.Add(diag.Diagnostic{Pos: s.Pos(r, order), Code: BadOrder, Message: fmt.Sprintf("order %d stands in line %d already", n, line)})
				}
				placed[n] = r.Line
			}
		}
		if code >= 0 {
			a.Codes[at] = r.Cells[code].Text
		}
		return true
	}, seen))
	whole := !list.HasErrors() // what was refused above is not said again as missing
	var missing []int32
	for i, line := range lines {
		if line == 0 && b.Unit == row {
			missing = append(missing, int32(i))
		}
	}
	if b.Unit != row {
		for i, n := range a.Order {
			if n == 0 {
				missing = append(missing, int32(i))
			}
		}
	}
	if len(missing) > 0 && whole {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: s.Path, Line: 1, Col: 1}, Code: MissingUnit, Message: "no row for " + describeSome(plan, row, missing),
			Hint: "every " + plan.Units[row].Name + " of the plan has a row"})
	}
	if !list.HasErrors() {
		list.AddAll(Check(a, func(factor int, instance int32) diag.Pos { return seen[factor][instance].pos }))
	}
	return a, list.List()
}

func nearHeading(name string, headings []string) string {
	if n := diag.Nearest(name, headings); n != "" {
		return fmt.Sprintf("is it %q? name the column %q, or say so under [data] columns", n, name)
	}
	return fmt.Sprintf("add a column %q", name)
}

// describeSome names the first instances of a list and how many more there are.
func describeSome(plan *layout.Plan, unit int, instances []int32) string {
	var parts []string
	for k, i := range instances {
		if k == 3 && len(instances) > 4 {
			parts = append(parts, fmt.Sprintf("and %d more", len(instances)-3))
			break
		}
		parts = append(parts, Describe(plan, unit, i))
	}
	return strings.Join(parts, "; ")
}

func isAbsent(err error) bool { return errors.Is(err, fs.ErrNotExist) }
