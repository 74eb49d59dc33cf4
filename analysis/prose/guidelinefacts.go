package prose

import (
	"fmt"
	"slices"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
	"penwright/protocol/welfare"
)

const noData = "there are no data yet"

// fact works out the answer to a part.
type fact = func(*evidence, *Part)

// computed are the parts that are worked out, by the names that the rows of the guidelines
// use.
var computed = map[string]fact{
	"groups": (*evidence).groups, "control": (*evidence).control, "experimental unit": (*evidence).experimentalUnit,
	"layout": (*evidence).layout, "replication": (*evidence).replication, "animals in all": (*evidence).animalsInAll,
	"basis of size": (*evidence).sizeBasis, "inputs of size": (*evidence).sizeInputs, "sealed": (*evidence).sealed,
	"left out": (*evidence).leftOut, "animals lost": (*evidence).animalsLost, "analysed": (*evidence).analysed,
	"randomized": (*evidence).randomized, "confounders": (*evidence).confounders, "units of outcomes": (*evidence).outcomeUnits,
	"primary": (*evidence).primary, "methods": (*evidence).methods, "program": (*evidence).program, "assumptions": (*evidence).assumptions,
	"treatments described": (*evidence).treatmentsDescribed, "procedures": (*evidence).procedures, "times of procedures": (*evidence).procedureTimes,
	"dates": (*evidence).dates, "spread": (*evidence).spread, "effects": (*evidence).effects, "means": (*evidence).means,
	"approval number": (*evidence).approvalNumber, "pain relief": (*evidence).painRelief, "adverse events": (*evidence).adverseEvents, "adverse events by group": (*evidence).adverseEventsByGroup,
	"prepared": (*evidence).prepared, "part of funders": (*evidence).funderPart, "exposure": (*evidence).exposure, "challenge": (*evidence).challenge,
	"levels of criteria": (*evidence).criteriaLevels, "levels of treatments": (*evidence).treatmentLevels, "levels of outcomes": (*evidence).outcomeLevels,
	"quality of measurement": (*evidence).quality, "levels of size": (*evidence).sizeLevels, "clustering": (*evidence).clustering,
	"levels of draw": (*evidence).drawLevels, "codes": (*evidence).codes, "who drew": (*evidence).whoDrew, "who enrolled": (*evidence).whoEnrolled,
	"levels of flow": (*evidence).flowLevels, "deviations": (*evidence).deviations, "baseline": (*evidence).baseline,
	"levels of analysis": (*evidence).analysisLevels, "as allotted": (*evidence).asAllotted, "told apart": (*evidence).toldApart,
	"coordinates": (*evidence).coordinates, "inputs": (*evidence).inputs, "moisture": (*evidence).moisture, "no animals": (*evidence).noAnimals,
}

// say answers a part in words of its own.
func (out *Part) say(format string, args ...any) {
	out.State, out.Says = Answered, fmt.Sprintf(format, args...)
}

// lack answers a part but for some things; with none answered it is missing.
func (out *Part) lack(all int, lacks []string) {
	out.Lacks = lacks
	if len(lacks) < all {
		out.State = Answered
	}
}

func (out *Part) wait(why string) { out.State, out.Says = Waiting, why }

func (out *Part) skip(why string) { out.State, out.Says = Inapplicable, why }

// waiting answers for what only data tell.
func (v *evidence) waiting(out *Part) bool {
	if v.t.Table == nil {
		out.wait(noData)
	}
	return v.t.Table == nil
}

// numbered is a number in figures with what it counts.
func numbered(n int, name string) string {
	if n == 1 {
		return "1 " + name
	}
	return num.Count(n) + " " + Plural(name)
}

// few lists up to eight things, and tells how many there are of more.
func few(things []string, what string) string {
	if len(things) > 8 {
		return num.Count(len(things)) + " " + what
	}
	return strings.Join(things, ", ")
}

// received lists the factors that units receive, with listed treatments as one.
func (v *evidence) received() []*layout.Factor {
	var out []*layout.Factor
	for f := range v.t.Plan.Factors {
		if x := &v.t.Plan.Factors[f]; x.Unit >= 0 && !x.Carried {
			out = append(out, x)
		}
	}
	return out
}

func (v *evidence) groups(out *Part) {
	var parts []string
	for _, f := range v.received() {
		var levels []string
		for _, l := range f.Levels {
			levels = append(levels, clip(LevelText(v.t.Plan, f.Name, l)))
		}
		parts = append(parts, lowerFirst(FactorLabel(f))+": "+few(levels, "levels"))
	}
	out.say("%s", strings.Join(parts, "; "))
}

func (v *evidence) control(out *Part) {
	var parts []string
	for _, f := range v.received() {
		for _, c := range f.Control {
			parts = append(parts, clip(LevelText(v.t.Plan, f.Name, f.Levels[c])))
		}
	}
	if len(parts) > 0 {
		out.say("control: %s", few(parts, "levels"))
		return
	}
	if b := v.p.Trial.Background.Body; strings.Contains(strings.ToLower(b), "control") && adequate(b, welfare.Key{Sentence: true}) {
		out.State, out.Texts = Answered, []string{b}
	}
}

func (v *evidence) experimentalUnit(out *Part) {
	var parts []string
	for u := range v.t.Plan.Units {
		if x := &v.t.Plan.Units[u]; len(x.Receives) > 0 {
			parts = append(parts, fmt.Sprintf("the %s for %s", UnitName(x), factorNames(v.t.Plan, x.Receives)))
		}
	}
	out.say("%s", strings.Join(parts, ", "))
}

func (v *evidence) layout(out *Part) { out.say("%s", DesignName(v.t.Plan)) }

// replication counts the units of each group: as allotted where there is an allotment,
// else as planned.
func (v *evidence) replication(out *Part) {
	p := v.t.Plan
	var parts []string
	for u := range p.Units {
		x := &p.Units[u]
		if len(x.Receives) == 0 {
			continue
		}
		var counts []int
		var names []string
		add := func(factors, levels []int, n int) {
			counts, names = append(counts, n), append(names, clip(CellText(p, factors, levels)))
		}
		switch a := p.Allocation(u); {
		case a.Separate:
			for _, f := range x.Receives {
				n := v.byLevel(f, x.N)
				for l := range n {
					add([]int{f}, []int{l}, n[l])
				}
			}
		default:
			n := v.byCombination(u, a)
			for k, c := range a.Combinations {
				add(a.Factors, c, n[k])
			}
		}
		lo, hi := span(counts)
		groups := numbered(len(counts), "group") + " of " + factorNames(p, x.Receives)
		switch {
		case lo == hi:
			parts = append(parts, fmt.Sprintf("%s, %s in each of %s", numbered(x.N, UnitName(x)), num.Count(lo), groups))
		case len(counts) <= 8:
			for k := range names {
				names[k] += " " + num.Count(counts[k])
			}
			parts = append(parts, fmt.Sprintf("%s: %s", numbered(x.N, UnitName(x)), strings.Join(names, ", ")))
		default:
			parts = append(parts, fmt.Sprintf("%s, %s to %s in each of %s", numbered(x.N, UnitName(x)), num.Count(lo), num.Count(hi), groups))
		}
	}
	out.say("%s", strings.Join(parts, "; "))
}

// byCombination counts the instances of a unit that have each combination of what it
// receives.
func (v *evidence) byCombination(u int, a *layout.Allocation) []int {
	if v.t.Allotment == nil {
		return a.Total
	}
	levels := make([][]int32, len(a.Factors))
	for i, f := range a.Factors {
		if levels[i] = v.t.Allotment.Levels[f]; levels[i] == nil {
			return a.Total
		}
	}
	index := map[string]int{}
	for k, c := range a.Combinations {
		index[fmt.Sprint(c)] = k
	}
	out := make([]int, len(a.Combinations))
	c := make([]int, len(a.Factors))
	for i := range v.t.Plan.Units[u].N {
		for j := range levels {
			c[j] = int(levels[j][i])
		}
		if k, ok := index[fmt.Sprint(c)]; ok {
			out[k]++
		}
	}
	return out
}

// byLevel counts the instances of the unit that receives a factor which have each level.
func (v *evidence) byLevel(f, instances int) []int {
	out := make([]int, len(v.t.Plan.Factors[f].Levels))
	if v.t.Allotment == nil || v.t.Allotment.Levels[f] == nil {
		for l := range out {
			out[l] = instances / len(out)
		}
		return out
	}
	for _, l := range v.t.Allotment.Levels[f] {
		if l >= 0 {
			out[l]++
		}
	}
	return out
}

func (v *evidence) animalsInAll(out *Part) {
	if n := animals(v.t); n > 0 {
		out.say("%s", numbered(n, "animal"))
		return
	}
	// The largest unit that is an animal: units within one are parts of it, or its times.
	for u := range v.t.Plan.Units {
		if x := &v.t.Plan.Units[u]; x.Crosses == nil && welfare.IsAnimal(x.Name) {
			out.say("%s", numbered(x.N, UnitName(x)))
			return
		}
	}
}

func (v *evidence) sizeBasis(out *Part) {
	s := v.p.SampleSize
	switch {
	case s == nil || s.Basis == "":
	case s.Basis == "stated":
		v.key(welfare.Key{Name: "sample_size.source"}, out)
		out.Keys = append(slices.Clone(out.Keys), welfare.Key{Name: "sample_size.source"})
	default:
		out.say("by %s", map[string]string{"power": "power", "error df": "the error degrees of freedom it leaves", "precision": "the wished precision"}[s.Basis])
		out.Tables = []Sought{sizeSection}
	}
}

// sizeSection is where the number of units is justified.
var sizeSection = Sought{Names: []string{"number-of-units"}, Also: []Spoken{{Name: "experimental-design", Stems: []string{"power of", "half width", "degrees of freedom", "was chosen", "were chosen"}}}}

func (v *evidence) sizeInputs(out *Part) {
	s := v.p.SampleSize
	if s == nil {
		return
	}
	var lacks []string
	need := func(given bool, what string) {
		if !given {
			lacks = append(lacks, what)
		}
	}
	spread := len(s.SD) > 0 || s.CV != nil
	switch s.Basis {
	case "power":
		need(s.Difference != nil || s.DifferencePercent != nil || s.Margin != nil, "the difference")
		need(spread, "the standard deviation")
		need(s.Power != nil, "the power")
		out.lack(3, lacks)
	case "precision":
		need(s.HalfWidth != nil, "the half width")
		need(spread, "the standard deviation")
		out.lack(2, lacks)
	case "error df":
		out.say("error degrees of freedom, as the skeleton analysis has them")
	default:
		out.skip("no calculation was made")
	}
	if out.State == Answered && out.Says == "" {
		out.Tables = []Sought{sizeSection}
	}
}

func (v *evidence) sealed(out *Part) {
	if s := v.t.Seal; s != nil && len(s.Entries) > 0 {
		out.say("sealed with the plan on %s", DateText(s.Entries[0].On))
	}
}

// confirmed tells whether the author confirms that there was none of a kind.
func (v *evidence) confirmed(kind string) bool {
	return v.p.Data != nil && slices.Contains(v.p.Data.None, kind)
}

// leftOut counts what each analysis leaves out, by group, and finds what is missing with
// no reason recorded.
func (v *evidence) leftOut(out *Part) {
	if v.waiting(out) {
		return
	}
	var says []string
	unexplained := 0
	for i := range v.t.Table.Responses {
		r := &v.t.Table.Responses[i]
		var groups []string
		n := map[string]int{}
		for row, s := range r.Status {
			if s == dataset.Used {
				continue
			}
			if s == dataset.Missing && !v.explained(v.t.Table.UnitName(r, row)) {
				unexplained++
			}
			g := UnknownTreatment
			if v.t.Allotment != nil {
				g = TreatmentText(v.t, r.Unit, int(r.Instance[row]))
			}
			if n[g]++; n[g] == 1 {
				groups = append(groups, g)
			}
		}
		for k, g := range groups {
			groups[k] = numbered(n[g], "value") + " of " + clip(g)
			if g == UnknownTreatment {
				groups[k] = numbered(n[g], "value") + ", " + g
			}
		}
		if len(groups) > 0 {
			says = append(says, fmt.Sprintf("%s: %s", ResponseLabelText(r.Protocol), few(groups, "groups have losses")))
		}
	}
	var lacks []string
	for _, e := range v.p.Exclusions {
		if !adequate(e.Reason, welfare.Key{}) {
			lacks = append(lacks, "the reason for "+UnitNameText(e.Unit))
		}
	}
	if unexplained > 0 {
		lacks = append(lacks, fmt.Sprintf("why %s missing", isMissing(unexplained)))
	}
	if len(says) == 0 {
		out.say("none: every value planned was analysed")
	} else {
		out.say("%s", few(says, "responses have losses"))
		out.Tables = []Sought{{Names: []string{"exclusions", "events", "conduct"}, Also: []Spoken{{Name: "measurements", Stems: []string{"left out", "excluded"}}, {Name: "results", Stems: []string{"removed", "died", "were analysed"}}}}}
	}
	out.Lacks = lacks
}

func isMissing(n int) string {
	if n == 1 {
		return "one value is"
	}
	return small(n) + " values are"
}

// explained tells whether an event or an exclusion names a unit, one that holds it, or one
// that it holds.
func (v *evidence) explained(unit protocol.UnitName) bool {
	names := func(a, b protocol.UnitName) bool { // every part of a is in b
		for _, x := range a {
			if !slices.Contains(b, x) {
				return false
			}
		}
		return len(a) > 0
	}
	for _, e := range v.p.Events {
		if names(e.Unit, unit) || names(unit, e.Unit) {
			return true
		}
	}
	for _, e := range v.p.Exclusions {
		if names(e.Unit, unit) || names(unit, e.Unit) {
			return true
		}
	}
	return false
}

// losses counts the animals of events of some kinds by group, and names the events
// without a cause.
func (v *evidence) losses(kinds ...string) (says, lacks, groupless []string, events int) {
	finder := allot.NewFinder(v.t.Plan)
	var order []string
	n := map[string]int{}
	for _, e := range v.p.Events {
		if !slices.Contains(kinds, e.Kind) {
			continue
		}
		events++
		if !adequate(e.Cause, welfare.Key{Fact: true}) {
			lacks = append(lacks, fmt.Sprintf("the cause of the %s of %s", e.Kind, UnitNameText(e.Unit)))
		}
		group := ""
		if u, i, bad := finder.Unit(e.Unit); bad == nil && v.t.Allotment != nil {
			if g := TreatmentText(v.t, u, int(i)); g != UnknownTreatment {
				group = " on " + clip(g)
			}
		}
		if group == "" {
			groupless = append(groupless, fmt.Sprintf("the group of the %s of %s", e.Kind, UnitNameText(e.Unit)))
		}
		key := e.Kind + group
		if n[key] == 0 {
			order = append(order, key)
		}
		n[key] += max(e.Animals, 1)
	}
	for _, k := range order {
		says = append(says, num.Count(n[k])+" "+k)
	}
	return says, lacks, groupless, events
}

// lossWords are how a chapter speaks of animals that died or were removed.
var lossWords = []Spoken{{Name: "results", Stems: []string{"removed", "died", "ill", "was lost", "were lost"}}, {Name: "measurements", Stems: []string{"removed", "died"}}}

func (v *evidence) animalsLost(out *Part) {
	if v.waiting(out) {
		return
	}
	says, lacks, _, n := v.losses("death", "removal")
	switch {
	case n > 0:
		out.say("%s", few(says, "kinds of loss"))
		out.Tables = []Sought{{Names: []string{"losses", "events"}, Also: lossWords}}
		out.Lacks = lacks
	case v.confirmed("event"):
		out.say("none, as the author confirms")
	case animals(v.t) == 0 && v.complete():
		out.say("none: every unit planned was analysed")
	default:
		out.Says = "no loss is recorded, and nothing confirms that there was none"
	}
}

// complete tells whether every value planned was analysed.
func (v *evidence) complete() bool {
	return !slices.ContainsFunc(v.t.Table.Responses, func(r dataset.Response) bool {
		return slices.ContainsFunc(r.Status, func(s dataset.Status) bool { return s != dataset.Used })
	})
}

func (v *evidence) adverseEvents(out *Part) { v.adverse(out, false) }

func (v *evidence) adverseEventsByGroup(out *Part) { v.adverse(out, true) }

func (v *evidence) adverse(out *Part, group bool) {
	if v.waiting(out) {
		return
	}
	says, lacks, groupless, n := v.losses("death", "removal", "illness", "other")
	if group {
		lacks = append(lacks, groupless...)
	}
	switch {
	case n > 0:
		out.say("%s", few(says, "kinds of event"))
		out.Tables = []Sought{{Names: []string{"events"}, Also: lossWords}}
		out.Lacks = lacks
	case v.confirmed("event"):
		out.say("none, as the author confirms")
	default:
		out.Says = "no event is recorded, and nothing confirms that there was none"
	}
}

// tables seeks one table for every response that was analysed; others are lacking.
func (v *evidence) tables(out *Part, has func(r *result.Response) bool, shared string, names func(name string) []string) {
	if v.waiting(out) {
		return
	}
	var lacks []string
	for i := range v.rs.Responses {
		r := &v.rs.Responses[i]
		if !has(r) {
			lacks = append(lacks, "for "+ResponseText(r))
			continue
		}
		t := Sought{Response: ResponseText(r), Names: names(r.Name)}
		for _, s := range strings.Fields(shared) {
			t.Also = append(t.Also, Spoken{Name: s, Stems: []string{ResponseText(r), bareName(r)}})
		}
		out.Tables = append(out.Tables, t)
	}
	out.lack(len(v.rs.Responses), lacks)
}

func (v *evidence) analysed(out *Part) {
	v.tables(out, func(r *result.Response) bool { return r.Model != nil && len(r.Summary) > 0 }, "chapter-spread chapter-spread-", func(n string) []string {
		return []string{"summary-" + n, "means-" + n + "-"}
	})
}

func (v *evidence) spread(out *Part) {
	v.tables(out, func(r *result.Response) bool {
		return len(r.Summary) > 0 && !slices.ContainsFunc(r.Summary, func(s result.Summary) bool { return s.N > 0 && !s.SD.Known() })
	}, "chapter-spread chapter-spread-", func(n string) []string { return []string{"summary-" + n} })
}

func (v *evidence) means(out *Part) {
	v.tables(out, func(r *result.Response) bool { return len(r.Means) > 0 }, "chapter-means-", func(n string) []string { return []string{"means-" + n + "-"} })
}

func (v *evidence) effects(out *Part) {
	v.tables(out, func(r *result.Response) bool {
		return slices.ContainsFunc(r.Comparisons, func(c result.Comparison) bool { return c.Lower.Known() || c.Upper.Known() }) ||
			slices.ContainsFunc(r.Contrasts, func(c result.Contrast) bool { return c.Lower.Known() || c.Upper.Known() })
	}, "chapter-contrasts chapter-contrasts-", func(n string) []string {
		return []string{"comparisons-" + n + "-", "contrasts-" + n, "unplanned-contrasts-" + n}
	})
}

func (v *evidence) randomized(out *Part) {
	a := v.t.Allotment
	if a != nil && a.Origin == allot.Drawn && len(a.Draws) > 0 {
		out.say("drawn, with scheme, generator and seed on record")
		out.Tables = []Sought{{Names: []string{"draws", "randomization-record", "randomization-and-blinding"}, Also: []Spoken{{Name: "experimental-design", Stems: []string{"at random", "randomized", "drawn"}}}}}
		return
	}
	if m := v.p.Randomization.Method; adequate(m, welfare.Key{}) {
		out.State, out.Texts = Answered, []string{m}
		return
	}
	if a != nil {
		out.Says = "treatments stand in the data, and nothing says how they were allotted"
		return
	}
	if _, list := allot.Scheme(v.t.Plan, v.t.Roster); !list.HasErrors() {
		if v.plan {
			out.say("the scheme of the draw is fixed")
			out.Tables = []Sought{{Names: []string{"randomization-and-blinding", "randomization-record"}}}
			return
		}
		out.wait("nothing has been drawn yet")
	}
}

// opaque are units whose name does not tell what they keep apart (common practice, no
// source).
var opaque = []string{"block", "square", "replicate", "rep", "superblock", "row", "column", "set", "group", "strip", "stratum", "batch"}

func (v *evidence) confounders(out *Part) {
	p := v.t.Plan
	var says, lacks []string
	for u := range p.Units {
		x := &p.Units[u]
		if x.Role != layout.Block || x.N < 2 {
			continue
		}
		b := basis(p, u)
		switch {
		case adequate(b, welfare.Key{Fact: true}):
			says = append(says, fmt.Sprintf("%s by %s", Plural(UnitName(x)), clip(lowerFirst(b))))
		case slices.Contains(opaque, x.Name):
			says = append(says, Plural(UnitName(x)))
			lacks = append(lacks, fmt.Sprintf("what units of one %s have in common", UnitName(x)))
		default:
			says = append(says, Plural(UnitName(x)))
		}
	}
	for _, b := range v.p.Randomization.BalanceOn {
		says = append(says, "draws balanced on "+strings.ReplaceAll(b, "_", " "))
	}
	for i := range v.p.Covariates {
		c := &v.p.Covariates[i]
		if slices.ContainsFunc(v.p.Responses, func(r protocol.Response) bool { return slices.Contains(r.Covariates, c.Name) }) {
			says = append(says, "adjustment for "+lowerFirst(CovariateLabel(c)))
		}
	}
	if len(says) == 0 {
		return
	}
	out.say("%s", few(says, "kinds of block and covariate"))
	out.Lacks = lacks
}

func (v *evidence) outcomeUnits(out *Part) {
	var lacks []string
	n := 0
	for i := range v.p.Responses {
		r := &v.p.Responses[i]
		if r.Kind != "continuous" && r.Kind != "" && r.Kind != "time to event" {
			continue // counted, or of classes
		}
		if n++; strings.TrimSpace(r.Unit) == "" {
			lacks = append(lacks, "for "+ResponseLabelText(r))
		}
	}
	switch {
	case n == 0 && len(v.p.Responses) > 0:
		out.skip("outcomes are counted or classed")
	case n > 0:
		if out.lack(n, lacks); out.State == Answered {
			out.Tables = []Sought{{Names: []string{"planned", "planned-analysis", "responses"}, Also: v.inMeasurements()}}
		}
	}
}

// inMeasurements is the section of a chapter that defines responses.
func (v *evidence) inMeasurements() []Spoken {
	var names []string
	for i := range v.p.Responses {
		names = append(names, ResponseLabelText(&v.p.Responses[i]))
	}
	return []Spoken{{Name: "measurements", Stems: names}}
}

func (v *evidence) primary(out *Part) {
	var names []string
	set := ""
	for i := range v.p.Responses {
		r := &v.p.Responses[i]
		if r.Role == "primary" {
			names = append(names, ResponseLabelText(r))
		}
		if s := v.p.SampleSize; s != nil && s.Response == r.Name && r.Role != "primary" {
			set = ResponseLabelText(r)
		}
	}
	if len(names) == 0 {
		return
	}
	out.say("%s", few(names, "outcomes are called primary"))
	if set != "" {
		out.Lacks = append(out.Lacks, fmt.Sprintf("why the number of units rests on %s, which is not primary", set))
	}
	if len(names) > max(1, len(v.p.Trial.Hypotheses)) {
		out.Lacks = append(out.Lacks, "which of them decides")
	}
}

func (v *evidence) methods(out *Part) {
	if v.plan {
		for i := range v.p.Responses {
			out.Tables = append(out.Tables, Sought{Response: ResponseLabelText(&v.p.Responses[i]), Names: []string{"planned-analysis"}})
		}
		if len(v.p.Responses) > 0 {
			out.State = Answered
		}
		return
	}
	v.tables(out, func(r *result.Response) bool { return r.Model != nil }, "statistical-methods statistical-analysis", func(string) []string { return nil })
}

func (v *evidence) program(out *Part) {
	out.State, out.Texts = Answered, []string{v.rs.Program.Name + " " + v.rs.Program.Version}
}

func (v *evidence) assumptions(out *Part) {
	if v.plan {
		v.key(welfare.Key{Name: "analysis.assumptions"}, out)
		return
	}
	v.tables(out, func(r *result.Response) bool { return len(r.Diagnostics) > 0 }, "", func(n string) []string { return []string{"diagnostics-" + n} })
	for i := range out.Tables {
		out.Tables[i].Also = []Spoken{{Name: "statistical-analysis", Stems: []string{"residuals were", "residual"}}}
	}
}

// treatmentsDescribed asks for what each level is. Amounts with their unit, entries that
// are a sample and listed test items speak for themselves.
func (v *evidence) treatmentsDescribed(out *Part) {
	var lacks, names []string
	fs := v.received()
	for _, f := range fs {
		names = append(names, lowerFirst(FactorLabel(f)))
	}
	items := slices.ContainsFunc(v.p.Items, func(x protocol.Item) bool { return adequate(x.Name, welfare.Key{Fact: true}) })
	for _, f := range fs {
		x := f.Protocol
		switch {
		case x == nil: // listed treatments: what they are made of is described by their factors
			for i := range v.p.Factors {
				if y := &v.p.Factors[i]; !described(y) && y.Values == nil && !items {
					lacks = append(lacks, "what the levels of "+lowerFirst(labelOf(y))+" are")
				}
			}
			if len(v.p.Factors) == 0 && !items {
				lacks = append(lacks, "what the treatments are")
			}
		case described(x) || x.Random || items || x.Values != nil && strings.TrimSpace(x.Unit) != "":
		default:
			lacks = append(lacks, "what the levels of "+lowerFirst(FactorLabel(f))+" are")
		}
	}
	if out.lack(len(fs), lacks); out.State == Answered {
		out.Tables = []Sought{{Names: []string{"levels", "items", "units-and-treatments"}, Also: []Spoken{{Name: "treatments", Stems: names}}}}
	}
}

func labelOf(f *protocol.Factor) string {
	if f.Label != "" {
		return f.Label
	}
	return strings.ReplaceAll(f.Name, "_", " ")
}

// described tells whether every level of a factor has a text of its own.
func described(f *protocol.Factor) bool {
	for _, l := range f.Levels {
		if !slices.ContainsFunc(f.Describe, func(d protocol.Described) bool { return d.Level == l && adequate(d.Text, welfare.Key{Fact: true}) }) {
			return false
		}
	}
	return true
}

// procedures asks for what was done: of what is given or taken also how much and by which
// way.
func (v *evidence) procedures(out *Part) {
	if v.p.Welfare == nil || len(v.p.Welfare.Procedures) == 0 {
		out.Says = "no procedure is stated"
		return
	}
	var lacks, texts []string
	for i := range v.p.Welfare.Procedures {
		x := &v.p.Welfare.Procedures[i]
		name := procedureName(x)
		texts = append(texts, name)
		if !adequate(name, welfare.Key{Fact: true}) || name == "other" {
			lacks = append(lacks, fmt.Sprintf("the name of procedure %d", i+1))
		}
		if x.Kind == "blood sample" || x.Kind == "injection" || x.Kind == "gavage" {
			if x.Volume == nil {
				lacks = append(lacks, "the volume of "+name)
			}
			if !adequate(x.Route, welfare.Key{Fact: true}) {
				lacks = append(lacks, "the route of "+name)
			}
		}
	}
	out.State, out.Texts, out.Lacks = Answered, texts, lacks
}

func (v *evidence) procedureTimes(out *Part) {
	if v.p.Welfare == nil || len(v.p.Welfare.Procedures) == 0 {
		out.Says = "no procedure is stated"
		return
	}
	var lacks []string
	for i := range v.p.Welfare.Procedures {
		if x := &v.p.Welfare.Procedures[i]; x.Times < 1 && x.Every == nil {
			lacks = append(lacks, "for "+procedureName(x))
		}
	}
	if out.lack(len(v.p.Welfare.Procedures), lacks); out.State == Answered {
		out.Tables = []Sought{{Names: []string{"procedures"}, Also: []Spoken{{Name: "measurements", Stems: []string{procedureName(&v.p.Welfare.Procedures[0])}}}}}
	}
}

func (v *evidence) dates(out *Part) {
	var lacks []string
	for _, x := range []struct {
		what string
		on   protocol.Date
	}{{"the start", v.p.Trial.Start}, {"the end", v.p.Trial.End}} {
		if x.on == (protocol.Date{}) {
			lacks = append(lacks, x.what)
		}
	}
	year := num.Fixed(float64(max(v.p.Trial.Start.Year, v.p.Trial.End.Year)), 0)
	out.Tables = []Sought{{Names: []string{"identity"}, Also: []Spoken{{Name: "animals-and-housing", Stems: []string{year}}, {Name: "site-and-material", Stems: []string{year}}}}}
	out.lack(2, lacks)
}

func (v *evidence) approvalNumber(out *Part) {
	a := v.p.Approval
	switch {
	case a == nil:
	case adequate(a.Number, welfare.Key{Fact: true}):
		out.State, out.Texts = Answered, []string{a.Number}
	case adequate(a.Body, welfare.Key{Sentence: true}) && v.speaks(a.Body, "no", "not", "none", "exempt", "exempted", "without"):
		out.skip("why there is none is stated")
	}
}

// speaks tells whether a text has one of the words, whole.
func (v *evidence) speaks(text string, words ...string) bool {
	has, _ := wordsOf(text)
	return slices.ContainsFunc(words, func(w string) bool { return slices.Contains(has, w) })
}

func (v *evidence) painRelief(out *Part) {
	var lacks []string
	n := 0
	if v.p.Welfare != nil {
		for i := range v.p.Welfare.Procedures {
			x := &v.p.Welfare.Procedures[i]
			if x.Kind != "surgery" {
				continue
			}
			if n++; !adequate(x.Analgesia, welfare.Key{Fact: true}) && !adequate(x.Anaesthesia, welfare.Key{Fact: true}) {
				lacks = append(lacks, "for "+procedureName(x))
			}
		}
	}
	if n == 0 {
		out.skip("the protocol has no surgery")
		return
	}
	if out.lack(n, lacks); out.State == Answered {
		out.Tables = []Sought{{Names: []string{"procedures"}}}
	}
}

// prepared looks for what shows that the plan stood before the trial.
func (v *evidence) prepared(out *Part) {
	if v.sealed(out); out.State == Answered {
		return
	}
	for _, s := range v.p.Signatures {
		if start := v.p.Trial.Start; s.On != (protocol.Date{}) && start != (protocol.Date{}) && DateText(s.On) <= DateText(start) && adequate(s.Meaning, welfare.Key{}) {
			out.say("signed on %s: %s", DateText(s.On), clip(s.Meaning))
			return
		}
	}
}

func (v *evidence) funderPart(out *Part) {
	f := v.p.Trial.Funding
	words, _ := wordsOf(f)
	for _, w := range words {
		for _, stem := range []string{"role", "part", "design", "analy", "report", "decid", "decision", "influen", "conduct", "publication"} {
			if strings.HasPrefix(w, stem) && adequate(f, welfare.Key{Sentence: true}) {
				out.State, out.Texts = Answered, []string{f}
				return
			}
		}
	}
	if v.speaks(f, "no", "none", "unfunded", "without") && adequate(f, welfare.Key{}) {
		out.skip("there is no funder")
	}
}

// ofKind lists the procedures of a kind.
func (v *evidence) ofKind(kind string) []*protocol.Procedure {
	var out []*protocol.Procedure
	if v.p.Welfare != nil {
		for i := range v.p.Welfare.Procedures {
			if x := &v.p.Welfare.Procedures[i]; x.Kind == kind {
				out = append(out, x)
			}
		}
	}
	return out
}

func (v *evidence) exposure(out *Part) {
	if c := v.ofKind("challenge"); len(c) > 0 {
		out.say("a challenge: %s", clip(procedureName(c[0])))
		return
	}
	out.say("no procedure is a challenge")
}

func (v *evidence) challenge(out *Part) {
	c := v.ofKind("challenge")
	if len(c) == 0 {
		out.skip("no procedure is a challenge")
		return
	}
	var lacks, texts []string
	for _, x := range c {
		if adequate(x.How, welfare.Key{}) {
			texts = append(texts, x.How)
		} else {
			lacks = append(lacks, "for "+procedureName(x))
		}
	}
	out.Texts = texts
	out.lack(len(c), lacks)
}

func (v *evidence) quality(out *Part) {
	var lacks []string
	for i := range v.p.Responses {
		r := &v.p.Responses[i]
		if !adequate(r.Instrument, welfare.Key{Fact: true}) && !adequate(r.Assessed, welfare.Key{Fact: true}) {
			lacks = append(lacks, "for "+ResponseLabelText(r))
		}
	}
	if out.lack(len(v.p.Responses), lacks); out.State == Answered {
		out.Tables = []Sought{{Names: []string{"planned", "responses"}, Also: v.inMeasurements()}}
	}
}

func (v *evidence) codes(out *Part) {
	if v.p.Randomization.Codes {
		out.say("sheets bear masked codes in place of treatments")
	} else if m := v.p.Randomization.Method; adequate(m, welfare.Key{Sentence: true}) {
		out.State, out.Texts = Answered, []string{m}
	}
}

func (v *evidence) whoDrew(out *Part) {
	by := v.p.Randomization.By
	if a := v.t.Allotment; a != nil && len(a.Draws) > 0 {
		by = a.Draws[len(a.Draws)-1].By
	}
	if adequate(by, welfare.Key{Fact: true}) {
		out.State, out.Texts = Answered, []string{by}
	}
}

func (v *evidence) whoEnrolled(out *Part) {
	for _, x := range v.p.Persons {
		for _, stem := range []string{"enrol", "assign", "allot", "stockperson", "stock person", "herd"} {
			if strings.Contains(strings.ToLower(x.Role), stem) && adequate(x.Name, welfare.Key{Fact: true}) {
				out.State, out.Texts = Answered, []string{x.Role}
				return
			}
		}
	}
}

func (v *evidence) deviations(out *Part) {
	if v.waiting(out) {
		return
	}
	var lacks, texts []string
	for i, d := range v.p.Deviations {
		if adequate(d.What, welfare.Key{}) {
			texts = append(texts, d.What)
		} else {
			lacks = append(lacks, fmt.Sprintf("what deviation %d was", i+1))
		}
	}
	switch {
	case len(v.p.Deviations) > 0:
		out.Texts = texts
		out.lack(len(v.p.Deviations), lacks)
	case v.confirmed("deviation"):
		out.say("no deviation, as the author confirms")
	default:
		out.Says = "no deviation is recorded, and nothing confirms that there was none"
	}
}

func (v *evidence) baseline(out *Part) {
	if v.waiting(out) {
		return
	}
	if slices.ContainsFunc(v.p.Responses, func(r protocol.Response) bool { return len(r.Covariates) > 0 }) {
		out.State, out.Tables = Answered, []Sought{{Names: []string{"baseline"}}}
	}
}

func (v *evidence) asAllotted(out *Part) {
	switch {
	case v.waiting(out):
	case v.t.Allotment != nil && v.t.Allotment.Origin == allot.FromData:
		out.Says = "no record of the allotment is kept beside the data"
		out.Keys = []welfare.Key{{Name: "draw", Command: true}}
	default:
		out.say("units are analysed as allotted")
	}
}

func (v *evidence) toldApart(out *Part) {
	switch {
	case v.waiting(out):
	case v.t.Seal != nil:
		out.say("what was not in the sealed plan stands apart")
	default:
		out.Says = "the plan was not sealed, so that nothing shows what was planned"
	}
}

func (v *evidence) coordinates(out *Part) {
	if s := v.p.Site; s != nil && s.Latitude != nil && s.Longitude != nil {
		out.State, out.Tables = Answered, []Sought{{Names: []string{"site"}}}
	}
}

func (v *evidence) inputs(out *Part) {
	var lacks []string
	for i, x := range v.p.Inputs {
		if x.On == (protocol.Date{}) || !adequate(x.What, welfare.Key{Fact: true}) || !adequate(x.Rate, welfare.Key{Fact: true}) {
			lacks = append(lacks, fmt.Sprintf("day, kind or rate of input %d", i+1))
		}
	}
	if out.lack(len(v.p.Inputs), lacks); out.State == Answered {
		out.Tables = []Sought{{Names: []string{"inputs"}}}
	}
}

// moisture asks at which moisture a yield is given.
func (v *evidence) moisture(out *Part) {
	var lacks, texts []string
	n := 0
	for i := range v.p.Responses {
		r := &v.p.Responses[i]
		text := strings.ToLower(r.Name + " " + r.Label)
		if !strings.Contains(text, "yield") {
			continue
		}
		n++
		how := strings.ToLower(r.How + " " + r.Unit + " " + r.Label)
		switch {
		case strings.Contains(how, "moisture") || strings.Contains(how, "dry matter") || strings.Contains(how, "dry weight") || strings.Contains(how, "fresh") || v.speaks(how, "dm"):
			if r.How != "" {
				texts = append(texts, r.How)
			}
		default:
			lacks = append(lacks, "for "+ResponseLabelText(r))
		}
	}
	if n == 0 {
		out.skip("no outcome is a yield")
		return
	}
	out.Texts = texts
	out.lack(n, lacks)
}

func (v *evidence) noAnimals(out *Part) {
	out.say("no animals in this trial")
}
