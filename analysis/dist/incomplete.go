package dist

import "math"

const epsilon = 0x1p-52

// mostTerms ends a series or fraction that does not settle, with NaN. They take some ten
// times the square root of the lesser parameter, so degrees of freedom above 1e10 (for F,
// on both sides) may be refused.
const mostTerms = 1e6

// stirling returns the error of Stirling's formula,
//
//	ln Γ(a) − (a − ½) ln a + a − ½ ln 2π
//
// for a > 0, to about 1e-16 absolute.
//
// Source: asymptotic series, Abramowitz & Stegun (1964) 6.1.41, after
// raising a by the recurrence of Γ.
func stirling(a float64) float64 {
	var s float64
	for ; a < 12; a++ {
		s += (a+0.5)*math.Log1p(1/a) - 1
	}
	r := 1 / (a * a)
	return s + (1.0/12-r*(1.0/360-r*(1.0/1260-r*(1.0/1680-r*(1.0/1188-r*691.0/360360)))))/a
}

// deviance returns a ln(a/m) + m − a for a, m > 0, without the cancellation that
// the formula has when m is near a.
//
// Source: C. Loader, Fast and Accurate Computation of Binomial Probabilities (2000).
func deviance(a, m float64) float64 {
	if math.Abs(a-m) >= 0.1*(a+m) {
		return a*math.Log(a/m) + m - a
	}
	// a ln(a/m) with a/m = (1+v)/(1−v), expanded in v.
	v := (a - m) / (a + m)
	s := (a - m) * v
	term := 2 * a * v
	for j := 3.0; ; j += 2 {
		term *= v * v
		next := s + term/j
		if next == s || math.IsNaN(next) {
			return next
		}
		s = next
	}
}

// lnBetaDensity returns ln(xᵃ yᵇ / B(a, b)), y = 1 − x, in a form that loses no
// digits when a and b are large and the terms nearly cancel.
func lnBetaDensity(a, b, x, y float64) float64 {
	n := a + b
	return 0.5*(math.Log(a)+math.Log(b/n)-math.Log(2*math.Pi)) +
		stirling(n) - stirling(a) - stirling(b) - deviance(a, n*x) - deviance(b, n*y)
}

// lnGammaDensity returns ln(xᵃ e⁻ˣ / Γ(a)).
func lnGammaDensity(a, x float64) float64 {
	return 0.5*math.Log(a/(2*math.Pi)) - stirling(a) - deviance(a, x)
}

// betaRatio returns Iₓ(a, b) B(a, b) / (xᵃ yᵇ) for x ≤ a/(a+b), where the continued
// fraction converges fast and its terms do not cancel.
//
// Source: A. R. DiDonato & A. H. Morris, ACM Trans. Math. Software 18 (1992) 360,
// continued fraction for the incomplete beta ratio; evaluated from the front
// (Lentz, Applied Optics 15 (1976) 668).
func betaRatio(a, b, x, y float64) float64 {
	lambda := a - (a+b)*x // = (a+b)y − b; from the smaller of x and y it loses nothing
	if y < x {
		lambda = (a+b)*y - b
	}
	c := a * (lambda + 1) / (a + 1)
	h, d := c, 0.0
	for m := 1.0; m <= mostTerms; m++ {
		s := a + 2*m - 1
		alpha := (a + m - 1) / s * ((a + b + m - 1) / s) * m * (b - m) * x * x
		beta := m + m*(b-m)*x/s + (a+m)/(s+2)*(lambda+1+m*(1+y))
		d = 1 / (beta + alpha*d)
		c = beta + alpha/c
		delta := c * d
		h *= delta
		if !(math.Abs(delta-1) > 2*epsilon) { // NaN ends it too
			return 1 / h
		}
	}
	return math.NaN()
}

// betaTails returns Iₓ(a, b) and 1 − Iₓ(a, b), the smaller with full relative accuracy.
// y is 1 − x, given apart because one of the two may be tiny.
func betaTails(a, b, x, y float64) (lower, upper float64) {
	switch {
	case x <= 0:
		return 0, 1
	case y <= 0:
		return 1, 0
	case math.Min(a, b) > mostTerms*mostTerms:
		return math.NaN(), math.NaN()
	}
	if (a+b)*y >= b {
		lower = math.Min(1, math.Exp(lnBetaDensity(a, b, x, y))*betaRatio(a, b, x, y))
		return lower, 1 - lower
	}
	upper = math.Min(1, math.Exp(lnBetaDensity(a, b, x, y))*betaRatio(b, a, y, x))
	return 1 - upper, upper
}

// gammaLowerRatio returns γ(a, x) / (xᵃ e⁻ˣ) by its power series
// (Abramowitz & Stegun 1964, 6.5.29).
func gammaLowerRatio(a, x float64) float64 {
	term := 1 / a
	sum := term
	for n := 1.0; n <= mostTerms; n++ {
		term *= x / (a + n)
		sum += term
		if !(term > sum*epsilon/4) {
			return sum
		}
	}
	return math.NaN()
}

// gammaUpperRatio returns Γ(a, x) / (xᵃ e⁻ˣ) for x ≥ a by Legendre's continued fraction
// (Abramowitz & Stegun 1964, 6.5.31, even part).
func gammaUpperRatio(a, x float64) float64 {
	beta := x + 1 - a
	c := beta
	h, d := beta, 0.0
	for n := 1.0; n <= mostTerms; n++ {
		alpha := n * (a - n)
		beta += 2
		d = 1 / (beta + alpha*d)
		c = beta + alpha/c
		delta := c * d
		h *= delta
		if !(math.Abs(delta-1) > 2*epsilon) { // NaN ends it too
			return 1 / h
		}
	}
	return math.NaN()
}

// gammaTails returns P(a, x) and Q(a, x), the smaller with full relative accuracy.
func gammaTails(a, x float64) (lower, upper float64) {
	switch {
	case x <= 0:
		return 0, 1
	case math.IsInf(x, 1):
		return 1, 0
	case a > mostTerms*mostTerms:
		return math.NaN(), math.NaN()
	}
	if x <= a {
		lower = math.Min(1, math.Exp(lnGammaDensity(a, x))*gammaLowerRatio(a, x))
		return lower, 1 - lower
	}
	upper = math.Min(1, math.Exp(lnGammaDensity(a, x))*gammaUpperRatio(a, x))
	return 1 - upper, upper
}
