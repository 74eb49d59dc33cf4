package dist

import (
	"math"
	"sync"

	"penwright/analysis/solve"
)

// minDF is the fewest degrees of freedom of the functions that integrate over the
// error mean square; below it the integrand reaches too far to the left.
const minDF = 0.05

// studentizedUpper returns P(M/S > q), where M has the decreasing tail
// tail(w) = P(M > w) and S² is an independent χ²/df.
//
//	P = ∫ f(u) tail(q eᵘ) du,  f(u) = √(df/π) exp(−stirling(df/2) + df(u + ½ − ½e²ᵘ)),  u = ln S
//
// By the trapezoidal rule in u: the integrand is analytic, falls off like eᵘ·ᵈᶠ to
// the left and doubly exponentially to the right, so the error falls as exp(−c/h).
// The step is halved until two sums agree to 2e-10, when the second is good to
// about the square of that. M is about shift, beyond which its tail falls like
// that of a normal variable or slower; shift only says where to start.
func studentizedUpper(q, df, shift float64, tail func(w float64) float64) float64 {
	// Beyond this the mixture is the tail itself, to 1e-9 relative at q = 15.
	if df > 1e13 {
		return tail(q)
	}
	lnPeak := 0.5*math.Log(df/math.Pi) - stirling(df/2)
	exponent := func(u float64) float64 { return df * (u - math.Expm1(2*u)/2) }
	integrand := func(u float64) float64 {
		return math.Exp(lnPeak+exponent(u)) * tail(q*math.Exp(u))
	}
	start := math.Log(likelyRoot(q, df, shift))
	// The peak of f has standard deviation 1/√(2df) in u.
	h := math.Min(0.2, 0.95/math.Sqrt(2*df))
	first := integrand(start)
	sum, largest := first, first
	// The integrand has one peak. Walk each way until it has been passed; far out it may be
	// zero for a while before it rises.
	walk := func(h float64) (steps float64) {
		previous := first
		for {
			steps++
			u := start + steps*h
			term := integrand(u)
			sum += term
			largest = math.Max(largest, term)
			if !(term > 1e-19*largest) && !(term > previous) && (largest > 0 || exponent(u) < -750) {
				return steps
			}
			previous = term
		}
	}
	right := walk(h)
	left := walk(-h)
	for range 8 {
		var between float64
		for k := -left; k < right; k++ {
			between += integrand(start + (k+0.5)*h)
		}
		agree := math.Abs(between-sum) <= 2e-10*sum
		sum += between
		h /= 2
		left *= 2
		right *= 2
		if agree {
			break
		}
	}
	return math.Min(1, sum*h)
}

// likelyRoot returns about the S at which M/S exceeds q most probably: where
// df(ln s − s²/2) − (qs − shift)²/2 is greatest, or 1 if M exceeds q there anyway.
func likelyRoot(q, df, shift float64) float64 {
	// In units of the greater of q and √df, so that squares do not overflow.
	unit := math.Max(math.Abs(q), math.Sqrt(df))
	q, root, shift := q/unit, math.Sqrt(df)/unit, shift/unit
	a := root*root + q*q
	s := (q*shift + math.Sqrt(q*q*shift*shift+4*root*root*a)) / (2 * a)
	if (q >= 0) == (s > 1) || !(s > 0) {
		return 1
	}
	return s
}

// studentizedQuantile returns q with upper(q) = p for a continuous decreasing tail.
// Where q must be positive, lowest is 0, else −Inf.
func studentizedQuantile(p, lowest float64, upper func(q float64) float64) float64 {
	switch {
	case !(p >= 0 && p <= 1):
		return math.NaN()
	case p == 0:
		return math.Inf(1)
	case p == 1:
		return lowest
	}
	// Solved in x = asinh q, in which the heavy tails of few degrees of freedom are near
	// at hand, on ln p in the upper half.
	miss := func(x float64) float64 {
		u := upper(math.Sinh(x))
		if p > 0.5 {
			return u - p
		}
		if u == 0 {
			return -math.MaxFloat64
		}
		return math.Log(u / p)
	}
	a, step := math.Asinh(2), 0.5
	fa := miss(a)
	if fa < 0 {
		step = -step
	}
	for {
		b := a + step
		if lowest == 0 && b < 0 {
			b = 0
		}
		if math.Abs(b) > 700 {
			return math.Copysign(math.Inf(1), b)
		}
		fb := miss(b)
		if (fb < 0) != (fa < 0) {
			x, err := solve.Root(miss, a, b, 1e-14)
			if err != nil {
				return math.NaN()
			}
			return math.Sinh(x)
		}
		if b == 0 && lowest == 0 {
			return 0
		}
		a = b
		step *= 1.5
	}
}

const (
	pieceWidth  = 1.0
	pieceDegree = 26
)

// interpolated is a tail function of one variable kept as Chebyshev series of its
// logarithm, each for a piece of the line one unit wide and computed when first
// asked for. It may be used by several goroutines at once.
type interpolated struct {
	tail     func(w float64) float64
	from, to float64
	pieces   []piece
}

type piece struct {
	once        sync.Once
	rough       bool // the series has not converged: the function is asked instead
	coefficient [pieceDegree + 1]float64
}

func interpolate(tail func(w float64) float64, from, to float64) *interpolated {
	return &interpolated{tail: tail, from: from, to: to, pieces: make([]piece, int(math.Ceil((to-from)/pieceWidth)))}
}

// at returns the tail at w, outside the interpolated range from the function itself.
func (f *interpolated) at(w float64) float64 {
	if !(w >= f.from && w < f.to) {
		return f.tail(w)
	}
	position := (w - f.from) / pieceWidth
	i := min(int(position), len(f.pieces)-1)
	p := &f.pieces[i]
	p.once.Do(func() {
		const n = pieceDegree + 1
		var value [n]float64
		for k := range value {
			x := math.Cos(math.Pi * (float64(k) + 0.5) / n)
			value[k] = math.Log(f.tail(f.from + pieceWidth*(float64(i)+0.5+0.5*x)))
		}
		for j := range p.coefficient {
			var c float64
			for k, v := range value {
				c += v * math.Cos(math.Pi*float64(j)*(float64(k)+0.5)/n)
			}
			p.coefficient[j] = c * 2 / n
		}
		p.coefficient[0] /= 2
		for _, c := range p.coefficient[pieceDegree-2:] {
			// Written so that NaN and infinities, from a tail that underflows, are rough too.
			if !(math.Abs(c) <= 1e-11) {
				p.rough = true
			}
		}
	})
	if p.rough {
		return f.tail(w)
	}
	// Clenshaw's recurrence.
	x := 4 * (position - float64(i) - 0.5)
	var b1, b2 float64
	for j := pieceDegree; j > 0; j-- {
		b1, b2 = p.coefficient[j]+x*b1-b2, b1
	}
	return math.Min(1, math.Exp(p.coefficient[0]+x/2*b1-b2))
}
