package dist

import "math"

// maxNoncentrality bounds the number of terms of a noncentral sum.
const maxNoncentrality = 1e10

// NoncentralTUpper returns P(T > t) for T = (Z + delta)/S, Z standard normal and S an
// independent root mean square on df degrees of freedom:
//
//	P = ∫ f(s) P(Z > t s − delta) ds
//
// The lower tail is NoncentralTUpper(−t, df, −delta). At least 9 digits for |delta| up to 100.
func NoncentralTUpper(t, df, delta float64) float64 {
	switch {
	case math.IsNaN(t) || !(df >= minDF) || !(math.Abs(delta) <= 1e5):
		return math.NaN()
	case math.IsInf(t, 1):
		return 0
	case math.IsInf(t, -1):
		return 1
	}
	return studentizedUpper(t, df, delta, func(w float64) float64 { return NormalUpper(w - delta) })
}

// NoncentralChiSquaredUpper returns P(χ′² > x) on df degrees of freedom with noncentrality
// lambda = Σ(μᵢ/σ)², a Poisson mixture of central distributions:
//
//	P = Σⱼ e^(−λ/2) (λ/2)ʲ/j! · P(χ²(df+2j) > x)
//
// (Patnaik, Biometrika 36 (1949) 202). At least 11 digits for lambda up to 10 000, also in far tails.
func NoncentralChiSquaredUpper(x, df, lambda float64) float64 {
	_, upper := noncentralChiSquared(x, df, lambda)
	return upper
}

// NoncentralChiSquaredLower returns P(χ′² ≤ x), accurate when small.
func NoncentralChiSquaredLower(x, df, lambda float64) float64 {
	lower, _ := noncentralChiSquared(x, df, lambda)
	return lower
}

// NoncentralChiSquaredQuantile returns x with P(χ′² > x) = upperP.
func NoncentralChiSquaredQuantile(upperP, df, lambda float64) float64 {
	return noncentralQuantile(upperP, df+lambda, func(x float64) (float64, float64) { return noncentralChiSquared(x, df, lambda) })
}

// NoncentralFUpper returns P(F′ > f) for a noncentral χ² on d1 degrees of freedom with
// noncentrality lambda = Σ nᵢ(μᵢ − μ)²/σ², over an independent χ² on d2, each divided by its
// degrees of freedom. This is the power of an F test at its critical value f.
//
// The mixture is that of NoncentralChiSquaredUpper (Patnaik 1949; Tang, Statist. Res. Mem. 2
// (1938) 126). At least 10 digits for lambda up to 10 000, also in far tails.
func NoncentralFUpper(f, d1, d2, lambda float64) float64 {
	_, upper := noncentralF(f, d1, d2, lambda)
	return upper
}

// NoncentralFLower returns P(F′ ≤ f), accurate when small: the risk of missing an effect.
func NoncentralFLower(f, d1, d2, lambda float64) float64 {
	lower, _ := noncentralF(f, d1, d2, lambda)
	return lower
}

// NoncentralFQuantile returns f with P(F′ > f) = upperP.
func NoncentralFQuantile(upperP, d1, d2, lambda float64) float64 {
	return noncentralQuantile(upperP, 1+lambda/d1, func(f float64) (float64, float64) { return noncentralF(f, d1, d2, lambda) })
}

func noncentralQuantile(p, start float64, tails func(x float64) (lower, upper float64)) float64 {
	if lower, _ := tails(1); math.IsNaN(lower) || !(p >= 0 && p <= 1) {
		return math.NaN()
	}
	if p <= 0.5 {
		return positiveQuantile(p, start, func(x float64) float64 {
			_, upper := tails(x)
			return upper
		})
	}
	return 1 / positiveQuantile(1-p, 1/start, func(v float64) float64 {
		lower, _ := tails(1 / v)
		return lower
	})
}

func noncentralChiSquared(x, df, lambda float64) (lower, upper float64) {
	switch {
	case math.IsNaN(x) || !(df > 0) || math.IsInf(df, 1) || !(lambda >= 0 && lambda <= maxNoncentrality):
		return math.NaN(), math.NaN()
	case lambda == 0:
		return gammaTails(df/2, x/2)
	case x <= 0:
		return 0, 1
	case math.IsInf(x, 1):
		return 1, 0
	}
	a, half := df/2, x/2
	// Consecutive tails differ by xᵃe⁻ˣ/Γ(a+1), in halves.
	gap := func(j float64) float64 { return half / (a + j + 1) }
	if x > df+lambda {
		// √χ′² is at most √χ² + √λ: a bound on how far out the tail ends in float64.
		if root := math.Sqrt(x) - math.Sqrt(lambda); ChiSquaredUpper(root*root, df) == 0 {
			return 1, 0
		}
		j := firstTerm(lambda / 2)
		upper = poissonUpper(lambda/2, j, lnGammaDensity(a+j, half)-math.Log(a+j), (a+j)*gammaUpperRatio(a+j, half), gap)
		return 1 - upper, upper
	}
	if gap(0)*lambda < 1e-20 {
		lower, _ = gammaTails(a, half) // only the first term counts
		lower *= math.Exp(-lambda / 2)
		return lower, 1 - lower
	}
	j := lastTerm(lambda / 2)
	lower = poissonLower(lambda/2, j, lnGammaDensity(a+j, half)-math.Log(a+j), (a+j)*gammaLowerRatio(a+j, half), gap)
	return lower, 1 - lower
}

func noncentralF(f, d1, d2, lambda float64) (lower, upper float64) {
	switch {
	case math.IsNaN(f) || !(d1 > 0 && d2 > 0) || math.IsInf(d1, 1) || !(lambda >= 0 && lambda <= maxNoncentrality):
		return math.NaN(), math.NaN()
	case d2 > manyDF:
		return noncentralChiSquared(d1*f, d1, lambda)
	case lambda == 0:
		return fTails(f, d1, d2)
	case f <= 0:
		return 0, 1
	case math.IsInf(f, 1):
		return 1, 0
	}
	a, b := d1/2, d2/2
	var x, y float64
	if r := d2 / d1 / f; r < 1 {
		x, y = 1/(1+r), r/(1+r)
	} else {
		r = d1 / d2 * f
		x, y = r/(1+r), 1/(1+r)
	}
	if x == 0 {
		return 0, 1
	}
	if y == 0 {
		return 1, 0
	}
	// Consecutive tails differ by xᵃyᵇ/(a B(a, b)) (Abramowitz & Stegun 1964, 26.5.16).
	gap := func(j float64) float64 { return x * (a + b + j) / (a + j + 1) }
	if d1*f > d1+lambda {
		j := firstTerm(lambda / 2)
		upper = poissonUpper(lambda/2, j, lnBetaDensity(a+j, b, x, y)-math.Log(a+j), (a+j)*betaRatio(b, a+j, y, x), gap)
		return 1 - upper, upper
	}
	if gap(0)*lambda < 1e-20 {
		lower, _ = betaTails(a, b, x, y)
		lower *= math.Exp(-lambda / 2)
		return lower, 1 - lower
	}
	j := lastTerm(lambda / 2)
	lower = poissonLower(lambda/2, j, lnBetaDensity(a+j, b, x, y)-math.Log(a+j), (a+j)*betaRatio(a+j, b, x, y), gap)
	return lower, 1 - lower
}

// firstTerm and lastTerm bound the terms of a Poisson distribution of mean m that can
// count: those outside are below 1e-20 of the greatest.
func firstTerm(m float64) float64 { return math.Max(0, math.Floor(m-10*math.Sqrt(m)-30)) }
func lastTerm(m float64) float64  { return math.Ceil(m + 10*math.Sqrt(m) + 40) }

// lnPoisson returns ln(e⁻ᵐ mʲ / j!).
func lnPoisson(m, j float64) float64 {
	if j == 0 {
		return -m
	}
	return lnGammaDensity(j, m) - math.Log(j)
}

// poissonUpper returns Σ pᵢQᵢ from i = j on, for upper tails that grow by gᵢ from one term
// to the next: Qᵢ₊₁ = Qᵢ + gᵢ. All parts are positive, so nothing is lost.
//
// lng is ln gⱼ, ratio is Qⱼ/gⱼ, gap(i) is gᵢ₊₁/gᵢ; the sum is kept in units of pⱼgⱼ, times
// a power of two when that grows out of range.
func poissonUpper(m, j, lng, ratio float64, gap func(i float64) float64) float64 {
	lnUnit := lnPoisson(m, j) + lng
	weight, sum := 1.0, ratio
	for range int(4 * mostTerms) {
		g := gap(j)
		ratio = (ratio + 1) / g
		weight *= m / (j + 1) * g
		j++
		term := weight * ratio
		sum += term
		if !(term > 1e-17*sum) && j > m {
			// Unimodal, and past the mode of both factors.
			return math.Min(1, math.Exp(lnUnit+math.Log(sum)))
		}
		if sum > 1e100 {
			_, power := math.Frexp(sum)
			sum, weight = math.Ldexp(sum, -power), math.Ldexp(weight, -power)
			lnUnit += float64(power) * math.Ln2
		}
	}
	return math.NaN()
}

// poissonLower returns Σ pᵢPᵢ from i = j down to 0, for lower tails with Pᵢ₋₁ = Pᵢ + gᵢ₋₁;
// ratio is Pⱼ/gⱼ, the rest as for poissonUpper.
func poissonLower(m, j, lng, ratio float64, gap func(i float64) float64) float64 {
	lnUnit := lnPoisson(m, j) + lng
	weight, sum := 1.0, ratio
	for j > 0 {
		g := gap(j - 1)
		ratio = ratio*g + 1
		weight *= j / m / g
		j--
		term := weight * ratio
		sum += term
		if !(term > 1e-17*sum) && j < m {
			break
		}
		if sum > 1e100 {
			_, power := math.Frexp(sum)
			sum, weight = math.Ldexp(sum, -power), math.Ldexp(weight, -power)
			lnUnit += float64(power) * math.Ln2
		}
	}
	return math.Min(1, math.Exp(lnUnit+math.Log(sum)))
}
