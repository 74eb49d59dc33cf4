package layout

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"penwright/protocol"
	"penwright/protocol/factor"
)

// randomUnits nests and crosses a few units with small counts. With uneven true some
// counts differ by parent.
func randomUnits(r *rand.Rand, uneven bool) []protocol.Unit {
	var us []protocol.Unit
	parents := map[string]int{} // instances, kept to write count lists
	kinds := 1 + r.IntN(3)
	for k := range kinds {
		u := protocol.Unit{Name: fmt.Sprintf("u%d", k)}
		held := 1
		if k > 0 && r.IntN(3) > 0 {
			u.Within = us[r.IntN(k)].Name
			held = parents[u.Within]
		}
		u.Count = []int{1 + r.IntN(4)}
		n := held * u.Count[0]
		if uneven && held > 1 && held < 8 && r.IntN(2) == 0 {
			u.Count, n = nil, 0
			for range held {
				c := 1 + r.IntN(4)
				u.Count, n = append(u.Count, c), n+c
			}
		}
		parents[u.Name] = n
		us = append(us, u)
	}
	// Join what is not joined by crossing all units that hold nothing.
	var leaves []string
	for _, u := range us {
		if !slices.ContainsFunc(us, func(v protocol.Unit) bool { return v.Within == u.Name }) {
			leaves = append(leaves, u.Name)
		}
	}
	if len(leaves) > 1 {
		us = append(us, protocol.Unit{Name: "cell", Crosses: leaves})
	}
	if r.IntN(3) == 0 {
		last := us[len(us)-1].Name
		us = append(us, protocol.Unit{Name: "sub", Within: last, Count: []int{1 + r.IntN(3)}})
	}
	return us
}

// randomPlan is a plan of random units with one or two factors received somewhere; nil
// when the protocol is refused, as it is where treatments do not fit.
func randomPlan(r *rand.Rand, uneven bool) (*protocol.Protocol, *Plan) {
	p := &protocol.Protocol{Units: randomUnits(r, uneven)}
	p.Analysis.Interactions = -1
	for f := range 1 + r.IntN(2) {
		p.Factors = append(p.Factors, levels(string(rune('a'+f)), 2+r.IntN(3)))
		u := r.IntN(len(p.Units))
		p.Units[u].Receives = append(p.Units[u].Receives, p.Factors[f].Name)
	}
	plan, _ := New(p)
	if plan != nil && plan.Units[plan.Smallest].N > 72 {
		return p, nil
	}
	return p, plan
}

func each(t *testing.T, seed uint64, uneven bool, want int, check func(t *testing.T, r *rand.Rand, p *protocol.Protocol, plan *Plan)) {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 1))
	done := 0
	for range 200 * want {
		p, plan := randomPlan(r, uneven)
		if plan == nil {
			continue
		}
		check(t, r, p, plan)
		if t.Failed() {
			t.Fatalf("%s\n%+v", plan, p.Units)
		}
		if done++; done == want {
			return
		}
	}
	t.Fatalf("only %d plans were not refused", done)
}

// indicator has a column for every instance of the units and one for the mean.
func indicator(plan *Plan, us ...int) *mat.Dense {
	n, cols := plan.Units[plan.Smallest].N, 1
	for _, u := range us {
		cols += plan.Units[u].N
	}
	z := mat.NewDense(n, cols, nil)
	at := 1
	for i := range n {
		z.Set(i, 0, 1)
	}
	for _, u := range us {
		for i, l := range plan.Coarse(plan.Smallest, u) {
			z.Set(i, at+int(l), 1)
		}
		at += plan.Units[u].N
	}
	return z
}

func rank(z *mat.Dense) int {
	var svd mat.SVD
	if !svd.Factorize(z, mat.SVDNone) {
		panic("layout: singular values did not converge")
	}
	n := 0
	for _, v := range svd.Values(nil) {
		if v > 1e-9 {
			n++
		}
	}
	return n
}

// Degrees of freedom by Möbius inversion against ranks of indicator matrices, for
// structures with equal and with unequal numbers.
func TestStrataAgainstRanks(t *testing.T) {
	for _, uneven := range []bool{false, true} {
		each(t, 11, uneven, 200, func(t *testing.T, _ *rand.Rand, _ *protocol.Protocol, plan *Plan) {
			sum := 0
			for s, st := range plan.Strata {
				sum += st.DF
				var coarser []int
				for _, other := range plan.Strata[:s] {
					if plan.finer(st.Unit, other.Unit) {
						coarser = append(coarser, other.Unit)
					}
				}
				want := rank(indicator(plan, append(coarser, st.Unit)...)) - rank(indicator(plan, coarser...))
				if st.DF != want {
					t.Errorf("stratum %s has %d degrees of freedom, want %d", st.Name, st.DF, want)
				}
			}
			if n := plan.Units[plan.Smallest].N; sum != n-1 {
				t.Errorf("degrees of freedom add up to %d of %d", sum, n-1)
			}
		})
	}
}

// projectors gives the projector of every stratum, as the set of factors splits it.
func projectors(t *testing.T, plan *Plan) []*mat.Dense {
	t.Helper()
	n := plan.Units[plan.Smallest].N
	fs := []factor.Factor{factor.Universe(n)}
	for _, st := range plan.Strata {
		fs = append(fs, plan.Factor(st.Unit))
	}
	set, err := factor.NewSet(fs)
	if err != nil {
		t.Fatal(err)
	}
	out := make([]*mat.Dense, len(fs))
	for k := range out {
		out[k] = mat.NewDense(n, n, nil)
	}
	for j := range n {
		e := make([]float64, n)
		e[j] = 1
		for k, part := range set.Split(e) {
			out[k].SetCol(j, part)
		}
	}
	return out[1:]
}

// The projectors of the strata are idempotent, orthogonal, sum to the identity less
// the mean, and are eigenspaces of V = Σ σ²ᵤ Zᵤ Zᵤ′ for random σ², with the eigenvalues
// that the expected mean squares state.
func TestProjectorsAndExpectedMeanSquares(t *testing.T) {
	each(t, 12, false, 120, func(t *testing.T, r *rand.Rand, _ *protocol.Protocol, plan *Plan) {
		n := plan.Units[plan.Smallest].N
		q := projectors(t, plan)
		sigma := make([]float64, len(plan.Units))
		v := mat.NewDense(n, n, nil)
		for u := range plan.Units {
			sigma[u] = r.Float64() * 10
			var zz mat.Dense
			p := factor.Projector(plan.Factor(u))
			zz.Scale(sigma[u]*float64(n/plan.Units[u].N), p)
			v.Add(v, &zz)
		}
		sum := mat.NewDense(n, n, nil)
		for i := range n {
			for j := range n {
				sum.Set(i, j, 1/float64(n))
			}
		}
		for s, st := range plan.Strata {
			sum.Add(sum, q[s])
			for k := range q {
				var m mat.Dense
				m.Mul(q[s], q[k])
				want := mat.NewDense(n, n, nil)
				if k == s {
					want = q[s]
				}
				if !mat.EqualApprox(&m, want, 1e-9) {
					t.Errorf("projectors of %s and %s", st.Name, plan.Strata[k].Name)
				}
			}
			if tr := mat.Trace(q[s]); math.Abs(tr-float64(st.DF)) > 1e-9 {
				t.Errorf("stratum %s has trace %g, %d degrees of freedom", st.Name, tr, st.DF)
			}
			if st.DF == 0 {
				continue
			}
			random := plan.expected(st.Unit)
			if random == nil {
				t.Errorf("no expected mean square for %s", st.Name)
				continue
			}
			eigenvalue := 0.0
			for _, c := range random {
				eigenvalue += c.N * sigma[c.Unit]
			}
			var vq, lq mat.Dense
			vq.Mul(v, q[s])
			lq.Scale(eigenvalue, q[s])
			if !mat.EqualApprox(&vq, &lq, 1e-8) {
				t.Errorf("stratum %s is no eigenspace with %g", st.Name, eigenvalue)
			}
		}
		identity := mat.NewDense(n, n, nil)
		for i := range n {
			identity.Set(i, i, 1)
		}
		if !mat.EqualApprox(sum, identity, 1e-9) {
			t.Error("projectors do not add up to the identity")
		}
	})
}

// The order in which units are declared changes neither strata nor errors.
func TestOrderOfUnitsChangesNothing(t *testing.T) {
	facts := func(plan *Plan) string {
		var out []string
		for _, s := range plan.Strata {
			out = append(out, fmt.Sprint("stratum ", s.Name, s.DF, s.ErrorDF))
		}
		for _, term := range plan.Terms {
			out = append(out, fmt.Sprint("term ", term.Name, term.DF, plan.Units[term.Unit].Name, term.Stratum >= 0, term.ErrorDF))
		}
		slices.Sort(out)
		return strings.Join(out, "\n")
	}
	each(t, 13, true, 200, func(t *testing.T, r *rand.Rand, p *protocol.Protocol, plan *Plan) {
		// Units that are the same partition share a stratum in the order declared.
		for u := range plan.Units {
			for v := range u {
				if plan.finer(u, v) && plan.finer(v, u) {
					return
				}
			}
		}
		shuffled := *p
		shuffled.Units = slices.Clone(p.Units)
		r.Shuffle(len(shuffled.Units), func(i, j int) { shuffled.Units[i], shuffled.Units[j] = shuffled.Units[j], shuffled.Units[i] })
		other, list := New(&shuffled)
		if other == nil {
			t.Errorf("refused when shuffled: %v", list)
			return
		}
		if a, b := facts(plan), facts(other); a != b {
			t.Errorf("declared in another order:\n%s\nbut was\n%s", b, a)
		}
	})
}

// allot gives every instance of unit u a combination in a regular way that is as
// proportional as can be: in turn within a block, and cyclically over rows and columns.
func allot(plan *Plan, u int) []int {
	a, unit := plan.Allocation(u), &plan.Units[u]
	m := len(a.Combinations)
	index := func(w, s int) []int { // number of each instance of w within s, a coarser unit or -1
		out := make([]int, plan.Units[w].N)
		if s < 0 {
			for i := range out {
				out[i] = i
			}
			return out
		}
		next := map[int32]int{}
		for i, p := range plan.Coarse(w, s) {
			out[i] = next[p]
			next[p]++
		}
		return out
	}
	out := make([]int, unit.N)
	if unit.Crosses == nil {
		for i, k := range index(u, unit.Within) {
			out[i] = k % m
		}
		return out
	}
	for _, v := range unit.Crosses {
		ix := index(v, plan.sup[unit.Crosses[0]][unit.Crosses[1]])
		for i, j := range plan.Coarse(u, v) {
			out[i] += ix[j]
		}
	}
	for i := range out {
		out[i] %= m
	}
	return out
}

// A term that can lie in the stratum of its unit does so under a regular allotment,
// and one that cannot does not.
func TestTermsLieInTheirStratum(t *testing.T) {
	lies, not := 0, 0
	each(t, 14, false, 1200, func(t *testing.T, _ *rand.Rand, _ *protocol.Protocol, plan *Plan) {
		n := plan.Units[plan.Smallest].N
		level := make([][]int, len(plan.Factors)) // of each row
		for u := range plan.Units {
			a := plan.Allocation(u)
			if a == nil {
				continue
			}
			if a.Separate || len(plan.Units[u].Crosses) > 2 || len(a.Factors) > 1 && !a.Complete {
				return
			}
			unit := &plan.Units[u]
			if unit.Crosses != nil && plan.sup[unit.Crosses[0]][unit.Crosses[1]] >= 0 && !a.Complete {
				return
			}
			given := allot(plan, u)
			planned := make([]int, len(a.Total))
			for _, c := range given {
				planned[c]++
			}
			if !slices.Equal(planned, a.Total) {
				return // not the numbers the plan is made for
			}
			for k, f := range a.Factors {
				level[f] = make([]int, n)
				for i, j := range plan.Coarse(plan.Smallest, u) {
					level[f][i] = a.Combinations[given[j]][k]
				}
			}
		}
		q := projectors(t, plan)
		for _, term := range plan.Terms {
			own := q[plan.stratum(term.Unit)]
			if plan.Strata[plan.stratum(term.Unit)].DF == 0 && term.Stratum < 0 {
				continue
			}
			// A contrast of the term: the product of random contrasts of its factors.
			inside := true
			for trial := range 4 {
				x := mat.NewVecDense(n, nil)
				for i := range n {
					x.SetVec(i, 1)
				}
				for _, f := range term.Factors {
					a := plan.Allocation(plan.Factors[f].Unit)
					c := contrast(a.marginal(plan, []int{f}), trial)
					for i := range n {
						x.SetVec(i, x.AtVec(i)*c[level[f][i]])
					}
				}
				centre(x)
				if mat.Norm(x, 2) < 1e-9 {
					return // confounded with the mean in this allotment
				}
				var y mat.VecDense
				y.MulVec(own, x)
				y.SubVec(&y, x)
				inside = inside && mat.Norm(&y, 2) < 1e-9*float64(n)
			}
			if term.Stratum >= 0 && !ensured(plan, term) {
				continue // it takes an allotment made for it
			}
			if term.Stratum >= 0 {
				lies++
				if !inside {
					t.Errorf("%s does not lie in %s", term.Name, plan.Strata[term.Stratum].Name)
				}
			} else {
				not++
				if inside {
					t.Errorf("%s lies in the stratum of %s after all", term.Name, plan.Units[term.Unit].Name)
				}
			}
		}
	})
	if lies < 200 || not < 50 {
		t.Errorf("cases are one-sided: %d lie, %d do not", lies, not)
	}
}

// ensured tells whether term lies in its stratum without any of its units being
// balanced over the levels that another unit holds.
func ensured(plan *Plan, term Term) bool {
	b := builder{p: plan.Protocol, plan: plan, up: plan.up()}
	for v := range plan.Units {
		if v != term.Unit && b.up[term.Unit][v] && !b.balanced(&term, v) {
			return false
		}
	}
	return true
}

// contrast makes a value for each level whose mean over the units is zero.
func contrast(units []int, trial int) []float64 {
	r := rand.New(rand.NewPCG(uint64(len(units)), uint64(trial)))
	c, sum, n := make([]float64, len(units)), 0.0, 0.0
	for i := range c {
		c[i] = r.Float64()
		sum += c[i] * float64(units[i])
		n += float64(units[i])
	}
	for i := range c {
		c[i] -= sum / n
	}
	return c
}

func centre(x *mat.VecDense) {
	mean := mat.Sum(x) / float64(x.Len())
	for i := range x.Len() {
		x.SetVec(i, x.AtVec(i)-mean)
	}
}

// The lines of the skeleton, parts aside, add up to the whole.
func TestSkeletonAddsUp(t *testing.T) {
	total := func(plan *Plan) int {
		sum := 0
		for _, l := range plan.Skeleton() {
			if l.Kind != PartLine {
				sum += l.DF
			}
		}
		return sum
	}
	check := func(t *testing.T, _ *rand.Rand, _ *protocol.Protocol, plan *Plan) {
		for _, s := range plan.Strata {
			if s.ErrorDF < 0 {
				return
			}
		}
		if got, want := total(plan), plan.Units[plan.Smallest].N-1; got != want {
			t.Errorf("lines add up to %d of %d", got, want)
		}
	}
	each(t, 15, true, 300, check)
	for _, d := range designs() {
		d.p.Analysis.Interactions = -1
		plan, _ := New(&d.p)
		if check(t, nil, nil, plan); t.Failed() {
			t.Fatal(d.file)
		}
		for i, p := range plan.Protocol.Repeated {
			sum := 0
			for _, l := range plan.Repeated(i) {
				sum += l.DF
			}
			on := plan.Units[slices.IndexFunc(plan.Units, func(u Unit) bool { return u.Name == p.On })].N
			if sum != on*(len(p.At)-1) {
				t.Errorf("%s: repeated lines add up to %d", d.file, sum)
			}
		}
	}
}

// Whatever a protocol says, New answers and does not panic: protocols of words and
// numbers at random, and good ones with a few places spoilt.
func TestNothingPanics(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 22))
	names := []string{"", "a", "b", "c", "d", "treatment"}
	pick := func() string { return names[r.IntN(len(names))] }
	several := func(n int) []string {
		var out []string
		for range r.IntN(n) {
			out = append(out, pick())
		}
		return out
	}
	counts := []int{-1, 0, 1, 1, 2, 2, 3, 4, 5, 6, 8, 12, 100_000, 1 << 20, math.MaxInt}
	count := func() int { return counts[r.IntN(len(counts))] }
	spoil := func(u *protocol.Unit) {
		switch r.IntN(14) {
		case 0:
			u.Labels = [][]string{several(4)}
		case 1:
			u.Labels = [][]string{several(4), several(4)}
		case 2:
			u.Numbered = "through"
		case 3:
			u.Animals = []int{count()}
		case 4:
			u.Checks = several(3)
		case 5:
			u.Replicates = []protocol.Replicate{{Level: pick(), N: count()}, {Level: "a1", N: count()}}
		case 6:
			u.Interacts = true
		case 7:
			yes := r.IntN(2) == 0
			u.Random = &yes
		case 8:
			u.Crosses = several(4)
		case 9:
			u.Within = pick()
		case 10:
			u.Count = []int{count()}
		case 11:
			u.Count = append(u.Count, count())
		case 12:
			u.Receives = several(3)
		case 13:
			u.Carries = several(3)
		}
	}
	good := designs()
	for _, d := range good {
		for _, u := range d.p.Units {
			names = append(names, u.Name)
		}
		for _, f := range d.p.Factors {
			names = append(names, f.Name, f.Levels[0])
		}
	}
	plans := 0
	for range 3_000 {
		p := &protocol.Protocol{File: "protocol.toml"}
		if r.IntN(3) > 0 {
			*p = good[r.IntN(len(good))].p
			p.Units = slices.Clone(p.Units)
			p.Factors = slices.Clone(p.Factors)
			names = names[:6]
			for _, u := range p.Units {
				names = append(names, u.Name)
			}
			for _, f := range p.Factors {
				names = append(names, f.Name, f.Levels[0])
			}
		} else {
			for range r.IntN(5) {
				u := protocol.Unit{Name: pick(), Count: []int{count()}}
				spoil(&u)
				p.Units = append(p.Units, u)
			}
			for range r.IntN(4) {
				f := levels("x", r.IntN(4))
				f.Name = pick()
				p.Factors = append(p.Factors, f)
			}
		}
		for range r.IntN(4) {
			if len(p.Units) > 0 {
				spoil(&p.Units[r.IntN(len(p.Units))])
			}
		}
		if r.IntN(8) == 0 {
			p.Treatments = nil
			for range r.IntN(5) {
				p.Treatments = append(p.Treatments, protocol.Treatment{Code: pick(), Control: r.IntN(2) == 0,
					Levels: map[string]string{pick(): "a1", pick(): "b2"}})
			}
		}
		p.Analysis.Interactions = r.IntN(4) - 1
		if r.IntN(6) == 0 {
			p.CarryOver = &protocol.CarryOver{Factor: pick(), Along: pick(), On: pick()}
		}
		if r.IntN(6) == 0 {
			p.TimeTrend = &protocol.TimeTrend{On: pick(), Along: pick(), Order: r.IntN(3) - 1}
		}
		if r.IntN(6) == 0 {
			p.Repeated = []protocol.Repeated{{Name: pick(), On: pick(), At: several(4)}}
		}
		p.Trial.Called = strings.Join(several(4), " ") + " split plot"
		plan, list := New(p)
		if (plan == nil) != list.HasErrors() {
			t.Fatalf("plan %v with %v", plan, list)
		}
		if plan == nil {
			continue
		}
		plans++
		if plan.Units[plan.Smallest].N < 1000 {
			_ = plan.String()
		}
		for u := range plan.Units {
			plan.Replicates(u)
			for v := range plan.Units {
				plan.Planned(u, v, 0)
			}
		}
	}
	if plans < 500 {
		t.Errorf("only %d of the protocols made a plan", plans)
	}
}
