package render

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"path"
	"slices"
	"sort"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/trial"
	"penwright/protocol/allot"
	"penwright/protocol/sheet"
	"penwright/render/figure"
	"penwright/render/pdf"
)

// SheetOptions are what recording sheets depend on beside the trial.
type SheetOptions struct {
	Masked   bool // leave the treatments out although the protocol does not ask for codes
	Producer string
	Date     string   // ISO 8601 date for the metadata; empty: none
	Only     []string // kinds wanted: pdf, csv; nil: both
}

// The greatest numbers of rows that are printed, and that are written to be filled in.
const (
	mostPrinted = 20_000
	mostFilled  = 1_000_000
)

// Sheets makes the recording sheets of a trial: sheets.pdf to print, in the order of
// the draw, and for every table that the responses are read from a CSV file to fill in,
// which reads back as the protocol says once it is filled. notes say what the person
// who prints them should know. Data are not needed.
func Sheets(t *trial.Trial, opt SheetOptions) (files []File, notes []string, err error) {
	want := func(kind string) bool { return opt.Only == nil || slices.Contains(opt.Only, kind) }
	r := newRecorder(t, opt.Masked)
	if len(r.forms) == 0 {
		return nil, nil, fmt.Errorf("the protocol names no response that is written down; declare [[response]] first")
	}
	total := 0
	for i := range r.forms {
		n := r.rows(&r.forms[i])
		if n > mostFilled-total {
			return nil, nil, fmt.Errorf("the sheets would have more than %s rows", num.Count(mostFilled))
		}
		total += n
	}
	if want("pdf") {
		if total > mostPrinted {
			return nil, nil, fmt.Errorf("%s rows are more than the %s that are printed; --only csv gives the file to fill in", num.Count(total), num.Count(mostPrinted))
		}
		book := r.book()
		var b bytes.Buffer
		err := pdf.WriteBook(&b, book, "en", "Recording sheets of trial "+t.Protocol.Trial.Code, pdf.Options{Date: moment(opt.Date), Producer: opt.Producer, Subject: "Recording sheets"})
		if err != nil {
			return nil, nil, err
		}
		files = append(files, File{Path: "sheets.pdf", Data: b.Bytes()})
	}
	if want("csv") {
		for i := range r.forms {
			data, err := r.csv(&r.forms[i])
			if err != nil {
				return nil, nil, err
			}
			files = append(files, File{Path: r.fileName(i), Data: data})
		}
	}
	return files, r.notes(), nil
}

// recorder makes sheets of a trial.
type recorder struct {
	trial   *trial.Trial
	forms   []dataset.Form
	masked  bool
	numbers [][][]string // by form and instance: the animals' own numbers in the roster
}

func newRecorder(t *trial.Trial, masked bool) *recorder {
	r := &recorder{trial: t, masked: masked || t.Protocol.Randomization.Codes}
	roster, headings := r.roster()
	r.forms = dataset.Forms(t.Plan, func(name string) bool { return allot.Column(t.Plan, headings, name) >= 0 })
	r.numbers = make([][][]string, len(r.forms))
	for i := range r.forms {
		r.numbers[i] = r.animals(roster, r.forms[i].Unit)
	}
	return r
}

// roster opens the roster of the trial, nil without one.
func (r *recorder) roster() (*sheet.Sheet, []string) {
	p := r.trial.Protocol
	if p.Roster == nil {
		return nil, nil
	}
	for _, f := range r.trial.Files {
		if f.Path == p.Roster.File {
			if s, _ := sheet.Open(f.Path, f.Data, "auto"); s != nil {
				return s, s.Headings
			}
		}
	}
	return nil, nil
}

// own are headings under which a roster bears the number of an animal (common practice,
// no source).
var own = []string{"number", "no", "nr", "id", "tag", "eartag", "ear", "ring", "chip", "transponder", "animal", "name"}

// animals lists the own numbers that the roster gives for every instance of a unit; nil
// without any.
func (r *recorder) animals(s *sheet.Sheet, unit int) [][]string {
	plan := r.trial.Plan
	if s == nil {
		return nil
	}
	columns := allot.Columns(plan, s.Headings)
	b, bad := allot.NewFinder(plan).Bind(columns, s.Headings)
	if bad != nil {
		return nil
	}
	b.Quiet = true
	up := plan.Coarse(b.Unit, unit)
	if up == nil {
		return nil
	}
	at := -1
	for i, h := range s.Headings {
		words := strings.FieldsFunc(strings.ToLower(h), func(r rune) bool { return !(r >= 'a' && r <= 'z') })
		if at < 0 && !slices.Contains(columns, i) && slices.ContainsFunc(words, func(w string) bool { return slices.Contains(own, w) }) {
			at = i
		}
	}
	if at < 0 {
		return nil
	}
	out := make([][]string, plan.Units[unit].N)
	s.Rows(func(row sheet.Row) bool {
		if i, bad := b.Find(row.Cells); bad == nil && row.Cells[at].Text != "" {
			out[up[i]] = append(out[up[i]], strings.Clone(row.Cells[at].Text))
		}
		return true
	})
	return out
}

// order lists the instances of a unit as they are visited: by the order of the draw, or
// that of the plan before it.
func (r *recorder) order(unit int) []int {
	plan, a := r.trial.Plan, r.trial.Allotment
	n := plan.Units[unit].N
	key := make([]int, n)
	if a != nil {
		row := allot.RowUnit(plan)
		switch up, down := plan.Coarse(unit, row), plan.Coarse(row, unit); {
		case up != nil:
			for i := range key {
				key[i] = a.Order[up[i]]
			}
		case down != nil:
			for i := range key {
				key[i] = math.MaxInt
			}
			for j, i := range down {
				key[i] = min(key[i], a.Order[j])
			}
		}
	}
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	sort.SliceStable(out, func(i, j int) bool { return key[out[i]] < key[out[j]] })
	return out
}

// code is the masked code of an instance of a unit; empty where it has none of its own.
func (r *recorder) code(unit, i int) string {
	a := r.trial.Allotment
	if a == nil || a.Codes == nil {
		return ""
	}
	if up := r.trial.Plan.Coarse(unit, allot.RowUnit(r.trial.Plan)); up != nil {
		return a.Codes[up[i]]
	}
	return ""
}

// treated lists the factors whose levels stand on the sheets: none where they are
// masked.
func (r *recorder) treated(unit int) []int {
	plan, a := r.trial.Plan, r.trial.Allotment
	if a == nil || r.masked {
		return nil
	}
	var out []int
	for f := range plan.Factors {
		of := &plan.Factors[f]
		if of.Unit >= 0 && !of.Carried && plan.Coarse(unit, of.Unit) != nil && a.Levels[f] != nil {
			out = append(out, f)
		}
	}
	return out
}

// times lists the words that tell the rows of one instance apart, one list for each
// row: the time, then the value of each split.
func (r *recorder) times(f *dataset.Form) [][]string {
	out := [][]string{nil}
	cross := func(values []string) {
		var next [][]string
		for _, have := range out {
			for _, v := range values {
				next = append(next, append(slices.Clone(have), v))
			}
		}
		out = next
	}
	if f.Repeated >= 0 {
		cross(r.trial.Protocol.Repeated[f.Repeated].At)
	}
	for _, s := range f.Splits {
		cross(s.Values)
	}
	return out
}

func (r *recorder) rows(f *dataset.Form) int {
	n := r.trial.Plan.Units[f.Unit].N
	if f.Repeated >= 0 {
		n *= len(r.trial.Protocol.Repeated[f.Repeated].At)
	}
	for _, s := range f.Splits {
		n *= len(s.Values)
	}
	return n
}

// timeNames names what times lists.
func (r *recorder) timeNames(f *dataset.Form) []string {
	var out []string
	if f.Repeated >= 0 {
		out = append(out, r.trial.Protocol.Repeated[f.Repeated].Name)
	}
	for _, s := range f.Splits {
		out = append(out, s.Name)
	}
	return out
}

// csv is a form as the file to be filled in.
func (r *recorder) csv(f *dataset.Form) ([]byte, error) {
	t := r.trial
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	if d := t.Protocol.Data; d != nil && d.Delimiter != "" && d.Delimiter != "auto" {
		w.Comma = rune(d.Delimiter[0])
	}
	coded := t.Allotment != nil && t.Allotment.Codes != nil && r.code(f.Unit, 0) != ""
	treated := r.treated(f.Unit)
	var head []string
	head = append(head, f.Units...)
	head = append(head, r.timeNames(f)...)
	if f.Over != "" {
		head = append(head, f.Over)
	}
	if coded {
		head = append(head, "code")
	}
	for _, k := range treated {
		head = append(head, t.Plan.Factors[k].Name)
	}
	for i, h := range head {
		head[i] = f.Heading(h)
	}
	if f.Date != "" {
		head = append(head, f.Heading(f.Date))
	}
	for _, e := range f.Entries {
		head = append(head, f.Heading(e.Name))
	}
	if err := w.Write(head); err != nil {
		return nil, fmt.Errorf("%s: %w", f.File, err)
	}
	times := r.times(f)
	levels := make([][]int32, len(treated))
	for i, k := range treated {
		levels[i] = t.Allotment.LevelAt(k, f.Unit)
	}
	for _, i := range r.order(f.Unit) {
		name := allot.UnitName(t.Plan, f.Unit, int32(i))
		for _, at := range times {
			row := make([]string, 0, len(head))
			for _, n := range name {
				row = append(row, n.Name)
			}
			row = append(row, at...)
			if f.Over != "" {
				row = append(row, "")
			}
			if coded {
				row = append(row, r.code(f.Unit, i))
			}
			for k := range treated {
				level := ""
				if l := levels[k][i]; l >= 0 {
					level = t.Plan.Factors[treated[k]].Levels[l]
				}
				row = append(row, level)
			}
			for len(row) < len(head) {
				row = append(row, "")
			}
			if err := w.Write(row); err != nil {
				return nil, fmt.Errorf("%s: %w", f.File, err)
			}
		}
	}
	w.Flush()
	if err := w.Error(); err != nil {
		return nil, fmt.Errorf("%s: %w", f.File, err)
	}
	return b.Bytes(), nil
}

// fileName is what the file of a form is called, so that it is never taken for data
// that are there already.
func (r *recorder) fileName(i int) string {
	f := &r.forms[i]
	if f.File != "" {
		name := path.Base(f.File)
		ext := path.Ext(name)
		return strings.TrimSuffix(name, ext) + "-to-fill.csv"
	}
	if i == 0 {
		return "data-to-fill.csv"
	}
	return "data-" + strings.Join(append([]string{r.trial.Plan.Units[f.Unit].Name}, r.timeNames(f)...), "-") + "-to-fill.csv"
}

// notes say what a person who prints sheets should know.
func (r *recorder) notes() []string {
	var out []string
	t := r.trial
	switch {
	case t.Allotment == nil:
		out = append(out, "nothing is drawn yet: the units stand in the order of the plan, without treatments")
	case r.masked && t.Allotment.Codes == nil:
		out = append(out, "the allotment has no codes: the sheets bear units only")
	}
	for i := range r.forms {
		f := &r.forms[i]
		if f.File == "" && i > 0 {
			out = append(out, fmt.Sprintf("rows of each %s need a file of their own: name it under [[data.further]] before it is read", prose.UnitName(&t.Plan.Units[f.Unit])))
		}
		if f.Over != "" {
			out = append(out, fmt.Sprintf("the column %q counts periods: repeat the row of a %s for each", f.Over, prose.UnitName(&t.Plan.Units[f.Unit])))
		}
	}
	return out
}

// mapOf draws the units of a trial with those of a sheet marked, or of a large trial
// only these.
func (r *recorder) mapOf(unit int, units []int, size figure.Size) figure.Map {
	plan := r.trial.Plan
	here := make([]int, plan.Units[unit].N) // the row of each unit of the sheet, from 1
	for row, i := range units {
		here[i] = row + 1
	}
	all := len(units) == len(here) // nothing is to be told apart
	grid := plan.Units[unit].Own == nil
	m := figure.FromPlan(plan, func(u, i int) figure.Look {
		look := figure.Look{Treatment: -1, Value: math.NaN()}
		switch up, down := plan.Coarse(u, unit), plan.Coarse(unit, u); {
		case up != nil:
			if row := here[up[i]]; row > 0 && !all {
				look.Treatment = 0
			}
			if row := here[up[i]]; row > 0 && grid && u == unit {
				look.Label = num.Count(row) // which its row and column do not say
			}
		case down != nil: // cells that hold what is recorded
			if !all && slices.ContainsFunc(units, func(k int) bool { return int(down[k]) == i }) {
				look.Treatment = 0
			}
		}
		return look
	})
	m.Size = size
	if n, _ := count(m.Boxes); n > mostMapped {
		m.Boxes = marked(m.Boxes)
	}
	return m
}

// mostMapped is how many units a map shows beside those of its sheet.
const mostMapped = 160

// count is the number of cells in boxes, and of those marked.
func count(boxes []figure.Box) (cells, marks int) {
	for _, b := range boxes {
		n, k := count(b.Boxes)
		cells, marks = cells+n+len(b.Cells), marks+k
		for _, c := range b.Cells {
			if c.Treatment >= 0 {
				marks++
			}
		}
	}
	return cells, marks
}

// marked leaves the boxes that hold marked cells; a grid stays whole.
func marked(boxes []figure.Box) []figure.Box {
	var out []figure.Box
	for _, b := range boxes {
		if _, k := count([]figure.Box{b}); k == 0 {
			continue
		}
		if b.Columns == 0 {
			b.Boxes = marked(b.Boxes)
			b.Cells = slices.DeleteFunc(slices.Clone(b.Cells), func(c figure.Cell) bool { return c.Treatment < 0 })
		}
		out = append(out, b)
	}
	return out
}
