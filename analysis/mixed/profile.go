package mixed

import (
	"math"

	"penwright/analysis/dist"
	"penwright/analysis/solve"
)

// Profile gives limits of parameter i with confidence 1 − alpha: the values at which the
// residual likelihood, maximized over all other parameters, is lower than at its maximum by
// half the upper alpha quantile of χ² with one degree of freedom (Venzon & Moolgavkar,
// Applied Statistics 37 (1988) 87-94, for the principle; the limits are found as roots). A
// limit is where the parameter cannot go further, zero for a variance or ±1 for a
// correlation, if the likelihood does not fall so far on that side; it is NaN where a
// maximum over the others is not found.
func (f *Fit) Profile(i int, alpha float64) (lower, upper float64) {
	s := *f.space
	s.held = i + 1
	unit := f.squared(i)
	best := f.state.th[i]
	fall := dist.ChiSquaredQuantile(alpha, 1)
	rest := i - len(s.random)
	least, most := math.Inf(-1), math.Inf(1)
	switch {
	case rest >= 0 && s.structure.isVariance(rest), rest < 0 && !s.model.Random[i].Unbounded:
		least = 0
	case rest >= 0 && s.structure.isCorrelation(rest):
		least, most = -1, 1
	}
	side := func(sign, end float64) float64 {
		th := append([]float64(nil), f.state.th...) // of the last point found
		failed := false
		excess := func(x float64) float64 {
			if rest >= 0 && x == end {
				return math.Inf(1) // a variance of zero, a correlation of one
			}
			from := append([]float64(nil), th...)
			from[i] = x
			r, err := s.climb(from)
			if err != nil {
				from = append(from[:0], f.state.th...)
				from[i] = x
				r, err = s.climb(from)
			}
			if err != nil {
				if !math.IsNaN(err.(NotConverged).Decrement) {
					failed = true
				}
				return math.Inf(1) // V is positive definite nowhere near
			}
			th = r.state.th
			return r.state.deviance - f.state.deviance - fall
		}
		step := 0.05
		if se := f.SE[i] / unit; se > 0 {
			step = se
		}
		near, far := best, best
		for range 200 {
			switch {
			case !math.IsInf(end, 0) && rest >= 0:
				far = far + (end-far)/2 // an end that is never reached
			case sign*(far+sign*step-end) >= 0:
				far = end
			default:
				far += sign * step
				step *= 2
			}
			at := excess(far)
			if at >= 0 {
				x, err := solve.Root(excess, near, far, 1e-9*math.Abs(far-near))
				if err != nil || failed {
					return math.NaN()
				}
				return x
			}
			if far == end || near == far {
				return end
			}
			near = far
		}
		return math.NaN()
	}
	return side(-1, least) * unit, side(1, most) * unit
}
