package factor

import "math"

// Factor is a partition of n rows into classes: Level[i], in 0..N-1, is the class of
// row i. Classes may be empty unless a function says otherwise.
type Factor struct {
	Level []int32
	N     int
}

// Universe puts all n rows into one class.
func Universe(n int) Factor { return Factor{Level: make([]int32, n), N: min(n, 1)} }

// Equality makes every row its own class.
func Equality(n int) Factor {
	f := Factor{Level: make([]int32, n), N: n}
	for i := range f.Level {
		f.Level[i] = int32(i)
	}
	return f
}

// Len is the number of rows.
func (f Factor) Len() int { return len(f.Level) }

// Compact numbers the occupied classes by first appearance and drops empty ones.
func (f Factor) Compact() Factor {
	number := make([]int32, f.N)
	out := Factor{Level: make([]int32, len(f.Level))}
	for i, l := range f.Level {
		if number[l] == 0 {
			out.N++
			number[l] = int32(out.N)
		}
		out.Level[i] = number[l] - 1
	}
	return out
}

// Counts is the number of rows in each class.
func (f Factor) Counts() []int {
	c := make([]int, f.N)
	for _, l := range f.Level {
		c[l]++
	}
	return c
}

// Uniform tells whether all occupied classes are of one size.
func (f Factor) Uniform() bool {
	size := 0
	for _, c := range f.Counts() {
		switch {
		case c == 0:
		case size == 0:
			size = c
		case c != size:
			return false
		}
	}
	return true
}

// Rank is the number of occupied classes, the dimension of the space V_f of vectors
// that are constant on the classes of f.
func (f Factor) Rank() int {
	r := 0
	for _, c := range f.Counts() {
		if c > 0 {
			r++
		}
	}
	return r
}

// Means gives the mean of y in each class, NaN for an empty class. y has one value per
// row. The mean is corrected once by the mean of the deviations from it, so that a
// large common level costs no digits.
func (f Factor) Means(y []float64) []float64 {
	f.match(len(y))
	means, dev, n := make([]float64, f.N), make([]float64, f.N), make([]float64, f.N)
	for i, l := range f.Level {
		means[l] += y[i]
		n[l]++
	}
	for l := range means {
		if n[l] == 0 {
			means[l] = math.NaN()
			continue
		}
		means[l] /= n[l]
	}
	for i, l := range f.Level {
		dev[l] += y[i] - means[l]
	}
	for l := range means {
		if n[l] > 0 {
			means[l] += dev[l] / n[l]
		}
	}
	return means
}

// Project sets dst to P_f y: each value is replaced by the mean of its class. dst and y
// have one value per row and may be the same slice.
func (f Factor) Project(dst, y []float64) {
	f.match(len(dst))
	means := f.Means(y)
	for i, l := range f.Level {
		dst[i] = means[l]
	}
}

func (f Factor) match(n int) {
	if len(f.Level) != n {
		panic("factor: lengths differ")
	}
}

// Infimum is the coarsest partition finer than all of fs: rows share a class when they
// share one in every factor. Only occupied classes are kept, numbered by first
// appearance. It panics without factors, since the number of rows is then unknown.
func Infimum(fs ...Factor) Factor {
	if len(fs) == 0 {
		panic("factor: infimum of no factors")
	}
	out := fs[0].Compact()
	for _, g := range fs[1:] {
		out = cross(out, g)
	}
	return out
}

// cross is the infimum of two factors: rows are sorted by f with a counting sort, and
// the classes of g are marked anew for every class of f, which needs neither hashing
// nor a table of all pairs.
func cross(f, g Factor) Factor {
	g.match(len(f.Level))
	start := make([]int32, f.N+1)
	for _, l := range f.Level {
		start[l+1]++
	}
	for l := 0; l < f.N; l++ {
		start[l+1] += start[l]
	}
	rows := make([]int32, len(f.Level))
	fill := append([]int32(nil), start...)
	for i, l := range f.Level {
		rows[fill[l]] = int32(i)
		fill[l]++
	}
	out := Factor{Level: make([]int32, len(f.Level))}
	mark, class := make([]int32, g.N), make([]int32, g.N)
	for l := 0; l < f.N; l++ {
		for _, i := range rows[start[l]:start[l+1]] {
			m := g.Level[i]
			if mark[m] != int32(l+1) {
				mark[m], class[m] = int32(l+1), int32(out.N)
				out.N++
			}
			out.Level[i] = class[m]
		}
	}
	return out.Compact()
}

// Supremum is the finest partition coarser than both f and g: rows share a class when
// a chain of shared classes of f or g joins them. Classes are numbered by first
// appearance.
func Supremum(f, g Factor) Factor {
	g.match(len(f.Level))
	parent := make([]int32, f.N)
	for l := range parent {
		parent[l] = int32(l)
	}
	find := func(l int32) int32 {
		for parent[l] != l {
			parent[l] = parent[parent[l]]
			l = parent[l]
		}
		return l
	}
	first := make([]int32, g.N) // a class of f that meets each class of g, plus one
	for i, l := range f.Level {
		m := g.Level[i]
		if first[m] == 0 {
			first[m] = l + 1
			continue
		}
		a, b := find(first[m]-1), find(l)
		if a < b {
			parent[b] = a
		} else {
			parent[a] = b
		}
	}
	out := Factor{Level: make([]int32, len(f.Level)), N: f.N}
	for i, l := range f.Level {
		out.Level[i] = find(l)
	}
	return out.Compact()
}

// Finer tells whether every class of f lies inside one class of g, so that f is finer
// than g or the same partition.
func Finer(f, g Factor) bool {
	g.match(len(f.Level))
	in := make([]int32, f.N)
	for i, l := range f.Level {
		if in[l] == 0 {
			in[l] = g.Level[i] + 1
		} else if in[l] != g.Level[i]+1 {
			return false
		}
	}
	return true
}

// Equivalent tells whether f and g are the same partition, whatever their numbering.
func Equivalent(f, g Factor) bool { return Finer(f, g) && Finer(g, f) }

// Orthogonal tells whether the spaces V_f and V_g are geometrically orthogonal, that
// is whether P_f P_g = P_g P_f. With n_ij the rows in class i of f and j of g, and n
// those of the class of f∨g that holds them,
//
//	n_ij · n = n_i · n_j
//
// for all i and j that share a class of f∨g, compared exactly in integers.
//
// Source: T. Tjur, International Statistical Review 52 (1984) 33-81; R. A. Bailey,
// Design of Comparative Experiments (2008), ch. 10 (both from memory).
func Orthogonal(f, g Factor) bool {
	s, c := Supremum(f, g), Infimum(f, g)
	nf, ng, ns, nc := f.Counts(), g.Counts(), s.Counts(), c.Counts()
	// Only occupied cells need a look: if all of them are proportional their counts
	// exhaust each class of f∨g, which leaves nothing for an empty cell.
	seen := make([]bool, c.N)
	for i, l := range c.Level {
		if seen[l] {
			continue
		}
		seen[l] = true
		if nc[l]*ns[s.Level[i]] != nf[f.Level[i]]*ng[g.Level[i]] {
			return false
		}
	}
	return true
}
