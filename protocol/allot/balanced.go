package allot

import (
	"fmt"
	"slices"
	"strings"
)

// family is a balanced incomplete block design made by developing base blocks: points
// are numbered through cycles, one after the other, and turned by 0, 1, … places in all
// of them at once; or, with plane, points are pairs of numbers modulo the two of cycles,
// the first slowest, and every pair is added. A block that is met again stands once.
type family struct {
	v, k   int
	cycles []int
	plane  bool
	base   [][]int
	source string
}

// families are designs that follow from no plane, field or larger design below. Sources
// are from memory, and every concurrence is tested.
var families = []family{
	{v: 6, k: 3, cycles: []int{5, 1}, base: [][]int{{0, 1, 3}, {5, 0, 1}}, source: "difference family with a fixed point"},
	{v: 8, k: 4, cycles: []int{7, 1}, base: [][]int{{7, 0, 1, 3}, {2, 4, 5, 6}}, source: "planes of three dimensions over two elements"},
	{v: 10, k: 3, cycles: []int{9, 1}, base: [][]int{{9, 0, 1}, {0, 1, 4}, {0, 2, 4}, {0, 3, 6}}, source: "searched for this table"},
	{v: 13, k: 3, cycles: []int{13}, base: [][]int{{0, 1, 4}, {0, 2, 7}}, source: "difference family, Steiner triples"},
	{v: 15, k: 3, cycles: []int{15}, base: [][]int{{0, 1, 4}, {0, 2, 8}, {0, 5, 10}}, source: "lines of three dimensions over two elements"},
	{v: 15, k: 7, cycles: []int{15}, base: [][]int{{0, 1, 2, 4, 5, 8, 10}}, source: "difference set, planes of three dimensions over two elements"},
	{v: 16, k: 6, cycles: []int{4, 4}, plane: true, base: [][]int{{1, 2, 3, 4, 8, 12}}, source: "the other cells of a cell's row and column in a square of four"},
	{v: 19, k: 3, cycles: []int{19}, base: [][]int{{1, 7, 11}, {2, 14, 3}, {4, 9, 6}}, source: "cosets of the cube roots of one modulo 19"},
	{v: 21, k: 5, cycles: []int{21}, base: [][]int{{0, 1, 3, 6, 10}, {0, 2, 8, 9, 13}}, source: "searched for this table"},
	{v: 25, k: 4, cycles: []int{5, 5}, plane: true, base: [][]int{{0, 1, 5, 12}, {0, 2, 10, 24}}, source: "difference family"},
	{v: 25, k: 9, cycles: []int{3, 3, 3, 3, 3, 3, 3, 3, 1}, base: [][]int{{0, 1, 2, 3, 4, 5, 6, 7, 8}, {0, 7, 8, 10, 13, 18, 20, 23, 24}, {3, 4, 6, 10, 12, 14, 15, 23, 24},
		{0, 1, 4, 9, 15, 16, 18, 22, 24}, {0, 1, 5, 10, 12, 14, 20, 21, 22}, {3, 4, 7, 10, 17, 18, 19, 21, 22}, {0, 6, 7, 11, 14, 16, 17, 22, 23}, {0, 3, 8, 9, 10, 11, 12, 16, 19},
		{0, 5, 6, 12, 13, 15, 17, 18, 19}}, source: "searched for this table"},
	{v: 31, k: 10, cycles: []int{3, 3, 3, 3, 3, 3, 3, 3, 3, 3, 1}, base: [][]int{{0, 1, 2, 3, 4, 5, 6, 7, 8, 30}, {6, 7, 13, 17, 18, 20, 23, 24, 29, 30}, {3, 4, 9, 10, 12, 17, 18, 21, 26, 30},
		{0, 1, 9, 13, 17, 22, 25, 27, 28, 30}, {0, 4, 8, 10, 20, 21, 22, 23, 25, 29}, {0, 7, 8, 9, 11, 12, 13, 15, 23, 26}, {0, 4, 6, 9, 11, 14, 18, 19, 28, 29}, {3, 4, 7, 13, 14, 16, 22, 26, 27, 29},
		{0, 3, 6, 10, 15, 16, 17, 19, 23, 27}, {0, 1, 3, 12, 14, 15, 18, 20, 22, 24}, {0, 5, 7, 10, 16, 18, 24, 25, 26, 28}}, source: "searched for this table"},
	{v: 37, k: 9, cycles: []int{37}, base: [][]int{{1, 7, 9, 10, 12, 16, 26, 33, 34}}, source: "difference set, fourth powers modulo 37"},
}

// develop gives the blocks of a family.
func (f *family) develop() [][]int32 {
	turns := 1
	for _, n := range f.cycles {
		if g := gcd(turns, n); f.plane {
			turns *= n
		} else {
			turns *= n / g
		}
	}
	turn := func(x, d int) int {
		if f.plane {
			n, m := f.cycles[0], f.cycles[1]
			return (x/m+d/m)%n*m + (x+d)%m
		}
		from := 0
		for _, n := range f.cycles {
			if x < from+n {
				return from + (x-from+d)%n
			}
			from += n
		}
		return x
	}
	var blocks [][]int32
	for _, base := range f.base {
		seen := map[string]bool{}
		for d := range turns {
			block := make([]int32, len(base))
			for i, x := range base {
				block[i] = int32(turn(x, d))
			}
			slices.Sort(block)
			if k := fmt.Sprint(block); !seen[k] {
				seen[k] = true
				blocks = append(blocks, block)
			}
		}
	}
	return blocks
}

func gcd(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

func (f *family) words() string {
	var base, cycles []string
	for _, b := range f.base {
		base = append(base, "{"+strings.Trim(fmt.Sprint(b), "[]")+"}")
	}
	for _, n := range f.cycles {
		cycles = append(cycles, fmt.Sprint(n))
	}
	how := "turned in cycles of " + strings.Join(cycles, ", ")
	switch {
	case f.plane:
		how = "developed over pairs of numbers modulo " + strings.Join(cycles, " and ")
	case len(cycles) == 1:
		how = "developed modulo " + cycles[0]
	}
	return fmt.Sprintf("base blocks %s %s (%s)", strings.Join(base, ", "), how, f.source)
}

// design is a list of blocks and the words for where it comes from.
type design struct {
	blocks [][]int32
	how    string
}

// affine gives the lines of the plane of q² points over the field of q elements, point
// (x, y) being x·q + y, in parallel classes: x = c, then y = m·x + c.
func affine(q int) [][]int32 {
	f := newField(q)
	if f == nil {
		return nil
	}
	var lines [][]int32
	for m := -1; m < q; m++ {
		for c := range q {
			line := make([]int32, 0, q+1)
			for x := range q {
				if m < 0 {
					line = append(line, int32(c*q+x))
				} else {
					line = append(line, int32(x*q+f.add(f.times(m, x), c)))
				}
			}
			lines = append(lines, line)
		}
	}
	return lines
}

// projective adds to each parallel class of the affine plane a point, and the line of
// these points.
func projective(q int) [][]int32 {
	lines := affine(q)
	if lines == nil {
		return nil
	}
	last := make([]int32, 0, q+1)
	for m := range q + 1 {
		at := int32(q*q + m)
		for c := range q {
			lines[m*q+c] = append(lines[m*q+c], at)
		}
		last = append(last, at)
	}
	return append(lines, last)
}

// halves develops the squares other than 0 of the field of q elements, and where −1 is a
// square also the others (R. E. A. C. Paley, Journal of Mathematics and Physics 12 (1933)
// 311-320; R. C. Bose, Annals of Eugenics 9 (1939) 353-399; both from memory).
func halves(q int) [][]int32 {
	f := newField(q)
	if f == nil || q%2 == 0 {
		return nil
	}
	square := make([]bool, q)
	for x := 1; x < q; x++ {
		square[f.times(x, x)] = true
	}
	var blocks [][]int32
	for _, is := range []bool{true, false} {
		for d := range q {
			var block []int32
			for x := 1; x < q; x++ {
				if square[x] == is {
					block = append(block, int32(f.add(x, d)))
				}
			}
			slices.Sort(block)
			blocks = append(blocks, block)
		}
		if q%4 == 3 {
			break
		}
	}
	return blocks
}

// symmetric lists the designs of as many blocks as treatments that others are made
// from.
func symmetric(most int) []design {
	var out []design
	for i := range families {
		if f := &families[i]; f.v <= most {
			if blocks := f.develop(); len(blocks) == f.v {
				out = append(out, design{blocks: blocks, how: f.words()})
			}
		}
	}
	for q := 7; q <= min(most, 127); q += 4 {
		if blocks := halves(q); blocks != nil {
			out = append(out, design{blocks: blocks, how: fmt.Sprintf("the squares of the field of %d elements, developed", q)})
		}
	}
	return out
}

// known lists the designs of v treatments in blocks of k that are constructed here, of
// at most b blocks, by the number of blocks.
func known(v, k, b int) []design {
	var out []design
	add := func(blocks [][]int32, how string) {
		if len(blocks) > 0 && len(blocks) <= b && !slices.ContainsFunc(out, func(d design) bool { return len(d.blocks) == len(blocks) }) {
			out = append(out, design{blocks: blocks, how: how})
		}
	}
	if k > v-k {
		for _, d := range known(v, v-k, b) {
			var blocks [][]int32
			for _, block := range d.blocks {
				var rest []int32
				for x := range int32(v) {
					if !slices.Contains(block, x) {
						rest = append(rest, x)
					}
				}
				blocks = append(blocks, rest)
			}
			add(blocks, "the treatments not in the blocks of: "+d.how)
		}
		return out
	}
	for i := range families {
		if f := &families[i]; f.v == v && f.k == k {
			add(f.develop(), f.words())
		}
	}
	if k*k == v {
		add(affine(k), fmt.Sprintf("the lines of the affine plane over the field of %d elements", k))
	}
	if q := k - 1; q*q+q+1 == v {
		add(projective(q), fmt.Sprintf("the lines of the projective plane over the field of %d elements", q))
	}
	if 2*k == v-1 {
		add(halves(v), fmt.Sprintf("the squares of the field of %d elements, developed, and the other elements where −1 is a square", v))
	}
	// Residual: the blocks of a symmetric design without the points of its last block.
	for _, s := range symmetric(2*v + 2) {
		n, size := len(s.blocks), len(s.blocks[0])
		if n-size != v {
			continue
		}
		gone := s.blocks[n-1]
		number := make([]int32, n)
		next := int32(0)
		for x := range number {
			if number[x] = -1; !slices.Contains(gone, int32(x)) {
				number[x] = next
				next++
			}
		}
		var blocks [][]int32
		for _, block := range s.blocks[:n-1] {
			var rest []int32
			for _, x := range block {
				if number[x] >= 0 {
					rest = append(rest, number[x])
				}
			}
			blocks = append(blocks, rest)
		}
		if len(blocks[0]) == k {
			add(blocks, "without the treatments of its last block: "+s.how)
		}
	}
	if n := choose(v, k, b); n <= b {
		block := identity(k)
		var blocks [][]int32
		for range n {
			blocks = append(blocks, slices.Clone(block))
			i := k - 1
			for i >= 0 && block[i] == int32(v-k+i) {
				i--
			}
			if i < 0 {
				break
			}
			for block[i]++; i+1 < k; i++ {
				block[i+1] = block[i] + 1
			}
		}
		add(blocks, fmt.Sprintf("all %d sets of %d", n, k))
	}
	slices.SortStableFunc(out, func(x, y design) int { return len(x.blocks) - len(y.blocks) })
	return out
}

// choose is the number of sets of k of v things, or above where it is more than that.
func choose(v, k, above int) int {
	n := 1
	for i := range k {
		n = n * (v - i) / (i + 1)
		if n > above {
			return above + 1
		}
	}
	return n
}

// balanced gives b blocks of k of v treatments in which every two treatments meet
// equally often: known designs, repeated and put together. It is nil where they do not
// add up to b.
func balanced(v, k, b int) (blocks [][]int32, how string) {
	if k < 1 || k >= v || b*k%v != 0 || b*k/v*(k-1)%(v-1) != 0 {
		return nil, ""
	}
	all := known(v, k, b)
	var times []int
	var fill func(i, left int) bool
	fill = func(i, left int) bool {
		if left == 0 {
			return true
		}
		if i == len(all) {
			return false
		}
		for n := left / len(all[i].blocks); n >= 0; n-- {
			times = append(times, n)
			if fill(i+1, left-n*len(all[i].blocks)) {
				return true
			}
			times = times[:len(times)-1]
		}
		return false
	}
	if !fill(0, b) {
		return nil, ""
	}
	var parts []string
	for i, n := range times {
		for range n {
			blocks = append(blocks, all[i].blocks...)
		}
		switch {
		case n == 1:
			parts = append(parts, all[i].how)
		case n > 1:
			parts = append(parts, fmt.Sprintf("%d times %s", n, all[i].how))
		}
	}
	r := b * k / v
	return blocks, fmt.Sprintf("the balanced incomplete blocks of %d treatments, %d blocks of %d, every two treatments together in %d: %s (treatments counted from 0)", v, b, k, r*(k-1)/(v-1), strings.Join(parts, "; and "))
}

// impossible lists sets of v treatments in b blocks of k that meet the counting rules of
// balance and yet cannot exist, nor their complements, with the reason.
var impossible = []struct {
	v, b, k int
	why     string
}{
	{22, 22, 7, "S. Chowla & H. J. Ryser (1950)"}, {29, 29, 8, "S. Chowla & H. J. Ryser (1950)"}, {46, 46, 10, "S. S. Shrikhande (1950)"},
	{34, 34, 12, "S. Chowla & H. J. Ryser (1950)"}, {43, 43, 7, "R. H. Bruck & H. J. Ryser (1949)"}, {43, 43, 15, "S. Chowla & H. J. Ryser (1950)"},
	{52, 52, 18, "S. Chowla & H. J. Ryser (1950)"}, {53, 53, 13, "S. Chowla & H. J. Ryser (1950)"}, {58, 58, 19, "S. Chowla & H. J. Ryser (1950)"},
	{15, 21, 5, "M. Hall & W. S. Connor (1954)"}, {21, 28, 6, "M. Hall & W. S. Connor (1954)"}, {36, 45, 8, "M. Hall & W. S. Connor (1954)"},
	{36, 42, 6, "G. Tarry (1900): there is no plane of order 6"}, {22, 33, 8, "R. Bilous and others (2007)"},
}

// impossible refuses blocks that would have to be balanced and cannot.
func (s *structure) impossible() (hint, why string) {
	k, resolvable := s.nested()
	if k == 0 || resolvable {
		return "", ""
	}
	v, b := s.t, s.plan.Units[s.plan.Units[s.of.Unit].Within].N
	for _, x := range impossible {
		if x.v != v || x.b != b || x.k != k && x.k != v-k {
			continue
		}
		r := b * k / v
		return "possible near it are " + nearest(v, k, b), fmt.Sprintf("balanced incomplete blocks of v = %d treatments in b = %d blocks of k = %d (r = %d, λ = %d) meet the counting rules, but do not exist (%s)", v, b, k, r, r*(k-1)/(v-1), x.why)
	}
	return "", ""
}

// nearest names the constructed balanced designs that are closest to a set of numbers.
func nearest(v, k, b int) string {
	type candidate struct{ v, k, b, far int }
	var all []candidate
	for w := v - 3; w <= v+3; w++ {
		for j := max(2, k-2); j <= min(k+2, w-1); j++ {
			for _, d := range known(w, j, 2*b) {
				n := len(d.blocks)
				far := 2*abs(w-v) + 2*abs(j-k) + abs(n-b)*10/b
				all = append(all, candidate{v: w, k: j, b: n, far: far})
			}
		}
	}
	slices.SortStableFunc(all, func(x, y candidate) int { return x.far - y.far })
	var words []string
	for _, c := range all[:min(3, len(all))] {
		words = append(words, fmt.Sprintf("%d treatments in %d blocks of %d", c.v, c.b, c.k))
	}
	return strings.Join(words, ", ")
}

func abs(n int) int { return max(n, -n) }
