package analysis

import (
	"slices"

	"penwright/protocol"
	"penwright/protocol/layout"
)

// Bounds of the search for a replication, so that it ends: rows of a plan that is tried,
// though as many times the planned ones are allowed as growTimes says; rows of any plan;
// rows of all plans together; and tries until the step is found.
const (
	growRows  = 20_000
	growTimes = 8
	growMost  = 200_000
	growTotal = 2_000_000
	growTries = 400
)

// rows is the number of rows of a plan with another count. Sampling units have no part in
// the errors of treatments and are made two at a time.
func (g *grower) rows(count int) float64 {
	n := 0
	sampled := 1
	for u := range g.z.plan.Units {
		if unit := &g.z.plan.Units[u]; unit.Role == layout.Sampling && unit.Crosses == nil {
			sampled *= 2
		} else {
			n = max(n, unit.N)
		}
	}
	return float64(min(n*sampled, g.z.plan.Units[g.z.plan.Smallest].N)) / float64(g.count) * float64(count)
}

// fits tells whether a plan of so many rows may be tried.
func (g *grower) fits(rows float64) bool {
	return rows <= growRows || rows <= growMost && rows <= growTimes*g.rows(g.count)
}

// grower makes plans with another number of the unit that stands for replication, and
// remembers what the target has in them.
type grower struct {
	z     *sizer
	unit  int
	count int // instances, in each parent, as planned
	step  int // by which the count grows; 0: the plan cannot be changed in this way
	base  int // the smallest count of the same kind
	spent int
	known map[int]*setting
}

// grows finds what more replication means in the layout of the target. Above the largest
// treated unit it is the block; where that has no block, or holds each treatment several
// times, the treated unit itself; of crossed units the one that a crossover is made on, or
// the squares they lie in, else the first; of blocks that hold too few units the replicate
// around them; and where a unit interacts with the treatments at random, that unit.
//
// Every plan that is tried goes through the algebra of the layout, so that degrees of
// freedom are those the design has.
func (z *sizer) grows() grower {
	p := z.plan
	g := grower{z: z, known: map[int]*setting{}}
	t := z.target
	x := t.unit
	if t.term >= 0 && p.Terms[t.term].Over >= 0 {
		g.unit = p.Crossed[p.Terms[t.term].Over].Unit
		return g.prepared()
	}
	// The largest treated unit that the target's unit lies in.
	for _, s := range p.Strata {
		if len(p.Units[s.Unit].Receives) > 0 && p.Coarse(t.unit, s.Unit) != nil {
			x = s.Unit
			break
		}
	}
	unit := &p.Units[x]
	switch {
	case unit.Crosses != nil:
		g.unit = unit.Crosses[0]
		for _, name := range []string{onOf(p.Protocol.CarryOver), trendOf(p.Protocol.TimeTrend)} {
			if u := unitIndex(p, name); u >= 0 && slices.Contains(unit.Crosses, u) {
				g.unit = u
			}
		}
		if w := p.Units[g.unit].Within; w >= 0 && p.Units[w].N > 1 {
			g.unit = w
		}
	case unit.Within < 0 || p.Units[unit.Within].Interacts || len(p.Units[unit.Within].Receives) > 0:
		g.unit = x
	default:
		g.unit = unit.Within
		a := p.Allocation(x)
		switch {
		case a == nil || a.Separate:
		case !a.Complete:
			// A unit around the blocks in which treatments are complete.
			for w := p.Units[g.unit].Within; w >= 0; w = p.Units[w].Within {
				if p.Units[w].N > 1 && p.Planned(x, w, 0) != nil {
					g.unit = w
					break
				}
			}
		case slices.Min(a.Total) >= 2*p.Units[g.unit].N && len(unit.Carries) == 0:
			g.unit = x // several units of each treatment in every block
		}
	}
	return g.prepared()
}

func onOf(c *protocol.CarryOver) string {
	if c == nil {
		return ""
	}
	return c.On
}

func trendOf(t *protocol.TimeTrend) string {
	if t == nil {
		return ""
	}
	return t.On
}

// prepared finds count and step of the unit: the smallest number that can be added so
// that the plan keeps its kind, and the smallest count from which it can.
func (g grower) prepared() grower {
	p := g.z.plan
	n := perParentCount(&p.Protocol.Units[g.unit])
	if n == 0 {
		return g
	}
	g.count = n
	// The first two counts from the planned one on at which the plan is of its kind, all
	// treatments as often as each other; where the plan itself is not, it stands beside
	// the counts that are tried. A plan too large to be made larger is looked at from below.
	if !g.stepFrom(n) {
		g.stepFrom(2)
	}
	return g
}

// stepFrom finds step and base from the first two counts at or above c that do.
func (g *grower) stepFrom(c int) bool {
	p := g.z.plan
	first, limit := 0, g.spent+growTotal/4
	for end := c + growTries; c <= end && g.spent <= limit; c++ {
		q := p
		if c != g.count {
			q = g.rebuilt(c)
		}
		if q == nil || !sameKind(p, q) {
			continue
		}
		if first == 0 {
			first = c
			continue
		}
		g.step = c - first
		g.base = first % g.step
		if g.base == 0 {
			g.base = g.step
		}
		return true
	}
	return false
}

// perParentCount is the number of a unit in each parent, 0 where it differs.
func perParentCount(u *protocol.Unit) int {
	switch {
	case len(u.Count) > 0 && slices.Min(u.Count) == slices.Max(u.Count):
		return u.Count[0]
	case len(u.Count) == 0 && len(u.Labels) > 0:
		for _, l := range u.Labels {
			if len(l) != len(u.Labels[0]) {
				return 0
			}
		}
		return len(u.Labels[0])
	}
	return 0
}

// rebuilt is the plan with another count of the unit; nil when there is none.
func (g *grower) rebuilt(count int) *layout.Plan {
	p := g.z.plan
	rows := g.rows(count)
	if count < 1 || !g.fits(rows) || float64(g.spent)+rows > growTotal {
		return nil
	}
	g.spent += int(rows)
	q := *p.Protocol
	q.Units = slices.Clone(q.Units)
	for i := range q.Units {
		u := &q.Units[i]
		if n := perParentCount(u); n > 0 {
			u.Count = []int{n}
		}
		u.Labels = nil
		if p.Units[i].Role == layout.Sampling && p.Units[i].Crosses == nil {
			u.Count = []int{min(2, slices.Min(u.Count))}
		}
		if len(u.Animals) > 1 {
			u.Animals = nil
		}
	}
	u := &q.Units[g.unit]
	u.Count = []int{count}
	if len(u.Replicates) > 0 {
		u.Replicates = slices.Clone(u.Replicates)
		for i := range u.Replicates {
			n := u.Replicates[i].N * count
			if n%g.count != 0 {
				return nil
			}
			u.Replicates[i].N = n / g.count
		}
	}
	plan, list := layout.New(&q)
	if list.HasErrors() {
		return nil
	}
	return plan
}

// sameKind tells whether plan q replicates its treatments in the way that p does: all
// equally unless the protocol states other numbers, complete in blocks where p is, and
// every term in its stratum.
func sameKind(p, q *layout.Plan) bool {
	if len(p.Terms) != len(q.Terms) {
		return false
	}
	for i := range p.Terms {
		if p.Terms[i].Stratum != q.Terms[i].Stratum || p.Terms[i].Over != q.Terms[i].Over || p.Terms[i].Inexact != q.Terms[i].Inexact {
			return false
		}
	}
	for u := range p.Units {
		a, b := p.Allocation(u), q.Allocation(u)
		if a == nil || a.Separate {
			continue
		}
		if b == nil || b.Separate || a.Complete != b.Complete {
			return false
		}
		if len(p.Protocol.Units[u].Replicates) == 0 && a.Checks == nil && slices.Min(b.Total) != slices.Max(b.Total) {
			return false
		}
	}
	return true
}

// countOf is the number of the growing unit in each parent in a plan.
func (g *grower) countOf(p *layout.Plan) int {
	if w := p.Units[g.unit].Within; w >= 0 {
		return p.Units[g.unit].N / p.Units[w].N
	}
	return p.Units[g.unit].N
}

// index is the place of a count in the order of those that are tried, or of the next
// smaller one.
func (g *grower) index(count int) int {
	if g.step == 0 {
		return 0
	}
	return (count - g.base) / g.step
}

// at is the setting at place j, nil where there is none: where the layout has no such
// plan or leaves no error, or where it would take too much. Without a step the plan as it
// stands is the only one.
func (g *grower) at(j int) *setting {
	if g.step == 0 {
		if j == 0 && g.z.now != nil {
			return g.z.now
		}
		return nil
	}
	if j < 0 {
		return nil
	}
	count := g.base + j*g.step
	if x, ok := g.known[count]; ok {
		return x
	}
	var x *setting
	plan := g.z.plan
	if count != g.count {
		plan = g.rebuilt(count)
	}
	if plan != nil && sameKind(g.z.plan, plan) {
		if s := g.z.setting(plan); s.errorDF > 0 {
			s.count = count
			x = s
		}
	}
	g.known[count] = x
	return x
}

// first is the setting of the smallest replication that does, nil when none is found. More
// replication never does less, so places are doubled and then halved between.
func (g *grower) first(does func(*setting) bool) *setting {
	yes := func(j int) bool { x := g.at(j); return x != nil && does(x) }
	if g.step == 0 {
		return nil // whether fewer would do is not known
	}
	lo, hi := -1, 0
	for !yes(hi) {
		lo = hi
		hi = 2*hi + 1
		if !g.fits(g.rows(g.base+hi*g.step)) || g.spent > growTotal*3/4 {
			return nil
		}
	}
	for hi-lo > 1 {
		mid := lo + (hi-lo)/2
		if yes(mid) {
			hi = mid
		} else {
			lo = mid
		}
	}
	return g.at(hi)
}
