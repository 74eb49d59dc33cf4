package linear

import (
	"math"
	"testing"

	"penwright/protocol/factor"
)

// near wants relative agreement to tol, or absolute where want is small.
func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > tol*math.Max(1, math.Abs(want)) {
		t.Errorf("%s = %.15g, want %.15g", what, got, want)
	}
}

func levels(n int, l ...int32) factor.Factor { return factor.Factor{Level: l, N: n} }

// grid numbers n rows: (row / slow) mod n.
func grid(rows, slow, n int) factor.Factor {
	f := factor.Factor{Level: make([]int32, rows), N: n}
	for i := range f.Level {
		f.Level[i] = int32(i / slow % n)
	}
	return f
}

func fit(t *testing.T, m Model) *Fit {
	t.Helper()
	f, err := m.Fit()
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// without drops a row of a model.
func without(m Model, row int) Model {
	cut := func(x []float64) []float64 { return append(append([]float64(nil), x[:row]...), x[row+1:]...) }
	cutF := func(f factor.Factor) factor.Factor {
		return factor.Factor{Level: append(append([]int32(nil), f.Level[:row]...), f.Level[row+1:]...), N: f.N}
	}
	out := Model{Y: cut(m.Y), Terms: m.Terms}
	for _, f := range m.Nuisance {
		out.Nuisance = append(out.Nuisance, cutF(f))
	}
	for _, f := range m.Factors {
		out.Factors = append(out.Factors, cutF(f))
	}
	for _, x := range m.Covariates {
		out.Covariates = append(out.Covariates, cut(x))
	}
	if m.Trend != nil {
		tr := *m.Trend
		tr.Unit, tr.Time = cutF(tr.Unit), cut(tr.Time)
		out.Trend = &tr
	}
	return out
}

func extrusion() Model {
	// pressure × 6 batches. Montgomery, Design and Analysis of Experiments (data from memory).
	return Model{
		Y: []float64{
			90.3, 89.2, 98.2, 93.9, 87.4, 97.9,
			92.5, 89.5, 90.6, 94.7, 87.0, 95.8,
			85.5, 90.8, 89.6, 86.2, 88.0, 93.4,
			82.5, 89.5, 85.6, 87.4, 78.9, 90.7,
		},
		Nuisance: []factor.Factor{grid(24, 1, 6)},
		Factors:  []factor.Factor{grid(24, 6, 4)},
		Terms:    [][]int{{0}},
	}
}

func sed(e *Estimates, i, j int) float64 {
	return math.Sqrt(e.Cov(i, i) + e.Cov(j, j) - 2*e.Cov(i, j))
}

// Montgomery's extrusion trial: complete as printed; with a plot lost, the exact adjusted
// sums of squares by Yates, Empire J. Exper. Agric. 1 (1933) 129-142: error as printed,
// treatments as printed less the bias of the inserted value.
func TestMissingPlot(t *testing.T) {
	complete := fit(t, extrusion())
	near(t, "error SS", complete.RSS, 109.88625, 1e-12)
	for _, a := range []Adjustment{Partial, Marginal, Sequential} {
		near(t, "pressure SS", complete.Tests(a)[0].SS, 178.17125, 1e-12)
	}

	f := fit(t, without(extrusion(), 9)) // 94.7
	if f.DF != 14 {
		t.Errorf("error df %d, want 14", f.DF)
	}
	near(t, "error SS", f.RSS, 101.696, 1e-12)
	near(t, "pressure adjusted", f.Tests(Partial)[0].SS, 163.398166666667, 1e-12)
	near(t, "pressure F", f.Tests(Marginal)[0].SS/3/f.MS(), 7.49808033529, 1e-11)
	m := f.Means(0)
	near(t, "SED 8700-8500", sed(m, 1, 0), 1.65655599899, 1e-11)
	near(t, "SED 8900-8500", sed(m, 2, 0), 1.55606340916, 1e-11)
	nuisance, err := f.Nuisance(Marginal)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "blocks adjusted", nuisance[0].SS, 189.522, 1e-11)

	f = fit(t, without(extrusion(), 22)) // 78.9
	near(t, "error SS", f.RSS, 100.702222222222, 1e-12)
	near(t, "pressure adjusted", f.Tests(Partial)[0].SS, 132.314444444444, 1e-12)
	near(t, "pressure F", f.Tests(Sequential)[0].SS/3/f.MS(), 6.13161650043, 1e-11)
}

// Checks A-D and new entries e-l in augmented blocks: Federer 1956 (data from memory).
func TestAugmentedBlocks(t *testing.T) {
	f := fit(t, Model{
		Y: []float64{
			83, 77, 78, 78, 70, 75, 74,
			79, 81, 81, 91, 79, 78,
			92, 79, 87, 81, 89, 96, 82,
		},
		Nuisance: []factor.Factor{levels(3, 0, 0, 0, 0, 0, 0, 0, 1, 1, 1, 1, 1, 1, 2, 2, 2, 2, 2, 2, 2)},
		Factors: []factor.Factor{levels(12,
			0, 1, 2, 3, 6, 10, 11,
			0, 1, 2, 3, 4, 8,
			0, 1, 2, 3, 5, 7, 9)},
		Terms: [][]int{{0}},
	})
	near(t, "error SS", f.RSS, 161.833333333333, 1e-12)
	if f.DF != 6 {
		t.Errorf("error df %d, want 6", f.DF)
	}
	entries := f.Tests(Partial)[0]
	near(t, "entries adjusted", entries.SS, 285.095238095238, 1e-12)
	if entries.DF != 11 {
		t.Errorf("entries df %d", entries.DF)
	}
	blocks, err := f.Nuisance(Sequential)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "blocks", blocks[0].SS, 360.071428571429, 1e-12)
	m := f.Means(0)
	for i, want := range []float64{84.666667, 79, 82, 83.333333, 78.25, 86.5, 73.25, 93.5, 77.25, 79.5, 78.25, 77.25} {
		near(t, "mean", m.Value[i], want, 1e-8)
	}
	near(t, "SED of checks", sed(m, 0, 1), 4.240457697, 1e-9)
	near(t, "SED of entries in one block", sed(m, 6, 10), 7.344688179, 1e-9)
	near(t, "SED of entries in two blocks", sed(m, 6, 4), 8.211611021, 1e-9)
	near(t, "SED check-entry", sed(m, 0, 6), 6.360686546, 1e-9)

	// checks among themselves and what is left of the entries
	var checks, all [][]float64
	for i := range 11 {
		w := make([]float64, 12)
		w[i], w[i+1] = 1, -1
		all = append(all, w)
		if i < 3 {
			checks = append(checks, w)
		}
	}
	h := m.Hypothesis(checks)
	near(t, "checks", h.SS, 52.9166666667, 1e-11)
	whole := m.Hypothesis(append(all, checks...))
	near(t, "all contrasts", whole.SS, entries.SS, 1e-12)
	near(t, "rest", whole.SS-h.SS, 232.178571429, 1e-11)
	if whole.DF != 11 || whole.Lost != 3 {
		t.Errorf("df %d, lost %d", whole.DF, whole.Lost)
	}
}

// Shaw & Mitchell-Olds, Ecology 74 (1993) 1638 (data from memory): the three adjustments.
func TestUnbalancedFactorial(t *testing.T) {
	m := Model{
		Y:       []float64{50, 57, 57, 71, 85, 91, 94, 102, 110, 105, 120},
		Factors: []factor.Factor{levels(2, 0, 0, 0, 0, 0, 1, 1, 1, 1, 1, 1), levels(2, 0, 0, 1, 1, 1, 0, 0, 0, 0, 1, 1)},
		Terms:   [][]int{{0}, {1}, {0, 1}},
	}
	f := fit(t, m)
	near(t, "error", f.RSS, 747.75, 1e-12)
	if f.DF != 7 {
		t.Errorf("error df %d", f.DF)
	}
	check := func(f *Fit, a Adjustment, want ...float64) {
		t.Helper()
		for i, s := range f.Tests(a) {
			near(t, "SS", s.SS, want[i], 1e-11)
		}
	}
	check(f, Sequential, 4291.21212121, 590.175438596, 11.4078947368)
	check(f, Marginal, 4846.04210526, 590.175438596, 11.4078947368)
	check(f, Partial, 4807.93421053, 597.197368421, 11.4078947368)
	a, b := f.Means(0), f.Means(1)
	near(t, "treatment 1", a.Value[0], 62.25, 1e-13)
	near(t, "treatment 2", a.Value[1], 105.875, 1e-13)
	near(t, "size 1", b.Value[0], 76.375, 1e-13)
	near(t, "size 2", b.Value[1], 91.75, 1e-13)
	m.Factors[0], m.Factors[1] = m.Factors[1], m.Factors[0]
	check(fit(t, m), Sequential, 35.3454545455, 4846.04210526, 11.4078947368)
}

// Brandt, Iowa Agric. Exp. Sta. Res. Bull. 234 (1938): reversal trial, each cow with a
// straight line of its own.
func TestSwitchback(t *testing.T) {
	y := []float64{
		433, 413.7, 362.9, 744.6, 797.4, 780.3, 858.2, 753.8, 680.1, 977.2, 1025.2, 1007.4, 655, 616.1, 494.6,
		671.3, 610.3, 596.8, 615.1, 555.4, 488.5, 776.9, 733, 693.9, 1101.8, 958.8, 939.6, 764.4, 717.6, 717,
	}
	cow, period := grid(30, 3, 10), grid(30, 1, 3)
	grain := factor.Factor{Level: make([]int32, 30), N: 2}
	time := make([]float64, 30)
	for i := range grain.Level {
		grain.Level[i] = (period.Level[i] + cow.Level[i]/5) % 2
		time[i] = float64(period.Level[i] + 1)
	}
	for _, nuisance := range [][]factor.Factor{{cow, period}, {period}} {
		f := fit(t, Model{
			Y:        y,
			Nuisance: nuisance,
			Trend:    &Trend{Unit: cow, Time: time, Order: 1, Centre: 2},
			Factors:  []factor.Factor{grain},
			Terms:    [][]int{{0}},
		})
		if f.DF != 8 {
			t.Fatalf("error df %d, want 8", f.DF)
		}
		m := f.Means(0)
		near(t, "effect", m.Value[1]-m.Value[0], 21.71, 1e-11)
		near(t, "its SE", sed(m, 0, 1), 7.68736707202, 1e-11)
		near(t, "F", f.Tests(Partial)[0].SS/f.MS(), 7.97561917139, 1e-11)
		near(t, "mean", (m.Value[0]+m.Value[1])/2, 717.996666666667, 1e-12)
	}
}

// a) Leprosy: Snedecor & Cochran, Statistical Methods (data from memory).
// b) Fibre strength on diameter: Montgomery (data from memory).
func TestCovariance(t *testing.T) {
	f := fit(t, Model{
		Y: []float64{6, 0, 2, 8, 11, 4, 13, 1, 8, 0, 0, 2, 3, 1, 18, 4, 14, 9, 1, 9,
			13, 10, 18, 5, 23, 12, 5, 16, 1, 20},
		Covariates: [][]float64{{11, 8, 5, 14, 19, 6, 10, 6, 11, 3, 6, 6, 7, 8, 18, 8, 19, 8, 5, 15,
			16, 13, 11, 9, 21, 16, 12, 12, 7, 12}},
		Factors: []factor.Factor{grid(30, 10, 3)},
		Terms:   [][]int{{0}},
	})
	s := f.Slopes()
	near(t, "slope", s.Value[0], .98718381113, 1e-10)
	near(t, "its SE", math.Sqrt(s.Cov(0, 0)), .164497567753, 1e-10)
	tests := f.Tests(Partial)
	near(t, "drugs", tests[1].SS, 68.5537106045, 1e-11)
	near(t, "error", f.RSS, 417.202596965, 1e-11)
	near(t, "slope F", tests[0].SS/f.MS(), math.Pow(s.Value[0], 2)/s.Cov(0, 0), 1e-12)
	m := f.Means(0)
	for i, want := range []float64{6.71496346262, 6.82393479483, 10.1611017426} {
		near(t, "mean", m.Value[i], want, 1e-11)
	}
	near(t, "SED D-A", sed(m, 1, 0), 1.79513505795, 1e-11)
	near(t, "SED F-A", sed(m, 2, 0), 1.88678064842, 1e-11)
	near(t, "SED F-D", sed(m, 2, 1), 1.85386642417, 1e-11)
	slopes, df, rss, err := f.EqualSlopes(0)
	if err != nil || slopes.DF != 2 || df != 24 {
		t.Fatalf("%v: df %d, %d", err, slopes.DF, df)
	}
	near(t, "slopes", slopes.SS, 19.6446451445, 1e-10)
	near(t, "slopes F", slopes.SS/2/(rss/float64(df)), .592959443159, 1e-10)

	f = fit(t, Model{
		Y:          []float64{36, 41, 39, 42, 49, 40, 48, 39, 45, 44, 35, 37, 42, 34, 32},
		Covariates: [][]float64{{20, 25, 24, 25, 32, 22, 28, 22, 30, 28, 21, 23, 26, 21, 15}},
		Factors:    []factor.Factor{grid(15, 5, 3)},
		Terms:      [][]int{{0}},
	})
	near(t, "slope", f.Slopes().Value[0], .953987730061, 1e-11)
	near(t, "regression", f.Tests(Marginal)[0].SS, 178.014110429, 1e-11)
	near(t, "machines", f.Tests(Marginal)[1].SS, 13.283850623, 1e-10)
	near(t, "error", f.RSS, 27.9858895706, 1e-11)
	m = f.Means(0)
	for i, want := range []float64{40.3824130879, 41.4192229039, 38.7983640082} {
		near(t, "mean", m.Value[i], want, 1e-11)
		near(t, "its SE", math.Sqrt(m.Cov(i, i)), []float64{.723625211271, .744416933353, .787878466626}[i], 1e-11)
	}
	slopes, df, rss, err = f.EqualSlopes(0)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slopes F", slopes.SS/float64(slopes.DF)/(rss/float64(df)), .487838680456, 1e-10)
}

// Balanced incomplete block, within blocks: Montgomery, catalyst (data as reprinted).
func TestIncompleteBlocks(t *testing.T) {
	f := fit(t, Model{
		Y:        []float64{73, 74, 71, 75, 67, 72, 73, 75, 68, 75, 72, 75},
		Nuisance: []factor.Factor{levels(4, 0, 1, 3, 1, 2, 3, 0, 1, 2, 0, 2, 3)},
		Factors:  []factor.Factor{grid(12, 3, 4)},
		Terms:    [][]int{{0}},
	})
	near(t, "error", f.RSS, 3.25, 1e-12)
	if f.DF != 5 {
		t.Errorf("error df %d, want 5", f.DF)
	}
	near(t, "treatments adjusted", f.Tests(Sequential)[0].SS, 22.75, 1e-12)
	near(t, "F", f.Tests(Partial)[0].SS/3/f.MS(), 11.6666666667, 1e-11)
	unadjusted, err := f.Nuisance(Sequential)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "blocks", unadjusted[0].SS, 55, 1e-12)
	adjusted, err := f.Nuisance(Partial)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "blocks adjusted", adjusted[0].SS, 66.0833333333, 1e-11)
	m := f.Means(0)
	for i, want := range []float64{-1.125, -.875, -.5, 2.5} {
		near(t, "effect", m.Value[i]-72.5, want, 1e-12)
	}
}

// One-way data by the rule of the NIST Statistical Reference Datasets SmLs01, 04, 07
// (public domain): SS 1.68 on 8 and 1.80 on 180 df, F 21. What float64 cannot hold of
// values near 10^6 and 10^12 bounds the digits.
func TestLargeCommonPart(t *testing.T) {
	for _, c := range []struct{ base, tol float64 }{{1, 1e-13}, {1e6, 1e-9}, {1e12, 1e-3}} {
		var y []float64
		for _, tenths := range []float64{4, 3, 5, 3, 5, 3, 5, 3, 5} {
			at := c.base*10 + tenths
			y = append(y, at/10)
			for range 10 {
				y = append(y, (at-1)/10, (at+1)/10)
			}
		}
		m := Model{Y: y, Factors: []factor.Factor{grid(189, 21, 9)}, Terms: [][]int{{0}}}
		f := fit(t, m)
		near(t, "F", f.Tests(Partial)[0].SS/8/f.MS(), 21, 21*c.tol)
		// the same as a covariate that explains itself
		m.Covariates = [][]float64{y}
		g := fit(t, m)
		near(t, "slope on itself", g.Slopes().Value[0], 1, 1e-12)
		near(t, "no error left", g.RSS, 0, 1e-18)
		near(t, "mean at the covariate's mean", g.Means(0).Value[3]-c.base, f.Mean-c.base, 1e-12*c.base)
	}
}
