package allot

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"penwright/protocol/diag"
	"penwright/protocol/factor"
)

// TestFields: sums and products form fields, of every order up to 32 that has one, and
// the multiplication of four elements is that of x² + x + 1.
func TestFields(t *testing.T) {
	powers := []int{2, 3, 4, 5, 7, 8, 9, 11, 13, 16, 17, 19, 23, 25, 27, 29, 31, 32}
	for q := 1; q <= 32; q++ {
		f := newField(q)
		if (f != nil) != slices.Contains(powers, q) {
			t.Errorf("field of %d elements: %v", q, f != nil)
		}
		if f == nil {
			continue
		}
		for a := range q {
			if f.add(a, 0) != a || f.times(a, 1) != a || f.times(a, 0) != 0 {
				t.Fatalf("field of %d: zero and one do not hold for %d", q, a)
			}
			sums, products := map[int]bool{}, map[int]bool{}
			for b := range q {
				sums[f.add(a, b)], products[f.times(a, b)] = true, true
				for c := range q {
					if f.times(a, f.add(b, c)) != f.add(f.times(a, b), f.times(a, c)) || f.times(a, f.times(b, c)) != f.times(f.times(a, b), c) {
						t.Fatalf("field of %d: %d, %d, %d", q, a, b, c)
					}
				}
			}
			if len(sums) != q || a > 0 && len(products) != q {
				t.Fatalf("field of %d: row of %d", q, a)
			}
		}
	}
	if f := newField(4); f.times(2, 2) != 3 || f.times(2, 3) != 1 {
		t.Error("x² is not x + 1 in the field of four elements")
	}
}

// TestOrthogonalSquares: every pair of cells of two squares stands once.
func TestOrthogonalSquares(t *testing.T) {
	for n, want := range map[int]int{3: 2, 4: 3, 5: 4, 6: 1, 7: 6, 8: 7, 9: 8, 10: 2, 11: 10, 12: 2, 14: 1, 15: 2, 20: 3, 21: 2, 28: 3} {
		squares, how := mols(n)
		if len(squares) != want || how == "" {
			t.Errorf("%d squares of order %d, want %d", len(squares), n, want)
		}
		for i, a := range squares {
			if !isLatin(a, n) {
				t.Errorf("order %d: square %d is not Latin", n, i)
			}
			for _, b := range squares[:i] {
				pairs := map[[2]int32]bool{}
				for c := range a {
					pairs[[2]int32{a[c], b[c]}] = true
				}
				if len(pairs) != n*n {
					t.Errorf("order %d: squares are not orthogonal", n)
				}
			}
		}
	}
}

// concurrences gives the least and the greatest number of blocks in which two
// treatments stand together, and of those in which one stands.
func concurrences(blocks [][]int32, v int) (low, high, least, most int) {
	c := make([]int, v*v)
	for _, b := range blocks {
		for _, x := range b {
			for _, y := range b {
				c[int(x)*v+int(y)]++
			}
		}
	}
	low, least = math.MaxInt, math.MaxInt
	for i := range v {
		for j := range v {
			if n := c[i*v+j]; i == j {
				least, most = min(least, n), max(most, n)
			} else {
				low, high = min(low, n), max(high, n)
			}
		}
	}
	return low, high, least, most
}

// fisherYates are the parameters v, b, r, k, λ of balanced incomplete block designs with
// r up to 10 and 3 ≤ k ≤ v/2 that exist: R. A. Fisher & F. Yates, Statistical Tables
// for Biological, Agricultural and Medical Research (1938), Tables XVII to XIX.
var fisherYates = [][5]int{
	{6, 10, 5, 3, 2}, {6, 20, 10, 3, 4}, {7, 7, 3, 3, 1}, {8, 14, 7, 4, 3}, {9, 12, 4, 3, 1}, {9, 18, 8, 4, 3}, {10, 15, 6, 4, 2},
	{10, 18, 9, 5, 4}, {10, 30, 9, 3, 2}, {11, 11, 5, 5, 2}, {13, 13, 4, 4, 1}, {13, 26, 6, 3, 1}, {15, 15, 7, 7, 3}, {15, 35, 7, 3, 1},
	{16, 16, 6, 6, 2}, {16, 20, 5, 4, 1}, {16, 24, 9, 6, 3}, {19, 19, 9, 9, 4}, {19, 57, 9, 3, 1}, {21, 21, 5, 5, 1},
	{21, 30, 10, 7, 3}, {21, 42, 10, 5, 2}, {25, 25, 9, 9, 3}, {25, 30, 6, 5, 1}, {25, 50, 8, 4, 1}, {28, 36, 9, 7, 2}, {31, 31, 6, 6, 1},
	{37, 37, 9, 9, 2}, {49, 56, 8, 7, 1}, {57, 57, 8, 8, 1},
}

// TestBalanced: each of the listed designs, its complement, and it twice, has the
// stated concurrence, and the efficiency λv/(rk) by the eigenvalues.
func TestBalanced(t *testing.T) {
	check := func(v, b, r, k, lambda int) {
		t.Helper()
		blocks, how := balanced(v, k, b)
		if len(blocks) != b || how == "" {
			t.Errorf("%d, %d, %d, %d, %d: %d blocks", v, b, r, k, lambda, len(blocks))
			return
		}
		for _, block := range blocks {
			if len(block) != k {
				t.Errorf("%d, %d, %d, %d, %d: a block of %d", v, b, r, k, lambda, len(block))
				return
			}
		}
		if low, high, least, most := concurrences(blocks, v); low != lambda || high != lambda || least != r || most != r {
			t.Errorf("%d, %d, %d, %d, %d: concurrence %d to %d, replication %d to %d", v, b, r, k, lambda, low, high, least, most)
		}
		var at, in factor.Factor
		at.N, in.N = v, b
		for i, block := range blocks {
			for _, x := range block {
				at.Level, in.Level = append(at.Level, x), append(in.Level, int32(i))
			}
		}
		want := float64(lambda*v) / float64(r*k)
		for _, e := range factor.CanonicalEfficiency(in, at) {
			if math.Abs(e-want) > 1e-9 {
				t.Errorf("%d, %d, %d, %d, %d: efficiency factor %.12f, want %.12f", v, b, r, k, lambda, e, want)
				break
			}
		}
	}
	for _, x := range fisherYates {
		v, b, r, k, lambda := x[0], x[1], x[2], x[3], x[4]
		check(v, b, r, k, lambda)
		if v <= 31 {
			check(v, b, b-r, v-k, b-2*r+lambda)
			check(v, 2*b, 2*r, k, 2*lambda)
		}
	}
	for v := 3; v <= 12; v++ {
		check(v, v*(v-1)/2, v-1, 2, 1)
		check(v, v, v-1, v-1, v-2)
	}
}

// TestImpossible: sets of numbers that meet the counting rules and cannot exist are
// refused by name, with possible ones.
func TestImpossible(t *testing.T) {
	for _, x := range impossible {
		r := x.b * x.k / x.v
		if x.b*x.k%x.v != 0 || r*(x.k-1)%(x.v-1) != 0 {
			t.Errorf("%d, %d, %d does not meet the counting rules", x.v, x.b, x.k)
		}
		if blocks, _ := balanced(x.v, x.k, x.b); blocks != nil {
			t.Errorf("%d, %d, %d exists", x.v, x.b, x.k)
		}
	}
	for _, k := range []int{5, 10} {
		text := factorText("a", 15) + fmt.Sprintf("[[unit]]\nname = \"block\"\ncount = 21\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = %d\nreceives = [\"a\"]\n", k)
		_, list := New(planOf(t, text), nil, "x")
		if len(list) == 0 || list[0].Code != NotDrawn || !strings.Contains(list[0].Message, "do not exist (M. Hall") || !strings.Contains(list[0].Hint, "possible near it are ") {
			t.Errorf("%v", list)
		}
	}
}

// TestLattices: harmonic means of square lattices by F. Yates, Journal of Agricultural
// Science 26 (1936) 424-455: (r − 1)(k + 1)/((r − 1)(k + 1) + r).
func TestLattices(t *testing.T) {
	for _, x := range []struct {
		k, r int
		want float64
	}{
		{3, 2, .666666666667}, {3, 3, .727272727273}, {3, 4, .75}, {4, 2, .714285714286}, {5, 2, .75}, {5, 3, .8}, {5, 6, .833333333333},
		{6, 3, 14. / 17}, {10, 4, 33. / 37}, {12, 4, 39. / 43},
	} {
		text := resolvable(x.k*x.k, x.k, x.r)
		plan := planOf(t, text)
		a, list := New(plan, nil, "lattice")
		if list.HasErrors() {
			t.Errorf("%d², %d replicates: %v", x.k, x.r, list)
			continue
		}
		block := factor.Factor{Level: plan.Coarse(2, 1), N: plan.Units[1].N}
		e := factor.CanonicalEfficiency(block, factor.Factor{Level: a.Levels[0], N: x.k * x.k})
		if got := factor.HarmonicMean(e); math.Abs(got-x.want) > 1e-11 {
			t.Errorf("%d², %d replicates: %.12f, want %.12f", x.k, x.r, got, x.want)
		}
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Errorf("%d², %d replicates: %v", x.k, x.r, list)
		}
	}
}

// TestGraecoLatin: each factor is a Latin square, every pair of levels stands once, and
// the orders without such squares are refused with the nearest ones.
func TestGraecoLatin(t *testing.T) {
	text := func(n, m int) string {
		s, names := "", []string{}
		for k := range m {
			name := string(rune('a' + k))
			s += factorText(name, n)
			names = append(names, fmt.Sprintf("%q", name))
		}
		return s + fmt.Sprintf("[[unit]]\nname = \"row\"\ncount = %d\n[[unit]]\nname = \"column\"\ncount = %d\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [%s]\n", n, n, strings.Join(names, ", "))
	}
	for _, x := range [][2]int{{3, 2}, {4, 2}, {4, 3}, {5, 2}, {5, 4}, {7, 2}, {8, 2}, {9, 2}, {10, 2}, {12, 2}} {
		n, m := x[0], x[1]
		plan := planOf(t, text(n, m))
		all, list := Draws(plan, nil, "graeco", 10)
		if list.HasErrors() {
			t.Errorf("order %d: %v", n, list)
			continue
		}
		for _, a := range all {
			for f := range m {
				if !isLatin(a.Levels[f], n) {
					t.Fatalf("order %d: factor %d is not Latin", n, f)
				}
				for e := range f {
					pairs := map[[2]int32]bool{}
					for c := range n * n {
						pairs[[2]int32{a.Levels[e][c], a.Levels[f][c]}] = true
					}
					if len(pairs) != n*n {
						t.Fatalf("order %d: factors %d and %d are not orthogonal", n, e, f)
					}
				}
			}
		}
		if len(all[0].Efficiency()) > 0 {
			t.Errorf("order %d: %v", n, all[0].Efficiency())
		}
	}
	// Order 3: 3!·2! = 12 Latin squares, for each of them the one other class with its
	// 3! letterings: 72 allotments, all met equally often.
	all, list := Draws(planOf(t, text(3, 2)), nil, "three", 3000)
	if list.HasErrors() {
		t.Fatal(list)
	}
	seen := map[string]int{}
	for _, a := range all {
		seen[spell(a.Levels[0])+spell(a.Levels[1])]++
	}
	if len(seen) != 72 {
		t.Errorf("%d pairs of squares of order 3, want 72", len(seen))
	}
	counts := make([]int, 0, 72)
	for _, n := range seen {
		counts = append(counts, n)
	}
	uniform(t, "pairs of squares of order 3", counts)
	for _, x := range []struct {
		n, m int
		want string
	}{{6, 2, "5 or 7 levels"}, {14, 2, "13 or 15 levels"}, {10, 3, "9 or 11 levels"}, {3, 3, "4 levels"}} {
		_, list := New(planOf(t, text(x.n, x.m)), nil, "x")
		if len(list) == 0 || list[0].Code != NotDrawn || !strings.Contains(list[0].Hint, x.want) {
			t.Errorf("order %d, %d factors: %v", x.n, x.m, list)
		}
	}
}
