package allot

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// gridText writes rows and columns that receive a.
func gridText(rows, columns int) string {
	return fmt.Sprintf("[[unit]]\nname = \"row\"\ncount = %d\n[[unit]]\nname = \"column\"\ncount = %d\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"a\"]\n", rows, columns)
}

func blockText(blocks int, size string) string {
	return fmt.Sprintf("[[unit]]\nname = \"block\"\ncount = %d\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = %s\nreceives = [\"a\"]\n", blocks, size)
}

// TestRowsAndColumns: every treatment as equally in rows and columns as their sizes allow,
// and the efficiency that is known: of Youden squares λv/(rk), since their rows are
// complete (W. J. Youden, Contributions from Boyce Thompson Institute 9 (1937) 41-48,
// from memory).
func TestRowsAndColumns(t *testing.T) {
	for _, x := range []struct {
		t, rows, columns int
		want             float64 // 0: not known
	}{
		{7, 3, 7, 7. / 9}, {7, 7, 4, 14. / 16}, {11, 5, 11, 22. / 25}, {13, 4, 13, 13. / 16}, {4, 4, 7, 0}, {4, 3, 4, 8. / 9},
		{10, 5, 8, 0}, {12, 6, 6, 0}, {5, 7, 9, 0}, {30, 10, 12, 0},
	} {
		plan := planOf(t, factorText("a", x.t)+gridText(x.rows, x.columns))
		all, list := Draws(plan, nil, "rows", 3)
		if list.HasErrors() {
			t.Errorf("%v: %v", x, list)
			continue
		}
		for _, a := range all {
			if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
				t.Errorf("%v: %v", x, list)
			}
			e := a.Efficiency()
			if len(e) != 1 || e[0].Mean <= 0 || e[0].Mean > 1 || x.want > 0 && math.Abs(e[0].Mean-x.want) > 1e-9 {
				t.Errorf("%v: %+v, want %.6f", x, e, x.want)
			}
		}
	}
}

// TestEfficiencyOfRowsAndColumns compares the canonical factors with those of the model
// with rows and columns as they stand, by projection of every treatment's indicator.
func TestEfficiencyOfRowsAndColumns(t *testing.T) {
	plan := planOf(t, factorText("a", 6)+gridText(4, 5))
	a, list := New(plan, nil, "x")
	if list.HasErrors() {
		t.Fatal(list)
	}
	row := factor.Factor{Level: plan.Coarse(2, 0), N: 4}
	column := factor.Factor{Level: plan.Coarse(2, 1), N: 5}
	counts := factor.Factor{Level: a.Levels[0], N: 6}.Counts()
	// R^(−½) X′(I − P) X R^(−½) with the residuals of additive rows and columns.
	trace, squares := 0.0, 0.0
	left := make([][]float64, 6)
	for c := range left {
		y := make([]float64, 20)
		for i, l := range a.Levels[0] {
			if int(l) == c {
				y[i] = 1 / math.Sqrt(float64(counts[c]))
			}
		}
		mean := 0.0
		for _, v := range y {
			mean += v / 20
		}
		r, s := row.Means(y), column.Means(y)
		for i := range y {
			y[i] += mean - r[row.Level[i]] - s[column.Level[i]]
		}
		left[c] = y
	}
	for c := range left {
		for d := range left {
			x := 0.0
			for i := range 20 {
				x += left[c][i] * left[d][i]
			}
			if c == d {
				trace += x
			}
			squares += x * x
		}
	}
	e := a.Efficiency()[0].Factor
	var sum, square float64
	for _, v := range e {
		sum += v
		square += v * v
	}
	if math.Abs(sum-trace) > 1e-9 || math.Abs(square-squares) > 1e-9 {
		t.Errorf("factors %v add up to %.9f and %.9f, want %.9f and %.9f", e, sum, square, trace, squares)
	}
}

// TestIncompleteRandom: whatever the numbers, incomplete blocks are refused with advice,
// or drawn with every treatment as equally as sizes allow and no difference lost.
func TestIncompleteRandom(t *testing.T) {
	g := NewGenerator("incomplete")
	drawn := 0
	for range 30 {
		n := 3 + g.Below(10)
		var text strings.Builder
		text.WriteString(factorText("a", n))
		within := ""
		if g.Below(3) == 0 {
			fmt.Fprintf(&text, "[[unit]]\nname = \"site\"\ncount = %d\n", 2+g.Below(2))
			within = "within = \"site\"\n"
		}
		blocks := 2 + g.Below(6)
		fmt.Fprintf(&text, "[[unit]]\nname = \"block\"\ncount = %d\n%s", blocks, within)
		size := fmt.Sprint(2 + g.Below(7))
		if within == "" && g.Below(2) == 0 {
			var sizes []string
			for range blocks {
				sizes = append(sizes, fmt.Sprint(2+g.Below(6)))
			}
			size = "[" + strings.Join(sizes, ", ") + "]"
		}
		replicates := ""
		if g.Below(4) == 0 {
			replicates = "replicates = { a1 = 5 }\n"
		}
		fmt.Fprintf(&text, "[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = %s\nreceives = [\"a\"]\n%s", size, replicates)
		p, list := protocol.Load(fstest.MapFS{"protocol.toml": {Data: []byte(head + text.String())}}, "protocol.toml")
		if list.HasErrors() {
			continue
		}
		plan, list := layout.New(p)
		if list.HasErrors() {
			continue
		}
		a, list := New(plan, nil, "x")
		if a == nil {
			if len(list) == 0 || list[0].Code != NotDrawn || list[0].Hint == "" || list[0].Pos.Line == 0 {
				t.Errorf("%v\n%s", list, text.String())
			}
			continue
		}
		drawn++
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Errorf("%v\n%s", list, text.String())
		}
		for _, e := range a.Efficiency() {
			if e.Mean <= 0 || len(e.Factor) != n-1 {
				t.Errorf("%+v\n%s", e, text.String())
			}
		}
	}
	if drawn < 10 {
		t.Errorf("%d drawn", drawn)
	}
}

// TestSmallBalancedUniform: three treatments in three blocks of two stand in the blocks in
// 3! orders and in each block in two: 48 allotments.
func TestSmallBalancedUniform(t *testing.T) {
	all, list := Draws(planOf(t, factorText("a", 3)+blockText(3, "2")), nil, "small", 4800)
	if list.HasErrors() {
		t.Fatal(list)
	}
	seen := map[string]int{}
	for _, a := range all {
		seen[spell(a.Levels[0])]++
	}
	if len(seen) != 48 {
		t.Fatalf("%d allotments, want 48", len(seen))
	}
	var counts []int
	for _, n := range seen {
		counts = append(counts, n)
	}
	uniform(t, "three treatments in blocks of two", counts)
}

// TestReplay permutes the recorded arrangements by the words of the record, without the
// functions that do it.
func TestReplay(t *testing.T) {
	shuffle := func(g *Generator, n int) []int {
		a := make([]int, n)
		for i := range a {
			a[i] = i
		}
		for i := n - 1; i >= 1; i-- {
			j := g.Below(i + 1)
			a[i], a[j] = a[j], a[i]
		}
		return a
	}
	numbers := func(start string) (out []int) {
		_, list, _ := strings.Cut(start, ": ")
		for _, w := range strings.Fields(strings.ReplaceAll(list, "|", " ")) {
			n, err := strconv.Atoi(w)
			if err != nil {
				t.Fatal(err)
			}
			out = append(out, n-1)
		}
		return out
	}
	// Replicates, blocks in each, plots in each, names.
	plan := planOf(t, resolvable(12, 4, 2))
	a, list := New(plan, nil, "replay")
	if list.HasErrors() {
		t.Fatal(list)
	}
	g, start := NewGenerator("replay"), numbers(a.made.Start)
	replicate := shuffle(g, 2)
	var block [][]int
	for range 2 {
		block = append(block, shuffle(g, 3))
	}
	var plot [][]int
	for range 6 {
		plot = append(plot, shuffle(g, 4))
	}
	names := shuffle(g, 12)
	for i, c := range start {
		r, b, p := i/12, i/4%3, i%4
		at := replicate[r]*12 + block[r][b]*4 + plot[r*3+b][p]
		if int(a.Levels[0][at]) != names[c] {
			t.Fatalf("plot %d has %d, want %d", at, a.Levels[0][at], names[c])
		}
	}
	// Rows, columns, names.
	plan = planOf(t, factorText("a", 7)+gridText(3, 7))
	if a, list = New(plan, nil, "replay"); list.HasErrors() {
		t.Fatal(list)
	}
	g, start = NewGenerator("replay"), numbers(a.made.Start)
	row, column := shuffle(g, 3), shuffle(g, 7)
	names = shuffle(g, 7)
	for i, c := range start {
		if at := row[i/7]*7 + column[i%7]; int(a.Levels[0][at]) != names[c] {
			t.Fatalf("plot %d has %d, want %d", at, a.Levels[0][at], names[c])
		}
	}
}

// TestAlikeUnits: blocks change places only with blocks of their size.
func TestAlikeUnits(t *testing.T) {
	plan := planOf(t, factorText("a", 5)+blockText(6, "[3, 4, 3, 4, 3, 3]"))
	all, list := Draws(plan, nil, "alike", 50)
	if list.HasErrors() {
		t.Fatal(list)
	}
	for _, a := range all {
		if list := Check(a, func(int, int32) diag.Pos { return diag.Pos{} }); len(list) > 0 {
			t.Fatal(list)
		}
		if e, f := a.Efficiency()[0].Mean, all[0].Efficiency()[0].Mean; math.Abs(e-f) > 1e-9 {
			t.Fatalf("efficiency %v of one draw, %v of another", e, f)
		}
	}
}

// TestIsotopyClasses: Latin squares of order 6 fall into 22 isotopy classes (OEIS A040082;
// E. Schönhardt, 1930, and R. A. Fisher & F. Yates, 1934). All 9408 reduced squares (OEIS
// A000315) are sorted into them here by exchanging rows, columns and letters; the size of
// a class is (6!)³ over its number of autotopisms. Squares that are drawn fall into the
// classes in proportion to their sizes.
func TestIsotopyClasses(t *testing.T) {
	const n = 6
	reduce := func(a []int32) string {
		// Columns so that the first row is in order, then rows by the first column.
		out := make([]int32, n*n)
		column := make([]int32, n)
		for c := range int32(n) {
			column[a[c]] = c
		}
		for r := range n {
			first := a[r*n+int(column[0])]
			for c := range n {
				out[int(first)*n+c] = a[r*n+int(column[c])]
			}
		}
		return spell(out)
	}
	all := reducedSquares(n)
	number := map[string]int{}
	for i, s := range all {
		number[spell(s)] = i
	}
	class := make([]int, len(all))
	for i := range class {
		class[i] = i
	}
	var find func(i int) int
	find = func(i int) int {
		if class[i] != i {
			class[i] = find(class[i])
		}
		return class[i]
	}
	join := func(i int, a []int32) {
		j, ok := number[reduce(a)]
		if !ok {
			t.Fatal("a reduced square is not in the list")
		}
		class[find(i)] = find(j)
	}
	for i, s := range all {
		for x := range n - 1 {
			rows, columns, letters := slices.Clone(s), slices.Clone(s), slices.Clone(s)
			for k := range n {
				rows[x*n+k], rows[x*n+n+k] = rows[x*n+n+k], rows[x*n+k]
				columns[k*n+x], columns[k*n+x+1] = columns[k*n+x+1], columns[k*n+x]
			}
			for k, l := range letters {
				switch int(l) {
				case x:
					letters[k] = int32(x + 1)
				case x + 1:
					letters[k] = int32(x)
				}
			}
			join(i, rows)
			join(i, columns)
			join(i, letters)
		}
	}
	size := map[int]int{}
	for i := range all {
		size[find(i)]++
	}
	if len(size) != 22 {
		t.Fatalf("%d isotopy classes, want 22", len(size))
	}
	for _, k := range size {
		if 720*720*720%(k*720*120) != 0 {
			t.Errorf("a class of %d reduced squares is none of a whole number of autotopisms", k)
		}
	}
	g, s := NewGenerator("isotopy"), newSquare(n)
	const draws = 3000
	seen := map[int]int{}
	for range draws {
		seen[find(number[reduce(s.draw(g))])]++
	}
	// Classes that are expected less than five times count together.
	x, df := 0.0, -1
	rest, few := 0.0, 0
	add := func(expected float64, observed int) {
		x += (float64(observed) - expected) * (float64(observed) - expected) / expected
		df++
	}
	for c := range len(all) {
		if size[c] == 0 {
			continue
		}
		if e := draws * float64(size[c]) / float64(len(all)); e < 5 {
			rest, few = rest+e, few+seen[c]
		} else {
			add(e, seen[c])
		}
	}
	if rest > 0 {
		add(rest, few)
	}
	if limit := chiSquareLimit(df); x > limit {
		t.Errorf("χ² = %.1f on %d df, above %.1f", x, df, limit)
	}
}
