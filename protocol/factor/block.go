package factor

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// Projector is the orthogonal projector P_f as an n × n matrix. It is meant for small
// structures; Project does the same without a matrix.
func Projector(f Factor) *mat.SymDense {
	n := f.Len()
	p := mat.NewSymDense(n, nil)
	counts := f.Counts()
	for i, l := range f.Level {
		for j := i; j < n; j++ {
			if f.Level[j] == l {
				p.SetSym(i, j, 1/float64(counts[l]))
			}
		}
	}
	return p
}

// Incidence counts the rows of every class of treatment in every class of block: the
// matrix N, treatments by blocks.
func Incidence(block, treatment Factor) *mat.Dense {
	treatment.match(block.Len())
	n := mat.NewDense(treatment.N, block.N, nil)
	for i, b := range block.Level {
		t := int(treatment.Level[i])
		n.Set(t, int(b), n.At(t, int(b))+1)
	}
	return n
}

// Concurrence is the matrix N N′ of treatments by treatments: how often two treatments
// meet in a block, counting every pair of their rows.
func Concurrence(block, treatment Factor) *mat.SymDense {
	treatment.match(block.Len())
	c := mat.NewSymDense(treatment.N, nil)
	each(block, treatment, func(_ int, ts []int, ns []float64) {
		for a, t := range ts {
			for b, u := range ts {
				if t <= u {
					c.SetSym(t, u, c.At(t, u)+ns[a]*ns[b])
				}
			}
		}
	})
	return c
}

// each calls do for every block with its treatments in ascending order and their rows.
func each(block, treatment Factor, do func(rows int, ts []int, ns []float64)) {
	start := make([]int, block.N+1)
	for _, b := range block.Level {
		start[b+1]++
	}
	for b := 0; b < block.N; b++ {
		start[b+1] += start[b]
	}
	in := make([]int, block.Len())
	fill := append([]int(nil), start...)
	for i, b := range block.Level {
		in[fill[b]] = int(treatment.Level[i])
		fill[b]++
	}
	for b := 0; b < block.N; b++ {
		all := in[start[b]:start[b+1]]
		sort.Ints(all)
		var ts []int
		var ns []float64
		for _, t := range all {
			if len(ts) == 0 || ts[len(ts)-1] != t {
				ts, ns = append(ts, t), append(ns, 0)
			}
			ns[len(ns)-1]++
		}
		do(len(all), ts, ns)
	}
}

// Connected tells whether every difference of two treatments can be estimated within
// blocks: whether no set of blocks shares no treatment with the others.
func Connected(block, treatment Factor) bool { return Supremum(block, treatment).N <= 1 }

// CanonicalEfficiency gives the canonical efficiency factors of a block design in
// ascending order: with N the incidence matrix, R and K the diagonal matrices of
// treatment replications and block sizes, the eigenvalues of
//
//	I − R^(−½) N K⁻¹ N′ R^(−½)
//
// without the one that is always 0. There is one value for each degree of freedom of
// the treatments; 0 stands for a contrast confounded with blocks, 1 for one that
// loses nothing. Every class of treatment must be occupied, else the function panics.
//
// Source: A. T. James & G. N. Wilkinson, Biometrika 58 (1971) 279-294; J. A. John &
// E. R. Williams, Cyclic and Computer Generated Designs (1995), ch. 2 (both from memory).
func CanonicalEfficiency(block, treatment Factor) []float64 {
	treatment.match(block.Len())
	r := treatment.Counts()
	for _, n := range r {
		if n == 0 {
			panic("factor: treatment without rows")
		}
	}
	if treatment.N == 0 {
		return nil
	}
	a := mat.NewSymDense(treatment.N, nil)
	for t := range r {
		a.SetSym(t, t, 1)
	}
	total := float64(treatment.Len())
	each(block, treatment, func(rows int, ts []int, ns []float64) {
		for i, t := range ts {
			for j, u := range ts {
				if t <= u {
					a.SetSym(t, u, a.At(t, u)-ns[i]*ns[j]/float64(rows)/math.Sqrt(float64(r[t]*r[u])))
				}
			}
		}
	})
	// The vector √r has eigenvalue 0; raising it out of the range of the others lets
	// it be dropped for certain even when other eigenvalues are 0.
	for t := range r {
		for u := t; u < len(r); u++ {
			a.SetSym(t, u, a.At(t, u)+2*math.Sqrt(float64(r[t]*r[u]))/total)
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(a, false) {
		panic("factor: eigenvalues did not converge")
	}
	e := eig.Values(nil)
	sort.Float64s(e)
	e = e[:len(e)-1]
	for i := range e {
		e[i] = min(max(e[i], 0), 1)
	}
	return e
}

// HarmonicMean is the harmonic mean of canonical efficiency factors, 0 when one of
// them is 0 to rounding and 1 for an empty list: the average efficiency of a design.
func HarmonicMean(e []float64) float64 {
	sum := 0.0
	for _, v := range e {
		if v < 1e-10 {
			return 0
		}
		sum += 1 / v
	}
	if len(e) == 0 {
		return 1
	}
	return float64(len(e)) / sum
}
