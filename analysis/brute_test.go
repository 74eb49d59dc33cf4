package analysis

import (
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"

	"penwright/analysis/trial"
)

// reckoning is a second analysis of a sketch, by dense matrices from the definitions: no
// counts of cells, no staircase, nothing absorbed. Effects are coded by their deviation
// from the average of all levels; every estimate is a row of weights over the values.
type reckoning struct {
	s          *sketch
	terms      [][]int // factors of each term
	names      []string
	adjustment string
	random     []bool // by unit, what the plan says

	rowUnit, bottom int
	units           []int // of each term
	inst            []int // instances of the last unit that are used
	present         [][]int

	refused string // why it cannot be analysed, in a word; empty: it can
	method  string // "strata" or "least squares"
	level   *level // the values the model is fitted to
	at      *level // the values of bottom's instances

	// by strata
	strata []denseStratum
	// by least squares
	nuisance []int
	kept     []int // covariates
	cov      []covariateReckoning
	lines    []lineReckoning

	tests    []testReckoning
	estimate func(l []float64) (weights []float64, ok bool) // weights over level.y of a row of coefficients
	variance func(weights []float64) (v, df float64)
	joint    func(a, b []float64) float64 // covariance
	columns  []column
	fitted   []float64
	leverage []float64
	errDF    int
	errMS    float64
}

// level is a set of values: of the last unit's instances, or of means within a unit.
type level struct {
	unit  int
	inst  []int
	y     []float64
	x     [][]float64 // covariates
	count []int       // values in each mean
}

type denseStratum struct {
	unit   int
	s      *mat.Dense
	e      *mat.Dense // error projection
	df     int
	ss     float64
	terms  []int
	errDF  int
	errSS  float64
	size   float64 // of the classes; NaN where they differ
	random bool
	share  []float64 // its component of variance in the mean squares of the strata
}

func (d *denseStratum) ms() float64 {
	if d.errDF < 1 {
		return math.NaN()
	}
	return d.errSS / float64(d.errDF)
}

type testReckoning struct {
	df      int
	ss      float64
	errDF   int
	errMS   float64
	stratum int // index into strata, or -1
}

func (t testReckoning) f() float64 { return t.ss / float64(t.df) / t.errMS }

type lineReckoning struct {
	source string
	df     int
	ss     float64
}

type covariateReckoning struct {
	slope, se, equalP float64
}

// column says what a column of the model stands for.
type column struct {
	kind   byte // 'n' nuisance, 'x' covariate, 't' term, 's' own slope, '1' the mean
	index  int
	level  int   // of nuisance
	levels []int // of each factor of the term, the last level having minus all others
	value  []float64
}

const tiny = 1e-8

// reckon analyses a sketch.
func reckon(s *sketch, tr *trial.Trial) *reckoning {
	b := &reckoning{s: s, rowUnit: s.last()}
	for i := range tr.Plan.Terms { // which terms, the layout says
		name := tr.Plan.Terms[i].Name
		var fs []int
		for _, part := range strings.Split(name, ":") {
			fs = append(fs, slices.IndexFunc(s.factors, func(f sketchFactor) bool { return f.name == part }))
		}
		b.terms, b.names = append(b.terms, fs), append(b.names, name)
		b.units = append(b.units, b.meet(fs))
	}
	for u := range s.units {
		b.random = append(b.random, tr.Plan.Units[u].Random)
	}
	b.bottom = b.rowUnit
	for u := range s.units { // the largest unit that lies within all experimental units
		inside := b.lies(b.bottom, u)
		for _, e := range b.units {
			inside = inside && b.lies(u, e)
		}
		if inside {
			b.bottom = u
		}
	}
	for i := range s.y {
		there := !s.missing[i]
		for _, x := range s.covariates {
			there = there && !math.IsNaN(x[i])
		}
		if there {
			b.inst = append(b.inst, i)
		}
	}
	if len(b.inst) == 0 {
		b.refused = "no values"
		return b
	}
	rows := &level{unit: b.rowUnit, inst: b.inst}
	for _, i := range b.inst {
		rows.y = append(rows.y, s.y[i])
		rows.count = append(rows.count, 1)
	}
	for _, x := range s.covariates {
		var v []float64
		for _, i := range b.inst {
			v = append(v, x[i])
		}
		rows.x = append(rows.x, v)
	}
	b.at = rows
	if b.bottom != b.rowUnit {
		b.at = b.average(rows, b.bottom)
	}
	for f := range s.factors {
		seen := map[int]bool{}
		for _, i := range b.inst {
			seen[s.rowLevel(f, i)] = true
		}
		var present []int
		for l := range s.factors[f].levels {
			if seen[l] {
				present = append(present, l)
			}
		}
		b.present = append(b.present, present)
		if len(present) < 2 {
			b.refused = "one level"
			return b
		}
	}
	why := ""
	if len(s.covariates) == 0 && !s.trend {
		if why = b.byStrata(rows); why == "" {
			return b
		}
		if b.bottom != b.rowUnit && b.byStrata(b.at) == "" {
			return b
		}
	}
	for _, u := range b.units {
		if u != b.bottom {
			b.refused = "several strata"
			if why == "no error" {
				b.refused = why
			}
			return b
		}
	}
	b.byLeastSquares()
	return b
}

// lies tells whether unit u is v or lies within it.
func (b *reckoning) lies(u, v int) bool { return b.s.up[u][0][v] >= 0 }

// meet is the largest unit within all units of the factors.
func (b *reckoning) meet(fs []int) int {
	best := -1
	for u := range b.s.units {
		inside := true
		for _, f := range fs {
			inside = inside && b.lies(u, b.s.factors[f].unit)
		}
		if inside && (best < 0 || b.lies(best, u)) {
			best = u
		}
	}
	return best
}

// average takes means within the instances of a larger unit.
func (b *reckoning) average(of *level, unit int) *level {
	out := &level{unit: unit, x: make([][]float64, len(of.x))}
	for i := range b.s.up[unit] {
		n, sum := 0, 0.0
		x := make([]float64, len(of.x))
		for k, j := range of.inst {
			if b.s.up[of.unit][j][unit] != i {
				continue
			}
			n++
			sum += of.y[k]
			for c := range x {
				x[c] += of.x[c][k]
			}
		}
		if n == 0 {
			continue
		}
		out.inst, out.y, out.count = append(out.inst, i), append(out.y, sum/float64(n)), append(out.count, n)
		for c := range x {
			out.x[c] = append(out.x[c], x[c]/float64(n))
		}
	}
	return out
}

// factorLevel is the level of a factor on an instance of a unit, numbered among those
// present.
func (b *reckoning) factorLevel(l *level, f, k int) int {
	u := b.s.factors[f].unit
	return slices.Index(b.present[f], b.s.level[f][b.s.up[l.unit][l.inst[k]][u]])
}

func (b *reckoning) cell(l *level, fs []int, k int) int {
	c := 0
	for _, f := range fs {
		c = c*len(b.present[f]) + b.factorLevel(l, f, k)
	}
	return c
}

// projection on the vectors that are constant on the classes.
func projection(class []int) *mat.Dense {
	n := len(class)
	count := map[int]int{}
	for _, c := range class {
		count[c]++
	}
	p := mat.NewDense(n, n, nil)
	for i, c := range class {
		for j, d := range class {
			if c == d {
				p.Set(i, j, 1/float64(count[c]))
			}
		}
	}
	return p
}

func product2(a, b mat.Matrix) *mat.Dense {
	var c mat.Dense
	c.Mul(a, b)
	return &c
}

func minus(a, b mat.Matrix) *mat.Dense {
	var c mat.Dense
	c.Sub(a, b)
	return &c
}

func nothing(a mat.Matrix) bool { return mat.Norm(a, math.Inf(1)) < tiny }

func isProjection(a *mat.Dense) bool {
	return nothing(minus(a, a.T())) && nothing(minus(product2(a, a), a))
}

func quadratic(a mat.Matrix, y []float64) float64 {
	v := mat.NewVecDense(len(y), y)
	var av mat.VecDense
	av.MulVec(a, v)
	return mat.Dot(v, &av)
}

func centred(y []float64) []float64 {
	m := 0.0
	for _, v := range y {
		m += v / float64(len(y))
	}
	out := make([]float64, len(y))
	for i, v := range y {
		out[i] = v - m
	}
	return out
}

// byStrata divides the values by the projections of units and terms, or says why it
// cannot.
func (b *reckoning) byStrata(l *level) string {
	n := len(l.y)
	yc := centred(l.y)
	var units []int
	class := map[int][]int{}
	rank := map[int]int{}
	for u := range b.s.units {
		if !b.lies(l.unit, u) {
			continue
		}
		units = append(units, u)
		seen := map[int]bool{}
		for _, i := range l.inst {
			c := b.s.up[l.unit][i][u]
			class[u] = append(class[u], c)
			seen[c] = true
		}
		rank[u] = len(seen)
	}
	slices.SortStableFunc(units, func(x, y int) int {
		switch {
		case rank[x] != rank[y]:
			return rank[x] - rank[y]
		case x != y && b.lies(x, y):
			return 1
		case x != y && b.lies(y, x):
			return -1
		}
		return 0
	})
	all := make([]int, n)
	mean := projection(all)
	whole := mean
	var strata []denseStratum
	for _, u := range units {
		s := minus(projection(class[u]), mean)
		for k := range strata {
			if within(class[u], class[strata[k].unit]) {
				s = minus(s, strata[k].s)
			}
		}
		if !isProjection(s) {
			return "units"
		}
		for k := range strata {
			if !nothing(product2(s, strata[k].s)) {
				return "units"
			}
		}
		var sum mat.Dense
		sum.Add(whole, s)
		whole = &sum
		d := denseStratum{unit: u, s: s, df: int(math.Round(mat.Trace(s))), ss: quadratic(s, yc), random: b.random[u]}
		counts := map[int]int{}
		for _, c := range class[u] {
			counts[c]++
		}
		for _, c := range counts {
			if d.size == 0 {
				d.size = float64(c)
			} else if d.size != float64(c) {
				d.size = math.NaN()
			}
		}
		strata = append(strata, d)
	}
	identity := mat.NewDense(n, n, nil)
	for i := range n {
		identity.Set(i, i, 1)
	}
	if !nothing(minus(whole, identity)) {
		return "units"
	}

	// Terms, margins before.
	w := make([]*mat.Dense, len(b.terms))
	for t, fs := range b.terms {
		cells := make([]int, n)
		df := 1.0
		for k := range cells {
			cells[k] = b.cell(l, fs, k)
		}
		for _, f := range fs {
			df *= float64(len(b.present[f]) - 1)
		}
		s := minus(projection(cells), mean)
		for o, other := range b.terms[:t] {
			if subsetOf(other, fs) {
				s = minus(s, w[o])
			}
		}
		if !isProjection(s) || math.Abs(mat.Trace(s)-df) > tiny {
			return "terms"
		}
		for o := range b.terms[:t] {
			if !nothing(product2(s, w[o])) {
				return "terms"
			}
		}
		w[t] = s
		home := -1
		for k := range strata {
			if nothing(minus(product2(strata[k].s, s), s)) {
				home = k
			}
		}
		if home < 0 {
			return "spread"
		}
		strata[home].terms = append(strata[home].terms, t)
		strata[home].random = true
	}
	// Random are the last, those with terms, and what lies within random ones.
	strata[len(strata)-1].random = true
	for again := true; again; {
		again = false
		for k := range strata {
			for o := range strata {
				if strata[o].random && !strata[k].random && within(class[strata[k].unit], class[strata[o].unit]) {
					strata[k].random, again = true, true
				}
			}
		}
	}
	zz := make([]*mat.Dense, len(strata))
	for k := range strata {
		z := mat.NewDense(n, n, nil)
		c := class[strata[k].unit]
		for i := range n {
			for j := range n {
				if c[i] == c[j] {
					z.Set(i, j, 1)
				}
			}
		}
		zz[k] = z
		if strata[k].random && math.IsNaN(strata[k].size) {
			return "sizes"
		}
	}
	for k := range strata {
		if len(strata[k].terms) == 0 {
			continue
		}
		for o := range strata {
			zs := product2(zz[o], strata[k].s)
			scaled := mat.NewDense(n, n, nil)
			scaled.Scale(mat.Trace(zs)/mat.Trace(strata[k].s), strata[k].s)
			if !nothing(minus(zs, scaled)) {
				return "sizes"
			}
		}
	}
	for k := range strata {
		d := &strata[k]
		d.e = mat.DenseCopyOf(d.s)
		for _, t := range d.terms {
			d.e = minus(d.e, w[t])
		}
		d.errDF = int(math.Round(mat.Trace(d.e)))
		d.errSS = quadratic(d.e, yc)
		if len(d.terms) > 0 && d.errDF < 1 {
			return "no error"
		}
	}
	// Components: ξ of a stratum is Σ n σ² over the units that are it or lie within it.
	// One of two units of the same classes has none of its own.
	k := len(strata)
	xi := mat.NewDense(k, k, nil)
	for i := range strata {
		for j := range strata {
			if strata[j].df == 0 {
				continue
			}
			size := strata[j].size
			if math.IsNaN(size) {
				size = 1 // fixed, and never asked for
			}
			if within(class[strata[j].unit], class[strata[i].unit]) {
				xi.Set(i, j, size)
			}
		}
		if strata[i].df == 0 {
			xi.Set(i, i, 1)
		}
	}
	var inverse mat.Dense
	if err := inverse.Inverse(xi); err != nil {
		return "components"
	}
	for i := range strata {
		strata[i].share = make([]float64, k)
		if strata[i].df > 0 {
			for j := range strata {
				if v := inverse.At(i, j); math.Abs(v) > 1e-12 && strata[j].df > 0 {
					strata[i].share[j] = v
				}
			}
		}
	}

	// Effects by plain least squares, which in orthogonal structures are the best ones.
	columns := []column{{kind: '1', value: ones(n)}}
	for t := range b.terms {
		columns = append(columns, b.termColumns(l, t)...)
	}
	q := newSpace(columns, n)
	// The covariance of two rows of weights is Σ share·(sums within classes)·MS.
	coefficients := func(a, e []float64) (coef []float64, size float64) {
		coef = make([]float64, k)
		for v := range strata {
			if !strata[v].random || strata[v].df == 0 {
				continue
			}
			x, y := map[int]float64{}, map[int]float64{}
			for i, c := range class[strata[v].unit] {
				x[c] += a[i]
				y[c] += e[i]
			}
			quad := 0.0
			for c := range x {
				quad += x[c] * y[c]
			}
			for u, share := range strata[v].share {
				coef[u] += quad * share
				size = math.Max(size, math.Abs(quad*share))
			}
		}
		return coef, size
	}
	b.joint = func(a, e []float64) float64 {
		coef, size := coefficients(a, e)
		v := 0.0
		for u, c := range coef {
			if math.Abs(c) > 1e-9*size {
				v += c * strata[u].ms()
			}
		}
		return v
	}
	variance := func(a []float64) (float64, float64) {
		coef, size := coefficients(a, a)
		v, below := 0.0, 0.0
		single := -1
		for u, c := range coef {
			if math.Abs(c) <= 1e-9*size {
				continue
			}
			if strata[u].errDF < 1 {
				return math.NaN(), math.NaN()
			}
			v += c * strata[u].ms()
			below += c * c * strata[u].ms() * strata[u].ms() / float64(strata[u].errDF)
			if single == -1 {
				single = u
			} else {
				single = -2
			}
		}
		if single >= 0 {
			return v, float64(strata[single].errDF)
		}
		if v < 0 {
			return math.NaN(), math.NaN()
		}
		return v, v * v / below
	}
	var tests []testReckoning
	for t := range b.terms {
		home := slices.IndexFunc(strata, func(d denseStratum) bool { return slices.Contains(d.terms, t) })
		x := testReckoning{stratum: home, errDF: strata[home].errDF, errMS: strata[home].ms(), ss: quadratic(w[t], yc), df: int(math.Round(mat.Trace(w[t])))}
		if (b.s.adjustment == "auto" || b.s.adjustment == "partial") && len(b.terms) > 1 {
			var rows [][]float64
			for j, c := range columns {
				if c.kind == 't' && c.index == t {
					l := make([]float64, len(columns))
					l[j] = 1
					a, _ := q.weights(l)
					rows = append(rows, a)
				}
			}
			for o := range strata {
				if o == home {
					continue
				}
				for _, a := range rows {
					if quadratic(strata[o].s, a) > tiny*floats.Dot(a, a) {
						return "hypothesis"
					}
				}
			}
			x.ss, x.df = squaredLength(rows, l.y)
		}
		tests = append(tests, x)
	}
	b.method, b.level, b.strata, b.tests = "strata", l, strata, tests
	b.columns = columns
	b.estimate = q.weights
	b.variance = variance
	// Residuals: of the unit that received the smallest treatments.
	for k := range strata {
		d := &strata[k]
		if d.unit != b.bottom {
			continue
		}
		b.errDF, b.errMS = d.errDF, d.ms()/d.size
		v := mat.NewVecDense(n, yc)
		var e mat.VecDense
		e.MulVec(d.e, v)
		for i, at := range b.at.inst {
			row := slices.IndexFunc(l.inst, func(j int) bool { return b.s.up[l.unit][j][b.bottom] == at })
			b.fitted = append(b.fitted, b.at.y[i]-e.AtVec(row))
			b.leverage = append(b.leverage, 1-d.size*d.e.At(row, row))
		}
	}
	return ""
}

// within tells whether every class of a lies within one of b.
func within(a, b []int) bool {
	in := map[int]int{}
	for i, c := range a {
		if d, seen := in[c]; seen && d != b[i] {
			return false
		}
		in[c] = b[i]
	}
	return true
}

func subsetOf(a, b []int) bool {
	for _, v := range a {
		if !slices.Contains(b, v) {
			return false
		}
	}
	return len(a) < len(b)
}

func ones(n int) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = 1
	}
	return out
}

// termColumns codes a term: products of indicator columns, of the last level minus one.
func (b *reckoning) termColumns(l *level, t int) []column {
	var sizes []int
	for _, f := range b.terms[t] {
		sizes = append(sizes, len(b.present[f])-1)
	}
	var out []column
	for _, levels := range product(sizes) {
		c := column{kind: 't', index: t, levels: levels}
		for k := range l.y {
			v := 1.0
			for i, f := range b.terms[t] {
				v *= effectCode(b.factorLevel(l, f, k), levels[i], sizes[i])
			}
			c.value = append(c.value, v)
		}
		out = append(out, c)
	}
	return out
}

// effectCode is the code of a level in the column of another; last is the last level.
func effectCode(level, column, last int) float64 {
	switch level {
	case column:
		return 1
	case last:
		return -1
	}
	return 0
}

// meanRow is the row of coefficients of an adjusted mean of a term.
func (b *reckoning) meanRow(t int, levels []int) []float64 {
	row := make([]float64, len(b.columns))
	share := b.nuisanceShares()
	for j, c := range b.columns {
		switch c.kind {
		case '1':
			row[j] = 1
		case 'n':
			row[j] = share[j]
		case 'x':
			for _, v := range c.value {
				row[j] += v / float64(len(c.value))
			}
		case 't':
			v := 1.0
			for i, f := range b.terms[c.index] {
				at := slices.Index(b.terms[t], f)
				if at < 0 {
					v = 0
					break
				}
				v *= effectCode(levels[at], c.levels[i], len(b.present[f])-1)
			}
			row[j] = v
		}
	}
	return row
}

// nuisanceShares gives the weight of each class of a nuisance factor in a mean: the classes
// of the one with most of them alike (the animals, where they have lines of their own); of
// another alike within each part of the trial that it does not cross with, the part having
// what weight the first gives it, without which a mean could not be estimated.
func (b *reckoning) nuisanceShares() []float64 {
	out := make([]float64, len(b.columns))
	classes := map[int][]int{} // columns of each factor
	first := 0
	for j, c := range b.columns {
		if c.kind == 'n' {
			classes[c.index] = append(classes[c.index], j)
		}
	}
	for k := range len(classes) {
		if len(classes[k]) > len(classes[first]) {
			first = k
		}
	}
	if classes[-1] != nil {
		first = -1
	}
	n := len(b.level.y)
	for _, columns := range classes {
		part := make([]int, n) // of rows: joined where they share a class of either factor
		for i := range part {
			part[i] = i
		}
		for again := true; again; {
			again = false
			for _, j := range append(slices.Clone(columns), classes[first]...) {
				low := n
				for i, v := range b.columns[j].value {
					if v != 0 {
						low = min(low, part[i])
					}
				}
				for i, v := range b.columns[j].value {
					if v != 0 && part[i] != low {
						part[i], again = low, true
					}
				}
			}
		}
		in := func(j int) int { return part[slices.Index(b.columns[j].value, 1)] }
		weight, size := map[int]float64{}, map[int]float64{}
		for _, j := range classes[first] {
			weight[in(j)] += 1 / float64(len(classes[first]))
		}
		for _, j := range columns {
			size[in(j)]++
		}
		for _, j := range columns {
			out[j] = weight[in(j)] / size[in(j)]
		}
	}
	return out
}

// space is the column space of a model, with its singular values.
type space struct {
	u, v   *mat.Dense
	values []float64
	n      int
}

func newSpace(columns []column, n int) *space {
	m := mat.NewDense(n, len(columns), nil)
	for j, c := range columns {
		m.SetCol(j, c.value)
	}
	var svd mat.SVD
	if !svd.Factorize(m, mat.SVDThin) {
		panic("analysis: no singular values")
	}
	s := &space{u: &mat.Dense{}, v: &mat.Dense{}, n: n}
	svd.UTo(s.u)
	svd.VTo(s.v)
	for _, x := range svd.Values(nil) {
		if x > 1e-9*svd.Values(nil)[0] {
			s.values = append(s.values, x)
		}
	}
	return s
}

func (s *space) rank() int { return len(s.values) }

// weights gives a with l·β̂ = a·y, and whether l·β is estimable.
func (s *space) weights(l []float64) ([]float64, bool) {
	a := make([]float64, s.n)
	back := make([]float64, len(l))
	for k, x := range s.values {
		c := 0.0
		for j, v := range l {
			c += v * s.v.At(j, k)
		}
		for i := range a {
			a[i] += c / x * s.u.At(i, k)
		}
		for j := range back {
			back[j] += c * s.v.At(j, k)
		}
	}
	size, off := 0.0, 0.0
	for j, v := range l {
		size = math.Max(size, math.Abs(v))
		off = math.Max(off, math.Abs(v-back[j]))
	}
	return a, off <= 1e-7*size
}

// fit projects y and gives the fit, the residual sum of squares and the leverages.
func (s *space) fit(y []float64) (fitted []float64, rss float64, leverage []float64) {
	m := 0.0
	for _, v := range y {
		m += v / float64(len(y))
	}
	fitted, leverage = make([]float64, s.n), make([]float64, s.n)
	for k := range s.values {
		c := 0.0
		for i, v := range y {
			c += (v - m) * s.u.At(i, k)
		}
		for i := range fitted {
			fitted[i] += c * s.u.At(i, k)
			leverage[i] += s.u.At(i, k) * s.u.At(i, k)
		}
	}
	for i := range fitted {
		fitted[i] += m
		rss += (y[i] - fitted[i]) * (y[i] - fitted[i])
	}
	return fitted, rss, leverage
}

// squaredLength of the projection of y on the span of the rows: h′(AA′)⁻h for h = Ay.
func squaredLength(rows [][]float64, y []float64) (ss float64, df int) {
	var basis [][]float64
	for _, r := range rows {
		v := slices.Clone(r)
		size := floats.Dot(v, v)
		for range 2 {
			for _, q := range basis {
				floats.AddScaled(v, -floats.Dot(q, v), q)
			}
		}
		left := floats.Dot(v, v)
		if left <= 1e-14*size || size == 0 {
			continue
		}
		for i := range v {
			v[i] /= math.Sqrt(left)
		}
		basis = append(basis, v)
		c := floats.Dot(v, centred(y))
		// rows of contrasts sum to zero against the mean, up to what covariates need
		m := (y[0] - centred(y)[0]) * floats.Dot(v, ones(len(v)))
		ss += (c + m) * (c + m)
	}
	return ss, len(basis)
}

// larger lists the units of the level that are larger than its own and hold no other such.
func (b *reckoning) larger() []int {
	var out []int
	for u := range b.s.units {
		if u == b.bottom || !b.lies(b.bottom, u) {
			continue
		}
		holds := false
		for v := range b.s.units {
			holds = holds || v != u && v != b.bottom && b.lies(b.bottom, v) && b.lies(v, u)
		}
		if !holds {
			out = append(out, u)
		}
	}
	return out
}

func (b *reckoning) nuisanceColumns(l *level, u, index int) []column {
	seen := map[int]bool{}
	for _, i := range l.inst {
		seen[b.s.up[l.unit][i][u]] = true
	}
	var out []column
	for c := range b.s.up[u] {
		if !seen[c] {
			continue
		}
		col := column{kind: 'n', index: index, level: c}
		for _, i := range l.inst {
			v := 0.0
			if b.s.up[l.unit][i][u] == c {
				v = 1
			}
			col.value = append(col.value, v)
		}
		out = append(out, col)
	}
	return out
}

// byLeastSquares fits larger units as fixed.
func (b *reckoning) byLeastSquares() {
	l := b.at
	n := len(l.y)
	for _, u := range b.larger() {
		if b.random[u] {
			b.refused = "random units"
			return
		}
	}
	var own []column // lines of animals
	unitOf := map[int]string{}
	var groups [][]column // nuisance, one group a unit
	on, along := -1, -1
	if b.s.trend {
		on = slices.IndexFunc(b.s.units, func(u sketchUnit) bool { return u.name == "cow" })
		along = slices.IndexFunc(b.s.units, func(u sketchUnit) bool { return u.name == "period" })
		centre := 0.0
		for _, p := range b.s.own[along] {
			centre += float64(p) / float64(len(b.s.own[along]))
		}
		own = b.nuisanceColumns(l, on, -1)
		for _, c := range slices.Clone(own) {
			line := column{kind: 's'}
			for k, i := range l.inst {
				line.value = append(line.value, c.value[k]*(float64(b.s.own[along][b.s.up[l.unit][i][along]])-centre))
			}
			own = append(own, line)
		}
	}
	for _, u := range b.larger() {
		if u == on {
			continue
		}
		unitOf[len(groups)] = b.s.units[u].name
		groups = append(groups, b.nuisanceColumns(l, u, len(groups)))
		b.nuisance = append(b.nuisance, u)
	}
	start := slices.Clone(own)
	for _, g := range groups {
		start = append(start, g...)
	}
	if len(start) == 0 {
		start = []column{{kind: '1', value: ones(n)}}
	}
	// Covariates that units already hold are dropped.
	columns := slices.Clone(start)
	for k, x := range l.x {
		c := column{kind: 'x', index: k, value: x}
		if newSpace(append(slices.Clone(columns), column{value: scaled(centred(x))}), n).rank() > newSpace(columns, n).rank() {
			columns = append(columns, c)
			b.kept = append(b.kept, k)
		}
	}
	covariates := columns[len(start):]
	for t := range b.terms {
		columns = append(columns, b.termColumns(l, t)...)
	}
	// Covariates are measured from their mean in their own spread, which changes no estimate.
	q := newSpace(unitColumns(columns), n)
	rank := q.rank()
	fitted, rss, leverage := q.fit(l.y)
	b.errDF = n - rank
	if b.errDF < 1 {
		b.refused = "no error"
		return
	}
	b.errMS = rss / float64(b.errDF)
	b.fitted, b.leverage = fitted, leverage
	b.method, b.level, b.columns = "least squares", l, columns
	scale := columnScales(columns)
	b.estimate = func(row []float64) ([]float64, bool) {
		s := make([]float64, len(row))
		for j := range row {
			s[j] = row[j] * scale[j]
			if columns[j].kind == 'x' && isMean(row, columns) {
				s[j] = 0 // at the mean of the covariate
			}
		}
		return q.weights(s)
	}
	b.joint = func(a, e []float64) float64 { return floats.Dot(a, e) * b.errMS }
	b.variance = func(a []float64) (float64, float64) { return floats.Dot(a, a) * b.errMS, float64(b.errDF) }

	residual := func(cols []column) (float64, int) {
		if len(cols) == 0 {
			cols = []column{{kind: '1', value: ones(n)}}
		}
		s := newSpace(unitColumns(cols), n)
		_, r, _ := s.fit(l.y)
		return r, s.rank()
	}
	drop := func(small, large []column) (float64, int) {
		rs, ks := residual(small)
		rl, kl := residual(large)
		return rs - rl, kl - ks
	}
	of := func(t int) []column {
		var out []column
		for _, c := range columns {
			if c.kind == 't' && c.index == t {
				out = append(out, c)
			}
		}
		return out
	}
	adjustment := b.s.adjustment
	if adjustment == "auto" {
		adjustment = "partial"
		for _, fs := range b.terms {
			seen := map[int]bool{}
			cells := 1
			for _, f := range fs {
				cells *= len(b.present[f])
			}
			for k := range l.y {
				seen[b.cell(l, fs, k)] = true
			}
			if len(fs) > 1 && len(seen) < cells {
				adjustment = "marginal"
			}
		}
	}
	b.adjustment = adjustment
	// Larger units.
	rest := slices.Clone(covariates)
	for t := range b.terms {
		rest = append(rest, of(t)...)
	}
	for k := range groups {
		var small, large []column
		small = append(small, own...)
		large = append(large, own...)
		for o, g := range groups {
			if o != k && (adjustment != "sequential" || o < k) {
				small = append(small, g...)
			}
			if adjustment != "sequential" || o <= k {
				large = append(large, g...)
			}
		}
		if adjustment != "sequential" {
			small, large = append(small, rest...), append(large, rest...)
			if len(groups) == 1 && own == nil {
				small = append(small, column{kind: '1', value: ones(n)})
			}
		}
		ss, df := drop(small, large)
		b.lines = append(b.lines, lineReckoning{unitOf[k], df, ss})
	}
	// Covariates.
	for i, c := range covariates {
		small, large := slices.Clone(start), columns
		for o, d := range covariates {
			if o != i && (adjustment != "sequential" || o < i) {
				small = append(small, d)
			}
		}
		if adjustment == "sequential" {
			large = append(slices.Clone(small), c)
		} else {
			for t := range b.terms {
				small = append(small, of(t)...)
			}
		}
		ss, df := drop(small, large)
		b.lines = append(b.lines, lineReckoning{"x" + string(rune('0'+b.kept[i])), df, ss})
		row := make([]float64, len(columns))
		row[len(start)+i] = 1
		a, ok := b.estimate(row)
		v := covariateReckoning{slope: math.NaN(), se: math.NaN(), equalP: math.NaN()}
		if ok {
			v.slope, v.se = floats.Dot(a, centred(l.y))+offset(l.y)*floats.Dot(a, ones(n)), math.Sqrt(floats.Dot(a, a)*b.errMS)
		}
		// Equal slopes: products of the covariate with every column of treatments.
		large = slices.Clone(columns)
		x := centred(c.value)
		for t := range b.terms {
			for _, d := range of(t) {
				p := column{kind: 's'}
				for k := range x {
					p.value = append(p.value, x[k]*d.value[k])
				}
				large = append(large, p)
			}
		}
		re, ke := residual(large)
		if df := ke - rank; df > 0 && n-ke > 0 {
			v.equalP = upperTail((rss-re)/float64(df)/(re/float64(n-ke)), df, float64(n-ke))
		}
		b.cov = append(b.cov, v)
	}
	// Terms.
	for t, fs := range b.terms {
		x := testReckoning{stratum: -1, errDF: b.errDF, errMS: b.errMS}
		switch adjustment {
		case "partial":
			var rows [][]float64
			ok := true
			for j, c := range columns {
				if c.kind == 't' && c.index == t {
					row := make([]float64, len(columns))
					row[j] = 1
					a, e := b.estimate(row)
					ok = ok && e
					rows = append(rows, a)
				}
			}
			x.ss, x.df = squaredLength(rows, l.y)
			if !ok {
				x.ss, x.df = math.NaN(), 0
			}
		default:
			small := append(slices.Clone(start), covariates...)
			for o, other := range b.terms {
				if o < t && adjustment == "sequential" || o != t && adjustment == "marginal" && !subsetOf(fs, other) {
					small = append(small, of(o)...)
				}
			}
			x.ss, x.df = drop(small, append(slices.Clone(small), of(t)...))
		}
		b.tests = append(b.tests, x)
	}
}

// isMean tells whether a row is that of a mean: it takes nuisance or the general level.
func isMean(row []float64, columns []column) bool {
	for j, c := range columns {
		if (c.kind == 'n' || c.kind == '1') && row[j] != 0 {
			return true
		}
	}
	return false
}

func offset(y []float64) float64 { return y[0] - centred(y)[0] }

func scaled(x []float64) []float64 {
	s := math.Sqrt(floats.Dot(x, x) / float64(len(x)))
	out := make([]float64, len(x))
	if s == 0 {
		return out
	}
	for i, v := range x {
		out[i] = v / s
	}
	return out
}

// columnScales gives what a coefficient of the scaled column must be multiplied by.
func columnScales(columns []column) []float64 {
	out := ones(len(columns))
	for j, c := range columns {
		if c.kind == 'x' {
			x := centred(c.value)
			out[j] = 1 / math.Sqrt(floats.Dot(x, x)/float64(len(x)))
		}
	}
	return out
}

// unitColumns centres and scales covariates and lines.
func unitColumns(columns []column) []column {
	out := slices.Clone(columns)
	for j, c := range out {
		switch c.kind {
		case 'x':
			out[j].value = scaled(centred(c.value))
		case 's':
			out[j].value = scaled(c.value)
		}
	}
	return out
}

// covariance of rows of weights, per unit of an error mean square.
func (b *reckoning) covariance(rows [][]float64, ms float64) [][]float64 {
	out := make([][]float64, len(rows))
	for i, x := range rows {
		for _, y := range rows {
			out[i] = append(out[i], b.joint(x, y)/ms)
		}
	}
	return out
}

// single tells whether weights draw on the error of a term alone.
func (b *reckoning) single(t int, a []float64) bool {
	for k := range b.strata {
		if k != b.tests[t].stratum && quadratic(b.strata[k].s, a) > tiny*floats.Dot(a, a) {
			return false
		}
	}
	return true
}

// value of weights over the values of the model.
func (b *reckoning) value(a []float64) float64 {
	y := b.level.y
	return floats.Dot(a, centred(y)) + offset(y)*floats.Dot(a, ones(len(y)))
}

func upperTail(f float64, d1 int, d2 float64) float64 {
	if math.IsNaN(f) || d1 < 1 {
		return math.NaN()
	}
	return mathext.RegIncBeta(d2/2, float64(d1)/2, d2/(d2+float64(d1)*math.Max(f, 0)))
}

func tQuantile(p, df float64) float64 {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: df}.Quantile(1 - p)
}

// whitener turns vectors with covariance c into ones with covariance 1; what c does not hold
// is dropped.
func whitener(c [][]float64) func(v []float64) []float64 {
	n := len(c)
	m := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			m.SetSym(i, j, (c[i][j]+c[j][i])/2)
		}
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(m, true) {
		panic("analysis: no eigenvalues")
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	values := eigen.Values(nil)
	return func(v []float64) []float64 {
		var out []float64
		for k, x := range values {
			if x <= 1e-10*values[n-1] {
				continue
			}
			s := 0.0
			for i := range v {
				s += vectors.At(i, k) * v[i]
			}
			out = append(out, s/math.Sqrt(x))
		}
		return out
	}
}

// weightedResidual is the least of (y − Xβ)′ C⁻ (y − Xβ) with the last β.
func weightedResidual(c, cols [][]float64, y []float64) (rss, last float64) {
	white := whitener(c)
	z := white(y)
	if len(cols) == 0 {
		return floats.Dot(z, z), math.NaN()
	}
	x := mat.NewDense(len(z), len(cols), nil)
	for j, col := range cols {
		x.SetCol(j, white(col))
	}
	var beta mat.VecDense
	if err := beta.SolveVec(x, mat.NewVecDense(len(z), z)); err != nil {
		return math.NaN(), math.NaN()
	}
	var fit mat.VecDense
	fit.MulVec(x, &beta)
	for i := range z {
		rss += (z[i] - fit.AtVec(i)) * (z[i] - fit.AtVec(i))
	}
	return rss, beta.AtVec(len(cols) - 1)
}

// weightedLeft is the same residual where columns may depend on each other, with its
// degrees of freedom.
func weightedLeft(c, cols [][]float64, y []float64) (rss float64, df int) {
	white := whitener(c)
	z := white(y)
	df = len(z)
	var basis [][]float64
	for _, col := range cols {
		v := white(col)
		size := floats.Dot(v, v)
		for range 2 {
			for _, q := range basis {
				floats.AddScaled(v, -floats.Dot(q, v), q)
			}
		}
		left := floats.Dot(v, v)
		if left <= 1e-14*size {
			continue
		}
		floats.Scale(1/math.Sqrt(left), v)
		basis = append(basis, v)
		floats.AddScaled(z, -floats.Dot(v, z), v)
		df--
	}
	return floats.Dot(z, z), df
}
