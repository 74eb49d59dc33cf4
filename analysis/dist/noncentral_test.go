package dist

import (
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/solve"
)

// Noncentrality for power .80 and .90 at α = .05: G. E. Haynam, Z. Govindarajulu & F. C. Leone,
// in Selected Tables in Mathematical Statistics I (1970) (from memory, three decimals); digits
// computed independently.
func TestNoncentralityForPower(t *testing.T) {
	for _, tt := range []struct{ alpha, df, eighty, ninety float64 }{
		{.05, 1, 7.84886050933, 10.5074194097}, {.05, 2, 9.63468886797, 12.6539360394}, {.05, 3, 10.9025632901, 14.1714873045},
		{.05, 4, 11.9352858377, 15.4050518587}, {.05, 5, 12.8276065723, 16.4694642411}, {.05, 10, 16.2411102849, 20.5319707418},
		{.05, 20, 20.9607918337, 26.1323224623}, {.01, 1, 11.6789681486, 14.8793871665}, {.01, 3, 15.4576571991, 19.2474241361},
	} {
		x := ChiSquaredQuantile(tt.alpha, tt.df)
		for _, p := range []struct{ power, want float64 }{{.8, tt.eighty}, {.9, tt.ninety}} {
			lambda, err := solve.Root(func(l float64) float64 { return NoncentralChiSquaredUpper(x, tt.df, l) - p.power }, 0, 100, 0)
			if err != nil {
				t.Fatal(err)
			}
			needDigits(t, "λ", lambda, p.want, 11)
			// With d2 = ∞ it is the power of F.
			needDigits(t, "power", NoncentralFUpper(x/tt.df, tt.df, inf, lambda), p.power, 11)
		}
	}
}

// P. B. Patnaik, Biometrika 36 (1949) 202 (from memory): points of χ′², of which 14.641 for
// (2, 4) and 16.003 for (7, 1) do not agree in the last digit; digits computed independently.
func TestNoncentralChiSquared(t *testing.T) {
	for _, tt := range []struct{ df, lambda, low, high float64 }{
		{2, 1, .168391116376, 8.64220387005}, {2, 4, .645599049622, 14.6402115899}, {2, 16, 6.32164155397, 33.0542125651},
		{2, 25, 12.080205077, 45.308228096}, {4, 1, .908744703148, 11.7072277527}, {4, 4, 1.76501158833, 17.309322877},
		{4, 16, 7.88432843293, 35.4270109692}, {4, 25, 13.7329248565, 47.6127673924}, {7, 1, 2.49370572923, 16.0039002922},
		{7, 4, 3.66425264581, 21.228033822}, {7, 16, 10.2573189577, 38.970090371}, {7, 25, 16.2267524121, 51.0605937894},
	} {
		needDigits(t, "lower point", NoncentralChiSquaredQuantile(.95, tt.df, tt.lambda), tt.low, 10.7)
		needDigits(t, "upper point", NoncentralChiSquaredQuantile(.05, tt.df, tt.lambda), tt.high, 10.7)
	}
	for _, tt := range []struct{ x, df, lambda, want float64 }{
		{3, 2, 1, .62064365322}, {10, 4, 4, .711792816477}, {100, 7, 64, .952015747808}, {10000, 10, 9800, .831427650967}, {.001, 5, 2, 6.18673133747e-10},
	} {
		needDigits(t, "cdf", NoncentralChiSquaredLower(tt.x, tt.df, tt.lambda), tt.want, 11)
	}
	// On one degree of freedom it is the square of a normal variable, in both far tails.
	for _, lambda := range []float64{.01, 1, 30, 2500, 10000} {
		d := math.Sqrt(lambda)
		for _, z := range []float64{-30, -8, -2, 0, 1, 5, 12, 30} {
			if root := d + z; root > 0 {
				if want := NormalUpper(z) + NormalUpper(z+2*d); want > 1e-290 {
					needDigits(t, "upper", NoncentralChiSquaredUpper(root*root, 1, lambda), want, 10)
				}
			}
		}
		// P(|Z+d| ≤ r) = ∫ over a short interval: by its midpoint expansion for small r.
		r := 1e-4
		want := 2 * r * math.Exp(-lambda/2) / math.Sqrt(2*math.Pi) * (1 + (lambda-1)*r*r/6)
		if want > 1e-290 {
			needDigits(t, "lower", NoncentralChiSquaredLower(r*r, 1, lambda), want, 9.5)
		}
	}
}

func TestNoncentralF(t *testing.T) {
	// Patnaik (1949) and Tang (1938) to three figures (from memory); digits computed independently.
	for _, tt := range []struct{ f, d1, d2, lambda, want, need float64 }{
		{3.708, 3, 10, 4, .74538968152, 11}, {3.326, 5, 10, 6, .730781781043, 11.5}, {3.072, 8, 10, 9, .71405132739, 10.5},
		{6.552, 3, 10, 4, .918108721516, 11.5}, {3.098, 3, 20, 4, .699656588512, 11.5}, {4.938, 3, 20, 4, .886771073211, 11.5},
		{2.711, 5, 20, 6, .663848833096, 11.5}, {3.173, 8, 30, 9, .812964361988, 11.5}, {5, 1, 4, .5, .856361482712, 11.5},
		{3, 4, 40, 20, .0948310134126, 11.5}, {60, 3, 30, 400, 5.617495033e-4, 9.5}, {2000, 5, 60, 10000, .475065908585, 11},
		{.05, 3, 12, 6, 8.61059744416e-4, 11},
	} {
		needDigits(t, "cdf", NoncentralFLower(tt.f, tt.d1, tt.d2, tt.lambda), tt.want, tt.need)
		needDigits(t, "tails add up", NoncentralFUpper(tt.f, tt.d1, tt.d2, tt.lambda), 1-tt.want, 9)
	}
	// Chances of missing an effect at α = .05 in the layout of P. C. Tang, Statist. Res. Mem. 2
	// (1938) 126: φ = 1, 1.5, 2, 2.5, 3, λ = (d1+1)φ²; eight digits computed independently.
	for _, tt := range []struct {
		d1, d2 float64
		beta   []float64
	}{
		{1, 10, []float64{.75094816, .51716581, .27752638, .11107099, .032237787}},
		{2, 20, []float64{.71840709, .43131557, .1731787, .04292689, .0062600228}},
		{3, 20, []float64{.69971784, .38312867, .12590862, .022390001, .002031606}},
		{4, 30, []float64{.65791151, .30303157, .069988474, .0070679774, 2.8967446e-4}},
		{8, 60, []float64{.52636638, .12441982, .0073986238, 8.7074313e-5, 1.802675e-7}},
	} {
		f := FQuantile(.05, tt.d1, tt.d2)
		for i, want := range tt.beta {
			phi := 1 + .5*float64(i)
			needDigits(t, "β", NoncentralFLower(f, tt.d1, tt.d2, (tt.d1+1)*phi*phi), want, 6.9)
		}
	}
	// D. C. Montgomery, Design and Analysis of Experiments, operating characteristic of five means
	// 11 12 15 18 19, σ 3, α .01, n = 4, 5, 6 (chart .70 .85 .96); exact values.
	for i, want := range []float64{.706598343245, .881682307735, .959574274799} {
		n := float64(i + 4)
		needDigits(t, "power", NoncentralFUpper(FQuantile(.01, 4, 5*(n-1)), 4, 5*(n-1), n*50/9), want, 11)
	}
	needDigits(t, "power of blocks", NoncentralFUpper(FQuantile(.05, 3, 15), 3, 15, 10.125), .642415188912, 11)
}

// Second road for F′, into both tails and to λ = 10 000: the mixture over the error
// mean square of noncentral χ² tails.
func TestNoncentralFByIntegration(t *testing.T) {
	for _, tt := range []struct{ f, d1, d2, lambda float64 }{
		{3, 4, 20, 12}, {50, 2, 9, 30}, {.02, 3, 12, 40}, {1200, 8, 30, 10000}, {9000, 8, 30, 10000}, {1e-3, 5, 400, 200}, {40, 20, 1000, 10}, {.9, 40, 1e5, 3},
	} {
		upper := studentizedUpper(1, tt.d2, 0, func(s float64) float64 { return NoncentralChiSquaredUpper(tt.d1*tt.f*s*s, tt.d1, tt.lambda) })
		needDigits(t, "upper", NoncentralFUpper(tt.f, tt.d1, tt.d2, tt.lambda), upper, 10)
		lower := studentizedUpper(1, tt.d2, 0, func(s float64) float64 { return NoncentralChiSquaredLower(tt.d1*tt.f*s*s, tt.d1, tt.lambda) })
		needDigits(t, "lower", NoncentralFLower(tt.f, tt.d1, tt.d2, tt.lambda), lower, 10)
	}
}

func TestNoncentralT(t *testing.T) {
	for _, tt := range []struct{ t, df, delta, want float64 }{
		{2, 10, 1, .80761156253}, {2.2281388519649385, 10, 3, .2285997814}, {1, 3, -1, .964023429239}, {0, 5, 1, .158655253931},
		{-1, 5, 1, .0308073532608}, {5, 4, 2, .920822617476}, {12, 2, 3, .933757054512}, {2.0017, 58, 2.5, .309072090419},
		{100, 20, 90, .703790982148}, {1.96, 1000, 2.8, .200542741294},
	} {
		needDigits(t, "cdf", NoncentralTUpper(-tt.t, tt.df, -tt.delta), tt.want, 9.5)
		needDigits(t, "upper", NoncentralTUpper(tt.t, tt.df, tt.delta), 1-tt.want, 8.5)
	}
	// t′² is F′ on one degree of freedom; both far tails, δ to 100.
	for _, delta := range []float64{-100, -7, -.5, 0, 1, 4, 30, 100} {
		for _, df := range []float64{1, 3, 17, 400, 1e6, inf} {
			for _, x := range []float64{.01, .8, 3, 10, 60, 130, 2000} {
				want := NoncentralFUpper(x*x, 1, df, delta*delta)
				if got := NoncentralTUpper(x, df, delta) + NoncentralTUpper(x, df, -delta); want > 1e-280 {
					needDigits(t, "t and F", got, want, 9)
				}
				needDigits(t, "tails add up", NoncentralTUpper(x, df, delta)+NoncentralTUpper(-x, df, -delta), 1, 12)
			}
			needDigits(t, "at zero", NoncentralTUpper(0, df, delta)+1, NormalUpper(-delta)+1, 12)
		}
	}
	// Two-sided power of a difference of 1.5 σ with six animals each and 15 degrees of freedom.
	x, delta := TQuantile(.025, 15), 1.5*math.Sqrt(3)
	needDigits(t, "two-sided power", NoncentralTUpper(x, 15, delta)+NoncentralTUpper(x, 15, -delta), .68059548204, 10)
	needDigits(t, "one-sided power", NoncentralTUpper(TQuantile(.05, 15), 15, delta), .797667392023, 10)
}

// J. Cohen, Psychological Bulletin 112 (1992) 155: n of each group for power .80 at α = .05
// (from memory), and the power they really have.
func TestSampleSizes(t *testing.T) {
	for _, tt := range []struct{ f, k, n, power float64 }{
		{.10, 2, 393, .799594241162}, {.10, 3, 322, .7997944308}, {.10, 4, 274, .800732405814}, {.25, 2, 64, .801459557922}, {.25, 3, 52, .796732861667},
		{.25, 4, 45, .803986912865}, {.25, 5, 39, .798187201994}, {.40, 2, 26, .807486615147}, {.40, 3, 21, .797817713864}, {.40, 4, 18, .79890221981},
	} {
		d2 := tt.k * (tt.n - 1)
		needDigits(t, "power", NoncentralFUpper(FQuantile(.05, tt.k-1, d2), tt.k-1, d2, tt.k*tt.n*tt.f*tt.f), tt.power, 9.5)
	}
	// Smallest n with two means Δ apart and the others midway, as tabled by J. Neter et al.,
	// Applied Linear Statistical Models (from memory).
	for _, tt := range []struct{ r, delta, alpha, power, n, reached float64 }{
		{4, 1.5, .05, .90, 14, .9091825866}, {3, 1, .05, .90, 27, .9077108361}, {3, 1, .05, .80, 21, .8147696928},
		{4, 2, .05, .80, 7, .8361289022}, {2, 1, .05, .80, 17, .8070367151}, {4, 1, .05, .80, 23, .8038632662}, {5, 2, .05, .90, 9, 0}, {4, 1.5, .01, .90, 19, 0},
	} {
		power := func(n float64) float64 {
			d2 := tt.r * (n - 1)
			return NoncentralFUpper(FQuantile(tt.alpha, tt.r-1, d2), tt.r-1, d2, n*tt.delta*tt.delta/2)
		}
		if power(tt.n) < tt.power || power(tt.n-1) >= tt.power {
			t.Errorf("r=%g Δ=%g: %g is not the smallest n", tt.r, tt.delta, tt.n)
		}
		if tt.reached != 0 {
			needDigits(t, "power", power(tt.n), tt.reached, 9.5)
		}
	}
}

func TestNoncentralSimulated(t *testing.T) {
	random := rand.New(rand.NewPCG(15, 16))
	const draws = 60_000
	count := 0
	for range draws {
		var top, bottom float64
		for i := range 4 {
			x := random.NormFloat64() + float64(i)
			top += x * x / 4
		}
		for range 7 {
			x := random.NormFloat64()
			bottom += x * x / 7
		}
		if top > 5*bottom {
			count++
		}
	}
	p := NoncentralFUpper(5, 4, 7, 14)
	if got := float64(count) / draws; math.Abs(got-p) > 4*math.Sqrt(p*(1-p)/draws) {
		t.Errorf("simulated %.5f, computed %.5f", got, p)
	}
}

func TestNoncentralDomain(t *testing.T) {
	nan := math.NaN()
	for i, x := range []float64{
		NoncentralTUpper(nan, 3, 1), NoncentralTUpper(1, 0, 1), NoncentralTUpper(1, 3, nan), NoncentralTUpper(1, 3, inf),
		NoncentralFUpper(1, 2, 3, -1), NoncentralFUpper(nan, 2, 3, 1), NoncentralFUpper(1, 0, 3, 1), NoncentralFLower(1, 2, nan, 1), NoncentralFUpper(1, 2, 3, inf),
		NoncentralChiSquaredUpper(1, 2, nan), NoncentralChiSquaredLower(nan, 2, 1), NoncentralChiSquaredQuantile(2, 3, 1), NoncentralFQuantile(.1, 2, -3, 1),
	} {
		if !math.IsNaN(x) {
			t.Errorf("case %d: %g, want NaN", i, x)
		}
	}
	needDigits(t, "λ = 0", NoncentralFUpper(3, 4, 9, 0), FUpper(3, 4, 9), 15)
	needDigits(t, "λ = 0", NoncentralChiSquaredUpper(3, 4, 0), ChiSquaredUpper(3, 4), 15)
	needDigits(t, "small λ", NoncentralFUpper(3, 4, 9, 1e-14), FUpper(3, 4, 9), 13)
	needDigits(t, "δ = 0", NoncentralTUpper(3, 9, 0), TUpper(3, 9), 11)
	for _, p := range []float64{1e-9, .03, .5, .9, .9999} {
		needDigits(t, "F′ inverts", NoncentralFUpper(NoncentralFQuantile(p, 3, 14, 8), 3, 14, 8), p, 11)
	}
	if NoncentralFUpper(0, 2, 3, 1) != 1 || NoncentralFUpper(inf, 2, 3, 1) != 0 || NoncentralChiSquaredUpper(-1, 2, 1) != 1 || NoncentralTUpper(-inf, 3, 1) != 1 {
		t.Error("ends of the range")
	}
}

func BenchmarkNoncentralFUpper(b *testing.B) {
	for b.Loop() {
		NoncentralFUpper(3, 4, 30, 15)
	}
}
