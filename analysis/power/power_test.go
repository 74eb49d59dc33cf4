package power

import (
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/dist"
	"penwright/protocol/factor"
)

func near(t *testing.T, what string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s: %.12g, want %.12g", what, got, want)
	}
}

// Five means 11 12 15 18 19 with σ 3 at α .01 (D. C. Montgomery, Design and Analysis of
// Experiments, the example of operating characteristic curves: chart .70 .85 .96); blocks
// with one mean 1.5 σ apart and three spread means: exact values of the noncentral F.
func TestPowerOfF(t *testing.T) {
	for i, want := range []float64{.706598343245, .881682307735, .959574274799} {
		n := float64(i + 4)
		f := Test{Kind: F, Alpha: .01, DF1: 4, DF: 5 * (n - 1)}
		near(t, "five means", f.Power(math.Sqrt(n*50/9), 1), want, 1e-10)
	}
	near(t, "one mean apart", Test{Kind: F, Alpha: .05, DF1: 3, DF: 15}.Power(math.Sqrt(10.125), 1), .642415188912, 1e-10)
	// −.5, 0, .5 in eight blocks: two means 1 σ apart and the third midway.
	near(t, "spread", Test{Kind: F, Alpha: .05, DF1: 2, DF: 14}.Power(1, math.Sqrt(2./8)), .343391184453, 1e-10)
}

// Smallest numbers for two means apart and the rest midway (J. Neter et al., Applied
// Linear Statistical Models, table of sample sizes, from memory; powers exact).
func TestSmallestReplication(t *testing.T) {
	for _, tt := range []struct {
		levels                   int
		delta, alpha, wish, want float64
		n                        int
	}{
		{4, 1.5, .05, .90, .9091825866, 14}, {3, 1, .05, .90, .9077108361, 27}, {3, 1, .05, .80, .8147696928, 21}, {4, 2, .05, .80, .8361289022, 7},
		{2, 1, .05, .80, .8070367151, 17}, {4, 1, .05, .80, .8038632662, 23}, {5, 2, .05, .90, 0, 9}, {4, 1.5, .01, .90, 0, 19},
	} {
		power := func(n int) float64 {
			f := Test{Kind: F, Alpha: tt.alpha, DF1: float64(tt.levels - 1), DF: float64(tt.levels * (n - 1))}
			return f.Power(tt.delta, math.Sqrt(2/float64(n)))
		}
		if power(tt.n) < tt.wish || power(tt.n-1) >= tt.wish {
			t.Errorf("%d levels, %g σ: %d is not the smallest", tt.levels, tt.delta, tt.n)
		}
		if tt.want > 0 {
			near(t, "power", power(tt.n), tt.want, 1e-9)
		}
	}
}

func TestPowerOfT(t *testing.T) {
	// A difference of 1.5 σ, six units a mean, 15 degrees of freedom: exact values.
	se := math.Sqrt(2. / 6)
	two, one := Test{Kind: T, Alpha: .05, Sides: 2, DF: 15}, Test{Kind: T, Alpha: .05, Sides: 1, DF: 15}
	near(t, "two-sided", two.Power(1.5, se), .68059548204, 1e-10)
	near(t, "one-sided", one.Power(1.5, se), .797667392023, 1e-10)
	near(t, "two-sided t is F on one degree of freedom", Test{Kind: F, Alpha: .05, DF1: 1, DF: 15}.Power(1.5, se), two.Power(1.5, se), 1e-10)
	for _, f := range []Test{two, one, {Kind: F, Alpha: .05, DF1: 3, DF: 12}, {Kind: T, Alpha: .001, Sides: 2, DF: 1}, {Kind: F, Alpha: .2, DF1: 40, DF: 4000}} {
		for _, wish := range []float64{.21, .5, .8, .9, .999} {
			near(t, "detectable", f.Power(f.Detectable(wish, se, 0), se), wish, 1e-9)
		}
	}
	if x := two.Detectable(.05, se, 0); !math.IsNaN(x) {
		t.Errorf("a power no greater than α is reached without any difference, got %g", x)
	}
	near(t, "a great difference", two.Power(1e9, 1), 1, 0)
	near(t, "the wrong side", one.Power(-1e9, 1), 0, 0)
}

// Total numbers for power .80 in a two-period crossover, limits .80 to 1.25, at ratios
// .95 1.00 1.05 1.10 (E. Diletti, D. Hauschke & V. W. Steinijans 1991; D. Hauschke et al.
// 1992; from memory). σ within animals is √ln(1 + CV²), the error has n − 2 degrees of
// freedom, and a difference of two means of n each has the standard error σ√(2/n).
func TestEquivalence(t *testing.T) {
	margin := math.Log(1.25)
	power := func(cv, d, margin, n float64) float64 {
		return Test{Kind: Equivalence, Alpha: .05, DF: n - 2, Margin: margin}.Power(d, math.Sqrt(math.Log(1+cv*cv))*math.Sqrt(2/n))
	}
	for _, tt := range []struct {
		cv float64
		n  [4]float64
	}{{.10, [4]float64{8, 6, 8, 10}}, {.15, [4]float64{12, 10, 12, 20}}, {.20, [4]float64{20, 16, 18, 32}}, {.25, [4]float64{28, 24, 28, 48}}, {.30, [4]float64{40, 32, 38, 68}}} {
		for i, ratio := range []float64{.95, 1, 1.05, 1.10} {
			d := math.Log(ratio)
			if power(tt.cv, d, margin, tt.n[i]) < .8 || power(tt.cv, d, margin, tt.n[i]-2) >= .8 {
				t.Errorf("CV %g, ratio %g: %g is not the smallest number", tt.cv, ratio, tt.n[i])
			}
		}
	}
	for i, want := range []float64{.8346801909, .8332000982, .8001854366, .8100682048} {
		near(t, "CV 20 %", power(.2, math.Log([]float64{.95, 1, 1.05, 1.10}[i]), margin, []float64{20, 16, 18, 32}[i]), want, 1e-9)
	}
	near(t, "n = 24, CV 30 %", power(.3, 0, margin, 24), .63506609682, 1e-10)

	// Limits of ± 20 % of the mean (K. F. Phillips 1990; J. P. Liu & S. C. Chow 1992 print
	// 16 for the last by an approximation), differences of 0, 5 and 10 %.
	additive := func(cv, d, n float64) float64 {
		return Test{Kind: Equivalence, Alpha: .05, DF: n - 2, Margin: .2}.Power(d, cv*math.Sqrt(2/n))
	}
	for _, tt := range []struct {
		cv float64
		n  [3]float64
	}{{.20, [3]float64{20, 24, 52}}, {.30, [3]float64{40, 52, 114}}, {.10, [3]float64{8, 8, 14}}} {
		for i, d := range []float64{0, .05, .10} {
			if additive(tt.cv, d, tt.n[i]) < .8 || additive(tt.cv, d, tt.n[i]-2) >= .8 {
				t.Errorf("CV %g, difference %g: %g is not the smallest number", tt.cv, d, tt.n[i])
			}
		}
	}
	for _, tt := range []struct{ margin, n, want float64 }{{1, 20, .855804946791}, {.8, 34, .894666799726}, {1.5, 10, .885727271873}} {
		e := Test{Kind: Equivalence, Alpha: .05, DF: 2 * (tt.n - 1), Margin: tt.margin}
		near(t, "two groups", e.Power(0, math.Sqrt(2/tt.n)), tt.want, 1e-10)
		m := e.Detectable(.9, math.Sqrt(2/tt.n), .1)
		e.Margin = m
		near(t, "margin", e.Power(.1, math.Sqrt(2/tt.n)), .9, 1e-9)
	}
}

// Second road: the power of two one-sided tests at difference zero and wide margins is
// the difference of two noncentral t tails whenever the error mean square cannot be so
// great that nothing is shown; and the density integrates to one at every df.
func TestTwoOneSidedLimits(t *testing.T) {
	for _, df := range []float64{1, 2, 3, 7, 30, 41, 500, 1e5} {
		x := dist.TQuantile(.05, df)
		// P(T₁ > t) + P(T₂ > t) − 1 bounds it below, and is reached where both fail never.
		m := 40 * x
		want := dist.NoncentralTUpper(x, df, m+1) + dist.NoncentralTUpper(x, df, m-1) - 1
		got := TwoOneSided(.05, df, 1, m)
		if df > 2 {
			near(t, "wide margin", got, want, 1e-9)
		} else if got < want-1e-12 || got > 1 {
			t.Errorf("df %g: %g is outside [%g, 1]", df, got, want)
		}
	}
}

func TestTwoOneSidedSimulated(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 11))
	const draws = 200_000
	for _, tt := range []struct {
		df         int
		diff, marg float64
	}{{6, .5, 3}, {12, 0, 2.5}, {3, 1, 6}} {
		x := dist.TQuantile(.05, float64(tt.df))
		count := 0
		for range draws {
			s := 0.0
			for range tt.df {
				z := random.NormFloat64()
				s += z * z
			}
			s = math.Sqrt(s / float64(tt.df))
			d := tt.diff + random.NormFloat64()
			if (d+tt.marg)/s > x && (tt.marg-d)/s > x {
				count++
			}
		}
		p := TwoOneSided(.05, float64(tt.df), tt.diff, tt.marg)
		if got := float64(count) / draws; math.Abs(got-p) > 4*math.Sqrt(p*(1-p)/draws) {
			t.Errorf("df %d: simulated %.5f, computed %.5f", tt.df, got, p)
		}
	}
}

// Half width of a difference: t(.975, 12) = 2.178813 (any table of t), SE 24 √(2/5).
func TestHalfWidth(t *testing.T) {
	near(t, "two sides", HalfWidth(.05, 2, 12, 24*math.Sqrt(.4)), 2.1788128297*24*math.Sqrt(.4), 1e-9)
	near(t, "one side", HalfWidth(.05, 1, 12, 1), 1.7822875556, 1e-9)
}

func TestDomain(t *testing.T) {
	ok := Test{Kind: F, Alpha: .05, DF1: 3, DF: 12}
	for name, x := range map[string]float64{
		"no error":      Test{Kind: F, Alpha: .05, DF1: 3}.Power(1, 1),
		"no level":      Test{Kind: F, DF1: 3, DF: 12}.Power(1, 1),
		"no spread":     ok.Power(1, 0),
		"no difference": ok.Power(math.NaN(), 1),
		"no treatments": Test{Kind: F, Alpha: .05, DF: 12}.Power(1, 1),
		"power of one":  ok.Detectable(1, 1, 0),
		"margin":        TwoOneSided(.05, 12, 0, -1),
		"too great α":   TwoOneSided(.5, 12, 0, 1),
	} {
		if !math.IsNaN(x) {
			t.Errorf("%s: %g, want NaN", name, x)
		}
	}
	if p := TwoOneSided(.05, 12, 0, 0); p != 0 {
		t.Errorf("nothing is equivalent within nothing, got %g", p)
	}
}

// blocks of the seven points of the plane of order two.
var fano = [][]int32{{0, 1, 3}, {1, 2, 4}, {2, 3, 5}, {3, 4, 6}, {4, 5, 0}, {5, 6, 1}, {6, 0, 2}}

func blockDesign(blocks [][]int32, t int) (treatment, block factor.Factor) {
	treatment.N, block.N = t, len(blocks)
	for b, in := range blocks {
		for _, x := range in {
			treatment.Level = append(treatment.Level, x)
			block.Level = append(block.Level, int32(b))
		}
	}
	return treatment, block
}

func TestAdjusted(t *testing.T) {
	// Balanced incomplete blocks: E = λ v/(r k) = 7/9, so a difference has 2/(3 · 7/9).
	treatment, block := blockDesign(fano, 7)
	c, ok := Adjusted(treatment, block, nil, 0)
	if !ok {
		t.Fatal("not computed")
	}
	near(t, "balanced", c.Contrast([]float64{1, 0, 0, -1, 0, 0, 0}), 2/(3*7./9), 1e-12)
	near(t, "bound", Bound(7, []int{3, 3, 3, 3, 3, 3, 3}), 7./9, 1e-12)
	near(t, "complete blocks lose nothing", Bound(4, []int{4, 4, 8}), 1, 1e-12)
	// Two treatments that never meet, nor by way of others.
	apart, in := blockDesign([][]int32{{0, 1}, {2, 3}}, 4)
	c, _ = Adjusted(apart, in, nil, 0)
	near(t, "within a block", c.Contrast([]float64{1, -1, 0, 0}), 2, 1e-12)
	if v := c.Contrast([]float64{1, 0, -1, 0}); !math.IsNaN(v) {
		t.Errorf("a difference between unconnected treatments has variance %g", v)
	}
	// Square lattice, two replicates of three blocks of three: (r−1)(k+1)/((r−1)(k+1)+r) =
	// 2/3 (F. Yates 1936), here as the harmonic mean of canonical factors and as the bound.
	lattice, blocks := blockDesign([][]int32{{0, 1, 2}, {3, 4, 5}, {6, 7, 8}, {0, 3, 6}, {1, 4, 7}, {2, 5, 8}}, 9)
	near(t, "lattice", factor.HarmonicMean(factor.CanonicalEfficiency(blocks, lattice)), 2./3, 1e-12)
	near(t, "its bound", ResolvableBound(9, 2, 3), 2./3, 1e-12)
	c, _ = Adjusted(lattice, blocks, nil, 0)
	sum, pairs := 0.0, 0.0
	for i := range 9 {
		for j := range i {
			w := make([]float64, 9)
			w[i], w[j] = 1, -1
			sum += c.Contrast(w)
			pairs++
		}
	}
	near(t, "mean variance of a difference", sum/pairs, 2/(2*2./3), 1e-12)
	near(t, "mean variance by the trace", c.Average([]int{9}), sum/pairs, 1e-12)
	if c.Connected() != true || !math.IsNaN(func() float64 { c, _ := Adjusted(apart, in, nil, 0); return c.Average([]int{4}) }()) {
		t.Error("connectedness")
	}
	// Differences of differences of cells with five units each: 4/5.
	near(t, "interaction", Diagonal([]float64{5, 5, 5, 5, 5, 5}).Average([]int{2, 3}), 4./5, 1e-12)
	near(t, "bound of 24 in 3 replicates of 6", ResolvableBound(24, 3, 6), .754098360656, 1e-11) // Patterson & Williams 1976
}

// Williams squares of 3 (two) and 4 sequences: efficiencies 4/5 and 10/11 of direct
// effects (trade knowledge, from memory), computed from the whole layout.
func TestCrossover(t *testing.T) {
	for _, sequences := range [][][]int32{
		{{0, 1, 2}, {1, 2, 0}, {2, 0, 1}, {0, 2, 1}, {1, 0, 2}, {2, 1, 0}},
		{{0, 1, 3, 2}, {1, 2, 0, 3}, {2, 3, 1, 0}, {3, 0, 2, 1}},
	} {
		k := len(sequences[0])
		treatment, cow := factor.Factor{N: k}, factor.Factor{N: len(sequences)}
		period, carry := factor.Factor{N: k}, factor.Factor{N: k + 1}
		for c, s := range sequences {
			for p, x := range s {
				treatment.Level, cow.Level, period.Level = append(treatment.Level, x), append(cow.Level, int32(c)), append(period.Level, int32(p))
				before := int32(k)
				if p > 0 {
					before = s[p-1]
				}
				carry.Level = append(carry.Level, before)
			}
		}
		w := make([]float64, k)
		w[0], w[1] = 1, -1
		c, _ := Adjusted(treatment, cow, nil, 0, period)
		n := float64(len(sequences))
		near(t, "without carry-over", c.Contrast(w), 2/n, 1e-12)
		c, _ = Adjusted(treatment, cow, nil, 0, period, carry)
		near(t, "with carry-over", c.Contrast(w), 2/n/Williams(k), 1e-11)
	}
}

// Switchback of two treatments over three periods, A B A and B A B, each animal with its
// own line: the contrast y₁ − 2y₂ + y₃ of an animal estimates twice the difference, with
// variance 6σ², so four animals give 6/(4·4).
func TestSwitchback(t *testing.T) {
	treatment, cow, period := factor.Factor{N: 2}, factor.Factor{N: 4}, factor.Factor{N: 3}
	var position []float64
	for c := range 4 {
		for p := range 3 {
			treatment.Level = append(treatment.Level, int32((c+p)%2))
			cow.Level, period.Level = append(cow.Level, int32(c)), append(period.Level, int32(p))
			position = append(position, float64(p))
		}
	}
	c, _ := Adjusted(treatment, cow, position, 1, period)
	near(t, "difference", c.Contrast([]float64{1, -1}), 6./16, 1e-11)
}
