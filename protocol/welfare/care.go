package welfare

import (
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"penwright/protocol"
)

func dayNumber(d protocol.Date) int64 {
	return time.Date(d.Year, time.Month(d.Month), d.Day, 0, 0, 0, 0, time.UTC).Unix() / 86400
}

// parsed reads a number that this package has printed.
func parsed(s string) float64 {
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return 0
	}
	return x
}

// plus is a date some years later.
func plus(d protocol.Date, years float64) protocol.Date {
	t := time.Date(d.Year+int(years), time.Month(d.Month), d.Day, 0, 0, 0, 0, time.UTC)
	return protocol.Date{Year: t.Year(), Month: int(t.Month()), Day: t.Day()}
}

var applyFrom = regexp.MustCompile(`applies from (\d{4})-(\d{2})-(\d{2})`)

// later turns a warning by a limit that applies only after the trial into a note.
func (c *checker) later(f *Finding) {
	last := c.p.Trial.End
	if last.IsZero() {
		last = c.p.Trial.Start
	}
	for _, q := range f.Limits {
		m := applyFrom.FindStringSubmatch(q.Note)
		if !q.Applied || m == nil || f.Level != Warning {
			continue
		}
		from := protocol.Date{Year: int(parsed(m[1])), Month: int(parsed(m[2])), Day: int(parsed(m[3]))}
		if last.Before(from) {
			f.Level, f.Text = Note, f.Text+"; the limit applies from "+from.String()+", after this trial"
		}
	}
}

// approval looks for the committee's decision and how long it holds.
func (c *checker) approval() {
	a := c.p.Approval
	rules := []Rule{rule("approval"), rule("approval-five")}
	switch {
	case a == nil || a.Body == "" && a.Number == "" && a.Date.IsZero():
		c.add(Finding{Code: Approval, Level: Warning, About: "approval", Key: "approval", Text: "no approval is stated for work on animals", Hint: "give body, number and date under [approval], or the reason why none is needed", Rules: rules})
		return
	case a.Number == "":
		c.add(Finding{Code: Approval, Level: Warning, About: "approval", Key: "approval", Stated: a.Body, Text: "the approval has no number", Hint: "give its number, or the reason why none is needed", Rules: rules})
	default:
		c.add(Finding{Code: Approval, About: "approval", Key: "approval.number", Stated: strings.Trim(a.Body+", "+a.Number, ", "), Text: "an approval is stated; whether it covers the trial is not for this program to say", Rules: rules})
	}
	if !a.Date.IsZero() && !a.Expires.IsZero() {
		for _, l := range c.pick("approval", "duration of an authorisation") {
			q := Quoted{Limit: l, Stated: a.Date.String() + " to " + a.Expires.String(), Met: plus(a.Date, l.value).Compare(a.Expires) >= 0, Applied: true}
			f := Finding{Code: Approval, About: "duration of the approval", Key: "approval.expires", Stated: q.Stated, Limits: []Quoted{q}, Text: "the approval lasts no longer than an authorisation may"}
			if !q.Met {
				f.Level, f.Text, f.Hint = Warning, "the approval lasts longer than "+l.Printed+" years, the limit of "+l.Where(), "look at the dates"
			}
			c.add(f)
		}
	}
}

// grades orders the classes of severity. Non-recovery stands apart.
var grades = map[string]int{"none": 0, "mild": 1, "moderate": 2, "severe": 3}

// severity compares the class foreseen with indicative triggers and with the class
// observed.
func (c *checker) severity() {
	said, observed := "", ""
	if a := c.p.Approval; a != nil {
		said, observed = a.Severity, a.SeverityObserved
	}
	rules := []Rule{rule("classes"), rule("class-every")}
	worst, why := 0, ""
	for i := range c.welfare.Procedures {
		grade, r := c.trigger(&c.welfare.Procedures[i])
		if r == "" {
			continue
		}
		x := rule(r)
		rules = append(rules, x)
		if g := grades[grade]; g > worst {
			worst, why = g, title(&c.welfare.Procedures[i])
		}
	}
	rules = distinct(rules)
	grade := []string{"none", "mild", "moderate", "severe"}[worst]
	f := Finding{Code: Severity, About: "severity", Key: "approval.severity", Stated: said, Rules: rules}
	switch {
	case said == "":
		f.Level, f.Text, f.Hint = Note, "no class of severity is stated", "give approval.severity: the worst effect likely for one animal after refinement"
		if worst > 0 {
			f.Level = Warning
			f.Text += fmt.Sprintf("; %s is an indicative trigger for %s", why, grade)
		}
	case said == "non-recovery" || grades[said] >= worst:
		f.Text = "the class stated is not below the indicative triggers"
		if worst > 0 {
			f.Text += fmt.Sprintf("; the highest is %s, by %s", grade, why)
		}
	default:
		f.Level = Warning
		f.Text = fmt.Sprintf("the class stated is %s, and %s is an indicative trigger for %s", said, why, grade)
		f.Hint = "grade the worst effect likely for one animal; a trigger is never an automatic class"
	}
	c.add(f)
	if observed != "" && said != "" && said != "non-recovery" && observed != "non-recovery" && grades[observed] > grades[said] {
		c.add(Finding{Code: Severity, Level: Warning, About: "severity observed", Key: "approval.severity_observed", Stated: observed, Text: fmt.Sprintf("the severity observed, %s, is above the one foreseen, %s", observed, said), Hint: "tell the committee and the veterinarian, and say what was done", Rules: []Rule{rule("class-every")}})
	}
}

func distinct(rules []Rule) []Rule {
	var out []Rule
	for _, r := range rules {
		if !slices.ContainsFunc(out, func(x Rule) bool { return x.ID == r.ID }) {
			out = append(out, r)
		}
	}
	return out
}

// principles asks for the three Rs.
func (c *checker) principles() {
	var missing []string
	for _, x := range []struct{ name, text string }{{"replacement", c.welfare.Replacement.Body}, {"reduction", c.welfare.Reduction.Body}, {"refinement", c.welfare.Refinement.Body}} {
		if strings.TrimSpace(x.text) == "" {
			missing = append(missing, x.name)
		}
	}
	f := Finding{Code: ThreeRs, About: "replacement, reduction, refinement", Key: "welfare", Text: "all three are stated"}
	if len(missing) > 0 {
		f.Level, f.Text, f.Hint = Note, "nothing is said of "+join(missing), "say why animals, why so many, and how harm is kept small (Russell and Burch 1959)"
	}
	c.add(f)
}

var illuminance = regexp.MustCompile(`(\d+(?:\.\d+)?)\s*(?:lx|lux)\b`)

// environment looks at temperature, light, enrichment, feed and water.
func (c *checker) environment() {
	h := &c.housing
	if t := h.Temperature; t != nil {
		c.temperature(t)
	}
	if limits := c.pick("light", ""); len(limits) > 0 && c.welfare.Aim != "laboratory" {
		m := illuminance.FindStringSubmatch(h.Lighting)
		if m == nil {
			c.uncompared("light", "housing.lighting", h.Lighting, "no illuminance in lx is stated, so that light is not compared: "+limits[0].Words(), "")
		} else {
			x := parsed(m[1])
			var q []Quoted
			for _, l := range limits {
				q = append(q, Quoted{Limit: l, Stated: digits(x) + shown("lx"), Met: l.met(x)})
			}
			best, _ := strictest(q)
			f := Finding{Code: Housing, About: "light", Key: "housing.lighting", Stated: h.Lighting, Limits: q, Text: "the light keeps to the limit; its hours are to be seen to by hand"}
			if !q[best].Met {
				f.Level, f.Text, f.Hint = Warning, fmt.Sprintf("light of %s is less than %s, the limit of %s", q[best].Stated, q[best].Printed+shown("lx"), q[best].Where()), "give more light, or say why less is needed"
			}
			c.add(f)
		}
	}
	if strings.TrimSpace(h.Enrichment) == "" {
		c.add(Finding{Code: Housing, Level: Note, About: "enrichment", Key: "housing.enrichment", Text: "no enrichment is stated", Hint: "say what the animals have to do", Rules: []Rule{rule("enrichment")}})
	}
	if !c.animal.is("fish") || c.animal == nil {
		water := []Rule{rule("water"), rule("water-us")}
		switch restricted := says(h.Water, "restricted", "restriction", "withheld", "limited") && !negated(h.Water); {
		case strings.TrimSpace(h.Water) == "":
			c.add(Finding{Code: Water, Level: Note, About: "water", Key: "housing.water", Text: "how the animals get water is not stated", Hint: "say how", Rules: water})
		case restricted && !slices.ContainsFunc(c.welfare.Procedures, func(x protocol.Procedure) bool { return x.Kind == "water restriction" && x.Why != "" }):
			c.add(Finding{Code: Water, Level: Warning, About: "water", Key: "housing.water", Stated: h.Water, Text: "water is not free and no procedure says why", Hint: `give water at all times, or describe a [[welfare.procedure]] of kind "water restriction" with why`, Rules: water})
		default:
			c.add(Finding{Code: Water, About: "water", Key: "housing.water", Stated: h.Water, Text: "water is stated", Rules: water})
		}
	} else {
		c.add(Finding{Code: Fish, Level: Note, About: "water for fish", Key: "housing", Stated: strings.Trim(h.Water+"; "+amount(h.Temperature), "; "), Text: "the quality of water is not compared: the protocol has no keys for it", Rules: []Rule{rule("fish")}, Limits: quotedOnly(c.pick("water", ""))})
	}
	if says(h.Feed, "restricted", "restriction", "limited", "pair fed", "limit fed") && !negated(h.Feed) && !slices.ContainsFunc(c.welfare.Procedures, func(x protocol.Procedure) bool { return x.Kind == "fasting" }) {
		c.add(Finding{Code: Fasting, Level: Note, About: "restricted feed", Key: "housing.feed", Stated: h.Feed, Text: "feed is restricted: say why, and how mass and condition are followed"})
	}
	if c.animals.Acclimatization == nil {
		c.add(Finding{Code: Acclimatization, Level: Note, About: "acclimatization", Key: "animals.acclimatization", Text: "no time of acclimatization is stated", Hint: "give acclimatization", Rules: []Rule{rule("acclimatize")}})
	}
}

func quotedOnly(limits []Limit) []Quoted {
	var q []Quoted
	for _, l := range limits {
		q = append(q, Quoted{Limit: l})
	}
	return q
}

func (c *checker) temperature(t *protocol.Quantity) {
	low, high, ok := celsius(t)
	if !ok {
		c.uncompared("temperature", "housing.temperature", amount(t), "this is not read as a temperature", "give it in Cel")
		return
	}
	limits := c.pick("temperature", "temperature")
	if len(limits) == 0 {
		c.uncompared("temperature", "housing.temperature", amount(t), fmt.Sprintf("the tables have no temperatures for %s", c.name()), "look them up in the code of the place for the species and age")
		return
	}
	f := Finding{Code: Temperature, About: "temperature", Key: "housing.temperature", Stated: amount(t), Text: "the temperature keeps to the limits"}
	for _, l := range limits {
		x := low
		if l.most {
			x = high
		}
		q := Quoted{Limit: l, Stated: about(x) + shown("Cel"), Met: l.met(x), Applied: true}
		f.Limits = append(f.Limits, q)
		if !q.Met {
			f.Level, f.Text, f.Hint = Warning, fmt.Sprintf("%s is outside the limit of %s: %s", q.Stated, l.Where(), l.Words()), "change the temperature, or say to the committee why"
		}
	}
	c.later(&f)
	c.add(f)
}

// young quotes what holds for calves and piglets.
func (c *checker) young() {
	if slices.Contains(c.classes, "calf") {
		c.add(Finding{Code: Young, Level: Note, About: "calves", Key: "animals", Text: "care of calves is not compared item by item", Rules: []Rule{rule("calf-care")}, Limits: quotedOnly(c.pick("fibre", ""))})
	}
	youngest, _, ok := in(c.animals.Age, "time")
	if c.animals.Age != nil && !ok {
		c.uncompared("age", "animals.age", amount(c.animals.Age), "this is not read as an age", "give it in d, wk, mo or a")
	}
	limits := c.pick("weaning", "age at weaning")
	if ok && len(limits) > 0 && youngest < limits[0].value && c.welfare.Aim != "laboratory" {
		q := append([]Quoted{{Limit: limits[0], Stated: about(youngest) + shown("d"), Met: false}}, quotedOnly(c.pick("weaning", "age at weaning in specialised housing"))...)
		c.add(Finding{Code: Young, Level: Note, About: "weaning", Key: "animals.age", Stated: amount(c.animals.Age), Limits: q, Text: "these piglets are younger than the least age at weaning; if they are weaned, say where and by which exception", Rules: []Rule{rule("pig-care")}})
	}
}

// monitoring compares how often the animals are looked at.
func (c *checker) monitoring() {
	x := c.welfare.Monitoring.TimesPerDay
	rules := []Rule{rule("daily")}
	if slices.ContainsFunc(c.welfare.Procedures, func(p protocol.Procedure) bool {
		return slices.Contains([]string{"injection", "gavage", "challenge", "surgery"}, p.Kind)
	}) {
		rules = append(rules, rule("after-dosing"))
	}
	if x == 0 {
		c.add(Finding{Code: Monitoring, Level: Warning, About: "monitoring", Key: "welfare.monitoring", Text: "how often the animals are looked at is not stated", Hint: "give monitoring = { times_per_day = …, by = … }", Rules: rules})
		return
	}
	var q []Quoted
	for _, l := range c.pick("monitoring", "looks at the animals") {
		if l.Aim == "" || c.welfare.Aim != "laboratory" {
			q = append(q, Quoted{Limit: l, Stated: digits(x) + shown("/d"), Met: l.met(x)})
		}
	}
	best, _ := strictest(q)
	f := Finding{Code: Monitoring, About: "monitoring", Key: "welfare.monitoring", Stated: digits(x) + shown("/d"), Limits: q, Rules: rules,
		Text: fmt.Sprintf("animals are looked at as often as the strictest limit asks, %s", q[best].Printed+shown("/d"))}
	if !q[best].Met {
		f.Level, f.Hint = Warning, "look at the animals more often, and oftener near endpoints"
		f.Text = fmt.Sprintf("animals are looked at %s, less than %s, the limit of %s", digits(x)+shown("/d"), q[best].Printed+shown("/d"), q[best].Where())
	}
	c.add(f)
}

var percent = regexp.MustCompile(`(\d+(?:\.\d+)?)\s*(?:%|per ?cent)`)

// harmful are the kinds of procedure after which an animal may have to leave the trial.
var harmful = []string{"surgery", "challenge", "deficient diet", "fasting", "water restriction", "injection", "gavage", "blood sample"}

// deadly tells whether an endpoint is death itself.
func deadly(e string) bool {
	return says(e, "death", "dead", "dies", "die", "mortality") && !negated(e)
}

// endpoints looks at the humane endpoints and at the loss of mass that they allow.
func (c *checker) endpoints() {
	ends := c.welfare.HumaneEndpoints
	rules := []Rule{rule("endpoints"), rule("death")}
	if len(ends) == 0 {
		f := Finding{Code: Endpoints, Level: Note, About: "humane endpoints", Key: "welfare.humane_endpoints", Text: "no humane endpoints are stated", Hint: "give observable signs, thresholds, who acts and how soon; or say “none” and why", Rules: rules}
		grave := c.p.Approval != nil && grades[c.p.Approval.Severity] >= grades["moderate"]
		for _, p := range c.welfare.Procedures {
			if slices.Contains(harmful, p.Kind) {
				grave = true
			}
		}
		if grave {
			f.Level, f.Text = Warning, "no humane endpoints are stated although the procedures or the class of severity call for them"
		}
		c.add(f)
		return
	}
	c.add(Finding{Code: Endpoints, About: "humane endpoints", Key: "welfare.humane_endpoints", Stated: fmt.Sprintf("%d stated", len(ends)), Text: "humane endpoints are stated; whether they are early enough is for the veterinarian", Rules: rules})
	tumour := []string{c.p.Trial.Title, c.p.Trial.Objective.Body}
	for _, p := range c.welfare.Procedures {
		tumour = append(tumour, p.Name, p.How)
	}
	bearing := says(strings.Join(append(tumour, ends...), " ; "), "tumour", "tumours", "tumor", "tumors", "xenograft", "xenografts")
	compared := false
	for i, e := range ends {
		key := fmt.Sprintf("welfare.humane_endpoints[%d]", i)
		if deadly(e) {
			c.add(Finding{Code: Endpoints, Level: Warning, About: "death as an endpoint", Key: key, Stated: e, Text: "an endpoint speaks of death", Hint: "choose earlier signs; death is avoided as an endpoint", Rules: []Rule{rule("death")}})
		}
		if !says(e, "mass", "weight", "bodyweight") || !says(e, "loss", "loses", "lose", "lost", "losing", "decline", "drop", "decrease", "reduction") {
			continue
		}
		m := percent.FindAllStringSubmatch(e, -1)
		if m == nil {
			continue
		}
		x := 0.0
		for _, n := range m {
			x = max(x, parsed(n[1]))
		}
		compared = true
		var q []Quoted
		for _, l := range loaded().limits {
			if l.Topic == "mass loss" && c.animal.is(l.Species) && (l.Class == "" || l.Class == "tumour" && bearing) {
				q = append(q, Quoted{Limit: l, Stated: digits(x) + shown("%"), Met: l.met(x)})
			}
		}
		best, _ := strictest(q)
		f := Finding{Code: MassLoss, About: "loss of body mass", Key: key, Stated: e, Limits: q, Text: fmt.Sprintf("the endpoint comes no later than the strictest limit that applies, %s", q[best].Printed+shown("%"))}
		if !q[best].Met {
			f.Level, f.Hint = Warning, "set the endpoint earlier, or give the veterinarian’s reason; judge growing animals against controls"
			f.Text = fmt.Sprintf("the endpoint allows a loss of %s, more than %s, the limit of %s", digits(x)+shown("%"), q[best].Printed+shown("%"), q[best].Where())
		}
		c.add(f)
	}
	if !compared {
		c.add(Finding{Code: MassLoss, Level: Note, About: "loss of body mass", Key: "welfare.humane_endpoints", Text: "no endpoint states a loss of body mass in percent", Limits: quotedOnly(slices.DeleteFunc(c.pick("mass loss", ""), func(l Limit) bool { return l.Class == "tumour" && !bearing }))})
	}
}

// previous looks at earlier use.
func (c *checker) previous() {
	u := strings.TrimSpace(c.animals.PreviousUse)
	if saysNone(u) || says(u, "naive", "not used", "unused", "never used") {
		return
	}
	f := Finding{Code: Reuse, Level: Note, About: "reuse", Key: "animals.previous_use", Stated: u, Text: "the animals were used before: say how severe that was and what the veterinarian advised", Rules: []Rule{rule("reuse")}}
	if a := c.p.Approval; a != nil && a.Severity == "severe" {
		f.Level, f.Text, f.Hint = Warning, "animals that were used before are put to severe procedures", "use animals that were not used before"
	}
	c.add(f)
}

// staff asks for the safety of people.
func (c *checker) staff() {
	f := Finding{Code: Staff, About: "safety of staff", Key: "welfare.staff_safety", Stated: strings.Join(c.welfare.StaffSafety, "; "), Text: "hazards to staff are stated"}
	if len(c.welfare.StaffSafety) == 0 {
		f.Level, f.Text, f.Hint = Note, "nothing is said of the safety of staff", "name hazards (zoonoses, sharps, dust, chemicals, machinery), protection, and where accidents are reported"
		if slices.ContainsFunc(c.welfare.Procedures, func(x protocol.Procedure) bool { return x.Kind == "challenge" }) {
			f.Level, f.Text = Warning, "animals are challenged and nothing is said of the safety of staff"
		}
	}
	c.add(f)
}

// residues looks at the food chain.
func (c *checker) residues() {
	food := c.animals.FoodChain
	stated := strings.TrimSpace(c.welfare.Residues)
	if c.animal == nil || !c.animal.is("meat|fish") {
		if food != nil && *food && stated == "" {
			c.add(Finding{Code: Residues, Level: Warning, About: "food chain", Key: "welfare.residues", Text: "the animals enter the food chain and nothing is said of residues", Hint: "state the withdrawal period of each product and who set it", Rules: []Rule{rule("food-chain")}})
		}
		return
	}
	if food == nil {
		if c.animal.is("farm") && c.welfare.Aim != "laboratory" {
			c.add(Finding{Code: Residues, Level: Note, About: "food chain", Key: "animals.food_chain", Text: "whether animals or produce enter the food chain is not stated", Hint: "write food_chain = true or false", Rules: []Rule{rule("food-chain")}})
		}
		return
	}
	if !*food {
		c.add(Finding{Code: Residues, About: "food chain", Key: "animals.food_chain", Stated: "no", Text: "neither animals nor produce enter the food chain", Rules: []Rule{rule("food-chain")}})
		return
	}
	f := Finding{Code: Residues, About: "food chain", Key: "welfare.residues", Stated: stated, Level: Note, Rules: []Rule{rule("food-chain"), rule("round-up"), rule("keeper")},
		Text: "the statement is printed and not compared: which period holds depends on each product’s authorisation"}
	for _, l := range loaded().limits {
		if l.Topic == "withdrawal" && c.animal.is(l.Species) {
			f.Limits = append(f.Limits, Quoted{Limit: l})
		}
	}
	if stated == "" {
		f.Level, f.Key = Warning, "animals.food_chain"
		f.Text, f.Hint = "the animals enter the food chain and nothing is said of residues", "state in welfare.residues the withdrawal period of each product, zero as well, and who set it"
	}
	if c.animal.is("fish") {
		if low, _, ok := celsius(c.housing.Temperature); ok && low > 0 {
			for i, q := range f.Limits {
				if q.Unit == "degree-days" {
					f.Limits[i].Stated = fmt.Sprintf("at %s that is %d%sd", about(low)+shown("Cel"), wholeDays(q.value, low), thin)
				}
			}
		}
	}
	c.add(f)
}

// wholeDays turns degree-days into days at a temperature, rounded up.
func wholeDays(degreeDays, celsius float64) int64 {
	x := degreeDays / celsius
	n := int64(min(x, 1e9))
	if float64(n) < x*(1-tolerance) {
		n++
	}
	return n
}

// ending looks at the fate of the animals and at killing. No method is named here.
func (c *checker) ending() {
	fate := strings.TrimSpace(c.welfare.Fate)
	if fate == "" {
		c.add(Finding{Code: Fate, Level: Note, About: "fate", Key: "welfare.fate", Text: "what becomes of the animals is not stated", Hint: "say whether they are killed, rehomed, returned or slaughtered, and who decides", Rules: []Rule{rule("fate")}})
	} else {
		c.add(Finding{Code: Fate, About: "fate", Key: "welfare.fate", Stated: fate, Text: "the fate of the animals is stated", Rules: []Rule{rule("fate")}})
	}
	stated := strings.TrimSpace(c.welfare.Euthanasia.Body)
	rules := []Rule{rule("killing"), rule("killing-eu")}
	if stated != "" {
		c.add(Finding{Code: Killing, Level: Note, About: "killing", Key: "welfare.euthanasia", Stated: stated, Text: "the statement is printed and not judged", Rules: rules})
		return
	}
	killed := []string{"killed", "kill", "killing", "euthanasia", "euthanised", "euthanized", "culled", "cull", "necropsy", "dissection", "dissected", "terminal", "exsanguination"}
	slaughter := []string{"slaughter", "slaughtered", "abattoir"}
	texts, keys := []string{fate}, []string{"welfare.fate"}
	for i, p := range c.welfare.Procedures {
		texts, keys = append(texts, p.Name+"; "+p.How+"; "+p.Why), append(keys, fmt.Sprintf("welfare.procedure[%d]", i))
	}
	for i, text := range texts {
		f := Finding{Code: Killing, Level: Warning, About: "killing", Key: keys[i], Stated: strings.Trim(text, "; "), Text: "animals are killed and nothing is said of how", Hint: "state method, operator and check of death in welfare.euthanasia; the documents quoted name methods, this program names none", Rules: rules}
		switch {
		case says(text, killed...) && negated(text):
			f.Level, f.Text, f.Hint = Note, "whether animals are killed is not read from this", "if they are, say how in welfare.euthanasia"
		case says(text, killed...):
		case says(text, slaughter...):
			f.Level, f.Text, f.Hint = Note, "animals are slaughtered; if the trial does that itself, it says how", "state it in welfare.euthanasia"
		default:
			continue
		}
		c.add(f)
		return
	}
}

// records compares how long papers are kept.
func (c *checker) records() {
	r := c.p.Records
	if r == nil || r.RetainUntil.IsZero() {
		c.add(Finding{Code: Records, Level: Note, About: "records", Key: "records.retain_until", Text: "how long records are kept is not stated", Hint: "give retain_until", Limits: quotedOnly(c.pick("records", ""))})
		return
	}
	f := Finding{Code: Records, About: "records", Key: "records.retain_until", Stated: r.RetainUntil.String(), Text: "records are kept as long as the limits ask"}
	for _, l := range c.pick("records", "") {
		from := c.p.Trial.End
		if l.Source == "ES" && c.p.Approval != nil {
			from = c.p.Approval.Expires
		}
		if l.Source == "R6" && (c.animals.FoodChain == nil || !*c.animals.FoodChain) {
			continue
		}
		if from.IsZero() {
			f.Limits = append(f.Limits, Quoted{Limit: l})
			continue
		}
		until := plus(from, l.value)
		q := Quoted{Limit: l, Stated: "kept to " + r.RetainUntil.String() + ", asked for to " + until.String(), Met: r.RetainUntil.Compare(until) >= 0, Applied: !l.shown}
		f.Limits = append(f.Limits, q)
		if !q.Met && !l.shown {
			f.Level, f.Hint = Warning, "keep them longer"
			f.Text = fmt.Sprintf("records are kept until %s, less than %s years after %s, the limit of %s", r.RetainUntil, l.Printed, from, l.Where())
		}
	}
	c.add(f)
}
