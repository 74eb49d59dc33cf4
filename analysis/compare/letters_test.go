package compare

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"penwright/analysis/dist"
)

// marks splits letters into marks: a letter and the digits behind it.
func marks(s string) []string {
	var m []string
	for _, r := range s {
		if r >= 'a' {
			m = append(m, "")
		}
		m[len(m)-1] += string(r)
	}
	return m
}

func share(a, b string) bool {
	other := marks(b)
	return slices.ContainsFunc(marks(a), func(m string) bool { return slices.Contains(other, m) })
}

func upTo(n int) []int {
	order := make([]int, n)
	for i := range order {
		order[i] = i
	}
	return order
}

func TestLettersCotton(t *testing.T) {
	r := run(t, cotton(), Tukey, dist.Two)
	got := Letters(5, r.Differ(.05), []int{3, 2, 1, 4, 0}) // by falling mean
	if want := []string{"d", "bc", "ab", "a", "cd"}; !slices.Equal(got, want) {
		t.Errorf("got %q want %q", got, want)
	}
}

// J. Gramm et al., Comput. Statist. Data Anal. 52 (2007) 725, Figure 2: a pattern that no runs
// of ordered means can show; three letters suffice: {1,2,4}, {1,3,4}, {4,5}.
func TestLettersGramm(t *testing.T) {
	different := map[[2]int]bool{{0, 4}: true, {1, 2}: true, {1, 4}: true, {2, 4}: true}
	got := Letters(5, func(i, j int) bool { return different[[2]int{min(i, j), max(i, j)}] }, upTo(5))
	if want := []string{"ab", "a", "b", "abc", "c"}; !slices.Equal(got, want) {
		t.Errorf("got %q want %q", got, want)
	}
}

// Any pattern: two means share a letter exactly when they do not differ, the first has an a,
// and the columns are the maximal sets of means that do not differ, found by enumeration.
func TestLettersAnyPattern(t *testing.T) {
	random := rand.New(rand.NewPCG(11, 12))
	for trial := range 3000 {
		n := trial % 10
		pattern := make([]bool, n*n)
		density := random.Float64()
		for i := range n {
			for j := range i {
				pattern[i*n+j] = random.Float64() < density
				pattern[j*n+i] = pattern[i*n+j]
			}
		}
		order := random.Perm(n)
		differ := func(i, j int) bool { return pattern[i*n+j] }
		got := Letters(n, differ, order)
		check(t, got, differ)
		if n > 0 && !strings.HasPrefix(got[order[0]], "a") {
			t.Fatalf("the first mean has letters %q", got[order[0]])
		}
		// Maximal sets by enumeration of all subsets.
		maximal := 0
		free := func(s int) bool {
			for i := range n {
				for j := range i {
					if s>>i&1 == 1 && s>>j&1 == 1 && differ(i, j) {
						return false
					}
				}
			}
			return true
		}
		for s := 1; s < 1<<n; s++ {
			grows := false
			for i := range n {
				grows = grows || s>>i&1 == 0 && free(s|1<<i)
			}
			if free(s) && !grows {
				maximal++
			}
		}
		used := map[string]bool{}
		for _, s := range got {
			for _, m := range marks(s) {
				used[m] = true
			}
		}
		if len(used) != maximal {
			t.Fatalf("%d letters, %d maximal sets: %q", len(used), maximal, got)
		}
		// The road for patterns with too many columns is right too.
		sets := make([]set, n)
		for i := range n {
			sets[i] = newSet(n)
			for j := range n {
				if differ(i, j) {
					sets[i].add(j)
				}
			}
		}
		columns := cover(n, sets)
		for i := range n {
			for j := range n {
				together := slices.ContainsFunc(columns, func(c set) bool { return c.has(i) && c.has(j) })
				if together == differ(i, j) {
					t.Fatalf("cover: %d and %d", i, j)
				}
			}
		}
	}
}

func check(t *testing.T, letters []string, differ func(i, j int) bool) {
	t.Helper()
	for i := range letters {
		if letters[i] == "" {
			t.Fatalf("mean %d has no letter", i)
		}
		for j := range i {
			if share(letters[i], letters[j]) == differ(i, j) {
				t.Fatalf("%d and %d: letters %q and %q, differ %v", i, j, letters[i], letters[j], differ(i, j))
			}
		}
	}
}

func TestLettersMany(t *testing.T) {
	// All different: past z the alphabet goes on with a number.
	got := Letters(60, func(i, j int) bool { return true }, upTo(60))
	for i, want := range map[int]string{0: "a", 25: "z", 26: "a1", 51: "z1", 52: "a2"} {
		if got[i] != want {
			t.Errorf("mean %d: %q want %q", i, got[i], want)
		}
	}
	// Two hundred ordered means.
	differ := func(i, j int) bool { return max(i, j)-min(i, j) > 12 }
	check(t, Letters(200, differ, upTo(200)), differ)
	// Thirteen triples that differ only within themselves have 3^13 maximal sets
	// (Moon & Moser 1965); letters stay few.
	differ = func(i, j int) bool { return i != j && i/3 == j/3 }
	got = Letters(39, differ, upTo(39))
	check(t, got, differ)
	if n := len(fmt.Sprint(got)); n > 100_000 {
		t.Errorf("%d bytes of letters", n)
	}
}
