// Package residual judges a fit by what it leaves over: standardized residuals and
// influence, outliers, normality, equal variances, additivity, and the way spread grows
// with the mean. It takes residuals and leverages from any fit and knows no text.
package residual

import (
	"errors"
	"math"

	"penwright/analysis/dist"
)

// Case is one row of a fit. Internal, Deleted and Cook are NaN where the row alone
// determines its fitted value (leverage 1) or where nothing is left to estimate the
// error from.
type Case struct {
	Residual float64 // in units of the response
	Leverage float64 // diagonal of the projection on the model
	Internal float64 // e / √(s²(1 − h))
	Deleted  float64 // the same with s² from the other rows: a t on df − 1
	Cook     float64 // squared shift of all fitted values when the row is left out, over rank·s²
}

// Cases standardizes residuals.
//
//	tᵢ = eᵢ/√(s²(1 − hᵢ)),  t*ᵢ = tᵢ √((ν − 1)/(ν − tᵢ²)),  Dᵢ = tᵢ² hᵢ/((1 − hᵢ) p)
//
// residual and leverage have one value per row; ms is the error mean square on df degrees
// of freedom; rank is p, the rank of the model.
//
// Source: R. D. Cook, Technometrics 19 (1977) 15-18; R. D. Cook & S. Weisberg, Residuals
// and Influence in Regression (1982), ch. 2 (from memory).
func Cases(residual, leverage []float64, ms float64, df, rank int) []Case {
	if len(residual) != len(leverage) {
		panic("residual: residuals and leverages differ in number")
	}
	out := make([]Case, len(residual))
	nu := float64(df)
	for i, e := range residual {
		h := leverage[i]
		c := Case{Residual: e, Leverage: h, Internal: math.NaN(), Deleted: math.NaN(), Cook: math.NaN()}
		if free := 1 - h; free > 1e-10 && df > 0 && ms > 0 {
			c.Internal = e / math.Sqrt(ms*free)
			t2 := c.Internal * c.Internal
			c.Cook = t2 * h / (free * float64(rank))
			if df > 1 {
				// t² reaches ν when the others fit exactly
				c.Deleted = c.Internal * math.Sqrt((nu-1)/math.Max(0, nu-t2))
			}
		}
		out[i] = c
	}
	return out
}

// Outlier is the case with the largest deleted residual and its two-sided P, multiplied
// by the number of cases that have one (Bonferroni), at most 1. df is that of the fit.
// The index is -1 when no case has one.
func Outlier(cases []Case, df int) (index int, deleted, p float64) {
	index = -1
	n := 0
	for i, c := range cases {
		if math.IsNaN(c.Deleted) {
			continue
		}
		n++
		if index < 0 || math.Abs(c.Deleted) > math.Abs(deleted) {
			index, deleted = i, c.Deleted
		}
	}
	if index < 0 {
		return -1, math.NaN(), math.NaN()
	}
	return index, deleted, math.Min(1, float64(n)*dist.TTwoSided(deleted, float64(df-1)))
}

// OutlierLimit is the deleted residual that the Bonferroni test at level alpha asks of
// the largest of n, for a fit with df error degrees of freedom. NaN for df < 2.
func OutlierLimit(alpha float64, n, df int) float64 {
	if df < 2 || n < 1 {
		return math.NaN()
	}
	return dist.TQuantile(alpha/float64(2*n), float64(df-1))
}

// Test is a statistic with its P. ErrorDF is 0 for chi-squared and for statistics
// without degrees of freedom.
type Test struct {
	Statistic   float64
	DF, ErrorDF int
	P           float64
}

// Conditions under which a test cannot be made.
var (
	ErrFew     = errors.New("residual: too few values")
	ErrMany    = errors.New("residual: too many values")
	ErrSpread  = errors.New("residual: values do not vary")
	ErrAliased = errors.New("residual: nothing is left to tell non-additivity from the model")
	ErrSign    = errors.New("residual: a mean is not positive")
)
