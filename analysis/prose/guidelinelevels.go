package prose

import (
	"fmt"
	"slices"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
	"penwright/protocol/welfare"
)

// level is a level of a farm in a trial: a unit of the plan, or the animals in one.
type level struct {
	unit    int // -1: the animals in units of the plan
	name    string
	n       int
	animals bool
}

// organized are the words for levels of a farm above the animal, the largest first
// (common practice, no source). A block or a period is none.
var organized = []string{"site", "farm", "herd", "flock", "holding", "barn", "house", "building", "shed", "room", "paddock", "pasture", "field", "pond", "pen", "cage", "tank", "hutch", "litter", "group", "tie stall", "stall", "box"}

// levels are the levels of the farm that the units of a plan imply, the largest first,
// down to the animal. A unit that receives treatments is one whatever its name.
func (v *evidence) levels() []level {
	p := v.t.Plan
	var out []level
	animal := false
	for u := range p.Units {
		x := &p.Units[u]
		name := strings.ReplaceAll(x.Name, "_", " ")
		is := welfare.IsAnimal(x.Name)
		if x.Crosses != nil || !is && !slices.Contains(organized, name) && len(x.Receives) == 0 || animal {
			continue
		}
		animal = is
		out = append(out, level{unit: u, name: UnitName(x), n: x.N, animals: is})
	}
	if !animal {
		if n := animals(v.t); n > 0 {
			out = append(out, level{unit: -1, name: "animal", n: n, animals: true})
		}
	}
	return out
}

// criteriaLevels lists by level which criteria speak of it. What names no level is of the
// animals.
func (v *evidence) criteriaLevels(out *Part) {
	e := &v.p.Eligibility
	all := append(slices.Clone(e.Include), e.Exclude...)
	if !adequate(strings.Join(all, "; "), welfare.Key{}) {
		return
	}
	levels := v.levels()
	about := make([]int, len(levels))
	for _, c := range all {
		words, _ := wordsOf(c)
		at := slices.IndexFunc(levels, func(l level) bool {
			return !l.animals && (slices.Contains(words, l.name) || slices.Contains(words, Plural(l.name)))
		})
		if at < 0 {
			at = slices.IndexFunc(levels, func(l level) bool { return l.animals })
		}
		if at >= 0 {
			about[at]++
		}
	}
	var says, lacks []string
	for i, l := range levels {
		if about[i] > 0 {
			says = append(says, fmt.Sprintf("%s: %s", Plural(l.name), criteria(about[i])))
		} else {
			lacks = append(lacks, "criteria for "+Plural(l.name))
		}
	}
	out.say("%s", strings.Join(says, ", "))
	out.Texts = all[:1]
	out.Lacks = lacks
}

func criteria(n int) string {
	if n == 1 {
		return "one criterion"
	}
	return small(n) + " criteria"
}

func (v *evidence) treatmentLevels(out *Part) {
	var parts []string
	for u := range v.t.Plan.Units {
		if x := &v.t.Plan.Units[u]; len(x.Receives) > 0 {
			parts = append(parts, fmt.Sprintf("%s at the %s", factorNames(v.t.Plan, x.Receives), UnitName(x)))
		}
	}
	out.say("%s", strings.Join(parts, ", "))
}

// outcomeLevels lists the units at which outcomes are recorded.
func (v *evidence) outcomeLevels(out *Part) {
	p := v.t.Plan
	var order, lacks []string
	at := map[string][]string{}
	for i := range v.p.Responses {
		r := &v.p.Responses[i]
		if r.Role == "" {
			lacks = append(lacks, "whether "+ResponseLabelText(r)+" is primary or secondary")
		}
		unit := UnitName(&p.Units[p.Smallest])
		if r.RecordedOn != "" {
			unit = strings.ReplaceAll(r.RecordedOn, "_", " ")
		} else if v.t.Table != nil {
			if x := v.t.Table.Response(r.Name); x != nil {
				unit = UnitName(&p.Units[x.Unit])
			}
		}
		if at[unit] == nil {
			order = append(order, unit)
		}
		at[unit] = append(at[unit], ResponseLabelText(r))
	}
	var says []string
	for _, u := range order {
		says = append(says, u+": "+few(at[u], "outcomes"))
	}
	if len(says) > 0 {
		out.say("%s", strings.Join(says, "; "))
		out.Lacks = lacks
	}
}

// sizeLevels counts the units at each level.
func (v *evidence) sizeLevels(out *Part) {
	var says []string
	known := false
	for _, l := range v.levels() {
		says = append(says, numbered(l.n, l.name))
		known = known || l.animals
	}
	out.say("%s", strings.Join(says, ", "))
	if !known {
		out.Lacks = []string{"the number of animals"}
	}
}

// clustering tells how animals of one unit are kept from counting as replicates.
func (v *evidence) clustering(out *Part) {
	p := v.t.Plan
	for u := range p.Units {
		x := &p.Units[u]
		if _, hi := span(x.Animals); hi > 1 && x.Role != layout.Sampling {
			out.say("the %s is the unit of analysis, so that animals of one %s are no replicates", UnitName(x), UnitName(x))
			return
		}
		if x.Role == layout.Sampling {
			out.say("what varies between %s is sampling error, never that of a treatment", Plural(UnitName(x)))
			return
		}
	}
	for u := range p.Units {
		if x := &p.Units[u]; x.Crosses == nil && welfare.IsAnimal(x.Name) && x.Role == layout.Block {
			out.say("each %s is a block of its own values, so that they are compared within it", UnitName(x))
			return
		}
	}
	for _, l := range v.levels() {
		if !l.animals && slices.Contains(organized, l.name) {
			out.Says, out.Keys = fmt.Sprintf("how many animals a %s holds is not stated", l.name), []welfare.Key{{Name: "unit.animals"}}
			return
		}
	}
	out.skip("no unit holds several animals or values")
}

// drawLevels tells at which unit what was drawn, and within what.
func (v *evidence) drawLevels(out *Part) {
	p := v.t.Plan
	var says []string
	for u := range p.Units {
		x := &p.Units[u]
		if len(x.Receives) == 0 {
			continue
		}
		var within []string
		for _, b := range p.Allocation(u).Blocks {
			within = append(within, Plural(UnitName(&p.Units[b])))
		}
		s := fmt.Sprintf("%s to %s", factorNames(p, x.Receives), Plural(UnitName(x)))
		if len(within) > 0 {
			s += " within " + And(within)
		} else {
			s += " without restriction"
		}
		says = append(says, s)
	}
	// Of what was allotted elsewhere nobody but the author knows the restrictions.
	if v.t.Allotment != nil && v.t.Allotment.Origin != allot.Drawn {
		v.textOf(v.p.Randomization.Method, out)
		return
	}
	out.say("%s", strings.Join(says, "; "))
}

// textOf takes a text of the protocol as the answer of a part.
func (v *evidence) textOf(text string, out *Part) {
	if adequate(text, welfare.Key{}) {
		out.State, out.Texts = Answered, []string{text}
	}
}

// analysedRange is the smallest and greatest number of units among the analyses of the
// responses at a unit, and how many units there are.
func (v *evidence) analysedRange(unit int) (lo, hi int, ok bool) {
	for i := range v.t.Table.Responses {
		r := &v.t.Table.Responses[i]
		up := v.t.Plan.Coarse(r.Unit, unit)
		if up == nil {
			continue
		}
		seen := map[int32]bool{}
		for row, s := range r.Status {
			if s == dataset.Used {
				seen[up[r.Instance[row]]] = true
			}
		}
		if !ok {
			lo, hi, ok = len(seen), len(seen), true
		}
		lo, hi = min(lo, len(seen)), max(hi, len(seen))
	}
	return lo, hi, ok
}

func (v *evidence) flowLevels(out *Part) {
	if v.waiting(out) {
		return
	}
	var says []string
	lost := 0
	for _, e := range v.p.Events {
		if e.Kind == "death" || e.Kind == "removal" {
			lost += max(e.Animals, 1)
		}
	}
	for _, l := range v.levels() {
		if l.unit < 0 {
			says = append(says, fmt.Sprintf("%s at the start, %s recorded as lost", numbered(l.n, l.name), num.Count(lost)))
			continue
		}
		if lo, hi, ok := v.analysedRange(l.unit); ok {
			says = append(says, fmt.Sprintf("%s planned, %s analysed", numbered(l.n, l.name), between(lo, hi)))
		}
	}
	out.say("%s", strings.Join(says, "; "))
	out.Tables = []Sought{{Names: []string{"figure-flow", "conduct"}, Also: []Spoken{{Name: "results", Stems: []string{"were analysed", "was analysed"}}}}}
}

func (v *evidence) analysisLevels(out *Part) {
	if v.waiting(out) {
		return
	}
	var says []string
	for _, l := range v.levels() {
		if l.unit < 0 {
			continue
		}
		if lo, hi, ok := v.analysedRange(l.unit); ok {
			says = append(says, fmt.Sprintf("%s of %s", between(lo, hi), numbered(l.n, l.name)))
		}
	}
	if len(says) > 0 {
		out.say("%s", strings.Join(says, "; "))
	}
}

func between(lo, hi int) string {
	if lo == hi {
		return num.Count(lo)
	}
	return num.Count(lo) + " to " + num.Count(hi)
}
