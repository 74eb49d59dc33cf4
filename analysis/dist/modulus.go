package dist

import "math"

// MaximumModulusUpper returns P(max |Tᵢ| > t) for k ≥ 1 independent standard normal values
// over one independent root mean square on df degrees of freedom, the studentized
// maximum modulus (Stoline & Ury, Technometrics 21 (1979) 87). Panics if k < 1.
func MaximumModulusUpper(t float64, k int, df float64) float64 {
	if k < 1 {
		panic("dist: a maximum needs a value")
	}
	switch {
	case math.IsNaN(t) || !(df >= minDF):
		return math.NaN()
	case t <= 0:
		return 1
	case math.IsInf(t, 1):
		return 0
	}
	return studentizedUpper(t, df, 0, func(w float64) float64 {
		return -math.Expm1(float64(k) * math.Log1p(-math.Erfc(w/math.Sqrt2)))
	})
}

// MaximumModulusQuantile returns t with P(max |Tᵢ| > t) = upperP.
func MaximumModulusQuantile(upperP float64, k int, df float64) float64 {
	if !(df >= minDF) {
		return math.NaN()
	}
	return studentizedQuantile(upperP, 0, func(t float64) float64 { return MaximumModulusUpper(t, k, df) })
}

// Duncan holds the studentized ranges of 2 to r values, by which Duncan's multiple
// range test judges a range of p means at the level 1 − (1−α)ᵖ⁻¹.
//
// Its critical values never fall with p: for each p the greatest of those for 2 to p
// counts (D. B. Duncan, Biometrics 11 (1955) 1; H. L. Harter, Biometrics 16 (1960) 671).
type Duncan struct {
	ranges []*StudentizedRange // of 2, 3, …
}

// NewDuncan returns the levels for up to r ≥ 2 means; it panics if r < 2.
func NewDuncan(r int) *Duncan {
	if r < 2 {
		panic("dist: a range needs two values")
	}
	d := &Duncan{}
	for p := 2; p <= r; p++ {
		d.ranges = append(d.ranges, NewStudentizedRange(p))
	}
	return d
}

// P returns the least α at which a range q over p means is declared significant,
// 2 ≤ p ≤ r.
func (d *Duncan) P(q float64, p int, df float64) float64 {
	var most float64
	for k := 2; k <= p; k++ {
		upper := d.ranges[k-2].Upper(q, df)
		// 1 − (1 − upper)^(1/(k−1))
		most = math.Max(most, -math.Expm1(math.Log1p(-upper)/float64(k-1)))
	}
	return most
}

// Quantile returns the critical range of p means at level alpha, 2 ≤ p ≤ r.
func (d *Duncan) Quantile(alpha float64, p int, df float64) float64 {
	var most float64
	for k := 2; k <= p; k++ {
		level := -math.Expm1(float64(k-1) * math.Log1p(-alpha))
		most = math.Max(most, d.ranges[k-2].Quantile(level, df))
	}
	return most
}
