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

// Anova is the analysis of variance: Source, df, SS, MS, Tested over, F, P. Error rows
// are named by what varies. Of a mixed model it is the table of its tests.
func Anova(p *layout.Plan, r *result.Response) doc.Table {
	if len(r.Anova) == 0 && len(r.Tests) > 0 {
		return effectTests(p, r)
	}
	t := doc.Table{
		ID:      "anova-" + r.Name,
		Caption: text("Analysis of variance of " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal(), decimal(), left(false), decimal(), decimal()},
		Head:    head(cell("Source"), emph("df"), emph("SS"), emph("MS"), cell("Tested over"), emph("F"), emph("P")),
	}
	var ms, ss []float64
	for _, l := range r.Anova {
		ms = append(ms, float64(l.MS))
		ss = append(ss, float64(l.SS))
	}
	dms := num.ColumnDecimals(positive(ms), 3, 6)
	dss := min(num.ColumnDecimals(positive(ss), 3, 6), dms)
	last := ""
	for i, l := range r.Anova {
		over := ""
		if l.F.Known() {
			over = prose.ErrorRow(p, r, stratumOf(l))
		}
		name := prose.SourceRow(p, r, l)
		st := stratumOf(l)
		t.Rows = append(t.Rows, doc.Row{
			Rule: i > 0 && st != last && l.Stratum != nil,
			Cells: []doc.Cell{
				cell(name), cell(num.DF(float64(l.DF))), cell(fixed(l.SS, float64(l.SS), dss)), cell(fixed(l.MS, float64(l.MS), dms)),
				cell(over), cell(fixed(l.F, float64(l.F), 2)), cell(pText(l.P)),
			},
		})
		last = st
	}
	for _, s := range prose.AnovaNotes(p, r) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

func stratumOf(l result.Line) string {
	if l.Stratum == nil {
		return ""
	}
	return *l.Stratum
}

func pText(p result.Number) string {
	if !p.Known() {
		return ""
	}
	return num.P(float64(p))
}

// positive keeps the numbers that are clearly above rounding error beside the largest.
func positive(xs []float64) []float64 {
	top := 0.0
	for _, x := range xs {
		if !math.IsNaN(x) {
			top = math.Max(top, math.Abs(x))
		}
	}
	var out []float64
	for _, x := range xs {
		if math.Abs(x) > 1e-7*top {
			out = append(out, x)
		}
	}
	return out
}

// Means is the table of adjusted means of a term with standard errors, limits, units
// and letters.
func Means(p *layout.Plan, r *result.Response, term string) doc.Table {
	var ms []result.Mean
	letters := false
	for _, m := range r.Means {
		if m.Term == term {
			ms = append(ms, m)
			letters = letters || m.Letters != nil
		}
	}
	t := doc.Table{
		ID:       "means-" + r.Name + "-" + strings.ReplaceAll(term, ":", "-"),
		Caption:  text(prose.MeansCaption(p, r, term)),
		Sortable: true,
	}
	if len(ms) == 0 {
		return t
	}
	var ses []float64
	for _, m := range ms {
		ses = append(ses, float64(m.SE))
	}
	d := MeanDecimals(ses)
	var h []doc.Cell
	for _, l := range ms[0].Levels {
		t.Columns = append(t.Columns, levelColumn(p, l.Factor))
		h = append(h, cell(prose.FactorHead(p, l.Factor)))
	}
	t.Columns = append(t.Columns, decimal(), decimal(), doc.Column{Align: doc.Right}, decimal())
	h = append(h, cell("Mean"), cell("SE"), cell(prose.Interval(p, r)), cell("Units"))
	t.Head = head(h...)
	for _, m := range ms {
		var c []doc.Cell
		for _, l := range m.Levels {
			c = append(c, cell(l.Level))
		}
		mean := text(fixed(m.Mean, float64(m.Mean), d))
		if letters && m.Letters != nil {
			mean = append(mean, doc.Sup{Text: text(*m.Letters)})
		}
		if !m.Mean.Known() {
			mean = text("not estimable")
		}
		c = append(c, doc.Cell{Text: mean}, cell(fixed(m.SE, float64(m.SE), d)), cell(limits(m.Lower, m.Upper, d)), cell(num.Count(m.Units)))
		t.Rows = append(t.Rows, doc.Row{Cells: c})
	}
	for _, s := range prose.MeansNotes(p, r, term) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// levelColumn aligns the levels of a quantitative factor at the decimal mark.
func levelColumn(p *layout.Plan, factor string) doc.Column {
	if f := prose.FactorNamed(p, factor); f != nil && f.Values != nil {
		return doc.Column{Align: doc.Decimal, Key: true}
	}
	return left(true)
}

// MeanDecimals is the number of decimals for means whose standard errors are ses: that
// of the smallest.
func MeanDecimals(ses []float64) int {
	d := 0
	for _, se := range ses {
		d = max(d, num.SEDecimals(se))
	}
	return d
}

func limits(lo, hi result.Number, d int) string {
	switch {
	case math.IsNaN(float64(lo)) && math.IsNaN(float64(hi)):
		return ""
	case !lo.Known():
		return "up to " + num.Fixed(float64(hi), d)
	case !hi.Known():
		return "from " + num.Fixed(float64(lo), d)
	}
	return num.Fixed(float64(lo), d) + " to " + num.Fixed(float64(hi), d)
}

// Comparisons lists the differences of a term's means with simultaneous limits.
func Comparisons(p *layout.Plan, r *result.Response, term string) doc.Table {
	t := doc.Table{
		ID:       "comparisons-" + r.Name + "-" + strings.ReplaceAll(term, ":", "-"),
		Caption:  text(prose.ComparisonsCaption(p, r, term)),
		Sortable: true,
	}
	var cs []result.Comparison
	at := false
	for _, c := range r.Comparisons {
		if c.Term == term {
			cs = append(cs, c)
			at = at || len(c.At) > 0
		}
	}
	if len(cs) == 0 {
		return t
	}
	var ses []float64
	for _, c := range cs {
		ses = append(ses, float64(c.SE))
	}
	d := MeanDecimals(ses)
	var h []doc.Cell
	if at {
		t.Columns = append(t.Columns, left(true))
		h = append(h, cell("Within"))
	}
	t.Columns = append(t.Columns, left(true), decimal(), decimal(), decimal(), doc.Column{Align: doc.Right}, decimal())
	adjusted := cs[0].Method != "lsd" && cs[0].Method != "none"
	last := emph("P")
	if adjusted {
		last = doc.Cell{Text: []doc.Inline{doc.Emph{Text: text("P")}, doc.Text{Text: ", adjusted"}}}
	}
	h = append(h, cell("Difference of"), cell("Estimate"), cell("SED"), emph("df"), cell(prose.Interval(p, r)), last)
	t.Head = head(h...)
	previous := ""
	for i, c := range cs {
		var row []doc.Cell
		where := prose.LevelsText(p, c.At)
		if at {
			row = append(row, cell(where))
		}
		row = append(row, cell(prose.PairText(c.A, c.B)), cell(fixed(c.Difference, float64(c.Difference), d)), cell(fixed(c.SE, float64(c.SE), d)),
			cell(num.DF(float64(c.DF))), cell(limits(c.Lower, c.Upper, d)), cell(pText(c.PAdjusted)))
		t.Rows = append(t.Rows, doc.Row{Cells: row, Rule: at && i > 0 && where != previous})
		previous = where
	}
	for _, s := range prose.ComparisonsNotes(p, r, term) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// Contrasts lists contrasts and trends; planned says which of the two kinds, those in the
// plan or those not in it, is wanted.
func Contrasts(p *layout.Plan, r *result.Response, planned bool) doc.Table {
	id, caption := "contrasts-", "Planned contrasts and trends of "
	if !planned {
		id, caption = "unplanned-contrasts-", "Contrasts and trends that were not planned before the data, of "
	}
	t := doc.Table{
		ID:      id + r.Name,
		Caption: text(caption + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal(), decimal(), decimal(), decimal(), decimal()},
		Head:    head(cell("Contrast"), cell("Estimate"), cell("SE"), emph("SS"), emph("df"), emph("F"), emph("P")),
	}
	var ss []float64
	var contrasts []result.Contrast
	for _, c := range r.Contrasts {
		if c.Planned == planned {
			contrasts = append(contrasts, c)
			ss = append(ss, float64(c.SS))
		}
	}
	dss := num.ColumnDecimals(positive(ss), 3, 4)
	// A mixed model has no sums of squares.
	sums := slices.ContainsFunc(contrasts, func(c result.Contrast) bool { return c.SS.Known() })
	if !sums {
		t.Columns, t.Head[0] = slices.Delete(t.Columns, 3, 4), slices.Delete(t.Head[0], 3, 4)
	}
	for _, c := range contrasts {
		d := num.SEDecimals(float64(c.SE))
		df := num.DF(float64(c.NumeratorDF)) + ", " + num.DF(float64(c.DF))
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{
			cell(prose.TermLabel(p, c.Name)), cell(fixed(c.Estimate, float64(c.Estimate), d)), cell(fixed(c.SE, float64(c.SE), d)),
			cell(fixed(c.SS, float64(c.SS), dss)), {Text: text(df), Own: true, Align: doc.Right}, cell(fixed(c.F, float64(c.F), 2)), cell(pText(c.P)),
		}})
		if row := &t.Rows[len(t.Rows)-1]; !sums {
			row.Cells = slices.Delete(row.Cells, 3, 4)
		}
	}
	for _, s := range prose.ContrastNotes(contrasts) {
		t.Notes = append(t.Notes, text(s))
	}
	return t
}

// Summary describes the values of experimental units by treatment, from raw data.
func Summary(p *layout.Plan, r *result.Response, decimals int) doc.Table {
	t := doc.Table{
		ID:       "summary-" + r.Name,
		Caption:  text("Values of experimental units by treatment: " + prose.ResponseText(r)),
		Sortable: true,
	}
	if len(r.Summary) == 0 {
		return t
	}
	var sds, raw []float64
	for _, s := range r.Summary {
		sds = append(sds, float64(s.SD))
		raw = append(raw, float64(s.Min), float64(s.Max))
	}
	d := MeanDecimals(sds)
	if decimals >= 0 {
		d = max(d, decimals)
	}
	dr := decimals
	if dr < 0 {
		dr = min(Places(raw), d+1)
	}
	var h []doc.Cell
	for _, l := range r.Summary[0].Levels {
		t.Columns = append(t.Columns, levelColumn(p, l.Factor))
		h = append(h, cell(prose.FactorHead(p, l.Factor)))
	}
	t.Columns = append(t.Columns, decimal(), decimal(), decimal(), decimal(), decimal())
	t.Head = head(append(h, cell("Units"), cell("Mean"), cell("SD"), cell("Smallest"), cell("Largest"))...)
	for _, s := range r.Summary {
		var c []doc.Cell
		for _, l := range s.Levels {
			c = append(c, cell(l.Level))
		}
		c = append(c, cell(num.Count(s.Units)), cell(fixed(s.Mean, float64(s.Mean), d)), cell(fixed(s.SD, float64(s.SD), d)),
			cell(fixed(s.Min, float64(s.Min), dr)), cell(fixed(s.Max, float64(s.Max), dr)))
		t.Rows = append(t.Rows, doc.Row{Cells: c})
	}
	t.Notes = append(t.Notes, text("SD: standard deviation between units treated alike, blocks not removed; it describes the units and is no standard error of a mean."))
	return t
}

// Places is the largest number of decimals, up to six, that the numbers need to be
// shown as they were written.
func Places(xs []float64) int {
	d := 0
	for _, x := range xs {
		if math.IsNaN(x) || math.IsInf(x, 0) {
			continue
		}
		for d < 6 {
			p := math.Pow(10, float64(d))
			if math.Abs(math.Round(x*p)/p-x) <= 1e-9*math.Max(1, math.Abs(x)) {
				break
			}
			d++
		}
	}
	return d
}

// Covariates shows slopes with the test of equal slopes.
func Covariates(p *layout.Plan, r *result.Response) doc.Table {
	t := doc.Table{
		ID:      "covariates-" + r.Name,
		Caption: text("Covariates of " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal(), decimal(), decimal(), decimal()},
		Head: head(cell("Covariate"), cell("Slope"), cell("SE"), emph("df"), emph("P"),
			doc.Cell{Text: []doc.Inline{doc.Emph{Text: text("P")}, doc.Text{Text: " of equal slopes"}}}),
	}
	for _, c := range r.Covariates {
		d := num.SEDecimals(float64(c.SE))
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{
			cell(prose.TermLabel(p, c.Name)), cell(fixed(c.Slope, float64(c.Slope), d)), cell(fixed(c.SE, float64(c.SE), d)),
			cell(num.DF(float64(c.DF))), cell(pText(c.P)), cell(pText(c.EqualSlopesP)),
		}})
	}
	return t
}

// Diagnostics lists the checks of the model with a plain sentence each.
func Diagnostics(r *result.Response) doc.Table {
	t := doc.Table{
		ID:      "diagnostics-" + r.Name,
		Caption: text("Checks of the model of " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), decimal(), left(false)},
		Head:    head(cell("Check"), cell("Statistic"), emph("P"), cell("In words")),
	}
	for _, d := range r.Diagnostics {
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{
			cell(prose.DiagnosticLabel(d.Name)), cell(fixed(d.Statistic, float64(d.Statistic), 3)), cell(pText(d.P)), cell(d.Text),
		}})
	}
	return t
}

// Efficiency lists what the layout gained.
func Efficiency(r *result.Response) doc.Table {
	t := doc.Table{
		ID:      "efficiency-" + r.Name,
		Caption: text("What the layout gained: " + prose.ResponseText(r)),
		Columns: []doc.Column{left(true), decimal(), left(false)},
		Head:    head(cell("Comparison of layouts"), cell("Relative efficiency"), cell("In words")),
	}
	for _, e := range r.Efficiency {
		t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{cell(upper(e.Name)), cell(fixed(e.Value, float64(e.Value), 2)), cell(e.Text)}})
	}
	return t
}

func upper(s string) string {
	if s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}

// Residuals lists residuals of the analysed rows, at most limit of them.
func Residuals(p *layout.Plan, r *result.Response, limit int) doc.Table {
	t := doc.Table{
		ID:       "residuals-" + r.Name,
		Caption:  text("Data and residuals: " + prose.ResponseText(r)),
		Sortable: true,
	}
	if len(r.Residuals) == 0 {
		return t
	}
	var h []doc.Cell
	for _, u := range r.Residuals[0].Units {
		t.Columns = append(t.Columns, left(true))
		h = append(h, cell(prose.TermLabel(p, u.Factor)))
	}
	for range 6 {
		t.Columns = append(t.Columns, decimal())
	}
	t.Head = head(append(h, cell("Observed"), cell("Fitted"), cell("Residual"), cell("Studentized"), cell("Leverage"), cell("Cook’s distance"))...)
	var obs, res []float64
	for _, x := range r.Residuals {
		obs = append(obs, float64(x.Observed))
		res = append(res, float64(x.Residual))
	}
	// Computed values have more decimals than they bear: one more than the error shows is
	// enough.
	de := num.SEDecimals(rootMeanSquare(res))
	do := min(Places(obs), de+1)
	d := max(do, de)
	for i, x := range r.Residuals {
		if i == limit {
			t.Notes = append(t.Notes, text("The first "+num.Count(limit)+" of "+num.Count(len(r.Residuals))+" rows; all of them ride inside this report (results.json)."))
			break
		}
		var c []doc.Cell
		for _, u := range x.Units {
			c = append(c, cell(u.Level))
		}
		c = append(c, cell(fixed(x.Observed, float64(x.Observed), do)), cell(fixed(x.Fitted, float64(x.Fitted), d)), cell(fixed(x.Residual, float64(x.Residual), d)),
			cell(fixed(x.Studentized, float64(x.Studentized), 2)), cell(fixed(x.Leverage, float64(x.Leverage), 3)), cell(fixed(x.Cook, float64(x.Cook), 3)))
		t.Rows = append(t.Rows, doc.Row{Cells: c})
	}
	return t
}

func rootMeanSquare(xs []float64) float64 {
	s, n := 0.0, 0
	for _, x := range xs {
		if !math.IsNaN(x) {
			s += x * x
			n++
		}
	}
	if n == 0 {
		return 0
	}
	return math.Sqrt(s / float64(n))
}
