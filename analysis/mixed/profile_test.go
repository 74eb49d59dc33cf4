package mixed

import (
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/dist"
)

// TestProfile checks that at the limits the likelihood, maximized over the other parameters
// by a search of its own over dense matrices, is lower by half of χ².
func TestProfile(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 1))
	d := ordinary()["split plot"]
	d.sd[0] = 1.2
	for range 4 {
		m := d.draw(r)
		m.Random[0].Unbounded = r.IntN(2) == 0
		f := mustFit(t, m)
		ref := newDense(m, f.space)
		// The deviance with one of two parameters fixed, least over the other.
		least := func(i int, v float64) float64 {
			best := math.Inf(1)
			at := f.Theta[1-i]
			for width := 3 * math.Abs(at); width > 1e-7*math.Abs(f.Theta[1]); width *= 0.4 {
				from := at
				for k := -6; k <= 6; k++ {
					th := []float64{0, 0}
					th[i], th[1-i] = v, from+width*float64(k)/6
					if th[1] <= 0 || th[0] < 0 && !m.Random[0].Unbounded {
						continue
					}
					if x := ref.deviance(th); x < best {
						best, at = x, th[1-i]
					}
				}
			}
			return best
		}
		top := ref.deviance(f.Theta)
		for i := range 2 {
			lower, upper := f.Profile(i, 0.05)
			if !(lower < f.Theta[i] && f.Theta[i] < upper) {
				t.Errorf("limits %g, %g of %g", lower, upper, f.Theta[i])
			}
			for _, x := range []float64{lower, upper} {
				if fall := least(i, x) - top; x != 0 && math.Abs(fall-dist.ChiSquaredQuantile(0.05, 1)) > 1e-4 {
					t.Errorf("parameter %d = %g: deviance is higher by %g", i, x, fall)
				} else if x == 0 && fall > dist.ChiSquaredQuantile(0.05, 1) {
					t.Errorf("zero is not within the limits")
				}
			}
		}
	}
}

// TestProfileEnds checks limits of correlations and of a component at zero.
func TestProfileEnds(t *testing.T) {
	f := mustFit(t, Model{Y: []float64{7.298, 3.846, 2.434, 9.566, 7.990, 5.220, 6.556, .608, 11.788, -.892, .110, 10.386, 13.434, 5.510, 8.166},
		Random: []Random{{Factor: levels(0, 0, 0, 0, 0, 1, 1, 1, 1, 1, 2, 2, 2, 2, 2)}}})
	lower, upper := f.Profile(0, 0.05)
	if !f.Bound[0] || lower != 0 || !(upper > 0.1 && upper < 1000) {
		t.Errorf("component at zero %v: %g, %g", f.Theta, lower, upper)
	}
	m := growth()
	m.Kind = Autoregressive
	f = mustFit(t, m)
	lower, upper = f.Profile(1, 0.05)
	if !(lower > 0.3 && lower < f.Theta[1] && upper > f.Theta[1] && upper < 0.9) {
		t.Errorf("correlation %g: %g, %g", f.Theta[1], lower, upper)
	}
}

// TestDifference holds differences of means against contrasts of the same means.
func TestDifference(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 1))
	for name, d := range ordinary() {
		m := d.draw(r)
		f, err := m.Fit()
		if err != nil {
			t.Fatal(name, err)
		}
		for _, term := range d.terms {
			means := f.Means(term)
			for i := range means.Value {
				for j := range i {
					w := make([]float64, len(means.Value))
					w[i], w[j] = 1, -1
					_, v, df := means.Contrast(w)
					v2, df2 := means.Difference(i, j)
					near(t, name, v2, v, 1e-9)
					near(t, name, df2, df, 1e-9)
				}
			}
		}
	}
}
