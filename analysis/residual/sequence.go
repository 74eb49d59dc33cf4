package residual

import (
	"math"

	"penwright/analysis/dist"
)

// Runs counts the runs of signs of residuals in the order in which the rows were recorded,
// zeros left out. Statistic is the number of runs; P is twice the smaller tail, exact for
// random order of the given signs:
//
//	P(R = 2k)     = 2 C(m−1, k−1) C(n−1, k−1) / C(m+n, m)
//	P(R = 2k + 1) = (C(m−1, k) C(n−1, k−1) + C(m−1, k−1) C(n−1, k)) / C(m+n, m)
//
// with m residuals of one sign and n of the other. Few runs speak of drift, many of
// competition between neighbours. The error is ErrFew without both signs.
//
// Source: F. S. Swed & C. Eisenhart, Annals of Mathematical Statistics 14 (1943) 66-87.
func Runs(residual []float64) (Test, error) {
	m, n, runs := 0, 0, 0
	last := 0.0
	for _, e := range residual {
		if e == 0 || math.IsNaN(e) {
			continue
		}
		if e > 0 {
			m++
		} else {
			n++
		}
		if s := math.Copysign(1, e); s != last {
			runs++
			last = s
		}
	}
	if m == 0 || n == 0 {
		return Test{}, ErrFew
	}
	low, high := runsTails(runs, m, n)
	return Test{Statistic: float64(runs), P: math.Min(1, 2*math.Min(low, high))}, nil
}

// runsTails gives P(R ≤ r) and P(R ≥ r).
func runsTails(r, m, n int) (low, high float64) {
	choose := func(n, k int) float64 {
		if k < 0 || k > n {
			return math.Inf(-1)
		}
		a, _ := math.Lgamma(float64(n + 1))
		b, _ := math.Lgamma(float64(k + 1))
		c, _ := math.Lgamma(float64(n - k + 1))
		return a - b - c
	}
	all := choose(m+n, m)
	for x := 2; x <= 2*min(m, n)+1; x++ {
		k := x / 2
		p := 2 * math.Exp(choose(m-1, k-1)+choose(n-1, k-1)-all)
		if x%2 == 1 {
			p = math.Exp(choose(m-1, k)+choose(n-1, k-1)-all) + math.Exp(choose(m-1, k-1)+choose(n-1, k)-all)
		}
		if x <= r {
			low += p
		}
		if x >= r {
			high += p
		}
	}
	return low, high
}

// Lag is the correlation of residuals with their neighbours in recorded order, about
// their mean, and its two-sided P for random order by the normal approximation with
//
//	E = −1/n,  Var = (n − 2)²/(n²(n − 1))
//
// exact moments for independent normal values. Residuals of a fit with many parameters are
// somewhat more negative than that. The errors are ErrFew (below 4) and ErrSpread.
//
// Source: P. A. P. Moran, Biometrika 35 (1948) 255-260 (from memory, proven by simulation).
func Lag(residual []float64) (Test, error) {
	n := len(residual)
	if n < 4 {
		return Test{}, ErrFew
	}
	mean, ss := moments(residual)
	if !(ss > 0) {
		return Test{}, ErrSpread
	}
	var cross float64
	for i := 1; i < n; i++ {
		cross += (residual[i] - mean) * (residual[i-1] - mean)
	}
	x := float64(n)
	r := cross / ss
	z := (r + 1/x) * x * math.Sqrt(x-1) / (x - 2)
	return Test{Statistic: r, P: 2 * dist.NormalUpper(math.Abs(z))}, nil
}
