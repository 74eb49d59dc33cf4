package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/result"
	"penwright/analysis/trial"
)

// Item is one item of the reporting guideline: what it asks for, in our words, and how
// the report answers it. Section is the heading or table that does, empty when none.
type Item struct {
	Number  string
	Asks    string
	Answer  string
	Section string
	Given   bool
}

// Guideline goes through the items of ARRIVE 2.0 (Percie du Sert and others, PLoS
// Biology 18(7): e3000410, 2020; CC BY 4.0; numbers official, words ours) and tells for
// each whether the protocol or the results answer it: a text of three words at least,
// or a part that is computed.
func Guideline(t *trial.Trial, rs *result.Results) []Item {
	p := t.Protocol
	said := func(texts ...string) bool {
		for _, s := range texts {
			if len(strings.Fields(s)) >= 3 {
				return true
			}
		}
		return false
	}
	some := func(texts ...string) bool {
		for _, s := range texts {
			if strings.TrimSpace(s) != "" && strings.TrimSpace(s) != "…" {
				return true
			}
		}
		return false
	}
	control := false
	for _, f := range p.Factors {
		control = control || len(f.Control) > 0
	}
	for _, x := range p.Treatments {
		control = control || x.Control
	}
	primary := false
	defined := len(p.Responses) > 0
	for _, r := range p.Responses {
		primary = primary || r.Role == "primary"
		defined = defined && (said(r.How) || some(r.Instrument) || some(r.Unit))
	}
	data := t.Table != nil
	intervals, diagnostics := false, false
	for i := range rs.Responses {
		for _, c := range rs.Responses[i].Comparisons {
			intervals = intervals || c.Lower.Known()
		}
		for _, c := range rs.Responses[i].Contrasts {
			intervals = intervals || c.Lower.Known()
		}
		for _, m := range rs.Responses[i].Means {
			intervals = intervals || m.Lower.Known()
		}
		diagnostics = diagnostics || len(rs.Responses[i].Diagnostics) > 0
	}
	a := p.Animals
	w := p.Welfare
	h := p.Housing
	basis := false
	for _, u := range p.Units {
		basis = basis || u.Basis != ""
	}
	procedures := w != nil && len(w.Procedures) > 0
	narrative := func(place string) bool {
		for _, n := range p.Report.Narrative {
			if n.Place == place {
				return true
			}
		}
		return false
	}
	var out []Item
	item := func(number, asks string, given bool, section, key string) {
		x := Item{Number: number, Asks: asks, Given: given}
		if given {
			x.Answer, x.Section = "Answered", section
		} else {
			x.Answer = "Not stated; would be answered by " + key
		}
		out = append(out, x)
	}
	item("1a", "groups compared, with a control or why none", control, "units-and-treatments", "factor.control")
	item("1b", "the experimental unit", true, "units-and-treatments", "unit.receives")
	item("2a", "number of experimental units in each group and in all, and of animals", true, "skeleton-analysis", "unit.count")
	item("2b", "how the number was chosen", p.SampleSize != nil && (some(p.SampleSize.Source) || p.SampleSize.Basis != ""), "number-of-units", "sample_size")
	item("3a", "criteria for including and excluding, set beforehand", len(p.Eligibility.Include)+len(p.Eligibility.Exclude)+len(p.Eligibility.ExclusionRules) > 0, "", "eligibility")
	item("3b", "exclusions of each group with reasons, or none", data, "conduct", "exclusion")
	item("3c", "exact numbers in each analysis", data, "results", "data")
	item("4a", "whether and how treatments were randomized", t.Allotment != nil && (len(t.Allotment.Draws) > 0 || said(p.Randomization.Method)), "randomization-record", "the command draw, or randomization.method")
	item("4b", "how confounders were handled", basis || len(p.Randomization.BalanceOn) > 0, "units-and-treatments", "unit.basis")
	item("5", "who knew the allotment at each stage", p.Blinding != nil, "randomization-record", "blinding")
	item("6a", "every outcome defined", defined, "", "response.how, response.unit")
	item("6b", "the primary outcome", primary, "", "response.role = \"primary\"")
	item("7a", "statistical method and software of each analysis", data, "statistical-methods", "data")
	item("7b", "how assumptions were checked and what was done", diagnostics || said(p.Analysis.Assumptions), "", "analysis.assumptions")
	if a != nil {
		item("8a", "species, strain or breed, sex, age, body mass", some(a.Species) && some(a.Breed) && some(a.Sex) && (a.Age != nil || a.Mass != nil), "", "animals.breed, animals.sex, animals.age, animals.mass")
		item("8b", "source, health, genotype, earlier procedures", some(a.Source) && (some(a.Health) || some(a.Genotype)), "", "animals.source, animals.health")
	} else {
		item("8a", "species, strain or breed, sex, age, body mass", p.Material != nil, "", "animals, or material where there are none")
		item("8b", "source, health, genotype, earlier procedures", p.Material != nil && some(p.Material.Source), "", "animals.source")
	}
	item("9a", "what was done, how and with what", procedures || len(p.Items) > 0 || len(p.Inputs) > 0, "", "welfare.procedure, item")
	item("9b", "when and how often", p.Trial.Start.Year > 0, "", "trial.start")
	item("9c", "where, with acclimatization", some(p.Trial.Site) || p.Site != nil, "", "trial.site")
	item("9d", "why", said(p.Trial.Background.Body) || procedures, "", "trial.background, welfare.procedure.why")
	item("10a", "summary of each group with spread", data, "results", "data")
	item("10b", "effect sizes with intervals", intervals, "results", "data")
	item("11", "abstract", narrative("abstract") || narrative("summary"), "", "report.narrative")
	item("12a", "background", said(p.Trial.Background.Body), "design-rationale", "trial.background")
	item("12b", "why this species and model", said(p.Trial.SpeciesRationale.Body), "design-rationale", "trial.species_rationale")
	item("13", "objectives and hypotheses", said(p.Trial.Objective.Body), "design-rationale", "trial.objective")
	item("14", "ethics committee and numbers, or why none", p.Approval != nil && some(p.Approval.Body), "", "approval")
	item("15", "housing and husbandry", h != nil, "", "housing")
	item("16a", "steps against pain and distress", w != nil && (said(w.Refinement.Body) || said(w.Rescue.Body)), "welfare-and-caution-notes", "welfare.refinement")
	item("16b", "adverse events", data, "conduct", "event")
	item("16c", "humane endpoints, signs and frequency of monitoring", w != nil && len(w.HumaneEndpoints) > 0 && w.Monitoring.TimesPerDay > 0, "welfare-and-caution-notes", "welfare.humane_endpoints, welfare.monitoring")
	item("17a", "interpretation", narrative("discussion"), "", "report.narrative")
	item("17b", "limits and bias", narrative("discussion"), "", "report.narrative")
	item("18", "generality", narrative("discussion"), "", "report.narrative")
	item("19", "protocol prepared beforehand and where registered", some(p.Trial.Registration), "", "trial.registration")
	item("20", "access to data", some(p.Trial.DataAccess), "", "trial.data_access")
	item("21a", "interests", some(p.Trial.Interests), "", "trial.interests")
	item("21b", "funders and their part", some(p.Trial.Funding), "", "trial.funding")
	return out
}

// Coverage sums up how many items are answered.
func Coverage(items []Item) []string {
	n := 0
	for _, x := range items {
		if x.Given {
			n++
		}
	}
	return []string{fmt.Sprintf("Of %d items of the ARRIVE 2.0 guideline %d are answered. An item that is not stated is a gap in the report, no error of the trial; interpretation and generality are the author’s to write.", len(items), n)}
}
