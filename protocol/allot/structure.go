package allot

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// structure is what an arrangement of treatments on a unit must know: the systems of
// blocks, and which of them hold the treatments in proportion.
type structure struct {
	problem
	plan *layout.Plan
	of   *layout.Allocation

	closed   []factor.Factor // all systems of blocks, closed under supremum
	weights  []float64
	df       []int
	universe int

	cell  int   // the smallest unit that holds the treatments in proportion; -1: the whole trial
	units []int // the units of the first closed factors
	named []int // the unit of each of problem.blocks, -1: none
}

// newStructure reads the units above a.Unit; why is said where they do not do.
func newStructure(plan *layout.Plan, a *layout.Allocation) (s *structure, why string) {
	u, unit := a.Unit, &plan.Units[a.Unit]
	s = &structure{plan: plan, of: a, cell: -1}
	s.t, s.total = len(a.Total), a.Total
	var fs []factor.Factor
	var complete []bool
	for _, v := range above(plan, u) {
		n := plan.Units[v].N
		if v == u || n == 1 {
			continue
		}
		f := factor.Factor{Level: plan.Coarse(u, v), N: n}
		fits := true
		for _, size := range f.Counts() {
			for _, total := range a.Total {
				fits = fits && size*total%unit.N == 0
			}
		}
		if !fits && len(plan.Units[v].Receives) > 0 {
			return nil, fmt.Sprintf("%s receives treatments of its own and does not hold them in proportion", plan.Units[v].Name)
		}
		if n == unit.N {
			return nil, fmt.Sprintf("every %s holds a single %s", plan.Units[v].Name, unit.Name)
		}
		if n*s.t > mostCounts {
			return nil, fmt.Sprintf("%d of %s are too many to be searched", n, plan.Units[v].Name)
		}
		if fits && (s.cell < 0 || n > plan.Units[s.cell].N) {
			s.cell = v
		}
		fs, complete, s.units = append(fs, f), append(complete, fits), append(s.units, v)
	}
	s.closed, s.weights = weigh(fs)
	if s.closed == nil {
		return nil, "the units it lies in are not orthogonal to one another"
	}
	set, err := factor.NewSet(s.closed)
	if err != nil {
		return nil, "the units it lies in are not orthogonal to one another"
	}
	s.df = set.DF()
	s.universe = slices.IndexFunc(s.closed, func(f factor.Factor) bool { return f.Rank() == 1 })
	s.problem.cell, s.cells = make([]int32, unit.N), 1
	if s.cell >= 0 {
		s.problem.cell, s.cells = plan.Coarse(u, s.cell), plan.Units[s.cell].N
	}
	for k, f := range s.closed {
		implied := k >= len(s.units) || s.cell >= 0 && plan.Coarse(s.cell, s.units[k]) != nil
		if implied && s.weights[k] == 0 {
			continue
		}
		b := system{Factor: f, weight: s.weights[k], size: f.Counts()}
		if !implied {
			b.low, b.high = make([]int32, f.N*s.t), make([]int32, f.N*s.t)
			for j, size := range b.size {
				for c, total := range a.Total {
					low, high := limit(plan, a, c, size)
					if complete[k] {
						low = total * size / unit.N
						high = low
					}
					b.low[j*s.t+c], b.high[j*s.t+c] = int32(low), int32(high)
				}
			}
		}
		if k == s.universe {
			s.mean = s.weights[k] // which exchanges do not change
			continue
		}
		unit := -1
		if k < len(s.units) {
			unit = s.units[k]
		}
		s.blocks, s.named = append(s.blocks, b), append(s.named, unit)
	}
	return s, ""
}

// canonical gives the canonical efficiency factors of treatments after all systems of
// blocks, in ascending order, without the 0 of the mean: the eigenvalues of
// R^(−½) C R^(−½). For one system of blocks they are those of factor.CanonicalEfficiency.
// Every treatment must stand somewhere.
func canonical(closed []factor.Factor, weights []float64, treatment factor.Factor) []float64 {
	t, n := treatment.N, float64(treatment.Len())
	c := information(closed, weights, treatment)
	r := treatment.Counts()
	for i := range t {
		for j := i; j < t; j++ {
			root := math.Sqrt(float64(r[i] * r[j]))
			// √r belongs to the eigenvalue 0 and is moved out of the range of the others.
			c.SetSym(i, j, c.At(i, j)/root+2*root/n)
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(c, false) {
		panic("allot: eigenvalues did not converge")
	}
	e := eig.Values(nil)
	slices.Sort(e)
	e = e[:len(e)-1]
	for i := range e {
		e[i] = min(max(e[i], 0), 1)
	}
	return e
}

// bound is a lower limit of the trace that a search lowers: with equal replication the
// factors add up to what counts allow at best, and no more of them than there are
// degrees of freedom between blocks are less than 1. For resolvable designs it is the
// bound of H. D. Patterson & E. R. Williams, Biometrika 63 (1976) 83-92. It is 0 where
// nothing is known.
func (s *structure) bound() float64 {
	r := s.total[0]
	if slices.ContainsFunc(s.total, func(n int) bool { return n != r }) {
		return 0
	}
	sum := float64(s.t)
	less := 0
	for k, f := range s.closed {
		if s.weights[k] == 0 {
			continue
		}
		if s.weights[k] < 0 && k != s.universe && (k >= len(s.units) || !s.proportional(f)) {
			return 0
		}
		for _, size := range f.Counts() {
			q, rest := size/s.t, size%s.t
			square := float64(rest*(q+1)*(q+1) + (s.t-rest)*q*q)
			sum -= s.weights[k] * square / float64(size) / float64(r)
		}
	}
	for k, f := range s.closed {
		if !s.proportional(f) {
			less += s.df[k]
		}
	}
	less = min(less, s.t-1)
	if less == 0 {
		return 0
	}
	// sum is that of all factors; those that are 1 first.
	e := (sum - float64(s.t-1-less)) / float64(less)
	if e <= 0 {
		return 0
	}
	mean := float64(r)
	return (float64(less)/(e+ridge) + float64(s.t-1-less)/(1+ridge) + 1/(1+ridge)) / mean
}

// proportional tells whether each class of f can hold all treatments in proportion.
func (s *structure) proportional(f factor.Factor) bool {
	n := f.Len()
	for _, size := range f.Counts() {
		for _, total := range s.total {
			if size*total%n != 0 {
				return false
			}
		}
	}
	return true
}

// nested gives the size of the blocks where all there is above the unit is one system of
// equal blocks, or such blocks in replicates that each hold every treatment once; 0 where
// it is otherwise, or replication is unequal.
func (s *structure) nested() (k int, resolvable bool) {
	u := s.of.Unit
	v := s.plan.Units[u].Within
	if v < 0 || slices.ContainsFunc(s.total, func(n int) bool { return n != s.total[0] }) {
		return 0, false
	}
	f := factor.Factor{Level: s.plan.Coarse(u, v), N: s.plan.Units[v].N}
	if !f.Uniform() || f.N == 1 {
		return 0, false
	}
	k = f.Len() / f.N
	for _, w := range s.units {
		switch {
		case w == v:
		case s.plan.Coarse(v, w) == nil:
			return 0, false
		case w == s.cell && s.plan.Units[u].N == s.t*s.plan.Units[w].N && s.problemUniform(w):
			resolvable = true
		case s.cell >= 0 && s.plan.Coarse(s.cell, w) != nil: // what holds whole replicates does not matter
		default:
			return 0, false
		}
	}
	if s.cell >= 0 && !resolvable {
		return 0, false
	}
	return k, resolvable
}

func (s *structure) problemUniform(w int) bool {
	return factor.Factor{Level: s.plan.Coarse(s.of.Unit, w), N: s.plan.Units[w].N}.Uniform()
}

// find gives an arrangement and says in words where it comes from; nil where none keeps
// the counts.
func (s *structure) find() (start []int32, how string) {
	k, resolvable := s.nested()
	b := 0
	if k > 0 {
		b = s.plan.Units[s.plan.Units[s.of.Unit].Within].N
	}
	if k > 0 && !resolvable {
		if blocks, how := balanced(s.t, k, b); blocks != nil {
			return slices.Concat(blocks...), how
		}
	}
	var starts [][]int32
	how = "the most precise arrangement in incomplete blocks that a search found"
	if resolvable && s.t%k == 0 {
		how = "the most precise arrangement in the blocks of replicates that a search found"
		blocks, words, optimal := lattice(s.t, k, s.total[0])
		if blocks != nil && optimal {
			return slices.Concat(blocks...), words
		}
		if blocks != nil {
			starts = append(starts, slices.Concat(blocks...))
		}
		if array := alphaArray(k, s.t/k, s.total[0]); array != nil {
			starts = append(starts, slices.Concat(alpha(array, s.t/k, s.total[0])...))
		}
	} else if len(s.blocks) > 1 {
		how = "the most precise arrangement on rows and columns that a search found"
	}
	g := NewGenerator("search of an arrangement")
	most := 3
	if s.t > 300 {
		most = 1 // every inversion of the matrix is dear
	}
	for len(starts) < most {
		starts = append(starts, s.deal(g))
	}
	start, _ = s.search(g, starts, s.bound())
	if start == nil {
		return nil, ""
	}
	return start, fmt.Sprintf("%s by exchanging plots, within %d moves (the mean variance of a difference is lowered; the search takes no number from the seed text)", how, s.budget())
}

// deal spreads the treatments over the plots: in every cell a permuted list of them goes
// block by block to the blocks with most room, those that stand more often first.
func (s *structure) deal(g *Generator) []int32 {
	at := make([]int32, len(s.problem.cell))
	members := make([][]int32, s.cells)
	for i, c := range s.problem.cell {
		members[c] = append(members[c], int32(i))
	}
	// The finest system that is wholly inside cells, of two that cross that with more
	// blocks, since the other is made even afterwards.
	var blocks []int32
	side := s.cell
	for k, b := range s.blocks {
		f := factor.Factor{Level: s.problem.cell, N: s.cells}
		if factor.Finer(b.Factor, f) && b.low != nil && (blocks == nil || b.N > s.blocks[k-1].N) {
			blocks = b.Level
			side = s.named[k]
		}
	}
	for _, plots := range members {
		order := identity(s.t)
		g.Shuffle(order)
		count := func(c int32) int { return s.total[c] * len(plots) / len(at) }
		slices.SortStableFunc(order, func(x, y int32) int { return count(y) - count(x) })
		if blocks == nil {
			var list []int32
			for _, c := range order {
				for range count(c) {
					list = append(list, c)
				}
			}
			g.Shuffle(list)
			for k, p := range plots {
				at[p] = list[k]
			}
			continue
		}
		var room [][]int32 // free plots of each block
		number := map[int32]int{}
		for _, p := range plots {
			k, ok := number[blocks[p]]
			if !ok {
				k = len(room)
				number[blocks[p]] = k
				room = append(room, nil)
			}
			room[k] = append(room[k], p)
		}
		for _, c := range order {
			left := count(c)
			for left > 0 {
				// One plot of each block with most room, before any block gets a second.
				ranks := identity(len(room))
				g.Shuffle(ranks)
				slices.SortStableFunc(ranks, func(x, y int32) int { return len(room[y]) - len(room[x]) })
				for _, k := range ranks[:min(left, len(ranks))] {
					if n := len(room[k]); n > 0 {
						at[room[k][n-1]] = c
						room[k] = room[k][:n-1]
						left--
					}
				}
			}
		}
	}
	if crosses := s.plan.Units[s.of.Unit].Crosses; len(crosses) == 2 && slices.Contains(crosses, side) {
		colour := crosses[0]
		if side == colour {
			colour = crosses[1]
		}
		if n := s.plan.Units[colour].N; n*len(at) <= mostCounts*10 {
			equitable(at, s.plan.Coarse(s.of.Unit, side), s.plan.Coarse(s.of.Unit, colour), s.plan.Units[side].N, n, s.t)
		}
	}
	return at
}
