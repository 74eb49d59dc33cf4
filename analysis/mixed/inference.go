package mixed

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// inference is what tests and limits of fixed effects are made of, at the estimates:
// the matrices of Kenward & Roger (1997), with parameters at a bound left out.
//
//	Pᵢ  = −X′V⁻¹VᵢV⁻¹X (here without the sign)
//	Qᵢⱼ = X′V⁻¹VᵢV⁻¹VⱼV⁻¹X,  Rᵢⱼ = X′V⁻¹VᵢⱼV⁻¹X
//	W   = inverse of the expected information ½ tr(PVᵢPVⱼ)
//	Φ_A = Φ + 2Φ{Σ Wᵢⱼ(Qᵢⱼ − PᵢΦPⱼ − ¼Rᵢⱼ)}Φ
type inference struct {
	free     []int // parameters that are not at a bound
	w        *mat.SymDense
	p        []*mat.Dense
	phi      *mat.SymDense
	adjusted *mat.SymDense
	// condition of the information scaled to a unit diagonal: its smallest eigenvalue.
	smallest float64
}

// infer makes the matrices; false where the information about the parameters is singular.
func (st *state) infer(free []int) (*inference, bool) {
	st.prepare()
	st.forces()
	p, q := st.p, st.q
	params := st.innerParams()
	inner := map[int]int{}
	for i, k := range params {
		inner[k] = i
	}
	outer := map[int]int{}
	for o, k := range st.outer {
		outer[k] = o
	}
	var in []int // of params, those free
	for i, k := range params {
		if slices.Contains(free, k) {
			in = append(in, i)
		}
	}
	// B′D⁻¹VᵢD⁻¹B, and what of the traces lies within blocks.
	m := map[int]*mat.Dense{}
	for _, i := range in {
		m[i] = mat.NewDense(p+q+1, p+q+1, nil)
	}
	within := map[[2]int]float64{}
	count := make([]int, len(st.patterns))
	var room []float64
	for bi := range st.blocks {
		b := &st.blocks[bi]
		n, width := len(b.rows), len(b.cols)+1
		c := st.solved[bi]
		count[b.pattern]++
		g := st.spread(b, c)
		fg := make([]float64, n*n)
		if cap(room) < width*width {
			room = make([]float64, width*width)
		}
		for x, i := range in {
			f := st.forced[b.pattern][i]
			multiply(fg, f, g, n, n)
			for _, j := range in[:x+1] {
				s := 0.0
				fj := st.forced[b.pattern][j]
				for a, v := range fg {
					s += v * fj[a] // F symmetric: tr(FᵢGFⱼ), and that of its transpose
				}
				within[[2]int{i, j}] -= 2 * s
			}
			fc := make([]float64, n*width)
			multiply(fc, f, c, n, width)
			room = room[:width*width]
			cross(room, c, fc, n, width)
			st.scatter(m[i], b, room, false)
		}
	}
	for k := range st.patterns {
		n := st.patterns[k].n
		for x, i := range in {
			for _, j := range in[:x+1] {
				s := 0.0
				fi, fj := st.forced[k][i], st.forced[k][j]
				for a := range n * n {
					s += fi[a] * fj[a]
				}
				within[[2]int{i, j}] += float64(count[k]) * s
			}
		}
	}
	// With dense levels, V⁻¹U = D⁻¹B·[0 E]′, E = I − NU′D⁻¹U, and PU = D⁻¹B·K where
	// K = [0 E]′ − kx Φ X′V⁻¹U.
	var e, k, upu, uvu, avx mat.Dense
	me := map[int]*mat.Dense{} // MᵢE, of the columns of U
	if q > 0 {
		t := st.m0.Slice(p, p+q, p, p+q)
		mu := st.m0.Slice(0, p+q, p, p+q)
		avx.Mul(mu.T(), st.kx) // U′V⁻¹X
		st.levels(&e, &uvu, t)
		var pa, low mat.Dense
		pa.Mul(st.phi, avx.T())
		low.Mul(st.kx, &pa)
		k = *mat.NewDense(p+q, q, nil)
		k.Sub(&k, &low)
		bottom := k.Slice(p, p+q, 0, q).(*mat.Dense)
		bottom.Add(bottom, &e)
		var ap mat.Dense
		ap.Mul(&avx, &pa)
		upu.Sub(&uvu, &ap)
		for _, i := range in {
			x := mat.NewDense(p+q, q, nil)
			x.Mul(m[i].Slice(0, p+q, p, p+q), &e)
			me[i] = x
		}
	}
	// ΩMᵢ = kx Φ kx′Mᵢ + [0; NMᵢ].
	om := map[int]*mat.Dense{}
	mx := map[int]*mat.Dense{} // Mᵢ kx
	for _, i := range in {
		mi := m[i].Slice(0, p+q, 0, p+q)
		r, x := mat.NewDense(p+q, p, nil), mat.NewDense(p+q, p+q, nil)
		r.Mul(mi, st.kx)
		var t mat.Dense
		t.Mul(st.kx, st.phi)
		x.Mul(&t, r.T())
		if q > 0 {
			bottom := x.Slice(p, p+q, 0, p+q).(*mat.Dense)
			var nm mat.Dense
			nm.Mul(st.wood, m[i].Slice(p, p+q, 0, p+q))
			bottom.Add(bottom, &nm)
		}
		mx[i], om[i] = r, x
	}
	span := func(o int) (int, int) { return st.from[o], st.from[o+1] }
	info := mat.NewSymDense(len(free), nil)
	kmk := map[int][]float64{} // the diagonal of K′MᵢK
	if q > 0 {
		var pa mat.Dense
		pa.Mul(st.phi, avx.T())
		for _, i := range in {
			var mk, low mat.Dense
			low.Mul(mx[i], &pa)
			mk.Sub(me[i], &low)
			d := make([]float64, q)
			for r := range p + q {
				x, y := k.RawRowView(r), mk.RawRowView(r)
				for l := range q {
					d[l] += x[l] * y[l]
				}
			}
			kmk[i] = d
		}
	}
	for x, a := range free {
		for y, b := range free[:x+1] {
			ia, inA := inner[a]
			ib, inB := inner[b]
			v := 0.0
			switch {
			case inA && inB:
				hi, lo := max(ia, ib), min(ia, ib)
				v = within[[2]int{hi, lo}] + traceProduct(om[ia], om[ib])
			case inA != inB:
				i, o := ia, b
				if inB {
					i, o = ib, a
				}
				f, t := span(outer[o])
				for l := f; l < t; l++ {
					v += kmk[i][l]
				}
			default:
				fa, ta := span(outer[a])
				fb, tb := span(outer[b])
				for i := fa; i < ta; i++ {
					for j := fb; j < tb; j++ {
						v += upu.At(i, j) * upu.At(i, j)
					}
				}
			}
			info.SetSym(x, y, v/2)
		}
	}
	inf := &inference{free: free, phi: st.phi}
	w, smallest, ok := invert(info)
	inf.smallest = smallest
	if !ok {
		return inf, false
	}
	inf.w = w
	// Pᵢ.
	for _, a := range free {
		pi := mat.NewDense(p, p, nil)
		if i, ok := inner[a]; ok {
			pi.Mul(st.kx.T(), mx[i])
		} else {
			f, t := span(outer[a])
			av := avx.Slice(f, t, 0, p)
			pi.Mul(av.T(), av)
		}
		inf.p = append(inf.p, pi)
	}
	sum := mat.NewDense(p, p, nil) // Σ Wᵢⱼ(Qᵢⱼ − PᵢΦPⱼ − ¼Rᵢⱼ)
	st.inBlocks(sum, free, in, params, w)
	for x, a := range free {
		for y, b := range free {
			wxy := w.At(x, y)
			ia, inA := inner[a]
			ib, inB := inner[b]
			var t, u mat.Dense
			t.Mul(st.phi, inf.p[y])
			u.Mul(inf.p[x], &t)
			add(sum, &u, -wxy)
			if q == 0 {
				continue
			}
			var o mat.Dense
			switch {
			case inA && inB: // the part of V⁻¹ in the middle that is not D⁻¹
				var n mat.Dense
				n.Mul(st.wood, mx[ib].Slice(p, p+q, 0, p))
				o.Mul(mx[ia].Slice(p, p+q, 0, p).T(), &n)
				add(sum, &o, -wxy)
			case inA:
				f, t := span(outer[b])
				var l mat.Dense
				l.Mul(st.kx.T(), me[ia].Slice(0, p+q, f, t))
				o.Mul(&l, avx.Slice(f, t, 0, p))
				add(sum, &o, wxy)
			case inB:
				f, t := span(outer[a])
				var l mat.Dense
				l.Mul(st.kx.T(), me[ib].Slice(0, p+q, f, t))
				o.Mul(avx.Slice(f, t, 0, p).T(), l.T())
				add(sum, &o, wxy)
			default:
				fa, ta := span(outer[a])
				fb, tb := span(outer[b])
				var r mat.Dense
				r.Mul(uvu.Slice(fa, ta, fb, tb), avx.Slice(fb, tb, 0, p))
				o.Mul(avx.Slice(fa, ta, 0, p).T(), &r)
				add(sum, &o, wxy)
			}
		}
	}
	var t, l mat.Dense
	t.Mul(sum, st.phi)
	l.Mul(st.phi, &t)
	inf.adjusted = mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			inf.adjusted.SetSym(i, j, st.phi.At(i, j)+l.At(i, j)+l.At(j, i))
		}
	}
	return inf, true
}

// levels sets e to I − NT and uvu to U′V⁻¹U = T − TNT, T = U′D⁻¹U. Since H = J + STS these
// are S H⁻¹ J S⁻¹ and S⁻¹(J − JH⁻¹J)S⁻¹, unless a component is so near zero that this would
// lose its digits.
func (st *state) levels(e, uvu *mat.Dense, t mat.Matrix) {
	q := st.q
	*e, *uvu = *mat.NewDense(q, q, nil), *mat.NewDense(q, q, nil)
	small := false
	for l := range q {
		s2 := st.scale[l] * st.scale[l]
		small = small || !(s2*t.At(l, l) > 1e-4)
	}
	if small {
		e.Mul(st.wood, t)
		uvu.Mul(t, e)
		for i := range q {
			for j := range q {
				e.Set(i, j, indicator(i == j)-e.At(i, j))
				uvu.Set(i, j, t.At(i, j)-uvu.At(i, j))
			}
		}
		return
	}
	for i := range q {
		w, x, y := st.wood.RawRowView(i), e.RawRowView(i), uvu.RawRowView(i)
		for j := range q {
			gj := st.sign[j] * st.scale[j] * st.scale[j]
			gi := st.sign[i] * st.scale[i] * st.scale[i]
			x[j] = w[j] / gj
			y[j] = (indicator(i == j)*st.sign[i]*st.scale[i]*st.scale[i] - w[j]) / (gi * gj)
		}
	}
}

// inBlocks adds Σ Wᵢⱼ(Qᵢⱼ − ¼Rᵢⱼ) over the parameters of D, as far as it lies within blocks.
func (st *state) inBlocks(sum *mat.Dense, free, in, params []int, w *mat.SymDense) {
	if len(in) == 0 {
		return
	}
	at := map[int]int{}
	for x, a := range free {
		at[a] = x
	}
	total := mat.NewDense(st.p+st.q+1, st.p+st.q+1, nil)
	combined := make([][]float64, len(st.patterns))
	for k := range st.patterns {
		pt := &st.patterns[k]
		n := pt.n
		c := make([]float64, n*n)
		second := make([]float64, n*n)
		curved := false
		prod := make([]float64, n*n)
		for _, i := range in {
			// Σⱼ WᵢⱼFⱼ first, one product for each i.
			f := make([]float64, n*n)
			for _, j := range in {
				wij := w.At(at[params[i]], at[params[j]])
				for a, v := range st.forced[k][j] {
					f[a] += wij * v
				}
				if params[i] >= len(st.random) && params[j] >= len(st.random) && st.structure.kind != Independent && st.structure.kind != Unstructured {
					curved = true
					for a, v := range st.deeBy2(pt, st.th, params[i], params[j]) {
						second[a] += wij * v
					}
				}
			}
			multiply(prod, st.forced[k][i], f, n, n)
			for a, v := range prod {
				c[a] += v
			}
		}
		if curved {
			sandwich(st.lower[k], n, second)
			for a, v := range second {
				c[a] -= v / 4
			}
		}
		combined[k] = c
	}
	var room []float64
	for bi := range st.blocks {
		b := &st.blocks[bi]
		n, width := len(b.rows), len(b.cols)+1
		c := st.solved[bi]
		fc := make([]float64, n*width)
		multiply(fc, combined[b.pattern], c, n, width)
		if cap(room) < width*width {
			room = make([]float64, width*width)
		}
		room = room[:width*width]
		cross(room, c, fc, n, width)
		st.scatter(total, b, room, false)
	}
	var t, out mat.Dense
	t.Mul(total.Slice(0, st.p+st.q, 0, st.p+st.q), st.kx)
	out.Mul(st.kx.T(), &t)
	add(sum, &out, 1)
}

// invert gives the inverse of an information matrix and the smallest eigenvalue of the
// matrix scaled to a unit diagonal.
func invert(a *mat.SymDense) (*mat.SymDense, float64, bool) {
	n := a.SymmetricDim()
	if n == 0 {
		return nil, 1, false
	}
	d := make([]float64, n)
	for i := range n {
		if !(a.At(i, i) > 0) {
			return nil, 0, false
		}
		d[i] = math.Sqrt(a.At(i, i))
	}
	s := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			s.SetSym(i, j, a.At(i, j)/d[i]/d[j])
		}
	}
	var e mat.EigenSym
	if !e.Factorize(s, true) {
		return nil, 0, false
	}
	values := e.Values(nil)
	if values[0] < 1e-10 {
		return nil, values[0], false
	}
	var v mat.Dense
	e.VectorsTo(&v)
	out := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			t := 0.0
			for k, l := range values {
				t += v.At(i, k) * v.At(j, k) / l
			}
			out.SetSym(i, j, t/d[i]/d[j])
		}
	}
	return out, values[0], true
}

func add(to, m *mat.Dense, f float64) {
	r, c := to.Dims()
	for i := range r {
		a, b := to.RawRowView(i), m.RawRowView(i)
		for j := range c {
			a[j] += f * b[j]
		}
	}
}

// traceProduct is tr(AB).
func traceProduct(a, b *mat.Dense) float64 {
	n, _ := a.Dims()
	s := 0.0
	for i := range n {
		for j, v := range a.RawRowView(i) {
			s += v * b.At(j, i)
		}
	}
	return s
}

// multiply sets out, n × width, to f c with f n × n.
func multiply(out, f, c []float64, n, width int) {
	clear(out)
	for a := range n {
		o := out[a*width : a*width+width]
		for b, x := range f[a*n : a*n+n] {
			if x == 0 {
				continue
			}
			for j, v := range c[b*width : b*width+width] {
				o[j] += x * v
			}
		}
	}
}

// cross sets m, width × width, to c′d.
func cross(m, c, d []float64, n, width int) {
	clear(m)
	for a := range n {
		row := d[a*width : a*width+width]
		for i, x := range c[a*width : a*width+width] {
			if x == 0 {
				continue
			}
			mi := m[i*width : i*width+width]
			for j, v := range row {
				mi[j] += x * v
			}
		}
	}
}
