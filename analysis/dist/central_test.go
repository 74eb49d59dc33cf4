package dist

import (
	"math"
	"math/big"
	"testing"
)

// digits returns −log₁₀ of the relative error, at most 16.
func digits(got, want float64) float64 {
	if got == want {
		return 16
	}
	if math.IsNaN(got) {
		return math.Inf(-1)
	}
	return math.Min(16, -math.Log10(math.Abs(got-want)/math.Abs(want)))
}

func needDigits(t *testing.T, name string, got, want, need float64) {
	t.Helper()
	if d := digits(got, want); d < need {
		t.Errorf("%s: got %.16g want %.16g (%.1f digits, need %.1f)", name, got, want, d, need)
	}
}

var inf = math.Inf(1)

// Percentage points as in the tables of Fisher & Yates and of Pearson & Hartley
// (Biometrika Tables for Statisticians I), recomputed in 30-digit arithmetic.
func TestCentralQuantiles(t *testing.T) {
	for _, tt := range []struct{ p, df, want float64 }{
		{.025, 1, 12.706204736175}, {.025, 2, 4.3026527297495}, {.025, 5, 2.5705818356363}, {.025, 10, 2.2281388519863},
		{.025, 20, 2.0859634472659}, {.025, 30, 2.0422724563012}, {.025, 60, 2.0002978220143}, {.025, 120, 1.9799304050824},
		{.005, 5, 4.0321429835552}, {.005, 20, 2.8453397097861}, {.025, inf, 1.959963984540054},
	} {
		needDigits(t, "t", TQuantile(tt.p, tt.df), tt.want, 13)
		needDigits(t, "t from below", -TQuantile(1-tt.p, tt.df), tt.want, 13)
	}
	needDigits(t, "F.05(4,20)", FQuantile(.05, 4, 20), 2.8660814020157, 13)
	needDigits(t, "F.01(3,15)", FQuantile(.01, 3, 15), 5.4169648578184, 13)
	needDigits(t, "F.05(1,6)", FQuantile(.05, 1, 6), 5.9873776072737, 13)
	needDigits(t, "chi2.05(3)", ChiSquaredQuantile(.05, 3), 7.8147279032512, 13)
	needDigits(t, "chi2.01(10)", ChiSquaredQuantile(.01, 10), 23.209251158954, 13)
	// Closed forms: χ² on 2 is exponential, F on 2 and d is a power.
	needDigits(t, "chi2 lower", ChiSquaredQuantile(1-0x1p-30, 2), -2*math.Log1p(-0x1p-30), 13)
	needDigits(t, "F(2,8)", FQuantile(1e-9, 2, 8), 4*(math.Pow(1e-9, -.25)-1), 13)
}

// Tails recomputed in 30-digit arithmetic.
func TestCentralTails(t *testing.T) {
	needDigits(t, "t10", TTwoSided(10, 10), 1.5895531755964e-6, 13)
	needDigits(t, "t3", TTwoSided(-40, 3), 3.4380680789159e-5, 13)
	needDigits(t, "F4,20", FUpper(50, 4, 20), 3.8904822842435e-10, 13)
	needDigits(t, "F2,8", FUpper(1000, 2, 8), 2.5194463459917e-10, 13)
	needDigits(t, "chi2", ChiSquaredUpper(200, 10), 1.6139305336977e-37, 13)
	needDigits(t, "normal", NormalUpper(10), 7.6198530241605e-24, 13)
}

// binomialTail returns P(X ≥ a) for X binomial(n, num/den) in exact arithmetic:
// it equals Iₓ(a, n−a+1), x = num/den (Abramowitz & Stegun 1964, 26.5.24).
func binomialTail(n, a, num, den int64) float64 {
	sum := new(big.Int)
	for k := a; k <= n; k++ {
		term := new(big.Int).Binomial(n, k)
		term.Mul(term, new(big.Int).Exp(big.NewInt(num), big.NewInt(k), nil))
		term.Mul(term, new(big.Int).Exp(big.NewInt(den-num), big.NewInt(n-k), nil))
		sum.Add(sum, term)
	}
	total := new(big.Int).Exp(big.NewInt(den), big.NewInt(n), nil)
	f, _ := new(big.Float).Quo(new(big.Float).SetInt(sum), new(big.Float).SetInt(total)).Float64()
	return f
}

// The beta tails against exact binomial sums, from the bulk to 1e-300.
func TestBetaAgainstBinomial(t *testing.T) {
	for _, tt := range []struct{ n, a, num, den int64 }{
		{1, 1, 1, 3}, {5, 2, 1, 4}, {10, 10, 1, 1000}, {50, 20, 1, 3}, {50, 45, 1, 10}, {100, 50, 1, 2}, {100, 99, 1, 1000},
		{400, 150, 3, 10}, {400, 350, 1, 5}, {1000, 300, 1, 4}, {1000, 700, 1, 3}, {1000, 500, 49, 100}, {300, 1, 1, 100000}, {1000, 999, 3, 4},
	} {
		want := binomialTail(tt.n, tt.a, tt.num, tt.den)
		x, y := float64(tt.num)/float64(tt.den), float64(tt.den-tt.num)/float64(tt.den)
		a, b := float64(tt.a), float64(tt.n-tt.a+1)
		got, _ := betaTails(a, b, x, y)
		if want < 1e-300 {
			continue
		}
		needDigits(t, "beta", got, want, 11.5)
		// The same as an upper tail of F on 2b and 2a degrees of freedom.
		needDigits(t, "F", FUpper(a*y/(b*x), 2*b, 2*a), want, 11.5)
	}
}

// The gamma tails against Poisson sums with many digits, and closed forms of t.
func TestGammaAgainstPoisson(t *testing.T) {
	for _, tt := range []struct{ a, x int64 }{
		{1, 1}, {3, 50}, {5, 5}, {10, 100}, {40, 30}, {40, 41}, {100, 600}, {500, 480}, {500, 520}, {500, 900}, {1000, 1060},
	} {
		const prec = 400
		term := new(big.Float).SetPrec(prec).SetInt64(1)
		sum := new(big.Float).SetPrec(prec)
		x := new(big.Float).SetPrec(prec).SetInt64(tt.x)
		for j := int64(0); j < tt.a; j++ {
			sum.Add(sum, term)
			term.Mul(term, x)
			term.Quo(term, new(big.Float).SetPrec(prec).SetInt64(j+1))
		}
		// e^x by the same series, until the terms no longer count.
		all := new(big.Float).SetPrec(prec).Set(sum)
		for j := tt.a; j < tt.a+20*tt.x+200; j++ {
			all.Add(all, term)
			term.Mul(term, x)
			term.Quo(term, new(big.Float).SetPrec(prec).SetInt64(j+1))
		}
		want, _ := new(big.Float).Quo(sum, all).Float64()
		_, got := gammaTails(float64(tt.a), float64(tt.x))
		needDigits(t, "gamma upper", got, want, 12)
		lower, _ := new(big.Float).Quo(new(big.Float).SetPrec(prec).Sub(all, sum), all).Float64()
		got, _ = gammaTails(float64(tt.a), float64(tt.x))
		needDigits(t, "gamma lower", got, lower, 12)
	}
}

func TestTClosedForms(t *testing.T) {
	for _, x := range []float64{0, 1e-8, .1, 1, 3, 50, 1e6, 1e40, 1e160, 1e290} {
		cauchy := math.Atan2(1, x) / math.Pi
		needDigits(t, "t on 1", TUpper(x, 1), cauchy, 13.5)
		n := math.Hypot(x, math.Sqrt2)
		needDigits(t, "t on 2", TUpper(x, 2), 1/n/(n+x), 13.5)
	}
	// t² is F on 1 and ν; a large ν comes to the normal at the rate of
	// Fisher's expansion of the density, integrated, first two terms.
	for _, df := range []float64{.3, 1, 4.7, 33, 1e4, 1e7, 1e10} {
		for _, x := range []float64{.01, 1, 2.5, 8, 30} {
			needDigits(t, "t and F", FUpper(x*x, 1, df), TTwoSided(x, df), 12)
		}
	}
	for _, df := range []float64{1e6, 1e8, 1e10, 1e14} {
		for _, x := range []float64{.5, 2, 5} {
			z := math.Exp(-x*x/2) / math.Sqrt(2*math.Pi)
			want := NormalUpper(x) + z*(x*x*x+x)/(4*df) + z*(3*math.Pow(x, 7)-7*math.Pow(x, 5)-5*x*x*x-3*x)/(96*df*df)
			needDigits(t, "t near the normal", TUpper(x, df), want, 12)
		}
	}
	needDigits(t, "F with d2 infinite", FUpper(3, 5, inf), ChiSquaredUpper(15, 5), 15)
	needDigits(t, "F with d1 infinite", FUpper(3, inf, 8), 1-ChiSquaredUpper(8./3, 8), 14)
}

// A quantile is right to a relative 1e-13 if the tails at that distance on both
// sides enclose the probability. (The tail at the quantile itself may differ by
// more: on 1e8 degrees of freedom it changes ten thousand times as fast.)
func TestCentralQuantileInverts(t *testing.T) {
	encloses := func(name string, q, p, df float64, upper func(float64) float64) {
		t.Helper()
		if math.IsInf(q, 1) || math.Abs(q) < 1e-290 {
			return
		}
		width := 1e-13*math.Abs(q) + 1e-16
		above, below := upper(q-width), upper(q+width)
		if !(above >= p*(1-2e-13) && below <= p*(1+2e-13)) {
			t.Errorf("%s p=%g df=%g: quantile %.17g has tails %.17g, %.17g around it", name, p, df, q, above, below)
		}
	}
	for _, p := range []float64{1e-300, 1e-100, 1e-12, .001, .05, .3, .4999, .5, .7, .95, 1 - 1e-9} {
		for _, df := range []float64{.5, 1, 2.3, 7, 40, 1e4, 1e8} {
			encloses("t", TQuantile(p, df), p, df, func(x float64) float64 { return TUpper(x, df) })
			encloses("chi2", ChiSquaredQuantile(p, df), p, df, func(x float64) float64 { return ChiSquaredUpper(x, df) })
			for _, d2 := range []float64{1, 6.5, 90, inf} {
				encloses("F", FQuantile(p, df, d2), p, df, func(x float64) float64 { return FUpper(x, df, d2) })
			}
		}
		encloses("normal", NormalQuantile(p), p, inf, NormalUpper)
	}
}

func TestCentralDomain(t *testing.T) {
	nan := math.NaN()
	for i, x := range []float64{
		TUpper(nan, 3), TUpper(1, 0), TUpper(1, nan), TUpper(1, -2), TQuantile(-.1, 4), TQuantile(1.1, 4), TQuantile(.1, 0), TQuantile(nan, 4),
		FUpper(nan, 1, 2), FUpper(1, 0, 2), FUpper(1, 2, nan), FQuantile(.1, -1, 3), FQuantile(2, 1, 3),
		ChiSquaredUpper(1, 0), ChiSquaredUpper(nan, 3), ChiSquaredQuantile(nan, 3), NormalUpper(nan), NormalQuantile(-1), NormalQuantile(nan),
	} {
		if !math.IsNaN(x) {
			t.Errorf("case %d: %g, want NaN", i, x)
		}
	}
	needDigits(t, "F two-sided", FTwoSided(1, 7, 7), 1, 15)
	needDigits(t, "F two-sided below one", FTwoSided(.25, 9, 6), FTwoSided(4, 6, 9), 14)
	for i, tt := range []struct{ got, want float64 }{
		{TUpper(inf, 4), 0}, {TUpper(-inf, 4), 1}, {FUpper(0, 2, 3), 1}, {FUpper(-4, 2, 3), 1}, {FUpper(inf, 2, 3), 0},
		{TQuantile(0, 3), inf}, {TQuantile(1, 3), -inf}, {FQuantile(0, 2, 3), inf}, {FQuantile(1, 2, 3), 0}, {ChiSquaredQuantile(1, 4), 0},
		{ChiSquaredUpper(inf, 3), 0},
	} {
		if tt.got != tt.want {
			t.Errorf("case %d: %g, want %g", i, tt.got, tt.want)
		}
	}
}

// Nothing hangs, panics or leaves [0, 1], whatever the arguments.
func TestExtremeArguments(t *testing.T) {
	extreme := []float64{-inf, -1, 0, 5e-324, 1e-300, .5, 37, 1e5, 1e300, inf, math.NaN()}
	lambda := []float64{.3, .8}
	dunnett, spread := NewDunnett(lambda, Greater), NewStudentizedRange(5)
	for _, x := range extreme {
		for n, df := range extreme {
			for i, p := range []float64{
				TUpper(x, df), ChiSquaredUpper(x, df), NormalUpper(x), spread.Upper(x, df), dunnett.Upper(x, df), MaximumModulusUpper(x, 4, df),
				NoncentralTUpper(x, df, 3), NoncentralTUpper(x, 5, df), NoncentralChiSquaredUpper(x, df, 20), NoncentralChiSquaredLower(x, 4, df),
				FUpper(x, df, 7), FUpper(x, 7, df), FUpper(2, x, df), FTwoSided(x, df, df), NoncentralFUpper(x, df, 9, 11), NoncentralFLower(x, 3, df, 11), NoncentralFUpper(2, 3, x, df),
			} {
				if !(p >= 0 && p <= 1) && !math.IsNaN(p) {
					t.Errorf("function %d at %g, %g: %g", i, x, df, p)
				}
				if math.IsNaN(p) && x >= 0 && df >= .5 && df <= 1e5 && i != 7 && i != 9 && i != 12 && i != 16 {
					t.Errorf("function %d at %g, %g: NaN", i, x, df)
				}
			}
			if n%2 == 1 {
				continue // quantiles cost many tails
			}
			TQuantile(x, df)
			FQuantile(x, df, 3)
			FQuantile(.01, x, df)
			ChiSquaredQuantile(x, df)
			spread.Quantile(x, df)
			dunnett.Quantile(x, df)
			NoncentralFQuantile(.05, 3, x, df)
			NoncentralChiSquaredQuantile(.05, x, df)
		}
	}
}

// Criteria for outliers, which are t in disguise: F. E. Grubbs' two-sided 5 % (his n = 8:
// 2.127, n = 20: 2.709), and the largest external residual by Bonferroni in the layout of
// R. E. Lund, Technometrics 17 (1975) 473; digits computed independently.
func TestOutlierCriteria(t *testing.T) {
	grubbs := func(alpha, n float64) float64 {
		x := TQuantile(alpha/n, n-2)
		return (n - 1) / math.Sqrt(n) * math.Sqrt(x*x/(n-2+x*x))
	}
	for _, tt := range []struct{ n, want float64 }{
		{5, 1.71503731234}, {6, 1.88714511778}, {7, 2.01996850768}, {8, 2.1266450872}, {10, 2.28995408448}, {15, 2.54830777174}, {20, 2.70824564581}, {30, 2.90847305974},
	} {
		needDigits(t, "Grubbs, two sides", grubbs(.025, tt.n), tt.want, 11)
	}
	needDigits(t, "Grubbs, one side", grubbs(.05, 10), 2.17606839419, 11)
	needDigits(t, "Grubbs, one side", grubbs(.05, 20), 2.55658133449, 11)
	for _, tt := range []struct{ n, p, want float64 }{{10, 2, 4.02933717764}, {20, 5, 3.67459390847}, {24, 9, 3.7667297897}, {50, 10, 3.55812008133}} {
		needDigits(t, "largest residual", TQuantile(.025/tt.n, tt.n-tt.p-1), tt.want, 11)
	}
}

// P of published analyses of variance, recomputed: W. G. Cochran & G. M. Cox, Experimental
// Designs (1957) p. 97, potato scab; cotton of D. C. Montgomery.
func TestPublishedF(t *testing.T) {
	needDigits(t, "scab", FUpper(3.60808842629, 6, 25), .0102621846626, 11)
	needDigits(t, "cotton", FUpper(14.75682382134, 4, 20), 9.12793712406e-6, 11)
}
