package allot

import (
	"bytes"
	"cmp"
	"encoding/csv"
	"fmt"
	"math"
	"slices"
	"strings"

	"penwright/protocol/layout"
)

// AnimalsFile tells where the animals of a roster went whose blocks were formed by rank.
const AnimalsFile = "animals.csv"

// ranking forms blocks of the animals of a roster in the order of a value known before
// the draw.
type ranking struct {
	plan   *layout.Plan
	roster *Roster
	holder int       // the unit that animals are, or that holds them
	block  int       // the unit that is formed by rank
	places [][]int32 // instances of holder in each block, each as often as it holds animals
	order  []int32   // rows of the roster in rank order
	from   int       // place in order of the first animal that is kept
	drawn  bool      // animals of a block are permuted before they take its places
}

// rank prepares the blocks, nil where it is refused.
func (r *refusal) rank(roster *Roster) *ranking {
	plan, by := r.plan, r.plan.Protocol.Roster.BlockBy
	refuse := func(hint, format string, args ...any) *ranking {
		r.add("roster.block_by", NotDrawn, hint, "blocks cannot be formed by "+by+": %s", fmt.Sprintf(format, args...))
		return nil
	}
	if roster == nil || roster.by == "" {
		return refuse("give the roster as a file of the trial folder", "the roster is not read")
	}
	k := &ranking{plan: plan, roster: roster, holder: plan.Smallest, block: -1}
	if crosses := plan.Units[k.holder].Crosses; crosses != nil {
		if k.holder, _ = carrier(plan); k.holder < 0 {
			k.holder = crosses[0]
		}
	}
	for u := range plan.Units {
		if plan.Units[u].Animals != nil {
			k.holder = u
		}
	}
	if plan.Units[k.holder].Crosses != nil {
		return refuse("", "%s crosses other units, so that its animals lie in no block alone", plan.Units[k.holder].Name)
	}
	for v := plan.Units[k.holder].Within; v >= 0 && k.block < 0; v = plan.Units[v].Within {
		if plan.Units[v].Role == layout.Block && plan.Units[v].N > 1 {
			k.block = v
		}
	}
	if k.block < 0 {
		return refuse("add a unit that holds them, such as block, or leave block_by out", "%s lies in no block", plan.Units[k.holder].Name)
	}
	k.drawn = plan.Units[k.holder].Within != k.block
	k.places = make([][]int32, plan.Units[k.block].N)
	wanted := 0
	for i, b := range plan.Coarse(k.holder, k.block) {
		n := 1
		if animals := plan.Units[k.holder].Animals; animals != nil {
			n = animals[i]
		}
		k.drawn = k.drawn || n != 1
		if wanted += n; wanted > len(roster.animals) {
			continue
		}
		for range n {
			k.places[b] = append(k.places[b], int32(i))
		}
	}
	if wanted > len(roster.animals) {
		return refuse("enter more animals in the roster, or plan fewer units", "the units hold %d animals, but the roster lists %d", wanted, len(roster.animals))
	}
	for f := range plan.Factors {
		if !plan.Factors[f].Carried {
			continue
		}
		if k.drawn || plan.Factors[f].Unit != k.holder {
			return refuse("let the animals themselves be the units that carry it", "%s is carried by %s, and which animals that holds is not known before they are drawn", plan.Factors[f].Name, plan.Units[plan.Factors[f].Unit].Name)
		}
	}
	k.order = identity(len(roster.animals))
	slices.SortStableFunc(k.order, func(i, j int32) int {
		return cmp.Compare(roster.animals[i].value, roster.animals[j].value)
	})
	// Of the animals too many those at the ends are left out, so that the others are as
	// much alike as can be.
	span := math.Inf(1)
	for from := 0; from+wanted <= len(k.order) && wanted > 0; from++ {
		if d := roster.animals[k.order[from+wanted-1]].value - roster.animals[k.order[from]].value; d < span {
			k.from, span = from, d
		}
	}
	return k
}

// assign tells for every row of the roster the instance of holder it becomes, or goes
// into; -1 for spare animals.
func (k *ranking) assign(g *Generator) []int32 {
	out := make([]int32, len(k.order))
	for i := range out {
		out[i] = -1
	}
	next := k.from
	for _, places := range k.places {
		list := slices.Clone(k.order[next : next+len(places)])
		if next += len(places); k.drawn {
			g.Shuffle(list)
		}
		for j, at := range places {
			out[list[j]] = at
		}
	}
	return out
}

// classes gives the levels that the units carry, where the animals are the units.
func (k *ranking) classes(fixed [][]int32) {
	at := k.assign(nil)
	for f := range k.plan.Factors {
		if !k.plan.Factors[f].Carried {
			continue
		}
		fixed[f] = make([]int32, k.plan.Units[k.holder].N)
		for row, i := range at {
			if i >= 0 {
				fixed[f][i] = k.roster.animals[row].class[f]
			}
		}
	}
}

func (k *ranking) words() string {
	unit, block := k.plan.Units[k.holder].Name, k.plan.Units[k.block].Name
	text := fmt.Sprintf("the animals of the roster are ranked by %s, ascending, equal ones in the order of the roster", k.roster.by)
	if spare := k.spare(); len(spare) > 0 {
		kept := len(k.order) - len(spare)
		text += fmt.Sprintf("; ranks %d to %d, the run of %d with the smallest range and the first of equals, are kept, and %d are spare (%s)", k.from+1, k.from+kept, kept, len(spare), strings.Join(spare, ", "))
	}
	if text += fmt.Sprintf("; they fill the %d of %s in the plan's order", len(k.places), block); !k.drawn {
		return text + fmt.Sprintf(" and are its %s in rank order", unit)
	}
	return text + fmt.Sprintf(", in each of which they are permuted, with numbers of their own stream (the seed text followed by \" animals\"), and fill the %s in the plan's order", unit)
}

// spare names the animals that are not kept, in rank order.
func (k *ranking) spare() []string {
	kept := 0
	for _, places := range k.places {
		kept += len(places)
	}
	var out []string
	for i, row := range k.order {
		if i < k.from || i >= k.from+kept {
			out = append(out, k.roster.animals[row].name)
		}
	}
	return out
}

// file lists the animals in rank order with the units they went to, which are empty for
// spare ones.
func (k *ranking) file(at []int32) []byte {
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	write := func(record []string) {
		if err := w.Write(record); err != nil {
			panic("allot: a buffer refused a row")
		}
	}
	head := []string{k.roster.heading, k.roster.by}
	units := 0
	for _, n := range UnitName(k.plan, k.holder, 0) {
		head = append(head, n.Unit)
		units++
	}
	write(head)
	for _, row := range k.order {
		record := []string{k.roster.animals[row].name, k.roster.animals[row].text}
		if at[row] < 0 {
			record = append(record, make([]string, units)...)
		} else {
			for _, n := range UnitName(k.plan, k.holder, at[row]) {
				record = append(record, n.Name)
			}
		}
		write(record)
	}
	w.Flush()
	return b.Bytes()
}

// balance compares draws by how alike the treatments are in what was measured before.
type balance struct {
	names      []string
	candidates int
	steps      []step
	plan       *layout.Plan
	unit       int         // the unit of the values
	values     [][]float64 // of each name and instance of unit; NaN: missing
}

// mostCandidates bounds the units of all candidate draws of one call.
const mostCandidates = 200_000_000

// balance prepares the choice among candidates, nil where none is asked for or it is
// refused.
func (r *refusal) balance(s *scheme, roster *Roster) *balance {
	p := r.plan.Protocol.Randomization
	const key = "randomization.balance_on"
	switch {
	case p.Candidates <= 1:
		if len(p.BalanceOn) > 0 {
			r.add(key, NotDrawn, "say candidates = 100 or so, or leave balance_on out", "a draw is balanced by choosing among candidates, and there is one only")
		}
		return nil
	case len(p.BalanceOn) == 0:
		r.add("randomization.candidates", NotDrawn, "name columns of the roster under balance_on, or leave candidates out", "there is nothing to choose among %d candidate draws by", p.Candidates)
		return nil
	case roster == nil || len(roster.values) != len(p.BalanceOn):
		r.add(key, NotDrawn, "give the roster as a file of the trial folder", "the roster is not read, so that a draw cannot be balanced")
		return nil
	}
	b := &balance{names: p.BalanceOn, candidates: p.Candidates, steps: s.steps, plan: r.plan, unit: roster.unit}
	if s.ranking != nil {
		b.unit = s.ranking.holder
		return b
	}
	if b.unit < 0 {
		r.add(key, NotDrawn, "add the columns that name each unit, or form blocks of the animals with block_by", "the roster lists animals by numbers of their own, and nothing tells in which unit they are")
		return nil
	}
	b.values = average(r.plan.Units[b.unit].N, roster.values, roster.rows)
	met := false
	for _, st := range s.steps {
		u := st.allocation().Unit
		met = met || r.plan.Coarse(b.unit, u) != nil || r.plan.Coarse(u, b.unit) != nil
	}
	if !met {
		r.add(key, NotDrawn, "give the roster of the units that receive treatments", "the rows of the roster are of %s, which receive no treatments and hold none that do", r.plan.Units[b.unit].Name)
		return nil
	}
	return b
}

// average gives the mean of the rows of each of n instances.
func average(n int, values [][]float64, of []int32) [][]float64 {
	out := make([][]float64, len(values))
	for k := range values {
		sum, count := make([]float64, n), make([]float64, n)
		for row, v := range values[k] {
			if row < len(of) && of[row] >= 0 && !math.IsNaN(v) {
				sum[of[row]] += v
				count[of[row]]++
			}
		}
		for i := range sum {
			sum[i] /= count[i]
		}
		out[k] = sum
	}
	return out
}

// score is the sum over the drawn units and the names of the share of the sum of squares
// that lies between treatments: the less, the better balanced.
func (b *balance) score(levels [][]int32, values [][]float64) float64 {
	total := 0.0
	for _, st := range b.steps {
		of := st.allocation()
		u := of.Unit
		var up []int32
		if up = b.plan.Coarse(b.unit, u); up == nil && b.plan.Coarse(u, b.unit) == nil {
			continue
		}
		n := b.plan.Units[u].N
		mapped := values
		if up != nil && b.unit != u {
			mapped = average(n, values, up)
		}
		treatment := make([]int, n)
		treatments := 1
		for _, f := range of.Factors {
			treatments *= len(b.plan.Factors[f].Levels)
			for i, l := range levels[f] {
				treatment[i] = treatment[i]*len(b.plan.Factors[f].Levels) + int(l)
			}
		}
		down := b.plan.Coarse(u, b.unit)
		for k := range mapped {
			at := func(i int) float64 {
				if up == nil {
					return mapped[k][down[i]]
				}
				return mapped[k][i]
			}
			mean, count := 0.0, 0.0
			for i := range n {
				if v := at(i); !math.IsNaN(v) {
					mean += v
					count++
				}
			}
			mean /= count
			sum, each := make(map[int]float64, treatments), make(map[int]float64, treatments)
			all := 0.0
			for i := range n {
				if v := at(i); !math.IsNaN(v) {
					sum[treatment[i]] += v - mean
					each[treatment[i]]++
					all += (v - mean) * (v - mean)
				}
			}
			between := 0.0
			for c := range treatments {
				if each[c] > 0 {
					between += sum[c] * sum[c] / each[c]
				}
			}
			if all > 0 {
				total += between / all
			}
		}
	}
	return total
}

func (b *balance) words() string {
	return fmt.Sprintf("of %d candidate draws, made one after the other, that with the least share of the sum of squares of %s between treatments is kept, the first of equals", b.candidates, strings.Join(b.names, " and "))
}
