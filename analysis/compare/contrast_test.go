package compare

import (
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/dist"
)

// Coefficients of R. A. Fisher & F. Yates, Statistical Tables, Table XXIII; those for unequal
// spacing computed by hand in whole numbers.
func TestTrendCoefficients(t *testing.T) {
	for _, tt := range []struct {
		levels []float64
		want   [][]float64
		square []float64
	}{
		{[]float64{1, 2, 3}, [][]float64{{-1, 0, 1}, {1, -2, 1}}, nil},
		{[]float64{1, 2, 3, 4}, [][]float64{{-3, -1, 1, 3}, {1, -1, -1, 1}, {-1, 3, -3, 1}}, []float64{20, 4, 20}},
		{[]float64{0, 5, 10, 15, 20}, [][]float64{{-2, -1, 0, 1, 2}, {2, -1, -2, -1, 2}, {-1, 2, 0, -2, 1}, {1, -4, 6, -4, 1}}, []float64{10, 14, 10, 70}},
		{[]float64{1, 2, 3, 4, 5, 6}, [][]float64{{-5, -3, -1, 1, 3, 5}, {5, -1, -4, -4, -1, 5}, {-5, 7, 4, -4, -7, 5}, {1, -3, 2, 2, -3, 1}, {-1, 5, -10, 10, -5, 1}}, []float64{70, 84, 180, 28, 252}},
		{[]float64{1, 2, 3, 4, 5, 6, 7}, [][]float64{{-3, -2, -1, 0, 1, 2, 3}, {5, 0, -3, -4, -3, 0, 5}, {-1, 1, 1, 0, -1, -1, 1}, {3, -7, 1, 6, 1, -7, 3}}, []float64{28, 84, 6, 154}},
		{[]float64{1, 2, 3, 4, 5, 6, 7, 8}, [][]float64{{-7, -5, -3, -1, 1, 3, 5, 7}, {7, 1, -3, -5, -5, -3, 1, 7}, {-7, 5, 7, 3, -3, -7, -5, 7}, {7, -13, -3, 9, 9, -3, -13, 7}}, []float64{168, 168, 264, 616}},
		{[]float64{0, 1, 2, 4}, [][]float64{{-7, -3, 1, 9}, {7, -4, -8, 5}, {-3, 8, -6, 1}}, []float64{140, 154, 110}},
		{[]float64{0, 1, 2, 4, 8}, [][]float64{{-3, -2, -1, 1, 5}, {31, 2, -19, -37, 23}, {-837, 752, 916, -1016, 185}, {21, -64, 56, -14, 1}}, []float64{40, 3224, 3171610, 7870}},
		{[]float64{0, 60, 90, 120, 150}, [][]float64{{-14, -4, 1, 6, 11}, {110, -106, -103, -26, 125}, {-17, 64, -22, -63, 38}, {1, -10, 20, -15, 4}}, []float64{370, 50246, 10282, 742}},
		{[]float64{1, 2, 4, 8, 16}, [][]float64{{-26, -21, -11, 9, 49}, {30, 11, -19, -47, 25}}, []float64{3720, 4216}},
	} {
		n := len(tt.levels)
		equal := make([]float64, n)
		for i := range equal {
			equal[i] = 1
		}
		rows := Trend(tt.levels, equal, len(tt.want))
		if len(rows) != len(tt.want) {
			t.Fatalf("%v: %d rows", tt.levels, len(rows))
		}
		for d, row := range rows {
			var square float64
			for i, want := range tt.want[d] {
				near(t, "ratio of coefficients", row[i]+1, row[n-1]*want/tt.want[d][n-1]+1, 1e-13)
				square += want * want
			}
			if tt.square != nil && square != tt.square[d] {
				t.Errorf("%v degree %d: sum of squares %g, tables %g", tt.levels, d+1, square, tt.square[d])
			}
			// The leading coefficient of the powers themselves: xᵈ has 1, lower powers 0.
			for power := range d + 2 {
				var got, size float64
				for i, w := range row {
					v := math.Pow(tt.levels[i], float64(power))
					got += w * v
					size += math.Abs(w * v)
				}
				want := 0.0
				if power == d+1 {
					want = 1
				}
				if math.Abs(got-want) > 1e-12*math.Max(1, size) {
					t.Errorf("%v degree %d: leading coefficient of x^%d is %g", tt.levels, d+1, power, got)
				}
			}
		}
	}
}

// Second road: with unequal replication the estimates are the leading coefficients of
// polynomials fitted in order by the normal equations, and the sums of squares add up to
// that between levels when as many degrees are fitted as there are.
func TestTrendUnequalReplication(t *testing.T) {
	random := rand.New(rand.NewPCG(13, 14))
	for range 100 {
		n := 3 + random.IntN(4)
		levels, replication, mean := make([]float64, n), make([]float64, n), make([]float64, n)
		for i := range n {
			levels[i] = float64(3*i + random.IntN(3))
			replication[i] = float64(1 + random.IntN(9))
			mean[i] = 10 + 5*random.NormFloat64()
		}
		var total, weighted, between float64
		for i := range n {
			total += replication[i]
			weighted += replication[i] * mean[i]
		}
		for i := range n {
			between += replication[i] * math.Pow(mean[i]-weighted/total, 2)
		}
		var ss float64
		for d, row := range Trend(levels, replication, n) {
			estimates, cov := mean, func(i, j int) float64 {
				if i == j {
					return 1 / replication[i]
				}
				return 0
			}
			c := NewContrast(row, estimates, cov, math.Inf(1))
			near(t, "leading coefficient", c.Estimate+1, leading(levels, replication, mean, d+1)+1, 1e-6)
			ss += c.F // the error mean square is one
		}
		near(t, "sums of squares", ss, between, 1e-9)
	}
}

// leading solves the weighted normal equations of a polynomial by elimination.
func leading(x, w, y []float64, degree int) float64 {
	m := degree + 1
	a := make([][]float64, m)
	var centre float64
	for _, v := range x {
		centre += v / float64(len(x))
	}
	for p := range m {
		a[p] = make([]float64, m+1)
		for i := range x {
			for q := range m {
				a[p][q] += w[i] * math.Pow(x[i]-centre, float64(p+q))
			}
			a[p][m] += w[i] * y[i] * math.Pow(x[i]-centre, float64(p))
		}
	}
	for p := range m {
		for q := p + 1; q < m; q++ {
			f := a[q][p] / a[p][p]
			for k := p; k <= m; k++ {
				a[q][k] -= f * a[p][k]
			}
		}
	}
	return a[m-1][m] / a[m-1][m-1]
}

func TestTrendEdges(t *testing.T) {
	if rows := Trend([]float64{2, 2, 2}, []float64{1, 1, 1}, 3); len(rows) != 0 {
		t.Errorf("one distinct level: %d rows", len(rows))
	}
	if rows := Trend(nil, nil, 3); rows != nil {
		t.Error("no levels")
	}
	// A level without replication carries nothing, two equal levels one degree.
	rows := Trend([]float64{0, 1, 1, 5}, []float64{2, 1, 1, 0}, 3)
	if len(rows) != 1 || rows[0][3] != 0 {
		t.Fatalf("rows %v", rows)
	}
	near(t, "slope", rows[0][1], .5, 1e-14)
	near(t, "slope", rows[0][0], -1, 1e-14)
}

// Seed rates of rice: K. A. Gomez & A. A. Gomez, Statistical Procedures for Agricultural
// Research (1984) p. 26; the sums of squares of the trends recomputed exactly.
func TestContrastSeedRates(t *testing.T) {
	blocks := [][]float64{
		{5113, 5346, 5272, 5164, 4804, 5254}, {5398, 5952, 5713, 4831, 4848, 4542},
		{5307, 4719, 5483, 4986, 4432, 4919}, {4678, 4264, 4749, 4410, 4748, 4098},
	}
	mean := make([]float64, 6)
	for _, b := range blocks {
		for i, y := range b {
			mean[i] += y / 4
		}
	}
	const ms = 1658376.16667 / 15
	cov := func(i, j int) float64 {
		if i == j {
			return ms / 4
		}
		return 0
	}
	rows := Trend([]float64{25, 50, 75, 100, 125, 150}, []float64{4, 4, 4, 4, 4, 4}, 3)
	for d, want := range []float64{760034.8, 74404.7619048, 113301.422222} {
		c := NewContrast(rows[d], mean, cov, 15)
		near(t, "SS", c.F*ms, want, 1e-10)
		if d == 0 {
			near(t, "F", c.F, 6.87450907047, 1e-10)
			near(t, "P", c.P, .0192398015228, 1e-9)
			if c.Estimate >= 0 || c.T >= 0 {
				t.Error("yield falls with the rate")
			}
		}
	}
	// Two means: the contrast is t of their difference.
	c := NewContrast([]float64{1, 0, 0, -1, 0, 0}, append(mean[:5:5], math.NaN()), cov, 15)
	near(t, "SED", c.SE, math.Sqrt(2*ms/4), 1e-14)
	near(t, "P", c.P, dist.TTwoSided((mean[0]-mean[3])/c.SE, 15), 1e-14)
	// Covariances count: a common part of all means cancels from a contrast.
	shared := NewContrast([]float64{1, -.5, -.5}, []float64{4, 2, 1}, func(i, j int) float64 {
		if i == j {
			return 10
		}
		return 9
	}, 8)
	near(t, "SE", shared.SE, math.Sqrt(1.5), 1e-12)
}
