// Package strata is the analysis of variance by strata for orthogonal structures: each
// treatment term against the error of the units that received it (Nelder 1965; Tjur 1984;
// Bailey 2008, ch. 10-12, from memory).
//
// The rows are the smallest units. A unit u is a factor over them, and V_u the vectors
// constant on its classes. Its stratum W_u is what V_u holds beyond the units coarser than
// it; a set of units closed under supremum divides all vectors into strata and the mean.
// A treatment term T has the effect space W_T, what V_T holds beyond its margins.
//
// New takes nothing for granted. On the counts of the cells, in integers, it checks that
// units are orthogonal and closed, that terms are orthogonal to each other and to units,
// that each W_T lies in one stratum, and that the strata with terms are eigenspaces of
//
//	V = Σ σ²ᵤ Zᵤ Zᵤ′   with eigenvalue   ξᵤ = Σ nᵥ σ²ᵥ over v equal to u or finer
//
// for all σ², nᵥ being the size of the classes of v. What fails is a typed error that says
// where, so that the caller can turn to averages, least squares or a mixed model.
package strata

import (
	"fmt"
	"math/bits"
	"slices"

	"penwright/protocol/factor"
)

// Design is a structure before any data. All factors are over the same n rows.
type Design struct {
	// Units are the unit factors. The last has every row in a class of its own. Only
	// these are strata: what lies in no coarser unit belongs to the finer one, as square
	// × period does to the sample where periods are common to squares.
	Units []factor.Factor

	// Random, one for each unit, bears on the variance of means alone. Whatever it says, the
	// last unit is random, units whose stratum holds a term are, and units within random ones.
	Random []bool

	// Factors are the treatment factors (carried classes too). Every level occurs.
	Factors []factor.Factor

	// Terms are ascending lists of indices into Factors, each with all its margins
	// somewhere in the list.
	Terms [][]int
}

// Structure is a checked design.
type Structure struct {
	n, k   int             // rows; rows in a point
	point  factor.Factor   // row → point: a class of the smallest unit all treatments are constant on
	row    []int32         // a row of each point
	units  []factor.Factor // over points if upper, else over rows
	counts [][]int         // rows in each class of each unit
	upper  []bool          // the unit is coarser than the points or their own unit
	order  []int           // units, coarse before fine
	above  [][]int         // above[u]: units strictly coarser than u, and those before it of equal classes
	twin   []int           // an earlier unit with the same classes, or -1
	random []bool
	size   []int // of the classes of a unit, 0 where they differ
	df     []int

	factors []factor.Factor // over points
	terms   [][]int
	cells   []factor.Factor // over points: the cells of each term, last factor fastest
	reps    [][]int         // rows in each cell of each term
	stratum []int           // unit of each term
	within  [][]int         // terms of each unit, margins first
	level   [][]int32       // cell of a point of each class of the term's unit
	// constant: all points of a class are in one cell. Else the term is confounded with the
	// unit, its effects constant on the classes though its cells are not.
	constant []bool
	mean     []float64 // variance of the grand mean direction in ξ of each unit
}

// NotFinest: the last unit puts several rows into one class.
type NotFinest struct{}

func (NotFinest) Error() string { return "strata: the last unit has classes of several rows" }

// EmptyLevel: a level of a treatment factor has no row.
type EmptyLevel struct{ Factor, Level int }

func (e EmptyLevel) Error() string {
	return fmt.Sprintf("strata: level %d of factor %d has no row", e.Level, e.Factor)
}

// NoMargin: a margin of the term is not among the terms.
type NoMargin struct{ Term int }

func (e NoMargin) Error() string { return fmt.Sprintf("strata: term %d lacks a margin", e.Term) }

// UnitsNotOrthogonal: two units that cross do so in unequal numbers.
type UnitsNotOrthogonal struct{ A, B int }

func (e UnitsNotOrthogonal) Error() string {
	return fmt.Sprintf("strata: units %d and %d are not orthogonal", e.A, e.B)
}

// UnitsNotClosed: what two units have in common is not a unit.
type UnitsNotClosed struct{ A, B int }

func (e UnitsNotClosed) Error() string {
	return fmt.Sprintf("strata: units %d and %d share classes that are not of a unit", e.A, e.B)
}

// NotOrthogonal: two terms are not orthogonal, as where their levels are combined in
// unequal proportions, or one is aliased with the other.
type NotOrthogonal struct{ A, B int }

func (e NotOrthogonal) Error() string {
	return fmt.Sprintf("strata: terms %d and %d are not orthogonal", e.A, e.B)
}

// SpreadTerm: a term lies partly in the stratum of each of these units, partly in others.
type SpreadTerm struct {
	Term  int
	Units []int
}

func (e SpreadTerm) Error() string {
	return fmt.Sprintf("strata: term %d is spread over the strata of units %v", e.Term, e.Units)
}

// UnequalUnit: the classes of the unit differ in size, so that the errors of a stratum
// with a term, or of the grand mean, are not of one variance.
type UnequalUnit struct{ Unit int }

func (e UnequalUnit) Error() string {
	return fmt.Sprintf("strata: classes of unit %d differ in size", e.Unit)
}

// New checks a design. The errors are those of this file, the first found; terms and
// units are named by their index in the design.
func New(d Design) (*Structure, error) {
	s := &Structure{terms: d.Terms}
	if err := s.takeUnits(d); err != nil {
		return nil, err
	}
	if err := s.takeTerms(d); err != nil {
		return nil, err
	}
	if err := s.place(d); err != nil {
		return nil, err
	}
	s.weighMean()
	return s, nil
}

// takeUnits orders the units, finds the points, checks orthogonality and closure, and
// counts degrees of freedom.
func (s *Structure) takeUnits(d Design) error {
	if len(d.Units) == 0 || len(d.Random) != len(d.Units) {
		panic("strata: one unit at least, and as many random marks as units")
	}
	last := len(d.Units) - 1
	s.n = d.Units[last].Len()
	for _, f := range append(d.Units[:last:last], d.Factors...) {
		if f.Len() != s.n {
			panic("strata: factors differ in length")
		}
	}
	s.counts = make([][]int, len(d.Units))
	rank := make([]int, len(d.Units))
	for u, f := range d.Units {
		s.counts[u] = f.Counts()
		for _, c := range s.counts[u] {
			if c > 0 {
				rank[u]++
			}
		}
		s.order = append(s.order, u)
	}
	if s.n == 0 || rank[last] != s.n {
		return NotFinest{}
	}
	// The supremum of two units has fewer classes than either, so it comes before both.
	slices.SortStableFunc(s.order, func(a, b int) int { return rank[a] - rank[b] })
	s.size = make([]int, len(d.Units))
	for u, counts := range s.counts {
		for _, c := range counts {
			if c == 0 {
				continue
			}
			if s.size[u] == 0 {
				s.size[u] = c
			} else if c != s.size[u] {
				s.size[u] = -1
			}
		}
		s.size[u] = max(0, s.size[u])
	}

	finer := make([][]bool, len(d.Units)) // finer[b][a]: classes of b lie within those of a
	for b := range finer {
		finer[b] = make([]bool, len(d.Units))
		for a := range finer {
			finer[b][a] = a == b || rank[b] >= rank[a] && factor.Finer(d.Units[b], d.Units[a])
		}
	}
	if err := s.findPoints(d, finer); err != nil {
		return err
	}

	s.above = make([][]int, len(d.Units))
	s.twin = make([]int, len(d.Units))
	s.df = make([]int, len(d.Units))
	for i, b := range s.order {
		s.twin[b] = -1
		s.df[b] = rank[b] - 1
		for _, a := range s.order[:i] {
			if finer[b][a] {
				s.above[b] = append(s.above[b], a)
				s.df[b] -= s.df[a]
				if rank[a] == rank[b] && s.twin[b] < 0 {
					s.twin[b] = a
				}
				continue
			}
			// Both are upper or both lower: the points are comparable with every unit.
			units := d.Units
			if s.upper[a] {
				units = s.units
			}
			if !factor.Orthogonal(units[a], units[b]) {
				return UnitsNotOrthogonal{A: min(a, b), B: max(a, b)}
			}
			sup := factor.Supremum(units[a], units[b])
			known := slices.ContainsFunc(s.order[:i], func(u int) bool {
				return rank[u] == sup.N && units[u].Len() == sup.Len() && factor.Equivalent(units[u], sup)
			})
			if sup.N > 1 && !known {
				return UnitsNotClosed{A: min(a, b), B: max(a, b)}
			}
		}
	}
	s.random = slices.Clone(d.Random)
	s.random[last] = true
	return nil
}

// findPoints finds the coarsest unit that all treatments are constant on and with which
// every unit is comparable: what lies below is sampling, and everything else can be done
// on its classes.
func (s *Structure) findPoints(d Design, finer [][]bool) error {
	base := s.order[len(s.order)-1]
search:
	for _, v := range s.order {
		for u := range d.Units {
			if !finer[u][v] && !finer[v][u] {
				continue search
			}
		}
		for _, f := range d.Factors {
			if !factor.Finer(d.Units[v], f) {
				continue search
			}
		}
		if s.size[v] > 0 {
			base = v
		} else if len(d.Terms) > 0 {
			// Every term lies in V_v, so that this unit's classes must be of one size.
			return UnequalUnit{Unit: v}
		} else {
			continue
		}
		break
	}

	s.k = s.size[base]
	s.upper = make([]bool, len(d.Units))
	s.units = make([]factor.Factor, len(d.Units))
	s.point = d.Units[base].Compact()
	s.row = make([]int32, s.point.N)
	for i := s.n - 1; i >= 0; i-- {
		s.row[s.point.Level[i]] = int32(i)
	}
	for u, f := range d.Units {
		s.upper[u] = finer[base][u]
		if s.upper[u] {
			f = s.onPoints(f)
		}
		s.units[u] = f
	}
	for _, f := range d.Factors {
		s.factors = append(s.factors, s.onPoints(f))
	}
	return nil
}

func (s *Structure) onPoints(f factor.Factor) factor.Factor {
	return restrict(f, s.row)
}

func restrict(f factor.Factor, rows []int32) factor.Factor {
	out := factor.Factor{Level: make([]int32, len(rows)), N: f.N}
	for i, r := range rows {
		out.Level[i] = f.Level[r]
	}
	return out
}

// takeTerms checks the treatment side: with S∩T the common factors of two terms,
// P_S P_T = P_S∩T, which is orthogonality with S∩T for supremum.
func (s *Structure) takeTerms(d Design) error {
	for v, f := range s.factors {
		for l, c := range f.Counts() {
			if c == 0 {
				return EmptyLevel{Factor: v, Level: l}
			}
		}
	}
	index := make(map[string]int, len(d.Terms))
	for t, term := range d.Terms {
		if len(term) == 0 || len(term) > 16 {
			panic("strata: a term has 1 to 16 factors")
		}
		for i, v := range term {
			if v < 0 || v >= len(d.Factors) || i > 0 && v <= term[i-1] {
				panic("strata: term is not an ascending list of factors")
			}
		}
		if _, twice := index[fmt.Sprint(term)]; twice {
			panic("strata: a term is listed twice")
		}
		index[fmt.Sprint(term)] = t
	}
	for t, term := range d.Terms {
		for set := 1; set < 1<<len(term); set++ {
			if _, ok := index[fmt.Sprint(subset(term, set))]; !ok {
				return NoMargin{Term: t}
			}
		}
	}

	// Terms by size, so that a term is looked at after its margins.
	var bySize []int
	for t := range d.Terms {
		bySize = append(bySize, t)
	}
	slices.SortStableFunc(bySize, func(a, b int) int { return len(d.Terms[a]) - len(d.Terms[b]) })

	// Where all treatments are equally replicated one point of each stands for all.
	var all factor.Factor
	rows := make([]int32, s.point.N)
	for i := range rows {
		rows[i] = int32(i)
	}
	if len(s.factors) > 0 {
		if all = factor.Infimum(s.factors...); all.Uniform() {
			rows = rows[:all.N]
			for i := s.point.N - 1; i >= 0; i-- {
				rows[all.Level[i]] = int32(i)
			}
		}
	}
	s.cells = make([]factor.Factor, len(d.Terms))
	s.reps = make([][]int, len(d.Terms))
	few := make([]factor.Factor, len(d.Terms))
	for i, t := range bySize {
		// Its margins have passed, orthogonal with their common factors for supremum, so that
		// every cell is filled: n·n(common) = n(margin)·n(margin).
		k := 1
		for _, v := range d.Terms[t] {
			k *= s.factors[v].N
		}
		s.cells[t] = s.cross(d.Terms[t], k)
		few[t] = restrict(s.cells[t], rows)
		for _, o := range bySize[:i] {
			both := common(d.Terms[t], d.Terms[o])
			if len(both) == len(d.Terms[o]) {
				continue // a margin
			}
			meet := 1
			for _, v := range both {
				meet *= s.factors[v].N
			}
			if !factor.Orthogonal(few[t], few[o]) || factor.Supremum(few[t], few[o]).N != meet {
				return NotOrthogonal{A: min(t, o), B: max(t, o)}
			}
		}
		s.reps[t] = s.cells[t].Counts()
		for c, n := range s.reps[t] {
			s.reps[t][c] = n * s.k
		}
	}
	return nil
}

// cross numbers the k cells of a term, the last factor running fastest.
func (s *Structure) cross(term []int, k int) factor.Factor {
	f := factor.Factor{Level: make([]int32, s.point.N), N: k}
	for _, v := range term {
		g := s.factors[v]
		for i := range f.Level {
			f.Level[i] = f.Level[i]*int32(g.N) + g.Level[i]
		}
	}
	return f
}

// subset picks the members of the term whose bit is set.
func subset(term []int, set int) []int {
	var out []int
	for i, v := range term {
		if set>>i&1 == 1 {
			out = append(out, v)
		}
	}
	return out
}

// common is the intersection of two ascending lists.
func common(a, b []int) []int {
	var out []int
	for _, v := range a {
		if slices.Contains(b, v) {
			out = append(out, v)
		}
	}
	return out
}

// place finds the stratum of each term. With P_u P_R = P_u∨R for all margins R of T, what
// V_u holds of W_T has dimension
//
//	d = Σ (−1)^|T∖R| · classes of u∨R
//
// over the margins R, T and the empty one included: all of W_T or none is wanted. The
// stratum is the coarsest unit that holds all.
func (s *Structure) place(d Design) error {
	s.stratum = make([]int, len(d.Terms))
	s.within = make([][]int, len(d.Units))
	s.level = make([][]int32, len(d.Terms))
	var bySize []int
	index := make(map[string]int, len(d.Terms))
	for t, term := range d.Terms {
		s.stratum[t] = -1
		bySize = append(bySize, t)
		index[fmt.Sprint(term)] = t
	}
	slices.SortStableFunc(bySize, func(a, b int) int { return len(d.Terms[a]) - len(d.Terms[b]) })

	spread := make([][]int, len(d.Terms))
	joined := make([]int, len(d.Terms)) // classes of the supremum of the unit and each term
	for _, u := range s.order {
		if !s.upper[u] {
			continue
		}
		f := s.units[u]
		for _, t := range bySize {
			term := d.Terms[t]
			if factor.Finer(f, s.cells[t]) {
				joined[t] = s.cells[t].N
			} else {
				if !factor.Orthogonal(f, s.cells[t]) {
					spread[t] = append(spread[t], u)
					joined[t] = 0
					continue
				}
				joined[t] = factor.Supremum(f, s.cells[t]).N
			}
			held := 0
			for set := 0; set < 1<<len(term); set++ {
				n := 1
				if set > 0 {
					n = joined[index[fmt.Sprint(subset(term, set))]]
				}
				if (len(term)-bits.OnesCount(uint(set)))%2 == 1 {
					n = -n
				}
				held += n
			}
			switch df := s.termDF(t); {
			case held == df && (df > 0 || joined[t] == s.cells[t].N):
				if s.stratum[t] < 0 {
					s.stratum[t] = u
				}
			case held != 0:
				spread[t] = append(spread[t], u)
			}
		}
	}
	for _, t := range bySize {
		if len(spread[t]) > 0 {
			return SpreadTerm{Term: t, Units: spread[t]}
		}
	}
	for _, t := range bySize {
		if u := s.stratum[t]; s.termDF(t) > 0 {
			s.within[u] = append(s.within[u], t)
		}
	}

	// W_u is an eigenspace when the classes of u and of every finer unit are of one size.
	for u := range d.Units {
		if len(s.within[u]) == 0 {
			continue
		}
		s.random[u] = true
		for v := range d.Units {
			if (v == u || slices.Contains(s.above[v], u)) && s.size[v] == 0 {
				return UnequalUnit{Unit: v}
			}
		}
	}
	for u, first := range s.twin {
		if first >= 0 && s.random[u] {
			s.random[first] = true
		}
	}
	for _, u := range s.order {
		for _, a := range s.above[u] {
			s.random[u] = s.random[u] || s.random[a]
		}
	}
	// The grand mean is one when the classes of every random unit are.
	for u, random := range s.random {
		if random && s.size[u] == 0 {
			return UnequalUnit{Unit: u}
		}
	}

	s.constant = make([]bool, len(d.Terms))
	for t, u := range s.stratum {
		s.constant[t] = factor.Finer(s.units[u], s.cells[t])
		s.level[t] = make([]int32, s.units[u].N)
		for c := range s.level[t] {
			s.level[t][c] = -1
		}
		for i, c := range s.units[u].Level {
			s.level[t][c] = s.cells[t].Level[i]
		}
	}
	return nil
}

func (s *Structure) termDF(t int) int {
	df := 1
	for _, v := range s.terms[t] {
		df *= s.factors[v].N - 1
	}
	return df
}

// weighMean writes the eigenvalue of the grand mean, Σ nᵥσ²ᵥ over random units v, in terms
// of the ξ: nᵥσ²ᵥ = ξᵥ − Σ over the units finer than v.
func (s *Structure) weighMean() {
	s.mean = make([]float64, len(s.units))
	for u, random := range s.random {
		if random {
			for v, c := range s.share(u) {
				s.mean[v] += c
			}
		}
	}
}

// share gives nᵤσ²ᵤ as a combination of the ξ. A unit with the same classes as an earlier
// one has none of its own.
func (s *Structure) share(u int) []float64 {
	all := make([][]float64, len(s.units))
	for i := len(s.order) - 1; i >= 0; i-- {
		v := s.order[i]
		all[v] = make([]float64, len(s.units))
		if s.twin[v] >= 0 {
			continue
		}
		all[v][v] = 1
		for _, w := range s.order[i+1:] {
			if slices.Contains(s.above[w], v) {
				for j, c := range all[w] {
					all[v][j] -= c
				}
			}
		}
	}
	return all[u]
}

// Stratum is the unit whose stratum holds the term.
func (s *Structure) Stratum(term int) int { return s.stratum[term] }

// Random tells whether a unit counts as random in the variance of means.
func (s *Structure) Random(unit int) bool { return s.random[unit] }

// DF is the degrees of freedom of the stratum of a unit.
func (s *Structure) DF(unit int) int { return s.df[unit] }

// ErrorDF is what its terms leave of the degrees of freedom of a stratum.
func (s *Structure) ErrorDF(unit int) int {
	df := s.df[unit]
	for _, t := range s.within[unit] {
		df -= s.termDF(t)
	}
	return df
}
