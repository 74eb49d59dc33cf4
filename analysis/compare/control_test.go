package compare

import (
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/dist"
)

// λ found from standard errors alone against √(nᵢ/(nᵢ+n₀)) (Dunnett 1955).
func TestLambdaUnequalNumbers(t *testing.T) {
	n := []float64{7, 3, 12, 5, 40, 1}
	f := Family{
		Estimates: make([]float64, len(n)),
		Diff:      func(i, j int) (float64, float64) { return math.Sqrt(2.7 * (1/n[i] + 1/n[j])), 30 },
	}
	var tested []*Difference
	for i := 1; i < len(n); i++ {
		d := f.difference(Pair{A: i, B: 0}, dist.Two)
		tested = append(tested, &d)
		lambda, exact, err := f.lambda(tested, dist.Two)
		if err != nil || !exact {
			t.Fatalf("%d treatments: exact %v, %v", i, exact, err)
		}
		if i < 3 {
			continue // with one λ is free, with two only the product is fixed
		}
		for j, l := range lambda {
			near(t, "λ", l, math.Sqrt(n[j+1]/(n[j+1]+n[0])), 1e-9)
		}
	}
	lambda, _, _ := f.lambda(tested[:2], dist.Two)
	near(t, "λ₁λ₂", lambda[0]*lambda[1], math.Sqrt(n[1]/(n[1]+n[0])*n[2]/(n[2]+n[0])), 1e-9)
}

// Random correlations of product form, of any sign, are found exactly; others are flagged
// and fitted no worse than any near neighbour.
func TestProduct(t *testing.T) {
	random := rand.New(rand.NewPCG(7, 8))
	for range 300 {
		k := 3 + random.IntN(10)
		want := make([]float64, k)
		least := 1.0
		for i := range want {
			want[i] = 1.9*random.Float64() - .95
			if random.IntN(6) == 0 {
				want[i] = 0
			}
			least = math.Min(least, math.Abs(want[i]))
		}
		rho := make([]float64, k*k)
		for i := range k {
			for j := range k {
				if i != j {
					rho[i*k+j] = want[i] * want[j]
				}
			}
		}
		lambda, exact := product(rho, k)
		if !exact {
			t.Errorf("k=%d λ=%.3f: not found, got %.3f", k, want, lambda)
		}
		rho[1] += .05
		rho[k] += .05
		lambda, exact = product(rho, k)
		if exact && k > 3 && least > .1 { // three correlations, or few that are not zero, always fit
			t.Errorf("k=%d: disturbed correlations pass as exact", k)
		}
		loss := func(l []float64) float64 {
			var s float64
			for i := range k {
				for j := range i {
					s += math.Pow(rho[i*k+j]-l[i]*l[j], 2)
				}
			}
			return s
		}
		best := loss(lambda)
		for i := range k {
			for _, step := range []float64{-.01, .01} {
				l := append([]float64(nil), lambda...)
				if l[i] += step; math.Abs(l[i]) < 1 && loss(l) < best-1e-9 {
					t.Errorf("k=%d: a neighbour fits better", k)
				}
			}
		}
	}
}

// Incomplete blocks: treatments 1 and 2 share blocks, so their difference is better known
// than numbers alone say, and no product form holds. The approximate P is close to simulation.
func TestDunnettOtherCorrelations(t *testing.T) {
	random := rand.New(rand.NewPCG(9, 10))
	// Estimates with covariance from shared parts: control, and pairs (1,2), (3,4).
	draw := func() []float64 {
		a, b := random.NormFloat64(), random.NormFloat64()
		e := make([]float64, 5)
		for i := range e {
			e[i] = random.NormFloat64()
		}
		e[1], e[2], e[3], e[4] = e[1]+.5*a, e[2]+.5*a, e[3]+.5*b, e[4]+.5*b
		return e
	}
	variance := func(i, j int) float64 {
		if i > j {
			i, j = j, i
		}
		switch {
		case i == 0:
			return 2.25
		case i == 1 && j == 2 || i == 3 && j == 4:
			return 2
		}
		return 2.5
	}
	f := Family{
		Estimates: []float64{0, 3, 0, 0, 0},
		Pairs:     []Pair{{A: 1, B: 0}, {A: 2, B: 0}, {A: 3, B: 0}, {A: 4, B: 0}},
		Diff:      func(i, j int) (float64, float64) { return math.Sqrt(variance(i, j)), math.Inf(1) },
	}
	r := run(t, f, Dunnett, dist.Two)
	if !r.Correlations {
		t.Fatal("not flagged")
	}
	const draws = 200_000
	count := 0
	for range draws {
		e := draw()
		for i := 1; i < 5; i++ {
			if math.Abs(e[i]-e[0])/1.5 > 2 {
				count++
				break
			}
		}
	}
	p := float64(count) / draws
	if got := r.find(1, 0).Adjusted; math.Abs(got-p) > .004 {
		t.Errorf("approximate P %.4f, simulated %.4f", got, p)
	}
}
