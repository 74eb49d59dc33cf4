package linear

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"

	"penwright/protocol/factor"
)

// reduce brings the adjusted columns and the response to a triangle, block of rows by
// block of rows, and from there to a staircase whose steps are the columns that are not
// aliased.
func (f *Fit) reduce() {
	p := f.p
	w := p + 1
	f.norm = make([]float64, p)
	f.ux = make([]float64, p)

	chunk := max(2*w, 256)
	buf := blas64.General{Rows: w + chunk, Cols: w, Stride: w, Data: make([]float64, (w+chunk)*w)}
	tau := make([]float64, w)
	work := make([]float64, 1)
	lapack64.Geqrf(buf, tau, work, -1)
	work = make([]float64, int(work[0]))
	have := w
	fold := func() {
		part := buf
		part.Rows = have
		lapack64.Geqrf(part, tau, work, len(work))
		for i := 1; i < w; i++ {
			clear(buf.Data[i*w : i*w+i])
		}
		have = w
	}

	levels := float64(f.absorb.N - f.unsupported)
	f.stream(func(a int, coef []float64) {
		z := f.local.z[a]
		if z == nil {
			return
		}
		for b, v := range z {
			v /= levels
			f.uu += v * v
			c := coef[b*w : (b+1)*w]
			for j := range f.ux {
				f.ux[j] += v * c[j]
			}
			f.uy += v * c[p]
		}
	}, func(_ int32, x []float64, y float64) {
		row := buf.Data[have*w : (have+1)*w]
		copy(row, x)
		row[p] = y
		have++
		if have == buf.Rows {
			fold()
		}
	})
	if have > w {
		fold()
	}
	f.lengths()

	r := make([]float64, p*p)
	f.c = make([]float64, p)
	for i := range p {
		copy(r[i*p:(i+1)*p], buf.Data[i*w:i*w+p])
		f.c[i] = buf.Data[i*w+p]
	}
	f.pivot = staircase(r, p, p, f.c, f.norm)
	k := len(f.pivot)
	f.r, f.c = r[:k*p], f.c[:k]
	f.row = make([]int, p)
	for j := range f.row {
		f.row[j] = -1
	}
	for i, j := range f.pivot {
		f.row[j] = i
	}
	f.Rank = f.local.rank + k
	f.DF = f.N - f.Rank
}

// lengths of the columns before adjustment for the absorbed part.
func (f *Fit) lengths() {
	x := make([]float64, f.p)
	for g, row := range f.points.row {
		f.fill(x, row)
		for j, v := range x {
			f.norm[j] += f.points.count[g] * v * v
		}
	}
	for j, v := range f.norm {
		f.norm[j] = math.Sqrt(v)
	}
}

// staircase reduces a, rows × cols by rows, from the left by Householder reflections,
// applied to c as well. A column of which at most Tolerance·norm is left below the steps
// made so far makes no step and keeps only what lies above. It returns the columns that
// made one.
func staircase(a []float64, rows, cols int, c, norm []float64) (pivot []int) {
	v := make([]float64, rows)
	s := make([]float64, cols)
	for j := range cols {
		k := len(pivot)
		if k == rows {
			break
		}
		last := k
		var left float64
		for i := k; i < rows; i++ {
			if x := a[i*cols+j]; x != 0 {
				last = i
				left = math.Hypot(left, x)
			}
		}
		if left <= Tolerance*norm[j] {
			for i := k; i <= last; i++ {
				a[i*cols+j] = 0
			}
			continue
		}
		pivot = append(pivot, j)
		if last == k {
			continue
		}
		// reflect (x_k … x_last) onto (∓left, 0 …): v = x ± left·e, H = I − 2vv′/v′v
		alpha := -math.Copysign(left, a[k*cols+j])
		var vv float64
		for i := k; i <= last; i++ {
			v[i] = a[i*cols+j]
			if i == k {
				v[i] -= alpha
			}
			vv += v[i] * v[i]
		}
		clear(s[j+1:])
		var sc float64
		for i := k; i <= last; i++ {
			for l := j + 1; l < cols; l++ {
				s[l] += v[i] * a[i*cols+l]
			}
			sc += v[i] * c[i]
		}
		for i := k; i <= last; i++ {
			t := 2 * v[i] / vv
			for l := j + 1; l < cols; l++ {
				a[i*cols+l] -= t * s[l]
			}
			c[i] -= t * sc
			a[i*cols+j] = 0
		}
		a[k*cols+j] = alpha
	}
	return pivot
}

// back solves R₁x = b over the pivot columns, in place.
func (f *Fit) back(b []float64) {
	for i := len(f.pivot) - 1; i >= 0; i-- {
		row := f.r[i*f.p:]
		v := b[i]
		for k := i + 1; k < len(f.pivot); k++ {
			v -= row[f.pivot[k]] * b[k]
		}
		b[i] = v / row[f.pivot[i]]
	}
}

// forward solves R₁′x = b over the pivot columns, in place.
func (f *Fit) forward(b []float64) {
	for i, j := range f.pivot {
		row := f.r[i*f.p:]
		b[i] /= row[j]
		if v := b[i]; v != 0 {
			for k := i + 1; k < len(f.pivot); k++ {
				b[k] -= row[f.pivot[k]] * v
			}
		}
	}
}

// solve finds β, refines it once by the residuals, and sums their squares.
func (f *Fit) solve() {
	k := len(f.pivot)
	b := append([]float64(nil), f.c...)
	f.back(b)
	f.beta = make([]float64, f.p)
	for i, j := range f.pivot {
		f.beta[j] = b[i]
	}
	g := make([]float64, f.p)
	f.stream(nil, func(_ int32, x []float64, y float64) {
		e := f.residual(x, y)
		for j, v := range x {
			g[j] += v * e
		}
	})
	d := make([]float64, k)
	for i, j := range f.pivot {
		d[i] = g[j]
	}
	f.forward(d)
	for i := range d {
		f.c[i] += d[i]
	}
	f.back(d)
	for i, j := range f.pivot {
		f.beta[j] += d[i]
	}
	var rss sum
	f.stream(nil, func(_ int32, x []float64, y float64) {
		e := f.residual(x, y)
		rss.add(e * e)
	})
	f.RSS = rss.value() + f.points.pure
	f.nuisance = f.weighNuisance()
}

func (f *Fit) residual(x []float64, y float64) float64 {
	for j, b := range f.beta {
		y -= x[j] * b
	}
	return y
}

// MS is the error mean square, NaN without error degrees of freedom.
func (f *Fit) MS() float64 {
	if f.DF <= 0 {
		return math.NaN()
	}
	return f.RSS / float64(f.DF)
}

// Residuals and fitted values, one for each row. Fitted is y less the residual.
func (f *Fit) Residuals() (residual, fitted []float64) {
	e := make([]float64, len(f.points.row))
	f.stream(nil, func(g int32, x []float64, y float64) {
		e[g] = f.residual(x, y) / math.Sqrt(f.points.count[g])
	})
	residual, fitted = make([]float64, f.N), make([]float64, f.N)
	for i, y := range f.model.Y {
		g := f.points.of[i]
		residual[i] = ((y - f.at) - f.points.y[g]) + e[g]
		fitted[i] = y - residual[i]
	}
	return residual, fitted
}

// Leverages are the diagonal of the projection onto the whole model, one for each row:
//
//	hᵢ = |q′ of the absorbed basis|² + |R₁⁻ᵀ x̃ᵢ|²
func (f *Fit) Leverages() []float64 {
	h := make([]float64, len(f.points.row))
	w := f.local.width
	for i, g := range f.points.order {
		for _, q := range f.local.q[i*w : (i+1)*w] {
			h[g] += q * q
		}
	}
	b := make([]float64, len(f.pivot))
	f.stream(nil, func(g int32, x []float64, _ float64) {
		for i, j := range f.pivot {
			b[i] = x[j]
		}
		f.forward(b)
		for _, v := range b {
			h[g] += v * v
		}
	})
	out := make([]float64, f.N)
	for i := range out {
		g := f.points.of[i]
		out[i] = h[g] / f.points.count[g]
	}
	return out
}

// weighNuisance gives the part of a mean's coefficients in the columns of nuisance
// factors. The absorbed classes have equal weights. Any other factor has equal weights
// over those of its classes that share a class of the supremum with the absorbed factor,
// the supremum's classes as the absorbed factor weighs them. Where the two cross freely
// these are equal weights over all classes; where both lie within squares of different
// size it is the only choice that is estimable.
func (f *Fit) weighNuisance() []float64 {
	l := make([]float64, f.p)
	var whole []bool // absorbed classes that count
	for _, b := range f.blocks {
		if b.kind != Nuisance || b.to == b.from {
			continue
		}
		if whole == nil {
			whole = make([]bool, f.absorb.N)
			for a, z := range f.local.z {
				whole[a] = z != nil
			}
		}
		g := f.model.Nuisance[b.index]
		s := factor.Supremum(f.absorb, g)
		share := make([]float64, s.N)
		classes := make([]float64, s.N)
		seenA, seenG := make([]bool, f.absorb.N), make([]bool, g.N)
		in := make([]int32, g.N)
		for i, c := range g.Level {
			if a := f.absorb.Level[i]; !seenA[a] {
				seenA[a] = true
				if whole[a] {
					share[s.Level[i]]++
				}
			}
			if !seenG[c] {
				seenG[c] = true
				in[c] = s.Level[i]
				classes[in[c]]++
			}
		}
		part := l[b.from:b.to]
		codes := make([]float64, len(part))
		total := float64(f.absorb.N - f.unsupported)
		if total == 0 {
			continue
		}
		for c := range g.N {
			w := share[in[c]] / total / classes[in[c]]
			code(codes, int32(c), g.N)
			for j, v := range codes {
				part[j] += w * v
			}
		}
		for j, v := range part { // sums to zero where weights are equal
			if math.Abs(v) < 1e-12 {
				part[j] = 0
			}
		}
	}
	return l
}
