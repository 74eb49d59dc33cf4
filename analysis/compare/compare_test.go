package compare

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/dist"
)

func near(t *testing.T, name string, got, want, relative float64) {
	t.Helper()
	if got == want {
		return
	}
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s: got %.14g want %.14g", name, got, want)
	}
}

// oneWay returns the family of all pairs of the means of groups of values, the error
// mean square being that within groups.
func oneWay(groups ...[]float64) Family {
	var f Family
	var ss, df float64
	for _, g := range groups {
		var sum float64
		for _, x := range g {
			sum += x
		}
		mean := sum / float64(len(g))
		f.Estimates = append(f.Estimates, mean)
		for _, x := range g {
			ss += (x - mean) * (x - mean)
		}
		df += float64(len(g) - 1)
	}
	f.Diff = func(i, j int) (float64, float64) {
		return math.Sqrt(ss / df * (1/float64(len(groups[i])) + 1/float64(len(groups[j])))), df
	}
	for b := range groups {
		for a := b + 1; a < len(groups); a++ {
			f.Pairs = append(f.Pairs, Pair{A: a, B: b})
		}
	}
	f.TermDF = float64(len(groups) - 1)
	return f
}

func (r Result) find(a, b int) Difference {
	for _, d := range r.Differences {
		if d.A == a && d.B == b {
			return d
		}
	}
	panic("no such pair")
}

// Breaking strength by cotton percentage 15, 20, 25, 30, 35: D. C. Montgomery, Design and
// Analysis of Experiments, the one-way example; half widths and P recomputed independently.
func cotton() Family {
	f := oneWay([]float64{7, 7, 15, 11, 9}, []float64{12, 17, 12, 18, 18}, []float64{14, 18, 18, 19, 19},
		[]float64{19, 25, 22, 19, 23}, []float64{7, 10, 11, 15, 11})
	f.TermP = dist.FUpper(14.75682382134, 4, 20)
	return f
}

func run(t *testing.T, f Family, m Method, side dist.Side) Result {
	t.Helper()
	r, err := f.Run(m, side, .05)
	if err != nil {
		t.Fatalf("%v: %v", m, err)
	}
	return r
}

func TestCotton(t *testing.T) {
	f := cotton()
	for _, tt := range []struct {
		method Method
		half   float64
	}{
		{LSD, 3.74545178246}, {ProtectedLSD, 3.74545178246}, {Tukey, 5.37295838519}, {Scheffe, 6.07955473373},
		{Bonferroni, 5.66208850029}, {Sidak, 5.64395632906},
	} {
		r := run(t, f, tt.method, dist.Two)
		if r.Approximate || r.Correlations {
			t.Errorf("%v: flagged", tt.method)
		}
		for _, d := range r.Differences {
			near(t, tt.method.String(), (d.Upper-d.Lower)/2, tt.half, 1e-10)
			near(t, "middle", (d.Upper+d.Lower)/2, d.Estimate, 1e-12)
			// P and limits say the same.
			if out := d.Lower > 0 || d.Upper < 0; out != (d.Adjusted < .05) {
				t.Errorf("%v %v: limits %g, %g but P %g", tt.method, d.Pair, d.Lower, d.Upper, d.Adjusted)
			}
		}
	}
	lsd, tukey, holmed := run(t, f, LSD, dist.Two), run(t, f, Tukey, dist.Two), run(t, f, Holm, dist.Two)
	for _, tt := range []struct {
		a, b                   int
		diff, raw, tukey, holm float64
	}{
		{3, 0, 11.8, 2.107681149e-6, 1.900757092e-5, 2.107681149e-5}, {4, 3, -10.8, 7.011201791e-6, 6.240694255e-5, 6.310081612e-5},
		{2, 0, 7.8, 3.147387041e-4, .002594799467, .002517909633}, {4, 2, -6.8, .001156712599, .009064636017, .008096988193},
		{3, 1, 6.2, .002514237946, .01889363808, .01508542768}, {1, 0, 5.6, .005408874168, .03850242906, .02704437084},
		{4, 1, -4.6, .01859495237, .1162970383, .07437980947}, {3, 2, 4.0, .03754082235, .2101089244, .1126224671},
		{2, 1, 2.2, .2347148216, .737243767, .4694296432}, {4, 0, 1.0, .5837529163, .9797708703, .5837529163},
	} {
		near(t, "difference", lsd.find(tt.a, tt.b).Estimate, tt.diff, 1e-12)
		near(t, "raw P", lsd.find(tt.a, tt.b).Adjusted, tt.raw, 1e-9)
		near(t, "raw P", tukey.find(tt.a, tt.b).P, tt.raw, 1e-9)
		near(t, "Tukey P", tukey.find(tt.a, tt.b).Adjusted, tt.tukey, 1e-9)
		near(t, "Holm P", holmed.find(tt.a, tt.b).Adjusted, tt.holm, 1e-9)
		if d := holmed.find(tt.a, tt.b); !math.IsNaN(d.Lower) || !math.IsNaN(d.Upper) {
			t.Errorf("Holm has limits")
		}
	}
	scheffe := run(t, f, Scheffe, dist.Two)
	near(t, "Scheffé P", scheffe.find(3, 0).Adjusted, 7.905793838e-5, 1e-9)
	near(t, "Scheffé P", scheffe.find(1, 0).Adjusted, .0811756362, 1e-9)
	near(t, "Scheffé F", scheffe.find(3, 0).Statistic, math.Pow(lsd.find(3, 0).Statistic, 2)/4, 1e-12)
	near(t, "Tukey q", tukey.find(4, 3).Statistic, 10.8/math.Sqrt(8.06/5), 1e-12)

	// Against 35 %: P and half width.
	f.Pairs = []Pair{{A: 0, B: 4}, {A: 1, B: 4}, {A: 2, B: 4}, {A: 3, B: 4}}
	dunnett := run(t, f, Dunnett, dist.Two)
	for i, want := range []float64{.9469050886, .06000314069, .004120100561, 2.649614813e-5} {
		d := dunnett.Differences[i]
		near(t, "Dunnett P", d.Adjusted, want, 1e-9)
		near(t, "Dunnett half width", (d.Upper-d.Lower)/2, 4.76005632536, 1e-10)
	}
	if dunnett.Approximate || dunnett.Correlations {
		t.Error("Dunnett flagged")
	}
	// The control written first changes signs only.
	f.Pairs = []Pair{{A: 4, B: 0}, {A: 4, B: 1}, {A: 4, B: 2}, {A: 4, B: 3}}
	turned := run(t, f, Dunnett, dist.Two)
	greater := run(t, f, Dunnett, dist.Greater)
	for i, d := range turned.Differences {
		near(t, "turned", d.Estimate, -dunnett.Differences[i].Estimate, 1e-12)
		near(t, "turned", d.Adjusted, dunnett.Differences[i].Adjusted, 1e-12)
		f.Pairs[i] = Pair{A: i, B: 4}
	}
	less := run(t, f, Dunnett, dist.Less)
	for i, d := range less.Differences {
		near(t, "less", d.Adjusted, greater.Differences[i].Adjusted, 1e-12)
		near(t, "less", d.Upper, -greater.Differences[i].Lower, 1e-12)
		if !math.IsInf(d.Lower, -1) || !math.IsInf(greater.Differences[i].Upper, 1) {
			t.Error("the open side has a limit")
		}
	}
}

// Ranges of the same example: Newman-Keuls 3.75 4.54 5.03 5.37 in the book, Duncan with
// exact points. A difference just at the range of its span has P = .05.
func TestRangeMethods(t *testing.T) {
	for _, tt := range []struct {
		method Method
		ranges []float64
	}{
		{NewmanKeuls, []float64{3.74545178246, 4.54270915198, 5.02563008173, 5.37295838519}},
		{Duncan, []float64{3.74545178246, 3.93146589213, 4.0496819282, 4.13224931947}},
	} {
		for i, width := range tt.ranges {
			// i+2 means from 0 to width; the widest pair is not enclosed.
			n := i + 2
			f := Family{Diff: cotton().Diff}
			for k := range n {
				f.Estimates = append(f.Estimates, width*float64(k)/float64(n-1))
				for j := range k {
					f.Pairs = append(f.Pairs, Pair{A: k, B: j})
				}
			}
			r := run(t, f, tt.method, dist.Two)
			near(t, tt.method.String(), r.find(n-1, 0).Adjusted, .05, 1e-8)
			for _, d := range r.Differences {
				if d.Adjusted < r.find(n-1, 0).Adjusted {
					t.Errorf("%v: %v inside a range of greater P", tt.method, d.Pair)
				}
			}
		}
	}
	// D. B. Duncan, Biometrics 11 (1955) 1, the example of barley grain yields (from memory):
	// groups A F | F G D C | G D C B E.
	means := []float64{49.6, 58.1, 61.0, 61.5, 67.6, 71.2, 71.3} // A F G D C B E
	f := Family{Estimates: means, Diff: func(i, j int) (float64, float64) { return math.Sqrt(2 * 79.64 / 6), 30 }}
	for a := range means {
		for b := range a {
			f.Pairs = append(f.Pairs, Pair{A: a, B: b})
		}
	}
	r := run(t, f, Duncan, dist.Two)
	letters := Letters(7, r.Differ(.05), []int{0, 1, 2, 3, 4, 5, 6})
	for i, want := range []string{"a", "ab", "bc", "bc", "bc", "c", "c"} {
		if letters[i] != want {
			t.Errorf("mean %g: letters %q want %q", means[i], letters[i], want)
		}
	}
	unequal := oneWay([]float64{1, 2, 3}, []float64{2, 4, 5, 6}, []float64{3, 4, 9})
	if _, err := unequal.Run(Duncan, dist.Two, .05); !errors.Is(err, ErrUnequal) {
		t.Errorf("unequal numbers: %v", err)
	}
	f = cotton()
	f.Pairs = f.Pairs[1:]
	if _, err := f.Run(NewmanKeuls, dist.Two, .05); !errors.Is(err, ErrNotAll) {
		t.Errorf("a pair is missing: %v", err)
	}
}

// Blood counts, C. W. Dunnett, JASA 50 (1955) 1096 (data from memory). He printed limits
// 0.65 (−1.25, 2.55) and 2.63 (0.85, 4.41) with the point for equal numbers; these are exact
// for 6, 4 and 5 animals, computed independently.
func TestDunnettBloodCounts(t *testing.T) {
	f := oneWay([]float64{7.40, 8.50, 7.20, 8.24, 9.84, 8.32}, []float64{9.76, 8.80, 7.68, 9.36}, []float64{12.80, 9.68, 12.16, 9.20, 10.55})
	f.Pairs = []Pair{{A: 1, B: 0}, {A: 2, B: 0}}
	two, greater := run(t, f, Dunnett, dist.Two), run(t, f, Dunnett, dist.Greater)
	for i, want := range []struct{ t, lower, upper, two, one float64 }{
		{.857032125934, -1.2563041371, 2.5563041371, .62010198, .3249776109},
		{3.69375231124, .8397282064, 4.4162717936, .005825360848, .002913883037},
	} {
		d := two.Differences[i]
		near(t, "t", d.Statistic, want.t, 1e-10)
		near(t, "lower", d.Lower, want.lower, 1e-9)
		near(t, "upper", d.Upper, want.upper, 1e-9)
		near(t, "two-sided P", d.Adjusted, want.two, 1e-8)
		near(t, "one-sided P", greater.Differences[i].Adjusted, want.one, 1e-8)
	}
	if two.Approximate || two.Correlations {
		t.Error("unequal numbers with one error mean square are exact")
	}
}

// Strength of fabric in three processes and a control, C. W. Dunnett, JASA 50 (1955) 1096;
// the allowance of 1964 (t 2.88 two-sided, 2.42 one-sided), recomputed.
func TestDunnettFabric(t *testing.T) {
	f := oneWay([]float64{55, 47, 48}, []float64{55, 64, 64}, []float64{55, 49, 52}, []float64{50, 44, 41})
	f.Pairs = []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}}
	for _, d := range run(t, f, Dunnett, dist.Two).Differences {
		near(t, "allowance", d.Upper-d.Estimate, 10.24879041, 1e-9)
	}
	for _, d := range run(t, f, Dunnett, dist.Greater).Differences {
		near(t, "one-sided allowance", d.Estimate-d.Lower, 8.600227112, 1e-9)
	}
}

func TestConditions(t *testing.T) {
	f := cotton()
	for _, m := range []Method{Tukey, Scheffe, NewmanKeuls, Duncan} {
		if _, err := f.Run(m, dist.Greater, .05); !errors.Is(err, ErrOneSided) {
			t.Errorf("%v one-sided: %v", m, err)
		}
	}
	if _, err := f.Run(Dunnett, dist.Two, .05); !errors.Is(err, ErrControl) {
		t.Errorf("no common control: %v", err)
	}
	f.Pairs = []Pair{{A: 1, B: 0}, {A: 0, B: 2}}
	if _, err := f.Run(Dunnett, dist.Less, .05); !errors.Is(err, ErrControl) {
		t.Errorf("control on both sides of one-sided pairs: %v", err)
	}
	if _, err := f.Run(Dunnett, dist.Two, .05); err != nil {
		t.Errorf("control on both sides of two-sided pairs: %v", err)
	}
	f.TermP, f.TermDF = math.NaN(), 0
	for _, m := range []Method{ProtectedLSD, Scheffe} {
		if _, err := f.Run(m, dist.Two, .05); !errors.Is(err, ErrNoF) {
			t.Errorf("%v without F: %v", m, err)
		}
	}
	if r, err := f.Run(None, dist.Two, .05); err != nil || len(r.Differences) != 0 {
		t.Errorf("none: %v %v", r, err)
	}
	for m := None; m <= Duncan; m++ {
		if got, ok := ParseMethod(m.String()); !ok || got != m {
			t.Errorf("%v is not parsed", m)
		}
	}
	if _, ok := ParseMethod("unknown"); ok {
		t.Error("an unknown method is parsed")
	}
}

// Protected: no P is below that of F.
func TestProtected(t *testing.T) {
	f := cotton()
	f.TermP = .0042
	for i, d := range run(t, f, ProtectedLSD, dist.Two).Differences {
		near(t, "P", d.Adjusted, math.Max(run(t, f, LSD, dist.Two).Differences[i].P, .0042), 1e-15)
	}
}

// A mean that cannot be estimated leaves the others as if it were not there.
func TestInestimable(t *testing.T) {
	f := cotton()
	f.Estimates = append(f.Estimates, math.NaN())
	diff := f.Diff
	f.Diff = func(i, j int) (float64, float64) {
		if i == 5 || j == 5 {
			return math.NaN(), math.NaN()
		}
		return diff(i, j)
	}
	for i := range 5 {
		f.Pairs = append(f.Pairs, Pair{A: 5, B: i})
	}
	for _, m := range []Method{LSD, Tukey, Bonferroni, Holm, Sidak, Scheffe, NewmanKeuls, Duncan} {
		whole, without := run(t, f, m, dist.Two), run(t, cotton(), m, dist.Two)
		for i, d := range whole.Differences {
			if i < 10 {
				if d != without.Differences[i] && !math.IsNaN(d.Lower) {
					t.Errorf("%v: %+v, want %+v", m, d, without.Differences[i])
				}
				near(t, "P", d.Adjusted, without.Differences[i].Adjusted, 1e-15)
			} else if !math.IsNaN(d.P) || !math.IsNaN(d.Adjusted) || !math.IsNaN(d.Lower) {
				t.Errorf("%v: %+v of an inestimable mean", m, d)
			}
		}
	}
	// No error at all: equal means are not judged, different ones are.
	f = Family{Estimates: []float64{1, 1, 2}, Pairs: []Pair{{A: 0, B: 1}, {A: 2, B: 0}}, Diff: func(i, j int) (float64, float64) { return 0, 4 }}
	r := run(t, f, Tukey, dist.Two)
	if !math.IsNaN(r.Differences[0].Adjusted) || r.Differences[1].Adjusted != 0 {
		t.Errorf("no error: %+v", r.Differences)
	}
}

// With unequal numbers and no differences a limit excludes zero in at most 5 % of simulated
// trials (Tukey-Kramer: Hayter, Ann. Statist. 12 (1984) 61), with Dunnett in exactly 5 %.
func TestFamilyLevel(t *testing.T) {
	const trials = 100_000
	sizes := []float64{3, 5, 9, 4}
	f := Family{
		Estimates: make([]float64, 4),
		Diff:      func(i, j int) (float64, float64) { return math.Sqrt(1/sizes[i] + 1/sizes[j]), 17 },
		TermDF:    3,
	}
	for _, tt := range []struct {
		method Method
		side   dist.Side
		exact  bool
		pairs  []Pair
	}{
		{Tukey, dist.Two, false, []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}, {A: 2, B: 1}, {A: 3, B: 1}, {A: 3, B: 2}}},
		{Scheffe, dist.Two, false, []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}, {A: 2, B: 1}, {A: 3, B: 1}, {A: 3, B: 2}}},
		{Bonferroni, dist.Two, false, []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}, {A: 2, B: 1}, {A: 3, B: 1}, {A: 3, B: 2}}},
		{Sidak, dist.Less, false, []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}}},
		{Dunnett, dist.Two, true, []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}}},
		{Dunnett, dist.Greater, true, []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}}},
		{Dunnett, dist.Less, true, []Pair{{A: 0, B: 2}, {A: 1, B: 2}, {A: 3, B: 2}}},
		{LSD, dist.Greater, true, []Pair{{A: 1, B: 0}}},
	} {
		f.Pairs = tt.pairs
		r := run(t, f, tt.method, tt.side)
		if r.Correlations || r.Approximate != (tt.method == Tukey || tt.method == Sidak) {
			t.Errorf("%v: flags %v %v", tt.method, r.Approximate, r.Correlations)
		}
		random := rand.New(rand.NewPCG(5, 6))
		wrong := 0
		for range trials {
			var m [4]float64
			for i, n := range sizes {
				m[i] = random.NormFloat64() / math.Sqrt(n)
			}
			var s float64
			for range 17 {
				x := random.NormFloat64()
				s += x * x / 17
			}
			s = math.Sqrt(s)
			for _, d := range r.Differences {
				// The estimates given were zero: the limits are the half widths of s = 1.
				if diff := m[d.A] - m[d.B]; diff+d.Lower*s > 0 || diff+d.Upper*s < 0 {
					wrong++
					break
				}
			}
		}
		rate := float64(wrong) / trials
		chance := 4 * math.Sqrt(.05*.95/trials)
		if rate > .05+chance || tt.exact && rate < .05-chance {
			t.Errorf("%v, %v: family error %.4f", tt.method, tt.side, rate)
		}
	}
}

// Unequal degrees of freedom, as in split plots: each pair its own, and said so.
func TestUnequalDegreesOfFreedom(t *testing.T) {
	f := Family{
		Estimates: []float64{3, 5, 9},
		Pairs:     []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 2, B: 1}},
		Diff: func(i, j int) (float64, float64) {
			if i+j == 1 {
				return 1.5, 12
			}
			return 1.8, 6.4
		},
		TermDF: 2,
	}
	r := run(t, f, Tukey, dist.Two)
	if !r.Approximate {
		t.Error("not flagged")
	}
	near(t, "own df", r.find(2, 0).Adjusted, dist.StudentizedRangeUpper(math.Sqrt2*6/1.8, 3, 6.4), 1e-9)
	near(t, "own df", r.find(1, 0).Upper, 2+1.5*dist.StudentizedRangeQuantile(.05, 3, 12)/math.Sqrt2, 1e-9)
	if r := run(t, f, Scheffe, dist.Two); !r.Approximate {
		t.Error("Scheffé not flagged")
	}
	if r := run(t, f, Bonferroni, dist.Two); r.Approximate {
		t.Error("Bonferroni flagged")
	}
}
