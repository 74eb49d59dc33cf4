package allot

import (
	"fmt"
	"slices"
	"strings"

	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// New draws the allotment of a plan: for each unit that receives something, in the
// plan's order, its treatments are permuted at random inside what holds it. roster
// tells the classes that units carry; it may be nil. Where the list has an error the
// allotment is nil.
func New(plan *layout.Plan, roster *Roster, seed string) (*Allotment, diag.List) {
	all, list := Draws(plan, roster, seed, 1)
	if len(all) == 0 {
		return nil, list
	}
	return all[0], list
}

// Draws makes n draws from one stream without recording them; the first is that of
// New, the next take the numbers that follow. Each may be the best of several candidates,
// as the protocol asks.
func Draws(plan *layout.Plan, roster *Roster, seed string, n int) ([]*Allotment, diag.List) {
	s, list := newScheme(plan, roster)
	if list.HasErrors() {
		return nil, list
	}
	made := Draw{Scheme: s.words(), Start: s.start(), Candidates: 1}
	if s.balance != nil {
		made.Candidates = s.balance.candidates
		made.Rejected = made.Candidates - 1
		if made.Candidates*n > mostCandidates/max(1, s.rows) {
			r := &refusal{plan: plan}
			r.add("randomization.candidates", NotDrawn, "ask for fewer candidates", "%d draws of %d candidates on %d units are more than %d million units", n, made.Candidates, s.rows, mostCandidates/1_000_000)
			return nil, r.list
		}
	}
	g, animals := NewGenerator(seed), NewGenerator(seed+" animals") // a stream of their own
	all := make([]*Allotment, n)
	for i := range all {
		all[i] = s.best(g, animals)
		all[i].made = made
	}
	if plan.Protocol.Randomization.Codes {
		// A stream of their own, so that codes change no draw.
		g := NewGenerator(seed + " codes")
		for _, a := range all {
			a.Codes = maskedCodes(g, len(a.Order))
		}
	}
	return all, list
}

// Scheme says in words how a plan is drawn.
func Scheme(plan *layout.Plan, roster *Roster) (string, diag.List) {
	s, list := newScheme(plan, roster)
	if list.HasErrors() {
		return "", list
	}
	return s.words(), list
}

func (s *scheme) words() string {
	var words []string
	if s.ranking != nil {
		words = append(words, s.ranking.words())
	}
	for _, st := range s.steps {
		words = append(words, st.words())
	}
	if s.balance != nil {
		words = append(words, s.balance.words())
	}
	return strings.Join(words, "; ")
}

// start writes the arrangements that are permuted.
func (s *scheme) start() string {
	var words []string
	for _, st := range s.steps {
		if st, ok := st.(*arranged); ok {
			words = append(words, s.plan.Units[st.of.Unit].Name+": "+st.text())
		}
	}
	return strings.Join(words, "; ")
}

// maskedCodes gives n different codes K… at random, of as many digits as leave nine in ten
// numbers unused, so that a slip of the pen rarely hits another code.
func maskedCodes(g *Generator, n int) []string {
	low := 10
	for 9*low < 10*n {
		low *= 10
	}
	out := make([]string, n)
	used := make(map[int]bool, n)
	for i := range out {
		v := low + g.Below(9*low)
		for used[v] {
			v = low + g.Below(9*low)
		}
		used[v] = true
		out[i] = fmt.Sprintf("K%d", v)
	}
	return out
}

// scheme is all that a draw needs, worked out once.
type scheme struct {
	plan  *layout.Plan
	steps []step
	fixed [][]int32 // levels that are not drawn: carried classes
	rows  int

	ranking *ranking // where blocks are formed by rank
	balance *balance // where the best of several draws is kept
}

// step draws what one unit receives.
type step interface {
	// draw gives each instance of the unit the number of its combination of levels, the
	// first factor slowest. levels holds what is drawn so far and classes.
	draw(g *Generator, levels [][]int32, combination []int32)
	words() string
	allocation() *layout.Allocation
}

func (s *scheme) draw(g *Generator) *Allotment {
	a := &Allotment{Plan: s.plan, Levels: slices.Clone(s.fixed), Origin: Drawn, Order: make([]int, s.rows)}
	for i := range a.Order {
		a.Order[i] = i + 1
	}
	for _, st := range s.steps {
		s.take(st, g, a.Levels)
	}
	return a
}

// best makes the candidates of a draw and keeps the one that is balanced best.
func (s *scheme) best(g, animals *Generator) *Allotment {
	one := func() (a *Allotment, at []int32) {
		a = s.draw(g)
		if s.ranking != nil {
			at = s.ranking.assign(animals)
		}
		return a, at
	}
	kept, at := one()
	if s.balance != nil {
		score := func(a *Allotment, at []int32) float64 {
			values := s.balance.values
			if s.ranking != nil {
				values = average(s.plan.Units[s.ranking.holder].N, s.ranking.roster.values, at)
			}
			return s.balance.score(a.Levels, values)
		}
		least := score(kept, at)
		for range s.balance.candidates - 1 {
			a, place := one()
			// Draws that differ by names alone are equal but for rounding.
			if x := score(a, place); x < least*(1-1e-9) {
				kept, at, least = a, place, x
			}
		}
	}
	if s.ranking != nil {
		kept.Animals = s.ranking.file(at)
	}
	return kept
}

// take draws one step into levels.
func (s *scheme) take(st step, g *Generator, levels [][]int32) {
	of := st.allocation()
	combination := make([]int32, s.plan.Units[of.Unit].N)
	st.draw(g, levels, combination)
	for k := len(of.Factors) - 1; k >= 0; k-- {
		n := int32(len(s.plan.Factors[of.Factors[k]].Levels))
		at := make([]int32, len(combination))
		for i, c := range combination {
			at[i], combination[i] = c%n, c/n
		}
		levels[of.Factors[k]] = at
	}
}

// refusal collects why a plan is not drawn.
type refusal struct {
	plan *layout.Plan
	list diag.List
}

func (r *refusal) add(key, code, hint, format string, args ...any) {
	r.list.Add(diag.Diagnostic{Pos: r.plan.Protocol.Pos(key), Key: key, Code: code, Message: fmt.Sprintf(format, args...), Hint: hint})
}

const elsewhere = "draw it elsewhere, bring allotment.csv and say under [randomization] method how it was drawn"

func newScheme(plan *layout.Plan, roster *Roster) (*scheme, diag.List) {
	r := &refusal{plan: plan}
	p := plan.Protocol
	s := &scheme{plan: plan, fixed: make([][]int32, len(plan.Factors)), rows: plan.Units[RowUnit(plan)].N}
	for f := range plan.Factors {
		if plan.Factors[f].Carried && roster != nil {
			s.fixed[f] = roster.Levels[f]
		}
	}
	if p.Roster != nil && p.Roster.BlockBy != "" {
		if s.ranking = r.rank(roster); s.ranking == nil {
			return s, r.list
		}
		if !s.ranking.drawn {
			s.ranking.classes(s.fixed)
		}
	}
	// What rows received decides which of them belong together, though not how many, so
	// a trial run of the steps before stands for every draw.
	g, levels := NewGenerator("trial run"), slices.Clone(s.fixed)
	for _, u := range coarseFirst(plan) {
		if st := r.step(plan.Allocation(u), s.fixed, levels); st != nil {
			s.steps = append(s.steps, st)
			s.take(st, g, levels)
		}
	}
	s.balance = r.balance(s, roster)
	return s, r.list
}

// coarseFirst lists the units that receive something in the plan's order, but none
// before a larger one that holds it.
func coarseFirst(plan *layout.Plan) []int {
	var out []int
	done := make([]bool, len(plan.Units))
	for range plan.Units {
		for u := range plan.Units {
			free := !done[u]
			for v := range plan.Units {
				free = free && (v == u || done[v] || plan.Coarse(u, v) == nil)
			}
			if free {
				done[u] = true
				if plan.Allocation(u) != nil {
					out = append(out, u)
				}
				break
			}
		}
	}
	return out
}

// step prepares the draw of what one unit receives, nil where it is refused.
func (r *refusal) step(a *layout.Allocation, fixed, levels [][]int32) step {
	plan, p, u := r.plan, r.plan.Protocol, a.Unit
	crosses := plan.Units[u].Crosses != nil
	switch {
	case a.Separate:
		return r.graeco(a, fixed, levels)
	case a.Checks != nil:
		return r.augmented(a, fixed, levels)
	case crosses && p.CarryOver != nil && slices.ContainsFunc(a.Factors, func(f int) bool { return plan.Factors[f].Name == p.CarryOver.Factor }):
		return r.sequenced(a, fixed, levels, "carryover", p.CarryOver.On, p.CarryOver.Along)
	case crosses && p.TimeTrend != nil:
		return r.sequenced(a, fixed, levels, "time_trend", p.TimeTrend.On, p.TimeTrend.Along)
	case crosses:
		return r.latin(a, fixed, levels)
	default:
		return r.inBlocks(a, fixed)
	}
}

func factorNames(plan *layout.Plan, fs []int) string {
	names := make([]string, len(fs))
	for i, f := range fs {
		names[i] = plan.Factors[f].Name
	}
	return strings.Join(names, " × ")
}

// classes numbers the instances of unit u by the classes it carries, in order of first
// appearance; nil where it carries none. ok is false where a class is not known.
func (r *refusal) classes(u int, fixed [][]int32) (class []int32, ok bool) {
	unit := &r.plan.Units[u]
	if len(unit.Carries) == 0 {
		return nil, true
	}
	number := map[string]int32{}
	class = make([]int32, unit.N)
	for i := range class {
		var k strings.Builder
		for _, f := range unit.Carries {
			if fixed[f] == nil || fixed[f][i] < 0 {
				r.add(fmt.Sprintf("unit[%d].carries", u), ClassUnknown,
					fmt.Sprintf("give it in the roster, in a column %q beside the unit columns", r.plan.Factors[f].Name),
					"the draw is made within each class of %s, but that of %s is not known", r.plan.Factors[f].Name, Describe(r.plan, u, int32(i)))
				return nil, false
			}
			fmt.Fprintf(&k, "%d ", fixed[f][i])
		}
		if _, seen := number[k.String()]; !seen {
			number[k.String()] = int32(len(number))
		}
		class[i] = number[k.String()]
	}
	return class, true
}

// blocked draws the treatments of a unit inside each instance of its parent, or over
// the whole trial.
type blocked struct {
	of     *layout.Allocation
	plan   *layout.Plan
	blocks []block
	deal   bool // some class takes fewer than all treatments once more
	round  bool // unequal numbers are rounded to those of classes
}

type block struct {
	classes [][]int32 // instances of each class
	counts  [][]int32 // for each class, how often it gets each combination for certain
	rest    []int     // for each class, how many more it gets from the dealt order
	share   [][]int   // of unequal replication, for each class and combination its part of size; nil: dealt
	size    int
}

func (r *refusal) inBlocks(a *layout.Allocation, fixed [][]int32) step {
	plan, u := r.plan, a.Unit
	unit := &plan.Units[u]
	if !a.Complete {
		return r.incomplete(a, fixed)
	}
	class, ok := r.classes(u, fixed)
	if !ok {
		return nil
	}
	n, in := 1, make([]int32, unit.N)
	if unit.Within >= 0 {
		n, in = plan.Units[unit.Within].N, plan.Coarse(u, unit.Within)
	}
	st := &blocked{of: a, plan: plan, blocks: make([]block, n)}
	members := make([][]int32, n)
	for i, b := range in {
		members[b] = append(members[b], int32(i))
	}
	for b := range st.blocks {
		size := len(members[b])
		total := make([]int32, len(a.Total))
		equal := true
		for c, t := range a.Total {
			total[c] = int32(t * size / unit.N)
			equal = equal && total[c] == total[0]
		}
		bl := &st.blocks[b]
		for _, i := range members[b] {
			k := 0
			if class != nil {
				k = int(class[i])
			}
			for len(bl.classes) <= k {
				bl.classes = append(bl.classes, nil)
			}
			bl.classes[k] = append(bl.classes[k], i)
		}
		bl.classes = slices.DeleteFunc(bl.classes, func(c []int32) bool { return c == nil })
		for _, members := range bl.classes {
			counts, rest := make([]int32, len(total)), len(members)
			for c := range total {
				counts[c] = int32(int(total[c]) * len(members) / size)
				rest -= int(counts[c])
			}
			st.deal = st.deal || rest > 0 && equal
			bl.counts, bl.rest = append(bl.counts, counts), append(bl.rest, rest)
		}
		if !equal && slices.ContainsFunc(bl.rest, func(n int) bool { return n > 0 }) {
			st.round, bl.size = true, size
			for _, members := range bl.classes {
				share := make([]int, len(total))
				for c, n := range total {
					share[c] = int(n) * len(members)
				}
				bl.share = append(bl.share, share)
			}
		}
	}
	return st
}

func (s *blocked) allocation() *layout.Allocation { return s.of }

func (s *blocked) draw(g *Generator, _ [][]int32, combination []int32) {
	for b := range s.blocks {
		bl := &s.blocks[b]
		var dealt []int32
		next := 0
		counts, rest := bl.counts, bl.rest
		if bl.share != nil {
			counts, rest = bl.rounded(g), make([]int, len(bl.rest))
		}
		if slices.ContainsFunc(rest, func(n int) bool { return n > 0 }) {
			dealt = identity(len(s.of.Combinations))
			g.Shuffle(dealt)
		}
		for k, members := range bl.classes {
			list := make([]int32, 0, len(members))
			for c, n := range counts[k] {
				for range n {
					list = append(list, int32(c))
				}
			}
			for range rest[k] {
				list = append(list, dealt[next%len(dealt)])
				next++
			}
			g.Shuffle(list)
			for i, at := range members {
				combination[at] = list[i]
			}
		}
	}
}

// rounded gives numbers of combinations in classes as near to proportion as whole
// numbers can be.
func (bl *block) rounded(g *Generator) [][]int32 {
	share := make([][]int, len(bl.share))
	for k := range share {
		share[k] = slices.Clone(bl.share[k])
	}
	round(g, share, bl.size)
	out := make([][]int32, len(share))
	for k := range share {
		for _, n := range share[k] {
			out[k] = append(out[k], int32(n/bl.size))
		}
	}
	return out
}

func (s *blocked) words() string {
	unit := &s.plan.Units[s.of.Unit]
	place := "for the whole trial"
	if unit.Within >= 0 {
		place = "anew for each " + s.plan.Units[unit.Within].Name + " in the plan's order"
	}
	text := fmt.Sprintf("%s to %s: the list of the %d treatments in the protocol's order, each as often as planned, is permuted %s", factorNames(s.plan, s.of.Factors), unit.Name, len(s.of.Combinations), place)
	if len(unit.Carries) > 0 {
		text = fmt.Sprintf("%s to %s: the list of the %d treatments in the protocol's order, each as often as planned, is permuted for each class of %s, %s", factorNames(s.plan, s.of.Factors), unit.Name, len(s.of.Combinations), factorNames(s.plan, unit.Carries), place)
		if s.deal {
			text += "; what a class holds beyond equal numbers is dealt before, class after class, from one permutation of the treatments"
		}
		if s.round {
			text += "; numbers that are not proportional are rounded before by Cox (1987): from the first broken share in the order of classes and treatments a way leads to the first other broken one of its class, then of its treatment, and so on until a ring closes; its shares are raised and lowered in turn by as much (in parts of the size of the block) as makes one whole, raised first by u when a whole number below u + d is below d, else lowered by d"
		}
	}
	return text
}

// squared draws Latin squares of the treatments on the rows and columns that a unit
// crosses. Where rows and columns are several times the treatments, they are put in
// random order and cut into squares.
type squared struct {
	of     *layout.Allocation
	plan   *layout.Plan
	grid   *grid
	square square

	fields, rows, columns int // number of fields, and the size of the first
}

func (r *refusal) latin(a *layout.Allocation, fixed, levels [][]int32) step {
	plan, u := r.plan, a.Unit
	unit := &plan.Units[u]
	key := fmt.Sprintf("unit[%d].receives", u)
	t := len(a.Combinations)
	refuse := func(why string) step {
		r.add(key, NotDrawn, "a Latin square needs as many rows and as many columns as treatments, or whole multiples; or "+elsewhere,
			"%d treatments of %s on %s: %s", t, factorNames(plan, a.Factors), unit.Name, why)
		return nil
	}
	if class, ok := r.classes(u, fixed); !ok {
		return nil
	} else if class != nil {
		return refuse("rows and columns are not drawn on a unit that carries a class of its own")
	}
	if len(unit.Crosses) != 2 || slices.ContainsFunc(a.Total, func(n int) bool { return n != a.Total[0] }) {
		return r.incomplete(a, fixed)
	}
	gr, why := r.grid(u, unit.Crosses[0], unit.Crosses[1], fixed)
	if gr == nil {
		if why == "" {
			return nil
		}
		return refuse(why)
	}
	fields := gr.fields(levels)
	for _, f := range fields {
		if f.rows%t != 0 || f.columns%t != 0 {
			fields = nil
			break
		}
	}
	switch {
	case fields == nil:
		return r.incomplete(a, fixed)
	case t > largestSquare:
		return refuse(fmt.Sprintf("squares larger than %d × %d are not drawn", largestSquare, largestSquare))
	}
	return &squared{of: a, plan: plan, grid: gr, square: newSquare(t), fields: len(fields), rows: fields[0].rows, columns: fields[0].columns}
}

func (s *squared) allocation() *layout.Allocation { return s.of }

func (s *squared) draw(g *Generator, levels [][]int32, combination []int32) {
	t := s.square.n
	for _, f := range s.grid.fields(levels) {
		rows, columns := identity(f.rows), identity(f.columns)
		if f.rows > t {
			g.Shuffle(rows)
		}
		if f.columns > t {
			g.Shuffle(columns)
		}
		for r := 0; r < f.rows; r += t {
			for c := 0; c < f.columns; c += t {
				cells := s.square.draw(g)
				for i, v := range cells {
					combination[f.cells[int(rows[r+i/t])*f.columns+int(columns[c+i%t])]] = v
				}
			}
		}
	}
}

func (s *squared) words() string {
	unit := &s.plan.Units[s.of.Unit]
	t := s.square.n
	text := fmt.Sprintf("%s to %s: a Latin square of the %d treatments on %s × %s", factorNames(s.plan, s.of.Factors), unit.Name, t, s.plan.Units[unit.Crosses[0]].Name, s.plan.Units[unit.Crosses[1]].Name)
	if n := s.fields; n > 1 {
		text = fmt.Sprintf("%s to %s: %d Latin squares of the %d treatments on %s × %s, each drawn by itself", factorNames(s.plan, s.of.Factors), unit.Name, n, t, s.plan.Units[unit.Crosses[0]].Name, s.plan.Units[unit.Crosses[1]].Name)
	}
	if s.rows > t || s.columns > t {
		text += fmt.Sprintf(" (%d rows and %d columns, in random order, are cut into squares)", s.rows, s.columns)
	}
	return text + "; " + s.square.words()
}
