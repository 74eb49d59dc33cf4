package compare

import (
	"math"

	"penwright/analysis/dist"
)

// Contrast is a planned linear combination of estimates.
type Contrast struct {
	Estimate, SE, DF float64 // SE in the unit of the estimate
	T, F, P          float64 // F = t² on 1 and DF; P is two-sided
}

// NewContrast returns the contrast Σ wᵢ mᵢ of the estimates m with its test against zero.
//
//	SE² = Σᵢ Σⱼ wᵢ wⱼ cov(i, j)
//
// cov is the covariance of two estimates, df the degrees of freedom of its variance
// (+Inf allowed). Estimates of zero weight may be NaN and are not asked for. Whether the
// weights sum to zero is the caller's to judge. The sum of squares of the contrast is F
// times the mean square of error. T is NaN where SE and the estimate are both zero.
func NewContrast(weights, estimates []float64, cov func(i, j int) float64, df float64) Contrast {
	if len(weights) != len(estimates) {
		panic("compare: weights and estimates differ in number")
	}
	c := Contrast{DF: df}
	var variance float64
	for i, w := range weights {
		if w == 0 {
			continue
		}
		c.Estimate += w * estimates[i]
		for j, v := range weights[:i] {
			if v != 0 {
				variance += 2 * w * v * cov(i, j)
			}
		}
		variance += w * w * cov(i, i)
	}
	c.SE = math.Sqrt(math.Max(0, variance))
	c.T = c.Estimate / c.SE
	c.F = c.T * c.T
	c.P = dist.TTwoSided(c.T, df)
	return c
}

// Trend returns the weights of orthogonal polynomial contrasts of degree 1, 2, … up to
// degree over the levels of a quantitative factor, spaced in any way.
//
// Row d−1 applied to means of replication[i] values gives the leading coefficient, in
// response units per level unit to the power d, of the polynomial of degree d fitted to them
// by least squares; so polynomials are fitted in order, and in balanced data the sums of
// squares add up. There are fewer rows if the distinct levels of positive replication do
// not carry the degree.
//
// Source: three-term recurrence, G. E. Forsythe, J. Soc. Indust. Appl. Math. 5 (1957) 74.
func Trend(levels, replication []float64, degree int) [][]float64 {
	n := len(levels)
	if len(replication) != n {
		panic("compare: levels and replication differ in number")
	}
	distinct := map[float64]bool{}
	var total, sum float64
	low, high := math.Inf(1), math.Inf(-1)
	for i, x := range levels {
		if replication[i] > 0 {
			distinct[x] = true
			total += replication[i]
			sum += replication[i] * x
			low, high = math.Min(low, x), math.Max(high, x)
		}
	}
	degree = min(degree, len(distinct)-1)
	if degree < 1 {
		return nil
	}
	inner := func(p, q []float64) float64 {
		var s float64
		for i, r := range replication {
			if r > 0 {
				s += r * p[i] * q[i]
			}
		}
		return s
	}
	// In z = (x − mean)/range, which keeps powers near one.
	z := make([]float64, n)
	for i, x := range levels {
		z[i] = (x - sum/total) / (high - low)
	}
	one := make([]float64, n)
	for i := range one {
		one[i] = 1
	}
	basis := [][]float64{one}
	var rows [][]float64
	scale := 1.0
	for d := 1; d <= degree; d++ {
		// z times the last polynomial, made orthogonal to all before: the polynomials stay monic,
		// and a second pass removes what rounding left.
		last := basis[d-1]
		p := make([]float64, n)
		for i := range p {
			p[i] = z[i] * last[i]
		}
		for range 2 {
			for _, b := range basis {
				c := inner(p, b) / inner(b, b)
				for i := range p {
					p[i] -= c * b[i]
				}
			}
		}
		basis = append(basis, p)
		scale *= high - low
		size := inner(p, p)
		row := make([]float64, n)
		for i, r := range replication {
			if r > 0 {
				row[i] = r * p[i] / size / scale
			}
		}
		rows = append(rows, row)
	}
	return rows
}
