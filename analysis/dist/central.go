package dist

import (
	"math"

	"gonum.org/v1/gonum/mathext"

	"penwright/analysis/solve"
)

// manyDF is where degrees of freedom are as good as infinite: the tails differ by less
// than 1e-14 of themselves down to 1e-300.
const manyDF = 1e20

// NormalUpper returns P(Z > z) for a standard normal Z.
func NormalUpper(z float64) float64 { return 0.5 * math.Erfc(z/math.Sqrt2) }

// NormalQuantile returns z with P(Z > z) = upperP.
func NormalQuantile(upperP float64) float64 {
	switch {
	case !(upperP >= 0 && upperP <= 1):
		return math.NaN()
	case upperP == 0:
		return math.Inf(1)
	case upperP == 1:
		return math.Inf(-1)
	case upperP > 0.5:
		return -NormalQuantile(1 - upperP) // exact: 1 − p is, for p in [½, 1]
	}
	z := -mathext.NormalQuantile(upperP)
	// One step of Newton's method on the logarithm of the tail.
	u := NormalUpper(z)
	density := math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
	if u == 0 || density == 0 {
		return z
	}
	return z + u/density*math.Log(u/upperP)
}

// TUpper returns P(T > t) for Student's t on df degrees of freedom.
//
//	P(T > t) = ½ Iₓ(df/2, ½), x = df/(df + t²), t ≥ 0
//
// (Abramowitz & Stegun 1964, 26.7.1). At least 12 digits for P down to 1e-300.
func TUpper(t, df float64) float64 {
	switch {
	case math.IsNaN(t) || !(df > 0):
		return math.NaN()
	case df > manyDF:
		return NormalUpper(t)
	case t < 0:
		return 1 - TUpper(-t, df)
	case math.IsInf(t, 1):
		return 0
	}
	if t > 1e100*math.Sqrt(df) {
		// t² may overflow; there the leading term of the tail is exact.
		lnx := math.Log(df) - 2*math.Log(t)
		a := df / 2
		lnBeta := -lnBetaDensity(a, 0.5, 0.5, 0.5) - (a+0.5)*math.Ln2
		return 0.5 * math.Exp(a*lnx-math.Log(a)-lnBeta)
	}
	n := df + t*t
	x, _ := betaTails(df/2, 0.5, df/n, t*t/n)
	return x / 2
}

// TTwoSided returns P(|T| > |t|).
func TTwoSided(t, df float64) float64 { return 2 * TUpper(math.Abs(t), df) }

// TQuantile returns t with P(T > t) = upperP. The two-sided critical value at
// level α is TQuantile(α/2, df).
func TQuantile(upperP, df float64) float64 {
	switch {
	case !(upperP >= 0 && upperP <= 1) || !(df > 0):
		return math.NaN()
	case df > manyDF:
		return NormalQuantile(upperP)
	case upperP == 0.5:
		return 0
	case upperP > 0.5:
		return -TQuantile(1-upperP, df)
	}
	start := NormalQuantile(upperP)
	return positiveQuantile(upperP, start, func(t float64) float64 { return TUpper(t, df) })
}

// FUpper returns P(F > f) for the F distribution on d1 and d2 degrees of freedom.
//
//	P(F > f) = I_y(d2/2, d1/2), y = d2/(d2 + d1 f)
//
// (Abramowitz & Stegun 1964, 26.6.2). At least 11 digits for P down to 1e-300.
func FUpper(f, d1, d2 float64) float64 {
	_, upper := fTails(f, d1, d2)
	return upper
}

// FTwoSided returns twice the smaller tail of F, at most 1: the test that two
// independent mean squares estimate the same variance.
func FTwoSided(f, d1, d2 float64) float64 {
	lower, upper := fTails(f, d1, d2)
	return math.Min(1, 2*math.Min(lower, upper))
}

// FQuantile returns f with P(F > f) = upperP.
func FQuantile(upperP, d1, d2 float64) float64 {
	if !(d1 > 0 && d2 > 0) || !(upperP >= 0 && upperP <= 1) {
		return math.NaN()
	}
	if d1 > manyDF && d2 > manyDF {
		return 1
	}
	if upperP > 0.5 {
		// The lower tail, as the upper one of 1/F with the degrees of freedom exchanged.
		return 1 / FQuantile(1-upperP, d2, d1)
	}
	return positiveQuantile(upperP, 1, func(f float64) float64 { return FUpper(f, d1, d2) })
}

func fTails(f, d1, d2 float64) (lower, upper float64) {
	switch {
	case math.IsNaN(f) || !(d1 > 0 && d2 > 0):
		return math.NaN(), math.NaN()
	case f <= 0:
		return 0, 1
	case math.IsInf(f, 1):
		return 1, 0
	case d1 > manyDF && d2 > manyDF:
		if f < 1 {
			return 0, 1
		}
		return 1, 0
	case d2 > manyDF:
		return gammaTails(d1/2, f*d1/2)
	case d1 > manyDF:
		upper, lower = gammaTails(d2/2, d2/f/2)
		return lower, upper
	}
	// x = d1 f/(d1 f + d2) and y = 1 − x, neither of which may lose digits or overflow.
	if d1 > d2/f {
		r := d2 / d1 / f
		return betaTails(d1/2, d2/2, 1/(1+r), r/(1+r))
	}
	r := d1 / d2 * f
	return betaTails(d1/2, d2/2, r/(1+r), 1/(1+r))
}

// ChiSquaredUpper returns P(χ² > x) on df degrees of freedom.
func ChiSquaredUpper(x, df float64) float64 {
	if math.IsNaN(x) || !(df > 0) || math.IsInf(df, 1) {
		return math.NaN()
	}
	_, upper := gammaTails(df/2, x/2)
	return upper
}

// ChiSquaredQuantile returns x with P(χ² > x) = upperP.
func ChiSquaredQuantile(upperP, df float64) float64 {
	switch {
	case !(upperP >= 0 && upperP <= 1) || !(df > 0) || math.IsInf(df, 1):
		return math.NaN()
	case upperP <= 0.5:
		return positiveQuantile(upperP, df, func(x float64) float64 { return ChiSquaredUpper(x, df) })
	}
	// Solved on the lower tail at 1/x, an upper tail in its turn.
	v := positiveQuantile(1-upperP, 1/df, func(v float64) float64 {
		lower, _ := gammaTails(df/2, 1/v/2)
		return lower
	})
	return 1 / v
}

// positiveQuantile returns x > 0 with upper(x) = p, 0 ≤ p ≤ ½, for a decreasing
// tail that is P(0) ≥ ½ at zero. It works on logarithms of both, in which far tails
// are nearly straight, from a guess start; +Inf when x exceeds float64.
func positiveQuantile(p, start float64, upper func(x float64) float64) float64 {
	if p == 0 {
		return math.Inf(1)
	}
	lnp := math.Log(p)
	miss := func(v float64) float64 {
		u := upper(math.Exp(v))
		if u == 0 {
			return -math.MaxFloat64
		}
		return math.Log(u) - lnp
	}
	// Widen in growing steps from the guess, which must not be zero.
	a := math.Log(math.Max(start, 1e-300))
	fa := miss(a)
	step := 0.25
	if fa < 0 {
		step = -step
	}
	b := a
	for {
		b += step
		step *= 2
		if math.Abs(b) > 709 {
			b = math.Copysign(709, b)
		}
		if fb := miss(b); (fb < 0) != (fa < 0) {
			break
		}
		if b == 709 {
			return math.Inf(1)
		}
		if b == -709 {
			return 0
		}
		a = b
	}
	v, err := solve.Root(miss, a, b, 0)
	if err != nil {
		return math.NaN()
	}
	return math.Exp(v)
}
