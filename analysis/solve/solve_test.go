package solve

import (
	"errors"
	"math"
	"testing"
)

// Roots known in closed form, or to all printed digits from tables of constants
// (Abramowitz & Stegun 1964, ch. 1, 9: √2, π, first zero of J0).
func TestRoot(t *testing.T) {
	tests := []struct {
		name       string
		f          func(float64) float64
		a, b, want float64
	}{
		{"square root of two", func(x float64) float64 { return x*x - 2 }, 0, 2, math.Sqrt2},
		{"ends reversed", func(x float64) float64 { return x*x - 2 }, 2, 0, math.Sqrt2},
		{"pi", math.Sin, 3, 4, math.Pi},
		{"bessel", math.J0, 2, 3, 2.404825557695773},
		{"triple root", func(x float64) float64 { return (x - 1.5) * (x - 1.5) * (x - 1.5) }, 0, 10, 1.5},
		{"step", func(x float64) float64 { return math.Copysign(1, x-0.3) }, -1, 1, 0.3},
		{"pole at an end", func(x float64) float64 { return math.Log(x) + 3 }, 0, 1, math.Exp(-3)},
		{"steep", func(x float64) float64 { return math.Exp(50*x) - 1e9 }, -10, 10, math.Log(1e9) / 50},
		{"odd power", func(x float64) float64 { return x * (1 + x*x) }, -1, 4, 0},
	}
	for _, tt := range tests {
		n := 0
		x, err := Root(func(x float64) float64 { n++; return tt.f(x) }, tt.a, tt.b, 0)
		if err != nil {
			t.Errorf("%s: %v", tt.name, err)
			continue
		}
		if math.Abs(x-tt.want) > 1e-15*math.Max(1, math.Abs(tt.want)) {
			t.Errorf("%s: got %.17g want %.17g", tt.name, x, tt.want)
		}
		if n > 200 {
			t.Errorf("%s: %d evaluations", tt.name, n)
		}
	}
}

func TestRootRefuses(t *testing.T) {
	if _, err := Root(func(x float64) float64 { return x*x + 1 }, -1, 1, 0); !errors.Is(err, ErrNoBracket) {
		t.Errorf("no sign change: %v", err)
	}
	if _, err := Root(func(float64) float64 { return math.NaN() }, -1, 1, 0); !errors.Is(err, ErrNoBracket) {
		t.Errorf("NaN at the ends: %v", err)
	}
	f := func(x float64) float64 {
		if x == -1 || x == 1 {
			return x
		}
		return math.NaN()
	}
	if _, err := Root(f, -1, 1, 0); !errors.Is(err, ErrUndefined) {
		t.Errorf("NaN inside: %v", err)
	}
	if x, err := Root(func(x float64) float64 { return x }, 0, 5, 0); err != nil || x != 0 {
		t.Errorf("root at an end: %g %v", x, err)
	}
}

// Minima known in closed form, and that of the gamma function on (1, 2)
// (Abramowitz & Stegun 1964, 6.1: x = 1.4616321449683623, Γ = 0.8856031944108887).
func TestMinimum(t *testing.T) {
	tests := []struct {
		name             string
		f                func(float64) float64
		a, b, want, fmin float64
	}{
		{"parabola", func(x float64) float64 { return (x - 2) * (x - 2) }, -10, 30, 2, 0},
		{"ends reversed", func(x float64) float64 { return (x - 2) * (x - 2) }, 30, -10, 2, 0},
		{"gamma", math.Gamma, 1, 2, 1.4616321449683623, 0.8856031944108887},
		{"cosine", math.Cos, 0, 6, math.Pi, -1},
		{"corner", func(x float64) float64 { return math.Abs(x - 0.7) }, -3, 3, 0.7, 0},
		{"at an end", func(x float64) float64 { return x }, 1, 2, 1, 1},
		{"walls", func(x float64) float64 {
			if x < 0.5 {
				return math.Inf(1)
			}
			return x * x
		}, 0, 3, 0.5, 0.25},
	}
	for _, tt := range tests {
		x, fx, err := Minimum(tt.f, tt.a, tt.b, 1e-10)
		if err != nil {
			t.Errorf("%s: %v", tt.name, err)
			continue
		}
		if math.Abs(x-tt.want) > 1e-7*(1+math.Abs(tt.want)) || math.Abs(fx-tt.fmin) > 1e-7 {
			t.Errorf("%s: got %.12g, %.12g want %.12g, %.12g", tt.name, x, fx, tt.want, tt.fmin)
		}
	}
	if _, _, err := Minimum(func(float64) float64 { return math.NaN() }, 0, 1, 1e-8); !errors.Is(err, ErrUndefined) {
		t.Errorf("NaN: %v", err)
	}
}
