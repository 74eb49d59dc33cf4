package compare

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Seeding rates of rice, Gomez & Gomez (1984) p. 26: four blocks, treatment totals of the
// book, error mean square 110558.411111; the trends there are linear 760035, quadratic
// 74405 and 363891 left over (recomputed to the digits below).
func TestTrendsOfSeedingRates(t *testing.T) {
	x := []float64{25, 50, 75, 100, 125, 150}
	m := []float64{5124, 5070.25, 5304.25, 4847.75, 4708, 4703.25}
	cov := func(i, j int) float64 {
		if i == j {
			return 0.25
		}
		return 0
	}
	steps, rest, df, ok := Trends(x, m, cov, 2)
	if !ok || len(steps) != 2 || df != 3 {
		t.Fatalf("steps %v, df %d, ok %v", steps, df, ok)
	}
	s2 := 1658376.16666667 / 15
	near(t, "linear SS", steps[0].SS, 760034.8, 1e-9)
	near(t, "linear estimate", steps[0].Estimate, -4.168, 1e-9)
	near(t, "linear SE", math.Sqrt(steps[0].Variance*s2), 1.58966958731222, 1e-9)
	near(t, "quadratic SS", steps[1].SS, 74404.7619047619, 1e-9)
	near(t, "quadratic estimate", steps[1].Estimate, -0.0357142857142857, 1e-9)
	near(t, "rest", rest, 363891.271428571, 1e-9)
}

// With unequal replication and a common covariance the steps are those of weighted
// polynomial regression in order, done here by normal equations; a constant covariance
// changes nothing; the parts add up.
func TestTrendsAgainstWeightedRegression(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 1))
	for range 200 {
		k := 3 + r.IntN(5)
		x, m, n := make([]float64, k), make([]float64, k), make([]float64, k)
		at := r.Float64()
		for i := range x {
			at += 0.2 + r.Float64()*3
			x[i], m[i], n[i] = at, r.NormFloat64()*10, float64(1+r.IntN(6))
		}
		common := r.Float64()
		cov := func(i, j int) float64 {
			if i == j {
				return 1/n[i] + common
			}
			return common
		}
		degree := 1 + r.IntN(min(3, k-1))
		steps, rest, _, ok := Trends(x, m, cov, degree)
		if !ok {
			t.Fatal("singular")
		}
		previous, total := wls(x, m, n, 0), rest
		for d, s := range steps {
			rss := wls(x, m, n, d+1)
			if math.Abs(previous-rss-s.SS) > 1e-6*(1+previous) {
				t.Fatalf("step %d: SS %v, by regression %v", d+1, s.SS, previous-rss)
			}
			if math.Abs(s.Estimate*s.Estimate/s.Variance-s.SS) > 1e-9*(1+s.SS) {
				t.Fatalf("step %d: estimate and SS disagree", d+1)
			}
			previous, total = rss, total+s.SS
		}
		if math.Abs(total-wls(x, m, n, 0)) > 1e-8*total {
			t.Fatalf("parts add up to %v, whole %v", total, wls(x, m, n, 0))
		}
	}
}

// wls is the residual sum of squares of a weighted polynomial, by the normal equations
// in powers of the centred levels and Gaussian elimination.
func wls(x, y, w []float64, degree int) float64 {
	mean := 0.0
	for _, v := range x {
		mean += v / float64(len(x))
	}
	p := degree + 1
	a := make([][]float64, p)
	for i := range a {
		a[i] = make([]float64, p+1)
		for k := range x {
			for j := range p {
				a[i][j] += w[k] * math.Pow(x[k]-mean, float64(i+j))
			}
			a[i][p] += w[k] * math.Pow(x[k]-mean, float64(i)) * y[k]
		}
	}
	for i := range a {
		best := i
		for j := i; j < p; j++ {
			if math.Abs(a[j][i]) > math.Abs(a[best][i]) {
				best = j
			}
		}
		a[i], a[best] = a[best], a[i]
		for j := range a {
			if j != i {
				f := a[j][i] / a[i][i]
				for c := i; c <= p; c++ {
					a[j][c] -= f * a[i][c]
				}
			}
		}
	}
	rss := 0.0
	for k := range x {
		fit := 0.0
		for i := range a {
			fit += a[i][p] / a[i][i] * math.Pow(x[k]-mean, float64(i))
		}
		rss += w[k] * (y[k] - fit) * (y[k] - fit)
	}
	return rss
}

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
		rows := weights(t, tt.levels, len(tt.want))
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

// weights gives the coefficients that the estimates of each degree put on equally
// replicated means: the estimates of unit vectors.
func weights(t *testing.T, levels []float64, degree int) [][]float64 {
	t.Helper()
	out := make([][]float64, degree)
	for i := range levels {
		m := make([]float64, len(levels))
		m[i] = 1
		steps, _, _, ok := Trends(levels, m, func(i, j int) float64 {
			if i == j {
				return 1
			}
			return 0
		}, degree)
		if !ok || len(steps) != degree {
			t.Fatalf("%v: %d steps, %v", levels, len(steps), ok)
		}
		for d, s := range steps {
			out[d] = append(out[d], s.Estimate)
		}
	}
	return out
}

func TestTrendEdges(t *testing.T) {
	unit := func(i, j int) float64 {
		if i == j {
			return 1
		}
		return 0
	}
	if steps, rest, df, ok := Trends([]float64{2, 2, 2}, []float64{1, 2, 3}, unit, 3); !ok || len(steps) != 0 || df != 2 || math.Abs(rest-2) > 1e-12 {
		t.Errorf("one distinct level: %v, rest %v on %d, %v", steps, rest, df, ok)
	}
	if steps, _, df, ok := Trends([]float64{0, 1, 1, 5}, []float64{1, 2, 4, 3}, unit, 3); !ok || len(steps) != 2 || df != 1 {
		t.Errorf("three distinct levels: %v on %d, %v", steps, df, ok)
	}
	if _, _, _, ok := Trends(nil, nil, unit, 3); ok {
		t.Error("no levels")
	}
	if _, _, _, ok := Trends([]float64{1, 2}, []float64{1, 2}, func(int, int) float64 { return math.NaN() }, 1); ok {
		t.Error("no covariance")
	}
}
