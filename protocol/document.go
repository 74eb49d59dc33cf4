package protocol

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// document decodes the whole file. Each table has a function that states its keys,
// their types, what they may be and what they are when absent; references between
// tables are looked at afterwards, by resolve.
func (d *decoder) document(root *table) {
	p := d.p
	root.get("protocol")
	if t := root.table("trial"); t != nil {
		p.Trial = t.trial()
		t.close()
	} else if !root.has("trial") {
		root.fail("trial", MissingKey, "write [trial] with code, title and objective", "the table [trial] is missing")
	}
	each(root, "person", maxList, &p.Persons, (*table).person)
	only(root, "approval", &p.Approval, (*table).approval)
	only(root, "animals", &p.Animals, (*table).animals)
	only(root, "material", &p.Material, (*table).material)
	only(root, "site", &p.Site, (*table).site)
	only(root, "plot", &p.Plot, (*table).plot)
	each(root, "input", maxList, &p.Inputs, (*table).input)
	if t := root.table("eligibility"); t != nil {
		p.Eligibility = Eligibility{Include: t.texts("include"), Exclude: t.texts("exclude"), ExclusionRules: t.words("exclusion_rules")}
		t.close()
	}
	only(root, "housing", &p.Housing, (*table).housing)
	only(root, "welfare", &p.Welfare, (*table).welfare)
	each(root, "factor", maxFactors, &p.Factors, (*table).factor)
	each(root, "treatment", maxLevels, &p.Treatments, (*table).treatment)
	each(root, "item", maxList, &p.Items, (*table).testItem)
	each(root, "table", maxList, &p.Tables, (*table).extraTable)
	each(root, "unit", maxUnits, &p.Units, (*table).unit)
	only(root, "roster", &p.Roster, (*table).roster)
	only(root, "blinding", &p.Blinding, (*table).blinding)
	p.Randomization = Randomization{Candidates: 1, Codes: p.Blinding != nil && (p.Blinding.Conduct == masked || p.Blinding.Assessment == masked)}
	if t := root.table("randomization"); t != nil {
		p.Randomization = t.randomization(p.Randomization)
		t.close()
	}
	only(root, "sample_size", &p.SampleSize, (*table).sampleSize)
	each(root, "response", maxResponses, &p.Responses, (*table).response)
	if len(p.Responses) == 1 && p.Responses[0].Role == "" {
		p.Responses[0].Role = "primary"
	}
	for i := range p.Responses {
		if p.Responses[i].Role == "" {
			p.Responses[i].Role = "secondary"
		}
	}
	each(root, "covariate", maxCovariate, &p.Covariates, (*table).covariate)
	each(root, "repeated", maxFactors, &p.Repeated, (*table).repeated)
	only(root, "carryover", &p.CarryOver, (*table).carryOver)
	only(root, "time_trend", &p.TimeTrend, (*table).timeTrend)
	analysis := root.table("analysis")
	if analysis == nil {
		analysis = &table{d: d, path: "analysis", shape: "[analysis]"}
	}
	p.Analysis = analysis.analysis()
	analysis.close()
	only(root, "data", &p.Data, (*table).data)
	each(root, "correction", maxList, &p.Corrections, (*table).correction)
	each(root, "exclusion", maxList, &p.Exclusions, (*table).exclusion)
	each(root, "event", maxList, &p.Events, (*table).event)
	each(root, "deviation", maxList, &p.Deviations, (*table).deviation)
	each(root, "amendment", maxList, &p.Amendments, (*table).amendment)
	each(root, "signature", maxList, &p.Signatures, (*table).signature)
	only(root, "records", &p.Records, (*table).records)
	report := root.table("report")
	if report == nil {
		report = &table{d: d, path: "report", shape: "[report]"}
	}
	p.Report = report.report()
	report.close()
	root.close()
}

// each decodes the tables of a key that may be repeated.
func each[T any](root *table, key string, most int, into *[]T, decode func(*table) T) {
	for _, t := range root.tables(key, most) {
		*into = append(*into, decode(t))
		t.close()
	}
}

// only decodes the table of a key that stands once.
func only[T any](root *table, key string, into **T, decode func(*table) T) {
	if t := root.table(key); t != nil {
		v := decode(t)
		t.close()
		*into = &v
	}
}

const masked = "masked"

func (t *table) trial() Trial {
	t.need("code", "title", "objective")
	tr := Trial{
		Code:             t.word("code"),
		Title:            t.word("title"),
		Background:       t.text("background"),
		SpeciesRationale: t.text("species_rationale"),
		Objective:        t.text("objective"),
		Hypotheses:       t.texts("hypotheses"),
		Called:           t.str("called"),
		Site:             t.str("site"),
		Start:            t.date("start"),
		End:              t.date("end"),
		Registration:     t.str("registration"),
		Funding:          t.str("funding"),
		Interests:        t.str("interests"),
		DataAccess:       t.str("data_access"),
	}
	if s, ok := t.m["objective"].(string); ok && strings.TrimSpace(s) == "" {
		t.fail("objective", BadText, "write what the trial shall find out", "the text is empty")
	}
	return tr
}

func (t *table) person() Person {
	t.need("name")
	p := Person{Name: t.word("name"), Role: t.str("role"), ORCID: t.str("orcid"), Affiliation: t.str("affiliation")}
	if why, hint := badORCID(p.ORCID); why != "" {
		t.fail("orcid", BadORCID, hint, "%s", why)
		p.ORCID = ""
	}
	return p
}

// badORCID tells what is wrong with an ORCID identifier; empty is none.
//
// Source: ISO/IEC 7064:2003, MOD 11-2, which the identifier's check character
// follows.
func badORCID(s string) (why, hint string) {
	if s == "" {
		return "", ""
	}
	shape := "write the sixteen characters in groups of four, such as 0000-0002-1825-0097"
	if len(s) != 19 {
		return fmt.Sprintf("%s is not an ORCID identifier", quote(s)), shape
	}
	total := 0
	for i := range len(s) {
		c := s[i]
		switch {
		case i == 4 || i == 9 || i == 14:
			if c != '-' {
				return fmt.Sprintf("%s is not an ORCID identifier", quote(s)), shape
			}
		case i == 18:
			want := byte('X')
			if r := (12 - total%11) % 11; r < 10 {
				want = '0' + byte(r)
			}
			if c != want {
				return fmt.Sprintf("the check digit of %s is wrong", quote(s)), "compare it with the person's record; one digit is mistyped"
			}
		case c < '0' || c > '9':
			return fmt.Sprintf("%s is not an ORCID identifier", quote(s)), shape
		default:
			total = (total + int(c-'0')) * 2
		}
	}
	return "", ""
}

func (t *table) approval() Approval {
	severity := []string{"none", "mild", "moderate", "severe", "non-recovery"}
	return Approval{
		Body:             t.str("body"),
		Number:           t.str("number"),
		Date:             t.date("date"),
		Expires:          t.date("expires"),
		Legislation:      t.str("legislation"),
		Severity:         t.enum("severity", "", severity...),
		SeverityObserved: t.enum("severity_observed", "", severity...),
	}
}

func (t *table) animals() Animals {
	return Animals{
		Species:         t.str("species"),
		Breed:           t.str("breed"),
		Sex:             t.str("sex"),
		Source:          t.str("source"),
		Health:          t.str("health"),
		Genotype:        t.str("genotype"),
		PreviousUse:     t.str("previous_use"),
		FoodChain:       t.yes("food_chain"),
		Age:             t.quantity("age", notBelow0),
		Mass:            t.quantity("mass", positive),
		MassEnd:         t.quantity("mass_end", positive),
		Acclimatization: t.quantity("acclimatization", notBelow0),
	}
}

func (t *table) material() Material {
	return Material{Crop: t.str("crop"), Variety: t.str("variety"), SeedRate: t.str("seed_rate"), Source: t.str("source")}
}

func (t *table) site() Site {
	return Site{
		Name:         t.str("name"),
		Latitude:     t.number("latitude", span{low: -90, high: 90, words: "between -90 and 90 degrees"}),
		Longitude:    t.number("longitude", span{low: -180, high: 180, words: "between -180 and 180 degrees"}),
		Soil:         t.str("soil"),
		Season:       t.str("season"),
		PreviousCrop: t.str("previous_crop"),
		Weather:      t.str("weather"),
	}
}

func (t *table) plot() Plot {
	return Plot{
		Length:    t.quantity("length", positive),
		Width:     t.quantity("width", positive),
		NetArea:   t.quantity("net_area", positive),
		Border:    t.quantity("border", notBelow0),
		RowColumn: t.words("row_column"),
	}
}

func (t *table) input() Input {
	t.need("what")
	return Input{On: t.date("on"), What: t.str("what"), Rate: t.str("rate")}
}

func (t *table) housing() Housing {
	return Housing{
		GroupSize:   t.whole("group_size", 1, maxCount, 0),
		FloorArea:   t.quantity("floor_area", positive),
		Temperature: t.quantity("temperature", anyNumber),
		Lighting:    t.str("lighting"),
		Bedding:     t.str("bedding"),
		Enrichment:  t.str("enrichment"),
		Feed:        t.str("feed"),
		Water:       t.str("water"),
	}
}

func (t *table) welfare() Welfare {
	w := Welfare{
		Aim:             t.enum("aim", "", "commercial conditions", "laboratory"),
		HumaneEndpoints: t.texts("humane_endpoints"),
		Rescue:          t.text("rescue"),
		Euthanasia:      t.text("euthanasia"),
		Fate:            t.str("fate"),
		Residues:        t.str("residues"),
		StaffSafety:     t.texts("staff_safety"),
		Replacement:     t.text("replacement"),
		Reduction:       t.text("reduction"),
		Refinement:      t.text("refinement"),
	}
	if m := t.table("monitoring"); m != nil {
		w.Monitoring = Monitoring{TimesPerDay: orElse(m.number("times_per_day", positive), 0), By: m.str("by")}
		m.close()
	}
	each(t, "procedure", maxList, &w.Procedures, (*table).procedure)
	return w
}

func (t *table) procedure() Procedure {
	t.need("kind")
	return Procedure{
		Kind: t.enum("kind", "", "blood sample", "injection", "gavage", "fasting", "water restriction", "single housing",
			"restraint", "marking", "surgery", "transport", "challenge", "deficient diet", "other"),
		Name:        t.str("name"),
		Volume:      t.quantity("volume", positive),
		Every:       t.quantity("every", positive),
		Duration:    t.quantity("duration", positive),
		Times:       t.whole("times", 1, maxCount, 0),
		Route:       t.str("route"),
		How:         t.str("how"),
		Where:       t.str("where"),
		Why:         t.str("why"),
		Analgesia:   t.str("analgesia"),
		Anaesthesia: t.str("anaesthesia"),
	}
}

// labelled reads the printed name of something; without one the name serves, with
// spaces.
func (t *table) labelled(name string) string {
	if s := t.str("label"); s != "" {
		return s
	}
	return strings.ReplaceAll(name, "_", " ")
}

func (t *table) factor() Factor {
	t.need("name", "levels")
	name := t.name()
	f := Factor{Name: name, Label: t.labelled(name), Unit: t.str("unit"), Random: isTrue(t.yes("random"))}
	f.Levels, f.Values = t.levels("levels", "level")
	level := func(v any) string { return levelText(v, f.Values != nil) }
	known := setOf(f.Levels)
	controls := map[string]bool{}
	switch v, ok := t.get("control"); {
	case !ok:
	default:
		items, isList := asList(v)
		if !isList {
			items = []any{v}
		}
		for i, v := range items {
			l, key := level(v), "control"
			fail := func(code, hint, format string, args ...any) {
				if isList {
					t.item(key, i, code, hint, format, args...)
				} else {
					t.fail(key, code, hint, format, args...)
				}
			}
			switch {
			case l == "":
				fail(WrongType, oneOf(f.Levels), "expected a level, found %s", found(v))
			case f.Levels == nil: // said already
			case !known[l]:
				fail(UnknownLevel, t.d.suggest(l, f.Levels), "%s is not a level of this factor", quote(l))
			case controls[l]:
				fail(Duplicate, "keep one of them", "%s is listed twice", quote(l))
			default:
				controls[l] = true
				f.Control = append(f.Control, l)
			}
		}
	}
	if sub, names := t.free("describe", "descriptions of levels"); sub != nil {
		texts := map[string]string{}
		for _, n := range names {
			s, l := sub.str(n), levelText(n, f.Values != nil)
			switch {
			case f.Levels == nil:
			case !known[l]:
				sub.fail(n, UnknownLevel, t.d.suggest(n, f.Levels), "%s is not a level of this factor", quote(n))
			default:
				texts[l] = s
			}
		}
		for _, l := range f.Levels {
			if s, ok := texts[l]; ok {
				f.Describe = append(f.Describe, Described{Level: l, Text: s})
			}
		}
	}
	return f
}

func setOf(words []string) map[string]bool {
	set := make(map[string]bool, len(words))
	for _, w := range words {
		set[w] = true
	}
	return set
}

// levelText is the text of a level as it stands in lists, tables and keys; "" if v
// is neither text nor a finite number. The text of a number is brought to the form
// that the levels of a quantitative factor have.
func levelText(v any, quantitative bool) string {
	if s, _, ok := number(v); ok {
		return s
	}
	s, _ := v.(string)
	if quantitative {
		if x, err := strconv.ParseFloat(strings.TrimSpace(s), 64); err == nil {
			if l, _, ok := number(x); ok {
				return l
			}
		}
	}
	return s
}

// levels reads a list that is all numbers or all words.
func (t *table) levels(key, of string) (levels []string, values []float64) {
	items, ok := t.list(key, of+"s")
	if !ok {
		return nil, nil
	}
	if len(items) > maxLevels {
		t.fail(key, TooMany, "", "there are %d %ss, more than %d", len(items), of, maxLevels)
		return nil, nil
	}
	numbers, words := 0, 0
	for _, v := range items {
		switch v.(type) {
		case int64, float64:
			numbers++
		case string:
			words++
		}
	}
	first := map[string]int{}
	bad := false
	for i, v := range items {
		l, x, isNumber := number(v)
		s, isWord := v.(string)
		switch {
		case isNumber && numbers >= words:
			values = append(values, x)
		case isWord && words > numbers:
			l = s
		case isNumber || isWord:
			t.item(key, i, MixedLevels, "write all as numbers, or all in quotes", "%s stands among %s", found(v),
				map[bool]string{true: "numbers", false: "texts"}[isWord])
			bad = true
			continue
		default:
			code := WrongType
			if _, why := finite(v); why != "" {
				code = why
			}
			t.item(key, i, code, "write numbers, or texts in quotes", "expected a %s, found %s", of, found(v))
			bad = true
			continue
		}
		if why := badWord(l); why != "" {
			t.item(key, i, BadText, "", "%s", why)
			bad = true
			continue
		}
		if j, twice := first[l]; twice {
			f := t.item(key, i, Duplicate, "keep one of them", "the %s %s is listed twice", of, quote(l))
			f.Relate(t.d.position(t.node.Child(key).Item(j), true), "first listed here")
			bad = true
			continue
		}
		first[l] = i
		levels = append(levels, l)
	}
	if len(items) == 0 {
		t.fail(key, TooFew, "", "the list of %ss is empty", of)
	}
	if bad || len(items) == 0 {
		return nil, nil
	}
	return levels, values
}

func (t *table) treatment() Treatment {
	t.need("code")
	tr := Treatment{Code: t.label("code"), Control: isTrue(t.yes("control"))}
	if sub, names := t.free("levels", "levels of factors"); sub != nil {
		tr.Levels = make(map[string]string, len(names))
		for _, n := range names {
			tr.Levels[n] = sub.scalar(n)
		}
	}
	return tr
}

func (t *table) testItem() Item {
	t.need("name")
	return Item{
		Name:     t.word("name"),
		Batch:    t.str("batch"),
		Purity:   t.str("purity"),
		Expires:  t.date("expires"),
		Storage:  t.str("storage"),
		Supplier: t.str("supplier"),
		Analysed: t.str("analysed"),
	}
}

func (t *table) extraTable() ExtraTable {
	t.need("file")
	return ExtraTable{File: t.file("file"), Caption: t.str("caption"), Section: t.str("section")}
}

func (t *table) roster() Roster {
	t.need("file")
	return Roster{File: t.file("file"), BlockBy: t.str("block_by")}
}

func (t *table) blinding() Blinding {
	return Blinding{
		Allocation: t.str("allocation"),
		Conduct:    t.str("conduct"),
		Assessment: t.str("assessment"),
		Analysis:   t.str("analysis"),
		KeyHolder:  t.str("key_holder"),
		Unblinded:  t.date("unblinded"),
	}
}

func (t *table) randomization(otherwise Randomization) Randomization {
	r := Randomization{
		Method:     t.str("method"),
		BalanceOn:  t.words("balance_on"),
		Candidates: t.whole("candidates", 1, 1_000_000, otherwise.Candidates),
		Codes:      otherwise.Codes,
		By:         t.str("by"),
		On:         t.date("on"),
	}
	if codes := t.yes("codes"); codes != nil {
		r.Codes = *codes
	}
	if t.m["seed"] == "" {
		t.get("seed") // draw makes one
	} else {
		r.Seed = t.label("seed")
	}
	return r
}

func (t *table) sampleSize() SampleSize {
	t.need("basis")
	s := SampleSize{
		Basis:             t.enum("basis", "", "power", "error df", "precision", "stated"),
		Response:          t.word("response"),
		Term:              t.word("term"),
		Contrast:          t.word("contrast"),
		Difference:        t.number("difference", positive),
		DifferencePercent: t.number("difference_percent", positive),
		Margin:            t.number("margin", positive),
		HalfWidth:         t.number("half_width", positive),
		CV:                t.number("cv", positive),
		ICC:               t.number("icc", below1),
		Power:             t.number("power", proportion),
		Sides:             t.whole("sides", 1, 2, 2),
		Attrition:         t.number("attrition", below1),
		Source:            t.str("source"),
	}
	if _, isTable := t.m["sd"].(map[string]any); isTable {
		sub, names := t.free("sd", "")
		for _, n := range names {
			if x := sub.number(n, positive); x != nil {
				s.SD = append(s.SD, StratumValue{Stratum: n, Value: *x})
			}
		}
		if len(names) == 0 {
			t.fail("sd", TooFew, "write sd = 24, or one for each unit", "no standard deviation is given")
		}
	} else if x := t.number("sd", positive); x != nil {
		s.SD = []StratumValue{{Value: *x}}
	}
	if s.Basis == "power" && !t.has("power") {
		power := 0.80
		s.Power = &power
	}
	t.exclude("difference", "difference_percent")
	t.exclude("sd", "cv")
	t.exclude("term", "contrast")
	switch s.Basis {
	case "power":
		t.wants("basis = \"power\"", "difference", "difference_percent", "margin")
		t.wants("basis = \"power\"", "sd", "cv")
	case "precision":
		t.wants("basis = \"precision\"", "half_width")
		t.wants("basis = \"precision\"", "sd", "cv")
	case "stated":
		t.wants("basis = \"stated\"", "source")
	}
	return s
}

// exclude reports two keys that cannot stand together, at the later one.
func (t *table) exclude(a, b string) {
	if !t.has(a) || !t.has(b) {
		return
	}
	first, second := a, b
	na, nb := t.node.Child(a), t.node.Child(b)
	if na != nil && nb != nil && na.Key > nb.Key {
		first, second = b, a
	}
	f := t.fail(second, Conflict, "keep one of them", "%s cannot stand beside %s", second, first)
	f.Pos = t.d.position(t.node.Child(second), false)
	f.Relate(t.d.position(t.node.Child(first), false), first+" is given here")
}

// wants warns that a statement is not complete without one of some keys.
func (t *table) wants(what string, keys ...string) {
	if slices.ContainsFunc(keys, t.has) {
		return
	}
	t.warn("", Incomplete, "add "+strings.Join(keys, " or "), "%s is not complete without %s", what, strings.Join(keys, " or "))
}

func (t *table) covariate() Covariate {
	t.need("name")
	name := t.name()
	return Covariate{
		Name:     name,
		Label:    t.labelled(name),
		Unit:     t.str("unit"),
		Measured: t.date("measured"),
		Slopes:   t.enum("slopes", "common", "common", "by stratum"),
	}
}

func (t *table) repeated() Repeated {
	t.need("name", "on", "at")
	name := t.name()
	r := Repeated{
		Name:  name,
		Label: t.labelled(name),
		On:    t.word("on"),
		Unit:  t.str("unit"),
		Correlation: t.enum("correlation", "auto", "auto", "compound symmetry", "heterogeneous compound symmetry", "autoregressive",
			"heterogeneous autoregressive", "antedependence", "unstructured", "split plot in time"),
	}
	r.At, r.Values = t.levels("at", "time")
	return r
}

func (t *table) carryOver() CarryOver {
	t.need("factor", "along", "on")
	return CarryOver{Factor: t.word("factor"), Along: t.word("along"), On: t.word("on"), Sequences: t.sequences()}
}

// sequences reads lists of levels, one list for each sequence.
func (t *table) sequences() [][]string {
	items, ok := t.list("sequences", "lists of levels")
	if !ok {
		return nil
	}
	var all [][]string
	for i, v := range items {
		levels, ok := asList(v)
		if !ok {
			t.item("sequences", i, WrongType, `write [["A", "B", "A"], ["B", "A", "B"]]`, "expected a list of levels, found %s", found(v))
			continue
		}
		var s []string
		for _, v := range levels {
			l := levelText(v, false)
			if l == "" {
				t.item("sequences", i, WrongType, "", "expected a level, found %s", found(v))
				s = nil
				break
			}
			s = append(s, l)
		}
		all = append(all, s)
	}
	return all
}

func (t *table) timeTrend() TimeTrend {
	t.need("on", "along")
	return TimeTrend{On: t.word("on"), Along: t.word("along"), Order: t.whole("order", 1, 10, 1), Sequences: t.sequences()}
}

func (t *table) data() Data {
	t.need("file")
	d := Data{
		File:       t.file("file"),
		Missing:    []string{"", "NA", "."},
		Delimiter:  "auto",
		Decimal:    t.enum("decimal", "auto", "auto", ".", ","),
		DateColumn: t.str("date"),
		Locked:     t.date("locked"),
		EnteredBy:  t.str("entered_by"),
		CheckedBy:  t.str("checked_by"),
	}
	d.Delimiter = t.enum("delimiter", "auto", "auto", ",", ";", "\t")
	for _, w := range t.words("none") {
		if kinds := []string{"exclusion", "event", "deviation"}; slices.Contains(kinds, w) {
			d.None = append(d.None, w)
		} else {
			written, _ := t.list("none", "")
			t.item("none", slices.Index(written, any(w)), UnknownValue, t.d.suggest(w, kinds), "%s is not known here", quote(w))
		}
	}
	if d.Delimiter == "," && d.Decimal == "," {
		t.fail("decimal", Conflict, `write delimiter = ";" or decimal = "."`, "the comma cannot be both delimiter and decimal sign")
	}
	if items, ok := t.list("missing", "texts"); ok {
		d.Missing = []string{}
		for i, v := range items {
			s, ok := v.(string)
			if !ok {
				t.item("missing", i, WrongType, "write it in quotes", "expected a text, found %s", found(v))
				continue
			}
			d.Missing = append(d.Missing, s)
		}
	}
	if sub, names := t.free("columns", "our names and the file's headings"); sub != nil {
		first := map[string]string{}
		for _, n := range names {
			heading := sub.str(n)
			if heading == "" {
				if sub.m[n] == "" {
					sub.fail(n, BadText, "write the heading as it stands in the file", "the heading is empty")
				}
				continue
			}
			if other, twice := first[heading]; twice {
				f := sub.fail(n, Duplicate, "each column of the file has one name", "the heading %s is given to two names", quote(heading))
				f.Relate(t.d.position(sub.node.Child(other), false), "first given here")
				continue
			}
			first[heading] = n
			d.Columns = append(d.Columns, ColumnName{Name: n, Heading: heading})
		}
	}
	each(t, "further", maxUnits, &d.Further, func(t *table) FurtherData {
		t.need("file", "unit")
		return FurtherData{File: t.file("file"), Unit: t.word("unit")}
	})
	each(t, "confirmed", maxList, &d.Confirmed, func(t *table) Confirmed {
		t.need("unit", "response", "value")
		return Confirmed{
			Unit:     t.unitName("unit"),
			At:       t.scalar("at"),
			Response: t.word("response"),
			Value:    orElse(t.number("value", anyNumber), 0),
			Note:     t.str("note"),
			By:       t.str("by"),
		}
	})
	return d
}

// unitName reads the names that identify a unit: { block = "2", pen = 7 }.
func (t *table) unitName(key string) UnitName {
	v, ok := t.get(key)
	if !ok {
		return nil
	}
	if _, isTable := v.(map[string]any); !isTable {
		t.wrong(key, v, "the names that identify a unit", `write unit = { block = "2", pen = "7" }`)
		return nil
	}
	sub, names := t.free(key, "")
	var u UnitName
	for _, n := range names {
		if s := sub.label(n); s != "" {
			u = append(u, NamedUnit{Unit: n, Name: s})
		}
	}
	if len(names) == 0 {
		t.fail(key, TooFew, `write unit = { block = "2", pen = "7" }`, "no unit is named")
	}
	return u
}

func (t *table) correction() Correction {
	t.need("file", "unit", "column", "old", "new")
	t.wants("a correction", "reason")
	c := Correction{
		File:     t.file("file"),
		Unit:     t.unitName("unit"),
		At:       t.scalar("at"),
		Column:   t.word("column"),
		Old:      t.written("old"),
		New:      t.written("new"),
		Reason:   t.str("reason"),
		By:       t.str("by"),
		On:       t.date("on"),
		Recorded: t.date("recorded"),
	}
	if t.has("old") && t.m["old"] == t.m["new"] {
		t.fail("new", Conflict, "write what the cell should have said", "the new text is the old one")
	}
	return c
}

// written reads the text of a cell, digit for digit.
func (t *table) written(key string) string {
	if v, ok := t.m[key]; ok {
		if _, isText := v.(string); !isText {
			t.get(key)
			t.wrong(key, v, "the text of the cell", fmt.Sprintf("write it in quotes, as it stands in the file: %s = \"…\"", key))
			return ""
		}
	}
	return t.str(key)
}

func (t *table) exclusion() Exclusion {
	t.need("unit")
	t.wants("an exclusion", "reason")
	return Exclusion{
		Unit:             t.unitName("unit"),
		At:               t.scalar("at"),
		Responses:        t.words("responses"),
		Reason:           t.str("reason"),
		Rule:             t.str("rule"),
		By:               t.str("by"),
		On:               t.date("on"),
		BeforeUnblinding: t.yes("before_unblinding"),
	}
}

func (t *table) event() Event {
	t.need("kind")
	t.wants("an event", "on")
	e := Event{
		On:      t.date("on"),
		Unit:    t.unitName("unit"),
		Animals: t.whole("animals", 1, maxCount, 0),
		Kind:    t.enum("kind", "", "death", "removal", "illness", "move", wrongTreatment, treatmentChanged, "other"),
		Cause:   t.str("cause"),
		Action:  t.str("action"),
		Mass:    t.quantity("mass", positive),
		By:      t.str("by"),
		Given:   t.scalar("given"),
		From:    t.date("from"),
		To:      t.date("to"),
	}
	changed := e.Kind == wrongTreatment || e.Kind == treatmentChanged
	if changed && !t.has("given") {
		t.fail("given", NeedsKey, "add given = the level that the unit received", "an event of kind %s does not say what was given", quote(e.Kind))
	}
	if e.Kind != "" && !changed && t.has("given") {
		t.fail("given", Conflict, oneOf([]string{wrongTreatment, treatmentChanged}), "an event of kind %s has nothing that was given", quote(e.Kind))
	}
	return e
}

const (
	wrongTreatment   = "wrong treatment"
	treatmentChanged = "treatment changed"
)

func (t *table) deviation() Deviation {
	t.need("what")
	return Deviation{On: t.date("on"), What: t.str("what"), Effect: t.str("effect"), By: t.str("by")}
}

func (t *table) amendment() Amendment {
	t.need("what")
	t.wants("an amendment", "on")
	return Amendment{On: t.date("on"), What: t.str("what"), Why: t.str("why"), By: t.str("by"), Approval: t.str("approval")}
}

func (t *table) signature() Signature {
	t.need("who")
	return Signature{Who: t.word("who"), Meaning: t.str("meaning"), On: t.date("on")}
}

func (t *table) records() Records {
	return Records{Location: t.str("location"), RetainUntil: t.date("retain_until")}
}

func (t *table) report() Report {
	r := Report{Template: "audit", Paper: t.enum("paper", "A4", "A4", "letter"), Decimals: "auto"}
	builtIn := []string{"audit", "chapter", "plan"}
	if s := t.str("template"); s != "" {
		r.Template = s
		if !slices.Contains(builtIn, s) {
			why, hint := badPath(s)
			switch {
			case !strings.ContainsAny(s, "./"):
				t.fail("template", UnknownValue, t.d.suggest(s, builtIn)+"; a template of the folder is named with its ending", "there is no template %s", quote(s))
			case why != "":
				t.fail("template", BadPath, hint, "%s", why)
			}
		}
	}
	if sub, names := t.free("narrative", "places of the report and files"); sub != nil {
		for _, n := range names {
			if !slices.Contains(NarrativePlaces(), n) {
				sub.fail(n, UnknownName, t.d.suggest(n, NarrativePlaces()), "the report has no place %s for a narrative", quote(n))
				continue
			}
			if f := sub.file(n); f != "" {
				sub.read(n, f)
				r.Narrative = append(r.Narrative, NarrativePart{Place: n, File: f})
			}
		}
	}
	switch v, ok := t.get("decimals"); v := v.(type) {
	case int64:
		if n := t.whole("decimals", 0, 15, -1); n >= 0 {
			r.Decimals = strconv.Itoa(n)
		}
	case string:
		if v != "auto" {
			t.fail("decimals", UnknownValue, `write "auto" or a whole number`, "%s is not known here", quote(v))
		}
	default:
		if ok {
			t.wrong("decimals", v, `"auto" or a whole number`, "")
		}
	}
	return r
}
