package welfare

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"penwright/protocol"
)

// title names a procedure in running text.
func title(p *protocol.Procedure) string {
	if p.Name != "" {
		return p.Name
	}
	return p.Kind
}

func isSingle(p protocol.Procedure) bool { return p.Kind == "single housing" }

// saysNone tells whether a text on pain relief is empty or says that there is none.
func saysNone(s string) bool {
	w := words(s)
	return len(w) == 0 || w[0] == "none" || w[0] == "no" || w[0] == "nil" || w[0] == "without" || strings.TrimSpace(s) == "-"
}

// negated tells whether a text denies something, so that its words cannot be taken for
// what they name.
func negated(s string) bool { return says(s, "no", "not", "none", "never", "without", "nothing") }

// procedures compares every procedure, in the order of the file.
func (c *checker) procedures() {
	for i := range c.welfare.Procedures {
		p := &c.welfare.Procedures[i]
		key := fmt.Sprintf("welfare.procedure[%d]", i)
		switch p.Kind {
		case "blood sample":
			c.blood(p, key)
		case "injection", "gavage":
			c.dose(p, key)
		case "fasting":
			c.fasting(p, key)
		case "water restriction":
			c.reasoned(p, key, Water, "water is withheld", []Rule{rule("water"), rule("water-us")}, nil)
		case "single housing":
			c.reasoned(p, key, Single, "animals are kept singly", []Rule{rule("groups"), rule("guide-single")}, nil)
		case "restraint":
			c.reasoned(p, key, Restraint, "animals are restrained", c.graded(p), quotedOnly(c.pick("restraint", "")))
		case "surgery":
			c.pain(p, key)
		case "marking":
			c.marking(p, key)
		case "transport":
			c.reasoned(p, key, Transport, "animals are transported", nil, nil)
		case "challenge":
			c.challenge(p, key, Challenge, "animals are challenged")
		case "deficient diet":
			c.challenge(p, key, Diet, "the diet does not meet the animals’ needs")
		}
	}
}

// reasoned asks for a reason and a duration.
func (c *checker) reasoned(p *protocol.Procedure, key, code, what string, rules []Rule, limits []Quoted) {
	f := Finding{Code: code, Level: Note, About: title(p), Key: key, Stated: strings.Trim(amount(p.Duration)+"; "+p.Why, "; "), Text: what + "; the reason is printed and not judged", Rules: rules, Limits: limits}
	var missing []string
	if strings.TrimSpace(p.Why) == "" {
		missing = append(missing, "why")
	}
	if p.Duration == nil {
		missing = append(missing, "for how long")
	} else if _, _, ok := in(p.Duration, "time"); !ok {
		missing = append(missing, "for how long in h or d")
	}
	if len(missing) > 0 {
		f.Text, f.Hint = what+" and the protocol does not say "+join(missing), "give why and duration"
		if missing[0] == "why" && code != Transport {
			f.Level = Warning
		}
	}
	c.add(f)
}

func (c *checker) graded(p *protocol.Procedure) []Rule {
	if _, r := c.trigger(p); r != "" {
		return []Rule{rule(r)}
	}
	return nil
}

// trigger gives the indicative class of severity of a procedure and the rule that says
// so; an empty rule where the tables say nothing of it.
func (c *checker) trigger(p *protocol.Procedure) (grade, id string) {
	is := func(kind, grade string) (string, string) { return grade, "severity " + kind + " " + grade }
	hours := func() float64 {
		_, to, ok := in(p.Duration, "time")
		if !ok {
			return 0
		}
		return roundOff(to * 24)
	}
	text := p.Name + "; " + p.How + "; " + p.Why
	switch p.Kind {
	case "blood sample":
		if terminal(p) {
			return "", ""
		}
		if d, ok := c.draw(p); ok && d.share(7) > 10 && saysNone(p.Anaesthesia) {
			return is("blood", "moderate")
		}
		return is("blood", "mild")
	case "injection", "gavage":
		return is("dosing", "mild")
	case "deficient diet":
		return is("deficient diet", "mild")
	case "fasting":
		if c.animal == nil || c.animal.name != "rat" {
			return "", ""
		}
		if hours() >= 48 {
			return is("fasting", "moderate")
		}
		return is("fasting", "mild")
	case "restraint":
		if !says(text, "metabolism", "metabolic", "digestibility crate", "balance cage") {
			return "", ""
		}
		switch h := hours(); {
		case h > 5*24:
			return is("restraint", "severe")
		case h >= 24:
			return is("restraint", "moderate")
		}
		return is("restraint", "mild")
	case "single housing":
		return is("single housing", "mild")
	case "surgery":
		if says(text, "ear biopsy", "tail biopsy", "ear punch", "tail tip", "subcutaneous implant", "microchip") {
			return is("surgery", "mild")
		}
		return is("surgery", "moderate")
	case "challenge":
		if slices.ContainsFunc(c.welfare.HumaneEndpoints, func(e string) bool { return deadly(e) }) || says(text, "lethal", "death") {
			return is("challenge", "severe")
		}
		return is("challenge", "moderate")
	}
	return "", ""
}

// draw is a repeated taking of blood.
type draw struct {
	name, key   string
	each        float64 // share of the circulating volume in percent, of one draw from the smallest animal
	perKilogram float64 // mL/kg of one draw
	times       int     // 0: not limited
	every       float64 // days between draws; 0: not stated
}

// untimed tells whether there are several draws and the time between them is not known:
// then each is looked at alone.
func (d draw) untimed() bool { return d.times > 1 && d.every == 0 }

// in counts the draws in a window of days.
func (d draw) in(days float64) float64 {
	if d.every == 0 {
		return 1
	}
	n := math.Ceil(days/d.every - tolerance)
	if d.times > 0 {
		n = min(n, float64(d.times))
	}
	return max(n, 1)
}

// share is what is drawn in a window of days, in percent of the circulating volume.
func (d draw) share(days float64) float64 { return d.each * d.in(days) }

// circulating is the circulating volume in mL/kg: that of the species, else the lowest of
// any.
func (c *checker) circulating() Limit {
	var general Limit
	for _, l := range loaded().limits {
		if l.Topic != "circulating volume" {
			continue
		}
		if l.Species != "any" && c.animal.is(l.Species) {
			return l
		}
		if l.Species == "any" && (general.value == 0 || l.value < general.value) {
			general = l
		}
	}
	return general
}

// draw works out one procedure; false where volume or mass cannot be read.
func (c *checker) draw(p *protocol.Procedure) (draw, bool) {
	d := draw{name: title(p), times: p.Times}
	if _, v, ok := perMass(p.Volume); ok {
		d.perKilogram = v
	} else if _, v, ok := in(p.Volume, "volume"); ok && c.least > 0 {
		d.perKilogram = v * 1000 / c.least
	} else {
		return d, false
	}
	d.each = 100 * d.perKilogram / c.circulating().value
	if p.Every != nil {
		every, _, ok := in(p.Every, "time")
		if !ok {
			return d, false
		}
		d.every = every
	}
	return d, true
}

// blood compares one procedure of taking blood. A limit on a sum over days is also a
// rest: who takes up to 1 % waits a day, up to 7.5 % seven days, up to 10 % fourteen.
func (c *checker) blood(p *protocol.Procedure, key string) {
	volume := c.circulating()
	stated := c.bloodWords(p)
	if terminal(p) {
		f := Finding{Code: Pain, Level: Note, About: title(p), Key: key, Stated: strings.Trim(stated+"; "+p.Anaesthesia, "; "), Text: "a terminal draw is not compared with the limits for animals that live on", Rules: []Rule{rule("terminal"), rule("terminal-wsu")}}
		if saysNone(p.Anaesthesia) {
			f.Level, f.Text, f.Hint = Warning, "a terminal draw is planned and no general anaesthesia is stated", "give anaesthesia"
		}
		c.add(f)
		return
	}
	d, ok := c.draw(p)
	d.key = key
	switch {
	case p.Volume == nil:
		c.uncompared(title(p), key, stated, "the volume is not stated, so that it is not compared", `give volume = { value = …, unit = "mL" }`)
		return
	case !ok && c.least == 0:
		c.uncompared(title(p), key, stated, "the body mass is not known, so that the volume is not compared", "give animals.mass")
		return
	case !ok:
		c.uncompared(title(p), key, stated, "this is not read as a volume taken at an interval of time", "give volume in mL or mL/kg, and every in h, d or wk")
		return
	}
	f := Finding{Code: Blood, About: title(p), Key: key + ".volume", Stated: stated}
	f.Limits = append(f.Limits, Quoted{Limit: volume, Stated: about(d.perKilogram) + shown("mL/kg") + " in the smallest animal, " + about(d.each) + shown("%") + " of its circulating volume", Met: true, Applied: true})
	if d.untimed() {
		f.Hint = "give every, the time between samples"
	}
	limits, text := c.against(d)
	f.Limits = append(f.Limits, limits...)
	switch {
	case text != "":
		f.Level, f.Text = Warning, text
		f.Hint = strings.Trim("take less, or less often, or show the committee how volume and cells are replaced; "+f.Hint, "; ")
	case d.untimed():
		f.Level, f.Text = Note, "one sample keeps to the limits; the time between samples is not stated, so that their sum is not compared"
	default:
		f.Text = fmt.Sprintf("%s of the circulating volume keeps to the strictest limits", about(d.each)+shown("%"))
		if rest := c.rest(d); rest.unit != "" {
			f.Text += fmt.Sprintf("; so much asks for a rest of %s", digits(rest.high)+shown(rest.unit))
		}
	}
	c.add(f)
	if !d.untimed() {
		c.drawn = append(c.drawn, d)
	}
}

// terminal tells whether blood is drawn from an animal that does not wake again. The
// words are read here and printed nowhere.
func terminal(p *protocol.Procedure) bool {
	return says(p.Name+"; "+p.How+"; "+p.Why, "terminal", "exsanguination", "exsanguinated", "final bleed", "at slaughter", "after death", "post mortem")
}

func (c *checker) bloodWords(p *protocol.Procedure) string {
	s := amount(p.Volume)
	if p.Times > 0 {
		s += fmt.Sprintf(", %d times", p.Times)
	}
	if p.Every != nil {
		s += ", every " + amount(p.Every)
	}
	if c.least > 0 {
		s += ", smallest animal " + about(c.least) + shown("kg")
	}
	return strings.Trim(s, ", ")
}

// rest is the time that the rows ask for after the draws of one day; 0: no row allows them.
func (c *checker) rest(d draw) band {
	for _, l := range c.windows() {
		if l.met(d.share(1)) {
			return l.band
		}
	}
	return band{}
}

// windows are the applied rows of blood, the shortest time first.
func (c *checker) windows() []Limit {
	var out []Limit
	for _, l := range loaded().limits {
		if l.Topic == "blood" && !l.shown && c.animal.is(l.Species) {
			out = append(out, l)
		}
	}
	slices.SortStableFunc(out, func(a, b Limit) int {
		return int(a.value*1000) - int(b.value*1000)
	})
	return out
}

// window is the time in days over which a row of blood sums; 0: it does not.
func window(l *Limit) float64 {
	if l.band.unit == "" {
		return 0
	}
	return l.band.high * units[l.band.unit].factor
}

// against compares a draw and its repetitions with every row; the text says which limit
// is exceeded, or is empty. What is taken on one day may be more than a row allows if a
// row over a longer time allows it and nothing else is taken in that time: so the tables
// of recovery are meant.
func (c *checker) against(d draw) ([]Quoted, string) {
	var out []Quoted
	text := ""
	applied := c.windows()
	day := d.share(1)
	for i, l := range applied {
		x := d.share(window(&l))
		q := Quoted{Limit: l, Stated: about(x) + shown("%"), Met: l.met(x), Applied: true}
		rested := slices.ContainsFunc(applied[i+1:], func(m Limit) bool { return m.met(day) && d.share(window(&m)) == day })
		if !q.Met && rested {
			q.Applied, q.Stated = false, q.Stated+", with the rest of a longer row"
		}
		if q.Applied && !q.Met {
			text = fmt.Sprintf("%s of the circulating volume in %s is more than %s, the limit of %s", q.Stated, digits(l.band.high)+shown(l.band.unit), l.Printed+shown("%"), l.Where())
		}
		out = append(out, q)
	}
	for _, l := range loaded().limits {
		if l.Topic != "blood" || !l.shown || !c.animal.is(l.Species) {
			continue
		}
		x := d.share(window(&l))
		if l.Class == "single" {
			x = d.each
		}
		q := Quoted{Limit: l, Stated: about(x) + shown("%")}
		if l.Unit == "% of body mass" {
			// Blood has about the density of water: 10 mL/kg are 1 % of body mass.
			x = x / d.each * d.perKilogram / 10
			q.Stated = about(x) + shown(l.Unit)
		}
		q.Met = l.met(x)
		out = append(out, q)
	}
	return out, text
}

// bloodTogether compares the sum of several procedures, as if their busiest days fell
// together.
func (c *checker) bloodTogether() {
	if len(c.drawn) < 2 {
		return
	}
	var limits []Quoted
	text := ""
	var names []string
	for _, d := range c.drawn {
		names = append(names, d.name)
	}
	together := join(names)
	if len(names) > 4 {
		together = fmt.Sprintf("the %d procedures that draw blood", len(names))
	}
	applied := c.windows()
	for i, l := range applied {
		x := 0.0
		for _, d := range c.drawn {
			x += d.share(window(&l))
		}
		q := Quoted{Limit: l, Stated: about(x) + shown("%"), Met: l.met(x), Applied: true}
		limits = append(limits, q)
		if !q.Met && i == len(applied)-1 {
			text = fmt.Sprintf("together %s take up to %s of the circulating volume in %s, more than %s, the limit of %s", together, q.Stated, digits(l.band.high)+shown(l.band.unit), l.Printed+shown("%"), l.Where())
		}
	}
	f := Finding{Code: Blood, About: "blood of all procedures", Key: c.drawn[0].key, Stated: together, Limits: limits, Text: "together the samples keep to the limit over the longest time"}
	if text != "" {
		f.Level, f.Text, f.Hint = Warning, text, "space the samples, or take less"
	}
	c.add(f)
}

// routes are the words for the ways of giving a dose.
var routes = []struct {
	name  string
	words []string
}{
	{"oral", []string{"oral", "orally", "by mouth", "per os", "po", "p o", "gavage", "stomach tube", "drench"}},
	{"subcutaneous", []string{"subcutaneous", "subcutaneously", "sc", "s c", "subcut", "under the skin"}},
	{"intraperitoneal", []string{"intraperitoneal", "intraperitoneally", "ip", "i p"}},
	{"intramuscular", []string{"intramuscular", "intramuscularly", "im", "i m"}},
	{"intravenous", []string{"intravenous", "intravenously", "iv", "i v"}},
}

// route reads the way of giving; empty when it is not known or there are several.
func route(p *protocol.Procedure) string {
	text := p.Route
	if strings.TrimSpace(text) == "" {
		text = p.Name + "; " + p.How
	}
	if p.Kind == "gavage" {
		return "oral"
	}
	found := ""
	for _, r := range routes {
		if says(text, r.words...) {
			if found != "" {
				return ""
			}
			found = r.name
		}
	}
	return found
}

// dose compares a volume given.
func (c *checker) dose(p *protocol.Procedure, key string) {
	way := route(p)
	stated := amount(p.Volume)
	if way != "" {
		stated = strings.Trim(stated+", "+way, ", ")
	}
	if c.least > 0 {
		stated += ", smallest animal " + about(c.least) + shown("kg")
	}
	limits := c.pickClasses("dose", way)
	switch {
	case p.Volume == nil:
		c.uncompared(title(p), key, stated, "the volume is not stated, so that it is not compared", `give volume = { value = …, unit = "mL" }`)
		return
	case way == "":
		c.uncompared(title(p), key, stated, "the route is not read as one of oral, subcutaneous, intraperitoneal, intramuscular, intravenous", "give one route for each procedure")
		return
	case len(limits) == 0:
		c.uncompared(title(p), key, stated, fmt.Sprintf("the tables have no %s volume for %s", way, c.name()), "ask the veterinarian")
		return
	}
	// The volume in mL, and in mL/kg of the smallest animal.
	_, whole, isWhole := in(p.Volume, "volume")
	whole *= 1000
	_, per, isPer := perMass(p.Volume)
	if isWhole && c.least > 0 {
		per, isPer = whole/c.least, true
	} else if isPer && c.most > 0 {
		whole, isWhole = per*c.most, true
	}
	oil := says(p.Name+"; "+p.How+"; "+p.Route, "oil", "oily", "in oil", "sesame oil", "corn oil")
	var quoted []Quoted
	best, gravest := -1, -1
	for _, l := range limits {
		x, ok := per, isPer
		if l.Unit == "mL/site" {
			x, ok = whole, isWhole
		}
		if !ok {
			continue
		}
		limit := l.value
		if oil && l.Class == "maximum" {
			limit /= 2
		}
		quoted = append(quoted, Quoted{Limit: l, Stated: about(x) + shown(l.Unit), Met: meets(x, limit, true)})
		k := len(quoted) - 1
		switch {
		case l.shown:
		case l.Class == "maximum":
			if gravest < 0 || stricter(&l, &quoted[gravest].Limit) {
				gravest = k
			}
		case best < 0 || stricter(&l, &quoted[best].Limit):
			best = k
		}
	}
	if len(quoted) == 0 {
		c.uncompared(title(p), key, stated, "volume and body mass cannot be read together, so that the dose is not compared", "give the volume in mL with animals.mass, or in mL/kg")
		return
	}
	f := Finding{Code: Dose, About: title(p), Key: key + ".volume", Stated: stated}
	site := ""
	applied := gravest
	if best >= 0 {
		applied = best
	}
	if quoted[applied].Unit == "mL/site" {
		site = " if given at one site"
	}
	for _, k := range []int{best, gravest} {
		for i := range quoted {
			if q := &quoted[i]; k >= 0 && !q.shown && q.Class == quoted[k].Class && q.Unit == quoted[k].Unit && q.value == quoted[k].value {
				q.Applied = true
			}
		}
	}
	switch {
	case gravest >= 0 && !quoted[gravest].Met:
		q := quoted[gravest]
		limit := q.Printed + shown(q.Unit)
		if oil {
			limit = "half of " + limit + " (it is in oil)"
		}
		f.Level, f.Text, f.Hint = Warning, fmt.Sprintf("%s%s is unusual: more than %s, the maximum of %s", q.Stated, site, limit, q.Where()), "give less, or divide the dose"
	case best >= 0 && !quoted[best].Met:
		q := quoted[best]
		f.Level, f.Text, f.Hint = Warning, fmt.Sprintf("%s%s is more than %s, the good practice of %s", q.Stated, site, q.Printed+shown(q.Unit), q.Where()), "give less, or say why so much is needed and how pH and viscosity are looked to"
	default:
		q := quoted[applied]
		f.Text = fmt.Sprintf("%s%s keeps to the strictest limit, %s", q.Stated, site, q.Printed+shown(q.Unit))
	}
	f.Limits = quoted
	for _, l := range loaded().limits {
		if l.Topic == "dose" && l.Species == "any" && (strings.HasPrefix(l.Quantity, way) || oil && strings.HasPrefix(l.Quantity, "oil")) {
			f.Limits = append(f.Limits, Quoted{Limit: l})
		}
	}
	c.add(f)
}

// pickClasses lists the rows of a topic whose class is one of use and not of animal.
func (c *checker) pickClasses(topic, quantity string) []Limit {
	var out []Limit
	for _, l := range loaded().limits {
		if l.Topic == topic && l.Quantity == quantity && c.animal != nil && c.animal.is(l.Species) {
			out = append(out, l)
		}
	}
	return out
}

// fasting compares how long feed is off.
func (c *checker) fasting(p *protocol.Procedure, key string) {
	_, to, ok := in(p.Duration, "time")
	rules := c.graded(p)
	if c.animal.is("fish") && c.animal != nil {
		rules = append(rules, rule("feed-fish"))
	}
	if !ok {
		f := Finding{Code: Fasting, Level: Note, About: title(p), Key: key, Stated: amount(p.Duration), Text: "how long feed is off is not stated in a unit of time, so that it is not compared", Hint: `give duration = { value = …, unit = "h" }`, Rules: rules, Limits: quotedOnly(c.pick("feed withdrawal", ""))}
		if strings.TrimSpace(p.Why) == "" {
			f.Level, f.Text = Warning, "feed is withheld and the protocol says neither why nor, in a unit of time, for how long"
			f.Hint = "give why and duration"
		}
		c.add(f)
		return
	}
	f := Finding{Code: Fasting, About: title(p), Key: key + ".duration", Stated: strings.Trim(amount(p.Duration)+"; "+p.Why, "; "), Rules: rules, Text: "feed is off no longer than the strictest limit that applies"}
	hours := roundOff(to * 24)
	for _, l := range c.pick("feed withdrawal", "") {
		q := Quoted{Limit: l, Stated: about(hours) + shown("h"), Met: l.met(hours), Applied: !l.shown}
		f.Limits = append(f.Limits, q)
		if q.Met || l.shown {
			continue
		}
		if l.Species == "any" && strings.TrimSpace(p.Why) != "" {
			if f.Level == Pass {
				f.Level, f.Text = Note, fmt.Sprintf("feed is off for %s, more than %s: %s asks for the justification, which is printed and not judged", q.Stated, l.Printed+shown("h"), l.Where())
			}
			continue
		}
		f.Level, f.Hint = Warning, "shorten it, or give the reason, with how mass and condition are followed; water stays"
		f.Text = fmt.Sprintf("feed is off for %s, more than %s (%s) of %s", q.Stated, l.Printed+shown("h"), l.Quantity, l.Where())
	}
	c.add(f)
}

// pain looks for pain relief at surgery.
func (c *checker) pain(p *protocol.Procedure, key string) {
	var missing []string
	if saysNone(p.Anaesthesia) {
		missing = append(missing, "anaesthesia")
	}
	if saysNone(p.Analgesia) {
		missing = append(missing, "analgesia")
	}
	f := Finding{Code: Pain, About: title(p), Key: key, Stated: strings.Trim(p.Anaesthesia+"; "+p.Analgesia, "; "), Text: "anaesthesia and analgesia are stated; whether they are enough is for the veterinarian", Rules: append([]Rule{rule("pain")}, c.graded(p)...)}
	if len(missing) > 0 {
		f.Level, f.Text, f.Hint = Warning, "surgery without "+join(missing), "state pain relief before, during and after, as the veterinarian prescribes"
	}
	c.add(f)
}

// marking compares docking, castration, trimming and the like with the ages of the tables.
func (c *checker) marking(p *protocol.Procedure, key string) {
	text := p.Name + "; " + p.How + "; " + p.Where
	castration := says(text, "castration", "castrated", "castrate")
	docking := says(text, "docking", "tail docking", "docked", "tooth clipping", "teeth clipping")
	beak := says(text, "beak", "beak trimming", "debeaking")
	f := Finding{Code: Pain, Level: Note, About: title(p), Key: key, Stated: strings.Trim(p.Analgesia+"; "+p.Anaesthesia, "; "), Text: "treat it as a procedure, with a plan for pain relief", Rules: []Rule{rule("pain")}}
	_, oldest, aged := in(c.animals.Age, "time")
	for _, l := range c.pickAny("marking") {
		pig := l.Source == "120" && (castration || docking)
		if !pig && !(l.Source == "74" && beak) {
			continue
		}
		q := Quoted{Limit: l}
		if pig {
			f.Rules = append(f.Rules, rule("docking"))
		} else {
			f.Rules = append(f.Rules, rule("beak"))
		}
		if aged {
			q.Stated = about(oldest) + shown("d")
			q.Met = l.met(oldest) && (pig || oldest < l.value)
			q.Applied = true
			relieved := !saysNone(p.Anaesthesia) && !saysNone(p.Analgesia)
			if !q.Met && !(pig && relieved) {
				f.Level, f.Text, f.Hint = Warning, fmt.Sprintf("at %s the animals are past %s, the limit of %s", q.Stated, l.Printed+shown(l.Unit), l.Where()), "leave it undone, or have a veterinarian do it with anaesthesia and prolonged pain relief where the law allows that"
			}
		}
		f.Limits = append(f.Limits, q)
	}
	if docking && strings.TrimSpace(p.Why) == "" {
		f.Level, f.Text, f.Hint = Warning, "docking or clipping is planned and no reason is stated; it is never routine", "leave it undone, or give the reason"
	}
	c.add(f)
}

// pickAny lists the rows of a topic for the species, whatever their class.
func (c *checker) pickAny(topic string) []Limit {
	var out []Limit
	for _, l := range loaded().limits {
		if l.Topic == topic && c.animal.is(l.Species) {
			out = append(out, l)
		}
	}
	return out
}

// challenge asks for rescue and endpoints.
func (c *checker) challenge(p *protocol.Procedure, key, code, what string) {
	f := Finding{Code: code, Level: Note, About: title(p), Key: key, Stated: p.Why, Text: what + "; rescue and endpoints are printed and not judged", Rules: append(c.graded(p), rule("endpoints"))}
	var missing []string
	if len(c.welfare.HumaneEndpoints) == 0 {
		missing = append(missing, "humane endpoints")
	}
	if strings.TrimSpace(c.welfare.Rescue.Body) == "" {
		missing = append(missing, "rule of rescue")
	}
	if len(missing) > 0 {
		f.Level, f.Text, f.Hint = Warning, what+" and the protocol states no "+strings.Join(missing, " and no "), "state them under [welfare]; untreated controls need the rescue first"
	}
	c.add(f)
}
