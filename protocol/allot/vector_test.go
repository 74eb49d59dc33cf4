package allot

import (
	"crypto/sha256"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// vector works a small draw out step by step, by the words of the record and without the
// functions that draw.
func vector(t *testing.T) string {
	const seed = "HM-26-001/1"
	plan := planOf(t, factorText("a", 4)+"[[unit]]\nname = \"block\"\ncount = 2\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"a\"]\n")
	a, list := New(plan, nil, seed)
	if list.HasErrors() {
		t.Fatal(list)
	}
	var b strings.Builder
	fmt.Fprintf(&b, "    seed text    %s\n    key          %x\n", seed, sha256.Sum256([]byte(seed)))
	g := NewGenerator(seed)
	for block := range 2 {
		order := []int{1, 2, 3, 4}
		for i := 3; i >= 1; i-- {
			v := g.Uint64() // none of these is rejected: they lie far below 2⁶⁴ − 3
			j := int(v % uint64(i+1))
			order[i], order[j] = order[j], order[i]
			fmt.Fprintf(&b, "    block %d      %016x mod %d = %d, exchange places %d and %d: %s\n", block+1, v, i+1, j, i, j, strings.Trim(fmt.Sprint(order), "[]"))
		}
		for k, x := range order {
			if int(a.Levels[0][block*4+k]) != x-1 {
				t.Errorf("pen %d of block %d was drawn %d, worked out as %d", k+1, block+1, a.Levels[0][block*4+k]+1, x)
			}
		}
	}
	return b.String()
}

// TestVector: the worked example in DEVELOPERS.md is what the program draws.
func TestVector(t *testing.T) {
	text, err := os.ReadFile(filepath.Join("..", "..", "DEVELOPERS.md"))
	if err != nil {
		t.Fatal(err)
	}
	if want := vector(t); !strings.Contains(string(text), want) {
		t.Errorf("DEVELOPERS.md lacks the worked draw:\n%s", want)
	}
}
