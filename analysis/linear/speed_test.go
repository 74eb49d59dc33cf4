package linear

import (
	"math/rand/v2"
	"testing"

	"penwright/protocol/factor"
)

func large(n, blocks int, covariate bool) Model {
	r := rand.New(rand.NewPCG(1, 2))
	m := Model{
		Y:        make([]float64, n),
		Nuisance: []factor.Factor{random(r, n, blocks), random(r, n, 7)},
		Factors:  []factor.Factor{random(r, n, 4), random(r, n, 3)},
		Terms:    [][]int{{0}, {1}, {0, 1}},
	}
	x := make([]float64, n)
	for i := range m.Y {
		m.Y[i], x[i] = r.NormFloat64(), r.NormFloat64()
	}
	if covariate {
		m.Covariates = [][]float64{x}
	}
	return m
}

func BenchmarkMillionRows(b *testing.B) {
	m := large(1_000_000, 10_000, true)
	b.ReportAllocs()
	for b.Loop() {
		f, err := m.Fit()
		if err != nil {
			b.Fatal(err)
		}
		f.Tests(Marginal)
	}
}

func BenchmarkThousandEntries(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	n := 4000
	m := Model{
		Y:        make([]float64, n),
		Nuisance: []factor.Factor{random(r, n, 100)},
		Factors:  []factor.Factor{random(r, n, 1000)},
		Terms:    [][]int{{0}},
	}
	for i := range m.Y {
		m.Y[i] = r.NormFloat64()
	}
	for b.Loop() {
		f, err := m.Fit()
		if err != nil {
			b.Fatal(err)
		}
		f.Means(0)
	}
}
