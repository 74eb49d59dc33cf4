package mixed

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// state is a model at given parameters.
type state struct {
	*space
	th       []float64
	deviance float64 // −2ℓ_R

	lower  [][]float64 // L of D = LL′, by pattern
	solved [][]float64 // L⁻¹[B y], by block
	m0     *mat.Dense  // [B y]′D⁻¹[B y], (p+q+1)²

	scale []float64     // √|σ²| of each dense level
	sign  []float64     // ±1
	order []int         // dense levels, those of positive components first
	signs int           // how many of them
	h     *mat.TriDense // L of H = J + S(U′D⁻¹U)S = LJL′, in that order; nil without dense levels
	wood  *mat.Dense    // N = S H⁻¹ S, q × q
	hDiag []float64     // the diagonal of H⁻¹
	phi   *mat.SymDense
	beta  []float64
	omega *mat.Dense // Ω, (p+q)²
	kx    *mat.Dense // V⁻¹X = D⁻¹B·kx
	k     []float64  // Py = D⁻¹[B y]·k

	forced [][][]float64 // F, by pattern and parameter of D
	trace  [][]float64   // their traces
}

// at evaluates −2ℓ_R; false where V is not positive definite.
func (s *space) at(th []float64) (*state, bool) {
	st := &state{space: s, th: append([]float64(nil), th...)}
	logdet := 0.0
	logdets := make([]float64, len(s.patterns))
	st.lower = make([][]float64, len(s.patterns))
	for i := range s.patterns {
		d := s.dee(&s.patterns[i], th)
		if !cholesky(d, s.patterns[i].n) {
			return nil, false
		}
		for a := range s.patterns[i].n {
			logdets[i] += 2 * math.Log(d[a*s.patterns[i].n+a])
		}
		st.lower[i] = d
	}
	size := s.p + s.q + 1
	st.m0 = mat.NewDense(size, size, nil)
	st.solved = make([][]float64, len(s.blocks))
	var room []float64
	for i := range s.blocks {
		b := &s.blocks[i]
		n, width := len(b.rows), len(b.cols)+1
		c := append([]float64(nil), b.b...)
		forward(st.lower[b.pattern], n, c, width)
		st.solved[i] = c
		logdet += logdets[b.pattern]
		if cap(room) < width*width {
			room = make([]float64, width*width)
		}
		room = room[:width*width]
		gram(room, c, n, width)
		s.scatter(st.m0, b, room, true)
	}
	mirror(st.m0)
	p, q := s.p, s.q
	// The response goes with X.
	xy := mat.NewDense(p+1, p+1, nil)
	for i := range p + 1 {
		for j := range p + 1 {
			xy.Set(i, j, st.m0.At(st.of(i), st.of(j)))
		}
	}
	if q > 0 {
		ok, more := st.factorDense(xy)
		if !ok {
			return nil, false
		}
		logdet += more
	}
	xx := mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			xx.SetSym(i, j, xy.At(i, j))
		}
	}
	var ch mat.Cholesky
	if !ch.Factorize(xx) {
		return nil, false
	}
	st.phi = mat.NewSymDense(p, nil)
	if err := ch.InverseTo(st.phi); err != nil {
		if _, conditioned := err.(mat.Condition); !conditioned {
			return nil, false
		}
	}
	rhs := mat.NewVecDense(p, nil)
	for i := range p {
		rhs.SetVec(i, xy.At(i, p))
	}
	beta := mat.NewVecDense(p, nil)
	beta.MulVec(st.phi, rhs)
	st.beta = beta.RawVector().Data
	rss := xy.At(p, p) - mat.Dot(beta, rhs)
	st.deviance = float64(s.n-p)*math.Log(2*math.Pi) + logdet + ch.LogDet() + rss
	return st, !math.IsNaN(st.deviance) && rss > 0
}

// of gives the place of column i of [X y] in m0.
func (s *space) of(i int) int {
	if i == s.p {
		return s.p + s.q
	}
	return i
}

// scatter adds a block's matrix over its columns, the response last, to a whole one; with
// upper alone its upper triangle.
func (s *space) scatter(to *mat.Dense, b *block, m []float64, upper bool) {
	raw := to.RawMatrix()
	width := len(b.cols) + 1
	last := int32(s.p + s.q)
	for i := range width {
		ci := last
		if i < width-1 {
			ci = b.cols[i]
		}
		row := raw.Data[int(ci)*raw.Stride:]
		j := 0
		if upper {
			j = i
		}
		for ; j < width-1; j++ {
			row[b.cols[j]] += m[i*width+j]
		}
		row[last] += m[i*width+width-1]
	}
}

// factorDense takes the dense random levels out of xy and returns log|V| − log|D|.
//
// With S = √|G| and J the signs of G, V⁻¹ = D⁻¹ − D⁻¹US H⁻¹ SU′D⁻¹ where H = J + S(U′D⁻¹U)S.
// With the positive levels first, H = L J L′ exists and V is positive definite exactly
// when both triangles of L can be found (the inertia of H is then that of J).
func (st *state) factorDense(xy *mat.Dense) (bool, float64) {
	p, q := st.p, st.q
	st.scale, st.sign = make([]float64, q), make([]float64, q)
	st.order, st.signs = make([]int, 0, q), 0
	for _, want := range []bool{true, false} {
		for o, k := range st.outer {
			if (st.th[k] >= 0) != want {
				continue
			}
			for l := st.from[o]; l < st.from[o+1]; l++ {
				st.order = append(st.order, l)
				st.scale[l], st.sign[l] = math.Sqrt(math.Abs(st.th[k])), -1
				if want {
					st.sign[l] = 1
					st.signs++
				}
			}
		}
	}
	h := mat.NewDense(q, q, nil) // in that order
	for i, a := range st.order {
		row, from := h.RawRowView(i), st.m0.RawRowView(p + a)[p:]
		for j, b := range st.order {
			row[j] = st.scale[a] * from[b] * st.scale[b]
		}
		row[i] += st.sign[a]
	}
	st.h = mat.NewTriDense(q, mat.Lower, nil)
	logdet := 0.0
	positive := st.signs
	if positive > 0 && !part(st.h, h, 0, positive, 1, &logdet) {
		return false, 0
	}
	if positive < q {
		if positive > 0 {
			// L₂₁ = H₂₁ L₁⁻ᵀ.
			l21 := mat.DenseCopyOf(h.Slice(positive, q, 0, positive))
			t := st.h.RawTriangular()
			t.N = positive
			blas64.Trsm(blas.Right, blas.Trans, 1, t, l21.RawMatrix())
			for i := range q - positive {
				for j := range positive {
					st.h.SetTri(positive+i, j, l21.At(i, j))
				}
			}
			var ll mat.Dense
			ll.Mul(l21, l21.T())
			for i := range q - positive {
				for j := range q - positive {
					h.Set(positive+i, positive+j, h.At(positive+i, positive+j)-ll.At(i, j))
				}
			}
		}
		if !part(st.h, h, positive, q, -1, &logdet) {
			return false, 0
		}
	}
	// [X y]′V⁻¹[X y] = [X y]′D⁻¹[X y] − Z′JZ with Z = L⁻¹SU′D⁻¹[X y].
	z := mat.NewDense(q, p+1, nil)
	for i, a := range st.order {
		for j := range p + 1 {
			z.Set(i, j, st.scale[a]*st.m0.At(p+a, st.of(j)))
		}
	}
	blas64.Trsm(blas.Left, blas.NoTrans, 1, st.h.RawTriangular(), z.RawMatrix())
	jz := mat.DenseCopyOf(z)
	for i := positive; i < q; i++ {
		row := jz.RawRowView(i)
		for j := range row {
			row[j] = -row[j]
		}
	}
	var out mat.Dense
	out.Mul(z.T(), jz)
	xy.Sub(xy, &out)
	return true, logdet
}

// invertDense makes N = S H⁻¹ S.
func (st *state) invertDense() {
	q := st.q
	hi := mat.NewDense(q, q, nil)
	if st.signs == q {
		var ch mat.Cholesky
		ch.SetFromU(triTranspose(st.h))
		inv := mat.NewSymDense(q, nil)
		_ = ch.InverseTo(inv) // the error tells of the condition number alone
		for i := range q {
			for j := range q {
				hi.Set(i, j, inv.At(i, j))
			}
		}
	} else { // H⁻¹ = L⁻ᵀ J L⁻¹
		inv := mat.NewTriDense(q, mat.Lower, nil)
		_ = inv.InverseTri(st.h)
		full, signed := mat.DenseCopyOf(inv), mat.DenseCopyOf(inv)
		for i := st.signs; i < q; i++ {
			row := signed.RawRowView(i)
			for j := range row {
				row[j] = -row[j]
			}
		}
		hi.Mul(full.T(), signed)
	}
	st.wood = mat.NewDense(q, q, nil)
	st.hDiag = make([]float64, q)
	for i, a := range st.order {
		st.hDiag[a] = hi.At(i, i)
		for j, b := range st.order {
			st.wood.Set(a, b, st.scale[a]*hi.At(i, j)*st.scale[b])
		}
	}
}

func triTranspose(l *mat.TriDense) *mat.TriDense {
	n, _ := l.Triangle()
	u := mat.NewTriDense(n, mat.Upper, nil)
	for i := range n {
		for j := range i + 1 {
			u.SetTri(j, i, l.At(i, j))
		}
	}
	return u
}

// part factorizes sign·H of levels from to to into L, adding 2 Σ log of its diagonal.
func part(l *mat.TriDense, h *mat.Dense, from, to int, sign float64, logdet *float64) bool {
	n := to - from
	sym := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			sym.SetSym(i, j, sign*h.At(from+i, from+j))
		}
	}
	var ch mat.Cholesky
	if !ch.Factorize(sym) {
		return false
	}
	*logdet += ch.LogDet()
	var t mat.TriDense
	ch.LTo(&t)
	for i := range n {
		for j := range i + 1 {
			l.SetTri(from+i, from+j, t.At(i, j))
		}
	}
	return true
}

// prepare makes Ω, kx and k.
func (st *state) prepare() {
	if st.omega != nil {
		return
	}
	p, q := st.p, st.q
	st.kx = mat.NewDense(p+q, p, nil)
	for i := range p {
		st.kx.Set(i, i, 1)
	}
	st.k = make([]float64, p+q+1)
	for i, b := range st.beta {
		st.k[i] = -b
	}
	st.k[p+q] = 1
	if q > 0 {
		st.invertDense()
		ux := st.m0.Slice(p, p+q, 0, p)
		low := st.kx.Slice(p, p+q, 0, p).(*mat.Dense)
		low.Mul(st.wood, ux)
		low.Scale(-1, low)
		u := mat.NewVecDense(q, nil)
		for i := range q {
			v := st.m0.At(p+i, p+q)
			for j := range p {
				v -= st.m0.At(p+i, j) * st.beta[j]
			}
			u.SetVec(i, v)
		}
		var nu mat.VecDense
		nu.MulVec(st.wood, u)
		for i := range q {
			st.k[p+i] = -nu.AtVec(i)
		}
	}
	var kp mat.Dense
	kp.Mul(st.kx, st.phi)
	st.omega = mat.NewDense(p+q, p+q, nil)
	st.omega.Mul(&kp, st.kx.T())
	for i := range q {
		for j := range q {
			st.omega.Set(p+i, p+j, st.omega.At(p+i, p+j)+st.wood.At(i, j))
		}
	}
}

// forces makes, for each pattern and each parameter of D, F = L⁻¹(∂D)L⁻ᵀ and its trace.
func (st *state) forces() {
	if st.forced != nil {
		return
	}
	params := st.innerParams()
	for i := range st.patterns {
		p := &st.patterns[i]
		var fs [][]float64
		var tr []float64
		for _, k := range params {
			f := st.deeBy(p, st.th, k)
			sandwich(st.lower[i], p.n, f)
			t := 0.0
			for a := range p.n {
				t += f[a*p.n+a]
			}
			fs, tr = append(fs, f), append(tr, t)
		}
		st.forced, st.trace = append(st.forced, fs), append(st.trace, tr)
	}
}

// slopes gives the gradient of −2ℓ_R and the average information, the mean of observed and
// expected second derivatives of −2ℓ_R (Gilmour, Thompson & Cullis, Biometrics 51 (1995)
// 1440-1450): tr(PVᵢ) − y′PVᵢPy and y′PVᵢPVⱼPy.
func (st *state) slopes() (gradient []float64, information *mat.SymDense) {
	st.prepare()
	st.forces()
	p, q := st.p, st.q
	params := st.innerParams()
	gradient = make([]float64, st.params)
	information = mat.NewSymDense(st.params, nil)
	within := make([]float64, len(params)*len(params)) // (Vᵢe)′D⁻¹(Vⱼe)
	g := mat.NewDense(st.params, p+q, nil)             // B′D⁻¹(Vᵢe)
	for bi := range st.blocks {
		b := &st.blocks[bi]
		n, width := len(b.rows), len(b.cols)+1
		c := st.solved[bi]
		e := st.along(b, c)
		cov := st.spread(b, c)
		fe := make([][]float64, len(params))
		for i, k := range params {
			f := st.forced[b.pattern][i]
			v := make([]float64, n)
			tr, quad := 0.0, 0.0
			for a := range n {
				row := f[a*n : a*n+n]
				s := 0.0
				for d, x := range row {
					s += x * e[d]
					tr += x * cov[a*n+d]
				}
				v[a] = s
				quad += s * e[a]
			}
			fe[i] = v
			gradient[k] += st.trace[b.pattern][i] - tr - quad
			gi := g.RawRowView(k)
			for a := range n {
				for j, col := range b.cols {
					gi[col] += v[a] * c[a*width+j]
				}
			}
		}
		for i := range params {
			for j := range i + 1 {
				s := 0.0
				for a := range n {
					s += fe[i][a] * fe[j][a]
				}
				within[i*len(params)+j] += s
			}
		}
	}
	h := make([]float64, q) // U′e
	for l := range q {
		for j := range p + q + 1 {
			h[l] += st.m0.At(p+l, j) * st.k[j]
		}
	}
	if q > 0 {
		diag := st.upu()
		for o, k := range st.outer {
			gk := g.RawRowView(k)
			for l := st.from[o]; l < st.from[o+1]; l++ {
				gradient[k] += diag[l] - h[l]*h[l]
				row := st.m0.RawRowView(p + l)
				for j := range p + q {
					gk[j] += row[j] * h[l]
				}
			}
		}
	}
	var adjusted mat.Dense
	adjusted.Mul(g, st.omega)
	inner := map[int]int{}
	for i, k := range params {
		inner[k] = i
	}
	isOuter := map[int]int{}
	for o, k := range st.outer {
		isOuter[k] = o
	}
	for i := range st.params {
		for j := range i + 1 {
			v := 0.0
			a, inI := inner[i]
			b, inJ := inner[j]
			switch {
			case inI && inJ:
				if a < b {
					a, b = b, a
				}
				v = within[a*len(params)+b]
			case inI:
				o := isOuter[j]
				for l := st.from[o]; l < st.from[o+1]; l++ {
					v += g.At(i, p+l) * h[l]
				}
			default:
				o := isOuter[i]
				for l := st.from[o]; l < st.from[o+1]; l++ {
					v += g.At(j, p+l) * h[l]
				}
			}
			for c := range p + q {
				v -= adjusted.At(i, c) * g.At(j, c)
			}
			information.SetSym(i, j, v)
		}
	}
	return gradient, information
}

// spread is C Ω C′ of a block, C = L⁻¹B.
func (st *state) spread(b *block, c []float64) []float64 {
	n, width := len(b.rows), len(b.cols)+1
	m := width - 1
	co := make([]float64, n*m)
	raw := st.omega.RawMatrix()
	for a := range n {
		out := co[a*m : a*m+m]
		for j, cj := range b.cols {
			x := c[a*width+j]
			if x == 0 {
				continue
			}
			row := raw.Data[int(cj)*raw.Stride:]
			for k, ck := range b.cols {
				out[k] += x * row[ck]
			}
		}
	}
	g := make([]float64, n*n)
	for a := range n {
		for d := range a + 1 {
			s := 0.0
			for k := range m {
				s += co[a*m+k] * c[d*width+k]
			}
			g[a*n+d], g[d*n+a] = s, s
		}
	}
	return g
}

// upu is the diagonal of U′PU.
func (st *state) upu() []float64 {
	p, q := st.p, st.q
	out := make([]float64, q)
	// U′V⁻¹X, q × p.
	var a, ax mat.Dense
	a.Mul(st.m0.Slice(p, p+q, 0, p+q), st.kx)
	ax.Mul(&a, st.phi)
	for l := range q {
		s2 := st.scale[l] * st.scale[l]
		if t := st.m0.At(p+l, p+l); s2*t > 1e-3 {
			// S U′V⁻¹U S = J − J H⁻¹ J.
			out[l] = (st.sign[l] - st.hDiag[l]) / s2
		} else {
			row := st.m0.RawRowView(p + l)[p : p+q]
			out[l] = t
			for i := range q {
				if row[i] == 0 {
					continue
				}
				w := st.wood.RawRowView(i)
				s := 0.0
				for j := range q {
					s += w[j] * row[j]
				}
				out[l] -= row[i] * s
			}
		}
		for j := range p {
			out[l] -= ax.At(l, j) * a.At(l, j)
		}
	}
	return out
}

// cholesky factorizes a symmetric n × n matrix in place, L in its lower triangle.
func cholesky(a []float64, n int) bool {
	for j := range n {
		rj := a[j*n : j*n+j+1]
		s := rj[j]
		for k := range j {
			s -= rj[k] * rj[k]
		}
		if !(s > 1e-13*math.Abs(rj[j])) {
			return false
		}
		d := math.Sqrt(s)
		rj[j] = d
		for i := j + 1; i < n; i++ {
			ri := a[i*n : i*n+j+1]
			s := ri[j]
			for k := range j {
				s -= ri[k] * rj[k]
			}
			ri[j] = s / d
		}
	}
	return true
}

// forward sets c, n × width, to L⁻¹c.
func forward(l []float64, n int, c []float64, width int) {
	for i := range n {
		ci := c[i*width : i*width+width]
		for k := range i {
			f := l[i*n+k]
			if f == 0 {
				continue
			}
			ck := c[k*width : k*width+width]
			for j, v := range ck {
				ci[j] -= f * v
			}
		}
		d := 1 / l[i*n+i]
		for j := range ci {
			ci[j] *= d
		}
	}
}

// sandwich sets the symmetric n × n matrix f to L⁻¹ f L⁻ᵀ.
func sandwich(l []float64, n int, f []float64) {
	forward(l, n, f, n)
	transpose(f, n)
	forward(l, n, f, n)
}

func transpose(f []float64, n int) {
	for i := range n {
		for j := range i {
			f[i*n+j], f[j*n+i] = f[j*n+i], f[i*n+j]
		}
	}
}

// gram sets the upper triangle of m to c′c.
func gram(m, c []float64, n, width int) {
	clear(m)
	for a := range n {
		row := c[a*width : a*width+width]
		for i, x := range row {
			if x == 0 {
				continue
			}
			mi := m[i*width : i*width+width]
			for j := i; j < width; j++ {
				mi[j] += x * row[j]
			}
		}
	}
}

func mirror(m *mat.Dense) {
	raw := m.RawMatrix()
	for i := range raw.Rows {
		for j := range i {
			raw.Data[i*raw.Stride+j] = raw.Data[j*raw.Stride+i]
		}
	}
}
