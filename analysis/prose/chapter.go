package prose

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
)

// Passage is a sentence of a chapter and, where it leans on a table or a figure, the
// identifier of that. One without text ends a paragraph.
type Passage struct{ Text, See string }

// tense says whether a trial is over, so that it is told in the past, or still a plan.
type tense bool

func told(t *trial.Trial) tense { return t.Table != nil }

func (d tense) of(past, future string) string {
	if d {
		return past
	}
	return future
}

func (d tense) was() string  { return d.of("was", "will be") }
func (d tense) were() string { return d.of("were", "will be") }

// be is the verb of so many things.
func (d tense) be(n int) string {
	if n == 1 {
		return d.was()
	}
	return d.were()
}

// paragraphOf gathers sentences, each only when it says something.
type paragraphOf []Passage

func (s *paragraphOf) add(format string, args ...any) { s.see("", format, args...) }

func (s *paragraphOf) see(id, format string, args ...any) {
	text := format
	if len(args) > 0 {
		text = fmt.Sprintf(format, args...)
	}
	*s = append(*s, Passage{Text: finished(text), See: id})
}

// finished is a sentence with a capital and a full stop.
func finished(s string) string {
	s = strings.TrimSuffix(oneLine(s), ".")
	if s == "" {
		return ""
	}
	if !strings.HasSuffix(s, "?") && !strings.HasSuffix(s, "!") && !strings.HasSuffix(s, ".”") {
		s += "."
	}
	return upperFirst(s)
}

// phrase is a text of the protocol as part of a sentence: on one line, without the stop
// at its end.
func phrase(s string) string {
	s = oneLine(s)
	for _, mark := range []string{".", ";", ","} {
		s = strings.TrimSuffix(s, mark)
	}
	return ranges.ReplaceAllString(marks.Replace(s), "$1$2–$3$4")
}

// oneLine sets a text on one line. Spaces that do not break stay as they are.
func oneLine(s string) string {
	return strings.Join(strings.FieldsFunc(s, func(r rune) bool { return strings.ContainsRune(" \t\r\n", r) }), " ")
}

// marks writes what protocols spell on a keyboard as the trade prints it.
var marks = strings.NewReplacer("/m2", "/m²", "/m3", "/m³", " m2", " m²", " m3", " m³", " cm2", " cm²", "/cm2", "/cm²", "'s ", "’s ", "s' ", "s’ ")

// ranges finds two numbers that a hyphen joins to a range, but no dates and codes.
var ranges = regexp.MustCompile(`(^|[ (])(\d+(?:\.\d+)?)-(\d+(?:\.\d+)?)($|[ ),;:])`)

// said tells whether a text of the protocol says something.
func said(s string) bool {
	s = phrase(s)
	return s != "" && s != "…" && !strings.EqualFold(s, "none") && !strings.EqualFold(s, "not stated")
}

// inner is a phrase within a sentence, with a small letter at its beginning.
func inner(s string) string { return lowerFirst(phrase(s)) }

// series joins phrases that may hold commas or lists of their own.
func series(items []string) string {
	for _, s := range items {
		if outside := parentheses(s); len(items) > 1 && (strings.ContainsAny(outside, ",;") || strings.Contains(outside, " and ")) {
			return strings.Join(items[:len(items)-1], "; ") + "; and " + items[len(items)-1]
		}
	}
	return And(items)
}

// parentheses drops what stands in parentheses.
func parentheses(s string) string {
	var b strings.Builder
	depth := 0
	for _, r := range s {
		switch {
		case r == '(':
			depth++
		case r == ')':
			depth = max(depth-1, 0)
		case depth == 0:
			b.WriteRune(r)
		}
	}
	return b.String()
}

// phrases makes phrases of texts.
func phrases(items []string) []string {
	var out []string
	for _, s := range items {
		if s = phrase(s); s != "" {
			out = append(out, s)
		}
	}
	return out
}

// definite puts an article before a noun that has none and is no name.
func definite(s string) string {
	s = phrase(s)
	first, _, _ := strings.Cut(strings.ToLower(s), " ")
	if s == "" || upperFirst(s) == s || slices.Contains([]string{"the", "a", "an", "one", "two", "all", "each", "our", "any", "some", "no"}, first) {
		return s
	}
	return "the " + s
}

// article is a or an.
func article(s string) string {
	if s != "" && strings.ContainsRune("aeiouAEIOU", rune(s[0])) {
		return "an " + s
	}
	return "a " + s
}

var months = [...]string{"January", "February", "March", "April", "May", "June", "July", "August", "September", "October", "November", "December"}

// dayText prints a date in running text: 2 March 2026.
func dayText(d protocol.Date) string {
	if d.Month < 1 || d.Month > 12 {
		return DateText(d)
	}
	return fmt.Sprintf("%d\u00a0%s\u00a0%d", d.Day, months[d.Month-1], d.Year)
}

// fromTo prints two dates, the year once where it is one.
func fromTo(from, to protocol.Date) string {
	none := protocol.Date{}
	switch {
	case from == none && to == none:
		return ""
	case to == none:
		return "from " + dayText(from)
	case from == none:
		return "until " + dayText(to)
	case from.Year == to.Year && from.Month >= 1 && from.Month <= 12:
		return fmt.Sprintf("from %d\u00a0%s to %s", from.Day, months[from.Month-1], dayText(to))
	}
	return "from " + dayText(from) + " to " + dayText(to)
}

// kept are words for animals that units are named by (common practice, no source).
var kept = []string{"animal", "pig", "piglet", "sow", "boar", "gilt", "barrow", "cow", "calf", "heifer", "steer", "bull", "ox", "sheep", "ewe", "ram", "lamb", "goat", "kid",
	"horse", "bird", "hen", "cock", "chick", "chicken", "broiler", "turkey", "duck", "goose", "quail", "fish", "trout", "salmon", "carp", "mouse", "rat", "hamster", "rabbit", "dog", "cat", "ferret"}

// animalUnit is the unit that is an animal itself, -1 where there is none.
func animalUnit(t *trial.Trial) int {
	if t.Protocol.Animals == nil {
		return -1
	}
	for i := range t.Plan.Units {
		u := &t.Plan.Units[i]
		words := strings.Fields(strings.ToLower(UnitName(u)))
		if len(words) > 0 && u.Crosses == nil && slices.Contains(kept, words[len(words)-1]) {
			return i
		}
	}
	return -1
}

// animalCount is the number of animals as far as the plan tells, 0 where it does not.
func animalCount(t *trial.Trial) int {
	if n := animals(t); n > 0 {
		return n
	}
	if u := animalUnit(t); u >= 0 {
		return t.Plan.Units[u].N
	}
	return 0
}

// speciesPlural is the animals of a species in the plural.
func speciesPlural(species string) string {
	words := strings.Fields(species)
	if len(words) == 0 || upperFirst(species) == species && len(words) > 1 {
		return "animals"
	}
	last := words[len(words)-1]
	if !slices.Contains([]string{"trout", "salmon", "carp", "deer", "cod", "tilapia"}, last) && !strings.HasSuffix(last, "s") {
		words[len(words)-1] = Plural(last)
	}
	return lowerFirst(strings.Join(words, " "))
}

// animalWord is one animal of the trial, such as pig.
func animalWord(t *trial.Trial) string {
	if a := t.Protocol.Animals; a != nil {
		if words := strings.Fields(a.Species); len(words) > 0 && slices.Contains(kept, strings.ToLower(words[len(words)-1])) {
			return strings.ToLower(words[len(words)-1])
		}
	}
	return "animal"
}

// someAnimals counts the animals of a trial.
func someAnimals(t *trial.Trial, n int) string {
	if n == 1 {
		return "one " + animalWord(t)
	}
	return small(n) + " " + speciesPlural(animalWord(t))
}

// ChapterAnimals tells of the animals: kind, number, source, health, and how they were
// chosen.
func ChapterAnimals(t *trial.Trial) []Passage {
	a := t.Protocol.Animals
	if a == nil {
		return nil
	}
	var s paragraphOf
	d := told(t)
	name := speciesPlural(a.Species)
	var of []string
	if name == "animals" && said(a.Species) {
		of = append(of, phrase(a.Species))
	}
	for _, x := range []string{a.Breed, a.Sex, a.Genotype} {
		if said(x) {
			of = append(of, phrase(x))
		}
	}
	if len(of) > 0 {
		name += " (" + strings.Join(of, ", ") + ")"
	}
	if n := animalCount(t); n > 0 {
		name = small(n) + " " + name
	}
	var at []string
	if a.Age != nil {
		at = append(at, QuantityText(a.Age)+" of age")
	}
	if a.Mass != nil {
		at = append(at, QuantityText(a.Mass)+" of body mass")
	}
	if len(at) > 0 {
		name += ", of " + And(at) + " at the start"
	}
	s.add("The trial %s %s", d.of("used", "will use"), name)
	if said(a.Source) {
		source := phrase(a.Source)
		first, _, _ := strings.Cut(strings.ToLower(source), " ")
		switch {
		case strings.HasPrefix(first, "from"):
			s.add("They %s %s", d.of("came", "will come"), inner(source))
		case strings.HasSuffix(first, "ed") || first == "bought" || first == "born":
			s.add("They %s %s", d.were(), inner(source))
		default:
			s.add("They %s from %s", d.of("came", "will come"), inner(source))
		}
	}
	if said(a.Health) {
		health := phrase(a.Health)
		first, _, _ := strings.Cut(strings.ToLower(health), " ")
		if slices.Contains([]string{"clinically", "healthy", "free", "vaccinated", "specific-pathogen-free"}, strings.TrimRight(first, ",")) {
			lead, rest, more := strings.Cut(health, ",")
			if more {
				lead += " (" + strings.TrimSpace(rest) + ")"
			}
			s.add("They %s %s", d.were(), inner(lead))
		} else {
			s.add("Health at the start: %s", health)
		}
	}
	switch use := phrase(a.PreviousUse); {
	case strings.EqualFold(use, "none"):
		s.add("None %s been used in a trial before", d.of("had", "will have"))
	case said(use):
		s.add("Previous use: %s", use)
	}
	if a.Acclimatization != nil {
		s.add("An acclimatization period of %s %s the start", QuantityText(a.Acclimatization), d.of("preceded", "will precede"))
	}
	s = append(s, eligible(t)...)
	return s
}

// eligible tells which units were taken, by criteria set beforehand.
func eligible(t *trial.Trial) []Passage {
	var s paragraphOf
	e := t.Protocol.Eligibility
	if in := phrases(e.Include); len(in) > 0 {
		s.add("%s, set before the trial: %s", plural(len(in), "Criterion of inclusion", "Criteria of inclusion"), strings.Join(in, "; "))
	}
	if out := phrases(e.Exclude); len(out) > 0 {
		s.add("%s, set before the trial: %s", plural(len(out), "Criterion of exclusion", "Criteria of exclusion"), strings.Join(out, "; "))
	}
	return s
}

// offered tells how feed or water was given: "offered ad libitum (two nipple drinkers)".
func offered(what, how string, d tense) string {
	lead, rest, _ := strings.Cut(phrase(how), ",")
	lower := strings.ToLower(lead)
	for _, start := range []string{"ad libitum", "by ", "restricted", "to ", "twice", "once", "three times", "at ", "freely"} {
		if strings.HasPrefix(lower, start) {
			s := fmt.Sprintf("%s %s offered %s", what, d.was(), inner(lead))
			if rest = strings.TrimSpace(rest); rest != "" {
				s += " (" + rest + ")"
			}
			return s
		}
	}
	return fmt.Sprintf("the %s %s %s", what, d.of("consisted of", "will consist of"), inner(how))
}

// ChapterHousing tells how animals were kept.
func ChapterHousing(t *trial.Trial) []Passage {
	h := t.Protocol.Housing
	if h == nil {
		return nil
	}
	var s paragraphOf
	d := told(t)
	var where []string
	switch {
	case h.GroupSize == 1:
		where = append(where, "singly")
	case h.GroupSize > 1:
		where = append(where, "in groups of "+small(h.GroupSize))
	}
	if h.FloorArea != nil {
		where = append(where, "with "+QuantityText(h.FloorArea)+" of floor for each animal")
	}
	if h.Temperature != nil {
		where = append(where, "at "+QuantityText(h.Temperature))
	}
	if len(where) > 0 {
		who := "The animals"
		if t.Protocol.Animals == nil {
			who = "They"
		}
		s.add("%s %s kept %s", who, d.were(), strings.Join(where, ", "))
	}
	if said(h.Lighting) {
		light := phrase(h.Lighting)
		if light[0] >= '0' && light[0] <= '9' {
			s.add("Lights %s on from %s", d.were(), light)
		} else {
			s.add("Light %s %s", d.was(), inner(light))
		}
	}
	if said(h.Bedding) {
		s.add("Bedding %s %s", d.of("consisted of", "will consist of"), inner(h.Bedding))
	}
	if said(h.Enrichment) {
		s.add("Enrichment %s %s", d.of("consisted of", "will consist of"), inner(h.Enrichment))
	}
	var given []string
	if said(h.Feed) {
		given = append(given, offered("feed", h.Feed, d))
	}
	if said(h.Water) {
		water := offered("water", h.Water, d)
		if len(given) > 0 && strings.Contains(given[0], " offered ") {
			water = strings.Replace(water, " "+d.was()+" offered ", " ", 1)
		}
		given = append(given, water)
	}
	if len(given) > 0 {
		s.add("%s", strings.Join(given, " and "))
	}
	return s
}

// ChapterPlace tells where and when a trial ran, and on what site and material.
func ChapterPlace(t *trial.Trial) []Passage {
	var s paragraphOf
	p, d := t.Protocol, told(t)
	when := fromTo(p.Trial.Start, p.Trial.End)
	where := phrase(p.Trial.Site)
	if where == "" && p.Site != nil {
		where = phrase(p.Site.Name)
	}
	if where != "" || when != "" {
		line := "The trial " + d.of("was carried out", "will be carried out")
		if where != "" {
			line += " at " + definitePlace(where)
			if strings.Contains(where, ",") && when != "" {
				line += ","
			}
		}
		if when != "" {
			line += " " + when
		}
		s.add("%s", line)
	}
	if x := p.Site; x != nil {
		name := phrase(x.Name)
		if x.Latitude != nil && x.Longitude != nil {
			at := coordinate(*x.Latitude, "N", "S") + ", " + coordinate(*x.Longitude, "E", "W")
			if name == "" {
				s.add("The site lies at %s", at)
			} else {
				s.add("%s lies at %s", name, at)
			}
		} else if name != "" && !strings.Contains(where, name) {
			s.add("The site %s %s", d.was(), name)
		}
		var of []string
		if said(x.Soil) {
			of = append(of, "the soil is "+inner(x.Soil))
		}
		if said(x.PreviousCrop) {
			of = append(of, "the previous crop was "+inner(x.PreviousCrop))
		}
		if len(of) > 0 {
			s.add("%s", And(of))
		}
		if said(x.Weather) {
			season := ""
			if said(x.Season) {
				season = " of the season " + phrase(x.Season)
			}
			s.add("Weather%s: %s", season, phrase(x.Weather))
		}
	}
	if m := p.Material; m != nil {
		var of []string
		for _, x := range []string{m.Variety, m.Source} {
			if said(x) {
				of = append(of, phrase(x))
			}
		}
		switch {
		case said(m.Crop):
			line := "The crop " + d.was() + " " + inner(m.Crop)
			if len(of) > 0 {
				line += " (" + strings.Join(of, "; ") + ")"
			}
			if said(m.SeedRate) {
				line += ", at a seed rate of " + phrase(m.SeedRate)
			}
			s.add("%s", line)
		case len(of) > 0:
			s.add("Material: %s", strings.Join(of, "; "))
		}
	}
	if x := p.Plot; x != nil {
		var of []string
		switch {
		case x.Length != nil && x.Width != nil:
			of = append(of, d.of("measured ", "will measure ")+QuantityText(x.Length)+" × "+QuantityText(x.Width))
		case x.Length != nil:
			of = append(of, d.were()+" "+QuantityText(x.Length)+" long")
		case x.Width != nil:
			of = append(of, d.were()+" "+QuantityText(x.Width)+" wide")
		}
		if x.Border != nil {
			of = append(of, d.of("had", "will have")+" a border of "+QuantityText(x.Border))
		}
		if len(of) > 0 {
			s.add("%s %s", Plural(rowName(t)), And(of))
		}
		if x.NetArea != nil {
			s.add("The net area of a %s, on which it %s assessed, %s %s", rowName(t), d.was(), d.was(), QuantityText(x.NetArea))
		}
	}
	var inputs []string
	for _, x := range p.Inputs {
		line := phrase(x.What)
		if said(x.Rate) {
			line += ", " + phrase(x.Rate)
		}
		if day := dayText(x.On); x.On != (protocol.Date{}) {
			line += " (" + day + ")"
		}
		inputs = append(inputs, line)
	}
	if len(inputs) > 0 {
		s.add("The whole trial %s: %s", d.of("received", "will receive"), strings.Join(inputs, "; "))
	}
	if p.Animals == nil {
		s = append(s, eligible(t)...)
	}
	return s
}

// definitePlace leaves names alone and gives an article to what is none.
func definitePlace(s string) string {
	if upperFirst(s) == s && strings.Contains(strings.ToLower(s), "farm") {
		return s
	}
	return definite(s)
}

func coordinate(x float64, plus, minus string) string {
	side := plus
	if x < 0 {
		side = minus
	}
	return num.Fixed(math.Abs(x), min(places(x), 6)) + "°\u202f" + side
}

// rowName is what the smallest treated unit is called.
func rowName(t *trial.Trial) string { return UnitName(&t.Plan.Units[allot.RowUnit(t.Plan)]) }

// ChapterEthics is the statement on approval, severity and what was done for the animals.
func ChapterEthics(t *trial.Trial) []Passage {
	p, d := t.Protocol, told(t)
	if p.Animals == nil {
		return nil
	}
	var s paragraphOf
	if a := p.Approval; a != nil && said(a.Body) {
		line := "The trial was approved by " + definiteBody(a.Body)
		var of []string
		if said(a.Number) {
			of = append(of, "number "+phrase(a.Number))
		}
		if a.Date != (protocol.Date{}) {
			of = append(of, dayText(a.Date))
		}
		if len(of) > 0 {
			line += " (" + strings.Join(of, ", ") + ")"
		}
		if said(a.Legislation) {
			line += ", under " + inner(a.Legislation)
		}
		s.add("%s", line)
		switch {
		case said(a.Severity) && said(a.SeverityObserved) && bool(d):
			if strings.EqualFold(a.Severity, a.SeverityObserved) {
				s.add("Severity was classed beforehand as %s, and found to be so at the end", inner(a.Severity))
			} else {
				s.add("Severity was classed beforehand as %s, and found at the end to be %s", inner(a.Severity), inner(a.SeverityObserved))
			}
		case said(a.Severity):
			s.add("Severity was classed beforehand as %s", inner(a.Severity))
		}
	}
	w := p.Welfare
	if w == nil {
		return s
	}
	if ends := phrases(w.HumaneEndpoints); len(ends) > 0 {
		s.add("Humane endpoints %s: %s", d.were(), strings.Join(ends, "; "))
	}
	if n := w.Monitoring.TimesPerDay; n > 0 {
		often := num.Fixed(n, places(n)) + " times a day"
		if n == math.Trunc(n) && n < 11 {
			often = times(int(n)) + " a day"
		}
		by := ""
		if said(w.Monitoring.By) {
			by = " by " + definite(w.Monitoring.By)
		}
		s.add("The animals %s inspected %s%s", d.were(), often, by)
	}
	for _, x := range []protocol.Text{w.Rescue, w.Refinement, w.Euthanasia} {
		if said(x.Body) && x.File == "" {
			s.add("%s", phrase(x.Body))
		}
	}
	if said(w.Fate) {
		fate := phrase(w.Fate)
		first, _, _ := strings.Cut(strings.ToLower(fate), " ")
		if strings.HasSuffix(first, "ed") || slices.Contains([]string{"kept", "sold", "put", "sent"}, first) {
			s.add("The animals %s %s", d.were(), inner(fate))
		} else {
			s.add("%s", fate)
		}
	}
	return s
}

// definiteBody is the name of a committee in running text.
func definiteBody(s string) string {
	s = phrase(s)
	if strings.HasPrefix(strings.ToLower(s), "the ") {
		return "the " + s[4:]
	}
	return "the " + s
}

// ChapterStatements are those on registration, data, funding and interests.
func ChapterStatements(t *trial.Trial) []Passage {
	var s paragraphOf
	x := t.Protocol.Trial
	if r := phrase(x.Registration); r != "" && r != "…" {
		if rest, none := strings.CutPrefix(strings.ToLower(r), "none"); none {
			rest = strings.Trim(rest, ":;,. ")
			if rest != "" {
				rest = " (" + rest + ")"
			}
			s.add("The trial was not registered%s", rest)
		} else {
			s.add("Registration: %s", r)
		}
	}
	if said(x.DataAccess) {
		s.add("Access to the data: %s", inner(x.DataAccess))
	}
	if said(x.Funding) {
		s.add("Funding: %s", phrase(x.Funding))
	}
	if i := phrase(x.Interests); i != "" && i != "…" {
		s.add("Interests: %s", i)
	}
	return s
}

// Upper raises the first letter of a text, as at the head of a sentence.
func Upper(s string) string { return upperFirst(s) }
