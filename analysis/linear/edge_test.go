package linear

import (
	"errors"
	"math"
	"testing"

	"penwright/protocol/factor"
)

func TestRefusals(t *testing.T) {
	nan := math.NaN()
	one := []factor.Factor{levels(2, 0, 1)}
	for _, c := range []struct {
		m    Model
		want error
	}{
		{Model{}, NoRows{}},
		{Model{Y: []float64{1, nan}}, NotFinite{Row: 1, Covariate: -1}},
		{Model{Y: []float64{1, 2}, Covariates: [][]float64{{1, 2}, {math.Inf(1), 2}}}, NotFinite{Row: 0, Covariate: 1}},
		{Model{Y: []float64{1, 2}, Trend: &Trend{Unit: one[0], Time: []float64{1, nan}, Order: 1}}, NotFinite{Row: 1, Covariate: -2}},
		{Model{Y: []float64{1, 2}, Factors: []factor.Factor{{Level: []int32{0, 1}, N: 5000}}, Terms: [][]int{{0}}}, TooWide{Columns: 3001}},
	} {
		_, err := c.m.Fit()
		if !errors.Is(err, c.want) {
			t.Errorf("%v, want %v", err, c.want)
		}
	}
}

func TestSmallest(t *testing.T) {
	f := fit(t, Model{Y: []float64{7}})
	if f.Rank != 1 || f.DF != 0 || f.RSS != 0 || f.Mean != 7 || !math.IsNaN(f.MS()) {
		t.Errorf("%+v", f)
	}
	// a factor with one level, one with a level that has no row
	f = fit(t, Model{
		Y:       []float64{1, 3, 5, 7},
		Factors: []factor.Factor{levels(1, 0, 0, 0, 0), levels(3, 0, 0, 2, 2)},
		Terms:   [][]int{{0}, {1}, {0, 1}},
	})
	one, three, both := f.Means(0), f.Means(1), f.Means(2)
	if one.Estimable[0] || three.Estimable[1] || !three.Estimable[0] || len(both.Value) != 3 {
		t.Errorf("%v %v %v", one.Estimable, three.Estimable, both.Estimable)
	}
	near(t, "mean", three.Value[2], 6, 1e-15)
	if v, s, ok := three.Contrast([]float64{-1, 0, 1}); !ok || math.Abs(v-4) > 1e-12 || math.Abs(s-2) > 1e-12 {
		t.Errorf("contrast %g, %g", v, s)
	}
	if _, _, ok := three.Contrast([]float64{-1, 1, 0}); ok {
		t.Error("a contrast with an empty level")
	}
	for _, s := range f.Tests(Partial) {
		if s.Index == 1 && (s.Estimable || !math.IsNaN(s.SS)) {
			t.Errorf("%+v", s)
		}
	}
	if s := f.Tests(Marginal)[1]; s.DF != 1 || s.Lost != 1 || math.Abs(s.SS-16) > 1e-12 {
		t.Errorf("%+v", s)
	}
	if h := three.Hypothesis([][]float64{{1, 0, 1}}); h.Estimable {
		t.Error("weights that do not sum to zero")
	}
}

func TestAliased(t *testing.T) {
	// a covariate constant in blocks, one constant at all, a treatment confounded with blocks
	block := grid(12, 3, 4)
	x := make([]float64, 12)
	y := make([]float64, 12)
	for i := range x {
		x[i] = .1 * float64(block.Level[i])
		y[i] = float64(i * i % 7)
	}
	f := fit(t, Model{
		Y:          y,
		Nuisance:   []factor.Factor{block},
		Covariates: [][]float64{x, make([]float64, 12)},
		Factors:    []factor.Factor{grid(12, 6, 2), grid(12, 1, 3)},
		Terms:      [][]int{{0}, {1}},
	})
	got := f.Aliased()
	want := []Alias{{Covariate, 0, 1, true}, {Covariate, 1, 1, true}, {Term, 0, 1, true}}
	if len(got) != len(want) {
		t.Fatalf("%+v", got)
	}
	for i := range got {
		if got[i] != want[i] {
			t.Errorf("%+v, want %+v", got[i], want[i])
		}
	}
	if s := f.Slopes(); s.Estimable[0] || s.Estimable[1] {
		t.Error("slope of an aliased covariate")
	}
	if m := f.Means(0); m.Estimable[0] {
		t.Error("mean of a confounded treatment")
	}
	if c := f.Columns(); len(c) != 5 || c[2].Kind != Term || c[4].Level[0] != 1 {
		t.Errorf("%+v", c)
	}
	e := f.Coefficients()
	if e.Estimable[2] || !e.Estimable[3] {
		t.Errorf("%v", e.Estimable)
	}
}

// A covariate that blocks or another covariate already hold changes no mean, balanced or not.
func TestAliasedCovariateLeavesMeans(t *testing.T) {
	m := without(extrusion(), 9)
	x := make([]float64, len(m.Y))
	for i := range x {
		x[i] = float64(i*i%5) + float64(i)/7
	}
	m.Covariates = [][]float64{x}
	f := fit(t, m)
	block, double := make([]float64, len(x)), make([]float64, len(x))
	for i := range x {
		block[i] = math.Sqrt(float64(3 + m.Nuisance[0].Level[i]))
		double[i] = 5 - 2*x[i]
	}
	m.Covariates = [][]float64{block, x, double}
	g := fit(t, m)
	if g.DF != f.DF || len(g.Aliased()) != 2 {
		t.Errorf("df %d, want %d; %+v", g.DF, f.DF, g.Aliased())
	}
	a, b := f.Means(0), g.Means(0)
	for i := range a.Value {
		near(t, "mean", b.Value[i], a.Value[i], 1e-12)
		near(t, "variance", b.Cov(i, i), a.Cov(i, i), 1e-11)
	}
}

// Two rectangles of different size, rows and columns within each: means must be estimable
// although equal weights over rows and over columns contradict each other.
func TestUnequalSquares(t *testing.T) {
	var row, col, trt factor.Factor
	row.N, col.N, trt.N = 9, 7, 3
	var y []float64
	add := func(rows, cols, firstRow, firstCol int) {
		for r := range rows {
			for c := range cols {
				row.Level = append(row.Level, int32(firstRow+r))
				col.Level = append(col.Level, int32(firstCol+c))
				trt.Level = append(trt.Level, int32((r+c)%3))
				y = append(y, float64(10*(r+1)+c*c+3*((r+c)%3)+firstRow*firstCol))
			}
		}
	}
	add(3, 3, 0, 0)
	add(6, 4, 3, 3)
	f := fit(t, Model{Y: y, Nuisance: []factor.Factor{row, col}, Factors: []factor.Factor{trt}, Terms: [][]int{{0}}})
	m := f.Means(0)
	near(t, "difference", m.Value[2]-m.Value[0], 6, 1e-12)
	if !m.Estimable[0] {
		t.Fatal("not estimable")
	}
	// The data are additive: rectangle 1 has row average 20 and column average 5/3,
	// rectangle 2 35 and 3.5 and 9 beside; rows weigh them 3 : 6.
	near(t, "mean", m.Value[0], (3*(20+5./3)+6*(35+3.5+9))/9, 1e-12)
}

// A cow with a single record away from the centre has no line of its own: its record
// explains itself, and it enters no mean.
func TestTrendWithoutSupport(t *testing.T) {
	m := Model{
		Y:       []float64{10, 12, 15, 20, 25, 28, 99},
		Trend:   &Trend{Unit: levels(3, 0, 0, 0, 1, 1, 1, 2), Time: []float64{1, 2, 3, 1, 2, 3, 3}, Order: 1, Centre: 2},
		Factors: []factor.Factor{levels(2, 0, 1, 0, 1, 0, 1, 0)},
		Terms:   [][]int{{0}},
	}
	f := fit(t, m)
	if f.Unsupported() != 1 || f.DF != 1 || f.Leverages()[6] < 1-1e-12 {
		t.Errorf("unsupported %d, df %d, leverage %g", f.Unsupported(), f.DF, f.Leverages()[6])
	}
	less := fit(t, without(m, 6))
	a, b := f.Means(0), less.Means(0)
	for i := range a.Value {
		near(t, "mean", a.Value[i], b.Value[i], 1e-12)
		near(t, "its variance", a.Cov(i, i), b.Cov(i, i), 1e-12)
	}
}

// What rows are called and in which order they stand changes nothing; y in other units
// changes everything as it should.
func TestEquivariance(t *testing.T) {
	m := without(extrusion(), 9)
	f := fit(t, m)
	n := len(m.Y)
	turned := Model{Terms: m.Terms, Y: make([]float64, n)}
	turn := func(g factor.Factor) factor.Factor {
		out := factor.Factor{Level: make([]int32, n), N: g.N}
		for i, l := range g.Level {
			out.Level[n-1-i] = l
		}
		return out
	}
	for i, v := range m.Y {
		turned.Y[n-1-i] = 5 - 1000*v
	}
	turned.Nuisance = []factor.Factor{turn(m.Nuisance[0])}
	turned.Factors = []factor.Factor{turn(m.Factors[0])}
	g := fit(t, turned)
	near(t, "RSS", g.RSS, 1e6*f.RSS, 1e-11)
	near(t, "SS", g.Tests(Partial)[0].SS, 1e6*f.Tests(Partial)[0].SS, 1e-11)
	for i := range 4 {
		near(t, "mean", g.Means(0).Value[i], 5-1000*f.Means(0).Value[i], 1e-12)
	}
	hf, hg := f.Leverages(), g.Leverages()
	for i := range hf {
		near(t, "leverage", hg[n-1-i], hf[i], 1e-12)
	}
}
