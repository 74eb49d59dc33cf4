package allot

import (
	"fmt"
	"strings"
)

// mols gives mutually orthogonal Latin squares of order n, each row by row, as many as
// are constructed here, and says how: n − 1 from the field of n elements for powers of
// primes, two of order 10, products of squares of coprime orders, and for other orders
// the cyclic square alone. No two exist of order 2 (seen at once) and 6 (G. Tarry, 1900).
func mols(n int) (squares [][]int32, how string) {
	if f := newField(n); f != nil {
		for m := 1; m < n; m++ {
			s := make([]int32, n*n)
			for x := range n {
				for y := range n {
					s[x*n+y] = int32(f.add(f.times(m, x), y))
				}
			}
			squares = append(squares, s)
		}
		return squares, fmt.Sprintf("the squares m·x + y of the field of %d elements, row x and column y, for m from 1", n)
	}
	if n == 10 {
		return quasiDifference(), "the two squares of order 10 from a quasi-difference matrix over the integers modulo 7 with three fixed points"
	}
	// The product of the squares of coprime orders a and b (H. F. MacNeish, Annals of
	// Mathematics 23 (1922) 221-227, from memory).
	if a := largestPower(n); a > 1 && a < n {
		b := n / a
		first, _ := mols(a)
		second, _ := mols(b)
		for k := range min(len(first), len(second)) {
			s := make([]int32, n*n)
			for x := range n {
				for y := range n {
					s[x*n+y] = first[k][x/b*a+y/b]*int32(b) + second[k][x%b*b+y%b]
				}
			}
			squares = append(squares, s)
		}
		if len(squares) > 1 {
			return squares, fmt.Sprintf("the direct products of the orthogonal squares of order %d with those of order %d", a, b)
		}
	}
	s := make([]int32, n*n)
	for x := range n {
		for y := range n {
			s[x*n+y] = int32((x + y) % n)
		}
	}
	return [][]int32{s}, fmt.Sprintf("the cyclic square of order %d", n)
}

// largestPower is the power of its least prime that divides n wholly.
func largestPower(n int) int {
	p := 2
	for n%p != 0 {
		p++
	}
	a := 1
	for n%p == 0 {
		n /= p
		a *= p
	}
	return a
}

// quasi is a quasi-difference matrix over the integers modulo 7, a column after the
// other: any two rows have every difference once between them but for three fixed
// points, which stand as - and are taken in turn in each row.
//
// Source: R. C. Bose, S. S. Shrikhande & E. T. Parker, Canadian Journal of Mathematics
// 12 (1960) 189-203, showed that such squares exist (from memory); the matrix is tested.
const quasi = "-012 -021 -035 0-14 0-26 0-53 01-5 03-2 05-1 026- 043- 064-"

// quasiDifference gives two orthogonal squares of order 10; numbers 7 to 9 are the
// fixed points.
func quasiDifference() [][]int32 {
	var lines [][4]int32
	var turn [4]int32
	for _, column := range strings.Fields(quasi) {
		fixed := -1
		for r, c := range column {
			if c == '-' {
				fixed = r
			}
		}
		for d := range int32(7) {
			var line [4]int32
			for r, c := range column {
				if r == fixed {
					line[r] = 7 + turn[r]
				} else {
					line[r] = (c - '0' + d) % 7
				}
			}
			lines = append(lines, line)
		}
		turn[fixed]++
	}
	for d := range int32(7) {
		lines = append(lines, [4]int32{d, d, d, d})
	}
	for a := range int32(3) {
		for b := range int32(3) {
			lines = append(lines, [4]int32{7 + a, 7 + b, 7 + (a+b)%3, 7 + (a+2*b)%3})
		}
	}
	squares := [][]int32{make([]int32, 100), make([]int32, 100)}
	for _, l := range lines {
		for k := range squares {
			squares[k][l[0]*10+l[1]] = l[2+k]
		}
	}
	return squares
}

// lattice gives the blocks of r replicates of k² treatments in blocks of k, or of
// k(k + 1) in blocks of k, from orthogonal squares: treatments are cells (x, y) of a
// square, blocks are rows, columns and letters; in the second case the cells x = y of a
// square of order k + 1 are left out. A square lattice is as precise as a resolvable
// design can be (C.-S. Cheng & R. A. Bailey, Annals of Statistics 19 (1991) 1667-1671,
// from memory), which best tells. It is nil where the squares do not reach.
//
// Source: F. Yates, Journal of Agricultural Science 26 (1936) 424-455; B. Harshbarger,
// Virginia Agricultural Experiment Station Memoir 1 (1947) (both from memory).
func lattice(t, k, r int) (blocks [][]int32, how string, best bool) {
	n := k
	if t == k*(k+1) {
		n = k + 1
	} else if t != k*k {
		return nil, "", false
	}
	if n < 2 || n > largestField {
		return nil, "", false
	}
	squares, words := mols(n)
	number := make([]int32, n*n) // treatment of each cell, -1 for none
	next := int32(0)
	for c := range number {
		number[c] = -1
		if n == k || c/n != c%n {
			number[c] = next
			next++
		}
	}
	families := [][]int32{make([]int32, n*n), make([]int32, n*n)}
	for c := range n * n {
		families[0][c], families[1][c] = int32(c/n), int32(c%n)
	}
	for _, s := range squares {
		seen := make([]bool, n)
		fits := true
		for x := range n {
			fits = fits && !seen[s[x*n+x]]
			seen[s[x*n+x]] = true
		}
		if n == k || fits { // each letter loses one cell of the diagonal
			families = append(families, s)
		}
	}
	if r > len(families) {
		return nil, "", false
	}
	for _, f := range families[:r] {
		rep := make([][]int32, n)
		for c, b := range f {
			if number[c] >= 0 {
				rep[b] = append(rep[b], number[c])
			}
		}
		blocks = append(blocks, rep...)
	}
	kind := "square"
	if n > k {
		kind = "rectangular"
	}
	return blocks, fmt.Sprintf("the %s lattice of %d treatments in %d replicates: rows, columns and letters of %s", kind, t, r, words), n == k
}

// alphaArray searches the generating array of an alpha design of k plots a block, s
// blocks a replicate, r replicates: numbers modulo s, at row × r + replicate, such that
// no two rows have the same difference in two replicates, so that two treatments meet
// at most once. Numbers are tried in a random order, since arrays that are too regular
// join treatments badly. It is nil where none is found within its counted budget.
//
// Source: H. D. Patterson & E. R. Williams, Biometrika 63 (1976) 83-92 (from memory).
func alphaArray(k, s, r int) []int32 {
	a := make([]int32, k*r)
	moves := 0
	g := NewGenerator("generating array")
	orders := make([][]int32, k*r)
	for i := range orders {
		orders[i] = identity(s)
		g.Shuffle(orders[i])
	}
	var fill func(at int) bool
	fill = func(at int) bool {
		if at == k*r {
			return true
		}
		i, c := at/r, at%r
		if i == 0 || c == 0 {
			return fill(at + 1) // 0 in the first row and replicate
		}
	next:
		for _, v := range orders[at] {
			if moves++; moves > 200_000 {
				return false
			}
			a[at] = v
			for j := range i {
				d := (v - a[j*r+c] + int32(s)) % int32(s)
				for e := range c {
					if (a[i*r+e]-a[j*r+e]+int32(s))%int32(s) == d {
						continue next
					}
				}
			}
			if fill(at + 1) {
				return true
			}
		}
		return false
	}
	if !fill(0) {
		return nil
	}
	return a
}

// alpha develops a generating array: row i of the array stands for the treatments i·s
// to i·s + s − 1.
func alpha(array []int32, s, r int) [][]int32 {
	k := len(array) / r
	var blocks [][]int32
	for c := range r {
		for j := range s {
			block := make([]int32, k)
			for i := range block {
				block[i] = int32(i*s) + (int32(j)+array[i*r+c])%int32(s)
			}
			blocks = append(blocks, block)
		}
	}
	return blocks
}
