package residual

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

// Counts of arrangements in the layout of Swed & Eisenhart 1943, from memory, recomputed.
func TestRuns(t *testing.T) {
	for _, c := range []struct {
		m, n, r    int
		count, all float64
	}{
		{5, 5, 2, 2, 252}, {5, 5, 3, 10, 252}, {5, 5, 4, 42, 252}, {5, 5, 5, 90, 252},
		{6, 8, 3, 14, 3003}, {6, 8, 4, 84, 3003}, {6, 8, 5, 259, 3003}, {10, 10, 6, 3422, 184756},
	} {
		low, high := runsTails(c.r, c.m, c.n)
		near(t, "P(R ≤ r)", low, c.count/c.all, 1e-11)
		next, _ := runsTails(c.r-1, c.m, c.n)
		near(t, "P(R ≥ r)", high, 1-next, 1e-11)
	}
	// second road: every arrangement of four and three
	counts := map[int]float64{}
	for set := range 1 << 7 {
		ones, runs := 0, 1
		for i := range 7 {
			ones += set >> i & 1
			if i > 0 && set>>i&1 != set>>(i-1)&1 {
				runs++
			}
		}
		if ones == 4 {
			counts[runs]++
		}
	}
	var below float64
	for r := 2; r <= 7; r++ {
		below += counts[r]
		low, _ := runsTails(r, 4, 3)
		near(t, "enumerated", low, below/35, 1e-12)
	}
	got, err := Runs([]float64{1, 2, 0, 3, -1, -2, -1, -5, 4, 1})
	if err != nil || got.Statistic != 3 {
		t.Errorf("%+v, %v", got, err)
	}
	low, _ := runsTails(3, 5, 4)
	near(t, "P", got.P, 2*low, 1e-12)
	if _, err := Runs([]float64{1, 2, 0}); !errors.Is(err, ErrFew) {
		t.Error(err)
	}
}

func TestLag(t *testing.T) {
	got, err := Lag([]float64{1, 2, 3, 4})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "correlation", got.Statistic, .25, 1e-14) // (.75 − .25 + .75)/5
	if _, err := Lag([]float64{2, 2, 2, 2}); !errors.Is(err, ErrSpread) {
		t.Error(err)
	}
	r := rand.New(rand.NewPCG(5, 6))
	const n, draws = 15, 20000
	var mean, square, below float64
	x := make([]float64, n)
	for range draws {
		for i := range x {
			x[i] = r.NormFloat64()
		}
		l, err := Lag(x)
		if err != nil {
			t.Fatal(err)
		}
		mean += l.Statistic / draws
		square += l.Statistic * l.Statistic / draws
		if l.P < .05 {
			below++
		}
	}
	if math.Abs(mean+1./n) > .006 || math.Abs(square-mean*mean-13*13./(15*15*14)) > .002 || math.Abs(below/draws-.05) > .008 {
		t.Errorf("mean %g, variance %g, %g below .05", mean, square-mean*mean, below/draws)
	}
}
