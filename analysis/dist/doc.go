// Package dist holds the distributions that the analyses refer to: their upper
// tails, accurate far out, and their quantiles.
//
// A function named XUpper returns P(X > x). An argument called upperP is the
// probability above the quantile, so that XUpper(XQuantile(upperP)) = upperP
// and no caller subtracts a small probability from one. Degrees of freedom are
// any positive number, +Inf included; those of ranges, maxima, comparisons with a
// control and noncentral t at least 0.05. An argument outside its domain, or NaN,
// gives NaN.
//
// The incomplete beta and gamma functions are our own, because tails of 1e-300
// and degrees of freedom of a million must both keep ten digits; the distributions
// of ranges, maxima and comparisons with a control are integrals by the trapezoidal
// rule, which for analytic integrands that die out at both ends converges
// exponentially in the number of points.
package dist
