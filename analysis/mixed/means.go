package mixed

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// Means are the adjusted means of a combination of factors, the last running fastest:
// equal weights over the levels of all other factors, values at their At (Searle, Speed &
// Milliken, American Statistician 34 (1980) 216-221).
func (f *Fit) Means(factors []int) *Functions {
	m := f.space.model
	cells := 1
	for _, k := range factors {
		cells *= m.Factors[k].N
	}
	weights := make([][]float64, cells)
	shift := make([]float64, cells)
	level := make([]int, len(factors))
	for c := range cells {
		rest := c
		for i := len(factors) - 1; i >= 0; i-- {
			n := m.Factors[factors[i]].N
			level[i], rest = rest%n, rest/n
		}
		weights[c], shift[c] = f.mean(factors, level), 1
	}
	return f.functions(weights, shift)
}

// mean gives the weights, over all columns as held, of the mean at given levels.
func (f *Fit) mean(factors, level []int) []float64 {
	m, x := f.space.model, f.space.x
	w := make([]float64, x.total)
	w[0] = 1
	for k, p := range m.Parts {
		at := 1.0
		if p.Value != nil {
			at = (p.At - x.centre[k]) / x.scale[k]
		}
		size := 1
		for _, i := range p.Factors {
			size *= m.Factors[i].N
		}
		for c := range size {
			v, rest := at, c
			for i := len(p.Factors) - 1; i >= 0; i-- {
				n := m.Factors[p.Factors[i]].N
				l := rest % n
				rest /= n
				if j := slices.Index(factors, p.Factors[i]); j < 0 && p.Weights != nil {
					v *= p.Weights[l]
				} else if j < 0 {
					v /= float64(n)
				} else if level[j] != l {
					v = 0
				}
			}
			w[x.from[k]+c] += v
		}
	}
	return w
}

// Slopes are the coefficients of a part with values, in units of y per unit of the value.
func (f *Fit) Slopes(part int) *Functions {
	x := f.space.x
	end := x.total
	if part+1 < len(x.from) {
		end = x.from[part+1]
	}
	var weights [][]float64
	for j := x.from[part]; j < end; j++ {
		w := make([]float64, x.total)
		w[j] = 1 / x.scale[part]
		weights = append(weights, w)
	}
	return f.functions(weights, make([]float64, len(weights)))
}

// Adjusted tests parts adjusted for those in after alone, ignoring all others: the
// hypothesis L = X′ₜM X with M = V⁻¹ − V⁻¹Xₐ(X′ₐV⁻¹Xₐ)⁻X′ₐV⁻¹ of fitting constants (Yates,
// Journal of the American Statistical Association 29 (1934) 51-66), with V as estimated.
func (f *Fit) Adjusted(parts, after []int) Test {
	s, x := f.space, f.space.x
	span := func(k int) (int, int) {
		if k < 0 {
			return 0, 1
		}
		end := x.total
		if k+1 < len(x.from) {
			end = x.from[k+1]
		}
		return x.from[k], end
	}
	// X′V⁻¹X over kept columns is Φ⁻¹.
	xx, ok := inverse(mat.DenseCopyOf(f.inf.phi))
	if !ok {
		return Test{F: math.NaN(), ErrorDF: math.NaN(), Scale: math.NaN()}
	}
	full := func(j int) []float64 { // column j in terms of kept ones
		out := make([]float64, s.p)
		if x.at[j] >= 0 {
			out[x.at[j]] = 1
		} else {
			copy(out, x.depends[j])
		}
		return out
	}
	var basis [][]float64 // V⁻¹-orthonormal columns of the parts in after
	project := func(v []float64) float64 {
		t := mat.NewVecDense(s.p, v)
		for range 2 {
			for _, b := range basis {
				var u mat.VecDense
				u.MulVec(xx, mat.NewVecDense(s.p, b))
				d := mat.Dot(t, &u)
				for i := range v {
					v[i] -= d * b[i]
				}
			}
		}
		var u mat.VecDense
		u.MulVec(xx, t)
		return math.Sqrt(math.Max(mat.Dot(t, &u), 0))
	}
	size := func(v []float64) float64 {
		var u mat.VecDense
		t := mat.NewVecDense(s.p, v)
		u.MulVec(xx, t)
		return math.Sqrt(math.Max(mat.Dot(t, &u), 0))
	}
	for _, k := range append([]int{-1}, after...) {
		from, to := span(k)
		for j := from; j < to; j++ {
			v := full(j)
			before := size(v)
			if n := project(v); n > 1e-6*before && n > 0 {
				for i := range v {
					v[i] /= n
				}
				basis = append(basis, v)
			}
		}
	}
	var ls [][]float64
	for _, k := range parts {
		from, to := span(k)
		for j := from; j < to; j++ {
			v := full(j)
			before := size(v)
			n := project(v)
			if n <= 1e-6*before || n == 0 {
				continue
			}
			for i := range v {
				v[i] /= n
			}
			var u mat.VecDense
			u.MulVec(xx, mat.NewVecDense(s.p, v))
			ls = append(ls, u.RawVector().Data)
			basis = append(basis, v)
		}
	}
	return f.test(ls)
}
