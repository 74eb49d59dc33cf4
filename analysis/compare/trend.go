package compare

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// Trend is one step of polynomials fitted to means in order.
type Trend struct {
	Estimate float64 // coefficient of the highest power, response units per factor unit to that power
	Variance float64 // of the estimate, per unit of error variance
	SS       float64 // what the step explains, in squared response units
}

// Trends fits polynomials of degree 1 … degree to the means m at the levels x by
// generalized least squares, each after those before it, and gives what is left over.
//
// cov is the covariance of the means per unit of error variance; a part common to all
// means does not matter. Where the means are adjusted ones, the sums of squares of all
// steps and of the rest add up to that of the equality of the means, since that too is
// the generalized sum of squares of the means about a constant. ok is false when the
// covariance is singular. There are fewer steps where x has too few distinct levels.
//
// Source: A. C. Aitken, Proc. Roy. Soc. Edinb. 55 (1935) 42-48 (from memory); Gram-Schmidt
// on whitened powers.
func Trends(x, m []float64, cov func(i, j int) float64, degree int) (steps []Trend, rest float64, restDF int, ok bool) {
	t := len(x)
	if t == 0 {
		return nil, 0, 0, false
	}
	degree = min(degree, t-1)
	top := 0.0
	c := mat.NewSymDense(t, nil)
	for i := range t {
		for j := i; j < t; j++ {
			v := cov(i, j)
			if math.IsNaN(v) {
				return nil, 0, 0, false
			}
			c.SetSym(i, j, v)
			top = math.Max(top, math.Abs(v))
		}
	}
	// A constant added to every covariance leaves contrasts as they are and makes the
	// matrix positive definite also where the variance of the grand mean, a difference of
	// mean squares, came out small or below zero.
	for i := range t {
		for j := i; j < t; j++ {
			c.SetSym(i, j, c.At(i, j)+top)
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(c) {
		return nil, 0, 0, false
	}
	var l mat.TriDense
	chol.LTo(&l)
	white := func(v []float64) []float64 {
		out := make([]float64, t)
		for i := range t {
			s := v[i]
			for k := range i {
				s -= l.At(i, k) * out[k]
			}
			out[i] = s / l.At(i, i)
		}
		return out
	}
	// Levels are centred and scaled; the leading coefficient only feels the scale.
	mean, scale := 0.0, 0.0
	for _, v := range x {
		mean += v / float64(t)
	}
	for _, v := range x {
		scale = math.Max(scale, math.Abs(v-mean))
	}
	if scale == 0 {
		scale = 1
	}
	ref := m[0]
	y := make([]float64, t)
	for i := range y {
		y[i] = m[i] - ref
	}
	y = white(y)
	var basis [][]float64
	power := make([]float64, t)
	for i := range power {
		power[i] = 1
	}
	for k := 0; k <= degree; k++ {
		q := white(power)
		// Twice is enough (Giraud, Langou & Rozložník 2005, from memory).
		for range 2 {
			for _, b := range basis {
				add(q, b, -dot(q, b))
			}
		}
		r := math.Sqrt(dot(q, q))
		if r <= 1e-9*math.Sqrt(dot(white(power), white(power))) {
			degree = k - 1 // the distinct levels carry no higher power
			break
		}
		for i := range q {
			q[i] /= r
		}
		z := dot(q, y)
		add(y, q, -z)
		if k > 0 {
			s := math.Pow(scale, float64(k))
			steps = append(steps, Trend{Estimate: z / r / s, Variance: 1 / (r * r * s * s), SS: z * z})
		}
		basis = append(basis, q)
		for i := range power {
			power[i] *= (x[i] - mean) / scale
		}
	}
	return steps, dot(y, y), t - 1 - degree, true
}

func dot(a, b []float64) float64 {
	s := 0.0
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

func add(dst, v []float64, w float64) {
	for i := range dst {
		dst[i] += w * v[i]
	}
}
