package prose

import (
	"strings"
	"unicode"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/welfare"
)

// evidence is a trial that a guideline is held to.
type evidence struct {
	t    *trial.Trial
	p    *protocol.Protocol
	rs   *result.Results
	plan bool
}

// value is what the protocol states under a key. Of names the element of a list; a number
// is adequate as it is; what is unseen stands in the report in other words.
type value struct {
	of, text       string
	number, unseen bool
}

// stated gives what the protocol states under a textual key: one value, or one for each
// element of a repeated table. It knows every key that answers by itself.
func (v *evidence) stated(key string) (values []value, known bool) {
	p := v.p
	one := func(s string) ([]value, bool) { return []value{{text: s}}, true }
	list := func(s []string) ([]value, bool) { return one(strings.Join(s, "; ")) }
	amount := func(q *protocol.Quantity) ([]value, bool) {
		if q == nil {
			return nil, true
		}
		return []value{{text: QuantityText(q), number: true}}, true
	}
	switch table, name, _ := strings.Cut(key, "."); table {
	case "trial":
		return one(map[string]string{
			"background": p.Trial.Background.Body, "species_rationale": p.Trial.SpeciesRationale.Body, "objective": p.Trial.Objective.Body,
			"hypotheses": strings.Join(p.Trial.Hypotheses, "; "), "site": p.Trial.Site, "registration": p.Trial.Registration,
			"funding": p.Trial.Funding, "interests": p.Trial.Interests, "data_access": p.Trial.DataAccess,
		}[name])
	case "report":
		place := strings.TrimPrefix(name, "narrative.")
		for _, n := range p.Report.Narrative {
			if n.Place == place {
				return one(literal(p.Texts[n.File]))
			}
		}
		return nil, true
	case "approval":
		if p.Approval == nil {
			return nil, true
		}
		return one(p.Approval.Body)
	case "animals":
		a := p.Animals
		if a == nil {
			return nil, true
		}
		switch name {
		case "age":
			return amount(a.Age)
		case "mass":
			return amount(a.Mass)
		case "acclimatization":
			return amount(a.Acclimatization)
		}
		return one(map[string]string{"species": a.Species, "breed": a.Breed, "sex": a.Sex, "source": a.Source, "health": a.Health, "genotype": a.Genotype, "previous_use": a.PreviousUse}[name])
	case "material":
		if p.Material == nil {
			return nil, true
		}
		m := p.Material
		return one(map[string]string{"crop": m.Crop, "variety": m.Variety, "seed_rate": m.SeedRate, "source": m.Source}[name])
	case "site":
		if p.Site == nil {
			return nil, true
		}
		s := p.Site
		return one(map[string]string{"name": s.Name, "soil": s.Soil, "season": s.Season, "previous_crop": s.PreviousCrop, "weather": s.Weather}[name])
	case "plot":
		if p.Plot == nil {
			return nil, true
		}
		return amount(map[string]*protocol.Quantity{"length": p.Plot.Length, "width": p.Plot.Width, "net_area": p.Plot.NetArea, "border": p.Plot.Border}[name])
	case "eligibility":
		return list(map[string][]string{"include": p.Eligibility.Include, "exclude": p.Eligibility.Exclude, "exclusion_rules": p.Eligibility.ExclusionRules}[name])
	case "housing":
		h := p.Housing
		if h == nil {
			return nil, true
		}
		switch name {
		case "group_size":
			if h.GroupSize < 1 {
				return nil, true
			}
			return []value{{text: num.Count(h.GroupSize), number: true}}, true
		case "floor_area":
			return amount(h.FloorArea)
		case "temperature":
			return amount(h.Temperature)
		}
		return one(map[string]string{"enrichment": h.Enrichment, "feed": h.Feed, "water": h.Water, "lighting": h.Lighting, "bedding": h.Bedding}[name])
	case "welfare":
		w := p.Welfare
		if w == nil {
			return nil, true
		}
		switch name {
		case "refinement":
			return one(w.Refinement.Body)
		case "rescue":
			return one(w.Rescue.Body)
		case "humane_endpoints":
			return list(w.HumaneEndpoints)
		case "monitoring.times_per_day":
			if w.Monitoring.TimesPerDay <= 0 {
				return nil, true
			}
			return []value{{number: true, unseen: true}}, true
		}
		for i := range w.Procedures {
			x := &w.Procedures[i]
			text := map[string]string{"procedure.how": x.How, "procedure.where": x.Where, "procedure.why": x.Why}[name]
			values = append(values, value{of: procedureName(x), text: text})
		}
		return values, true
	case "blinding":
		if p.Blinding == nil {
			return nil, true
		}
		b := p.Blinding
		return one(map[string]string{"allocation": b.Allocation, "conduct": b.Conduct, "assessment": b.Assessment, "analysis": b.Analysis}[name])
	case "sample_size":
		if p.SampleSize == nil {
			return nil, true
		}
		return one(p.SampleSize.Source)
	case "response":
		for i := range p.Responses {
			r := &p.Responses[i]
			values = append(values, value{of: ResponseLabelText(r), text: map[string]string{"how": r.How, "instrument": r.Instrument}[name]})
		}
		return values, true
	case "analysis":
		return one(p.Analysis.Assumptions)
	}
	return nil, false
}

// procedureName is what a procedure is called.
func procedureName(x *protocol.Procedure) string {
	if x.Name != "" {
		return x.Name
	}
	return x.Kind
}

// literal is the longest run of a template without actions, which a report prints as it
// is written.
func literal(s string) string {
	best := ""
	for s != "" {
		run, rest, _ := strings.Cut(s, "{{")
		if len(run) > len(best) {
			best = run
		}
		_, s, _ = strings.Cut(rest, "}}")
	}
	return best
}

// animalWords are sets of words of which a text on the animals must hold one each:
// species, breed, sex.
func (v *evidence) animalWords() [][]string {
	if v.p.Animals == nil {
		return [][]string{{"animals.species"}} // of which no text speaks
	}
	a := v.p.Animals
	species := welfare.SpeciesWords(a.Species)
	if species == nil {
		species = []string{strings.ToLower(a.Species)}
	}
	out := [][]string{species}
	for _, s := range []string{a.Breed, a.Sex} {
		words := strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return r == ',' || r == ';' || r == '/' })
		for i := range words {
			words[i] = strings.TrimSuffix(strings.TrimSpace(words[i]), "s")
		}
		if len(words) > 0 {
			out = append(out, words)
		}
	}
	return out
}

func letter(r rune) bool { return unicode.IsLetter(r) }

func digit(r rune) bool { return unicode.IsDigit(r) }

// different counts the different signs of a text in scripts that are written without
// spaces.
func different(s string) int {
	seen := map[rune]bool{}
	for _, r := range s {
		if unicode.In(r, unicode.Han, unicode.Hiragana, unicode.Katakana, unicode.Thai, unicode.Lao, unicode.Khmer, unicode.Myanmar) {
			seen[r] = true
		}
	}
	return len(seen)
}

// oneSign tells whether a word is one sign, or one sign repeated.
func oneSign(w string) bool {
	first := []rune(w)[0]
	return strings.Trim(w, string(first)) == "" && !unicode.IsDigit(first)
}
