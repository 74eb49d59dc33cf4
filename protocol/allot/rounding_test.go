package allot

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"penwright/protocol/diag"
)

// TestRound: sums stay, every share goes to the whole number below or above, and the
// mean is the share.
func TestRound(t *testing.T) {
	g := NewGenerator("round")
	for range 100 {
		// Shares of columns in rows in proportion: n_i m_j / n.
		rows, columns := 1+g.Below(4), 1+g.Below(5)
		size := make([]int, rows)
		n := 0
		for i := range size {
			size[i] = 1 + g.Below(6)
			n += size[i]
		}
		total := make([]int, columns)
		for range n {
			total[g.Below(columns)]++
		}
		const draws = 400
		sum := make([]float64, rows*columns)
		for range draws {
			share := make([][]int, rows)
			for i := range share {
				for _, m := range total {
					share[i] = append(share[i], size[i]*m)
				}
			}
			round(g, share, n)
			for i := range share {
				row := 0
				for j, x := range share[i] {
					exact := size[i] * total[j]
					if x%n != 0 || x/n < exact/n || x/n > (exact+n-1)/n {
						t.Fatalf("%d of %d became %d", exact, n, x)
					}
					row += x / n
					sum[i*columns+j] += float64(x) / float64(n)
				}
				if row != size[i] {
					t.Fatalf("a row of %d holds %d", size[i], row)
				}
			}
			for j := range total {
				column := 0
				for i := range share {
					column += share[i][j] / n
				}
				if column != total[j] {
					t.Fatalf("a column of %d holds %d", total[j], column)
				}
			}
		}
		for i := range size {
			for j := range total {
				exact := float64(size[i]*total[j]) / float64(n)
				f := exact - math.Floor(exact)
				if d := sum[i*columns+j]/draws - exact; math.Abs(d) > 5.5*math.Sqrt(f*(1-f)/draws)+1e-9 {
					t.Errorf("mean of %.3f is off by %.3f", exact, d)
				}
			}
		}
	}
}

// TestCarriedUnequal: a doubled control in pens of both sexes is shared out as nearly in
// proportion as whole animals can be.
func TestCarriedUnequal(t *testing.T) {
	plan := planOf(t, factorText("diet", 3)+"[[factor]]\nname = \"sex\"\nlevels = [\"F\", \"M\"]\n[[unit]]\nname = \"pen\"\ncount = 2\n[[unit]]\nname = \"pig\"\nwithin = \"pen\"\ncount = 8\ncarries = [\"sex\"]\nreceives = [\"diet\"]\nreplicates = { diet1 = 4 }\n")
	var text strings.Builder
	text.WriteString("pen,pig,sex\n")
	for i := range 16 {
		fmt.Fprintf(&text, "%d,%d,%s\n", i/8+1, i%8+1, []string{"F", "M", "M"}[i%3])
	}
	r, list := ReadRoster(file("roster.csv", text.String()), plan)
	if len(list) > 0 {
		t.Fatal(list)
	}
	all, list := Draws(plan, r, "x", 500)
	if list.HasErrors() {
		t.Fatal(list)
	}
	for _, a := range all {
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Fatal(list)
		}
		var n [2][2][3]int
		var size [2][2]int
		for i, d := range a.Levels[0] {
			n[i/8][a.Levels[1][i]][d]++
			size[i/8][a.Levels[1][i]]++
		}
		for pen := range n {
			for sex := range n[pen] {
				for d, k := range n[pen][sex] {
					exact := size[pen][sex] * []int{4, 2, 2}[d]
					if k < exact/8 || k > (exact+7)/8 {
						t.Fatalf("pen %d, sex %d: %v of %d", pen, sex, n[pen][sex], size[pen][sex])
					}
				}
			}
		}
	}
}
