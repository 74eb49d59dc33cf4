package strata

import (
	"math"

	"penwright/protocol/factor"
)

// MeanSquare is a mean square with its degrees of freedom.
type MeanSquare struct {
	DF int
	MS float64
}

// Efficiency says how many times the replication would have been needed without some of
// the units by which a design removed variation: blocks; rows, columns or both of a square.
// With removed their lines in the analysis, ν the degrees of freedom and error that of the
// design,
//
//	ratio = (Σ νᵢ MSᵢ + (ν_treatments + ν_error) MS_error) / (Σ νᵢ + ν_treatments + ν_error) MS_error
//
// corrected multiplies it by Fisher's (ν₁+1)(ν₂+3)/((ν₁+3)(ν₂+1)) for the error degrees of
// freedom ν₁ of the design and ν₂ = ν₁ + Σ νᵢ without the units.
//
// Source: F. Yates (1935); R. A. Fisher, The Design of Experiments, §74 (from memory).
func Efficiency(removed []MeanSquare, treatmentDF int, err MeanSquare) (ratio, corrected float64) {
	if err.DF <= 0 || !(err.MS > 0) {
		return math.NaN(), math.NaN()
	}
	own := float64(treatmentDF + err.DF)
	total, with := own*err.MS, own
	n2 := float64(err.DF)
	for _, m := range removed {
		if m.DF == 0 {
			continue
		}
		total += float64(m.DF) * m.MS
		with += float64(m.DF)
		n2 += float64(m.DF)
	}
	ratio = total / (with * err.MS)
	n1 := float64(err.DF)
	return ratio, ratio * (n1 + 1) * (n2 + 3) / ((n1 + 3) * (n2 + 1))
}

// CovariateEfficiency says how many times the replication would have been needed without
// a covariate: the error mean square without it over the effective one with it,
//
//	MS′ (1 + T/((t − 1) E))
//
// with T and E the sums of squares of the covariate for treatments, on treatmentDF = t − 1
// degrees of freedom, and for error. It also returns the effective mean square.
//
// Source: D. J. Finney, Biometrics 2 (1946) 53-59 (from memory).
func CovariateEfficiency(plainMS, adjustedMS, treatmentSS, errorSS float64, treatmentDF int) (ratio, effectiveMS float64) {
	if treatmentDF <= 0 || !(errorSS > 0) || !(adjustedMS > 0) {
		return math.NaN(), math.NaN()
	}
	effectiveMS = adjustedMS * (1 + treatmentSS/(float64(treatmentDF)*errorSS))
	return plainMS / effectiveMS, effectiveMS
}

// Average gives the unweighted mean of y in each class of a unit, with which a design goes
// on where its sampling units differ in number; NaN for an empty class.
func Average(y []float64, unit factor.Factor) []float64 {
	if len(y) != unit.Len() {
		panic("strata: response and unit differ in length")
	}
	if len(y) == 0 {
		return make([]float64, unit.N)
	}
	d := make([]float64, len(y))
	for i, v := range y {
		d[i] = v - y[0]
	}
	means := classMeans(unit.Level, unit.N, d)
	for c, n := range unit.Counts() {
		if n == 0 {
			means[c] = math.NaN()
		} else {
			means[c] += y[0]
		}
	}
	return means
}

// Within pools the variation among the rows of each class of a unit: the sampling
// variance, its degrees of freedom and the harmonic mean of the rows in a class, by which
// the sampling variance is divided in the variance of a class mean.
func Within(y []float64, unit factor.Factor) (ss float64, df int, harmonic float64) {
	if len(y) != unit.Len() {
		panic("strata: response and unit differ in length")
	}
	if len(y) == 0 {
		return 0, 0, math.NaN()
	}
	d := make([]float64, len(y))
	for i, v := range y {
		d[i] = v - y[0]
	}
	means := classMeans(unit.Level, unit.N, d)
	var s sum
	for i, c := range unit.Level {
		e := d[i] - means[c]
		s.add(e * e)
	}
	classes, inverse := 0, 0.0
	for _, n := range unit.Counts() {
		if n > 0 {
			classes++
			inverse += 1 / float64(n)
		}
	}
	return s.value(), len(y) - classes, float64(classes) / inverse
}
