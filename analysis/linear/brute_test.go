package linear

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
)

// dense is the second road: indicator columns for everything, never a full-rank coding,
// solved by the generalized inverse of the singular value decomposition.
type dense struct {
	x    *mat.Dense
	pinv *mat.Dense // p × n
	rank int
	rss  float64
	beta []float64
}

func newDense(y []float64, columns [][]float64) dense {
	n, p := len(y), len(columns)
	d := dense{x: mat.NewDense(n, p, nil), beta: make([]float64, p)}
	for j, c := range columns {
		d.x.SetCol(j, c)
	}
	var svd mat.SVD
	if !svd.Factorize(d.x, mat.SVDThin) {
		panic("no decomposition")
	}
	var u, v mat.Dense
	svd.UTo(&u)
	svd.VTo(&v)
	s := svd.Values(nil)
	inv := make([]float64, len(s))
	for i, a := range s {
		if a > 1e-9*s[0] {
			inv[i] = 1 / a
			d.rank++
		}
	}
	d.pinv = mat.NewDense(p, n, nil)
	var vs mat.Dense
	vs.Mul(&v, mat.NewDiagDense(len(inv), inv))
	d.pinv.Mul(&vs, u.T())
	b := mat.NewVecDense(p, d.beta)
	b.MulVec(d.pinv, mat.NewVecDense(n, y))
	var e mat.VecDense
	e.MulVec(d.x, b)
	for i := range n {
		d.rss += math.Pow(y[i]-e.AtVec(i), 2)
	}
	return d
}

// estimable tells whether l = l X⁻X, and gives its value and l (X′X)⁻ k′.
func (d dense) function(l []float64) (value float64, w []float64, estimable bool) {
	p := len(l)
	var lp, back mat.VecDense
	lv := mat.NewVecDense(p, l)
	lp.MulVec(d.pinv.T(), lv) // n: X⁻′l
	back.MulVec(d.x.T(), &lp)
	estimable = true
	for j := range p {
		value += l[j] * d.beta[j]
		if math.Abs(back.AtVec(j)-l[j]) > 1e-7 {
			estimable = false
		}
	}
	return value, lp.RawVector().Data, estimable
}

// columns of the over-parametrized model; terms selected by keep.
type layout struct {
	columns        [][]float64
	unit           [2]int   // columns of the trend's unit intercepts
	nuisance, term [][2]int // column ranges
	covariate      int
}

func indicators(l *layout, f factor.Factor, by []float64) [2]int {
	from := len(l.columns)
	for c := range f.N {
		x := make([]float64, f.Len())
		for i, a := range f.Level {
			if int(a) == c {
				x[i] = 1
				if by != nil {
					x[i] = by[i]
				}
			}
		}
		l.columns = append(l.columns, x)
	}
	return [2]int{from, len(l.columns)}
}

func cells(m Model, t int) factor.Factor {
	f := factor.Factor{Level: make([]int32, len(m.Y)), N: 1}
	for _, v := range m.Terms[t] {
		g := m.Factors[v]
		for i := range f.Level {
			f.Level[i] = f.Level[i]*int32(g.N) + g.Level[i]
		}
		f.N *= g.N
	}
	return f
}

func lay(m Model, keep func(t int) bool) layout {
	var l layout
	n := len(m.Y)
	indicators(&l, factor.Universe(n), nil)
	if m.Trend != nil {
		u := m.Trend.Unit.Compact()
		l.unit = indicators(&l, u, nil)
		for k := 1; k <= m.Trend.Order; k++ {
			by := make([]float64, n)
			for i, v := range m.Trend.Time {
				by[i] = math.Pow(v-m.Trend.Centre, float64(k))
			}
			indicators(&l, u, by)
		}
	}
	for _, g := range m.Nuisance {
		l.nuisance = append(l.nuisance, indicators(&l, g.Compact(), nil))
	}
	l.covariate = len(l.columns)
	for _, x := range m.Covariates {
		var mean float64
		for _, v := range x {
			mean += v / float64(n)
		}
		c := make([]float64, n)
		for i := range c {
			c[i] = x[i] - mean
		}
		l.columns = append(l.columns, c)
	}
	for t := range m.Terms {
		if keep(t) {
			l.term = append(l.term, indicators(&l, cells(m, t), nil))
		} else {
			l.term = append(l.term, [2]int{})
		}
	}
	return l
}

// means gives the coefficients of the adjusted means of a term in the indicator columns.
// Nuisance classes have equal weights, which is right where factors cross freely.
func (l layout) means(m Model, term int) [][]float64 {
	full := cells(m, term)
	t := m.Terms[term]
	out := make([][]float64, full.N)
	for c := range out {
		row := make([]float64, len(l.columns))
		row[0] = 1
		level := make(map[int]int)
		rest := c
		for a := len(t) - 1; a >= 0; a-- {
			level[t[a]] = rest % m.Factors[t[a]].N
			rest /= m.Factors[t[a]].N
		}
		average := func(r [2]int) {
			for j := r[0]; j < r[1]; j++ {
				row[j] += 1 / float64(r[1]-r[0])
			}
		}
		average(l.unit)
		for _, r := range l.nuisance {
			average(r)
		}
		for s, r := range l.term {
			if r[0] == r[1] {
				continue
			}
			for j := r[0]; j < r[1]; j++ {
				rest, w := j-r[0], 1.0
				fs := m.Terms[s]
				for a := len(fs) - 1; a >= 0; a-- {
					n := m.Factors[fs[a]].N
					if at, in := level[fs[a]]; !in {
						w /= float64(n)
					} else if at != rest%n {
						w = 0
					}
					rest /= n
				}
				row[j] += w
			}
		}
		out[c] = row
	}
	return out
}

func random(r *rand.Rand, n, classes int) factor.Factor {
	f := factor.Factor{Level: make([]int32, n), N: classes}
	for i := range f.Level {
		f.Level[i] = int32(r.IntN(classes))
	}
	return f
}

func randomModel(r *rand.Rand) Model {
	n := 8 + r.IntN(40)
	m := Model{Y: make([]float64, n)}
	for i := range m.Y {
		m.Y[i] = 100 + 10*r.NormFloat64()
	}
	if r.IntN(3) == 0 {
		tr := Trend{Unit: random(r, n, 2+r.IntN(4)), Time: make([]float64, n), Order: 1 + r.IntN(2), Centre: 2}
		for i := range tr.Time {
			tr.Time[i] = float64(r.IntN(5))
		}
		m.Trend = &tr
		if r.IntN(2) == 0 {
			m.Nuisance = append(m.Nuisance, tr.Unit)
		}
	}
	for range r.IntN(3) {
		m.Nuisance = append(m.Nuisance, random(r, n, 2+r.IntN(4)))
	}
	if len(m.Nuisance) > 0 && r.IntN(6) == 0 { // a factor told twice
		m.Nuisance = append(m.Nuisance, m.Nuisance[0])
	}
	for range r.IntN(3) {
		x := make([]float64, n)
		for i := range x {
			x[i] = 50 + r.NormFloat64()
		}
		if r.IntN(5) == 0 && len(m.Nuisance) > 0 { // constant in a block
			for i := range x {
				x[i] = float64(m.Nuisance[0].Level[i])
			}
		}
		m.Covariates = append(m.Covariates, x)
	}
	for range 1 + r.IntN(3) {
		m.Factors = append(m.Factors, random(r, n, 2+r.IntN(3)))
	}
	if r.IntN(5) == 0 && len(m.Nuisance) > 0 { // a treatment confounded with blocks
		m.Factors[0] = m.Nuisance[0]
	}
	if r.IntN(3) == 0 { // repeats, so that points hold several rows
		for i := n / 2; i < n; i++ {
			for _, g := range append(append([]factor.Factor(nil), m.Nuisance...), m.Factors...) {
				g.Level[i] = g.Level[i-n/2]
			}
			for _, x := range m.Covariates {
				x[i] = x[i-n/2]
			}
			if m.Trend != nil {
				m.Trend.Unit.Level[i] = m.Trend.Unit.Level[i-n/2]
				m.Trend.Time[i] = m.Trend.Time[i-n/2]
			}
		}
	}
	order := 1 + r.IntN(len(m.Factors))
	for size := 1; size <= order; size++ {
		for set := range 1 << len(m.Factors) {
			var t []int
			for v := range m.Factors {
				if set>>v&1 == 1 {
					t = append(t, v)
				}
			}
			if len(t) == size {
				m.Terms = append(m.Terms, t)
			}
		}
	}
	return m
}

// Every number of a fit against the dense road, on random unbalanced data with empty
// cells, confounded factors, collinear covariates and repeated rows.
func TestAgainstGeneralizedInverse(t *testing.T) {
	estimable, tested := 0, 0
	for seed := range uint64(160) {
		r := rand.New(rand.NewPCG(seed, 1))
		m := randomModel(r)
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			f := fit(t, m)
			l := lay(m, func(int) bool { return true })
			d := newDense(m.Y, l.columns)
			if f.Rank != d.rank || f.DF != len(m.Y)-d.rank {
				t.Fatalf("rank %d, want %d", f.Rank, d.rank)
			}
			total := newDense(m.Y, l.columns[:1]).rss
			closeTo := func(what string, got, want float64) {
				t.Helper()
				if math.IsNaN(got) || math.Abs(got-want) > 1e-8*total {
					t.Errorf("%s = %.12g, want %.12g", what, got, want)
				}
			}
			closeTo("RSS", f.RSS, d.rss)

			e, fitted := f.Residuals()
			h := f.Leverages()
			var proj mat.Dense
			proj.Mul(d.x, d.pinv)
			for i := range m.Y {
				var want float64
				for k, y := range m.Y {
					want += proj.At(i, k) * y
				}
				near(t, "fitted", fitted[i], want, 1e-9)
				near(t, "residual", e[i], m.Y[i]-want, 1e-8)
				near(t, "leverage", h[i], proj.At(i, i), 1e-9)
			}

			// means: values and covariances in units of σ²
			// covariates that follow from what stands before them left out
			ms := f.MS()
			less, rank := m, 0
			less.Covariates = nil
			for k := range len(m.Covariates) + 1 {
				c := lay(m, func(int) bool { return false })
				now := newDense(m.Y, c.columns[:c.covariate+k]).rank
				if k > 0 && now > rank {
					less.Covariates = append(less.Covariates, m.Covariates[k-1])
				}
				rank = now
			}
			lessLay := lay(less, func(int) bool { return true })
			d2 := newDense(m.Y, lessLay.columns)
			for term := range m.Terms {
				means := f.Means(term)
				rows := lessLay.means(less, term)
				for i, row := range rows {
					value, w, ok := d2.function(row)
					if m.Trend != nil || len(m.Nuisance) > 1 {
						// Equal weights may not be estimable where nuisance factors overlap;
						// where they are they must be met. Differences are checked in any case.
						if m.Trend == nil && ok {
							if !means.Estimable[i] {
								t.Fatalf("term %d mean %d not estimable", term, i)
							}
							near(t, "mean", means.Value[i], value, 1e-8)
						}
						if i == 0 {
							continue
						}
						diff := slices.Clone(row)
						for j := range diff {
							diff[j] -= rows[0][j]
						}
						value, w, ok = d2.function(diff)
						weights := make([]float64, len(rows))
						weights[i], weights[0] = 1, -1
						got, variance, can := means.Contrast(weights)
						if can != ok {
							t.Fatalf("term %d contrast %d estimable %v, want %v", term, i, can, ok)
						}
						if ok {
							near(t, "difference", got, value, 1e-8)
							if f.DF > 0 {
								near(t, "its variance", variance/ms, dot(w, w), 1e-8)
							}
							estimable++
						}
						continue
					}
					if means.Estimable[i] != ok {
						t.Fatalf("term %d mean %d estimable %v, want %v", term, i, !ok, ok)
					}
					if !ok {
						continue
					}
					estimable++
					near(t, "mean", means.Value[i], value, 1e-8)
					for k := range i {
						if _, w2, ok := d2.function(rows[k]); ok && f.DF > 0 {
							near(t, "covariance", means.Cov(i, k)/ms, dot(w, w2), 1e-8)
						}
					}
					if f.DF > 0 {
						near(t, "variance", means.Cov(i, i)/ms, dot(w, w), 1e-8)
					}
				}
			}

			// tests by differences of dense residual sums of squares
			rss := func(cov int, keep func(t int) bool) dense {
				k := lay(m, keep)
				if cov < len(m.Covariates) {
					k.columns = append(k.columns[:k.covariate+cov:k.covariate+cov], k.columns[k.covariate+len(m.Covariates):]...)
				}
				return newDense(m.Y, k.columns)
			}
			all := len(m.Covariates)
			for _, s := range f.Tests(Marginal) {
				if s.Kind != Term {
					continue
				}
				own := m.Terms[s.Index]
				large := rss(all, func(k int) bool { return k == s.Index || !within(own, m.Terms[k]) })
				small := rss(all, func(k int) bool { return !within(own, m.Terms[k]) })
				if s.DF != large.rank-small.rank {
					t.Fatalf("marginal df %d, want %d", s.DF, large.rank-small.rank)
				}
				closeTo("marginal SS", s.SS, small.rss-large.rss)
				tested++
			}
			for _, s := range f.Tests(Sequential) {
				var large, small dense
				if s.Kind == Covariate {
					none := func(int) bool { return false }
					large, small = rss(s.Index+1, none), rss(s.Index, none)
				} else {
					large = rss(all, func(k int) bool { return k <= s.Index })
					small = rss(all, func(k int) bool { return k < s.Index })
				}
				if s.DF != large.rank-small.rank {
					t.Fatalf("sequential df %d, want %d", s.DF, large.rank-small.rank)
				}
				closeTo("sequential SS", s.SS, small.rss-large.rss)
			}
			// partial: interaction contrasts of the adjusted means, by the generalized inverse
			for _, s := range f.Tests(Partial) {
				if s.Kind != Term {
					continue
				}
				rows := l.means(m, s.Index)
				ss, df, ok := d.hypothesis(contrast(m, s.Index, rows))
				if ok != s.Estimable {
					t.Fatalf("partial estimable %v, want %v", s.Estimable, ok)
				}
				if ok {
					if s.DF != df {
						t.Fatalf("partial df %d, want %d", s.DF, df)
					}
					closeTo("partial SS", s.SS, ss)
					tested++
				}
			}
			for k := range m.Covariates {
				slopes, df, rss, err := f.EqualSlopes(k)
				if err != nil {
					t.Fatal(err)
				}
				big := l
				for term := range m.Terms {
					by := l.columns[l.covariate+k]
					indicators(&big, cells(m, term), by)
				}
				want := newDense(m.Y, big.columns)
				if df != len(m.Y)-want.rank || slopes.DF != want.rank-d.rank {
					t.Fatalf("slopes df %d on %d, want %d on %d", slopes.DF, df, want.rank-d.rank, len(m.Y)-want.rank)
				}
				closeTo("slopes RSS", rss, want.rss)
				closeTo("slopes SS", slopes.SS, d.rss-want.rss)
			}
		})
	}
	if estimable < 250 || tested < 250 {
		t.Errorf("too little tested: %d, %d", estimable, tested)
	}
}

// contrast applies differences from the last level for the factors of the term, which
// span its interaction contrasts.
func contrast(m Model, term int, rows [][]float64) [][]float64 {
	t := m.Terms[term]
	for a := range t {
		n := m.Factors[t[a]].N
		slow := 1
		for _, v := range t[a+1:] {
			slow *= m.Factors[v].N
		}
		out := make([][]float64, 0, len(rows)/n*(n-1))
		// axis a of the remaining table: earlier axes have already lost a level
		outer := len(rows) / (n * slow)
		for o := range outer {
			for l := range n - 1 {
				for s := range slow {
					x := slices.Clone(rows[(o*n+l)*slow+s])
					for j, v := range rows[(o*n+n-1)*slow+s] {
						x[j] -= v
					}
					out = append(out, x)
				}
			}
		}
		rows = out
	}
	return rows
}

func (d dense) hypothesis(l [][]float64) (ss float64, df int, estimable bool) {
	n, _ := d.x.Dims()
	w := mat.NewDense(n, len(l), nil)
	value := make([]float64, len(l))
	for i, row := range l {
		v, x, ok := d.function(row)
		if !ok {
			return 0, 0, false
		}
		value[i] = v
		w.SetCol(i, x)
	}
	var g mat.Dense
	g.Mul(w.T(), w)
	// value′ g⁻ value by the singular value decomposition
	var svd mat.SVD
	svd.Factorize(&g, mat.SVDThin)
	var u, v mat.Dense
	svd.UTo(&u)
	svd.VTo(&v)
	for i, s := range svd.Values(nil) {
		if s <= 1e-10 {
			continue
		}
		df++
		var a, b float64
		for j, x := range value {
			a += u.At(j, i) * x
			b += v.At(j, i) * x
		}
		ss += a * b / s
	}
	return ss, df, true
}

func dot(a, b []float64) float64 {
	var s float64
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}
