package linear

import "math"

// Estimates are linear functions of a fit: means of a term, or coefficients. Value is NaN
// where Estimable is false, that is where the function is not a combination of rows.
type Estimates struct {
	Value     []float64
	Estimable []bool

	fit   *Fit
	rows  []float64 // functions × p: coefficients of β, the absorbed part included
	level float64   // multiple of the absorbed level in each function: 1 for means, else 0
	w     []float64 // functions × pivots: R₁⁻ᵀ of the row; zero where not estimable
}

// Means are the adjusted means of a term, its levels in order with the last factor
// running fastest: equal weights over the levels of all other factors and over the
// classes of nuisance factors, covariates at their mean over the rows, aliased ones left out,
// time at the centre of the trend (Searle, Speed & Milliken 1980). Classes whose own trend does not determine
// a level at that time are left out of the average; Unsupported counts them.
func (f *Fit) Means(term int) *Estimates {
	m := &f.model
	t := m.Terms[term]
	k := 1
	for _, v := range t {
		k *= m.Factors[v].N
	}
	rows := make([]float64, k*f.p)
	level := make([]int32, len(m.Factors))
	for i := range k {
		rest := i
		for a := len(t) - 1; a >= 0; a-- {
			n := m.Factors[t[a]].N
			level[t[a]] = int32(rest % n)
			rest /= n
		}
		row := rows[i*f.p : (i+1)*f.p]
		copy(row, f.nuisance)
		for _, b := range f.blocks {
			if b.kind == Term && b.to > b.from && within(m.Terms[b.index], t) {
				m.termCodes(row[b.from:b.to], b.index, level)
			}
		}
		for j := range row {
			row[j] -= f.ux[j]
		}
		f.dropCovariates(row)
	}
	return f.estimates(rows, k, 1)
}

// dropCovariates makes a mean what it is without the covariates that are aliased: they
// follow from nuisance factors or other covariates, and would only take from it a level to
// be estimable at.
func (f *Fit) dropCovariates(row []float64) {
	var w []float64
	for _, b := range f.blocks {
		if b.kind != Covariate || f.row[b.from] >= 0 {
			continue
		}
		if w == nil {
			w = make([]float64, len(f.pivot))
			for i, j := range f.pivot {
				w[i] = row[j]
			}
			f.forward(w)
		}
		row[b.from] = 0
		for i, v := range w {
			row[b.from] += f.r[i*f.p+b.from] * v
		}
	}
}

// Unsupported is the number of classes of the trend's unit that enter no mean.
func (f *Fit) Unsupported() int { return f.unsupported }

// within tells whether the ascending list a is part of the ascending list b.
func within(a, b []int) bool {
	i := 0
	for _, v := range b {
		if i < len(a) && a[i] == v {
			i++
		}
	}
	return i == len(a)
}

// Column says what a coefficient belongs to: class Level of a nuisance factor against the
// average of all, a covariate, or levels of a term (effect codes: the last level of each
// factor has minus the sum of the others).
type Column struct {
	Kind  Kind
	Index int   // into Nuisance, Covariates or Terms
	Level []int // of the nuisance factor (compacted), or of each factor of the term
}

// Columns describes the coefficients in order.
func (f *Fit) Columns() []Column {
	var out []Column
	for _, b := range f.blocks {
		for j := range b.to - b.from {
			c := Column{Kind: b.kind, Index: b.index}
			switch b.kind {
			case Nuisance:
				c.Level = []int{j}
			case Term:
				t := f.model.Terms[b.index]
				c.Level = make([]int, len(t))
				rest := j
				for a := len(t) - 1; a >= 0; a-- {
					n := f.model.Factors[t[a]].N - 1
					c.Level[a] = rest % n
					rest /= n
				}
			case slope:
				continue
			}
			out = append(out, c)
		}
	}
	return out
}

// Coefficients are the coefficients of Columns. A covariate's is its slope, in units of y
// per unit of the covariate. One that depends on a choice among aliased columns is not
// estimable.
func (f *Fit) Coefficients() *Estimates {
	rows := make([]float64, f.p*f.p)
	for _, b := range f.blocks {
		for j := b.from; j < b.to; j++ {
			rows[j*f.p+j] = 1
			if b.kind == Covariate {
				rows[j*f.p+j] = 1 / f.places[b.index].scale
			}
		}
	}
	return f.estimates(rows, f.p, 0)
}

// Slopes are the slopes of the covariates.
func (f *Fit) Slopes() *Estimates {
	k := len(f.places)
	rows := make([]float64, k*f.p)
	for _, b := range f.blocks {
		if b.kind == Covariate {
			rows[b.index*f.p+b.from] = 1 / f.places[b.index].scale
		}
	}
	return f.estimates(rows, k, 0)
}

func (f *Fit) estimates(rows []float64, k int, level float64) *Estimates {
	e := &Estimates{
		Value:     make([]float64, k),
		Estimable: make([]bool, k),
		fit:       f,
		rows:      rows,
		level:     level,
		w:         make([]float64, k*len(f.pivot)),
	}
	for i := range k {
		w := e.w[i*len(f.pivot) : (i+1)*len(f.pivot)]
		e.Estimable[i] = f.express(w, rows[i*f.p:(i+1)*f.p]) && (level == 0 || f.based)
		if !e.Estimable[i] {
			clear(w)
			e.Value[i] = math.NaN()
			continue
		}
		e.Value[i] = e.value(rows[i*f.p:(i+1)*f.p], level)
	}
	return e
}

func (e *Estimates) value(row []float64, level float64) float64 {
	f := e.fit
	var s sum
	for j, v := range row {
		s.add(v * f.beta[j])
	}
	if level != 0 {
		s.add(level * f.uy)
		return level*f.at + s.value()
	}
	return s.value()
}

// express sets w = R₁⁻ᵀl over the pivot columns and tells whether l, given over all
// columns, is a combination of the rows of the model: the aliased columns must follow from
// the others, l₂ = (R₁⁻¹R₂)′l₁ = R₂′w.
func (f *Fit) express(w, l []float64) bool {
	var size float64
	for i, j := range f.pivot {
		w[i] = l[j]
	}
	for j, v := range l {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
		if f.norm[j] > 0 {
			size = math.Max(size, math.Abs(v)/f.norm[j])
		}
	}
	f.forward(w)
	if len(f.pivot) == f.p {
		return true
	}
	for j, v := range l {
		if f.row[j] >= 0 {
			continue
		}
		for i := range f.pivot {
			v -= f.r[i*f.p+j] * w[i]
		}
		if f.norm[j] == 0 {
			if v != 0 {
				return false
			}
			continue
		}
		if math.Abs(v)/f.norm[j] > 1e-8*size {
			return false
		}
	}
	return true
}

// Cov is the covariance of functions i and j, NaN where one is not estimable or there is
// no error.
func (e *Estimates) Cov(i, j int) float64 {
	if !e.Estimable[i] || !e.Estimable[j] {
		return math.NaN()
	}
	k := len(e.fit.pivot)
	v := e.level * e.level * e.fit.uu
	a, b := e.w[i*k:(i+1)*k], e.w[j*k:(j+1)*k]
	for l := range a {
		v += a[l] * b[l]
	}
	return v * e.fit.MS()
}

// Contrast is Σ wᵢ·valueᵢ with its variance. It may be estimable where the single
// functions are not.
func (e *Estimates) Contrast(w []float64) (value, variance float64, estimable bool) {
	row, level := e.combine(w)
	f := e.fit
	x := make([]float64, len(f.pivot))
	if !f.express(x, row) || level != 0 && !f.based {
		return math.NaN(), math.NaN(), false
	}
	v := level * level * f.uu
	for _, a := range x {
		v += a * a
	}
	return e.value(row, level), v * f.MS(), true
}

func (e *Estimates) combine(w []float64) (row []float64, level float64) {
	if len(w) != len(e.Value) {
		panic("linear: weights and functions differ in number")
	}
	p := e.fit.p
	row = make([]float64, p)
	var size float64
	for i, a := range w {
		if a == 0 {
			continue
		}
		level += a * e.level
		size += math.Abs(a * e.level)
		for j, v := range e.rows[i*p : (i+1)*p] {
			row[j] += a * v
		}
	}
	if math.Abs(level) <= 1e-8*size { // a contrast, up to rounding of its weights
		level = 0
	}
	return row, level
}
