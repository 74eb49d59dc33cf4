package linear

import (
	"math"
	"sort"

	"penwright/protocol/factor"
)

// points are the rows after those alike in everything have been put together.
type points struct {
	of    []int32   // row → point
	row   []int32   // a row of each point
	count []float64 // rows of each point
	y     []float64 // mean of y − at
	pure  float64   // sum of squares within points

	// points in the order of their absorbed class: class a holds order[start[a]:start[a+1]]
	order []int32
	start []int
}

// collapse finds the points. Rows are kept apart where covariates vary within a cell.
func (f *Fit) collapse() {
	m := f.model
	n := f.N
	cells := []factor.Factor{f.absorb}
	cells = append(cells, m.Nuisance...)
	cells = append(cells, m.Factors...)
	if m.Trend != nil {
		cells = append(cells, distinct(m.Trend.Time))
	}
	cell := factor.Infimum(cells...)
	for _, x := range m.Covariates {
		if cell.N < n && !constant(x, cell) {
			cell = factor.Equality(n)
		}
	}

	p := points{
		of:    cell.Level,
		row:   make([]int32, cell.N),
		count: make([]float64, cell.N),
		y:     make([]float64, cell.N),
	}
	where := locate(m.Y)
	f.at, f.Mean = where.at, where.at+where.mean
	sums := make([]sum, cell.N)
	for i, g := range cell.Level {
		if p.count[g] == 0 {
			p.row[g] = int32(i)
		}
		p.count[g]++
		sums[g].add(m.Y[i] - f.at)
	}
	for g := range p.y {
		p.y[g] = sums[g].value() / p.count[g]
	}
	var pure sum
	for i, g := range cell.Level {
		e := (m.Y[i] - f.at) - p.y[g]
		pure.add(e * e)
	}
	p.pure = pure.value()

	p.start = make([]int, f.absorb.N+1)
	for _, r := range p.row {
		p.start[f.absorb.Level[r]+1]++
	}
	for a := range f.absorb.N {
		p.start[a+1] += p.start[a]
	}
	next := append([]int(nil), p.start...)
	p.order = make([]int32, cell.N)
	for g, r := range p.row {
		a := f.absorb.Level[r]
		p.order[next[a]] = int32(g)
		next[a]++
	}
	f.points = p
}

// distinct numbers the values of x from the smallest.
func distinct(x []float64) factor.Factor {
	values := append([]float64(nil), x...)
	sort.Float64s(values)
	k := 0
	for i, v := range values {
		if i == 0 || v != values[k-1] {
			values[k] = v
			k++
		}
	}
	values = values[:k]
	level := make([]int32, len(x))
	for i, v := range x {
		level[i] = int32(sort.SearchFloat64s(values, v))
	}
	return factor.Factor{Level: level, N: k}
}

func constant(x []float64, f factor.Factor) bool {
	first := make([]float64, f.N)
	seen := make([]bool, f.N)
	for i, g := range f.Level {
		if !seen[g] {
			seen[g], first[g] = true, x[i]
		} else if x[i] != first[g] {
			return false
		}
	}
	return true
}

// local is the absorbed part: in each class an orthonormal basis of the intercept and
// the powers of time, over the points of the class scaled by the root of their counts.
type local struct {
	width int       // 1 + order of the trend
	q     []float64 // len(order) × width, in the order of points.order; unused columns are 0
	rank  int       // over all classes

	// level functional: z[a] gives the fitted level of class a as z·(q′y); nil where it
	// cannot be estimated
	z [][]float64
}

// prepareLocal builds the bases and the functional by which the level of a class enters a
// mean: its fitted curve at the centre of time or, where a nuisance factor stands for
// time, the average of its curve over the classes of that factor, which alone is
// estimable then. With a straight line and a centre midway both are the same.
func (f *Fit) prepareLocal() {
	p := f.points
	width := 1
	var unit float64 = 1 // of time
	t := f.model.Trend
	if t != nil {
		width += t.Order
		for _, v := range t.Time {
			unit = math.Max(unit, math.Abs(v-t.Centre))
		}
	}
	l := local{width: width, q: make([]float64, len(p.order)*width), z: make([][]float64, f.absorb.N)}
	at := f.trendFunctional(width, unit)

	tri := make([]float64, width*width)
	for a := range f.absorb.N {
		from, to := p.start[a], p.start[a+1]
		q := l.q[from*width : to*width]
		clear(tri)
		var pivot []int
		for k := range width {
			rank := len(pivot)
			var length float64
			for i, g := range p.order[from:to] {
				v := math.Sqrt(p.count[g])
				for range k {
					v *= (t.Time[p.row[g]] - t.Centre) / unit
				}
				q[i*width+rank] = v
				length += v * v
			}
			length = math.Sqrt(length)
			for range 2 { // twice is enough (Kahan, in Parlett 1980, from memory)
				for b := range rank {
					var dot float64
					for i := range to - from {
						dot += q[i*width+b] * q[i*width+rank]
					}
					for i := range to - from {
						q[i*width+rank] -= dot * q[i*width+b]
					}
					tri[b*width+k] += dot
				}
			}
			var left float64
			for i := range to - from {
				left += q[i*width+rank] * q[i*width+rank]
			}
			left = math.Sqrt(left)
			if left <= Tolerance*length {
				for i := range to - from {
					q[i*width+rank] = 0
				}
				continue
			}
			for i := range to - from {
				q[i*width+rank] /= left
			}
			tri[rank*width+k] = left
			pivot = append(pivot, k)
		}
		l.rank += len(pivot)

		// solve tri′z = at over the pivot columns, then see whether the others agree
		z := make([]float64, width)
		for i, k := range pivot {
			v := at[k]
			for b := range i {
				v -= tri[b*width+k] * z[b]
			}
			z[i] = v / tri[i*width+k]
		}
		estimable := true
		for k := range width {
			var v, size float64
			for b := range pivot {
				v += tri[b*width+k] * z[b]
				size += math.Abs(tri[b*width+k] * z[b])
			}
			if math.Abs(v-at[k]) > 1e-8*(1+size) {
				estimable = false
			}
		}
		if estimable {
			l.z[a] = z
		} else {
			f.unsupported++
		}
	}
	f.local = l
	f.based = f.unsupported < f.absorb.N
}

// trendFunctional gives the powers of scaled time at which a curve enters a mean.
func (f *Fit) trendFunctional(width int, unit float64) []float64 {
	at := make([]float64, width)
	at[0] = 1
	t := f.model.Trend
	if t == nil {
		return at
	}
	for _, b := range f.blocks {
		if b.kind != Nuisance || b.to == b.from {
			continue
		}
		g := f.model.Nuisance[b.index]
		if !constant(t.Time, g) {
			continue
		}
		time := make([]float64, g.N)
		for i, c := range g.Level {
			time[c] = (t.Time[i] - t.Centre) / unit
		}
		for _, v := range time {
			power := 1.0
			for k := 1; k < width; k++ {
				power *= v
				at[k] += power / float64(g.N)
			}
		}
		break
	}
	return at
}

// code writes the effect codes of a level among n into dst, length n−1: one in the column
// of the level, or −1 in every column for the last.
func code(dst []float64, level int32, n int) {
	if int(level) == n-1 {
		for i := range dst {
			dst[i] = -1
		}
		return
	}
	clear(dst)
	dst[level] = 1
}

// termCodes writes the products of the effect codes of a term, one for each of its factors,
// the last factor running fastest; level holds the level of every treatment factor.
func (m *Model) termCodes(dst []float64, t int, level []int32) {
	dst[0] = 1
	have := 1
	for _, v := range m.Terms[t] {
		n := m.Factors[v].N
		w, l := n-1, int(level[v])
		for i := have - 1; i >= 0; i-- {
			x := dst[i]
			part := dst[i*w : (i+1)*w]
			if l == n-1 {
				for j := range part {
					part[j] = -x
				}
			} else {
				clear(part)
				part[l] = x
			}
		}
		have *= w
	}
}

// fill writes the columns of a row.
func (f *Fit) fill(x []float64, row int32) {
	m := &f.model
	for v := range m.Factors {
		f.level[v] = m.Factors[v].Level[row]
	}
	for i := range f.blocks {
		b := &f.blocks[i]
		part := x[b.from:b.to]
		if len(part) == 0 {
			continue
		}
		switch b.kind {
		case Nuisance:
			g := m.Nuisance[b.index]
			code(part, g.Level[row], g.N)
		case Covariate:
			part[0] = f.covariate(b.index, row)
		case Term:
			m.termCodes(part, b.index, f.level)
		case slope:
			pair := f.extra[b.index]
			m.termCodes(part, pair[1], f.level)
			z := f.covariate(pair[0], row)
			for j := range part {
				part[j] *= z
			}
		}
	}
}

// covariate is the value in a row less the mean, over the root mean square.
func (f *Fit) covariate(k int, row int32) float64 {
	p := f.places[k]
	if p.scale == 0 {
		return 0
	}
	return ((f.model.Covariates[k][row] - p.at) - p.mean) / p.scale
}

// stream visits every point with its columns and response, scaled by the root of its
// count and made orthogonal to the absorbed part. class, if not nil, is called before the
// points of a class with the coefficients on its basis, width × (p+1), the response last.
// x belongs to the callee until it returns.
func (f *Fit) stream(class func(a int, coef []float64), visit func(g int32, x []float64, y float64)) {
	p, width := f.p, f.local.width
	x := make([]float64, p)
	coef := make([]float64, width*(p+1))
	for a := range f.absorb.N {
		from, to := f.points.start[a], f.points.start[a+1]
		clear(coef)
		for i := from; i < to; i++ {
			g := f.points.order[i]
			f.fill(x, f.points.row[g])
			w := math.Sqrt(f.points.count[g])
			for b := range width {
				q := f.local.q[i*width+b]
				if q == 0 {
					continue
				}
				q *= w
				c := coef[b*(p+1) : (b+1)*(p+1)]
				for j, v := range x {
					c[j] += q * v
				}
				c[p] += q * f.points.y[g]
			}
		}
		if class != nil {
			class(a, coef)
		}
		for i := from; i < to; i++ {
			g := f.points.order[i]
			f.fill(x, f.points.row[g])
			w := math.Sqrt(f.points.count[g])
			y := w * f.points.y[g]
			for j := range x {
				x[j] *= w
			}
			for b := range width {
				q := f.local.q[i*width+b]
				if q == 0 {
					continue
				}
				c := coef[b*(p+1) : (b+1)*(p+1)]
				for j := range x {
					x[j] -= q * c[j]
				}
				y -= q * c[p]
			}
			visit(g, x, y)
		}
	}
}
