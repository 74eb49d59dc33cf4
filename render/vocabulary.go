package render

import (
	"fmt"
	"maps"
	"sort"
	"strings"
	"text/template"

	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/protocol"
	"penwright/render/compose"
	"penwright/render/doc"
	"penwright/render/table"
)

// maxPrinted is the number of rows of an allotment or of residuals that are printed.
const maxPrinted = 500

// view is the dot of a template: plain data, no methods.
type view struct {
	Code, Title, Status string
	Objective           string
	Background          any // compose.Text or blocks; nil when absent
	SpeciesRationale    string
	Reduction           string
	Hypotheses          []string
	MaterialHeading     string
	Assumptions         string
	Complete            bool // there are data
	Animals             bool // there are findings on the welfare of animals
	OfAnimals           bool // the trial is one of animals
	Unplanned           bool // something was not planned before the data
	Responses           []responseView
}

// responseView is one response as templates see it.
type responseView struct {
	Name, Label, Text, Role string
	Primary, Analysed       bool
	Planned                 bool // its analysis was in the plan that was sealed before the data
	Unplanned               bool // it has contrasts that were not, though its analysis was
	Components              bool // components of variance say more than the analysis of variance
	Terms                   []termView
}

// termView is one term with means.
type termView struct{ Response, Name, Label string }

func (b *builder) view() view {
	p := b.trial.Protocol
	v := view{
		Code: p.Trial.Code, Title: p.Trial.Title, Status: b.rs.Trial.Status,
		Objective: p.Trial.Objective.Body, SpeciesRationale: p.Trial.SpeciesRationale.Body, Hypotheses: p.Trial.Hypotheses,
		Assumptions: p.Analysis.Assumptions, Complete: b.trial.Table != nil, Animals: len(b.trial.Welfare) > 0, OfAnimals: p.Animals != nil, MaterialHeading: "Material",
	}
	if p.Animals != nil {
		v.MaterialHeading = "Animals, housing and treatments"
	} else if p.Material != nil || p.Site != nil {
		v.MaterialHeading = "Material, site and treatments"
	}
	if p.Welfare != nil {
		v.Reduction = p.Welfare.Reduction.Body
	}
	if p.Trial.Background.Body != "" {
		v.Background = b.text(p.Trial.Background)
	}
	for i := range b.rs.Responses {
		r := &b.rs.Responses[i]
		x := responseView{Name: r.Name, Label: r.Label, Text: prose.ResponseText(r), Role: r.Role, Primary: r.Role == "primary", Analysed: r.Model != nil}
		seen := map[string]bool{}
		for _, m := range r.Means {
			if !seen[m.Term] {
				seen[m.Term] = true
				x.Terms = append(x.Terms, termView{Response: r.Name, Name: m.Term, Label: prose.TermLabel(b.trial.Plan, m.Term)})
			}
		}
		x.Components = r.Model != nil && (r.Model.Method == "reml" && len(r.Components) > 1 || len(r.Components) > 2)
		x.Planned = prose.Planned(r)
		for _, c := range r.Contrasts {
			x.Unplanned = x.Unplanned || x.Planned && !c.Planned
		}
		v.Unplanned = v.Unplanned || !x.Planned || x.Unplanned
		v.Responses = append(v.Responses, x)
	}
	return v
}

// text gives the blocks of a text of the protocol: Markdown where it came from a file,
// plain paragraphs where it is a string.
func (b *builder) text(t protocol.Text) any {
	if t.File != "" {
		out, list := compose.Markdown(t.File, t.Body, b.limits)
		b.list = append(b.list, list...)
		return out
	}
	var blocks []doc.Block
	for _, part := range strings.Split(t.Body, "\n\n") {
		if s := strings.Join(strings.Fields(part), " "); s != "" {
			blocks = append(blocks, paragraph(s))
		}
	}
	return blocks
}

func paragraph(s string) doc.Block {
	return doc.Paragraph{Text: inlines(s)}
}

// paragraphs sets sentences as one paragraph.
func paragraphs(sentences []string) []doc.Block {
	if len(sentences) == 0 {
		return nil
	}
	return []doc.Block{paragraph(strings.Join(sentences, " "))}
}

// functions is the vocabulary of templates.
func (b *builder) functions() template.FuncMap {
	if b.words != nil {
		return b.words
	}
	p := &b.pictures
	t, rs := b.trial, b.rs
	response := func(args []string) (*result.Response, error) {
		s, err := b.subject("table", args[:min(len(args), 1)])
		if err != nil {
			return nil, err
		}
		if t.Table == nil {
			b.waits++
		}
		return s.response, nil
	}
	term := func(r *result.Response, args []string) (string, error) {
		var names []string
		for _, m := range r.Means {
			if len(names) == 0 || names[len(names)-1] != m.Term {
				names = append(names, m.Term)
			}
		}
		if t.Table == nil {
			names, _, _ = b.names(r)
		}
		if len(args) < 2 {
			return "", &compose.Fault{Code: "no-term", Message: "the name of a term is missing", Hint: "known are " + strings.Join(names, ", ")}
		}
		if !contains(names, args[1]) {
			return "", unknown("term", args[1], names)
		}
		return args[1], nil
	}
	// Tables of the trial, and tables of one response.
	ofTrial := map[string]func() doc.Table{
		"identity":      func() doc.Table { return table.Identity(t, rs.Trial.Status, b.fingerprint) },
		"skeleton":      func() doc.Table { return table.Skeleton(t.Plan) },
		"checks":        func() doc.Table { return table.Checks(rs) },
		"sizes":         func() doc.Table { return table.Sizes(t.Plan, rs.SampleSize) },
		"size spread":   func() doc.Table { return table.SizeSpread(t.Plan, rs.SampleSize) },
		"size groups":   func() doc.Table { return table.SizeGroups(t.Plan, rs.SampleSize) },
		"size terms":    func() doc.Table { return table.SizeTerms(t.Plan, rs.SampleSize) },
		"animals":       func() doc.Table { return table.Animals(t.Protocol) },
		"site":          func() doc.Table { return table.Site(t.Protocol) },
		"housing":       func() doc.Table { return table.Housing(t.Protocol) },
		"eligibility":   func() doc.Table { return table.Eligibility(t.Protocol) },
		"levels":        func() doc.Table { return table.Levels(t.Plan) },
		"items":         func() doc.Table { return table.Items(t.Protocol) },
		"inputs":        func() doc.Table { return table.Inputs(t.Protocol) },
		"draws":         func() doc.Table { return table.Draws(t.Allotment) },
		"baseline":      func() doc.Table { return table.Baseline(t) },
		"disagreements": func() doc.Table { return table.Disagreements(t) },
		"allotment":     func() doc.Table { return table.Allotment(t, maxPrinted) },
		"events":        func() doc.Table { return table.Events(t.Protocol) },
		"exclusions":    func() doc.Table { return table.Exclusions(t) },
		"deviations":    func() doc.Table { return table.Deviations(t.Protocol) },
		"corrections":   func() doc.Table { return table.Corrections(t.Protocol) },
		"confirmed":     func() doc.Table { return table.Confirmed(t.Protocol) },
		"amendments":    func() doc.Table { return table.Amendments(t.Protocol) },
		"seals":         func() doc.Table { return table.Seals(t) },
		"revisions":     func() doc.Table { return table.Revisions(t) },
		"data":          func() doc.Table { return table.Data(t) },
		"planned":       func() doc.Table { return table.Planned(t.Protocol) },
		"analysis plan": func() doc.Table { return table.AnalysisPlan(t.Protocol) },
		"welfare":       func() doc.Table { return table.Welfare(t.Protocol) },
		"procedures":    func() doc.Table { return table.Procedures(t.Protocol) },
		"losses":        func() doc.Table { return table.Losses(t) },
		"cautions":      func() doc.Table { return table.Cautions(t.Welfare) },
		"limits":        func() doc.Table { return table.Limits(t.Welfare) },
		"rules":         func() doc.Table { return table.Rules(t.Welfare) },
		"look-ups":      func() doc.Table { return table.LookUps(t.Protocol) },
		"documents":     func() doc.Table { return table.Documents(t.Welfare) },
		"claims":        b.claimsTable,
		"files":         func() doc.Table { return table.Files(rs) },
		"signatures":    func() doc.Table { return table.Signatures(t.Protocol) },
	}
	ofResponse := map[string]func(r *result.Response) doc.Table{
		"anova":               func(r *result.Response) doc.Table { return table.Anova(t.Plan, r) },
		"summary":             func(r *result.Response) doc.Table { return table.Summary(t.Plan, r, b.decimals(r.Name)) },
		"covariates":          func(r *result.Response) doc.Table { return table.Covariates(t.Plan, r) },
		"components":          func(r *result.Response) doc.Table { return table.Components(t.Plan, r) },
		"correlations":        func(r *result.Response) doc.Table { return table.Correlations(t.Plan, r) },
		"correlation":         func(r *result.Response) doc.Table { return table.Correlation(t.Plan, r) },
		"contrasts":           func(r *result.Response) doc.Table { return table.Contrasts(t.Plan, r, true) },
		"unplanned contrasts": func(r *result.Response) doc.Table { return table.Contrasts(t.Plan, r, false) },
		"efficiency":          func(r *result.Response) doc.Table { return table.Efficiency(r) },
		"diagnostics":         func(r *result.Response) doc.Table { return table.Diagnostics(r) },
		"residuals":           func(r *result.Response) doc.Table { return table.Residuals(t.Plan, r, maxPrinted) },
	}
	ofTerm := map[string]func(r *result.Response, term string) doc.Table{
		"means":       func(r *result.Response, term string) doc.Table { return table.Means(t.Plan, r, term) },
		"comparisons": func(r *result.Response, term string) doc.Table { return table.Comparisons(t.Plan, r, term) },
	}
	figures := map[string]func(name string) []doc.Block{
		"points": p.points, "residual map": p.residualMap, "residuals": p.residualPoints, "quantiles": p.quantiles, "fitted": p.fitted, "spread": p.spread,
	}
	paragraphsOf := map[string]func() []string{
		"treatments":       func() []string { return prose.Treatments(t.Plan) },
		"units":            func() []string { return prose.Units(t.Plan) },
		"design":           func() []string { return prose.Design(t.Plan) },
		"planned analysis": func() []string { return prose.PlannedAnalysis(t) },
		"errors":           func() []string { return prose.ErrorTerms(t.Plan) },
		"size":             func() []string { return prose.Size(t.Plan) },
		"size found":       func() []string { return prose.SizeFound(t.Plan, rs.SampleSize) },
		"draw":             func() []string { return b.draw() },
		"blinding":         func() []string { return prose.Blinding(t.Protocol.Blinding) },
		"agreement":        func() []string { return prose.Agreement(t) },
		"repeat":           func() []string { return prose.Repeat(t.Allotment) },
		"conduct":          func() []string { return prose.Conduct(t) },
		"later":            func() []string { return prose.Later(t.Protocol) },
		"welfare":          func() []string { return prose.Welfare(t.Protocol) },
		"compared":         func() []string { return prose.Compared(t.Welfare) },
		"look-ups":         func() []string { return prose.LookUps(t.Protocol) },
		"claims":           func() []string { return prose.Claims(b.claims) },
		"provenance":       func() []string { return prose.Provenance(rs, b.options.Go, b.options.Arch) },
		"seal":             func() []string { return prose.Seal(t) },
		"limits":           prose.Limits,
	}
	chapter, ofChapter := b.chapterParagraphs(), b.chapterTables()
	b.kinds = map[string][]string{
		"table":     keys(ofTrial, keys(ofResponse, keys(ofTerm, keys(ofChapter, nil)))),
		"figure":    keys(figures, []string{"map", "flow", "means", "differences", "effects", "power"}),
		"paragraph": keys(paragraphsOf, keys(chapter, nil)),
		"list":      {"hypotheses", "endpoints", "size notes"},
	}
	out := template.FuncMap{
		"contents": func() []doc.Block { return []doc.Block{doc.Contents{}} },
		"coverage": func(of string) ([]doc.Block, error) {
			if of != "report" && of != "plan" {
				return nil, unknown("coverage", of, []string{"plan", "report"})
			}
			return b.coverage(of == "plan"), nil
		},
		"answers": func() []doc.Block { return b.answers() },
		"short": func() []doc.Block {
			return []doc.Block{doc.Aside{Kind: "answer", Title: inlines("The plan in short"), Blocks: bullets(prose.Short(t))}}
		},
		"table": func(name string, args ...string) ([]doc.Block, error) {
			var made doc.Table
			switch {
			case ofChapter[name] != nil:
				return ofChapter[name](), nil
			case ofTrial[name] != nil:
				made = ofTrial[name]()
			case ofResponse[name] != nil:
				r, err := response(args)
				if err != nil {
					return nil, err
				}
				if t.Table == nil {
					return nil, nil
				}
				made = ofResponse[name](r)
			case ofTerm[name] != nil:
				r, err := response(args)
				if err != nil {
					return nil, err
				}
				x, err := term(r, args)
				if err != nil {
					return nil, err
				}
				if t.Table == nil {
					return nil, nil
				}
				made = ofTerm[name](r, x)
			default:
				return nil, unknown("table", name, b.kinds["table"])
			}
			if len(made.Rows) == 0 {
				return nil, nil
			}
			return []doc.Block{made}, nil
		},
		"figure": func(name string, args ...string) ([]doc.Block, error) {
			switch {
			case name == "map":
				return p.layoutMap(), nil
			case name == "flow":
				return p.flow(), nil
			case name == "power":
				return p.power(), nil
			case name == "effects":
				r, err := response(args)
				if err != nil {
					return nil, err
				}
				if t.Table == nil {
					return nil, nil
				}
				return b.chapterFigures(r.Name), nil
			case name == "means" || name == "differences":
				r, err := response(args)
				if err != nil {
					return nil, err
				}
				x, err := term(r, args)
				if err != nil {
					return nil, err
				}
				if t.Table == nil {
					return nil, nil
				}
				if name == "differences" {
					return p.differences(r.Name, x), nil
				}
				return p.means(r.Name, x), nil
			case figures[name] != nil:
				r, err := response(args)
				if err != nil {
					return nil, err
				}
				if t.Table == nil {
					return nil, nil
				}
				return figures[name](r.Name), nil
			}
			return nil, unknown("figure", name, b.kinds["figure"])
		},
		"paragraph": func(name string) ([]doc.Block, error) {
			if f := chapter[name]; f != nil {
				return f(), nil
			}
			f := paragraphsOf[name]
			if f == nil {
				return nil, unknown("paragraph", name, b.kinds["paragraph"])
			}
			return paragraphs(f()), nil
		},
		"list": func(name string) ([]doc.Block, error) {
			switch name {
			case "hypotheses":
				return bullets(t.Protocol.Trial.Hypotheses), nil
			case "size notes":
				return bullets(prose.SizeNotes(rs.SampleSize)), nil
			case "endpoints":
				if t.Protocol.Welfare != nil {
					return bullets(t.Protocol.Welfare.HumaneEndpoints), nil
				}
				return nil, nil
			}
			return nil, unknown("list", name, b.kinds["list"])
		},
		"methods": func(name string) ([]doc.Inline, error) {
			r, err := response([]string{name})
			if err != nil {
				return nil, err
			}
			if t.Table == nil {
				return inlines(prose.NotYet), nil
			}
			return inlines(prose.Methods(t, r)), nil
		},
		"result": func(name string) ([]doc.Block, error) {
			r, err := response([]string{name})
			if err != nil {
				return nil, err
			}
			if t.Table == nil {
				return nil, nil
			}
			return passages(prose.ChapterResult(t, r)), nil
		},
		"results": func(name string) ([]doc.Inline, error) {
			r, err := response([]string{name})
			if err != nil {
				return nil, err
			}
			if t.Table == nil {
				return inlines(prose.NotYet), nil
			}
			return inlines(prose.Results(t, r)), nil
		},
		"notes": func(name string) ([]doc.Block, error) {
			r, err := response([]string{name})
			if err != nil {
				return nil, err
			}
			if t.Table == nil {
				return nil, nil
			}
			return bullets(prose.OwnNotes(r)), nil
		},
		"caution": func() []doc.Block {
			return []doc.Block{doc.Aside{Kind: "caution", Title: []doc.Inline{doc.Text{Text: "Caution"}}, Blocks: paragraphs([]string{prose.Caution(t.Protocol)})}}
		},
		"extras": func() []doc.Block { return b.extras() },
		"references": func() []doc.Block {
			refs := prose.References(rs)
			if len(refs) == 0 {
				return nil
			}
			return append([]doc.Block{doc.Heading{Level: 2, Text: []doc.Inline{doc.Text{Text: "References of the methods used"}}}}, bullets(refs)...)
		},
		"sources": func() []doc.Block { return b.sourceList() },
	}
	maps.Copy(out, b.values())
	b.remember(out)
	b.words = out
	return out
}

// keys lists the names of a map in order, for messages, after those given.
func keys[T any](m map[string]T, more []string) []string {
	out := append([]string(nil), more...)
	for k := range m {
		out = append(out, k)
	}
	sort.Strings(out)
	return out
}

func bullets(items []string) []doc.Block {
	if len(items) == 0 {
		return nil
	}
	l := doc.List{Tight: true}
	for _, s := range items {
		l.Items = append(l.Items, []doc.Block{paragraph(s)})
	}
	return []doc.Block{l}
}

// decimals of a response as its protocol asks; -1: not said.
func (b *builder) decimals(name string) int {
	if r := b.trial.Protocol.Response(name); r != nil && r.Decimals != nil {
		return *r.Decimals
	}
	return -1
}

// answers is the box with one sentence for each primary response.
func (b *builder) answers() []doc.Block {
	box := doc.Aside{Kind: "answer", Title: []doc.Inline{doc.Text{Text: "Answer"}}}
	if b.trial.Table == nil {
		box.Blocks = paragraphs([]string{"There are no data yet; this report shows the plan."})
		return []doc.Block{box}
	}
	for i := range b.rs.Responses {
		r := &b.rs.Responses[i]
		if r.Role == "primary" {
			s := prose.Answer(b.trial.Plan, r)
			if !prose.Planned(r) {
				s = "Not planned before the data: " + s
			}
			box.Blocks = append(box.Blocks, paragraph(s))
		}
	}
	if len(box.Blocks) == 0 {
		box.Blocks = paragraphs([]string{"The protocol names no primary response."})
	}
	return []doc.Block{box}
}

// draw tells how the treatments were drawn, or will be.
func (b *builder) draw() []string {
	if b.trial.Allotment == nil {
		return prose.Scheme(b.trial)
	}
	return prose.Draw(b.trial.Plan, b.trial.Allotment)
}

// extras are the tables that the author brings.
func (b *builder) extras() []doc.Block {
	var out []doc.Block
	for i, x := range b.trial.Protocol.Tables {
		for _, f := range b.trial.Files {
			if f.Path != x.File {
				continue
			}
			tab, list := table.FromFile(fmt.Sprintf("extra-%d", i+1), x.Caption, f.Path, f.Data)
			b.list = append(b.list, list...)
			if len(tab.Rows) == 0 {
				continue
			}
			out = append(out, tab)
		}
	}
	return out
}
