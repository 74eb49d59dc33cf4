package table

import (
	"fmt"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/layout"
	"penwright/render/doc"
)

// What a table of means by treatments holds: so many means side by side before it is
// turned, so many responses side by side once it is, and so many names of a level in the
// head before they are too long for it.
const (
	maxMeansAcross     = 7
	maxResponsesAcross = 5
	maxHeadLetters     = 90
)

// ChapterMeans are the tables of the means of a term as the trade prints them: a row for
// each response, a column for each treatment in the protocol's order (doses ascending),
// then the standard error and P. Where there are too many treatments the table is turned,
// and where there are too many responses then, split.
func ChapterMeans(t *trial.Trial, rs []*result.Response, term string, planned bool) []doc.Table {
	var have []*result.Response
	for _, r := range rs {
		if slices.ContainsFunc(r.Means, func(m result.Mean) bool { return m.Term == term }) {
			have = append(have, r)
		}
	}
	if len(have) == 0 {
		return nil
	}
	c := chapterTable{trial: t, plan: t.Plan, term: term, planned: planned, sed: t.Protocol.Animals == nil}
	c.cells = c.order(have)
	letters := 0
	for _, l := range c.cells {
		letters += len([]rune(l[len(l)-1].Level))
	}
	if len(c.cells) <= maxMeansAcross && letters <= maxHeadLetters {
		return []doc.Table{c.across(have)}
	}
	var out []doc.Table
	for i := 0; i < len(have); i += maxResponsesAcross {
		part := have[i:min(i+maxResponsesAcross, len(have))]
		made := c.turned(part)
		if i > 0 {
			made.ID = fmt.Sprintf("%s-%d", made.ID, i/maxResponsesAcross+1)
			made.Caption = append(made.Caption, doc.Text{Text: " (continued)"})
		}
		out = append(out, made)
	}
	return out
}

// chapterTable is what the tables of one term have in common.
type chapterTable struct {
	trial   *trial.Trial
	plan    *layout.Plan
	term    string
	planned bool
	sed     bool // the standard error of a difference is printed, else that of a mean
	cells   []result.Levels
}

// order lists the cells of a term, all of its responses together: as the results have
// them, but the levels of graded factors ascending.
func (c *chapterTable) order(rs []*result.Response) []result.Levels {
	var out []result.Levels
	seen := map[string]bool{}
	for _, r := range rs {
		for _, m := range r.Means {
			if k := levelKey(m.Levels); m.Term == c.term && !seen[k] {
				seen[k] = true
				out = append(out, m.Levels)
			}
		}
	}
	rank := map[string]map[string]int{}
	var names []string
	for _, x := range out[:min(1, len(out))] {
		for _, l := range x {
			names = append(names, l.Factor)
		}
	}
	for _, name := range names {
		f := prose.FactorNamed(c.plan, name)
		if f == nil {
			continue
		}
		at := make([]int, len(f.Levels))
		for k := range at {
			at[k] = k
		}
		if f.Values != nil {
			slices.SortStableFunc(at, func(a, b int) int {
				switch {
				case f.Values[a] < f.Values[b]:
					return -1
				case f.Values[a] > f.Values[b]:
					return 1
				}
				return 0
			})
		}
		rank[f.Name] = map[string]int{}
		for k, l := range at {
			rank[f.Name][f.Levels[l]] = k
		}
	}
	slices.SortStableFunc(out, func(a, b result.Levels) int {
		for i := range min(len(a), len(b)) {
			if d := rank[a[i].Factor][a[i].Level] - rank[b[i].Factor][b[i].Level]; d != 0 {
				return d
			}
		}
		return 0
	})
	return out
}

func levelKey(l result.Levels) string {
	var b strings.Builder
	for _, x := range l {
		b.WriteString(x.Factor + "\x00" + x.Level + "\x00")
	}
	return b.String()
}

// mean is the mean of a response in a cell, nil where there is none.
func (c *chapterTable) mean(r *result.Response, cell result.Levels) *result.Mean {
	k := levelKey(cell)
	for i := range r.Means {
		if r.Means[i].Term == c.term && levelKey(r.Means[i].Levels) == k {
			return &r.Means[i]
		}
	}
	return nil
}

// decimals of the means of a response.
func (c *chapterTable) decimals(r *result.Response) int {
	var ses []float64
	for _, m := range r.Means {
		if m.Term == c.term {
			ses = append(ses, float64(m.SE))
		}
	}
	return MeanDecimals(ses)
}

// value is the cell of a mean with its letters.
func (c *chapterTable) value(r *result.Response, levels result.Levels, d int) doc.Cell {
	m := c.mean(r, levels)
	if m == nil || !m.Mean.Known() {
		return cell("–")
	}
	out := text(num.Fixed(float64(m.Mean), d))
	if m.Letters != nil && *m.Letters != "" && prose.Lettered(r, c.term) {
		out = append(out, doc.Sup{Text: text(*m.Letters)})
	}
	return doc.Cell{Text: out}
}

// spread is the standard error that the table prints: one figure, or its range.
func (c *chapterTable) spread(r *result.Response, d int) doc.Cell {
	var lo, hi float64
	known := false
	if c.sed {
		for _, s := range r.SED {
			if s.Term == c.term && s.Min.Known() && s.Max.Known() {
				lo, hi, known = float64(s.Min), float64(s.Max), true
			}
		}
	} else {
		for _, m := range r.Means {
			if m.Term != c.term || !m.SE.Known() {
				continue
			}
			x := float64(m.SE)
			if !known {
				lo, hi, known = x, x, true
			}
			lo, hi = min(lo, x), max(hi, x)
		}
	}
	if !known {
		return cell("–")
	}
	d = max(d, num.SEDecimals(lo))
	a, b := num.Fixed(lo, d), num.Fixed(hi, d)
	if a == b {
		return cell(b)
	}
	return doc.Cell{Text: text(a + "–" + b), Own: true, Align: doc.Right}
}

// tested is a column of P: a test of the term, of a term within it, a trend, or a part of
// the treatments.
type tested struct {
	head []doc.Inline
	of   func(r *result.Response) result.Number
}

// tests lists the columns of P.
func (c *chapterTable) tests(rs []*result.Response) []tested {
	var out []tested
	byTest := func(source, head string) {
		of := func(r *result.Response) result.Number {
			for _, x := range r.Tests {
				if x.Source == source {
					return x.P
				}
			}
			return result.NaN
		}
		if slices.ContainsFunc(rs, func(r *result.Response) bool { return of(r).Known() }) {
			out = append(out, tested{head: text(head), of: of})
		}
	}
	factors := strings.Split(c.term, ":")
	if len(factors) > 1 {
		// Every term within the cells, main effects first.
		var terms []string
		for _, x := range c.plan.Terms {
			terms = append(terms, x.Name)
		}
		for _, r := range rs {
			for _, x := range r.Tests {
				// Terms of times stand in no plan.
				if !slices.Contains(terms, x.Source) {
					terms = append(terms, x.Source)
				}
			}
		}
		for n := 1; n <= len(factors); n++ {
			for _, x := range terms {
				if strings.Count(x, ":") == n-1 && c.within(x) {
					byTest(x, prose.TermLabel(c.plan, x))
				}
			}
		}
		if len(out) == 0 || !slices.Contains(terms, c.term) {
			byTest(c.term, prose.TermLabel(c.plan, c.term))
		}
	} else {
		byTest(c.term, prose.TermLabel(c.plan, c.term))
		for _, part := range c.parts(rs) {
			byTest(part, prose.TermLabel(c.plan, part))
		}
	}
	for _, trend := range []string{"linear", "quadratic", "cubic", "quartic", "quintic"} {
		name := c.term + ": " + trend
		of := func(r *result.Response) result.Number {
			for _, x := range r.Contrasts {
				if x.Name == name && (x.Planned || !prose.Planned(r)) {
					return x.P
				}
			}
			return result.NaN
		}
		if slices.ContainsFunc(rs, func(r *result.Response) bool { return of(r).Known() }) {
			out = append(out, tested{head: text(strings.ToUpper(trend[:1]) + trend[1:]), of: of})
		}
	}
	return out
}

// within tells whether all factors of a term are in the cells.
func (c *chapterTable) within(term string) bool {
	for _, f := range strings.Split(term, ":") {
		if !slices.Contains(strings.Split(c.term, ":"), f) {
			return false
		}
	}
	return true
}

// parts are the tests of parts of listed treatments that have no means of their own.
func (c *chapterTable) parts(rs []*result.Response) []string {
	var out []string
	if c.term != "treatment" {
		return nil
	}
	for _, r := range rs {
		for _, x := range r.Tests {
			own := x.Source == c.term || slices.ContainsFunc(r.Means, func(m result.Mean) bool { return m.Term == x.Source }) ||
				slices.ContainsFunc(r.Covariates, func(v result.Covariate) bool { return v.Name == x.Source })
			if !own && !slices.Contains(out, x.Source) && !slices.ContainsFunc(c.plan.Terms, func(y layout.Term) bool { return y.Name == x.Source }) {
				out = append(out, x.Source)
			}
		}
	}
	return out
}

// caption of the tables of the term.
func (c *chapterTable) caption(rs []*result.Response) []doc.Inline {
	of := ""
	if len(rs) == 1 {
		of = " of " + prose.ResponseText(rs[0])
	}
	return text("Means" + of + " by " + prose.FactorsText(c.plan, c.term))
}

// notes below the table; along is what the letters compare: a row or a column.
func (c *chapterTable) notes(rs []*result.Response, along string) [][]doc.Inline {
	var out [][]doc.Inline
	add := func(s string) {
		if s != "" {
			out = append(out, text(s))
		}
	}
	add(prose.MeansNote(c.trial, rs, c.term))
	if c.sed {
		add("SED: standard error of a difference of two means.")
		for _, s := range prose.SEDNotes(rs, c.term) {
			add(s)
		}
	} else {
		add("SEM: standard error of a mean.")
	}
	add(prose.LettersNote(c.plan, rs, c.term, along))
	for _, s := range prose.ChapterNotes(c.trial, rs, c.term) {
		add(s)
	}
	return out
}

func (c *chapterTable) errorHead() string {
	if c.sed {
		return "SED"
	}
	return "SEM"
}

// rowLabel is a response with its unit, as the first cell of a row.
func rowLabel(r *result.Response) string {
	s := r.Label
	if s == "" {
		s = strings.ReplaceAll(r.Name, "_", " ")
	}
	s = prose.Upper(s)
	if r.Unit != "" && r.Unit != "1" {
		s += ", " + num.UnitText(r.Unit)
	}
	return s
}

// levelsHead makes the rows of the head over the cells: one row a factor, the last factor
// in the last row. The name of the factor stands over its levels.
func (c *chapterTable) levelsHead() [][]doc.Cell {
	n := len(c.cells[0])
	var rows [][]doc.Cell
	for f := range n {
		var row []doc.Cell
		for i := 0; i < len(c.cells); {
			k := i + 1
			for f < n-1 && k < len(c.cells) && samePrefix(c.cells[i], c.cells[k], f+1) {
				k++
			}
			x := c.cells[i][f]
			label := x.Level
			if f < n-1 {
				label = prose.LevelText(c.plan, x.Factor, x.Level)
			}
			row = append(row, doc.Cell{Text: text(label), Span: k - i, Own: f < n-1, Align: doc.Center})
			i = k
		}
		rows = append(rows, row)
	}
	return rows
}

func samePrefix(a, b result.Levels, n int) bool {
	for i := range n {
		if a[i].Level != b[i].Level {
			return false
		}
	}
	return true
}

// across is the table with a row for each response and a column for each mean.
func (c *chapterTable) across(rs []*result.Response) doc.Table {
	tests := c.tests(rs)
	out := doc.Table{ID: prose.TableID(c.term, c.planned), Caption: c.caption(rs), Columns: []doc.Column{left(true)}}
	for range len(c.cells) + 1 + len(tests) {
		out.Columns = append(out.Columns, decimal())
	}
	// Over the levels stands what they are levels of.
	last := c.cells[0][len(c.cells[0])-1].Factor
	top := []doc.Cell{{}, {Text: text(prose.FactorHead(c.plan, last)), Span: len(c.cells), Own: true, Align: doc.Center}, {}}
	if len(c.cells[0]) > 1 {
		top[1].Text = text(prose.TermLabel(c.plan, c.term))
		if u := prose.FactorHead(c.plan, last); strings.HasSuffix(u, ")") {
			top[1].Text = text(prose.TermLabel(c.plan, c.term) + u[strings.LastIndex(u, " ("):])
		}
	}
	if len(tests) > 0 {
		top = append(top, doc.Cell{Text: []doc.Inline{doc.Emph{Text: text("P")}}, Span: len(tests), Own: true, Align: doc.Center})
	}
	out.Head = append(out.Head, top)
	heads := c.levelsHead()
	for i, h := range heads {
		row := append([]doc.Cell{{}}, h...)
		row = append(row, doc.Cell{})
		for range tests {
			row = append(row, doc.Cell{})
		}
		if i == len(heads)-1 {
			row[0] = cell("Response")
			row[len(h)+1] = cell(c.errorHead())
			for k, x := range tests {
				row[len(h)+2+k] = doc.Cell{Text: x.head}
			}
		}
		out.Head = append(out.Head, row)
	}
	grouped := len(rs) > 6
	role := ""
	for _, r := range rs {
		if grouped && r.Role != role {
			role = r.Role
			out.Rows = append(out.Rows, doc.Row{Group: true, Cells: []doc.Cell{{Text: text(upper(role)), Span: len(out.Columns)}}})
		}
		d := c.decimals(r)
		row := []doc.Cell{cell(rowLabel(r))}
		for _, l := range c.cells {
			row = append(row, c.value(r, l, d))
		}
		row = append(row, c.spread(r, d))
		for _, x := range tests {
			row = append(row, cell(pText(x.of(r))))
		}
		out.Rows = append(out.Rows, doc.Row{Cells: row})
	}
	out.Notes = c.notes(rs, "row")
	return out
}

// turned is the table with a row for each mean and a column for each response.
func (c *chapterTable) turned(rs []*result.Response) doc.Table {
	out := doc.Table{ID: prose.TableID(c.term, c.planned), Caption: c.caption(rs), Sortable: len(c.tests(rs)) == 0}
	var h []doc.Cell
	for _, l := range c.cells[0] {
		out.Columns = append(out.Columns, levelColumn(c.plan, l.Factor))
		h = append(h, cell(prose.FactorHead(c.plan, l.Factor)))
	}
	keys := len(h)
	var d []int
	for _, r := range rs {
		out.Columns = append(out.Columns, decimal())
		h = append(h, cell(rowLabel(r)))
		d = append(d, c.decimals(r))
	}
	out.Head = head(h...)
	for i, l := range c.cells {
		var row []doc.Cell
		for k, x := range l {
			// A level of an outer factor is written once.
			if i > 0 && k < keys-1 && samePrefix(c.cells[i-1], l, k+1) {
				row = append(row, doc.Cell{})
				continue
			}
			row = append(row, cell(x.Level))
		}
		for k, r := range rs {
			row = append(row, c.value(r, l, d[k]))
		}
		out.Rows = append(out.Rows, doc.Row{Cells: row, Rule: i > 0 && keys > 1 && !samePrefix(c.cells[i-1], l, 1)})
	}
	foot := func(name []doc.Inline, rule bool, of func(k int, r *result.Response) doc.Cell) {
		row := []doc.Cell{{Text: name, Span: keys, Own: true}}
		for k, r := range rs {
			row = append(row, of(k, r))
		}
		out.Rows = append(out.Rows, doc.Row{Cells: row, Rule: rule})
	}
	foot(text(c.errorHead()), true, func(k int, r *result.Response) doc.Cell { return c.spread(r, d[k]) })
	for _, x := range c.tests(rs) {
		foot(append([]doc.Inline{doc.Emph{Text: text("P")}, doc.Text{Text: ", "}}, x.head...), false, func(_ int, r *result.Response) doc.Cell { return cell(pText(x.of(r))) })
	}
	out.Notes = c.notes(rs, "column")
	return out
}

// ChapterSpread are the tables of means and standard deviations of each group from the
// values of its experimental units, as item 10a of the guideline asks.
func ChapterSpread(t *trial.Trial, rs []*result.Response, decimals func(name string) int, planned bool) []doc.Table {
	type set struct {
		cells []result.Levels
		rs    []*result.Response
	}
	var sets []set
	for _, r := range rs {
		if !slices.ContainsFunc(r.Summary, func(s result.Summary) bool { return s.SD.Known() }) {
			continue
		}
		var cells []result.Levels
		var key strings.Builder
		for _, s := range r.Summary {
			cells = append(cells, s.Levels)
			key.WriteString(levelKey(s.Levels))
		}
		k := slices.IndexFunc(sets, func(x set) bool {
			var b strings.Builder
			for _, l := range x.cells {
				b.WriteString(levelKey(l))
			}
			return b.String() == key.String()
		})
		if k < 0 {
			sets = append(sets, set{cells: cells})
			k = len(sets) - 1
		}
		sets[k].rs = append(sets[k].rs, r)
	}
	var out []doc.Table
	for _, s := range sets {
		c := chapterTable{trial: t, plan: t.Plan, cells: s.cells, planned: planned}
		var factors []string
		for _, x := range s.cells[0] {
			factors = append(factors, x.Factor)
		}
		c.term = strings.Join(factors, ":")
		for i := 0; i < len(s.rs); i += 12 {
			part := s.rs[i:min(i+12, len(s.rs))]
			made := c.spreads(part, decimals)
			if len(out) > 0 {
				made.ID = fmt.Sprintf("%s-%d", made.ID, len(out)+1)
			}
			if i > 0 {
				made.Caption = append(made.Caption, doc.Text{Text: " (continued)"})
			}
			out = append(out, made)
		}
	}
	return out
}

// spreads is the table of means and standard deviations of some responses.
func (c *chapterTable) spreads(rs []*result.Response, decimals func(name string) int) doc.Table {
	id := "chapter-spread"
	if !c.planned {
		id += "-unplanned"
	}
	out := doc.Table{ID: id, Caption: text("Means and standard deviations of the values of experimental units")}
	letters := 0
	for _, l := range c.cells {
		letters += len([]rune(l[len(l)-1].Level))
	}
	at := func(r *result.Response, l result.Levels) *result.Summary {
		for i := range r.Summary {
			if levelKey(r.Summary[i].Levels) == levelKey(l) {
				return &r.Summary[i]
			}
		}
		return nil
	}
	places := func(r *result.Response) int {
		var sds []float64
		for _, s := range r.Summary {
			sds = append(sds, float64(s.SD))
		}
		return max(MeanDecimals(sds), decimals(r.Name))
	}
	lo, hi := 0, 0
	for _, r := range rs {
		for _, s := range r.Summary {
			if lo == 0 || s.Units < lo {
				lo = s.Units
			}
			hi = max(hi, s.Units)
		}
	}
	show := func(r *result.Response, l result.Levels, d int) doc.Cell {
		s := at(r, l)
		if s == nil || !s.Mean.Known() {
			return cell("–")
		}
		v := num.Fixed(float64(s.Mean), d)
		of := ""
		if s.SD.Known() {
			of = num.Fixed(float64(s.SD), d)
		}
		if lo != hi {
			if of != "" {
				of += "; "
			}
			of += num.Count(s.Units)
		}
		if of != "" {
			v += " (" + of + ")"
		}
		return doc.Cell{Text: text(v), Own: true, Align: doc.Right}
	}
	// The cells are wider than those of means alone.
	if 2*len(c.cells) <= maxMeansAcross+1 && letters <= maxHeadLetters {
		out.Columns = []doc.Column{left(true)}
		for range c.cells {
			out.Columns = append(out.Columns, doc.Column{Align: doc.Right})
		}
		last := c.cells[0][len(c.cells[0])-1].Factor
		over := prose.FactorHead(c.plan, last)
		if len(c.cells[0]) > 1 {
			over = prose.TermLabel(c.plan, c.term)
		}
		out.Head = append(out.Head, []doc.Cell{{}, {Text: text(over), Span: len(c.cells), Own: true, Align: doc.Center}})
		heads := c.levelsHead()
		for i, h := range heads {
			first := doc.Cell{}
			if i == len(heads)-1 {
				first = cell("Response")
			}
			out.Head = append(out.Head, append([]doc.Cell{first}, h...))
		}
		for _, r := range rs {
			row := []doc.Cell{cell(rowLabel(r))}
			d := places(r)
			for _, l := range c.cells {
				row = append(row, show(r, l, d))
			}
			out.Rows = append(out.Rows, doc.Row{Cells: row})
		}
	} else {
		var h []doc.Cell
		for _, l := range c.cells[0] {
			out.Columns = append(out.Columns, levelColumn(c.plan, l.Factor))
			h = append(h, cell(prose.FactorHead(c.plan, l.Factor)))
		}
		var d []int
		for _, r := range rs {
			out.Columns = append(out.Columns, doc.Column{Align: doc.Right})
			h = append(h, cell(rowLabel(r)))
			d = append(d, places(r))
		}
		out.Head = head(h...)
		alone := 0
		for i, l := range c.cells {
			if len(l) == 1 && !slices.ContainsFunc(rs, func(r *result.Response) bool { s := at(r, l); return s != nil && s.SD.Known() }) {
				alone++ // nothing is known of its spread, and the means have a table
				continue
			}
			var row []doc.Cell
			for k, x := range l {
				if i > 0 && k < len(l)-1 && samePrefix(c.cells[i-1], l, k+1) {
					row = append(row, doc.Cell{})
					continue
				}
				row = append(row, cell(x.Level))
			}
			for k, r := range rs {
				row = append(row, show(r, l, d[k]))
			}
			out.Rows = append(out.Rows, doc.Row{Cells: row, Rule: i > 0 && len(l) > 1 && !samePrefix(c.cells[i-1], l, 1)})
		}
		if alone > 0 {
			out.Notes = append(out.Notes, text(fmt.Sprintf("%s treatments of one unit each are not listed, since they show no spread.", num.Count(alone))))
		}
	}
	note := "In parentheses the standard deviation (SD) between units treated alike, blocks not removed"
	switch {
	case lo != hi:
		note += ", and the number of units"
	case hi > 0:
		note += fmt.Sprintf("; %s units in each group", num.Count(hi))
	}
	out.Notes = append(out.Notes, text(note+"."))
	return out
}

// ChapterContrasts lists trends and contrasts of several responses with limits and P.
func ChapterContrasts(p *layout.Plan, rs []*result.Response, planned bool) doc.Table {
	id, caption := "chapter-contrasts", "Trends and contrasts"
	if !planned {
		id, caption = "chapter-contrasts-unplanned", "Trends and contrasts that were not planned before the data"
	}
	out := doc.Table{ID: id, Caption: text(caption), Columns: []doc.Column{left(true), left(true), decimal(), decimal(), {Align: doc.Right}, decimal()}}
	limitsHead := ""
	var all []result.Contrast
	for _, r := range rs {
		first := true
		for _, x := range r.Contrasts {
			if x.Planned != planned && prose.Planned(r) || !x.Estimate.Known() {
				continue
			}
			all = append(all, x)
			x = prose.Scaled(p, r, x)
			d := num.SEDecimals(float64(x.SE))
			label := ""
			if first {
				label = rowLabel(r)
			}
			limitsHead = prose.Interval(p, r)
			out.Rows = append(out.Rows, doc.Row{Rule: first && len(out.Rows) > 0, Cells: []doc.Cell{
				cell(label), cell(prose.TermLabel(p, x.Name)), cell(fixed(x.Estimate, float64(x.Estimate), d)), cell(fixed(x.SE, float64(x.SE), d)), cell(limits(x.Lower, x.Upper, d)), cell(pText(x.P)),
			}})
			first = false
		}
	}
	out.Head = head(cell("Response"), cell("Trend or contrast"), cell("Estimate"), cell("SE"), cell(limitsHead), emph("P"))
	for _, s := range prose.ContrastNotes(all) {
		out.Notes = append(out.Notes, text(strings.NewReplacer(" Lack of fit is what they leave of the term.", "", "Contrasts are weighted sums of adjusted means.", "Contrasts are differences of weighted means, the weights of each side adding up to one.").Replace(s)))
	}
	return out
}
