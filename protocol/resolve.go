package protocol

import (
	"fmt"
	"maps"
	"math"
	"regexp"
	"slices"
	"strings"

	"penwright/protocol/diag"
	"penwright/protocol/internal/tomlpos"
)

// resolve looks at what the tables say of each other: that what is referred to is
// declared, that units and treatments fit together, that dates are in order.
func (d *decoder) resolve() {
	r := &resolver{d: d, p: d.p}
	r.declare()
	r.treatments()
	r.nesting()
	r.received()
	r.measured()
	r.analysis()
	r.sequences()
	r.size()
	r.data()
	r.conduct()
	r.dates()
}

type resolver struct {
	d *decoder
	p *Protocol

	factors, units, responses, covariates, repeated, codes declared

	where  map[string]named           // every declared name
	levels map[string]map[string]bool // of each factor, and the codes of the listed treatments
	times  map[string]map[string]bool // of each repeated set
	rules  map[string]bool            // for exclusions
}

// declared are the names of one kind that may be referred to.
type declared struct {
	word  string // what they are, such as factor
	key   string // of their table
	names []string
	paths []string // dotted key of the name of each
	set   map[string]int
	open  bool // one has no usable name, so what is missing may be that one
}

type named struct{ word, path string }

// fail reports an error at the value of a dotted key.
func (r *resolver) fail(key, code, hint, format string, args ...any) *diag.Diagnostic {
	pos, _ := r.p.find(key, true)
	return r.d.add(diag.Diagnostic{Pos: pos, Key: key, Severity: diag.Error, Code: code,
		Message: fmt.Sprintf(format, args...), Hint: hint})
}

func (r *resolver) warn(key, code, hint, format string, args ...any) *diag.Diagnostic {
	f := r.fail(key, code, hint, format, args...)
	f.Severity = diag.Warning
	return f
}

func at(table string, i int, key string) string {
	return tomlpos.Join(tomlpos.Index(table, i), key)
}

// declare collects the names, which are one namespace because they are columns.
func (r *resolver) declare() {
	p := r.p
	r.where, r.levels, r.times = map[string]named{}, map[string]map[string]bool{}, map[string]map[string]bool{}
	r.rules = setOf(p.Eligibility.ExclusionRules)
	collect := func(into *declared, word, table, key string, n int, name func(i int) string, columns bool) {
		*into = declared{word: word, key: table, set: map[string]int{}}
		for i := range n {
			s, path := name(i), at(table, i, key)
			if s == "" {
				into.open = true
				continue
			}
			first, twice := r.where[s], columns && r.where[s].path != ""
			if !columns {
				if j, ok := into.set[s]; ok {
					first, twice = named{word: word, path: into.paths[j]}, true
				}
			}
			if twice {
				f := r.fail(path, Duplicate, "give each its own name", "the name %s is taken: it is a %s", quote(s), first.word)
				f.Relate(p.ValuePos(first.path), "first given here")
			}
			if columns && !twice {
				r.where[s] = named{word: word, path: path}
			}
			if _, ok := into.set[s]; !ok {
				into.set[s] = len(into.names)
			}
			into.names, into.paths = append(into.names, s), append(into.paths, path)
		}
	}
	collect(&r.factors, "factor", "factor", "name", len(p.Factors), func(i int) string { return p.Factors[i].Name }, true)
	collect(&r.units, "unit", "unit", "name", len(p.Units), func(i int) string { return p.Units[i].Name }, true)
	collect(&r.responses, "response", "response", "name", len(p.Responses), func(i int) string { return p.Responses[i].Name }, true)
	collect(&r.covariates, "covariate", "covariate", "name", len(p.Covariates), func(i int) string { return p.Covariates[i].Name }, true)
	collect(&r.repeated, "repeated set of times", "repeated", "name", len(p.Repeated), func(i int) string { return p.Repeated[i].Name }, true)
	collect(&r.codes, "listed treatment", "treatment", "code", len(p.Treatments), func(i int) string { return p.Treatments[i].Code }, false)
}

// refer checks a reference and tells whether it holds.
func (r *resolver) refer(key, name string, in *declared) bool {
	if name == "" {
		return false
	}
	if _, ok := in.set[name]; ok {
		return true
	}
	if in.open {
		return false
	}
	if r.d.enough() {
		r.d.faults++
		return false
	}
	hint := ""
	other, elsewhere := r.where[name]
	switch near := diag.Nearest(name, in.names); {
	case elsewhere:
		hint = fmt.Sprintf("%s is a %s", quote(name), other.word)
		if len(in.names) > 0 && len(in.names) <= 16 {
			hint += "; " + oneOf(in.names)
		}
	case near != "":
		hint = fmt.Sprintf("did you mean %s?", quote(near))
	case len(in.names) == 0:
		hint = fmt.Sprintf("declare it in a table [[%s]]", in.key)
	default:
		hint = oneOf(in.names)
	}
	f := r.fail(key, UnknownName, hint, "there is no %s %s", in.word, quote(name))
	if len(in.paths) > 0 && !elsewhere {
		f.Relate(r.p.Pos(strings.TrimSuffix(in.paths[0], "."+lastPart(in.paths[0]))), fmt.Sprintf("the first %s is declared here", in.word))
	} else if elsewhere {
		f.Relate(r.p.ValuePos(other.path), fmt.Sprintf("the %s is declared here", other.word))
	}
	return false
}

func lastPart(key string) string { return key[strings.LastIndexByte(key, '.')+1:] }

// referAll checks a list of references.
func (r *resolver) referAll(key string, names []string, in *declared) {
	for i, n := range names {
		r.refer(tomlpos.Index(key, i), n, in)
	}
}

// level brings a level to the form it has in the factor and tells whether it is one
// of it. The factor may be "treatment", whose levels are the codes.
func (r *resolver) level(key, factor, level string) (string, bool) {
	var known []string
	var path string
	if factor == listed {
		known, path = r.codes.names, "treatment"
		if r.codes.open {
			return level, false
		}
	} else {
		f := r.p.Factor(factor)
		if f == nil || f.Levels == nil {
			return level, false // said already
		}
		level = levelText(level, f.Values != nil)
		known = f.Levels
		path = at("factor", slices.IndexFunc(r.p.Factors, func(g Factor) bool { return g.Name == factor }), "levels")
	}
	set := r.levels[factor]
	if set == nil {
		set = setOf(known)
		r.levels[factor] = set
	}
	if set[level] {
		return level, true
	}
	what := "a level of " + quote(factor)
	if factor == listed {
		what = "a listed treatment"
	}
	f := r.fail(key, UnknownLevel, r.d.suggest(level, known), "%s is not %s", quote(level), what)
	f.Relate(r.p.Pos(path), "they are listed here")
	return level, false
}

// listed is the name under which units receive the listed treatments.
const listed = "treatment"

// factorOrListed checks a reference to a factor or to the listed treatments.
func (r *resolver) factorOrListed(key, name string) bool {
	if name != listed {
		return r.refer(key, name, &r.factors)
	}
	if len(r.p.Treatments) == 0 {
		r.fail(key, UnknownName, "list them in [[treatment]], or name a factor", "there are no listed treatments")
		return false
	}
	return true
}

// treatments checks the listed treatments and the number of levels of factors.
func (r *resolver) treatments() {
	p := r.p
	if len(p.Factors) == 0 && len(p.Treatments) == 0 && !p.Given("factor") && !p.Given("treatment") {
		r.fail("factor", MissingKey, "write [[factor]] with name and levels", "no treatment is stated: there is neither a factor nor a listed treatment")
	}
	for i, f := range p.Factors {
		if len(f.Levels) == 1 && !r.inLists(f.Name) {
			r.fail(at("factor", i, "levels"), TooFew, "add the other levels, such as a control", "the factor has one level only")
		}
	}
	var used []string // factors that the lists name
	for _, f := range p.Factors {
		if f.Name != "" && !slices.Contains(used, f.Name) && r.inLists(f.Name) {
			used = append(used, f.Name)
		}
	}
	same := map[string]int{}
	for i := range p.Treatments {
		t := &p.Treatments[i]
		key := at("treatment", i, "levels")
		if len(t.Levels) == 0 {
			continue
		}
		names := r.names(key, t.Levels)
		fine := true
		for _, n := range names {
			if !r.refer(tomlpos.Join(key, n), n, &r.factors) {
				fine = false
				continue
			}
			l, ok := r.level(tomlpos.Join(key, n), n, t.Levels[n])
			t.Levels[n], fine = l, fine && ok
		}
		var absent []string
		for _, n := range used {
			if _, ok := t.Levels[n]; !ok {
				absent = append(absent, quote(n))
			}
		}
		if len(absent) > 0 {
			r.fail(key, BadTreatment, "give a level of each factor, or none for a treatment outside the factorial", "the treatment has no level of %s", enumerate(absent))
			continue
		}
		if !fine {
			continue
		}
		var combination strings.Builder
		for _, n := range used {
			fmt.Fprintf(&combination, "%q", t.Levels[n])
		}
		if j, twice := same[combination.String()]; twice {
			f := r.fail(key, BadTreatment, "delete one of them", "the treatment has the same levels as %s", quote(p.Treatments[j].Code))
			f.Relate(p.Pos(at("treatment", j, "levels")), "listed here first")
			continue
		}
		same[combination.String()] = i
	}
}

// names returns the keys of m in the order of the file.
func (r *resolver) names(key string, m map[string]string) []string {
	n, found := r.p.index.doc.Find(key)
	var names []string
	if found && len(n.Kids) == len(m) {
		for _, k := range n.Kids {
			names = append(names, k.Name)
		}
		return names
	}
	for k := range m {
		names = append(names, k)
	}
	slices.Sort(names)
	return names
}

// inLists tells whether a factor stands in a listed treatment.
func (r *resolver) inLists(factor string) bool {
	return slices.ContainsFunc(r.p.Treatments, func(t Treatment) bool { _, ok := t.Levels[factor]; return ok })
}

// received checks that every factor is given to one unit, carried by one, or listed.
func (r *resolver) received() {
	p := r.p
	type giver struct{ unit, key, verb string }
	givers := map[string][]giver{}
	receives := false
	for i, u := range p.Units {
		for j, n := range u.Receives {
			key := tomlpos.Index(at("unit", i, "receives"), j)
			receives = true
			if r.factorOrListed(key, n) {
				givers[n] = append(givers[n], giver{unit: u.Name, key: key, verb: "received"})
			}
		}
		for j, n := range u.Carries {
			key := tomlpos.Index(at("unit", i, "carries"), j)
			if r.refer(key, n, &r.factors) {
				givers[n] = append(givers[n], giver{unit: u.Name, key: key, verb: "carried"})
			}
		}
		if len(u.Checks) > 0 {
			key := at("unit", i, "checks")
			if !slices.Contains(u.Receives, listed) {
				r.fail(key, NeedsKey, `write receives = ["treatment"]`, "checks are listed treatments, and the unit does not receive these")
			} else {
				for j, c := range u.Checks {
					r.level(tomlpos.Index(key, j), listed, c)
				}
			}
		}
		r.replicates(i)
	}
	if len(p.Units) == 0 {
		if !p.Given("unit") {
			r.fail("unit", MissingKey, "write [[unit]] with name, count and receives", "no unit is stated")
		}
		return
	}
	if !receives && len(p.Factors)+len(p.Treatments) > 0 && !slices.ContainsFunc(p.Units, func(u Unit) bool { return u.Name == "" }) {
		i := len(p.Units) - 1
		r.fail(at("unit", i, "receives"), NotReceived, "write receives = [\"…\"] in the unit that the treatments are given to", "no unit receives a treatment")
		return
	}
	for i, f := range p.Factors {
		g := givers[f.Name]
		switch {
		case f.Name == "" || p.Factor(f.Name) != &p.Factors[i]: // no name, or that of another: said already
		case len(g) == 0 && !r.inLists(f.Name):
			r.fail(at("factor", i, "name"), NotReceived, "name it under receives or carries of a unit, or delete it", "the factor %s is given to no unit", quote(f.Name))
		case len(g) == 1 && r.inLists(f.Name) && g[0].verb == "received":
			r.fail(g[0].key, ReceivedTwice, `write receives = ["treatment"]`, "the factor %s stands in the listed treatments", quote(f.Name))
		case len(g) > 1:
			v := r.fail(g[1].key, ReceivedTwice, "one unit only can receive or carry it", "the factor %s is %s by the unit %s already", quote(f.Name), g[0].verb, quote(g[0].unit))
			v.Relate(p.ValuePos(g[0].key), "it is "+g[0].verb+" here")
		}
	}
	switch g := givers[listed]; {
	case len(p.Treatments) > 0 && len(g) == 0:
		r.fail(at("treatment", 0, "code"), NotReceived, `write receives = ["treatment"] in a unit`, "the listed treatments are given to no unit")
	case len(g) > 1:
		v := r.fail(g[1].key, ReceivedTwice, "one unit only can receive them", "the listed treatments are received by the unit %s already", quote(g[0].unit))
		v.Relate(p.ValuePos(g[0].key), "they are received here")
	}
}

// replicates checks the numbers of units for levels.
func (r *resolver) replicates(i int) {
	u := &r.p.Units[i]
	if len(u.Replicates) == 0 {
		return
	}
	key := at("unit", i, "replicates")
	if len(u.Receives) != 1 {
		r.fail(key, Conflict, "leave replicates out, or list the treatments", "replicates are told of one factor, and the unit receives %d", len(u.Receives))
		return
	}
	factor := u.Receives[0]
	total, fine := 0, true
	first := map[string]bool{}
	for j := range u.Replicates {
		l, ok := r.level(tomlpos.Join(key, u.Replicates[j].Level), factor, u.Replicates[j].Level)
		if ok && first[l] {
			r.fail(tomlpos.Join(key, u.Replicates[j].Level), Duplicate, "keep one of them", "the level %s is given twice", quote(l))
			ok = false
		}
		first[l] = true
		u.Replicates[j].Level, fine = l, fine && ok
		total += u.Replicates[j].N
	}
	if !fine || len(u.Count) != 1 {
		return
	}
	levels := len(r.codes.names)
	if f := r.p.Factor(factor); f != nil {
		levels = len(f.Levels)
	}
	if count := u.Count[0]; total > count || len(u.Replicates) == levels && total != count {
		f := r.fail(key, BadCount, "let the numbers sum to count", "the replicates sum to %d, and there are %d units", total, count)
		f.Relate(r.p.ValuePos(at("unit", i, "count")), "count is given here")
	}
}

// measured checks what responses refer to.
func (r *resolver) measured() {
	p := r.p
	primary, named := false, map[string]bool{}
	for i, s := range p.Responses {
		primary = primary || s.Role == "primary"
		r.referAll(at("response", i, "covariates"), s.Covariates, &r.covariates)
		for _, c := range s.Covariates {
			named[c] = true
		}
		r.refer(at("response", i, "recorded_on"), s.RecordedOn, &r.units)
		r.refer(at("response", i, "repeated"), s.Repeated, &r.repeated)
		if s.Assessed == "by eye" && (p.Blinding == nil || p.Blinding.Assessment != masked) {
			r.warn(at("response", i, "assessed"), UnmaskedAssessment, `write assessment = "masked" in [blinding] if it is`, "%s is assessed by eye, and nothing says that the assessment is masked", quote(s.Name))
		}
		r.contrasts(at("response", i, "contrasts"), s.Contrasts)
		if s.Comparison == "dunnett" {
			r.control(at("response", i, "comparison"))
		}
	}
	if !primary && len(p.Responses) > 1 {
		r.warn(at("response", 0, "role"), NoPrimary, `write role = "primary" in the response that decides`, "none of the responses is primary")
	}
	for i, c := range p.Covariates {
		baseline := slices.Contains(p.Randomization.BalanceOn, c.Name) || p.Roster != nil && p.Roster.BlockBy == c.Name
		if c.Name != "" && !named[c.Name] && !baseline && !slices.ContainsFunc(p.Responses, func(s Response) bool { return words(s.Compute)[c.Name] }) {
			r.warn(at("covariate", i, "name"), NotUsed, fmt.Sprintf("write covariates = [%s] in a response", quote(c.Name)), "no response names the covariate %s", quote(c.Name))
		}
	}
	for i, t := range p.Repeated {
		r.refer(at("repeated", i, "on"), t.On, &r.units)
		if len(t.At) == 1 {
			r.fail(at("repeated", i, "at"), TooFew, "add the other times", "one time only is not repeated")
		}
	}
}

var anyWord = regexp.MustCompile(`[A-Za-z_][A-Za-z0-9_]*`)

// words are the names that occur in an expression.
func words(expression string) map[string]bool {
	set := map[string]bool{}
	for _, w := range anyWord.FindAllString(expression, -1) {
		set[w] = true
	}
	return set
}

// control checks that there is a control to compare with.
func (r *resolver) control(key string) {
	for _, f := range r.p.Factors {
		if len(f.Control) > 0 {
			return
		}
	}
	for _, t := range r.p.Treatments {
		if t.Control {
			return
		}
	}
	for i := range r.p.Factors { // a control that was named wrongly is said already
		if r.p.Given(at("factor", i, "control")) {
			return
		}
	}
	r.fail(key, NoControl, "write control = … in the factor", "there is no control to compare with")
}

// contrasts checks planned contrasts.
func (r *resolver) contrasts(key string, list []Contrast) {
	first := map[string]int{}
	for i := range list {
		c := &list[i]
		own := tomlpos.Index(key, i)
		if j, twice := first[c.Name]; twice && c.Name != "" {
			f := r.fail(own+".name", Duplicate, "give each contrast its own name", "the name %s is taken by another contrast", quote(c.Name))
			f.Relate(r.p.ValuePos(tomlpos.Index(key, j)+".name"), "first given here")
		} else {
			first[c.Name] = i
		}
		if !r.factorOrListed(own+".factor", c.Factor) {
			continue
		}
		weights := own + ".weights"
		sum, size, fine := 0.0, 0.0, len(c.Weights) > 0
		seen := map[string]bool{}
		for j := range c.Weights {
			w := &c.Weights[j]
			l, ok := r.level(tomlpos.Join(weights, w.Level), c.Factor, w.Level)
			if ok && seen[l] {
				r.fail(tomlpos.Join(weights, w.Level), Duplicate, "keep one of them", "the level %s is given twice", quote(l))
				ok = false
			}
			seen[l] = true
			w.Level, fine = l, fine && ok
			sum += w.Value
			size += math.Abs(w.Value)
		}
		switch {
		case !fine:
		case size == 0:
			r.fail(weights, BadContrast, "write weights such as 1 and -1", "all weights are 0")
		case math.IsInf(size, 0):
			r.fail(weights, BadContrast, "write whole numbers such as 3, -1, -1, -1", "the weights are too large")
		case math.Abs(sum) > 1e-9*size:
			r.fail(weights, BadContrast, "write whole numbers such as 3, -1, -1, -1", "the weights sum to %s, not to 0", shortest(sum))
		}
		if len(c.Weights) == 0 && r.p.Given(weights) {
			if n, _ := r.p.index.doc.Find(weights); n.Kind == tomlpos.Table && len(n.Kids) == 0 {
				r.fail(weights, BadContrast, "write weights such as { a = 1, b = -1 }", "there are no weights")
			}
		}
	}
}

func (r *resolver) analysis() {
	p := r.p
	a := &p.Analysis
	r.contrasts("analysis.contrast", a.Contrasts)
	if a.Comparison == "dunnett" {
		r.control("analysis.comparison")
	}
	r.refer("analysis.variance_by", a.VarianceBy, &r.factors)
	if a.DoseResponse != nil {
		const key = "analysis.dose_response.factor"
		if r.refer(key, a.DoseResponse.Factor, &r.factors) {
			if f := p.Factor(a.DoseResponse.Factor); f.Levels != nil && f.Values == nil {
				v := r.fail(key, NotQuantitative, "write the levels as numbers without quotes, if they are", "the levels of %s are words; a dose response needs numbers", quote(f.Name))
				v.Relate(p.Pos(at("factor", slices.IndexFunc(p.Factors, func(g Factor) bool { return g.Name == f.Name }), "levels")), "the levels are listed here")
			}
		}
	}
}

// sequences checks carry-over and time trends against the units.
func (r *resolver) sequences() {
	if c := r.p.CarryOver; c != nil {
		r.carryOver(c)
	}
	if t := r.p.TimeTrend; t != nil {
		r.timeTrend(t)
	}
}

func (r *resolver) carryOver(c *CarryOver) {
	factor := r.factorOrListed("carryover.factor", c.Factor)
	on, along := r.refer("carryover.on", c.On, &r.units), r.refer("carryover.along", c.Along, &r.units)
	if !factor || !on || !along {
		return
	}
	i := slices.IndexFunc(r.p.Units, func(u Unit) bool { return slices.Contains(u.Receives, c.Factor) })
	if i < 0 || r.pair("carryover.factor", &r.p.Units[i], c.On, c.Along) {
		r.order("carryover.sequences", c.Sequences, c.Factor, c.On, c.Along)
	}
}

func (r *resolver) timeTrend(t *TimeTrend) {
	on, along := r.refer("time_trend.on", t.On, &r.units), r.refer("time_trend.along", t.Along, &r.units)
	if !on || !along {
		return
	}
	i := slices.IndexFunc(r.p.Units, func(u Unit) bool {
		return slices.Contains(u.Crosses, t.On) && slices.Contains(u.Crosses, t.Along)
	})
	if i < 0 || t.On == t.Along {
		r.fail("time_trend.on", BadSequence, fmt.Sprintf("write [[unit]] with crosses = [%s, %s]", quote(t.On), quote(t.Along)), "no unit crosses %s and %s", quote(t.On), quote(t.Along))
		return
	}
	u := r.p.Units[i]
	if n := r.p.Unit(t.Along).Count; len(n) == 1 && t.Order >= n[0] {
		r.fail("time_trend.order", BadSequence, fmt.Sprintf("write order = %d or less", max(1, n[0]-1)), "a polynomial of order %d needs more than the %d units of %s", t.Order, n[0], quote(t.Along))
	}
	switch {
	case len(t.Sequences) == 0:
	case r.p.CarryOver != nil && len(r.p.CarryOver.Sequences) > 0:
		f := r.fail("time_trend.sequences", Conflict, "keep one of them", "the sequences are given under [carryover] already")
		f.Relate(r.p.Pos("carryover.sequences"), "first given here")
	case len(u.Receives) != 1:
		r.fail("time_trend.sequences", BadSequence, "delete them", "the unit %s does not receive one factor, so sequences have no meaning", quote(u.Name))
	default:
		r.order("time_trend.sequences", t.Sequences, u.Receives[0], t.On, t.Along)
	}
}

// pair tells whether u crosses two units that differ.
func (r *resolver) pair(key string, u *Unit, on, along string) bool {
	if on != along && slices.Contains(u.Crosses, on) && slices.Contains(u.Crosses, along) {
		return true
	}
	hint := fmt.Sprintf("write [[unit]] with crosses = [%s, %s], and let it receive the factor", quote(on), quote(along))
	if on == along {
		hint = "on is who is treated, along is the time, such as cow and period"
	}
	r.fail(key, BadSequence, hint, "the unit %s, which receives the factor, does not cross %s and %s", quote(u.Name), quote(on), quote(along))
	return false
}

// order checks sequences of levels, and brings the levels to their form.
func (r *resolver) order(key string, sequences [][]string, factor, on, along string) {
	periods := r.p.Unit(along).Count
	for i, s := range sequences {
		own := tomlpos.Index(key, i)
		for j := range s {
			s[j], _ = r.level(tomlpos.Index(own, j), factor, s[j])
		}
		if len(periods) == 1 && s != nil && len(s) != periods[0] {
			f := r.fail(own, BadSequence, "give one level for each", "the sequence has %d levels, and there are %d units of %s", len(s), periods[0], quote(along))
			f.Relate(r.p.ValuePos(at("unit", slices.Index(r.units.names, along), "count")), "count is given here")
		}
	}
	if n := r.total(r.p.Unit(on)); n > 0 && len(sequences) > n {
		r.fail(key, BadSequence, "", "there are %d sequences and only %d units of %s", len(sequences), n, quote(on))
	}
}

// size checks what the sample size refers to.
func (r *resolver) size() {
	s := r.p.SampleSize
	if s == nil {
		return
	}
	r.refer("sample_size.response", s.Response, &r.responses)
	if s.Term != "" {
		for _, n := range strings.Split(s.Term, ":") {
			if n == listed {
				r.factorOrListed("sample_size.term", n)
			} else if !slices.Contains(r.repeated.names, n) {
				r.refer("sample_size.term", n, &r.factors)
			}
		}
	}
	if s.Contrast != "" {
		var known []string
		for _, c := range r.p.Analysis.Contrasts {
			known = append(known, c.Name)
		}
		for _, p := range r.p.Responses {
			if s.Response == "" || p.Name == s.Response {
				for _, c := range p.Contrasts {
					known = append(known, c.Name)
				}
			}
		}
		for _, f := range r.p.Factors {
			if f.Values != nil {
				for _, power := range []string{"linear", "quadratic", "cubic"} {
					known = append(known, f.Name+": "+power)
				}
			}
		}
		if !slices.Contains(known, s.Contrast) {
			r.fail("sample_size.contrast", UnknownName, r.d.suggest(s.Contrast, known), "there is no contrast %s", quote(s.Contrast))
		}
	}
	for _, v := range s.SD {
		if v.Stratum == "" {
			continue
		}
		strata := r.units
		if slices.ContainsFunc(r.p.Units, func(u Unit) bool { return len(u.Animals) > 0 || u.AnimalsColumn != "" }) {
			strata.names, strata.set = append(slices.Clone(strata.names), "animal"), maps.Clone(strata.set)
			strata.set["animal"] = len(strata.set)
		}
		name, times, repeated := strings.Cut(v.Stratum, ":")
		key := tomlpos.Join("sample_size.sd", v.Stratum)
		r.refer(key, name, &strata)
		if repeated {
			r.refer(key, times, &r.repeated)
		}
	}
}

// unitName checks the names that identify a unit.
func (r *resolver) unitName(key string, u UnitName) {
	for _, n := range u {
		own := tomlpos.Join(key, n.Unit)
		if !r.refer(own, n.Unit, &r.units) {
			continue
		}
		unit := r.p.Unit(n.Unit)
		if len(unit.Crosses) > 0 {
			r.fail(own, UnknownName, "name "+enumerate(unit.Crosses)+" instead", "units of %s have no names of their own", quote(n.Unit))
		}
	}
}

// time checks the time of a repeated row, and brings it to the form it has in the
// list of times. Rows that are only gathered over a column may have any.
func (r *resolver) time(key, time string) string {
	if time == "" || r.repeated.open {
		return time
	}
	for i := range r.p.Repeated {
		t := &r.p.Repeated[i]
		if t.At == nil {
			return time // said already
		}
		if r.times[t.Name] == nil {
			r.times[t.Name] = setOf(t.At)
		}
		if s := levelText(time, t.Values != nil); r.times[t.Name][s] {
			return s
		}
	}
	if slices.ContainsFunc(r.p.Responses, func(s Response) bool { return s.Over != "" }) {
		return time
	}
	if len(r.p.Repeated) == 0 {
		r.fail(key, UnknownName, "delete at, or declare the times in [[repeated]]", "there are no repeated times")
		return time
	}
	f := r.fail(key, UnknownLevel, r.d.suggest(time, r.p.Repeated[0].At), "%s is none of the repeated times", quote(time))
	f.Relate(r.p.Pos("repeated[0].at"), "they are listed here")
	return time
}

func (r *resolver) data() {
	p := r.p
	r.plot()
	if p.Roster == nil {
		for i, u := range p.Units {
			if u.AnimalsColumn != "" {
				r.fail(at("unit", i, "animals"), NeedsKey, "write the number of animals, or add [roster] with file", "the column %s is one of the roster, and there is no roster", quote(u.AnimalsColumn))
			}
		}
		if len(p.Randomization.BalanceOn) > 0 {
			r.fail("randomization.balance_on", NeedsKey, "add [roster] with file", "a draw is balanced on columns of the roster, and there is no roster")
		}
	}
	if p.Data == nil {
		return
	}
	files := map[string]string{p.Data.File: "data.file"}
	for i, f := range p.Data.Further {
		own := tomlpos.Index("data.further", i)
		r.refer(own+".unit", f.Unit, &r.units)
		if first, twice := files[f.File]; twice && f.File != "" {
			v := r.fail(own+".file", Duplicate, "name each file once", "the file %s is named twice", quote(f.File))
			v.Relate(p.ValuePos(first), "first named here")
			continue
		}
		files[f.File] = own + ".file"
	}
	for i, s := range p.Responses {
		if _, ok := files[s.File]; s.File != "" && !ok {
			known := []string{p.Data.File}
			for _, f := range p.Data.Further {
				known = append(known, f.File)
			}
			r.fail(at("response", i, "file"), UnknownName, r.d.suggest(s.File, known)+"; further files stand under [[data.further]]", "the data have no file %s", quote(s.File))
		}
	}
	for i, c := range p.Data.Confirmed {
		own := tomlpos.Index("data.confirmed", i)
		r.unitName(own+".unit", c.Unit)
		p.Data.Confirmed[i].At = r.time(own+".at", c.At)
		r.refer(own+".response", c.Response, &r.responses)
	}
	r.columns()
}

// columns warns of names that nothing asks for.
func (r *resolver) columns() {
	p := r.p
	wanted := map[string]bool{"order": true, "code": true, listed: true, p.Data.DateColumn: true}
	for name := range r.where {
		wanted[name] = true
	}
	for _, s := range p.Responses {
		for _, w := range []string{s.Total, s.Event, s.Over} {
			wanted[w] = true
		}
		for w := range words(s.Compute) {
			wanted[w] = true
		}
		for _, c := range s.Where {
			wanted[c.Column] = true
		}
	}
	for _, u := range p.Units {
		wanted[u.AnimalsColumn] = true
	}
	if p.Roster != nil {
		wanted[p.Roster.BlockBy] = true
	}
	for _, b := range p.Randomization.BalanceOn {
		wanted[b] = true
	}
	var all []string
	for w := range wanted {
		all = append(all, w)
	}
	slices.Sort(all)
	for _, c := range p.Data.Columns {
		if !wanted[c.Name] {
			hint := "delete it, or mend the name"
			if near := diag.Nearest(c.Name, all); near != "" {
				hint = fmt.Sprintf("did you mean %s?", quote(near))
			}
			f := r.warn(tomlpos.Join("data.columns", c.Name), NotUsed, hint, "nothing asks for a column %s", quote(c.Name))
			f.Pos = p.Pos(f.Key)
		}
	}
}

// plot checks the names of the units that are rows and columns of the field.
func (r *resolver) plot() {
	if r.p.Plot == nil || r.p.Plot.RowColumn == nil {
		return
	}
	const key = "plot.row_column"
	r.referAll(key, r.p.Plot.RowColumn, &r.units)
	if n, _ := r.p.index.doc.Find(key); len(n.Kids) != 2 {
		r.fail(key, TooFew, `write row_column = ["row", "column"]`, "expected two units, found %d", len(n.Kids))
	}
}

// conduct checks what corrections, exclusions and events refer to.
func (r *resolver) conduct() {
	p := r.p
	var files []string
	if p.Data != nil {
		files = append(files, p.Data.File)
		for _, f := range p.Data.Further {
			files = append(files, f.File)
		}
	}
	if p.Roster != nil {
		files = append(files, p.Roster.File)
	}
	for i, c := range p.Corrections {
		own := tomlpos.Index("correction", i)
		if c.File != "" && !slices.Contains(files, c.File) && !slices.Contains(files, "") {
			r.fail(own+".file", UnknownName, r.d.suggest(c.File, files), "the trial has no file %s of data or roster", quote(c.File))
		}
		if p.Roster == nil || c.File != p.Roster.File { // a roster may have the animals' own numbers
			r.unitName(own+".unit", c.Unit)
		}
		p.Corrections[i].At = r.time(own+".at", c.At)
	}
	for i, e := range p.Exclusions {
		own := tomlpos.Index("exclusion", i)
		r.unitName(own+".unit", e.Unit)
		p.Exclusions[i].At = r.time(own+".at", e.At)
		r.referAll(own+".responses", e.Responses, &r.responses)
		if e.Rule != "" && !r.rules[e.Rule] {
			r.warn(own+".rule", NotPlanned, r.d.suggest(e.Rule, p.Eligibility.ExclusionRules), "%s is none of the exclusion rules set before the trial", quote(e.Rule))
		}
	}
	for i, e := range p.Events {
		r.unitName(tomlpos.Index("event", i)+".unit", e.Unit)
	}
	if p.Data != nil {
		listed := map[string]int{"exclusion": len(p.Exclusions), "event": len(p.Events), "deviation": len(p.Deviations)}
		for _, w := range p.Data.None {
			if listed[w] > 0 {
				f := r.fail("data.none", Conflict, "take the word out, or the table", "it is confirmed that there was no %s, and one is recorded", w)
				f.Relate(r.p.Pos(tomlpos.Index(w, 0)), "recorded here")
			}
		}
	}
}
