package strata

import (
	"math/rand/v2"
	"testing"

	"penwright/protocol/factor"
)

// herd is 10 000 pens of 100 animals in 2 500 blocks of four diets.
func herd() (Design, []float64) {
	const n = 1_000_000
	r := rand.New(rand.NewPCG(1, 2))
	y := make([]float64, n)
	for i := range y {
		y[i] = 800 + 50*r.NormFloat64()
	}
	return Design{
		Units:   []factor.Factor{grid(n, 400, 2500), grid(n, 100, 10000), factor.Equality(n)},
		Random:  []bool{false, true, true},
		Factors: []factor.Factor{grid(n, 100, 4)},
		Terms:   [][]int{{0}},
	}, y
}

func BenchmarkMillionAnimals(b *testing.B) {
	d, y := herd()
	b.ReportAllocs()
	for b.Loop() {
		s, err := New(d)
		if err != nil {
			b.Fatal(err)
		}
		a := s.Analyse(y)
		a.Means(0).Difference(0, 1)
	}
}

func BenchmarkUnequalPens(b *testing.B) {
	d, y := herd()
	for u, f := range d.Units {
		d.Units[u] = factor.Factor{Level: f.Level[1:], N: f.N}
	}
	d.Units[2] = factor.Equality(len(y) - 1)
	d.Factors[0].Level = d.Factors[0].Level[1:]
	for b.Loop() {
		if _, err := New(d); err == nil {
			b.Fatal("not refused")
		}
		Average(y[1:], d.Units[1])
	}
}

func BenchmarkHundredThousandPlots(b *testing.B) {
	d := splitPlot(2000, 5, 10)
	y := make([]float64, 100_000)
	r := rand.New(rand.NewPCG(1, 2))
	for i := range y {
		y[i] = r.NormFloat64()
	}
	for b.Loop() {
		s, err := New(d)
		if err != nil {
			b.Fatal(err)
		}
		s.Analyse(y).Residuals(2)
	}
}

func BenchmarkSmallAgain(b *testing.B) {
	s, err := New(splitPlot(6, 3, 4))
	if err != nil {
		b.Fatal(err)
	}
	y := make([]float64, 72)
	for i := range y {
		y[i] = float64(i * i % 17)
	}
	for b.Loop() {
		s.Analyse(y)
	}
}
