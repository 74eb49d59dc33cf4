package analysis

import (
	"math"
	"strings"

	"penwright/analysis/dist"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/protocol/layout"
)

// termMeans are the means of one term with all that is wanted of them: a term of the
// model, or a part of listed treatments.
type termMeans struct {
	name    string
	unit    int     // its experimental unit
	factors []int   // indices into plan.Factors
	cells   [][]int // every combination of levels, last factor fastest
	at      []int   // for each of cells, its index among the estimates, or -1
	est     estimates
	test    test
	cellOf  func(row int) int // cell of a recorded row, -1: none
	listed  bool              // the factor of listed treatments itself
}

func (m *termMeans) levels(p *layout.Plan, cell int) result.Levels {
	out := result.Levels{}
	for i, f := range m.factors {
		out = append(out, result.FactorLevel{Factor: p.Factors[f].Name, Level: p.Factors[f].Levels[m.cells[cell][i]]})
	}
	return out
}

// text joins the levels of a cell with colons.
func (m *termMeans) text(p *layout.Plan, cell int) string {
	var parts []string
	for i, f := range m.factors {
		parts = append(parts, p.Factors[f].Levels[m.cells[cell][i]])
	}
	return strings.Join(parts, ":")
}

// known tells whether the mean of a cell has an estimate.
func (m *termMeans) known(cell int) bool {
	return m.at[cell] >= 0 && !math.IsNaN(m.est.value(m.at[cell]))
}

// relative gives the means of cells less that of the first of them: differences that keep
// their digits where the means are large. NaN where there is no estimate.
func (m *termMeans) relative(cells []int) []float64 {
	out := make([]float64, len(cells))
	w := make([]float64, m.est.count())
	first := -1
	for i, c := range cells {
		switch {
		case !m.known(c):
			out[i] = math.NaN()
		case first < 0:
			first = m.at[c]
		default:
			w[m.at[c]], w[first] = 1, -1
			out[i], _, _ = m.est.contrast(w)
			w[m.at[c]], w[first] = 0, 0
		}
	}
	return out
}

// single tells whether a contrast whose variance has df draws on the error of the term
// alone, and not on that of other strata as well.
func (m *termMeans) single(df float64) bool {
	return math.Abs(df-m.test.errorDF) <= 1e-9*m.test.errorDF
}

// judge tests that contrasts of the means are all zero, over the error of the term unless
// the model gives the hypothesis one of its own.
func (m *termMeans) judge(contrasts [][]float64) test {
	t := m.est.test(contrasts)
	if t.own > 0 {
		return t
	}
	out := m.test
	out.df, out.ss, out.own = t.df, t.ss, 0
	return out
}

// product lists all combinations, the last running fastest.
func product(sizes []int) [][]int {
	out := [][]int{{}}
	for _, n := range sizes {
		var next [][]int
		for _, c := range out {
			for l := range n {
				next = append(next, append(append([]int{}, c...), l))
			}
		}
		out = next
	}
	return out
}

// estimate fills means, standard errors of differences, comparisons and contrasts.
func (a *analyst) estimate() {
	var all []*termMeans
	for k := range a.terms {
		m := a.termMeans(k)
		all = append(all, m)
		all = append(all, a.partMeans(k, m)...)
	}
	for _, m := range all {
		a.tabulate(m)
		a.differences(m)
		a.twoLevels(m)
	}
	a.contrasts(all)
}

// twoLevels notes where the F of a factor of two levels is of another hypothesis than the
// difference of its two adjusted means.
func (a *analyst) twoLevels(m *termMeans) {
	f := m.test.f()
	if len(m.factors) != 1 || len(m.cells) != 2 || m.test.df != 1 || !m.known(0) || !m.known(1) || math.IsNaN(f) {
		return
	}
	d := m.relative([]int{0, 1})[1]
	v, _ := m.est.diff(m.at[0], m.at[1])
	if t := d * d / v; math.Abs(t-f) > 1e-6*math.Max(t, f) {
		a.note("two-levels", m.name, prose.TwoLevel(a.plan, m.name))
	}
}

// termMeans gathers the means of term k of the model.
func (a *analyst) termMeans(k int) *termMeans {
	t := &a.plan.Terms[a.terms[k]]
	m := &termMeans{name: t.Name, unit: t.Unit, factors: t.Factors, est: a.model.means(k), test: a.model.test(k)}
	m.listed = len(t.Factors) == 1 && a.plan.Factors[t.Factors[0]].Protocol == nil
	var sizes []int
	for _, f := range t.Factors {
		sizes = append(sizes, len(a.plan.Factors[f].Levels))
	}
	m.cells = product(sizes)
	// Position of a cell among the levels that are present.
	index := make([]map[int]int, len(t.Factors))
	count := make([]int, len(t.Factors))
	for i, f := range t.Factors {
		index[i] = map[int]int{}
		for j, g := range a.factors {
			if g == f {
				for n, l := range a.present[j] {
					index[i][l] = n
				}
				count[i] = len(a.present[j])
			}
		}
	}
	for _, c := range m.cells {
		at := 0
		for i, l := range c {
			n, ok := index[i][l]
			if !ok {
				at = -1
				break
			}
			at = at*count[i] + n
		}
		m.at = append(m.at, at)
	}
	levels := make([][]int32, len(t.Factors))
	for i, f := range t.Factors {
		levels[i] = a.trial.Allotment.LevelAt(f, a.rows.unit)
	}
	m.cellOf = func(row int) int {
		cell := 0
		for i := range t.Factors {
			l := levels[i][a.rows.inst[row]]
			if l < 0 {
				return -1
			}
			cell = cell*sizes[i] + int(l)
		}
		return cell
	}
	return m
}

// partMeans gathers the means of the factors that listed treatments are made of, each
// the average with equal weights of the treatments that share their levels.
func (a *analyst) partMeans(k int, whole *termMeans) []*termMeans {
	var out []*termMeans
	for _, part := range a.plan.Parts(a.terms[k]) {
		if part.Factors == nil {
			continue
		}
		rows, ok := a.groupWeights(whole, part.Groups)
		if !ok {
			continue
		}
		m := &termMeans{name: part.Name, unit: whole.unit, factors: part.Factors, est: weighted{base: whole.est, rows: rows}}
		m.test = whole.judge(partContrasts(a.plan, a.terms[k], part, rows))
		group := make([]int, len(whole.cells))
		for c := range group {
			group[c] = -1
		}
		for g, levels := range part.Groups {
			var c []int
			for _, f := range part.Factors {
				name := a.plan.Protocol.Treatments[levels[0]].Levels[a.plan.Factors[f].Name]
				for l, x := range a.plan.Factors[f].Levels {
					if x == name {
						c = append(c, l)
					}
				}
			}
			m.cells = append(m.cells, c)
			m.at = append(m.at, g)
			for _, l := range levels {
				group[l] = g
			}
		}
		m.cellOf = func(row int) int {
			if c := whole.cellOf(row); c >= 0 {
				return group[c]
			}
			return -1
		}
		out = append(out, m)
	}
	return out
}

// groupWeights averages the means of a term within groups of levels with equal weights;
// ok is false when a mean is not there.
func (a *analyst) groupWeights(m *termMeans, groups [][]int) (rows [][]float64, ok bool) {
	for _, g := range groups {
		w := make([]float64, m.est.count())
		for _, l := range g {
			if !m.known(l) {
				return nil, false
			}
			w[m.at[l]] += 1 / float64(len(g))
		}
		rows = append(rows, w)
	}
	return rows, true
}

// partContrasts are the contrasts whose being zero is the hypothesis of a part: of group
// means for a main effect or a part between groups, products of such for interactions.
func partContrasts(p *layout.Plan, term int, part layout.Part, rows [][]float64) [][]float64 {
	sizes := []int{len(rows)}
	if len(part.Factors) > 1 {
		sizes = nil
		for _, f := range part.Factors {
			for _, q := range p.Parts(term) {
				if len(q.Factors) == 1 && q.Factors[0] == f {
					sizes = append(sizes, len(q.Groups))
				}
			}
		}
	}
	var out [][]float64
	for _, c := range interaction(sizes) {
		w := make([]float64, len(rows[0]))
		for g, v := range c {
			for i := range w {
				w[i] += v * rows[g][i]
			}
		}
		out = append(out, w)
	}
	return out
}

// partLines adds the lines that part a term of listed treatments. stratum is nil in a
// single table.
func (a *analyst) partLines(k int, stratum *string) {
	parts := a.plan.Parts(a.terms[k])
	if len(parts) == 0 {
		return
	}
	m := a.termMeans(k)
	for _, part := range parts {
		rows, ok := a.groupWeights(m, part.Groups)
		if !ok {
			continue
		}
		t := m.judge(partContrasts(a.plan, a.terms[k], part, rows))
		if t.df == 0 {
			a.note("no-single-error", m.name, prose.NoSingleError(a.plan, part.Name))
			continue
		}
		f := result.Number(t.f())
		edf := result.Number(t.errorDF)
		l := result.Line{Stratum: stratum, Source: part.Name, DF: t.df, SS: result.Number(t.ss), MS: result.Number(t.ms()), F: f, P: result.Number(upperF(float64(f), t.df, t.errorDF)), ErrorDF: &edf}
		if a.mx == nil {
			a.out.Anova = append(a.out.Anova, l)
		}
		a.out.Tests = append(a.out.Tests, result.Test{Source: part.Name, DF: t.df, ErrorDF: edf, F: l.F, P: l.P, Planned: true})
	}
}

// weighted are averages of other estimates.
type weighted struct {
	base estimates
	rows [][]float64
}

func (w weighted) count() int { return len(w.rows) }

func (w weighted) value(i int) float64 {
	v, _, _ := w.base.contrast(w.rows[i])
	return v
}

func (w weighted) combine(weights []float64) []float64 {
	out := make([]float64, len(w.rows[0]))
	for i, v := range weights {
		add(out, w.rows[i], v)
	}
	return out
}

func (w weighted) contrast(weights []float64) (value, variance, df float64) {
	return w.base.contrast(w.combine(weights))
}

func (w weighted) diff(i, j int) (variance, df float64) {
	c := append([]float64(nil), w.rows[i]...)
	add(c, w.rows[j], -1)
	_, variance, df = w.base.contrast(c)
	return variance, df
}

func (w weighted) variance(i int) (variance, df float64) {
	_, variance, df = w.base.contrast(w.rows[i])
	return variance, df
}

func (w weighted) cov(i, j int) float64 {
	vi, _ := w.variance(i)
	if i == j {
		return vi
	}
	vj, _ := w.variance(j)
	d, _ := w.diff(i, j)
	return (vi + vj - d) / 2
}

func (w weighted) test(contrasts [][]float64) test {
	var out [][]float64
	for _, c := range contrasts {
		out = append(out, w.combine(c))
	}
	return w.base.test(out)
}

// maxPairs is the number of means up to which standard errors of all pairs are looked at.
const maxPairs = 1500

// minMixtureDF is the least df for which limits of a mean are given. A single mean square
// has one at least; a difference of mean squares that comes out near zero may have fewer,
// and limits then run to any size.
const minMixtureDF = 1 - 1e-9

// tabulate writes the means of a term and the standard errors of their differences.
func (a *analyst) tabulate(m *termMeans) {
	n, inModel, units := a.counts(m)
	alpha := a.alpha
	missing, imprecise := false, false
	for c := range m.cells {
		x := result.Mean{Term: m.name, Levels: m.levels(a.plan, c), Mean: result.NaN, SE: result.NaN, SEM: result.NaN, DF: result.NaN,
			Lower: result.NaN, Upper: result.NaN, N: n[c], Units: units[c]}
		if m.known(c) {
			i := m.at[c]
			x.Mean = result.Number(m.est.value(i))
			v, df := m.est.variance(i)
			if v >= 0 {
				se := math.Sqrt(v)
				x.SE, x.DF = result.Number(se), result.Number(df)
				if df >= minMixtureDF {
					h := dist.TQuantile(alpha/2, df) * se
					x.Lower, x.Upper = x.Mean-result.Number(h), x.Mean+result.Number(h)
				}
			}
			imprecise = imprecise || !x.Lower.Known()
			if inModel[c] > 0 && a.mx == nil {
				x.SEM = result.Number(math.Sqrt(m.test.errorMS / float64(inModel[c])))
			}
		} else {
			missing = true
		}
		a.out.Means = append(a.out.Means, x)
	}
	if missing {
		a.note("not-estimable", m.name, prose.MeansNotEstimable(a.plan, m.name))
	}
	if imprecise {
		a.note("no-limits", m.name, prose.NoLimits(a.plan, m.name))
	}
	a.seds(m)
}

// counts gives for each cell the rows of the response, the rows of the model, and the
// experimental units that gave at least one.
func (a *analyst) counts(m *termMeans) (n, inModel, units []int) {
	n, inModel, units = make([]int, len(m.cells)), make([]int, len(m.cells)), make([]int, len(m.cells))
	seen := make([]bool, a.plan.Units[m.unit].N)
	up := a.plan.Coarse(a.rows.unit, m.unit)
	modelled := a.modelled()
	counted := map[int32]bool{}
	var toModel []int32
	if modelled != a.rows {
		toModel = a.plan.Coarse(a.rows.unit, modelled.unit)
	}
	for i, u := range a.rows.inst {
		c := m.cellOf(i)
		if c < 0 {
			continue
		}
		n[c]++
		if toModel == nil {
			inModel[c]++
		} else if !counted[toModel[u]] {
			counted[toModel[u]] = true
			inModel[c]++
		}
		if !seen[up[u]] {
			seen[up[u]] = true
			units[c]++
		}
	}
	return n, inModel, units
}

// modelled are the rows that the model was fitted to.
func (a *analyst) modelled() *rows {
	if a.st != nil {
		return a.st.rows
	}
	if a.mx != nil {
		return a.mx.rows
	}
	return a.at
}

// seds summarizes the standard errors of differences over all pairs of a term's means.
func (a *analyst) seds(m *termMeans) {
	var cells []int
	for c := range m.cells {
		if m.known(c) {
			cells = append(cells, c)
		}
	}
	s := result.SED{Term: m.name, Min: result.NaN, Mean: result.NaN, Max: result.NaN, LSD: result.NaN}
	if len(cells) < 2 || len(cells) > maxPairs {
		a.out.SED = append(a.out.SED, s)
		if len(cells) > maxPairs {
			a.note("many-means", m.name, prose.TooManyPairs(a.plan, m.name, len(cells), maxPairs))
		}
		return
	}
	lo, hi, sum, pairs := math.Inf(1), 0.0, 0.0, 0
	dfLo, dfHi := math.Inf(1), 0.0
	kinds := map[int]*kind{}
	for x, c := range cells {
		for _, d := range cells[x+1:] {
			v, df := m.est.diff(m.at[c], m.at[d])
			se := math.Sqrt(v)
			if math.IsNaN(se) {
				continue
			}
			lo, hi, sum, pairs = math.Min(lo, se), math.Max(hi, se), sum+se, pairs+1
			dfLo, dfHi = math.Min(dfLo, df), math.Max(dfHi, df)
			same := 0
			for i := range m.factors {
				if m.cells[c][i] == m.cells[d][i] {
					same |= 1 << i
				}
			}
			k := kinds[same]
			if k == nil {
				k = &kind{lo: se, hi: se}
				kinds[same] = k
			}
			k.lo, k.hi = math.Min(k.lo, se), math.Max(k.hi, se)
		}
	}
	if pairs > 0 {
		s.Min, s.Mean, s.Max = result.Number(lo), result.Number(sum/float64(pairs)), result.Number(hi)
		if hi-lo <= 1e-9*hi && dfHi-dfLo <= 1e-6*dfHi && dfHi > 0 {
			s.LSD = result.Number(dist.TQuantile(a.alpha/2, dfHi) * hi)
		} else {
			a.sedKinds(m, kinds)
		}
	}
	a.out.SED = append(a.out.SED, s)
}

// kind are the SEDs of pairs that agree in the same factors.
type kind struct{ lo, hi float64 }

// sedKinds notes the SEDs by kind where each kind has one value, as in split plots.
func (a *analyst) sedKinds(m *termMeans, kinds map[int]*kind) {
	if len(m.factors) < 2 {
		return
	}
	var of []prose.SEDKind
	for same := (1 << len(m.factors)) - 1; same >= 0; same-- {
		k := kinds[same]
		if k == nil {
			continue
		}
		if k.hi-k.lo > 1e-9*k.hi {
			return
		}
		x := prose.SEDKind{SED: k.hi}
		for i, f := range m.factors {
			if same&(1<<i) != 0 {
				x.Same = append(x.Same, a.plan.Factors[f].Name)
			}
		}
		merged := false
		for j := range of {
			if math.Abs(of[j].SED-x.SED) <= 1e-9*x.SED && len(x.Same) == 0 {
				of[j].Same, merged = nil, true
			}
		}
		if !merged {
			of = append(of, x)
		}
	}
	if len(of) > 1 {
		a.note("sed-kinds", m.name, prose.SEDKinds(a.plan, of))
	}
}

// contrasts fills planned contrasts and trends of main effects, and trends of
// quantitative factors within interactions.
func (a *analyst) contrasts(all []*termMeans) {
	main := map[string]*termMeans{}
	for _, m := range all {
		if len(m.factors) == 1 {
			main[a.plan.Factors[m.factors[0]].Name] = m
		}
	}
	for _, m := range all {
		if len(m.factors) == 1 && a.plan.Factors[m.factors[0]].Values != nil {
			a.trends(m)
		}
	}
	for _, m := range all {
		for i, f := range m.factors {
			if len(m.factors) > 1 && a.plan.Factors[f].Values != nil {
				a.interactionTrends(m, i)
			}
		}
	}
	var planned []protocol.Contrast
	planned = append(planned, a.plan.Protocol.Analysis.Contrasts...)
	planned = append(planned, a.rows.resp.Protocol.Contrasts...)
	for _, c := range planned {
		m := main[c.Factor]
		if m == nil {
			a.note("contrast-not-told", "", prose.ContrastNotTold(a.plan, c.Name, c.Factor, a.rows.unit))
			continue
		}
		a.weightedContrast(m, c)
	}
}

func (a *analyst) weightedContrast(m *termMeans, c protocol.Contrast) {
	f := &a.plan.Factors[m.factors[0]]
	w := make([]float64, m.est.count())
	x := result.Contrast{Name: c.Name, Term: m.name, Estimate: result.NaN, SE: result.NaN, DF: result.NaN, SS: result.NaN, F: result.NaN, P: result.NaN,
		Lower: result.NaN, Upper: result.NaN, Planned: true, NumeratorDF: 1}
	ok := true
	for _, weight := range c.Weights {
		if weight.Value == 0 {
			continue
		}
		cell := -1
		for i := range m.cells {
			if f.Levels[m.cells[i][0]] == weight.Level {
				cell = i
			}
		}
		if cell < 0 || m.at[cell] < 0 {
			ok = false
			continue
		}
		w[m.at[cell]] += weight.Value
	}
	if ok {
		v, variance, df := m.est.contrast(w)
		ms := m.test.errorMS
		switch {
		case a.mx != nil:
			ms = math.NaN() // no sum of squares
		case !m.single(df):
			ms = math.NaN() // no sum of squares stands over one error
			a.note("no-single-error", m.name, prose.NoSingleError(a.plan, c.Name))
		}
		a.fillContrast(&x, v, variance, df, ms)
	}
	if !x.Estimate.Known() {
		a.note("not-estimable", m.name, prose.MeansNotEstimable(a.plan, m.name))
	}
	a.out.Contrasts = append(a.out.Contrasts, x)
}

// fillContrast completes a contrast with one degree of freedom; ms, NaN where there is none,
// is the mean square of its error.
func (a *analyst) fillContrast(x *result.Contrast, estimate, variance, df, ms float64) {
	x.Estimate, x.SE, x.DF = result.Number(estimate), result.Number(math.Sqrt(variance)), result.Number(df)
	if !(variance > 0) || !(df > 0) || ms == 0 {
		return
	}
	f := estimate * estimate / variance
	x.F, x.P = result.Number(f), result.Number(dist.FUpper(f, 1, df))
	x.SS = result.Number(f * ms)
	h := dist.TQuantile(a.alpha/2, df) * math.Sqrt(variance)
	x.Lower, x.Upper = result.Number(estimate-h), result.Number(estimate+h)
}

// summarize describes the values of experimental units by combination of treatments.
func (a *analyst) summarize() {
	var sizes []int
	for _, f := range a.factors {
		sizes = append(sizes, len(a.plan.Factors[f].Levels))
	}
	cells := 1
	for _, n := range sizes {
		cells *= n
		if cells > 10_000 {
			return
		}
	}
	values := make([][]float64, cells)
	rowsIn := make([]int, cells)
	for i := range a.at.y {
		c := 0
		for k := range a.factors {
			c = c*sizes[k] + a.present[k][a.classes[k].Level[i]]
		}
		values[c] = append(values[c], a.at.y[i])
		rowsIn[c] += a.at.of[i]
	}
	all := product(sizes)
	for c, levels := range all {
		s := result.Summary{Levels: result.Levels{}, N: rowsIn[c], Units: len(values[c]), Mean: result.NaN, SD: result.NaN, Min: result.NaN, Max: result.NaN}
		for k, f := range a.factors {
			s.Levels = append(s.Levels, result.FactorLevel{Factor: a.plan.Factors[f].Name, Level: a.plan.Factors[f].Levels[levels[k]]})
		}
		if v := values[c]; len(v) > 0 {
			m, lo, hi, ss := mean(v), v[0], v[0], 0.0
			for _, y := range v {
				lo, hi = math.Min(lo, y), math.Max(hi, y)
				ss += (y - m) * (y - m)
			}
			s.Mean, s.Min, s.Max = result.Number(m), result.Number(lo), result.Number(hi)
			if len(v) > 1 {
				s.SD = result.Number(math.Sqrt(ss / float64(len(v)-1)))
			}
		}
		a.out.Summary = append(a.out.Summary, s)
	}
}

func add(dst, v []float64, w float64) {
	for i := range dst {
		dst[i] += w * v[i]
	}
}
