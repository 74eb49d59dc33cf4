// Package linear fits fixed-effect models by least squares where a design is not
// orthogonal: units lost, treatments unequally combined, covariates, incomplete blocks
// taken as fixed, a time trend of each animal's own.
//
// The model of a row is
//
//	y = nuisance effects + own trend of its unit + covariates + treatment terms + error
//
// Columns are made from factors, never from a formula. The nuisance factor with most
// classes is absorbed, with the trend of its classes if there is one: every column and y
// are made orthogonal to it class by class, which is exact (Frisch & Waugh 1933; Lovell
// 1963, from memory). The other columns are reduced by Householder transformations, a
// block of rows at a time, so that no n × p matrix exists. Columns are taken in the order
// nuisance, covariates, terms as written; one that depends on those before it is aliased.
//
// Rows alike in all factors, times and covariates are replaced by their mean, weighted by
// their number; what they differ among themselves is error.
//
// Notation: n rows, p columns beside the absorbed ones, β their coefficients. SS and
// variances are in squared units of y.
package linear

import (
	"fmt"
	"math"

	"penwright/protocol/factor"
)

// Tolerance is the length of a column, relative to its length before adjustment, at or
// below which what the columns before it leave of it is taken for rounding: the column
// is aliased. Columns of designs are small integers, for which the ratio is either below
// about 1e-14 or, with a million rows, above about 1e-4.
const Tolerance = 1e-9

// MaxColumns is the greatest number of columns beside the absorbed ones.
const MaxColumns = 3000

// Model is a response over n rows and what explains it. All slices over rows have length
// n and hold finite numbers; rows with a missing value are left out by the caller.
type Model struct {
	Y []float64

	// Nuisance factors are additive: blocks, rows, columns, periods. Empty classes are
	// ignored.
	Nuisance []factor.Factor

	Trend      *Trend
	Covariates [][]float64

	// Factors are the treatment factors, with N the full number of levels. A level
	// without a row makes every mean that averages over it not estimable: where a level
	// is lost as a whole the caller renumbers first.
	Factors []factor.Factor

	// Terms are lists of indices into Factors, each ascending, a main effect or an
	// interaction, in the order in which they are written.
	Terms [][]int
}

// Trend gives each class of Unit an intercept and a polynomial of Order in Time of its
// own. Unit need not stand among the nuisance factors too.
type Trend struct {
	Unit   factor.Factor
	Time   []float64
	Order  int     // ≥ 1
	Centre float64 // the time at which means are taken
}

// NoRows is the error of a model without rows.
type NoRows struct{}

func (NoRows) Error() string { return "linear: no rows" }

// NotFinite is the error of a number that is not finite.
type NotFinite struct {
	Row       int
	Covariate int // index of the covariate, or -1: the response; -2: the time
}

func (e NotFinite) Error() string {
	return fmt.Sprintf("linear: row %d, covariate %d: not finite", e.Row, e.Covariate)
}

// TooWide is the error of a model with more than MaxColumns columns.
type TooWide struct{ Columns int }

func (e TooWide) Error() string {
	return fmt.Sprintf("linear: %d columns", e.Columns)
}

// Fit is a fitted model. It keeps the slices of the model and does not change them.
type Fit struct {
	N    int     // rows
	Rank int     // of the whole model, absorbed part included
	DF   int     // N − Rank, of the error
	RSS  float64 // residual sum of squares
	Mean float64 // of y over the rows

	model  Model
	blocks []block // columns, in order
	p      int
	places []place  // of each covariate
	level  []int32  // of each treatment factor, room for fill
	extra  [][2]int // covariate k × term, columns beside the model's, for EqualSlopes

	at     float64 // y is held as y − at
	absorb factor.Factor
	points points
	local  local

	norm  []float64 // length of each column before adjustment
	pivot []int     // columns that are not aliased, ascending
	row   []int     // row[j]: position of column j in pivot, or -1
	r     []float64 // len(pivot) × p: the staircase
	c     []float64 // the response in the same coordinates
	beta  []float64 // p, 0 where aliased

	// A mean is at + uy + (l − ux)·β with variance (uu + that of the second part):
	// the absorbed classes' mean with equal weights.
	ux          []float64
	uy, uu      float64
	nuisance    []float64 // part of l in the columns of the nuisance factors
	based       bool      // some absorbed class has an estimable level
	unsupported int
}

// Kind says what a column of the model stands for.
type Kind int

// Kinds of columns, in their order in the model.
const (
	Nuisance Kind = iota
	Covariate
	Term
	slope // covariate × term
)

// block is a run of columns of one source.
type block struct {
	kind     Kind
	index    int // into Nuisance, Covariates or Terms of the model; of a slope, into extra
	from, to int
}

// Fit fits the model. The error is NoRows, NotFinite or TooWide. A model that leaves no
// error (DF 0) is a fit all the same; its variances are NaN.
func (m Model) Fit() (*Fit, error) { return m.fit(nil) }

func (m Model) fit(extra [][2]int) (*Fit, error) {
	n := len(m.Y)
	m.check()
	if n == 0 {
		return nil, NoRows{}
	}
	for i, v := range m.Y {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, NotFinite{Row: i, Covariate: -1}
		}
	}
	for k, x := range m.Covariates {
		for i, v := range x {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, NotFinite{Row: i, Covariate: k}
			}
		}
	}
	if m.Trend != nil {
		for i, v := range m.Trend.Time {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, NotFinite{Row: i, Covariate: -2}
			}
		}
	}
	f := &Fit{N: n, model: m, extra: extra, level: make([]int32, len(m.Factors))}
	f.chooseAbsorbed()
	f.layColumns()
	if f.p > MaxColumns {
		return nil, TooWide{Columns: f.p}
	}
	f.collapse()
	f.prepareLocal()
	f.reduce()
	f.solve()
	return f, nil
}

// check panics on what only a wrong program can hand in.
func (m Model) check() {
	n := len(m.Y)
	for _, f := range m.Nuisance {
		if f.Len() != n {
			panic("linear: nuisance factor and response differ in length")
		}
	}
	for _, f := range m.Factors {
		if f.Len() != n {
			panic("linear: treatment factor and response differ in length")
		}
	}
	for _, x := range m.Covariates {
		if len(x) != n {
			panic("linear: covariate and response differ in length")
		}
	}
	if t := m.Trend; t != nil {
		if len(t.Time) != n || t.Unit.Len() != n {
			panic("linear: trend and response differ in length")
		}
		if t.Order < 1 {
			panic("linear: order of a trend below 1")
		}
	}
	for _, t := range m.Terms {
		if len(t) == 0 {
			panic("linear: term without factors")
		}
		for i, v := range t {
			if v < 0 || v >= len(m.Factors) || i > 0 && v <= t[i-1] {
				panic("linear: term is not an ascending list of factors")
			}
		}
	}
}

// chooseAbsorbed takes the unit of the trend, else the nuisance factor with most classes,
// else the overall mean.
func (f *Fit) chooseAbsorbed() {
	m := f.model
	f.absorb = factor.Universe(f.N)
	if m.Trend != nil {
		f.absorb = m.Trend.Unit.Compact()
		return
	}
	for _, g := range m.Nuisance {
		if c := g.Compact(); c.N > f.absorb.N {
			f.absorb = c
		}
	}
}

// layColumns fixes the order of the columns. A nuisance factor coarser than the absorbed
// one adds nothing and gets none.
func (f *Fit) layColumns() {
	m := &f.model
	add := func(kind Kind, index, width int) {
		f.blocks = append(f.blocks, block{kind: kind, index: index, from: f.p, to: f.p + width})
		f.p += width
	}
	compact := make([]factor.Factor, len(m.Nuisance))
	for i, g := range m.Nuisance {
		compact[i] = g.Compact()
		if width := compact[i].N - 1; width > 0 && !factor.Finer(f.absorb, compact[i]) {
			add(Nuisance, i, width)
		} else {
			add(Nuisance, i, 0)
		}
	}
	m.Nuisance = compact
	for k := range m.Covariates {
		add(Covariate, k, 1)
	}
	for t := range m.Terms {
		add(Term, t, m.width(t))
	}
	for e, pair := range f.extra {
		add(slope, e, m.width(pair[1]))
	}
	for _, x := range m.Covariates {
		f.places = append(f.places, locate(x))
	}
}

// width is the number of columns of a term: the product of levels less one. It stops
// growing beyond MaxColumns.
func (m Model) width(t int) int {
	w := 1
	for _, v := range m.Terms[t] {
		w *= max(m.Factors[v].N-1, 0)
		if w > MaxColumns {
			return MaxColumns + 1
		}
	}
	return w
}

// place is where the values of a variable lie: their mean is at + mean, scale the root
// mean square about it. Values are taken from at, one of them, before anything else, so
// that a large common part costs no digits.
type place struct{ at, mean, scale float64 }

func locate(x []float64) place {
	p := place{at: x[0]}
	var s sum
	for _, v := range x {
		s.add(v - p.at)
	}
	p.mean = s.value() / float64(len(x))
	var q sum
	for _, v := range x {
		e := (v - p.at) - p.mean
		q.add(e * e)
	}
	p.scale = math.Sqrt(q.value() / float64(len(x)))
	return p
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
