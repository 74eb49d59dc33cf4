package allot

import "penwright/protocol/factor"

// Efficiency tells how much of what is known of differences between treatments is left
// after the blocks that their units lie in.
type Efficiency struct {
	Unit    int   // the unit that received the factors
	Factors []int // of which each combination counts as one treatment
	Blocks  []int // the units that are eliminated: all that Unit lies in

	// Factor holds the canonical efficiency factors in ascending order, one for each
	// degree of freedom of the treatments: 1 loses nothing, 0 is confounded with blocks.
	Factor []float64
	Mean   float64 // their harmonic mean, 0 where one is 0

	// Eliminated are the smallest of Blocks that treatments are not orthogonal to.
	Eliminated []int
	// Concurrence tells for each of Eliminated how often two treatments stand together in
	// one of its instances; none where a treatment stands in one more than once.
	Concurrence []Concurrence
}

// Concurrence is how many pairs of treatments stand together how often.
type Concurrence struct {
	Unit  int   // the block
	Pairs []int // Pairs[n] is the number of pairs of treatments that stand together n times
}

// mostEfficiency bounds the work on eigenvalues.
const mostEfficiency = 1000

// Efficiency gives the efficiency of what is not orthogonal to the blocks it stands in,
// in the order of units: nothing for complete blocks and squares. Treatments that are
// not known, stand nowhere or are more than a thousand are passed over, and so are
// blocks that are not orthogonal to one another.
func (a *Allotment) Efficiency() []Efficiency {
	var out []Efficiency
	for u := range a.Plan.Units {
		of := a.Plan.Allocation(u)
		if of == nil {
			continue
		}
		sets := [][]int{of.Factors}
		if of.Separate {
			sets = nil
			for _, f := range of.Factors {
				sets = append(sets, []int{f})
			}
		}
		for _, fs := range sets {
			if e, ok := a.efficiency(u, fs); ok {
				out = append(out, e)
			}
		}
	}
	return out
}

func (a *Allotment) efficiency(u int, fs []int) (Efficiency, bool) {
	plan := a.Plan
	e := Efficiency{Unit: u, Factors: fs}
	treatment, ok := a.combined(u, fs)
	if !ok || treatment.N > mostEfficiency {
		return e, false
	}
	var blocks []factor.Factor
	for _, v := range above(plan, u) {
		if n := plan.Units[v].N; v != u && n > 1 && n < plan.Units[u].N && n*treatment.N <= mostCounts {
			blocks, e.Blocks = append(blocks, factor.Factor{Level: plan.Coarse(u, v), N: n}), append(e.Blocks, v)
		}
	}
	orthogonal := true
	for _, b := range blocks {
		orthogonal = orthogonal && factor.Orthogonal(b, treatment) && factor.Connected(b, treatment)
	}
	if orthogonal {
		return e, false
	}
	closed, weights := weigh(blocks)
	if closed == nil {
		return e, false
	}
	e.Factor = canonical(closed, weights, treatment)
	e.Mean = factor.HarmonicMean(e.Factor)
	for k, v := range e.Blocks {
		smallest := true
		for _, w := range e.Blocks {
			smallest = smallest && (w == v || plan.Coarse(w, v) == nil)
		}
		if !smallest || factor.Orthogonal(blocks[k], treatment) && factor.Connected(blocks[k], treatment) {
			continue
		}
		e.Eliminated = append(e.Eliminated, v)
		if factor.Infimum(blocks[k], treatment).N == treatment.Len() {
			e.Concurrence = append(e.Concurrence, Concurrence{Unit: v, Pairs: pairs(blocks[k], treatment)})
		}
	}
	return e, true
}

// combined gives the combination of factors that each instance of unit u received, of
// those that occur.
func (a *Allotment) combined(u int, fs []int) (factor.Factor, bool) {
	var of []factor.Factor
	for _, f := range fs {
		level := a.LevelAt(f, u)
		if level == nil {
			return factor.Factor{}, false
		}
		for _, l := range level {
			if l < 0 {
				return factor.Factor{}, false
			}
		}
		of = append(of, factor.Factor{Level: level, N: len(a.Plan.Factors[f].Levels)})
	}
	return factor.Infimum(of...), true
}

// pairs counts the pairs of treatments by how often they stand together.
func pairs(block, treatment factor.Factor) []int {
	t := treatment.N
	c := make([]int, t*t)
	perBlock(block, treatment, func(_ int, ts []int, ns []float64) {
		for i, x := range ts {
			for j, y := range ts[:i] {
				c[x*t+y] += int(ns[i] * ns[j])
			}
		}
	})
	var out []int
	for x := range t {
		for y := range x {
			n := c[x*t+y]
			for len(out) <= n {
				out = append(out, 0)
			}
			out[n]++
		}
	}
	return out
}
