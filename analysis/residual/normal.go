package residual

import (
	"math"
	"math/rand/v2"
	"slices"

	"penwright/analysis/dist"
)

// ShapiroWilk tests the normality of n values, 3 to 5000, in any order: W and the
// upper tail of its transformation to a normal variable. The errors are ErrFew, ErrMany
// and ErrSpread. Residuals are taken as they are, as is common practice.
//
// Source: P. Royston, Applied Statistics 44 (1995) 547-551, algorithm R94 (constants from
// memory, proven by the values of the tests).
func ShapiroWilk(x []float64) (Test, error) {
	n := len(x)
	switch {
	case n < 3:
		return Test{}, ErrFew
	case n > 5000:
		return Test{}, ErrMany
	}
	x = slices.Clone(x)
	slices.Sort(x)
	at := x[n/2]
	var mean, ss float64
	for i := range x {
		x[i] -= at
		mean += x[i]
	}
	mean /= float64(n)
	for _, v := range x {
		ss += (v - mean) * (v - mean)
	}
	scale := math.Max(math.Abs(x[0]), math.Abs(x[n-1]))
	if math.IsNaN(ss) || !(ss > 0) || x[n-1]-x[0] <= 1e-14*math.Max(scale, math.Abs(at)) {
		return Test{}, ErrSpread
	}
	a := royston(n)
	var b float64
	for i, v := range a {
		b += v * (x[n-1-i] - x[i])
	}
	w := math.Min(1, b*b/ss)
	return Test{Statistic: w, P: royP(w, n)}, nil
}

// royston gives the weights of the differences x₍n₎ − x₍1₎, x₍n−1₎ − x₍2₎ …
func royston(n int) []float64 {
	a := make([]float64, n/2)
	if n == 3 {
		a[0] = math.Sqrt2 / 2
		return a
	}
	var mm float64 // Σm² over all n
	for i := range a {
		a[i] = dist.NormalQuantile((float64(i+1) - .375) / (float64(n) + .25))
		mm += 2 * a[i] * a[i]
	}
	u := 1 / math.Sqrt(float64(n))
	length := math.Sqrt(mm)
	first := poly(u, 0, .221157, -.147981, -2.071190, 4.434685, -2.706056) + a[0]/length
	fixed := 1
	var factor float64
	var second float64
	if n > 5 {
		fixed = 2
		second = poly(u, 0, .042981, -.293762, -1.752461, 5.682633, -3.582633) + a[1]/length
		factor = math.Sqrt((mm - 2*a[0]*a[0] - 2*a[1]*a[1]) / (1 - 2*first*first - 2*second*second))
	} else {
		factor = math.Sqrt((mm - 2*a[0]*a[0]) / (1 - 2*first*first))
	}
	a[0] = first
	if fixed == 2 {
		a[1] = second
	}
	for i := fixed; i < len(a); i++ {
		a[i] /= factor
	}
	return a
}

// royP is the P value of W.
func royP(w float64, n int) float64 {
	if n == 3 {
		return math.Max(0, 6/math.Pi*(math.Asin(math.Sqrt(w))-math.Asin(math.Sqrt(.75))))
	}
	y := math.Log1p(-w)
	if math.IsInf(y, -1) {
		return 1
	}
	x := float64(n)
	var m, s float64
	if n <= 11 {
		g := poly(x, -2.273, .459)
		if y >= g {
			return 0
		}
		y = -math.Log(g - y)
		m = poly(x, .5440, -.39978, .025054, -6.714e-4)
		s = math.Exp(poly(x, 1.3822, -.77857, .062767, -.0020322))
	} else {
		x = math.Log(x)
		m = poly(x, -1.5861, -.31082, -.083751, .0038915)
		s = math.Exp(poly(x, -.4803, -.082676, .0030302))
	}
	return dist.NormalUpper((y - m) / s)
}

func poly(x float64, c ...float64) float64 {
	var v float64
	for i := len(c) - 1; i >= 0; i-- {
		v = v*x + c[i]
	}
	return v
}

// Envelope is what the sorted values of a normal quantile plot are held against: for the
// i-th smallest of n its normal score and a band.
type Envelope struct{ Score, Lower, Upper []float64 }

// scores are the normal scores (i − ⅜)/(n + ¼) of Blom (1958).
func scores(n int) []float64 {
	s := make([]float64, n)
	for i := range n / 2 {
		s[i] = -dist.NormalQuantile((float64(i+1) - .375) / (float64(n) + .25))
		s[n-1-i] = -s[i]
	}
	return s
}

// OrderStatistics gives the band that holds each order statistic of n independent
// standard normal values with probability level, from the beta distribution of its
// uniform rank: Beta(i, n + 1 − i).
func OrderStatistics(n int, level float64) Envelope {
	e := Envelope{Score: scores(n), Lower: make([]float64, n), Upper: make([]float64, n)}
	tail := (1 - level) / 2
	for i := range n {
		a, b := float64(i+1), float64(n-i)
		// X ~ Beta(a, b), X/(1−X)·b/a ~ F(2a, 2b); low tail by symmetry
		low := dist.FQuantile(tail, 2*b, 2*a) // of (1−X)/X·a/b
		high := dist.FQuantile(tail, 2*a, 2*b)
		e.Lower[i] = -dist.NormalQuantile(a / (a + b*low))
		e.Upper[i] = dist.NormalQuantile(b / (b + a*high))
	}
	return e
}

// Simulated gives the band that holds each sorted value with probability level when the
// errors of a model are normal: residuals sets dst to the standardized residuals that the
// model leaves of the response z. It allows for what a fit does to residuals, which the
// order statistics of independent values do not (Atkinson 1981, from memory). Draws come
// from ChaCha8 keyed with seed; with 199 draws and level .95 the fifth smallest and largest
// are the limits.
func Simulated(n, draws int, level float64, seed [32]byte, residuals func(dst, z []float64)) Envelope {
	if draws < 1 {
		panic("residual: no draws")
	}
	r := rand.New(rand.NewChaCha8(seed))
	z, dst := make([]float64, n), make([]float64, n)
	at := make([][]float64, n)
	for i := range at {
		at[i] = make([]float64, draws)
	}
	for d := range draws {
		for i := range z {
			z[i] = r.NormFloat64()
		}
		residuals(dst, z)
		slices.Sort(dst)
		for i, v := range dst {
			at[i][d] = v
		}
	}
	k := int((1-level)/2*float64(draws+1) + 1e-9)
	k = max(1, min(k, (draws+1)/2))
	e := Envelope{Score: scores(n), Lower: make([]float64, n), Upper: make([]float64, n)}
	for i, v := range at {
		slices.Sort(v)
		e.Lower[i], e.Upper[i] = v[k-1], v[draws-k]
	}
	return e
}
