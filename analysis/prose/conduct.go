package prose

import (
	"fmt"
	"sort"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/layout"
)

// SkeletonSource names a line of the skeleton analysis.
func SkeletonSource(p *layout.Plan, l layout.Line) string {
	switch l.Kind {
	case layout.UnitLine:
		name := upperFirst(Plural(UnitName(&p.Units[l.Unit])))
		if p.Units[l.Unit].Crosses != nil || p.Units[l.Unit].Within >= 0 {
			name = upperFirst(ErrorName(p, l.Unit))
		}
		return name
	case layout.Residual:
		return upperFirst(ErrorName(p, l.Unit))
	case layout.TermLine:
		if l.Term >= 0 && len(p.Terms[l.Term].Factors) == 1 && p.Factors[p.Terms[l.Term].Factors[0]].Carried {
			return TermLabel(p, l.Source) + " (not randomized)"
		}
	case layout.Trend:
		if i := strings.IndexByte(l.Source, ':'); i > 0 {
			return fmt.Sprintf("Trend of each %s over %s", TermText(p, l.Source[:i]), Plural(strings.TrimSuffix(TermText(p, strings.TrimSuffix(l.Source[i+1:], " trend")), " trend")))
		}
	case layout.CarryOver:
		return "Carry-over"
	}
	return TermLabel(p, l.Source)
}

// UnitNameText names a unit as the protocol points at it.
func UnitNameText(n protocol.UnitName) string {
	var parts []string
	for _, x := range n {
		parts = append(parts, strings.ReplaceAll(x.Unit, "_", " ")+" "+x.Name)
	}
	return strings.Join(parts, ", ")
}

// TreatmentText is the treatment of an instance of a unit: levels joined by commas.
func TreatmentText(t *trial.Trial, unit, instance int) string {
	var parts []string
	for f := range t.Plan.Factors {
		if t.Plan.Factors[f].Unit < 0 || t.Plan.Coarse(unit, t.Plan.Factors[f].Unit) == nil {
			continue
		}
		if l := t.Allotment.Levels[f]; l != nil {
			if x := l[t.Plan.Coarse(unit, t.Plan.Factors[f].Unit)[instance]]; x >= 0 {
				parts = append(parts, LevelText(t.Plan, t.Plan.Factors[f].Name, t.Plan.Factors[f].Levels[x]))
			}
		}
	}
	if len(parts) == 0 {
		return UnknownTreatment
	}
	return strings.Join(parts, ", ")
}

// UnknownTreatment stands for the treatment of a unit whose allotment nothing tells, such
// as one without a row in data that the allotment is taken from. It is none of the
// treatments.
const UnknownTreatment = "treatment not known"

// TreatmentOrder lists the treatments of the instances of a unit in the order of their
// levels, and last, where there are such instances, UnknownTreatment.
func TreatmentOrder(t *trial.Trial, unit int) []string {
	type entry struct {
		key  []int32
		name string
	}
	seen := map[string]bool{}
	var all []entry
	for i := range t.Plan.Units[unit].N {
		name := TreatmentText(t, unit, i)
		if seen[name] {
			continue
		}
		seen[name] = true
		var key []int32
		for f := range t.Plan.Factors {
			u := t.Plan.Factors[f].Unit
			if u < 0 || t.Plan.Coarse(unit, u) == nil || t.Allotment.Levels[f] == nil {
				continue
			}
			key = append(key, t.Allotment.Levels[f][t.Plan.Coarse(unit, u)[i]])
		}
		all = append(all, entry{key: key, name: name})
	}
	sort.SliceStable(all, func(i, j int) bool {
		if a, b := all[i].name == UnknownTreatment, all[j].name == UnknownTreatment; a || b {
			return !a
		}
		for k := range all[i].key {
			if all[i].key[k] != all[j].key[k] {
				return all[i].key[k] < all[j].key[k]
			}
		}
		return false
	})
	var out []string
	for _, e := range all {
		out = append(out, e.name)
	}
	return out
}

// Agreement says whether the data agree with the allotment.
func Agreement(t *trial.Trial) []string {
	switch {
	case t.Table == nil:
		return []string{"There are no data to compare with the allotment."}
	case t.Allotment != nil && t.Allotment.Origin == allot.FromData:
		return []string{"The allotment is taken from the data, so that there is nothing to compare it with."}
	case len(t.Table.Disagreements) > 0:
		return []string{fmt.Sprintf("The treatment written in the data differs from the one allotted for %s. Units are analysed as allotted.", some(len(t.Table.Disagreements), "unit"))}
	}
	return []string{"Every treatment written in the data is the one allotted."}
}

// Repeat tells how to repeat the draw by another program.
func Repeat(a *allot.Allotment) []string {
	if a == nil {
		return []string{"Nothing has been drawn yet."}
	}
	if a.Origin != allot.Drawn || len(a.Draws) == 0 {
		return []string{"The allotment was not drawn by this program, so that it cannot be repeated from a seed."}
	}
	d := a.Draws[len(a.Draws)-1]
	out := []string{
		"Seed text, generator and scheme are enough to repeat the draw with any program.",
		fmt.Sprintf("Seed text: “%s”.", d.Seed),
		fmt.Sprintf("Generator: %s.", strings.TrimRight(d.Generator, ".")),
		fmt.Sprintf("Scheme: %s.", strings.TrimRight(d.Scheme, ".")),
	}
	if d.Start != "" {
		out = append(out, "The arrangement before it was permuted stands in allotment.toml under start, treatments counted from 1 in the protocol’s order, so that no search needs to be repeated.")
	}
	return append(out, "With this program, penwright draw --draws 1 --json prints the same allotment without recording it.")
}

// Conduct sums up what happened.
func Conduct(t *trial.Trial) []string {
	p := t.Protocol
	count := func(n int, what string) string {
		if n == 0 {
			return "no " + Plural(what)
		}
		return some(n, what)
	}
	s := []string{fmt.Sprintf("The protocol records %s, %s, %s, %s and %s.", count(len(p.Events), "event"), count(len(p.Exclusions), "exclusion"),
		count(len(p.Deviations), "deviation"), count(len(p.Corrections), "correction"), count(len(p.Amendments), "amendment"))}
	if p.Data != nil && len(p.Data.None) > 0 {
		var none []string
		for _, w := range p.Data.None {
			none = append(none, "no "+w)
		}
		s = append(s, fmt.Sprintf("Its author confirms that there was %s.", And(none)))
	}
	if t.Table == nil {
		return s
	}
	for i := range t.Table.Responses {
		r := &t.Table.Responses[i]
		used, missing, excluded, noCovariate := 0, 0, 0, 0
		for _, x := range r.Status {
			switch x {
			case dataset.Used:
				used++
			case dataset.Excluded:
				excluded++
			case dataset.CovariateMissing:
				noCovariate++
			default:
				missing++
			}
		}
		line := fmt.Sprintf("%s: %s of %s values analysed", ResponseLabel(r.Protocol), num.Count(used), num.Count(len(r.Status)))
		if excluded > 0 {
			line += fmt.Sprintf(", %s excluded", num.Count(excluded))
		}
		if missing > 0 {
			line += fmt.Sprintf(", %s missing", num.Count(missing))
		}
		if noCovariate > 0 {
			line += fmt.Sprintf(", %s without a covariate", num.Count(noCovariate))
		}
		s = append(s, line+".")
	}
	return s
}

// Later names what the protocol plans and this version does not carry out, where it
// changes no number that is reported.
func Later(p *protocol.Protocol) []string {
	var what []string
	if p.Analysis.DoseResponse != nil {
		what = append(what, "the dose-response models")
	}
	if p.Analysis.RandomizationTest > 0 && p.Given("analysis.randomization_test") {
		what = append(what, fmt.Sprintf("the randomization test with %s draws", num.Count(p.Analysis.RandomizationTest)))
	}
	if len(what) == 0 {
		return nil
	}
	return []string{fmt.Sprintf("The protocol also plans %s; this version of the program does not carry them out, and no number here rests on them.", And(what))}
}

// Welfare opens the section on animals, or says that there are none.
func Welfare(p *protocol.Protocol) []string {
	if p.Animals == nil && p.Welfare == nil {
		return []string{"No animals in this trial, as far as the protocol says."}
	}
	if p.Welfare == nil {
		return []string{"The protocol says nothing of the animals’ welfare. A committee will ask for humane endpoints, monitoring, and how pain and distress are kept small."}
	}
	if len(p.Welfare.HumaneEndpoints) == 0 {
		return []string{"The protocol states no humane endpoints."}
	}
	return []string{"An animal that meets one of these humane endpoints leaves the trial and is treated, whatever that does to the data:"}
}

// Caution is the deference that closes every word on welfare.
func Caution(p *protocol.Protocol) string {
	if p.Animals == nil && p.Welfare == nil {
		return "Local codes for safety at work and for the handling of plants, soils and chemicals hold whatever this report says."
	}
	return "This report approves nothing. It prints what the protocol states, beside published limits where there are some; whether that is enough is for the ethics committee, the attending veterinarian and the law of the place to say, and their word goes before any plan."
}

// Provenance says what the report was made of and how to check it.
func Provenance(rs *result.Results, goVersion, arch string) []string {
	return []string{
		fmt.Sprintf("Made by %s %s (%s, %s). The report is a function of the files below alone: the same files give the same bytes with the same program.", rs.Program.Name, rs.Program.Version, goVersion, arch),
		"All of them ride inside this report, in the PDF as attachments and in the HTML page as downloads. To check it, take them out into an empty folder and run: penwright report on that folder; compare results.json and the pages.",
	}
}

// Limits says what the program is not.
func Limits() []string {
	return []string{"That the report agrees with itself can be checked by anybody; that it is the report, and who wrote what when, only a signature or a fingerprint kept elsewhere can prove. The program has no access control and gives no legal signature; dates in the protocol are its author’s word."}
}
