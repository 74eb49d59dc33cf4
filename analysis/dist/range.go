package dist

import "math"

// StudentizedRange is the distribution of the range of r independent standard normal
// values over an independent root mean square on df degrees of freedom. It keeps
// what does not depend on df, so that one value serves a whole family of comparisons,
// and may be used by several goroutines at once.
//
// For r from 2 to 200 and df from 1 to +Inf at least 9 digits of the upper tail,
// for P down to 1e-12 and beyond.
type StudentizedRange struct {
	tail *interpolated
}

// NewStudentizedRange returns the distribution for r ≥ 2 values; it panics if r < 2.
func NewStudentizedRange(r int) *StudentizedRange {
	return &StudentizedRange{tail: interpolate(newRange(r).upper, 0, 36)}
}

// Upper returns P(Q > q).
func (d *StudentizedRange) Upper(q, df float64) float64 {
	switch {
	case math.IsNaN(q) || !(df >= minDF):
		return math.NaN()
	case q <= 0:
		return 1
	case math.IsInf(q, 1):
		return 0
	}
	return studentizedUpper(q, df, 0, d.tail.at)
}

// Quantile returns q with P(Q > q) = upperP.
func (d *StudentizedRange) Quantile(upperP, df float64) float64 {
	if !(df >= minDF) {
		return math.NaN()
	}
	return studentizedQuantile(upperP, 0, func(q float64) float64 { return d.Upper(q, df) })
}

// StudentizedRangeUpper returns P(Q > q) for the range of r means over their standard
// error on df degrees of freedom. For many q of the same r a StudentizedRange is faster.
func StudentizedRangeUpper(q float64, r int, df float64) float64 {
	return NewStudentizedRange(r).Upper(q, df)
}

// StudentizedRangeQuantile returns q with P(Q > q) = upperP.
func StudentizedRangeQuantile(upperP float64, r int, df float64) float64 {
	return NewStudentizedRange(r).Quantile(upperP, df)
}

// normalRange is the range of r standard normal values: a grid over the largest of
// them, with what does not depend on the width.
type normalRange struct {
	h       float64
	power   float64   // r − 1
	weight  []float64 // r φ(z) Φ(z)ʳ⁻¹ h
	inverse []float64 // 1/Φ(z)
}

const rangeFrom, rangeTo = -8.5, 34.5

func newRange(r int) *normalRange {
	if r < 2 {
		panic("dist: a range needs two values")
	}
	// The largest of many values varies little: the step follows it.
	switch {
	case r > 500:
		return newRangeGrid(r, 0.0625)
	case r > 12:
		return newRangeGrid(r, 0.125)
	}
	return newRangeGrid(r, 0.25)
}

func newRangeGrid(r int, h float64) *normalRange {
	d := &normalRange{h: h, power: float64(r - 1)}
	for z := rangeFrom; z <= rangeTo; z += h {
		cdf := NormalUpper(-z)
		density := math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
		d.weight = append(d.weight, h*float64(r)*density*math.Exp(d.power*math.Log(cdf)))
		d.inverse = append(d.inverse, 1/cdf)
	}
	return d
}

// upper returns P(range > w), w ≥ 0.
//
//	P = r ∫ φ(z) {Φ(z)ʳ⁻¹ − [Φ(z) − Φ(z−w)]ʳ⁻¹} dz
//
// (Pearson & Hartley, Biometrika 32 (1942) 301, for the lower tail; subtracted here
// under the integral, so that no digits are lost far out). Trapezoidal rule.
func (d *normalRange) upper(w float64) float64 {
	if w > 54 {
		return 0 // below what float64 holds
	}
	// Far out the integrand lies around z = w/2 with standard deviation 1/√2.
	from := int((math.Max(rangeFrom, w/2-8.5) - rangeFrom) / d.h)
	to := int((math.Max(8.5, w/2+6.5) - rangeFrom) / d.h)
	var sum float64
	for i := from; i <= to && i < len(d.weight); i++ {
		z := rangeFrom + float64(i)*d.h
		ratio := NormalUpper(w-z) * d.inverse[i]
		if ratio >= 1 {
			sum += d.weight[i]
			continue
		}
		sum -= d.weight[i] * math.Expm1(d.power*math.Log1p(-ratio))
	}
	return math.Min(1, sum)
}
