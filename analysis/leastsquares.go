package analysis

import (
	"math"

	"penwright/analysis/linear"
)

// leastSquares is a model fitted by least squares with all larger units fixed.
type leastSquares struct {
	fit        *linear.Fit
	tests      []linear.Test // of covariates, then of terms
	ms         float64       // error mean square, 0 where it is rounding
	covariates int
	aliased    map[int]linear.Alias // by term
}

func newLeastSquares(m linear.Model, adjustment linear.Adjustment) (*leastSquares, error) {
	f, err := m.Fit()
	if err != nil {
		return nil, err
	}
	x := &leastSquares{fit: f, tests: f.Tests(adjustment), covariates: len(m.Covariates), aliased: map[int]linear.Alias{}}
	for _, a := range f.Aliased() {
		if a.Kind == linear.Term {
			x.aliased[a.Index] = a
		}
	}
	return x, nil
}

func (x *leastSquares) test(k int) test {
	t := x.tests[x.covariates+k]
	out := test{df: t.DF, ss: t.SS, errorDF: float64(x.fit.DF), errorMS: x.ms, stratum: -1, lost: t.Lost, whole: t.DF == 0, estimable: t.Estimable}
	if !t.Estimable {
		out.ss = math.NaN()
	}
	return out
}

func (x *leastSquares) means(k int) estimates {
	return linearMeans{e: x.fit.Means(k), df: float64(x.fit.DF)}
}

func (x *leastSquares) residuals() residuals {
	_, fitted := x.fit.Residuals()
	return residuals{fitted: fitted, leverage: x.fit.Leverages(), df: x.fit.DF, ms: x.fit.MS()}
}

// linearMeans are adjusted means of least squares: one error, one df.
type linearMeans struct {
	e  *linear.Estimates
	df float64
}

func (m linearMeans) count() int           { return len(m.e.Value) }
func (m linearMeans) value(i int) float64  { return m.e.Value[i] }
func (m linearMeans) cov(i, j int) float64 { return m.e.Cov(i, j) }

func (m linearMeans) variance(i int) (float64, float64) { return m.e.Cov(i, i), m.df }

func (m linearMeans) diff(i, j int) (float64, float64) {
	v := m.e.Cov(i, i) + m.e.Cov(j, j) - 2*m.e.Cov(i, j)
	return math.Max(v, 0), m.df
}

func (m linearMeans) contrast(w []float64) (value, variance, df float64) {
	v, variance, ok := m.e.Contrast(w)
	if !ok {
		return math.NaN(), math.NaN(), m.df
	}
	return v, variance, m.df
}

func (m linearMeans) test(contrasts [][]float64) test {
	t := m.e.Hypothesis(contrasts)
	return test{ss: t.SS, df: t.DF}
}
