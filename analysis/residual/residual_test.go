package residual

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"penwright/analysis/dist"
	"penwright/analysis/linear"
	"penwright/protocol/factor"
)

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > tol*math.Abs(want) {
		t.Errorf("%s = %.12g, want %.12g", what, got, want)
	}
}

func grid(rows, slow, n int) factor.Factor {
	f := factor.Factor{Level: make([]int32, rows), N: n}
	for i := range f.Level {
		f.Level[i] = int32(i / slow % n)
	}
	return f
}

func squares(n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = float64((i + 1) * (i + 1))
	}
	return x
}

// cotton is percentage 15, 20, 25, 30, 35: Montgomery, Design and Analysis of Experiments.
var cotton = [][]float64{{7, 7, 15, 11, 9}, {12, 17, 12, 18, 18}, {14, 18, 18, 19, 19}, {19, 25, 22, 19, 23}, {7, 10, 11, 15, 11}}

func deviations(groups [][]float64) []float64 {
	var out []float64
	for _, g := range groups {
		m, _ := moments(g)
		for _, v := range g {
			out = append(out, v-m)
		}
	}
	return out
}

// The first case is of Shapiro & Wilk, Biometrika 52 (1965) 591, who print W = .79; the
// others were computed apart with Royston's approximation in high precision.
func TestShapiroWilk(t *testing.T) {
	for _, c := range []struct {
		x    []float64
		w, p float64
	}{
		{[]float64{148, 154, 158, 160, 161, 162, 166, 170, 182, 195, 236}, .7888146948, .006703814},
		{[]float64{6, 1, -4, 8, -2, 5, 0}, .9534758585, .76119378},
		{[]float64{1, 2, 4}, 27. / 28, .636886845},
		{[]float64{49, -67, 8, 16, 6, 23, 28, 41, 14, 29, 56, 24, 75, 60, -48}, .9007876157, .097847036},
		{deviations(cotton), .9438681228, .181757508},
		{squares(100), .8961800544, 9.3902458e-7},
		{squares(2000), .8952430865, 6.84289e-35},
	} {
		got, err := ShapiroWilk(c.x)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "W", got.Statistic, c.w, 1e-8)
		near(t, "P", got.P, c.p, 1e-5)
		shifted := slices.Clone(c.x)
		for i := range shifted {
			shifted[i] = 1e6 - 3*shifted[i]
		}
		back, err := ShapiroWilk(shifted)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "W turned round", back.Statistic, c.w, 1e-8)
	}
}

// Second road: under normality P is uniform.
func TestShapiroWilkLevel(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for _, n := range []int{5, 8, 20, 60} {
		var below float64
		const draws = 6000
		x := make([]float64, n)
		for range draws {
			for i := range x {
				x[i] = r.NormFloat64()
			}
			got, err := ShapiroWilk(x)
			if err != nil {
				t.Fatal(err)
			}
			if got.P < .1 {
				below++
			}
		}
		if share := below / draws; math.Abs(share-.1) > .015 {
			t.Errorf("n = %d: %.3f below .1", n, share)
		}
	}
}

func TestShapiroWilkRefuses(t *testing.T) {
	for _, c := range []struct {
		x    []float64
		want error
	}{
		{[]float64{1, 2}, ErrFew},
		{make([]float64, 5001), ErrMany},
		{[]float64{4, 4, 4, 4}, ErrSpread},
		{[]float64{1e12, 1e12, 1e12 + 1e-3}, ErrSpread},
		{[]float64{1, math.NaN(), 2}, ErrSpread},
	} {
		if _, err := ShapiroWilk(c.x); !errors.Is(err, c.want) {
			t.Errorf("%v: %v, want %v", c.x[:2], err, c.want)
		}
	}
}

// gear is (x − 1)·1000 of ten batches: NIST/SEMATECH e-Handbook of Statistical Methods,
// sections 1.3.5.7 and 1.3.5.10 (public domain), which print 20.78580 and 1.705910 as
// computed in single precision.
var gear = [][]float64{
	{6, -4, -2, 0, -8, -7, 2, -1, -6, 0}, {-2, 6, 0, 2, -3, -2, -4, 0, 6, -12},
	{-9, -13, -3, -1, -5, -6, 0, -1, -4, -4}, {5, 2, -6, 0, -5, -6, -2, -4, 2, -4},
	{-2, -2, -18, -10, 2, -16, -4, -7, -20, -4}, {9, 13, 9, -3, -12, 2, -5, -2, -19, -4},
	{-10, 4, -4, 1, -2, 0, 18, 10, -4, 2}, {-2, 0, 6, 0, 2, -4, -2, -4, 2, 6},
	{2, -2, -4, -5, -4, 4, 4, -2, -1, -9}, {-9, -5, -16, -6, -3, -3, -9, -2, 4, -3},
}

// peaks is Montgomery's peak discharge trial (data from memory).
var peaks = [][]float64{{.34, .12, 1.23, .70, 1.75, .12}, {.91, 2.94, 2.14, 2.36, 2.86, 4.55},
	{6.31, 8.37, 9.75, 6.09, 9.82, 7.24}, {17.15, 11.82, 10.95, 17.20, 14.35, 16.82}}

// fats is of Snedecor & Cochran, Statistical Methods (data from memory).
var fats = [][]float64{{64, 72, 68, 77, 56, 95}, {78, 91, 97, 82, 85, 77}, {75, 93, 78, 71, 63, 76}, {55, 66, 49, 64, 70, 68}}

func TestEqualVariances(t *testing.T) {
	for _, c := range []struct {
		name       string
		groups     [][]float64
		b, bp      float64
		bf, bfp    float64
		tolB, tolF float64
	}{
		{"gear", gear, 20.7858734281, .0136358632781, 1.705917693, .0990829755522, 1e-10, 1e-9},
		{"fats", fats, 1.7504380511, .625779087, .343404926587, math.NaN(), 1e-9, 1e-11},
		{"cotton", cotton, .933090288958, math.NaN(), .317948717949, math.NaN(), 1e-11, 1e-11},
		// Montgomery prints 4.55 for the Brown-Forsythe F, which his data do not give
		{"peaks", peaks, math.NaN(), math.NaN(), 4.56844082004, .0135705581501, 0, 1e-11},
	} {
		b, err := Bartlett(c.groups)
		if err != nil {
			t.Fatal(err)
		}
		f, err := BrownForsythe(c.groups)
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range []struct {
			what      string
			got, want float64
			tol       float64
		}{{"Bartlett", b.Statistic, c.b, c.tolB}, {"its P", b.P, c.bp, 1e-8}, {"Brown-Forsythe", f.Statistic, c.bf, c.tolF}, {"its P", f.P, c.bfp, 1e-8}} {
			if !math.IsNaN(v.want) {
				near(t, c.name+" "+v.what, v.got, v.want, v.tol)
			}
		}
	}
	if b, _ := Bartlett(gear); b.DF != 9 {
		t.Errorf("df %d", b.DF)
	}
	if f, _ := BrownForsythe(gear); f.DF != 9 || f.ErrorDF != 90 {
		t.Errorf("df %d, %d", f.DF, f.ErrorDF)
	}
	if _, err := Bartlett([][]float64{{1, 2, 3}, {2, 2, 2}}); !errors.Is(err, ErrSpread) {
		t.Error(err)
	}
	if _, err := BrownForsythe([][]float64{{1}, {2}, nil}); !errors.Is(err, ErrFew) {
		t.Error(err)
	}
	if _, err := BrownForsythe([][]float64{{1, 1}, {2, 2}}); !errors.Is(err, ErrSpread) {
		t.Error(err)
	}
}

// Montgomery prints a slope of .446 for the peak discharge trial.
func TestSpreadOnMean(t *testing.T) {
	s, err := SpreadOnMean(peaks)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slope", s.Slope, .446471431075, 1e-11)
	near(t, "power", s.Power, 1-.446471431075, 1e-11)
	// SD exactly proportional to the mean: the logarithm
	s, err = SpreadOnMean([][]float64{{1, 3}, {10, 30}, {5, 15}, {7}, {2, 2}})
	if err != nil || s.Groups != 3 || math.Abs(s.Power) > 1e-12 || s.SE > 1e-7 {
		t.Errorf("%+v, %v", s, err)
	}
	if _, err := SpreadOnMean([][]float64{{-1, -3}, {10, 30}}); !errors.Is(err, ErrSign) {
		t.Error(err)
	}
	if _, err := SpreadOnMean([][]float64{{1, 3}, {0, 4}}); !errors.Is(err, ErrSpread) {
		t.Error(err)
	}
}

// Montgomery's impurity trial, 3 × 5 (data from memory; he prints .0985 and F .36); and
// the seeding rates of Gomez & Gomez 1984 p. 26, F 1.2138 computed apart.
func TestNonAdditivity(t *testing.T) {
	m := linear.Model{
		Y:        []float64{5, 4, 6, 3, 5, 3, 1, 4, 2, 3, 1, 1, 3, 1, 2},
		Nuisance: []factor.Factor{grid(15, 1, 5)},
		Factors:  []factor.Factor{grid(15, 5, 3)},
		Terms:    [][]int{{0}},
	}
	got, ss, err := NonAdditivity(m)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "SS", ss, .0985221674877, 1e-10)
	near(t, "F", got.Statistic, .362694300518, 1e-10)
	near(t, "P", got.P, .566002588603, 1e-10)
	if got.ErrorDF != 7 {
		t.Errorf("error df %d", got.ErrorDF)
	}

	y := []float64{5113, 5346, 5272, 5164, 4804, 5254, 5398, 5952, 5713, 4831, 4848, 4542,
		5307, 4719, 5483, 4986, 4432, 4919, 4678, 4264, 4749, 4410, 4748, 4098}
	rates := linear.Model{Y: y, Nuisance: []factor.Factor{grid(24, 6, 4)}, Factors: []factor.Factor{grid(24, 1, 6)}, Terms: [][]int{{0}}}
	got, ss, err = NonAdditivity(rates)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "F", got.Statistic, 1.2137846405845, 1e-10)
	near(t, "P", got.P, .289164672207471, 1e-10)

	// second road: Tukey's own formula for a complete table, (Σ y bᵢ tⱼ)² / (Σ b² Σ t²)
	var grand, num, bb, tt float64
	b, tr := make([]float64, 4), make([]float64, 6)
	for i, v := range y {
		grand += v / 24
		b[i/6] += v / 6
		tr[i%6] += v / 4
	}
	for i, v := range y {
		num += v * (b[i/6] - grand) * (tr[i%6] - grand)
	}
	for i := range b {
		bb += (b[i] - grand) * (b[i] - grand)
	}
	for i := range tr {
		tt += (tr[i] - grand) * (tr[i] - grand)
	}
	near(t, "SS", ss, num*num/bb/tt, 1e-9)

	m.Y = []float64{1, 2, 3, 4, 5, 2, 3, 4, 5, 6, 3, 4, 5, 6, 7}
	if _, _, err := NonAdditivity(m); !errors.Is(err, ErrSpread) {
		t.Errorf("exactly additive: %v", err)
	}
	two := linear.Model{Y: []float64{1, 2, 4, 3}, Nuisance: []factor.Factor{grid(4, 1, 2)}, Factors: []factor.Factor{grid(4, 2, 2)}, Terms: [][]int{{0}}}
	if _, _, err := NonAdditivity(two); !errors.Is(err, ErrFew) {
		t.Errorf("2 × 2: %v", err)
	}
}

// Age at first word and score of 21 children: Mickey, Dunn & Clark 1967, with the
// influence printed by Cook 1979 (.652, .678, 3.607, .223; from memory).
func TestCases(t *testing.T) {
	x := []float64{15, 26, 10, 9, 15, 20, 18, 11, 8, 20, 7, 9, 10, 11, 11, 10, 12, 42, 17, 11, 10}
	y := []float64{95, 71, 83, 91, 102, 87, 93, 100, 104, 94, 113, 96, 83, 84, 102, 100, 105, 57, 121, 86, 100}
	m := linear.Model{Y: y, Covariates: [][]float64{x}}
	f, err := m.Fit()
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slope", f.Slopes().Value[0], -1.12698891, 1e-8)
	e, _ := f.Residuals()
	c := Cases(e, f.Leverages(), f.MS(), f.DF, f.Rank)
	near(t, "leverage of 18", c[17].Leverage, .6516099842, 1e-9)
	near(t, "Cook of 18", c[17].Cook, .6781120286, 1e-9)
	near(t, "internal of 19", c[18].Internal, 2.823368066, 1e-9)
	near(t, "deleted of 19", c[18].Deleted, 3.606979721, 1e-9)
	near(t, "Cook of 19", c[18].Cook, .2232882736, 1e-9)
	at, d, p := Outlier(c, f.DF)
	if at != 18 || d != c[18].Deleted {
		t.Errorf("outlier %d", at)
	}
	near(t, "its P", p, .0423288058, 1e-8)

	// second road: leave each row out and fit again
	for i := range y {
		less := linear.Model{
			Y:          slices.Delete(slices.Clone(y), i, i+1),
			Covariates: [][]float64{slices.Delete(slices.Clone(x), i, i+1)},
		}
		g, err := less.Fit()
		if err != nil {
			t.Fatal(err)
		}
		slope := g.Slopes().Value[0]
		var mx, shift float64
		for _, v := range less.Covariates[0] {
			mx += v / float64(len(y)-1)
		}
		at := func(v float64) float64 { return g.Mean + slope*(v-mx) }
		near(t, "deleted", c[i].Deleted, (y[i]-at(x[i]))*math.Sqrt((1-c[i].Leverage)/g.MS()), 1e-8)
		for k := range y {
			shift += math.Pow(at(x[k])-(y[k]-e[k]), 2)
		}
		near(t, "Cook", c[i].Cook, shift/(2*f.MS()), 1e-8)
	}
}

func TestCasesWithoutFreedom(t *testing.T) {
	c := Cases([]float64{0, 1, -1}, []float64{1, .5, .5}, 2, 1, 2)
	if !math.IsNaN(c[0].Internal) || !math.IsNaN(c[1].Deleted) || math.IsNaN(c[1].Internal) {
		t.Errorf("%+v", c)
	}
	if at, _, p := Outlier(c, 1); at != -1 || !math.IsNaN(p) {
		t.Errorf("outlier %d, P %g", at, p)
	}
	// the others fit exactly: the deleted residual has no bound
	c = Cases([]float64{1}, []float64{.75}, 1, 4, 2)
	if !math.IsInf(c[0].Deleted, 1) {
		t.Errorf("%+v", c)
	}
}

// Bonferroni limits in the layout of R. E. Lund, Technometrics 17 (1975) 473, computed
// apart: n rows, p parameters, level .05; internal residuals by t/√((ν−1+t²)/ν).
// Two-sided limits of Grubbs 1969 follow from p = 1 (as reprinted).
func TestOutlierLimit(t *testing.T) {
	for _, c := range []struct {
		n, p          int
		external, int float64
	}{{10, 2, 4.02933717764, 2.36429710455}, {20, 5, 3.67459390847, 2.71373718202}, {24, 9, 3.7667297897, 2.7477423885}, {50, 10, 3.55812008133, 3.13092364934}} {
		df := c.n - c.p
		got := OutlierLimit(.05, c.n, df)
		near(t, "external", got, c.external, 1e-9)
		near(t, "internal", got*math.Sqrt(float64(df)/(float64(df-1)+got*got)), c.int, 1e-9)
	}
	for n, want := range map[int]float64{5: 1.71503731234, 7: 2.01996850768, 10: 2.28995408448, 20: 2.70824564581} {
		l := OutlierLimit(.05, n, n-1)
		near(t, "Grubbs", float64(n-1)/math.Sqrt(float64(n))*l/math.Sqrt(float64(n-2)+l*l), want, 1e-9)
	}
	if !math.IsNaN(OutlierLimit(.05, 4, 1)) {
		t.Error("a limit without freedom")
	}
}

// The band of order statistics against the binomial: the i-th smallest of n lies below
// x exactly when at least i of n do.
func TestEnvelope(t *testing.T) {
	const n, level = 12, .9
	e := OrderStatistics(n, level)
	for i := range n {
		for _, c := range []struct{ at, want float64 }{{e.Lower[i], .05}, {e.Upper[i], .95}} {
			p := dist.NormalUpper(-c.at)
			var sum float64
			for k := i + 1; k <= n; k++ {
				lg, _ := math.Lgamma(n + 1)
				a, _ := math.Lgamma(float64(k) + 1)
				b, _ := math.Lgamma(float64(n-k) + 1)
				sum += math.Exp(lg - a - b + float64(k)*math.Log(p) + float64(n-k)*math.Log1p(-p))
			}
			near(t, "probability", sum, c.want, 1e-9)
		}
		if !(e.Lower[i] < e.Score[i] && e.Score[i] < e.Upper[i]) || e.Score[i] != -e.Score[n-1-i] {
			t.Errorf("band %d: %g %g %g", i, e.Lower[i], e.Score[i], e.Upper[i])
		}
	}
	// independent values simulated reach the same band, and the same draws come again
	plain := func(dst, z []float64) { copy(dst, z) }
	s := Simulated(n, 20000, level, [32]byte{7}, plain)
	again := Simulated(n, 20000, level, [32]byte{7}, plain)
	for i := range n {
		if math.Abs(s.Lower[i]-e.Lower[i]) > .06 || math.Abs(s.Upper[i]-e.Upper[i]) > .06 {
			t.Errorf("%d: simulated %g %g, exact %g %g", i, s.Lower[i], s.Upper[i], e.Lower[i], e.Upper[i])
		}
		if s.Lower[i] != again.Lower[i] || s.Upper[i] != again.Upper[i] {
			t.Error("draws do not repeat")
		}
	}
}

func TestGroups(t *testing.T) {
	g := Groups([]float64{1, 2, 3}, factor.Factor{Level: []int32{2, 0, 2}, N: 3})
	if len(g) != 3 || len(g[1]) != 0 || !slices.Equal(g[2], []float64{1, 3}) {
		t.Errorf("%v", g)
	}
}
