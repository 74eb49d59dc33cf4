package factor

import "fmt"

// NotOrthogonal is the error of a set in which factors I and J are not orthogonal.
type NotOrthogonal struct{ I, J int }

func (e NotOrthogonal) Error() string {
	return fmt.Sprintf("factor: factors %d and %d are not orthogonal", e.I, e.J)
}

// NotClosed is the error of a set that lacks the supremum of factors I and J.
type NotClosed struct{ I, J int }

func (e NotClosed) Error() string {
	return fmt.Sprintf("factor: the supremum of factors %d and %d is not in the set", e.I, e.J)
}

// Set is a family of factors on the same rows, pairwise orthogonal and closed under
// supremum. Every factor f then owns the part W_f of V_f that is orthogonal to all
// coarser factors, and the spaces W_f are orthogonal to one another:
//
//	V_f = ⊕ W_g over all g in the set that are f or coarser
//	dim W_f = rank f − Σ dim W_g over all g coarser than f
//
// which is Möbius inversion over the order of the set. Of factors that are the same
// partition the first owns the space and the others have dimension 0.
//
// Source: T. Tjur, International Statistical Review 52 (1984) 33-81; R. A. Bailey,
// Design of Comparative Experiments (2008), ch. 10 (both from memory).
type Set struct {
	factors []Factor
	coarser [][]int // for each factor the factors strictly above it, in the order of the sweep
	order   []int   // coarse before fine
	df      []int
}

// NewSet orders fs, all of one length. It returns NotOrthogonal or NotClosed when fs
// is not such a family, and panics when it is empty or lengths differ. Close adds what
// is missing under supremum.
func NewSet(fs []Factor) (*Set, error) {
	if len(fs) == 0 {
		panic("factor: set of no factors")
	}
	s := &Set{factors: fs, coarser: make([][]int, len(fs)), df: make([]int, len(fs))}
	below := make([][]bool, len(fs)) // below[i][j]: i is strictly below j, or its later equal
	for i := range fs {
		below[i] = make([]bool, len(fs))
		for j := range fs {
			if i != j && Finer(fs[i], fs[j]) {
				below[i][j] = j < i || !Finer(fs[j], fs[i])
			}
		}
	}
	for i := range fs {
		for j := range i {
			if below[i][j] || below[j][i] {
				continue
			}
			if !Orthogonal(fs[i], fs[j]) {
				return nil, NotOrthogonal{I: j, J: i}
			}
			sup, found := Supremum(fs[i], fs[j]), false
			for k := range fs {
				if below[i][k] && below[j][k] && Equivalent(fs[k], sup) {
					found = true
					break
				}
			}
			if !found {
				return nil, NotClosed{I: j, J: i}
			}
		}
	}
	placed := make([]bool, len(fs))
	for len(s.order) < len(fs) {
		for i := range fs {
			if placed[i] {
				continue
			}
			free := true
			for j := range fs {
				if below[i][j] && !placed[j] {
					free = false
					break
				}
			}
			if free {
				placed[i] = true
				s.order = append(s.order, i)
			}
		}
	}
	for _, i := range s.order {
		s.df[i] = fs[i].Rank()
		for _, j := range s.order {
			if below[i][j] {
				s.coarser[i] = append(s.coarser[i], j)
				s.df[i] -= s.df[j]
			}
		}
	}
	return s, nil
}

// Close returns fs followed by the suprema that a closed set needs and fs lacks.
func Close(fs []Factor) []Factor {
	out := append([]Factor(nil), fs...)
	for i := 0; i < len(out); i++ {
	pair:
		for j := range i {
			sup := Supremum(out[i], out[j])
			for _, g := range out {
				if Equivalent(g, sup) {
					continue pair
				}
			}
			out = append(out, sup)
		}
	}
	return out
}

// DF is the dimension of W_f for each factor, in the order given to NewSet.
func (s *Set) DF() []int { return append([]int(nil), s.df...) }

// Order lists the indices of the factors coarse before fine, otherwise as given.
func (s *Set) Order() []int { return append([]int(nil), s.order...) }

// Coarser lists the indices of the factors above factor i, coarse before fine.
func (s *Set) Coarser(i int) []int { return append([]int(nil), s.coarser[i]...) }

// Split gives the component of y in W_f for each factor, in the order given to NewSet.
// y has one value per row. Where the set holds the equality factor the components add
// up to y. One sweep of the rows for each factor and each factor above it.
func (s *Set) Split(y []float64) [][]float64 {
	out := make([][]float64, len(s.factors))
	for _, i := range s.order {
		out[i] = append([]float64(nil), y...)
		// Taking the coarser components away before averaging keeps the digits that
		// subtracting projections of y afterwards would lose.
		for _, j := range s.coarser[i] {
			for r, v := range out[j] {
				out[i][r] -= v
			}
		}
		s.factors[i].Project(out[i], out[i])
	}
	return out
}
