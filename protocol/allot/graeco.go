package allot

import (
	"fmt"
	"math"
	"strings"

	"penwright/protocol/layout"
)

// graeco draws factors that are each a Latin square, orthogonal to one another, from
// constructed squares whose rows, columns and letters are permuted.
type graeco struct {
	of      *layout.Allocation
	plan    *layout.Plan
	grid    *grid
	n       int
	squares [][]int32
	how     string
	fields  int
}

// graeco prepares orthogonal squares, or names the nearest orders that have as many.
func (r *refusal) graeco(a *layout.Allocation, fixed, levels [][]int32) step {
	plan, u := r.plan, a.Unit
	unit := &plan.Units[u]
	n, m := len(plan.Factors[a.Factors[0]].Levels), len(a.Factors)
	refuse := func(hint, format string, args ...any) step {
		if hint != "" {
			hint += "; or "
		}
		r.add(fmt.Sprintf("unit[%d].receives", u), NotDrawn, hint+elsewhere, "%s on %s are each a Latin square, orthogonal to one another (a Graeco-Latin square): %s",
			strings.ReplaceAll(factorNames(plan, a.Factors), " ×", ","), unit.Name, fmt.Sprintf(format, args...))
		return nil
	}
	if p := plan.Protocol; p.CarryOver != nil || p.TimeTrend != nil {
		return refuse("", "such squares are not balanced for carry-over, nor do they alternate")
	}
	if class, ok := r.classes(u, fixed); !ok {
		return nil
	} else if class != nil || len(unit.Crosses) != 2 {
		return refuse("", "they are drawn on two crossed units without a class of their own")
	}
	if n > largestSquare || math.Pow(float64(n), float64(m)) > math.MaxInt32 {
		return refuse("", "%d squares of order %d are not drawn", m, n)
	}
	squares, how := mols(n)
	if len(squares) < m {
		why := fmt.Sprintf("%d such squares of order %d are not constructed here", m, n)
		switch {
		case n == 2 || n == 6:
			why = fmt.Sprintf("no two Latin squares of order %d are orthogonal", n)
		case m >= n:
			why = fmt.Sprintf("there are at most %d orthogonal squares of order %d", n-1, n)
		}
		return refuse(fmt.Sprintf("%s levels are possible for %d factors", orders(n, m), m), "%s", why)
	}
	gr, why := r.grid(u, unit.Crosses[0], unit.Crosses[1], fixed)
	if gr == nil {
		if why == "" {
			return nil
		}
		return refuse("", "%s", why)
	}
	fields := gr.fields(levels)
	for _, f := range fields {
		if f.rows%n != 0 || f.columns%n != 0 {
			fields = nil
			break
		}
	}
	if fields == nil {
		return refuse(fmt.Sprintf("let rows and columns be multiples of %d", n), "the rows and columns that belong together do not hold every level equally often")
	}
	return &graeco{of: a, plan: plan, grid: gr, n: n, squares: squares, how: how, fields: len(fields)}
}

// orders names the orders next to n of which m orthogonal squares are constructed.
func orders(n, m int) string {
	enough := func(k int) bool {
		squares, _ := mols(k)
		return len(squares) >= m
	}
	var words []string
	for k := n - 1; k > 2; k-- {
		if enough(k) {
			words = append(words, fmt.Sprint(k))
			break
		}
	}
	for k := n + 1; k <= n+largestSquare; k++ {
		if enough(k) {
			words = append(words, fmt.Sprint(k))
			break
		}
	}
	return strings.Join(words, " or ")
}

func (s *graeco) allocation() *layout.Allocation { return s.of }

func (s *graeco) draw(g *Generator, levels [][]int32, combination []int32) {
	n, m := s.n, len(s.of.Factors)
	for _, f := range s.grid.fields(levels) {
		rows, columns := identity(f.rows), identity(f.columns)
		g.Shuffle(rows)
		g.Shuffle(columns)
		for r := 0; r < f.rows; r += n {
			for c := 0; c < f.columns; c += n {
				which := identity(len(s.squares))
				g.Shuffle(which)
				letters := make([][]int32, m)
				for k := range letters {
					letters[k] = identity(n)
					g.Shuffle(letters[k])
				}
				for i := range n * n {
					at := f.cells[int(rows[r+i/n])*f.columns+int(columns[c+i%n])]
					for k := range m {
						combination[at] = combination[at]*int32(n) + letters[k][s.squares[which[k]][i]]
					}
				}
			}
		}
	}
}

func (s *graeco) words() string {
	unit := &s.plan.Units[s.of.Unit]
	names := factorNames(s.plan, s.of.Factors)
	text := fmt.Sprintf("%s to %s: orthogonal Latin squares of order %d, one for each factor, on %s × %s", strings.ReplaceAll(names, " ×", ","), unit.Name, s.n, s.plan.Units[unit.Crosses[0]].Name, s.plan.Units[unit.Crosses[1]].Name)
	if s.fields > 1 {
		text += fmt.Sprintf(", in each of %d fields", s.fields)
	}
	return text + fmt.Sprintf(": %s; rows, then columns are permuted, then for each square of rows and columns the list of the %d squares, of which the first are taken for the factors in turn, and the letters of each", s.how, len(s.squares))
}
