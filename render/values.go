package render

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"
	"text/template"

	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/table"
)

// kind is what a function of values can be asked about.
type kind int

const (
	ofWhole      kind = iota // RESPONSE
	ofTerm                   // RESPONSE TERM
	ofMean                   // RESPONSE TERM LEVEL
	ofDifference             // RESPONSE TERM LEVEL LEVEL: the first minus the second
	ofContrast               // RESPONSE CONTRAST, also a trend
	ofCovariate              // RESPONSE COVARIATE
)

// subject is what a function of values is asked about. Before the data only its names
// are known.
type subject struct {
	kind      kind
	response  *result.Response
	name      string // of the term, contrast or covariate
	a, b      result.Levels
	mean      *result.Mean // of a
	other     *result.Mean // of b
	test      *result.Test
	contrast  *result.Contrast
	covariate *result.Covariate
	// The pair as it was compared, a minus b; zero where it was not compared.
	pair result.Comparison
}

// unknown is the fault of a name that is not known, with the nearest one that is.
func unknown(kind, name string, known []string) error {
	code, _, _ := strings.Cut(kind, " ")
	f := &compose.Fault{Code: "unknown-" + code, Message: fmt.Sprintf("there is no %s %q", kind, name)}
	const most = 20
	switch near := diag.Nearest(name, known); {
	case near != "":
		f.Hint = fmt.Sprintf("did you mean %q?", near)
	case len(known) > most:
		f.Hint = fmt.Sprintf("known are %s and %d more", strings.Join(known[:most], ", "), len(known)-most)
	case len(known) > 0:
		f.Hint = "known are " + strings.Join(known, ", ")
	}
	return f
}

func (b *builder) responseNames() []string {
	var names []string
	for i := range b.rs.Responses {
		names = append(names, b.rs.Responses[i].Name)
	}
	if b.trial.Table == nil {
		for i := range b.trial.Protocol.Responses {
			names = append(names, b.trial.Protocol.Responses[i].Name)
		}
	}
	return names
}

// asked finds a response: among the results or, before there are data, in the protocol.
func (b *builder) asked(name string) *result.Response {
	if r := b.pictures.response(name); r != nil {
		return r
	}
	if r := b.trial.Protocol.Response(name); r != nil && b.trial.Table == nil {
		return &result.Response{Name: r.Name, Label: prose.ResponseLabel(r), Unit: r.Unit, Role: r.Role, Kind: r.Kind}
	}
	return nil
}

// knownNames are what a response can be asked about.
type knownNames struct{ terms, contrasts, covariates []string }

// names lists what a response can be asked about: terms, contrasts with trends, and
// covariates. Before the data, and without an analysis, they are those of the plan.
func (b *builder) names(r *result.Response) (terms, contrasts, covariates []string) {
	if k := b.known[r.Name]; k != nil {
		return k.terms, k.contrasts, k.covariates
	}
	defer func() {
		if b.known == nil {
			b.known = map[string]*knownNames{}
		}
		b.known[r.Name] = &knownNames{terms: terms, contrasts: contrasts, covariates: covariates}
	}()
	add := func(list *[]string, name string) {
		if !slices.Contains(*list, name) {
			*list = append(*list, name)
		}
	}
	p := b.trial.Protocol
	asked := p.Response(r.Name)
	for _, c := range r.Covariates {
		add(&covariates, c.Name)
	}
	if asked != nil && len(r.Covariates) == 0 {
		for _, name := range asked.Covariates {
			add(&covariates, name)
		}
	}
	for i := range b.trial.Plan.Terms {
		add(&terms, b.trial.Plan.Terms[i].Name)
	}
	for _, t := range r.Tests {
		if !slices.Contains(covariates, t.Source) {
			add(&terms, t.Source)
		}
	}
	for _, c := range r.Contrasts {
		add(&contrasts, c.Name)
	}
	if b.trial.Table == nil || r.Model == nil { // what would be known
		for _, c := range p.Analysis.Contrasts {
			add(&contrasts, c.Name)
		}
		if asked != nil {
			for _, c := range asked.Contrasts {
				add(&contrasts, c.Name)
			}
		}
		for i := range b.trial.Plan.Factors {
			f := &b.trial.Plan.Factors[i]
			for k, order := range []string{"linear", "quadratic", "cubic"} {
				if f.Values != nil && k < p.Analysis.Trend && k < len(f.Levels)-1 {
					add(&contrasts, f.Name+": "+order)
				}
			}
			if f.Values != nil && p.Analysis.Trend > 0 && p.Analysis.Trend < len(f.Levels)-1 {
				add(&contrasts, f.Name+": lack of fit")
			}
		}
	}
	return terms, contrasts, covariates
}

// subject finds what the words of a call name.
func (b *builder) subject(function string, words []string) (*subject, error) {
	key := strings.Join(words, "\x00")
	if s := b.subjects[key]; s != nil {
		return s, nil
	}
	s, err := b.find(function, words)
	if err == nil {
		if b.subjects == nil {
			b.subjects = map[string]*subject{}
		}
		b.subjects[key] = s
	}
	return s, err
}

func (b *builder) find(function string, words []string) (*subject, error) {
	if len(words) == 0 {
		return nil, &compose.Fault{Code: "no-response", Message: "the name of a response is missing", Hint: "known are " + strings.Join(b.responseNames(), ", ")}
	}
	r := b.asked(words[0])
	if r == nil {
		return nil, unknown("response", words[0], b.responseNames())
	}
	s := &subject{response: r}
	if len(words) == 1 {
		return s, nil
	}
	s.name = words[1]
	levels := words[2:]
	terms, contrasts, covariates := b.names(r)
	switch {
	case slices.Contains(contrasts, s.name):
		s.kind = ofContrast
		for i := range r.Contrasts {
			if r.Contrasts[i].Name == s.name {
				s.contrast = &r.Contrasts[i]
				break
			}
		}
	case slices.Contains(covariates, s.name):
		s.kind = ofCovariate
		for i := range r.Covariates {
			if r.Covariates[i].Name == s.name {
				s.covariate = &r.Covariates[i]
			}
		}
	case slices.Contains(terms, s.name):
		s.kind = ofTerm
		for i := range r.Tests {
			if r.Tests[i].Source == s.name {
				s.test = &r.Tests[i]
			}
		}
		return s, b.levels(s, function, levels)
	default:
		return nil, unknown("term or contrast", s.name, slices.Concat(terms, contrasts, covariates))
	}
	if len(levels) > 0 {
		return nil, &compose.Fault{Code: compose.CodeWrongValue, Message: fmt.Sprintf("%q is no term, and takes no level such as %q", s.name, levels[0])}
	}
	return s, nil
}

// levels finds the means that levels of a term name, and their difference.
func (b *builder) levels(s *subject, function string, levels []string) error {
	if len(levels) > 2 {
		return &compose.Fault{Code: compose.CodeWrongValue, Message: fmt.Sprintf("%s takes one level, or two for their difference, not %d", function, len(levels)),
			Hint: "levels of an interaction are joined by a colon"}
	}
	var err error
	if len(levels) > 0 {
		s.kind = ofMean
		if s.a, err = b.cell(s.name, levels[0]); err != nil {
			return err
		}
		s.mean = meanAt(s.response, s.name, s.a)
	}
	if len(levels) > 1 {
		s.kind = ofDifference
		if s.b, err = b.cell(s.name, levels[1]); err != nil {
			return err
		}
		if slices.Equal(s.a, s.b) {
			return &compose.Fault{Code: compose.CodeWrongValue, Message: fmt.Sprintf("%q is compared with itself", levels[0])}
		}
		s.other = meanAt(s.response, s.name, s.b)
		s.pair = pairOf(s.response, s.name, s.a, s.b)
	}
	return nil
}

func meanAt(r *result.Response, term string, at result.Levels) *result.Mean {
	for i := range r.Means {
		if r.Means[i].Term == term && alike(r.Means[i].Levels, at) {
			return &r.Means[i]
		}
	}
	return nil
}

// alike tells whether two cells are the same, whatever the order of their factors.
func alike(a, b result.Levels) bool {
	if len(a) != len(b) {
		return false
	}
	for _, x := range a {
		if !slices.Contains(b, x) {
			return false
		}
	}
	return true
}

// pairOf finds the comparison of two cells of a term, turned so that it is a minus b.
// Numbers that are not there are NaN.
func pairOf(r *result.Response, term string, a, b result.Levels) result.Comparison {
	side := func(c *result.Comparison, label string) result.Levels {
		cell := append(result.Levels{}, c.At...)
		var rest []string
		for _, f := range strings.Split(term, ":") {
			if c.At.Of(f) == "" {
				rest = append(rest, f)
			}
		}
		parts := []string{label}
		if len(rest) > 1 {
			parts = strings.Split(label, ":")
		}
		if len(parts) != len(rest) {
			return nil
		}
		for i, f := range rest {
			cell = append(cell, result.FactorLevel{Factor: f, Level: parts[i]})
		}
		return cell
	}
	for _, c := range r.Comparisons {
		if c.Term != term {
			continue
		}
		x, y := side(&c, c.A), side(&c, c.B)
		switch {
		case alike(x, a) && alike(y, b):
			return c
		case alike(x, b) && alike(y, a):
			c.A, c.B = c.B, c.A
			c.Difference, c.Lower, c.Upper = -c.Difference, -c.Upper, -c.Lower
			return c
		}
	}
	nan := result.NaN
	return result.Comparison{Difference: nan, SE: nan, DF: nan, Statistic: nan, P: nan, PAdjusted: nan, Lower: nan, Upper: nan}
}

// cell reads the levels of a term, joined by colons, each as the protocol writes it or
// with the unit of its factor.
func (b *builder) cell(term, text string) (result.Levels, error) {
	factors := strings.Split(term, ":")
	parts := []string{text}
	if len(factors) > 1 {
		parts = strings.Split(text, ":")
	}
	if len(parts) != len(factors) {
		return nil, &compose.Fault{Code: "unknown-level", Message: fmt.Sprintf("%q does not name a level of each of %s", text, prose.And(factors)), Hint: "join them by a colon, in this order"}
	}
	var out result.Levels
	for i, name := range factors {
		f := prose.FactorNamed(b.trial.Plan, name)
		if f == nil {
			return nil, &compose.Fault{Code: "unknown-level", Message: fmt.Sprintf("%s has no means: %q is no factor", term, name)}
		}
		level := levelOf(f, parts[i])
		if level == "" {
			return nil, unknown("level", strings.TrimSpace(parts[i]), f.Levels)
		}
		out = append(out, result.FactorLevel{Factor: name, Level: level})
	}
	return out, nil
}

// levelOf finds a level by its name, with or without the unit of its factor; empty:
// there is none.
func levelOf(f *layout.Factor, text string) string {
	squeeze := func(s string) string { return strings.Join(strings.Fields(s), " ") }
	text = squeeze(text)
	if slices.Contains(f.Levels, text) {
		return text
	}
	bare := text
	if f.Protocol != nil && f.Protocol.Unit != "" {
		for _, unit := range []string{f.Protocol.Unit, num.UnitText(f.Protocol.Unit)} {
			if s, ok := strings.CutSuffix(text, unit); ok {
				bare = squeeze(s)
			}
		}
	}
	for i, l := range f.Levels {
		if squeeze(l) == bare {
			return l
		}
		if f.Values != nil {
			if x, err := strconv.ParseFloat(strings.Replace(bare, "\u2212", "-", 1), 64); err == nil && x == f.Values[i] {
				return l
			}
		}
	}
	return ""
}

// quantity is a number that a function gives, before it is put into words.
type quantity struct {
	x        float64
	decimals int
	unit     string // as it is printed
	what     string // for messages; empty: text says it
	text     string // empty: the digits with the unit
}

// missing says why a subject has no such number.
func (b *builder) missing(s *subject, what string) error {
	f := &compose.Fault{Code: "no-value"}
	switch {
	case s.response.Model == nil:
		f.Code = "not-analysed"
		f.Message = fmt.Sprintf("%s was not analysed, so that there is no %s", s.response.Name, what)
	case s.kind == ofWhole:
		f.Message = fmt.Sprintf("%s has no %s as a whole", s.response.Name, what)
		f.Hint = "name a term, a level or a contrast after the response"
	default:
		f.Message = fmt.Sprintf("%s has no %s of %s", s.response.Name, what, b.called(s))
	}
	for _, n := range s.response.Notes {
		if f.Hint == "" && s.response.Model == nil {
			f.Hint = n.Text
		}
	}
	switch {
	case f.Hint != "":
	case s.kind == ofTerm:
		f.Hint = "name a level of it after it, or two for their difference; what can be asked of what: penwright help templates"
	default:
		f.Hint = "what can be asked of what: penwright help templates"
	}
	return f
}

// called names a subject in messages.
func (b *builder) called(s *subject) string {
	p := b.trial.Plan
	switch s.kind {
	case ofMean:
		return prose.At(p, s.a)
	case ofDifference:
		return prose.At(p, s.a) + " − " + prose.At(p, s.b)
	case ofWhole:
		return s.response.Name
	}
	return s.name
}

// pending is a number that waits for data.
func (b *builder) pending(s *subject, what string) compose.Number {
	b.waits++
	return compose.Number{X: math.NaN(), Text: inlines(prose.NotYet), Bare: prose.NotYet, What: what + " of " + b.called(s)}
}

// value makes a function that gives a number.
func (b *builder) value(function, what string, find func(s *subject) (quantity, bool)) func(words ...string) (compose.Number, error) {
	return func(words ...string) (compose.Number, error) {
		s, err := b.subject(function, words)
		if err != nil {
			return compose.Number{}, err
		}
		if b.trial.Table == nil {
			return b.pending(s, what), nil
		}
		q, ok := find(s)
		if !ok || math.IsNaN(q.x) || math.IsInf(q.x, 0) {
			return compose.Number{}, b.missing(s, what)
		}
		bare := num.Fixed(q.x, q.decimals)
		if q.text == "" {
			q.text = bare
			if q.unit != "" {
				q.text += "\u202f" + q.unit
			}
		}
		return compose.Number{X: q.x, Text: inlines(q.text), Bare: bare, Unit: q.unit, What: q.what}, nil
	}
}

// phrase makes a function that gives running text.
func (b *builder) phrase(function, what string, find func(s *subject) (string, bool)) func(words ...string) ([]doc.Inline, error) {
	return func(words ...string) ([]doc.Inline, error) {
		s, err := b.subject(function, words)
		if err != nil {
			return nil, err
		}
		if b.trial.Table == nil {
			b.waits++
			return inlines(prose.NotYet), nil
		}
		text, ok := find(s)
		if !ok {
			return nil, b.missing(s, what)
		}
		return inlines(text), nil
	}
}

// decimals of the means and of the differences of a term: those of their tables.
func (s *subject) decimals() int {
	var ses []float64
	r := s.response
	switch s.kind {
	case ofMean, ofWhole, ofTerm:
		for i := range r.Means {
			if s.kind == ofWhole || r.Means[i].Term == s.name {
				ses = append(ses, float64(r.Means[i].SE))
			}
		}
	case ofDifference:
		for i := range r.Comparisons {
			if r.Comparisons[i].Term == s.name {
				ses = append(ses, float64(r.Comparisons[i].SE))
			}
		}
		if ses == nil {
			for i := range r.SED {
				if r.SED[i].Term == s.name {
					ses = append(ses, float64(r.SED[i].Min))
				}
			}
		}
	case ofContrast:
		return num.SEDecimals(float64(s.contrast.SE))
	case ofCovariate:
		return num.SEDecimals(float64(s.covariate.SE))
	}
	return table.MeanDecimals(ses)
}

// difference of two means, by their comparison or, where they were not compared, by the
// means themselves.
func (s *subject) difference() (float64, bool) {
	switch {
	case s.kind != ofDifference:
		return 0, false
	case s.pair.Difference.Known():
		return float64(s.pair.Difference), true
	case s.mean == nil || s.other == nil:
		return 0, false
	}
	return float64(s.mean.Mean - s.other.Mean), true
}

// interval gives the limits of a mean, a difference or a contrast; NaN where an end is
// open or not there.
func (s *subject) interval() (lower, upper float64, ok bool) {
	switch {
	case s.kind == ofMean && s.mean != nil:
		lower, upper = float64(s.mean.Lower), float64(s.mean.Upper)
	case s.kind == ofDifference:
		lower, upper = float64(s.pair.Lower), float64(s.pair.Upper)
	case s.kind == ofContrast:
		lower, upper = float64(s.contrast.Lower), float64(s.contrast.Upper)
	default:
		return 0, 0, false
	}
	return lower, upper, !math.IsNaN(lower) || !math.IsNaN(upper)
}

// probability of a term, a difference (adjusted as its table says), a contrast or a
// covariate.
func (s *subject) probability() (result.Number, bool) {
	switch {
	case s.kind == ofTerm && s.test != nil:
		return s.test.P, true
	case s.kind == ofDifference && s.pair.PAdjusted.Known():
		return s.pair.PAdjusted, true
	case s.kind == ofDifference:
		return s.pair.P, true
	case s.kind == ofContrast:
		return s.contrast.P, true
	case s.kind == ofCovariate && s.covariate != nil:
		return s.covariate.P, true
	}
	return 0, false
}

// ratio is the F of a term or a contrast with its degrees of freedom.
func (s *subject) ratio() (f, df, errorDF float64, ok bool) {
	switch {
	case s.kind == ofTerm && s.test != nil:
		return float64(s.test.F), float64(s.test.DF), float64(s.test.ErrorDF), true
	case s.kind == ofContrast:
		return float64(s.contrast.F), float64(s.contrast.NumeratorDF), float64(s.contrast.DF), true
	}
	return 0, 0, 0, false
}

// spread of the differences of a term's means.
func (s *subject) spread() *result.SED {
	for i := range s.response.SED {
		if s.kind == ofTerm && s.response.SED[i].Term == s.name {
			return &s.response.SED[i]
		}
	}
	return nil
}

// contrastUnit is the unit of a contrast's estimate; ok is false where it has none that
// can be said.
func (b *builder) contrastUnit(s *subject) string {
	if unit, ok := prose.TrendUnit(b.trial.Plan, s.response, s.contrast); ok {
		return unit
	}
	if strings.HasPrefix(s.contrast.Name, s.contrast.Term+": ") {
		return ""
	}
	return num.UnitText(s.response.Unit)
}

// values are the functions that give numbers, sentences and claims by response and term.
func (b *builder) values() template.FuncMap {
	p := b.trial.Plan
	unit := func(s *subject) string { return num.UnitText(s.response.Unit) }
	estimate := func(s *subject) (quantity, bool) {
		switch {
		case s.kind == ofContrast:
			return quantity{x: float64(s.contrast.Estimate), decimals: s.decimals(), unit: b.contrastUnit(s), what: s.name}, true
		case s.kind == ofCovariate && s.covariate != nil:
			return quantity{x: float64(s.covariate.Slope), decimals: s.decimals(), what: "the slope on " + s.name}, true
		}
		return quantity{}, false
	}
	end := func(upper bool) func(s *subject) (quantity, bool) {
		return func(s *subject) (quantity, bool) {
			lo, hi, ok := s.interval()
			if !ok {
				return quantity{}, false
			}
			q := quantity{x: lo, decimals: s.decimals(), unit: unit(s), what: "the lower limit of " + b.called(s)}
			if upper {
				q.x, q.what = hi, "the upper limit of "+b.called(s)
			}
			if s.kind == ofContrast {
				q.unit = b.contrastUnit(s)
			}
			return q, true
		}
	}
	count := func(pick func(m *result.Mean) int, whole func(r *result.Response) int) func(s *subject) (quantity, bool) {
		return func(s *subject) (quantity, bool) {
			switch {
			case s.kind == ofWhole:
				return quantity{x: float64(whole(s.response)), text: num.Count(whole(s.response)), what: "the number of " + s.response.Name}, true
			case s.kind == ofMean && s.mean != nil:
				return quantity{x: float64(pick(s.mean)), text: num.Count(pick(s.mean)), what: "the number at " + b.called(s)}, true
			}
			return quantity{}, false
		}
	}
	out := template.FuncMap{
		"mean": b.value("mean", "mean", func(s *subject) (quantity, bool) {
			switch {
			case s.kind == ofWhole:
				return quantity{x: float64(s.response.GrandMean), decimals: s.decimals(), unit: unit(s), what: "the grand mean"}, s.response.Model != nil
			case s.kind == ofMean && s.mean != nil:
				return quantity{x: float64(s.mean.Mean), decimals: s.decimals(), unit: unit(s), what: "the mean at " + b.called(s)}, true
			}
			return quantity{}, false
		}),
		"difference": b.value("difference", "difference", func(s *subject) (quantity, bool) {
			d, ok := s.difference()
			return quantity{x: d, decimals: s.decimals(), unit: unit(s), what: "the difference " + b.called(s)}, ok
		}),
		"change": b.value("change", "change in percent", func(s *subject) (quantity, bool) {
			d, ok := s.difference()
			if !ok || s.other == nil || !(s.other.Mean > 0) {
				return quantity{}, false
			}
			return quantity{x: 100 * d / float64(s.other.Mean), decimals: 1, unit: "%", what: "the change " + b.called(s)}, true
		}),
		"estimate": b.value("estimate", "estimate", estimate),
		"se": b.value("se", "standard error", func(s *subject) (quantity, bool) {
			q := quantity{unit: unit(s), decimals: -1, what: "the standard error of " + b.called(s)}
			switch {
			case s.kind == ofMean && s.mean != nil:
				q.x, q.decimals = float64(s.mean.SE), s.decimals()
			case s.kind == ofDifference:
				q.x, q.decimals = float64(s.pair.SE), s.decimals()
			case s.kind == ofContrast:
				q.x, q.decimals, q.unit = float64(s.contrast.SE), s.decimals(), b.contrastUnit(s)
			case s.kind == ofCovariate && s.covariate != nil:
				q.x, q.decimals, q.unit = float64(s.covariate.SE), s.decimals(), ""
			}
			return q, q.decimals >= 0
		}),
		"sem": b.value("sem", "standard error of a mean", func(s *subject) (quantity, bool) {
			q := quantity{x: math.NaN(), unit: unit(s), what: "the SEM of " + s.name}
			for _, m := range s.response.Means {
				if s.kind == ofTerm && m.Term == s.name && m.SEM.Known() && !(q.x >= float64(m.SEM)) {
					q.x = float64(m.SEM)
				}
			}
			q.decimals = num.SEDecimals(q.x)
			return q, true
		}),
		"sed": b.value("sed", "standard error of a difference", func(s *subject) (quantity, bool) {
			d := s.spread()
			if d == nil {
				return quantity{}, false
			}
			return quantity{x: float64(d.Mean), decimals: num.SEDecimals(float64(d.Mean)), unit: unit(s), what: "the SED of " + s.name}, true
		}),
		"lsd": b.value("lsd", "least significant difference", func(s *subject) (quantity, bool) {
			d := s.spread()
			if d == nil {
				return quantity{}, false
			}
			return quantity{x: float64(d.LSD), decimals: num.SEDecimals(float64(d.Max)), unit: unit(s), what: "the least significant difference of " + s.name}, true
		}),
		"sd": b.value("sd", "standard deviation", func(s *subject) (quantity, bool) {
			var all []float64
			q := quantity{x: math.NaN(), unit: unit(s), what: "the SD at " + b.called(s)}
			for _, x := range s.response.Summary {
				all = append(all, float64(x.SD))
				if s.kind == ofMean && alike(x.Levels, s.a) {
					q.x = float64(x.SD)
				}
			}
			q.decimals = table.MeanDecimals(all)
			return q, true
		}),
		"cv": b.value("cv", "coefficient of variation", func(s *subject) (quantity, bool) {
			return quantity{x: float64(s.response.CVPercent), decimals: 1, unit: "%", what: "the coefficient of variation"}, s.kind == ofWhole && s.response.Model != nil
		}),
		"lower": b.value("lower", "lower limit", end(false)),
		"upper": b.value("upper", "upper limit", end(true)),
		"p": b.value("p", "P", func(s *subject) (quantity, bool) {
			p, ok := s.probability()
			return quantity{x: float64(p), decimals: 3, text: prose.PValue(float64(p))}, ok
		}),
		"f": b.value("f", "F", func(s *subject) (quantity, bool) {
			f, df, errorDF, ok := s.ratio()
			return quantity{x: f, decimals: 2, text: prose.FText(df, errorDF, f)}, ok
		}),
		"df": b.value("df", "degrees of freedom", func(s *subject) (quantity, bool) {
			_, df, _, ok := s.ratio()
			return quantity{x: df, text: num.DF(df), what: "the degrees of freedom of " + s.name}, ok
		}),
		"errordf": b.value("errordf", "error degrees of freedom", func(s *subject) (quantity, bool) {
			_, _, df, ok := s.ratio()
			return quantity{x: df, text: num.DF(df), what: "the error degrees of freedom of " + s.name}, ok
		}),
		"n": b.value("n", "number of values", count(func(m *result.Mean) int { return m.N }, func(r *result.Response) int { return r.N })),
		"units": b.value("units", "number of units", count(func(m *result.Mean) int { return m.Units }, func(r *result.Response) int {
			n := 0
			for _, s := range r.Summary {
				n += s.Units
			}
			return n
		})),
		"limits": b.phrase("limits", "limits", func(s *subject) (string, bool) {
			lo, hi, ok := s.interval()
			if !ok {
				return "", false
			}
			r := *s.response
			if s.kind == ofContrast && strings.HasPrefix(s.name, s.contrast.Term+": ") {
				r.Unit = ""
			}
			return prose.LimitsText(p, &r, lo, hi, s.decimals()), true
		}),
		"sentence": b.phrase("sentence", "sentence", func(s *subject) (string, bool) {
			r := s.response
			switch {
			case r.Model == nil:
			case s.kind == ofWhole:
				return prose.Answer(p, r), true
			case s.kind == ofTerm && s.test != nil && s.test.F.Known():
				return prose.TestSentence(p, r, s.test), true
			case s.kind == ofContrast && s.contrast.P.Known():
				return prose.ContrastSentence(p, r, s.contrast), true
			case s.kind == ofMean && s.mean != nil && s.mean.Mean.Known() && s.mean.SE.Known():
				return prose.MeanSentence(p, r, s.mean, s.decimals()), true
			case s.kind == ofDifference:
				if d, ok := s.difference(); ok && !math.IsNaN(d) {
					c := s.pair
					c.Difference = result.Number(d)
					return prose.DifferenceSentence(p, r, s.a, s.b, &c, s.decimals()), true
				}
			}
			return "", false
		}),
		"label": func(words ...string) (string, error) {
			s, err := b.subject("label", words)
			if err != nil {
				return "", err
			}
			switch s.kind {
			case ofWhole:
				r := *s.response
				r.Unit = ""
				return prose.ResponseText(&r), nil
			case ofMean, ofDifference:
				return b.called(s), nil
			}
			return prose.TermText(p, s.name), nil
		},
	}
	maps.Copy(out, template.FuncMap{"claim": b.claim, "narrative": b.narrative, "ref": b.ref})
	return out
}
