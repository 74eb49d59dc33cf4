package analysis

import (
	"fmt"
	"math"
	"slices"

	"penwright/analysis/compare"
	"penwright/analysis/dist"
	"penwright/analysis/prose"
	"penwright/analysis/result"
)

// trends fits polynomials over the levels of a quantitative factor.
func (a *analyst) trends(m *termMeans) {
	degree := a.plan.Protocol.Analysis.Trend
	if degree < 1 {
		return
	}
	f := &a.plan.Factors[m.factors[0]]
	ms, df := m.test.errorMS, m.test.errorDF
	if a.mx == nil && !(ms > 0) || !(df > 0) {
		return // the error of a mixed model is no mean square
	}
	var x []float64
	var cells, at []int
	for c := range m.cells {
		if m.known(c) {
			x = append(x, f.Values[m.cells[c][0]])
			cells, at = append(cells, c), append(at, m.at[c])
		}
	}
	if len(x) < 3 {
		return
	}
	if a.mx != nil {
		a.mixedTrends(m, x, cells, at, degree)
		return
	}
	for _, i := range at[1:] {
		if _, d := m.est.diff(at[0], i); !m.single(d) {
			a.note("no-single-error", m.name, prose.NoSingleError(a.plan, m.name))
			return
		}
	}
	steps, rest, restDF, ok := compare.Trends(x, m.relative(cells), func(i, j int) float64 { return m.est.cov(at[i], at[j]) / ms }, degree)
	if !ok {
		return
	}
	for k, s := range steps {
		c := result.Contrast{Name: m.name + ": " + degreeName(k+1), Term: m.name, Planned: true, NumeratorDF: 1, F: result.NaN, P: result.NaN, SS: result.NaN, Lower: result.NaN, Upper: result.NaN}
		a.fillContrast(&c, s.Estimate, s.Variance*ms, df, ms)
		c.SS = result.Number(s.SS)
		a.out.Contrasts = append(a.out.Contrasts, c)
	}
	if restDF > 0 {
		fr := rest / float64(restDF) / ms
		a.out.Contrasts = append(a.out.Contrasts, result.Contrast{Name: m.name + ": lack of fit", Term: m.name, Estimate: result.NaN, SE: result.NaN, DF: result.Number(df),
			SS: result.Number(rest), F: result.Number(fr), P: result.Number(dist.FUpper(fr, float64(restDF), df)), Lower: result.NaN, Upper: result.NaN, Planned: true, NumeratorDF: restDF})
	}
}

// mixedTrends fits polynomials over the adjusted means of a mixed model, in order and by
// generalized least squares, over times by least squares. Each coefficient is a combination of the means, and is judged
// as such, with df of its own; no sums of squares stand.
func (a *analyst) mixedTrends(m *termMeans, x []float64, cells, at []int, degree int) {
	scale, _ := m.est.variance(at[0])
	if !(scale > 0) {
		return
	}
	cov := func(i, j int) float64 { return m.est.cov(at[i], at[j]) / scale }
	if a.over != nil && m.factors[0] == a.over.factor {
		// Weighting by the correlation of times would let what a low degree leaves over
		// change its coefficient; the contrast of the means is the same with any correlation.
		cov = func(i, j int) float64 {
			if i == j {
				return 1
			}
			return 0
		}
	}
	weights := make([][]float64, 0, degree)
	for i := range x {
		unit := make([]float64, len(x))
		unit[i] = 1
		steps, _, _, ok := compare.Trends(x, unit, cov, degree)
		if !ok {
			return
		}
		for k, s := range steps {
			if i == 0 {
				weights = append(weights, make([]float64, m.est.count()))
			}
			weights[k][at[i]] = s.Estimate
		}
	}
	line := func(name string, degree int) result.Contrast {
		return result.Contrast{Name: m.name + ": " + name, Term: m.name, Planned: true, NumeratorDF: degree, Estimate: result.NaN, SE: result.NaN, DF: result.NaN,
			F: result.NaN, P: result.NaN, SS: result.NaN, Lower: result.NaN, Upper: result.NaN}
	}
	for k, w := range weights {
		c := line(degreeName(k+1), 1)
		estimate, variance, df := m.est.contrast(w)
		a.fillContrast(&c, estimate, variance, df, math.NaN())
		a.out.Contrasts = append(a.out.Contrasts, c)
	}
	polynomials := orthogonalPolynomials(x)
	if len(weights)+1 >= len(polynomials) {
		return
	}
	var rest [][]float64
	for _, p := range polynomials[len(weights)+1:] {
		w := make([]float64, m.est.count())
		for i, v := range p {
			w[at[i]] = v
		}
		rest = append(rest, w)
	}
	a.judged(line("lack of fit", len(rest)), m.judge(rest))
}

// judged adds a contrast of several df with its test.
func (a *analyst) judged(c result.Contrast, t test) {
	if t.df < 1 {
		return
	}
	f := t.f()
	c.NumeratorDF, c.DF, c.F, c.P = t.df, result.Number(t.errorDF), result.Number(f), result.Number(upperF(f, t.df, t.errorDF))
	a.out.Contrasts = append(a.out.Contrasts, c)
}

// mixedInteractionTrends tests, in a mixed model, for each degree of polynomials orthogonal
// over the levels whether its coefficient is the same at all levels of the other factors,
// and then what is left over.
func (a *analyst) mixedInteractionTrends(m *termMeans, factor string, degree int, polynomials [][]float64, products func([][]float64) [][]float64) {
	add := func(name string, from, to int) {
		if rows := products(polynomials[from:to]); len(rows) > 0 {
			a.judged(result.Contrast{Name: m.name + ": " + factor + " " + name, Term: m.name, Planned: true, Estimate: result.NaN, SE: result.NaN,
				SS: result.NaN, Lower: result.NaN, Upper: result.NaN}, m.judge(rows))
		}
	}
	for k := 1; k <= degree; k++ {
		add(degreeName(k), k, k+1)
	}
	add("lack of fit", degree+1, len(polynomials))
}

func degreeName(degree int) string {
	names := [...]string{"linear", "quadratic", "cubic", "quartic", "quintic"}
	if degree <= len(names) {
		return names[degree-1]
	}
	return fmt.Sprintf("degree %d", degree)
}

// maxTrendContrasts is the df of an interaction up to which it is parted by trends.
const maxTrendContrasts = 200

// interactionTrends parts an interaction by the trends of its factor at position v, in
// order: how the coefficient of each degree differs between the levels of the others, and
// what is left over. With H(k) the hypothesis that the factor's part beyond polynomials of
// degree below k is the same at all levels of the others, degree k explains what H(k) has
// beyond H(k+1), so that all add up to the interaction.
func (a *analyst) interactionTrends(m *termMeans, v int) {
	degree := a.plan.Protocol.Analysis.Trend
	ms, df := m.test.errorMS, m.test.errorDF
	if degree < 1 || a.mx == nil && !(ms > 0) || !(df > 0) {
		return
	}
	// Levels with a cell, of each factor; every cell of them must have a mean.
	at := map[string]int{}
	levels := make([][]int, len(m.factors))
	for c, cell := range m.cells {
		if m.at[c] < 0 {
			continue
		}
		if !m.known(c) {
			return // a note says that means are not there
		}
		at[fmt.Sprint(cell)] = m.at[c]
		for i, l := range cell {
			if !slices.Contains(levels[i], l) {
				levels[i] = append(levels[i], l)
			}
		}
	}
	of, contrasts := 1, 1
	for i := range levels {
		slices.Sort(levels[i])
		contrasts *= len(levels[i]) - 1
		if i != v {
			of *= len(levels[i])
		}
	}
	f := &a.plan.Factors[m.factors[v]]
	n := len(levels[v])
	if n < 3 || len(at) != n*of || contrasts < 1 || contrasts > maxTrendContrasts {
		return
	}
	var x []float64
	for _, l := range levels[v] {
		x = append(x, f.Values[l])
	}
	polynomials := orthogonalPolynomials(x)
	degree = min(degree, len(polynomials)-1)
	// products of polynomials with level-less-last of the others.
	products := func(polynomials [][]float64) (rows [][]float64) {
		for _, p := range polynomials {
			parts := make([][][]float64, len(levels))
			for i := range levels {
				if i == v {
					parts[i] = [][]float64{p}
					continue
				}
				for l := range len(levels[i]) - 1 {
					w := make([]float64, len(levels[i]))
					w[l], w[len(w)-1] = 1, -1
					parts[i] = append(parts[i], w)
				}
			}
			var sizes []int
			for _, p := range parts {
				sizes = append(sizes, len(p))
			}
			for _, pick := range product(sizes) {
				row := make([]float64, m.est.count())
				for _, cell := range m.cells {
					to, there := at[fmt.Sprint(cell)]
					if !there {
						continue
					}
					w := 1.0
					for i, l := range cell {
						w *= parts[i][pick[i]][slices.Index(levels[i], l)]
					}
					row[to] = w
				}
				rows = append(rows, row)
			}
		}
		return rows
	}
	if a.mx != nil {
		a.mixedInteractionTrends(m, f.Name, degree, polynomials, products)
		return
	}
	// hypothesis is H(k).
	hypothesis := func(k int) (ss float64, df int) {
		rows := products(polynomials[min(k, len(polynomials)):])
		if len(rows) == 0 {
			return 0, 0
		}
		t := m.est.test(rows)
		return t.ss, t.df
	}
	ss, left := hypothesis(1)
	if left == 0 {
		a.note("no-single-error", m.name, prose.NoSingleError(a.plan, m.name))
		return
	}
	line := func(name string, ss float64, d int) {
		if d < 1 {
			return
		}
		fr := ss / float64(d) / ms
		a.out.Contrasts = append(a.out.Contrasts, result.Contrast{Name: m.name + ": " + f.Name + " " + name, Term: m.name, Estimate: result.NaN, SE: result.NaN, DF: result.Number(df),
			SS: result.Number(ss), F: result.Number(fr), P: result.Number(dist.FUpper(fr, float64(d), df)), Lower: result.NaN, Upper: result.NaN, Planned: true, NumeratorDF: d})
	}
	for k := 1; k <= degree; k++ {
		after, d := hypothesis(k + 1)
		line(degreeName(k), math.Max(0, ss-after), left-d)
		ss, left = after, d
	}
	line("lack of fit", ss, left)
}

// orthogonalPolynomials over points, of degree 0 and up, of length 1, by the three-term
// recurrence with orthogonalization against all before (G. E. Forsythe, J. Soc. Indust.
// Appl. Math. 5 (1957) 74-88, from memory). There are as many as there are points that differ.
func orthogonalPolynomials(x []float64) [][]float64 {
	lo, hi := slices.Min(x), slices.Max(x)
	p := make([]float64, len(x))
	for i := range p {
		p[i] = 1
	}
	var out [][]float64
	for range x {
		before := math.Sqrt(dot(p, p))
		for range 2 {
			for _, q := range out {
				add(p, q, -dot(p, q))
			}
		}
		length := math.Sqrt(dot(p, p))
		if length <= 1e-9*before {
			break
		}
		next := make([]float64, len(x))
		for i := range p {
			p[i] /= length
			next[i] = p[i] * (2*(x[i]-lo)/(hi-lo) - 1)
		}
		out = append(out, p)
		p = next
	}
	return out
}

func dot(a, b []float64) float64 {
	s := 0.0
	for i, v := range a {
		s += v * b[i]
	}
	return s
}
