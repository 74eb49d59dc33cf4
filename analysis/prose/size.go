package prose

import (
	"fmt"
	"math"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/protocol/layout"
)

// keyName writes a key of [sample_size] as the protocol has it.
func keyName(key string) string { return "sample_size." + key }

// SizeNeeds says that a key of [sample_size] cannot be used without another.
func SizeNeeds(key, other string) string {
	return fmt.Sprintf("%s stands beside a spread on another scale; with it %s is needed.", keyName(key), keyName(other))
}

// SizeMissing says that one of several keys is missing.
func SizeMissing(keys []string) string {
	if len(keys) == 1 {
		return fmt.Sprintf("The key %s is missing.", keyName(keys[0]))
	}
	var names []string
	for _, k := range keys {
		names = append(names, keyName(k))
	}
	return fmt.Sprintf("One of the keys %s is missing.", strings.Join(names[:len(names)-1], ", ")+" or "+names[len(names)-1])
}

// SizeMissingAll says that all of several keys are missing.
func SizeMissingAll(keys []string) string {
	if len(keys) == 1 {
		return SizeMissing(keys)
	}
	var names []string
	for _, k := range keys {
		names = append(names, keyName(k))
	}
	return fmt.Sprintf("The keys %s are missing.", And(names))
}

// SizeNoTerm says that the term of the size is none of the plan's.
func SizeNoTerm(p *layout.Plan, term string) string {
	var known []string
	for i := range p.Terms {
		known = append(known, p.Terms[i].Name)
	}
	return fmt.Sprintf("%q is no term of this layout; its terms are %s.", term, And(known))
}

// SizeNoContrast says that a contrast is not one of the means of a single treatment factor.
func SizeNoContrast(name string) string {
	return fmt.Sprintf("The contrast %q compares no means that this layout tells apart.", name)
}

// SizeNoError says that no single error tests a term.
func SizeNoError(p *layout.Plan, term string) string {
	return fmt.Sprintf("%s has no single error in this layout, so its power is not computed.", TermLabel(p, term))
}

// SizeNoDF says that nothing is left to test a term against.
func SizeNoDF(p *layout.Plan, term string) string {
	return fmt.Sprintf("No degrees of freedom are left for the error of %s.", TermText(p, term))
}

// SizeDrawFirst says that only the draw tells what a layout loses.
func SizeDrawFirst(p *layout.Plan, term string) string {
	return fmt.Sprintf("What %s loses to units that cannot hold all treatments is known only when treatments have been drawn; power is computed then.", TermText(p, term))
}

// SizeDisconnected says that the allotment leaves differences that cannot be estimated.
func SizeDisconnected(p *layout.Plan, term string) string {
	return fmt.Sprintf("In this layout not all differences of %s can be estimated, so its power is not computed.", TermText(p, term))
}

// SizeAliasedCarryOver says why two treatments in two periods have no power.
func SizeAliasedCarryOver(p *layout.Plan, term string) string {
	return fmt.Sprintf("With two treatments in two periods the carry-over of %s cannot be told from the sequences, so its power is not computed.", TermText(p, term))
}

// SizeNoGroup says that nothing tells how many animals a unit holds.
func SizeNoGroup(p *layout.Plan, unit int) string {
	return fmt.Sprintf("The number of animals in a %s is missing (animals, or a smaller unit), without which their spread cannot be put together.", UnitName(&p.Units[unit]))
}

// SizeCovariates tells what the covariates of a response take.
func SizeCovariates(n int) string {
	if n == 1 {
		return "The covariate of the response takes one degree of freedom of the error; the standard deviation is meant after adjusting for it."
	}
	return fmt.Sprintf("The %s covariates of the response take as many degrees of freedom of the error; the standard deviation is meant after adjusting for them.", small(n))
}

// SizeLoss tells why a layout keeps only a share of its replication.
type SizeLoss struct {
	Carry, Trend bool // adjusted for carry-over, for lines over the periods
	Drawn        bool // computed from the allotment
	Sequences    bool // computed from given sequences
	Balanced     bool // that of balanced sequences
	Bound        bool // the greatest that the layout allows
}

// SizeEfficiency tells how much of the replication a layout keeps.
func SizeEfficiency(e float64, how SizeLoss) string {
	why := "blocks cannot hold all treatments"
	switch {
	case how.Carry && how.Trend:
		why = "differences are adjusted for carry-over and for a trend of each animal"
	case how.Carry:
		why = "direct effects are adjusted for carry-over"
	case how.Trend:
		why = "differences are adjusted for a trend of each animal"
	}
	from := "the greatest average efficiency factor that the layout allows; the draw may reach less"
	switch {
	case how.Drawn:
		from = "the average efficiency factor of the allotment"
	case how.Sequences:
		from = "the average efficiency factor of the given sequences"
	case how.Balanced:
		from = "that of sequences in which every treatment follows every other equally often"
	}
	return fmt.Sprintf("Since %s, differences are as precise as with %s\u202f%% of the replication (%s).", why, num.Percent(100*e), from)
}

// SizePercent says on which scale the size is computed.
func SizePercent() string {
	return "Difference, margin, half width and spread are in per cent of the mean."
}

// SizeLog says on which scale the size is computed.
func SizeLog(cv bool) string {
	s := "The response is analysed as a logarithm, and so are difference, margin, half width and spread here; a share of q per cent stands as ln(1 + q/100)."
	if cv {
		s += " The standard deviation is √ln(1 + CV²)."
	}
	return s
}

// SizeTransformed says on which scale the size is computed.
func SizeTransformed(transform string) string {
	return fmt.Sprintf("Difference, margin, half width and spread are on the scale of the transformation (%s), on which the response is analysed.", transform)
}

// SizeFirstTerm says which term was taken where none is named.
func SizeFirstTerm(p *layout.Plan, term string) string {
	return fmt.Sprintf("The protocol names no term for the size; the first, %s, was taken.", TermText(p, term))
}

// SizeGroupsInside says that a single correlation does not tell the spread of a unit that
// holds smaller treated units.
func SizeGroupsInside(p *layout.Plan, unit, inside int) string {
	u, v := &p.Units[unit], &p.Units[inside]
	return fmt.Sprintf("A %s holds several %s, so one correlation of animals does not tell its spread; give sd for each: { %s = …, %s = …, animal = … }.", UnitName(u), Plural(UnitName(v)), u.Name, v.Name)
}

// SizeReason says why the number of units is looked at.
func SizeReason() string {
	return "too few units answer no question and too many use animals for nothing (ARRIVE 2.0, item 2b: how the number was decided)"
}

// SizeSides says that one-sidedness bears on no F test.
func SizeSides(p *layout.Plan, term string) string {
	return fmt.Sprintf("The F test of %s has no sides, so sides = 1 does not bear on it; a contrast would have them.", TermText(p, term))
}

// SizeNormal says what the power of other responses stands on.
func SizeNormal(r *protocol.Response) string {
	return fmt.Sprintf("The power of %s is that of normal errors with the stated spread; that of its own kind of analysis may differ.", lowerFirst(ResponseLabel(r)))
}

// SizeFixed says that no other replication of the layout can be tried.
func SizeFixed(p *layout.Plan, unit int) string {
	return fmt.Sprintf("Other numbers of %s would change the kind of the layout, or counts are given one by one, so no other replication was tried.", Plural(UnitName(&p.Units[unit])))
}

// SizeUnreached says that no replication within bounds does.
func SizeUnreached(p *layout.Plan, unit int) string {
	return fmt.Sprintf("No number of %s that was tried reaches what is wished.", Plural(UnitName(&p.Units[unit])))
}

// SizeTimes says which spread tests the times.
func SizeTimes(p *layout.Plan, unit int, rep string) string {
	return fmt.Sprintf("Times are compared within the %s, over the spread of times in it, which is taken to be alike and equally correlated for all times.", UnitName(&p.Units[unit]))
}

// SizeMeanOfTimes says what a single SD of a repeated response is.
func SizeMeanOfTimes(p *layout.Plan, unit int, rep string) string {
	return fmt.Sprintf("The standard deviation is that of a %s's mean over all times of %s.", UnitName(&p.Units[unit]), strings.ReplaceAll(rep, "_", " "))
}

// SizeCrossed says what a single SD is where a term is tested over its interaction.
func SizeCrossed(p *layout.Plan, crossed string) string {
	return fmt.Sprintf("The standard deviation is that of the error, %s: of the mean of one treatment in one of these units.", TermText(p, crossed))
}

// SizeCrossedSD says that the SD of an interaction is not one of a unit.
func SizeCrossedSD(p *layout.Plan, crossed string) string {
	return fmt.Sprintf("The error is %s, whose standard deviation is that of no unit; give a single sd, that of the mean of one treatment in one of these units.", TermText(p, crossed))
}

// SizeICC says what the SD of a group of animals is made of.
func SizeICC(p *layout.Plan, unit int, rho, per float64) string {
	return fmt.Sprintf("The standard deviation of a %s is that of single animals times √(ρ + (1 − ρ)/m), with the intra-class correlation ρ = %s and m = %s animals.",
		UnitName(&p.Units[unit]), num.Fixed(rho, places(rho)), fewDecimals(per))
}

// SizePart is a component of the variance of a unit: SD²/Per.
type SizePart struct {
	Name    string
	SD, Per float64
}

// SizeParts says what the SD of a unit is made of.
func SizeParts(p *layout.Plan, unit int, parts []SizePart) string {
	var s []string
	for _, x := range parts {
		one := num.Fixed(x.SD, min(places(x.SD), 6)) + "²"
		if x.Per != 1 {
			one += "/" + fewDecimals(x.Per)
		}
		s = append(s, fmt.Sprintf("%s (%s)", one, Plural(strings.NewReplacer("_", " ", ":", " × ").Replace(x.Name))))
	}
	return fmt.Sprintf("The variance of a %s is put together as %s.", UnitName(&p.Units[unit]), strings.Join(s, " + "))
}

func fewDecimals(x float64) string {
	if x == math.Round(x) {
		return num.Fixed(x, 0)
	}
	return num.Fixed(x, 1)
}

// amount prints a computed number on the scale of a size, to the place that shows its
// spread to two digits.
func amount(p *layout.Plan, s *result.SampleSize, x result.Number) string {
	if !x.Known() {
		return num.Absent
	}
	d := num.SEDecimals(float64(x))
	if s.SD.Known() {
		d = max(d, num.SEDecimals(float64(s.SD)))
	}
	return SizeAmount(p, s, num.Fixed(float64(x), d))
}

// stated prints a number as the protocol has it; one that was brought to another scale
// with four decimals.
func stated(p *layout.Plan, s *result.SampleSize, x result.Number) string {
	if !x.Known() {
		return num.Absent
	}
	return SizeAmount(p, s, num.Fixed(float64(x), min(places(float64(x)), 4)))
}

// SizeAmount puts the unit of a size behind a printed number.
func SizeAmount(p *layout.Plan, s *result.SampleSize, number string) string {
	switch s.Scale {
	case "percent":
		return number + "\u202f%"
	case "log", "transformed", "":
		return number
	}
	if r := p.Protocol.Response(s.Response); r != nil {
		return num.Unit(number, r.Unit)
	}
	return number
}

// PowerText prints a power: two decimals, and never one that is not certain as certain.
func PowerText(x result.Number) string {
	switch {
	case !x.Known():
		return num.Absent
	case x > 0.995:
		return "> 0.99"
	case x < 0.005:
		return "< 0.01"
	}
	return num.Fixed(float64(x), 2)
}

// subject names what a size is computed for.
func subject(p *layout.Plan, s *result.SampleSize) string {
	if s.Contrast != "" {
		return fmt.Sprintf("the contrast “%s”", s.Contrast)
	}
	return TermText(p, s.Term)
}

// replication tells how many replicates there are in which units.
func replication(p *layout.Plan, s *result.SampleSize, n *result.Needed) string {
	text := some(n.Replicates, "replicate")
	if s.Grows != nil && s.Grows.Unit != s.Unit && s.Grows.Unit != "replicate" {
		text += fmt.Sprintf(" (%s)", counted(p, s, n.Count))
	}
	return text
}

// counted is a number of the unit that grows, in each parent where it has one.
func counted(p *layout.Plan, s *result.SampleSize, count int) string {
	for i := range p.Units {
		u := &p.Units[i]
		if u.Name != s.Grows.Unit {
			continue
		}
		name := UnitName(u)
		if count != 1 {
			name = Plural(name)
		}
		text := fmt.Sprintf("%s %s", num.Count(count), name)
		if u.Within >= 0 {
			text += " in each " + UnitName(&p.Units[u.Within])
		}
		return text
	}
	return num.Count(count)
}

// wish says what a size is to reach.
func wish(p *layout.Plan, s *result.SampleSize) string {
	switch s.Method {
	case "half width":
		return fmt.Sprintf("a half width of %s", stated(p, s, s.WishedHalf))
	case "error df":
		return fmt.Sprintf("%d degrees of freedom for the error", p.Protocol.Analysis.ErrorDFMin)
	}
	if !s.Difference.Known() && !s.Margin.Known() {
		return fmt.Sprintf("a half width of %s", stated(p, s, s.WishedHalf))
	}
	return fmt.Sprintf("a power of %s", PowerText(s.Wished))
}

// SizeCheck says whether the number of units does what it was chosen for.
func SizeCheck(p *layout.Plan, s *result.SampleSize, does bool) string {
	got := ""
	switch {
	case s.Method == "error df" && s.ErrorDF != nil:
		got = fmt.Sprintf("leaves %d degrees of freedom for the error", *s.ErrorDF)
	case s.Method == "half width" || !s.Power.Known():
		got = fmt.Sprintf("gives a half width of %s", amount(p, s, s.HalfWidth))
	default:
		got = fmt.Sprintf("has a power of %s", PowerText(s.Power))
	}
	text := fmt.Sprintf("With %s the plan %s for %s, and %s is wished", some(s.Replicates, "replicate"), got, subject(p, s), wish(p, s))
	switch {
	case s.Needed == nil && does:
	case s.Needed == nil:
		text += ", which no replication that could be tried reaches"
	case s.WithLosses != nil:
		text += fmt.Sprintf("; that takes %s, and %s to keep them after the losses expected", replication(p, s, s.Needed), replication(p, s, s.WithLosses))
	default:
		text += fmt.Sprintf("; that takes %s", replication(p, s, s.Needed))
	}
	return text + "."
}

// SizeHint says how a size that falls short may be mended.
func SizeHint(s *result.SampleSize) string {
	need := s.Needed
	if s.WithLosses != nil {
		need = s.WithLosses
	}
	if need == nil || s.Grows == nil {
		return "a greater difference, a smaller spread or another layout is needed"
	}
	hint := fmt.Sprintf("count = %d for unit %q would do", need.Count, s.Grows.Unit)
	switch {
	case s.Method == "error df":
		return hint
	case s.Method == "half width" || !s.Power.Known():
		return hint + ", or a greater half width"
	case s.Margin.Known():
		return hint + ", or a greater margin"
	}
	return hint + ", or a greater difference"
}

// SizeUnknown says that the stated basis of the size could not be checked.
func SizeUnknown(basis string) string {
	return fmt.Sprintf("The number of units is said to be chosen by %s, but what it reaches could not be computed; the notes on the number of units say why.", basis)
}

// SizeFound words what was computed of the number of units.
func SizeFound(p *layout.Plan, s *result.SampleSize) []string {
	if s == nil {
		return nil
	}
	var out []string
	unit := ""
	for i := range p.Units {
		if p.Units[i].Name == s.Unit {
			unit = UnitName(&p.Units[i])
		}
	}
	line := fmt.Sprintf("The plan gives %s %s", subject(p, s), some(s.Replicates, "replicate"))
	if unit != "" {
		line += fmt.Sprintf(", %s in all", some(s.Units, unit))
	}
	if s.ErrorDF != nil {
		line += fmt.Sprintf(", and %s degrees of freedom for the error", num.Count(*s.ErrorDF))
	}
	if s.Term != "" {
		out = append(out, line+".")
	}
	if s.ErrorDF != nil {
		out = append(out, Window(*s.ErrorDF))
	}
	if s.ErrorDFRule != nil {
		out = append(out, fmt.Sprintf("The smallest replication that leaves at least %d degrees of freedom for the error is %s, %s in all.",
			p.Protocol.Analysis.ErrorDFMin, replication(p, s, s.ErrorDFRule), some(s.ErrorDFRule.Units, orUnit(unit))))
	}
	test := map[string]string{"noncentral F": "by the noncentral F distribution", "noncentral t": sidesText(s.Sides) + " t test, by the noncentral t distribution", "two one-sided t": "by two one-sided t tests"}[s.Method]
	if s.Power.Known() {
		switch {
		case s.Method == "two one-sided t" || s.Margin.Known():
			what := "when the means are truly equal"
			if s.Difference.Known() {
				what = fmt.Sprintf("when they truly differ by %s", stated(p, s, s.Difference))
			}
			out = append(out, fmt.Sprintf("The probability to show that two means lie within %s of each other is %s %s (%s, each at α = %s).",
				stated(p, s, s.Margin), PowerText(s.Power), what, test, num.Fixed(float64(s.Alpha), places(float64(s.Alpha)))))
		default:
			what := "a difference of %s between two means"
			if s.Contrast != "" {
				what = "a value of %s of the contrast by its weights"
			} else if strings.Contains(s.Term, ":") {
				what = "a difference of differences of %s"
			}
			by := test
			if by != "" {
				by = " (" + by + ", α = " + num.Fixed(float64(s.Alpha), places(float64(s.Alpha))) + ")"
			}
			out = append(out, fmt.Sprintf("The power to detect "+what+" is %s%s.", stated(p, s, s.Difference), PowerText(s.Power), by))
		}
	}
	if s.Detectable.Known() {
		target := s.Wished
		if !target.Known() {
			target = 0.80
		}
		what := "difference"
		if s.Margin.Known() {
			what = "margin"
		}
		out = append(out, fmt.Sprintf("A power of %s is reached at a %s of %s.", PowerText(target), what, amount(p, s, s.Detectable)))
	}
	if s.HalfWidth.Known() {
		of := "a difference of two means"
		if s.Contrast != "" {
			of = "the contrast"
		} else if strings.Contains(s.Term, ":") {
			of = "a difference of differences"
		}
		out = append(out, fmt.Sprintf("The standard error of %s is %s, and its %s interval reaches %s to either side.", of, amount(p, s, s.SED), confidence(float64(s.Alpha)), amount(p, s, s.HalfWidth)))
		if s.Sides == 1 {
			out[len(out)-1] = fmt.Sprintf("The standard error of %s is %s, and its one-sided %s limit lies %s away.", of, amount(p, s, s.SED), confidence(float64(s.Alpha)), amount(p, s, s.HalfWidth))
		}
	}
	if s.Needed != nil && s.Method != "error df" {
		line := fmt.Sprintf("The smallest replication for %s is %s, %s in all", wish(p, s), replication(p, s, s.Needed), some(s.Needed.Units, orUnit(unit)))
		if s.WithLosses != nil {
			line += fmt.Sprintf("; with a loss of %s\u202f%% of the units %s", num.Percent(100*float64(s.Attrition)), replication(p, s, s.WithLosses))
		}
		out = append(out, line+".")
	}
	if len(s.BySD) == 3 && s.Power.Known() {
		out = append(out, fmt.Sprintf("If the spread were a quarter smaller the power would be %s, if a quarter greater %s.", PowerText(s.BySD[0].Power), PowerText(s.BySD[2].Power)))
	}
	return out
}

func orUnit(unit string) string {
	if unit == "" {
		return "unit"
	}
	return unit
}

func sidesText(sides int) string {
	if sides == 1 {
		return "one-sided"
	}
	return "two-sided"
}

// Window places error degrees of freedom in the window from 10 to 20 that Mead advises.
//
// Source: R. Mead, The Design of Experiments (1988), ch. 6 (from memory).
func Window(df int) string {
	switch {
	case df < 10:
		return fmt.Sprintf("The error has %s degrees of freedom, below the window of 10 to 20 that Mead (1988) advises: it would be poorly known.", small(df))
	case df > 20:
		return fmt.Sprintf("The error has %s degrees of freedom, above the window of 10 to 20 that Mead (1988) advises: fewer units, or more questions asked of them, may do if the wished power allows.", num.Count(df))
	}
	return fmt.Sprintf("The error has %s degrees of freedom, in the window of 10 to 20 that Mead (1988) advises.", small(df))
}

// SizeNotes lists the notes of a size.
func SizeNotes(s *result.SampleSize) []string {
	if s == nil {
		return nil
	}
	var out []string
	for _, n := range s.Notes {
		out = append(out, n.Text)
	}
	return out
}

// PowerCaption is the caption of the power curve.
func PowerCaption(p *layout.Plan, s *result.SampleSize) string {
	text := fmt.Sprintf("Power by replication for %s", subject(p, s))
	if s.Margin.Known() {
		return text + fmt.Sprintf(", equivalence within %s, with the standard deviation stated and a quarter less and more", stated(p, s, s.Margin))
	}
	return text + fmt.Sprintf(", a difference of %s, with a standard deviation of %s and a quarter less and more", stated(p, s, s.Difference), amount(p, s, s.SD))
}
