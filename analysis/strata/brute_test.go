package strata

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
)

// The second road of this file knows no counts and no Möbius inversion: spaces are
// orthonormal bases by Gram-Schmidt on indicator vectors, variances are n × n matrices,
// means come from generalized least squares.

// extend adds to the basis what the vectors have beyond it, and returns the new ones.
func extend(basis *[][]float64, vectors [][]float64) [][]float64 {
	from := len(*basis)
	for _, v := range vectors {
		x := slices.Clone(v)
		for range 2 {
			for _, b := range *basis {
				d := dot(b, x)
				for i := range x {
					x[i] -= d * b[i]
				}
			}
		}
		if l := math.Sqrt(dot(x, x)); l > 1e-9 {
			for i := range x {
				x[i] /= l
			}
			*basis = append(*basis, x)
		}
	}
	return (*basis)[from:]
}

func dot(a, b []float64) float64 {
	var s float64
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

// overlap is the squared Frobenius norm of A′B.
func overlap(a, b [][]float64) float64 {
	var s float64
	for _, x := range a {
		for _, y := range b {
			d := dot(x, y)
			s += d * d
		}
	}
	return s
}

func indicators(f factor.Factor) [][]float64 {
	var out [][]float64
	for c := range f.N {
		x := make([]float64, f.Len())
		for i, l := range f.Level {
			if int(l) == c {
				x[i] = 1
			}
		}
		out = append(out, x)
	}
	return out
}

func crossed(d Design, term []int) factor.Factor {
	f := factor.Factor{Level: make([]int32, d.Units[0].Len()), N: 1}
	for _, v := range term {
		g := d.Factors[v]
		for i := range f.Level {
			f.Level[i] = f.Level[i]*int32(g.N) + g.Level[i]
		}
		f.N *= g.N
	}
	return f
}

// stratumBasis is W_u: V_u beyond the mean and all coarser units, and earlier ones of the
// same classes.
func stratumBasis(d Design, u int) [][]float64 {
	n := d.Units[0].Len()
	var basis [][]float64
	extend(&basis, indicators(factor.Universe(n)))
	for v, f := range d.Units {
		if v != u && factor.Finer(d.Units[u], f) && (v < u || !factor.Finer(f, d.Units[u])) {
			extend(&basis, indicators(f))
		}
	}
	return extend(&basis, indicators(d.Units[u]))
}

func termBasis(d Design, t int) [][]float64 {
	var basis [][]float64
	extend(&basis, indicators(factor.Universe(d.Units[0].Len())))
	term := d.Terms[t]
	for set := 1; set < 1<<len(term)-1; set++ {
		extend(&basis, indicators(crossed(d, subset(term, set))))
	}
	return extend(&basis, indicators(crossed(d, term)))
}

func projected(basis [][]float64, y []float64) float64 {
	var s float64
	for _, b := range basis {
		d := dot(b, y)
		s += d * d
	}
	return s
}

// randomDesign draws unit structures that trials have and some they should not, and treatments
// balanced, proportional, confounded or careless.
func randomDesign(r *rand.Rand) Design {
	var d Design
	size := func(lo, hi int) int { return lo + r.IntN(hi-lo+1) }
	var coords []factor.Factor // positions from which treatments are made
	switch r.IntN(8) {
	case 0: // plots
		n := size(4, 24)
		coords = []factor.Factor{grid(n, 1, n)}
	case 1: // blocks / plots
		b, p := size(2, 5), size(2, 6)
		d.Units = []factor.Factor{grid(b*p, p, b)}
		coords = []factor.Factor{grid(b*p, 1, p), grid(b*p, p, b)}
	case 2: // blocks of unequal size
		sizes := make([]int, size(2, 4))
		k := size(2, 3)
		for i := range sizes {
			sizes[i] = k * size(1, 3)
		}
		f := runs(sizes...)
		d.Units = []factor.Factor{f}
		p := factor.Factor{N: k}
		for i := range f.Level {
			p.Level = append(p.Level, int32(i%k))
		}
		coords = []factor.Factor{p, f}
	case 3: // rows × columns
		a, b := size(2, 5), size(2, 5)
		if r.IntN(2) == 0 {
			b = a
		}
		row, col := grid(a*b, b, a), grid(a*b, 1, b)
		d.Units = []factor.Factor{row, col}
		coords = []factor.Factor{row, col, latin(row, col, max(a, b))}
	case 4: // blocks / whole plots / subplots
		b, w, s := size(1, 3), size(2, 3), size(2, 4)
		n := b * w * s
		d.Units = []factor.Factor{grid(n, w*s, b), grid(n, s, b*w)}
		coords = []factor.Factor{grid(n, s, w), grid(n, 1, s), grid(n, w*s, b)}
		if r.IntN(2) == 0 {
			d.Units = d.Units[1:]
		}
	case 5: // blocks / (strips × lanes)
		b, s, l := size(1, 3), size(2, 3), size(2, 3)
		n := b * s * l
		block, lane := grid(n, s*l, b), grid(n, 1, l)
		d.Units = []factor.Factor{block, grid(n, l, b*s), factor.Infimum(block, lane)}
		coords = []factor.Factor{grid(n, l, s), lane, block}
	case 6: // squares / cows × periods, periods common or within squares
		q, k := 2, size(2, 3)
		n := q * k * k
		square, cow, period := grid(n, k*k, q), grid(n, k, q*k), grid(n, 1, k)
		d.Units = []factor.Factor{square, cow, period}
		if r.IntN(2) == 0 {
			d.Units[2] = factor.Infimum(square, period)
		}
		coords = []factor.Factor{latin(grid(n, k, k), period, k), period, square}
	case 7: // pens / animals, pens perhaps in blocks
		b, p, a := size(1, 3), size(2, 4), size(1, 3)
		n := b * p * a
		d.Units = []factor.Factor{grid(n, a, b*p)}
		coords = []factor.Factor{grid(n, a, p), grid(n, p*a, b), grid(n, a, b*p)}
		if r.IntN(2) == 0 {
			d.Units = []factor.Factor{grid(n, p*a, b), grid(n, a, b*p)}
		}
	}
	n := coords[0].Len()
	if r.IntN(20) == 0 { // careless units
		d.Units = append(d.Units, careless(r, n))
	}
	d.Units = append(d.Units, factor.Equality(n))
	if r.IntN(15) == 0 { // a unit told twice
		d.Units = slices.Insert(d.Units, 0, d.Units[r.IntN(len(d.Units))])
	}

	for range 1 + r.IntN(3) {
		c := coords[r.IntN(len(coords))]
		var f factor.Factor
		switch r.IntN(8) {
		case 0:
			f = careless(r, n)
		case 1: // merged levels: proportional, unequal replication
			f = merge(c, size(2, 3), func(i int) int { return i * i })
		case 2: // two coordinates mixed: confounding
			e := coords[r.IntN(len(coords))]
			f = factor.Factor{Level: make([]int32, n), N: 2}
			for i := range f.Level {
				f.Level[i] = (c.Level[i] + e.Level[i]) % 2
			}
		case 3: // a bit of the position
			shift := r.IntN(3)
			f = merge(c, 2, func(i int) int { return i >> shift })
		case 4:
			f = merge(c, size(2, 4), func(i int) int { return i })
		default:
			f = c
		}
		if f.N > 6 {
			f = merge(f, 3, func(i int) int { return i })
		}
		d.Factors = append(d.Factors, f.Compact())
	}
	order := 1 + r.IntN(len(d.Factors))
	for size := 1; size <= order; size++ {
		for set := range 1 << len(d.Factors) {
			var t []int
			for v := range d.Factors {
				if set>>v&1 == 1 {
					t = append(t, v)
				}
			}
			if len(t) == size {
				d.Terms = append(d.Terms, t)
			}
		}
	}
	if r.IntN(8) == 0 { // a row lost
		i := int32(r.IntN(n))
		keep := slices.Delete(slices.Clone(factor.Equality(n).Level), int(i), int(i)+1)
		for u, f := range d.Units {
			d.Units[u] = restrict(f, keep)
		}
		for v, f := range d.Factors {
			d.Factors[v] = restrict(f, keep)
		}
	}
	d.Random = make([]bool, len(d.Units))
	for u := range d.Random {
		d.Random[u] = r.IntN(4) == 0
	}
	return d
}

func latin(a, b factor.Factor, n int) factor.Factor {
	f := factor.Factor{Level: make([]int32, a.Len()), N: n}
	for i := range f.Level {
		f.Level[i] = (a.Level[i] + b.Level[i]) % int32(n)
	}
	return f
}

func merge(f factor.Factor, n int, to func(int) int) factor.Factor {
	g := factor.Factor{Level: make([]int32, f.Len()), N: n}
	for i, l := range f.Level {
		g.Level[i] = int32(to(int(l)) % n)
	}
	return g
}

func careless(r *rand.Rand, n int) factor.Factor {
	f := factor.Factor{Level: make([]int32, n), N: 2 + r.IntN(2)}
	for i := range f.Level {
		f.Level[i] = int32(r.IntN(f.N))
	}
	return f
}

// Ten thousand structures: each is refused for a reason that holds, or every number agrees
// with the second road.
func TestAgainstProjections(t *testing.T) {
	const structures = 10000
	accepted, spanning, partial, refused := 0, 0, 0, map[string]int{}
	for seed := range uint64(structures) {
		r := rand.New(rand.NewPCG(seed, 2))
		d := randomDesign(r)
		s, err := New(d)
		if err != nil {
			refused[justified(t, seed, d, err)]++
			continue
		}
		accepted++
		y := make([]float64, d.Units[0].Len())
		for i := range y {
			y[i] = 50 + 10*r.NormFloat64()
		}
		a := s.Analyse(y)
		checkTable(t, seed, d, a, y)
		if seed%2 == 0 {
			checkVariance(t, seed, d, a, r, y, &spanning, &partial)
		}
		if t.Failed() {
			t.Fatalf("seed %d: %+v", seed, d)
		}
	}
	t.Logf("%d accepted, %d means over several strata, %d partial tests apart, refused %v", accepted, spanning, partial, refused)
	if accepted < structures/4 || spanning < 500 || partial < 30 || len(refused) < 5 {
		t.Errorf("the draw is one-sided: %d accepted, %d spanning, %d partial, refused %v", accepted, spanning, partial, refused)
	}
}

// justified checks by the second road that a refusal names what is so.
func justified(t *testing.T, seed uint64, d Design, err error) string {
	t.Helper()
	commute := func(f, g factor.Factor) bool {
		var a, b, both [][]float64
		extend(&a, indicators(f))
		extend(&b, indicators(g))
		extend(&both, indicators(factor.Supremum(f, g)))
		return math.Abs(overlap(a, b)-float64(len(both))) < 1e-7
	}
	sizes := func(f factor.Factor) bool {
		var first int
		for _, c := range f.Counts() {
			if c > 0 && first == 0 {
				first = c
			}
			if c > 0 && c != first {
				return true
			}
		}
		return false
	}
	ok, kind := false, ""
	var (
		uo UnitsNotOrthogonal
		uc UnitsNotClosed
		el EmptyLevel
		no NotOrthogonal
		sp SpreadTerm
		uu UnequalUnit
	)
	switch {
	case errors.As(err, &uo):
		kind, ok = "units not orthogonal", !commute(d.Units[uo.A], d.Units[uo.B])
	case errors.As(err, &uc):
		kind = "units not closed"
		sup := factor.Supremum(d.Units[uc.A], d.Units[uc.B])
		ok = sup.N > 1 && !slices.ContainsFunc(d.Units, func(f factor.Factor) bool { return factor.Equivalent(f, sup) })
	case errors.As(err, &el):
		kind, ok = "empty level", d.Factors[el.Factor].Counts()[el.Level] == 0
	case errors.As(err, &no):
		kind, ok = "terms not orthogonal", overlap(termBasis(d, no.A), termBasis(d, no.B)) > 1e-9
	case errors.As(err, &sp):
		kind, ok = "spread term", true
		b := termBasis(d, sp.Term)
		for u := range d.Units {
			if overlap(stratumBasis(d, u), b) > float64(len(b))-1e-9 {
				ok = false
			}
		}
	case errors.As(err, &uu):
		kind, ok = "unequal unit", sizes(d.Units[uu.Unit])
	}
	if !ok {
		t.Fatalf("seed %d: refused by %#v, which does not hold: %+v", seed, err, d)
	}
	return kind
}

func checkTable(t *testing.T, seed uint64, d Design, a *Analysis, y []float64) {
	t.Helper()
	same := func(what string, got, want float64) {
		t.Helper()
		if math.IsNaN(got) || math.Abs(got-want) > 1e-8*(1+math.Abs(want)) {
			t.Errorf("seed %d: %s = %.12g, want %.12g", seed, what, got, want)
		}
	}
	n := len(y)
	var total [][]float64
	extend(&total, indicators(factor.Universe(n)))
	strata := make([][][]float64, len(d.Units))
	for u := range d.Units {
		strata[u] = stratumBasis(d, u)
		same("stratum SS", a.Strata[u].SS, projected(strata[u], y))
		if a.Strata[u].DF != len(strata[u]) {
			t.Errorf("seed %d: stratum %d has df %d, want %d", seed, u, a.Strata[u].DF, len(strata[u]))
		}
		if overlap(total, strata[u]) > 1e-9 {
			t.Errorf("seed %d: stratum %d is not orthogonal to those before", seed, u)
		}
		total = append(total, strata[u]...)
	}
	if len(total) != n {
		t.Errorf("seed %d: strata have %d dimensions of %d", seed, len(total), n)
	}
	terms := make([][][]float64, len(d.Terms))
	left := slices.Clone(strata)
	for k := range d.Terms {
		terms[k] = termBasis(d, k)
		line := a.Terms[k]
		same("term SS", line.SS, projected(terms[k], y))
		if line.DF != len(terms[k]) {
			t.Errorf("seed %d: term %d has df %d, want %d", seed, k, line.DF, len(terms[k]))
		}
		same("part of the term in its stratum", overlap(strata[line.Stratum], terms[k]), float64(line.DF))
		for o := range k {
			if overlap(terms[o], terms[k]) > 1e-9 {
				t.Errorf("seed %d: terms %d and %d are not orthogonal", seed, o, k)
			}
		}
	}
	for u := range d.Units {
		var basis [][]float64
		for k := range d.Terms {
			if a.Terms[k].Stratum == u {
				extend(&basis, terms[k])
			}
		}
		left[u] = extend(&basis, strata[u])
		same("error SS", a.Strata[u].ErrorSS, projected(left[u], y))
		if a.Strata[u].ErrorDF != len(left[u]) {
			t.Errorf("seed %d: error of stratum %d has df %d, want %d", seed, u, a.Strata[u].ErrorDF, len(left[u]))
		}
		r := a.Residuals(u)
		counts := d.Units[u].Counts()
		for i, c := range d.Units[u].Level {
			var e, q float64
			for _, b := range left[u] {
				e += dot(b, y) * b[i]
				q += b[i] * b[i]
			}
			same("residual", r.Value[c], e)
			same("leverage", r.Leverage[c], 1-float64(counts[c])*q)
		}
	}
}

// checkVariance draws variances of the units and compares eigenvalues, means and their
// covariance with generalized least squares under the true matrix.
func checkVariance(t *testing.T, seed uint64, d Design, a *Analysis, r *rand.Rand, y []float64, spanning, partial *int) {
	t.Helper()
	same := func(what string, got, want float64) {
		t.Helper()
		if math.IsNaN(got) || math.Abs(got-want) > 1e-7*(1+math.Abs(want)) {
			t.Errorf("seed %d: %s = %.12g, want %.12g", seed, what, got, want)
		}
	}
	n := len(y)
	s := a.s
	sigma := make([]float64, len(d.Units))
	for u := range sigma {
		sigma[u] = .2 + 3*r.Float64()
	}
	// Every unit, fixed ones too, for the eigenspaces.
	for u := range d.Units {
		if len(a.Strata[u].Terms) == 0 {
			continue
		}
		for _, b := range stratumBasis(d, u) {
			vb := make([]float64, n)
			for v, f := range d.Units {
				sums := make([]float64, f.N)
				for i, c := range f.Level {
					sums[c] += b[i]
				}
				for i, c := range f.Level {
					vb[i] += sigma[v] * sums[c]
				}
			}
			xi := dot(b, vb)
			for i := range vb {
				if math.Abs(vb[i]-xi*b[i]) > 1e-8*xi {
					t.Fatalf("seed %d: stratum %d is no eigenspace", seed, u)
				}
			}
		}
	}
	v := mat.NewSymDense(n, nil)
	var columns [][]float64 // fixed units, then terms
	columns = append(columns, indicators(factor.Universe(n))...)
	random := s.random
	for u, f := range d.Units {
		if !random[u] {
			columns = append(columns, indicators(f)...)
			continue
		}
		for i := range n {
			for j := i; j < n; j++ {
				if f.Level[i] == f.Level[j] {
					v.SetSym(i, j, v.At(i, j)+sigma[u])
				}
			}
		}
	}
	from := make([]int, len(d.Terms))
	for k, term := range d.Terms {
		from[k] = len(columns)
		columns = append(columns, indicators(crossed(d, term))...)
	}
	xi := make([]float64, len(d.Units))
	for u := range d.Units {
		for w, f := range d.Units {
			if random[w] && factor.Finer(f, d.Units[u]) {
				// where sizes differ no term is in the stratum, and no mean draws on it
				xi[u] += sigma[w] * float64(n) / float64(f.Rank())
			}
		}
	}
	p := len(columns)
	x := mat.NewDense(n, p, nil)
	for j, c := range columns {
		x.SetCol(j, c)
	}
	var chol mat.Cholesky
	if !chol.Factorize(v) {
		t.Fatalf("seed %d: V", seed)
	}
	var vx, info mat.Dense
	if err := chol.SolveTo(&vx, x); err != nil {
		t.Fatal(err)
	}
	info.Mul(x.T(), &vx)
	ginv := pseudoInverse(&info)
	var xy, beta mat.VecDense
	xy.MulVec(vx.T(), mat.NewVecDense(n, y))
	beta.MulVec(ginv, &xy)

	for k, term := range d.Terms {
		m := a.Means(k)
		rows := mat.NewDense(len(m.Value), p, nil)
		for i := range m.Value {
			rows.Set(i, 0, 1)
			j := 1
			for u, f := range d.Units {
				if random[u] {
					continue
				}
				for c, count := range f.Counts() {
					rows.Set(i, j+c, float64(count)/float64(n))
				}
				j += f.N
			}
			at := s.decode(term, i)
			for o, other := range d.Terms {
				for cell := range s.cells[o].N {
					w := 1.0
					for f, l := range s.decode(other, cell) {
						if pos := slices.Index(term, other[f]); pos < 0 {
							w /= float64(d.Factors[other[f]].N)
						} else if at[pos] != l {
							w = 0
						}
					}
					rows.Set(i, from[o]+cell, w)
				}
			}
		}
		var mean mat.VecDense
		var cov, half mat.Dense
		mean.MulVec(rows, &beta)
		half.Mul(rows, ginv)
		cov.Mul(&half, rows.T())
		var used int
		for i := range m.Value {
			same("mean", m.Value[i], mean.AtVec(i))
			for j := range i + 1 {
				var got float64
				used = 0
				for u, c := range m.coefficients(i, j) {
					got += c * xi[u]
					if c != 0 {
						used++
					}
				}
				same("covariance of means", got, cov.At(i, j))
			}
			if i > 0 {
				w := make([]float64, len(m.Value))
				w[i], w[0] = 1, -1
				var got, quick float64
				for u, c := range m.Coefficients(w) {
					got += c * xi[u]
				}
				same("variance of a difference", got, cov.At(i, i)+cov.At(0, 0)-2*cov.At(i, 0))
				if e := m.Difference(i, 0); !math.IsNaN(e.Variance) {
					quick = m.Contrast(w).Variance
					same("difference", e.Variance, quick)
					same("its value", e.Value, m.Contrast(w).Value)
				}
			}
		}
		if used > 1 {
			*spanning++
		}
		if a.Terms[k].DF == 0 {
			continue
		}
		// the partial hypothesis: interaction contrasts of the means by least squares
		h, err := a.Partial(k)
		if err != nil {
			var spread SpreadHypothesis
			if !errors.As(err, &spread) || len(spread.Units) < 2 {
				t.Errorf("seed %d: %v", seed, err)
			}
			continue
		}
		contrast := mat.NewDense(0+a.Terms[k].DF, len(m.Value), nil)
		row := 0
		for c := range m.Value {
			at := s.decode(term, c)
			inner := true
			for f, l := range at {
				inner = inner && l < d.Factors[term[f]].N-1
			}
			if !inner {
				continue
			}
			for o := range m.Value {
				w := 1.0
				for f, l := range s.decode(term, o) {
					nf := d.Factors[term[f]].N
					switch {
					case l == at[f]:
					case l == nf-1:
						w = -w
					default:
						w = 0
					}
				}
				contrast.Set(row, o, w)
			}
			row++
		}
		var cm mat.VecDense
		var cc, ccc mat.Dense
		cm.MulVec(contrast, &mean)
		cc.Mul(contrast, &cov)
		ccc.Mul(&cc, contrast.T())
		var solved mat.VecDense
		if err := solved.SolveVec(&ccc, &cm); err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		same("partial SS", h.SS, mat.Dot(&cm, &solved)*xi[h.Stratum])
		if h.DF != a.Terms[k].DF {
			t.Errorf("seed %d: partial df %d", seed, h.DF)
		}
		if math.Abs(h.SS-a.Terms[k].SS) > 1e-6*h.SS {
			*partial++
		}
	}
}

func pseudoInverse(a *mat.Dense) *mat.Dense {
	var svd mat.SVD
	if !svd.Factorize(a, mat.SVDThin) {
		panic("no decomposition")
	}
	var u, v mat.Dense
	svd.UTo(&u)
	svd.VTo(&v)
	s := svd.Values(nil)
	for i, x := range s {
		if x > 1e-10*s[0] {
			s[i] = 1 / x
		} else {
			s[i] = 0
		}
	}
	var vs, out mat.Dense
	vs.Mul(&v, mat.NewDiagDense(len(s), s))
	out.Mul(&vs, u.T())
	return &out
}
