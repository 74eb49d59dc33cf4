package strata

import (
	"errors"
	"math"
	"testing"

	"penwright/analysis/dist"
	"penwright/protocol/factor"
)

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > tol*math.Abs(want) {
		t.Errorf("%s = %.15g, want %.15g", what, got, want)
	}
}

// grid numbers n rows: (row / slow) mod n.
func grid(rows, slow, n int) factor.Factor {
	f := factor.Factor{Level: make([]int32, rows), N: n}
	for i := range f.Level {
		f.Level[i] = int32(i / slow % n)
	}
	return f
}

// runs gives class i to n[i] rows.
func runs(n ...int) factor.Factor {
	f := factor.Factor{N: len(n)}
	for c, k := range n {
		for range k {
			f.Level = append(f.Level, int32(c))
		}
	}
	return f
}

func levels(n int, l ...int32) factor.Factor { return factor.Factor{Level: l, N: n} }

func analyse(t *testing.T, d Design, y []float64) *Analysis {
	t.Helper()
	if d.Random == nil {
		d.Random = make([]bool, len(d.Units))
	}
	s, err := New(d)
	if err != nil {
		t.Fatal(err)
	}
	return s.Analyse(y)
}

// line is what a printed table says of a source.
type line struct {
	what string
	df   int
	ss   float64
}

func (a *Analysis) term(t *testing.T, i int, want line) {
	t.Helper()
	near(t, want.what, a.Terms[i].SS, want.ss, 1e-10)
	if a.Terms[i].DF != want.df {
		t.Errorf("%s: df %d, want %d", want.what, a.Terms[i].DF, want.df)
	}
}

func (a *Analysis) stratum(t *testing.T, u int, want line) {
	t.Helper()
	near(t, want.what, a.Strata[u].SS, want.ss, 1e-10)
	if a.Strata[u].DF != want.df {
		t.Errorf("%s: df %d, want %d", want.what, a.Strata[u].DF, want.df)
	}
}

func (a *Analysis) err(t *testing.T, u int, want line) {
	t.Helper()
	near(t, want.what, a.Strata[u].ErrorSS, want.ss, 1e-10)
	if a.Strata[u].ErrorDF != want.df {
		t.Errorf("%s: df %d, want %d", want.what, a.Strata[u].ErrorDF, want.df)
	}
}

func (a *Analysis) f(term int) float64 {
	l := a.Terms[term]
	return l.SS / float64(l.DF) / a.Strata[l.Stratum].ErrorMS()
}

func sed(m *Means, i, j int) float64 { return math.Sqrt(m.Difference(i, j).Variance) }

// Montgomery, Design and Analysis of Experiments: cotton content, printed SS 475.76,
// 161.20, F 14.757.
func TestCompletelyRandomized(t *testing.T) {
	y := []float64{7, 7, 15, 11, 9, 12, 17, 12, 18, 18, 14, 18, 18, 19, 19, 19, 25, 22, 19, 23, 7, 10, 11, 15, 11}
	a := analyse(t, Design{Units: []factor.Factor{factor.Equality(25)}, Factors: []factor.Factor{grid(25, 5, 5)}, Terms: [][]int{{0}}}, y)
	a.term(t, 0, line{"cotton", 4, 475.76})
	a.err(t, 0, line{"error", 20, 161.2})
	near(t, "F", a.f(0), 14.75682382134, 1e-12)
	near(t, "P", dist.FUpper(a.f(0), 4, 20), 9.12793712406e-6, 1e-10)
	m := a.Means(0)
	near(t, "LSD", sed(m, 0, 1)*dist.TQuantile(.025, m.Difference(0, 1).DF), 3.74545178246, 1e-11)
}

// Snedecor & Cochran, Statistical Methods: fats (data from memory).
func TestOneWayFats(t *testing.T) {
	y := []float64{64, 72, 68, 77, 56, 95, 78, 91, 97, 82, 85, 77, 75, 93, 78, 71, 63, 76, 55, 66, 49, 64, 70, 68}
	a := analyse(t, Design{Units: []factor.Factor{factor.Equality(24)}, Factors: []factor.Factor{grid(24, 6, 4)}, Terms: [][]int{{0}}}, y)
	a.term(t, 0, line{"fats", 3, 1636.5})
	a.err(t, 0, line{"error", 20, 2018})
	near(t, "F", a.f(0), 5.40634291377602, 1e-13)
	near(t, "P", dist.FUpper(a.f(0), 3, 20), .00687594775474, 1e-11)
}

// Gomez & Gomez 1984 p. 26: seeding rates in randomized blocks, F 2.17, CV 6.7 %.
func TestRandomizedBlocks(t *testing.T) {
	y := []float64{5113, 5346, 5272, 5164, 4804, 5254, 5398, 5952, 5713, 4831, 4848, 4542,
		5307, 4719, 5483, 4986, 4432, 4919, 4678, 4264, 4749, 4410, 4748, 4098}
	a := analyse(t, Design{
		Units:   []factor.Factor{grid(24, 6, 4), factor.Equality(24)},
		Factors: []factor.Factor{grid(24, 1, 6)},
		Terms:   [][]int{{0}},
	}, y)
	a.stratum(t, 0, line{"blocks", 3, 1944360.83333333333})
	a.term(t, 0, line{"rates", 5, 1198330.83333333333})
	a.err(t, 1, line{"error", 15, 1658376.16666666667})
	near(t, "F", a.f(0), 2.16777868149536, 1e-12)
	near(t, "P", dist.FUpper(a.f(0), 5, 15), .112809412635, 1e-10)
	near(t, "CV", 100*math.Sqrt(a.Strata[1].ErrorMS())/a.Mean, 6.704257745615658, 1e-13)
	m := a.Means(0)
	near(t, "mean", m.Value[2], 5304.25, 1e-15)
	near(t, "SE", math.Sqrt(m.Mean(0).Variance), 166.251624887632, 1e-12)
	near(t, "SED", sed(m, 0, 5), 235.115302682653, 1e-12)
	if m.Mean(0).DF != 15 {
		t.Errorf("df %g", m.Mean(0).DF)
	}
	for i, w := range [][]float64{{-5, -3, -1, 1, 3, 5}, {5, -1, -4, -4, -1, 5}, {-5, 7, 4, -4, -7, 5}} {
		h, err := m.Test([][]float64{w})
		if err != nil || h.Stratum != 1 || h.DF != 1 {
			t.Fatalf("%+v, %v", h, err)
		}
		near(t, "trend", h.SS, []float64{760034.8, 74404.7619047619, 113301.422222222}[i], 1e-11)
		e := m.Contrast(w)
		near(t, "t² is F", e.Value*e.Value/e.Variance, h.SS/a.Strata[1].ErrorMS(), 1e-12)
	}
	if h, err := m.Test(nil); err == nil {
		t.Errorf("no contrasts: %+v", h)
	}
	r := a.Residuals(1)
	near(t, "residual", r.Value[0], -210.25, 1e-11)
	for _, h := range r.Leverage {
		near(t, "leverage", h, .375, 1e-14)
	}
	if r.Rank != 9 || r.DF != 15 {
		t.Errorf("rank %d, df %d", r.Rank, r.DF)
	}
	// Gomez & Gomez print k = .982 and 1.60
	ratio, corrected := Efficiency([]MeanSquare{{DF: 3, MS: a.Strata[0].SS / 3}}, 5, MeanSquare{DF: 15, MS: a.Strata[1].ErrorMS()})
	near(t, "efficiency", ratio, 1.6342056159519, 1e-12)
	near(t, "corrected", corrected, 1.605535341987882, 1e-12)
}

// Montgomery: extrusion pressure in six batches (data from memory), printed SS 178.17,
// 192.25, 109.89, efficiency 1.87.
func TestExtrusion(t *testing.T) {
	y := []float64{90.3, 89.2, 98.2, 93.9, 87.4, 97.9, 92.5, 89.5, 90.6, 94.7, 87.0, 95.8,
		85.5, 90.8, 89.6, 86.2, 88.0, 93.4, 82.5, 89.5, 85.6, 87.4, 78.9, 90.7}
	d := Design{Units: []factor.Factor{grid(24, 1, 6), factor.Equality(24)}, Factors: []factor.Factor{grid(24, 6, 4)}, Terms: [][]int{{0}}}
	a := analyse(t, d, y)
	a.term(t, 0, line{"pressure", 3, 178.17125})
	a.stratum(t, 0, line{"batches", 5, 192.252083333333})
	a.err(t, 1, line{"error", 15, 109.88625})
	near(t, "F", a.f(0), 8.10707663607, 1e-11)
	_, corrected := Efficiency([]MeanSquare{{DF: 5, MS: a.Strata[0].SS / 5}}, 3, MeanSquare{DF: 15, MS: a.Strata[1].ErrorMS()})
	near(t, "efficiency", corrected, 1.8727335945823, 1e-12)

	// a plot lost: refused
	lost := Design{Random: make([]bool, 2), Terms: d.Terms}
	for _, f := range d.Units {
		lost.Units = append(lost.Units, f.Compact())
	}
	keep := append(grid(24, 1, 24).Level[:9:9], grid(24, 1, 24).Level[10:]...)
	for i, f := range lost.Units {
		lost.Units[i] = restrict(f, keep)
	}
	lost.Factors = []factor.Factor{restrict(d.Factors[0], keep)}
	var spread SpreadTerm
	if _, err := New(lost); !errors.As(err, &spread) || spread.Term != 0 {
		t.Errorf("a lost plot: %v", err)
	}
}

func square(n int, letters string, y ...float64) (Design, []float64) {
	f := factor.Factor{N: n}
	for _, c := range letters {
		f.Level = append(f.Level, c-'A')
	}
	return Design{
		Units:   []factor.Factor{grid(n*n, n, n), grid(n*n, 1, n), factor.Equality(n * n)},
		Factors: []factor.Factor{f},
		Terms:   [][]int{{0}},
	}, y
}

// Latin squares: a) Gomez & Gomez 1984 p. 33 (from memory; printed efficiencies 3.25, .81,
// 3.66 from rounded steps). b) Fisher, Statistical Methods for Research Workers, §49.
// c) Goulden 1952 p. 216.
func TestLatinSquares(t *testing.T) {
	d, y := square(4, "BDCA"+"CADB"+"ACBD"+"DBAC",
		1.640, 1.210, 1.425, 1.345, 1.475, 1.185, 1.400, 1.290, 1.670, .710, 1.665, 1.180, 1.565, 1.290, 1.655, .660)
	a := analyse(t, d, y)
	a.stratum(t, 0, line{"rows", 3, .0301546875})
	a.stratum(t, 1, line{"columns", 3, .8273421875})
	a.term(t, 0, line{"hybrids", 3, .4268421875})
	a.err(t, 2, line{"error", 6, .129584375})
	near(t, "F", a.f(0), 6.58786504932, 1e-11)
	rows, columns := MeanSquare{DF: 3, MS: a.Strata[0].SS / 3}, MeanSquare{DF: 3, MS: a.Strata[1].SS / 3}
	e := MeanSquare{DF: 6, MS: a.Strata[2].ErrorMS()}
	crd, _ := Efficiency([]MeanSquare{rows, columns}, 3, e)
	near(t, "v. completely randomized", crd, 3.246914414, 1e-9)
	by, corrected := Efficiency([]MeanSquare{rows}, 3, e)
	near(t, "rows", by, .8663515567, 1e-9)
	near(t, "rows corrected", corrected, .8085947862, 1e-9)
	by, corrected = Efficiency([]MeanSquare{columns}, 3, e)
	near(t, "columns", by, 3.942291461, 1e-9)
	near(t, "columns corrected", corrected, 3.67947203, 1e-8)

	d, y = square(5, "DECBA"+"BDEAC"+"CABDE"+"EBACD"+"ACDEB",
		376, 371, 355, 356, 335, 316, 338, 336, 356, 332, 326, 326, 335, 343, 330, 317, 343, 330, 327, 336, 321, 332, 317, 318, 306)
	a = analyse(t, d, y)
	a.stratum(t, 0, line{"rows", 4, 4240.24})
	a.stratum(t, 1, line{"columns", 4, 701.84})
	a.term(t, 0, line{"letters", 4, 330.24})
	a.err(t, 2, line{"error", 12, 1754.32})
	near(t, "F", a.f(0), .564731633909, 1e-11)
	near(t, "SE", math.Sqrt(a.Means(0).Mean(0).Variance), 5.4072790446459, 1e-12)
	near(t, "leverage", a.Residuals(2).Leverage[7], .52, 1e-13)

	d, y = square(5, "AEDCB"+"EBCDA"+"DCABE"+"CABED"+"BDEAC",
		9.3, 6.3, 11.8, 15.9, 7.6, 5.3, 7.6, 13.2, 8.6, 4.9, 7.6, 15.4, 6.5, 6.0, 4.6, 9.3, 4.0, 6.2, 5.1, 5.4, 4.9, 6.4, 3.3, 9.5, 11.8)
	a = analyse(t, d, y)
	a.stratum(t, 0, line{"rows", 4, 46.668})
	a.stratum(t, 1, line{"columns", 4, 14.02})
	a.term(t, 0, line{"letters", 4, 196.608})
	a.err(t, 2, line{"error", 12, 28.044})
	near(t, "F", a.f(0), 21.0320924262, 1e-11)
	near(t, "P", dist.FUpper(a.f(0), 4, 12), 2.36552543027e-5, 1e-10)
	for i, want := range []float64{6.84, 6.46, 13.12, 7.96, 4.92} {
		near(t, "mean", a.Means(0).Value[i], want, 1e-14)
	}
}

// splitPlot has rows in the order block, whole plot, subplot; whole gives the whole-plot
// treatment of each whole plot.
func splitPlot(blocks, whole, sub int) Design {
	n := blocks * whole * sub
	return Design{
		Units:   []factor.Factor{grid(n, whole*sub, blocks), grid(n, sub, blocks*whole), factor.Equality(n)},
		Random:  []bool{false, true, true},
		Factors: []factor.Factor{grid(n, sub, whole), grid(n, 1, sub)},
		Terms:   [][]int{{0}, {1}, {0, 1}},
	}
}

// Montgomery: pulp, preparation method × temperature (data from memory; he prints 77.55,
// 128.39, 36.28, 434.08, 75.17, 20.67 + 50.83, F 7.08). Standard errors after Cochran & Cox.
func TestSplitPlot(t *testing.T) {
	byTemp := [4][9]float64{
		{30, 34, 29, 28, 31, 31, 31, 35, 32}, {35, 41, 26, 32, 36, 30, 37, 40, 34},
		{37, 38, 33, 40, 42, 32, 41, 39, 39}, {36, 42, 36, 41, 40, 40, 40, 44, 45},
	}
	y := make([]float64, 36)
	for i := range y {
		y[i] = byTemp[i%4][i/4]
	}
	a := analyse(t, splitPlot(3, 3, 4), y)
	a.stratum(t, 0, line{"replicates", 2, 77.5555555556})
	a.term(t, 0, line{"methods", 2, 128.388888889})
	a.err(t, 1, line{"error a", 4, 36.2777777778})
	a.term(t, 1, line{"temperatures", 3, 434.083333333})
	a.term(t, 2, line{"interaction", 6, 75.1666666667})
	a.err(t, 2, line{"error b", 18, 71.5})
	for i, want := range []float64{7.07810107198, 36.4265734266, 3.15384615385} {
		near(t, "F", a.f(i), want, 1e-11)
	}
	methods, temps, both := a.Means(0), a.Means(1), a.Means(2)
	near(t, "SED of methods", sed(methods, 0, 1), 1.22946088757, 1e-11)
	near(t, "SED of temperatures", sed(temps, 0, 1), .939529695849, 1e-11)
	near(t, "SED within a method", sed(both, 0, 1), 1.62731316843, 1e-11)
	near(t, "SED at a temperature", sed(both, 0, 4), 1.87020993078, 1e-11)
	// (Ea + 3Eb)²/(Ea²/4 + 9Eb²/18) with Ea = 653/72 and Eb = 143/36, in fractions
	near(t, "its df", both.Difference(0, 4).DF, 15.478760205491177, 1e-13)
	if d := both.Difference(0, 1); d.DF != 18 {
		t.Errorf("df %g, want 18", d.DF)
	}
	// A √(Ea/rb), B √((Ea + (b−1)Eb)/rab), AB √((Ea + (b−1)Eb)/rb), blocks fixed
	ea, eb := a.Strata[1].ErrorMS(), a.Strata[2].ErrorMS()
	near(t, "SE of a method", methods.Mean(0).Variance, ea/12, 1e-13)
	near(t, "SE of a temperature", temps.Mean(0).Variance, (ea+3*eb)/36, 1e-13)
	near(t, "SE of a cell", both.Mean(0).Variance, (ea+3*eb)/12, 1e-13)
	// components with random replicates: Searle's balanced estimates
	c, _ := a.Component(1)
	near(t, "whole plots", c, 1.27430555556, 1e-10)
	c, _ = a.Component(0)
	near(t, "replicates", c, 2.47569444444, 1e-10)
	c, se := a.Component(2)
	near(t, "subplots", c, 3.97222222222, 1e-10)
	near(t, "its SE", se, 3.97222222222*math.Sqrt(2./18), 1e-10)
	// random replicates: SE of a method mean with 3.88 df
	d := splitPlot(3, 3, 4)
	d.Random[0] = true
	one := analyse(t, d, y).Means(0).Mean(0)
	near(t, "SE with random replicates", math.Sqrt(one.Variance), 1.25738558864, 1e-10)
	near(t, "its df", one.DF, 3.88377538511, 1e-10)
}

// Box, Hunter & Hunter 2005 table 9.1 (data from memory; printed 26519, 14440, 4289.1,
// 3269.8, 1120.9): whole plots completely randomized.
func TestSplitPlotWholePlotsRandomized(t *testing.T) {
	y := []float64{67, 73, 83, 89, 65, 91, 87, 86, 155, 127, 147, 212, 108, 100, 90, 153, 140, 142, 121, 150, 33, 8, 46, 54}
	temp := levels(3, 0, 1, 2, 2, 1, 0)
	whole := grid(24, 4, 6)
	f := factor.Factor{N: 3}
	for _, w := range whole.Level {
		f.Level = append(f.Level, temp.Level[w])
	}
	a := analyse(t, Design{
		Units:   []factor.Factor{whole, factor.Equality(24)},
		Factors: []factor.Factor{f, grid(24, 1, 4)},
		Terms:   [][]int{{0}, {1}, {0, 1}},
	}, y)
	a.term(t, 0, line{"temperature", 2, 26519.25})
	a.err(t, 0, line{"heats", 3, 14439.625})
	a.term(t, 1, line{"coating", 3, 4289.125})
	a.term(t, 2, line{"interaction", 6, 3269.75})
	a.err(t, 1, line{"error", 9, 1120.875})
	near(t, "F coating", a.f(1), 11.4797591168, 1e-11)
	near(t, "F interaction", a.f(2), 4.37571094011, 1e-11)
}

// Yates, J. Roy. Statist. Soc. Suppl. 2 (1935) 181: oats, blocks I-III.
func TestSplitPlotOats(t *testing.T) {
	y := []float64{80, 82, 94, 126, 63, 70, 109, 99, 62, 90, 100, 116,
		60, 102, 89, 96, 89, 129, 132, 124, 68, 64, 112, 86,
		89, 82, 86, 104, 97, 99, 119, 121, 53, 74, 118, 113}
	a := analyse(t, splitPlot(3, 3, 4), y)
	a.stratum(t, 0, line{"blocks", 2, 214.222222222222})
	a.term(t, 0, line{"varieties", 2, 1808.38888888889})
	a.err(t, 1, line{"error a", 4, 2481.44444444444})
	a.term(t, 1, line{"nitrogen", 3, 7687.63888888889})
	a.term(t, 2, line{"interaction", 6, 1350.27777777778})
	a.err(t, 2, line{"error b", 18, 2710.33333333333})
}

// Gomez & Gomez 1984 p. 143: split-split plot, nitrogen 0 and 140, two managements, three
// varieties (a subset, sums of squares computed apart).
func TestSplitSplitPlot(t *testing.T) {
	y := []float64{
		3.32, 6.101, 5.355, 4.66, 6.573, 7.018, 3.132, 6.86, 9.314, 5.217, 7.254, 10.36,
		3.864, 5.122, 5.536, 5.915, 5.495, 8.02, 4.375, 6.894, 8.508, 5.389, 7.812, 9.896,
		4.507, 4.815, 5.244, 5.4, 4.225, 7.642, 4.678, 6.573, 8.032, 7.309, 8.95, 9.712,
	}
	a := analyse(t, Design{
		Units:   []factor.Factor{grid(36, 12, 3), grid(36, 6, 6), grid(36, 3, 12), factor.Equality(36)},
		Factors: []factor.Factor{grid(36, 6, 2), grid(36, 3, 2), grid(36, 1, 3)},
		Terms:   [][]int{{0}, {1}, {2}, {0, 1}, {0, 2}, {1, 2}, {0, 1, 2}},
	}, y)
	a.stratum(t, 0, line{"replicates", 2, .1813415})
	a.err(t, 1, line{"error a", 2, 1.07947405556})
	a.err(t, 2, line{"error b", 4, 1.60630177778})
	a.err(t, 3, line{"error c", 16, 9.51454666667})
	for i, want := range []line{{"N", 1, 27.4803113611}, {"M", 1, 16.8332413611}, {"V", 2, 56.6570131667}, {"NM", 1, .166600027778},
		{"NV", 2, 9.14056772222}, {"MV", 2, 2.28755972222}, {"NMV", 2, 1.48281938889}} {
		a.term(t, i, want)
	}
	for i, want := range []float64{50.9142599948, 41.9180046838, 47.6382239967, .414866073318, 7.6855518544, 1.92342088582, 1.24678090578} {
		near(t, "F", a.f(i), want, 1e-9)
	}
}

// Gomez & Gomez 1984 p. 110: strip plot, varieties 1-4 × nitrogen 0, 60, 120 (a subset,
// sums of squares computed apart).
func TestStripPlot(t *testing.T) {
	y := []float64{
		2373, 4076, 7254, 4007, 5630, 7053, 2620, 4676, 7666, 2726, 4838, 6881,
		3958, 6431, 6808, 5795, 7334, 8284, 4508, 6672, 7328, 5630, 7007, 7735,
		4384, 4889, 8582, 5001, 7177, 6297, 5621, 7019, 8611, 3821, 4816, 6667,
	}
	rep := grid(36, 12, 3)
	nitrogen := grid(36, 1, 3)
	a := analyse(t, Design{
		Units:   []factor.Factor{rep, grid(36, 3, 12), factor.Infimum(rep, nitrogen), factor.Equality(36)},
		Factors: []factor.Factor{grid(36, 3, 4), nitrogen},
		Terms:   [][]int{{0}, {1}, {0, 1}},
	}, y)
	a.stratum(t, 0, line{"replicates", 2, 14037759.7222222})
	a.term(t, 0, line{"varieties", 3, 4582214.97222222})
	a.err(t, 1, line{"error a", 6, 6540731.61111111})
	a.term(t, 1, line{"nitrogen", 2, 62506809.0555556})
	a.err(t, 2, line{"error b", 4, 4604967.11111111})
	a.term(t, 2, line{"interaction", 6, 3645617.61111111})
	a.err(t, 3, line{"error c", 12, 3812155.55555556})
	for i, want := range []float64{1.40113224167, 27.1475593842, 1.9126279387} {
		near(t, "F", a.f(i), want, 1e-10)
	}
	// variance of a cell mean: η = ξ_strip + ξ_lane − ξ_cell for the grand mean
	x, l, c := a.Strata[1].ErrorMS(), a.Strata[2].ErrorMS(), a.Strata[3].ErrorMS()
	near(t, "cell mean", a.Means(2).Mean(0).Variance, ((x+l-c)+3*x+2*l+6*c)/36, 1e-13)
	near(t, "variety mean", a.Means(0).Mean(0).Variance, ((x+l-c)+3*x)/36, 1e-13)
}

// Snedecor & Cochran: calcium in turnips, plants, leaves, determinations (data from
// memory; printed 7.5603, 2.6302, .0799).
func TestSampling(t *testing.T) {
	y := []float64{3.28, 3.09, 3.52, 3.48, 2.88, 2.80, 2.46, 2.44, 1.87, 1.92, 2.19, 2.19,
		2.77, 2.66, 3.74, 3.44, 2.55, 2.55, 3.78, 3.87, 4.07, 4.12, 3.31, 3.31}
	plant, leaf := grid(24, 6, 4), grid(24, 2, 12)
	a := analyse(t, Design{Units: []factor.Factor{plant, leaf, factor.Equality(24)}}, y)
	a.stratum(t, 0, line{"plants", 3, 7.56034583333})
	a.stratum(t, 1, line{"leaves", 8, 2.6302})
	a.stratum(t, 2, line{"determinations", 12, .07985})
	near(t, "F", a.Strata[0].ErrorMS()/a.Strata[1].ErrorMS(), 7.66516699195, 1e-10)
	// the same with plants taken for a treatment of leaves
	b := analyse(t, Design{Units: []factor.Factor{leaf, factor.Equality(24)}, Factors: []factor.Factor{plant}, Terms: [][]int{{0}}}, y)
	b.term(t, 0, line{"plants", 3, 7.56034583333})
	b.err(t, 0, line{"leaves", 8, 2.6302})
	b.err(t, 1, line{"determinations", 12, .07985})
	near(t, "P", dist.FUpper(b.f(0), 3, 8), .00972512130627, 1e-10)
	ss, df, harmonic := Within(y, leaf)
	near(t, "within", ss, .07985, 1e-12)
	if df != 12 || harmonic != 2 {
		t.Errorf("df %d, harmonic mean %g", df, harmonic)
	}
}

// Cochran & Cox 1957 p. 97: potato scab, control and 2 × 3 (printed F 3.61).
func TestControlAndFactorial(t *testing.T) {
	y := []float64{12, 10, 24, 29, 30, 18, 32, 26, 9, 9, 16, 4, 16, 10, 18, 18, 10, 4, 4, 5, 30, 7, 21, 9, 18, 24, 12, 19, 17, 7, 16, 17}
	a := analyse(t, Design{Units: []factor.Factor{factor.Equality(32)}, Factors: []factor.Factor{runs(8, 4, 4, 4, 4, 4, 4)}, Terms: [][]int{{0}}}, y)
	a.term(t, 0, line{"treatments", 6, 972.34375})
	a.err(t, 0, line{"error", 25, 1122.875})
	near(t, "F", a.f(0), 3.60808842629, 1e-11)
	m := a.Means(0)
	var total float64
	for _, c := range []struct {
		what string
		ss   float64
		w    [][]float64
	}{
		{"control v. rest", 518.010416667, [][]float64{{-6, 1, 1, 1, 1, 1, 1}}},
		{"season", 228.166666667, [][]float64{{0, 1, 1, 1, -1, -1, -1}}},
		{"rate", 189.583333333, [][]float64{{0, 1, -1, 0, 1, -1, 0}, {0, 1, 0, -1, 1, 0, -1}}},
		{"season × rate", 36.5833333333, [][]float64{{0, 1, -1, 0, -1, 1, 0}, {0, 1, 0, -1, -1, 0, 1}}},
	} {
		h, err := m.Test(c.w)
		if err != nil {
			t.Fatal(err)
		}
		near(t, c.what, h.SS, c.ss, 1e-10)
		total += h.SS
	}
	near(t, "sum", total, 972.34375, 1e-13)
	e := m.Contrast([]float64{-1, 1. / 6, 1. / 6, 1. / 6, 1. / 6, 1. / 6, 1. / 6})
	near(t, "estimate", e.Value, -9.29166666667, 1e-11)
	near(t, "its SE", math.Sqrt(e.Variance), 2.73602509735, 1e-11)
}

// The covariate of Montgomery's fibre trial: printed pieces, efficiency computed apart.
func TestCovariateEfficiency(t *testing.T) {
	ratio, effective := CovariateEfficiency(17.1666666666667, 27.9858895706/11, 66.1333333333, 195.6, 2)
	near(t, "effective", effective, 2.974270348, 1e-9)
	near(t, "ratio", ratio, 5.771723702, 1e-9)
}
