// Package power computes what a number of replicates buys: the power of tests, the
// difference that a power lets one detect, the width of an interval, and how much of its
// replication a layout loses to what it must adjust for.
//
// It knows numbers alone. A difference stands beside its standard error, so that one
// set of functions serves every design: for two of t means of r units each the standard
// error is σ√(2/r), for a difference of differences σ√(4/r), for a contrast with weights
// w σ√(Σ w²/r), and each divided by √E where the layout leaves only the share E.
package power

import (
	"math"

	"penwright/analysis/dist"
	"penwright/analysis/solve"
)

// Kind is how a difference is judged.
type Kind int

// The kinds of tests.
const (
	F           Kind = iota // of the equality of several means
	T                       // of one difference or contrast
	Equivalence             // two one-sided tests against a margin on either side of zero
)

// Test is a test at level Alpha. DF1 is used by F, Sides (1 or 2) by T, Margin by
// Equivalence; DF is that of the error.
type Test struct {
	Kind   Kind
	Alpha  float64
	Sides  int
	DF1    float64
	DF     float64
	Margin float64
}

// Power is the probability that the test shows what it is for when the true difference
// is difference and its standard error is se:
//
//	F            P(F′(DF1, DF, λ) > F α),  λ = (difference/se)²
//	T            P(|t′| > t α/2) or P(t′ > t α),  noncentrality difference/se
//	Equivalence  see TwoOneSided
//
// λ of F is that of two means the difference apart with all others midway between them,
// which is the smallest that such a difference can have: r difference²/(2σ²) for r units
// a mean. It is NaN outside 0 < Alpha < 1, df > 0, se > 0.
//
// Source: P. C. Tang, Statist. Res. Mem. 2 (1938) 126-157; R. E. Odeh & M. Fox, Sample
// Size Choice (1975) (both from memory).
func (t Test) Power(difference, se float64) float64 {
	if !(t.Alpha > 0 && t.Alpha < 1) || !(t.DF > 0) || !(se > 0) || math.IsNaN(difference) {
		return math.NaN()
	}
	d := difference / se
	switch t.Kind {
	case F:
		if !(t.DF1 > 0) {
			return math.NaN()
		}
		if lambda := d * d; lambda < far {
			return dist.NoncentralFUpper(dist.FQuantile(t.Alpha, t.DF1, t.DF), t.DF1, t.DF, lambda)
		}
		return 1
	case Equivalence:
		return TwoOneSided(t.Alpha, t.DF, d, t.Margin/se)
	}
	if d*d >= far {
		if t.Sides == 1 && d < 0 {
			return 0
		}
		return 1
	}
	if t.Sides == 1 {
		return dist.NoncentralTUpper(dist.TQuantile(t.Alpha, t.DF), t.DF, d)
	}
	x := dist.TQuantile(t.Alpha/2, t.DF)
	return math.Min(1, dist.NoncentralTUpper(x, t.DF, d)+dist.NoncentralTUpper(x, t.DF, -d))
}

// far is a noncentrality λ at which every test that leaves an error has a power of 1 to
// all digits that are asked for, unless its critical value is as far out.
const far = 1e8

// Detectable is the difference at which the power is the one given; for Equivalence it
// is the margin at which it is, with the true difference given in at. It is NaN where no
// difference reaches the power, as for a power not above Alpha.
func (t Test) Detectable(power, se, at float64) float64 {
	if !(power > 0 && power < 1) || !(se > 0) || !(t.DF > 0) {
		return math.NaN()
	}
	short := func(x float64) float64 { return t.Power(x*se, se) - power }
	low := 0.0
	if t.Kind == Equivalence {
		low = math.Abs(at) / se
		short = func(x float64) float64 {
			wide := t
			wide.Margin = x * se
			return wide.Power(at, se) - power
		}
	}
	if !(short(low) < -1e-12) { // a power of α needs no difference
		return math.NaN()
	}
	step := 1.0
	for !(short(low+step) >= 0) {
		if step *= 2; step*step >= far {
			return math.NaN()
		}
	}
	x, err := solve.Root(short, low, low+step, 1e-13)
	if err != nil {
		return math.NaN()
	}
	return x * se
}

// HalfWidth is what an interval of confidence 1 − alpha reaches on either side of an
// estimate, or for sides = 1 on the one side it has, with the standard error se on df
// degrees of freedom.
func HalfWidth(alpha float64, sides int, df, se float64) float64 {
	if sides != 1 {
		alpha /= 2
	}
	return dist.TQuantile(alpha, df) * se
}

// TwoOneSided is the power of two one-sided t tests at level alpha that a difference
// lies within a margin on either side of zero, difference and margin being divided by
// the standard error of the estimated difference: with s the root of the error mean
// square over σ, on df degrees of freedom, and t the upper α point of Student's t,
//
//	P = ∫₀^(m/t) [Φ(m − t s − d) − Φ(−m + t s − d)] f(s) ds
//
// It is exact, by integration: 10 digits where it is above 1e-6.
//
// Source: D. J. Schuirmann, J. Pharmacokin. Biopharm. 15 (1987) 657-680; K. F. Phillips,
// J. Pharmacokin. Biopharm. 18 (1990) 137-144 (both from memory).
func TwoOneSided(alpha, df, difference, margin float64) float64 {
	if !(alpha > 0 && alpha < 0.5) || !(df > 0) || math.IsNaN(difference) || !(margin >= 0) {
		return math.NaN()
	}
	t := dist.TQuantile(alpha, df)
	d := math.Abs(difference)
	// What lies outside holds less than 1e-17 of the chances.
	from := 0.0
	if df > 40 {
		from = math.Max(0, 1-9/math.Sqrt(2*df))
	}
	to := math.Min(margin/t, math.Sqrt(dist.ChiSquaredQuantile(1e-17, df)/df))
	if !(to > from) {
		return 0
	}
	lg, _ := math.Lgamma(df / 2)
	constant := math.Ln2 + df/2*math.Log(df/2) - lg
	inside := func(s float64) float64 {
		a, b := margin-t*s-d, margin-t*s+d
		return 1 - dist.NormalUpper(a) - dist.NormalUpper(b)
	}
	sum := integrate(func(s float64) float64 {
		return inside(s) * math.Exp(constant+(df-1)*math.Log(s)-df*s*s/2)
	}, from, to)
	return math.Min(1, math.Max(0, sum))
}
