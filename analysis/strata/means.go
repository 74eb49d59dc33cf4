package strata

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// Means are the means of a term, its cells in order with the last factor running fastest:
// equal weights over the levels of all other factors, units as they are. With one term, or
// cells of other factors equally replicated, they are the plain means of the rows.
//
// The effects of a term S are estimated in its stratum, with covariance ξ Q_S over its
// cells, and the grand mean with the variance of weighMean over n:
//
//	Q_S(i,j) = Σ over margins R of S (−1)^|S∖R| [R(i) = R(j)] / n_R(i)
//
// so that the covariance of two means is Σᵤ cᵤ ξᵤ with coefficients known from the counts.
type Means struct {
	Value []float64
	N     []int // rows of each cell

	a     *Analysis
	term  int
	level [][]int // level of each factor in each cell
	parts []part  // of the covariance
}

// part is what cells that agree in some factors of the term have in common: per stratum, a
// multiple of ξ for each combination of their levels.
type part struct {
	key  []int       // of each cell of the term: combination of the levels
	n    int         // combinations
	coef [][]float64 // of each unit, nil where it has none
}

// Means of a term.
func (a *Analysis) Means(term int) *Means {
	s := a.s
	t := s.terms[term]
	m := &Means{a: a, term: term, N: slices.Clone(s.reps[term])}
	cells := s.cells[term].N
	m.level = make([][]int, cells)
	for i := range m.level {
		m.level[i] = s.decode(t, i)
	}

	m.parts = make([]part, 1<<len(t))
	for set := range m.parts {
		p := part{key: make([]int, cells), n: 1, coef: make([][]float64, len(s.units))}
		for j, v := range t {
			if set>>j&1 == 0 {
				continue
			}
			p.n *= s.factors[v].N
			for i := range p.key {
				p.key[i] = p.key[i]*s.factors[v].N + m.level[i][j]
			}
		}
		m.parts[set] = p
	}
	m.Value = make([]float64, cells)
	for u, c := range s.mean {
		if c != 0 {
			m.parts[0].add(u, []float64{c / float64(s.n)})
		}
	}
	for o, other := range s.terms {
		if s.termDF(o) == 0 {
			continue
		}
		e, over := s.average(a.effect[o], other, t)
		p := m.parts[over]
		for i := range m.Value {
			m.Value[i] += e[p.key[i]]
		}
		m.covary(o)
	}
	for i := range m.Value {
		m.Value[i] = a.at + (a.mean + m.Value[i])
	}
	m.clean()
	return m
}

func (p *part) add(u int, coef []float64) {
	if p.coef[u] == nil {
		p.coef[u] = make([]float64, p.n)
	}
	for i, c := range coef {
		p.coef[u][i] += c
	}
}

// decode gives the level of each factor of a term in a cell.
func (s *Structure) decode(term []int, cell int) []int {
	out := make([]int, len(term))
	for j := len(term) - 1; j >= 0; j-- {
		n := s.factors[term[j]].N
		out[j] = cell % n
		cell /= n
	}
	return out
}

// average takes a table over the cells of the term from, averages it over the levels of
// the factors that to does not have, and gives it over the factors they share, named by
// the set of positions in to.
func (s *Structure) average(table []float64, from, to []int) (out []float64, set int) {
	n, all := 1, 1
	for j, v := range to {
		if slices.Contains(from, v) {
			set |= 1 << j
			n *= s.factors[v].N
		}
	}
	for _, v := range from {
		all *= s.factors[v].N
	}
	out = make([]float64, n)
	sums := make([]sum, n)
	for c, x := range table {
		key := 0
		for j, l := range s.decode(from, c) {
			if v := from[j]; slices.Contains(to, v) {
				key = key*s.factors[v].N + l
			}
		}
		sums[key].add(x)
	}
	for i := range out {
		out[i] = sums[i].value() / float64(all/n)
	}
	return out, set
}

// covary adds what the effects of a term bring to the covariance of the means: with M the
// levels averaged over, a margin R has (1/M²) Σ 1/n_R over them.
func (m *Means) covary(o int) {
	s := m.a.s
	term := s.terms[o]
	t := s.terms[m.term]
	u := s.stratum[o]
	for set := range 1 << len(term) {
		r := subset(term, set)
		sign := 1.0
		if (len(term)-len(r))%2 == 1 {
			sign = -1
		}
		if len(r) == 0 {
			m.parts[0].add(u, []float64{sign / float64(s.n)})
			continue
		}
		reps := s.reps[s.index(r)]
		inverse := make([]float64, len(reps))
		for c, n := range reps {
			inverse[c] = sign / float64(n)
		}
		h, over := s.average(inverse, r, t)
		for i := range h {
			h[i] *= float64(len(h)) / float64(len(reps))
		}
		m.parts[over].add(u, h)
	}
}

// index of the term with these factors.
func (s *Structure) index(factors []int) int {
	for t, term := range s.terms {
		if slices.Equal(term, factors) {
			return t
		}
	}
	panic("strata: no such term")
}

// clean drops what margins cancel but for rounding.
func (m *Means) clean() {
	var largest float64
	for _, p := range m.parts {
		for _, c := range p.coef {
			for _, v := range c {
				largest = math.Max(largest, math.Abs(v))
			}
		}
	}
	for _, p := range m.parts {
		for u, c := range p.coef {
			if c != nil && !slices.ContainsFunc(c, func(v float64) bool { return math.Abs(v) > 1e-13*largest }) {
				p.coef[u] = nil
			}
		}
	}
}

// Coefficients gives, for each unit, the multiple of its ξ in the variance of Σ wᵢ meanᵢ.
func (m *Means) Coefficients(w []float64) []float64 {
	if len(w) != len(m.Value) {
		panic("strata: weights and means differ in number")
	}
	out := make([]float64, len(m.a.s.units))
	size := 0.0
	for _, p := range m.parts {
		sums, abs := make([]float64, p.n), make([]float64, p.n)
		for i, k := range p.key {
			sums[k] += w[i]
			abs[k] += math.Abs(w[i])
		}
		for u, c := range p.coef {
			for k, v := range c {
				out[u] += v * sums[k] * sums[k]
				size = math.Max(size, math.Abs(v)*abs[k]*abs[k])
			}
		}
	}
	for u, c := range out {
		if math.Abs(c) <= 1e-12*size {
			out[u] = 0
		}
	}
	return out
}

// Cov is the covariance of two means, NaN where it draws on a stratum without error. It
// may be negative, unlike a variance.
func (m *Means) Cov(i, j int) float64 {
	var v float64
	for u, c := range m.coefficients(i, j) {
		if c != 0 {
			v += c * m.a.Strata[u].ErrorMS()
		}
	}
	return v
}

func (m *Means) coefficients(i, j int) []float64 {
	out := make([]float64, len(m.a.s.units))
	var size float64
	for _, p := range m.parts {
		if p.key[i] != p.key[j] {
			continue
		}
		for u, c := range p.coef {
			if c != nil {
				out[u] += c[p.key[i]]
				size = math.Max(size, math.Abs(c[p.key[i]]))
			}
		}
	}
	for u, c := range out {
		if math.Abs(c) <= 1e-12*size {
			out[u] = 0
		}
	}
	return out
}

// Estimate is a number with its variance and the degrees of freedom of that variance: those
// of the stratum where it draws on one, else Satterthwaite's. Both are NaN where a stratum
// it draws on has no error, or where the combination of mean squares is not positive.
type Estimate struct {
	Value, Variance, DF float64
}

// Mean of a cell.
func (m *Means) Mean(i int) Estimate {
	v, df := m.a.Combine(m.coefficients(i, i))
	return Estimate{Value: m.Value[i], Variance: v, DF: df}
}

// Difference is mean i less mean j.
func (m *Means) Difference(i, j int) Estimate {
	out := make([]float64, len(m.a.s.units))
	var size float64
	for _, p := range m.parts {
		ki, kj := p.key[i], p.key[j]
		if ki == kj {
			continue
		}
		for u, c := range p.coef {
			if c != nil {
				out[u] += c[ki] + c[kj]
				size = math.Max(size, math.Abs(c[ki])+math.Abs(c[kj]))
			}
		}
	}
	for u, c := range out {
		if math.Abs(c) <= 1e-12*size {
			out[u] = 0
		}
	}
	v, df := m.a.Combine(out)
	return Estimate{Value: m.Value[i] - m.Value[j], Variance: v, DF: df}
}

// Contrast is Σ wᵢ meanᵢ.
func (m *Means) Contrast(w []float64) Estimate {
	v, df := m.a.Combine(m.Coefficients(w))
	e := Estimate{Variance: v, DF: df}
	var s, weight sum
	for i, x := range w {
		s.add(x * (m.Value[i] - m.a.at))
		weight.add(x)
	}
	if e.Value = s.value(); math.Abs(weight.value()) > 1e-12 {
		e.Value += weight.value() * m.a.at
	}
	return e
}

// Combine estimates Σ cᵤ ξᵤ by the error mean squares.
func (a *Analysis) Combine(coef []float64) (variance, df float64) {
	ms, nu := make([]float64, len(coef)), make([]float64, len(coef))
	for u := range coef {
		ms[u], nu[u] = a.Strata[u].ErrorMS(), float64(a.Strata[u].ErrorDF)
	}
	return Satterthwaite(coef, ms, nu)
}

// Satterthwaite estimates Σ aᵢ·MSᵢ, with approximate degrees of freedom
//
//	ν = (Σ aᵢ MSᵢ)² / Σ (aᵢ MSᵢ)²/νᵢ
//
// The lists have equal length; entries with aᵢ = 0 are not looked at. With one entry ν is
// its own νᵢ exactly. Both results are NaN where an MS with aᵢ ≠ 0 has no degrees of freedom
// or the sum is negative; where all are zero ν is the smallest νᵢ.
//
// Source: F. E. Satterthwaite, Biometrics Bulletin 2 (1946) 110-114.
func Satterthwaite(a, ms, df []float64) (variance, nu float64) {
	var square float64
	used, smallest := 0, math.Inf(1)
	for i, c := range a {
		if c == 0 {
			continue
		}
		if !(df[i] > 0) || math.IsNaN(ms[i]) {
			return math.NaN(), math.NaN()
		}
		used++
		smallest = math.Min(smallest, df[i])
		v := c * ms[i]
		variance += v
		square += v * v / df[i]
	}
	switch {
	case used == 0:
		return math.NaN(), math.NaN()
	case used == 1 || square == 0:
		nu = smallest
	default:
		nu = variance * variance / square
	}
	if variance < 0 || used > 1 && square > 0 && variance == 0 {
		return math.NaN(), math.NaN()
	}
	return variance, nu
}

// SpreadHypothesis: contrasts draw on the errors of several strata, so that no F exists.
// Units is empty where they draw on none.
type SpreadHypothesis struct{ Units []int }

func (e SpreadHypothesis) Error() string {
	return fmt.Sprintf("strata: contrasts draw on the strata of units %v", e.Units)
}

// Test gives the sum of squares of the hypothesis that the contrasts, each a list of
// weights over the means, are all zero: with estimates h and covariance ξG,
//
//	SS = h′ G⁻ h   on rank G degrees of freedom.
//
// Contrasts that depend on others add nothing. The error is SpreadHypothesis.
func (m *Means) Test(contrasts [][]float64) (Line, error) {
	units := make([]bool, len(m.a.s.units))
	for _, w := range contrasts {
		for u, c := range m.Coefficients(w) {
			if c != 0 {
				units[u] = true
			}
		}
	}
	var in []int
	for u, yes := range units {
		if yes {
			in = append(in, u)
		}
	}
	if len(in) != 1 {
		return Line{}, SpreadHypothesis{Units: in}
	}
	u, q := in[0], len(contrasts)

	// G = Σ over parts of A diag(c) A′, A the weights summed over the part's combinations
	g := mat.NewSymDense(q, nil)
	h := make([]float64, q)
	for i, w := range contrasts {
		h[i] = m.Contrast(w).Value
	}
	for _, p := range m.parts {
		c := p.coef[u]
		if c == nil {
			continue
		}
		sums := make([]float64, q*p.n)
		for i, w := range contrasts {
			for cell, k := range p.key {
				sums[i*p.n+k] += w[cell]
			}
		}
		for i := range q {
			for j := i; j < q; j++ {
				v := g.At(i, j)
				for k, x := range c {
					v += x * sums[i*p.n+k] * sums[j*p.n+k]
				}
				g.SetSym(i, j, v)
			}
		}
	}
	for i := range q { // to unit variance, so that scales of weights do not matter
		scale := math.Sqrt(g.At(i, i))
		if !(scale > 0) {
			continue
		}
		h[i] /= scale
		for j := range q {
			if j == i {
				g.SetSym(i, i, 1)
			} else {
				g.SetSym(i, j, g.At(i, j)/scale)
			}
		}
	}
	out := Line{Stratum: u}
	var eigen mat.EigenSym
	if !eigen.Factorize(g, true) {
		return Line{}, SpreadHypothesis{Units: in}
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	values := eigen.Values(nil)
	var ss sum
	for i, l := range values {
		if l <= 1e-10*values[q-1] {
			continue
		}
		out.DF++
		var x float64
		for j := range q {
			x += vectors.At(j, i) * h[j]
		}
		ss.add(x * x / l)
	}
	out.SS = ss.value()
	return out, nil
}

// Partial tests a term by the equality of its means with equal weights over the levels of
// all other factors. With equal replication that is the term's line in the analysis; with
// proportional replication and an interaction it is not. Terms adjusted for all that do
// not contain them, or in sequence, have the lines of the analysis in any case.
func (a *Analysis) Partial(term int) (Line, error) {
	s := a.s
	line := a.Terms[term]
	if line.DF == 0 || s.fades(term) {
		return line, nil
	}
	m := a.Means(term)
	t := s.terms[term]
	var contrasts [][]float64
	for c := range m.Value {
		top := m.level[c]
		last := false
		for j, v := range t {
			last = last || top[j] == s.factors[v].N-1
		}
		if last {
			continue
		}
		// product over factors of (level − last level)
		w := make([]float64, len(m.Value))
		for set := range 1 << len(t) {
			at, sign := 0, 1.0
			for j, v := range t {
				l := top[j]
				if set>>j&1 == 1 {
					l, sign = s.factors[v].N-1, -sign
				}
				at = at*s.factors[v].N + l
			}
			w[at] += sign
		}
		contrasts = append(contrasts, w)
	}
	return m.Test(contrasts)
}

// fades tells whether the effects of every term that contains the given one average to
// nothing over the levels of its other factors: where replication does not depend on one
// of these, the sum over its levels is zero by construction.
func (s *Structure) fades(term int) bool {
	t := s.terms[term]
	for o, other := range s.terms {
		if len(other) <= len(t) || len(common(t, other)) < len(t) || s.termDF(o) == 0 {
			continue
		}
		even := false
		for j, v := range other {
			if slices.Contains(t, v) {
				continue
			}
			even = even || s.constantAlong(o, j)
		}
		if !even {
			return false
		}
	}
	return true
}

// constantAlong tells whether the replication of the cells of a term is the same at all
// levels of its j-th factor.
func (s *Structure) constantAlong(term, j int) bool {
	t := s.terms[term]
	step := 1
	for _, v := range t[j+1:] {
		step *= s.factors[v].N
	}
	n := s.factors[t[j]].N
	reps := s.reps[term]
	for c := range reps {
		if c/step%n > 0 && reps[c] != reps[c-step] {
			return false
		}
	}
	return true
}

// termDiagonal is the diagonal of the projection on the effects of a term in a cell.
func (s *Structure) termDiagonal(term, cell int) float64 {
	t := s.terms[term]
	level := s.decode(t, cell)
	var q float64
	for set := range 1 << len(t) {
		r := subset(t, set)
		sign := 1.0
		if (len(t)-len(r))%2 == 1 {
			sign = -1
		}
		n := s.n
		if len(r) > 0 {
			at := 0
			for j, v := range t {
				if set>>j&1 == 1 {
					at = at*s.factors[v].N + level[j]
				}
			}
			n = s.reps[s.index(r)][at]
		}
		q += sign / float64(n)
	}
	return q
}

// Component estimates the variance σ² of a unit, with its standard error, by the error mean
// squares: (ξᵤ − what finer units bring)/nᵤ. It may be negative. NaN where a stratum has no
// error or the classes of the unit differ in size.
func (a *Analysis) Component(unit int) (estimate, se float64) {
	s := a.s
	if s.size[unit] == 0 || s.twin[unit] >= 0 {
		return math.NaN(), math.NaN()
	}
	var square float64
	n := float64(s.size[unit])
	for v, c := range s.share(unit) {
		if c == 0 {
			continue
		}
		ms := a.Strata[v].ErrorMS()
		estimate += c * ms / n
		square += 2 * (c * ms / n) * (c * ms / n) / float64(a.Strata[v].ErrorDF)
	}
	return estimate, math.Sqrt(square)
}
