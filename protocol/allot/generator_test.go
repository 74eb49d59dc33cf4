package allot

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// chiSquare is Pearson's statistic for equal expected counts.
func chiSquare(counts []int) float64 {
	n := 0
	for _, c := range counts {
		n += c
	}
	e := float64(n) / float64(len(counts))
	x := 0.0
	for _, c := range counts {
		d := float64(c) - e
		x += d * d / e
	}
	return x
}

// chiSquareLimit is the upper 10⁻⁶ point of χ² by the approximation of Wilson and
// Hilferty (1931); z = 4.7534 is that of the normal distribution.
func chiSquareLimit(df int) float64 {
	k := float64(df)
	r := 1 - 2/(9*k) + 4.7534*math.Sqrt(2/(9*k))
	return k * r * r * r
}

func uniform(t *testing.T, what string, counts []int) {
	t.Helper()
	if x, limit := chiSquare(counts), chiSquareLimit(len(counts)-1); x > limit {
		t.Errorf("%s: χ² = %.1f on %d df, above %.1f: not uniform", what, x, len(counts)-1, limit)
	}
}

// TestStream checks the stream against the published sample of the generator: C2SP
// chacha8rand, c2sp.org/chacha8rand, "Sample output".
func TestStream(t *testing.T) {
	g := Generator{source: rand.NewChaCha8([32]byte([]byte("ABCDEFGHIJKLMNOPQRSTUVWXYZ123456")))}
	want := map[int]uint64{0: 0xb773b6063d4616a5, 1: 0x1160af22a66abc3c, 2: 0x8c2599d9418d287c, 3: 0x7ee07e037edc5cd6,
		31: 0x0f8f9ff0a65a3d43, 123: 0x861d6c139c06c871, 124: 0x5f41df72e05e0487, 247: 0xd8b3e251ee231ddd,
		248: 0xb433eec25dca1966, 371: 0xddd9c6d34bffa11f}
	h := sha256.New()
	for i := range 372 {
		v := g.Uint64()
		if w, ok := want[i]; ok && v != w {
			t.Errorf("output %d = %016x, want %016x", i, v, w)
		}
		h.Write(binary.LittleEndian.AppendUint64(nil, v))
	}
	if got := hex.EncodeToString(h.Sum(nil)); got != "bfec3d418b829afe5df2d8887d1508348409c293b73758d7efd841dd995fe021" {
		t.Errorf("SHA-256 of the sample = %s", got)
	}
}

// TestSeedText pins how a seed text becomes a stream. The values were computed by a
// second program written from the text of the specification.
func TestSeedText(t *testing.T) {
	for seed, want := range map[string][4]uint64{
		"trial-1": {0x877dabc9ed6401c4, 0x14ce43ce584eb7d0, 0xbca60151bf92ab3b, 0x9e121ff6737f11b0},
		"":        {0xe2f735bc17d14e9d, 0x4e972bbec1330704, 0xa4683435eac59fdd, 0xeddd1bd5251d9510},
	} {
		g := NewGenerator(seed)
		for i, w := range want {
			if v := g.Uint64(); v != w {
				t.Errorf("seed %q, output %d = %016x, want %016x", seed, i, v, w)
			}
		}
	}
}

// TestBelow repeats the rule of the record by plain division with remainder.
func TestBelow(t *testing.T) {
	for _, k := range []int{2, 3, 7, 10, 1 << 40, math.MaxInt64} {
		g, raw := NewGenerator("below"), NewGenerator("below")
		for range 1000 {
			// 2⁶⁴ mod k by doubling.
			spare := uint64(1)
			for range 64 {
				spare = spare * 2 % uint64(k)
				if k == math.MaxInt64 {
					spare = 2 // 2⁶⁴ = 2(2⁶³ − 1) + 2; doubling would overflow
				}
			}
			v := raw.Uint64()
			for spare > 0 && v >= -spare { // −spare is 2⁶⁴ − spare in 64 bits
				v = raw.Uint64()
			}
			if got := g.Below(k); got != int(v%uint64(k)) {
				t.Fatalf("below %d: %d, want %d", k, got, v%uint64(k))
			}
		}
	}
	g, raw := NewGenerator("one"), NewGenerator("one")
	if g.Below(1) != 0 || g.Uint64() != raw.Uint64() {
		t.Error("a number below 1 takes from the stream")
	}
	counts := make([]int, 7)
	for range 70000 {
		counts[g.Below(7)]++
	}
	uniform(t, "below 7", counts)
}

// spell makes a map key of small numbers.
func spell(a []int32) string {
	b := make([]byte, len(a))
	for i, v := range a {
		b[i] = byte('A' + v)
	}
	return string(b)
}

func TestShuffleUniform(t *testing.T) {
	g := NewGenerator("shuffle")
	seen := map[string]int{}
	for range 24000 {
		a := identity(5)
		g.Shuffle(a)
		seen[spell(a)]++
	}
	counts := make([]int, 0, 120)
	for _, c := range seen {
		counts = append(counts, c)
	}
	if len(counts) != 120 {
		t.Fatalf("%d orders of five, want 120", len(counts))
	}
	uniform(t, "orders of five", counts)
}

func isLatin(a []int32, n int) bool {
	for i := range n {
		row, column := map[int32]bool{}, map[int32]bool{}
		for j := range n {
			row[a[i*n+j]], column[a[j*n+i]] = true, true
		}
		if len(row) != n || len(column) != n {
			return false
		}
	}
	return true
}

// TestReducedSquares: numbers of OEIS A000315.
func TestReducedSquares(t *testing.T) {
	for n, want := range map[int]int{1: 1, 2: 1, 3: 1, 4: 4, 5: 56} {
		got := reducedSquares(n)
		if len(got) != want {
			t.Errorf("%d reduced squares of order %d, want %d", len(got), n, want)
		}
		for _, s := range got {
			if !isLatin(s, n) {
				t.Errorf("not Latin: %v", s)
			}
		}
	}
}

// TestSquaresUniform: all 576 squares of order 4 (OEIS A002860) are equally likely; of
// order 5 the 161 280 are grouped by their first two columns' letters.
func TestSquaresUniform(t *testing.T) {
	g, s := NewGenerator("square"), newSquare(4)
	seen := map[string]int{}
	for range 28800 {
		seen[spell(s.draw(g))]++
	}
	if len(seen) != 576 {
		t.Fatalf("%d squares of order 4, want 576", len(seen))
	}
	counts := make([]int, 0, 576)
	for _, c := range seen {
		counts = append(counts, c)
	}
	uniform(t, "squares of order 4", counts)

	s = newSquare(5)
	cell := make([]int, 5*5*5)
	for range 10000 {
		a := s.draw(g)
		if !isLatin(a, 5) {
			t.Fatalf("not Latin: %v", a)
		}
		for i, v := range a {
			cell[i*5+int(v)]++
		}
	}
	for i := range 25 {
		uniform(t, fmt.Sprintf("letters of cell %d", i), cell[i*5:i*5+5])
	}
}

// TestChain runs the chain at orders where the uniform distribution is known, 12 squares
// of order 3 and 576 of order 4 (OEIS A002860), and looks at larger ones.
func TestChain(t *testing.T) {
	g := NewGenerator("chain")
	for n, want := range map[int]int{3: 12, 4: 576} {
		// Squares of order 4 fall into classes by their intercalates, whose sizes are
		// counted by enumeration: a reduced square stands for 4!·3! squares.
		enumerated, drawn := map[int]float64{}, map[int]int{}
		all := reducedSquares(n)
		for _, r := range all {
			enumerated[intercalates(r, n)] += 1 / float64(len(all))
		}
		seen, total := map[string]int{}, 12*want
		for range total {
			a := chain(g, n)
			if !isLatin(a, n) {
				t.Fatalf("not Latin: %v", a)
			}
			seen[spell(a)]++
			drawn[intercalates(a, n)]++
		}
		if len(seen) != want {
			t.Errorf("the chain met %d squares of order %d, want %d", len(seen), n, want)
		}
		for k, p := range enumerated {
			sd := math.Sqrt(p * (1 - p) / float64(total))
			if d := float64(drawn[k])/float64(total) - p; math.Abs(d) > 5*sd {
				t.Errorf("squares of order %d with %d intercalates: %d of %d, want a share of %.3f", n, k, drawn[k], total, p)
			}
		}
	}
	for _, n := range []int{6, 7, 10} {
		s := newSquare(n)
		cell := make([]int, n)
		for range 200 {
			a := s.draw(g)
			if !isLatin(a, n) {
				t.Fatalf("not Latin: %v", a)
			}
			cell[a[n+2]]++
		}
		uniform(t, fmt.Sprintf("letters of a cell at order %d", n), cell)
	}
}

// intercalates counts the 2 × 2 Latin subsquares.
func intercalates(a []int32, n int) int {
	k := 0
	for r := range n {
		for s := r + 1; s < n; s++ {
			for c := range n {
				for d := c + 1; d < n; d++ {
					if a[r*n+c] == a[s*n+d] && a[r*n+d] == a[s*n+c] {
						k++
					}
				}
			}
		}
	}
	return k
}

// TestMeanIntercalates6: over all 9408 reduced squares of order 6, enumerated here, the
// mean number of intercalates; the chain must agree within five standard errors.
func TestMeanIntercalates6(t *testing.T) {
	all := reducedSquares(6)
	if len(all) != 9408 { // OEIS A000315
		t.Fatalf("%d reduced squares of order 6, want 9408", len(all))
	}
	mean, square := 0.0, 0.0
	for _, s := range all {
		k := float64(intercalates(s, 6))
		mean += k / 9408
		square += k * k / 9408
	}
	g, got := NewGenerator("six"), 0.0
	const draws = 600
	for range draws {
		got += float64(intercalates(chain(g, 6), 6)) / draws
	}
	if z := (got - mean) / math.Sqrt((square-mean*mean)/draws); math.Abs(z) > 5 {
		t.Errorf("mean number of intercalates %.3f, want %.3f (%.1f standard errors off)", got, mean, z)
	}
}
