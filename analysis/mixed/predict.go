package mixed

// Residuals are those that fixed and random parts leave, RPy, with the variance of each,
// the diagonal of RPR, and that of the row itself, the diagonal of R. Fitted is y less the
// residual.
func (f *Fit) Residuals() (residual, variance, row []float64) {
	st := f.state
	st.prepare()
	n := f.N
	residual, variance, row = make([]float64, n), make([]float64, n), make([]float64, n)
	rest := st.th[len(st.random):]
	for bi := range st.blocks {
		b := &st.blocks[bi]
		p := &st.patterns[b.pattern]
		m := p.n
		c := st.solved[bi]
		r := make([]float64, m*m)
		for i := range m {
			for j := range m {
				if i == j || st.structure.kind != Independent && p.ties(i, j) {
					r[i*m+j] = st.structure.covariance(rest, int(p.time[i]), int(p.time[j]))
				}
			}
		}
		y := append([]float64(nil), r...)
		forward(st.lower[b.pattern], m, y, m) // L⁻¹R, so that RD⁻¹R = y′y
		e := st.along(b, c)
		g := st.spread(b, c)
		gy := make([]float64, m*m)
		multiply(gy, g, y, m, m)
		for i := range m {
			s, v := 0.0, 0.0
			for a := range m {
				s += y[a*m+i] * e[a]
				v += y[a*m+i] * (y[a*m+i] - gy[a*m+i])
			}
			at := b.rows[i]
			if v <= 1e-12*r[i*m+i] {
				s, v = 0, 0 // a row that the model fits whatever it is; what is left is rounding
			}
			residual[at], variance[at], row[at] = s*f.unit, v*f.unit*f.unit, r[i*m+i]*f.unit*f.unit
		}
	}
	return residual, variance, row
}

// along is L⁻¹[B y]k of a block, L′ times its part of Py.
func (st *state) along(b *block, c []float64) []float64 {
	width := len(b.cols) + 1
	e := make([]float64, len(b.rows))
	for a := range e {
		for j, col := range b.cols {
			e[a] += c[a*width+j] * st.k[col]
		}
		e[a] += c[a*width+width-1]
	}
	return e
}

// Effects predicts the effects of random term k, one for each class of its factor with a
// row, in the order in which the rows first show them: σ²Z′Py, with the variance of the
// prediction, σ⁴Z′PZ (Henderson, Biometrics 31 (1975) 423-447). Class gives, for each, the
// level of the factor.
func (f *Fit) Effects(k int) (value, variance []float64, class []int32) {
	st := f.state
	st.prepare()
	n := st.random[k].N
	value, variance, class = make([]float64, n), make([]float64, n), make([]int32, n)
	level := f.space.model.Random[k].Factor.Level
	for i, l := range st.random[k].Level {
		class[l] = level[i]
	}
	s2 := f.Theta[k]
	scale := f.unit * f.unit
	for o, t := range st.outer {
		if t != k {
			continue
		}
		diag := st.upu()
		for l := st.from[o]; l < st.from[o+1]; l++ {
			h := 0.0
			for j := range st.p + st.q + 1 {
				h += st.m0.At(st.p+l, j) * st.k[j]
			}
			value[l-st.from[o]] = s2 * h / f.unit
			variance[l-st.from[o]] = s2 * s2 * diag[l] / scale
		}
		return value, variance, class
	}
	for bi := range st.blocks {
		b := &st.blocks[bi]
		p := &st.patterns[b.pattern]
		c := st.solved[bi]
		e := st.along(b, c)
		g := st.spread(b, c)
		of := map[int32][]float64{}
		var classes []int32 // of the block, in order
		for i, r := range b.rows {
			l := st.random[k].Level[r]
			if of[l] == nil {
				of[l] = make([]float64, p.n)
				classes = append(classes, l)
			}
			of[l][i] = 1
		}
		for _, l := range classes {
			z := of[l]
			forward(st.lower[b.pattern], p.n, z, 1)
			s, v := 0.0, 0.0
			for i, x := range z {
				s += x * e[i]
				gz := 0.0
				for j, y := range z {
					gz += g[i*p.n+j] * y
				}
				v += x * (x - gz)
			}
			value[l], variance[l] = s2*s/f.unit, s2*s2*v/scale
		}
	}
	return value, variance, class
}
