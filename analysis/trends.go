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
	if !(ms > 0) || !(df > 0) {
		return
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
	if degree < 1 || !(ms > 0) || !(df > 0) {
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
	// hypothesis is H(k): products of polynomials from degree k and level-less-last of others.
	hypothesis := func(k int) (ss float64, df int) {
		var rows [][]float64
		for _, p := range polynomials[min(k, len(polynomials)):] {
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
		if len(rows) == 0 {
			return 0, 0
		}
		return m.est.test(rows)
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
