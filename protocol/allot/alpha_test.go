package allot

import (
	"fmt"
	"testing"

	"penwright/protocol/diag"
	"penwright/protocol/factor"
)

// resolvable writes t treatments in r replicates of blocks of k.
func resolvable(t, k, r int) string { return factorText("a", t) + resolvableText(t, k, r) }

func resolvableText(t, k, r int) string {
	return fmt.Sprintf("[[unit]]\nname = \"replicate\"\ncount = %d\n[[unit]]\nname = \"block\"\nwithin = \"replicate\"\ncount = %d\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = %d\nreceives = [\"a\"]\n", r, t/k, k)
}

// secondBound is an upper limit of the harmonic mean of the efficiency factors of t
// treatments in r replicates of blocks of k, in which two treatments meet as equally
// often as they can: with x = 1 − e, of which the sum and the least sum of squares are known,
// the parabola that meets 1/(1 − x) in 0 and touches it in c = Σx²/Σx lies below it, so
// that Σ 1/e is at least (Σx/c)/(1 − c) + t − 1 − Σx/c.
func secondBound(t, k, r int) (first, second float64) {
	s := t / k
	first = float64((t-1)*(r-1)) / float64((t-1)*(r-1)+r*(s-1))
	d := min(r*(s-1), t-1)
	// eigenvalues x = 1 − e of NN′/(rk) other than 1: Σx = s − 1, and Σx² from the concurrences.
	sum := float64(t)/float64(k) - 1
	pairs := t * (t - 1)
	meet := r * t * (k - 1)
	q, rest := meet/pairs, meet%pairs
	squares := float64(t*r*r) + float64(rest*(q+1)*(q+1)+(pairs-rest)*q*q)
	square := squares/float64(r*r*k*k) - 1
	c := square / sum
	n := sum / c
	if n > float64(d) {
		return first, first
	}
	return first, float64(t-1) / (n/(1-c) + float64(t-1) - n)
}

// TestAlpha: designs in replicates come within 2 % of the highest mean efficiency that
// counts allow. The bound of H. D. Patterson & E. R. Williams, Biometrika 63 (1976) 83-92,
// (t − 1)(r − 1)/((t − 1)(r − 1) + r(s − 1)), supposes equal factors; where concurrences
// cannot be equal the bound by their squares is lower, and nothing reaches the first.
// For 24 treatments in 3 replicates of blocks of 4 a published design has the harmonic
// mean .726488207448 (J. A. John & E. R. Williams, Cyclic and Computer Generated Designs
// (1995), p. 146).
func TestAlpha(t *testing.T) {
	for _, x := range []struct {
		t, k, r int
		least   float64
	}{
		{24, 4, 3, .726488207448}, {30, 5, 3, 0}, {48, 6, 4, 0}, {100, 10, 4, 0}, {42, 7, 2, 0}, {36, 6, 5, 0},
	} {
		plan := planOf(t, resolvable(x.t, x.k, x.r))
		a, list := New(plan, nil, "alpha")
		if list.HasErrors() {
			t.Errorf("%v: %v", x, list)
			continue
		}
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Errorf("%v: %v", x, list)
		}
		e := factor.HarmonicMean(factor.CanonicalEfficiency(factor.Factor{Level: plan.Coarse(2, 1), N: plan.Units[1].N}, factor.Factor{Level: a.Levels[0], N: x.t}))
		first, second := secondBound(x.t, x.k, x.r)
		if e < x.least || e < .98*second || e > second+1e-9 {
			t.Errorf("%v: harmonic mean %.6f, bounds %.6f and %.6f", x, e, first, second)
		}
	}
}
