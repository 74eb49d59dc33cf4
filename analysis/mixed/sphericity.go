package mixed

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"penwright/analysis/dist"
)

// Sphericity says how far the covariance of k repeated records is from one in which all
// differences of two records have the same variance, as a split plot in time supposes.
type Sphericity struct {
	GreenhouseGeisser float64 // ε̂, by which numerator and denominator df are multiplied
	HuynhFeldt        float64 // ε̃, at most 1
	W, ChiSquared     float64 // of Mauchly; NaN where df < k − 1
	DF                int
	P                 float64
}

// Sphere computes it from residuals of complete subjects, one row a subject, k columns, left
// by a model between subjects with df residual degrees of freedom.
//
// With M the covariance of k − 1 orthonormal contrasts, p = k − 1: ε̂ = (tr M)²/(p tr M²)
// (Greenhouse & Geisser, Psychometrika 24 (1959) 95-112), ε̃ = ((df + 1)pε̂ − 2)/(p(df − pε̂))
// (Huynh & Feldt, Journal of Educational Statistics 1 (1976) 69-82, as corrected by Lecoutre
// 1991), W = |M|/(tr M/p)ᵖ (Mauchly, Annals of Mathematical Statistics 11 (1940) 204-209), its
// P by Box's expansion to the second term (from memory).
func Sphere(residuals [][]float64, df int) Sphericity {
	k := len(residuals[0])
	p := k - 1
	// Helmert contrasts of length 1.
	m := mat.NewSymDense(p, nil)
	for _, r := range residuals {
		c := make([]float64, p)
		sum := r[0]
		for j := 1; j < k; j++ {
			c[j-1] = (sum - float64(j)*r[j]) / math.Sqrt(float64(j)*float64(j+1))
			sum += r[j]
		}
		for i := range p {
			for j := i; j < p; j++ {
				m.SetSym(i, j, m.At(i, j)+c[i]*c[j]/float64(df))
			}
		}
	}
	trace, square := 0.0, 0.0
	for i := range p {
		trace += m.At(i, i)
		for j := range p {
			square += m.At(i, j) * m.At(i, j)
		}
	}
	n, q := float64(df), float64(p)
	out := Sphericity{W: math.NaN(), ChiSquared: math.NaN(), P: math.NaN(), DF: p*(p+1)/2 - 1}
	out.GreenhouseGeisser = trace * trace / (q * square)
	out.HuynhFeldt = math.Min(1, ((n+1)*q*out.GreenhouseGeisser-2)/(q*(n-q*out.GreenhouseGeisser)))
	if !(n > q*out.GreenhouseGeisser) {
		out.HuynhFeldt = 1
	}
	var ch mat.Cholesky
	if df < p || p < 2 || !ch.Factorize(m) {
		return out
	}
	out.W = math.Exp(ch.LogDet() - q*math.Log(trace/q))
	rho := 1 - (2*q*q+q+2)/(6*q*n)
	out.ChiSquared = -n * rho * math.Log(out.W)
	second := (q + 2) * (q - 1) * (q - 2) * (2*q*q*q + 6*q*q + 3*q + 2) / (288 * q * q * n * n * rho * rho)
	f := float64(out.DF)
	first := dist.ChiSquaredUpper(out.ChiSquared, f)
	out.P = first + second*(dist.ChiSquaredUpper(out.ChiSquared, f+4)-first)
	return out
}
