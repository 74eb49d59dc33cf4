package mixed

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"penwright/protocol/factor"
)

func number(n int) factor.Factor { return factor.Factor{N: n, Level: make([]int32, 0, n)} }

// series are n subjects of ten times with some values lost, in 8 treatments.
func series(n int) Model {
	r := rand.New(rand.NewPCG(1, 1))
	var m Model
	treat, time, subject := number(8), number(10), number(n)
	m.Times = []float64{0, 1, 2, 3, 4, 5, 6, 7, 8, 9}
	for i := range n {
		e := r.NormFloat64()
		for j := range 10 {
			e = 0.7*e + 0.7*r.NormFloat64()
			if r.IntN(20) == 0 {
				continue
			}
			m.Y = append(m.Y, 10+float64(i%8)+e)
			treat.Level, time.Level, subject.Level = append(treat.Level, int32(i%8)), append(time.Level, int32(j)), append(subject.Level, int32(i))
			m.Time = append(m.Time, int32(j))
		}
	}
	m.Factors = []factor.Factor{treat, time}
	m.Parts = []Part{{Factors: []int{0}}, {Factors: []int{1}}, {Factors: []int{0, 1}}}
	m.Kind, m.Subject = Autoregressive, subject
	return m
}

func BenchmarkAutoregressive(b *testing.B) {
	for _, n := range []int{1000, 3000, 10000} {
		m := series(n)
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			for range b.N {
				if _, err := m.Fit(); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

func BenchmarkUnstructured(b *testing.B) {
	m := series(1000)
	m.Kind = Unstructured
	for range b.N {
		if _, err := m.Fit(); err != nil {
			b.Fatal(err)
		}
	}
}

// splitPlot has n whole plots of ten subplots in blocks of ten, some subplots lost.
func splitPlot(n int, fixedBlocks bool) Model {
	r := rand.New(rand.NewPCG(1, 2))
	var m Model
	a, b, block, plot := number(10), number(10), number(n/10), number(n)
	for i := range n {
		u := r.NormFloat64()
		for j := range 10 {
			if r.IntN(30) == 0 {
				continue
			}
			m.Y = append(m.Y, 10+u+r.NormFloat64())
			a.Level, b.Level = append(a.Level, int32(i%10)), append(b.Level, int32(j))
			block.Level, plot.Level = append(block.Level, int32(i/10)), append(plot.Level, int32(i))
		}
	}
	m.Factors = []factor.Factor{a, b, block}
	m.Parts = []Part{{Factors: []int{0}}, {Factors: []int{1}}, {Factors: []int{0, 1}}}
	m.Random = []Random{{Factor: plot, Unbounded: true}}
	if fixedBlocks {
		m.Parts = append([]Part{{Factors: []int{2}}}, m.Parts...)
	} else {
		m.Random = append(m.Random, Random{Factor: block})
	}
	return m
}

func BenchmarkSplitPlot(b *testing.B) {
	for _, fixed := range []bool{false, true} {
		m := splitPlot(1000, fixed)
		b.Run(fmt.Sprint("fixed blocks ", fixed), func(b *testing.B) {
			for range b.N {
				if _, err := m.Fit(); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// crossed is a field of 10 000 plots with crossed rows, columns and blocks, rows + columns
// + blocks random levels in all.
func crossed(rows, columns, blocks int) Model {
	r := rand.New(rand.NewPCG(1, 3))
	var m Model
	row, column, block, entry := number(rows), number(columns), number(blocks), number(50)
	er, ec, eb := make([]float64, rows), make([]float64, columns), make([]float64, blocks)
	for _, e := range [][]float64{er, ec, eb} {
		for i := range e {
			e[i] = r.NormFloat64()
		}
	}
	for i := range 10000 {
		a, c, b := i%rows, r.IntN(columns), r.IntN(blocks)
		m.Y = append(m.Y, er[a]+ec[c]+eb[b]+r.NormFloat64())
		row.Level, column.Level, block.Level = append(row.Level, int32(a)), append(column.Level, int32(c)), append(block.Level, int32(b))
		entry.Level = append(entry.Level, int32(r.IntN(50)))
	}
	m.Factors = []factor.Factor{entry}
	m.Parts = []Part{{Factors: []int{0}}}
	m.Random = []Random{{Factor: row}, {Factor: column}, {Factor: block}}
	return m
}

func BenchmarkCrossed(b *testing.B) {
	for _, size := range [][3]int{{1000, 500, 500}, {700, 700, 600}} {
		m := crossed(size[0], size[1], size[2])
		b.Run(fmt.Sprint(size), func(b *testing.B) {
			b.ReportAllocs()
			for range b.N {
				f, err := m.Fit()
				if err != nil {
					b.Fatal(err)
				}
				b.ReportMetric(float64(f.Iterations), "iterations")
			}
		})
	}
}
