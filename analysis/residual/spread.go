package residual

import (
	"math"
	"slices"

	"penwright/analysis/dist"
	"penwright/analysis/linear"
	"penwright/protocol/factor"
)

// moments of the values of a group.
func moments(x []float64) (mean, ss float64) {
	for _, v := range x {
		mean += v - x[0]
	}
	mean = x[0] + mean/float64(len(x))
	for _, v := range x {
		ss += (v - mean) * (v - mean)
	}
	return mean, ss
}

// Bartlett tests equal variances of groups:
//
//	χ² = (ν log s² − Σ νᵢ log sᵢ²) / (1 + (Σ 1/νᵢ − 1/ν)/(3(k − 1)))
//
// on k − 1 degrees of freedom. Groups of one value are passed over. The error is ErrFew
// with fewer than two groups, ErrSpread when the values of a group do not vary. It is as
// sensitive to non-normal errors as to unequal variances.
//
// Source: M. S. Bartlett, Proc. Roy. Soc. A 160 (1937) 268-282.
func Bartlett(groups [][]float64) (Test, error) {
	var k int
	var nu, pooled, logs, inverse float64
	for _, g := range groups {
		if len(g) < 2 {
			continue
		}
		k++
		_, ss := moments(g)
		if !(ss > 0) {
			return Test{}, ErrSpread
		}
		v := float64(len(g) - 1)
		nu += v
		pooled += ss
		logs += v * math.Log(ss/v)
		inverse += 1 / v
	}
	if k < 2 {
		return Test{}, ErrFew
	}
	m := nu*math.Log(pooled/nu) - logs
	c := 1 + (inverse-1/nu)/float64(3*(k-1))
	t := Test{Statistic: math.Max(0, m/c), DF: k - 1}
	t.P = dist.ChiSquaredUpper(t.Statistic, float64(t.DF))
	return t, nil
}

// BrownForsythe tests equal variances of groups by the analysis of variance of the
// absolute deviations from the median of each group. Empty groups are passed over. The
// errors are ErrFew (fewer than two groups, or no group of two) and ErrSpread.
//
// Source: M. B. Brown & A. B. Forsythe, J. Amer. Statist. Assoc. 69 (1974) 364-367.
func BrownForsythe(groups [][]float64) (Test, error) {
	var n, k int
	var within, total float64
	var means, sizes []float64
	for _, g := range groups {
		if len(g) == 0 {
			continue
		}
		k++
		n += len(g)
		m := median(g)
		d := make([]float64, len(g))
		for i, v := range g {
			d[i] = math.Abs(v - m)
		}
		mean, ss := moments(d)
		within += ss
		total += mean * float64(len(g))
		means, sizes = append(means, mean), append(sizes, float64(len(g)))
	}
	if k < 2 || n == k {
		return Test{}, ErrFew
	}
	total /= float64(n)
	var between float64
	for i, m := range means {
		between += sizes[i] * (m - total) * (m - total)
	}
	if !(within > 1e-24*total*total*float64(n)) {
		return Test{}, ErrSpread
	}
	t := Test{DF: k - 1, ErrorDF: n - k}
	t.Statistic = between / float64(t.DF) / (within / float64(t.ErrorDF))
	t.P = dist.FUpper(t.Statistic, float64(t.DF), float64(t.ErrorDF))
	return t, nil
}

func median(x []float64) float64 {
	x = slices.Clone(x)
	slices.Sort(x)
	n := len(x)
	if n%2 == 1 {
		return x[n/2]
	}
	return x[n/2-1] + (x[n/2]-x[n/2-1])/2
}

// Groups splits values by the classes of a factor, empty classes included.
func Groups(x []float64, f factor.Factor) [][]float64 {
	if len(x) != f.Len() {
		panic("residual: values and factor differ in length")
	}
	out := make([][]float64, f.N)
	for i, g := range f.Level {
		out[g] = append(out[g], x[i])
	}
	return out
}

// Trend is the straight line of log standard deviation on log mean over groups.
type Trend struct {
	Slope  float64
	SE     float64 // NaN with two groups
	Power  float64 // 1 − slope: the power of the response that evens the spread; 0 is the logarithm
	Groups int
}

// SpreadOnMean fits the line, unweighted, over groups of two or more values that vary.
// The errors are ErrFew (fewer than two such groups), ErrSign (a mean is not positive) and
// ErrSpread (all means equal).
//
// Source: M. S. Bartlett, Biometrics 3 (1947) 39-52.
func SpreadOnMean(groups [][]float64) (Trend, error) {
	var x, y []float64
	for _, g := range groups {
		if len(g) < 2 {
			continue
		}
		mean, ss := moments(g)
		if !(ss > 0) {
			continue
		}
		if !(mean > 0) {
			return Trend{}, ErrSign
		}
		x = append(x, math.Log(mean))
		y = append(y, math.Log(ss/float64(len(g)-1))/2)
	}
	if len(x) < 2 {
		return Trend{}, ErrFew
	}
	mx, sxx := moments(x)
	my, syy := moments(y)
	if !(sxx > 1e-20) {
		return Trend{}, ErrSpread
	}
	var sxy float64
	for i := range x {
		sxy += (x[i] - mx) * (y[i] - my)
	}
	t := Trend{Slope: sxy / sxx, SE: math.NaN(), Groups: len(x)}
	t.Power = 1 - t.Slope
	if df := len(x) - 2; df > 0 {
		t.SE = math.Sqrt(math.Max(0, syy-sxy*sxy/sxx) / float64(df) / sxx)
	}
	return t, nil
}

// NonAdditivity is the test with one degree of freedom of Tukey for an additive model:
// the squares of the fitted values, adjusted for the model, explain what is left over. In
// a complete table of blocks by treatments they are the products of block and treatment
// effects; with plots lost, or in a square, the adjustment is by least squares. SS is that
// of the one degree of freedom. The errors are those of the fit, ErrFew (fewer than two
// error degrees of freedom), ErrSpread (nothing left over) and ErrAliased.
//
// Source: J. W. Tukey, Biometrics 5 (1949) 232-242; for any additive model G. A. Milliken &
// F. A. Graybill, J. Amer. Statist. Assoc. 65 (1970) 797-807 (from memory).
func NonAdditivity(m linear.Model) (t Test, ss float64, err error) {
	f, err := m.Fit()
	if err != nil {
		return Test{}, 0, err
	}
	if f.DF < 2 {
		return Test{}, 0, ErrFew
	}
	left, fitted := f.Residuals()
	q := make([]float64, len(fitted))
	var scale, size float64
	for i, v := range fitted {
		scale = math.Max(scale, math.Abs(v-f.Mean))
		size = math.Max(size, math.Abs(left[i]))
	}
	if !(size > 1e-12*scale) || !(f.RSS > 0) {
		return Test{}, 0, ErrSpread
	}
	if scale == 0 {
		return Test{}, 0, ErrAliased
	}
	for i, v := range fitted {
		q[i] = (v - f.Mean) / scale * ((v - f.Mean) / scale)
	}
	k := len(m.Covariates)
	m.Covariates = append(slices.Clone(m.Covariates), q)
	g, err := m.Fit()
	if err != nil {
		return Test{}, 0, err
	}
	slope := g.Slopes()
	if !slope.Estimable[k] {
		return Test{}, 0, ErrAliased
	}
	t = Test{DF: 1, ErrorDF: g.DF}
	t.Statistic = slope.Value[k] * slope.Value[k] / slope.Cov(k, k)
	t.P = dist.FUpper(t.Statistic, 1, float64(g.DF))
	return t, t.Statistic * g.MS(), nil
}
