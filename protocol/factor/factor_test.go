package factor

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"gonum.org/v1/gonum/mat"
)

func random(r *rand.Rand, n, classes int) Factor {
	f := Factor{Level: make([]int32, n), N: classes}
	for i := range f.Level {
		f.Level[i] = int32(r.IntN(classes))
	}
	return f
}

// same is the brute-force relation "in one class" as an n × n table.
func same(f Factor) [][]bool {
	t := make([][]bool, f.Len())
	for i := range t {
		t[i] = make([]bool, f.Len())
		for j := range t {
			t[i][j] = f.Level[i] == f.Level[j]
		}
	}
	return t
}

func equal(a, b [][]bool) bool {
	return slices.EqualFunc(a, b, func(x, y []bool) bool { return slices.Equal(x, y) })
}

// both and chained are the infimum and supremum from their definitions: the
// intersection of the relations, and the transitive closure of their union.
func both(a, b [][]bool) [][]bool {
	out := make([][]bool, len(a))
	for i := range a {
		out[i] = make([]bool, len(a))
		for j := range a {
			out[i][j] = a[i][j] && b[i][j]
		}
	}
	return out
}

func chained(a, b [][]bool) [][]bool {
	out := make([][]bool, len(a))
	for i := range a {
		out[i] = make([]bool, len(a))
		for j := range a {
			out[i][j] = a[i][j] || b[i][j]
		}
	}
	for k := range out {
		for i := range out {
			for j := range out {
				out[i][j] = out[i][j] || out[i][k] && out[k][j]
			}
		}
	}
	return out
}

func firstAppearance(f Factor) bool {
	next := int32(0)
	for _, l := range f.Level {
		if l > next {
			return false
		}
		if l == next {
			next++
		}
	}
	return int(next) == f.N
}

func TestLatticeAgainstDefinition(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for range 500 {
		n := 1 + r.IntN(14)
		f, g, h := random(r, n, 1+r.IntN(6)), random(r, n, 1+r.IntN(6)), random(r, n, 1+r.IntN(4))
		inf, sup := Infimum(f, g), Supremum(f, g)
		if !equal(same(inf), both(same(f), same(g))) {
			t.Fatalf("infimum of %v and %v is %v", f, g, inf)
		}
		if !equal(same(sup), chained(same(f), same(g))) {
			t.Fatalf("supremum of %v and %v is %v", f, g, sup)
		}
		for _, k := range []Factor{inf, sup, f.Compact()} {
			if !firstAppearance(k) || k.Rank() != k.N {
				t.Fatalf("%v is not numbered by first appearance", k)
			}
		}
		if !Finer(inf, f) || !Finer(inf, g) || !Finer(f, sup) || !Finer(g, sup) {
			t.Fatalf("bounds of %v and %v are not bounds", f, g)
		}
		// The laws of a lattice.
		laws := map[string]bool{
			"commutes ∧":   Equivalent(inf, Infimum(g, f)),
			"commutes ∨":   Equivalent(sup, Supremum(g, f)),
			"associates ∧": Equivalent(Infimum(f, g, h), Infimum(f, Infimum(g, h))),
			"associates ∨": Equivalent(Supremum(sup, h), Supremum(f, Supremum(g, h))),
			"absorbs ∧":    Equivalent(Infimum(f, sup), f),
			"absorbs ∨":    Equivalent(Supremum(f, inf), f),
			"order":        Finer(f, g) == Equivalent(inf, f) && Finer(f, g) == Equivalent(sup, g),
			"ends":         Finer(Equality(n), f) && Finer(f, Universe(n)),
		}
		for law, holds := range laws {
			if !holds {
				t.Fatalf("%s fails for %v, %v, %v", law, f, g, h)
			}
		}
		if got, want := Finer(f, g), equal(both(same(f), same(g)), same(f)); got != want {
			t.Fatalf("Finer(%v, %v) = %v", f, g, got)
		}
	}
}

func TestOrthogonalAgainstProjectors(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	seen := map[bool]int{}
	for range 2000 {
		n := 1 + r.IntN(12)
		f, g := random(r, n, 1+r.IntN(3)), random(r, n, 1+r.IntN(3))
		if r.IntN(2) == 0 {
			f, g = product(r, 1+r.IntN(3), 1+r.IntN(3), 1+r.IntN(2))
		}
		var fg, gf mat.Dense
		p, q := Projector(f), Projector(g)
		fg.Mul(p, q)
		gf.Mul(q, p)
		want := mat.EqualApprox(&fg, &gf, 1e-12)
		if got := Orthogonal(f, g); got != want {
			t.Fatalf("Orthogonal(%v, %v) = %v", f, g, got)
		}
		seen[want]++
		if want {
			if !mat.EqualApprox(&fg, Projector(Supremum(f, g)), 1e-12) {
				t.Fatalf("P_f P_g is not the projector of the supremum of %v and %v", f, g)
			}
		}
	}
	if seen[true] < 100 || seen[false] < 100 {
		t.Fatalf("cases are one-sided: %v", seen)
	}
}

// product crosses two factors k times, its rows shuffled.
func product(r *rand.Rand, a, b, k int) (Factor, Factor) {
	f, g := Factor{N: a}, Factor{N: b}
	for i := range a * b * k {
		f.Level = append(f.Level, int32(i%a))
		g.Level = append(g.Level, int32(i/a%b))
	}
	r.Shuffle(f.Len(), func(i, j int) {
		f.Level[i], f.Level[j] = f.Level[j], f.Level[i]
		g.Level[i], g.Level[j] = g.Level[j], g.Level[i]
	})
	return f, g
}

// structure makes a random family of nested and crossed factors of equal numbers: a
// tree of units in which each unit divides its parent evenly, with crossed pairs.
func structure(r *rand.Rand) []Factor {
	sizes := make([]int, 2+r.IntN(3)) // coordinates of a row
	n := 1
	for i := range sizes {
		sizes[i] = 1 + r.IntN(3)
		n *= sizes[i]
	}
	coords := make([]Factor, len(sizes))
	step := 1
	for c, s := range sizes {
		coords[c] = Factor{Level: make([]int32, n), N: s}
		for i := range n {
			coords[c].Level[i] = int32(i / step % s)
		}
		step *= s
	}
	fs := []Factor{Universe(n), Equality(n)}
	for range 1 + r.IntN(4) {
		var pick []Factor
		for _, c := range coords {
			if r.IntN(2) == 0 {
				pick = append(pick, c)
			}
		}
		if pick != nil {
			fs = append(fs, Infimum(pick...))
		}
	}
	// Relabelling rows must change nothing.
	perm := r.Perm(n)
	for k, f := range fs {
		g := Factor{Level: make([]int32, n), N: f.N}
		for i, to := range perm {
			g.Level[to] = f.Level[i]
		}
		fs[k] = g
	}
	r.Shuffle(len(fs), func(i, j int) { fs[i], fs[j] = fs[j], fs[i] })
	return fs
}

func TestSetOnRandomStructures(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for range 300 {
		fs := Close(structure(r))
		s, err := NewSet(fs)
		if err != nil {
			t.Fatal(err)
		}
		n := fs[0].Len()
		df := s.DF()
		sum := 0
		for _, d := range df {
			sum += d
		}
		if sum != n {
			t.Fatalf("degrees of freedom %v add up to %d of %d", df, sum, n)
		}
		// The projectors Q_f, column by column from Split.
		q := make([]*mat.Dense, len(fs))
		for k := range q {
			q[k] = mat.NewDense(n, n, nil)
		}
		for j := range n {
			e := make([]float64, n)
			e[j] = 1
			for k, part := range s.Split(e) {
				q[k].SetCol(j, part)
			}
		}
		total := mat.NewDense(n, n, nil)
		for k := range q {
			total.Add(total, q[k])
			if tr := mat.Trace(q[k]); math.Abs(tr-float64(df[k])) > 1e-9 {
				t.Fatalf("trace %g but %d degrees of freedom", tr, df[k])
			}
			for l := range q {
				var m mat.Dense
				m.Mul(q[k], q[l])
				want := mat.Matrix(mat.NewDense(n, n, nil))
				if k == l {
					want = q[k]
				}
				if !mat.EqualApprox(&m, want, 1e-9) {
					t.Fatalf("projectors %d and %d are neither idempotent nor orthogonal", k, l)
				}
			}
		}
		identity := mat.NewDiagDense(n, nil)
		for i := range n {
			identity.SetDiag(i, 1)
		}
		if !mat.EqualApprox(total, identity, 1e-9) {
			t.Fatal("projectors do not add up to the identity")
		}
		// Coarse before fine.
		place := make([]int, len(fs))
		for at, k := range s.Order() {
			place[k] = at
		}
		for k := range fs {
			for _, c := range s.Coarser(k) {
				if place[c] > place[k] || !Finer(fs[k], fs[c]) {
					t.Fatalf("order %v puts %d before %d", s.Order(), k, c)
				}
			}
		}
	}
}

func TestSetRefuses(t *testing.T) {
	f := Factor{Level: []int32{0, 0, 1}, N: 2}
	g := Factor{Level: []int32{0, 1, 1}, N: 2}
	var no NotOrthogonal
	if _, err := NewSet([]Factor{Universe(3), f, g}); !errors.As(err, &no) || no != (NotOrthogonal{I: 1, J: 2}) {
		t.Errorf("got %v", err)
	}
	a, b := product(rand.New(rand.NewPCG(1, 1)), 2, 3, 1)
	var nc NotClosed
	if _, err := NewSet([]Factor{a, b}); !errors.As(err, &nc) || nc != (NotClosed{I: 0, J: 1}) {
		t.Errorf("got %v", err)
	}
	if fs := Close([]Factor{a, b}); len(fs) != 3 || fs[2].N != 1 {
		t.Errorf("closed to %v", fs)
	}
}

func TestEqualFactorsShareTheirSpace(t *testing.T) {
	f := Factor{Level: []int32{0, 0, 1, 1}, N: 2}
	s, err := NewSet([]Factor{f, Universe(4), f, Equality(4)})
	if err != nil {
		t.Fatal(err)
	}
	if got := s.DF(); !slices.Equal(got, []int{1, 1, 0, 2}) {
		t.Errorf("degrees of freedom %v", got)
	}
}

func TestMeans(t *testing.T) {
	f := Factor{Level: []int32{0, 2, 0, 2}, N: 3}
	m := f.Means([]float64{1, 2, 3, 6})
	if m[0] != 2 || !math.IsNaN(m[1]) || m[2] != 4 {
		t.Errorf("means %v", m)
	}
	y := []float64{1, 2, 3, 6}
	f.Project(y, y)
	if !slices.Equal(y, []float64{2, 4, 2, 4}) {
		t.Errorf("projection %v", y)
	}
	if f.Rank() != 2 || !f.Uniform() || f.Compact().N != 2 {
		t.Errorf("rank %d", f.Rank())
	}
	// A large common level costs no digits: 10⁶ times 10¹² + 0.5 has that mean exactly.
	n := 1_000_000
	big := make([]float64, n)
	for i := range big {
		big[i] = 1e12 + float64(i%2)
	}
	if got := Universe(n).Means(big)[0]; got != 1e12+0.5 {
		t.Errorf("mean %v", got)
	}
}

func TestCanonicalEfficiency(t *testing.T) {
	// Balanced incomplete blocks 7,7,3,3,1: the lines of the plane of order 2. All
	// factors are λv/(rk) = 7/9 (Yates 1936; the formula in Cochran & Cox 1957, ch. 11).
	fano := [][]int32{{0, 1, 3}, {1, 2, 4}, {2, 3, 5}, {3, 4, 6}, {4, 5, 0}, {5, 6, 1}, {6, 0, 2}}
	b, tr := blocks(fano, 7)
	for _, e := range CanonicalEfficiency(b, tr) {
		if math.Abs(e-7.0/9) > 1e-12 {
			t.Errorf("efficiency %v, want 7/9", e)
		}
	}
	c := Concurrence(b, tr)
	for i := range 7 {
		for j := range 7 {
			want := 1.0
			if i == j {
				want = 3
			}
			if c.At(i, j) != want {
				t.Errorf("concurrence of %d and %d is %v", i, j, c.At(i, j))
			}
		}
	}
	// Simple square lattice 3², two replicates: 1 − 1/2 four times and 1 four times,
	// harmonic mean (r−1)(k+1)/((r−1)(k+1)+r) = 2/3 (Yates 1936).
	b, tr = blocks([][]int32{{0, 1, 2}, {3, 4, 5}, {6, 7, 8}, {0, 3, 6}, {1, 4, 7}, {2, 5, 8}}, 9)
	e := CanonicalEfficiency(b, tr)
	for i, v := range e {
		want := 0.5
		if i >= 4 {
			want = 1
		}
		if math.Abs(v-want) > 1e-12 {
			t.Errorf("efficiency %d is %v, want %v", i, v, want)
		}
	}
	if h := HarmonicMean(e); len(e) != 8 || math.Abs(h-2.0/3) > 1e-12 {
		t.Errorf("harmonic mean %v of %d", h, len(e))
	}
	if !Connected(b, tr) {
		t.Error("a lattice is connected")
	}
	// Disconnected: blocks that share nothing.
	b, tr = blocks([][]int32{{0, 1}, {2, 3}}, 4)
	e = CanonicalEfficiency(b, tr)
	if Connected(b, tr) || e[0] > 1e-12 || HarmonicMean(e) != 0 {
		t.Errorf("disconnected: %v", e)
	}
}

func blocks(of [][]int32, treatments int) (block, treatment Factor) {
	block.N, treatment.N = len(of), treatments
	for b, ts := range of {
		for _, t := range ts {
			block.Level = append(block.Level, int32(b))
			treatment.Level = append(treatment.Level, t)
		}
	}
	return block, treatment
}

// A million rows go through every operation without a table of all pairs of classes;
// it takes a third of a second, and the bound only tells that from hours.
func TestMillionRows(t *testing.T) {
	n := 1_000_000
	r := rand.New(rand.NewPCG(7, 8))
	if testing.Short() {
		t.Skip("a million rows")
	}
	f, g := random(r, n, 1000), random(r, n, 500_000)
	start := time.Now()
	Infimum(f, g)
	Supremum(f, g)
	Orthogonal(f, g)
	if d := time.Since(start); d > 30*time.Second {
		t.Errorf("took %v", d)
	}
}

func BenchmarkOrthogonal(b *testing.B) {
	n := 1_000_000
	r := rand.New(rand.NewPCG(7, 8))
	f, g := random(r, n, 1000), random(r, n, 100_000)
	for b.Loop() {
		Orthogonal(f, g)
	}
}
