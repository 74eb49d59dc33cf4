package compare

import (
	"math"

	"penwright/analysis/dist"
)

// lambda returns λ with corr(treatment i − control, treatment j − control) = λᵢλⱼ for
// the tested pairs, and whether that form is exact; else it is the nearest.
//
// The correlations follow from the variances of differences alone:
//
//	2 cov(i−c, j−c) = V(i−c) + V(j−c) − V(i−j)
//
// With independent means of nᵢ units they are λᵢ = √(nᵢ/(nᵢ+n₀)) (Dunnett 1955).
func (f Family) lambda(tested []*Difference, side dist.Side) (lambda []float64, exact bool, err error) {
	first := tested[0]
	control := -1
	for _, c := range []int{first.B, first.A} {
		shared := true
		for _, d := range tested {
			inPlace := d.A == c && d.B != c || d.B == c && d.A != c
			// One side only makes sense if the control stands on the same side of all.
			if side != dist.Two {
				inPlace = inPlace && (d.B == c) == (first.B == c)
			}
			shared = shared && inPlace
		}
		if shared {
			control = c
			break
		}
	}
	if control < 0 {
		return nil, false, ErrControl
	}
	k := len(tested)
	treatment := make([]int, k)
	for i, d := range tested {
		treatment[i] = d.A + d.B - control
	}
	rho := make([]float64, k*k)
	exact = true
	for i := range k {
		for j := range i {
			between, _ := f.Diff(treatment[i], treatment[j])
			si, sj := tested[i].SE, tested[j].SE
			r := (si*si + sj*sj - between*between) / (2 * si * sj)
			if !(math.Abs(r) <= 1) { // nothing known of this pair, or no error at all
				r, exact = 0, false
			}
			rho[i*k+j], rho[j*k+i] = r, r
		}
	}
	lambda, fits := product(rho, k)
	return lambda, exact && fits, nil
}

// product returns λ such that λᵢλⱼ is nearest to the off-diagonal of the k×k correlation
// matrix rho by least squares, and whether it is there to 1e-6.
func product(rho []float64, k int) (lambda []float64, exact bool) {
	const limit = 1 - 1e-9
	lambda = make([]float64, k)
	switch k {
	case 1:
		return lambda, true
	case 2:
		lambda[0] = math.Min(limit, math.Sqrt(math.Abs(rho[1])))
		lambda[1] = math.Copysign(lambda[0], rho[1])
		return lambda, math.Abs(rho[1]) < limit
	}
	// λᵢ = ρᵢⱼ / λⱼ starting from the triad with the surest λ: its own correlations are the
	// greatest. Where the form is exact this is the answer.
	var base, u, v int
	var greatest float64
	for i := range k {
		for a := range k {
			for b := range a {
				if a == i || b == i {
					continue
				}
				if least := math.Min(math.Abs(rho[i*k+a]), math.Min(math.Abs(rho[i*k+b]), math.Abs(rho[a*k+b]))); least > greatest {
					greatest, base, u, v = least, i, a, b
				}
			}
		}
	}
	size := 0.0
	if greatest > 0 {
		size = math.Abs(rho[base*k+u] * rho[base*k+v] / rho[u*k+v])
	} else {
		// No triad: at most pairs stand out, and a pair fixes only the product.
		for i := range k * k {
			if i/k != i%k && math.Abs(rho[i]) > size {
				size, base = math.Abs(rho[i]), i/k
			}
		}
	}
	if size > 0 {
		lambda[base] = math.Min(limit, math.Sqrt(size))
		for i := range k {
			if i != base {
				lambda[i] = math.Max(-limit, math.Min(limit, rho[base*k+i]/lambda[base]))
			}
		}
	}
	misfit := func() float64 {
		var most float64
		for i := range k {
			for j := range i {
				most = math.Max(most, math.Abs(rho[i*k+j]-lambda[i]*lambda[j]))
			}
		}
		return most
	}
	const enough = 1e-6
	if misfit() <= enough {
		return lambda, true
	}
	// Least squares one λ at a time; each step cannot raise the sum of squares.
	for range 500 {
		var moved float64
		for i := range k {
			var xy, xx float64
			for j := range k {
				if j != i {
					xy += rho[i*k+j] * lambda[j]
					xx += lambda[j] * lambda[j]
				}
			}
			if xx == 0 {
				continue
			}
			next := math.Max(-limit, math.Min(limit, xy/xx))
			moved = math.Max(moved, math.Abs(next-lambda[i]))
			lambda[i] = next
		}
		if moved < 1e-10 {
			break
		}
	}
	return lambda, misfit() <= enough
}
