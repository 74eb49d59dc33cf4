package strata

import (
	"math"
	"slices"
)

// Analysis is a structure with a response. SS are in squared units of the response, per
// row.
type Analysis struct {
	Mean   float64 // of all rows
	Strata []Stratum
	Terms  []Line

	s      *Structure
	at     float64     // the response is held as y − at − mean
	mean   float64     // Mean − at
	error  [][]float64 // residual of each class of each unit
	effect [][]float64 // of each cell of each term, beyond its margins
}

// Stratum is the line of a unit in the analysis of variance: all of it, and what its terms
// leave.
type Stratum struct {
	DF      int
	SS      float64
	Terms   []int // margins before what they are margins of
	ErrorDF int
	ErrorSS float64
}

// ErrorMS estimates ξ of the stratum; NaN without error degrees of freedom.
func (s Stratum) ErrorMS() float64 {
	if s.ErrorDF <= 0 {
		return math.NaN()
	}
	return s.ErrorSS / float64(s.ErrorDF)
}

// Line is what a treatment term or contrasts have in the analysis of variance, to be tested
// over the error of one stratum.
type Line struct {
	Stratum int // unit
	DF      int
	SS      float64
}

// sum is a compensated sum (Neumaier 1974, from memory).
type sum struct{ s, c float64 }

func (a *sum) add(x float64) {
	t := a.s + x
	if math.Abs(a.s) >= math.Abs(x) {
		a.c += (a.s - t) + x
	} else {
		a.c += (x - t) + a.s
	}
	a.s = t
}

func (a *sum) value() float64 { return a.s + a.c }

// classMeans are the means of y over classes, 0 for an empty class. A negative class is
// passed over.
func classMeans(level []int32, n int, y []float64) []float64 {
	sums, count := make([]sum, n), make([]int, n)
	for i, c := range level {
		if c >= 0 {
			sums[c].add(y[i])
			count[c]++
		}
	}
	means := make([]float64, n)
	for c, k := range count {
		if k > 0 {
			means[c] = sums[c].value() / float64(k)
		}
	}
	return means
}

// Analyse divides the response, one finite value per row, into strata and terms. Vectors
// are divided, not sums of squares, and the first value is taken off all before anything
// else, so that a large common part costs no digits.
func (s *Structure) Analyse(y []float64) *Analysis {
	if len(y) != s.n {
		panic("strata: response and design differ in length")
	}
	a := &Analysis{
		s:      s,
		at:     y[0],
		Strata: make([]Stratum, len(s.units)),
		Terms:  make([]Line, len(s.terms)),
		error:  make([][]float64, len(s.units)),
		effect: make([][]float64, len(s.terms)),
	}
	d := make([]float64, s.n)
	var total sum
	for i, v := range y {
		d[i] = v - a.at
		total.add(d[i])
	}
	a.mean = total.value() / float64(s.n)
	a.Mean = a.at + a.mean
	for i := range d {
		d[i] -= a.mean
	}
	p := d
	if s.k > 1 {
		p = classMeans(s.point.Level, s.point.N, d)
		for i, c := range s.point.Level {
			d[i] -= p[c]
		}
	}
	for _, u := range s.order {
		if s.upper[u] {
			a.take(u, p)
		} else {
			a.take(u, d)
		}
	}
	return a
}

// take removes the stratum of unit u from e, which has a value for each point or row, and
// divides it among terms.
func (a *Analysis) take(u int, e []float64) {
	s := a.s
	f := s.units[u]
	v := classMeans(f.Level, f.N, e)
	for i, c := range f.Level {
		e[i] -= v[c]
	}
	if s.df[u] == 0 {
		clear(v)
	}
	counts := s.counts[u]
	st := Stratum{DF: s.df[u], Terms: slices.Clone(s.within[u]), ErrorDF: s.ErrorDF(u)}
	st.SS = squares(v, counts)
	for _, t := range s.within[u] {
		level := s.level[t]
		effect := a.cellMeans(t, v)
		for c, l := range level {
			if l >= 0 {
				v[c] -= effect[l]
			}
		}
		a.effect[t] = effect
		a.Terms[t] = Line{Stratum: u, DF: s.termDF(t), SS: squares(effect, s.reps[t])}
	}
	for t, at := range s.stratum {
		if at == u && a.effect[t] == nil {
			a.effect[t] = make([]float64, s.cells[t].N)
			a.Terms[t] = Line{Stratum: u}
		}
	}
	if st.ErrorDF == 0 {
		clear(v)
	}
	st.ErrorSS = squares(v, counts)
	a.error[u] = v
	a.Strata[u] = st
}

// cellMeans are the means over the cells of a term of v, given over the classes of its unit.
func (a *Analysis) cellMeans(t int, v []float64) []float64 {
	s := a.s
	if s.constant[t] {
		return classMeans(s.level[t], s.cells[t].N, v)
	}
	points := make([]float64, s.point.N)
	for i, c := range s.units[s.stratum[t]].Level {
		points[i] = v[c]
	}
	return classMeans(s.cells[t].Level, s.cells[t].N, points)
}

func squares(v []float64, counts []int) float64 {
	var ss sum
	for c, x := range v {
		ss.add(float64(counts[c]) * x * x)
	}
	return ss.value()
}

// Residuals are what the terms leave in a stratum, one for each class of the unit on the
// scale of its means, with what is needed to standardize them: on that scale MS is the
// error mean square over the rows of a class. Empty classes have NaN.
type Residuals struct {
	Value    []float64
	Leverage []float64
	MS       float64 // NaN without error degrees of freedom, or where classes differ in size
	DF       int     // of the error
	Rank     int     // classes less DF
}

// Residuals of the stratum of a unit. Those of the last unit are the response less what
// the whole model fits.
func (a *Analysis) Residuals(unit int) Residuals {
	s := a.s
	counts := s.counts[unit]
	r := Residuals{
		Value:    slices.Clone(a.error[unit]),
		Leverage: s.leverage(unit),
		MS:       a.Strata[unit].ErrorMS() / float64(s.size[unit]),
		DF:       a.Strata[unit].ErrorDF,
	}
	if s.size[unit] == 0 {
		r.MS = math.NaN()
	}
	for c, n := range counts {
		if n == 0 {
			r.Value[c], r.Leverage[c] = math.NaN(), math.NaN()
			continue
		}
		r.Rank++
	}
	r.Rank -= r.DF
	return r
}

// leverage is 1 − n·q for each class, q being the diagonal of the projection on the error
// of the stratum: by Möbius inversion of 1/n over units and over margins.
func (s *Structure) leverage(u int) []float64 {
	f := s.units[u]
	first := make([]int32, f.N) // an entry of each class
	for i := len(f.Level) - 1; i >= 0; i-- {
		first[f.Level[i]] = int32(i)
	}
	// diag[v] of W_v at those entries, for u and the units above it
	diag := make(map[int][]float64)
	for _, v := range s.order {
		if v != u && !slices.Contains(s.above[u], v) {
			continue
		}
		d := make([]float64, f.N)
		for c, i := range first {
			row := i
			if s.upper[v] && !s.upper[u] {
				row = s.point.Level[i]
			}
			if n := s.counts[v][s.units[v].Level[row]]; n > 0 {
				d[c] = 1/float64(n) - 1/float64(s.n)
			}
			for _, w := range s.above[v] {
				d[c] -= diag[w][c]
			}
		}
		diag[v] = d
	}
	q := diag[u]
	for _, t := range s.within[u] {
		cell := make([]float64, s.cells[t].N)
		for l := range cell {
			cell[l] = s.termDiagonal(t, l)
		}
		for c, l := range s.level[t] {
			if l >= 0 {
				q[c] -= cell[l]
			}
		}
	}
	for c := range q {
		q[c] = 1 - float64(s.counts[u][c])*q[c]
	}
	return q
}
