package num

import (
	"math"
	"testing"
)

func TestFixed(t *testing.T) {
	for _, c := range []struct {
		x    float64
		d    int
		want string
	}{
		{x: -1.25, d: 1, want: "−1.2"}, {x: -0.04, d: 1, want: "0.0"}, {x: 3, d: 2, want: "3.00"},
		{x: math.NaN(), d: 2, want: Absent}, {x: math.Inf(-1), d: 2, want: "−∞"}, {x: 12.5, d: -1, want: "12"},
	} {
		if got := Fixed(c.x, c.d); got != c.want {
			t.Errorf("Fixed(%v, %d) = %q, want %q", c.x, c.d, got, c.want)
		}
	}
}

func TestP(t *testing.T) {
	for _, c := range []struct {
		p    float64
		want string
	}{
		{p: 0, want: "< 0.001"}, {p: 0.000999, want: "< 0.001"}, {p: 0.001, want: "0.001"}, {p: 0.0499, want: "0.050"},
		{p: 0.0496, want: "0.050"}, {p: 0.0994, want: "0.099"}, {p: 0.0996, want: "0.10"}, {p: 0.345, want: "0.34"}, {p: 1, want: "1.00"},
		{p: math.NaN(), want: Absent},
	} {
		if got := P(c.p); got != c.want {
			t.Errorf("P(%v) = %q, want %q", c.p, got, c.want)
		}
	}
}

func TestSEDecimals(t *testing.T) {
	for _, c := range []struct {
		se   float64
		want int
	}{{se: 7.08, want: 1}, {se: 0.0996, want: 2}, {se: 9.96, want: 0}, {se: 166, want: 0}, {se: 0.00123, want: 4}, {se: 0, want: 0}, {se: math.NaN(), want: 0}} {
		if got := SEDecimals(c.se); got != c.want {
			t.Errorf("SEDecimals(%v) = %d, want %d", c.se, got, c.want)
		}
	}
}

func TestDF(t *testing.T) {
	for _, c := range []struct {
		df   float64
		want string
	}{{df: 12, want: "12"}, {df: 11.9999999999, want: "12"}, {df: 15.4788, want: "15.5"}} {
		if got := DF(c.df); got != c.want {
			t.Errorf("DF(%v) = %q, want %q", c.df, got, c.want)
		}
	}
}

func TestUnit(t *testing.T) {
	for _, c := range []struct{ n, u, want string }{
		{n: "3.2", u: "g/d", want: "3.2\u202fg/d"}, {n: "5", u: "[lb_av]/wk", want: "5\u202flb/wk"}, {n: "5", u: "", want: "5"},
		{n: Absent, u: "kg", want: Absent}, {n: "12", u: "%", want: "12\u202f%"},
	} {
		if got := Unit(c.n, c.u); got != c.want {
			t.Errorf("Unit(%q, %q) = %q, want %q", c.n, c.u, got, c.want)
		}
	}
	if got := Count(1234567); got != "1\u2009234\u2009567" {
		t.Errorf("Count = %q", got)
	}
}
