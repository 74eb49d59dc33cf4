package seal

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strconv"
	"strings"
	"unicode"
)

// sections are the tables of the protocol in its order.
var sections = []string{
	"protocol", "trial", "person", "approval", "animals", "material", "site", "plot", "input", "eligibility", "housing", "welfare", "factor", "treatment",
	"item", "table", "unit", "roster", "randomization", "blinding", "sample_size", "response", "covariate", "repeated", "carryover", "time_trend",
	"analysis", "data", "correction", "exclusion", "event", "deviation", "amendment", "signature", "records", "report",
}

func rank(section string) int {
	if i := slices.Index(sections, section); i >= 0 {
		return i
	}
	return len(sections)
}

// phrase says how a key is called. {name} and {of} stand for the name of the innermost
// table that repeats and for what it is with its name.
type phrase struct {
	text   string
	single bool // a table that stands once
	whole  bool // a list that is shown as a whole
}

// phrases are the keys that are not called by their own words: key, or table.
var phrases = map[string]phrase{
	"trial": {text: "the trial", single: true}, "approval": {text: "the approval", single: true}, "animals": {text: "the animals", single: true},
	"material": {text: "the material", single: true}, "site": {text: "the site", single: true}, "plot": {text: "the plots", single: true},
	"eligibility": {single: true}, "housing": {text: "the housing", single: true}, "welfare": {text: "the welfare plan", single: true},
	"welfare.monitoring": {text: "the monitoring", single: true}, "roster": {text: "the roster", single: true},
	"randomization": {text: "the randomization", single: true}, "blinding": {text: "the masking", single: true},
	"sample_size": {text: "the sample size", single: true}, "carryover": {text: "the carry-over", single: true},
	"time_trend": {text: "the time trend", single: true}, "analysis": {single: true},
	"analysis.dose_response": {text: "the dose response", single: true}, "data": {text: "the data", single: true},
	"records": {text: "the records", single: true}, "report": {text: "the report", single: true},

	"response.contrasts": {text: "contrast"}, "input": {text: "input"}, "table": {text: "table"}, "repeated": {text: "set of times"},
	"data.further": {text: "data file"}, "data.confirmed": {text: "confirmation of"}, "correction": {text: "correction of"},
	"exclusion": {text: "exclusion of"}, "event": {text: "event of"}, "signature": {text: "signature of"},

	"protocol":                      {text: "format of the protocol"},
	"trial.species_rationale":       {text: "reason for the species"},
	"trial.hypotheses":              {text: "hypothesis"},
	"trial.called":                  {text: "declared name of the design"},
	"eligibility.include":           {text: "criterion of inclusion"},
	"eligibility.exclude":           {text: "criterion of exclusion"},
	"eligibility.exclusion_rules":   {text: "exclusion rule"},
	"welfare.humane_endpoints":      {text: "humane endpoint"},
	"welfare.staff_safety":          {text: "safety of staff"},
	"factor.levels":                 {text: "levels of {of}", whole: true},
	"repeated.at":                   {text: "times of {of}", whole: true},
	"unit.count":                    {text: "units of {name}{per}"},
	"unit.labels":                   {text: "names of the units of {name}", whole: true},
	"unit.within":                   {text: "what {name} lies within"},
	"unit.crosses":                  {text: "what {name} crosses"},
	"unit.receives":                 {text: "what {name} receives"},
	"unit.carries":                  {text: "class that {name} carries"},
	"unit.animals":                  {text: "animals in each {name}"},
	"unit.interacts":                {text: "interaction of {name} with the treatments"},
	"unit.random":                   {text: "{name} as random"},
	"roster.block_by":               {text: "column that forms the blocks"},
	"randomization.balance_on":      {text: "covariates on which the draw is balanced"},
	"randomization.codes":           {text: "masked codes"},
	"randomization.candidates":      {text: "candidate draws"},
	"sample_size.sd":                {text: "standard deviation of the sample size"},
	"sample_size.cv":                {text: "coefficient of variation of the sample size"},
	"sample_size.icc":               {text: "intra-class correlation of the sample size"},
	"response.compute":              {text: "computation of {of}"},
	"response.how":                  {text: "how {of} is measured"},
	"response.where":                {text: "rows used for {of}"},
	"response.file":                 {text: "data file of {of}"},
	"response.recorded_on":          {text: "unit on which {of} is recorded"},
	"response.assessed":             {text: "how {of} is assessed"},
	"response.aggregate":            {text: "aggregation of {of}"},
	"response.over":                 {text: "what {of} is aggregated over"},
	"response.range":                {text: "plausible range of {of}"},
	"response.repeated":             {text: "times at which {of} is measured"},
	"covariate.measured":            {text: "day on which {of} is measured"},
	"analysis.alpha":                {text: "level of significance (alpha)"},
	"analysis.tendency":             {text: "limit of a tendency"},
	"analysis.side":                 {text: "side of comparisons"},
	"analysis.pairs":                {text: "pairs of interactions that are compared"},
	"analysis.trend":                {text: "highest trend"},
	"analysis.blocks":               {text: "blocks taken as"},
	"analysis.df_method":            {text: "degrees of freedom of mixed models (df method)"},
	"analysis.components":           {text: "components of variance"},
	"analysis.limits":               {text: "limits of components"},
	"analysis.variance_by":          {text: "residual variance by"},
	"analysis.randomization_test":   {text: "draws of the randomization test"},
	"analysis.error_df_min":         {text: "least error degrees of freedom (error df min)"},
	"analysis.margin":               {text: "margin of equivalence"},
	"analysis.assumptions":          {text: "what is done if assumptions fail"},
	"analysis.dose_response.models": {text: "models of the dose response", whole: true},
	"data.missing":                  {text: "texts that mean a missing value", whole: true},
}

func spaced(key string) string { return strings.ReplaceAll(key, "_", " ") }

func last(key string) string { return key[strings.LastIndexByte(key, '.')+1:] }

// what says in words what a difference is about.
func (c *comparison) what(d *Difference) string {
	of := owner(d)
	switch d.Field {
	case "":
		if of == "" {
			return "the " + spaced(last(d.Table))
		}
		return of
	case "order":
		if len(d.Names) == 0 && !phrases[d.Table].single {
			return "order of the tables " + spaced(last(d.Table))
		}
	}
	name := ""
	if len(d.Names) > 0 {
		name = d.Names[len(d.Names)-1]
	}
	if p := phrases[join(d.Table, d.Field)]; p.text != "" {
		per := ""
		if w := c.within(name); w != "" {
			per = " per " + w
		}
		return strings.NewReplacer("{name}", name, "{of}", of, "{per}", per).Replace(p.text)
	}
	if of == "" {
		return spaced(d.Field)
	}
	return spaced(d.Field) + " of " + of
}

// within is the unit that a unit lies within.
func (c *comparison) within(unit string) string {
	for _, plan := range []map[string]any{c.new, c.old} {
		for _, u := range asTables(plan["unit"]) {
			if u["name"] == unit {
				w, _ := u["within"].(string)
				return w
			}
		}
	}
	return ""
}

// owner is the table that a difference is in: response adg, the housing.
func owner(d *Difference) string {
	word := func(table string) string {
		if p, ok := phrases[table]; ok {
			return p.text
		}
		return spaced(last(table))
	}
	if len(d.Names) == 0 {
		if d.Table == "" {
			return ""
		}
		return word(d.Table)
	}
	s := strings.TrimSpace(word(d.Table) + " " + d.Names[len(d.Names)-1])
	if parent := strings.TrimSuffix(d.Table, "."+last(d.Table)); len(d.Names) > 1 {
		s += " of " + word(parent) + " " + d.Names[0]
	}
	return s
}

// String says a difference in a line: units of pen per block: 4 → 5.
func (d *Difference) String() string {
	old, new := d.Texts()
	switch {
	case d.Kind == Changed:
		return fmt.Sprintf("%s: %s → %s", d.What, old, new)
	case old+new != "":
		return fmt.Sprintf("%s %s: %s", d.What, d.Kind, old+new)
	}
	return d.What + " " + d.Kind.String()
}

// Texts are the old and the new value in words, with "" for none. Of two long texts only
// what differs is given.
func (d *Difference) Texts() (old, new string) {
	a, isOld := d.Old.(string)
	b, isNew := d.New.(string)
	if isOld && isNew && (long(a) || long(b)) {
		return excerpts(tidy(a), tidy(b))
	}
	if d.Field == "" && d.Kind != Changed {
		return describe(d.Old), describe(d.New)
	}
	return show(d.Old), show(d.New)
}

// describe says what a table that was added or removed has beyond its name.
func describe(v any) string {
	t, ok := v.(map[string]any)
	if !ok {
		return show(v)
	}
	var parts []string
	for _, k := range slices.Sorted(maps.Keys(t)) {
		s := show(t[k])
		if ordinary(k, t, s) {
			continue
		}
		if m, ok := t[k].(map[string]any); ok && !amount(m) {
			s = "(" + s + ")"
		}
		parts = append(parts, spaced(k)+" "+s)
	}
	return strings.Join(parts, ", ")
}

// amount tells whether a table is a quantity with its unit.
func amount(t map[string]any) bool {
	unit, ok := t["unit"].(string)
	return ok && unit != "" && (len(t) == 2 && t["value"] != nil || len(t) == 3 && t["from"] != nil && t["to"] != nil)
}

func long(s string) bool { return len([]rune(s)) > 50 }

// tidy puts a text on one line, without what would steer a terminal.
func tidy(s string) string {
	return strings.Join(strings.FieldsFunc(s, func(r rune) bool {
		return unicode.IsSpace(r) || unicode.IsControl(r) || unicode.Is(unicode.Bidi_Control, r)
	}), " ")
}

// excerpts cuts from two texts what they have in common at both ends, but for two words
// that tell the place.
func excerpts(a, b string) (string, string) {
	x, y := strings.Fields(a), strings.Fields(b)
	head, tail := 0, 0
	for head < len(x) && head < len(y) && x[head] == y[head] {
		head++
	}
	for tail < len(x)-head && tail < len(y)-head && x[len(x)-1-tail] == y[len(y)-1-tail] {
		tail++
	}
	head, tail = max(0, head-2), max(0, tail-2)
	cut := func(w []string) string {
		s := strings.Join(w[head:len(w)-tail], " ")
		if head > 0 {
			s = "… " + s
		}
		if tail > 0 {
			s += " …"
		}
		return "“" + s + "”"
	}
	return cut(x), cut(y)
}

// show puts a value of a plan in words.
func show(v any) string {
	switch v := v.(type) {
	case nil:
		return ""
	case string:
		if s := tidy(v); long(v) || s == "" {
			return "“" + s + "”"
		} else {
			return s
		}
	case bool:
		if v {
			return "yes"
		}
		return "no"
	case float64:
		if s, err := json.Marshal(v); err == nil {
			return string(s)
		}
		return strconv.FormatFloat(v, 'g', -1, 64)
	case []any:
		var parts []string
		for _, x := range v {
			s := show(x)
			if _, nested := x.([]any); nested {
				s = "(" + s + ")"
			}
			parts = append(parts, s)
		}
		if len(parts) == 0 {
			return "none"
		}
		return strings.Join(parts, ", ")
	case map[string]any:
		if amount(v) {
			s := show(v["value"])
			if len(v) == 3 {
				s = show(v["from"]) + " to " + show(v["to"])
			}
			return s + " " + show(v["unit"])
		}
		var parts []string
		for _, k := range slices.Sorted(maps.Keys(v)) {
			parts = append(parts, tidy(k)+" = "+show(v[k]))
		}
		return strings.Join(parts, ", ")
	}
	return ""
}

// ordinary tells whether a value of an added or removed table goes without saying.
func ordinary(key string, in map[string]any, text string) bool {
	switch key {
	case "name", "code", "file":
		return true
	case "label":
		name, _ := in["name"].(string)
		return text == spaced(name)
	}
	return text == "auto" || text == "none" || text == "no" || key == "numbered" && text == "within" || key == "slopes" && text == "common"
}
