package mixed

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// Fit is a fitted model. Variances and covariances are in squared units of y; Theta holds
// the components of the random terms in order, then the parameters of the residual
// structure.
type Fit struct {
	N, Rank int
	Theta   []float64
	SE      []float64 // asymptotic, from the expected information; NaN at a bound
	Bound   []bool    // held at zero
	// Deviance is −2ℓ_R, with all constants, columns coded 0 and 1 and covariates in
	// their own unit.
	Deviance   float64
	Decrement  float64 // gᵀH⁻¹g at the estimates, in units of −2ℓ_R
	Iterations int
	// Smallest is the smallest eigenvalue of the information about the parameters, scaled
	// to a unit diagonal: near zero when two of them can hardly be told apart.
	Smallest float64
	// Starts is the number of different maxima that several starts ended in.
	Starts int

	space   *space
	state   *state
	unit    float64 // y was divided by this
	centre  float64
	inf     *inference
	satters bool
}

// ErrSingular is the error of a model whose parameters cannot be told apart, such as two
// random terms with the same classes. Theta is where the search ended.
type ErrSingular struct {
	Smallest float64
	Theta    []float64
}

func (ErrSingular) Error() string { return "mixed: the variances cannot be told apart" }

const (
	maxIterations = 200
	slow          = 25    // iterations after which second derivatives are worth their cost
	good          = 1e-8  // of the decrement, a squared distance in standard errors: a maximum
	converged     = 1e-22 // where polishing it ends
)

// Fit finds the maximum of the residual likelihood. The error is NotFinite, TooLarge,
// NoError, Confounded, NotConverged or ErrSingular.
func (m Model) Fit() (*Fit, error) { return m.fit(usualBlocks) }

func (m Model) fit(limits blockLimits) (*Fit, error) {
	if err := m.check(); err != nil {
		return nil, err
	}
	f := &Fit{N: len(m.Y), centre: mean(m.Y), unit: 1}
	y := make([]float64, len(m.Y))
	ss := 0.0
	for i, v := range m.Y {
		y[i] = v - f.centre
		ss += y[i] * y[i]
	}
	if ss > 0 {
		f.unit = math.Sqrt(ss / float64(len(y)))
	}
	for i := range y {
		y[i] /= f.unit
	}
	s, err := newSpace(&m, y, limits)
	if err != nil {
		return nil, err
	}
	f.space, f.Rank = s, s.p
	if s.n-s.p < s.params {
		return nil, NoError{Left: s.n - s.p, Parameters: s.params}
	}
	for k := range s.random {
		if s.x.within(s.random[k]) {
			return nil, Confounded{Random: k}
		}
	}
	r, err := s.search()
	if r != nil {
		f.take(r)
	}
	if err != nil {
		switch e := err.(type) {
		case NotConverged:
			e.Theta = f.Theta
			return nil, e
		}
		return nil, err
	}
	var free []int
	for i := range s.params {
		if !r.bound[i] {
			free = append(free, i)
		}
	}
	inf, ok := r.state.infer(free)
	f.inf, f.Smallest = inf, inf.smallest
	if !ok {
		return nil, ErrSingular{Smallest: inf.smallest, Theta: f.Theta}
	}
	f.SE = make([]float64, s.params)
	for i := range f.SE {
		f.SE[i] = math.NaN()
	}
	for x, i := range free {
		f.SE[i] = math.Sqrt(inf.w.At(x, x)) * f.squared(i)
	}
	return f, nil
}

// Rank is the number of fixed columns that do not depend on others.
func (m Model) Rank() (int, error) {
	if err := m.check(); err != nil {
		return 0, err
	}
	x, err := newColumns(&m)
	if err != nil {
		return 0, err
	}
	return len(x.kept), nil
}

// squared gives the unit of parameter i: that of y squared, or 1 for a correlation.
func (f *Fit) squared(i int) float64 {
	if i >= len(f.space.random) && f.space.structure.isCorrelation(i-len(f.space.random)) {
		return 1
	}
	return f.unit * f.unit
}

func (f *Fit) take(r *result) {
	f.state = r.state
	f.Theta = make([]float64, len(r.state.th))
	for i, v := range r.state.th {
		f.Theta[i] = v * f.squared(i)
	}
	f.Bound, f.Iterations, f.Decrement, f.Starts = r.bound, r.iterations, r.decrement, r.maxima
	f.Deviance = r.state.deviance + float64(f.N-f.Rank)*2*math.Log(f.unit) + f.space.x.logdet
}

// result is where a search ended.
type result struct {
	state      *state
	bound      []bool
	iterations int
	decrement  float64
	maxima     int
}

// search climbs from several starts while that is cheap, and takes the highest maximum.
func (s *space) search() (*result, error) {
	var best *result
	var firstErr error
	maxima := 0
	starts := s.starts()
	for i, th := range starts {
		r, err := s.climb(th)
		if err != nil {
			if firstErr == nil {
				firstErr = err
				if best == nil && r != nil && i == len(starts)-1 {
					return r, err
				}
			}
			continue
		}
		switch {
		case best == nil:
			best, maxima = r, 1
		case r.state.deviance < best.state.deviance-1e-6:
			best, maxima = r, maxima+1
		case r.state.deviance > best.state.deviance+1e-6:
			maxima++
		}
	}
	if best == nil {
		return nil, firstErr
	}
	best.maxima = maxima
	return best, nil
}

// starts gives the points from which to climb; the response has unit variance.
func (s *space) starts() [][]float64 {
	k := len(s.random)
	point := func(random, rest, rho float64) []float64 {
		th := make([]float64, s.params)
		for i := range k {
			th[i] = random / float64(max(k, 1))
		}
		for i := range s.structure.parameters() {
			switch {
			case s.structure.isCorrelation(i):
				th[k+i] = s.startCorrelation(i, rho)
			case s.structure.isVariance(i):
				th[k+i] = rest
			default:
				th[k+i] = 0.3 * rest
			}
		}
		return th
	}
	out := [][]float64{point(0.4, 0.4, 0.4)}
	if s.n <= 2000 && s.q <= 200 && s.params <= 12 {
		out = append(out, point(0.02, 0.8, 0.1), point(1.5, 0.1, 0.8))
	}
	return out
}

// startCorrelation turns a correlation of neighbouring times into that of a unit of time.
func (s *space) startCorrelation(i int, rho float64) float64 {
	switch s.structure.kind {
	case Autoregressive, HeterogeneousAutoregressive:
		t := s.structure.times
		if len(t) > 1 {
			gap := math.Abs(t[len(t)-1]-t[0]) / float64(len(t)-1)
			if gap > 0 {
				return math.Pow(rho, 1/gap)
			}
		}
	}
	return rho
}

// climb maximizes the residual likelihood by steps of the average information, halved until
// the likelihood rises; where they do not help, or many did not bring it to an end, by steps
// of the second derivatives, and last by steps of the expected information's
// diagonal, which are those of a scaled gradient.
func (s *space) climb(th []float64) (*result, error) {
	st, ok := s.at(th)
	for range 30 {
		if ok {
			break
		}
		// Smaller covariances make V positive definite.
		for i := range th {
			rest := i - len(s.random)
			if (rest < 0 || !s.structure.isVariance(rest)) && i+1 != s.held {
				th[i] /= 2
			}
		}
		st, ok = s.at(th)
	}
	if !ok {
		return nil, NotConverged{Decrement: math.NaN()}
	}
	r := &result{state: st, bound: make([]bool, s.params), decrement: math.Inf(1)}
	for r.iterations < maxIterations {
		r.iterations++
		g, info := r.state.slopes()
		for i := range r.bound {
			r.bound[i] = i+1 == s.held || s.floored(i) && r.state.th[i] == 0 && g[i] >= 0
		}
		var step []float64
		step, r.decrement = newton(g, info, r.bound)
		if r.decrement < good {
			return s.polish(r, step), nil
		}
		if r.iterations > slow {
			if h := s.curvature(r); h != nil {
				step, _ = newton(g, h, r.bound)
			}
		}
		next := s.line(r.state, g, step)
		if next == nil && r.iterations <= slow {
			if h := s.curvature(r); h != nil {
				step, _ = newton(g, h, r.bound)
				next = s.line(r.state, g, step)
			}
		}
		if next == nil {
			next = s.line(r.state, g, scaled(g, info, r.bound))
		}
		if next == nil {
			break
		}
		r.state = next
	}
	return r, NotConverged{Iterations: r.iterations, Decrement: r.decrement}
}

// polish goes on from a point so near the maximum that the likelihood, to rounding, rises
// no more: full steps as long as each brings the gradient down. Where the average
// information, which leaves out the curvature of V, converges slowly, the second
// derivatives are taken from differences of the gradient.
func (s *space) polish(r *result, step []float64) *result {
	exact := false
	for r.decrement > converged && r.iterations < maxIterations {
		th := make([]float64, len(step))
		for i := range th {
			th[i] = r.state.th[i] + step[i]
			if s.floored(i) && th[i] < 0 {
				return r
			}
		}
		if !s.inside(th) {
			return r
		}
		next, ok := s.at(th)
		if !ok {
			return r
		}
		g, info := next.slopes()
		more, decrement := newton(g, info, r.bound)
		better := decrement < r.decrement
		crawls := !(decrement < 0.01*r.decrement)
		if better {
			r.state, r.decrement, step = next, decrement, more
			r.iterations++
		} else if exact {
			return r
		}
		if crawls && r.decrement > converged {
			exact = true
			h := s.curvature(r)
			if h == nil {
				return r
			}
			g, _ = r.state.slopes()
			step, _ = newton(g, h, r.bound)
		}
	}
	return r
}

// curvature gives the second derivatives of −2ℓ_R by differences of its gradient; nil where
// a point beside cannot be evaluated.
func (s *space) curvature(r *result) *mat.SymDense {
	n := s.params
	_, info := r.state.slopes()
	d := mat.NewDense(n, n, nil)
	for j := range n {
		if r.bound[j] {
			continue
		}
		h := 1e-3 / math.Sqrt(math.Max(info.At(j, j), 1e-300))
		var side [2][]float64
		for k, f := range []float64{1, -1} {
			th := append([]float64(nil), r.state.th...)
			th[j] += f * h
			if !s.inside(th) {
				return nil
			}
			st, ok := s.at(th)
			if !ok {
				return nil
			}
			side[k], _ = st.slopes()
		}
		for i := range n {
			d.Set(i, j, (side[0][i]-side[1][i])/(2*h))
		}
	}
	out := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			out.SetSym(i, j, (d.At(i, j)+d.At(j, i))/2)
		}
	}
	return out
}

// line halves a step until −2ℓ_R falls, and goes on as long as it falls much less than its
// slope and half the step falls further: a step too long ends beside where V is singular, and
// finds no way back.
func (s *space) line(st *state, g, step []float64) *state {
	th := make([]float64, len(step))
	var found *state
	f := 1.0
	for range 40 {
		slope := 0.0
		for i := range th {
			th[i] = st.th[i] + f*step[i]
			if s.floored(i) && th[i] < 0 {
				th[i] = 0
			}
			slope += g[i] * (th[i] - st.th[i])
		}
		var next *state
		if s.inside(th) {
			if x, ok := s.at(th); ok {
				next = x
			}
		}
		switch {
		case found != nil && (next == nil || !(next.deviance < found.deviance)):
			return found
		case next != nil && next.deviance <= st.deviance+1e-4*math.Min(slope, 0)+1e-13*math.Abs(st.deviance) && (next.deviance < st.deviance || f == 1):
			if next.deviance <= st.deviance+0.25*math.Min(slope, 0) || slope > -1e-3 {
				return next
			}
			found = next
		}
		f /= 2
	}
	return found
}

// floored tells whether a parameter is kept from being negative: a bounded component, or a
// correlation whose powers have no sign below zero.
func (s *space) floored(i int) bool {
	if i < len(s.random) {
		return !s.model.Random[i].Unbounded
	}
	return s.structure.floored(i - len(s.random))
}

// inside tells whether variances are positive and correlations below one.
func (s *space) inside(th []float64) bool {
	for i, v := range th[len(s.random):] {
		if s.structure.isVariance(i) && !(v > 1e-12) || s.structure.isCorrelation(i) && !(math.Abs(v) < 1) || s.structure.floored(i) && v < 0 {
			return false
		}
	}
	return true
}

// newton gives the step and the decrement over the parameters that are not bound.
func newton(g []float64, info *mat.SymDense, bound []bool) ([]float64, float64) {
	var free []int
	for i := range g {
		if !bound[i] {
			free = append(free, i)
		}
	}
	step := make([]float64, len(g))
	if len(free) == 0 {
		return step, 0
	}
	d := make([]float64, len(free))
	for i, a := range free {
		d[i] = math.Sqrt(math.Max(info.At(a, a), 1e-300))
	}
	h := mat.NewSymDense(len(free), nil)
	for i, a := range free {
		for j := i; j < len(free); j++ {
			h.SetSym(i, j, info.At(a, free[j])/d[i]/d[j])
		}
	}
	var e mat.EigenSym
	if !e.Factorize(h, true) {
		return step, math.Inf(1)
	}
	var v mat.Dense
	e.VectorsTo(&v)
	dec := 0.0
	for k, l := range e.Values(nil) {
		l = math.Max(math.Abs(l), 1e-8) // downhill where second derivatives are no information
		t := 0.0
		for i, a := range free {
			t += v.At(i, k) * g[a] / d[i]
		}
		dec += t * t / l
		for i, a := range free {
			step[a] -= v.At(i, k) * t / l / d[i]
		}
	}
	return step, dec
}

// scaled is a step down the gradient, each parameter in the unit of its information.
func scaled(g []float64, info *mat.SymDense, bound []bool) []float64 {
	step := make([]float64, len(g))
	for i := range g {
		if !bound[i] {
			step[i] = -g[i] / math.Max(info.At(i, i), 1e-300)
		}
	}
	return step
}
