package allot

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol/factor"
)

// problem is to put treatments on plots that lie in several systems of blocks, so that
// differences between treatments are estimated as precisely as can be.
type problem struct {
	t      int
	total  []int   // plots of each treatment
	cell   []int32 // plots may be exchanged inside a cell, whose treatments are fixed
	cells  int
	blocks []system
	mean   float64 // coefficient of the mean of all plots in the projection onto blocks
}

// system is one system of blocks.
type system struct {
	factor.Factor
	weight float64 // coefficient of its averages in the projection onto all blocks
	size   []int   // plots of each block
	low    []int32 // least plots of treatment c in block b, at b·t + c
	high   []int32
}

// weigh finds the coefficients c of the averages that add up to the projection onto
// the span of all systems of blocks,
//
//	P = Σ c_f P_f,  Σ c_f over f finer than or equal to g = 1 for every g,
//
// for orthogonal factors closed under supremum, as factor.Set wants them. The closure is
// returned with its coefficients; it is nil where the factors are not orthogonal.
func weigh(fs []factor.Factor) ([]factor.Factor, []float64) {
	closed := factor.Close(append(slices.Clone(fs), factor.Universe(fs[0].Len())))
	set, err := factor.NewSet(closed)
	if err != nil {
		return nil, nil
	}
	weights := make([]float64, len(closed))
	order := set.Order()
	for k := len(order) - 1; k >= 0; k-- {
		g := order[k]
		weights[g] = 1
		for f := range closed {
			if slices.Contains(set.Coarser(f), g) {
				weights[g] -= weights[f]
			}
		}
	}
	return closed, weights
}

// information is the matrix C = R − Σ c_f N_f K_f⁻¹ N_f′ of the treatments after
// blocks.
func information(closed []factor.Factor, weights []float64, treatment factor.Factor) *mat.SymDense {
	c := mat.NewSymDense(treatment.N, nil)
	for t, r := range treatment.Counts() {
		c.SetSym(t, t, float64(r))
	}
	for f := range closed {
		if weights[f] == 0 {
			continue
		}
		counts := closed[f].Counts()
		perBlock(closed[f], treatment, func(b int, ts []int, ns []float64) {
			for i, t := range ts {
				for j, u := range ts {
					if t <= u {
						c.SetSym(t, u, c.At(t, u)-weights[f]*ns[i]*ns[j]/float64(counts[b]))
					}
				}
			}
		})
	}
	return c
}

// perBlock calls do for every block with its treatments, in ascending order, and how
// often each stands in it.
func perBlock(block, treatment factor.Factor, do func(b int, ts []int, ns []float64)) {
	in := make([][]int, block.N)
	for i, b := range block.Level {
		in[b] = append(in[b], int(treatment.Level[i]))
	}
	for b, all := range in {
		slices.Sort(all)
		var ts []int
		var ns []float64
		for _, t := range all {
			if len(ts) == 0 || ts[len(ts)-1] != t {
				ts, ns = append(ts, t), append(ns, 0)
			}
			ns[len(ns)-1]++
		}
		do(b, ts, ns)
	}
}

// ridge keeps the information matrix of a disconnected start from being singular; it
// is a share of the mean replication.
const ridge = 1e-4

// gain is the least relative lowering of the mean variance that counts as one, far
// above the rounding of different machines, so that all of them search alike.
const gain = 1e-7

// optimizer holds an arrangement while plots are exchanged.
type optimizer struct {
	*problem
	at      []int32     // treatment of each plot
	count   [][]int32   // for each system, plots of treatment c in block b, at b·t + c
	g       []float64   // inverse of the information matrix, t × t
	h       [][]float64 // for each system g times its counts, b × t
	trace   float64
	members [][]int32
	moves   int // exchanges whose variance was worked out
	looks   int // exchanges that the bounds of counts forbade
	gu, gw  []float64
}

func newOptimizer(p *problem) *optimizer {
	o := &optimizer{problem: p, members: make([][]int32, p.cells), gu: make([]float64, p.t), gw: make([]float64, p.t)}
	for i, c := range p.cell {
		o.members[c] = append(o.members[c], int32(i))
	}
	return o
}

// start takes an arrangement.
func (o *optimizer) start(at []int32) {
	o.at = slices.Clone(at)
	o.count = make([][]int32, len(o.blocks))
	for s := range o.blocks {
		o.count[s] = make([]int32, o.blocks[s].N*o.t)
		for i, b := range o.blocks[s].Level {
			o.count[s][int(b)*o.t+int(at[i])]++
		}
	}
}

// invert works out what evaluate needs. Its work counts as that of so many moves.
func (o *optimizer) invert() {
	t := o.t
	o.moves += t*t/50 + len(o.at)/10
	c := mat.NewSymDense(t, nil)
	mean := float64(len(o.at)) / float64(t)
	for i := range t {
		for j := i; j < t; j++ {
			c.SetSym(i, j, mean/float64(t)-o.mean*float64(o.total[i]*o.total[j])/float64(len(o.at)))
		}
		c.SetSym(i, i, c.At(i, i)+float64(o.total[i])+ridge*mean)
	}
	for s := range o.blocks {
		b := &o.blocks[s]
		if b.weight == 0 {
			continue
		}
		for k := range b.N {
			row := o.count[s][k*t : k*t+t]
			var ts []int
			for x, n := range row {
				if n > 0 {
					ts = append(ts, x)
				}
			}
			for i, x := range ts {
				for _, y := range ts[i:] {
					c.SetSym(x, y, c.At(x, y)-b.weight*float64(row[x])*float64(row[y])/float64(b.size[k]))
				}
			}
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(c) {
		panic("allot: information matrix is not positive")
	}
	var inverse mat.SymDense
	if err := chol.InverseTo(&inverse); err != nil && !math.IsInf(float64(chol.Cond()), 0) && chol.Cond() > 1e14 {
		panic("allot: information matrix is not invertible")
	}
	o.g = make([]float64, t*t)
	o.trace = 0
	for i := range t {
		for j := range t {
			o.g[i*t+j] = inverse.At(i, j)
		}
		o.trace += o.g[i*t+i]
	}
	o.h = make([][]float64, len(o.blocks))
	for s := range o.blocks {
		b := &o.blocks[s]
		if b.weight == 0 {
			continue
		}
		o.h[s] = make([]float64, b.N*t)
		for k := range b.N {
			h := o.h[s][k*t : k*t+t]
			for x, n := range o.count[s][k*t : k*t+t] {
				if n == 0 {
					continue
				}
				for i, v := range o.g[x*t : x*t+t] {
					h[i] += float64(n) * v
				}
			}
		}
	}
}

// allowed tells whether the treatments of plots p and q may be exchanged: every block
// keeps each treatment within its bounds, or comes nearer to them.
func (o *optimizer) allowed(p, q int32) bool {
	i, j := int(o.at[p]), int(o.at[q])
	if i == j {
		return false
	}
	for s := range o.blocks {
		b := &o.blocks[s]
		k, l := int(b.Level[p]), int(b.Level[q])
		if k == l || b.low == nil {
			continue
		}
		n := o.count[s]
		if n[k*o.t+i] <= b.low[k*o.t+i] || n[k*o.t+j] >= b.high[k*o.t+j] || n[l*o.t+j] <= b.low[l*o.t+j] || n[l*o.t+i] >= b.high[l*o.t+i] {
			return false
		}
	}
	return true
}

// excess is by how much an exchange of p and q moves the counts away from their
// bounds; it is negative where it mends some.
func (o *optimizer) excess(p, q int32) int {
	i, j := int(o.at[p]), int(o.at[q])
	if i == j {
		return 0
	}
	d := 0
	for s := range o.blocks {
		b := &o.blocks[s]
		k, l := int(b.Level[p]), int(b.Level[q])
		if k == l || b.low == nil {
			continue
		}
		over := func(at int, by int32) {
			n := o.count[s][at]
			d += beyond(n+by, b.low[at], b.high[at]) - beyond(n, b.low[at], b.high[at])
		}
		over(k*o.t+i, -1)
		over(k*o.t+j, 1)
		over(l*o.t+j, -1)
		over(l*o.t+i, 1)
	}
	return d
}

func beyond(n, low, high int32) int { return int(max(low-n, n-high, 0)) }

// violation is by how much all counts lie beyond their bounds.
func (o *optimizer) violation() int {
	d := 0
	for s := range o.blocks {
		if b := &o.blocks[s]; b.low != nil {
			for at, n := range o.count[s] {
				d += beyond(n, b.low[at], b.high[at])
			}
		}
	}
	return d
}

// vectors sets gu and gw to G u and G w for the exchange of p and q, with u = e_j − e_i
// and w such that C becomes C − u w′ − w u′, and gives u′Gu, u′Gw, w′Gw.
func (o *optimizer) vectors(p, q int32) (uu, uw, ww float64) {
	t, i, j := o.t, int(o.at[p]), int(o.at[q])
	gi, gj := o.g[i*t:i*t+t], o.g[j*t:j*t+t]
	gu, gw := o.gu, o.gw
	for x := range gu {
		gu[x] = gj[x] - gi[x]
		gw[x] = 0
	}
	uu = gu[j] - gu[i]
	half := 0.0
	for s := range o.blocks {
		b := &o.blocks[s]
		k, l := int(b.Level[p]), int(b.Level[q])
		if k == l || b.weight == 0 {
			continue
		}
		ck, cl := b.weight/float64(b.size[k]), b.weight/float64(b.size[l])
		half += (ck + cl) / 2
		hk, hl := o.h[s][k*t:k*t+t], o.h[s][l*t:l*t+t]
		for x := range gw {
			gw[x] += ck*hk[x] - cl*hl[x]
		}
	}
	for x := range gw {
		gw[x] += half * gu[x]
	}
	uw = gw[j] - gw[i]
	// w itself is needed only against G w.
	ww = half * uw
	for s := range o.blocks {
		b := &o.blocks[s]
		k, l := int(b.Level[p]), int(b.Level[q])
		if k == l || b.weight == 0 {
			continue
		}
		ck, cl := b.weight/float64(b.size[k]), b.weight/float64(b.size[l])
		nk, nl := o.count[s][k*t:k*t+t], o.count[s][l*t:l*t+t]
		for x := range nk {
			if d := ck*float64(nk[x]) - cl*float64(nl[x]); d != 0 {
				ww += d * gw[x]
			}
		}
	}
	return uu, uw, ww
}

// change is what an exchange of p and q adds to the trace of the inverse, which is the
// mean variance of a difference but for a constant.
func (o *optimizer) change(p, q int32) float64 {
	uu, uw, ww := o.vectors(p, q)
	det := uu*ww - (1-uw)*(1-uw)
	if det > -1e-9 {
		return math.Inf(1) // the design would be all but disconnected
	}
	var aa, ab, bb float64
	for x, a := range o.gu {
		b := o.gw[x]
		aa += a * a
		ab += a * b
		bb += b * b
	}
	return -(ww*aa + 2*(1-uw)*ab + uu*bb) / det
}

// exchange puts the treatments of p and q into each other's place.
func (o *optimizer) exchange(p, q int32) {
	i, j := int(o.at[p]), int(o.at[q])
	o.at[p], o.at[q] = o.at[q], o.at[p]
	for s := range o.blocks {
		b := &o.blocks[s]
		k, l := int(b.Level[p]), int(b.Level[q])
		if k == l {
			continue
		}
		n := o.count[s]
		n[k*o.t+i]--
		n[k*o.t+j]++
		n[l*o.t+j]--
		n[l*o.t+i]++
	}
}

// accept makes an exchange and brings the inverse up to date.
func (o *optimizer) accept(p, q int32, change float64) {
	t := o.t
	o.moves += t / 10
	for s := range o.blocks {
		o.moves += o.blocks[s].N / 10
	}
	uu, uw, ww := o.vectors(p, q)
	det := uu*ww - (1-uw)*(1-uw)
	m00, m01, m11 := -ww/det, -(1-uw)/det, -uu/det
	i, j := int(o.at[p]), int(o.at[q])
	// h = G N: first the new G with the old counts, then the counts.
	for s := range o.blocks {
		b := &o.blocks[s]
		if b.weight == 0 {
			continue
		}
		for k := range b.N {
			var un, wn float64
			for x, n := range o.count[s][k*t : k*t+t] {
				if n != 0 {
					un += float64(n) * o.gu[x]
					wn += float64(n) * o.gw[x]
				}
			}
			cu, cw := m00*un+m01*wn, m01*un+m11*wn
			h := o.h[s][k*t : k*t+t]
			for x := range h {
				h[x] += cu*o.gu[x] + cw*o.gw[x]
			}
		}
	}
	for x := range t {
		cu, cw := m00*o.gu[x]+m01*o.gw[x], m01*o.gu[x]+m11*o.gw[x]
		row := o.g[x*t : x*t+t]
		for y := range row {
			row[y] += cu*o.gu[y] + cw*o.gw[y]
		}
	}
	for s := range o.blocks {
		b := &o.blocks[s]
		k, l := int(b.Level[p]), int(b.Level[q])
		if k == l || b.weight == 0 {
			continue
		}
		hk, hl := o.h[s][k*t:k*t+t], o.h[s][l*t:l*t+t]
		gi, gj := o.g[i*t:i*t+t], o.g[j*t:j*t+t]
		for x := range hk {
			hk[x] += gj[x] - gi[x]
			hl[x] += gi[x] - gj[x]
		}
	}
	o.exchange(p, q)
	o.trace += change
}

// mend makes exchanges that bring counts within their bounds, at most so many looks.
func (o *optimizer) mend(g *Generator, budget int) bool {
	bad := o.violation()
	for bad > 0 && budget > 0 {
		budget -= len(o.at) / 10
		// A plot of a treatment that stands too often in a block, at random.
		var wrong []int32
		for p := range o.at {
			for s := range o.blocks {
				if b := &o.blocks[s]; b.low != nil {
					if at := int(b.Level[p])*o.t + int(o.at[p]); o.count[s][at] > b.high[at] {
						wrong = append(wrong, int32(p))
						break
					}
				}
			}
		}
		if len(wrong) == 0 { // some stand too rarely only
			for p := range o.at {
				wrong = append(wrong, int32(p))
			}
		}
		p := wrong[g.Below(len(wrong))]
		var best []int32
		least := math.MaxInt
		for _, q := range o.members[o.cell[p]] {
			budget--
			if o.at[q] == o.at[p] {
				continue
			}
			d := o.excess(p, q)
			if d < least {
				best, least = best[:0], d
			}
			if d == least {
				best = append(best, q)
			}
		}
		if len(best) == 0 {
			continue
		}
		q := best[g.Below(len(best))]
		if least > 0 && g.Below(4) > 0 {
			continue
		}
		o.exchange(p, q)
		bad += least
	}
	return bad == 0
}

// climb makes exchanges that lower the mean variance until none does or the budget of
// moves is used up. Plots are tried in a random order.
func (o *optimizer) climb(g *Generator, budget int) {
	order := identity(len(o.at))
	g.Shuffle(order)
	accepted, idle := 0, 0
	for k := 0; idle < len(order); k = (k + 1) % len(order) {
		p := order[k]
		idle++
		for _, q := range o.members[o.cell[p]] {
			if !o.allowed(p, q) {
				if o.looks++; o.looks > searchLooks {
					return
				}
				continue
			}
			if o.moves++; o.moves > budget {
				return
			}
			if d := o.change(p, q); d < -gain*o.trace {
				o.accept(p, q, d)
				idle = 0
				if accepted++; accepted%200 == 0 {
					o.invert() // rounding does not add up
				}
			}
		}
	}
}

// searchMoves is the most exchanges that a search looks at, and searchWork the most
// such looks times treatments. Exchanges that bounds forbid cost less and are counted by
// themselves.
const (
	searchMoves = 200_000
	searchWork  = 20_000_000
	searchLooks = 50_000_000
	mendLooks   = 10_000_000
)

func (p *problem) budget() int {
	return min(searchMoves, 4_000*p.t, searchWork/p.t) + 4*(p.t*p.t/50+len(p.cell)/10)
}

// search improves the starts by exchanges, then again and again the best after a few
// random exchanges, until the budget of moves is used up or the mean variance has
// reached the bound; it gives the best arrangement, nil where no start could be brought
// within the bounds of the counts.
func (p *problem) search(g *Generator, starts [][]int32, bound float64) (best []int32, trace float64) {
	o := newOptimizer(p)
	budget := p.budget()
	trace = math.Inf(1)
	keep := func() {
		if o.trace < trace*(1-gain) {
			best, trace = slices.Clone(o.at), o.trace
		}
	}
	enough := func() bool { return trace <= bound*(1+1e-9) }
	for k, at := range starts {
		o.start(at)
		if !o.mend(g, mendLooks/len(starts)) {
			continue
		}
		o.invert()
		keep()
		if enough() {
			return best, trace
		}
		o.climb(g, (k+1)*budget/(2*len(starts)))
		o.invert()
		keep()
	}
	if best == nil {
		return nil, 0
	}
	for o.moves < budget && o.looks < searchLooks && !enough() {
		o.moves++
		o.start(best)
		for range 2 + g.Below(3) {
			for range 20 {
				p := int32(g.Below(len(o.at)))
				in := o.members[o.cell[p]]
				if q := in[g.Below(len(in))]; o.allowed(p, q) {
					o.exchange(p, q)
					break
				}
			}
		}
		o.invert()
		o.climb(g, budget)
		keep()
	}
	return best, trace
}
