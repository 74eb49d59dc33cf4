package analysis

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
	steps, rest, df, ok := trends(x, m, cov, 2)
	if !ok || len(steps) != 2 || df != 3 {
		t.Fatalf("steps %v, df %d, ok %v", steps, df, ok)
	}
	s2 := 1658376.16666667 / 15
	near(t, "linear SS", steps[0].ss, 760034.8)
	near(t, "linear estimate", steps[0].estimate, -4.168)
	near(t, "linear SE", math.Sqrt(steps[0].variance*s2), 1.58966958731222)
	near(t, "quadratic SS", steps[1].ss, 74404.7619047619)
	near(t, "quadratic estimate", steps[1].estimate, -0.0357142857142857)
	near(t, "rest", rest, 363891.271428571)
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
		steps, rest, _, ok := trends(x, m, cov, degree)
		if !ok {
			t.Fatal("singular")
		}
		previous, total := wls(x, m, n, 0), rest
		for d, s := range steps {
			rss := wls(x, m, n, d+1)
			if math.Abs(previous-rss-s.ss) > 1e-6*(1+previous) {
				t.Fatalf("step %d: SS %v, by regression %v", d+1, s.ss, previous-rss)
			}
			if math.Abs(s.estimate*s.estimate/s.variance-s.ss) > 1e-9*(1+s.ss) {
				t.Fatalf("step %d: estimate and SS disagree", d+1)
			}
			previous, total = rss, total+s.ss
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

func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if math.Abs(got-want) > 1e-9*math.Max(1, math.Abs(want)) {
		t.Errorf("%s: %.15g, want %.15g", what, got, want)
	}
}
