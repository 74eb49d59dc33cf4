package mixed

import "math"

// structure is a residual covariance as a function of its parameters: of two times for
// repeated rows, of a group for independent ones.
type structure struct {
	kind   Kind
	times  []float64
	groups int
}

func (s structure) parameters() int {
	t := len(s.times)
	switch s.kind {
	case HeterogeneousSymmetric, HeterogeneousAutoregressive:
		return t + 1
	case Autoregressive:
		return 2
	case Antedependence:
		return 2*t - 1
	case Unstructured:
		return t * (t + 1) / 2
	}
	return s.groups
}

// isCorrelation tells whether parameter i is a correlation, which lies between −1 and 1.
func (s structure) isCorrelation(i int) bool {
	t := len(s.times)
	switch s.kind {
	case HeterogeneousSymmetric, HeterogeneousAutoregressive, Antedependence:
		return i >= t
	case Autoregressive:
		return i == 1
	}
	return false
}

// isVariance tells whether parameter i is a variance, which is positive.
func (s structure) isVariance(i int) bool {
	if s.kind == Unstructured {
		return i < len(s.times)
	}
	return !s.isCorrelation(i)
}

// floored tells whether parameter i is a correlation whose powers are not all of whole
// numbers, so that it has none below zero.
func (s structure) floored(i int) bool {
	if s.kind != Autoregressive && s.kind != HeterogeneousAutoregressive || !s.isCorrelation(i) {
		return false
	}
	for j := 1; j < len(s.times); j++ {
		if d := s.distance(0, j); d != math.Trunc(d) {
			return true
		}
	}
	return false
}

// covariance is that of times j and k (groups, for independent rows, where j = k).
func (s structure) covariance(th []float64, j, k int) float64 {
	t := len(s.times)
	switch s.kind {
	case Independent:
		return th[j]
	case Autoregressive:
		return th[0] * s.correlation(th, j, k)
	case Unstructured:
		if j == k {
			return th[j]
		}
		return th[t+pair(j, k)]
	}
	if j == k {
		return th[j]
	}
	return math.Sqrt(th[j]*th[k]) * s.correlation(th, j, k)
}

// pair numbers the pairs of times (1,0), (2,0), (2,1) …
func pair(j, k int) int {
	if j < k {
		j, k = k, j
	}
	return j*(j-1)/2 + k
}

func (s structure) correlation(th []float64, j, k int) float64 {
	if j == k {
		return 1
	}
	t := len(s.times)
	switch s.kind {
	case HeterogeneousSymmetric:
		return th[t]
	case Autoregressive:
		return power(th[1], s.distance(j, k))
	case HeterogeneousAutoregressive:
		return power(th[t], s.distance(j, k))
	}
	if j > k {
		j, k = k, j
	}
	c := 1.0
	for m := j; m < k; m++ {
		c *= th[t+m]
	}
	return c
}

func (s structure) distance(j, k int) float64 { return math.Abs(s.times[j] - s.times[k]) }

// nearest is the smallest distance of two times.
func (s structure) nearest() float64 {
	d := math.Inf(1)
	for j := range s.times {
		for k := range j {
			d = math.Min(d, s.distance(j, k))
		}
	}
	return d
}

// power is ρ^d; a negative ρ has a sign only at whole distances.
func power(rho, d float64) float64 {
	if rho < 0 && d != math.Trunc(d) {
		return math.NaN()
	}
	return math.Pow(rho, d)
}

// derivative is that of the covariance of j and k by parameter i.
func (s structure) derivative(th []float64, i, j, k int) float64 {
	t := len(s.times)
	switch s.kind {
	case Independent:
		return indicator(i == j)
	case Unstructured:
		if j == k {
			return indicator(i == j)
		}
		return indicator(i == t+pair(j, k))
	case Autoregressive:
		if i == 0 {
			return s.correlation(th, j, k)
		}
		return th[0] * s.correlationBy(th, i, j, k)
	}
	if j == k {
		return indicator(i == j)
	}
	root := math.Sqrt(th[j] * th[k])
	if i < t {
		if i != j && i != k {
			return 0
		}
		return root * s.correlation(th, j, k) / (2 * th[i])
	}
	return root * s.correlationBy(th, i, j, k)
}

// correlationBy is the derivative of the correlation of j and k by parameter i.
func (s structure) correlationBy(th []float64, i, j, k int) float64 {
	if j == k {
		return 0
	}
	switch s.kind {
	case HeterogeneousSymmetric:
		return 1
	case Autoregressive, HeterogeneousAutoregressive:
		d := s.distance(j, k)
		if d == 0 {
			return 0
		}
		if th[i] == 0 && s.floored(i) {
			// Of what begins to rise at zero the smallest power is first, be it steep or flat.
			return indicator(d == s.nearest())
		}
		return d * power(th[i], d-1)
	}
	if j > k {
		j, k = k, j
	}
	m := i - len(s.times)
	if m < j || m >= k {
		return 0
	}
	c := 1.0
	for l := j; l < k; l++ {
		if l != m {
			c *= th[len(s.times)+l]
		}
	}
	return c
}

// second is the derivative of the covariance of j and k by parameters a and b.
func (s structure) second(th []float64, a, b, j, k int) float64 {
	if s.kind == Independent || s.kind == Unstructured || j == k {
		return 0
	}
	if a > b {
		a, b = b, a
	}
	if s.kind == Autoregressive {
		switch {
		case b == 0:
			return 0
		case a == 0:
			return s.correlationBy(th, 1, j, k)
		}
		return th[0] * s.correlationBy2(th, 1, 1, j, k)
	}
	t := len(s.times)
	root := math.Sqrt(th[j] * th[k])
	c := s.correlation(th, j, k)
	touches := func(i int) bool { return i == j || i == k }
	switch {
	case b < t: // two variances
		if !touches(a) || !touches(b) {
			return 0
		}
		if a == b {
			return -root * c / (4 * th[a] * th[a])
		}
		return root * c / (4 * th[a] * th[b])
	case a < t:
		if !touches(a) {
			return 0
		}
		return root * s.correlationBy(th, b, j, k) / (2 * th[a])
	}
	return root * s.correlationBy2(th, a, b, j, k)
}

func (s structure) correlationBy2(th []float64, a, b, j, k int) float64 {
	switch s.kind {
	case HeterogeneousSymmetric:
		return 0
	case Autoregressive, HeterogeneousAutoregressive:
		d := s.distance(j, k)
		if d == 0 || d == 1 || th[a] == 0 && s.floored(a) {
			return 0
		}
		return d * (d - 1) * power(th[a], d-2)
	}
	if a == b {
		return 0
	}
	if j > k {
		j, k = k, j
	}
	t := len(s.times)
	for _, m := range []int{a - t, b - t} {
		if m < j || m >= k {
			return 0
		}
	}
	c := 1.0
	for l := j; l < k; l++ {
		if l != a-t && l != b-t {
			c *= th[t+l]
		}
	}
	return c
}

func indicator(b bool) float64 {
	if b {
		return 1
	}
	return 0
}
