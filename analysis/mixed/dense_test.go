package mixed

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
)

// dense is the model as the textbook writes it, with n × n matrices and derivatives by
// finite differences of V: the second road.
type dense struct {
	s  *space
	y  *mat.VecDense
	x  *mat.Dense
	zz []*mat.Dense // Z Z′ of each random term
}

func newDense(m Model, s *space) *dense {
	n := len(m.Y)
	d := &dense{s: s, y: mat.NewVecDense(n, m.Y), x: mat.NewDense(n, s.p, nil)}
	for i := range n {
		for u := s.x.start[i]; u < s.x.start[i+1]; u++ {
			if j := s.x.at[s.x.col[u]]; j >= 0 {
				d.x.Set(i, j, d.x.At(i, j)+s.x.val[u])
			}
		}
	}
	for _, r := range m.Random {
		z := mat.NewDense(n, n, nil)
		for i := range n {
			for j := range n {
				z.Set(i, j, indicator(r.Factor.Level[i] == r.Factor.Level[j]))
			}
		}
		d.zz = append(d.zz, z)
	}
	return d
}

func (d *dense) v(th []float64) *mat.SymDense {
	n := d.y.Len()
	m := d.s.model
	v := mat.NewSymDense(n, nil)
	rest := th[len(m.Random):]
	for i := range n {
		for j := i; j < n; j++ {
			t := 0.0
			for k, z := range d.zz {
				t += th[k] * z.At(i, j)
			}
			switch {
			case m.Kind != Independent && m.Subject.Level[i] == m.Subject.Level[j]:
				t += d.s.structure.covariance(rest, int(m.Time[i]), int(m.Time[j]))
			case m.Kind == Independent && i == j && m.Group.N > 0:
				t += rest[m.Group.Level[i]]
			case m.Kind == Independent && i == j:
				t += rest[0]
			}
			v.SetSym(i, j, t)
		}
	}
	return v
}

// deviance is −2ℓ_R by its definition.
func (d *dense) deviance(th []float64) float64 {
	n, p := d.x.Dims()
	var ch mat.Cholesky
	if !ch.Factorize(d.v(th)) {
		return math.Inf(1)
	}
	var vx mat.Dense
	ch.SolveTo(&vx, d.x)
	var xx mat.Dense
	xx.Mul(d.x.T(), &vx)
	inv, _ := inverse(&xx)
	var b, xy mat.VecDense
	xy.MulVec(vx.T(), d.y)
	b.MulVec(inv, &xy)
	var r, vr mat.VecDense
	r.MulVec(d.x, &b)
	r.SubVec(d.y, &r)
	ch.SolveVecTo(&vr, &r)
	return float64(n-p)*math.Log(2*math.Pi) + ch.LogDet() + logDet(&xx) + mat.Dot(&r, &vr) + d.s.x.logdet
}

// by is the derivative of V by parameter i, by2 by i and j, from differences of V.
func (d *dense) by(th []float64, i int) *mat.Dense {
	h := 1e-3 * math.Max(math.Abs(th[i]), 1e-2)
	at := func(f float64) *mat.SymDense {
		t := append([]float64(nil), th...)
		t[i] += f * h
		return d.v(t)
	}
	n := d.y.Len()
	out := mat.NewDense(n, n, nil)
	a, b, c, e := at(1), at(-1), at(2), at(-2)
	for r := range n {
		for s := range n {
			out.Set(r, s, (8*(a.At(r, s)-b.At(r, s))-(c.At(r, s)-e.At(r, s)))/(12*h))
		}
	}
	return out
}

func (d *dense) by2(th []float64, i, j int) *mat.Dense {
	n := d.y.Len()
	if k := d.s.model.Kind; min(i, j) < len(d.zz) || k == Independent || k == Unstructured {
		return mat.NewDense(n, n, nil) // V is linear in them, and differences would be noise
	}
	h := 1e-3 * math.Max(math.Abs(th[j]), 1e-2)
	at := func(f float64) *mat.Dense {
		t := append([]float64(nil), th...)
		t[j] += f * h
		return d.by(t, i)
	}
	var out, two mat.Dense
	out.Sub(at(1), at(-1))
	two.Sub(at(2), at(-2))
	out.Scale(8, &out)
	out.Sub(&out, &two)
	out.Scale(1/(12*h), &out)
	return &out
}

// kenwardRoger gives Φ, Φ_A, W and Pᵢ by the formulae as printed, over free parameters.
func (d *dense) kenwardRoger(th []float64, free []int) (phi *mat.SymDense, adjusted *mat.Dense, w *mat.SymDense, ps []*mat.Dense) {
	vi, _ := inverse(mat.DenseCopyOf(d.v(th)))
	var vx, xx mat.Dense
	vx.Mul(vi, d.x)
	xx.Mul(d.x.T(), &vx)
	phi, _ = inverse(&xx)
	var t, pm mat.Dense
	t.Mul(&vx, phi)
	pm.Mul(&t, vx.T())
	pm.Scale(-1, &pm)
	pm.Add(&pm, vi)
	k := len(free)
	dv := make([]*mat.Dense, k)
	pv := make([]*mat.Dense, k)
	for a, i := range free {
		dv[a] = d.by(th, i)
		var x mat.Dense
		x.Mul(&pm, dv[a])
		pv[a] = &x
		var l, p mat.Dense
		l.Mul(vx.T(), dv[a])
		p.Mul(&l, &vx)
		ps = append(ps, &p)
	}
	info := mat.NewSymDense(k, nil)
	for a := range k {
		for b := a; b < k; b++ {
			info.SetSym(a, b, traceProduct(pv[a], pv[b])/2)
		}
	}
	w, _ = inverse(mat.DenseCopyOf(info))
	_, p := d.x.Dims()
	sum := mat.NewDense(p, p, nil)
	for a := range k {
		for b := range k {
			var l, m, q, o, u mat.Dense
			l.Mul(vx.T(), dv[a])
			m.Mul(&l, vi)
			l.Mul(&m, dv[b])
			q.Mul(&l, &vx)
			o.Mul(phi, ps[b])
			u.Mul(ps[a], &o)
			q.Sub(&q, &u)
			var r, r2 mat.Dense
			r.Mul(vx.T(), d.by2(th, free[a], free[b]))
			r2.Mul(&r, &vx)
			r2.Scale(0.25, &r2)
			q.Sub(&q, &r2)
			q.Scale(w.At(a, b), &q)
			sum.Add(sum, &q)
		}
	}
	var l, m mat.Dense
	l.Mul(phi, sum)
	m.Mul(&l, phi)
	m.Scale(2, &m)
	m.Add(&m, phi)
	return phi, &m, w, ps
}

// messy makes a random unbalanced trial with the random terms and structure of a kind.
func messy(r *rand.Rand, name string) Model {
	var m Model
	a, b, x := factor.Factor{N: 3}, factor.Factor{N: 4}, []float64{}
	block, plot, row, column := factor.Factor{N: 4}, factor.Factor{}, factor.Factor{N: 6}, factor.Factor{N: 8}
	group := factor.Factor{N: 2}
	effect := map[string]float64{}
	u := func(kind string, l int32, sd float64) float64 {
		key := fmt.Sprint(kind, l)
		if _, ok := effect[key]; !ok {
			effect[key] = sd * r.NormFloat64()
		}
		return effect[key]
	}
	plots := 3
	if name == "unstructured" || name == "antedependence" {
		plots = 6 // many parameters
	}
	for i := range 4 {
		for j := range plots {
			for k := range 4 {
				if r.IntN(8) == 0 {
					continue
				}
				a.Level, b.Level = append(a.Level, int32((j+i)%3)), append(b.Level, int32(k))
				block.Level, plot.Level = append(block.Level, int32(i)), append(plot.Level, int32(plots*i+j))
				row.Level, column.Level = append(row.Level, int32((i+2*j)%6)), append(column.Level, int32(r.IntN(8)))
				group.Level = append(group.Level, int32(k%2))
				m.Time = append(m.Time, int32(k))
				z := r.NormFloat64()
				x = append(x, z)
				n := len(m.Y)
				m.Y = append(m.Y, 20+float64(k)+0.5*z+u("block", block.Level[n], 1)+u("plot", plot.Level[n], 1)+u("row", row.Level[n], 1)+u("column", column.Level[n], .8)+r.NormFloat64())
			}
		}
	}
	plot.N = 4 * plots
	m.Factors = []factor.Factor{a, b}
	m.Parts = []Part{{Factors: []int{0}}, {Factors: []int{1}}, {Factors: []int{0, 1}}, {Value: x, At: 0}}
	switch name {
	case "split plot":
		m.Random = []Random{{Factor: block}, {Factor: plot, Unbounded: true}}
	case "crossed":
		m.Random = []Random{{Factor: row}, {Factor: column}, {Factor: plot, Unbounded: true}}
	case "variances":
		m.Random = []Random{{Factor: plot}}
		m.Group = group
	default:
		m.Random = []Random{{Factor: block}}
		m.Subject, m.Times = plot, []float64{0, 1, 3, 4.5}
		m.Kind = map[string]Kind{"autoregressive": Autoregressive, "heterogeneous": HeterogeneousAutoregressive, "symmetric": HeterogeneousSymmetric, "antedependence": Antedependence, "unstructured": Unstructured}[name]
	}
	return m
}

// TestDense compares everything with the textbook's dense matrices, for every kind of
// model and both ways of holding random terms.
func TestDense(t *testing.T) {
	for _, name := range []string{"split plot", "crossed", "variances", "autoregressive", "heterogeneous", "symmetric", "antedependence", "unstructured"} {
		fitted, seeds := 0, 8
		if name == "unstructured" || name == "antedependence" {
			seeds = 3
		}
		for seed := range uint64(seeds) {
			m := messy(rand.New(rand.NewPCG(seed, 7)), name)
			f, err := m.Fit()
			if err != nil {
				t.Logf("%s %d: %v", name, seed, err)
				continue
			}
			fitted++
			d := newDense(m, f.space)
			near(t, name+" deviance", f.Deviance, d.deviance(f.Theta), 1e-9)
			if f.Decrement > 1e-15 {
				t.Errorf("%s %d: decrement %g", name, seed, f.Decrement)
			}
			// No step in any direction raises the likelihood.
			for i, v := range f.Theta {
				if f.Bound[i] {
					continue
				}
				at := func(h float64) float64 {
					th := append([]float64(nil), f.Theta...)
					th[i] = v + h*f.SE[i]
					return d.deviance(th)
				}
				if g := (8*(at(1e-3)-at(-1e-3)) - (at(2e-3) - at(-2e-3))) / 12e-3; math.Abs(g) > 1e-5 {
					t.Errorf("%s %d: gradient by parameter %d is %g per standard error", name, seed, i, g)
				}
			}
			phi, adjusted, w, ps := d.kenwardRoger(f.Theta, f.inf.free)
			p := f.space.p
			scale := f.unit * f.unit
			for i := range p {
				for j := range p {
					s := math.Sqrt(phi.At(i, i) * phi.At(j, j))
					if got := f.inf.phi.At(i, j) * scale; math.Abs(got-phi.At(i, j)) > 1e-9*s {
						t.Fatalf("%s %d: Φ %g, want %g", name, seed, got, phi.At(i, j))
					}
					if got := f.inf.adjusted.At(i, j) * scale; math.Abs(got-adjusted.At(i, j)) > 2e-6*s {
						t.Fatalf("%s %d: Φ_A %g, want %g (Φ %g)", name, seed, got, adjusted.At(i, j), phi.At(i, j))
					}
				}
			}
			for x, i := range f.inf.free {
				near(t, name+" SE", f.SE[i], math.Sqrt(w.At(x, x)), 1e-7)
			}
			d.predictions(t, name, f)
			// F and df from the dense matrices.
			g := *f
			inf := *f.inf
			g.inf, g.unit = &inf, 1
			st := *f.state
			g.state = &st
			inf.phi, inf.p, inf.w = phi, ps, w
			inf.adjusted = mat.NewSymDense(p, nil)
			for i := range p {
				for j := i; j < p; j++ {
					inf.adjusted.SetSym(i, j, (adjusted.At(i, j)+adjusted.At(j, i))/2)
				}
			}
			beta := make([]float64, p)
			for i := range beta {
				beta[i] = f.state.beta[i] * f.unit
			}
			st.beta = beta
			for _, factors := range [][]int{{0}, {1}, {0, 1}} {
				n := 1
				for _, k := range factors {
					n *= m.Factors[k].N
				}
				one, two := f.Means(factors), g.Means(factors)
				if !one.Estimable[n-1] {
					continue
				}
				a, b := one.Test(pairwise(n)), two.Test(pairwise(n))
				near(t, name+" F", a.F, b.F, 1e-5)
				near(t, name+" df", a.ErrorDF, b.ErrorDF, 1e-5)
			}
			// The other way of holding random terms.
			h, err := m.fit(blockLimits{})
			if err != nil {
				t.Errorf("%s %d, dense levels: %v", name, seed, err)
				continue
			}
			near(t, name+" deviance with dense levels", h.Deviance, f.Deviance, 1e-10)
			for i := range f.Theta {
				if math.Abs(h.Theta[i]-f.Theta[i]) > 1e-6*(math.Abs(f.Theta[i])+1e-3) {
					t.Errorf("%s %d: parameter %d is %g with dense levels, %g without", name, seed, i, h.Theta[i], f.Theta[i])
				}
			}
			for i := range p {
				if math.Abs(h.inf.adjusted.At(i, i)-f.inf.adjusted.At(i, i)) > 1e-6*f.inf.adjusted.At(i, i) {
					t.Errorf("%s %d: Φ_A %g with dense levels, %g without (q %d)", name, seed, h.inf.adjusted.At(i, i), f.inf.adjusted.At(i, i), h.space.q)
				}
			}
			d.predictions(t, name+" with dense levels", h)
			x, y := f.Means([]int{1}).Test(pairwise(4)), h.Means([]int{1}).Test(pairwise(4))
			if x.Estimable {
				near(t, name+" F with dense levels", y.F, x.F, 1e-7)
				near(t, name+" df with dense levels", y.ErrorDF, x.ErrorDF, 1e-6)
			}
		}
		if fitted < seeds-1 {
			t.Errorf("%s: only %d of %d fitted", name, fitted, seeds)
		}
	}
}

// TestStructures: derivatives of every structure against differences.
func TestStructures(t *testing.T) {
	times := []float64{0, 1, 3, 4.5}
	for _, kind := range []Kind{HeterogeneousSymmetric, Autoregressive, HeterogeneousAutoregressive, Antedependence, Unstructured} {
		s := structure{kind: kind, times: times}
		th := make([]float64, s.parameters())
		for i := range th {
			th[i] = 1 + 0.3*float64(i)
			if !s.isVariance(i) {
				th[i] = 0.3 + 0.05*float64(i%4)
			}
		}
		move := func(i int, h float64) []float64 {
			x := append([]float64(nil), th...)
			x[i] += h
			return x
		}
		for j := range times {
			for k := range times {
				for a := range th {
					h := 1e-5
					num := (s.covariance(move(a, h), j, k) - s.covariance(move(a, -h), j, k)) / (2 * h)
					if got := s.derivative(th, a, j, k); math.Abs(got-num) > 1e-8 {
						t.Errorf("kind %d, parameter %d, times %d %d: %g, want %g", kind, a, j, k, got, num)
					}
					for b := range th {
						num := (s.derivative(move(b, h), a, j, k) - s.derivative(move(b, -h), a, j, k)) / (2 * h)
						if got := s.second(th, a, b, j, k); math.Abs(got-num) > 1e-8 {
							t.Errorf("kind %d, parameters %d %d, times %d %d: %g, want %g", kind, a, b, j, k, got, num)
						}
					}
				}
			}
		}
	}
}

func logDet(a *mat.Dense) float64 {
	d, _ := mat.LogDet(a)
	return d
}

// predictions compares residuals and random effects with RPy, RPR, σ²Z′Py and σ⁴Z′PZ.
func (d *dense) predictions(t *testing.T, name string, f *Fit) {
	t.Helper()
	n := f.N
	vi, _ := inverse(mat.DenseCopyOf(d.v(f.Theta)))
	var vx, xx, u, p mat.Dense
	vx.Mul(vi, d.x)
	xx.Mul(d.x.T(), &vx)
	phi, _ := inverse(&xx)
	u.Mul(&vx, phi)
	p.Mul(&u, vx.T())
	p.Scale(-1, &p)
	p.Add(&p, vi)
	th := append([]float64(nil), f.Theta...)
	for i := range d.zz {
		th[i] = 0
	}
	r := d.v(th)
	var py, e mat.VecDense
	py.MulVec(&p, d.y)
	e.MulVec(r, &py)
	var rp, rpr mat.Dense
	rp.Mul(r, &p)
	rpr.Mul(&rp, r)
	residual, variance, row := f.Residuals()
	for i := range n {
		scale := math.Sqrt(r.At(i, i))
		if math.Abs(residual[i]-e.AtVec(i)) > 1e-7*scale || math.Abs(variance[i]-rpr.At(i, i)) > 1e-7*scale*scale || math.Abs(row[i]-r.At(i, i)) > 1e-9*scale*scale {
			t.Fatalf("%s, row %d: residual %g (%g), want %g (%g)", name, i, residual[i], variance[i], e.AtVec(i), rpr.At(i, i))
		}
	}
	for k := range d.zz {
		value, v, class := f.Effects(k)
		level := f.space.model.Random[k].Factor.Level
		for c, l := range class {
			s, w := 0.0, 0.0
			for i := range n {
				if level[i] != l {
					continue
				}
				s += py.AtVec(i)
				for j := range n {
					if level[j] == l {
						w += p.At(i, j)
					}
				}
			}
			s2 := f.Theta[k]
			if math.Abs(value[c]-s2*s) > 1e-7*math.Sqrt(math.Abs(s2)) || math.Abs(v[c]-s2*s2*w) > 1e-7*math.Abs(s2) {
				t.Fatalf("%s, effect %d of term %d: %g (%g), want %g (%g)", name, c, k, value[c], v[c], s2*s, s2*s2*w)
			}
		}
	}
}

// TestMoments: where F is exact with ν degrees of freedom, A₁ = 2l²/ν and A₂ = 2l/ν
// (Kenward & Roger 1997, section 3), the formulae must give ν and λ = 1, at ν = 2 too.
func TestMoments(t *testing.T) {
	for l := 1.0; l < 8; l++ {
		for _, nu := range []float64{1, 2, 3, 4, 5.5, 8, 30, 1e6} {
			m, lambda := moments(l, 2*l*l/nu, 2*l/nu)
			near(t, fmt.Sprintf("m for %g over %g", l, nu), m, nu, 1e-6)
			near(t, fmt.Sprintf("λ for %g over %g", l, nu), lambda, 1, 1e-6)
		}
	}
}
