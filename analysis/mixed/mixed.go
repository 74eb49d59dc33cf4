// Package mixed fits linear models with several variances, where a trial is not balanced
// enough for an analysis by strata: residual maximum likelihood (Patterson & Thompson,
// Biometrika 58 (1971) 545-554) with the small-sample inference of Kenward & Roger,
// Biometrics 53 (1997) 983-997.
//
// The model of n rows is
//
//	y = Xβ + Σ Zᵤbᵤ + e,   var(y) = V(θ) = Σ σ²ᵤ ZᵤZᵤ′ + R(θ)
//
// Columns of X are products of factors, coded 0 and 1, and of a covariate; Zᵤ are the
// classes of a factor; R is the residual variance, or the covariance of repeated rows of
// one subject.
//
// No n × n matrix exists. V is split as D + UGU′, where D falls apart into blocks of rows
// (subjects, with all random terms that keep the blocks small), and the classes of the
// remaining random terms, q in all, are held densely:
//
//	V⁻¹ = D⁻¹ − D⁻¹U N U′D⁻¹,   P = D⁻¹ − D⁻¹B Ω B′D⁻¹,   B = [X U]
//
// where P = V⁻¹ − V⁻¹XΦX′V⁻¹ and Φ = (X′V⁻¹X)⁻¹. Blocks with the same pattern of classes and
// times are factorized once. Everything that the likelihood, its derivatives and the
// inference need are sums over blocks of products with D⁻¹, of size p + q.
//
// Variances are in squared units of y.
package mixed

import (
	"fmt"
	"math"

	"penwright/protocol/factor"
)

// Model is a response over n rows and what explains it. Slices over rows have length n
// and hold finite numbers.
type Model struct {
	Y       []float64
	Factors []factor.Factor // of the fixed part
	Parts   []Part          // of the fixed part, in order; an intercept stands before them
	Random  []Random
	Residual
}

// Part is a set of columns: one for each combination of levels of its factors, the last
// factor running fastest, holding Value where a row has these levels and 0 elsewhere.
type Part struct {
	Factors []int     // into Model.Factors; none: one column
	Value   []float64 // nil: 1 in every row
	At      float64   // the value at which means are taken; ignored where Value is nil
	// Weights of the levels of a part with one factor in means over them, adding up to one;
	// nil: equal.
	Weights []float64
}

// Random is a variance component: rows of one class share an effect.
type Random struct {
	Factor factor.Factor
	// Unbounded lets the component be negative as long as V is positive definite. It
	// then stands for the covariance of rows of one class, as an analysis by strata has
	// it, and keeps the test of what was given to the class from being taken over by
	// smaller units. Otherwise the component is held at zero where it would fall below.
	Unbounded bool
}

// Kind is the structure of the residual covariance matrix R.
type Kind int

// Structures of repeated rows j, k of one subject, at times tⱼ, tₖ, and their parameters.
const (
	// Independent rows: one variance, or one for each class of Group.
	Independent Kind = iota
	// HeterogeneousSymmetric: a variance for each time, one correlation.
	HeterogeneousSymmetric
	// Autoregressive: one variance, correlation ρ to the power of |tⱼ − tₖ|.
	Autoregressive
	// HeterogeneousAutoregressive: a variance for each time, correlation as before.
	HeterogeneousAutoregressive
	// Antedependence of order 1: a variance for each time, and a correlation for each two
	// neighbouring times; that of others is the product of those between.
	Antedependence
	// Unstructured: a variance for each time, then covariances of times (1,0), (2,0), (2,1) …
	Unstructured
)

// Residual is the covariance of what fixed and random parts leave.
type Residual struct {
	Kind  Kind
	Group factor.Factor // Independent only; no levels: one variance

	// The others: rows of one class of Subject are correlated; Time is the index of a
	// row's time into Times, at most one row of a subject each.
	Subject factor.Factor
	Time    []int32
	Times   []float64
}

// Limits on the size of a model.
const (
	MaxColumns = 2000 // fixed columns
	MaxLevels  = 3000 // classes of random terms that must be held densely
)

// NotFinite is the error of a number that is not finite.
type NotFinite struct {
	Row  int
	Part int // index of the part, or -1: the response
}

func (e NotFinite) Error() string {
	return fmt.Sprintf("mixed: row %d, part %d: not finite", e.Row, e.Part)
}

// TooLarge is the error of a model beyond MaxColumns or MaxLevels.
type TooLarge struct{ Columns, Levels int }

func (e TooLarge) Error() string {
	return fmt.Sprintf("mixed: %d columns, %d dense random levels", e.Columns, e.Levels)
}

// NoError is the error of a model whose fixed part leaves too few rows to estimate its
// variances: Left rows for Parameters of them.
type NoError struct{ Left, Parameters int }

func (e NoError) Error() string {
	return fmt.Sprintf("mixed: %d degrees of freedom for %d variances", e.Left, e.Parameters)
}

// Confounded is the error of a random term whose effects the fixed part takes up altogether,
// so that nothing is left to estimate its variance from.
type Confounded struct{ Random int }

func (e Confounded) Error() string {
	return fmt.Sprintf("mixed: random term %d lies in the fixed part", e.Random)
}

// NotConverged is the error of an iteration that found no maximum. Decrement is gᵀH⁻¹g in
// units of −2ℓ at the last point, which at a maximum is nearly zero.
type NotConverged struct {
	Iterations int
	Decrement  float64
	Theta      []float64
}

func (e NotConverged) Error() string {
	return fmt.Sprintf("mixed: no convergence after %d iterations (decrement %g)", e.Iterations, e.Decrement)
}

func (m *Model) check() error {
	for i, v := range m.Y {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return NotFinite{Row: i, Part: -1}
		}
	}
	for k, p := range m.Parts {
		for i, v := range p.Value {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return NotFinite{Row: i, Part: k}
			}
		}
	}
	return nil
}
