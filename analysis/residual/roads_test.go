package residual

import (
	"math"
	"math/rand/v2"
	"testing"

	"penwright/analysis/linear"
	"penwright/analysis/strata"
	"penwright/protocol/factor"
)

// On balanced data with one stratum of treatments the two roads to a fit are one: lines of
// the strata and least squares under all three adjustments, means, their errors, residuals,
// leverages.
func TestStrataAndLeastSquaresAgree(t *testing.T) {
	latin := factor.Factor{Level: make([]int32, 25), N: 5}
	for i := range latin.Level {
		latin.Level[i] = int32((i/5 + 2*(i%5)) % 5)
	}
	for _, c := range []struct {
		name    string
		n       int
		blocks  []factor.Factor
		factors []factor.Factor
		terms   [][]int
	}{
		{"completely randomized", 20, nil, []factor.Factor{grid(20, 5, 4)}, [][]int{{0}}},
		{"blocks, 3 × 2 × 2", 48, []factor.Factor{grid(48, 12, 4)},
			[]factor.Factor{grid(48, 4, 3), grid(48, 2, 2), grid(48, 1, 2)},
			[][]int{{0}, {1}, {2}, {0, 1}, {0, 2}, {1, 2}, {0, 1, 2}}},
		{"generalized blocks", 24, []factor.Factor{grid(24, 8, 3)}, []factor.Factor{grid(24, 1, 4)}, [][]int{{0}}},
		{"square", 25, []factor.Factor{grid(25, 5, 5), grid(25, 1, 5)}, []factor.Factor{latin}, [][]int{{0}}},
	} {
		t.Run(c.name, func(t *testing.T) {
			r := rand.New(rand.NewPCG(8, 9))
			y := make([]float64, c.n)
			for i := range y {
				y[i] = 40 + 5*r.NormFloat64()
			}
			units := append(c.blocks[:len(c.blocks):len(c.blocks)], factor.Equality(c.n))
			s, err := strata.New(strata.Design{Units: units, Random: make([]bool, len(units)), Factors: c.factors, Terms: c.terms})
			if err != nil {
				t.Fatal(err)
			}
			a := s.Analyse(y)
			f, err := linear.Model{Y: y, Nuisance: c.blocks, Factors: c.factors, Terms: c.terms}.Fit()
			if err != nil {
				t.Fatal(err)
			}
			last := len(units) - 1
			near(t, "error", f.RSS, a.Strata[last].ErrorSS, 1e-12)
			if f.DF != a.Strata[last].ErrorDF {
				t.Errorf("df %d and %d", f.DF, a.Strata[last].ErrorDF)
			}
			for _, adjustment := range []linear.Adjustment{linear.Partial, linear.Marginal, linear.Sequential} {
				for k, l := range f.Tests(adjustment) {
					near(t, "line", l.SS, a.Terms[k].SS, 1e-11)
					if l.DF != a.Terms[k].DF {
						t.Errorf("df %d and %d", l.DF, a.Terms[k].DF)
					}
				}
			}
			for k := range c.terms {
				p, err := a.Partial(k)
				if err != nil {
					t.Fatal(err)
				}
				near(t, "partial", p.SS, a.Terms[k].SS, 1e-11)
				m, l := a.Means(k), f.Means(k)
				for i := range m.Value {
					near(t, "mean", l.Value[i], m.Value[i], 1e-13)
					near(t, "variance", l.Cov(i, i), m.Mean(i).Variance, 1e-11)
					if d := m.Difference(i, 0); i > 0 {
						near(t, "difference", l.Cov(i, i)+l.Cov(0, 0)-2*l.Cov(i, 0), d.Variance, 1e-11)
					}
				}
			}
			res := a.Residuals(last)
			e, _ := f.Residuals()
			one := Cases(res.Value, res.Leverage, res.MS, res.DF, res.Rank)
			two := Cases(e, f.Leverages(), f.MS(), f.DF, f.Rank)
			for i := range one {
				for _, pair := range [][2]float64{{one[i].Residual, two[i].Residual}, {one[i].Leverage, two[i].Leverage},
					{one[i].Internal, two[i].Internal}, {one[i].Deleted, two[i].Deleted}, {one[i].Cook, two[i].Cook}} {
					if math.Abs(pair[0]-pair[1]) > 1e-10 {
						t.Errorf("case %d: %+v and %+v", i, one[i], two[i])
					}
				}
			}
		})
	}
}
