package dist

import "math"

// Dunnett is the distribution of the largest of k comparisons that share one
// standard of reference, such as treatments against a control:
//
//	max Tᵢ (one-sided) or max |Tᵢ| (two-sided),  Tᵢ = Xᵢ/S,  corr(Xᵢ, Xⱼ) = λᵢλⱼ
//
// with Xᵢ standard normal and S an independent root mean square. With nᵢ units on
// treatment i and n₀ on the control λᵢ = √(nᵢ/(nᵢ+n₀)) (Dunnett, JASA 50 (1955) 1096,
// Biometrics 20 (1964) 482). It keeps what does not depend on df, so that one value
// serves a whole family, and may be used by several goroutines at once.
//
// For k from 1 to 50 and df from 1 to +Inf at least 9 digits of the upper tail.
type Dunnett struct {
	tail   *interpolated
	lowest float64
}

// NewDunnett returns the distribution for correlations λᵢλⱼ; each −1 < λᵢ < 1 and
// there is at least one, else it panics. Greater and Less are the same one-sided
// distribution: the caller turns the sign of the statistic.
func NewDunnett(lambda []float64, side Side) *Dunnett {
	if len(lambda) == 0 {
		panic("dist: no comparisons with a control")
	}
	m := &normalMaximum{twoSided: side == Two, slope: 1}
	for _, l := range lambda {
		if !(math.Abs(l) < 1) {
			panic("dist: a correlation with the control outside (-1, 1)")
		}
		if m.twoSided {
			l = math.Abs(l) // the sign of Xᵢ does not matter
		}
		m.add(l)
	}
	if m.twoSided {
		return &Dunnett{tail: interpolate(m.upper, 0, 36)}
	}
	return &Dunnett{tail: interpolate(m.upper, -9, 36), lowest: math.Inf(-1)}
}

// Upper returns P(max > t), for two sides P(max |T| > t).
func (d *Dunnett) Upper(t, df float64) float64 {
	switch {
	case math.IsNaN(t) || !(df >= minDF):
		return math.NaN()
	case t <= d.lowest:
		return 1
	case math.IsInf(t, 1):
		return 0
	}
	return studentizedUpper(t, df, 0, d.tail.at)
}

// Quantile returns t with P(max > t) = upperP.
func (d *Dunnett) Quantile(upperP, df float64) float64 {
	if !(df >= minDF) {
		return math.NaN()
	}
	return studentizedQuantile(upperP, d.lowest, func(t float64) float64 { return d.Upper(t, df) })
}

// DunnettUpper returns P(max > t) as Dunnett.Upper does, for a single t.
func DunnettUpper(t float64, lambda []float64, df float64, side Side) float64 {
	return NewDunnett(lambda, side).Upper(t, df)
}

// DunnettQuantile returns t with P(max > t) = upperP.
func DunnettQuantile(upperP float64, lambda []float64, df float64, side Side) float64 {
	return NewDunnett(lambda, side).Quantile(upperP, df)
}

// normalMaximum is the maximum of normal variables Xᵢ = √(1−λᵢ²) Yᵢ + λᵢ Z, with the
// Y and Z independent, or of their absolute values.
type normalMaximum struct {
	twoSided bool
	group    []maximumGroup
	slope    float64 // least √(1−λ²)/|λ|, at most 1: the width of the steepest step in z
	steepest float64 // greatest |λ|
}

// maximumGroup is a set of variables that share λ.
type maximumGroup struct {
	lambda, rest float64 // rest = √(1−λ²)
	count        float64
}

func (m *normalMaximum) add(lambda float64) {
	for i := range m.group {
		if m.group[i].lambda == lambda {
			m.group[i].count++
			return
		}
	}
	g := maximumGroup{lambda: lambda, rest: math.Sqrt((1 - lambda) * (1 + lambda)), count: 1}
	m.group = append(m.group, g)
	m.steepest = math.Max(m.steepest, math.Abs(lambda))
	if lambda != 0 {
		m.slope = math.Min(m.slope, g.rest/math.Abs(lambda))
	}
}

// exceed returns P(max > w | Z = z), accurate where it counts: what lies below
// 1e-17 of P(X₁ > w) when weighted with φ(z) may be left out.
func (m *normalMaximum) exceed(w, z float64) float64 {
	negligible := math.Max(0, w)*math.Max(0, w) + 88 - z*z
	var p float64
	for _, g := range m.group {
		x := (w - g.lambda*z) / g.rest
		var one float64
		if x < 0 || x*x < negligible {
			one = NormalUpper(x)
		}
		if m.twoSided {
			if x = (w + g.lambda*z) / g.rest; x < 0 || x*x < negligible {
				one += NormalUpper(x)
			}
		}
		switch {
		case one >= 1:
			return 1
		case g.count == 1:
			p += one * (1 - p)
		case one > 0:
			p -= math.Expm1(g.count*math.Log1p(-one)) * (1 - p)
		}
		if 1-p < 1e-17 {
			return 1
		}
	}
	return p
}

// upper returns P(max > w) = ∫ φ(z) P(max > w | z) dz by the trapezoidal rule, the step
// halved until two sums agree to 1e-10.
func (m *normalMaximum) upper(w float64) float64 {
	if w > 37.5 {
		return 0 // below what float64 holds, for any k
	}
	if w < -9 {
		return 1 // P(X < −9) is 1e-19
	}
	if m.steepest == 0 {
		return m.exceed(w, 0)
	}
	// Beyond this φ(z) is 1e-17 of P(X₁ > w).
	to := math.Sqrt(80 + math.Max(0, w)*math.Max(0, w))
	from := -to
	h := 0.6 * math.Min(1, math.Max(m.slope, 0.02))
	n := math.Ceil(to / h)
	h = to / n
	if m.twoSided {
		from = 0 // the integrand is even
	}
	at := func(z float64) float64 { return math.Exp(-z*z/2) * m.exceed(w, z) }
	sum := (at(from) + at(to)) / 2
	for z := from + h; z < to-h/2; z += h {
		sum += at(z)
	}
	for range 6 {
		var between float64
		for z := from + h/2; z < to; z += h {
			between += at(z)
		}
		agree := math.Abs(between-sum) <= 1e-10*sum
		sum += between
		h /= 2
		if agree {
			break
		}
	}
	p := sum * h / math.Sqrt(2*math.Pi)
	if m.twoSided {
		p *= 2
	}
	return math.Min(1, p)
}
