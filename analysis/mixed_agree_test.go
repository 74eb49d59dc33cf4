package analysis

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"penwright/analysis/result"
)

// mixedReckoning is a mixed model as the textbook writes it, straight from the rows of a
// sketch: dense matrices, indicator columns, the formulae of Kenward & Roger as printed. It
// does not search for the variances: it takes those found, and shows that no step from
// them raises the likelihood.
type mixedReckoning struct {
	b     *reckoning
	y     []float64
	x     [][]float64 // columns that do not depend on those before
	zz    []*mat.SymDense
	names []string
	mean  func(t int, levels []int) []float64 // coefficients of a mean

	// Where rows of one unit are correlated: its part of V, which is added to that of zz.
	within func(th []float64, i, j int) float64

	phi, adjusted *mat.Dense
	w             *mat.Dense
	p             []*mat.Dense
	beta          *mat.VecDense
}

// mixedColumn is one of X, and its weight in a mean.
type mixedColumn struct {
	value  []float64
	weight func(t int, levels []int) float64
}

// mixedRows builds X and the classes of random units.
func mixedRows(b *reckoning) *mixedReckoning {
	m := &mixedReckoning{b: b}
	s := b.s
	n := len(b.inst)
	l := &level{unit: b.rowUnit, inst: b.inst}
	for _, i := range b.inst {
		m.y = append(m.y, s.y[i])
	}
	var all []mixedColumn
	all = append(all, mixedColumn{ones(n), func(int, []int) float64 { return 1 }})
	// Larger units that are fixed: those within which no other fixed one lies.
	var fixed []int
	for u := range s.units {
		if u == b.rowUnit || b.random[u] || !b.lies(b.rowUnit, u) {
			continue
		}
		inner := false
		for v := range s.units {
			inner = inner || v != u && v != b.rowUnit && !b.random[v] && b.lies(b.rowUnit, v) && b.lies(v, u)
		}
		if !inner {
			fixed = append(fixed, u)
		}
	}
	classOf := func(u int) []int {
		var c []int
		for _, i := range b.inst {
			c = append(c, s.up[b.rowUnit][i][u])
		}
		return c
	}
	distinct := func(c []int) []int {
		d := slices.Clone(c)
		slices.Sort(d)
		return slices.Compact(d)
	}
	for _, u := range fixed {
		c := classOf(u)
		d := distinct(c)
		for _, k := range d {
			v := make([]float64, n)
			for i := range v {
				if c[i] == k {
					v[i] = 1
				}
			}
			all = append(all, mixedColumn{v, func(int, []int) float64 { return 1 / float64(len(d)) }})
		}
	}
	if s.trend { // a line over the periods for each cow, zero at their middle
		cow := slices.IndexFunc(s.units, func(u sketchUnit) bool { return u.name == "cow" })
		period := slices.IndexFunc(s.units, func(u sketchUnit) bool { return u.name == "period" })
		cows, periods, centre := classOf(cow), classOf(period), 0.0
		for _, p := range s.own[period] {
			centre += float64(p) / float64(len(s.own[period]))
		}
		for _, slope := range []bool{false, true} {
			if !slope && slices.Contains(fixed, cow) {
				continue
			}
			for _, k := range distinct(cows) {
				v := make([]float64, n)
				for i := range v {
					if cows[i] == k {
						v[i] = 1
						if slope {
							v[i] = float64(s.own[period][periods[i]]) - centre
						}
					}
				}
				all = append(all, mixedColumn{v, func(int, []int) float64 {
					if slope {
						return 0
					}
					return 1 / float64(len(distinct(cows)))
				}})
			}
		}
		fixed = append(fixed, cow)
	}
	for k := range s.covariates {
		var v []float64
		for _, i := range b.inst {
			v = append(v, s.covariates[k][i])
		}
		at := 0.0
		for _, x := range v {
			at += x / float64(n)
		}
		all = append(all, mixedColumn{v, func(int, []int) float64 { return at }})
	}
	for _, fs := range b.terms {
		var sizes []int
		for _, f := range fs {
			sizes = append(sizes, len(b.present[f]))
		}
		for _, cell := range product(sizes) {
			v := make([]float64, n)
			for i := range v {
				v[i] = 1
				for j, f := range fs {
					if b.factorLevel(l, f, i) != cell[j] {
						v[i] = 0
					}
				}
			}
			all = append(all, mixedColumn{v, func(t int, levels []int) float64 {
				w := 1.0
				for j, f := range fs {
					if at := slices.Index(b.terms[t], f); at < 0 {
						w /= float64(sizes[j])
					} else if levels[at] != cell[j] {
						w = 0
					}
				}
				return w
			}})
		}
	}
	m.take(all)
	// Random units.
	var classes [][]int
	for u := len(s.units) - 1; u >= 0; u-- {
		if u == b.rowUnit || !b.random[u] || !b.lies(b.rowUnit, u) {
			continue
		}
		taken := false
		for _, v := range fixed {
			taken = taken || b.lies(v, u)
		}
		c := classOf(u)
		if d := len(distinct(c)); taken || d < 2 || d == n {
			continue
		}
		m.names, classes = append(m.names, s.units[u].name), append(classes, c)
	}
	for _, c := range classes {
		m.zz = append(m.zz, sameClass(c))
	}
	z := mat.NewSymDense(n, nil)
	for i := range n {
		z.SetSym(i, i, 1)
	}
	m.names, m.zz = append(m.names, "residual"), append(m.zz, z)
	return m
}

// sameClass is ZZ′ of classes.
func sameClass(c []int) *mat.SymDense {
	z := mat.NewSymDense(len(c), nil)
	for i := range c {
		for j := i; j < len(c); j++ {
			if c[i] == c[j] {
				z.SetSym(i, j, 1)
			}
		}
	}
	return z
}

// take keeps the columns that do not depend on those before, and makes means.
func (m *mixedReckoning) take(all []mixedColumn) {
	n := len(m.y)
	// Keep what does not depend on columns before; a mean is a function of the rows where
	// its weights do not.
	var basis [][]float64
	for _, c := range all {
		v := slices.Clone(c.value)
		size := floatsSquared(v)
		for range 2 {
			for _, q := range basis {
				d := 0.0
				for i := range v {
					d += q[i] * v[i]
				}
				for i := range v {
					v[i] -= d * q[i]
				}
			}
		}
		left := floatsSquared(v)
		if left <= 1e-14*size {
			continue
		}
		for i := range v {
			v[i] /= math.Sqrt(left)
		}
		basis = append(basis, v)
		m.x = append(m.x, c.value)
	}
	allX := mat.NewDense(n, len(all), nil)
	for j, c := range all {
		allX.SetCol(j, c.value)
	}
	m.mean = func(t int, levels []int) []float64 {
		w := mat.NewVecDense(len(all), nil)
		for j, c := range all {
			w.SetVec(j, c.weight(t, levels))
		}
		// w = A′X for some A: then w·β = A·(Xβ), which in kept columns is A·X₁.
		var svd mat.SVD
		if !svd.Factorize(allX, mat.SVDThin) {
			return nil
		}
		var u, v mat.Dense
		svd.UTo(&u)
		svd.VTo(&v)
		values := svd.Values(nil)
		a := make([]float64, n)
		rest := slices.Clone(w.RawVector().Data)
		for k, sv := range values {
			if sv <= 1e-9*values[0] {
				continue
			}
			d := 0.0
			for j := range len(all) {
				d += v.At(j, k) * w.AtVec(j)
			}
			for j := range len(all) {
				rest[j] -= d * v.At(j, k)
			}
			for i := range a {
				a[i] += d / sv * u.At(i, k)
			}
		}
		if floatsSquared(rest) > 1e-14*floatsSquared(w.RawVector().Data) {
			return nil
		}
		out := make([]float64, len(m.x))
		for j, c := range m.x {
			for i := range a {
				out[j] += a[i] * c[i]
			}
		}
		return out
	}
}

func (m *mixedReckoning) columns() *mat.Dense {
	x := mat.NewDense(len(m.y), len(m.x), nil)
	for j, c := range m.x {
		x.SetCol(j, c)
	}
	return x
}

func (m *mixedReckoning) v(th []float64) *mat.SymDense {
	n := len(m.y)
	v := mat.NewSymDense(n, nil)
	for k, z := range m.zz {
		for i := range n {
			for j := i; j < n; j++ {
				v.SetSym(i, j, v.At(i, j)+th[k]*z.At(i, j))
			}
		}
	}
	for i := range n {
		for j := i; j < n && m.within != nil; j++ {
			v.SetSym(i, j, v.At(i, j)+m.within(th[len(m.zz):], i, j))
		}
	}
	return v
}

// likelihood is ℓ_R.
func (m *mixedReckoning) likelihood(th []float64) float64 {
	x := m.columns()
	n, p := x.Dims()
	var ch mat.Cholesky
	if !ch.Factorize(m.v(th)) {
		return math.Inf(-1)
	}
	var vx, xx mat.Dense
	if ch.SolveTo(&vx, x) != nil {
		return math.Inf(-1)
	}
	xx.Mul(x.T(), &vx)
	y := mat.NewVecDense(n, centred(m.y))
	var b, xy, r, vr mat.VecDense
	xy.MulVec(vx.T(), y)
	if b.SolveVec(&xx, &xy) != nil {
		return math.Inf(-1)
	}
	r.MulVec(x, &b)
	r.SubVec(y, &r)
	if ch.SolveVecTo(&vr, &r) != nil {
		return math.Inf(-1)
	}
	det, _ := mat.LogDet(&xx)
	return -(float64(n-p)*math.Log(2*math.Pi) + ch.LogDet() + det + mat.Dot(&r, &vr)) / 2
}

// by is the derivative of V by parameter i, by2 that by i and j: of what is linear as it
// stands, of the other by differences.
func (m *mixedReckoning) by(th []float64, i int) mat.Matrix {
	if i < len(m.zz) {
		return m.zz[i]
	}
	n := len(m.y)
	d := mat.NewDense(n, n, nil)
	h := 1e-3 * math.Max(math.Abs(th[i]), 1e-3)
	for k, w := range []float64{1, -8, 8, -1} {
		x := slices.Clone(th)
		x[i] += h * []float64{-2, -1, 1, 2}[k]
		var t mat.Dense
		t.Scale(w/(12*h), m.v(x))
		d.Add(d, &t)
	}
	return d
}

func (m *mixedReckoning) by2(th []float64, i, j int) *mat.Dense {
	n := len(m.y)
	d := mat.NewDense(n, n, nil)
	if i < len(m.zz) || j < len(m.zz) {
		return d
	}
	h := 1e-3 * math.Max(math.Abs(th[j]), 1e-3)
	for k, w := range []float64{1, -8, 8, -1} {
		x := slices.Clone(th)
		x[j] += h * []float64{-2, -1, 1, 2}[k]
		var t mat.Dense
		t.Scale(w/(12*h), m.by(x, i))
		d.Add(d, &t)
	}
	return d
}

// infer makes the matrices of Kenward & Roger (1997) over the free parameters.
func (m *mixedReckoning) infer(th []float64, free []int) bool {
	x := m.columns()
	var vi mat.Dense
	if vi.Inverse(m.v(th)) != nil {
		return false
	}
	vx := product2(&vi, x)
	var phi mat.Dense
	if phi.Inverse(product2(x.T(), vx)) != nil {
		return false
	}
	pm := minus(&vi, product2(product2(vx, &phi), vx.T()))
	k := len(free)
	info := mat.NewDense(k, k, nil)
	var pz []*mat.Dense
	var by []mat.Matrix
	m.p = nil
	for _, i := range free {
		d := m.by(th, i)
		by = append(by, d)
		pz = append(pz, product2(pm, d))
		m.p = append(m.p, product2(product2(vx.T(), d), vx))
	}
	for a := range k {
		for b := range k {
			info.Set(a, b, mat.Trace(product2(pz[a], pz[b]))/2)
		}
	}
	m.w = mat.NewDense(k, k, nil)
	if m.w.Inverse(info) != nil {
		return false
	}
	sum := mat.NewDense(len(m.x), len(m.x), nil)
	for a := range k {
		for b := range k {
			q := product2(product2(product2(vx.T(), by[a]), product2(&vi, by[b])), vx)
			q = minus(q, product2(product2(m.p[a], &phi), m.p[b]))
			if m.within != nil {
				r := product2(product2(vx.T(), m.by2(th, free[a], free[b])), vx)
				r.Scale(0.25, r)
				q = minus(q, r)
			}
			q.Scale(m.w.At(a, b), q)
			sum.Add(sum, q)
		}
	}
	adjusted := product2(product2(&phi, sum), &phi)
	adjusted.Scale(2, adjusted)
	adjusted.Add(adjusted, &phi)
	m.phi, m.adjusted = &phi, adjusted
	var xy mat.VecDense
	xy.MulVec(vx.T(), mat.NewVecDense(len(m.y), m.y))
	m.beta = mat.NewVecDense(len(m.x), nil)
	m.beta.MulVec(&phi, &xy)
	return true
}

// test is F and its degrees of freedom of the hypothesis that rows l are zero.
func (m *mixedReckoning) test(l *mat.Dense) (f, df float64) {
	k, _ := l.Dims()
	var lb mat.VecDense
	lb.MulVec(l, m.beta)
	var inv, ainv mat.Dense
	if inv.Inverse(product2(product2(l, m.phi), l.T())) != nil || ainv.Inverse(product2(product2(l, m.adjusted), l.T())) != nil {
		return math.NaN(), math.NaN()
	}
	theta := product2(product2(l.T(), &inv), l)
	a1, a2 := 0.0, 0.0
	for i := range m.p {
		for j := range m.p {
			ti := product2(product2(theta, m.phi), product2(m.p[i], m.phi))
			tj := product2(product2(theta, m.phi), product2(m.p[j], m.phi))
			a1 += m.w.At(i, j) * mat.Trace(ti) * mat.Trace(tj)
			a2 += m.w.At(i, j) * mat.Trace(product2(ti, tj))
		}
	}
	n := float64(k)
	var t mat.VecDense
	t.MulVec(&ainv, &lb)
	f = mat.Dot(&lb, &t) / n
	if k == 1 {
		return f, 2 / a2
	}
	bb := (a1 + 6*a2) / (2 * n)
	g := ((n+1)*a1 - (n+4)*a2) / ((n + 2) * a2)
	c1, c2, c3 := g/(3*n+2*(1-g)), (n-g)/(3*n+2*(1-g)), (n+2-g)/(3*n+2*(1-g))
	e := 1 / (1 - a2/n)
	v := 2 / n * (1 + c1*bb) / ((1 - c2*bb) * (1 - c2*bb) * (1 - c3*bb))
	df = 4 + (n+2)/(n*v/(2*e*e)-1)
	return f * df / (e * (df - 2)), df
}

// holdMixed holds a mixed model against the textbook's formulae.
func (c *check) holdMixed(out *result.Response, b *reckoning) {
	m := mixedRows(b)
	if len(out.Components) != len(m.names) {
		c.fault("%d components, want %v", len(out.Components), m.names)
		return
	}
	th := make([]float64, len(m.names))
	se := make([]float64, len(m.names))
	var free []int
	for k, name := range m.names {
		found := false
		for _, x := range out.Components {
			if x.Term == name {
				th[k], se[k], found = float64(x.Estimate), float64(x.SE), true
				if !x.Boundary {
					free = append(free, k)
				}
			}
		}
		if !found {
			c.fault("no component %s", name)
			return
		}
	}
	best := m.likelihood(th)
	if math.Abs(best-float64(out.Model.LogLikelihood)) > 1e-7*math.Abs(best) {
		c.fault("log likelihood %.10g, want %.10g", float64(out.Model.LogLikelihood), best)
	}
	c.n++
	for k := range th {
		at := func(h float64) float64 {
			x := slices.Clone(th)
			x[k] += h
			return m.likelihood(x)
		}
		if !slices.Contains(free, k) {
			if h := 1e-5 * th[len(th)-1]; at(h) > best+1e-8 {
				c.fault("component %s is held at zero, but the likelihood rises above it", m.names[k])
			}
			continue
		}
		h := 1e-3 * se[k]
		for !(math.Abs(at(2*h)+at(-2*h)-2*best) < 1e-4) {
			h /= 4 // V is hardly positive definite, and far from the maximum it is not
		}
		if g := (8*(at(h)-at(-h)) - (at(2*h) - at(-2*h))) / (12 * h / se[k]); math.Abs(g) > 2e-5*math.Max(1, 1e-3*se[k]/h) {
			c.fault("the likelihood rises with component %s, by %g per standard error", m.names[k], g)
		}
		c.n++
	}
	if !m.infer(th, free) {
		return
	}
	// Where the variances can hardly be told apart, digits of all that follows are lost.
	scaled := mat.NewSymDense(len(free), nil)
	for i := range free {
		for j := range free[:i+1] {
			scaled.SetSym(i, j, m.w.At(i, j)/math.Sqrt(m.w.At(i, i)*m.w.At(j, j)))
		}
	}
	var eigen mat.EigenSym
	eigen.Factorize(scaled, false)
	lost := math.Max(1, 1e-4/eigen.Values(nil)[0])
	for i := range free {
		if d := math.Sqrt(m.w.At(i, i)); math.Abs(d-se[free[i]]) > 1e-4*d {
			c.fault("SE of component %s: %g, want %g", m.names[free[i]], se[free[i]], d)
		}
	}
	// F and df hang on the variances; what they were found to is 1e-7 of their SE or so.
	close := func(what string, got, want, tol float64) {
		c.n++
		if !(math.Abs(got-want) <= tol*math.Max(math.Abs(want), 1e-9)) && !(math.IsNaN(got) && math.IsNaN(want)) {
			c.fault("%s: %.10g, want %.10g", what, got, want)
		}
	}
	for t, name := range b.names {
		var sizes []int
		for _, f := range b.terms[t] {
			sizes = append(sizes, len(b.present[f]))
		}
		var rows [][]float64
		whole := true
		for _, cell := range product(sizes) {
			r := m.mean(t, cell)
			whole = whole && r != nil
			rows = append(rows, r)
		}
		at := 0
		for _, x := range out.Means {
			if x.Term != name {
				continue
			}
			cell, present := at, true
			rest := at
			level := make([]int, len(b.terms[t]))
			for i := len(level) - 1; i >= 0; i-- {
				planned := len(b.s.factors[b.terms[t][i]].levels)
				level[i], rest = slices.Index(b.present[b.terms[t][i]], rest%planned), rest/planned
				present = present && level[i] >= 0
			}
			at++
			if !present {
				continue
			}
			cell = 0
			for i, l := range level {
				cell = cell*sizes[i] + l
			}
			if rows[cell] == nil {
				close("mean of "+name, float64(x.Mean), math.NaN(), 0)
				continue
			}
			l := mat.NewDense(1, len(m.x), rows[cell])
			v := product2(product2(l, m.adjusted), l.T()).At(0, 0)
			value := mat.Dot(mat.NewVecDense(len(m.x), rows[cell]), m.beta)
			_, df := m.test(l)
			if math.Abs(float64(x.Mean)-value) > 1e-5*lost*math.Sqrt(v) {
				c.fault("mean of %s %v: %.10g, want %.10g", name, x.Levels, float64(x.Mean), value)
			}
			close(fmt.Sprint("SE of ", name, x.Levels), float64(x.SE), math.Sqrt(v), 1e-5*lost)
			close(fmt.Sprint("df of ", name, x.Levels), float64(x.DF), df, 1e-4*lost)
		}
		if !whole || b.s.adjustment == "marginal" || b.s.adjustment == "sequential" {
			continue
		}
		partial := true // auto turns to marginal where a cell is empty
		for _, fs := range b.terms {
			cells := map[int]bool{}
			n := 1
			l := &level{unit: b.rowUnit, inst: b.inst}
			for i := range b.inst {
				cells[b.cell(l, fs, i)] = true
			}
			for _, f := range fs {
				n *= len(b.present[f])
			}
			partial = partial && len(cells) == n
		}
		if !partial && b.s.adjustment != "partial" {
			continue
		}
		var l []float64
		contrasts := interaction(sizes)
		for _, w := range contrasts {
			r := make([]float64, len(m.x))
			for i, v := range w {
				for j := range r {
					r[j] += v * rows[i][j]
				}
			}
			l = append(l, r...)
		}
		f, df := m.test(mat.NewDense(len(contrasts), len(m.x), l))
		for _, x := range out.Tests {
			if x.Source != name || !(f > 1e-9) || df <= 0 {
				continue
			}
			if math.Abs(df-2) < 0.05 && len(contrasts) > 1 {
				continue // 0/0 of the formulae, where digits go
			}
			close("F of "+name, float64(x.F), f, 1e-4*lost)
			close("df of "+name, float64(x.ErrorDF), df, 1e-4*lost)
		}
	}
}
