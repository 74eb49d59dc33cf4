package analysis

import (
	"math"
)

// model is a fitted analysis as the parts after it see it: means of terms, hypotheses on
// them, residuals. Least squares and the analysis by strata both give one.
type model interface {
	// means gives the adjusted means of term k of the model.
	means(k int) estimates
	// test is the test of term k.
	test(k int) test
	// residuals gives fitted values and leverages of the rows, the residual df and mean square.
	residuals() residuals
}

// test is a test of a term against its error.
type test struct {
	df        int
	ss        float64 // NaN: not estimable, or no sum of squares stands over one error
	own       float64 // F itself where there is no sum of squares, as in a mixed model; else 0
	errorDF   float64
	errorMS   float64
	stratum   int // index of the unit whose variation is the error, -1 in a single table
	lost      int
	whole     bool // lost altogether
	estimable bool
}

func (t test) ms() float64 { return t.ss / float64(t.df) }

func (t test) f() float64 {
	if t.own > 0 {
		return t.own
	}
	if t.df == 0 || t.errorDF <= 0 || !(t.errorMS > 0) {
		return math.NaN()
	}
	return t.ms() / t.errorMS
}

// estimates are the means of a term, its levels in order with the last factor running
// fastest, as linear functions of what was observed.
type estimates interface {
	count() int
	value(i int) float64 // NaN: not estimable
	// contrast is Σ w·mean with its variance and the df of that variance; NaN where it
	// cannot be estimated.
	contrast(w []float64) (value, variance, df float64)
	// diff is the variance of mean i less mean j, and its df.
	diff(i, j int) (variance, df float64)
	// variance is that of mean i, and its df.
	variance(i int) (variance, df float64)
	// cov is the covariance of two means.
	cov(i, j int) float64
	// test is the hypothesis that contrasts of the means are all zero: its sum of squares
	// and df, to be held against the error of the term; or F with df of its own.
	test(contrasts [][]float64) test
}

// residuals are those of the smallest experimental units.
type residuals struct {
	fitted   []float64
	leverage []float64
	scale    []float64 // the SD of each row where they differ; nil: all have √ms
	df       int
	ms       float64
}
