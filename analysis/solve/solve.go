// Package solve finds a root and a minimum of a function of one variable.
//
// Both methods need no derivative, never leave the interval they are given, and
// converge faster than bisection where the function is smooth.
package solve

import (
	"errors"
	"math"
)

// ErrNoBracket is returned by Root when the function has the same sign at both
// ends of the interval, or is NaN at one of them.
var ErrNoBracket = errors.New("solve: function does not change sign over the interval")

// ErrUndefined is returned when the function is NaN inside the interval.
var ErrUndefined = errors.New("solve: function is undefined inside the interval")

const epsilon = 0x1p-52

// maxIterations bounds the work. Brent's root needs at most about the square of
// the number of bisections that would do, and in practice a tenth of this.
const maxIterations = 4000

// Root returns x in [a, b] at which the continuous function f changes sign.
//
// f(a) and f(b) have opposite signs, or one of them is zero; a and b may stand
// in either order, and f may be ±Inf at the ends. The sign change lies within
// 4ε|x| + tol of the returned x, where ε is the spacing of float64 at one; tol = 0
// asks for all that float64 holds.
//
// Source: R. P. Brent, Algorithms for Minimization without Derivatives (1973),
// chapter 4: inverse quadratic interpolation, the secant, and bisection where
// neither is safe.
func Root(f func(x float64) float64, a, b, tol float64) (float64, error) {
	fa, fb := f(a), f(b)
	switch {
	case math.IsNaN(fa) || math.IsNaN(fb):
		return math.NaN(), ErrNoBracket
	case fa == 0:
		return a, nil
	case fb == 0:
		return b, nil
	case (fa > 0) == (fb > 0):
		return math.NaN(), ErrNoBracket
	}
	// b is the best estimate, a the one before, and the root lies between b and c.
	c, fc := a, fa
	d := b - a
	e := d
	for range maxIterations {
		if (fb > 0) == (fc > 0) {
			c, fc = a, fa
			d = b - a
			e = d
		}
		if math.Abs(fc) < math.Abs(fb) {
			a, b, c = b, c, b
			fa, fb, fc = fb, fc, fb
		}
		step := 2*epsilon*math.Abs(b) + tol/2
		half := (c - b) / 2
		if math.Abs(half) <= step || fb == 0 {
			return b, nil
		}
		if math.Abs(e) < step || math.Abs(fa) <= math.Abs(fb) || math.IsInf(fa, 0) || math.IsInf(fc, 0) {
			d, e = half, half
		} else {
			var p, q float64
			s := fb / fa
			if a == c {
				p = 2 * half * s
				q = 1 - s
			} else {
				q = fa / fc
				r := fb / fc
				p = s * (2*half*q*(q-r) - (b-a)*(r-1))
				q = (q - 1) * (r - 1) * (s - 1)
			}
			if p > 0 {
				q = -q
			} else {
				p = -p
			}
			if 2*p < math.Min(3*half*q-math.Abs(step*q), math.Abs(e*q)) {
				e, d = d, p/q
			} else {
				d, e = half, half
			}
		}
		a, fa = b, fb
		if math.Abs(d) > step {
			b += d
		} else {
			b += math.Copysign(step, half)
		}
		fb = f(b)
		if math.IsNaN(fb) {
			return math.NaN(), ErrUndefined
		}
	}
	return b, nil
}

// Minimum returns a local minimum x of f in the open interval (a, b), and f(x).
//
// If f has one minimum in the interval it is that one, to about √ε|x| + tol; a
// minimum at an end is approached to that distance but f is never evaluated at
// the ends. a and b may stand in either order. tol > 0 is advisable: a minimum
// is flat, and digits beyond half of float64 are not to be had from values of f.
//
// Source: R. P. Brent, Algorithms for Minimization without Derivatives (1973),
// chapter 5: golden section with parabolic interpolation.
func Minimum(f func(x float64) float64, a, b, tol float64) (x, fx float64, err error) {
	if a > b {
		a, b = b, a
	}
	golden := (3 - math.Sqrt(5)) / 2
	x = a + golden*(b-a)
	v, w := x, x
	fx = f(x)
	if math.IsNaN(fx) {
		return math.NaN(), math.NaN(), ErrUndefined
	}
	fv, fw := fx, fx
	var d, e float64
	for range maxIterations {
		middle := (a + b) / 2
		step := math.Sqrt(epsilon)*math.Abs(x) + tol/3
		if math.Abs(x-middle) <= 2*step-(b-a)/2 {
			break
		}
		var p, q, r float64
		if math.Abs(e) > step {
			r = (x - w) * (fx - fv)
			q = (x - v) * (fx - fw)
			p = (x-v)*q - (x-w)*r
			q = 2 * (q - r)
			if q > 0 {
				p = -p
			} else {
				q = -q
			}
			r, e = e, d
		}
		if math.Abs(p) < math.Abs(q*r/2) && p > q*(a-x) && p < q*(b-x) {
			d = p / q
			if u := x + d; u-a < 2*step || b-u < 2*step {
				d = math.Copysign(step, middle-x)
			}
		} else {
			if x < middle {
				e = b - x
			} else {
				e = a - x
			}
			d = golden * e
		}
		u := x + d
		if math.Abs(d) < step {
			u = x + math.Copysign(step, d)
		}
		fu := f(u)
		if math.IsNaN(fu) {
			return math.NaN(), math.NaN(), ErrUndefined
		}
		if fu <= fx {
			if u < x {
				b = x
			} else {
				a = x
			}
			v, fv = w, fw
			w, fw = x, fx
			x, fx = u, fu
			continue
		}
		if u < x {
			a = u
		} else {
			b = u
		}
		switch {
		case fu <= fw || w == x:
			v, fv = w, fw
			w, fw = u, fu
		case fu <= fv || v == x || v == w:
			v, fv = u, fu
		}
	}
	return x, fx, nil
}
