package prose

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// ChapterDesign tells the layout: the units, which of them received what, the blocks,
// the draw, the masking, and how the number of units was chosen.
func ChapterDesign(t *trial.Trial) []Passage {
	var s paragraphOf
	p, d := t.Plan, told(t)
	s.add("The trial %s laid out as %s: %s", d.was(), designPhrase(p), unitChain(t))
	for i := range p.Units {
		u := &p.Units[i]
		if u.Crosses != nil {
			var of []string
			for _, c := range u.Crosses {
				of = append(of, UnitName(&p.Units[c]))
			}
			s.add("Each combination of %s %s one %s, %s in all", And(of), d.was(), UnitName(u), num.Count(u.N))
			for k := range p.Units {
				if v := &p.Units[k]; v.Within == i {
					lo, hi := perParent(p, k)
					each := some(lo, UnitName(v))
					if lo != hi {
						each = small(lo) + " to " + some(hi, UnitName(v))
					}
					s.add("Each %s %s %s, %s in all", UnitName(u), d.of("held", "will hold"), each, num.Count(v.N))
				}
			}
		}
	}
	if b := blockingText(p, d); b != "" {
		s.add("%s", b)
	}
	s.add("%s", experimentalUnits(p, d))
	if r := replicationText(p, d); r != "" {
		s.add("%s", r)
	}
	for _, f := range p.Factors {
		if f.Carried && f.Unit >= 0 {
			s.add("%s %s not allotted: it is a class that the %s brought along, known before the draw", FactorLabel(&f), d.was(), Plural(UnitName(&p.Units[f.Unit])))
		}
	}
	for i := range p.Units {
		if u := &p.Units[i]; u.Role == layout.Sampling {
			name := Plural(UnitName(u))
			within := ""
			if u.Within >= 0 {
				within = " within the same " + UnitName(&p.Units[u.Within])
			}
			s.add("The %s%s %s sampling units, and no treatment %s tested over the differences between them", name, within, d.were(), d.was())
		}
	}
	return s
}

// designPhrase names the design with its article.
func designPhrase(p *layout.Plan) string {
	name := p.Design.Name
	switch {
	case name == layout.CompletelyRandomized || strings.HasSuffix(name, "block") || strings.HasSuffix(name, "column"):
		name = article(name) + " design"
	case strings.HasSuffix(name, "squares"):
	default:
		name = article(name)
	}
	var of []string
	for _, part := range p.Design.Parts {
		switch {
		case strings.Contains(part, "factorial") && len(of) == 0:
			name = article(part) + " in " + name
		case strings.Contains(part, " carried by ") || strings.HasPrefix(part, "with sampling of"): // a sentence of its own says it
		default:
			of = append(of, part)
		}
	}
	if len(of) > 0 {
		name += " (" + strings.Join(of, "; ") + ")"
	}
	return name
}

// unitChain counts the units from the largest to the smallest: "five blocks of four pens
// (20 pens in all), with six pigs in each pen".
func unitChain(t *trial.Trial) string {
	p := t.Plan
	children := func(u int) []int {
		var out []int
		for i := range p.Units {
			if p.Units[i].Within == u && p.Units[i].Crosses == nil {
				out = append(out, i)
			}
		}
		return out
	}
	var deepest []int
	depth := 0
	var describe func(u, level int, head string) string
	describe = func(u, level int, head string) string {
		if level > depth {
			deepest, depth = nil, level
		}
		if level == depth {
			deepest = append(deepest, u)
		}
		s := head
		inside := children(u)
		if len(inside) == 0 {
			return s
		}
		var parts []string
		for _, c := range inside {
			lo, hi := perParent(p, c)
			name := UnitName(&p.Units[c])
			each := some(lo, name)
			if lo != hi {
				each = small(lo) + " to " + some(hi, name)
			}
			parts = append(parts, describe(c, level+1, each))
		}
		join := " of "
		if level > 0 || len(inside) > 1 {
			join = ", each of "
		}
		return s + join + And(parts)
	}
	var roots []string
	for _, r := range children(-1) {
		roots = append(roots, describe(r, 0, some(p.Units[r].N, UnitName(&p.Units[r]))))
	}
	s := And(roots)
	if depth > 0 {
		var total []string
		for _, u := range deepest {
			total = append(total, some(p.Units[u].N, UnitName(&p.Units[u])))
		}
		s += " (" + And(total) + " in all)"
	}
	for i := range p.Units {
		lo, hi := span(p.Units[i].Animals)
		if hi == 0 {
			continue
		}
		n := someAnimals(t, lo)
		if lo != hi {
			n = small(lo) + " to " + someAnimals(t, hi)
		}
		s += fmt.Sprintf(", with %s in each %s", n, UnitName(&p.Units[i]))
	}
	return s
}

// blockingText says what blocks were made for.
func blockingText(p *layout.Plan, d tense) string {
	var units []int
	for i := range p.Units {
		if said(basis(p, i)) {
			units = append(units, i)
		}
	}
	if len(units) == 1 && strings.Contains(UnitName(&p.Units[units[0]]), "block") {
		b, by := inner(basis(p, units[0])), "by"
		if first, _, _ := strings.Cut(b, " "); first == "neighbouring" || first == "adjacent" {
			by = "of"
		}
		return fmt.Sprintf("%s %s formed %s %s", Plural(UnitName(&p.Units[units[0]])), d.were(), by, b)
	}
	var parts []string
	for _, u := range units {
		parts = append(parts, fmt.Sprintf("%s (%s)", inner(basis(p, u)), Plural(UnitName(&p.Units[u]))))
	}
	if len(parts) == 0 {
		return ""
	}
	return "basis of blocking: " + series(parts)
}

// experimentalUnits says which unit received what.
func experimentalUnits(p *layout.Plan, d tense) string {
	var parts []string
	for i := range p.Units {
		if got := factorNames(p, p.Units[i].Receives); got != "" {
			parts = append(parts, fmt.Sprintf("the %s for %s", UnitName(&p.Units[i]), got))
		}
	}
	if len(parts) == 1 {
		name, _, _ := strings.Cut(parts[0], " for ")
		return fmt.Sprintf("%s %s the experimental unit", name, d.was())
	}
	return fmt.Sprintf("The experimental unit %s %s", d.was(), And(parts))
}

// replicationText says how many units each treatment had.
func replicationText(p *layout.Plan, d tense) string {
	receiving := -1
	for i := range p.Units {
		if len(p.Units[i].Receives) > 0 {
			if receiving >= 0 {
				return "" // the chain of units says it
			}
			receiving = i
		}
	}
	if receiving < 0 {
		return ""
	}
	a := p.Allocation(receiving)
	name := UnitName(&p.Units[receiving])
	if a == nil || len(a.Total) < 2 {
		return ""
	}
	if a.Checks != nil {
		checks, entries := 0, 0
		for c, n := range a.Total {
			if a.Checks[c] {
				checks = max(checks, n)
			} else {
				entries = max(entries, n)
			}
		}
		return fmt.Sprintf("Each check %s %s and each entry %s", d.of("had", "will have"), some(checks, name), some(entries, name))
	}
	each := "Each treatment"
	if len(a.Factors) > 1 {
		each = "Each combination of treatments"
	}
	lo, hi := span(a.Total)
	if lo == hi {
		return fmt.Sprintf("%s %s %s", each, d.of("had", "will have"), some(lo, name))
	}
	if len(a.Factors) == 1 {
		// The control more often than the others is what the trade does.
		f := &p.Factors[a.Factors[0]]
		var control, rest []int
		for c, n := range a.Total {
			if slices.Contains(f.Control, a.Combinations[c][0]) {
				control = append(control, n)
			} else {
				rest = append(rest, n)
			}
		}
		if len(control) == 1 && len(rest) > 0 && slices.Min(rest) == slices.Max(rest) {
			return fmt.Sprintf("The control %s %s and each other treatment %s", d.of("had", "will have"), some(control[0], name), small(rest[0]))
		}
	}
	return fmt.Sprintf("Treatments %s %s to %s", d.of("had", "will have"), small(lo), some(hi, name))
}

// ChapterRandomization tells how treatments were allotted and who knew.
func ChapterRandomization(t *trial.Trial) []Passage {
	var s paragraphOf
	d := told(t)
	a, method := t.Allotment, phrase(t.Protocol.Randomization.Method)
	switch {
	case a != nil && a.Origin != allot.Drawn:
		if said(method) {
			s.add("Treatments were allotted as follows: %s", method)
		}
		if a.Origin == allot.FromData {
			s.add("No record of the allotment exists beside the data")
		}
	default:
		s.add("%s", drawText(t, d))
		if a == nil || len(a.Draws) == 0 {
			break
		}
		x := a.Draws[len(a.Draws)-1]
		if x.Candidates > 1 {
			of := ""
			if len(t.Protocol.Randomization.BalanceOn) > 0 {
				var on []string
				for _, c := range t.Protocol.Randomization.BalanceOn {
					on = append(on, strings.ReplaceAll(c, "_", " "))
				}
				of = " for " + And(on)
			}
			s.add("Of %s candidate draws the one that was best balanced%s was kept", num.Count(x.Candidates), of)
		}
		if len(a.Draws) > 1 {
			s.add("Treatments were drawn %s; the reasons for drawing again are kept with the record", times(len(a.Draws)))
		}
	}
	if b := t.Protocol.Blinding; b != nil {
		var masked, open, other []string
		for _, x := range []struct{ stage, word string }{
			{stage: "at allotment", word: b.Allocation}, {stage: "during the trial", word: b.Conduct},
			{stage: "when outcomes were assessed", word: b.Assessment}, {stage: "in the analysis", word: b.Analysis},
		} {
			if !d {
				x.stage = strings.Replace(x.stage, "were", "are", 1)
			}
			switch word := phrase(x.word); {
			case word == "":
			case word == "masked":
				masked = append(masked, x.stage)
			case word == "open":
				open = append(open, x.stage)
			default:
				other = append(other, x.stage+" ("+word+")")
			}
		}
		line := ""
		if len(masked) > 0 {
			line = fmt.Sprintf("Treatments %s masked %s", d.were(), And(masked))
		}
		switch {
		case line != "" && len(open) > 0:
			line += "; they " + d.were() + " open " + And(open)
		case len(open) > 0:
			line = fmt.Sprintf("Treatments %s open %s", d.were(), And(open))
		}
		if line != "" {
			s.add("%s", line)
		}
		for _, x := range other {
			stage, word, _ := strings.Cut(strings.TrimSuffix(x, ")"), " (")
			s.add("%s: %s", stage, word)
		}
		switch holder, opened := definite(b.KeyHolder), dayText(b.Unblinded); {
		case said(b.KeyHolder) && b.Unblinded != (protocol.Date{}) && bool(d):
			s.add("The key was held by %s and opened on %s", holder, opened)
		case said(b.KeyHolder):
			s.add("The key %s held by %s", d.was(), holder)
		case b.Unblinded != (protocol.Date{}) && bool(d):
			s.add("The key was opened on %s", opened)
		}
	}
	return s
}

// drawText says at random within what the treatments were allotted, and that the draw
// can be repeated.
func drawText(t *trial.Trial, d tense) string {
	p := t.Plan
	var parts []string
	for i := range p.Units {
		u := &p.Units[i]
		if len(u.Receives) == 0 {
			continue
		}
		what, verb := factorNames(p, u.Receives), d.be(len(u.Receives))
		if what == "treatment" {
			what, verb = "treatments", d.were()
		}
		a := p.Allocation(i)
		how := " at random to " + Plural(UnitName(u))
		switch {
		case u.Crosses != nil:
			how += " under the restriction of " + Plural(UnitName(&p.Units[u.Crosses[0]]))
			for _, c := range u.Crosses[1:] {
				how += " and " + Plural(UnitName(&p.Units[c]))
			}
		case u.Within >= 0 && p.Units[u.Within].N > 1 && a != nil && !a.Complete && a.Checks == nil:
			how = " at random to " + Plural(UnitName(u)) + ", by permuting an arrangement in which each " + UnitName(&p.Units[u.Within]) + " holds part of the treatments"
		case u.Within >= 0 && p.Units[u.Within].N > 1:
			how += " within each " + UnitName(&p.Units[u.Within])
		}
		part := what + strings.Replace(how, " at random", "", 1)
		if len(parts) == 0 {
			part = what + " " + verb + " allotted" + how
		}
		parts = append(parts, part)
	}
	s := strings.Join(parts, ", ")
	if n := len(parts); n > 1 {
		s = strings.Join(parts[:n-1], ", ") + ", and " + parts[n-1]
	}
	if len(parts) > 1 || strings.Contains(s, ", by permuting ") {
		s += ","
	}
	if t.Allotment == nil || len(t.Allotment.Draws) == 0 {
		return strings.TrimSuffix(s, ",") + "; the draw and its seed will be recorded"
	}
	x := t.Allotment.Draws[len(t.Allotment.Draws)-1]
	with := " by a recorded draw"
	if strings.HasSuffix(s, ",") {
		s, with = strings.TrimSuffix(s, ","), "; the draw is recorded"
	}
	s += fmt.Sprintf("%s (seed text “%s”", with, x.Seed)
	if x.On != (protocol.Date{}) {
		s += ", " + dayText(x.On)
	}
	generator, _, _ := strings.Cut(x.Generator, " ")
	if generator != "" {
		s += ", generator " + generator
	}
	return s + ")"
}

// ChapterSize tells how the number of units was chosen.
func ChapterSize(t *trial.Trial, rs *result.Results) []Passage {
	var s paragraphOf
	x := t.Protocol.SampleSize
	if x == nil {
		return nil
	}
	unit := Plural(rowName(t))
	if rs.SampleSize != nil && rs.SampleSize.Unit != "" {
		unit = Plural(unitText(t, rs.SampleSize.Unit))
	}
	source := ""
	if said(x.Source) {
		source = " (" + phrase(x.Source) + ")"
	}
	r := t.Protocol.Response(x.Response)
	of, amountUnit := "", ""
	if r != nil {
		of, amountUnit = " in "+ResponseLabelText(r), r.Unit
		if r.Transform != "" && r.Transform != "none" {
			amountUnit = ""
		}
	}
	show := func(v float64) string { return num.Unit(num.Fixed(v, places(v)), amountUnit) }
	var given []string
	if x.CV != nil {
		given = append(given, fmt.Sprintf("a coefficient of variation of %s\u202f%%", num.Fixed(*x.CV, places(*x.CV))))
	}
	for _, v := range x.SD {
		where := ""
		if v.Stratum != "" {
			where = " between " + Plural(unitText(t, v.Stratum))
		}
		sd := show(v.Value)
		if x.CV == nil && x.DifferencePercent != nil {
			sd = num.Fixed(v.Value, places(v.Value)) + amountSuffix(amountUnit)
		}
		given = append(given, "a standard deviation"+where+" of "+sd)
	}
	if x.Attrition != nil && *x.Attrition > 0 {
		given = append(given, fmt.Sprintf("a loss of %s\u202f%% of units", num.Fixed(100**x.Attrition, places(100**x.Attrition))))
	}
	if len(given) > 0 {
		given[0] = ", given " + given[0]
	}
	alpha := t.Protocol.Analysis.Alpha
	if r != nil && r.Alpha != nil {
		alpha = *r.Alpha
	}
	effect := ""
	switch {
	case x.Difference != nil:
		effect = "a difference of " + show(*x.Difference)
	case x.DifferencePercent != nil:
		effect = fmt.Sprintf("a difference of %s\u202f%% of the mean", num.Fixed(*x.DifferencePercent, places(*x.DifferencePercent)))
	}
	if effect != "" && x.Contrast == "" {
		effect += of + " between two means"
	} else if effect != "" {
		effect += of + fmt.Sprintf(" in the contrast “%s”", phrase(x.Contrast))
	}
	switch {
	case x.Basis == "power" && x.Margin != nil:
		s.add("The number of %s was chosen to show equivalence%s within a margin of %s%s%s%s", unit, of, show(*x.Margin), powerText(x), And(given), source)
	case x.Basis == "power" && effect != "":
		sides := ""
		if x.Sides == 1 {
			sides = ", one-sided"
		}
		s.add("The number of %s was chosen to detect %s%s at the %s level%s%s%s", unit, effect, powerText(x), levelText(alpha), sides, And(given), source)
	case x.Basis == "precision" && x.HalfWidth != nil:
		s.add("The number of %s was chosen so that the %s confidence interval of a difference%s would reach %s to either side%s%s", unit, confidence(alpha), of, show(*x.HalfWidth), And(given), source)
	case x.Basis == "error df":
		s.add("The number of %s was chosen by the degrees of freedom that it leaves for error%s", unit, source)
	case source != "":
		s.add("The number of %s was chosen thus: %s", unit, phrase(x.Source))
	}
	return s
}

func amountSuffix(unit string) string {
	if unit == "" {
		return ""
	}
	return "\u202f" + num.UnitText(unit)
}

func powerText(x *protocol.SampleSize) string {
	if x.Power == nil {
		return ""
	}
	return " with a power of " + num.Fixed(*x.Power, 2)
}

// ChapterTreatments tells what was compared and what it was made of.
func ChapterTreatments(t *trial.Trial) []Passage {
	var s paragraphOf
	p, d := t.Plan, told(t)
	if len(t.Protocol.Treatments) > 0 {
		s.add("%s", listedTreatments(t, d))
	} else {
		var parts []string
		for i := range p.Factors {
			if f := &p.Factors[i]; f.Unit >= 0 && !f.Carried {
				parts = append(parts, levelsOf(f))
			}
		}
		switch {
		case len(parts) == 1:
			s.add("The treatments %s %s", d.were(), parts[0])
		case len(parts) > 1 && !separate(p):
			s.add("The treatments %s all combinations of %s", d.were(), series(parts))
		case len(parts) > 1:
			s.add("The treatments %s %s, each allotted by itself", d.were(), series(parts))
		}
	}
	var items []string
	for _, x := range t.Protocol.Items {
		var of []string
		if said(x.Batch) {
			of = append(of, "batch "+phrase(x.Batch))
		}
		if said(x.Purity) {
			of = append(of, "purity "+phrase(x.Purity))
		}
		if said(x.Supplier) {
			of = append(of, "supplied by "+phrase(x.Supplier))
		}
		if said(x.Analysed) {
			of = append(of, "by analysis "+phrase(x.Analysed))
		}
		if said(x.Storage) {
			of = append(of, "stored "+phrase(x.Storage))
		}
		line := phrase(x.Name)
		if len(of) > 0 {
			line += " (" + strings.Join(of, "; ") + ")"
		}
		items = append(items, line)
	}
	switch {
	case len(items) == 1:
		s.add("The test item %s %s", d.was(), items[0])
	case len(items) > 1:
		s.add("The test items %s %s", d.were(), series(items))
	}
	for i, x := range t.Protocol.Tables {
		s.see(fmt.Sprintf("extra-%d", i+1), "%s %s tabulated", captionText(x.Caption), "is")
	}
	return s
}

// captionText is a caption within a sentence, without its unit.
func captionText(s string) string {
	s, _, _ = strings.Cut(phrase(s), " (")
	return s
}

func separate(p *layout.Plan) bool {
	for u := range p.Units {
		if a := p.Allocation(u); a != nil && a.Separate {
			return true
		}
	}
	return false
}

// levelsOf is a factor with its levels: "four levels of dried yeast: 0 (basal diet), 20 …".
func levelsOf(f *layout.Factor) string {
	describe := map[string]string{}
	unit := ""
	if f.Protocol != nil {
		unit = f.Protocol.Unit
		for _, x := range f.Protocol.Describe {
			describe[x.Level] = phrase(x.Text)
		}
	}
	control := map[int]bool{}
	for _, c := range f.Control {
		control[c] = true
	}
	name := lowerFirst(FactorLabel(f))
	if len(f.Levels) > 12 {
		ends := f.Levels[0] + " to " + f.Levels[len(f.Levels)-1]
		var controls []string
		for _, c := range f.Control {
			controls = append(controls, f.Levels[c])
		}
		if len(controls) > 0 && len(controls) < 6 {
			ends += "; " + plural(len(controls), "control ", "controls ") + And(controls)
		}
		if f.Values == nil && !strings.Contains(name, " ") {
			return fmt.Sprintf("%s %s (%s)", num.Count(len(f.Levels)), Plural(name), ends)
		}
		return fmt.Sprintf("%s levels of %s (%s)", num.Count(len(f.Levels)), name, ends)
	}
	var levels []string
	bare := true
	for i, l := range f.Levels {
		if f.Values != nil {
			l = strings.ReplaceAll(l, "-", "−")
			if i == len(f.Levels)-1 || describe[f.Levels[i]] != "" {
				l = num.Unit(l, unit)
			}
		}
		var of []string
		if x := describe[f.Levels[i]]; x != "" {
			of = append(of, x)
		}
		if control[i] && len(f.Control) < len(f.Levels) {
			of = append(of, "the control")
		}
		if len(of) > 0 {
			bare = false
			l += " (" + strings.Join(of, "; ") + ")"
		}
		levels = append(levels, l)
	}
	count := small(len(f.Levels))
	list := series(levels)
	if bare {
		return fmt.Sprintf("%s levels of %s (%s)", count, name, list)
	}
	return fmt.Sprintf("%s levels of %s: %s", count, name, list)
}

// listedTreatments tells of treatments that are listed rather than crossed.
func listedTreatments(t *trial.Trial, d tense) string {
	var checks []string
	for _, u := range t.Protocol.Units {
		checks = append(checks, u.Checks...)
	}
	var items, others []string
	for _, x := range t.Protocol.Treatments {
		var of []string
		for _, f := range t.Plan.Factors {
			if l, ok := x.Levels[f.Name]; ok {
				of = append(of, lowerFirst(FactorLabel(&f))+" "+levelWithUnit(&f, l))
			}
		}
		if x.Control {
			of = append(of, "the control")
		}
		line := phrase(x.Code)
		if len(of) > 0 {
			line += " (" + strings.Join(of, ", ") + ")"
		}
		if len(checks) > 0 && !slices.Contains(checks, x.Code) {
			others = append(others, phrase(x.Code))
			continue
		}
		items = append(items, line)
	}
	switch {
	case len(checks) > 0:
		return fmt.Sprintf("The treatments %s %s, which stood in every block, and %s (%s to %s), each in one %s", d.were(), series(append([]string{}, prefixed("the checks ", items)...)),
			some(len(others), "entry"), others[0], others[len(others)-1], rowName(t))
	case len(items) > 20:
		return fmt.Sprintf("The treatments %s %s, listed in the protocol (%s to %s)", d.were(), num.Count(len(items)), phrase(t.Protocol.Treatments[0].Code), phrase(t.Protocol.Treatments[len(items)-1].Code))
	}
	return fmt.Sprintf("The treatments %s %s: %s", d.were(), small(len(items)), series(items))
}

func prefixed(lead string, items []string) []string {
	if len(items) == 0 {
		return items
	}
	out := slices.Clone(items)
	out[0] = lead + out[0]
	return out
}

func levelWithUnit(f *layout.Factor, level string) string {
	if f.Values != nil && f.Protocol != nil {
		return num.Unit(level, f.Protocol.Unit)
	}
	return level
}

// maxDefined is the number of responses that are defined in sentences; more stand in a
// table.
const maxDefined = 8

// ManyResponses tells whether a trial has too many responses to define each in a
// sentence.
func ManyResponses(t *trial.Trial) bool { return len(t.Protocol.Responses) > maxDefined }

// ChapterMeasurements tells what was measured and how.
func ChapterMeasurements(t *trial.Trial) []Passage {
	var s paragraphOf
	p, d := t.Protocol, told(t)
	var primary, secondary []string
	for i := range p.Responses {
		r := &p.Responses[i]
		line := ResponseLabelText(r)
		var of []string
		if r.Unit != "" && r.Unit != "1" {
			of = append(of, num.UnitText(r.Unit))
		}
		for _, x := range []string{r.How, r.Instrument} {
			if said(x) {
				of = append(of, phrase(x))
			}
		}
		if len(strings.Fields(r.Assessed)) >= 3 {
			of = append(of, "assessed "+assessedText(r.Assessed))
		}
		if len(of) > 0 {
			line += " (" + strings.Join(of, "; ") + ")"
		}
		if r.Role == "primary" {
			primary = append(primary, line)
		} else {
			secondary = append(secondary, line)
		}
	}
	if ManyResponses(t) {
		names := 0
		for i := range p.Responses {
			if p.Responses[i].Role == "primary" {
				primary[names] = ResponseLabelText(&p.Responses[i])
				names++
			}
		}
		if len(primary) > 0 {
			s.add("%s %s %s", plural(len(primary), "The primary response", "The primary responses"), d.be(len(primary)), And(primary))
		}
		s.see("responses", "The %s responses are listed with how each was measured", num.Count(len(p.Responses)))
	} else {
		if len(primary) > 0 {
			s.add("%s %s %s", plural(len(primary), "The primary response", "The primary responses"), d.be(len(primary)), series(primary))
		}
		if len(secondary) > 0 {
			lead := plural(len(secondary), "The secondary response", "Secondary responses")
			if len(primary) == 0 {
				lead = plural(len(secondary), "The response", "The responses")
			}
			s.add("%s %s %s", lead, d.be(len(secondary)), series(secondary))
		}
	}
	var computed []string
	for i := range p.Responses {
		if r := &p.Responses[i]; r.Compute != "" {
			computed = append(computed, fmt.Sprintf("%s as %s", ResponseLabelText(r), formula(r.Compute)))
		}
	}
	if len(computed) > 0 && len(computed) <= maxDefined {
		computed[0] = strings.Replace(computed[0], " as ", " "+d.was()+" computed as ", 1)
		s.add("%s", series(computed))
	}
	for i := range p.Covariates {
		c := &p.Covariates[i]
		used := false
		for _, r := range p.Responses {
			used = used || slices.Contains(r.Covariates, c.Name)
		}
		if !used {
			continue
		}
		name := lowerFirst(CovariateLabel(c))
		line := fmt.Sprintf("%s %s measured as a covariate", name, d.was())
		if c.Measured != (protocol.Date{}) {
			line = fmt.Sprintf("%s %s measured on %s as a covariate", name, d.was(), dayText(c.Measured))
		}
		if mean, sd, n := covariateSpread(t, c.Name); n > 1 {
			k := num.SEDecimals(sd)
			line += fmt.Sprintf("; its mean was %s (SD %s, n = %s)", num.Unit(num.Fixed(mean, k), c.Unit), num.Unit(num.Fixed(sd, k), c.Unit), num.Count(n))
		}
		s.add("%s", line)
	}
	if w := p.Welfare; w != nil {
		var done []string
		for _, x := range w.Procedures {
			done = append(done, procedureText(x))
		}
		if len(done) > 0 {
			s.add("%s on the animals, beside the treatments: %s", plural(len(done), "Procedure", "Procedures"), strings.Join(done, "; "))
		}
	}
	return s
}

func assessedText(s string) string {
	s = phrase(s)
	if strings.HasPrefix(strings.ToLower(s), "by ") {
		return inner(s)
	}
	return "by " + inner(s)
}

func plural(n int, one, many string) string {
	if n == 1 {
		return one
	}
	return many
}

// formula writes an expression of the protocol as a reader would.
func formula(s string) string {
	return strings.NewReplacer("_", " ", "*", "×", "-", "−").Replace(phrase(s))
}

// procedureText is a procedure with how often, where and how it was done.
func procedureText(x protocol.Procedure) string {
	name := phrase(x.Name)
	if name == "" {
		name = phrase(x.Kind)
	}
	var of []string
	if x.Volume != nil {
		of = append(of, QuantityText(x.Volume))
	}
	if x.Times > 0 {
		often := times(x.Times)
		if x.Every != nil {
			often += ", every " + QuantityText(x.Every)
		}
		of = append(of, often)
	}
	if x.Duration != nil {
		of = append(of, "for "+QuantityText(x.Duration))
	}
	for _, y := range []string{x.Route, x.How, x.Where} {
		if said(y) {
			of = append(of, phrase(y))
		}
	}
	if said(x.Anaesthesia) {
		of = append(of, "anaesthesia: "+phrase(x.Anaesthesia))
	}
	if said(x.Analgesia) {
		of = append(of, "analgesia: "+phrase(x.Analgesia))
	}
	if len(of) > 0 {
		name += " (" + strings.Join(of, "; ") + ")"
	}
	return name
}

// covariateSpread is the mean and standard deviation of a covariate over the analysed
// rows of the first response that has it.
func covariateSpread(t *trial.Trial, name string) (mean, sd float64, n int) {
	if t.Table == nil {
		return 0, 0, 0
	}
	for i := range t.Table.Responses {
		r := &t.Table.Responses[i]
		k := slices.Index(r.Protocol.Covariates, name)
		if k < 0 || k >= len(r.Covariates) {
			continue
		}
		var v []float64
		for row, x := range r.Covariates[k] {
			if r.Status[row] == dataset.Used && !math.IsNaN(x) {
				v = append(v, x)
				mean += x
			}
		}
		if len(v) < 2 {
			return 0, 0, 0
		}
		mean /= float64(len(v))
		for _, x := range v {
			sd += (x - mean) * (x - mean)
		}
		return mean, math.Sqrt(sd / float64(len(v)-1)), len(v)
	}
	return 0, 0, 0
}

// ChapterDepartures tells the rules of exclusion set beforehand, what was left out by
// them or otherwise, and in what the trial departed from its plan.
func ChapterDepartures(t *trial.Trial) []Passage {
	var s paragraphOf
	p, d := t.Protocol, told(t)
	if t.Seal != nil && len(t.Seal.Entries) > 0 {
		// The first seal is the one that says what was planned.
		e := &t.Seal.Entries[0]
		line := "The plan, with its analysis, was sealed"
		if e.On != (protocol.Date{}) {
			line += " on " + dayText(e.On)
		}
		if e.Data == "" {
			line += ", before there were data"
		} else {
			line += ", when there were data already"
		}
		s.add("%s", line)
	}
	if rules := phrases(p.Eligibility.ExclusionRules); len(rules) > 0 {
		s.add("%s of exclusion, set before the trial: %s", plural(len(rules), "Rule", "Rules"), strings.Join(rules, "; "))
	}
	for _, x := range p.Exclusions {
		who := UnitNameText(x.Unit)
		if who == "" {
			continue
		}
		if x.At != "" {
			who += ", at " + x.At
		}
		var names []string
		for _, n := range x.Responses {
			if r := p.Response(n); r != nil {
				names = append(names, ResponseLabelText(r))
			}
		}
		line := fmt.Sprintf("%s was left out of the analysis", who)
		if len(names) > 0 && len(names) < len(p.Responses) {
			line += " of " + And(names)
		}
		if said(x.Reason) {
			line += ": " + phrase(x.Reason)
		}
		var of []string
		if said(x.Rule) {
			of = append(of, "rule: "+phrase(x.Rule))
		} else {
			of = append(of, "no rule set beforehand covers it")
		}
		if x.BeforeUnblinding != nil {
			if *x.BeforeUnblinding {
				of = append(of, "decided before the treatments were known")
			} else {
				of = append(of, "decided when the treatments were known")
			}
		}
		s.add("%s (%s)", line, strings.Join(of, "; "))
	}
	if n := len(p.Corrections); n > 0 && bool(d) {
		s.add("%s %s corrected against the records before the analysis", some(n, "written value"), d.be(n))
	}
	for _, x := range p.Deviations {
		line := phrase(x.What)
		if x.On != (protocol.Date{}) {
			line = "On " + dayText(x.On) + " the trial departed from its plan: " + inner(x.What)
		} else {
			line = "The trial departed from its plan: " + inner(line)
		}
		if said(x.Effect) {
			line += " (effect: " + inner(x.Effect) + ")"
		}
		s.add("%s", line)
	}
	for _, x := range p.Amendments {
		line := "The plan was changed"
		if x.On != (protocol.Date{}) {
			line += " on " + dayText(x.On)
		}
		line += ": " + inner(x.What)
		if said(x.Why) {
			line += " (" + phrase(x.Why) + ")"
		}
		s.add("%s", line)
	}
	return s
}
