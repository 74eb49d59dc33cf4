package mixed

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// Satterthwaite makes tests and variances those of the plain covariance Φ, with degrees of
// freedom by Satterthwaite's approximation; otherwise they are by Kenward & Roger.
func (f *Fit) Satterthwaite() { f.satters = true }

// Functions are linear functions of the fixed effects, one a row.
type Functions struct {
	Value     []float64 // NaN where not estimable
	Estimable []bool

	fit *Fit
	l   [][]float64 // over kept columns; nil where not estimable
	cov *mat.Dense  // adjusted covariances
	// Made when the first difference is asked for: of the functions less the first that is
	// estimable, the plain and adjusted covariances and L ΦPᵢΦ L′ for each parameter.
	plain, adjusted *mat.Dense
	by              []*mat.Dense
}

// Difference is the variance of function i less function j, with its degrees of freedom:
// those of Contrast, at a cost that does not depend on the number of fixed columns.
func (e *Functions) Difference(i, j int) (variance, df float64) {
	if !e.Estimable[i] || !e.Estimable[j] {
		return math.NaN(), math.NaN()
	}
	if e.plain == nil {
		e.prepare()
	}
	at := func(m *mat.Dense) float64 { return m.At(i, i) + m.At(j, j) - m.At(i, j) - m.At(j, i) }
	g := make([]float64, len(e.by))
	for k, m := range e.by {
		g[k] = at(m)
	}
	return e.fit.referred(at(e.plain), at(e.adjusted), g)
}

func (e *Functions) prepare() {
	p, n := e.fit.space.p, len(e.l)
	first := slices.Index(e.Estimable, true)
	l := mat.NewDense(n, p, nil)
	for i, x := range e.l {
		for j := range x {
			l.Set(i, j, x[j]-e.l[first][j])
		}
	}
	var lphi, la mat.Dense
	lphi.Mul(l, e.fit.inf.phi)
	la.Mul(l, e.fit.inf.adjusted)
	e.plain, e.adjusted = new(mat.Dense), new(mat.Dense)
	e.plain.Mul(&lphi, l.T())
	e.adjusted.Mul(&la, l.T())
	for _, pi := range e.fit.inf.p {
		var t, m mat.Dense
		t.Mul(&lphi, pi)
		m.Mul(&t, lphi.T())
		e.by = append(e.by, &m)
	}
}

func (f *Fit) functions(weights [][]float64, shift []float64) *Functions {
	out := &Functions{fit: f}
	p := f.space.p
	for i, w := range weights {
		l, ok := f.space.x.reduce(w)
		v := math.NaN()
		if ok {
			v = 0
			for j, x := range l {
				v += x * f.state.beta[j]
			}
			v = v*f.unit + shift[i]*f.centre
		} else {
			l = nil
		}
		out.l = append(out.l, l)
		out.Value = append(out.Value, v)
		out.Estimable = append(out.Estimable, ok)
	}
	n := len(weights)
	lm := mat.NewDense(max(n, 1), p, nil)
	for i, l := range out.l {
		if l != nil {
			lm.SetRow(i, l)
		}
	}
	var t, c mat.Dense
	if f.satters {
		t.Mul(lm, f.inf.phi)
	} else {
		t.Mul(lm, f.inf.adjusted)
	}
	c.Mul(&t, lm.T())
	c.Scale(f.unit*f.unit, &c)
	out.cov = &c
	return out
}

// Cov is the covariance of functions i and j, NaN where one of them is not estimable.
func (e *Functions) Cov(i, j int) float64 {
	if !e.Estimable[i] || !e.Estimable[j] {
		return math.NaN()
	}
	return e.cov.At(i, j)
}

// combine gives Σ wᵢ·functionᵢ over kept columns; false where it is not estimable.
func (e *Functions) combine(w []float64) ([]float64, bool) {
	out := make([]float64, e.fit.space.p)
	for i, x := range w {
		if x == 0 {
			continue
		}
		if e.l[i] == nil {
			return nil, false
		}
		for j, v := range e.l[i] {
			out[j] += x * v
		}
	}
	return out, true
}

// Contrast is Σ wᵢ·functionᵢ with its variance and the degrees of freedom of the t
// distribution it is referred to. It is NaN where a function in it is not estimable.
func (e *Functions) Contrast(w []float64) (value, variance, df float64) {
	l, ok := e.combine(w)
	if !ok {
		return math.NaN(), math.NaN(), math.NaN()
	}
	value = 0
	for i, x := range w {
		if x != 0 {
			value += x * e.Value[i]
		}
	}
	variance, df = e.fit.single(l)
	return value, variance, df
}

// single gives the variance of one function and its degrees of freedom: 2(l′Φl)² over the
// variance of l′Φl, to which the formula of Kenward & Roger comes down for one function.
func (f *Fit) single(l []float64) (variance, df float64) {
	p := f.space.p
	lv := mat.NewVecDense(p, l)
	var v, av mat.VecDense
	v.MulVec(f.inf.phi, lv)
	av.MulVec(f.inf.adjusted, lv)
	g := make([]float64, len(f.inf.p))
	for i, pi := range f.inf.p {
		g[i] = quadratic(pi, v.RawVector().Data)
	}
	return f.referred(mat.Dot(lv, &v), mat.Dot(lv, &av), g)
}

// referred gives the variance of a function in the unit of y and its degrees of freedom, from
// the plain and the adjusted variance and the derivatives of the former, with sign, by the
// parameters.
func (f *Fit) referred(raw, adjusted float64, g []float64) (variance, df float64) {
	variance = adjusted
	if f.satters {
		variance = raw
	}
	spread := 0.0
	for i, a := range g {
		for j, b := range g {
			spread += f.inf.w.At(i, j) * a * b
		}
	}
	return variance * f.unit * f.unit, 2 * raw * raw / spread
}

func quadratic(a *mat.Dense, v []float64) float64 {
	s := 0.0
	for i, x := range v {
		if x == 0 {
			continue
		}
		t := 0.0
		for j, y := range a.RawRowView(i) {
			t += y * v[j]
		}
		s += x * t
	}
	return s
}

// Test is a test of fixed effects: F with its scale λ taken in, referred to F on DF and
// ErrorDF degrees of freedom.
type Test struct {
	DF      int
	ErrorDF float64
	F       float64
	// Scale is λ of Kenward & Roger, 1 by Satterthwaite.
	Scale float64
	// Estimable is false where a contrast asked for is no function of what the rows tell.
	Estimable bool
}

// Test tests that contrasts of the functions, a list of weights each, are all zero. Those
// that depend on others add nothing.
func (e *Functions) Test(contrasts [][]float64) Test {
	var ls [][]float64
	for _, w := range contrasts {
		l, ok := e.combine(w)
		if !ok {
			return Test{F: math.NaN(), ErrorDF: math.NaN(), Scale: math.NaN()}
		}
		ls = append(ls, l)
	}
	return e.fit.test(ls)
}

// test is the test that rows l of kept columns are zero.
func (f *Fit) test(ls [][]float64) Test {
	ls = f.independent(ls)
	k := len(ls)
	if k == 0 {
		return Test{F: math.NaN(), ErrorDF: math.NaN(), Scale: math.NaN(), Estimable: true}
	}
	p := f.space.p
	l := mat.NewDense(k, p, nil)
	for i := range ls {
		l.SetRow(i, ls[i])
	}
	var lphi, m mat.Dense
	lphi.Mul(l, f.inf.phi)
	m.Mul(&lphi, l.T())
	value := mat.NewVecDense(k, nil)
	value.MulVec(l, mat.NewVecDense(p, f.state.beta))
	out := Test{DF: k, Scale: 1, Estimable: true}
	if f.satters {
		return f.satterthwaite(out, l, &m, value)
	}
	var la, adj mat.Dense
	la.Mul(l, f.inf.adjusted)
	adj.Mul(&la, l.T())
	f0 := form(&adj, value) / float64(k)
	// M⁻¹LΦPᵢΦL′ for each parameter.
	inv, ok := inverse(&m)
	if !ok {
		return Test{DF: k, F: math.NaN(), ErrorDF: math.NaN(), Scale: math.NaN()}
	}
	var ys []*mat.Dense
	for _, pi := range f.inf.p {
		var t, y, my mat.Dense
		t.Mul(&lphi, pi)
		y.Mul(&t, lphi.T())
		my.Mul(inv, &y)
		ys = append(ys, &my)
	}
	a1, a2 := 0.0, 0.0
	for i := range ys {
		for j := range ys {
			w := f.inf.w.At(i, j)
			a1 += w * mat.Trace(ys[i]) * mat.Trace(ys[j])
			a2 += w * traceProduct(ys[i], ys[j])
		}
	}
	out.ErrorDF, out.Scale = moments(float64(k), a1, a2)
	out.F = out.Scale * f0
	return out
}

// moments gives m and λ of Kenward & Roger (1997), section 3, from A₁ and A₂ for a test of
// l contrasts: E* and V* match those of F in the cases where it is exact. For one contrast
// they come down to m = 2/A₂ and λ = 1. Near two degrees of freedom, where F has no mean,
// numerators and denominators vanish together and their ratio is taken as the 1 that it is
// where F is exact.
func moments(l, a1, a2 float64) (m, lambda float64) {
	if l == 1 {
		return 2 / a2, 1
	}
	b := (a1 + 6*a2) / (2 * l)
	g := ((l+1)*a1 - (l+4)*a2) / ((l + 2) * a2)
	d := 3*l + 2*(1-g)
	c1, c2, c3 := g/d, (l-g)/d, (l+2-g)/d
	e := 1 - a2/l // 1/E*
	// ρ = V*/(2E*²), V* = (2/l)(1 + c₁B)/((1 − c₂B)²(1 − c₃B)).
	r := ratio(e, 1-c2*b)
	rho := r * r * (1 + c1*b) / (l * (1 - c3*b))
	m = 4 + (l+2)/(l*rho-1)
	return m, ratio(m*e, m-2)
}

func ratio(a, b float64) float64 {
	if math.Abs(a) < 1e-9 && math.Abs(b) < 1e-9 {
		return 1
	}
	return a / b
}

// satterthwaite refers F with the plain covariance to the degrees of freedom that its
// independent parts have together (Fai & Cornelius, Journal of Statistical Computation and
// Simulation 54 (1996) 363-378, from memory).
func (f *Fit) satterthwaite(out Test, l, m *mat.Dense, value *mat.VecDense) Test {
	k := out.DF
	s := mat.NewSymDense(k, nil)
	for i := range k {
		for j := i; j < k; j++ {
			s.SetSym(i, j, (m.At(i, j)+m.At(j, i))/2)
		}
	}
	var e mat.EigenSym
	if !e.Factorize(s, true) {
		out.F, out.ErrorDF = math.NaN(), math.NaN()
		return out
	}
	var v, rows mat.Dense
	e.VectorsTo(&v)
	rows.Mul(v.T(), l)
	sum, f0 := 0.0, 0.0
	for i, d := range e.Values(nil) {
		_, df := f.single(mat.Row(nil, i, &rows))
		if df > 2 {
			sum += df / (df - 2)
		}
		t := 0.0
		for j := range k {
			t += v.At(j, i) * value.AtVec(j)
		}
		f0 += t * t / d
	}
	out.F = f0 / float64(k)
	out.ErrorDF = 2 * sum / (sum - float64(k))
	if k == 1 {
		_, out.ErrorDF = f.single(mat.Row(nil, 0, l))
	}
	if sum <= float64(k) && k > 1 {
		out.ErrorDF = 0
	}
	return out
}

// independent drops rows that depend on those before them.
func (f *Fit) independent(ls [][]float64) [][]float64 {
	var out, basis [][]float64
	for _, l := range ls {
		r := append([]float64(nil), l...)
		before := norm(r)
		for range 2 {
			for _, b := range basis {
				d := 0.0
				for j, x := range b {
					d += x * r[j]
				}
				for j, x := range b {
					r[j] -= d * x
				}
			}
		}
		if n := norm(r); n > 1e-9*before && n > 0 {
			for j := range r {
				r[j] /= n
			}
			basis, out = append(basis, r), append(out, l)
		}
	}
	return out
}

func norm(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x * x
	}
	return math.Sqrt(s)
}

// form is v′A⁻¹v, NaN where A is not positive definite.
func form(a *mat.Dense, v *mat.VecDense) float64 {
	inv, ok := inverse(a)
	if !ok {
		return math.NaN()
	}
	var t mat.VecDense
	t.MulVec(inv, v)
	return mat.Dot(v, &t)
}

// inverse is that of a symmetric positive definite matrix.
func inverse(a *mat.Dense) (*mat.SymDense, bool) {
	n, _ := a.Dims()
	s := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			s.SetSym(i, j, (a.At(i, j)+a.At(j, i))/2)
		}
	}
	var ch mat.Cholesky
	if !ch.Factorize(s) {
		return nil, false
	}
	out := mat.NewSymDense(n, nil)
	if err := ch.InverseTo(out); err != nil {
		if _, conditioned := err.(mat.Condition); !conditioned {
			return nil, false
		}
	}
	return out, true
}
