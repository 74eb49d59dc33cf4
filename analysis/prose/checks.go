package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// The checks of a design are worded as messages are: lower case, without a period, the
// way to mend it apart.

// Sentence makes a sentence of a message.
func Sentence(message string) string { return upperFirst(message) + "." }

// ErrorDF words how many degrees of freedom the error of a term has, against the least
// number asked for.
func ErrorDF(p *layout.Plan, t *layout.Term, least int) (message, hint string) {
	message = fmt.Sprintf("the test of %s has %s error degrees of freedom", TermText(p, t.Name), num.DF(float64(t.ErrorDF)))
	if t.ErrorDF >= least {
		return message + fmt.Sprintf(", at least the %d asked for", least), ""
	}
	return message + fmt.Sprintf(", fewer than the %d asked for", least), "plan more experimental units, or state the limit under analysis.error_df_min"
}

// SmallSquare words Latin or Graeco-Latin squares, now of them, whose error has too few
// degrees of freedom: so many squares are enough, which leave own degrees of freedom
// with rows and columns of their own and common with one of them in common.
func SmallSquare(p *layout.Plan, t *layout.Term, least, side, now, squares, own, common int) (message, hint string) {
	which := fmt.Sprintf("a square of side %d leaves", side)
	if now > 1 {
		which = fmt.Sprintf("%s of side %d leave", some(now, "square"), side)
	}
	message = fmt.Sprintf("%s the test of %s %s error degrees of freedom, fewer than the %d asked for",
		which, TermText(p, t.Name), num.DF(float64(t.ErrorDF)), least)
	return message, fmt.Sprintf("%s such squares leave %d, or %d where they share rows or columns", small(squares), own, common)
}

// Replication words how often the treatments of a unit stand. lo and hi are the least
// and the greatest number of instances, least and most one combination that has each.
func Replication(p *layout.Plan, unit, lo, hi int, least, most string, stated bool) (message, hint string) {
	u := &p.Units[unit]
	what := factorNames(p, u.Receives)
	name := UnitName(u)
	if lo == hi {
		return fmt.Sprintf("the %s is the experimental unit of %s, with %s for each treatment", name, what, some(lo, name)), ""
	}
	message = fmt.Sprintf("the treatments of the %s have from %s to %s: %s the fewest, %s the most", name, small(lo), some(hi, name), least, most)
	if stated {
		return message + ", as the protocol states", ""
	}
	return message, "comparisons then differ in precision; state replicates if that is meant"
}

// SingleUnit words a term of which a cell stands on one unit only; all tells whether
// every cell does.
func SingleUnit(p *layout.Plan, t *layout.Term, cell string, all bool) (message, hint string) {
	name := UnitName(&p.Units[t.Unit])
	if all {
		return fmt.Sprintf("every treatment of %s stands on one %s only: what the treatment did and what the %s is cannot be told apart, and no test is possible", TermText(p, t.Name), name, name),
			fmt.Sprintf("more animals or samples in a %s do not help; at least two %s for each treatment are needed, and about ten error degrees of freedom for a test of use", name, Plural(name))
	}
	return fmt.Sprintf("%s stands on one %s only: nothing shows how far such %s differ", cell, name, Plural(name)),
		fmt.Sprintf("give it at least two %s, or leave it out of the comparisons", Plural(name))
}

// CellText names a cell of a term: "yeast 20, sex female".
func CellText(p *layout.Plan, factors, levels []int) string {
	var parts []string
	for i, f := range factors {
		parts = append(parts, lowerFirst(FactorLabel(&p.Factors[f]))+" "+p.Factors[f].Levels[levels[i]])
	}
	return strings.Join(parts, ", ")
}

// ConstantWithin words a factor that a unit is said to receive but that does not vary
// inside a larger unit.
func ConstantWithin(p *layout.Plan, factor, unit, larger int) (message, hint string) {
	f := lowerFirst(FactorLabel(&p.Factors[factor]))
	u, v := UnitName(&p.Units[unit]), UnitName(&p.Units[larger])
	return fmt.Sprintf("%s is said to be received by the %s, but all %s of one %s have the same: the %s is its experimental unit, %s of them and not %s",
			f, u, Plural(u), v, v, num.Count(p.Units[larger].N), num.Count(p.Units[unit].N)),
		fmt.Sprintf("let the %s receive %s; %s are then sampled within %s", v, p.Factors[factor].Name, Plural(u), Plural(v))
}

// UndeclaredUnit words a column of a file that is no unit of the trial although a
// factor does not vary within its values.
func UndeclaredUnit(p *layout.Plan, factor, unit int, heading string, classes int) (message, hint string) {
	f := lowerFirst(FactorLabel(&p.Factors[factor]))
	u := UnitName(&p.Units[unit])
	name := strings.ToLower(strings.TrimSpace(heading))
	return fmt.Sprintf("%q is no unit of the trial, but all %s with the same %s have the same %s: if that is what was treated, it is the experimental unit, %s of them and not %s",
			heading, Plural(u), name, f, num.Count(classes), num.Count(p.Units[unit].N)),
		fmt.Sprintf("declare it as a [[unit]] that receives %s, with %s within it", p.Factors[factor].Name, p.Units[unit].Name)
}

// GroupHoused words animals that are kept in groups of n while each is said to be an
// experimental unit.
func GroupHoused(p *layout.Plan, unit, n int) (message, hint string) {
	u := UnitName(&p.Units[unit])
	what := factorNames(p, p.Units[unit].Receives)
	return fmt.Sprintf("animals are kept in groups of %s, and each %s is said to receive %s by itself", small(n), u, what),
		fmt.Sprintf("if a group is given it together, the group is the experimental unit: declare it as a [[unit]] that receives %s, with %s within it", factorKeys(p, p.Units[unit].Receives), p.Units[unit].Name)
}

func factorKeys(p *layout.Plan, fs []int) string {
	var names []string
	for _, f := range fs {
		names = append(names, p.Factors[f].Name)
	}
	return And(names)
}

// Inseparable words two units of which each holds the other alone.
func Inseparable(p *layout.Plan, unit int) (message, hint string) {
	u, v := UnitName(&p.Units[unit]), UnitName(&p.Units[p.Units[unit].Within])
	return fmt.Sprintf("every %s holds one %s only, so that differences between %s and between %s cannot be told apart", v, u, Plural(v), Plural(u)),
		"leave one of the two units out"
}

// Confounded words a term that cannot be told, or not all of it, from differences
// between larger units; unit < 0: from several of them together.
func Confounded(p *layout.Plan, t *layout.Term, unit, lost int, whole bool) (message, hint string) {
	with := "larger units"
	if unit >= 0 {
		with = Plural(UnitName(&p.Units[unit]))
	}
	if whole {
		return fmt.Sprintf("%s is confounded with differences between %s and cannot be told within them", TermText(p, t.Name), with),
			"allot it so that it varies within " + with
	}
	return fmt.Sprintf("%s of the %s degrees of freedom of %s are confounded with differences between %s", small(lost), num.DF(float64(t.DF)), TermText(p, t.Name), with), ""
}

// Aliased words a term that cannot be told from other terms since combinations of
// treatments are not in the trial.
func Aliased(p *layout.Plan, t *layout.Term, lost int, whole bool) (message, hint string) {
	if whole {
		return fmt.Sprintf("%s cannot be told from the terms above it, since not all combinations of treatments stand in the trial", TermText(p, t.Name)),
			"list the treatments there are as [[treatment]] tables, or allot the combinations that are wanting"
	}
	return fmt.Sprintf("%s loses %s of its %s degrees of freedom, since not all combinations of treatments stand in the trial", TermText(p, t.Name), small(lost), num.DF(float64(t.DF))), ""
}

// AliasedFactors words factors that change together in the listed treatments.
func AliasedFactors(p *layout.Plan, factor int, with []string) (message, hint string) {
	return fmt.Sprintf("in the listed treatments %s changes together with %s: their effects cannot be told apart", lowerFirst(FactorLabel(&p.Factors[factor])), And(with)),
		"list a treatment in which one of them changes alone"
}

// AliasedInteraction words a main effect that cannot be told from interactions of the
// others.
func AliasedInteraction(p *layout.Plan, factor int, with []string) (message, hint string) {
	return fmt.Sprintf("in the listed treatments %s cannot be told from %s: it is read as the effect of %s only if there is no such interaction",
		lowerFirst(FactorLabel(&p.Factors[factor])), And(with), lowerFirst(FactorLabel(&p.Factors[factor]))), ""
}

// Disconnected words treatments that fall into groups which no chain of blocks joins.
// units are the blocks, groups the treatments of each group.
func Disconnected(p *layout.Plan, unit int, units []int, groups [][]string) (message, hint string) {
	var parts []string
	for i, g := range groups {
		if i == 4 && len(groups) > 5 {
			parts = append(parts, fmt.Sprintf("%s more groups", num.Count(len(groups)-4)))
			break
		}
		shown := g
		if len(shown) > 6 {
			shown = append(append([]string{}, shown[:5]...), fmt.Sprintf("%d more", len(g)-5))
		}
		parts = append(parts, "{"+strings.Join(shown, ", ")+"}")
	}
	var within []string
	for _, u := range units {
		within = append(within, Plural(UnitName(&p.Units[u])))
	}
	in := And(within)
	return fmt.Sprintf("no chain of %s joins the %s groups of %s %s: differences between the groups cannot be told within %s",
			in, small(len(groups)), factorNames(p, p.Units[unit].Receives), And(parts), in),
		"draw again so that the groups meet, or repeat one treatment in every block"
}

// IncompleteBlocks words how much of the information on differences of treatments
// blocks keep that do not hold all of them. bound: it is at most that much, since
// nothing is drawn yet.
func IncompleteBlocks(p *layout.Plan, unit int, blocks []int, efficiency float64, bound bool) (message, hint string) {
	var within []string
	for _, b := range blocks {
		within = append(within, Plural(UnitName(&p.Units[b])))
	}
	most := ""
	if bound {
		most = "at most "
	}
	return fmt.Sprintf("%s do not hold every treatment: within them differences of %s have %s%s of the information they would have in complete ones",
		And(within), factorNames(p, p.Units[unit].Receives), most, num.Fixed(efficiency, 2)), ""
}

// NoTrend words a quantitative factor of which pairs of levels are to be compared and
// no trend is planned.
func NoTrend(p *layout.Plan, factor int) (message, hint string) {
	f := lowerFirst(FactorLabel(&p.Factors[factor]))
	return fmt.Sprintf("the levels of %s are amounts, but pairs of them are to be compared and no trend is planned", f),
		"set trend under [analysis], or plan [analysis.dose_response]: how the response runs over the amounts is the question"
}

// SeveralPrimary words several primary responses.
func SeveralPrimary(names []string) (message, hint string) {
	return fmt.Sprintf("%s responses are primary (%s), and each is tested at the full level", small(len(names)), And(names)),
		"name the one that decides, or state a smaller alpha for each"
}

// NoCarryOver words a crossover that plans nothing for what a treatment leaves behind.
func NoCarryOver(p *layout.Plan, subject, along int, factor int) (message, hint string) {
	s, a := UnitName(&p.Units[subject]), UnitName(&p.Units[along])
	return fmt.Sprintf("each %s receives %s in one %s after another, and nothing is planned for what a treatment leaves behind", s, lowerFirst(FactorLabel(&p.Factors[factor])), a),
		"declare [carryover], or say how long the units are kept on a treatment before they are measured"
}

// Moved words animals that changed their unit.
func Moved(p *layout.Plan, unit, events int, first string, on protocol.Date) (message, hint string) {
	u := UnitName(&p.Units[unit])
	more := ""
	if events > 1 {
		more = fmt.Sprintf(", and by %s more", some(events-1, "event"))
	}
	when := ""
	if d := DateText(on); d != "" {
		when = " on " + d
	}
	return fmt.Sprintf("animals were moved from %s%s%s: a %s then no longer holds what it was allotted with", first, when, more, u),
		fmt.Sprintf("say in a [[deviation]] what it may do to the comparison; exclude a %s under a rule set before, if there is one", u)
}

// InstanceText names an instance of a unit: "block 2, pen 7".
func InstanceText(p *layout.Plan, unit int, instance int32) string {
	return allot.Describe(p, unit, instance)
}
