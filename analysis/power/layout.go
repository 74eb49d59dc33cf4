package power

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
)

// Most is the number of classes of treatments and of what is adjusted for, the largest
// factor excepted, up to which Covariance is computed.
const Most = 600

// Covariance is the covariance of the treatment means of a layout per unit of error
// variance, after adjusting for what else is in the model. Contrasts of the means that
// can be estimated have the variance w′Vw.
type Covariance struct {
	V *mat.SymDense // the generalized inverse of the information matrix

	space *mat.Dense // orthonormal columns that span the information
}

// Adjusted gives the covariance of the means of the classes of treatment when every
// class of group has its own polynomial of the given order in position (0: a level of
// its own, and position may be nil), and there are further factors such as periods or
// carry-over. The information is C = X′(I − P)X with P the projector on all of them.
// ok is false when there are more than Most classes to be inverted.
//
// Source: J. A. John & E. R. Williams, Cyclic and Computer Generated Designs (1995),
// ch. 1 and 5 (from memory).
func Adjusted(treatment, group factor.Factor, position []float64, order int, further ...factor.Factor) (c *Covariance, ok bool) {
	n := treatment.Len()
	q := treatment.N
	for _, f := range further {
		q += f.N
	}
	if q > Most || n == 0 {
		return nil, false
	}
	// W holds the indicators of treatments and of the further factors, without what the
	// groups explain; S = W′W is built group by group.
	s := mat.NewSymDense(q, nil)
	rows := make([][]int, group.N)
	for i, g := range group.Level {
		rows[g] = append(rows[g], i)
	}
	columns := func(i int) []int {
		out := []int{int(treatment.Level[i])}
		at := treatment.N
		for _, f := range further {
			out = append(out, at+int(f.Level[i]))
			at += f.N
		}
		return out
	}
	for _, in := range rows {
		for _, i := range in {
			cs := columns(i)
			for _, a := range cs {
				for _, b := range cs {
					if a <= b {
						s.SetSym(a, b, s.At(a, b)+1)
					}
				}
			}
		}
		for _, base := range polynomials(in, position, order) {
			load := map[int]float64{}
			var touched []int
			for k, i := range in {
				for _, a := range columns(i) {
					if _, seen := load[a]; !seen {
						touched = append(touched, a)
					}
					load[a] += base[k]
				}
			}
			for _, a := range touched {
				for _, b := range touched {
					if a <= b {
						s.SetSym(a, b, s.At(a, b)-load[a]*load[b])
					}
				}
			}
		}
	}
	t := treatment.N
	info := mat.NewSymDense(t, nil)
	for i := range t {
		for j := i; j < t; j++ {
			info.SetSym(i, j, s.At(i, j))
		}
	}
	if m := q - t; m > 0 {
		z := mat.NewSymDense(m, nil)
		x := mat.NewDense(t, m, nil)
		for i := range m {
			for j := i; j < m; j++ {
				z.SetSym(i, j, s.At(t+i, t+j))
			}
			for j := range t {
				x.Set(j, i, s.At(j, t+i))
			}
		}
		inverse, _ := pseudoInverse(z)
		var half, whole mat.Dense
		half.Mul(x, inverse)
		whole.Mul(&half, x.T())
		for i := range t {
			for j := i; j < t; j++ {
				info.SetSym(i, j, info.At(i, j)-(whole.At(i, j)+whole.At(j, i))/2)
			}
		}
	}
	out := &Covariance{}
	out.V, out.space = pseudoInverse(info)
	return out, true
}

// polynomials gives orthonormal polynomials of degree 0 … order in the positions of the
// rows.
func polynomials(rows []int, position []float64, order int) [][]float64 {
	var out [][]float64
	for degree := 0; degree <= order && degree < len(rows); degree++ {
		v := make([]float64, len(rows))
		for k, i := range rows {
			v[k] = 1
			if degree > 0 {
				v[k] = math.Pow(position[i], float64(degree))
			}
		}
		before := norm(v)
		for range 2 { // once more, for the digits that the first pass loses
			for _, u := range out {
				dot := 0.0
				for k := range v {
					dot += u[k] * v[k]
				}
				for k := range v {
					v[k] -= dot * u[k]
				}
			}
		}
		length := norm(v)
		if !(length > 1e-9*before) {
			continue
		}
		for k := range v {
			v[k] /= length
		}
		out = append(out, v)
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

// pseudoInverse inverts a positive semidefinite matrix on the space it spans, and gives
// orthonormal columns of that space.
func pseudoInverse(a *mat.SymDense) (*mat.SymDense, *mat.Dense) {
	n := a.SymmetricDim()
	out := mat.NewSymDense(n, nil)
	var eig mat.EigenSym
	if !eig.Factorize(a, true) {
		panic("power: eigenvalues did not converge")
	}
	values := eig.Values(nil)
	var vectors mat.Dense
	eig.VectorsTo(&vectors)
	limit := 1e-9 * math.Max(1, values[n-1])
	kept := 0
	for k := n - 1; k >= 0 && values[k] > limit; k-- {
		kept++
		for i := range n {
			for j := i; j < n; j++ {
				out.SetSym(i, j, out.At(i, j)+vectors.At(i, k)*vectors.At(j, k)/values[k])
			}
		}
	}
	space := mat.NewDense(n, max(kept, 1), nil)
	for c := range kept {
		for i := range n {
			space.Set(i, c, vectors.At(i, n-1-c))
		}
	}
	return out, space
}

// Diagonal is the covariance of means that need no adjusting, of n units each.
func Diagonal(n []float64) *Covariance {
	c := &Covariance{V: mat.NewSymDense(len(n), nil)}
	for i, x := range n {
		c.V.SetSym(i, i, 1/x)
	}
	return c
}

// Contrast is w′Vw, the variance of a contrast per unit of error variance; NaN when the
// layout cannot estimate it.
func (c *Covariance) Contrast(w []float64) float64 {
	if c.space != nil {
		// The part of w that the information does not span must be nothing.
		left := append([]float64(nil), w...)
		_, k := c.space.Dims()
		for j := range k {
			dot := 0.0
			for i := range w {
				dot += c.space.At(i, j) * w[i]
			}
			for i := range w {
				left[i] -= dot * c.space.At(i, j)
			}
		}
		if norm(left) > 1e-6*norm(w) {
			return math.NaN()
		}
	}
	v := 0.0
	for i, a := range w {
		for j, b := range w {
			v += a * b * c.V.At(i, j)
		}
	}
	return v
}

// Connected tells whether every contrast of the means can be estimated.
func (c *Covariance) Connected() bool {
	if c.space == nil {
		return true
	}
	n, k := c.space.Dims()
	return k >= n-1
}

// Average is the mean variance, per unit of error variance, of contrasts with one on half
// of their cells and minus one on the other half, as differences and differences of
// differences are, over the space of a main effect or interaction of factors with the
// given levels, the first slowest: 2ᵏ tr(P V)/df for k factors, P being the projector on
// that space. It is NaN when the means are not connected.
func (c *Covariance) Average(levels []int) float64 {
	if !c.Connected() {
		return math.NaN()
	}
	n := c.V.SymmetricDim()
	df, scale := 1, 1.0
	for _, l := range levels {
		df *= l - 1
		scale *= 2
	}
	at := func(cell int) []int {
		out := make([]int, len(levels))
		for f := len(levels) - 1; f >= 0; f-- {
			out[f] = cell % levels[f]
			cell /= levels[f]
		}
		return out
	}
	trace := 0.0
	for i := range n {
		a := at(i)
		for j := range n {
			p := 1.0
			for f, b := range at(j) {
				if a[f] == b {
					p *= 1 - 1/float64(levels[f])
				} else {
					p *= -1 / float64(levels[f])
				}
			}
			trace += p * c.V.At(i, j)
		}
	}
	return scale * trace / float64(df)
}

// Bound is an upper bound of the average efficiency factor of a block design with blocks
// of the given sizes for t treatments as equally replicated as can be: the mean of the
// canonical efficiency factors when treatments stand in the blocks as equally as can be,
//
//	E ≤ (t − Σ Σ n²/(k r)) / (t − 1)
//
// which for blocks of k < t is t(k − 1)/(k(t − 1)), reached by balanced incomplete
// blocks (Yates 1936; John & Williams 1995, ch. 2; from memory).
func Bound(t int, sizes []int) float64 {
	total := 0
	for _, k := range sizes {
		total += k
	}
	r := float64(total) / float64(t)
	lost := 0.0
	for _, k := range sizes {
		each, over := k/t, k%t
		squares := t*each*each + over*(2*each+1)
		lost += float64(squares) / (float64(k) * r)
	}
	return math.Min(1, (float64(t)-lost)/float64(t-1))
}

// ResolvableBound is the upper bound for r replicates of s blocks each, for t treatments:
//
//	(t − 1)(r − 1) / ((t − 1)(r − 1) + r(s − 1))
//
// which square lattices reach. Source: H. D. Patterson & E. R. Williams, Biometrika 63
// (1976) 83-92 (from memory).
func ResolvableBound(t, r, s int) float64 {
	a := float64(t-1) * float64(r-1)
	return a / (a + float64(r)*float64(s-1))
}

// Williams is the efficiency of direct effects, adjusted for carry-over of the period
// before, in a crossover of t periods in which every treatment follows every other
// equally often: (t − 2)(t + 1)/(t² − t − 1). It is 0 for two treatments, whose carry-over
// cannot be told from sequences (E. J. Williams, Aust. J. Sci. Res. A 2 (1949) 149-168;
// derived from the information matrix).
func Williams(t int) float64 {
	x := float64(t)
	return (x - 2) * (x + 1) / (x*x - x - 1)
}
