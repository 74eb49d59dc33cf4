package linear

import "math"

// Adjustment says for what else each term is adjusted.
type Adjustment int

const (
	// Partial tests the equality of adjusted means with equal weights, each term given all
	// other columns (weighted squares of means; Yates 1934, from memory).
	Partial Adjustment = iota
	// Marginal adjusts a term for all that do not contain it (fitting constants; Yates 1934).
	Marginal
	// Sequential adjusts for nuisance factors, then covariates and terms as written.
	Sequential
)

// Test is the sum of squares of a hypothesis. Its error is that of the fit.
type Test struct {
	Kind      Kind // what is tested: a nuisance factor, a covariate or a term
	Index     int  // into Nuisance, Covariates or Terms of the model
	DF        int
	Lost      int     // degrees of freedom that empty cells or aliases took away
	SS        float64 // NaN where Estimable is false
	Estimable bool    // false: a partial hypothesis on means that are not all estimable
}

// Tests gives one test for each covariate, then one for each term. Covariates are
// adjusted for all else, save under Sequential.
func (f *Fit) Tests(adjustment Adjustment) []Test {
	var out []Test
	for b, block := range f.blocks {
		if block.kind != Covariate && block.kind != Term {
			continue
		}
		var t Test
		switch {
		case adjustment == Sequential:
			t = f.sequential(block)
		case adjustment == Marginal && block.kind == Term:
			t = f.marginal(b)
		default:
			t = f.partial(block)
		}
		t.Kind, t.Index = block.kind, block.index
		t.Lost = block.to - block.from - t.DF
		out = append(out, t)
	}
	return out
}

// sequential sums the squares of the response along the steps of the block.
func (f *Fit) sequential(b block) Test {
	t := Test{Estimable: true}
	for i, j := range f.pivot {
		if j >= b.from && j < b.to {
			t.DF++
			t.SS += f.c[i] * f.c[i]
		}
	}
	return t
}

// marginal makes the staircase anew with the block behind all blocks that do not contain
// it. What nuisance columns took is settled by then, so only the rest is worked on.
func (f *Fit) marginal(b int) Test {
	own := f.blocks[b]
	term := f.model.Terms[own.index]
	top := 0
	for top < len(f.pivot) && f.kindOf(f.pivot[top]) == Nuisance {
		top++
	}
	var columns []int
	take := func(o block) {
		for j := o.from; j < o.to; j++ {
			columns = append(columns, j)
		}
	}
	for i, o := range f.blocks {
		if o.kind == Nuisance || i == b || o.kind == Term && within(term, f.model.Terms[o.index]) {
			continue
		}
		take(o)
	}
	before := len(columns)
	take(own)
	pivot, c := f.again(top, columns)
	t := Test{Estimable: true}
	for i, j := range pivot {
		if j >= before {
			t.DF++
			t.SS += c[i] * c[i]
		}
	}
	return t
}

// again makes the staircase of some columns from the steps top and below.
func (f *Fit) again(top int, columns []int) (pivot []int, c []float64) {
	rows := len(f.pivot) - top
	a := make([]float64, rows*len(columns))
	norm := make([]float64, len(columns))
	for i := range rows {
		for l, j := range columns {
			a[i*len(columns)+l] = f.r[(top+i)*f.p+j]
		}
	}
	for l, j := range columns {
		norm[l] = f.norm[j]
	}
	c = append([]float64(nil), f.c[top:]...)
	return staircase(a, rows, len(columns), c, norm), c
}

func (f *Fit) kindOf(column int) Kind {
	for _, b := range f.blocks {
		if column >= b.from && column < b.to {
			return b.kind
		}
	}
	panic("linear: no such column")
}

// partial tests that the coefficients of the block are all zero. Where nothing is aliased
// and the block stands last, that is its own share in sequence.
func (f *Fit) partial(b block) Test {
	if b.to == f.p && len(f.pivot) == f.p {
		return f.sequential(b)
	}
	rows := make([][]float64, 0, b.to-b.from)
	for j := b.from; j < b.to; j++ {
		l := make([]float64, f.p)
		l[j] = 1
		rows = append(rows, l)
	}
	t := f.hypothesis(rows)
	if len(rows) == 0 {
		t.Estimable = true
	}
	return t
}

// hypothesis tests that all functions are zero: with W = R₁⁻ᵀL′ the sum of squares is the
// squared length of the projection of c onto the columns of W.
func (f *Fit) hypothesis(l [][]float64) Test {
	k, q := len(f.pivot), len(l)
	a := make([]float64, k*q)
	norm := make([]float64, q)
	w := make([]float64, k)
	for h, row := range l {
		if !f.express(w, row) {
			return Test{SS: math.NaN()}
		}
		for i, v := range w {
			a[i*q+h] = v
			norm[h] = math.Hypot(norm[h], v)
		}
	}
	c := append([]float64(nil), f.c...)
	t := Test{Estimable: true}
	for i := range staircase(a, k, q, c, norm) {
		t.DF++
		t.SS += c[i] * c[i]
	}
	return t
}

// Hypothesis tests that the contrasts, one list of weights over the functions each, are
// all zero. Contrasts that depend on others add nothing. The test is not estimable where one
// of them is not, or where the weights of a list over means do not sum to zero.
func (e *Estimates) Hypothesis(contrasts [][]float64) Test {
	rows := make([][]float64, len(contrasts))
	for i, w := range contrasts {
		row, level := e.combine(w)
		if level != 0 {
			return Test{Kind: Term, Lost: len(contrasts), SS: math.NaN()}
		}
		rows[i] = row
	}
	t := e.fit.hypothesis(rows)
	t.Kind = Term
	t.Lost = len(contrasts) - t.DF
	return t
}

// EqualSlopes tests that a covariate has the same slope in all treatment cells of the
// terms in the model, by adding its products with the columns of every term. The error is
// that of the larger model: its degrees of freedom and sum of squares. A test with DF 0
// says that no slopes can be told apart.
func (f *Fit) EqualSlopes(covariate int) (t Test, errorDF int, errorSS float64, err error) {
	var extra [][2]int
	for k := range f.model.Terms {
		extra = append(extra, [2]int{covariate, k})
	}
	g, err := f.model.fit(extra)
	if err != nil {
		return Test{}, 0, 0, err
	}
	t = Test{Kind: Covariate, Index: covariate, Estimable: true}
	for _, b := range g.blocks {
		if b.kind == slope {
			s := g.sequential(b)
			t.DF += s.DF
			t.SS += s.SS
			t.Lost += b.to - b.from - s.DF
		}
	}
	return t, g.DF, g.RSS, nil
}

// Nuisance tests each nuisance factor: adjusted for all else in the model, or in
// sequence, for those written before it alone. With a trend, Unit's intercepts and curves
// count as written first and are not tested.
func (f *Fit) Nuisance(adjustment Adjustment) ([]Test, error) {
	var out []Test
	for k, g := range f.model.Nuisance {
		small := f.model
		small.Nuisance = append(append(small.Nuisance[:0:0], f.model.Nuisance[:k]...), f.model.Nuisance[k+1:]...)
		rank, rss := f.Rank, f.RSS
		if adjustment == Sequential {
			large := f.model
			small.Nuisance, large.Nuisance = f.model.Nuisance[:k], f.model.Nuisance[:k+1]
			small.Covariates, large.Covariates = nil, nil
			small.Terms, large.Terms = nil, nil
			with, err := large.Fit()
			if err != nil {
				return nil, err
			}
			rank, rss = with.Rank, with.RSS
		}
		without, err := small.Fit()
		if err != nil {
			return nil, err
		}
		t := Test{Kind: Nuisance, Index: k, DF: rank - without.Rank, Estimable: true}
		if t.DF > 0 {
			t.SS = math.Max(0, without.RSS-rss)
		}
		t.Lost = g.N - 1 - t.DF
		out = append(out, t)
	}
	return out, nil
}

// Alias is a covariate or term of which columns depend on what stands before it.
type Alias struct {
	Kind  Kind
	Index int
	Lost  int  // columns
	Whole bool // nothing is left of it
}

// Aliased lists covariates and terms that lost columns, in order.
func (f *Fit) Aliased() []Alias {
	var out []Alias
	for _, b := range f.blocks {
		if b.kind != Covariate && b.kind != Term {
			continue
		}
		lost := 0
		for j := b.from; j < b.to; j++ {
			if f.row[j] < 0 {
				lost++
			}
		}
		if lost > 0 {
			out = append(out, Alias{Kind: b.kind, Index: b.index, Lost: lost, Whole: lost == b.to-b.from})
		}
	}
	return out
}
