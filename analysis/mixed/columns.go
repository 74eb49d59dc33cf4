package mixed

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
)

// aliasTolerance is the squared length of a column, relative to that before adjustment,
// at or below which what the columns before it leave of it is rounding.
const aliasTolerance = 1e-11

// columns is the fixed part, coded 0 and 1, as sparse rows.
type columns struct {
	model *Model
	from  []int // first column of each part; column 0 is the intercept
	total int

	// A part's values are held as (value − centre)/scale.
	centre, scale []float64

	start []int32 // of each row, into col and val
	col   []int32
	val   []float64

	kept    []int       // columns that are not aliased, ascending
	at      []int       // at[j]: position of column j in kept, or -1
	depends [][]float64 // of an aliased column, its coefficients in kept; nil for others
	logdet  float64     // Σ 2 log scale over kept columns
}

// sets tells whether a part's values are all 0 or 1, which select rows and are left as
// they are.
func sets(v []float64) bool {
	for _, x := range v {
		if x != 0 && x != 1 {
			return false
		}
	}
	return true
}

func newColumns(m *Model) (*columns, error) {
	n := len(m.Y)
	c := &columns{model: m, total: 1}
	for _, p := range m.Parts {
		size := 1
		for _, f := range p.Factors {
			size *= m.Factors[f].N
			if size > MaxColumns {
				return nil, TooLarge{Columns: size}
			}
		}
		c.from = append(c.from, c.total)
		c.total += size
		centre, scale := 0.0, 1.0
		if p.Value != nil && !sets(p.Value) {
			centre = mean(p.Value)
			s := 0.0
			for _, v := range p.Value {
				s += (v - centre) * (v - centre)
			}
			if s > 0 {
				scale = math.Sqrt(s / float64(n))
			}
		}
		c.centre, c.scale = append(c.centre, centre), append(c.scale, scale)
	}
	if c.total > MaxColumns {
		return nil, TooLarge{Columns: c.total}
	}
	c.start = make([]int32, n+1)
	for i := range n {
		c.col, c.val = append(c.col, 0), append(c.val, 1)
		for k, p := range m.Parts {
			v := 1.0
			if p.Value != nil {
				v = (p.Value[i] - c.centre[k]) / c.scale[k]
			}
			if v == 0 {
				continue
			}
			at := 0
			for _, f := range p.Factors {
				at = at*m.Factors[f].N + int(m.Factors[f].Level[i])
			}
			c.col, c.val = append(c.col, int32(c.from[k]+at)), append(c.val, v)
		}
		c.start[i+1] = int32(len(c.col))
	}
	c.eliminate()
	for k := range m.Parts {
		end := c.total
		if k+1 < len(c.from) {
			end = c.from[k+1]
		}
		for j := c.from[k]; j < end; j++ {
			if c.at[j] >= 0 {
				c.logdet += 2 * math.Log(c.scale[k])
			}
		}
	}
	return c, nil
}

// eliminate finds the columns that depend on those before them, by Cholesky's
// factorization of X′X column by column.
func (c *columns) eliminate() {
	p := c.total
	xx := mat.NewSymDense(p, nil)
	raw := xx.RawSymmetric()
	for i := range len(c.start) - 1 {
		a, b := c.start[i], c.start[i+1]
		for u := a; u < b; u++ {
			for v := a; v < b; v++ {
				if c.col[u] <= c.col[v] {
					raw.Data[int(c.col[u])*raw.Stride+int(c.col[v])] += c.val[u] * c.val[v]
				}
			}
		}
	}
	c.at = make([]int, p)
	c.depends = make([][]float64, p)
	var l [][]float64 // rows of the factor, over kept columns
	for j := range p {
		row := make([]float64, len(c.kept), len(c.kept)+1)
		rest := xx.At(j, j)
		for k, kj := range c.kept {
			s := xx.At(kj, j)
			for m := range k {
				s -= l[k][m] * row[m]
			}
			row[k] = s / l[k][k]
			rest -= row[k] * row[k]
		}
		if rest <= aliasTolerance*xx.At(j, j) || xx.At(j, j) == 0 {
			c.at[j] = -1
			// Coefficients: L′a = row.
			a := append([]float64(nil), row...)
			for k := len(a) - 1; k >= 0; k-- {
				a[k] /= l[k][k]
				for m := range k {
					a[m] -= l[k][m] * a[k]
				}
			}
			c.depends[j] = a
			continue
		}
		c.at[j] = len(c.kept)
		c.kept = append(c.kept, j)
		l = append(l, append(row, math.Sqrt(rest)))
	}
}

// within tells whether the classes of f lie in the space of the columns: whether nothing is
// left of tr(Z′Z) = n after adjustment for X. X′ZZ′X is a sum over classes.
func (c *columns) within(f factor.Factor) bool {
	p := len(c.kept)
	rows := make([][]int32, f.N)
	for i, l := range f.Level {
		rows[l] = append(rows[l], int32(i))
	}
	cross, total := mat.NewSymDense(p, nil), mat.NewSymDense(p, nil)
	sum := make([]float64, p)
	one := make([]float64, p)
	add := func(to *mat.SymDense, v []float64, cols []int) {
		for _, a := range cols {
			for _, b := range cols {
				if a <= b {
					to.SetSym(a, b, to.At(a, b)+v[a]*v[b])
				}
			}
		}
	}
	n := 0.0 // tr(Z′Z) = Σ over classes of their size
	for _, r := range rows {
		n += float64(len(r))
		var cols []int
		for _, i := range r {
			var own []int
			for u := c.start[i]; u < c.start[i+1]; u++ {
				j := c.at[c.col[u]]
				if j < 0 {
					continue
				}
				if one[j] == 0 {
					own = append(own, j)
				}
				one[j] += c.val[u]
				if !slices.Contains(cols, j) {
					cols = append(cols, j)
				}
				sum[j] += c.val[u]
			}
			add(total, one, own)
			for _, j := range own {
				one[j] = 0
			}
		}
		add(cross, sum, cols)
		for _, j := range cols {
			sum[j] = 0
		}
	}
	var ch mat.Cholesky
	if !ch.Factorize(total) {
		return false
	}
	var t mat.Dense
	_ = ch.SolveTo(&t, cross) // the error tells of the condition number alone
	return n-mat.Trace(&t) <= 1e-8*n
}

// reduce gives weights over all columns, as they are held, as weights over kept ones, and
// tells whether their combination is a function of what X can estimate.
func (c *columns) reduce(w []float64) ([]float64, bool) {
	out := make([]float64, len(c.kept))
	size := 0.0
	for k, j := range c.kept {
		out[k] = w[j]
		size = math.Max(size, math.Abs(w[j]))
	}
	for j, a := range c.depends {
		if a == nil {
			continue
		}
		want, most := 0.0, math.Max(size, math.Abs(w[j]))
		for k, v := range a { // those kept before j
			want += v * out[k]
			most = math.Max(most, math.Abs(v*out[k]))
		}
		if math.Abs(w[j]-want) > 1e-7*most {
			return nil, false
		}
	}
	return out, true
}

func mean(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x - v[0]
	}
	return v[0] + s/float64(len(v))
}
