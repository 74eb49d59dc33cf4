package allot

import "fmt"

// largestSquare is the greatest order of a Latin square that is drawn; the chain's work
// grows with the fourth power of it.
const largestSquare = 64

// square draws Latin squares of one order.
type square struct {
	n       int
	reduced [][]int32 // all reduced squares, row by row, for n ≤ 5; nil above
}

func newSquare(n int) square {
	s := square{n: n}
	if n <= 5 {
		s.reduced = reducedSquares(n)
	}
	return s
}

// reducedSquares lists the Latin squares of order n whose first row and first column
// are 0, 1, …, in ascending order of their rows written one after the other. There are
// 1, 1, 1, 4, 56 for n = 1 … 5 (OEIS A000315).
func reducedSquares(n int) [][]int32 {
	var all [][]int32
	cells := make([]int32, n*n)
	for i := range n {
		cells[i], cells[i*n] = int32(i), int32(i)
	}
	var fill func(at int)
	fill = func(at int) {
		if at == n*n {
			all = append(all, append([]int32(nil), cells...))
			return
		}
		r, c := at/n, at%n
		if r == 0 || c == 0 {
			fill(at + 1)
			return
		}
	next:
		for v := int32(0); v < int32(n); v++ {
			for i := range c {
				if cells[r*n+i] == v {
					continue next
				}
			}
			for i := range r {
				if cells[i*n+c] == v {
					continue next
				}
			}
			cells[at] = v
			fill(at + 1)
		}
	}
	fill(0)
	return all
}

// draw gives a Latin square row by row. Up to order 5 every square has the same
// probability: a reduced square is chosen, its columns are permuted, then its rows but
// the first, which makes each of the n!(n−1)! squares of its class in one way. Above, a
// chain is run.
func (s square) draw(g *Generator) []int32 {
	n := s.n
	from := make([]int32, n*n)
	if s.reduced != nil {
		copy(from, s.reduced[g.Below(len(s.reduced))])
	} else {
		from = chain(g, n)
	}
	columns, rows, letters := identity(n), identity(n), identity(n)
	g.Shuffle(columns)
	if s.reduced != nil {
		g.Shuffle(rows[1:])
	} else {
		g.Shuffle(rows)
		g.Shuffle(letters)
	}
	out := make([]int32, n*n)
	for r := range n {
		for c := range n {
			out[r*n+c] = letters[from[int(rows[r])*n+int(columns[c])]]
		}
	}
	return out
}

// words says how a square is drawn.
func (s square) words() string {
	if s.reduced == nil {
		return fmt.Sprintf("by the chain of Jacobson and Matthews (1996) from the cyclic square over %d proper squares, then columns, rows and letters are permuted", s.n*s.n*s.n)
	}
	return "every square with the same probability: a reduced square is chosen from all in ascending order of their rows, then its columns and its rows but the first are permuted"
}

// chain runs the Markov chain of Jacobson and Matthews from the cyclic square until it
// has met n³ proper squares, and gives the last. Its stationary distribution is uniform
// over the Latin squares of order n.
//
// A square is a cube of 0 and 1 with a single 1 in every line; an improper one has one
// −1. In words, for another program: in a proper square r, c and a letter other than
// that of the cell are taken as whole numbers below n, n, n − 1 (the letters other than
// the cell's in ascending order); in an improper one, r, c and the letter are those of
// the −1, and for the row, the column and the letter, in this order, a number below 2
// chooses the first or second 1 of the line.
//
// Source: M. T. Jacobson & P. Matthews, Journal of Combinatorial Designs 4 (1996)
// 405-437.
func chain(g *Generator, n int) []int32 {
	cube := make([]int8, n*n*n)
	at := func(x, y, z int) *int8 { return &cube[(x*n+y)*n+z] }
	for x := range n {
		for y := range n {
			*at(x, y, (x+y)%n) = 1
		}
	}
	// one finds the k-th 1 of a line.
	one := func(k int, line func(i int) *int8) int {
		for i := range n {
			if *line(i) == 1 {
				if k == 0 {
					return i
				}
				k--
			}
		}
		panic("allot: a line without its 1")
	}
	proper, seen := true, 0
	var x, y, z int
	for !proper || seen < n*n*n {
		pick := func() int { return 0 }
		if proper {
			x, y = g.Below(n), g.Below(n)
			letter := one(0, func(i int) *int8 { return at(x, y, i) })
			if z = g.Below(n - 1); z >= letter {
				z++
			}
		} else {
			pick = func() int { return g.Below(2) }
		}
		x1 := one(pick(), func(i int) *int8 { return at(i, y, z) })
		y1 := one(pick(), func(i int) *int8 { return at(x, i, z) })
		z1 := one(pick(), func(i int) *int8 { return at(x, y, i) })
		*at(x, y, z)++
		*at(x, y1, z1)++
		*at(x1, y, z1)++
		*at(x1, y1, z)++
		*at(x1, y, z)--
		*at(x, y1, z)--
		*at(x, y, z1)--
		*at(x1, y1, z1)--
		if proper = *at(x1, y1, z1) >= 0; proper {
			seen++
		} else {
			x, y, z = x1, y1, z1
		}
	}
	out := make([]int32, n*n)
	for r := range n {
		for c := range n {
			out[r*n+c] = int32(one(0, func(i int) *int8 { return at(r, c, i) }))
		}
	}
	return out
}

func identity(n int) []int32 {
	a := make([]int32, n)
	for i := range a {
		a[i] = int32(i)
	}
	return a
}
